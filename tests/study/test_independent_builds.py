"""Built and aligned cars against corners put together one by one by other equations."""

from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import root

from catalog.geometry_file import parse_geometry, read_geometry
from study.measures import KEYS
from study.response import Response
from study.study_file import parse_study
from tests.conftest import REFERENCES
from tests.independent_measures import Corner, disagreements, wheel_values
from tests.independent_measures import evaluate as by_differences
from tests.strategies import LINKAGES, SPRING, bodies_of, spec_of, toml_text, vehicle_of

CAR = {"axle": "front", "wheelbase": 2500, "cg_height": 400, "brake_share": 0.6, "drive_share": 0.3}
SIZES = {"point": 0.7, "length": 0.5, "angles": 0.12}
ADJUSTERS = {
    "double-wishbone": {"toe": "tie_rod", "camber": "upper_arm", "caster": "upper_arm_split"},
    "strut": {"toe": "tie_rod", "camber": "strut_top", "caster": "strut_top_x"},
    "five-link": {"toe": "toe", "camber": "upper_trail"},
    "semi-trailing-arm": {"toe": "hinge_outer"},
    "solid-axle": {},
}
POSITIONS = ({}, {"bump_mm": 24.0, "roll_deg": 1.3, "rack_mm": -11.0})


def case(linkage, arms=None):
    spec = spec_of(linkage, vehicle=CAR | {"axle": "rear" if linkage == "solid-axle" else "front"})
    spec["wheel"] |= {"camber_deg": -1.0, "toe_deg": 0.1}
    spec["points"] = spec.get("points", {}) | SPRING
    if arms:
        spec["arms"] = arms
    return spec


def places(linkage):
    steers = linkage in ("double-wishbone", "strut", "five-link")
    return [dict(place, rack_mm=place["rack_mm"] * steers) if place else {} for place in POSITIONS]


def study_text(spec, *, sides, adjust, extra="", ride=False):
    """Every feature free, every measure at every place."""
    lines = ['title = "t"', 'geometry = "g.toml"', 'method = "spread"', "size = 16", f'sides = "{sides}"']
    lines += ["[errors]", '"*" = { plus_minus = 1.0 }', '"*_axis*" = { tilt_deg = 0.2 }']
    if ride or adjust:
        lines.append("[alignment]")
    if ride:
        lines.append("ride_height = { within_mm = 3.0 }")
    lines += [f'{name} = {{ by = "{by}", within_deg = 0.1{extra} }}' for name, by in adjust.items()]
    solid = spec["linkage"] == "solid-axle"
    for place in places(spec["linkage"]):
        at = ", ".join(f"{name.split('_')[0]} = {value}" for name, value in place.items())
        for key, info in KEYS.items():
            axle = info.scope_on(solid) == "axle"
            if key.startswith("cross_") and sides == "mirrored":
                continue
            for side in [""] if axle else ["left", "right"]:
                lines += ["[[measures]]", f'of = "{key}"', f"at = {{ {at} }}", f'name = "{len(lines)}"']
                lines += [f'side = "{side}"'] if side else []
    return "\n".join(lines) + "\n"


def response_of(spec, *, stage="after", **how):
    geometry = parse_geometry(toml_text(spec), source="g.toml")
    return Response(geometry, parse_study(study_text(spec, **how), source="s.toml"), stage=stage)


def draw(response, count, seed):
    """Errors (D, N), each source's within its size; bands and ride height too."""
    rng = np.random.default_rng(seed)
    errors = np.zeros((response.model.scalars, count))
    for source in response.model.sources:
        size = {"alignment.ride_height": 2.0}.get(
            source.name, 0.08 if "alignment" in source.name else SIZES[source.kind]
        )
        for rows in source.columns:
            errors[list(rows)] = rng.uniform(-size, size, (len(rows), count))
    return errors


def hand_errors(response, errors, number, hand):
    """{"part.feature": error} of one hand of one build, angles in radians."""
    found = {}
    for source in response.model.sources:
        values = errors[list(source.of_hand(hand)), number]
        if source.name == "rack.mount" and response.study.sides == "independent":
            found[source.name] = values * [1, -1 if hand == "right" else 1, 1]
        elif source.kind == "length":
            found[source.name] = float(values[0])
        else:
            found[source.name] = np.radians(values) if source.kind == "angles" else values
    return found


def values_of(response, outcome, spec, number):
    """The program's values of one build: per place {"left": …, "right": …, "axle": …}."""
    found = [{"left": {}, "right": {}, "axle": {}} for _ in POSITIONS]
    solid = spec["linkage"] == "solid-axle"
    for measure, value in zip(response.study.measures, outcome.values[:, number], strict=True):
        axle = KEYS[measure.of].scope_on(solid) == "axle"
        place = 1 if measure.bump_mm else 0
        found[place]["axle" if axle else measure.side][measure.of] = float(value) if np.isfinite(value) else None
    return found


def check_build(response, outcome, spec, number, left, right, ride):
    for place, found in zip(places(spec["linkage"]), values_of(response, outcome, spec, number), strict=True):
        expected = expected_values(spec, left, right, ride, place)
        if not found["axle"].get("cross_camber_deg"):
            expected["axle"] = {k: v for k, v in expected["axle"].items() if not k.startswith("cross_")}
        assert not disagreements(expected, found)


def expected_values(spec, left, right, ride, place):
    """Both hands were left equally high here, so that one bump does for both."""
    moved = dict(place, bump_mm=place.get("bump_mm", 0.0) + ride)
    return by_differences(*bodies_of(spec, left, right), vehicle_of(spec), **moved)


ARMS = [
    {"upper_arm": ("one-piece", "centre"), "lower_arm": ("legs", "centre")},
    {"upper_arm": ("legs", "centre"), "lower_arm": ("one-piece", "front")},
    {"upper_arm": ("one-piece", "rear"), "lower_arm": ("one-piece", "centre")},
]
CASES = [("double-wishbone", arms) for arms in ARMS]
CASES += [("strut", {"lower_arm": ("one-piece", "centre")}), ("strut", {"lower_arm": ("legs", "centre")})]
CASES += [(linkage, None) for linkage in LINKAGES[2:]]


@pytest.mark.parametrize(("linkage", "arms"), CASES)
@pytest.mark.parametrize("sides", ["mirrored", "independent"])
def test_built_cars(linkage, arms, sides):
    """Every feature of every part off at once."""
    spec = case(linkage, arms)
    response = response_of(spec, sides=sides, adjust={}, ride=True, stage="before")
    rides = [1.7] if sides == "mirrored" else [-1.1, 0.6]
    errors = draw(response, len(rides), seed=len(linkage))
    for hand in ("left", "right"):
        errors[response.model.bands[hand]["ride_height"]] = rides
    outcome = response.evaluate(errors)
    assert not outcome.status.any()
    for number, ride in enumerate(rides):
        left, right = (hand_errors(response, errors, number, hand) for hand in ("left", "right"))
        check_build(response, outcome, spec, number, left, right, ride)


def test_an_error_moves_only_its_part_and_never_the_design():
    """A chassis pivot moves the car and not the arm's length: 1 mm outboard pushes the ball joint outboard."""
    spec = case("double-wishbone", ARMS[1])
    response = response_of(spec, sides="mirrored", adjust={}, stage="before")
    names = [source.name for source in response.model.sources]
    assert "upper_arm.front_leg" in names and "upper_arm.upper_ball_joint" not in names
    assert "lower_arm.lower_ball_joint" in names and "lower_arm.front_leg" not in names
    assert {"rack.tie_rod_inner", "upright.tie_rod_outer", "tie_rod.length", "upright.hub_axis"} <= set(names)
    errors = np.zeros((response.model.scalars, 3))
    rows = {name: response.model.sources[names.index(name)].columns[0] for name in names}
    errors[rows["chassis.upper_front_pivot"][1], 1] = errors[rows["chassis.upper_rear_pivot"][1], 1] = 1.0
    errors[rows["upper_arm.front_leg"][0], 2] = errors[rows["upper_arm.rear_leg"][0], 2] = 1.0
    camber = next(i for i, m in enumerate(response.study.measures) if m.of == "camber_deg" and not m.bump_mm)
    nominal, shimmed, longer = response.evaluate(errors).values[camber]
    assert nominal == pytest.approx(-1.0, abs=1e-9)
    assert 0.12 < shimmed - nominal < 0.3
    assert longer > nominal


def test_a_millimetre_of_upper_arm_shim_is_about_a_quarter_of_a_degree(kinematics):
    spec = case("double-wishbone", ARMS[0])
    errors = {f"chassis.upper_{end}_pivot": [0.0, -1.0, 0.0] for end in ("front", "rear")}
    left, _ = bodies_of(spec, errors)
    found = by_differences(left, left, vehicle_of(spec))["left"]["camber_deg"] + 1.0
    usual = kinematics["shims"]["camber_deg_per_mm_of_upper_arm_shim"]
    assert -found == pytest.approx(usual, rel=0.4)


# --- alignment, found again by a general root finder


def moved_by(errors, by, amount, spec):
    """The errors of one hand with an adjuster moved by `amount` mm."""
    out = {name: np.array(value, float) for name, value in errors.items()}

    def add(name, by_how_much):
        out[name] = out.get(name, 0.0) + np.array(by_how_much, float)

    if by in ("strut_top", "strut_top_x"):
        add("chassis.strut_top", [amount, 0, 0] if by.endswith("_x") else [0, amount, 0])
    elif by.startswith("hinge"):
        add(f"chassis.{by}", [amount, 0, 0])
    elif "_arm" in by:
        arm, second = by.removesuffix("_split"), -amount if by.endswith("split") else amount
        legs = (spec.get("arms") or {}).get(arm, ("one-piece",))[0] == "legs"
        for end, shift in (("front", amount), ("rear", second)):
            if legs:
                add(f"{arm}.{end}_leg", shift)
            else:
                add(f"chassis.{arm.removesuffix('_arm')}_{end}_pivot", [0, shift, 0])
    else:
        add(f"{by}.length", amount)
    return out


def angles(spec, errors, ride, targets):
    corner = Corner(bodies_of(spec, errors)[0], bump_mm=ride)
    values = wheel_values(corner)
    return np.array([values[f"{target}_deg"] for target in targets])


def align_again(spec, errors, ride, adjust, *, fixed=None):
    """Settings (mm) that bring toe, camber, caster to the nominal's plus their bands; `fixed` ones stay."""
    fixed = fixed or {}
    free = [target for target in adjust if target not in fixed]
    goal = angles(spec, None, 0.0, free) + [errors[f"alignment.{target}"] for target in free]

    def built(settings):
        out = errors
        for target, by in adjust.items():
            out = moved_by(out, by, fixed.get(target, dict(zip(free, settings, strict=True)).get(target)), spec)
        return out

    found = root(lambda x: angles(spec, built(x), ride, free) - goal, np.zeros(len(free)), tol=1e-12)
    assert np.abs(found.fun).max() < 1e-8
    settings = dict(zip(free, found.x, strict=True)) | fixed
    return np.array([settings[target] for target in adjust]), built(found.x)


@pytest.mark.parametrize(("linkage", "arms"), [CASES[0], CASES[1], CASES[3], CASES[5], CASES[6]])
def test_aligned_cars(linkage, arms):
    spec, adjust = case(linkage, arms), ADJUSTERS[linkage]
    response = response_of(spec, sides="mirrored", adjust=adjust, ride=True)
    errors = draw(response, 1, seed=4)
    outcome = response.evaluate(errors)
    assert not outcome.status.any() and not outcome.ran_out.any()
    own = hand_errors(response, errors, 0, "left")
    settings, built = align_again(spec, own, own["alignment.ride_height"], adjust)
    assert outcome.settings[:, 0] == pytest.approx(settings, abs=1e-6)
    check_build(response, outcome, spec, 0, built, built, own["alignment.ride_height"])


def test_a_stepped_adjuster_takes_its_nearest_step_and_the_stepless_are_set_again():
    spec = case("double-wishbone", ARMS[0])
    adjust = {"toe": "tie_rod", "camber": "upper_arm"}
    text = study_text(spec, sides="mirrored", adjust=adjust)
    text = text.replace('by = "upper_arm",', 'by = "upper_arm", step_mm = 0.5, range_mm = 4.0,')
    geometry = parse_geometry(toml_text(spec), source="g.toml")
    response = Response(geometry, parse_study(text, source="s.toml"))
    errors = draw(response, 3, seed=9)
    outcome = response.evaluate(errors)
    for number in range(3):
        own = hand_errors(response, errors, number, "left")
        free, _ = align_again(spec, own, 0.0, adjust)
        stepped = 0.5 * round(free[1] / 0.5)
        settings, built = align_again(spec, own, 0.0, adjust, fixed={"camber": stepped})
        assert outcome.settings[:, number] == pytest.approx(settings, abs=1e-6)
        if number == 0:
            check_build(response, outcome, spec, number, built, built, 0.0)


def test_an_adjuster_that_runs_out_stays_at_its_stop_and_toe_is_still_set():
    spec = case("double-wishbone", ARMS[0])
    adjust = {"toe": "tie_rod", "camber": "upper_arm"}
    text = study_text(spec, sides="mirrored", adjust=adjust)
    text = text.replace('by = "upper_arm",', 'by = "upper_arm", range_mm = 1.0,')
    geometry = parse_geometry(toml_text(spec), source="g.toml")
    response = Response(geometry, parse_study(text, source="s.toml"))
    errors = np.zeros((response.model.scalars, 2))
    names = [source.name for source in response.model.sources]
    for name in ("chassis.upper_front_pivot", "chassis.upper_rear_pivot"):
        errors[response.model.sources[names.index(name)].columns[0][1]] = [2.5, -0.5]
    outcome = response.evaluate(errors)
    assert outcome.ran_out.tolist() == [[False, False], [True, False]]
    assert outcome.settings[1] == pytest.approx([-1.0, 0.5], abs=1e-6)
    own = hand_errors(response, errors, 0, "left")
    settings, built = align_again(spec, own, 0.0, adjust, fixed={"camber": -1.0})
    assert outcome.settings[0, 0] == pytest.approx(settings[0], abs=1e-6)
    check_build(response, outcome, spec, 0, built, built, 0.0)


DEMO = Path(__file__).parents[2] / "studies"
AS_SET = """
[[measures]]
of = "toe_deg"
[[measures]]
of = "caster_deg"
[[measures]]
of = "camber_deg"
"""


@pytest.mark.parametrize("seed", [0, 10])
def test_thousands_of_stepped_builds_are_left_where_the_workshop_leaves_them(seed):
    """Builds that are set early wait for the others without harm."""
    text = (DEMO / "front-brackets.toml").read_text(encoding="utf-8")
    study = parse_study(text[: text.index("[[measures]]")] + AS_SET, source="s.toml")
    response = Response(read_geometry(DEMO / study.geometry), study)
    unit = np.random.default_rng(seed).random((response.model.scalars, 4096))
    errors = response.model.field.to_errors(unit)
    outcome = response.evaluate(errors)
    assert not outcome.status.any()
    rows = response.model.bands["left"]
    nominal = response.evaluate(np.zeros((response.model.scalars, 1))).values[:, 0]
    for number, target in enumerate(["toe", "caster"]):
        left = outcome.values[number] - nominal[number] - errors[rows[target]]
        assert np.abs(left).max() < 1e-7, target
    steps = outcome.settings[1] / 0.5
    assert np.abs(steps - np.round(steps)).max() < 1e-9
    camber_left = outcome.values[2] - nominal[2] - errors[rows["camber"]]
    assert np.abs(camber_left).max() < 0.1  # half a step of 0.5 mm, a little over a quarter of a degree per mm


def test_a_millimetre_of_rack_end_and_the_toe_adjuster(kinematics):
    """0.414 degrees of toe before alignment, none of it after."""
    ref = kinematics["spatial_corner"]
    text = (REFERENCES / ref["geometry"]).read_text(encoding="utf-8")
    geometry = parse_geometry(text, source="spatial-corner.toml")
    study = """title = "t"
geometry = "g.toml"
method = "linear"
sides = "mirrored"
[errors]
"rack.tie_rod_inner" = { plus_minus = 1.0 }
[alignment]
toe = { by = "tie_rod", within_deg = 0.01 }
[[measures]]
of = "toe_deg"
"""
    study = parse_study(study, source="s.toml")
    for stage, wanted in (("before", ref["rack_end_error_1_mm_static_toe_deg"]), ("after", 0.0)):
        response = Response(geometry, study, stage=stage)
        errors = np.zeros((response.model.scalars, 1))
        errors[1] = 1.0
        toe = response.evaluate(errors).values[0, 0]
        assert abs(toe) == pytest.approx(wanted, abs=6e-4 if wanted else 1e-8)
