"""`critical`: which pivots matter."""

from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import CatalogOption, JsonOption, print_json, print_table
from study.commands.ranking_tables import percent, print_ranking


class StageError(InputError):
    """A stage that the study does not have."""


def run(
    study: Annotated[
        int | None, typer.Argument(help="A study's number; without it, the critical pivots over the catalog.")
    ] = None,
    stage: Annotated[
        str | None, typer.Option(help="before or after alignment; else the last the study has.", show_default=False)
    ] = None,
    most: Annotated[int, typer.Option(help="Sources shown for each measure.", min=1)] = 6,
    linkage: Annotated[str | None, typer.Option(help="Over the catalog: only geometries of this linkage.", show_default=False)] = None,
    axle: Annotated[str | None, typer.Option(help="Over the catalog: only front or only rear axles.", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Print the ranked sources of a study for each measure, or the critical pivots over the catalog."""
    from catalog.store import Catalog

    store = Catalog(catalog)
    if study is None:
        _over_catalog(store, linkage, axle, as_json)
        return
    from study.dossier import load_dossier

    dossier = load_dossier(store, study)
    chosen = _stage(dossier, stage)
    if as_json:
        print_json(contract(dossier, chosen))
    else:
        print_ranking(dossier, stage=chosen, most=most)


def _stage(dossier, given):
    if given is None:
        return dossier.stages[-1]
    if given not in dossier.stages:
        raise StageError(
            f"--stage {given}: study {dossier.study['id']} has {' and '.join(dossier.stages)}"
            + ("" if len(dossier.stages) > 1 else " only: it has no [alignment]")
        )
    return given


MOST_ROWS = 60
RANKING_KEYS = (
    "source", "rank", "st", "st_low", "st_high", "s1", "s1_low", "s1_high", "linear_share", "mu_star", "mu_star_low",
    "mu_star_high", "effect_axes", "effect_unit", "effect_per_mm", "tied", "verdict",
)  # fmt: skip
FACT_KEYS = (
    "good_share", "good_low", "good_high", "all_cars", "all_cars_low", "all_cars_high", "open_together",
    "open_together_good_share", "open_together_low", "open_together_high",
)  # fmt: skip
STATS_KEYS = (
    "measure", "of", "side", "position", "unit", "nominal", "mean", "sd", "q025", "q975", "limit_low", "limit_high",
    "good_share", "good_low", "good_high", "lost_share", "rss", "worst_low", "worst_high",
)  # fmt: skip


def contract(dossier, stage) -> dict:
    """The ranking as plain JSON values."""
    facts, last = dossier.study, dossier.stages[-1]
    measures = []
    for stats in dossier.of_stage("stats", stage):
        ranking = [
            {key: row[key] for key in RANKING_KEYS} | {"effect_xyz": row["effect"]}
            for row in dossier.of_stage("ranking", stage, stats["measure_no"])
        ]
        measures.append({key: stats[key] for key in STATS_KEYS} | {"ranking": ranking})
    out = {"study": facts["id"], "title": facts["title"], "geometry": facts["geometry"], "method": facts["method"]}
    out |= {
        "stage": stage,
        "builds": facts["builds"],
        "unassembled": facts["unassembled"],
        "withheld": facts["withheld"],
    }
    out |= {key: facts.get(key) if stage == last else None for key in FACT_KEYS}
    out |= {"measures": measures}
    return out | {key: dossier.tables[key] for key in ("verdicts", "demand", "failures", "worst", "correlations")}


def _over_catalog(store, linkage, axle, as_json):
    """The pivots to hold over all geometries, and what leads each measure of each."""
    from catalog import results

    with store.read() as con:
        held = results.holds(con, linkage=linkage, axle=axle)
        total, leads = results.leading(con, most=MOST_ROWS)
        many = total > MOST_ROWS and not (as_json or linkage or axle)
        found = [] if many else [r for r in results.critical(con) if _counts(r)]
        if linkage or axle:
            chosen = _named(con, linkage, axle)
            found = [r for r in found if r["geometry"] in chosen]
    if as_json:
        print_json({"hold": [r | {"since": r["since"].isoformat()} for r in held], "critical": found})
        return
    columns = [("source", "left"), ("hold in", "right"), ("since (UTC)", "left"), ("leads", "left"), ("geometries", "left")]
    rows = [
        [r["source"], str(len(r["geometries"])), f"{r['since']:%Y-%m-%d}", _some(r["measures"]) or "–", _some(r["geometries"])]
        for r in held
    ]  # fmt: skip
    if rows:
        print_table("pivots to hold: verdicts of the newest judged study of each geometry", columns, rows)
    if many:
        _print_leading(total, leads)
    else:
        _print_critical(found)


def _print_critical(found):
    columns = [("geometry", "left"), ("study", "right"), ("measure", "left"), ("", "right"), ("source", "left"), ("share", "right"), ("verdict", "left")]
    rows = [
        [f"{r['geometry']}@{r['revision']}", str(r["study"]), r["measure"], str(r["rank"]), r["source"],
         percent(r["st"] if r["st"] is not None else r["linear_share"]), r["verdict"] or ""]
        for r in found
    ]  # fmt: skip
    print_table("\ncritical pivots: the newest finished study of each revision", columns, rows)


def _print_leading(total, leads):
    """Over many geometries: how often a pivot is the strongest for a measure."""
    columns = [("measure", "left"), ("source", "left"), ("strongest in", "right")]
    rows = [[r["measure"], r["source"], f"{r['revisions']} revisions"] for r in leads]
    print_table(f"\ncritical pivots: how often each is the strongest (`--json` lists all {total} rows)", columns, rows)


def _some(names, most=6):
    return ", ".join(names[:most]) + (f" and {len(names) - most} more" if len(names) > most else "")


def _counts(row):
    """A drawing feature that does something; what the workshop leaves is no pivot."""
    share = row["st"] if row["st"] is not None else row["linear_share"]
    return not row["source"].startswith("alignment.") and share is not None and share >= 0.005


def _named(con, linkage, axle):
    query = "SELECT DISTINCT geometry FROM geometries WHERE (? IS NULL OR linkage = ?) AND (? IS NULL OR axle = ?)"
    return {name for (name,) in con.execute(query, [linkage, linkage, axle, axle]).fetchall()}
