"""`sheet`: write a study's sheet and charts."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, print_json


def run(
    study: Annotated[int, typer.Argument(help="A study's number.")],
    out: Annotated[
        Path | None, typer.Option(help="The sheet's file; else sheets/study-N.html.", show_default=False)
    ] = None,
    charts: Annotated[
        bool, typer.Option("--charts", help="Write each chart as SVG, PNG, PDF and Vega-Lite JSON too.")
    ] = False,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Write the self-contained HTML sheet of a finished study, and its charts for attaching to a drawing."""
    from catalog.store import Catalog
    from study.dossier import load_dossier
    from study.handout import write_charts, write_sheet

    dossier = load_dossier(Catalog(catalog), study)
    path = write_sheet(dossier, out or Path("sheets") / f"study-{study}.html")
    files = write_charts(dossier, path.with_suffix("") / "charts") if charts else []
    if as_json:
        print_json({"study": study, "sheet": str(path), "charts": [str(f) for f in files]})
        return
    print(f"sheet: {path}")
    if files:
        print(f"charts: {len(files)} files in {files[0].parent}")
