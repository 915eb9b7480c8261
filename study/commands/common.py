"""What the commands share: options, printing, and finding a geometry."""

import json
import re
import sys
from pathlib import Path
from typing import Annotated

import typer

from catalog.errors import InputError

CatalogOption = Annotated[
    str | None,
    typer.Option(
        "--catalog", help="The catalog file; else HOLDTIGHT_CATALOG, else holdtight.duckdb here.", show_default=False
    ),
]
JsonOption = Annotated[bool, typer.Option("--json", help="Print JSON instead of a table.")]

UNBROKEN = ("measure", "source", "geometry", "study", "point")  # columns whose words are not broken
WORKER_WAIT_S = 120.0  # a worker has work to lose, so it waits longer for its turn at the catalog than a question does
MOST_TRAVEL = 1000.0  # mm or degrees; no suspension goes further
WIDTH_UNSEEN = 120  # columns where the output goes to a file or a pipe
_CONTROL = re.compile(r"[\x00-\x08\x0b-\x1f\x7f-\x9f]")


def print_json(value) -> None:
    """Plain JSON on one go; what is undefined is null."""
    print(json.dumps(value, ensure_ascii=True, allow_nan=False, indent=1))


def as_data() -> None:
    """What follows is data: UTF-8 and line ends as they are where it goes to a file or a pipe."""
    if hasattr(sys.stdout, "reconfigure") and not sys.stdout.isatty():
        sys.stdout.reconfigure(encoding="utf-8", newline="\n")


def clean(text) -> str:
    """A user-given text without control characters, so that a name cannot steer the terminal."""
    return _CONTROL.sub("�", str(text))


def number(value, digits=4) -> str:
    """A number for a table: `digits` significant figures, a dash for what is undefined."""
    if value is None:
        return "–"
    if abs(value) < 1e-12:
        return "0"
    if 1e-4 <= abs(value) < 1e7:
        decimals = max(0, digits - 1 - _exponent(value))
        return f"{value:.{min(decimals, 8)}f}"
    return f"{value:.{digits - 1}e}"


def _exponent(value) -> int:
    return (
        len(str(int(abs(value)))) - 1
        if abs(value) >= 1
        else -len(re.match(r"0\.(0*)", f"{abs(value):.12f}").group(1)) - 1
    )


def print_table(title, columns, rows, *, caption=None) -> None:
    """A table for people. columns: (heading, "left" | "right"); rows: lists of text."""
    from rich import box
    from rich.console import Console
    from rich.table import Table
    from rich.text import Text

    table = Table(
        title=Text(clean(title)), title_justify="left", box=box.SIMPLE_HEAD, pad_edge=False, title_style="bold"
    )
    for heading, justify in columns:
        table.add_column(
            heading, justify=justify, overflow="fold", no_wrap=heading in UNBROKEN or justify == "right"
        )
    for row in rows:
        table.add_row(*(cell if isinstance(cell, Text) else Text(clean(cell)) for cell in row))
    console = Console() if sys.stdout.isatty() else Console(width=WIDTH_UNSEEN)
    console.print(table)
    if caption:
        console.print(Text(clean(caption)), style="dim")


def geometry_named(name: str, catalog: str | None):
    """(geometry, "name@rev" or the file's geometry name) of a file path or NAME[@REV] in the catalog."""
    if name.endswith(".toml") or Path(name).is_file():
        from catalog.geometry_file import read_geometry

        geometry = read_geometry(Path(name))
        return geometry, geometry.name
    from catalog import revisions
    from catalog.store import Catalog

    with Catalog(catalog).read() as con:
        found = revisions.find(con, name)
        return revisions.load(con, found), found.spec


class OptionError(InputError):
    """An option whose value cannot be used."""


def finite(options: dict[str, float]) -> None:
    """Refuse options that are no numbers of a size that a suspension knows. Raises OptionError."""
    for name, value in options.items():
        if not abs(value) <= MOST_TRAVEL:
            raise OptionError(f"{name} {value:g}: must be a number within ±{MOST_TRAVEL:g}")


def print_odd(found: dict, geometry) -> None:
    """Lines on the error stream about what is far from common practice; the command goes on."""
    from study.sanity import odd_values

    for line in odd_values(found, geometry):
        print(f"holdtight: {clean(geometry.name)}: {clean(line)}", file=sys.stderr)


def by_whom(given: str | None) -> str:
    """The name kept with what a command adds: the one given, else the login name."""
    import getpass

    if given:
        return given
    try:
        return getpass.getuser()
    except (KeyError, OSError, ImportError):
        return "unknown"


def default_threads() -> int:
    import os

    return max(1, min(os.cpu_count() or 1, 16))
