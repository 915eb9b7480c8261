"""A measure over two inputs at once: cells with their value, in colours that also read in grey."""

from collections.abc import Sequence
from functools import cache

import altair as alt

from study.charts import theme
from study.charts.curves import AXES
from study.charts.template import amount, as_chart, fill, label, rows, slot, template
from study.charts.words import MINUS, aligned, finite, given, key_name, quantity, unit_text

_CELL_PX = (46, 24)
_MOST_PX = (760, 560)


def measure_map(values: Sequence[Sequence[float | None]], **options) -> alt.LayerChart | None:
    """`map_spec` as a chart."""
    return as_chart(map_spec(values, **options))


def map_spec(
    values: Sequence[Sequence[float | None]],
    *,
    over: str,
    against: str,
    over_at: Sequence[float],
    against_at: Sequence[float],
    key: str,
    unit: str,
    note: str = "",
) -> dict | None:
    """The measure `key` at each `over_at` (upwards) and `against_at` (to the right), values[i][j] at their i and j.

    Values of both signs shade from blue (negative) to orange (positive) about zero, with their sign written; others by
    brightness alone. Where cells get too small for it only every second, third, … one carries its value.
    None when nothing is defined.
    """
    cells = _cells(values, over_at, against_at)
    known = [cell for cell in cells if cell["value"] is not None]
    if not known:
        return None
    domain, signed = _domain([cell["value"] for cell in known])
    _write_in(cells, domain, signed)
    (across, unit_x, _), (up, unit_y, _) = AXES[against], AXES[over]
    size = _size(cells, (len(against_at), len(over_at)))
    along = unit_text(unit)
    return fill(
        _template(signed),
        data={"cells": known, "texts": _labelled(cells, size, (len(against_at), len(over_at)))},
        slots={
            "across": _texts(sorted(against_at)),
            "up": _texts(sorted(over_at, reverse=True)),
            "domain": domain,
            "x": [f"{across}, {unit_x}"],
            "y": [f"{up}, {unit_y}"],
        },
        title=f"{key_name(key).capitalize()} over {up} and {across}" + (f", {along}" if along else ""),
        subtitle=note,
        description=_description(known, key, up, across, unit, (unit_y, unit_x)),
        width=size[0],
        height=size[1],
    )


def _cells(values, over_at, against_at) -> list[dict]:
    return [
        {"row": i, "column": j, "x": x, "y": y, "value": finite(values[i][j])}
        for i, y in enumerate(_texts(over_at))
        for j, x in enumerate(_texts(against_at))
    ]


def _texts(at: Sequence[float]) -> list[str]:
    """Positions as axis labels: short where that keeps them apart."""
    short = [f"{x:.3g}".replace("-", MINUS) for x in at]
    return short if len(set(short)) == len(at) else [given(x) for x in at]


def _size(cells: list[dict], count: tuple[int, int]) -> list[float]:
    """Width and height: room for every value, as far as the frame allows."""
    need = (max(_CELL_PX[0], _text_px(cells)), _CELL_PX[1])
    return [min(most, px * n) for most, px, n in zip(_MOST_PX, need, count, strict=True)]


def _text_px(cells: list[dict]) -> int:
    return 12 + 6 * max(len(cell["text"]) for cell in cells)


def _domain(known: list[float]) -> tuple[list[float], bool]:
    low, high = min(known), max(known)
    if low < 0 < high:
        most = max(-low, high)
        return [-most, most], True
    return [low, high if high > low else low + 1.0], False


def _write_in(cells: list[dict], domain: list[float], signed: bool) -> None:
    """Text and ink of every cell: light on dark shades."""
    texts = aligned((cell["value"] for cell in cells), 3)
    for cell, text in zip(cells, texts, strict=True):
        value = cell["value"]
        share = 0.0 if value is None else (value - domain[0]) / (domain[1] - domain[0])
        dark = share < 0.2 or share > 0.92 if signed else share < 0.5
        cell["text"] = f"+{text}" if signed and value and value > 0 and text.strip("0.") else text
        cell["ink"] = theme.PAPER if dark and value is not None else theme.INK


def _labelled(cells: list[dict], size: list[float], count: tuple[int, int]) -> list[dict]:
    """The cells that carry their value: all of them, or every n-th across and up where they are small."""
    steps = [max(1, -(-need * n // px)) for need, n, px in zip((_text_px(cells), 15), count, size, strict=True)]
    return [cell for cell in cells if cell["column"] % steps[0] == 0 and cell["row"] % steps[1] == 0]


@cache
def _template(signed: bool) -> dict:
    apart = {"labelOverlap": "parity", "labelSeparation": 6}
    place = {
        "x": label(alt.X, "x", sort=slot("across"), title=slot("x"), axis=alt.Axis(labelAngle=0, **apart)),
        "y": label(alt.Y, "y", sort=slot("up"), title=slot("y"), axis=alt.Axis(**apart)),
    }
    shade = alt.Scale(scheme="blueorange" if signed else "cividis", domain=slot("domain"), nice=False)
    legend = alt.Legend(orient="right", gradientLength=130, format="~g", titleAnchor="start")
    return template(
        alt.Chart(rows("cells")).mark_rect().encode(fill=amount(alt.Fill, "value", scale=shade, legend=legend), **place),
        alt.Chart(rows("texts"))
        .mark_text(fontSize=10.5)
        .encode(text=label(alt.Text, "text"), color=label(alt.Color, "ink", scale=None), **place),
    )


def _description(known: list[dict], key: str, up: str, across: str, unit: str, units: tuple[str, str]) -> str:
    low, high = (pick(known, key=lambda cell: cell["value"]) for pick in (min, max))

    def place(cell: dict) -> str:
        return (
            f"{quantity(cell['value'], unit)} at {up} {cell['y']}{_gap(units[0])}, {across} {cell['x']}{_gap(units[1])}"
        )

    return f"{key_name(key)} over {up} and {across}: least {place(low)}; greatest {place(high)}."


def _gap(unit: str) -> str:
    return unit if unit == "°" else f" {unit}"
