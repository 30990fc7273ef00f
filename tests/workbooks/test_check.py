"""`check` finds every mistake at its cell, and none where none was made.

The mistakes are put in by tests/workbooks/audited.py, which knows nothing of how they are found.
Outside checks: openpyxl's translator moves formulas, formualizer computes them, openpyxl and
LibreOffice read the comments; precedence by OASIS OpenDocument 1.3 part 4, section 5.5; comments by
ECMA-376 part 1, 18.7, their boxes by its part 4.
"""

import fcntl
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
from logs import by_libreoffice as saved_by_libreoffice
from logs import run

from workbooks.audit.annotate import annotate
from workbooks.audit.findings import KINDS, Finding
from workbooks.audit.formula_cells import formula_cells, plain_formula, relative
from workbooks.audit.formula_units import Follower, Quantity
from workbooks.audit.formulas import NotReadable, Part, evaluated, parsed
from workbooks.audit.header_words import is_date, medium_of_line, number_in
from workbooks.build import build
from workbooks.check import CheckReport, check
from workbooks.export import export
from workbooks.logbook import Area, Logbook, LogbookError, cell_name
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

LOGS = [
    *[("seeded", number) for number in range(len(audited.SEEDED))],
    *[("clean", number) for number in range(len(audited.CLEAN))],
]


@pytest.fixture(scope="module")
def logs(tmp_path_factory: pytest.TempPathFactory) -> dict[tuple[str, int], audited.Audited]:
    folder = tmp_path_factory.mktemp("logs")
    return {each: getattr(audited, each[0])(each[1], folder) for each in LOGS}


@pytest.fixture(scope="module")
def converted(
    logs: dict[tuple[str, int], audited.Audited], tmp_path_factory: pytest.TempPathFactory
) -> Path:
    """The folder with every log as .ods and its first sheet as .csv, by LibreOffice"""
    folder = tmp_path_factory.getbasetemp()
    if run := os.environ.get("PYTEST_XDIST_TESTRUNUID"):
        # the workers of one run share what takes LibreOffice most of a minute
        folder = folder.parent / f"converted-{run}"
    folder.mkdir(exist_ok=True)
    as_held = "csv:Text - txt - csv (StarCalc):44,34,76,1,,0,false,false,false"
    with (folder / "lock").open("w") as lock:
        fcntl.flock(lock, fcntl.LOCK_EX)
        if not (folder / "done").exists():
            for form in ("ods", as_held):
                subprocess.run(
                    ["soffice", f"-env:UserInstallation={(folder / 'profile').as_uri()}",
                     "--headless", "--norestore", "--convert-to", form, "--outdir", str(folder),
                     *[str(log.path) for log in logs.values()]],
                    check=True, capture_output=True, timeout=300,
                )  # fmt: skip
            (folder / "done").touch()
    return folder


@pytest.mark.parametrize("log", LOGS, ids=lambda log: f"{log[0]}{log[1]}")
def test_every_mistake_is_found_at_its_cell_and_nothing_else(
    logs: dict[tuple[str, int], audited.Audited], log: tuple[str, int]
) -> None:
    path, recipe, mistakes = logs[log].path, logs[log].recipe, logs[log].mistakes
    before, files = path.read_bytes(), sorted(path.parent.iterdir())
    report = check(path, recipe)
    assert bool(mistakes) == (log[0] == "seeded")
    assert mistakes - spots(report) == set(), "not found"
    assert spots(report) - mistakes == set(), "found where nothing is wrong"
    assert report.sheets
    assert path.read_bytes() == before
    assert sorted(path.parent.iterdir()) == files
    assert all(finding.sentence and finding.kind in KINDS for finding in report.findings)


@pytest.mark.parametrize("log", LOGS, ids=lambda log: f"{log[0]}{log[1]}")
def test_the_same_is_found_in_what_libreoffice_saves_as_ods(
    logs: dict[tuple[str, int], audited.Audited], converted: Path, log: tuple[str, int]
) -> None:
    # an .ods holds all of it, the stored results and errors of formulas too
    report = check(converted / f"{logs[log].path.stem}.ods", logs[log].recipe)
    assert logs[log].mistakes - spots(report) == set(), "not found"
    assert spots(report) - logs[log].mistakes == set(), "found where nothing is wrong"
    assert report.sheets


FIRST_SHEETS = {
    "filled": (audited.NIGHT, None),
    "formulas": (audited.LOG, None),
    "plain": ("Lines", "line-log"),
    "none": ("Lines", "line-log"),
    "distance": ("Distances", "distance-sheet"),
}
"""The sheet that LibreOffice saves as .csv, and the recipe that the text no longer names"""

LOST_WITH_FORMULAS = {
    "typed over",
    "formula changed",
    "wrong unit",
    "units mixed",
    "redshifts added",
}
"""A text holds what a formula gave, not the formula"""

FORMULAS_IN = set("GHIJK")
"""The columns of the log without a recipe in which «media mixed» is said of a formula"""

SEEN_BY_ITS_INPUTS = {"plain-13"}
"""Where a number typed over a formula is seen all the same: its inputs give another one. (That of
distance-18 is not, because a header stands there twice and the recipe does not fit.)"""


def in_a_text(log: audited.Audited) -> set[audited.Place]:
    """Return the mistakes that are in the .csv of a log."""
    sheet, _ = FIRST_SHEETS[log.path.stem.partition("-")[0]]
    found = set()
    for where, cell, kind in log.mistakes:
        if where != sheet:
            # settings and provenance have sheets of their own, and a text is one sheet
            continue
        if kind == "media mixed" and cell[0] in FORMULAS_IN:
            continue
        if kind not in LOST_WITH_FORMULAS:
            found.add((log.path.stem, cell, kind))
        elif kind == "typed over" and log.path.stem in SEEN_BY_ITS_INPUTS:
            found.add((log.path.stem, cell, "differs"))
    return found


@pytest.mark.parametrize("log", LOGS, ids=lambda log: f"{log[0]}{log[1]}")
def test_what_a_text_can_hold_is_found_in_a_csv(
    logs: dict[tuple[str, int], audited.Audited], converted: Path, log: tuple[str, int]
) -> None:
    stem = logs[log].path.stem
    _, recipe = FIRST_SHEETS[stem.partition("-")[0]]
    report = check(converted / f"{stem}.csv", load(recipe) if recipe else logs[log].recipe)
    assert in_a_text(logs[log]) - spots(report) == set(), "not found"
    assert spots(report) - in_a_text(logs[log]) == set(), "found where nothing is wrong"
    assert report.sheets == [stem]


def test_the_seeded_logs_hold_every_kind_of_mistake(
    logs: dict[tuple[str, int], audited.Audited],
) -> None:
    assert len(audited.SEEDED) == len(audited.CLEAN) == 20
    assert sum(rows >= 1000 for _, rows in audited.CLEAN) >= 2
    assert {kind for log in logs.values() for _, _, kind in log.mistakes} == set(KINDS)
    # and a text can hold all but those of formulas and of a template's other sheets
    held = {kind for log in logs.values() for _, _, kind in in_a_text(log)}
    assert set(KINDS) - held == LOST_WITH_FORMULAS | {"bad setting"}


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
    mine = formula_cells(Logbook.open(log.path), audited.LOG)
    theirs = formula_cells(Logbook.open(log.path.with_suffix(".ods")), audited.LOG)
    assert len(mine.groups) == len(theirs.groups) > 15
    assert mine.by_column.keys() == theirs.by_column.keys()
    for column, cells in mine.by_column.items():
        assert cells.keys() == theirs.by_column[column].keys()
        pairs = {(group, theirs.by_column[column][row]) for row, group in cells.items()}
        assert len(pairs) == len(set(cells.values()))


def test_an_error_that_was_filled_in_is_no_formula_of_an_ods(converted: Path) -> None:
    # this log was filled without formulas, some of its results as errors
    path = converted / "distance-19.ods"
    with zipfile.ZipFile(path) as archive:
        assert b'table:formula="of:=#' in archive.read("content.xml")
    assert formula_cells(Logbook.open(path), "Distances").groups == []


def test_formulas_are_read_alike_by_pattern_and_by_parser(tmp_path: Path) -> None:
    path = write_everything(tmp_path / "everything.xlsx")
    remarked = tmp_path / "remarked.xlsx"
    with zipfile.ZipFile(path) as old, zipfile.ZipFile(remarked, "w") as new:
        for info in old.infolist():
            content = old.read(info)
            if info.filename.startswith("xl/worksheets/sheet"):
                content = content.replace(
                    b"<sheetData>", b'<sheetData><!-- <c r="A1"><f>1</f></c> -->', 1
                )
            new.writestr(info, content)
    read = openpyxl.load_workbook(path)
    for name in ("Night 1", "Night 2, b&w"):
        plain, by_parser = (formula_cells(Logbook.open(each), name) for each in (path, remarked))
        assert plain.groups
        assert plain.groups == by_parser.groups
        assert plain.by_column == by_parser.by_column
        for written in plain.groups:
            stored = read[name].cell(written.row, written.column).value
            assert getattr(stored, "text", stored) in (written.text, written.text.removeprefix("="))


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
    "text",
    ["2031-05-03", "2031-05-03T00:00:00", "05/03/2031 00:00:00", "5/3/31", "03.05.2031", "3-May",
     "03-May-31", "12-MAR-2031", "May-31", " 2031-5-3 "],
)  # fmt: skip
def test_a_date_as_spreadsheets_write_it(text: str) -> None:
    assert is_date(text)


@pytest.mark.parametrize(
    "text",
    ["TH 4227-00", "3C 273", "M 31", "2031", "1.5", "12/05", "5-Mai", "MAR1", "2031-05",
     "NGC 7-May", "12:30:00", "5/3.31", "th0005.fits", ""],
)  # fmt: skip
def test_what_is_no_date(text: str) -> None:
    assert not is_date(text)


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


FAR = [
    Finding("Night 1", "C2", "not a number", "stands under another cell"),
    Finding("Night 1", "K6", "out of range", "beyond the used columns"),
    Finding("Night 2, b&w", "A1", "no unit", "above the used rows"),
    Finding("Night 2, b&w", "AB700", "out of range", "below the used rows"),
    Finding("Night 3", "A1", "out of range", "on no sheet"),
]


@pytest.fixture(scope="module")
def annotated_ods(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    folder = tmp_path_factory.mktemp("annotated_ods")
    source = saved_by_libreoffice(write_everything(folder / "everything.xlsx"), "ods", folder)
    copy = folder / "copy.ods"
    assert annotate(source, copy, [*FINDINGS, *FAR]) == 7
    return source, copy


def values_of(path: Path) -> dict[tuple[str, str], object]:
    return {
        (sheet.title, cell.coordinate): cell.value
        for sheet in openpyxl.load_workbook(path, data_only=True).worksheets
        for cell in sheet._cells.values()
        if cell.value is not None
    }


def test_comments_stand_in_the_copy_of_an_ods(
    annotated_ods: tuple[Path, Path], tmp_path: Path
) -> None:
    source, copy = annotated_ods
    old = by_libreoffice(source, tmp_path / "before")
    text = by_libreoffice(copy, tmp_path / "after")
    mine = text["Night 1", "D5"]
    assert mine.startswith(old["Night 1", "D5"].rstrip() + "\n\n")
    assert "holds 1, but its inputs give 2 & <more>." in mine
    both = text["Night 2, b&w", "D5"].split("\n\n")
    assert both == [
        "A value outside what is allowed (D5 to D7): is -1.",
        "A number that the spreadsheet holds as text: '1 A'.",
    ]
    for finding in FAR[:-1]:
        assert finding.sentence in text[finding.sheet, finding.cell]
    assert set(text) == set(old) | {
        (finding.sheet, finding.cell) for finding in [*FINDINGS, *FAR[:-1]]
    }
    before = values_of(saved_by_libreoffice(source, "xlsx", tmp_path / "old values"))
    assert len(before) > 60
    assert values_of(saved_by_libreoffice(copy, "xlsx", tmp_path / "new values")) == before


def test_the_author_is_the_same_in_both_formats(
    annotated: tuple[Path, Path], annotated_ods: tuple[Path, Path], tmp_path: Path
) -> None:
    converted = saved_by_libreoffice(annotated_ods[1], "xlsx", tmp_path / "by office")
    found = {
        openpyxl.load_workbook(path)["Night 1"]["F9"].comment.author  # type: ignore[union-attr]
        for path in (annotated[1], converted)
    }
    assert found == {"cellfuncs check"}


def runs_of(content: bytes) -> list[tuple[str, list[list[Any]]]]:
    """Return each table's name and its rows: first row, how often, attributes, cells as runs.

    Comments are left out, and equal neighbours are taken together.
    """
    root = etree.fromstring(content)
    table, office = (f"{{{root.nsmap[prefix]}}}" for prefix in ("table", "office"))
    found = []
    for sheet in root.iter(f"{table}table"):
        first = 0
        rows: list[list[Any]] = []
        for line in sheet.iter(f"{table}table-row"):
            often = int(line.attrib.pop(f"{table}number-rows-repeated", 1))
            cells: list[list[Any]] = []
            for cell in line:
                wide = int(cell.attrib.pop(f"{table}number-columns-repeated", 1))
                for note in cell.findall(f"{office}annotation"):
                    cell.remove(note)
                text = etree.tostring(cell, method="c14n")
                if cells and cells[-1][1] == text:
                    cells[-1][0] += wide
                else:
                    cells.append([wide, text])
            if rows and rows[-1][2:] == [dict(line.attrib), cells]:
                rows[-1][1] += often
            else:
                rows.append([first, often, dict(line.attrib), cells])
            first += often
        found.append((str(sheet.get(f"{table}name")), rows))
    return found


def test_all_else_in_an_ods_stays_byte_for_byte(annotated_ods: tuple[Path, Path]) -> None:
    source, copy = annotated_ods
    with zipfile.ZipFile(source) as old, zipfile.ZipFile(copy) as new:
        assert new.testzip() is None
        assert new.namelist() == old.namelist()
        assert {name for name in old.namelist() if old.read(name) != new.read(name)} == {
            "content.xml"
        }
        before, after = old.read("content.xml"), new.read("content.xml")
    comment = rb"<office:annotation><dc:creator>cellfuncs check</dc:creator>.*?</office:annotation>"
    assert len(re.findall(comment, after)) == 6
    # the parts outside the tables' rows, and the rows that nothing was found in
    outside = re.compile(rb"<table:table-row.*</table:table-row>", re.DOTALL)
    assert outside.sub(b"", before) == outside.sub(b"", after)
    rows = re.compile(rb"<table:table-row.*?</table:table-row>", re.DOTALL)
    untouched = [row for row in rows.findall(before) if row in after]
    assert len(rows.findall(before)) - len(untouched) <= 7
    # and all cells are the same, once comments are left out
    assert len(runs_of(before)) > 2
    assert runs_of(after) == runs_of(before)


ODS_HEAD = (
    '<d:document-content xmlns:d="urn:oasis:names:tc:opendocument:xmlns:office:1.0" '
    'xmlns:t="urn:oasis:names:tc:opendocument:xmlns:table:1.0" '
    'xmlns:x="urn:oasis:names:tc:opendocument:xmlns:text:1.0"><d:body><d:spreadsheet>'
    "<t:table t:name='N'>"
)
ODS_TAIL = "</t:table></d:spreadsheet></d:body></d:document-content>"
NOTE = (
    '<d:annotation><dc:creator xmlns:dc="http://purl.org/dc/elements/1.1/">cellfuncs check'
    "</dc:creator><x:p>An error value in a cell: why.</x:p></d:annotation>"
)
ADDED = "<x:p>An error value in a cell: why.</x:p>"


@pytest.mark.parametrize(
    ("cell", "rows", "expected"),
    [
        # a run of cells, and of rows, is split where the comment stands
        ("B1", '<t:table-row><t:table-cell t:number-columns-repeated="3"/></t:table-row>',
         f"<t:table-row><t:table-cell/><t:table-cell>{NOTE}</t:table-cell><t:table-cell/>"
         "</t:table-row>"),
        ("A3", "<t:table-row t:number-rows-repeated='9'><t:table-cell t:style-name='s'/>"
         "</t:table-row>",
         '<t:table-row t:number-rows-repeated="2"><t:table-cell t:style-name=\'s\'/></t:table-row>'
         f"<t:table-row><t:table-cell t:style-name='s'>{NOTE}</t:table-cell></t:table-row>"
         '<t:table-row t:number-rows-repeated="6"><t:table-cell t:style-name=\'s\'/>'
         "</t:table-row>"),
        # before text and what an auditor's arrows are made of, after a linked range's source
        ("A1", "<t:table-row><t:table-cell><t:detective/><x:p>1</x:p></t:table-cell></t:table-row>",
         f"<t:table-row><t:table-cell>{NOTE}<t:detective/><x:p>1</x:p></t:table-cell>"
         "</t:table-row>"),
        ("A1", '<t:table-row><t:table-cell><t:cell-range-source t:name="a/>b"/><x:p>1</x:p>'
         "</t:table-cell></t:table-row>",
         f'<t:table-row><t:table-cell><t:cell-range-source t:name="a/>b"/>{NOTE}<x:p>1</x:p>'
         "</t:table-cell></t:table-row>"),
        # upon a comment that is there, and one that is empty
        ("A1", "<t:table-row><t:table-cell><d:annotation><x:p>by hand</x:p></d:annotation>"
         "<x:p>1</x:p></t:table-cell></t:table-row>",
         "<t:table-row><t:table-cell><d:annotation><x:p>by hand</x:p><x:p></x:p>"
         f"{ADDED}</d:annotation><x:p>1</x:p></t:table-cell></t:table-row>"),
        ("A1", "<t:table-row><t:table-cell><d:annotation /></t:table-cell></t:table-row>",
         f"<t:table-row><t:table-cell><d:annotation >{ADDED}</d:annotation></t:table-cell>"
         "</t:table-row>"),
        # a covered cell, one beyond its row, and one beyond all rows
        ("B1", '<t:table-row><t:table-cell t:number-columns-spanned="2"/><t:covered-table-cell/>'
         "</t:table-row>",
         '<t:table-row><t:table-cell t:number-columns-spanned="2"/>'
         f"<t:covered-table-cell>{NOTE}</t:covered-table-cell></t:table-row>"),
        ("D1", "<t:table-row><t:table-cell/></t:table-row>",
         '<t:table-row><t:table-cell/><t:table-cell t:number-columns-repeated="2"/>'
         f"<t:table-cell>{NOTE}</t:table-cell></t:table-row>"),
        ("C1048576", "<t:table-row/><t:table-row t:number-rows-repeated='1048575'><t:table-cell"
         " t:number-columns-repeated='16384'/></t:table-row>",
         '<t:table-row/><t:table-row t:number-rows-repeated="1048574"><t:table-cell'
         " t:number-columns-repeated='16384'/></t:table-row><t:table-row><t:table-cell"
         f' t:number-columns-repeated="2"/><t:table-cell>{NOTE}</t:table-cell><t:table-cell'
         ' t:number-columns-repeated="16381"/></t:table-row>'),
        ("A3", "<t:table-row><t:table-cell/></t:table-row>",
         "<t:table-row><t:table-cell/></t:table-row>"
         f"<t:table-row><t:table-cell/></t:table-row><t:table-row><t:table-cell>{NOTE}"
         "</t:table-cell></t:table-row>"),
    ],
)  # fmt: skip
def test_where_a_comment_stands_in_an_ods(
    tmp_path: Path, cell: str, rows: str, expected: str
) -> None:
    # OASIS ODF 1.3 part 3: 9.1.4 and 9.1.5 for cells and what they hold, 14.1 for comments
    path, copy = tmp_path / "a.ods", tmp_path / "b.ods"
    with zipfile.ZipFile(path, "w") as archive:
        archive.writestr("mimetype", "application/vnd.oasis.opendocument.spreadsheet")
        archive.writestr("content.xml", ODS_HEAD + rows + ODS_TAIL)
    assert annotate(path, copy, [Finding("N", cell, "error value", "why")]) == 1
    with zipfile.ZipFile(copy) as archive:
        assert archive.read("content.xml").decode() == ODS_HEAD + expected + ODS_TAIL


def test_a_real_ods_is_annotated_from_end_to_end(
    logs: dict[tuple[str, int], audited.Audited], converted: Path, tmp_path: Path
) -> None:
    log = logs["seeded", 4]
    path = converted / f"{log.path.stem}.ods"
    report = check(path, log.recipe)
    copy, again = tmp_path / "copy.ods", tmp_path / "again.ods"
    annotate(path, copy, report.findings)
    wanted = {(finding.sheet, finding.cell) for finding in report.findings}
    found = by_libreoffice(copy, tmp_path / "office")
    assert set(found) == wanted
    # and a second time, upon the first
    annotate(copy, again, report.findings)
    twice = by_libreoffice(again, tmp_path / "office again")
    assert twice == {place: f"{text}\n\n{text}" for place, text in found.items()}
    # comments are no mistakes
    assert spots(check(again, log.recipe)) == spots(report)


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
    with pytest.raises(LogbookError, match=r"\.xlsx, \.xlsm and \.ods only"):
        annotate(tmp_path / "a.csv", tmp_path / "b.csv", FINDINGS)
    assert path.read_bytes() == before
    assert (tmp_path / "b.xlsx").read_bytes() == b"mine"


# ---- the command -------------------------------------------------------------------------------


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
