"""Charts as files to attach to a drawing: SVG, PNG, PDF and the chart's own JSON. No network."""

import json
import re
import struct
import unicodedata
import zlib
from collections.abc import Sequence
from html import escape
from pathlib import Path

from catalog.errors import WorkError
from study.charts.tables import plain

PNG_SCALE = 2.0
_PNG_HEADER = 33  # signature and IHDR chunk
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
    folder, stem = Path(folder), safe_stem(stem)
    spec = plain(chart if isinstance(chart, dict) else chart.to_dict())
    contents = drawn(spec, ("svg", "png", "pdf", "json"), name=stem)
    names = {"json": "vl.json"}
    return [write(folder / f"{stem}.{names.get(ending, ending)}", content) for ending, content in contents.items()]


def drawn(spec: dict, endings: Sequence[str], *, name: str = "chart") -> dict[str, bytes]:
    """The contents of files of a specification by ending: svg, png, pdf, json. Raises ChartExportError."""
    import vl_convert

    spec = plain(spec)
    title, text = _title(spec), _label(spec)
    make = {
        "svg": lambda svg: svg.encode(),
        "png": lambda svg: png_with_text(vl_convert.svg_to_png(svg, scale=PNG_SCALE), title=title, description=text),
        "pdf": vl_convert.svg_to_pdf,
        "json": lambda svg: json.dumps(spec, ensure_ascii=False, allow_nan=False, indent=1).encode(),
    }
    try:
        needed = any(ending != "json" for ending in endings)
        svg = with_text_alternative(vl_convert.vegalite_to_svg(spec), spec) if needed else ""
        return {ending: make[ending](svg) for ending in endings}
    except (ValueError, RuntimeError) as error:
        raise ChartExportError(f"Chart `{name}` could not be drawn: {str(error).splitlines()[0]}") from error


def write(path: Path, content: bytes) -> Path:
    """Write a chart file, its folder made when missing. Raises ChartExportError."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(content)
    except OSError as error:
        raise ChartExportError(
            f"Chart file {path} could not be written ({error.strerror}). Choose a folder that you can use."
        ) from error
    return path


def _title(spec: dict) -> str:
    title = spec.get("title") or ""
    return str(title.get("text", "") if isinstance(title, dict) else title)


def _label(spec: dict) -> str:
    return str(spec.get("description") or _title(spec))


def with_text_alternative(svg: str, spec: dict) -> str:
    """The SVG with role, title and label on its root, so that it is read aloud outside a page too."""
    title, label = escape(_title(spec)), escape(_label(spec))
    svg = svg.replace("<svg ", f'<svg role="img" aria-label="{label}" ', 1)
    end = svg.index(">", svg.index("<svg ")) + 1
    return f"{svg[:end]}<title>{title}</title><desc>{label}</desc>{svg[end:]}"


def png_with_text(png: bytes, *, title: str, description: str) -> bytes:
    """The PNG with its title and description as text that programs show (iTXt, behind the header chunk)."""
    added = b"".join(_text_chunk(word, text) for word, text in (("Title", title), ("Description", description)))
    return png[:_PNG_HEADER] + added + png[_PNG_HEADER:]


def _text_chunk(word: str, text: str) -> bytes:
    body = b"iTXt" + word.encode() + b"\0\0\0\0\0" + text.encode()
    return struct.pack(">I", len(body) - 4) + body + struct.pack(">I", zlib.crc32(body))
