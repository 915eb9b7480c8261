"""Texts of a release: what people write, made harmless, and which features it is said of."""

import re
import unicodedata
from collections.abc import Sequence
from fnmatch import fnmatchcase

from catalog.errors import InputError
from study.patterns import near

MOST_NUMBER, MOST_TEXT = 60, 400
UNSEEN = "\ufffd"
_TURNING = "\u061c\u200e\u200f\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069"  # bidirectional controls
_OF_FEATURE = re.compile(r"([a-z*?][a-z0-9_.*?]*)=(.*)", re.DOTALL)


class ReleaseTextError(InputError):
    """A text of a release that cannot be taken."""


def clean(text: str) -> str:
    """One line of text that steers nothing: white space becomes one blank, controls and odd halves a mark."""
    kept = "".join(" " if c.isspace() else UNSEEN if _steers(c) else c for c in str(text))
    return unicodedata.normalize("NFC", " ".join(kept.split()))


def clean_all(value):
    """The same structure with every text in it cleaned."""
    if isinstance(value, str):
        return clean(value)
    if isinstance(value, dict):
        return {clean_all(key): clean_all(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return type(value)(clean_all(item) for item in value)
    return value


def number_text(option: str, given: str) -> str:
    """A drawing number, an issue or a name: one line, not empty, nothing unseen in it. Raises ReleaseTextError."""
    text = given.strip()
    rule = None
    if not text:
        rule = "is empty; give one"
    elif len(text) > MOST_NUMBER:
        rule = f"has {len(text)} characters; {MOST_NUMBER} at the most"
    elif any(_steers(c) for c in text):
        rule = "has control characters or line breaks; leave them out"
    if rule:
        raise ReleaseTextError(f"{option} {clean(given)[:MOST_NUMBER]!r}: {rule}")
    return clean(text)


def assigned(option: str, given: Sequence[str], features: Sequence[str]) -> dict[str, str]:
    """What an option says of each feature ("part.feature"): TEXT for all of them, FEATURE=TEXT for one.

    FEATURE may be written without its part and with * and ?; what is said of it goes before what is said of all, and
    the last of several counts. Raises ReleaseTextError where it names none, or where TEXT for all is given twice.
    """
    found = dict.fromkeys(features, said_of_all(option, given))
    for pattern, text in (m.groups() for m in map(_OF_FEATURE.fullmatch, given) if m):
        named = [f for f in features if fnmatchcase(f, pattern) or fnmatchcase(f.partition(".")[2], pattern)]
        if not named:
            raise ReleaseTextError(
                f"{option} {pattern}=…: no feature of this drawing is named so;"
                f" {near(pattern, [f.partition('.')[2] for f in features])}; of all features, do not begin with WORD="
            )
        found |= dict.fromkeys(named, _text(option, text))
    return found


def said_of_all(option: str, given: Sequence[str]) -> str:
    """The TEXT that an option says of all features, "" without one. Raises ReleaseTextError where there are two."""
    common = [text for text in given if not _OF_FEATURE.fullmatch(text)]
    if len(common) > 1:
        raise ReleaseTextError(
            f"{option} {clean(common[1])!r}: is said of all features a second time; write FEATURE=TEXT for one of them"
        )
    return _text(option, common[0]) if common else ""


def _text(option, given):
    text = clean(given)
    if len(text) > MOST_TEXT:
        raise ReleaseTextError(f"{option} {text[:30]!r}…: has {len(text)} characters; {MOST_TEXT} at the most")
    return text


def _steers(c):
    return unicodedata.category(c) in ("Cc", "Cs", "Zl", "Zp") or c in _TURNING
