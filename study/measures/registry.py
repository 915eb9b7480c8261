"""The list of measures: each states its key, unit, sign and meaning, and what it needs to be computed."""

from collections.abc import Callable
from dataclasses import dataclass, field


@dataclass(frozen=True, slots=True)
class MeasureInfo:
    """One measure. scope: "side" (per wheel) or "axle".

    rates: which twists it reads ("bump", "roll", "rack"); needs: "rest" (the same wheel with the rack at rest),
    "locked" (the pose with the suspension held). solid_mean: on a solid axle it stands under the axle, as the mean of both
    wheels.
    """

    key: str
    unit: str
    scope: str
    sign: str
    meaning: str
    evaluate: Callable = field(repr=False, compare=False)
    rates: tuple[str, ...] = ()
    needs: tuple[str, ...] = ()
    solid_mean: bool = False

    def scope_on(self, solid: bool) -> str:
        """ "side" or "axle", on a solid axle or on independent wheels."""
        return "axle" if solid and self.solid_mean else self.scope

    def value(self, view, axle):
        """The measure (N,) of a wheel's View, or of the axle where `axle` is an AxleView."""
        if axle is None:
            return self.evaluate(view)
        if self.scope == "axle":
            return self.evaluate(axle)
        return 0.5 * (self.evaluate(axle.left) + self.evaluate(axle.right))


KEYS: dict[str, MeasureInfo] = {}


def measure(key, unit, *, meaning, sign="", scope="side", rates=(), needs=(), solid_mean=False):
    """Register a measure function of a wheel's `View` (scope side) or of an `AxleView` (scope axle), giving (N,)."""

    def register(function):
        KEYS[key] = MeasureInfo(key, unit, scope, sign, meaning, function, tuple(rates), tuple(needs), solid_mean)
        return function

    return register
