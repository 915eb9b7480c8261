"""One chart as one file, its ending saying which kind: SVG, PNG, PDF, a page of HTML or Vega-Lite JSON."""

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from catalog.errors import InputError

ENDINGS = ("svg", "png", "pdf", "html", "json")


class ChartFileError(InputError):
    """A chart's file name that says no kind of chart."""


@dataclass(frozen=True)
class Numbers:
    """The numbers behind a chart, as the table of a page: headings, rows of text, the first `words` columns words."""

    caption: str
    heads: Sequence[str]
    rows: Sequence[Sequence[str]]
    words: int = 0


def ending_of(path: Path) -> str:
    """The kind of chart that a file name asks for. Raises ChartFileError."""
    ending = path.suffix.lower().lstrip(".")
    if ending not in ENDINGS:
        raise ChartFileError(f"--chart {path}: the ending says the kind of chart; give one of .{', .'.join(ENDINGS)}")
    return ending


def write_chart(spec: dict, path: Path, numbers: Sequence[Numbers] = ()) -> Path:
    """Write a finished specification; a page carries `numbers` as tables too. Raises ChartFileError, ChartExportError."""
    from study import charts

    ending = ending_of(path)
    if ending == "html":
        return charts.write(path, _page(spec, numbers).encode())
    return charts.write(path, charts.drawn(spec, [ending], name=path.stem)[ending])


def _page(spec: dict, numbers: Sequence[Numbers]) -> str:
    from study.sheet_library import library
    from study.sheet_page import Figures, details, document, join, table, tag

    figures, title = Figures(), spec["title"]["text"]
    told = spec["title"].get("subtitle") or ""
    lines = [told] if isinstance(told, str) else told
    figure = figures.add(spec, join(lines, "; "), fit=False)
    tables = [table(part.heads, part.rows, words=part.words, caption=part.caption) for part in numbers]
    body = tag(
        "main",
        tag("h1", title, cls="alone"),
        figure,
        details("The same as tables" if len(tables) > 1 else "The same as a table", *tables) if tables else "",
        tag("p", "Rigid geometry only: no bush compliance, no strength, no fatigue.", cls="small soft"),
    )
    return document(title, body=body, figures=figures, library=library())
