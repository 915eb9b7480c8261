"""The head of the sheet: the title block and, for each measure, the three sources that matter."""

from collections import Counter

from study.charts import tables as tb
from study.charts import theme
from study.charts.words import (
    NBSP,
    effect_phrase,
    finite,
    good_percent,
    limits_text,
    source_name,
)
from study.sheet_page import Html, esc, join, pairs, section, tag

METHODS = {
    "linear": "linear effects",
    "morris": "screening (Morris)",
    "sobol": "variance shares (Sobol')",
    "spread": "spread of independent builds",
    "worst": "search for the worst build",
}
_MINOR = 0.03


def title_block(study: dict, geometry: dict, stage: str) -> Html:
    builds, number = study.get("builds"), study.get("id")
    return tag(
        "header",
        tag("p", "Tolerance sheet" + ("" if number is None else f" · study{NBSP}{number}"), cls="kicker"),
        tag("h1", study.get("title") or "Untitled study"),
        pairs(
            [
                ("Geometry", study.get("geometry") or geometry.get("name")),
                ("Method", METHODS.get(study.get("method"), study.get("method"))),
                ("Builds really run", None if builds is None else thousands(builds)),
                ("Shown", theme.STAGE_WORDS[stage]),
                ("State", study.get("state")),
            ]
        ),
    )


def thousands(count) -> str:
    return f"{int(count):,}".replace(",", "\u202f")


def hold_these(tables: tb.Tables, study: dict, stage: str) -> Html:
    """For each measure its three leading sources with share, signed effect, ties; then what hardly matters."""
    heads = tb.measures(tables)
    leading = {head["measure_no"]: tb.ranked(tables, head["measure_no"], stage)[:3] for head in heads}
    if not any(leading.values()):
        return section("hold", "Hold these", tag("p", _no_ranking(study)), _goods(tables, study, stage))
    return section(
        "hold",
        "Hold these",
        _withheld(study),
        tag("p", _lead(heads, leading, stage)),
        _table(tables, heads, leading, study, stage),
        tag("p", _how_to_read(leading), cls="small soft"),
        _hardly(tables, stage),
        _openers(tables, study, stage),
    )


def _no_ranking(study: dict) -> str:
    if study.get("withheld"):
        return (
            "No ranking: too many builds could not be assembled, so the shares are withheld. "
            "The notes name what makes a build fail."
        )
    method = METHODS.get(study.get("method"), study.get("method"))
    return f"This method ({method}) ranks nothing; it says how the builds scatter and how many are good."


def _goods(tables: tb.Tables, study: dict, stage: str) -> Html:
    rows = [(head, tb.stat(tables, head["measure_no"], stage)) for head in tb.measures(tables)]
    return tag(
        "ul",
        *(
            tag("li", tag("b", head["name"]), ": ", _good(row, study))
            for head, row in rows
            if row is not None and finite(row.get("good_share")) is not None
        ),
    )


def _withheld(study: dict) -> Html:
    if not study.get("withheld"):
        return Html("")
    return tag(
        "p",
        tag("b", "Shares withheld. "),
        "Too many builds could not be assembled; what is ranked below is which sources make a build fail.",
        cls="banner",
    )


def _lead(heads: list[dict], leading: dict, stage: str) -> Html:
    counts = Counter(row["source"] for rows in leading.values() for row in rows)
    often = [(source, count) for source, count in counts.most_common(3) if count > 1]
    start = f"{theme.STAGE_WORDS[stage].capitalize()}, these sources decide."
    if len(heads) < 2 or not often:
        return esc(start)
    named = [join([tag("b", source_name(source)), f" ({count})"]) for source, count in often]
    return join(
        [f"{start} Most often among the leading three of {len(heads)} measures: ", join(named, ", "), "."]
    )


def _table(tables: tb.Tables, heads: list[dict], leading: dict, study: dict, stage: str) -> Html:
    columns = Html('<colgroup><col class="m"><col class="g"><col><col><col></colgroup>')
    top = tag(
        "tr",
        *(tag("th", text, scope="col") for text in ("Measure", "Good builds", "First", "Second", "Third")),
    )
    rows = []
    for head in heads:
        ranked = leading[head["measure_no"]]
        basis = tb.basis_of(ranked)
        stat = tb.stat(tables, head["measure_no"], stage) or {}
        limits = limits_text(stat)
        cells = [_cell(row, basis, ranked, place) for place, row in enumerate(ranked)]
        rows.append(
            tag(
                "tr",
                tag("th", head["name"], tag("span", limits, cls="limits") if limits else "", scope="row"),
                tag("td", _good(stat, study)),
                *cells,
                *(tag("td") for _ in range(3 - len(cells))),
            )
        )
    caption = f"The three leading sources of each measure, {theme.STAGE_WORDS[stage]}"
    return tag("table", tag("caption", caption), columns, tag("thead", top), tag("tbody", *rows), cls="hold")


def _cell(row: dict, basis: tb.Basis, ranked: list[dict], place: int) -> Html:
    values = tb.relative(ranked, basis)
    width = round(96 * min(values[row["source"]], 1.0))
    effect = effect_phrase(row)
    tie = "≈ tied" if row.get("tied") and place else ""
    return tag(
        "td",
        tag("span", source_name(row["source"]), cls="src"),
        tag(
            "span",
            Html(f'<i style="width:{width}px"></i>'),
            tb.strength_text(row, basis),
            verdict_tag(row.get("verdict")),
            cls="bar",
        ),
        tag("span", effect, " " if effect and tie else "", tag("span", tie, cls="tie"), cls="fx")
        if effect or tie
        else "",
    )


def verdict_tag(verdict: str | None) -> Html:
    return (
        tag("span", verdict, cls=f"tag {verdict}-v")
        if verdict in ("hold", "open", "watch")
        else esc(verdict or "")
    )


def _good(row: dict, study: dict) -> Html:
    share, wanted = finite(row.get("good_share")), finite(study.get("wanted_share"))
    if share is None:
        return tag("span", "no limits", cls="soft")
    low, high = row.get("good_low"), row.get("good_high")
    between = f"{good_percent(low)} to {good_percent(high)}" if finite(low) is not None else ""
    missed = wanted is not None and share < wanted
    return join(
        [
            tag("b", good_percent(share), cls="miss" if missed else None),
            tag("span", between, cls="limits") if between else "",
            tag("span", f"▼ wanted {wanted * 100:g}{NBSP}%", cls="limits miss") if missed else "",
        ]
    )


def _how_to_read(leading: dict) -> str:
    rows = [row for ranked in leading.values() for row in ranked]
    basis = tb.basis_of(rows)
    share = "Share of the measure's variance over the builds" if basis.is_share else "Mean absolute effect"
    text = f"{share}. The arrow says what a step of the source along its strongest axis does to the measure."
    if not all(effect_phrase(row) for row in rows):
        text += " A range, maximum or minimum over a sweep has no signed effect."
    if any(row.get("tied") for row in rows):
        text += " ≈ tied: its order with the one before it is not certain."
    return text


def _hardly(tables: tb.Tables, stage: str) -> Html:
    best = tb.greatest(tables, stage)
    minor = [source for source, item in best.items() if item["value"] < _MINOR]
    if not minor:
        return Html("")
    names = ", ".join(source_name(source) for source in minor)
    return tag(
        "p",
        tag("b", f"{len(minor)} of {len(best)} sources stay under 3{NBSP}% in every measure: "),
        names,
        ".",
    )


def _openers(tables: tb.Tables, study: dict, stage: str) -> Html:
    """What may be loosened: a set that passed together, or else what passes by itself, and said to be that."""
    together = study.get("open_together")
    if together:
        share = finite(study.get("open_together_good_share"))
        tail = "" if share is None else f" Loosened together, {good_percent(share)} of the builds are good."
        return tag("p", tag("b", "May be opened, all together: "), _names(together), ".", tail)
    verdicts: dict[str, set] = {}
    for row in tables.get("ranking", []):
        if row.get("stage") == stage and row.get("verdict"):
            verdicts.setdefault(row["source"], set()).add(row["verdict"])
    alone = [source for source, found in verdicts.items() if found == {"open"}]
    if not alone:
        return Html("")
    return tag(
        "p",
        tag("b", "Each could be opened by itself: "),
        _names(alone),
        ". Opening several at once has not been shown to pass.",
    )


def _names(sources) -> str:
    return ", ".join(source_name(source) for source in sources)
