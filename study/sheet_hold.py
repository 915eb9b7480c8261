"""What to hold: for each measure the three drawing features that matter, and what hardly matters."""

from collections import Counter
from dataclasses import dataclass

from study.charts import tables as tb
from study.charts import theme
from study.charts.words import NBSP, effect_phrase, finite, good_percent, limits_text, source_name
from study.sheet_page import Html, esc, join, section, tag
from study.sheet_summary import METHODS, verdict_tag

_MINOR = 0.03
_LEAST = 0.01


@dataclass(frozen=True, slots=True)
class Leading:
    """Of one measure: up to three features above 1 %, the workshop's settings above 3 %, and their strengths.

    A feature counts as tied only where the one shown before it is the one ranked just above it.
    """

    head: dict
    basis: tb.Basis | None
    features: tuple[dict, ...]
    settings: tuple[dict, ...]
    values: dict[str, float]
    tied: frozenset[str]


def leading_of(tables: tb.Tables, head: dict, stage: str) -> Leading:
    ranked = tb.ranked(tables, head["measure_no"], stage)
    basis = tb.basis_of(ranked)
    values = tb.relative(ranked, basis) if basis else {}
    features = [row for row in ranked if not _is_setting(row) and values[row["source"]] >= _LEAST][:3]
    settings = [row for row in ranked if _is_setting(row) and values[row["source"]] >= _MINOR]
    above = {row["source"]: before["source"] for before, row in zip(ranked, ranked[1:], strict=False)}
    tied = {row["source"] for before, row in zip(features, features[1:], strict=False)
            if row.get("tied") and above[row["source"]] == before["source"]}  # fmt: skip
    return Leading(head, basis, tuple(features), tuple(settings), values, frozenset(tied))


def _is_setting(row: dict) -> bool:
    return str(row["source"]).startswith("alignment.")


def hold_these(tables: tb.Tables, study: dict, stage: str) -> Html:
    """For each measure its three leading features with share, signed effect, ties; then what hardly matters."""
    found = [leading_of(tables, head, stage) for head in tb.measures(tables)]
    if not any(item.basis for item in found):
        return section("hold", "Hold these", tag("p", _no_ranking(study)), _goods(tables, study, stage))
    return section(
        "hold",
        "Hold these",
        _withheld(study),
        tag("p", _lead(found, stage)),
        _table(tables, found, study, stage),
        tag("p", _how_to_read(found), cls="small soft"),
        _hardly(tables, stage),
        _openers(tables, study, stage),
    )


def _no_ranking(study: dict) -> str:
    if study.get("withheld"):
        return (
            "No ranking: too many builds could not be assembled, so the shares are withheld. "
            "The notes name what makes a build fail."
        )
    method = METHODS.get(study.get("method"), study.get("method"))
    return f"This method ({method}) ranks nothing; it says how the builds scatter and how many are good."


def _goods(tables: tb.Tables, study: dict, stage: str) -> Html:
    rows = [(head, tb.stat(tables, head["measure_no"], stage)) for head in tb.measures(tables)]
    return tag(
        "ul",
        *(
            tag("li", tag("b", head["name"]), ": ", _good(row, study))
            for head, row in rows
            if row is not None and finite(row.get("good_share")) is not None
        ),
    )


def _withheld(study: dict) -> Html:
    if not study.get("withheld"):
        return Html("")
    return tag(
        "p",
        tag("b", "Shares withheld. "),
        "Too many builds could not be assembled; what is ranked below is which sources make a build fail.",
        cls="banner",
    )


def _lead(found: list[Leading], stage: str) -> Html:
    counts = Counter(row["source"] for item in found for row in item.features)
    often = [(source, count) for source, count in counts.most_common(3) if count > 1]
    start = f"{theme.STAGE_WORDS[stage].capitalize()}, these drawing features decide."
    if len(found) < 2 or not often:
        return esc(start)
    named = [join([tag("b", source_name(source)), f" ({count})"]) for source, count in often]
    middle = f"{start} Most often among the leading three of {len(found)} measures: "
    return join([middle, join(named, ", "), "."])


def _table(tables: tb.Tables, found: list[Leading], study: dict, stage: str) -> Html:
    columns = Html('<colgroup><col class="m"><col class="g"><col><col><col></colgroup>')
    heads = ("Measure", "Good builds", "First", "Second", "Third")
    top = tag("tr", *(tag("th", text, scope="col") for text in heads))
    body = [_row(item, tb.stat(tables, item.head["measure_no"], stage) or {}, study) for item in found]
    caption = f"The three leading drawing features of each measure, {theme.STAGE_WORDS[stage]}"
    return tag("table", tag("caption", caption), columns, tag("thead", top), tag("tbody", *body), cls="hold")


def _row(item: Leading, stat: dict, study: dict) -> Html:
    limits = limits_text(stat)
    cells = [_cell(item, row) for row in item.features]
    if len(cells) < 3:
        cells.append(tag("td", f"no {'other' if cells else 'feature'} above 1{NBSP}%", cls="soft small"))
    return tag(
        "tr",
        tag("th", item.head["name"], tag("span", limits, cls="limits") if limits else "", scope="row"),
        tag("td", _good(stat, study), _settings(item)),
        *cells,
        *(tag("td") for _ in range(3 - len(cells))),
    )


def _settings(item: Leading) -> Html:
    """What the workshop's settings take of the measure; no drawing tolerance changes that."""
    if not item.settings:
        return Html("")
    named = [f"{str(row['source']).partition('.')[2].replace('_', ' ')} {tb.strength_text(row, item.basis)}"
             for row in item.settings]  # fmt: skip
    return tag("span", "setting: ", ", ".join(named), cls="limits")


def _cell(item: Leading, row: dict) -> Html:
    width = round(96 * min(item.values[row["source"]], 1.0))
    effect, tie = effect_phrase(row), "≈ tied" if row["source"] in item.tied else ""
    bar = Html(f'<i style="width:{width}px"></i>')
    return tag(
        "td",
        tag("span", source_name(row["source"]), cls="src"),
        tag("span", bar, tb.strength_text(row, item.basis), verdict_tag(row.get("verdict")), cls="bar"),
        tag("span", effect, " " if effect and tie else "", tag("span", tie, cls="tie"), cls="fx")
        if effect or tie
        else "",
    )


def _good(row: dict, study: dict) -> Html:
    share, wanted = finite(row.get("good_share")), finite(study.get("wanted_share"))
    if share is None:
        return tag("span", "no limits", cls="soft")
    low, high = row.get("good_low"), row.get("good_high")
    between = f"{good_percent(low)} to {good_percent(high)}" if finite(low) is not None else ""
    missed = wanted is not None and share < wanted
    return join(
        [
            tag("b", good_percent(share), cls="miss" if missed else None),
            tag("span", between, cls="limits") if between else "",
            tag("span", f"▼ wanted {wanted * 100:g}{NBSP}%", cls="limits miss") if missed else "",
        ]
    )


def _how_to_read(found: list[Leading]) -> str:
    rows = [row for item in found for row in item.features]
    is_share = all(item.basis.is_share for item in found if item.basis)
    share = "Share of the measure's variance over the builds" if is_share else "Mean absolute effect"
    text = f"{share}. The arrow says what a step of the feature along its strongest axis does to the measure."
    if not all(effect_phrase(row) for row in rows):
        text += " A range, maximum or minimum over a sweep has no signed effect."
    if any(item.tied for item in found):
        text += " ≈ tied: its order with the one before it is not certain."
    if any(item.settings for item in found):
        text += " Setting: what the bands left by the workshop take; no drawing tolerance changes that."
    return text


def _hardly(tables: tb.Tables, stage: str) -> Html:
    best = {s: item for s, item in tb.greatest(tables, stage).items() if not s.startswith("alignment.")}
    minor = [source for source, item in best.items() if item["value"] < _MINOR]
    if not minor:
        return Html("")
    count = f"{len(minor)} of {len(best)} drawing features stay under 3{NBSP}% in every measure: "
    return tag("p", tag("b", count), _names(minor), ".")


def _openers(tables: tb.Tables, study: dict, stage: str) -> Html:
    """What may be loosened: a set that passed together, or else what passes by itself, and said to be that."""
    together = study.get("open_together")
    if together:
        share = finite(study.get("open_together_good_share"))
        tail = "" if share is None else f" Loosened together, {good_percent(share)} of the builds are good."
        return tag("p", tag("b", "May be opened, all together: "), _names(together), ".", tail)
    verdicts: dict[str, set] = {}
    for row in tables.get("ranking", []):
        if row.get("stage") == stage and row.get("verdict"):
            verdicts.setdefault(row["source"], set()).add(row["verdict"])
    alone = [source for source, found in verdicts.items() if found == {"open"}]
    if not alone:
        return Html("")
    return tag(
        "p",
        tag("b", "Each could be opened by itself: "),
        _names(alone),
        ". Opening several at once has not been shown to pass.",
    )


def _names(sources) -> str:
    return ", ".join(source_name(source) for source in sources)
