"""A study file (TOML) to a frozen Study: what to build, how to align it, what to measure."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from types import MappingProxyType
from typing import Any

from pydantic import ValidationError

from catalog.errors import InputError
from catalog.toml_text import parse_toml, read_text
from study import study_measures
from study.entry_errors import explain, one_line
from study.named_processes import Looser, NamedProcesses, Processes
from study.study_entries import JigEntry, LawEntry, StudyEntry, ZoneEntry
from study.study_measures import Measure
from study.zone_entries import ZoneError, parse_zone
from study.zones import Zone

_SIZES = {"linear": 4096, "worst": 1, "morris": 64, "sobol": 1024, "spread": 4096}
_SIZE_BOUNDS = {"morris": (4, 10_000), "sobol": (8, 2**20), "spread": (16, 10_000_000)}
_MARKS = frozenset("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789_-.*")


class StudyFileError(InputError):
    """A study file that cannot be read or breaks a rule."""


@dataclass(frozen=True, slots=True)
class Adjuster:
    """What the workshop re-sets.

    `band`: how far off it is left, a length zone in mm (ride_height) or degrees; `within`: its half width.
    `by`, `step_mm` and `range_mm` (±) are None for ride_height or where not given.
    """

    target: str
    by: str | None
    within: float
    step_mm: float | None
    range_mm: float | None
    band: Zone


@dataclass(frozen=True, slots=True)
class Jig:
    """Pivots located by one jig: a shift (mm) and turns about x, y, z (degrees) in common."""

    name: str
    pivots: tuple[str, ...]
    shift: Zone | None
    rotation: Zone | None
    varies: str


@dataclass(frozen=True, slots=True)
class Study:
    """A study as asked for.

    `errors`: (pattern, zone); `alignment`: in the workshop's order, None when nothing is re-set; `ladder`: zone of the
    next looser process by the name of a process; `resolved`: what the named processes stood for, as plain data.
    """

    title: str
    geometry: str
    method: str
    size: int
    seed: int
    sides: str
    errors: tuple[tuple[str, Zone], ...]
    alignment: tuple[Adjuster, ...] | None
    measures: tuple[Measure, ...]
    text: str
    wanted_share: float = 0.95
    cars: int | None = None
    jigs: tuple[Jig, ...] = ()
    ladder: Mapping[str, Zone] = field(default_factory=lambda: MappingProxyType({}))
    resolved: Mapping[str, Mapping[str, Any]] = field(default_factory=lambda: MappingProxyType({}))


def read_study(path: Path, *, processes: Processes | None = None, looser: Looser | None = None) -> Study:
    """Study of the file; processes and looser as in parse_study. Raises StudyFileError."""
    text = read_text(Path(path), error=StudyFileError)
    return parse_study(text, source=str(path), processes=processes, looser=looser)


def parse_study(
    text: str, *, source: str, processes: Processes | None = None, looser: Looser | None = None
) -> Study:
    """Study of the TOML text; `source` names it in errors. Raises StudyFileError.

    processes: name → keys of zone and law; looser: name → name of the next looser process, or None.
    """
    try:
        entry = StudyEntry.model_validate(parse_toml(text.removeprefix("\ufeff"), source=source, error=StudyFileError))
    except ValidationError as error:
        raise StudyFileError(explain(error, StudyEntry, source=source)) from None
    try:
        return _study(entry, text, NamedProcesses(processes, looser))
    except InputError as error:
        raise StudyFileError(one_line(f"{source}: {error}")) from None


def json_schema() -> dict[str, Any]:
    """JSON schema of a study file, for editors."""
    return StudyEntry.model_json_schema()


def _study(entry: StudyEntry, text: str, processes: NamedProcesses) -> Study:
    errors = tuple((_pattern(key), _zone(key, zone, processes)) for key, zone in entry.errors.items())
    jigs = tuple(_jig(name, jig, processes) for name, jig in entry.jigs.items())
    return Study(
        title=entry.title,
        geometry=entry.geometry,
        method=entry.method,
        size=_size(entry),
        seed=entry.seed,
        sides=entry.sides,
        errors=errors,
        alignment=_alignment(entry),
        measures=study_measures.measures(entry.measures, sides=entry.sides),
        text=text,
        wanted_share=entry.wanted_share,
        cars=entry.cars,
        jigs=jigs,
        ladder=MappingProxyType(processes.ladder()),
        resolved=MappingProxyType(processes.resolved),
    )


def _size(entry: StudyEntry) -> int:
    size = _SIZES[entry.method] if entry.size is None else entry.size
    low, high = _SIZE_BOUNDS.get(entry.method, (1, 10_000_000))
    if not low <= size <= high:
        raise StudyFileError(f'size = {size} must be {low} to {high} with method = "{entry.method}"')
    if entry.method == "sobol" and size & (size - 1):
        below = 1 << (size.bit_length() - 1)
        raise StudyFileError(f'size = {size} must be a power of two with method = "sobol"; take {below} or {2 * below}')
    return size


def _pattern(key: str) -> str:
    wrong = sorted(set(key) - _MARKS)
    if wrong or not key:
        raise StudyFileError(
            f'errors."{key}" has {" ".join(wrong) or "no letters"}; write PART.FEATURE, * for any letters'
        )
    return key


def _zone(key: str, entry: ZoneEntry, processes: NamedProcesses) -> Zone:
    try:
        return _checked_zone(entry.model_dump(exclude_none=True), processes)
    except InputError as error:
        raise StudyFileError(f'errors."{key}": {error}') from None


def _checked_zone(keys: dict[str, Any], processes: NamedProcesses) -> Zone:
    name = keys.pop("process", None)
    if name is None:
        return parse_zone(keys)
    beside = [key for key in keys if key != "shift"]
    if beside:
        raise ZoneError(f'process = "{name}" brings its own zone; leave out {", ".join(beside)}')
    return processes.zone(name, **keys)


def _law(entry: LawEntry) -> dict[str, Any]:
    return {"distribution": entry.distribution, "cp": entry.cp, "truncated": entry.truncated}


def _alignment(entry: StudyEntry) -> tuple[Adjuster, ...] | None:
    if entry.alignment is None:
        return None
    adjusters = []
    for target in ("ride_height", "toe", "camber", "caster"):
        given = getattr(entry.alignment, target)
        if given is not None:
            adjusters.append(_adjuster(target, given))
    if not adjusters:
        raise StudyFileError(
            "[alignment] names no adjuster; add ride_height, toe, camber or caster, or leave the table out"
        )
    _distinct_adjusters(adjusters)
    return tuple(adjusters)


def _distinct_adjusters(adjusters: list[Adjuster]) -> None:
    users: dict[str, str] = {}
    for adjuster in adjusters:
        if adjuster.by in users:
            raise StudyFileError(
                f'alignment.{adjuster.target}: by = "{adjuster.by}" already sets {users[adjuster.by]}; one '
                "adjuster can set one angle only, name another"
            )
        if adjuster.by is not None:
            users[adjuster.by] = adjuster.target


def _adjuster(target: str, entry: Any) -> Adjuster:
    ride = target == "ride_height"
    within = float(entry.within_mm if ride else entry.within_deg)
    step, reach = (None, None) if ride else (entry.step_mm, entry.range_mm)
    if step is not None and reach is not None and step > reach:
        raise StudyFileError(
            f"alignment.{target}: step_mm = {step:g} is more than range_mm = {reach:g}, so no step could "
            "be taken; lessen the step or widen the range"
        )
    try:
        law = parse_zone({"length": within or 1.0, **_law(entry)})
    except ZoneError as error:
        raise StudyFileError(f"alignment.{target}: {error}") from None
    band = law if within else Zone("length", (0.0,))
    return Adjuster(target, None if ride else entry.by, within, step, reach, band)


def _jig(name: str, entry: JigEntry, processes: NamedProcesses) -> Jig:
    keys = entry.model_dump(exclude_none=True, exclude={"pivots", "varies", "tilt_deg"})
    turned = entry.tilt_deg is not None
    shifted = any(key in keys for key in ("plus_minus", "diameter", "process"))
    try:
        if not turned and not shifted:
            raise ZoneError("a jig needs plus_minus, diameter, process or tilt_deg, else it moves nothing")
        if len(set(entry.pivots)) < len(entry.pivots):
            raise ZoneError("pivots names a pivot twice; name each once")
        shift = _checked_zone(keys, processes) if shifted else None
        rotation = parse_zone({"plus_minus": entry.tilt_deg, **_law(entry)}) if turned else None
    except InputError as error:
        raise StudyFileError(f"jigs.{name}: {error}") from None
    return Jig(name, tuple(entry.pivots), shift, rotation, entry.varies)
