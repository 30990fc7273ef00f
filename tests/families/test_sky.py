"""What the sky functions say to bad input, and that their caution stands wherever they appear."""

import math
from datetime import UTC, date, datetime, timedelta, timezone
from typing import Any
from xml.etree import ElementTree

import numpy as np
import pytest

import cellfuncs as cf
from cellfuncs import CATALOGUE, CellError, DomainError, InputError, MissingInput, reference
from cellfuncs.bridges import cell, excel
from cellfuncs.bridges.calc import extension

RA, DEC, WHEN = 101.287, -16.716, "2026-12-24T03:30"
SITE = (-70.4, -24.6, 2600.0)
SIRIUS = {
    "ra": RA,
    "dec": DEC,
    "utc": WHEN,
    "longitude": SITE[0],
    "latitude": SITE[1],
    "height": SITE[2],
}
OF_A_TARGET = (
    *("VELOCITY_BARYCENTRIC", "VELOCITY_HELIOCENTRIC", "REDSHIFT_BARYCENTRIC"),
    *("TIME_BARYCENTRIC", "ANGLE_HOUR", "ALTITUDE", "AIRMASS"),
)
every_one = pytest.mark.parametrize("name", OF_A_TARGET)


def call(name: str, **other: Any) -> Any:
    given = {**SIRIUS, **({"z": 0.05} if name == "REDSHIFT_BARYCENTRIC" else {}), **other}
    return CATALOGUE[name](**given)


# Sentences ----------------------------------------------------------------------------------------

SENTENCES: list[tuple[dict[str, Any], type[CellError], str]] = [
    ({"latitude": 95.0}, DomainError, r"latitude is 95; .*-90 or more and 90 or less deg"),
    ({"latitude": -90.1}, DomainError, r"latitude is -90\.1; "),
    ({"longitude": -181.0}, DomainError, r"longitude is -181; .*-180 or more and 360 or less"),
    ({"height": 26_350.0}, DomainError, r"height is 26350; .*20000 or less m"),
    ({"dec": 91.0}, DomainError, r"dec is 91; .*90 or less deg"),
    ({"ra": 361.0}, DomainError, r"ra is 361; .*360 or less deg"),
    ({"ra": -0.5}, DomainError, r"ra is -0\.5; .*0 or more"),
    # hours by mistake, where it can be seen
    ({"ra": "06:45:08.9"}, InputError, r"'06:45:08.9', .*ANGLE_FROM_TEXT\(ra, TRUE\)"),
    ({"ra": "6h45m"}, InputError, r"ra is '6h45m', .*ANGLE_FROM_TEXT\(ra, TRUE\)"),
    ({"dec": "-16 42 58"}, InputError, r"dec is '-16 42 58', .*ANGLE_FROM_TEXT\(dec\)"),
    ({"latitude": "24 36 S"}, InputError, r"'24 36 S', .*ANGLE_FROM_TEXT\(latitude\)"),
    ({"longitude": "70W"}, InputError, r"'70W', .*ANGLE_FROM_TEXT\(longitude\)"),
    ({"height": "2600 m"}, InputError, r"height is '2600 m', not a number"),
    # dates
    ({"utc": "2026-06-31T03:30"}, InputError, "June 2026 has 30 days"),
    ({"utc": "2026-02-29"}, InputError, "2026 is no leap year: its February has 28 days"),
    ({"utc": "2100-02-29"}, InputError, "2100 is no leap year"),
    ({"utc": "2024-02-30"}, InputError, "February 2024 has 29 days"),
    ({"utc": "2026-13-01"}, InputError, "there is no month 13"),
    ({"utc": "2026-12-24T25:10"}, InputError, "hours 00 to 23"),
    ({"utc": "2026-12-31T23:59:60"}, InputError, "no leap second"),
    ({"utc": "24/12/2026"}, InputError, "write the year first"),
    ({"utc": "2026/12/24 03:30"}, InputError, "write the date as 2026-12-24"),
    ({"utc": "tonight"}, InputError, r"'tonight', not a date and time; .*2024-03-01T22:14:30"),
    ({"utc": "46380.1"}, InputError, "must be a number, not text"),
    ({"utc": True}, InputError, "utc is True, not a date and time"),
    # before 1960, after the tables of the Earth's motion
    ({"utc": "1959-12-31T23:59"}, DomainError, "before 1960 there was no UTC"),
    ({"utc": "2100-01-01"}, DomainError, "ends with the year 2099"),
    ({"utc": datetime(1912, 3, 1)}, DomainError, "from 1960-01-01 to 2099-12-31 UTC"),
    ({"utc": 2_436_934.4}, DomainError, r"utc is 2436934\.4; .*1960 to 2099"),
    ({"utc": 2_488_069.5}, DomainError, r"utc is 2488069\.5; .*1960 to 2099"),
    # a Modified Julian Date that no serial could be
    ({"utc": 20_000.0}, DomainError, "to a Modified Julian Date add 2400000.5"),
    ({"utc": 20_261_224.0}, DomainError, "put a date like 20240301 as the text 2024-03-01"),
    # empty
    ({"utc": ""}, MissingInput, "utc is empty"),
    ({"utc": None}, MissingInput, "utc is empty"),
    ({"utc": math.nan}, MissingInput, "utc is empty"),
    ({"ra": None}, MissingInput, "ra is empty"),
    ({"dec": math.nan}, MissingInput, "dec is empty"),
    ({"height": "  "}, MissingInput, "height is empty"),
]
SHOWN = {DomainError: "#NUM!", InputError: "#VALUE!", MissingInput: "#N/A"}


@every_one
@pytest.mark.parametrize(
    ("other", "error", "words"), SENTENCES, ids=[str(each[0]) for each in SENTENCES]
)
def test_the_sentence_of_the_error(
    name: str, other: dict[str, Any], error: type[CellError], words: str
) -> None:
    with pytest.raises(CellError, match=f"^{name}: .*{words}") as raised:
        call(name, **other)
    assert type(raised.value) is error
    assert raised.value.shown == SHOWN[error]
    given = {**SIRIUS, **other}
    ordered = [given.get(argument.name, 0.05) for argument in CATALOGUE[name].arguments]
    assert cf.reason(name, *ordered) == str(raised.value)


@every_one
@pytest.mark.parametrize(
    ("other", "error", "words"), SENTENCES, ids=[str(each[0]) for each in SENTENCES]
)
def test_the_same_in_a_column(
    name: str, other: dict[str, Any], error: type[CellError], words: str
) -> None:
    """NaN at that element; a text that is not understood is refused with its sentence."""
    ((argument, value),) = other.items()
    column = [SIRIUS[argument], value, SIRIUS[argument]]
    if error is InputError:
        with pytest.raises(InputError, match=words):
            call(name, **{argument: column})
    else:
        found = call(name, **{argument: column})
        assert np.isnan(found).tolist() == [False, True, False]
        assert found[[0, 2]] == pytest.approx(call(name), rel=1e-13)


@every_one
def test_leap_days_are_days(name: str) -> None:
    if name == "AIRMASS":
        return
    before, day, after = (
        call(name, utc=f"{each}T03:30") for each in ("2024-02-28", "2024-02-29", "2024-03-01")
    )
    assert day - before == pytest.approx(after - day, rel=0.1)


def test_a_target_below_the_horizon_has_no_airmass() -> None:
    with pytest.raises(DomainError, match=r"below the horizon, at altitude -41\.") as raised:
        call("AIRMASS", utc="2026-12-24T15:30")
    assert raised.value.shown == "#NUM!"
    found = call("AIRMASS", utc=["2026-12-24T03:30", "2026-12-24T15:30"])
    assert np.isnan(found).tolist() == [False, True]
    # the altitude itself may be below it
    assert call("ALTITUDE", utc="2026-12-24T15:30") == pytest.approx(-41.3, abs=0.1)


@pytest.mark.parametrize(
    ("arguments", "shown"),
    [
        ((RA, DEC, "2026-12-24T15:30", *SITE), "#NUM!"),
        ((RA, DEC, "2026-06-31T15:30", *SITE), "#VALUE!"),
        ((RA, DEC, None, *SITE), "#N/A"),
    ],
)
def test_what_a_cell_shows(arguments: tuple[Any, ...], shown: str) -> None:
    assert shown in repr(cell.answer("AIRMASS", arguments))


@pytest.mark.parametrize(
    ("frame", "near"),
    [
        ("lsr", "lsrk, lsrd"),
        ("galactic", "galactocentric"),
        ("localgroup", "local-group"),
        ("heliocentric", "barycentric"),
        ("barycenter", "barycentric"),
        ("zzz", "known: barycentric, lsrk, lsrd, galactocentric, local-group, cmb"),
    ],
)
def test_an_unknown_frame(frame: str, near: str) -> None:
    with pytest.raises(InputError, match=rf"^VELOCITY_IN_FRAME: to_frame is '{frame}'.*{near}"):
        cf.velocity_in_frame(1250.0, 187.706, 12.391, "barycentric", frame)
    with pytest.raises(InputError, match=f"'{frame}'"):
        cf.velocity_in_frame([1250.0, 2.0], 187.706, 12.391, ["cmb", frame], "cmb")


@pytest.mark.parametrize(
    ("text", "as_hours", "error", "words"),
    [
        ("6.75", True, InputError, "may be hours or degrees"),
        (6.75, True, InputError, "may be hours or degrees"),
        ("24:00:00", True, DomainError, "hours must be 0 or more and below 24"),
        ("12:61:00", True, InputError, "below 60"),
        ("north", False, InputError, "'north', not an angle"),
        ("400", False, DomainError, "-360 to 360"),
        (None, True, MissingInput, "text is empty"),
        ("6:45", "perhaps", InputError, "as_hours is 'perhaps'; .*TRUE or FALSE"),
    ],
)
def test_an_angle_that_cannot_be_read(
    text: Any, as_hours: Any, error: type[CellError], words: str
) -> None:
    with pytest.raises(CellError, match=f"^ANGLE_FROM_TEXT: .*{words}") as raised:
        cf.angle_from_text(text, as_hours)
    assert type(raised.value) is error


def test_what_the_advice_says_works() -> None:
    """The call that the message about a text names, made with that text."""
    ra, dec = cf.angle_from_text("06:45:08.9", True), cf.angle_from_text("-16 42 58")
    # 6.752472 h by hand
    assert ra == pytest.approx(101.287_083, abs=1e-6)
    assert dec == pytest.approx(-16.716_111, abs=1e-6)
    assert cf.altitude(ra, dec, WHEN, *SITE) == pytest.approx(call("ALTITUDE"), abs=1e-3)
    column = cf.angle_from_text(["06:45:08.9", "101.287d", None], True)
    assert column[:2] == pytest.approx([101.287_083, 101.287], abs=1e-6)
    assert math.isnan(column[2])


# Moments ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "same",
    [
        *("2026-12-24T03:30:00Z", "2026-12-24 03:30", "2026-12-23T23:30-04:00", "20261224T0330"),
        *(datetime(2026, 12, 24, 3, 30), datetime(2026, 12, 24, 3, 30, tzinfo=UTC)),
        datetime(2026, 12, 24, 0, 30, tzinfo=timezone(timedelta(hours=-3))),
        np.datetime64("2026-12-24T03:30"),
        # the serial of 2026-12-24 in a spreadsheet is 46380; its Julian date at noon is 2461399
        *(46_380 + 3.5 / 24, 2_461_398.5 + 3.5 / 24),
    ],
    ids=str,
)
@every_one
def test_one_moment_in_many_writings(name: str, same: Any) -> None:
    assert call(name, utc=same) == pytest.approx(call(name), rel=1e-8)
    assert call(name, utc=[same, same]) == pytest.approx([call(name)] * 2, rel=1e-8)


def test_julian_dates() -> None:
    """J2000.0 is JD 2451545.0 (IAU 1997 resolution B1); Meeus, chapter 7: 1987 June 19.5 is
    2446966.0, 1988 January 27.0 is 2447187.5 (from memory)."""
    assert cf.time_julian("2000-01-01T12:00:00") == 2_451_545.0
    assert cf.time_julian(36_526.5) == 2_451_545.0
    assert cf.time_julian("1987-06-19T12:00") == 2_446_966.0
    assert cf.time_julian(date(1988, 1, 27)) == 2_447_187.5
    found = cf.time_julian(["2000-01-01T12:00", None, "1959-01-01", 2_451_545.0])
    assert found[[0, 3]].tolist() == [2_451_545.0, 2_451_545.0]
    assert np.isnan(found[1:3]).all()


def test_a_column_of_a_night_and_a_table_of_sites() -> None:
    utc = 2_461_398.5 + np.arange(5) / 24
    latitudes = np.array([[-24.6], [19.8], [52.0]])
    table = cf.altitude(RA, DEC, utc, -70.4, latitudes, 0.0)
    assert table.shape == (3, 5)
    for row, latitude in enumerate(latitudes[:, 0].tolist()):
        for column, moment in enumerate(utc.tolist()):
            alone = cf.altitude(RA, DEC, moment, -70.4, latitude, 0.0)
            assert table[row, column] == pytest.approx(alone, abs=1e-10)


# The caution --------------------------------------------------------------------------------------

CAUTIOUS = ("ALTITUDE", "AIRMASS", "ANGLE_HOUR")
WORDS = ("Not for pointing limits", "avoiding the Sun", "trained operators")
every_cautious = pytest.mark.parametrize("name", CAUTIOUS)


def cautions(text: str) -> bool:
    flat = " ".join(text.split())
    return all(words in flat for words in WORDS)


def test_nothing_else_is_cautioned_against() -> None:
    assert {made.name for made in CATALOGUE.values() if cautions(made.caution)} == set(CAUTIOUS)


@every_cautious
def test_caution_in_docstring_and_help(name: str) -> None:
    made = CATALOGUE[name]
    assert cautions(made.__doc__ or "")
    assert cautions(reference.help_text(made))
    assert cautions(str(reference.description(made)["caution"]))
    assert cautions(excel.function_help(made))
    assert len(excel.function_help(made)) <= 255  # what Excel's wizard can show


@every_cautious
def test_caution_in_the_list(name: str) -> None:
    """Under the function's own line, before the next function's."""
    lines = reference.list_text().splitlines()
    first = next(index for index, line in enumerate(lines) if line.split()[:1] == [name])
    following = next(
        (
            i
            for i, line in enumerate(lines[first + 1 :], first + 1)
            if line.split()[:1] and line.split()[0].partition("(")[0] in CATALOGUE
        ),
        len(lines),
    )
    assert cautions(" ".join(lines[first:following]))


@every_cautious
def test_caution_on_the_reference_page(name: str) -> None:
    """In the list at the top, and in the function's own section."""
    page = reference.page()
    (entry,) = [line for line in page.splitlines() if line.startswith(f"- [{name}]")]
    assert cautions(entry)
    section = page.partition(f"\n### {name}\n")[2].partition("\n### ")[0]
    assert cautions(section)


@every_cautious
def test_caution_in_the_wizard_of_calc(name: str) -> None:
    key = "{http://openoffice.org/2001/registry}name"
    tree = ElementTree.fromstring(extension.wizard(extension.Extension()))
    (node,) = [each for each in tree.iter("node") if each.get(key) == name]
    (help_line,) = [each for each in node.findall("prop") if each.get(key) == "Description"]
    assert cautions("".join(help_line.itertext()))


# Where the numbers come from ----------------------------------------------------------------------


def test_provenance_says_what_moves_and_turns_the_earth() -> None:
    """And what its rotation is taken for outside the IERS's days, with how wrong that is."""
    assert "VSOP2000" in cf.provenance("ephemeris")
    said = cf.provenance("earth-orientation")
    for words in ("finals2000A", "1973-01-02 to ", "outside, UT1 = UTC", "0.9 s", "3 cm/s"):
        assert words in said
    # the last leap second so far: IERS Bulletin C 52
    assert "leap seconds known to 2017-01-01" in said


@pytest.mark.parametrize("unit", ["s", "ms", "us", "ns"])
def test_a_column_of_numpys_moments_is_what_each_is_alone(unit: str) -> None:
    texts = ["2024-03-01T22:14:30", "2016-12-31T23:59:59", "1959-01-01T00:00:00"]
    found = cf.time_julian(np.array([*texts, "NaT"], dtype=f"datetime64[{unit}]"))
    assert found[:2].tolist() == [cf.time_julian(text) for text in texts[:2]]
    assert np.isnan(found[2:]).all()
