"""Every plain formula, recalculated by three spreadsheet engines, gives what Python gives.

Outside: LibreOffice Calc, formualizer and IronCalc (see recalculate.py) for the formulas, astropy
for the densities that a Settings sheet derives. Rows are made from what the catalogue says of each
argument, so a new function is held here without a line written. Ill-conditioned input is kept out
of them: no observed wavelength or frequency lies within 0.1 % of the rest value unless it is
equal, since the last bit of the quotient would then decide the ninth digit of z.
"""

import random
import re
from dataclasses import dataclass
from itertools import product
from math import inf, isclose
from pathlib import Path
from typing import Any

import pytest
from astropy.cosmology import FLRW, Planck18, w0waCDM
from openpyxl import Workbook
from openpyxl.workbook.defined_name import DefinedName
from recalculate import ENGINES, ErrorCell, Value, recalculated

from cellfuncs import CATALOGUE, CellError, Function
from cellfuncs.bridges.formula import (
    HIDDEN_TABLES,
    LONGEST,
    SETTINGS_COSMOLOGY,
    FormulaError,
    derived_settings,
    guarded,
    text_of,
)
from cellfuncs.catalogue import Argument, Choice, CosmologySet, Number, Word
from cellfuncs.families.sky import AngleText, Moment
from cellfuncs.families.spectrum import LineName
from cellfuncs.physics.expansion import cosmology_from
from cellfuncs.physics.lines import lines
from cellfuncs.symbols import Expr, NotTraceable, name, node

# What follows the Earth or reads a text takes working columns: test_steps.py.
TRACEABLE = [
    made
    for made in CATALOGUE.values()
    if made.traceable and not any(isinstance(each, (Moment, AngleText)) for each in made.arguments)
]
OTHERS = [made for made in CATALOGUE.values() if not made.traceable]
OF_COSMOLOGY = [
    made for made in TRACEABLE if any(isinstance(each, CosmologySet) for each in made.arguments)
]

every_engine = pytest.mark.parametrize("engine", ENGINES)


def of(functions: list[Function]) -> pytest.MarkDecorator:
    return pytest.mark.parametrize("made", functions, ids=lambda made: made.name)


# One published set with a massive neutrino, one without; open and closed spaces with dark energy
# that varies; a closed space whose antipode is in sight; a universe that bounced before z = 1 and
# was never smaller (the last two: Carroll, Press & Turner 1992, ARA&A 30, 499, figure 1).
SETS: dict[str, Any] = {
    "Planck18": "Planck18",
    "WMAP9": "WMAP9",
    "open": {
        "H0": 70.0,
        "Om0": 0.3,
        "Ode0": 0.6,
        "w0": -0.9,
        "wa": 0.2,
        "Tcmb0": 2.7255,
        "Neff": 3.04,
        "m_nu": [0.01, 0.02, 0.1],
    },
    "closed": {"H0": 72.5, "Om0": 0.35, "Ode0": 0.72, "w0": -1.1, "wa": -0.3, "Tcmb0": 2.7},
    "antipode": {"H0": 65.0, "Om0": 2.0, "Ode0": 2.0, "Tcmb0": 2.7255},
    "bounce": {"H0": 65.0, "Om0": 0.1, "Ode0": 1.5, "Tcmb0": 2.7255},
    "empty": {"H0": 65.0, "Om0": 0.0, "Ode0": 0.0, "Tcmb0": 0.0},
}

REDSHIFTS = (
    *(-0.999, -0.5, -0.01, -1e-6, 0.0, 1e-9, 1e-6, 1e-4, 0.003, 0.0312, 0.1, 0.5, 0.75, 1.0),
    *(1.9, 2.5, 3.3, 7.0, 20.0, 150.0, 1100.0, 1e5),
)
LADDER = (1e-6, 1e-3, 0.02, 0.7, 1.0, 17.25, 70.0, 480.0, 1500.0, 31_000.0, 2.9e5, 4.1e7, 1e300)
GRIDS: dict[str, tuple[float, ...]] = {
    "Angstrom": (
        *(0.5, 121.3, 1215.67, 1990.0, 1999.3, 1999.4, 1999.9999, 2000.0, 2000.2, 3728.8, 5006.84),
        *(6892.84, 9071.1, 21_218.0, 5e4, 2.1e9, 1e30),
    ),
    "GHz": (0.32, 1.420405751786, 34.9, 109.78, 115.2712018, 230.538, 5.6e5, 1e300),
    "mag": (-26.7, -1.5, 0.03, 5.0, 17.5, 31.1, 44.2, 999.0),
    "km.s-1": (
        *(-299_000.0, -31_000.0, -250.5, -0.01, 0.0, 1e-4, 12.5, 1500.0, 31_000.0, 150_000.0),
        *(299_000.0, 400_000.0),
    ),
}
GRIDS["deg"] = (-89.2, -33.3, -0.01, 0.0, 12.5, 45.0, 89.9, 123.4, 266.4, 359.99)
ORDINARY = {"": 0.05, "Angstrom": 6892.84, "GHz": 109.78, "km.s-1": 1500.0, "mag": 17.5}

SPELLINGS = (
    *("H alpha", "Halpha", "  h ALPHA ", "H-alpha", "Hα", "H_alpha", "H\u00a0alpha", "[OIII]5007"),
    *("[O III] 5007", "[o iii] λ5007", "O III 5007 Å", "[O III]\u20115007", "Ca K", "ca ii k"),
    *("CIV1548", "C IV 1549", "Lya", "Ly\u2212alpha", "21 cm"),
)
# What no line is: among them patterns that a spreadsheet's MATCH may take for wildcards.
NO_LINES = (
    *("H omega", "Mg II", "[O II]", "5007", "-", "[]", "*", "H*", "H ?lpha", "halph~a", "~*"),
    *('H "alpha"', "Halpha;Hbeta", "x" * 300),
)
UNIT_PAIRS = (("nm", "Angstrom"), ("km/s", "m.s-1"), ("kpc", "lyr"), ("mag", "mag"), ("deg", "rad"))


def as_written(value: Any) -> Any:
    """Give a number as openpyxl writes it."""
    return float(f"{value:.16g}") if type(value) is float else value


def numbers(argument: Number) -> list[float]:
    """Give numbers of all sizes, and both sides of each limit."""
    if argument.unit == "" and argument.name.startswith("z"):
        grid = REDSHIFTS
    else:
        grid = GRIDS.get(argument.unit, (*(-each for each in LADDER), 0.0, *LADDER))
    around = [
        limit + side * max(abs(limit), 1.0)
        for limit in (argument.above, argument.at_least, argument.below, argument.at_most)
        if abs(limit) < inf
        for side in (-1e-2, -1e-9, 0.0, 1e-9, 1e-2)
    ]
    return [*grid, *around]


def good_values(argument: Argument) -> list[Any]:
    """Give what the argument takes, in the order of one's first choice."""
    if isinstance(argument, Number):
        ordinary = ORDINARY.get(argument.unit, 1.0)
        return [ordinary, *numbers(argument), *([None] if argument.optional else [])]
    if isinstance(argument, LineName):
        table = lines()
        rotated = [
            line.spellings[index % len(line.spellings)]
            for index, line in enumerate(table)
            if line.spellings
        ]
        return [*SPELLINGS, *(line.name for line in table), *rotated]
    if isinstance(argument, Choice):
        forms = (str.lower, str.upper, str.title, lambda word: f"  {word} ")
        written = [forms[at % 4](word) for word in argument.choices for at in range(4)]
        return [*argument.choices, *written, *([None] if argument.optional else [])]
    raise AssertionError(f"{argument.name}: this test knows no values of a {type(argument)}")


def bad_values(argument: Argument) -> list[Any]:
    common = [None, "   ", "no such thing"]
    if isinstance(argument, Number):
        return [*common, "0.5", "1e3", True, False]
    if isinstance(argument, LineName):
        return [*common, *NO_LINES, 5007.0]
    return [*common, "*", "?" * len(argument.choices[0]), 3.0]  # type: ignore[attr-defined]


def ill_conditioned(made: Function, row: tuple[Any, ...]) -> bool:
    if made.name not in ("REDSHIFT_FROM_WAVELENGTH", "REDSHIFT_FROM_FREQUENCY"):
        return False
    observed, rest = row
    if type(observed) is not float or type(rest) is not float:
        return False
    return 0 < abs(observed - rest) < 1e-3 * abs(rest)


def in_cells(made: Function) -> list[Argument]:
    """Give the arguments that stand in cells: not the cosmology, and no unit, which is text."""
    return [
        argument
        for argument in made.arguments
        if not isinstance(argument, CosmologySet) and type(argument) is not Word
    ]


def rows_of(made: Function, *, thorough: bool = True) -> list[tuple[Any, ...]]:
    """Give each value once beside ordinary ones, each bad value so, and a mixture.

    Where it is not thorough, only redshifts are gone through.
    """
    arguments = in_cells(made)
    choices = [good_values(argument) for argument in arguments]
    ordinary = [values[0] for values in choices]
    rows = [
        (*ordinary[:at], value, *ordinary[at + 1 :])
        for at, argument in enumerate(arguments)
        if thorough or argument.name.startswith("z")
        for value in (*choices[at], *(bad_values(argument) if thorough else ()))
    ]
    some = random.Random(made.name)
    if len(arguments) > 1:
        rows += [tuple(map(some.choice, choices)) for _ in range(60 if thorough else 15)]
    return [tuple(map(as_written, row)) for row in rows if not ill_conditioned(made, row)]


@dataclass(frozen=True)
class Row:
    """One formula: what stands in its cells and what Python gives for that."""

    formula: str
    values: tuple[Any, ...]
    expected: Value
    reason: str


def python_gives(made: Function, named: dict[str, Any]) -> tuple[Value, str]:
    try:
        return made(**named), ""
    except CellError as error:
        return ErrorCell(error.shown), str(error)


def sheet_of(made: Function, cosmology: Any = "Planck18", *, thorough: bool = True) -> list[Row]:
    arguments = in_cells(made)
    if not arguments:
        formula = guarded(made, {"cosmology": SETTINGS_COSMOLOGY}).formula()
        return [Row(formula, (), *python_gives(made, {"cosmology": cosmology}))]
    fixed = {
        argument.name: cosmology
        for argument in made.arguments
        if isinstance(argument, CosmologySet)
    }
    units = [argument.name for argument in made.arguments if type(argument) is Word]
    given = {
        **{argument.name: name(f"{column}@") for column, argument in lettered(arguments)},
        **dict.fromkeys(fixed, SETTINGS_COSMOLOGY),
    }
    pairs = [dict(zip(units, pair, strict=False)) for pair in UNIT_PAIRS[: 5 if units else 1]]
    formulas = [guarded(made, {**given, **pair}).formula() for pair in pairs]
    rows = []
    for number, values in enumerate(rows_of(made, thorough=thorough), start=1):
        which = number % len(pairs)
        named = dict(zip((argument.name for argument in arguments), values, strict=True))
        expected, reason = python_gives(made, {**named, **fixed, **pairs[which]})
        rows.append(Row(formulas[which].replace("@", str(number)), values, expected, reason))
    return rows


def lettered(arguments: list[Argument]) -> list[tuple[str, Argument]]:
    return list(zip("ABCDEFGH", arguments, strict=False))


def define(workbook: Workbook, word: str, where: str) -> None:
    workbook.defined_names[word] = DefinedName(word, attr_text=where)


def workbook_with(cosmology: Any) -> Workbook:
    """Make a workbook with the hidden tables and a Settings sheet, derived cells as formulas."""
    workbook = Workbook()
    workbook.active.title = "Cells"
    tables = workbook.create_sheet("Tables")
    tables.sheet_state = "hidden"
    for column, (word, content) in enumerate(HIDDEN_TABLES.items(), start=1):
        letter = "ABCDEFGH"[column - 1]
        for row, value in enumerate(content, start=1):
            tables.cell(row, column, value)
        define(workbook, word, f"Tables!${letter}$1:${letter}${len(content)}")
    settings = workbook.create_sheet("Settings")
    for row, (word, value) in enumerate(settings_of(cosmology).items(), start=1):
        settings.cell(row, 1, word)
        settings.cell(row, 2, value)
        define(workbook, word, f"Settings!$B${row}")
    return workbook


def settings_of(given: Any) -> dict[str, Any]:
    used = cosmology_from(given)
    own = None if isinstance(given, str) else given.get("Ode0")
    return {
        "hubble_constant": used.h0,
        "omega_matter": used.om0,
        "omega_dark_energy_own": own,
        "dark_energy_w": used.w0,
        "dark_energy_wa": used.wa,
        "background_temperature": used.tcmb0,
        "neutrino_kinds": used.neff,
        **{f"neutrino_mass_{kind}": mass for kind, mass in enumerate(used.m_nu, start=1)},
        **{word: "=" + text_of(expr) for word, expr in derived_settings().items()},
    }


# Where an engine itself goes wrong (each gap is measured in recalculate.py), by engine.
def gap_of(engine: str, row: Row) -> str:
    if engine == "libreoffice" and any(isinstance(value, bool) for value in row.values):
        return "a logical is a number in Calc: ISNUMBER(TRUE)"
    if engine == "ironcalc" and "no finite result" in row.reason:
        return "IronCalc carries infinity and NaN to the end of the formula"
    # an empty universe's H and q there: 6.5e-8 km/s/Mpc and 0
    nothing = isinstance(row.expected, float) and abs(row.expected) < 1e-7
    if engine == "ironcalc" and nothing and row.values == (-0.999999999,):
        return "IronCalc takes E² = 1E-18 for 0 in a comparison (measured: 1E-16>0 is FALSE)"
    return ""


def agree(found: Value, expected: Value) -> bool:
    if isinstance(expected, float) and type(found) is float:
        return isclose(found, expected, rel_tol=1e-9, abs_tol=0.0)
    return type(found) is type(expected) and found == expected


def differences(folder: Path, engine: str, workbook: Workbook, rows: list[Row]) -> list[str]:
    cells = workbook["Cells"]
    for number, row in enumerate(rows, start=1):
        for column, value in enumerate(row.values, start=1):
            cell = cells.cell(number, column, value)
            if isinstance(value, str):
                cell.data_type = "s"
        cells.cell(number, 9, row.formula)
    path = folder / "cells.xlsx"
    workbook.save(path)
    found = recalculated(path, engine)["Cells"]
    return [
        f"{row.values}: {engine} {found[f'I{number}']}, Python {row.expected} {row.reason}"
        for number, row in enumerate(rows, start=1)
        if not gap_of(engine, row) and not agree(found[f"I{number}"], row.expected)
    ]


@every_engine
@of([made for made in TRACEABLE if made not in OF_COSMOLOGY])
def test_formula_gives_what_python_gives(tmp_path: Path, engine: str, made: Function) -> None:
    rows = sheet_of(made)
    assert not differences(tmp_path, engine, workbook_with("Planck18"), rows)


@every_engine
@pytest.mark.parametrize("cosmology", SETS)
@of(OF_COSMOLOGY)
def test_formula_of_a_cosmology_gives_what_python_gives(
    tmp_path: Path, engine: str, cosmology: str, made: Function
) -> None:
    rows = sheet_of(made, SETS[cosmology], thorough=cosmology == "Planck18")
    found = differences(tmp_path, engine, workbook_with(SETS[cosmology]), rows)
    if cosmology == "bounce":
        # no fixed table follows a universe without a big bang: the formula refuses all of it
        found = [each for each in found if f"{engine} ErrorCell" not in each]
    assert not found


# A universe that nearly stood still (Carroll, Press & Turner 1992, ARA&A 30, 499, section 2) has
# an E(z) with a sharp dip. No fixed table sums it well; a formula may refuse, but not be wrong.
@every_engine
def test_no_wrong_number_for_a_universe_that_nearly_stood_still(
    tmp_path: Path, engine: str
) -> None:
    loitering = {"H0": 65.0, "Om0": 0.3, "Ode0": 1.7, "Tcmb0": 0.0}
    wrong = []
    # one of each integral: the path, the time up to z, the time before z
    for word in ("DISTANCE_COMOVING", "TIME_LOOKBACK", "AGE_AT_REDSHIFT"):
        made = CATALOGUE[word]
        rows = sheet_of(made, loitering, thorough=False)
        found = differences(tmp_path, engine, workbook_with(loitering), rows)
        wrong += [f"{made.name} {each}" for each in found if f"{engine} ErrorCell" not in each]
    assert not wrong


@every_engine
def test_two_faults_at_once_never_give_a_number(tmp_path: Path, engine: str) -> None:
    workbook = workbook_with("Planck18")
    sheet = workbook["Cells"]
    number = 0
    names = []
    for made in TRACEABLE:
        arguments = in_cells(made)
        ordinary = [good_values(argument)[0] for argument in arguments]
        # an optional argument may be empty
        faults = [
            bad_values(argument)[2 if argument.optional else 0 :][:2] for argument in arguments
        ]
        formula = whole_formula(made, "@")
        for one, other, shift in product(range(len(arguments)), range(len(arguments)), (0, 1)):
            if one >= other:
                continue
            number += 1
            names.append(made.name)
            for at, value in enumerate(ordinary):
                bad = faults[at][(at + shift) % 2]
                sheet.cell(number, at + 1, bad if at in (one, other) else value)
            sheet.cell(number, 9, formula.replace("@", str(number)))
    path = tmp_path / "faults.xlsx"
    workbook.save(path)
    found = recalculated(path, engine)["Cells"]
    assert len(names) > 30
    for at, made_name in enumerate(names, start=1):
        assert isinstance(found[f"I{at}"], ErrorCell), made_name


@every_engine
@pytest.mark.parametrize("code", ["#N/A", "#NUM!", "#VALUE!", "#DIV/0!", "#REF!"])
def test_an_error_in_an_input_stays_that_error(tmp_path: Path, engine: str, code: str) -> None:
    functions = [made for made in TRACEABLE if in_cells(made)]
    workbook = workbook_with("Planck18")
    cells = workbook["Cells"]
    cells["A1"] = f"={code}"
    for row, made in enumerate(functions, start=2):
        first, *others = in_cells(made)
        for column, argument in enumerate(others, start=3):
            cells.cell(row, column, good_values(argument)[0])
        given = {
            **not_in_cells(made),
            **{each.name: name(f"{'CDEF'[at]}{row}") for at, each in enumerate(others)},
            first.name: name("A1"),
        }
        cells.cell(row, 2, guarded(made, given).formula())
    path = tmp_path / "errors.xlsx"
    workbook.save(path)
    found = recalculated(path, engine)["Cells"]
    codes = {made.name: found[f"B{row}"] for row, made in enumerate(functions, start=2)}
    assert codes == {made.name: ErrorCell(code) for made in functions}


@every_engine
def test_an_argument_may_be_an_expression_of_cells(tmp_path: Path, engine: str) -> None:
    """A logbook in nm calls a function that takes Angstrom."""
    made = CATALOGUE["REDSHIFT_FROM_LINE"]
    observed = name("A1") * 10.0
    workbook = workbook_with("Planck18")
    cells = workbook["Cells"]
    cells["A1"], cells["A2"], cells["B1"] = 689.284, "x", "H alpha"
    cells["C1"] = guarded(made, {"observed": observed, "line": name("B1")}).formula()
    cells["C2"] = guarded(
        made, {"observed": name("A2") * 10.0, "line": name("B1"), "medium": "air"}
    ).formula()
    path = tmp_path / "expressions.xlsx"
    workbook.save(path)
    found = recalculated(path, engine)["Cells"]
    assert isclose(found["C1"], made(6892.84, "H alpha"), rel_tol=1e-9)  # type: ignore[arg-type]
    assert found["C2"] == ErrorCell("#VALUE!")


@every_engine
@pytest.mark.parametrize(("shown", "value"), [(node(""), ""), (Expr("NA"), ErrorCell("#N/A"))])
def test_an_unfilled_row_shows_what_the_template_wants(
    tmp_path: Path, engine: str, shown: Expr, value: Value
) -> None:
    made = CATALOGUE["DISTANCE_LUMINOSITY"]
    whole = guarded(made, {"z": name("A1"), "cosmology": SETTINGS_COSMOLOGY})
    workbook = workbook_with("Planck18")
    workbook["Cells"]["B1"] = whole.formula(when_blank=shown)
    path = tmp_path / "unfilled.xlsx"
    workbook.save(path)
    assert recalculated(path, engine)["Cells"]["B1"] == value


# ECMA-376 part 1, section 18.17.7, lists these, and Excel 2007 and 2010 have them (IFERROR came
# with 2007). What came later (LET, LAMBDA, IFS, XLOOKUP, FILTER ...) is stored with _xlfn.
EXCEL_2010 = set(
    "ABS ACOS ACOSH AND ASIN ASINH ATAN ATAN2 ATANH AVERAGE CEILING COLUMN COS COSH COUNT COUNTIF"
    " DEGREES EXACT EXP FALSE FIND FLOOR HLOOKUP IF IFERROR INDEX INT ISBLANK ISERROR ISNA ISNUMBER"
    " ISTEXT LEFT LEN LN LOG LOG10 LOOKUP LOWER MATCH MAX MEDIAN MID MIN MOD N NA NOT OR PI POWER"
    " PRODUCT RADIANS REPLACE RIGHT ROUND ROW ROWS SEARCH SIGN SIN SINH SQRT SUBSTITUTE SUM"
    " SUMPRODUCT SUMSQ T TAN TANH TEXT TRIM TRUE TRUNC UPPER VALUE VLOOKUP".split()
)
TEXTS = re.compile(r'"(?:[^"]|"")*"')


def whole_formula(made: Function, row: str = "10") -> str:
    cells = {argument.name: name(f"{letter}{row}") for letter, argument in lettered(in_cells(made))}
    return guarded(made, {**not_in_cells(made), **cells}).formula()


def not_in_cells(made: Function) -> dict[str, Any]:
    """Give units as text and the cosmology of the settings."""
    return {
        argument.name: SETTINGS_COSMOLOGY if isinstance(argument, CosmologySet) else "nm"
        for argument in made.arguments
        if argument not in in_cells(made)
    }


@of(TRACEABLE)
def test_formula_keeps_to_what_excel_2010_takes(made: Function) -> None:
    formula = whole_formula(made)
    assert formula.startswith("=")
    assert len(formula) <= 8192
    without_texts = TEXTS.sub('""', formula)
    assert set(re.findall(r"([A-Za-z_.][\w.]*)\(", without_texts)) <= EXCEL_2010
    assert not re.search(r"[{}@;#]", re.sub(r"#(NUM!|VALUE!|N/A)", "", without_texts))


@of(TRACEABLE)
def test_formula_nests_no_deeper_than_excel_takes(made: Function) -> None:
    """Excel's limits: 64 levels of functions, 255 arguments, 255 characters of text."""
    formula = whole_formula(made)
    assert all(len(text) <= 257 for text in TEXTS.findall(formula))
    deepest = depth = 0
    arguments = [1]
    for character in TEXTS.sub('""', formula):
        if character == "(":
            depth += 1
            arguments.append(1)
        elif character == ")":
            depth -= 1
            assert arguments.pop() <= 255
        elif character == ",":
            arguments[-1] += 1
        deepest = max(deepest, depth)
    assert depth == 0
    assert deepest <= 64


@of(TRACEABLE)
def test_formula_names_only_its_cells_the_settings_and_the_hidden_tables(made: Function) -> None:
    words = set(re.findall(r"\b[A-Za-z_][\w.]*\b(?!\()", TEXTS.sub('""', whole_formula(made))))
    words -= {"NUM", "VALUE", "N", "A"} | {f"{letter}10" for letter in "ABCDEFGH"}
    words = {word for word in words if not re.fullmatch(r"E\d*", word)}
    assert words <= {*HIDDEN_TABLES, *settings_of("Planck18")}


@pytest.mark.parametrize("word", [*HIDDEN_TABLES, *settings_of("Planck18")])
def test_no_name_can_be_taken_for_a_cell(word: str) -> None:
    """Excel refuses names like H0 or R1C1; columns end at XFD."""
    assert re.fullmatch(r"[a-z][a-z0-9_]*", word)
    assert not re.fullmatch(r"[a-z]{1,3}\d+|r\d*(c\d*)?|c\d*", word)


@of(OTHERS)
def test_what_cannot_be_traced_says_so(made: Function) -> None:
    given = {argument.name: name("A1") for argument in made.arguments}
    with pytest.raises(NotTraceable, match=made.name):
        guarded(made, given)


def test_a_unit_or_a_cosmology_in_a_cell_cannot_be_traced() -> None:
    with pytest.raises(NotTraceable, match="unit"):
        guarded(
            CATALOGUE["UNITS_CONVERTED"],
            {"value": name("A1"), "from_unit": name("B1"), "to_unit": "nm"},
        )
    with pytest.raises(NotTraceable, match="settings"):
        guarded(CATALOGUE["DISTANCE_LUMINOSITY"], {"z": name("A1"), "cosmology": name("B1")})


def test_a_formula_too_long_for_a_cell_is_refused() -> None:
    def long_sum(z: Any) -> Any:
        return sum(sum(z**2.5 * (term + 0.5) for term in range(40)) for _ in range(40))

    made = Function(
        name="LONG_SUM",
        family="",
        summary="",
        notes="",
        arguments=(Number(meaning="z", name="z"),),
        unit="",
        source="",
        traceable=True,
        body=long_sum,
    )
    whole = guarded(made, {"z": name("A1")})
    assert len(text_of(whole.value)) > LONGEST == 8192
    with pytest.raises(FormulaError, match="8192"):
        whole.formula()


@pytest.mark.parametrize("cosmology", SETS)
@every_engine
def test_derived_settings_are_those_of_python(tmp_path: Path, engine: str, cosmology: str) -> None:
    used = cosmology_from(SETS[cosmology])
    expected = {
        "omega_photon": used.ogamma0,
        "omega_neutrino": used.onu0,
        "omega_dark_energy": used.ode0,
        "omega_curvature": used.ok0,
        **{
            f"neutrino_ratio_{kind}": ratio
            for kind, ratio in enumerate(used.neutrino_ratios or (0.0, 0.0, 0.0), start=1)
        },
    }
    if len(used.neutrino_ratios) == 1:  # Planck: one massive kind, the last
        expected |= {f"neutrino_ratio_{at}": 0.0 for at in (1, 2)}
        expected["neutrino_ratio_3"] = used.neutrino_ratios[0]
    found = settings_recalculated(tmp_path, engine, SETS[cosmology])
    for word, value in expected.items():
        assert isclose(found[word], value, rel_tol=1e-12, abs_tol=0.0), word


def settings_recalculated(folder: Path, engine: str, given: Any) -> dict[str, Any]:
    path = folder / "settings.xlsx"
    workbook_with(given).save(path)
    cells = recalculated(path, engine)["Settings"]
    return {cells[f"A{row}"]: cells.get(f"B{row}") for row in range(1, len(settings_of(given)) + 1)}  # type: ignore[misc]


# Outside: astropy's own sums, which take the constants of CODATA 2018 and IAU 2015 as we do.
@pytest.mark.parametrize(
    ("given", "theirs"),
    [
        ("Planck18", Planck18),
        (
            SETS["open"],
            w0waCDM(70, 0.3, 0.6, w0=-0.9, wa=0.2, Tcmb0=2.7255, Neff=3.04, m_nu=[0.01, 0.02, 0.1]),
        ),
    ],
    ids=["Planck18", "open"],
)
def test_derived_settings_are_those_of_astropy(tmp_path: Path, given: Any, theirs: FLRW) -> None:
    found = settings_recalculated(tmp_path, "libreoffice", given)
    assert isclose(found["omega_photon"], theirs.Ogamma0, rel_tol=1e-10)
    assert isclose(found["omega_neutrino"], theirs.Onu0, rel_tol=1e-10)
    assert isclose(found["omega_dark_energy"], theirs.Ode0, rel_tol=1e-10)
    assert isclose(found["omega_curvature"], theirs.Ok0, rel_tol=1e-10, abs_tol=1e-15)


@every_engine
def test_an_argument_may_be_a_plain_value(tmp_path: Path, engine: str) -> None:
    """A recipe may hold a number where another holds a column: distance_luminosity(0.5)."""
    workbook = workbook_with("Planck18")
    sheet = workbook["Cells"]
    expected = []
    for made in TRACEABLE:
        arguments = in_cells(made)
        ordinary = {argument.name: good_values(argument)[0] for argument in arguments}
        for plain in arguments:
            row = len(expected) + 1
            cells = {each.name: name(f"{letter}{row}") for letter, each in lettered(arguments)}
            given = {**not_in_cells(made), **cells, plain.name: ordinary[plain.name]}
            for column, value in enumerate(ordinary.values(), start=1):
                sheet.cell(row, column, value)
            sheet.cell(row, 9, guarded(made, given).formula())
            fixed = {key: each for key, each in not_in_cells(made).items() if key != "cosmology"}
            expected.append((made.name, made(**fixed, **ordinary)))
    path = tmp_path / "plain.xlsx"
    workbook.save(path)
    found = recalculated(path, engine)["Cells"]
    for row, (made_name, value) in enumerate(expected, start=1):
        assert agree(found[f"I{row}"], value), made_name
