"""The drawing note of a release: the tolerances as they stand on the drawing, then why, in plain text."""

import re
import textwrap
from collections.abc import Mapping, Sequence

from study.release_callouts import callout, datum_letters
from study.sheet_tables import CAUTIONS

WIDTH = 100
ISO_22081 = (
    "A general tolerance class in the title block (ISO 22081) does not control a derived feature such as a joint centre:"
    " each one has its own tolerance here."
)
_LEGEND = {
    "ball": "S⌀ in a position frame (ISO 1101): the joint centre lies in a sphere of that diameter about its true position.",
    "box": "± along named axes: coordinate tolerances. ISO 1101 has no such zone for a point; written as position tolerances"
    " it is one of twice the figure along each axis, between two planes, each with its orientation plane indicator.",
    "cylinder": "⌀ in a position frame (ISO 1101): the joint centre lies in a cylinder of that diameter along the direction"
    " named, about its true position; along it within the ± figure.",
    "length": "± on a length: distance between the two joint centres.",
    "tilt": "⌀T/100 in an angularity frame (ISO 1101): over 100 mm the axis lies in a cylinder of diameter T along its true"
    " direction.",
    "CZ": "CZ (ISO 5458): the pivots of one jig are one pattern that floats together; its own place is toleranced apart."
    " Where their zones differ, mark them SIM.",
}


def note(record: Mapping, rows: Sequence[Mapping]) -> str:
    """The note as text, ending with a line break. record, rows: as in `study.release_rows.draft`."""
    blocks = [
        _head(record), _tolerances(rows), _uncovered(record), _wrapped(may_be_opened(record, rows)), _numbered("WARNINGS", record["warnings"]),
        _numbered("NOTES", notes(record, rows)), _decisions(rows), _foot(record),
    ]  # fmt: skip
    return "\n\n".join("\n".join(block) for block in blocks if block) + "\n"


def title(record: Mapping) -> str:
    return f"Drawing {record['drawing']}, issue {record['issue']}: {words(record['part'])}"


def words(name: str) -> str:
    return name.replace("_", " ")


def released(record: Mapping) -> str:
    """Who, when and instead of which issue."""
    old = record["facts"]["supersedes_issue"]
    text = f"Released by {record['by_whom']}, {record['created']:%Y-%m-%d %H:%M} UTC"
    return text + (f"; supersedes issue {old}" if old else "")


def studied(record: Mapping) -> str:
    """The study behind it in one line."""
    facts = record["facts"]
    text = f"Study {record['study_id']} “{record['title']}” of {record['geometry']}: {facts['method']}, {facts['builds']} builds, seed {facts['seed']}, {facts['stage']} alignment"  # fmt: skip
    if facts["good_share"] is not None:
        text += f"; {good_builds(facts)} of builds inside all limits, {100 * facts['wanted_share']:g} % wanted"
    return text


def good_builds(facts: Mapping) -> str:
    """The share of good builds with its interval, where the method gives one."""
    text = f"{100 * facts['good_share']:.1f} %"
    return text if facts["good_low"] is None else text + f" ({100 * facts['good_low']:.1f} to {100 * facts['good_high']:.1f} %)"


def may_be_opened(record: Mapping, rows: Sequence[Mapping]) -> str:
    """What the study would still let open among these features, or ""."""
    facts = record["facts"]
    names = [row["name"] for row in rows if row["feature"] in (facts["open_together"] or ())]
    if not names:
        return ""
    share = facts["open_together_good_share"]
    tail = "" if share is None else f" ({100 * share:.1f} % of builds good, all of the study's opened together)"
    return f"The study would let these open further: {', '.join(names)}{tail}."


def frame_of_reference(record: Mapping) -> str:
    """What the coordinates of the note are."""
    facts = record["facts"]
    text = "x, y, z: true positions in the car's axes at design (x forward, y left, z up), mm"
    if facts["whole_axle"]:
        return text + ", of the whole axle."
    return text + (", left side; the right side is its mirror image." if facts["mirrored"] else ", left side / right side where it is no mirror image.")  # fmt: skip


def notes(record: Mapping, rows: Sequence[Mapping]) -> list[str]:
    """What is written on the drawing below the tolerances: what the symbols mean, ISO 22081, cautions."""
    found = [frame_of_reference(record)] if any(row["x_mm"] is not None for row in rows) else []
    if record["part"] not in ("chassis", "rack"):
        found.append("Errors are those of this part by itself: its datums have to be features of this part.")
    words_only = dict.fromkeys(row["datums"] for row in rows if row["datums"] and not _pure_letters(row["datums"]))
    found += [f"Datums: {text}" for text in words_only]
    forms = dict.fromkeys(row["form"] for row in rows if not row["evidence"].get("turn"))
    found += [_LEGEND[form] for form in _LEGEND if form in forms]
    if any(row["evidence"].get("jig") and row["kind"] == "point" for row in rows):
        found.append(_LEGEND["CZ"])
    return [*found, ISO_22081, *(text for text in CAUTIONS if "22081" not in text)]


def uncovered_names(record: Mapping) -> list[str]:
    return [words(name.partition(".")[2]) for name in record["uncovered"]]


def coordinates(row: Mapping) -> tuple[str, str, str]:
    """x, y, z as text, left / right where they differ; empty for what is no point."""
    pairs = [(row[f"{axis}_mm"], row[f"right_{axis}_mm"]) for axis in "xyz"]
    return tuple(" / ".join(_mm(value) for value in pair if value is not None) for pair in pairs)


def named(row: Mapping) -> str:
    """The feature in words, with the shop's own name of it."""
    return row["name"] + (f" [{row['shop_name']}]" if row["shop_name"] else "")


def said(row: Mapping) -> list[tuple[str, str]]:
    """Everything that stands with a feature beside its tolerance, as (term, text), only what is there."""
    verdict = " – ".join(text for text in (row["verdict"], row["figures"]) if text)
    pairs = [
        ("process", " – ".join(text for text in (row["process"], row["distribution"]) if text)), ("condition", row["condition"]),
        ("checked", row["checked"]), ("verdict" if row["verdict"] else "figures", verdict), ("reason", row["reason"]),
        ("remark", row["remark"]),
    ]  # fmt: skip
    return [(term, text) for term, text in pairs if text]


def _head(record):
    return [title(record), f"{released(record)}.", *_wrapped(f"{studied(record)}."), *(_wrapped(f"Reason: {record['reason']}") if record["reason"] else ())]  # fmt: skip


def _tolerances(rows):
    cells = [["", "feature", "x", "y", "z", "tolerance"]]
    for row in rows:
        lines = [line.text for line in callout(row)]
        cells.append([str(row["place"]), named(row), *coordinates(row), lines[0]])
        cells += [["", "", "", "", "", text] for text in lines[1:]]
    kept = [i for i in range(6) if any(row[i] for row in cells[1:])]
    wide = {i: max(len(row[i]) for row in cells) for i in kept}
    return [
        "  ".join(row[i].rjust(wide[i]) if i in (0, 2, 3, 4) else row[i].ljust(wide[i]) for i in kept).rstrip() for row in cells
    ]


def _uncovered(record):
    names = uncovered_names(record)
    return _wrapped(f"Not covered by this study (held perfect in it, no tolerance is released): {', '.join(names)}.") if names else []  # fmt: skip


def _decisions(rows):
    lines = ["FEATURE BY FEATURE"]
    for row in rows:
        lines.append(f"{row['place']}  {named(row)}")
        for term, text in said(row):
            lines += _wrapped(f"{term + ':':<11}{text}", first="   ", then=" " * 14)
    return lines


def _numbered(heading, texts):
    if not texts:
        return []
    lines = [heading]
    for number, text in enumerate(texts, start=1):
        lines += _wrapped(text, first=f"{number}. ", then="   ")
    return lines


def _foot(record):
    return [f"Record {record['record_hash']}", f"Made with holdtight {record['version']}."]


def _wrapped(text, *, first="", then=""):
    text = re.sub(r"(?<=\d) (?=(?:%|mm|µm)(?:\W|$))", "\u00a0", text)  # a number stays with its unit
    lines = textwrap.wrap(text, WIDTH, initial_indent=first, subsequent_indent=then, break_on_hyphens=False)
    return [line.replace("\u00a0", " ") for line in lines]


def _pure_letters(text):
    return " | ".join(datum_letters(text)) == " | ".join(part.strip() for part in text.replace(",", "|").split("|"))


def _mm(value):
    return f"{value:.3f}".rstrip("0").rstrip(".") if abs(value) >= 0.0005 else "0"
