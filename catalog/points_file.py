"""Points that a geometry file takes from a CSV beside it, with the shop's own names for them.

A row counts where its name is mapped in [points_map] or is a trade name; all other rows are left out and the record
names them. Trade names are those of [points], NAME_inner and NAME_outer of a link, and wheel_centre; with the prefix
right. (left., where the file gives the right side) they belong to the other side.
"""

import re
import stat
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from difflib import get_close_matches
from pathlib import Path, PurePosixPath, PureWindowsPath
from types import MappingProxyType

from catalog.geometry_models import GeometryTable
from catalog.linkages import LINKAGES, SPRING_POINTS
from catalog.points_csv import Row, parse_points
from catalog.toml_text import MAX_BYTES, near, refuse, shown

LINK_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_-]*")
_ENDS = ("inner", "outer")
_MOST_COMPARED = 2000
_NOTHING: Mapping[str, str] = MappingProxyType({})


@dataclass(frozen=True, slots=True)
class GivenPoints:
    """What came from a points file. text: as given; shop_names and places ("rear.csv line 7, 'P-101'") by trade name."""

    text: str = ""
    shop_names: Mapping[str, str] = field(default_factory=lambda: _NOTHING)
    ignored: tuple[str, ...] = ()
    places: Mapping[str, str] = field(default_factory=lambda: _NOTHING)

    def at(self, name: str) -> str:
        """Where a point stands in the points file, for an error; empty for one that stands in the geometry file."""
        return f" ({self.places[name]})" if name in self.places else ""


def with_points_file(
    table: GeometryTable, *, folder: Path | None, source: str
) -> tuple[GeometryTable, GivenPoints]:
    """The table with the points of its points_file filled in, and what the record keeps of that file.

    folder: of the geometry file; None where there is none. Raises GeometryFileError.
    """
    if table.points_file is None:
        for key in ("points_map", "points_ignore"):
            if getattr(table, key):
                refuse(source, key, "goes with a points file", "add points_file, or take it out.")
        return table, GivenPoints()
    named = f"{source}: {table.points_file}"
    text = _read(table.points_file, folder, source)
    found = parse_points(text, source=named, units=table.units)
    _check_named(table, {row.name for row in found.rows}, source)
    used, ignored = _sorted_out(table, found.rows, named)
    positions = dict(zip(used, found.positions(list(used.values())), strict=True))
    filled = _filled(table, used, positions, named)
    shop_names = {name: row.name for name, row in used.items() if row.name not in (name, f"{table.side}.{name}")}
    places = {name: f"{table.points_file} line {row.line}, {shown(row.name)}" for name, row in used.items()}
    return filled, GivenPoints(text, MappingProxyType(shop_names), ignored, MappingProxyType(places))


def _read(given: str, folder: Path | None, source: str) -> str:
    key = f"points_file = {shown(given)}"
    if folder is None:
        refuse(source, key, "cannot be read: there is no folder to look in", "give the geometry as a file.")
    if not given.strip() or PurePosixPath(given).is_absolute() or PureWindowsPath(given).drive:
        refuse(source, key, "must name a file from the folder of the geometry file", 'write it like "points.csv".')
    try:
        path = folder / given
        state = path.stat()
        if not stat.S_ISREG(state.st_mode):
            refuse(source, key, "is no ordinary file", "give the name of a CSV file.")
        with path.open("rb") as file:
            data = file.read(MAX_BYTES + 1)
    except FileNotFoundError:
        refuse(source, key, f"does not exist in the folder {shown(str(folder))}", "check the name.")
    except (OSError, ValueError) as problem:
        reason = getattr(problem, "strerror", None) or "it is no name of a file"
        refuse(source, key, f"cannot be read ({reason})", "check the name and the file.")
    return _decoded(data, key, source)


def _decoded(data: bytes, key: str, source: str) -> str:
    if len(data) > MAX_BYTES:
        refuse(source, key, "is longer than 1 MB", "give only the points of this axle.")
    try:
        if data.startswith((b"\xff\xfe", b"\xfe\xff")) or b"\0" in data:
            raise ValueError
        return data.decode("utf-8-sig")
    except ValueError as problem:
        start = getattr(problem, "start", None)
        where = "is binary or UTF-16" if start is None else f"line {data[:start].count(10) + 1} is not UTF-8"
    refuse(source, key, where, "save it as CSV in UTF-8.")


def _check_named(table: GeometryTable, names: set[str], source: str) -> None:
    """Every name of points_map and points_ignore has to be a row, so that a misspelt one is not left out in silence."""
    for key, given in [("points_map", name) for name in table.points_map] + [
        ("points_ignore", name) for name in table.points_ignore
    ]:
        if given not in names:
            refuse(source, f"{key}: {shown(given)}", f"is no row of {table.points_file}", _near_row(given, names))
        if key == "points_ignore" and given in table.points_map:
            refuse(source, f"{key}: {shown(given)}", "is mapped in points_map too", "take one of the two out.")


def _near_row(given: str, names: Iterable[str]) -> str:
    names = sorted(names)
    like = get_close_matches(given[:200], names[:_MOST_COMPARED], n=3, cutoff=0.5)
    if like:
        return f"did you mean {' or '.join(shown(name) for name in like)}?"
    more = f" and {len(names) - 8} more" if len(names) > 8 else ""
    return f"its rows: {', '.join(shown(name) for name in names[:8])}{more}."


def _sorted_out(table: GeometryTable, rows: tuple[Row, ...], named: str) -> tuple[dict[str, Row], tuple[str, ...]]:
    """(row of each trade name, names of the rows left out)."""
    taken = _trade_names(table, {row.name for row in rows})
    used: dict[str, Row] = {}
    ignored, unwanted = [], set(table.points_ignore)
    for row in rows:
        target = table.points_map.get(row.name, row.name).removeprefix(f"{table.side}.")
        if row.name in unwanted or (row.name not in table.points_map and not taken(target)):
            ignored.append(row.name)
            continue
        if _slot(table, target) is None:
            hint = near(target[:200], _known(table))
            refuse(named, f"points_map {shown(row.name)} = {shown(target)}", f"is no point of {table.linkage}", hint)
        if target in used:
            first = used[target]
            told = f"gives {target} again, after line {first.line}, {shown(first.name)}"
            refuse(named, f"line {row.line}, {shown(row.name)}", told, "keep one (points_ignore leaves a row out).")
        used[target] = row
    return used, tuple(dict.fromkeys(ignored))


def _known(table: GeometryTable) -> list[str]:
    ends = [f"{name}_{end}" for name in table.links for end in _ENDS]
    return [*LINKAGES[table.linkage].allowed_points, *ends, "wheel_centre"]


def _trade_names(table: GeometryTable, names: set[str]):
    """A test whether an unmapped row bears a trade name.

    Links are named by the shop: those that the geometry file names count, and if it names too few for the linkage also
    those of which the CSV has both ends.
    """
    targets = {_split_link(target) for target in table.points_map.values()}
    links = {*table.links, table.steer_link, *(link for link, _ in targets)} - {None}
    if len(links) < LINKAGES[table.linkage].n_links:
        plain = {name.removeprefix(f"{table.side}.") for name in names}
        pairs = {_split_link(name)[0] for name in plain}
        links |= {link for link in pairs if link and all(f"{link}_{end}" in plain for end in _ENDS)}

    def taken(name: str) -> bool:
        slot = _slot(table, name)
        if slot is None or "links" not in slot:
            return slot is not None
        return slot[slot.index("links") + 1] in links

    return taken


def _split_link(name: str) -> tuple[str | None, str | None]:
    """(link, end) of NAME_inner or NAME_outer."""
    link, _, end = name.rpartition("_")
    is_link = end in _ENDS and LINK_NAME.fullmatch(link) and name not in SPRING_POINTS
    return (link, end) if is_link else (None, None)


def _slot(table: GeometryTable, name: str) -> tuple[str, ...] | None:
    """The keys under which a trade name stands in a geometry file; None for any other name."""
    other = "right" if table.side == "left" else "left"
    if name.startswith(f"{other}."):
        inner = _slot(table, name.removeprefix(f"{other}.")) if name.count(".") == 1 else None
        return inner and (other, *inner)
    linkage = LINKAGES[table.linkage]
    if name == "wheel_centre":
        return ("wheel", "centre")
    if name in linkage.allowed_points:
        return ("points", name)
    link, end = _split_link(name)
    return ("links", link, end) if link and linkage.n_links else None


def _filled(table: GeometryTable, used: dict[str, Row], positions: dict, named: str) -> GeometryTable:
    tables = table.model_dump(exclude_unset=True)
    order = {name.removeprefix(f"{table.side}."): i for i, name in enumerate(table.points_map.values())}
    # the order of rows is no content: links stand in the order of the geometry file, then by name
    for name in sorted(used, key=lambda name: (order.get(name, len(order)), name)):
        *path, last = _slot(table, name)
        place = tables
        for key in path:
            place = place.setdefault(key, {})
        if place.get(last) is not None:
            row = used[name]
            told = f"gives {name}, which {'.'.join([*path, last])} = {shown(place[last])} gives too"
            refuse(named, f"line {row.line}, {shown(row.name)}", told, "take one of the two out.")
        place[last] = positions[name]
    return GeometryTable.model_validate(tables)
