"""Callouts beside a drawing: labels in columns with leader lines that neither cross nor overlap. Pixels."""

from dataclasses import dataclass

LINE_PX = 12
CHAR_PX = 5.5


@dataclass(frozen=True, slots=True)
class Spot:
    """A marker that wants a label of one or two lines."""

    name: str
    x: float
    y: float
    lines: tuple[str, ...]

    @property
    def width(self) -> float:
        return CHAR_PX * max(len(line) for line in self.lines)

    @property
    def height(self) -> float:
        return LINE_PX * len(self.lines) + 6


@dataclass(frozen=True, slots=True)
class Callout:
    """Where a label's middle stands, how it is aligned, and its leader from the marker to the label."""

    spot: Spot
    x: float
    y: float
    align: str

    def leader(self) -> list[tuple[float, float]]:
        inward = 4 if self.align == "right" else -4
        return [(self.spot.x, self.spot.y), (self.x + inward, self.y)]


def place(
    spots: list[Spot],
    *,
    width: float,
    height: float,
    left_edge: float,
    right_edge: float,
    left_height: float | None = None,
) -> list[Callout]:
    """Labels in a column that ends at `left_edge` and one that begins at `right_edge`, inside the drawing.

    Each spot goes to the nearer column; the columns are then evened out so that both fit the height.
    `left_height`: where the left column should end so that it covers nothing below, if it can.
    """
    left, right = _share_out(spots, left_edge, right_edge, height)
    kept = left_height if left_height and sum(spot.height for spot in left) <= left_height - 8 else height
    return [
        *_column(left, edge=left_edge, align="right", height=kept, width=width),
        *_column(right, edge=right_edge, align="left", height=height, width=width),
    ]


def _share_out(spots: list[Spot], left_edge: float, right_edge: float, height: float) -> tuple[list, list]:
    middle = (left_edge + right_edge) / 2
    ordered = sorted(spots, key=lambda spot: spot.x)
    cut = sum(spot.x <= middle for spot in ordered)
    room = height - 8

    def tall(part: list[Spot]) -> float:
        return sum(spot.height for spot in part)

    while cut and tall(ordered[:cut]) > room and tall(ordered[cut:]) < tall(ordered[:cut]):
        cut -= 1
    while cut < len(ordered) and tall(ordered[cut:]) > room and tall(ordered[:cut]) < tall(ordered[cut:]):
        cut += 1
    return ordered[:cut], ordered[cut:]


def _column(spots: list[Spot], *, edge: float, align: str, height: float, width: float) -> list[Callout]:
    outer = max((spot.width for spot in spots), default=0.0)
    edge = max(edge, outer + 4) if align == "right" else min(edge, width - outer - 4)
    spots = sorted(spots, key=lambda spot: (spot.y, spot.x if align == "left" else -spot.x))
    tops, cursor = [], 4.0
    for spot in spots:
        top = max(cursor, spot.y - spot.height / 2)
        tops.append(top)
        cursor = top + spot.height
    limit = height - 4.0
    for index in range(len(spots) - 1, -1, -1):
        tops[index] = min(tops[index], limit - spots[index].height)
        limit = tops[index]
    return [Callout(spot, edge, top + spot.height / 2, align) for spot, top in zip(spots, tops, strict=True)]
