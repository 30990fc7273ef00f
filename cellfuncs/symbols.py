"""Symbols that stand in for numbers, so that a function's own arithmetic can be read off it.

A function called with an `Expr` in place of a float returns an `Expr`: the tree of what it would
have computed. numpy's functions and Python's operators build the tree by themselves. The few
things that arithmetic alone cannot say (a choice, a limit, a table looked up) have a word each
below, which acts on floats, on arrays and on symbols alike.
"""

import math
from collections.abc import Callable, Sequence
from math import inf, isfinite, nan
from typing import Any, TypeAlias

import numpy as np

from cellfuncs.errors import DomainError

Real: TypeAlias = Any
"""A float, an array of floats, or an `Expr`."""


class NotTraceable(TypeError):
    """The function does something that a plain formula cannot."""


class Expr:
    """A node: an operation and what it acts on.

    Leaves are `number` (a float), `text` (a str) and `name` (a cell, a range or a named cell).
    """

    __slots__ = ("arguments", "operation")
    __array_priority__ = 1000

    def __init__(self, operation: str, *arguments: Any) -> None:
        self.operation = operation
        self.arguments = arguments

    def __repr__(self) -> str:
        return f"Expr({self.operation}, {', '.join(map(repr, self.arguments))})"

    def __array_ufunc__(self, ufunc: np.ufunc, method: str, *inputs: Any, **options: Any) -> "Expr":
        name = _UFUNC_NAMES.get(ufunc.__name__)
        if name is None or method != "__call__" or options:
            raise NotTraceable(f"no spreadsheet counterpart of numpy's {ufunc.__name__}")
        return build(name, *inputs)

    def __add__(self, other: Real) -> "Expr":
        return build("+", self, other)

    def __radd__(self, other: Real) -> "Expr":
        return build("+", other, self)

    def __sub__(self, other: Real) -> "Expr":
        return build("-", self, other)

    def __rsub__(self, other: Real) -> "Expr":
        return build("-", other, self)

    def __mul__(self, other: Real) -> "Expr":
        return build("*", self, other)

    def __rmul__(self, other: Real) -> "Expr":
        return build("*", other, self)

    def __truediv__(self, other: Real) -> "Expr":
        return build("/", self, other)

    def __rtruediv__(self, other: Real) -> "Expr":
        return build("/", other, self)

    def __pow__(self, other: Real) -> "Expr":
        return build("^", self, other)

    def __rpow__(self, other: Real) -> "Expr":
        return build("^", other, self)

    def __neg__(self) -> "Expr":
        return build("negative", self)

    def __abs__(self) -> "Expr":
        return build("ABS", self)

    def __gt__(self, other: Real) -> "Expr":
        return build(">", self, other)

    def __ge__(self, other: Real) -> "Expr":
        return build(">=", self, other)

    def __lt__(self, other: Real) -> "Expr":
        return build("<", self, other)

    def __le__(self, other: Real) -> "Expr":
        return build("<=", self, other)

    def __and__(self, other: Real) -> "Expr":
        return build("AND", self, other)

    def __rand__(self, other: Real) -> "Expr":
        return build("AND", other, self)

    def __bool__(self) -> bool:
        raise NotTraceable("the function decides on a number with `if`; `either` can be traced")

    def __float__(self) -> float:
        raise NotTraceable("the function needs the number itself, not its symbol")


_UFUNC_NAMES = {
    "add": "+",
    "subtract": "-",
    "multiply": "*",
    "divide": "/",
    "power": "^",
    "negative": "negative",
    "greater": ">",
    "greater_equal": ">=",
    "less": "<",
    "less_equal": "<=",
    "bitwise_and": "AND",
    "logical_and": "AND",
    "absolute": "ABS",
    "sqrt": "SQRT",
    "exp": "EXP",
    "log": "LN",
    "log10": "LOG10",
    "log1p": "log1p",
    "sin": "SIN",
    "cos": "COS",
    "sinh": "SINH",
    "arcsinh": "ASINH",
    "floor": "INT",
}

_FOLDED: dict[str, Callable[..., float]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
    "^": lambda a, b: a**b,
    "negative": lambda a: -a,
}


def node(value: Any) -> Expr:
    """Return `value` as a leaf, or as it is where it is a node already."""
    if isinstance(value, Expr):
        return value
    if isinstance(value, str):
        return Expr("text", value)
    if isinstance(value, (bool, np.bool_)):
        return Expr("truth", bool(value))
    number = float(value)
    if not isfinite(number):
        raise NotTraceable(f"{number} has no spelling in a formula")
    return Expr("number", number)


def name(text: str) -> Expr:
    """Return the symbol of a cell, a range or a named cell."""
    return Expr("name", text)


def number_of(value: Expr) -> float | None:
    """Return the number that a leaf holds, None for every other node."""
    return value.arguments[0] if value.operation == "number" else None


def mentions(expr: Expr, cell: str) -> bool:
    """Tell whether a cell's or a table's name is among the leaves."""
    seen: set[int] = set()
    waiting = [expr]
    while waiting:
        each = waiting.pop()
        if each.operation == "name" and each.arguments[0] == cell:
            return True
        fresh = [part for part in each.arguments if isinstance(part, Expr) and id(part) not in seen]
        seen.update(map(id, fresh))
        waiting += fresh
    return False


def build(operation: str, *arguments: Any) -> Expr:
    """Return the node of an operation, with constants folded and neutral elements dropped."""
    nodes = tuple(node(argument) for argument in arguments)
    numbers = [number_of(each) for each in nodes]
    if operation in _FOLDED and None not in numbers:
        return node(_FOLDED[operation](*numbers))
    if operation == "+":
        if numbers[0] == 0:
            return nodes[1]
        if numbers[1] == 0:
            return nodes[0]
    elif operation == "-" and numbers[1] == 0:
        return nodes[0]
    elif operation == "*":
        if 0 in numbers:
            return node(0.0)
        if numbers[0] == 1:
            return nodes[1]
        if numbers[1] == 1:
            return nodes[0]
    elif operation in ("/", "^") and numbers[1] == 1:
        return nodes[0]
    return Expr(operation, *nodes)


def _of_float(of_float: Callable[[float], float], of_array: np.ufunc) -> Callable[[Real], Real]:
    """Return numpy's function, which asks `math` for a single float.

    numpy takes five times as long over one float, and what it returns is slow to go on with.
    """

    def function(x: Real) -> Real:
        if type(x) is not float:
            return of_array(x)
        try:
            return of_float(x)
        except ValueError:
            return nan
        except OverflowError:
            return inf

    return function


sqrt = _of_float(math.sqrt, np.sqrt)
exp = _of_float(math.exp, np.exp)
log = _of_float(math.log, np.log)
log10 = _of_float(math.log10, np.log10)
log1p = _of_float(math.log1p, np.log1p)
sin = _of_float(math.sin, np.sin)
cos = _of_float(math.cos, np.cos)
sinh = _of_float(math.sinh, np.sinh)
floor = _of_float(math.floor, np.floor)


def angle_of(x: Real, y: Real) -> Real:
    """Return the angle from the x axis to the point (x, y), −π to π."""
    if isinstance(x, Expr) or isinstance(y, Expr):
        return build("ATAN2", x, y)
    return math.atan2(y, x) if type(x) is float and type(y) is float else np.arctan2(y, x)


def modulo(x: Real, period: float) -> Real:
    """Return what is left of x above a multiple of the period, 0 to below the period."""
    return x - period * floor(x / period)


def kept(words: str, value: Real) -> Real:
    """Return the value, which a template computes in a column of its own, called by these words.

    What several formulas of a row need is computed once so, and no formula gets too long.
    """
    return Expr("kept", node(words), value) if isinstance(value, Expr) else value


def either(condition: Real, yes: Callable[[], Real], no: Callable[[], Real]) -> Real:
    """Return `yes()` where the condition holds and `no()` elsewhere."""
    if isinstance(condition, Expr):
        if condition.operation == "truth":
            return yes() if condition.arguments[0] else no()
        return Expr("IF", condition, node(yes()), node(no()))
    if isinstance(condition, np.ndarray):
        return np.where(condition, yes(), no())
    return yes() if condition else no()


def within(condition: Real, value: Real, words: str, result: Callable[[], Real]) -> Real:
    """Return `result()` where the condition holds: elsewhere a float raises, an array holds NaN.

    `words` is the sentence for the exception, with `{}` where the value belongs.
    """
    if isinstance(condition, Expr):
        return Expr("IF", condition, node(result()), Expr("#NUM!"))
    if isinstance(condition, np.ndarray):
        return np.where(condition, result(), np.nan)
    if condition:
        return result()
    raise DomainError(words.format(f"{value:.10g}"))


def choose(word: Any, **cases: Callable[[], Real]) -> Real:
    """Return what the case named by `word` gives; the word is known to be one of them."""
    if not isinstance(word, Expr):
        return cases[word]()
    result = Expr("#VALUE!")
    for case, outcome in reversed(cases.items()):
        result = Expr("IF", Expr("same", word, node(case)), node(outcome()), result)
    return result


def total(terms: Real) -> Real:
    """Return the sum over a hidden table's rows (or over an array's last axis)."""
    if isinstance(terms, Expr):
        return Expr("SUMPRODUCT", terms)
    return np.sum(terms, axis=-1)


def looked_up(key: Expr, keys: str, values: str) -> Expr:
    """Return the symbol of the value that stands beside a text key in a hidden table."""
    return Expr("lookup", key, name(keys), name(values))


def polynomial(x: Real, coefficients: Sequence[float]) -> Real:
    """Return c₀ + c₁x + c₂x² + … by Horner's rule."""
    result: Real = coefficients[-1]
    for coefficient in reversed(coefficients[:-1]):
        result = coefficient + x * result
    return result
