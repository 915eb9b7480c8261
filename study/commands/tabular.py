"""Query results as JSON or CSV, with cells that neither a terminal nor a spreadsheet takes for an order."""

import math
import re
from collections.abc import Iterable, Sequence
from typing import Any

from study.commands.common import clean

FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r")
_LINE_ENDS = re.compile(r"\r\n|\r")


def unique(names: Sequence[str]) -> list[str]:
    """Column names, a repeated one numbered: a, a_2, a_3."""
    out: list[str] = []
    for name in names:
        again, number = name, 1
        while again in out:
            number += 1
            again = f"{name}_{number}"
        out.append(again)
    return out


def json_value(value: Any) -> Any:
    """A database value as JSON knows it; numbers that are not finite are null, times ISO text, bytes hex."""
    if value is None or isinstance(value, bool | int | str):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, dict):
        return {str(key): json_value(inner) for key, inner in value.items()}
    if isinstance(value, list | tuple | set):
        return [json_value(inner) for inner in value]
    if isinstance(value, bytes | bytearray):
        return value.hex()
    return value.isoformat() if hasattr(value, "isoformat") else str(value)


def csv_cell(value: Any) -> str:
    """A cell: text that a spreadsheet would take for a formula gets a ' in front, control characters are replaced."""
    if value is None:
        return ""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        return repr(value)
    if isinstance(value, dict | list | tuple):
        import json

        return csv_cell(json.dumps(json_value(value), ensure_ascii=False))
    text = value if isinstance(value, str) else str(json_value(value))
    guard = "'" if text.startswith(FORMULA_STARTS) else ""
    return guard + clean(_LINE_ENDS.sub("\n", text))


def write_csv(file, names: Sequence[str], rows: Iterable[Sequence[Any]]) -> int:
    """A header and the rows to an open text file; gives the number of rows."""
    import csv

    writer, count = csv.writer(file, lineterminator="\n"), 0
    writer.writerow([csv_cell(name) for name in unique(names)])
    for row in rows:
        writer.writerow([csv_cell(value) for value in row])
        count += 1
    return count
