"""`processes`: the ways of making a feature that studies may name."""

from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import CatalogOption, JsonOption, by_whom, clean, print_json, print_table


class ProcessOptionError(InputError):
    """Options of `processes` that do not go together."""


_MAKING = ("zone", "distribution", "cp", "truncated", "jig_cost", "piece_cost", "looser", "source", "remark")


def run(
    name: Annotated[
        str | None, typer.Argument(help="One process, NAME or NAME@NOMINAL (mm); else all in force.", show_default=False)
    ] = None,
    add: Annotated[
        str | None, typer.Option(help="Bring a process into force; one of that name gets a new version.", show_default=False)
    ] = None,
    zone: Annotated[
        str | None,
        typer.Option(help="With --add: the zone, keys as in a study file: 'diameter=0.6, axis=\"z\", depth=1'.", show_default=False),
    ] = None,
    distribution: Annotated[str | None, typer.Option(help="uniform or normal; else uniform.", show_default=False)] = None,
    cp: Annotated[float | None, typer.Option(help="Of a normal distribution; else 1.", show_default=False)] = None,
    truncated: Annotated[bool, typer.Option("--truncated", help="What lies outside the zone is rejected.")] = False,
    jig_cost: Annotated[float | None, typer.Option(help="Cost once, in your own unit; else 0.", show_default=False)] = None,
    piece_cost: Annotated[float | None, typer.Option(help="Cost of each piece; else 0.", show_default=False)] = None,
    looser: Annotated[str | None, typer.Option(help="The next looser process.", show_default=False)] = None,
    source: Annotated[str | None, typer.Option(help="Where the zone comes from; kept with it.", show_default=False)] = None,
    remark: Annotated[str | None, typer.Option(help="Free text.", show_default=False)] = None,
    retire: Annotated[str | None, typer.Option(help="Take a process out of force.", show_default=False)] = None,
    everything: Annotated[bool, typer.Option("--all", help="List retired versions too.")] = False,
    by: Annotated[str | None, typer.Option(help="Who adds or retires; else the login name.", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """List the processes of the catalog, add one or retire one; rows never change, and queued studies keep theirs."""
    given = dict(zip(_MAKING, (zone, distribution, cp, truncated or None, jig_cost, piece_cost, looser, source, remark), strict=True))
    given = {key: value for key, value in given.items() if value is not None}
    _check_together(name, add, retire, everything, given)
    if add is not None:
        _add(catalog, add, given, by_whom(by), as_json)
    elif retire is not None:
        _retire(catalog, retire, by_whom(by), as_json)
    else:
        _show(catalog, name, everything, as_json)


def _check_together(name, add, retire, everything, given):
    doing = [f"--{word}" for word, value in (("add", add), ("retire", retire), ("all", everything or None)) if value is not None]
    doing += [clean(name)] if name is not None else []
    if len(doing) > 1:
        raise ProcessOptionError(f"processes: {' and '.join(doing)} do not go together; do one at a time")
    if add is None and given:
        raise ProcessOptionError(f"processes: --{next(iter(given)).replace('_', '-')} goes with --add NAME")
    if add is not None:
        for key in ("zone", "source"):
            if key not in given:
                raise ProcessOptionError(f"processes --add {clean(add)}: --{key} is missing; {_WANTED[key]}")


_WANTED = {
    "zone": "write it like --zone 'plus_minus=0.8', with the keys of a study file",
    "source": "say where the zone comes from",
}


def _add(catalog, name, given, by, as_json):
    from catalog import processes
    from catalog.store import Catalog
    from study.zone_entries import ZoneError, parse_zone

    zone = _zone_keys(given.pop("zone"))
    try:
        parse_zone({**zone, **{key: given[key] for key in ("distribution", "cp", "truncated") if key in given}})
    except ZoneError as error:
        raise ProcessOptionError(f"processes --add {clean(name)}: {error}") from None
    with Catalog(catalog).write() as con:
        made = processes.add(con, name=name, zone=zone, by=by, **given)
        book = processes.resolver(con)
    if as_json:
        print_json(_plain(made, book))
    else:
        print(f"{clean(made.name)}: version {made.version} is in force")


def _zone_keys(text):
    """The keys of a zone written like the inside of a table in a study file."""
    import tomllib

    try:
        found = tomllib.loads(f"zone = {{ {text} }}")
    except tomllib.TOMLDecodeError:
        found = {}
    if "\n" in text or set(found) != {"zone"} or not found["zone"]:
        raise ProcessOptionError(
            f"--zone {clean(text)!r}: is no list of keys; write it like 'plus_minus=0.8' or 'diameter=0.6, axis=\"z\", depth=1'"
        )
    for key in ("distribution", "cp", "truncated", "shift", "process"):
        if key in found["zone"]:
            known = key in ("distribution", "cp", "truncated")
            hint = f"give it by --{key}" if known else "leave it out: it belongs to a study"
            raise ProcessOptionError(f"--zone: {key} is no part of the zone of a process; {hint}")
    return found["zone"]


def _retire(catalog, name, by, as_json):
    from catalog import processes
    from catalog.store import Catalog

    with Catalog(catalog).write() as con:
        gone = processes.retire(con, name, by=by)
        book = processes.resolver(con)
    if as_json:
        print_json(_plain(gone, book))
    else:
        print(f"{clean(gone.name)}: version {gone.version} is retired; studies that were queued with it keep it")


def _read(catalog):
    """(all versions, a book of them, whether they stand in a catalog)."""
    from catalog import processes
    from catalog.process_tables import initial_processes
    from catalog.store import Catalog, CatalogMissing

    try:
        with Catalog(catalog).read() as con:
            found = processes.list_processes(con, retired=True)
    except CatalogMissing:
        return list(initial_processes()), processes.initial(), False
    return found, processes.Book(found), True


def _show(catalog, name, everything, as_json):
    found, book, kept = _read(catalog)
    if name is None:
        shown = found if everything else [each for each in found if each.retired is None]
        _print_list(shown, book, kept, everything, as_json)
        return
    process, nominal = book.find(name) if "@" in name else (book.get(name), None)
    if as_json:
        print_json(_plain(process, book) | ({"asked": name, **_at(book, name)} if nominal is not None else {}))
    else:
        _print_one(process, name, nominal, book)


def _at(book, asked):
    return {"zone": book(asked), "looser": book.looser(asked), "tighter": book.tighter(asked)}


def _plain(process, book):
    zones = {"zone": process.zone}
    keys = ("from_mm", "from_included", "up_to_mm", "zone")
    zones["ranges"] = [{key: getattr(each, key) for key in keys} for each in process.ranges] or None
    fields = ("distribution", "cp", "truncated", "jig_cost", "piece_cost", "looser", "source", "remark", "by", "retired_by")
    below = [each.name for each in book.in_force.values() if each.looser == process.name]
    times = {key: value.isoformat() if (value := getattr(process, key)) else None for key in ("created", "retired")}
    own = {key: getattr(process, key) for key in fields}
    return {"process": process.name, "version": process.version, **zones, **own, "tighter": below, **times}


def _print_list(shown, book, kept, everything, as_json):
    if as_json:
        print_json([_plain(each, book) for each in shown])
        return
    columns = [("process", "left")] + ([("version", "right"), ("retired", "right")] if everything else [])
    columns += [("zone", "left"), ("jig once", "right"), ("a piece", "right"), ("next looser", "left"), ("source", "left")]
    rows = []
    for p in shown:
        state = [str(p.version), f"{p.retired:%Y-%m-%d}" if p.retired else ""] if everything else []
        cost = [f"{p.jig_cost:g}", f"{p.piece_cost:g}"]
        rows.append([p.name, *state, _zone_text(p), *cost, p.looser or "–", p.source.partition(":")[0]])
    print_table("processes", columns, rows)
    print("Studies write NAME, or NAME@NOMINAL (mm) where the zone goes by nominal dimension.")
    print("`holdtight processes NAME` shows the ranges, the remark and the source in full.")
    if not kept:
        print("There is no catalog yet: these are the ones that it will start with.")


def _zone_text(process):
    if process.zone is not None:
        return _words(process.zone) + _law_words(process)
    widths = [each.zone["plus_minus"] for each in process.ranges]
    return f"±{min(widths):g} … {max(widths):g} mm for {process.extent()}" + _law_words(process)


def _law_words(process):
    law = f", normal, cp {process.cp:g}" if process.distribution == "normal" else ""
    return law + (", inspected" if process.truncated else "")


def _words(zone):
    if "plus_minus" in zone:
        widths = zone["plus_minus"] if isinstance(zone["plus_minus"], list) else [zone["plus_minus"]]
        return "±" + " / ".join(f"{width:g}" for width in widths) + " mm"
    if "length" in zone:
        return f"±{zone['length']:g} mm of a length"
    if "tilt_deg" in zone:
        return f"{zone['tilt_deg']:g}° half angle"
    if "depth" in zone:
        return f"⌀{zone['diameter']:g} mm about {zone['axis']}, ±{zone['depth']:g} mm along it"
    return f"S⌀{zone['diameter']:g} mm"


def _print_one(process, asked, nominal, book):
    print(f"{clean(asked)}: version {process.version}, made by {clean(process.by)}")
    if nominal is not None:
        print(f"zone at {nominal:g} mm: {_words(process.zone_at(nominal))}{_law_words(process)}")
        print(f"next looser: {book.looser(asked) or '–'}   next tighter: {book.tighter(asked) or '–'}")
    elif process.ranges:
        rows = [[("from " if e.from_included else "above ") + f"{e.from_mm:g}", f"{e.up_to_mm:g}", _words(e.zone)] for e in process.ranges]
        print_table("zones", [("nominal, mm", "right"), ("up to", "right"), ("zone", "left")], rows)
        print(f"next looser: {process.looser or '–'}")
    else:
        print(f"zone: {_words(process.zone)}{_law_words(process)}")
        print(f"next looser: {book.looser(asked) or '–'}   next tighter: {book.tighter(asked) or '–'}")
    print(f"jig once {process.jig_cost:g}, a piece {process.piece_cost:g} (the shop's own unit)")
    print(f"source: {clean(process.source)}")
    if process.remark:
        print(f"remark: {clean(process.remark)}")
