"""The tables of a geometry file as they stand in TOML: names and types only, nothing converted yet."""

from typing import Annotated, Any, Literal

from pydantic import BaseModel, ConfigDict, Field

from catalog.axes import ISO_AXES, all_axes
from catalog.linkages import LINKAGES

Number = Annotated[float, Field(allow_inf_nan=False)]
Position = Annotated[
    list[Number], Field(min_length=3, max_length=3, description="[x, y, z] in the file's axes")
]
Share = Annotated[float, Field(ge=0.0, le=1.0, allow_inf_nan=False)]
Positive = Annotated[float, Field(gt=0.0, allow_inf_nan=False)]
SteepAngle = Annotated[float, Field(ge=-45.0, le=45.0, allow_inf_nan=False)]


class Table(BaseModel):
    model_config = ConfigDict(extra="forbid", strict=True, frozen=True)


class LinkTable(Table):
    """One link: its chassis point and its upright or axle point; each here or in the points file."""

    inner: Position | None = Field(None, title="chassis point")
    outer: Position | None = Field(None, title="upright or axle point")


class OtherLinkTable(Table):
    """What of a link of the other side is not the mirror image."""

    inner: Position | None = Field(None, title="chassis point")
    outer: Position | None = Field(None, title="upright point")


class WheelTable(Table):
    """The wheel of the given side at design."""

    centre: Position | None = Field(None, title="wheel centre", description="Here or in the points file")
    loaded_radius: Positive = Field(description="Wheel centre to road along the wheel, in the file's units")
    camber_deg: SteepAngle = Field(0.0, description="Degrees; positive leans the top outboard")
    toe_deg: SteepAngle = Field(0.0, description="Degrees; positive toes in")


class OtherWheelTable(Table):
    """What of the other wheel is not the mirror image."""

    centre: Position | None = None
    loaded_radius: Positive | None = None
    camber_deg: SteepAngle | None = None
    toe_deg: SteepAngle | None = None


class ArmTable(Table):
    """How an arm is made."""

    build: Literal["one-piece", "legs"] = Field(
        "one-piece", description="One welded part, or two separate legs"
    )
    located_by: Literal["centre", "front", "rear"] = Field(
        "centre", description="Which chassis pivot a one-piece arm is centred on or set against"
    )


class VehicleTable(Table):
    """What the measures need to know of the car."""

    axle: Literal["front", "rear"] = "front"
    wheelbase: Positive | None = Field(None, description="In the file's units")
    cg_height: Positive | None = Field(
        None, description="Centre of gravity above ground, in the file's units"
    )
    brake_share: Share | None = Field(None, description="Share of the vehicle's braking at this axle, 0 to 1")
    drive_share: Share | None = Field(None, description="Share of the vehicle's drive at this axle, 0 to 1")
    brakes: Literal["outboard", "inboard"] = "outboard"
    drive_torque: Literal["chassis", "axle"] | None = Field(
        None, description="What reacts the drive torque; left out: axle of a solid axle, else chassis"
    )
    steered: bool | None = Field(None, description="Without it a front axle is steered, a rear axle is not")


class OtherSideTable(Table):
    """What of the other side is not the mirror image; same axes and units, car coordinates."""

    points: dict[str, Position] = Field(default_factory=dict)
    links: dict[str, OtherLinkTable] = Field(default_factory=dict)
    wheel: OtherWheelTable = Field(default_factory=OtherWheelTable)

    def is_empty(self) -> bool:
        return self == OtherSideTable()


def _point_names(schema: dict[str, Any]) -> None:
    names = sorted({name for linkage in LINKAGES.values() for name in linkage.allowed_points})
    item = schema.get("additionalProperties", {})
    schema["properties"] = {name: {**item, "title": name.replace("_", " ")} for name in names}
    schema["additionalProperties"] = False


class GeometryTable(Table):
    """Suspension geometry of one axle."""

    name: str = Field(description="Name of the geometry in the catalog")
    linkage: Literal[tuple(LINKAGES)] = Field(description="Kind of linkage")
    axes: str = Field(ISO_AXES, description="Right-handed axes", json_schema_extra={"enum": all_axes()})
    units: Literal["mm", "m", "in"] = Field("mm", description="Unit of every length in the file")
    side: Literal["left", "right"] = Field("left", description="Which side the points belong to")
    note: str = Field("", description="Free text")
    steer_link: str | None = Field(None, description="Five-link: the name of the toe link")
    spring_on: Literal["upright", "axle", "lower_arm"] | None = Field(
        None, description="Which part spring_outer belongs to; without it the upright or axle"
    )
    points_file: str | None = Field(None, description="A CSV (name, x, y, z) beside this file with points")
    points_map: dict[str, str] = Field(
        default_factory=dict, description="Name in the points file = name of the point here"
    )
    points_ignore: list[str] = Field(
        default_factory=list, description="Rows of the points file to leave out although they bear names known here"
    )
    points: dict[str, Position] = Field(default_factory=dict, json_schema_extra=_point_names)
    links: dict[str, LinkTable] = Field(
        default_factory=dict, description="Five-link and solid axle: [links.NAME]"
    )
    wheel: WheelTable
    arms: dict[str, ArmTable] = Field(default_factory=dict, description="[arms.upper_arm], [arms.lower_arm]")
    vehicle: VehicleTable = Field(default_factory=VehicleTable)
    datums: dict[str, str] = Field(
        default_factory=dict, description="What positions are measured from on the drawing: per point, or all"
    )
    left: OtherSideTable = Field(default_factory=OtherSideTable)
    right: OtherSideTable = Field(default_factory=OtherSideTable)

    def other_side(self) -> OtherSideTable:
        return self.right if self.side == "left" else self.left
