"""Many logbooks in one command: several at a time, one report, and each on its own.

Outside checks: the exit statuses and streams of POSIX; a pseudo-terminal shows what a person sees.
"""

import json
import multiprocessing
import os
import pty
import shutil
import signal
import subprocess
import sys
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))

from logs import RECIPE, REPOSITORY, ROWS, run, write_xlsx

from workbooks.commands import batch
from workbooks.logbook import LogbookError

CLEAN = [ROWS[0], ROWS[1]]


@pytest.fixture
def nights(tmp_path: Path) -> Path:
    (tmp_path / "own.toml").write_text(RECIPE)
    folder = tmp_path / "nights"
    folder.mkdir()
    for number in range(1, 4):
        write_xlsx(folder / f"night{number}.xlsx", CLEAN)
    (folder / "night4.csv").write_text("Line,Wavelength [nm]\nH alpha,689.284\n")
    (folder / "notes.txt").write_text("dome closed\n")
    (folder / ".~lock.night9.xlsx#").write_text("")
    return tmp_path


def names(folder: Path) -> list[str]:
    return sorted(each.name for each in folder.iterdir() if not each.name.startswith("."))


def test_a_folder_is_filled(nights: Path) -> None:
    ran = run(nights, "fill", "nights", "-r", "own.toml")
    assert (ran.returncode, ran.stderr) == (0, "")
    assert "4 filled, 0 not filled" in ran.stdout
    assert {"night1-filled.xlsx", "night2-filled.xlsx", "night3-filled.xlsx", "night4-filled.csv"} < set(names(nights / "nights"))  # fmt: skip # noqa: E501
    # what was written is no logbook of tonight's
    ran = run(nights, "fill", "nights", "-r", "own.toml", "--overwrite")
    assert ran.returncode == 0
    assert ran.stdout.count("passed over") == 4
    assert "4 filled" in ran.stdout


def test_the_same_as_one_by_one(nights: Path) -> None:
    run(nights, "fill", "nights", "-r", "own.toml")
    for name in ("night1.xlsx", "night4.csv"):
        source = nights / "nights" / name
        alone = run(nights, "fill", str(source), "-r", "own.toml", "-o", f"alone{source.suffix}")
        assert alone.returncode == 0
        together = source.with_name(f"{source.stem}-filled{source.suffix}")
        assert (nights / f"alone{source.suffix}").read_bytes() == together.read_bytes()


def test_one_that_fails_does_not_stop_the_rest(nights: Path) -> None:
    folder = nights / "nights"
    (folder / "night2.xlsx").write_bytes(b"PK\x03\x04 cut short")
    write_xlsx(folder / "night3.xlsx", ROWS)
    ran = run(nights, "fill", "nights", "-r", "own.toml", "--json")
    assert (ran.returncode, ran.stderr) == (1, "")
    report = json.loads(ran.stdout)
    assert [Path(each["logbook"]).name for each in report["logbooks"]] == [
        "night1.xlsx", "night3.xlsx", "night4.csv",
    ]  # fmt: skip
    assert [sheet["refused"] for each in report["logbooks"] for sheet in each["sheets"]] == [
        0,
        2,
        0,
    ]
    (failure,) = report["failed"]
    assert failure["logbook"].endswith("night2.xlsx")
    assert "night2.xlsx" in failure["sentence"]
    ran = run(nights, "fill", "nights", "-r", "own.toml", "--overwrite")
    assert ran.returncode == 1
    assert "night2.xlsx: not filled, " in ran.stdout
    assert "3 filled, 1 not filled" in ran.stdout


def test_nothing_filled_at_all_is_a_wrong_call(nights: Path) -> None:
    for path in (nights / "nights").glob("night*"):
        path.write_bytes(b"")
    ran = run(nights, "fill", "nights", "-r", "own.toml")
    assert ran.returncode == 2
    assert ran.stdout.count("not filled, ") == 4


@pytest.mark.parametrize(
    ("given", "count"),
    [
        (["nights/*.xlsx"], 3),
        (["nights/night[12].*"], 2),
        (["**/*.csv", "nights/night1.xlsx"], 2),
        (["nights/night1.xlsx", "nights/night2.xlsx", "nights/night1.xlsx"], 2),
    ],
)
def test_files_and_patterns(nights: Path, given: list[str], count: int) -> None:
    ran = run(nights, "fill", *given, "-r", "own.toml", "-o", "nights", "--json")
    assert ran.returncode == 2
    (nights / "out").mkdir()
    ran = run(nights, "fill", *given, "-r", "own.toml", "-o", "out", "--json")
    assert ran.returncode == 0
    assert len(json.loads(ran.stdout)["logbooks"]) == count
    assert len(names(nights / "out")) == count
    assert not [name for name in names(nights / "nights") if "filled" in name]


@pytest.mark.parametrize(
    "arguments",
    [
        ("nights", "-o", "one.xlsx"),
        ("nights", "-r", "gone.toml"),
        ("nights/night1.xlsx", "copy/night1.xlsx", "-o", "copy2"),
        ("nights/*.parquet",),
    ],
)
def test_wrong_calls(nights: Path, arguments: tuple[str, ...]) -> None:
    shutil.copytree(nights / "nights", nights / "copy")
    (nights / "copy2").mkdir()
    ran = run(nights, "fill", "-r", "own.toml", *arguments)
    assert ran.returncode == 2
    assert ran.stdout == ""
    assert ran.stderr.count("\n") == 1
    assert names(nights / "copy2") == []


def test_in_place_with_backups(nights: Path) -> None:
    folder = nights / "nights"
    before = {name: (folder / name).read_bytes() for name in names(folder)}
    ran = run(nights, "fill", "nights", "-r", "own.toml", "--in-place")
    assert ran.returncode == 0
    for number in (1, 2, 3):
        kept = folder / f"night{number}.before-fill.xlsx"
        assert kept.read_bytes() == before[f"night{number}.xlsx"]
    # a second time the backups are left alone
    ran = run(nights, "fill", "nights/*", "-r", "own.toml", "--in-place", "--no-backup")
    assert ran.returncode == 0
    assert ran.stdout.count("passed over") == 4
    assert len([name for name in names(folder) if "before-fill" in name]) == 4


def seen_on_a_terminal(folder: Path, *arguments: str) -> tuple[bytes, bytes]:
    """Run the command with a terminal for its messages; return stdout and what is shown there."""
    terminal, end = pty.openpty()
    ran = subprocess.Popen(
        [sys.executable, "-m", "workbooks.cli", *arguments],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(REPOSITORY), "TERM": "xterm", "COLUMNS": "100"},
        stdout=subprocess.PIPE,
        stderr=end,
    )
    os.close(end)
    shown = b""
    while True:
        try:
            piece = os.read(terminal, 4096)
        except OSError:
            break
        if not piece:
            break
        shown += piece
    os.close(terminal)
    told, _ = ran.communicate(timeout=60)
    assert ran.returncode == 0
    return told, shown


def test_progress_on_a_terminal_and_nothing_in_a_pipe(nights: Path) -> None:
    told, shown = seen_on_a_terminal(nights, "fill", "nights", "-r", "own.toml")
    assert b"4/4" in shown
    assert b"night" in shown
    assert b"\x1b" not in told
    assert b"4 filled" in told
    ran = run(nights, "fill", "nights", "-r", "own.toml", "--overwrite")
    assert ran.stderr == ""
    assert "4/4" not in ran.stdout


fill_one = batch._filled


def ends_its_process(task: batch.Task) -> object:
    if task.logbook.name == "night2.xlsx":
        os.kill(os.getpid(), signal.SIGKILL)
    return fill_one(task)


def test_one_that_ends_its_process_does_not_stop_the_rest(
    nights: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """As a reader would that runs out of memory: the kernel kills it, and nobody else."""
    # only a process that is forked knows what this test has put in the place of the real one
    forking = multiprocessing.get_context("fork")
    monkeypatch.setattr(batch.multiprocessing, "get_context", lambda _: forking)
    monkeypatch.setattr(batch, "_filled", ends_its_process)
    own = str(nights / "own.toml")
    tasks = [
        batch.Task(path, path.with_name(f"{path.stem}-filled.xlsx"), own, False, False)
        for path in sorted((nights / "nights").glob("night*.xlsx"))
    ]
    told: list[str] = []
    report = batch.fill_all(tasks, lambda path: told.append(path.name))
    assert [Path(each.logbook).name for each in report.logbooks] == ["night1.xlsx", "night3.xlsx"]
    (failure,) = report.failed
    assert failure.logbook.endswith("night2.xlsx")
    assert "broke off" in failure.sentence
    assert sorted(told) == ["night1.xlsx", "night2.xlsx", "night3.xlsx"]


def test_what_is_meant(nights: Path, tmp_path: Path) -> None:
    folder = nights / "nights"
    (folder / "~$night1.xlsx").write_bytes(b"x")
    meant, passed_over = batch.found([folder])
    assert [path.name for path in meant] == [
        "night1.xlsx",
        "night2.xlsx",
        "night3.xlsx",
        "night4.csv",
    ]
    assert passed_over == []
    with pytest.raises(LogbookError, match="without a logbook"):
        batch.found([nights / "own*"])
    # one that is named by itself is what is meant, whatever it is called
    assert batch.found([folder / "night1-filled.xlsx"]) == ([folder / "night1-filled.xlsx"], [])
