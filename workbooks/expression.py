"""A recipe's formulas: parsed, held to their units, and worked out in each way a workbook needs.

A formula is written in the keys of columns and settings, numbers, + - * / ** and the functions of
the catalogue: `redshift_from_line(observed, line, medium)`. It is parsed with `ast`, from which a
fixed list of node types is taken; nothing is ever executed.
"""

import ast
from abc import ABC, abstractmethod
from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np

from cellfuncs import units
from cellfuncs.bridges.formula import SETTINGS_COSMOLOGY, Guarded, any_of, guarded
from cellfuncs.catalogue import CATALOGUE, Argument, Choice, CosmologySet, Function, Number
from cellfuncs.errors import CellError, DomainError, InputError, MissingInput, near_matches
from cellfuncs.physics.expansion import Cosmology
from cellfuncs.symbols import Expr, build, name, node

TEXT: Final = "text"

COSMOLOGY_RANGE: Final = "cosmology_parameters"
"""The range of a workbook that holds the cosmology in use, two columns: parameter and value"""


class ExpressionError(ValueError):
    """A formula that a recipe cannot hold; the message says why."""


@dataclass(frozen=True)
class Row:
    """What a formula finds in one row: a value a key, None where the cell is empty.

    A value may be the CellError that another column gave instead of a number.
    """

    values: Mapping[str, Any]
    cosmology: Cosmology


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
        if self.unit != TEXT:
            return _number(self, value)
        if value is None:
            raise MissingInput("the result is empty")
        return value

    def parts(self) -> Iterator["Node"]:
        """Yield this node and all below it."""
        yield self


@dataclass(frozen=True)
class Literal(Node):
    value: float | str

    @property
    def unit(self) -> str | None:  # type: ignore[override]
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
        return np.nan if value is None and self.unit != TEXT else value

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


_COMPUTE: Final[Mapping[str, np.ufunc]] = {
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
            result = float(_COMPUTE[self.operation](*sides))
        if not np.isfinite(result):
            raise DomainError(f"{sides[0]:g} {self.operation} {sides[1]:g} is not a finite number")
        return result

    def of_columns(self, columns: Columns) -> Any:
        with np.errstate(all="ignore"):
            result = _COMPUTE[self.operation](
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

    def of_columns(self, columns: Columns) -> Any:
        def given(part: Node) -> Any:
            values = part.of_columns(columns)
            inner = part.part if isinstance(part, Scaled) else part
            empty = columns.empty.get(inner.key) if isinstance(inner, Key) else None
            argument = self.function.arguments[self.arguments.index(part)]
            # an empty cell of an optional argument is left out; NaN alone could not say so
            if argument.optional and empty is not None and isinstance(argument, Number):
                values = np.where(empty, argument.default, values)
            return values

        result, _ = self.function.column(self._given(given, columns.cosmology))
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
        given: dict[str, Any] = {}
        inner: list[Guarded] = []
        for argument, part in zip(self.function.arguments, self.arguments, strict=True):
            if part is None:
                if isinstance(argument, CosmologySet):
                    given[argument.name] = SETTINGS_COSMOLOGY
            elif isinstance(part, Literal):
                given[argument.name] = part.value
            else:
                piece = part.of_cells(cells)
                if argument.optional and piece.blank:
                    piece = _with_default(piece, node(argument.default))
                inner.append(piece)
                given[argument.name] = piece.value
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


def _finite(number: Any) -> float:
    try:
        value = float(number)
    except OverflowError:
        value = np.inf
    if not np.isfinite(value):
        raise ExpressionError("a number in the formula is not finite")
    return value


_OPERATORS: Final[Mapping[type[ast.operator], str]] = {
    ast.Add: "+",
    ast.Sub: "-",
    ast.Mult: "*",
    ast.Div: "/",
    ast.Pow: "^",
}


@dataclass(frozen=True)
class Parser:
    """Turns formula text into nodes; `known` gives the unit of every key that may be named."""

    known: Mapping[str, str]
    used: set[str] = field(default_factory=set)

    def parsed(self, text: str, unit: str) -> Node:
        """Return the formula with its result in `unit`.

        Raises ExpressionError with near matches for an unknown function or key, for units that do
        not fit, and for anything that is not a formula.
        """
        if len(text) > 2000:
            raise ExpressionError(f"the formula has {len(text)} characters; 2000 are allowed")
        try:
            tree = ast.parse(text.strip(), mode="eval")
        except (SyntaxError, ValueError, RecursionError, MemoryError) as error:
            reason = error.msg if isinstance(error, SyntaxError) else error
            raise ExpressionError(f"{text!r} cannot be read as a formula: {reason}") from None
        try:
            return self._in_unit(self._node(tree.body), unit, "the result")
        except RecursionError:
            raise ExpressionError("the formula is nested too deep") from None

    def _node(self, tree: ast.expr) -> Node:
        match tree:
            case ast.Constant(value=bool() | bytes() | complex() | None):
                pass
            case ast.Constant(value=int() | float() as number):
                return Literal(_finite(number))
            case ast.Constant(value=str() as text):
                return Literal(text)
            case ast.Name(id=key):
                return self._key(key)
            case ast.UnaryOp(op=ast.USub(), operand=operand):
                inner = self._node(operand)
                if isinstance(inner, Literal) and isinstance(inner.value, float):
                    return Literal(-inner.value)
                return self._arithmetic("*", Literal(-1.0), inner)
            case ast.BinOp(left=left, op=op, right=right) if type(op) in _OPERATORS:
                return self._arithmetic(_OPERATORS[type(op)], self._node(left), self._node(right))
            case ast.Call(func=ast.Name(id=name), args=args, keywords=keywords):
                return self._call(name, args, keywords)
        raise ExpressionError(
            f"{ast.unparse(tree)!r} is not allowed; a formula has keys, numbers, texts, + - * / ** "
            "and functions"
        )

    def _key(self, key: str) -> Key:
        if key not in self.known:
            raise ExpressionError(
                f"{key!r} is neither a column nor a setting ({near_matches(key, self.known)})"
            )
        self.used.add(key)
        return Key(key, self.known[key])

    def _arithmetic(self, operation: str, left: Node, right: Node) -> Node:
        for side in (left, right):
            if side.unit == TEXT:
                raise ExpressionError(f"a text cannot stand beside {operation}")
        if isinstance(left, Literal) and isinstance(right, Literal):
            with np.errstate(all="ignore"):
                value = _COMPUTE[operation](left.value, right.value)
            return Literal(_finite(value))
        if operation in "+-":
            if left.unit is None:
                left = self._in_unit(left, right.unit, f"what stands left of {operation}")
            else:
                right = self._in_unit(right, left.unit, f"what stands right of {operation}")
            return Arithmetic(operation, left, right, left.unit or right.unit)
        return Arithmetic(operation, left, right, self._combined(operation, left, right))

    def _combined(self, operation: str, left: Node, right: Node) -> str | None:
        if operation == "^":
            if right.unit not in (None, ""):
                raise ExpressionError("a power must be a pure number")
            if not left.unit:
                return left.unit
            if not isinstance(right, Literal) or not isinstance(right.value, float):
                raise ExpressionError(f"a power of {left.unit} must be written as a number")
            return str((units.unit_of(left.unit) ** right.value).to_string())
        if left.unit is None and right.unit is None:
            return None
        one, other = (units.unit_of(side.unit or "") for side in (left, right))
        return str((one * other if operation == "*" else one / other).to_string())

    def _call(self, name: str, args: list[ast.expr], keywords: list[ast.keyword]) -> Call:
        found = CATALOGUE.get(name.upper())
        if found is None or found.variadic:
            near = near_matches(name, [known.lower() for known in CATALOGUE])
            raise ExpressionError(f"{name!r} is not a function ({near})")
        if len(args) > len(found.arguments):
            raise ExpressionError(f"{found.name} takes at most {len(found.arguments)} arguments")
        given: dict[str, ast.expr] = {
            argument.name: part for argument, part in zip(found.arguments, args, strict=False)
        }
        names = [argument.name for argument in found.arguments]
        for keyword in keywords:
            if keyword.arg not in names:
                near = near_matches(keyword.arg or "**", names)
                raise ExpressionError(f"{found.name} has no argument {keyword.arg!r} ({near})")
            if keyword.arg in given:
                raise ExpressionError(f"{found.name} is given {keyword.arg!r} twice")
            given[keyword.arg] = keyword.value
        groups: dict[str, str] = {}
        parts: dict[str, Node | None] = {}
        for argument in found.arguments:
            if argument.name not in given:
                if not argument.optional:
                    raise ExpressionError(f"{found.name} needs its argument {argument.name!r}")
                parts[argument.name] = None
                continue
            part = self._node(given[argument.name])
            parts[argument.name] = self._fitted(found, argument, part, groups)
        return Call(found, tuple(parts.values()), self._result_unit(found, parts, groups))

    def _fitted(
        self, found: Function, argument: Argument, part: Node, groups: dict[str, str]
    ) -> Node:
        where = f"{argument.name} of {found.name}"
        if isinstance(argument, Number):
            if part.unit == TEXT:
                raise ExpressionError(f"{where} wants a number, not a text")
            wanted = argument.unit
            if argument.like and part.unit is not None:
                wanted = groups.setdefault(argument.like, part.unit)
                if argument.unit and not units.same_kind(part.unit, argument.unit):
                    raise ExpressionError(f"{where} wants {argument.unit}, not {part.unit!r}")
            return self._checked(argument, self._in_unit(part, wanted, where), where)
        if part.unit != TEXT:
            raise ExpressionError(f"{where} wants a text")
        return self._checked(argument, part, where)

    @staticmethod
    def _checked(argument: Argument, part: Node, where: str) -> Node:
        if isinstance(part, Literal):
            try:
                argument.parsed(part.value)
            except CellError as error:
                raise ExpressionError(f"{where}: {error}") from None
        return part

    @staticmethod
    def _result_unit(
        found: Function, parts: Mapping[str, Node | None], groups: Mapping[str, str]
    ) -> str:
        if not found.unit.startswith("as "):
            return found.unit
        model = parts[found.unit[3:]]
        if any(each.name == found.unit[3:] for each in found.arguments if type(each) is Choice):
            raise ExpressionError(
                f"{found.name} gives another unit each time; name the setting that holds the value"
            )
        if isinstance(model, Literal) and isinstance(model.value, str):
            return model.value
        argument = next(each for each in found.arguments if each.name == found.unit[3:])
        like = getattr(argument, "like", "")
        return groups.get(like, getattr(argument, "unit", ""))

    @staticmethod
    def _in_unit(part: Node, unit: str | None, where: str) -> Node:
        if part.unit == unit or part.unit is None or unit is None:
            return part
        if TEXT in (part.unit, unit):
            kinds = ("a text", "a number") if unit == TEXT else ("a number", "a text")
            raise ExpressionError(f"{where} must be {kinds[0]}, not {kinds[1]}")
        try:
            factor = units.factor(part.unit, unit)
        except InputError as error:
            raise ExpressionError(f"{where}: {error}") from None
        return Scaled(part, factor, unit)
