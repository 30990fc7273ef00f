"""A sheet as named, unit-labelled columns; writes back without touching anything else."""

import io
import re
import zipfile
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass
from datetime import date, datetime, time
from functools import cached_property
from pathlib import Path
from xml.sax.saxutils import quoteattr

from python_calamine import CalamineError, CalamineWorkbook

from cellfuncs.errors import near_matches
from workbooks.package import (
    LAST_COLUMN,
    LAST_ROW,
    Area,
    ErrorValue,
    LogbookError,
    Package,
    SheetPart,
    Value,
    cell_name,
    check_value,
    check_xml,
)

__all__ = [
    "Area",
    "ErrorValue",
    "Header",
    "Logbook",
    "LogbookError",
    "Sheet",
    "Value",
    "cell_name",
    "parse_header",
]

HEADER_ROWS = 30
# calamine lays the used area out cell by cell, so one stray cell in the far corner would claim
# seventeen thousand million of them.
MOST_CELLS = 40_000_000


@dataclass(frozen=True, slots=True)
class Header:
    """What stands above a column: its label, and its unit where one is given."""

    label: str
    unit: str | None = None


def parse_header(text: str) -> Header:
    """Return the label and unit of "Label [unit]" or "Label (unit)".

    Round brackets hold a unit only after a blank, so that "sigma(z)" stays one label. Whether
    what they hold is a unit at all, the caller must know.
    """
    text = " ".join(text.split())
    found = re.fullmatch(r"(.*?) ?\[([^\[\]]*)\]", text) or re.fullmatch(
        r"(.+?) \(((?:[^()]|\([^()]*\))*)\)", text
    )
    if not found or not found[1]:
        return Header(text)
    return Header(found[1], found[2].strip() or None)


class Logbook:
    """A workbook opened for reading, and the cells that are to be set when it is saved."""

    def __init__(self, package: Package) -> None:
        """Use `Logbook.open`."""
        self._package = package
        self._opened: dict[str, Sheet] = {}

    @classmethod
    def open(cls, path: Path) -> "Logbook":
        """Open an .xlsx; raise LogbookError with one sentence if it is not a sound one."""
        return cls(Package(Path(path)))

    @property
    def path(self) -> Path:
        """The file that was opened."""
        return self._package.path

    @property
    def sheet_names(self) -> list[str]:
        """The names of the worksheets, in the workbook's order."""
        return list(self._package.sheets)

    def sheet(self, name: str) -> "Sheet":
        """Return a worksheet; case and outer blanks of `name` do not count."""
        names = {known.casefold().strip(): known for known in self._package.sheets}
        known = name if name in self._package.sheets else names.get(name.casefold().strip())
        if known is None:
            raise LogbookError(
                f"{self.path} has no sheet {name!r}; {near_matches(name, self._package.sheets)}"
            )
        if known not in self._opened:
            self._opened[known] = Sheet(self._package, known)
        return self._opened[known]

    @cached_property
    def named_cells(self) -> dict[str, tuple[str, int, int]]:
        """The workbook-wide defined names that refer to one cell: name → sheet, row, column."""
        found: dict[str, tuple[str, int, int]] = {}
        for name, reference in self._package.global_names.items():
            sheet, mark, place = reference.removeprefix("=").rpartition("!")
            if sheet.startswith("'") and sheet.endswith("'"):
                sheet = sheet[1:-1].replace("''", "'")
            area = Area.parsed(place)
            if not mark or area is None or sheet not in self._package.sheets or ":" in place:
                continue
            found[name] = (sheet, area.first_row, area.first_column)
        return found

    @property
    def formulas_elsewhere(self) -> bool:
        """Whether any cell that is not being set holds a formula.

        Such a cell keeps the result stored before the edit until a spreadsheet program
        calculates the workbook again.
        """
        return any(self.sheet(name).formulas_unset for name in self.sheet_names)

    def save(self, path: Path, *, overwrite: bool = False) -> None:
        """Write the workbook with the cells set, whole or not at all; all else byte for byte.

        Raises LogbookError when `path` exists and `overwrite` is not asked, is read-only, is
        open in a spreadsheet program or was changed since it was opened.
        """
        replaced = {
            self._package.sheets[sheet.name]: sheet.edited_part()
            for sheet in self._opened.values()
            if sheet.is_edited
        }
        self._package.save(Path(path), replaced, overwrite=overwrite)


class Sheet:
    """One worksheet. Rows and columns are counted from 1, as the sheet's own row numbers are."""

    def __init__(self, package: Package, name: str) -> None:
        """Use `Logbook.sheet`."""
        self.name = name
        self._package = package
        part = package.sheets[name]
        self._part = SheetPart(package.part(part), package.path, part)
        self._edits: dict[int, dict[int, Value]] = {}

    @cached_property
    def rows(self) -> list[list[object]]:
        """The values as the file stores them: `rows[16][3]` is cell D17.

        float, str, bool, datetime, time, timedelta or ErrorValue; None for an empty cell and for
        one that holds only blanks. All rows are of one length. Cells set since are not in it.
        """
        height, width = self._part.last_row, self._part.last_column
        if height * width > MOST_CELLS:
            raise LogbookError(
                f"{self._package.path}: sheet {self.name!r} reaches to "
                f"{cell_name(height, width)}, more than the {MOST_CELLS:,} cells allowed"
            )
        try:
            with CalamineWorkbook.from_filelike(self._excerpt()) as workbook:
                read = workbook.get_sheet_by_index(0).to_python(skip_empty_area=False)
        except (CalamineError, OSError, ValueError) as error:
            raise LogbookError(
                f"{self._package.path}: sheet {self.name!r} cannot be read: {error}"
            ) from error
        rows: list[list[object]] = [[_plain(value) for value in row] for row in read]
        for row in rows:
            row.extend([None] * (width - len(row)))
        rows.extend([None] * width for _ in range(height - len(rows)))
        for (row_number, column), error_value in self._part.errors.items():
            rows[row_number - 1][column - 1] = error_value
        return rows

    def _excerpt(self) -> io.BytesIO:
        """Return a package of this sheet alone, made of checked parts under plain names.

        calamine opens it in place of the file, so that it meets neither a part that was not
        checked nor an unusual layout of parts.
        """
        package = self._package
        parts = {"worksheet": ("xl/worksheets/sheet1.xml", self._part.content)}
        for kind, name, source in (
            ("styles", "xl/styles.xml", package.styles_part),
            ("sharedStrings", "xl/sharedStrings.xml", package.strings_part),
        ):
            if source and package.has(source):
                content = package.part(source)
                layout = check_xml(content, package.path, source)
                # calamine reserves memory for as many strings as are promised; a false promise
                # would end the whole process.
                parts[kind] = (name, layout.without_counts(content))
        office = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
        links = "".join(
            f'<Relationship Id="r{number}" Type="{office}/{kind}" Target="/{name}"/>'
            for number, (kind, (name, _)) in enumerate(parts.items(), 1)
        )
        relations = "http://schemas.openxmlformats.org/package/2006/relationships"
        excerpt = io.BytesIO()
        with zipfile.ZipFile(excerpt, "w", zipfile.ZIP_STORED) as archive:
            archive.writestr(
                "[Content_Types].xml",
                '<Types xmlns="http://schemas.openxmlformats.org/package/2006/content-types"/>',
            )
            archive.writestr(
                "_rels/.rels",
                f'<Relationships xmlns="{relations}"><Relationship Id="r1" '
                f'Type="{office}/officeDocument" Target="xl/workbook.xml"/></Relationships>',
            )
            archive.writestr(
                "xl/workbook.xml",
                '<workbook xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main" '
                f'xmlns:r="{office}"><workbookPr date1904="{package.dates_from_1904:d}"/>'
                f'<sheets><sheet name={quoteattr(self.name)} sheetId="1" r:id="r1"/></sheets>'
                "</workbook>",
            )
            archive.writestr(
                "xl/_rels/workbook.xml.rels",
                f'<Relationships xmlns="{relations}">{links}</Relationships>',
            )
            for name, content in parts.values():
                archive.writestr(name, content)
        excerpt.seek(0)
        return excerpt

    def header_row(self, wanted: Callable[[str], bool]) -> int | None:
        """Return the row, among the first thirty, with the most texts that `wanted` accepts.

        The upper one of two that hold as many; None if there is no such text.
        """
        best, most = None, 0
        for number, row in enumerate(self.rows[:HEADER_ROWS], 1):
            count = sum(isinstance(value, str) and wanted(value) for value in row)
            if count > most:
                best, most = number, count
        return best

    @property
    def merged(self) -> list[Area]:
        """The merged cells; only the first cell of each holds a value."""
        return self._part.merged

    def has_formula(self, row: int, column: int) -> bool:
        """Say whether a cell holds a formula or belongs to an array formula."""
        return self._part.has_formula(row, column)

    def set(self, row: int, column: int, value: Value) -> None:
        """Note a value for a cell, to be written by `Logbook.save`; None empties the cell.

        A formula in the cell stays: the value takes the place of its stored result. Text stays
        text, whatever it begins with. Raises LogbookError for a number that is not finite.
        """
        if not (1 <= row <= LAST_ROW and 1 <= column <= LAST_COLUMN):
            raise LogbookError(
                f"row {row}, column {column} is outside a sheet: rows go from 1 to {LAST_ROW}, "
                f"columns from 1 to {LAST_COLUMN}"
            )
        # The common case, a finite float, needs no further look.
        if type(value) is not float or value - value != 0.0:
            check_value(value, f"cell {cell_name(row, column)} of sheet {self.name!r}")
        self._edits.setdefault(row, {})[column] = value

    def set_column(self, column: int, first_row: int, values: Iterable[Value]) -> None:
        """Note values for the cells of a column, from `first_row` downward."""
        for row, value in enumerate(values, first_row):
            self.set(row, column, value)

    @property
    def edits(self) -> Mapping[int, Mapping[int, Value]]:
        """The values noted so far: edits[row][column]."""
        return self._edits

    @property
    def is_edited(self) -> bool:
        """Whether any value was noted."""
        return bool(self._edits)

    @property
    def formulas_unset(self) -> bool:
        """Whether any cell of this sheet holds a formula and is not being set."""
        return self._part.formulas_outside(self._edits)

    def edited_part(self) -> bytes:
        """Return the sheet's XML with the noted values in place."""
        return self._part.edited(self._edits)


def _plain(value: object) -> object:
    if isinstance(value, str):
        return value if value and not value.isspace() else None
    # calamine gives a date-time that falls on midnight as a date; a column of times must not
    # change type there.
    if isinstance(value, date) and not isinstance(value, datetime):
        return datetime.combine(value, time())
    return value
