"""The ± columns: plain formulas, `fill` and random draws give one error.

Outside: numpy's generator and sample statistics (Monte Carlo of the functions in Python), and the
three spreadsheet engines of recalculate.py. The derivatives of each function by itself
tests/published/test_uncertainty.py holds to mpmath.
"""

from collections.abc import Callable
from math import isclose
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from openpyxl import load_workbook
from recalculate import ENGINES, ErrorCell, Value, recalculated, save

import cellfuncs as cf
from workbooks.build import build
from workbooks.fill import Report, fill
from workbooks.recipe import Recipe, read
from workbooks.template.sheets import FIRST_ROW, letters_of

Floats = NDArray[np.float64]
every_engine = pytest.mark.parametrize("engine", ENGINES)


def column(key: str, **others: Any) -> str:
    def written(value: Any) -> str:
        return str(value).lower() if isinstance(value, bool) else repr(value).replace("'", '"')

    given = {"key": key, "label": key.replace("_", " ").capitalize(), **others}
    lines = [f"{word} = {written(value)}" for word, value in given.items()]
    return "\n".join(["[[sheets.columns]]", *lines, ""])


def typed(key: str, **others: Any) -> str:
    return column(key, role="input", **others)


def computed(key: str, formula: str, **others: Any) -> str:
    return column(key, role="computed", sigma=True, formula=formula, **others)


HEAD = """\
title = "Errors"
purpose = "One row a line."
cosmology = "Planck18"

[[settings]]
key = "medium"
label = "Medium"
group = "Instrument"
kind = "text"
value = "air"
choices = ["vacuum", "air"]

[[settings]]
key = "offset"
label = "Offset"
group = "Instrument"
value = 0.0001

[[sheets]]
name = "Lines"
rows = 14
"""

RECIPE = HEAD + "\n".join(
    [
        typed("line", kind="line"),
        typed("guess", kind="line"),
        typed("wavelength", unit="Angstrom", sigma="error"),
        # in another unit than the wavelength
        typed("error", unit="nm"),
        typed("velocity", unit="km/s", sigma="velocity_error"),
        typed("velocity_error", unit="km/s"),
        typed("magnitude", unit="mag", sigma="magnitude_error"),
        typed("magnitude_error", unit="mag"),
        typed("extinction", unit="mag", sigma="extinction_error"),
        typed("extinction_error", unit="mag"),
        computed("first", "redshift_from_line(wavelength, line or guess, medium)"),
        computed("second", "redshift_relative(first, offset)"),
        # of one input twice, which is no chance for errors to cancel or to add as if independent
        computed("product", "first * second"),
        computed("difference", "first - 0.9 * second"),
        computed("ratio", "velocity_from_redshift(first) / velocity", unit=""),
        computed("shifted", "redshift_combined(first, redshift_from_velocity(velocity))"),
        computed("power", "(1 + first) ** 4"),
        computed("distance", "distance_luminosity(first)", unit="Mpc"),
        computed("far", "distance_luminosity(first)", unit="Gpc"),
        computed("absolute", "magnitude_absolute(magnitude, second, extinction)", unit="mag"),
        computed("exponent", "1.5 ** (10 * first)"),
        computed(
            "named",
            "redshift_from_line(wavelength, line_nearest(wavelength, first, medium, 9), medium)",
        ),
        computed("free", "offset * 2"),
    ]
)

# What each column is, in Python, of draws of the inputs.
CHAIN: dict[str, Callable[..., Floats]] = {
    "first": lambda line, w, v, m, a: cf.redshift_from_line(w, line, "air"),
    "second": lambda line, w, v, m, a: cf.redshift_relative(
        cf.redshift_from_line(w, line, "air"), 1e-4
    ),
    "product": lambda *of: CHAIN["first"](*of) * CHAIN["second"](*of),
    "difference": lambda *of: CHAIN["first"](*of) - 0.9 * CHAIN["second"](*of),
    "ratio": lambda line, w, v, m, a: (
        cf.velocity_from_redshift(cf.redshift_from_line(w, line, "air")) / v
    ),
    "shifted": lambda line, w, v, m, a: cf.redshift_combined(
        cf.redshift_from_line(w, line, "air"), cf.redshift_from_velocity(v)
    ),
    "power": lambda *of: (1 + CHAIN["first"](*of)) ** 4,
    "exponent": lambda *of: 1.5 ** (10 * CHAIN["first"](*of)),
    "named": lambda *of: CHAIN["first"](*of),
    "distance": lambda *of: cf.distance_luminosity(CHAIN["first"](*of)),
    "far": lambda *of: cf.distance_luminosity(CHAIN["first"](*of)) / 1000,
    "absolute": lambda line, w, v, m, a: cf.magnitude_absolute(
        m, CHAIN["second"](line, w, v, m, a), a
    ),
}

# line, guess, wavelength and error, velocity and error, magnitude and error, extinction and error
GOOD: list[tuple[Any, ...]] = [
    ("H alpha", None, 6890.9, 0.03, 1500.0, 20.0, 17.5, 0.02, 0.12, 0.05),
    (None, "[O III] 5007", 5320.0, 0.05, -250.0, 4.0, 12.1, 0.3, 0.0, 0.01),
    ("Mg II 2796", "H alpha", 5607.31, 0.2, 3e4, 100.0, 19.0, 0.0, 0.4, 0.1),
]


def changed(**others: Any) -> tuple[Any, ...]:
    keys = ("line", "guess", "w", "w_error", "v", "v_error", "m", "m_error", "a", "a_error")
    return tuple(others.get(key, value) for key, value in zip(keys, GOOD[0], strict=True))


BAD: dict[str, tuple[Any, ...]] = {
    "no error": changed(w_error=None),
    "error of 0": changed(w_error=0.0),
    "error below 0": changed(w_error=-0.03),
    "text for an error": changed(w_error="small"),
    "digits in a text": changed(w_error="0.03"),
    "no wavelength": changed(w=None),
    "neither": changed(w=None, w_error=None),
    "text for a wavelength": changed(w="6890"),
    "wavelength below 0": changed(w=-6890.0),
    "no extinction and no error": changed(a=None, a_error=None),
    "no extinction": changed(a=None),
}
ROWS = [*GOOD, *BAD.values()]


@pytest.fixture(scope="module")
def recipe() -> Recipe:
    return read(RECIPE.encode(), "errors.toml", "errors")


@pytest.fixture(scope="module")
def template(recipe: Recipe, tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("errors") / "errors.xlsx"
    build(recipe, path)
    workbook = load_workbook(path)
    sheet = workbook["Lines"]
    for row, values in enumerate(ROWS, FIRST_ROW):
        for place, value in enumerate(values, 1):
            cell = sheet.cell(row, place)
            cell.value = value
            if isinstance(value, str):
                cell.data_type = "s"
    return save(workbook, path)


@pytest.fixture(scope="module")
def filling(recipe: Recipe, template: Path) -> Report:
    return fill(template, template.with_stem("filled"), recipe)


@pytest.fixture(scope="module")
def filled(filling: Report) -> dict[str, list[Any]]:
    sheet = load_workbook(filling.output, data_only=True)["Lines"]

    def value(found: Any) -> Value:
        if isinstance(found, str) and found.startswith("#"):
            return ErrorCell(found)
        return float(found) if isinstance(found, int) else found

    letters = letters_of(read(RECIPE.encode(), "errors.toml", "errors").tables[0])
    return {
        key: [value(sheet[f"{letter}{FIRST_ROW + at}"].value) for at in range(len(ROWS))]
        for key, letter in letters.items()
    }


def agree(found: Value, expected: Value) -> bool:
    if isinstance(found, float) and isinstance(expected, float):
        return isclose(found, expected, rel_tol=1e-9, abs_tol=1e-300)
    return (None if found == "" else found) == (None if expected == "" else expected)


@every_engine
def test_plain_formulas_give_what_fill_writes(
    recipe: Recipe, template: Path, filled: dict[str, list[Any]], engine: str
) -> None:
    cells = recalculated(template, engine)["Lines"]
    wrong = [
        (key, ROWS[at], found, filled[key][at])
        for key, letter in letters_of(recipe.tables[0]).items()
        for at in range(len(ROWS))
        # what a nearest line needs only fill can find
        if not key.startswith("named")
        if not agree(found := cells.get(f"{letter}{FIRST_ROW + at}"), filled[key][at])
    ]
    assert not wrong, "\n".join(map(str, wrong))


def drawn(row: tuple[Any, ...], count: int = 200_000) -> dict[str, float]:
    """Return the spread of each column over random draws of a row's inputs."""
    line, guess, w, w_error, v, v_error, m, m_error, a, a_error = row
    rng = np.random.default_rng(17)
    draws = [
        rng.normal(value, error, count)
        for value, error in ((w, 10 * w_error), (v, v_error), (m, m_error), (a, a_error))
    ]
    return {key: float(np.std(of(line or guess, *draws))) for key, of in CHAIN.items()}


@pytest.mark.parametrize("at", range(len(GOOD)))
def test_errors_are_the_spread_of_random_draws(filled: dict[str, list[Any]], at: int) -> None:
    spread = drawn(GOOD[at])
    for key, expected in spread.items():
        found = filled[f"{key}_sigma"][at]
        assert isinstance(found, float)
        assert abs(found / expected - 1) < 0.01, (key, found, expected)
    # had the two redshifts been taken for independent, this would be far too small
    one, other = filled["first"][at], filled["second"][at]
    errors = filled["first_sigma"][at], filled["second_sigma"][at]
    assert isinstance(one, float)
    assert isinstance(other, float)
    apart = np.hypot(other * errors[0], one * errors[1])
    assert spread["product"] > 1.35 * apart


def test_what_has_no_error_among_its_inputs_has_an_error_of_0(
    filled: dict[str, list[Any]],
) -> None:
    assert filled["free_sigma"] == [0.0] * len(ROWS)


# Which errors follow from the wavelength's.
OF_WAVELENGTH = (
    "first",
    "second",
    "product",
    "difference",
    "ratio",
    "shifted",
    "power",
    "exponent",
)
OF_REDSHIFT = (*OF_WAVELENGTH, "distance", "far", "absolute")


@pytest.mark.parametrize(
    ("words", "value", "error"),
    [
        ("no error", float, None),
        ("error of 0", float, 0.0),
        ("error below 0", float, "#NUM!"),
        ("text for an error", float, "#VALUE!"),
        ("digits in a text", float, "#VALUE!"),
        ("no wavelength", None, None),
        ("neither", None, None),
        ("text for a wavelength", "#VALUE!", "#VALUE!"),
        ("wavelength below 0", "#NUM!", "#NUM!"),
    ],
)
def test_what_is_not_there_or_not_allowed(
    filled: dict[str, list[Any]], words: str, value: Any, error: Any
) -> None:
    at = len(GOOD) + list(BAD).index(words)

    def shows(found: Value, wanted: Any) -> bool:
        if wanted is float:
            return isinstance(found, float)
        return bool(found == (ErrorCell(wanted) if isinstance(wanted, str) else wanted))

    for key in OF_REDSHIFT:
        assert shows(filled[key][at], value), key
    alone = [key for key in OF_REDSHIFT if key not in ("ratio", "shifted", "absolute")]
    for key in alone if error == 0.0 else OF_REDSHIFT:
        assert shows(filled[f"{key}_sigma"][at], error), key
    if error == 0.0:
        # the velocity's error is still there
        v, v_error = ROWS[at][4:6]
        ratio = filled["ratio"][at]
        assert isinstance(ratio, float)
        assert filled["ratio_sigma"][at] == pytest.approx(ratio * v_error / v, rel=1e-12)


def test_an_optional_input_that_is_empty_has_no_error(filled: dict[str, list[Any]]) -> None:
    """Without an extinction the function takes 0, exactly; an error beside it counts for nothing"""
    both, only = (
        len(GOOD) + list(BAD).index(words)
        for words in ("no extinction and no error", "no extinction")
    )
    assert filled["absolute_sigma"][both] == filled["absolute_sigma"][only]
    spread = drawn((*GOOD[0][:8], 0.0, 0.0))["absolute"]
    assert filled["absolute_sigma"][both] == pytest.approx(spread, rel=0.01)


def test_the_report_names_the_cell_and_what_is_wrong(filling: Report) -> None:
    report = filling.sheets[0]
    told = [str(each) for each in report.refusals]
    row = FIRST_ROW + len(GOOD) + list(BAD).index("error below 0")
    assert f"Lines!D{row}: Error must be at least 0 nm; it is -0.03 nm" in told
    without = {"no error", "error of 0", "no extinction and no error", "no extinction"}
    assert report.refused == len(set(BAD) - without)


def test_a_column_with_a_unit_is_written_with_it(recipe: Recipe, template: Path) -> None:
    sheet = load_workbook(template)["Lines"]
    letters = letters_of(recipe.tables[0])
    assert sheet[f"{letters['distance_sigma']}4"].value == "± Distance [Mpc]"
    assert sheet[f"{letters['first_sigma']}4"].value == "± First"
    # beside what it is the error of
    assert sheet[f"{letters['first_sigma']}4"].column == sheet[f"{letters['first']}4"].column + 1
