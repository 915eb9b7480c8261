"""A table of points as CAD or a spreadsheet writes it: name, x, y, z, one point a line.

Separated by commas, semicolons or tabs; a decimal comma is taken beside semicolons and tabs. Lines that start with #
and empty lines are comments. A header line may give the columns in another order, or more of them.
"""

import csv
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass

from catalog.toml_text import refuse, shown

SEPARATORS = {";": "semicolon", "\t": "tab", ",": "comma"}
COLUMNS = ("name", "x", "y", "z")
_TITLE = re.compile(r"(name|point|x|y|z)\s*(?:[\[(_\s]\s*(mm|m|in)\s*[\])]?)?", re.IGNORECASE)
_NUMBER = re.compile(r"[+-]?(?:[0-9]+[.,]?[0-9]*|[.,][0-9]+)(?:[eE][+-]?[0-9]{1,4})?")
_MOST_NAME, _MOST_LINE = 200, 10_000


@dataclass(frozen=True, slots=True)
class Row:
    """One line of the table, its cells as they stand there; line counts from 1."""

    name: str
    line: int
    cells: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class PointsTable:
    """All rows, at which cell each of name, x, y, z stands, and how many columns a row may have."""

    rows: tuple[Row, ...]
    place: Mapping[str, int]
    width: int
    separator: str
    source: str

    def positions(self, rows: list[Row]) -> list[list[float]]:
        """[x, y, z] of the given rows in the file's axes and units; refuses what is no number."""
        said = [(row, column, self._cell(row, column)) for row in rows for column in "xyz"]
        for row, column, cell in said:
            if not _NUMBER.fullmatch(cell):
                told = "is not a number" if cell else "is empty"
                refuse(self.source, self._where(row, column, cell), told, "write it like 12.5, no marks for thousands.")
        self._check_marks(said)
        values = [self._number(*each) for each in said]
        return [values[i : i + 3] for i in range(0, len(values), 3)]

    def _where(self, row: Row, column: str, cell: str) -> str:
        return f"line {row.line}, column {self.place[column] + 1} ({column}), {shown(cell)}"

    def _cell(self, row: Row, column: str) -> str:
        filled = _filled(row.cells)
        if filled > self.width or len(row.cells) <= max(self.place.values()):
            told = f"has {filled} columns separated by {SEPARATORS[self.separator]} where {self.width} are taken"
            hint = "a decimal comma needs semicolons or tabs between the columns." if filled > self.width else "complete it."
            refuse(self.source, f"line {row.line}, {shown(row.name)}", told, hint)
        return row.cells[self.place[column]].replace("\u2212", "-")

    def _check_marks(self, said: list[tuple[Row, str, str]]) -> None:
        """Point and comma in one file could be thousands as well as decimals: only one of them is taken."""
        first: dict[str, str] = {}
        for row, column, cell in said:
            for mark in set(cell) & set(".,"):
                first.setdefault(mark, self._where(row, column, cell))
        if "," in first and self.separator == ",":
            refuse(self.source, first[","], "has a decimal comma", "separate the columns by semicolons or tabs.")
        if len(first) == 2:
            told = f"has a decimal comma, but {first['.']} a decimal point"
            refuse(self.source, first[","], told, "write all numbers alike, without marks for thousands.")

    def _number(self, row: Row, column: str, cell: str) -> float:
        value = float(cell.replace(",", "."))
        if not math.isfinite(value):
            refuse(self.source, self._where(row, column, cell), "is not a finite number", "correct it.")
        return value


def parse_points(text: str, *, source: str, units: str) -> PointsTable:
    """The table of a text. source: names the file in errors; units: those that a header may repeat."""
    lines = [(number, line) for number, line in enumerate(re.split(r"\r\n|\n|\r", text), start=1) if _counts(line)]
    separator = _separator([line for _, line in lines])
    split = [(number, _cells(line, separator, number, source)) for number, line in lines]
    split = [(number, cells) for number, cells in split if any(cells)]
    if not any(len(cells) >= len(COLUMNS) for _, cells in split):
        told = f"holds no line with name, x, y, z ({len(split)} lines with fewer columns)"
        refuse(source, "the file", told, "separate the columns by commas, semicolons or tabs.")
    header, place, width = _header(split, source, units)
    rows = tuple(
        Row(_name(cells, place, number), number, cells) for number, cells in split if number != header
    )
    for row in rows:
        if len(row.name) > _MOST_NAME:
            refuse(source, f"line {row.line}, name {shown(row.name)}", f"has over {_MOST_NAME} letters", "shorten it.")
    return PointsTable(rows, place, width, separator, source)


def _name(cells: tuple[str, ...], place: Mapping[str, int], number: int) -> str:
    said = cells[place["name"]] if place["name"] < len(cells) else ""
    return said or f"(line {number})"


def _counts(line: str) -> bool:
    return bool(line.strip()) and not line.lstrip().startswith("#")


def _separator(lines: list[str]) -> str:
    """The separator that gives most lines their four columns."""
    return max(SEPARATORS, key=lambda mark: sum(line.count(mark) >= len(COLUMNS) - 1 for line in lines))


def _cells(line: str, separator: str, number: int, source: str) -> tuple[str, ...]:
    if len(line) > _MOST_LINE:
        refuse(source, f"line {number}, {shown(line)}", f"has over {_MOST_LINE} letters", "give one point a line.")
    if line.count('"') % 2 and re.search(rf'(?:^|{separator})\s*"', line):
        refuse(source, f"line {number}, {shown(line)}", "has quotes that do not close", "correct the quotes.")
    return tuple(cell.strip() for cell in next(csv.reader([line], delimiter=separator, skipinitialspace=True)))


def _filled(cells: tuple[str, ...]) -> int:
    """Columns up to the last that is not empty: spreadsheets leave separators at the end."""
    return max((i + 1 for i, cell in enumerate(cells) if cell), default=0)


def _header(split: list, source: str, units: str) -> tuple[int | None, dict[str, int], int]:
    """(its line, place of each column, columns) where the first line of four columns is a header, else the plain order."""
    number, cells = next((number, cells) for number, cells in split if len(cells) >= len(COLUMNS))
    titles = [_TITLE.fullmatch(cell) for cell in cells]
    keys = [found.group(1).lower().replace("point", "name") if found else "" for found in titles]
    where = f"line {number}, {shown(', '.join(cells))}"
    if not all(column in keys for column in "xyz"):
        if all(cell and not re.search("[0-9]", cell) for cell in cells[1:4]):
            told = "looks like a header, but not of name, x, y, z"
            refuse(source, where, told, "name its columns so, or start the line with #.")
        return None, {column: i for i, column in enumerate(COLUMNS)}, len(COLUMNS)
    for column in COLUMNS:
        if keys.count(column) > 1:
            refuse(source, where, f"has the column {column!r} twice", "take one out.")
    for found in titles:
        if found and found.group(2) and found.group(2).lower() != units:
            told = f"gives {found.group(2)}, but the geometry file says units = {units!r}"
            refuse(source, where, told, "make them agree: both are read in the same units.")
    if "name" not in keys:
        keys[next(i for i, key in enumerate(keys) if not key)] = "name"
    return number, {column: keys.index(column) for column in COLUMNS}, max(_filled(cells), len(COLUMNS))
