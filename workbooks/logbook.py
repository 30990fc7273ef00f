"""A logbook as sheets of named, unit-labelled columns, whatever the format of its file."""

import re
from abc import ABC, abstractmethod
from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import Final

from cellfuncs.errors import near_matches
from workbooks.files.cells import Area, ErrorValue, LogbookError, Value, cell_name
from workbooks.files.sheet import HEADER_ROWS, Sheet

__all__ = [
    "FORMATS",
    "HEADER_ROWS",
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


class Logbook(ABC):
    """A logbook opened for reading, and the cells that are to be set when it is saved."""

    def __init__(self, path: Path) -> None:
        """Use `Logbook.open`."""
        self.path = path
        """The file that was opened"""
        self._opened: dict[str, Sheet] = {}

    @classmethod
    def open(cls, path: Path) -> "Logbook":
        """Open a logbook; raise LogbookError with one sentence if it is not a sound one.

        The suffix says the format; a file without one that is known is taken for an .xlsx.
        """
        path = Path(path)
        return FORMATS.get(path.suffix.lower(), _xlsx)(path)

    @property
    @abstractmethod
    def sheet_names(self) -> list[str]:
        """The names of the sheets that hold cells, in the logbook's order."""

    @abstractmethod
    def _open_sheet(self, name: str) -> Sheet:
        """Return a sheet by its exact name."""

    @property
    def named_cells(self) -> dict[str, tuple[str, int, int]]:
        """The workbook-wide defined names that refer to one cell: name → sheet, row, column."""
        return {}

    @abstractmethod
    def save(self, path: Path, *, overwrite: bool = False, backup: bool = False) -> None:
        """Write the logbook with the cells set, whole or not at all; all else byte for byte.

        backup: keep the file that is replaced, if it is the one that was opened
        Raises LogbookError when `path` exists and `overwrite` is not asked, is read-only, is
        open in a spreadsheet program or was changed since it was opened.
        """

    def sheet(self, name: str) -> Sheet:
        """Return a sheet; case and outer blanks of `name` do not count."""
        known = self.sheet_names
        if name not in known:
            folded = {each.casefold().strip(): each for each in known}
            given, name = name, folded.get(name.casefold().strip(), "")
            if not name:
                raise LogbookError(
                    f"{self.path} has no sheet {given!r}; {near_matches(given, known)}"
                )
        if name not in self._opened:
            self._opened[name] = self._open_sheet(name)
        return self._opened[name]

    @property
    def formulas_elsewhere(self) -> bool:
        """Whether any cell that is not being set holds a formula.

        Such a cell keeps the result stored before the edit until a spreadsheet program
        calculates the workbook again.
        """
        return any(self.sheet(name).formulas_unset for name in self.sheet_names)


# Each format is imported when a file of it is opened: a command that opens none should not wait.


def _xlsx(path: Path) -> Logbook:
    from workbooks.files.xlsx import XlsxLogbook

    return XlsxLogbook(path)


def _csv(path: Path) -> Logbook:
    from workbooks.files.delimited import DelimitedLogbook

    return DelimitedLogbook(path)


def _tsv(path: Path) -> Logbook:
    from workbooks.files.delimited import DelimitedLogbook

    return DelimitedLogbook(path, "\t")


def _ecsv(path: Path) -> Logbook:
    from workbooks.files.ecsv import EcsvLogbook

    return EcsvLogbook(path)


def _ods(path: Path) -> Logbook:
    from workbooks.files.opendocument import OdsLogbook

    return OdsLogbook(path)


FORMATS: Final[dict[str, Callable[[Path], Logbook]]] = {
    ".xlsx": _xlsx,
    ".xlsm": _xlsx,
    ".ods": _ods,
    ".csv": _csv,
    ".tsv": _tsv,
    ".ecsv": _ecsv,
}
"""What opens a logbook, by its file's suffix"""
