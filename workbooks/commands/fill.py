"""The command `cellfuncs fill`: one logbook, or many at once."""

from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbooks.commands.options import AsJson, RecipeName
from workbooks.commands.progress import progress
from workbooks.commands.statuses import DATA_PROBLEMS, rows_told
from workbooks.commands.told import tell_all, tell_one

if TYPE_CHECKING:
    from workbooks.commands.batch import BatchReport
    from workbooks.fill import Report


def fill(
    logbook: Annotated[
        list[Path],
        typer.Argument(
            help="Logbooks, .xlsx .xlsm .ods .csv .tsv .ecsv; a folder stands for those in it, a "
            "quoted pattern for those that match."
        ),
    ],
    output: Annotated[
        Path | None,
        typer.Option(
            "--output",
            "-o",
            help="Where to write, a folder for several; left out: NAME-filled beside each.",
        ),
    ] = None,
    recipe: RecipeName = None,
    in_place: Annotated[
        bool, typer.Option("--in-place", help="Write into the file itself.")
    ] = False,
    backup: Annotated[
        bool,
        typer.Option(help="With --in-place, keep what was there as NAME.before-fill."),
    ] = True,
    overwrite: Annotated[bool, typer.Option(help="Let the output replace a file.")] = False,
    as_json: AsJson = False,
) -> None:
    """Compute a logbook's columns and write them in; everything else stays byte for byte."""
    from workbooks import fill as filling
    from workbooks.commands import batch
    from workbooks.recipe import load

    if in_place and output is not None:
        raise typer.BadParameter("give --in-place or --output, not both")
    logbooks, passed_over = batch.found(logbook)
    if recipe:
        # A recipe that cannot be used is a wrong call, not every logbook's own problem.
        load(recipe)
    tasks = [
        batch.Task(path, target, recipe, overwrite or in_place, backup and in_place)
        for path, target in _targets(logbooks, output, in_place)
    ]
    if len(logbook) == 1 and len(tasks) == 1 and not logbook[0].is_dir():
        (task,) = tasks
        with progress(1, "filling") as tell:
            report = filling.fill(
                task.logbook,
                task.output,
                load(recipe) if recipe else None,
                overwrite=task.overwrite,
                backup=task.backup,
            )
            tell(task.logbook)
        tell_one(report, as_json, _print)
        if report.has_problems:
            raise typer.Exit(DATA_PROBLEMS)
        return
    with progress(len(tasks), "filling") as tell:
        reports = batch.fill_all(tasks, tell)
    tell_all(reports, passed_over, as_json, _print_apart, "filled", _summary)


def _targets(
    logbooks: Sequence[Path], output: Path | None, in_place: bool
) -> Iterator[tuple[Path, Path]]:
    from workbooks.commands.batch import FILLED

    if len(logbooks) > 1 and output is not None and not output.is_dir():
        raise typer.BadParameter(f"{output} must be a folder, for there are several logbooks")
    taken: dict[Path, Path] = {}
    for path in logbooks:
        if in_place:
            target = path
        elif output is None:
            target = path.with_name(f"{path.stem}{FILLED}{path.suffix}")
        else:
            target = output / path.name if output.is_dir() else output
        if not in_place and target.resolve() == path.resolve():
            raise typer.BadParameter(
                f"{target} is the logbook itself; say --in-place to write into it"
            )
        if (other := taken.setdefault(target.resolve(), path)) is not path:
            raise typer.BadParameter(f"{other} and {path} would both be written to {target}")
        yield path, target


def _print_apart(report: "Report") -> None:
    _print(report)
    print()


def _summary(reports: "BatchReport") -> str:
    return f"{len(reports.logbooks)} filled, {len(reports.failed)} not filled"


def _print(report: "Report") -> None:
    print(f"{report.logbook} by the recipe {report.recipe} → {report.output}")
    if report.backup:
        print(f"what was there is kept as {report.backup}")
    for sheet in report.sheets:
        print(
            f"\n{sheet.name}: {rows_told(sheet.filled)} filled, {rows_told(sheet.refused)} refused"
        )
        for note in sheet.notes:
            print(f"  note     {note}")
        for remark in sheet.refusals:
            print(f"  refused  {remark}")
        for remark in sheet.doubts:
            print(f"  doubtful {remark}")
    for skipped in report.skipped:
        print(f"\n{skipped.cell}: skipped, {skipped.sentence}")
