"""The package of an .xlsx or .xlsm: which part is the workbook, which ones are its sheets."""

import posixpath
from pathlib import Path
from urllib.parse import unquote

from lxml import etree

from workbooks.files.archive import Archive
from workbooks.files.cells import LogbookError
from workbooks.files.xml_check import MAIN_NAMESPACES

RELATIONSHIP_IDS = (
    "{http://schemas.openxmlformats.org/officeDocument/2006/relationships}id",
    "{http://purl.oclc.org/ooxml/officeDocument/relationships}id",
)


class Package(Archive):
    """The parts of an .xlsx, and which of them is which sheet."""

    def __init__(self, path: Path) -> None:
        """Open and check `path`; raise LogbookError for anything that is not a sound .xlsx."""
        super().__init__(path, path.suffix.lower() if path.suffix.lower() == ".xlsm" else ".xlsx")
        self._find_workbook()

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
