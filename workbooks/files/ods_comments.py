"""Comments put into cells of an .ods, every other byte kept (OASIS ODF 1.3 part 3, 14.1)."""

import re
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Final
from xml.sax.saxutils import escape

from workbooks.files.cells import Area, Value
from workbooks.files.edits import Edits
from workbooks.files.ods_cells import OFFICE, TABLE, Cell
from workbooks.files.ods_writer import Writer
from workbooks.files.opendocument import OdsLogbook
from workbooks.files.xml_check import ATTRIBUTES

DUBLIN_CORE: Final = "http://purl.org/dc/elements/1.1/"


def save(
    logbook: OdsLogbook,
    output: Path,
    comments: Mapping[str, Mapping[str, str]],
    author: str,
    *,
    overwrite: bool = False,
) -> None:
    """Write a copy with comments: a text by the name of a sheet and of a cell.

    A comment that is there stays, and the text comes after it. Raises LogbookError where the
    logbook is signed or the copy cannot be written.
    """
    texts: dict[str, Edits] = {}
    for sheet, cells in comments.items():
        edits = texts[sheet] = Edits(sheet)
        for cell, text in cells.items():
            area = Area.parsed(cell)
            assert area is not None
            edits.set(area.first_row, area.first_column, text)

    def content() -> Iterator[bytes]:
        writer = _Commenter(logbook.path, texts, author)
        return writer.pieces(logbook.archive.chunks("content.xml"))

    replaced = {"content.xml": content} if texts else {}
    logbook.archive.save(output, replaced, overwrite=overwrite)


class _Commenter(Writer):
    """Puts comments where a writer puts values."""

    def __init__(self, path: Path, edits: Mapping[str, Edits], author: str) -> None:
        super().__init__(path, edits)
        self.author = author

    def _edited(self, cell: Cell, plain: bytes, end: int, value: Value) -> bytes:
        if plain.endswith(b"/>"):
            return _opened(plain) + self._annotation(value) + _closing(plain)
        begin = cell.start + len(self._tag(cell.start))
        if cell.annotation is None:
            inner = self._bytes(begin, end)
            place = self._place_in(inner)
            return plain + inner[:place] + self._annotation(value) + inner[place:]
        start, stop = cell.annotation
        tag = self._tag(start)
        if tag.endswith(b"/>"):
            annotation = _opened(tag) + self._paragraphs(str(value)) + _closing(tag)
        else:
            # an empty line parts it from what a person wrote
            added = self._paragraphs(f"\n{value}")
            annotation = self._bytes(start, stop) + added + self._tag(stop)
        rest = self._bytes(self._after(start, stop), end)
        return plain + self._bytes(begin, start) + annotation + rest

    def _stored(self, value: Value, *, has_formula: bool) -> tuple[bytes, bytes]:
        # of a cell that the file does not have yet: it holds the comment and no value
        return b"", self._annotation(value)

    def _annotation(self, value: Value) -> bytes:
        name = self._name(OFFICE, "annotation").decode()
        prefix = self.walk.prefixes.get(DUBLIN_CORE)
        creator = f"{prefix}:creator" if prefix else "dc:creator"
        declared = "" if prefix else f' xmlns:dc="{DUBLIN_CORE}"'
        opening = f"<{name}><{creator}{declared}>{escape(self.author)}</{creator}>"
        return opening.encode() + self._paragraphs(str(value)) + f"</{name}>".encode()

    def _place_in(self, inner: bytes) -> int:
        """Return where a cell's comment stands: before all else but the source of its values."""
        source = re.escape(self._name(TABLE, "cell-range-source"))
        found = re.match(
            rb"\s*<" + source + rb"(?=[\s/>])" + ATTRIBUTES + rb"(?:/>|>\s*</" + source + rb"\s*>)",
            inner,
        )
        return found.end() if found else 0


def _opened(tag: bytes) -> bytes:
    """Return the tag of an empty element as one that something follows."""
    return tag[:-2] + b">"


def _closing(tag: bytes) -> bytes:
    return b"</%b>" % tag[1:-2].split(None, 1)[0]
