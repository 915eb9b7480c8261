"""Signs that a console lacks, written out: "±" may become "+/-", but never "?"."""

import codecs
import unicodedata

PLAIN = {
    "±": "+/-", "–": "-", "−": "-", "°": " deg", "…": "...", "→": "->", "←": "<-", "↑": "^", "▼": "v", "·": "*", "×": "x",
    "⌀": " dia ", "⌖": "position", "∠": "angle", "µ": "u", "∂": "d", "≈": "~", "≤": "<=", "≥": ">=", "√": "sqrt", "²": "^2",
    "“": '"', "”": '"', "’": "'", "⁻": "^-",
}  # fmt: skip
NAME = "holdtight.plain"


def register() -> str:
    """Make the rule known to the codecs; gives its name."""
    codecs.register_error(NAME, _replace)
    return NAME


def _replace(problem):
    if not isinstance(problem, UnicodeEncodeError):
        raise problem
    return "".join(map(plain, problem.object[problem.start : problem.end])), problem.end


def plain(sign: str) -> str:
    """ASCII for one sign: as above, a Greek letter's name, a letter without its accent, else "?"."""
    if sign in PLAIN:
        return PLAIN[sign]
    name = unicodedata.name(sign, "").split(" ")
    if name[0] == "GREEK" and "LETTER" in name:
        return name[-1].capitalize() if "CAPITAL" in name else name[-1].lower()
    return unicodedata.normalize("NFKD", sign).encode("ascii", "ignore").decode() or "?"
