"""`queue`: put studies into the queue."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, by_whom, clean, print_json


def run(
    files: Annotated[list[Path], typer.Argument(help="Study files.")],
    by: Annotated[str | None, typer.Option(help="Who asks; else the login name.", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Check studies against their geometries and queue them; `holdtight work` runs them."""
    from catalog.store import Catalog
    from study.runner import check, enqueue, read_asked

    store = Catalog(catalog)
    studies = [(path, read_asked(store, path)) for path in files]
    for path, study in studies if len(studies) > 1 else ():
        check(store, study, path.parent, by=by_whom(by))
    made = [
        {"study": enqueue(store, study, path.parent, by=by_whom(by)), "title": study.title, "file": str(path)}
        for path, study in studies
    ]
    if as_json:
        print_json(made[0] if len(made) == 1 else made)
        return
    for row in made:
        print(f"study {row['study']} queued: {clean(row['title'])}")
