"""Plain formulas: a function's own arithmetic written with standard spreadsheet functions.

What comes out computes in Excel 2010, LibreOffice 7 and web spreadsheets with nothing installed: no
LET, no LAMBDA, no dynamic array. Cosmology and settings are named cells, integrals sum over a
hidden table. Inside SUMPRODUCT only operators act on a range, because not every program evaluates
a function of a range element by element there: eˣ is EXP(1)^x, √x is x^0.5.
"""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Final

from cellfuncs import propagation
from cellfuncs.catalogue import Argument, CosmologySet, Function, Number
from cellfuncs.errors import CellError
from cellfuncs.physics import expansion, lines
from cellfuncs.physics.expansion import Cosmology
from cellfuncs.symbols import Expr, NotTraceable, build, mentions, name, node

LONGEST: Final = 8192
"""Characters that Excel takes in one formula."""


def _tables() -> dict[str, tuple[Any, ...]]:
    known = lines.keys()
    return {
        **{key: tuple(values.tolist()) for key, values in propagation.tables().items()},
        "line_key": tuple(known),
        "line_vacuum": tuple(line.vacuum for line in known.values()),
    }


_KINDS = (1, 2, 3)
SETTINGS_COSMOLOGY: Final = Cosmology(
    name="settings",
    h0=name("hubble_constant"),
    om0=name("omega_matter"),
    ode0=name("omega_dark_energy"),
    w0=name("dark_energy_w"),
    wa=name("dark_energy_wa"),
    tcmb0=name("background_temperature"),
    neff=name("neutrino_kinds"),
    m_nu=tuple(name(f"neutrino_mass_{kind}") for kind in _KINDS),
    ogamma0=name("omega_photon"),
    onu0=name("omega_neutrino"),
    ok0=name("omega_curvature"),
    neutrino_ratios=tuple(name(f"neutrino_ratio_{kind}") for kind in _KINDS),
)
"""The cosmology of a workbook's Settings sheet, as named cells."""


HIDDEN_TABLES: Final = _tables()
"""Every range that a plain formula may name, with what it holds from top to bottom."""

_RANK = {"<": 1, "<=": 1, ">": 1, ">=": 1, "=": 1, "&": 2, "+": 3, "-": 3, "*": 4, "/": 4, "^": 5}
_ATOM = 9


class FormulaError(CellError):
    """No plain formula can be written for this."""


def leaves(expr: Expr) -> int:
    """Return how many leaves an expression has once it is written out."""
    counted: dict[int, int] = {}

    def count(each: Expr) -> int:
        inside = [part for part in each.arguments if isinstance(part, Expr)]
        for part in inside:
            if id(part) not in counted:
                counted[id(part)] = count(part)
        return sum(counted[id(part)] for part in inside) or 1

    return count(expr)


def is_vector(expr: Expr) -> bool:
    """Tell whether an expression has a value a row of a hidden table."""
    if expr.operation == "name":
        return expr.arguments[0] in HIDDEN_TABLES
    if expr.operation in ("SUMPRODUCT", "lookup", "text", "number", "truth"):
        return False
    return any(is_vector(each) for each in expr.arguments)


def text_of(expr: Expr) -> str:
    """Return the formula text of an expression, without the leading equals sign."""
    return _rendered(expr)[0]


def _number(value: float) -> str:
    text = repr(value).upper()
    return text.removesuffix(".0")


def _operand(expr: Expr, rank: int) -> str:
    text, own = _rendered(expr)
    return text if own >= rank else f"({text})"


def _rendered(expr: Expr) -> tuple[str, int]:
    operation, arguments = expr.operation, expr.arguments
    if operation == "number":
        text = _number(arguments[0])
        return (text, 0) if text.startswith("-") else (text, _ATOM)
    if operation == "text":
        return '"' + arguments[0].replace('"', '""') + '"', _ATOM
    if operation == "truth":
        return ("TRUE()" if arguments[0] else "FALSE()"), _ATOM
    if operation == "name" or operation.startswith("#"):
        return (arguments[0] if arguments else operation), _ATOM
    if operation == "kept":
        return _rendered(arguments[1])
    if operation == "reading":
        raise NotTraceable("a text is read in columns of its own, which only a template has")
    if operation == "negative":
        return "-" + _operand(arguments[0], _ATOM), 0
    if operation in _RANK:
        return _infix(operation, *arguments)
    return _call(operation, arguments), _ATOM


def _infix(operation: str, left: Expr, right: Expr) -> tuple[str, int]:
    rank = _RANK[operation]
    # (eˣ)ᵃ is e^(ax); a root of a square is not so simple
    if operation == "^" and left.operation == "EXP":
        return _rendered(Expr("EXP", build("*", left.arguments[0], right)))
    # left to right, as the definition computed it: float sums depend on the order
    return f"{_operand(left, rank)}{operation}{_operand(right, rank + 1)}", rank


def _call(operation: str, arguments: tuple[Any, ...]) -> str:
    vector = operation not in ("SUMPRODUCT", "lookup") and any(map(is_vector, arguments))
    if operation == "EXP" and vector:
        return f"(EXP(1)^{_operand(arguments[0], _ATOM)})"
    if operation == "SQRT" and vector:
        return f"({_operand(arguments[0], _ATOM)}^0.5)"
    if operation == "log1p":
        # exact for small x too, which LN(1+x) is not
        x = arguments[0]
        return f"(2*ATANH({text_of(x / (2 + x))}))"
    if operation == "same":
        return f"LOWER(TRIM({text_of(arguments[0])}))={text_of(arguments[1])}"
    if operation == "blank":
        return f'TRIM({text_of(arguments[0])})=""'
    if operation == "lookup":
        key, keys, values = arguments
        return (
            f"IFERROR(INDEX({text_of(values)},MATCH({_spelling_key(text_of(key))},"
            f"{text_of(keys)},0)),#VALUE!)"
        )
    if vector and operation != "SUMPRODUCT":
        raise NotTraceable(f"{operation} of a whole table has no portable spelling")
    return f"{operation}({','.join(text_of(each) for each in arguments)})"


def _spelling_key(cell: str) -> str:
    text = f"LOWER(TRIM({cell}))"
    for old, new in lines.KEY_SUBSTITUTIONS:
        text = f'SUBSTITUTE({text},"{old}","{new}")'
    return text


@dataclass(frozen=True)
class Guarded:
    """A function's expression with what must hold before it may be shown."""

    value: Expr
    blank: tuple[Expr, ...] = ()
    """Cells that must not be empty"""
    typed: tuple[Expr, ...] = ()
    """Conditions that a text in place of a number breaks"""
    allowed: tuple[Expr, ...] = ()
    """Conditions that a number out of its domain breaks, the inner ones first: an outer one may
    only be asked where they hold"""

    def mapped(self, change: Callable[[Expr], Expr]) -> "Guarded":
        """Return the same with every expression in it changed."""
        parts = (tuple(map(change, each)) for each in (self.blank, self.typed, self.allowed))
        return Guarded(change(self.value), *parts)

    def formula(self, when_blank: Expr | None = None) -> str:
        """Return the whole formula, equals sign included.

        An empty cell gives `when_blank`, left out: #N/A.
        """
        expr = self.value
        for condition in reversed(self.allowed):
            expr = Expr("IF", condition, expr, Expr("#NUM!"))
        if self.typed:
            expr = Expr("IF", all_of(self.typed), expr, Expr("#VALUE!"))
        if self.blank:
            empty = any_of(tuple(Expr("blank", cell) for cell in self.blank))
            expr = Expr("IF", empty, Expr("NA") if when_blank is None else when_blank, expr)
        # parts are shared, so a formula may be endless in text though small in memory
        if leaves(expr) > LONGEST:
            raise FormulaError(f"the plain formula is far longer than {LONGEST} characters")
        text = "=" + text_of(expr)
        if len(text) > LONGEST:
            raise FormulaError(
                f"the plain formula has {len(text)} characters, {LONGEST} are allowed"
            )
        return text


def all_of(conditions: Sequence[Expr]) -> Expr:
    """Return the condition that holds where all of them do."""
    return conditions[0] if len(conditions) == 1 else Expr("AND", *conditions)


def any_of(conditions: Sequence[Expr]) -> Expr:
    """Return the condition that holds where one of them does."""
    return conditions[0] if len(conditions) == 1 else Expr("OR", *conditions)


def guarded(made: Function, given: Mapping[str, Any]) -> Guarded:
    """Return a function of cells as an expression with its guards.

    given: by argument name an Expr (a cell, or an expression of cells), the settings' cosmology, or
    a plain value; what is left out takes its default.
    Raises NotTraceable where the function cannot be written so.
    """
    if not made.traceable:
        raise NotTraceable(f"{made.name} cannot be written with standard spreadsheet functions")
    values: dict[str, Any] = {}
    blank: list[Expr] = []
    typed: list[Expr] = []
    allowed: list[Expr] = []
    for argument in made.arguments:
        value = given.get(argument.name)
        if not isinstance(value, Expr):
            if value is not None:
                values[argument.name] = value
            continue
        if isinstance(argument, CosmologySet):
            raise NotTraceable("a cosmology in a cell: a plain formula takes it from the settings")
        if argument.optional:
            if value.operation == "name":
                value = Expr("IF", Expr("blank", value), node(argument.default), value)
        elif value.operation == "name":
            blank.append(value)
        values[argument.name] = value
        _guard(argument, value, typed, allowed)
    value = made.traced(**values)
    if value.operation != "name" and mentions(value, "omega_photon"):
        allowed.append(name("expansion_holds"))
    return Guarded(value, tuple(blank), tuple(typed), (all_of(allowed),) if allowed else ())


def _guard(argument: Argument, value: Expr, typed: list[Expr], allowed: list[Expr]) -> None:
    if isinstance(argument, Number):
        # what is computed inside has guards of its own
        if value.operation == "name" or (value.operation == "IF" and argument.optional):
            typed.append(Expr("ISNUMBER", value))
        allowed.extend(
            Expr(comparison, value, node(limit)) for comparison, limit in argument.limits()
        )


def derived_settings() -> dict[str, Expr]:
    """Return the settings that follow from others, as expressions of named cells.

    `omega_dark_energy_own` is an input that may be empty, which stands for a flat universe.
    """
    cells = SETTINGS_COSMOLOGY
    own = name("omega_dark_energy_own")
    flat, curved = (
        expansion.derived(
            "settings",
            cells.h0,
            cells.om0,
            dark_energy,
            cells.w0,
            cells.wa,
            cells.tcmb0,
            cells.neff,
            cells.m_nu,
        )
        for dark_energy in (None, own)
    )
    is_flat = Expr("blank", own)
    sums = {
        f"{integral}_{how}": sum_
        for integral, both in cells.sums_compared().items()
        for how, sum_ in zip(("in_one_sum", "in_sums"), both, strict=True)
    }
    error = (
        abs(name("path_in_one_sum") / name("path_in_sums") - 1)
        + abs(name("time_in_one_sum") / name("time_in_sums") - 1)
        + abs(name("age_in_one_sum") / (name("time_in_sums") + name("age_in_sums")) - 1)
    )
    return {
        "omega_photon": flat.ogamma0,
        **{
            f"neutrino_ratio_{kind}": node(ratio)
            for kind, ratio in zip(_KINDS, flat.neutrino_ratios, strict=True)
        },
        "omega_neutrino": flat.onu0,
        "omega_dark_energy": Expr("IF", is_flat, flat.ode0, own),
        "omega_curvature": Expr("IF", is_flat, node(0.0), curved.ok0),
        **sums,
        "expansion_error": error,
        "expansion_holds": Expr(
            "IF",
            Expr("ISNUMBER", name("expansion_error")),
            name("expansion_error") < 1e-9,
            node(False),
        ),
    }
