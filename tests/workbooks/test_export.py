"""A table leaves the spreadsheet with its values, its units and what is known of it.

Outside checks: astropy.table reads every file back; astropy.time gives the Julian dates; the IVOA's
UCD1+ word list is the copy that astropy carries; pyarrow reads Parquet without astropy.
Standards: FITS 4.0 (2018), VOTable 1.4 (IVOA 2019), ECSV 1.0 (astropy APE 6), CSV by RFC 4180.
"""

import csv
import os
import subprocess
import sys
from dataclasses import asdict
from datetime import UTC, datetime, timedelta
from pathlib import Path
from typing import Any

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

from workbooks.build import build
from workbooks.export import ExportReport, ascii_of, export, julian_date
from workbooks.fill import fill
from workbooks.logbook import LogbookError
from workbooks.recipe import Recipe, built_in, load, read
from workbooks.saving import write_whole

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
    rows = [[f"quantity {n} [{text}]" for n, text in enumerate(UNITS)], [1.5] * len(UNITS)]
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
    rows = [HEADERS[1:6], ["a", "H alpha", 690.0, None, None], [None, None, None, None, None]]
    path = logbook(tmp_path, [*rows, ["Dome closed", None, None, None, None]])
    filled = tmp_path / "filled.xlsx"
    fill(path, filled, own())
    table, report, _ = exported(filled, ".ecsv")
    assert len(table) == 1
    assert any("row 6 holds no measurement ('Dome closed')" in note for note in report.notes)
    assert table.meta["computed with"].startswith("cellfuncs ")
    # 690 nm over H alpha in vacuum, 656.461 nm (value from memory)
    assert table["redshift"][0] == pytest.approx(690 / 656.461 - 1, abs=2e-6)


@pytest.mark.parametrize("name", built_in())
def test_a_template_filled_and_exported_needs_no_recipe(tmp_path: Path, name: str) -> None:
    recipe = load(name)
    path = tmp_path / f"{name}.xlsx"
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
    filled = tmp_path / "filled.xlsx"
    fill(path, filled)
    output = tmp_path / "out.fits"
    report = export(filled, output, sheet=table.sheet.name)
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
    rows = [["λ [nm]", "Λ [nm]", "3rd order", "a b", "A-B", "!?"], [1.0, 2.0, 3.0, 4.0, 5.0, 6.0]]
    output = tmp_path / "out.fits"
    export(logbook(tmp_path, rows), output)
    table = Table.read(output)
    assert table.colnames == ["lambda", "lambda_2", "column_3rd_order", "a_b", "a_b_2", "column"]
    assert [float(table[name][0]) for name in table.colnames] == [1, 2, 3, 4, 5, 6]


def test_the_ampere_and_the_coulomb_are_not_taken_for_what_was_meant(tmp_path: Path) -> None:
    rows = [["Wavelength [A]", "Temperature (C)"], [5000.0, 4.1], [5001.0, 4.2]]
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


def run(folder: Path, *arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "workbooks.cli", *arguments],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[2]), **environment},
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )


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


def test_without_the_library_parquet_is_declined_in_a_sentence(night: Path, tmp_path: Path) -> None:
    (tmp_path / "hidden").mkdir()
    (tmp_path / "hidden" / "pyarrow.py").write_text("raise ImportError('not here')")
    path = f"{tmp_path / 'hidden'}{os.pathsep}{Path(__file__).parents[2]}"
    ran = run(tmp_path, "export", str(night), "-o", "out.parquet", PYTHONPATH=path)
    assert ran.returncode == 2
    assert "pip install cellfuncs[parquet]" in ran.stderr
    assert ran.stderr.count("\n") == 1
    assert not (tmp_path / "out.parquet").exists()


def test_the_report_is_plain_data(night: Path, tmp_path: Path) -> None:
    report = export(night, tmp_path / "out.csv", own())
    assert asdict(report)["columns"] == 8
