# ruff: noqa: E501
"""Geometry files that are refused: each error names file, key, value, rule and remedy."""

import pytest
from catalog_samples import FIVE_LINK, SOLID_AXLE, STRUT, TRAILING_ARM, WISHBONES, geometry

from catalog.axes import all_left_handed
from catalog.geometry_file import GeometryFileError, read_geometry

SPRINGS = "[points]\nspring_inner = [0, 300, 500]\nspring_outer = [0, 450, 140]"
FIFTH = "[links.watt]\ninner = [1, 2, 3]\nouter = [100, 2, 3]\n"


def changed(old, new, *, text=WISHBONES):
    assert old in text
    return text.replace(old, new)


CASES = {
    "unknown point": (changed("upper_ball_joint", "uper_ball_joint"), ["points.uper_ball_joint", "upper_ball_joint"]),
    "missing point": (changed("tie_rod_outer = [70, 580, 150]\n", ""), ["points.tie_rod_outer", "missing"]),
    "duplicate point": (
        changed("tie_rod_outer =", "tie_rod_inner = [1, 2, 3]\ntie_rod_outer ="),
        ["tie_rod_inner", "given twice", "line 16"],
    ),
    "unknown table key": (changed("camber_deg", "cambr_deg"), ["wheel.cambr_deg", "camber_deg"]),
    "unknown top key": (changed('note = "invented"', "colour = 1"), ["colour", "not known"]),
    "unknown linkage": (changed("double-wishbone", "double-wishbones"), ["linkage", "'double-wishbone'", "solid-axle"]),
    "not finite": (changed("[-10, 560, 290]", "[-10, nan, 290]"), ["upper_ball_joint[1] = nan", "finite"]),
    "too great": (changed("[-10, 560, 290]", "[-10, 1e308, 290]"), ["upper_ball_joint", "units"]),
    "text for number": (changed("[-10, 560, 290]", '[-10, "560", 290]'), ["upper_ball_joint[1] = '560'", "number"]),
    "truth for number": (changed("loaded_radius = 265", "loaded_radius = true"), ["loaded_radius = True"]),
    "two numbers": (changed("[-10, 560, 290]", "[-10, 560]"), ["upper_ball_joint", "three numbers"]),
    "coincident": (changed("[-10, 560, 290]", "[120, 330, 275]"), ["upper_front_pivot", "upper_ball_joint", "coincides"]),
    "arm without length": (changed("[-10, 560, 290]", "[10, 330, 275]"), ["upper_ball_joint", "upper_arm", "no length"]),
    "wheel on the wrong side": (changed("[0, 640, 265]", "[0, -640, 265]"), ["wheel.centre", "wrong side", "left"]),
    "wrong side stated": (changed('side = "left"', 'side = "right"'), ["wheel.centre", "wrong side", "right"]),
    "ball joint across": (changed("[5, 600, 120]", "[5, -600, 120]"), ["lower_ball_joint = [5.0, -600.0", "across"]),
    "metres as mm": (
        changed("centre = [0, 640, 265]\nloaded_radius = 265", "centre = [0, 0.64, 0.265]\nloaded_radius = 0.265"),
        ["wheel.centre", "half track of 0.64 mm", "units"],
    ),
    "mm as inches": (changed('units = "mm"', 'units = "in"'), ["half track", "units = 'in'"]),
    "radius in metres": (changed("loaded_radius = 265", "loaded_radius = 0.265"), ["loaded_radius", "0.265 mm"]),
    "radius zero": (changed("loaded_radius = 265", "loaded_radius = 0"), ["loaded_radius", "greater than 0"]),
    "camber absurd": (changed("camber_deg = -1.0", "camber_deg = -60"), ["camber_deg = -60", "-45"]),
    "toe absurd": (changed("toe_deg = 0.1", "toe_deg = 46"), ["toe_deg = 46", "45"]),
    "wheelbase in metres": (WISHBONES + "[vehicle]\nwheelbase = 2.45\n", ["vehicle.wheelbase", "2.45 mm"]),
    "share in percent": (WISHBONES + "[vehicle]\nbrake_share = 62\n", ["brake_share = 62", "1"]),
    "unequal grounds": (
        WISHBONES + "[right.wheel]\nloaded_radius = 265.02\n",
        ["right.wheel", "0.020 mm", "0.01 mm"],
    ),
    "same side twice": (WISHBONES + "[left.points]\ntie_rod_inner = [60, 270, 150]\n", ["left", "[right."]),
    "other side unknown": (WISHBONES + "[right.points]\ntie_rod = [60, 270, 150]\n", ["right.points.tie_rod", "tie_rod_"]),
    "other side wrong": (
        WISHBONES + "[right.points]\ntie_rod_outer = [70, 580, 150]\n",
        ["right.points.tie_rod_outer = [70", "right wheel"],
    ),
    "unknown arm": (WISHBONES + "[arms.middle_arm]\n", ["arms.middle_arm", "lower_arm"]),
    "arm build": (WISHBONES + '[arms.upper_arm]\nbuild = "cast"\n', ["arms.upper_arm.build = 'cast'", "one-piece"]),
    "links beside points": (WISHBONES + FIFTH, ["links", "double-wishbone"]),
    "one spring point": (changed("[points]", "[points]\nspring_inner = [0, 300, 500]"), ["spring_outer", "missing"]),
    "spring without length": (
        changed("[points]", SPRINGS.replace("450, 140", "300, 500")),
        ["spring_inner", "spring_outer", "coincides"],
    ),
    "spring on no arm": (
        changed("[points]", 'spring_on = "lower_arm"\n' + SPRINGS, text=TRAILING_ARM),
        ["spring_on", "lower arm"],
    ),
    "spring on arm, not given": (changed('note = "invented"', 'spring_on = "lower_arm"'), ["spring_on", "spring_inner"]),
    "name with @": (changed('"example-front"', '"front@2"'), ["name = 'front@2'", "@"]),
    "empty name": (changed('"example-front"', '""'), ["name", "characters"]),
    "steer link elsewhere": (changed('note = "invented"', 'steer_link = "tie_rod"'), ["steer_link", "double-wishbone"]),
    "steer link unknown": (changed('steer_link = "toe"', 'steer_link = "to"', text=FIVE_LINK), ["'to'", "'toe'"]),
    "steer link missing": (changed('steer_link = "toe"\n', "", text=FIVE_LINK), ["steer_link", "missing", "steered"]),
    "six links": (FIVE_LINK + FIFTH, ["has 6 links", "exactly 5", "over-constrained", "six freedoms"]),
    "five on an axle": (SOLID_AXLE + FIFTH, ["has 5 links", "exactly 4", "over-constrained", "Panhard rod as one"]),
    "three on an axle": (
        changed("[links.upper]\ninner = [430, 60, 380]\nouter = [10, 50, 390]\n", "", text=SOLID_AXLE),
        ["has 3 links", "under-constrained"],
    ),
    "link without length": (
        changed("outer = [-95, -460, 262]", "outer = [-90, 470, 270]", text=SOLID_AXLE),
        ["links.panhard.inner", "no length"],
    ),
    "same link twice": (
        changed("inner = [-60, 280, 160]\nouter = [-90, 580, 165]", "inner = [-170, 265, 135]\nouter = [-15, 600, 120]",
                text=FIVE_LINK),
        ["links.toe", "lower_rear"],
    ),
    "link named like a part": (changed("links.upper]", "links.chassis]", text=SOLID_AXLE), ["links.chassis", "rename"]),
    "links of an axle's side": (SOLID_AXLE + "[right.links.upper]\ninner = [1, 2, 3]\n", ["right.links", "one axle"]),
    "steered without steer link": (SOLID_AXLE.replace('axle = "rear"', "steered = true"), ["steered", "no steer link"]),
    "tie rod on a trailing arm": (
        changed("[points]", "[points]\ntie_rod_inner = [1, 2, 3]", text=TRAILING_ARM),
        ["points.tie_rod_inner", "hinge"],
    ),
    "strut point missing": (changed("strut_lower = [-2, 575, 230]\n", "", text=STRUT), ["strut_lower", "missing"]),
    "unknown datum": (WISHBONES + '[datums]\nroof = "x"\n', ["datums.roof"]),
    "not toml": ("name = [1, 2", ["not valid TOML"]),
    "nested brackets": ("a = " + "[" * 50_000, ["nested too deeply"]),
    "nested keys": ("a" + ".a" * 50_000 + " = 1", ["parts"]),
    "spaced keys": ("a" + " . a" * 50_000 + " = 1", ["parts"]),
    "deep tables": ("a" + ".a" * 50 + " = 1", ["nested too deeply"]),
    "endless number": ("a = 1" + "0" * 5000, ["too many digits"]),
    "empty": ("", ["name is missing"]),
}  # fmt: skip


@pytest.mark.parametrize("case", CASES)
def test_refusal_names_file_key_and_rule(case):
    text, wanted = CASES[case]
    with pytest.raises(GeometryFileError) as found:
        geometry(text, source="corner.toml")
    message = str(found.value)
    assert message.startswith("corner.toml: ")
    assert [part for part in wanted if part not in message] == []
    assert len(message.splitlines()) <= 3 and "Traceback" not in message


@pytest.mark.parametrize("axes", all_left_handed()[::5])
def test_left_handed_axes_are_refused(axes):
    with pytest.raises(GeometryFileError, match="left-handed"):
        geometry(changed("x-forward y-left z-up", axes))


@pytest.mark.parametrize(
    "axes", ["x-forward y-rear z-up", "x-forward y-left", "forward left up", "x-ahead y-left z-up"]
)
def test_axes_that_name_no_system_are_refused(axes):
    with pytest.raises(GeometryFileError, match="axes = "):
        geometry(changed("x-forward y-left z-up", axes))


def test_files_that_cannot_be_read_are_refused(tmp_path):
    odd = tmp_path / "odd.toml"
    with pytest.raises(GeometryFileError, match="does not exist"):
        read_geometry(odd)
    with pytest.raises(GeometryFileError, match="no ordinary file"):
        read_geometry(tmp_path)
    odd.write_bytes(b'name = "\xff"')
    with pytest.raises(GeometryFileError, match="byte 9 is not UTF-8"):
        read_geometry(odd)
    odd.write_bytes(b"#" * 1_000_001)
    with pytest.raises(GeometryFileError, match="longer than 1 MB"):
        read_geometry(odd)


def test_up_to_three_problems_are_named_at_once():
    text = changed("camber_deg", "a").replace("toe_deg", "b").replace("loaded_radius", "c")
    with pytest.raises(GeometryFileError) as found:
        geometry(text)
    assert len(str(found.value).splitlines()) == 3
