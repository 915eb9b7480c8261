"""Measure by measure: what governs each and how it scatters, drawn and as tables."""

from study import charts
from study.charts import tables as tb
from study.charts.words import (
    aligned,
    effects_text,
    finite,
    number,
    percent,
    quantity,
    source_name,
    unit_text,
)
from study.sheet_page import Figures, Html, details, join, section, table, tag
from study.sheet_summary import verdict_tag


def measures(tables: tb.Tables, figures: Figures) -> Html:
    """A block per measure: ranking beside distribution, their numbers below."""
    heads = tb.measures(tables)
    if not heads:
        return Html("")
    return section(
        "measures", "Measure by measure", _key(tables), *(_measure(tables, head, figures) for head in heads)
    )


def _key(tables: tb.Tables) -> Html:
    ranking = tables.get("ranking", [])
    parts = []
    if len(tb.stages(ranking)) > 1:
        parts.append("hollow bar: before alignment, filled: after")
    if any(finite(row.get("st_low")) is not None for row in ranking):
        parts.append("line: 95 % interval")
    if any(
        finite(row.get("st")) is not None and finite(row.get("linear_share")) is not None for row in ranking
    ):
        parts.append("diamond: linear share")
    if any(row.get("tied") for row in ranking):
        parts.append("≈: tied with the one above")
    return tag("p", "; ".join(parts).capitalize() + ".", cls="small soft") if parts else Html("")


def _measure(tables: tb.Tables, head: dict, figures: Figures) -> Html:
    number_ = head["measure_no"]
    ranking, distribution = charts.ranking_spec(tables, number_), charts.distribution_spec(tables, number_)
    left = (
        figures.add(
            ranking, _caption("What governs it", ranking), _ranking_data(tables, number_), paper_px=388
        )
        if ranking
        else ""
    )
    right = (
        figures.add(
            distribution, _caption("How it scatters", distribution), _bins_data(tables, number_), paper_px=275
        )
        if distribution
        else ""
    )
    return tag(
        "article",
        tag("h3", f"{head['place']}. {head['name']}"),
        _spread_words(tables, number_),
        _linear_words(tables, number_),
        tag("div", left, right, cls="two"),
        cls="measure",
    )


def _caption(words: str, spec: dict) -> Html:
    return join([tag("b", words), ", ", spec["title"].get("subtitle", "")])


def _spread_words(tables: tb.Tables, measure_no: int) -> Html:
    row = tb.stat(tables, measure_no, tb.last_stage(tables))
    if row is None:
        return Html("")
    unit = unit_text(row.get("unit"))
    nominal, mean, low, high = aligned([row.get(k) for k in ("nominal", "mean", "q025", "q975")])
    text = f"Nominal {nominal}, mean {mean}, standard deviation {number(row.get('sd'))}"
    if finite(row.get("q025")) is not None:
        text += f"; 95 % of builds between {low} and {high}"
    return tag("p", text + (f" (all in {unit})." if unit else "."), cls="small")


def _linear_words(tables: tb.Tables, measure_no: int) -> Html:
    """Sources whose linear share lies well away from the total share."""
    apart = []
    for row in tb.ranked(tables, measure_no, tb.last_stage(tables)):
        total, linear, high = (finite(row.get(key)) for key in ("st", "linear_share", "st_high"))
        if total is None or linear is None:
            continue
        if abs(total - linear) > max(0.05, (high or total) - total):
            apart.append(f"{source_name(row['source'])} {percent(total)} against {percent(linear)}")
    if not apart:
        return Html("")
    return tag(
        "p", tag("b", "Not linear: "), "total and linear share differ: ", "; ".join(apart), ".", cls="small"
    )


def _ranking_data(tables: tb.Tables, measure_no: int) -> Html:
    rows = []
    for stage in reversed(tb.stages(tables["ranking"])):
        rows += [
            _ranking_row(row, place)
            for place, row in enumerate(tb.ranked(tables, measure_no, stage), start=1)
        ]
    body = table(
        _RANKING_HEADS,
        rows,
        words=3,
        spare=True,
        caption="All sources; shares with their 95 % interval; effects signed, in the part's axes",
    )
    return details("The same as a table, all sources and axes", body)


_RANKING_HEADS = ("Source", "Stage", "Rank", "Total ST", "First S1", "Linear", "µ*", "Effects", "Verdict")


def _ranking_row(row: dict, place: int) -> list:
    rank = str(int(row["rank"]) if finite(row.get("rank")) is not None else place)
    return [
        source_name(row["source"]),
        row.get("stage"),
        rank + (" ≈" if row.get("tied") else ""),
        interval(row, "st"),
        interval(row, "s1"),
        percent(row.get("linear_share")),
        quantity(row.get("mu_star"), row.get("unit")),
        effects_text(row),
        verdict_tag(row.get("verdict")),
    ]


def interval(row: dict, key: str) -> str:
    text, low, high = (percent(row.get(name)) for name in (key, f"{key}_low", f"{key}_high"))
    return f"{text} ({low} to {high})" if finite(row.get(f"{key}_low")) is not None else text


def _bins_data(tables: tb.Tables, measure_no: int) -> Html:
    stage = tb.last_stage(tables)
    rows = [
        row
        for row in tables.get("histogram", [])
        if row.get("measure_no") == measure_no and row.get("stage") == stage
    ]
    edges = aligned([row["left"] for row in rows] + [row["right"] for row in rows])
    body = [
        [left, right, row["count"]]
        for left, right, row in zip(edges[: len(rows)], edges[len(rows) :], rows, strict=True)
    ]
    return details(
        "The same as a table", table(["From", "to", "Builds"], body, words=0, caption="Builds per bin")
    )
