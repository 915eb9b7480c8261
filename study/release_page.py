"""The release on one page: an HTML file without scripts or network, to read, to print in grey and to keep on file."""

import base64
from collections.abc import Mapping, Sequence

from study.release_callouts import callout
from study.release_note import coordinates, notes, released, uncovered_names, words
from study.release_page_style import STYLE, SYMBOLS
from study.sheet_page import Html, esc, join, pairs, tag
from study.sheet_summary import thousands, verdict_tag

COMMON = (("condition", "Condition"), ("checked", "Checked"), ("process", "Process"), ("datums", "Datums"))


def page(record: Mapping, rows: Sequence[Mapping], pictures: Sequence[tuple[bytes, str]]) -> str:
    """The page as text. pictures: (SVG, what it shows in words), each the width of the page or of half of it."""
    name = f"{record['drawing']} issue {record['issue']}"
    body = join([_head(record, rows), _table(rows), _uncovered(record), _pictures(pictures), _notes(record, rows), _foot(record)])
    policy = "default-src 'none'; style-src 'unsafe-inline'; img-src data:; base-uri 'none'; form-action 'none'"
    head = join([
        Html('<meta charset="utf-8">'), Html(f'<meta http-equiv="Content-Security-Policy" content="{policy}">'),
        Html('<meta name="viewport" content="width=device-width, initial-scale=1">'), Html('<link rel="icon" href="data:,">'),
        tag("title", name), tag("style", Html(STYLE)),
    ], "\n")  # fmt: skip
    return f'<!DOCTYPE html>\n<html lang="en">\n<head>\n{head}\n</head>\n<body>\n{SYMBOLS}{body}\n</body>\n</html>\n'


def _head(record, rows):
    facts = record["facts"]
    alike = [(title, _alike(rows, field)) for field, title in COMMON]
    issue = tag("div", tag("span", "Issue"), tag("b", record["issue"]), cls="issue")
    names = tag("div", tag("p", "Tolerance release", cls="kicker"), tag("h1", record["drawing"]), tag("p", words(record["part"]), cls="part"))
    listed = pairs([
        ("Released by", record["by_whom"]), ("Date", f"{record['created']:%Y-%m-%d}"), ("Supersedes", facts["supersedes_issue"]),
        ("Geometry", record["geometry"]), ("Study", f"{record['study_id']}: {record['title']}"),
        ("Builds", f"{thousands(facts['builds'])}, {facts['method']}, {facts['stage']} alignment"), ("Good builds", _good(facts)),
        *[(title, text) for title, text in alike if text], ("Reason", record["reason"]),
    ])  # fmt: skip
    return tag("header", tag("div", names, issue, cls="top"), listed)


def _good(facts):
    if facts["good_share"] is None:
        return "no limits, no verdicts" if not any(m["limit_low"] is not None or m["limit_high"] is not None for m in facts["measures"]) else "not told by this method"  # fmt: skip
    low, high = 100 * facts["good_low"], 100 * facts["good_high"]
    return f"{100 * facts['good_share']:.1f} % ({low:.1f} to {high:.1f} %); {100 * facts['wanted_share']:g} % wanted"


def _alike(rows, field):
    """The text that every row that could have one has; None where they differ."""
    said = {row[field] or "" for row in rows if field != "datums" or row["form"] != "length"}
    return next(iter(said)) if len(said) == 1 else None


def _table(rows):
    places = [coordinates(row) for row in rows]
    axes = [k for k in range(3) if any(place[k] for place in places)]
    single = [(field, title) for field, title in COMMON if _alike(rows, field) is None]
    judged = any(row["verdict"] for row in rows)
    heads = ["", "Feature", *("xyz"[k] for k in axes), "Tolerance, mm", *(["Verdict"] if judged else []), "Why"]
    body = []
    for row, place in zip(rows, places, strict=True):
        cells = [tag("td", row["place"], cls="n"), tag("th", _named(row), scope="row")]
        cells += [tag("td", place[k], cls="n") for k in axes] + [tag("td", _frames(row), cls="frames")]
        cells += [tag("td", verdict_tag(row["verdict"]))] if judged else []
        body.append(tag("tr", *cells, tag("td", _why(row, single), cls="why")))
    top = tag("tr", *(tag("th", head, scope="col", cls="n" if head in ("", "x", "y", "z") else None) for head in heads))
    return tag("div", tag("table", tag("thead", top), tag("tbody", *body)), cls="wide", tabindex="0", role="region", aria_label="Tolerances")


def _named(row):
    return join([row["name"], tag("small", row["shop_name"]) if row["shop_name"] else ""], " ")


def _frames(row):
    return join([_frame(line) for line in callout(row)])


def _frame(line):
    if line.symbol is None:
        return tag("div", line.text, cls="plain")
    sign = Html(f'<svg viewBox="0 0 20 20" role="img" aria-label="{line.symbol}"><use href="#{line.symbol}"/></svg>')
    boxes = tag("span", tag("i", sign), tag("i", line.zone), *(tag("i", datum) for datum in line.datums), cls="frame")
    return tag("div", boxes, tag("small", line.words) if line.words else "")


def _why(row, single):
    said = [tag("div", row["figures"])] if row["figures"] else []
    said += [_term(title, row[field]) for field, title in single if row[field]]
    said += [_term("Errors", row["distribution"])] if row["distribution"] != "uniform over the zone" else []
    said += [_term("Reason", row["reason"]) if row["reason"] else "", tag("div", row["remark"], cls="soft") if row["remark"] else ""]
    return join(said)


def _term(title, text):
    return tag("div", tag("span", f"{title}: ", cls="soft"), text)


def _uncovered(record):
    names = uncovered_names(record)
    if not names:
        return ""
    return tag("p", tag("b", "Not covered by this study, no tolerance is released: "), ", ".join(names), ".", cls="uncovered")


def _pictures(pictures):
    images = []
    for svg, description in pictures:
        source = f"data:image/svg+xml;base64,{base64.b64encode(svg).decode()}"
        images.append(tag("figure", Html(f'<img src="{source}" alt="{esc(description)}">')))
    return tag("div", *images, cls="pictures") if images else ""


def _notes(record, rows):
    warned = tag("section", tag("h2", "Warnings"), tag("ul", *(tag("li", text) for text in record["warnings"])), cls="warnings")
    listed = tag("section", tag("h2", "Notes for the drawing"), tag("ol", *(tag("li", text) for text in notes(record, rows))))
    return tag("main", warned if record["warnings"] else "", listed)


def _foot(record):
    return tag("footer", f"{released(record)}. Record {record['record_hash']}. Made with holdtight {record['version']}.")
