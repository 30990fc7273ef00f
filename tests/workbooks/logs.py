"""A recipe and logbooks for the tests of formats and faults; all data are invented."""

import os
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Callable, Sequence
from functools import cache
from pathlib import Path
from typing import Any

import openpyxl

import cellfuncs as cf
from workbooks.recipe import Recipe, read

REPOSITORY = Path(__file__).parents[2]

RECIPE = """
title = "Own"
purpose = "Own headers."

[[sheets]]
name = "Lines"

[[sheets.columns]]
key = "target"
label = "Target"
role = "input"
kind = "text"
required = false

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"

[[sheets.columns]]
key = "wavelength"
label = "Wavelength"
unit = "Angstrom"
role = "input"

[[sheets.columns]]
key = "redshift"
label = "Redshift"
role = "computed"
formula = "redshift_from_line(wavelength, line)"
note = "from the line's vacuum wavelength"

[[sheets.columns]]
key = "velocity"
label = "Velocity"
unit = "km/s"
role = "computed"
formula = "velocity_from_redshift(redshift, 'optical')"
"""

HEADERS = ("Target", "Line", "Wavelength [nm]", "Remark")
ROWS: tuple[tuple[Any, ...], ...] = (
    ("TH 0412-17", "H alpha", 668.756, "thin cloud"),
    ("=1+1", "H beta", 510.4, 'he said "good"'),
    ("+TH 7", "Halfa", 700.5, None),
    ("@dome", "H alpha", 689.284, "seeing 1.2; 0.9"),
    ("TH 0733-05", "H alpha", -1.0, None),
    ("Ångström's", "H beta", 561.25, "α & β"),
)


@cache
def recipe() -> Recipe:
    return read(RECIPE.encode(), "own.toml", "own")


def redshift(row: Sequence[Any]) -> float:
    """The number that a row of ROWS must give."""
    return cf.redshift_from_line(row[2] * 10, row[1])


def write_xlsx(path: Path, rows: Sequence[Sequence[Any]] = ROWS) -> Path:
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = "Night"
    for place, header in enumerate(HEADERS, 1):
        sheet.cell(1, place, header)
    for number, row in enumerate(rows, 2):
        for place, value in enumerate(row, 1):
            cell = sheet.cell(number, place, value)
            if isinstance(value, str):
                cell.data_type = "s"
    book.save(path)
    return path


@cache
def _profile() -> str:
    return Path(tempfile.mkdtemp(prefix="office-profile-")).as_uri()


def by_libreoffice(source: Path, format_and_filter: str, folder: Path) -> Path:
    """Have LibreOffice itself write a file in another format."""
    folder.mkdir(exist_ok=True)
    subprocess.run(
        [
            *("soffice", f"-env:UserInstallation={_profile()}", "--headless"),
            *("--convert-to", format_and_filter, "--outdir", str(folder), str(source)),
        ],
        check=True,
        timeout=120,
        capture_output=True,
    )
    return folder / f"{source.stem}.{format_and_filter.partition(':')[0]}"


def run(
    folder: Path, *arguments: str, path: str = str(REPOSITORY), **options: Any
) -> subprocess.CompletedProcess[str]:
    """Run the command as a shell would, in a pipe; `path` is where Python looks for modules."""
    return subprocess.run(
        [sys.executable, "-m", "workbooks.cli", *arguments],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": path, "COLUMNS": "200"},
        capture_output=True,
        text=True,
        timeout=120,
        check=False,
        **options,
    )


def in_child(work: Callable[[], None]) -> int:
    """Do work in a process that is forked off; return how it ended."""
    child = os.fork()
    if child == 0:
        try:
            work()
        except BaseException:
            os._exit(1)
        os._exit(0)
    return os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])


def copied(source: Path, target: Path) -> Path:
    return Path(shutil.copy(source, target))
