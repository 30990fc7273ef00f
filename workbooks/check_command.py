"""The command `cellfuncs check`: one logbook, or many at once."""

import json
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Annotated

import typer

from workbooks.progress import progress
from workbooks.statuses import DATA_PROBLEMS, WRONG_CALL

if TYPE_CHECKING:
    from workbooks.batch import Failure
    from workbooks.check import CheckReport


@dataclass(frozen=True)
class Task:
    """A logbook to look through."""

    logbook: Path
    recipe: str | None


def check(
    logbook: Annotated[
        list[Path],
        typer.Argument(
            help="Logbooks; a folder stands for those in it, a quoted pattern for those that match."
        ),
    ],
    recipe: Annotated[
        str | None,
        typer.Option(
            "--recipe", "-r", help="A recipe's name or .toml file; a template needs none."
        ),
    ] = None,
    annotate: Annotated[
        Path | None,
        typer.Option(help="Write the findings as cell comments into this copy, .xlsx or .xlsm."),
    ] = None,
    overwrite: Annotated[bool, typer.Option(help="Let the copy replace a file.")] = False,
    as_json: Annotated[bool, typer.Option("--json", help="Print the report as JSON.")] = False,
) -> None:
    """Look logbooks through for mistakes of hands and programs; nothing is changed."""
    from workbooks import batch
    from workbooks import check as checking
    from workbooks.annotate import annotate as annotated
    from workbooks.recipe import load

    logbooks, passed_over = batch.found(logbook)
    loaded = load(recipe) if recipe else None
    if len(logbook) == 1 and len(logbooks) == 1 and not logbook[0].is_dir():
        with progress(1, "looking through") as tell:
            report = checking.check(logbooks[0], loaded)
            tell(logbooks[0])
        commented = None
        if annotate is not None:
            commented = annotated(logbooks[0], annotate, report.findings, overwrite=overwrite)
        if as_json:
            print(json.dumps(asdict(report), ensure_ascii=False, indent=1))
        else:
            _print(report)
            if commented is not None:
                print(f"{annotate}: a copy with comments on {commented} cells")
        if report.has_problems:
            raise typer.Exit(DATA_PROBLEMS)
        return
    if annotate is not None:
        raise typer.BadParameter("--annotate takes one logbook")
    with progress(len(logbooks), "looking through") as tell:
        results = batch.each_of([Task(path, recipe) for path in logbooks], checked, tell)
    failed = [result for result in results if isinstance(result, batch.Failure)]
    reports = [result for result in results if not isinstance(result, batch.Failure)]
    if as_json:
        told = {
            "logbooks": [asdict(report) for report in reports],
            "failed": [asdict(failure) for failure in failed],
            "passed_over": [str(path) for path in passed_over],
        }
        print(json.dumps(told, ensure_ascii=False, indent=1))
    else:
        for report in reports:
            _print(report)
        for failure in failed:
            print(f"{failure.logbook}: not looked through, {failure.sentence}")
        for path in passed_over:
            print(f"{path}: passed over, it is a backup or was written by fill")
        with_findings = sum(report.has_problems for report in reports)
        print(f"{len(reports)} looked through, {with_findings} of them with findings")
    if failed or any(report.has_problems for report in reports):
        raise typer.Exit(DATA_PROBLEMS if reports else WRONG_CALL)


def checked(task: Task) -> "CheckReport | Failure":
    """Return what is found in a logbook; runs in a process of its own."""
    from workbooks import batch
    from workbooks import check as checking
    from workbooks.recipe import load

    return batch.kept_apart(
        task,
        lambda task: checking.check(task.logbook, load(task.recipe) if task.recipe else None),
    )


def _print(report: "CheckReport") -> None:
    from workbooks.check import KINDS

    by = f" by the recipe {report.recipe}" if report.recipe else ""
    count = len(report.findings)
    print(f"{report.logbook}{by}: {count or 'no'} finding{'s' * (count != 1)}")
    for finding in report.findings:
        print(f"  {finding.place}: {KINDS[finding.kind]}: {finding.sentence}")
    for note in report.notes:
        print(f"  note: {note}")
