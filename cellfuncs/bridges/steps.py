"""Working columns: what several formulas of a row need is computed once, in a cell of its own.

A formula that follows the Earth would be longer than a cell takes. Its definition marks what is
worth a cell (`symbols.kept`), and what can only be read in several cells (a date or an angle in a
text); here each such part becomes a column, the same part the same column.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

from cellfuncs.bridges import reading
from cellfuncs.bridges.formula import LONGEST, is_vector, leaves, text_of
from cellfuncs.physics.earth import EPOCH
from cellfuncs.symbols import Expr, name

_LEAVES = ("name", "number", "text", "truth")
LEAST_SHARED = 4
"""Leaves that a part must have for a column of its own to make formulas shorter"""


@dataclass
class Steps:
    """The working columns of a table, in the order in which they were first needed."""

    cell: Callable[[int], str]
    """The name, as the table's formulas have it, of the cell in the working column of a number"""
    cells: Callable[[int], str] = lambda place: f"#{place}"
    """The name of the range of all cells of such a column"""
    seen_from_steps: Callable[[str], str] = lambda cell: cell
    """A name as the working columns' formulas must have it"""
    words: list[str] = field(default_factory=list)
    formulas: list[str] = field(default_factory=list)
    day_lengths: Mapping[float, float] | None = None
    """Days with a leap second that may occur; None: all that there were"""
    _by_text: dict[str, int] = field(default_factory=dict)
    _read: dict[tuple[str, str], dict[str, str]] = field(default_factory=dict)
    _done: dict[int, tuple[Expr, Expr]] = field(default_factory=dict)

    def taken_out(self, expr: Expr) -> Expr:
        """Return an expression with the cells of working columns in place of what they compute."""
        done = self._done.get(id(expr))
        if done is None:
            # the expression is kept with its result: another one may not come to bear its id
            done = self._done[id(expr)] = (expr, self._taken_out(expr))
        return done[1]

    def _taken_out(self, expr: Expr) -> Expr:
        if expr.operation in _LEAVES:
            return expr
        parts = [
            self.taken_out(part) if isinstance(part, Expr) else part for part in expr.arguments
        ]
        if expr.operation == "kept":
            return self._column(parts[0].arguments[0], parts[1])
        if expr.operation == "rows":
            return name(self.cells(self._place(parts[0].arguments[0], parts[1])))
        if expr.operation == "reading":
            kind, text = parts
            cell = self._column("what is read", text)
            return self._reading(kind.arguments[0], cell)
        return Expr(expr.operation, *parts)

    def _reading(self, kind: str, cell: Expr) -> Expr:
        """Return what a text stands for, read in as many columns as it takes."""
        seen = text_of(self._seen(cell))

        def formulas(piece: Callable[[str], str]) -> dict[str, str]:
            if kind == "moment":
                return reading.moment(seen, piece, self.day_lengths)
            return reading.angle(seen, piece, as_hours=kind == "hours")

        if (kind, seen) not in self._read:
            first = len(self.formulas)
            places = {piece: self.cell(first + n) for n, piece in enumerate(formulas(str))}
            self._read[kind, seen] = places
            for piece, formula in formulas(
                lambda piece: self.seen_from_steps(places[piece])
            ).items():
                self.words.append(piece.replace("_", " "))
                self.formulas.append(formula)
        places = self._read[kind, seen]
        if kind == "moment":
            day, fraction = name(places["utc_day"]), name(places["utc_fraction"])
            return self._column("UTC since 2000", day - EPOCH + fraction)
        return name(places["degrees"])

    def _column(self, words: str, expr: Expr) -> Expr:
        """Return the cell in which an expression is computed; a leaf needs none."""
        return expr if expr.operation in _LEAVES else name(self.cell(self._place(words, expr)))

    def _place(self, words: str, expr: Expr) -> int:
        if leaves(expr) > LONGEST // 16:
            expr = self._parts_apart(expr)
        formula = "=" + text_of(self._seen(expr))
        if formula not in self._by_text:
            self._by_text[formula] = len(self.formulas)
            self.words.append(words)
            self.formulas.append(formula)
        return self._by_text[formula]

    def _parts_apart(self, expr: Expr) -> Expr:
        """Return an expression with columns for what stands in it more than once, and for sums."""
        mentions: dict[int, int] = {}

        def count(each: Expr) -> None:
            mentions[id(each)] = mentions.get(id(each), 0) + 1
            if mentions[id(each)] == 1:
                for part in each.arguments:
                    if isinstance(part, Expr):
                        count(part)

        count(expr)
        done: dict[int, Expr] = {}

        def apart(each: Expr) -> Expr:
            if each.operation in _LEAVES:
                return each
            if id(each) not in done:
                parts = [apart(part) if isinstance(part, Expr) else part for part in each.arguments]
                rebuilt = Expr(each.operation, *parts)
                again = mentions[id(each)] > 1 and leaves(rebuilt) > LEAST_SHARED
                is_sum = each.operation == "SUMPRODUCT"
                if (again or is_sum) and not is_vector(rebuilt):
                    rebuilt = self._column("part", rebuilt)
                done[id(each)] = rebuilt
            return done[id(each)]

        return apart(expr)

    def _seen(self, expr: Expr) -> Expr:
        if expr.operation == "name":
            return name(self.seen_from_steps(expr.arguments[0]))
        return Expr(
            expr.operation,
            *(self._seen(part) if isinstance(part, Expr) else part for part in expr.arguments),
        )
