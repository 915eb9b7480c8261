"""A study's work as plain text and back: what other processes and machines are given to do tasks of it."""

import json
from functools import lru_cache

from catalog import processes
from catalog.geometry import from_record, to_record
from study.study_file import Study, parse_study
from study.tasks import StudyWork


def to_plain(geometry, study: Study) -> str:
    """All that a study's tasks depend on, as JSON."""
    geometry_parts = {"record": to_record(geometry), "text": geometry.text}
    resolved = {name: dict(entry) for name, entry in study.resolved.items()}
    return json.dumps({"geometry": geometry_parts, "study": study.text, "processes": resolved})


def work_of(geometry, study: Study) -> StudyWork:
    """The work of a study, made once for those that check it and those that do it."""
    return from_plain(to_plain(geometry, study))


@lru_cache(maxsize=1)
def from_plain(plain: str) -> StudyWork:
    """The work of a study from what to_plain gave."""
    parts = json.loads(plain)
    kept = {name: (entry["zone"], entry["looser"]) for name, entry in parts["processes"].items()}
    book = processes.KeptBook(0, kept)
    study = parse_study(parts["study"], source="study", processes=book, looser=book.looser)
    return StudyWork(from_record(parts["geometry"]["record"], text=parts["geometry"]["text"]), study)
