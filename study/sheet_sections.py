"""The drawn part of the sheet: geometry, matrix, measure by measure, curves, adjusters, correlations."""

from study import charts
from study.charts import tables as tb
from study.charts import theme
from study.charts.curves import curve_rows
from study.charts.places import source_place
from study.charts.views import title as view_title
from study.charts.words import (
    aligned,
    finite,
    key_name,
    number,
    percent,
    source_name,
    unit_text,
)
from study.sheet_page import Figures, Html, details, esc, join, section, table, tag

_FORWARD = {"front": "", "side": ", forward is left", "top": ", forward is up"}


def where(tables: tb.Tables, geometry: dict, figures: Figures, stage: str) -> Html:
    """Three views with the choice of a measure."""
    heads = tb.measures(tables)
    has_ranking = any(tb.ranked(tables, head["measure_no"], stage) for head in heads)
    choice = _choice(heads) if has_ranking else Html("")
    views = [
        figures.add(
            charts.view_spec(geometry, tables, kind, choose=True, stage=stage),
            view_title(geometry, kind) + words,
            fit=False,
            choose=True,
            from_end=kind == "front",
        )
        for kind, words in _FORWARD.items()
    ]
    return section(
        "where",
        "Where they sit",
        choice,
        tag(
            "p",
            f"Marker area: share of variance, {theme.STAGE_WORDS[stage]}. To scale at design; tyre width assumed.",
            cls="small soft",
        )
        if has_ranking
        else "",
        tag("div", *views, cls="views"),
        details("Points and shares as a table", _points(tables, geometry, stage)),
    )


def _choice(heads: list[dict]) -> Html:
    options = [tag("option", "all measures: the greatest share of each source", value="-1")]
    options += [tag("option", head["name"], value=head["measure_no"]) for head in heads]
    return tag("p", tag("label", "Show for ", for_="shown"), tag("select", *options, id="shown"))


def _points(tables: tb.Tables, geometry: dict, stage: str) -> Html:
    best = tb.greatest(tables, stage)
    rows = []
    for source, item in best.items():
        point = source_place(geometry, source)
        place = [number(value, 4) for value in point] if point else ["", "", ""]
        rows.append([source_name(source), item["text"], item["measure"], *place])
    if not rows:
        rows = [
            [name.replace("_", " "), "", "", *(number(v, 4) for v in point)]
            for name, point in geometry["left"].items()
        ]
    return table(
        ["Source", "Greatest share", "of", "x, mm", "y, mm", "z, mm"],
        rows,
        words=3,
        caption="Left side, x forward, y left, z up; where a source is drawn",
    )


def matrix(tables: tb.Tables, figures: Figures, stage: str) -> Html:
    heads = tb.measures(tables)
    if len(heads) < 2 or not tb.greatest(tables, stage):
        return Html("")
    spec = charts.matrix_spec(tables, stage=stage)
    values = {head["measure_no"]: _relative(tables, head["measure_no"], stage) for head in heads}
    rows = [
        [source_name(source), *(percent(values[head["measure_no"]].get(source)) for head in heads)]
        for source in tb.greatest(tables, stage)
    ]
    data = details(
        "The same as a table",
        table(
            ["Source", *(head["name"] for head in heads)], rows, caption=f"Shares, {theme.STAGE_WORDS[stage]}"
        ),
    )
    caption = join(
        [tag("b", "Share in per cent"), f", {theme.STAGE_WORDS[stage]}; below 1 % left out; darker is more"]
    )
    return section(
        "matrix", "Every source against every measure", figures.add(spec, caption, data, fit=False)
    )


def _relative(tables: tb.Tables, measure_no: int, stage: str) -> dict[str, float]:
    rows = tb.ranked(tables, measure_no, stage)
    return tb.relative(rows, tb.basis_of(rows)) if rows else {}


def curves(tables: tb.Tables, figures: Figures) -> Html:
    found = [_curve(tables, axis, key, figures) for axis, key in charts.curve_kinds(tables)]
    if not found:
        return Html("")
    return section(
        "curves",
        "Bump, roll and steer",
        tag("p", "Line: nominal. Bands: the middle 50 and 90 % of the builds.", cls="small soft"),
        tag("div", *found, cls="three"),
    )


def _curve(tables: tb.Tables, axis: str, key: str, figures: Figures) -> Html:
    rows = curve_rows(tables, axis, key)
    body = [
        [row["side"], number(row["x"]), *aligned(row[name] for name in ("nominal", "q05", "q50", "q95"))]
        for row in rows
    ]
    data = details(
        "The same as a table",
        table(
            ["Side", axis, "Nominal", "5 %", "Median", "95 %"],
            body,
            caption=f"{key_name(key)}, {unit_text(rows[0]['unit'])}",
        ),
    )
    spec = charts.curve_spec(tables, axis, key)
    alike = " (left, right alike)" if "alike" in spec["title"].get("subtitle", "") else ""
    return figures.add(spec, join([tag("b", spec["title"]["text"]), alike]), data, paper_px=320)


def demand(tables: tb.Tables, figures: Figures) -> Html:
    """The shim kit: what each adjuster is asked for."""
    rows = tables.get("demand", [])
    if not rows:
        return Html("")
    drawn = [
        figures.add(
            charts.demand_spec(tables, unit),
            join(
                [
                    tag("b", f"Demand, {unit_text(unit)}"),
                    ("; tick: median, bar: 5 to 95 %, line: 0.5 to 99.5 % of the builds"),
                ]
            ),
        )
        for unit in dict.fromkeys(r["unit"] for r in rows)
    ]
    body = [
        [
            str(row.get("adjuster")).replace("_", " "),
            str(row.get("by") or "").replace("_", " "),
            unit_text(row.get("unit")),
            *aligned((row.get(key) for key in ("low", "q005", "q05", "q50", "q95", "q995", "high")), 3),
            _out(row.get("ran_out_share")),
        ]
        for row in rows
    ]
    heads = ["Set", "by", "in", "least", "0.5 %", "5 %", "median", "95 %", "99.5 %", "most", "ran out"]
    return section(
        "demand",
        "Adjusters: what the workshop will need",
        *drawn,
        table(
            heads,
            body,
            words=3,
            caption="Demand over the builds, from the drawing; 0.5 to 99.5 % is the kit that serves "
            "99 cars in 100. A build whose adjuster runs out stays at its stop and counts as bad.",
        ),
    )


def _out(share) -> str:
    share = finite(share)
    return "–" if share is None else "none" if share == 0 else f"{number(100 * share, 2)}\u00a0%"


def together(tables: tb.Tables, figures: Figures) -> Html:
    spec = charts.correlations_spec(tables)
    if spec is None:
        return Html("")
    stage = tb.last_stage(tables)
    body = [
        [row["measure_a"], row["measure_b"], number(round(row["r"], 3))]
        for row in tables["correlations"]
        if row.get("stage") == stage and finite(row.get("r")) is not None
    ]
    data = details(
        "The same as a table", table(["Measure", "with", "r"], body, words=2, caption="Correlation r")
    )
    return section(
        "together",
        "How the measures move together",
        figures.add(spec, esc(spec["title"]["subtitle"]), data, fit=False),
    )
