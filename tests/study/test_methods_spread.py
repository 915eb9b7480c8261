import numpy as np
import pytest
from scipy.stats import binomtest

from study.methods import spread
from study.zone_entries import parse_zone
from study.zone_field import ZoneField
from tests.study.method_models import REFERENCE, scalars, several


def drawn(count, size, seed=5):
    return spread.draw(scalars(count), size=size, seed=seed, first=0, count=size)


def test_draws_are_uniform_and_independent():
    unit = drawn(4, 100_000)
    np.testing.assert_allclose(unit.mean(axis=0), 0.5, atol=4e-3)
    np.testing.assert_allclose(np.corrcoef(unit.T), np.eye(4), atol=0.012)


@pytest.mark.parametrize(("widths", "suffix"), [((1, 1, 1, 1), ""), ((1, 1, 1, 10), "_one_wide")])
def test_additive_model_of_rectangular_inputs(widths, suffix):
    known = REFERENCE["additive"]
    field = ZoneField(tuple(parse_zone({"length": float(np.sqrt(3.0) * w)}) for w in widths))
    values = field.to_errors(drawn(4, 400_000).T).sum(axis=0)
    found = spread.summary(values[None])
    assert found.sd[0] == pytest.approx(known["u" if not suffix else "u_one_wide"], rel=0.005)
    ends = found.quantiles[0, [spread.QUANTILES.index(0.025), spread.QUANTILES.index(0.975)]]
    assert np.abs(ends) == pytest.approx([known[f"interval{suffix}"]] * 2, rel=0.01)
    assert field.sd() @ field.sd() == pytest.approx(known["u" if not suffix else "u_one_wide"] ** 2, rel=1e-3)


def test_statistics_leave_out_what_has_no_value():
    values = several(drawn(3, 500))
    values[:, :10] = np.nan
    values[1, 20:40] = np.nan
    values[2] = np.nan
    found = spread.summary(values)
    assert (found.builds, found.unassembled) == (500, 10)
    assert list(found.defined) == [490, 470, 0, 490, 490, 490]
    assert found.mean[0] == pytest.approx(values[0, 10:].mean()) and np.isnan(found.mean[2])
    assert found.sd[1] == pytest.approx(np.nanstd(values[1], ddof=1))
    assert found.low[0] == values[0, 10:].min() and found.high[0] == values[0, 10:].max()
    used = [0, 1, 3]
    rows = np.r_[10:20, 40:500]
    np.testing.assert_allclose(
        found.correlations[np.ix_(used, used)], np.corrcoef(values[used][:, rows]), atol=1e-9
    )
    assert np.isnan(found.correlations[2]).all()


@pytest.mark.parametrize(("good", "builds"), [(0, 59), (59, 59), (1, 40), (950, 1000), (4090, 4096)])
def test_interval_is_the_exact_one(good, builds):
    expected = binomtest(good, builds).proportion_ci(confidence_level=0.95, method="exact")
    assert spread.clopper_pearson(good, builds) == pytest.approx((expected.low, expected.high))


def test_builds_that_show_a_share_when_all_are_inside():
    known = REFERENCE["wilks"]
    builds = spread.wilks_builds(share=known["share"], confidence=known["confidence"])
    assert builds == known["builds"]
    # one-sided 95 % is the lower end of the two-sided 90 % interval
    assert spread.clopper_pearson(builds, builds, confidence=0.9)[0] >= known["share"]
    assert spread.clopper_pearson(builds - 1, builds - 1, confidence=0.9)[0] < known["share"]


def test_good_share_counts_every_build_and_every_reason():
    values = np.array(
        [[1.0, 2.0, 3.0, np.nan, 2.0], [5.0, 5.0, 5.0, np.nan, np.nan], [0.0, 9.0, 0.0, np.nan, 0.0]]
    )
    limits = np.array([[0.0, 2.5], [-np.inf, np.inf], [-np.inf, 5.0]])
    found = spread.good_share(values, limits, np.array([False, False, False, True, False]))
    assert (found.good, found.builds, found.share) == (2, 5, 0.4)
    assert (found.low, found.high) == pytest.approx(spread.clopper_pearson(2, 5))
    assert list(found.lost) == [0.4, 0.0, 0.4]
    assert list(found.measure_share) == [0.6, 0.8, 0.6]
    assert found.measure_low[1] == pytest.approx(spread.clopper_pearson(4, 5)[0])


def test_a_bad_build_is_bad_whatever_its_values():
    limits = np.array([[-np.inf, np.inf]])
    found = spread.good_share(np.zeros((1, 4)), limits, np.array([True, False, False, False]))
    assert found.share == 0.75
    nothing = spread.good_share(np.zeros((1, 0)), limits, np.zeros(0, bool))
    assert nothing.builds == 0 and np.isnan(nothing.share)


def test_chance_that_all_cars_are_inside():
    assert spread.all_cars(0.95, 10) == pytest.approx(0.5987, abs=1e-4)
