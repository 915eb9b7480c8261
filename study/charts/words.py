"""Numbers, units and names as an engineer reads them; for charts and sheet. Plain text, not escaped."""

import math
from collections.abc import Iterable, Mapping

NBSP = "\u00a0"
NONE = "–"
MINUS = "\u2212"

_UNITS = {"deg": "°", "deg/mm": "°/mm", "deg/deg": "°/°", "pct": "%", "percent": "%", "1": ""}
_ENDINGS = ("_deg_per_mm", "_mm_per_mm", "_deg_per_deg", "_per_m", "_deg", "_mm", "_pct")
_WHOLE_PART = {"length"}


def finite(value) -> float | None:
    """The value as a float, or None when it is missing, NaN or infinite."""
    if value is None or isinstance(value, str):
        return None
    value = float(value)
    return value if math.isfinite(value) else None


def number(value, digits: int = 3, *, sign: bool = False) -> str:
    """`value` to `digits` significant digits, without an exponent where that stays readable."""
    value = finite(value)
    if value is None:
        return NONE
    if value == 0:
        return "0"
    magnitude = math.floor(math.log10(abs(value)))
    places = max(0, digits - 1 - magnitude)
    text = f"{abs(value):.{digits - 1}e}" if places > 8 else f"{abs(value):.{places}f}"
    if not text.strip("0."):
        return "0"
    return (MINUS if value < 0 else "+" if sign else "") + text


def aligned(values: Iterable, digits: int = 4) -> list[str]:
    """Several values of one quantity with the same number of decimals, set by the largest of them."""
    kept = [finite(value) for value in values]
    largest = max((abs(value) for value in kept if value is not None), default=0.0)
    places = 0 if largest == 0 else min(8, max(0, digits - 1 - math.floor(math.log10(largest))))
    texts = [NONE if value is None else f"{value:.{places}f}" for value in kept]
    return [text.replace("-", MINUS) if text.strip("-0.") else text.lstrip("-") for text in texts]


def unit_text(unit: str | None) -> str:
    return _UNITS.get(unit or "", unit or "")


def quantity(value, unit: str | None, digits: int = 3, *, sign: bool = False) -> str:
    """A number with its unit; a degree sign stands without a gap."""
    text, unit = number(value, digits, sign=sign), unit_text(unit)
    if text == NONE or not unit:
        return text
    return text + ("" if unit.startswith("°") and len(unit) == 1 else NBSP) + unit


def percent(value) -> str:
    """A share (0 to 1) as a percentage; tiny ones as `<1 %`."""
    value = finite(value)
    if value is None:
        return NONE
    if 0 < value < 0.01:
        return f"<1{NBSP}%"
    return f"{max(value, 0.0) * 100:.0f}{NBSP}%"


def good_percent(value) -> str:
    """A share of good builds: never rounded up to a hundred."""
    value = finite(value)
    if value is None:
        return NONE
    if value in (0.0, 1.0):
        return f"{value * 100:.0f}{NBSP}%"
    shown = math.floor(value * 1000) / 10
    return f"{shown:.1f}{NBSP}%"


def source_name(source: str) -> str:
    """`chassis.lower_front_pivot` as `lower front pivot (chassis)`; `tie_rod.length` as `tie rod length`."""
    part, _, feature = str(source).partition(".")
    part, feature = part.replace("_", " "), feature.replace("_", " ")
    if not feature:
        return part
    return f"{part} {feature}" if feature in _WHOLE_PART else f"{feature} ({part})"


def measure_name(row: Mapping) -> str:
    """A measure's name for people: its key, where the name starts with one, becomes words."""
    name = str(row.get("measure") or "")
    key = str(row.get("of") or name.split(" ")[0])
    if name.startswith(key) and "_" in key:
        name = key_name(key) + name[len(key) :]
    return name[:1].upper() + name[1:]


def key_name(key: str) -> str:
    for ending in _ENDINGS:
        if key.endswith(ending):
            key = key[: -len(ending)]
            break
    return key.replace("_", " ")


def limits_text(row: Mapping) -> str:
    """`18 to 30 mm`, `at most 0.25°`, `at least 1 mm`, or an empty string without limits."""
    low, high = finite(row.get("limit_low")), finite(row.get("limit_high"))
    unit = unit_text(row.get("unit"))
    tail = unit if unit == "°" or not unit else NBSP + unit
    if low is None and high is None:
        return ""
    if low is None:
        return f"at most {given(high)}{tail}"
    if high is None:
        return f"at least {given(low)}{tail}"
    return f"{given(low)} to {given(high)}{tail}"


def given(value: float) -> str:
    """A number as someone wrote it, without trailing zeros."""
    return f"{value:g}".replace("-", MINUS)


def effect_phrase(row: Mapping) -> str:
    """The largest signed effect in words: `+1 mm z → +1.92 mm`; empty when there is none."""
    effects = [finite(value) for value in (row.get("effect") or [])]
    known = [index for index, value in enumerate(effects) if value is not None]
    if not known:
        return ""
    index = max(known, key=lambda i: abs(effects[i]))
    return f"{step_text(row, index)} → {quantity(effects[index], row.get('unit'), sign=True)}"


def effects_text(row: Mapping) -> str:
    """All signed effects of a source: `x +0.02, y −0.31, z +1.92 mm per mm`; what is but rounding is 0."""
    effects = [finite(value) for value in (row.get("effect") or [])]
    largest = max((abs(value) for value in effects if value is not None), default=0.0)
    texts = [
        f"{_axis(row, index)} {number(value if abs(value) > 1e-5 * largest else 0.0, sign=True)}".strip()
        for index, value in enumerate(effects)
        if value is not None
    ]
    unit = unit_text(row.get("unit"))
    gap = "" if unit == "°" else NBSP
    return f"{', '.join(texts)}{gap}{unit} per {_step_unit(row)}" if texts else ""


def step_text(row: Mapping, index: int) -> str:
    """The unit step that an effect belongs to: `+1 mm z`, `+1 mm longer`, `+1° tilt 1`."""
    unit = _step_unit(row)
    return f"+1{unit if unit == '°' else NBSP + unit} {_axis(row, index)}".rstrip()


def _step_unit(row: Mapping) -> str:
    angle = any("tilt" in str(axis) for axis in row.get("effect_axes") or [])
    return "°" if angle or str(row.get("effect_unit") or "").endswith(("/deg", "per deg", "per °")) else "mm"


def _axis(row: Mapping, index: int) -> str:
    axes = list(row.get("effect_axes") or [])
    axis = str(axes[index]).replace("_", " ") if index < len(axes) else ""
    if str(row.get("source")).startswith("alignment."):
        side = axis.split(" ")[0]
        return f"{side} off" if side in ("left", "right") else "off"
    return axis.replace("length", "longer")
