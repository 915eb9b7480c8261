"""Which sources govern a measure: bars with intervals, and the matrix of all sources against all measures."""

import altair as alt

from study.charts import tables as tb
from study.charts import theme
from study.charts.words import finite, source_name


def ranking(tables: tb.Tables, measure_no: int, *, width: int = 480, most: int = 10) -> alt.LayerChart | None:
    """Bars of the `most` leading sources of one measure, before and after alignment beside each other.

    Hollow bar: before; filled bar: after; line: 95 % interval; diamond: linear share where ST is shown; ≈: tied
    with the one above. Returns None when the method ranks nothing.
    """
    head = next((m for m in tb.measures(tables) if m["measure_no"] == measure_no), None)
    stage = tb.last_stage(tables)
    leading = tb.ranked(tables, measure_no, stage)[:most]
    if head is None or not leading:
        return None
    basis = tb.basis_of(leading)
    rows = _rows(tables, measure_no, [row["source"] for row in leading], basis)
    chart = _layers(rows, [source_name(row["source"]) for row in leading], basis, head["unit"])
    return theme.dress(
        chart.properties(width=width, height=len(leading) * (25 if _both(rows) else 18)),
        title=head["name"],
        subtitle=f"{basis.title}, {theme.STAGE_WORDS[stage]}" if not _both(rows) else basis.title,
        description=_description(head["name"], leading, basis, stage),
    )


def _both(rows: list[dict]) -> bool:
    return len({row["stage"] for row in rows}) > 1


def _rows(tables: tb.Tables, measure_no: int, sources: list[str], basis: tb.Basis) -> list[dict]:
    rows = []
    for stage in tb.stages(tables["ranking"]):
        for row in tb.ranked(tables, measure_no, stage):
            value = finite(row.get(basis.field))
            if row["source"] not in sources or value is None:
                continue
            low, high = (finite(row.get(name)) if name else None for name in (basis.low, basis.high))
            linear = finite(row.get("linear_share")) if basis.field == "st" else None
            text = tb.strength_text(row, basis) + (" ≈" if row.get("tied") else "")
            rows.append({
                "source": source_name(row["source"]), "stage": theme.STAGE_WORDS[stage], "value": max(value, 0.0),
                "low": None if low is None else max(low, 0.0), "high": high, "linear": linear, "text": text,
                "end": max(value, high or 0.0, 0.0),
            })
    return tb.plain(rows)


def _layers(rows: list[dict], order: list[str], basis: tb.Basis, unit: str | None) -> alt.LayerChart:
    both = _both(rows)
    top = max(row["end"] for row in rows) or 1.0
    scale = alt.Scale(domain=[0, top * 1.16], nice=False)
    axis = alt.Axis(format=".0%" if basis.is_share else "~g", title=None if basis.is_share else unit, tickCount=5)
    place = {"y": theme.label(alt.Y, "source", sort=order, title=None, axis=alt.Axis(labelLimit=185, ticks=False, domain=False))}
    if both:
        place["yOffset"] = theme.label(alt.YOffset, "stage", sort=list(theme.STAGE_WORDS.values()))
    base = alt.Chart(theme.data(rows))
    words = [theme.STAGE_WORDS[stage] for stage in tb.STAGES]
    layers = [
        base.mark_bar(stroke=theme.BLUE, strokeWidth=1, cornerRadiusEnd=1).encode(
            x=theme.amount(alt.X, "value", scale=scale, axis=axis),
            fill=theme.label(alt.Fill, "stage", scale=alt.Scale(domain=words, range=[theme.PAPER, theme.BLUE]),
                          legend=alt.Legend() if both else None),
            **place,
        ),
        base.mark_text(align="left", dx=4, fontSize=10).encode(x=theme.amount(alt.X, "end"), text=theme.label(alt.Text, "text"), **place),
    ]
    spans = [row for row in rows if row["low"] is not None and row["high"] is not None]
    if spans:
        layers.insert(1, alt.Chart(theme.data(spans)).mark_rule(color=theme.INK, strokeWidth=1.4).encode(
            x=theme.amount(alt.X, "low"), x2=theme.end(alt.X2, "high"), **place))
    linear = [row for row in rows if row["linear"] is not None]
    if linear:
        layers.append(alt.Chart(theme.data(linear)).mark_point(
            shape="diamond", size=34, filled=True, fill=theme.PAPER, stroke=theme.INK, strokeWidth=1, opacity=1, clip=True,
        ).encode(x=theme.amount(alt.X, "linear"), **place))
    return alt.layer(*layers)


def _description(name: str, leading: list[dict], basis: tb.Basis, stage: str) -> str:
    first = "; ".join(f"{source_name(row['source'])} {tb.strength_text(row, basis)}" for row in leading[:3])
    return f"Ranking of error sources for {name}, {theme.STAGE_WORDS[stage]}, by {basis.title}. Leading: {first}."


def matrix(tables: tb.Tables, *, stage: str | None = None, column_px: int = 64) -> alt.LayerChart | None:
    """All sources against all measures; the share stands in each cell as text and as a shade."""
    stage = stage or tb.last_stage(tables)
    heads, order = tb.measures(tables), list(tb.greatest(tables, stage))
    rows = []
    for head in heads:
        ranked = tb.ranked(tables, head["measure_no"], stage)
        basis = tb.basis_of(ranked)
        for row, value in zip(ranked, tb.relative(ranked, basis).values() if basis else (), strict=True):
            rows.append({"measure": _short(head), "source": source_name(row["source"]), "value": value,
                         "text": _cell(value), "ink": theme.INK if value > 0.5 else theme.PAPER})
    if not rows:
        return None
    base = alt.Chart(theme.data(tb.plain(rows))).encode(
        x=theme.label(alt.X, "measure", sort=[_short(head) for head in heads], title=None, axis=alt.Axis(
            orient="top", labelAngle=-28, labelLimit=230, ticks=False, domain=False, labelAlign="left", labelOffset=-8)),
        y=theme.label(alt.Y, "source", sort=[source_name(s) for s in order], title=None,
                axis=alt.Axis(labelLimit=230, ticks=False, domain=False)),
    )
    shade = theme.amount(alt.Fill, "value", scale=alt.Scale(scheme="cividis", domain=[0, 0.8], clamp=True), legend=None)
    chart = alt.layer(
        base.mark_rect(stroke=theme.PAPER, strokeWidth=1).encode(fill=shade),
        base.mark_text(fontSize=11).encode(text=theme.label(alt.Text, "text"),
                                           color=theme.label(alt.Color, "ink", scale=None)),
    )
    return theme.dress(
        chart.properties(width=column_px * len(heads), height=20 * len(order)),
        title="Every source against every measure",
        subtitle=f"share in per cent, {theme.STAGE_WORDS[stage]}; empty: below 1 %",
        description=f"Shares of {len(order)} error sources in {len(heads)} measures, {theme.STAGE_WORDS[stage]}; "
                    f"largest: {source_name(order[0])}.",
    )


def _short(head: dict) -> str:
    return f"{head['place']}. {head['name']}"


def _cell(value: float) -> str:
    return f"{value * 100:.0f}" if value >= 0.01 else ""
