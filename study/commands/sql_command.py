"""`sql`: a question of your own to the catalog, which cannot change anything."""

import os
import signal
import sys
import threading
import time
from typing import Annotated

import typer

from catalog.errors import InputError, WorkError
from study.commands.common import WIDTH_UNSEEN, CatalogOption, JsonOption, as_data, clean, print_json, print_table
from study.commands.tabular import json_value, unique, write_csv


class SqlError(InputError):
    """A query that the catalog refuses or that asks for more than reading."""


class Stopped(WorkError):
    """The user ended a query."""


PATIENCE_S = 3.0
READING = ("SELECT", "EXPLAIN")
AT_ONCE = 10_000


def run(
    query: Annotated[
        str | None, typer.Argument(help="One query; without it, the public views are listed.", show_default=False)
    ] = None,
    as_csv: Annotated[bool, typer.Option("--csv", help="Print CSV instead of a table.")] = False,
    most: Annotated[int, typer.Option(help="Rows shown in a table; --csv and --json print all.", min=1)] = 200,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Ask the catalog in SQL: read-only, no other files, no network, no settings. Ctrl-C ends a long query."""
    from catalog.store import Catalog

    if as_csv and as_json:
        raise SqlError("sql: --csv and --json do not go together; choose one")
    with Catalog(catalog).read(locked_down=True) as con:
        names, rows = _answered(con, _VIEWS if query is None else query, None if as_csv or as_json else most + 1)
    names = unique(names)
    if as_json:
        print_json([dict(zip(names, map(json_value, row), strict=True)) for row in rows])
    elif as_csv:
        as_data()
        write_csv(sys.stdout, names, rows)
    else:
        _print(names, rows, most)


_VIEWS = """
    SELECT view_name AS view, comment AS "what it holds" FROM duckdb_views()
    WHERE NOT internal AND schema_name = 'main' ORDER BY view_name
"""


def _answered(con, query, most):
    """(column names, rows) of one query, at most `most` rows; a keyboard interrupt stops it."""
    import duckdb

    try:
        _check_reading(con, query)
        return interruptible(con, lambda: _fetched(con, query, most))
    except (duckdb.Error, RuntimeError, ValueError, OverflowError) as problem:
        raise SqlError(f"sql: {_line(problem)}") from None


def _check_reading(con, query):
    statements = con.extract_statements(query)
    if len(statements) != 1:
        raise SqlError(f"sql: {len(statements) or 'no'} queries are given; ask one at a time")
    kind = statements[0].type.name
    if kind not in READING:
        raise SqlError(
            f"sql: {kind} is refused, the catalog is only read here; ask with SELECT, FROM, WITH, DESCRIBE, SHOW or EXPLAIN"
        )


def _fetched(con, query, most):
    found = con.execute(query)
    names = [column[0] for column in found.description or ()]
    rows = []
    while most is None or len(rows) < most:
        some = found.fetchmany(AT_ONCE if most is None else min(AT_ONCE, most - len(rows)))
        if not some:
            break
        rows += some
    return names, rows


def interruptible(con, ask):
    """What `ask` gives, run on a thread of its own, so that a keyboard interrupt reaches the query at once."""
    outcome, done = [], threading.Event()

    def work():
        try:
            outcome.append((ask(), None))
        except BaseException as problem:
            outcome.append((None, problem))
        finally:
            done.set()

    before = signal.signal(signal.SIGINT, signal.default_int_handler)  # a job in the background starts with it ignored
    threading.Thread(target=work, name="query", daemon=True).start()
    try:
        while not done.wait(0.05):  # not Thread.join: an interrupt inside it makes a thread look ended
            pass
    except KeyboardInterrupt:
        late = time.monotonic() + PATIENCE_S
        while not done.is_set():  # an interrupt that comes between two steps of the query is lost: again
            con.interrupt()
            done.wait(0.05)
            if time.monotonic() > late:  # some steps take none; the file is only read here, so the process may just end
                print("holdtight: sql: the query was stopped", file=sys.stderr, flush=True)
                os._exit(1)
        raise Stopped("sql: the query was stopped") from None
    finally:
        signal.signal(signal.SIGINT, before)
    found, problem = outcome[0]
    if problem is not None:
        raise problem
    return found


def _line(problem):
    """The first paragraph of a message of the database, in one line."""
    text = str(problem).split("\n\nLINE ")[0].split("\nLINE ")[0]
    return clean(" ".join(text.split())) or type(problem).__name__


def _print(names, rows, most):
    shown = [[_shown(value) for value in row] for row in rows[:most]]
    widths = [max(len(name), *(len(row[i]) for row in shown), 0) + 2 for i, name in enumerate(names)]
    if shown and sum(widths) > _room():
        _print_records(names, shown)
    else:
        numeric = [bool(rows) and all(_is_number(row[i]) for row in rows[:most]) for i in range(len(names))]
        columns = [(clean(name), "right" if is_number else "left") for name, is_number in zip(names, numeric, strict=True)]
        print_table("", columns, shown)
    if len(rows) > most:
        print(f"only the first {most} rows are shown; --most N shows more, --csv and --json print all")
    else:
        print(f"{len(rows)} row{'' if len(rows) == 1 else 's'}")


def _room():
    import shutil

    return shutil.get_terminal_size().columns if sys.stdout.isatty() else WIDTH_UNSEEN


def _print_records(names, shown):
    """A row a paragraph, where a table would be wider than the terminal."""
    wide = max(len(name) for name in names)
    for row in shown:
        for name, text in zip(names, row, strict=True):
            print(f"{clean(name):{wide}}  {clean(text)}")
        print()


def _is_number(value):
    return value is None or (isinstance(value, int | float) and not isinstance(value, bool))


def _shown(value):
    if value is None or (isinstance(value, float) and value != value):
        return "–"
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:.6g}"
    return str(json_value(value))
