"""A cell and a row of an .ods (OASIS ODF 1.3, part 3)."""

import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime, time, timedelta
from typing import Any, Final

from workbooks.files.cells import ErrorValue

_ODF = "urn:oasis:names:tc:opendocument:xmlns"
TABLE: Final = f"{_ODF}:table:1.0"
OFFICE: Final = f"{_ODF}:office:1.0"
TEXT: Final = f"{_ODF}:text:1.0"
FORMULA: Final = f"{_ODF}:of:1.2"
CALC: Final = "urn:org:documentfoundation:names:experimental:calc:xmlns:calcext:1.0"

CELLS: Final = (f"{TABLE} table-cell", f"{TABLE} covered-table-cell")
FORMULA_TEXT: Final = f"{TABLE} formula"
VALUE_TYPE: Final = f"{OFFICE} value-type"
ROWS_REPEATED: Final = f"{TABLE} number-rows-repeated"
COLUMNS_REPEATED: Final = f"{TABLE} number-columns-repeated"
ROWS_SPANNED: Final = f"{TABLE} number-rows-spanned"
COLUMNS_SPANNED: Final = f"{TABLE} number-columns-spanned"

ERROR_CONSTANT: Final = re.compile(r"of:=(#[A-Z0-9/]+[!?]?)\Z")
"""An error that was not computed can only be written as a formula that names it"""

_DURATION = re.compile(r"(-?)P(?:(\d+)D)?T(?:(\d+)H)?(?:(\d+)M)?(?:(\d+(?:\.\d+)?)S)?\Z")


@dataclass(slots=True)
class Cell:
    """A cell of the file, which may stand for several beside one another."""

    column: int
    repeated: int
    start: int
    """Where its tag begins in the file's bytes; `end` is where its end tag, if any, begins"""
    attributes: Mapping[str, str]
    end: int = 0
    paragraphs: list[list[int]] = field(default_factory=list)
    """Where each of its own paragraphs begins and ends"""
    texts: list[str] = field(default_factory=list)
    annotation: tuple[int, int] | None = None
    """Where its comment, if any, begins and where that one's end tag does"""

    @property
    def has_formula(self) -> bool:
        formula = self.attributes.get(FORMULA_TEXT)
        return formula is not None and not ERROR_CONSTANT.match(formula)

    def value(self) -> Any:
        """Return what the cell holds."""
        given = self.attributes
        kind = given.get(VALUE_TYPE)
        text = "\n".join(self.texts)
        if given.get(f"{CALC} value-type") == "error" and text:
            return _error(text)
        try:
            match kind:
                case None:
                    return None
                case "float" | "percentage" | "currency":
                    return float(given[f"{OFFICE} value"])
                case "boolean":
                    return given[f"{OFFICE} boolean-value"] == "true"
                case "date":
                    moment = datetime.fromisoformat(given[f"{OFFICE} date-value"])
                    return moment.replace(tzinfo=None)
                case "time":
                    return _duration(given[f"{OFFICE} time-value"])
        except (KeyError, ValueError, OverflowError):
            return text or None
        return given.get(f"{OFFICE} string-value") or text or None


@dataclass(slots=True)
class TableRow:
    """A row of the file, which may stand for several one under another."""

    number: int
    repeated: int
    start: int
    cells: list[Cell] = field(default_factory=list)
    end: int = 0
    """Where its end tag, if any, begins"""

    def cells_from(self, column: int) -> list[Cell]:
        """Return its cells from the one that stands for a column onward."""
        return [cell for cell in self.cells if cell.column + cell.repeated > column]


def _error(text: str) -> ErrorValue:
    try:
        return ErrorValue(text)
    except ValueError:
        # such as Err:502, LibreOffice's own
        return ErrorValue(f"#{re.sub('[^A-Z0-9]', '', text.upper())[:20] or 'ERROR'}!")


def _duration(text: str) -> time | timedelta:
    found = _DURATION.match(text)
    if not found:
        raise ValueError(text)
    days, hours, minutes = (int(part or 0) for part in found.group(2, 3, 4))
    length = timedelta(days=days, hours=hours, minutes=minutes, seconds=float(found[5] or 0))
    if found[1] or length >= timedelta(days=1):
        return -length if found[1] else length
    return (datetime.min + length).time()
