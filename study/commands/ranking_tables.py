"""The ranking of a study as tables for people."""

import math

from study.commands.common import clean, number, print_table


def print_ranking(dossier, *, stage=None, most=6) -> None:
    """The ranking as tables, before beside after alignment."""
    stage = stage or dossier.stages[-1]
    facts = dossier.study
    print(f"study {facts['id']}: {clean(facts['title'])}")
    print(
        f"{clean(facts['geometry'])}, {facts['method']}, {facts['builds']} builds run, seed {facts['seed']}, sides {facts['sides']}"
    )
    for note in facts["notes"] or ():
        print(f"note: {clean(note)}")
    if facts["method"] == "worst":
        _print_worst(dossier, stage)
    for stats in dossier.of_stage("stats", stage):
        _print_measure(dossier, stage, stats, most)
    _print_failures(dossier, stage)
    _print_demand(dossier)
    _print_verdicts(dossier)
    _print_good(dossier)
    print(
        "≈ tied with the one above: the draws cannot tell the two apart. Effects are signed, on the drawing's own axes."
    )
    print("Rigid geometry only. A wider tolerance never overrides a part's strength, edge distance or bearing limits.")


def _print_measure(dossier, stage, stats, most):
    rows = dossier.of_stage("ranking", stage, stats["measure_no"])
    other = "before" if stage == "after" else "after"
    share, heading = _share_of(rows)
    elsewhere = {row["source"]: row for row in dossier.of_stage("ranking", other, stats["measure_no"])}
    beside = heading != LINEAR_SHARE
    columns = [("", "right"), ("source", "left"), (heading, "right")] + ([("linear", "right")] if beside else [])
    columns += [(f"{other}\nalignment", "right")] if elsewhere else []
    columns += [("signed effect per mm (or degree)", "left")]
    shown = [row for row in rows[:most] if not _is_nothing(row)]
    lines = []
    for row in shown:
        line = ["≈" if row["tied"] else str(row["rank"]), row["source"], share(row)]
        line += [percent(row["linear_share"])] if beside else []
        line += [share(elsewhere[row["source"]], False) if row["source"] in elsewhere else "–"] if elsewhere else []
        lines.append([*line, _effect(row)])
    print_table(_heading(stats, stage), columns, lines, caption=_rest(rows[len(shown) :]))


def _share_of(rows):
    """(text of a row's figure, heading): the total index where there is one, the screening measure, the linear share."""
    if any(row["st"] is not None for row in rows):
        return lambda row, ends=True: _interval(row["st"], row["st_low"], row["st_high"], ends), "share ST\n(95 %)"
    if any(row["mu_star"] is not None for row in rows):
        return lambda row, ends=True: number(row["mu_star"]), "mu*"
    return lambda row, ends=True: percent(row["linear_share"]), LINEAR_SHARE


LINEAR_SHARE = "linear\nshare"


def _is_nothing(row):
    """A source whose share would be printed as nothing."""
    if row["mu_star"] is not None:
        return False
    share = row["st"] if row["st"] is not None else row["linear_share"]
    return share is None or share < 0.005


def _interval(value, low, high, ends):
    if value is None:
        return "–"
    return f"{100 * value:.0f} % ({100 * low:.0f}–{100 * high:.0f})" if ends and low is not None else percent(value)


def percent(value) -> str:
    """A share for a table."""
    return "–" if value is None else f"{100 * value:.0f} %" if value >= 0.005 or value == 0 else "<1 %"


def _effect(row):
    if row["effect"] is None:
        return "not a single slope"
    names = {"length": "", "tilt_1": "tilt 1 ", "tilt_2": "tilt 2 "}
    shown = [(axis, value) for axis, value in zip(row["effect_axes"], row["effect"], strict=True)]
    largest = max(abs(value) for _, value in shown) or 1.0
    parts = [f"{names.get(axis, axis + ' ')}{number(value, 3)}" for axis, value in shown if abs(value) > 0.05 * largest]
    return f"{'  '.join(parts) or '0'}  {row['effect_unit']}"


def _heading(stats, stage):
    unit = stats["unit"]
    text = f"\n{stats['measure']} [{unit}], {stats['position']}, {stage} alignment: drawing {number(stats['nominal'])}"
    if stats["sd"] is not None:
        text += f", builds {number(stats['mean'])} ± {number(stats['sd'], 2)} (1 sd)"
    elif stats["rss"] is not None:
        text += f", ± {number(stats['rss'], 2)} (1 sd, linear)"
    if stats["limit_low"] is not None or stats["limit_high"] is not None:
        text += f", limits {number(stats['limit_low'])} to {number(stats['limit_high'])}"
    if stats["good_share"] is not None:
        text += f", inside {100 * stats['good_share']:.1f} %"
    return text


def _rest(rows):
    shares = [row["st"] if row["st"] is not None else row["linear_share"] for row in rows]
    known = [s for s in shares if s is not None]
    if not known:
        return "no value here, or nothing that moves it" if rows else None
    most = 100 * max(known)
    return f"{len(rows)} more sources, each under {max(1, math.ceil(most)):.0f} %"


def _print_worst(dossier, stage):
    """The worst build found of each measure and what it is made of, by what each error does there."""
    for stats in dossier.of_stage("stats", stage):
        rows = dossier.of_stage("worst", stage, stats["measure_no"])
        effects = {
            (r["source"], axis): effect
            for r in dossier.of_stage("ranking", stage, stats["measure_no"])
            for axis, effect in zip(r["effect_axes"], r["effect"] or (), strict=False)
        }  # fmt: skip
        for direction in ("low", "high"):
            found = [r for r in rows if r["direction"] == direction and r["value"] is not None]
            if found:
                parts = sorted(found, key=lambda r: -abs(r["error"] * effects.get((r["source"], r["axis"]), 0.0)))[:4]
                made = ", ".join(f"{r['source']} {r['axis']} {r['error']:+.2f}" for r in parts) if effects else "see the sheet"
                print(f"{clean(stats['measure'])}: {'lowest' if direction == 'low' else 'highest'} {number(found[0]['value'])} {stats['unit']}"
                      f"{_in_limits(found[0]['value'], stats)}; most of it by {made}")  # fmt: skip


def _in_limits(value, stats):
    low, high = stats["limit_low"], stats["limit_high"]
    if low is None and high is None:
        return ""
    inside = (low is None or value >= low) and (high is None or value <= high)
    return " (inside limits)" if inside else " (OUTSIDE limits)"


def _print_failures(dossier, stage):
    rows = [row for row in dossier.tables["failures"] if row["stage"] == stage]
    if rows:
        columns = [("", "right"), ("source", "left"), ("index of failing", "right")]
        print_table(
            "\nwhat makes builds fail", columns, [[str(r["rank"]), r["source"], number(r["value"])] for r in rows]
        )


def _print_demand(dossier):
    columns = [
        ("sets", "left"),
        ("by", "left"),
        *((h, "right") for h in ("2.5 %", "median", "97.5 %", "least", "most", "ran out")),
    ]
    rows = [
        [
            r["adjuster"],
            r["by"],
            *(f"{round(r[k], 2) + 0.0:+.2f}" for k in ("q025", "q50", "q975", "low", "high")),
            percent(r["ran_out_share"]),
        ]
        for r in dossier.tables["demand"]
    ]
    if rows:
        print_table("\nadjuster demand, mm from the drawing (the shim kit)", columns, rows)


def _print_verdicts(dossier):
    """What each tolerance may do, the dearest to open first, and the set that passes together."""
    rows, facts = dossier.tables["verdicts"], dossier.study
    if not rows:
        return
    columns = [("source", "left"), ("as drawn", "left"), ("moved to", "left"), ("good builds then", "right"), ("verdict", "left")]
    lines = [
        [r["source"], _made(r["zone"], r["process"]), _made(r["looser_zone"], r["looser_process"]),
         f"{100 * r['good_share']:.1f} % ({100 * r['good_low']:.1f}–{100 * r['good_high']:.1f})", r["verdict"]]
        for r in sorted(rows, key=lambda r: r["good_share"])
    ]  # fmt: skip
    wanted = f"wanted {100 * dossier.asked.wanted_share:g} %, as drawn {100 * rows[0]['as_drawn']:.1f} %"
    print_table(f"\nverdicts: one tolerance loosened at a time ({wanted})", columns, lines)
    if facts.get("open_together"):
        share = f"{100 * facts['open_together_good_share']:.1f} % ({100 * facts['open_together_low']:.1f}–{100 * facts['open_together_high']:.1f})"
        print(f"may be opened together, {share} good: {', '.join(facts['open_together'])}")
    elif any(r["verdict"] == "open" for r in rows):
        print("no set of these may be opened together")
    free = [r["measure"] for r in dossier.of_stage("stats", dossier.stages[-1]) if r["limit_low"] is None and r["limit_high"] is None]
    if free:
        print(f"not guarded by these verdicts, since they have no limits: {clean(', '.join(free))}")


def _made(zone, process):
    return f"{process}: {zone}" if process else zone


def _print_good(dossier):
    facts = dossier.study
    if facts.get("good_share") is None:
        return
    text = f"\n{100 * facts['good_share']:.1f} % of builds are inside all limits (95 %: {100 * facts['good_low']:.1f}–{100 * facts['good_high']:.1f})"
    if facts.get("all_cars") is not None:
        low, high = 100 * facts["all_cars_low"], 100 * facts["all_cars_high"]
        text += f"; chance that all {dossier.asked.cars} cars are: {100 * facts['all_cars']:.1f} % ({low:.1f}–{high:.1f})"
    print(text)
    lost = [(r["lost_share"], r["measure"]) for r in dossier.of_stage("stats", dossier.stages[-1]) if r["lost_share"]]
    lost += [(r["ran_out_share"], f"{r['by']} running out of range") for r in dossier.tables["demand"] if r["ran_out_share"]]
    if lost:
        print("lost to: " + ", ".join(f"{clean(what)} {100 * share:.1f} %" for share, what in sorted(lost, reverse=True)))
