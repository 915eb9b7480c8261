"""`add`: register a geometry file as a revision."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, by_whom, clean, print_json, print_odd


def run(
    files: Annotated[list[Path], typer.Argument(help="Geometry files.")],
    why: Annotated[str, typer.Option(help="Why this revision was made; kept with it.")] = "",
    by: Annotated[str | None, typer.Option(help="Who adds it; else the login name.", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Register geometries: the same content is the same revision, changed content a new one."""
    from catalog import revisions
    from catalog.geometry_file import read_geometry
    from catalog.store import Catalog
    from study.runner import register

    store, made = Catalog(catalog), []
    for path in files:
        geometry = read_geometry(path)
        revision = register(store, geometry, by=by_whom(by), why=why)
        with store.read() as con:
            print_odd(revisions.measures_of(con, revision), geometry)
        made.append({"geometry": revision.spec, "new": revision.is_new, "linkage": revision.linkage})
        if not as_json:
            print(f"{clean(revision.spec)}: {'registered' if revision.is_new else 'is there already, unchanged'}")
    if as_json:
        print_json(made)
