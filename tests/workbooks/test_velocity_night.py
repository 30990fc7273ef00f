"""The nightly radial-velocity template: plain formulas follow the Earth by a hidden table.

Outside checks: LibreOffice Calc, formualizer and IronCalc recalculate the formulas; astropy gives
the barycentric velocities and dates that they are held to (the full computation is held to astropy,
JPL's DE421 and published values in tests/published/).
"""

import random
import warnings
from datetime import UTC, date, datetime, timedelta
from pathlib import Path
from typing import Any

import numpy as np
import openpyxl
import pytest
from astropy import units as u
from astropy.coordinates import EarthLocation, SkyCoord
from astropy.time import Time
from astropy.utils import iers
from openpyxl.utils import get_column_letter
from openpyxl.utils.datetime import CALENDAR_MAC_1904
from recalculate import ENGINES, ErrorCell, Sheets, recalculated, save
from typer.testing import CliRunner

import cellfuncs as cf
from cellfuncs import CellError
from cellfuncs.families.sky import POINTING
from workbooks.build import build
from workbooks.cli import app
from workbooks.fill import fill
from workbooks.recipe import RecipeError, load
from workbooks.template.season import Season

SHEET, FIRST_ROW = "Exposures", 5
FIRST, LAST = date(2026, 3, 1), date(2028, 2, 29)

# Places on the Earth, not of observatories: far north, at the equator, far south and high.
SITES = ((25.5, 78.9, 15.0), (-77.25, -0.5, 2850.0), (160.0, -71.0, 4900.0))

every_engine = pytest.mark.parametrize("engine", ENGINES)


def sexagesimal(value: float, digits: int) -> str:
    """Write an angle with blanks between its parts, to a fraction of its second."""
    total = round(abs(value) * 3600 * 10**digits)
    seconds, rest = divmod(total, 10**digits)
    text = f"{seconds // 3600:02} {seconds // 60 % 60:02} {seconds % 60:02}.{rest:0{digits}}"
    return ("-" if value < 0 else "+") + text


def exposures(count: int, seed: int) -> list[dict[str, Any]]:
    """Give rows at random over the sky and over the table's dates, its last hours included."""
    source = random.Random(seed)
    rows = []
    for number in range(count):
        start = datetime(FIRST.year, FIRST.month, FIRST.day) + timedelta(
            days=source.uniform(0, (LAST - FIRST).days + 0.99)
        )
        if number == 0:
            start = datetime(FIRST.year, FIRST.month, FIRST.day)
        if number == 1:
            start = datetime(LAST.year, LAST.month, LAST.day, 23, 50)
        # to the millisecond, as logs have it
        start = start.replace(microsecond=start.microsecond // 1000 * 1000)
        rows.append(
            {
                "Right ascension": sexagesimal(source.uniform(0, 23.9999), 3).lstrip("+"),
                "Declination": sexagesimal(source.uniform(-89.9, 89.9), 2),
                "Start of exposure, UTC": start.isoformat(sep=source.choice("T ")),
                "Exposure time [s]": float(source.choice((0, 30, 300, 900))),
                "Measured velocity [km/s]": source.uniform(-300, 300),
                "Catalogue velocity [km/s]": source.choice((None, 12.5)),
            }
        )
    return rows


def _letters() -> dict[str, str]:
    (table,) = load("velocity-night").tables
    headers = [*(column.header for column in (*table.inputs, *table.computed)), "Status"]
    return {header: get_column_letter(place) for place, header in enumerate(headers, 1)}


LETTERS = _letters()


def put_rows(
    path: Path, output: Path, rows: list[dict[str, Any]], site: Any, **settings: Any
) -> None:
    book = openpyxl.load_workbook(path)
    if settings.pop("from_1904", False):
        book.epoch = CALENDAR_MAC_1904
    sheet = book[SHEET]
    for number, row in enumerate(rows, FIRST_ROW):
        for header, value in row.items():
            sheet[f"{LETTERS[header]}{number}"] = value
    values = dict(zip(("longitude", "latitude", "height"), site, strict=True)) | settings
    for key, value in values.items():
        name, place = book.defined_names[key].attr_text.split("!")
        book[name.strip("'")][place.replace("$", "")] = value
    save(book, output)


def template(folder: Path, rows: int, **options: Any) -> Path:
    path = folder / "template.xlsx"
    season = Season(FIRST, LAST)
    build(load("velocity-night"), path, rows=rows, season=season, overwrite=True, **options)
    return path


def shown(sheets: Sheets, header: str, row: int) -> Any:
    return sheets[SHEET].get(f"{LETTERS[header]}{row}")


# ---- the Earth in a spreadsheet --------------------------------------------------------------


@pytest.fixture(scope="module")
def nights(tmp_path_factory: pytest.TempPathFactory) -> dict[Any, Path]:
    """500 rows in all, for three sites."""
    folder = tmp_path_factory.mktemp("nights")
    made = {}
    for number, site in enumerate(SITES):
        count = (168, 166, 166)[number]
        path = folder / f"night {number}.xlsx"
        put_rows(template(folder, count), path, exposures(count, number), site)
        made[site] = path
    return made


@every_engine
@pytest.mark.parametrize("site", SITES, ids=["north", "equator", "south"])
def test_the_table_gives_what_the_full_computation_gives(
    nights: dict[Any, Path], engine: str, site: tuple[float, float, float]
) -> None:
    rows = exposures(*{SITES[0]: (168, 0), SITES[1]: (166, 1), SITES[2]: (166, 2)}[site])
    found = recalculated(nights[site], engine)[SHEET]
    ra = np.array([cf.angle_from_text(row["Right ascension"], True) for row in rows])
    dec = np.array([cf.angle_from_text(row["Declination"]) for row in rows])
    half = np.array([row["Exposure time [s]"] for row in rows]) / 86400 / 2
    start = [row["Start of exposure, UTC"].replace(" ", "T") for row in rows]
    middle = Time(start, scale="utc") + half * u.day

    def column(header: str) -> np.ndarray:
        values = [found[f"{LETTERS[header]}{FIRST_ROW + n}"] for n in range(len(rows))]
        return np.array(values, dtype=float)

    with warnings.catch_warnings(), iers.conf.set_temp("auto_download", False):
        warnings.simplefilter("ignore")
        iers.conf.auto_max_age = None
        iers.conf.iers_degraded_accuracy = "ignore"
        # after the packaged table's end UT1 = UTC
        known = iers.earth_orientation_table.get()["MJD"][-1].value - 1
        middle.delta_ut1_utc = np.where(middle.mjd < known, middle.get_delta_ut1_utc(), 0.0)
        place = EarthLocation.from_geodetic(*site)
        target = SkyCoord(ra, dec, unit="deg")
        velocity = target.radial_velocity_correction(obstime=middle, location=place)
        light = middle.light_travel_time(target, location=place)
        barycentric = (middle.tdb + light).jd
    off = np.abs(column("Barycentric correction [km/s]") - velocity.to_value("km/s"))
    assert off.max() < 5e-5
    # a Julian date is held to 0.04 ms by the number itself
    assert np.abs(column("Barycentric date, TDB [d]") - barycentric).max() * 86400 < 1e-3


@every_engine
def test_every_column_gives_what_python_gives(nights: dict[Any, Path], engine: str) -> None:
    site = SITES[1]
    rows = exposures(166, 1)
    found = recalculated(nights[site], engine)[SHEET]
    wrong = []
    for number, row in enumerate(rows, FIRST_ROW):
        ra = cf.angle_from_text(row["Right ascension"], True)
        dec = cf.angle_from_text(row["Declination"])
        middle = cf.time_julian(row["Start of exposure, UTC"])
        middle += row["Exposure time [s]"] / 2 / 86400
        seen = (ra, dec, middle, *site)
        measured = row["Measured velocity [km/s]"] / 299792.458
        velocity = 299792.458 * cf.redshift_barycentric(measured, *seen)
        wanted = {
            "RA in degrees [deg]": (ra, 1e-9),
            "Dec in degrees [deg]": (dec, 1e-9),
            "Mid-exposure, JD UTC [d]": (middle, 1e-8),
            "Measured redshift": (measured, 1e-12),
            "Barycentric velocity [km/s]": (velocity, 5e-5),
            "Velocity in the frame [km/s]": (
                cf.velocity_in_frame(velocity, ra, dec, "barycentric", "lsrk"),
                5e-5,
            ),
            # 0.5" of polar motion
            "Hour angle [h]": (cf.angle_hour(*seen), 1e-5 / np.cos(np.radians(dec))),
        }
        if (altitude := cf.altitude(*seen)) > 5:
            wanted["Airmass"] = (cf.airmass(*seen), 5e-4)
        for header, (value, tolerance) in wanted.items():
            cell = found[f"{LETTERS[header]}{number}"]
            if not isinstance(cell, float) or not abs(cell - value) <= tolerance:
                wrong.append((header, number, cell, value))
        if altitude < -0.01 and found[f"{LETTERS['Airmass']}{number}"] != ErrorCell("#NUM!"):
            wrong.append(("Airmass", number, found[f"{LETTERS['Airmass']}{number}"], "#NUM!"))
    assert not wrong


@every_engine
def test_outside_its_dates_the_sheet_says_so_and_never_extrapolates(
    tmp_path: Path, engine: str
) -> None:
    rows = [
        {**exposures(1, 3)[0], "Start of exposure, UTC": start, "Exposure time [s]": 60.0}
        for start in ("2026-02-28T23:59", "2028-03-01T00:00:01", "2026-03-01T00:00", "2031-01-01")
    ]
    path = tmp_path / "outside.xlsx"
    put_rows(template(tmp_path, 6), path, rows, SITES[1])
    sheets = recalculated(path, engine)
    for row in (5, 6, 8):
        assert shown(sheets, "Barycentric correction [km/s]", row) == ErrorCell("#NUM!")
        assert shown(sheets, "Barycentric date, TDB [d]", row) == ErrorCell("#NUM!")
        assert shown(sheets, "Status", row) == (
            "Start of exposure, UTC is outside this workbook's dates, 2026-03-01 to 2028-02-29"
        )
    assert isinstance(shown(sheets, "Barycentric correction [km/s]", 7), float)


STATUS: list[tuple[dict[str, Any], str]] = [
    ({"Start of exposure, UTC": "2027-06-31T03:00"}, "Start of exposure, UTC must be a date"),
    ({"Start of exposure, UTC": "2027-02-29T03:00"}, "Start of exposure, UTC must be a date"),
    ({"Start of exposure, UTC": "1959-12-31T03:00"}, "Start of exposure, UTC must be a date"),
    ({"Start of exposure, UTC": "last night"}, "Start of exposure, UTC must be a date"),
    ({"Start of exposure, UTC": None}, "Start of exposure, UTC is missing"),
    ({"Right ascension": None}, "Right ascension is missing"),
    ({"Right ascension": "25 00 00"}, "RA in degrees: no result; look at this row's inputs"),
    ({"Right ascension": "83.822"}, "RA in degrees: no result; look at this row's inputs"),
    ({"Declination": "-91 00 00"}, "Barycentric correction: no result; look at"),
    ({"Measured velocity [km/s]": None}, "Measured velocity or Line or Observed wavelength is"),
    ({"Measured velocity [km/s]": "12 km/s"}, "Measured velocity is not a number"),
    ({"Measured velocity [km/s]": 3e5}, "Measured velocity must be below 299792 km/s"),
    ({"Exposure time [s]": -1.0}, "Exposure time must be at least 0 s"),
]


@every_engine
def test_status_says_in_words_what_is_wrong(tmp_path: Path, engine: str) -> None:
    good = {
        "Right ascension": "12 00 00",
        "Declination": "-02 00 00",
        "Start of exposure, UTC": "2027-04-02T05:00:00",
        "Exposure time [s]": 60.0,
        "Measured velocity [km/s]": 10.0,
    }
    rows = [good, *({**good, **change} for change, _ in STATUS)]
    by_line = {**good, "Measured velocity [km/s]": None, "Line": "H alpha"}
    rows += [by_line, {**by_line, "Observed wavelength [Angstrom]": 6565.2}]
    path, filled = tmp_path / "bad.xlsx", tmp_path / "filled.xlsx"
    put_rows(template(tmp_path, 20), path, rows, SITES[1])
    sheets = recalculated(path, engine)
    status = [shown(sheets, "Status", row) for row in range(5, 5 + len(rows))]
    assert status[0] == "ok"
    wrong = [
        (change, found)
        for (change, wanted), found in zip(STATUS, status[1:-2], strict=True)
        if not str(found).startswith(wanted)
    ]
    assert not wrong
    assert status[-2:] == ["Measured velocity or Line or Observed wavelength is missing", "ok"]
    fill(path, filled)
    sheet = openpyxl.load_workbook(filled, data_only=True)[SHEET]
    words = sheet[LETTERS["Status"]][4 : 4 + len(rows)]
    assert [cell.value for cell in words] == status


def test_fill_goes_on_where_the_table_ends(tmp_path: Path) -> None:
    row = {**exposures(1, 4)[0], "Start of exposure, UTC": "2033-03-03T03:03:03"}
    path, filled = tmp_path / "later.xlsx", tmp_path / "filled.xlsx"
    put_rows(template(tmp_path, 3), path, [row], SITES[0])
    fill(path, filled)
    sheet = openpyxl.load_workbook(filled, data_only=True)[SHEET]
    middle = cf.time_julian("2033-03-03T03:03:03") + row["Exposure time [s]"] / 2 / 86400
    seen = (
        cf.angle_from_text(row["Right ascension"], True),
        cf.angle_from_text(row["Declination"]),
        middle,
        *SITES[0],
    )
    found = sheet[f"{LETTERS['Barycentric correction [km/s]']}5"].value
    assert found == pytest.approx(cf.velocity_barycentric(*seen), abs=1e-9)


@pytest.mark.parametrize("from_1904", [False, True])
def test_dates_of_both_date_systems(tmp_path: Path, from_1904: bool) -> None:
    start = datetime(2027, 4, 2, 5, 0, 0)
    row = {**exposures(1, 4)[0], "Start of exposure, UTC": start, "Exposure time [s]": 0.0}
    path, filled = tmp_path / "dates.xlsx", tmp_path / "filled.xlsx"
    put_rows(template(tmp_path, 3), path, [row], SITES[0], from_1904=from_1904)
    wanted = cf.time_julian("2027-04-02T05:00:00")
    found = shown(recalculated(path, "libreoffice"), "Mid-exposure, JD UTC [d]", 5)
    assert found == pytest.approx(wanted, abs=1e-8)
    fill(path, filled)
    sheet = openpyxl.load_workbook(filled, data_only=True)[SHEET]
    place = f"{LETTERS['Mid-exposure, JD UTC [d]']}5"
    assert sheet[place].value == pytest.approx(wanted, abs=1e-8)


@pytest.mark.parametrize(
    "frame", ["barycentric", "lsrd", "galactocentric", "local-group", "cmb", "LSRK"]
)
def test_the_frame_of_choice(tmp_path: Path, frame: str) -> None:
    path = tmp_path / "frame.xlsx"
    put_rows(template(tmp_path, 3), path, exposures(1, 5), SITES[0], frame=frame)
    sheets = recalculated(path, "libreoffice")
    velocity, ra, dec, framed = (
        shown(sheets, header, 5)
        for header in (
            "Barycentric velocity [km/s]",
            "RA in degrees [deg]",
            "Dec in degrees [deg]",
            "Velocity in the frame [km/s]",
        )
    )
    assert framed == pytest.approx(
        cf.velocity_in_frame(velocity, ra, dec, "barycentric", frame.lower()), abs=1e-9
    )


def test_an_unknown_frame_gives_no_number(tmp_path: Path) -> None:
    path = tmp_path / "frame.xlsx"
    put_rows(template(tmp_path, 3), path, exposures(1, 5), SITES[0], frame="lsr")
    sheets = recalculated(path, "libreoffice")
    assert shown(sheets, "Velocity in the frame [km/s]", 5) == ErrorCell("#VALUE!")
    with pytest.raises(CellError, match="near matches: lsr"):
        cf.velocity_in_frame(1.0, 1.0, 1.0, "barycentric", "lsr")


# ---- the workbook ----------------------------------------------------------------------------


def test_the_workbook_is_small(tmp_path: Path) -> None:
    build(load("velocity-night"), tmp_path / "default.xlsx")
    assert (tmp_path / "default.xlsx").stat().st_size < 2_000_000
    assert template(tmp_path, 500).stat().st_size < 2_000_000


def test_two_years_from_today_unless_asked_otherwise(tmp_path: Path) -> None:
    build(load("velocity-night"), tmp_path / "default.xlsx", rows=2)
    sheet = openpyxl.load_workbook(tmp_path / "default.xlsx")["Settings"]
    values = {row[0].value: row[1].value for row in sheet.iter_rows() if row[0].value}
    first = date.fromisoformat(values["First date"])
    assert abs((first - datetime.now(UTC).date()).days) <= 1
    assert (date.fromisoformat(values["Last date"]) - first).days == 730


def test_the_command_takes_the_dates(tmp_path: Path) -> None:
    path = tmp_path / "asked.xlsx"
    call = ["template", "velocity-night", "-o", str(path), "--rows", "2"]
    done = CliRunner().invoke(app, [*call, "--from", "2027-01-01", "--to", "2027-06-30"])
    assert done.exit_code == 0, done.output
    sheet = openpyxl.load_workbook(path)["Season"]
    days = [row[2].value for row in sheet.iter_rows(min_row=2) if row[2].value is not None]
    # 181 days, the last one's midnight, and two more on either side
    assert len(days) == 181 + 1 + 2 * 2


@pytest.mark.parametrize(
    ("first", "last", "words"),
    [
        ("2027-02-29", None, "2027 is no leap year"),
        ("2027-05-01", "2027-04-01", "the end must follow the beginning"),
        ("2027-05-01", "2090-04-01", "at most 40 years"),
        ("1950-05-01", None, "1960"),
        ("soon", None, "not a date"),
    ],
)
def test_dates_that_cannot_be_are_refused(first: str, last: str | None, words: str) -> None:
    with pytest.raises(RecipeError, match=words):
        Season.between(first, last, date(2026, 12, 1))


def test_the_cautions_on_pointing_stand_beside_the_columns(tmp_path: Path) -> None:
    book = openpyxl.load_workbook(template(tmp_path, 2))
    how_to = [str(cell.value) for row in book["How to use"].iter_rows() for cell in row]
    for label in ("Hour angle", "Airmass"):
        assert any(text.startswith("Hour angle, Airmass: ") for text in how_to)
        explained = how_to[how_to.index(label) + 2]
        assert POINTING in explained


def test_the_chart_shows_the_standards_residuals(tmp_path: Path) -> None:
    path = tmp_path / "standards.xlsx"
    rows = [
        {**row, "Catalogue velocity [km/s]": 12.5 if number % 2 else None}
        for number, row in enumerate(exposures(6, 7))
    ]
    put_rows(template(tmp_path, 8), path, rows, SITES[0])
    sheets = recalculated(path, "libreoffice")
    points = sheets["Exposures points"]
    drawn = [points[f"B{row}"] for row in range(5, 13)]
    assert [isinstance(value, float) for value in drawn] == [False, True] * 3 + [False, False]
    velocity = shown(sheets, "Barycentric velocity [km/s]", 6)
    assert drawn[1] == pytest.approx(velocity - 12.5, abs=1e-9)
