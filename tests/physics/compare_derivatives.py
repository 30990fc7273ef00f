"""Compare three exact ways to the derivative of a function of the catalogue; run by hand.

    PYTHONPATH=tests python tests/physics/compare_derivatives.py

All three work on the expression that a function gives when it is traced; each line shows the worst
relative error against mpmath over the cases of tests/published/test_uncertainty.py, the time for
one number, the time for each number of a column, and what the first call costs besides.

    symbols   the derivative as an expression, made once and then evaluated: cellfuncs.propagation
    step      a complex step, Im f(x + ih)/h with h = 1e-100 (Squire & Trapp 1998, SIAM Rev. 40)
    dual      numbers a + bε with ε² = 0, carried through the expression by the chain rule

A fourth, a complex step through the functions themselves, is not here: `if`, limits and the
piecewise polynomials that answer for the integrals take no complex number.
"""

from collections.abc import Callable
from time import perf_counter
from typing import Any

import numpy as np
from physics.test_expansion import mp, mpf
from published.test_uncertainty import CASES, Case

from cellfuncs import CATALOGUE
from cellfuncs.catalogue import Number
from cellfuncs.propagation import derivative, evaluated, tables
from cellfuncs.symbols import Expr, name

Way = Callable[[Expr, float, Any], Any]
COLUMN = 10_000
STEP = 1e-100

UNARY: dict[str, tuple[Callable[..., Any], Callable[..., Any]]] = {
    "negative": (np.negative, lambda u: -1.0),
    "SQRT": (np.sqrt, lambda u: 0.5 / np.sqrt(u)),
    "EXP": (np.exp, np.exp),
    "LN": (np.log, lambda u: 1 / u),
    "LOG10": (np.log10, lambda u: 1 / u / np.log(10)),
    "log1p": (np.log1p, lambda u: 1 / (1 + u)),
    "SIN": (np.sin, np.cos),
    "SINH": (np.sinh, np.cosh),
}
COMPARISONS = {">": np.greater, ">=": np.greater_equal, "<": np.less, "<=": np.less_equal}


def walked(expr: Expr, x: Any, operation: Callable[[str, list[Any]], Any]) -> Any:
    known: dict[int, Any] = {}

    def of(each: Any) -> Any:
        if not isinstance(each, Expr):
            return each
        if id(each) not in known:
            if each.operation == "name":
                known[id(each)] = x if each.arguments[0] == "x" else tables()[each.arguments[0]]
            elif each.operation == "number":
                known[id(each)] = each.arguments[0]
            elif each.operation.startswith("#"):
                known[id(each)] = np.nan
            else:
                known[id(each)] = operation(each.operation, [of(part) for part in each.arguments])
        return known[id(each)]

    return of(expr)


def stepped(operation: str, parts: list[Any]) -> Any:
    if operation in COMPARISONS:
        return COMPARISONS[operation](*map(np.real, parts))
    match operation:
        case "AND":
            return np.logical_and(*parts)
        case "IF":
            return np.where(*parts)
        case "ABS":
            return np.where(np.real(parts[0]) < 0, -parts[0], parts[0])
        case "SUMPRODUCT":
            return np.sum(parts[0], axis=-1, keepdims=True)
        case "log1p":  # numpy's of a complex number loses a small real part
            return np.log1p(parts[0].real) + 1j * parts[0].imag / (1 + parts[0].real)
    if operation in UNARY:
        return UNARY[operation][0](parts[0])
    return {"+": np.add, "-": np.subtract, "*": np.multiply, "/": np.divide, "^": np.power}[
        operation
    ](*parts)


def dual(operation: str, parts: list[Any]) -> Any:
    pairs = [part if isinstance(part, tuple) else (part, 0.0) for part in parts]
    (u, du), (v, dv) = pairs[0], pairs[-1]
    if operation in UNARY:
        value, slope = UNARY[operation]
        return value(u), slope(u) * du
    if operation in COMPARISONS:
        return COMPARISONS[operation](u, v)
    match operation:
        case "AND":
            return np.logical_and(u, v)
        case "IF":
            yes, no = pairs[1:]
            return np.where(u, yes[0], no[0]), np.where(u, yes[1], no[1])
        case "ABS":
            return abs(u), np.where(u < 0, -1.0, 1.0) * du
        case "SUMPRODUCT":
            value = np.sum(u, axis=-1, keepdims=True)
            return value, np.sum(np.broadcast_to(du, np.shape(u)), axis=-1, keepdims=True)
        case "+":
            return u + v, du + dv
        case "-":
            return u - v, du - dv
        case "*":
            return u * v, du * v + u * dv
        case "/":
            return u / v, (du - u / v * dv) / v
        case "^":
            by_exponent = u**v * np.log(u) * dv if np.any(dv) else 0.0
            return u**v, v * u ** (v - 1) * du + by_exponent
    raise TypeError(operation)


def by_symbols(expr: Expr, x: Any, slope: Expr) -> Any:
    return evaluated(slope, {"x": x})


def by_step(expr: Expr, x: Any, slope: Expr) -> Any:
    with np.errstate(all="ignore"):
        result = walked(expr, np.asarray(x)[..., None] + 1j * STEP, stepped)
        return (np.imag(result) / STEP)[..., 0]


def by_dual(expr: Expr, x: Any, slope: Expr) -> Any:
    with np.errstate(all="ignore"):
        result = walked(expr, (np.asarray(x)[..., None], 1.0), dual)
        return np.asarray(result[1])[..., 0] if np.ndim(result[1]) else result[1]


WAYS: dict[str, Way] = {"symbols": by_symbols, "step": by_step, "dual": by_dual}


def best(work: Callable[[], Any], times: int) -> float:
    taken = []
    for _ in range(5):
        start = perf_counter()
        for _ in range(times):
            work()
        taken.append((perf_counter() - start) / times)
    return min(taken)


def traced(case: Case) -> tuple[Expr, float]:
    """Return the case's function of its first number, the others as they are."""
    made = CATALOGUE[case.name]
    first = case.numbers[0]
    given = [name("x") if at == first else each for at, each in enumerate(case.arguments)]
    assert isinstance(made.arguments[first], Number)
    return made.traced(*given), case.arguments[first]


def main() -> None:
    cases = [case for case in CASES if CATALOGUE[case.name].traceable]
    truth = []
    for case in cases:
        values = tuple(mpf(case.arguments[at]) for at in case.numbers)
        which = tuple(int(place == 0) for place in range(len(values)))
        with mp.workdps(20):
            truth.append(float(mp.diff(case.formula, values, which)))
    expressions = [traced(case) for case in cases]
    slopes = [derivative(expr, "x") for expr, _ in expressions]
    shown = ["VELOCITY_SUM", "REDSHIFT_FROM_LINE", "DISTANCE_LUMINOSITY", "AGE_AT_REDSHIFT"]
    print(f"{'':10}{'worst error':>14}" + "".join(f"{each:>28}" for each in shown))
    for label, way in WAYS.items():
        errors = [
            abs(float(np.squeeze(way(expr, x, slope))) / exact - 1)
            for (expr, x), slope, exact in zip(expressions, slopes, truth, strict=True)
        ]
        line = f"{label:10}{max(errors):14.0e}"
        for wanted in shown:
            at = next(at for at, case in enumerate(cases) if case.name == wanted)
            (expr, x), slope = expressions[at], slopes[at]
            column = np.full(COLUMN, x)
            one = best(lambda: way(expr, x, slope), 50)  # noqa: B023
            each = best(lambda: way(expr, column, slope), 2) / COLUMN  # noqa: B023
            line += f"{one * 1e6:14.0f} µs {each * 1e9:7.0f} ns"
        print(line)
    for wanted in shown:
        at = next(at for at, case in enumerate(cases) if case.name == wanted)
        once = best(lambda: derivative(expressions[at][0], "x"), 5)  # noqa: B023
        print(f"derivative of {wanted}, once: {once * 1e6:.0f} µs")


if __name__ == "__main__":
    main()
