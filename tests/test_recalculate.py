"""The three spreadsheet engines give the facts of the standards and of mpmath, from scratch."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
import time
import zipfile
from collections.abc import Callable
from pathlib import Path

import mpmath
import openpyxl
import pytest
from numpy.polynomial.legendre import leggauss
from openpyxl.workbook.defined_name import DefinedName

sys.path.insert(0, str(Path(__file__).parent))

from recalculate import ENGINES, ErrorCell, Value, _by_libreoffice, recalculated

every_engine = pytest.mark.parametrize("engine", ENGINES)


def results(folder: Path, engine: str, *formulas: str, **cells: object) -> list[Value]:
    """Give what the formulas come to, beside cells in column A, in a file without cached values."""
    workbook = openpyxl.Workbook()
    sheet = workbook.active
    for address, value in cells.items():
        sheet[address] = value
    for row, formula in enumerate(formulas, start=1):
        sheet.cell(row, 5, formula)
    path = folder / "formulas.xlsx"
    workbook.save(path)
    values = recalculated(path, engine)[sheet.title]
    return [values[f"E{row}"] for row in range(1, len(formulas) + 1)]


# Outside: mpmath at 30 digits. The small arguments show that no engine forms SINH or ATANH from
# differences that cancel, and that no digit is lost on the way out of it.
@every_engine
@pytest.mark.parametrize(
    ("formula", "exact"),
    [
        ("=EXP(1)", lambda: mpmath.e),
        ("=LN(2)", lambda: mpmath.ln2),
        ("=PI()", lambda: mpmath.pi),
        ("=2^0.5", lambda: mpmath.sqrt(2)),
        ("=SINH(2^-30)", lambda: mpmath.sinh(mpmath.ldexp(1, -30))),
        ("=ATANH(2^-30)", lambda: mpmath.atanh(mpmath.ldexp(1, -30))),
        ("=LN(1+2^-40)", lambda: mpmath.log1p(mpmath.ldexp(1, -40))),
        ("=EXP(-700)", lambda: mpmath.exp(-700)),
        ("=ATAN2(1,2)", lambda: mpmath.atan2(2, 1)),
    ],
)
def test_numbers_at_full_double_precision(
    tmp_path: Path, engine: str, formula: str, exact: Callable[[], mpmath.mpf]
) -> None:
    (value,) = results(tmp_path, engine, formula)
    with mpmath.workdps(30):
        truth = exact()
        assert abs(mpmath.mpf(value) - truth) <= abs(truth) * mpmath.ldexp(1, -52)


# Outside: ECMA-376 part 1, SpreadsheetML functions, ERROR.TYPE (the same seven names are the
# error values of ODF 1.3 part 4; that part from memory). #NULL! is left out: Calc 7.4 gives the
# error but no number for it.
@every_engine
@pytest.mark.parametrize(
    ("code", "number"),
    [("#DIV/0!", 2), ("#VALUE!", 3), ("#REF!", 4), ("#NAME?", 5), ("#NUM!", 6), ("#N/A", 7)],
)
def test_error_codes_of_the_standard(tmp_path: Path, engine: str, code: str, number: int) -> None:
    found = results(tmp_path, engine, f"={code}", f"=ERROR.TYPE({code})", f"=IF(TRUE,{code},1)")
    assert found == [ErrorCell(code), number, ErrorCell(code)]


@every_engine
@pytest.mark.parametrize(
    ("formula", "code"),
    [
        ("=1/0", "#DIV/0!"),
        ('="x"*1', "#VALUE!"),
        ("=NA()", "#N/A"),
        ("=no_such_function(1)", "#NAME?"),
        ("=POWER(-1,0.5)", "#NUM!"),
        ("=EXP(1000)", "#NUM!"),
        ('=MATCH("x",A1:A2,0)', "#N/A"),
    ],
)
def test_errors_arise_with_the_code_of_their_cause(
    tmp_path: Path, engine: str, formula: str, code: str
) -> None:
    assert results(tmp_path, engine, formula) == [ErrorCell(code)]


# Outside: the implicit conversions of ODF 1.3 part 4 (empty cell as 0 and as empty text; from
# memory) and its logical operators.
@every_engine
def test_kinds_of_value(tmp_path: Path, engine: str) -> None:
    found = results(
        tmp_path,
        engine,
        '=A1=""',
        "=ISBLANK(A1)",
        "=A1*2",
        '=A2&"!"',
        '=""',
        "=A3",
        "=A2",
        "=A4",
        "=A3+A3",
        A2="H alpha",
        A3=True,
        A4="#N/A",
    )
    assert found == [True, True, 0, "H alpha!", "", True, "H alpha", ErrorCell("#N/A"), 2]
    assert [type(value) for value in found] == [
        *(bool, bool, float, str, str, bool, str, ErrorCell, float)
    ]


@every_engine
def test_constants_are_read_beside_formulas(tmp_path: Path, engine: str) -> None:
    workbook = openpyxl.Workbook()
    sheet = workbook.active
    sheet["B2"], sheet["B3"], sheet["D7"] = 1.5, "text", True
    workbook.save(tmp_path / "constants.xlsx")
    found = recalculated(tmp_path / "constants.xlsx", engine)
    assert found == {sheet.title: {"B2": 1.5, "B3": "text", "D7": True}}


# Outside: the integral of exp(-x) from 0 to 1 is 1 - 1/e, and Gauss-Legendre quadrature with 64
# nodes is exact to rounding for it (numpy's nodes; openpyxl writes them with 16 digits).
@every_engine
def test_names_on_a_hidden_sheet_and_elementwise_sums(tmp_path: Path, engine: str) -> None:
    workbook = openpyxl.Workbook()
    reference = workbook.create_sheet("Reference tables")
    reference.sheet_state = "veryHidden"
    for row, (node, weight) in enumerate(zip(*leggauss(64), strict=True), start=1):
        reference.cell(row, 1, float(node + 1) / 2)
        reference.cell(row, 2, float(weight) / 2)
        reference.cell(row, 3, f"line {row}")
    for name, column in (("gl_node", "A"), ("gl_weight", "B"), ("line_key", "C")):
        area = f"'Reference tables'!${column}$1:${column}$64"
        workbook.defined_names[name] = DefinedName(name, attr_text=area)
    sheet = workbook.active
    sheet["A1"] = "  LINE 7 "
    sheet["A2"] = "=SUMPRODUCT(gl_weight*EXP(1)^-gl_node)"
    sheet["A3"] = "=SUMPRODUCT((line_key=LOWER(TRIM(A1)))*gl_node)"
    workbook.save(tmp_path / "names.xlsx")

    found = recalculated(tmp_path / "names.xlsx", engine)

    assert found[sheet.title]["A2"] == pytest.approx(float(-mpmath.expm1(-1)), rel=1e-14, abs=0)
    assert found[sheet.title]["A3"] == found["Reference tables"]["A7"]


# Outside: 1/(1*2) + 1/(2*3) + ... + 1/(n(n+1)) = n/(n+1), which telescopes.
@every_engine
def test_a_formula_of_seven_thousand_characters(tmp_path: Path, engine: str) -> None:
    terms = [f"1/(A1*({k}*({k}+1)))" for k in range(1, 341)]
    groups = ["+".join(terms[start : start + 20]) for start in range(0, 340, 20)]
    formula = "=" + "+".join(f"({group})" for group in groups)
    assert 6500 < len(formula) < 8192
    assert results(tmp_path, engine, formula, A1=1) == [pytest.approx(340 / 341, rel=1e-14)]


def _with_stale_value(path: Path, made_by: str) -> None:
    """Write 1+2 as a program would that left 99 in its cache and asked for no recalculation."""
    workbook = openpyxl.Workbook()
    workbook.active["A1"] = "=1+2"
    workbook.active["B1"] = "=A1*10"
    workbook.save(path)
    with zipfile.ZipFile(path) as package:
        parts = {name: package.read(name).decode() for name in package.namelist()}
    cells = "xl/worksheets/sheet1.xml"
    parts[cells] = re.sub(r"<v\s*/>|<v></v>", "<v>99</v>", parts[cells])
    parts["xl/workbook.xml"] = re.sub(r"<calcPr[^>]*/>", "", parts["xl/workbook.xml"])
    parts["docProps/app.xml"] = re.sub(
        r"(?<=<Application>)[^<]*", made_by, parts["docProps/app.xml"]
    )
    with zipfile.ZipFile(path, "w") as package:
        for name, text in parts.items():
            package.writestr(name, text)
    stored = openpyxl.load_workbook(path, data_only=True).active
    assert (stored["A1"].value, stored["B1"].value) == (99, 99)


@every_engine
@pytest.mark.parametrize("made_by", ["Microsoft Excel", "LibreOffice/7.4.7.2"])
def test_stale_cached_values_are_recomputed(tmp_path: Path, engine: str, made_by: str) -> None:
    path = tmp_path / "stale.xlsx"
    _with_stale_value(path, made_by)
    (values,) = recalculated(path, engine).values()
    assert values == {"A1": 3, "B1": 30}


def test_a_file_the_office_cannot_load_is_named_and_the_next_one_is_served(
    tmp_path: Path,
) -> None:
    absent = tmp_path / "absent.xlsx"
    with pytest.raises(RuntimeError, match=re.escape(str(absent))):
        _by_libreoffice(absent, {})
    assert results(tmp_path, "libreoffice", "=1+1") == [2]


@pytest.mark.parametrize("ending", ["exit", "killed"])
def test_no_office_is_left_behind(tmp_path: Path, ending: str) -> None:
    results(tmp_path, "libreoffice", "=1+1")
    session = subprocess.Popen(
        [
            sys.executable,
            "-c",
            "import sys; sys.path.insert(0, sys.argv[1]); from pathlib import Path\n"
            "import recalculate\n"
            "print(recalculate.recalculated(Path(sys.argv[2]), 'libreoffice'), flush=True)\n"
            "sys.stdin.read()",
            str(Path(__file__).parent),
            str(tmp_path / "formulas.xlsx"),
        ],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        # The office's profile lies in it, so its command line tells it from any other office.
        env={**os.environ, "TMPDIR": str(tmp_path)},
        text=True,
    )
    assert session.stdin is not None
    assert session.stdout is not None
    assert session.stdout.readline() == "{'Sheet': {'E1': 2.0}}\n"
    assert _offices_in(tmp_path)
    if ending == "killed":
        session.send_signal(signal.SIGKILL)
    session.stdin.close()
    session.wait(timeout=30)
    deadline = time.monotonic() + 30
    while _offices_in(tmp_path) and time.monotonic() < deadline:
        time.sleep(0.1)
    assert not _offices_in(tmp_path)


def _offices_in(folder: Path) -> list[str]:
    found = []
    for process in Path("/proc").glob("[0-9]*/cmdline"):
        try:
            command = process.read_bytes().decode(errors="replace")
        except (FileNotFoundError, ProcessLookupError):
            continue
        if f"UserInstallation=file://{folder}" in command:
            found.append(command)
    return found
