"""A recipe's formulas parsed and held to their units.

A formula is written in the keys of columns and settings, numbers, + - * / **, or, and functions of
the catalogue: `redshift_from_line(observed, line, medium)`. It is parsed with `ast`, from which a
fixed list of node types is taken; nothing is ever executed.
"""

import ast
from collections.abc import Mapping, Set
from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np

from cellfuncs import units
from cellfuncs.arguments import Part
from cellfuncs.catalogue import CATALOGUE, Argument, Choice, Function, Number, Truth
from cellfuncs.errors import CellError, InputError, near_matches
from cellfuncs.families.sky import AngleText, Moment
from workbooks.expression import (
    COMPUTE,
    TEXT,
    TIME,
    TRUTH,
    Arithmetic,
    Call,
    Either,
    Key,
    Literal,
    Node,
    Scaled,
    needed,
)
from workbooks.gathered import Gathered, takes_rows


class ExpressionError(ValueError):
    """A formula that a recipe cannot hold; the message says why."""


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
    columns: Set[str] = frozenset()
    """The keys that have a value a row"""

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
            case ast.BoolOp(op=ast.Or(), values=[first, *others]):
                return self._either(first, others)
        raise ExpressionError(
            f"{ast.unparse(tree)!r} is not allowed; a formula has keys, numbers, texts, "
            "+ - * / **, or, and functions"
        )

    def _either(self, tree: ast.expr, others: list[ast.expr]) -> Node:
        first = self._node(tree)
        second = self._either(others[0], others[1:]) if others[1:] else self._node(others[0])
        if not any(needed(first)):
            raise ExpressionError("what stands before «or» needs a column that may be empty")
        second = self._in_unit(second, first.unit, "what stands after «or»")
        return Either(first, second, first.unit or second.unit)

    def _key(self, key: str) -> Key:
        if key not in self.known:
            raise ExpressionError(
                f"{key!r} is neither a column nor a setting ({near_matches(key, self.known)})"
            )
        self.used.add(key)
        return Key(key, self.known[key])

    def _arithmetic(self, operation: str, left: Node, right: Node) -> Node:
        for side in (left, right):
            if side.unit in (TEXT, TIME):
                raise ExpressionError(f"a {side.unit} cannot stand beside {operation}")
        if isinstance(left, Literal) and isinstance(right, Literal):
            with np.errstate(all="ignore"):
                value = COMPUTE[operation](left.value, right.value)
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

    def _call(self, name: str, args: list[ast.expr], keywords: list[ast.keyword]) -> Node:
        found = CATALOGUE.get(name.upper())
        if found is None or found.variadic:
            near = near_matches(name, [known.lower() for known in CATALOGUE])
            raise ExpressionError(f"{name!r} is not a function ({near})")
        if len(args) > len(found.arguments):
            raise ExpressionError(f"{found.name} takes at most {len(found.arguments)} arguments")
        of_rows = any(map(takes_rows, found.arguments))
        by, keywords = self._row_choice("by", keywords, of_rows)
        where, keywords = self._row_choice("where", keywords, of_rows)
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
            part = self._argument(argument, given[argument.name])
            parts[argument.name] = self._fitted(found, argument, part, groups)
        unit = self._result_unit(found, parts, groups)
        if of_rows:
            return Gathered(found, tuple(parts.values()), unit, by, where)
        return Call(found, tuple(parts.values()), unit)

    def _row_choice(
        self, word: str, keywords: list[ast.keyword], of_rows: bool
    ) -> tuple[Key | None, list[ast.keyword]]:
        """Return the column that `by` or `where` names, and the other keywords."""
        rest = [keyword for keyword in keywords if keyword.arg != word]
        if not of_rows or len(rest) == len(keywords):
            return None, keywords
        tree = next(keyword.value for keyword in keywords if keyword.arg == word)
        part = self._node(tree)
        wanted = TEXT if word == "by" else ""
        if not isinstance(part, Key) or part.key not in self.columns or part.unit != wanted:
            kind = "texts" if word == "by" else "numbers without a unit"
            raise ExpressionError(f"{word}= must name a column of {kind}")
        return part, rest

    def _argument(self, argument: Argument, tree: ast.expr) -> Node:
        if isinstance(argument, Truth):
            if isinstance(tree, ast.Constant) and isinstance(tree.value, bool):
                return Literal(tree.value)
            raise ExpressionError(f"{argument.name} must be True or False")
        return self._node(tree)

    def _fitted(
        self, found: Function, argument: Argument, part: Node, groups: dict[str, str]
    ) -> Node:
        where = f"{argument.name} of {found.name}"
        if takes_rows(argument):
            key = part.part if isinstance(part, Scaled) else part
            if not isinstance(key, (Key, Literal)):
                raise ExpressionError(f"{where} must be a column")
            return self._in_its_unit(argument, part, groups, where)
        if any(isinstance(key, Key) and key.key in self.columns for key in part.parts()) and any(
            map(takes_rows, found.arguments)
        ):
            raise ExpressionError(f"{where} must be one number for all rows, not a column")
        if isinstance(argument, Number):
            if part.unit == TEXT:
                raise ExpressionError(f"{where} wants a number, not a text")
            return self._checked(argument, self._in_its_unit(argument, part, groups, where), where)
        if isinstance(argument, Moment):
            if part.unit not in (TIME, TEXT):
                part = self._in_unit(part, argument.unit, where)
            return self._checked(argument, part, where)
        if isinstance(argument, Truth) or (
            isinstance(argument, AngleText) and part.unit in (None, "deg")
        ):
            return self._checked(argument, part, where)
        if part.unit != TEXT:
            raise ExpressionError(f"{where} wants a text")
        return self._checked(argument, part, where)

    def _in_its_unit(self, argument: Any, part: Node, groups: dict[str, str], where: str) -> Node:
        """Return the part in the unit of its argument, or of the group that shares one."""
        if part.unit == TEXT:
            raise ExpressionError(f"{where} wants a number, not a text")
        wanted = argument.unit
        like = getattr(argument, "like", "")
        if like and part.unit is not None:
            wanted = groups.setdefault(like, part.unit)
            if argument.unit and not units.same_kind(part.unit, argument.unit):
                raise ExpressionError(f"{where} wants {argument.unit}, not {part.unit!r}")
        return self._in_unit(part, wanted, where)

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
        part = next(each for each in found.arguments if each.name == found.unit[3:])
        if isinstance(part, Part):
            if model is not None and not isinstance(model, Literal):
                raise ExpressionError(f"{part.name} of {found.name} must be written in the formula")
            unit = part.units[str(model.value if model else part.default)]
            if not unit.startswith("as "):
                return unit
            sample = next(each for each in found.arguments if each.name == unit[3:])
            return groups.get(getattr(sample, "like", ""), getattr(sample, "unit", ""))
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
        words = {TEXT: "a text", TIME: "a time", TRUTH: "true or false"}
        if part.unit in words or unit in words:
            wanted, found = (words.get(each, "a number") for each in (unit, part.unit))
            raise ExpressionError(f"{where} must be {wanted}, not {found}")
        try:
            factor = units.factor(part.unit, unit)
        except InputError as error:
            raise ExpressionError(f"{where}: {error}") from None
        return Scaled(part, factor, unit)
