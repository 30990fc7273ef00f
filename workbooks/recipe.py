"""A recipe: what a workbook holds, read from TOML and held to the catalogue before it is used."""

import re
import tomllib
from collections.abc import Iterable, Iterator, Mapping, Set
from dataclasses import dataclass, field
from importlib.resources import files
from pathlib import Path
from typing import Annotated, Any, Final, Literal

from pydantic import BaseModel, ConfigDict, Field, ValidationError

from cellfuncs import units
from cellfuncs.bridges.formula import LONGEST, FormulaError
from cellfuncs.bridges.steps import Steps
from cellfuncs.catalogue import Number
from cellfuncs.errors import InputError, near_matches
from cellfuncs.families.sky import Moment
from cellfuncs.families.spectrum import LineName
from cellfuncs.physics.expansion import PUBLISHED
from cellfuncs.symbols import Expr, NotTraceable, name
from workbooks.expression import (
    TEXT,
    TIME,
    Cells,
    Either,
    Key,
    Node,
    Scaled,
    given_arguments,
    needed,
)
from workbooks.gathered import Gathered, row_keys
from workbooks.logbook import Header, parse_header
from workbooks.parsing import ExpressionError, Parser
from workbooks.settings import COSMOLOGY_CELLS, COSMOLOGY_KEYS, reserved_names
from workbooks.uncertainty import Uncertainty

BUILT_IN: Final = files("workbooks") / "recipes"

STATUS: Final = "Status"
"""Header of the column that a template adds: it says in words what is wrong in a row"""
ROW_OK: Final = "ok"


class RecipeError(ValueError):
    """A recipe that cannot be used; the message names file and line."""


class Model(BaseModel):
    model_config = ConfigDict(extra="forbid", frozen=True)


Finite = Annotated[float, Field(strict=True, allow_inf_nan=False)]
Text = Annotated[str, Field(strict=True, pattern=r"^[^\x00-\x08\x0b\x0c\x0e-\x1f]*$")]
Truth = Annotated[bool, Field(strict=True)]
Count = Annotated[int, Field(strict=True, ge=1, le=1_000_000)]


class Limited(Model):
    """Limits of a number; a text names the setting that holds the limit."""

    above: Finite | Text | None = None
    at_least: Finite | Text | None = None
    below: Finite | Text | None = None
    at_most: Finite | Text | None = None

    def limits(self) -> Iterator[tuple[str, float | str]]:
        """Yield comparison and limit of each limit that is given."""
        for comparison, limit in (
            (">", self.above),
            (">=", self.at_least),
            ("<", self.below),
            ("<=", self.at_most),
        ):
            if limit is not None:
                yield comparison, limit


class Setting(Limited):
    key: Text
    label: Text
    group: Text
    unit: Text = ""
    kind: Literal["number", "text"] = "number"
    value: Finite | Text | None = None
    choices: tuple[Text, ...] = ()
    format: Text = ""
    note: Text = ""


class Column(Limited):
    key: Text
    label: Text
    role: Literal["input", "computed"]
    kind: Literal["number", "text", "line", "time"] = "number"
    unit: Text = ""
    ucd: Text = ""
    formula: Text = ""
    choices: tuple[Text, ...] = ()
    required: Truth | None = None
    sigma: Truth | Text | None = None
    """Of an input, the column with its 1-σ error; of a computed one, whether it has a ± column"""
    hidden: Truth = False
    format: Text = ""
    width: Finite | None = None
    note: Text = ""
    aliases: tuple[Text, ...] = ()

    @property
    def header(self) -> str:
        return f"{self.label} [{self.unit}]" if self.unit else self.label

    @property
    def is_number(self) -> bool:
        return self.kind == "number" and not self.choices


class ResultCell(Model):
    """A number that follows from a sheet's columns as a whole."""

    key: Text
    label: Text
    unit: Text = ""
    formula: Text
    hidden: Truth = False
    format: Text = ""
    note: Text = ""


class Chart(Model):
    """Points of columns over another."""

    title: Text
    x: Text
    y: Annotated[tuple[Text, ...], Field(min_length=1)]
    y_label: Text = ""


class Histogram(Model):
    """How often the values of a column occur; with `where`, of the rows in which that is 1."""

    title: Text
    of: Text
    where: Text = ""
    bins: Annotated[int, Field(strict=True, ge=2, le=60)] = 12


class Sheet(Model):
    name: Text
    rows: Count = 200
    intro: Text = ""
    columns: Annotated[tuple[Column, ...], Field(min_length=1)]
    results: tuple[ResultCell, ...] = ()
    charts: tuple[Chart, ...] = ()
    histograms: tuple[Histogram, ...] = ()
    gathers: Text = ""
    """The sheet whose groups of rows this one has a row each of"""
    by: Text = ""
    """The column of texts that tells those groups apart"""


class Document(Model):
    title: Text
    purpose: Text
    steps: tuple[Text, ...] = ()
    cosmology: Text = ""
    settings: tuple[Setting, ...] = ()
    sheets: Annotated[tuple[Sheet, ...], Field(min_length=1)]


@dataclass(frozen=True)
class Problem:
    """What can be said of a row before anything is computed: the first one found is shown."""

    column: Column
    kind: Literal[
        "error",
        "missing",
        "not a number",
        "limit",
        "not a choice",
        "not a line",
        "not a time",
        "beyond",
    ]
    words: str
    comparison: str = ""
    limit: float | str = 0.0
    """A number in the column's unit, or a setting's key"""
    factor: float = 1.0
    """What takes the setting's unit to the column's"""
    alternatives: tuple[tuple[str, ...], ...] = ()
    """Of a missing input: groups of columns of which one must be filled"""


@dataclass(frozen=True)
class Table:
    """A sheet of a recipe with its formulas parsed."""

    sheet: Sheet
    nodes: Mapping[str, Node]
    """By the key of each computed column, in the order in which they can be computed"""
    required: frozenset[str]
    """Inputs that a row cannot do without"""
    problems: tuple[Problem, ...]
    used: frozenset[str]
    """Inputs that some formula names"""
    results: Mapping[str, Node] = field(default_factory=dict)
    """The formula of each result, by its key"""
    order: tuple[str, ...] = ()
    """The keys of computed columns and results, as they can be computed"""
    gathers: "Table | None" = None
    """The table whose groups of rows this one has a row each of; the formulas are in its keys"""

    @property
    def anchors(self) -> list[str]:
        """Inputs whose being filled puts a row to use: remarks and choices made ahead do not"""
        keys = [
            column.key for column in self.inputs if column.key in self.used and not column.choices
        ]
        return keys or [column.key for column in self.inputs]

    @property
    def columns(self) -> dict[str, Column]:
        return {column.key: column for column in self.sheet.columns}

    @property
    def inputs(self) -> list[Column]:
        return [column for column in self.sheet.columns if column.role == "input"]

    @property
    def computed(self) -> list[Column]:
        return [column for column in self.sheet.columns if column.role == "computed"]


@dataclass(frozen=True)
class Recipe:
    """A recipe that holds: every key, function and unit in it is known and fits."""

    name: str
    source: str
    text: Document
    tables: tuple[Table, ...]
    summaries: tuple[Table, ...] = ()
    """The sheets with a row for each group of rows of one of the tables"""

    @property
    def settings(self) -> dict[str, Setting]:
        return {setting.key: setting for setting in self.text.settings}


def unexplained(table: Table, key: str) -> str:
    """Return what is said of a row in which a column has no result though the inputs look well."""
    tree = table.nodes[key]
    advice = "look at this row's inputs and at the sheet Settings"
    if isinstance(tree, Gathered):
        of = f" of this {table.columns[tree.by.key].label}" if tree.by else ""
        advice = f"look at all rows{of}"
    return f"{table.columns[key].label}: no result; {advice}"


def built_in() -> list[str]:
    """Return the names of the recipes that come with the program."""
    return sorted(
        entry.name.removesuffix(".toml")
        for entry in BUILT_IN.iterdir()
        if entry.name.endswith(".toml")
    )


def load(recipe: str) -> Recipe:
    """Return a recipe by its name, or from a file.

    Raises RecipeError with file, line and near matches where it cannot be used.
    """
    if recipe in built_in():
        return read((BUILT_IN / f"{recipe}.toml").read_bytes(), f"{recipe}.toml", recipe)
    path = Path(recipe)
    if path.suffix.lower() != ".toml":
        raise RecipeError(
            f"{recipe!r} is neither a recipe ({near_matches(recipe, built_in())}) nor a .toml file"
        )
    try:
        content = path.read_bytes()
    except OSError as error:
        raise RecipeError(f"{path}: {error.strerror}") from None
    return read(content, str(path), path.stem)


def read(content: bytes, source: str, recipe_name: str) -> Recipe:
    """Return the recipe that a file's bytes hold; `source` names the file in messages."""
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError:
        raise RecipeError(f"{source}: not a UTF-8 text") from None
    place = _Places(text, source)
    try:
        raw = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise RecipeError(f"{source}: {error}") from None
    except RecursionError:
        raise RecipeError(f"{source}: nested too deep") from None
    try:
        parsed = Document.model_validate(raw)
    except ValidationError as error:
        raise _refusal(error, place) from None
    return _Checker(parsed, place, recipe_name).recipe()


def _refusal(error: ValidationError, place: "_Places") -> RecipeError:
    # a key that is not known explains one that is missing
    problems = sorted(error.errors(), key=lambda each: each["type"] != "extra_forbidden")
    first = problems[0]
    path = _to_key(tuple(first["loc"]))
    key = path[-1] if path else ""
    if first["type"] == "extra_forbidden":
        known = _fields(path)
        return place.error(path, f"{key!r} is not a key here ({near_matches(str(key), known)})")
    if first["type"] == "missing":
        return place.error(path[:-1], f"the key {key!r} is missing")
    return place.error(path, f"{key!r}: {first['msg'].lower()}")


def _to_key(path: tuple[int | str, ...]) -> tuple[int | str, ...]:
    """Return a path without what it leads to inside a key: an item's number, a type's name."""
    steps: list[int | str] = []
    for step in path:
        if (
            steps
            and isinstance(steps[-1], str)
            and not (
                isinstance(step, int)
                and steps[-1]
                in ("sheets", "columns", "charts", "histograms", "results", "settings")
            )
        ):
            break
        steps.append(step)
    return tuple(steps)


def _fields(path: tuple[int | str, ...]) -> list[str]:
    """Return the keys that are known where the path leads."""
    models: dict[str, type[BaseModel]] = {
        "sheets": Sheet,
        "columns": Column,
        "charts": Chart,
        "histograms": Histogram,
        "results": ResultCell,
        "settings": Setting,
    }
    inside = [models[step] for step in path[:-1] if isinstance(step, str) and step in models]
    return list((inside or [Document])[-1].model_fields)


@dataclass
class _Places:
    """Finds the line of a key, which the TOML reader does not tell."""

    text: str
    source: str

    def line(self, path: tuple[int | str, ...]) -> int:
        lines = self.text.splitlines()
        start, end = 0, len(lines)
        tables: list[str] = []
        rest = list(path)
        while len(rest) >= 2 and isinstance(rest[0], str) and isinstance(rest[1], int):
            tables.append(str(rest.pop(0)))
            index = int(rest.pop(0))
            header = re.compile(rf"\s*\[\[\s*{re.escape('.'.join(tables))}\s*\]\]")
            found = [number for number in range(start, end) if header.match(lines[number])]
            if index >= len(found):
                return start + 1
            start = found[index]
            end = found[index + 1] if index + 1 < len(found) else end
        if rest and isinstance(rest[0], str):
            own = re.compile(rf"\s*[\"']?{re.escape(rest[0])}[\"']?\s*=")
            for number in range(start, end):
                if own.match(lines[number]):
                    return number + 1
        return start + 1

    def error(self, path: tuple[int | str, ...], message: str) -> RecipeError:
        return RecipeError(f"{self.source}, line {self.line(path)}: {message}")


_KINDS_UNIT: Final = {"number": TEXT, "text": TEXT, "line": TEXT, "time": TIME}
"""What stands for a unit where a column holds no numbers; one with choices is of texts"""

LONGEST_LIST: Final = 255
"""Characters that a spreadsheet takes in a list of choices"""

_WORD = re.compile(r"[a-z][a-z0-9]*(_[a-z0-9]+)*\Z")
_CELL = re.compile(r"([a-z]{1,3}\d+|r\d*c\d*|r|c|true|false)\Z")


@dataclass
class _Checker:
    text: Document
    place: _Places
    name: str
    settings: dict[str, str] = field(default_factory=dict)
    results: set[str] = field(default_factory=set)

    @property
    def labels(self) -> dict[str, str]:
        own = {setting.key: setting.label for setting in self.text.settings}
        return {**{cell.cell: cell.meaning for cell in COSMOLOGY_CELLS}, **own}

    def recipe(self) -> Recipe:
        if self.text.cosmology:
            if self.text.cosmology not in PUBLISHED:
                near = near_matches(self.text.cosmology, PUBLISHED)
                raise self.place.error(
                    ("cosmology",), f"{self.text.cosmology!r} is not a published set ({near})"
                )
            self.settings.update(COSMOLOGY_KEYS)
        reserved = reserved_names()
        for index, setting in enumerate(self.text.settings):
            path = ("settings", index)
            self._key_is_good(path, setting.key, {**dict.fromkeys(reserved), **self.settings})
            self._unit_is_good(path, setting.unit)
            self._setting_is_good(path, setting)
            self.settings[setting.key] = setting.unit if setting.kind == "number" else TEXT
        titles = [sheet.name.casefold() for sheet in self.text.sheets]
        tables: list[Table] = []
        summaries: list[Table] = []
        for index, sheet in enumerate(self.text.sheets):
            path = ("sheets", index)
            if titles.index(sheet.name.casefold()) != index:
                raise self.place.error((*path, "name"), f"two sheets are called {sheet.name!r}")
            if not 0 < len(sheet.name) <= 31 or re.search(r"[\[\]:*?/\\]", sheet.name):
                raise self.place.error(
                    (*path, "name"),
                    f"{sheet.name!r} cannot be a sheet's name: 1 to 31 characters,"
                    " none of [ ] : * ? / \\",
                )
            if sheet.gathers or sheet.by:
                summaries.append(self._summary(path, sheet, tables))
            else:
                tables.append(self._table(path, sheet))
        if not tables:
            raise self.place.error(("sheets", 0), "a recipe needs a sheet to type in")
        return Recipe(self.name, self.place.source, self.text, tuple(tables), tuple(summaries))

    def _key_is_good(self, path: tuple[int | str, ...], key: str, taken: Mapping[str, Any]) -> None:
        path = (*path, "key")
        if not _WORD.match(key) or _CELL.match(key):
            raise self.place.error(
                path, f"{key!r} cannot be a key: small letters, digits and _, and not a cell's name"
            )
        if key in taken:
            raise self.place.error(path, f"{key!r} is taken already")

    def _setting_is_good(self, path: tuple[int | str, ...], setting: Setting) -> None:
        if setting.value is not None and isinstance(setting.value, str) != (setting.kind == "text"):
            raise self.place.error(
                (*path, "value"),
                f"the value {setting.value!r} of {setting.key!r} is no {setting.kind}",
            )
        if setting.choices and (setting.kind != "text" or setting.value not in setting.choices):
            raise self.place.error(
                (*path, "choices"), f"the value of {setting.key!r} must be one of its choices"
            )

    def _unit_is_good(self, path: tuple[int | str, ...], unit: str) -> None:
        try:
            units.unit_of(unit)
        except InputError as error:
            raise self.place.error((*path, "unit"), str(error)) from None

    def _table(self, path: tuple[int | str, ...], sheet: Sheet) -> Table:
        known: dict[str, str] = {}
        for index, column in enumerate(sheet.columns):
            where = (*path, "columns", index)
            for each in _with_error(column):
                self._key_is_good(where, each.key, {**self.settings, **known})
                known[each.key] = each.unit if each.is_number else _KINDS_UNIT[each.kind]
            self._unit_is_good(where, column.unit)
            self._column_is_good(where, column)
        sigmas = dict(self._sigmas(path, sheet, known))
        own = sheet
        sheet = sheet.model_copy(
            update={
                "columns": tuple(each for column in own.columns for each in _with_error(column))
            }
        )
        self._labels_differ(path, own, sheet)
        results = self._result_units(path, sheet, known)
        columns = frozenset(known)
        parser = Parser({**self.settings, **results, **known}, columns=columns)
        trees: dict[str, Node] = {}
        for index, column in enumerate(own.columns):
            if column.role == "computed":
                where = (*path, "columns", index, "formula")
                trees[column.key] = self._parsed(parser, where, column.formula, known[column.key])
                self._alternatives_are_inputs(where, sheet, trees[column.key])
        for index, result in enumerate(sheet.results):
            where = (*path, "results", index, "formula")
            tree = trees[result.key] = self._parsed(parser, where, result.formula, result.unit)
            for key in row_keys(tree):
                if key in columns:
                    raise self.place.error(where, f"{key!r} is a column; a result is one number")
        for index, column in enumerate(own.columns):
            if column.role == "input" and column.key not in parser.used and column.required:
                raise self.place.error(
                    (*path, "columns", index), f"{column.key!r} is required, but no formula uses it"
                )
        self._charts_are_good(path, sheet, known)
        formulas = {key: tree for key, tree in trees.items() if key in columns}
        for column in own.columns:
            if column.sigma is True:
                (_, error) = _with_error(column)
                trees[error.key] = Uncertainty(column.key, column.unit, formulas, sigmas)
        ordered = self._ordered(path, own, trees)
        nodes = {key: tree for key, tree in ordered.items() if key in columns}
        self._formulas_are_short(path, own, nodes)
        required = frozenset(_required(sheet, nodes))
        return Table(
            sheet,
            nodes,
            required,
            tuple(self._problems(sheet, nodes, required)),
            frozenset(parser.used),
            {result.key: ordered[result.key] for result in sheet.results},
            tuple(ordered),
        )

    def _parsed(self, parser: Parser, path: tuple[int | str, ...], formula: str, unit: str) -> Node:
        try:
            return parser.parsed(formula, unit)
        except ExpressionError as error:
            raise self.place.error(path, str(error)) from None

    def _sigmas(
        self, path: tuple[int | str, ...], sheet: Sheet, known: Mapping[str, str]
    ) -> Iterator[tuple[str, Node]]:
        """Yield the error of each input that has one, in that input's unit."""
        inputs = {column.key for column in sheet.columns if column.role == "input"}
        for index, column in enumerate(sheet.columns):
            where = (*path, "columns", index, "sigma")
            if column.sigma is None or (column.role == "computed" and column.is_number):
                if isinstance(column.sigma, str) or column.sigma is False:
                    raise self.place.error(where, "a computed column's sigma is true, or left out")
                continue
            if column.role == "computed":
                raise self.place.error(where, f"{column.key!r} is no number, which has an error")
            others = inputs - {column.key}
            if not isinstance(column.sigma, str) or column.sigma not in others:
                near = near_matches(str(column.sigma), others)
                raise self.place.error(
                    where, f"{column.sigma!r} is not another input column ({near})"
                )
            unit = known[column.sigma]
            if unit in (TEXT, TIME) or not column.is_number:
                raise self.place.error(where, f"{column.key!r} and its error must be numbers")
            try:
                factor = units.factor(unit, column.unit)
            except InputError as error:
                raise self.place.error(where, str(error)) from None
            sigma = Key(column.sigma, unit)
            yield column.key, sigma if factor == 1 else Scaled(sigma, factor, column.unit)

    def _result_units(
        self, path: tuple[int | str, ...], sheet: Sheet, known: Mapping[str, str]
    ) -> dict[str, str]:
        found: dict[str, str] = {}
        for index, result in enumerate(sheet.results):
            where = (*path, "results", index)
            taken = {**self.settings, **dict.fromkeys(self.results), **known}
            self._key_is_good(where, result.key, {**dict.fromkeys(reserved_names()), **taken})
            self._unit_is_good(where, result.unit)
            self.results.add(result.key)
            found[result.key] = result.unit
        return found

    def _summary(self, path: tuple[int | str, ...], sheet: Sheet, tables: list[Table]) -> Table:
        """Return a sheet with a row for each group of rows of an earlier one."""
        if not sheet.gathers or not sheet.by:
            raise self.place.error(path, f"the sheet {sheet.name!r} needs both gathers and by")
        gathered = next((each for each in tables if each.sheet.name == sheet.gathers), None)
        if gathered is None:
            near = near_matches(sheet.gathers, [each.sheet.name for each in tables])
            raise self.place.error(
                (*path, "gathers"), f"{sheet.gathers!r} is not an earlier sheet ({near})"
            )
        units_of = {
            column.key: column.unit if column.is_number else _KINDS_UNIT[column.kind]
            for column in gathered.sheet.columns
        }
        if units_of.get(sheet.by) != TEXT:
            near = near_matches(sheet.by, [key for key, unit in units_of.items() if unit == TEXT])
            raise self.place.error(
                (*path, "by"),
                f"{sheet.by!r} is not a column of texts of {sheet.gathers!r} ({near})",
            )
        parser = Parser({**self.settings, **units_of}, columns=frozenset(units_of))
        nodes: dict[str, Node] = {}
        for index, column in enumerate(sheet.columns):
            where = (*path, "columns", index)
            self._key_is_good(where, column.key, {**self.settings, **nodes})
            self._unit_is_good(where, column.unit)
            self._column_is_good(where, column)
            if column.role == "input" or column.sigma is not None:
                raise self.place.error(where, f"the sheet {sheet.name!r} has computed columns only")
            unit = column.unit if column.is_number else _KINDS_UNIT[column.kind]
            nodes[column.key] = self._parsed(parser, (*where, "formula"), column.formula, unit)
        self._labels_differ(path, sheet, sheet)
        self._charts_are_good(path, sheet, {key: tree.unit or "" for key, tree in nodes.items()})
        return Table(sheet, nodes, frozenset(), (), frozenset(), {}, tuple(nodes), gathered)

    def _column_is_good(self, path: tuple[int | str, ...], column: Column) -> None:
        if column.role == "computed" and not column.formula:
            raise self.place.error(path, f"the computed column {column.key!r} needs a formula")
        if column.role == "input" and column.formula:
            raise self.place.error((*path, "formula"), f"{column.key!r} is an input, not computed")
        if not column.label.strip():
            raise self.place.error((*path, "label"), f"{column.key!r} needs a label")
        plain = Header(" ".join(column.label.split()), column.unit or None)
        if parse_header(column.header) != plain or parse_header(column.label).unit is not None:
            raise self.place.error(
                (*path, "label"), f"{column.label!r}: brackets in a label would be read as a unit"
            )
        if any(set(choice) & set(',"') for choice in column.choices):
            raise self.place.error(
                (*path, "choices"), "a choice cannot hold a comma or a quotation mark"
            )
        if len(",".join(column.choices)) > LONGEST_LIST:
            raise self.place.error(
                (*path, "choices"), f"the choices have more than {LONGEST_LIST} characters together"
            )
        for word in ("above", "at_least", "below", "at_most"):
            self._limit_is_good((*path, word), column, getattr(column, word))

    def _limit_is_good(
        self, path: tuple[int | str, ...], column: Column, limit: float | str | None
    ) -> None:
        if limit is None:
            return
        if not column.is_number:
            raise self.place.error(path, f"{column.key!r} is text; {path[-1]} does not fit")
        if isinstance(limit, str):
            if self.settings.get(limit, TEXT) == TEXT:
                near = near_matches(limit, self.settings)
                raise self.place.error(
                    path, f"the limit {limit!r} of {column.key!r} is not a setting ({near})"
                )
            if not units.same_kind(self.settings[limit], column.unit):
                raise self.place.error(
                    path, f"the limit {limit!r} and {column.key!r} are of different kinds"
                )

    def _labels_differ(self, path: tuple[int | str, ...], own: Sheet, sheet: Sheet) -> None:
        taken: dict[str, str] = {}
        places = [index for index, column in enumerate(own.columns) for _ in _with_error(column)]
        for index, column in enumerate(sheet.columns):
            for label in (column.label, *column.aliases):
                folded = " ".join(label.split()).casefold()
                if taken.setdefault(folded, column.key) != column.key:
                    raise self.place.error(
                        (*path, "columns", places[index]),
                        f"{label!r} names both {taken[folded]!r} and {column.key!r}",
                    )

    def _charts_are_good(
        self, path: tuple[int | str, ...], sheet: Sheet, known: Mapping[str, str]
    ) -> None:
        numbers = [each for each in known if known[each] not in (TEXT, TIME)]
        for index, histogram in enumerate(sheet.histograms):
            for word, key in (("of", histogram.of), ("where", histogram.where or histogram.of)):
                if key not in numbers:
                    raise self.place.error(
                        (*path, "histograms", index, word),
                        f"{key!r} is not a column of numbers of this sheet "
                        f"({near_matches(key, numbers)})",
                    )
        for index, chart in enumerate(sheet.charts):
            where = (*path, "charts", index)
            for axis, key in (("x", chart.x), *(("y", key) for key in chart.y)):
                if known.get(key, TEXT) in (TEXT, TIME):
                    near = near_matches(key, numbers)
                    raise self.place.error(
                        (*where, axis), f"{key!r} is not a column of numbers of this sheet ({near})"
                    )
            for key in chart.y[1:]:
                if not units.same_kind(known[key], known[chart.y[0]]):
                    raise self.place.error(
                        where,
                        f"{key!r} and {chart.y[0]!r} cannot share an axis: their units differ",
                    )

    def _alternatives_are_inputs(
        self, path: tuple[int | str, ...], sheet: Sheet, tree: Node
    ) -> None:
        computed = {column.key for column in sheet.columns if column.role == "computed"}
        for part in tree.parts():
            for key in part.awaited if isinstance(part, Either) else ():
                if key.key in computed:
                    raise self.place.error(
                        path,
                        f"{key.key!r} is computed; what stands before «or» must need inputs only",
                    )

    def _formulas_are_short(
        self, path: tuple[int | str, ...], sheet: Sheet, nodes: Mapping[str, Node]
    ) -> None:
        places = {column.key: index for index, column in enumerate(sheet.columns)}
        for key, tree in nodes.items():
            where = (*path, "columns", places.get(key.removesuffix(ERROR_OF), 0), "formula")
            self._formula_is_short(where, sheet, key, tree)

    def _formula_is_short(
        self, path: tuple[int | str, ...], sheet: Sheet, key: str, tree: Node
    ) -> None:
        # the longest cell and setting names that a template can have stand in for the real ones
        own, working = f"'{sheet.name}'!", f"'{working_title(sheet.name)}'!"
        steps = Steps(
            lambda _: f"{working}{LAST_CELL}",
            lambda _: f"{working}{LAST_CELL}:$ZZ$1048576",
            lambda cell: f"{own}{cell}" if cell == LAST_CELL else cell.removeprefix(working),
        )
        symbols = _LongestNames()
        try:
            tree.of_cells(Cells(symbols)).mapped(steps.taken_out).formula(when_blank=None)
            too_long = [each for each in steps.formulas if len(each) > LONGEST]
            if too_long:
                raise FormulaError(
                    f"a working column's formula has {len(too_long[0])} characters, "
                    f"{LONGEST} are allowed"
                )
        except FormulaError as error:
            raise self.place.error(path, f"{key!r}: {error}") from None
        except RecursionError:
            raise self.place.error(path, f"{key!r}: the formula is nested too deep") from None
        except (NotTraceable, InputError):
            return

    def _ordered(
        self, path: tuple[int | str, ...], sheet: Sheet, nodes: Mapping[str, Node]
    ) -> dict[str, Node]:
        ordered: dict[str, Node] = {}
        waiting = dict(nodes)
        while waiting:
            ready = [
                key
                for key, tree in waiting.items()
                if not any(used in waiting for used in _keys(tree))
            ]
            if not ready:
                first = next(iter(waiting))
                rows = [column.key for column in sheet.columns]
                results = [result.key for result in sheet.results]
                where = (
                    ("columns", rows.index(first))
                    if first in rows
                    else ("results", results.index(first))
                )
                raise self.place.error(
                    (*path, *where, "formula"),
                    f"the formulas of {' and '.join(map(repr, waiting))} lead back to themselves",
                )
            for key in ready:
                ordered[key] = waiting.pop(key)
        return ordered

    def _problems(
        self, sheet: Sheet, nodes: Mapping[str, Node], required: frozenset[str]
    ) -> Iterator[Problem]:
        """Yield what can be wrong with the inputs, in the order to tell a person."""
        inputs = [column for column in sheet.columns if column.role == "input"]
        for column in inputs:
            yield Problem(column, "error", f"{column.label} holds an error value")
        for column in inputs:
            if column.key in required:
                yield Problem(column, "missing", f"{column.label} is missing")
        for keys in _alternatives(nodes.values(), {column.key for column in inputs}):
            columns = [column for column in inputs if any(column.key in group for group in keys)]
            labels = " or ".join(column.label for column in columns)
            yield Problem(columns[0], "missing", f"{labels} is missing", alternatives=keys)
        for column in inputs:
            if column.is_number:
                yield Problem(column, "not a number", f"{column.label} is not a number")
                of_errors = [(">=", 0.0) for each in inputs if each.sigma == column.key]
                limits = [*_domain(column, nodes), *column.limits(), *of_errors]
                for comparison, limit in _tightest(limits):
                    words = (
                        f"{limit:.10g} {column.unit}".strip()
                        if not isinstance(limit, str)
                        else (f"the setting «{self.labels[limit]}»")
                    )
                    yield Problem(
                        column,
                        "limit",
                        f"{column.label} must be {_WORDS[comparison]} {words}",
                        comparison,
                        limit,
                        units.factor(self.settings[limit], column.unit)
                        if isinstance(limit, str)
                        else 1.0,
                    )
            elif column.choices:
                allowed = " or ".join(column.choices)
                yield Problem(column, "not a choice", f"{column.label} must be {allowed}")
            elif column.kind == "time":
                yield Problem(
                    column,
                    "not a time",
                    f"{column.label} must be a date and time, as 2026-12-24 03:30:15",
                )
            elif column.kind == "line":
                yield Problem(
                    column,
                    "not a line",
                    f"{column.label}: no such name, or one of several lines; "
                    "see the sheet Line names",
                )
        for column in sheet.columns:
            if column.role == "computed":
                for comparison, limit in column.limits():
                    words = (
                        f"{limit:.10g} {column.unit}"
                        if not isinstance(limit, str)
                        else (f"the setting «{self.labels[limit]}»")
                    )
                    yield Problem(
                        column,
                        "beyond",
                        f"{column.label} is {_BROKEN[comparison]} {words}".strip(),
                        comparison,
                        limit,
                        units.factor(self.settings[limit], column.unit)
                        if isinstance(limit, str)
                        else 1.0,
                    )


def _keys(tree: Node) -> list[str]:
    return [part.key for part in tree.parts() if isinstance(part, Key)]


def _alternatives(nodes: Iterable[Node], inputs: Set[str]) -> Iterator[tuple[tuple[str, ...], ...]]:
    """Yield the groups of inputs of which a row needs one, each once."""
    seen: set[tuple[tuple[str, ...], ...]] = set()
    for tree in nodes:
        for part in tree.parts():
            if isinstance(part, Either):
                keys = tuple(
                    tuple(key for key in group if key in inputs) for group in part.alternatives
                )
                if all(keys) and keys not in seen:
                    seen.add(keys)
                    yield keys


def plain_key(part: Node | None) -> str | None:
    """Return the key that a part is, taken to another unit or not."""
    if isinstance(part, Scaled):
        part = part.part
    return part.key if isinstance(part, Key) else None


def _required(sheet: Sheet, nodes: Mapping[str, Node]) -> Iterator[str]:
    """Yield the inputs without which some computed column stays empty."""
    wanted_by = {part.key for tree in nodes.values() for part in needed(tree)}
    for column in sheet.columns:
        if column.role == "input":
            wanted = column.key in wanted_by if column.required is None else column.required
            if wanted:
                yield column.key


_WORDS = {">": "above", ">=": "at least", "<": "below", "<=": "at most"}
_BROKEN = {">": "not above", ">=": "below", "<": "not below", "<=": "above"}


def _tightest(
    limits: list[tuple[str, float | str]],
) -> Iterator[tuple[str, float | str]]:
    """Yield the lower and the upper limit that leave least, and every limit that is a setting."""
    for strict, sign in ((">", 1), ("<", -1)):
        fixed = [
            (sign * limit, comparison == strict, comparison)
            for comparison, limit in limits
            if comparison.startswith(strict) and not isinstance(limit, str)
        ]
        if fixed:
            limit, _, comparison = max(fixed)
            yield comparison, sign * limit
    yield from ((comparison, limit) for comparison, limit in limits if isinstance(limit, str))


def _domain(column: Column, nodes: Mapping[str, Node]) -> Iterator[tuple[str, float | str]]:
    """Yield the limits that the functions set to what they take straight from this column."""
    for argument, given in given_arguments(nodes.values()):
        if isinstance(argument, Number) and plain_key(given) == column.key:
            factor = given.factor if isinstance(given, Scaled) else 1.0
            for comparison, limit in argument.limits():
                yield comparison, float(f"{limit / factor:.12g}")


ERROR_OF: Final = "_sigma"
"""What is added to a computed column's key for that of its ± column"""


def _with_error(column: Column) -> tuple[Column, ...]:
    """Return a column, and its ± column after it where it has one."""
    if column.role != "computed" or column.sigma is not True:
        return (column,)
    error = Column(
        key=f"{column.key}{ERROR_OF}",
        label=f"± {column.label}",
        role="computed",
        unit=column.unit,
        format=column.format.partition(";")[0].removeprefix("+"),
        width=column.width,
        ucd=f"stat.error;{column.ucd}" if column.ucd else "",
        note=f"1-σ error of {column.label}, from the errors of what was typed, first order.",
        aliases=(f"{column.label} error", f"Error of {column.label}"),
    )
    return column, error


LAST_CELL: Final = "$ZZ1048576"


class _LongestNames(dict[str, Expr]):
    """The longest name that a key may have in a template."""

    def __missing__(self, key: str) -> Expr:
        found = self[key] = name(key if len(key) > len(LAST_CELL) else LAST_CELL)
        return found


def working_title(title: str) -> str:
    """Return the name of the sheet with a sheet's working columns."""
    return f"{title[:23]} working"


def season_wanted(recipe: Recipe) -> bool:
    """Tell whether a formula follows the Earth."""
    return any(
        isinstance(argument, Moment)
        for table in recipe.tables
        for argument, _ in given_arguments(table.nodes.values())
    )


def lines_wanted(recipe: Recipe) -> bool:
    """Tell whether a formula looks up a line."""
    return any(
        isinstance(argument, LineName)
        for table in recipe.tables
        for argument, _ in given_arguments(table.nodes.values())
    )
