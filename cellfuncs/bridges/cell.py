"""What a cell gets from a function: the part that every live bridge (Calc, worker, Excel) shares.

`answer(name, arguments)` takes the arguments as a spreadsheet hands them and never raises.

An argument is one of
    a float, a str, a bool;
    None: an empty cell, or an argument that the cell left out;
    an `ErrorCell`: the value of a cell that is itself in error;
    a range: a tuple or list of rows, each a tuple or list of the above.

What comes back is a float, a str or an `ErrorCell`; where a range of more than one cell was given,
a list of rows of those. An error is in the place of the element that caused it, so the bridge has
only to turn each `ErrorCell` into its program's own error value: `#NUM!`, `#VALUE!`, `#N/A`,
`#NAME?`, or whichever came in. An argument in error passes its error on.

Ranges stand to one another as in a spreadsheet's own array formula: a single cell, row or column
is repeated along the others, and what lies beyond a shorter range is #N/A. An argument that takes
a whole range (a cosmology's two columns) gets its rows and gives the result no shape. Whatever the
size, the formula runs once over the range (once for each line, medium or cosmology in it).
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import chain
from typing import Any, TypeAlias

import numpy as np

from cellfuncs.catalogue import (
    CATALOGUE,
    Anything,
    Argument,
    CosmologySet,
    Function,
    Numeric,
    left_out,
)
from cellfuncs.errors import CellError, InputError, MissingInput


@dataclass(frozen=True, slots=True)
class ErrorCell:
    """An error value in a cell, by the code that a person sees."""

    code: str

    def __str__(self) -> str:
        return self.code


Result: TypeAlias = float | str | ErrorCell

NAME_UNKNOWN = ErrorCell("#NAME?")
OUTSIDE = ErrorCell(MissingInput.shown)
"""What stands beyond the end of the shorter of two ranges"""
WRONG_CALL = ErrorCell(InputError.shown)


def answer(name: str, arguments: Sequence[Any]) -> Result | list[list[Result]]:
    """Return what the function of that name gives for arguments as a cell hands them."""
    made = CATALOGUE.get(name)
    if made is None:
        return NAME_UNKNOWN
    given = list(arguments)
    # programs hand None for what is left out at the end; without it the call is a quick one
    while given and given[-1] is None:
        given.pop()
    try:
        for value in given:
            kind = type(value)
            if kind is tuple or kind is list or kind is ErrorCell:
                return _answer_with_care(made, given)
        return _single(made, given)
    except Exception:
        # a defect of ours must not take the spreadsheet down with it
        return WRONG_CALL


def _single(made: Function, given: Sequence[Any]) -> Result:
    try:
        result: float | str = made(*given)
    except CellError as error:
        return ErrorCell(error.shown)
    except TypeError:
        return WRONG_CALL
    return result


def _answer_with_care(made: Function, given: Sequence[Any]) -> Result | list[list[Result]]:
    if not made.variadic and len(given) > len(made.arguments):
        return WRONG_CALL
    values: list[Any] = []
    ranges: dict[int, tuple[int, int]] = {}
    takers = list(_takers(made, given))
    for position, (taker, value) in enumerate(zip(takers, given, strict=True)):
        if isinstance(value, (tuple, list)):
            height, width = len(value), len(value[0]) if value else 0
            if height == 1 and width == 1:
                value = value[0][0]
            elif not height or not width:
                value = None
            elif _element_by_element(taker, height, width, value):
                ranges[position] = (height, width)
            else:
                inner = next((e for row in value for e in row if isinstance(e, ErrorCell)), None)
                value = inner or [list(row) for row in value]
        values.append(value)
    shape = (
        max((height for height, _ in ranges.values()), default=1),
        max((width for _, width in ranges.values()), default=1),
    )
    columns = {
        position: _spread(values[position], size, shape) for position, size in ranges.items()
    }
    if made.variadic:
        flat = [_reason(made, takers, row) for row in _rows(values, columns, shape)]
    else:
        flat = _column(made, values, columns, shape)
    if not ranges:
        return flat[0]
    width = shape[1]
    if width == 1:
        return [[each] for each in flat]
    return [flat[start : start + width] for start in range(0, len(flat), width)]


def _takers(made: Function, given: Sequence[Any]) -> Iterator[Argument]:
    """Yield who takes each value: of REASON, the arguments of the function that it asks about."""
    if not made.variadic:
        yield from made.arguments[: len(given)]
        return
    yield made.arguments[0]
    name = given[0] if given else None
    asked = CATALOGUE.get(name.strip().upper()) if isinstance(name, str) else None
    known = asked.arguments if asked is not None and not asked.variadic else ()
    for position in range(len(given) - 1):
        yield known[position] if position < len(known) else made.arguments[0]


def _element_by_element(
    taker: Argument, height: int, width: int, rows: Sequence[Sequence[Any]]
) -> bool:
    if isinstance(taker, CosmologySet):
        return width == 1 or (height == 1 and width > 2)
    if isinstance(taker, Anything):
        return False
    return taker.is_column([list(row) for row in rows[:1]])


def _spread(
    rows: Sequence[Sequence[Any]], size: tuple[int, int], shape: tuple[int, int]
) -> list[Any]:
    """Return a range as one list over the result's cells, row by row."""
    height, width = size
    if height == 1 < shape[0]:
        rows = list(rows) * shape[0]
    if width == 1 < shape[1]:
        rows = [[row[0]] * shape[1] for row in rows]
    elif width < shape[1]:
        rows = [[*row, *[OUTSIDE] * (shape[1] - width)] for row in rows]
    flat = list(chain.from_iterable(rows))
    flat += [OUTSIDE] * (shape[0] * shape[1] - len(flat))
    return flat


def _rows(
    values: Sequence[Any], columns: dict[int, list[Any]], shape: tuple[int, int]
) -> Iterator[list[Any]]:
    for index in range(shape[0] * shape[1]):
        yield [
            columns[position][index] if position in columns else value
            for position, value in enumerate(values)
        ]


def _reason(made: Function, takers: Sequence[Argument], row: Sequence[Any]) -> Result:
    for taker, value in zip(takers, row, strict=True):
        if isinstance(value, ErrorCell):
            if taker is made.arguments[0]:
                return value
            return f"{taker.name} is itself in error: {value}"
    return _single(made, row)


def _column(
    made: Function, values: Sequence[Any], columns: dict[int, list[Any]], shape: tuple[int, int]
) -> list[Result]:
    count = shape[0] * shape[1]
    for position, value in enumerate(values):
        if position not in columns and isinstance(value, ErrorCell):
            return [value] * count
    if not columns:
        return [_single(made, values)]
    passed_on: dict[int, ErrorCell] = {}
    ready: list[Any] = [*values, *[None] * (len(made.arguments) - len(values))]
    for position, column in columns.items():
        ready[position] = _as_array(made.arguments[position], column, passed_on)
    for position, argument in enumerate(made.arguments):
        if argument.optional and left_out(ready[position]):
            ready[position] = argument.default
    results, _ = made.column(ready)
    flat: list[Any] = results.tolist()
    without = results == np.array(None) if made.gives_text else np.isnan(results)
    why = _Why(made, values, columns)
    for index in np.flatnonzero(without).tolist():
        flat[index] = why.at(index)
    for index, error in passed_on.items():
        flat[index] = error
    return flat


class _Why:
    """Tells which error an element without a result shows, each bad value looked at once.

    A wrong name costs a search for its near matches: it may stand in every row.
    """

    def __init__(
        self, made: Function, values: Sequence[Any], columns: dict[int, list[Any]]
    ) -> None:
        self.made = made
        self.values = values
        self.columns = columns
        self.known: dict[tuple[int, type, Any], ErrorCell | None] = {}
        self.of_one = {
            position: self._bad(position, value)
            for position, value in enumerate(
                [*values, *[None] * (len(made.arguments) - len(values))]
            )
            if position not in columns
        }

    def at(self, index: int) -> ErrorCell:
        for position in range(len(self.made.arguments)):
            if position in self.columns:
                value = self.columns[position][index]
                key = (position, type(value), value)
                if key not in self.known:
                    self.known[key] = self._bad(position, value)
                error = self.known[key]
            else:
                error = self.of_one[position]
            if error is not None:
                return error
        alone = _single(
            self.made,
            [
                self.columns[position][index] if position in self.columns else value
                for position, value in enumerate(self.values)
            ],
        )
        return alone if isinstance(alone, ErrorCell) else WRONG_CALL

    def _bad(self, position: int, value: Any) -> ErrorCell | None:
        argument = self.made.arguments[position]
        if argument.optional and left_out(value):
            return None
        try:
            argument.parsed(value)
        except CellError as error:
            return ErrorCell(error.shown)
        return None


def _as_array(argument: Argument, column: list[Any], passed_on: dict[int, ErrorCell]) -> Any:
    """Return a column as the catalogue takes it; put into `passed_on` the errors that it holds."""
    kinds = set(map(type, column))
    if kinds == {float}:
        return np.array(column)
    if ErrorCell in kinds:
        column = column.copy()
        for index, value in enumerate(column):
            if type(value) is ErrorCell:
                passed_on.setdefault(index, value)
                column[index] = None
    if isinstance(argument, CosmologySet):
        # a number is no set's name, but would make the catalogue take the column for a range
        column = [argument.default if value is None else str(value) for value in column]
    elif isinstance(argument, Numeric):
        return np.array([_as_number(argument, value) for value in column])
    # numpy would take a number among texts for a text
    array = np.empty(len(column), dtype=object)
    array[:] = column
    return array


def _as_number(argument: Numeric, value: Any) -> float:
    """Return the number of an element, NaN where there is none."""
    if type(value) is float:
        return value
    if left_out(value):
        return float(argument.default) if argument.optional else np.nan
    try:
        return float(argument.parsed(value))
    except CellError:
        return np.nan
