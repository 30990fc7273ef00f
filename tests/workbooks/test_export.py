"""A table leaves the spreadsheet with its values, its units and what is known of it.

Outside checks: astropy.table reads every file back; astropy.time gives the Julian dates; the IVOA's
UCD1+ word list is the copy that astropy carries; pyarrow reads Parquet without astropy; csvw reads
and validates CSV with the metadata beside it.
Standards: FITS 4.0 (2018), VOTable 1.4 (IVOA 2019), ECSV 1.0 (astropy APE 6), CSV by RFC 4180 and
the W3C Recommendations of 17 December 2015 «Metadata Vocabulary for Tabular Data» (the Vocabulary
below) and «Model for Tabular Data and Metadata on the Web» (the Model).
"""

import csv
import errno
import hashlib
import json
import os
import re
import signal
import subprocess
import sys
import threading
import warnings
from dataclasses import asdict
from datetime import UTC, datetime, timedelta
from functools import partial
from http.server import SimpleHTTPRequestHandler, ThreadingHTTPServer
from io import StringIO
from pathlib import Path
from typing import Any
from urllib.parse import quote, urljoin

import csvw
import numpy as np
import openpyxl
import pyarrow.parquet
import pytest
from astropy import units as u
from astropy.io import fits
from astropy.io import votable as vot
from astropy.io.votable.ucd import parse_ucd
from astropy.table import Table
from astropy.time import Time
from openpyxl.worksheet.worksheet import Worksheet

sys.path.insert(0, str(Path(__file__).parent))

from logs import run

from workbooks.build import build
from workbooks.export import ExportReport, export
from workbooks.files.saving import write_whole
from workbooks.fill import fill
from workbooks.logbook import LogbookError
from workbooks.recipe import Recipe, built_in, load, read
from workbooks.tables import formats as table_formats
from workbooks.tables.ascii_spelling import ascii_of
from workbooks.tables.csv_on_the_web import write_both
from workbooks.tables.typed_columns import julian_date

NOW = datetime(2031, 3, 15, 9, 30, tzinfo=UTC)

OWN = """
title = "Own log"
purpose = "An invented observatory's headers."
cosmology = "Planck18"

[[settings]]
key = "site"
label = "Site"
group = "Site"
kind = "text"
value = "Tarn Hollow"

[[sheets]]
name = "Lines"

[[sheets.columns]]
key = "target"
label = "Object"
role = "input"
kind = "text"

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"

[[sheets.columns]]
key = "observed"
label = "Centre"
unit = "Angstrom"
role = "input"
note = "Centre of the fitted profile; the manual, part four, says how it is fitted: αβγ, 5 % of it."

[[sheets.columns]]
key = "redshift"
label = "z"
role = "computed"
formula = "redshift_from_line(observed, line)"
note = "Measured over rest wavelength, less 1."

[[sheets.columns]]
key = "velocity"
label = "Velocity"
unit = "km/s"
role = "computed"
formula = "velocity_from_redshift(redshift, 'optical')"
"""

FORMATS = (".fits", ".vot", ".ecsv", ".csv", ".parquet")
HEADERS = ["UT", "Object", "Line", "Centre [nm]", "z", "Velocity [km/s]", "Seeing (arcsec)", "Note"]
# awkward doubles: a third, the last bit, subnormal neighbours, long and short ones
ROWS: list[list[Any]] = [
    [datetime(2031, 3, 14, 20, 7), "TH 0412-17", "H alpha", 689.2843333333333, 0.05, 14989.6229,
     1.1, "ok"],
    [datetime(2031, 3, 14, 20, 14, 30), "Müller 7", "Hα", 1e3 / 3, 0.1 + 0.2, 1e-300, None,
     None],
    [datetime(2031, 3, 15, 0, 0), "=1+1", "[O III] 5007", 500.8240000000001,
     -2.2250738585072014e-308, 123456789.12345679, 0.9, "tab\there"],
    [None, "  led by blanks", "H beta", None, None, None, 2.0, "日本"],
]  # fmt: skip


def own(text: str = OWN) -> Recipe:
    return read(text.encode(), "own.toml", "own")


def logbook(folder: Path, rows: list[list[Any]], name: str = "night.xlsx") -> Path:
    book = openpyxl.Workbook()
    sheet = book.active
    assert isinstance(sheet, Worksheet)
    sheet.title = "Night"
    sheet["A1"] = "Tarn Hollow, night of 14 March 2031"
    for number, row in enumerate(rows, 3):
        for place, value in enumerate(row, 1):
            cell = sheet.cell(number, place, value)
            if isinstance(value, str):
                cell.data_type = "s"
    book.save(folder / name)
    return folder / name


@pytest.fixture(scope="module")
def night(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return logbook(tmp_path_factory.mktemp("night"), [HEADERS, *ROWS])


def exported(path: Path, suffix: str, **options: Any) -> tuple[Table, ExportReport, Path]:
    output = path.with_name(f"{path.stem}-out{suffix}")
    report = export(path, output, options.pop("recipe", own()), overwrite=True, now=NOW, **options)
    return Table.read(output), report, output


def column_of(table: Table, key: str) -> Any:
    """Return a column by its key; in CSV by the label that it stands under."""
    labels = {"target": "Object", "line": "Line", "observed": "Centre [nm]", "redshift": "z",
              "velocity": "Velocity [km/s]", "ut": "UT", "seeing": "Seeing [arcsec]",
              "note": "Note"}  # fmt: skip
    return table[key] if key in table.colnames else table[labels[key]]


@pytest.mark.parametrize("suffix", FORMATS)
def test_numbers_come_back_bit_for_bit_and_missing_ones_masked(night: Path, suffix: str) -> None:
    table, _, _ = exported(night, suffix)
    assert len(table) == len(ROWS)
    # openpyxl writes 16 digits, so it is asked what the file holds
    stored = list(openpyxl.load_workbook(night)["Night"].iter_rows(min_row=4, values_only=True))
    for key, place in (("observed", 3), ("redshift", 4), ("velocity", 5), ("seeing", 6)):
        found = column_of(table, key)
        for index, row in enumerate(stored):
            if row[place] is None:
                assert found[index] is np.ma.masked, (key, index)
            else:
                assert np.float64(found[index]).tobytes() == np.float64(row[place]).tobytes()  # type: ignore[arg-type]
        assert found.dtype == np.dtype(float) or found.dtype == np.dtype(">f8")


@pytest.mark.parametrize("suffix", [suffix for suffix in FORMATS if suffix != ".csv"])
def test_units_come_back(night: Path, suffix: str) -> None:
    table, _, _ = exported(night, suffix)
    assert table["observed"].unit == u.nm
    assert table["velocity"].unit == u.km / u.s
    assert table["seeing"].unit == u.arcsec
    assert table["redshift"].unit in (None, u.dimensionless_unscaled)


def test_csv_carries_units_in_its_headers(night: Path) -> None:
    _, _, output = exported(night, ".csv")
    with output.open(newline="", encoding="utf-8") as file:
        rows = list(csv.reader(file))
    assert rows[0] == [
        "UT", "Object", "Line", "Centre [nm]", "z", "Velocity [km/s]", "Seeing [arcsec]", "Note",
    ]  # fmt: skip
    assert [row[1] for row in rows[1:]] == [row[1].strip() for row in ROWS]
    assert rows[4][3:6] == ["", "", ""]
    assert output.read_bytes().count(b"\r\n") == len(ROWS) + 1


UNITS = {
    "Angstrom": u.Angstrom, "um": u.um, "km/s": u.km / u.s, "Mpc": u.Mpc, "mag": u.mag,
    "kpc/arcsec": u.kpc / u.arcsec, "Gyr": u.Gyr, "%": u.percent, "deg": u.deg, "GHz": u.GHz,
    "km.s-1.Mpc-1": u.km / u.s / u.Mpc, "mas": u.mas, "arcsec2": u.arcsec**2, "d": u.day,
    "adu": u.adu, "deg_C": u.deg_C, "h": u.hour, "Jy": u.Jy, "electron/s": u.electron / u.s,
    "pc": u.pc,
}  # fmt: skip


@pytest.mark.parametrize("suffix", [suffix for suffix in FORMATS if suffix != ".csv"])
def test_every_common_unit_comes_back(tmp_path: Path, suffix: str) -> None:
    rows: list[list[Any]] = [
        [f"quantity {n} [{text}]" for n, text in enumerate(UNITS)],
        [1.5] * len(UNITS),
    ]
    path = logbook(tmp_path, rows)
    output = tmp_path / f"out{suffix}"
    report = export(path, output)
    table = Table.read(output)
    lost = {text for text in UNITS if any(repr(text) in note for note in report.notes)}
    # what a standard's own list of units lacks is said, and nothing else is lost
    assert lost == {".fits": {"electron/s"}, ".vot": {"%", "deg_C", "electron/s"}}.get(
        suffix, set()
    )
    for text in lost:
        assert str(table[f"quantity_{list(UNITS).index(text)}"].unit).replace(" ", "") == text
    for number, (text, unit) in enumerate(UNITS.items()):
        if text not in lost:
            assert table[f"quantity_{number}"].unit == unit, text


@pytest.mark.parametrize("suffix", FORMATS)
def test_texts_come_back(night: Path, suffix: str) -> None:
    table, report, _ = exported(night, suffix)
    targets = [str(text) for text in column_of(table, "target")]
    if suffix == ".fits":
        assert targets == ["TH 0412-17", "Muller 7", "=1+1", "led by blanks"]
        assert str(table["line"][1]) == "Halpha"
        assert str(table["note"][3]) == "??"
        assert any("'Müller 7' was written 'Muller 7'" in note for note in report.notes)
        assert any("«?» stands for letters that ASCII has not" in note for note in report.notes)
    else:
        assert targets == [row[1].strip() for row in ROWS]
        assert str(column_of(table, "line")[1]) == "Hα"
        assert str(column_of(table, "note")[3]) == "日本"
    empty = column_of(table, "note")[1]
    assert empty is np.ma.masked or (suffix == ".vot" and str(empty) == "")


def test_fits_is_ascii_throughout(night: Path) -> None:
    _, _, output = exported(night, ".fits")
    with fits.open(output) as hdus:
        hdus.verify("exception")
        header = hdus[1].header
        assert header["TIMESYS"] == "UTC"
        assert header["CREATOR"].startswith("cellfuncs ")
        assert header["EXTNAME"] == "Night"
        assert header["TCOMM4"].endswith("alphabetagamma, 5 % of it.")
        assert len(header["TCOMM4"]) > 68
        assert "logbook: night.xlsx" in list(header["HISTORY"])
        assert header.tostring().isascii()
        names = [header[f"TTYPE{n}"] for n in range(1, header["TFIELDS"] + 1)]
        # FITS 4.0, section 7.3.1: letters, digits and underscore; unique without regard to case
        assert all(name.replace("_", "").isalnum() and name.isascii() for name in names)
        assert len({name.upper() for name in names}) == len(names)


def test_long_texts_of_the_metadata_come_back_whole_from_a_fits_header(night: Path) -> None:
    _, _, output = exported(night, ".fits")
    lines = "".join(f"{line:<72}" for line in fits.getheader(output, 1)["HISTORY"])
    assert "cosmology: Planck18 (H0 67.66, Om0 0.30966, Ode0 0.68884" in lines


def test_a_votable_holds_to_its_standard(night: Path) -> None:
    _, _, output = exported(night, ".vot")
    document = vot.parse(output, verify="exception")
    first = document.get_first_table()
    fields = {field.name: field for field in first.fields}
    assert fields["ut"].xtype == "timestamp"
    assert "Centre of the fitted profile" in " ".join(fields["observed"].description.split())
    infos = {info.name: info.value for info in document.resources[0].infos}
    assert infos["logbook"] == "night.xlsx"
    assert infos["Site"] == "Tarn Hollow"
    assert infos["TIMESYS"] == "UTC"


@pytest.mark.parametrize("suffix", [".ecsv", ".parquet"])
def test_descriptions_and_provenance_come_back(night: Path, suffix: str) -> None:
    table, _, _ = exported(night, suffix)
    assert table["redshift"].description == (
        "z: Measured over rest wavelength, less 1. Formula: redshift_from_line(observed, line)"
    )
    assert table["observed"].description.endswith("αβγ, 5 % of it.")
    assert table.meta["logbook"] == "night.xlsx"
    assert table.meta["recipe"] == "own: Own log"
    assert table.meta["exported"] == "2031-03-15T09:30:00"
    assert table.meta["cosmology"].startswith("Planck18 (H0 67.66, Om0 0.30966")
    assert table.meta["TIMESYS"] == "UTC"


def test_parquet_shows_no_number_where_one_is_missing_to_any_reader(night: Path) -> None:
    _, _, output = exported(night, ".parquet")
    raw = pyarrow.parquet.read_table(output)
    value = raw["observed"].to_pylist()[3]
    assert value is None or np.isnan(value)
    assert raw["target"].to_pylist() == [row[1].strip() for row in ROWS]


@pytest.mark.parametrize("suffix", FORMATS)
def test_dates_are_iso_text(night: Path, suffix: str) -> None:
    table, _, _ = exported(night, suffix)
    found = column_of(table, "ut")
    assert [str(text) for text in found[:3]] == [
        "2031-03-14T20:07:00",
        "2031-03-14T20:14:30",
        "2031-03-15T00:00:00",
    ]
    assert found[3] is np.ma.masked or (suffix == ".vot" and str(found[3]) == "")


@pytest.mark.parametrize("suffix", FORMATS)
def test_dates_are_julian_when_asked(night: Path, suffix: str) -> None:
    table, _, output = exported(night, suffix, dates="jd")
    found = table["UT [d]"] if suffix == ".csv" else table["ut"]
    expected = [Time(row[0].isoformat(), scale="utc").jd for row in ROWS[:3]]
    assert list(found[:3]) == expected
    assert found[3] is np.ma.masked
    if suffix == ".vot":
        # VOTable 1.4, section 3.4
        systems = vot.parse(output).resources[0].time_systems
        assert [(each.timescale, each.timeorigin) for each in systems] == [("UTC", "JD-origin")]
        assert vot.parse(output).get_first_table().fields[0].ref == systems[0].ID


def test_julian_dates_are_those_of_astropy() -> None:
    for days in range(0, 60000, 997):
        stamp = datetime(1901, 2, 3, 4, 5, 6) + timedelta(days=days, seconds=days)
        assert julian_date(stamp) == pytest.approx(Time(stamp, scale="utc").jd, rel=0, abs=1e-9)


def test_a_time_whose_scale_the_sheet_does_not_say_is_not_called_utc(tmp_path: Path) -> None:
    path = logbook(tmp_path, [["Start", "Object"], [datetime(2031, 3, 14, 20, 7), "TH"]])
    table, _, _ = exported(path, ".ecsv", recipe=None)
    assert "TIMESYS" not in table.meta
    assert table.meta["time scale"] == "not stated for all columns of times"


def test_a_time_column_of_a_recipe_takes_every_way_of_writing_a_time(tmp_path: Path) -> None:
    text = OWN.replace('key = "target"\nlabel = "Object"', 'key = "target"\nlabel = "When"')
    recipe = own(text)
    column = recipe.tables[0].sheet.columns[0]
    object.__setattr__(column, "kind", "time")
    rows: list[list[Any]] = [
        ["When", "Line", "Centre [nm]"],
        [datetime(2031, 3, 14, 20, 7), "H alpha", 690.0],
        ["2031-03-14T20:08:00Z", "H alpha", 690.0],
        [Time("2031-03-14T20:09:00").jd, "H alpha", 690.0],
        ["last night", "H alpha", 690.0],
    ]
    table, report, _ = exported(logbook(tmp_path, rows), ".ecsv", recipe=recipe)
    assert [str(each) for each in table["target"][:3]] == [
        "2031-03-14T20:07:00", "2031-03-14T20:08:00", "2031-03-14T20:09:00",
    ]  # fmt: skip
    assert table["target"][3] is np.ma.masked
    assert [problem.cell for problem in report.problems] == ["Night!A7"]
    assert "'last night', not a date" in report.problems[0].sentence


def test_what_cannot_go_into_its_column_is_missing_and_told_by_cell(tmp_path: Path) -> None:
    rows: list[list[Any]] = [
        HEADERS[1:6],
        ["a", "H alpha", 690.0, 0.05, 1.0],
        ["b", "H alpha", "690.1 nm", "#VALUE!", 2.0],
        ["c", "H alpha", datetime(2031, 3, 5), 0.07, True],
    ]
    path = logbook(tmp_path, rows)
    book = openpyxl.load_workbook(path)
    book["Night"]["D5"] = "#VALUE!"
    book["Night"]["D5"].data_type = "e"
    book.save(path)
    table, report, _ = exported(path, ".fits")
    assert [problem.cell for problem in report.problems] == [
        "Night!C5", "Night!C6", "Night!D5", "Night!E6",
    ]  # fmt: skip
    assert "holds '690.1 nm', not a number" in report.problems[0].sentence
    assert "the date 2031-03-05" in report.problems[1].sentence
    assert "#VALUE!" in report.problems[2].sentence
    assert table["observed"][1] is np.ma.masked
    assert table["observed"][2] is np.ma.masked
    assert report.has_problems


def test_a_filled_log_goes_out_with_what_made_its_numbers(tmp_path: Path) -> None:
    rows: list[list[Any]] = [HEADERS[1:6], ["a", "H alpha", 690.0, None, None], [None] * 5]
    path = logbook(tmp_path, [*rows, ["Dome closed", None, None, None, None]])
    filled = tmp_path / "filled.xlsx"
    fill(path, filled, own())
    table, report, _ = exported(filled, ".ecsv")
    assert len(table) == 1
    assert any("row 6 holds no measurement ('Dome closed')" in note for note in report.notes)
    assert table.meta["computed with"].startswith("cellfuncs ")
    # 690 nm over H alpha in vacuum, 656.461 nm (value from memory)
    assert table["redshift"][0] == pytest.approx(690 / 656.461 - 1, abs=2e-6)


def filled_template(folder: Path, name: str) -> Path:
    """Return a template of this recipe with one row of its first table filled."""
    recipe = load(name)
    path = folder / f"{name}.xlsx"
    build(recipe, path, formulas="none", rows=5)
    book = openpyxl.load_workbook(path)
    table = recipe.tables[0]
    sheet = book[table.sheet.name]
    examples = {"line": "H alpha", "text": "TH 0412-17"}
    for place, column in enumerate(table.inputs, 1):
        value: Any = examples.get(column.kind, 0.05)
        if column.choices:
            value = column.choices[0]
        elif column.is_number and column.unit == "Angstrom":
            value = 6892.8
        if column.kind == "time":
            value = datetime(2031, 3, 14, 20, 7)
        sheet.cell(5, place, value)
    book.save(path)
    fill(path, folder / "filled.xlsx")
    return folder / "filled.xlsx"


@pytest.mark.parametrize("name", built_in())
def test_a_template_filled_and_exported_needs_no_recipe(tmp_path: Path, name: str) -> None:
    table = load(name).tables[0]
    output = tmp_path / "out.fits"
    report = export(filled_template(tmp_path, name), output, sheet=table.sheet.name)
    assert report.recipe == name
    written = Table.read(output)
    assert len(written) == 1
    for column in table.computed:
        assert column.key in written.colnames
    history = "".join(f"{line:<72}" for line in fits.getheader(output, 1)["HISTORY"])
    assert "template version: cellfuncs " in history
    assert "last filled: " in history


def test_the_ucds_of_the_recipes_are_words_of_the_published_list() -> None:
    for name in built_in():
        for table in load(name).tables:
            for column in table.sheet.columns:
                ucd = getattr(column, "ucd", "")
                if ucd:
                    parse_ucd(ucd, check_controlled_vocabulary=True)


@pytest.mark.parametrize("suffix", [".vot", ".fits", ".ecsv", ".parquet"])
def test_ucds_go_along(night: Path, tmp_path: Path, suffix: str) -> None:
    recipe = own()
    for column, ucd in zip(
        recipe.tables[0].sheet.columns,
        ("meta.id;src", "", "em.wl", "src.redshift", "spect.dopplerVeloc.opt"),
        strict=True,
    ):
        object.__setattr__(column, "__dict__", {**column.__dict__, "ucd": ucd})
    output = tmp_path / f"out{suffix}"
    export(night, output, recipe)
    if suffix == ".vot":
        found = {f.name: f.ucd for f in vot.parse(output).get_first_table().fields}
        assert found["line"] is None
    elif suffix == ".fits":
        header = fits.getheader(output, 1)
        found = {
            header[f"TTYPE{n}"]: header.get(f"TUCD{n}") for n in range(1, header["TFIELDS"] + 1)
        }
    else:
        found = {c.name: c.meta.get("ucd") for c in Table.read(output).columns.values()}
    assert found["observed"] == "em.wl"
    assert found["redshift"] == "src.redshift"
    assert found["velocity"] == "spect.dopplerVeloc.opt"


def test_names_that_differ_by_case_or_signs_alone_stay_apart(tmp_path: Path) -> None:
    rows: list[list[Any]] = [
        ["λ [nm]", "Λ [nm]", "3rd order", "a b", "A-B", "!?"],
        [1.0, 2.0, 3.0, 4.0, 5.0, 6.0],
    ]
    output = tmp_path / "out.fits"
    export(logbook(tmp_path, rows), output)
    table = Table.read(output)
    assert table.colnames == ["lambda", "lambda_2", "column_3rd_order", "a_b", "a_b_2", "column"]
    assert [float(table[name][0]) for name in table.colnames] == [1, 2, 3, 4, 5, 6]


def test_the_ampere_and_the_coulomb_are_not_taken_for_what_was_meant(tmp_path: Path) -> None:
    rows: list[list[Any]] = [["Wavelength [A]", "Temperature (C)"], [5000.0, 4.1], [5001.0, 4.2]]
    output = tmp_path / "out.ecsv"
    report = export(logbook(tmp_path, rows), output)
    table = Table.read(output)
    assert table["wavelength"].unit is None
    assert table["temperature"].unit is None
    assert table["wavelength"].description == "Wavelength [A]"
    assert len([note for note in report.notes if "cannot be written along" in note]) == 2


def test_ascii_of() -> None:
    assert ascii_of("Hα 6563 Å, ±0.1 µm") == ("Halpha 6563 Angstrom, +/-0.1 um", True)
    assert ascii_of("Çeşme – ÑØ") == ("Cesme - NO", True)
    assert ascii_of("a\nb") == ("a b", True)
    assert ascii_of("日") == ("?", False)


# ---- CSV and the metadata beside it ---------------------------------------------------------


def described(table: Path) -> dict[str, Any]:
    """Return the metadata that stand where the Model, section 5.3, looks for them."""
    found: dict[str, Any] = json.loads(table.with_name(f"{table.name}-metadata.json").read_bytes())
    return found


def checked_by_csvw(table: Path | str) -> Any:
    """Return a table as csvw reads it, and what it finds amiss"""
    with warnings.catch_warnings():
        # findings are warnings, which must not be switched off
        warnings.simplefilter("always")
        read = csvw.CSVW(str(table), validate=True)
        return read, [] if read.is_valid else [str(each.message) for each in read.warnings]


def by_csvw(table: Path | str) -> list[dict[str, Any]]:
    """Return the rows as csvw reads them by their metadata, None for what is missing."""
    read, amiss = checked_by_csvw(table)
    assert amiss == []
    return [dict(row) for row in read.tables[0].iterdicts(strict=False)]


def test_csvw_finds_what_does_not_fit_its_metadata(night: Path) -> None:
    """The reader that the tests below believe does tell right from wrong."""
    _, _, output = exported(night, ".csv")
    sound = output.read_bytes()
    for right, wrong in ((b"689.28", b"x689.28"), (b"2031-03-14T20:07:00", b"14 March")):
        output.write_bytes(sound.replace(right, wrong))
        assert len(checked_by_csvw(output)[1]) == 1, wrong
    output.write_bytes(sound)
    beside = output.with_name(f"{output.name}-metadata.json")
    told = beside.read_text()
    for before, after in (("tableSchema", "tableScheme"), ('"titles"', '"headers"')):
        beside.write_text(told.replace(before, after))
        assert checked_by_csvw(output)[1], after
    beside.write_text(told.replace("@value", "@worth"))
    with pytest.raises(ValueError, match="MUST NOT start with @"):
        checked_by_csvw(output)


def test_csv_with_its_metadata_says_what_ecsv_says(night: Path) -> None:
    recipe = own()
    columns = recipe.tables[0].sheet.columns
    object.__setattr__(columns[3], "__dict__", {**columns[3].__dict__, "ucd": "src.redshift"})
    told, _, _ = exported(night, ".ecsv", recipe=recipe)
    _, report, output = exported(night, ".csv", recipe=recipe)
    beside = described(output)
    rows = by_csvw(output)
    assert report.notes == [
        "«Object» holds '=1+1', which a spreadsheet that opens the CSV would take for a formula"
    ]
    described_columns = beside["tableSchema"]["columns"]
    assert [column["name"] for column in described_columns] == told.colnames
    for column in described_columns:
        same = told[column["name"]]
        assert column["dc:description"] == same.description
        text = column.get("schema:unitText")
        assert (u.Unit(text, format="vounit") if text else None) == same.unit
        ucd = column.get("schema:propertyID")
        assert (ucd.removeprefix("ucd:") if ucd else None) == same.meta.get("ucd")
        for row, value in zip(rows, same, strict=True):
            found = row[column["name"]]
            if value is np.ma.masked:
                assert found is None
            elif column["datatype"] == "number":
                assert np.float64(found).tobytes() == np.float64(value).tobytes()
            elif column["datatype"] == "dateTime":
                assert found.isoformat() == value
            else:
                assert found == value
    assert {column["datatype"] for column in described_columns} == {"number", "dateTime", "string"}
    named = {note["schema:name"]: note["schema:value"] for note in beside["notes"]}
    named["sheet"], named["logbook"] = beside["dc:title"], beside["dc:source"]
    named["exported by"] = beside["dc:creator"]
    named["exported"] = beside["dc:created"]["@value"].removesuffix("Z")
    assert named == dict(told.meta)


def test_the_metadata_keep_to_the_rules_of_the_vocabulary(night: Path) -> None:
    _, _, output = exported(night, ".csv")
    beside = described(output)
    # 5.2: a top-level description has @context; 5.4: what a table may say
    assert beside["@context"] == "http://www.w3.org/ns/csvw"
    table = {"@context", "url", "dialect", "notes", "tableSchema"}
    # 5.6 and 5.7: what a column may say, or inherit
    column = {"name", "titles", "datatype", "null"}
    # 5.8.1: everything else by a prefix of RDFa's initial context
    # (http://www.w3.org/2011/rdfa-context/rdfa-1.1)
    common = re.compile(r"(dc|schema):[A-Za-z0-9]+")
    assert all(key in table or common.fullmatch(key) for key in beside)
    columns = beside["tableSchema"]["columns"]
    assert all(key in column or common.fullmatch(key) for each in columns for key in each)
    assert all(common.fullmatch(key) or key == "@type" for each in beside["notes"] for key in each)
    # 5.6: a name is a variable of RFC 6570, section 2.3, that does not begin with "_"; 5.5: no two
    # columns have one
    names = [each["name"] for each in columns]
    assert all(re.fullmatch(r"[A-Za-z0-9][A-Za-z0-9_]*", name) for name in names)
    assert len(set(names)) == len(names)
    # the Model, section 8: titles are those of the header row
    with output.open(newline="", encoding="utf-8") as file:
        assert [each["titles"] for each in columns] == next(csv.reader(file))
    # 5.11.1 lists the datatypes, 5.7 says that "" is what is missing
    assert beside["tableSchema"]["null"] == ""
    assert beside["dc:created"] == {"@value": "2031-03-15T09:30:00Z", "@type": "xsd:dateTime"}
    assert beside["schema:sha256"] == hashlib.sha256(output.read_bytes()).hexdigest()


def test_a_name_that_is_no_url_is_found_by_its_metadata_on_the_web(
    night: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    name = "night 14 #2, 50%: é.csv"
    export(night, tmp_path / name, own(), now=NOW)
    monkeypatch.setenv("no_proxy", "127.0.0.1")
    monkeypatch.setattr(SimpleHTTPRequestHandler, "log_message", lambda *_: None)
    with ThreadingHTTPServer(
        ("127.0.0.1", 0), partial(SimpleHTTPRequestHandler, directory=str(tmp_path))
    ) as server:
        threading.Thread(target=server.serve_forever, daemon=True).start()
        address = f"http://127.0.0.1:{server.server_port}/{quote(name)}"
        # RFC 3986, section 5.2: the name as a reference from where the metadata are
        assert urljoin(f"{address}-metadata.json", described(tmp_path / name)["url"]) == address
        rows = by_csvw(address)
        server.shutdown()
    assert [row["velocity"] for row in rows][:2] == [14989.6229, 1e-300]


@pytest.mark.parametrize("suffix", FORMATS)
def test_a_row_that_begins_with_a_hash_is_no_comment(tmp_path: Path, suffix: str) -> None:
    rows: list[list[Any]] = [["#", "z"], ["#7", 0.1], ["# 8, south", 0.2], ["9", 0.3]]
    path = logbook(tmp_path, rows)
    table, _, output = exported(path, suffix, recipe=None)
    assert [float(each) for each in table["z"]] == [0.1, 0.2, 0.3]
    if suffix == ".csv":
        assert [row["column"] for row in by_csvw(output)] == ["#7", "# 8, south", "9"]
        # the Vocabulary, section 5.9: a string, and "#" where there is none
        prefix = described(output)["dialect"]["commentPrefix"]
        assert not any(row.startswith(prefix) for row in output.read_text().splitlines())


def test_no_dialect_is_told_where_the_usual_one_will_do(night: Path) -> None:
    _, _, output = exported(night, ".csv")
    assert "dialect" not in described(output)


def test_truths_are_told_as_truths(tmp_path: Path) -> None:
    rows: list[list[Any]] = [["Object", "Clear", "Guided"], ["a", True, True], ["b", False, None]]
    _, _, output = exported(logbook(tmp_path, rows), ".csv", recipe=None)
    assert [row["clear"] for row in by_csvw(output)] == [True, False]
    assert [row["guided"] for row in by_csvw(output)] == ["TRUE", None]


@pytest.mark.parametrize("there", ["out.csv", "out.csv-metadata.json"])
def test_neither_file_is_replaced_unless_asked(night: Path, tmp_path: Path, there: str) -> None:
    (tmp_path / there).write_text("another's")
    with pytest.raises(LogbookError, match=f"{there} exists and would be overwritten"):
        export(night, tmp_path / "out.csv", own())
    assert [each.name for each in tmp_path.iterdir()] == [there]
    assert (tmp_path / there).read_text() == "another's"
    (tmp_path / "out.csv-metadata.json").write_text("{}")
    (tmp_path / "out.csv-metadata.json").chmod(0o640)
    report = export(night, tmp_path / "out.csv", own(), overwrite=True)
    assert (report.output, report.metadata) == (
        str(tmp_path / "out.csv"),
        str(tmp_path / "out.csv-metadata.json"),
    )
    assert sorted(each.name for each in tmp_path.iterdir()) == [
        "out.csv", "out.csv-metadata.json",
    ]  # fmt: skip
    assert (tmp_path / "out.csv-metadata.json").stat().st_mode & 0o777 == 0o640
    assert len(by_csvw(tmp_path / "out.csv")) == 4


def test_a_read_only_file_beside_it_leaves_both(night: Path, tmp_path: Path) -> None:
    (tmp_path / "out.csv").write_text("old")
    (tmp_path / "out.csv-metadata.json").write_text("old")
    (tmp_path / "out.csv-metadata.json").chmod(0o444)
    with pytest.raises(LogbookError, match=r"metadata.json is read-only"):
        export(night, tmp_path / "out.csv", own(), overwrite=True)
    assert (tmp_path / "out.csv").read_text() == "old"


OLD = (b"x\r\n1\r\n", b'{"of": "the old"}')
NEW = (b"x\r\n2\r\n", b'{"of": "the new"}')


def pair(table: Path) -> tuple[bytes | None, bytes | None]:
    beside = table.with_name(f"{table.name}-metadata.json")
    return tuple(each.read_bytes() if each.exists() else None for each in (table, beside))  # type: ignore[return-value]


@pytest.mark.parametrize("old", [True, False])
@pytest.mark.parametrize("step", range(9))
def test_a_failure_leaves_no_table_beside_the_metadata_of_another(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, step: int, old: bool
) -> None:
    table = tmp_path / "out.csv"
    if old:
        write_both(table, *OLD)
    before = pair(table)
    steps = []
    real = {name: getattr(os, name) for name in ("open", "fsync", "replace")}

    def failing(name: str, *arguments: Any, **options: Any) -> Any:
        steps.append(name)
        if len(steps) == step + 1:
            raise OSError(errno.ENOSPC, "No space left on device")
        return real[name](*arguments, **options)

    with monkeypatch.context() as patched:
        for name in real:
            patched.setattr(os, name, partial(failing, name))
        try:
            write_both(table, *NEW, overwrite=True)
            failed = False
        except LogbookError as error:
            failed = True
            told = str(error)
    if not failed:
        assert pair(table) == NEW
    elif pair(table) != before:
        # the last of the renames: all else is on the disk by then
        assert pair(table) == (NEW[0], None)
        assert "out.csv was written, but not its metadata" in told
    assert {each.name for each in tmp_path.iterdir()} <= {"out.csv", "out.csv-metadata.json"}
    write_both(table, *NEW, overwrite=True)
    assert pair(table) == NEW


def test_breaking_off_just_after_the_table_leaves_no_old_metadata_beside_it(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    table = tmp_path / "out.csv"
    write_both(table, *OLD)
    real = os.replace

    def broken_off(source: Path, target: Path) -> None:
        real(source, target)
        if Path(target) == table:
            raise KeyboardInterrupt

    with monkeypatch.context() as patched:
        patched.setattr(os, "replace", broken_off)
        with pytest.raises(KeyboardInterrupt):
            write_both(table, *NEW, overwrite=True)
    assert pair(table) == (NEW[0], None)
    assert [each.name for each in tmp_path.iterdir()] == ["out.csv"]


KILLED = """
import os, signal, sys
from pathlib import Path
from workbooks.tables.csv_on_the_web import write_both
count, real = int(sys.argv[2]), {name: getattr(os, name) for name in ("fsync", "replace")}
def killed(name, *arguments):
    global count
    count -= 1
    if count == 0:
        os.kill(os.getpid(), signal.SIGKILL)
    result = real[name](*arguments)
    count -= 1
    if count == 0:
        os.kill(os.getpid(), signal.SIGKILL)
    return result
for name in real:
    setattr(os, name, lambda *arguments, name=name: killed(name, *arguments))
write_both(Path(sys.argv[1]), b"x\\r\\n2\\r\\n", b'{"of": "the new"}', overwrite=True)
"""


def test_a_kill_leaves_no_table_beside_the_metadata_of_another(tmp_path: Path) -> None:
    seen = set()
    for count in range(1, 30):
        folder = tmp_path / str(count)
        folder.mkdir()
        table = folder / "out.csv"
        write_both(table, *OLD)
        ended = subprocess.run(
            [sys.executable, "-c", KILLED, str(table), str(count)],
            env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])},
            check=False,
        ).returncode
        assert ended in (0, -signal.SIGKILL)
        seen.add(pair(table))
        write_both(table, *NEW, overwrite=True)
        assert sorted(each.name for each in folder.iterdir()) == [
            "out.csv", "out.csv-metadata.json",
        ]  # fmt: skip
        assert pair(table) == NEW
        if ended == 0:
            break
    else:
        pytest.fail("it never came to its end")
    assert seen == {OLD, (OLD[0], None), (NEW[0], None), NEW}


# ---- every kind of column in every format ---------------------------------------------------

KINDS = """
title = "Every kind"
purpose = "One column of each kind."

[[sheets]]
name = "Night"

[[sheets.columns]]
key = "target"
label = "Target"
role = "input"
kind = "text"
required = false

[[sheets.columns]]
key = "start"
label = "Start"
role = "input"
kind = "time"
required = false

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"

[[sheets.columns]]
key = "observed"
label = "Observed"
unit = "Angstrom"
role = "input"
sigma = "observed_sigma"

[[sheets.columns]]
key = "observed_sigma"
label = "± Observed"
unit = "Angstrom"
role = "input"
required = false

[[sheets.columns]]
key = "frame"
label = "Frame"
role = "input"
choices = ["barycentric", "topocentric"]
required = false

[[sheets.columns]]
key = "redshift"
label = "Redshift"
role = "computed"
formula = "redshift_from_line(observed, line)"
sigma = true
"""


def told_by(output: Path) -> dict[str, tuple[Any, list[Any]]]:
    """Return the unit and the values of each column, None for what is missing.

    A text that is missing is an empty one in VOTable 1.4 and FITS, which know no other.
    """
    if output.suffix == ".csv":
        rows = by_csvw(output)
        units = {
            column["name"]: column.get("schema:unitText")
            for column in described(output)["tableSchema"]["columns"]
        }
        return {
            key: (
                u.Unit(units[key], format="vounit") if units[key] else None,
                [
                    row[key].isoformat() if isinstance(row[key], datetime) else row[key]
                    for row in rows
                ],
            )
            for key in units
        }
    table = Table.read(output)
    found = {}
    for key in table.colnames:
        values = [None if value is np.ma.masked else value for value in table[key]]
        if table[key].dtype.kind in "SUO":
            values = [str(value) if value is not None and str(value) else None for value in values]
        elif table[key].dtype.kind == "b":
            values = [bool(value) for value in values]
        else:
            values = [None if value is None else float(value) for value in values]
        found[key] = (table[key].unit, values)
    return found


def test_every_kind_of_column_is_right_in_every_format(tmp_path: Path) -> None:
    recipe = own(KINDS)
    headers = ["Target", "Start", "Line", "Observed [Angstrom]", "± Observed [Angstrom]", "Frame",
               "Redshift", "± Redshift", "Clear", "Guided", "Seeing [arcsec]",
               "Remark"]  # fmt: skip
    rows: list[list[Any]] = [
        ["TH 0412-17", datetime(2031, 3, 14, 20, 7), "H alpha", 6892.843333333333, 0.21,
         "barycentric", None, None, True, True, 1.1, "ok"],
        ["=1+1", "2031-03-14T20:14:30.250Z", "H beta", 5100.25, None,
         "topocentric", None, None, False, None, None, 7.0],
        [None, None, "H gamma", 4500.0, 0.4, None, None, None, True, False, "#DIV/0!", "#N/A"],
        ["bad line", None, "H omega", 4500.0, 0.4, None, None, None, True, True, 0.9, None],
    ]  # fmt: skip
    path = logbook(tmp_path, [headers, *rows], "kinds.xlsx")
    book = openpyxl.load_workbook(path)
    for cell in ("K6", "L6"):
        book["Night"][cell].data_type = "e"
    book.save(path)
    fill(path, tmp_path / "filled.xlsx", recipe)
    stored = openpyxl.load_workbook(tmp_path / "filled.xlsx", data_only=True)["Night"]
    computed = {
        key: [cell.value if isinstance(cell.value, float) else None for cell in stored[letter][3:7]]
        for key, letter in (("redshift", "G"), ("redshift_sigma", "H"))
    }
    # NIST's Ritz wavelengths in vacuum, from memory: H alpha 6564.6, H beta 4862.7, H gamma 4341.7
    for index, rest in enumerate((6564.6, 4862.7, 4341.7)):
        assert computed["redshift"][index] == pytest.approx(rows[index][3] / rest - 1, abs=2e-5)
    assert computed["redshift_sigma"][0] == pytest.approx(0.21 / 6564.6, rel=1e-4)
    assert computed["redshift_sigma"][1] is None
    assert computed["redshift"][3] is computed["redshift_sigma"][3] is None
    length, angle = u.Angstrom, u.arcsec
    expected: dict[str, tuple[Any, list[Any]]] = {
        "target": (None, ["TH 0412-17", "=1+1", None, "bad line"]),
        "start": (None, ["2031-03-14T20:07:00", "2031-03-14T20:14:30.250", None, None]),
        "line": (None, ["H alpha", "H beta", "H gamma", "H omega"]),
        "observed": (length, [6892.843333333333, 5100.25, 4500.0, 4500.0]),
        "observed_sigma": (length, [0.21, None, 0.4, 0.4]),
        "frame": (None, ["barycentric", "topocentric", None, None]),
        "redshift": (None, computed["redshift"]),
        "redshift_sigma": (None, computed["redshift_sigma"]),
        "clear": (None, [True, False, True, True]),
        "guided": (None, ["TRUE", None, "FALSE", "TRUE"]),
        "seeing": (angle, [1.1, None, None, 0.9]),
        "remark": (None, ["ok", "7", None, None]),
    }
    for suffix in FORMATS:
        output = tmp_path / f"out{suffix}"
        report = export(tmp_path / "filled.xlsx", output, recipe)
        found = told_by(output)
        if suffix == ".csv":
            # csvw gives a moment as Python writes it
            expected["start"][1][1] = "2031-03-14T20:14:30.250000"
        for key, (unit, values) in expected.items():
            assert found[key][1] == values, (suffix, key)
            assert found[key][0] in (unit, unit or u.dimensionless_unscaled), (suffix, key)
        if suffix == ".csv":
            expected["start"][1][1] = "2031-03-14T20:14:30.250"
        told = {problem.cell: problem.sentence for problem in report.problems}
        assert "#DIV/0!" in told["Night!K6"], suffix
        assert "#N/A" in told["Night!L6"], suffix
        assert {"Night!G7", "Night!H7"} <= set(told), suffix


@pytest.mark.parametrize("name", built_in())
def test_every_column_of_every_recipe_is_the_same_in_every_format(
    tmp_path: Path, name: str
) -> None:
    filled = filled_template(tmp_path, name)
    table = load(name).tables[0]
    sheet = openpyxl.load_workbook(filled, data_only=True)[table.sheet.name]
    labels = {str(cell.value).split(" [")[0]: cell.column for cell in sheet[4] if cell.value}
    for suffix in FORMATS:
        output = tmp_path / f"out{suffix}"
        export(filled, output, sheet=table.sheet.name)
        found = told_by(output)
        for key, column in table.columns.items():
            if column.hidden:
                continue
            value = sheet.cell(5, labels[column.label]).value
            if isinstance(value, datetime):
                value = value.isoformat()
            elif not isinstance(value, (float, int)) and column.is_number:
                value = None
            assert found[key][1] == [value], (suffix, key)
            unit = u.Unit(column.unit) if column.is_number and column.unit else None
            assert found[key][0] in (unit, unit or u.dimensionless_unscaled), (suffix, key)


# ---- long tables ----------------------------------------------------------------------------


def test_rows_of_ecsv_and_votable_are_those_that_astropy_writes(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    numbers = [0.1, -0.0, 5.0, 1e22, 1e-300, 123456789.125, 1 / 3, 5e-324]
    texts = ["a b", "c&<d>]]>", "é 日", 'q"u"', "two\nlines", "plain", "x,y", "'"]
    rows: list[list[Any]] = [["Name", "Number", "Gaps", "Clear"]]
    for index in range(3 * len(numbers)):
        number = numbers[index % len(numbers)]
        rows.append([texts[index % len(texts)], number, number if index % 2 else None, index < 9])
    path = logbook(tmp_path, rows)
    monkeypatch.setattr("workbooks.tables.typed_columns.BLOCK", 5)
    for suffix, form in ((".ecsv", "ascii.ecsv"), (".vot", "votable")):
        table, _, output = exported(path, suffix, recipe=None)
        again = tmp_path / f"again{suffix}"
        # as the export hands it to astropy, but with all of its rows
        if suffix == ".ecsv":
            written = StringIO()
            table.write(written, format=form)
            assert output.read_text().splitlines() == written.getvalue().splitlines()
        else:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")
                vot.writeto(vot.parse(output), str(again))
            within = re.compile(rb"<TABLEDATA>.*</TABLEDATA>", re.DOTALL)
            ours, theirs = (within.search(each.read_bytes()) for each in (output, again))
            assert ours
            assert theirs
            assert ours[0] == theirs[0]


def test_one_long_text_does_not_make_every_row_as_long(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    rows: list[list[Any]] = [["Object", "Note"], ["a", "n" * 900], ["b", "short"]]
    path = logbook(tmp_path, rows)
    monkeypatch.setattr(table_formats, "MOST_CHARACTERS", 1000)
    for suffix in (".fits", ".parquet"):
        with pytest.raises(LogbookError, match="«Note» holds a text of 900 characters"):
            exported(path, suffix, recipe=None)
    for suffix in (".vot", ".ecsv", ".csv"):
        table, _, _ = exported(path, suffix, recipe=None)
        assert len(str(table["Note" if suffix == ".csv" else "note"][0])) == 900


# ---- files ----------------------------------------------------------------------------------


def test_formulas_that_nothing_has_calculated_are_told(tmp_path: Path) -> None:
    path = tmp_path / "t.xlsx"
    build(load("line-log"), path, rows=4)
    book = openpyxl.load_workbook(path)
    book["Lines"]["B5"], book["Lines"]["C5"] = "H alpha", 6890.0
    book.save(path)
    report = export(path, tmp_path / "out.ecsv", sheet="Lines")
    assert report.has_problems
    assert "hold no results" in report.problems[0].sentence


def test_an_output_is_replaced_only_when_asked_and_never_while_open(
    night: Path, tmp_path: Path
) -> None:
    output = tmp_path / "out.fits"
    export(night, output, own())
    before = output.read_bytes()
    with pytest.raises(LogbookError, match="exists and would be overwritten"):
        export(night, output, own())
    (tmp_path / ".~lock.out.fits#").write_text("")
    with pytest.raises(LogbookError, match="is open in LibreOffice"):
        export(night, output, own(), overwrite=True)
    (tmp_path / ".~lock.out.fits#").unlink()
    output.chmod(0o444)
    with pytest.raises(LogbookError, match="read-only"):
        export(night, output, own(), overwrite=True)
    assert output.read_bytes() == before
    assert sorted(each.name for each in tmp_path.iterdir()) == ["out.fits"]


def test_the_logbook_itself_is_never_the_output(night: Path, tmp_path: Path) -> None:
    copy = tmp_path / "night.csv"
    write_whole(copy, night.read_bytes())
    with pytest.raises(LogbookError, match="is the logbook itself"):
        export(copy, copy, own(), overwrite=True)


def test_an_unknown_suffix_names_those_there_are(night: Path, tmp_path: Path) -> None:
    with pytest.raises(LogbookError, match=r"\.fits \(FITS binary table\)"):
        export(night, tmp_path / "out.doc", own())
    assert not list(tmp_path.iterdir())


def test_of_several_sheets_one_must_be_named(tmp_path: Path) -> None:
    path = logbook(tmp_path, [HEADERS, *ROWS])
    book = openpyxl.load_workbook(path)
    second = book.create_sheet("Second")
    for row in ([*HEADERS[1:4]], ["a", "H alpha", 690.0]):
        second.append(row)
    book.save(path)
    with pytest.raises(LogbookError, match="'Night', 'Second': name one with --sheet"):
        export(path, tmp_path / "out.ecsv", own())
    report = export(path, tmp_path / "out.ecsv", own(), sheet="second")
    assert (report.sheet, report.rows) == ("Second", 1)


def test_the_command(night: Path, tmp_path: Path) -> None:
    (tmp_path / "own.toml").write_text(OWN)
    ran = run(tmp_path, "export", str(night), "-o", "out.vot", "-r", "own.toml")
    assert (ran.returncode, ran.stderr) == (0, "")
    assert "4 rows of 8 columns" in ran.stdout
    assert Table.read(tmp_path / "out.vot")["velocity"].unit == u.km / u.s
    ran = run(tmp_path, "export", str(night), "-o", "out.vot", "-r", "own.toml")
    assert ran.returncode == 2
    assert ran.stderr == "cellfuncs: out.vot exists and would be overwritten\n"
    ran = run(tmp_path, "export", str(night), "-o", "o.vot", "-r", "own.toml", "--dates", "mjd")
    assert (ran.returncode, ran.stderr.count("\n")) == (2, 1)


def test_the_command_names_both_files_and_takes_a_folder(night: Path, tmp_path: Path) -> None:
    logs, archive = tmp_path / "logs", tmp_path / "archive"
    logs.mkdir()
    archive.mkdir()
    for name in ("one", "two"):
        (logs / f"{name}.xlsx").write_bytes(night.read_bytes())
    (archive / "two.csv-metadata.json").write_text("another's")
    ran = run(tmp_path, "export", "logs", "-o", "archive/.csv", "--json")
    assert ran.returncode == 1
    told = json.loads(ran.stdout)
    assert [each["output"] for each in told["logbooks"]] == ["archive/one.csv"]
    assert [each["metadata"] for each in told["logbooks"]] == ["archive/one.csv-metadata.json"]
    assert [each["sentence"] for each in told["failed"]] == [
        "archive/two.csv-metadata.json exists and would be overwritten"
    ]
    assert sorted(each.name for each in archive.iterdir()) == [
        "one.csv", "one.csv-metadata.json", "two.csv-metadata.json",
    ]  # fmt: skip
    ran = run(tmp_path, "export", "logs", "-o", "archive/.csv", "--overwrite")
    assert ran.returncode == 0
    for name in ("one", "two"):
        assert f"→ archive/{name}.csv, described by archive/{name}.csv-metadata.json" in ran.stdout
        assert len(by_csvw(archive / f"{name}.csv")) == 4
        assert described(archive / f"{name}.csv")["dc:source"] == f"{name}.xlsx"
    # a folder with both is a folder of two logbooks, not of four
    ran = run(tmp_path, "check", "archive", "--json")
    assert len(json.loads(ran.stdout)["logbooks"]) == 2


def test_without_the_library_parquet_is_declined_in_a_sentence(night: Path, tmp_path: Path) -> None:
    (tmp_path / "hidden").mkdir()
    (tmp_path / "hidden" / "pyarrow.py").write_text("raise ImportError('not here')")
    path = f"{tmp_path / 'hidden'}{os.pathsep}{Path(__file__).parents[2]}"
    ran = run(tmp_path, "export", str(night), "-o", "out.parquet", path=path)
    assert ran.returncode == 2
    assert "pip install cellfuncs[parquet]" in ran.stderr
    assert ran.stderr.count("\n") == 1
    assert not (tmp_path / "out.parquet").exists()


def test_the_report_is_plain_data(night: Path, tmp_path: Path) -> None:
    report = export(night, tmp_path / "out.csv", own())
    assert asdict(report)["columns"] == 8
    assert asdict(export(night, tmp_path / "out.vot", own()))["metadata"] == ""
