"""The functions in cells of a real headless LibreOffice Calc, in its process and through a worker.

What a cell must show is what a call of the Python function gives or raises (FUNCTIONS.md, «Bad
input»); the functions' own numbers are checked in tests/published. The numbers of Calc's errors
are those of its own API (XCellRange.getError): 503 #NUM!, 504 Err:504, 519 #VALUE!, 525 #NAME?,
32767 #N/A.
"""

import os
import re
import signal
import sys
import time
import zipfile
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest
from examples import call_in

import cellfuncs
from cellfuncs.bridges.calc.emptiness import Call, calls, reference
from cellfuncs.bridges.calc.extension import VARIADIC, Extension, build
from cellfuncs.catalogue import CATALOGUE, Anything, Function, Number
from cellfuncs.errors import CellError

sys.path.insert(0, str(Path(__file__).parent))

from calc_office import Office

ERRORS = {"#NUM!": 503, "#VALUE!": 519, "#NAME?": 525, "#N/A": 32767}
IN_PROCESS, BY_WORKER = "in process", "worker"

# Puts arguments into cells (None leaves one empty), one call a row, and reads the results.
ASKED = """
document = opened()
sheet = document.Sheets.getByIndex(0)
width = max(len(row) for row in cells)
for row, values in enumerate(cells):
    for place, value in enumerate(values):
        put(sheet.getCellByPosition(place, row), value)
column = sheet.getCellRangeByPosition(width, 0, width, len(cells) - 1)
column.setFormulaArray(tuple((formula,) for formula in formulas))
result = [shown(sheet.getCellByPosition(width, row)) for row in range(len(cells))]
document.close(True)
"""


@pytest.fixture(scope="module", params=[IN_PROCESS, BY_WORKER])
def office(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Any:
    folder = tmp_path_factory.mktemp("office")
    build(Extension(in_process=request.param == IN_PROCESS), folder / "functions.oxt")
    made = Office(folder, folder / "functions.oxt")
    yield made
    made.close()


def good_arguments(function: Function) -> Iterator[list[Any]]:
    """Give the arguments of the function's own examples, which stand in the reference too."""
    for example in function.examples:
        yield call_in(example)[1]


def written_out(value: Any) -> str:
    """Give a value as it stands in a formula; a range is a row of it."""
    if isinstance(value, list):
        return "{" + ";".join(map(written_out, value)) + "}"
    if isinstance(value, bool):
        return f"{value}()".upper()
    return f'"{value}"' if isinstance(value, str) else repr(value)


def cases(function: Function) -> Iterator[list[Any]]:
    """Give good arguments, then the same with one of them bad, empty or left out."""
    # a 0 in a cell beside empty cells is a case of its own, below
    examples = [
        [0.25 if value == 0.0 else value for value in each] for each in good_arguments(function)
    ]
    yield from examples
    longest = max(examples, key=len)
    for place, value in enumerate(longest):
        argument = function.arguments[min(place, len(function.arguments) - 1)]
        others: tuple[Any, ...] = ("no such word", 5.0, None)
        if isinstance(argument, Number):
            others = (-2.0, 0.25, 1e300, "text", None)
        elif isinstance(argument, Anything) and isinstance(value, str):
            others = ("H beta", None)
        for other in others:
            yield [*longest[:place], other, *longest[place + 1 :]]


def expected(function: Function, arguments: list[Any]) -> Any:
    try:
        return function(*arguments)
    except CellError as error:
        return ERRORS[error.shown]


def same(found: Any, wanted: Any) -> bool:
    if isinstance(found, dict):
        return bool(found["error"] == wanted)
    if isinstance(wanted, float) and isinstance(found, float):
        return bool(found == pytest.approx(wanted, rel=1e-12))
    return bool(found == wanted)


def test_every_function_gives_in_a_cell_what_python_gives(office: Office) -> None:
    asked = [(function, case) for function in CATALOGUE.values() for case in cases(function)]
    assert {function.name for function, _ in asked} == set(CATALOGUE)
    width = max(len(case) for _, case in asked)
    formulas = [
        f"={function.name}("
        + ";".join(
            written_out(value) if isinstance(value, list) else f"{chr(65 + place)}{row}"
            for place, value in enumerate(case)
        )
        + ")"
        for row, (function, case) in enumerate(asked, start=1)
    ]
    cells = [[None if isinstance(each, list) else each for each in case] for _, case in asked]
    found = office.run(ASKED, cells=cells, formulas=formulas)
    assert width < 26
    wrong = [
        (function.name, case, result, expected(function, case))
        for (function, case), result in zip(asked, found, strict=True)
        if not same(result, expected(function, case))
    ]
    assert wrong == []
    kinds = {result["error"] for result in found if isinstance(result, dict)}
    assert kinds == {503, 519, 32767}


def test_arguments_in_the_formula_itself_and_left_out(office: Office) -> None:
    asked = [
        (function, case) for function in CATALOGUE.values() for case in good_arguments(function)
    ]
    formulas = []
    for function, case in asked:
        texts = [written_out(value) for value in case]
        # the place of an argument left out may be there or not
        open_place = ";" if len(case) < len(function.arguments) and case else ""
        formulas.append(f"={function.name}({';'.join(texts)}{open_place})")
    found = office.run(ASKED, cells=[[] for _ in asked], formulas=formulas)
    wrong = [
        (formula, result)
        for (function, case), formula, result in zip(asked, formulas, found, strict=True)
        if not same(result, expected(function, case))
    ]
    assert wrong == []
    required = [function for function in CATALOGUE.values() if not function.arguments[0].optional]
    nothing = office.run(
        ASKED, cells=[[]] * len(required), formulas=[f"={each.name}()" for each in required]
    )
    assert nothing == [{"error": 32767, "shown": "#N/A"}] * len(required)


def test_every_function_takes_a_column_in_an_array_formula(office: Office) -> None:
    functions = [
        function
        for function in CATALOGUE.values()
        if not function.variadic and isinstance(function.arguments[0], Number)
    ]
    assert len(functions) > 35
    columns = {}
    for function in functions:
        first, *rest = next(iter(good_arguments(function)))
        columns[function.name] = ([first, -2.0, "text", None, 2 * first], rest)
    found = office.run(
        """
result = {}
for name, (values, rest) in columns.items():
    document = opened()
    sheet = document.Sheets.getByIndex(0)
    for row, value in enumerate(values):
        put(sheet.getCellByPosition(0, row), value)
    texts = [f'"{value}"' if isinstance(value, str) else repr(value) for value in rest]
    sheet.getCellRangeByName("B1:B5").setArrayFormula(f"={name}({';'.join(['A1:A5', *texts])})")
    result[name] = [shown(sheet.getCellByPosition(1, row)) for row in range(5)]
    document.close(True)
""",
        columns=columns,
    )
    wrong = [
        (name, value, result)
        for name, (values, rest) in columns.items()
        for value, result in zip(values, found[name], strict=True)
        if not same(result, expected(CATALOGUE[name], [value, *rest]))
    ]
    assert wrong == []


def test_a_cosmology_from_two_columns(office: Office) -> None:
    own = [["H0", 70.0], ["Om0", 0.3], [None, None], ["w0", -0.9]]
    found = office.run(
        ASKED, cells=own, formulas=["=DISTANCE_LUMINOSITY(0.5;A1:B4)", "=1", "=1", "=1"]
    )
    wanted = CATALOGUE["DISTANCE_LUMINOSITY"](0.5, {"H0": 70.0, "Om0": 0.3, "w0": -0.9})
    assert found[0] == pytest.approx(wanted, rel=1e-12)


def test_a_range_that_is_taken_whole(office: Office) -> None:
    """Empty cells and remarks do not count; a 0 does, and so does FALSE."""
    sheet = [
        [0.0, 10.0, 690.0, 30.0, "VELOCITY_SUM", 0.0],
        [None, 20.0, 1410.0, 20.0, "DISTANCE_COMOVING", None],
        [0.5, None, 300.0, 10.0],
        ["cloudy", 35.0, "lost", 10.0],
        [0.1, 40.0, 2790.0, None],
        [None, 55.0, 3900.0, 25.0],
    ]
    rows = [0, 1, 4, 5]
    distances, velocities = ([sheet[row][place] for row in rows] for place in (1, 2))
    values, sigmas = [0.0, 0.5], [30.0, 10.0]
    wanted = {
        "MEAN_WEIGHTED(A1:A6;D1:D6)": cellfuncs.mean_weighted(values, sigmas),
        'MEAN_WEIGHTED(A1:A6;D1:D6;"count")': 2.0,
        'MEAN_WEIGHTED(A1:A6;D1;"count")': 3.0,
        "HUBBLE_FIT(B1:B6;C1:C6)": cellfuncs.hubble_fit(distances, velocities),
        'HUBBLE_FIT(B1:B6;C1:C6;;"slope";FALSE())': cellfuncs.hubble_fit(
            distances, velocities, None, "slope", False
        ),
        'HUBBLE_FIT(B1:B6;C1:C6;;"slope";TRUE())': cellfuncs.hubble_fit(distances, velocities),
        'HUBBLE_FIT(B1:B6;C1:C6;D1:D6;"count")': 3.0,
        "UNCERTAINTY(E1;B1:B2;D1:D2)": cellfuncs.uncertainty("VELOCITY_SUM", [10, 20], [30, 20]),
        "UNCERTAINTY(E2;F1;D1)": cellfuncs.uncertainty("DISTANCE_COMOVING", 0.0, 30.0),
        "UNCERTAINTY(E2;F2;D2)": {"error": ERRORS["#N/A"]},
        "UNCERTAINTY(E1;B1:B2;A2:A5)": {"error": ERRORS["#VALUE!"]},
        "MEAN_WEIGHTED(A2:A2;D1)": {"error": ERRORS["#N/A"]},
        "MEAN_WEIGHTED(A4:A4;D1)": {"error": ERRORS["#VALUE!"]},
        "MEAN_WEIGHTED(A1:A5;A1:A5)": {"error": ERRORS["#NUM!"]},
        "MEAN_WEIGHTED(A1:A6;B1:B5)": {"error": ERRORS["#VALUE!"]},
        'REASON("MEAN_WEIGHTED";A1:A5;A1:A5)': (
            "MEAN_WEIGHTED: sigmas, cell 1, is 0; it must be above 0"
        ),
        "REDSHIFT_SOLVED(B10:C13)": cellfuncs.redshift_solved([6892.84, 5105.8, 5258.65, 5208.31]),
        'REDSHIFT_SOLVED(B10:B13;;;;"count")': 4.0,
    }
    spectrum = [[None, seen, None] for seen in (6892.84, 5105.8, 5258.65, 5208.31)]
    cells = [*sheet, *[[None]] * 3, *spectrum, *[[None]] * (len(wanted) - 13)]
    found = office.run(ASKED, cells=cells, formulas=[f"={formula}" for formula in wanted])
    wrong = [
        (formula, result, expectation)
        for (formula, expectation), result in zip(wanted.items(), found, strict=True)
        if (
            result["error"] != expectation["error"]
            if isinstance(expectation, dict) and isinstance(result, dict)
            else not same(result, expectation)
        )
    ]
    assert wrong == []


def test_sums_and_means_do_not_step_over_a_bad_cell(office: Office) -> None:
    found = office.run(
        """
document = opened()
sheet = document.Sheets.getByIndex(0)
result = []
for bad in ("-1", '"far"', "A9"):
    formulas = [f"=DISTANCE_LUMINOSITY({z})" for z in ("0.5", bad, "1")]
    sheet.getCellRangeByName("B1:B3").setFormulaArray(tuple((text,) for text in formulas))
    for row, text in enumerate(("=SUM(B1:B3)", "=AVERAGE(B1:B3)", "=B2+1")):
        sheet.getCellByPosition(2, row).Formula = text
        result.append(shown(sheet.getCellByPosition(2, row))["error"])
document.close(True)
"""
    )
    assert found == [503] * 3 + [519] * 3 + [32767] * 3


def test_a_cell_in_error_passes_its_error_on(office: Office) -> None:
    """In a range Calc itself refuses it (Err:504, 7.4) and asks nobody: no number is shown."""
    found = office.run(
        """
document = opened()
sheet = document.Sheets.getByIndex(0)
for row, text in enumerate(("=1/0", "=NA()", "=0.5")):
    sheet.getCellByPosition(0, row).Formula = text
    sheet.getCellByPosition(1, row).Formula = f"=DISTANCE_LUMINOSITY(A{row + 1})"
sheet.getCellRangeByName("C1:C3").setArrayFormula("=DISTANCE_LUMINOSITY(A1:A3)")
result = [[sheet.getCellByPosition(place, row).getError() for row in range(3)] for place in (1, 2)]
document.close(True)
"""
    )
    assert found == [[532, 32767, 0], [504, 504, 504]]


def test_an_empty_cell_is_told_from_a_zero(office: Office) -> None:
    found = office.run(
        """
document = opened()
sheets = document.Sheets
sheets.insertNewByName("My 2nd", 1)
sheet = sheets.getByIndex(0)
def cell(name): return sheet.getCellRangeByName(name)
def look(name): return shown(cell(name)) if cell(name).getError() == 0 else cell(name).getError()
result = []
cell("C1").Formula = "=DISTANCE_LUMINOSITY(A1)"
result.append(look("C1"))
cell("A1").Value = 0
result.append(look("C1"))
time.sleep(0.1)  # a person's next step; see emptiness.py
cell("A1").clearContents(1)
result.append(look("C1"))
cell("A1").Formula = "=1-1"
result.append(look("C1"))
cell("C2").Formula = "=DISTANCE_COMOVING($'My 2nd'.B3)"
result.append(look("C2"))
sheets.getByIndex(1).getCellRangeByName("B3").Value = 0
result.append(look("C2"))
cell("C3").Formula = "=VELOCITY_HUBBLE(100;B4)"
result.append(look("C3"))
cell("B4").Value = 0
result.append(look("C3"))
cell("C4").Formula = "=VELOCITY_SUM(A5;7)"
cell("C5").Formula = "=VELOCITY_SUM(0;8)"
result += [look("C4"), look("C5")]
cell("C6").Formula = "=IF(A6>0;1;DISTANCE_TRANSVERSE(A6)+1)"
result.append(look("C6"))
document.close(True)
document = opened()
sheet = document.Sheets.getByIndex(0)
cell("C1").Formula = "=VELOCITY_SUM(A1;8)"
result.append(look("C1"))
document.close(True)
"""
    )
    default = pytest.approx(CATALOGUE["VELOCITY_HUBBLE"](100.0), rel=1e-12)
    assert found[:4] == [32767, 0.0, 32767, 0.0]
    assert found[4:6] == [32767, 0.0]
    assert found[6:8] == [default, 503]
    assert found[8:10] == [32767, pytest.approx(8.0)]
    assert found[10:] == [32767, 32767]


def test_where_an_empty_cell_and_a_zero_look_alike_no_number_is_made_up(office: Office) -> None:
    found = office.run(ASKED, cells=[[0.0], [None], [1.0]], formulas=[
        f"=DISTANCE_LUMINOSITY(A{row})" for row in (1, 2, 3)
    ])  # fmt: skip
    assert [each["error"] if isinstance(each, dict) else each for each in found[:2]] == [32767] * 2
    assert found[2] == pytest.approx(CATALOGUE["DISTANCE_LUMINOSITY"](1.0), rel=1e-12)


def test_dates_of_both_date_systems(office: Office) -> None:
    """The same date, typed into a document that counts from 1899-12-30 and from 1904-01-01."""
    found = office.run(
        """
document = opened()
sheet = document.Sheets.getByIndex(0)
def cell(name): return sheet.getCellRangeByName(name)
result = []
for year, month, day in ((1899, 12, 30), (1904, 1, 1)):
    first = document.NullDate
    first.Year, first.Month, first.Day = year, month, day
    document.NullDate = first
    cell("A1").Formula = "=DATE(2027;4;2)+TIME(5;0;0)"
    cell("A2").Formula = "=A1+1"
    cell("B1").Formula = "=TIME_JULIAN(A1)"
    cell("B2").Formula = '=TIME_JULIAN("2027-04-02T05:00:00")'
    cell("B3").Formula = "=TIME_JULIAN(2461497.75)"
    cell("C1").Formula = "=TIME_SIDEREAL(A1;0)"
    sheet.getCellRangeByName("D1:D2").setArrayFormula("=TIME_JULIAN(A1:A2)")
    result.append(cell("A1").Value)
    result += [cell(name).Value for name in ("B1", "B2", "B3", "C1", "D1", "D2")]
document.close(True)
"""
    )
    assert found[0] - found[7] == 1462
    start = CATALOGUE["TIME_JULIAN"]("2027-04-02T05:00:00")
    sidereal = CATALOGUE["TIME_SIDEREAL"](start, 0.0)
    wanted = [start, start, 2461497.75, sidereal, start, start + 1]
    assert found[1:7] == pytest.approx(wanted, abs=1e-8)
    assert found[8:] == pytest.approx(wanted, abs=1e-8)


@pytest.mark.parametrize(
    ("formula", "arguments"),
    [
        ("=X.Y.F(A1)", [("A1",)]),
        ('=1+x.y.f($A$1;"a;b)""";{1;2})', [("$A$1", '"a;b)"""', "{1;2}")]),
        ("=X.Y.F(X.Y.F(B2);;C3)", [("X.Y.F(B2)", "", "C3"), ("B2",)]),
        ("{=SUM(X.Y.F($'it''s; (1)'.A1))}", [("$'it''s; (1)'.A1",)]),
        ("=X.Y.F()", [("",)]),
        ('="X.Y.G"', []),
    ],
)
def test_calls_are_read_out_of_a_formula(formula: str, arguments: list[tuple[str, ...]]) -> None:
    assert list(calls(formula, "X.Y.")) == [Call("F", each) for each in arguments]


@pytest.mark.parametrize(
    ("text", "cell"),
    [
        ("A1", ("S", 0, 0)),
        ("$AB$17", ("S", 27, 16)),
        ("$Other.C3", ("Other", 2, 2)),
        ("$'it''s; (1)'.C3", ("it's; (1)", 2, 2)),
        ("A1:A2", None),
        ("A1+1", None),
        ("0.5", None),
        ("", None),
    ],
)
def test_a_reference_names_its_cell(text: str, cell: tuple[str, int, int] | None) -> None:
    assert reference(text, "S") == cell


def test_the_wizard_knows_every_function(office: Office) -> None:
    found = office.run(
        """
descriptions = remote.ServiceManager.createInstanceWithContext(
    "com.sun.star.sheet.FunctionDescriptions", remote
)
result = {}
for index in range(descriptions.Count):
    entry = {each.Name: each.Value for each in descriptions.getByIndex(index)}
    if entry["Name"] in names:
        result[entry["Name"]] = [
            entry["Description"],
            entry["Category"],
            [[each.Name, each.Description] for each in entry["Arguments"]],
        ]
""",
        names=list(CATALOGUE),
    )
    assert set(found) == set(CATALOGUE)
    for name, function in CATALOGUE.items():
        description, category, arguments = found[name]
        assert function.summary in description
        assert category == 11  # com.sun.star.sheet.FunctionCategory.ADDINS
        if function.variadic:
            assert len(arguments) == len(function.arguments) - 1 + VARIADIC
        else:
            assert [each[0] for each in arguments] == [each.name for each in function.arguments]
        for (_, text), argument in zip(arguments, function.arguments, strict=False):
            assert argument.meaning in text
            assert not argument.optional or f"left out: {argument.default_text}" in text


@pytest.mark.parametrize(
    ("ending", "filter_name"), [("ods", "calc8"), ("xlsx", "Calc MS Excel 2007 XML")]
)
def test_saved_and_opened_again_with_and_without_the_extension(
    office: Office, plain_office: Office, tmp_path: Path, ending: str, filter_name: str
) -> None:
    path = tmp_path / f"saved.{ending}"
    before = office.run(
        """
document = opened()
sheet = document.Sheets.getByIndex(0)
sheet.getCellRangeByName("A1").Value = 0.5
sheet.getCellRangeByName("A2").Value = 1
for row, text in enumerate(texts):
    sheet.getCellByPosition(2, row).Formula = text
sheet.getCellRangeByName("D1:D2").setArrayFormula("=DISTANCE_LUMINOSITY(A1:A2)")
names = [f"C{row + 1}" for row in range(len(texts))] + ["D1", "D2"]
result = [[shown(sheet.getCellRangeByName(name)), sheet.getCellRangeByName(name).Formula]
          for name in names]
document.storeToURL(address, options(FilterName=filter_name))
document.close(True)
""",
        address=path.as_uri(),
        filter_name=filter_name,
        texts=TEXTS,
    )
    again = office.run(READ, address=path.as_uri(), count=len(TEXTS))
    assert [formula for _, formula in again] == [formula for _, formula in before]
    for (now, _), (then, _) in zip(again, before, strict=True):
        # a file holds 15 digits
        assert now == (pytest.approx(then, rel=1e-14) if isinstance(then, float) else then)
    held = values_in(path)
    assert pytest.approx(CATALOGUE["DISTANCE_LUMINOSITY"](0.5), rel=1e-14) in held
    without = plain_office.run(READ, address=path.as_uri(), count=len(TEXTS))
    assert without[1][0] == "H alpha"
    if ending == "xlsx":
        assert without[0][0] == pytest.approx(before[0][0], rel=1e-14)
    else:
        # LibreOffice 7.4 keeps a text that it cannot compute, but not a number in an .ods
        assert without[0][0] == {"error": 525, "shown": "#NAME?"}
    for (now, _), (then, _) in zip(without, before, strict=True):
        # an error or the last value, never another number
        assert isinstance(now, dict) or same(now, then)
    # saved there and opened here, everything is back
    plain_office.run(
        """
document = opened(address)
document.storeToURL(address, options(FilterName=filter_name))
document.close(True)
""",
        address=path.as_uri(),
        filter_name=filter_name,
    )
    back = office.run("recalculate = True\n" + READ, address=path.as_uri(), count=len(TEXTS))
    for (now, formula), (then, written) in zip(back, before, strict=True):
        assert formula == written
        assert now == (pytest.approx(then, rel=1e-12) if isinstance(then, float) else then)


TEXTS = [
    "=DISTANCE_LUMINOSITY(A1)",
    "=LINE_NEAREST(6564)",
    "=DISTANCE_LUMINOSITY(-1)",
    '=DISTANCE_LUMINOSITY("far")',
    "=DISTANCE_LUMINOSITY(A9)",
    '=REDSHIFT_FROM_LINE(6892.84;"H alpha")',
]
READ = """
document = opened(address)
if "recalculate" in globals():
    document.calculateAll()
sheet = document.Sheets.getByIndex(0)
names = [f"C{row + 1}" for row in range(count)] + ["D1", "D2"]
result = [[shown(sheet.getCellRangeByName(name)), sheet.getCellRangeByName(name).Formula]
          for name in names]
document.close(True)
"""


@pytest.fixture(scope="module")
def plain_office(tmp_path_factory: pytest.TempPathFactory) -> Any:
    made = Office(tmp_path_factory.mktemp("plain"))
    yield made
    made.close()


def values_in(path: Path) -> list[float]:
    """Give the numbers that a file holds beside its formulas, read without any spreadsheet."""
    part = "content.xml" if path.suffix == ".ods" else "xl/worksheets/sheet1.xml"
    text = zipfile.ZipFile(path).read(part).decode()
    pattern = r'office:value="([^"]+)"' if path.suffix == ".ods" else r"<v>([^<#a-z]+)</v>"
    return [float(number) for number in re.findall(pattern, text)]


def test_the_spelling_that_a_written_workbook_needs(office: Office, tmp_path: Path) -> None:
    """LibreOffice 7.4 computes the full name alone; the short one is unknown in an .xlsx."""
    import openpyxl

    workbook = openpyxl.Workbook()
    sheet = workbook.active
    assert sheet is not None
    sheet["C1"] = "=ORG.CELLFUNCS.CALC.DISTANCE_LUMINOSITY(0.5)"
    sheet["C2"] = "=DISTANCE_LUMINOSITY(0.5)"
    workbook.save(tmp_path / "written.xlsx")
    found = office.run(READ, address=(tmp_path / "written.xlsx").as_uri(), count=2)
    assert found[0][0] == pytest.approx(CATALOGUE["DISTANCE_LUMINOSITY"](0.5), rel=1e-12)
    assert found[1][0] == {"error": 525, "shown": "#NAME?"}


@pytest.fixture
def worker_office(tmp_path: Path) -> Any:
    build(Extension(in_process=False), tmp_path / "functions.oxt")
    made = Office(tmp_path, tmp_path / "functions.oxt")
    yield made
    made.close()


def test_a_worker_killed_in_the_middle_harms_nothing(worker_office: Office) -> None:
    count = 6000
    filled = """
from com.sun.star.sheet.FillDirection import TO_BOTTOM
document = opened()
sheet = document.Sheets.getByIndex(0)
sheet.getCellRangeByPosition(0, 0, 0, count - 1).setDataArray(
    tuple((0.01 + row / 1000,) for row in range(count)))
sheet.getCellByPosition(1, 0).Formula = "=DISTANCE_LUMINOSITY(A1)"
column = sheet.getCellRangeByPosition(1, 0, 1, count - 1)
column.fillAuto(TO_BOTTOM, 1)
column.getDataArray()
start = time.monotonic()
document.calculateAll()
result = time.monotonic() - start
"""
    took = worker_office.run(filled, count=count)
    (first,) = worker_office.processes("cellfuncs.bridges.worker")
    began, killed, values, again = worker_office.run(
        filled.replace("result =", "whole =")
        + """
import os, signal, threading
killed = []
def kill():
    os.kill(pid, signal.SIGKILL)
    killed.append(time.monotonic() - start)
threading.Timer(took / 3, kill).start()
start = time.monotonic()
document.calculateAll()
whole = time.monotonic() - start
values = [row[0] for row in column.getDataArray()]
document.calculateAll()
again = [row[0] for row in column.getDataArray()]
result = [whole, killed[0], values, again]
""",
        count=count,
        pid=first,
        took=took,
    )
    assert killed < began, "the worker was to die before the end of the recalculation"
    distance = CATALOGUE["DISTANCE_LUMINOSITY"]
    wanted = [distance(0.01 + row / 1000) for row in range(count)]
    right = [pytest.approx(each, rel=1e-12) for each in wanted]
    assert [
        found for found, each in zip(values, right, strict=True) if found not in (None, each)
    ] == []
    assert again == right
    (second,) = worker_office.processes("cellfuncs.bridges.worker")
    assert second != first


def test_the_worker_ends_with_the_office_even_a_killed_one(worker_office: Office) -> None:
    worker_office.run(ASKED, cells=[[]], formulas=["=PROVENANCE()"])
    (pid,) = worker_office.processes("cellfuncs.bridges.worker")
    (office_pid,) = worker_office.processes("soffice.bin")
    os.kill(office_pid, signal.SIGKILL)
    deadline = time.monotonic() + 10
    while Path(f"/proc/{pid}").exists() and time.monotonic() < deadline:
        time.sleep(0.05)
    assert not Path(f"/proc/{pid}").exists()


def test_an_environment_that_is_gone_gives_error_values(tmp_path: Path) -> None:
    extension = Extension(in_process=False, python=str(tmp_path / "gone" / "python"))
    build(extension, tmp_path / "functions.oxt")
    made = Office(tmp_path, tmp_path / "functions.oxt")
    try:
        rows = [f"=DISTANCE_LUMINOSITY({row}/100)" for row in range(1, 301)]
        found = made.run(ASKED, cells=[[]] * len(rows), formulas=rows)
        assert [each["error"] for each in found] == [519] * len(rows)
        assert made.run(ASKED, cells=[[]], formulas=["=1+1"]) == [2.0]
    finally:
        made.close()


def test_no_port_is_open(office: Office) -> None:
    office.run(ASKED, cells=[[]], formulas=["=PROVENANCE()"])
    pids = office.processes("soffice.bin") + office.processes("cellfuncs.bridges.worker")
    assert pids
    for pid in pids:
        sockets = set()
        for entry in Path(f"/proc/{pid}/fd").iterdir():
            target = os.readlink(entry)
            if target.startswith("socket:"):
                sockets.add(target[8:-1])
        listening = set()
        for table in ("tcp", "tcp6"):
            for line in Path(f"/proc/{pid}/net/{table}").read_text().splitlines()[1:]:
                fields = line.split()
                if fields[3] == "0A":  # TCP_LISTEN
                    listening.add(fields[9])
        assert not sockets & listening
