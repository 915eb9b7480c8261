"""What is wrong with a file's entries, said in a line each: file, key, value, rule, remedy."""

import re
import types
import typing
from collections.abc import Iterator
from typing import Any

from pydantic import BaseModel, ValidationError

from study.patterns import near

_MOST = 3
_MOST_LETTERS = 600
_RULES = {
    "float_type": "must be a number",
    "int_type": "must be a whole number",
    "int_from_float": "must be a whole number",
    "string_type": "must be text in quotes",
    "bool_type": "must be true or false",
    "list_type": "must be a list in brackets",
    "dict_type": "must be a table",
    "model_type": "must be a table",
    "finite_number": "must be a finite number",
    "string_too_short": "must not be empty",
}


def explain(error: ValidationError, model: type[BaseModel], *, source: str) -> str:
    """Up to three lines for the errors of `model` in the file `source`."""
    lines = list(dict.fromkeys(one_line(f"{source}: {_line(item, model)}") for item in error.errors()))
    if len(lines) > _MOST:
        lines[_MOST - 1 :] = [f"{source}: … and {len(lines) - _MOST + 1} more"]
    return "\n".join(lines)


def one_line(text: str) -> str:
    """A message as one line of bounded length, with nothing in it that could steer a terminal."""
    inert = re.sub(r"[\x00-\x1f\x7f-\x9f\u2028\u2029]+", "�", text)
    return inert if len(inert) <= _MOST_LETTERS else inert[: _MOST_LETTERS - 1] + "…"


def key_text(path: tuple[str | int, ...]) -> str:
    """`measures[2].take`, counting entries of a list from 1."""
    text = ""
    for part in path:
        if isinstance(part, int):
            text += f"[{part + 1}]"
        else:
            text += ("." if text else "") + (f'"{part}"' if "." in part or "*" in part else part)
    return text or "the file"


def _line(item: Any, model: type[BaseModel]) -> str:
    path, kind, given = item["loc"], item["type"], item["input"]
    if kind == "extra_forbidden":
        known = _keys_at(model, path[:-1])
        return f"{key_text(path)} is not a known key; {near(str(path[-1]), known)}"
    if kind == "missing":
        return f"{key_text(path)} is missing; add it"
    if kind == "literal_error":
        allowed = item["ctx"]["expected"].replace("'", '"')
        return f"{key_text(path)} = {_shown(given)} must be {allowed}; {near(str(given), _words(allowed))}"
    if kind in ("too_short", "too_long"):
        return f"{key_text(path)} = {_shown(given)} {_length_rule(kind, item['ctx'])}"
    rule = _RULES.get(kind) or _plain(item["msg"])
    return f"{key_text(path)} = {_shown(given)} {rule}"


def _length_rule(kind: str, context: Any) -> str:
    number = context["min_length"] if kind == "too_short" else context["max_length"]
    bound = "at least" if kind == "too_short" else "at most"
    return f"must have {bound} {number} entr{'y' if number == 1 else 'ies'}"


def _plain(message: str) -> str:
    message = message.removeprefix("Value error, ").replace("Input should be", "must be")
    return message[:1].lower() + message[1:]


def _words(allowed: str) -> list[str]:
    return [word.strip('"') for word in allowed.replace(" or ", ", ").split(", ")]


def _shown(value: Any) -> str:
    text = f'"{value}"' if isinstance(value, str) else str(value)
    return text if len(text) <= 60 else text[:57] + "…"


def _keys_at(model: type[BaseModel], path: tuple[str | int, ...]) -> list[str]:
    """Keys that the table at `path` may have."""
    for part in path:
        if isinstance(part, int) or part not in model.model_fields:
            continue
        model = next(_models_in(model.model_fields[part].annotation), model)
    return list(model.model_fields)


def _models_in(annotation: Any) -> Iterator[type[BaseModel]]:
    if isinstance(annotation, type) and not isinstance(annotation, types.GenericAlias):
        if issubclass(annotation, BaseModel):
            yield annotation
        return
    for argument in typing.get_args(annotation):
        yield from _models_in(argument)
