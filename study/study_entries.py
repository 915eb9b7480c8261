"""The tables of a study file as they may be written: types and bounds of each key."""

from typing import Annotated, Any, Literal

from pydantic import BaseModel, BeforeValidator, ConfigDict, Field

Number = Annotated[float, Field(strict=True)]
Positive = Annotated[float, Field(strict=True, gt=0, le=1000)]
Three = Annotated[list[Number], Field(min_length=3, max_length=3)]
Limit = Annotated[float, Field(strict=True, allow_inf_nan=True)]
Word = Annotated[str, Field(strict=True, min_length=1, max_length=200)]


def _numbers(value: Any) -> Any:
    """A number, or a list of numbers: said here in one line instead of one for each possible type."""
    items = value if isinstance(value, list) else [value]
    if not items or any(isinstance(v, bool) or not isinstance(v, int | float) for v in items):
        raise ValueError("must be a number or a list of numbers")
    return value


def _axis(value: Any) -> Any:
    return value if isinstance(value, str) else _numbers(value)


NumberOrList = Annotated[float | list[float], BeforeValidator(_numbers)]
AxisEntry = Annotated[str | list[float], BeforeValidator(_axis)]


class Table(BaseModel):
    model_config = ConfigDict(extra="forbid", allow_inf_nan=False, title=None)


class LawEntry(Table):
    distribution: Literal["uniform", "normal"] | None = None
    cp: Number | None = Field(None, description="normal: 1 leaves 99.73 % inside the zone")
    truncated: Annotated[bool, Field(strict=True)] | None = Field(
        None, description="inspected: what lies outside is rejected"
    )


class ZoneEntry(LawEntry):
    plus_minus: NumberOrList | None = Field(None, description="± mm: a number, or three along x, y, z")
    diameter: Number | None = Field(None, description="mm: a ball; with axis and depth a cylinder")
    axis: AxisEntry | None = Field(None, description='"x", "y", "z" or a vector in the car\'s axes')
    depth: Number | None = Field(None, description="± mm along the axis of a cylinder")
    length: Number | None = Field(None, description="± mm of a length")
    tilt_deg: Number | None = Field(None, description="half angle of the cone of a direction, degrees")
    shift: NumberOrList | None = Field(None, description="mean of the errors, mm (degrees for a tilt)")
    process: Word | None = Field(None, description="a process of the catalog in place of the zone's keys: NAME, or NAME@NOMINAL (mm) where it goes by nominal dimension")


class RideHeightEntry(LawEntry):
    within_mm: Annotated[float, Field(strict=True, ge=0, le=100)]


class AdjusterEntry(LawEntry):
    by: Word = Field(description="the adjuster: tie_rod, upper_arm, strut_top, … or a named link")
    within_deg: Annotated[float, Field(strict=True, ge=0, le=10)]
    range_mm: Positive | None = Field(None, description="± mm of travel from the drawing's position")
    step_mm: Positive | None = Field(None, description="mm a shim or half a turn of thread")


class AlignmentEntry(Table):
    ride_height: RideHeightEntry | None = None
    toe: AdjusterEntry | None = None
    camber: AdjusterEntry | None = None
    caster: AdjusterEntry | None = None


class AtEntry(Table):
    bump: Annotated[float, Field(strict=True, ge=-1000, le=1000)] = Field(0.0, description="mm")
    roll: Annotated[float, Field(strict=True, ge=-45, le=45)] = Field(0.0, description="degrees")
    rack: Annotated[float, Field(strict=True, ge=-1000, le=1000)] = Field(0.0, description="mm")


class OverEntry(Table):
    bump: Three | None = Field(None, description="from, to (mm), positions")
    roll: Three | None = Field(None, description="from, to (degrees), positions")
    rack: Three | None = Field(None, description="from, to (mm), positions")


class MeasureEntry(Table):
    of: Word
    name: Word | None = None
    side: Literal["left", "right"] | None = None
    at: AtEntry | None = None
    over: OverEntry | None = None
    take: Literal["range", "max", "min", "slope", "max-abs"] | None = None
    limits: Annotated[list[Limit], Field(min_length=2, max_length=2)] | None = Field(
        None, description="low, high; -inf or inf for an open end"
    )


class JigEntry(LawEntry):
    pivots: Annotated[list[Word], Field(min_length=2)]
    plus_minus: NumberOrList | None = Field(None, description="± mm of the group's shift")
    diameter: Number | None = None
    axis: AxisEntry | None = None
    depth: Number | None = None
    shift: NumberOrList | None = None
    process: Word | None = None
    tilt_deg: NumberOrList | None = Field(None, description="± degrees of the turns about x, y and z")
    varies: Literal["each", "once"] = "each"


class StudyEntry(Table):
    """A study file."""

    title: Word
    geometry: Word = Field(description="a file beside the study file, or NAME@REVISION in the catalog")
    method: Literal["linear", "morris", "sobol", "spread", "worst"]
    size: Annotated[int, Field(strict=True, ge=1)] | None = None
    seed: Annotated[int, Field(strict=True, ge=0, lt=2**63)] = 0
    sides: Literal["mirrored", "independent"] = "independent"
    wanted_share: Annotated[float, Field(strict=True, gt=0, lt=1)] = 0.95
    cars: Annotated[int, Field(strict=True, ge=1, le=1_000_000)] | None = None
    errors: Annotated[dict[str, ZoneEntry], Field(min_length=1)]
    alignment: AlignmentEntry | None = None
    measures: Annotated[list[MeasureEntry], Field(min_length=1)]
    jigs: dict[str, JigEntry] = Field(default_factory=dict)
