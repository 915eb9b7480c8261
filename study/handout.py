"""A finished study as files: the sheet, and its charts for attaching to a drawing."""

from pathlib import Path

from catalog.errors import WorkError
from study.drawing import drawing_of
from study.zone_words import law_text, zone_text


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
        path.write_text(html, encoding="utf-8", newline="\n")
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
    return dossier.study | {"wanted_share": asked.wanted_share, "cars": asked.cars, "stages": list(dossier.stages)} | {
        "content_hash": dossier.geometry.content_hash, "created": str(dossier.study["created"]), "finished": str(dossier.study["finished"]),
    }  # fmt: skip


def _drawing(dossier):
    axle = dossier.nominal["axle"]
    height, offset = axle.get("roll_centre_height_mm"), axle.get("roll_centre_offset_mm")
    return drawing_of(dossier.geometry) | ({} if height is None else {"roll_centre_mm": (offset or 0.0, height)})


def tolerances(dossier) -> list[dict]:
    """One row a drawing feature that has a zone: source, zone_text, distribution_text, process."""
    return [
        {"source": s.name, "zone_text": zone_text(s.zone, s.unit), "distribution_text": law_text(s.zone), "process": s.zone.process}
        for s in dossier.model.sources if not s.name.startswith("alignment.")
    ]  # fmt: skip


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
