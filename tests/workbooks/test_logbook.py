"""A sheet reads as columns, and what is set is what every reader then finds."""

from __future__ import annotations

import datetime
import sys
import warnings
import zipfile
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from openpyxl.utils import get_column_letter
from python_calamine import CalamineWorkbook

sys.path.insert(0, str(Path(__file__).parent))

from everything import EXPOSURES, HEADERS, NIGHT_PART, write_everything

from workbooks.logbook import (
    Area,
    ErrorValue,
    Header,
    Logbook,
    LogbookError,
    Value,
    cell_name,
    parse_header,
)

NIGHT = "Night 1"


@pytest.fixture(scope="module")
def everything(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_everything(tmp_path_factory.mktemp("everything") / "everything.xlsx")


@pytest.fixture
def night(everything: Path) -> Logbook:
    return Logbook.open(everything)


def test_rows_stand_at_their_own_numbers(night: Logbook) -> None:
    rows = night.sheet(NIGHT).rows
    assert rows[1][1] == "Night of 14 March 2031"
    assert tuple(rows[3][1:7]) == HEADERS
    for row, (exposure, line, wavelength, sigma, _) in zip(rows[4:12], EXPOSURES, strict=True):
        assert row[1:5] == [exposure, line, wavelength, sigma]
    assert len({len(row) for row in rows}) == 1


def test_kinds_of_value(night: Logbook) -> None:
    rows = night.sheet(NIGHT).rows
    assert rows[4][9] is True
    assert rows[5][9] == datetime.datetime(2031, 3, 14, 22, 15, 30)
    # Midnight stays a date-time.
    assert type(rows[6][9]) is datetime.datetime
    assert rows[6][9] == datetime.datetime(2031, 3, 15)
    assert rows[4][10] == ErrorValue("#N/A")
    assert rows[5][10] == ErrorValue("#DIV/0!")
    assert rows[6][6] == "cloud"
    assert rows[7][6] == "= not a formula"
    assert rows[9][6] is None


def test_values_agree_with_openpyxl(everything: Path, night: Logbook) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        workbook = openpyxl.load_workbook(everything, data_only=True)
    for name in night.sheet_names:
        for row_number, row in enumerate(night.sheet(name).rows, 1):
            for column, value in enumerate(row, 1):
                told = workbook[name].cell(row_number, column).value
                if isinstance(told, str) and not told.strip():
                    told = None
                assert (value.text if isinstance(value, ErrorValue) else value) == told


def test_where_formulas_are(night: Logbook) -> None:
    sheet = night.sheet(NIGHT)
    held = {
        cell_name(row, column)
        for row in range(1, 20)
        for column in range(1, 15)
        if sheet.has_formula(row, column)
    }
    assert held == {f"F{row}" for row in range(5, 13)} | {"I5", "I6", "I7"}
    assert night.formulas_elsewhere
    sheet.set_column(6, 5, [0.5] * 8)
    sheet.set(5, 9, 1.0)
    assert night.formulas_elsewhere
    night.sheet("Night 2, b&w").set(5, 8, 1.0)
    assert not night.formulas_elsewhere


def test_sheets_and_names(night: Logbook) -> None:
    assert night.sheet_names == [NIGHT, "Night 2, b&w", "Settings"]
    assert night.sheet(" settings").rows[1][1] == 67.66
    with pytest.raises(LogbookError, match=r"no sheet 'Setings'; near matches: Settings"):
        night.sheet("Setings")
    assert night.named_cells == {
        "hubble_constant": ("Settings", 2, 2),
        "first_line": (NIGHT, 5, 4),
    }
    assert night.sheet(NIGHT).merged == [Area(2, 2, 2, 4)]
    assert str(Area(2, 2, 2, 4)) == "B2:D2"


def test_header_row(night: Logbook) -> None:
    sheet = night.sheet(NIGHT)
    known = {"exposure", "wavelength", "redshift"}
    assert sheet.header_row(lambda text: parse_header(text).label.casefold() in known) == 4
    assert sheet.header_row(lambda text: text == "airmass") is None


@pytest.mark.parametrize(
    ("text", "label", "unit"),
    [
        ("Wavelength [Angstrom]", "Wavelength", "Angstrom"),
        ("Velocity (km/s)", "Velocity", "km/s"),
        ("  Velocity\n[km s-1] ", "Velocity", "km s-1"),
        ("Flux (erg/(s cm2 Angstrom))", "Flux", "erg/(s cm2 Angstrom)"),
        ("Flux[Jy]", "Flux", "Jy"),
        ("sigma(z)", "sigma(z)", None),
        ("sigma(z) [km/s]", "sigma(z)", "km/s"),
        ("Redshift", "Redshift", None),
        ("Redshift []", "Redshift", None),
        ("[O III]", "[O III]", None),
        ("[O III] flux [W m-2]", "[O III] flux", "W m-2"),
        ("", "", None),
    ],
)
def test_headers(text: str, label: str, unit: str | None) -> None:
    assert parse_header(text) == Header(label, unit)


@given(st.integers(1, 1_048_576), st.integers(1, 16_384))
def test_cell_names_agree_with_openpyxl(row: int, column: int) -> None:
    assert cell_name(row, column) == f"{get_column_letter(column)}{row}"
    assert Area.parsed(cell_name(row, column)) == Area(row, column, row, column)


@pytest.mark.parametrize(
    "value", [float("nan"), float("inf"), -float("inf"), np.float64("nan"), 10**400, "\ud800"]
)
def test_what_no_cell_can_hold(night: Logbook, value: Value) -> None:
    with pytest.raises(LogbookError, match=r"cell D17 of sheet 'Night 1' was given"):
        night.sheet(NIGHT).set(17, 4, value)
    assert not night.sheet(NIGHT).is_edited


def test_other_wrong_calls(night: Logbook) -> None:
    sheet = night.sheet(NIGHT)
    with pytest.raises(LogbookError, match="32,768 characters"):
        sheet.set(1, 1, "x" * 32_768)
    for row, column in ((0, 1), (1, 0), (1_048_577, 1), (1, 16_385)):
        with pytest.raises(LogbookError, match="outside a sheet"):
            sheet.set(row, column, 1.0)
    with pytest.raises(TypeError, match="cell A1"):
        sheet.set(1, 1, datetime.datetime(2031, 1, 1))
    with pytest.raises(ValueError, match="no error value"):
        ErrorValue("NaN")


def test_numpy_values_are_written_as_numbers(night: Logbook, tmp_path: Path) -> None:
    column = np.array([0.1, 1e-300, 123456789.125, -0.0])
    night.sheet(NIGHT).set_column(4, 20, column)
    night.sheet(NIGHT).set(24, 4, np.int64(7))
    night.save(tmp_path / "a.xlsx")
    rows = Logbook.open(tmp_path / "a.xlsx").sheet(NIGHT).rows
    assert [row[3] for row in rows[19:24]] == [*column, 7.0]


def test_a_stray_far_cell_is_refused_not_laid_out(night: Logbook, tmp_path: Path) -> None:
    night.sheet("Settings").set(1_048_576, 16_384, 1.0)
    night.save(tmp_path / "far.xlsx")
    with pytest.raises(LogbookError, match=r"far\.xlsx: sheet 'Settings' reaches to XFD1048576"):
        _ = Logbook.open(tmp_path / "far.xlsx").sheet("Settings").rows


@pytest.mark.parametrize("count", [b"99999999999", b"4294967295", b"-1", b"0"])
def test_a_false_count_of_strings_does_no_harm(
    everything: Path, tmp_path: Path, count: bytes
) -> None:
    path = tmp_path / "a.xlsx"
    with zipfile.ZipFile(everything) as old, zipfile.ZipFile(path, "w") as new:
        for name in old.namelist():
            content = old.read(name)
            if name == "xl/sharedStrings.xml":
                false = b" note='>' uniqueCount = \"" + count + b'" count="' + count + b'"'
                content = content.replace(b' count="2" uniqueCount="2"', false)
                assert count in content
            new.writestr(name, content)
    assert Logbook.open(path).sheet(NIGHT).rows[6][6] == "cloud"


# ---- any edit of any grid, read back by calamine from the saved file

numbers = st.one_of(st.floats(allow_nan=False, allow_infinity=False), st.integers(-(2**53), 2**53))
texts = st.text(st.characters(exclude_categories=["Cs"]), min_size=1, max_size=8) | st.sampled_from(
    ["=A1+1", "+1", "_x0041_", "_x005F_x0041_", "a\r\nb", " x ", "#NUM!", "1e5", "TRUE"]
)
held = st.one_of(numbers, texts, st.booleans(), st.just("=formula"))
cells = st.tuples(st.integers(1, 9), st.integers(1, 6))
settable = st.one_of(
    numbers, texts, st.booleans(), st.none(), st.sampled_from([ErrorValue("#NUM!")])
)


def grid(path: Path) -> dict[tuple[int, int], object]:
    rows = CalamineWorkbook.from_path(path).get_sheet_by_index(0).to_python(skip_empty_area=False)
    return {
        (row_number, column): value
        for row_number, row in enumerate(rows, 1)
        for column, value in enumerate(row, 1)
        if value != ""
    }


@settings(max_examples=200, deadline=None)
@given(before=st.dictionaries(cells, held), edits=st.dictionaries(cells, settable))
def test_what_was_set_is_what_is_read(
    tmp_path_factory: pytest.TempPathFactory,
    before: dict[tuple[int, int], object],
    edits: dict[tuple[int, int], Value],
) -> None:
    folder = tmp_path_factory.getbasetemp()
    source, target = folder / "grid.xlsx", folder / "edited-grid.xlsx"
    workbook = openpyxl.Workbook()
    formulas = {}
    for (row, column), value in before.items():
        if value == "=formula":
            formulas[row, column] = f"=SUM(H{row}:J{row})"
            workbook.active.cell(row, column, formulas[row, column])
        elif isinstance(value, str):
            text = "".join(c if c.isprintable() else "?" for c in value)
            cell = workbook.active.cell(row, column, text)
            cell.data_type = "s"
        else:
            workbook.active.cell(row, column, value)
    workbook.save(source)
    old = grid(source)
    logbook = Logbook.open(source)
    sheet = logbook.sheet(logbook.sheet_names[0])
    assert {at for at in before if sheet.has_formula(*at)} == set(formulas)
    for at, value in edits.items():
        sheet.set(*at, value)
    logbook.save(target, overwrite=True)

    new = grid(target)
    for at in old.keys() | new.keys() | edits.keys():
        value = edits.get(at, old.get(at))
        if isinstance(value, ErrorValue):
            # calamine shows no error; our own reading must.
            rows = Logbook.open(target).sheet(sheet.name).rows
            assert rows[at[0] - 1][at[1] - 1] == value
            value = None
        assert new.get(at) == value, at
        assert isinstance(new.get(at), bool) == isinstance(value, bool)
    reread = openpyxl.load_workbook(target).active
    for at, formula in formulas.items():
        assert reread.cell(*at).value == formula


def test_a_long_logbook(tmp_path: Path) -> None:
    rows = 30_000
    text = "".join(
        f'<row r="{row}"><c r="A{row}"><v>{row}.5</v></c><c r="B{row}"><f>A{row}*2</f></c></row>'
        for row in range(1, rows + 1)
    )
    path = tmp_path / "long.xlsx"
    parts = zipfile.ZipFile(write_everything(tmp_path / "e.xlsx"))
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name in parts.namelist():
            content = parts.read(name)
            if name == NIGHT_PART:
                head, tail = content.split(b"<sheetData>")[0], content.split(b"</sheetData>")[1]
                content = head + b"<sheetData>" + text.encode() + b"</sheetData>" + tail
            archive.writestr(name, content)
    logbook = Logbook.open(path)
    sheet = logbook.sheet(NIGHT)
    for column in range(2, 8):
        sheet.set_column(column, 1, [row * 0.1 + column for row in range(rows)])
    logbook.save(path, overwrite=True)
    again = Logbook.open(path).sheet(NIGHT)
    assert len(again.rows) == rows
    assert all(
        row == [number + 0.5, *((number - 1) * 0.1 + column for column in range(2, 8))]
        for number, row in enumerate(again.rows, 1)
    )
    assert again.has_formula(rows, 2)
    assert not again.has_formula(rows, 3)
