"""TOML text to a checked pydantic table, with errors a person can act on and never a traceback."""

import re
import tomllib
from collections.abc import Iterable
from difflib import get_close_matches
from pathlib import Path
from typing import Any, NoReturn, TypeVar

from pydantic import BaseModel, ValidationError

from catalog.errors import InputError

MAX_BYTES = 1_000_000
MAX_DEPTH = 12
MAX_KEY_PARTS = 200
SHOWN_PROBLEMS = 3
MOST_LETTERS = 1000
WANTED_TYPES = {
    "float_type": "a number",
    "int_type": "a whole number",
    "string_type": "text in quotes",
    "bool_type": "true or false",
    "list_type": "a list in brackets",
    "dict_type": "a table",
    "model_type": "a table",
    "model_attributes_type": "a table",
}
Model = TypeVar("Model", bound=BaseModel)


class GeometryFileError(InputError):
    """A geometry file that cannot be used; the text names file, key, value, rule and remedy."""


def read_text(path: Path, *, error: type[InputError] = GeometryFileError) -> str:
    """The text of a UTF-8 file of at most 1 MB; a byte order mark is dropped."""
    try:
        if not path.is_file():
            kind = "is no ordinary file" if path.exists() else "does not exist"
            raise error(f"{path}: the file {kind}; check the path.")
        with path.open("rb") as file:
            data = file.read(MAX_BYTES + 1)
    except (OSError, ValueError) as problem:
        raise error(f"{path}: the file cannot be read ({problem}).") from None
    _check_length(len(data), source=path.name, error=error)
    try:
        return data.decode("utf-8-sig")
    except UnicodeDecodeError as problem:
        raise error(
            f"{path.name}: byte {problem.start + 1} is not UTF-8; save the file as UTF-8 text."
        ) from None


def parse_toml(text: str, *, source: str, error: type[InputError] = GeometryFileError) -> dict[str, Any]:
    """A TOML document as plain values; refuses what is too long or nested too deeply."""
    _check_length(len(text.encode("utf-8", "surrogatepass")), source=source, error=error)
    # the parser copies all parts of a dotted key for each part: keep a hostile key from costing minutes
    if _has_long_key(text):
        raise error(f"{source}: a key has more than {MAX_KEY_PARTS} parts; tables here are at most 3 deep.")
    try:
        document = tomllib.loads(text)
    except RecursionError:
        raise error(f"{source}: brackets are nested too deeply; a position is one list [x, y, z].") from None
    except ValueError as problem:
        raise error(f"{source}: {_toml_problem(problem, text)}") from None
    if _depth_above(document, MAX_DEPTH):
        raise error(f"{source}: tables are nested too deeply; tables here are at most 3 deep.")
    return document


def validated(
    model: type[Model], text: str, *, source: str, error: type[InputError] = GeometryFileError
) -> Model:
    """A TOML text as the given table model; up to three problems are named, one a line."""
    document = parse_toml(text, source=source, error=error)
    try:
        return model.model_validate(document)
    except ValidationError as found:
        problems = found.errors(include_url=False, include_context=True)
        lines = [one_line(f"{source}: {_line(problem, model)}") for problem in problems[:SHOWN_PROBLEMS]]
        if len(problems) > SHOWN_PROBLEMS:
            lines[-1] += f" ({len(problems) - SHOWN_PROBLEMS} more)"
        raise error("\n".join(lines)) from None


def near(name: str, known: Iterable[str]) -> str:
    """A hint: the nearest known name, or all of them."""
    known = sorted(known)
    close = get_close_matches(name, known, n=1, cutoff=0.6)
    if close:
        return f"did you mean {close[0]!r}?"
    return f"known here: {', '.join(known)}." if known else "nothing is known here; take it out."


def shown(value: object) -> str:
    """A given value for an error text, cut where it is long."""
    try:
        text = repr(value)
    except (RecursionError, ValueError):
        return "(too long to show)"
    return text if len(text) <= 70 else text[:67] + "..."


def one_line(text: str) -> str:
    """A text that may hold names out of a file, without line ends and other marks that do not print, and not endless."""
    plain = "".join(mark if mark.isprintable() else repr(mark)[1:-1] for mark in text)
    return plain if len(plain) <= MOST_LETTERS else plain[: MOST_LETTERS - 3] + "..."


def refuse(source: str, key: str, problem: str, remedy: str) -> NoReturn:
    """Raise GeometryFileError: which file and key (with the value given), what is wrong, what to do."""
    given = key if len(key) <= MOST_LETTERS // 2 else key[: MOST_LETTERS // 2 - 3] + "..."
    raise GeometryFileError(one_line(f"{source}: {given} {problem}; {remedy}"))


def _check_length(n_bytes: int, *, source: str, error: type[InputError]) -> None:
    if n_bytes > MAX_BYTES:
        raise error(f"{source}: the file is longer than 1 MB, others have a few kB; check the path.")


def _has_long_key(text: str) -> bool:
    for line in (line for line in text.splitlines() if line.count(".") >= MAX_KEY_PARTS):
        close = re.sub(r"[ \t]+", " ", line).replace(" .", ".").replace(". ", ".")
        words = re.split(r"[\s,=\[\]{}#]+", close)
        if any(word.count(".") >= MAX_KEY_PARTS and ".." not in word for word in words):
            return True
    return False


def _depth_above(value: Any, limit: int) -> bool:
    level = [value]
    for _ in range(limit):
        inner = [v for v in level if isinstance(v, dict | list)]
        level = [child for v in inner for child in (v.values() if isinstance(v, dict) else v)]
        if not level:
            return False
    return True


def _toml_problem(problem: ValueError, text: str) -> str:
    message = str(problem)
    if "overwrite" in message or "Cannot declare" in message or "Duplicate" in message:
        where = re.search(r"\(at line (\d+)", message)
        lines = text.rstrip().splitlines()
        number = min(int(where.group(1)), len(lines)) if where else len(lines)
        given = shown(lines[number - 1].strip())
        return f"line {number}, {given}: this key is given twice (duplicate); take one out."
    if "integer string conversion" in message:
        message = "a number has too many digits"
    return f"is not valid TOML: {message}. Correct that place."


def _line(problem: dict, model: type[BaseModel]) -> str:
    loc, kind = problem["loc"], problem["type"]
    key = _key(loc)
    if kind == "extra_forbidden":
        return f"{key} is not known; {near(str(loc[-1]), _known_keys(loc[:-1], model))}"
    if kind == "missing":
        return f"{key} is missing; add it."
    given = f"{key} = {shown(problem['input'])}"
    if kind == "finite_number":
        return f"{given} is not a finite number; give a number."
    if kind == "literal_error":
        return f"{given} must be one of {problem['ctx']['expected']}."
    if kind in ("too_short", "too_long"):
        return f"{given} must be three numbers [x, y, z]; {problem['ctx']['actual_length']} are given."
    if kind in WANTED_TYPES:
        return f"{given} must be {WANTED_TYPES[kind]}; correct it."
    return f"{given}: {problem['msg'][0].lower()}{problem['msg'][1:]}; correct it."


def _key(loc: tuple) -> str:
    text = ""
    for part in loc:
        text += f"[{part}]" if isinstance(part, int) else f"{'.' if text else ''}{part}"
    return text or "file"


def _known_keys(loc: tuple, model: type[BaseModel]) -> list[str]:
    """Field names of the table at loc, found by walking the model's annotations."""
    current: Any = model
    for part in loc:
        field = getattr(current, "model_fields", {}).get(part)
        current = _table_in(field.annotation) if field else current
    return list(getattr(current, "model_fields", {}))


def _table_in(annotation: Any) -> Any:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for inner in getattr(annotation, "__args__", ()):
        found = _table_in(inner)
        if found is not None:
            return found
    return None
