"""The written part of the sheet: what was studied, statistics, tolerances, worst builds, notes, cautions."""

from study.charts import tables as tb
from study.charts import theme
from study.charts.words import (
    aligned,
    effects_text,
    finite,
    good_percent,
    limits_text,
    number,
    quantity,
    source_name,
    unit_text,
)
from study.sheet_page import Html, details, esc, pairs, section, table, tag
from study.sheet_summary import METHODS, thousands, verdict_tag

CAUTIONS = (
    "Rigid geometry only: no bush compliance, no strength, no fatigue, no joint articulation limits, no thread "
    "engagement.",
    "A wider tolerance never overrides a part's strength, edge distance or bearing limits.",
    "Suspension and steering are safety-critical. Local vehicle approval and inspection rules, series "
    "regulations and a competent licensed engineer have the last word.",
    "ISO 22081: a general class in the title block does not control a derived feature such as a joint centre. "
    "Every pivot gets its own position tolerance on the drawing.",
    "The shares hold for the tolerances, the alignment and the limits named on this sheet, and for no others.",
)
_SIDES = {
    "mirrored": "mirrored: left and right errors are mirror images",
    "independent": "independent: left and right errors are drawn apart",
}


def studied(study: dict, geometry: dict, alignment: list[dict]) -> Html:
    """What was studied and with what."""
    dropped, lost = study.get("dropped_blocks"), study.get("unassembled")
    facts = pairs(
        [
            ("Geometry revision", study.get("geometry") or geometry.get("name")),
            ("Linkage", geometry.get("linkage")),
            ("Method", METHODS.get(study.get("method"), study.get("method"))),
            ("Size asked for", None if study.get("size") is None else thousands(study["size"])),
            ("Builds really run", None if study.get("builds") is None else thousands(study["builds"])),
            ("Not assembled", None if lost is None else f"{thousands(lost)} builds"),
            ("Sample blocks dropped", None if dropped is None else thousands(dropped)),
            ("Random seed", study.get("seed")),
            ("Sides", _SIDES.get(study.get("sides"), study.get("sides"))),
            ("Stages", ", ".join(theme.STAGE_WORDS.get(s, s) for s in study.get("stages") or [])),
            ("Wanted good share", good_percent(study["wanted_share"]) if study.get("wanted_share") else None),
            (
                "Computed in",
                None if finite(study.get("seconds")) is None else f"{number(study['seconds'], 2)} s",
            ),
            ("Asked by", study.get("by")),
            ("Asked on (UTC)", _day(study.get("created"))),
            ("Finished (UTC)", _day(study.get("finished"))),
            ("Content of the geometry (SHA-256)", study.get("content_hash")),
            ("Program version", study.get("version")),
            ("Datums", geometry.get("datums")),
        ]
    )
    text = details("The study file as given", tag("pre", study["text"])) if study.get("text") else ""
    return section(
        "studied", "What was studied, and with what", facts, _alignment(alignment), _perfect(study), text
    )


def _day(moment) -> str | None:
    return None if moment is None else str(moment)[:16]


def _alignment(rows: list[dict]) -> Html:
    if not rows:
        return tag("p", "No alignment: nothing is re-set, builds are evaluated as they come off the jig.")
    keys = ("by", "within_text", "step_text", "range_text")
    body = [
        [
            str(row.get("adjuster") or "").replace("_", " "),
            *(str(row.get(k) or "–").replace("_", " ") for k in keys),
        ]
        for row in rows
    ]
    return table(
        ["Set", "by", "left within", "step", "range"],
        body,
        words=5,
        caption="Alignment, in the order of the workshop",
    )


def _perfect(study: dict) -> Html:
    held = study.get("perfect") or []
    if not held:
        return Html("")
    return tag(
        "p",
        tag("b", "Held perfect in this study: "),
        ", ".join(source_name(name) for name in held),
        ". Nothing is said about their tolerances.",
    )


def statistics(tables: tb.Tables) -> Html:
    """One row a measure and stage; left minus right last."""
    rows = [row for row in tables.get("stats", [])]
    if not rows:
        return Html("")
    rows.sort(
        key=lambda row: (
            str(row.get("of") or "").startswith("cross_"),
            row["measure_no"],
            row["stage"] != "after",
        )
    )
    heads = [
        "Measure",
        "Stage",
        "Side",
        "In",
        "Nominal",
        "Mean",
        "SD",
        "2.5 %",
        "97.5 %",
        "RSS",
        "Worst case",
        "Limits",
        "Good",
    ]
    return section(
        "statistics",
        "The numbers",
        table(
            heads,
            [_stat_row(row) for row in rows],
            words=4,
            spare=True,
            caption="Every measure over the builds. RSS and worst case: root-sum-square and arithmetic stack of "
            "the linear effects, ± from nominal. Measures named cross are left minus right.",
        ),
    )


def _stat_row(row: dict) -> list:
    name = next(iter(tb.measures({"stats": [row]})))["name"]
    numbers = aligned(row.get(key) for key in ("nominal", "mean", "q025", "q975"))
    return [
        name,
        row.get("stage"),
        row.get("side"),
        unit_text(row.get("unit")),
        numbers[0],
        numbers[1],
        number(row.get("sd")),
        numbers[2],
        numbers[3],
        number(row.get("rss")),
        _stack_ends(row),
        limits_text(row) or "–",
        good_percent(row.get("good_share")),
    ]


def _stack_ends(row: dict) -> str:
    """Both ends of the worst-case stack of the linear model."""
    low, high = finite(row.get("worst_low")), finite(row.get("worst_high"))
    return "–" if low is None or high is None else " to ".join(aligned((low, high)))


def tolerance_table(tolerances: list[dict], tables: tb.Tables, stage: str) -> Html:
    """One row a drawing feature: zone, distribution, process, where it matters most, effects, verdict."""
    if not tolerances:
        return Html("")
    best, verdicts = tb.greatest(tables, stage), _verdicts(tables, stage)
    rows = []
    for item in tolerances:
        source = item.get("source") or f"{item.get('part')}.{item.get('feature')}"
        found = best.get(source)
        share = f"{found['text']} of {found['measure']}" if found else "–"
        rows.append(
            [
                Html(f"{esc(source_name(source))}<br>{_code(source)}"),
                item.get("zone_text"),
                item.get("distribution_text"),
                item.get("process") or "–",
                share,
                effects_text(found["row"]) or "–" if found else "–",
                verdict_tag(verdicts.get(source)) or "–",
            ]
        )
    heads = [
        "Drawing feature",
        "Zone",
        "Distribution",
        "Process",
        "Matters most",
        "Effect there, by axis",
        "Verdict",
    ]
    return section(
        "tolerances",
        "Tolerances, feature by feature",
        table(
            heads,
            rows,
            words=7,
            spare=True,
            caption="One row a drawing feature. Effects: of 1 mm, or of 1° of an angle, in the "
            "part's axes (x forward, y left, z up; left side)",
        ),
        tag(
            "p",
            tag("b", "hold"),
            ": loosening this one alone drops the good share below the wanted one; ",
            tag("b", "open"),
            ": it stays above; ",
            tag("b", "watch"),
            ": not decided.",
            cls="small soft",
        )
        if verdicts
        else "",
    )


def _code(source: str) -> Html:
    """A source as study files name it; it may break behind its dots and underscores."""
    return tag("code", Html(esc(source).replace(".", ".<wbr>").replace("_", "_<wbr>")))


def _verdicts(tables: tb.Tables, stage: str) -> dict[str, str]:
    """The strictest verdict of each source over the measures."""
    order = {"hold": 0, "watch": 1, "open": 2}
    found: dict[str, str] = {}
    for row in tables.get("ranking", []):
        verdict, source = row.get("verdict"), row["source"]
        if (
            row.get("stage") == stage
            and verdict in order
            and order[verdict] < order.get(found.get(source), 3)
        ):
            found[source] = verdict
    return found


def worst_builds(tables: tb.Tables) -> Html:
    rows = tables.get("worst", [])
    if not rows:
        return Html("")
    heads = {head["measure_no"]: head for head in tb.measures(tables)}
    groups: dict[tuple, list[dict]] = {}
    for row in rows:
        groups.setdefault((row["measure_no"], row["stage"], row["direction"], row["value"]), []).append(row)
    body = []
    for (measure_no, stage, direction, value), errors in groups.items():
        head = heads.get(
            measure_no, {"name": errors[0].get("measure") or f"measure {measure_no}", "unit": None}
        )
        ordered = sorted(errors, key=lambda row: -abs(finite(row.get("error")) or 0.0))
        body.append(
            [
                head["name"],
                stage,
                "lowest" if direction == "low" else "highest",
                quantity(value, head["unit"], 4),
                _errors(ordered),
            ]
        )
    return section(
        "worst",
        "Worst builds found",
        table(
            ["Measure", "Stage", "", "Value", "Errors that make it"],
            body,
            words=5,
            spare=True,
            caption="The worst build inside the zones, the best found by search; the largest errors first",
        ),
    )


def _errors(rows: list[dict], most: int = 6) -> str:
    shown = [
        f"{source_name(row['source'])} {str(row.get('axis') or '').replace('_', ' ')} "
        f"{quantity(row.get('error'), 'deg' if 'tilt' in str(row.get('axis')) else 'mm', sign=True)}"
        for row in rows[:most]
    ]
    return "; ".join(shown) + (f"; and {len(rows) - most} more" if len(rows) > most else "")


def notes(study: dict) -> Html:
    found = list(study.get("notes") or [])
    return section("notes", "Notes", tag("ul", *(tag("li", note) for note in found))) if found else Html("")


def cautions() -> Html:
    return section(
        "cautions", "Cautions", tag("div", tag("ul", *(tag("li", text) for text in CAUTIONS)), cls="cautions")
    )
