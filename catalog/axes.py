"""Axis statements and length units of a geometry file, converted to ISO 8855 axes and mm."""

from itertools import permutations, product

from catalog.errors import InputError

ISO_AXES = "x-forward y-left z-up"
MM_PER = {"mm": 1.0, "m": 1000.0, "in": 25.4}
WAYS = {
    "forward": (1, 0, 0),
    "rear": (-1, 0, 0),
    "left": (0, 1, 0),
    "right": (0, -1, 0),
    "up": (0, 0, 1),
    "down": (0, 0, -1),
}

Point = tuple[float, float, float]
Matrix = tuple[tuple[int, int, int], tuple[int, int, int], tuple[int, int, int]]


class AxesError(InputError):
    """An axis statement that names no right-handed system."""


def axes_matrix(statement: str) -> Matrix:
    """The ISO directions of a file's x, y and z, one row each, from ``x-WAY y-WAY z-WAY``.

    Raises AxesError when the statement cannot be read, repeats a direction or is left-handed.
    """
    words = statement.split()
    if [word[:2].lower() for word in words] != ["x-", "y-", "z-"]:
        raise AxesError(f"cannot be read; write it as x-WAY y-WAY z-WAY, for instance {ISO_AXES!r}")
    ways = [word[2:].lower() for word in words]
    for way in ways:
        if way not in WAYS:
            raise AxesError(f"has the way {way!r}; the ways are {', '.join(WAYS)}")
    rows = tuple(WAYS[way] for way in ways)
    turn = _determinant(rows)
    if turn == 0:
        raise AxesError("uses one line of the car twice; each of length, width and height stands once")
    if turn < 0:
        opposite = next(way for way, row in WAYS.items() if row == tuple(-v for v in rows[1]))
        raise AxesError(f"is left-handed; turn one axis round, for instance y-{opposite}")
    return rows


def to_iso(point: Point, *, matrix: Matrix, units: str) -> Point:
    """A point in the file's axes and units, in ISO axes and mm."""
    given = [_to_mm(value, units=units) for value in point]
    return tuple(
        sum(row[axis] * value for row, value in zip(matrix, given, strict=True)) + 0.0 for axis in range(3)
    )


def length_mm(value: float, *, units: str) -> float:
    """A length in the file's units, in mm."""
    return _to_mm(value, units=units)


def mirrored(point: Point) -> Point:
    """The mirror image of a point in the car's centre plane y = 0."""
    return (point[0], -point[1] + 0.0, point[2])


def all_axes() -> list[str]:
    """The 24 right-handed statements."""
    found = []
    for ways in permutations(WAYS, 3):
        if _determinant(tuple(WAYS[way] for way in ways)) > 0:
            found.append(" ".join(f"{axis}-{way}" for axis, way in zip("xyz", ways, strict=True)))
    return found


def all_left_handed() -> list[str]:
    """The 24 left-handed statements, which are refused."""
    found = []
    for ways in product(WAYS, repeat=3):
        if _determinant(tuple(WAYS[way] for way in ways)) < 0:
            found.append(" ".join(f"{axis}-{way}" for axis, way in zip("xyz", ways, strict=True)))
    return found


def _to_mm(value: float, *, units: str) -> float:
    # 0.115 m times 1000 is 114.99999999999999: round far below any tolerance so that units do not show
    return float(value) if units == "mm" else round(value * MM_PER[units], 9)


def _determinant(rows: tuple) -> int:
    (a, b, c), (d, e, f), (g, h, i) = rows
    return a * (e * i - f * h) - b * (d * i - f * g) + c * (d * h - e * g)
