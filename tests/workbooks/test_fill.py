"""`fill` computes a logbook's columns, writes them in, and touches nothing else.

Outside checks: openpyxl, LibreOffice and zipfile read what was written; astropy converts units.
The functions' own numbers are held to the literature in tests/published/.
"""

import re
import sys
import zipfile
from datetime import UTC, datetime
from math import isclose
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from openpyxl.worksheet.worksheet import Worksheet
from recalculate import recalculated

import cellfuncs as cf
from cellfuncs.version import __version__
from workbooks.build import build
from workbooks.fill import Report, fill
from workbooks.logbook import LogbookError
from workbooks.recipe import Recipe, load, read

sys.path.insert(0, str(Path(__file__).parent))

from everything import EXPOSURES, NIGHT_PART, write_everything

LOG = """
title = "Own log"
purpose = "An observatory's own headers."
cosmology = "Planck18"

[[settings]]
key = "shortest"
label = "Shortest"
group = "Instrument"
unit = "Angstrom"
value = 3000

[[sheets]]
name = "Lines"

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"
aliases = ["Line ID", "Feature"]

[[sheets.columns]]
key = "wavelength"
label = "Wavelength"
unit = "Angstrom"
role = "input"
at_least = "shortest"
aliases = ["Centre", "Wavelength (fitted)"]

[[sheets.columns]]
key = "medium"
label = "Medium"
role = "input"
choices = ["vacuum", "air"]

[[sheets.columns]]
key = "adopted"
label = "Adopted redshift"
role = "input"
required = false

[[sheets.columns]]
key = "redshift"
label = "Redshift"
role = "computed"
formula = "redshift_from_line(wavelength, line, medium)"

[[sheets.columns]]
key = "velocity"
label = "Velocity"
unit = "km/s"
role = "computed"
formula = "velocity_from_redshift(redshift, 'optical')"

[[sheets.columns]]
key = "offset"
label = "Offset"
unit = "km/s"
role = "computed"
formula = "velocity_peculiar(redshift, adopted)"
"""
TRAIL = f"cellfuncs {__version__}"


def own(text: str = LOG) -> Recipe:
    return read(text.encode(), "own.toml", "own")


def logbook(folder: Path, *rows: list[Any], sheet: str = "Night", **more: list[list[Any]]) -> Path:
    book = openpyxl.Workbook()
    first = book.active
    assert isinstance(first, Worksheet)
    first.title = sheet
    for name, table in {sheet: list(rows), **more}.items():
        page = book[name] if name in book.sheetnames else book.create_sheet(name)
        for number, row in enumerate(table, 1):
            for place, value in enumerate(row, 1):
                page.cell(number, place, value)
    path = folder / "night.xlsx"
    book.save(path)
    return path


def filled(
    path: Path, recipe: Recipe | None = None, **options: Any
) -> tuple[Report, openpyxl.Workbook]:
    output = path.with_name("filled.xlsx")
    report = fill(path, output, recipe or own(), overwrite=True, **options)
    return report, openpyxl.load_workbook(output, data_only=True)


def columns(sheet: Worksheet, header_row: int = 1) -> dict[str, str]:
    return {cell.value: cell.column_letter for cell in sheet[header_row] if cell.value}


def remarks(report: Report) -> dict[str, str]:
    return {
        remark.cell: remark.sentence
        for sheet in report.sheets
        for remark in (*sheet.refusals, *sheet.doubts)
    }


# ---- nothing lost ------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def everything(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path, Report]:
    folder = tmp_path_factory.mktemp("everything")
    source = write_everything(folder / "everything.xlsx")
    output = folder / "filled.xlsx"
    return source, output, fill(source, output, own())


def test_every_other_part_stays_byte_for_byte(everything: tuple[Path, Path, Report]) -> None:
    source, output, _ = everything
    with zipfile.ZipFile(source) as before, zipfile.ZipFile(output) as after:
        assert after.testzip() is None
        assert after.namelist() == before.namelist()
        assert after.comment == before.comment
        changed = {name for name in before.namelist() if before.read(name) != after.read(name)}
        for name in set(before.namelist()) - changed:
            assert after.getinfo(name).date_time == before.getinfo(name).date_time
    # the two sheets that have the columns, and the settings that ask for a new calculation
    assert {NIGHT_PART, "xl/worksheets/sheet2.xml"} <= changed
    assert changed <= {NIGHT_PART, "xl/worksheets/sheet2.xml", "xl/workbook.xml"}
    assert not any(
        re.search(r"chart|drawing|media|pivot|comment|table|bin", name) for name in changed
    )


def test_the_filled_sheet_keeps_all_that_is_not_a_cell(
    everything: tuple[Path, Path, Report],
) -> None:
    source, output, _ = everything
    cell = re.compile(rb"<c [^>]*?(?:/>|>.*?</c>)", re.S)
    rest = []
    for path in (source, output):
        with zipfile.ZipFile(path) as package:
            whole = package.read(NIGHT_PART)
        outside = whole[: whole.index(b"<sheetData")] + whole[whole.index(b"</sheetData>") :]
        rest.append(
            (re.sub(rb"<dimension [^>]*>", b"", outside), dict.fromkeys(cell.findall(whole)))
        )
    assert rest[0][0] == rest[1][0]
    kept = [each for each in rest[0][1] if not re.match(rb'<c r="[FIHJKLMN]\d', each)]
    assert kept
    assert [each for each in kept if each not in rest[1][1]] == []


def test_libreoffice_opens_it_with_the_new_values(everything: tuple[Path, Path, Report]) -> None:
    _, output, _ = everything
    night = recalculated(output, "libreoffice")["Night 1"]
    letters = columns(openpyxl.load_workbook(output)["Night 1"], 4)
    seen = 0
    for row, (_, line, wavelength, _, _) in enumerate(EXPOSURES, 5):
        if wavelength is None:
            continue
        # the column Redshift has the observatory's own formula; ours are beside it
        velocity = cf.velocity_from_redshift(cf.redshift_from_line(wavelength, line), "optical")
        assert isclose(night[f"{letters['Velocity [km/s]']}{row}"], velocity, rel_tol=1e-12)  # type: ignore[arg-type]
        assert str(night[f"{letters['Computed with']}{row}"]).startswith(TRAIL)
        seen += 1
    assert seen == len(EXPOSURES) - 1


def test_a_formula_in_a_computed_column_stays(everything: tuple[Path, Path, Report]) -> None:
    source, output, _ = everything
    for path in (source, output):
        sheet = openpyxl.load_workbook(path)["Night 1"]
        assert str(sheet["F5"].value).startswith("=D5/6564.61-1")
    # what the formula shows until it is calculated again is the function's number
    stored = openpyxl.load_workbook(output, data_only=True)["Night 1"]
    wanted = cf.redshift_from_line(6702.13, "H alpha")
    assert isclose(stored["F5"].value, wanted, rel_tol=1e-12)


def test_openpyxl_finds_what_was_there(everything: tuple[Path, Path, Report]) -> None:
    source, output, report = everything
    before, after = openpyxl.load_workbook(source), openpyxl.load_workbook(output)
    assert after.sheetnames == before.sheetnames
    assert dict(after.defined_names) == dict(before.defined_names)
    one, other = before["Night 1"], after["Night 1"]
    assert other["D5"].comment.text == one["D5"].comment.text
    assert len(other._charts) == len(one._charts) == 1
    assert str(other.merged_cells) == str(one.merged_cells)
    assert [sheet.name for sheet in report.sheets] == ["Night 1", "Night 2, b&w"]
    assert remarks(report)["Night 1!D7"] == "Wavelength is missing"


# ---- headers and units -------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("header", "value"),
    [
        ("Wavelength [Angstrom]", 6892.84),
        ("Wavelength [nm]", 689.284),
        ("Wavelength (nm)", 689.284),
        ("wavelength  [ nm ]", 689.284),
        ("WAVELENGTH (µm)", 0.689284),
        ("Wavelength [um]", 0.689284),
        ("Wavelength\n[nm]", 689.284),
        ("Centre [m]", 6.89284e-7),
        ("Wavelength [0.1nm]", 6892.84),
    ],
)
def test_the_unit_stands_in_the_header(tmp_path: Path, header: str, value: float) -> None:
    path = logbook(tmp_path, ["Feature", header], ["H alpha", value])
    report, book = filled(path)
    letters = columns(book["Night"])
    found = book["Night"][f"{letters['Redshift']}2"].value
    assert isclose(found, cf.redshift_from_line(6892.84, "H alpha"), rel_tol=1e-12)
    assert not report.has_problems


def test_a_header_without_unit_is_noted(tmp_path: Path) -> None:
    report, book = filled(logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84]))
    assert any("Night!B1" in note and "Angstrom" in note for note in report.sheets[0].notes)
    assert book["Night"]["C2"].value == cf.redshift_from_line(6892.84, "H alpha")
    assert not report.has_problems


def test_results_are_written_in_the_unit_of_their_header(tmp_path: Path) -> None:
    path = logbook(
        tmp_path,
        ["Line", "Wavelength [nm]", "Velocity [m/s]", "Offset (pc/Myr)", "Adopted redshift [%]"],
        ["H alpha", 689.284, None, None, 5.0],
    )
    _, book = filled(path)
    z = cf.redshift_from_line(6892.84, "H alpha")
    assert isclose(book["Night"]["C2"].value, 1000 * cf.velocity_from_redshift(z, "optical"), rel_tol=1e-12)  # fmt: skip # noqa: E501
    # 1 km/s is 1.0227 pc/Myr: IAU 2015 B2 parsec, Julian year
    per_myr = 3600 * 24 * 365.25 * 1e6 / 3.0856775814913673e13
    offset = cf.velocity_peculiar(z, 0.05) * per_myr
    assert isclose(book["Night"]["D2"].value, offset, rel_tol=1e-10)


@pytest.mark.parametrize("unit", ["GHz", "s", "km/s", "nmm", "fitted"])
def test_a_unit_that_does_not_fit_leaves_the_sheet_alone(tmp_path: Path, unit: str) -> None:
    row = ["H alpha", 6892.84]
    path = logbook(
        tmp_path,
        ["Line", f"Wavelength [{unit}]"],
        row,
        Second=[["Line", "Wavelength [Angstrom]"], row],
    )
    report, book = filled(path)
    assert [remark.cell for remark in report.skipped] == ["Night"]
    assert "B1" in report.skipped[0].sentence
    assert unit in report.skipped[0].sentence
    assert report.has_problems
    assert book["Night"].max_column == 2
    assert book["Second"]["C2"].value == cf.redshift_from_line(6892.84, "H alpha")


def test_an_alias_with_brackets_is_found(tmp_path: Path) -> None:
    report, book = filled(logbook(tmp_path, ["Line", "Wavelength (fitted)"], ["H alpha", 6892.84]))
    assert book["Night"]["C2"].value == cf.redshift_from_line(6892.84, "H alpha")
    assert not report.skipped


def test_two_headers_for_one_column_leave_the_sheet_alone(tmp_path: Path) -> None:
    path = logbook(tmp_path, ["Line", "Wavelength [nm]", "Centre"], ["H alpha", 656.0, 6560.0])
    report, book = filled(path)
    sentence = report.skipped[0].sentence
    assert "C1" in sentence
    assert "B1" in sentence
    assert book["Night"].max_column == 3


def test_new_columns_come_after_the_last_one(tmp_path: Path) -> None:
    path = logbook(
        tmp_path,
        ["Line", "Wavelength", "Seeing", None, "Remarks"],
        ["H alpha", 6892.84, 1.1, None, "x", "beyond the headers"],
    )
    _, book = filled(path)
    sheet = book["Night"]
    assert [cell.value for cell in sheet[1]][:6] == ["Line", "Wavelength", "Seeing", None, "Remarks", None]  # fmt: skip # noqa: E501
    assert [cell.value for cell in sheet[1]][6:] == [
        "Redshift", "Velocity [km/s]", "Offset [km/s]", "Computed with",
    ]  # fmt: skip
    assert sheet["F2"].value == "beyond the headers"


def test_headers_need_not_stand_on_top(tmp_path: Path) -> None:
    rows = [["Night of 14 March"], [], ["Observer", "crew B"], [], ["Line", "Wavelength"]]
    _, book = filled(logbook(tmp_path, *rows, ["H alpha", 6892.84]))
    assert book["Night"]["C5"].value == "Redshift"
    assert book["Night"]["C6"].value == cf.redshift_from_line(6892.84, "H alpha")


# ---- rows --------------------------------------------------------------------------------------


def test_values_are_the_function_s(tmp_path: Path) -> None:
    waves = [3000.0 + 137.31 * step for step in range(60)]
    rows = [
        ["H alpha", wave, ("air", "vacuum", None)[at % 3], 0.01 * at]
        for at, wave in enumerate(waves)
    ]
    path = logbook(tmp_path, ["Line", "Wavelength", "Medium", "Adopted redshift"], *rows)
    report, book = filled(path)
    assert report.sheets[0].filled == 60
    for number, (line, wave, medium, adopted) in enumerate(rows, 2):
        z = cf.redshift_from_line(wave, line, medium)
        found = [book["Night"].cell(number, place).value for place in (5, 6, 7)]
        wanted = [z, cf.velocity_from_redshift(z, "optical"), cf.velocity_peculiar(z, adopted)]
        assert all(isclose(a, b, rel_tol=1e-12) for a, b in zip(found, wanted, strict=True))


def test_other_rows_go_on(tmp_path: Path) -> None:
    path = logbook(
        tmp_path,
        ["Line", "Wavelength", "Medium", "Adopted redshift"],
        ["H alpha", 6892.84, "air", 0.05],
        ["Halfa", 6892.84],
        ["H alpha", "6892.84 A"],
        ["H alpha", -6892.84],
        ["H alpha", None],
        [None, 6892.84],
        ["H alpha", 6892.84, "ari"],
        ["H alpha", 2500.0],
        ["H alpha", 6892.84, None, "x"],
        ["H alpha", True],
        ["H alpha", datetime(2031, 3, 14)],
        [5007, 5100.0],
        ["Dome closed: wind"],
        ["H beta", 4964.9, "vacuum"],
    )
    report, book = filled(path)
    told = remarks(report)
    assert told["Night!A3"].startswith("Line: the line 'Halfa' is not in the table; near matches:")
    assert told["Night!B4"] == "Wavelength is not a number; it is '6892.84 A'"
    assert told["Night!B5"] == "Wavelength must be above 0 Angstrom; it is -6892.84 Angstrom"
    assert told["Night!B6"] == "Wavelength is missing"
    assert told["Night!A7"] == "Line is missing"
    assert told["Night!C8"] == "Medium must be vacuum or air; it is 'ari'"
    assert "«Shortest» (3000); it is 2500 Angstrom" in told["Night!B9"]
    assert "not a number" in told["Night!D10"]
    assert "not a number" in told["Night!B11"]
    assert "not a number" in told["Night!B12"]
    assert "2031" in told["Night!B12"]
    assert "datetime" not in told["Night!B12"]
    sheet = book["Night"]
    shown = [sheet.cell(number, 5).value for number in range(2, 16)]
    assert shown[0] == cf.redshift_from_line(6892.84, "H alpha", "air")
    assert shown[13] == cf.redshift_from_line(4964.9, "H beta")
    assert shown[1:7] == ["#VALUE!", "#VALUE!", "#NUM!", "#N/A", "#N/A", "#VALUE!"]
    # a doubtful one is computed and pointed out; a mistaken option spoils its own result only
    assert shown[7] == cf.redshift_from_line(2500.0, "H alpha")
    assert shown[8] == cf.redshift_from_line(6892.84, "H alpha")
    assert sheet["G10"].value == "#VALUE!"
    assert shown[9:12] == ["#VALUE!", "#VALUE!", "#VALUE!"]


def test_rows_without_required_inputs_are_remarks(tmp_path: Path) -> None:
    path = logbook(
        tmp_path,
        ["Object", "Line", "Wavelength", "Medium"],
        ["TH 1", "H alpha", 6892.84],
        [],
        ["Clouds from 03:00", None, None, "air"],
        ["TH 2", "H alpha", 6892.84],
    )
    report, book = filled(path)
    assert (report.sheets[0].filled, report.sheets[0].refused) == (2, 0)
    assert [book["Night"].cell(4, place).value for place in range(5, 9)] == [None] * 4
    assert not report.has_problems


def test_an_optional_column_that_is_missing_is_noted(tmp_path: Path) -> None:
    report, book = filled(logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84]))
    assert "there is no column Medium; taken as vacuum in all rows" in report.sheets[0].notes
    letters = columns(book["Night"])
    assert book["Night"][f"{letters['Offset [km/s]']}2"].value is None


def test_error_values_in_an_input_are_told(tmp_path: Path) -> None:
    path = logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", "#DIV/0!"], ["H alpha", 6892.84])
    book = openpyxl.load_workbook(path)
    book["Night"]["B2"].data_type = "e"
    book.save(path)
    report, after = filled(path)
    assert "#DIV/0!" in remarks(report)["Night!B2"]
    assert after["Night"]["C2"].value == "#VALUE!"
    assert after["Night"]["C3"].value == cf.redshift_from_line(6892.84, "H alpha")


def test_text_in_a_computed_cell_is_left_there(tmp_path: Path) -> None:
    path = logbook(
        tmp_path,
        ["Line", "Wavelength", "Redshift"],
        ["H alpha", 6892.84, "see note"],
        ["H alpha", 6892.84, 0.4],
    )
    report, book = filled(path)
    assert book["Night"]["C2"].value == "see note"
    assert book["Night"]["C3"].value == cf.redshift_from_line(6892.84, "H alpha")
    assert "see note" in remarks(report)["Night!C2"]
    assert report.has_problems


def test_a_text_result_is_renewed(tmp_path: Path) -> None:
    """What `fill` wrote itself is no remark of a person's"""
    recipe = own(
        LOG
        + '\n[[sheets.columns]]\nkey = "nearest"\nlabel = "Nearest"\nrole = "computed"\n'
        + 'kind = "text"\nformula = "line_nearest(wavelength, redshift)"\n'
    )
    path = logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84])
    first = tmp_path / "first.xlsx"
    assert not fill(path, first, recipe).has_problems
    book = openpyxl.load_workbook(first)
    letter = columns(book["Night"])["Nearest"]
    assert book["Night"][f"{letter}2"].value == "H alpha"
    book["Night"]["A2"] = "H beta"
    book.save(first)
    second = tmp_path / "second.xlsx"
    assert not fill(first, second, recipe).has_problems
    assert openpyxl.load_workbook(second)["Night"][f"{letter}2"].value == "H beta"


def test_a_result_whose_inputs_went_away_does_not_stay(tmp_path: Path) -> None:
    path = logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84], ["H beta", 4964.9])
    first, second = tmp_path / "first.xlsx", tmp_path / "second.xlsx"
    fill(path, first, own())
    book = openpyxl.load_workbook(first)
    book["Night"]["A2"] = book["Night"]["B2"] = None
    book["Night"]["B3"] = "?"
    book.save(first)
    fill(first, second, own())
    sheet = openpyxl.load_workbook(second)["Night"]
    assert not [cell.value for cell in sheet[2] if isinstance(cell.value, (int, float))]
    # nor does the trail of a number that is none any more
    assert sheet["C3"].value == "#VALUE!"
    assert not sheet[f"{columns(sheet)['Computed with']}3"].value


def test_a_second_filling_changes_nothing(tmp_path: Path) -> None:
    path = logbook(
        tmp_path,
        ["Line", "Wavelength (nm)", "Medium"],
        ["H alpha", 689.284, "air"],
        ["Halfa", 689.284],
        ["H alpha", None, "air"],
    )
    first, second = tmp_path / "first.xlsx", tmp_path / "second.xlsx"
    one, two = fill(path, first, own()), fill(first, second, own())
    assert one.sheets == two.sheets
    values = [
        [[cell.value for cell in row] for row in openpyxl.load_workbook(each)["Night"].iter_rows()]
        for each in (first, second)
    ]
    assert values[0] == values[1]


@pytest.mark.parametrize("formula", ["wavelength", "-wavelength", "wavelength * 2"])
@pytest.mark.parametrize("unit", ["Angstrom", "nm"])
def test_a_column_may_repeat_another_in_its_unit(tmp_path: Path, formula: str, unit: str) -> None:
    recipe = own(
        LOG
        + '\n[[sheets.columns]]\nkey = "again"\nlabel = "Again"\nrole = "computed"\n'
        + f'unit = "{unit}"\nformula = "{formula}"\n'
    )
    path = logbook(
        tmp_path, ["Line", "Wavelength"], ["H alpha", 6500.0], ["H alpha", "6500 A"], ["H alpha"]
    )
    report, book = filled(path, recipe)
    letter = columns(book["Night"])[f"Again [{unit}]"]
    factor = {"wavelength": 1, "-wavelength": -1, "wavelength * 2": 2}[formula]
    factor *= 0.1 if unit == "nm" else 1
    assert isclose(book["Night"][f"{letter}2"].value, 6500.0 * factor, rel_tol=1e-14)
    assert book["Night"][f"{letter}3"].value == "#VALUE!"
    assert book["Night"][f"{letter}4"].value == "#N/A"
    assert {"Night!B3", "Night!B4"} <= set(remarks(report))


# ---- settings ----------------------------------------------------------------------------------


@pytest.fixture
def template(tmp_path: Path) -> Path:
    path = tmp_path / "distances.xlsx"
    build(load("distance-sheet"), path, rows=4)
    book = openpyxl.load_workbook(path)
    book["Distances"]["B5"] = 0.5
    book.save(path)
    return path


def settle(path: Path, **values: Any) -> None:
    book = openpyxl.load_workbook(path)
    for word, value in values.items():
        sheet, _, place = book.defined_names[word].attr_text.rpartition("!")
        page = book[sheet.strip("'")]
        row, column = page[place.replace("$", "")].row, page[place.replace("$", "")].column
        # an own value stands beside the one in use, under its heading
        if word not in ("cosmology_set", "recipe_name", "band"):
            column = next(c.column for r in page.iter_rows() for c in r if c.value == "Own value")
        page.cell(row, column, value)
    book.save(path)


def test_the_cosmology_of_the_settings_is_used_and_named(template: Path) -> None:
    settle(template, cosmology_set="wmap9")
    output = template.with_name("filled.xlsx")
    when = datetime(2031, 3, 15, 6, 0, tzinfo=UTC)
    fill(template, output, now=when)
    book = openpyxl.load_workbook(output, data_only=True)
    letter = columns(book["Distances"], 4)["Distance, luminosity [Mpc]"]
    assert isclose(book["Distances"][f"{letter}5"].value, cf.distance_luminosity(0.5, "WMAP9"))
    trail = [cell.value for row in book["Provenance"].iter_rows() for cell in row if cell.value]
    (last,) = [words for words in trail if str(words).startswith("2031-03-15 06:00 UTC")]
    assert "WMAP9" in last
    assert TRAIL in last


def test_an_own_cosmology_of_the_settings_is_used(template: Path) -> None:
    settle(template, cosmology_set="own", hubble_constant=70, omega_matter=0.3)
    output = template.with_name("filled.xlsx")
    fill(template, output)
    book = openpyxl.load_workbook(output, data_only=True)
    letter = columns(book["Distances"], 4)["Distance, luminosity [Mpc]"]
    wanted = cf.distance_luminosity(0.5, {"H0": 70, "Om0": 0.3})
    assert isclose(book["Distances"][f"{letter}5"].value, wanted, rel_tol=1e-12)


@pytest.mark.parametrize(
    ("values", "words"),
    [
        ({"cosmology_set": "Plank18"}, ["Settings!", "Plank18", "Planck18"]),
        ({"cosmology_set": "own"}, ["H0"]),
        ({"cosmology_set": "own", "hubble_constant": 70}, ["Om0"]),
        ({"cosmology_set": "own", "hubble_constant": "fast", "omega_matter": 0.3}, ["H0", "fast"]),
        ({"cosmology_set": "own", "hubble_constant": -70, "omega_matter": 0.3}, ["H0", "-70"]),
        ({"cosmology_set": 18}, ["Settings!"]),
        ({"recipe_name": "gone"}, ["gone"]),
    ],
)
def test_settings_that_cannot_be_used_stop_it(
    template: Path, values: dict[str, Any], words: list[str]
) -> None:
    settle(template, **values)
    output = template.with_name("filled.xlsx")
    with pytest.raises(ValueError, match=re.escape(words[0])) as caught:
        fill(template, output)
    assert all(word in str(caught.value) for word in words)
    assert "\n" not in str(caught.value)
    assert not output.exists()


def test_a_text_where_a_setting_is_a_number_is_told_with_its_cell(tmp_path: Path) -> None:
    path = tmp_path / "log.xlsx"
    build(load("line-log"), path, rows=3)
    book = openpyxl.load_workbook(path)
    place = book.defined_names["shortest_wavelength"].attr_text.rpartition("!")[2].replace("$", "")
    book["Settings"][place] = "3000 A"
    book.save(path)
    with pytest.raises(LogbookError, match=f"Settings!{place}") as caught:
        fill(path, tmp_path / "out.xlsx")
    assert "Shortest wavelength" in str(caught.value)
    assert "3000 A" in str(caught.value)


@pytest.mark.parametrize(
    "formula", ["redshift + spare", "velocity_from_redshift(spare)", "distance_luminosity(spare)"]
)
def test_a_setting_left_empty_gives_no_number(tmp_path: Path, formula: str) -> None:
    unit = {"r": "", "v": "km/s", "d": "Mpc"}[formula[0]]
    recipe = own(
        LOG.replace(
            "[[sheets]]", '[[settings]]\nkey = "spare"\nlabel = "Spare"\ngroup = "G"\n\n[[sheets]]'
        )
        + '\n[[sheets.columns]]\nkey = "more"\nlabel = "More"\nrole = "computed"\n'
        + f'unit = "{unit}"\nformula = "{formula}"\n'
    )
    _, book = filled(logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84]), recipe)
    header = f"More [{unit}]" if unit else "More"
    assert book["Night"][f"{columns(book['Night'])[header]}2"].value in (None, "#N/A")
    assert book["Night"]["C2"].value == cf.redshift_from_line(6892.84, "H alpha")


# ---- files -------------------------------------------------------------------------------------


def test_the_logbook_itself_is_written_only_when_asked(tmp_path: Path) -> None:
    path = logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84])
    before = path.read_bytes()
    with pytest.raises(LogbookError, match=r"night\.xlsx"):
        fill(path, path, own())
    assert path.read_bytes() == before
    fill(path, path, own(), overwrite=True)
    assert openpyxl.load_workbook(path)["Night"]["C2"].value == cf.redshift_from_line(
        6892.84, "H alpha"
    )
    assert sorted(each.name for each in tmp_path.iterdir()) == ["night.xlsx"]


def test_an_output_that_exists_is_refused(tmp_path: Path) -> None:
    path = logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84])
    output = tmp_path / "out.xlsx"
    output.write_bytes(b"last night")
    with pytest.raises(LogbookError, match=r"out\.xlsx"):
        fill(path, output, own())
    assert output.read_bytes() == b"last night"


def test_a_logbook_without_the_columns_is_refused(tmp_path: Path) -> None:
    path = logbook(tmp_path, ["Object", "Seeing"], ["TH 1", 1.2])
    with pytest.raises(LogbookError, match="Line, Wavelength") as caught:
        fill(path, tmp_path / "out.xlsx", own())
    assert "own" in str(caught.value)


def test_a_logbook_that_names_no_recipe_asks_for_one(tmp_path: Path) -> None:
    path = logbook(tmp_path, ["Line", "Wavelength"], ["H alpha", 6892.84])
    with pytest.raises(LogbookError, match="--recipe"):
        fill(path, tmp_path / "out.xlsx")


def test_a_workbook_cannot_have_a_file_of_the_machine_read(tmp_path: Path, template: Path) -> None:
    """The recipe's name in a workbook is a name, never a path"""
    hidden = tmp_path / "elsewhere.toml"
    hidden.write_text("secret = 'x'\n")
    settle(template, recipe_name=str(hidden))
    with pytest.raises(ValueError, match="recipe") as caught:
        fill(template, tmp_path / "out.xlsx")
    assert "secret" not in str(caught.value)


def test_a_logbook_of_headers_alone_is_well(tmp_path: Path) -> None:
    report, _ = filled(logbook(tmp_path, ["Line", "Wavelength"]))
    assert (report.sheets[0].filled, report.sheets[0].refused) == (0, 0)
    assert not report.has_problems
