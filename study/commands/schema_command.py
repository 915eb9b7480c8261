"""`schema`: the JSON Schema of an input file, so that an editor completes and checks it."""

from typing import Annotated

import typer

from catalog.errors import InputError
from study.commands.common import print_json


class SchemaError(InputError):
    """A schema that does not exist."""


def run(kind: Annotated[str, typer.Argument(help="geometry or study.")]) -> None:
    """Print the JSON Schema of a geometry or study file."""
    if kind == "geometry":
        from catalog.geometry_file import json_schema
    elif kind == "study":
        from study.study_file import json_schema
    else:
        raise SchemaError(f'schema {kind}: there is none; ask for "geometry" or "study"')
    print_json(json_schema())
