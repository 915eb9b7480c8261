"""What a release freezes, taken from a finished study: the release itself and one row a feature of the part. Pure data."""

from collections.abc import Sequence
from dataclasses import dataclass
from datetime import datetime

import numpy as np

from catalog.errors import InputError
from study.assembly import corner_of
from study.release_callouts import axis_words, callout_text
from study.release_evidence import evidence, facts, figures_text, verdict_of, warnings
from study.release_words import assigned, clean_all, said_of_all
from study.zone_words import law_text, zone_text

JIG, BANDS = "jig", "alignment"


class ReleasePartError(InputError):
    """A part that the study has no tolerance for."""


@dataclass(frozen=True)
class Said:
    """What the one who releases says: texts by option, each TEXT or FEATURE=TEXT."""

    datums: Sequence[str] = ()
    condition: Sequence[str] = ()
    checked: Sequence[str] = ()
    reason: Sequence[str] = ()


@dataclass(frozen=True)
class Head:
    """The release itself: drawing, issue, part, who, when (UTC), and what it takes the place of.

    revision_id, result_hash: of the study; newest: NAME@REVISION of its geometry now; version: of the program.
    """

    drawing: str
    issue: str
    part: str
    by: str
    created: datetime
    revision_id: int
    result_hash: str | None
    newest: str
    version: str
    supersedes: int | None = None
    supersedes_issue: str | None = None
    supersedes_hash: str | None = None


def parts_of(dossier) -> dict[str, int]:
    """The parts of a study and how many of their features have a zone; a jig belongs to the chassis."""
    found: dict[str, int] = {}
    for name in [source.name for source in dossier.model.sources] + list(dossier.model.perfect):
        part = part_of(name)
        if part != BANDS:
            found[part] = found.get(part, 0) + (name not in dossier.model.perfect)
    return found


def checked_part(dossier, part: str | None) -> str:
    """The part, if the study has tolerances of it. Raises ReleasePartError, which lists the parts."""
    found = parts_of(dossier)
    if part and found.get(part):
        return part
    listed = ", ".join(f"{name} ({count})" for name, count in found.items() if count)
    number = dossier.study["id"]
    if part in found:
        raise ReleasePartError(
            f"--part {part}: study {number} holds every feature of it perfect, so it says nothing of their tolerances;"
            f" it has tolerances for {listed}"
        )
    given = "is missing" if not part else "is no part of its geometry"
    shown = "--part" if not part else f"--part {clean_all(part)!r}"
    raise ReleasePartError(f"{shown}: {given}; a drawing is of one part, study {number} has tolerances for {listed}")


def draft(dossier, head: Head, said: Said) -> tuple[dict, list[dict]]:
    """(the release, its rows) as columns of the catalog's tables. Raises ReleasePartError, ReleaseTextError."""
    checked_part(dossier, head.part)
    rows, told = _rows(dossier, head.part, said), facts(dossier)
    uncovered = [name for name in dossier.model.perfect if part_of(name) == head.part]
    record = {
        "drawing": head.drawing, "issue": head.issue, "part": head.part, "study_id": dossier.study["id"],
        "revision_id": head.revision_id, "geometry": dossier.study["geometry"], "title": dossier.study["title"],
        "reason": said_of_all("--reason", said.reason), "by_whom": head.by, "created": head.created, "supersedes": head.supersedes,
        "supersedes_hash": head.supersedes_hash, "uncovered": uncovered, "warnings": warnings(dossier, told, newest=head.newest, rows=rows),
        "facts": told | {"supersedes_issue": head.supersedes_issue}, "result_hash": head.result_hash, "version": head.version,
    }  # fmt: skip
    return clean_all(record), clean_all(rows)


def part_of(name: str) -> str:
    """The part whose drawing a source stands on."""
    part = name.partition(".")[0]
    return "chassis" if part == JIG else part


def _rows(dossier, part, said):
    sources = [source for source in dossier.model.sources if part_of(source.name) == part]
    names = [source.name for source in sources]
    texts = {
        option: assigned(f"--{option}", given, names)
        for option, given in (("condition", said.condition), ("check", said.checked), ("reason", said.reason))
    }
    datums = assigned("--datums", said.datums, names)
    rows = []
    for place, source in enumerate(sources, start=1):
        row = {"place": place, "feature": source.name} | _feature(dossier, source) | _zone(source)
        row |= {"condition": texts["condition"][source.name], "checked": texts["check"][source.name]}
        row |= {"reason": texts["reason"][source.name], "evidence": evidence(dossier, source)}
        needs = source.zone.form != "length"
        row["datums"] = (datums[source.name] or datums_of(dossier.geometry, source.name)) if needs else ""
        row["verdict"], row["figures"] = verdict_of(row["evidence"]), figures_text(row["evidence"])
        row["remark"] = "; ".join(_remarks(dossier, source))
        rows.append(row | {"callout": callout_text(row)})
    return rows


# --- the feature on the drawing


def _feature(dossier, source) -> dict:
    """Name, kind and true position (or length) of a source."""
    geometry, feature = dossier.geometry, source.name.partition(".")[2]
    kind = JIG if source.name.startswith(f"{JIG}.") else source.kind
    row = dict.fromkeys(("x_mm", "y_mm", "z_mm", "right_x_mm", "right_y_mm", "right_z_mm", "length_mm"))
    row |= {"right_length_mm": None, "kind": kind, "name": _name(kind, feature), "shop_name": None}
    if kind == "length":
        left, right = (float(corner_of(geometry, hand).features[source.name].nominal) for hand in ("left", "right"))
        return row | {"length_mm": left, "right_length_mm": right if abs(right - left) > 1e-6 else None}
    row["shop_name"] = geometry.shop_names.get(feature)
    places = _places(geometry, feature) if kind == "point" else None
    if places:
        left, right = places
        row |= dict(zip(("x_mm", "y_mm", "z_mm"), left, strict=True))
        if right:
            row |= dict(zip(("right_x_mm", "right_y_mm", "right_z_mm"), right, strict=True))
    return row


def _name(kind, feature):
    if kind != JIG:
        return "mount, both ends together" if feature == "mount" else feature.replace("_", " ")
    name, turn, _ = feature.partition(".turn")
    return f"jig {name}: {'turn' if turn else 'shift'} of its pattern"


def _places(geometry, feature):
    """(left, right) positions in the car's axes, right None where it is the mirror image; None for what is no point."""
    if feature.startswith("wheel_centre"):
        if feature != "wheel_centre":
            return getattr(geometry, feature.rpartition("_")[2]).wheel.centre, None
        left, right = geometry.left.wheel.centre, geometry.right.wheel.centre
    elif feature in geometry.left.points:
        left, right = geometry.left.points[feature], geometry.right.points[feature]
    else:
        return None
    same = geometry.linkage == "solid-axle" or np.allclose(right, np.array(left) * (1, -1, 1), atol=1e-9)
    return tuple(left), None if same else tuple(right)


def datums_of(geometry, source: str) -> str:
    """What the geometry file says a feature is measured from: of its point, else of all."""
    point = source.partition(".")[2]
    known = {*geometry.left.points, "wheel_centre", "all"}
    lines = [line.partition(": ") for line in geometry.datums.splitlines()]
    if not lines or any(name not in known or not colon for name, colon, _ in lines):
        return geometry.datums
    said = {name: text for name, _, text in lines}
    return said.get(point, said.get("all", ""))


def _zone(source) -> dict:
    zone = source.zone
    return {
        "form": zone.form, "half": [float(h) for h in zone.half],
        "axis": None if zone.axis is None else [float(a) for a in zone.axis], "zone": zone_text(zone, source.unit),
        "distribution": law_text(zone), "process": zone.process,
    }  # fmt: skip


def _remarks(dossier, source):
    zone, name = source.zone, source.name
    jig = next((jig for jig in dossier.asked.jigs if name in jig.pivots), None)
    if jig:
        yield f"within the pattern of jig {jig.name}"
    if name.startswith(f"{JIG}."):
        own = next(j for j in dossier.asked.jigs if name in (f"{JIG}.{j.name}", f"{JIG}.{j.name}.turn"))
        pivots = ", ".join(pivot.partition(".")[2].replace("_", " ") for pivot in own.pivots)
        yield f"one for {pivots}; " + ("one jig for all cars" if own.varies == "once" else "varies from car to car")
    if zone.form == "box" and source.unit == "mm":
        perfect = [axis for axis, half in zip("xyz", zone.half, strict=True) if not half]
        if perfect:
            yield f"{' and '.join(perfect)} held perfect by the study"
    if zone.form == "cylinder" and axis_words(zone.axis) not in ("x", "y", "z"):
        yield "direction in the car's axes"
    if any(zone.shift):
        yield "the study drew errors about a mean off the true position (" + law_text(zone).partition("mean ")[2] + ")"
    yield from _of_part(dossier, source)


def _of_part(dossier, source):
    part, _, feature = source.name.partition(".")
    if feature.startswith("hub_axis"):
        yield "true direction: " + _wheel_angles(dossier.geometry, feature.removeprefix("hub_axis").strip("_"))
    if feature == "strut_axis":
        yield "true direction: from strut lower to strut top"
    if part in dossier.geometry.arms and source.kind == "point":
        yield "measured from the arm's own two bores"
    for adjuster in dossier.asked.alignment or ():
        if source.kind == "length" and (adjuster.by or "").removesuffix("_split") == part:
            yield f"re-set on the car for {adjuster.target.replace('_', ' ')}"


def _wheel_angles(geometry, side):
    """Camber and toe of a side, or of both where none is named and they differ."""
    angles = {
        hand: f"camber {getattr(geometry, hand).wheel.camber_deg:g}°, toe {getattr(geometry, hand).wheel.toe_deg:g}°"
        for hand in ("left", "right")
    }
    if side or angles["left"] == angles["right"]:
        return angles[side or "left"]
    return f"left {angles['left']}; right {angles['right']}"
