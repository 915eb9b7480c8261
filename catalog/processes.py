"""Processes in the catalog: named ways of making a feature, with zone, cost and the next looser one.

A row never changes. Another zone or cost is a new version of the name, which retires the one before; studies keep what
their processes stood for when they were queued.
"""

import json
import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from catalog.process_book import Book, Process, ProcessError, ProcessNotFound, Range
from catalog.process_tables import initial_processes
from catalog.rows import fetch_rows, insert_rows, now

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

__all__ = ["Book", "Process", "ProcessError", "ProcessNotFound", "Range", "initial"]
_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,59}")
_FORMS = ("plus_minus", "diameter", "length", "tilt_deg")
_KEYS = {*_FORMS, "axis", "depth"}
_SAME = ("zone", "ranges", "distribution", "cp", "truncated", "jig_cost", "piece_cost", "looser", "source", "remark")
_MOST_TEXT = 2000


def initial() -> Book:
    """The processes that a new catalog starts with."""
    return Book(initial_processes())


def load_initial(con: "DuckDBPyConnection") -> None:
    """Put the initial processes into a catalog that never had any."""
    if con.execute("SELECT count(*) FROM kept.processes").fetchone()[0] == 0:
        moment = now()
        _insert(con, [replace(process, created=moment) for process in initial_processes()])


def resolver(con: "DuckDBPyConnection") -> Book:
    """All processes, to be asked after the catalog is closed: book("NAME@NOMINAL") gives the keys of zone and law."""
    return Book(list_processes(con, retired=True))


def list_processes(con: "DuckDBPyConnection", *, retired: bool = False) -> list[Process]:
    """Processes in force in the order they were made, or all versions."""
    where = "" if retired else "WHERE p.retired IS NULL"
    query = f'SELECT p.* EXCLUDE (by_whom), p.by_whom AS "by" FROM kept.processes p {where} ORDER BY p.id'
    ranges: dict[int, list[Range]] = {}
    for number, *edges, zone in con.execute("FROM kept.process_ranges ORDER BY process_id, from_mm").fetchall():
        ranges.setdefault(number, []).append(Range(*edges, json.loads(zone)))
    return [_process(row, ranges) for row in fetch_rows(con, query)]


def get(con: "DuckDBPyConnection", name: str) -> Process:
    """The process in force of that name (or NAME@NOMINAL). Raises ProcessNotFound, ProcessError."""
    book = resolver(con)
    return book.find(name)[0] if "@" in name else book.get(name)


def looser(con: "DuckDBPyConnection", name: str) -> str | None:
    """Name of the next looser process in force, with the same @NOMINAL; None at the end of the ladder."""
    return resolver(con).looser(name)


def tighter(con: "DuckDBPyConnection", name: str) -> str | None:
    """Name of the next tighter process in force, with the same @NOMINAL; None at the end of the ladder."""
    return resolver(con).tighter(name)


def cost(con: "DuckDBPyConnection", name: str) -> tuple[float, float]:
    """(cost of the jig once, cost of each piece) in the shop's own unit; a @NOMINAL may be left out."""
    process = get(con, name)
    return process.jig_cost, process.piece_cost


def add(
    con: "DuckDBPyConnection",
    *,
    name: str,
    zone: Mapping[str, Any] | None,
    source: str,
    by: str,
    ranges: Sequence[Range] = (),
    distribution: str = "uniform",
    cp: float = 1.0,
    truncated: bool = False,
    jig_cost: float = 0.0,
    piece_cost: float = 0.0,
    looser: str | None = None,
    remark: str = "",
) -> Process:
    """Bring a process into force; gives the row.

    A name that is there gets a new version and its row in force is retired; the same content again is the row that is
    there. zone: keys as in a study file (mm, deg), None with ranges. Raises ProcessError, ProcessNotFound.
    """
    made = Process(
        name=name, version=1, zone=None if zone is None else json.loads(json.dumps(zone)), ranges=tuple(ranges),
        distribution=distribution, cp=float(cp), truncated=truncated, jig_cost=float(jig_cost),
        piece_cost=float(piece_cost), looser=looser, source=source.strip(), remark=remark.strip(), created=now(), by=by,
    )  # fmt: skip
    _check(made)
    versions = [each for each in list_processes(con, retired=True) if each.name == name]
    for each in versions:
        if each.retired is None and all(getattr(each, key) == getattr(made, key) for key in _SAME):
            return each
    resolver(con).check(replace(made, version=len(versions) + 1))
    _retire(con, name, by=by)
    _insert(con, [replace(made, version=len(versions) + 1)])
    return get(con, name)


def retire(con: "DuckDBPyConnection", name: str, *, by: str) -> Process:
    """Take a process out of force; what names it as looser goes on to the one above it. Raises ProcessNotFound."""
    process = resolver(con).get(name)
    _retire(con, name, by=by)
    return next(
        each for each in list_processes(con, retired=True) if (each.name, each.version) == (name, process.version)
    )


def keep(con: "DuckDBPyConnection", study_id: int, resolved: Mapping[str, Mapping[str, Any]]) -> None:
    """Keep with a study what its processes stood for: {asked: {"zone": keys of zone and law, "looser": asked or None}}."""
    if not resolved:
        return
    book, rows = resolver(con), []
    for asked, entry in resolved.items():
        name = asked.partition("@")[0]
        version = book.in_force[name].version if name in book.in_force else None
        row = {"study_id": study_id, "asked": asked, "process": name, "version": version}
        rows.append(row | {"zone": entry["zone"], "looser": entry["looser"]})
    insert_rows(con, "study_processes", rows)


class KeptBook:
    """What the processes of one study stood for when it was queued; asked like a Book."""

    def __init__(self, study_id: int, kept: Mapping[str, tuple[Mapping[str, Any], str | None]]) -> None:
        self.study_id, self._kept = study_id, kept

    def __call__(self, asked: str) -> dict[str, Any]:
        if asked not in self._kept:
            raise ProcessNotFound(
                f'process "{asked}" was not kept with study {self.study_id}; queue the study again from its file'
            )
        return dict(self._kept[asked][0])

    def looser(self, asked: str) -> str | None:
        return self._kept[asked][1] if asked in self._kept else None


def of_study(con: "DuckDBPyConnection", study_id: int) -> KeptBook:
    """The processes that were kept with a study, with those above them."""
    query = "SELECT asked, zone, looser FROM kept.study_processes WHERE study_id = ?"
    found = con.execute(query, [study_id]).fetchall()
    return KeptBook(study_id, {asked: (json.loads(zone), above) for asked, zone, above in found})


def _process(row: dict[str, Any], ranges: Mapping[int, list[Range]]) -> Process:
    number, zone = row.pop("id"), row.pop("zone")
    return Process(**row, zone=json.loads(zone) if zone else None, ranges=tuple(ranges.get(number, ())))


def _retire(con: "DuckDBPyConnection", name: str, *, by: str) -> None:
    query = "UPDATE kept.processes SET retired = ?, retired_by = ? WHERE name = ? AND retired IS NULL"
    con.execute(query, [now(), by, name])


def _insert(con: "DuckDBPyConnection", processes: Sequence[Process]) -> None:
    first = con.execute("SELECT coalesce(max(id), 0) + 1 FROM kept.processes").fetchone()[0]
    plain = ("name", "version", "zone", "looser", "source", "remark", "created", "retired", "retired_by")
    plain += ("distribution", "cp", "truncated", "jig_cost", "piece_cost")
    rows, ranges = [], []
    for number, process in enumerate(processes, start=first):
        rows.append({key: getattr(process, key) for key in plain} | {"id": number, "by_whom": process.by})
        ranges += [
            {"process_id": number, "zone": each.zone}
            | {key: getattr(each, key) for key in ("from_mm", "from_included", "up_to_mm")}
            for each in process.ranges
        ]
    insert_rows(con, "processes", rows)
    insert_rows(con, "process_ranges", ranges)


def _check(process: Process) -> None:
    """What a row must be by itself."""
    where = f'process "{process.name}"'
    if not _NAME.fullmatch(process.name):
        raise ProcessError(f"{where}: a name has letters, digits, dots, - and _, and at most 60 of them")
    if (process.zone is None) != bool(process.ranges):
        raise ProcessError(f"{where}: give a zone, or ranges of nominal dimensions, and not both")
    for zone in [process.zone] if process.zone is not None else [each.zone for each in process.ranges]:
        _check_zone(where, zone)
    for before, after in zip(process.ranges, process.ranges[1:], strict=False):
        if after.from_mm < before.up_to_mm or after.from_included:
            raise ProcessError(f"{where}: ranges must follow each other; one begins at {after.from_mm:g} mm")
    for each in process.ranges:
        if not 0 <= each.from_mm < each.up_to_mm < math.inf:
            raise ProcessError(f"{where}: range {each.from_mm:g} to {each.up_to_mm:g} mm must be from less to more")
    _check_law(where, process)
    for key in ("jig_cost", "piece_cost"):
        value = getattr(process, key)
        if not 0 <= value < math.inf:
            raise ProcessError(f"{where}: {key} = {value:g} must be a finite number, 0 or more")
    if not process.source:
        raise ProcessError(f"{where}: say where the zone comes from (source); a tolerance without a source is a guess")
    for key in ("source", "remark"):
        if len(getattr(process, key)) > _MOST_TEXT:
            raise ProcessError(f"{where}: {key} has more than {_MOST_TEXT} letters; shorten it")


def _check_zone(where: str, zone: Mapping[str, Any]) -> None:
    unknown = sorted(set(zone) - _KEYS)
    if unknown:
        raise ProcessError(f"{where}: the zone has the unknown key {unknown[0]}; known are {', '.join(sorted(_KEYS))}")
    forms = [form for form in _FORMS if form in zone]
    if len(forms) != 1:
        raise ProcessError(f"{where}: a zone needs exactly one of {', '.join(_FORMS)}; given: {', '.join(forms) or 'none'}")
    cylinder = {"axis", "depth"} & set(zone)
    if cylinder and (forms != ["diameter"] or len(cylinder) < 2):
        raise ProcessError(f"{where}: axis and depth go together, with diameter: a cylinder")
    for key in set(zone) - {"axis"}:
        several = key == "plus_minus" and isinstance(zone[key], list | tuple)
        values = zone[key] if several else [zone[key]]
        numbers = all(isinstance(v, int | float) and 0 <= v < math.inf and not isinstance(v, bool) for v in values)
        if not numbers or not any(values) or (several and len(values) != 3):
            raise ProcessError(f"{where}: {key} = {zone[key]} must be a number above 0 (plus_minus: or three, 0 or more)")


def _check_law(where: str, process: Process) -> None:
    if process.distribution not in ("uniform", "normal"):
        raise ProcessError(f'{where}: distribution = "{process.distribution}" must be "uniform" or "normal"')
    if not 0.1 <= process.cp <= 10:
        raise ProcessError(f"{where}: cp = {process.cp:g} must be 0.1 to 10 (1 leaves 99.73 % inside the zone)")
    if process.distribution == "uniform" and process.cp != 1.0:
        raise ProcessError(f'{where}: cp = {process.cp:g} goes with distribution = "normal"; add it, or leave cp out')
