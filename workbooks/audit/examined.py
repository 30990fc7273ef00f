"""A sheet that is looked through: its cells and formulas, and what they should hold."""

from collections import Counter
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from datetime import date, datetime, time, timedelta
from functools import cached_property
from typing import Any, Final

from cellfuncs.physics.expansion import Cosmology
from workbooks.audit.formula_cells import FormulaCells, Written, formula_cells
from workbooks.audit.formula_units import Medium
from workbooks.audit.formulas import NotReadable, Part, parsed
from workbooks.audit.header_words import MEDIUM_LABELS, is_date
from workbooks.audit.trails import RowTrails
from workbooks.computation import Computation
from workbooks.files.delimited import DelimitedSheet
from workbooks.headings import Heading, Log
from workbooks.logbook import ErrorValue, Logbook, Sheet
from workbooks.matching import folded
from workbooks.recipe import Problem, Recipe

MOST: Final = 0.6
"""The part of a column's cells that decides what the column holds"""

FEWEST: Final = 3
"""Cells without which nothing is said of what a column usually holds"""


class DateText(str):
    """A date in a file of text, which holds no other dates."""


@dataclass
class Examined:
    """A sheet with a log, and what is known of it before anything is said against it."""

    logbook: Logbook
    log: Log
    recipe: Recipe | None
    settings: Mapping[str, Any]
    cosmology: Cosmology | None
    made_otherwise: bool = False
    """Whether the workbook says that its numbers rest on something else than they would now"""

    def __post_init__(self) -> None:
        self.sheet: Sheet = self.log.sheet
        self.name = self.sheet.name
        self.rows = self.log.rows_in_use
        self.formulas = (
            formula_cells(self.logbook, self.name) if self.sheet.formula_columns else FormulaCells()
        )
        self.trails = RowTrails(self.log, self.cosmology)
        self.is_text = isinstance(self.sheet, DelimitedSheet)
        self._values: dict[int, Sequence[Any]] = {}
        self.told: set[tuple[int, int]] = set()
        """Cells whose value is explained already"""

    @cached_property
    def computed(self) -> Computation | None:
        """What the sheet's inputs give now; None without a recipe that fits"""
        if self.log.match is None or self.cosmology is None:
            return None
        return Computation(self.log.match, self.settings, self.cosmology, cells=self.log.columns)

    def value(self, row: int, number: int) -> Any:
        return self.log.value(row, number)

    def values(self, heading: Heading) -> Sequence[Any]:
        """Return a column's cells in the rows in use; in a file of text, dates are told apart."""
        if heading.number not in self._values:
            values = self.log.values(heading.number)
            if self.is_text:
                texts = {value for value in values if type(value) is str}
                dates = {text: DateText(text) for text in texts if is_date(text)}
                if dates:
                    values = [
                        dates.get(value, value) if type(value) is str else value for value in values
                    ]
            self._values[heading.number] = values
        return self._values[heading.number]

    def cells(self, heading: Heading, *kinds: type) -> Iterator[tuple[int, Any]]:
        """Yield row and value of a column's cells in the rows in use that hold such values."""
        values = self.values(heading)
        # a whole column is told not to have any faster than each cell of it
        if any(issubclass(held, kinds) for held in set(map(type, values))):
            for row, value in zip(self.rows, values, strict=True):
                if isinstance(value, kinds):
                    yield row, value

    @cached_property
    def kinds(self) -> dict[int, str]:
        """What each column holds: by the recipe, or by most of its cells."""
        return {heading.number: self._kind(heading) for heading in self.log.headings}

    def _kind(self, heading: Heading) -> str:
        counted = Counter[str]()
        for held, count in Counter(map(type, self.values(heading))).items():
            counted[_KINDS.get(held, "text")] += count
        counted.pop("nothing", None)
        counted.pop("error", None)
        most, count = counted.most_common(1)[0] if counted else ("", 0)
        total = sum(counted.values())
        column = heading.column
        if column is not None:
            if column.is_number:
                return "number"
            is_time = column.kind == "time" or (most == "time" and count >= MOST * total)
            return "time" if is_time else "text"
        if count >= FEWEST and count >= MOST * total:
            return most
        if heading.unit and heading.in_square_brackets and counted["time"] < MOST * total:
            return "number"
        return ""

    @cached_property
    def has_formulas(self) -> dict[int, bool]:
        """Whether most of a column's filled cells hold formulas."""
        return {heading.number: self._has_formulas(heading) for heading in self.log.headings}

    def _has_formulas(self, heading: Heading) -> bool:
        with_formula = self.formulas.by_column.get(heading.number)
        if not with_formula:
            return False
        values = self.log.values(heading.number)
        count = sum(row in with_formula for row in self.rows)
        # a row whose formula shows nothing counts as well
        filled = sum(
            value is not None or row in with_formula
            for row, value in zip(self.rows, values, strict=True)
        )
        enough = count >= FEWEST or len(with_formula) >= FEWEST
        return enough and (count >= MOST * filled or len(with_formula) > 2 * filled)

    def expected(self, row: int, heading: Heading) -> Any:
        """Return what a cell's inputs give now, in its column's unit, or the CellError that says
        why they give nothing; None where nothing is computed there."""
        index = self.index.get(row)
        if self.computed is None or self.log.match is None or index is None:
            return None
        key = heading.column.key if heading.column else ""
        if key not in self.computed.results or key not in self.log.match.places:
            return None
        expected = self.computed.results[key].at(index)
        if isinstance(expected, float):
            return expected / self.log.match.places[key].to_recipe
        return expected

    @cached_property
    def problems(self) -> dict[int, list[tuple[Problem, str]]]:
        """By row: what the recipe finds wrong with its inputs, and the sentence that says so"""
        if self.computed is None:
            return {}
        return {
            self.computed.rows[index]: [
                (problem, self.computed.remark(index, problem).sentence) for problem in problems
            ]
            for index, problems in self.computed.problems().items()
        }

    @cached_property
    def index(self) -> dict[int, int]:
        """By row: its place among the rows that are computed"""
        rows = self.computed.rows if self.computed else ()
        return {row: index for index, row in enumerate(rows)}

    @staticmethod
    def parts_of(written: Written) -> Part | None:
        """Return a formula's parts, None where it is no formula that can be read."""
        try:
            return parsed(written.text)
        except NotReadable:
            return None

    @cached_property
    def _medium_heading(self) -> Heading | None:
        for heading in self.log.headings:
            choices = (
                {choice.casefold() for choice in heading.column.choices}
                if heading.column
                else set()
            )
            if choices == {"air", "vacuum"} or folded(heading.label) in MEDIUM_LABELS:
                return heading
        return None

    def row_medium(self, row: int) -> Medium | None:
        """Return the medium of a row's wavelengths, where a column names it."""
        heading = self._medium_heading
        value = self.value(row, heading.number) if heading else None
        word = value.strip().casefold() if isinstance(value, str) else ""
        return "air" if word == "air" else "vacuum" if word in ("vacuum", "vac") else None


_KINDS: Final[Mapping[type, str]] = {
    type(None): "nothing",
    bool: "truth",
    float: "number",
    ErrorValue: "error",
    **dict.fromkeys((date, datetime, time, timedelta, DateText), "time"),
}
"""What a cell holds by the type of its value; all else is text"""
