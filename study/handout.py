"""A finished study as files: the sheet, and its charts for attaching to a drawing."""

from pathlib import Path

import numpy as np

from catalog.errors import WorkError
from study.assembly import ARM_PIVOTS, spin_axis


class SheetNotWritten(WorkError):
    """The sheet's file cannot be written."""


def write_sheet(dossier, path: Path) -> Path:
    """Write the self-contained HTML sheet. Raises SheetNotWritten."""
    from study.sheet import render

    html = render(
        dossier.tables, study=_facts(dossier), geometry=_drawing(dossier), tolerances=tolerances(dossier),
        alignment=alignment(dossier),
    )  # fmt: skip
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(html, encoding="utf-8")
    except OSError as error:
        raise SheetNotWritten(
            f"{path}: cannot be written: {error.strerror}; name another file with --sheet or --out"
        ) from None
    return path


def write_charts(dossier, folder: Path) -> list[Path]:
    """Write every chart as SVG, PNG, PDF and Vega-Lite JSON."""
    from study.charts import every, export

    made = every(dossier.tables, _drawing(dossier))
    return [path for stem, chart in made.items() for path in export(chart, folder, stem)]


def _facts(dossier):
    asked = dossier.asked
    return dossier.study | {"wanted_share": asked.wanted_share, "cars": asked.cars, "stages": list(dossier.stages)}


def _drawing(dossier):
    axle = dossier.nominal["axle"]
    height, offset = axle.get("roll_centre_height_mm"), axle.get("roll_centre_offset_mm")
    return drawing_of(dossier.geometry) | ({} if height is None else {"roll_centre_mm": (offset or 0.0, height)})


def drawing_of(geometry) -> dict:
    """What the views draw of a geometry: points, lines by part, wheels, ground; car coordinates in mm."""
    wheels = {hand: _wheel(getattr(geometry, hand).wheel, hand) for hand in ("left", "right")}
    return {
        "name": geometry.name, "linkage": geometry.linkage, "datums": geometry.datums, "ground_mm": geometry.ground_mm(),
        "left": dict(geometry.left.points), "right": dict(geometry.right.points), "lines": lines_of(geometry), "wheel": wheels,
    }  # fmt: skip


def _wheel(wheel, hand):
    axis = spin_axis(camber_deg=wheel.camber_deg, toe_deg=wheel.toe_deg) * (1.0, 1.0 if hand == "left" else -1.0, 1.0)
    return {"centre": wheel.centre, "axis": tuple(float(a) for a in axis), "radius_mm": wheel.loaded_radius_mm}


UPRIGHT_POINTS = ("upper_ball_joint", "strut_lower", "lower_ball_joint", "tie_rod_outer")


def lines_of(geometry) -> list[tuple[str, str, str]]:
    """(point, point, part) of every member that a view shows as a line."""
    found = []
    for arm in geometry.arms:
        front, rear, joint = ARM_PIVOTS[arm]
        found += [(front, joint, arm), (rear, joint, arm)]
        if geometry.arms[arm].build == "one-piece":
            found.append((front, rear, arm))
    points = geometry.left.points
    links = geometry.links or (("tie_rod",) if "tie_rod_inner" in points else ())
    found += [(f"{name}_inner", f"{name}_outer", name) for name in links]
    for pair, part in (
        (("strut_top", "strut_lower"), "strut"),
        (("hinge_inner", "hinge_outer"), "arm"),
        (("spring_inner", "spring_outer"), "spring"),
    ):
        if all(name in points for name in pair):
            found.append((*pair, part))
    carried = [name for name in UPRIGHT_POINTS if name in points] or [f"{name}_outer" for name in geometry.links]
    if geometry.linkage != "solid-axle":
        found += [(a, b, "upright") for a, b in zip(carried, carried[1:], strict=False)]
    return found


def tolerances(dossier) -> list[dict]:
    """One row a drawing feature that has a zone: source, zone_text, distribution_text, process."""
    return [
        {"source": s.name, "zone_text": zone_text(s.zone, s.unit), "distribution_text": law_text(s.zone), "process": s.zone.process}
        for s in dossier.model.sources if not s.name.startswith("alignment.")
    ]  # fmt: skip


def zone_text(zone, unit="mm") -> str:
    """A zone as it would stand on a drawing."""
    half = zone.half
    if zone.form == "ball":
        return f"S⌀{2 * half[0]:g} mm"
    if zone.form == "cylinder":
        return f"⌀{2 * half[0]:g} mm about {_axis_text(zone.axis)}, ±{half[1]:g} mm along it"
    if zone.form == "tilt":
        return f"{half[0]:g}° half angle"
    if len(set(half)) == 1:
        return f"±{half[0]:g} {unit}" + (" in x, y, z" if zone.form == "box" else "")
    return "±" + " / ".join(f"{h:g}" for h in half) + f" {unit} in x / y / z"


def _axis_text(axis):
    for name, unit in zip("xyz", np.eye(3), strict=True):
        if np.allclose(axis, unit):
            return name
    return "(" + ", ".join(f"{a:.3f}" for a in axis) + ")"


def law_text(zone) -> str:
    """The distribution in words."""
    text = "uniform over the zone" if zone.distribution == "uniform" else f"normal, cp {zone.cp:g}"
    if zone.truncated:
        text += ", inspected"
    if any(zone.shift):
        text += ", mean " + "/".join(f"{s:+g}" for s in zone.shift)
    return text


def alignment(dossier) -> list[dict]:
    """One row an adjuster, in the order of the workshop."""
    rows = []
    for a in dossier.asked.alignment or ():
        unit = "mm" if a.by is None else "°"
        rows.append({
            "adjuster": a.target, "by": a.by, "within_text": f"±{a.within:g} {unit}",
            "step_text": f"{a.step_mm:g} mm" if a.step_mm else None, "range_text": f"±{a.range_mm:g} mm" if a.range_mm else None,
        })  # fmt: skip
    return rows
