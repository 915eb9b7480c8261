"""`as-built`: points measured on a built car, taken back into the catalog."""

from pathlib import Path
from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import CatalogOption, JsonOption, by_whom, clean, number, print_json, print_table


class AsBuiltOptionError(InputError):
    """Arguments of `as-built` that do not go together."""


ACTIONS = ("list", "add", "show", "evaluate")


def run(
    action: Annotated[str, typer.Argument(help="list, add, show or evaluate.")] = "list",
    what: Annotated[
        str | None,
        typer.Argument(
            help="add: NAME or NAME@REV of the geometry; list: a geometry, or nothing; else a measurement's number.",
            show_default=False,
        ),
    ] = None,
    file: Annotated[Path | None, typer.Argument(help="add: the CSV file of measured points.", show_default=False)] = None,
    car: Annotated[str | None, typer.Option(help="add: the name of the car.", show_default=False)] = None,
    note: Annotated[str, typer.Option(help="add: free text, kept with it.")] = "",
    by: Annotated[str | None, typer.Option(help="add: who measured; else the login name.", show_default=False)] = None,
    study: Annotated[
        int | None,
        typer.Option(help="A study's number: compare with its zones; evaluate: align as it does, too.", show_default=False),
    ] = None,
    bump: Annotated[float, typer.Option(help="evaluate: road rise, mm.")] = 0.0,
    roll: Annotated[float, typer.Option(help="evaluate: roll of the body, degrees.")] = 0.0,
    rack: Annotated[float, typer.Option(help="evaluate: rack travel, mm.")] = 0.0,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Keep points measured on a car with its geometry's revision, list and show them, evaluate the car as built."""
    from catalog.store import Catalog

    _check(action, what, file, car, study, {"bump": bump, "roll": roll, "rack": rack})
    store = Catalog(catalog)
    if action == "list":
        _list(store, what, as_json)
    elif action == "add":
        _add(store, what, file, {"car": car, "note": note, "by": by_whom(by)}, study, as_json)
    elif action == "show":
        _show(store, _numbered(what), study, as_json)
    else:
        _evaluate(store, _numbered(what), study, {"bump_mm": bump, "roll_deg": roll, "rack_mm": rack}, as_json)


def _check(action, what, file, car, study, position):
    if action not in ACTIONS:
        from study.patterns import near

        raise AsBuiltOptionError(f'as-built "{clean(action)}": is no action; {near(action, ACTIONS)}')
    if action == "add" and (what is None or file is None or car is None):
        raise AsBuiltOptionError("as-built add: write it like `as-built add NAME@REV measured.csv --car NAME`")
    if action in ("show", "evaluate") and what is None:
        raise AsBuiltOptionError(f"as-built {action}: give the number of a measurement; `holdtight as-built list` lists them")
    if action != "add" and (file is not None or car is not None):
        raise AsBuiltOptionError(f"as-built {action}: a file and --car go with add")
    if action == "list" and study is not None:
        raise AsBuiltOptionError("as-built list: --study goes with add, show and evaluate")
    if action != "evaluate" and any(position.values()):
        name = next(name for name, value in position.items() if value)
        raise AsBuiltOptionError(f"as-built {action}: --{name} goes with evaluate")


def _numbered(text):
    if not (text.isascii() and text.isdigit() and len(text) < 10):
        raise AsBuiltOptionError(f"as-built: {clean(text)!r} must be the number of a measurement; `holdtight as-built list` lists them")
    return int(text)


def _list(store, name, as_json):
    from catalog import as_built, revisions

    with store.read() as con:
        if name is not None:
            name = revisions.find(con, name).spec if "@" in name else revisions.find(con, name).name
        found = as_built.list_as_built(con, geometry=name.partition("@")[0] if name else None)
    found = [each for each in found if name is None or "@" not in name or each.geometry == name]
    if as_json:
        print_json([_head(each) | {"points": len(each.points), "greatest_mm": _greatest(each)} for each in found])
        return
    columns = [("no.", "right"), ("geometry", "left"), ("car", "left"), ("points", "right"), ("greatest position, mm", "right")]
    columns += [("added (UTC)", "left"), ("by", "left"), ("note", "left")]
    rows = [
        [str(e.id), e.geometry, e.car, str(len(e.points)), f"{_greatest(e):.3f}", f"{e.created:%Y-%m-%d %H:%M}", e.by, e.note]
        for e in found
    ]
    print_table("as-built cars", columns, rows)


def _greatest(found):
    return max(point.position_mm for point in found.points)


def _head(found):
    own = {"as_built": found.id, "geometry": found.geometry, "car": found.car, "by": found.by, "note": found.note}
    return own | {"created": found.created.isoformat()}


def _add(store, spec, file, given, study, as_json):
    from catalog import as_built, revisions

    if spec.endswith(".toml"):
        raise AsBuiltOptionError(f"as-built add {clean(spec)}: is a file; `holdtight add` registers it, then give NAME@REV")
    with store.read() as con:
        revision = revisions.find(con, spec)
        geometry = revisions.load(con, revision)
        asked = _study_of(con, study, geometry)
    measured = as_built.read_measured(file, geometry)
    with store.write() as con:
        made = as_built.add(con, revision, measured, **given)
    extra = {"new": made.is_new, "left_out": list(measured.left_out)}
    if not as_json:
        print(f"measurement {made.id} of {clean(made.car)}: {'kept' if made.is_new else 'is there already, unchanged'}")
    _print_points(made, geometry, asked, study, as_json, extra)
    if measured.left_out and not as_json:
        print(f"left out, no points of {clean(geometry.name)}: {clean(', '.join(measured.left_out))}")


def _show(store, wanted, study, as_json):
    found, geometry, asked = _loaded(store, wanted, study)
    if not as_json:
        print(f"measurement {found.id}: {clean(found.car)}, {found.created:%Y-%m-%d} by {clean(found.by)}")
        if found.note:
            print(clean(found.note))
    _print_points(found, geometry, asked, study, as_json, {})


def _loaded(store, wanted, study):
    """(measurement, geometry of its revision, the study or None)."""
    from catalog import as_built, revisions

    with store.read() as con:
        found = as_built.get(con, wanted)
        geometry = revisions.load(con, revisions.by_id(con, found.revision_id))
        return found, geometry, _study_of(con, study, geometry)


def _study_of(con, wanted, geometry):
    """The study of that number, which has to be one of the same geometry."""
    if wanted is None:
        return None
    from catalog import queue
    from study.dossier import kept_study

    job = queue.get(con, wanted)
    if job.geometry.rpartition("@")[0] != geometry.name:
        raise AsBuiltOptionError(f"--study {wanted}: is of {clean(job.geometry)}, not of {clean(geometry.name)}; name one of its own")
    return kept_study(con, job)


def _offsets(found, geometry):
    """{(side, feature): offset (mm)} of the measured chassis and rack points."""
    from study.measured_car import feature_of

    named = {(p.side, feature_of(geometry, p.point)): p.offset for p in found.points}
    return {key: offset for key, offset in named.items() if key[1] is not None}


def _print_points(found, geometry, asked, study, as_json, extra):
    from study.measured_car import feature_of, inspect

    zones = inspect(geometry, asked, _offsets(found, geometry)) if asked is not None else {}
    rows = [_row(point, feature_of(geometry, point.point), zones) for point in found.points]
    if as_json:
        print_json(_head(found) | {"study": study} | extra | {"points": rows})
        return
    columns = [("side", "left"), ("point", "left"), ("dx", "right"), ("dy", "right"), ("dz", "right"), ("position", "right")]
    columns += [("zone", "left"), ("", "left")] if asked is not None else []
    lines = []
    for row in rows:
        line = [row["side"], row["point"], *(f"{row[key]:+.3f}" for key in ("dx_mm", "dy_mm", "dz_mm")), f"⌀{row['position_mm']:.3f}"]
        lines.append(line + ([row["zone"] or "–", _verdict(row)] if asked is not None else []))
    print_table(f"{found.geometry}, measured minus drawing, mm (x forward, y left, z up)", columns, lines)
    print("position: twice the distance from the drawing's place. Setting up the car and its datums for measuring is in it too.")
    if any(row["feature"] is None for row in rows):
        print("Points of uprights, arms and axle are where the assembly puts them: no single zone is theirs.")


def _row(point, feature, zones):
    own = {"side": point.side, "point": point.point, "feature": feature}
    own |= dict(zip(("dx_mm", "dy_mm", "dz_mm"), point.offset, strict=True)) | {"position_mm": point.position_mm}
    found = zones.get((point.side, feature))
    if found is None:
        return own | {"zone": None, "actual_mm": None, "limit_mm": None, "inside": None}
    return own | {"zone": found.zone, "actual_mm": found.actual_mm, "limit_mm": found.limit_mm, "inside": found.inside}


def _verdict(row):
    return {None: "", True: "inside", False: "OUTSIDE"}[row["inside"]]


def _evaluate(store, wanted, study, position, as_json):
    from study import measured_car, nominal

    found, geometry, asked = _loaded(store, wanted, study)
    offsets = _offsets(found, geometry)
    if not offsets:
        raise AsBuiltOptionError(f"as-built evaluate {wanted}: no chassis or rack point was measured, so the car is as drawn")
    drawn = nominal.evaluate(geometry, **position)
    built = measured_car.evaluate(geometry, offsets, **position)
    aligned = None
    if asked is not None and asked.alignment:
        aligned = measured_car.evaluate(geometry, offsets, alignment=asked.alignment, **position)
    if as_json:
        out = {"geometry": found.geometry, "car": found.car, "study": study, "position": position, "drawn": drawn}
        out |= {"built": built.measures, "aligned": aligned.measures if aligned else None}
        print_json({"as_built": found.id, **out, "settings": aligned.settings if aligned else []})
        return
    _print_evaluated(found, position, drawn, built, aligned)


def _print_evaluated(found, position, drawn, built, aligned):
    from study.measures import KEYS

    where = "bump {bump_mm:g} mm, roll {roll_deg:g}°, rack {rack_mm:g} mm".format(**position)
    print(f"{clean(found.car)}, built to {clean(found.geometry)}, at {where}")
    columns = [("measure", "left"), ("drawing", "right"), ("as built", "right"), ("difference", "right")]
    columns += [("aligned", "right"), ("difference", "right")] if aligned else []
    for side in ("left", "right", "axle"):
        rows = []
        for key, value in drawn[side].items():
            cells = [found.measures[side][key] for found in (built, aligned) if found]
            if any(v is not None for v in (value, *cells)):
                rows.append([key, number(value), *(text for v in cells for text in (number(v), _difference(v, value))), KEYS[key].unit])
        print_table(side, [*columns, ("unit", "left")], rows)
    for row in aligned.settings if aligned else ():
        stop = ", at its stop" if row["ran_out"] else ""
        print(f"{row['side']} {row['adjuster']} by {row['by']}: {row['setting_mm']:+.3f} mm{stop}")
    print("Measured points of chassis and rack are put in place; all other parts are taken as drawn.")


def _difference(value, drawn):
    if value is None or drawn is None:
        return "–"
    text = number(value - drawn, 3)
    return text if text == "0" or text.startswith("-") else f"+{text}"
