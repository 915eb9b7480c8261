"""The processes that a new catalog starts with, from tables/*.csv.

processes.csv has one line a process; a process that goes by nominal dimension names a table and a column of it. The
tables of ISO 13920 and ISO 2768-1 give ± mm; that of ISO 286-1 gives the whole width in µm, of which half is taken as ±
about the drawing's dimension, whatever the letter of a fit. A blank cell means that the class has no value there.
"""

import csv
from functools import cache
from pathlib import Path

from catalog.process_book import Process, Range

TABLES = Path(__file__).parent / "tables"
PARTS_OF_A_MM = {"iso-13920": 1.0, "iso-2768-1": 1.0, "iso-286-1": 2000.0}
FORMS = ("plus_minus", "diameter", "length", "tilt_deg")
MADE_BY = "holdtight"


def initial_processes() -> tuple[Process, ...]:
    """Version 1 of every initial process; created is None until a catalog holds it."""
    return tuple(_process(row) for row in _rows("processes"))


def _process(row: dict[str, str]) -> Process:
    zone = {form: float(row[form]) for form in FORMS if row[form]}
    return Process(
        name=row["name"],
        version=1,
        zone=zone or None,
        ranges=_ranges(row["table"], row["column"]) if row["table"] else (),
        distribution=row["distribution"],
        cp=float(row["cp"]),
        truncated=row["truncated"] == "true",
        jig_cost=float(row["jig_cost"]),
        piece_cost=float(row["piece_cost"]),
        looser=row["looser"] or None,
        source=row["source"],
        remark=row["remark"],
        created=None,
        by=MADE_BY,
    )


def _ranges(table: str, column: str) -> tuple[Range, ...]:
    lines = _rows(table)
    return tuple(
        Range(
            from_mm=float(line["from_mm"]),
            from_included=line is lines[0],
            up_to_mm=float(line["up_to_mm"]),
            zone={"plus_minus": float(line[column]) / PARTS_OF_A_MM[table]},
        )
        for line in lines
        if line[column]
    )


@cache
def _rows(name: str) -> list[dict[str, str]]:
    with (TABLES / f"{name}.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))
