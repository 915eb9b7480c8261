"""Jig groups: pivots of one jig share a rigid shift and turn; lots of cars built in one jig are alike in it."""

import numpy as np
import pytest

from study.build import BuildError, built_features
from study.tabulate import tables
from study.tasks import StudyWork
from tests.study.demo import response, study, wishbone

JIG = '[jigs.front]\npivots = ["chassis.upper_front_pivot", "chassis.upper_rear_pivot", "chassis.lower_front_pivot"]\n'
MEASURES = '[[measures]]\nof = "camber_deg"\nlimits = [-1.36, -1.14]\n'


def moved(made, errors, hand="left"):
    held = made.hands[hand]
    built, rest = (built_features(held.corner, held.effects, e) for e in (errors, np.zeros_like(errors)))
    return {name: (built[name] - rest[name])[:, 0] for name in built if name.startswith("chassis.")}


def row(made, name, axis):
    source = next(s for s in made.model.sources if s.name == name)
    return source.columns[0][source.axes.index(axis)]


def test_a_jigs_shift_moves_its_pivots_alike_and_no_other():
    made = response(wishbone(), measures=MEASURES + JIG + "plus_minus = 0.5\n")
    errors = np.zeros((made.model.scalars, 1))
    errors[row(made, "jig.front", "y")] = 0.4
    for name, way in moved(made, errors).items():
        np.testing.assert_allclose(way, [0, 0.4, 0] if name.removeprefix("chassis.") in JIG else [0, 0, 0], atol=1e-12)


def test_a_jigs_turn_is_about_the_centroid_of_its_pivots():
    made = response(wishbone(), measures=MEASURES + JIG + "tilt_deg = 0.2\n")
    errors = np.zeros((made.model.scalars, 1))
    errors[row(made, "jig.front.turn", "z")] = 0.2
    corner = made.hands["left"].corner
    names = [n for n in corner.features if n.removeprefix("chassis.") in JIG and n.startswith("chassis.")]
    places = np.stack([corner.features[n].nominal for n in names])
    lever = places - places.mean(axis=0)
    ways = np.stack([moved(made, errors)[n] for n in names])
    np.testing.assert_allclose(ways, np.radians(0.2) * np.cross([0, 0, 1], lever), atol=1e-12)
    np.testing.assert_allclose(ways.sum(axis=0), 0, atol=1e-12)


def test_a_pivot_that_is_none_is_named_with_near_ones():
    with pytest.raises(BuildError, match=r'jigs.front: pivots names "chassis.uper_front_pivot".*upper_front_pivot'):
        response(wishbone(), measures=MEASURES + JIG.replace("upper_front", "uper_front") + "plus_minus = 0.5\n")


def test_cars_of_one_jig_stand_or_fall_together():
    """With the jig alone at work, a lot is good or bad as a whole: the chance is the good share itself, not its power."""
    chances = {}
    for varies in ("each", "once"):
        jig = JIG + f'plus_minus = 2.0\nvaries = "{varies}"\n'
        asked = study(measures=MEASURES + jig, errors='"tie_rod.length" = { length = 0.001 }', more="size = 256\ncars = 20")
        work = StudyWork(wishbone(), asked)
        _, facts = tables(work, {task.number: work.run(task) for task in work.tasks})
        chances[varies] = facts
    share = chances["each"]["good_share"]
    assert 0.5 < share < 0.98
    assert chances["each"]["all_cars"] == pytest.approx(share**20)
    assert chances["once"]["all_cars"] == pytest.approx(share, abs=0.08)
