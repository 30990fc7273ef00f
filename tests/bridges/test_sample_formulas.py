"""Means, dispersions and fits as plain formulas over working columns, by three engines.

Outside: LibreOffice Calc, formualizer and IronCalc (see recalculate.py). The functions in Python,
which the formulas are held to, tests/published/test_samples.py holds to scipy, astropy and printed
tables; two of its samples are here too.
"""

from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import product
from math import isclose
from pathlib import Path
from typing import Any

import pytest
from openpyxl import Workbook
from openpyxl.utils import get_column_letter
from published.test_samples import DISTANCES, GALAXIES, VELOCITIES
from recalculate import ENGINES, ErrorCell, Value, recalculated, save

from cellfuncs import CATALOGUE, CellError
from cellfuncs.bridges.formula import LONGEST
from cellfuncs.bridges.sample import guarded_sample
from cellfuncs.bridges.steps import Steps
from cellfuncs.symbols import NotTraceable, name
from workbooks.gathered import takes_rows

every_engine = pytest.mark.parametrize("engine", ENGINES)

COLUMNS = {"distance": "A", "velocity": "B", "sigma": "C", "member": "D", "group": "E"}
"""Of the sheets on which the samples stand, from row 1 on"""


@dataclass(frozen=True)
class Sample:
    rows: list[tuple[Any, ...]]
    """Distance, velocity, error, whether the row is a member, group"""

    def column(self, key: str, counts: Callable[[tuple[Any, ...]], bool]) -> list[Any]:
        place = list(COLUMNS).index(key)
        return [row[place] if counts(row) else None for row in self.rows]


def sample(*rows: tuple[Any, ...]) -> Sample:
    return Sample([(*row, 1.0, "a")[:5] if len(row) < 4 else row for row in rows])


SAMPLES_OF = {
    "nebulae": Sample(
        [
            (float(d), float(v), 20.0 + 7 * (at % 5), float(at % 4 != 1), "abc"[at % 3])
            for at, (d, v) in enumerate(zip(DISTANCES, VELOCITIES, strict=True))
        ]
    ),
    "galaxies": Sample([(None, float(v), 50.0, float(9e3 < v < 3e4), "Corona") for v in GALAXIES]),
    "gaps": Sample(
        [
            (10.0, 710.0, 30.0, 1.0, "Leo"),
            (None, None, None, None, None),
            (20.0, "cloud", 30.0, 1.0, "Leo"),
            ("?", 1380.0, 25.0, 1.0, " LEO "),
            (30.0, 2150.0, None, 1.0, "leo"),
            (35.5, 2451.5, 40.0, "no", "Virgo*"),
            (41.0, 2900.0, "wide", 1.0, "Virgo*"),
            (42.0, 2950.0, 20.0, 1.0, "virgo*"),
            (52.0, 3600.0, 25.0, 1.0, None),
            (58.0, 4100.0, 35.0, 1.0, "Virgo?"),
            (61.0, 4350.0, 45.0, 0.0, 'the "great" wall'),
            (63.0, 4300.0, 45.0, 1.0, 'THE "Great" Wall'),
            (65.0, 4460.0, 5.0, 1.0, "Virgo"),
        ]
    ),
    "nothing": sample((None, None, None), (None, None, None)),
    "one row": sample((12.0, 850.0, 30.0)),
    "two rows": sample((12.0, 850.0, 30.0), (None, None, None), (31.0, 2200.0, 60.0)),
    "equal distances": sample(*((0.1, 700.0 + 10 * at, 30.0 + at) for at in range(7))),
    "equal velocities": sample(*((5.0 + at, 1e4 / 3, 30.0) for at in range(7))),
    "all at the origin": sample((0.0, 10.0, 5.0), (0.0, -20.0, 5.0), (0.0, 15.0, 5.0)),
    "most equal": sample(*((1.0 + at, v, 30.0) for at, v in enumerate([7e3] * 5 + [7.1e3, 6.8e3]))),
    "half equal": sample(*((1.0 + at, v, 30.0) for at, v in enumerate([7e3, 7e3, 7.1e3, 6.8e3]))),
    "ties": sample(
        *((2.0 * at, v, 30.0) for at, v in enumerate([7e3, 7.1e3, 7.1e3, 6.8e3, 7e3, 7.3e3, 6.8e3]))
    ),
    "far and slow": sample(*((4e2 + at, 29979.2 + 0.01 * at**2, 0.003) for at in range(9))),
    "an error of zero": sample((1.0, 70.0, 0.0), (2.0, 150.0, 10.0), (3.0, 200.0, 10.0)),
    "an error below zero": sample((1.0, 70.0, 5.0), (2.0, 150.0, -10.0), (3.0, 200.0, 10.0)),
    "a distance below zero": sample((1.0, 70.0, 5.0), (-2.0, 150.0, 10.0), (3.0, 200.0, 10.0)),
    "zero that does not count": Sample(
        [
            (1.0, 70.0, 5.0, 1.0, "a"),
            (2.0, 150.0, 0.0, 0.0, "b"),
            (-3.0, 200.0, 9.0, 0.0, "b"),
            (4.0, 270.0, 9.0, 1.0, "a"),
            (5.0, 370.0, 9.0, 1.0, "b"),
            (6.0, 410.0, 9.0, 1.0, "a"),
        ]
    ),
}


@dataclass(frozen=True)
class Case:
    """A call: `over` gives the column of each sample, `words` what is written in the formula."""

    function: str
    over: dict[str, str]
    words: dict[str, Any] = field(default_factory=dict)
    where: bool = False
    by: bool = False

    def __str__(self) -> str:
        given = {**self.over, **self.words}
        return f"{self.function} {given}{' where' * self.where}{' by' * self.by}"

    def formula(self, steps: Steps) -> str:
        given: dict[str, Any] = {key: cell(column) for key, column in self.over.items()}
        found = guarded_sample(
            CATALOGUE[self.function],
            {**given, **self.words},
            cell("member") if self.where else None,
            cell("group") if self.by else None,
        )
        return found.mapped(steps.taken_out).formula()

    def of(self, rows: Sample, at: int) -> Value:
        """Give what Python gives in a row of a sheet."""
        group = folded(rows.rows[at][4])
        if self.by and not group:
            return ErrorCell("#N/A")

        def counts(row: tuple[Any, ...]) -> bool:
            return (not self.where or row[3] == 1.0) and (not self.by or folded(row[4]) == group)

        ranges = {key: rows.column(column, counts) for key, column in self.over.items()}
        try:
            result: float = CATALOGUE[self.function](**ranges, **self.words)
        except CellError as error:
            return ErrorCell(error.shown)
        return result


def folded(text: Any) -> str:
    return str(text or "").strip().lower()


def cell(column: str) -> Any:
    return name(f"${COLUMNS[column]}@")


def cases() -> list[Case]:
    made = []
    for part in ("mean", "sigma", "chi2", "count"):
        over = {"values": "velocity", "sigmas": "sigma"}
        made.append(Case("MEAN_WEIGHTED", {"values": "velocity"}, {"part": part, "sigmas": 25.0}))
        made += [
            Case("MEAN_WEIGHTED", over, {"part": part}, where, by)
            for where, by in product((False, True), repeat=2)
        ]
    over = {"velocities": "velocity"}
    for method, part in product(("standard", "gapper", "biweight"), ("sigma", "center", "count")):
        words = {"method": method, "part": part}
        made += [
            Case("VELOCITY_DISPERSION", over, {**words, "z_system": z}, where)
            for z, where in ((0.0, False), (0.0, True), (0.07, True))
        ]
    words = {"method": "standard", "part": "error"}
    made += [Case("VELOCITY_DISPERSION", over, words, where) for where in (False, True)]
    words = {"method": "standard", "part": "center"}
    made.append(Case("VELOCITY_DISPERSION", over, words, by=True))
    for part, origin in product(
        ("slope", "slope_error", "intercept", "scatter", "count"), (True, False)
    ):
        choice: dict[str, Any] = {"part": part, "through_origin": origin}
        over = {"distances": "distance", "velocities": "velocity"}
        made += [
            Case("HUBBLE_FIT", over, choice),
            Case("HUBBLE_FIT", {**over, "sigmas": "sigma"}, choice),
            Case("HUBBLE_FIT", over, choice, where=True),
            Case("HUBBLE_FIT", {**over, "sigmas": "sigma"}, choice, by=True),
        ]
    return made


CASES = cases()


def cases_of(title: str) -> list[Case]:
    """Give what is asked of a sample; galaxies without distances are asked for their dispersion."""
    return [case for case in CASES if title != "galaxies" or "velocities" in case.over]


def formulas_of(cases: list[Case], length: int) -> tuple[list[str], Steps]:
    """Give the cases' formulas over that many rows, with the working columns they share."""

    def column(place: int) -> str:
        return f"${get_column_letter(7 + len(cases) + place)}"

    steps = Steps(
        lambda place: f"{column(place)}@",
        lambda place: f"{column(place)}$1:{column(place)}${length}",
    )
    return [case.formula(steps) for case in cases], steps


def asked(case: Case, rows: Sample) -> range:
    """Give the rows in which a case stands: every one, where each may belong to another group."""
    return range(len(rows.rows) if case.by and len(rows.rows) < 30 else 1)


@pytest.fixture(scope="module")
def workbook(tmp_path_factory: pytest.TempPathFactory) -> Path:
    made = Workbook()
    made.remove(made.worksheets[0])
    for title, rows in SAMPLES_OF.items():
        sheet = made.create_sheet(title)
        cases = cases_of(title)
        formulas, steps = formulas_of(cases, len(rows.rows))
        for at, row in enumerate(rows.rows):
            for place, value in enumerate(row, 1):
                written = sheet.cell(at + 1, place, value)
                if isinstance(value, str):
                    written.data_type = "s"
            for place, (case, formula) in enumerate(zip(cases, formulas, strict=True), 7):
                if at in asked(case, rows):
                    sheet.cell(at + 1, place, formula.replace("@", str(at + 1)))
            for place, step in enumerate(steps.formulas, 7 + len(cases)):
                sheet.cell(at + 1, place, step.replace("@", str(at + 1)))
    return save(made, tmp_path_factory.mktemp("samples") / "samples.xlsx")


def agree(found: Value, expected: Value) -> bool:
    if isinstance(expected, float) and type(found) is float:
        return isclose(found, expected, rel_tol=1e-9, abs_tol=1e-9)
    return type(found) is type(expected) and found == expected


@every_engine
def test_samples_give_what_python_gives(workbook: Path, engine: str) -> None:
    found = recalculated(workbook, engine)
    wrong = []
    for title, rows in SAMPLES_OF.items():
        for place, case in enumerate(cases_of(title), 7):
            for at in asked(case, rows):
                here = found[title][f"{get_column_letter(place)}{at + 1}"]
                expected = case.of(rows, at)
                if not agree(here, expected):
                    wrong.append((title, str(case), at + 1, here, expected))
    assert not wrong, "\n".join(map(str, wrong))


def test_the_samples_show_results_and_each_kind_of_error() -> None:
    given = [case.of(rows, 0) for rows in SAMPLES_OF.values() for case in CASES]
    assert sum(isinstance(each, float) for each in given) > len(given) / 2
    assert {each.code for each in given if isinstance(each, ErrorCell)} == {"#NUM!", "#N/A"}


def test_every_formula_is_one_that_excel_takes() -> None:
    formulas, steps = formulas_of(CASES, 10_000)
    assert max(map(len, (*formulas, *steps.formulas))) <= LONGEST / 8
    assert len(set(steps.formulas)) == len(steps.formulas)


@pytest.mark.parametrize(
    ("function", "words", "by"),
    [
        ("VELOCITY_DISPERSION", {"method": "biweight", "part": "error"}, False),
        ("VELOCITY_DISPERSION", {"method": "gapper", "part": "error"}, False),
        ("VELOCITY_DISPERSION", {"method": "biweight"}, True),
        ("VELOCITY_DISPERSION", {"method": "biweight", "part": "center"}, True),
        ("VELOCITY_DISPERSION", {"method": name("$F1")}, False),
        ("VELOCITY_DISPERSION", {"part": name("$F1")}, False),
        ("MEAN_WEIGHTED", {"part": name("$F1")}, False),
        ("HUBBLE_FIT", {"part": name("$F1")}, False),
        ("HUBBLE_FIT", {"through_origin": name("$F1")}, False),
        ("REDSHIFT_SOLVED", {}, False),
    ],
)
def test_what_has_no_portable_spelling_is_left_to_fill(
    function: str, words: dict[str, Any], by: bool
) -> None:
    samples = [each.name for each in CATALOGUE[function].arguments if takes_rows(each)]
    over: dict[str, Any] = {
        argument: name(f"${letter}@") for argument, letter in zip(samples, "ABC", strict=False)
    }
    group = name("$E@") if by else None
    with pytest.raises(NotTraceable):
        guarded_sample(CATALOGUE[function], {**over, **words}, None, group)
