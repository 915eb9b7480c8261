"""Charts on an invented study: valid, described, honest about missing numbers, exportable."""

import json
import math
import xml.etree.ElementTree as ElementTree

import pytest

from catalog.errors import HoldtightError
from study import charts
from study.charts import callouts, places, words
from study.charts import tables as tb
from study.charts.exports import ChartExportError, with_text_alternative
from study.charts.spread import _split
from tests.study import sample_study, sample_tables


@pytest.fixture(scope="module")
def tables():
    return sample_tables.tables(4)


@pytest.fixture(scope="module")
def specs(tables):
    return charts.every(tables, sample_study.geometry())


def names(spec):
    return {row["source"] for row in spec["datasets"]["bars"]}


def test_every_chart_is_there(specs):
    stems = set(specs)
    assert {"view-front", "view-side", "view-top", "matrix", "demand-mm", "correlations"} <= stems
    assert sum(stem.startswith("ranking-") for stem in stems) == 4
    assert sum(stem.startswith("distribution-") for stem in stems) == 4
    assert sum(stem.startswith("curve-") for stem in stems) == 4
    assert all(stem == charts.safe_stem(stem) for stem in stems)


def test_every_chart_is_described_and_plain(specs):
    for stem, spec in specs.items():
        assert len(spec["description"]) > 20, stem
        json.dumps(spec, allow_nan=False)


def test_every_kind_of_chart_is_valid(specs):
    import altair as alt

    kinds = {stem.split("-")[0]: spec for stem, spec in specs.items()}
    assert set(kinds) == {"view", "matrix", "ranking", "distribution", "curve", "demand", "correlations"}
    for spec in kinds.values():
        chart = alt.LayerChart.from_dict(spec)
        assert chart.to_dict()["description"] == spec["description"]


@pytest.mark.parametrize("kind", ["front", "side", "top"])
def test_functions_return_altair_charts(tables, kind):
    import altair as alt

    made = [
        charts.view(sample_study.geometry(), tables, kind, measure_no=1),
        charts.ranking(tables, 0),
        charts.distribution(tables, 0),
        charts.curve(tables, "bump", "toe_deg"),
    ]
    assert all(isinstance(chart, alt.LayerChart) for chart in made)


def test_nothing_to_draw_gives_no_chart():
    assert charts.ranking({}, 0) is None
    assert charts.distribution({"stats": []}, 0) is None
    assert charts.curve({}, "bump", "toe_deg") is None
    assert charts.matrix({}) is None
    assert charts.correlations({}) is None
    assert set(charts.every({}, sample_study.geometry())) == {"view-front", "view-side", "view-top"}


def test_ranking_shows_both_stages_and_ties(tables):
    bars = charts.ranking_spec(tables, 0)["datasets"]["bars"]
    assert {bar["stage"] for bar in bars} == {"before alignment", "after alignment"}
    leading = next(bar for bar in bars if bar["stage"].startswith("after"))
    assert leading["source"] == "lower front pivot (chassis)"
    assert leading["text"].startswith("34")
    assert any(bar["text"].endswith("≈") for bar in bars)


def test_nan_and_infinity_never_reach_a_chart(tables):
    bad = [
        row | {"st_low": math.nan, "st_high": math.inf, "linear_share": math.nan} for row in tables["ranking"]
    ]
    text = json.dumps(charts.ranking_spec(tables | {"ranking": bad}, 0), allow_nan=False)
    assert "NaN" not in text and "Infinity" not in text


def test_sources_without_a_number_are_left_out(tables):
    rows = [dict(row) for row in tables["ranking"]]
    for row in rows:
        if row["source"] == "rack.tie_rod_inner":
            row["st"] = math.nan
    assert "tie rod inner (rack)" not in names(charts.ranking_spec(tables | {"ranking": rows}, 1))


def test_screening_is_ranked_by_mean_effect(tables):
    rows = [row | {"st": None, "linear_share": None, "mu_star": row["st"] * 2} for row in tables["ranking"]]
    spec = charts.ranking_spec(tables | {"ranking": rows}, 0)
    assert "µ*" in spec["title"]["subtitle"]
    assert spec["datasets"]["bars"][0]["text"].removesuffix(" ≈").endswith("mm")


def test_bars_are_cut_at_the_limits():
    bins = [{"left": 0.0, "right": 2.0, "density": 0.5, "base": 0.0}]
    pieces = _split(bins, 0.5, 1.5)
    assert [(p["left"], p["right"], p["side"]) for p in pieces] == [
        (0.0, 0.5, "outside"), (0.5, 1.5, "inside"), (1.5, 2.0, "outside")]  # fmt: skip


def test_histogram_area_is_one(tables):
    bars = charts.distribution_spec(tables, 0)["datasets"]["bars"]
    assert sum((bar["right"] - bar["left"]) * bar["density"] for bar in bars) == pytest.approx(1.0)


def test_undefined_point_breaks_the_curve(tables):
    line = charts.curve_spec(tables, "rack", "ackermann_pct")["datasets"]["line"]
    assert [row["nominal"] for row in line if row["x"] == 0] == [None]


def test_right_curve_is_drawn_only_where_it_differs(tables):
    assert {row["side"] for row in charts.curve_spec(tables, "bump", "toe_deg")["datasets"]["line"]} == {
        "left"
    }
    rows = [row | ({"nominal": row["nominal"] + 1} if row["side"] == "right" else {}) for row in tables["curves"]
            if row["key"] == "toe_deg"]  # fmt: skip
    spec = charts.curve_spec({"curves": rows}, "bump", "toe_deg")
    assert {row["side"] for row in spec["datasets"]["line"]} == {"left", "right"}
    assert {row["side"] for row in spec["datasets"]["edges"]} == {"right"}


def test_views_have_one_scale(tables):
    data = charts.view_spec(sample_study.geometry(), tables, "side")["datasets"]
    outline = data["tyres"]
    wide, tall = (max(p[k] for p in outline) - min(p[k] for p in outline) for k in "xy")
    assert wide == pytest.approx(tall, rel=0.01)


def test_front_view_has_the_left_of_the_car_on_the_right(tables):
    data = charts.view_spec(sample_study.geometry(), tables, "front")["datasets"]
    left = [p["x"] for p in data["tyres"] if p["g"] == "left"]
    right = [p["x"] for p in data["tyres"] if p["g"] == "right"]
    assert min(left) > max(right)


def test_roll_centre_lines_start_at_the_contact_points(tables):
    geometry = sample_study.geometry()
    x, _, z = places.contact(geometry["wheel"]["left"])
    assert (x, z) == (pytest.approx(0.0), pytest.approx(geometry["ground_mm"]))
    assert places.roll_centre(geometry, tables) == (0.0, pytest.approx(24.1 + geometry["ground_mm"]))
    assert places.roll_centre(geometry | {"roll_centre_mm": (5, 30)}, tables)[0] == 5.0


def test_view_carries_every_measure_to_choose_from(tables):
    spec = charts.view_spec(sample_study.geometry(), tables, "top", choose=True)
    assert spec["params"] == [{"name": "shown", "value": -1}]
    assert {mark["m"] for mark in spec["datasets"]["marks"]} == {-1, 0, 1, 2, 3}


@pytest.mark.parametrize(
    ("source", "place"),
    [
        ("chassis.lower_front_pivot", (148.0, 262.0, 131.0)),
        ("tie_rod.length", (78.0, 442.0, 153.5)),
        ("upright.wheel_centre", (0.0, 652.0, 262.0)),
        ("rack.mount", (74.0, 230.4, 158.0)),
        ("alignment.toe", None),
        ("jigs.front", None),
    ],
)
def test_where_a_source_is_drawn(source, place):
    assert places.source_place(sample_study.geometry(), source) == (
        place if place is None else pytest.approx(place)
    )


def test_axle_sources_stand_at_their_own_wheel():
    geometry = sample_study.geometry()
    assert places.source_place(geometry, "axle.wheel_centre_right")[1] < 0 < places.source_place(
        geometry, "axle.wheel_centre_left")[1]  # fmt: skip


def test_callouts_neither_overlap_nor_leave_the_drawing():
    spots = [callouts.Spot(str(i), 100.0 + i, 150.0 + i % 3, ("a name", "41 %")) for i in range(10)]
    placed = callouts.place(spots, width=400.0, height=260.0, left_edge=60.0, right_edge=200.0)
    for align in ("left", "right"):
        column = sorted(
            (c.y - c.spot.height / 2, c.y + c.spot.height / 2) for c in placed if c.align == align
        )
        assert all(a[1] <= b[0] + 1e-9 for a, b in zip(column, column[1:], strict=False))
        assert not column or (column[0][0] >= 0 and column[-1][1] <= 260)


def test_callouts_leave_free_what_lies_below_them():
    spots = [callouts.Spot(str(i), 100.0, 240.0, ("a name",)) for i in range(4)]
    placed = callouts.place(spots, width=400.0, height=260.0, left_edge=60.0, right_edge=200.0, left_height=180.0)
    assert max(c.y + c.spot.height / 2 for c in placed) <= 180.0


def test_curves_without_builds_are_lines_alone():
    rows = [{"axis": "bump", "x": float(x), "key": "toe_deg", "unit": "deg", "side": "left", "nominal": y}
            for x, y in enumerate((0.1, None, 0.3, 0.4))]  # fmt: skip
    spec = charts.curve_spec({"curves": rows}, "bump", "toe_deg", held="rack 5 mm held")
    assert spec["title"]["subtitle"] == "nominal, left side; rack 5 mm held"
    assert spec["datasets"]["band"] == [] and [row["x"] for row in spec["datasets"]["dots"]] == [0.0]


def test_panels_keep_their_data_apart(specs):
    pair = [specs["matrix"], specs["demand-mm"]]
    spec = charts.panels(pair, title="Two", columns=1)
    assert len(spec["datasets"]) == sum(len(one["datasets"]) for one in pair)
    assert all(one["description"] in spec["description"] for one in pair)
    text = json.dumps(spec["concat"])
    assert all(f'"{name}"' in text for name in spec["datasets"])
    assert charts.panels(pair[:1], title="One") is pair[0]


PLACES = {"over": "bump", "against": "rack", "over_at": (-10.0, 10.0), "against_at": (-5.0, 0.0, 5.0)}


def test_a_map_of_both_signs_shades_about_zero_and_writes_the_sign():
    spec = charts.map_spec([[-2.0, None, 1.0], [0.0, 0.5, 1.0]], **PLACES, key="toe_deg", unit="deg")
    texts = {(cell["x"], cell["y"]): cell["text"] for cell in spec["datasets"]["texts"]}
    assert texts["−5", "−10"] == "−2.00" and texts["5", "10"] == "+1.00" and texts["−5", "10"] == "0.00"
    assert texts["0", "−10"] == "–" and len(spec["datasets"]["cells"]) == 5
    assert '"domain": [-2.0, 2.0]' in json.dumps(spec) and "blueorange" in json.dumps(spec)
    assert "least −2.00° at bump −10 mm, rack travel −5 mm" in spec["description"]


def test_a_map_of_one_sign_shades_by_brightness():
    spec = charts.map_spec([[1.0, 2.0, 3.0], [2.0, 3.0, 4.0]], **PLACES, key="track_mm", unit="mm")
    assert "cividis" in json.dumps(spec)
    assert charts.map_spec([[None] * 3] * 2, **PLACES, key="toe_deg", unit="deg") is None


def test_small_cells_carry_every_second_value():
    wide = {"over": "bump", "against": "rack", "over_at": (0.0, 1.0), "against_at": tuple(map(float, range(40)))}
    spec = charts.map_spec([[i / 7 for i in range(40)]] * 2, **wide, key="track_mm", unit="mm")
    assert len(spec["datasets"]["cells"]) == 80 > len(spec["datasets"]["texts"]) >= 20


def rolling(**changes):
    row = {"name": "some@1", "linkage": "strut", "swing_arm_mm": 1500.0, "track_mm": 1000.0, "roll_camber": 0.67}
    return row | changes


def test_camber_in_roll_has_a_mark_a_geometry_and_the_rigid_relation():
    rows = [rolling(), rolling(name="other@2", linkage="five-link", swing_arm_mm=-900.0, roll_camber=1.5)]
    spec = charts.roll_camber_spec(rows)
    assert [mark["rigid"] for mark in spec["datasets"]["marks"]] == pytest.approx([1 - 0.5 / 1.5, 1 + 0.5 / 0.9])
    names = spec["datasets"]["names_left"] + spec["datasets"]["names_right"]
    assert {name["t"] for name in names} == {"some@1", "other@2"}
    branches = {row["branch"] for row in spec["datasets"]["curve"]}
    assert branches == {"inboard", "outboard"}


def test_what_has_no_swing_arm_is_named():
    rows = [rolling(), rolling(name="axle@1", swing_arm_mm=None), rolling(name="flat@1", swing_arm_mm=2e4)]
    lines = charts.roll_camber_spec(rows)["title"]["subtitle"]
    assert "axle@1 (no swing arm)" in lines[1] and "flat@1 (swing arm of 20 tracks)" in lines[1]
    assert charts.roll_camber_spec(rows[1:2]) is None


def test_words():
    assert words.source_name("chassis.lower_front_pivot") == "lower front pivot (chassis)"
    assert words.source_name("tie_rod.length") == "tie rod length"
    assert words.number(-0.0042) == "−0.00420"
    assert words.number(math.nan) == words.NONE
    assert words.quantity(1.5, "deg", sign=True) == "+1.50°"
    assert words.percent(0.004) == "<1\u00a0%"
    assert words.good_percent(0.99996) == "99.9\u00a0%"
    assert words.measure_name({"measure": "toe_deg range over bump -30…30", "of": "toe_deg"}) == (
        "Toe range over bump -30…30")  # fmt: skip
    assert words.limits_text({"limit_low": -math.inf, "limit_high": 0.25, "unit": "deg"}) == "at most 0.25°"


def test_effect_phrase_takes_the_largest_signed_effect():
    row = {"source": "chassis.a", "effect": [0.1, -1.92, None], "effect_axes": ["x", "y", "z"], "unit": "mm"}
    assert words.effect_phrase(row) == "+1\u00a0mm y → −1.92\u00a0mm"
    assert words.effect_phrase(row | {"effect": None}) == ""


def test_effects_name_axis_unit_and_step():
    row = {
        "source": "upright.hub_axis",
        "effect": [1.5, -3e-9],
        "effect_axes": ["tilt_1", "tilt_2"],
        "unit": "mm",
    }
    assert words.effects_text(row) == "tilt 1 +1.50, tilt 2 0\u00a0mm per °"
    row = {"source": "alignment.camber", "effect": [0.98], "effect_axes": ["left camber"], "unit": "deg",
           "effect_unit": "deg per deg"}  # fmt: skip
    assert words.effect_phrase(row) == "+1° left off → +0.980°"
    assert words.effects_text({"source": "a.b", "effect": None}) == ""


def test_plain_takes_numbers_of_any_kind():
    import numpy as np

    assert tb.plain({"a": np.float64("nan"), "b": np.arange(2), "c": (1, math.inf)}) == {
        "a": None, "b": [0, 1], "c": [1, None]}  # fmt: skip


@pytest.mark.parametrize(
    "text", ["../../etc/passwd", "/abs", "a\\b:c", "..", "", "nul", "x" * 300, "Größe ½", "a\x00b"]
)
def test_stems_never_leave_the_folder(text):
    stem = charts.safe_stem(text)
    assert stem and len(stem) <= 90 and not set(stem) & set("/\\.: \x00") and stem.lower() != "nul"


def test_export_writes_all_four(specs, tmp_path):
    spec = specs["view-front"] | {"title": {"text": "</title><script>x"}, "description": 'a "b" <c> & d'}
    files = charts.export(spec, tmp_path / "new", "../views/front")
    assert [file.name for file in files] == [f"views-front.{end}" for end in ("svg", "png", "pdf", "vl.json")]
    assert all(file.parent == tmp_path / "new" for file in files)
    root = ElementTree.parse(files[0]).getroot()
    assert root.get("role") == "img" and root.get("aria-label") == 'a "b" <c> & d'
    assert root.find("{http://www.w3.org/2000/svg}title").text == "</title><script>x"
    assert files[1].read_bytes().startswith(b"\x89PNG") and b'iTXtDescription' in files[1].read_bytes()
    assert files[2].read_bytes().startswith(b"%PDF")
    assert json.loads(files[3].read_text())["description"] == 'a "b" <c> & d'


@pytest.mark.parametrize("stem", ["matrix", "curve-rack-ackermann-pct", "demand-mm", "correlations"])
def test_other_kinds_are_drawn_without_complaint(specs, stem):
    import vl_convert

    root = ElementTree.fromstring(with_text_alternative(vl_convert.vegalite_to_svg(specs[stem]), specs[stem]))
    assert len(list(root.iter("{http://www.w3.org/2000/svg}path"))) > 3


def test_export_of_an_altair_chart(tables, tmp_path):
    assert len(charts.export(charts.distribution(tables, 0), tmp_path, "d")) == 4


def test_export_names_what_failed(specs, tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(ChartExportError, match="could not be written"):
        charts.export(specs["matrix"], tmp_path / "file", "m")
    with pytest.raises(HoldtightError, match="could not be drawn"):
        charts.export({"layer": 3}, tmp_path, "m")
