"""Geometry files that are taken: every linkage, axis system, unit and side."""

import json
import math

import pytest
from catalog_samples import ALL, FIVE_LINK, SOLID_AXLE, STRUT, WISHBONES, geometry
from hypothesis import given
from hypothesis import strategies as st

from catalog.axes import all_axes, all_left_handed, axes_matrix
from catalog.geometry import from_record, to_record
from catalog.geometry_file import json_schema, read_geometry
from catalog.linkages import LINKAGES

MM = {"mm": 1.0, "m": 0.001, "in": 1 / 25.4}


def restated(*, axes="x-forward y-left z-up", units="mm", side="left", shift=(0.0, 0.0, 0.0)):
    """The wishbone sample written in other axes, units and for the other side."""
    plain = geometry()
    points = {name: plain.left.points[name] for name in LINKAGES["double-wishbone"].points}
    points["centre"] = plain.left.wheel.centre
    lines = {}
    for name, point in points.items():
        x, y, z = (a + b for a, b in zip(point, shift, strict=True))
        iso = (x, -y if side == "right" else y, z)
        given = [sum(r * v for r, v in zip(row, iso, strict=True)) * MM[units] for row in axes_matrix(axes)]
        lines[name] = f"{name} = {given!r}"
    centre = lines.pop("centre")
    head = f'name = "a"\nlinkage = "double-wishbone"\naxes = "{axes}"\nunits = "{units}"\nside = "{side}"\n'
    wheel = f"[wheel]\n{centre}\nloaded_radius = {265 * MM[units]!r}\ncamber_deg = -1.0\ntoe_deg = 0.1\n"
    return head + "[points]\n" + "\n".join(lines.values()) + "\n" + wheel


@pytest.mark.parametrize("linkage", ALL)
def test_every_linkage_is_read_and_its_record_comes_back(linkage):
    read = geometry(ALL[linkage])
    assert read.linkage == linkage
    assert set(LINKAGES[linkage].points) <= set(read.left.points)
    assert read.right.wheel.centre == (0.0, -640.0, 265.0)
    assert from_record(json.loads(json.dumps(to_record(read))), text=read.text) == read


def test_the_other_side_is_the_mirror_image_and_defaults_are_filled():
    read = geometry()
    assert read.right.points["tie_rod_outer"] == (70.0, -580.0, 150.0)
    assert read.right_is_mirror and read.right.wheel.camber_deg == -1.0
    assert read.arms["upper_arm"].build == "one-piece" and read.arms["lower_arm"].located_by == "centre"
    assert read.vehicle.axle == "front" and read.vehicle.steered and read.vehicle.wheelbase_mm is None
    assert read.ground_mm() == pytest.approx(265 - 265 * math.cos(math.radians(1.0)))


def test_what_is_given_of_the_other_side_replaces_the_mirror_image():
    text = WISHBONES + "[right.points]\ntie_rod_inner = [60, -271, 151]\n[right.wheel]\ntoe_deg = 0.3\n"
    read = geometry(text)
    assert read.right.points["tie_rod_inner"] == (60.0, -271.0, 151.0)
    assert read.right.points["tie_rod_outer"] == (70.0, -580.0, 150.0)
    assert read.right.wheel.toe_deg == 0.3 and read.left.wheel.toe_deg == 0.1
    assert not read.right_is_mirror
    repeated = WISHBONES + "[right.points]\ntie_rod_inner = [60, -270, 150]\n"
    assert geometry(repeated).right_is_mirror


def test_links_of_the_other_side_may_differ_in_one_end():
    read = geometry(FIVE_LINK + "[right.links.toe]\ninner = [-60, -281, 160]\n")
    assert read.right.points["toe_inner"] == (-60.0, -281.0, 160.0)
    assert read.right.points["toe_outer"] == (-90.0, -580.0, 165.0)
    assert read.links == ("upper_front", "upper_rear", "lower_front", "lower_rear", "toe")


def test_a_solid_axle_has_its_links_once_and_its_springs_mirrored():
    read = geometry(SOLID_AXLE)
    assert read.left.points["panhard_outer"] == read.right.points["panhard_outer"] == (-95.0, -460.0, 262.0)
    assert read.left.points["spring_outer"] == (-20.0, 470.0, 260.0)
    assert read.right.points["spring_outer"] == (-20.0, -470.0, 260.0)
    assert read.right_is_mirror and not read.vehicle.steered and read.vehicle.drive_torque == "axle"
    given_right = SOLID_AXLE.replace("centre = [0, 640", "centre = [0, -640").replace(
        'linkage = "solid-axle"', 'linkage = "solid-axle"\nside = "right"'
    )
    assert geometry(given_right).left.wheel.centre == (0.0, 640.0, 265.0)


def test_an_a_bracket_is_two_links_that_share_a_point():
    text = SOLID_AXLE.replace("outer = [-95, -460, 262]", "outer = [10, 50, 390]")
    assert geometry(text).left.points["panhard_outer"] == geometry(text).left.points["upper_outer"]


def test_springs_arms_vehicle_and_datums():
    text = WISHBONES.replace('note = "invented"', 'spring_on = "lower_arm"').replace(
        "[points]", "[points]\nspring_inner = [0, 300, 500]\nspring_outer = [0, 450, 140]"
    )
    text += (
        '[arms.lower_arm]\nbuild = "legs"\nlocated_by = "rear"\n[vehicle]\naxle = "rear"\nwheelbase = 2450\n'
    )
    text += '[datums]\nall = "floor plane, centre plane, rear bulkhead"\n'
    read = geometry(text)
    assert read.spring_on == "lower_arm" and read.right.points["spring_outer"] == (0.0, -450.0, 140.0)
    assert read.arms["lower_arm"].build == "legs" and read.arms["upper_arm"].build == "one-piece"
    assert read.vehicle.wheelbase_mm == 2450 and not read.vehicle.steered
    assert read.datums == "floor plane, centre plane, rear bulkhead"
    one = geometry(WISHBONES + '[datums]\nupper_front_pivot = "from the bulkhead"\n')
    assert one.datums == "upper_front_pivot: from the bulkhead"


def test_a_strut_may_turn_about_its_ball_joint():
    text = STRUT.replace("strut_lower = [-2, 575, 230]", "strut_lower = [5, 600, 120]")
    assert geometry(text).left.points["strut_lower"] == (5.0, 600.0, 120.0)


def test_there_are_24_axis_systems_and_24_that_are_left_handed():
    assert len(set(all_axes())) == 24 and len(set(all_left_handed())) == 24
    assert "x-forward y-right z-down" in all_axes()


@pytest.mark.parametrize("axes", all_axes())
def test_every_axis_system_gives_the_same_points(axes):
    plain, read = geometry(restated()), geometry(restated(axes=axes))
    assert read.left == plain.left and read.right == plain.right
    assert read.given_axes == axes


@given(
    axes=st.sampled_from(all_axes()),
    units=st.sampled_from(["mm", "m", "in"]),
    side=st.sampled_from(["left", "right"]),
    shift=st.tuples(*[st.floats(-20, 20, allow_nan=False)] * 3),
)
def test_axes_units_and_side_of_the_file_do_not_change_the_car(axes, units, side, shift):
    plain = geometry(restated(shift=shift))
    read = geometry(restated(axes=axes, units=units, side=side, shift=shift))
    for name, point in plain.left.points.items():
        assert read.left.points[name] == pytest.approx(point, abs=1e-8)
        assert read.right.points[name] == pytest.approx(plain.right.points[name], abs=1e-8)
    assert read.left.wheel.loaded_radius_mm == pytest.approx(265, abs=1e-8)
    assert (read.given_units, read.given_side) == (units, side)


def test_spacing_and_comments_are_not_content_but_numbers_are():
    plain = geometry()
    assert (
        geometry("# checked\n" + WISHBONES.replace("560, 290", "560.0,   290")).content_hash
        == plain.content_hash
    )
    assert geometry(WISHBONES.replace("560, 290", "560, 290.001")).content_hash != plain.content_hash
    assert geometry(WISHBONES.replace("= [0, 640", "= [-0.0, 640")).content_hash == plain.content_hash


def test_a_byte_order_mark_and_windows_line_ends_are_fine(tmp_path):
    path = tmp_path / "corner.toml"
    path.write_bytes(b"\xef\xbb\xbf" + WISHBONES.replace("\n", "\r\n").encode())
    assert read_geometry(path).content_hash == geometry().content_hash


def test_the_schema_for_editors_describes_its_keys():
    schema = json_schema()
    assert {"points", "links", "wheel", "vehicle", "datums"} <= set(schema["properties"])
    assert "upper_ball_joint" in schema["properties"]["points"]["properties"]
    assert len(schema["properties"]["axes"]["enum"]) == 24
    assert schema["$defs"]["WheelTable"]["properties"]["camber_deg"]["description"]
