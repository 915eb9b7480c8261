"""Charts as files to attach to a drawing: SVG, PNG, PDF and the chart's own JSON. No network."""

import json
import re
import unicodedata
from html import escape
from pathlib import Path

from catalog.errors import WorkError
from study.charts.tables import plain

PNG_SCALE = 2.0
_RESERVED = {"con", "prn", "aux", "nul", *(f"{name}{n}" for name in ("com", "lpt") for n in range(1, 10))}


class ChartExportError(WorkError):
    """A chart could not be drawn or written."""


def safe_stem(text: str) -> str:
    """A file name stem from any text: ASCII letters, digits, `-` and `_` only, at most 80 characters."""
    ascii_text = unicodedata.normalize("NFKD", text).encode("ascii", "ignore").decode()
    stem = re.sub(r"[^A-Za-z0-9_-]+", "-", ascii_text).strip("-")[:80].strip("-")
    return f"{stem}-chart" if stem.lower() in _RESERVED else stem or "chart"


def export(chart, folder: Path, stem: str) -> list[Path]:
    """Write STEM.svg, .png, .pdf and .vl.json into `folder`, made when missing; returns the paths so ordered.

    `chart` is an Altair chart or a finished Vega-Lite specification.

    Raises ChartExportError when the folder cannot be written or the chart cannot be drawn.
    """
    import vl_convert

    folder, stem = Path(folder), safe_stem(stem)
    spec = plain(chart if isinstance(chart, dict) else chart.to_dict())
    try:
        svg = with_text_alternative(vl_convert.vegalite_to_svg(spec), spec)
        contents = {
            "svg": svg.encode(),
            "png": vl_convert.svg_to_png(svg, scale=PNG_SCALE),
            "pdf": vl_convert.svg_to_pdf(svg),
            "vl.json": json.dumps(spec, ensure_ascii=False, allow_nan=False, indent=1).encode(),
        }
    except (ValueError, RuntimeError) as error:
        raise ChartExportError(f"Chart `{stem}` could not be drawn: {str(error).splitlines()[0]}") from error
    return [_write(folder, f"{stem}.{ending}", content) for ending, content in contents.items()]


def _write(folder: Path, name: str, content: bytes) -> Path:
    path = folder / name
    try:
        folder.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content)
    except OSError as error:
        raise ChartExportError(
            f"Chart file {path} could not be written ({error.strerror}). Choose a folder that you can use."
        ) from error
    return path


def with_text_alternative(svg: str, spec: dict) -> str:
    """The SVG with role, title and label on its root, so that it is read aloud outside a page too."""
    title = spec.get("title") or ""
    title = title.get("text", "") if isinstance(title, dict) else title
    label = spec.get("description") or str(title)
    root = f'<svg role="img" aria-label="{escape(label)}" '
    svg = svg.replace("<svg ", root, 1)
    end = svg.index(">", svg.index("<svg ")) + 1
    return f"{svg[:end]}<title>{escape(str(title))}</title><desc>{escape(label)}</desc>{svg[end:]}"
