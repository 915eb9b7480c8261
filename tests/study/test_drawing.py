"""What the views draw of each linkage."""

import xml.etree.ElementTree as ElementTree
from functools import cache

import pytest

from catalog.geometry_file import parse_geometry
from study import charts
from study.charts import places
from study.drawing import drawing_of
from tests.strategies import LINKAGES, spec_of, toml_text

SPRING = {"spring_inner": [-20.0, 560.0, 780.0], "spring_outer": [-10.0, 600.0, 400.0]}


@cache
def drawing(linkage, *, spring=False, steered=True):
    spec = spec_of(linkage, vehicle={"axle": "front" if steered else "rear"})
    if spring:
        spec["points"] = spec.get("points", {}) | SPRING
    return drawing_of(parse_geometry(toml_text(spec), source="test"))


def rules(linkage, kind, **options):
    return charts.view_spec(drawing(linkage, **options), {}, kind)["datasets"]["rules"]


@pytest.mark.parametrize("linkage", LINKAGES)
def test_all_that_is_drawn_has_its_points(linkage):
    found = drawing(linkage)
    for side in ("left", "right"):
        points = places.drawn_points(found, side)
        named = [name for a, b, _ in found["lines"] for name in (a, b)]
        named += [name for _, names in found["bodies"] for name in names] + [name for pair in found["hinges"] for name in pair]
        assert set(named) <= set(points)


@pytest.mark.parametrize("linkage", LINKAGES)
@pytest.mark.parametrize("kind", ["front", "side", "top"])
def test_every_view_can_be_drawn_without_a_ranking(linkage, kind):
    import vl_convert

    root = ElementTree.fromstring(vl_convert.vegalite_to_svg(charts.view_spec(drawing(linkage), {}, kind)))
    assert float(root.get("width")) > 400 and float(root.get("height")) > 200


def test_a_strut_carries_its_spring():
    parts = [part for _, _, part in drawing("strut", spring=True)["lines"]]
    assert parts.count("strut") == 1 and "spring" not in parts
    assert "spring" in [part for _, _, part in drawing("double-wishbone", spring=True)["lines"]]


def test_five_links_meet_one_upright():
    found = drawing("five-link")
    assert len(found["lines"]) == 5
    ((part, names),) = found["bodies"]
    assert part == "upright" and len(names) == 6 and names[-1] == "wheel_centre"


def test_a_trailing_arm_is_a_triangle_on_its_hinge():
    found = drawing("semi-trailing-arm")
    assert found["bodies"] == [("arm", ("hinge_inner", "hinge_outer", "wheel_centre"))]
    dashed = [rule for rule in rules("semi-trailing-arm", "top") if rule["d"] == "dash"]
    assert len(dashed) == 1


def test_a_solid_axle_is_a_tube_with_both_wheels():
    found = drawing("solid-axle", steered=False)
    assert found["lines"][0] == ("wheel_centre_left", "wheel_centre_right", "axle")
    assert len(found["lines"]) == 1 + 4 + 4 and found["bodies"] == []
    data = charts.view_spec(found, {}, "top")["datasets"]
    assert {row["g"] for row in data["tyres"]} == {"left", "right"}
    assert charts.view_spec(found, {}, "top")["title"]["text"] == "Top view"


@pytest.mark.parametrize("kind", ["front", "top"])
def test_members_of_a_solid_axle_are_drawn_once_and_its_springs_twice(kind):
    plain, sprung = (rules("solid-axle", kind, steered=False, spring=spring) for spring in (False, True))
    assert sum(rule["w"] == 2.4 for rule in plain) == 4
    assert sum(rule["w"] == 10.0 for rule in plain) == 1
    assert len(sprung) == len(plain) + 2


def test_only_a_steered_axle_has_a_rack():
    assert drawing("five-link")["rack_point"] == "toe_inner"
    assert drawing("five-link", steered=False)["rack_point"] is None
    assert places.rack_mount(drawing("strut"), "left")[1] == pytest.approx(0.8 * 355.0)
    assert places.source_place(drawing("strut", steered=False), "rack.mount") is None
