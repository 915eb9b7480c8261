"""`export`: a public view as a CSV or Parquet file."""

import os
import uuid
from pathlib import Path
from typing import Annotated

import typer

from catalog.errors import InputError, WorkError
from study.commands.common import CatalogOption, JsonOption, clean, print_json
from study.commands.tabular import write_csv


class ExportError(InputError):
    """A view or a file that cannot be exported."""


class ExportFailed(WorkError):
    """The file could not be written."""


FORMS = (".csv", ".parquet")
AT_ONCE = 10_000


def run(
    view: Annotated[str, typer.Argument(help="A public view; `holdtight sql` lists them.")],
    out: Annotated[Path, typer.Option(help="The file to write, .csv or .parquet; one that is there is replaced.")],
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Write a public view of the catalog to a CSV or Parquet file, whole or not at all."""
    from catalog.store import Catalog

    store = Catalog(catalog)
    _check_path(out, store.path)
    with store.read() as con:
        known = {name for (name,) in con.execute(_VIEWS).fetchall()}
        if view not in known:
            from study.patterns import near

            raise ExportError(f'export "{clean(view)}": is no public view; {near(view, sorted(known))}')
        count = _write(con, view, out)
    if as_json:
        print_json({"view": view, "file": str(out), "rows": count})
    else:
        print(f"{view}: {count} row{'' if count == 1 else 's'} in {clean(out)}")


_VIEWS = "SELECT view_name FROM duckdb_views() WHERE NOT internal AND schema_name = 'main'"


def _check_path(out, catalog):
    if out.suffix.lower() not in FORMS:
        raise ExportError(f"--out {clean(out)}: the file's name must end in .csv or .parquet")
    if out.is_dir():
        raise ExportError(f"--out {clean(out)}: is a folder; name a file in it")
    if not out.parent.is_dir():
        raise ExportError(f"--out {clean(out)}: the folder {clean(out.parent)} does not exist; make it first")
    if out.exists() and catalog.exists() and out.samefile(catalog):
        raise ExportError(f"--out {clean(out)}: is the catalog itself; name another file")


def _write(con, view, out):
    """Beside the file first, then in its place, so that what stands there is always whole."""
    target = out.resolve()
    part = target.with_name(f".{uuid.uuid4().hex}.part")
    try:
        count = (_csv if out.suffix.lower() == ".csv" else _parquet)(con, view, part)
        os.replace(part, target)
    except OSError as problem:
        raise ExportFailed(f"{clean(out)}: cannot be written ({problem.strerror}); make room or choose another place") from None
    finally:
        part.unlink(missing_ok=True)
    return count


def _csv(con, view, path):
    found = con.execute(f'FROM "{view}"')
    names = [column[0] for column in found.description]

    def rows():
        while some := found.fetchmany(AT_ONCE):
            yield from some

    with path.open("w", encoding="utf-8", newline="") as file:
        return write_csv(file, names, rows())


def _parquet(con, view, path):
    path.touch(exist_ok=False)  # a folder that may not be written shows here, in words of the system
    place = str(path).replace("'", "''")
    return con.execute(f"COPY (FROM \"{view}\") TO '{place}' (FORMAT parquet)").fetchone()[0]
