"""`geometries`: what the catalog holds, and how its geometries camber in roll, side by side."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, print_json, print_table


def run(
    names: Annotated[
        list[str] | None, typer.Argument(help="Names of geometries; all of them without one.", show_default=False)
    ] = None,
    chart: Annotated[
        Path | None,
        typer.Option(
            help="Write a chart of camber in roll against swing arm, newest revisions: .svg, .png, .pdf, .html or .json.",
            show_default=False,
        ),
    ] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """List the geometries of the catalog with their revisions; chart how the newest ones camber in roll."""
    from catalog import revisions
    from catalog.store import Catalog
    from study.chart_file import ending_of

    if chart is not None:
        ending_of(chart)
    with Catalog(catalog).read() as con:
        for name in names or ():
            revisions.find(con, name)
        wanted = {name.partition("@")[0] for name in names or ()}
        found = [r for r in revisions.list_revisions(con) if not wanted or r.name in wanted]
        rolls = _rolls(con, wanted) if chart is not None else []
    if chart is not None:
        from study.roll_camber_chart import write_roll_camber

        write_roll_camber(chart, rolls)
    if as_json:
        print_json([_plain(r) for r in found])
        return
    _print(found)
    if chart is not None:
        print(f"chart: {chart}")


def _print(found):
    columns = [
        ("geometry", "left"),
        ("linkage", "left"),
        ("axle", "left"),
        ("created (UTC)", "left"),
        ("by", "left"),
        ("why", "left"),
    ]
    rows = [[r.spec, r.linkage, r.axle, f"{r.created:%Y-%m-%d %H:%M}", r.by, r.why] for r in found]
    print_table("geometries", columns, rows)


def _plain(revision):
    fields = ("spec", "name", "number", "linkage", "axle", "note", "by", "why", "content_hash")
    return {name: getattr(revision, name) for name in fields} | {"created": revision.created.isoformat()}


_ROLLS = """
    SELECT g.geometry, g.spec, g.linkage,
           max(m.value) FILTER (m.measure = 'swing_arm_mm' AND m.side = 'left'),
           max(m.value) FILTER (m.measure = 'track_mm'),
           max(m.value) FILTER (m.measure = 'roll_camber_deg_per_deg' AND m.side = 'left')
    FROM geometries g JOIN measures m USING (geometry, revision)
    WHERE g.newest GROUP BY ALL ORDER BY g.spec
"""


def _rolls(con, wanted):
    """What the chart shows of the newest revision of each geometry."""
    keys = ("name", "linkage", "swing_arm_mm", "track_mm", "roll_camber")
    rows = con.execute(_ROLLS).fetchall()
    return [dict(zip(keys, row[1:], strict=True)) for row in rows if not wanted or row[0] in wanted]
