"""`release` and `releases`: what is refused, what is frozen, what is handed out, and that texts of others stay inert."""

import csv
import hashlib
import io
import json
import re
import shutil
from html.parser import HTMLParser

import ezdxf
import pytest

from catalog import releases
from catalog.store import Catalog
from study import release_contents, release_dxf, tasks
from tests.study.command_line import command, refused
from tests.study.small_studies import DEMO, TOE, study_text

ERRORS = {
    "chassis.upper_*": "{ plus_minus = 1.0 }", "chassis.lower_front_pivot": "{ diameter = 1.5 }",
    "upright.hub_axis": "{ tilt_deg = 0.05 }", "tie_rod.length": "{ length = 0.5 }",
}  # fmt: skip
GAIN = 'of = "camber_gain_deg_per_mm"\nlimits = [-0.0295, -0.0245]'
STEER = 'name = "bump steer"\nof = "toe_deg"\nover = { bump = [-20, 20, 5] }\ntake = "range"'
SMALL = {"CURVE_BUILDS": 8, "CURVE_KEYS": {"bump": ("camber_deg",)}, "VERDICT_BUILDS": 64}
WORDS = ("--drawing", "FS-101", "--issue", "A", "--part", "chassis", "--by", "Ann")
CHART = {"charts/matrix.svg": b"<svg/>"}


def small(patch):
    for name, value in SMALL.items():
        patch.setattr(tasks, name, value)


@pytest.fixture(scope="module")
def finished(tmp_path_factory):
    """A folder with a catalog of two finished studies, a spread with verdicts (1) and a linear one without limits (2), and one queued (3)."""
    folder = tmp_path_factory.mktemp("finished")
    shutil.copy(DEMO, folder)
    texts = (
        study_text(GAIN, STEER, method="sobol", size=16, errors=ERRORS, alignment=TOE, title="Brackets"),
        study_text("caster_deg", errors=ERRORS | {"chassis.upper_*": "{ plus_minus = 2.0 }", "chassis.lower_front_pivot": "{ diameter = 1.0 }"}),
        study_text("caster_deg", errors=ERRORS),
    )
    with pytest.MonkeyPatch.context() as patch:
        small(patch)
        patch.chdir(folder)
        patch.delenv("HOLDTIGHT_CATALOG", raising=False)
        for number, text in enumerate(texts, start=1):
            (folder / f"{number}.toml").write_text(text, encoding="utf-8")
        assert command("queue", "1.toml", "2.toml").code == 0
        assert command("work", "--threads", 1).code == 0
        assert command("queue", "3.toml").code == 0
    return folder


@pytest.fixture
def shop(finished, tmp_path, monkeypatch):
    """A copy of that folder to work in; charts are not drawn."""
    shutil.copytree(finished, tmp_path, dirs_exist_ok=True)
    monkeypatch.chdir(tmp_path)
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    monkeypatch.setattr(release_contents, "charts", lambda dossier, progress=None: CHART)
    monkeypatch.setattr(release_contents, "picture", lambda dossier, part, rows: None)
    small(monkeypatch)
    return tmp_path


def released(*words, study=1):
    return command("release", study, *WORDS, *words)


def frozen():
    """How many releases the catalog holds."""
    with Catalog().read() as con:
        return len(releases.list_releases(con))


# --- refusals


ISSUE = ("--drawing", "FS-101", "--issue", "A")
REFUSED = [
    ((9, *WORDS), "study 9"),
    ((3, *WORDS), "queued"),
    ((1, *ISSUE), "--part: is missing.*upright .1., chassis .3., tie_rod .1."),
    ((1, *ISSUE, "--part", "bonnet"), "'bonnet'.*chassis .3."),
    ((1, *ISSUE, "--part", "rack"), "rack: study 1 holds every feature of it perfect"),
    ((1, *ISSUE, "--part", "alignment"), "no part"),
    ((1, *WORDS, "--by", "  "), "--by.*empty"),
    ((1, "--drawing", " ", *WORDS[2:]), "--drawing.*empty"),
    ((1, "--drawing", "FS\n101", *WORDS[2:]), "--drawing.*control characters"),
    ((1, "--drawing", "F" * 61, *WORDS[2:]), "61 characters"),
    ((1, *WORDS, "--issue", "\x1b[31mB"), "--issue.*control characters"),
    ((1, *WORDS, "--check", "one", "--check", "two"), "--check 'two'.*second time"),
    ((1, *WORDS, "--reason", "upper_frnt_pivot=x"), "upper_front_pivot"),
    ((1, *WORDS, "--out", "1.toml"), "1.toml: is a file"),
    ((1, *WORDS, "--out", "."), "not empty"),
]  # fmt: skip


@pytest.mark.parametrize(("words", "named"), REFUSED, ids=[named for _, named in REFUSED])
def test_wrong_releases_are_refused_and_leave_nothing(shop, words, named):
    before = sorted(path.name for path in shop.rglob("*"))
    text = refused("release", *words)
    assert re.search(named, text), text
    assert frozen() == 0 and sorted(path.name for path in shop.rglob("*")) == before


@pytest.mark.parametrize("words", [("--issue", "A"), ("--drawing", "FS-101")])
def test_drawing_and_issue_are_asked_for(shop, words):
    done = command("release", 1, "--part", "chassis", *words)
    assert done.code == 2 and "Missing option" in done.err


def test_an_issue_is_released_once_and_a_drawing_is_of_one_part(shop):
    assert released().code == 0
    assert "was released by Ann on " in refused("release", 1, *WORDS, "--by", "Bo", "--out", "other")
    assert "FS-101 is of the part chassis" in refused("release", 1, *WORDS, "--issue", "B", "--part", "upright", "--out", "other")
    assert frozen() == 1 and not (shop / "other").exists()


def test_a_release_needs_a_name(shop, monkeypatch):
    import getpass

    monkeypatch.setattr(getpass, "getuser", lambda: (_ for _ in ()).throw(KeyError("no login")))
    assert "--by" in refused("release", 1, *WORDS[:-2])
    monkeypatch.setattr(getpass, "getuser", lambda: "cleo")
    assert command("release", 1, *WORDS[:-2], "--json").json["by"] == "cleo"


RELEASES_REFUSED = [
    (("FS-9",), "did you mean 'FS-101'|releases. lists"),
    (("FS-101", "--issue", "Q"), "no issue 'Q'; it has A"),
    (("FS-101", "--compare", "A", "Q"), "no issue 'Q'"),
    (("--issue", "A"), "need a drawing number"),
    (("--out", "x"), "need a drawing number"),
    (("FS-101", "--compare", "A", "A", "--issue", "A"), "leave out --issue"),
    (("FS-101", "--out", "."), "not empty"),
    (("FS-101", "--out", "1.toml"), "is a file"),
]


@pytest.mark.parametrize(("words", "named"), RELEASES_REFUSED)
def test_wrong_looks_at_releases_are_refused(shop, words, named):
    assert released().code == 0
    assert re.search(named, refused("releases", *words))


# --- what is frozen and printed


SAID = ("--condition", "welded, unpainted", "--check", "CMM", "--reason", "first issue", "--reason", "lower_*=jig", "--datums", "A|B|C")


def test_a_release_freezes_a_row_for_every_feature_of_the_part(shop):
    found = released(*SAID, "--json").json
    assert (found["drawing"], found["issue"], found["part"], found["study"], found["by"]) == ("FS-101", "A", "chassis", 1, "Ann")
    rows = {row["feature"]: row for row in found["rows"]}
    assert list(rows) == ["chassis.upper_front_pivot", "chassis.upper_rear_pivot", "chassis.lower_front_pivot"]
    lower = rows["chassis.lower_front_pivot"]
    assert lower["callout"] == "⌖ S⌀1.5 | A | B | C" and (lower["x_mm"], lower["y_mm"], lower["z_mm"]) == (152.0, 286.0, 124.0)
    assert (lower["condition"], lower["checked"], lower["reason"], lower["datums"]) == ("welded, unpainted", "CMM", "jig", "A|B|C")
    assert rows["chassis.upper_rear_pivot"]["reason"] == "first issue" and found["reason"] == "first issue"
    assert {row["verdict"] for row in rows.values()} <= {"hold", "watch", "open"}
    assert "good (" in lower["figures"] and lower["evidence"]["loosened"]["looser_zone"] == "S⌀3 mm"
    assert [m["measure"] for m in lower["evidence"]["measures"]] == ["camber_gain_deg_per_mm", "bump steer"]
    assert found["uncovered"] == ["chassis.lower_rear_pivot"]
    with Catalog().read() as con:
        assert releases.load_rows(con, releases.find(con, "FS-101")) == found["rows"]


def test_the_note_is_printed_and_says_what_has_to_be_said(shop):
    done = released(*SAID)
    assert done.code == 0
    assert "lower front pivot   152  286  124  ⌖ S⌀1.5 | A | B | C" in done.out
    assert "x ±1, y ±1, z ±1 mm | A | B | C" in done.out
    for words in ("ISO 22081", "ISO 1101", "orientation plane", "no bush compliance", "strength", "licensed", "Brackets",
                  "Not covered by this study", "lower rear pivot", "its mirror image", "first issue", "welded, unpainted"):  # fmt: skip
        assert words in " ".join(done.out.split())
    assert done.out.startswith((shop / "releases" / "FS-101-A" / "note.txt").read_text(encoding="utf-8"))


def test_other_parts_have_other_tolerances(shop):
    hub = released("--drawing", "U-1", "--part", "upright", "--json").json["rows"][0]
    assert hub["callout"].startswith("∠ ⌀0.174/100") and hub["remark"] == "true direction: camber -1.25°, toe -0.1°"
    rod = released("--drawing", "R-1", "--part", "tie_rod", "--json").json["rows"][0]
    assert rod["callout"] == "374.41 ±0.5 mm" and rod["remark"] == "re-set on the car for toe" and rod["datums"] == ""


def test_without_limits_there_is_a_warning_and_no_verdict(shop):
    found = released("--json", study=2).json
    assert {row["verdict"] for row in found["rows"]} == {None}
    assert any("no limits" in text and "no verdict" in text for text in found["warnings"])
    assert any("--condition" in text and "--check" in text and "--reason" in text for text in found["warnings"])


def test_datums_are_those_of_the_geometry_file(shop):
    found = released("--json").json
    assert found["rows"][0]["datums"].startswith("From the car's centre plane")
    assert any("give them letters" in text for text in found["warnings"])
    text = DEMO.read_text(encoding="utf-8").split("[datums]")[0]
    named = text + '[datums]\nall = "A|B|C"\nlower_front_pivot = "D|E"\n'
    (shop / DEMO.name).write_text(named, encoding="utf-8")
    assert command("queue", "1.toml").code == 0 and command("work", "--threads", 1).code == 0
    rows = released("--drawing", "FS-102", "--json", study=4).json["rows"]
    assert [row["datums"] for row in rows] == ["A|B|C", "A|B|C", "D|E"]
    assert rows[2]["callout"] == "⌖ S⌀1.5 | D | E"


def test_pivots_of_a_jig_are_a_pattern_and_the_jig_has_its_own_rows(shop):
    text = study_text(GAIN, errors=ERRORS)
    text += '[jigs.top]\npivots = ["chassis.upper_front_pivot", "chassis.upper_rear_pivot"]\nplus_minus = 0.5\ntilt_deg = 0.02\n'
    (shop / "jig.toml").write_text(text, encoding="utf-8")
    assert command("queue", "jig.toml").code == 0 and command("work", "--threads", 1).code == 0
    rows = {row["feature"]: row for row in released("--datums", "A|B", "--json", study=4).json["rows"]}
    assert rows["chassis.upper_front_pivot"]["callout"] == "x ±1, y ±1, z ±1 mm CZ"
    assert rows["chassis.lower_front_pivot"]["callout"] == "⌖ S⌀1.5 | A | B"
    assert rows["jig.top"]["callout"] == "x ±0.5, y ±0.5, z ±0.5 mm | A | B"
    assert rows["jig.top.turn"]["callout"] == "turned about x ±0.02°, y ±0.02°, z ±0.02° | A | B"
    assert "upper front pivot, upper rear pivot" in rows["jig.top"]["remark"]


# --- later issues


def test_a_later_issue_supersedes_and_is_compared(shop):
    assert released(*SAID).code == 0
    second = released("--issue", "B", "--reason", "jig made", "--datums", "A|B|C", "--json", study=2).json
    assert second["supersedes"] == "A" and second["current"]
    listed = command("releases", "--json").json
    assert [(r["issue"], r["current"], r["superseded_by"], r["altered"]) for r in listed] == [("A", False, "B", False), ("B", True, None, False)]
    found = command("releases", "FS-101", "--compare", "a", "b", "--json").json
    changes = {row["name"]: (row["change"], row["factor"], row["why"]) for row in found["rows"]}
    assert changes == {
        "upper front pivot": ("opened", 2.0, "jig made"), "upper rear pivot": ("opened", 2.0, "jig made"),
        "lower front pivot": ("closed", pytest.approx(2 / 3), "jig made"),
    }  # fmt: skip
    assert found["counts"]["opened"] == 2 and found["counts"]["closed"] == 1
    shown = command("releases", "FS-101", "--compare", "A", "B").out
    assert "opened ×2" in shown and "closed ×0.667" in shown and "jig made" in shown and "every feature: condition: welded" in shown
    assert "supersedes issue A" in (shop / "releases" / "FS-101-B" / "note.txt").read_text(encoding="utf-8")


def test_a_release_is_stale_when_its_geometry_went_on(shop):
    assert released().code == 0
    text = DEMO.read_text(encoding="utf-8").replace("[152, 286, 124]", "[152, 286, 126]")
    (shop / DEMO.name).write_text(text, encoding="utf-8")
    assert command("add", DEMO.name).code == 0
    assert command("releases", "--json").json[0]["stale"]
    assert "stale: front-wishbone@2 is there" in " ".join(command("releases").out.split())
    shown = command("releases", "FS-101")
    assert "points that moved since: lower front pivot 2 mm" in shown.out
    assert command("releases", "FS-101", "--json").json["issues"][0]["moved_mm"] == {"lower_front_pivot": 2.0}
    assert any(text.startswith("Stale from the start") for text in released("--issue", "B", "--json").json["warnings"])


def test_an_issue_is_shown_as_it_was_released(shop):
    first = released(*SAID)
    released("--issue", "B", study=2)
    shown = command("releases", "FS-101", "--issue", "A")
    assert first.out.split("\nreleased:")[0] in shown.out and "superseded by B" in shown.out
    found = command("releases", "FS-101", "--json").json
    assert [(one["issue"], len(one["rows"])) for one in found["issues"]] == [("A", 3), ("B", 3)]
    assert command("releases", "FS-101", "--issue", "b", "--json").json["issue"] == "B"


def test_altered_releases_are_not_shown_as_sound(shop):
    assert released().code == 0
    with Catalog().write() as con:
        con.execute("UPDATE kept.release_rows SET callout = '⌖ S⌀9'")
    for words in (("FS-101",), ("FS-101", "--out", "again"), ("FS-101", "--compare", "A", "A")):
        done = command("releases", *words)
        assert done.code == 1 and "not what was released" in done.err and done.out == ""
    assert "ALTERED" in command("releases").out and command("releases", "--json").json[0]["altered"]


# --- the folder


def test_the_folder_holds_everything_with_its_hashes(shop):
    found = released(*SAID, "--out", "handed/out", "--json").json
    folder = shop / "handed" / "out"
    names = {"note.txt", "table.csv", "table.dxf", "release.html", "release.json", "study.toml", "geometry.toml", "charts/matrix.svg", "manifest.sha256"}
    there = {path.relative_to(folder).as_posix() for path in folder.rglob("*") if path.is_file()}
    assert set(found["files"]) == there == names
    lines = (folder / "manifest.sha256").read_text(encoding="utf-8").splitlines()
    listed = {path: digest for digest, path in (line.split("  ", 1) for line in lines)}
    assert set(listed) == names - {"manifest.sha256"}
    assert all(hashlib.sha256((folder / path).read_bytes()).hexdigest() == digest for path, digest in listed.items())
    assert (folder / "study.toml").read_bytes() == (shop / "1.toml").read_bytes()
    assert (folder / "geometry.toml").read_bytes() == DEMO.read_bytes()
    kept = json.loads((folder / "release.json").read_text(encoding="utf-8"))
    assert kept["rows"] == found["rows"] and kept["release"]["record_hash"] == found["record_hash"]


def test_a_folder_is_handed_out_again_byte_for_byte(shop):
    assert released(*SAID, "--out", "first").code == 0
    assert released("--issue", "B", "--out", "second", study=2).code == 0
    assert command("releases", "FS-101", "--issue", "A", "--out", "again").code == 0
    assert tree(shop / "again") == tree(shop / "first") != tree(shop / "second")
    assert command("releases", "FS-101", "--out", "newest").code == 0
    assert tree(shop / "newest") == tree(shop / "second")
    assert command("releases", "FS-101", "--issue", "A", "--out", "again").code == 0  # the same once more
    (shop / "again" / "note.txt").write_text("scribble", encoding="utf-8")
    assert "not empty" in refused("releases", "FS-101", "--issue", "A", "--out", "again")


def tree(folder):
    return {path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


def test_nothing_is_written_through_a_link_or_outside(shop):
    assert released().code == 0
    (shop / "linked").mkdir()
    (shop / "elsewhere").mkdir()
    (shop / "linked" / "charts").symlink_to(shop / "elsewhere", target_is_directory=True)
    assert "not empty" in refused("releases", "FS-101", "--out", "linked")
    assert list((shop / "elsewhere").iterdir()) == []
    from study.release_folder import FolderNotWritten, write_folder

    for path in ("../x", "/x", "a/../../x", "a//b", "", ".x", "a/.x", "a\\b", "c:x", "a\n"):
        with pytest.raises(FolderNotWritten):
            write_folder(shop / "new", {"ok.txt": b"", path: b""})
    assert not (shop / "new").exists()


def test_a_folder_that_cannot_be_written_says_that_the_release_is_kept(shop, monkeypatch):
    from study import release_folder

    def full(folder, files):
        raise release_folder.FolderNotWritten(f"{folder}: cannot be written: No space left on device")

    monkeypatch.setattr(release_folder, "write_folder", full)
    done = released()
    assert done.code == 1 and "kept all the same" in done.err and "holdtight releases FS-101 --issue A --out" in done.err
    assert frozen() == 1


def test_charts_are_drawn_once_a_study(shop, monkeypatch):
    calls = []
    monkeypatch.setattr(release_contents, "charts", lambda dossier, progress=None: calls.append(1) or CHART)
    released()
    released("--drawing", "U-1", "--part", "upright")
    assert len(calls) == 1
    with Catalog().read() as con:
        assert releases.load_files(con, releases.find(con, "U-1"))["charts/matrix.svg"] == b"<svg/>"


def test_real_charts_and_picture(shop, monkeypatch):
    monkeypatch.undo()
    monkeypatch.chdir(shop)
    monkeypatch.delenv("HOLDTIGHT_CATALOG", raising=False)
    found = released("--out", "real", "--json").json
    stems = {path.rpartition(".")[0] for path in found["files"] if path.startswith("charts/")}
    assert {"charts/view-front", "charts/matrix", "charts/ranking-1-camber-gain"} <= stems
    assert all(f"{stem}.{ending}" in found["files"] for stem in stems for ending in ("svg", "pdf", "png"))
    assert 'src="data:image/svg+xml;base64,' in (shop / "real" / "release.html").read_text(encoding="utf-8")


# --- tables


def test_csv_has_a_row_a_feature(shop):
    released(*SAID)
    rows = read_csv(shop / "releases" / "FS-101-A")
    assert [row["feature"] for row in rows] == [
        "chassis.upper_front_pivot", "chassis.upper_rear_pivot", "chassis.lower_front_pivot", "chassis.lower_rear_pivot",
    ]  # fmt: skip
    assert rows[2]["diameter_mm"] == "1.5" and rows[2]["tolerance"] == "⌖ S⌀1.5 | A | B | C" and rows[0]["plus_minus_z"] == "1"
    assert rows[1]["x_mm"] == "-128" and rows[3]["tolerance"] == "" and "not covered" in rows[3]["remark"]


def read_csv(folder):
    return list(csv.DictReader(io.StringIO((folder / "table.csv").read_text(encoding="utf-8-sig"))))


def dxf_texts(folder):
    drawing = ezdxf.readfile(folder / "table.dxf")
    check = drawing.audit()
    assert not check.errors and not check.fixes
    return drawing, [text.dxf.text for text in drawing.modelspace().query("TEXT")]


def test_dxf_parses_back(shop):
    released(*SAID)
    drawing, texts = dxf_texts(shop / "releases" / "FS-101-A")
    assert drawing.units == 4 and {"S%%c1.5", "A", "B", "C", "lower front pivot", "152", "x %%p1, y %%p1, z %%p1 mm | A | B | C"} <= set(texts)
    frames = [insert.dxf.name for insert in drawing.modelspace().query("INSERT")]
    assert frames == ["TOLERANCE_POSITION"]
    assert any(text.startswith("Drawing FS-101, issue A") for text in texts) and any("ISO 22081" in text for text in texts)


def test_dxf_of_an_axis_has_an_angularity_frame(shop):
    released("--part", "upright", "--datums", "A")
    drawing, texts = dxf_texts(shop / "releases" / "FS-101-A")
    assert [insert.dxf.name for insert in drawing.modelspace().query("INSERT")] == ["TOLERANCE_ANGULARITY"]
    assert "%%c0.174/100" in texts and "(within 0.05%%d of its direction)" in texts


@pytest.mark.parametrize("text", ["%%u", "%%%%%c", "50 %%d", "^J", "\\U+2300", "\\M+1", "%" * 7])
def test_dxf_codes_in_texts_are_inert(text):
    made = release_dxf.dxf_text(text)
    assert "%%" not in made and not re.search(r"\^[^ ]|\\[UuMm]\+", made)


# --- texts of others


NASTY = "../../x/<script>alert('1')</script> \"q\" & %%u \\U+2300 ${x}"


class Tags(HTMLParser):
    def __init__(self):
        super().__init__()
        self.seen, self.attributes = set(), set()

    def handle_starttag(self, tag, attrs):
        self.seen.add(tag)
        self.attributes |= {name for name, _ in attrs}


def test_names_with_markup_quotes_and_separators_stay_inert(shop):
    words = ("--drawing", NASTY, "--issue", "=1+1", "--by", "@cmd|' /C calc'!A1", "--part", "chassis")
    texts = ("--condition", "-2+3\x07\x1b[2J\u202e", "--check", "+cmd", "--reason", f"=HYPERLINK(1)\n{NASTY}", "--datums", "<b>A|B")
    done = command("release", 1, *words, *texts)
    assert done.code == 0, done.err
    assert not re.search(r"[\x00-\x08\x0b-\x1f\x7f-\x9f\u202a-\u202e]", done.out)
    (folder,) = (shop / "releases").iterdir()
    assert re.fullmatch(r"[A-Za-z0-9_-]+", folder.name) and not (shop.parent / "x").exists()
    page = Tags()
    page.feed((folder / "release.html").read_text(encoding="utf-8"))
    assert "script" not in page.seen and "b" in page.seen and not any(name.startswith("on") for name in page.attributes)
    rows = read_csv(folder)
    assert rows[0]["issue"] == "'=1+1" and rows[0]["condition"].startswith("'-2+3") and rows[0]["checked"] == "'+cmd"
    assert rows[0]["by"].startswith("'@") and rows[0]["reason"].startswith("'=HYPERLINK") and rows[0]["drawing"] == NASTY
    assert not any(cell.startswith(tuple("=+@")) for row in rows for cell in row.values())
    _, found = dxf_texts(folder)
    assert not any("%%u" in text or "\\U+" in text or "\n" in text for text in found)
    again = command("releases", NASTY, "--issue", "=1+1", "--out", "again")
    assert again.code == 0 and tree(shop / "again") == tree(folder)
    assert command("releases").code == 0 and command("releases", NASTY, "--compare", "=1+1", "=1+1").code == 0


def test_a_title_with_control_characters_stays_inert(shop):
    title = "brackets \\u001b[31m <em>x</em> \\u0000 \\u202e"
    (shop / "title.toml").write_text(study_text(GAIN, errors=ERRORS, title=title), encoding="utf-8")
    assert command("queue", "title.toml").code == 0 and command("work", "--threads", 1).code == 0
    done = released(study=4)
    assert done.code == 0, done.err
    for path in ("note.txt", "release.html", "table.csv", "table.dxf", "release.json"):
        text = (shop / "releases" / "FS-101-A" / path).read_text(encoding="utf-8")
        assert not re.search(r"[\x00-\x08\x0b\x0c\x0e-\x1f\x7f-\x9f\u202e]", text), path
    page = Tags()
    page.feed((shop / "releases" / "FS-101-A" / "release.html").read_text(encoding="utf-8"))
    assert "em" not in page.seen
