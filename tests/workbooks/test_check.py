"""`check` finds every mistake at its cell, and none where none was made.

The mistakes are put in by tests/workbooks/audited.py, which knows nothing of how they are found.
Outside checks: openpyxl's translator moves formulas, formualizer computes them, openpyxl and
LibreOffice read the comments; precedence by OASIS OpenDocument 1.3 part 4, section 5.5; comments by
ECMA-376 part 1, 18.7, their boxes by its part 4.
"""

import json
import os
import re
import subprocess
import sys
import zipfile
from contextlib import suppress
from datetime import datetime
from pathlib import Path
from random import Random
from typing import Any

import openpyxl
import pytest
from formualizer import Workbook
from hypothesis import given, settings
from hypothesis import strategies as st
from lxml import etree
from openpyxl.comments import Comment
from openpyxl.formula.translate import Translator

sys.path.insert(0, str(Path(__file__).parent))

import audited
from everything import write_everything

from workbooks.annotate import annotate
from workbooks.build import build
from workbooks.check import KINDS, CheckReport, Finding, check
from workbooks.export import export
from workbooks.formula_cells import formula_cells, plain_formula
from workbooks.formulas import Follower, NotReadable, Part, Quantity, evaluated, parsed, relative
from workbooks.header_words import medium_of_line, number_in
from workbooks.logbook import Area, LogbookError, cell_name
from workbooks.recipe import built_in, load, read


def spots(report: CheckReport) -> set[audited.Place]:
    """Return every cell that was found, with the kind: a run of cells one by one."""
    found = set()
    for finding in report.findings:
        area = Area.parsed(f"{finding.cell}:{finding.last_cell or finding.cell}")
        assert area is not None
        for row in range(area.first_row, area.last_row + 1):
            for column in range(area.first_column, area.last_column + 1):
                found.add((finding.sheet, cell_name(row, column), finding.kind))
    return found


# ---- twenty with mistakes, twenty without ------------------------------------------------------


@pytest.mark.parametrize("number", range(len(audited.SEEDED)))
def test_every_mistake_is_found_at_its_cell_and_nothing_else(tmp_path: Path, number: int) -> None:
    log = audited.seeded(number, tmp_path)
    before = log.path.read_bytes()
    report = check(log.path, log.recipe)
    assert log.mistakes
    assert log.mistakes - spots(report) == set(), "not found"
    assert spots(report) - log.mistakes == set(), "found where nothing is wrong"
    assert log.path.read_bytes() == before
    assert sorted(tmp_path.iterdir()) == [log.path]
    assert all(finding.sentence and finding.kind in KINDS for finding in report.findings)


@pytest.mark.parametrize("number", range(len(audited.CLEAN)))
def test_nothing_is_found_in_a_clean_log(tmp_path: Path, number: int) -> None:
    log = audited.clean(number, tmp_path)
    report = check(log.path, log.recipe)
    assert [str(finding) for finding in report.findings] == []
    assert report.sheets


def test_the_seeded_logs_hold_every_kind_of_mistake(tmp_path: Path) -> None:
    assert len(audited.SEEDED) == len(audited.CLEAN) == 20
    assert sum(rows >= 1000 for _, rows in audited.CLEAN) >= 2
    kinds = {
        kind
        for number in range(len(audited.SEEDED))
        for _, _, kind in audited.seeded(number, tmp_path).mistakes
    }
    assert kinds == set(KINDS)


@pytest.mark.parametrize("name", built_in())
@pytest.mark.parametrize("formulas", ["plain", "none"])
def test_nothing_is_found_in_an_empty_template(tmp_path: Path, name: str, formulas: str) -> None:
    path = tmp_path / "t.xlsx"
    build(load(name), path, formulas=formulas, rows=5)
    assert [str(finding) for finding in check(path).findings] == []


def test_nothing_is_found_in_a_workbook_with_everything_in_it(tmp_path: Path) -> None:
    report = check(write_everything(tmp_path / "everything.xlsx"))
    assert [str(finding) for finding in report.findings] == []
    assert report.sheets == ["Night 1", "Night 2, b&w"]


# ---- what the sentences say --------------------------------------------------------------------


@pytest.fixture
def formulas(tmp_path: Path) -> dict[str, str]:
    """Every sentence about the log that holds the most mistakes in formulas, by cell and kind"""
    number = 12
    log = audited.seeded(number, tmp_path)
    return {
        f"{finding.cell} {finding.kind}": finding.sentence
        for finding in check(log.path, log.recipe).findings
    }


def sentence(found: dict[str, str], column: str, kind: str) -> list[str]:
    return [text for key, text in found.items() if re.fullmatch(rf"{column}\d+ {kind}", key)]


def test_the_sentences_name_columns_units_and_the_way_out(formulas: dict[str, str]) -> None:
    assert sentence(formulas, "I", "wrong unit") == [
        "VELOCITY_FROM_REDSHIFT takes z without a unit, but column F («Earth's velocity [km/s]») "
        "is in km/s"
    ]
    added = sentence(formulas, "H", "redshifts added")
    assert "use REDSHIFT_COMBINED" in added[0]
    assert "(1+z)(1+v/c)−1" in added[0]
    assert any("measured in vacuum, but it is in air" in t for t in sentence(
        formulas, "G", "media mixed"))  # fmt: skip
    assert any("observed is -" in t for t in sentence(formulas, "G", "error value"))
    assert any("rest is empty" in t for t in sentence(formulas, "G", "error value"))
    assert any("divided by D" in t for t in sentence(formulas, "H", "error value"))
    assert any("cellfuncs connect" in t for t in sentence(formulas, "H", "error value"))
    dates = sentence(formulas, "F", "turned into a date")
    assert "12.5 or 5.12" in dates[0]
    assert "MAR1 or 1-3" in sentence(formulas, "A", "turned into a date")[0]
    assert sentence(formulas, "F", "number as text")[0].endswith("type -12.5")


def test_a_recipes_own_words_explain_an_error_value(tmp_path: Path) -> None:
    log = audited.seeded(1, tmp_path)
    said = {
        (finding.cell[0], finding.sentence)
        for finding in check(log.path, log.recipe).findings
        if finding.kind == "error value"
    }
    assert ("J", "#VALUE!: Air/vac must be vacuum or air; it is 'ari'") in said
    assert any("near matches: H alpha" in sentence for _, sentence in said)


# ---- formulas taken apart ----------------------------------------------------------------------


def value(formula: str) -> float:
    def nothing(part: Part) -> Any:
        raise NotReadable("no cells here")

    return float(evaluated(parsed(formula), nothing))


@pytest.mark.parametrize(
    ("formula", "result"),
    [
        # OASIS OpenDocument 1.3, part 4, 5.5: a sign binds closer than ^, ^ groups to the left
        ("=-2^2", 4.0),
        ("=2^3^2", 64.0),
        ("=2-3-4", -5.0),
        ("=50%", 0.5),
        ("=2*3%", 0.06),
        ("=-(2+3)*2", -10.0),
        ("=1E3/4*2", 500.0),
    ],
)
def test_operators_bind_as_in_a_cell(formula: str, result: float) -> None:
    assert value(formula) == pytest.approx(result, rel=1e-15)


NUMBERS = st.integers(1, 9).map(str)
EXPRESSIONS = st.recursive(
    NUMBERS,
    lambda inner: st.one_of(
        st.tuples(inner, st.sampled_from("+-*/"), inner).map("".join),
        inner.map(lambda text: f"({text})"),
        inner.map(lambda text: f"-({text})"),
        st.tuples(NUMBERS, NUMBERS).map("^".join),
    ),
    max_leaves=12,
)


@given(EXPRESSIONS)
@settings(max_examples=150, deadline=None)
def test_arithmetic_is_read_as_another_engine_reads_it(text: str) -> None:
    book = Workbook()
    book.add_sheet("S")
    book.set_formula("S", 1, 1, f"={text}")
    expected = book.evaluate_cell("S", 1, 1)
    try:
        found = value(f"={text}")
    except NotReadable:
        assert not isinstance(expected, float)
        return
    assert found == pytest.approx(expected, rel=1e-12)


FORMULAS = [
    "=C5-D5",
    "=IF($C5=\"C5\",C$5+'D6 x'!D6,1E5)",
    "=SUM(A$1:A5)/COUNT($A$1:$A$5)",
    "=ORG.CELLFUNCS.CALC.REDSHIFT_FROM_LINE(AA5,B5)",
    "=LOG10(C5)+hubble_constant",
    '="A1 of ""B2"" "&A1',
]


@pytest.mark.parametrize("formula", FORMULAS)
@pytest.mark.parametrize("place", ["F9", "H5", "AB123"])
def test_a_copied_formula_is_known_for_the_same(formula: str, place: str) -> None:
    area = Area.parsed(place)
    assert area is not None
    copied = Translator(formula, origin="F5").translate_formula(place)
    assert relative(copied, *area[:2]) == relative(formula, 5, 6)


def test_a_formula_that_differs_is_not_the_same() -> None:
    shapes = {relative(formula, 5, 6) for formula in (*FORMULAS, "=C5-$D5", "=C5-D6", "=C5-D5+0")}
    assert len(shapes) == len(FORMULAS) + 3


@pytest.mark.parametrize(
    "formula", ["=(", "=A1+", "=)(", "={1;2", "=IF(A1", "=1 2", "", "=" + "(" * 5000]
)
def test_what_is_no_formula_is_left_alone(formula: str) -> None:
    with pytest.raises(NotReadable):
        parsed(formula)


CELLS = {
    "A": Quantity("A", "Angstrom"),
    "B": Quantity("B", "nm"),
    "C": Quantity("C", "km/s"),
    "D": Quantity("D", "", is_redshift=True),
    "E": Quantity("E", "", is_redshift=True),
    "F": Quantity("F", "Angstrom", medium="air"),
    "G": Quantity("G", "Angstrom", medium="vacuum"),
    "H": Quantity("H"),
}


def faults(formula: str) -> list[str]:
    def known(part: Part) -> Quantity:
        area = getattr(part, "area", None)
        return CELLS[chr(64 + area.first_column)] if area else Quantity()

    follower = Follower(known)
    follower.followed(parsed(formula))
    return [fault.kind for fault in follower.faults]


@pytest.mark.parametrize(
    "formula",
    [
        "=A1*10-B1*100",  # a factor may be the change of unit
        "=A1+5",
        "=A1+A2",
        "=H1+A1",  # nothing is known of H
        "=(A1-G1)/G1",
        "=(D1-E1)/(1+E1)",
        "=D1-E1",
        "=(D1+E1)/2",
        "=0.5*(D1+E1)",
        "=AVERAGE(D1,E1)",
        "=D1+E1+D1*E1",
        "=(1+D1)*(1+E1)-1",
        "=(1+D1)*(1+C1/299792.458)-1",
        "=C1/299792.458+1",
        "=D1+0.001",
        "=SQRT(A1^2+A2^2)",
        "=SQRT(D1^2+E1^2)",
        "=REDSHIFT_FROM_WAVELENGTH(A1,A2)",
        "=REDSHIFT_FROM_WAVELENGTH(B1,B2)",
        '=REDSHIFT_FROM_LINE(F1,"H alpha","air")',
        '=REDSHIFT_FROM_LINE(G1,"H alpha")',
        "=WAVELENGTH_VACUUM(F1)/G1-1",
        '=F1/LINE_WAVELENGTH("H alpha","air")-1',
        '=UNITS_CONVERTED(B1,"nm","Angstrom")+H1',
        "=VELOCITY_FROM_REDSHIFT(REDSHIFT_COMBINED(D1,REDSHIFT_FROM_VELOCITY(C1)))",
        "=IF(D1>0,A1-G1,0)",
        '=REASON("VELOCITY_FROM_REDSHIFT",C1)',
    ],
)
def test_right_formulas_are_left_in_peace(formula: str) -> None:
    assert faults(formula) == []


@pytest.mark.parametrize(
    ("formula", "kind"),
    [
        ("=A1-B1", "units mixed"),
        ("=A1+H1-B1", "units mixed"),
        ("=C1+D1", "units mixed"),
        ("=IFERROR(A1-B1,0)", "units mixed"),
        ("=A1^2+B1^2", "units mixed"),
        ('=A1+REDSHIFT_FROM_LINE(A1,"H alpha")', "units mixed"),
        ('=REDSHIFT_FROM_LINE(B1,"H alpha")', "wrong unit"),
        ('=ORG.CELLFUNCS.CALC.REDSHIFT_FROM_LINE(B1,"H alpha")', "wrong unit"),
        ("=REDSHIFT_FROM_WAVELENGTH(A1,B1)", "wrong unit"),
        ("=REDSHIFT_FROM_WAVELENGTH(C1,C2)", "wrong unit"),
        ("=DISTANCE_LUMINOSITY(C1)", "wrong unit"),
        ("=1+DISTANCE_HUBBLE(D1)", "wrong unit"),
        ("=F1/G1-1", "media mixed"),
        ("=F1-G1", "media mixed"),
        ("=REDSHIFT_FROM_WAVELENGTH(F1,G1)", "media mixed"),
        ('=REDSHIFT_FROM_LINE(F1,"H alpha")', "media mixed"),
        ('=REDSHIFT_FROM_LINE(G1,"H alpha","air")', "media mixed"),
        ('=F1/LINE_WAVELENGTH("H alpha")-1', "media mixed"),
        ("=WAVELENGTH_VACUUM(G1)", "media mixed"),
        ("=WAVELENGTH_AIR(F1)", "media mixed"),
        ("=D1+E1", "redshifts added"),
        ("=D1+E1+0.001", "redshifts added"),
        ("=SUM(D1,E1)", "redshifts added"),
        ("=D1+C1/299792.458", "redshifts added"),
        ("=D1-C1/3E5", "redshifts added"),
        ("=D1+REDSHIFT_FROM_VELOCITY(C1)", "redshifts added"),
        ("=VELOCITY_FROM_REDSHIFT(D1+E1)", "redshifts added"),
    ],
)
def test_wrong_formulas_are_told(formula: str, kind: str) -> None:
    assert set(faults(formula)) == {kind}


# ---- formulas in OpenDocument, and whatever a sheet may hold ------------------------------------


@pytest.mark.parametrize(
    ("written", "shown"),
    [
        # OASIS OpenDocument 1.3, part 4, 5.8: references stand in brackets, arguments part at ;
        ("of:=[.C5]*[$Log.B$2]", "=C5*Log!B$2"),
        ('of:=SUM([.A1:.A9];"a;[b]")', '=SUM(A1:A9,"a;[b]")'),
        ("of:=[$'x y'.$A$1]-[.$B5]", "='x y'!$A$1-$B5"),
        ("of:=[.#REF!]+1", "=#REF!+1"),
    ],
)
def test_an_opendocument_formula_is_read_as_cells_show_it(written: str, shown: str) -> None:
    assert plain_formula(written) == shown


def test_libreoffice_keeps_the_formulas_that_are_found(tmp_path: Path) -> None:
    log = audited.seeded(12, tmp_path)
    subprocess.run(
        ["soffice", f"-env:UserInstallation={(tmp_path / 'profile').as_uri()}", "--headless",
         "--norestore", "--convert-to", "ods", "--outdir", str(tmp_path), str(log.path)],
        check=True, capture_output=True, timeout=120,
    )  # fmt: skip
    mine = formula_cells(log.path, audited.LOG)
    theirs = formula_cells(log.path.with_suffix(".ods"), audited.LOG)
    assert len(mine.groups) == len(theirs.groups) > 15
    assert mine.by_column.keys() == theirs.by_column.keys()
    for column, cells in mine.by_column.items():
        assert cells.keys() == theirs.by_column[column].keys()
        pairs = {(group, theirs.by_column[column][row]) for row, group in cells.items()}
        assert len(pairs) == len(set(cells.values()))


HEADERS = [
    "UT", "Target", "Line", "Centre [nm]", "Centre", "Centre [GHz]", "Air/vac", "z adopted", "z",
    "Redshift", "Offset at rest [km/s]", "Computed with", "Status", "Exposure [s]", "x [m**1e9]",
    "[km]", "Rest wavelength, air [nm]", "( )", "a [m^^2]", "b [1e400]", "c [10**400 m]", "RA",
    "Dec [deg]", "d [mag(AB)]", "e [dex(cm)]", "f [m/0]", "g [sqrt(m)]", "h [%]", "σ [Å]",
]  # fmt: skip
VALUES = [
    None, None, 1.0, 0.05, -3.0, 6562.8, 1e300, 5e-324, "H alpha", "air", "ari", "", "  ", "12 A",
    "1,200", "12 m^^2", "=1+1", "cellfuncs 0.1.0; x; cosmology q", "cellfuncs ", True, "x" * 400,
    datetime(2031, 3, 5), datetime(1900, 1, 1, 12), audited.Error("#N/A"), audited.Error("#REF!"),
    "1e999", "٣", "é日",
]  # fmt: skip
STRANGE = [
    "A1", "C5-D5", "E{r}+F{r}", "E{r}+G{r}/299792.458", "REDSHIFT_FROM_LINE(D{r},C{r},E{r})",
    "REDSHIFT_FROM_LINE()", "REDSHIFT_FROM_LINE(1,2,3,4,5,6)", "SUM(A:A)", "SUM(A1:XFD1048576)",
    "(((", "1/0", "D{r}^1000000", "D{r}^-0.3333", "IF(,,)", "{1,2}", "'no'!A1", "#REF!+1",
    "[1]x!A1", "Table1[z]", "LET(x,1,x)", "-+-A1%", "VELOCITY_FROM_REDSHIFT(D{r})", '"a"&A1',
    'REASON("x")', 'UNITS_CONVERTED(D{r},"nm","x")', "D{r}*D{r}/E{r}", "SQRT(D{r})",
]  # fmt: skip


@pytest.mark.parametrize("number", range(40))
def test_no_sheet_is_too_strange(tmp_path: Path, number: int) -> None:
    dice = Random(number)
    headers = ["Line", "Centre [nm]", "Air/vac"] * (number % 2)
    headers += [dice.choice(HEADERS) for _ in range(dice.randrange(1, 12))]
    rows: list[list[Any]] = [["Night"]] * dice.randrange(3) + [headers]
    for row in range(len(rows) + 1, len(rows) + dice.randrange(2, 30)):
        cells: list[Any] = []
        for _ in headers:
            cells.append(dice.choice(VALUES))
            if dice.random() < 0.25:
                formula = dice.choice(STRANGE).replace("{r}", str(row))
                cells[-1] = audited.Formula(formula, dice.choice([None, 1.0, "", 0.05]))
        rows.append(cells)
    path = audited.write(tmp_path / "strange.xlsx", {"S & t": rows})
    for recipe in (None, read(audited.OWN_RECIPE.encode(), "own.toml", "own")):
        report = check(path, recipe)
        assert all(finding.kind in KINDS for finding in report.findings)
        # a sheet without a table is refused in a sentence, and with nothing else
        with suppress(LogbookError):
            export(path, tmp_path / "strange.ecsv", recipe, overwrite=True)


# ---- texts and lines ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "number"),
    [
        ("6586.1", "6586.1"), (" 6586.1 ", "6586.1"), ("6586,1", "6586.1"), ("6,586.1", "6586.1"),
        ("6 586.1", "6586.1"), ("6586.1 A", "6586.1"), ("6586.1Å", "6586.1"), ("658.6 nm", "658.6"),
        ("−12.5", "-12.5"), ("+3", "+3"), ("1.2e-3", "1.2e-3"), ("0.05?", "0.05"),
        ("1,200", "1200"),
        ("1234567", "1234567"), ("15 km/s", "15"), (".5", ".5"), ("12:30:15", None),
        ("2031-03-14", None), ("too faint", None), ("3C 273", None), ("-", None), ("", None),
        ("5 or 6", None), ("NGC 224", None), ("6586.1 6587.2", None),
    ],
)  # fmt: skip
def test_number_in(text: str, number: str | None) -> None:
    assert number_in(text) == number


@pytest.mark.parametrize(
    ("line", "air", "vacuum"),
    [
        # handbook values, from memory
        ("H alpha", 6562.8, 6564.6),
        ("[O III] 5007", 5006.84, 5008.24),
        ("Ca II 8542", 8542.1, 8544.4),
        ("Na D2", 5889.95, 5891.58),
    ],
)
def test_a_rest_wavelength_tells_its_medium(line: str, air: float, vacuum: float) -> None:
    assert medium_of_line(line, air) == "air"
    assert medium_of_line(line, vacuum) == "vacuum"
    assert medium_of_line(line, (air + vacuum) / 2) is None
    assert medium_of_line("no line", air) is None


# ---- comments in a copy ------------------------------------------------------------------------


def comments(path: Path) -> dict[tuple[str, str], str]:
    return {
        (sheet.title, cell.coordinate): cell.comment.text
        for sheet in openpyxl.load_workbook(path).worksheets
        for row in sheet.iter_rows()
        for cell in row
        if cell.comment
    }


def by_libreoffice(path: Path, folder: Path) -> dict[tuple[str, str], str]:
    """Return the comments that a real LibreOffice saves of a workbook that it opened."""
    folder.mkdir()
    subprocess.run(
        ["soffice", f"-env:UserInstallation={(folder / 'profile').as_uri()}", "--headless",
         "--norestore", "--convert-to", "ods", "--outdir", str(folder), str(path)],
        check=True, capture_output=True, timeout=120,
    )  # fmt: skip
    with zipfile.ZipFile(folder / f"{path.stem}.ods") as archive:
        root = etree.fromstring(archive.read("content.xml"))
    names = dict(root.nsmap)
    table = f"{{{names['table']}}}"
    found = {}
    for sheet in root.iterfind(f".//{table}table"):
        row = 0
        for line in sheet.iter(f"{table}table-row"):
            column = 1
            for cell in line:
                note = cell.find(f"{{{names['office']}}}annotation")
                if note is not None:
                    paragraphs = note.iterfind(f"{{{names['text']}}}p")
                    text = "\n".join("".join(each.itertext()) for each in paragraphs)
                    found[sheet.get(f"{table}name"), cell_name(row + 1, column)] = text
                column += int(cell.get(f"{table}number-columns-repeated", 1))
            row += int(line.get(f"{table}number-rows-repeated", 1))
    return found  # type: ignore[return-value]


FINDINGS = [
    Finding("Night 1", "D5", "differs", "holds 1, but its inputs give 2 & <more>"),
    Finding("Night 1", "F9", "wrong unit", "takes Å"),
    Finding("Night 2, b&w", "D5", "out of range", "is -1", "D7"),
    Finding("Night 2, b&w", "D5", "number as text", "'1 A'"),
]


@pytest.fixture(scope="module")
def annotated(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    folder = tmp_path_factory.mktemp("annotated")
    source = write_everything(folder / "everything.xlsx")
    copy = folder / "copy.xlsx"
    assert annotate(source, copy, FINDINGS) == 3
    return source, copy


def test_comments_stand_in_the_copy(annotated: tuple[Path, Path], tmp_path: Path) -> None:
    source, copy = annotated
    before = comments(source)
    assert before
    for found in (comments(copy), by_libreoffice(copy, tmp_path / "office")):
        mine = found["Night 1", "D5"]
        # the comment that was there stays, the finding comes after it
        assert mine.startswith(before["Night 1", "D5"].rstrip())
        assert "holds 1, but its inputs give 2 & <more>." in mine
        assert found["Night 1", "F9"].startswith("A function given a column in another unit: ")
        assert "takes Å" in found["Night 1", "F9"]
        both = found["Night 2, b&w", "D5"]
        assert "(D5 to D7): is -1." in both
        assert "A number that the spreadsheet holds as text: '1 A'." in both
        assert len(found) == len(before) + 2


def test_all_else_stays_byte_for_byte(annotated: tuple[Path, Path]) -> None:
    source, copy = annotated
    with zipfile.ZipFile(source) as old, zipfile.ZipFile(copy) as new:
        assert new.testzip() is None
        assert new.namelist()[: len(old.namelist())] == old.namelist()
        assert new.comment == old.comment
        changed = {name for name in old.namelist() if old.read(name) != new.read(name)}
        added = set(new.namelist()) - set(old.namelist())
        assert not any(re.search(r"chart|media|pivot|bin|styles|workbook", n) for n in changed)
        # the first sheet has comments already, so that its own part stays as it is
        assert "xl/worksheets/sheet1.xml" not in changed
        for name in changed:
            # every byte that was there is there, in its order: things were only put in between
            assert is_within(old.read(name), new.read(name)), name
        second = new.read("xl/worksheets/sheet2.xml")
        assert len(second) - len(old.read("xl/worksheets/sheet2.xml")) < 300
        for name in (*changed, *added):
            etree.fromstring(new.read(name))
    assert any("comments" in name for name in added)


def is_within(old: bytes, new: bytes) -> bool:
    """Tell whether all bytes of `old` stand in `new` in their order."""
    rest = iter(new)
    return all(byte in rest for byte in old)


def test_a_real_log_is_annotated_from_end_to_end(tmp_path: Path) -> None:
    log = audited.seeded(4, tmp_path)
    report = check(log.path, log.recipe)
    copy = tmp_path / "copy.xlsx"
    annotate(log.path, copy, report.findings)
    wanted = {(finding.sheet, finding.cell) for finding in report.findings}
    assert set(comments(copy)) == wanted
    assert set(by_libreoffice(copy, tmp_path / "office")) == wanted
    # and a second time, upon the first
    again = tmp_path / "again.xlsx"
    annotate(copy, again, report.findings)
    assert set(comments(again)) == wanted
    # comments are no mistakes
    assert spots(check(again, log.recipe)) == spots(report)


def test_comments_of_openpyxl_are_added_to(tmp_path: Path) -> None:
    book = openpyxl.Workbook()
    sheet = book.active
    assert sheet is not None
    sheet.title = "Night 1"
    sheet["D5"], sheet["F9"] = 1, 2
    sheet["B2"] = 1
    sheet["B2"].comment = Comment("by hand", "night assistant")
    path, copy = tmp_path / "a.xlsx", tmp_path / "b.xlsx"
    book.save(path)
    annotate(path, copy, FINDINGS)
    found = comments(copy)
    assert found["Night 1", "B2"] == "by hand"
    assert set(found) == {("Night 1", "B2"), ("Night 1", "D5"), ("Night 1", "F9")}
    assert found == by_libreoffice(copy, tmp_path / "office")


def test_a_copy_is_refused_where_it_would_do_harm(tmp_path: Path) -> None:
    path = write_everything(tmp_path / "a.xlsx")
    before = path.read_bytes()
    with pytest.raises(LogbookError, match="is the logbook itself"):
        annotate(path, path, FINDINGS, overwrite=True)
    (tmp_path / "b.xlsx").write_bytes(b"mine")
    with pytest.raises(LogbookError, match="would be overwritten"):
        annotate(path, tmp_path / "b.xlsx", FINDINGS)
    with pytest.raises(LogbookError, match=r"must end in \.xlsx"):
        annotate(path, tmp_path / "b.ods", FINDINGS)
    with pytest.raises(LogbookError, match=r"\.xlsx and \.xlsm only"):
        annotate(tmp_path / "a.csv", tmp_path / "b.csv", FINDINGS)
    assert path.read_bytes() == before
    assert (tmp_path / "b.xlsx").read_bytes() == b"mine"


# ---- the command -------------------------------------------------------------------------------


def run(folder: Path, *arguments: str) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, "-m", "workbooks.cli", *arguments],
        cwd=folder,
        env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[2])},
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )


def test_the_command_ends_with_0_1_or_2(tmp_path: Path) -> None:
    (tmp_path / "own.toml").write_text(audited.OWN_RECIPE)
    good = audited.clean(0, tmp_path)
    ran = run(tmp_path, "check", str(good.path), "-r", "own.toml")
    assert (ran.returncode, ran.stderr) == (0, "")
    assert "no findings" in ran.stdout
    bad = audited.seeded(0, tmp_path)
    ran = run(tmp_path, "check", bad.path.name, "-r", "own.toml", "--annotate", "copy.xlsx")
    assert (ran.returncode, ran.stderr) == (1, "")
    assert "a number that the spreadsheet holds as text" in ran.stdout
    assert comments(tmp_path / "copy.xlsx")
    ran = run(tmp_path, "check", bad.path.name, "-r", "own.toml", "--json")
    assert ran.returncode == 1
    data = json.loads(ran.stdout)
    assert {finding["kind"] for finding in data["findings"]} <= set(KINDS)
    assert data["findings"][0]["sheet"] == audited.NIGHT
    ran = run(tmp_path, "check", "none.xlsx")
    assert ran.returncode == 2
    assert ran.stderr.startswith("cellfuncs: none.xlsx does not exist")
    assert ran.stderr.count("\n") == 1
