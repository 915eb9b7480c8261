"""Two issues of a drawing side by side: what was opened, what closed, what else changed, and why. Rows in and out."""

import itertools
import math
from collections.abc import Mapping, Sequence

import numpy as np

OPENED, CLOSED, UNCHANGED, RESHAPED, NEW, DROPPED = "opened", "closed", "unchanged", "reshaped", "new", "dropped"
CHANGES = (OPENED, CLOSED, RESHAPED, NEW, DROPPED, UNCHANGED)
FIELDS = ("callout", "zone", "process", "verdict", "figures", "reason")
_ALSO = (("datums", "datums"), ("process", "process"), ("condition", "condition"), ("checked", "checked"), ("distribution", "errors"))  # fmt: skip
_RIM = 360
_CLOSE = 1e-9


def compare(before: Sequence[Mapping], after: Sequence[Mapping]) -> list[dict]:
    """One row a feature of either issue, in the order of the later one, dropped features last.

    Keys: feature, name, change (one of CHANGES), factor (size of the zone over what it was, None where shapes differ),
    before and after (FIELDS, None where the feature is not there), also (texts of what else changed), why.
    """
    old, new = ({row["feature"]: row for row in rows} for rows in (before, after))
    names = [*new, *(name for name in old if name not in new)]
    return [_compared(name, old.get(name), new.get(name)) for name in names]


def change_of(old: Mapping | None, new: Mapping | None) -> str:
    """What became of one zone: opened where the new holds all of the old and more, closed the other way round."""
    if old is None or new is None:
        return NEW if old is None else DROPPED
    wider, tighter = holds(new, old), holds(old, new)
    if wider and tighter:
        return UNCHANGED
    return OPENED if wider else CLOSED if tighter else RESHAPED


def holds(outer: Mapping, inner: Mapping) -> bool:
    """Whether a zone lies wholly within another; both about the true position (form, half, axis)."""
    if {outer["form"], inner["form"]} & {"length", "tilt"}:
        return outer["form"] == inner["form"] and inner["half"][0] <= outer["half"][0] * (1 + _CLOSE)
    if inner["form"] == "ball":
        return inner["half"][0] <= _inscribed(outer) * (1 + _CLOSE)
    return all(_inside(outer, point) for point in _outline(inner))


def _compared(name, old, new):
    latest = new or old
    return {
        "feature": name, "name": latest["name"], "change": change_of(old, new), "factor": _factor(old, new),
        "before": {key: old[key] for key in FIELDS} if old else None, "after": {key: new[key] for key in FIELDS} if new else None,
        "also": _also(old, new) if old and new else [], "why": new["reason"] if new else "",
    }  # fmt: skip


def _factor(old, new):
    if not old or not new or old["form"] != new["form"] or old["axis"] != new["axis"]:
        return None
    ratios = [b / a for a, b in zip(old["half"], new["half"], strict=True) if a]
    alike = len(ratios) == len(old["half"]) and max(ratios) - min(ratios) <= _CLOSE * max(ratios)
    return ratios[0] if alike else None


def _also(old, new):
    found = [f"{word}: {old[key] or 'none'} → {new[key] or 'none'}" for key, word in _ALSO if old[key] != new[key]]
    jigs = [row["evidence"].get("jig") if row["kind"] == "point" else None for row in (old, new)]
    if jigs[0] != jigs[1]:
        found.append(f"measured {_within(jigs[0])} → {_within(jigs[1])}")
    moved = [(new[f"{axis}_mm"], old[f"{axis}_mm"]) for axis in "xyz"]
    if all(value is not None for pair in moved for value in pair):
        steps = [b - a for b, a in moved]
        if max(map(abs, steps)) > 0.0005:
            found.append("true position moved by " + ", ".join(f"{axis} {step:+.3g} mm" for axis, step in zip("xyz", steps, strict=True) if abs(step) > 0.0005))  # fmt: skip
    if old["length_mm"] and new["length_mm"] and abs(old["length_mm"] - new["length_mm"]) > 0.0005:
        found.append(f"true length {old['length_mm']:.3f} → {new['length_mm']:.3f} mm")
    if old["verdict"] != new["verdict"]:
        found.append(f"verdict: {old['verdict'] or 'none'} → {new['verdict'] or 'none'}")
    return found


def _within(jig):
    return f"within the pattern of jig {jig}" if jig else "from the datums"


def _inscribed(zone):
    """Radius of the largest ball in a zone."""
    return min(zone["half"])


def _outline(zone):
    """Points whose hull is the zone: corners of a box, both rims of a cylinder."""
    if zone["form"] == "box":
        return [np.array(signs) * zone["half"] for signs in itertools.product((-1, 1), repeat=3)]
    radius, depth = zone["half"]
    along = np.array(zone["axis"])
    first = np.cross(along, np.eye(3)[int(np.argmin(np.abs(along)))])
    first /= np.linalg.norm(first)
    second = np.cross(along, first)
    turns = [2 * math.pi * k / _RIM for k in range(_RIM)]
    return [radius * (math.cos(t) * first + math.sin(t) * second) + end * depth * along for t in turns for end in (-1, 1)]


def _inside(zone, point):
    room = 1 + _CLOSE
    if zone["form"] == "ball":
        return np.linalg.norm(point) <= zone["half"][0] * room
    if zone["form"] == "box":
        return bool(np.all(np.abs(point) <= np.array(zone["half"]) * room + 1e-12))
    radius, depth = zone["half"]
    along = np.array(zone["axis"])
    height = point @ along
    return abs(height) <= depth * room and np.linalg.norm(point - height * along) <= radius * room
