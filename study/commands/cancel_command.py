"""`cancel`: take studies out of the queue or stop them."""

from typing import Annotated

import typer

from study.commands.common import CatalogOption, JsonOption, print_json


def run(
    studies: Annotated[list[int], typer.Argument(help="Numbers of studies.")],
    as_json: JsonOption = False,
    catalog: CatalogOption = None,
) -> None:
    """Cancel queued or running studies; a running one stops at its next chunk. Finished ones stay as they are."""
    from catalog import queue
    from catalog.store import Catalog

    with Catalog(catalog).write() as con:
        states = queue.cancel(con, studies)
    if as_json:
        print_json([{"study": number, "state": state} for number, state in states.items()])
        return
    for number, state in states.items():
        print(f"study {number}: {state}" + ("" if state == "cancelled" else ", left as it is"))
