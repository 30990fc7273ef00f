"""A formula gives one number: by the row, by the column, and as plain formula in a spreadsheet.

Outside checks: Python's own float arithmetic; astropy's units; formualizer, LibreOffice and
IronCalc for the plain formulas; the CODATA and IAU factors are astropy's.
"""

import math
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

import astropy.units as u
import numpy as np
import openpyxl
import pytest
from hypothesis import HealthCheck, Phase, given, settings
from hypothesis import strategies as st
from recalculate import ENGINES, ErrorCell, recalculated

import cellfuncs as cf
from cellfuncs.errors import CellError, DomainError, InputError, MissingInput
from cellfuncs.physics.expansion import cosmology_from
from cellfuncs.symbols import name
from workbooks.expression import TEXT, Cells, Columns, Node, Row
from workbooks.parsing import ExpressionError, Parser

KNOWN = {
    "length_nm": "nm",
    "length_um": "um",
    "speed": "km/s",
    "speed_m": "m/s",
    "time_s": "s",
    "z": "",
    "ratio": "",
    "share": "%",
    "magnitude": "mag",
    "line": TEXT,
    "medium": TEXT,
    "hubble_constant": "km.s-1.Mpc-1",
}
PLANCK = cosmology_from("Planck18")


def parsed(text: str, unit: str = "") -> Node:
    return Parser(KNOWN).parsed(text, unit)


def of_row(text: str, unit: str = "", **values: Any) -> Any:
    return parsed(text, unit).of_row(Row(values, PLANCK))


def of_columns(text: str, unit: str = "", **values: Any) -> Any:
    empty = {
        key: np.array([each is None for each in column])
        for key, column in values.items()
        if isinstance(column, list)
    }
    arrays = {
        key: np.array(
            column if KNOWN[key] == TEXT else [np.nan if x is None else x for x in column],
            dtype=object if KNOWN[key] == TEXT else float,
        )
        if isinstance(column, list)
        else column
        for key, column in values.items()
    }
    return np.asarray(parsed(text, unit).of_columns(Columns(arrays, empty, PLANCK)))


# ---- units -------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("formula", "unit", "values", "truth"),
    [
        ("length_nm", "Angstrom", {"length_nm": 656.28}, 656.28 * u.nm),
        ("length_nm + length_um", "nm", {"length_nm": 1.5, "length_um": 0.25}, 251.5 * u.nm),
        ("length_um - length_nm", "cm", {"length_nm": 50.0, "length_um": 0.25}, 0.2 * u.um),
        ("speed * time_s", "pc", {"speed": 250.0, "time_s": 3e7}, 250 * u.km / u.s * 3e7 * u.s),
        ("length_um / time_s", "m/s", {"length_um": 8.0, "time_s": 4.0}, 2 * u.um / u.s),
        ("length_nm / length_um", "", {"length_nm": 5.0, "length_um": 2.0}, 0.0025 * u.one),
        ("length_nm ** 2", "Angstrom2", {"length_nm": 3.0}, 9 * u.nm**2),
        ("length_nm ** 0.5 * length_nm ** 1.5", "nm2", {"length_nm": 3.0}, 9 * u.nm**2),
        ("2 * speed", "m/s", {"speed": 3.0}, 6 * u.km / u.s),
        ("share * speed", "km/s", {"share": 20.0, "speed": 50.0}, 10 * u.km / u.s),
        ("-length_nm", "Angstrom", {"length_nm": 3.0}, -3 * u.nm),
        ("1 / time_s", "Hz", {"time_s": 0.5}, 2 * u.Hz),
        ("speed / hubble_constant", "Mpc", {"speed": 7000.0, "hubble_constant": 70.0}, 100 * u.Mpc),
        ("length_nm + 1", "nm", {"length_nm": 3.0}, 4 * u.nm),
    ],
)  # fmt: skip
def test_units_are_those_of_astropy(
    formula: str, unit: str, values: dict[str, float], truth: u.Quantity
) -> None:
    expected = truth.to_value(u.Unit(unit))
    assert math.isclose(of_row(formula, unit, **values), expected, rel_tol=1e-14)
    columns: dict[str, Any] = {key: [value, 2 * value] for key, value in values.items()}
    assert math.isclose(of_columns(formula, unit, **columns)[0], expected, rel_tol=1e-14)


def test_arguments_are_taken_to_the_function_s_unit() -> None:
    """The redshift of H alpha at 689.284 nm is that at 6892.84 Å."""
    truth = cf.redshift_from_line(6892.84, "H alpha", "air")
    found = of_row(
        "redshift_from_line(length_nm, line, medium)",
        length_nm=689.284, line="H alpha", medium="air",
    )  # fmt: skip
    assert math.isclose(found, truth, rel_tol=1e-12)
    assert math.isclose(
        of_row(
            "distance_hubble(speed_m, hubble_constant)", "kpc", speed_m=7e6, hubble_constant=70.0
        ),
        100_000.0,
        rel_tol=1e-14,
    )  # fmt: skip


def test_arguments_of_one_group_share_a_unit() -> None:
    found = of_row(
        "redshift_from_wavelength(length_um, length_nm)", length_um=0.75, length_nm=500.0
    )
    assert math.isclose(found, 0.5, rel_tol=1e-14)


def test_a_result_has_the_unit_of_its_argument() -> None:
    assert math.isclose(
        of_row("wavelength_observed(length_nm, z)", "um", length_nm=500.0, z=1.0), 1.0
    )
    assert of_row("units_converted(z, 'nm', 'Angstrom')", "Angstrom", z=5.0) == 50.0


@pytest.mark.parametrize(
    ("formula", "unit", "words"),
    [
        ("length_nm + speed", "nm", ["right of +", "nm", "km/s"]),
        ("length_nm - z", "nm", ["right of -"]),
        ("length_nm * speed", "nm", ["the result", "nm"]),
        ("length_nm ** z", "nm", ["written as a number"]),
        ("z ** length_nm", "", ["pure number"]),
        ("distance_luminosity(length_nm)", "Mpc", ["z of DISTANCE_LUMINOSITY", "nm"]),
        ("velocity_from_redshift(z)", "nm", ["the result", "km/s", "nm"]),
        ("redshift_from_wavelength(length_nm, speed)", "", ["rest of REDSHIFT_FROM_WAVELENGTH"]),
        ("distance_luminosity(magnitude)", "Mpc", ["mag"]),
        ("line", "", ["text"]),
        ("z", TEXT, ["text"]),
        ("line + line", "", ["text"]),
    ],
)
def test_units_that_do_not_fit_are_refused(formula: str, unit: str, words: list[str]) -> None:
    with pytest.raises(ExpressionError) as caught:
        parsed(formula, unit)
    assert all(word in str(caught.value) for word in words), str(caught.value)


def test_precedence_is_python_s() -> None:
    values = {"z": 3.0, "ratio": -2.0}
    for formula in (
        "z + ratio * 2 - 1", "z - (ratio - 1)", "z / ratio / 2", "z / (ratio / 2)", "-z ** 2",
        "(-z) ** 2", "2 ** -z", "2 ** 3 ** 2", "(ratio ** 2) ** 0.5", "z - -ratio", "1 - z - 1",
        "(ratio ** 2) ** 1.5", "(ratio ** 3) ** 2",
    ):  # fmt: skip
        truth = eval(formula, {}, dict(values))
        assert math.isclose(of_row(formula, **values), truth), formula


# ---- errors ------------------------------------------------------------------------------------


def test_an_error_of_another_column_is_passed_on() -> None:
    reason = DomainError("out of reach")
    with pytest.raises(DomainError, match="out of reach"):
        of_row("z + 1", z=reason)
    with pytest.raises(DomainError, match="out of reach"):
        of_row("distance_luminosity(z)", "Mpc", z=reason)


@pytest.mark.parametrize("formula", ["z", "z + 1", "-z", "velocity_from_redshift(z) / 299792.458"])
@pytest.mark.parametrize(
    ("value", "kind"),
    [(None, MissingInput), ("abc", InputError), ("0.5", InputError), (True, InputError)],
)
def test_a_bad_value_gives_an_error_never_a_number(
    formula: str, value: Any, kind: type[CellError]
) -> None:
    unit = "km/s" if "velocity" in formula else ""
    with pytest.raises(kind):
        of_row(formula, unit, z=value)


@pytest.mark.parametrize(
    ("formula", "unit"),
    [
        ("length_nm", "Angstrom"),
        ("wavelength_emitted(length_nm, 1.0)", "Angstrom"),
        ("redshift_from_line(length_nm, 'H alpha')", ""),
        ("length_um + length_nm", "Angstrom"),
    ],
)
@pytest.mark.parametrize(
    ("value", "kind"),
    [(None, MissingInput), ("abc", InputError), ("5.5", InputError), (True, InputError)],
)
def test_a_bad_value_is_not_converted(
    formula: str, unit: str, value: Any, kind: type[CellError]
) -> None:
    with pytest.raises(kind):
        of_row(formula, unit, length_nm=value, length_um=1.0)


@pytest.mark.parametrize(
    ("formula", "values"),
    [
        ("z / ratio", {"z": 1.0, "ratio": 0.0}),
        ("z ** 0.5", {"z": -1.0}),
        ("z ** ratio", {"z": 10.0, "ratio": 400.0}),
        ("0 * (z / ratio)", {"z": 1.0, "ratio": 0.0}),
        ("1 / (z / ratio)", {"z": 1.0, "ratio": 0.0}),
    ],
)
def test_what_is_not_finite_is_no_result(formula: str, values: dict[str, float]) -> None:
    with pytest.raises(DomainError):
        of_row(formula, **values)
    columns: dict[str, Any] = {key: [value, 1.0] for key, value in values.items()}
    found = of_columns(formula, **columns)
    assert np.isnan(found[0])
    assert np.isfinite(found[1])


def test_an_optional_argument_may_be_empty_in_some_rows() -> None:
    found = of_columns(
        "magnitude_absolute(magnitude, z, magnitude)",
        "mag",
        magnitude=[20.0, 21.0],
        z=[0.1, 0.2],
    )
    truth = [cf.magnitude_absolute(20.0, 0.1, 20.0), cf.magnitude_absolute(21.0, 0.2, 21.0)]
    assert np.allclose(found, truth, rtol=1e-14)
    found = of_columns(
        "redshift_from_line(length_nm, line, medium)",
        length_nm=[656.5, 656.5, 656.5],
        line=["H alpha"] * 3,
        medium=[None, "air", "ari"],
    )
    assert math.isclose(found[0], cf.redshift_from_line(6565.0, "H alpha"), rel_tol=1e-11)
    assert math.isclose(found[1], cf.redshift_from_line(6565.0, "H alpha", "air"), rel_tol=1e-11)
    assert np.isnan(found[2])


# ---- one number ----------------------------------------------------------------------------------

NUMBERS = st.floats(0.05, 20.0).map(lambda x: float(f"{x:.6g}"))


@st.composite
def formulas(draw: st.DrawFn, depth: int = 4) -> str:
    """Sums and products of two columns and numbers, and small whole powers"""
    kind = draw(st.integers(0, 7)) if depth else draw(st.integers(0, 2))
    if kind < 2:
        return ("z", "ratio")[kind]
    if kind == 2:
        return repr(draw(NUMBERS))
    inner = draw(formulas(depth=depth - 1))
    if kind == 3:
        return f"-({inner})"
    if kind == 4:
        return f"({inner}) ** {draw(st.sampled_from(['2', '3', '-1', '0.5', '1.5']))}"
    return f"({inner}) {draw(st.sampled_from('+-*/'))} ({draw(formulas(depth=depth - 1))})"


SIGNED = st.one_of(NUMBERS, NUMBERS.map(lambda x: -x))


def by_row(tree: Node, values: Mapping[str, float]) -> float | None:
    try:
        return float(tree.of_row(Row(values, PLANCK)))
    except DomainError:
        return None


def truth_of(formula: str, values: Mapping[str, float]) -> float | None:
    """Python's own arithmetic, each step finite and real"""
    try:
        result = eval(formula, {}, dict(values))
    except (ZeroDivisionError, OverflowError, TypeError):
        return None
    return result if isinstance(result, float) and math.isfinite(result) else None


@settings(max_examples=150, deadline=None)
@given(formulas(), st.lists(st.tuples(SIGNED, SIGNED), min_size=1, max_size=4))
def test_row_and_column_give_python_s_number(
    formula: str, rows: Sequence[tuple[float, float]]
) -> None:
    try:
        tree = parsed(formula)
    except ExpressionError:
        return  # numbers alone that have no result
    columns = Columns(
        {"z": np.array([z for z, _ in rows]), "ratio": np.array([ratio for _, ratio in rows])},
        {},
        PLANCK,
    )
    whole = np.broadcast_to(tree.of_columns(columns), (len(rows),))
    for (z, ratio), found in zip(rows, whole.tolist(), strict=True):
        values = {"z": z, "ratio": ratio}
        single = by_row(tree, values)
        assert (single is None) == (found != found)
        truth = truth_of(formula, values)
        if single is not None and truth is not None:
            assert math.isclose(single, truth, rel_tol=1e-12, abs_tol=1e-300)
            assert math.isclose(found, truth, rel_tol=1e-12, abs_tol=1e-300)


def well_conditioned(formula: str, values: Mapping[str, float]) -> bool:
    """Whether the last bits of the inputs do not decide the result"""
    truth = truth_of(formula, values)
    moved = truth_of(formula, {key: value * (1 + 1e-13) for key, value in values.items()})
    back = truth_of(formula, {key: value * (1 - 1e-13) for key, value in values.items()})
    if truth is None or moved is None or back is None:
        return False
    return all(math.isclose(truth, each, rel_tol=1e-10, abs_tol=1e-290) for each in (moved, back))


@settings(
    max_examples=8,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture],
    phases=(Phase.explicit, Phase.reuse, Phase.generate),  # a workbook a step makes shrinking slow
)
@given(
    st.lists(formulas(), min_size=20, max_size=20),
    st.lists(st.tuples(SIGNED, SIGNED), min_size=3, max_size=3),
)
def test_the_plain_formula_gives_python_s_number(
    tmp_path: Path, texts: list[str], rows: Sequence[tuple[float, float]]
) -> None:
    check_plain(tmp_path, "formualizer", texts, rows)


@pytest.mark.parametrize("engine", ENGINES)
def test_plain_formulas_that_signs_and_powers_make_hard(tmp_path: Path, engine: str) -> None:
    texts = [
        "(z ** 2) ** 0.5", "(z ** 2) ** 1.5", "-z ** 2", "(-z) ** 2", "2 ** -ratio",
        "z - (ratio - z)", "z / (ratio / z)", "(z ** 3) ** 2", "-(-z)", "1 - -z", "z * -1",
        "2 ** 3 ** 2 * z", "(z + ratio) ** 3", "0 * z", "z ** 1", "z * 1 + 0", "0 - z", "z ** -2",
        "-(z ** 0.5)", "(z / ratio) ** -1", "-2.5 ** 2 * z", "(-2.5) ** 2 * z", "z ** 0",
    ]  # fmt: skip
    check_plain(tmp_path, engine, texts, [(-2.0, 3.0), (2.0, -0.5), (4.0, 4.0)])


def check_plain(
    folder: Path, engine: str, texts: Sequence[str], rows: Sequence[tuple[float, float]]
) -> None:
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    expected: dict[str, tuple[str, float | None]] = {}
    for number, (z, ratio) in enumerate(rows, 1):
        sheet.cell(number, 1, z)
        sheet.cell(number, 2, ratio)
        cells = Cells({"z": name(f"$A{number}"), "ratio": name(f"$B{number}")})
        for column, text in enumerate(texts, 4):
            try:
                tree = parsed(text)
            except ExpressionError:
                continue
            values = {"z": z, "ratio": ratio}
            cell = sheet.cell(number, column, tree.of_cells(cells).formula())
            single = by_row(tree, values)
            if single is None:
                expected[cell.coordinate] = (text, None)
            elif well_conditioned(text, values):
                expected[cell.coordinate] = (text, truth_of(text, values))
    path = folder / "formulas.xlsx"
    book.save(path)
    found = recalculated(path, engine)[sheet.title]
    for place, (text, truth) in expected.items():
        value = found[place]
        if truth is None:
            assert isinstance(value, ErrorCell), (text, sheet[place].value, value)
        else:
            assert isinstance(value, float), (text, sheet[place].value, value)
            assert math.isclose(value, truth, rel_tol=1e-9, abs_tol=1e-290), (
                text, sheet[place].value, value, truth,
            )  # fmt: skip


@pytest.mark.parametrize("engine", ENGINES)
def test_functions_inside_functions_keep_their_error_codes(tmp_path: Path, engine: str) -> None:
    """What the inner function refuses shows as the inner function's error"""
    texts = {
        "wavelength_observed(length_nm, redshift_relative(z, ratio))": "nm",
        "velocity_from_redshift(redshift_combined(z, ratio))": "km/s",
    }
    rows = [(0.1, 0.2), (0.1, -1.0), (-1.0, 0.1), (0.1, "x"), ("x", -1.0), (None, 0.1)]
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    wanted: dict[str, Any] = {}
    for number, (z, ratio) in enumerate(rows, 1):
        for column, value in enumerate((z, ratio, 500.0), 1):
            sheet.cell(number, column, value)
        symbols = {
            key: name(f"${letter}{number}")
            for key, letter in (("z", "A"), ("ratio", "B"), ("length_nm", "C"))
        }
        for column, (text, unit) in enumerate(texts.items(), 4):
            tree = parsed(text, unit)
            cell = sheet.cell(number, column, tree.of_cells(Cells(symbols)).formula())
            try:
                wanted[cell.coordinate] = tree.of_row(
                    Row({"z": z, "ratio": ratio, "length_nm": 500.0}, PLANCK)
                )
            except CellError as error:
                wanted[cell.coordinate] = ErrorCell(error.shown)
    path = tmp_path / "nested.xlsx"
    book.save(path)
    found = recalculated(path, engine)[sheet.title]
    for place, value in wanted.items():
        if isinstance(value, float):
            assert math.isclose(found[place], value, rel_tol=1e-9)  # type: ignore[arg-type]
        else:
            assert found[place] == value, (place, sheet[place].value)
