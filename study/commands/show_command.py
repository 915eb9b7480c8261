"""`show`: one geometry as it is kept."""

from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, as_data, clean, geometry_named, print_json, print_table


def run(
    geometry: Annotated[str, typer.Argument(help="A geometry file, or NAME or NAME@REV of the catalog.")],
    text: Annotated[bool, typer.Option("--text", help="Print the file as it was given.")] = False,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Show a geometry's points in the car's own axes (x forward, y left, z up, mm)."""
    from catalog.geometry import to_record

    record, label = geometry_named(geometry, catalog)
    if as_json:
        print_json({"geometry": label, "content_hash": record.content_hash, **to_record(record)})
    elif text:
        as_data()
        print(record.text)
        if record.points_text:
            print(record.points_text)
    else:
        _print(label, record)


def _print(label, record):
    both = not record.right_is_mirror
    columns = [("point", "left"), *((f"{axis} mm", "right") for axis in "xyz")]
    columns += [("shop's name", "left")] if record.shop_names else []
    columns += [(f"right {axis} mm", "right") for axis in "xyz"] if both else []
    rows = []
    for name, point in {**record.left.points, "wheel_centre": record.left.wheel.centre}.items():
        other = record.right.wheel.centre if name == "wheel_centre" else record.right.points[name]
        shop = [record.shop_names.get(name, "")] if record.shop_names else []
        rows.append([name, *(f"{v:.3f}" for v in point), *shop, *((f"{v:.3f}" for v in other) if both else ())])
    print_table(f"{label}: {record.linkage}, {record.vehicle.axle} axle", columns, rows)
    wheel = record.left.wheel
    print(f"wheel: loaded radius {wheel.loaded_radius_mm:g} mm, camber {wheel.camber_deg:g}°, toe {wheel.toe_deg:g}°")
    for name, arm in record.arms.items():
        print(f"{name}: {arm.build}, located by {arm.located_by}")
    print(f"given: {record.given_side} side, {record.given_axes}, {record.given_units}")
    print("right side: " + ("given too" if both else "mirror image of the left"))
    if record.note:
        print(clean(record.note))
