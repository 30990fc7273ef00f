"""What a command prints of a report, or of those of many logbooks, and how it then ends."""

import json
from collections.abc import Callable, Sequence
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Any

import typer

from workbooks.commands.statuses import DATA_PROBLEMS, WRONG_CALL

if TYPE_CHECKING:
    from workbooks.commands.batch import BatchReport


def tell_one(report: Any, as_json: bool, in_words: Callable[[Any], None]) -> None:
    """Print the report of one logbook."""
    if as_json:
        print(json.dumps(asdict(report), ensure_ascii=False, indent=1))
    else:
        in_words(report)


def tell_all(
    reports: "BatchReport",
    passed_over: Sequence[Path],
    as_json: bool,
    in_words: Callable[[Any], None],
    done: str,
    summary: Callable[["BatchReport"], str],
) -> None:
    """Print the reports of many logbooks, and end where there is a problem in one of them.

    done: what was done with those that did not fail
    """
    reports.passed_over = [str(path) for path in passed_over]

    def all_in_words(reports: "BatchReport") -> None:
        for report in reports.logbooks:
            in_words(report)
        for failure in reports.failed:
            print(f"{failure.logbook}: not {done}, {failure.sentence}")
        for path in reports.passed_over:
            print(f"{path}: passed over, it is a backup or was written by fill")
        print(summary(reports))

    tell_one(reports, as_json, all_in_words)
    if reports.has_problems:
        raise typer.Exit(DATA_PROBLEMS if reports.logbooks else WRONG_CALL)
