"""Formulas that were typed over, differ from their column's, or mix units, redshifts or media."""

from collections import Counter
from collections.abc import Iterator

from workbooks.audit.examined import FEWEST, MOST, Examined
from workbooks.audit.findings import Spot, quoted
from workbooks.audit.formula_cells import Written
from workbooks.audit.formula_units import Follower, Medium, Quantity
from workbooks.audit.formulas import Named, Part, Reference, references
from workbooks.audit.header_words import is_measured_wavelength, is_redshift, medium_named, words
from workbooks.headings import Heading
from workbooks.logbook import cell_name
from workbooks.settings import COSMOLOGY_KEYS


def of_columns(sheet: Examined) -> Iterator[Spot]:
    """Yield the cells that lack their column's formula, or have another one."""
    for heading in sheet.log.headings:
        if not sheet.has_formulas[heading.number]:
            continue
        with_formula = sheet.formulas.by_column[heading.number]
        usual, count = Counter(with_formula.values()).most_common(1)[0]
        if count < MOST * len(with_formula):
            continue
        example = sheet.formulas.groups[usual]
        for row in sheet.rows:
            group = with_formula.get(row)
            if group == usual:
                continue
            place = (row, heading.number)
            value = sheet.value(*place)
            if group is None and value is not None:
                if _starts_a_run(sheet, row, heading, example):
                    continue
                sheet.told.add(place)
                yield (
                    *place,
                    "typed over",
                    f"holds {quoted(value)} where the column has a formula"
                    + _instead(sheet, row, heading),
                )
            elif group is not None and count >= FEWEST:
                yield (
                    *place,
                    "formula changed",
                    f"{_short(sheet.formulas.groups[group].text)} is unlike the column's other "
                    f"formulas, as {_short(example.text)} in "
                    f"{cell_name(example.row, example.column)}",
                )


def _starts_a_run(sheet: Examined, row: int, heading: Heading, example: Written) -> bool:
    """Tell whether the column's formula builds on the cell above, so that one must be typed."""
    if row != sheet.rows[0]:
        return False
    with_parts = sheet.parts_of(example)
    return with_parts is not None and any(
        each.area.first_column == heading.number and each.sheet is None
        for each in references(with_parts)
    )


def _instead(sheet: Examined, row: int, heading: Heading) -> str:
    expected = sheet.expected(row, heading)
    return f"; its inputs give {quoted(expected)}" if isinstance(expected, (float, str)) else ""


def _short(formula: str) -> str:
    return formula if len(formula) <= 60 else f"{formula[:57]}..."


def of_units(sheet: Examined) -> Iterator[Spot]:
    """Yield the formulas whose units, redshifts or media do not fit one another."""
    known: dict[tuple[int, Medium | None], list[tuple[str, str]]] = {}
    for number, cells in sheet.formulas.by_column.items():
        for row, group in cells.items():
            if row <= sheet.log.header_row:
                continue
            key = (group, sheet.row_medium(row))
            if key not in known:
                known[key] = _faults(sheet, sheet.formulas.groups[group], key[1])
            for kind, sentence in known[key]:
                yield row, number, kind, sentence


def _faults(sheet: Examined, written: Written, medium: Medium | None) -> list[tuple[str, str]]:
    part = sheet.parts_of(written)
    if part is None:
        return []
    follower = Follower(lambda each: _quantity(sheet, each, medium))
    try:
        follower.followed(part)
    except RecursionError:
        return []
    return [(fault.kind, fault.sentence) for fault in follower.faults]


def _quantity(sheet: Examined, part: Part, row_medium: Medium | None) -> Quantity:
    if isinstance(part, Named):
        if sheet.recipe is not None and part.name in sheet.recipe.settings:
            setting = sheet.recipe.settings[part.name]
            if setting.kind == "number":
                return Quantity(f"the setting «{setting.label}»", setting.unit)
        if part.name in COSMOLOGY_KEYS:
            return Quantity(part.name, COSMOLOGY_KEYS[part.name])
        return Quantity(part.name)
    assert isinstance(part, Reference)
    _, first_column, last_row, last_column = part.area
    if first_column != last_column or (part.sheet or sheet.name) != sheet.name:
        return Quantity()
    heading = sheet.log.by_number.get(first_column)
    if (
        heading is None
        or last_row <= sheet.log.header_row
        or (sheet.kinds[first_column] in ("text", "time"))
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
