"""The cheapest processes: the programme's answer against trying every combination, jigs shared, refusal."""

from itertools import product

import numpy as np
import pytest

from study.allocate import Allocation, NothingMeets, Option
from study.limit_rows import LimitRows
from study.methods import spread
from study.tasks import StudyWork
from study.verdicts import OPEN, verdict_of
from study.zones import Zone
from tests.study.demo import study, wishbone

ERRORS = '"chassis.lower_*" = { diameter = 2.0 }\n"chassis.upper_*" = { diameter = 2.0 }\n"tie_rod.length" = { length = 0.5 }'
ALIGN = 'toe = { by = "tie_rod", within_deg = 0.02 }\ncamber = { by = "upper_arm", within_deg = 0.03 }'
LIMITS = '[[measures]]\nof = "anti_dive_pct"\nlimits = [1.6, 7.6]\n[[measures]]\nof = "toe_deg"\nover = { bump = [-30, 30, 5] }\ntake = "range"\nlimits = [0.0, 0.11]\n'
LADDER = (("loose", 3.0, 0.0, 1.0), ("jig", 1.2, 60.0, 2.0), ("bored", 0.4, 90.0, 9.0))


def allocation(limits=LIMITS, cars=10, jigs=""):
    work = StudyWork(wishbone(), study(errors=ERRORS, alignment=ALIGN, measures=limits + jigs, more="size = 64"))
    options = {
        number: [Option(name, Zone("ball", (diameter / 2,)), jig, piece) for name, diameter, jig, piece in LADDER]
        for number, source in enumerate(work.model.sources) if source.name.startswith("chassis.")
    }  # fmt: skip
    return Allocation(work, options, cars=cars)


def test_rows_variances_are_those_of_the_builds():
    made = allocation()
    work = made.work
    rows = made.rows
    unit = np.random.default_rng(8).random((work.model.scalars, 3000))
    found = work.after.evaluate(work.model.field.to_errors(unit)).positions
    sd = np.sqrt(rows.fixed({}))
    assert sd[0] == pytest.approx(found[0].std(), rel=0.04)
    assert sd[1] == pytest.approx(found[0].std(), rel=0.04)
    assert isinstance(rows, LimitRows) and len(rows.room) == 2 + 5 * 4
    gap = found[1] - found[5]
    assert sd[2 + 3] == pytest.approx(gap.std(), rel=0.04)
    assert rows.room[2 + 3] == pytest.approx(0.11 - gap.mean(), abs=0.004)


def test_the_answer_is_the_cheapest_that_holds_of_all_combinations():
    made = allocation()
    found = made.cheapest(0.95)
    assert verdict_of(found.share, 0.95) == OPEN
    cheaper = []
    for picks in product(range(3), repeat=len(made.options)):
        chosen = dict(zip(sorted(made.options), picks, strict=True))
        if made.cost_of(chosen) < 0.93 * found.cost:
            cheaper.append(chosen)
    rng = np.random.default_rng(3)
    for chosen in rng.choice(np.array(cheaper, object), size=min(12, len(cheaper)), replace=False):
        assert verdict_of(made.built_share(chosen), 0.95) != OPEN, (chosen, made.cost_of(chosen), found)


def test_a_higher_share_costs_no_less():
    costs = [choice.cost for choice in allocation().frontier((0.8, 0.95, 0.99))]
    assert costs == sorted(costs) and len(costs) >= 2


def test_pivots_of_one_jig_group_pay_for_one_jig():
    alone = allocation()
    jigs = '[jigs.side]\npivots = ["chassis.lower_front_pivot", "chassis.lower_rear_pivot", "chassis.upper_front_pivot"]\nplus_minus = 0.01\n'
    shared = allocation(jigs=jigs)
    chosen = dict.fromkeys(alone.options, 1)
    assert alone.cost_of(chosen) == 4 * 60 + 4 * 20 * 2.0
    assert shared.cost_of(chosen) == 2 * 60 + 4 * 20 * 2.0


def test_what_cannot_be_met_is_said():
    with pytest.raises(NothingMeets, match="no listed combination meets a good share of 95 %.*tried 5 times"):
        allocation(limits='[[measures]]\nof = "anti_dive_pct"\nlimits = [4.6, 4.65]\n').cheapest(0.95)


def test_share_of_the_choice_is_that_of_independent_builds():
    made = allocation()
    found = made.cheapest(0.9)
    low, high = spread.clopper_pearson(round(found.share.share * 4096), 4096)
    assert (found.share.low, found.share.high) == (pytest.approx(low), pytest.approx(high))
