"""`backup`: a copy of the catalog."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, clean, print_json


def run(
    file: Annotated[Path, typer.Argument(help="The copy; must not be there yet.")],
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Copy the catalog to a new file, also while a worker runs; the copy is a catalog like any other."""
    from catalog.keeping import backup
    from catalog.store import Catalog

    size = backup(Catalog(catalog), file)
    if as_json:
        print_json({"file": str(file), "bytes": size})
    else:
        print(f"{clean(file)}: {size / 2**20:.1f} MiB")
