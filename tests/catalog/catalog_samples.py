"""Invented geometry files, one for each linkage, and small helpers for the tests of the catalog."""

from catalog.geometry_file import parse_geometry
from catalog.queue import enqueue
from catalog.revisions import register
from catalog.store import Catalog

WHEEL = """
[wheel]
centre = [0, 640, 265]
loaded_radius = 265
camber_deg = -1.0
toe_deg = 0.1
"""

WISHBONES = (
    """name = "example-front"
linkage = "double-wishbone"
axes = "x-forward y-left z-up"
units = "mm"
side = "left"
note = "invented"

[points]
upper_front_pivot = [120, 330, 275]
upper_rear_pivot = [-120, 330, 275]
upper_ball_joint = [-10, 560, 290]
lower_front_pivot = [130, 260, 130]
lower_rear_pivot = [-130, 260, 130]
lower_ball_joint = [5, 600, 120]
tie_rod_inner = [60, 270, 150]
tie_rod_outer = [70, 580, 150]
"""
    + WHEEL
)

STRUT = (
    """name = "example-strut"
linkage = "strut"

[points]
strut_top = [-20, 520, 640]
strut_lower = [-2, 575, 230]
lower_front_pivot = [130, 300, 130]
lower_rear_pivot = [-150, 310, 135]
lower_ball_joint = [5, 600, 120]
tie_rod_inner = [-90, 290, 160]
tie_rod_outer = [-110, 570, 155]
"""
    + WHEEL
)

FIVE_LINK = (
    """name = "example-five"
linkage = "five-link"
steer_link = "toe"

[links.upper_front]
inner = [150, 340, 300]
outer = [10, 560, 305]
[links.upper_rear]
inner = [-150, 345, 290]
outer = [-20, 560, 300]
[links.lower_front]
inner = [180, 270, 130]
outer = [20, 600, 125]
[links.lower_rear]
inner = [-170, 265, 135]
outer = [-15, 600, 120]
[links.toe]
inner = [-60, 280, 160]
outer = [-90, 580, 165]
"""
    + WHEEL
)

TRAILING_ARM = (
    """name = "example-trailing"
linkage = "semi-trailing-arm"

[points]
hinge_inner = [320, 150, 240]
hinge_outer = [390, 480, 255]
"""
    + WHEEL
)

SOLID_AXLE = (
    """name = "example-axle"
linkage = "solid-axle"

[points]
spring_inner = [-20, 450, 520]
spring_outer = [-20, 470, 260]

[links.left_lower]
inner = [480, 420, 210]
outer = [20, 480, 200]
[links.right_lower]
inner = [480, -420, 210]
outer = [20, -480, 200]
[links.upper]
inner = [430, 60, 380]
outer = [10, 50, 390]
[links.panhard]
inner = [-90, 470, 270]
outer = [-95, -460, 262]

[vehicle]
axle = "rear"
"""
    + WHEEL
)

ALL = {
    "double-wishbone": WISHBONES,
    "strut": STRUT,
    "five-link": FIVE_LINK,
    "semi-trailing-arm": TRAILING_ARM,
    "solid-axle": SOLID_AXLE,
}
MEASURES = {"left": {"camber_deg": -1.0, "swing_arm_mm": None}, "axle": {"track_mm": 1280.0}}


def geometry(text=WISHBONES, *, source="example.toml"):
    return parse_geometry(text, source=source)


def with_study(path, *, n=1):
    """A catalog with one revision and n queued studies; gives the catalog and the numbers of the studies."""
    catalog = Catalog(path)
    with catalog.write() as con:
        revision = register(con, geometry(), measures=MEASURES, by="tester", why="first")
        studies = [queue_study(con, revision.id, title=f"study {i + 1}") for i in range(n)]
    return catalog, studies


def queue_study(con, revision_id, *, title):
    return enqueue(
        con,
        text="title = 'x'",
        title=title,
        method="sobol",
        size=64,
        seed=0,
        sides="mirrored",
        revision_id=revision_id,
        version="0.1.0",
        by="tester",
    )


def result_tables(*, sources=5, measures=2, stages=("before", "after")):
    """Small result tables of a ranked study."""
    ranking = [
        {
            "stage": stage,
            "measure_no": m,
            "measure": f"measure {m}",
            "unit": "mm",
            "source": f"chassis.pivot_{s}",
            "rank": s + 1,
            "st": 0.5 / (s + 1),
            "st_low": 0.1,
            "st_high": 0.6,
            "effect": [0.1 * s, None, -1e-17],
            "effect_axes": ["x", "y", "z"],
            "effect_unit": "per mm",
            "tied": s == 2,
        }
        for stage in stages
        for m in range(measures)
        for s in range(sources)
    ]
    stats = [
        {"stage": "after", "measure_no": 0, "measure": "measure 0", "of": "track_mm", "unit": "mm"}
        | {"position": {"bump_mm": 5.0}, "mean": 1.5, "limit_high": float("inf"), "builds": 640}
    ]
    study = {
        "builds": 640,
        "withheld": False,
        "notes": ["left as drawn"],
        "stages": list(stages),
        "seconds": 1.5,
    }
    return {"study": [study], "ranking": ranking, "stats": stats}
