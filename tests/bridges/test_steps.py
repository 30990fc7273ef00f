"""Functions that follow the Earth or read a text, computed in working columns by three engines.

Outside: LibreOffice Calc, formualizer and IronCalc (see recalculate.py). What they are held to, the
functions in Python, tests/published/ holds to astropy, JPL's DE421 and printed values. Functions
with neither a moment nor such a text are held in test_formula.py.
"""

import random
import re
from math import isclose
from pathlib import Path
from typing import Any

import pytest
from openpyxl import Workbook
from openpyxl.utils import get_column_letter
from openpyxl.workbook.defined_name import DefinedName
from recalculate import ENGINES, ErrorCell, Value, recalculated, save

from cellfuncs import CATALOGUE, CellError, Function
from cellfuncs.bridges.formula import LONGEST, guarded
from cellfuncs.bridges.steps import Steps
from cellfuncs.catalogue import Truth
from cellfuncs.families.sky import AngleText, Moment
from cellfuncs.physics import earth
from cellfuncs.symbols import name

STEPPED = [
    made
    for made in CATALOGUE.values()
    if any(isinstance(each, (Moment, AngleText)) for each in made.arguments)
]
every_engine = pytest.mark.parametrize("engine", ENGINES)
every_function = pytest.mark.parametrize("made", STEPPED, ids=lambda made: made.name)

# Days since 2000 January 1: two months of 2016 and 2017, with the leap second between them, and
# what stands before and after them.
FIRST, END = 6180.0, 6240.0
MOMENTS: list[Any] = [
    *("2016-12-24T03:30:15", "2016-12-31T23:59:59", "2016-12-31T23:59:60.5", "2017-01-01"),
    *("2017-01-01T00:00:00.25Z", "2016-12-31 19:00-05:00", 42736.25, 2457755.8125),
    # the whole time within, the last of it, and just outside
    *(36526 + FIRST, 36526 + END - 1e-4, 36526 + FIRST - 1e-4, 36526 + END + 1e-4),
    *("1961-05-01", "2050-06-30T12:00", "2099-12-31T23:59:59"),
]
NO_MOMENTS: list[Any] = [
    *("2016-12-32", "2017-02-29T01:00", "1959-12-31", "2100-01-01", "2016-12-24T25:00", "tonight"),
    *("24/12/2016", "2016-12-24T03:30:61", "2015-12-31T23:59:60", 12.0, 1.5e6, None, "  "),
]
ANGLES: list[Any] = [
    *("06 45 08.9", "-16 42 58", "+00 00 00.5", "-00 30 00", "12:34:56.789", "23h59m59.99s"),
    *("187d30m", "187.5d", "10.25h", "-89°59'59.5\"", "5 30", "10.68", 10.68, "1,5h"),
    *("24 00 00", "25 00 00", "12 60 00", "12 30 60", "12 3x", "north", "400", 400.0, None),
]
NUMBERS = {
    "z": (0.05, -0.5, 0.0, 6.9, -1.0, "0.05", None),
    "ra": (83.82, 0.0, 360.0, 266.4, 151.7, -0.1, 361.0, "05 35 17", None),
    "dec": (-5.39, 89.99, -89.99, 0.0, 90.0, 90.5, -91.0, "-5", None),
    "longitude": (-70.4, 0.0, 25.5, 180.0, 289.6, -181.0, 361.0, None),
    "latitude": (-24.6, 78.9, 0.0, 89.999, -89.999, 95.0, -90.5, None),
    "height": (2635.0, 0.0, -400.0, 5000.0, -501.0, 2e4 + 1, "high", None),
}

# What the table and the pole's wobble, which it leaves out, may make wrong, by the result's unit.
TOLERANCE = {"km/s": 5e-5, "d": 1.2e-8, "h": 1e-4, "deg": 3e-4}


def values_of(argument: Any) -> list[Any]:
    if isinstance(argument, Moment):
        return [*MOMENTS, *NO_MOMENTS]
    if isinstance(argument, AngleText):
        return ANGLES
    return list(NUMBERS[argument.name])


def in_cells(made: Function) -> list[Any]:
    return [argument for argument in made.arguments if not isinstance(argument, Truth)]


def rows_of(made: Function) -> list[tuple[Any, ...]]:
    """Give each value once beside ordinary ones, and a mixture."""
    choices = [values_of(argument) for argument in in_cells(made)]
    ordinary = [values[0] for values in choices]
    rows = [
        (*ordinary[:at], value, *ordinary[at + 1 :])
        for at, values in enumerate(choices)
        for value in values
    ]
    some = random.Random(made.name)
    if len(choices) > 1:
        good = [values[: -3 if len(values) < 10 else 9] for values in choices]
        rows += [tuple(map(some.choice, good)) for _ in range(60)]
    return rows


def python_gives(made: Function, values: tuple[Any, ...], as_hours: bool) -> Value:
    given = [*values, *([as_hours] if len(values) < len(made.arguments) else [])]
    moment = next((each for each in made.arguments if isinstance(each, Moment)), None)
    try:
        result: float = made(*given)
        if moment is not None and made.name != "TIME_JULIAN":
            utc = moment.parsed(given[made.arguments.index(moment)])
            if not FIRST <= utc < END:
                return ErrorCell("#NUM!")
    except CellError as error:
        return ErrorCell(error.shown)
    return result


def workbook_with_season() -> Workbook:
    workbook = Workbook()
    workbook.active.title = "Cells"
    sheet = workbook.create_sheet("Season")
    columns = {"first": [FIRST], "last": [END], **earth.season(FIRST, END)}
    assert list(columns) == list(earth.SEASON_TABLE)
    for place, (key, values) in enumerate(columns.items(), 1):
        for row, value in enumerate(values, 1):
            sheet.cell(row, place, float(value))
        letter = get_column_letter(place)
        where = f"Season!${letter}$1:${letter}${len(values)}"
        workbook.defined_names[f"season_{key}"] = DefinedName(f"season_{key}", attr_text=where)
    return workbook


def formulas_of(made: Function, as_hours: bool) -> tuple[str, Steps]:
    """Give the function's formula with its working columns from J on, @ for the row."""
    steps = Steps(lambda place: f"${get_column_letter(10 + place)}@")
    given: dict[str, Any] = {
        argument.name: name(f"${letter}@")
        for letter, argument in zip("ABCDEFGH", in_cells(made), strict=False)
    }
    if len(given) < len(made.arguments):
        given["as_hours"] = as_hours
    return guarded(made, given).mapped(steps.taken_out).formula(), steps


def agree(made: Function, found: Value, expected: Value) -> bool:
    if isinstance(expected, float) and type(found) is float:
        if made.name == "ANGLE_FROM_TEXT":
            return isclose(found, expected, rel_tol=1e-12, abs_tol=1e-12)
        if made.name == "AIRMASS":
            # the wobble moves the altitude by 0.5", which is most near the horizon
            return isclose(found, expected, rel_tol=1e-3 if expected > 20 else 1e-5)
        if made.unit == "h":
            # the same hour on both sides of midnight; near the celestial pole hours are crowded
            return abs((found - expected + 12) % 24 - 12) <= TOLERANCE["h"]
        return abs(found - expected) <= TOLERANCE.get(made.unit, 2e-10)
    return type(found) is type(expected) and found == expected


def near_pole(made: Function, values: tuple[Any, ...]) -> bool:
    """Tell whether a row asks for the hour angle of a place where half an arcsecond is hours."""
    named = dict(zip((each.name for each in in_cells(made)), values, strict=True))
    places = [named.get("dec"), named.get("latitude")]
    return made.name == "ANGLE_HOUR" and any(
        isinstance(each, float) and 89.5 < abs(each) <= 90 for each in places
    )


@every_engine
@every_function
def test_working_columns_give_what_python_gives(
    tmp_path: Path, engine: str, made: Function
) -> None:
    for as_hours in (False, True) if made.name == "ANGLE_FROM_TEXT" else (False,):
        formula, steps = formulas_of(made, as_hours)
        rows = rows_of(made)
        workbook = workbook_with_season()
        cells = workbook["Cells"]
        for number, values in enumerate(rows, 1):
            for column, value in enumerate(values, 1):
                cell = cells.cell(number, column, value)
                if isinstance(value, str):
                    cell.data_type = "s"
            cells.cell(number, 9, formula.replace("@", str(number)))
            for place, step in enumerate(steps.formulas):
                cells.cell(number, 10 + place, step.replace("@", str(number)))
        found = recalculated(save(workbook, tmp_path / "cells.xlsx"), engine)["Cells"]
        wrong = [
            (values, found[f"I{number}"], expected)
            for number, values in enumerate(rows, 1)
            if not near_pole(made, values)
            and not agree(
                made, found[f"I{number}"], expected := python_gives(made, values, as_hours)
            )
        ]
        assert not wrong


@every_function
def test_every_formula_is_one_that_excel_takes(made: Function) -> None:
    formula, steps = formulas_of(made, False)
    for each in (formula, *steps.formulas):
        assert len(each) <= LONGEST
        assert "season_" not in each or made.name != "TIME_JULIAN"
        names = set(re.findall(r"season_\w+", each))
        assert names <= {f"season_{column}" for column in earth.SEASON_TABLE}
    assert len(steps.words) == len(steps.formulas)


def test_what_two_formulas_need_stands_once() -> None:
    steps = Steps(lambda place: f"$Z{place}")
    cells = {each: name(f"${each[0]}1") for each in ("ra", "dec", "utc", "longitude", "height")}
    cells["latitude"] = name("$T1")
    for key in ("VELOCITY_BARYCENTRIC", "TIME_BARYCENTRIC"):
        guarded(CATALOGUE[key], cells).mapped(steps.taken_out)
    assert len(set(steps.formulas)) == len(steps.formulas)
    assert steps.words.count("Earth rotation") == 1
    assert steps.words.count("utc text") == 1
