"""What belongs to all measures at once: adjuster demand and correlations."""

from functools import cache

import altair as alt

from study.charts import tables as tb
from study.charts import theme
from study.charts.template import amount, as_chart, end, fill, label, rows, slot, template
from study.charts.words import finite, number, quantity, unit_text

_QUANTILES = ("q005", "q05", "q50", "q95", "q995")


def demand(tables: tb.Tables, unit: str, **options) -> alt.LayerChart | None:
    """`demand_spec` as a chart."""
    return as_chart(demand_spec(tables, unit, **options))


def demand_spec(tables: tb.Tables, unit: str, *, width: int = 460) -> dict | None:
    """What each adjuster that is counted in `unit` is asked for: median, 5 to 95 % (thick), 0.5 to 99.5 %
    (thin)."""
    asked = [_demand_row(row) for row in tables.get("demand", []) if row.get("unit") == unit]
    asked = [row for row in asked if row["q50"] is not None]
    if not asked:
        return None
    return fill(
        _demand_template(),
        data={"asked": asked},
        slots={"order": [row["name"] for row in asked]},
        title=f"Adjuster demand, {unit_text(unit)}",
        subtitle="tick: median; bar: 5 to 95 %; line: 0.5 to 99.5 % of the builds",
        description="Adjuster demand: "
        + "; ".join(f"{row['name']} {number(row['q005'])} to {quantity(row['q995'], unit)}" for row in asked)
        + ".",
        width=width,
        height=max(46, 34 * len(asked)),
    )


def _demand_row(row: dict) -> dict:
    by, name = (str(row.get(key) or "").replace("_", " ") for key in ("by", "adjuster"))
    return {key: finite(row.get(key)) for key in _QUANTILES} | {"name": f"{name} by {by}" if by else name}


@cache
def _demand_template() -> dict:
    y = label(
        alt.Y,
        "name",
        sort=slot("order"),
        title=None,
        axis=alt.Axis(labelLimit=200, domain=False, ticks=False),
    )
    base = alt.Chart(rows("asked"))
    return template(
        base.mark_rule(strokeWidth=1.5, color=theme.INK).encode(
            x=amount(alt.X, "q005", title=None, axis=alt.Axis(tickCount=8), scale=alt.Scale(zero=True)),
            x2=end(alt.X2, "q995"),
            y=y,
        ),
        base.mark_bar(height=9, color=theme.BLUE).encode(
            x=amount(alt.X, "q05", title=None), x2=end(alt.X2, "q95"), y=y
        ),
        base.mark_tick(thickness=3, size=18, color=theme.INK).encode(x=amount(alt.X, "q50", title=None), y=y),
    )


def correlations(tables: tb.Tables, **options) -> alt.LayerChart | None:
    """`correlations_spec` as a chart."""
    return as_chart(correlations_spec(tables, **options))


def correlations_spec(tables: tb.Tables, *, cell_px: int = 46) -> dict | None:
    """How the measures move together: r between -1 and 1, as text and as a blue to orange shade."""
    stage = tb.last_stage(tables)
    names = {head["measure"]: f"{head['place']}. {head['name']}" for head in tb.measures(tables)}
    cells: dict[tuple, dict] = {}
    for row in tables.get("correlations", []):
        r, a, b = finite(row.get("r")), row.get("measure_a"), row.get("measure_b")
        if row.get("stage") != stage or r is None or a == b or a not in names or b not in names:
            continue
        for first, second in ((a, b), (b, a)):
            cells[first, second] = {
                "a": names[first],
                "b": names[second],
                "r": r,
                "text": number(round(r, 2), 2),
                "ink": theme.PAPER if abs(r) > 0.6 else theme.INK,
            }
    order = [name for key, name in names.items() if any(first == key for first, _ in cells)]
    if not cells:
        return None
    return fill(
        _correlations_template(),
        data={"cells": list(cells.values())},
        slots={"order": order},
        title="How the measures move together",
        subtitle=f"correlation r over the builds, {theme.STAGE_WORDS[stage]}",
        description=f"Correlations of {len(order)} measures over the builds, {theme.STAGE_WORDS[stage]}.",
        width=cell_px * len(order),
        height=24 * len(order),
    )


@cache
def _correlations_template() -> dict:
    across = alt.Axis(
        labelExpr="split(datum.label, '. ')[0]", labelAngle=0, orient="top", domain=False, ticks=False
    )
    place = {
        "x": label(alt.X, "a", sort=slot("order"), title=None, axis=across),
        "y": label(
            alt.Y,
            "b",
            sort=slot("order"),
            title=None,
            axis=alt.Axis(labelLimit=250, domain=False, ticks=False),
        ),
    }
    shade = alt.Scale(scheme="blueorange", domain=[-1, 1])
    return template(
        alt.Chart(rows("cells"))
        .mark_rect(stroke=theme.PAPER)
        .encode(fill=amount(alt.Fill, "r", legend=None, scale=shade), **place),
        alt.Chart(rows("cells"))
        .mark_text(fontSize=10)
        .encode(text=label(alt.Text, "text"), color=label(alt.Color, "ink", scale=None), **place),
    )
