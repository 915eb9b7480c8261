import json
import math

import pytest

from catalog.errors import InputError
from study.patterns import Feature, PatternError, match
from study.study_file import StudyFileError, json_schema, parse_study, read_study
from study.zone_entries import parse_zone
from study.zones import Zone

TEXT = """
title = "Front brackets, release B"
geometry = "example-front.toml"
method = "sobol"
size = 1024
seed = 7
sides = "independent"

[errors]
"chassis.*" = { plus_minus = 1.0 }
"chassis.lower_front_pivot" = { diameter = 0.6, distribution = "normal", cp = 1.0 }
"tie_rod.length" = { length = 0.2 }

[alignment]
camber = { by = "upper_arm", within_deg = 0.05, range_mm = 4.0, step_mm = 0.5 }
ride_height = { within_mm = 2.0 }
toe = { by = "tie_rod", within_deg = 0.02, distribution = "normal", cp = 1.2 }

[[measures]]
of = "roll_centre_height_mm"
limits = [18.0, 30.0]

[[measures]]
name = "bump steer over 30 mm"
of = "toe_deg"
over = { bump = [-30, 30, 13] }
take = "range"
limits = [-inf, 0.25]

[[measures]]
of = "camber_deg"
at = { bump = 25, roll = 1.5 }

[jigs.lower]
pivots = ["chassis.lower_front_pivot", "chassis.lower_rear_pivot"]
plus_minus = 0.5
tilt_deg = 0.1
varies = "once"
"""


def parsed(text=TEXT, **others):
    return parse_study(text, source="front.toml", **others)


def changed(old, new):
    assert old in TEXT
    return TEXT.replace(old, new, 1)


def refused(text, **others):
    with pytest.raises(StudyFileError) as caught:
        parsed(text, **others)
    said = str(caught.value)
    assert isinstance(caught.value, InputError) and said.startswith("front.toml: ")
    assert len(said.splitlines()) <= 3
    return said


def test_whole_file():
    study = parsed()
    assert (study.title, study.method, study.size, study.seed) == (
        "Front brackets, release B",
        "sobol",
        1024,
        7,
    )
    assert study.errors[1] == ("chassis.lower_front_pivot", Zone("ball", (0.3,), distribution="normal"))
    assert [adjuster.target for adjuster in study.alignment] == ["ride_height", "toe", "camber"]
    ride, toe, camber = study.alignment
    assert ride.by is None and ride.within == 2.0 and ride.band == Zone("length", (2.0,))
    assert toe.band == Zone("length", (0.02,), distribution="normal", cp=1.2)
    assert (camber.by, camber.step_mm, camber.range_mm) == ("upper_arm", 0.5, 4.0)
    assert study.text == TEXT and study.wanted_share == 0.95 and study.cars is None
    (jig,) = study.jigs
    assert jig.varies == "once" and jig.shift.half == (0.5,) * 3 and jig.rotation.half == (0.1,) * 3


def test_measures_and_their_names():
    height, steer, camber = parsed().measures
    assert height.name == "roll_centre_height_mm" and height.limits == (18.0, 30.0) and height.over is None
    assert (steer.over, steer.take, len(steer.sweep)) == ("bump", "range", 13)
    assert steer.sweep[0] == -30.0 and steer.sweep[6] == 0.0 and steer.limits == (-math.inf, 0.25)
    assert camber.name == "camber_deg at bump 25, roll 1.5" and (camber.bump_mm, camber.roll_deg) == (
        25.0,
        1.5,
    )
    unnamed = parsed(changed('name = "bump steer over 30 mm"', "at = { roll = 1 }")).measures[1]
    assert unnamed.name == "toe_deg range over bump -30…30 at roll 1" and unnamed.roll_deg == 1.0


def test_what_may_be_left_out():
    study = parsed(
        'title="t"\ngeometry="a@2"\nmethod="spread"\nerrors."*"={plus_minus=1}\n[[measures]]\nof="toe_deg"'
    )
    assert study.alignment is None and study.jigs == () and study.seed == 0 and study.sides == "independent"
    assert study.size == 4096


def test_every_whole_number_from_0_is_kept_as_seed():
    assert parsed(changed("seed = 7", "seed = 0")).seed == 0
    assert "seed = -1" in refused(changed("seed = 7", "seed = -1"))
    assert "whole number" in refused(changed("seed = 7", "seed = 1.5"))


@pytest.mark.parametrize(
    ("old", "new", "said"),
    [
        ("plus_minus = 1.0", "plus_minus = true", 'errors."chassis.*".plus_minus'),
        ("plus_minus = 1.0", "plusminus = 1.0", 'did you mean "plus_minus"'),
        ("plus_minus = 1.0", 'process = "cnc", depth = 1', "leave out depth"),
        ("plus_minus = 1.0", 'process = "cnc"', "needs a catalog"),
        ("plus_minus = 1.0", "plus_minus = nan", "plus_minus"),
        ('"chassis.*"', '"chassis.?"', "PART.FEATURE"),
        ('"sobol"', '"sobl"', 'did you mean "sobol"'),
        ("1024", "1000", "power of two"),
        ("1024", "4", "8 to"),
        ("seed = 7", "sead = 7", 'did you mean "seed"'),
        ('"independent"', '"both"', '"mirrored" or "independent"'),
        ("title =", "titel =", 'did you mean "title"'),
        ('geometry = "example-front.toml"', "", "geometry is missing"),
        ("within_mm = 2.0", "within_mm = -2.0", "alignment.ride_height.within_mm = -2.0"),
        ("within_mm = 2.0", 'within_mm = 2.0, by = "shims"', "alignment.ride_height.by is not a known key"),
        ('by = "upper_arm"', 'by = "tie_rod"', "already sets toe"),
        ("step_mm = 0.5", "step_mm = 5", "no step could be taken"),
        ("cp = 1.2", "cp = 0", "alignment.toe: cp = 0"),
        ("roll_centre_height_mm", "roll_center_height_mm", '"roll_centre_height_mm"'),
        ("limits = [18.0, 30.0]", "limits = [30.0, 18.0]", "measures[1]: limits"),
        ("limits = [18.0, 30.0]", "limits = [-inf, inf]", "at least one of them finite"),
        ("limits = [18.0, 30.0]", "limits = [nan, 1.0]", "measures[1]: limits"),
        ("limits = [18.0, 30.0]", "limits = [18.0]", "measures[1].limits"),
        ("limits = [18.0, 30.0]", 'side = "left"', "belongs to the axle"),
        ("limits = [18.0, 30.0]", 'take = "max"', "add over"),
        ('take = "range"', "", "over needs take"),
        ('take = "range"', 'take = "rnge"', 'did you mean "range"'),
        ("bump = [-30, 30, 13]", "bump = [-30, 30, 13], roll = [0, 1, 3]", "bump and roll"),
        ("bump = [-30, 30, 13]", "", "given: none"),
        ("bump = [-30, 30, 13]", "bump = [-30, 30, 1]", "2 to 201"),
        ("bump = [-30, 30, 13]", "bump = [5, 5, 13]", "must differ"),
        ('take = "range"', 'take = "range"\nat = { bump = 1 }', "in at and in over"),
        ("bump = 25", "bumb = 25", 'did you mean "bump"'),
        ('of = "camber_deg"', 'of = "camber_deg"\nname = "bump steer over 30 mm"', "is taken already"),
        ('"chassis.lower_rear_pivot"]', '"chassis.lower_front_pivot"]', "jigs.lower"),
        ("plus_minus = 0.5\ntilt_deg = 0.1", "", "moves nothing"),
        ("[[measures]]", "[measures]", "twice"),
    ],
)
def test_mistakes_are_named_with_key_and_remedy(old, new, said):
    assert said in refused(changed(old, new))


def test_mirrored_sides_refuse_axle_limits_and_differences_of_sides():
    mirrored = changed('"independent"', '"mirrored"')
    assert "built alike" in refused(mirrored)
    parsed(mirrored.replace("limits = [18.0, 30.0]", ""))
    crossed = mirrored.replace("roll_centre_height_mm", "cross_camber_deg")
    assert "zero by construction" in refused(crossed)


def test_a_process_is_asked_for_by_name():
    text = changed("plus_minus = 1.0", 'process = "cnc-bracket", shift = 0.1')
    asked = []

    def processes(name):
        asked.append(name)
        return {"diameter": 0.2, "distribution": "normal", "cp": 1.0, "axis": None}

    zone = parsed(text, processes=processes).errors[0][1]
    assert asked == ["cnc-bracket"]
    assert zone == Zone("ball", (0.1,), distribution="normal", shift=(0.1, 0.1, 0.1), process="cnc-bracket")

    def unknown(name):
        raise InputError(f"no process {name}")

    assert 'errors."chassis.*": no process cnc-bracket' in refused(text, processes=unknown)


def test_a_band_of_nothing_is_a_zone_of_nothing():
    ride = parsed(changed("within_mm = 2.0", "within_mm = 0")).alignment[0]
    assert ride.within == 0.0 and ride.band.half == (0.0,)


def test_empty_alignment_is_refused():
    start, end = TEXT.index("camber ="), TEXT.index("[[measures]]")
    assert "leave the table out" in refused(TEXT[:start] + TEXT[end:])


def test_reading_a_file(tmp_path):
    path = tmp_path / "front.toml"
    path.write_text(TEXT, encoding="utf-8")
    assert read_study(path) == parse_study(TEXT, source="x")
    with pytest.raises(StudyFileError, match="does not exist"):
        read_study(tmp_path / "none.toml")
    path.write_bytes(b"\xff\xfe")
    with pytest.raises(StudyFileError, match="UTF-8"):
        read_study(path)


def test_schema_is_json_and_knows_the_tables():
    schema = json.loads(json.dumps(json_schema()))
    assert {"errors", "alignment", "measures", "jigs"} <= set(schema["properties"])


FEATURES = [
    Feature("chassis.upper_front_pivot", "point"),
    Feature("chassis.lower_front_pivot", "point"),
    Feature("upper_arm.front_leg", "length"),
    Feature("upright.hub_axis", "angles"),
]


def zoned(*pairs):
    return match([(pattern, parse_zone(entry)) for pattern, entry in pairs], FEATURES)


def test_most_letters_win_and_exact_names_win_over_all():
    found = zoned(
        ("chassis.*", {"plus_minus": 1.0}),
        ("chassis.lower_*", {"plus_minus": 0.5}),
        ("chassis.upper_front_pivot", {"diameter": 0.2}),
        ("chassis.upper_front_pivot*", {"diameter": 0.9}),
    )
    assert found["chassis.upper_front_pivot"].half == (0.1,)
    assert found["chassis.lower_front_pivot"].half == (0.5, 0.5, 0.5)
    assert list(found) == ["chassis.upper_front_pivot", "chassis.lower_front_pivot"]


def test_a_wildcard_names_only_what_its_zone_fits():
    found = zoned(("*", {"plus_minus": 1.0}), ("up*", {"tilt_deg": 0.2}))
    assert found["upper_arm.front_leg"] == Zone("length", (1.0,))
    assert found["upright.hub_axis"].form == "tilt" and len(found) == 4


@pytest.mark.parametrize(
    ("pairs", "said"),
    [
        ([("chassis.uper_front_pivot", {"plus_minus": 1.0})], "chassis.upper_front_pivot"),
        ([("chasis.*", {"plus_minus": 1.0})], "names no feature"),
        ([("upright.hub_axis", {"plus_minus": 1.0})], "tilt_deg"),
        ([("chassis.*", {"tilt_deg": 1.0})], "diameter"),
        ([("*front_pivot", {"plus_minus": 1.0}), ("*.*_front_pivot", {"plus_minus": 2.0})], "both name"),
    ],
)
def test_patterns_that_name_nothing_or_the_wrong_thing(pairs, said):
    with pytest.raises(PatternError, match=said.replace("*", r"\*")):
        zoned(*pairs)
