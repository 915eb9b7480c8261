"""Small studies of the demo geometry and of the textbook corner, for tests of whole studies."""

from pathlib import Path

from catalog.geometry_file import parse_geometry, read_geometry
from study.study_file import parse_study
from study.tabulate import tables
from study.tasks import StudyWork

ROOT = Path(__file__).parents[2]
DEMO = ROOT / "studies" / "front-wishbone.toml"
CORNER = ROOT / "tests" / "references" / "spatial-corner.toml"
CHASSIS = {"chassis.*": "{ plus_minus = 1.0 }"}
TOE = {"toe": '{ by = "tie_rod", within_deg = 0.02 }'}


def study_text(
    *measures: str,
    method="linear",
    size: int | None = None,
    seed=1,
    sides="mirrored",
    errors: dict | None = None,
    alignment: dict | None = None,
    geometry="front-wishbone.toml",
    title="small",
) -> str:
    """A study file. measures: a key, or the lines of an entry."""
    head = f'title = "{title}"\ngeometry = "{geometry}"\nmethod = "{method}"\nseed = {seed}\nsides = "{sides}"\n'
    head += f"size = {size}\n" if size else ""
    lines = ["[errors]", *(f'"{name}" = {zone}' for name, zone in (errors or CHASSIS).items())]
    if alignment is not None:
        lines += ["[alignment]", *(f"{name} = {entry}" for name, entry in alignment.items())]
    for measure in measures:
        lines += ["[[measures]]", measure if "=" in measure else f'of = "{measure}"']
    return head + "\n".join(lines) + "\n"


def small_study(*measures: str, **asked):
    return parse_study(study_text(*measures, **asked), source="small.toml")


def demo():
    return read_geometry(DEMO)


def corner(*, build="legs"):
    """The textbook corner, both arms built alike."""
    text = CORNER.read_text(encoding="utf-8")
    return parse_geometry(text.replace('build = "legs"', f'build = "{build}"'), source=CORNER.name)


def run_study(geometry, study) -> tuple[dict[str, list[dict]], dict]:
    """(result tables, facts) of a study, its tasks done one after the other."""
    work = StudyWork(geometry, study)
    return tables(work, {task.number: work.run(task) for task in work.tasks})


def rows_of(found, table: str, *, measure_no=0, stage="before") -> list[dict]:
    """Rows of one measure at one stage."""
    return [row for row in found[0][table] if (row["measure_no"], row["stage"]) == (measure_no, stage)]


def effects_of(found, **where) -> dict[str, list[float] | None]:
    """Signed effects by source."""
    return {row["source"]: row["effect"] for row in rows_of(found, "ranking", **where)}
