"""Mutated input files: whatever is in them, the answer is a result of plain numbers or a short named error.

HOLDTIGHT_FUZZ=10000 sets the number of mutated geometry files (1,500 without it); a third as many study files and a
tenth as many CSVs come beside them. Case n of a part is the same on every run.
"""

import json
import os
import random
import re
import time
import warnings
from collections import Counter
from pathlib import Path

import pytest
from threadpoolctl import threadpool_limits

from catalog.errors import HoldtightError
from catalog.geometry import from_record, to_record
from catalog.geometry_file import GeometryFileError, parse_geometry, read_geometry
from study.nominal import evaluate
from study.study_file import parse_study
from study.tasks import StudyWork

CASES = int(os.environ.get("HOLDTIGHT_FUZZ", "1500"))
MOST_SECONDS = 20.0
STUDIES = Path(__file__).parents[1] / "studies"
DEMOS = {path.name: path.read_text(encoding="utf-8") for path in sorted(STUDIES.glob("*.toml"))}
GEOMETRIES = [text for text in DEMOS.values() if "\nlinkage = " in text]
STUDY_FILES = [text for text in DEMOS.values() if "\nlinkage = " not in text]
TABLE = (STUDIES / "rear-five-link.csv").read_text(encoding="utf-8")
POSITIONS = [{}, {}, {"bump_mm": 40.0}, {"roll_deg": -2.0}, {"rack_mm": 8.0}, {"bump_mm": -25.0, "roll_deg": 1.5}]
OUT_OF_REACH = [{"bump_mm": -900.0}, {"roll_deg": 44.0}, {"bump_mm": 1e300}, {"rack_mm": -400.0}]  # slow to be sure of

NUMBER = re.compile(r"(?<![\w.\"-])-?\d+(?:\.\d+)?")
ODD_VALUES = [
    "nan", "inf", "-inf", "1e308", "-1e308", "1e-320", "0", "-0.0", "0.0000001", "9" * 400, "1e999", "0x1F", "1_000", "true",
    '"12"', "[1, 2, 3]", "[]", "{}", "{a = 1}", '""', "1979-05-27", "07:32:00", "[[1]]", "'''\n'''", "1.2.3", "--1", "1,5",
    "[nan, 1, 2]", "[1e200, 2, 3]", '["x", "y", "z"]', "[1, 2]", "[1, 2, 3, 4]", "[true, 1, 2]",
]  # fmt: skip
ODD_TEXTS = [
    "\0", "\x1b[31m", "\r", "\n\n\n", "\t", "é", "𝔛", "\u2028", "\u202e", "\ufeff", "\ud800", '"', "'''", '"""', "#", "[", "]",
    "{", "}", "=", ".", "\\", "a" * 5000, "a." * 150, "a." * 3000, "[" * 2000, "{a=" * 300, "][", "[[", "*", "**", "@", "/", "..",
    "NaN", "%s", "{0}", "\u0661\u0662", "－1", "\x7f", "\x85",
]  # fmt: skip
ODD_LINES = [
    "[a.b.c.d.e.f.g.h.i.j.k.l.m.n]\nx = 1", "[right.points]\n", "[right.wheel]\ncamber_deg = 3", "[left.points]\na = [1, 2, 3]",
    '"a\\nb\\nc\\nd\\ne\\nf" = 1', '"\\u001b[2J" = [1, 2, 3]', "[points]\n" + '"' + "x" * 900 + '" = [1, 2, 3]', 'side = "right"',
    "[vehicle]\nsteered = true", "[vehicle]\nwheelbase = 1e300", 'spring_on = "lower_arm"', "[links.a]\ninner = [1, 2, 3]",
    '[links."a\\nb"]\ninner = [1, 2, 3]\nouter = [4, 5, 6]', '[arms.lower_arm]\nbuild = "legs"', '[datums]\nall = "\\u0000"',
    'axes = "x-rear y-left z-down"', 'axes = "x-down y-left z-forward"', 'units = "in"', 'units = "m"', "[[measures]]",
    '[[measures]]\nof = "toe_deg"', '[[measures]]\nof = "toe_deg"\nat = { bump = 1e5 }', '[jigs.a]\npivots = ["chassis.*", "a"]',
    '[[measures]]\nof = "toe_deg"\nover = { rack = [1, 1e9, 3] }\ntake = "slope"', '[errors]\n"*" = { plus_minus = 1 }',
    "[alignment]", "size = 99999999999999999999", "seed = -1", "[errors]\n" + '"' + "*" * 60 + '" = { length = 1 }',
]  # fmt: skip
TRICKS = [
    "", ".", "..", "/", "/dev/zero", "/dev/stdin", "/etc/passwd", "../../../../etc/passwd", "circle.csv", "pipe.csv", "folder",
    "zero.csv", "binary.csv", "long.csv", "wide.csv", "utf16.csv", "missing.csv", "a\\u0000b", "C:\\\\a.csv", "a" * 4000, "~", "$HOME",
    "rear-five-link.csv/", "./rear-five-link.csv", "rear-five-link.toml", "quotes.csv", "http://localhost/a.csv", "empty.csv",
]  # fmt: skip


# --- mutations: (text, rng) -> text


def odd_character(text, rng):
    at = rng.randrange(len(text) + 1)
    data = bytearray(text[at : at + 1].encode("utf-8", "surrogatepass") or b"x")
    data[rng.randrange(len(data))] ^= 1 << rng.randrange(8)
    return text[:at] + data.decode("utf-8", rng.choice(["replace", "surrogateescape"])) + text[at + 1 :]


def odd_text(text, rng):
    at = rng.randrange(len(text) + 1)
    return text[:at] + rng.choice(ODD_TEXTS) + text[at:]


def lines_changed(text, rng):
    lines = text.split("\n")
    i, j = rng.randrange(len(lines)), rng.randrange(len(lines))
    how = rng.randrange(4)
    if how == 0:
        del lines[i]
    elif how == 1:
        lines.insert(j, lines[i])
    elif how == 2:
        lines[i], lines[j] = lines[j], lines[i]
    else:
        lines[i:i] = rng.choice(ODD_LINES).split("\n")
    return "\n".join(lines)


def values_swapped(text, rng):
    found = list(NUMBER.finditer(text))
    if len(found) < 2:
        return text
    a, b = sorted(rng.sample(found, 2), key=lambda m: m.start())
    return text[: a.start()] + b.group() + text[a.end() : b.start()] + a.group() + text[b.end() :]


def number_replaced(text, rng):
    found = list(NUMBER.finditer(text))
    if not found:
        return text
    one = rng.choice(found)
    return text[: one.start()] + rng.choice(ODD_VALUES) + text[one.end() :]


def value_replaced(text, rng):
    found = list(re.finditer(r"(?m)= .*$", text))
    if not found:
        return text
    one = rng.choice(found)
    return text[: one.start()] + "= " + rng.choice(ODD_VALUES) + text[one.end() :]


def numbers_moved(text, rng):
    """Some or all numbers moved a little or a lot: most of what comes out is a geometry, though an odd one."""
    share, way = rng.choice([0.05, 0.3, 1.0]), rng.choice([1.0, 30.0, 300.0])

    def moved(found):
        if rng.random() > share or not 2 <= len(found.group()) <= 12:
            return found.group()
        return f"{float(found.group()) + rng.uniform(-way, way):.3f}"

    return NUMBER.sub(moved, text)


def numbers_equal(text, rng):
    """Numbers rounded to a coarse grid, so that points meet, stand in line or in one plane."""
    grid = rng.choice([10, 50, 100, 200])

    def rounded(found):
        return found.group() if len(found.group()) > 12 else str(round(float(found.group()) / grid) * grid)

    return NUMBER.sub(rounded, text)


def key_changed(text, rng):
    keys = sorted(set(re.findall(r"[a-z]+(?:_[a-z]+)+", text)))
    return (
        text.replace(rng.choice(keys), rng.choice([rng.choice(keys), "wheel_centre", "x" * 300, "ü", ""]))
        if keys
        else text
    )


def cut_short(text, rng):
    at = rng.randrange(len(text) + 1)
    return text[:at] if rng.random() < 0.5 else text[at:]


def spliced(text, rng):
    other = rng.choice(list(DEMOS.values()))
    return text[: rng.randrange(len(text) + 1)] + other[rng.randrange(len(other)) :]


def points_file_changed(text, rng):
    line = f'points_file = "{rng.choice(TRICKS)}"\n'
    if "points_file = " in text and rng.random() < 0.8:
        return re.sub(r"(?m)^points_file = .*\n", lambda _: line, text, count=1)
    more = rng.choice(
        ["", 'points_ignore = ["P-201"]\n', "points_ignore = 1\n", 'points_map = "a"\n', "[points_map]\na = 1\n"]
    )
    return line + more + text


MUTATIONS = [
    odd_character, odd_text, lines_changed, values_swapped, number_replaced, value_replaced, numbers_moved, numbers_moved,
    numbers_equal, key_changed, cut_short, spliced,
]  # fmt: skip

MILD = [values_swapped, numbers_moved, numbers_equal]


def mutated(texts, rng, more=()):
    """A text with one to three changes; half of the texts have only such as leave most files readable."""
    text, kinds = rng.choice(texts), [*MILD] if rng.random() < 0.5 else [*MUTATIONS, *more]
    for _ in range(rng.choice([1, 1, 1, 2, 3])):
        text = rng.choice(kinds)(text, rng)
    return text


# --- what every outcome has to be


@pytest.fixture
def folder(tmp_path, monkeypatch):
    """The demo's table beside tables that are none, as the current folder."""
    (tmp_path / "rear-five-link.csv").write_text(TABLE, encoding="utf-8")
    (tmp_path / "rear-five-link.toml").write_text(DEMOS["rear-five-link.toml"], encoding="utf-8")
    (tmp_path / "circle.csv").symlink_to("circle.csv")
    (tmp_path / "zero.csv").symlink_to("/dev/zero")
    (tmp_path / "folder").mkdir()
    os.mkfifo(tmp_path / "pipe.csv")
    (tmp_path / "binary.csv").write_bytes(bytes(range(256)) * 40)
    (tmp_path / "utf16.csv").write_bytes(TABLE.encode("utf-16"))
    (tmp_path / "long.csv").write_text("a,1,2,3\n" * 125_001)
    (tmp_path / "wide.csv").write_text("a" * 300_000 + "," * 300_000)
    (tmp_path / "quotes.csv").write_text('"' * 999 + ";1;2;3\n")
    (tmp_path / "empty.csv").write_text("")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def contents(folder):
    return sorted((path.name, path.lstat().st_size, path.lstat().st_mtime_ns) for path in folder.iterdir())


def outcome(run, given, label):
    """The name of the outcome of run(given); fails with the text where it is none that is allowed."""
    start = time.monotonic()
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("error")
            found = run(given)
    except HoldtightError as error:
        lines = str(error).splitlines()
        assert 1 <= len(lines) <= 5 and len(str(error)) < 5000, f"{label}: {error}\n{given!r}"
        shows = not isinstance(error, GeometryFileError) or all(line.isprintable() for line in lines)
        assert shows, f"{label}: marks that steer a terminal in {str(error)!r}\n{given!r}"
        found = type(error).__name__
    except Exception as error:
        raise AssertionError(f"{label}: {type(error).__name__}: {error}\n{given!r}") from error
    taken = time.monotonic() - start
    assert taken < MOST_SECONDS, f"{label}: {taken:.0f} s\n{given!r}"
    return found


def run_part(part, cases, make, run, *, folder, capfd):
    """Run all cases of a part and print what came of them."""
    before, counts = contents(folder), Counter()
    with threadpool_limits(1):
        for number in range(cases):
            rng = random.Random(f"{part} {number}")
            counts[outcome(lambda given, rng=rng: run(given, rng), make(rng), f"{part} case {number}")] += 1
    assert contents(folder) == before
    assert capfd.readouterr() == ("", "")
    with capfd.disabled():
        print(f"\n{cases} mutated {part}s: " + ", ".join(f"{name} {count}" for name, count in counts.most_common()))
    return counts


def evaluated(geometry, rng):
    """Evaluate at design or at another position: plain finite numbers, or a named error."""
    record = json.loads(json.dumps(to_record(geometry), allow_nan=False))
    assert from_record(record, text=geometry.text) == geometry
    position = rng.choice(POSITIONS if rng.random() < 0.95 else OUT_OF_REACH)
    json.dumps(evaluate(geometry, **position), allow_nan=False)
    return "evaluated"


def test_geometry_files(folder, capfd):
    def run(text, rng):
        return evaluated(parse_geometry(text, source="fuzz.toml", folder=rng.choice([folder, folder, None])), rng)

    def make(rng):
        return mutated(GEOMETRIES, rng, more=[points_file_changed] if rng.random() < 0.3 else ())

    counts = run_part("geometry file", CASES, make, run, folder=folder, capfd=capfd)
    assert counts["evaluated"] > CASES / 10 and counts["GeometryFileError"] > CASES / 10


def test_points_files(folder, tmp_path_factory, capfd):
    other, text = tmp_path_factory.mktemp("mutated"), DEMOS["rear-five-link.toml"]
    (other / "rear-five-link.toml").write_text(text, encoding="utf-8")

    def make(rng):
        table = mutated([TABLE, TABLE.replace(",", "."), TABLE.replace(",", ".").replace(";", ",")], rng)
        return table.encode("utf-8", rng.choice(["replace", "surrogatepass"]))

    def run(data, rng):
        (other / "rear-five-link.csv").write_bytes(data)
        return evaluated(read_geometry(other / "rear-five-link.toml"), rng)

    counts = run_part("points file", CASES // 10, make, run, folder=folder, capfd=capfd)
    assert counts["evaluated"] > CASES / 100 and counts["GeometryFileError"] > CASES / 100


def test_study_files(folder, capfd):
    known = {name: read_geometry(STUDIES / name) for name, text in DEMOS.items() if text in GEOMETRIES}

    def run(text, rng):
        study = parse_study(text, source="fuzz.toml")
        if study.geometry not in known or rng.random() < 0.7:
            return "parsed"
        work = StudyWork(known[study.geometry], study)
        json.dumps([measure.name for measure in study.measures], allow_nan=False)
        return "made ready" if work.tasks else "empty"

    def make(rng):
        return mutated(STUDY_FILES, rng).encode("utf-8", "replace").decode("utf-8")

    counts = run_part("study file", CASES // 3, make, run, folder=folder, capfd=capfd)
    assert counts["parsed"] > CASES / 50 and counts["StudyFileError"] > CASES / 50
