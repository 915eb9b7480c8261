"""Reading the result tables: which stage is shown, in which order, by which number. Dict rows in and out."""

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from study.charts.words import finite, measure_name, percent, quantity

STAGES = ("before", "after")
Tables = Mapping[str, list[dict]]


@dataclass(frozen=True, slots=True)
class Basis:
    """The number by which sources are ranked: a share of variance, or the mean effect of a screening."""

    field: str
    low: str | None
    high: str | None
    title: str
    is_share: bool


BASES = (
    Basis("st", "st_low", "st_high", "share of variance, total (ST)", True),
    Basis("linear_share", None, None, "share of variance, linear", True),
    Basis("mu_star", "mu_star_low", "mu_star_high", "mean absolute effect µ*", False),
)


def plain(value):
    """Numbers of any kind as plain JSON values: NaN and infinities become None, arrays lists."""
    if isinstance(value, Mapping):
        return {str(key): plain(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [plain(item) for item in value]
    if hasattr(value, "tolist"):
        return plain(value.tolist())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def stages(rows: Iterable[Mapping]) -> list[str]:
    """The stages that stand in the rows, in the order before, after."""
    present = {row.get("stage") for row in rows}
    return [stage for stage in STAGES if stage in present]


def last_stage(tables: Tables) -> str:
    """`after` where anything was aligned, else `before`."""
    found = stages([*tables.get("ranking", []), *tables.get("stats", [])])
    return found[-1] if found else "before"


def measures(tables: Tables) -> list[dict]:
    """One row per measure, in number order: measure_no, measure, of, unit, name (for people), place (1, 2,
    …)."""
    found: dict[int, dict] = {}
    for row in [*tables.get("stats", []), *tables.get("ranking", [])]:
        number = row.get("measure_no")
        if number is None or number in found:
            continue
        head = {key: row.get(key) for key in ("measure_no", "measure", "of", "unit")}
        found[number] = head | {"name": measure_name(row)}
    return [found[number] | {"place": place} for place, number in enumerate(sorted(found), start=1)]


def basis_of(rows: list[dict]) -> Basis | None:
    """The best number that the rows carry."""
    for basis in BASES:
        if any(finite(row.get(basis.field)) is not None for row in rows):
            return basis
    return None


def ranked(tables: Tables, measure_no: int, stage: str) -> list[dict]:
    """The ranking rows of one measure and stage, strongest first."""
    rows = [
        r for r in tables.get("ranking", []) if r.get("measure_no") == measure_no and r.get("stage") == stage
    ]
    basis = basis_of(rows)
    if basis is None:
        return []

    def order(row: dict) -> tuple:
        rank = finite(row.get("rank"))
        return (math.inf if rank is None else rank, -(finite(row.get(basis.field)) or 0.0))

    return sorted((row for row in rows if finite(row.get(basis.field)) is not None), key=order)


def strength_text(row: Mapping, basis: Basis) -> str:
    """The ranked number as text: `41 %`, or a screening's mean effect with the measure's unit."""
    value = row.get(basis.field)
    return percent(value) if basis.is_share else quantity(value, row.get("unit"), 2)


def relative(rows: list[dict], basis: Basis) -> dict[str, float]:
    """Source to strength between 0 and 1: the share itself, or the mean effect over the sum of them all."""
    values = {row["source"]: max(finite(row.get(basis.field)) or 0.0, 0.0) for row in rows}
    total = 1.0 if basis.is_share else sum(values.values()) or 1.0
    return {source: min(value / total, 1.0) for source, value in values.items()}


def stat(tables: Tables, measure_no: int, stage: str) -> dict | None:
    """The statistics row of one measure and stage."""
    for row in tables.get("stats", []):
        if row.get("measure_no") == measure_no and row.get("stage") == stage:
            return row
    return None


def greatest(tables: Tables, stage: str) -> dict[str, dict]:
    """For each source the measure that it governs most: source to {value, text, measure, measure_no, row}."""
    best: dict[str, dict] = {}
    for head in measures(tables):
        rows = ranked(tables, head["measure_no"], stage)
        basis = basis_of(rows)
        if basis is None:
            continue
        values = relative(rows, basis)
        for row in rows:
            value = values[row["source"]]
            if row["source"] not in best or value > best[row["source"]]["value"]:
                best[row["source"]] = {
                    "value": value,
                    "text": strength_text(row, basis),
                    "row": row,
                    "measure": head["name"],
                    "measure_no": head["measure_no"],
                }
    return dict(sorted(best.items(), key=lambda item: -item[1]["value"]))
