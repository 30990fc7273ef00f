"""Arguments that take a whole range of cells: a sample of numbers, a function's arguments."""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from cellfuncs.catalogue import Argument, Choice, Function, Number, Word, find, shown
from cellfuncs.errors import InputError, MissingInput, is_empty

Floats = NDArray[np.float64]


def cells_of(value: Any) -> Iterator[Any]:
    """Yield what a range holds, row by row; anything else is a range of one."""
    if isinstance(value, np.ndarray):
        value = value.tolist()
    if isinstance(value, (list, tuple, range)):
        for each in value:
            yield from cells_of(each)
    else:
        yield value


def is_range(value: Any) -> bool:
    if isinstance(value, np.ndarray):
        return value.ndim > 0
    return isinstance(value, (list, tuple, range))


def is_remark(value: Any) -> bool:
    """Tell whether a cell of a sample holds words rather than a number in the form of a text."""
    return isinstance(value, str) and not reads_as_number(value)


def reads_as_number(text: str) -> bool:
    """A text of digits is a number that a spreadsheet has not understood; nobody's remark."""
    try:
        float(text.strip().replace(",", "."))
    except ValueError:
        return False
    return any(letter.isdigit() for letter in text)


@dataclass(frozen=True, kw_only=True)
class WholeRange(Argument):
    """An argument that takes a range as one thing, rather than cell by cell."""

    def is_column(self, value: Any) -> bool:
        return False


@dataclass(frozen=True)
class Numbers:
    """A sample as a formula takes it: one number a cell, NaN where nothing or a remark stands.

    `single` tells that it was one number rather than a range.
    """

    argument: "Sample"
    values: Floats
    single: bool = False

    @property
    def left_out(self) -> bool:
        """Whether this optional sample was not given, or holds nothing."""
        return not self.values.size

    def __repr__(self) -> str:
        return f"{self.values.size} numbers"


@dataclass(frozen=True, kw_only=True)
class Sample(WholeRange):
    """A range of numbers of which each is as `each` says; empty cells and remarks do not count.

    `otherwise` says what happens where an optional sample is left out.
    """

    each: Number
    otherwise: str = ""

    @property
    def unit(self) -> str:
        return self.each.unit

    @property
    def like(self) -> str:
        return self.each.like

    @property
    def allowed(self) -> str:
        return f"a range of cells, each {self.each.allowed}; empty cells and remarks do not count"

    @property
    def default_text(self) -> str:
        return self.otherwise

    def parsed(self, value: Any) -> Numbers:
        if isinstance(value, Numbers):
            return value
        if value is None and self.optional:
            return Numbers(self, np.empty(0))
        if not is_range(value):
            # a remark alone is no sample
            number = replace(self.each, name=self.name).parsed(value)
            return Numbers(self, np.array([number]), single=True)
        return Numbers(self, self._numbers(list(cells_of(value))))

    def _numbers(self, cells: list[Any]) -> Floats:
        numbers = np.full(len(cells), np.nan)
        remark: str | None = None
        for index, cell in enumerate(cells):
            if type(cell) is float:
                numbers[index] = cell
            elif is_remark(cell) and not is_empty(cell):
                remark = remark or cell
            elif not is_empty(cell):
                # what is allowed is asked once it is known which rows count
                numbers[index] = Number(meaning="", name=self.place(index))._as_float(cell)
        if np.isnan(numbers).all():
            if remark is not None:
                raise InputError(f"{self.name} holds no number, only text: {shown(remark)}")
            if self.optional:
                return np.empty(0)
            raise MissingInput(f"{self.name} is empty")
        return numbers

    def place(self, index: int) -> str:
        return f"{self.name}, cell {index + 1},"

    def check(self, index: int, number: float) -> None:
        """Raise where the number in that cell is not allowed."""
        replace(self.each, name=self.place(index)).parsed(number)


def in_rows(*samples: Numbers) -> list[Floats]:
    """Return the samples without the rows in which one of them holds no number.

    A sample of a single number stands for one that repeats it in each row; one that was left out
    stays empty. Raises InputError where the ranges differ in size, MissingInput where no row is
    left, DomainError for a number in a row that counts and is not allowed.
    """
    given = [each for each in samples if not each.left_out]
    sizes = {each.argument.name: each.values.size for each in given if not each.single}
    if len(set(sizes.values())) > 1:
        words = " and ".join(f"{name} has {size} cells" for name, size in sizes.items())
        raise InputError(f"{words}; ranges that belong together must be of one size")
    size = max(sizes.values(), default=1)
    columns = [np.broadcast_to(each.values, size) for each in given]
    counts = ~np.isnan(columns).any(axis=0)
    if not counts.any():
        names = " and ".join(each.argument.name for each in given)
        raise MissingInput(f"there is no row with a number in {names}")
    for each, column in zip(given, columns, strict=True):
        low, high = each.argument.each.open_interval
        wrong = np.flatnonzero(counts & ~((column > low) & (column < high)))
        if wrong.size:
            index = int(wrong[0])
            if each.single:
                replace(each.argument.each, name=each.argument.name).parsed(float(column[index]))
            each.argument.check(index, float(column[index]))
    kept = iter([column[counts] for column in columns])
    return [np.empty(0) if each.left_out else next(kept) for each in samples]


@dataclass(frozen=True)
class Measured:
    """Wavelengths with their errors and strengths, one element a line; NaN where not given."""

    wavelengths: Floats
    errors: Floats
    strengths: Floats

    def __repr__(self) -> str:
        return f"{self.wavelengths.size} wavelengths"


@dataclass(frozen=True, kw_only=True)
class MeasuredLines(WholeRange):
    """Wavelengths, or rows of two or three columns: wavelength, its error, the line's strength."""

    wavelength: Number
    error: Number
    strength: Number

    @property
    def unit(self) -> str:
        return self.wavelength.unit

    @property
    def allowed(self) -> str:
        return (
            "a range of wavelengths, or two or three columns: wavelength, its 1-σ error, the line's"
            f" strength; wavelengths and errors {self.wavelength.allowed}"
        )

    def parsed(self, value: Any) -> Measured:
        if not self._has_columns(value):
            found = self._sample(self.wavelength, self.name).parsed(value)
            (wavelengths,) = in_rows(found)
            nothing = np.full(wavelengths.shape, np.nan)
            return Measured(wavelengths, nothing, nothing)
        rows = [list(row) for row in value]
        first = self._sample(self.wavelength, f"{self.name}, column 1").parsed(
            [row[0] for row in rows]
        )
        there = ~np.isnan(first.values)
        columns = [in_rows(first)[0]]
        for number, kind in enumerate((self.error, self.strength), start=2):
            if number > len(rows[0]):
                columns.append(np.full(columns[0].shape, np.nan))
                continue
            name = f"{self.name}, column {number}"
            sample = replace(self._sample(kind, name), default=None)
            found = sample.parsed(
                [row[number - 1] if here else None for row, here in zip(rows, there, strict=True)]
            )
            if found.left_out:
                columns.append(np.full(columns[0].shape, np.nan))
                continue
            in_rows(found)
            columns.append(found.values[there])
        return Measured(*columns)

    @staticmethod
    def _sample(each: Number, name: str) -> Sample:
        return Sample(meaning=each.meaning, each=each, name=name)

    @staticmethod
    def _has_columns(value: Any) -> bool:
        if not is_range(value) or len(value) < 2 or not all(map(is_range, value)):
            return False
        widths = {len(row) for row in value}
        return len(widths) == 1 and widths <= {2, 3}


@dataclass(frozen=True, kw_only=True)
class Cells(WholeRange):
    """A range of which each cell is an argument of its own, or one such argument."""

    @property
    def allowed(self) -> str:
        return "a cell, or a row or column of cells, one an argument in their order"

    def parsed(self, value: Any) -> tuple[Any, ...]:
        if not is_range(value) and is_empty(value):
            raise MissingInput(f"{self.name} is empty")
        return tuple(cells_of(value))


@dataclass(frozen=True, kw_only=True)
class FunctionName(Word):
    """The name of a function of the catalogue; the formula takes the function."""

    @property
    def allowed(self) -> str:
        return "one that makes a number out of numbers"

    def resolved(self, text: str) -> Function:
        return find(text)


@dataclass(frozen=True, kw_only=True)
class Part(Choice):
    """Which of a function's numbers comes back; `units` gives the unit of each by its name."""

    units: Mapping[str, str]


def part_of(**units: str) -> Part:
    """Return the argument that chooses one of these."""
    return Part(meaning="which number", choices=tuple(units), units=units)
