"""The hidden sheets with which plain formulas follow the Earth: a season table, working columns."""

from dataclasses import dataclass
from datetime import date, timedelta
from typing import Final

from cellfuncs.bridges.steps import Steps
from cellfuncs.errors import CellError
from cellfuncs.physics import earth, times
from workbooks.recipe import RecipeError
from workbooks.template.sheets import HEADER_ROW, Book, put_named

LONGEST: Final = 40 * 366
"""Days that a season table may have"""


@dataclass(frozen=True)
class Season:
    """The dates through which a workbook's plain formulas follow the Earth, the last included."""

    first: date
    last: date

    @classmethod
    def from_today(cls, today: date) -> "Season":
        """Return two years from a date on."""
        return cls(today, today + timedelta(days=730))

    @classmethod
    def between(cls, first: str | None, last: str | None, today: date) -> "Season | None":
        """Return the dates that a person asked for, None where none was; two years where one was.

        Raises RecipeError for what is no date of 1960 to 2099 and for an end before the beginning.
        """
        if first is None and last is None:
            return None
        start = _date("--from", first) if first else today
        end = _date("--to", last) if last else cls.from_today(start).last
        if not 0 <= (end - start).days <= LONGEST:
            raise RecipeError(
                f"from {start} to {end} are no dates for a workbook: the end must follow the "
                f"beginning by at most {LONGEST // 366} years"
            )
        return cls(start, end)

    @property
    def outside(self) -> str:
        return f"outside this workbook's dates, {self.first} to {self.last}"


def _date(option: str, text: str) -> date:
    try:
        day, _ = times.utc_parts(text, option)
    except CellError as error:
        raise RecipeError(str(error)) from None
    return date.fromordinal(int(day - times.ORDINAL_DAY))


def season_sheet(book: Book, season: Season) -> None:
    sheet = book.sheet("Season")
    sheet.sheet_state = "hidden"
    first = season.first.toordinal() - date(2000, 1, 1).toordinal()
    end = season.last.toordinal() - date(2000, 1, 1).toordinal() + 1
    put_named(book, sheet, 1, "season_first", [first])
    put_named(book, sheet, 2, "season_last", [end])
    for place, (key, values) in enumerate(earth.season(first, end).items(), 3):
        put_named(book, sheet, place, f"season_{key}", values.tolist())


def working_sheet(book: Book, title: str, steps: Steps, rows: range, row_mark: str) -> None:
    """Add the sheet of a table's working columns, row beside row."""
    sheet = book.sheet(title)
    sheet.sheet_state = "hidden"
    for place, (words, formula) in enumerate(zip(steps.words, steps.formulas, strict=True), 1):
        # no sheet of a log may be taken for it
        sheet.cell(HEADER_ROW, place, f"working: {words}")
        for row in rows:
            sheet.cell(row, place, formula.replace(row_mark, str(row)))
