"""The figures behind a release: what each feature does to each measure, what loosening it did, and what to warn of."""

from collections.abc import Mapping, Sequence

from study.release_callouts import datum_letters

RANKED = (
    "measure", "unit", "rank", "st", "st_low", "st_high", "s1", "linear_share", "mu_star", "effect", "effect_axes",
    "effect_unit", "effect_per_mm", "tied",
)  # fmt: skip
JUDGED = ("looser_zone", "looser_process", "good_share", "good_low", "good_high", "as_drawn")
FACTS = (
    "method", "size", "seed", "sides", "builds", "unassembled", "withheld", "good_share", "good_low", "good_high",
    "all_cars", "open_together", "open_together_good_share", "notes",
)  # fmt: skip
APART = 0.1  # total and linear share that differ by more than this are both told
MEASURED = ("measure", "position", "unit", "nominal", "mean", "sd", "limit_low", "limit_high", "good_share")


def evidence(dossier, source) -> dict:
    """Rank and share in every measure at the last stage, what loosening it alone did, and the jig that holds it."""
    stage = dossier.stages[-1]
    ranked = [row for row in dossier.of_stage("ranking", stage) if row["source"] == source.name]
    judged = next((row for row in dossier.tables.get("verdicts", ()) if row["source"] == source.name), None)
    jig = next((jig.name for jig in dossier.asked.jigs if source.name in jig.pivots), None)
    limited = {stat["measure_no"] for stat in dossier.of_stage("stats", stage) if _limited(stat)}
    measures = [{key: row.get(key) for key in RANKED} | {"limited": row["measure_no"] in limited} for row in ranked]
    found = {"stage": stage, "measures": measures}
    found["verdicts"] = sorted({row["verdict"] for row in [*ranked, judged or {}] if row.get("verdict")})
    found["loosened"] = {key: judged.get(key) for key in JUDGED} if judged else None
    found |= {"jig": jig} if jig else {}
    return found | ({"turn": True} if source.kind == "jig" and source.name.endswith(".turn") else {})


def verdict_of(evidence: Mapping) -> str | None:
    """The strictest verdict said of the source."""
    return next((v for v in ("hold", "watch", "open") if v in evidence["verdicts"]), None)


def figures_text(evidence: Mapping) -> str:
    """Where it matters most and what loosening it alone did, in words."""
    parts = [_strength(*strongest(evidence))]
    loosened = evidence["loosened"]
    if loosened and loosened["good_share"] is not None:
        good, low, high = (100 * loosened[key] for key in ("good_share", "good_low", "good_high"))
        wider = loosened["looser_process"] or loosened["looser_zone"]
        parts.append(f"alone at {wider}: {good:.1f} % good ({low:.1f} to {high:.1f} %)")
    return "; ".join(part for part in parts if part)


def _strength(key, row):
    from study.charts.words import measure_name, quantity

    if row is None:
        return ""
    name = measure_name(row)
    name = name[:1].lower() + name[1:] if row["measure"][:1].islower() else name
    if key == "mu_star":
        return f"mean effect {quantity(row[key], row['unit'], 2)} on {name}".replace("\u00a0", " ")
    if row[key] < 0.005:
        return "below 1 % of every measure" + (" that has limits" if row["limited"] else "")
    low, high = row["st_low"], row["st_high"]
    interval = f" ({100 * max(low, 0):.0f} to {100 * high:.0f} %)" if key == "st" and low is not None else ""
    linear = row["linear_share"]
    apart = key == "st" and linear is not None and abs(linear - row["st"]) > APART
    return f"{100 * row[key]:.0f} % of {name}{interval}" + (f", {100 * linear:.0f} % linear" if apart else "")


def strongest(evidence: Mapping) -> tuple[str | None, Mapping | None]:
    """(the figure by which the study ranks, the row of the measure that it does most to: of one with limits, if any).

    Of shares the linear one chooses, since steps of an adjuster raise the total ones of all sources together.
    """
    measures = evidence["measures"]
    measures = [row for row in measures if row["limited"]] or measures
    for key in ("st", "linear_share"):
        rows = [row for row in measures if row[key] is not None]
        if rows:
            return key, max(rows, key=lambda row: row[key] if row["linear_share"] is None else row["linear_share"])
    rows = [row for row in measures if row["mu_star"] is not None]
    return ("mu_star", min(rows, key=lambda row: row["rank"])) if rows else (None, None)


def _limited(stat):
    return stat["limit_low"] is not None or stat["limit_high"] is not None


def facts(dossier) -> dict:
    """The study in figures: what it was, what it found at its last stage, what the workshop re-sets."""
    from study.handout import alignment

    found = {key: dossier.study.get(key) for key in FACTS}
    judged = dossier.tables.get("verdicts") or [{"as_drawn": None}]
    if found["good_share"] is None:  # a screening has no share of its own, but its verdicts were built as drawn too
        found["good_share"] = judged[0]["as_drawn"]
    found |= {"stage": dossier.stages[-1], "wanted_share": dossier.asked.wanted_share, "cars": dossier.asked.cars}
    measured = dossier.of_stage("stats", dossier.stages[-1])
    found["measures"] = [{key: row.get(key) for key in MEASURED} for row in measured]
    found["alignment"] = alignment(dossier)
    found["mirrored"] = dossier.geometry.right_is_mirror and dossier.geometry.linkage != "solid-axle"
    return found | {"whole_axle": dossier.geometry.linkage == "solid-axle"}


def warnings(dossier, said: Mapping, *, newest: str, rows: Sequence[Mapping]) -> list[str]:
    """What a reader of the note has to be warned of. said: the `facts`; newest: NAME@REVISION of the geometry now."""
    return [*_of_study(dossier.asked, said), *_of_rows(dossier, newest, rows)]


def _of_study(asked, facts):
    limited = any(measure.limits for measure in asked.measures)
    wanted, share = asked.wanted_share, facts["good_share"]
    if not limited:
        yield "The study has no limits: it ranks features and gives no verdict; nothing says that these tolerances are close enough."
    elif share is None:
        yield f"The method {asked.method} gives no share of good builds and no verdict; run sobol or spread before relying on these."
    elif share < wanted:
        yield f"As drawn only {100 * share:.1f} % of builds are good, {100 * wanted:g} % are wanted."
    elif facts["good_low"] is not None and facts["good_low"] < wanted:
        yield f"The share of good builds, {100 * share:.1f} %, is not surely above the wanted {100 * wanted:g} % (95 %: from {100 * facts['good_low']:.1f} %)."
    if facts.get("withheld"):
        yield "Too many builds could not be assembled: the shares of the ranking are withheld."
    if asked.alignment is None:
        yield "The study has no alignment: builds are judged as they come off the jig."
    if facts["sides"] == "mirrored":
        yield "Left and right errors were mirror images in the study: nothing is said of left against right."


def _of_rows(dossier, newest, rows):
    if newest != dossier.study["geometry"]:
        yield f"Stale from the start: {dossier.study['geometry']} was studied, the catalog has {newest}."
    lettered = [bool(datum_letters(row["datums"])) for row in rows if row["form"] != "length"]
    given = [bool(row["datums"]) for row in rows if row["form"] != "length"]
    if not all(given):
        yield "No datums are given for some features; a position tolerance needs them: [datums] of the geometry file, or --datums."
    elif not all(lettered):
        yield "Datums are given in words; give them letters on the drawing."
    asked = (("condition", "in which condition it holds (--condition)"), ("checked", "how it is checked (--check)"), ("reason", "why (--reason)"))  # fmt: skip
    missing = [words for field, words in asked if not all(row[field] for row in rows)]
    if missing:
        yield f"Not stated for every feature: {'; '.join(missing)}."
    if any("mean " in row["distribution"] for row in rows):
        yield "Some processes were studied with a mean off the true position; the drawing's tolerance stands about the true position."
