"""A log's table in the formats of the archives: FITS, VOTable, ECSV and Parquet.

astropy writes the files, except for the rows of VOTable and ECSV: it goes through those cell by
cell, which takes most of an export's time (`tests/workbooks/test_export.py` holds these rows to
what astropy itself writes).
"""

import re
import warnings
from collections.abc import Iterable, Iterator, Mapping, Sequence
from contextlib import contextmanager
from io import BytesIO, StringIO
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import TYPE_CHECKING, Any, Final
from xml.sax.saxutils import escape

import numpy as np

from cellfuncs import units
from workbooks.files.cells import LogbookError
from workbooks.tables.ascii_spelling import ascii_of
from workbooks.tables.typed_columns import UTC_SCALE, TypedColumn, in_rows

if TYPE_CHECKING:
    from astropy.table import Table as AstropyTable

TIME_SCALE_KEY: Final = "TIMESYS"
"""The keyword of FITS, used in the other formats too"""

MOST_CHARACTERS: Final = 250_000_000
"""Of a column in which every row is as long as the longest text"""

_NOT_IN_XML: Final = re.compile("[\x00-\x08\x0b\x0c\x0e-\x1f\ufffe\uffff]")

_BARE_IN_ECSV: Final = re.compile(r'[^\s"#]+')


def fits(columns: list[TypedColumn], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    """Return a FITS file with a binary table (FITS 4.0, section 7.3)."""
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


def votable(columns: list[TypedColumn], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    """Return a VOTable 1.4 (IVOA 2019)."""
    from astropy.io import votable
    from astropy.io.votable import tree

    for column in columns:
        if column.is_text:
            column.values = [_NOT_IN_XML.sub(" ", text) for text in column.values]
    table = _astropy_table(columns, notes, "vounit", with_rows=False)
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
        head = BytesIO()
        document.to_xml(head)
    before, end, after = head.getvalue().partition(b"  </TABLE>")
    content = BytesIO()
    content.write(before)
    content.write(b"   <DATA>\n    <TABLEDATA>\n")
    for row in in_rows(columns, _in_votable):
        cells = "".join(f"      <TD>{text}</TD>\n" if text else "      <TD/>\n" for text in row)
        content.write(f"     <TR>\n{cells}     </TR>\n".encode())
    content.write(b"    </TABLEDATA>\n   </DATA>\n" + end + after)
    return content.getvalue()


def _in_votable(column: TypedColumn, values: list[Any]) -> list[str]:
    if column.is_text:
        return [escape(text) for text in values]
    if column.is_truth:
        return ["1" if value else "0" for value in values]
    return [repr(value).removesuffix(".0") for value in values]


def ecsv(columns: list[TypedColumn], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    """Return an ECSV 1.0 file (astropy APE 6)."""
    table = _astropy_table(columns, notes, metadata=metadata, with_rows=False)
    _with_ucds(table, columns)
    content = StringIO()
    with _quiet():
        table.write(content, format="ascii.ecsv")
    for row in in_rows(columns, _in_ecsv):
        content.write(" ".join([text or '""' for text in row]) + "\n")
    return content.getvalue().encode()


def _in_ecsv(column: TypedColumn, values: list[Any]) -> list[str]:
    if column.is_text:
        # astropy writes «#7» without quotes, and then reads a row that begins so as a comment
        bare = _BARE_IN_ECSV.fullmatch
        return [text if bare(text) else '"' + text.replace('"', '""') + '"' for text in values]
    return list(map(repr, values))


def parquet(columns: list[TypedColumn], metadata: Mapping[str, str], notes: list[str]) -> bytes:
    """Return a Parquet file, its metadata as astropy keeps them there."""
    try:
        import pyarrow  # noqa: F401
    except ImportError:
        raise LogbookError(
            "Parquet needs one library more: install it with «pip install cellfuncs[parquet]»"
        ) from None
    table = _astropy_table(columns, notes, metadata=metadata)
    _with_ucds(table, columns)
    # its writer takes a path only
    with TemporaryDirectory(prefix="cellfuncs-") as folder, _quiet():
        place = Path(folder) / "table.parquet"
        table.write(place, format="parquet")
        return place.read_bytes()


def unit_in(style: str, text: str) -> str | None:
    """Return a unit as a standard spells it, None where that has no such unit.

    style: "fits" or "vounit" (IVOA VOUnits)
    """
    from astropy.units import Unit

    unit = units.unit_of(text)
    try:
        with _quiet():
            spelt: str = unit.to_string(style)
            return spelt if Unit(spelt, format=style) == unit else None
    except ValueError:
        return None


@contextmanager
def _quiet() -> Iterator[None]:
    """Keep the libraries' remarks on spellings of units and long keywords to themselves."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        yield


def _astropy_table(
    columns: Sequence[TypedColumn],
    notes: list[str],
    style: str = "",
    *,
    metadata: Mapping[str, str] | None = None,
    with_rows: bool = True,
) -> "AstropyTable":
    """Return the columns as a table; `style` names the standard that the units must keep to."""
    from astropy.table import Column, MaskedColumn, Table

    table = Table(meta=dict(metadata or {}))
    for column in columns:
        values = column.values
        if column.is_text:
            widest = max(1, max(map(len, values)))
            if with_rows and widest * len(values) > MOST_CHARACTERS:
                raise LogbookError(
                    f"«{column.label}» holds a text of {widest:,} characters, and in this format "
                    f"each of the {len(values):,} rows would take as many; shorten it, or export "
                    "to .ecsv, .vot or .csv"
                )
            values = np.array(values if with_rows else [], dtype=f"U{widest}")
        elif not with_rows:
            values = values[:0]
        described = {
            "name": column.name,
            "unit": _unit(column, style, notes),
            "description": column.description,
        }
        table.add_column(
            MaskedColumn(values, mask=column.missing, **described)
            if with_rows and column.missing.any()
            else Column(values, **described)
        )
    return table


def _unit(column: TypedColumn, style: str, notes: list[str]) -> Any:
    from astropy.units import UnrecognizedUnit

    if not column.unit:
        return None
    if style and unit_in(style, column.unit) is None:
        notes.append(
            f"«{column.label}»: the format's standard has no unit {column.unit!r}; written as "
            "it stands"
        )
        return UnrecognizedUnit(column.unit)
    return units.unit_of(column.unit)


def _with_ucds(table: "AstropyTable", columns: Sequence[TypedColumn]) -> None:
    for column in columns:
        if column.ucd:
            table[column.name].meta["ucd"] = column.ucd


def _in_ascii(columns: Iterable[TypedColumn], notes: list[str]) -> None:
    for column in columns:
        column.description = ascii_of(column.description)[0]
        if not column.is_text:
            continue
        changed: dict[str, str] = {}
        lost = False
        for text in dict.fromkeys(column.values):
            # FITS does not tell blanks at the end from none
            plain, known = ascii_of(text)
            plain = plain.rstrip(" ")
            lost |= not known
            if plain != text:
                changed[text] = plain
        if changed:
            old, new = next(iter(changed.items()))
            more = f" and {len(changed) - 1} more" if len(changed) > 1 else ""
            signs = "; «?» stands for letters that ASCII has not" if lost else ""
            notes.append(
                f"«{column.label}»: FITS holds ASCII only, {old!r} was written {new!r}{more}{signs}"
            )
            column.values = [changed.get(text, text) for text in column.values]
