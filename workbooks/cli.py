"""The command `cellfuncs`."""

import os
import sys
from contextlib import suppress
from datetime import UTC, datetime
from pathlib import Path
from typing import Annotated

import typer

from cellfuncs.errors import CellError
from workbooks.commands.check import check
from workbooks.commands.connect import connect_calc
from workbooks.commands.connect_excel import connect_excel
from workbooks.commands.export import export
from workbooks.commands.fill import fill
from workbooks.commands.functions import functions
from workbooks.commands.statuses import DONE, WRONG_CALL
from workbooks.logbook import LogbookError
from workbooks.recipe import RecipeError

app = typer.Typer(
    name="cellfuncs",
    help="Redshifts, velocities, distances and ages for an observatory's spreadsheets.",
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)


@app.callback(invoke_without_command=True)
def about(
    version: Annotated[bool, typer.Option("--version", help="Print the version and stop.")] = False,
) -> None:
    if version:
        from cellfuncs.version import __version__

        print(f"cellfuncs {__version__}")
        raise typer.Exit


@app.command()
def template(
    recipe: Annotated[
        str | None, typer.Argument(help="A recipe's name, or a .toml file; left out: list them.")
    ] = None,
    output: Annotated[
        Path | None, typer.Option("--output", "-o", help="The workbook to write, .xlsx.")
    ] = None,
    formulas: Annotated[
        str,
        typer.Option(
            help="plain: standard formulas; addin: calls of the connected functions, a file each "
            "for Calc and Excel; none: cells left for `fill`."
        ),
    ] = "plain",
    rows: Annotated[
        int | None, typer.Option(min=1, max=100_000, help="Rows to prepare in each sheet.")
    ] = None,
    first: Annotated[
        str | None,
        typer.Option(
            "--from", help="First date that plain formulas follow the Earth through; today."
        ),
    ] = None,
    last: Annotated[
        str | None, typer.Option("--to", help="Last such date; two years after the first.")
    ] = None,
    overwrite: Annotated[bool, typer.Option(help="Let the output replace a file.")] = False,
) -> None:
    """Make a template workbook that computes in any spreadsheet program, nothing installed."""
    from workbooks import build
    from workbooks.files.saving import check_target
    from workbooks.recipe import built_in, load
    from workbooks.template.season import Season

    if recipe is None:
        for name in built_in():
            print(f"{name:16} {load(name).text.purpose}")
        return
    if formulas not in ("plain", "addin", "none"):
        raise typer.BadParameter(f"--formulas is {formulas!r}; it must be plain, addin or none")
    if output is not None and output.suffix.lower() != ".xlsx":
        raise typer.BadParameter(f"{output}: a template is an .xlsx file")
    loaded = load(recipe)
    dates = Season.between(first, last, datetime.now(UTC).date())
    target = output or Path(f"{loaded.name}.xlsx")
    kinds = {formulas: target}
    if formulas == "addin":
        kinds = {each: target.with_stem(f"{target.stem}-{each}") for each in ("calc", "excel")}
        for each in kinds.values():
            check_target(each, overwrite=overwrite)
    for kind, path in kinds.items():
        build.build(loaded, path, formulas=kind, rows=rows, season=dates, overwrite=overwrite)
        needs = build.FORMULAS[kind].needs
        print(f"{path}: {loaded.text.title}" + (f". {needs}" if needs else ""))


app.command()(fill)


app.command()(check)
app.command()(export)
app.command()(functions)
connect = typer.Typer(no_args_is_help=True, help="Connect the functions to a spreadsheet program.")
app.add_typer(connect, name="connect")
connect.command("calc")(connect_calc)
connect.command("excel")(connect_excel)


def main() -> None:
    """Run the command: errors are one sentence on stderr, never a traceback."""
    for stream in (sys.stdout, sys.stderr):
        if hasattr(stream, "reconfigure"):
            # names in a logbook may hold letters that the terminal cannot show
            stream.reconfigure(errors="replace")
    try:
        status = app(standalone_mode=False)
        sys.stdout.flush()
    except SystemExit as stop:
        # a reader of a pipe has had enough, which the library takes for a failure
        status = DONE if isinstance(stop.__context__, BrokenPipeError) else stop.code
    except typer.Exit as stop:
        status = stop.exit_code
    except typer.Abort:
        status = _refused("stopped")
    except typer.TyperException as error:
        status = _refused(error.format_message())
    except (CellError, LogbookError, RecipeError) as error:
        status = _refused(str(error))
    except BrokenPipeError:
        status = DONE
    except OSError as error:
        status = _refused(f"{error.filename or 'a file'}: {error.strerror or error}")
    except MemoryError:
        status = _refused("the file is too large for this machine's memory")
    with suppress(BrokenPipeError):
        sys.stdout.flush()
        sys.exit(status if isinstance(status, int) else DONE)
    # nothing may be flushed at the end into a pipe that is closed
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    sys.exit(status if isinstance(status, int) else DONE)


def _refused(sentence: str) -> int:
    print(f"cellfuncs: {' '.join(sentence.split())}", file=sys.stderr)
    return WRONG_CALL


if __name__ == "__main__":
    main()
