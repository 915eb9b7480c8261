"""Where a measure is taken, in words."""


def position_text(measure) -> str:
    """Where a measure is taken, in words."""
    units = {"bump": "mm", "roll": "°", "rack": "mm"}
    at = {"bump": measure.bump_mm, "roll": measure.roll_deg, "rack": measure.rack_mm}
    words = [f"{name} {value:g} {units[name]}" for name, value in at.items() if value and name != measure.over]
    if measure.over:
        sweep = measure.sweep
        words.insert(
            0,
            f"{measure.take} over {measure.over} {sweep[0]:g} to {sweep[-1]:g} {units[measure.over]}, {len(sweep)} positions",
        )
    return ", ".join(words) or "at design"
