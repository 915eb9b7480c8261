"""Pieces of an HTML page: escaping, tables, figures with a text alternative, and the page around them."""

import json
from collections.abc import Iterable, Sequence
from html import escape

from study import sheet_style
from study.charts import theme

_EMPTY = ("", "–", None)
_DROPPED = ("$schema", "config", "usermeta")


class Html(str):
    """Text that is already HTML; everything else is escaped where it is put in."""

    __slots__ = ()


def esc(value) -> Html:
    """Any value as HTML text; Html passes as it is, None becomes an empty string."""
    if isinstance(value, Html):
        return value
    return Html("" if value is None else escape(str(value), quote=True))


def tag(name: str, *content, **attributes) -> Html:
    """An element. `cls` stands for class, `for_` for for; underscores become hyphens; None is left out."""
    names = {"cls": "class", "for_": "for"}
    head = "".join(
        f' {names.get(key, key.replace("_", "-"))}="{escape(str(value), quote=True)}"'
        for key, value in attributes.items()
        if value is not None
    )
    return Html(f"<{name}{head}>{''.join(esc(item) for item in content)}</{name}>")


def join(items: Iterable, between: str = "") -> Html:
    return Html(esc(between).join(esc(item) for item in items))


def table(
    heads: Sequence,
    rows: Iterable[Sequence],
    *,
    caption: str,
    cls: str = "",
    words: int = 1,
    spare: bool = False,
) -> Html:
    """A table in a box that scrolls by itself; the first `words` columns hold words, the others numbers.

    With `spare` a column that is empty in every row is left out.
    """
    rows = [list(row) for row in rows]
    kept = [i for i in range(len(heads)) if not spare or any(row[i] not in _EMPTY for row in rows)]
    heads, rows = [heads[i] for i in kept], [[row[i] for i in kept] for row in rows]
    words = sum(i < words for i in kept)
    top = tag(
        "tr", *(tag("th", head, scope="col", cls=None if i < words else "n") for i, head in enumerate(heads))
    )
    body = [
        tag(
            "tr",
            *(
                tag("th", cell, scope="row") if i == 0 else tag("td", cell, cls=None if i < words else "n")
                for i, cell in enumerate(row)
            ),
        )
        for row in rows
    ]
    whole = tag(
        "table", tag("caption", tag("span", caption)), tag("thead", top), tag("tbody", *body), cls=cls or None
    )
    return tag("div", whole, cls="scroll", tabindex="0", role="region", aria_label=caption)


def details(summary: str, *content) -> Html:
    return tag("details", tag("summary", summary), *content)


def pairs(items: Iterable[tuple]) -> Html:
    """A list of terms and what they are; terms without a value are left out."""
    return tag(
        "dl",
        *(tag("div", tag("dt", term), tag("dd", value)) for term, value in items if value not in (None, "")),
        cls="pairs",
    )


def section(name: str, title: str, *content) -> Html:
    return tag(
        "section", tag("h2", title, id=f"{name}-title"), *content, id=name, aria_labelledby=f"{name}-title"
    )


class Figures:
    """Collects the charts of a page; each figure is an empty box that the page's script fills."""

    def __init__(self) -> None:
        self.items: list[dict] = []

    def add(
        self,
        spec: dict | None,
        caption,
        data: Html | str = "",
        *,
        fit: bool = True,
        choose: bool = False,
        from_end: bool = False,
        paper_px: int = 660,
    ) -> Html:
        """The figure of one specification with its caption and, below it, its numbers as a table.

        With `fit` the chart takes the width of its box, otherwise it keeps its own and the box scrolls, at
        first to its right end with `from_end`. `paper_px`: the width on A4 paper of a chart that fits its box.
        """
        if spec is None:
            return Html("")
        name = f"chart-{len(self.items) + 1}"
        kept = {key: value for key, value in spec.items() if key not in (*_DROPPED, "title")}
        if fit:
            kept |= {"width": "container", "autosize": {"type": "fit-x", "contains": "padding"}}
        self.items.append(
            {
                "id": name,
                "choose": choose,
                "fromEnd": from_end,
                "paper": paper_px if fit else None,
                "spec": kept,
            }
        )
        box = tag(
            "div",
            tag("div", id=name, cls="chart", role="img", aria_label=spec["description"]),
            cls="fit" if fit else "scroll drawing",
            **({} if fit else {"tabindex": "0", "role": "region", "aria_label": "drawing, scrolls sideways"}),
        )
        return tag("figure", tag("figcaption", caption), box, data)

    def script(self) -> Html:
        text = script_json({"config": theme.CONFIG, "charts": self.items})
        return Html(f'<script type="application/json" id="charts">{text}</script>')


def script_json(value) -> str:
    """JSON that may stand inside a script element; raises ValueError on NaN."""
    text = json.dumps(value, ensure_ascii=False, allow_nan=False, separators=(",", ":"))
    return text.replace("<", "\\u003c").replace("\u2028", "\\u2028").replace("\u2029", "\\u2029")


def document(title: str, *, body: Html, figures: Figures, library: str) -> str:
    """The whole page: one file, no network (the policy in its head forbids any)."""
    policy = (
        "default-src 'none'; script-src 'unsafe-inline' 'unsafe-eval'; style-src 'unsafe-inline'; "
        "img-src data: blob:; base-uri 'none'; form-action 'none'"
    )
    return "".join(
        [
            '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n',
            f'<meta http-equiv="Content-Security-Policy" content="{escape(policy, quote=True)}">\n',
            '<meta name="viewport" content="width=device-width, initial-scale=1">\n',
            '<link rel="icon" href="data:,">\n',
            f"<title>{esc(title)}</title>\n<style>{sheet_style.STYLE}</style>\n</head>\n<body>\n{body}\n",
            f"{figures.script()}\n<script>{library}</script>\n<script>{sheet_style.SCRIPT}</script>\n",
            "</body>\n</html>\n",
        ]
    )
