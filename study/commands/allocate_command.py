"""`allocate`: the cheapest process for every pivot that still gives the wanted share of good cars."""

from pathlib import Path
from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import CatalogOption, JsonOption, clean, print_json, print_table


class AllocateError(InputError):
    """A study whose processes cannot be chosen."""


def run(
    study: Annotated[int, typer.Argument(help="A finished study with limits, some of whose zones are named processes.")],
    cars: Annotated[int | None, typer.Option(help="Number of cars; else the study's own.", min=1, show_default=False)] = None,
    share: Annotated[float | None, typer.Option(help="Wanted share of good builds; else the study's own.", min=0.01, max=0.9999, show_default=False)] = None,
    frontier: Annotated[bool, typer.Option("--frontier", help="Also what less and more money would buy.")] = False,
    chart: Annotated[Path | None, typer.Option(help="Draw cost against good share into this file (svg, png, pdf, html, json).", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Choose the cheapest process for every source from its ladder, verify the choice by building it, and price it."""
    from threadpoolctl import threadpool_limits

    from study.chart_file import ending_of

    if chart is not None:
        ending_of(chart)
    with threadpool_limits(1):
        out = _found(study, cars, share, frontier or chart is not None, catalog)
    if chart is not None:
        out["chart"] = str(_draw(out, chart))
    if as_json:
        print_json(out)
    else:
        _print(out)


def _found(number, cars, share, with_frontier, catalog):
    from catalog import processes
    from catalog.store import Catalog
    from study.allocate import Allocation
    from study.dossier import load_dossier
    from study.tasks import StudyWork

    store = Catalog(catalog)
    dossier = load_dossier(store, number)
    asked, cars = dossier.asked, cars or dossier.asked.cars
    if cars is None:
        raise AllocateError(f"study {number} names no number of cars; give --cars")
    if not any(measure.limits for measure in asked.measures):
        raise AllocateError(f"study {number} has no limits, so no combination is better than another; give its measures limits")
    with store.read() as con:
        book = processes.resolver(con)
    work = StudyWork(dossier.geometry, asked)
    options, drawn = _options(work, book)
    if not options:
        raise AllocateError(f'study {number} names no process that has a ladder; write zones as process = "NAME" (`holdtight processes`)')
    made = Allocation(work, options, cars=cars)
    return _rows(made, drawn, number, cars, share or asked.wanted_share, with_frontier)


def _options(work, book):
    """(options by source number, option number as drawn by source number) along each source's ladder, tightest first."""
    from study.allocate import Option
    from study.zone_entries import parse_zone
    from study.zones import fits, for_kind

    options, drawn = {}, {}
    for number, source in enumerate(work.model.sources):
        if not source.zone.process:
            continue
        names = _ladder(book, source.zone.process)
        found = []
        for name in names:
            zone, (process, _) = parse_zone(book(name), process=name), book.find(name)
            if fits(zone, source.kind):
                found.append(Option(name, for_kind(zone, source.kind), process.jig_cost, process.piece_cost))
        if len(found) > 1 and source.zone.process in [option.process for option in found]:
            options[number] = found
            drawn[number] = [option.process for option in found].index(source.zone.process)
    return options, drawn


def _ladder(book, name):
    names = [name]
    while (tighter := book.tighter(names[0])) and tighter not in names:
        names.insert(0, tighter)
    while (looser := book.looser(names[-1])) and looser not in names:
        names.append(looser)
    return names


def _rows(made, drawn, number, cars, wanted, with_frontier):
    found = made.cheapest(wanted)
    before = made.built_share(drawn)
    sources, options = made.work.model.sources, made.options
    rows = [
        {"source": sources[s].name, "as_drawn": options[s][drawn[s]].process, "chosen": options[s][k].process, "changed": k != drawn[s]}
        for s, k in found.chosen.items()
    ]
    out = {"study": number, "cars": cars, "wanted_share": wanted, "builds": found.builds, "processes": rows}
    out |= {"as_drawn": _priced(made.cost_of(drawn), before), "chosen": _priced(found.cost, found.share)}
    out["saving"] = out["as_drawn"]["cost"] - out["chosen"]["cost"]
    if with_frontier:
        out["frontier"] = [_priced(c.cost, c.share) | {"changes": _changes(made, found, c)} for c in made.frontier()]
    return out


def _priced(cost, share):
    return {"cost": cost, "good_share": share.share, "low": share.low, "high": share.high}


def _changes(made, found, choice):
    """What a point of the frontier makes otherwise than the choice."""
    sources, options = made.work.model.sources, made.options
    return {
        sources[s].name: options[s][k].process for s, k in choice.chosen.items() if k != found.chosen[s]
    }  # fmt: skip


def _print(out):
    columns = [("source", "left"), ("as drawn", "left"), ("chosen", "left"), ("", "left")]
    rows = [[r["source"], r["as_drawn"], r["chosen"], "changed" if r["changed"] else ""] for r in out["processes"]]
    print_table(f"cheapest processes for {out['cars']} cars, wanted {100 * out['wanted_share']:g} % good, study {out['study']}", columns, rows)
    for name in ("as_drawn", "chosen"):
        print(f"{name.replace('_', ' '):9s} cost {out[name]['cost']:10,.2f}   good {_share(out[name])}")
    print(f"saving    {out['saving']:15,.2f}   ({out['builds']} builds to verify; costs in the shop's own unit)")
    for row in out.get("frontier", ()):
        changes = ", ".join(f"{clean(s)} by {clean(p)}" for s, p in row["changes"].items()) or "the choice itself"
        print(f"for {row['cost']:10,.2f}: {_share(row)}: {changes}")
    if "chart" in out:
        print(f"chart: {clean(out['chart'])}")
    print("A wider tolerance never overrides a part's strength, edge distance or bearing limits.")


def _share(row):
    return f"{100 * row['good_share']:.1f} % ({100 * row['low']:.1f}–{100 * row['high']:.1f})"


def _draw(out, path):
    from study.chart_file import Numbers, write_chart
    from study.charts.cost import cost_spec

    kinds = [("cheapest", row) for row in out["frontier"]] + [("as drawn", out["as_drawn"]), ("chosen", out["chosen"])]
    rows = [{"kind": kind, "cost": r["cost"], "share": r["good_share"], "low": r["low"], "high": r["high"]} for kind, r in kinds]
    table = Numbers("Cost against good share", ["kind", "cost", "good share"], [[r["kind"], f"{r['cost']:.2f}", f"{r['share']:.4f}"] for r in rows], words=1)
    return write_chart(cost_spec(rows, wanted=out["wanted_share"], cars=out["cars"]), path, [table])
