"""`check`: whether a catalog is still what was put into it."""

from dataclasses import asdict

import typer

from study.commands.common import CatalogOption, JsonOption, clean, print_json

MOST = 50


def run(as_json: JsonOption = False, catalog: CatalogOption = None) -> None:
    """Compare everything in the catalog with the hashes it was kept with; exit code 1 where something is wrong."""
    from catalog.keeping import check
    from catalog.store import Catalog

    store = Catalog(catalog)
    report = check(store)
    if as_json:
        print_json({"catalog": str(store.path), "sound": not report.wrong, **asdict(report)})
    else:
        _print(report)
    if report.wrong:
        raise typer.Exit(1)


def _print(report) -> None:
    counts = ", ".join(f"{count} {what}" for what, count in report.checked.items())
    print(f"checked: schema version {report.schema_version}, {counts}")
    for finding in report.wrong[:MOST]:
        print(clean(f"wrong: {finding.what}: {finding.name}: {finding.problem}"))
    if len(report.wrong) > MOST:
        print(f"and {len(report.wrong) - MOST} more; --json prints all")
    print(f"{len(report.wrong)} wrong; restore a backup" if report.wrong else "nothing is wrong")
