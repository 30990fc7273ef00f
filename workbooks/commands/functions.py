"""`cellfuncs functions`: what there is to call, and the help for one of it."""

import json
from typing import Annotated

import typer


def functions(
    name: Annotated[
        str | None, typer.Argument(help="A function's name, in any case; left out: list them all.")
    ] = None,
    as_json: Annotated[
        bool, typer.Option("--json", help="Print arguments, units, limits and defaults as JSON.")
    ] = False,
) -> None:
    """List the functions, or show one: syntax, returns, constraints, semantics, examples."""
    from cellfuncs import reference
    from cellfuncs.catalogue import find

    if name is not None:
        made = find(name)
        print(_json(reference.description(made)) if as_json else reference.help_text(made))
    elif as_json:
        grouped = reference.in_reading_order().values()
        print(_json([reference.description(made) for group in grouped for made in group]))
    else:
        print(f"{reference.list_text()}\n\n`cellfuncs functions NAME` shows one in full.")


def _json(described: object) -> str:
    return json.dumps(described, ensure_ascii=False, indent=1, allow_nan=False)
