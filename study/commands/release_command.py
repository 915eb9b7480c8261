"""`release`: freeze the tolerances of one drawing, print its note, export its folder."""

from pathlib import Path
from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, by_whom, clean, print_json

Texts = list[str] | None
_EACH = " TEXT for every feature, FEATURE=TEXT for one; may be given again."


def run(
    study: Annotated[int, typer.Argument(help="A finished study's number.")],
    drawing: Annotated[str, typer.Option(help="The drawing number.")],
    issue: Annotated[str, typer.Option(help="The issue of the drawing, such as B.")],
    part: Annotated[str | None, typer.Option(help="The part that the drawing is of, such as chassis.", show_default=False)] = None,
    by: Annotated[str | None, typer.Option(help="Who releases; else the login name.", show_default=False)] = None,
    reason: Annotated[Texts, typer.Option(help="Why." + _EACH, show_default=False)] = None,
    condition: Annotated[Texts, typer.Option(help='Condition in which it holds, such as "welded, unpainted".' + _EACH, show_default=False)] = None,
    check: Annotated[Texts, typer.Option(help="How it is checked." + _EACH, show_default=False)] = None,
    datums: Annotated[Texts, typer.Option(help="Datums such as A|B|C; else those of the geometry file." + _EACH, show_default=False)] = None,
    out: Annotated[Path | None, typer.Option(help="Folder of its files; else releases/DRAWING-ISSUE.", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Release a drawing's tolerances: kept for good with charts and study, printed as a note, exported as a folder."""
    from catalog.store import Catalog
    from study.dossier import load_dossier
    from study.release_rows import Said, checked_part
    from study.release_words import number_text

    drawing, issue = number_text("--drawing", drawing), number_text("--issue", issue)
    name = _name(by)
    store = Catalog(catalog)
    dossier = load_dossier(store, study)
    part = checked_part(dossier, part)
    said = Said(datums=datums or (), condition=condition or (), checked=check or (), reason=reason or ())
    folder = out or _default_folder(drawing, issue)
    release, rows, files = _released(store, dossier, folder, {"drawing": drawing, "issue": issue, "part": part, "by": name}, said, quiet=as_json)
    _write(release, folder, files)
    if as_json:
        print_json(_contract(release, rows, folder, files))
        return
    print(files["note.txt"].decode(), end="")
    print(f"\nreleased: {clean(release.label)}, {len(rows)} features, release {release.id}")
    print(f"folder: {clean(folder)}, {len(files)} files   (`{_again(release)}` writes it again)")


def _name(by):
    from study.release_words import ReleaseTextError, number_text

    name = by_whom(by)
    if name == "unknown" and not by:
        raise ReleaseTextError("--by: no login name is known; a release needs the name of the one who answers for it")
    return number_text("--by", name)


def _default_folder(drawing, issue):
    from study.release_folder import default_folder

    return default_folder(drawing, issue)


def _released(store, dossier, folder, named, said, *, quiet):
    """(the release as it is kept, its rows, its files). Everything that can be refused is refused before the charts."""
    from catalog import queue, release_files, releases, revisions
    from catalog.rows import now
    from study.release_folder import check_folder
    from study.release_rows import Head, draft
    from study.runner import program_version

    number, version = dossier.study["id"], program_version()
    with store.read() as con:
        releases.refuse_taken(con, named["drawing"], named["issue"], part=named["part"])
        job, old = queue.get(con, number), releases.current(con, named["drawing"])
        newest = revisions.find(con, job.geometry.rpartition("@")[0]).spec
        charted = release_files.of_study(con, number, version=version, under="charts/")
    check_folder(folder)
    head = Head(
        **named, created=now(), revision_id=job.revision_id, result_hash=job.result_hash, newest=newest, version=version,
        supersedes=old and old.id, supersedes_issue=old and old.issue, supersedes_hash=old and old.record_hash,
    )  # fmt: skip
    record, rows = draft(dossier, head, said)
    shown = record | {"record_hash": releases.record_hash(record, rows)}
    files = _contents(dossier, shown, rows, charted or _charts(dossier, quiet=quiet))
    files[release_files.MANIFEST] = release_files.manifest_of(files)
    with store.write() as con:
        return releases.freeze(con, record, rows, files), rows, files


def _contents(dossier, record, rows, charted):
    from study.release_contents import contents

    return contents(dossier, record, rows, charted)


def _charts(dossier, *, quiet):
    """The charts, with a bar and the time left where there is a terminal."""
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    from study.release_contents import charts

    console = Console(stderr=True)
    columns = (TextColumn("charts"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=console, disable=quiet or not console.is_terminal, transient=True) as bar:
        row = bar.add_task("charts", total=None)
        return charts(dossier, progress=lambda done, total: bar.update(row, completed=done, total=total))


def _again(release):
    import shlex

    return clean(f"holdtight releases {shlex.quote(release.drawing)} --issue {shlex.quote(release.issue)} --out FOLDER")


def _write(release, folder, files):
    from study.release_folder import FolderNotWritten, FolderTaken, write_folder

    try:
        write_folder(folder, files)
    except (FolderNotWritten, FolderTaken) as error:
        raise FolderNotWritten(
            f"{clean(error)}\n{clean(release.label)} is released and kept all the same; `{_again(release)}` writes its folder"
        ) from None


def _contract(release, rows, folder, files):
    from catalog.releases import summary

    return summary(release) | {"rows": rows, "folder": str(folder), "files": sorted(files)}
