"""`releases`: list, show, compare and hand out again what was released."""

from pathlib import Path
from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import CatalogOption, JsonOption, clean, print_json, print_table


class ReleasesError(InputError):
    """Options that do not go together."""


def run(
    drawing: Annotated[str | None, typer.Argument(help="A drawing number; without it, all releases.")] = None,
    issue: Annotated[str | None, typer.Option(help="One issue: its note.", show_default=False)] = None,
    compare: Annotated[tuple[str, str] | None, typer.Option(help="Two issues: what was opened, what closed, and why.", show_default=False)] = None,
    out: Annotated[Path | None, typer.Option(help="Folder to write an issue's files to again (the newest, or --issue).", show_default=False)] = None,
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """List releases and say which are superseded or stale; show, compare and hand out again those of one drawing."""
    from catalog.store import Catalog

    if drawing is None and (issue, compare, out) != (None, None, None):
        raise ReleasesError("--issue, --compare and --out need a drawing number: `holdtight releases NO --issue B`")
    if compare and (issue or out):
        raise ReleasesError("--compare shows two issues; leave out --issue and --out, or ask for them by themselves")
    store = Catalog(catalog)
    if drawing is None:
        _list(store, as_json)
    elif compare:
        _compare(store, drawing, *compare, as_json)
    elif out:
        _hand_out(store, drawing, issue, out, as_json)
    else:
        _show(store, drawing, issue, as_json)


def state_of(release) -> str:
    """current, or which issue took its place; and whether its geometry went on."""
    state = f"superseded by {release.superseded_by}" if release.superseded_by else "current"
    return state + (f", stale: {release.newest} is there" if release.stale else "")


COLUMNS = [
    ("drawing", "left"), ("issue", "left"), ("part", "left"), ("geometry", "left"), ("study", "right"), ("features", "right"),
    ("by", "left"), ("date", "left"), ("state", "left"),
]  # fmt: skip


def _cells(release, state):
    return [
        release.drawing, release.issue, release.part, release.geometry, str(release.study_id), str(release.n_rows), release.by,
        f"{release.created:%Y-%m-%d}", state,
    ]  # fmt: skip


def _list(store, as_json):
    from catalog import releases

    with store.read() as con:
        found = [(release, releases.altered(con, release)) for release in releases.list_releases(con)]
    if as_json:
        print_json([releases.summary(release) | {"altered": altered} for release, altered in found])
        return
    rows = [_cells(r, "ALTERED since it was released; restore a copy" if altered else state_of(r)) for r, altered in found]
    print_table("releases", COLUMNS, rows, caption=_stale_caption([r for r, _ in found]))


def _stale_caption(found):
    stale = [release for release in found if release.stale and not release.superseded_by]
    if not stale:
        return None
    return "stale: the geometry has a newer revision than the one that was studied; queue its study again and release the next issue"


def _show(store, drawing, issue, as_json):
    from catalog import releases

    with store.read() as con:
        found = [releases.find(con, drawing, issue)] if issue else releases.issues(con, drawing)
        rows = {release.id: releases.load_rows(con, release) for release in found}
        moved = {release.id: releases.moved_points(con, release) for release in found if release.stale}
    if as_json:
        issues = [releases.summary(r) | {"moved_mm": moved.get(r.id, {}), "rows": rows[r.id]} for r in found]
        print_json(issues[0] if issue else {"drawing": found[0].drawing, "part": found[0].part, "issues": issues})
        return
    if not issue:
        title = f"{found[0].drawing}: {found[0].part}"
        print_table(title, [*COLUMNS[:2], *COLUMNS[3:], ("reason", "left")], [[*_without_part(r), r.reason or "–"] for r in found])
    newest = found[-1]
    _print_note(newest, rows[newest.id])
    _print_stale(newest, moved.get(newest.id, {}))


def _without_part(release):
    cells = _cells(release, state_of(release))
    return cells[:2] + cells[3:]


def _print_note(release, rows):
    from dataclasses import asdict

    from study.release_note import note

    record = {name: value for name, value in asdict(release).items() if name != "by"} | {"by_whom": release.by}
    print(note(record, rows), end="")


def _print_stale(release, moved):
    print(f"\n{clean(release.label)}: {clean(state_of(release))}")
    if release.stale:
        points = ", ".join(f"{name.replace('_', ' ')} {distance:.3g} mm" for name, distance in moved.items())
        print(clean(f"points that moved since: {points or 'none'}"))


def _hand_out(store, drawing, issue, folder, as_json):
    from catalog import releases
    from study.release_folder import write_folder

    with store.read() as con:
        release = releases.find(con, drawing, issue)
        files = releases.load_files(con, release)
    write_folder(folder, files)
    if as_json:
        print_json(releases.summary(release) | {"folder": str(folder), "files": sorted(files)})
        return
    print(f"{clean(release.label)}: {len(files)} files in {clean(folder)}, byte for byte as released; {clean(state_of(release))}")


def _compare(store, drawing, first, second, as_json):
    from catalog import releases
    from study.release_compare import CHANGES, compare

    with store.read() as con:
        pair = [releases.find(con, drawing, issue) for issue in (first, second)]
        before, after = (releases.load_rows(con, release) for release in pair)
    rows = compare(before, after)
    counts = {change: sum(row["change"] == change for row in rows) for change in CHANGES}
    if as_json:
        said = {"drawing": pair[0].drawing, "part": pair[0].part, "from": releases.summary(pair[0]), "to": releases.summary(pair[1])}
        print_json(said | {"counts": counts, "rows": rows})
        return
    _print_comparison(pair, rows, counts)


def _print_comparison(pair, rows, counts):
    for word, release in zip(("from", "to"), pair, strict=True):
        print(clean(f"{word} {release.label}: {release.by}, {release.created:%Y-%m-%d}; study {release.study_id} of {release.geometry}{_good(release)}"))
    columns = [("feature", "left"), ("", "left"), ("was", "left"), ("is", "left"), ("why", "left")]
    lines = [
        [row["name"], _change(row), *((row[end] or {}).get("callout", "–") for end in ("before", "after")), row["why"] or "–"]
        for row in rows
    ]  # fmt: skip
    summed = ", ".join(f"{count} {change}" for change, count in counts.items() if count)
    print_table(f"\n{pair[0].drawing}: {pair[0].part}", columns, lines, caption=summed)
    for name, texts in _also(rows):
        print(clean(f"{name}: {'; '.join(texts)}"))


def _also(rows):
    """(feature or "every feature", what else changed of it), what all share said once."""
    both = [row["also"] for row in rows if row["before"] and row["after"]]
    shared = [text for text in both[0] if all(text in also for also in both)] if len(both) > 1 else []
    found = [("every feature", shared)] + [(row["name"], [t for t in row["also"] if t not in shared]) for row in rows]
    return [(name, texts) for name, texts in found if texts]


def _change(row):
    return row["change"] + (f" ×{row['factor']:.3g}" if row["factor"] and row["change"] in ("opened", "closed") else "")


def _good(release):
    share = release.facts["good_share"]
    return "" if share is None else f"; {100 * share:.1f} % of builds good"
