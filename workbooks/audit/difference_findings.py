"""Computed values that their inputs do not give now."""

from collections.abc import Iterator, Sequence
from functools import lru_cache
from typing import Any, Final

import numpy as np

from cellfuncs import units
from cellfuncs.errors import CellError
from workbooks.audit.examined import Examined
from workbooks.audit.findings import Spot, quoted
from workbooks.computation import Computation
from workbooks.headings import Heading
from workbooks.logbook import ErrorValue
from workbooks.matching import Match, folded


def of_results(sheet: Examined) -> Iterator[Spot]:
    """Yield the computed cells that hold something else than their inputs give."""
    computed, match = sheet.computed, sheet.log.match
    if computed is None or match is None or sheet.made_otherwise:
        return
    headings = [
        heading
        for heading in sheet.log.headings
        if heading.column and heading.column.key in computed.results
    ]
    from_template = "recipe_name" in sheet.logbook.named_cells
    never_calculated = _never_calculated(sheet)
    for row in _suspects(sheet, computed, match, headings):
        if sheet.trails.is_made_otherwise(row):
            continue
        ours = from_template or sheet.trails.is_ours(row)
        if not ours and all(sheet.value(row, each.number) is None for each in headings):
            continue
        for heading in headings:
            at = (row, heading.number)
            held = sheet.value(*at)
            if at in sheet.told or isinstance(held, ErrorValue):
                continue
            expected = sheet.expected(row, heading)
            by_formula = row in sheet.formulas.by_column.get(heading.number, {})
            nothing_due = by_formula or isinstance(expected, CellError) or never_calculated
            if held is None and nothing_due:
                continue
            sentence = _difference(expected, held, heading.unit or "", by_formula, ours)
            if sentence:
                yield *at, "differs", sentence


def _suspects(
    sheet: Examined, computed: Computation, match: Match, headings: Sequence[Heading]
) -> Sequence[int]:
    """Return the rows in which some cell is not plainly what it should be."""
    good = np.ones(len(computed.rows), dtype=bool)
    for heading in headings:
        key = heading.column.key if heading.column else ""
        held = [sheet.value(row, heading.number) for row in computed.rows]
        expected = computed.results[key].values
        if expected.dtype == np.float64:
            numbers = np.array(
                [each if type(each) is float else np.nan for each in held], dtype=np.float64
            )
            in_unit = expected / match.places[key].to_recipe
            # no tolerance is closer than this; where there is no number, nothing is as it should
            with np.errstate(invalid="ignore"):
                same = np.abs(numbers - in_unit) <= CLOSEST * np.abs(in_unit)
        else:
            pairs = zip(held, expected, strict=True)
            same = np.array([one == other for one, other in pairs], dtype=bool)
        good &= same
    return [row for row, is_good in zip(computed.rows, good, strict=True) if not is_good]


def _never_calculated(sheet: Examined) -> bool:
    """Tell whether the sheet's formulas hold no results at all, as in a template never opened."""
    return any(sheet.formulas.by_column.values()) and all(
        sheet.value(row, number) is None
        for number, cells in sheet.formulas.by_column.items()
        for row in cells
        if row in sheet.index
    )


def _difference(expected: Any, held: Any, unit: str, by_formula: bool, ours: bool) -> str:
    if isinstance(expected, CellError):
        if isinstance(held, str):
            return ""
        return f"holds {quoted(held)}, but its inputs give no result: {expected}"
    if held is None:
        return f"is empty, but its inputs give {quoted(expected)}"
    if isinstance(expected, str) or isinstance(held, str):
        same = (
            isinstance(held, str)
            and isinstance(expected, str)
            and (folded(held) == folded(expected))
        )
        return "" if same else f"holds {quoted(held)}, but its inputs give {quoted(expected)}"
    if type(held) is not float:
        return f"holds {quoted(held)}, but its inputs give {quoted(expected)}"
    if abs(held - expected) <= _tolerance(held, expected, unit, by_formula, ours):
        return ""
    return (
        f"holds {held:.10g}, but its inputs give {expected:.10g} now: it was typed over, or an "
        "input was changed afterwards"
    )


CLOSEST: Final = 1e-9
"""The part of a number that it may always be off"""


def _tolerance(held: float, expected: float, unit: str, by_formula: bool, ours: bool) -> float:
    """Return how far two numbers may lie apart and still be the same computation."""
    size = abs(expected)
    speed = _speed_in(unit)
    if by_formula and not ours:
        # an observatory's own formula has its own constants and rest wavelengths
        return 1e-3 * size + (speed or 1e-5)
    if by_formula:
        # plain formulas follow the Earth to some cm/s
        return CLOSEST * size + (2e-4 * speed or 1e-9)
    exact = CLOSEST * size + (1e-6 * speed or 1e-12)
    if ours:
        return exact
    return max(exact, 0.5001 * 10.0 ** -_decimals(held))


@lru_cache(maxsize=64)
def _speed_in(unit: str) -> float:
    """Return 1 km/s in a unit of velocity, 0 in any other unit."""
    return units.factor("km/s", unit) if units.same_kind(unit, "km/s") else 0.0


def _decimals(value: float) -> int:
    """Return the decimals that a number was typed with."""
    mantissa, _, exponent = repr(value).partition("e")
    decimals = len(mantissa.partition(".")[2].rstrip("0"))
    return decimals - int(exponent or 0)
