"""A release as a folder of files: note, tables, page, charts, the study and its geometry, and a manifest of hashes."""

import json
import re
from collections.abc import Callable, Mapping, Sequence
from pathlib import Path

from catalog.errors import InputError, WorkError
from study.charts import every, matrix_spec, view_spec
from study.charts.exports import drawn, safe_stem
from study.handout import _drawing
from study.release_csv import table_csv
from study.release_dxf import table_dxf
from study.release_note import note, words
from study.release_page import page
from study.release_rows import part_of
from study.release_words import clean_all

CHARTS = "charts/"
ENDINGS = ("svg", "pdf", "png")
MANIFEST = "manifest.sha256"
_PATH = re.compile(r"[A-Za-z0-9_-]+(?:\.[A-Za-z0-9_-]+)*(?:/[A-Za-z0-9_-]+(?:\.[A-Za-z0-9_-]+)*)*")
Progress = Callable[[int, int], None]


class FolderTaken(InputError):
    """The folder holds something else already."""


class FolderNotWritten(WorkError):
    """The folder cannot be written."""


def charts(dossier, *, progress: Progress = lambda done, total: None) -> dict[str, bytes]:
    """Every chart of the study as SVG, PDF and PNG by path, `charts/STEM.ENDING`. progress: called with (done, total)."""
    made, files = every(clean_all(dossier.tables), _drawing(dossier)), {}
    for number, (stem, spec) in enumerate(made.items()):
        progress(number, len(made))
        stem = safe_stem(stem)
        files |= {f"{CHARTS}{stem}.{ending}": content for ending, content in drawn(spec, ENDINGS, name=stem).items()}
    progress(len(made), len(made))
    return files


def pictures(dossier, part: str) -> list[tuple[bytes, str]]:
    """(SVG, description) of what the features of a part do: where they are, and in which measures."""
    tables = clean_all(dossier.tables)
    own = tables | {"ranking": [row for row in tables["ranking"] if part_of(row["source"]) == part]}
    specs = [view_spec(_drawing(dossier), own, "front"), matrix_spec(own)]
    titles = ("Where they are, by what they do", f"What each feature of the {words(part)} does to each measure")
    return [
        (drawn(spec | {"title": spec["title"] | {"text": title}}, ("svg",), name="release")["svg"], spec["description"])
        for spec, title in zip(specs, titles, strict=True) if spec is not None
    ]  # fmt: skip


def contents(dossier, record: Mapping, rows: Sequence[Mapping], charted: Mapping[str, bytes]) -> dict[str, bytes]:
    """All files of a release by path, without the manifest. record has its record_hash; charted: from `charts`."""
    geometry = dossier.geometry
    files = {
        "note.txt": note(record, rows).encode(),
        "table.csv": table_csv(record, rows),
        "table.dxf": table_dxf(record, rows),
        "release.html": page(record, rows, pictures(dossier, record["part"])).encode(),
        "release.json": _json(record, rows),
        "study.toml": dossier.study["text"].encode("utf-8", "surrogatepass"),
        "geometry.toml": geometry.text.encode("utf-8", "surrogatepass"),
    }
    if geometry.points_text:
        files["points.csv"] = geometry.points_text.encode("utf-8", "surrogatepass")
    return files | dict(charted)


def default_folder(drawing: str, issue: str) -> Path:
    """releases/DRAWING-ISSUE, in letters that every system takes."""
    return Path("releases") / safe_stem(f"{drawing}-{issue}")


def check_folder(folder: Path) -> None:
    """Raise FolderTaken unless the folder is new or empty."""
    if folder.exists() and not folder.is_dir():
        raise FolderTaken(f"{folder}: is a file; name a folder with --out")
    if folder.is_dir() and any(folder.iterdir()):
        raise FolderTaken(f"{folder}: is not empty, and a release is not mixed with other files; name a new folder with --out")


def write_folder(folder: Path, files: Mapping[str, bytes]) -> list[Path]:
    """Write the files into a folder that is new, empty, or holds just them already. Nothing is written outside it.

    Raises FolderTaken, FolderNotWritten.
    """
    for path in files:
        if not _PATH.fullmatch(path):
            raise FolderNotWritten(f"{path!r}: is no file name of a release; restore a copy of the catalog")
    targets = {folder / path: content for path, content in files.items()}
    try:
        if _holds(folder, targets):
            return list(targets)
        check_folder(folder)
        for target, content in targets.items():
            target.parent.mkdir(parents=True, exist_ok=True)
            with target.open("xb") as file:
                file.write(content)
    except OSError as error:
        raise FolderNotWritten(f"{folder}: cannot be written: {error.strerror}; name another folder with --out") from None
    return list(targets)


def _holds(folder, targets):
    """Whether the folder holds these files, alike to the last byte, and no others."""
    if not folder.is_dir():
        return False
    there = [path for path in folder.rglob("*") if path.is_symlink() or not path.is_dir()]
    return set(there) == set(targets) and all(
        not path.is_symlink() and path.read_bytes() == content for path, content in targets.items()
    )


def _json(record, rows):
    plain = {**record, "created": f"{record['created'].isoformat()}Z"}
    text = json.dumps({"release": plain, "rows": list(rows)}, ensure_ascii=False, allow_nan=False, indent=1)
    return (text + "\n").encode("utf-8")
