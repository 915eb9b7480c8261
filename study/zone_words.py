"""Zones and their laws in the words of a drawing."""

import numpy as np


def zone_text(zone, unit="mm") -> str:
    """A zone as it would stand on a drawing."""
    half = zone.half
    if zone.form == "ball":
        return f"S⌀{2 * half[0]:g} mm"
    if zone.form == "cylinder":
        return f"⌀{2 * half[0]:g} mm about {_axis_text(zone.axis)}, ±{half[1]:g} mm along it"
    if zone.form == "tilt":
        return f"{half[0]:g}° half angle"
    if len(set(half)) == 1:
        return f"±{half[0]:g} {unit}" + (" in x, y, z" if zone.form == "box" else "")
    return "±" + " / ".join(f"{h:g}" for h in half) + f" {unit} in x / y / z"


def _axis_text(axis):
    for name, unit in zip("xyz", np.eye(3), strict=True):
        if np.allclose(axis, unit):
            return name
    return "(" + ", ".join(f"{a:.3f}" for a in axis) + ")"


def law_text(zone) -> str:
    """The distribution in words."""
    text = "uniform over the zone" if zone.distribution == "uniform" else f"normal, cp {zone.cp:g}"
    if zone.truncated:
        text += ", inspected"
    if any(zone.shift):
        text += ", mean " + "/".join(f"{s:+g}" for s in zone.shift)
    return text
