"""The released tolerances as a DXF table in mm, to be put on the drawing: tolerance frames as lines and plain text.

Only lines, circles, text and two small blocks are used, so that every program draws the same; symbols do not hang on
a font (⌀, ± and ° are the codes that DXF text has for them).
"""

import io
import textwrap
from collections.abc import Mapping, Sequence

from study.release_callouts import callout
from study.release_note import coordinates, named, notes, released, title, uncovered_names

HEIGHT, ROW, PAD = 2.5, 6.0, 1.5  # text height, pitch of lines, gap to a line, mm
LETTER = 0.95 * HEIGHT  # width that a letter may take
SYMBOL = 6.0  # side of the box of a symbol
NOTE_LETTERS = 105
LINES, TEXT, FRAMES = "TOLERANCE_TABLE", "TOLERANCE_TEXT", "TOLERANCE_FRAMES"
_CODES = {"⌀": "%%c", "±": "%%p", "°": "%%d", "–": "-", "“": '"', "”": '"', "’": "'", "\u2212": "-", "∠": "angularity", "⌖": "position", "µ": "mean "}  # fmt: skip


def table_dxf(record: Mapping, rows: Sequence[Mapping]) -> bytes:
    """The table as a DXF file (R2010, UTF-8); its top left corner is the origin."""
    import ezdxf

    doc = ezdxf.new("R2010", setup=False, units=4)
    for name, colour in ((LINES, 8), (TEXT, 7), (FRAMES, 7)):
        doc.layers.add(name, color=colour)
    _symbols(doc)
    _Table(doc.modelspace()).draw(record, rows)
    out = io.StringIO()
    doc.write(out)
    return doc.encode(out.getvalue())


def dxf_text(text: str) -> str:
    """A text as one DXF string: nothing in it is taken for a code, what the usual fonts lack is spelt out."""
    for sign, inert in (("%%", "% %"), ("^", "^ "), ("\\U+", "\\ U+"), ("\\u+", "\\ u+"), ("\\M+", "\\ M+"), ("\\m+", "\\ m+")):
        text = text.replace(sign, inert)
    while "%%" in text:
        text = text.replace("%%", "% %")
    return "".join(_CODES.get(letter, letter) for letter in text)


def _symbols(doc):
    """⌖ and ∠ as blocks, their lower left corner at the origin, in a box of side SYMBOL."""
    half = SYMBOL / 2
    position = doc.blocks.new("TOLERANCE_POSITION")
    position.add_circle((half, half), 1.25)
    position.add_line((half - 2.1, half), (half + 2.1, half))
    position.add_line((half, half - 2.1), (half, half + 2.1))
    angularity = doc.blocks.new("TOLERANCE_ANGULARITY")
    angularity.add_line((half - 2.0, half - 1.3), (half + 2.0, half - 1.3))
    angularity.add_line((half - 2.0, half - 1.3), (half + 1.6, half + 1.6))


class _Table:
    """Draws downwards from the origin; `y` is the top of what comes next."""

    def __init__(self, space):
        self.space, self.y = space, 0.0

    def draw(self, record, rows):
        heads = ["", "Feature", "x", "y", "z", "Tolerance", "Condition", "Checked", "Verdict"]
        cells = [self._cells(row) for row in rows]
        kept = [i for i, head in enumerate(heads) if i in (0, 1, 5) or any(cell[i] for cell in cells)]
        most = {1: 26, 6: 22, 7: 22}
        wrapped = [[_wrapped(cell[i], most.get(i, 40)) if i != 5 else cell[i] for i in kept] for cell in cells]
        widths = [self._width(kept[k], heads[i], [row[k] for row in wrapped]) for k, i in enumerate(kept)]
        self._line_of_text(title(record), 0.0, height=1.4 * HEIGHT)
        self._line_of_text(f"{released(record)}; {record['geometry']}, study {record['study_id']}; mm", 0.0)
        self.y -= PAD
        self._row([[heads[i]] for i in kept], kept, widths)
        for row in wrapped:
            self._row(row, kept, widths)
        self._rule(widths)
        self._remarks(record, rows)

    def _cells(self, row):
        number = str(row["place"])
        return [number, named(row), *coordinates(row), callout(row), row["condition"], row["checked"], row["verdict"] or ""]

    def _width(self, column, head, cells):
        if column == 5:
            return max(_frame_width(line) for lines in cells for line in lines) + 2 * PAD
        return LETTER * max(len(text) for lines in [[head], *cells] for text in lines) + 2 * PAD

    def _row(self, cells, kept, widths):
        """One row: rules above and at its sides, texts and frames in it."""
        frames = any(i == 5 and cell and not isinstance(cell[0], str) for i, cell in zip(kept, cells, strict=True))
        pitch = SYMBOL + PAD if frames else ROW
        depth = max(len(cell) for cell in cells) * pitch
        self._rule(widths)
        x = 0.0
        for cell, width in zip(cells, widths, strict=True):
            for k, item in enumerate(cell):
                base = self.y - (k + 0.5) * pitch
                if isinstance(item, str):
                    self._text(item, x + PAD, base - HEIGHT / 2)
                else:
                    self._frame(item, x + PAD, base)
            self._line((x, self.y), (x, self.y - depth))
            x += width
        self._line((x, self.y), (x, self.y - depth))
        self.y -= depth

    def _rule(self, widths):
        self._line((0.0, self.y), (sum(widths), self.y))

    def _frame(self, line, x, middle):
        """A tolerance frame about the height `middle`, words behind it; or words alone."""
        if line.symbol is None:
            self._text(line.text, x, middle - HEIGHT / 2)
            return
        low, high = middle - SYMBOL / 2, middle + SYMBOL / 2
        block = f"TOLERANCE_{line.symbol.upper()}"
        self.space.add_blockref(block, (x, low), dxfattribs={"layer": FRAMES})
        edges = [x, x + SYMBOL]
        for text in (line.zone, *line.datums):
            self._text(text, edges[-1] + PAD, middle - HEIGHT / 2, layer=FRAMES)
            edges.append(edges[-1] + LETTER * len(text) + 2 * PAD)
        for edge in edges:
            self._line((edge, low), (edge, high), layer=FRAMES)
        for height in (low, high):
            self._line((edges[0], height), (edges[-1], height), layer=FRAMES)
        if line.words:
            self._text(line.words, edges[-1] + PAD, middle - HEIGHT / 2)

    def _remarks(self, record, rows):
        self.y -= ROW
        names = uncovered_names(record)
        texts = [f"Not covered by the study, no tolerance is released: {', '.join(names)}."] if names else []
        texts += [f"Feature {row['place']}: {row['remark']}." for row in rows if row["remark"]]
        texts += notes(record, rows) + [f"Warning. {text}" for text in record["warnings"]]
        for number, text in enumerate([*texts, f"Record {record['record_hash']}"], start=1):
            for k, line in enumerate(_wrapped(text, NOTE_LETTERS)):
                self._text(f"{number}" if k == 0 else "", 0.0, self.y - 2.25 - HEIGHT / 2)
                self._line_of_text(line, 4 * LETTER, pitch=4.5)

    def _line_of_text(self, text, x, *, height=HEIGHT, pitch=ROW):
        self._text(text, x, self.y - 0.5 * pitch - height / 2, height=height)
        self.y -= pitch

    def _text(self, text, x, y, *, height=HEIGHT, layer=TEXT):
        if text:
            self.space.add_text(dxf_text(text), height=height, dxfattribs={"layer": layer, "insert": (x, y)})

    def _line(self, start, end, *, layer=LINES):
        self.space.add_line(start, end, dxfattribs={"layer": layer})


def _frame_width(line):
    if line.symbol is None:
        return LETTER * len(line.text)
    words = LETTER * len(line.words) + PAD if line.words else 0.0
    return SYMBOL + sum(LETTER * len(text) + 2 * PAD for text in (line.zone, *line.datums)) + words


def _wrapped(text, most):
    return textwrap.wrap(text, most) or [""]
