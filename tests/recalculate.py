"""Recalculate a workbook with three independent spreadsheet engines.

``recalculated(path, engine)`` gives what LibreOffice Calc, formualizer or IronCalc compute for
every written cell of an .xlsx file. No cached value is ever read: Calc is told to recalculate
hard, the other two have no other way. ``ErrorCell`` carries the code a person would see.

Gaps of the engines, measured with LibreOffice 7.4.7, formualizer 0.13.0 and IronCalc 0.9.1:

- A function over a whole range inside SUMPRODUCT (EXP, SQRT, LN, ABS, POWER, EXACT, ISNUMBER):
  formualizer gives #VALUE!, or a silent 0 for EXACT and ISNUMBER, in an array formula as well.
  IronCalc is right for one function of a named range (W*EXP(N)), but silently takes a single row
  where one stands inside another (SQRT(EXP(N))) or the range has no name (EXP(S!A1:A64), IF too),
  unless in an array formula; its ISNUMBER is a silent 0. Operators (+ - * / ^ & = < >) are
  elementwise in all three, so EXP(k*N) is written EXP(1)^(k*N), SQRT(N) is N^0.5.
- SUM(EXP(N)) is elementwise only in an array formula (Calc intersects): use SUMPRODUCT.
- SQRT, LN, LOG10, ATANH and ACOSH outside their domain: Calc says Err:502, saved as #VALUE!, and
  ERROR.TYPE of it is #N/A; the others say #NUM!. The literal #NUM! and POWER(-1,0.5) are #NUM! in
  all three.
- IronCalc carries infinity (EXP(1000), 1E308*10) and NaN (ACOS(2)) to the end of the formula:
  ISERROR and IFERROR do not see them and 1/EXP(1000) is 0. 10^999 is #DIV/0! there, 0^0 #NUM!.
- Calc and IronCalc take numbers equal that differ in the last bits (0.1+0.2=0.3 is TRUE), Calc
  also in INT and in a final difference (0.1+0.2-0.3 is 0); formualizer compares exactly.
- Calc: a logical is a number (ISNUMBER(TRUE)); subnormal numbers (1E-320) are an error;
  a number joined to text has 15 digits, in the others 16 or 17. A power that underflows
  (0.0001^100) is #NUM!, in the others 0.
- Calc reads XOR and IFNA only with the prefix _xlfn. in the file (IFS, LET: untried with it).
- formualizer: upper and lower case only of ASCII letters, in = also; FLOOR(-2.7,-1) is -3; TRIM
  takes the no-break space; 276 terms in one sum (250 are well) or 40 nested SQRT(1+...) (30 are
  well) give #ERROR!; 64 nested IF and 62 nested SUBSTITUTE are well.
- IronCalc: a defined name for a constant is #NAME?; names for cells and ranges are right. 1E-16
  counts as 0 in a comparison (1E-16>0 is FALSE).

openpyxl writes an input with 16 significant digits, so a double may arrive one bit off.
"""

from __future__ import annotations

import atexit
import io
import json
import os
import re
import shutil
import signal
import subprocess
import sys
import tempfile
import time
import zipfile
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path
from typing import Any

ENGINES = ("libreoffice", "formualizer", "ironcalc")


@dataclass(frozen=True)
class ErrorCell:
    """An error value: its code as shown in a cell, and what the engine itself called it."""

    code: str
    raw: int | str = field(default="", compare=False)


Value = float | str | bool | ErrorCell | None
Sheets = dict[str, dict[str, Value]]


def recalculated(path: Path, engine: str) -> Sheets:
    """Give sheet name -> cell address -> value for every cell in which something is written."""
    engines = {
        "libreoffice": _by_libreoffice,
        "formualizer": _by_formualizer,
        "ironcalc": _by_ironcalc,
    }
    return engines[engine](path.resolve(), _written_cells(path))


def save(workbook: Any, path: Path) -> Path:
    """Save as spreadsheet programs do: openpyxl calls an empty cell a number, for IronCalc 0."""
    packed = io.BytesIO()
    workbook.save(packed)
    with zipfile.ZipFile(packed) as old, zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as new:
        for part in old.namelist():
            content = old.read(part)
            if part.startswith("xl/worksheets/sheet"):
                content = re.sub(rb'(<c r="\w+" s="\d+") t="n"(?: ?/>|></c>)', rb"\1/>", content)
            new.writestr(part, content)
    return path


_Written = dict[str, list[tuple[int, int, str]]]


def _written_cells(path: Path) -> _Written:
    from openpyxl import load_workbook

    return {
        sheet.title: [
            (cell.row, cell.column, cell.coordinate)
            for row in sheet.iter_rows()
            for cell in row
            if cell.value is not None
        ]
        for sheet in load_workbook(path).worksheets
    }


def _by_formualizer(path: Path, written: _Written) -> Sheets:
    from formualizer import Workbook

    codes = {"Div": "#DIV/0!", "Name": "#NAME?", "Na": "#N/A"}
    workbook = Workbook.from_path(str(path))
    # Otherwise a cell with a date format comes back as a datetime, in no other engine so.
    workbook.set_temporal_egress("serial")
    workbook.evaluate_all()

    def value(sheet: str, row: int, column: int) -> Value:
        found = workbook.get_value(sheet, row, column)
        if isinstance(found, dict):
            kind = found["kind"]
            return ErrorCell(codes.get(kind, f"#{kind.upper()}!"), kind)
        return float(found) if type(found) is int else found

    return {
        sheet: {address: value(sheet, row, column) for row, column, address in cells}
        for sheet, cells in written.items()
    }


def _by_ironcalc(path: Path, written: _Written) -> Sheets:
    import ironcalc

    model = ironcalc.load_from_xlsx(str(path))
    model.evaluate()
    names = [properties["name"] for properties in model.get_worksheets_properties()]

    def value(sheet: int, row: int, column: int) -> Value:
        found = model.get_cell_value(sheet, row, column)
        if model.get_cell_type(sheet, row, column) == ironcalc.CellType.ErrorValue:
            return ErrorCell(str(found), str(found))
        return found

    return {
        sheet: {address: value(names.index(sheet), row, column) for row, column, address in cells}
        for sheet, cells in written.items()
    }


# What Calc itself writes for its internal errors when it saves .xlsx (measured with 7.4.7);
# every other number is saved as #VALUE!, among them 502, which SQRT(-1) and LN(-1) give.
_CALC_CODES = {
    503: "#NUM!",
    521: "#NULL!",
    523: "#NUM!",
    524: "#REF!",
    525: "#NAME?",
    532: "#DIV/0!",
    32767: "#N/A",
}


def _by_libreoffice(path: Path, written: _Written) -> Sheets:
    office = _office()
    assert office.stdin is not None
    assert office.stdout is not None
    office.stdin.write(json.dumps(path.as_uri()) + "\n")
    office.stdin.flush()
    answer = json.loads(office.stdout.readline() or '{"failed": "the LibreOffice helper ended"}')
    if "failed" in answer:
        raise RuntimeError(f"LibreOffice could not recalculate {path}: {answer['failed']}")

    def value(sheet: dict[str, Any], row: int, column: int) -> Value:
        key = f"{row} {column}"
        if key in sheet["errors"]:
            number = sheet["errors"][key]
            return ErrorCell(_CALC_CODES.get(number, "#VALUE!"), number)
        rows = sheet["rows"]
        if row > len(rows) or column > len(rows[0]):
            return None
        found: float | str = rows[row - 1][column - 1]
        return bool(found) if key in sheet["logical"] else found

    return {
        name: {address: value(answer[name], row, column) for row, column, address in cells}
        for name, cells in written.items()
    }


# LibreOffice's own Python binding belongs to the system's interpreter, so this file runs itself
# there (see __main__) and is asked through its standard input. One office serves the process:
# starting it takes 2 s, a workbook in a running one 0.1 s, against 2 s for each
# `soffice --convert-to`.
@cache
def _office() -> subprocess.Popen[str]:
    helper = subprocess.Popen(
        ["/usr/bin/python3", __file__],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
        # An interrupt at the terminal must not reach it: it ends when its input does.
        start_new_session=True,
    )

    def end() -> None:
        assert helper.stdin is not None
        helper.stdin.close()
        helper.wait(timeout=30)

    atexit.register(end)
    return helper


def _serve() -> None:
    """Answer each file address on standard input with the values of that workbook, as JSON."""
    folder = tempfile.mkdtemp(prefix="recalculate-")
    pipe = os.path.basename(folder)
    office = subprocess.Popen(
        [
            "soffice",
            "--headless",
            "--norestore",
            "--nologo",
            "--nodefault",
            "--nofirststartwizard",
            f"-env:UserInstallation=file://{folder}/profile",
            f"--accept=pipe,name={pipe};urp;",
        ],
        stdin=subprocess.DEVNULL,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        start_new_session=True,
    )
    try:
        desktop = _connected(pipe)
        for line in sys.stdin:
            try:
                answer = _read(desktop, json.loads(line))
            except Exception as problem:
                answer = {"failed": repr(problem)}
            print(json.dumps(answer), flush=True)
        desktop.terminate()
        office.wait(timeout=10)
    finally:
        if office.poll() is None:
            os.killpg(office.pid, signal.SIGKILL)
            office.wait()
        shutil.rmtree(folder, ignore_errors=True)


def _connected(pipe: str) -> Any:
    import uno  # type: ignore[import-not-found]

    context = uno.getComponentContext()
    resolver = context.ServiceManager.createInstanceWithContext(
        "com.sun.star.bridge.UnoUrlResolver", context
    )
    deadline = time.monotonic() + 60
    while True:
        try:
            remote = resolver.resolve(f"uno:pipe,name={pipe};urp;StarOffice.ComponentContext")
        except Exception:
            if time.monotonic() > deadline:
                raise
            time.sleep(0.05)
        else:
            return remote.ServiceManager.createInstanceWithContext(
                "com.sun.star.frame.Desktop", remote
            )


def _read(desktop: Any, address: str) -> dict[str, Any]:
    from com.sun.star.beans import PropertyValue  # type: ignore[import-not-found]

    hidden = PropertyValue(Name="Hidden", Value=True)
    document = desktop.loadComponentFromURL(address, "_blank", 0, (hidden,))
    if document is None:
        raise ValueError("not a file it can load")
    try:
        document.calculateAll()
        return {sheet.Name: _sheet(sheet) for sheet in document.Sheets}
    finally:
        document.close(True)


def _sheet(sheet: Any) -> dict[str, Any]:
    in_error = 4  # com.sun.star.sheet.FormulaResult.ERROR
    cursor = sheet.createCursor()
    cursor.gotoEndOfUsedArea(False)
    end = cursor.RangeAddress
    rows = sheet.getCellRangeByPosition(0, 0, end.EndColumn, end.EndRow).getDataArray()
    errors = {
        f"{row + 1} {column + 1}": sheet.getCellByPosition(column, row).getError()
        for area in sheet.queryFormulaCells(in_error).RangeAddresses
        for row in range(area.StartRow, area.EndRow + 1)
        for column in range(area.StartColumn, area.EndColumn + 1)
    }
    # Calc has no logical type, only numbers shown as TRUE or FALSE.
    logical = [
        f"{row + 1} {column + 1}"
        for row, values in enumerate(rows)
        for column, value in enumerate(values)
        if value in (0.0, 1.0) and sheet.getCellByPosition(column, row).String in ("TRUE", "FALSE")
    ]
    return {"rows": rows, "errors": errors, "logical": logical}


if __name__ == "__main__":
    _serve()
