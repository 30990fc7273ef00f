"""Units, redshifts and media followed through a formula, to see what does not fit."""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from typing import Any, Final, Literal

from cellfuncs import units
from cellfuncs.catalogue import Argument, Function
from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.errors import InputError
from workbooks.audit.formulas import (
    Called,
    Named,
    Number,
    Operation,
    Other,
    Part,
    Reference,
    Signed,
    Text,
)

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
