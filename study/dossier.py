"""All that is known of a finished study, as plain data: what rankings are printed from and sheets are written from."""

from dataclasses import dataclass

from catalog import processes, queue, results, revisions
from catalog.errors import InputError
from catalog.store import Catalog
from study.assembly import corner_of
from study.build import BuildModel, build_model
from study.study_file import Study, parse_study
from study.tasks import stages_of


class NotFinished(InputError):
    """A study that has no results (yet)."""


@dataclass(frozen=True)
class Dossier:
    """study: facts (dict); asked: the Study; geometry: the record; tables: result tables; model: its sources; nominal: measures at design."""

    study: dict
    asked: Study
    geometry: object
    tables: dict[str, list[dict]]
    model: BuildModel
    nominal: dict

    @property
    def stages(self) -> tuple[str, ...]:
        return stages_of(self.asked)

    def of_stage(self, table: str, stage: str, measure_no: int | None = None) -> list[dict]:
        """Rows of a table at one stage, of one measure or of all."""
        return [
            row for row in self.tables[table]
            if row["stage"] == stage and (measure_no is None or row["measure_no"] == measure_no)
        ]  # fmt: skip


def load_dossier(catalog: Catalog, number: int) -> Dossier:
    """The dossier of a finished study. Raises StudyNotFound, NotFinished."""
    with catalog.read() as con:
        job = queue.get(con, number)
        if job.state != "done":
            why = f": {job.error}" if job.error else ""
            raise NotFinished(f"study {number} is {job.state}{why}; `holdtight work` runs what is queued")
        tables = results.load_results(con, number)
        revision = revisions.by_id(con, job.revision_id)
        geometry, nominal = revisions.load(con, revision), revisions.measures_of(con, revision)
        asked = kept_study(con, job)
    facts = tables.pop("study")[0] | {"created": job.created, "by": job.by, "finished": job.finished}
    hands = ("left",) if geometry.linkage == "solid-axle" else ("left", "right")
    model = build_model({hand: corner_of(geometry, hand) for hand in hands}, asked)
    return Dossier(facts, asked, geometry, tables, model, nominal)


def kept_study(con, job) -> Study:
    """The study of a job as it was queued: its processes stand for what they stood for then."""
    kept = processes.of_study(con, job.id)
    return parse_study(job.text, source=f"study {job.id}", processes=kept, looser=kept.looser)
