"""Odd geometries get a line; the demos get none."""

from pathlib import Path

import pytest

from catalog.geometry_file import parse_geometry, read_geometry
from study.nominal import evaluate
from study.sanity import odd_values

STUDIES = Path(__file__).parents[2] / "studies"
DEMO = (STUDIES / "front-wishbone.toml").read_text(encoding="utf-8")


def lines(text):
    geometry = parse_geometry(text, source="t.toml")
    return " | ".join(odd_values(evaluate(geometry), geometry))


@pytest.mark.parametrize("name", ["front-wishbone", "front-strut", "rear-five-link", "rear-trailing-arm", "rear-solid-axle"])
def test_the_demos_are_usual(name):
    geometry = read_geometry(STUDIES / f"{name}.toml")
    assert odd_values(evaluate(geometry), geometry) == []


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("[88, 308, 156.5]", "[88, -308, 156.5]", "tie_rod_inner is on the other side"),
        ("[-14, 648, 344]", "[-14, 648, 90]", "upper_ball_joint is not above"),
        ("[-14, 648, 344]", "[-14, 520, 344]", "kingpin_deg is"),
        ("lower_front_pivot = [152, 286, 124]", "lower_front_pivot = [152, 286, -24]", "lower_front_pivot below the ground"),
    ],
)
def test_what_is_odd_is_said(old, new, said):
    assert said in lines(DEMO.replace(old, new))
