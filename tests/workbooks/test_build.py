"""The templates, recalculated by three spreadsheet programs, give what the Python functions give.

Outside checks: LibreOffice Calc, formualizer and IronCalc compute the plain formulas; astropy's
VOUnit parser reads the units of the headers; the .xlsx package is looked at as ECMA-376 has it.
What the functions themselves are worth, tests/published/ holds to the literature.
"""

import re
import subprocess
import warnings
import zipfile
from collections.abc import Callable, Iterator, Mapping, Sequence
from datetime import UTC, datetime
from itertools import cycle
from math import isclose
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from astropy.units import Unit
from lxml import etree
from openpyxl.workbook import Workbook
from openpyxl.worksheet.worksheet import Worksheet
from recalculate import ENGINES, ErrorCell, Sheets, recalculated, save

import cellfuncs as cf
from cellfuncs.errors import CellError
from cellfuncs.version import __version__
from workbooks.build import build
from workbooks.fill import fill
from workbooks.recipe import Recipe, built_in, load, read

every_engine = pytest.mark.parametrize("engine", ENGINES)
every_recipe = pytest.mark.parametrize("recipe_name", ["distance-sheet", "line-log"])

HEADER_ROW, FIRST_ROW = 4, 5
Row = dict[str, Any]
Formula = Callable[..., float]

# ---- inputs ------------------------------------------------------------------------------------

SPELLINGS = (
    "H alpha|Halpha|HALPHA|h-alpha|Hα| H alpha |H beta|Hb|Hβ|[OIII]5007|[O III] 5007|OIII 5007"
    "|[OIII] 4959|NII 6584|[N II] 6548|[SII] 6717|[S II]6731|Na D1|CaII 8542|Ca K|Mg I b1|Lya"
    "|CIV 1549|C III] 1909|He II 1640|HeI 5876|[O II] 3727|He I 10830|[SIII] 9531|Mg II 2803"
).split("|")
WAVELENGTHS = (3000.0, 3000.5, 3727.25, 4861.3, 5006.84, 5893.0, 6562.8, 9068.6, 18751.3, 25000.0)

LINE_ROWS: list[Row] = [
    {
        "spectrum": f"s{number}",
        "line": spelling,
        "observed": wavelength,
        "medium": medium,
        "adopted": adopted,
    }
    for number, spelling, wavelength, medium, adopted in zip(
        range(len(SPELLINGS)),
        SPELLINGS,
        cycle(WAVELENGTHS),
        cycle(("vacuum", "air", "Air", " VACUUM ", None)),
        cycle((0.0, None, 2.5, -0.00021, 0.0187, 6.9, -0.5)),
        strict=False,
    )
]
BAD_LINE_ROWS: list[Row] = [
    {"line": "Halfa", "observed": 6686.0, "medium": "air", "adopted": 0.1},
    {"line": "OIII", "observed": 6686.0},
    {"line": 5007, "observed": 5100.0, "adopted": 0.1},
    {"line": "H alpha", "observed": "6586.1 A", "medium": "air", "adopted": 0.0},
    {"line": "H alpha", "observed": "6586.1"},
    {"line": "H alpha", "observed": None, "medium": "air"},
    {"line": None, "observed": 6700.0, "adopted": 0.02},
    {"line": "H alpha", "observed": 6700.0, "medium": "ari"},
    {"line": "H alpha", "observed": -6700.0, "medium": "air"},
    {"line": "H alpha", "observed": 0.0, "adopted": 0.1},
    {"line": "H alpha", "observed": 2999.9},
    {"line": "H alpha", "observed": 25000.1, "medium": "air", "adopted": 0.1},
    {"line": "Lya", "observed": 1500.0, "medium": "air"},
    {"line": "H alpha", "observed": 6700.0, "adopted": -1.0},
    {"line": "H alpha", "observed": 6700.0, "adopted": -3.5},
    {"line": "H alpha", "observed": 6700.0, "adopted": "none"},
    {"line": None, "observed": None, "medium": "air", "adopted": 0.3},
    {"spectrum": "seeing 2 arcsec: dome closed"},
    {"line": "  ", "observed": 6700.0},
    {"line": "H alpha", "observed": 6700.0, "medium": "  ", "adopted": "  "},
    {},
]

MAGNITUDES: tuple[Row, ...] = (
    {"magnitude": 17.5},
    {"magnitude": 22.25, "extinction": 0.12},
    {"magnitude": -1.5, "k_correction": 0.3},
    {"magnitude": 0.0, "extinction": 0.5, "k_correction": -0.25},
    {"extinction": 0.1},
    {},
)
REDSHIFTS = (
    1e-6, 0.0001, 0.001, 0.00525, 0.01, 0.0234, 0.05, 0.1, 0.25, 0.5, 0.75, 1.0, 1.5, 2.25, 3.0,
    4.5, 6.0, 7.5, 10.0, 20.0, 50.0, 200.0, 1100.0, 5000.0,
)  # fmt: skip
DISTANCE_ROWS: list[Row] = [
    {"target": f"t{number}", "redshift": redshift, **given}
    for number, redshift, given in zip(
        range(len(REDSHIFTS)), REDSHIFTS, cycle(MAGNITUDES), strict=False
    )
]
BAD_DISTANCE_ROWS: list[Row] = [
    {"redshift": 0.0, "magnitude": 12.0},
    {"redshift": -0.1, "magnitude": 12.0},
    {"redshift": -1.0},
    {"redshift": -2.0, "magnitude": 12.0},
    {"redshift": "0.5", "magnitude": 12.0},
    {"redshift": "z=0.5"},
    {"redshift": 0.5, "magnitude": "faint"},
    {"redshift": 0.5, "magnitude": 20.0, "extinction": "none"},
    {"redshift": 0.5, "magnitude": 20.0, "k_correction": "?"},
    {"redshift": 2e6, "magnitude": 20.0},
    {"target": "no redshift yet", "magnitude": 20.0},
    {"redshift": "  ", "magnitude": 20.0},
    {},
]

SETS: dict[str, Any] = {
    "Planck18": "Planck18",
    "WMAP9": "WMAP9",
    "flat": {"H0": 70.0, "Om0": 0.3},
    "open": {
        "H0": 72.5, "Om0": 0.28, "Ode0": 0.65, "w0": -0.9, "wa": 0.15,
        "Tcmb0": 2.7255, "Neff": 3.046, "m_nu": [0.01, 0.0, 0.12],
    },
    "closed": {"H0": 65.0, "Om0": 0.35, "Ode0": 0.75, "Tcmb0": 2.7255, "Neff": 3.04},
    "no dark energy": {"H0": 50.0, "Om0": 1.0, "Ode0": 0.0},
}  # fmt: skip
CELL_OF_PARAMETER = {
    "H0": "hubble_constant",
    "Om0": "omega_matter",
    "Ode0": "omega_dark_energy",
    "w0": "dark_energy_w",
    "wa": "dark_energy_wa",
    "Tcmb0": "background_temperature",
    "Neff": "neutrino_kinds",
}

# ---- what the functions give -------------------------------------------------------------------


class Empty(Exception):
    """A required input is empty."""


def need(row: Row, *keys: str) -> list[Any]:
    values = [row.get(key) for key in keys]
    if any(value is None or (isinstance(value, str) and not value.strip()) for value in values):
        raise Empty
    return values


def z_of(row: Row) -> float:
    observed, line = need(row, "observed", "line")
    return cf.redshift_from_line(observed, line, row.get("medium"))


def at_rest(row: Row) -> float:
    need(row, "observed", "line")
    z = z_of(row)
    need(row, "adopted")
    return cf.wavelength_observed(
        cf.line_wavelength(row["line"]), cf.redshift_relative(z, row["adopted"])
    )


def offset(row: Row) -> float:
    need(row, "observed", "line")
    z = z_of(row)
    return cf.velocity_peculiar(z, *need(row, "adopted"))


LINE_COLUMNS: dict[str, Callable[[Row, Any], float]] = {
    "Redshift": lambda row, _: z_of(row),
    "Velocity, relativistic [km/s]": lambda row, _: cf.velocity_from_redshift(z_of(row)),
    "Velocity, optical [km/s]": lambda row, _: cf.velocity_from_redshift(z_of(row), "optical"),
    "Velocity, radio [km/s]": lambda row, _: cf.velocity_from_redshift(z_of(row), "radio"),
    "Wavelength at rest [Angstrom]": lambda row, _: at_rest(row),
    "Offset at rest [km/s]": lambda row, _: offset(row),
}


def of_z(function: Formula) -> Callable[[Row, Any], float]:
    return lambda row, cosmology: function(*need(row, "redshift"), cosmology)


def linear(row: Row, cosmology: Any) -> float:
    velocity = cf.velocity_from_redshift(*need(row, "redshift"), "optical")
    return cf.distance_hubble(velocity, cf.cosmology_value("H0", cosmology))


def absolute(row: Row, cosmology: Any) -> float:
    magnitude, redshift = need(row, "magnitude", "redshift")
    return cf.magnitude_absolute(
        magnitude, redshift, row.get("extinction"), row.get("k_correction"), cosmology
    )


DISTANCE_COLUMNS: dict[str, Callable[[Row, Any], float]] = {
    "Velocity [km/s]": lambda row, _: cf.velocity_from_redshift(*need(row, "redshift")),
    "Distance, linear law [Mpc]": linear,
    "Distance, comoving [Mpc]": of_z(cf.distance_comoving),
    "Distance, luminosity [Mpc]": of_z(cf.distance_luminosity),
    "Distance, angular [Mpc]": of_z(cf.distance_angular),
    "Distance, light travel [Mpc]": of_z(cf.distance_light_travel),
    "Distance modulus [mag]": of_z(cf.distance_modulus),
    "Scale [kpc/arcsec]": of_z(cf.scale_transverse),
    "Lookback time [Gyr]": of_z(cf.time_lookback),
    "Age then [Gyr]": of_z(cf.age_at_redshift),
    "Absolute magnitude [mag]": absolute,
}
EXPECTED = {"line-log": LINE_COLUMNS, "distance-sheet": DISTANCE_COLUMNS}
ROWS = {
    "line-log": LINE_ROWS + BAD_LINE_ROWS,
    "distance-sheet": DISTANCE_ROWS + BAD_DISTANCE_ROWS,
}
SHEET = {"line-log": "Lines", "distance-sheet": "Distances"}


def expected(formula: Callable[[Row, Any], float], row: Row, cosmology: Any) -> Any:
    try:
        return formula(row, cosmology)
    except Empty:
        return ""
    except CellError as error:
        return ErrorCell(error.shown)


def agree(found: Any, wanted: Any) -> bool:
    if isinstance(wanted, float):
        return type(found) is float and isclose(found, wanted, rel_tol=1e-9, abs_tol=0.0)
    if wanted == "":
        return found in ("", None)
    return bool(found == wanted)


# ---- workbooks ---------------------------------------------------------------------------------


def headers(sheet: Worksheet) -> dict[str, int]:
    return {cell.value: cell.column for cell in sheet[HEADER_ROW] if cell.value}


def write(sheet: Worksheet, recipe: Recipe, rows: Sequence[Row]) -> None:
    places = headers(sheet)
    inputs = {column.key: places[column.header] for column in recipe.tables[0].inputs}
    for number, row in enumerate(rows, FIRST_ROW):
        for key, value in row.items():
            sheet.cell(number, inputs[key], value)


def named(workbook: Workbook, word: str) -> Any:
    sheet, _, place = workbook.defined_names[word].attr_text.rpartition("!")
    return workbook[sheet.strip("'")][place.replace("$", "")]


def choose(workbook: Workbook, cosmology: Any) -> None:
    """Do on the sheet Settings what a person does"""
    if isinstance(cosmology, str):
        named(workbook, "cosmology_set").value = cosmology
        return
    named(workbook, "cosmology_set").value = "own"
    for parameter, value in cosmology.items():
        if parameter == "m_nu":
            for kind, mass in enumerate(value, 1):
                own_cell(workbook, f"neutrino_mass_{kind}").value = mass
        else:
            own_cell(workbook, CELL_OF_PARAMETER[parameter]).value = value


def own_cell(workbook: Workbook, word: str) -> Any:
    in_use = named(workbook, word)
    sheet = in_use.parent
    (heading,) = [cell for row in sheet.iter_rows() for cell in row if cell.value == "Own value"]
    return sheet.cell(in_use.row, heading.column)


@pytest.fixture(scope="module")
def templates(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    folder = tmp_path_factory.mktemp("templates")
    made = {}
    for recipe_name in SHEET:
        made[recipe_name] = folder / f"{recipe_name}.xlsx"
        build(load(recipe_name), made[recipe_name], rows=len(ROWS[recipe_name]))
    return made


@pytest.fixture(scope="module")
def short(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    """Templates with a dozen rows, quick to load"""
    folder = tmp_path_factory.mktemp("short")
    made = {}
    for recipe_name in SHEET:
        made[recipe_name] = folder / f"{recipe_name}.xlsx"
        build(load(recipe_name), made[recipe_name], rows=12)
    return made


@pytest.fixture(scope="module")
def filled_in(
    templates: dict[str, Path], tmp_path_factory: pytest.TempPathFactory
) -> dict[tuple[str, str], Path]:
    """The templates with every row typed in, one for each cosmology"""
    folder = tmp_path_factory.mktemp("typed")
    made = {}
    for recipe_name, set_name in CASES:
        workbook = openpyxl.load_workbook(templates[recipe_name])
        write(workbook[SHEET[recipe_name]], load(recipe_name), ROWS[recipe_name])
        choose(workbook, SETS[set_name])
        made[recipe_name, set_name] = folder / f"{recipe_name} {set_name}.xlsx"
        save(workbook, made[recipe_name, set_name])
    return made


CASES = [("line-log", "Planck18"), *(("distance-sheet", set_name) for set_name in SETS)]
every_case = pytest.mark.parametrize(("recipe_name", "set_name"), CASES)
_answers: dict[tuple[Path, str], Sheets] = {}


def answers(path: Path, engine: str) -> Sheets:
    if (path, engine) not in _answers:
        _answers[path, engine] = recalculated(path, engine)
    return _answers[path, engine]


def column_letters(path: Path, sheet: str) -> dict[str, str]:
    book = openpyxl.load_workbook(path)
    return {
        header: openpyxl.utils.get_column_letter(place)
        for header, place in headers(book[sheet]).items()
    }


# ---- one truth ---------------------------------------------------------------------------------


def test_every_built_in_recipe_is_held_to_the_functions() -> None:
    # test_velocity_night.py holds the one whose columns need a tolerance of their own,
    # test_sample_recipes.py those with results of whole columns
    sampled = {"spectrum-summary", "cluster-members", "hubble-diagram"}
    assert set(built_in()) == {*EXPECTED, *sampled, "velocity-night"}
    for recipe_name, columns in EXPECTED.items():
        (table,) = load(recipe_name).tables
        assert [column.header for column in table.computed] == list(columns)


@every_engine
@every_case
def test_plain_formulas_give_what_the_functions_give(
    filled_in: dict[tuple[str, str], Path], recipe_name: str, set_name: str, engine: str
) -> None:
    path = filled_in[recipe_name, set_name]
    found = answers(path, engine)[SHEET[recipe_name]]
    letters = column_letters(path, SHEET[recipe_name])
    wrong = [
        (header, row, found[f"{letters[header]}{number}"], wanted)
        for header, formula in EXPECTED[recipe_name].items()
        for number, row in enumerate(ROWS[recipe_name], FIRST_ROW)
        if not agree(
            found[f"{letters[header]}{number}"],
            wanted := expected(formula, row, SETS[set_name]),
        )
    ]
    assert not wrong


@every_case
def test_fill_writes_what_libreoffice_recalculates(
    filled_in: dict[tuple[str, str], Path], tmp_path: Path, recipe_name: str, set_name: str
) -> None:
    path, output = filled_in[recipe_name, set_name], tmp_path / "filled.xlsx"
    fill(path, output)
    stored = openpyxl.load_workbook(output, data_only=True)[SHEET[recipe_name]]
    found = answers(path, "libreoffice")[SHEET[recipe_name]]
    letters = column_letters(path, SHEET[recipe_name])
    wrong = []
    for header in (*EXPECTED[recipe_name], "Status"):
        for number, row in enumerate(ROWS[recipe_name], FIRST_ROW):
            place = f"{letters[header]}{number}"
            value, shown = stored[place].value, found[place]
            if isinstance(value, str) and value.startswith("#"):
                value = ErrorCell(value)
            value = float(value) if type(value) is int else value
            if not agree(value, shown):
                wrong.append((header, row, value, shown))
    assert not wrong


STATUS_WORDS: dict[str, list[tuple[Row, str]]] = {
    "line-log": [
        (
            {"line": "Halfa", "observed": 6686.0},
            "Line: no such name, or one of several lines; see the sheet Line names",
        ),
        ({"line": "H alpha", "observed": "6586 A"}, "Observed wavelength is not a number"),
        ({"line": "H alpha"}, "Observed wavelength is missing"),
        ({"observed": 6700.0}, "Line is missing"),
        ({"line": "Lya", "observed": 6700.0, "medium": "ari"}, "Medium must be vacuum or air"),
        ({"line": "H alpha", "observed": -6700.0}, "Observed wavelength must be above 0 Angstrom"),
        (
            {"line": "H alpha", "observed": 2999.9},
            "Observed wavelength must be at least the setting «Shortest wavelength»",
        ),
        (
            {"line": "H alpha", "observed": 25000.1},
            "Observed wavelength must be at most the setting «Longest wavelength»",
        ),
        ({"line": "Lya", "observed": 6700.0, "adopted": "x"}, "Adopted redshift is not a number"),
        ({"line": "Lya", "observed": 6700.0, "adopted": -1.0}, "Adopted redshift must be above -1"),
        ({"line": "H alpha", "observed": 6700.0}, "ok"),
        ({"spectrum": "cloud"}, ""),
    ],
    "distance-sheet": [
        ({"redshift": 0.5}, "ok"),
        ({"redshift": "0.5"}, "Redshift is not a number"),
        ({"redshift": 0.0}, "Redshift must be above 0"),
        ({"redshift": -0.1}, "Redshift must be above 0"),
        ({"redshift": 2e6}, "Redshift must be at most 1000000"),
        ({"redshift": 0.5, "magnitude": "faint"}, "Magnitude is not a number"),
        ({"redshift": 0.5, "magnitude": 20.0, "extinction": "?"}, "Extinction is not a number"),
        ({"target": "x"}, ""),
    ],
}  # fmt: skip


@every_engine
@every_recipe
def test_status_says_in_words_what_is_wrong(
    short: dict[str, Path], tmp_path: Path, recipe_name: str, engine: str
) -> None:
    workbook = openpyxl.load_workbook(short[recipe_name])
    rows = STATUS_WORDS[recipe_name]
    write(workbook[SHEET[recipe_name]], load(recipe_name), [row for row, _ in rows])
    path = tmp_path / "status.xlsx"
    save(workbook, path)
    found = recalculated(path, engine)[SHEET[recipe_name]]
    letter = column_letters(path, SHEET[recipe_name])["Status"]
    words = [found[f"{letter}{number}"] for number in range(FIRST_ROW, FIRST_ROW + len(rows))]
    assert words == [words for _, words in rows]


@pytest.mark.parametrize(
    ("parameter", "value"),
    [
        ("H0", -70.0), ("H0", 0.0), ("Om0", -0.3), ("Tcmb0", -2.7), ("Neff", -3.0),
        ("Neff", 4.5), ("Neff", 2.5), ("m_nu", [-0.1, 0.0, 0.06]), ("H0", "seventy"),
        ("Om0", "0.3"), ("H0", None),
    ],
)  # fmt: skip
def test_own_values_out_of_range_give_no_number(
    short: dict[str, Path], tmp_path: Path, parameter: str, value: Any
) -> None:
    """What the Python function refuses, the template must not answer."""
    cosmology = {"H0": 70.0, "Om0": 0.3, "Tcmb0": 2.7255, "m_nu": [0.0, 0.0, 0.06]}
    cosmology = {**cosmology, parameter: value}
    with pytest.raises(CellError):
        cf.distance_luminosity(0.5, {key: each for key, each in cosmology.items() if each != ""})
    workbook = openpyxl.load_workbook(short["distance-sheet"])
    write(workbook["Distances"], load("distance-sheet"), [{"redshift": 0.5, "magnitude": 20.0}])
    choose(workbook, cosmology)
    path = tmp_path / "own.xlsx"
    save(workbook, path)
    found = recalculated(path, "libreoffice")["Distances"]
    letters = column_letters(path, "Distances")
    free = {"Velocity [km/s]"} | ({"Distance, linear law [Mpc]"} if parameter != "H0" else set())
    numbers = {
        header: found[f"{letters[header]}5"]
        for header in DISTANCE_COLUMNS
        if header not in free and isinstance(found[f"{letters[header]}5"], float)
    }
    assert not numbers
    assert found[f"{letters['Status']}5"] != "ok"


@every_engine
def test_limits_follow_the_settings(short: dict[str, Path], tmp_path: Path, engine: str) -> None:
    workbook = openpyxl.load_workbook(short["line-log"])
    rows: list[Row] = [{"line": "H alpha", "observed": 4000.0}, {"line": "Lya", "observed": 9000.0}]
    write(workbook["Lines"], load("line-log"), rows)
    named(workbook, "shortest_wavelength").value = 5000
    named(workbook, "longest_wavelength").value = None
    path = tmp_path / "limits.xlsx"
    save(workbook, path)
    found = recalculated(path, engine)["Lines"]
    status = column_letters(path, "Lines")["Status"]
    assert "Shortest wavelength" in str(found[f"{status}5"])
    assert found[f"{status}6"] == "ok"


@every_recipe
@every_engine
def test_an_empty_template_shows_no_error(
    short: dict[str, Path], recipe_name: str, engine: str
) -> None:
    visible = [
        sheet.title
        for sheet in openpyxl.load_workbook(short[recipe_name]).worksheets
        if sheet.sheet_state == "visible"
    ]
    found = answers(short[recipe_name], engine)
    errors = {
        (sheet, place): value
        for sheet in visible
        for place, value in found[sheet].items()
        if isinstance(value, ErrorCell)
    }
    assert not errors


# ---- the workbook as a person meets it ---------------------------------------------------------


@every_recipe
def test_headers_are_labels_with_vounits(templates: dict[str, Path], recipe_name: str) -> None:
    book = openpyxl.load_workbook(templates[recipe_name])
    texts = list(headers(book[SHEET[recipe_name]]))
    assert texts[-1] == "Status"
    assert len(texts) == len(load(recipe_name).tables[0].columns) + 1
    for text in texts:
        found = re.fullmatch(r"([^\[\]]*[^\[\] ])(?: \[([^\[\]]+)\])?", text)
        assert found, text
        if found[2]:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # VOUnit calls Angstrom deprecated
                Unit(found[2], format="vounit")


@every_recipe
def test_the_sheets_are_ready_to_type_in(templates: dict[str, Path], recipe_name: str) -> None:
    book = openpyxl.load_workbook(templates[recipe_name])
    sheet = book[SHEET[recipe_name]]
    assert book.sheetnames[0] == SHEET[recipe_name]
    assert sheet.freeze_panes == "B5"
    assert {each.title for each in book.worksheets if each.sheet_state == "hidden"} == {
        "Tables",
        f"{SHEET[recipe_name]} points",
    }
    inputs = load(recipe_name).tables[0].inputs
    checked = {str(rule.sqref): rule for rule in sheet.data_validations.dataValidation}
    last = FIRST_ROW + len(ROWS[recipe_name]) - 1
    for letter, column in zip("ABCDE", inputs, strict=True):
        rule = checked[f"{letter}5:{letter}{last}"]
        kind = "list" if column.choices or column.kind == "line" else "custom"
        assert rule.type == (kind if not column.is_number or kind == "custom" else None) or (
            column.kind == "text"
        )
        assert rule.promptTitle
        assert rule.prompt
        assert len(rule.prompt) <= 255
    # a cell to type in and a computed one differ at a glance
    assert sheet["A5"].fill.start_color.rgb != sheet["K5"].fill.start_color.rgb
    assert {sheet.cell(3, place).value for place in range(1, 20)} >= {
        "type here",
        "computed: do not type",
    }


@every_engine
def test_a_range_check_lets_pass_what_status_calls_ok(
    templates: dict[str, Path], tmp_path: Path, engine: str
) -> None:
    """The instrument of the template reaches from 3000 to 25000 Angstrom."""
    book = openpyxl.load_workbook(templates["line-log"])
    sheet = book["Lines"]
    (rule,) = (
        each for each in sheet.data_validations.dataValidation if str(each.sqref).startswith("C5")
    )
    assert rule.showErrorMessage
    assert len(rule.formula1) <= 255
    values = {-5.0: False, 0.0: False, 2999.0: False, 3000.0: True, 25000.0: True, 25001.0: False}
    tried = book.create_sheet("Tried")
    for row, value in enumerate((*values, "6563 A"), 1):
        tried.cell(row, 1, value)
        tried.cell(row, 2, "=" + rule.formula1.replace("C5", f"A{row}"))
    path = tmp_path / "tried.xlsx"
    book.save(path)
    found = recalculated(path, engine)["Tried"]
    shown = [bool(found[f"B{row}"]) for row in range(1, len(values) + 1)]
    assert shown == list(values.values())
    assert not found[f"B{len(values) + 1}"] or isinstance(found[f"B{len(values) + 1}"], ErrorCell)


@every_recipe
def test_settings_are_named_cells(templates: dict[str, Path], recipe_name: str) -> None:
    book = openpyxl.load_workbook(templates[recipe_name])
    recipe = load(recipe_name)
    for key, setting in recipe.settings.items():
        assert named(book, key).value == setting.value
        assert named(book, key).parent.title == "Settings"
    assert named(book, "cosmology_set").value == "Planck18"
    for word in book.defined_names:
        assert re.fullmatch(r"[a-z][a-z0-9]*(_[a-z0-9]+)*", word), word
        assert not re.fullmatch(r"[a-z]{1,3}[0-9]+|r[0-9]*c?[0-9]*|c[0-9]*", word), word


@every_recipe
def test_provenance_says_what_made_the_numbers(
    short: dict[str, Path], tmp_path: Path, recipe_name: str
) -> None:
    book = openpyxl.load_workbook(short[recipe_name])
    assert __version__ in named(book, "template_version").value
    assert "CODATA 2018" in named(book, "template_constants").value
    assert named(book, "recipe_name").value == recipe_name
    made = datetime.strptime(named(book, "template_made").value, "%Y-%m-%d %H:%M UTC")
    assert abs(datetime.now(UTC).replace(tzinfo=None) - made).total_seconds() < 3600
    choose(book, "WMAP9")
    path = tmp_path / "chosen.xlsx"
    save(book, path)
    place = named(book, "cosmology_in_use").coordinate
    assert recalculated(path, "libreoffice")["Provenance"][place] == "WMAP9"
    words = {cell.value for row in book["Provenance"].iter_rows() for cell in row}
    for column in load(recipe_name).tables[0].computed:
        assert column.header in words


@every_recipe
def test_the_how_to_names_every_column(templates: dict[str, Path], recipe_name: str) -> None:
    book = openpyxl.load_workbook(templates[recipe_name])
    told = {row[0].value: row[2].value for row in book["How to use"].iter_rows()}
    for column in load(recipe_name).tables[0].sheet.columns:
        assert told[column.label]


CHART = {"c": "http://schemas.openxmlformats.org/drawingml/2006/chart",
         "a": "http://schemas.openxmlformats.org/drawingml/2006/main"}  # fmt: skip


@every_recipe
def test_charts_name_their_axes_with_units(templates: dict[str, Path], recipe_name: str) -> None:
    with zipfile.ZipFile(templates[recipe_name]) as package:
        drawn = [
            etree.fromstring(package.read(part))
            for part in package.namelist()
            if re.fullmatch(r"xl/charts/chart\d+\.xml", part)
        ]
    (table,) = load(recipe_name).tables
    assert len(drawn) == len(table.sheet.charts) > 0
    units = {column.key: column.unit for column in table.sheet.columns}
    for chart, tree in zip(table.sheet.charts, drawn, strict=True):
        titles = [
            "".join(axis.xpath("c:title//a:t/text()", namespaces=CHART))
            for axis in tree.xpath("//c:valAx", namespaces=CHART)
        ]
        for title, key in zip(titles, (chart.x, chart.y[0]), strict=True):
            assert title
            assert title.endswith(f"[{units[key]}]") or not units[key]
        assert len(tree.xpath("//c:ser", namespaces=CHART)) == len(chart.y)


def test_charts_draw_the_rows_that_have_a_result(filled_in: dict[tuple[str, str], Path]) -> None:
    path = filled_in["line-log", "Planck18"]
    found = answers(path, "libreoffice")
    letters = column_letters(path, "Lines")
    points = found["Lines points"]
    keys = {points[f"{letter}1"]: letter for letter in "ABC"}
    drawn = keys["points: redshift"], letters["Redshift"]
    for number in range(FIRST_ROW, FIRST_ROW + len(LINE_ROWS)):
        assert points[f"{drawn[0]}{number}"] == found["Lines"][f"{drawn[1]}{number}"]
    for number in range(FIRST_ROW, FIRST_ROW + len(ROWS["line-log"])):
        if not isinstance(found["Lines"][f"{drawn[1]}{number}"], float):
            assert points[f"{drawn[0]}{number}"] == ErrorCell("#N/A")


@every_recipe
def test_nothing_in_the_package_runs_or_leads_outside(
    templates: dict[str, Path], recipe_name: str
) -> None:
    with zipfile.ZipFile(templates[recipe_name]) as package:
        names = package.namelist()
        kinds = package.read("[Content_Types].xml").decode()
        text = b"".join(package.read(name) for name in names if name.endswith((".xml", ".rels")))
    assert not [name for name in names if re.search(r"vba|macro|external|embed|activex|\.bin", name, re.I)]  # fmt: skip # noqa: E501
    assert "macro" not in kinds.casefold()
    assert b'TargetMode="External"' not in text
    # an external reference in a formula is written [1]Sheet!A1; DDE has a bar
    formulas = b" ".join(re.findall(rb"<(?:c:)?f[ >].*?</(?:c:)?f>", text))
    assert not re.search(rb"\[\d+\]|\|", formulas)
    assert not re.search(rb"_xlfn|WEBSERVICE|HYPERLINK|INDIRECT", formulas)


@every_recipe
def test_openpyxl_and_libreoffice_open_it_without_loss(
    short: dict[str, Path], tmp_path: Path, recipe_name: str
) -> None:
    before = openpyxl.load_workbook(short[recipe_name])
    profile = f"-env:UserInstallation=file://{tmp_path}/profile"
    command = ["soffice", profile, "--headless", "--convert-to", "xlsx", "--outdir"]
    subprocess.run(
        [*command, str(tmp_path), str(short[recipe_name])],
        check=True, capture_output=True, timeout=120,
    )  # fmt: skip
    after = openpyxl.load_workbook(tmp_path / short[recipe_name].name)
    assert after.sheetnames == before.sheetnames
    assert set(after.defined_names) >= set(before.defined_names)
    for sheet in before.worksheets:
        other = after[sheet.title]
        assert other.sheet_state == sheet.sheet_state
        # Calc puts validations of one kind together
        covered = [set(str(rule.sqref).split()) for rule in sheet.data_validations.dataValidation]
        kept = set().union(
            *(str(rule.sqref).split() for rule in other.data_validations.dataValidation)
        )
        assert set().union(*covered) <= kept
        assert len(other._charts) == len(sheet._charts)
        for row in sheet.iter_rows():
            for cell in row:
                if isinstance(cell.value, str) and not cell.value.startswith("="):
                    assert other[cell.coordinate].value == cell.value
                assert (cell.data_type == "f") == (other[cell.coordinate].data_type == "f")


# ---- own recipes -------------------------------------------------------------------------------

OWN = """
title = "Own"
purpose = "One row a line, in the observatory's own units."
cosmology = "Planck18"

[[settings]]
key = "zero_point"
label = "Zero point"
group = "Instrument"
unit = "km/s"
value = 12.5

[[settings]]
key = "reddest"
label = "Reddest"
group = "Instrument"
unit = "um"
value = 0.9

[[sheets]]
name = "Arm's lines"
rows = 12

[[sheets.columns]]
key = "centre"
label = "Centre"
unit = "nm"
role = "input"
at_most = "reddest"

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"

[[sheets.columns]]
key = "medium"
label = "Medium"
role = "input"
choices = ["Vacuum", "AIR"]

[[sheets.columns]]
key = "size"
label = "Size"
unit = "arcmin"
role = "input"
required = false

[[sheets.columns]]
key = "redshift"
label = "Redshift"
role = "computed"
formula = "redshift_from_line(centre, line, medium)"

[[sheets.columns]]
key = "velocity"
label = "Velocity"
unit = "m/s"
role = "computed"
formula = "velocity_from_redshift(redshift, 'optical') - zero_point"

[[sheets.columns]]
key = "emitted"
label = "Emitted"
unit = "um"
role = "computed"
formula = "wavelength_emitted(centre, 2 * redshift)"

[[sheets.columns]]
key = "extent"
label = "Extent"
unit = "kpc"
role = "computed"
formula = "scale_transverse(redshift) * size"

[[sheets.columns]]
key = "copied"
label = "Copied"
unit = "arcsec"
role = "computed"
formula = "size"
"""
OWN_ROWS: list[Row] = [
    {"centre": 668.6, "line": "H alpha", "medium": "air", "size": 1.5},
    {"centre": 668.6, "line": "H alpha", "medium": "Vacuum"},
    {"centre": 668.6, "line": "H alpha", "medium": None, "size": 0.25},
    {"centre": 668.6, "line": "H alpha", "medium": "VACUUM", "size": "small"},
    {"centre": 668.6, "line": "H alpha", "medium": "helium", "size": 1.0},
    {"centre": 901.0, "line": "H alpha", "size": 1.0},
    {"centre": "668.6 nm", "line": "H alpha", "size": 1.0},
    {"centre": None, "line": "H alpha", "size": 1.0},
    {"centre": 650.0, "line": "H alpha", "size": 1.0},
    {"size": 2.0},
]


def own_z(row: Row) -> float:
    centre, line = need(row, "centre", "line")
    if isinstance(centre, float):
        centre *= 10
    return cf.redshift_from_line(centre, line, row.get("medium"))


def own_extent(row: Row) -> float:
    (size,) = need(row, "size")
    scale = cf.scale_transverse(own_z(row))
    if isinstance(size, str):
        raise cf.errors.InputError("text")
    return scale * size * 60


def own_copied(row: Row) -> float:
    (size,) = need(row, "size")
    if isinstance(size, str):
        raise cf.errors.InputError("text")
    return float(size * 60)


OWN_COLUMNS: Mapping[str, Callable[[Row], float]] = {
    "Redshift": own_z,
    "Velocity [m/s]": lambda row: (cf.velocity_from_redshift(own_z(row), "optical") - 12.5) * 1e3,
    "Emitted [um]": lambda row: (
        cf.wavelength_emitted(row["centre"], 2 * own_z(row)) / 1000 if own_z(row) else 0.0
    ),
    "Extent [kpc]": own_extent,
    "Copied [arcsec]": own_copied,
}


@pytest.fixture(scope="module")
def own(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Path]:
    path = tmp_path_factory.mktemp("own") / "own.xlsx"
    recipe = read(OWN.encode(), "own.toml", "own")
    build(recipe, path)
    workbook = openpyxl.load_workbook(path)
    write(workbook["Arm's lines"], recipe, OWN_ROWS)
    save(workbook, path)
    return path


@every_engine
def test_own_units_are_converted_in_the_formulas(own: Path, engine: str) -> None:
    found = answers(own, engine)["Arm's lines"]
    letters = column_letters(own, "Arm's lines")
    wrong = [
        (header, row, found[f"{letters[header]}{number}"], wanted)
        for header, formula in OWN_COLUMNS.items()
        for number, row in enumerate(OWN_ROWS, FIRST_ROW)
        if not agree(
            found[f"{letters[header]}{number}"],
            wanted := expected(lambda row, _, made=formula: made(row), row, None),
        )
    ]
    assert not wrong


@every_engine
def test_a_limit_from_a_setting_of_another_unit(own: Path, engine: str) -> None:
    found = answers(own, engine)["Arm's lines"]
    status = column_letters(own, "Arm's lines")["Status"]
    assert found[f"{status}7"] == "ok"
    assert found[f"{status}10"] == "Centre must be at most the setting «Reddest»"


def test_without_formulas_the_cells_are_left_for_fill(tmp_path: Path) -> None:
    path, output = tmp_path / "bare.xlsx", tmp_path / "filled.xlsx"
    build(load("distance-sheet"), path, formulas="none", rows=5)
    workbook = openpyxl.load_workbook(path)
    sheet = workbook["Distances"]
    assert not [
        cell for row in sheet.iter_rows(min_row=FIRST_ROW) for cell in row if cell.value is not None
    ]
    write(sheet, load("distance-sheet"), [{"redshift": 0.5, "magnitude": 20.0}])
    save(workbook, path)
    fill(path, output)
    stored = openpyxl.load_workbook(output)["Distances"]
    letters = column_letters(output, "Distances")
    for header, formula in DISTANCE_COLUMNS.items():
        wanted = formula({"redshift": 0.5, "magnitude": 20.0}, "Planck18")
        assert isclose(stored[f"{letters[header]}5"].value, wanted, rel_tol=1e-14)
    assert stored[f"{letters['Status']}5"].value == "ok"


def test_an_existing_file_is_not_replaced_unasked(tmp_path: Path) -> None:
    path = tmp_path / "there.xlsx"
    path.write_bytes(b"a night's work")
    with pytest.raises(ValueError, match=r"there\.xlsx"):
        build(load("line-log"), path)
    assert path.read_bytes() == b"a night's work"
    build(load("line-log"), path, rows=3, overwrite=True)
    assert openpyxl.load_workbook(path).sheetnames[0] == "Lines"


CHART_RECIPE = """
title = "Chart"
purpose = "Two columns of one kind in different units."
[[sheets]]
name = "Data"
rows = 4
[[sheets.columns]]
key = "near"
label = "Near"
unit = "kpc"
role = "input"
[[sheets.columns]]
key = "far"
label = "Far"
unit = "Mpc"
role = "computed"
formula = "near"
[[sheets.columns]]
key = "twice"
label = "Twice"
unit = "kpc"
role = "computed"
formula = "2 * near"
[[sheets.columns]]
key = "thrice"
label = "Thrice"
unit = "kpc"
role = "computed"
formula = "3 * near"
[[sheets.columns]]
key = "fourfold"
label = "Fourfold"
unit = "kpc"
role = "computed"
formula = "4 * near"
[[sheets.charts]]
title = "Distances"
x = "near"
y = {y}
"""


def chart_of(folder: Path, y: str, near: float = 500.0) -> tuple[Path, Any]:
    recipe = read(CHART_RECIPE.format(y=y).encode(), "chart.toml", "chart")
    path = folder / "chart.xlsx"
    build(recipe, path)
    workbook = openpyxl.load_workbook(path)
    workbook["Data"]["A5"] = near
    save(workbook, path)
    with zipfile.ZipFile(path) as package:
        return path, etree.fromstring(package.read("xl/charts/chart1.xml"))


def test_what_shares_an_axis_is_drawn_in_its_unit(tmp_path: Path) -> None:
    """500 kpc are 0.5 Mpc: on an axis in kpc both columns stand at 500."""
    path, tree = chart_of(tmp_path, '["twice", "far"]')
    (title,) = {
        "".join(axis.xpath("c:title//a:t/text()", namespaces=CHART))
        for axis in tree.xpath("//c:valAx[2]", namespaces=CHART)
    }
    assert title.endswith("[kpc]")
    points = recalculated(path, "libreoffice")["Data points"]
    (letter,) = [place[0] for place, value in points.items() if value == "points: far"]
    assert points[f"{letter}5"] == 500.0


def test_every_column_of_a_chart_is_drawn(tmp_path: Path) -> None:
    _, tree = chart_of(tmp_path, '["near", "twice", "thrice", "fourfold"]')
    assert len(tree.xpath("//c:ser", namespaces=CHART)) == 4
