import tomllib
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.stats import qmc, truncnorm

from study import zones
from study.zone_entries import ZoneError, parse_zone
from study.zone_field import ZoneField
from study.zones import Zone

REFERENCE = tomllib.loads((Path(__file__).parents[1] / "references" / "sensitivity.toml").read_text("utf-8"))

SLANTED = [1.0, 2.0, 2.0]
ENTRIES = {
    "box": {"plus_minus": 1.0},
    "box of three": {"plus_minus": [1.0, 0.5, 0.0], "shift": [0.1, 0.0, -0.2]},
    "box normal": {"plus_minus": 1.0, "distribution": "normal", "cp": 0.8, "shift": 0.3},
    "box inspected": {
        "plus_minus": [1.0, 0.4, 0.0],
        "distribution": "normal",
        "cp": 0.7,
        "truncated": True,
        "shift": [0.8, -0.6, 0.0],
    },
    "box inspected uniform": {"plus_minus": 1.0, "truncated": True, "shift": [0.5, -1.2, 0.0]},
    "length": {"length": 0.2},
    "length inspected": {"length": 0.2, "distribution": "normal", "cp": 0.5, "truncated": True, "shift": 0.3},
    "ball": {"diameter": 0.6},
    "ball normal": {"diameter": 0.6, "distribution": "normal", "shift": 0.1},
    "ball inspected": {"diameter": 0.6, "distribution": "normal", "cp": 0.4, "truncated": True},
    "cylinder": {"diameter": 0.6, "axis": "x", "depth": 1.0},
    "cylinder slanted": {"diameter": 0.6, "axis": SLANTED, "depth": 1.0, "shift": [0.1, 0.2, 0.3]},
    "cylinder normal": {"diameter": 0.6, "axis": SLANTED, "depth": 1.0, "distribution": "normal"},
    "cylinder inspected": {
        "diameter": 0.6,
        "axis": SLANTED,
        "depth": 1.0,
        "distribution": "normal",
        "cp": 0.5,
        "truncated": True,
    },
    "tilt": {"tilt_deg": 0.5},
    "tilt normal": {"tilt_deg": 0.5, "distribution": "normal", "cp": 1.3},
    "tilt inspected": {"tilt_deg": 0.5, "distribution": "normal", "cp": 0.6, "truncated": True},
}
ZONES = {name: parse_zone(entry) for name, entry in ENTRIES.items()}
each_zone = pytest.mark.parametrize("zone", ZONES.values(), ids=ZONES.keys())


def sample(zone: Zone, power: int = 16) -> np.ndarray:
    return zones.to_errors(zone, qmc.Sobol(zone.n_scalars, seed=5).random_base2(power).T)


def inside(zone: Zone, errors: np.ndarray, slack: float = 1e-12) -> np.ndarray:
    """Whether errors (k, N) lie in the zone about its middle, by the definition of each form."""
    middle = np.zeros(zone.n_scalars) if zone.truncated else np.array(zone.shift)
    errors = errors - middle[:, None]
    if zone.form in ("box", "length"):
        return (np.abs(errors) <= np.array(zone.half)[:, None] + slack).all(axis=0)
    if zone.form != "cylinder":
        return np.linalg.norm(errors, axis=0) <= zone.half[0] + slack
    along = np.array(zone.axis) @ errors
    across = np.linalg.norm(errors - np.outer(zone.axis, along), axis=0)
    return (np.abs(along) <= zone.half[1] + slack) & (across <= zone.half[0] + slack)


@each_zone
def test_moments_are_those_of_large_samples(zone):
    errors = sample(zone)
    np.testing.assert_allclose(errors.mean(axis=1), zones.mean(zone), atol=2e-4)
    np.testing.assert_allclose(np.cov(errors), zones.covariance(zone), atol=6e-4)
    np.testing.assert_allclose(zones.sd(zone) ** 2, np.diag(zones.covariance(zone)))


@each_zone
def test_bounded_laws_stay_inside_and_normal_ones_leave_their_share_outside(zone):
    share = inside(zone, sample(zone)).mean()
    if zone.distribution == "uniform" or zone.truncated:
        assert share == 1.0
    elif zone.cp == 1.0 and zone.form != "cylinder":
        assert share == pytest.approx(REFERENCE["inside"]["share"], abs=4e-4)


@each_zone
def test_extreme_point_lies_in_the_zone_and_beats_every_other(zone):
    gradients = np.random.default_rng(1).normal(size=(zone.n_scalars, 20))
    points = zones.extreme(zone, gradients)
    assert inside(zone, points).all()
    reached = zones.support(zone, gradients)
    errors = sample(zone, 10)
    others = gradients.T @ errors[:, inside(zone, errors)]
    assert (others.max(axis=1) <= reached + 1e-12).all()
    middle = zones.extreme(zone, np.zeros((zone.n_scalars, 1)))
    assert inside(zone, middle).all()


@each_zone
def test_walk_has_the_moments_of_the_zone(zone):
    unit = qmc.Sobol(zone.n_scalars, seed=2).random_base2(14).T
    walked = zones.walk(zone, unit)
    np.testing.assert_allclose(walked.mean(axis=1), zones.mean(zone), atol=1e-3)
    np.testing.assert_allclose(np.cov(walked), zones.covariance(zone), atol=1e-3)


@each_zone
def test_errors_do_not_depend_on_chunks_or_memory_layout(zone):
    unit = np.random.default_rng(3).random((1003, zone.n_scalars))
    whole = zones.to_errors(zone, unit.T)
    parts = [zones.to_errors(zone, np.ascontiguousarray(unit[k : k + 37].T)) for k in range(0, 1003, 37)]
    assert np.array_equal(whole, np.hstack(parts))
    walks = [zones.walk(zone, unit[k : k + 37].T) for k in range(0, 1003, 37)]
    assert np.array_equal(zones.walk(zone, unit.T), np.hstack(walks))


@each_zone
def test_ends_of_the_unit_cube_are_finite(zone):
    corners = np.array(np.meshgrid(*[[0.0, 1.0]] * zone.n_scalars)).reshape(zone.n_scalars, -1)
    assert np.isfinite(zones.to_errors(zone, corners)).all()


def test_uniform_standard_deviations():
    known = REFERENCE["zones"]
    assert zones.sd(parse_zone({"plus_minus": 1.0})) == pytest.approx([known["plus_minus"]] * 3, abs=1e-4)
    assert zones.sd(parse_zone({"diameter": 1.0})) == pytest.approx([known["ball_of_diameter"]] * 3, abs=1e-4)
    cylinder = zones.sd(parse_zone({"diameter": 1.0, "axis": "x", "depth": 1.0}))
    disc = known["disc_of_diameter"]
    assert cylinder == pytest.approx([known["plus_minus"], disc, disc], abs=1e-4)
    assert zones.sd(parse_zone({"tilt_deg": 0.5})) == pytest.approx([disc, disc], abs=1e-4)


def test_normal_standard_deviations():
    normal = {"distribution": "normal", "cp": 1.25}
    assert zones.sd(parse_zone({"length": 3.0, **normal})) == pytest.approx([3.0 / (3 * 1.25)])
    assert zones.sd(parse_zone({"tilt_deg": 3.0, **normal})) == pytest.approx([3.0 / (3.44 * 1.25)] * 2)
    assert zones.sd(parse_zone({"diameter": 6.0, **normal})) == pytest.approx([3.0 / (3.76 * 1.25)] * 3)


def test_walk_of_a_uniform_ball_is_a_box_of_775_thousandths_of_its_radius():
    ball = parse_zone({"diameter": 2.0})
    assert zones.walk(ball, np.ones((3, 1))).ravel() == pytest.approx([0.775] * 3, abs=5e-4)


@settings(max_examples=60, deadline=None)
@given(shift=st.floats(-1.5, 1.5), cp=st.floats(0.1, 2.0))
def test_inspected_length_is_a_truncated_normal_law(shift, cp):
    zone = Zone("length", (1.0,), distribution="normal", cp=cp, truncated=True, shift=(shift,))
    if zones.accepted_share(zone) < 1e-4:
        return
    sigma = 1.0 / (3.0 * cp)
    law = truncnorm((-1.0 - shift) / sigma, (1.0 - shift) / sigma, loc=shift, scale=sigma)
    unit = np.array([[0.001, 0.3, 0.5, 0.9, 0.999]])
    np.testing.assert_allclose(zones.to_errors(zone, unit)[0], law.ppf(unit[0]), atol=1e-9)
    assert zones.mean(zone)[0] == pytest.approx(law.mean(), abs=1e-8)
    assert zones.covariance(zone)[0, 0] == pytest.approx(law.var(), rel=1e-6)


def test_accepted_share_is_that_of_rejection():
    rng = np.random.default_rng(4)
    for name in ("box inspected uniform", "length inspected", "ball inspected", "tilt inspected"):
        zone = ZONES[name]
        made = Zone(zone.form, zone.half, zone.axis, zone.distribution, zone.cp, False, zone.shift)
        errors = zones.to_errors(made, rng.random((zone.n_scalars, 200_000)))
        assert zones.accepted_share(zone) == pytest.approx(inside(zone, errors).mean(), abs=4e-3), name


@pytest.mark.parametrize("axis", ["x", "y", "z", SLANTED, [-1, 0, 0], [0.999999, 0.001, 0]])
def test_frame_of_a_cylinder_is_right_handed_and_repeatable(axis):
    zone = parse_zone({"diameter": 1.0, "axis": axis, "depth": 1.0})
    frame = zones.frame(zone)
    np.testing.assert_allclose(frame.T @ frame, np.eye(3), atol=1e-12)
    assert np.linalg.det(frame) == pytest.approx(1.0)
    assert np.array_equal(frame, zones.frame(zone))


def test_one_plus_minus_number_fits_a_length_too():
    box = parse_zone({"plus_minus": 0.4, "shift": 0.1})
    assert zones.fits(box, "length") and zones.for_kind(box, "length") == parse_zone(
        {"length": 0.4, "shift": 0.1}
    )
    assert not zones.fits(parse_zone({"plus_minus": [1, 2, 3]}), "length")
    assert not zones.fits(box, "angles") and zones.fits(box, "point")
    assert zones.scale(box, 2.0).half == (0.8, 0.8, 0.8)


@pytest.mark.parametrize(
    ("entry", "said"),
    [
        ({}, "exactly one of"),
        ({"plus_minus": 1.0, "length": 1.0}, "plus_minus and length"),
        ({"plus_minus": -1.0}, "-1.0"),
        ({"plus_minus": [0, 0, 0]}, "not all 0"),
        ({"plus_minus": [1, 2]}, "three"),
        ({"diameter": 0.5, "axis": "x"}, "depth is missing"),
        ({"diameter": 0.5, "axis": "w", "depth": 1}, '"w"'),
        ({"diameter": 0.5, "axis": [0, 0, 0], "depth": 1}, "not all 0"),
        ({"length": 0.5, "axis": "x"}, "belongs to a cylinder"),
        ({"length": 0.5, "cp": 1.3}, 'distribution = "normal"'),
        ({"length": 0.5, "distribution": "normal", "cp": 0}, "cp = 0"),
        ({"length": 0.5, "shift": [1, 2]}, "one number"),
        ({"diameter": 0.5, "shift": 0.1, "truncated": True}, "ball"),
        ({"length": 0.5, "shift": 2.0, "truncated": True}, "would pass inspection"),
        ({"tilt_deg": 80.0}, "at most 30"),
    ],
)
def test_keys_that_do_not_go_together_are_refused(entry, said):
    with pytest.raises(ZoneError, match="(?s)" + said.replace("(", r"\(")):
        parse_zone(entry)


def test_field_is_its_zones_side_by_side():
    chosen = tuple(ZONES.values())
    field = ZoneField(chosen)
    unit = np.random.default_rng(6).random((field.n_scalars, 50))
    gradients = np.random.default_rng(7).normal(size=(field.n_scalars, 4))
    for zone, rows in zip(chosen, field.rows, strict=True):
        assert np.array_equal(field.to_errors(unit)[rows], zones.to_errors(zone, unit[rows]))
        assert np.array_equal(field.walk(unit)[rows], zones.walk(zone, unit[rows]))
        assert np.array_equal(field.sd()[rows], zones.sd(zone))
    total = np.zeros((field.n_scalars,) * 2)
    for zone, rows in zip(chosen, field.rows, strict=True):
        total[rows, rows] = zones.covariance(zone)
    expected = np.einsum("dp,de,ep->p", gradients, total, gradients)
    np.testing.assert_allclose(field.quadratic(gradients).sum(axis=0), expected)
    at = np.einsum("dp,dp->p", gradients, field.extreme(gradients))
    np.testing.assert_allclose(field.support(gradients).sum(axis=0), at)
    assert ZoneField(()).n_scalars == 0
