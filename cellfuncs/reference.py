"""The help, made from the catalogue: one function, the list, the whole page.

Each function stands under the five heads of the open formula standard (OASIS ODF 1.3, part 4):
syntax, returns, constraints, semantics, examples. `python -m cellfuncs.reference` writes the page.
"""

import ast
import sys
from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from math import isfinite
from pathlib import Path
from textwrap import fill
from typing import Any, Final

from cellfuncs.arguments import FunctionName, Part, WholeRange
from cellfuncs.catalogue import (
    CATALOGUE,
    Argument,
    Choice,
    CosmologySet,
    Function,
    Number,
    Truth,
    Word,
    families,
    result_phrase,
)
from cellfuncs.errors import CellError, DomainError, InputError, MissingInput
from cellfuncs.families.sky import Moment

PAGE: Final = Path(__file__).with_name("REFERENCE.md")

READING_ORDER: Final = ("spectrum", "velocity", "distance", "age", "sky", "sample", "workbook")
"""From what is measured to what follows; a family that is not named here comes after"""

WIDTH: Final = 79


# Examples -----------------------------------------------------------------------------------------


@dataclass(frozen=True)
class Example:
    """A call as it stands in a cell, and what it gives."""

    call: str
    value: float | str | CellError
    unit: str

    @property
    def result(self) -> str:
        if isinstance(self.value, CellError):
            return self.value.shown
        if isinstance(self.value, str):
            return f'"{self.value}"'
        digits = 13 if self.unit == "d" else 10  # a Julian date's days alone have seven
        return f"{self.value:.{digits}g} {self.unit}".rstrip()


def example(call: str) -> Example:
    """Compute an example; ValueError where it is not a call of a function with plain values."""
    # what stands in a cell between braces is a range written out
    written = call.removeprefix("=").strip().translate(str.maketrans("{;}", "[,]"))
    try:
        tree = ast.parse(written, mode="eval").body
    except SyntaxError:
        raise ValueError(f"the example {call} cannot be read") from None
    if not isinstance(tree, ast.Call):
        raise ValueError(f"the example {call} is not a call of a function")
    made, arguments = _called(tree, call)
    return Example(call, _result(made, arguments), _unit(made, arguments))


def _called(node: ast.Call, call: str) -> tuple[Function, list[Any]]:
    name = node.func.id if isinstance(node.func, ast.Name) else ""
    made = CATALOGUE.get(name)
    if made is None or node.keywords:
        raise ValueError(f"the example {call} calls something that is not a function")
    return made, [_value(argument, call) for argument in node.args]


def _value(node: ast.expr, call: str) -> Any:
    match node:
        case ast.Constant(value=str()):
            return node.value
        case ast.Constant(value=int() | float() as number) if not isinstance(number, bool):
            return float(number)
        case ast.UnaryOp(op=ast.USub()):
            return -_value(node.operand, call)
        case ast.Name(id="TRUE" | "FALSE"):
            return node.id == "TRUE"
        case ast.List():
            return [_value(cell, call) for cell in node.elts]
        case ast.Call():
            made, arguments = _called(node, call)
            return made(*arguments)
        case _:
            raise ValueError(f"the example {call} holds what is neither a value nor a call")


def _result(made: Function, arguments: list[Any]) -> float | str | CellError:
    try:
        result: float | str = made(*arguments)
    except CellError as error:
        return error
    return result


def _unit(made: Function, arguments: list[Any]) -> str:
    """Return the result's unit; where it is that of an argument, the one given or usual there."""
    if not made.unit.startswith("as "):
        return "" if made.gives_text else made.unit
    for argument, value in zip(made.arguments, made.bound(arguments), strict=True):
        if argument.name == made.unit.removeprefix("as "):
            if isinstance(argument, FunctionName):
                inner = arguments[1]
                return _unit(argument.parsed(value), inner if isinstance(inner, list) else [inner])
            if isinstance(argument, Part):
                unit = argument.units[value]
                return "" if unit == "text" or unit.startswith("as ") else unit
            if isinstance(argument, Number):
                return argument.unit
            return "" if isinstance(argument, Choice) else str(value)
    raise ValueError(f"{made.name}: {made.unit} names no argument")


# One function -------------------------------------------------------------------------------------


def returns(made: Function) -> str:
    """Return what comes back, as a sentence."""
    phrase = result_phrase(made)
    return f"{phrase[0].upper()}{phrase[1:]}."


def constraints(made: Function) -> list[tuple[str, str]]:
    """Return each argument's name with what it means and may be."""
    return [(argument.name, _constraint(argument, made)) for argument in made.arguments]


def _constraint(argument: Argument, made: Function) -> str:
    words = argument.meaning
    if isinstance(argument, Number) and argument.like:
        partners = [
            other.name
            for other in made.arguments
            if isinstance(other, Number) and other.like == argument.like and other is not argument
        ]
        kind = f"{argument.unit} or another unit" if argument.unit else "any unit"
        words += f", in {kind}" + (f", the same as {' and '.join(partners)}" if partners else "")
        # the limits hold in every unit
        words += f"; {argument.allowed.removesuffix(argument.unit).strip()}"
    elif isinstance(argument, Number) and argument.unit and argument.allowed == "a finite number":
        words += f"; a finite number of {argument.unit}"
    else:
        words += f"; {argument.allowed}"
    if argument.optional:
        words += f". Left out: {argument.default_text}"
    return f"{words}."


def semantics(made: Function) -> list[str]:
    """Return the paragraphs that say what the function does."""
    notes = [" ".join(each.split()) for each in made.notes.split("\n\n") if each.strip()]
    if not made.traceable:
        notes.append(
            "There is no plain formula of it: a cell needs the add-in, or `cellfuncs fill`."
        )
    return [made.summary, *notes, *([f"Caution: {made.caution}"] if made.caution else [])]


def help_text(made: Function) -> str:
    """Return the help for one function as a terminal shows it."""
    names = [name for name, _ in constraints(made)]
    room = max(map(len, names), default=0) + 2
    calls = max(map(len, made.examples), default=0) + 3
    heads: list[tuple[str, Iterable[str]]] = [
        ("Syntax", [f"    {made.syntax}"]),
        ("Returns", [f"    {returns(made)}"]),
        (
            "Constraints",
            [_wrapped(words, f"    {name:{room}}", 4 + room) for name, words in constraints(made)]
            or ["    It takes no argument."],
        ),
        ("Semantics", [_wrapped(each.replace("`", ""), "    ", 4) for each in semantics(made)]),
        (
            "Examples",
            [f"    {each.call:{calls}}{each.result}" for each in map(example, made.examples)],
        ),
        ("Source", [_wrapped(made.source, "    ", 4)]),
    ]
    return "\n\n".join([made.name, *("\n".join([head, *lines]) for head, lines in heads)])


def _wrapped(words: str, start: str, indent: int) -> str:
    return fill(
        words,
        WIDTH,
        initial_indent=start,
        subsequent_indent=" " * indent,
        break_on_hyphens=False,
        break_long_words=False,
    )


def description(made: Function) -> dict[str, Any]:
    """Return what a script may want to know of a function, as JSON can hold it."""
    return {
        "name": made.name,
        "family": made.family,
        "summary": made.summary,
        "notes": made.notes,
        "caution": made.caution,
        "syntax": made.syntax,
        "unit": made.unit,
        "arguments": [_argument_description(argument) for argument in made.arguments],
        "any_number_of_arguments": made.variadic,
        "plain_formula": made.traceable,
        "examples": list(made.examples),
        "source": made.source,
    }


def _argument_description(argument: Argument) -> dict[str, Any]:
    described: dict[str, Any] = {
        "name": argument.name,
        "meaning": argument.meaning,
        "kind": _kind(argument),
        "allowed": argument.allowed,
        "optional": argument.optional,
        "default": argument.default if argument.optional else None,
    }
    if isinstance(argument, Number):
        limits = {
            "above": argument.above,
            "at_least": argument.at_least,
            "below": argument.below,
            "at_most": argument.at_most,
        }
        described |= {"unit": argument.unit, "same_unit_as": argument.like or None}
        # JSON has no infinity
        described |= {name: limit if isfinite(limit) else None for name, limit in limits.items()}
    elif isinstance(argument, Choice):
        described["choices"] = list(argument.choices)
    return described


def _kind(argument: Argument) -> str:
    if isinstance(argument, Number):
        return "number"
    if isinstance(argument, CosmologySet):
        return "cosmology"
    if isinstance(argument, Moment):
        return "moment"
    if isinstance(argument, Truth):
        return "truth"
    if isinstance(argument, WholeRange):
        return "range"
    return "text" if isinstance(argument, Word) else "any"


# All of them --------------------------------------------------------------------------------------


def in_reading_order() -> dict[str, list[Function]]:
    """Return the functions by family, in the order in which a person reads them."""
    grouped = families()
    named = [family for family in READING_ORDER if family in grouped]
    others = [family for family in grouped if family not in READING_ORDER]
    return {family: grouped[family] for family in [*named, *others]}


def family_summary(group: list[Function]) -> str:
    """Return the first line of the module in which a family is defined."""
    text = sys.modules[group[0].body.__module__].__doc__ or ""
    return text.strip().partition("\n")[0]


def list_text() -> str:
    """Return the names and summaries by family, as a terminal shows them."""
    room = max(map(len, CATALOGUE)) + 2
    parts = []
    for family, group in in_reading_order().items():
        lines = [f"{family}: {family_summary(group)}"]
        lines += [f"  {made.name:{room}}{made.summary} {made.caution}".rstrip() for made in group]
        parts.append("\n".join(lines))
    return "\n\n".join(parts)


def page() -> str:
    """Return the whole reference in Markdown."""
    return "\n".join(_page_lines())


def _page_lines() -> Iterator[str]:
    grouped = in_reading_order()
    yield "# The functions"
    yield ""
    yield (
        f"Every function that a cell can call, {len(CATALOGUE)} of them. A name tells what comes"
        " back: the quantity first, then what tells it apart; X_FROM_Y makes X out of Y. An"
        " argument in [brackets] may be left out. Where a function takes one value it also takes a"
        " column of them, and gives a column. Words are read without regard to case. In Python the"
        " same function has its name in lower case: `from cellfuncs import distance_luminosity`."
        " This page is made from the functions themselves by `python -m cellfuncs.reference`;"
        " `cellfuncs functions NAME` shows the same on a terminal."
    )
    yield ""
    yield from _units()
    yield from _errors()
    yield "## By family"
    for family, group in grouped.items():
        yield ""
        yield f"**[{family}](#{family})**: {family_summary(group)}"
        yield ""
        for made in group:
            yield f"- {_link(made)}: {_text(f'{made.summary} {made.caution}'.strip())}"
    for family, group in grouped.items():
        yield ""
        yield f"## {family}"
        for made in group:
            yield ""
            yield from _function_lines(made)


def _units() -> Iterator[str]:
    arguments: dict[str, list[str]] = {}
    results: dict[str, list[str]] = {}
    for made in CATALOGUE.values():
        for argument in made.arguments:
            if isinstance(argument, Number) and (argument.unit or not argument.like):
                arguments.setdefault(argument.unit, []).append(argument.name)
        if not made.gives_text and not made.unit.startswith("as "):
            results.setdefault(made.unit, []).append(_link(made))
    yield "## Units"
    yield ""
    yield (
        "A cell holds a plain number: its unit is the one named here, spelt as in IVOA VOUnits 1.0."
        " Nothing is converted on the way; `UNITS_CONVERTED` does it. Velocities count receding as"
        " positive; wavelengths are those in vacuum unless a function asks for the medium."
    )
    yield ""
    yield "| unit | arguments in it | results in it |"
    yield "| --- | --- | --- |"
    for unit in sorted({*arguments, *results}, key=str.casefold):
        names = ", ".join(dict.fromkeys(arguments.get(unit, ["–"])))
        yield f"| {unit or 'pure number'} | {names} | {', '.join(results.get(unit, ['–']))} |"
    yield ""


def _errors() -> Iterator[str]:
    yield "## What a bad input gives"
    yield ""
    yield (
        "A result is never a number made from a bad input, and never text in a number's place."
        " `REASON` says in words what an error value cannot. An argument that is itself in error"
        " passes its error on."
    )
    yield ""
    yield "| in a cell | what is wrong | Python, a number | Python, an array |"
    yield "| --- | --- | --- | --- |"
    rows = (
        (DomainError, "NaN at that element"),
        (InputError, "raises InputError"),
        (MissingInput, "NaN at that element"),
    )
    for error, in_array in rows:
        what = " ".join((error.__doc__ or "").split()).rstrip(".")
        yield f"| `{error.shown}` | {what} | raises {error.__name__} | {in_array} |"
    yield ""


def _function_lines(made: Function) -> Iterator[str]:
    yield f"### {made.name}"
    yield ""
    yield f"**Syntax** `{made.syntax}`"
    yield ""
    yield f"**Returns** {returns(made)}"
    yield ""
    yield "**Constraints**"
    yield ""
    for name, words in constraints(made):
        yield f"- `{name}`: {_text(words)}"
    if not made.arguments:
        yield "- It takes no argument."
    yield ""
    first, *rest = semantics(made)
    yield f"**Semantics** {_text(first)}"
    for paragraph in rest:
        yield ""
        yield _text(paragraph)
    yield ""
    yield "**Examples**"
    yield ""
    for each in map(example, made.examples):
        yield f"- `{each.call}` → {_text(each.result)}"
    yield ""
    yield f"Source: {_text(made.source)}"


def _link(made: Function) -> str:
    return f"[{made.name}](#{made.name.lower()})"


def _text(words: str) -> str:
    """Keep Markdown from taking a character of the text for its own."""
    for character in "*_<[|":
        words = words.replace(character, f"\\{character}")
    return words


def main() -> None:
    """Write the page."""
    PAGE.write_text(page() + "\n", encoding="utf-8", newline="\n")
    print(f"{PAGE}: {len(CATALOGUE)} functions")


if __name__ == "__main__":
    main()
