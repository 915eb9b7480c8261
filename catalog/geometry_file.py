"""Geometry files: TOML to a frozen record in ISO axes, mm and degrees."""

import json
from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from types import MappingProxyType

from catalog.axes import AxesError, Matrix, axes_matrix, length_mm, mirrored, to_iso
from catalog.geometry import (  # noqa: F401  (the record is part of this module's face)
    Arm,
    Geometry,
    Point,
    Side,
    Vehicle,
    Wheel,
    from_record,
    to_record,
)
from catalog.geometry_checks import check_names
from catalog.geometry_models import GeometryTable, WheelTable
from catalog.geometry_sizes import check_sizes
from catalog.linkages import LINKAGES
from catalog.points_file import GivenPoints, with_points_file
from catalog.toml_text import GeometryFileError, read_text, validated


def read_geometry(path: Path) -> Geometry:
    """Read and check a geometry file, and the points file that it may name.

    Raises GeometryFileError with file, key, value, rule and remedy.
    """
    return parse_geometry(read_text(path), source=path.name, folder=path.parent)


def parse_geometry(text: str, *, source: str, folder: Path | None = None) -> Geometry:
    """The geometry of a file's text. source: names the file in errors; folder: where a points file is looked for."""
    text = text.removeprefix("\ufeff")
    table = validated(GeometryTable, text, source=source)
    table, from_csv = with_points_file(table, folder=folder, source=source)
    check_names(table, given=from_csv, source=source)
    matrix = _matrix(table, source=source)
    given = _given_side(table, matrix)
    other = _other_side(table, given, matrix)
    check_sizes(table, given=given, other=other, source=source, from_csv=from_csv)
    geometry = _assemble(table, given=given, other=other, text=text, from_csv=from_csv)
    return from_record(json.loads(json.dumps(to_record(geometry))), text=text)


def json_schema() -> dict:
    """JSON schema of a geometry file, for editors."""
    schema = GeometryTable.model_json_schema()
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        **schema,
        "title": "Suspension geometry",
    }


def _matrix(table: GeometryTable, *, source: str) -> Matrix:
    try:
        return axes_matrix(table.axes)
    except AxesError as error:
        raise GeometryFileError(f"{source}: axes = {table.axes!r} {error}.") from None


def _given_side(table: GeometryTable, matrix: Matrix) -> Side:
    flat = {
        name: table.points[name] for name in LINKAGES[table.linkage].allowed_points if name in table.points
    }
    for name, link in table.links.items():
        flat |= {f"{name}_inner": link.inner, f"{name}_outer": link.outer}
    points = {name: to_iso(tuple(point), matrix=matrix, units=table.units) for name, point in flat.items()}
    return Side(points=MappingProxyType(points), wheel=_wheel(table.wheel, table, matrix))


def _wheel(wheel: WheelTable, table: GeometryTable, matrix: Matrix) -> Wheel:
    return Wheel(
        centre=to_iso(tuple(wheel.centre), matrix=matrix, units=table.units),
        loaded_radius_mm=length_mm(wheel.loaded_radius, units=table.units),
        camber_deg=wheel.camber_deg + 0.0,
        toe_deg=wheel.toe_deg + 0.0,
    )


def _other_side(table: GeometryTable, given: Side, matrix: Matrix) -> Side:
    """The mirror image of the given side, with what the file says of the other side in its place."""
    points = {name: _image(name, point, table) for name, point in given.points.items()}
    stated, said = {}, table.other_side()
    stated |= said.points
    for name, link in said.links.items():
        ends = {f"{name}_inner": link.inner, f"{name}_outer": link.outer}
        stated |= {end: point for end, point in ends.items() if point is not None}
    points |= {name: to_iso(tuple(point), matrix=matrix, units=table.units) for name, point in stated.items()}
    return Side(points=MappingProxyType(points), wheel=_other_wheel(table, given.wheel, matrix))


def _image(name: str, point: Point, table: GeometryTable) -> Point:
    """A solid axle's links belong to the axle, not to a side: only its springs have a mirror image."""
    one_axle = LINKAGES[table.linkage].whole_axle and name not in table.points
    return point if one_axle else mirrored(point)


def _other_wheel(table: GeometryTable, given: Wheel, matrix: Matrix) -> Wheel:
    said, wheel = table.other_side().wheel, replace(given, centre=mirrored(given.centre))
    if said.centre is not None:
        wheel = replace(wheel, centre=to_iso(tuple(said.centre), matrix=matrix, units=table.units))
    if said.loaded_radius is not None:
        wheel = replace(wheel, loaded_radius_mm=length_mm(said.loaded_radius, units=table.units))
    angles = {"camber_deg": said.camber_deg, "toe_deg": said.toe_deg}
    return replace(wheel, **{key: value + 0.0 for key, value in angles.items() if value is not None})


def _assemble(table: GeometryTable, *, given: Side, other: Side, text: str, from_csv: GivenPoints) -> Geometry:
    linkage = LINKAGES[table.linkage]
    left, right = (given, other) if table.side == "left" else (other, given)
    return Geometry(
        name=table.name,
        linkage=table.linkage,
        note=table.note,
        given_axes=" ".join(table.axes.lower().split()),
        given_units=table.units,
        given_side=table.side,
        left=left,
        right=right,
        right_is_mirror=_is_mirror(table, given, other),
        arms={name: _arm(table, name) for name in linkage.arms},
        links=tuple(table.links),
        steer_link=table.steer_link,
        spring_on="lower_arm" if table.spring_on == "lower_arm" else "upright",
        vehicle=_vehicle(table),
        datums=_datums(table.datums),
        text=text,
        content_hash="",
        shop_names=from_csv.shop_names,
        ignored_points=from_csv.ignored,
        points_text=from_csv.text,
    )


def _is_mirror(table: GeometryTable, given: Side, other: Side) -> bool:
    points = all(_image(name, point, table) == other.points[name] for name, point in given.points.items())
    return points and replace(given.wheel, centre=mirrored(given.wheel.centre)) == other.wheel


def _arm(table: GeometryTable, name: str) -> Arm:
    said = table.arms.get(name)
    return Arm(build=said.build, located_by=said.located_by) if said else Arm("one-piece", "centre")


def _vehicle(table: GeometryTable) -> Vehicle:
    said = table.vehicle
    own_torque = "axle" if LINKAGES[table.linkage].whole_axle else "chassis"
    return Vehicle(
        axle=said.axle,
        wheelbase_mm=None if said.wheelbase is None else length_mm(said.wheelbase, units=table.units),
        cg_height_mm=None if said.cg_height is None else length_mm(said.cg_height, units=table.units),
        brake_share=said.brake_share,
        drive_share=said.drive_share,
        brakes=said.brakes,
        drive_torque=said.drive_torque or own_torque,
        steered=said.axle == "front" if said.steered is None else said.steered,
    )


def _datums(said: Mapping[str, str]) -> str:
    if set(said) == {"all"}:
        return said["all"].strip()
    return "\n".join(f"{name}: {text.strip()}" for name, text in said.items())
