"""Editing cells leaves every other byte of a workbook alone, and no file makes it misbehave."""

from __future__ import annotations

import errno
import io
import os
import re
import resource
import shutil
import stat
import struct
import subprocess
import sys
import time
import tracemalloc
import warnings
import zipfile
import zlib
from collections.abc import Iterator
from contextlib import suppress
from pathlib import Path
from xml.parsers import expat

import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from lxml import etree

sys.path.insert(0, str(Path(__file__).parent))

from everything import MAIN, NIGHT_PART, write_everything

from workbooks.files.cells import ErrorValue, LogbookError, Value, cell_name, column_number
from workbooks.files.edits import Edits
from workbooks.files.package import Package
from workbooks.files.worksheet import SheetPart
from workbooks.logbook import Logbook

NIGHT = "Night 1"

# Cells that exist with and without a formula, cells that do not, rows that do not.
EDITS: dict[str, Value] = {
    "D5": 6702.5,
    "F5": 0.1,
    "F6": -0.25,
    "F7": ErrorValue("#N/A"),
    "F8": "no line",
    "I6": 9929.75,
    "G7": "=1+1",
    "G8": None,
    "E8": 0.125,
    "K5": 3,
    "M9": 1e-300,
    "C14": "styled by the row",
    "B17": ErrorValue("#NUM!"),
}


@pytest.fixture(scope="module")
def everything(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return write_everything(tmp_path_factory.mktemp("everything") / "everything.xlsx")


@pytest.fixture
def logbook(everything: Path, tmp_path: Path) -> Path:
    return Path(shutil.copy(everything, tmp_path / "night.xlsx"))


def place(name: str) -> tuple[int, int]:
    letters, digits = re.fullmatch(r"([A-Z]+)(\d+)", name).groups()
    return int(digits), column_number(letters)


def edit(source: Path, target: Path, edits: dict[str, Value], sheet: str = NIGHT) -> Path:
    logbook = Logbook.open(source)
    for name, value in edits.items():
        logbook.sheet(sheet).set(*place(name), value)
    logbook.save(target, overwrite=True)
    return target


def contents(path: Path) -> dict[str, bytes]:
    with zipfile.ZipFile(path) as archive:
        assert archive.testzip() is None
        return {name: archive.read(name) for name in archive.namelist()}


def without(part: bytes, names: set[str]) -> bytes:
    """Give the part without the named cells, cut out at the offsets that expat reports.

    A row tag goes too where it holds nothing else, as does the text of the dimension.
    """
    cuts: list[tuple[int, int]] = []
    parser = expat.ParserCreate()
    open_cell: list[int | None] = []

    def start(tag: str, attributes: dict[str, str]) -> None:
        if tag == "c":
            open_cell.append(parser.CurrentByteIndex if attributes["r"] in names else None)

    def end(tag: str) -> None:
        if tag == "c" and (begun := open_cell.pop()) is not None:
            tag_end = part.index(b">", begun) + 1
            if part[tag_end - 2 : tag_end] != b"/>":
                tag_end = part.index(b">", parser.CurrentByteIndex) + 1
            cuts.append((begun, tag_end))

    parser.StartElementHandler, parser.EndElementHandler = start, end
    parser.Parse(part, True)
    for begun, ended in reversed(cuts):
        part = part[:begun] + part[ended:]
    part = re.sub(rb'<dimension ref="[^"]*"', b"<dimension", part)
    return re.sub(rb'<row r="\d+"></row>', b"", part)


def test_all_other_parts_keep_their_bytes(everything: Path, tmp_path: Path) -> None:
    edited = edit(everything, tmp_path / "edited.xlsx", EDITS)
    before, after = contents(everything), contents(edited)
    assert list(before) == list(after)
    assert [name for name in before if before[name] != after[name]] == [NIGHT_PART]
    assert {"xl/unknownThing.bin", "xl/calcChain.xml", "xl/sharedStrings.xml"} < set(after)


def test_entries_keep_their_date_packing_and_attributes(everything: Path, tmp_path: Path) -> None:
    edited = edit(everything, tmp_path / "edited.xlsx", EDITS)
    with zipfile.ZipFile(everything) as old, zipfile.ZipFile(edited) as new:
        assert old.comment == new.comment
        for before, after in zip(old.infolist(), new.infolist(), strict=True):
            for trait in ("filename", "date_time", "compress_type", "external_attr", "extra"):
                assert getattr(before, trait) == getattr(after, trait)
    # A second opinion on the archive's structure.
    subprocess.run([sys.executable, "-m", "zipfile", "-t", edited], check=True)


def test_all_bytes_outside_the_edited_cells_stay(everything: Path, tmp_path: Path) -> None:
    edited = edit(everything, tmp_path / "edited.xlsx", EDITS)
    before, after = contents(everything)[NIGHT_PART], contents(edited)[NIGHT_PART]
    assert before != after
    assert without(before, set(EDITS)) == without(after, set(EDITS))


def test_saving_without_edits_gives_the_same_file(everything: Path, tmp_path: Path) -> None:
    Logbook.open(everything).save(tmp_path / "same.xlsx")
    assert (tmp_path / "same.xlsx").read_bytes() == everything.read_bytes()


def test_the_same_edit_twice_gives_the_same_file(everything: Path, tmp_path: Path) -> None:
    once = edit(everything, tmp_path / "once.xlsx", EDITS)
    twice = edit(once, tmp_path / "twice.xlsx", EDITS)
    assert contents(once) == contents(twice)


def test_openpyxl_reads_the_new_values_and_the_old_formulas(
    everything: Path, tmp_path: Path
) -> None:
    edited = edit(everything, tmp_path / "edited.xlsx", EDITS)
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        before = openpyxl.load_workbook(everything)[NIGHT]
        formulas = openpyxl.load_workbook(edited)[NIGHT]
        values = openpyxl.load_workbook(edited, data_only=True)[NIGHT]
    for name, value in EDITS.items():
        assert values[name].value == (value.text if isinstance(value, ErrorValue) else value), name
    for row in range(5, 13):
        assert str(formulas.cell(row, 6).value).startswith("=D")
        assert formulas.cell(row, 6).value == before.cell(row, 6).value
    assert formulas["F7"].number_format == before["F7"].number_format == "0.0000"
    assert values["G7"].data_type == "s"
    assert formulas["C14"].fill.fgColor.rgb == "00FFEEDD"
    assert formulas["M9"].number_format == "0.000"
    assert formulas["I5"].value.ref == "I5:I7"


@pytest.fixture(scope="module")
def calc(tmp_path_factory: pytest.TempPathFactory) -> list[str]:
    profile = tmp_path_factory.mktemp("profile")
    return ["soffice", f"-env:UserInstallation={profile.as_uri()}", "--headless", "--convert-to"]


def test_libreoffice_opens_the_edited_file(
    everything: Path, tmp_path: Path, calc: list[str]
) -> None:
    odd = "_x0041_ <&> \u03b1\t'\""
    edited = edit(everything, tmp_path / "edited.xlsx", EDITS | {"G9": odd, "G11": "+1"})
    folder = tmp_path / "converted"
    subprocess.run(
        [*calc, "xlsx:Calc MS Excel 2007 XML", "--outdir", folder, edited],
        check=True,
        timeout=120,
        capture_output=True,
    )
    values = openpyxl.load_workbook(folder / "edited.xlsx", data_only=True)
    formulas = openpyxl.load_workbook(folder / "edited.xlsx")
    night = values[NIGHT]
    for name in ("D5", "G7", "G8", "E8", "K5", "M9", "C14"):
        assert night[name].value == EDITS[name], name
    assert night["B17"].value == "#NUM!"
    assert night["G9"].value == odd
    assert night["G11"].value == "+1"
    assert night["G5"].value == "seeing 1.2"
    for row in range(5, 13):
        assert "6564.61" in str(formulas[NIGHT].cell(row, 6).value)
    with zipfile.ZipFile(folder / "edited.xlsx") as archive:
        kept = " ".join(archive.namelist())
    for kind in ("chart", "image", "pivotTable", "comments", "table"):
        assert kind in kept


def cells_of(part: bytes) -> dict[str, tuple[str | None, str | None]]:
    """Give each cell's formula and value as lxml sees them; t="inlineStr" and "str" are text."""
    found = {}
    row_number = 0
    for row in etree.fromstring(part).iter(f"{{{MAIN}}}row"):
        row_number = int(row.get("r", row_number + 1))
        column = 0
        for cell in row.iterchildren(f"{{{MAIN}}}c"):
            column = place(cell.get("r"))[1] if cell.get("r") else column + 1
            formula = cell.findtext(f"{{{MAIN}}}f")
            value = cell.findtext(f"{{{MAIN}}}v")
            kind = cell.get("t", "n")
            if kind == "inlineStr":
                value = "".join(cell.itertext(f"{{{MAIN}}}t"))
            if value is not None:
                value = f"{'text' if kind in ('str', 'inlineStr') else kind} {value}"
            if formula is not None or value is not None:
                found[cell_name(row_number, column)] = (formula, value)
    return found


@st.composite
def sheet_parts(draw: st.DrawFn) -> bytes:
    """Make the XML of a small sheet, written in as many ways as the standard allows."""
    prefix = draw(st.sampled_from(["", "x:"]))
    declared = f'xmlns{":x" if prefix else ""}="{MAIN}"'
    if draw(st.booleans()):
        declared += ' xmlns:f="urn:foreign"'
    else:
        declared += " xmlns:f='urn:foreign' f:note='<' ".replace("<", "&lt;&gt;>")
    noise = st.sampled_from(
        [
            "",
            "\n  ",
            f"<!-- <{prefix}c r='A1'><{prefix}v>9</{prefix}v></{prefix}c> </{prefix}row> -->",
            "<?night <c> ?>",
        ]
    )
    foreign = (
        f"<{prefix}extLst><{prefix}ext uri='u'>"
        f"<{prefix}row xmlns{':x' if prefix else ''}='urn:foreign'><{prefix}c r='B2'>"
        f"<{prefix}v>7</{prefix}v></{prefix}c></{prefix}row></{prefix}ext></{prefix}extLst>"
    )
    rows = []
    for number in sorted(draw(st.sets(st.integers(1, 6)))):
        cells = []
        previous = 0
        for column in sorted(draw(st.sets(st.integers(1, 6)))):
            named = column != previous + 1 or draw(st.booleans())
            quote = draw(st.sampled_from("\"'"))
            name = f" r={quote}{cell_name(number, column)}{quote}" if named else ""
            name = draw(st.sampled_from([f'{name} s="0"', f' s="0"{name}', name]))
            previous = column
            inside = draw(
                st.sampled_from(
                    [
                        ("", None),
                        ("", f"<{prefix}v>1.5</{prefix}v>"),
                        (' t="str"', f"<{prefix}f>A1&amp;2</{prefix}f><{prefix}v>k</{prefix}v>"),
                        ("", f"<{prefix}f><![CDATA[A1<A2]]></{prefix}f>"),
                        ("", f'<{prefix}f t="shared" si="0"/>\n<{prefix}v/>'),
                        (" t='inlineStr'", f"<{prefix}is><{prefix}t>a</{prefix}t></{prefix}is>"),
                        (' t="e"', f"<{prefix}v><![CDATA[#N/A]]></{prefix}v>"),
                        (' t="b"', f"<{prefix}v>1</{prefix}v>{foreign}"),
                    ]
                )
            )
            kind, body = inside
            if body is None:
                cells.append(f"<{prefix}c{name}/>")
            else:
                space, before = draw(st.sampled_from(["", " ", "\n"])), draw(noise)
                cells.append(f"<{prefix}c{name}{kind}{space}>{before}{body}</{prefix}c{space}>")
            cells.append(draw(noise))
        spans = draw(st.sampled_from(["", ' spans="2:4"', ' spans="1:2 4:5"']))
        if cells:
            rows.append(f'<{prefix}row r="{number}"{spans}>{"".join(cells)}</{prefix}row>')
        else:
            rows.append(f'<{prefix}row r="{number}"{spans}/>')
        rows.append(draw(noise))
    data = f"<{prefix}sheetData>{''.join(rows)}</{prefix}sheetData>"
    if not rows and draw(st.booleans()):
        data = f"<{prefix}sheetData />"
    dimension = draw(st.sampled_from(["", f'<{prefix}dimension ref="B2:D4"/>']))
    return (
        f'<?xml version="1.0" encoding="UTF-8"?>\n<{prefix}worksheet {declared}>{dimension}'
        f"{draw(noise)}{data}{foreign}</{prefix}worksheet>"
    ).encode()


values = st.one_of(
    st.none(),
    st.floats(allow_nan=False, allow_infinity=False),
    st.booleans(),
    st.sampled_from([ErrorValue("#NUM!"), ErrorValue("#VALUE!"), ErrorValue("#N/A")]),
    st.text("ab <>&'\"=+\u00e9\U0001f52d\n\t", max_size=6),
)
grids = st.dictionaries(st.integers(1, 7), st.dictionaries(st.integers(1, 7), values, min_size=1))


def expected(value: Value) -> str | None:
    match value:
        case None:
            return None
        case bool():
            return f"b {int(value)}"
        case ErrorValue():
            return f"e {value.text}"
        case str():
            return f"text {value}"
    return f"n {value!r}".removesuffix(".0")


@settings(max_examples=400, deadline=None)
@given(sheet_parts(), grids)
def test_any_writing_of_a_sheet_takes_any_edit(
    part: bytes, edits: dict[int, dict[int, Value]]
) -> None:
    before = cells_of(part)
    after = SheetPart(part, Path("night.xlsx"), "sheet").edited(edits)
    wanted = dict(before)
    for row, cells in edits.items():
        for column, value in cells.items():
            name = cell_name(row, column)
            formula = before.get(name, (None, None))[0]
            wanted[name] = (formula, expected(value))
            if wanted[name] == (None, None):
                del wanted[name]
    found = cells_of(after)
    assert found == wanted
    names = [place(name) for name in found]
    assert names == sorted(names)
    existing = {at for at, _ in positions(part)}
    for at, spans in positions(after):
        if at not in existing and spans:
            ranges = [span.split(":") for span in spans.split()]
            assert any(int(first) <= at[1] <= int(last) for first, last in ranges)


def positions(part: bytes) -> Iterator[tuple[tuple[int, int], str | None]]:
    """Yield the row and column of every cell element, empty ones too, and its row's spans."""
    for row in etree.fromstring(part).iter(f"{{{MAIN}}}row"):
        column = 0
        for cell in row.iterchildren(f"{{{MAIN}}}c"):
            column = place(cell.get("r"))[1] if cell.get("r") else column + 1
            yield (int(row.get("r")), column), row.get("spans")


@settings(max_examples=200, deadline=None)
@given(sheet_parts())
def test_no_edit_no_change(part: bytes) -> None:
    sheet = SheetPart(part, Path("night.xlsx"), "sheet")
    assert sheet.edited({}) == part
    assert sheet.edited({9: {9: None}}) == part


@settings(max_examples=300, deadline=None)
@given(sheet_parts(), grids, st.integers(1, 400))
def test_a_sheet_in_pieces_is_the_sheet_as_a_whole(
    part: bytes, edits: dict[int, dict[int, Value]], size: int
) -> None:
    """However the unpacked part is cut up, the stock and the edited part are the same."""
    whole = SheetPart(part, Path("night.xlsx"), "sheet")

    def pieces() -> Iterator[bytes]:
        return (part[at : at + size] for at in range(0, len(part), size))

    sheet = SheetPart(pieces, Path("night.xlsx"), "sheet")
    assert b"".join(sheet.edited_pieces(Edits.of(edits))) == whole.edited(edits)
    assert (sheet.last_row, sheet.last_column) == (whole.last_row, whole.last_column)
    assert (sheet.errors, sheet.formula_columns) == (whole.errors, whole.formula_columns)


@pytest.mark.parametrize(
    "ending", ["", '<c r="AO1"><v>1</v><q/></c>', "<c/>", "<!-- -->", '<c r="AO2"><v>1</v></c>']
)
def test_a_row_that_does_not_fit_in_the_end_takes_no_longer(ending: str) -> None:
    """A pattern with two ways for each of forty cells would take years to say no."""
    cells = "".join(f'<c r="{cell_name(1, at)}" t="n"><v>{at}</v></c>' for at in range(1, 41))
    second = cells.replace('1" t', '2" t')
    begun = time.perf_counter()
    with suppress(LogbookError):
        SheetPart(
            sheet_xml(f'<row r="1">{cells}{ending}</row><row r="2">{second}{ending}</row>'),
            Path("night.xlsx"),
            "sheet",
        )
    assert time.perf_counter() - begun < 2


def sheet_xml(rows: str, before: str = "", after: str = "") -> bytes:
    return (
        f'<worksheet xmlns="{MAIN}">{before}<sheetData>{rows}</sheetData>{after}</worksheet>'
    ).encode()


def edited(rows: str, edits: dict[str, Value], before: str = "") -> str:
    grid: dict[int, dict[int, Value]] = {}
    for name, value in edits.items():
        row, column = place(name)
        grid.setdefault(row, {})[column] = value
    part = SheetPart(sheet_xml(rows, before), Path("night.xlsx"), "sheet").edited(grid).decode()
    return part.removeprefix(f'<worksheet xmlns="{MAIN}">').removesuffix("</worksheet>")


@pytest.mark.parametrize(
    ("cell", "value", "result"),
    [
        (
            '<c r="A1" s="3" t="s" cm="1" vm="2"><f>B1</f><v>4</v></c>',
            2.5,
            '<c r="A1" s="3" cm="1" vm="2"><f>B1</f><v>2.5</v></c>',
        ),
        (
            '<c r="A1" s="3"><f t="array" ref="A1:A2">B1</f><v>4</v></c>',
            "x",
            '<c r="A1" s="3" t="str"><f t="array" ref="A1:A2">B1</f><v>x</v></c>',
        ),
        (
            '<c r="A1"><f t="dataTable" ref="A1:A2" dt2D="1" r1="B1" r2="B2"/><v>4</v></c>',
            ErrorValue("#VALUE!"),
            '<c r="A1" t="e"><f t="dataTable" ref="A1:A2" dt2D="1" r1="B1" r2="B2"/>'
            "<v>#VALUE!</v></c>",
        ),
        (
            '<c r="A1" t="e" vm="1" ph="1"><v>#VALUE!</v></c>',
            0.1 + 0.2,
            '<c r="A1" ph="1"><v>0.30000000000000004</v></c>',
        ),
        (
            '<c r="A1" t="s"><v>0</v><extLst><ext uri="u"/></extLst></c>',
            None,
            '<c r="A1"><extLst><ext uri="u"/></extLst></c>',
        ),
        (
            '<c r="A1" t="s"><v>0</v></c>',
            " =A2\r",
            '<c r="A1" t="inlineStr"><is><t xml:space="preserve"> =A2_x000D_</t></is></c>',
        ),
    ],
)
def test_one_cell(cell: str, value: Value, result: str) -> None:
    row = '<row r="1" ht="20" x14ac:dyDescent="0.2" xmlns:x14ac="u">'
    assert edited(f"{row}{cell}</row>", {"A1": value}) == (
        f"<sheetData>{row}{result}</row></sheetData>"
    )


def test_new_cells_take_the_row_style_then_the_column_style_and_widen_spans() -> None:
    before = '<dimension ref="B2:C3"/><cols><col min="4" max="5" width="9" style="7"/></cols>'
    rows = '<row r="2" spans="2:3" s="5" customFormat="1"/><row r="3" spans="1:5" s="5"/>'
    assert edited(rows, {"D2": 1, "D3": 2, "F3": None, "E9": 3}, before) == (
        '<dimension ref="B2:E9"/><cols><col min="4" max="5" width="9" style="7"/></cols>'
        '<sheetData><row r="2" spans="2:4" s="5" customFormat="1"><c r="D2" s="5"><v>1</v></c>'
        '</row><row r="3" spans="1:5" s="5"><c r="D3" s="7"><v>2</v></c></row>'
        '<row r="9"><c r="E9" s="7"><v>3</v></c></row></sheetData>'
    )


def test_array_members_without_a_formula_of_their_own_count_as_calculated() -> None:
    rows = '<row r="1"><c r="A1"><f t="array" ref="A1:A2">B1</f></c></row><row r="2"/>'
    sheet = SheetPart(sheet_xml(rows), Path("night.xlsx"), "sheet")
    assert sheet.has_formula(2, 1)
    assert not sheet.has_formula(3, 1)
    assert b'<c r="A2" t="str"><v>x</v></c>' in sheet.edited({2: {1: "x"}})


# ---- what is refused


def refused(call: object, *words: str) -> str:
    """Call, and give the sentence of the LogbookError that it must raise."""
    with pytest.raises(LogbookError) as caught:
        call()
    sentence = str(caught.value)
    assert "\n" not in sentence
    assert len(sentence) < 400
    for word in words:
        assert word in sentence
    return sentence


def rewritten(source: Path, target: Path, changes: dict[str, bytes | None]) -> Path:
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in {**contents(source), **changes}.items():
            if content is not None:
                archive.writestr(name, content)
    return target


def test_files_that_are_no_workbook(tmp_path: Path) -> None:
    path = tmp_path / "night.xlsx"
    refused(lambda: Package(path), "night.xlsx", "does not exist")
    refused(lambda: Package(tmp_path), "folder")
    path.write_bytes(b"")
    refused(lambda: Package(path), "night.xlsx", "empty")
    path.write_text("exposure,line\n")
    refused(lambda: Package(path), "not an .xlsx")
    path.write_bytes(bytes.fromhex("d0cf11e0a1b11ae1") + bytes(4096))
    refused(lambda: Package(path), "encrypted", ".xls")
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr("notes.txt", "x")
    refused(lambda: Package(path), "holds no workbook")


def test_a_word_document_is_no_workbook(everything: Path, tmp_path: Path) -> None:
    path = rewritten(everything, tmp_path / "a.xlsx", {"xl/workbook.xml": b"<document/>"})
    refused(lambda: Package(path), "not a spreadsheet workbook")


@settings(max_examples=60, deadline=None)
@given(share=st.floats(0, 1, exclude_max=True))
def test_cut_short_anywhere(everything: Path, share: float) -> None:
    content = everything.read_bytes()
    path = everything.with_name("cut.xlsx")
    path.write_bytes(content[: min(int(len(content) * share), len(content) - 1)])
    refused(lambda: Package(path), "cut.xlsx")


@settings(max_examples=150, deadline=None)
@given(data=st.data())
def test_damaged_anywhere(everything: Path, data: st.DataObject) -> None:
    content = bytearray(everything.read_bytes())
    for _ in range(data.draw(st.integers(1, 4))):
        content[data.draw(st.integers(0, len(content) - 1))] = data.draw(st.integers(0, 255))
    path = everything.with_name("damaged.xlsx")
    path.write_bytes(content)
    target = everything.with_name("rescued.xlsx")
    target.unlink(missing_ok=True)
    sentence = None
    try:
        logbook = Logbook.open(path)
        for name in logbook.sheet_names:
            assert isinstance(logbook.sheet(name).rows, list)
            logbook.sheet(name).set(2, 2, 1.0)
        logbook.save(target)
    except LogbookError as error:
        sentence = str(error)
    assert target.exists() == (sentence is None)
    if sentence is None:
        assert zipfile.ZipFile(target).testzip() is None
    else:
        assert "damaged.xlsx" in sentence


@settings(max_examples=300, deadline=None)
@given(data=st.data())
def test_damaged_xml_anywhere(everything: Path, data: st.DataObject) -> None:
    parts = [NIGHT_PART, "xl/styles.xml", "xl/sharedStrings.xml", "xl/workbook.xml"]
    part = data.draw(st.sampled_from([*parts, "xl/_rels/workbook.xml.rels", "_rels/.rels"]))
    content = contents(everything)[part]
    # Whole words go wrong more tellingly than single bytes: the XML mostly stays well-formed.
    words = list(re.finditer(rb"[A-Za-z0-9.:/]+|[<>\"']", content))
    word = data.draw(st.sampled_from(words))
    other = data.draw(
        st.sampled_from([b"", b"-1", b"99999999999", b"A0", b"x:c", b"1e999", b"\xff"])
    )
    content = content[: word.start()] + other + content[word.end() :]
    path = rewritten(everything, everything.with_name("damaged.xlsx"), {part: content})
    sentence = "damaged.xlsx was sound enough"
    try:
        logbook = Logbook.open(path)
        for name in logbook.sheet_names:
            sheet = logbook.sheet(name)
            assert isinstance(sheet.rows, list)
            assert isinstance(sheet.merged, list)
            sheet.set(8, 8, 1.0)
        assert isinstance(logbook.named_cells, dict)
        logbook.save(everything.with_name("rescued.xlsx"), overwrite=True)
    except LogbookError as error:
        sentence = str(error)
    assert "damaged.xlsx" in sentence


@pytest.mark.parametrize(
    "name", ["/etc/x", "../x", "xl/../x", "xl\\x", "C:/x", "xl//x", "XL/Workbook.xml"]
)
def test_bad_part_names(everything: Path, tmp_path: Path, name: str) -> None:
    path = rewritten(everything, tmp_path / "a.xlsx", {name: b"x"})
    refused(lambda: Package(path), "a.xlsx", "part")


def test_too_many_parts(tmp_path: Path) -> None:
    path = tmp_path / "many.xlsx"
    with zipfile.ZipFile(path, "w") as archive:
        for number in range(10_001):
            archive.writestr(f"p{number}", b"")
    refused(lambda: Package(path), "10,001 parts")


def write_zeros(path: Path, sizes: list[int]) -> Path:
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED, compresslevel=1) as archive:
        for number, megabytes in enumerate(sizes):
            with archive.open(f"xl/{number}.xml", "w", force_zip64=True) as part:
                for _ in range(megabytes):
                    part.write(bytes(1 << 20))
    return path


@pytest.mark.parametrize("sizes", [[64], [1100], [15] * 70])
def test_bombs_are_refused_fast(tmp_path: Path, sizes: list[int]) -> None:
    path = write_zeros(tmp_path / "bomb.xlsx", sizes)
    tracemalloc.start()
    begun = time.perf_counter()
    refused(lambda: Package(path), "would unpack")
    assert time.perf_counter() - begun < 1
    assert tracemalloc.get_traced_memory()[1] < 40 << 20
    tracemalloc.stop()


def test_a_bomb_that_lies_about_its_size(everything: Path, tmp_path: Path) -> None:
    zeros = b"<worksheet>" + bytes(100 << 20)
    path = rewritten(everything, tmp_path / "liar.xlsx", {NIGHT_PART: zeros})
    content = path.read_bytes()
    told = struct.pack("<I", 1000)
    truth = struct.pack("<II", zlib.crc32(zeros), 0)[:4]
    content = content.replace(struct.pack("<I", len(zeros)), told)
    content = content.replace(truth, struct.pack("<I", zlib.crc32(zeros[:1000])))
    path.write_bytes(content)
    del zeros
    tracemalloc.start()
    refused(lambda: Logbook.open(path).sheet(NIGHT).rows, "liar.xlsx", "damaged")
    assert tracemalloc.get_traced_memory()[1] < 20 << 20
    tracemalloc.stop()


LAUGHS = (
    b'<!DOCTYPE w [<!ENTITY a "ha">'
    + b"".join(
        b'<!ENTITY %c "%b">' % (98 + level, b"&%c;" % (97 + level) * 20) for level in range(9)
    )
    + b"]>"
)
OUTSIDE = b'<!DOCTYPE w [<!ENTITY j SYSTEM "file:///etc/hostname">]>'


@pytest.mark.parametrize("doctype", [LAUGHS, OUTSIDE])
@pytest.mark.parametrize(
    "part", [NIGHT_PART, "xl/workbook.xml", "xl/sharedStrings.xml", "xl/styles.xml", "_rels/.rels"]
)
def test_entities_are_refused(everything: Path, tmp_path: Path, part: str, doctype: bytes) -> None:
    text = contents(everything)[part]
    root = re.search(rb"<[A-Za-z]", text).start()
    hostile = text[:root] + doctype + text[root:].replace(b"</", b"&j;</", 1)
    path = rewritten(everything, tmp_path / "a.xlsx", {part: hostile})
    refused(lambda: Logbook.open(path).sheet(NIGHT).rows, "document type", part)


@pytest.mark.parametrize(
    "rows",
    [
        '<row r="2"/><row r="1"/>',
        '<row r="1"><c r="B1"/><c r="A1"/></row>',
        '<row r="1"><c r="A2"/></row>',
        '<row r="1"><c r="A1"/><c r="A1"/></row>',
        '<row r="x"/>',
        '<row r="2000000"/>',
        '<row r="1"><c r="XFE1"/></row>',
        '<row r="1"><c r="1"/></row>',
        '<row r="1"><c r="A1"><v>1</v><f>B1</f></c></row>',
    ],
)
def test_disordered_sheets_are_refused_rather_than_spoilt(rows: str) -> None:
    refused(lambda: SheetPart(sheet_xml(rows), Path("night.xlsx"), "sheet"), "night.xlsx")


def test_a_signed_workbook_is_not_edited(everything: Path, tmp_path: Path) -> None:
    path = rewritten(everything, tmp_path / "a.xlsx", {"_xmlsignatures/sig1.xml": b"<a/>"})
    refused(lambda: edit(path, tmp_path / "b.xlsx", EDITS), "signed")


# ---- what is written where


def test_an_existing_file_is_overwritten_only_when_asked(logbook: Path, tmp_path: Path) -> None:
    other = tmp_path / "other.xlsx"
    other.write_bytes(b"mine")
    opened = Logbook.open(logbook)
    refused(lambda: opened.save(other), "other.xlsx", "exists")
    refused(lambda: opened.save(logbook), "exists")
    assert other.read_bytes() == b"mine"
    opened.save(other, overwrite=True)
    assert other.read_bytes() == logbook.read_bytes()
    refused(lambda: opened.save(tmp_path / "no" / "x.xlsx"), "no folder")


@pytest.mark.parametrize(
    ("lock", "program"), [(".~lock.night.xlsx#", "LibreOffice"), ("~$night.xlsx", "Excel")]
)
def test_a_file_open_elsewhere_is_not_written(logbook: Path, lock: str, program: str) -> None:
    before = logbook.read_bytes()
    (logbook.parent / lock).write_text("")
    refused(lambda: edit(logbook, logbook, EDITS), program, lock)
    assert logbook.read_bytes() == before


def test_a_read_only_file_is_not_written_even_by_root(logbook: Path) -> None:
    before = logbook.read_bytes()
    logbook.chmod(0o444)
    refused(lambda: edit(logbook, logbook, EDITS), "read-only")
    assert logbook.read_bytes() == before


def test_a_file_changed_since_it_was_opened_is_not_written(logbook: Path) -> None:
    opened = Logbook.open(logbook)
    opened.sheet(NIGHT).set(5, 4, 1.0)
    edit(logbook, logbook, {"D6": 2.0})
    refused(lambda: opened.save(logbook, overwrite=True), "changed")
    assert Logbook.open(logbook).sheet(NIGHT).rows[5][3] == 2.0


def test_saving_in_place_twice_keeps_mode_and_link(logbook: Path, tmp_path: Path) -> None:
    logbook.chmod(0o640)
    link = tmp_path / "link.xlsx"
    link.symlink_to(logbook)
    opened = Logbook.open(link)
    for value in (1.0, 2.0):
        opened.sheet(NIGHT).set(5, 4, value)
        opened.save(link, overwrite=True)
        assert Logbook.open(logbook).sheet(NIGHT).rows[4][3] == value
    assert link.is_symlink()
    assert stat.S_IMODE(logbook.stat().st_mode) == 0o640


@pytest.mark.parametrize("call", ["replace", "fsync"])
def test_a_failing_system_call_leaves_the_original(
    logbook: Path, monkeypatch: pytest.MonkeyPatch, call: str
) -> None:
    before = logbook.read_bytes()

    def full(*_: object) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(os, call, full)
    refused(lambda: edit(logbook, logbook, EDITS), "night.xlsx", "No space left on device")
    assert logbook.read_bytes() == before
    assert os.listdir(logbook.parent) == [logbook.name]


def test_a_real_limit_on_file_size_leaves_the_original(logbook: Path) -> None:
    before = logbook.read_bytes()
    soft, hard = resource.getrlimit(resource.RLIMIT_FSIZE)
    resource.setrlimit(resource.RLIMIT_FSIZE, (len(before) // 2, hard))
    try:
        refused(lambda: edit(logbook, logbook, EDITS), "night.xlsx", "File too large")
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, (soft, hard))
    assert logbook.read_bytes() == before
    assert os.listdir(logbook.parent) == [logbook.name]


def test_an_interruption_leaves_the_original(
    logbook: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = logbook.read_bytes()

    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(os, "fsync", interrupted)
    with pytest.raises(KeyboardInterrupt):
        edit(logbook, logbook, EDITS)
    assert logbook.read_bytes() == before
    assert os.listdir(logbook.parent) == [logbook.name]


def test_parts_may_lie_anywhere(everything: Path, tmp_path: Path) -> None:
    parts = contents(everything)
    moved = {
        "_rels/.rels": parts["_rels/.rels"].replace(b"xl/workbook.xml", b"/book/the%20book.xml"),
        "book/the book.xml": parts["xl/workbook.xml"],
        "book/_rels/the book.xml.rels": re.sub(
            rb'Target="/?(?:xl/)?(worksheets/sheet2.xml)"',
            rb'Target="../elsewhere/second.xml"',
            parts["xl/_rels/workbook.xml.rels"],
        ).replace(b'"worksheets/', b'"/xl/worksheets/'),
        "elsewhere/second.xml": parts["xl/worksheets/sheet2.xml"],
        "xl/worksheets/sheet2.xml": None,
        "xl/workbook.xml": None,
        "xl/_rels/workbook.xml.rels": None,
    }
    path = rewritten(everything, tmp_path / "moved.xlsx", moved)
    second = edit(path, tmp_path / "b.xlsx", {"D5": 4.5}, "Night 2, b&w")
    assert Logbook.open(second).sheet("Night 2, b&w").rows[4][3] == 4.5
    assert b"<v>4.5</v>" in contents(second)["elsewhere/second.xml"]
    with io.BytesIO(second.read_bytes()) as again:
        assert zipfile.ZipFile(again).namelist() == zipfile.ZipFile(path).namelist()
