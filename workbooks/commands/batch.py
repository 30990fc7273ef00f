"""Many logbooks at once: one that cannot be read does not stop the others."""

import multiprocessing
import os
import re
from collections.abc import Callable, Iterable, Iterator, Sequence
from concurrent.futures import Future, ProcessPoolExecutor, as_completed
from concurrent.futures.process import BrokenProcessPool
from dataclasses import dataclass, field
from glob import has_magic
from pathlib import Path
from typing import Any, Final, Protocol, TypeVar

from cellfuncs.errors import CellError
from workbooks.files.saving import BACKUP
from workbooks.fill import Report, fill
from workbooks.logbook import FORMATS, LogbookError
from workbooks.recipe import RecipeError, load

FILLED: Final = "-filled"
"""What the name of a filled logbook has before its suffix, where no other was asked for"""

_MADE_HERE = re.compile(rf"(?:{FILLED}|\.{BACKUP}(?:-\d+)?)\Z")


@dataclass(frozen=True)
class Task:
    """A logbook to fill, and where to write it."""

    logbook: Path
    output: Path
    recipe: str | None
    overwrite: bool
    backup: bool


@dataclass(frozen=True)
class Failure:
    """A logbook of which nothing came, and the sentence that says why."""

    logbook: str
    sentence: str


@dataclass
class BatchReport:
    """What became of many logbooks."""

    logbooks: list[Any] = field(default_factory=list)
    """The reports, in the order of the logbooks"""
    failed: list[Failure] = field(default_factory=list)
    passed_over: list[str] = field(default_factory=list)
    """Files that are no logbooks of a person's: backups, and what `fill` has written"""

    @property
    def has_problems(self) -> bool:
        return bool(self.failed) or any(report.has_problems for report in self.logbooks)


def found(given: Iterable[Path]) -> tuple[list[Path], list[Path]]:
    """Return the logbooks that files, folders and patterns name, and what was passed over.

    A folder stands for the logbooks in it, a pattern for the files that it matches. Where there is
    more than one, backups and earlier results are passed over.
    Raises LogbookError for a folder or pattern without a logbook.
    """
    paths = list(dict.fromkeys(path for each in given for path in _meant(each)))
    if len(paths) == 1:
        return paths, []
    ours = [path for path in paths if _MADE_HERE.search(path.stem)]
    return [path for path in paths if path not in ours], ours


def _meant(path: Path) -> Iterator[Path]:
    if path.is_dir():
        meant = [each for each in sorted(path.iterdir()) if _is_logbook(each)]
        what = "is a folder"
    elif not path.exists() and has_magic(str(path)):
        root = Path(path.anchor) if path.anchor else Path()
        pattern = str(path.relative_to(path.anchor)) if path.anchor else str(path)
        meant = [each for each in sorted(root.glob(pattern)) if _is_logbook(each)]
        what = "matches no file, or is a pattern"
    else:
        yield path
        return
    if not meant:
        raise LogbookError(f"{path} {what} without a logbook ({', '.join(FORMATS)})")
    yield from meant


def _is_logbook(path: Path) -> bool:
    return (
        path.suffix.lower() in FORMATS and not path.name.startswith((".", "~$")) and path.is_file()
    )


class HasLogbook(Protocol):
    """A piece of work: a process does one at a time."""

    @property
    def logbook(self) -> Path: ...


Piece = TypeVar("Piece", bound=HasLogbook)
Outcome = TypeVar("Outcome")


def fill_all(tasks: Sequence[Task], told: Callable[[Path], None] = lambda _: None) -> BatchReport:
    """Fill logbooks, several at a time; `told` hears of each that is done with.

    The report has them in the order of `tasks`.
    """
    return each_of(tasks, _filled, told)


def each_of(
    tasks: Sequence[Piece],
    work: Callable[[Piece], "Outcome | Failure"],
    told: Callable[[Path], None] = lambda _: None,
) -> BatchReport:
    """Return what `work` gives for each task, several done at a time; `told` hears of each.

    The report has them in the order of `tasks`.
    """
    results: dict[int, Outcome | Failure] = {}
    waiting = list(range(len(tasks)))
    workers = min(os.cpu_count() or 1, len(tasks))
    while waiting:
        with _processes(workers) as pool:
            futures = {pool.submit(work, tasks[index]): index for index in waiting}
            for future in as_completed(futures):
                index = futures[future]
                result = _result(future)
                if result is not None:
                    results[index] = result
                    told(tasks[index].logbook)
        waiting = [index for index in waiting if index not in results]
        if waiting and workers == 1:
            # One process, and it ended: of those that were not done, the first was its end.
            index = waiting.pop(0)
            results[index] = _ended(tasks[index])
            told(tasks[index].logbook)
        workers = 1
    report = BatchReport()
    for index in sorted(results):
        result = results[index]
        if isinstance(result, Failure):
            report.failed.append(result)
        else:
            report.logbooks.append(result)
    return report


def _processes(workers: int) -> ProcessPoolExecutor:
    # A new interpreter each: one that is forked from a program with threads may hang.
    return ProcessPoolExecutor(workers, mp_context=multiprocessing.get_context("spawn"))


def _result(future: "Future[Outcome | Failure]") -> "Outcome | Failure | None":
    try:
        return future.result()
    except BrokenProcessPool:
        return None


def _ended(task: HasLogbook) -> Failure:
    return Failure(str(task.logbook), f"{task.logbook} could not be read: its reader broke off")


def kept_apart(task: Piece, work: Callable[[Piece], Outcome]) -> "Outcome | Failure":
    """Return what `work` gives, or the sentence that says why it gives nothing."""
    try:
        return work(task)
    except (CellError, LogbookError, RecipeError) as error:
        return Failure(str(task.logbook), str(error))
    except OSError as error:
        return Failure(str(task.logbook), f"{task.logbook}: {error.strerror or error}")
    except MemoryError:
        return Failure(str(task.logbook), f"{task.logbook} is too large for this machine's memory")


def _filled(task: Task) -> Report | Failure:
    return kept_apart(
        task,
        lambda task: fill(
            task.logbook,
            task.output,
            load(task.recipe) if task.recipe else None,
            overwrite=task.overwrite,
            backup=task.backup,
        ),
    )
