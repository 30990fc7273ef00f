"""Many logbooks checked and exported by one command: a bad one does not stop the others.

The process of each is a real one. What is read back: FITS by astropy.
"""

import json
import os
import pty
import subprocess
import sys
from pathlib import Path

import openpyxl
import pytest
from astropy.table import Table

from workbooks.build import build
from workbooks.fill import fill
from workbooks.recipe import load


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    """Two filled logs, one with a value typed over, and one file that is none."""
    logs = tmp_path / "nights"
    logs.mkdir()
    build(load("line-log"), tmp_path / "template.xlsx", rows=4)
    book = openpyxl.load_workbook(tmp_path / "template.xlsx")
    sheet = book["Lines"]
    for row, wavelength in ((5, 6892.8), (6, 7000.1)):
        sheet[f"A{row}"], sheet[f"B{row}"], sheet[f"C{row}"] = "NGC 1", "H alpha", wavelength
    book.save(tmp_path / "typed.xlsx")
    for name in ("one", "two"):
        fill(tmp_path / "typed.xlsx", logs / f"{name}.xlsx")
    over = openpyxl.load_workbook(logs / "two.xlsx")
    over["Lines"]["F5"] = 0.07
    over.save(logs / "two.xlsx")
    (logs / "broken.xlsx").write_bytes(b"PK no workbook")
    return logs


def command(*words: str | Path) -> subprocess.CompletedProcess[str]:
    call = [sys.executable, "-m", "workbooks.cli", *map(str, words)]
    return subprocess.run(call, capture_output=True, text=True, timeout=300, check=False)


def test_check_looks_through_a_folder(folder: Path) -> None:
    done = command("check", folder)
    assert done.returncode == 1
    assert f"{folder / 'two.xlsx'} by the recipe line-log" in done.stdout
    assert "Lines!F5: " in done.stdout, done.stdout
    assert f"{folder / 'broken.xlsx'}: not looked through, " in done.stdout
    assert done.stderr == ""
    told = json.loads(command("check", folder, "--json").stdout)
    assert [Path(each["logbook"]).name for each in told["logbooks"]] == ["one.xlsx", "two.xlsx"]
    assert [Path(each["logbook"]).name for each in told["failed"]] == ["broken.xlsx"]
    assert [each["cell"] for each in told["logbooks"][1]["findings"]] == ["F5"]


def test_a_pattern_and_several_files(folder: Path) -> None:
    assert command("check", folder / "o*.xlsx").returncode == 0
    assert command("check", folder / "one.xlsx", folder / "two.xlsx").returncode == 1
    none = command("check", folder / "x*.xlsx")
    assert none.returncode == 2
    assert "without a logbook" in none.stderr


def test_comments_go_into_one_copy_only(folder: Path, tmp_path: Path) -> None:
    done = command("check", folder, "--annotate", tmp_path / "copy.xlsx")
    assert done.returncode == 2
    assert "one logbook" in done.stderr
    assert not (tmp_path / "copy.xlsx").exists()


def test_export_takes_a_folder(folder: Path, tmp_path: Path) -> None:
    archive = tmp_path / "archive"
    archive.mkdir()
    done = command("export", folder, "-o", archive / ".fits")
    assert done.returncode == 1
    assert f"{folder / 'broken.xlsx'}: not exported, " in done.stdout
    assert sorted(each.name for each in archive.iterdir()) == ["one.fits", "two.fits"]
    table = Table.read(archive / "one.fits")
    assert str(table["observed"].unit) == "Angstrom"
    assert list(table["observed"]) == [6892.8, 7000.1]
    again = command("export", folder, "-o", archive / ".fits")
    assert "exists" in again.stdout
    assert again.returncode == 2


def test_several_need_a_folder_to_go_to(folder: Path, tmp_path: Path) -> None:
    done = command("export", folder, "-o", tmp_path / "all.fits")
    assert done.returncode == 2
    assert "archive/.fits" in done.stderr
    assert not (tmp_path / "all.fits").exists()


def test_a_terminal_sees_how_far_it_is_and_a_pipe_does_not(folder: Path) -> None:
    call = [sys.executable, "-m", "workbooks.cli", "check", str(folder)]
    inside, outside = pty.openpty()
    with os.fdopen(inside, "rb", buffering=0) as screen:
        process = subprocess.Popen(call, stdout=subprocess.DEVNULL, stderr=outside)
        os.close(outside)
        seen = b""
        try:
            while part := screen.read(4096):
                seen += part
        except OSError:  # the other end is closed
            pass
        process.wait(timeout=60)
    assert b"3" in seen
    assert b"one.xlsx" in seen or b"looking through" in seen
