"""How the builds scatter: distributions against limits, adjuster demand, correlations."""

import altair as alt

from study.charts import tables as tb
from study.charts import theme
from study.charts.words import finite, good_percent, limits_text, number, quantity, unit_text


def distribution(tables: tb.Tables, measure_no: int, *, width: int = 420, height: int = 150) -> alt.LayerChart | None:
    """Histogram of the builds with limits and nominal; the builds before alignment as an outline behind.

    Heights are densities, so that the two stages can be compared although their bins differ.
    """
    stage = tb.last_stage(tables)
    bins = _bins(tables, measure_no, stage)
    row = tb.stat(tables, measure_no, stage)
    if not bins or row is None:
        return None
    head = next(m for m in tb.measures(tables) if m["measure_no"] == measure_no)
    low, high = finite(row.get("limit_low")), finite(row.get("limit_high"))
    earlier = _bins(tables, measure_no, "before") if stage == "after" else []
    domain = _domain(bins, earlier, [low, high, finite(row.get("nominal"))])
    chart = alt.layer(*_earlier(earlier, domain, bins), *_bars(bins, low, high, domain, row), *_marks(row, low, high, domain))
    return theme.dress(
        chart.properties(width=width, height=height), title=head["name"],
        subtitle=_subtitle(row, stage, bool(earlier)), description=_description(head["name"], row, stage),
    )


def _bins(tables: tb.Tables, measure_no: int, stage: str) -> list[dict]:
    rows = [r for r in tables.get("histogram", []) if r.get("measure_no") == measure_no and r.get("stage") == stage]
    total = sum(r["count"] for r in rows)
    if not total:
        return []
    rows = sorted(rows, key=lambda r: r["left"])
    return [{"left": float(r["left"]), "right": float(r["right"]), "count": int(r["count"]),
             "density": r["count"] / total / max(r["right"] - r["left"], 1e-12)} for r in rows]


def _domain(bins: list[dict], earlier: list[dict], marks: list[float | None]) -> list[float]:
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


def _bars(bins: list[dict], low, high, domain: list[float], row: dict) -> list[alt.Chart]:
    x = theme.amount(alt.X, "left", scale=alt.Scale(domain=domain, nice=False, zero=False), axis=alt.Axis(
        title=unit_text(row.get("unit")) or None, grid=False, tickCount=6))
    colour = theme.label(alt.Color, "side", legend=None, scale=alt.Scale(
        domain=["inside", "outside"], range=[theme.BLUE, theme.VERMILLION]))
    bars = alt.Chart(theme.data(tb.plain(_split(bins, low, high)))).mark_bar(
        stroke=theme.PAPER, strokeWidth=0.6, clip=True,
    ).encode(x=x, x2=theme.end(alt.X2, "right"), y=theme.amount(alt.Y, "density", axis=None), color=colour)
    return [bars]


def _earlier(earlier: list[dict], domain: list[float], bins: list[dict]) -> list[alt.Chart]:
    if not earlier:
        return []
    steps = [{"x": b["left"], "d": b["density"]} for b in earlier] + [{"x": earlier[-1]["right"], "d": 0.0}]
    steps.insert(0, {"x": earlier[0]["left"], "d": 0.0})
    x = theme.amount(alt.X, "x", scale=alt.Scale(domain=domain, nice=False, zero=False))
    return [alt.Chart(theme.data(tb.plain(steps))).mark_area(
        interpolate="step-after", fill="#eceef0", stroke=theme.SOFT, strokeWidth=1, strokeDash=[3, 2], line=True, clip=True,
    ).encode(x=x, y=theme.amount(alt.Y, "d", axis=None))]


def _marks(row: dict, low, high, domain: list[float]) -> list[alt.Chart]:
    found = [("limit", low), ("limit", high), ("nominal", finite(row.get("nominal")))]
    middle = sum(domain) / 2
    rows = [{"x": value, "kind": kind, "text": f"{kind} {number(value)}", "level": 0 if kind == "limit" else 13,
             "align": "left" if value <= middle else "right", "dx": 4 if value <= middle else -4}
            for kind, value in found if value is not None]
    layers = []
    for kind, style in (("limit", {"color": theme.VERMILLION}), ("nominal", {"color": theme.INK, "strokeDash": [5, 3]})):
        part = [r for r in rows if r["kind"] == kind]
        if part:
            layers.append(alt.Chart(theme.data(part)).mark_rule(strokeWidth=2, **style).encode(x=theme.amount(alt.X, "x")))
    for align, dx in (("left", 4), ("right", -4)):
        part = [r for r in rows if r["align"] == align]
        if not part:
            continue
        layers += [alt.Chart(theme.data(part)).mark_text(
            align=align, dx=dx, baseline="top", fontSize=10, **halo,
        ).encode(x=theme.amount(alt.X, "x"), y=theme.amount(alt.Y, "level", scale=None), text=theme.label(alt.Text, "text"))
            for halo in ({"stroke": theme.PAPER, "strokeWidth": 4, "strokeJoin": "round"}, {})]
    return layers


def _subtitle(row: dict, stage: str, earlier: bool) -> str:
    parts = []
    if limits_text(row):
        parts.append(f"{good_percent(row.get('good_share'))} within {limits_text(row)}")
    parts.append(f"{theme.STAGE_WORDS[stage]}" + ("; grey outline: before" if earlier else ""))
    return "; ".join(parts)


def _description(name: str, row: dict, stage: str) -> str:
    unit = row.get("unit")
    text = (f"Distribution of {name} over {row.get('builds')} builds, {theme.STAGE_WORDS[stage]}: "
            f"nominal {quantity(row.get('nominal'), unit)}, mean {quantity(row.get('mean'), unit)}, "
            f"standard deviation {quantity(row.get('sd'), unit)}")
    limits = limits_text(row)
    return text + (f"; {good_percent(row.get('good_share'))} within the limits, {limits}." if limits else "; no limits.")


def demand(tables: tb.Tables, unit: str, *, width: int = 460) -> alt.LayerChart | None:
    """What each adjuster is asked for: median, 5 to 95 % (thick) and 0.5 to 99.5 % (thin)."""
    rows = [_demand_row(row) for row in tables.get("demand", []) if row.get("unit") == unit]
    rows = tb.plain([row for row in rows if row["q50"] is not None])
    if not rows:
        return None
    y = theme.label(alt.Y, "name", sort=[row["name"] for row in rows], title=None, axis=alt.Axis(labelLimit=200, domain=False, ticks=False))
    x = theme.amount(alt.X, "q005", title=unit_text(unit), scale=alt.Scale(zero=True))
    base = alt.Chart(theme.data(rows))
    chart = alt.layer(
        base.mark_rule(strokeWidth=1.5, color=theme.INK).encode(x=x, x2=theme.end(alt.X2, "q995"), y=y),
        base.mark_bar(height=9, color=theme.BLUE).encode(x=theme.amount(alt.X, "q05"), x2=theme.end(alt.X2, "q95"), y=y),
        base.mark_tick(thickness=3, size=18, color=theme.INK).encode(x=theme.amount(alt.X, "q50"), y=y),
    )
    return theme.dress(
        chart.properties(width=width, height=max(46, 34 * len(rows))), title="Adjuster demand",
        subtitle="tick: median; bar: 5 to 95 %; line: 0.5 to 99.5 % of the builds",
        description="Adjuster demand: " + "; ".join(
            f"{row['name']} {number(row['q005'])} to {quantity(row['q995'], unit)}" for row in rows) + ".",
    )


def _demand_row(row: dict) -> dict:
    by = str(row.get("by") or "").replace("_", " ")
    name = str(row.get("adjuster") or "").replace("_", " ")
    kept = {key: finite(row.get(key)) for key in ("q005", "q05", "q50", "q95", "q995")}
    return kept | {"name": f"{name} by {by}" if by else name}


def correlations(tables: tb.Tables, *, cell_px: int = 46) -> alt.LayerChart | None:
    """How the measures move together: r between -1 and 1, as text and blue-orange shade."""
    stage = tb.last_stage(tables)
    names = {head["measure"]: f"{head['place']}. {head['name']}" for head in tb.measures(tables)}
    rows = []
    for row in tables.get("correlations", []):
        r = finite(row.get("r"))
        a, b = row.get("measure_a"), row.get("measure_b")
        if row.get("stage") != stage or r is None or a == b:
            continue
        for first, second in ((a, b), (b, a)):
            rows.append({"a": names.get(first, str(first)), "b": names.get(second, str(second)), "r": r,
                         "text": number(round(r, 2), 2), "ink": theme.PAPER if abs(r) > 0.6 else theme.INK})
    rows = list({(row["a"], row["b"]): row for row in rows}.values())
    if not rows:
        return None
    order = [name for name in names.values() if any(row["a"] == name for row in rows)]
    base = alt.Chart(theme.data(tb.plain(rows))).encode(
        x=theme.label(alt.X, "a", sort=order, title=None, axis=alt.Axis(
            labelExpr="split(datum.label, '. ')[0]", labelAngle=0, orient="top", domain=False, ticks=False)),
        y=theme.label(alt.Y, "b", sort=order, title=None, axis=alt.Axis(labelLimit=250, domain=False, ticks=False)),
    )
    shade = theme.amount(alt.Fill, "r", legend=None, scale=alt.Scale(scheme="blueorange", domain=[-1, 1]))
    return theme.dress(
        alt.layer(
            base.mark_rect(stroke=theme.PAPER).encode(fill=shade),
            base.mark_text(fontSize=10).encode(text=theme.label(alt.Text, "text"),
                                               color=theme.label(alt.Color, "ink", scale=None)),
        ).properties(width=cell_px * len(order), height=24 * len(order)),
        title="How the measures move together", subtitle=f"correlation r over the builds, {theme.STAGE_WORDS[stage]}",
        description=f"Correlations between {len(order)} measures over the builds, {theme.STAGE_WORDS[stage]}.",
    )
