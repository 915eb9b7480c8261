"""`geometries`: what the catalog holds."""

from study.commands.common import CatalogOption, JsonOption, print_json, print_table


def run(as_json: JsonOption = False, catalog: CatalogOption = None) -> None:
    """List the geometries of the catalog with their revisions."""
    from catalog import revisions
    from catalog.store import Catalog

    with Catalog(catalog).read() as con:
        found = revisions.list_revisions(con)
    if as_json:
        print_json([_plain(r) for r in found])
        return
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
