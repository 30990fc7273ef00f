"""Samples as a sheet holds them: gaps, remarks, blocks, errors; and errors of plain formulas."""

import math
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from openpyxl import Workbook
from openpyxl.workbook.defined_name import DefinedName
from recalculate import ENGINES, recalculated

import cellfuncs as cf
from cellfuncs import CATALOGUE, DomainError, InputError, MissingInput
from cellfuncs.bridges.cell import ErrorCell, answer
from cellfuncs.bridges.formula import guarded, text_of
from cellfuncs.catalogue import Number
from cellfuncs.propagation import combined, derivative, error_function, evaluated, tables
from cellfuncs.symbols import Expr, NotTraceable, name, node

VALUES = [0.0501, 0.0503, 0.0498, 0.0502]
SIGMAS = [0.0002, 0.0001, 0.0003, 0.0002]

# A sheet's ranges ---------------------------------------------------------------------------------

GAPS: list[tuple[Any, Any]] = [
    ([None, *VALUES, ""], [0.1, *SIGMAS, 0.1]),
    ([*VALUES, 0.9], [*SIGMAS, None]),
    ([*VALUES, 0.9, 0.8], [*SIGMAS, "not measured", math.nan]),
    (["z", *VALUES], ["sigma", *SIGMAS]),
    ([*VALUES, "cosmic ray"], [*SIGMAS, 0.0]),  # a row that does not count is not looked at
    (tuple(VALUES), np.array(SIGMAS)),
    (np.array(VALUES), np.array([SIGMAS]).T),
    ([[value] for value in VALUES], [[sigma] for sigma in SIGMAS]),
    ([VALUES], [[sigma] for sigma in SIGMAS]),
    ([VALUES[:2], VALUES[2:]], [SIGMAS[:2], SIGMAS[2:]]),
    (np.array([*VALUES, None], dtype=object), [*SIGMAS, 1]),
    (np.ma.array([*VALUES, 7.0], mask=[False] * 4 + [True]), [*SIGMAS, 1.0]),
]


@pytest.mark.parametrize(("values", "sigmas"), GAPS)
@pytest.mark.parametrize("part", ["mean", "sigma", "chi2", "count"])
def test_gaps_remarks_and_shapes_change_nothing(values: Any, sigmas: Any, part: str) -> None:
    assert cf.mean_weighted(values, sigmas, part) == pytest.approx(
        cf.mean_weighted(VALUES, SIGMAS, part), rel=1e-12
    )


def test_one_error_for_all() -> None:
    assert cf.mean_weighted(VALUES, 0.0002) == pytest.approx(np.mean(VALUES), rel=1e-12)
    assert cf.mean_weighted(VALUES, 0.0002, "sigma") == pytest.approx(0.0001, rel=1e-12)


@pytest.mark.parametrize(
    ("call", "error", "words"),
    [
        (
            lambda: cf.mean_weighted(VALUES, [0.1, 0.0, 0.1, 0.1]),
            DomainError,
            "sigmas, cell 2, is 0",
        ),
        (
            lambda: cf.mean_weighted(VALUES, [0.1, 0.1, -2, 0.1]),
            DomainError,
            "cell 3, is -2; it must",
        ),
        (lambda: cf.mean_weighted(VALUES, 0.0), DomainError, "sigmas is 0; it must be above 0"),
        (lambda: cf.mean_weighted([1.0, math.inf], 0.1), DomainError, "values, cell 2, is inf"),
        (lambda: cf.mean_weighted(["a", "b"], [1, 1]), InputError, "no number, only text: 'a'"),
        (lambda: cf.mean_weighted(["a", None], [1, 1]), InputError, "no number, only text"),
        (lambda: cf.mean_weighted([None, ""], [1, 1]), MissingInput, "values is empty"),
        (lambda: cf.mean_weighted([], []), MissingInput, "values is empty"),
        (lambda: cf.mean_weighted([1, None], [None, 1]), MissingInput, "no row with a number in"),
        (lambda: cf.mean_weighted(VALUES, [1, 1]), InputError, "4 cells and sigmas has 2 cells"),
        # a number that the sheet holds as text would be missed in silence
        (
            lambda: cf.mean_weighted([1, "2.5"], [1, 1]),
            InputError,
            "cell 2, is '2.5', not a number",
        ),
        (
            lambda: cf.mean_weighted([1, "2,5"], [1, 1]),
            InputError,
            "cell 2, is '2,5', not a number",
        ),
        (lambda: cf.mean_weighted([1, True], [1, 1]), InputError, "cell 2, is True, not a number"),
        (lambda: cf.velocity_dispersion([7000.0]), DomainError, "there is 1"),
        (lambda: cf.velocity_dispersion([7000.0] * 3), DomainError, "all 3 velocities are 7000"),
        (lambda: cf.velocity_dispersion(["star", "x"]), InputError, "velocities holds no number"),
        (lambda: cf.hubble_fit([10, -1], [700, 70]), DomainError, "distances, cell 2, is -1"),
        (lambda: cf.hubble_fit([0, 0], [700, 70]), DomainError, "every distance is 0"),
        (
            lambda: cf.hubble_fit([10, 20], [700, 70], [5, 0]),
            DomainError,
            "sigmas, cell 2, is 0; it must be above 0 km/s",
        ),
        (
            lambda: cf.hubble_fit([10, 10], [700, 690], None, "slope", False),
            DomainError,
            "all 2 distances are 10 Mpc",
        ),
        (lambda: cf.uncertainty("DISTANCE_MODULUS", 0.5, -0.1), DomainError, "sigmas is -0.1"),
        (
            lambda: cf.uncertainty("VELOCITY_SUM", [1, 2], [1, -1]),
            DomainError,
            "sigmas, cell 2, is -1",
        ),
        (
            lambda: cf.uncertainty("DISTANCE_MODULUS", [0.5, "WMAP9"], [0.1, 0.1]),
            InputError,
            "cell 2, is 0.1, the error of cosmology",
        ),
        (
            lambda: cf.uncertainty("VELOCITY_SUM", [1, 2, 3], [1, 1]),
            InputError,
            "arguments has 3 cells; VELOCITY_SUM takes 2",
        ),
        (
            lambda: cf.uncertainty("VELOCITY_SUM", [1, 2], [1, 1, 1]),
            InputError,
            "sigmas, cell 3, is 1, the error of nothing",
        ),
        (
            lambda: cf.uncertainty("DISTANCE_MODULUS", [-0.5], [0.1]),
            DomainError,
            "UNCERTAINTY: DISTANCE_MODULUS: z is -0.5",
        ),
        (
            lambda: cf.uncertainty("DISTANCE_MODULUS", ["far"], [0.1]),
            InputError,
            "DISTANCE_MODULUS: z is 'far', not a number",
        ),
        (
            lambda: cf.uncertainty("VELOCITY_SUM", [1, None], [0.1]),
            MissingInput,
            "VELOCITY_SUM: v2 is empty",
        ),
        (lambda: cf.uncertainty("DISTANCE_LUM", 1, 1), InputError, "near matches: .*DISTANCE_LUMI"),
    ],
)
def test_what_is_wrong_is_said(call: Callable[[], Any], error: type[Exception], words: str) -> None:
    with pytest.raises(error, match=words) as raised:
        call()
    assert type(raised.value) is error


def test_a_column_of_other_arguments_gives_a_column() -> None:
    velocities = [6900.0, 7150.0, 6420.0, 7010.0, 6735.0]
    found = cf.velocity_dispersion(velocities, [0.0, 0.1, None, -2.0], "gapper")
    alone = cf.velocity_dispersion(velocities, 0.0, "gapper")
    assert found[:3] == pytest.approx([alone, alone / 1.1, alone])
    assert np.isnan(found[3])
    parts = cf.hubble_fit([10, 20, 35], [710, 1380, 2450], None, ["slope", "count", "Scatter"])
    assert parts == pytest.approx(
        [
            cf.hubble_fit([10, 20, 35], [710, 1380, 2450], None, each)
            for each in ("slope", "count", "scatter")
        ]
    )
    errors = cf.uncertainty(["DISTANCE_LUMINOSITY", "DISTANCE_COMOVING"], 0.5, 0.01)
    assert errors[0] == cf.uncertainty("DISTANCE_LUMINOSITY", 0.5, 0.01)
    assert errors[1] == cf.uncertainty("DISTANCE_COMOVING", 0.5, 0.01)


# In cells -----------------------------------------------------------------------------------------


def column(*values: Any) -> tuple[tuple[Any, ...], ...]:
    return tuple((value,) for value in values)


@pytest.mark.parametrize(
    ("call", "shown"),
    [
        (("MEAN_WEIGHTED", [column(*VALUES, None, "note"), column(*SIGMAS, 1.0, 1.0)]), None),
        (("MEAN_WEIGHTED", [(tuple(VALUES),), (tuple(SIGMAS),)]), None),
        (("MEAN_WEIGHTED", [column(1.0, ErrorCell("#DIV/0!")), column(1.0, 1.0)]), "#DIV/0!"),
        (("MEAN_WEIGHTED", [column(1.0, 2.0), ErrorCell("#REF!")]), "#REF!"),
        (("MEAN_WEIGHTED", [column(1.0, 2.0), column(1.0, 0.0)]), "#NUM!"),
        (("MEAN_WEIGHTED", [column("a", "b"), column(1.0, 1.0)]), "#VALUE!"),
        (("MEAN_WEIGHTED", [column(None, None), column(1.0, 1.0)]), "#N/A"),
        (("MEAN_WEIGHTED", [column(1.0, 2.0)]), "#N/A"),
        (("VELOCITY_DISPERSION", [column(7000.0)]), "#NUM!"),
        (("VELOCITY_DISPERSION", [7000.0]), "#NUM!"),
        (("HUBBLE_FIT", [column(1.0, 2.0), column(70.0, 140.0), column(None, None)]), None),
        (("REDSHIFT_SOLVED", [column(6892.84, 5105.8, None, 5258.65)]), None),
        (("REDSHIFT_SOLVED", [((6892.84, 0.5), (5105.8, None), (5258.65, 0.7))]), None),
        (("REDSHIFT_SOLVED", [column(6892.84)]), "#N/A"),
    ],
)
def test_in_a_cell(call: tuple[str, list[Any]], shown: str | None) -> None:
    found = answer(*call)
    if shown is None:
        given = [list(map(list, each)) if isinstance(each, tuple) else each for each in call[1]]
        assert found == CATALOGUE[call[0]](*given)
        assert isinstance(found, float)
    else:
        assert found == ErrorCell(shown)


def test_a_range_beside_a_column_makes_a_column() -> None:
    velocities = column(6900.0, 7150.0, 6420.0, None, "star")
    found = answer("VELOCITY_DISPERSION", [velocities, column(0.0, 0.1, -1.0)])
    alone = cf.velocity_dispersion([6900.0, 7150.0, 6420.0])
    assert found == [[pytest.approx(alone)], [pytest.approx(alone / 1.1)], [ErrorCell("#NUM!")]]


def test_reason_tells_of_a_range() -> None:
    assert answer("REASON", ["MEAN_WEIGHTED", column(*VALUES), column(*SIGMAS)]) == "ok"
    said = answer("REASON", ["MEAN_WEIGHTED", column(1.0, 2.0), column(1.0, 0.0)])
    assert said == "MEAN_WEIGHTED: sigmas, cell 2, is 0; it must be above 0"
    said = answer("REASON", ["VELOCITY_DISPERSION", column("a", "b")])
    assert said == "VELOCITY_DISPERSION: velocities holds no number, only text: 'a'"
    said = answer("REASON", ["MEAN_WEIGHTED", column(1.0, ErrorCell("#DIV/0!")), 1.0])
    assert said == "values is itself in error: #DIV/0!"


# Errors of whole columns, and as plain formulas ---------------------------------------------------


def test_a_functions_errors_of_a_column_are_those_of_its_rows() -> None:
    errors = error_function(CATALOGUE["REDSHIFT_FROM_LINE"])
    found = errors(
        [6892.84, 5257.2, None, -1.0, 5104.5],
        ["H alpha", "[OIII]5007", "H beta", "H beta", "H beta"],
        ["vacuum", "air", "air", "air", None],
        [0.5, 0.3, 0.1, 0.1, None],
    )
    rows = [
        cf.uncertainty("REDSHIFT_FROM_LINE", [6892.84, "H alpha"], [0.5]),
        cf.uncertainty("REDSHIFT_FROM_LINE", [5257.2, "[OIII]5007", "air"], [0.3]),
    ]
    assert found[:2] == pytest.approx(rows, rel=1e-12)
    assert np.isnan(found[2:4]).all()
    assert found[4] == 0.0


TRACEABLE = [
    "REDSHIFT_FROM_LINE",
    "REDSHIFT_FROM_VELOCITY",
    "VELOCITY_FROM_REDSHIFT",
    "VELOCITY_PECULIAR",
    "VELOCITY_SUM",
    "DOPPLER_FACTOR",
    "DISTANCE_COMOVING",
    "DISTANCE_LIGHT_TRAVEL",
    "DISTANCE_LUMINOSITY",
    "DISTANCE_FROM_MODULUS",
    "MODULUS_FROM_DISTANCE",
    "TIME_LOOKBACK",
    "EXPANSION_RATE",
    "DECELERATION",
    "WAVELENGTH_AIR",
    "WAVELENGTH_VACUUM",
]
ROWS: dict[str, list[tuple[Any, ...]]] = {
    "": [(0.05, 1e-4), (0.7, 0.02), (3.0, None), (0.5, -0.1), (None, 0.1), ("far", 0.1)],
    "Angstrom": [(6892.84, 0.5), (4100.0, 0.02), (9000.0, None), (5000.0, -0.1), (5000.0, "x")],
    "km/s": [(1500.0, 20.0), (-2.5e4, 3.0), (1.2e5, None), (100.0, -0.1), (None, 0.1)],
    "Mpc": [(16.5, 0.4), (900.0, 12.0), (1.0, None), (1.0, -0.1)],
    "mag": [(31.1, 0.2), (42.0, 0.05), (25.0, None), (25.0, -0.1)],
}


@pytest.mark.parametrize("engine", ENGINES)
def test_errors_as_plain_formulas(tmp_path: Path, engine: str) -> None:
    """Recalculated by three programs: the formula of an error, its guards included."""
    workbook = Workbook()
    sheet = workbook.active
    assert sheet is not None
    sheet.title = "Cells"
    hidden = workbook.create_sheet("Tables")
    for at, (table, numbers) in enumerate(tables().items(), start=1):
        letter = chr(64 + at)
        for row, number in enumerate(numbers.tolist(), start=1):
            hidden[f"{letter}{row}"] = number
        workbook.defined_names[table] = DefinedName(
            table, attr_text=f"Tables!${letter}$1:${letter}${len(numbers)}"
        )
    expected: list[tuple[str, Any]] = []
    for function_name in TRACEABLE:
        made = CATALOGUE[function_name]
        numeric = [each for each in made.arguments if isinstance(each, Number)]
        words = {"line": "H alpha", "medium": "air", "convention": "relativistic"}
        fixed = {each.name: words[each.name] for each in made.arguments if each.name in words}
        for value, sigma in ROWS[numeric[0].unit]:
            row = len(expected) + 1
            given: dict[str, Any] = dict(fixed)
            cells: dict[str, Any] = dict(fixed)
            for place, argument in enumerate(numeric):
                for prefix, content, offset in (("", value, 1), ("sigma_", sigma, 5)):
                    letter = chr(64 + offset + place)
                    sheet[f"{letter}{row}"] = content
                    cells[prefix + argument.name] = name(f"{letter}{row}")
                    given[prefix + argument.name] = content
            sheet[f"J{row}"] = guarded(error_function(made), cells).formula()
            try:
                expected.append((function_name, error_function(made)(**given)))
            except cf.CellError as error:
                expected.append((function_name, error.shown))
    path = tmp_path / "errors.xlsx"
    workbook.save(path)
    found = recalculated(path, engine)["Cells"]
    for row, (function_name, wanted) in enumerate(expected, start=1):
        here = found[f"J{row}"]
        if isinstance(wanted, str):
            assert getattr(here, "code", here) == wanted, (function_name, row)
        else:
            assert here == pytest.approx(wanted, rel=1e-9, abs=0), (function_name, row)
    assert sum(isinstance(wanted, float) for _, wanted in expected) >= 3 * len(TRACEABLE) - 3


# Outside: derivatives as any table of them has them; at points where none is 0.
X = name("x")
EXPRESSIONS: dict[str, tuple[Expr, Callable[[float], float]]] = {
    "power of x": (X**2.5, lambda x: 2.5 * x**1.5),
    "x as a power": (2 ** (3 * X), lambda x: 3 * math.log(2) * 8**x),
    "x to the x": (X**X, lambda x: x**x * (math.log(x) + 1)),
    "quotient": ((1 + X) / (2 - X), lambda x: 3 / (2 - x) ** 2),
    "negative": (-(X * X), lambda x: -2 * x),
    "ABS": (abs(X - 3), lambda x: -1.0),
    "SQRT": (np.sqrt(1 + X), lambda x: 0.5 / math.sqrt(1 + x)),
    "EXP": (np.exp(2 * X), lambda x: 2 * math.exp(2 * x)),
    "LN": (np.log(X), lambda x: 1 / x),
    "LOG10": (np.log10(X), lambda x: 1 / (x * math.log(10))),
    "log1p": (np.log1p(X), lambda x: 1 / (1 + x)),
    "SIN": (np.sin(X), math.cos),
    "COS": (np.cos(X), lambda x: -math.sin(x)),
    "TAN": (Expr("TAN", X), lambda x: 1 + math.tan(x) ** 2),
    "ASIN": (Expr("ASIN", X), lambda x: 1 / math.sqrt(1 - x * x)),
    "ACOS": (Expr("ACOS", X), lambda x: -1 / math.sqrt(1 - x * x)),
    "ATAN": (Expr("ATAN", X), lambda x: 1 / (1 + x * x)),
    "ATAN2 of x": (Expr("ATAN2", X, node(2.0)), lambda x: -2 / (x * x + 4)),
    "ATAN2 to x": (Expr("ATAN2", node(2.0), X), lambda x: 2 / (x * x + 4)),
    "SINH": (np.sinh(X), math.cosh),
    "COSH": (Expr("COSH", X), math.sinh),
    "ASINH": (np.arcsinh(X), lambda x: 1 / math.sqrt(1 + x * x)),
    "RADIANS": (Expr("RADIANS", X), lambda x: math.pi / 180),
    "DEGREES": (Expr("DEGREES", X), lambda x: 180 / math.pi),
    "MOD": (Expr("MOD", 7 * X, node(0.5)), lambda x: 7.0),
    "INT": (X * Expr("INT", 9 * X), lambda x: math.floor(9 * x)),
    "IF": (Expr("IF", X > 0.3, X**2, 5 * X), lambda x: 2 * x if x > 0.3 else 5.0),
    "kept": (Expr("kept", "words", X**3), lambda x: 3 * x * x),
    "sum over a table": (Expr("SUMPRODUCT", name("gauss_weight") * X**2), lambda x: 2 * x),
    "terms of one slope": (Expr("SUMPRODUCT", name("series_volume") + X), lambda x: 46.0),
    "integral to x": (
        X * Expr("SUMPRODUCT", name("gauss_weight") * np.exp(X * name("gauss_node"))),
        math.exp,
    ),
    "integral of x too": (
        X * Expr("SUMPRODUCT", name("gauss_weight") * np.exp(X * name("gauss_node")) * X),
        lambda x: math.exp(x) - 1 + x * math.exp(x),
    ),
    "nothing of x": (np.exp(name("y")), lambda x: 0.0),
}
"""∫₀ˣ eᵗ dt is eˣ − 1; `series_volume` has 46 rows"""


@pytest.mark.parametrize("what", EXPRESSIONS)
@pytest.mark.parametrize("x", [0.22, 0.7])
def test_derivatives_of_every_operation(what: str, x: float) -> None:
    expr, slope = EXPRESSIONS[what]
    found = evaluated(derivative(expr, "x"), {"x": x, "y": 1.0})
    assert found == pytest.approx(slope(x), rel=1e-13, abs=1e-15)
    columns = evaluated(derivative(expr, "x"), {"x": np.array([x, 0.4]), "y": 1.0})
    assert columns == pytest.approx([slope(x), slope(0.4)], rel=1e-13, abs=1e-15)


def test_the_integrals_end_is_the_integrand() -> None:
    expr = EXPRESSIONS["integral to x"][0]
    assert text_of(derivative(expr, "x")) == "EXP(x)"


def test_what_has_no_derivative_is_refused() -> None:
    with pytest.raises(NotTraceable, match="GAMMA"):
        derivative(Expr("GAMMA", X), "x")


def test_errors_combine_as_a_root_of_squares() -> None:
    both = combined([(node(3.0), name("a")), (node(4.0), name("b"))])
    assert evaluated(both, {"a": 1.0, "b": 1.0}) == 5.0
    assert evaluated(combined([(node(-3.0), name("a"))]), {"a": 2.0}) == 6.0
    assert evaluated(combined([]), {}) == 0.0
