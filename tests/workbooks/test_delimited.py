"""Logbooks in .csv, .tsv and .ecsv: what is not computed keeps its bytes.

Outside checks: Python's csv module, astropy and LibreOffice read what was written; files are
compared by byte; the kernel says how much memory a filling took.
"""

import csv
import io
import os
import sys
import time
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from astropy.table import Table
from hypothesis import given, settings
from hypothesis import strategies as st
from turns import of_process

sys.path.insert(0, str(Path(__file__).parent))

from logs import (
    HEADERS,
    RECIPE,
    ROWS,
    by_libreoffice,
    recipe,
    redshift,
    run,
    write_xlsx,
)

import cellfuncs as cf
from workbooks.files import delimited, opened
from workbooks.files.opened import OpenedFile
from workbooks.files.records import LONGEST, Text, unquoted
from workbooks.fill import Report, fill
from workbooks.logbook import ErrorValue, Logbook, LogbookError

NEW = ["Redshift", "Velocity [km/s]", "Computed with"]


def filled(path: Path) -> tuple[Report, bytes]:
    output = path.with_name(f"filled{path.suffix}")
    report = fill(path, output, recipe(), overwrite=True)
    return report, output.read_bytes()


def written(folder: Path, content: bytes, suffix: str = ".csv") -> Path:
    path = folder / f"night{suffix}"
    path.write_bytes(content)
    return path


HEADER = "Target,Line,Wavelength [nm],Remark"


@pytest.mark.parametrize("end", ["\n", "\r\n"])
@pytest.mark.parametrize("mark", [b"", b"\xef\xbb\xbf"])
@pytest.mark.parametrize("last", [True, False])
def test_untouched_bytes_stay(tmp_path: Path, end: str, mark: bytes, last: bool) -> None:
    lines = [
        HEADER,
        'TH 1,"H alpha" ,689.284,"thin, cloud"',
        '"TH 2",H beta, 510.40 ,"he said ""good"""',
        "",
        "Dome closed: wind",
        '=1+1,H alpha,6.89284e2,"two\nlines"',
        "@x,Halfa,1,",
    ]
    path = written(tmp_path, mark + (end.join(lines) + (end if last else "")).encode())
    report, after = filled(path)
    assert (report.sheets[0].filled, report.sheets[0].refused) == (3, 1)
    assert after.startswith(mark)
    text = after.removeprefix(mark).decode()
    # each old line is there as it was, with new fields after it, or nothing after it at all
    for line in lines:
        at = text.index(line)
        text = text[at + len(line) :]
        assert text[:1] in (",", end[:1], "")
    assert after.endswith(end.encode()) == last
    assert after.count(b"\r\n") == (len(lines) - (not last) if end == "\r\n" else 0)
    rows = list(csv.reader(io.StringIO(after.removeprefix(mark).decode(), newline="")))
    assert rows[0] == [*HEADERS, *NEW]
    assert float(rows[1][4]) == pytest.approx(cf.redshift_from_line(6892.84, "H alpha"), rel=1e-12)
    assert float(rows[2][4]) == pytest.approx(cf.redshift_from_line(5104.0, "H beta"), rel=1e-12)
    assert rows[5][0] == "=1+1"
    assert rows[6][4:6] == ["#VALUE!", "#VALUE!"]


@pytest.mark.parametrize("separator", [",", ";", "\t"])
@pytest.mark.parametrize("decimal", [".", ","])
def test_separators_and_decimal_signs(tmp_path: Path, separator: str, decimal: str) -> None:
    if separator == decimal:
        values = ['"689,284"', '"510,4"']
    else:
        values = ["689.284".replace(".", decimal), "510.4".replace(".", decimal)]
    rows = [["Line", "Wavelength [nm]"], ["H alpha", values[0]], ["H beta", values[1]]]
    path = written(tmp_path, "".join(separator.join(row) + "\n" for row in rows).encode())
    report, after = filled(path)
    if separator == decimal:
        assert report.sheets[0].refused == 2
        return
    found = list(csv.reader(io.StringIO(after.decode()), delimiter=separator))
    numbers = [row[2] for row in found[1:]]
    assert all(decimal in number for number in numbers)
    wanted = [cf.redshift_from_line(6892.84, "H alpha"), cf.redshift_from_line(5104.0, "H beta")]
    assert [float(number.replace(decimal, ".")) for number in numbers] == pytest.approx(
        wanted, rel=1e-12
    )
    assert [row[:2] for row in found] == rows


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "cp1252"])
def test_the_encoding_stays(tmp_path: Path, encoding: str) -> None:
    text = "Target,Line,Wavelength [Angstrom]\nÅngström's,H alpha,6892.84\n"
    path = written(tmp_path, text.encode(encoding))
    _, after = filled(path)
    assert after.decode(encoding).startswith("Target,Line,Wavelength [Angstrom],Redshift")
    assert "\nÅngström's,H alpha,6892.84,0.0" in after.decode(encoding)
    assert after[:2] == path.read_bytes()[:2]


def test_a_second_filling_changes_nothing(tmp_path: Path) -> None:
    path = written(
        tmp_path, f'{HEADER}\nTH,H alpha,689.284,"a,b"\nTH,Halfa,1,\n,,,\nTH,H beta,-5\n'.encode()
    )
    _, once = filled(path)
    again = written(tmp_path, once)
    _, twice = filled(again)
    assert once == twice


def test_texts_keep_to_themselves(tmp_path: Path) -> None:
    """What a log holds stays as it is, a formula's look included; nothing is worked out."""
    for start in "=+-@":
        path = written(tmp_path, f"{HEADER}\n{start}cmd|'/c calc'!A1,H alpha,689.284,\n".encode())
        _, after = filled(path)
        assert f"\n{start}cmd|'/c calc'!A1,H alpha,689.284,,".encode() in after
        sheet = Logbook.open(path).sheet("night")
        assert sheet.rows[1][0] == f"{start}cmd|'/c calc'!A1"
        # what is written by the program itself is told apart from a formula
        sheet.set(2, 4, f"{start}1")
        logbook = Logbook.open(path)
        logbook.sheet("night").set(2, 4, f"{start}1")
        logbook.save(tmp_path / "text.csv", overwrite=True)
        assert f",'{start}1\n".encode() in (tmp_path / "text.csv").read_bytes()


def test_values(tmp_path: Path) -> None:
    content = b'a,b,c\n1,1e3,"2.5"\n nan,inf,1_000\n#N/A,TRUE,\n"",  ,"a""b"\n007\n'
    rows = Logbook.open(written(tmp_path, content)).sheet("NIGHT").rows
    assert rows == [
        ["a", "b", "c"],
        [1.0, 1000.0, 2.5],
        [" nan", "inf", "1_000"],
        [ErrorValue("#N/A"), "TRUE", None],
        [None, None, 'a"b'],
        [7.0, None, None],
    ]


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b'a,b\n"never closed,1\n' + b"x" * 10, "not closed"),
        (b"a,b\n\x00\x01\x02", "not a text"),
        (b"", "empty"),
        (b"\xff\xfea", "utf-16"),
    ],
)
def test_what_is_no_text(tmp_path: Path, content: bytes, words: str) -> None:
    path = written(tmp_path, content)
    with pytest.raises(LogbookError, match=words) as caught:
        _ = Logbook.open(path).sheet("night").rows
    assert "night.csv" in str(caught.value)


fields = st.text(
    st.characters(codec="utf-8", exclude_characters="\0\r", exclude_categories=["Cs"]), max_size=6
) | st.sampled_from(['"', ",", "\n", "1.5", " ", '""', "a\r\nb", '"\n', '5" tube\n"', "\n\n"])


@settings(max_examples=200, deadline=None)
@given(
    rows=st.lists(st.lists(fields, min_size=2, max_size=4), min_size=1, max_size=5),
    end=st.sampled_from(["\n", "\r\n"]),
    last=st.booleans(),
    encoding=st.sampled_from(["utf-8", "utf-8-sig", "utf-16"]),
    size=st.integers(1, 40),
)
def test_blocks_may_end_anywhere(
    tmp_path_factory: pytest.TempPathFactory,
    rows: list[list[str]],
    end: str,
    last: bool,
    encoding: str,
    size: int,
) -> None:
    """In the middle of a character, a line's end, a quotation: csv reads the same in the end."""
    out = io.StringIO(newline="")
    csv.writer(out, lineterminator=end).writerows([["first", "row"], *rows])
    whole = out.getvalue() if last else out.getvalue().removesuffix(end)
    read = list(csv.reader(io.StringIO(whole, newline="")))
    path = written(tmp_path_factory.getbasetemp(), whole.encode(encoding))
    outputs = []
    for block in (size, 1 << 20):
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr(opened, "BLOCK", block)
            text = Text(OpenedFile(path), ",")
            found = list(text.records())
            assert [list(map(unquoted, record.fields)) for record in found] == read
            assert "".join(record.text + record.end for record in found) == whole
            logbook = Logbook.open(path)
            output = path.with_name("out.csv")
            logbook.save(output, overwrite=True)
            assert output.read_bytes() == path.read_bytes()
            sheet = delimited.DelimitedSheet(text)
            sheet.set_column(6, 1, [1.5] * len(read))
            outputs.append(io.BytesIO())
            sheet.write(outputs[-1])
    assert outputs[0].getvalue() == outputs[1].getvalue()
    after = outputs[0].getvalue().decode(encoding)
    assert list(csv.reader(io.StringIO(after, newline=""))) == [
        [*row, *[""] * (5 - len(row)), "1.5"] for row in read
    ]


@pytest.mark.parametrize(
    "content",
    [
        b"Line,Wavelength [nm]\r\nH alpha,689.284\nH beta,510.4\r\n",
        b"Line,Wavelength [nm]\nH alpha,689.284\nH beta,510.4\r\n",
        b"Line,Wavelength [nm]\r\nH alpha,689.284\r\nH beta,510.4",
        b"Line,Wavelength [nm]\r\nH alpha,689.284\r\nH beta,510.4\r",
        b"Line,Wavelength [nm]\rH alpha,689.284\rH beta,510.4",
        b"Line,Wavelength [nm]\rH alpha,689.284\rH beta,510.4\r",
    ],
)
def test_every_line_keeps_its_own_end(tmp_path: Path, content: bytes) -> None:
    _, after = filled(written(tmp_path, content))
    old, new = content.splitlines(keepends=True), after.splitlines(keepends=True)
    for before, line in zip(old, new, strict=True):
        bare = before.rstrip(b"\r\n")
        assert line.startswith(bare + b",")
        assert line.removeprefix(line.rstrip(b"\r\n")) == before.removeprefix(bare)


def test_encodings_are_told_from_the_whole_file(tmp_path: Path) -> None:
    """One letter far down says that a log is not in UTF-8, another that it is not cp1252 either."""
    rows = b"".join(b"TH %d,H alpha,689.284,x\n" % at for at in range(20_000))
    for letter, encoding in ((b"\xc5", "cp1252"), (b"\x81", "latin-1"), (b"\xc3\x85", "utf-8")):
        content = HEADER.encode() + b"\n" + rows + b"TH,H alpha,689.284," + letter + b"\n"
        path = written(tmp_path, content)
        assert Text(OpenedFile(path), None).encoding == encoding
        _, after = filled(path)
        for old, new in zip(content.split(b"\n"), after.split(b"\n"), strict=True):
            assert new.startswith(old)


def test_a_quotation_that_takes_in_the_rest(tmp_path: Path) -> None:
    """However many lines follow, that is seen at once."""
    path = written(tmp_path, b'a,b\n"never closed,1\n' + b"1,2\n" * 200_000)
    begun = time.monotonic()
    with pytest.raises(LogbookError, match='not closed: "never closed,1') as caught:
        _ = Logbook.open(path).sheet("night").rows
    assert time.monotonic() - begun < 10
    assert "night.csv" in str(caught.value)


@pytest.mark.parametrize("quote", [b"", b'"'])
def test_a_line_without_end(tmp_path: Path, quote: bytes) -> None:
    path = written(tmp_path, b"a,b\n1,2\n" + quote + b"x" * (LONGEST + 100_000))
    with pytest.raises(LogbookError, match="not closed: .x" if quote else "more than 1,048,576"):
        _ = Logbook.open(path).sheet("night").rows


def test_one_row_is_far_wider_than_the_others(tmp_path: Path) -> None:
    """Sixteen thousand fields once do not make as many of each empty line."""
    path = written(tmp_path, b"Line\n" + b"," * 16_000 + b"x\n" + b"\n" * 60_000 + b"end\n")
    sheet = Logbook.open(path).sheet("night")
    cells = sheet.columns({1})[1]
    assert (cells[0], cells[-1], len(cells), sheet.width) == ("Line", "end", 60_003, 16_001)
    assert (sheet.last_used_column(2), sheet.last_used_column(3)) == (16_001, 1)
    wide = written(tmp_path, b"Line\n" + b"," * 20_000 + b"\n")
    with pytest.raises(LogbookError, match=r"2 rows of up to 20,001 fields, more than"):
        _ = Logbook.open(wide).sheet("night").top


# ---- a file that changes


LONG = HEADER.encode() + b"\n" + b"TH,H alpha,689.284,x\n" * 20_000


def later(path: Path, content: bytes) -> None:
    """Write into the file that is there, as a program that does not swap it in whole."""
    with path.open("r+b") as file:
        file.write(content)
        file.truncate()


def test_a_file_that_changes_while_it_is_read_first(tmp_path: Path) -> None:
    path = written(tmp_path, LONG)
    for content in (LONG[:-21], LONG + b"TH,H alpha,700,x\n", LONG.replace(b"689", b"700")):
        file = OpenedFile(path)
        chunks = file.chunks()
        next(chunks)
        later(path, content)
        with pytest.raises(LogbookError, match=r"night\.csv was being written by another program"):
            list(chunks)


@pytest.mark.parametrize("same_time", [False, True])
@pytest.mark.parametrize("in_place", [False, True])
def test_a_file_that_changes_before_it_is_written(
    tmp_path: Path, same_time: bool, in_place: bool
) -> None:
    """Not even where its size and the time of its change say nothing of it."""
    path = written(tmp_path, LONG)
    logbook = Logbook.open(path)
    sheet = logbook.sheet("night")
    sheet.set_column(5, 1, ["new"] * len(sheet.columns({3})[3]))
    before = path.stat()
    theirs = LONG.replace(b"689.284", b"700.111")
    later(path, theirs)
    if same_time:
        os.utime(path, ns=(before.st_atime_ns, before.st_mtime_ns))
    output = path if in_place else tmp_path / "out.csv"
    with pytest.raises(LogbookError, match=r"night\.csv was changed by someone else since it was"):
        logbook.save(output, overwrite=True, backup=True)
    assert [each.name for each in tmp_path.iterdir()] == ["night.csv"]
    assert path.read_bytes() == theirs
    with pytest.raises(LogbookError, match=r"night\.csv was changed by someone else"):
        sheet.columns({4})


def test_another_file_put_in_its_place(tmp_path: Path) -> None:
    """What was opened is what is written, and not over what came in between."""
    path = written(tmp_path, LONG)
    logbook = Logbook.open(path)
    logbook.sheet("night").set(1, 4, "Note")
    (tmp_path / "theirs").write_bytes(HEADER.encode())
    (tmp_path / "theirs").replace(path)
    logbook.save(tmp_path / "out.csv")
    assert (tmp_path / "out.csv").read_bytes() == LONG.replace(b"Remark", b"Note", 1)
    with pytest.raises(LogbookError, match="changed by someone else"):
        logbook.save(path, overwrite=True)
    assert path.read_bytes() == HEADER.encode()


@pytest.mark.parametrize("closed_first", [False, True])
def test_saved_in_place(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, closed_first: bool
) -> None:
    """Where no open file can be replaced it is closed, and then there is nothing more to read."""
    monkeypatch.setattr(delimited, "CLOSED_FIRST", closed_first)
    path = written(tmp_path, LONG)
    logbook = Logbook.open(path)
    logbook.sheet("night").set(1, 4, "Note")
    logbook.save(path, overwrite=True)
    assert path.read_bytes() == LONG.replace(b"Remark", b"Note", 1)
    if closed_first:
        with pytest.raises(LogbookError, match="open it again"):
            logbook.sheet("night").columns({1})
    else:
        logbook.sheet("night").set(1, 3, "Other")
        logbook.save(path, overwrite=True)
        assert path.read_bytes().startswith(b"Target,Line,Other,Note\n")


# ---- memory


@pytest.mark.parametrize("quote", ["", '"'])
def test_columns_that_are_not_used_take_no_memory(tmp_path: Path, quote: str) -> None:
    (tmp_path / "own.toml").write_text(RECIPE)
    log = tmp_path / "night.csv"
    found = []
    for width in (12, 40):
        names = ["Line", "Wavelength [nm]", *(f"Remark {at}" for at in range(width - 2))]
        remark = "thin clouds in the north-west from midnight on; the dome waited"
        row = ["H alpha", "689.284", *[remark] * (width - 3), f"{quote}closed at dawn{quote}"]
        with log.open("w") as file:
            file.write(",".join(names) + "\n")
            file.writelines([",".join(row) + "\n"] * 20_000)
        command = ("fill", log, "-o", tmp_path / "out.csv", "-r", tmp_path / "own.toml")
        found.append(of_process("-m", "workbooks.cli", *command, "--overwrite")[1])
        with (tmp_path / "out.csv").open() as file:
            filled = csv.reader(file)
            assert next(filled)[width:] == NEW
            for row in filled:
                assert float(row[width]) == pytest.approx(0.05, abs=1e-3)
    assert log.stat().st_size > 45e6
    assert found[1] / found[0] < 1.1


def test_a_file_of_libreoffice(tmp_path: Path) -> None:
    path = by_libreoffice(write_xlsx(tmp_path / "night.xlsx"), "csv", tmp_path / "made")
    before = path.read_bytes()
    report, after = filled(path)
    assert (report.sheets[0].filled, report.sheets[0].refused) == (4, 2)
    for old, new in zip(before.split(b"\n"), after.split(b"\n"), strict=True):
        assert new.startswith(old)
    encoding = Text(OpenedFile(path), None).encoding
    back = by_libreoffice(path.with_name("filled.csv"), "xlsx", tmp_path / "back")
    sheet = openpyxl.load_workbook(back)["filled"]
    assert [cell.value for cell in sheet[1]] == [*HEADERS, *NEW]
    for number, row in enumerate(ROWS, 2):
        if number not in (4, 6):
            assert sheet.cell(number, 5).value == pytest.approx(redshift(row), rel=1e-12)
    assert encoding in ("utf-8", "cp1252")


def test_a_log_longer_than_a_block(tmp_path: Path) -> None:
    rows = "".join(f"TH {at},H alpha,{657 + at * 0.001:.3f},x\n" for at in range(60_000))
    path = written(tmp_path, f"{HEADER}\n{rows}".encode())
    assert path.stat().st_size > 1 << 20
    report, after = filled(path)
    assert report.sheets[0].filled == 60_000
    found = np.genfromtxt(io.BytesIO(after), delimiter=",", skip_header=1, usecols=(2, 4))
    wanted = cf.redshift_from_line(found[:, 0] * 10, "H alpha")
    assert np.allclose(found[:, 1], wanted, rtol=1e-12, atol=0)
    assert filled(written(tmp_path, after))[1] == after


# ---- .ecsv


@pytest.fixture
def ecsv(tmp_path: Path) -> Path:
    table = Table(
        {
            "Target": ["=1+1", "007", "a b"],
            "Line": ["H alpha", "Halfa", "H beta"],
            "Wavelength": np.array([689.284, 700.0, 510.4]),
            "Counts": np.array([1, 2, 3]),
        }
    )
    table["Wavelength"].unit = "nm"
    table["Wavelength"].description = "fitted: centre [nm]"
    table.meta["observatory"] = {"name": "Invented Heights", "crew": ["B", "C"]}
    path = tmp_path / "night.ecsv"
    table.write(path, format="ascii.ecsv")
    return path


@pytest.mark.parametrize("delimiter", [" ", ","])
def test_astropy_reads_the_ecsv_back(ecsv: Path, delimiter: str) -> None:
    before = Table.read(ecsv)
    before.write(ecsv, format="ascii.ecsv", delimiter=delimiter, overwrite=True)
    report, after = filled(ecsv)
    assert (report.sheets[0].filled, report.sheets[0].refused) == (2, 1)
    table = Table.read(after.decode(), format="ascii.ecsv")
    assert table.colnames == [*before.colnames, "Redshift", "Velocity", "Computed with"]
    assert table.meta == before.meta
    for name in before.colnames:
        assert list(table[name]) == list(before[name])
        assert table[name].dtype == before[name].dtype
        assert (table[name].unit, table[name].description) == (
            before[name].unit,
            before[name].description,
        )
    assert table["Redshift"].unit is None
    assert table["Redshift"].description == "from the line's vacuum wavelength"
    assert table["Velocity"].unit == "km/s"
    assert table["Velocity"].dtype == np.float64
    assert table["Velocity"].mask.tolist() == [False, True, False]
    assert table["Redshift"][0] == pytest.approx(cf.redshift_from_line(6892.84, "H alpha"))
    # what was there has its bytes still
    old, new = ecsv.read_bytes().splitlines(), after.splitlines()
    for line in old:
        assert any(other.startswith(line) for other in new)
    again = ecsv.with_name("again.ecsv")
    fill(ecsv.with_name("filled.ecsv"), again, recipe())
    assert again.read_bytes() == after


def test_an_integer_column_is_not_given_fractions(ecsv: Path) -> None:
    ecsv.write_text(
        ecsv.read_text().replace("name: Counts", "name: Redshift").replace("Counts", "Redshift")
    )
    with pytest.raises(LogbookError, match="'Redshift' is of int64"):
        filled(ecsv)


@pytest.mark.parametrize(
    ("old", "new"),
    [
        ("%ECSV", "%ESCV"),
        ("datatype:", "datatypes:"),
        ("name: Line", "nam: Line"),
        ("- {name: Line", "- {name: &a [*a"),
        ("Target Line", "Target Lines"),
        ("# ---", "# ---\n# delimiter: '|'"),
    ],
)
def test_a_header_that_does_not_hold(ecsv: Path, old: str, new: str) -> None:
    ecsv.write_text(ecsv.read_text().replace(old, new, 1))
    with pytest.raises(LogbookError, match=r"night\.ecsv"):
        filled(ecsv)


def test_the_command_takes_them(ecsv: Path) -> None:
    (ecsv.parent / "own.toml").write_text(RECIPE)
    ran = run(ecsv.parent, "fill", "night.ecsv", "-r", "own.toml")
    assert (ran.returncode, ran.stderr) == (1, "")
    assert ecsv.with_name("night-filled.ecsv").exists()
    ran = run(ecsv.parent, "fill", "night.ecsv", "-r", "own.toml", "-o", "x.csv")
    assert ran.returncode == 2
    assert "export" in ran.stderr
