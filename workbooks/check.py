"""A logbook looked through for what hands and programs did to it; nothing is changed."""

from collections import Counter, defaultdict
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import date, time, timedelta
from functools import cached_property, lru_cache
from pathlib import Path
from typing import Any, Final

from cellfuncs import units
from cellfuncs.catalogue import shown
from cellfuncs.errors import CellError, InputError, near_matches
from cellfuncs.families.workbook import provenance
from cellfuncs.physics.expansion import Cosmology
from workbooks.computation import Computation
from workbooks.fill import COMPUTED_WITH, MADE_BY, recipe_of, settings_of, trail
from workbooks.formula_cells import FormulaCells, Written, formula_cells
from workbooks.formulas import (
    Follower,
    Medium,
    Named,
    NotReadable,
    Operation,
    Part,
    Quantity,
    Reference,
    evaluated,
    named_functions,
    parsed,
    references,
)
from workbooks.header_words import (
    MEDIUM_LABELS,
    is_line_name,
    is_measured_wavelength,
    is_redshift,
    is_rest_wavelength,
    medium_named,
    medium_of_line,
    number_in,
    possible,
    usual_unit,
    words,
)
from workbooks.headings import MISREAD_UNITS, Heading, Log, is_unit, logs_of, value_at
from workbooks.logbook import ErrorValue, Logbook, LogbookError, Sheet, cell_name
from workbooks.matching import folded
from workbooks.recipe import Problem, Recipe
from workbooks.settings import COSMOLOGY_KEYS

KINDS: Final = {
    "typed over": "a computed cell typed over by hand",
    "formula changed": "a formula unlike the others of its column",
    "differs": "a computed value that its inputs do not give now",
    "wrong unit": "a function given a column in another unit",
    "units mixed": "units mixed in + or −",
    "media mixed": "wavelengths in air and in vacuum mixed",
    "redshifts added": "redshifts added where factors must be multiplied",
    "no unit": "a header without a unit",
    "unknown unit": "a header's unit that cannot be read or does not fit",
    "repeated header": "the same header twice",
    "repeated row": "the same row twice",
    "out of range": "a value outside what is allowed",
    "number as text": "a number that the spreadsheet holds as text",
    "not a number": "text where a number belongs",
    "turned into a date": "a typed value that the spreadsheet turned into a date",
    "unknown word": "a word that is none of the allowed ones",
    "error value": "an error value in a cell",
    "bad setting": "a setting that cannot be used",
    "other version": "made by another version of the program",
    "other constants": "computed with other constants",
    "other cosmology": "computed with another cosmology",
}
"""Each kind of finding by its name, in words"""


@dataclass(frozen=True)
class Finding:
    """Something that a person should look at: where, of which kind, and what it is."""

    sheet: str
    cell: str
    kind: str
    sentence: str
    last_cell: str = ""
    """The last of an area of cells of which all the same is true"""

    @property
    def place(self) -> str:
        return f"{self.sheet}!{self.cell}" + (f":{self.last_cell}" if self.last_cell else "")

    def __str__(self) -> str:
        return f"{self.place}: {self.kind}: {self.sentence}"


@dataclass
class CheckReport:
    """What was found in a logbook."""

    logbook: str
    recipe: str
    sheets: list[str] = field(default_factory=list)
    findings: list[Finding] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    @property
    def has_problems(self) -> bool:
        return bool(self.findings)


def check(path: Path, recipe: Recipe | None = None) -> CheckReport:
    """Look a logbook through and report, by sheet and cell, what a person should look at.

    path: the logbook
    recipe: left out, the one that the logbook was made from, if any; without one, what needs no
        recipe is looked for
    Raises LogbookError where the file cannot be read, RecipeError where the recipe cannot be used.
    """
    logbook = Logbook.open(path)
    report = CheckReport(str(path), "")
    if recipe is None and "recipe_name" in logbook.named_cells:
        try:
            recipe = recipe_of(logbook)
        except LogbookError as error:
            report.notes.append(f"{error}; its computed columns were not computed again")
    report.recipe = recipe.name if recipe else ""
    settings: dict[str, Any] = {}
    cosmology: Cosmology | None = None
    if recipe is not None:
        try:
            settings, cosmology = settings_of(logbook, recipe)
        except LogbookError as error:
            report.findings.append(_of_setting(str(error)))
    auditors = [
        _Auditor(logbook, log, recipe, settings, cosmology) for log in logs_of(logbook, recipe)
    ]
    # what formulas compute follows the settings, whenever the logbook was last filled
    follows = any(auditor.formulas.groups for auditor in auditors)
    stale = list(_of_template(logbook))
    if not follows:
        stale += _of_last_filling(logbook, cosmology)
    report.findings += stale
    for auditor in auditors:
        log = auditor.log
        report.sheets.append(log.sheet.name)
        auditor.made_otherwise = any(finding.kind in COMPUTE_OTHERWISE for finding in stale)
        report.findings += auditor.findings()
        if recipe is not None and log.match is None:
            report.notes.append(
                f"{log.sheet.name}: the recipe does not fit, only what needs none was looked for"
                + (f" ({log.obstacle})" if log.obstacle else "")
            )
    if recipe is None:
        report.notes.append("no recipe: computed columns were not computed again")
    if not report.sheets:
        report.notes.append("no sheet has a table with headers")
    return report


def _of_setting(message: str) -> Finding:
    place, _, sentence = message.partition(": ")
    sheet, mark, cell = place.rpartition("!")
    return (
        Finding(sheet, cell, "bad setting", sentence)
        if mark
        else Finding("", "", "bad setting", message)
    )


COMPUTE_OTHERWISE: Final = ("other constants", "other cosmology")
"""Findings that say why all numbers may differ from what they would be now"""


def _said(logbook: Logbook, key: str) -> tuple[str, str, str] | None:
    """Return sheet, cell and text of a named cell."""
    if key not in logbook.named_cells:
        return None
    name, row, column = logbook.named_cells[key]
    value = value_at(logbook.sheet(name), row, column)
    return (name, cell_name(row, column), value) if isinstance(value, str) else None


def _of_template(logbook: Logbook) -> Iterator[Finding]:
    """What a template's Provenance sheet says of itself, against this program"""
    for key, kind, now in (
        ("template_version", "other version", provenance("version")),
        ("template_constants", "other constants", provenance("constants")),
    ):
        found = _said(logbook, key)
        if found and found[2] != now:
            sheet, cell, value = found
            yield Finding(sheet, cell, kind, f"the template has {value}, this program {now}")


def _of_last_filling(logbook: Logbook, cosmology: Cosmology | None) -> Iterator[Finding]:
    found = _said(logbook, "last_filled")
    if found:
        sheet, cell, value = found
        for kind, sentence in _trail_differs(value.partition("; ")[2], cosmology):
            yield Finding(sheet, cell, kind, sentence)


def _trail_differs(made_with: str, cosmology: Cosmology | None) -> Iterator[tuple[str, str]]:
    """Yield kind and sentence of each part of a trail that is not what it would be now."""
    if not made_with.startswith(MADE_BY):
        return
    version, _, rest = made_with.partition("; ")
    constants, mark, used = rest.partition("; cosmology ")
    if version != provenance("version"):
        yield "other version", f"computed by {version}, this is {provenance('version')}"
    if constants and constants != provenance("constants"):
        yield (
            "other constants",
            f"computed with {constants}, this program has {provenance('constants')}",
        )
    if mark and cosmology is not None:
        now = trail(cosmology).rpartition("; cosmology ")[2]
        if used != now:
            yield (
                "other cosmology",
                f"computed with the cosmology {used}; the logbook now says {now}",
            )


# ---- one sheet ---------------------------------------------------------------------------------

MOST: Final = 0.6
"""The part of a column's cells that decides what the column holds"""

FEWEST: Final = 3
"""Cells without which nothing is said of what a column usually holds"""


@dataclass
class _Auditor:
    logbook: Logbook
    log: Log
    recipe: Recipe | None
    settings: Mapping[str, Any]
    cosmology: Cosmology | None
    made_otherwise: bool = False
    """Whether the workbook says that its numbers rest on something else than they would now"""

    def __post_init__(self) -> None:
        self.sheet: Sheet = self.log.sheet
        self.name = self.sheet.name
        self.rows = self.log.rows_in_use
        self.formulas: FormulaCells = formula_cells(self.logbook.path, self.name)
        self.told: set[tuple[int, int]] = set()
        """Cells whose value is explained already"""

    def findings(self) -> list[Finding]:
        """Return what was found, in the order of the sheet's rows."""
        found: list[tuple[int, int, str, str]] = []
        for look in (
            self._headers,
            self._dates,
            self._texts,
            self._typed_over,
            self._formula_faults,
            self._media,
            self._limits,
            self._errors,
            self._differences,
            self._trails,
            self._repeated_rows,
        ):
            found += look()
        return _in_runs(self.name, found)

    # what is known of the columns

    @cached_property
    def computed(self) -> Computation | None:
        if self.log.match is None or self.cosmology is None:
            return None
        return Computation(self.log.match, self.settings, self.cosmology)

    def value(self, row: int, number: int) -> Any:
        return self.log.value(row, number)

    def cells(self, heading: Heading) -> Iterator[tuple[int, Any]]:
        """Yield row and value of a column's filled cells in the rows in use."""
        for row, value in zip(self.rows, self.log.values(heading.number), strict=True):
            if value is not None:
                yield row, value

    @cached_property
    def kinds(self) -> dict[int, str]:
        """What each column holds: by the recipe, or by most of its cells."""
        found = {}
        for heading in self.log.headings:
            counted = Counter(_kind(value) for _, value in self.cells(heading))
            counted.pop("error", None)
            most, count = counted.most_common(1)[0] if counted else ("", 0)
            total = sum(counted.values())
            column = heading.column
            if column is not None:
                found[heading.number] = (
                    "number"
                    if column.is_number
                    else "time"
                    if column.kind == "time" or (most == "time" and count >= MOST * total)
                    else "text"
                )
            elif count >= FEWEST and count >= MOST * total:
                found[heading.number] = most
            elif heading.unit and heading.in_square_brackets and counted["time"] < MOST * total:
                found[heading.number] = "number"
            else:
                found[heading.number] = ""
        return found

    @cached_property
    def has_formulas(self) -> dict[int, bool]:
        """Whether most of a column's filled cells hold formulas."""
        found = {}
        for heading in self.log.headings:
            with_formula = self.formulas.by_column.get(heading.number, {})
            # a row whose formula shows nothing counts as well
            rows = [
                row
                for row in self.rows
                if row in with_formula or self.value(row, heading.number) is not None
            ]
            count = sum(row in with_formula for row in rows)
            enough = count >= FEWEST or len(with_formula) >= FEWEST
            found[heading.number] = bool(
                enough and (count >= MOST * len(rows) or len(with_formula) > 2 * len(rows))
            )
        return found

    # -- headers

    def _headers(self) -> Iterator[tuple[int, int, str, str]]:
        row = self.log.header_row
        seen: dict[str, Heading] = {}
        for heading in self.log.headings:
            first = seen.setdefault(self._sameness(heading), heading)
            if first is not heading:
                where = cell_name(row, first.number)
                yield row, heading.number, "repeated header", f"{where} is «{first.text}» already"
            problem = self._unit_problem(heading)
            if problem:
                yield row, heading.number, *problem

    def _sameness(self, heading: Heading) -> str:
        if heading.column is not None:
            return f"\0{heading.column.key}"
        return folded(heading.text)

    def _unit_problem(self, heading: Heading) -> tuple[str, str] | None:
        column, unit = heading.column, heading.written_unit
        is_number = self.kinds[heading.number] == "number"
        if unit is None:
            wanted = column.unit if column is not None and column.is_number else ""
            if column is None and is_number:
                wanted = usual_unit(heading.label)
            if wanted:
                return "no unit", f"«{heading.text}» names no unit, such as [{wanted}]"
            return None
        if column is not None and not column.is_number:
            return None
        if column is None and not (is_number and self._is_meant_as_unit(heading)):
            return None
        if unit in MISREAD_UNITS and (column is None or not units.same_kind(unit, column.unit)):
            meant = MISREAD_UNITS[unit]
            stands_for = str(units.unit_of(unit).long_names[0])
            return "unknown unit", f"[{unit}] is the {stands_for}; write [{meant}]"
        try:
            units.unit_of(unit)
            if column is not None:
                units.factor(unit, column.unit)
        except InputError as error:
            return "unknown unit", str(error)
        return None

    @staticmethod
    def _is_meant_as_unit(heading: Heading) -> bool:
        """Tell whether brackets hold a unit, however badly written, and no remark."""
        unit = heading.written_unit or ""
        if heading.in_square_brackets or is_unit(unit) or unit in MISREAD_UNITS:
            return True
        return "near matches" in near_matches(unit, units.COMMON) and len(unit) <= 12

    # -- what cells hold

    def _dates(self) -> Iterator[tuple[int, int, str, str]]:
        for heading in self.log.headings:
            kind = self.kinds[heading.number]
            if kind not in ("number", "text") or heading.is_trail:
                continue
            for row, value in self.cells(heading):
                if isinstance(value, (date, time, timedelta)) and not self._is_duration(
                    heading, value
                ):
                    self.told.add((row, heading.number))
                    yield row, heading.number, "turned into a date", _as_typed(value, kind)

    @staticmethod
    def _is_duration(heading: Heading, value: Any) -> bool:
        return isinstance(value, timedelta) and units.same_kind(heading.unit or "", "s")

    def _texts(self) -> Iterator[tuple[int, int, str, str]]:
        for heading in self.log.headings:
            if self.kinds[heading.number] != "number":
                continue
            for row, value in self.cells(heading):
                if not isinstance(value, str):
                    continue
                number = number_in(value)
                place = (row, heading.number)
                if number is not None:
                    self.told.add(place)
                    yield (
                        *place,
                        "number as text",
                        f"{shown(value)} is text to the spreadsheet, which leaves it out of every "
                        f"sum; type {number}",
                    )
                elif heading.column is not None and not self._stands_for_nothing(heading, row):
                    self.told.add(place)
                    yield *place, "not a number", f"{shown(value)} stands where a number belongs"

    def _stands_for_nothing(self, heading: Heading, row: int) -> bool:
        """Tell whether a formula gives words where it has no number to give."""
        return row in self.formulas.by_column.get(heading.number, {})

    # -- formulas

    def _typed_over(self) -> Iterator[tuple[int, int, str, str]]:
        for heading in self.log.headings:
            if not self.has_formulas[heading.number]:
                continue
            with_formula = self.formulas.by_column[heading.number]
            usual, count = Counter(with_formula.values()).most_common(1)[0]
            if count < MOST * len(with_formula):
                continue
            example = self.formulas.groups[usual]
            for row in self.rows:
                place = (row, heading.number)
                value = self.value(*place)
                group = with_formula.get(row)
                if group is None and value is not None:
                    if self._starts_a_run(row, heading, example):
                        continue
                    self.told.add(place)
                    yield (
                        *place,
                        "typed over",
                        f"holds {_held(value)} where the column has a formula"
                        + self._instead(row, heading),
                    )
                elif group is not None and group != usual and count >= FEWEST:
                    yield (
                        *place,
                        "formula changed",
                        f"{_short(self.formulas.groups[group].text)} is unlike the column's other "
                        f"formulas, as {_short(example.text)} in "
                        f"{cell_name(example.row, example.column)}",
                    )

    def _starts_a_run(self, row: int, heading: Heading, example: Written) -> bool:
        """Tell whether the column's formula builds on the cell above, so that one must be typed."""
        if row != self.rows[0]:
            return False
        with_parts = self._parsed(example)
        return with_parts is not None and any(
            each.area.first_column == heading.number and each.sheet is None
            for each in references(with_parts)
        )

    def _instead(self, row: int, heading: Heading) -> str:
        expected = self._expected(row, heading)
        return f"; its inputs give {_held(expected)}" if isinstance(expected, (float, str)) else ""

    def _expected(self, row: int, heading: Heading) -> Any:
        """Return what a cell's inputs give now, in its column's unit, or the CellError that says
        why they give nothing; None where nothing is computed there."""
        index = self._index.get(row)
        if self.computed is None or self.log.match is None or index is None:
            return None
        key = heading.column.key if heading.column else ""
        if key not in self.computed.results or key not in self.log.match.places:
            return None
        expected = self.computed.results[key].at(index)
        if isinstance(expected, float):
            return expected / self.log.match.places[key].to_recipe
        return expected

    @cached_property
    def _problems(self) -> dict[int, list[tuple[Problem, str]]]:
        """By row: what the recipe finds wrong with its inputs, and the sentence that says so"""
        if self.computed is None:
            return {}
        return {
            self.computed.rows[index]: [
                (problem, self.computed.remark(index, problem).sentence) for problem in problems
            ]
            for index, problems in self.computed.problems().items()
        }

    @cached_property
    def _index(self) -> dict[int, int]:
        rows = self.computed.rows if self.computed else ()
        return {row: index for index, row in enumerate(rows)}

    def _parsed(self, written: Written) -> Part | None:
        try:
            return parsed(written.text)
        except NotReadable:
            return None

    def _formula_faults(self) -> Iterator[tuple[int, int, str, str]]:
        known: dict[tuple[int, Medium | None], list[tuple[str, str]]] = {}
        for number, cells in self.formulas.by_column.items():
            for row, group in cells.items():
                if row <= self.log.header_row:
                    continue
                key = (group, self._row_medium(row))
                if key not in known:
                    known[key] = self._faults(self.formulas.groups[group], key[1])
                for kind, sentence in known[key]:
                    yield row, number, kind, sentence

    def _faults(self, written: Written, medium: Medium | None) -> list[tuple[str, str]]:
        part = self._parsed(written)
        if part is None:
            return []
        follower = Follower(lambda each: self._quantity(each, medium))
        try:
            follower.followed(part)
        except RecursionError:
            return []
        return [(fault.kind, fault.sentence) for fault in follower.faults]

    def _quantity(self, part: Part, row_medium: Medium | None) -> Quantity:
        if isinstance(part, Named):
            if self.recipe is not None and part.name in self.recipe.settings:
                setting = self.recipe.settings[part.name]
                if setting.kind == "number":
                    return Quantity(f"the setting «{setting.label}»", setting.unit)
            if part.name in COSMOLOGY_KEYS:
                return Quantity(part.name, COSMOLOGY_KEYS[part.name])
            return Quantity(part.name)
        assert isinstance(part, Reference)
        _, first_column, last_row, last_column = part.area
        if first_column != last_column or (part.sheet or self.name) != self.name:
            return Quantity()
        heading = self.log.by_number.get(first_column)
        if (
            heading is None
            or last_row <= self.log.header_row
            or (self.kinds[first_column] in ("text", "time"))
        ):
            return Quantity()
        said = words(heading.text)
        letters = cell_name(1, first_column)[:-1]
        medium = medium_named(said)
        if medium is None and row_medium is not None and is_measured_wavelength(heading):
            medium = row_medium
        redshift = is_redshift(said) and not heading.unit
        unit = "" if redshift else heading.unit
        if unit == "" and not redshift and not (heading.column and heading.column.is_number):
            unit = None
        return Quantity(
            f"column {letters} («{heading.text}»)", unit, is_redshift=redshift, medium=medium
        )

    # -- air and vacuum

    @cached_property
    def _medium_heading(self) -> Heading | None:
        for heading in self.log.headings:
            choices = (
                {choice.casefold() for choice in heading.column.choices}
                if heading.column
                else set()
            )
            if choices == {"air", "vacuum"} or folded(heading.label) in MEDIUM_LABELS:
                return heading
        return None

    def _row_medium(self, row: int) -> Medium | None:
        heading = self._medium_heading
        value = self.value(row, heading.number) if heading else None
        word = value.strip().casefold() if isinstance(value, str) else ""
        return "air" if word == "air" else "vacuum" if word in ("vacuum", "vac") else None

    def _media(self) -> Iterator[tuple[int, int, str, str]]:
        """Rest wavelengths typed in one medium beside measurements in the other"""
        line = next((each for each in self.log.headings if is_line_name(each)), None)
        measured = next((each for each in self.log.headings if is_measured_wavelength(each)), None)
        if line is None or measured is None:
            return
        for heading in self.log.headings:
            if not (is_rest_wavelength(heading) and heading.unit):
                continue
            if heading.is_computed or self.has_formulas[heading.number]:
                continue
            if not units.same_kind(heading.unit, "Angstrom"):
                continue
            factor = units.factor(heading.unit, "Angstrom")
            for row, value in self.cells(heading):
                name = self.value(row, line.number)
                medium = medium_named(words(measured.text)) or self._row_medium(row)
                if type(value) is not float or not isinstance(name, str) or medium is None:
                    continue
                rest = medium_of_line(name, value * factor)
                if rest is not None and rest != medium:
                    yield (
                        row,
                        heading.number,
                        "media mixed",
                        f"{value:g} {heading.unit} is the wavelength of {name.strip()} in {rest}, "
                        f"but the measurement is in {medium}",
                    )

    # -- limits, errors, differences

    def _limits(self) -> Iterator[tuple[int, int, str, str]]:
        match = self.log.match
        if match is not None:
            for row, problems in sorted(self._problems.items()):
                for problem, sentence in problems:
                    place = match.places.get(problem.column.key)
                    if place is None or (row, place.number) in self.told:
                        continue
                    if problem.kind == "limit":
                        yield row, place.number, "out of range", sentence
                    elif problem.kind.startswith("not a ") and problem.kind != "not a number":
                        self.told.add((row, place.number))
                        yield row, place.number, "unknown word", sentence
        for heading in self.log.headings:
            if heading.column is not None or self.kinds[heading.number] != "number":
                continue
            bounds = possible(heading)
            if bounds is None:
                continue
            low, high, sentence = bounds
            for row, value in self.cells(heading):
                if type(value) is float and not low <= value <= high:
                    yield row, heading.number, "out of range", f"is {value:g}; {sentence}"

    def _errors(self) -> Iterator[tuple[int, int, str, str]]:
        for heading in self.log.headings:
            for row in self.log.row_numbers:
                value = self.value(row, heading.number)
                if isinstance(value, ErrorValue):
                    yield row, heading.number, "error value", self._explained(row, heading, value)

    def _explained(self, row: int, heading: Heading, value: ErrorValue) -> str:
        expected = self._expected(row, heading)
        if isinstance(expected, CellError):
            said = [sentence for _, sentence in self._problems.get(row, [])]
            return f"{value}: {said[0] if said else expected}"
        group = self.formulas.by_column.get(heading.number, {}).get(row)
        if group is not None:
            reason = self._reason_of_formula(self.formulas.groups[group], row)
            if reason:
                return f"{value}: {reason}"
        return f"{value}: {_ERROR_WORDS.get(value.text, 'an error')}"

    def _reason_of_formula(self, written: Written, row: int) -> str:
        """Return what a function says of this row's cells, or which of them is the reason."""
        part = self._parsed(written)
        if part is None:
            return ""
        down = row - written.row

        def moved(each: Reference) -> tuple[int, int]:
            # copies of a formula move along; a cell above the table stands still
            above = each.area.first_row <= self.log.header_row
            return each.area.first_row + (0 if above else down), each.area.first_column

        def held(each: Part) -> Any:
            if not isinstance(each, Reference) or not each.is_cell or each.sheet is not None:
                raise NotReadable("not a cell of this sheet")
            value = self.value(*moved(each))
            if isinstance(value, ErrorValue):
                raise InputError(f"{cell_name(*moved(each))} holds {value}")
            return value

        for called in reversed(list(named_functions(part))):
            if called.ours is None:
                continue
            try:
                evaluated(called, held)
            except CellError as error:
                return str(error)
            except NotReadable:
                continue
        for each in references(part):
            if each.is_cell and each.sheet is None:
                value = self.value(*moved(each))
                if isinstance(value, ErrorValue):
                    return f"{cell_name(*moved(each))} holds {value}"
        for divided in part.parts():
            if not isinstance(divided, Operation) or divided.operator != "/":
                continue
            if isinstance(divided.right, Reference):
                value = self.value(*moved(divided.right))
                if value is None or value == 0:
                    state = "empty" if value is None else "0"
                    return f"divided by {cell_name(*moved(divided.right))}, which is {state}"
        for each in references(part):
            if each.is_cell and each.sheet is None and isinstance(self.value(*moved(each)), str):
                text = shown(self.value(*moved(each)))
                return f"{cell_name(*moved(each))} holds the text {text}"
        return ""

    def _differences(self) -> Iterator[tuple[int, int, str, str]]:
        if self.computed is None or self.log.match is None or self.made_otherwise:
            return
        headings = [
            heading
            for heading in self.log.headings
            if heading.column and heading.column.key in self.computed.results
        ]
        for row in self.computed.rows:
            if self._is_made_otherwise(row):
                continue
            ours = self._is_ours(row)
            if not ours and all(self.value(row, each.number) is None for each in headings):
                continue
            for heading in headings:
                at = (row, heading.number)
                held = self.value(*at)
                if at in self.told or isinstance(held, ErrorValue):
                    continue
                expected = self._expected(row, heading)
                by_formula = row in self.formulas.by_column.get(heading.number, {})
                nothing_due = (
                    by_formula or isinstance(expected, CellError) or self._never_calculated
                )
                if held is None and nothing_due:
                    continue
                unit = heading.unit or ""
                sentence = self._difference(expected, held, unit, by_formula, ours)
                if sentence:
                    yield *at, "differs", sentence

    @cached_property
    def _never_calculated(self) -> bool:
        """Whether the sheet's formulas hold no results at all, as in a template never opened."""
        return any(self.formulas.by_column.values()) and all(
            self.value(row, number) is None
            for number, cells in self.formulas.by_column.items()
            for row in cells
            if row in self._index
        )

    def _difference(self, expected: Any, held: Any, unit: str, by_formula: bool, ours: bool) -> str:
        if isinstance(expected, CellError):
            if isinstance(held, str):
                return ""
            return f"holds {_held(held)}, but its inputs give no result: {expected}"
        if held is None:
            return f"is empty, but its inputs give {_held(expected)}"
        if isinstance(expected, str) or isinstance(held, str):
            same = (
                isinstance(held, str)
                and isinstance(expected, str)
                and (folded(held) == folded(expected))
            )
            return "" if same else f"holds {_held(held)}, but its inputs give {_held(expected)}"
        if type(held) is not float:
            return f"holds {_held(held)}, but its inputs give {_held(expected)}"
        if abs(held - expected) <= _tolerance(held, expected, unit, by_formula, ours):
            return ""
        return (
            f"holds {held:.10g}, but its inputs give {expected:.10g} now: it was typed over, or an "
            "input was changed afterwards"
        )

    def _is_ours(self, row: int) -> bool:
        """Tell whether `fill` or a template made this row's numbers, to their last digit."""
        if "recipe_name" in self.logbook.named_cells:
            return True
        value = self._made_with(row)
        return value is not None and value.startswith(MADE_BY)

    def _made_with(self, row: int) -> str | None:
        if self._trail_heading is None:
            return None
        value = self.value(row, self._trail_heading.number)
        return value if isinstance(value, str) else None

    @cached_property
    def _trail_heading(self) -> Heading | None:
        return next(
            (h for h in self.log.headings if folded(h.label) == folded(COMPUTED_WITH)), None
        )

    def _is_made_otherwise(self, row: int) -> bool:
        """Tell whether the row says itself that its numbers rest on something else."""
        return any(kind in COMPUTE_OTHERWISE for kind, _ in self._trail_findings(row))

    def _trail_findings(self, row: int) -> list[tuple[str, str]]:
        said = self._made_with(row)
        if said is None:
            return []
        if said not in self._known_trails:
            self._known_trails[said] = list(_trail_differs(said, self.cosmology))
        return self._known_trails[said]

    @cached_property
    def _known_trails(self) -> dict[str, list[tuple[str, str]]]:
        return {}

    def _trails(self) -> Iterator[tuple[int, int, str, str]]:
        if self._trail_heading is None:
            return
        for row in self.log.row_numbers:
            for kind, sentence in self._trail_findings(row):
                yield row, self._trail_heading.number, kind, sentence

    # -- rows

    def _repeated_rows(self) -> Iterator[tuple[int, int, str, str]]:
        typed = [
            heading
            for heading in self.log.headings
            if not heading.is_computed and not self.has_formulas[heading.number]
        ]
        if not typed:
            return
        seen: dict[tuple[Any, ...], int] = {}
        columns = [map(_comparable, self.log.values(heading.number)) for heading in typed]
        for row, cells in zip(self.rows, zip(*columns, strict=True), strict=True):
            filled = sum(value is not None for value in cells)
            if filled < min(FEWEST, len(typed)) or filled < 2:
                continue
            first = seen.setdefault(cells, row)
            if first != row:
                number = next(
                    heading.number
                    for heading in typed
                    if self.value(row, heading.number) is not None
                )
                yield row, number, "repeated row", f"row {row} holds what row {first} holds"


def _in_runs(sheet: str, found: Sequence[tuple[int, int, str, str]]) -> list[Finding]:
    """Return the findings, those of the same in cells below one another as one."""
    runs: dict[tuple[int, str, str], list[list[int]]] = defaultdict(list)
    for row, number, kind, sentence in sorted(found, key=lambda each: each[0]):
        ends = runs[number, kind, sentence]
        if ends and row == ends[-1][1] + 1:
            ends[-1][1] = row
        elif not ends or row != ends[-1][1]:
            ends.append([row, row])
    # the same of neighbours in a row, as of all results that one bad input spoils, is one as well
    areas: list[list[Any]] = []
    open_to: dict[tuple[int, int, int, str, str], list[Any]] = {}
    for (number, kind, sentence), ends in sorted(runs.items(), key=lambda each: each[0][0]):
        for first, last in ends:
            area = open_to.pop((number - 1, first, last, kind, sentence), None)
            if area is None:
                area = [first, number, last, number, kind, sentence]
                areas.append(area)
            area[3] = number
            open_to[number, first, last, kind, sentence] = area
    return [
        Finding(
            sheet,
            cell_name(top, left),
            kind,
            sentence,
            cell_name(bottom, right) if (bottom, right) != (top, left) else "",
        )
        for top, left, bottom, right, kind, sentence in sorted(areas, key=lambda each: each[:2])
    ]


# ---- words and numbers -----------------------------------------------------------------------


def _kind(value: Any) -> str:
    if isinstance(value, bool):
        return "truth"
    if isinstance(value, float):
        return "number"
    if isinstance(value, ErrorValue):
        return "error"
    if isinstance(value, (date, time, timedelta)):
        return "time"
    return "text"


def _held(value: Any) -> str:
    if isinstance(value, float):
        return f"{value:.10g}"
    return f"«{value}»" if isinstance(value, str) else str(shown(value))


def _short(formula: str) -> str:
    return formula if len(formula) <= 60 else f"{formula[:57]}..."


def _comparable(value: Any) -> Any:
    return folded(value) if isinstance(value, str) else value


_MONTHS: Final = "JAN FEB MAR APR MAY JUN JUL AUG SEP OCT NOV DEC".split()


def _as_typed(value: Any, kind: str) -> str:
    """Say what a date in a wrong place may have been when it was typed."""
    if not isinstance(value, date):
        return f"holds the time {value}; perhaps it was typed with a colon"
    shown_date = f"{value.day} {_MONTHS[value.month - 1].capitalize()} {value.year}"
    if kind == "number":
        guesses = f"{value.day}.{value.month} or {value.month}.{value.day}"
        if value.day == 1:
            guesses += f" or {value.month}.{value.year}"
    else:
        guesses = f"{_MONTHS[value.month - 1]}{value.day} or {value.day}-{value.month}"
        if value.day == 1:
            guesses += f" or {_MONTHS[value.month - 1]}-{value.year % 100:02d}"
    return (
        f"holds the date {shown_date}; perhaps {guesses} was typed and the spreadsheet made a date "
        "of it: set the cell to text or number first"
    )


_ERROR_WORDS: Final = {
    "#DIV/0!": "a division by zero or by an empty cell",
    "#N/A": "something is missing or was not found",
    "#NUM!": "a number outside what the function takes",
    "#VALUE!": "text where a number belongs, or a name that is not known",
    "#REF!": "the formula refers to a cell that was deleted",
    "#NAME?": "a function or name that the spreadsheet does not know; the functions of this "
    "program are there once connected («cellfuncs connect»)",
    "#NULL!": "two ranges that have no cell in common",
}


def _tolerance(held: float, expected: float, unit: str, by_formula: bool, ours: bool) -> float:
    """Return how far two numbers may lie apart and still be the same computation."""
    size = abs(expected)
    speed = _speed_in(unit)
    if by_formula and not ours:
        # an observatory's own formula has its own constants and rest wavelengths
        return 1e-3 * size + (speed or 1e-5)
    if by_formula:
        # plain formulas follow the Earth to some cm/s
        return 1e-9 * size + (2e-4 * speed or 1e-9)
    exact = 1e-9 * size + (1e-6 * speed or 1e-12)
    if ours:
        return exact
    return max(exact, 0.5001 * 10.0 ** -_decimals(held))


@lru_cache(maxsize=64)
def _speed_in(unit: str) -> float:
    """Return 1 km/s in a unit of velocity, 0 in any other unit."""
    return units.factor("km/s", unit) if units.same_kind(unit, "km/s") else 0.0


def _decimals(value: float) -> int:
    """Return the decimals that a number was typed with."""
    mantissa, _, exponent = repr(value).partition("e")
    decimals = len(mantissa.partition(".")[2].rstrip("0"))
    return decimals - int(exponent or 0)
