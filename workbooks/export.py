"""A logbook's table taken out of the spreadsheet, with its units, into an archive's format."""

import re
import unicodedata
import warnings
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from datetime import UTC, date, datetime, time, timedelta
from io import BytesIO, StringIO
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING, Any, Final

import numpy as np

from cellfuncs import units
from cellfuncs.catalogue import shown
from cellfuncs.families.workbook import provenance
from workbooks.fill import COMPUTED_WITH, recipe_of, settings_of
from workbooks.headings import Heading, Log, logs_of, value_at
from workbooks.logbook import ErrorValue, Logbook, LogbookError
from workbooks.matching import Remark, folded
from workbooks.recipe import Recipe
from workbooks.saving import check_target, write_whole
from workbooks.settings import PROVENANCE_CELLS

if TYPE_CHECKING:
    from astropy.table import Table as AstropyTable

J2000: Final = datetime(2000, 1, 1, 12)
J2000_JD: Final = 2_451_545.0
"""The Julian date of that noon"""

LEAST_JULIAN_DATE: Final = 1_000_000.0
"""A number in a column of times is a Julian date from here on (the contract of the functions)"""

TIME_SCALE_KEY: Final = "TIMESYS"
"""The keyword of FITS, used in the other formats too"""

UTC_SCALE: Final = "UTC"

SAYS_UTC: Final = re.compile(r"(?i)\b(ut|utc|ut1)\b")


@dataclass
class ExportReport:
    """What became of a table."""

    logbook: str
    sheet: str
    recipe: str
    output: str
    rows: int = 0
    columns: int = 0
    notes: list[str] = field(default_factory=list)
    problems: list[Remark] = field(default_factory=list)
    """Cells whose value could not go into their column: missing in the output"""

    @property
    def has_problems(self) -> bool:
        return bool(self.problems)


@dataclass
class Exported:
    """A column on its way out: float64, bool or text, with what is missing marked."""

    name: str
    label: str
    unit: str
    description: str
    ucd: str
    values: Any
    missing: Any
    time_format: str = ""
    """"iso" or "jd" in a column of times"""
    time_scale: str = ""
    """UTC where the sheet or the recipe says so"""


@dataclass(frozen=True)
class Format:
    """A way of writing: what it is called, and its file's bytes from columns and metadata"""

    name: str
    suffixes: tuple[str, ...]
    written: Callable[[list[Exported], Mapping[str, str], list[str]], bytes]


def export(
    path: Path,
    output: Path,
    recipe: Recipe | None = None,
    *,
    sheet: str | None = None,
    dates: str = "iso",
    overwrite: bool = False,
    now: datetime | None = None,
) -> ExportReport:
    """Write a sheet's table to `output` in the format that its suffix names, whole or not at all.

    path: the logbook
    recipe: left out, the one that the logbook was made from, if any
    sheet: the sheet's name; may be left out where only one holds a table
    dates: "iso" for ISO 8601 text, "jd" for Julian dates
    overwrite: whether `output` may exist
    Raises LogbookError where the file cannot be read, has no such sheet, or cannot be written.
    """
    chosen = format_of(output)
    if output.resolve() == path.resolve():
        raise LogbookError(f"{output} is the logbook itself; name another file")
    check_target(output, overwrite=overwrite)
    logbook = Logbook.open(path)
    if recipe is None and "recipe_name" in logbook.named_cells:
        recipe = recipe_of(logbook)
    log = _chosen(logbook, recipe, sheet)
    report = ExportReport(str(path), log.sheet.name, recipe.name if recipe else "", str(output))
    columns = _Reader(log, dates, report).columns()
    report.rows = len(columns[0].values)
    report.columns = len(columns)
    metadata = _metadata(logbook, log, recipe, columns, now or datetime.now(UTC))
    write_whole(output, chosen.written(columns, metadata, report.notes), overwrite=overwrite)
    return report


def format_of(output: Path) -> Format:
    """Return the format that a file's suffix names; LogbookError names those there are."""
    for each in FORMATS:
        if output.suffix.lower() in each.suffixes:
            return each
    known = ", ".join(f"{each.suffixes[0]} ({each.name})" for each in FORMATS)
    raise LogbookError(f"{output}: the suffix says no format to write; {known}")


def _chosen(logbook: Logbook, recipe: Recipe | None, name: str | None) -> Log:
    logs = logs_of(logbook, recipe)
    if name is not None:
        wanted = logbook.sheet(name)
        for log in logs:
            if log.sheet is wanted:
                return log
        raise LogbookError(f"{logbook.path}: sheet {wanted.name!r} holds no table with headers")
    fitting = [log for log in logs if log.match is not None] if recipe else logs
    if len(fitting) == 1:
        return fitting[0]
    if not fitting:
        why = next((f": {log.sheet.name}: {log.obstacle}" for log in logs if log.obstacle), "")
        what = f"the columns of the recipe {recipe.name!r}" if recipe else "a table with headers"
        raise LogbookError(f"no sheet of {logbook.path} has {what}{why}")
    names = ", ".join(repr(log.sheet.name) for log in fitting)
    raise LogbookError(
        f"{logbook.path} has tables on {len(fitting)} sheets, {names}: name one with --sheet"
    )


def _metadata(
    logbook: Logbook,
    log: Log,
    recipe: Recipe | None,
    columns: Sequence[Exported],
    now: datetime,
) -> dict[str, str]:
    found = {
        "logbook": logbook.path.name,
        "sheet": log.sheet.name,
        "exported by": provenance("version"),
        "exported": now.strftime("%Y-%m-%dT%H:%M:%S"),
    }
    if recipe is not None:
        found["recipe"] = f"{recipe.name}: {recipe.text.title}"
        settings, cosmology = settings_of(logbook, recipe)
        for key, setting in recipe.settings.items():
            if settings.get(key) is not None:
                unit = f" {setting.unit}" if setting.unit else ""
                found[setting.label] = f"{_plain_text(settings[key])}{unit}"
        parameters = ", ".join(
            f"{name} {getattr(cosmology, name.lower()):.10g}" for name in ("H0", "Om0", "Ode0")
        )
        found["cosmology"] = f"{cosmology.name} ({parameters})"
    # what made the numbers is for the logbook to say: this program only carries them out
    for key in PROVENANCE_CELLS:
        if key in logbook.named_cells and key != "recipe_name":
            name, row, number = logbook.named_cells[key]
            value = value_at(logbook.sheet(name), row, number)
            if value is not None:
                found[key.replace("_", " ")] = _text(value)
    made_with = {
        value
        for heading in log.headings
        if folded(heading.label) == folded(COMPUTED_WITH)
        for value in log.values(heading.number)
        if isinstance(value, str)
    }
    if made_with:
        found["computed with"] = " | ".join(sorted(made_with))
    scales = {column.time_scale for column in columns if column.time_format}
    if scales == {UTC_SCALE}:
        found[TIME_SCALE_KEY] = UTC_SCALE
    elif scales:
        found["time scale"] = "not stated for all columns of times"
    return found


def _plain_text(value: Any) -> str:
    return f"{value:.15g}" if isinstance(value, float) else str(value)


# ---- cells to columns ---------------------------------------------------------------------


@dataclass
class _Reader:
    log: Log
    dates: str
    report: ExportReport

    def __post_init__(self) -> None:
        self.rows = self.log.rows_in_use
        if not self.rows:
            raise LogbookError(
                f"{self.report.logbook}: sheet {self.log.sheet.name!r} has headers, but no row of "
                "values under them"
            )
        self._names: set[str] = set()

    def columns(self) -> list[Exported]:
        """Return the columns in the sheet's order."""
        self._left_out_rows()
        self._uncalculated()
        return [self._column(heading) for heading in self.log.headings]

    def _left_out_rows(self) -> None:
        used = set(self.rows)
        numbers = [heading.number for heading in self.log.headings if not heading.is_trail]
        for row in self.log.row_numbers:
            texts = [self.log.value(row, number) for number in numbers]
            if row not in used and any(text is not None for text in texts):
                first = next(shown(text) for text in texts if text is not None)
                self.report.notes.append(f"row {row} holds no measurement ({first}): left out")

    def _uncalculated(self) -> None:
        """Say where a formula's result was never stored: its cell looks like an empty one"""
        columns = self.log.sheet.formula_columns
        with_formula = [
            (row, heading.number)
            for row in self.rows
            for heading in self.log.headings
            if heading.number in columns and self.log.sheet.has_formula(row, heading.number)
        ]
        if with_formula and all(self.log.value(*place) is None for place in with_formula):
            self.report.problems.append(
                Remark(
                    self.log.cell(*with_formula[0]),
                    "this formula and all others of the sheet hold no results: fill the logbook "
                    "first, or save it in a spreadsheet program",
                )
            )

    def _column(self, heading: Heading) -> Exported:
        cells = self.log.values(heading.number)
        kinds = {_kind(value) for value in cells if value is not None} - {"error"}
        column = heading.column
        if column is not None and column.kind == "time":
            made = self._times(heading, cells)
        elif column is not None and column.is_number:
            made = self._numbers(heading, cells)
        elif column is not None:
            made = self._texts(heading, cells)
        elif kinds == {"date"}:
            made = self._times(heading, cells)
        elif kinds == {"truth"}:
            made = self._truths(heading, cells)
        elif kinds and kinds <= {"number", "duration"}:
            made = self._numbers(heading, cells)
        elif heading.unit and "number" in kinds:
            # a unit in the header says that what is no number slipped in
            made = self._numbers(heading, cells)
        else:
            made = self._texts(heading, cells)
        self._describe(made, heading)
        return made

    def _describe(self, made: Exported, heading: Heading) -> None:
        column = heading.column
        made.name = self._name(column.key if column else heading.label)
        made.label = heading.label
        made.ucd = getattr(column, "ucd", "") if column else ""
        made.description = heading.text if heading.written_unit and not made.unit else heading.label
        if column is not None and column.note:
            made.description += f": {column.note}"
        if column is not None and column.formula:
            made.description += f" Formula: {column.formula}"
        if heading.written_unit and not heading.unit and made.values.dtype.kind == "f":
            self.report.notes.append(
                f"{self.log.cell(self.log.header_row, heading.number)}: "
                f"{heading.written_unit!r} cannot be written along as a unit"
            )

    def _name(self, text: str) -> str:
        """Return a name that every format takes: ASCII letters, digits and _, told apart by more
        than case."""
        name = re.sub(r"[^0-9a-zA-Z]+", "_", ascii_of(text)[0]).strip("_").lower() or "column"
        if name[0].isdigit():
            name = f"column_{name}"
        name = name[:60]
        unique, count = name, 1
        while unique in self._names:
            count += 1
            unique = f"{name}_{count}"
        self._names.add(unique)
        return unique

    def _problem(self, index: int, heading: Heading, sentence: str) -> None:
        self.report.problems.append(
            Remark(self.log.cell(self.rows[index], heading.number), sentence)
        )

    def _refused(self, index: int, heading: Heading, value: Any, wanted: str) -> None:
        held = str(value) if isinstance(value, ErrorValue) else shown(value)
        self._problem(index, heading, f"holds {held}, not {wanted}; missing in the output")

    def _numbers(self, heading: Heading, cells: Sequence[Any]) -> Exported:
        values = np.full(len(cells), np.nan)
        unit = heading.unit or ""
        for index, value in enumerate(cells):
            kind = _kind(value)
            if kind == "number":
                values[index] = value
            elif kind == "duration" and (not unit or units.same_kind(unit, "s")):
                # a spreadsheet counts a duration in days
                unit = unit or "d"
                values[index] = value.total_seconds() * units.factor("s", unit)
            elif value is not None:
                self._refused(index, heading, value, "a number")
        return _exported(values, np.isnan(values), unit)

    def _truths(self, heading: Heading, cells: Sequence[Any]) -> Exported:
        missing = np.array([not isinstance(value, bool) for value in cells])
        for index, value in enumerate(cells):
            if isinstance(value, ErrorValue):
                self._refused(index, heading, value, "TRUE or FALSE")
        if missing.any():
            # no format but one can say of a truth that it is missing
            return self._texts(
                heading,
                [None if gone else value for gone, value in zip(missing, cells, strict=True)],
            )
        return _exported(np.array(cells, dtype=bool), missing)

    def _texts(self, heading: Heading, cells: Sequence[Any]) -> Exported:
        texts: list[str] = []
        for index, value in enumerate(cells):
            if isinstance(value, ErrorValue):
                self._refused(index, heading, value, "a text")
                texts.append("")
            else:
                texts.append("" if value is None else _text(value))
        column = heading.column
        numbers = [
            self.rows[index] for index, value in enumerate(cells) if _kind(value) == "number"
        ]
        if column is None and numbers and len(numbers) < sum(c is not None for c in cells):
            self.report.notes.append(
                f"{self.log.cell(numbers[0], heading.number)}: «{heading.label}» holds texts and "
                "numbers; written as text"
            )
        values = np.array(texts, dtype=str)
        return _exported(values, values == "")

    def _times(self, heading: Heading, cells: Sequence[Any]) -> Exported:
        stamps: list[datetime | None] = []
        for index, value in enumerate(cells):
            stamp = _stamp(value)
            if stamp is None and value is not None:
                self._refused(index, heading, value, "a date")
            stamps.append(stamp)
        missing = np.array([stamp is None for stamp in stamps])
        says_utc = heading.column is not None or bool(SAYS_UTC.search(heading.text))
        if self.dates == "jd":
            values = np.array([np.nan if s is None else julian_date(s) for s in stamps])
            made = _exported(values, missing, "d")
        else:
            texts = ["" if s is None else _iso(s) for s in stamps]
            made = _exported(np.array(texts, dtype=str), missing)
        made.time_format = self.dates
        made.time_scale = UTC_SCALE if says_utc else ""
        return made


def _exported(values: Any, missing: Any, unit: str = "") -> Exported:
    return Exported("", "", unit, "", "", values, missing)


def _kind(value: Any) -> str:
    if isinstance(value, bool):
        return "truth"
    if isinstance(value, (int, float)):
        return "number"
    if isinstance(value, ErrorValue):
        return "error"
    if isinstance(value, (datetime, date)):
        return "date"
    if isinstance(value, timedelta):
        return "duration"
    return "text"


def _text(value: Any) -> str:
    if isinstance(value, bool):
        return "TRUE" if value else "FALSE"
    if isinstance(value, float):
        return repr(value).removesuffix(".0")
    if isinstance(value, datetime):
        return _iso(value)
    if isinstance(value, time):
        return value.isoformat()
    # blanks at the ends say nothing, and half of the formats would lose them
    return str(value).strip()


def _stamp(value: Any) -> datetime | None:
    if isinstance(value, datetime):
        return value
    if isinstance(value, date):
        return datetime.combine(value, time())
    if isinstance(value, str):
        text = value.strip().removesuffix("Z").removesuffix("z")
        try:
            parsed = datetime.fromisoformat(text)
        except ValueError:
            return None
        return parsed.astimezone(UTC).replace(tzinfo=None) if parsed.tzinfo else parsed
    if isinstance(value, float) and value > LEAST_JULIAN_DATE:
        try:
            return J2000 + timedelta(days=value - J2000_JD)
        except OverflowError:
            return None
    return None


def _iso(stamp: datetime) -> str:
    """Return ISO 8601 text; a spreadsheet's day count leaves microseconds that nobody typed."""
    whole = stamp + timedelta(microseconds=500)
    whole = whole.replace(microsecond=whole.microsecond // 1000 * 1000)
    return whole.isoformat(timespec="milliseconds" if whole.microsecond else "seconds")


def julian_date(stamp: datetime) -> float:
    """Return the Julian date of a civil date and time, in the scale of that time."""
    return J2000_JD + (stamp - J2000) / timedelta(days=1)


# ---- ASCII, which is all that FITS holds ------------------------------------------------------

_GREEK: Final = dict(
    zip(
        "αβγδεζηθικλμνξοπρστυφχψω",
        "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi omicron pi rho "
        "sigma tau upsilon phi chi psi omega".split(),
        strict=True,
    )
)
_SIGNS: Final = {
    "–": "-", "—": "-", "−": "-", "‑": "-", "×": "x", "·": ".", "…": "...", "°": " deg",
    "’": "'", "‘": "'", "“": '"', "”": '"', "«": '"', "»": '"', "±": "+/-", "≤": "<=", "≥": ">=",
    "→": "->", "Å": "Angstrom", "\u212b": "Angstrom", "µ": "u", "ς": "sigma", "ß": "ss", "æ": "ae",
    "ø": "o", "ł": "l", "Æ": "AE", "Ø": "O", "Ł": "L", "☉": "sun", "′": "'", "″": '"',
}  # fmt: skip


def ascii_of(text: str) -> tuple[str, bool]:
    """Return a text in ASCII letters, and whether every letter could be told in them.

    Greek letters are spelt, accents dropped; "?" stands for the rest.
    """
    if text.isascii():
        return _CONTROL.sub(" ", text), True
    known = True
    letters = []
    for letter in text:
        if letter.isascii():
            letters.append(letter)
        elif letter in _SIGNS:
            letters.append(_SIGNS[letter])
        elif letter.lower() in _GREEK:
            word = _GREEK[letter.lower()]
            letters.append(word if letter.islower() else word.capitalize())
        else:
            plain = "".join(
                part for part in unicodedata.normalize("NFKD", letter) if part.isascii()
            )
            combining = unicodedata.combining(letter)
            known &= bool(plain or combining)
            letters.append(plain or ("" if combining else "?"))
    return _CONTROL.sub(" ", "".join(letters)), known


_CONTROL: Final = re.compile(r"[\x00-\x1f\x7f]+")
_NOT_IN_XML: Final = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ufffe\uffff]")


def _in_ascii(columns: Iterable[Exported], notes: list[str]) -> None:
    for column in columns:
        column.description = ascii_of(column.description)[0]
        if column.values.dtype.kind != "U":
            continue
        changed: dict[str, str] = {}
        lost = False
        written = []
        for text in column.values.tolist():
            # FITS does not tell blanks at the end from none
            plain, known = ascii_of(text)
            plain = plain.rstrip(" ")
            lost |= not known
            if plain != text:
                changed[text] = plain
            written.append(plain)
        if changed:
            old, new = next(iter(changed.items()))
            more = f" and {len(changed) - 1} more" if len(changed) > 1 else ""
            signs = "; «?» stands for letters that ASCII has not" if lost else ""
            notes.append(
                f"«{column.label}»: FITS holds ASCII only, {old!r} was written {new!r}{more}{signs}"
            )
            column.values = np.array(written, dtype=str)


# ---- the formats ----------------------------------------------------------------------------


@contextmanager
def _quiet() -> Iterator[None]:
    """Keep the libraries' remarks on spellings of units and long keywords to themselves."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        yield


def _astropy_table(
    columns: Sequence[Exported], notes: list[str], style: str = "", **metadata: Any
) -> "AstropyTable":
    """Return the columns as a table; `style` names the standard that the units must keep to."""
    from astropy.table import Column, MaskedColumn, Table

    table = Table(meta=dict(metadata))
    for column in columns:
        described = {
            "name": column.name,
            "unit": _unit(column, style, notes),
            "description": column.description,
        }
        table.add_column(
            MaskedColumn(column.values, mask=column.missing, **described)
            if column.missing.any()
            else Column(column.values, **described)
        )
    return table


def _unit(column: Exported, style: str, notes: list[str]) -> Any:
    from astropy.units import Unit, UnrecognizedUnit

    if not column.unit:
        return None
    unit = units.unit_of(column.unit)
    if style:
        try:
            with _quiet():
                kept = Unit(unit.to_string(style), format=style) == unit
        except ValueError:
            kept = False
        if not kept:
            notes.append(
                f"«{column.label}»: the format's standard has no unit {column.unit!r}; written as "
                "it stands"
            )
            return UnrecognizedUnit(column.unit)
    return unit


def _fits(columns: list[Exported], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    from astropy.io import fits

    _in_ascii(columns, notes)
    table = _astropy_table(columns, notes, "fits")
    for column in columns:
        # astropy would write descriptions as YAML among the comments; the cards below say them
        table[column.name].description = None
    with _quiet():
        hdu = fits.table_to_hdu(table)
        header = hdu.header
        header["EXTNAME"] = ascii_of(metadata["sheet"])[0]
        header["CREATOR"] = metadata["exported by"]
        header["DATE"] = (metadata["exported"], "UTC")
        if TIME_SCALE_KEY in metadata:
            header[TIME_SCALE_KEY] = (metadata[TIME_SCALE_KEY], "scale of the columns of times")
        for number, column in enumerate(columns, 1):
            header[f"TCOMM{number}"] = column.description
            if column.ucd:
                header[f"TUCD{number}"] = column.ucd
        for key, value in metadata.items():
            if key not in ("exported by", "exported", TIME_SCALE_KEY):
                header["HISTORY"] = ascii_of(f"{key}: {value}")[0]
        primary = fits.PrimaryHDU()
        content = BytesIO()
        fits.HDUList([primary, hdu]).writeto(content)
    return content.getvalue()


def _votable(columns: list[Exported], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    from astropy.io import votable
    from astropy.io.votable import tree

    for column in columns:
        if column.values.dtype.kind == "U":
            column.values = np.array(
                [_NOT_IN_XML.sub(" ", text) for text in column.values.tolist()], dtype=str
            )
    table = _astropy_table(columns, notes, "vounit")
    for column in columns:
        if column.ucd:
            table[column.name].meta["ucd"] = column.ucd
        if column.time_format == "iso":
            table[column.name].meta["xtype"] = "timestamp"
    with _quiet():
        document = votable.from_table(table)
        document.version = "1.4"
        resource = document.resources[0]
        if any(column.time_format == "jd" and column.time_scale for column in columns):
            resource.time_systems.append(
                tree.TimeSys(
                    ID="time_system",
                    timeorigin="JD-origin",
                    timescale=UTC_SCALE,
                    refposition="TOPOCENTER",
                )
            )
        first = resource.tables[0]
        first.name = metadata["sheet"]
        for made, column in zip(first.fields, columns, strict=True):
            if column.time_format == "jd" and column.time_scale:
                made.ref = "time_system"
        resource.infos.extend(
            tree.Info(name=key, value=_NOT_IN_XML.sub(" ", value))
            for key, value in metadata.items()
        )
        content = BytesIO()
        document.to_xml(content)
    return content.getvalue()


def _ecsv(columns: list[Exported], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    table = _astropy_table(columns, notes, **metadata)
    _with_ucds(table, columns)
    content = StringIO()
    with _quiet():
        table.write(content, format="ascii.ecsv")
    return content.getvalue().encode()


def _csv(columns: list[Exported], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    import csv

    notes.append("CSV has no place for descriptions and provenance: only units go along")
    content = StringIO(newline="")
    writer = csv.writer(content, lineterminator="\r\n")
    writer.writerow(
        f"{column.label} [{column.unit}]" if column.unit else column.label for column in columns
    )
    texts = [
        [
            "" if gone else _text(value)
            for value, gone in zip(column.values.tolist(), column.missing.tolist(), strict=True)
        ]
        for column in columns
    ]
    writer.writerows(zip(*texts, strict=True))
    for column, cells in zip(columns, texts, strict=True):
        first = next((cell for cell in cells if cell.startswith(("=", "+", "@"))), None)
        if column.values.dtype.kind == "U" and first is not None:
            notes.append(
                f"«{column.label}» holds {first!r}, which a spreadsheet that opens the CSV would "
                "take for a formula"
            )
    return content.getvalue().encode()


def _parquet(columns: list[Exported], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    try:
        import pyarrow  # noqa: F401
    except ImportError:
        raise LogbookError(
            "Parquet needs one library more: install it with «pip install cellfuncs[parquet]»"
        ) from None
    table = _astropy_table(columns, notes, **metadata)
    _with_ucds(table, columns)
    # its writer takes a path only
    with TemporaryDirectory(prefix="cellfuncs-") as folder, _quiet():
        place = Path(folder) / "table.parquet"
        table.write(place, format="parquet")
        return place.read_bytes()


def _with_ucds(table: "AstropyTable", columns: Sequence[Exported]) -> None:
    for column in columns:
        if column.ucd:
            table[column.name].meta["ucd"] = column.ucd


FORMATS: Final = (
    Format("FITS binary table", (".fits", ".fit"), _fits),
    Format("VOTable", (".vot", ".votable", ".xml"), _votable),
    Format("ECSV", (".ecsv",), _ecsv),
    Format("CSV", (".csv",), _csv),
    Format("Parquet", (".parquet",), _parquet),
)
