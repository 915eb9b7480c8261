"""Points to rows: a linkage is the list of its features and the few lines that turn built features into kernel rows.

A `Corner` is the nominal of one hand in left-hand coordinates (a right corner is mirrored). Its features carry the
names of the error sources, `part.feature`. Points of the chassis, the rack and the arms stand in the car's axes; points
of the body (upright, axle, trailing arm) relative to the body's origin, the nominal wheel centre (a solid axle: the
middle of both). Lengths are the parts' own, taken once from the nominal: nothing derives them from a built point.
"""

from dataclasses import dataclass, field

import numpy as np

from study.kernel.rows import Rows
from study.kernel.vectors import tilt, two_normals, unit
from study.parts import Parts

ARM_PIVOTS = {
    "upper_arm": ("upper_front_pivot", "upper_rear_pivot", "upper_ball_joint"),
    "lower_arm": ("lower_front_pivot", "lower_rear_pivot", "lower_ball_joint"),
}


@dataclass(frozen=True)
class Feature:
    """One drawing feature. kind: "point" (3 scalars, mm), "length" (1, mm), "angles" (2, degrees about `normals`)."""

    name: str
    kind: str
    nominal: np.ndarray
    normals: np.ndarray | None = None

    @property
    def axes(self) -> tuple[str, ...]:
        return {"point": ("x", "y", "z"), "length": ("length",), "angles": ("tilt_1", "tilt_2")}[self.kind]

    def built(self, error):
        """The feature with an error (k, N) in mm or degrees: (3, N), a length (N,)."""
        if self.kind == "point":
            return self.nominal[:, None] + error
        if self.kind == "length":
            return self.nominal + error[0]
        return tilt(self.nominal[:, None], self.normals, np.radians(error))


@dataclass(frozen=True)
class Corner:
    """Nominal of one hand (a whole solid axle counts as one). Everything in mm; fixed arrays are read-only by use."""

    linkage: str
    features: dict[str, Feature]
    origin: np.ndarray
    radius_mm: tuple[float, ...]
    ground_mm: float
    build: dict[str, str]
    located_by: dict[str, str]
    bores: dict[str, np.ndarray]
    links: tuple[str, ...] = ()
    steer_link: str | None = None
    rack_part: str = "chassis"
    spring_on: str = "upright"
    springs: dict[str, tuple[np.ndarray, np.ndarray]] = field(default_factory=dict)

    @property
    def solid(self) -> bool:
        return self.linkage == "solid-axle"

    @property
    def body(self) -> str:
        return {"solid-axle": "axle", "semi-trailing-arm": "arm"}.get(self.linkage, "upright")

    @property
    def wheels(self) -> tuple[str, ...]:
        """Suffixes of the wheel features this body carries."""
        return ("_left", "_right") if self.solid else ("",)

    @property
    def has_rack(self) -> bool:
        return self.steer_link is not None


def corner_of(geometry, hand: str) -> Corner:
    """The nominal corner of a catalog geometry, `hand` "left" or "right", in left-hand coordinates."""
    side = getattr(geometry, hand)
    flip = np.array([1.0, -1.0 if hand == "right" and geometry.linkage != "solid-axle" else 1.0, 1.0])
    points = {name: flip * np.asarray(p, float) for name, p in side.points.items()}
    wheels = [geometry.left.wheel, geometry.right.wheel] if geometry.linkage == "solid-axle" else [side.wheel]
    centres = [np.asarray(w.centre, float) * flip for w in wheels]
    origin = np.mean(centres, axis=0)
    steer_link = "tie_rod" if "tie_rod_inner" in points else geometry.steer_link
    rack_part = "rack" if geometry.vehicle.steered and steer_link else "chassis"
    springs = _springs(geometry, points, flip)
    made = _Maker(points, origin, geometry, rack_part, steer_link)
    made.wheels(wheels, centres)
    FEATURES[geometry.linkage](made)
    build = {name: arm.build for name, arm in geometry.arms.items()}
    return Corner(
        geometry.linkage, made.features, origin, tuple(w.loaded_radius_mm for w in wheels), geometry.ground_mm(),
        build, {name: arm.located_by for name, arm in geometry.arms.items()}, made.bores,
        tuple(geometry.links), steer_link, rack_part, geometry.spring_on, springs,
    )  # fmt: skip


def _springs(geometry, points, flip):
    """(inner, outer) of the springs by wheel suffix, taken out of the points; a solid axle has one a side."""
    if "spring_inner" not in points:
        return {}
    own = (points.pop("spring_inner"), points.pop("spring_outer"))
    if geometry.linkage != "solid-axle":
        return {"": own}
    right = geometry.right.points
    return {"_left": own, "_right": tuple(np.asarray(right[f"spring_{end}"], float) for end in ("inner", "outer"))}


def spin_axis(*, camber_deg, toe_deg):
    """s (3,) at design, pointing to +y: (cos c sin t, cos c cos t, −sin c)."""
    c, t = np.radians(camber_deg), np.radians(toe_deg)
    return np.array([np.cos(c) * np.sin(t), np.cos(c) * np.cos(t), -np.sin(c)])


class _Maker:
    """Collects the features of one corner."""

    def __init__(self, points, origin, geometry, rack_part, steer_link):
        self.points, self.origin, self.geometry = points, origin, geometry
        self.rack_part, self.steer_link = rack_part, steer_link
        self.body = {"solid-axle": "axle", "semi-trailing-arm": "arm"}.get(geometry.linkage, "upright")
        self.features: dict[str, Feature] = {}
        self.bores: dict[str, np.ndarray] = {}

    def _add(self, name, kind, nominal, normals=None):
        self.features[name] = Feature(name, kind, nominal, normals)

    def chassis(self, *names, part="chassis"):
        for name in names:
            self._add(f"{part}.{name}", "point", self.points[name])

    def on_body(self, *names):
        for name in names:
            self._add(f"{self.body}.{name}", "point", self.points[name] - self.origin)

    def direction(self, name, axis):
        axis = axis / np.linalg.norm(axis)
        self._add(f"{self.body}.{name}", "angles", axis, two_normals(axis))

    def length(self, name, a, b):
        self._add(name, "length", float(np.linalg.norm(self.points[a] - self.points[b])))

    def wheels(self, wheels, centres):
        suffixes = ("_left", "_right") if len(wheels) == 2 else ("",)
        for suffix, wheel, centre in zip(suffixes, wheels, centres, strict=True):
            axis = spin_axis(camber_deg=wheel.camber_deg, toe_deg=wheel.toe_deg)
            if suffix == "_right":
                axis = axis * (1.0, -1.0, 1.0)
            self._add(f"{self.body}.wheel_centre{suffix}", "point", centre - self.origin)
            self.direction(f"hub_axis{suffix}", axis)

    def arm(self, arm):
        front, rear, joint = ARM_PIVOTS[arm]
        self.chassis(front, rear)
        if self.geometry.arms[arm].build == "legs":
            self.length(f"{arm}.front_leg", front, joint)
            self.length(f"{arm}.rear_leg", rear, joint)
        else:
            self._add(f"{arm}.{joint}", "point", self.points[joint])
            self.bores[arm] = np.stack((self.points[front], self.points[rear]), axis=1)
        self.on_body(joint)

    def link(self, name):
        inner, outer = f"{name}_inner", f"{name}_outer"
        self.chassis(inner, part=self.rack_part if name == self.steer_link else "chassis")
        self.on_body(outer)
        self.length(f"{name}.length", inner, outer)


def _double_wishbone(made):
    made.arm("upper_arm")
    made.arm("lower_arm")
    made.link("tie_rod")


def _strut(made):
    made.chassis("strut_top")
    made.on_body("strut_lower")
    made.direction("strut_axis", made.points["strut_top"] - made.points["strut_lower"])
    made.arm("lower_arm")
    made.link("tie_rod")


def _named_links(made):
    for name in made.geometry.links:
        made.link(name)


def _semi_trailing_arm(made):
    made.chassis("hinge_inner", "hinge_outer")
    made.on_body("hinge_inner", "hinge_outer")


FEATURES = {
    "double-wishbone": _double_wishbone,
    "strut": _strut,
    "five-link": _named_links,
    "semi-trailing-arm": _semi_trailing_arm,
    "solid-axle": _named_links,
}


def assemble(corner: Corner, built: dict, n: int) -> tuple[Rows, Parts]:
    """Kernel rows of n builds and the `Parts` that measures ask, from built features (3, n), lengths (n,)."""
    rows = _RowMaker(corner, built, n)
    ROWS[corner.linkage](rows)
    return rows.rows(), Parts.of(corner, built, rows.arm_bores, rows.fits)


class _RowMaker:
    def __init__(self, corner, built, n):
        self.corner, self.built, self.n = corner, built, n
        self.links, self.guides = [], []
        self.arm_bores, self.fits = {}, {}

    def arm(self, arm):
        front, rear, joint = ARM_PIVOTS[arm]
        pivots = [self.built[f"chassis.{name}"] for name in (front, rear)]
        body = self.built[f"upright.{joint}"]
        if self.corner.build[arm] == "legs":
            lengths = [self.built[f"{arm}.{leg}_leg"] for leg in ("front", "rear")]
        else:
            own = self.corner.bores[arm]
            pivots, self.fits[arm] = bore_places(*pivots, own=own, located_by=self.corner.located_by[arm])
            at = self.built[f"{arm}.{joint}"]
            lengths = [np.sqrt(((at - own[:, i, None]) ** 2).sum(axis=0)) for i in (0, 1)]
        self.arm_bores[arm] = pivots
        self.links += [(body, pivots[i], lengths[i], 0.0) for i in (0, 1)]

    def link(self, name):
        steers = name == self.corner.steer_link
        part = self.corner.rack_part if steers else "chassis"
        self.links.append((
            self.built[f"{self.corner.body}.{name}_outer"], self.built[f"{part}.{name}_inner"],
            self.built[f"{name}.length"], 1.0 if steers else 0.0,
        ))  # fmt: skip

    def guide(self, body, normal, chassis):
        self.guides.append((body, normal, chassis))

    def rows(self):
        def stack(items, k):
            out = np.empty((3, len(items), self.n))
            for i, item in enumerate(items):
                out[:, i] = item[k]
            return out

        c = self.corner
        centres = [(self.built[f"{c.body}.wheel_centre{w}"], self.built[f"{c.body}.hub_axis{w}"]) for w in c.wheels]
        length = np.empty((len(self.links), self.n))
        for i, link in enumerate(self.links):
            length[i] = link[2]
        rack = np.array([[link[3]] for link in self.links]).reshape(-1, 1)
        return Rows(
            stack(self.links, 0), stack(self.links, 1), length, stack(self.guides, 0), stack(self.guides, 1),
            stack(self.guides, 2), stack(centres, 0), stack(centres, 1), np.array(c.radius_mm)[:, None], rack,
        )  # fmt: skip


def bore_places(front, rear, *, own, located_by):
    """Where the two bores of a one-piece part stand on the line through two built pivots (3, n), and the misfit (n,).

    own (3, 2): the bores in the part; located_by "centre", "front" or "rear". Misfit: spacing of the pivots minus that
    of the bores, mm.
    """
    spacing = np.linalg.norm(own[:, 0] - own[:, 1])
    gap = front - rear
    along = unit(gap)
    if located_by == "front":
        first = front
    elif located_by == "rear":
        first = rear + spacing * along
    else:
        first = 0.5 * (front + rear) + 0.5 * spacing * along
    return [first, first - spacing * along], (gap * along).sum(axis=0) - spacing


def _double_wishbone_rows(rows):
    rows.arm("upper_arm")
    rows.arm("lower_arm")
    rows.link("tie_rod")


def _strut_rows(rows):
    rows.arm("lower_arm")
    rows.link("tie_rod")
    axis = rows.built["upright.strut_axis"]
    for normal in _normals_of(axis, rows.corner.features["upright.strut_axis"].normals):
        rows.guide(rows.built["upright.strut_lower"], normal, rows.built["chassis.strut_top"])


def _named_link_rows(rows):
    for name in rows.corner.links:
        rows.link(name)


def _semi_trailing_arm_rows(rows):
    """Both chassis pivots on the arm's hinge line (two guides each), the arm centred between them (one guide)."""
    inner, outer = rows.built["arm.hinge_inner"], rows.built["arm.hinge_outer"]
    along = unit(outer - inner)
    ends = [rows.built["chassis.hinge_inner"], rows.built["chassis.hinge_outer"]]
    for normal in _normals_of(along, two_normals(along[:, 0])):
        rows.guide(inner, normal, ends[0])
        rows.guide(outer, normal, ends[1])
    rows.guide(0.5 * (inner + outer), along, 0.5 * (ends[0] + ends[1]))


def _normals_of(axis, near):
    """Two directions (3, n) normal to `axis` (3, n), the first nearest near[0] (3,)."""
    first = near[0][:, None] - axis * (near[0] @ axis)
    first = unit(first)
    return first, np.cross(axis, first, axis=0)


ROWS = {
    "double-wishbone": _double_wishbone_rows,
    "strut": _strut_rows,
    "five-link": _named_link_rows,
    "semi-trailing-arm": _semi_trailing_arm_rows,
    "solid-axle": _named_link_rows,
}
