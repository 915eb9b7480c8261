"""Struts, five links, trailing arms and solid axles against handbook rules, statics and closed rotations."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import brentq
from scipy.spatial.transform import Rotation

from catalog.errors import InputError
from catalog.geometry_file import parse_geometry
from study.nominal import evaluate
from tests.independent import spin_axis
from tests.strategies import spec_of, specs, toml_text

RADIUS = 300.0


def program(spec, **position):
    return evaluate(parse_geometry(toml_text(spec), source="case.toml"), **position)


def trailing_arm(inner, outer, vehicle, **wheel):
    wheel = {"centre": [0.0, 720.0, RADIUS], "loaded_radius": RADIUS} | wheel
    return spec_of(
        "semi-trailing-arm", points={"hinge_inner": inner, "hinge_outer": outer}, wheel=wheel, vehicle=vehicle
    )


# --- lengthways: angles of the side-view instant centre


def test_anti_dive_angle_of_a_published_build(kinematics):
    ref = kinematics["anti_dive_angle"]
    behind = 1800.0
    high = behind * np.tan(np.radians(ref["angle_deg"]))
    car = {"axle": "front", "wheelbase": ref["wheelbase_mm"], "cg_height": ref["cg_height_mm"]}
    car |= {"brake_share": ref["brake_share"], "steered": False}
    left = program(trailing_arm([-behind, 300.0, high], [-behind, 600.0, high], car))["left"]
    assert left["anti_dive_pct"] == pytest.approx(ref["anti_dive_pct"], abs=5e-3)
    assert (left["side_view_ic_x_mm"], left["side_view_ic_z_mm"]) == pytest.approx((-behind, high), abs=1e-6)


def rear_car(**rest):
    return {"axle": "rear", "wheelbase": 2500, "cg_height": 500, "drive_share": 1.0, "brake_share": 0.4} | rest


@pytest.mark.parametrize("reacted_by", ["chassis", "axle"])
def test_full_anti_squat_of_a_trailing_arm(reacted_by):
    """e/d = h/L with the torque on the arm, (e - r)/d = h/L with the torque on the chassis."""
    ahead = 700.0
    high = ahead * 500 / 2500 + (RADIUS if reacted_by == "chassis" else 0.0)
    spec = trailing_arm([ahead, 200.0, high], [ahead, 600.0, high], rear_car(drive_torque=reacted_by))
    left = program(spec)["left"]
    assert left["anti_squat_pct"] == pytest.approx(100.0, abs=1e-7)
    lower = trailing_arm([ahead, 200.0, high - 50], [ahead, 600.0, high - 50], rear_car(drive_torque=reacted_by))
    assert program(lower)["left"]["anti_squat_pct"] < 100


@pytest.mark.parametrize(("brakes", "lever"), [("outboard", 0.0), ("inboard", RADIUS)])
def test_rear_brakes_resist_lift_by_what_holds_their_torque(brakes, lever):
    spec = trailing_arm([700.0, 200.0, 380.0], [700.0, 600.0, 380.0], rear_car(brakes=brakes))
    expected = 100 * 0.4 * (380.0 - lever) / 700 * 2500 / 500
    assert program(spec)["left"]["anti_lift_pct"] == pytest.approx(expected, abs=1e-7)


def converging_axle(ahead, high):
    """Two lower links and an A-bracket of two, meeting in side view at `ahead`, `high`."""
    meet = np.array([ahead, 0.0, high])
    links = {}
    for name, side in (("left", 1.0), ("right", -1.0)):
        low, top = np.array([0.0, 480.0 * side, 200.0]), np.array([20.0, 40.0 * side, 430.0])
        toward_low, toward_top = meet + [0, 480.0 * side, 0], meet + [0, 400.0 * side, 0]
        links[f"lower_{name}"] = (list(low + 0.5 * (toward_low - low)), list(low))
        links[f"upper_{name}"] = (list(top + 0.4 * (toward_top - top)), list(top))
    wheel = {"centre": [0.0, 720.0, RADIUS], "loaded_radius": RADIUS}
    return links, wheel


def test_full_anti_squat_of_a_solid_axle():
    ahead = 1200.0
    links, wheel = converging_axle(ahead, ahead * 500 / 2500)
    found = program(spec_of("solid-axle", links=links, wheel=wheel, vehicle=rear_car(drive_torque="axle")))
    assert found["axle"]["anti_squat_pct"] == pytest.approx(100.0, abs=1e-6)
    for side in ("left", "right"):
        centre = found[side]["side_view_ic_x_mm"], found[side]["side_view_ic_z_mm"]
        assert centre == pytest.approx((ahead, ahead * 500 / 2500), abs=1e-5)


# --- solid axle


def panhard_axle(height, x=-120.0):
    """Three level links along the car and a level rod across it."""
    links = {
        "lower_left": ([520.0, 480.0, 220.0], [0.0, 480.0, 220.0]),
        "lower_right": ([520.0, -480.0, 220.0], [0.0, -480.0, 220.0]),
        "upper": ([450.0, 30.0, 430.0], [20.0, 30.0, 430.0]),
        "panhard": ([x, -450.0, height], [x, 460.0, height]),
    }
    return spec_of("solid-axle", links=links, wheel={"centre": [0.0, 720.0, RADIUS], "loaded_radius": RADIUS})


@pytest.mark.parametrize("height", [180.0, 255.0, 340.0])
def test_roll_centre_at_the_height_of_a_level_panhard_rod(height):
    found = program(panhard_axle(height))
    assert found["axle"]["roll_centre_height_mm"] == pytest.approx(height, abs=1e-6)
    assert found["axle"]["roll_centre_offset_mm"] is None


def test_a_solid_axle_keeps_its_wheels_to_each_other_and_to_the_road():
    spec = spec_of("solid-axle")
    spec["wheel"]["toe_deg"] = 0.2
    for position in ({}, {"bump_mm": 30.0}, {"roll_deg": 2.5}, {"bump_mm": -20.0, "roll_deg": -2.0}):
        found = program(spec, **position)
        left, right = found["left"], found["right"]
        assert left["toe_deg"] + right["toe_deg"] == pytest.approx(0.4, abs=2e-4)
        assert left["camber_deg"] == pytest.approx(0, abs=0.01)  # the axle pitches a little
        assert right["camber_deg"] == pytest.approx(0, abs=0.01)
        assert found["axle"]["track_mm"] == pytest.approx(1440.0, abs=0.1)  # nor does it stand quite square
    heave = program(spec)
    assert heave["left"]["roll_camber_deg_per_deg"] == pytest.approx(0, abs=1e-3)
    assert heave["left"]["caster_deg"] is None


def test_axle_steer_in_roll_is_a_turn_of_the_whole_axle():
    found = program(spec_of("solid-axle"), roll_deg=2.0)
    assert found["left"]["toe_deg"] == pytest.approx(-found["right"]["toe_deg"], abs=1e-9)
    rates = [found[side]["roll_steer_deg_per_deg"] for side in ("left", "right")]
    assert rates[0] == pytest.approx(rates[1], abs=1e-9)  # as outer wheel each: the same turn seen from both


def test_a_panhard_rod_shifts_the_axle_sideways_in_bump():
    spec = panhard_axle(260.0)
    spec["links"]["panhard"] = ([-120.0, -450.0, 300.0], [-120.0, 460.0, 260.0])
    found = program(spec)
    slope = 40.0 / 910.0
    assert found["left"]["track_change_mm_per_mm"] == pytest.approx(slope, abs=1e-3)
    assert found["right"]["track_change_mm_per_mm"] == pytest.approx(-slope, abs=1e-3)


# --- semi-trailing arm: a closed rotation


@settings(max_examples=15)
@given(specs("semi-trailing-arm"), st.floats(-60, 60))
def test_semi_trailing_arm_turns_about_its_hinge(spec, bump):
    inner, outer = (np.array(spec["points"][name]) for name in ("hinge_inner", "hinge_outer"))
    axis = (outer - inner) / np.linalg.norm(outer - inner)
    wheel = spec["wheel"]
    spin = spin_axis(wheel["camber_deg"], wheel["toe_deg"])
    centre, radius = np.array(wheel["centre"]), wheel["loaded_radius"]

    def wheel_at(angle):
        turn = Rotation.from_rotvec(angle * axis)
        return inner + turn.apply(centre - inner), turn.apply(spin)

    def lowest(angle):
        where, along = wheel_at(angle)
        return where[2] - radius * np.sqrt(1 - along[2] ** 2)

    angle = brentq(lambda a: lowest(a) - lowest(0.0) - bump, -0.5, 0.5, xtol=1e-15)
    _, along = wheel_at(angle)
    left = program(spec, bump_mm=bump)["left"]
    assert left["camber_deg"] == pytest.approx(-np.degrees(np.arcsin(along[2])), abs=1e-9)
    assert left["toe_deg"] == pytest.approx(np.degrees(np.arctan2(along[0], along[1])), abs=1e-9)
    assert left["caster_deg"] is None


@pytest.mark.parametrize("inside", [0.0, -150.0, 150.0])
def test_swing_axle_keeps_its_share_of_body_roll(inside, kinematics):
    """Hinge along the car: 1 - half track / swing arm stays, so nothing where the two are equal."""
    assert "half the track" in kinematics["body_roll"]["upright_at"]
    left = program(trailing_arm([250.0, inside, 310.0], [-150.0, inside, 310.0], rear_car()))["left"]
    assert left["swing_arm_mm"] == pytest.approx(720.0 - inside, abs=1e-6)
    assert left["roll_camber_deg_per_deg"] == pytest.approx(1 - 720.0 / (720.0 - inside), abs=1e-9)
    if inside == 0:
        assert left["roll_camber_deg_per_deg"] == pytest.approx(0, abs=1e-9)


def test_the_longer_the_swing_arm_the_closer_camber_follows_roll(kinematics):
    shares = [0.6, *kinematics["body_roll"]["usual_rear_swing_arm_tracks"], 2.0]
    kept = []
    for share in shares:
        inside = 720.0 - share * 1440.0
        left = program(trailing_arm([250.0, inside, 310.0], [-150.0, inside, 310.0], rear_car()))["left"]
        kept.append(left["roll_camber_deg_per_deg"])
    assert kept == sorted(kept) and kept[0] > 0 and kept[-1] < 1


# --- strut and five links: statics of the design position


def contact_of(spec):
    wheel = spec["wheel"]
    spin = spin_axis(wheel.get("camber_deg", 0.0), wheel.get("toe_deg", 0.0))
    up = np.array([0, 0, 1.0]) - spin[2] * spin
    return np.array(wheel["centre"]) - wheel["loaded_radius"] * up / np.linalg.norm(up)


def wrench(force, where, about):
    return np.concatenate([force, np.cross(np.asarray(where) - about, force)])


def jacking(spec, force, where):
    """Minus the vertical road force at the contact point that balances a force on the upright."""
    about = contact_of(spec)
    points = spec.get("points", {})
    rods = list(spec.get("links", {}).values())
    columns = []
    if spec["linkage"] == "strut":
        rods = [(points[f"lower_{end}_pivot"], points["lower_ball_joint"]) for end in ("front", "rear")]
        rods.append((points["tie_rod_inner"], points["tie_rod_outer"]))
        along = np.subtract(points["strut_top"], points["strut_lower"])
        for other in ([1.0, 0, 0], [0, 1.0, 0]):
            columns.append(wrench(np.cross(along, other) / np.linalg.norm(along), points["strut_top"], about))
    for inner, outer in rods:
        columns.append(wrench(np.subtract(inner, outer) / np.linalg.norm(np.subtract(inner, outer)), outer, about))
    columns.append(wrench(np.array([0, 0, 1.0]), about, about))
    return -np.linalg.solve(np.array(columns).T, -wrench(force, where, about))[5]


@pytest.mark.parametrize("linkage", ["strut", "five-link"])
@settings(max_examples=8)
@given(data=st.data())
def test_virtual_work(linkage, data):
    spec = data.draw(specs(linkage))
    spec["wheel"]["toe_deg"] = 0.0
    spec["vehicle"] |= {"brakes": "outboard", "drive_torque": "chassis"}
    found, contact, car = program(spec), contact_of(spec), spec["vehicle"]
    lateral = jacking(spec, np.array([0, 1.0, 0]), contact)
    assert found["axle"]["roll_centre_height_mm"] == pytest.approx(lateral * contact[1], abs=1e-5)
    front = car["axle"] == "front"
    ahead = np.array([1.0 if front else -1.0, 0, 0])
    brake, drive = ("anti_dive_pct", "drive_anti_lift_pct") if front else ("anti_lift_pct", "anti_squat_pct")
    lever = 100 * car["wheelbase"] / car["cg_height"]
    assert found["left"][brake] == pytest.approx(lever * car["brake_share"] * jacking(spec, ahead, contact), abs=1e-7)
    by_centre = jacking(spec, ahead, spec["wheel"]["centre"])
    assert found["left"][drive] == pytest.approx(lever * car["drive_share"] * by_centre, abs=1e-7)


def test_a_five_link_with_real_ball_joints_has_their_steering_axis():
    """Two pairs of links that meet in points are arms: the screw axis of steering goes through both.

    The wheel centre sits on that axis, so holding its height or that of the lower joint is the same.
    """
    wishbone = spec_of("double-wishbone")
    points = wishbone["points"]
    middle = np.add(points["upper_ball_joint"], points["lower_ball_joint"]) / 2
    wishbone["wheel"] = {"centre": list(middle), "loaded_radius": RADIUS, "camber_deg": -1.0, "toe_deg": 0.3}
    arms = [(f"{arm}_{end}", arm) for arm in ("upper", "lower") for end in ("front", "rear")]
    links = {name: (points[f"{name}_pivot"], points[f"{arm}_ball_joint"]) for name, arm in arms}
    links["toe"] = (points["tie_rod_inner"], points["tie_rod_outer"])
    five = spec_of("five-link", links=links, wheel=wishbone["wheel"])
    for position in ({}, {"bump_mm": 25.0, "roll_deg": 1.0, "rack_mm": 8.0}):
        one, two = program(wishbone, **position), program(five, **position)
        for side in ("left", "right"):
            for key, value in one[side].items():
                if value is not None and "_arm_fit" not in key:
                    assert two[side][key] == pytest.approx(value, rel=1e-8, abs=1e-8), key


@pytest.mark.parametrize("linkage", ["semi-trailing-arm", "solid-axle"])
def test_rack_travel_without_a_steer_link_is_refused(linkage):
    with pytest.raises(InputError, match="rack"):
        program(spec_of(linkage), rack_mm=5.0)
