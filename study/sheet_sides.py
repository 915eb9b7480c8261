"""Left against right: how far the two sides of a car differ, and which drawing features make the difference."""

from study import charts
from study.charts import tables as tb
from study.charts.words import NBSP, aligned, finite, measure_name, quantity, source_name, unit_text
from study.sheet_page import Figures, Html, join, section, table, tag

CROSS = "cross_"
_AXLE = ("roll_centre_height_mm", "roll_centre_offset_mm", "track_mm", "ackermann_pct")
_CROSSED = ("camber_deg", "caster_deg", "kingpin_deg", "toe_deg", "scrub_radius_mm", "trail_mm", "half_track_mm")
_LEAST = 0.01


def left_right(tables: tb.Tables, study: dict, geometry: dict, figures: Figures, stage: str) -> Html:
    """The section; empty where one body carries both wheels and nothing across the car was asked."""
    whole = geometry.get("linkage") == "solid-axle"
    if study.get("sides") == "mirrored":
        return Html("") if whole else section("sides", "Left against right", tag("p", _MIRRORED))
    stats = {row["measure_no"]: row for row in tables.get("stats", []) if row.get("stage") == stage}
    shown = [head for head in tb.measures(tables) if _is_across(stats.get(head["measure_no"], head))]
    told = [] if whole else [*_both_asked(stats), *_not_asked(stats)]
    if not shown and not told:
        return Html("")
    return section(
        "sides",
        "Left against right",
        tag("p", _lead(shown, whole)),
        *(_measure(tables, head, stats.get(head["measure_no"], {}), figures, stage, whole) for head in shown),
        tag("ul", *(tag("li", line) for line in told), cls="small") if told else "",
    )


_MIRRORED = (
    "Left and right are built alike, with errors that are mirror images: a measure of the whole axle is that of a car built "
    "alike on both sides."
)


def _is_across(row: dict) -> bool:
    key = str(row.get("of") or "")
    return key.startswith(CROSS) or key in _AXLE


def _lead(shown: list[dict], whole: bool) -> str:
    if not shown:
        return "Left and right are built apart, but no measure across the car was asked for."
    built = "One body carries both wheels." if whole else "Left and right are built apart."
    text = f"{built} Cross measures are left minus right; measures of the axle take both sides together."
    if whole:
        return text
    return text + (
        " Effects are given in each part's own axes as drawn for the left; on the right y is mirrored, so that + is "
        "outboard on both sides."
    )


def _measure(tables: tb.Tables, head: dict, stat: dict, figures: Figures, stage: str, whole: bool) -> Html:
    spec = charts.distribution_spec(tables, head["measure_no"])
    words = "Left minus right" if str(head.get("of")).startswith(CROSS) else "Both sides together"
    drawn = figures.add(spec, join([tag("b", words), ", ", spec["title"]["subtitle"]]), paper_px=275) if spec else ""
    return tag(
        "article",
        tag("h3", head["name"]),
        _difference(stat) if words.startswith("Left") else "",
        tag("div", _effects(tables, head, stage, whole), drawn, cls="two"),
        cls="measure",
    )


def _difference(stat: dict) -> Html:
    unit, low, high = stat.get("unit"), finite(stat.get("q025")), finite(stat.get("q975"))
    text = f"Standard deviation of the difference {quantity(stat.get('sd'), unit)}"
    if low is not None and high is not None:
        text += f"; 95 % of the cars lie between {quantity(low, unit, sign=True)} and {quantity(high, unit, sign=True)}"
    return tag("p", text + ".", cls="small")


def _effects(tables: tb.Tables, head: dict, stage: str, whole: bool) -> Html:
    """What drives the measure: a row a source, the effects of its left and of its right feature beside each other.

    Where one body carries both wheels every feature is there once.
    """
    ranked = tb.ranked(tables, head["measure_no"], stage)
    basis = tb.basis_of(ranked)
    if basis is None:
        return tag("p", "Nothing is ranked by this method.", cls="small soft")
    values = tb.relative(ranked, basis)
    leading = [row for row in ranked if values[row["source"]] >= _LEAST]
    left_out = len(ranked) - len(leading)
    unit = unit_text(head["unit"]) or "its unit"
    return table(
        ["Source", "Share" if basis.is_share else "µ*", *(("Effect",) if whole else ("Left", "Right"))],
        [
            [source_name(row["source"]), tb.strength_text(row, basis), *(unsided(row) if whole else sided(row))]
            for row in leading
        ],
        words=4,
        caption=f"What drives it; effects in {unit} per mm or ° of the feature"
        + (f". {left_out} more stay under 1 %" if left_out else ""),
    )


def sided(row: dict) -> tuple[str, str]:
    """The effects of a row's left and right feature as text; a feature that both sides share stands in the first."""
    found: dict[str, list] = {"left ": [], "right ": [], "": []}
    for axis, value in _pairs(row):
        side = next(name for name in found if axis.startswith(name))
        found[side].append((axis.removeprefix(side), value))
    if not any(found.values()):
        return "no single slope", "–"
    whole = max((abs(value) for _, value in _pairs(row) if finite(value) is not None), default=0.0)
    texts = {side: _steps(row, pairs, whole) for side, pairs in found.items()}
    return (texts["left "], texts["right "]) if found["left "] else (f"both: {texts['']}", "the same part")


def unsided(row: dict) -> tuple[str]:
    """All effects of a row as one text."""
    pairs = _pairs(row)
    whole = max((abs(value) for _, value in pairs if finite(value) is not None), default=0.0)
    return (_steps(row, pairs, whole) or "no single slope",)


def _pairs(row: dict) -> list[tuple]:
    return [(str(axis), value) for axis, value in zip(row.get("effect_axes") or [], row.get("effect") or [], strict=False)]


def _steps(row: dict, pairs: list[tuple], whole: float) -> str:
    """`x +0.020, y −0.310`, all with the decimals that the row's largest asks for."""
    texts = aligned([*(value for _, value in pairs), whole], 3)[:-1]
    signed = (
        f"+{text}" if finite(value) and value > 0 and text.strip("0.") else text
        for (_, value), text in zip(pairs, texts, strict=True)
    )
    words = (_axis_word(row, axis) for axis, _ in pairs)
    return ", ".join(f"{word}{NBSP}{text}" if word else text for word, text in zip(words, signed, strict=True))


def _axis_word(row: dict, axis: str) -> str:
    if str(row.get("source")).startswith("alignment."):
        side = axis.split(" ")[0]
        return side if side in ("left", "right") else ""
    return axis.replace("_", " ").replace("length", "longer")


def _both_asked(stats: dict[int, dict]) -> list[str]:
    """Measures of one wheel that were asked for on both sides: which measure tells their difference."""
    found: dict[tuple, dict[str, dict]] = {}
    for row in stats.values():
        if row.get("side") in ("left", "right") and row.get("of"):
            found.setdefault((row["of"], str(row.get("position"))), {})[row["side"]] = row
    return [_pair_text(*key, pair) for key, pair in found.items() if len(pair) == 2]


def _pair_text(key: str, position: str, pair: dict[str, dict]) -> str:
    left, right = pair["left"], pair["right"]
    name, unit = measure_name({**left, "measure": key}), left.get("unit")
    where = "" if position in ("at design", "None") else f" ({position})"
    text = (
        f"{name}{where} was asked for on both sides: left {quantity(left.get('mean'), unit)}, right "
        f"{quantity(right.get('mean'), unit)}. Their difference car by car is not kept; "
    )
    return text + (f"ask for {CROSS}{key}." if key in _CROSSED else "no measure gives it: compare the two above.")


def _not_asked(stats: dict[int, dict]) -> list[str]:
    """The difference that may be asked for, where only one side of a measure was."""
    asked = {row.get("of") for row in stats.values()}
    missing = [key for key in _CROSSED if key in asked and f"{CROSS}{key}" not in asked]
    if not missing or any(str(key).startswith(CROSS) for key in asked):
        return []
    return [f"For the difference between the sides ask for {', '.join(CROSS + key for key in missing)}."]
