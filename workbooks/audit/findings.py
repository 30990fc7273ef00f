"""What `check` finds: where, of which kind, and in which words."""

from collections import defaultdict
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

from cellfuncs.catalogue import shown
from workbooks.files.cells import cell_name

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


Spot = tuple[int, int, str, str]
"""Row, column, kind and sentence of what was found in one cell"""


def in_runs(sheet: str, found: Sequence[Spot]) -> list[Finding]:
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


def quoted(value: Any) -> str:
    """Return what a cell holds, as a sentence quotes it."""
    if isinstance(value, str):
        return f"«{value if len(value) <= 60 else f'{value[:57]}...'}»"
    return shown(value)
