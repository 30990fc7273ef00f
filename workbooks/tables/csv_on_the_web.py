"""A log's table as CSV, and beside it, as JSON, what CSV has no place for.

The W3C Recommendations of 17 December 2015 «Metadata Vocabulary for Tabular Data» and «Model for
Tabular Data and Metadata on the Web» say what the second file is called, and what it holds.
"""

import csv
import hashlib
import json
import os
import stat
from collections.abc import Mapping, Sequence
from contextlib import suppress
from io import BytesIO, TextIOWrapper
from pathlib import Path
from typing import Any, BinaryIO, Final
from urllib.parse import quote

from workbooks.files.cells import LogbookError
from workbooks.files.saving import check_target, stamp, write_whole
from workbooks.tables.formats import unit_in
from workbooks.tables.typed_columns import TypedColumn, in_rows, text_of

SUFFIX: Final = "-metadata.json"
"""What a table's file name is followed by in that of its metadata (the Model, section 5.3)"""

CONTEXT: Final = "http://www.w3.org/ns/csvw"

NO_COMMENTS: Final = {"commentPrefix": " "}
"""Readers take a row that begins with «#» for a comment unless told otherwise (the Vocabulary,
section 5.9), and the prefix must be some text. No row begins with a blank, for the texts are
stripped."""

TABLE_TERMS: Final = {
    "sheet": "dc:title",
    "logbook": "dc:source",
    "exported by": "dc:creator",
}
"""What Dublin Core's terms have words for; "exported" is dc:created, a date and time"""


def metadata_path(output: Path) -> Path:
    """Return where the metadata of a table in CSV stand."""
    return output.with_name(output.name + SUFFIX)


def table(columns: list[TypedColumn], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    """Return a table in CSV (RFC 4180), with units in its header."""
    content = BytesIO()
    with TextIOWrapper(content, encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\r\n")
        writer.writerow(map(_header, columns))
        writer.writerows(in_rows(columns, _spelt))
        file.flush()
        written = content.getvalue()
    for column in columns:
        if column.is_text:
            first = next((text for text in column.values if text.startswith(("=", "+", "@"))), None)
            if first is not None:
                notes.append(
                    f"«{column.label}» holds {first!r}, which a spreadsheet that opens the CSV "
                    "would take for a formula"
                )
    return written


def _header(column: TypedColumn) -> str:
    return f"{column.label} [{column.unit}]" if column.unit else column.label


def _spelt(column: TypedColumn, values: list[Any]) -> list[str]:
    return values if column.is_text else list(map(text_of, values))


def described(
    name: str, content: bytes, columns: Sequence[TypedColumn], metadata: Mapping[str, str]
) -> bytes:
    """Return the metadata of a table in CSV.

    name: the file's, in the folder in which the metadata stand too
    content: its bytes
    """
    # The Vocabulary names no property for a unit, a UCD or a setting. It lets any property of the
    # vocabularies stand whose prefixes RDFa's initial context defines (section 5.8.1): schema.org's
    # `unitText` is a unit's text, `propertyID` «a prefixed string … a standard code for a
    # property», `PropertyValue` a named value, `sha256` what tells whether a file is still the one
    # that was described.
    told: dict[str, Any] = {"@context": CONTEXT, "url": quote(name)}
    for key, term in TABLE_TERMS.items():
        told[term] = metadata[key]
    told["dc:created"] = {"@value": metadata["exported"] + "Z", "@type": "xsd:dateTime"}
    told["schema:sha256"] = hashlib.sha256(content).hexdigest()
    if content.startswith(b"#") or _any_begins_with_hash(columns[0]):
        told["dialect"] = NO_COMMENTS
    # arbitrary annotations of a table have their place in the Vocabulary itself (section 5.4)
    told["notes"] = [
        {"@type": "schema:PropertyValue", "schema:name": key, "schema:value": value}
        for key, value in metadata.items()
        if key not in (*TABLE_TERMS, "exported")
    ]
    told["tableSchema"] = {"null": "", "columns": list(map(_column, columns))}
    return (json.dumps(told, ensure_ascii=False, indent=1) + "\n").encode()


def _any_begins_with_hash(column: TypedColumn) -> bool:
    return column.is_text and any(text.startswith("#") for text in column.values)


def _column(column: TypedColumn) -> dict[str, Any]:
    told = {
        "name": column.name,
        "titles": _header(column),
        "datatype": _datatype(column),
        "dc:description": column.description,
    }
    if column.unit:
        told["schema:unitText"] = unit_in("vounit", column.unit) or column.unit
    if column.ucd:
        told["schema:propertyID"] = f"ucd:{column.ucd}"
    return told


def _datatype(column: TypedColumn) -> Any:
    """Return a datatype by the Vocabulary's words (section 5.11.1)"""
    if column.is_truth:
        return {"base": "boolean", "format": "TRUE|FALSE"}
    if column.is_number:
        return "number"
    return "dateTime" if column.time_format else "string"


def write_both(output: Path, content: bytes, metadata: bytes, *, overwrite: bool = False) -> None:
    """Write a table and its metadata, each whole or not at all.

    Files that are there are replaced where `overwrite` is asked. Whatever ends this early, no table
    is left beside the metadata of another one: both are as they were, or the table has none. Raises
    LogbookError as `write_whole` does.
    """
    beside = metadata_path(output)
    table_before = check_target(output, overwrite=overwrite)
    before = check_target(beside, overwrite=overwrite)
    # Two files cannot take their names at once. So the old metadata lose theirs first, and the new
    # ones, already on the disk by then, get it last.
    place = beside.resolve()
    aside = place.with_name(f".{place.name}.old")

    def table_is_new() -> bool:
        now = output.stat() if output.exists() else None
        return (now and stamp(now)) != (table_before and stamp(table_before))

    def write(file: BinaryIO) -> None:
        if before:
            with suppress(OSError, AttributeError):
                os.fchmod(file.fileno(), stat.S_IMODE(before.st_mode))
        file.write(metadata)
        file.flush()
        os.fsync(file.fileno())
        write_whole(output, content, overwrite=overwrite)

    try:
        if before:
            os.replace(place, aside)
        write_whole(beside, write)
    except BaseException as error:
        if before and not table_is_new() and not place.exists():
            os.replace(aside, place)
        if isinstance(error, OSError):
            raise LogbookError(f"{beside} was not written: {error.strerror or error}") from error
        if isinstance(error, LogbookError) and table_is_new():
            raise LogbookError(f"{output} was written, but not its metadata: {error}") from error
        raise
    finally:
        if table_is_new():
            # also what a run that was killed has left
            aside.unlink(missing_ok=True)
