"""A recipe's formulas as nodes, worked out in each way a workbook needs.

`workbooks.parsing` makes them from the text.
"""

from abc import ABC, abstractmethod
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from cellfuncs.bridges.formula import SETTINGS_COSMOLOGY, Guarded, any_of, guarded
from cellfuncs.catalogue import Argument, CosmologySet, Function, Number
from cellfuncs.errors import CellError, DomainError, InputError, MissingInput, is_empty
from cellfuncs.families.sky import Moment, moment_of_number
from cellfuncs.physics.expansion import Cosmology
from cellfuncs.symbols import Expr, build, name, node

TEXT: Final = "text"

TIME: Final = "time"
"""The unit of a column of moments, whose cells hold whatever a Moment may be written as"""

TRUTH: Final = "truth"

COSMOLOGY_RANGE: Final = "cosmology_parameters"
"""The range of a workbook that holds the cosmology in use, two columns: parameter and value"""


@dataclass(frozen=True)
class Row:
    """What a formula finds in one row: a value a key, None where the cell is empty.

    A value may be the CellError that another column gave instead of a number.
    """

    values: Mapping[str, Any]
    cosmology: Cosmology
    whole: "Columns | None" = None
    """The sheet that the row is of"""


@dataclass(frozen=True)
class Columns:
    """What a formula finds in a sheet: arrays of one length by key, single values for settings.

    Numbers are float64 with NaN, texts object arrays with None; `empty` marks the empty cells.
    """

    values: dict[str, Any]
    empty: Mapping[str, Any]
    cosmology: Cosmology


@dataclass(frozen=True)
class Cells:
    """What a formula finds in a row of a template: a symbol of the cell by key.

    `calls` None asks for plain formulas; a text asks for calls of the add-in's functions, with the
    text before each name, as the program that is to compute the file spells them.
    """

    symbols: Mapping[str, Expr]
    calls: str | None = None


class Node(ABC):
    """A part of a formula; `unit` is None for a bare number, which takes whatever unit is wanted"""

    unit: str | None

    @abstractmethod
    def in_row(self, row: Row) -> Any:
        """Return what one row holds for this part, None where that is an empty cell"""

    @abstractmethod
    def of_columns(self, columns: Columns) -> Any:
        """Return the values of all rows at once, NaN (None for text) where there is none."""

    @abstractmethod
    def of_cells(self, cells: Cells) -> Guarded:
        """Return the plain formula's expression, with its guards."""

    def of_row(self, row: Row) -> Any:
        """Return the whole formula's value in one row; raise a CellError where it has none."""
        value = self.in_row(row)
        if self.unit not in (TEXT, TIME):
            return _number(self, value)
        if value is None:
            raise MissingInput("the result is empty")
        return value

    def parts(self) -> Iterator["Node"]:
        """Yield this node and all below it."""
        yield self


@dataclass(frozen=True)
class Literal(Node):
    value: float | str | bool

    @property
    def unit(self) -> str | None:  # type: ignore[override]
        if isinstance(self.value, bool):
            return TRUTH
        return TEXT if isinstance(self.value, str) else None

    def in_row(self, row: Row) -> Any:
        return self.value

    def of_columns(self, columns: Columns) -> Any:
        return self.value

    def of_cells(self, cells: Cells) -> Guarded:
        return Guarded(node(self.value))


@dataclass(frozen=True)
class Key(Node):
    """A column or a setting."""

    key: str
    unit: str

    def in_row(self, row: Row) -> Any:
        value = row.values[self.key]
        if isinstance(value, CellError):
            raise value
        return value

    def of_columns(self, columns: Columns) -> Any:
        value = columns.values[self.key]
        return np.nan if value is None and self.unit not in (TEXT, TIME) else value

    def of_cells(self, cells: Cells) -> Guarded:
        return Guarded(cells.symbols[self.key])


@dataclass(frozen=True)
class Scaled(Node):
    """A part taken from its own unit to the one that is wanted."""

    part: Node
    factor: float
    unit: str

    def in_row(self, row: Row) -> Any:
        value = self.part.in_row(row)
        # a text or a logical goes on as it is, to be refused by name
        return value * self.factor if type(value) in (int, float) else value

    def of_columns(self, columns: Columns) -> Any:
        return self.part.of_columns(columns) * self.factor

    def of_cells(self, cells: Cells) -> Guarded:
        inner = self.part.of_cells(cells)
        blank, typed = inner.blank, inner.typed
        if inner.value.operation == "name":
            # a text that looks like a number would be multiplied without a word
            blank, typed = (*blank, inner.value), (*typed, Expr("ISNUMBER", inner.value))
        value = build("*", inner.value, self.factor)
        return Guarded(value, blank, typed, inner.allowed)

    def parts(self) -> Iterator[Node]:
        yield self
        yield from self.part.parts()


@dataclass(frozen=True)
class Either(Node):
    """The first part where the inputs that it needs are filled, the second elsewhere."""

    first: Node
    second: Node
    unit: str | None

    @property
    def awaited(self) -> list[Key]:
        """What must be filled for the first part"""
        return list(needed(self.first))

    @property
    def alternatives(self) -> tuple[tuple[str, ...], ...]:
        """The keys of which one group must be filled"""
        second = self.second
        others = (
            second.alternatives
            if isinstance(second, Either)
            else (tuple(part.key for part in needed(second)),)
        )
        return (tuple(part.key for part in self.awaited), *others)

    def in_row(self, row: Row) -> Any:
        if any(is_empty(part.in_row(row)) for part in self.awaited):
            return self.second.in_row(row)
        return self.first.in_row(row)

    def falls_back(self, columns: Columns) -> Any:
        """Return in which rows the second part counts."""
        empty: Any = False
        for part in self.awaited:
            values = columns.values[part.key]
            if part.key in columns.empty:
                empty = empty | columns.empty[part.key]
            elif isinstance(values, np.ndarray):
                filled = [not is_empty(value) for value in values.tolist()]
                empty = empty | ~np.array(filled, dtype=bool)
            else:
                empty = empty | is_empty(values)
        return empty

    def of_columns(self, columns: Columns) -> Any:
        empty = self.falls_back(columns)
        return np.where(empty, self.second.of_columns(columns), self.first.of_columns(columns))

    def falls_back_in_cells(self, cells: Cells) -> Expr:
        """Return the condition under which the second part counts."""
        return any_of(tuple(Expr("blank", part.of_cells(cells).value) for part in self.awaited))

    def of_cells(self, cells: Cells) -> Guarded:
        first, second = self.first.of_cells(cells), self.second.of_cells(cells)
        empty = self.falls_back_in_cells(cells)
        filled = Expr("NOT", empty)
        if isinstance(self.second, Key):
            is_text = self.second.unit in (TEXT, TIME)
            typed = () if is_text else (Expr("ISNUMBER", second.value),)
            second = Guarded(second.value, (second.value,), typed)
        # an error in the second part must not be asked about where the first one counts
        missing = any_of(tuple(Expr("blank", cell) for cell in second.blank or (node("-"),)))
        blank = second.blank and (
            Expr("IF", empty, Expr("IF", missing, node(""), node("-")), node("-")),
        )
        return Guarded(
            Expr("IF", empty, second.value, first.value),
            tuple(blank),
            (
                *(Expr("OR", empty, condition) for condition in first.typed),
                *(Expr("OR", filled, condition) for condition in second.typed),
            ),
            # a condition may only be asked where the cells are filled
            (
                *(Expr("IF", empty, node(True), condition) for condition in first.allowed),
                *(Expr("IF", filled, node(True), condition) for condition in second.allowed),
            ),
        )

    def parts(self) -> Iterator[Node]:
        yield self
        yield from self.first.parts()
        yield from self.second.parts()


def needed(tree: Node) -> Iterator[Key]:
    """Yield the keys that a formula cannot do without."""
    match tree:
        case Key():
            yield tree
        case Scaled(part=part):
            yield from needed(part)
        case Arithmetic(left=left, right=right):
            yield from needed(left)
            yield from needed(right)
        case Call(function=function, arguments=arguments):
            for argument, given in zip(function.arguments, arguments, strict=True):
                if given is not None and not argument.optional:
                    yield from needed(given)


COMPUTE: Final[Mapping[str, np.ufunc]] = {
    "+": np.add,
    "-": np.subtract,
    "*": np.multiply,
    "/": np.divide,
    "^": np.power,
}


@dataclass(frozen=True)
class Arithmetic(Node):
    operation: str
    left: Node
    right: Node
    unit: str | None

    def in_row(self, row: Row) -> Any:
        sides = [_number(side, side.in_row(row)) for side in (self.left, self.right)]
        with np.errstate(all="ignore"):
            result = float(COMPUTE[self.operation](*sides))
        if not np.isfinite(result):
            raise DomainError(f"{sides[0]:g} {self.operation} {sides[1]:g} is not a finite number")
        return result

    def of_columns(self, columns: Columns) -> Any:
        with np.errstate(all="ignore"):
            result = COMPUTE[self.operation](
                self.left.of_columns(columns), self.right.of_columns(columns)
            )
        return np.where(np.isfinite(result), result, np.nan)

    def of_cells(self, cells: Cells) -> Guarded:
        left, right = self.left.of_cells(cells), self.right.of_cells(cells)
        typed = tuple(
            Expr("ISNUMBER", side.value) for side in (left, right) if side.value.operation == "name"
        )
        blank = tuple(side.value for side in (left, right) if side.value.operation == "name")
        return Guarded(
            build(self.operation, left.value, right.value),
            _once(left.blank + right.blank + blank),
            _once(left.typed + right.typed + typed),
            left.allowed + right.allowed,
        )

    def parts(self) -> Iterator[Node]:
        yield self
        yield from self.left.parts()
        yield from self.right.parts()


@dataclass(frozen=True)
class Call(Node):
    """A function of the catalogue; an argument that is left out is None."""

    function: Function
    arguments: tuple[Node | None, ...]
    unit: str

    def in_row(self, row: Row) -> Any:
        return self.function(*self._given(lambda part: part.in_row(row), row.cosmology))

    def given_columns(self, columns: Columns) -> list[Any]:
        """Return what the function takes for all rows at once."""

        def given(part: Node) -> Any:
            values = part.of_columns(columns)
            inner = part.part if isinstance(part, Scaled) else part
            empty = columns.empty.get(inner.key) if isinstance(inner, Key) else None
            argument = self.function.arguments[self.arguments.index(part)]
            # an empty cell of an optional argument is left out; NaN alone could not say so
            if argument.optional and empty is not None and isinstance(argument, Number):
                values = np.where(empty, argument.default, values)
            return values

        return self._given(given, columns.cosmology)

    def of_columns(self, columns: Columns) -> Any:
        result, _ = self.function.column(self.given_columns(columns))
        return result if np.ndim(result) else result[()]

    def _given(self, value_of: Callable[[Node], Any], cosmology: Cosmology) -> list[Any]:
        return [
            argument.default_or(cosmology if isinstance(argument, CosmologySet) else None)
            if part is None
            else value_of(part)
            for argument, part in zip(self.function.arguments, self.arguments, strict=True)
        ]

    def _as_call(self, cells: Cells) -> Guarded:
        values: list[Expr | None] = []
        inner: list[Guarded] = []
        for argument, part in zip(self.function.arguments, self.arguments, strict=True):
            if part is None:
                # the workbook's own cosmology where it has one, else the function's default
                own = isinstance(argument, CosmologySet) and "hubble_constant" in cells.symbols
                values.append(name(COSMOLOGY_RANGE) if own else None)
                continue
            piece = part.of_cells(cells)
            if isinstance(part, Key):
                piece = Guarded(piece.value, (piece.value,))
            if argument.optional and piece.blank:
                piece = _with_default(piece, node(argument.default))
            inner.append(piece)
            values.append(piece.value)
        while values and values[-1] is None:
            values.pop()
        given = [
            node(argument.default) if value is None else value
            for argument, value in zip(self.function.arguments, values, strict=False)
        ]
        return Guarded(
            Expr(f"{cells.calls}{self.function.name}", *given),
            _once(sum((piece.blank for piece in inner), ())),
            _once(sum((piece.typed for piece in inner), ())),
            sum((piece.allowed for piece in inner), ()),
        )

    def of_cells(self, cells: Cells) -> Guarded:
        if cells.calls is not None:
            return self._as_call(cells)
        given, inner = given_in_cells(self, cells)
        own = guarded(self.function, given)
        return Guarded(
            own.value,
            _once(sum((piece.blank for piece in inner), ()) + own.blank),
            _once(sum((piece.typed for piece in inner), ()) + own.typed),
            sum((piece.allowed for piece in inner), ()) + own.allowed,
        )

    def parts(self) -> Iterator[Node]:
        yield self
        for part in self.arguments:
            if part is not None:
                yield from part.parts()


def given_in_cells(call: Call, cells: Cells) -> tuple[dict[str, Any], list[Guarded]]:
    """Return what a function is given, by its arguments' names, and what of it are formulas."""
    given: dict[str, Any] = {}
    inner: list[Guarded] = []
    for argument, part in zip(call.function.arguments, call.arguments, strict=True):
        if part is None:
            if isinstance(argument, CosmologySet):
                given[argument.name] = SETTINGS_COSMOLOGY
        elif isinstance(part, Literal):
            given[argument.name] = part.value
        else:
            piece = part.of_cells(cells)
            if isinstance(argument, Moment) and part.unit == argument.unit:
                piece = _numeric_moment(piece)
            if argument.optional and piece.blank:
                piece = _with_default(piece, node(argument.default))
            inner.append(piece)
            given[argument.name] = piece.value
    return given, inner


def given_arguments(trees: Iterable[Node]) -> Iterator[tuple[Argument, Node | None]]:
    """Yield every argument of every call in the formulas, with the part that is given for it."""
    for tree in trees:
        for part in tree.parts():
            if isinstance(part, Call):
                yield from zip(part.function.arguments, part.arguments, strict=True)


def _with_default(piece: Guarded, default: Expr) -> Guarded:
    """Return the same where its cells are filled, the default where one of them is empty."""
    empty = any_of(tuple(Expr("blank", cell) for cell in piece.blank))
    typed = tuple(Expr("OR", empty, condition) for condition in piece.typed)
    return Guarded(Expr("IF", empty, default, piece.value), (), typed, piece.allowed)


def _numeric_moment(piece: Guarded) -> Guarded:
    """Return a number of days as the moment that it is; only a text needs to be read."""
    value, blank, typed = piece.value, piece.blank, piece.typed
    if value.operation == "name":
        blank, typed = (*blank, value), (*typed, Expr("ISNUMBER", value))
    return Guarded(moment_of_number(value), blank, typed, piece.allowed)


def _number(part: Node, value: Any) -> float:
    inner = part.part if isinstance(part, Scaled) else part
    name = inner.key if isinstance(inner, Key) else "a part of the formula"
    if value is None or value != value:
        raise MissingInput(f"{name} is empty")
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise InputError(f"{name} is {value!r}, not a number")
    return float(value)


def _once(items: tuple[Expr, ...]) -> tuple[Expr, ...]:
    """Return the conditions without those that say the same of the same parts."""
    return tuple({_sameness(item): item for item in items}.values())


def _sameness(item: Expr) -> tuple[Any, ...]:
    parts = (
        (part.operation, part.arguments) if isinstance(part, Expr) and _is_leaf(part) else id(part)
        for part in item.arguments
    )
    return (item.operation, *(item.arguments if _is_leaf(item) else parts))


def _is_leaf(part: Expr) -> bool:
    return part.operation in ("name", "number", "text", "truth")
