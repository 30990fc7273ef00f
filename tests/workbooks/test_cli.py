"""The command `cellfuncs` as a shell meets it: what it prints, what it writes, how it ends.

Outside check: the exit statuses and streams of POSIX; openpyxl reads what was written.
"""

import json
import os
import subprocess
import sys
import zipfile
from pathlib import Path

import openpyxl
import pytest

sys.path.insert(0, str(Path(__file__).parent))

from logs import run

import cellfuncs as cf
from workbooks.recipe import built_in

NIGHT_RECIPE = """
title = "Own"
purpose = "Own headers."

[[sheets]]
name = "Lines"

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
"""


def one_sentence(ran: subprocess.CompletedProcess[str]) -> str:
    """Return what was said on stderr: one line, no traceback, nothing on stdout."""
    assert ran.stdout == ""
    assert ran.stderr.startswith("cellfuncs: ")
    assert ran.stderr.count("\n") == 1
    assert "Traceback" not in ran.stderr
    return ran.stderr.strip()


@pytest.fixture
def night(tmp_path: Path) -> Path:
    (tmp_path / "own.toml").write_text(NIGHT_RECIPE)
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = "Night"
    for row in (["Line", "Wavelength [nm]"], ["H alpha", 689.284], ["H beta", 510.4]):
        sheet.append(row)
    book.save(tmp_path / "night.xlsx")
    return tmp_path


def add_mistake(folder: Path) -> None:
    book = openpyxl.load_workbook(folder / "night.xlsx")
    book["Night"].append(["Halfa", 656.0])
    book.save(folder / "night.xlsx")


def test_a_good_logbook_ends_with_0(night: Path) -> None:
    before = (night / "night.xlsx").read_bytes()
    ran = run(night, "fill", "night.xlsx", "--recipe", "own.toml")
    assert (ran.returncode, ran.stderr) == (0, "")
    assert "2 rows filled, 0 rows refused" in ran.stdout
    assert (night / "night.xlsx").read_bytes() == before
    found = openpyxl.load_workbook(night / "night-filled.xlsx")["Night"]["C2"].value
    assert found == pytest.approx(cf.redshift_from_line(6892.84, "H alpha"), rel=1e-12)


def test_problems_in_the_data_end_with_1_and_are_listed(night: Path) -> None:
    add_mistake(night)
    ran = run(night, "fill", "night.xlsx", "--recipe", "own.toml", "-o", "out.xlsx")
    assert (ran.returncode, ran.stderr) == (1, "")
    assert "2 rows filled, 1 row refused" in ran.stdout
    assert "Night!A4: Line: the line 'Halfa' is not in the table" in ran.stdout
    sheet = openpyxl.load_workbook(night / "out.xlsx")["Night"]
    assert sheet["C4"].value == "#VALUE!"
    assert isinstance(sheet["C3"].value, float)


def test_a_sheet_whose_unit_does_not_fit_ends_with_1(night: Path) -> None:
    book = openpyxl.load_workbook(night / "night.xlsx")
    for row in (["Line", "Wavelength [GHz]"], ["H alpha", 656.0]):
        book["Second"].append(row) if "Second" in book else book.create_sheet("Second").append(row)
    book.save(night / "night.xlsx")
    ran = run(night, "fill", "night.xlsx", "--recipe", "own.toml")
    assert ran.returncode == 1
    assert "Second: skipped, B1 holds 'Wavelength [GHz]'" in ran.stdout
    book = openpyxl.load_workbook(night / "night-filled.xlsx")
    assert isinstance(book["Night"]["C2"].value, float)
    assert book["Second"].max_column == 2


def test_the_report_as_json(night: Path) -> None:
    add_mistake(night)
    ran = run(night, "fill", "night.xlsx", "-r", "own.toml", "--json")
    assert (ran.returncode, ran.stderr) == (1, "")
    report = json.loads(ran.stdout)
    (sheet,) = report["sheets"]
    assert (report["recipe"], report["output"]) == ("own", "night-filled.xlsx")
    assert (sheet["name"], sheet["filled"], sheet["refused"]) == ("Night", 2, 1)
    assert sheet["refusals"][0]["cell"] == "Night!A4"
    assert "Halfa" in sheet["refusals"][0]["sentence"]
    assert report["skipped"] == []


def test_in_place_only_when_asked(night: Path) -> None:
    before = (night / "night.xlsx").read_bytes()
    sentence = one_sentence(
        run(night, "fill", "night.xlsx", "-r", "own.toml", "-o", "./night.xlsx")
    )
    assert "--in-place" in sentence
    assert (night / "night.xlsx").read_bytes() == before
    assert run(night, "fill", "night.xlsx", "-r", "own.toml", "--in-place").returncode == 0
    assert isinstance(openpyxl.load_workbook(night / "night.xlsx")["Night"]["C2"].value, float)
    assert not (night / "night-filled.xlsx").exists()


def test_an_output_that_exists_is_refused_with_2(night: Path) -> None:
    (night / "night-filled.xlsx").write_bytes(b"last night")
    ran = run(night, "fill", "night.xlsx", "-r", "own.toml")
    assert ran.returncode == 2
    assert "night-filled.xlsx" in one_sentence(ran)
    assert (night / "night-filled.xlsx").read_bytes() == b"last night"
    assert run(night, "fill", "night.xlsx", "-r", "own.toml", "--overwrite").returncode == 0


@pytest.mark.parametrize(
    "arguments",
    [
        ("fill",),
        ("fill", "night.xlsx"),
        ("fill", "gone.xlsx", "-r", "own.toml"),
        ("fill", "empty", "-r", "own.toml"),
        ("fill", "*.ods", "-r", "own.toml"),
        ("fill", "night.xlsx", "-r", "own.toml", "-o", "night.ods"),
        ("fill", "night.xlsx", "-r", "gone.toml"),
        ("fill", "night.xlsx", "-r", "line-logg"),
        ("fill", "night.xlsx", "-r", "distance-sheet"),
        ("fill", "night.xlsx", "-r", "own.toml", "--in-place", "-o", "x.xlsx"),
        ("fill", "night.xlsx", "-r", "own.toml", "-o", "no/such/folder/x.xlsx"),
        ("fill", "night.xlsx", "-r", "own.toml", "--unknown"),
        ("fil", "night.xlsx"),
        ("template", "line-logg"),
        ("template", "line-log", "--formulas", "plane"),
        ("template", "line-log", "--rows", "0"),
        ("template", "line-log", "--rows", "many"),
        ("template", "line-log", "-o", "no/such/folder/x.xlsx"),
        ("template", "line-log", "-o", "night.xlsx"),
        ("template", "line-log", "-o", "log.csv"),
    ],
)
def test_a_wrong_call_gets_one_sentence_and_2(night: Path, arguments: tuple[str, ...]) -> None:
    (night / "empty").mkdir()
    before = sorted(night.iterdir())
    ran = run(night, *arguments)
    assert ran.returncode == 2
    one_sentence(ran)
    assert sorted(night.iterdir()) == before


def truncated(whole: bytes) -> bytes:
    return whole[: len(whole) // 2]


@pytest.mark.parametrize(
    ("name", "spoil"),
    [
        ("empty", lambda _: b""),
        ("one byte", lambda _: b"P"),
        ("truncated", truncated),
        ("cut at the end", lambda whole: whole[:-30]),
        ("text", lambda _: b"Line,Wavelength\nH alpha,656\n"),
        ("old xls", lambda _: bytes.fromhex("d0cf11e0a1b11ae1") + b"\0" * 600),
        ("scrambled", lambda whole: whole[:400] + bytes(400) + whole[800:]),
    ],
)
def test_a_file_that_is_no_workbook_gets_one_sentence_and_2(
    night: Path, name: str, spoil: object
) -> None:
    path = night / "night.xlsx"
    path.write_bytes(spoil(path.read_bytes()))  # type: ignore[operator]
    ran = run(
        night, "fill", "night.xlsx", "-r", "own.toml", *(["--json"] if name == "empty" else [])
    )
    assert ran.returncode == 2
    assert "night.xlsx" in one_sentence(ran)
    assert not (night / "night-filled.xlsx").exists()


def test_a_zip_that_is_no_workbook_gets_one_sentence_and_2(night: Path) -> None:
    with zipfile.ZipFile(night / "night.xlsx", "w") as package:
        package.writestr("readme.txt", "nothing")
    ran = run(night, "fill", "night.xlsx", "-r", "own.toml")
    assert ran.returncode == 2
    assert "night.xlsx" in one_sentence(ran)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("redshift_from_line(", "redshift_from_lin("),
        ('role = "computed"', 'role = "comptued"'),
        ('unit = "Angstrom"', 'unit = "Angstroem"'),
        ('purpose = "Own headers."', "purpose = "),
    ],
)
def test_a_recipe_that_does_not_hold_names_file_and_line(night: Path, old: str, new: str) -> None:
    path = night / "own.toml"
    path.write_text(NIGHT_RECIPE.replace(old, new))
    ran = run(night, "fill", "night.xlsx", "-r", "own.toml")
    assert ran.returncode == 2
    sentence = one_sentence(ran)
    assert "own.toml" in sentence
    assert "line " in sentence


def test_templates_are_listed_and_made(tmp_path: Path) -> None:
    listed = run(tmp_path, "template")
    assert listed.returncode == 0
    assert all(name in listed.stdout for name in built_in())
    made = run(tmp_path, "template", "distance-sheet", "--rows", "7")
    assert (made.returncode, made.stderr) == (0, "")
    book = openpyxl.load_workbook(tmp_path / "distance-sheet.xlsx")
    assert book["Distances"].max_row == 11
    assert str(book["Distances"]["F11"].value).startswith("=")
    assert run(tmp_path, "template", "distance-sheet").returncode == 2
    assert run(tmp_path, "template", "distance-sheet", "--overwrite").returncode == 0


def test_a_template_is_filled_by_the_recipe_that_it_names(tmp_path: Path) -> None:
    run(tmp_path, "template", "distance-sheet", "-o", "t.xlsx", "--formulas", "none")
    book = openpyxl.load_workbook(tmp_path / "t.xlsx")
    book["Distances"]["B5"] = 0.5
    book.save(tmp_path / "t.xlsx")
    ran = run(tmp_path, "fill", "t.xlsx")
    assert (ran.returncode, ran.stderr) == (0, "")
    filled = openpyxl.load_workbook(tmp_path / "t-filled.xlsx")["Distances"]
    place = next(cell.column for cell in filled[4] if cell.value == "Distance, luminosity [Mpc]")
    assert filled.cell(5, place).value == pytest.approx(cf.distance_luminosity(0.5), rel=1e-12)


def test_version_and_help(tmp_path: Path) -> None:
    from cellfuncs.version import __version__

    assert run(tmp_path, "--version").stdout == f"cellfuncs {__version__}\n"
    told = run(tmp_path, "fill", "--help")
    assert told.returncode == 0
    assert "--in-place" in told.stdout


def test_a_reader_that_has_had_enough_is_no_error(night: Path) -> None:
    command = f"{sys.executable} -m workbooks.cli template | head -c 1; exit ${{PIPESTATUS[0]}}"
    ran = subprocess.run(
        ["bash", "-c", command],
        cwd=night,
        env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])},
        capture_output=True,
        timeout=60,
        check=False,
    )
    assert ran.returncode == 0
    assert b"Traceback" not in ran.stderr
    assert b"BrokenPipe" not in ran.stderr
