"""The one list of functions, and the decorator that puts a definition on it.

A definition is the formula alone. What an argument may be, how columns broadcast and what a bad
input gives stand here once, and every face (Python, cells, formulas, help) reads them from here.
"""

import inspect
from abc import ABC, abstractmethod
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field, replace
from datetime import datetime
from functools import lru_cache
from math import inf, isfinite, nextafter
from typing import Any, Final

import numpy as np

from cellfuncs.errors import (
    CellError,
    DomainError,
    InputError,
    MissingInput,
    is_empty,
    near_matches,
)
from cellfuncs.physics.expansion import Cosmology, cosmology_from
from cellfuncs.symbols import Expr, node

REQUIRED: Final = inspect.Parameter.empty


def shown(value: Any) -> str:
    """Return a value as a message shows it: short, on one line."""
    if isinstance(value, float):
        return f"{value:.10g}"
    if isinstance(value, datetime):
        return f"the date {value:%Y-%m-%d %H:%M}"
    text = " ".join(repr(value).split())
    return text if len(text) <= 60 else text[:57] + "..."


@dataclass(frozen=True, kw_only=True)
class Argument(ABC):
    """What one argument means and may be; `name` and `default` come from the definition."""

    meaning: str
    name: str = ""
    default: Any = REQUIRED

    @property
    def optional(self) -> bool:
        return self.default is not REQUIRED

    @property
    @abstractmethod
    def allowed(self) -> str:
        """What is allowed, in words that finish «it must be …»."""

    @abstractmethod
    def parsed(self, value: Any) -> Any:
        """Return the value as the formula takes it; raise a CellError where it is not allowed."""

    def is_column(self, value: Any) -> bool:
        """Tell whether the value holds one element a row rather than one for all."""
        return isinstance(value, (np.ndarray, list, tuple, range)) and np.ndim(as_array(value)) > 0

    def symbol(self, value: Expr) -> Any:
        """Return what stands for the parsed value where a cell holds the argument."""
        return value

    def default_or(self, value: Any) -> Any:
        """Return `value`, or the default where it is None."""
        return self.default if value is None and self.optional else value

    @property
    def default_text(self) -> str:
        return shown(self.default) if isinstance(self.default, float) else str(self.default)


@dataclass(frozen=True, kw_only=True)
class Numeric(Argument):
    """An argument that the formula takes as a float, and its column as an array of floats."""

    unit: str = ""

    @abstractmethod
    def column(self, value: Any) -> tuple[Any, CellError | None]:
        """Return float64 with NaN where nothing can be computed, and the first InputError met."""


@dataclass(frozen=True, kw_only=True)
class Number(Numeric):
    """A number with a unit and limits.

    `unit` "" is a pure number. `like` names a group whose members share one unit, whichever it is:
    `unit` is then only its kind, shown in the help.
    """

    like: str = ""
    above: float = -inf
    at_least: float = -inf
    below: float = inf
    at_most: float = inf

    @property
    def allowed(self) -> str:
        limits = [
            *([f"above {self.above:.10g}"] if self.above > -inf else []),
            *([f"{self.at_least:.10g} or more"] if self.at_least > -inf else []),
            *([f"below {self.below:.10g}"] if self.below < inf else []),
            *([f"{self.at_most:.10g} or less"] if self.at_most < inf else []),
        ]
        unit = f" {self.unit}" if self.unit else ""
        return " and ".join(limits) + unit if limits else "a finite number"

    def limits(self) -> Iterator[tuple[str, float]]:
        """Yield comparison and limit of each limit that there is."""
        for comparison, limit in (
            (">", self.above),
            (">=", self.at_least),
            ("<", self.below),
            ("<=", self.at_most),
        ):
            if isfinite(limit):
                yield comparison, limit

    def parsed(self, value: Any) -> float:
        if type(value) is not float:
            value = self._as_float(value)
        low, high = self.open_interval
        if low < value < high:
            return value  # type: ignore[no-any-return]
        if value != value:
            raise MissingInput(f"{self.name} is empty")
        if not isfinite(value):
            raise DomainError(f"{self.name} is {value}; it must be a finite number")
        raise DomainError(f"{self.name} is {shown(value)}; it must be {self.allowed}")

    def _as_float(self, value: Any) -> float:
        if is_empty(value):
            raise MissingInput(f"{self.name} is empty")
        if isinstance(value, (bool, np.bool_, str, bytes, complex, np.complexfloating)):
            raise InputError(f"{self.name} is {shown(value)}, not a number")
        try:
            with np.errstate(all="ignore"):
                return float(value)
        except OverflowError:
            raise DomainError(f"{self.name} is too large for a number") from None
        except (TypeError, ValueError, ArithmeticError):
            raise InputError(f"{self.name} is {shown(value)}, not a number") from None

    def column(self, value: Any) -> tuple[Any, CellError | None]:
        array = as_array(value)
        if array.dtype.kind in "fiu":
            with np.errstate(all="ignore"):
                numbers = array.astype(np.float64)
            low, high = self.open_interval
            good = (numbers > low) & (numbers < high)
            return numbers if good.all() else np.where(good, numbers, np.nan), None
        wrong: CellError | None = None
        numbers = np.full(array.shape, np.nan)
        flat = numbers.reshape(-1)
        for index, each in enumerate(array.reshape(-1).tolist()):
            try:
                flat[index] = self.parsed(self._filled(each))
            except InputError as error:
                wrong = wrong or error
            except CellError:
                pass
        return numbers, wrong

    def _filled(self, value: Any) -> Any:
        return self.default if self.optional and left_out(value) else value

    @property
    def open_interval(self) -> tuple[float, float]:
        """The limits as a pair that a number must lie between, itself not counted"""
        return (
            max(self.above, nextafter(self.at_least, -inf)),
            min(self.below, nextafter(self.at_most, inf)),
        )


@dataclass(frozen=True, kw_only=True)
class Word(Argument):
    """A text that the formula needs; a family that knows more of it gives a subclass."""

    @property
    def allowed(self) -> str:
        return "text"

    def parsed(self, value: Any) -> Any:
        if is_empty(value):
            raise MissingInput(f"{self.name} is empty")
        if not isinstance(value, str):
            raise InputError(f"{self.name} is {shown(value)}, not text")
        return self.resolved(value.strip(" "))

    def resolved(self, text: str) -> Any:
        """Return what the text stands for; raise InputError where it is not known."""
        return text


@dataclass(frozen=True, kw_only=True)
class Choice(Word):
    """One word out of a fixed list."""

    choices: tuple[str, ...]

    @property
    def allowed(self) -> str:
        return " or ".join(f'"{choice}"' for choice in self.choices)

    def resolved(self, text: str) -> str:
        folded = text.casefold()
        for choice in self.choices:
            if folded == choice.casefold():
                return choice
        raise InputError(
            f"{self.name} is {shown(text)}; it must be {self.allowed}"
            f" ({near_matches(text, self.choices)})"
        )


@dataclass(frozen=True, kw_only=True)
class Truth(Argument):
    """Yes or no."""

    @property
    def allowed(self) -> str:
        return "TRUE or FALSE"

    def parsed(self, value: Any) -> bool:
        if isinstance(value, (bool, np.bool_)):
            return bool(value)
        if is_empty(value):
            raise MissingInput(f"{self.name} is empty")
        # not every spreadsheet tells a logical value from 1 and 0
        if isinstance(value, (int, float, np.number)) and value in (0, 1):
            return bool(value)
        if isinstance(value, str) and value.strip().casefold() in ("true", "false"):
            return value.strip().casefold() == "true"
        raise InputError(f"{self.name} is {shown(value)}; it must be {self.allowed}")

    @property
    def default_text(self) -> str:
        return str(self.default).upper()


@dataclass(frozen=True, kw_only=True)
class CosmologySet(Argument):
    """A published set's name, or a mapping or two-column range of parameters."""

    @property
    def allowed(self) -> str:
        return "a published set's name, or two columns: parameter and value"

    def parsed(self, value: Any) -> Cosmology:
        if not isinstance(value, (Mapping, list, tuple, np.ndarray)) and is_empty(value):
            raise MissingInput(f"{self.name} is empty")
        return cosmology_from(value)

    def is_column(self, value: Any) -> bool:
        # a column of names has no rows within; a two-column range has
        return (
            isinstance(value, (np.ndarray, list, tuple))
            and len(value) > 0
            and (value[0] is np.ma.masked or not isinstance(value[0], (np.ndarray, list, tuple)))
        )


@dataclass(frozen=True, kw_only=True)
class Anything(Argument):
    """A value that the definition itself looks at."""

    @property
    def allowed(self) -> str:
        return "anything"

    def parsed(self, value: Any) -> Any:
        return value

    def is_column(self, value: Any) -> bool:
        return False


def _unmasked(value: Any) -> Any:
    """Return an array with None where it is masked; without dimensions, the one value it holds"""
    if isinstance(value, np.ma.MaskedArray):
        value = np.where(np.ma.getmaskarray(value), np.array(None), np.asarray(value.data, object))
    return value if value.ndim else value[()]


def _without_masks(value: Any) -> Any:
    """Return a list with None in place of what is masked, however deep"""
    if not any(each is np.ma.masked or isinstance(each, (list, tuple)) for each in value):
        return value
    return [
        None
        if each is np.ma.masked
        else _without_masks(each)
        if isinstance(each, (list, tuple))
        else each
        for each in value
    ]


def as_array(value: Any) -> np.ndarray[Any, np.dtype[Any]]:
    if isinstance(value, np.ndarray):
        return value
    value = _without_masks(value)
    try:
        array = np.asarray(value)
    except (ValueError, OverflowError, TypeError):
        array = None
    # numpy turns a list with one text in it into texts, and None into nothing of use
    if array is None or array.dtype.kind not in "fiu":
        try:
            array = np.asarray(value, dtype=object)
        except ValueError:
            raise InputError("the rows of a range differ in length") from None
    return array


@dataclass(frozen=True, eq=False)
class Function:
    """A function of the catalogue; call it with floats or with columns."""

    name: str
    family: str
    summary: str
    notes: str
    arguments: tuple[Argument, ...]
    unit: str
    """Of the result: a VOUnit, "" for a pure number, "text", or "as NAME" for an argument's unit"""
    source: str
    traceable: bool
    body: Callable[..., Any]
    variadic: bool = False
    examples: tuple[str, ...] = ()
    caution: str = ""
    """What must be said wherever the function is offered"""
    _defaults: tuple[Any, ...] = field(init=False, repr=False)
    _limits: tuple[tuple[float, float], ...] = field(init=False, repr=False)
    _required: int = field(init=False, repr=False)

    def __post_init__(self) -> None:
        defaults = tuple(
            argument.parsed(argument.default) if argument.optional else REQUIRED
            for argument in self.arguments
        )
        limits = tuple(
            argument.open_interval if isinstance(argument, Number) else (inf, -inf)
            for argument in self.arguments
        )
        object.__setattr__(self, "_defaults", defaults)
        object.__setattr__(self, "_limits", limits)
        object.__setattr__(self, "_required", 10**6 if self.variadic else defaults.count(REQUIRED))
        object.__setattr__(self, "__name__", self.name.lower())
        object.__setattr__(self, "__qualname__", self.name.lower())
        object.__setattr__(self, "__module__", self.body.__module__)
        object.__setattr__(self, "__doc__", docstring(self))
        object.__setattr__(self, "__signature__", inspect.signature(self.body))

    @property
    def gives_text(self) -> bool:
        """Whether a result may be a text: always, or where an argument asks for a part that is."""
        return self.unit == "text" or any(
            "text" in getattr(argument, "units", {}).values() for argument in self.arguments
        )

    def __call__(self, *given: Any, **named: Any) -> Any:
        # a cell is a call: floats inside their limits go straight to the formula, and whatever is
        # not so, or does not end well, takes the careful way (tests/benchmarks/ has the price)
        if not named:
            ready = []
            for value, (low, high) in zip(given, self._limits):  # noqa: B905 - given may be short
                if type(value) is not float or not low < value < high:
                    break
                ready.append(value)
            else:
                if self._required <= len(given) <= len(self.arguments):
                    try:
                        result = self.body(*ready, *self._defaults[len(ready) :])
                        if type(result) is float and -inf < result < inf:
                            return result
                    except (CellError, ArithmeticError):
                        pass
        if self.variadic:
            values: Sequence[Any] = given
        else:
            values = self.bound(given, named)
            arguments = self.arguments
            for argument, value in zip(arguments, values, strict=True):
                if type(value) is not float and argument.is_column(value):
                    return self._columns(values)
        return self._single(values)

    def bound(self, given: Sequence[Any], named: Mapping[str, Any] = {}) -> list[Any]:
        """Return one value an argument, defaults put in; TypeError where the call has the wrong
        number or names of arguments."""
        arguments = self.arguments
        if len(given) > len(arguments):
            raise TypeError(
                f"{self.name} takes {len(arguments)} arguments, not {len(given)}: {self.syntax}"
            )
        values: list[Any] = [*given, *([None] * (len(arguments) - len(given)))]
        for key, value in named.items():
            for position, argument in enumerate(arguments):
                if argument.name == key:
                    if position < len(given):
                        raise TypeError(f"{self.name} was given {key} twice: {self.syntax}")
                    values[position] = value
                    break
            else:
                names = [argument.name for argument in arguments]
                raise TypeError(f"{self.name} has no argument {key!r} ({near_matches(key, names)})")
        for position, argument in enumerate(arguments):
            value = values[position]
            if isinstance(value, np.ndarray):
                value = values[position] = _unmasked(value)
            if argument.default is not REQUIRED and left_out(value):
                values[position] = self._defaults[position]
        return values

    def _single(self, values: Sequence[Any]) -> Any:
        try:
            if self.variadic:
                first = self.arguments[0].parsed(values[0] if values else None)
                return self.body(first, *values[1:])
            parsed = []
            for argument, value in zip(self.arguments, values, strict=True):
                parsed.append(argument.parsed(value))
            with np.errstate(all="ignore"):
                result = self.body(*parsed)
        except CellError as error:
            raise type(error)(f"{self.name}: {error}") from None
        except (OverflowError, ZeroDivisionError, FloatingPointError):
            result = inf
        if self.unit == "text" or isinstance(result, str):
            return result
        result = float(result)
        if -inf < result < inf:
            return result
        given = ", ".join(
            f"{argument.name} = {shown(value)}"
            for argument, value in zip(self.arguments, values, strict=True)
            if not isinstance(value, Cosmology)
        )
        raise DomainError(f"{self.name}: no finite result at {given}")

    def _columns(self, values: Sequence[Any]) -> Any:
        result, wrong = self.column(values)
        if wrong is not None:
            raise type(wrong)(f"{self.name}: {wrong}")
        return result

    def column(self, values: Sequence[Any]) -> tuple[Any, CellError | None]:
        """Return the results for whole columns, and the first InputError met.

        An element that gives no result is NaN (None in a text result): `self` called with that
        row's values alone raises the reason. One call of the definition serves all rows that share
        their words (line, medium, convention, cosmology).
        """
        wrong: CellError | None = None
        ready: list[Any] = []
        words: list[tuple[int, Any]] = []
        shapes: list[tuple[int, ...]] = []
        for position, (argument, value) in enumerate(zip(self.arguments, values, strict=True)):
            if not argument.is_column(value):
                try:
                    ready.append(argument.parsed(value))
                except InputError as error:
                    wrong = wrong or error
                    ready.append(None)
                except CellError:
                    ready.append(None)
            elif isinstance(argument, Numeric):
                numbers, problem = argument.column(value)
                wrong = wrong or problem
                shapes.append(numbers.shape)
                ready.append(numbers)
            else:
                array = as_array(value)
                shapes.append(array.shape)
                words.append((position, array))
                ready.append(array)
        try:
            shape = np.broadcast_shapes(*shapes)
        except ValueError:
            sizes = " and ".join(str(size) for size in shapes)
            raise InputError(f"{self.name}: columns of shapes {sizes} do not fit") from None
        result = self._empty_column(shape)
        if any(each is None for each in ready) or 0 in shape:
            return result, wrong
        if not words:
            problem = self._compute(result, ..., ready)
            return result, wrong or problem
        for rows, parsed, problem in self._grouped(words, shape):
            wrong = wrong or problem
            if parsed is None:
                continue
            part = [
                np.broadcast_to(each, shape).reshape(-1)[rows]
                if isinstance(each, np.ndarray) and each.ndim
                else each
                for each in (parsed.get(position, each) for position, each in enumerate(ready))
            ]
            problem = self._compute(result.reshape(-1), rows, part)
            wrong = wrong or problem
        return result, wrong

    def _empty_column(self, shape: tuple[int, ...]) -> Any:
        if self.gives_text:
            return np.full(shape, None, dtype=object)
        return np.full(shape, np.nan)

    def _compute(self, result: Any, rows: Any, ready: Sequence[Any]) -> CellError | None:
        with np.errstate(all="ignore"):
            try:
                computed = self.body(*ready)
            except InputError as error:
                return error
            except (CellError, ArithmeticError):
                return None
        if not self.gives_text:
            finite = np.isfinite(computed)
            if not finite.all():
                computed = np.where(finite, computed, np.nan)
        result[rows] = computed
        return None

    def _grouped(
        self, words: Sequence[tuple[int, Any]], shape: tuple[int, ...]
    ) -> Iterator[tuple[Any, dict[int, Any] | None, CellError | None]]:
        """Yield the rows of each combination of words with the words parsed."""
        codes: dict[tuple[Any, ...], int] = {}
        lists = [np.broadcast_to(array, shape).reshape(-1).tolist() for _, array in words]
        group = np.fromiter(
            (codes.setdefault(_hashable(row), len(codes)) for row in zip(*lists, strict=True)),
            dtype=np.intp,
            count=len(lists[0]),
        )
        order = np.argsort(group, kind="stable")
        ends = np.cumsum(np.bincount(group, minlength=len(codes)))
        start = 0
        for row, end in zip(codes, ends, strict=True):
            rows, start = order[start:end], end
            parsed: dict[int, Any] | None = {}
            problem: CellError | None = None
            for (position, _), value in zip(words, row, strict=True):
                argument = self.arguments[position]
                if argument.optional and left_out(value):
                    value = argument.default
                try:
                    parsed[position] = argument.parsed(value)  # type: ignore[index]
                except CellError as error:
                    problem = error if isinstance(error, InputError) else None
                    parsed = None
                    break
            yield rows, parsed, problem

    def explain(self, *given: Any) -> None:
        """Raise the CellError of the first element that gives no result, if there is one."""
        result = self(*given)
        if not isinstance(result, np.ndarray):
            return
        without = np.flatnonzero([is_empty(each) for each in result.reshape(-1).tolist()])
        if without.size:
            self(*self.row(self.bound(given), result.shape, int(without[0])))

    def row(self, values: Sequence[Any], shape: tuple[int, ...], index: int) -> list[Any]:
        """Return the arguments of one element, counted row by row, of a call with columns."""
        return [
            np.broadcast_to(as_array(value), shape).reshape(-1)[index]
            if argument.is_column(value)
            else value
            for argument, value in zip(self.arguments, values, strict=True)
        ]

    def traced(self, *given: Any, **named: Any) -> Expr:
        """Return what the function computes as an expression of the symbols among its arguments."""
        values = []
        for argument, value in zip(self.arguments, self.bound(given, named), strict=True):
            if isinstance(value, Expr):
                value = argument.symbol(value)
            elif not isinstance(value, Cosmology):
                value = argument.parsed(value)
            # a number beside a symbolic cosmology must not ask for a table of numbers
            values.append(node(value) if isinstance(argument, Numeric) else value)
        return node(self.body(*values))

    @property
    def syntax(self) -> str:
        words = ", ".join(
            f"[{argument.name}]" if argument.optional else argument.name
            for argument in self.arguments
        )
        return f"{self.name}({words}{', …' if self.variadic else ''})"


def left_out(value: Any) -> bool:
    """Tell whether an optional argument is left out; a NaN comes from somewhere and is not."""
    return value is None or (isinstance(value, str) and not value.strip())


def _hashable(row: tuple[Any, ...]) -> tuple[Any, ...]:
    try:
        hash(row)
    except TypeError:
        return tuple(repr(each) for each in row)
    return row


CATALOGUE: Final[dict[str, Function]] = {}
"""Every function by its name in a cell."""


class function:  # noqa: N801 - it reads as a decorator
    """Put a definition on the catalogue.

    unit: the result's unit (see Function.unit)
    source: the published source of the formula
    traceable: whether the formula can be written with standard spreadsheet functions
    examples: calls as they stand in a cell, for the help
    caution: what must be said wherever the function is offered
    arguments: an Argument for each of the definition's own; defaults are read off the definition
    """

    def __init__(
        self,
        *,
        unit: str,
        source: str,
        traceable: bool = True,
        variadic: bool = False,
        examples: tuple[str, ...] = (),
        caution: str = "",
        **arguments: Argument,
    ) -> None:
        self.unit = unit
        self.source = source
        self.traceable = traceable
        self.variadic = variadic
        self.examples = examples
        self.caution = caution
        self.arguments = arguments

    def __call__(self, body: Callable[..., Any]) -> Function:
        summary, _, notes = inspect.cleandoc(body.__doc__ or "").partition("\n")
        parameters = inspect.signature(body).parameters
        if list(parameters) != list(self.arguments):
            raise TypeError(f"{body.__name__}: the decorator and the definition differ")
        arguments = tuple(
            replace(argument, name=key, default=parameters[key].default)
            for key, argument in self.arguments.items()
        )
        made = Function(
            name=body.__name__.upper(),
            family=body.__module__.rpartition(".")[2],
            summary=summary,
            notes=notes.strip(),
            arguments=arguments,
            unit=self.unit,
            source=self.source,
            traceable=self.traceable,
            body=body,
            variadic=self.variadic,
            examples=self.examples,
            caution=self.caution,
        )
        CATALOGUE[made.name] = made
        return made


@lru_cache(maxsize=1024)
def find(text: str) -> Function:
    """Return the function of that name; raise InputError with near matches where there is none."""
    found = CATALOGUE.get(text.strip().upper())
    if found is None:
        raise InputError(f"{text!r} is not a function ({near_matches(text, CATALOGUE)})")
    return found


def result_phrase(made: Function) -> str:
    """Return what comes back, in words."""
    if made.unit in ("", "text"):
        return "text" if made.unit else "a pure number"
    for argument in made.arguments:
        if made.unit == f"as {argument.name}" and getattr(argument, "units", None):
            return _parts_phrase(argument.units)  # type: ignore[attr-defined]
    if made.unit.startswith("as "):
        return f"a number in the unit of {made.unit[3:]}"
    return f"a number in {made.unit}"


def _parts_phrase(units: Mapping[str, str]) -> str:
    alike: dict[str, list[str]] = {}
    for part, unit in units.items():
        alike.setdefault(unit, []).append(part)
    words = []
    for unit, parts in alike.items():
        if unit == "text":
            kind = "as text"
        elif unit.startswith("as "):
            kind = f"in the unit of {unit[3:]}"
        else:
            kind = f"in {unit}" if unit else "as a pure number"
        words.append(f"{' and '.join(parts)} {kind}")
    return f"the part asked for: {', '.join(words)}"


def docstring(made: Function) -> str:
    """Return the public docstring, made from the catalogue's entry."""
    lines = [made.summary, ""]
    lines += [text + "\n" for text in (made.notes, made.caution) if text]
    lines.append("Arguments: floats, or arrays that broadcast to one shape.")
    for argument in made.arguments:
        unit = getattr(argument, "unit", "")
        lines.append(
            f"    {argument.name}: {argument.meaning}"
            + (f" [{unit}]" if unit else "")
            + f"; {argument.allowed}"
            + (f"; left out: {argument.default_text}" if argument.optional else "")
        )
    lines += [
        "",
        f"Returns {result_phrase(made)}; an array of the broadcast shape for arrays.",
        "Raises DomainError, InputError or MissingInput for a float (all ValueError); in an array",
        "a number out of its domain or missing gives NaN there.",
        "",
        f"Source: {made.source}",
    ]
    return "\n".join(lines)


def families() -> dict[str, list[Function]]:
    """Return the functions by family, both in the order in which they are defined."""
    grouped: dict[str, list[Function]] = {}
    for made in CATALOGUE.values():
        grouped.setdefault(made.family, []).append(made)
    return grouped
