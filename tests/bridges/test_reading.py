"""Times and angles that plain formulas read, against the Python readers, in three spreadsheets.

Outside: LibreOffice Calc, formualizer and IronCalc (see recalculate.py) evaluate the formulas;
physics/test_times.py and physics/test_angles.py hold the Python readers to astropy and the IERS.
Whatever a formula makes of a text, it is what Python makes of it, or an error.
"""

import random
from collections.abc import Callable
from dataclasses import dataclass
from datetime import datetime, timedelta
from functools import cache, partial
from math import isclose
from pathlib import Path
from typing import Any

import pytest
from openpyxl import Workbook
from openpyxl.utils import get_column_letter
from openpyxl.utils.datetime import CALENDAR_MAC_1904
from recalculate import ENGINES, ErrorCell, Value, recalculated

from cellfuncs.bridges.formula import LONGEST
from cellfuncs.bridges.reading import angle, moment
from cellfuncs.errors import CellError
from cellfuncs.physics.angles import degrees
from cellfuncs.physics.times import day_lengths, utc_parts

every_engine = pytest.mark.parametrize("engine", ENGINES)

Pieces = Callable[[str, Callable[[str], str]], dict[str, str]]


@dataclass(frozen=True)
class Row:
    """What a formula's row shows: its last pieces, and what Python has for the same cell."""

    cell: Any
    shown: tuple[Value, ...]
    expected: tuple[float, ...] | str

    @property
    def is_error(self) -> bool:
        return any(isinstance(each, ErrorCell) for each in self.shown)

    def agrees(self) -> bool:
        if isinstance(self.expected, str):
            return self.is_error and self.shown[-1] == ErrorCell(self.expected)
        return self.is_number()

    def is_number(self) -> bool:
        """Tell whether it shows Python's number, to 1e-12 of it (of a day, for a fraction)."""
        if isinstance(self.expected, str) or self.is_error:
            return False
        shown = [float(each) for each in self.shown]  # type: ignore[arg-type]
        if len(shown) == 2:
            # a moment a hair before midnight may be one after it
            days, fractions = (a - b for a, b in zip(shown, self.expected, strict=True))
            return abs(days + fractions) < 1e-12
        return isclose(shown[0], self.expected[0], rel_tol=1e-12, abs_tol=1e-13)


def rows(
    path: Path,
    engine: str,
    cells: list[Any],
    pieces: Pieces,
    python: Callable[[Any], tuple[float, ...]],
    epoch: datetime | None = None,
) -> list[Row]:
    """Write one input a row with its pieces beside it, and return what the engine shows."""
    book = Workbook()
    if epoch is not None:
        book.epoch = epoch
    sheet = book.active
    assert sheet is not None
    names = list(pieces("A1", str))
    column = {name: get_column_letter(2 + index) for index, name in enumerate(names)}
    for row, cell in enumerate(cells, 1):
        written = sheet.cell(row, 1, cell)
        if isinstance(cell, str):
            written.data_type = "s"
        made = pieces(f"$A{row}", lambda name, row=row: f"${column[name]}{row}")  # type: ignore[misc]
        for name, formula in made.items():
            assert len(formula) < LONGEST
            sheet[f"{column[name]}{row}"] = formula
    book.save(path)
    values = recalculated(path, engine)[sheet.title]
    found = []
    for row, cell in enumerate(cells, 1):
        try:
            expected: tuple[float, ...] | str = python(cell)
        except CellError as error:
            expected = error.shown
        last = names[-2:] if names[-1] == "utc_fraction" else names[-1:]
        found.append(Row(cell, tuple(values[f"{column[name]}{row}"] for name in last), expected))
    return found


def moment_rows(path: Path, engine: str, cells: list[Any], **options: Any) -> list[Row]:
    return rows(path, engine, cells, moment, utc_parts, **options)


def angle_rows(path: Path, engine: str, cells: list[Any], as_hours: bool) -> list[Row]:
    return rows(
        path,
        engine,
        cells,
        partial(angle, as_hours=as_hours),
        lambda cell: (degrees(cell, as_hours),),
    )


@cache
def moment_texts() -> list[str]:
    draw = random.Random(1)
    leap_days = [datetime(2000, 1, 1) + timedelta(days=day - 2451544.5) for day in day_lengths()]
    texts = []
    for _ in range(400):
        when = datetime(1961, 1, 1) + timedelta(days=draw.uniform(0, 50600))
        if draw.random() < 0.2:
            when = draw.choice(leap_days) + timedelta(hours=draw.uniform(0, 24))
        text = f"{when:%Y-%m-%d}"
        if draw.random() < 0.9:
            text += draw.choice(["T", " ", "t"]) + f"{when:%H:%M}"
            if draw.random() < 0.8:
                text += f"{when:%S}".join([":", ""])
                if draw.random() < 0.6:
                    digits = "".join(draw.choices("0123456789", k=draw.randint(1, 24)))
                    text += draw.choice(".,") + digits
            if draw.random() < 0.5:
                hours, minutes = draw.randint(0, 11), draw.choice([0, 15, 30, 45])
                text += draw.choice(["", " "]) + draw.choice("+-−") + f"{hours:02}:{minutes:02}"
        if draw.random() < 0.2 and "+" not in text and text[-6:-5] not in "-−":
            text += draw.choice(["Z", " Z", " UTC", "z"])
        texts.append(draw.choice(["", " "]) + text)
    return texts


@cache
def angle_texts() -> list[str]:
    draw = random.Random(2)
    texts = []
    for _ in range(400):
        in_hours = draw.random() < 0.4
        sign = "" if in_hours else draw.choice(["", "", "+", "-", "−", "–", "- "])
        fields = [
            f"{draw.randint(0, 23 if in_hours else 359):0{draw.randint(1, 3)}}",
            f"{draw.randint(0, 59):02}",
            f"{draw.randint(0, 59):02}",
        ][: draw.randint(1, 3)]
        if draw.random() < 0.7:
            digits = "".join(draw.choices("0123456789", k=draw.randint(1, 20)))
            fields[-1] += draw.choice("...,") + digits
        first, *others = draw.choice(
            [("h", "m", "s"), ("ʰ", "ᵐ", "ˢ"), ("H", "M", "s"), ("h", "'", '"')]
            if in_hours
            else [
                *(
                    ("d", "m", "s"),
                    ("°", "'", '"'),
                    ("°", "′", "″"),
                    ("°", "’", "”"),
                    ("º", "′", "′′"),
                ),
                *((":", ":", ""), (" ", " ", ""), (" : ", ": ", ""), ("d ", " ", "")),
            ]
        )
        marks = [first, *others]
        if len(fields) == 1 and not first.strip(": "):
            marks[0] = ""
        if first.strip(": ") == "" and len(fields) > 1:
            marks[len(fields) - 1] = ""
        blank = draw.choice(["", "", " "])
        texts.append(sign + "".join(a + b + blank for a, b in zip(fields, marks, strict=False)))
    return texts


def garbled(texts: list[str], seed: int) -> list[str]:
    """Return texts with letters left out, put in or exchanged."""
    draw = random.Random(seed)
    letters = "0123456789 :.,-+−TZhdms°'\"′ESW/%e\u00a0"
    found = []
    for text in texts:
        changed = list(text)
        for _ in range(draw.randint(1, 2)):
            place = draw.randrange(len(changed) + 1)
            changed[place : place + draw.randint(0, 1)] = draw.choices(
                letters, k=draw.randint(0, 1)
            )
        found.append("".join(changed) or "x")
    return found


@every_engine
def test_moments_in_known_spellings(tmp_path: Path, engine: str) -> None:
    found = moment_rows(tmp_path / "moments.xlsx", engine, moment_texts())
    assert [row for row in found if not row.is_number()] == []


@every_engine
def test_angles_in_known_spellings(tmp_path: Path, engine: str) -> None:
    for as_hours in (False, True):
        found = angle_rows(tmp_path / "angles.xlsx", engine, angle_texts(), as_hours)
        assert [row for row in found if not row.agrees()] == []
        assert sum(row.is_number() for row in found) > 200


@every_engine
def test_garbled_text_is_never_another_number(tmp_path: Path, engine: str) -> None:
    found = moment_rows(tmp_path / "moments.xlsx", engine, garbled(moment_texts(), 3))
    for as_hours in (False, True):
        found += angle_rows(tmp_path / "angles.xlsx", engine, garbled(angle_texts(), 4), as_hours)
    assert [row for row in found if not row.is_error and not row.is_number()] == []
    assert sum(row.is_error for row in found) > 500


MOMENTS: list[Any] = [
    *("2024-06-31", "2023-02-29", "2024-02-29", "2024-13-01", "2024-00-10", "2024-03-00"),
    *("2024-03-01T25:00", "2024-03-01T24:00", "2024-03-01T24:00:01", "2024-03-01T22:60"),
    *("2024-03-01T22:14:60", "2016-12-31T23:59:60.5", "2017-01-01T05:29:60+05:30"),
    *("1963-10-31T23:59:60.05", "1963-10-31T23:59:60.15", "1961-07-31T23:59:59.97"),
    *("1959-12-31", "1960-01-01", "2099-12-31T23:59:59", "2100-01-01", "1850-05-05"),
    *("1960-01-01T00:30+02:00", "1959-12-31T23:30-02:00", "2099-12-31T23:30-01:00"),
    *("2024-03-01T22:14+14:00", "2024-03-01T22:14+14:30", "2024-03-01T22:14-12:30"),
    *("03/04/2024", "hello", "22:14", "45352.5", "2024-03-01T22:-1:30", "2024-03-01T22:1E:30"),
    *("2024-03-0122:14", "2024-03-01T22:14:30.", "2024-03-01T22:14:30.5e1", "2024-03-01 UTC"),
    *(45352.5, 42735.75, 60000.123, 21915.0, 73051.0, 100.0, -5.0, True, False),
    *(2460000.25, 2457754.25, 2436934.4, 2488069.5, 1e7, 20240301),
]


@every_engine
def test_moments_at_their_limits(tmp_path: Path, engine: str) -> None:
    found = moment_rows(tmp_path / "moments.xlsx", engine, MOMENTS)
    assert [row for row in found if not row.agrees()] == []


@every_engine
@pytest.mark.parametrize("as_hours", [False, True])
def test_angles_at_their_limits(tmp_path: Path, engine: str, as_hours: bool) -> None:
    cells: list[Any] = [
        *(
            "-00 30 00",
            "360 00 00",
            "360 00 01",
            "-360",
            "24:00:00",
            "23:59:59.999999",
            "25h",
            "-1h",
        ),
        *("12 60 00", "12 00 60", "12 59 59.9999", "12.5 30", "12 34.5 56", "12::34", "12:", ":12"),
        *(
            "12 34 56 78",
            "12,34,56",
            "12 34m",
            "12m",
            "12h34s",
            "12 34 56s",
            "abc",
            "1e2",
            ".5",
            "12.",
        ),
        *(
            "70d24m10S",
            "1012",
            "0010",
            "1/2",
            "$12",
            "12%",
            "187.5",
            "187.5d",
            "12.5h",
            "h",
            "-",
            "+ 5d",
        ),
        *(187.5, -360.0, 361.0, 0.2, True),
    ]
    found = angle_rows(tmp_path / "angles.xlsx", engine, cells, as_hours)
    assert [row for row in found if not row.agrees()] == []


@every_engine
def test_an_empty_cell_is_a_missing_input(tmp_path: Path, engine: str) -> None:
    found = moment_rows(tmp_path / "moments.xlsx", engine, [None, "  ", "2024-03-01"])
    found += angle_rows(tmp_path / "angles.xlsx", engine, [None, "  ", "12h"], True)
    for row in found:
        assert row.is_number() or set(row.shown) == {ErrorCell("#N/A")}


@pytest.mark.parametrize("epoch", [None, CALENDAR_MAC_1904])
def test_date_cells_in_both_date_systems(tmp_path: Path, epoch: datetime | None) -> None:
    draw = random.Random(5)
    cells = [
        datetime(1960, 1, 1) + timedelta(seconds=draw.randrange(139 * 365 * 86400))
        for _ in range(200)
    ]
    found = moment_rows(tmp_path / "dates.xlsx", "libreoffice", [*cells, 2460000.25], epoch=epoch)
    for row in found:
        days, fractions = (a - b for a, b in zip(row.shown, row.expected, strict=True))  # type: ignore[operator, arg-type]
        # a serial in a file has 0.6 µs
        assert abs(days + fractions) * 86400 < 1e-6, row


def test_a_workbook_without_leap_seconds_is_the_shorter() -> None:
    every = moment("$A1", str)
    none = moment("$A1", str, {})
    assert none["utc_length"] == "=86400"
    assert {name for name in every if every[name] != none[name]} == {"utc_length"}
