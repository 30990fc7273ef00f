"""Logbooks in .ods and .xlsm as LibreOffice writes them: what is not computed keeps its bytes.

Outside checks: LibreOffice makes the files and opens what was written; lxml reads the XML.
"""

import random
import re
import sys
import zipfile
from collections.abc import Mapping
from datetime import datetime, time, timedelta
from pathlib import Path
from typing import Any

import openpyxl
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from lxml import etree
from openpyxl.chart import LineChart, Reference
from openpyxl.comments import Comment
from openpyxl.styles import PatternFill
from openpyxl.workbook.defined_name import DefinedName

sys.path.insert(0, str(Path(__file__).parent))

from logs import HEADERS, ROWS, by_libreoffice, recipe, redshift, run, write_xlsx

from workbooks.build import build
from workbooks.files.ods_content import Walk
from workbooks.files.opendocument import KIND
from workbooks.fill import fill
from workbooks.logbook import ErrorValue, Logbook, LogbookError, Value
from workbooks.recipe import load

T = "{urn:oasis:names:tc:opendocument:xmlns:table:1.0}"
O = "{urn:oasis:names:tc:opendocument:xmlns:office:1.0}"  # noqa: E741
P = "{urn:oasis:names:tc:opendocument:xmlns:text:1.0}p"


def write_rich(path: Path) -> Path:
    """A log with a chart, comments, merged and coloured cells, formulas, names, a second sheet."""
    write_xlsx(path)
    book = openpyxl.load_workbook(path)
    sheet = book["Night"]
    sheet["A2"].comment = Comment("guided by hand", "crew")
    sheet["C2"].fill = PatternFill("solid", fgColor="FFEEDD")
    sheet["H1"] = "own"
    for row in range(2, 8):
        sheet.cell(row, 8, f"=C{row}*10")
    sheet.merge_cells("J1:K2")
    chart = LineChart()
    chart.add_data(Reference(sheet, min_col=3, min_row=1, max_row=7), titles_from_data=True)
    sheet.add_chart(chart, "M3")
    other = book.create_sheet("Weather b&w")
    other["B2"] = datetime(2031, 3, 14, 22, 15, 30)
    other["B3"] = time(4, 30)
    other["B3"].number_format = "hh:mm:ss"
    other["B4"] = True
    other["B5"] = "=1/0"
    other["B6"] = "=B2+1"
    other["B7"] = timedelta(hours=30)
    other["B8"] = "two\nlines"
    book.defined_names["first_line"] = DefinedName("first_line", attr_text="'Weather b&w'!$B$4")
    book.save(path)
    return path


@pytest.fixture(scope="module")
def ods(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("ods")
    return by_libreoffice(write_rich(folder / "night.xlsx"), "ods", folder)


@pytest.fixture(scope="module")
def xlsm(tmp_path_factory: pytest.TempPathFactory) -> Path:
    folder = tmp_path_factory.mktemp("xlsm")
    source = write_rich(folder / "source.xlsx")
    return with_macros(by_libreoffice(source, "xlsm:Calc MS Excel 2007 VBA XML", folder))


def with_macros(path: Path) -> Path:
    """Put a macro project into an .xlsm: a part that nothing here may look into."""
    project = random.Random(2).randbytes(3000)
    with zipfile.ZipFile(path) as old:
        held = {info: old.read(info) for info in old.infolist()}
    with zipfile.ZipFile(path, "w") as new:
        for info, content in held.items():
            if info.filename == "xl/_rels/workbook.xml.rels":
                content = content.replace(
                    b"</Relationships>",
                    b'<Relationship Id="rIdVba" Type="http://schemas.microsoft.com/office/2006/'
                    b'relationships/vbaProject" Target="vbaProject.bin"/></Relationships>',
                )
            if info.filename == "[Content_Types].xml":
                content = content.replace(
                    b"</Types>",
                    b'<Override PartName="/xl/vbaProject.bin" '
                    b'ContentType="application/vnd.ms-office.vbaProject"/></Types>',
                )
            new.writestr(info, content)
        new.writestr("xl/vbaProject.bin", project, zipfile.ZIP_DEFLATED)
    return path


def parts(path: Path) -> dict[str, bytes]:
    with zipfile.ZipFile(path) as archive:
        assert archive.testzip() is None
        return {name: archive.read(name) for name in archive.namelist()}


def test_every_other_part_of_an_ods_stays(ods: Path, tmp_path: Path) -> None:
    output = tmp_path / "filled.ods"
    report = fill(ods, output, recipe())
    assert [(sheet.name, sheet.filled, sheet.refused) for sheet in report.sheets] == [
        ("Night", 4, 2)
    ]
    before, after = parts(ods), parts(output)
    assert list(before) == list(after)
    assert [name for name in before if before[name] != after[name]] == ["content.xml"]
    assert any(name.startswith("Object") for name in before), "there is no chart in the test"
    # the type of a package stands first in it, and is not packed (ODF 1.3 part 2, 3.3)
    assert output.read_bytes()[30:].startswith(b"mimetype" + KIND.encode())
    with zipfile.ZipFile(ods) as old, zipfile.ZipFile(output) as new:
        for one, other in zip(old.infolist(), new.infolist(), strict=True):
            for trait in ("filename", "date_time", "compress_type", "external_attr", "extra"):
                assert getattr(one, trait) == getattr(other, trait)


def test_all_bytes_of_content_outside_the_new_cells_stay(ods: Path, tmp_path: Path) -> None:
    output = tmp_path / "filled.ods"
    fill(ods, output, recipe())
    before, after = parts(ods)["content.xml"], parts(output)["content.xml"]
    head = before.index(b"<table:table-row")
    assert after.startswith(before[:head])
    tail = before.index(b"</table:table>", head)
    assert after.endswith(before[tail:])
    # every cell with something in it is still there, in its order
    held = re.compile(rb"<table:table-cell[^>]*[^/>]>.*?</table:table-cell>", re.S)
    rest = iter(held.findall(after))
    for cell in held.findall(before):
        assert cell in rest


def test_libreoffice_opens_the_filled_ods(ods: Path, tmp_path: Path) -> None:
    output = tmp_path / "filled.ods"
    fill(ods, output, recipe())
    back = by_libreoffice(output, "xlsx", tmp_path / "back")
    night = openpyxl.load_workbook(back, data_only=True)["Night"]
    place = {cell.value: cell.column for cell in night[1] if cell.value}
    assert set(HEADERS) | {"own", "Redshift", "Velocity [km/s]", "Computed with"} == set(place)
    for number, row in enumerate(ROWS, 2):
        found = night.cell(number, place["Redshift"]).value
        if number in (4, 6):
            assert found == ("#VALUE!" if number == 4 else "#NUM!")
        else:
            assert found == pytest.approx(redshift(row), rel=1e-12)
        assert night.cell(number, place["own"]).value == pytest.approx(row[2] * 10)
        assert night.cell(number, 1).value == row[0]
    assert night["A2"].comment.text == "guided by hand"
    assert str(night.merged_cells) == "J1:K2"
    assert len(openpyxl.load_workbook(back)["Night"]._charts) == 1


def test_a_second_filling_changes_nothing(ods: Path, tmp_path: Path) -> None:
    first, second = tmp_path / "first.ods", tmp_path / "second.ods"
    one, two = fill(ods, first, recipe()), fill(first, second, recipe())
    assert one.sheets == two.sheets
    assert parts(first) == parts(second)


def test_values_of_an_ods(ods: Path) -> None:
    logbook = Logbook.open(ods)
    assert logbook.sheet_names == ["Night", "Weather b&w"]
    assert logbook.named_cells == {"first_line": ("Weather b&w", 4, 2)}
    weather = logbook.sheet("weather B&W")
    assert [row[1] for row in weather.rows[1:]] == [
        datetime(2031, 3, 14, 22, 15, 30),
        time(4, 30),
        True,
        ErrorValue("#DIV/0!"),
        pytest.approx(47922 + (22 + 15.5 / 60) / 24, rel=1e-12),
        timedelta(hours=30),
        "two\nlines",
    ]
    # LibreOffice writes a truth from an .xlsx as =TRUE()
    assert [row for row in range(1, 10) if weather.has_formula(row, 2)] == [4, 5, 6]
    rows = logbook.sheet("Night").rows
    assert [tuple(row[:4]) for row in rows[1:]] == [tuple(row) for row in ROWS]
    # a comment is no text of its cell
    assert rows[1][0] == "TH 0412-17"


def test_a_formula_keeps_its_place(ods: Path, tmp_path: Path) -> None:
    logbook = Logbook.open(ods)
    logbook.sheet("Night").set(2, 8, 1.5)
    logbook.save(tmp_path / "set.ods")
    content = parts(tmp_path / "set.ods")["content.xml"]
    assert b'table:formula="of:=[.C2]*10" office:value-type="float" office:value="1.5"' in content
    assert Logbook.open(tmp_path / "set.ods").sheet("Night").has_formula(2, 8)


cells = st.tuples(st.integers(1, 12), st.integers(1, 14))
values = st.one_of(
    st.none(),
    st.floats(allow_nan=False, allow_infinity=False),
    st.booleans(),
    st.sampled_from([ErrorValue("#NUM!"), ErrorValue("#VALUE!"), ErrorValue("#N/A")]),
    st.text("ab <>&'\"=+\u00e9\U0001f52d\n\t", min_size=1, max_size=6),
)


@settings(max_examples=150, deadline=None)
@given(edits=st.dictionaries(cells, values, min_size=1, max_size=12))
def test_what_was_set_is_what_is_read(ods: Path, edits: dict[tuple[int, int], Value]) -> None:
    logbook = Logbook.open(ods)
    sheet = logbook.sheet("Night")
    old = sheet.rows
    for (row, column), value in edits.items():
        sheet.set(row, column, value)
    target = ods.with_name("edited.ods")
    logbook.save(target, overwrite=True)
    again = Logbook.open(target)
    new = again.sheet("Night").rows
    for row in range(1, 13):
        for column in range(1, 15):
            wanted = edits.get((row, column), at(old, row, column))
            if isinstance(wanted, str) and not wanted.strip():
                wanted = None
            assert at(new, row, column) == wanted
            formula = sheet.has_formula(row, column)
            assert again.sheet("Night").has_formula(row, column) == formula
    assert again.sheet("Weather b&w").rows == logbook.sheet("Weather b&w").rows
    assert grid_of(target) == {
        place: value for place, value in grid_of(ods, edits).items() if value is not None
    }


def at(rows: list[list[Any]], row: int, column: int) -> Any:
    return rows[row - 1][column - 1] if row <= len(rows) and column <= len(rows[0]) else None


def grid_of(path: Path, edits: Mapping[tuple[int, int], Value] = {}) -> dict[Any, Any]:
    """Give what lxml finds in the first sheet: the type and the value of each filled cell."""
    table = next(etree.fromstring(parts(path)["content.xml"]).iter(f"{T}table"))
    found: dict[Any, Any] = {}
    number = 0
    for row in table.iter(f"{T}table-row"):
        for _ in range(min(int(row.get(f"{T}number-rows-repeated", 1)), 20)):
            number += 1
            column = 0
            for cell in row:
                for _ in range(min(int(cell.get(f"{T}number-columns-repeated", 1)), 30)):
                    column += 1
                    kind = cell.get(f"{O}value-type")
                    if kind:
                        value = cell.get(f"{O}value") or cell.get(f"{O}boolean-value")
                        found[number, column] = (kind, float(value) if kind == "float" else value)
    for place, value in edits.items():
        match value:
            case None:
                found[place] = None
            case bool():
                found[place] = ("boolean", str(value).lower())
            case str() | ErrorValue():
                found[place] = ("string", None)
            case _:
                found[place] = ("float", float(value))
    return found


def test_repeated_rows_and_cells_come_apart(ods: Path, tmp_path: Path) -> None:
    """Equal rows and equal cells may be written once, with a number (ODF 1.3 part 3, 9.1.3)."""
    content = parts(ods)["content.xml"]
    rows = list(re.finditer(rb"<table:table-row(?= )", content))
    assert b"TH 0412-17" in content[rows[1].start() : rows[2].start()]
    at = rows[1].end()
    content = content[:at] + b' table:number-rows-repeated="500"' + content[at:]
    path = rewritten(ods, tmp_path / "night.ods", {"content.xml": content})
    output = tmp_path / "filled.ods"
    report = fill(path, output, recipe())
    assert (report.sheets[0].filled, report.sheets[0].refused) == (503, 2)
    found = Logbook.open(output).sheet("Night").rows
    place = found[0].index("Redshift")
    assert [row[place] for row in found[1:501]] == [redshift(ROWS[0])] * 500
    back = by_libreoffice(output, "csv", tmp_path / "back").read_text("latin-1")
    assert back.count("TH 0412-17") == 500


# ---- .xlsm


def test_an_xlsm_keeps_its_macros_and_all_else(xlsm: Path, tmp_path: Path) -> None:
    before = parts(xlsm)
    assert "xl/vbaProject.bin" in before
    output = tmp_path / "filled.xlsm"
    report = fill(xlsm, output, recipe())
    assert report.sheets[0].filled == 4
    after = parts(output)
    assert list(after) == list(before)
    changed = [name for name in before if before[name] != after[name]]
    assert [name for name in changed if not re.fullmatch(r"xl/worksheets/sheet\d.xml", name)] == []
    assert len(changed) == 1
    book = openpyxl.load_workbook(output, keep_vba=True, data_only=True)
    place = {cell.value: cell.column for cell in book["Night"][1] if cell.value}
    assert book["Night"].cell(2, place["Redshift"]).value == pytest.approx(
        redshift(ROWS[0]), rel=1e-12
    )
    back = by_libreoffice(output, "ods", tmp_path / "back")
    assert Logbook.open(back).sheet("Night").rows[1][0] == "TH 0412-17"


# ---- what is refused


def rewritten(source: Path, target: Path, changes: Mapping[str, bytes]) -> Path:
    with zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in {**parts(source), **changes}.items():
            archive.writestr(name, content)
    return target


def refused(path: Path) -> str:
    output = path.with_name("never.ods")
    with pytest.raises(LogbookError) as caught:
        fill(path, output, recipe())
    assert not output.exists()
    sentence = str(caught.value)
    assert path.name in sentence
    assert "\n" not in sentence
    return sentence


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        (b"<office:document-content", b'<!DOCTYPE x [<!ENTITY j SYSTEM "file:///etc/hostname">]>'
         b"<office:document-content", "document type"),
        (b"</office:document-content>", b"", "damaged"),
        (b'number-columns-repeated="', b'number-columns-repeated="-', "repeats"),
        (b'number-columns-repeated="', b'number-columns-repeated="99999999', "too many"),
        (b"<table:table-row ", b'<table:table-row table:number-rows-repeated="999999" ', "repeats"),
        (b'table:name="Weather b&amp;w"', b'table:name="Night"', "two sheets of one name"),
    ],
)  # fmt: skip
def test_content_that_is_refused(
    ods: Path, tmp_path: Path, old: bytes, new: bytes, words: str
) -> None:
    content = parts(ods)["content.xml"]
    assert old in content
    changed = re.sub(rb'( table:number-rows-repeated="\d+")', b"", content)
    content = changed if b"number-rows-repeated" in new else content
    path = rewritten(ods, tmp_path / "a.ods", {"content.xml": content.replace(old, new)})
    assert words in refused(path)


def test_a_million_times_a_full_row_is_refused_in_little_memory(ods: Path, tmp_path: Path) -> None:
    cell = (
        b'<table:table-cell table:number-columns-repeated="16384" office:value-type="float" '
        b'office:value="1"/>'
    )
    content = parts(ods)["content.xml"]
    start = content.index(b"<table:table-row")
    row = b'<table:table-row table:number-rows-repeated="1048576">' + cell + b"</table:table-row>"
    path = rewritten(
        ods, tmp_path / "a.ods", {"content.xml": content[:start] + row + content[start:]}
    )
    assert "repeats the cell" in refused(path)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"mimetype": b"application/vnd.oasis.opendocument.text"}, "not a spreadsheet"),
        ({"META-INF/manifest.xml": b"<m><manifest:encryption-data/></m>"}, "encrypted"),
        ({"META-INF/documentsignatures.xml": b"<a/>"}, "signed"),
        ({"../outside.xml": b"<a/>"}, "bad name"),
        ({"/etc/passwd": b"<a/>"}, "bad name"),
    ],
)
def test_packages_that_are_refused(
    ods: Path, tmp_path: Path, changes: dict[str, bytes], words: str
) -> None:
    assert words in refused(rewritten(ods, tmp_path / "a.ods", changes))


def test_an_ods_cut_short_anywhere(ods: Path, tmp_path: Path) -> None:
    content = ods.read_bytes()
    chance = random.Random(3)
    for _ in range(60):
        path = tmp_path / "cut.ods"
        path.write_bytes(content[: chance.randrange(len(content))])
        refused(path)


def test_the_command_fills_an_ods_in_place(ods: Path, tmp_path: Path) -> None:
    from logs import RECIPE

    path = tmp_path / "night.ods"
    path.write_bytes(ods.read_bytes())
    (tmp_path / "own.toml").write_text(RECIPE)
    ran = run(tmp_path, "fill", "night.ods", "-r", "own.toml", "--in-place")
    assert (ran.returncode, ran.stderr) == (1, "")
    assert path.with_name("night.before-fill.ods").read_bytes() == ods.read_bytes()
    assert Logbook.open(path).sheet("Night").rows[0][-3] == "Redshift"


# ---- rows taken in at one look, and with care


def with_care(content: bytes) -> bytes:
    """Put a comment before all tables: after one, every row is looked at cell by cell."""
    return content.replace(b"<office:body>", CAREFUL + b"<office:body>", 1)


CAREFUL = b"<!-- by hand -->"


def seen(path: Path) -> Any:
    """Return all that is read of a logbook, or the reason why it is refused."""
    try:
        book = Logbook.open(path)
        return [
            (
                name,
                sheet.height,
                sheet.width,
                sheet.rows,
                sheet.columns({3, 8}),
                sheet.top,
                sorted(sheet.formula_columns),
                sheet.merged,
                sheet.last_used_column(2),
                [sheet.has_formula(row, 8) for row in range(1, 12)],
            )
            for name in book.sheet_names
            for sheet in (book.sheet(name), Logbook.open(path).sheet(name))
        ], book.named_cells
    except LogbookError as error:
        return str(error).replace(str(path), "")


@pytest.fixture(scope="module")
def two_ways(ods: Path, tmp_path_factory: pytest.TempPathFactory) -> list[tuple[Path, Path]]:
    """Files of LibreOffice, each as it is and as one that must be read with care."""
    folder = tmp_path_factory.mktemp("ways")
    template = folder / "template.xlsx"
    build(load("line-log"), template, rows=40)
    found = []
    for path in (ods, by_libreoffice(template, "ods", folder)):
        content = parts(path)["content.xml"]
        careful = rewritten(
            path, folder / f"careful-{path.name}", {"content.xml": with_care(content)}
        )
        found.append((path, careful))
    return found


def test_both_ways_read_the_same(two_ways: list[tuple[Path, Path]]) -> None:
    for quick, careful in two_ways:
        assert seen(quick) == seen(careful)
        assert len(seen(quick)[0]) > 2


@pytest.mark.parametrize("size", [1, 7, 1000, 60_000])
def test_rows_in_pieces_of_any_size(ods: Path, size: int) -> None:
    content = parts(ods)["content.xml"]

    def walked(pieces: list[bytes]) -> list[Any]:
        rows: list[Any] = []
        walk = Walk(
            ods,
            lambda table, row: rows.append(
                (table, row.number, row.repeated, row.start, row.end, row.cells)
            ),
            check=True,
        )
        for piece in pieces:
            walk.feed(piece)
        walk.feed(b"", True)
        return rows

    pieces = [content[start : start + size] for start in range(0, len(content), size)]
    whole = walked([content])
    assert walked(pieces) == whole
    assert any(content[start:].startswith(b"<table:table-row") for _, _, _, start, _, _ in whole)


@settings(max_examples=60, deadline=None)
@given(edits=st.dictionaries(cells, values, min_size=1, max_size=12), which=st.integers(0, 1))
def test_both_ways_write_the_same(
    two_ways: list[tuple[Path, Path]], edits: dict[tuple[int, int], Value], which: int
) -> None:
    written = []
    for path in two_ways[which]:
        logbook = Logbook.open(path)
        sheet = logbook.sheet(logbook.sheet_names[0])
        for (row, column), value in edits.items():
            sheet.set(row, column, value)
        target = path.with_name(f"edited-{path.name}")
        logbook.save(target, overwrite=True)
        written.append(parts(target)["content.xml"].replace(CAREFUL, b""))
    assert written[0] == written[1]


def test_both_ways_refuse_the_same(ods: Path, tmp_path: Path) -> None:
    """Bytes are exchanged at random where the rows stand; neither way may see more than the other.

    What is refused at different places of the file may be refused in other words.
    """
    chance = random.Random(11)
    content = parts(ods)["content.xml"]
    first, last = content.index(b"<table:table-row"), content.rindex(b"</table:table-row>")
    refused = 0
    for _ in range(300):
        changed = bytearray(content)
        for _ in range(chance.choice((1, 1, 2))):
            at = chance.randrange(first, last)
            match chance.randrange(3):
                case 0:
                    changed[at] = chance.choice(b"<>\"'&/ 0\xe9\x00=x")
                case 1:
                    del changed[at : at + chance.randrange(1, 30)]
                case 2:
                    stop = min(at + chance.randrange(1, 200), last)
                    changed[at:at] = changed[at:stop]
        quick = rewritten(ods, tmp_path / "quick.ods", {"content.xml": bytes(changed)})
        careful = rewritten(
            ods, tmp_path / "careful.ods", {"content.xml": with_care(bytes(changed))}
        )
        one, other = seen(quick), seen(careful)
        if isinstance(other, str):
            refused += 1
            assert isinstance(one, str), other
        else:
            assert one == other
    assert 70 < refused < 290
