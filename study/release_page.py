"""The release on one page: an HTML file without scripts or network, to read, to print in grey and to keep on file."""

import base64
from collections.abc import Mapping, Sequence

from study.charts.words import good_percent, limits_text, measure_name, number
from study.release_callouts import callout
from study.release_note import coordinates, good_builds, may_be_opened, notes, released, uncovered_names, words
from study.release_page_style import STYLE, SYMBOLS
from study.sheet_page import Html, esc, join, tag
from study.sheet_summary import thousands, verdict_tag

COMMON = (("condition", "Condition"), ("checked", "Checked"), ("process", "Process"), ("datums", "Datums"))
MOST_MEASURES = 14
MOST_BESIDE_PICTURE = 8  # features and warnings; with more the print leaves the picture out, to stay on one page


def page(record: Mapping, rows: Sequence[Mapping], picture: tuple[bytes, str] | None) -> str:
    """The page as text. picture: (SVG, what it shows in words), half as wide as the page."""
    name = f"{record['drawing']} issue {record['issue']}"
    body = join([_head(record, rows), _table(record, rows), _uncovered(record, rows), _middle(record, rows, picture), _notes(record, rows), _foot(record)])
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
    study = f"{record['study_id']}: {record['title']} ({thousands(facts['builds'])} builds, {facts['method']}, {facts['stage']} alignment)"
    items = [
        ("Released by", f"{record['by_whom']}, {record['created']:%Y-%m-%d}", 1), ("Supersedes", facts["supersedes_issue"] or "none: first issue", 1),
        ("Geometry", record["geometry"], 1), ("Good builds", _good(facts), 1), ("Study", study, 2),
        *((title, text, 2 if title == "Datums" else 1) for title, text in alike if text), ("Reason", record["reason"], 2),
    ]  # fmt: skip
    boxes = [tag("div", tag("dt", term), tag("dd", text), cls="two" if wide == 2 else None) for term, text, wide in items if text]
    return tag("header", tag("div", names, issue, cls="top"), tag("dl", *boxes, cls="pairs"))


def _good(facts):
    if facts["good_share"] is None:
        return "no limits, no verdicts" if not any(m["limit_low"] is not None or m["limit_high"] is not None for m in facts["measures"]) else "not told by this method"  # fmt: skip
    return f"{good_builds(facts)}; {100 * facts['wanted_share']:g} % wanted"


def _alike(rows, field):
    """The text that every row that could have one has; None where they differ."""
    said = {row[field] or "" for row in rows if field != "datums" or row["form"] != "length"}
    return next(iter(said)) if len(said) == 1 else None


def _table(record, rows):
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
        body.append(tag("tr", *cells, tag("td", _why(record, row, single), cls="why")))
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


def _why(record, row, single):
    said = [tag("div", row["figures"])] if row["figures"] else []
    said += [_term(title, row[field]) for field, title in single if row[field]]
    said += [_term("Errors", row["distribution"])] if row["distribution"] != "uniform over the zone" else []
    said += [_term("Reason", row["reason"])] if row["reason"] not in ("", record["reason"]) else []
    return join(said + ([tag("div", row["remark"], cls="soft")] if row["remark"] else []))


def _term(title, text):
    return tag("div", tag("span", f"{title}: ", cls="soft"), text)


def _uncovered(record, rows):
    names, more = uncovered_names(record), may_be_opened(record, rows)
    held = tag("p", tag("b", "Not covered by this study, no tolerance is released: "), ", ".join(names), ".", cls="below") if names else ""
    return join([held, tag("p", more, cls="below") if more else ""])


def _middle(record, rows, picture):
    """Where the features are, beside what each does to the measures, and the warnings."""
    image = ""
    if picture:
        source = f"data:image/svg+xml;base64,{base64.b64encode(picture[0]).decode()}"
        image = tag("figure", Html(f'<img src="{source}" alt="{esc(picture[1])}">'))
    listed = tag("ul", *(tag("li", text) for text in record["warnings"]))
    warned = tag("section", tag("h2", "Warnings"), listed, cls="warnings") if record["warnings"] else ""
    long = len(rows) + len(record["warnings"]) > MOST_BESIDE_PICTURE
    cls = "middle" + ("" if picture else " alone") + (" long" if long else "")
    return tag("div", image, tag("div", _influence(record, rows), warned), cls=cls)


def _influence(record, rows):
    """A row a measure: limits, share of good builds, and what each feature of the part takes of it."""
    measured = record["facts"]["measures"]
    measured = [m for m in measured if limits_text(m)] or measured
    shares = {(row["place"], m["measure"]): m for row in rows for m in row["evidence"]["measures"]}
    if not shares:
        return ""
    is_share = any(m["st"] is not None or m["linear_share"] is not None for m in shares.values())
    judged, body = any(m["good_share"] is not None for m in measured), []
    for measure in measured[:MOST_MEASURES]:
        name = tag("th", measure_name(measure), scope="row") + tag("td", limits_text(measure), cls="limits")
        cells = [tag("td", good_percent(measure["good_share"]), cls="n")] if judged else []
        cells += [_share(shares.get((row["place"], measure["measure"]))) for row in rows]
        body.append(tag("tr", Html(name), *cells))
    heads = [tag("th", head, scope="col") for head in ("Measure", "Limits")]
    heads += [tag("th", "Good", scope="col", cls="n")] if judged else []
    heads += [tag("th", row["place"], scope="col", cls="n", title=row["name"]) for row in rows]
    said = "Part of each measure's variance that goes with the feature of that number, %" if is_share else "Mean effect of the feature of that number"
    more = len(measured) - MOST_MEASURES
    said += f"; {more} more measures in charts/matrix" if more > 0 else ""
    table = tag("table", tag("caption", said), tag("thead", tag("tr", *heads)), tag("tbody", *body), cls="influence")
    return tag("div", table, cls="wide")


def _share(found):
    if found is None:
        return tag("td", "–", cls="n")
    share = found["st"] if found["st"] is not None else found["linear_share"]
    if share is None:
        return tag("td", number(found["mu_star"], 2), cls="n")
    shade = round(60 * min(max(share, 0.0), 1.0))
    style = f"background:color-mix(in srgb, #1c2126 {shade // 2}%, #fff)" if shade >= 3 else None
    return tag("td", f"{100 * share:.0f}" if share >= 0.005 else "·", cls="n", style=style)


def _notes(record, rows):
    return tag("main", tag("h2", "Notes for the drawing"), tag("ol", *(tag("li", text) for text in notes(record, rows))))


def _foot(record):
    return tag("footer", f"{released(record)}. Record {record['record_hash']}. Made with holdtight {record['version']}.")
