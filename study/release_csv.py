"""The released tolerances as a CSV table: UTF-8 with a byte-order mark, so that spreadsheets read ⌖ and ± right."""

import csv
import io
from collections.abc import Mapping, Sequence

from study.release_note import words

ABOUT = ("drawing", "issue", "part")
COLUMNS = (
    "no", *ABOUT, "feature", "name", "shop_name", "x_mm", "y_mm", "z_mm", "right_x_mm", "right_y_mm", "right_z_mm",
    "length_mm", "right_length_mm", "tolerance", "zone", "diameter_mm", "plus_minus_x", "plus_minus_y", "plus_minus_z",
    "plus_minus_mm", "tilt_deg", "datums", "distribution", "process", "condition", "checked", "verdict", "figures",
    "remark", "reason", "by", "released_utc", "geometry", "study", "record_sha256",
)  # fmt: skip
_STARTS_FORMULA = tuple("=+-@\t\r")


def table_csv(record: Mapping, rows: Sequence[Mapping]) -> bytes:
    """The table as a file. A text that a spreadsheet would take for a formula has an apostrophe in front."""
    out = io.StringIO()
    writer = csv.DictWriter(out, COLUMNS, restval="", lineterminator="\r\n")
    writer.writeheader()
    for cells in (*(_row(record, row) for row in rows), *(_uncovered(record, name) for name in record["uncovered"])):
        writer.writerow({name: _inert(value) for name, value in cells.items() if value is not None})
    return out.getvalue().encode("utf-8-sig")


def _row(record, row):
    kept = {name: row[name] for name in COLUMNS if name in row}
    return _about(record) | kept | {"no": row["place"], "tolerance": row["callout"]} | _sizes(row)


def _about(record):
    about = {name: record[name] for name in ABOUT}
    about |= {"by": record["by_whom"], "released_utc": f"{record['created']:%Y-%m-%d %H:%M:%S}"}
    return about | {"geometry": record["geometry"], "study": record["study_id"], "record_sha256": record["record_hash"]}


def _uncovered(record, name):
    remark = "not covered by the study: held perfect in it, no tolerance is released"
    return _about(record) | {"feature": name, "name": words(name.partition(".")[2]), "remark": remark}


def _sizes(row):
    """Half widths and diameters as numbers (mm; the turn of a jig in degrees, as its zone says)."""
    half = row["half"]
    if row["form"] == "ball":
        return {"diameter_mm": 2 * half[0]}
    if row["form"] == "cylinder":
        return {"diameter_mm": 2 * half[0], "plus_minus_mm": half[1]}
    if row["form"] == "length":
        return {"plus_minus_mm": half[0]}
    if row["form"] == "tilt":
        return {"tilt_deg": half[0]}
    return {f"plus_minus_{axis}": value for axis, value in zip("xyz", half, strict=True)}


def _inert(value):
    if isinstance(value, float):
        return f"{value:.10g}"
    return f"'{value}" if isinstance(value, str) and value.lstrip().startswith(_STARTS_FORMULA) else value
