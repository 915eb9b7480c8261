"""The sheet as text: what stands on it, that everything given is escaped, that it is quick."""

import json
import math
import re
import time
from html.parser import HTMLParser

import pytest

from study import sheet, sheet_library, sheet_sides
from tests.study import sample_study, sample_tables

NASTY = '</script><b onload="x">&amp; <!-- \u2028'
VOID = {"meta", "link", "br", "col", "wbr", "input", "img", "hr"}


class Page(HTMLParser):
    """Tags in order, texts of headings, ids; fails on tags that do not nest."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open, self.tags, self.headings, self.ids, self.urls = [], [], [], [], []
        self.feed(text)
        assert not self.open

    def handle_starttag(self, tag, attrs):
        self.tags.append((tag, dict(attrs)))
        self.ids += [value for name, value in attrs if name == "id"]
        self.urls += [value for name, value in attrs if name in ("src", "href")]
        if tag not in VOID:
            self.open.append(tag)

    def handle_endtag(self, tag):
        assert self.open.pop() == tag

    def handle_data(self, data):
        if self.open and re.fullmatch("h[1-6]", self.open[-1]):
            self.headings.append((int(self.open[-1][1]), data))


def render(tables=None, **changes):
    given = {"study": sample_study.study(), "geometry": sample_study.geometry(),
             "tolerances": sample_study.tolerances(), "alignment": sample_study.alignment()} | changes  # fmt: skip
    return sheet.render(sample_tables.tables(4) if tables is None else tables, **given)


def specs_of(text):
    found = re.search(r'<script type="application/json" id="charts">(.*?)</script>', text, re.S).group(1)
    return json.loads(found, parse_constant=lambda name: pytest.fail(name))["charts"]


def words_of(text):
    head = text[: text.index('<script type="application/json"')]
    return re.sub(r"\s+", " ", re.sub(r"<[^>]+>", " ", head)).replace("\u00a0", " ")


@pytest.fixture(scope="module")
def page():
    return render()


def test_the_three_leading_sources_stand_at_the_top(page):
    text = words_of(page)
    hold = text[text.index("Hold these") : text.index("Where they sit")]
    row = hold[hold.index("Roll centre height") : hold.index("Bump steer over 30 mm")]
    places = [row.index(name) for name in (
        "lower front pivot (chassis)", "lower rear pivot (chassis)", "upper front pivot (chassis)")]  # fmt: skip
    assert places == sorted(places)
    assert "34 %" in row and "+1 mm" in row and "≈ tied" in row and "wanted 95 %" in row


def test_settings_of_the_workshop_are_not_among_what_to_hold(page):
    text = words_of(page)
    row = text[text.index("Cross camber") : text.index("Share of the measure")]
    assert "setting: camber 93 %" in row
    assert "camber (alignment)" not in row


def test_what_was_studied_stands_on_it(page):
    text = words_of(page)
    for words in ("invented-front@2", "36 864", "variance shares (Sobol&#x27;)", "Random seed 0",
                  "Held perfect in this study: wheel centre (upright)", "± 4 mm", "ISO 22081", "licensed engineer",
                  "0.41 %", "Three blocks were dropped", "Worst builds found"):  # fmt: skip
        assert words in text, words


def test_page_is_well_formed_with_headings_in_order(page):
    parsed = Page(page)
    levels = [level for level, _ in parsed.headings]
    assert levels[0] == 1 and levels.count(1) == 1
    assert all(after - before <= 1 for before, after in zip(levels, levels[1:], strict=False))
    assert len(parsed.ids) == len(set(parsed.ids))
    targets = {url[1:] for url in parsed.urls if url.startswith("#")}
    assert targets and targets <= set(parsed.ids)


def test_page_needs_no_network(page):
    assert all(url.startswith(("#", "data:")) for url in Page(page).urls)
    policies = [attrs["content"] for tag, attrs in Page(page).tags if attrs.get("http-equiv")]
    assert len(policies) == 1 and policies[0].startswith("default-src 'none'")
    assert page.count("window.vegaEmbed=") == 1


def test_every_chart_has_a_label_and_a_box(page):
    boxes = {attrs["id"]: attrs for tag, attrs in Page(page).tags if attrs.get("class") == "chart"}
    specs = specs_of(page)
    assert {item["id"] for item in specs} == set(boxes) and len(specs) == 3 + 1 + 8 + 4 + 2 + 1 + 1
    assert all(attrs["role"] == "img" and len(attrs["aria-label"]) > 20 for attrs in boxes.values())
    assert all(item["spec"]["description"] for item in specs)


def test_every_figure_has_its_numbers_as_a_table(page):
    for name in ("where", "measures", "curves", "sides", "matrix", "together", "demand"):
        part = page[page.index(f'<section id="{name}"') :]
        assert "<table" in part[: part.index("</section>")], name


def test_everything_given_is_escaped():
    tables = sample_tables.tables(2)
    for rows in tables.values():
        for row in rows:
            row.update(
                {key: f"{NASTY}{row[key]}" for key in ("measure", "source", "by", "adjuster") if key in row}
            )
    study = sample_study.study() | {
        key: NASTY for key in ("title", "geometry", "text", "method", "sides", "state")
    }
    study |= {"notes": [NASTY], "perfect": [NASTY]}
    geometry = sample_study.geometry() | {"name": NASTY, "linkage": NASTY, "datums": NASTY}
    tolerances = [{"source": NASTY, "zone_text": NASTY, "distribution_text": NASTY, "process": NASTY}]
    alignment = [dict.fromkeys(("adjuster", "by", "within_text", "step_text", "range_text"), NASTY)]
    text = render(tables, study=study, geometry=geometry, tolerances=tolerances, alignment=alignment)
    assert "<b onload" not in text and "</script><b" not in text
    assert Page(text).ids.count("charts") == 1
    assert NASTY in json.dumps(specs_of(text), ensure_ascii=False).replace('\\"', '"')


def test_missing_numbers_are_shown_as_missing():
    tables = sample_tables.tables(2)
    for row in [*tables["stats"], *tables["ranking"]]:
        row.update({key: math.nan for key, value in row.items() if isinstance(value, float) and key != "st"})
    text = render(tables)
    assert specs_of(text)
    assert not re.search(r"\bnan\b|\bInfinity\b", words_of(text))


@pytest.mark.parametrize("method", ["spread", "worst", "linear", "morris"])
def test_methods_that_give_less(method):
    tables = sample_tables.tables(3)
    if method in ("spread", "worst"):
        tables["ranking"] = []
    gone = {"linear": ("st", "s1"), "morris": ("st", "s1", "linear_share")}.get(method, ())
    for row in tables["ranking"]:
        row["mu_star"] = row["st"]
        row.update({f"{key}{end}": None for key in gone for end in ("", "_low", "_high")})
    text = words_of(render(tables, study=sample_study.study() | {"method": method}))
    assert ("ranks nothing" in text) == (method in ("spread", "worst"))


def test_an_empty_study_still_makes_a_page():
    parsed = Page(sheet.render({}, study={}, geometry=sample_study.geometry()))
    assert "Cautions" in [text for _, text in parsed.headings]


def test_withheld_shares_are_said():
    assert "Shares withheld" in words_of(render(study=sample_study.study() | {"withheld": True}))


def test_only_a_set_that_passed_together_is_proposed():
    assert "May be opened" not in words_of(render())
    assert "Each could be opened by itself" in words_of(render())
    study = sample_study.study() | {"open_together": ["tie_rod.length"], "open_together_good_share": 0.957}
    assert "May be opened, all together: tie rod length . Loosened together, 95.7 %" in words_of(render(study=study)).replace(
        "length.", "length .")  # fmt: skip


def sides_of(text):
    text = words_of(text)
    return text[text.index("Left against right") : text.index("Adjusters")]


def test_left_against_right_has_a_column_a_side(page):
    text = sides_of(page)
    assert "Cross camber" in text and "Roll centre height" in text and "Bump steer" not in text
    assert "Left minus right" in text and "Standard deviation of the difference 0.0710°" in text
    assert "95 % of the cars lie between" in text


def test_effects_of_both_sides_stand_beside_each_other():
    row = {"source": "chassis.a", "effect": [0.1, -2.0, 0.5, 1e-9], "effect_axes": ["left x", "left y", "right x", "right y"]}
    assert sheet_sides.sided(row) == ("x\u00a0+0.10, y\u00a0−2.00", "x\u00a0+0.50, y\u00a00.00")
    shared = {"source": "rack.mount", "effect": [0.1, 1.0], "effect_axes": ["x", "z"]}
    assert sheet_sides.sided(shared) == ("both: x\u00a0+0.10, z\u00a0+1.00", "the same part")
    assert sheet_sides.sided({"source": "a.b", "effect": None, "effect_axes": ["left x"]})[0] == "no single slope"


def test_a_measure_asked_on_both_sides_names_the_one_that_tells_the_difference():
    tables = sample_tables.tables(3)
    row = next(r for r in tables["stats"] if r["measure_no"] == 2 and r["stage"] == "after")
    tables["stats"].append(row | {"measure_no": 7, "measure": "right one", "side": "right", "mean": -1.5})
    text = sides_of(render(tables))
    assert "was asked for on both sides" in text and "ask for cross_camber_deg" in text


def test_mirrored_sides_are_said_in_one_line():
    text = sides_of(render(study=sample_study.study() | {"sides": "mirrored"}))
    assert "built alike" in text and "Left minus right" not in text
    solid = render(study=sample_study.study() | {"sides": "mirrored"}, geometry=sample_study.geometry() | {"linkage": "solid-axle"})
    assert "Left against right" not in words_of(solid)


def test_same_input_same_bytes():
    assert render() == render()


def test_twelve_measures_are_quick():
    tables = sample_tables.tables(12)
    render(tables)
    start = time.perf_counter()
    render(tables)
    assert time.perf_counter() - start < 2.0


def test_library_is_kept_and_a_broken_copy_is_not_used(tmp_path, monkeypatch):
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    sheet_library._keep("let a = 1;")
    assert sheet_library._kept() == "let a = 1;"
    path = sheet_library.cache_file()
    path.write_text(path.read_text()[:-1])
    assert sheet_library._kept() is None
    assert [file.name for file in path.parent.iterdir()] == [path.name]


def test_a_cache_that_cannot_be_written_is_done_without(tmp_path, monkeypatch):
    (tmp_path / "holdtight").write_text("in the way")
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    sheet_library._keep("x")
    assert sheet_library._kept() is None


def test_helper_fills_the_cache(tmp_path, monkeypatch):
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    monkeypatch.setattr(sheet_library, "_helper", None)
    sheet_library.prepare()
    sheet_library._wait(sheet_library._helper)
    assert "window.vegaEmbed=" in sheet_library._kept()
