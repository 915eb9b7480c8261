"""The look of every chart: type, ink, and categories that differ in shape as well as in colour."""

INK, SOFT, FAINT, PAPER = "#1c2126", "#5b636b", "#d5d9dc", "#ffffff"
BLUE, VERMILLION, GREEN, ORANGE = "#0072B2", "#D55E00", "#009E73", "#E69F00"
PURPLE, SKY, GREY = "#CC79A7", "#56B4E9", "#8a9198"
FONT = "Liberation Sans, Arial, Helvetica, sans-serif"

# family of part: (colour, mark shape, the shape in words)
FAMILIES = {
    "chassis": (BLUE, "square", "square"),
    "upright or axle": (VERMILLION, "circle", "circle"),
    "arm": (GREEN, "triangle-up", "triangle"),
    "rod or link": (ORANGE, "diamond", "diamond"),
    "rack": (PURPLE, "cross", "cross"),
}
HALO = {"stroke": PAPER, "strokeWidth": 4, "strokeJoin": "round", "strokeOpacity": 0.9}
STAGE_WORDS = {"before": "before alignment", "after": "after alignment"}

CONFIG = {
    "font": FONT,
    "background": PAPER,
    "padding": 4,
    "view": {"stroke": None},
    "axis": {
        "labelColor": INK,
        "titleColor": SOFT,
        "labelFontSize": 11,
        "titleFontSize": 11,
        "titleFontWeight": "normal",
        "gridColor": "#e8eaec",
        "domainColor": SOFT,
        "tickColor": SOFT,
        "tickSize": 4,
        "titlePadding": 6,
    },
    "legend": {
        "labelFontSize": 11,
        "titleFontSize": 11,
        "titleFontWeight": "normal",
        "labelColor": INK,
        "orient": "top",
        "title": None,
        "symbolStrokeWidth": 1.5,
        "labelLimit": 260,
    },
    "title": {
        "fontSize": 13,
        "anchor": "start",
        "color": INK,
        "fontWeight": "bold",
        "subtitleColor": SOFT,
        "subtitleFontSize": 11,
        "offset": 8,
    },
    "text": {"font": FONT, "fontSize": 11, "color": INK},
}


def family(part: str) -> str:
    """Which of FAMILIES a part belongs to."""
    if part in ("chassis", "rack"):
        return part
    if part in ("upright", "axle"):
        return "upright or axle"
    return "arm" if part == "arm" or part.endswith("_arm") else "rod or link"
