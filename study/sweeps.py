"""Sweeps of a geometry along one input, with the band of a study's builds where one is named, or over two inputs.

Positions are (bump mm, roll degrees, rack mm). Rows are those of a result table `curves`, as charts take them.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace

from catalog.errors import InputError
from study.measures import KEYS

MOST_POSITIONS, MOST_CELLS = 1001, 1600
UNITS = {"bump": "mm", "roll": "°", "rack": "mm"}


class SweepError(InputError):
    """A sweep that cannot be made."""


@dataclass(frozen=True)
class Travel:
    """One input and the positions it takes, evenly spaced."""

    name: str
    at: tuple[float, ...]

    @classmethod
    def of(cls, name: str, *, start: float, stop: float, count: int, option: str = "positions") -> "Travel":
        """`count` positions from start to stop. Raises SweepError."""
        if not 2 <= count <= MOST_POSITIONS:
            raise SweepError(f"--{option} {count}: give 2 to {MOST_POSITIONS}")
        if start == stop:
            raise SweepError(f"{name} from {start:g} to {stop:g}: the ends are the same; give two that differ")
        return cls(name, tuple(start + (stop - start) * i / (count - 1) for i in range(count)))


@dataclass(frozen=True)
class Asked:
    """What is swept, and what is asked along it. held: the inputs that stay, by name; sides: of measures of one wheel."""

    over: Travel
    held: Mapping[str, float]
    keys: tuple[str, ...]
    sides: tuple[str, ...]

    def spot(self, x: float) -> tuple[float, float, float]:
        at = {**self.held, self.over.name: x}
        return at["bump"], at["roll"], at["rack"]

    def held_text(self) -> str:
        """The inputs held away from zero, in words; empty when there is none."""
        kept = [(name, value) for name, value in self.held.items() if value and name != self.over.name]
        return ", ".join(f"{name} {value:g}{'' if name == 'roll' else ' '}{UNITS[name]}" for name, value in kept)


def nominal_rows(geometry, asked: Asked) -> list[dict]:
    """Rows of the drawing's own curves, without a band. Raises PositionError."""
    from study.nominal import sweep

    found = sweep(geometry, [asked.spot(x) for x in asked.over.at], asked.keys)
    rows = []
    for key in asked.keys:
        for side in ("axle",) if key in found[0]["axle"] else asked.sides:
            rows += [
                {"axis": asked.over.name, "x": x, "key": key, "unit": KEYS[key].unit, "side": side}
                | {"nominal": values[side][key]}
                for x, values in zip(asked.over.at, found, strict=True)
            ]
    return rows


def banded_rows(geometry, study, asked: Asked, *, stage: str, count: int) -> list[dict]:
    """Rows with the quantiles of `count` builds of a study at its last stage. Raises PositionError."""
    from study.bands import builds_along, curve_rows, swept
    from study.response import Response

    solid, measures = geometry.linkage == "solid-axle", []
    for key in asked.keys:
        of_axle = KEYS[key].scope_on(solid) == "axle"
        for side in ("left",) if of_axle else asked.sides:
            measures.append(swept(key, side=side, over=asked.over.name, positions=asked.over.at, held=asked.held))
    car = Response(geometry, replace(study, measures=()), stage=stage).asking(measures)
    found = builds_along(car, seed=study.seed, count=count)
    return curve_rows(measures, found.positions, stage=stage, solid=solid)


def line(rows: Sequence[Mapping], key: str, side: str) -> list[Mapping]:
    """The rows of one measure in the order of the sweep: of that side, or of the axle."""
    return [row for row in rows if row["key"] == key and row["side"] in (side, "axle")]


def grid(geometry, asked: Asked, against: Travel) -> dict[str, list[list[float | None]]]:
    """Of each measure the values at every position of `asked.over` (rows) and `against` (columns).

    Measures of one wheel are those of the first side asked for. Raises SweepError, PositionError.
    """
    from study.nominal import sweep

    if len(asked.over.at) * len(against.at) > MOST_CELLS:
        raise SweepError(
            f"{len(asked.over.at)} × {len(against.at)} positions: a map takes at most {MOST_CELLS}; give fewer "
            "--positions or --against-positions"
        )
    spots = [
        Asked(asked.over, {**asked.held, against.name: y}, asked.keys, asked.sides).spot(x)
        for x in asked.over.at
        for y in against.at
    ]
    found, wide = sweep(geometry, spots, asked.keys), len(against.at)
    side = {key: "axle" if key in found[0]["axle"] else asked.sides[0] for key in asked.keys}
    return {
        key: [[values[side[key]][key] for values in found[i : i + wide]] for i in range(0, len(found), wide)]
        for key in asked.keys
    }


def map_note(asked: Asked, against: Travel, key: str) -> str:
    """Which side a map shows and what is held meanwhile, to stand behind its title."""
    held = replace(asked, held={n: v for n, v in asked.held.items() if n != against.name}).held_text()
    side = f", {asked.sides[0]} side" if KEYS[key].scope == "side" else ""
    return side + (f", {held} held" if held else "")
