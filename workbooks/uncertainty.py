"""The ± columns: how the errors of a sheet's inputs go through its formulas.

First order. A formula that builds on other computed columns is followed down to the inputs, so that
what two of them have in common is counted once; the errors of different inputs are taken to be
independent of one another.
"""

from abc import ABC, abstractmethod
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Any, TypeAlias

import numpy as np

from cellfuncs.bridges.formula import Guarded, guarded
from cellfuncs.catalogue import Numeric
from cellfuncs.errors import CellError, DomainError, InputError, MissingInput, is_empty
from cellfuncs.propagation import combined, slope_function
from cellfuncs.symbols import Expr, Real, kept, log, node
from workbooks.expression import (
    TEXT,
    TIME,
    Arithmetic,
    Call,
    Cells,
    Columns,
    Either,
    Key,
    Node,
    Row,
    Scaled,
    given_in_cells,
)

Slopes: TypeAlias = dict[str, Real]
"""Of a formula: its derivative by each input that has an error"""


class World(ABC):
    """Numbers or symbols in which a formula's slopes are worked out."""

    def __init__(self, trees: Mapping[str, Node], inputs: Mapping[str, Node]) -> None:
        self.trees = trees
        self.inputs = inputs
        self._known: dict[str, Slopes] = {}

    @abstractmethod
    def value(self, part: Node) -> Real:
        """Return what a part of a formula is."""

    @abstractmethod
    def partial(self, call: Call, at: int) -> Real:
        """Return a function's derivative by one of its arguments."""

    @abstractmethod
    def of_key(self, key: str, by: str, slope: Real) -> Real:
        """Return the slope of a computed column, to be used by others."""

    @abstractmethod
    def chosen(self, part: Either, first: Real, second: Real) -> Real:
        """Return what counts of the two, as the formula itself chooses."""

    def slopes_of(self, key: str) -> Slopes:
        """Return the slopes of a computed column."""
        if key not in self._known:
            found = self.slopes(self.trees[key])
            self._known[key] = {by: self.of_key(key, by, each) for by, each in found.items()}
        return self._known[key]

    def slopes(self, part: Node | None) -> Slopes:
        match part:
            case Key(key=key) if key in self.inputs:
                return {key: 1.0}
            case Key(key=key, unit=unit) if key in self.trees and unit not in (TEXT, TIME):
                return self.slopes_of(key)
            case Scaled(part=inner, factor=factor):
                return {by: each * factor for by, each in self.slopes(inner).items()}
            case Arithmetic():
                return self._of_arithmetic(part)
            case Either(first=first, second=second):
                one, other = self.slopes(first), self.slopes(second)
                return {
                    by: self.chosen(part, one.get(by, 0.0), other.get(by, 0.0))
                    for by in (*one, *(each for each in other if each not in one))
                }
            case Call(arguments=arguments):
                found: Slopes = {}
                for at, argument in enumerate(arguments):
                    is_number = isinstance(part.function.arguments[at], Numeric)
                    by_inputs = self.slopes(argument) if is_number else {}
                    if by_inputs:
                        partial = self.partial(part, at)
                        _add(found, {by: partial * each for by, each in by_inputs.items()})
                return found
        return {}

    def _of_arithmetic(self, part: Arithmetic) -> Slopes:
        left, right = self.slopes(part.left), self.slopes(part.right)
        found: Slopes = {}
        if part.operation in "+-":
            _add(found, left)
            _add(
                found, {by: each if part.operation == "+" else -each for by, each in right.items()}
            )
            return found
        if not left and not right:
            return found
        u, v = self.value(part.left), self.value(part.right)
        if part.operation == "*":
            _add(found, {by: each * v for by, each in left.items()})
            _add(found, {by: each * u for by, each in right.items()})
        elif part.operation == "/":
            _add(found, {by: each / v for by, each in left.items()})
            _add(found, {by: -each * u / v / v for by, each in right.items()})
        else:
            _add(found, {by: v * u ** (v - 1) * each for by, each in left.items()})
            _add(found, {by: u**v * log(u) * each for by, each in right.items()})
        return found


def _add(found: Slopes, more: Slopes) -> None:
    for by, each in more.items():
        found[by] = found[by] + each if by in found else each


class OfColumns(World):
    """Arrays, a number a row."""

    def __init__(
        self, trees: Mapping[str, Node], inputs: Mapping[str, Node], columns: Columns
    ) -> None:
        super().__init__(trees, inputs)
        self.columns = columns

    def value(self, part: Node) -> Real:
        return part.of_columns(self.columns)

    def partial(self, call: Call, at: int) -> Real:
        slope = slope_function(call.function, call.function.arguments[at].name)
        return slope.column(call.given_columns(self.columns))[0]

    def of_key(self, key: str, by: str, slope: Real) -> Real:
        return slope

    def chosen(self, part: Either, first: Real, second: Real) -> Real:
        return np.where(part.falls_back(self.columns), second, first)


class OfCells(World):
    """Symbols of a row's cells."""

    def __init__(self, trees: Mapping[str, Node], inputs: Mapping[str, Node], cells: Cells) -> None:
        super().__init__(trees, inputs)
        self.cells = cells

    def value(self, part: Node) -> Real:
        return part.of_cells(self.cells).value

    def partial(self, call: Call, at: int) -> Real:
        slope = slope_function(call.function, call.function.arguments[at].name)
        given, _ = given_in_cells(call, self.cells)
        return guarded(slope, given).value

    def of_key(self, key: str, by: str, slope: Real) -> Real:
        return kept(f"∂{key}/∂{by}", slope) if isinstance(slope, Expr) else slope

    def chosen(self, part: Either, first: Real, second: Real) -> Real:
        return Expr("IF", part.falls_back_in_cells(self.cells), node(second), node(first))


@dataclass(frozen=True)
class Uncertainty(Node):
    """The 1-σ error of a computed column."""

    key: str
    unit: str
    trees: Mapping[str, Node]
    """Of the computed columns, this one among them"""
    sigmas: Mapping[str, Node]
    """The error of each input that has one, in the unit of that input"""

    def _by(self) -> list[str]:
        """Return the inputs with errors that the column builds on."""
        found: dict[str, None] = {}
        waiting = [self.key]
        while waiting:
            for part in self.trees[waiting.pop()].parts():
                if isinstance(part, Key):
                    if part.key in self.sigmas:
                        found[part.key] = None
                    elif part.key in self.trees and part.unit not in (TEXT, TIME):
                        waiting.append(part.key)
        return list(found)

    def _cell(self, by: str) -> Key:
        """Return the column with the error of an input."""
        sigma = self.sigmas[by]
        part = sigma.part if isinstance(sigma, Scaled) else sigma
        assert isinstance(part, Key)
        return part

    def parts(self) -> Iterator[Node]:
        yield self
        yield Key(self.key, self.unit)
        for by in self._by():
            yield from self.sigmas[by].parts()

    def in_row(self, row: Row) -> Any:
        value = row.values[self.key]
        if isinstance(value, CellError):
            raise value
        if is_empty(value):
            raise MissingInput(f"{self.key} is empty")
        for by in self._by():
            given = self._cell(by)
            sigma = given.in_row(row)
            if is_empty(sigma):
                if not is_empty(row.values[by]):
                    raise MissingInput(f"{given.key} is empty")
                continue
            if isinstance(sigma, bool) or not isinstance(sigma, (int, float)):
                raise InputError(f"{given.key} is {sigma!r}, not a number")
            if sigma < 0:
                raise DomainError(
                    f"{given.key} is {sigma:g} {given.unit}".strip() + "; an error is 0 or more"
                )
        raise DomainError(f"no finite error at {self.key} = {value!r}")

    def of_columns(self, columns: Columns) -> Any:
        slopes = OfColumns(self.trees, self.sigmas, columns).slopes_of(self.key)
        squares: Any = 0.0
        for by in self._by():
            sigma = self.sigmas[by].of_columns(columns)
            sigma = np.where(sigma >= 0, sigma, np.nan)
            # the error of an input that is not there counts for nothing
            missing = columns.empty.get(by)
            if missing is not None:
                sigma = np.where(missing, 0.0, sigma)
            slope = slopes.get(by, 0.0)
            squares = squares + np.where(sigma == 0, 0.0, slope * sigma) ** 2
        value = columns.values[self.key]
        return np.where(np.isnan(value), np.nan, np.sqrt(squares))

    def of_cells(self, cells: Cells) -> Guarded:
        slopes = OfCells(self.trees, self.sigmas, cells).slopes_of(self.key)
        own = cells.symbols[self.key]
        blank: list[Expr] = [own]
        typed: list[Expr] = [Expr("ISNUMBER", own)]
        allowed: list[Expr] = []
        terms: list[tuple[Expr, Expr]] = []
        for by in self._by():
            # asked of the cell itself: taken to another unit, an empty one is 0
            given = self._cell(by).of_cells(cells).value
            sigma = self.sigmas[by].of_cells(cells).value
            filled = Expr("NOT", Expr("blank", cells.symbols[by]))
            blank.append(Expr("IF", filled, given, node("-")))
            empty = Expr("blank", given)
            typed.append(Expr("OR", empty, Expr("ISNUMBER", given)))
            allowed.append(Expr("IF", empty, node(True), given >= 0))
            terms.append((node(slopes.get(by, 0.0)), Expr("IF", filled, sigma, node(0.0))))
        return Guarded(combined(terms), tuple(blank), tuple(typed), tuple(allowed))
