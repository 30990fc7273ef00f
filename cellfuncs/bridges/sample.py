"""Plain formulas of functions that take a whole range: sums over working columns, a row each.

What a row adds to a sum stands in a column of its own, so that the sum is one of standard
functions. A row in which a number is missing adds 0. The definitions are those of
`physics.statistics`, whose sorting and jackknifing a formula cannot follow; the tests hold the two
together.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from math import pi
from typing import Any

from cellfuncs.arguments import Sample
from cellfuncs.bridges.formula import Guarded, all_of
from cellfuncs.catalogue import Function
from cellfuncs.physics.statistics import LOCATION_TUNING, SCALE_TUNING
from cellfuncs.symbols import Expr, NotTraceable, Real, build, node

MISSING, HERE, NO = node(""), node("-"), node(False)
ROUNDING = 1e-28
"""Of a sum of squares, what rounding may leave of it where it should be 0"""
BEYOND = node(1e300)
"""Stands for a value that does not count where an order is asked for"""


def group_key(cell: Expr) -> Expr:
    """Return a text as groups are told apart: neither case nor blanks around it count."""
    return Expr("IF", Expr("ISERROR", cell), MISSING, Expr("LOWER", Expr("TRIM", cell)))


def over_rows(words: str, of_row: Expr) -> Expr:
    """Return the symbol of the range that holds an expression's value in every row."""
    return Expr("rows", node(words), of_row)


@dataclass(frozen=True)
class Rows:
    """The rows that count, and sums over them; with `key`, over those that share it with a row."""

    used: Expr
    key: Expr | None

    def column(self, words: str, of_row: Expr, otherwise: Expr) -> Expr:
        return over_rows(words, Expr("IF", self.used, of_row, otherwise))

    def total(self, words: str, of_row: Expr, holds: Expr | None = None) -> Expr:
        """Return a sum; where what `holds` says of a group does not, its rows add nothing."""
        if holds is not None:
            of_row = Expr("IF", holds, of_row, node(0.0))
        terms = self.column(words, of_row, node(0.0))
        if self.key is None:
            return Expr("SUM", terms)
        same = Expr("=", over_rows("group", self.key), self.key)
        return Expr("SUMPRODUCT", Expr("*", same, terms))

    @property
    def count(self) -> Expr:
        return self.total("counts", node(1.0))

    def median(self, words: str, of_row: Expr) -> Expr:
        self._are_all()
        return Expr("MEDIAN", self.column(words, of_row, MISSING))

    def _are_all(self) -> None:
        if self.key is not None:
            raise NotTraceable("an order within a group has no portable spelling")

    def least(self, words: str, of_row: Expr) -> Expr:
        self._are_all()
        return Expr("MIN", self.column(words, of_row, MISSING))

    def largest(self, words: str, of_row: Expr) -> Expr:
        self._are_all()
        return Expr("MAX", self.column(words, of_row, MISSING))


def square(x: Expr) -> Expr:
    return build("^", x, 2.0)


def root(x: Expr) -> Expr:
    return Expr("SQRT", x)


def names_in(expr: Expr) -> list[Expr]:
    """Return the cells that an expression is made of."""
    if expr.operation == "name":
        return [expr]
    return [cell for part in expr.arguments if isinstance(part, Expr) for cell in names_in(part)]


def guarded_sample(
    made: Function, given: Mapping[str, Any], only: Expr | None = None, by: Expr | None = None
) -> Guarded:
    """Return a function of samples as an expression with its guards.

    given: by argument name the cell of a row, an expression of one, or a plain value
    only: a cell of a row that must hold 1 for the row to count
    by: a cell with a text: then a row's result is that of the rows with the same text
    Raises NotTraceable where the function, or that part of it, cannot be written so.
    """
    spelt = SPELT.get(made.name)
    if spelt is None:
        raise NotTraceable(f"{made.name} cannot be written with standard spreadsheet functions")
    values = {argument.name: argument.default for argument in made.arguments if argument.optional}
    values |= given
    numbers: list[Expr] = []
    limits: list[Expr] = []
    for argument in made.arguments:
        if isinstance(argument, Sample) and isinstance(values[argument.name], Expr):
            value = values[argument.name]
            # a cell that is taken to another unit: empty or a text, it would be a number there
            numbers += [Expr("ISNUMBER", cell) for cell in names_in(value)]
            limits += [Expr(sign, value, node(limit)) for sign, limit in argument.each.limits()]
    used = all_of(numbers)
    if only is not None:
        counted = Expr("IF", Expr("ISNUMBER", only), Expr("=", only, node(1.0)), NO)
        used = Expr("IF", counted, used, NO)
    key = None if by is None else group_key(by)
    there = Rows(used, key)
    nothing = Expr("IF", Expr("=", there.count, node(0.0)), MISSING, HERE)
    blank = (nothing,) if by is None else (by, nothing)
    if not limits:
        found = spelt(there, values)
        return Guarded(found.value, blank, (), found.allowed)
    # a number that is not allowed spoils the results that it is part of, and no others
    rows = Rows(Expr("IF", used, all_of(limits), NO), key)
    good = Expr("=", there.count, rows.total("allowed", node(1.0)))
    found = spelt(rows, values)
    return Guarded(found.value, blank, (), (good, *found.allowed))


def _weighted(rows: Rows, given: Mapping[str, Any]) -> Guarded:
    value, sigma, part = given["values"], node(given["sigmas"]), given["part"]
    _written_out(part)
    if part == "count":
        return Guarded(rows.count)
    weight = rows.total("weight", 1 / square(sigma))
    if part == "sigma":
        return Guarded(1 / root(weight))
    mean = rows.total("weight × value", value / square(sigma)) / weight
    if part == "chi2":
        return Guarded(rows.total("χ²", square((value - mean) / sigma)))
    return Guarded(mean)


def _written_out(*words: Any) -> None:
    if any(isinstance(word, Expr) for word in words):
        raise NotTraceable("the method, the part and the origin must be written in the formula")


def _dispersion(rows: Rows, given: Mapping[str, Any]) -> Guarded:
    velocity, method, part = given["velocities"], given["method"], given["part"]
    _written_out(method, part)
    if part == "count":
        return Guarded(rows.count)
    if part == "center":
        return Guarded(_mean(rows, velocity) if method == "standard" else _location(rows, velocity))
    if part == "error" and method != "standard":
        raise NotTraceable("a jackknife has no portable spelling")
    scale = _SCALES[method](rows, velocity)
    if part == "error":
        scale = scale / root(2 * (rows.count - 1))
    differ = rows.largest("velocity in use", velocity) > rows.least("velocity in use", velocity)
    return Guarded(scale / (1 + node(given["z_system"])), (), (), (differ,))


def _mean(rows: Rows, x: Expr) -> Real:
    return rows.total("velocity", x) / rows.count


def _standard(rows: Rows, x: Expr) -> Expr:
    squares = rows.total("(velocity − mean)²", square(x - _mean(rows, x)))
    return root(squares / (rows.count - 1))


def _gapper(rows: Rows, x: Expr) -> Real:
    # Σ i(n−i)(xᵢ₊₁−xᵢ) is Σ xₖ(2k−n−1), with k the place of xₖ in order
    ordered = rows.column("velocity in order", x, BEYOND)
    before = Expr("SUMPRODUCT", Expr("*", ordered < x, node(1.0)))
    equal = Expr("SUMPRODUCT", Expr("*", Expr("=", ordered, x), node(1.0)))
    place = before + (equal + 1) / 2
    terms = rows.total("gaps", (x - _mean(rows, x)) * (2 * place - rows.count - 1))
    return terms * pi**0.5 / (rows.count * (rows.count - 1))


def _from_median(rows: Rows, x: Expr, tuning: float) -> tuple[Expr, Expr, Expr]:
    """Return the distance from the median, u² with 1 for all beyond, and the median distance."""
    distance = x - rows.median("velocity in use", x)
    deviation = rows.median("distance from the median", abs(distance))
    u = Expr("MIN", node(1.0), abs(distance) / (tuning * deviation))
    return distance, square(u), deviation


def _location(rows: Rows, x: Expr) -> Expr:
    median = rows.median("velocity in use", x)
    distance, u_squared, deviation = _from_median(rows, x, LOCATION_TUNING)
    weight = square(1 - u_squared)
    moved = rows.total("biweight × distance", weight * distance)
    weights = rows.total("biweight", weight)
    return Expr("IF", deviation > 0, median + moved / weights, median)


def _biweight(rows: Rows, x: Expr) -> Expr:
    distance, u_squared, deviation = _from_median(rows, x, SCALE_TUNING)
    inside = 1 - u_squared
    above = rows.total("biweight above", square(distance) * build("^", inside, 4.0))
    below = rows.total("biweight below", inside * (1 - 5 * u_squared))
    return Expr("IF", deviation > 0, root(rows.count * above) / abs(below), Expr("#NUM!"))


_SCALES: dict[str, Callable[[Rows, Expr], Real]] = {
    "biweight": _biweight,
    "gapper": _gapper,
    "standard": _standard,
}


def _line(rows: Rows, given: Mapping[str, Any]) -> Guarded:
    d, v, part = given["distances"], given["velocities"], given["part"]
    sigma, through_origin = given["sigmas"], given["through_origin"]
    _written_out(part, through_origin)
    has_errors = sigma is not None
    of_row = 1 / square(sigma) if has_errors else node(1.0)
    squares = rows.total("weight × distance²", of_row * square(d))
    middle = height = node(0.0)
    curvature, least = squares, node(0.0)
    if not through_origin:
        weight = rows.total("weight", of_row)
        middle = rows.total("weight × distance", of_row * d) / weight
        height = rows.total("weight × velocity", of_row * v) / weight
        curvature = rows.total("weight × (distance − mean)²", of_row * square(d - middle))
        # equal distances differ from their mean in the last digits
        least = squares * ROUNDING
    allowed = [curvature > least]
    along = d - middle
    slope = rows.total("weight × distance × velocity", of_row * along * (v - height)) / curvature
    residual = v - height - slope * along
    free = rows.count - (1.0 if through_origin else 2.0)
    if part == "scatter" or (part == "slope_error" and not has_errors):
        allowed.append(free > 0)

    def squared() -> Expr:
        return rows.total("residual²", square(residual), curvature > least)

    found = {
        "count": lambda: rows.count,
        "slope": lambda: slope,
        "intercept": lambda: height - slope * middle,
        "scatter": lambda: root(squared() / free),
        "slope_error": lambda: (
            1 / root(curvature) if has_errors else root(squared() / free / curvature)
        ),
    }
    return Guarded(found[part](), (), (), tuple(allowed))


SPELT: dict[str, Callable[[Rows, Mapping[str, Any]], Guarded]] = {
    "MEAN_WEIGHTED": _weighted,
    "VELOCITY_DISPERSION": _dispersion,
    "HUBBLE_FIT": _line,
}
"""The functions of samples that can be written"""
