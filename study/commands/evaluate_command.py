"""`evaluate`: every measure of a nominal geometry at one position."""

from typing import Annotated

import typer

from study.commands.common import (
    CatalogOption,
    JsonOption,
    clean,
    finite,
    geometry_named,
    number,
    print_json,
    print_odd,
    print_table,
)


def run(
    geometry: Annotated[str, typer.Argument(help="A geometry file, or NAME or NAME@REV of the catalog.")],
    bump: Annotated[float, typer.Option(help="Road rise under the wheels, mm (+ bump).")] = 0.0,
    roll: Annotated[float, typer.Option(help="Roll of the body, degrees (+ right side down).")] = 0.0,
    rack: Annotated[float, typer.Option(help="Rack travel along +y (to the left), mm.")] = 0.0,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Print every measure of a geometry at one position; `holdtight measures` tells what each means."""
    from study.nominal import evaluate

    finite({"--bump": bump, "--roll": roll, "--rack": rack})
    record, label = geometry_named(geometry, catalog)
    found = evaluate(record, bump_mm=bump, roll_deg=roll, rack_mm=rack)
    print_odd(found, record)
    if as_json:
        position = {"bump_mm": bump, "roll_deg": roll, "rack_mm": rack}
        print_json({"geometry": label, "position": position, **found})
        return
    _print(clean(label), found, bump=bump, roll=roll, rack=rack)


def _print(label, found, *, bump, roll, rack):
    from study.measures import KEYS

    alike = found["left"] == found["right"]
    columns = [("measure", "left"), ("left and right" if alike else "left", "right")]
    columns += [] if alike else [("right", "right")]
    columns += [("unit", "left"), ("sign", "left")]
    rows = []
    for key, value in found["left"].items():
        both = [value] if alike else [value, found["right"][key]]
        if any(v is not None for v in both):
            rows.append([key, *(number(v) for v in both), KEYS[key].unit, KEYS[key].sign])
    where = f"bump {bump:g} mm, roll {roll:g}°, rack {rack:g} mm"
    print_table(f"{label} at {where}", columns, rows)
    axle = [[k, number(v), KEYS[k].unit, KEYS[k].sign] for k, v in found["axle"].items() if v is not None]
    print_table("the axle", [("measure", "left"), ("value", "right"), ("unit", "left"), ("sign", "left")], axle)
    missing = [k for side in ("left", "axle") for k, v in found[side].items() if v is None]
    if missing:
        print("not defined here: " + ", ".join(missing))
