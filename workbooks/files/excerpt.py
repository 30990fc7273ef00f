"""The values of some rows of an .xlsx, read by calamine from checked parts alone."""

import io
import zipfile
from dataclasses import dataclass
from typing import Any

from python_calamine import CalamineError, CalamineSheet, CalamineWorkbook

from workbooks.files.cells import LogbookError
from workbooks.files.package import Package
from workbooks.files.worksheet import Stretch
from workbooks.files.xml_check import check_xml

_OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
_RELATIONS = "http://schemas.openxmlformats.org/package/2006/relationships"


@dataclass(frozen=True, slots=True)
class Block:
    """A rectangle of values: the row and column of its first cell, and its rows."""

    first_row: int
    first_column: int
    rows: list[list[Any]]


class Excerpts:
    """Makes packages of a few rows alone, out of checked parts under plain names.

    calamine opens them in place of the file, so that it meets neither a part that was not checked
    nor an unusual layout of parts, and never lays out more than a few rows at once.
    """

    def __init__(self, package: Package) -> None:
        self._where = str(package.path)
        self._parts: dict[str, bytes] = {}
        kinds = {"worksheet": "xl/worksheets/sheet1.xml"}
        for kind, name, source in (
            ("styles", "xl/styles.xml", package.styles_part),
            ("sharedStrings", "xl/sharedStrings.xml", package.strings_part),
        ):
            if source and package.has(source):
                content = package.part(source)
                layout = check_xml(content, package.path, source)
                # calamine reserves memory for as many strings as are promised; a false promise
                # would end the whole process.
                self._parts[name] = layout.without_counts(content)
                kinds[kind] = name
        links = "".join(
            f'<Relationship Id="r{number}" Type="{_OFFICE}/{kind}" Target="/{name}"/>'
            for number, (kind, name) in enumerate(kinds.items(), 1)
        )
        self._parts |= {
            "[Content_Types].xml": b"<Types "
            b'xmlns="http://schemas.openxmlformats.org/package/2006/content-types"/>',
            "_rels/.rels": (
                f'<Relationships xmlns="{_RELATIONS}"><Relationship Id="r1" '
                f'Type="{_OFFICE}/officeDocument" Target="xl/workbook.xml"/></Relationships>'
            ).encode(),
            "xl/workbook.xml": (
                '<workbook xmlns="http://schemas.openxmlformats.org/spreadsheetml/2006/main" '
                f'xmlns:r="{_OFFICE}"><workbookPr date1904="{package.dates_from_1904:d}"/>'
                '<sheets><sheet name="rows" sheetId="1" r:id="r1"/></sheets></workbook>'
            ).encode(),
            "xl/_rels/workbook.xml.rels": (
                f'<Relationships xmlns="{_RELATIONS}">{links}</Relationships>'
            ).encode(),
        }

    def opened(self, stretch: Stretch) -> CalamineSheet:
        """Return some rows as calamine has read them; other threads run meanwhile."""
        package = io.BytesIO()
        with zipfile.ZipFile(package, "w", zipfile.ZIP_STORED) as archive:
            for name, content in self._parts.items():
                archive.writestr(name, content)
            archive.writestr("xl/worksheets/sheet1.xml", stretch.content)
        package.seek(0)
        rows = f"rows {stretch.first_row} to {stretch.last_row}"
        try:
            with CalamineWorkbook.from_filelike(package) as workbook:
                return workbook.get_sheet_by_index(0)
        except (CalamineError, OSError, ValueError) as error:
            raise LogbookError(f"{self._where}: {rows} cannot be read: {error}") from error
        except BaseException as error:
            if type(error).__name__ == "PanicException":
                raise LogbookError(f"{self._where}: {rows} cannot be read") from error
            raise

    @staticmethod
    def block(sheet: CalamineSheet) -> Block:
        """Return the values; an empty cell is "", an error too."""
        if sheet.start is None:
            return Block(1, 1, [])
        row, column = sheet.start
        return Block(row + 1, column + 1, sheet.to_python(skip_empty_area=True))
