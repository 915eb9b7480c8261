"""An invented double-wishbone study in the form of the result tables: 16 sources, before and after
alignment."""

import math

import numpy as np

SOURCES = {
    "chassis.upper_front_pivot": "xyz",
    "chassis.upper_rear_pivot": "xyz",
    "chassis.lower_front_pivot": "xyz",
    "chassis.lower_rear_pivot": "xyz",
    "rack.tie_rod_inner": "xyz",
    "upright.upper_ball_joint": "xyz",
    "upright.lower_ball_joint": "xyz",
    "upright.tie_rod_outer": "xyz",
    "upright.wheel_centre": "xyz",
    "upright.hub_axis": "tilt",
    "upper_arm.upper_ball_joint": "xyz",
    "lower_arm.lower_ball_joint": "xyz",
    "tie_rod.length": "length",
    "alignment.ride_height": "length",
    "alignment.toe": "tilt",
    "alignment.camber": "tilt",
}
# measure, of, unit, nominal, sd before, sd after, limits, share pattern: the three leading sources and their
# shares
MEASURES = [
    (
        "roll_centre_height_mm",
        "roll_centre_height_mm",
        "mm",
        24.1,
        3.9,
        3.4,
        (18.0, 30.0),
        {
            "chassis.lower_front_pivot": 0.34,
            "chassis.lower_rear_pivot": 0.22,
            "chassis.upper_front_pivot": 0.205,
        },
    ),
    (
        "bump steer over 30 mm",
        "toe_deg",
        "deg",
        0.041,
        0.081,
        0.074,
        (0.0, 0.25),
        {"rack.tie_rod_inner": 0.58, "upright.tie_rod_outer": 0.24, "chassis.upper_rear_pivot": 0.06},
    ),
    (
        "camber_deg at bump 25, roll 1.5",
        "camber_deg",
        "deg",
        -1.37,
        0.29,
        0.052,
        None,
        {"alignment.camber": 0.41, "chassis.upper_front_pivot": 0.19, "chassis.upper_rear_pivot": 0.18},
    ),
    (
        "cross_camber_deg",
        "cross_camber_deg",
        "deg",
        0.0,
        0.41,
        0.071,
        (-0.15, 0.15),
        {"alignment.camber": 0.93, "alignment.toe": 0.03, "upright.hub_axis": 0.02},
    ),
]
AXLE = ("roll_centre", "cross", "track", "ackermann")
MORE = [
    "caster_deg",
    "scrub_radius_mm",
    "trail_mm",
    "anti_dive_pct",
    "ackermann_pct",
    "kingpin_deg",
    "track_mm",
    "steer_lift_mm",
]


def _measures(count: int) -> list[tuple]:
    rows = list(MEASURES)
    names = list(SOURCES)
    for index, key in enumerate(MORE):
        unit = key.rsplit("_", 1)[1]
        share = {names[(3 * index + step) % 13]: value for step, value in enumerate((0.45, 0.2, 0.12))}
        rows.append(
            (
                key,
                key,
                unit,
                10.0 + index,
                0.9,
                0.6,
                (8.0 + index, 12.0 + index) if index % 2 else None,
                share,
            )
        )
    return rows[:count]


def _shares(pattern: dict, rng: np.random.Generator, *, before: bool) -> dict[str, float]:
    rest = [name for name in SOURCES if name not in pattern]
    small = rng.dirichlet(np.full(len(rest), 0.4)) * max(0.0, 1.0 - sum(pattern.values()))
    shares = pattern | dict(zip(rest, small, strict=True))
    if before:
        shares = {
            name: value * rng.uniform(0.4, 1.5)
            for name, value in shares.items()
            if name not in ("alignment.toe", "alignment.camber")
        }
        total = sum(shares.values())
        shares = {name: value / total for name, value in shares.items()}
    return dict(sorted(shares.items(), key=lambda item: -item[1]))


def _ranking(number: int, measure: tuple, stage: str, rng: np.random.Generator) -> list[dict]:
    rows = []
    shares = _shares(measure[7], rng, before=stage == "before")
    for rank, (source, share) in enumerate(shares.items(), start=1):
        kind = SOURCES[source]
        axes = {"xyz": ["x", "y", "z"], "length": ["length"], "tilt": ["tilt_1", "tilt_2"]}[kind]
        if measure[1].startswith(AXLE):
            axes = [f"{side} {axis}" for side in ("left", "right") for axis in axes]
        scale = measure[5] * math.sqrt(share) / 0.4
        effect = [float(scale * w) for w in rng.normal(size=len(axes)) * np.resize([1.0, 0.4, 0.2], len(axes))[::-1]]
        half = 0.012 + 0.05 * share
        signed = measure[0] != "bump steer over 30 mm"
        rows.append(
            {
                "stage": stage,
                "measure_no": number,
                "measure": measure[0],
                "of": measure[1],
                "unit": measure[2],
                "source": source,
                "rank": rank,
                "st": share,
                "st_low": share - half,
                "st_high": share + half,
                "s1": share * 0.97,
                "s1_low": share * 0.97 - half,
                "s1_high": share * 0.97 + half,
                "linear_share": share * (0.55 if source == "upright.tie_rod_outer" else 1.01),
                "mu_star": None,
                "mu_star_low": None,
                "mu_star_high": None,
                "effect": effect if signed else None,
                "effect_axes": axes,
                "effect_unit": measure[2] + ("/deg" if kind == "tilt" else "/mm"),
                "effect_per_mm": math.hypot(*effect) if signed else None,
                "tied": rank > 1 and rank % 3 == 0,
                "verdict": None
                if measure[6] is None
                else "hold"
                if share > 0.15
                else "watch"
                if share > 0.05
                else "open",
            }
        )
    return rows


def _stats(number: int, measure: tuple, stage: str) -> dict:
    name, of, unit, nominal, before, after, limits, _ = measure
    sd = before if stage == "before" else after
    mean = nominal + 0.1 * sd
    z = {
        "q005": -2.576,
        "q025": -1.96,
        "q05": -1.645,
        "q25": -0.674,
        "q50": 0,
        "q75": 0.674,
        "q95": 1.645,
        "q975": 1.96,
        "q995": 2.576,
    }
    low, high = limits or (-math.inf, math.inf)
    good = 0.5 * (math.erf((high - mean) / sd / math.sqrt(2)) - math.erf((low - mean) / sd / math.sqrt(2)))
    return {
        "stage": stage,
        "measure_no": number,
        "measure": name,
        "of": of,
        "unit": unit,
        "side": "axle" if of.startswith(AXLE) else "left",
        "position": None,
        "nominal": nominal,
        "mean": mean,
        "sd": sd,
        "low": mean - 3.6 * sd,
        "high": mean + 3.6 * sd,
        **{key: mean + value * sd for key, value in z.items()},
        "limit_low": low,
        "limit_high": high,
        "good_share": good if limits else None,
        "good_low": good - 0.004 if limits else None,
        "good_high": min(good + 0.004, 1.0) if limits else None,
        "builds": 18432,
        "unassembled": 0,
        "rss": 2.8 * sd,
        "worst_case": 5.1 * sd,
    }


def _histogram(number: int, measure: tuple, stage: str, rng: np.random.Generator) -> list[dict]:
    sd = measure[4] if stage == "before" else measure[5]
    values = rng.normal(measure[3] + 0.1 * sd, sd, 18432)
    if measure[0].startswith("bump steer"):
        values = np.abs(values)
    counts, edges = np.histogram(values, bins=36)
    return [
        {"stage": stage, "measure_no": number, "left": float(a), "right": float(b), "count": int(c)}
        for a, b, c in zip(edges, edges[1:], counts, strict=False)
    ]


def _curves() -> list[dict]:
    rows = []
    shapes = {
        ("bump", "toe_deg"): (
            30,
            lambda x: 0.0006 * x + 0.00002 * x * x,
            lambda x: 0.02 + 0.0026 * abs(x),
            "deg",
        ),
        ("bump", "camber_deg"): (30, lambda x: -1 - 0.021 * x, lambda x: 0.05 + 0.0005 * abs(x), "deg"),
        ("roll", "camber_deg"): (3, lambda x: -1 + 0.62 * x, lambda x: 0.05 + 0.002 * abs(x), "deg"),
        ("rack", "ackermann_pct"): (30, lambda x: 44 + 0.2 * abs(x) if x else None, lambda x: 2.0, "pct"),
    }
    for (axis, key), (reach, nominal, band, unit) in shapes.items():
        for x in np.linspace(-reach, reach, 13):
            for side in ("axle",) if key.startswith("ack") else ("left", "right"):
                mid, half = nominal(float(x)), band(float(x))
                spread = (
                    dict.fromkeys(("q05", "q25", "q50", "q75", "q95"))
                    if mid is None
                    else {
                        "q05": mid - half,
                        "q25": mid - 0.41 * half,
                        "q50": mid,
                        "q75": mid + 0.41 * half,
                        "q95": mid + half,
                    }
                )
                rows.append(
                    {
                        "stage": "after",
                        "axis": axis,
                        "x": float(x),
                        "key": key,
                        "unit": unit,
                        "side": side,
                        "nominal": mid,
                        **spread,
                    }
                )
    return rows


def _demand() -> list[dict]:
    rows = []
    for name, by, sd, out in (("toe", "tie_rod", 0.62, 0.0), ("camber", "upper_arm", 1.1, 0.0041)):
        q = {
            "q005": -2.576,
            "q05": -1.645,
            "q25": -0.674,
            "q50": 0.0,
            "q75": 0.674,
            "q95": 1.645,
            "q995": 2.576,
        }
        rows.append(
            {
                "adjuster": name,
                "by": by,
                "unit": "mm",
                **{k: z * sd for k, z in q.items()},
                "low": -3.7 * sd,
                "high": 3.6 * sd,
                "ran_out_share": out,
            }
        )
    return rows


def _worst() -> list[dict]:
    rows = []
    for number, direction, value in ((0, "low", 11.9), (0, "high", 37.2), (1, "high", 0.41)):
        rows += [
            {
                "stage": "after",
                "measure_no": number,
                "direction": direction,
                "value": value,
                "source": source,
                "axis": axis,
                "error": error,
            }
            for source, axis, error in (
                ("chassis.lower_front_pivot", "z", -1.0),
                ("rack.tie_rod_inner", "z", 1.0),
                ("tie_rod.length", "length", 0.2),
                ("upright.hub_axis", "tilt_1", 0.05),
            )
        ]
    return rows


def tables(count: int = 4, *, seed: int = 5) -> dict[str, list[dict]]:
    """Result tables with `count` measures (1 to 12)."""
    rng = np.random.default_rng(seed)
    result: dict[str, list[dict]] = {
        "ranking": [],
        "stats": [],
        "histogram": [],
        "curves": _curves(),
        "demand": _demand(),
        "worst": _worst(),
        "correlations": [],
    }
    chosen = _measures(count)
    for number, measure in enumerate(chosen):
        for stage in ("before", "after"):
            result["ranking"] += _ranking(number, measure, stage, rng)
            result["stats"].append(_stats(number, measure, stage))
            result["histogram"] += _histogram(number, measure, stage, rng)
    for index, first in enumerate(chosen):
        result["correlations"] += [
            {
                "stage": "after",
                "measure_a": first[0],
                "measure_b": second[0],
                "r": float(rng.uniform(-0.9, 0.9)),
            }
            for second in chosen[index + 1 :]
        ]
    return result
