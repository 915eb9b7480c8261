"""Which points, arms and links each linkage has. Data only."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

SPRING_POINTS = ("spring_inner", "spring_outer")


@dataclass(frozen=True, slots=True)
class ArmPoints:
    """The three points that carry an arm, by name."""

    front_pivot: str
    rear_pivot: str
    ball_joint: str


@dataclass(frozen=True, slots=True)
class Linkage:
    """What a geometry file has to give for one linkage.

    points: required names in ``[points]``; n_links: how many ``[links.NAME]`` (0: none are taken);
    on_wheel_side: points of the upright, which lie on the wheel's side of the car;
    rods: pairs of points that may not coincide because a part joins them;
    may_meet: pairs of points that may coincide; body: the part that carries the wheel;
    whole_axle: one body carries both wheels; count_rule: why just so many points or links.
    """

    points: tuple[str, ...]
    body: str
    count_rule: str
    arms: Mapping[str, ArmPoints] = field(default_factory=lambda: MappingProxyType({}))
    on_wheel_side: tuple[str, ...] = ()
    may_meet: tuple[frozenset[str], ...] = ()
    n_links: int = 0
    whole_axle: bool = False
    has_tie_rod: bool = False
    has_steer_link: bool = False
    optional_points: tuple[str, ...] = SPRING_POINTS

    @property
    def allowed_points(self) -> tuple[str, ...]:
        return self.points + self.optional_points


_UPPER = ArmPoints("upper_front_pivot", "upper_rear_pivot", "upper_ball_joint")
_LOWER = ArmPoints("lower_front_pivot", "lower_rear_pivot", "lower_ball_joint")
_TIE_ROD = ("tie_rod_inner", "tie_rod_outer")


def _names(arm: ArmPoints) -> tuple[str, ...]:
    return (arm.front_pivot, arm.rear_pivot, arm.ball_joint)


LINKAGES: Mapping[str, Linkage] = MappingProxyType(
    {
        "double-wishbone": Linkage(
            points=(*_names(_UPPER), *_names(_LOWER), *_TIE_ROD),
            body="upright",
            count_rule="two arms and a tie rod leave the upright one motion",
            arms=MappingProxyType({"upper_arm": _UPPER, "lower_arm": _LOWER}),
            on_wheel_side=("upper_ball_joint", "lower_ball_joint", "tie_rod_outer"),
            has_tie_rod=True,
            has_steer_link=True,
        ),
        "strut": Linkage(
            points=("strut_top", "strut_lower", *_names(_LOWER), *_TIE_ROD),
            body="upright",
            count_rule="strut, lower arm and tie rod leave the upright one motion",
            arms=MappingProxyType({"lower_arm": _LOWER}),
            on_wheel_side=("strut_lower", "lower_ball_joint", "tie_rod_outer"),
            may_meet=(frozenset({"strut_lower", "lower_ball_joint"}),),
            has_tie_rod=True,
            has_steer_link=True,
        ),
        "five-link": Linkage(
            points=(),
            body="upright",
            count_rule="an upright has six freedoms; five links leave one for the wheel",
            n_links=5,
            has_steer_link=True,
        ),
        "semi-trailing-arm": Linkage(
            points=("hinge_inner", "hinge_outer"),
            body="arm",
            count_rule="the hinge alone leaves the arm one motion, any more would hold it fast",
        ),
        "solid-axle": Linkage(
            points=(),
            body="axle",
            count_rule="an axle has six freedoms; four links leave two, bump and roll",
            n_links=4,
            whole_axle=True,
        ),
    }
)
