"""What makes an engineer look twice at a geometry: values far outside common practice, said in a line each.

The bounds are common practice, wide on purpose; nothing is refused for them.
"""

BOUNDS = {
    "kingpin_deg": (-5.0, 25.0),
    "caster_deg": (-5.0, 20.0),
    "scrub_radius_mm": (-120.0, 150.0),
    "trail_mm": (-60.0, 120.0),
    "bump_steer_deg_per_mm": (-0.1, 0.1),
    "camber_gain_deg_per_mm": (-0.2, 0.1),
    "anti_dive_pct": (-100.0, 200.0),
    "anti_lift_pct": (-100.0, 300.0),
    "anti_squat_pct": (-100.0, 300.0),
    "roll_centre_height_mm": (-200.0, 500.0),
}


def odd_values(found: dict[str, dict[str, float | None]], geometry) -> list[str]:
    """Lines about the measures at design ({"left": …, "right": …, "axle": …}) and points of a geometry."""
    lines = _wishbone(geometry) if geometry.linkage == "double-wishbone" else []
    for key, (low, high) in BOUNDS.items():
        for side, values in found.items():
            value = values.get(key)
            if value is not None and not low <= value <= high and not (side == "right" and geometry.right_is_mirror):
                lines.append(f"{key} is {value:.4g}{'' if side == 'axle' else ' on the ' + side}; usual is {low:g} to {high:g}: check the points")
    return lines


def _wishbone(geometry):
    points, ground = geometry.left.points, geometry.ground_mm()
    lines = []
    if points["upper_ball_joint"][2] <= points["lower_ball_joint"][2]:
        lines.append("upper_ball_joint is not above lower_ball_joint: check the points, or the direction of z in axes")
    low = [name for name, point in points.items() if point[2] < ground]
    if low:
        lines.append(f"{', '.join(low)} below the ground: check the points, loaded_radius, or the direction of z in axes")
    if points["tie_rod_inner"][1] * points["tie_rod_outer"][1] < 0:
        lines.append("tie_rod_inner is on the other side of the car than tie_rod_outer: check its sign")
    return lines
