"""Many rows into a table at once, from plain Python values."""

import json
import math
from collections.abc import Mapping, Sequence
from datetime import UTC, datetime
from functools import lru_cache
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from duckdb import DuckDBPyConnection

_FLOATS, _WHOLE = ("DOUBLE",), ("INTEGER", "BIGINT", "SMALLINT")


def now() -> datetime:
    """The time in UTC, as the catalog keeps it."""
    return datetime.now(UTC).replace(tzinfo=None)


def column_types(con: "DuckDBPyConnection", table: str) -> dict[str, str]:
    """Column names and types of a table of schema kept, in order."""
    found = con.execute(
        "SELECT column_name, data_type FROM duckdb_columns()"
        " WHERE schema_name = 'kept' AND table_name = ? ORDER BY column_index",
        [table],
    )
    return dict(found.fetchall())


def insert_rows(con: "DuckDBPyConnection", table: str, rows: Sequence[Mapping[str, Any]]) -> None:
    """Append rows to a table of schema kept; what a row does not give is NULL. NaN becomes NULL.

    Raises KeyError when a row has a key that is no column of the table.
    """
    if not rows:
        return
    types = column_types(con, table)
    unknown = sorted({key for row in rows for key in row} - set(types))
    if unknown:
        raise KeyError(f"table {table} has no column {', '.join(unknown)}; it has {', '.join(types)}")
    arrays = {
        f"c{i}": _array([row.get(name) for row in rows], kind) for i, (name, kind) in enumerate(types.items())
    }
    chosen = ", ".join(_cast(f"c{i}", kind) for i, kind in enumerate(types.values()))
    con.register("rows_in", arrays)
    try:
        con.execute(f"INSERT INTO kept.{table} SELECT {chosen} FROM rows_in")
    finally:
        con.unregister("rows_in")


def fetch_rows(con: "DuckDBPyConnection", query: str, parameters: Sequence[Any] = ()) -> list[dict[str, Any]]:
    """The rows of a query as dicts."""
    found = con.execute(query, list(parameters))
    names = [column[0] for column in found.description]
    return [dict(zip(names, row, strict=True)) for row in found.fetchall()]


def unit_of(key: str) -> str:
    """Unit of a measure from the end of its key; "1" for a plain ratio."""
    return _unit_of(key)


@lru_cache(maxsize=1024)
def _unit_of(key: str) -> str:
    units = {
        "_deg_per_mm": "deg/mm",
        "_mm_per_mm": "mm/mm",
        "_deg_per_deg": "deg/deg",
        "_per_m": "1/m",
        "_mm": "mm",
        "_deg": "deg",
        "_pct": "%",
    }
    return next((unit for end, unit in units.items() if key.endswith(end)), "1")


def plain(value: Any) -> Any:
    """A value as JSON knows it: no NumPy, no tuples, None for what is not finite."""
    if isinstance(value, Mapping):
        return {str(key): plain(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple):
        return [plain(inner) for inner in value]
    if hasattr(value, "tolist"):
        return plain(value.tolist())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def _array(values: list, kind: str) -> Any:
    import numpy as np

    if kind in _FLOATS:
        return np.array([np.nan if value is None else value for value in values], dtype=float)
    if kind in _WHOLE and None not in values:
        return np.array(values, dtype=np.int64)
    return np.array([_text(value, kind) for value in values] + [None], dtype=object)[:-1]


def _text(value: Any, kind: str) -> Any:
    """A value as text that the database casts back; None stays."""
    if value is None:
        return None
    if kind.endswith("[]") or kind == "JSON":
        return json.dumps(plain(value), ensure_ascii=False, allow_nan=False)
    if kind == "BOOLEAN":
        return "true" if value else "false"
    return str(value)


def _cast(name: str, kind: str) -> str:
    if kind.endswith("[]"):
        return f"from_json({name}, '[\"{kind[:-2]}\"]')"
    return f"CAST({name} AS {kind})"
