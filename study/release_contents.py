"""The files of a release: note, tables, page, charts, the study and its geometry."""

import json
from collections.abc import Callable, Mapping, Sequence

from study.charts import every, view_spec
from study.charts.exports import drawn, safe_stem
from study.handout import _drawing
from study.release_csv import table_csv
from study.release_dxf import table_dxf
from study.release_note import note
from study.release_page import page
from study.release_rows import part_of
from study.release_words import clean_all

CHARTS = "charts/"
ENDINGS = ("svg", "pdf", "png")
Progress = Callable[[int, int], None]


def charts(dossier, *, progress: Progress = lambda done, total: None) -> dict[str, bytes]:
    """Every chart of the study as SVG, PDF and PNG by path, `charts/STEM.ENDING`. progress: called with (done, total)."""
    made, files = every(clean_all(dossier.tables), _drawing(dossier)), {}
    for number, (stem, spec) in enumerate(made.items()):
        progress(number, len(made))
        stem = safe_stem(stem)
        files |= {f"{CHARTS}{stem}.{ending}": content for ending, content in drawn(spec, ENDINGS, name=stem).items()}
    progress(len(made), len(made))
    return files


def picture(dossier, part: str, released: Sequence[Mapping]) -> tuple[bytes, str] | None:
    """(SVG, description) of where the features of a part are and what they do to the measures that have limits.

    None for a part that has lengths alone.
    """
    if all(row["kind"] == "length" for row in released):
        return None
    tables = clean_all(dossier.tables)
    limited = {row["measure_no"] for row in tables["stats"] if row["limit_low"] is not None or row["limit_high"] is not None}
    rows = [row for row in tables["ranking"] if part_of(row["source"]) == part]
    rows = [row for row in rows if row["measure_no"] in limited] or rows
    spec = view_spec(_drawing(dossier), tables | {"ranking": rows}, "side")
    return (drawn(spec, ("svg",), name="release")["svg"], spec["description"]) if spec else None


def contents(dossier, record: Mapping, rows: Sequence[Mapping], charted: Mapping[str, bytes]) -> dict[str, bytes]:
    """All files of a release by path, without the manifest. record has its record_hash; charted: from `charts`."""
    geometry = dossier.geometry
    files = {
        "note.txt": note(record, rows).encode(),
        "table.csv": table_csv(record, rows),
        "table.dxf": table_dxf(record, rows),
        "release.html": page(record, rows, picture(dossier, record["part"], rows)).encode(),
        "release.json": _json(record, rows),
        "study.toml": dossier.study["text"].encode("utf-8", "surrogatepass"),
        "geometry.toml": geometry.text.encode("utf-8", "surrogatepass"),
    }
    if geometry.points_text:
        files["points.csv"] = geometry.points_text.encode("utf-8", "surrogatepass")
    return files | dict(charted)


def _json(record, rows):
    plain = {**record, "created": f"{record['created'].isoformat()}Z"}
    text = json.dumps({"release": plain, "rows": list(rows)}, ensure_ascii=False, allow_nan=False, indent=1)
    return (text + "\n").encode("utf-8")
