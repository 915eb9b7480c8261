"""From the keys of a zone in a study file or process row to a Zone, with the rules between the keys."""

from collections.abc import Mapping
from typing import Any

from catalog.errors import InputError
from study import zones
from study.zones import Zone

FORMS = ("plus_minus", "diameter", "length", "tilt_deg")
_AXES = {"x": (1.0, 0.0, 0.0), "y": (0.0, 1.0, 0.0), "z": (0.0, 0.0, 1.0)}
_MOST_MM, _MOST_DEG = 100.0, 30.0


class ZoneError(InputError):
    """The keys of a zone do not go together."""


def parse_zone(entry: Mapping[str, Any], *, process: str | None = None) -> Zone:
    """Zone of the given keys (None counts as left out); numbers in mm, `tilt_deg` in degrees.

    Raises ZoneError with the rule, the value and the remedy; the caller names file and key.
    """
    given = {key: value for key, value in entry.items() if value is not None}
    form, half = _form(given)
    zone = Zone(
        form,
        half,
        axis=_axis(given["axis"]) if form == "cylinder" else None,
        process=process,
        shift=_shift(given.get("shift", 0.0), zones.SCALARS[form]),
        **_law(given),
    )
    _check_inspected(zone)
    return zone


def _form(given: Mapping[str, Any]) -> tuple[str, tuple[float, ...]]:
    chosen = [key for key in FORMS if key in given]
    if len(chosen) != 1:
        said = " and ".join(chosen) if chosen else "none"
        raise ZoneError(f"a zone needs exactly one of {', '.join(FORMS)}; given: {said}")
    key = chosen[0]
    extra = [name for name in ("axis", "depth") if name in given]
    if key != "diameter" and extra:
        raise ZoneError(f"{extra[0]} belongs to a cylinder; give it with diameter, or leave it out")
    if len(extra) == 1:
        missing = "depth" if extra == ["axis"] else "axis"
        raise ZoneError(f"a cylinder needs diameter, axis and depth; {missing} is missing")
    if key == "plus_minus":
        return "box", _box(given[key])
    if key == "diameter":
        radius = _within(key, given[key]) / 2
        return ("cylinder", (radius, _within("depth", given["depth"]))) if extra else ("ball", (radius,))
    if key == "length":
        return "length", (_within(key, given[key]),)
    return "tilt", (_within(key, given[key], most=_MOST_DEG, unit="°"),)


def _box(value: Any) -> tuple[float, ...]:
    if isinstance(value, int | float):
        return (_within("plus_minus", value),) * 3
    if len(value) != 3 or any(not 0.0 <= v <= _MOST_MM for v in value) or not any(value):
        raise ZoneError(
            f"plus_minus = {list(value)} must be a number or three (x, y, z), each 0 to {_MOST_MM:g} mm and not all 0"
        )
    return tuple(float(v) for v in value)


def _within(key: str, value: Any, *, most: float = _MOST_MM, unit: str = " mm") -> float:
    if not isinstance(value, int | float) or not 0.0 < value <= most:
        raise ZoneError(f"{key} = {value} must be one number above 0 and at most {most:g}{unit}")
    return float(value)


def _axis(value: Any) -> tuple[float, float, float]:
    if isinstance(value, str):
        if value not in _AXES:
            raise ZoneError(f'axis = "{value}" must be "x", "y", "z" or three numbers in the car\'s axes')
        return _AXES[value]
    size = sum(v * v for v in value) ** 0.5 if len(value) == 3 else 0.0
    if not size > 1e-9:
        raise ZoneError(f"axis = {list(value)} must have three numbers that are not all 0")
    return tuple(v / size for v in value)


def _shift(value: Any, count: int) -> tuple[float, ...]:
    shift = (float(value),) * count if isinstance(value, int | float) else tuple(float(v) for v in value)
    if len(shift) != count or any(abs(v) > _MOST_MM for v in shift):
        numbers = {1: "one number", 2: "a number or two", 3: "a number or three"}[count]
        raise ZoneError(f"shift = {value} must be {numbers} here, each within ±{_MOST_MM:g}")
    return shift


def _law(given: Mapping[str, Any]) -> dict[str, Any]:
    distribution = given.get("distribution", "uniform")
    if distribution not in ("uniform", "normal"):
        raise ZoneError(f'distribution = "{distribution}" must be "uniform" or "normal"')
    if distribution == "uniform" and given.get("cp", 1.0) != 1.0:
        raise ZoneError(f'cp = {given["cp"]} goes with distribution = "normal"; add it, or leave cp out')
    cp = given.get("cp", 1.0)
    if not 0.1 <= cp <= 10.0:
        raise ZoneError(f"cp = {cp} must be 0.1 to 10 (1 leaves 99.73 % inside the zone)")
    return {"distribution": distribution, "cp": float(cp), "truncated": bool(given.get("truncated", False))}


def _check_inspected(zone: Zone) -> None:
    if not zone.truncated:
        return
    if any(zone.shift) and zone.form not in ("box", "length"):
        raise ZoneError(
            f"shift with truncated = true is possible for plus_minus and length only, not for a {zone.form}; "
            "leave one of the two out"
        )
    share = zones.accepted_share(zone)
    if share < 1e-4:
        raise ZoneError(
            f"with shift = {list(zone.shift)} only {share:.1g} of the pieces would pass inspection "
            "(truncated = true); lessen the shift or widen the zone"
        )
