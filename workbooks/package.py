"""The package of an .xlsx: opened with suspicion, edited cell by cell, every other byte kept."""

import io
import math
import os
import posixpath
import re
import secrets
import stat
import zipfile
import zlib
from collections.abc import Iterator, Mapping
from contextlib import suppress
from dataclasses import dataclass
from functools import cache, cached_property
from pathlib import Path
from typing import NamedTuple
from urllib.parse import unquote
from xml.parsers import expat

from lxml import etree

# ECMA-376 part 1 section 18.2 (transitional) and ISO/IEC 29500-1 strict.
MAIN_NAMESPACES = (
    "http://schemas.openxmlformats.org/spreadsheetml/2006/main",
    "http://purl.oclc.org/ooxml/spreadsheetml/main",
)
RELATIONSHIP_IDS = (
    "{http://schemas.openxmlformats.org/officeDocument/2006/relationships}id",
    "{http://purl.oclc.org/ooxml/officeDocument/relationships}id",
)

LAST_ROW = 1_048_576
LAST_COLUMN = 16_384
LONGEST_TEXT = 32_767

# A year's logbook unpacks to some tens of megabytes, its densest part perhaps 30 to 1.
MOST_PACKED = 512 << 20
MOST_UNPACKED = 1 << 30
MOST_ENTRIES = 10_000
MOST_RATIO = 200
RATIO_MATTERS_FROM = 16 << 20

CFB_MAGIC = bytes.fromhex("d0cf11e0a1b11ae1")
ENCRYPTED_FLAG = 0x1
ZIP64_FIELD = b"\x01\x00"


class LogbookError(ValueError):
    """A workbook that cannot be read or written; the message is the sentence a person reads."""


@dataclass(frozen=True, slots=True)
class ErrorValue:
    """An error that a cell shows in a number's place, such as #NUM!."""

    text: str

    def __post_init__(self) -> None:
        if not re.fullmatch(r"#[A-Z0-9/_]+[!?]?", self.text):
            raise ValueError(f"{self.text!r} is no error value such as #NUM!, #VALUE! or #N/A")

    def __str__(self) -> str:
        return self.text


Value = float | int | str | ErrorValue | None


def column_letters(column: int) -> str:
    """Return a column's letters: 1 is A, 28 is AB."""
    letters = ""
    while column:
        column, rest = divmod(column - 1, 26)
        letters = chr(65 + rest) + letters
    return letters


def column_number(letters: str) -> int:
    """Return a column's number: A is 1, AB is 28."""
    number = 0
    for letter in letters:
        number = number * 26 + ord(letter) - 64
    return number


def cell_name(row: int, column: int) -> str:
    """Return a cell's name: row 17, column 4 is D17."""
    return f"{column_letters(column)}{row}"


class Area(NamedTuple):
    """A rectangle of cells, both ends included."""

    first_row: int
    first_column: int
    last_row: int
    last_column: int

    @classmethod
    def parsed(cls, text: str) -> "Area | None":
        """Return the area that text such as B2:C9 or B2 names, None for anything else."""
        found = re.fullmatch(
            r"\$?([A-Z]{1,3})\$?([0-9]{1,7})(?::\$?([A-Z]{1,3})\$?([0-9]{1,7}))?", text
        )
        if not found:
            return None
        left, top, right, bottom = found.groups()
        return cls(int(top), column_number(left), int(bottom or top), column_number(right or left))

    def __str__(self) -> str:
        first = cell_name(self.first_row, self.first_column)
        last = cell_name(self.last_row, self.last_column)
        return first if first == last else f"{first}:{last}"


# ---- the archive ---------------------------------------------------------------------------


class Package:
    """The parts of an .xlsx, and which of them is which sheet.

    The file is read once and kept packed, so that what is saved later is what was checked here.
    """

    def __init__(self, path: Path) -> None:
        """Open and check `path`; raise LogbookError for anything that is not a sound .xlsx."""
        self.path = path
        self._packed, self._stamp = self._read_file()
        self._archive, self._entries = self._open_archive()
        self._find_workbook()

    def _read_file(self) -> tuple[bytes, tuple[int, int]]:
        try:
            if self.path.exists() and not self.path.is_file():
                raise LogbookError(f"{self.path} is a folder or a device, not a workbook")
            with self.path.open("rb") as file:
                status = os.fstat(file.fileno())
                if status.st_size > MOST_PACKED:
                    raise LogbookError(
                        f"{self.path} has {status.st_size:,} bytes, more than the "
                        f"{MOST_PACKED:,} that a workbook may have"
                    )
                packed = file.read(status.st_size)
        except FileNotFoundError:
            raise LogbookError(f"{self.path} does not exist") from None
        except OSError as error:
            raise LogbookError(f"{self.path} cannot be read: {error.strerror}") from error
        if not packed:
            raise LogbookError(f"{self.path} is empty (0 bytes)")
        if packed.startswith(CFB_MAGIC):
            raise LogbookError(
                f"{self.path} is encrypted or in the old .xls format; "
                "save it as .xlsx without a password"
            )
        if not packed.startswith(b"PK"):
            raise LogbookError(f"{self.path} is not an .xlsx workbook, whatever its name says")
        return packed, (status.st_mtime_ns, status.st_size)

    def _open_archive(self) -> tuple[zipfile.ZipFile, dict[str, zipfile.ZipInfo]]:
        try:
            archive = zipfile.ZipFile(io.BytesIO(self._packed))
        except (zipfile.BadZipFile, ValueError, NotImplementedError, OSError) as error:
            raise LogbookError(f"{self.path} is cut short or damaged: {error}") from error
        # zipfile does not mind when the archive's comment, its very end, is missing.
        end = self._packed.rfind(b"PK\x05\x06")
        comment_size = int.from_bytes(self._packed[end + 20 : end + 22], "little")
        if end + 22 + comment_size > len(self._packed):
            raise LogbookError(f"{self.path} is cut short or damaged: its last bytes are missing")
        infos = archive.infolist()
        if len(infos) > MOST_ENTRIES:
            raise LogbookError(
                f"{self.path} holds {len(infos):,} parts, more than the {MOST_ENTRIES:,} allowed"
            )
        unpacked = sum(info.file_size for info in infos)
        if unpacked > MOST_UNPACKED:
            raise LogbookError(
                f"{self.path} would unpack to {unpacked:,} bytes, more than the "
                f"{MOST_UNPACKED:,} allowed"
            )
        entries: dict[str, zipfile.ZipInfo] = {}
        for info in infos:
            self._check_entry(info)
            # Part names are compared without regard to case (ECMA-376 part 2, section 6.2.2.3).
            if info.filename.casefold() in entries:
                raise LogbookError(f"{self.path} holds the part {info.filename!r} twice")
            entries[info.filename.casefold()] = info
        return archive, entries

    def _check_entry(self, info: zipfile.ZipInfo) -> None:
        name = info.filename
        segments = name.removesuffix("/").split("/")
        if "\\" in name or ":" in name or any(part in ("", ".", "..") for part in segments):
            raise LogbookError(f"{self.path} holds a part with a bad name, {name!r}")
        if info.flag_bits & ENCRYPTED_FLAG:
            raise LogbookError(f"{self.path} is encrypted: its part {name!r} needs a password")
        if info.compress_type not in (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED):
            raise LogbookError(f"{self.path} packs its part {name!r} in a way no workbook may")
        if info.file_size > max(RATIO_MATTERS_FROM, MOST_RATIO * info.compress_size):
            raise LogbookError(
                f"{self.path} would unpack its part {name!r} from {info.compress_size:,} to "
                f"{info.file_size:,} bytes, which no honest workbook does"
            )

    def _find_workbook(self) -> None:
        if not self.has("[Content_Types].xml") or not self.has("_rels/.rels"):
            raise LogbookError(f"{self.path} is a zip archive but holds no workbook")
        by_type = dict(self.relations("").values())
        self.workbook_part = by_type.get("officeDocument", "")
        if not self.has(self.workbook_part):
            raise LogbookError(f"{self.path} is a zip archive but holds no workbook")
        if self.workbook_part.casefold().endswith(".bin"):
            raise LogbookError(f"{self.path} is a binary workbook (.xlsb); save it as .xlsx")
        workbook = self.xml(self.workbook_part)
        if etree.QName(workbook).localname != "workbook" or (
            etree.QName(workbook).namespace not in MAIN_NAMESPACES
        ):
            raise LogbookError(f"{self.path} holds a document, but not a spreadsheet workbook")
        main = f"{{{etree.QName(workbook).namespace}}}"
        related = self.relations(self.workbook_part)
        self.sheets: dict[str, str] = {}
        order: list[str] = []
        for element in workbook.iterfind(f"{main}sheets/{main}sheet"):
            name = str(element.get("name", ""))
            order.append(name)
            link = next((str(element.get(key)) for key in RELATIONSHIP_IDS if element.get(key)), "")
            kind, target = related.get(link, ("", ""))
            if kind == "worksheet":
                if not self.has(target):
                    raise LogbookError(f"{self.path} lacks the part of its sheet {name!r}")
                self.sheets[name] = target
        if not self.sheets:
            raise LogbookError(f"{self.path} holds no worksheet")
        properties = workbook.find(f"{main}workbookPr")
        self.dates_from_1904 = properties is not None and (
            properties.get("date1904") in ("1", "true")
        )
        # Names that belong to one sheet (localSheetId) may repeat, so they are left out.
        self.global_names = {
            str(element.get("name")): (element.text or "").strip()
            for element in workbook.iterfind(f"{main}definedNames/{main}definedName")
            if element.get("localSheetId") is None
        }
        parts = dict(related.values())
        self.styles_part = parts.get("styles", "")
        self.strings_part = parts.get("sharedStrings", "")

    def has(self, part: str) -> bool:
        """Say whether the package holds a part of that name."""
        return part.casefold() in self._entries

    @property
    def parts(self) -> list[str]:
        """The names of all parts, in the archive's order."""
        return [info.filename for info in self._entries.values()]

    def part(self, name: str) -> bytes:
        """Return the unpacked bytes of a part."""
        info = self._entries[name.casefold()]
        try:
            # Never more than the checked size, whatever the packed stream would go on to give.
            with self._archive.open(info) as file:
                content = file.read(info.file_size)
        # zipfile lets whatever a damaged header provokes through, hence the long list.
        except (
            zipfile.BadZipFile,
            zlib.error,
            EOFError,
            ValueError,
            NotImplementedError,
            RuntimeError,
            OSError,
        ) as error:
            raise LogbookError(
                f"{self.path} is damaged: its part {name!r} cannot be unpacked"
            ) from error
        if len(content) != info.file_size:
            raise LogbookError(f"{self.path} is damaged: its part {name!r} is cut short")
        return content

    def xml(self, part: str) -> etree._Element:
        """Return the root of a small XML part, read without entities and without network."""
        parser = etree.XMLParser(
            resolve_entities=False, no_network=True, load_dtd=False, huge_tree=False
        )
        content = self.part(part)
        check_xml(content, self.path, part)
        try:
            return etree.fromstring(content, parser)
        except (etree.XMLSyntaxError, ValueError) as error:
            raise LogbookError(
                f"{self.path} is damaged: its part {part!r} is not readable XML"
            ) from error

    def relations(self, source: str) -> dict[str, tuple[str, str]]:
        """Return the internal relationships of a part ("" is the package): id → kind, target."""
        folder, name = posixpath.split(source)
        part = posixpath.join(folder, "_rels", f"{name}.rels")
        if not self.has(part):
            return {}
        found: dict[str, tuple[str, str]] = {}
        for element in self.xml(part).iterchildren("{*}Relationship"):
            if element.get("TargetMode") == "External":
                continue
            target = unquote(str(element.get("Target", "")))
            kind = str(element.get("Type", "")).rpartition("/")[2]
            place = posixpath.normpath(posixpath.join("/", folder, target)).lstrip("/")
            found[str(element.get("Id", ""))] = (kind, place)
        return found

    def save(self, path: Path, replaced: Mapping[str, bytes], *, overwrite: bool = False) -> None:
        """Write the package to `path` with the parts in `replaced` exchanged, whole or not at all.

        Raises LogbookError when `path` exists and `overwrite` is not asked, is read-only, is open
        in a spreadsheet program, or was changed since it was opened here; and for any failure on
        the way, after which `path` is as it was.
        """
        check_target(path, overwrite=overwrite)
        ours = path.resolve() == self.path.resolve()
        if ours and path.exists():
            now = path.stat()
            if self._stamp != (now.st_mtime_ns, now.st_size):
                raise LogbookError(f"{path} was changed by someone else since it was opened")
        if replaced and any(part.startswith("_xmlsignatures/") for part in self.parts):
            raise LogbookError(f"{self.path} is digitally signed, and an edit would void that")
        content = self._repacked(replaced) if replaced else self._packed
        written = write_whole(path, content, overwrite=overwrite)
        if ours:
            self._stamp = (written.st_mtime_ns, written.st_size)

    def _repacked(self, replaced: Mapping[str, bytes]) -> bytes:
        contents = {part.casefold(): content for part, content in replaced.items()}
        packed = io.BytesIO()
        with zipfile.ZipFile(packed, "w") as archive:
            archive.comment = self._archive.comment
            for key, old in self._entries.items():
                info = zipfile.ZipInfo(old.filename, old.date_time)
                for trait in (
                    "compress_type",
                    "comment",
                    "create_system",
                    "external_attr",
                    "internal_attr",
                ):
                    setattr(info, trait, getattr(old, trait))
                # zipfile writes its own size field where one is due.
                if ZIP64_FIELD not in old.extra:
                    info.extra = old.extra
                archive.writestr(info, contents[key] if key in contents else self.part(key))
        return packed.getvalue()


def check_target(path: Path, *, overwrite: bool) -> os.stat_result | None:
    """Return what is known of the file that is to be replaced, None where there is none yet.

    Raises LogbookError when `path` exists and `overwrite` is not asked, is read-only, or is open in
    a spreadsheet program.
    """
    target = path.resolve()
    if not target.parent.is_dir():
        raise LogbookError(f"{path} cannot be written: there is no folder {target.parent}")
    for folder, name in {(path.parent, path.name), (target.parent, target.name)}:
        for lock, program in ((f".~lock.{name}#", "LibreOffice"), (f"~${name}", "Excel")):
            if (folder / lock).exists():
                raise LogbookError(
                    f"{path} is open in {program} (there is a {lock}); close it there first"
                )
    if not target.exists():
        return None
    if not target.is_file():
        raise LogbookError(f"{path} cannot be written: it is not a file")
    if not overwrite:
        raise LogbookError(f"{path} exists and would be overwritten")
    before = target.stat()
    # root passes os.access whatever the mode says, but the mode is somebody's wish.
    if not before.st_mode & 0o222 or not os.access(target, os.W_OK):
        raise LogbookError(f"{path} is read-only")
    return before


def write_whole(path: Path, content: bytes, *, overwrite: bool = False) -> os.stat_result:
    """Write a file whole or not at all, and return what is known of it then.

    A new file is written beside the old one, synced, and takes its name; a link stays a link. The
    new one has the old one's owner and mode. Raises LogbookError as `check_target` does, and for
    any failure on the way, after which `path` is as it was.
    """
    before = check_target(path, overwrite=overwrite)
    target = path.resolve()
    new = target.with_name(f".{target.name}.{secrets.token_hex(4)}.new")
    try:
        # O_EXCL so that nobody else's file, or link, is ever written through.
        descriptor = os.open(new, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o666)
    except OSError as error:
        raise LogbookError(f"{path} was not written: {error.strerror}") from error
    try:
        with os.fdopen(descriptor, "wb") as file:
            if before:
                with suppress(OSError, AttributeError):
                    os.fchown(descriptor, before.st_uid, before.st_gid)
                with suppress(OSError, AttributeError):
                    os.fchmod(descriptor, stat.S_IMODE(before.st_mode))
            file.write(content)
            file.flush()
            os.fsync(descriptor)
        written = new.stat()
        os.replace(new, target)
    except OSError as error:
        raise LogbookError(f"{path} was not written: {error.strerror}") from error
    finally:
        with suppress(OSError):
            new.unlink()
    # The rename itself must outlast a power cut; where folders cannot be synced, it is as safe as
    # that system makes it.
    with suppress(OSError):
        folder = os.open(target.parent, os.O_RDONLY)
        try:
            os.fsync(folder)
        finally:
            os.close(folder)
    return written


# ---- a sheet's XML -------------------------------------------------------------------------
#
# The part is never parsed into a tree and written out again: that would lose white space, prefix
# declarations and the like. expat checks it first (well-formed, no document type) and tells where
# comments, CDATA and foreign namespaces lie; these are blanked in a copy of equal length. What is
# left has a form simple enough for regular expressions, whose offsets hold for the original too.

# Each alternative begins with a character of its own, so that nothing here backtracks far.
# (Possessive quantifiers would say so, but the re of Python 3.11.2, Debian 12's, loses groups.)
_ATTRIBUTES = rb"""[^<>"'/]*(?:(?:"[^"<]*"|'[^'<]*')[^<>"'/]*)*"""
_TAG = re.compile(rb"</?[^\s/>]+" + _ATTRIBUTES + rb"/?>")
_TYPE = re.compile(rb"""\s+t\s*=\s*(?:"[^"]*"|'[^']*')""")
_VALUE_METADATA = re.compile(rb"""\s+vm\s*=\s*(?:"[^"]*"|'[^']*')""")
_COUNT = re.compile(rb"""\s+(?:count|uniqueCount)\s*=\s*(?:"[^"]*"|'[^']*')""")
_ATTRIBUTE = re.compile(rb"""\s([\w:.-]+)\s*=\s*(?:"([^"]*)"|'([^']*)')""")
_POSITION = re.compile(rb"""\sr\s*=\s*["']([A-Z]{1,3})([0-9]{1,7})["']""")

# Excel's writing of characters that XML cannot carry (ST_Xstring, ECMA-376 part 1, 22.9.2.19);
# text that happens to look like one has its underscore written that way.
_UNWRITABLE = re.compile("[\x00-\x08\x0b-\x1f\ufffe\uffff]|_(?=x[0-9A-Fa-f]{4}_)")


def _attributes(tag: bytes) -> dict[bytes, bytes]:
    return {name: double or single for name, double, single in _ATTRIBUTE.findall(tag)}


@cache
def _letters(column: int) -> bytes:
    return column_letters(column).encode()


def _text(value: str) -> bytes:
    escaped = _UNWRITABLE.sub(lambda found: f"_x{ord(found[0]):04X}_", value)
    escaped = escaped.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
    return escaped.encode()


def _number(value: float) -> bytes:
    # float() first: a numpy number's own repr is not a number's text.
    return repr(float(value)).removesuffix(".0").encode()


def check_value(value: Value, cell: str) -> None:
    """Raise LogbookError when a cell cannot hold `value`; the sentence names `cell`."""
    if value is None or isinstance(value, ErrorValue):
        return
    if isinstance(value, str):
        if len(value) > LONGEST_TEXT:
            raise LogbookError(
                f"{cell} was given a text of {len(value):,} characters, more than the "
                f"{LONGEST_TEXT:,} a cell holds"
            )
        try:
            value.encode()
        except UnicodeEncodeError:
            raise LogbookError(f"{cell} was given a text that is not valid Unicode") from None
        return
    try:
        finite = math.isfinite(value)
    except OverflowError:
        finite = False
    except TypeError:
        raise TypeError(f"{cell} was given {value!r}, not a number, text or ErrorValue") from None
    if not finite:
        raise LogbookError(f"{cell} was given {value}, which is no number a cell can hold")


class _ColumnNumbers(dict[bytes, int]):
    """Column numbers by letters, each reckoned once: a sheet asks a million times for a dozen."""

    def __missing__(self, letters: bytes) -> int:
        number = self[letters] = column_number(letters.decode())
        return number


def check_xml(content: bytes, path: Path, part: str) -> "Layout":
    """Check that a part is well-formed UTF-8 XML without a document type; return its layout."""
    layout = Layout()
    parser = expat.ParserCreate(namespace_separator=" ")
    open_clashes: dict[str | None, list[int | None]] = {}

    def refuse_doctype(*_: object) -> None:
        raise LogbookError(
            f"{path} declares a document type in its part {part!r}, which no workbook may"
        )

    def check_encoding(_version: str, encoding: str | None, _standalone: int) -> None:
        if encoding and encoding.casefold() not in ("utf-8", "us-ascii"):
            raise LogbookError(f"{path} has its part {part!r} in {encoding}, not in UTF-8")

    def note_root(name: str, _attributes: object) -> None:
        layout.root = name
        layout.root_start = parser.CurrentByteIndex
        parser.StartElementHandler = None

    def blank_until(ending: bytes) -> None:
        start = parser.CurrentByteIndex
        layout.blanks.append((start, content.index(ending, start) + len(ending)))

    def begin_namespace(prefix: str | None, uri: str | None) -> None:
        clash = None
        if uri in MAIN_NAMESPACES:
            layout.prefixes.add(f"{prefix}:".encode() if prefix else b"")
        elif (f"{prefix}:".encode() if prefix else b"") in layout.prefixes:
            clash = parser.CurrentByteIndex
        open_clashes.setdefault(prefix, []).append(clash)

    def end_namespace(prefix: str | None) -> None:
        start = open_clashes[prefix].pop()
        if start is None:
            return
        # Of an empty element expat reports as its end the place before it or after it.
        tag = _TAG.match(content, start)
        if not tag or not tag[0].endswith(b"/>"):
            tag = _TAG.match(content, parser.CurrentByteIndex)
        layout.blanks.append((start, tag.end() if tag else len(content)))

    parser.StartDoctypeDeclHandler = refuse_doctype
    parser.XmlDeclHandler = check_encoding
    parser.StartElementHandler = note_root
    parser.CommentHandler = lambda _: blank_until(b"-->")
    parser.ProcessingInstructionHandler = lambda _target, _data: blank_until(b"?>")
    parser.StartCdataSectionHandler = lambda: blank_until(b"]]>")
    parser.StartNamespaceDeclHandler = begin_namespace
    parser.EndNamespaceDeclHandler = end_namespace
    if content.startswith((b"\xff\xfe", b"\xfe\xff")):
        raise LogbookError(f"{path} has its part {part!r} in UTF-16, not in UTF-8")
    try:
        parser.Parse(content, True)
    except expat.ExpatError as error:
        raise LogbookError(
            f"{path} is damaged: its part {part!r} is not readable XML "
            f"({expat.ErrorString(error.code)}, line {error.lineno})"
        ) from error
    return layout


class Layout:
    """What expat saw in a part: its root, the prefixes of the main namespace, what to pass over."""

    def __init__(self) -> None:
        self.root = ""
        self.root_start = 0
        self.prefixes: set[bytes] = set()
        self.blanks: list[tuple[int, int]] = []

    def without_counts(self, content: bytes) -> bytes:
        """Return content without the numbers of entries that its root element promises."""
        tag = _TAG.match(content, self.root_start)
        if not tag:
            return content
        return content[: tag.start()] + _COUNT.sub(b"", tag[0]) + content[tag.end() :]

    def blanked(self, content: bytes) -> bytes:
        """Return content with comments, CDATA and foreign namespaces turned into spaces."""
        if not self.blanks:
            return content
        plain = bytearray(content)
        for start, end in self.blanks:
            plain[start:end] = b" " * (end - start)
        return bytes(plain)


class SheetPart:
    """The XML of one worksheet: where its cells are, which hold formulas, and how to edit them."""

    def __init__(self, content: bytes, path: Path, part: str) -> None:
        """Check the part's XML; raise LogbookError when it is not a sound worksheet."""
        self.content = content
        self._where = f"{path}, part {part!r}"
        layout = check_xml(content, path, part)
        namespace, _, root = layout.root.rpartition(" ")
        if root != "worksheet" or namespace not in MAIN_NAMESPACES:
            raise LogbookError(f"{path} has no worksheet in its part {part!r}")
        self._plain = layout.blanked(content)
        root_name = re.match(rb"<([^\s/>]*:)?", self._plain[layout.root_start :][:256])
        self._prefix = (root_name and root_name[1]) or b""
        # "(?:x:|)" matches as well what has no prefix, when both stand for the main namespace.
        any_prefix = b"|".join(sorted(map(re.escape, layout.prefixes), reverse=True))
        self._any_prefix = name = rb"(?:" + any_prefix + rb")"

        def element(local_name: bytes, attributes: bytes, inside: bytes) -> bytes:
            """Return the pattern of an element that is empty or holds `inside`."""
            opening = rb"<" + name + local_name + rb"(?=[\s/>])" + attributes
            return opening + rb"(?:/>|>" + inside + rb"</" + name + local_name + rb"\s*>)"

        def anything_but_end(local_name: bytes) -> bytes:
            return rb"[^<]*(?:<(?!/" + name + local_name + rb"[\s>])[^<]*)*"

        self._row = re.compile(
            rb"<(" + any_prefix + rb")row(?: r=\"([0-9]{1,7})\")?(?=[\s/>])"
            rb"(" + _ATTRIBUTES + rb")(/?)>"
        )
        self._row_end = re.compile(rb"</" + name + rb"row\s*>")
        formula = element(rb"f", rb"(?P<formula_attributes>" + _ATTRIBUTES + rb")", rb"[^<]*")
        value = element(rb"v", _ATTRIBUTES, rb"(?P<stored>[^<]*)")
        inline = element(rb"is", _ATTRIBUTES, anything_but_end(rb"is"))
        # The order of a cell's children is fixed: f, v, is, extLst (ECMA-376 part 1, 18.3.1.4).
        # The common ` r="A1"` has groups of its own because taking attributes apart is slow.
        self._cell = re.compile(
            rb"<(?P<prefix>" + any_prefix + rb")c"
            rb"(?P<name> r=\"(?P<letters>[A-Z]{1,3})(?P<digits>[0-9]{1,7})\")?(?=[\s/>])"
            rb"(?P<attributes>" + _ATTRIBUTES + rb")"
            rb"(?:/>|>(?P<formula>\s*" + formula + rb")?"
            rb"(?P<gap>\s*)(?P<value>" + value + rb")?(?P<inline>\s*" + inline + rb")?"
            rb"(?P<rest>" + anything_but_end(rb"c") + rb")</" + name + rb"c\s*>)"
        )
        self._misplaced = re.compile(rb"<" + name + rb"(?:f|v|is)[\s/>]")
        opening = self._element(rb"sheetData")
        if not opening:
            raise LogbookError(f"{self._where}: the sheet has no place for cells")
        self._data_tag = opening
        self._data_start = opening.end()
        if opening[2]:
            self._data_end = self._data_start
        else:
            ending = re.compile(rb"</" + name + rb"sheetData\s*>").search(
                self._plain, self._data_start
            )
            self._data_end = ending.start() if ending else self._data_start
        self._column_numbers = _ColumnNumbers()
        self._formulas: set[int] = set()
        self._array_rows: dict[int, list[tuple[int, int]]] = {}
        self.errors: dict[tuple[int, int], ErrorValue] = {}
        self.last_row = 0
        self.last_column = 0
        self._take_stock()

    def _element(
        self, local_name: bytes, start: int = 0, end: int | None = None
    ) -> re.Match[bytes] | None:
        pattern = rb"<" + self._any_prefix + local_name
        pattern += rb"(?=[\s/>])(" + _ATTRIBUTES + rb")(/?)>"
        return re.compile(pattern).search(
            self._plain, start, len(self._plain) if end is None else end
        )

    # -- reading

    def _rows(self) -> Iterator[tuple[int, re.Match[bytes], int, int]]:
        """Yield each row's number, its tag, and where its content and the row itself end."""
        position, number = self._data_start, 0
        while found := self._row.search(self._plain, position, self._data_end):
            given = found[2] or _attributes(found[3]).get(b"r")
            if given is not None and not (given.isdigit() and len(given) <= 7):
                raise LogbookError(f"{self._where}: a row is numbered {given.decode()!r}")
            after = int(given) if given else number + 1
            if not number < after <= LAST_ROW:
                raise LogbookError(f"{self._where}: row {after} comes after row {number}")
            number = after
            content_end = position = found.end()
            if not found[4]:
                ending = self._row_end.search(self._plain, position, self._data_end)
                if not ending:
                    raise LogbookError(f"{self._where}: row {number} has no end")
                content_end, position = ending.span()
            yield number, found, content_end, position

    def _cells(
        self, row: int, start: int, end: int, column: int = 0
    ) -> Iterator[tuple[int, re.Match[bytes]]]:
        """Yield the column and the match of each cell of a row; `column` is the one before."""
        numbers = self._column_numbers
        own_digits = b"%d" % row
        for found in self._cell.finditer(self._plain, start, end):
            letters, digits = found.group("letters", "digits")
            if letters is None:
                given = _POSITION.search(found["attributes"])
                if given:
                    letters, digits = given.groups()
                elif b"r" in _attributes(found["attributes"]):
                    raise LogbookError(f"{self._where}: a cell of row {row} has no readable name")
                else:
                    column += 1
                    yield column, found
                    continue
            after = numbers[letters]
            if digits != own_digits or not column < after <= LAST_COLUMN:
                raise LogbookError(
                    f"{self._where}: cell {(letters + digits).decode()} is out of its place "
                    f"in row {row}"
                )
            column = after
            yield column, found

    def _take_stock(self) -> None:
        covered = 0
        for row, tag, content_end, _ in self._rows():
            for column, cell in self._cells(row, tag.end(), content_end):
                formula, attributes, rest = cell.group("formula", "attributes", "rest")
                if rest is None:
                    continue
                if rest and self._misplaced.search(rest):
                    raise LogbookError(
                        f"{self._where}: cell {cell_name(row, column)} is not laid out as a cell is"
                    )
                self.last_row = row
                if column > self.last_column:
                    self.last_column = column
                if formula is not None:
                    self._formulas.add(row << 15 | column)
                    if b"ref" in formula:
                        covered += self._note_array(_attributes(cell["formula_attributes"]))
                        if covered > 4 * LAST_ROW:
                            raise LogbookError(f"{self._where}: its array formulas overlap")
                # Looked for here because calamine gives an error as an empty cell.
                if b"e" in attributes and _attributes(attributes).get(b"t") == b"e":
                    with suppress(ValueError):
                        text = (cell["stored"] or b"").decode().strip()
                        self.errors[row, column] = ErrorValue(text)

    def _note_array(self, formula: dict[bytes, bytes]) -> int:
        # Only the first cell of an array formula or a data table carries the formula.
        if formula.get(b"t") not in (b"array", b"dataTable"):
            return 0
        area = Area.parsed(formula.get(b"ref", b"").decode())
        if area is None or area.last_row > LAST_ROW:
            return 0
        if area.first_row != area.last_row or area.first_column != area.last_column:
            for row in range(area.first_row, area.last_row + 1):
                self._array_rows.setdefault(row, []).append((area.first_column, area.last_column))
        return area.last_row - area.first_row + 1

    def has_formula(self, row: int, column: int) -> bool:
        """Say whether a cell holds a formula or lies in the range of an array formula."""
        return row << 15 | column in self._formulas or any(
            first <= column <= last for first, last in self._array_rows.get(row, ())
        )

    def formulas_outside(self, edits: Mapping[int, Mapping[int, Value]]) -> bool:
        """Say whether any cell but the edited ones holds a formula."""
        edited = {row << 15 | column for row, cells in edits.items() for column in cells}
        return not self._formulas <= edited

    @cached_property
    def merged(self) -> list[Area]:
        """The merged cells."""
        areas = []
        position = self._data_end
        while found := self._element(rb"mergeCell", position):
            position = found.end()
            area = Area.parsed(_attributes(found[1]).get(b"ref", b"").decode())
            if area:
                areas.append(area)
        return areas

    # -- editing

    def edited(self, edits: Mapping[int, Mapping[int, Value]]) -> bytes:
        """Return the part with cells set: edits[row][column] is a value, None empties the cell.

        A formula stays and only its stored result changes. Every byte outside the edited cells
        is kept, but for the widened `spans` of a row and `dimension` of the sheet where cells
        came in outside them.
        """
        out = bytearray()
        done = 0
        new_rows = sorted(
            row
            for row, cells in edits.items()
            if any(value is not None for value in cells.values())
        )
        next_new = 0
        view = memoryview(self.content)

        def insert_before(number: int) -> None:
            nonlocal next_new
            while next_new < len(new_rows) and new_rows[next_new] < number:
                out.extend(self._new_row(new_rows[next_new], edits[new_rows[next_new]]))
                next_new += 1

        if widened := self._widened_dimension(edits):
            start, end, text = widened
            out += view[:start]
            out += text
            done = end
        if self._data_tag[2] and new_rows:
            out += view[done : self._data_start - len("/>")]
            out += b">"
            insert_before(LAST_ROW + 1)
            out += b"</" + self._data_tag[0][1:].split()[0].rstrip(b"/>") + b">"
            done = self._data_start
        last_end = self._data_start
        for number, tag, content_end, row_end in self._rows():
            if next_new < len(new_rows) and new_rows[next_new] < number:
                out += view[done : tag.start()]
                done = tag.start()
                insert_before(number)
            if number in edits:
                if next_new < len(new_rows) and new_rows[next_new] == number:
                    next_new += 1
                out += view[done : tag.start()]
                out += self._edited_row(number, tag, content_end, row_end, edits[number])
                done = row_end
            last_end = row_end
        if next_new < len(new_rows):
            out += view[done:last_end]
            done = last_end
            insert_before(LAST_ROW + 1)
        out += view[done:]
        return bytes(out)

    def _edited_row(
        self,
        number: int,
        tag: re.Match[bytes],
        content_end: int,
        row_end: int,
        wanted: Mapping[int, Value],
    ) -> bytes:
        content = self.content
        pieces: list[bytes] = []
        inserted: list[int] = []
        done = tag.end()
        # The last cell passed ends at `passed`; the next one is not before column `ahead`.
        passed, passed_column, ahead = done, 0, 0
        for column in sorted(wanted):
            cell = None
            if ahead <= column:
                # Markup cannot stand inside a value, so what is found here is the cell.
                mark = b'<%bc r="%b%d"' % (tag[1], _letters(column), number)
                place = self._plain.find(mark, passed, content_end)
                if place >= 0:
                    cell = self._cell.match(self._plain, place, content_end)
                else:
                    ahead = LAST_COLUMN + 1
                    for at, other in self._cells(number, passed, content_end, passed_column):
                        if at >= column:
                            ahead = at
                            cell = other if at == column else None
                            break
                        passed, passed_column = other.end(), at
            value = wanted[column]
            if cell:
                pieces.append(content[done : cell.start()])
                pieces.append(self._edited_cell(number, column, cell, value))
                done = passed = cell.end()
                passed_column, ahead = column, 0
            elif value is not None:
                pieces.append(content[done:passed])
                done = passed
                style = self._style(tag[3], column)
                pieces.append(self._new_cell(number, column, value, style, tag[1]))
                inserted.append(column)
        opening = tag[0]
        if inserted:
            opening = self._widened_spans(opening, inserted)
            if tag[4]:
                closing = b"</" + tag[1] + b"row>"
                return b"".join((opening[:-2], b">", *pieces, closing))
        return b"".join((opening, *pieces, content[done:row_end]))

    def _edited_cell(self, row: int, column: int, cell: re.Match[bytes], value: Value) -> bytes:
        prefix, name, attributes, formula, old, inline, rest = cell.group(
            "prefix", "name", "attributes", "formula", "value", "inline", "rest"
        )
        if value is None and old is None and inline is None:
            return self.content[cell.start() : cell.end()]
        if b"t" in attributes:
            attributes = _TYPE.sub(b"", attributes)
        calculated = formula is not None or self.has_formula(row, column)
        if not calculated and b"vm" in attributes:
            # Value metadata describes the value that is going.
            attributes = _VALUE_METADATA.sub(b"", attributes)
        kind, stored = self._stored(value, calculated, prefix)
        before = after = b""
        if rest is not None:
            # From the original, where comments are not blanked.
            gap = cell.end("gap")
            before = self.content[cell.start("gap" if formula is None else "formula") : gap]
            if rest:
                after = self.content[cell.start("rest") : cell.end("rest")]
        opening = b"<%bc%b%b%b" % (prefix, name or b"", attributes.rstrip(), kind)
        if not (before or stored or after):
            return opening + b"/>"
        return b"%b>%b%b%b</%bc>" % (opening, before, stored, after, prefix)

    def _stored(self, value: Value, has_formula: bool, prefix: bytes) -> tuple[bytes, bytes]:
        """Return the cell's `t` attribute and the elements that hold the value."""
        if type(value) is float:
            return b"", self._v(_number(value), prefix)
        match value:
            case None:
                return b"", b""
            case bool():
                return b' t="b"', self._v(b"1" if value else b"0", prefix)
            case ErrorValue():
                return b' t="e"', self._v(value.text.encode(), prefix)
            case str() if has_formula:
                return b' t="str"', self._v(_text(value), prefix)
            case str():
                return b' t="inlineStr"', (
                    b'<%bis><%bt xml:space="preserve">%b</%bt></%bis>'
                    % (prefix, prefix, _text(value), prefix, prefix)
                )
            case _:
                return b"", self._v(_number(value), prefix)

    def _v(self, text: bytes, prefix: bytes) -> bytes:
        return b"<%bv>%b</%bv>" % (prefix, text, prefix)

    def _new_row(self, number: int, cells: Mapping[int, Value]) -> bytes:
        prefix = self._prefix
        inside = b"".join(
            self._new_cell(number, column, value, self._style(b"", column), prefix)
            for column, value in sorted(cells.items())
            if value is not None
        )
        return b'<%brow r="%d">%b</%brow>' % (prefix, number, inside, prefix)

    def _new_cell(self, row: int, column: int, value: Value, style: bytes, prefix: bytes) -> bytes:
        kind, stored = self._stored(value, self.has_formula(row, column), prefix)
        name = b"%b%d" % (_letters(column), row)
        return b'<%bc r="%b"%b%b>%b</%bc>' % (prefix, name, style, kind, stored, prefix)

    def _style(self, row_attributes: bytes, column: int) -> bytes:
        row = _attributes(row_attributes)
        if row.get(b"customFormat") in (b"1", b"true") and b"s" in row:
            return b' s="%b"' % row[b"s"]
        for first, last, style in self._column_styles:
            if first <= column <= last:
                return b' s="%b"' % style
        return b""

    @cached_property
    def _column_styles(self) -> list[tuple[int, int, bytes]]:
        styles = []
        position = 0
        while found := self._element(rb"col", position, self._data_tag.start()):
            position = found.end()
            column = _attributes(found[1])
            with suppress(KeyError, ValueError):
                styles.append((int(column[b"min"]), int(column[b"max"]), column[b"style"]))
        return styles

    def _widened_spans(self, tag: bytes, inserted: list[int]) -> bytes:
        found = re.search(rb"""\sspans\s*=\s*["']([0-9: ]+)["']""", tag)
        if not found:
            return tag
        spans = [tuple(map(int, span.split(b":"))) for span in found[1].split()]
        if all(any(span[0] <= column <= span[-1] for span in spans) for column in inserted):
            return tag
        first = min(inserted[0], *(span[0] for span in spans))
        last = max(inserted[-1], *(span[-1] for span in spans))
        return tag[: found.start(1)] + b"%d:%d" % (first, last) + tag[found.end(1) :]

    def _widened_dimension(
        self, edits: Mapping[int, Mapping[int, Value]]
    ) -> tuple[int, int, bytes] | None:
        """Return where the dimension's text stands and what it must become, None if it holds."""
        found = self._element(rb"dimension", 0, self._data_tag.start())
        place = found and re.compile(rb"""\sref\s*=\s*["']([^"']*)["']""").search(
            self._plain, found.start(1), found.end(1)
        )
        area = Area.parsed(place[1].decode()) if place else None
        rows = [
            row
            for row, cells in edits.items()
            if any(value is not None for value in cells.values())
        ]
        if not place or not area or not rows:
            return None
        columns = {
            column for row in rows for column, value in edits[row].items() if value is not None
        }
        wide = Area(
            min(area.first_row, *rows),
            min(area.first_column, *columns),
            max(area.last_row, *rows),
            max(area.last_column, *columns),
        )
        return None if wide == area else (place.start(1), place.end(1), str(wide).encode())
