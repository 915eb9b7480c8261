"""The command line: one thin file per command. Nothing heavy is imported before a command runs."""

import contextlib
import errno
import os
import sys
from importlib import import_module

import typer

from catalog.errors import HoldtightError

COMMANDS = (
    "run", "evaluate", "sweep", "measures", "add", "geometries", "show", "queue", "work", "studies", "cancel",
    "critical", "compare", "allocate", "sheet", "release", "releases", "schema", "processes", "sql", "export", "as-built",
    "backup", "check",
)  # fmt: skip

app = typer.Typer(
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    help="How closely each suspension pivot has to be made: builds a geometry thousands of times within tolerance, "
    "aligns every build, ranks the pivots. Rigid geometry only: no strength, no compliance, no fatigue.",
)
for _name in COMMANDS:
    app.command(_name)(import_module(f"study.commands.{_name.replace('-', '_')}_command").run)


def main() -> None:
    """Entry point: exit code 0, 1 (the work failed) or 2 (wrong input); errors are a line or two, never a traceback."""
    _prepare()
    try:
        try:
            app(standalone_mode=True, windows_expand_args=False)  # else *, ~ and %NAME% of a query would be expanded there
        finally:
            sys.stdout.flush()  # what goes wrong with it is told here, not when the interpreter ends
    except HoldtightError as error:
        print(f"holdtight: {_inert(error)}", file=sys.stderr)
        sys.exit(error.exit_code)
    except KeyboardInterrupt:
        print("holdtight: stopped", file=sys.stderr)
        sys.exit(1)
    except MemoryError:
        print("holdtight: out of memory; ask for fewer builds or close other programs", file=sys.stderr)
        sys.exit(1)
    except Exception as error:  # a fault of the program itself: one line, and the traceback where one can be sent from
        if isinstance(error, OSError) and error.filename is None and error.errno in _OUTPUT:
            if _OUTPUT[error.errno]:
                print(f"holdtight: the output cannot be written: {error.strerror}; make room", file=sys.stderr)
            _drop_output()
            sys.exit(1)
        print(f"holdtight: {_kept_traceback(error)}", file=sys.stderr)
        sys.exit(1)


_OUTPUT = {errno.EPIPE: False, errno.EINVAL: False, errno.ENOSPC: True, errno.EFBIG: True, errno.EIO: True}
# EINVAL is what Windows says of a pipe that nobody reads


def _prepare() -> None:
    """Streams that take every text, also where there is no console; a home for libraries that ask where it is."""
    from study.commands.plain_signs import register

    for name in ("stdout", "stderr"):
        if getattr(sys, name) is None:
            setattr(sys, name, open(os.devnull, "w", encoding="utf-8", newline="\n"))  # noqa: SIM115
        if hasattr(getattr(sys, name), "reconfigure"):
            getattr(sys, name).reconfigure(errors=register())
    if os.path.expanduser("~") == "~":
        os.environ["USERPROFILE" if os.name == "nt" else "HOME"] = os.devnull


def _drop_output() -> None:
    """What is still to be written goes nowhere, lest the interpreter complain at its end."""
    with contextlib.suppress(OSError, ValueError):
        nowhere = os.open(os.devnull, os.O_WRONLY)
        os.dup2(nowhere, sys.stdout.fileno())


def _inert(error: Exception) -> str:
    """An error's lines without control characters that something given by a user may hold."""
    from study.commands.common import clean

    return "\n".join(clean(line) for line in str(error).split("\n"))


def _kept_traceback(error: Exception) -> str:
    import tempfile
    import traceback

    with tempfile.NamedTemporaryFile(
        "w", prefix="holdtight-fault-", suffix=".txt", delete=False, encoding="utf-8"
    ) as file:
        file.writelines(traceback.format_exception(error))
    return f"this is a fault of the program ({type(error).__name__}: {error}); its details are in {file.name}"
