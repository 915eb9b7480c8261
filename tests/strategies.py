"""Random sane geometries as plain dicts (a "spec"), their TOML text, and the independent bodies of the same spec.

A spec has the keys of a geometry file, lengths in mm, ISO axes, left side; `links` maps names to (inner, outer).
"""

from __future__ import annotations

import copy
import itertools

import numpy as np
from hypothesis import strategies as st

from tests import independent_bodies as bodies

LINKAGES = ("double-wishbone", "strut", "five-link", "semi-trailing-arm", "solid-axle")
WAYS = {
    "forward": (1, 0, 0),
    "rear": (-1, 0, 0),
    "left": (0, 1, 0),
    "right": (0, -1, 0),
    "up": (0, 0, 1),
    "down": (0, 0, -1),
}
UNIT_MM = {"mm": 1.0, "m": 1000.0, "in": 25.4}
SPRING = {"spring_inner": [0.0, 400.0, 560.0], "spring_outer": [4.0, 575.0, 210.0]}

BASE = {
    "double-wishbone": {
        "points": {
            "upper_front_pivot": [130.0, 390.0, 420.0],
            "upper_rear_pivot": [-140.0, 400.0, 405.0],
            "upper_ball_joint": [-20.0, 640.0, 450.0],
            "lower_front_pivot": [160.0, 330.0, 160.0],
            "lower_rear_pivot": [-190.0, 335.0, 165.0],
            "lower_ball_joint": [5.0, 690.0, 150.0],
            "tie_rod_inner": [-120.0, 360.0, 215.0],
            "tie_rod_outer": [-135.0, 680.0, 212.0],
        },
        "wheel": {"centre": [0.0, 745.0, 295.0], "loaded_radius": 295.0},
    },
    "strut": {
        "points": {
            "strut_top": [-30.0, 560.0, 820.0],
            "strut_lower": [-8.0, 610.0, 330.0],
            "lower_front_pivot": [120.0, 340.0, 175.0],
            "lower_rear_pivot": [-200.0, 345.0, 180.0],
            "lower_ball_joint": [4.0, 700.0, 165.0],
            "tie_rod_inner": [-125.0, 355.0, 235.0],
            "tie_rod_outer": [-130.0, 685.0, 228.0],
        },
        "wheel": {"centre": [0.0, 752.0, 300.0], "loaded_radius": 300.0},
    },
    "five-link": {
        "links": {
            "upper_lead": ([130.0, 420.0, 455.0], [40.0, 655.0, 470.0]),
            "upper_trail": ([-170.0, 430.0, 440.0], [-30.0, 650.0, 468.0]),
            "lower_lead": ([190.0, 380.0, 190.0], [30.0, 690.0, 160.0]),
            "lower_trail": ([-40.0, 360.0, 175.0], [-25.0, 695.0, 158.0]),
            "toe": ([-185.0, 400.0, 250.0], [-160.0, 680.0, 240.0]),
        },
        "steer_link": "toe",
        "wheel": {"centre": [0.0, 750.0, 305.0], "loaded_radius": 305.0},
    },
    "semi-trailing-arm": {
        "points": {"hinge_inner": [360.0, 190.0, 285.0], "hinge_outer": [430.0, 560.0, 270.0]},
        "wheel": {"centre": [0.0, 735.0, 300.0], "loaded_radius": 300.0},
    },
    "solid-axle": {
        "links": {
            "lower_left": ([520.0, 430.0, 255.0], [20.0, 510.0, 215.0]),
            "lower_right": ([520.0, -430.0, 255.0], [20.0, -510.0, 215.0]),
            "upper": ([430.0, -60.0, 420.0], [10.0, -40.0, 455.0]),
            "panhard": ([-90.0, -470.0, 300.0], [-85.0, 490.0, 270.0]),
        },
        "wheel": {"centre": [0.0, 720.0, 310.0], "loaded_radius": 310.0},
    },
}
STEERS = ("double-wishbone", "strut", "five-link")


def spec_of(linkage: str, **changes) -> dict:
    """A plain member of a linkage's family; `changes` replace whole keys."""
    return {"name": f"some-{linkage}", "linkage": linkage} | copy.deepcopy(BASE[linkage]) | changes


def _moved(draw, point, most):
    shift = st.floats(-most, most, allow_nan=False).map(lambda x: round(x, 2))
    return [value + draw(shift) for value in point]


@st.composite
def specs(draw, linkage: str | None = None, most_mm: float = 18.0) -> dict:
    """A random geometry: every point of a plain one moved by up to `most_mm` along each axis."""
    linkage = linkage or draw(st.sampled_from(LINKAGES))
    spec = spec_of(linkage)
    for name, point in spec.get("points", {}).items():
        spec["points"][name] = _moved(draw, point, most_mm)
    for name, (inner, outer) in spec.get("links", {}).items():
        spec["links"][name] = (_moved(draw, inner, most_mm), _moved(draw, outer, most_mm))
    angle = st.floats(-2.5, 2.5).map(lambda x: round(x, 3))
    spec["wheel"] |= {"camber_deg": draw(angle), "toe_deg": draw(angle) / 3}
    spec["wheel"]["centre"] = _moved(draw, spec["wheel"]["centre"], 6.0)
    if draw(st.booleans()):
        spring = {name: _moved(draw, point, most_mm) for name, point in SPRING.items()}
        spec["points"] = spec.get("points", {}) | spring
        if linkage in ("double-wishbone", "strut") and draw(st.booleans()):
            spec["spring_on"] = "lower_arm"
    if linkage in ("double-wishbone", "strut"):
        build = st.tuples(st.sampled_from(["one-piece", "legs"]), st.sampled_from(["centre", "front", "rear"]))
        names = ("upper_arm", "lower_arm") if linkage == "double-wishbone" else ("lower_arm",)
        spec["arms"] = {name: draw(build) for name in names}
    spec["vehicle"] = draw(vehicles(linkage))
    return spec


@st.composite
def vehicles(draw, linkage: str) -> dict:
    axle = "rear" if linkage == "solid-axle" else draw(st.sampled_from(["front", "rear"]))
    share = st.one_of(st.floats(0.2, 1.0).map(lambda x: round(x, 3)), st.just(0.0))
    return {
        "axle": axle,
        "wheelbase": draw(st.floats(2200, 2800).map(round)),
        "cg_height": draw(st.floats(280, 600).map(round)),
        "brake_share": draw(share),
        "drive_share": draw(share),
        "brakes": draw(st.sampled_from(["outboard", "inboard"])),
        "drive_torque": draw(st.sampled_from(["chassis", "axle"])),
    }


def vehicle_of(spec: dict) -> dict:
    """The vehicle as the independent measures want it; an axle holds its own drive torque unless said."""
    reacted_by = "axle" if spec["linkage"] == "solid-axle" else "chassis"
    given = {"drive_torque": reacted_by} | spec.get("vehicle", {})
    for name in ("wheelbase", "cg_height"):
        given[f"{name}_mm"] = given.pop(name, None)
    return given


def bodies_of(spec: dict, errors: dict | None = None, right_errors: dict | None = None) -> tuple:
    """(left body, right body mirrored) of a spec; the errors are those of section "part.feature" of each hand."""
    linkage, wheel = spec["linkage"], spec["wheel"]
    steered = spec.get("vehicle", {}).get("steered", spec.get("vehicle", {}).get("axle", "front") == "front")
    points = spec.get("points", {})
    arms = {"arms": spec.get("arms"), "spring_on": spec.get("spring_on", "upright"), "steered": steered}

    def one(errors):
        if linkage == "double-wishbone":
            return bodies.double_wishbone(points, wheel, errors=errors, **arms)
        if linkage == "strut":
            return bodies.strut(points, wheel, errors=errors, **arms)
        if linkage == "five-link":
            rest = {"steer_link": spec.get("steer_link"), "points": points, "steered": steered}
            return bodies.five_link(spec["links"], wheel, errors=errors, **rest)
        if linkage == "semi-trailing-arm":
            return bodies.semi_trailing_arm(points, wheel, errors=errors)
        other = dict(wheel, centre=[wheel["centre"][0], -wheel["centre"][1], wheel["centre"][2]])
        return bodies.solid_axle(spec["links"], wheel, other, points=points, errors=errors)

    return one(errors), one(errors if right_errors is None else right_errors)


def axis_systems() -> list[str]:
    """The 24 right-handed statements of axes."""
    found = []
    for names in itertools.permutations(WAYS, 3):
        rows = np.array([WAYS[name] for name in names])
        if round(np.linalg.det(rows)) == 1:
            found.append(" ".join(f"{letter}-{name}" for letter, name in zip("xyz", names, strict=True)))
    return found


def toml_text(spec: dict, *, axes="x-forward y-left z-up", units="mm", side="left") -> str:
    """The spec as a geometry file; `side` = "right" writes the mirror image as a right corner."""
    rows = np.array([WAYS[word[2:]] for word in axes.split()], float)
    flip = np.array([1.0, -1.0 if side == "right" else 1.0, 1.0])

    def place(point):
        return "[" + ", ".join(repr(float(v)) for v in rows @ (flip * point) / UNIT_MM[units]) + "]"

    def length(value):
        return repr(float(value) / UNIT_MM[units])

    lines = [f'{key} = "{spec[key]}"' for key in ("name", "linkage", "steer_link", "spring_on") if spec.get(key)]
    lines += [f'axes = "{axes}"', f'units = "{units}"', f'side = "{side}"']
    if spec.get("points"):
        lines += ["[points]", *(f"{name} = {place(point)}" for name, point in spec["points"].items())]
    for name, (inner, outer) in spec.get("links", {}).items():
        lines += [f"[links.{name}]", f"inner = {place(inner)}", f"outer = {place(outer)}"]
    wheel = spec["wheel"]
    lines += ["[wheel]", f"centre = {place(wheel['centre'])}", f"loaded_radius = {length(wheel['loaded_radius'])}"]
    lines += [f"{key} = {float(wheel.get(key, 0.0))!r}" for key in ("camber_deg", "toe_deg")]
    for name, (build, located_by) in (spec.get("arms") or {}).items():
        lines += [f"[arms.{name}]", f'build = "{build}"', f'located_by = "{located_by}"']
    lines.append("[vehicle]")
    for key, value in spec.get("vehicle", {}).items():
        if key in ("wheelbase", "cg_height"):
            lines.append(f"{key} = {length(value)}")
        else:
            lines.append(
                f"{key} = {str(value).lower()}" if isinstance(value, bool | float | int) else f'{key} = "{value}"'
            )
    return "\n".join(lines) + "\n"


def shifted(spec: dict, move) -> dict:
    """The spec with every point put through `move(point)`."""
    out = copy.deepcopy(spec)
    out["points"] = {name: move(point) for name, point in spec.get("points", {}).items()}
    out["links"] = {name: tuple(move(p) for p in ends) for name, ends in spec.get("links", {}).items()}
    out["wheel"]["centre"] = move(spec["wheel"]["centre"])
    return out
