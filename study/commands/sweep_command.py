"""`sweep`: measures of a geometry along bump, roll or rack travel, or over two of them, as a table or a chart."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, clean, geometry_named, number, print_json, print_table

DEFAULT_KEYS = "camber_deg,toe_deg,half_track_mm,roll_centre_height_mm"
ENDS = {"bump": 30.0, "roll": 2.0, "rack": 20.0}


Name = Annotated[
    str | None, typer.Argument(help="A geometry file, or NAME or NAME@REV of the catalog; not needed with --study.")
]
From = Annotated[
    float | None, typer.Option("--from", help="First position, mm or degrees; else -30 mm, -2 degrees, -20 mm.")
]
To = Annotated[float | None, typer.Option("--to", help="Last position, mm or degrees; else 30 mm, 2 degrees, 20 mm.")]
Against = Annotated[str | None, typer.Option(help="A second input that moves too: gives a map over both.")]
AgainstFrom = Annotated[float | None, typer.Option("--against-from", help="First position of the second input.")]
AgainstTo = Annotated[float | None, typer.Option("--against-to", help="Last position of the second input.")]
AgainstPositions = Annotated[int, typer.Option(help="Number of positions of the second input.")]
OneSide = Annotated[
    str | None, typer.Option(help="left or right, for measures of one wheel; else left, in a chart of curves both.")
]
StudyNumber = Annotated[int | None, typer.Option(help="A finished study: adds the band of its builds.")]
Chart = Annotated[Path | None, typer.Option(help="Write a chart: .svg, .png, .pdf, .html or .json (Vega-Lite).")]


def run(
    geometry: Name = None,
    over: Annotated[str, typer.Option(help="What moves: bump, roll or rack.")] = "bump",
    start: From = None,
    stop: To = None,
    positions: Annotated[int, typer.Option(help="Number of positions.")] = 13,
    against: Against = None,
    against_start: AgainstFrom = None,
    against_stop: AgainstTo = None,
    against_positions: AgainstPositions = 9,
    measures: Annotated[str, typer.Option(help="Measures, separated by commas.")] = DEFAULT_KEYS,
    side: OneSide = None,
    bump: Annotated[float, typer.Option(help="Bump held during the sweep, mm.")] = 0.0,
    roll: Annotated[float, typer.Option(help="Roll held during the sweep, degrees.")] = 0.0,
    rack: Annotated[float, typer.Option(help="Rack travel held during the sweep, mm.")] = 0.0,
    study: StudyNumber = None,
    chart: Chart = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Print measures of a geometry along a sweep of bump, roll or rack travel, or over two of them."""
    from study.chart_file import ending_of
    from study.sweeps import Asked, SweepError

    if chart is not None:
        ending_of(chart)
    if side not in (None, "left", "right"):
        raise SweepError(f'--side {side}: is no side; give "left" or "right"')
    along = _travel(over, start, stop, positions, "")
    sides = (side,) if side else ("left", "right")
    _check_held({"bump": bump, "roll": roll, "rack": rack}, over, against)
    asked = Asked(along, {"bump": bump, "roll": roll, "rack": rack}, _keys(measures), sides)
    if against is None:
        _unused({"--against-from": against_start, "--against-to": against_stop})
        _along(asked, geometry, study, side or "left", chart, as_json, catalog)
        return
    second = _travel(against, against_start, against_stop, against_positions, "against-")
    _over_two(asked, second, geometry, study, chart, as_json, catalog)


def _keys(text):
    from study.measures import KEYS
    from study.patterns import near
    from study.sweeps import SweepError

    keys = [key.strip() for key in text.split(",") if key.strip()]
    for key in keys:
        if key not in KEYS:
            raise SweepError(f"--measures {key}: is not a known measure; {near(key, KEYS)}")
    if not keys:
        raise SweepError("--measures is empty; `holdtight measures` lists what can be asked for")
    return tuple(dict.fromkeys(keys))


def _travel(name, start, stop, count, prefix):
    from study.sweeps import SweepError, Travel

    if name not in ENDS:
        raise SweepError(f'--{prefix.rstrip("-") or "over"} {name}: cannot be swept; give "bump", "roll" or "rack"')
    start, stop = (-ENDS[name] if start is None else start), (ENDS[name] if stop is None else stop)
    return Travel.of(name, start=start, stop=stop, count=count, option=f"{prefix}positions")


def _check_held(held, *moving):
    from study.sweeps import SweepError

    for name in moving:
        if held.get(name):
            raise SweepError(f"--{name} {held[name]:g}: {name} moves in this sweep; leave it out")


def _unused(given):
    from study.sweeps import SweepError

    for option, value in given.items():
        if value is not None:
            raise SweepError(f"{option} {value:g}: belongs to a second input; name it with --against")


# --- along one input


def _along(asked, name, number_, side, chart, as_json, catalog):
    from study.sweeps import banded_rows, nominal_rows

    record, label, dossier = _subject(name, number_, catalog)
    facts = {"geometry": label, "over": asked.over.name, "side": side}
    if dossier is None:
        rows = nominal_rows(record, asked)
    else:
        from study.tasks import CURVE_BUILDS

        stage = dossier.stages[-1]
        rows = banded_rows(record, dossier.asked, asked, stage=stage, count=CURVE_BUILDS)
        facts |= {"study": number_, "stage": stage, "builds": CURVE_BUILDS}
    if chart is not None:
        from study.sweep_charts import write_curves

        study = f"study {number_}, {facts['stage']} alignment" if dossier else ""
        facts["chart"] = str(write_curves(chart, asked, rows, label=label, study=study))
    if as_json:
        print_json(facts | {"rows": _plain_rows(asked, rows, side)})
        return
    _print_along(clean(label), asked, rows, side, facts)


def _subject(name, number_, catalog):
    """(geometry, its label, dossier or None): the one named, or that of the study."""
    from study.sweeps import SweepError

    if number_ is None:
        if name is None:
            raise SweepError("name a geometry (a file, or NAME or NAME@REV of the catalog), or a study with --study")
        return *geometry_named(name, catalog), None
    from catalog.store import Catalog
    from study.dossier import load_dossier

    dossier = load_dossier(Catalog(catalog), number_)
    label = dossier.study["geometry"]
    if name is not None and geometry_named(name, catalog)[0].content_hash != dossier.geometry.content_hash:
        raise SweepError(f"--study {number_} built {label}, which is not {name}; leave the geometry out")
    return dossier.geometry, label, dossier


def _plain_rows(asked, rows, side):
    from study.bands import QUANTILES
    from study.sweeps import line

    lines = {key: line(rows, key, side) for key in asked.keys}
    out = []
    for i, x in enumerate(asked.over.at):
        at = dict(zip(("bump_mm", "roll_deg", "rack_mm"), asked.spot(x), strict=True))
        row = at | {key: found[i]["nominal"] for key, found in lines.items()}
        if "q05" in rows[0]:
            row["band"] = {key: {q: found[i][q] for q in QUANTILES} for key, found in lines.items()}
        out.append(row)
    return out


def _print_along(label, asked, rows, side, facts):
    held = f", {asked.held_text()} held" if asked.held_text() else ""
    title = f"{label} over {asked.over.name}" + (f", {side} side" if side == "right" else "") + held
    if "study" in facts:
        _print_bands(title, asked, rows, side, facts)
    else:
        _print_lines(title, asked, rows, side)
    _print_chart(facts)


def _print_lines(title, asked, rows, side):
    from study.measures import KEYS
    from study.sweeps import line

    columns, body = [(_axis(asked.over.name), "right")], [[f"{x:g}"] for x in asked.over.at]
    for key in asked.keys:
        columns.append((f"{key}\n[{KEYS[key].unit}]", "right"))
        for cells, row in zip(body, line(rows, key, side), strict=True):
            cells.append(number(row["nominal"]))
    print_table(title, columns, body)


def _print_bands(title, asked, rows, side, facts):
    from study.measures import KEYS
    from study.sweeps import line

    shown = {"nominal": "drawing", "q05": "5 %", "q25": "25 %", "q50": "median", "q75": "75 %", "q95": "95 %"}
    columns = [(_axis(asked.over.name), "right"), *((heading, "right") for heading in shown.values())]
    for key in asked.keys:
        body = [[f"{row['x']:g}", *(number(row[name]) for name in shown)] for row in line(rows, key, side)]
        print_table(f"{title}: {key} [{KEYS[key].unit}]", columns, body)
    print(f"band of {facts['builds']} builds of study {facts['study']}, {facts['stage']} alignment")


def _print_chart(facts):
    if "chart" in facts:
        print(f"chart: {facts['chart']}")


def _axis(name):
    return {"bump": "bump_mm", "roll": "roll_deg", "rack": "rack_mm"}[name]


# --- over two inputs


def _over_two(asked, second, name, number_, chart, as_json, catalog):
    from study.sweeps import SweepError, grid

    if second.name == asked.over.name:
        raise SweepError(f"--against {second.name}: moves already; give one of bump, roll, rack that --over does not")
    if number_ is not None:
        raise SweepError(f"--study {number_}: bands belong to a sweep along one input; leave --against out")
    record, label, _ = _subject(name, None, catalog)
    found, side = grid(record, asked, second), asked.sides[0]
    facts = {"geometry": label, "over": asked.over.name, "against": second.name, "side": side}
    if chart is not None:
        from study.sweep_charts import write_maps

        facts["chart"] = str(write_maps(chart, asked, second, found, label=label))
    if as_json:
        print_json(facts | _plain_map(asked, second, found))
        return
    for key, values in found.items():
        _print_map(clean(label), asked, second, key, values)
    _print_chart(facts)


def _plain_map(asked, second, found):
    from study.measures import KEYS

    at = {_axis(travel.name): list(travel.at) for travel in (asked.over, second)}
    held = {_axis(n): v for n, v in asked.held.items() if n not in (asked.over.name, second.name)}
    shown = [{"measure": key, "unit": KEYS[key].unit, "values": values} for key, values in found.items()]
    return {"positions": at, "held": held, "measures": shown}


def _print_map(label, asked, second, key, values):
    from study.measures import KEYS
    from study.sweeps import map_note

    corner = f"{_axis(asked.over.name)}\n{_axis(second.name)} →"
    columns = [(corner, "right"), *((f"{x:g}", "right") for x in second.at)]
    body = [[f"{y:g}", *(number(value) for value in row)] for y, row in zip(asked.over.at, values, strict=True)]
    print_table(f"{label}: {key} [{KEYS[key].unit}]{map_note(asked, second, key)}", columns, body)
