"""Comments put into cells of an .xlsx or .xlsm, every other byte kept (ECMA-376 part 1, 18.7)."""

import copy
import posixpath
import re
import zipfile
from collections.abc import Mapping
from io import BytesIO
from typing import Final
from xml.sax.saxutils import escape

from lxml import etree

from workbooks.files.cells import Area, LogbookError
from workbooks.files.package import Package

OFFICE: Final = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
RELATIONSHIPS: Final = "http://schemas.openxmlformats.org/package/2006/relationships"
CONTENT_TYPES: Final = "http://schemas.openxmlformats.org/package/2006/content-types"
COMMENTS_TYPE: Final = "application/vnd.openxmlformats-officedocument.spreadsheetml.comments+xml"
VML_TYPE: Final = "application/vnd.openxmlformats-officedocument.vmlDrawing"

HEAD: Final = '<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\n'

AFTER_LEGACY_DRAWING: Final = re.compile(
    rb"<(?:[\w.-]+:)?(?:legacyDrawingHF|drawingHF|picture|oleObjects|controls|webPublishItems|"
    rb"tableParts|extLst|AlternateContent)(?=[\s/>])|</(?:[\w.-]+:)?worksheet\s*>"
)
"""What may follow a sheet's legacyDrawing (ECMA-376 part 1, 18.3.1.99)"""

_COMMENT: Final = re.compile(
    rb"<(?:[\w.-]+:)?comment(?=\s)[^>]*\sref\s*=\s*[\"']([A-Z]+[0-9]+)[\"'][^>]*>"
    rb".*?(</(?:[\w.-]+:)?text\s*>)",
    re.DOTALL,
)
"""A comment up to the end of its text, and which cell's it is"""


def commented(package: Package, comments: Mapping[str, Mapping[str, str]], author: str) -> bytes:
    """Return the workbook with comments: a text by the name of a sheet and of a cell.

    A comment that is there stays, and the text comes after it. Raises LogbookError where the
    workbook is signed, or a part has no place for a comment.
    """
    if any(part.casefold().startswith("_xmlsignatures/") for part in package.parts):
        raise LogbookError(f"{package.path} is digitally signed, and an edit would void that")
    changed = _Changed(package)
    for sheet, cells in comments.items():
        _Sheet(changed, package.sheets[sheet], author).comment(cells)
    return changed.repacked()


class _Changed:
    """A package with some parts in a new state, and parts that are new."""

    def __init__(self, package: Package) -> None:
        self.package = package
        self.contents: dict[str, bytes] = {}

    def has(self, part: str) -> bool:
        return part in self.contents or self.package.has(part)

    def part(self, name: str) -> bytes:
        return self.contents.get(self._stored(name)) or self.package.part(name)

    def put(self, name: str, content: bytes) -> None:
        self.contents[self._stored(name)] = content

    def _stored(self, name: str) -> str:
        """Return a part's name as the archive spells it."""
        spelt = {part.casefold(): part for part in self.package.parts}
        return spelt.get(name.casefold(), name)

    def unused(self, pattern: str) -> str:
        """Return the first name of a pattern that no part has."""
        taken = {part.casefold() for part in (*self.package.parts, *self.contents)}
        number = 1
        while pattern.format(number).casefold() in taken:
            number += 1
        return pattern.format(number)

    def repacked(self) -> bytes:
        """Return the archive: old parts in their order and as they were, new ones at the end."""
        packed = BytesIO()
        rest = dict(self.contents)
        with zipfile.ZipFile(self.package.path) as old, zipfile.ZipFile(packed, "w") as new:
            new.comment = old.comment
            for each in old.infolist():
                info = copy.copy(each)
                content = rest.pop(each.filename, None)
                new.writestr(info, self.package.part(each.filename) if content is None else content)
            for name, content in rest.items():
                new.writestr(name, content, zipfile.ZIP_DEFLATED)
        return packed.getvalue()


class _Sheet:
    """A worksheet that gets comments."""

    def __init__(self, changed: _Changed, part: str, author: str) -> None:
        self.changed = changed
        self.part = part
        self.author = author
        self.related = changed.package.relations(part)
        self.namespace = _namespace(changed.part(part))

    def comment(self, cells: Mapping[str, str]) -> None:
        comments = next(
            (target for kind, target in self.related.values() if kind == "comments"), ""
        )
        if not comments:
            comments = self.changed.unused("xl/comments{}.xml")
            self.changed.put(comments, _no_comments(self.namespace))
            self._relate("comments", comments)
            self._declare(comments)
        new = self._write_texts(comments, cells)
        self._draw(new)

    # -- the texts

    def _write_texts(self, part: str, cells: Mapping[str, str]) -> list[str]:
        """Write the texts and return the cells that had no comment before."""
        content = self.changed.part(part)
        namespace = _namespace(content)
        authors = len(etree.fromstring(content, _parser()).findall(f"{{{namespace}}}authors/*"))
        content = _before_end(
            content,
            b"authors",
            f'<author xmlns="{namespace}">{escape(self.author)}</author>'.encode(),
        )
        pieces: list[bytes] = []
        before: set[str] = set()
        done = 0
        for old in _COMMENT.finditer(content):
            cell = old[1].decode()
            if cell in cells and cell not in before:
                before.add(cell)
                run = (
                    f'<r xmlns="{namespace}"><t xml:space="preserve">'
                    f"\n\n{escape(cells[cell])}</t></r>"
                )
                pieces += content[done : old.start(2)], run.encode()
                done = old.start(2)
        content = b"".join([*pieces, content[done:]])
        new = [cell for cell in cells if cell not in before]
        added = [
            f'<comment xmlns="{namespace}" ref="{cell}" authorId="{authors}"><text><r>'
            f'<t xml:space="preserve">{escape(cells[cell])}</t></r></text></comment>'
            for cell in new
        ]
        content = _before_end(content, b"commentList", "".join(added).encode())
        self.changed.put(part, content)
        return new

    # -- the boxes, without which some programs show no comment

    def _draw(self, cells: list[str]) -> None:
        link = self._legacy_link()
        part = self.related.get(link, ("", ""))[1] if link else ""
        if not part:
            part = self.changed.unused("xl/drawings/vmlDrawing{}.vml")
            self.changed.put(part, _no_boxes())
            self._refer(self._relate("vmlDrawing", part))
            self._declare_vml()
        content = self.changed.part(part)
        used = [int(number) for number in re.findall(rb"_x0000_s(\d{1,9})", content)]
        first = max(used, default=1024) + 1
        boxes = "".join(_box(cell, first + place) for place, cell in enumerate(cells))
        self.changed.put(part, _before_end(content, b"xml", boxes.encode()))

    def _legacy_link(self) -> str:
        found = re.search(
            rb"<(?:[\w.-]+:)?legacyDrawing\s[^>]*?:id\s*=\s*[\"']([^\"']+)[\"']",
            _blanked(self.changed.part(self.part)),
        )
        return found[1].decode() if found else ""

    def _refer(self, link: str) -> None:
        """Name the drawing in the sheet itself."""
        content = self.changed.part(self.part)
        plain = _blanked(content)
        # cells hold none of these elements, but may hold their names as text
        place = AFTER_LEGACY_DRAWING.search(plain, plain.rfind(b"sheetData"))
        if place is None:
            raise LogbookError(f"{self.changed.package.path}: the part {self.part!r} has no end")
        element = (
            f'<legacyDrawing xmlns="{self.namespace}" xmlns:r="{OFFICE}" r:id="{link}"/>'
        ).encode()
        self.changed.put(self.part, content[: place.start()] + element + content[place.start() :])

    # -- the package's own lists

    def _relate(self, kind: str, target: str) -> str:
        """Add a relationship of the sheet and return its name."""
        folder, name = posixpath.split(self.part)
        part = posixpath.join(folder, "_rels", f"{name}.rels")
        if not self.changed.has(part):
            self.changed.put(
                part, f'{HEAD}<Relationships xmlns="{RELATIONSHIPS}"></Relationships>'.encode()
            )
        content = self.changed.part(part)
        number = 1
        while re.search(rb"[\"']found%d[\"']" % number, content):
            number += 1
        link = f"found{number}"
        element = (
            f'<Relationship xmlns="{RELATIONSHIPS}" Id="{link}" Type="{OFFICE}/{kind}" '
            f'Target="/{target}"/>'
        )
        self.changed.put(part, _before_end(content, b"Relationships", element.encode()))
        return link

    def _declare(self, part: str) -> None:
        self._add_type(f'<Override PartName="/{part}" ContentType="{COMMENTS_TYPE}"')

    def _declare_vml(self) -> None:
        types = etree.fromstring(self.changed.part("[Content_Types].xml"), _parser())
        known = {
            str(each.get("Extension", "")).casefold()
            for each in types.iterfind(f"{{{CONTENT_TYPES}}}Default")
        }
        if "vml" not in known:
            self._add_type(f'<Default Extension="vml" ContentType="{VML_TYPE}"')

    def _add_type(self, element: str) -> None:
        name = "[Content_Types].xml"
        added = f'{element} xmlns="{CONTENT_TYPES}"/>'.encode()
        self.changed.put(name, _before_end(self.changed.part(name), b"Types", added))


def _parser() -> etree.XMLParser:
    return etree.XMLParser(resolve_entities=False, no_network=True, load_dtd=False)


def _namespace(content: bytes) -> str:
    """Return the namespace of a part's root element."""
    _, root = next(
        iter(
            etree.iterparse(
                BytesIO(content), events=("start",), resolve_entities=False, no_network=True
            )
        )
    )
    return str(etree.QName(root).namespace)


def _blanked(content: bytes) -> bytes:
    """Return the content with comments and CDATA turned into blanks of the same length."""
    return re.sub(
        rb"<!--.*?-->|<!\[CDATA\[.*?\]\]>", lambda found: b" " * len(found[0]), content, flags=re.S
    )


def _before_end(content: bytes, name: bytes, added: bytes) -> bytes:
    """Put something in at the end of an element, of which there is one."""
    plain = _blanked(content)
    ends = list(re.finditer(rb"</(?:[\w.-]+:)?" + name + rb"\s*>", plain))
    if ends:
        place = ends[-1].start()
        return content[:place] + added + content[place:]
    empty = re.search(rb"<((?:[\w.-]+:)?" + name + rb")(?=[\s/])[^<>]*?(/>)", plain)
    if empty is None:
        raise LogbookError(f"a part of the workbook has no {name.decode()}")
    return (
        content[: empty.start(2)] + b">" + added + b"</" + empty[1] + b">" + content[empty.end() :]
    )


def _no_comments(namespace: str) -> bytes:
    return (
        f'{HEAD}<comments xmlns="{namespace}"><authors></authors>'
        "<commentList></commentList></comments>"
    ).encode()


def _no_boxes() -> bytes:
    return (
        b'<xml xmlns:v="urn:schemas-microsoft-com:vml" '
        b'xmlns:o="urn:schemas-microsoft-com:office:office" '
        b'xmlns:x="urn:schemas-microsoft-com:office:excel">'
        b'<o:shapelayout v:ext="edit"><o:idmap v:ext="edit" data="1"/></o:shapelayout>'
        b'<v:shapetype id="_x0000_t202" coordsize="21600,21600" o:spt="202" '
        b'path="m,l,21600r21600,l21600,xe"><v:stroke joinstyle="miter"/>'
        b'<v:path gradientshapeok="t" o:connecttype="rect"/></v:shapetype></xml>'
    )


def _box(cell: str, number: int) -> str:
    """Return the box of a comment, hidden until a person points at its cell."""
    area = Area.parsed(cell)
    assert area is not None
    row, column = area.first_row - 1, area.first_column - 1
    return (
        '<v:shape xmlns:v="urn:schemas-microsoft-com:vml" '
        'xmlns:o="urn:schemas-microsoft-com:office:office" '
        'xmlns:x="urn:schemas-microsoft-com:office:excel" '
        f'id="_x0000_s{number}" type="#_x0000_t202" '
        'style="position:absolute;visibility:hidden" fillcolor="#f3ddb3" o:insetmode="auto">'
        '<v:fill color2="#f3ddb3"/><v:path o:connecttype="none"/>'
        '<v:textbox style="mso-direction-alt:auto"><div style="text-align:left"></div></v:textbox>'
        '<x:ClientData ObjectType="Note"><x:MoveWithCells/><x:SizeWithCells/>'
        f"<x:Anchor>{column + 1}, 15, {row}, 4, {column + 5}, 15, {row + 6}, 4</x:Anchor>"
        f"<x:AutoFill>False</x:AutoFill><x:Row>{row}</x:Row><x:Column>{column}</x:Column>"
        "</x:ClientData></v:shape>"
    )
