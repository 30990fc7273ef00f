"""Excel's face, through xlwings' own code; only COM is stood in for (excel_stand_ins.py).

What could not be run for want of Excel is the manual check in DEVELOPERS.md.
"""

import csv
import inspect
import re
import sys
from collections.abc import Callable, Iterator, Sequence
from decimal import Decimal
from math import inf
from pathlib import Path
from types import ModuleType, SimpleNamespace
from typing import Any

import pytest
from bridges.excel_stand_ins import (
    MISSING,
    OURS,
    VT_ARRAY,
    VT_BSTR,
    VT_R8,
    VT_VARIANT,
    CellRange,
    ComTime,
    Workbook,
    in_basic,
    variant,
    windows_with_excel,
)
from examples import call_in
from openpyxl.utils.datetime import to_excel

import cellfuncs
from cellfuncs import CATALOGUE, CellError, Function, InputError
from cellfuncs.catalogue import Number
from workbooks import cli
from workbooks.commands import connect_excel

# Excel's numbers of its error values and their VARIANT codes: Microsoft's documentation of CVErr
# and of XlCVError; in COM the code is 0x800A0000 with the number in the lower half.
ERROR_NUMBERS = {"#NUM!": 2036, "#VALUE!": 2015, "#N/A": 2042, "#DIV/0!": 2007, "#REF!": 2023}


def com_code(number: int) -> int:
    return 0x800A0000 + number - 2**32


every_function = pytest.mark.parametrize("made", CATALOGUE.values(), ids=lambda made: made.name)


@pytest.fixture(scope="module")
def windows() -> Iterator[SimpleNamespace]:
    with windows_with_excel() as windows:
        yield windows


@pytest.fixture(scope="module")
def imported(windows: SimpleNamespace) -> Workbook:
    """A workbook after a click on «Import Functions»"""
    workbook = Workbook()
    windows.udfs.import_udfs(OURS, workbook)
    return workbook


Cell = Callable[..., Any]


@pytest.fixture
def cell(windows: SimpleNamespace) -> Cell:
    """Call a function as the wrapper in the workbook does."""
    workbook = Workbook()
    caller = CellRange([[None]], workbook)

    def cell(name: str, *arguments: Any) -> Any:
        given = tuple(
            CellRange(each, workbook) if isinstance(each, list) else each for each in arguments
        )
        return windows.python.CallUDF(OURS, name, given, workbook, caller)

    return cell


def in_python(made: Function, *arguments: Any) -> Any:
    """What a cell is to show: the function's result, or the error value of its exception."""
    try:
        return made(*arguments)
    except CellError as error:
        return error.shown


def same(found: Any, expected: Any) -> bool:
    if isinstance(expected, str):
        return bool(found == expected)
    return bool(type(found) is float and found == pytest.approx(expected, rel=1e-12, abs=0))


# Registered ---------------------------------------------------------------------------------------


def test_xlwings_runs_without_the_part_that_is_under_another_licence(
    windows: SimpleNamespace,
) -> None:
    assert windows.xlwings.__pro__ is False
    assert sys.modules["xlwings.pro"] is None
    assert not [name for name in sys.modules if name.startswith("xlwings.pro.")]


def test_every_function_is_registered_and_nothing_else(windows: SimpleNamespace) -> None:
    registered = {name for name, each in vars(windows.ours).items() if hasattr(each, "__xlfunc__")}
    assert registered == set(CATALOGUE)


@every_function
def test_a_function_has_its_name_category_and_arguments(
    windows: SimpleNamespace, made: Function
) -> None:
    known = getattr(windows.ours, made.name).__xlfunc__
    assert known["name"] == made.name
    assert known["category"] == f"cellfuncs {made.family}"
    assert not known["sub"]
    assert not known["volatile"]
    assert len(known["args"]) == len(made.arguments)
    for each, argument in zip(known["args"], made.arguments, strict=True):
        assert each["name"].rstrip("_") == argument.name
        assert ("optional" in each) == argument.optional
        assert each.get("optional") is None
    assert [each["vararg"] for each in known["args"]].count(True) == made.variadic


@every_function
def test_excel_gets_the_help_of_a_function_and_of_each_argument(
    imported: Workbook, made: Function
) -> None:
    options = imported.macro_options[f"'night.xlsm'!{made.name}"]
    assert options["Category"] == f"cellfuncs {made.family}"
    assert made.summary in options["Description"]
    assert len(options["Description"]) < 255  # what Excel takes; xlwings cuts off the rest
    described = options["ArgumentDescriptions"] or []
    assert len(described) == len(made.arguments)
    for words, argument in zip(described, made.arguments, strict=True):
        assert words.startswith(argument.meaning)
        assert len(words) < 255
        assert ("left out: " in words) == argument.optional
        if isinstance(argument, Number):
            assert not argument.unit or f"[{argument.unit}]" in words
            for limit in (argument.above, argument.at_least, argument.below, argument.at_most):
                assert limit in (inf, -inf) or f"{limit:.10g}" in words


# The VBA ------------------------------------------------------------------------------------------


def wrapper(vba: str, name: str) -> str:
    (found,) = re.findall(rf"^Function {name}\(.*?^End Function$", vba, re.M | re.S)
    return str(found)


@every_function
def test_the_wrapper_takes_the_arguments_and_passes_them_on(
    imported: Workbook, made: Function
) -> None:
    text = wrapper(imported.vba, made.name)
    names = ["function_" if a.name == "function" else a.name for a in made.arguments]
    declared = [
        f"Optional {name}" if argument.optional else name
        for name, argument in zip(names, made.arguments, strict=True)
    ]
    passed = f"Array({', '.join(names)})"
    if made.variadic:
        declared[-1] = f"ParamArray {names[-1]}()"
        passed = "argsArray"
    assert text.startswith(f"Function {made.name}({', '.join(declared)})\n")
    assert f'XLPy.CallUDF("{OURS}", "{made.name}", {passed}, ThisWorkbook, ' in text


@every_function
def test_no_text_stands_in_a_numbers_place(imported: Workbook, made: Function) -> None:
    text = wrapper(imported.vba, made.name)
    assert "Err.Description" not in text
    assert f"    {made.name} = CVErr(2015)\n" in text
    calls = re.findall(r"= (\w+\()?XLPy\.CallUDF\(", text)
    assert calls == ["cellfuncs_result("] * 2


def test_nothing_of_the_vba_is_seen_in_the_sheet_but_the_functions(imported: Workbook) -> None:
    public = re.findall(r"^(?:Public )?(?:Function|Sub) (\w+)", imported.vba, re.M)
    assert sorted(public) == sorted(CATALOGUE)
    private = re.findall(r"^Private Function (\w+)", imported.vba, re.M)
    assert private == ["cellfuncs_result", "cellfuncs_value"]


def test_vba_lines_are_short_enough(imported: Workbook) -> None:
    # VBA takes 1023 characters in a line
    assert max(map(len, imported.vba.split("\n"))) < 1023


def as_vba(value: Any) -> str:
    if isinstance(value, str):
        return '"' + value.replace('"', '""') + '"'
    return repr(value)


def test_the_vba_runs_and_makes_error_values_of_the_codes(imported: Workbook) -> None:
    """In LibreOffice's Basic: that it is Excel's VBA could only be seen in Excel."""
    calls: list[tuple[str, Sequence[str]]] = []
    for made in CATALOGUE.values():
        marks = [f'"{name}"' for name in (a.name for a in made.arguments)]
        calls.append(('"#NUM!"', (made.name, *marks)))
    table = (
        'Array(1.5, "#N/A", "#VALUE!", "H alpha")',
        ("DISTANCE_LUMINOSITY", "0.5", '"WMAP9"'),
    )
    others = [
        (as_vba(reply), ("AGE_AT_REDSHIFT", "2.0", '""'))
        for reply in (2.5, "H alpha", "#VALUE! ", "#n/a", *ERROR_NUMBERS)
    ]
    found = in_basic(imported.vba, [*calls, table, *others])
    for made, (asked, outcome) in zip(CATALOGUE.values(), found, strict=False):
        names = [argument.name for argument in made.arguments]
        assert asked == "|".join([OURS, made.name, *names])
        assert outcome == "error 2036"
    asked, outcome = found[len(calls)]
    assert asked == f"{OURS}|DISTANCE_LUMINOSITY|0.5|WMAP9"
    assert outcome == "Double 1.5;error 2042;error 2015;String H alpha;"
    assert [outcome for _, outcome in found[len(calls) + 1 :]] == [
        "Double 2.5",
        "String H alpha",
        "String #VALUE! ",
        "String #n/a",
        *(f"error {number}" for number in ERROR_NUMBERS.values()),
    ]


def test_the_vba_makes_error_values_in_a_table(imported: Workbook) -> None:
    filled = """
Function table() As Variant
    Dim cells(1, 2) As Variant
    cells(0, 0) = 1.5: cells(0, 1) = "#N/A": cells(0, 2) = "#DIV/0!"
    cells(1, 0) = "#NUM!": cells(1, 1) = "Hx": cells(1, 2) = "#REF!"
    table = cells
End Function
"""
    ((_, outcome),) = in_basic(
        imported.vba + filled, [("table()", ("DISTANCE_LUMINOSITY", "0.5", '""'))]
    )
    assert outcome == "Double 1.5;error 2042;error 2007;/error 2036;String Hx;error 2023;/"


def test_the_workbook_gets_a_reference_to_the_add_in_once(windows: SimpleNamespace) -> None:
    for before in (("VBA",), ("VBA", "xlwings")):
        workbook = Workbook(references=before)
        windows.udfs.import_udfs(OURS, workbook)
        assert [each.Name for each in workbook.VBProject.References] == ["VBA", "xlwings"]


def test_without_that_reference_the_functions_are_imported_and_the_way_is_told(
    windows: SimpleNamespace, capsys: pytest.CaptureFixture[str]
) -> None:
    workbook = Workbook()
    workbook.VBProject.References = None
    windows.udfs.import_udfs(OURS, workbook)
    assert "Function DISTANCE_LUMINOSITY(" in workbook.vba
    assert "Tools > References" in capsys.readouterr().out


def test_functions_of_others_are_left_as_xlwings_writes_them(
    windows: SimpleNamespace, monkeypatch: pytest.MonkeyPatch
) -> None:
    theirs = ModuleType("theirs")
    theirs.__file__ = "theirs.py"

    def doubled(x):  # type: ignore[no-untyped-def]
        return 2 * x

    theirs.doubled = windows.xlwings.func(doubled)  # type: ignore[attr-defined]
    monkeypatch.setitem(sys.modules, "theirs", theirs)
    workbook = Workbook()
    windows.udfs.import_udfs(f"theirs;{OURS}", workbook)
    assert "doubled = Err.Description" in wrapper(workbook.vba, "doubled")
    assert "cellfuncs" not in wrapper(workbook.vba, "doubled")
    assert "cellfuncs_result" in wrapper(workbook.vba, "DISTANCE_LUMINOSITY")


def test_wrappers_of_an_unknown_make_are_refused(windows: SimpleNamespace) -> None:
    known = wrapper(written_by_xlwings_alone(windows), "AGE_AT_REDSHIFT")
    for changed in (
        known.replace("XLPy.CallUDF", "Py.CallUDF"),
        known.replace("Err.Description", "Err.Number"),
    ):
        assert changed != known
        with pytest.raises(RuntimeError, match="xlwings"):
            windows.ours.with_error_values(changed + "\n")


def written_by_xlwings_alone(windows: SimpleNamespace) -> str:
    """The VBA as xlwings alone writes it"""
    written = SimpleNamespace(text="")
    written.write = lambda words: setattr(written, "text", written.text + words)
    original = inspect.getclosurevars(windows.udfs.generate_vba_wrapper).nonlocals["generate"]
    original(OURS, windows.ours, written, Workbook())
    return str(written.text)


def test_a_long_call_that_xlwings_splits_is_completed_too(windows: SimpleNamespace) -> None:
    text = (
        "Function LONG_ONE(z)\n"
        '        LONG_ONE = XLPy.CallUDF("m", "LONG_ONE", Array(z, _\n'
        "z), ThisWorkbook, Application.Caller)\n"
        '        LONG_ONE = XLPy.CallUDF("m", "LONG_ONE", Array(z))\n'
        "failed:\n"
        "    LONG_ONE = Err.Description\n"
        "End Function\n"
    )
    changed = windows.ours.with_error_values(text)
    assert "cellfuncs_result(XLPy.CallUDF(" in changed
    assert "z), ThisWorkbook, Application.Caller))\n" in changed


# Called -------------------------------------------------------------------------------------------


def calls() -> list[tuple[Function, list[Any]]]:
    """The documented examples, as values"""
    found = []
    for made in CATALOGUE.values():
        found += [(made, call_in(example)[1]) for example in made.examples]
    return found


def in_cells(arguments: Sequence[Any]) -> list[Any]:
    """Each list as a range of one column"""
    return [[[cell] for cell in each] if isinstance(each, list) else each for each in arguments]


@pytest.mark.parametrize(
    ("made", "arguments"), calls(), ids=lambda each: getattr(each, "name", None)
)
def test_a_cell_gets_what_python_gets(cell: Cell, made: Function, arguments: list[Any]) -> None:
    expected = made(*arguments)
    left_out = [MISSING] * (len(made.arguments) - len(arguments))
    given = in_cells(arguments)
    assert same(cell(made.name, *given, *left_out), expected)
    # the same from cells: each argument a range, of one if it is no range already
    ranges = [each if isinstance(each, list) else [[each]] for each in given]
    assert same(cell(made.name, *ranges, *left_out), expected)
    # an empty cell is as good as an argument left out
    empty = [[[None]]] * len(left_out)
    assert same(cell(made.name, *given, *empty), expected)


BAD = (-1e300, None, "x", 1e300, 0.0, "", 1e-5)


@every_function
def test_whatever_an_argument_is_the_cell_shows_what_python_says(
    cell: Cell, made: Function
) -> None:
    arguments = calls_of(made)[0]
    for position in range(len(arguments)):
        for bad in BAD:
            given = [*arguments[:position], bad, *arguments[position + 1 :]]
            left_out = [MISSING] * (len(made.arguments) - len(given))
            found = cell(made.name, *in_cells(given), *left_out)
            assert same(found, in_python(made, *given)), given


def calls_of(made: Function) -> list[list[Any]]:
    return [arguments for each, arguments in calls() if each is made]


def first_number(made: Function) -> int | None:
    for position, argument in enumerate(made.arguments):
        if isinstance(argument, Number):
            return position
    return None


@pytest.mark.parametrize(
    "made",
    [made for made in CATALOGUE.values() if first_number(made) is not None],
    ids=lambda made: made.name,
)
def test_a_column_gives_a_column_each_element_as_alone(cell: Cell, made: Function) -> None:
    arguments = max(calls_of(made), key=len)
    position = first_number(made)
    assert position is not None
    values = [arguments[position], *BAD, arguments[position] * 1.01]
    given = in_cells([*arguments[:position], values, *arguments[position + 1 :]])
    left_out = [MISSING] * (len(made.arguments) - len(given))
    found = cell(made.name, *given, *left_out)
    assert len(found) == len(values)
    for (element,), value in zip(found, values, strict=True):
        alone = in_python(made, *arguments[:position], value, *arguments[position + 1 :])
        assert same(element, alone), value


def test_a_column_is_read_at_once_and_is_one_call(windows: SimpleNamespace) -> None:
    made = CATALOGUE["DISTANCE_LUMINOSITY"]
    body = made.body
    sizes = []

    def counted(z: Any, cosmology: Any) -> Any:
        sizes.append(getattr(z, "size", 1))
        return body(z, cosmology)

    workbook = Workbook()
    column = CellRange([[0.001 * (row + 1)] for row in range(5000)], workbook)
    object.__setattr__(made, "body", counted)
    try:
        caller = CellRange([[None]], workbook)
        found = windows.python.CallUDF(OURS, made.name, (column, MISSING), workbook, caller)
    finally:
        object.__setattr__(made, "body", body)
    assert sizes == [5000]
    assert column.reads == 1
    assert same(found[4999][0], made(5.0))


def test_blocks_and_rows_keep_their_shape(cell: Cell) -> None:
    block = [[0.1, 0.2, 0.3], [0.4, -1.0, None]]
    found = cell("DISTANCE_LUMINOSITY", block, MISSING)
    assert [len(row) for row in found] == [3, 3]
    assert found[1][1:] == ["#NUM!", "#N/A"]
    assert same(found[1][0], cellfuncs.distance_luminosity(0.4))
    # xlwings hands a single row back flat, which Excel takes for a row
    row = cell("DISTANCE_LUMINOSITY", [[0.1, 0.2]], MISSING)
    assert same(row[0], cellfuncs.distance_luminosity(0.1))
    assert same(row[1], cellfuncs.distance_luminosity(0.2))


def test_columns_of_words_and_numbers(cell: Cell) -> None:
    found = cell(
        "REDSHIFT_FROM_LINE",
        [[6892.84], [5257.2], [5104.5], [4131.0]],
        [["H alpha"], ["[OIII]5007"], ["Hx"], [None]],
        [["vacuum"], ["air"], [None], ["air"]],
    )
    assert same(found[0][0], cellfuncs.redshift_from_line(6892.84, "H alpha"))
    assert same(found[1][0], cellfuncs.redshift_from_line(5257.2, "[OIII]5007", "air"))
    assert found[2:] == [["#VALUE!"], ["#N/A"]]


def test_a_cosmology_from_a_range(cell: Cell) -> None:
    block = [["H0", 70.0], ["Om0", 0.3]]
    expected = cellfuncs.distance_luminosity(0.5, {"H0": 70.0, "Om0": 0.3})
    assert same(cell("DISTANCE_LUMINOSITY", 0.5, block), expected)
    assert same(cell("DISTANCE_LUMINOSITY", [[0.5], [0.5]], block)[1][0], expected)


@pytest.mark.parametrize("code", ERROR_NUMBERS)
def test_an_error_in_a_cell_is_passed_on(cell: Cell, code: str) -> None:
    error = com_code(ERROR_NUMBERS[code])
    assert cell("DISTANCE_LUMINOSITY", [[error]], MISSING) == code
    assert cell("DISTANCE_LUMINOSITY", error, MISSING) == code
    found = cell("DISTANCE_LUMINOSITY", [[0.5], [error]], MISSING)
    assert same(found[0][0], cellfuncs.distance_luminosity(0.5))
    assert found[1] == [code]


def test_an_error_value_without_a_code_of_ours_is_no_number(cell: Cell) -> None:
    spill = com_code(2045)  # #SPILL!
    assert cell("VELOCITY_HUBBLE", [[spill]], MISSING) == "#VALUE!"
    assert cell("UNITS_CONVERTED", [[spill], [1.0]], "m", "m") == [["#VALUE!"], [1.0]]


def test_a_date_is_the_number_that_excel_holds(cell: Cell) -> None:
    night = ComTime(2024, 3, 9, 18, 0, 0)
    assert same(cell("UNITS_CONVERTED", [[night]], "d", "d"), to_excel(night))
    assert to_excel(night) == 45360.75


def test_truths_money_and_whole_numbers(cell: Cell) -> None:
    assert cell("DISTANCE_LUMINOSITY", True, MISSING) == "#VALUE!"
    assert cell("DISTANCE_LUMINOSITY", [[True], [False]], MISSING) == [["#VALUE!"], ["#VALUE!"]]
    # a cell formatted as a currency comes as a Decimal
    money = cell("DISTANCE_LUMINOSITY", [[Decimal("0.5")]], MISSING)
    assert same(money, cellfuncs.distance_luminosity(0.5))
    # VBA may call with an Integer
    assert same(cell("DISTANCE_LUMINOSITY", 1, MISSING), cellfuncs.distance_luminosity(1.0))


def test_the_reason_of_an_error(cell: Cell) -> None:
    words = cell("REASON", "DISTANCE_LUMINOSITY", [[-0.1]])
    assert words == cellfuncs.reason("DISTANCE_LUMINOSITY", -0.1)
    assert cell("REASON", "DISTANCE_LUMINOSITY", 0.5, "WMAP9") == "ok"
    assert cell("REASON", "AGE_OF_UNIVERSE") == "ok"


def test_a_defect_of_ours_is_an_error_value_and_no_traceback(cell: Cell) -> None:
    made = CATALOGUE["DISTANCE_LUMINOSITY"]
    body = made.body

    def broken(z: Any, cosmology: Any) -> Any:
        raise RuntimeError("no such luck")

    object.__setattr__(made, "body", broken)
    try:
        assert cell("DISTANCE_LUMINOSITY", 0.5, MISSING) == "#VALUE!"
        assert cell("DISTANCE_LUMINOSITY", [[0.5], [0.6]], MISSING) in (
            "#VALUE!",
            [["#VALUE!"], ["#VALUE!"]],
        )
    finally:
        object.__setattr__(made, "body", body)


@every_function
def test_pywin32_can_carry_every_result(cell: Cell, made: Function) -> None:
    arguments = calls_of(made)[0]
    left_out = [MISSING] * (len(made.arguments) - len(arguments))
    kind, _ = variant(cell(made.name, *in_cells(arguments), *left_out))
    assert kind == (VT_BSTR if isinstance(made(*arguments), str) else VT_R8)
    column = [
        in_cells([each])[0] if isinstance(each, list) else [[each], [None]] for each in arguments
    ]
    found = cell(made.name, *column, *left_out)
    if isinstance(found, list):
        kind, rows = variant(found)
        assert kind == VT_ARRAY | VT_VARIANT
        assert {kind for _, row in rows for kind, _ in row} <= {VT_BSTR, VT_R8}


# cellfuncs connect excel --------------------------------------------------------------------------


@pytest.fixture
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A user's folder on a machine that says it is Windows"""
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.setenv("APPDATA", str(tmp_path / "AppData" / "Roaming"))
    python = SimpleNamespace(platform="win32", executable=r"C:\Observatory\python.exe")
    monkeypatch.setattr(connect_excel, "sys", python)
    return tmp_path


def settings(home: Path) -> dict[str, str]:
    """The settings as the VBA of xlwings reads them: `Input #`, a name and a value in quotes"""
    with (home / ".xlwings" / "xlwings.conf").open(newline="") as file:
        return dict(csv.reader(file, strict=True))


def write_settings(home: Path, text: str) -> Path:
    path = home / ".xlwings" / "xlwings.conf"
    path.parent.mkdir()
    path.write_bytes(text.encode())
    return path


def test_it_writes_the_settings_and_the_add_in_and_tells_the_rest(
    home: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    connect_excel.connect_excel()
    found = settings(home)
    assert found["INTERPRETER_WIN"] == r"C:\Observatory\python.exe"
    assert found["UDF MODULES"] == OURS
    add_in = home / "AppData/Roaming/Microsoft/Excel/XLSTART/xlwings.xlam"
    assert add_in.read_bytes()[:2] == b"PK"
    told = capsys.readouterr().out
    assert str(home / ".xlwings" / "xlwings.conf") in told
    assert str(add_in) in told
    # the words of the menus, as xlwings' documentation has them
    assert "Trust Center > Trust Center Settings > Macro Settings" in told
    assert "Trust access to the VBA project object model" in told
    assert "xlwings > Import Functions" in told
    assert [line[0] for line in told.split("\n") if re.match(r"\d\.", line)] == ["1", "2"]


def test_xlwings_itself_reads_the_settings(home: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    connect_excel.connect_excel()
    with windows_with_excel() as windows:
        assert Path(windows.xlwings.USER_CONFIG_FILE).parts[-2:] == (".xlwings", "xlwings.conf")
        monkeypatch.setattr(
            windows.xlwings, "USER_CONFIG_FILE", str(home / ".xlwings" / "xlwings.conf")
        )
        found = windows.xlwings.utils.read_user_config()
    assert found["udf modules"] == OURS
    assert found["interpreter_win"] == r"C:\Observatory\python.exe"


OTHERS = (
    '"PYTHONPATH","C:\\Observatory\\scripts"\r\n'
    '"INTERPRETER_WIN","C:\\Old\\python.exe"\r\n'
    '"SHOW CONSOLE","False"\r\n'
    '"UDF MODULES","reductions;plots"\r\n'
)


def test_what_else_is_set_is_kept_and_removing_puts_back_what_was(home: Path) -> None:
    path = write_settings(home, OTHERS)
    before = settings(home)
    connect_excel.connect_excel()
    found = settings(home)
    assert found["UDF MODULES"] == f"reductions;plots;{OURS}"
    assert found["INTERPRETER_WIN"] == r"C:\Observatory\python.exe"
    assert {key: found[key] for key in ("PYTHONPATH", "SHOW CONSOLE")} == {
        key: before[key] for key in ("PYTHONPATH", "SHOW CONSOLE")
    }
    once = path.read_bytes()
    connect_excel.connect_excel()
    assert path.read_bytes() == once
    connect_excel.connect_excel(remove=True)
    assert settings(home) == before
    assert sorted(path.read_bytes().split(b"\r\n")) == sorted(OTHERS.encode().split(b"\r\n"))


def test_removing_leaves_no_file_where_there_was_none(
    home: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    connect_excel.connect_excel()
    connect_excel.connect_excel(remove=True)
    assert list((home / ".xlwings").iterdir()) == []
    capsys.readouterr()
    connect_excel.connect_excel(remove=True)
    assert "not connected" in capsys.readouterr().out


def test_removing_what_is_not_there_touches_nothing(home: Path) -> None:
    path = write_settings(home, OTHERS)
    connect_excel.connect_excel(remove=True)
    assert path.read_bytes() == OTHERS.encode()


def test_a_path_that_excel_cannot_read_is_refused_and_the_old_settings_stay(
    home: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = write_settings(home, OTHERS)
    monkeypatch.setattr(connect_excel, "encoding", lambda: "cp1252")
    monkeypatch.setattr(connect_excel.sys, "executable", "C:\\обсерватория\\python.exe")
    with pytest.raises(InputError, match="обсерватория"):
        connect_excel.connect_excel()
    assert path.read_bytes() == OTHERS.encode()
    assert [each.name for each in path.parent.iterdir()] == ["xlwings.conf"]


def test_an_add_in_that_is_there_is_not_written_again(home: Path) -> None:
    connect_excel.connect_excel()
    add_in = home / "AppData/Roaming/Microsoft/Excel/XLSTART/xlwings.xlam"
    content = add_in.read_bytes()
    add_in.chmod(0o444)
    written = add_in.stat().st_mtime_ns
    connect_excel.connect_excel()
    assert add_in.stat().st_mtime_ns == written
    add_in.chmod(0o644)
    add_in.write_bytes(b"of another version")
    connect_excel.connect_excel()
    assert add_in.read_bytes() == content


def test_without_xlwings_it_says_what_to_install(
    home: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(connect_excel, "find_spec", lambda name: None)
    with pytest.raises(InputError, match=r"pip install cellfuncs\[excel\]"):
        connect_excel.connect_excel()
    assert not (home / ".xlwings").exists()


@pytest.mark.parametrize("words", [("connect", "excel"), ("connect", "excel", "--remove")])
def test_elsewhere_one_sentence_says_that_it_needs_excel_on_windows(
    words: tuple[str, ...],
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.setenv("HOME", str(tmp_path))
    monkeypatch.setattr(sys, "argv", ["cellfuncs", *words])
    # as on a server: no xlwings at all
    monkeypatch.setitem(sys.modules, "xlwings", None)
    with pytest.raises(SystemExit) as stop:
        cli.main()
    assert stop.value.code == 2
    shown = capsys.readouterr()
    assert shown.out == ""
    assert shown.err.count("\n") == 1
    assert "Excel on Windows" in shown.err
    assert list(tmp_path.iterdir()) == []
