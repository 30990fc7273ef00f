"""XML of a workbook's part checked before anything else reads it."""

import re
from pathlib import Path
from xml.parsers import expat

from workbooks.files.cells import LogbookError

# ECMA-376 part 1 section 18.2 (transitional) and ISO/IEC 29500-1 strict.
MAIN_NAMESPACES = (
    "http://schemas.openxmlformats.org/spreadsheetml/2006/main",
    "http://purl.oclc.org/ooxml/spreadsheetml/main",
)

# Each alternative begins with a character of its own, so that nothing here backtracks far.
# (Possessive quantifiers would say so, but the re of Python 3.11.2, Debian 12's, loses groups.)
ATTRIBUTES = rb"""[^<>"'/]*(?:(?:"[^"<]*"|'[^'<]*')[^<>"'/]*)*"""
TAG = re.compile(rb"</?[^\s/>]+" + ATTRIBUTES + rb"/?>")
_COUNT = re.compile(rb"""\s+(?:count|uniqueCount)\s*=\s*(?:"[^"]*"|'[^']*')""")
_ATTRIBUTE = re.compile(rb"""\s([\w:.-]+)\s*=\s*(?:"([^"]*)"|'([^']*)')""")


def attributes_of(tag: bytes) -> dict[bytes, bytes]:
    """Return the attributes that stand in a tag."""
    return {name: double or single for name, double, single in _ATTRIBUTE.findall(tag)}


class Layout:
    """What expat saw in a part: its root, the prefixes of the main namespace, what to pass over."""

    def __init__(self) -> None:
        self.root = ""
        self.root_start = 0
        self.prefixes: set[bytes] = set()
        self.blanks: list[tuple[int, int]] = []

    def without_counts(self, content: bytes) -> bytes:
        """Return content without the numbers of entries that its root element promises."""
        tag = TAG.match(content, self.root_start)
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


class Unusual(Exception):
    """A part is not laid out in the plain way that the fast reading takes."""


class Checker:
    """expat, told what no workbook may hold; fed with a part, it notes the part's layout."""

    def __init__(self, path: Path, part: str) -> None:
        self.layout = Layout()
        self._where = path, part
        self.parser = parser = expat.ParserCreate(namespace_separator=" ")
        self._is_first = True
        parser.StartDoctypeDeclHandler = self._refuse_doctype
        parser.XmlDeclHandler = self._check_encoding
        parser.StartElementHandler = self._note_root
        parser.StartNamespaceDeclHandler = self._begin_namespace

    def feed(self, chunk: bytes, final: bool = False) -> None:
        """Check the next piece; raise LogbookError where it is not sound."""
        path, part = self._where
        if self._is_first and chunk.startswith((b"\xff\xfe", b"\xfe\xff")):
            raise LogbookError(f"{path} has its part {part!r} in UTF-16, not in UTF-8")
        self._is_first = False
        try:
            self.parser.Parse(chunk, final)
        except expat.ExpatError as error:
            raise LogbookError(
                f"{path} is damaged: its part {part!r} is not readable XML "
                f"({expat.ErrorString(error.code)})"
            ) from error

    def _refuse_doctype(self, *_: object) -> None:
        path, part = self._where
        raise LogbookError(
            f"{path} declares a document type in its part {part!r}, which no workbook may"
        )

    def _check_encoding(self, _version: str, encoding: str | None, _standalone: int) -> None:
        path, part = self._where
        if encoding and encoding.casefold() not in ("utf-8", "us-ascii"):
            raise LogbookError(f"{path} has its part {part!r} in {encoding}, not in UTF-8")

    def _note_root(self, name: str, _attributes: object) -> None:
        self.layout.root = name
        self.layout.root_start = self.parser.CurrentByteIndex
        self.parser.StartElementHandler = None

    def _begin_namespace(self, prefix: str | None, uri: str | None) -> None:
        if uri in MAIN_NAMESPACES:
            self.layout.prefixes.add(f"{prefix}:".encode() if prefix else b"")


class _WholeChecker(Checker):
    """The same with all of the part at hand, so that it can say where each blank ends."""

    def __init__(self, path: Path, part: str, content: bytes) -> None:
        super().__init__(path, part)
        self._content = content
        self._open_clashes: dict[str | None, list[int | None]] = {}
        parser = self.parser
        parser.CommentHandler = lambda _: self._blank_until(b"-->")
        parser.ProcessingInstructionHandler = lambda _target, _data: self._blank_until(b"?>")
        parser.StartCdataSectionHandler = lambda: self._blank_until(b"]]>")
        parser.EndNamespaceDeclHandler = self._end_namespace

    def _blank_until(self, ending: bytes) -> None:
        start = self.parser.CurrentByteIndex
        end = self._content.index(ending, start) + len(ending)
        self.layout.blanks.append((start, end))

    def _begin_namespace(self, prefix: str | None, uri: str | None) -> None:
        clash = None
        if uri not in MAIN_NAMESPACES and (
            (f"{prefix}:".encode() if prefix else b"") in self.layout.prefixes
        ):
            clash = self.parser.CurrentByteIndex
        super()._begin_namespace(prefix, uri)
        self._open_clashes.setdefault(prefix, []).append(clash)

    def _end_namespace(self, prefix: str | None) -> None:
        start = self._open_clashes[prefix].pop()
        if start is None:
            return
        # Of an empty element expat reports as its end the place before it or after it.
        tag = TAG.match(self._content, start)
        if not tag or not tag[0].endswith(b"/>"):
            tag = TAG.match(self._content, self.parser.CurrentByteIndex)
        self.layout.blanks.append((start, tag.end() if tag else len(self._content)))


class FrameChecker(Checker):
    """The same for what stands around the rows of a plain sheet, which gives up on any other."""

    def __init__(self, path: Path, part: str) -> None:
        super().__init__(path, part)
        parser = self.parser
        parser.CommentHandler = parser.ProcessingInstructionHandler = self._give_up
        parser.StartCdataSectionHandler = self._give_up

    def _give_up(self, *_: object) -> None:
        raise Unusual

    def _begin_namespace(self, prefix: str | None, uri: str | None) -> None:
        # Only the root may name the main namespace, or take its prefix for another one.
        spelling = f"{prefix}:".encode() if prefix else b""
        if self.layout.root and (uri in MAIN_NAMESPACES or spelling in self.layout.prefixes):
            raise Unusual
        super()._begin_namespace(prefix, uri)


def check_xml(content: bytes, path: Path, part: str) -> Layout:
    """Check that a part is well-formed UTF-8 XML without a document type; return its layout."""
    checker = _WholeChecker(path, part, content)
    checker.feed(content, True)
    return checker.layout


def is_obviously_sound(text: bytes) -> bool:
    """Say whether text and tags, whose form was seen to, need no parser to be well-formed."""
    return (
        text.isascii()
        and not text.translate(None, _HARMLESS)
        and b"]]>" not in text
        and (b"&" not in text or text.count(b"&") == sum(map(text.count, _ENTITIES)))
    )


_HARMLESS = bytes([9, 10, 13, *range(32, 128)])
_ENTITIES = (b"&amp;", b"&lt;", b"&gt;", b"&quot;", b"&apos;")
