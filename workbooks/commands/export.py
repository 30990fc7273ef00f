"""The command `cellfuncs export`: one logbook, or many at once."""

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbooks.commands.options import AsJson, Logbooks, RecipeName
from workbooks.commands.progress import progress
from workbooks.commands.statuses import DATA_PROBLEMS, rows_told
from workbooks.commands.told import tell_all, tell_one

if TYPE_CHECKING:
    from workbooks.commands.batch import BatchReport, Failure
    from workbooks.export import ExportReport


@dataclass(frozen=True)
class Task:
    """A table to export, and where to write it."""

    logbook: Path
    output: Path
    recipe: str | None
    sheet: str | None
    dates: str
    overwrite: bool


def export(
    logbook: Logbooks,
    output: Annotated[
        Path,
        typer.Option(
            "--output",
            "-o",
            help="The file to write; its suffix says the format: .fits, .vot, .ecsv, .csv (with "
            "a .csv-metadata.json beside it that describes it), .parquet. For several logbooks a "
            "folder and the suffix: archive/.fits",
        ),
    ],
    recipe: RecipeName = None,
    sheet: Annotated[
        str | None, typer.Option(help="The sheet to take, where several hold a table.")
    ] = None,
    dates: Annotated[str, typer.Option(help="iso: ISO 8601 text; jd: Julian dates.")] = "iso",
    overwrite: Annotated[bool, typer.Option(help="Let the output replace files.")] = False,
    as_json: AsJson = False,
) -> None:
    """Write a sheet's table with its units to FITS, VOTable, ECSV, CSV or Parquet."""
    from workbooks.commands import batch
    from workbooks.recipe import load

    if dates not in ("iso", "jd"):
        raise typer.BadParameter(f"--dates is {dates!r}; it must be iso or jd")
    logbooks, passed_over = batch.found(logbook)
    if recipe:
        # a recipe that cannot be used is a wrong call, not every logbook's own problem
        load(recipe)
    if len(logbook) == 1 and len(logbooks) == 1 and not logbook[0].is_dir():
        task = Task(logbooks[0], output, recipe, sheet, dates, overwrite)
        with progress(1, "exporting") as tell:
            report = _of(task)
            tell(task.logbook)
        tell_one(report, as_json, _print)
        if report.has_problems:
            raise typer.Exit(DATA_PROBLEMS)
        return
    if not output.name.startswith(".") or not output.parent.is_dir():
        raise typer.BadParameter(
            f"{output} must be a folder that is there and a suffix, as archive/.fits, for there "
            "are several logbooks"
        )
    tasks = [
        Task(path, output.with_name(path.stem + output.name), recipe, sheet, dates, overwrite)
        for path in logbooks
    ]
    taken: dict[Path, Path] = {}
    for task in tasks:
        if (other := taken.setdefault(task.output, task.logbook)) is not task.logbook:
            raise typer.BadParameter(
                f"{other} and {task.logbook} would both be written to {task.output}"
            )
    with progress(len(tasks), "exporting") as tell:
        reports = batch.each_of(tasks, exported, tell)
    tell_all(reports, passed_over, as_json, _print, "exported", _summary)


def exported(task: Task) -> "ExportReport | Failure":
    """Export a logbook; runs in a process of its own."""
    from workbooks.commands import batch

    return batch.kept_apart(task, _of)


def _of(task: Task) -> "ExportReport":
    from workbooks import export as exporting
    from workbooks.recipe import load

    return exporting.export(
        task.logbook,
        task.output,
        load(task.recipe) if task.recipe else None,
        sheet=task.sheet,
        dates=task.dates,
        overwrite=task.overwrite,
    )


def _summary(reports: "BatchReport") -> str:
    return f"{len(reports.logbooks)} exported, {len(reports.failed)} not exported"


def _print(report: "ExportReport") -> None:
    described = f", described by {report.metadata}" if report.metadata else ""
    print(f"{report.logbook}, sheet {report.sheet} → {report.output}{described}")
    print(f"{rows_told(report.rows)} of {report.columns} columns")
    for note in report.notes:
        print(f"  note     {note}")
    for problem in report.problems:
        print(f"  missing  {problem}")
