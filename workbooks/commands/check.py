"""The command `cellfuncs check`: one logbook, or many at once."""

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbooks.commands.options import AsJson, Logbooks, RecipeName
from workbooks.commands.progress import progress
from workbooks.commands.statuses import DATA_PROBLEMS
from workbooks.commands.told import tell_all, tell_one

if TYPE_CHECKING:
    from workbooks.check import CheckReport
    from workbooks.commands.batch import BatchReport, Failure


@dataclass(frozen=True)
class Task:
    """A logbook to look through."""

    logbook: Path
    recipe: str | None


def check(
    logbook: Logbooks,
    recipe: RecipeName = None,
    annotate: Annotated[
        Path | None,
        typer.Option(
            help="Write the findings as cell comments into this copy: .xlsx, .xlsm, .ods."
        ),
    ] = None,
    overwrite: Annotated[bool, typer.Option(help="Let the copy replace a file.")] = False,
    as_json: AsJson = False,
) -> None:
    """Look logbooks through for mistakes of hands and programs; nothing is changed."""
    from workbooks import check as checking
    from workbooks.commands import batch
    from workbooks.recipe import load

    logbooks, passed_over = batch.found(logbook)
    loaded = load(recipe) if recipe else None
    if len(logbook) == 1 and len(logbooks) == 1 and not logbook[0].is_dir():
        with progress(1, "looking through") as tell:
            report = checking.check(logbooks[0], loaded)
            tell(logbooks[0])
        commented = None
        if annotate is not None:
            from workbooks.audit.annotate import annotate as annotated

            commented = annotated(logbooks[0], annotate, report.findings, overwrite=overwrite)
        tell_one(report, as_json, _print)
        if commented is not None and not as_json:
            print(f"{annotate}: a copy with comments on {commented} cells")
        if report.has_problems:
            raise typer.Exit(DATA_PROBLEMS)
        return
    if annotate is not None:
        raise typer.BadParameter("--annotate takes one logbook")
    with progress(len(logbooks), "looking through") as tell:
        reports = batch.each_of([Task(path, recipe) for path in logbooks], checked, tell)
    tell_all(reports, passed_over, as_json, _print, "looked through", _summary)


def checked(task: Task) -> "CheckReport | Failure":
    """Return what is found in a logbook; runs in a process of its own."""
    from workbooks import check as checking
    from workbooks.commands import batch
    from workbooks.recipe import load

    return batch.kept_apart(
        task,
        lambda task: checking.check(task.logbook, load(task.recipe) if task.recipe else None),
    )


def _summary(reports: "BatchReport") -> str:
    with_findings = sum(report.has_problems for report in reports.logbooks)
    return f"{len(reports.logbooks)} looked through, {with_findings} of them with findings"


def _print(report: "CheckReport") -> None:
    from workbooks.audit.findings import KINDS

    by = f" by the recipe {report.recipe}" if report.recipe else ""
    count = len(report.findings)
    print(f"{report.logbook}{by}: {count or 'no'} finding{'s' * (count != 1)}")
    for finding in report.findings:
        print(f"  {finding.place}: {KINDS[finding.kind]}: {finding.sentence}")
    for note in report.notes:
        print(f"  note: {note}")
