"""`sweep`: measures of a nominal geometry along bump, roll or rack travel."""

from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import CatalogOption, JsonOption, clean, geometry_named, number, print_json, print_table

DEFAULT_KEYS = "camber_deg,toe_deg,half_track_mm,roll_centre_height_mm"


class SweepError(InputError):
    """A sweep that cannot be made."""


def run(
    geometry: Annotated[str, typer.Argument(help="A geometry file, or NAME or NAME@REV of the catalog.")],
    over: Annotated[str, typer.Option(help="What moves: bump, roll or rack.")] = "bump",
    start: Annotated[float, typer.Option("--from", help="First position, mm or degrees.")] = -30.0,
    stop: Annotated[float, typer.Option("--to", help="Last position, mm or degrees.")] = 30.0,
    positions: Annotated[int, typer.Option(help="Number of positions.")] = 13,
    measures: Annotated[str, typer.Option(help="Measures, separated by commas.")] = DEFAULT_KEYS,
    side: Annotated[str, typer.Option(help="left or right, for measures of one wheel.")] = "left",
    bump: Annotated[float, typer.Option(help="Bump held during the sweep, mm.")] = 0.0,
    roll: Annotated[float, typer.Option(help="Roll held during the sweep, degrees.")] = 0.0,
    rack: Annotated[float, typer.Option(help="Rack travel held during the sweep, mm.")] = 0.0,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Print measures of a geometry along a sweep of bump, roll or rack travel."""
    from study.nominal import sweep

    keys = _keys(measures)
    spots = _spots(over, start, stop, positions, {"bump": bump, "roll": roll, "rack": rack})
    if side not in ("left", "right"):
        raise SweepError(f'--side {side}: is no side; give "left" or "right"')
    record, label = geometry_named(geometry, catalog)
    found = sweep(record, [tuple(spot.values()) for spot in spots], keys)
    rows = [
        {**_named(spot), **{key: _value(f, key, side) for key in keys}} for spot, f in zip(spots, found, strict=True)
    ]
    if as_json:
        print_json({"geometry": label, "over": over, "side": side, "rows": rows})
        return
    _print(clean(label), over, keys, rows)


def _keys(text):
    from study.measures import KEYS
    from study.patterns import near

    keys = [key.strip() for key in text.split(",") if key.strip()]
    for key in keys:
        if key not in KEYS:
            raise SweepError(f"--measures {key}: is not a known measure; {near(key, KEYS)}")
    return list(dict.fromkeys(keys))


def _spots(over, start, stop, positions, held):
    if over not in held:
        raise SweepError(f'--over {over}: cannot be swept; give "bump", "roll" or "rack"')
    if not 2 <= positions <= 1001:
        raise SweepError(f"--positions {positions}: give 2 to 1001")
    return [held | {over: start + (stop - start) * i / (positions - 1)} for i in range(positions)]


def _named(spot):
    return {"bump_mm": spot["bump"], "roll_deg": spot["roll"], "rack_mm": spot["rack"]}


def _value(found, key, side):
    return found["axle"][key] if key in found["axle"] else found[side][key]


def _print(label, over, keys, rows):
    from study.measures import KEYS

    name = {"bump": "bump_mm", "roll": "roll_deg", "rack": "rack_mm"}[over]
    columns = [(name, "right"), *((f"{key}\n[{KEYS[key].unit}]", "right") for key in keys)]
    print_table(
        f"{label} over {over}", columns, [[f"{row[name]:g}", *(number(row[key]) for key in keys)] for row in rows]
    )
