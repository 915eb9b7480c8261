"""`run`: the main job in one go."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import WORKER_WAIT_S, CatalogOption, JsonOption, by_whom, clean, default_threads, print_json


def run(
    study: Annotated[Path, typer.Argument(help="A study file.")],
    threads: Annotated[int, typer.Option(help="How many tasks at a time; 0 takes one a core.", min=0, max=256)] = 0,
    sheet: Annotated[
        Path | None, typer.Option(help="The sheet's file; else sheets/study-N.html.", show_default=False)
    ] = None,
    by: Annotated[str | None, typer.Option(help="Who asks; else the login name.", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Add the geometry, queue and work the study, print the ranking, write the sheet."""
    from study.crew import Crew, worth_starting

    with Crew((threads or default_threads()) - 1) as crew:
        crew.start(worth_starting(study))  # helpers get ready while this process does
        from catalog.store import Catalog
        from study.commands.work_command import progress_watch, stop_on_signals
        from study.runner import enqueue, read_asked, work
        from study.sheet_library import prepare

        prepare()
        store = Catalog(catalog, wait_s=WORKER_WAIT_S)
        number = enqueue(store, read_asked(store, study), study.parent, by=by_whom(by))
        with progress_watch(quiet=as_json) as watch, stop_on_signals(watch):
            finished = work(store, crew=crew, watch=watch, study_id=number)
    if number not in finished:
        print(f"study {number} was stopped; what is finished is kept, `holdtight work` goes on with it")
        raise typer.Exit(1)
    from study.commands.ranking_tables import print_ranking
    from study.dossier import load_dossier
    from study.handout import write_sheet

    dossier = load_dossier(store, number)
    path = sheet or Path("sheets") / f"study-{number}.html"
    if as_json:
        write_sheet(dossier, path)
        facts = {key: dossier.study[key] for key in ("geometry", "builds", "good_share")}
        print_json({"study": number, **facts, "sheet": str(path)})
        return
    print_ranking(dossier)
    write_sheet(dossier, path)
    print(f"sheet: {clean(path)}   (`holdtight sheet {number} --charts` writes its charts as SVG, PNG, PDF and Vega-Lite JSON)")
