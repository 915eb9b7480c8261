"""Cost of the processes against the share of good builds that they give."""

from collections.abc import Mapping, Sequence
from functools import cache

import altair as alt

from study.charts import theme
from study.charts.template import amount, end, fill, label, rows, slot, template

KINDS = {"cheapest": (theme.BLUE, "circle"), "as drawn": (theme.VERMILLION, "square"), "chosen": (theme.GREEN, "diamond")}


def cost_spec(found: Sequence[Mapping], *, wanted: float, cars: int) -> dict:
    """found: rows with kind (of KINDS), cost, share, low, high. A mark each with its 95 % interval, the wanted share a rule."""
    marks = [dict(row, text=f"{row['cost']:,.0f}: {100 * row['share']:.1f} %") for row in found]
    kinds = [kind for kind in KINDS if any(row["kind"] == kind for row in marks)]
    told = "; ".join(f"{row['kind']} {row['text']}" for row in marks)
    return fill(
        _template(),
        data={"marks": marks, "wanted": [{"share": wanted}]},
        slots={"kinds": kinds, "colours": [KINDS[k][0] for k in kinds], "shapes": [KINDS[k][1] for k in kinds]},
        title="Cost against good share",
        subtitle=f"all {cars} cars, in the shop's own unit; line: 95 % interval; dashed: the share wanted",
        description=f"Cost of the processes for {cars} cars against the share of good builds. {told}.",
        width=520,
        height=320,
    )


@cache
def _template() -> dict:
    x = amount(alt.X, "cost", title="cost for all cars", scale=alt.Scale(zero=False, nice=True))
    y = amount(alt.Y, "share", title="good share", axis=alt.Axis(format=".0%"), scale=alt.Scale(zero=False))
    shapes = alt.Scale(domain=slot("kinds"), range=slot("shapes"))
    colours = alt.Scale(domain=slot("kinds"), range=slot("colours"))
    marks = alt.Chart(rows("marks"))
    return template(
        alt.Chart(rows("wanted")).mark_rule(strokeDash=[5, 4], color=theme.SOFT).encode(y=y),
        marks.mark_line(color=theme.FAINT, strokeWidth=2).encode(x=x, y=y, order=amount(alt.Order, "cost")),
        marks.mark_rule(color=theme.SOFT).encode(x=x, y=amount(alt.Y, "low"), y2=end(alt.Y2, "high")),
        marks.mark_point(filled=True, size=110, opacity=1).encode(
            x=x, y=y, shape=label(alt.Shape, "kind", scale=shapes, title=None), color=label(alt.Color, "kind", scale=colours, title=None)
        ),
        marks.mark_text(align="left", dx=9, dy=10, fontSize=11, color=theme.INK).encode(x=x, y=y, text=label(alt.Text, "text")),
    )
