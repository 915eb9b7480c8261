"""How the builds of one measure scatter: a histogram against limits and nominal."""

from functools import cache

import altair as alt

from study.charts import tables as tb
from study.charts import theme
from study.charts.template import amount, as_chart, end, fill, label, rows, slot, template
from study.charts.words import finite, given, good_percent, limits_text, number, quantity, unit_text


def distribution(tables: tb.Tables, measure_no: int, **options) -> alt.LayerChart | None:
    """`distribution_spec` as a chart."""
    return as_chart(distribution_spec(tables, measure_no, **options))


def distribution_spec(
    tables: tb.Tables, measure_no: int, *, width: int = 420, height: int = 150
) -> dict | None:
    """Histogram of the builds with limits and nominal; the builds before alignment as a grey outline behind.

    Heights are densities, so that the two stages can be compared although their bins differ.
    """
    stage = tb.last_stage(tables)
    bins, row = _bins(tables, measure_no, stage), tb.stat(tables, measure_no, stage)
    if not bins or row is None:
        return None
    head = next(m for m in tb.measures(tables) if m["measure_no"] == measure_no)
    limits = (finite(row.get("limit_low")), finite(row.get("limit_high")))
    earlier = _bins(tables, measure_no, "before") if stage == "after" else []
    domain = _domain(bins, earlier, [*limits, finite(row.get("nominal"))])
    return fill(
        _template(),
        data={"bars": _split(bins, *limits), "earlier": _outline(earlier), **_marks(row, limits, domain)},
        slots={"domain": domain, "top": [0.0, 1.25 * max(item["density"] for item in [*bins, *earlier])]},
        title=head["name"],
        subtitle=_subtitle(row, stage, bool(earlier)),
        description=_description(head["name"], row, stage),
        width=width,
        height=height,
    )


def _bins(tables: tb.Tables, measure_no: int, stage: str) -> list[dict]:
    found = [
        r
        for r in tables.get("histogram", [])
        if r.get("measure_no") == measure_no and r.get("stage") == stage
    ]
    total = sum(r["count"] for r in found)
    if not total:
        return []
    return [
        {
            "left": float(r["left"]),
            "right": float(r["right"]),
            "count": int(r["count"]),
            "base": 0.0,
            "density": r["count"] / total / max(r["right"] - r["left"], 1e-12),
        }
        for r in sorted(found, key=lambda r: r["left"])
    ]


def _domain(bins: list[dict], earlier: list[dict], marks: list[float | None]) -> list[float]:
    """Wide enough for the builds, limits and nominal; for the earlier stage unless it is far wider."""
    known = [bins[0]["left"], bins[-1]["right"], *(m for m in marks if m is not None)]
    low, high = min(known), max(known)
    if earlier:
        wider_low, wider_high = min(low, earlier[0]["left"]), max(high, earlier[-1]["right"])
        if wider_high - wider_low <= 2.5 * (high - low):
            low, high = wider_low, wider_high
    room = 0.06 * ((high - low) or 1.0)
    return [low - room, high + room]


def _split(bins: list[dict], low: float | None, high: float | None) -> list[dict]:
    """Bins cut at the limits, so that a bar is either inside or outside."""
    pieces = []
    for item in bins:
        cuts = [c for c in (low, high) if c is not None and item["left"] < c < item["right"]]
        edges = [item["left"], *cuts, item["right"]]
        for left, right in zip(edges, edges[1:], strict=False):
            middle = (left + right) / 2
            outside = (low is not None and middle < low) or (high is not None and middle > high)
            pieces.append(item | {"left": left, "right": right, "side": "outside" if outside else "inside"})
    return pieces


def _outline(bins: list[dict]) -> list[dict]:
    if not bins:
        return []
    return [
        {"x": bins[0]["left"], "d": 0.0},
        *({"x": b["left"], "d": b["density"]} for b in bins),
        {"x": bins[-1]["right"], "d": 0.0},
    ]


def _marks(row: dict, limits: tuple, domain: list[float]) -> dict[str, list[dict]]:
    """Rows of the rules (limits, nominal) and of their words, which lean towards the middle."""
    marks = {"limits": [], "nominal": [], "words_left": [], "words_right": []}
    for kind, value in (
        ("limits", limits[0]),
        ("limits", limits[1]),
        ("nominal", finite(row.get("nominal"))),
    ):
        if value is None:
            continue
        marks[kind].append({"x": value})
        side = "left" if value <= sum(domain) / 2 else "right"
        marks[f"words_{side}"].append(
            {
                "x": value,
                "text": f"limit {given(value)}" if kind == "limits" else f"nominal {number(value)}",
                "level": 0 if kind == "limits" else 13,
            }
        )
    return marks


@cache
def _template() -> dict:
    scale = alt.Scale(domain=slot("domain"), nice=False, zero=False)
    heights = alt.Scale(domain=slot("top"), nice=False)
    x = amount(alt.X, "left", scale=scale, axis=alt.Axis(title=None, grid=False, tickCount=6))
    sides = alt.Scale(domain=["inside", "outside"], range=[theme.BLUE, "#f6cdb0"])
    edges = alt.Scale(domain=["inside", "outside"], range=[theme.PAPER, theme.VERMILLION])
    layers = [
        alt.Chart(rows("earlier"))
        .mark_area(
            interpolate="step-after",
            fill="#eceef0",
            stroke=theme.SOFT,
            strokeWidth=1,
            strokeDash=[3, 2],
            clip=True,
        )
        .encode(x=amount(alt.X, "x", scale=scale), y=amount(alt.Y, "d", axis=None, scale=heights)),
        alt.Chart(rows("bars"))
        .mark_rect(strokeWidth=0.7, clip=True)
        .encode(
            x=x,
            x2=end(alt.X2, "right"),
            y=amount(alt.Y, "density", axis=None, scale=heights),
            y2=end(alt.Y2, "base"),
            fill=label(alt.Fill, "side", legend=None, scale=sides),
            stroke=label(alt.Stroke, "side", legend=None, scale=edges),
        ),
        alt.Chart(rows("limits"))
        .mark_rule(strokeWidth=2, color=theme.VERMILLION)
        .encode(x=amount(alt.X, "x")),
        alt.Chart(rows("nominal"))
        .mark_rule(strokeWidth=2, color=theme.INK, strokeDash=[5, 3])
        .encode(x=amount(alt.X, "x")),
    ]
    for side, dx in (("left", 4), ("right", -4)):
        layers += [
            alt.Chart(rows(f"words_{side}"))
            .mark_text(align=side, dx=dx, baseline="top", fontSize=10, **style)
            .encode(x=amount(alt.X, "x"), y=amount(alt.Y, "level", scale=None), text=label(alt.Text, "text"))
            for style in (theme.HALO, {})
        ]
    return template(*layers)


def _subtitle(row: dict, stage: str, earlier: bool) -> str:
    unit = unit_text(row.get("unit"))
    parts = [f"in {unit}"] if unit else []
    if limits_text(row):
        parts.append(f"{good_percent(row.get('good_share'))} within limits")
    return ", ".join([*parts, theme.STAGE_WORDS[stage]]) + ("; grey: before" if earlier else "")


def _description(name: str, row: dict, stage: str) -> str:
    unit = row.get("unit")
    text = (
        f"Distribution of {name} over {row.get('builds')} builds, {theme.STAGE_WORDS[stage]}: "
        f"nominal {quantity(row.get('nominal'), unit)}, mean {quantity(row.get('mean'), unit)}, "
        f"standard deviation {quantity(row.get('sd'), unit)}"
    )
    limits = limits_text(row)
    return text + (
        f"; {good_percent(row.get('good_share'))} within the limits, {limits}." if limits else "; no limits."
    )
