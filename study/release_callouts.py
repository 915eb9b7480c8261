"""Zones as tolerances on a drawing, in the words and symbols of ISO 1101 where it has them.

What the study knows and what the drawing says:

- ball: position of a point, zone a sphere: `⌖ S⌀0.6 | A | B | C`
- box: ISO 1101 has no such zone for a point: coordinate tolerances along named axes, `x ±1, y ±1, z ±1 mm`; the same
  as position tolerances of width 2a, one along each axis
- cylinder: position, zone a cylinder along its axis, and a coordinate tolerance along it
- length: ± on the distance of two joint centres
- tilt: angularity of an axis. ISO 1101 gives orientation as a width in mm, never as an angle: a cone of half angle θ
  is a cylinder of diameter 2·L·tan θ over L = 100 mm, written `∠ ⌀0.17/100`
- pivots of one jig: their own zones hold within the pattern (CZ, ISO 5458), without datums; the jig's shift and turn
  are the place of the pattern to the datums
"""

import math
import re
from dataclasses import dataclass

import numpy as np

SYMBOLS = {"position": "⌖", "angularity": "∠"}
OVER_MM = 100.0  # length over which an angularity is given
_LETTERS = re.compile(r"[A-Z]{1,2}(?:-[A-Z]{1,2})?(?:\s*[|,]\s*[A-Z]{1,2}(?:-[A-Z]{1,2})?)*(?=\s*(?:[:;(]|$))")


@dataclass(frozen=True, slots=True)
class Line:
    """One line of a callout: a tolerance frame (symbol, zone, datums) with words behind it, or words alone."""

    symbol: str | None
    zone: str
    datums: tuple[str, ...]
    words: str = ""

    @property
    def text(self) -> str:
        head = f"{SYMBOLS[self.symbol]} {self.zone}" if self.symbol else self.zone
        return " | ".join([head, *self.datums]) + (f" {self.words}" if self.words else "")


def callout(row: dict) -> tuple[Line, ...]:
    """The lines of a released row (form, half, axis, kind, datums, length_mm, right_length_mm, evidence)."""
    datums = () if row["evidence"].get("jig") and row["kind"] == "point" else datum_letters(row["datums"])
    return _FORMS[row["form"]](row, datums)


def callout_text(row: dict) -> str:
    return "; ".join(line.text for line in callout(row))


def datum_letters(text: str) -> tuple[str, ...]:
    """The datum letters at the start of a text: `A|B|C`, `A | B`, `A, B: table, centre plane`; () where it is words."""
    found = _LETTERS.match(text.strip())
    return tuple(re.split(r"\s*[|,]\s*", found[0])) if found else ()


def axis_words(axis) -> str:
    """`x`, `y`, `z`, or the direction's three numbers."""
    for name, unit in zip("xyz", np.eye(3), strict=True):
        if np.allclose(np.abs(axis), unit):
            return name
    return "(" + ", ".join(f"{a:.3f}" for a in axis) + ")"


def _ball(row, datums):
    return (Line("position", f"S⌀{2 * row['half'][0]:g}{_pattern(row)}", datums),)


def _box(row, datums):
    if row["evidence"].get("turn"):
        turns = ", ".join(f"{a} ±{h:g}°" for a, h in zip("xyz", row["half"], strict=True) if h)
        return (Line(None, f"turned about {turns}", datums),)
    parts = [f"{a} ±{h:g}" for a, h in zip("xyz", row["half"], strict=True) if h]
    return (Line(None, f"{', '.join(parts)} mm{_pattern(row)}", datums),)


def _cylinder(row, datums):
    radius, depth = row["half"]
    axis = axis_words(row["axis"])
    across = Line("position", f"⌀{2 * radius:g}{_pattern(row)}", datums, f"across {axis}")
    return (across, Line(None, f"±{depth:g} mm along {axis}", ()))


def _length(row, datums):
    lengths = [row["length_mm"], row["right_length_mm"]]
    shown = " / ".join(f"{length:.2f}" for length in lengths if length is not None)
    return (Line(None, f"{shown} ±{row['half'][0]:g} mm", ()),)


def _tilt(row, datums):
    angle = row["half"][0]
    width = 2 * OVER_MM * math.tan(math.radians(angle))
    return (Line("angularity", f"⌀{_down(width)}/{OVER_MM:g}", datums, f"(within {angle:g}° of its direction)"),)


def _down(width):
    """Three figures, never more than the width itself."""
    step = 10.0 ** (math.floor(math.log10(width)) - 2)
    return f"{math.floor(width / step * (1 + 1e-12)) * step:.6g}"


def _pattern(row):
    return " CZ" if row["evidence"].get("jig") and row["kind"] == "point" else ""


_FORMS = {"ball": _ball, "box": _box, "cylinder": _cylinder, "length": _length, "tilt": _tilt}
