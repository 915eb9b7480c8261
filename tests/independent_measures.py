"""The measures from poses of `independent.py` alone: every rate is a Richardson-extrapolated difference.

Road axes: x, along the road to the left, road normal; origin on the road in the car's centre plane. Left corner;
a right corner comes mirrored, with roll and rack mirrored, so that its signs mean the same. Angles in degrees,
lengths in mm, rates per mm of road rise.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from tests.independent import Body, Pose, held_length, mirrored, plane, pose, solve, spring_square, steered

BUMP_STEP_MM = 1.0
ROLL_STEP = 0.0016
RACK_STEP_MM = 0.5
FLAT_PER_M = 1e-6
CROSSED = ("camber_deg", "caster_deg", "kingpin_deg", "toe_deg", "scrub_radius_mm", "trail_mm", "half_track_mm")


def richardson(function, step: float):
    """dF/dx at 0 to the fourth order of the step."""
    wide = (function(step) - function(-step)) / (2 * step)
    narrow = (function(step / 2) - function(-step / 2)) / step
    return (4 * narrow - wide) / 3


class Corner:
    """One wheel of a body at one position, with its neighbours in bump, roll and locked steer."""

    def __init__(self, body: Body, *, bump_mm=0.0, roll_rad=0.0, rack_mm=0.0, wheel=0):
        self.body, self.tyre = body, body.tyres[wheel]
        self.at = {"bump_mm": bump_mm, "roll_rad": roll_rad, "rack_mm": rack_mm}
        self.now = pose(body, **self.at)
        self.normal, self.height = plane(body.ground, bump_mm, roll_rad)
        self.axes = np.stack([[1.0, 0, 0], np.cross(self.normal, [1.0, 0, 0]), self.normal])
        self.origin = np.array([0, 0, self.height / self.normal[2]])
        self.known: dict = {}

    def near(self, what: str, step: float) -> Pose:
        if (what, step) not in self.known:
            moved = dict(self.at)
            moved[what] += step
            self.known[what, step] = solve(self.body, self.now, **moved)
        return self.known[what, step]

    def locked(self, step: float) -> Pose:
        if ("lock", step) not in self.known:
            hold = held_length(self.body, self.now)
            self.known["lock", step] = steered(self.body, self.now, rack_mm=self.at["rack_mm"] + step, hold=hold)
        return self.known["lock", step]

    def road(self, where) -> np.ndarray:
        return self.axes @ (where - self.origin)

    def contact(self, here: Pose, normal) -> np.ndarray:
        spin = here.direction(self.tyre.spin)
        up = normal - (spin @ normal) * spin
        return here.point(self.tyre.centre) - self.tyre.radius * up / np.linalg.norm(up)

    def angles(self, here: Pose, roll_rad: float) -> np.ndarray:
        """Camber and toe in degrees to the road at that roll."""
        normal, _ = plane(0.0, 0.0, roll_rad)
        spin = here.direction(self.tyre.spin)
        left = spin @ np.cross(normal, [1.0, 0, 0])
        return np.degrees([-np.arcsin(spin @ normal), np.arctan2(spin[0], left)])

    def twist(self, neighbour, step, where) -> tuple[np.ndarray, np.ndarray]:
        """Velocity of the body point now at `where` and turning rate, in road axes, per unit of the step."""
        fixed = self.now.back(where)
        speed = richardson(lambda h: neighbour(h).point(fixed), step)
        spin = richardson(lambda h: neighbour(h).turn(), step) @ self.now.turn().T
        turning = np.array([spin[2, 1] - spin[1, 2], spin[0, 2] - spin[2, 0], spin[1, 0] - spin[0, 1]]) / 2
        return self.axes @ speed, self.axes @ turning


def bump_twist(corner: Corner, where):
    return corner.twist(lambda h: corner.near("bump_mm", h), BUMP_STEP_MM, where)


def steering_axis(corner: Corner):
    """A point and the upward unit direction in road axes, or None where nothing steers."""
    body, here = corner.body, corner.now
    if body.kingpin is not None:
        low = here.point(body.kingpin[0])
        high = body.strut[0] if body.strut is not None else here.point(body.kingpin[1])
    elif body.notes.get("steer_link"):
        centre = here.point(corner.tyre.centre)
        speed, turning = corner.twist(corner.locked, RACK_STEP_MM, centre)
        direction = turning / np.linalg.norm(turning)
        foot = corner.road(centre) + np.cross(turning, speed) / (turning @ turning)
        return foot, direction * np.sign(direction[2])
    else:
        return None
    direction = corner.axes @ (high - low)
    return corner.road(low), direction / np.linalg.norm(direction)


def wheel_values(corner: Corner) -> dict:
    camber, toe = corner.angles(corner.now, corner.at["roll_rad"])
    contact = corner.road(corner.contact(corner.now, corner.normal))
    values = {"camber_deg": camber, "toe_deg": toe, "half_track_mm": contact[1]}
    axis = steering_axis(corner)
    if axis is None:
        return values
    point, k = axis
    spin = corner.axes @ corner.now.direction(corner.tyre.spin)
    outboard = np.array([spin[0], spin[1], 0.0]) / np.hypot(spin[0], spin[1])
    ahead = np.array([outboard[1], -outboard[0], 0.0])
    on_ground = point - k * point[2] / k[2]
    centre = corner.road(corner.now.point(corner.tyre.centre))
    level = point + k * (centre[2] - point[2]) / k[2]
    return values | {
        "caster_deg": np.degrees(np.arctan2(-k[0], k[2])),
        "kingpin_deg": np.degrees(np.arctan2(-k[1], k[2])),
        "scrub_radius_mm": (contact - on_ground) @ outboard,
        "trail_mm": (on_ground - contact) @ ahead,
        "kingpin_offset_mm": (centre - level) @ outboard,
    }


def bump_values(corner: Corner) -> dict:
    where = corner.contact(corner.now, corner.normal)
    contact = corner.road(where)
    v, turning = bump_twist(corner, where)
    roll = corner.at["roll_rad"]
    gains = richardson(lambda h: corner.angles(corner.near("bump_mm", h), roll), BUMP_STEP_MM)
    creep = corner.axes @ richardson(lambda h: corner.contact(corner.near("bump_mm", h), corner.normal), BUMP_STEP_MM)
    values = {
        "camber_gain_deg_per_mm": gains[0],
        "bump_steer_deg_per_mm": gains[1],
        "track_change_mm_per_mm": creep[1],
        "swing_arm_curvature_per_m": 1000 * turning[0] / v[2],
    }
    front_flat = abs(1000 * turning[0] / v[2]) < FLAT_PER_M
    side_flat = abs(1000 * turning[1] / v[2]) < FLAT_PER_M
    values["swing_arm_mm"] = None if front_flat else v[2] / turning[0]
    values["front_view_ic_y_mm"] = None if front_flat else contact[1] - v[2] / turning[0]
    values["front_view_ic_z_mm"] = None if front_flat else v[1] / turning[0]
    values["side_view_ic_x_mm"] = None if side_flat else contact[0] + v[2] / turning[1]
    values["side_view_ic_z_mm"] = None if side_flat else -v[0] / turning[1]
    return values


def roll_values(corner: Corner) -> dict:
    roll = corner.at["roll_rad"]
    rates = richardson(lambda h: corner.angles(corner.near("roll_rad", h), roll + h), ROLL_STEP)
    per_degree = -rates * np.pi / 180
    return {"roll_camber_deg_per_deg": per_degree[0], "roll_steer_deg_per_deg": per_degree[1]}


def anti_values(corner: Corner, vehicle: dict) -> dict:
    """The share-of-load percentages; torque reacted on the chassis leaves the wheel centre to judge by."""
    contact = corner.contact(corner.now, corner.normal)
    centre = corner.now.point(corner.tyre.centre)
    spin = corner.axes @ corner.now.direction(corner.tyre.spin)
    ahead = np.array([spin[1], -spin[0], 0.0]) / np.hypot(spin[0], spin[1])
    front = vehicle.get("axle", "front") == "front"
    names = ("anti_dive_pct", "drive_anti_lift_pct") if front else ("anti_lift_pct", "anti_squat_pct")
    inboard = (vehicle.get("brakes") == "inboard", vehicle.get("drive_torque", "chassis") == "chassis")
    values = {}
    for name, share, by_chassis in zip(names, ("brake_share", "drive_share"), inboard, strict=True):
        if any(vehicle.get(key) is None for key in (share, "wheelbase_mm", "cg_height_mm")):
            values[name] = None
            continue
        speed = bump_twist(corner, centre if by_chassis else contact)[0] @ ahead
        lever = vehicle["wheelbase_mm"] / vehicle["cg_height_mm"]
        values[name] = 100 * vehicle[share] * speed * lever * (1 if front else -1)
    return values


def steer_values(corner: Corner) -> dict:
    """Locked steer: camber per degree of steer angle, and the rise of the contact point since rack 0."""
    roll, rack = corner.at["roll_rad"], corner.at["rack_mm"]
    rates = richardson(lambda h: corner.angles(corner.locked(h), roll), RACK_STEP_MM)
    values = {"steer_camber_deg_per_deg": -rates[0] / rates[1], "steer_lift_mm": None}
    if rack:
        straight = pose(corner.body, bump_mm=corner.at["bump_mm"], roll_rad=roll)
        hold, here = held_length(corner.body, straight), straight
        for share in np.linspace(0, 1, 1 + int(np.ceil(abs(rack) / 5)))[1:]:
            here = steered(corner.body, here, rack_mm=share * rack, hold=hold)
        rise = corner.contact(here, corner.normal) - corner.contact(straight, corner.normal)
        values["steer_lift_mm"] = corner.normal @ rise
    return values


def motion_ratio(corner: Corner) -> dict:
    if corner.body.spring is None:
        return {}

    def length(step):
        here = corner.near("bump_mm", step)
        return np.sqrt(spring_square(corner.body, here.corners, here.home))

    return {"motion_ratio": -richardson(length, BUMP_STEP_MM)}


def side_values(corner: Corner, vehicle: dict) -> dict:
    values = wheel_values(corner) | bump_values(corner) | roll_values(corner) | motion_ratio(corner)
    if len(corner.body.tyres) == 1:
        values |= anti_values(corner, vehicle)
    if any(link.steered for link in corner.body.links):
        values |= steer_values(corner)
    return values | {key: corner.body.notes.get(key) for key in ("upper_arm_fit_mm", "lower_arm_fit_mm")}


def ackermann(left: Corner, right: Corner, track: float, wheelbase: float | None) -> float | None:
    if not left.at["rack_mm"] or wheelbase is None:
        return None
    swung = []
    for corner, sign in ((left, -1), (right, 1)):
        straight = pose(corner.body, bump_mm=corner.at["bump_mm"], roll_rad=corner.at["roll_rad"])
        roll = corner.at["roll_rad"]
        swung.append(sign * (corner.angles(corner.now, roll)[1] - corner.angles(straight, roll)[1]))
    inner, outer = swung if sum(swung) > 0 else (-swung[1], -swung[0])
    ideal = np.degrees(np.arctan2(1, 1 / np.tan(np.radians(inner)) + track / wheelbase))
    return 100 * (inner - outer) / (inner - ideal)


def solid_axle_roll_centre(corner: Corner) -> float:
    """Height of the point in the plane through the wheel centres that does not go sideways in roll."""
    middle = np.mean([corner.now.point(tyre.centre) for tyre in corner.body.tyres], axis=0)
    v, turning = corner.twist(lambda h: corner.near("roll_rad", h), ROLL_STEP, middle)
    return float(corner.road(middle)[2] + v[1] / turning[0])


def axle_values(left: Corner, right: Corner, sides: tuple[dict, dict], vehicle: dict) -> dict:
    one, two = sides
    track = one["half_track_mm"] + two["half_track_mm"]
    values = {"track_mm": track}
    for key in CROSSED:
        if key in one:
            stem, unit = key.rsplit("_", 1)
            values[f"cross_{stem}_{unit}"] = one[key] - two[key]
    if len(left.body.tyres) == 2:
        values |= {"roll_centre_height_mm": solid_axle_roll_centre(left), "roll_centre_offset_mm": None}
        pairs = anti_values(left, vehicle), anti_values(right, vehicle)
        means = {k: None if v is None else (v + pairs[1][k]) / 2 for k, v in pairs[0].items()}
        return values | means
    slopes = one["track_change_mm_per_mm"], two["track_change_mm_per_mm"]
    heights = slopes[0] * one["half_track_mm"], slopes[1] * two["half_track_mm"]
    values["roll_centre_height_mm"] = sum(heights) / 2
    level = abs(sum(slopes)) < 1e-6
    values["roll_centre_offset_mm"] = None if level else (heights[0] - heights[1]) / sum(slopes)
    if any(link.steered for link in left.body.links):
        values["ackermann_pct"] = ackermann(left, right, track, vehicle.get("wheelbase_mm"))
    return values


def evaluate(left: Body, right: Body, vehicle: dict, *, bump_mm=0.0, roll_deg=0.0, rack_mm=0.0) -> dict:
    """All values of an axle. `right` stands mirrored, as a left corner; a solid axle is given once as `left`."""
    roll = np.radians(roll_deg)
    wheel = len(left.tyres) - 1
    if wheel:  # the right spring of a solid axle is the mirror image of the left one
        right = replace(mirrored(left), spring=left.spring)
    one = Corner(left, bump_mm=bump_mm, roll_rad=roll, rack_mm=rack_mm)
    two = Corner(right, bump_mm=bump_mm, roll_rad=-roll, rack_mm=-rack_mm, wheel=wheel)
    sides = side_values(one, vehicle), side_values(two, vehicle)
    return {"left": sides[0], "right": sides[1], "axle": axle_values(one, two, sides, vehicle)}


FRONT_CENTRE = ("swing_arm_mm", "front_view_ic_y_mm", "front_view_ic_z_mm")
SIDE_CENTRE = ("side_view_ic_x_mm", "side_view_ic_z_mm")


def allowance(key: str, values: dict, axle: dict) -> float:
    """How far a value by differences may be off: rates are good to 1e-11 per mm, quotients to less."""
    size = max(1.0, abs(values[key]))
    if key in FRONT_CENTRE:
        return 1e-7 * size + 1e-10 * size * abs(values["swing_arm_mm"])
    if key in SIDE_CENTRE:
        return 1e-7 * size + 1e-10 * size * abs(values["side_view_ic_x_mm"])
    if key == "roll_centre_offset_mm":
        return 1e-7 * size * abs(axle["track_mm"] / max(1e-6, abs(axle["slopes"])))
    return 1e-9 if key.endswith("_per_mm") else 2e-7 * size


def disagreements(mine: dict, theirs: dict) -> list[str]:
    """Keys whose values differ by more than their allowance; what is undefined must be so in both."""
    slopes = sum(mine[side].get("track_change_mm_per_mm", 0.0) for side in ("left", "right"))
    found = []
    for side in ("left", "right", "axle"):
        for key in sorted(set(mine[side]) | set(theirs[side])):
            one, two = mine[side].get(key), theirs[side].get(key, "missing")
            if one is None and two is None:
                continue
            unlike = two == "missing" or one is None or two is None
            if unlike or abs(one - two) > allowance(key, mine[side], mine["axle"] | {"slopes": slopes}):
                found.append(f"{side} {key}: independent {one}, program {two}")
    return found
