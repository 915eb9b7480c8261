"""The head of the sheet, and words that several parts of it share."""

from study.charts import theme
from study.charts.words import NBSP
from study.sheet_page import Html, esc, pairs, tag

METHODS = {
    "linear": "linear effects",
    "morris": "screening (Morris)",
    "sobol": "variance shares (Sobol')",
    "spread": "spread of independent builds",
    "worst": "search for the worst build",
}


def title_block(study: dict, geometry: dict, stage: str) -> Html:
    builds, number = study.get("builds"), study.get("id")
    return tag(
        "header",
        tag("p", "Tolerance sheet" + ("" if number is None else f" · study{NBSP}{number}"), cls="kicker"),
        tag("h1", study.get("title") or "Untitled study"),
        pairs(
            [
                ("Geometry", study.get("geometry") or geometry.get("name")),
                ("Method", METHODS.get(study.get("method"), study.get("method"))),
                ("Builds really run", None if builds is None else thousands(builds)),
                ("Shown", theme.STAGE_WORDS[stage]),
                ("State", study.get("state")),
            ]
        ),
    )


def thousands(count) -> str:
    return f"{int(count):,}".replace(",", "\u202f")


def verdict_tag(verdict: str | None) -> Html:
    return (
        tag("span", verdict, cls=f"tag {verdict}-v")
        if verdict in ("hold", "open", "watch")
        else esc(verdict or "")
    )
