"""A spreadsheet's formula taken apart: what it calls and which cells it names.

The formula is tokenised by openpyxl and never executed.
"""

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import lru_cache
from typing import Any, Final

from openpyxl.formula import Tokenizer
from openpyxl.formula.tokenizer import Token, TokenizerError

from cellfuncs.catalogue import CATALOGUE, Function
from cellfuncs.errors import InputError
from workbooks.commands.connect import SPELLING
from workbooks.files.cells import Area

LONGEST: Final = 32_768
"""Characters of a formula that is still taken apart; spreadsheets allow 8192"""


class NotReadable(ValueError):
    """A formula that is left alone: it is nothing that a spreadsheet would take."""


@dataclass(frozen=True)
class Part:
    """A part of a formula."""

    def parts(self) -> Iterator["Part"]:
        yield self


@dataclass(frozen=True)
class Number(Part):
    value: float


@dataclass(frozen=True)
class Text(Part):
    value: str


@dataclass(frozen=True)
class Reference(Part):
    """A cell or a range; `sheet` is None for the formula's own."""

    sheet: str | None
    area: Area

    @property
    def is_cell(self) -> bool:
        return self.area[:2] == self.area[2:]


@dataclass(frozen=True)
class Named(Part):
    name: str


@dataclass(frozen=True)
class Operation(Part):
    operator: str
    left: Part
    right: Part

    def parts(self) -> Iterator[Part]:
        yield self
        yield from self.left.parts()
        yield from self.right.parts()


@dataclass(frozen=True)
class Signed(Part):
    sign: str
    operand: Part

    def parts(self) -> Iterator[Part]:
        yield self
        yield from self.operand.parts()


@dataclass(frozen=True)
class Called(Part):
    """A function with its arguments, None where one is left out."""

    name: str
    arguments: tuple[Part | None, ...]

    @property
    def ours(self) -> Function | None:
        """The catalogue's function, however a spreadsheet program spells an add-in's names"""
        return CATALOGUE.get(self.name.removeprefix(SPELLING))

    def parts(self) -> Iterator[Part]:
        yield self
        for argument in self.arguments:
            if argument is not None:
                yield from argument.parts()


@dataclass(frozen=True)
class Other(Part):
    """An array, an error value, an area that is computed: nothing to follow"""


# ---- parsing --------------------------------------------------------------------------------

_PRECEDENCE: Final[Mapping[str, int]] = {
    **dict.fromkeys(("=", "<>", "<", ">", "<=", ">="), 1),
    "&": 2,
    **dict.fromkeys("+-", 3),
    **dict.fromkeys("*/", 4),
    "^": 5,
}
_SIGN: Final = 6
"""A sign binds closer than a power: -2^2 is 4 in a cell"""


@lru_cache(maxsize=4096)
def parsed(formula: str) -> Part:
    """Return the formula's parts; raise NotReadable where it is none."""
    if len(formula) > LONGEST:
        raise NotReadable(f"the formula has {len(formula)} characters")
    try:
        tokens = [
            token
            for token in Tokenizer(formula if formula.startswith("=") else f"={formula}").items
            if token.type != Token.WSPACE
        ]
        reader = _Reader(tokens)
        part = reader.expression(0)
    except (TokenizerError, IndexError, RecursionError, ValueError) as error:
        raise NotReadable(str(error)) from None
    if reader.position != len(tokens):
        raise NotReadable("something stands after the formula's end")
    return part


@dataclass
class _Reader:
    tokens: list[Token]
    position: int = 0

    def expression(self, least: int) -> Part:
        left = self._operand()
        while (token := self._next()) is not None:
            if token.type == Token.OP_POST:
                self.position += 1
                left = Operation("/", left, Number(100.0))
                continue
            binding = _PRECEDENCE.get(token.value) if token.type == Token.OP_IN else None
            if binding is None or binding <= least:
                break
            self.position += 1
            left = Operation(token.value, left, self.expression(binding))
        return left

    def _next(self) -> Token | None:
        return self.tokens[self.position] if self.position < len(self.tokens) else None

    def _operand(self) -> Part:
        token = self.tokens[self.position]
        self.position += 1
        if token.type == Token.OP_PRE:
            return Signed(token.value, self.expression(_SIGN))
        if token.type == Token.OPERAND:
            return _operand_of(token)
        if token.type == Token.PAREN and token.subtype == Token.OPEN:
            inner = self.expression(0)
            self._close()
            return inner
        if token.type == Token.FUNC and token.subtype == Token.OPEN:
            return Called(token.value[:-1].upper(), self._arguments())
        if token.type == Token.ARRAY and token.subtype == Token.OPEN:
            while self.tokens[self.position].type != Token.ARRAY:
                self.position += 1
            self.position += 1
            return Other()
        raise NotReadable(f"{token.value!r} is out of place")

    def _arguments(self) -> tuple[Part | None, ...]:
        found: list[Part | None] = []
        given: Part | None = None
        while True:
            token = self.tokens[self.position]
            if token.subtype == Token.CLOSE:
                self.position += 1
                return (*found, given) if found or given is not None else ()
            if token.type == Token.SEP:
                self.position += 1
                found.append(given)
                given = None
            elif given is None:
                given = self.expression(0)
            else:
                raise NotReadable(f"{token.value!r} is out of place")

    def _close(self) -> None:
        if self.tokens[self.position].subtype != Token.CLOSE:
            raise NotReadable("a bracket is not closed")
        self.position += 1


def _operand_of(token: Token) -> Part:
    if token.subtype == Token.NUMBER:
        return Number(float(token.value))
    if token.subtype == Token.TEXT:
        return Text(token.value[1:-1].replace('""', '"'))
    if token.subtype != Token.RANGE:
        return Other()
    sheet, mark, place = token.value.rpartition("!")
    area = Area.parsed(place)
    if area is not None:
        if sheet.startswith("'"):
            sheet = sheet[1:-1].replace("''", "'")
        return Reference(sheet if mark else None, area)
    return Named(token.value) if re.fullmatch(r"[^\W\d][\w.]*", token.value) else Other()


# ---- what a formula names, and what it gives ----------------------------------------------------


def named_functions(part: Part) -> Iterator[Called]:
    """Yield every call in a formula."""
    for each in part.parts():
        if isinstance(each, Called):
            yield each


def references(part: Part) -> Iterator[Reference]:
    """Yield every cell and range that a formula names."""
    for each in part.parts():
        if isinstance(each, Reference):
            yield each


def evaluated(part: Part, value_of: Callable[[Part], Any]) -> Any:
    """Return the value of a part made of cells, literals and the catalogue's functions.

    Raises the CellError that a function gives, NotReadable where anything else stands in it.
    """
    match part:
        case Number(value) | Text(value):
            return value
        case Reference() | Named():
            return value_of(part)
        case Signed("-", operand):
            return -_as_number(evaluated(operand, value_of))
        case Operation(operator, left, right) if operator in _ARITHMETIC:
            one, other = (_as_number(evaluated(side, value_of)) for side in (left, right))
            try:
                return _ARITHMETIC[operator](one, other)
            except (ArithmeticError, ValueError, TypeError):
                raise NotReadable("no number") from None
        case Called(arguments=arguments) if part.ours is not None:
            given = [
                None if argument is None else evaluated(argument, value_of)
                for argument in arguments
            ]
            try:
                return part.ours(*given)
            except TypeError as error:
                raise InputError(str(error)) from None
    raise NotReadable("more than the catalogue's functions")


_ARITHMETIC: Final[Mapping[str, Callable[[float, float], Any]]] = {
    "+": lambda one, other: one + other,
    "-": lambda one, other: one - other,
    "*": lambda one, other: one * other,
    "/": lambda one, other: one / other,
    "^": lambda one, other: one**other,
}


def _as_number(value: Any) -> float:
    if isinstance(value, bool) or not isinstance(value, (int, float)):
        raise NotReadable(f"{value!r} is no number")
    return float(value)
