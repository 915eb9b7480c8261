"""Zones as tolerances on a drawing, datum letters, comparison of zones, and the texts that people write."""

import math

import pytest

from study.release_callouts import callout, callout_text, datum_letters
from study.release_compare import change_of, compare, holds
from study.release_words import ReleaseTextError, assigned, clean, clean_all, number_text


def zone(form, *half, axis=None, datums="A|B|C", kind="point", length=None, right=None, **evidence):
    return {
        "form": form, "half": list(half), "axis": axis, "datums": datums, "kind": kind, "length_mm": length,
        "right_length_mm": right, "evidence": evidence,
    }  # fmt: skip


CALLOUTS = [
    (zone("ball", 0.3), "⌖ S⌀0.6 | A | B | C"),
    (zone("ball", 0.3, datums="A: jig table"), "⌖ S⌀0.6 | A"),
    (zone("ball", 0.3, datums=""), "⌖ S⌀0.6"),
    (zone("ball", 0.3, datums="jig table and centre plane"), "⌖ S⌀0.6"),
    (zone("box", 1.0, 1.0, 1.0), "x ±1, y ±1, z ±1 mm | A | B | C"),
    (zone("box", 1.0, 0.0, 0.25, datums=""), "x ±1, z ±0.25 mm"),
    (zone("cylinder", 0.4, 0.5, axis=[0, 0, 1]), "⌖ ⌀0.8 | A | B | C across z; ±0.5 mm along z"),
    (zone("cylinder", 0.4, 0.5, axis=[0, 0.6, 0.8], datums=""), "⌖ ⌀0.8 across (0.000, 0.600, 0.800); ±0.5 mm along (0.000, 0.600, 0.800)"),
    (zone("length", 0.5, kind="length", length=374.4123), "374.41 ±0.5 mm"),
    (zone("length", 0.5, kind="length", length=374.4123, right=370.0), "374.41 / 370.00 ±0.5 mm"),
    (zone("tilt", 0.05, kind="angles"), "∠ ⌀0.174/100 | A | B | C (within 0.05° of its direction)"),
    (zone("ball", 0.3, jig="low"), "⌖ S⌀0.6 CZ"),
    (zone("box", 0.5, 0.5, 0.5, kind="jig", jig=None), "x ±0.5, y ±0.5, z ±0.5 mm | A | B | C"),
    (zone("box", 0.02, 0.02, 0.0, kind="jig", turn=True, datums=""), "turned about x ±0.02°, y ±0.02°"),
]  # fmt: skip


@pytest.mark.parametrize(("row", "text"), CALLOUTS, ids=[text for _, text in CALLOUTS])
def test_a_zone_in_the_words_of_a_drawing(row, text):
    assert callout_text(row) == text


@pytest.mark.parametrize("angle", [0.01, 0.05, 0.123, 0.5, 2.0, 10.0])
def test_angularity_never_allows_more_than_the_cone(angle):
    line = callout(zone("tilt", angle, kind="angles"))[0]
    width = float(line.zone.removeprefix("⌀").removesuffix("/100"))
    whole = 200.0 * math.tan(math.radians(angle))
    assert whole * 0.99 < width <= whole


@pytest.mark.parametrize(
    ("text", "letters"),
    [
        ("A|B|C", ("A", "B", "C")), (" A | B ", ("A", "B")), ("A, B: table, centre plane", ("A", "B")), ("A-B|C", ("A-B", "C")),
        ("AA|B (drawing 7)", ("AA", "B")), ("A", ("A",)), ("From the centre plane", ()), ("A frame on the table", ()), ("", ()),
        ("ALL|B", ()), ("a|b", ()),
    ],
)  # fmt: skip
def test_datum_letters(text, letters):
    assert datum_letters(text) == letters


# --- comparison


Z = [0.0, 0.0, 1.0]
CHANGES = [
    (zone("ball", 0.5), zone("ball", 0.5), "unchanged"),
    (zone("ball", 0.5), zone("ball", 0.6), "opened"),
    (zone("ball", 0.5), zone("ball", 0.4), "closed"),
    (zone("ball", 1.0), zone("box", 1.0, 1.0, 1.0), "opened"),
    (zone("box", 1.0, 1.0, 1.0), zone("ball", 1.0), "closed"),
    (zone("box", 1.0, 1.0, 1.0), zone("ball", 1.1), "reshaped"),
    (zone("box", 1.0, 1.0, 1.0), zone("ball", math.sqrt(3)), "opened"),
    (zone("box", 1.0, 1.0, 1.0), zone("box", 2.0, 1.0, 1.0), "opened"),
    (zone("box", 1.0, 1.0, 1.0), zone("box", 2.0, 1.0, 0.5), "reshaped"),
    (zone("cylinder", 0.5, 0.5, axis=Z), zone("ball", 0.5), "closed"),
    (zone("cylinder", 0.3, 0.4, axis=Z), zone("ball", 0.5), "opened"),
    (zone("cylinder", 0.5, 1.0, axis=Z), zone("box", 0.5, 0.5, 1.0), "opened"),
    (zone("cylinder", 0.5, 1.0, axis=Z), zone("cylinder", 0.5, 1.0, axis=[0.0, 0.0, -1.0]), "unchanged"),
    (zone("cylinder", 0.5, 1.0, axis=Z), zone("cylinder", 0.5, 1.0, axis=[1.0, 0.0, 0.0]), "reshaped"),
    (zone("cylinder", 0.5, 0.5, axis=Z), zone("cylinder", 0.8, 0.8, axis=[1.0, 0.0, 0.0]), "opened"),
    (zone("length", 0.5), zone("length", 0.25), "closed"),
    (zone("tilt", 0.05), zone("tilt", 0.1), "opened"),
    (zone("length", 0.5), zone("ball", 0.5), "reshaped"),
    (None, zone("ball", 0.5), "new"),
    (zone("ball", 0.5), None, "dropped"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "change"), CHANGES)
def test_what_became_of_a_zone(old, new, change):
    assert change_of(old, new) == change
    back = {"opened": "closed", "closed": "opened", "new": "dropped", "dropped": "new"}
    assert change_of(new, old) == back.get(change, change)


def test_a_zone_within_another_is_so_by_its_points():
    slanted = zone("cylinder", 0.3, 0.5, axis=[0.6, 0.0, 0.8])
    reach = 0.3 * 0.8 + 0.5 * 0.6, 0.3, 0.3 * 0.6 + 0.5 * 0.8  # support of the cylinder along x, y, z
    assert holds(zone("box", *reach), slanted)
    assert not holds(zone("box", reach[0] * 0.99, *reach[1:]), slanted)
    assert not holds(zone("box", reach[0], reach[1] * 0.99, reach[2]), slanted)


def full(name, half, **more):
    return zone("ball", half) | {
        "feature": f"chassis.{name}", "name": name, "callout": f"S⌀{2 * half:g}", "zone": "", "process": None, "verdict": "hold",
        "figures": "", "reason": "why", "condition": "", "checked": "", "distribution": "uniform", "x_mm": 1.0, "y_mm": 2.0, "z_mm": 3.0,
    } | more  # fmt: skip


def test_features_are_compared_by_name_and_what_else_changed_is_said():
    old = [full("a", 0.5), full("b", 0.5), full("c", 0.5)]
    new = [
        full("d", 0.5),
        full("b", 1.0, reason="room", z_mm=4.5, process="jig", checked="gauge", verdict="open", evidence={"jig": "low"}),
        full("a", 0.5),
    ]
    rows = compare(old, new)
    assert [(row["name"], row["change"], row["factor"], row["why"]) for row in rows] == [
        ("d", "new", None, "why"), ("b", "opened", 2.0, "room"), ("a", "unchanged", 1.0, "why"), ("c", "dropped", None, ""),
    ]  # fmt: skip
    assert rows[1]["also"] == [
        "process: none → jig", "checked: none → gauge", "measured from the datums → within the pattern of jig low",
        "true position moved by z +1.5 mm", "verdict: hold → open",
    ]  # fmt: skip
    assert rows[2]["also"] == [] and rows[0]["before"] is None and rows[3]["after"] is None


# --- texts


FEATURES = ["chassis.upper_front_pivot", "chassis.upper_rear_pivot", "chassis.lower_front_pivot"]


def test_texts_go_to_all_features_or_to_one():
    assert assigned("--check", [], FEATURES) == dict.fromkeys(FEATURES, "")
    given = ["CMM, see x = 1", "upper_*=gauge 7", "chassis.upper_rear_pivot=by hand: a=b"]
    assert list(assigned("--check", given, FEATURES).values()) == ["gauge 7", "by hand: a=b", "CMM, see x = 1"]


@pytest.mark.parametrize(
    ("given", "named"),
    [(["one", "two"], "second time"), (["upper_frnt_pivot=x"], "upper_front_pivot"), (["x" * 401], "401"), (["*.nothing=x"], "no feature")],
)  # fmt: skip
def test_wrong_texts_are_refused(given, named):
    with pytest.raises(ReleaseTextError, match=named):
        assigned("--reason", given, FEATURES)


@pytest.mark.parametrize(("given", "kept"), [(" FS/101 ", "FS/101"), ("7 <b>\"'", "7 <b>\"'"), ("FS\u00a0 101", "FS 101"), ("", None)])
def test_numbers_are_one_clean_line(given, kept):
    if kept is None:
        with pytest.raises(ReleaseTextError, match="--drawing"):
            number_text("--drawing", given)
    else:
        assert number_text("--drawing", given) == kept


@pytest.mark.parametrize("sign", ["\n", "\x00", "\x1b", "\x9b", "\u202e", "\u2028", "\ud800", "\u2066"])
def test_what_steers_is_refused_in_numbers_and_marked_in_texts(sign):
    with pytest.raises(ReleaseTextError) as caught:
        number_text("--issue", f"B{sign}1")
    assert sign not in str(caught.value) and str(caught.value).isprintable()
    assert sign not in clean(f"a{sign}b")
    assert clean_all({"k": [(f"{sign}x", 1.5, None)]}) == {"k": [(clean(f"{sign}x"), 1.5, None)]}
