"""A spreadsheet's formula taken apart: what it calls, which cells it names, what units it follows.

The formula is tokenised by openpyxl and never executed.
"""

import re
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from functools import lru_cache
from typing import Any, Final, Literal

from openpyxl.formula import Tokenizer
from openpyxl.formula.tokenizer import Token, TokenizerError

from cellfuncs import units
from cellfuncs.catalogue import CATALOGUE, Argument, Function
from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.errors import InputError
from workbooks.connect import SPELLING
from workbooks.logbook import Area

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


# ---- one formula for many rows -----------------------------------------------------------------

_MOVING: Final = re.compile(
    r"""("(?:[^"]|"")*"|'(?:[^']|'')*')"""
    r"|(?<![A-Za-z0-9_.$])(\$?)([A-Z]{1,3})(\$?)([0-9]{1,7})(?![A-Za-z0-9_.(])"
)


def relative(formula: str, row: int, column: int) -> str:
    """Return the formula with its cells counted from its own, so that copies of it are alike."""

    def counted(found: re.Match[str]) -> str:
        if found[1] is not None:
            return found[1]
        place = Area.parsed(f"{found[3]}1")
        across = found[3] if found[2] or place is None else f"({place.first_column - column})"
        down = found[5] if found[4] else f"({int(found[5]) - row})"
        return f"\0{found[2]}{across}{found[4]}{down}"

    return _MOVING.sub(counted, formula)


_ROW: Final = re.compile(r"(?<=[A-Z])[0-9]+")


def moved_down(formula: str, row: int, to_row: int) -> str:
    """Return what a formula of one row is in another where its cells move along, roughly: good
    enough to be compared with what stands there."""
    before, after = str(row), str(to_row)
    return _ROW.sub(lambda found: after if found[0] == before else found[0], formula)


# ---- units ---------------------------------------------------------------------------------------

Medium = Literal["air", "vacuum"]
FaultKind = Literal["wrong unit", "units mixed", "media mixed", "redshifts added"]


@dataclass(frozen=True)
class Quantity:
    """What is known of a part's value.

    `unit` is None where it is not known, "" for a pure number.
    """

    words: str = ""
    unit: str | None = None
    literal: float | None = None
    is_redshift: bool = False
    is_speed_ratio: bool = False
    medium: Medium | None = None


@dataclass(frozen=True)
class Fault:
    """A mistake in a formula, in words."""

    kind: FaultKind
    sentence: str


@dataclass
class Follower:
    """Follows units, redshifts and media through a formula and notes what does not fit.

    `known` tells what a cell or a named cell holds.
    """

    known: Callable[[Part], Quantity]
    faults: list[Fault] = field(default_factory=list)

    def followed(self, part: Part) -> Quantity:
        match part:
            case Number(value):
                return Quantity(f"{value:g}", literal=value)
            case Reference() | Named():
                return self.known(part)
            case Signed(_, operand):
                return replace(self.followed(operand), literal=None)
            case Operation("+" | "-"):
                return self._sum(part, is_mean=False)
            case Operation("*" | "/" as operator, left, right):
                return self._product(operator, left, right)
            case Operation("^", left, right):
                return self._power(left, right)
            case Operation(_, left, right):
                self.followed(left)
                self.followed(right)
            case Called():
                return self._called(part)
        return Quantity()

    def _fault(self, kind: FaultKind, sentence: str) -> None:
        fault = Fault(kind, sentence)
        if fault not in self.faults:
            self.faults.append(fault)

    # -- + and −

    def _sum(self, part: Operation, *, is_mean: bool) -> Quantity:
        terms = [(sign, self.followed(term), term) for sign, term in _terms(part)]
        self._redshifts_are_not_added(terms, is_mean)
        known = [quantity for _, quantity, _ in terms if quantity.unit is not None]
        for other in known[1:]:
            first = known[0]
            if _differ(first.unit, other.unit):
                operator = " and ".join(
                    sorted({sign.replace("-", "−") for sign, _, _ in terms[1:]})
                )
                self._fault(
                    "units mixed",
                    f"{first.words} is {_said(first.unit)} and {other.words} "
                    f"{_said(other.unit)}, but they stand together at {operator}",
                )
                return Quantity()
        media = {quantity.medium for _, quantity, _ in terms} - {None}
        if len(media) == 2:
            self._media_differ([quantity for _, quantity, _ in terms if quantity.medium])
        alike = [quantity.unit for _, quantity, _ in terms if quantity.literal is None]
        unit = alike[0] if alike and all(each is not None for each in alike) else None
        # 1+z is a factor and z−z' a difference: neither is a redshift any more
        return Quantity("the sum", unit, medium=media.pop() if len(media) == 1 else None)

    def _redshifts_are_not_added(
        self, terms: list[tuple[str, Quantity, Part]], is_mean: bool
    ) -> None:
        redshifts = [quantity for sign, quantity, _ in terms if quantity.is_redshift]
        added = [q for sign, q, _ in terms if q.is_redshift and sign == "+"]
        ratios = [quantity for _, quantity, _ in terms if quantity.is_speed_ratio]
        corrected = any(
            isinstance(term, Operation) and term.operator == "*" and self._are_shifts(term)
            for _, _, term in terms
        )
        if corrected or is_mean:
            return
        if len(added) > 1:
            one, other = added[:2]
            self._fault(
                "redshifts added",
                f"{one.words} and {other.words} are added, but redshifts combine as "
                "(1+z)(1+z')−1: use REDSHIFT_COMBINED",
            )
        elif redshifts and ratios:
            self._fault(
                "redshifts added",
                f"{redshifts[0].words} and {ratios[0].words} are added, but a velocity changes a "
                "redshift as (1+z)(1+v/c)−1: turn the velocity into a redshift with "
                "REDSHIFT_FROM_VELOCITY and use REDSHIFT_COMBINED",
            )

    def _are_shifts(self, product: Operation) -> bool:
        sides = [Follower(self.known).followed(side) for side in (product.left, product.right)]
        return all(side.is_redshift or side.is_speed_ratio for side in sides)

    # -- × and ÷

    def _product(self, operator: str, left: Part, right: Part) -> Quantity:
        one = self._mean_or(left, right, operator)
        other = self._mean_or(right, left, operator)
        if operator == "/" and _is_speed_of_light(other, one.unit):
            return Quantity(f"{one.words}/c", "", is_speed_ratio=one.unit is not None)
        if operator == "/" and one.medium and other.medium and one.medium != other.medium:
            self._media_differ([one, other])
        if one.literal is not None or other.literal is not None:
            # a factor may be a change of unit, so that nothing is known any more
            return Quantity()
        if one.unit is None or other.unit is None:
            return Quantity()
        return Quantity("the product", _combined(operator, one.unit, other.unit))

    def _mean_or(self, part: Part, other: Part, operator: str) -> Quantity:
        """Follow a factor; a sum that is divided by a number, or halved, is a mean."""
        number = other.value if isinstance(other, Number) else None
        is_mean = number is not None and (number > 1 if operator == "/" else 0 < number < 1)
        if isinstance(part, Operation) and part.operator in "+-":
            return self._sum(part, is_mean=is_mean)
        return self.followed(part)

    def _power(self, left: Part, right: Part) -> Quantity:
        base, exponent = self.followed(left), self.followed(right)
        if not base.unit or exponent.literal is None:
            return Quantity(unit="" if base.unit == "" else None)
        return Quantity("the power", _raised(base.unit, exponent.literal))

    # -- functions

    def _called(self, part: Called) -> Quantity:
        given = [
            Quantity() if argument is None else self.followed(argument)
            for argument in part.arguments
        ]
        function = part.ours
        if function is not None and not function.variadic:
            return self._ours(function, part, given)
        if part.name == "SUM" and len(given) == 2 and all(each.is_redshift for each in given):
            self._redshifts_are_not_added(
                [("+", quantity, Other()) for quantity in given], is_mean=False
            )
        if part.name in _LIKE_THEIR_ARGUMENTS:
            kept = given[1:] if part.name == "IF" else given
            kept = [quantity for quantity in kept if quantity.literal is None]
            if part.name in ("ROUND", "ROUNDUP", "ROUNDDOWN", "IFERROR", "IFNA"):
                kept = kept[:1]
            found = {quantity.unit for quantity in kept}
            if len(found) == 1 and kept:
                return kept[0] if len(kept) == 1 else replace(kept[0], medium=None)
        if part.name == "SQRT" and given and given[0].unit is not None:
            return Quantity("the root", _raised(given[0].unit, 0.5))
        return Quantity()

    def _ours(self, function: Function, part: Called, given: list[Quantity]) -> Quantity:
        groups: dict[str, Quantity] = {}
        by_name: dict[str, Quantity] = {}
        for argument, quantity in zip(function.arguments, given, strict=False):
            by_name[argument.name] = quantity
            wanted = getattr(argument, "unit", None)
            if wanted is None or quantity.unit is None:
                continue
            like = getattr(argument, "like", "")
            if like:
                self._like_others(function, argument, quantity, groups.setdefault(like, quantity))
            elif _differ(quantity.unit, wanted):
                self._fault(
                    "wrong unit",
                    f"{function.name} takes {argument.name} {_said(wanted)}, but "
                    f"{quantity.words} is {_said(quantity.unit)}",
                )
        self._media_of(function, part, by_name)
        return self._result(function, by_name, groups, _stated_medium(function, part))

    def _like_others(
        self, function: Function, argument: Argument, quantity: Quantity, first: Quantity
    ) -> None:
        kind = getattr(argument, "unit", "")
        if kind and not units.same_kind(quantity.unit or "", kind):
            self._fault(
                "wrong unit",
                f"{function.name} takes {argument.name} in a unit such as {kind}, but "
                f"{quantity.words} is {_said(quantity.unit)}",
            )
        elif _differ(quantity.unit, first.unit):
            self._fault(
                "wrong unit",
                f"{function.name} takes all of these in one unit, but {first.words} is "
                f"{_said(first.unit)} and {quantity.words} {_said(quantity.unit)}",
            )

    def _media_of(self, function: Function, part: Called, given: Mapping[str, Quantity]) -> None:
        if function.name == "REDSHIFT_FROM_WAVELENGTH":
            both = [given[name] for name in ("observed", "rest") if name in given]
            if len({each.medium for each in both} - {None}) == 2:
                self._media_differ(both)
            return
        wanted: Medium | None
        if function.name in ("REDSHIFT_FROM_LINE", "LINE_NEAREST"):
            wanted = _stated_medium(function, part)
        else:
            wanted = {"WAVELENGTH_VACUUM": "air", "WAVELENGTH_AIR": "vacuum"}.get(  # type: ignore[assignment]
                function.name
            )
        measured = next(iter(given.values()), Quantity())
        if wanted and measured.medium and measured.medium != wanted:
            self._fault(
                "media mixed",
                f"{function.name} takes {measured.words} here as measured in {wanted}, but it is "
                f"in {measured.medium}",
            )

    def _result(
        self,
        function: Function,
        given: Mapping[str, Quantity],
        groups: Mapping[str, Quantity],
        stated: Medium | None,
    ) -> Quantity:
        unit: str | None = function.unit
        medium: Medium | None = None
        if unit == "text":
            return Quantity()
        if unit is not None and unit.startswith("as "):
            model = given.get(unit[3:], Quantity())
            unit, medium = model.unit, model.medium
        if function.name == "LINE_WAVELENGTH":
            medium = stated
        elif function.name == "WAVELENGTH_VACUUM":
            medium = "vacuum"
        elif function.name == "WAVELENGTH_AIR":
            medium = "air"
        return Quantity(
            f"the result of {function.name}",
            unit,
            is_redshift=function.name.startswith("REDSHIFT_") and unit == "",
            medium=medium,
        )

    def _media_differ(self, quantities: list[Quantity]) -> None:
        said = " and ".join(f"{each.words} in {each.medium}" for each in quantities if each.medium)
        self._fault(
            "media mixed",
            f"{said} are compared; take both to vacuum first, with WAVELENGTH_VACUUM",
        )


_LIKE_THEIR_ARGUMENTS: Final = frozenset(
    "IF IFERROR IFNA ABS ROUND ROUNDUP ROUNDDOWN MAX MIN AVERAGE MEDIAN SUM N".split()
)


def _terms(part: Part, sign: str = "+") -> Iterator[tuple[str, Part]]:
    """Yield the terms of nested sums, each with its sign."""
    if isinstance(part, Operation) and part.operator in ("+", "-"):
        yield from _terms(part.left, sign)
        flipped = "-" if sign == "+" else "+"
        yield from _terms(part.right, sign if part.operator == "+" else flipped)
    else:
        yield sign, part


def _stated_medium(function: Function, part: Called) -> Medium | None:
    """Return the medium that a call names, by its default where it names none; None where a cell
    says it."""
    names = [argument.name for argument in function.arguments]
    if "medium" not in names:
        return None
    place = names.index("medium")
    given = part.arguments[place] if place < len(part.arguments) else None
    if given is None:
        return "vacuum"
    if isinstance(given, Text):
        word = given.value.strip().casefold()
        return "air" if word == "air" else "vacuum" if word in ("", "vacuum") else None
    return None


def _is_speed_of_light(quantity: Quantity, unit: str | None) -> bool:
    if quantity.literal is None:
        return quantity.words.casefold() in ("c", "light_speed", "speed_of_light")
    try:
        in_km_s = units.factor(unit, "km/s") if unit else 1.0
    except InputError:
        return False
    scales = (in_km_s,) if unit else (1.0, 1e-3)
    return any(abs(quantity.literal * scale / LIGHT_SPEED - 1) < 2e-3 for scale in scales)


def _differ(one: str | None, other: str | None) -> bool:
    """Tell whether two known units are not one and the same."""
    if one is None or other is None or one == other:
        return False
    try:
        return units.factor(one, other) != 1.0
    except InputError:
        return True


def _combined(operator: str, one: str, other: str) -> str | None:
    """Return the unit of a product; None where it has none that can be written."""
    first, second = units.unit_of(one), units.unit_of(other)
    return _spelt(lambda: first * second if operator == "*" else first / second)


def _raised(unit: str, power: float) -> str | None:
    base = units.unit_of(unit)
    return _spelt(lambda: base**power)


def _spelt(made: Callable[[], Any]) -> str | None:
    """Return a unit's text; None where there is no such unit, or none that reads so again."""
    from astropy.units import UnitsError

    try:
        unit = made()
        text = str(unit.to_string())
        return text if units.unit_of(text) == unit else None
    except (UnitsError, InputError, TypeError, ValueError, ArithmeticError):
        return None


def _said(unit: str | None) -> str:
    return f"in {unit}" if unit else "without a unit"


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
