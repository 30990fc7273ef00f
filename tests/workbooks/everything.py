"""Makes a workbook that holds one of everything which an edit of cells must leave alone."""

import io
import re
import struct
import zipfile
import zlib
from datetime import datetime
from pathlib import Path

from openpyxl import Workbook
from openpyxl.chart import Reference, ScatterChart, Series
from openpyxl.comments import Comment
from openpyxl.formatting.rule import CellIsRule, ColorScaleRule
from openpyxl.styles import Font, PatternFill
from openpyxl.workbook.defined_name import DefinedName
from openpyxl.worksheet.datavalidation import DataValidation
from openpyxl.worksheet.formula import ArrayFormula
from openpyxl.worksheet.table import Table
from openpyxl.worksheet.worksheet import Worksheet

OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
SPREADSHEET = "application/vnd.openxmlformats-officedocument.spreadsheetml"
WHEN = (2031, 3, 14, 21, 30, 0)
NIGHT_PART = "xl/worksheets/sheet1.xml"

# Sheet "Night 1": headers in row 4, data in rows 5 to 12. An invented night.
HEADERS = ("Exposure", "Line", "Wavelength [Angstrom]", "Sigma (Angstrom)", "Redshift", "Note")
EXPOSURES = (
    ("k001", "H alpha", 6702.13, 0.21, "seeing 1.2"),
    ("k002", "H beta", 4964.9, 0.35, None),
    ("k003", "[O III] 5007", None, 0.4, "cloud"),
    ("k004", "H alpha", 6871.55, None, "= not a formula"),
    ("k005", "H gamma", 4432.02, 0.5, None),
    ("k006", "H alpha", 6699.8, 0.2, "  "),
    ("k007", "Ca II K", 4017.31, 0.61, None),
    ("k008", "H alpha", 7012.44, 0.33, "end"),
)


def write_everything(path: Path) -> Path:
    """Write the workbook to `path`: the same bytes each time."""
    workbook = Workbook()
    night = workbook.active
    night.title = "Night 1"
    _fill_night(night)
    second = workbook.create_sheet("Night 2, b&w")
    for column, header in enumerate(HEADERS, 2):
        second.cell(4, column, header)
    second.cell(5, 2, "m001")
    second.cell(5, 4, 5008.24)
    second["H5"] = "='Night 1'!G5*2"
    settings = workbook.create_sheet("Settings")
    settings["B2"] = 67.66
    settings["B3"] = datetime(2031, 3, 14)
    workbook.defined_names["hubble_constant"] = DefinedName(
        "hubble_constant", attr_text="Settings!$B$2"
    )
    workbook.defined_names["measured"] = DefinedName("measured", attr_text="'Night 1'!$D$5:$D$12")
    workbook.defined_names["first_line"] = DefinedName("first_line", attr_text="'Night 1'!$D$5")
    night.defined_names["only_here"] = DefinedName("only_here", attr_text="'Night 1'!$D$6")
    drawn = io.BytesIO()
    workbook.save(drawn)
    _add_parts(drawn, path)
    return path


def _fill_night(night: Worksheet) -> None:
    night["B2"] = "Night of 14 March 2031"
    night.merge_cells("B2:D2")
    for column, header in enumerate(HEADERS, 2):
        night.cell(4, column, header).font = Font(bold=True)
    for row, (exposure, line, wavelength, sigma, note) in enumerate(EXPOSURES, 5):
        night.cell(row, 2, exposure)
        night.cell(row, 3, line)
        if wavelength is not None:
            night.cell(row, 4, wavelength).number_format = "0.00"
        if sigma is not None:
            night.cell(row, 5, sigma)
        night.cell(row, 6, f"=D{row}/6564.61-1").number_format = "0.0000"
        if note is not None:
            cell = night.cell(row, 7, note)
            cell.data_type = "s"
    night["I5"] = ArrayFormula("I5:I7", "=D5:D7*2")
    night["J5"] = True
    night["J6"] = datetime(2031, 3, 14, 22, 15, 30)
    night["J7"] = datetime(2031, 3, 15)
    for name, error in (("K5", "#N/A"), ("K6", "#DIV/0!")):
        night[name] = error
        night[name].data_type = "e"
    night.column_dimensions["M"].number_format = "0.000"
    night.row_dimensions[14].fill = PatternFill("solid", fgColor="FFEEDD")
    night["D5"].comment = Comment("re-measured by hand", "night assistant")
    night.conditional_formatting.add(
        "E5:E12", CellIsRule(operator="greaterThan", formula=["0.5"], font=Font(italic=True))
    )
    night.conditional_formatting.add(
        "D5:D12", ColorScaleRule(start_type="min", start_color="FFFFFF", end_type="max")
    )
    choice = DataValidation(type="list", formula1='"H alpha,H beta"', allow_blank=True)
    choice.add("C5:C12")
    night.add_data_validation(choice)
    night.add_table(Table(displayName="Exposures", ref="B4:G12"))
    chart = ScatterChart()
    chart.series.append(
        Series(
            Reference(night, min_col=5, min_row=5, max_row=12),
            Reference(night, min_col=4, min_row=5, max_row=12),
        )
    )
    night.add_chart(chart, "B20")


def _picture() -> bytes:
    """Return a PNG of 8 by 8 grey pixels (W3C PNG specification, second edition)."""

    def chunk(kind: bytes, data: bytes) -> bytes:
        return (
            struct.pack(">I", len(data)) + kind + data + struct.pack(">I", zlib.crc32(kind + data))
        )

    rows = b"".join(b"\0" + bytes(range(row, row + 64, 8)) for row in range(8))
    header = struct.pack(">IIBBBBB", 8, 8, 8, 0, 0, 0, 0)
    return (
        b"\x89PNG\r\n\x1a\n"
        + chunk(b"IHDR", header)
        + chunk(b"IDAT", zlib.compress(rows))
        + chunk(b"IEND", b"")
    )


PICTURE_ANCHOR = (
    '<xdr:oneCellAnchor xmlns:xdr="http://schemas.openxmlformats.org/drawingml/2006/'
    'spreadsheetDrawing" xmlns:a="http://schemas.openxmlformats.org/drawingml/2006/main">'
    "<xdr:from><xdr:col>9</xdr:col><xdr:colOff>0</xdr:colOff><xdr:row>20</xdr:row>"
    '<xdr:rowOff>0</xdr:rowOff></xdr:from><xdr:ext cx="76200" cy="76200"/><xdr:pic>'
    '<xdr:nvPicPr><xdr:cNvPr id="9" name="finder"/><xdr:cNvPicPr/></xdr:nvPicPr><xdr:blipFill>'
    f'<a:blip xmlns:r="{OFFICE}" r:embed="rIdPicture"/><a:stretch><a:fillRect/></a:stretch>'
    '</xdr:blipFill><xdr:spPr><a:prstGeom prst="rect"/></xdr:spPr></xdr:pic><xdr:clientData/>'
    "</xdr:oneCellAnchor>"
)

# A sparkline, from the extension list that Excel 2010 introduced (x14, in [MS-XLSX]).
EXTENSIONS = (
    '<extLst><ext xmlns:x14="http://schemas.microsoft.com/office/spreadsheetml/2009/9/main" '
    'uri="{05C60535-1F16-4fd2-B633-F4F36F0B64E0}"><x14:sparklineGroups '
    'xmlns:xm="http://schemas.microsoft.com/office/excel/2006/main"><x14:sparklineGroup '
    'displayEmptyCellsAs="gap"><x14:colorSeries rgb="FF376092"/><x14:sparklines>'
    "<x14:sparkline><xm:f>'Night 1'!E5:E12</xm:f><xm:sqref>M2</xm:sqref></x14:sparkline>"
    "</x14:sparklines></x14:sparklineGroup></x14:sparklineGroups></ext></extLst>"
)

PIVOT_CACHE = (
    f'<pivotCacheDefinition xmlns="{MAIN}" xmlns:r="{OFFICE}" r:id="rId1" recordCount="2" '
    'refreshedBy="x" createdVersion="3" refreshedVersion="3"><cacheSource type="worksheet">'
    '<worksheetSource ref="C4:D6" sheet="Night 1"/></cacheSource><cacheFields count="2">'
    '<cacheField name="Line" numFmtId="0"><sharedItems count="2"><s v="H alpha"/><s v="H beta"/>'
    '</sharedItems></cacheField><cacheField name="Wavelength [Angstrom]" numFmtId="0">'
    '<sharedItems containsSemiMixedTypes="0" containsString="0" containsNumber="1" '
    'minValue="4964.9" maxValue="6702.13"/></cacheField></cacheFields></pivotCacheDefinition>'
)
PIVOT_RECORDS = (
    f'<pivotCacheRecords xmlns="{MAIN}" count="2"><r><x v="0"/><n v="6702.13"/></r>'
    '<r><x v="1"/><n v="4964.9"/></r></pivotCacheRecords>'
)
PIVOT_TABLE = (
    f'<pivotTableDefinition xmlns="{MAIN}" name="ByLine" cacheId="7" dataCaption="Values" '
    'createdVersion="3" updatedVersion="3"><location ref="D5:E8" firstHeaderRow="1" '
    'firstDataRow="1" firstDataCol="1"/><pivotFields count="2"><pivotField axis="axisRow" '
    'showAll="0"><items count="3"><item x="0"/><item x="1"/><item t="default"/></items>'
    '</pivotField><pivotField dataField="1" showAll="0"/></pivotFields><rowFields count="1">'
    '<field x="0"/></rowFields><rowItems count="3"><i><x/></i><i><x v="1"/></i><i t="grand"><x/>'
    '</i></rowItems><colItems count="1"><i/></colItems><dataFields count="1"><dataField '
    'name="Sum" fld="1" baseField="0" baseItem="0"/></dataFields></pivotTableDefinition>'
)


def _rels(*links: tuple[str, str, str]) -> bytes:
    inside = "".join(
        f'<Relationship Id="{name}" Type="{kind}" Target="{target}"/>'
        for name, kind, target in links
    )
    return (
        '<Relationships xmlns="http://schemas.openxmlformats.org/package/2006/relationships">'
        f"{inside}</Relationships>"
    ).encode()


def _insert(text: str, before: str, new: str) -> str:
    assert text.count(before) == 1, before
    return text.replace(before, new + before)


def _add_parts(drawn: io.BytesIO, path: Path) -> None:
    with zipfile.ZipFile(drawn) as archive:
        parts = {info.filename: archive.read(info) for info in archive.infolist()}

    def edit(part: str, *changes: tuple[str, str]) -> None:
        text = parts[part].decode()
        for before, new in changes:
            text = _insert(text, before, new)
        parts[part] = text.encode()

    # openpyxl notes when it saved.
    parts["docProps/core.xml"] = re.sub(
        rb"\d{4}-\d\d-\d\dT[\d:]+Z", b"2031-03-15T06:00:00Z", parts["docProps/core.xml"]
    )

    # Redshift becomes one shared formula, and the array formula's other cells get results.
    text = parts[NIGHT_PART].decode()
    for row in range(5, 13):
        formula = (
            '<f t="shared" ref="F5:F12" si="0">D5/6564.61-1</f><v>0.020948510086051</v>'
            if row == 5
            else '<f t="shared" si="0"/><v/>'
        )
        text, count = re.subn(rf"<f>D{row}/6564.61-1</f><v ?/?>(</v>)?", formula, text)
        assert count == 1
    for row in (6, 7):
        text = _insert(text, f'<c r="J{row}"', f'<c r="I{row}"><v>1</v></c>')
    for number, (row, note) in enumerate(((5, "seeing 1.2"), (7, "cloud"))):
        text, count = re.subn(
            rf'<c r="G{row}".*?</c>', f'<c r="G{row}" t="s"><v>{number}</v></c>', text
        )
        assert count == 1
        assert note == EXPOSURES[row - 5][4]
    parts["xl/sharedStrings.xml"] = (
        f'<sst xmlns="{MAIN}" count="2" uniqueCount="2"><si><t>seeing 1.2</t></si>'
        "<si><r><rPr><b/></rPr><t>clo</t></r><r><t>ud</t></r></si></sst>"
    ).encode()
    parts["xl/calcChain.xml"] = (
        f'<calcChain xmlns="{MAIN}">'
        + "".join(f'<c r="F{row}" i="1"/>' for row in range(5, 13))
        + '<c r="I5" i="1" a="1"/><c r="H5" i="2"/></calcChain>'
    ).encode()
    text = _insert(
        text,
        "<drawing ",
        f'<pageSetup orientation="landscape" r:id="rIdPrinter" xmlns:r="{OFFICE}"/>',
    )
    text = _insert(text, "</worksheet>", EXTENSIONS)
    # What an XML writer would tidy away: a comment, single quotes, a stray blank, own prefixes.
    text = _insert(text, "<sheetData>", "<!-- <row r='1'><c r='A1'/></row> measured at dawn -->")
    text = text.replace('<row r="9"', "<row  r='9'").replace(
        "<worksheet ",
        '<worksheet xmlns:mc="http://schemas.openxmlformats.org/markup-compatibility/2006" '
        'mc:Ignorable="night" xmlns:night="http://observatory.invalid/night" night:dome="open" ',
        1,
    )
    parts[NIGHT_PART] = b'<?xml version="1.0" encoding="UTF-8" standalone="yes"?>\r\n' + (
        text.encode()
    )
    edit(
        "xl/worksheets/_rels/sheet1.xml.rels",
        (
            "</Relationships>",
            f'<Relationship Id="rIdPrinter" Type="{OFFICE}/printerSettings" '
            'Target="../printerSettings/printerSettings1.bin"/>'
            '<Relationship Id="rIdUnknown" Type="http://observatory.invalid/relationships/thing" '
            'Target="/xl/unknownThing.bin"/>',
        ),
    )
    parts["xl/printerSettings/printerSettings1.bin"] = bytes(range(256)) * 3
    parts["xl/unknownThing.bin"] = b"\0\xff<not xml>" + bytes(range(255, -1, -1))

    edit("xl/drawings/drawing1.xml", ("</wsDr>", PICTURE_ANCHOR))
    edit(
        "xl/drawings/_rels/drawing1.xml.rels",
        (
            "</Relationships>",
            f'<Relationship Id="rIdPicture" Type="{OFFICE}/image" Target="../media/image1.png"/>',
        ),
    )
    parts["xl/media/image1.png"] = _picture()

    parts["xl/pivotCache/pivotCacheDefinition1.xml"] = PIVOT_CACHE.encode()
    parts["xl/pivotCache/pivotCacheRecords1.xml"] = PIVOT_RECORDS.encode()
    parts["xl/pivotCache/_rels/pivotCacheDefinition1.xml.rels"] = _rels(
        ("rId1", f"{OFFICE}/pivotCacheRecords", "pivotCacheRecords1.xml")
    )
    parts["xl/pivotTables/pivotTable1.xml"] = PIVOT_TABLE.encode()
    parts["xl/pivotTables/_rels/pivotTable1.xml.rels"] = _rels(
        ("rId1", f"{OFFICE}/pivotCacheDefinition", "../pivotCache/pivotCacheDefinition1.xml")
    )
    parts["xl/worksheets/_rels/sheet3.xml.rels"] = _rels(
        ("rId1", f"{OFFICE}/pivotTable", "../pivotTables/pivotTable1.xml")
    )
    edit(
        "xl/workbook.xml",
        (
            "</workbook>",
            f'<pivotCaches><pivotCache cacheId="7" r:id="rIdPivot" xmlns:r="{OFFICE}"/>'
            "</pivotCaches>",
        ),
    )
    edit(
        "xl/_rels/workbook.xml.rels",
        (
            "</Relationships>",
            f'<Relationship Id="rIdPivot" Type="{OFFICE}/pivotCacheDefinition" '
            'Target="pivotCache/pivotCacheDefinition1.xml"/>'
            f'<Relationship Id="rIdStrings" Type="{OFFICE}/sharedStrings" '
            'Target="/xl/sharedStrings.xml"/>'
            f'<Relationship Id="rIdChain" Type="{OFFICE}/calcChain" Target="calcChain.xml"/>'
            f'<Relationship Id="rIdCustom" Type="{OFFICE}/customXml" '
            'Target="../customXml/item1.xml"/>',
        ),
    )
    parts["customXml/item1.xml"] = b'<proposal xmlns="urn:invented">72-031</proposal>'
    parts["customXml/itemProps1.xml"] = (
        b'<ds:datastoreItem ds:itemID="{6D1B3C1E-0000-4000-8000-000000000001}" '
        b'xmlns:ds="http://schemas.openxmlformats.org/officeDocument/2006/customXml"/>'
    )
    parts["customXml/_rels/item1.xml.rels"] = _rels(
        ("rId1", f"{OFFICE}/customXmlProps", "itemProps1.xml")
    )
    kinds = {
        "/xl/pivotCache/pivotCacheDefinition1.xml": f"{SPREADSHEET}.pivotCacheDefinition+xml",
        "/xl/pivotCache/pivotCacheRecords1.xml": f"{SPREADSHEET}.pivotCacheRecords+xml",
        "/xl/pivotTables/pivotTable1.xml": f"{SPREADSHEET}.pivotTable+xml",
        "/xl/printerSettings/printerSettings1.bin": f"{SPREADSHEET}.printerSettings",
        "/xl/sharedStrings.xml": f"{SPREADSHEET}.sharedStrings+xml",
        "/xl/calcChain.xml": f"{SPREADSHEET}.calcChain+xml",
        "/xl/unknownThing.bin": "application/x-invented-thing",
        "/xl/media/image1.png": "image/png",
        "/customXml/itemProps1.xml": (
            "application/vnd.openxmlformats-officedocument.customXmlProperties+xml"
        ),
    }
    edit(
        "[Content_Types].xml",
        (
            "</Types>",
            "".join(
                f'<Override PartName="{part}" ContentType="{kind}"/>'
                for part, kind in kinds.items()
            ),
        ),
    )
    with zipfile.ZipFile(path, "w") as archive:
        archive.comment = b"an invented night"
        for number, (name, content) in enumerate(parts.items()):
            info = zipfile.ZipInfo(name, (*WHEN[:5], number % 30 * 2))
            # Pictures are stored, as spreadsheet programs do; the rest is packed.
            stored = name.endswith(".png")
            info.compress_type = zipfile.ZIP_STORED if stored else zipfile.ZIP_DEFLATED
            info.external_attr = 0o640 << 16
            archive.writestr(info, content)
