"""Functions of whole columns in a recipe's formula: of a sheet's rows, or of a group of them.

`mean_weighted(redshift, error)` takes the two columns; with `by=spectrum` a row has the result of
the rows that name the same spectrum, with `where=member` only rows count in which `member` is 1.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from cellfuncs.arguments import MeasuredLines, Sample
from cellfuncs.bridges.formula import Guarded
from cellfuncs.bridges.sample import guarded_sample
from cellfuncs.catalogue import Argument, Function
from cellfuncs.errors import CellError, MissingInput, is_empty
from cellfuncs.symbols import NotTraceable
from workbooks.expression import (
    TEXT,
    Arithmetic,
    Call,
    Cells,
    Columns,
    Either,
    Key,
    Literal,
    Node,
    Row,
    Scaled,
)


def takes_rows(argument: Argument) -> bool:
    """Tell whether an argument takes a whole column."""
    return isinstance(argument, (Sample, MeasuredLines))


def of_group(text: Any) -> str:
    """Return a text as groups are told apart: neither case nor blanks around it count.

    Runs of blanks within count as one, as the function TRIM has it, and 12 is the text 12.
    """
    words = f"{text:.15g}" if isinstance(text, float) else str(text)
    return " ".join(filter(None, words.lower().split(" ")))


@dataclass(frozen=True)
class Gathered(Node):
    """A function of samples; an argument that is left out is None."""

    function: Function
    arguments: tuple[Node | None, ...]
    unit: str
    by: Key | None = None
    where: Key | None = None

    def parts(self) -> Iterator[Node]:
        yield self
        for part in (*self.arguments, self.by, self.where):
            if part is not None:
                yield from part.parts()

    def in_row(self, row: Row) -> Any:
        columns = row.whole
        if columns is None:
            raise MissingInput("the rows are not there")
        if self.by is None:
            return self._of_rows(columns, ...)
        text = row.values[self.by.key]
        if isinstance(text, CellError):
            raise text
        if is_empty(text):
            raise MissingInput(f"{self.by.key} is empty")
        return self._of_rows(columns, self._rows_of(columns).get(of_group(text), []))

    def of_columns(self, columns: Columns) -> Any:
        nothing = None if self.unit == TEXT else np.nan
        if self.by is None:
            try:
                return self._of_rows(columns, ...)
            except CellError:
                return nothing
        texts = columns.values[self.by.key]
        result = np.full(len(texts), nothing, dtype=object if self.unit == TEXT else np.float64)
        for rows in self._rows_of(columns).values():
            try:
                result[rows] = self._of_rows(columns, rows)
            except CellError:
                continue
        return result

    def _rows_of(self, columns: Columns) -> dict[str, list[int]]:
        assert self.by is not None
        rows: dict[str, list[int]] = {}
        for index, text in enumerate(columns.values[self.by.key].tolist()):
            if not is_empty(text):
                rows.setdefault(of_group(text), []).append(index)
        return rows

    def _of_rows(self, columns: Columns, rows: Any) -> Any:
        counts = None
        if self.where is not None:
            counts = columns.values[self.where.key] == 1
        given: list[Any] = []
        for argument, part in zip(self.function.arguments, self.arguments, strict=True):
            if part is None:
                given.append(None)
                continue
            value = part.of_columns(columns)
            if takes_rows(argument) and np.ndim(value):
                if counts is not None:
                    value = np.where(counts, value, np.nan)
                value = value[rows]
            given.append(value)
        return self.function(*given)

    def of_cells(self, cells: Cells) -> Guarded:
        if cells.calls is not None:
            return self._as_call(cells)
        given: dict[str, Any] = {}
        for argument, part in zip(self.function.arguments, self.arguments, strict=True):
            if isinstance(part, Literal):
                given[argument.name] = part.value
            elif part is not None:
                given[argument.name] = part.of_cells(cells).value
        only = self.where.of_cells(cells).value if self.where else None
        by = self.by.of_cells(cells).value if self.by else None
        return guarded_sample(self.function, given, only, by)

    def _as_call(self, cells: Cells) -> Guarded:
        raise NotTraceable("a call of the add-in over whole columns")


def row_keys(tree: Node) -> Iterator[str]:
    """Yield the keys of which a formula takes each row's own value."""
    match tree:
        case Key(key=key):
            yield key
        case Scaled(part=part):
            yield from row_keys(part)
        case Arithmetic(left=one, right=other) | Either(first=one, second=other):
            yield from row_keys(one)
            yield from row_keys(other)
        case Call(arguments=arguments):
            for given in arguments:
                if given is not None:
                    yield from row_keys(given)
        case Gathered(by=Key(key=key)):
            yield key
