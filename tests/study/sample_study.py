"""The invented double-wishbone study behind the sample tables: its geometry, tolerances and alignment."""

import math

from tests.study.sample_tables import SOURCES

POINTS = {
    "upper_front_pivot": (121.0, 322.0, 281.0),
    "upper_rear_pivot": (-118.0, 331.0, 264.0),
    "upper_ball_joint": (-14.0, 571.0, 302.0),
    "lower_front_pivot": (148.0, 262.0, 131.0),
    "lower_rear_pivot": (-152.0, 268.0, 124.0),
    "lower_ball_joint": (6.0, 612.0, 118.0),
    "tie_rod_inner": (74.0, 288.0, 158.0),
    "tie_rod_outer": (82.0, 596.0, 149.0),
}
LINES = [
    ("upper_front_pivot", "upper_ball_joint", "upper_arm"),
    ("upper_rear_pivot", "upper_ball_joint", "upper_arm"),
    ("lower_front_pivot", "lower_ball_joint", "lower_arm"),
    ("lower_rear_pivot", "lower_ball_joint", "lower_arm"),
    ("tie_rod_inner", "tie_rod_outer", "tie_rod"),
    ("upper_ball_joint", "lower_ball_joint", "upright"),
]


def geometry() -> dict:
    right = {name: (x, -y, z) for name, (x, y, z) in POINTS.items()}
    camber = math.radians(-1.0)
    axis = (0.0, math.cos(camber), -math.sin(camber))
    wheel = {"centre": (0.0, 652.0, 262.0), "axis": axis, "radius_mm": 262.0}
    other = {"centre": (0.0, -652.0, 262.0), "axis": (0.0, -axis[1], axis[2]), "radius_mm": 262.0}
    ground = 262.0 - 262.0 * math.cos(camber)
    return {
        "name": "invented-front@2",
        "linkage": "double-wishbone",
        "left": POINTS,
        "right": right,
        "lines": LINES,
        "wheel": {"left": wheel, "right": other},
        "ground_mm": ground,
    }


def study() -> dict:
    return {
        "id": 12,
        "title": "Front brackets, release B",
        "geometry": "invented-front@2",
        "method": "sobol",
        "size": 1024,
        "seed": 0,
        "sides": "independent",
        "state": "done",
        "builds": 36864,
        "dropped_blocks": 3,
        "withheld": False,
        "unassembled": 3,
        "version": "0.1.0",
        "text": 'title = "Front brackets, release B"\n[errors]\n"chassis.*" = 1',
        "perfect": ["upright.wheel_centre"],
        "notes": ["Three blocks were dropped: a build could not be assembled."],
        "seconds": 4.2,
        "stages": ["before", "after"],
        "wanted_share": 0.95,
    }


def tolerances() -> list[dict]:
    zones = {"xyz": "± 1.0 mm in x, y, z", "length": "± 0.2 mm", "tilt": "cone of 0.05°"}
    return [
        {
            "source": source,
            "zone_text": zones[kind],
            "distribution_text": "uniform",
            "process": "welded, jig" if source.startswith("chassis") else None,
        }
        for source, kind in SOURCES.items()
        if not source.startswith("alignment")
    ]


def alignment() -> list[dict]:
    return [
        {
            "adjuster": "ride height",
            "by": None,
            "within_text": "± 2 mm",
            "step_text": None,
            "range_text": None,
        },
        {"adjuster": "toe", "by": "tie_rod", "within_text": "± 0.02°", "step_text": None, "range_text": None},
        {
            "adjuster": "camber",
            "by": "upper_arm",
            "within_text": "± 0.05°",
            "step_text": "0.5 mm",
            "range_text": "± 4 mm",
        },
    ]
