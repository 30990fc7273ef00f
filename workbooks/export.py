"""A logbook's table taken out of the spreadsheet, with its units, into an archive's format."""

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, Final

from cellfuncs.families.workbook import provenance
from workbooks.files.saving import check_target, write_whole
from workbooks.fill import COMPUTED_WITH, recipe_of, settings_of
from workbooks.headings import Log, logs_of, value_at
from workbooks.logbook import Logbook, LogbookError
from workbooks.matching import Remark, folded
from workbooks.recipe import Recipe
from workbooks.settings import PROVENANCE_CELLS
from workbooks.tables import csv_on_the_web
from workbooks.tables import formats as table_formats
from workbooks.tables.typed_columns import UTC_SCALE, TypedColumn, text_of, typed


@dataclass
class ExportReport:
    """What became of a table."""

    logbook: str
    sheet: str
    recipe: str
    output: str
    metadata: str = ""
    """The file beside the output that describes it, where the format itself cannot"""
    rows: int = 0
    columns: int = 0
    notes: list[str] = field(default_factory=list)
    problems: list[Remark] = field(default_factory=list)
    """Cells whose value could not go into their column: missing in the output"""

    @property
    def has_problems(self) -> bool:
        return bool(self.problems)


@dataclass(frozen=True)
class Format:
    """A way of writing: what it is called, and its file's bytes from columns and metadata"""

    name: str
    suffixes: tuple[str, ...]
    written: Callable[[list[TypedColumn], Mapping[str, str], list[str]], bytes]


CSV: Final = Format("CSV", (".csv",), csv_on_the_web.table)

FORMATS: Final = (
    Format("FITS binary table", (".fits", ".fit"), table_formats.fits),
    Format("VOTable", (".vot", ".votable", ".xml"), table_formats.votable),
    Format("ECSV", (".ecsv",), table_formats.ecsv),
    CSV,
    Format("Parquet", (".parquet",), table_formats.parquet),
)


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

    Beside a .csv stands what describes it, as `csv_on_the_web` says.
    path: the logbook
    recipe: left out, the one that the logbook was made from, if any
    sheet: the sheet's name; may be left out where only one holds a table
    dates: "iso" for ISO 8601 text, "jd" for Julian dates
    overwrite: whether `output`, and what describes it, may exist
    Raises LogbookError where the file cannot be read, has no such sheet, or cannot be written.
    """
    chosen = format_of(output)
    if output.resolve() == path.resolve():
        raise LogbookError(f"{output} is the logbook itself; name another file")
    check_target(output, overwrite=overwrite)
    beside = csv_on_the_web.metadata_path(output) if chosen is CSV else None
    if beside:
        check_target(beside, overwrite=overwrite)
    logbook = Logbook.open(path)
    if recipe is None and "recipe_name" in logbook.named_cells:
        recipe = recipe_of(logbook)
    log = _chosen(logbook, recipe, sheet)
    table = typed(log, dates)
    metadata = _metadata(logbook, log, recipe, table.columns, now or datetime.now(UTC))
    content = chosen.written(table.columns, metadata, table.notes)
    if beside:
        described = csv_on_the_web.described(output.name, content, table.columns, metadata)
        csv_on_the_web.write_both(output, content, described, overwrite=overwrite)
    else:
        write_whole(output, content, overwrite=overwrite)
    return ExportReport(
        str(path),
        log.sheet.name,
        recipe.name if recipe else "",
        str(output),
        str(beside) if beside else "",
        rows=len(table.columns[0].values),
        columns=len(table.columns),
        notes=table.notes,
        problems=table.problems,
    )


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
    columns: Sequence[TypedColumn],
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
                found[key.replace("_", " ")] = text_of(value)
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
        found[table_formats.TIME_SCALE_KEY] = UTC_SCALE
    elif scales:
        found["time scale"] = "not stated for all columns of times"
    return found


def _plain_text(value: Any) -> str:
    return f"{value:.15g}" if isinstance(value, float) else str(value)
