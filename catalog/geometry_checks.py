"""Which names, points and links a geometry file has to give for its linkage."""

import re

from catalog.geometry_models import GeometryTable
from catalog.linkages import LINKAGES, SPRING_POINTS, Linkage
from catalog.points_file import LINK_NAME, GivenPoints
from catalog.toml_text import near, refuse, shown

MOST_LETTERS = 100
RESERVED_LINKS = ("chassis", "rack", "upright", "axle", "arm", "alignment", "spring")


def check_names(table: GeometryTable, *, given: GivenPoints, source: str) -> None:
    """Raise GeometryFileError unless names, points and links are those of the linkage; given: of its points file."""
    linkage = LINKAGES[table.linkage]
    _check_name(table.name, source)
    _check_links(table, linkage, given, source)
    _check_points(table, linkage, given, source)
    _check_spring(table, linkage, source)
    _check_other_side(table, linkage, source)
    _check_steering(table, linkage, source)
    for key, known in (("arms", linkage.arms), ("datums", [*_flat_names(table, linkage), "all"])):
        for name in getattr(table, key):
            if name not in known:
                refuse(
                    source, f"{key}.{name}", f"is not known for linkage {table.linkage!r}", near(name, known)
                )


def _check_name(name: str, source: str) -> None:
    fine = name == name.strip() and 1 <= len(name) <= MOST_LETTERS and name.isprintable()
    if not fine or re.search(r"[@/\\]", name):
        refuse(
            source,
            f"name = {shown(name)}",
            f"must be 1 to {MOST_LETTERS} printable characters without @, / or \\",
            "rename it.",
        )


def _check_links(table: GeometryTable, linkage: Linkage, given: GivenPoints, source: str) -> None:
    count = len(table.links)
    if count and not linkage.n_links:
        refuse(source, "links", f"is not taken by linkage {table.linkage!r}", "give its points in [points].")
    if count != linkage.n_links:
        which = "over-constrained" if count > linkage.n_links else "under-constrained"
        names = ", ".join(name[:MOST_LETTERS] for name in [*table.links][:8]) or "none"
        names += ", …" if count > 8 else ""
        refuse(
            source,
            "links",
            f"has {count} links ({names}): {table.linkage} needs exactly {linkage.n_links},"
            f" the linkage is {which} ({linkage.count_rule})",
            _count_remedy(linkage) + _left_out(given),
        )
    for name, link in table.links.items():
        if not LINK_NAME.fullmatch(name) or name in RESERVED_LINKS or len(name) > MOST_LETTERS:
            refuse(
                source,
                f"links.{name}",
                f"must start with a letter, hold at most {MOST_LETTERS} letters, digits, _ and -, and be none of "
                + ", ".join(RESERVED_LINKS),
                "rename the link.",
            )
        for end in ("inner", "outer"):
            if getattr(link, end) is None:
                refuse(source, f"links.{name}.{end}", "is missing", "add it." + _left_out(given))


def _count_remedy(linkage: Linkage) -> str:
    if linkage.whole_axle:
        return "count a Panhard rod as one link, an A-bracket as two."
    return "count each arm with two chassis pivots as two links, the tie rod as one."


def _left_out(given: GivenPoints) -> str:
    """Rows of the points file that nothing names: one of them may be what is missing."""
    if not given.ignored:
        return ""
    more = f" and {len(given.ignored) - 6} more" if len(given.ignored) > 6 else ""
    return f" Rows of the points file left out: {', '.join(shown(name) for name in given.ignored[:6])}{more}."


def _check_points(table: GeometryTable, linkage: Linkage, given: GivenPoints, source: str) -> None:
    for name in table.points:
        if name not in linkage.allowed_points:
            hint = near(name, linkage.allowed_points)
            rule = f"is no point of linkage {table.linkage!r} ({linkage.count_rule})"
            refuse(source, f"points.{name} = {shown(table.points[name])}", rule, hint)
    missing = [name for name in linkage.points if name not in table.points]
    if missing:
        rule = f"is missing: {table.linkage} needs {', '.join(linkage.points)} ({linkage.count_rule})"
        hint = "add it in [points]." + _left_out(given)
        refuse(source, ", ".join(f"points.{name}" for name in missing), rule, hint)
    if table.wheel.centre is None:
        refuse(source, "wheel.centre", "is missing", "add it." + _left_out(given))


def _check_spring(table: GeometryTable, linkage: Linkage, source: str) -> None:
    found = [name for name in SPRING_POINTS if name in table.points]
    if len(found) == 1:
        absent = next(name for name in SPRING_POINTS if name not in found)
        refuse(
            source, f"points.{absent}", f"is missing beside {found[0]}", "give both spring points or neither."
        )
    said = table.spring_on
    if said == "lower_arm" and "lower_arm" not in linkage.arms:
        refuse(
            source, "spring_on = 'lower_arm'", f"needs a lower arm, {table.linkage} has none", "leave it out."
        )
    if said == "axle" and not linkage.whole_axle:
        refuse(source, "spring_on = 'axle'", f"needs a solid axle, not {table.linkage}", "leave it out.")
    if said == "lower_arm" and not found:
        refuse(
            source,
            "spring_on = 'lower_arm'",
            "needs spring points",
            "add spring_inner, spring_outer in [points].",
        )


def _check_other_side(table: GeometryTable, linkage: Linkage, source: str) -> None:
    same, said = getattr(table, table.side), table.other_side()
    other = "right" if table.side == "left" else "left"
    if not same.is_empty():
        refuse(
            source,
            table.side,
            f"is the side of [points] already (side = {table.side!r})",
            f"write [{other}.…].",
        )
    if linkage.whole_axle and said.links:
        refuse(
            source,
            f"{other}.links",
            "is not taken: one axle has both wheels",
            "give all four links in [links].",
        )
    for key, known in (("points", table.points), ("links", table.links)):
        for name in getattr(said, key):
            if name not in known:
                rule = f"is not among the {key} of the {table.side} side"
                refuse(source, f"{other}.{key}.{name}", rule, near(name, known))


def _check_steering(table: GeometryTable, linkage: Linkage, source: str) -> None:
    steered = table.vehicle.axle == "front" if table.vehicle.steered is None else table.vehicle.steered
    if table.linkage != "five-link":
        if table.steer_link is not None:
            refuse(
                source,
                f"steer_link = {table.steer_link!r}",
                f"is not taken by {table.linkage}",
                "leave it out.",
            )
        if table.vehicle.steered and not linkage.has_steer_link:
            rule = f"cannot be: {table.linkage} has no steer link"
            refuse(source, "vehicle.steered = true", rule, "write false or leave it out.")
    elif table.steer_link is None and steered:
        refuse(
            source,
            "steer_link",
            "is missing: a steered five-link names its toe link",
            f"add steer_link (links: {', '.join(table.links)}), or steered = false in [vehicle].",
        )
    elif table.steer_link is not None and table.steer_link not in table.links:
        refuse(
            source, f"steer_link = {table.steer_link!r}", "names no link", near(table.steer_link, table.links)
        )


def _flat_names(table: GeometryTable, linkage: Linkage) -> list[str]:
    ends = [f"{name}_{end}" for name in table.links for end in ("inner", "outer")]
    return [*linkage.allowed_points, *table.links, *ends, "wheel_centre"]
