"""Which sources govern a measure: bars with intervals, and the matrix of all sources against all measures."""

from functools import cache

import altair as alt

from study.charts import tables as tb
from study.charts import theme
from study.charts.template import amount, as_chart, end, fill, label, rows, slot, template
from study.charts.words import finite, source_name

_STAGE_NAMES = list(theme.STAGE_WORDS.values())


def ranking(tables: tb.Tables, measure_no: int, **options) -> alt.LayerChart | None:
    """`ranking_spec` as a chart."""
    return as_chart(ranking_spec(tables, measure_no, **options))


def ranking_spec(tables: tb.Tables, measure_no: int, *, width: int = 480, most: int = 10) -> dict | None:
    """Bars of the `most` leading sources of one measure, before and after alignment beside each other.

    Hollow bar: before; filled bar: after; line: 95 % interval; diamond: linear share where ST is shown;
    ≈: tied with the one above. None when the method ranks nothing.
    """
    head = next((m for m in tb.measures(tables) if m["measure_no"] == measure_no), None)
    stage = tb.last_stage(tables)
    leading = tb.ranked(tables, measure_no, stage)[:most]
    if head is None or not leading:
        return None
    basis = tb.basis_of(leading)
    bars = _bars(tables, measure_no, [row["source"] for row in leading], basis)
    both = len({bar["stage"] for bar in bars}) > 1
    return fill(
        _ranking_template(both, basis.is_share),
        data={
            "bars": bars,
            "spans": [bar for bar in bars if bar["low"] is not None and bar["high"] is not None],
            "linear": [bar for bar in bars if bar["linear"] is not None],
        },
        slots={
            "order": [source_name(row["source"]) for row in leading],
            "top": [0.0, 1.16 * (max(bar["end"] for bar in bars) or 1.0)],
        },
        title=head["name"],
        subtitle=basis.title if both else f"{basis.title}, {theme.STAGE_WORDS[stage]}",
        description=_description(head["name"], leading, basis, stage),
        width=width,
        height=len(leading) * (25 if both else 18),
    )


def _bars(tables: tb.Tables, measure_no: int, sources: list[str], basis: tb.Basis) -> list[dict]:
    bars = []
    for stage in tb.stages(tables["ranking"]):
        for row in tb.ranked(tables, measure_no, stage):
            value = finite(row.get(basis.field))
            if row["source"] not in sources or value is None:
                continue
            low, high = (finite(row.get(name)) if name else None for name in (basis.low, basis.high))
            bars.append(
                {
                    "source": source_name(row["source"]),
                    "stage": theme.STAGE_WORDS[stage],
                    "value": max(value, 0.0),
                    "low": None if low is None else max(low, 0.0),
                    "high": high,
                    "end": max(value, high or 0.0, 0.0),
                    "linear": finite(row.get("linear_share")) if basis.field == "st" else None,
                    "text": tb.strength_text(row, basis) + (" ≈" if row.get("tied") else ""),
                }
            )
    return bars


@cache
def _ranking_template(both: bool, is_share: bool) -> dict:
    place = {
        "y": label(
            alt.Y,
            "source",
            sort=slot("order"),
            title=None,
            axis=alt.Axis(labelLimit=185, ticks=False, domain=False),
        )
    }
    if both:
        place["yOffset"] = label(alt.YOffset, "stage", sort=_STAGE_NAMES)
    axis = alt.Axis(format=".0%" if is_share else "~g", title=None, tickCount=5)
    x = amount(alt.X, "value", axis=axis, scale=alt.Scale(domain=slot("top"), nice=False))
    fills = alt.Scale(domain=_STAGE_NAMES, range=[theme.PAPER, theme.BLUE])
    return template(
        alt.Chart(rows("bars"))
        .mark_bar(stroke=theme.BLUE, strokeWidth=1, cornerRadiusEnd=1)
        .encode(
            x=x, fill=label(alt.Fill, "stage", scale=fills, legend=alt.Legend() if both else None), **place
        ),
        alt.Chart(rows("spans"))
        .mark_rule(color=theme.INK, strokeWidth=1.4)
        .encode(x=amount(alt.X, "low"), x2=end(alt.X2, "high"), **place),
        alt.Chart(rows("bars"))
        .mark_text(align="left", dx=4, fontSize=10)
        .encode(x=amount(alt.X, "end"), text=label(alt.Text, "text"), **place),
        alt.Chart(rows("linear"))
        .mark_point(
            shape="diamond",
            size=34,
            filled=True,
            fill=theme.PAPER,
            stroke=theme.INK,
            strokeWidth=1,
            opacity=1,
            clip=True,
        )
        .encode(x=amount(alt.X, "linear"), **place),
    )


def _description(name: str, leading: list[dict], basis: tb.Basis, stage: str) -> str:
    first = "; ".join(f"{source_name(row['source'])} {tb.strength_text(row, basis)}" for row in leading[:3])
    words = f"Ranking of error sources for {name}, {theme.STAGE_WORDS[stage]}, by {basis.title}."
    return f"{words} Leading: {first}."


def matrix(tables: tb.Tables, **options) -> alt.LayerChart | None:
    """`matrix_spec` as a chart."""
    return as_chart(matrix_spec(tables, **options))


def matrix_spec(tables: tb.Tables, *, stage: str | None = None, column_px: int = 64) -> dict | None:
    """All sources against all measures; the share stands in each cell as text and as a shade."""
    stage = stage or tb.last_stage(tables)
    heads = tb.measures(tables)
    order = [source for source, best in tb.greatest(tables, stage).items() if best["value"] >= 0.01]
    cells = []
    for head in heads:
        ranked = tb.ranked(tables, head["measure_no"], stage)
        values = tb.relative(ranked, tb.basis_of(ranked)) if ranked else {}
        cells += [
            {
                "measure": _numbered(head),
                "source": source_name(source),
                "value": value,
                "text": f"{value * 100:.0f}",
                "ink": theme.PAPER if value > 0.35 else theme.INK,
            }
            for source, value in values.items()
            if value >= 0.01
        ]
    if not cells:
        return None
    return fill(
        _matrix_template(),
        data={"cells": cells, "shaded": [cell for cell in cells if cell["value"] >= 0.05]},
        slots={"measures": [_numbered(head) for head in heads], "sources": [source_name(s) for s in order]},
        title="Every source against every measure",
        subtitle=f"share in per cent, {theme.STAGE_WORDS[stage]}; below 1 % left out",
        description=f"Shares of {len(order)} sources in {len(heads)} measures, {theme.STAGE_WORDS[stage]}; "
        f"largest: {source_name(order[0])}.",
        width=column_px * len(heads),
        height=20 * len(order),
    )


@cache
def _matrix_template() -> dict:
    across = alt.Axis(
        orient="top",
        labelAngle=-28,
        labelLimit=230,
        ticks=False,
        domain=False,
        labelAlign="left",
        labelOffset=-8,
    )
    place = {
        "x": label(alt.X, "measure", sort=slot("measures"), title=None, axis=across),
        "y": label(
            alt.Y,
            "source",
            sort=slot("sources"),
            title=None,
            axis=alt.Axis(labelLimit=230, ticks=False, domain=False),
        ),
    }
    shade = alt.Scale(scheme="cividis", reverse=True, domain=[0, 0.8], clamp=True)
    return template(
        alt.Chart(rows("shaded"))
        .mark_rect(stroke=theme.PAPER, strokeWidth=1)
        .encode(fill=amount(alt.Fill, "value", scale=shade, legend=None), **place),
        alt.Chart(rows("cells"))
        .mark_text(fontSize=11)
        .encode(text=label(alt.Text, "text"), color=label(alt.Color, "ink", scale=None), **place),
    )


def _numbered(head: dict) -> str:
    return f"{head['place']}. {head['name']}"
