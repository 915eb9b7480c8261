"""Double wishbones against values from outside, read or computed without this program (see references)."""

import numpy as np
import pytest
from hypothesis import given, settings
from scipy.optimize import brentq

from catalog.geometry_file import parse_geometry, read_geometry
from study.nominal import evaluate, sweep
from tests.conftest import REFERENCES
from tests.independent import spin_axis
from tests.strategies import spec_of, specs, toml_text


def program(spec, **position):
    return evaluate(parse_geometry(toml_text(spec), source="case.toml"), **position)


def flat_corner(lower_inner, lower_ball, upper_inner, upper_ball, centre, radius, **rest):
    """A front view (y, z) made a spatial corner: hinges along x, a toe link that moves like the lower arm."""
    ahead, behind = 120.0, -140.0
    points = {
        "upper_front_pivot": [ahead, *upper_inner],
        "upper_rear_pivot": [behind, *upper_inner],
        "upper_ball_joint": [0.0, *upper_ball],
        "lower_front_pivot": [ahead, *lower_inner],
        "lower_rear_pivot": [behind, *lower_inner],
        "lower_ball_joint": [0.0, *lower_ball],
        "tie_rod_inner": [-100.0, *lower_inner],
        "tie_rod_outer": [-100.0, *lower_ball],
    }
    return spec_of("double-wishbone", points=points, wheel={"centre": centre, "loaded_radius": radius}, **rest)


# --- planar linkage, angle against angle

SCALE, ORIGIN = 20.0, np.array([300.0, 200.0])


def planar_spec(ref):
    at = {name: ORIGIN + SCALE * np.array(ref[f"{name}_pivot"]) for name in ("lower", "upper")}
    lower, upper = (at[n] + [SCALE * ref[f"{n}_arm"], 0.0] for n in ("lower", "upper"))
    centre = [0.0, lower[0] + 90.0, lower[1] + 10.0]
    return flat_corner(at["lower"], lower, at["upper"], upper, centre, 200.0)


def arm_angles(spec, found, bump):
    """Arm angles (degrees) recovered from camber and the contact point alone."""
    lean = np.radians(found["left"]["camber_deg"])
    up = np.array([np.sin(lean), np.cos(lean)])  # in the wheel's plane, in front view (y, z)
    out = np.array([np.cos(lean), -np.sin(lean)])
    ground = spec["wheel"]["centre"][2] - spec["wheel"]["loaded_radius"]
    centre = np.array([found["left"]["half_track_mm"], ground + bump]) + spec["wheel"]["loaded_radius"] * up
    home = np.array(spec["wheel"]["centre"][1:])
    angles = []
    for arm in ("lower", "upper"):
        offset = np.array(spec["points"][f"{arm}_ball_joint"][1:]) - home
        joint = centre + offset[0] * out + offset[1] * up
        reach = joint - np.array(spec["points"][f"{arm}_front_pivot"][1:])
        angles.append(np.degrees(np.arctan2(reach[1], reach[0])))
    return angles


def test_planar_wishbone_follows_its_branch(kinematics):
    ref = kinematics["planar_wishbone"]
    spec = planar_spec(ref)
    geometry = parse_geometry(toml_text(spec), source="planar.toml")
    start = 0.0
    for lower, upper in ref["angles_deg"]:

        def gap(bump, wanted=lower):
            found = sweep(geometry, [(bump, 0.0, 0.0)], keys=("camber_deg", "half_track_mm"))[0]
            return arm_angles(spec, found, bump)[0] - wanted

        start = brentq(gap, start, start + 140, xtol=1e-5)
        assert arm_angles(spec, evaluate(geometry, bump_mm=start), start)[1] == pytest.approx(upper, abs=1e-4)


def test_parallel_arms_have_no_swing_arm_and_no_camber_gain(kinematics):
    found = program(planar_spec(kinematics["planar_wishbone"]))
    left = found["left"]
    assert left["swing_arm_mm"] is None
    assert left["front_view_ic_y_mm"] is None and left["front_view_ic_z_mm"] is None
    assert left["swing_arm_curvature_per_m"] == pytest.approx(0, abs=1e-9)
    assert left["camber_gain_deg_per_mm"] == pytest.approx(0, abs=1e-9)
    assert found["axle"]["roll_centre_height_mm"] == pytest.approx(0, abs=1e-6)  # level arms


# --- planar corner by hand


def by_hand(ref):
    contact = ref["contact"]
    ends = [ref[n] for n in ("lower_inner", "lower_ball_joint", "upper_inner", "upper_ball_joint")]
    return flat_corner(*ends, [0.0, contact[0], contact[1] + 300.0], 300.0)


def test_planar_corner_by_hand(kinematics):
    ref = kinematics["planar_corner"]
    found = program(by_hand(ref))
    for side in ("left", "right"):
        values = found[side]
        centre = values["front_view_ic_y_mm"], values["front_view_ic_z_mm"]
        assert centre == pytest.approx(ref["instant_centre"], abs=6e-4)
        assert values["swing_arm_mm"] == pytest.approx(ref["swing_arm_mm"], abs=6e-4)
        assert values["camber_gain_deg_per_mm"] == pytest.approx(ref["camber_gain_deg_per_mm"], abs=6e-7)
        assert values["roll_camber_deg_per_deg"] == pytest.approx(ref["roll_camber_deg_per_deg"], abs=6e-7)
        assert values["bump_steer_deg_per_mm"] == pytest.approx(0, abs=1e-10)
    assert found["axle"]["roll_centre_height_mm"] == pytest.approx(ref["roll_centre_height_mm"], abs=6e-5)
    assert found["axle"]["roll_centre_offset_mm"] == pytest.approx(0, abs=1e-6)


# --- spatial corner with rack


def agrees_to_all_digits(value, digits: str):
    places = len(digits.partition(".")[2])
    return value == pytest.approx(float(digits), abs=0.51 * 10.0**-places)


def test_spatial_corner_with_rack(kinematics):
    ref = kinematics["spatial_corner"]
    found = evaluate(read_geometry(REFERENCES / ref["geometry"]))
    for side in ("left", "right"):
        for key, digits in ref["left"].items():
            assert agrees_to_all_digits(found[side][key], digits), key
    for key, digits in ref["axle"].items():
        assert agrees_to_all_digits(found["axle"][key], digits), key


def test_forward_velocity_at_the_contact_point_of_the_spatial_corner(kinematics):
    """-v_x/omega_y is the height of the side-view centre, 1/omega_y its distance from the contact point."""
    ref = kinematics["spatial_corner"]
    left = evaluate(read_geometry(REFERENCES / ref["geometry"]))["left"]
    contact_x = 0.0  # no toe and the wheel centre at x = 0
    forward = -left["side_view_ic_z_mm"] / (left["side_view_ic_x_mm"] - contact_x)
    assert agrees_to_all_digits(forward, ref["contact_velocity"]["x"])


def test_roll_centre_from_the_arms_alone_is_a_little_lower(kinematics):
    """On paper: the arms' planes cut the wheel's transverse plane in lines to the instant centre."""
    ref = kinematics["spatial_corner"]
    geometry = read_geometry(REFERENCES / ref["geometry"])
    points = {name: np.array(point) for name, point in geometry.left.points.items()}
    lines = []
    for arm in ("upper", "lower"):
        ball = points[f"{arm}_ball_joint"]
        normal = np.cross(points[f"{arm}_front_pivot"] - ball, points[f"{arm}_rear_pivot"] - ball)
        lines.append([normal[1], normal[2], normal @ ball])  # at x = 0, the plane of the wheel centre
    lines = np.array(lines)
    centre = np.linalg.solve(lines[:, :2], lines[:, 2])
    half_track, ground = 764.021, geometry.ground_mm()
    height = half_track * (centre[1] - ground) / (half_track - centre[0])
    assert height == pytest.approx(ref["arms_alone_roll_centre_height_mm"], abs=0.02)
    whole = evaluate(geometry)["axle"]["roll_centre_height_mm"]
    assert whole - height == pytest.approx(2.83, abs=0.03)


# --- camber in steer


def translating_corner(kingpin_deg, caster_deg):
    """Equal parallel arms: in bump the wheel only translates, so steer is a pure turn about one direction."""
    low, rise = np.array([0.0, 690.0, 160.0]), 280.0
    lean = np.tan(np.radians([caster_deg, kingpin_deg])) * rise
    up = low + [-lean[0], -lean[1], rise]
    points = {"lower_ball_joint": low, "upper_ball_joint": up}
    for name, at in (("front", [140.0, -320.0, 0.0]), ("rear", [-160.0, -320.0, 0.0])):
        points[f"lower_{name}_pivot"], points[f"upper_{name}_pivot"] = low + at, up + at
    points["tie_rod_outer"] = low + [-130.0, -5.0, 20.0]
    points["tie_rod_inner"] = points["tie_rod_outer"] + [0.0, -320.0, 0.0]
    wheel = {"centre": [0.0, 740.0, 300.0], "loaded_radius": 300.0}
    return spec_of("double-wishbone", points={k: list(map(float, v)) for k, v in points.items()}, wheel=wheel)


def test_camber_from_kingpin_and_caster_in_steer(kinematics):
    for kingpin, caster, steer, camber in kinematics["camber_in_steer"]["cases"]:
        geometry = parse_geometry(toml_text(translating_corner(kingpin, caster)), source="steer.toml")

        def miss(rack, geometry=geometry, wanted=steer):
            return -sweep(geometry, [(0.0, 0.0, rack)], keys=("toe_deg",))[0]["left"]["toe_deg"] - wanted

        rack = brentq(miss, -1.9 * steer, -2.9 * steer, xtol=1e-4)
        found = evaluate(geometry, rack_mm=rack)["left"]
        assert found["camber_deg"] == pytest.approx(camber, abs=6e-5), (kingpin, caster, steer)
        assert found["kingpin_deg"] == pytest.approx(kingpin, abs=1e-7)
        assert found["caster_deg"] == pytest.approx(caster, abs=1e-7)


# --- Ackermann


def ideal_outer(inner_deg, across, wheelbase):
    return np.degrees(np.arctan2(1.0, 1.0 / np.tan(np.radians(inner_deg)) + across / wheelbase))


def test_ackermann_share_is_that_of_the_ideal_difference(kinematics):
    ref = kinematics["ackermann"]
    assert ideal_outer(ref["inner_deg"], ref["axes_apart"], ref["wheelbase"]) == pytest.approx(
        ref["outer_deg"], abs=6e-5
    )
    spec = spec_of("double-wishbone", vehicle={"axle": "front", "wheelbase": 2500})
    straight, turned = program(spec), program(spec, rack_mm=-26.0)
    left = straight["left"]["toe_deg"] - turned["left"]["toe_deg"]
    right = turned["right"]["toe_deg"] - straight["right"]["toe_deg"]
    assert left > 10 and right > 10  # rack behind the axle moved right: both wheels steer left
    ideal = ideal_outer(left, turned["axle"]["track_mm"], 2500)
    assert turned["axle"]["ackermann_pct"] == pytest.approx(100 * (left - right) / (left - ideal), rel=1e-9)
    other_way = program(spec, rack_mm=26.0)["axle"]["ackermann_pct"]
    assert other_way == pytest.approx(turned["axle"]["ackermann_pct"], rel=1e-9)


# --- virtual work: statics of the design position, no velocities at all


def reaction(spec, force, where):
    """Vertical force at the contact point that balances a force on the upright, held by five rods."""
    contact = contact_of(spec)
    rods = [(f"{a}_{e}_pivot", f"{a}_ball_joint") for a in ("upper", "lower") for e in ("front", "rear")]
    columns = []
    for inner, outer in [*rods, ("tie_rod_inner", "tie_rod_outer")]:
        end = np.array(spec["points"][outer])
        along = np.array(spec["points"][inner]) - end
        columns.append(np.concatenate([along, np.cross(end - contact, along)]) / np.linalg.norm(along))
    columns.append([0, 0, 1.0, 0, 0, 0])
    load = np.concatenate([force, np.cross(where - contact, force)])
    return np.linalg.solve(np.array(columns).T, -load)[5]


def contact_of(spec):
    wheel = spec["wheel"]
    spin = spin_axis(wheel.get("camber_deg", 0.0), wheel.get("toe_deg", 0.0))
    up = np.array([0, 0, 1.0]) - spin[2] * spin
    return np.array(wheel["centre"]) - wheel["loaded_radius"] * up / np.linalg.norm(up)


@settings(max_examples=10)
@given(specs("double-wishbone"))
def test_virtual_work(spec):
    """A force's jacking is its rate: lateral gives the roll centre, lengthways the share of dive resisted."""
    spec["wheel"]["toe_deg"] = 0.0
    found, contact, car = program(spec), contact_of(spec), spec["vehicle"]
    lateral = -reaction(spec, np.array([0, 1.0, 0]), contact)
    assert found["axle"]["roll_centre_height_mm"] == pytest.approx(lateral * contact[1], abs=1e-8 * 1000)
    front = car["axle"] == "front"
    for key, share, inboard in (
        ("anti_dive_pct" if front else "anti_lift_pct", "brake_share", car["brakes"] == "inboard"),
        ("drive_anti_lift_pct" if front else "anti_squat_pct", "drive_share", car["drive_torque"] == "chassis"),
    ):
        where = np.array(spec["wheel"]["centre"]) if inboard else contact
        jacking = -reaction(spec, np.array([1.0 if front else -1.0, 0, 0]), where)
        percent = 100 * car[share] * jacking * car["wheelbase"] / car["cg_height"]
        assert found["left"][key] == pytest.approx(percent, abs=1e-7), key


# --- body roll, common practice


@settings(max_examples=8)
@given(specs("double-wishbone"))
def test_what_stays_of_body_roll_in_front_view(spec):
    """1 - (half track / swing arm) of the roll stays as camber, in a linkage that moves in the front view
    only."""
    p = spec["points"]
    pick = [p[name][1:] for name in ("lower_front_pivot", "lower_ball_joint", "upper_front_pivot", "upper_ball_joint")]
    left = program(flat_corner(*pick, [0.0, 745.0, 300.0], 300.0))["left"]
    kept = 1 - left["half_track_mm"] * left["swing_arm_curvature_per_m"] / 1000
    assert left["roll_camber_deg_per_deg"] == pytest.approx(kept, abs=1e-9)
    assert left["roll_steer_deg_per_deg"] == pytest.approx(0, abs=1e-9)
