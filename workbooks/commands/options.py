"""Arguments and options that several commands take."""

from pathlib import Path
from typing import Annotated

import typer

Logbooks = Annotated[
    list[Path],
    typer.Argument(
        help="Logbooks; a folder stands for those in it, a quoted pattern for those that match."
    ),
]
RecipeName = Annotated[
    str | None,
    typer.Option("--recipe", "-r", help="A recipe's name or .toml file; a template needs none."),
]
AsJson = Annotated[bool, typer.Option("--json", help="Print the report as JSON.")]
