"""Verdicts: what loosening one source really does to the share of good builds, and the set that passes together."""

import numpy as np
import pytest

from study import zones
from study.tabulate import tables
from study.tasks import StudyWork
from study.verdicts import (
    FIRST_LOOK,
    HOLD,
    NOT_BUILT,
    OPEN,
    VERDICT_BUILDS,
    WATCH,
    Share,
    field_with,
    flags_alone,
    good_flags,
    looser,
    open_together,
    verdict_of,
)
from study.zones import Zone
from tests.study.demo import study, wishbone

ERRORS = '"chassis.upper_*" = { plus_minus = 0.8 }\n"upright.wheel_centre" = { diameter = 0.2 }\n"tie_rod.length" = { length = 0.5 }'
ALIGN = 'toe = { by = "tie_rod", within_deg = 0.02 }'
LIMITS = '[[measures]]\nof = "camber_deg"\nlimits = [-1.45, -1.05]\n[[measures]]\nof = "roll_centre_height_mm"\n'


@pytest.fixture(scope="module")
def judged():
    work = StudyWork(wishbone(), study(errors=ERRORS, alignment=ALIGN, measures=LIMITS, more="size = 512"))
    return work, *tables(work, {task.number: work.run(task) for task in work.tasks})


def test_the_interval_decides():
    assert verdict_of(Share(0.97, 0.96, 0.98), 0.95) == OPEN
    assert verdict_of(Share(0.97, 0.95, 0.98), 0.95) == OPEN
    assert verdict_of(Share(0.95, 0.94, 0.96), 0.95) == WATCH
    assert verdict_of(Share(0.93, 0.92, 0.949), 0.95) == HOLD


def test_a_counterfactual_changes_one_source_on_the_same_draws(judged):
    work, _, _ = judged
    number = next(n for n, s in enumerate(work.model.sources) if s.name == "upright.wheel_centre")
    wide = zones.scale(work.model.sources[number].zone, 2.0)
    unit = np.random.default_rng(1).random((work.model.scalars, 20))
    plain, changed = work.model.field.to_errors(unit), field_with(work.model, {number: wide}).to_errors(unit)
    rows = list(work.model.sources[number].columns[0])
    others = np.delete(np.arange(work.model.scalars), rows)
    np.testing.assert_allclose(changed[rows], 2.0 * plain[rows], atol=1e-12)
    assert (changed[others] == plain[others]).all()


def test_what_moves_a_limited_angle_is_held_and_what_does_not_is_open(judged):
    _, found, facts = judged
    verdicts = {row["source"]: row for row in found["verdicts"]}
    assert verdicts["chassis.upper_front_pivot"]["verdict"] == HOLD
    assert verdicts["upright.wheel_centre"]["verdict"] == OPEN
    assert verdicts["tie_rod.length"]["verdict"] == OPEN
    assert facts["open_together"] == ["upright.wheel_centre", "tie_rod.length"]
    assert facts["open_together_good_share"] == pytest.approx(verdicts["upright.wheel_centre"]["as_drawn"], abs=0.01)
    ranking = {row["source"]: row["verdict"] for row in found["ranking"] if row["stage"] == "after"}
    assert ranking == {name: row["verdict"] for name, row in verdicts.items()}
    assert {row["verdict"] for row in found["ranking"] if row["stage"] == "before"} == {None}


def test_the_counterfactual_share_is_that_of_a_study_drawn_so(judged):
    work, found, _ = judged
    row = next(r for r in found["verdicts"] if r["source"] == "chassis.upper_front_pivot")
    wider = ERRORS + '\n"chassis.upper_front_pivot" = { plus_minus = 1.6 }'
    again = StudyWork(wishbone(), study(errors=wider, alignment=ALIGN, measures=LIMITS, more="size = 512"))
    good = good_flags(again, again.model.field, builds=FIRST_LOOK)
    assert row["good_share"] == good.mean()
    assert row["verdict"] == HOLD  # the first look had told: all of them say the same
    every = good_flags(again, again.model.field)
    assert (every[:FIRST_LOOK] == good).all() and verdict_of(Share.of(every), 0.95) == HOLD
    drawn = good_flags(work, work.model.field)
    assert row["as_drawn"] == drawn.mean()


def test_a_verdict_that_the_first_look_leaves_open_is_built_on(judged):
    work, found, facts = judged
    flags, status = flags_alone(work, range(-1, len(work.model.sources)))
    built = np.isfinite(flags).sum(axis=1)
    assert set(built) == {FIRST_LOOK, VERDICT_BUILDS} and built[0] == VERDICT_BUILDS
    for row, count in zip(flags[1:], built[1:], strict=True):
        first = Share.of(row[:FIRST_LOOK], confidence=0.999)
        assert (count == FIRST_LOOK) == (verdict_of(first, 0.95) != WATCH)
        assert count == VERDICT_BUILDS or verdict_of(first, 0.95) == verdict_of(Share.of(row[:FIRST_LOOK]), 0.95)
    assert ((status == NOT_BUILT) == np.isnan(flags)).all() and not status[np.isfinite(flags)].any()
    others = sum(work.builds(task) for task in work.tasks if task.kind != "verdict")
    assert facts["builds"] >= others + built.sum()


def test_the_first_look_keeps_its_level():
    """A share exactly at the wanted one is told beyond doubt in at most one of a thousand first looks (binomial law)."""
    from scipy.stats import binom

    told = sum(
        binom.pmf(k, FIRST_LOOK, 0.95)
        for k in range(FIRST_LOOK + 1)
        if verdict_of(Share.of(np.arange(FIRST_LOOK) < k, confidence=0.999), 0.95) != WATCH
    )
    assert 0.0 < told <= 0.001


def test_bands_of_the_alignment_are_never_proposed(judged):
    work, found, _ = judged
    alone = {n: Share(0.99, 0.985, 0.995) for n, s in enumerate(work.model.sources)}
    chosen, share, _ = open_together(work, alone)
    names = {work.model.sources[n].name for n in chosen}
    assert not any(name.startswith("alignment.") for name in names)
    assert share.low >= 0.95 and "chassis.upper_front_pivot" not in names


def test_the_next_looser_process_is_taken_where_there_is_one(judged):
    work, _, _ = judged
    source = work.model.sources[0]
    made = Zone("box", (0.8, 0.8, 0.8), process="jig")
    by_hand = Zone("box", (1.5, 1.5, 1.5), process="hand")
    from dataclasses import replace

    assert looser(replace(source, zone=made), {"jig": by_hand}).process == "hand"
    assert looser(replace(source, zone=made), {}).half == (1.6, 1.6, 1.6)
