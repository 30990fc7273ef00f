"""What LibreOffice's own Python runs: hands a cell's call to the functions and the answer back.

It lies in the extension beside `functions.json`, which says what functions there are and where the
Python environment is that they are installed in. Where LibreOffice's Python can import them, they
run in this process; elsewhere a worker process of that environment answers over a pipe.

It must run under every Python that LibreOffice is shipped with (3.8 and later).
"""

from __future__ import annotations

import gc
import importlib
import json
import struct
import sys
from datetime import date
from pathlib import Path
from typing import TYPE_CHECKING, Any

import uno  # type: ignore[import-not-found]
import unohelper  # type: ignore[import-not-found]
from cellfuncs_emptiness import Emptiness  # type: ignore[import-not-found]
from cellfuncs_worker import Unanswered, Worker  # type: ignore[import-not-found]
from com.sun.star.document import XDocumentEventListener  # type: ignore[import-not-found]
from com.sun.star.lang import XLocalizable, XServiceInfo  # type: ignore[import-not-found]
from com.sun.star.util import XModifyListener  # type: ignore[import-not-found]

SETTINGS = json.loads(Path(__file__).with_name("functions.json").read_text(encoding="utf-8"))
ADD_IN = "com.sun.star.sheet.AddIn"

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator
    from typing import TypeAlias

    Answer: TypeAlias = Callable[[str, Any], Any]
    Table: TypeAlias = tuple[tuple[Any, ...], ...]

# Calc reads the low half of a NaN as the number of an error (its FormulaError).
CODES = {
    "#NULL!": 521,
    "#DIV/0!": 532,
    "#VALUE!": 519,
    "#REF!": 524,
    "#NAME?": 525,
    "#NUM!": 503,
    "#N/A": 32767,
}


def error_value(code: str) -> Any:
    number = CODES.get(code, CODES["#VALUE!"])
    return struct.unpack("<d", struct.pack("<Q", 0x7FF8000000000000 | number))[0]


ERROR_VALUES = {code: error_value(code) for code in CODES}


def in_this_process() -> Answer | None:
    """Return the function that answers if this Python can import it, None otherwise."""
    if list(sys.version_info[:2]) != SETTINGS["version"] or not SETTINGS["in_process"]:
        return None  # compiled modules of another version would not load
    before = sys.path[:]
    # at the end: what LibreOffice brings along comes first
    sys.path += [path for path in SETTINGS["paths"] if path not in sys.path]
    try:
        found: Answer = importlib.import_module(SETTINGS["module"]).answer
    except Exception:
        sys.path[:] = before
        return None
    return found


def answering() -> Answer:
    """Return what takes a function's name and its arguments and gives the answer."""
    answer = in_this_process()
    if answer is None:
        answer = Worker(SETTINGS["python"], SETTINGS["paths"], SETTINGS["module"]).answer
    return answer


answer: Answer | None = None


class Watcher(unohelper.Base, XModifyListener, XDocumentEventListener):  # type: ignore[misc]
    """Knows the open spreadsheets and hears when one changes, is opened or is closed.

    What is known of empty cells holds no longer then.
    """

    def __init__(self) -> None:
        self.watched: list[Any] = []
        self.models: Any = None

    def documents(self) -> Iterator[Any]:
        """Yield the open spreadsheets, hidden ones and those that are being loaded included."""
        if self.models is None:
            self.models = uno.getComponentContext().getValueByName(
                "/singletons/com.sun.star.frame.theGlobalEventBroadcaster"
            )
            self.models.addDocumentEventListener(self)
        each = self.models.createEnumeration()
        while each.hasMoreElements():
            document = each.nextElement()
            if document.supportsService("com.sun.star.sheet.SpreadsheetDocument"):
                if document not in self.watched:
                    document.addModifyListener(self)
                    self.watched.append(document)
                yield document

    def modified(self, event: Any) -> None:
        emptiness.forget()

    def documentEventOccured(self, event: Any) -> None:  # noqa: N802
        emptiness.forget()

    def disposing(self, event: Any) -> None:
        self.watched = [each for each in self.watched if each != event.Source]
        emptiness.forget()


emptiness = Emptiness(Watcher().documents, SETTINGS["identifier"] + ".")


def with_empty_cells(
    name: str,
    arguments: Any,
    words: frozenset[int],
    required: frozenset[int],
) -> Any:
    """Return the arguments with None for what is an empty cell rather than a 0.

    `words` are the positions of the arguments that are text: a 0 there is an empty cell, no text
    that anybody would write.
    """
    zeros = {position for position, value in enumerate(arguments) if value == 0.0}
    found = arguments
    if not zeros <= words:
        try:
            found = emptiness.without_empty(name, arguments, required)
        except Exception:
            emptiness.forget()
    return tuple(
        None if position in words and position in zeros else value
        for position, value in enumerate(found)
    )


DAY_ONE = date(1899, 12, 30)
"""From which the functions take a number for a date"""
DATES_BELOW = 1_000_000.0
"""A number above it is a Julian date, which no document counts otherwise"""


def with_dates(arguments: Any, moments: frozenset[int], document: Any) -> tuple[Any, ...]:
    """Return the arguments with dates as counted from 1899-12-30, whichever day the document has.

    A spreadsheet brought from an old Macintosh counts from 1904.
    """
    counted_from = document.getPropertyValue("NullDate")
    first = date(counted_from.Year, counted_from.Month, counted_from.Day)
    days = (first - DAY_ONE).days
    if not days:
        return tuple(arguments)

    def moved(value: Any) -> Any:
        if isinstance(value, tuple):
            return tuple(moved(each) for each in value)
        return value + days if type(value) is float and value < DATES_BELOW else value

    return tuple(
        moved(value) if position in moments else value for position, value in enumerate(arguments)
    )


def called(
    name: str,
    moments: frozenset[int],
    words: frozenset[int],
    required: frozenset[int],
) -> Callable[..., Table]:
    """Return the method that a cell's call of that function reaches."""

    def method(self: Any, *arguments: Any) -> Table:
        global answer
        document = None
        if moments:
            document, *arguments = arguments  # type: ignore[assignment]
        if answer is None:
            answer = answering()
            # or each array formula has the collector look through all that was imported
            gc.freeze()
        if 0.0 in arguments:
            arguments = with_empty_cells(name, arguments, words, required)
        if document is not None:
            arguments = with_dates(arguments, moments, document)
        try:
            result = answer(name, arguments)
        except Unanswered:
            result = ERROR_VALUES["#VALUE!"]
        kind = type(result)
        if kind is float or kind is str:
            return ((result,),)
        if kind is list:
            # lists inside: over 20 000 rows a generator in each would take twice as long
            return tuple(
                [
                    tuple(
                        [
                            value if type(value) is float or type(value) is str else shown(value)
                            for value in row
                        ]
                    )
                    for row in result
                ]
            )
        return ((shown(result),),)

    return method


def shown(value: Any) -> float:
    """Return an error or another number as a cell takes it."""
    code = getattr(value, "code", None)
    return float(value) if code is None else ERROR_VALUES.get(code, ERROR_VALUES["#VALUE!"])


class Functions(unohelper.Base, XLocalizable, XServiceInfo):  # type: ignore[misc]
    """The add-in: one method a function, put on below."""

    def __init__(self, context: Any) -> None:
        self.locale = uno.createUnoStruct("com.sun.star.lang.Locale")

    def getTypes(self) -> Any:  # noqa: N802
        # while the extension is being installed its own types are not known yet
        return (*super().getTypes(), uno.getTypeByName(SETTINGS["interface"]))

    def getImplementationName(self) -> Any:  # noqa: N802
        return SETTINGS["identifier"]

    def getSupportedServiceNames(self) -> tuple[str, ...]:  # noqa: N802
        return (ADD_IN, SETTINGS["identifier"])

    def supportsService(self, name: str) -> bool:  # noqa: N802
        return name in self.getSupportedServiceNames()

    def setLocale(self, locale: Any) -> None:  # noqa: N802
        self.locale = locale

    def getLocale(self) -> Any:  # noqa: N802
        return self.locale


for each in SETTINGS["functions"]:
    setattr(
        Functions,
        each["name"],
        called(
            each["name"],
            frozenset(each["moments"]),
            frozenset(each["words"]),
            frozenset(each["required"]),
        ),
    )

g_ImplementationHelper = unohelper.ImplementationHelper()  # noqa: N816 - pyuno looks for it
g_ImplementationHelper.addImplementation(Functions, SETTINGS["identifier"], (ADD_IN,))
