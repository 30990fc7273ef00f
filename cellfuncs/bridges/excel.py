"""Excel's face: every function of the catalogue as a user-defined function of xlwings.

xlwings' open-source part serves this module to Excel on Windows. «Import Functions» in its ribbon
imports it, writes a VBA wrapper for each function into the workbook, and a cell's call then comes
here through COM. `cellfuncs connect excel` tells xlwings where the module is.

An error value cannot come back through COM: pywin32 makes every VT_ERROR that Python returns into
«parameter not found» (MakeObjToVariant in its oleargs.cpp), whichever error it was. So the code of
an error travels as text, and the VBA that xlwings writes gets a few lines that put Excel's own
error value in its place. Were those lines missing, a cell would show the text `#NUM!`: no number.
"""

import inspect
import re
import sys
from collections.abc import Callable
from datetime import datetime
from decimal import Decimal
from io import StringIO
from textwrap import shorten
from typing import Any, Final, TextIO

import xlwings

from cellfuncs.bridges.cell import ErrorCell, Result, answer
from cellfuncs.catalogue import CATALOGUE, Argument, Function, Number, result_phrase

ERROR_NUMBERS: Final = {
    "#NULL!": 2000,
    "#DIV/0!": 2007,
    "#VALUE!": 2015,
    "#REF!": 2023,
    "#NAME?": 2029,
    "#NUM!": 2036,
    "#N/A": 2042,
}
"""Excel's numbers of its error values (XlCVError in the documentation of Excel's object model)"""

OTHER_ERROR: Final = ErrorCell("#VALUE!")
"""Stands for an error value that came in and has no code above, such as #SPILL!"""

ERROR_FACILITY: Final = 0x800A
"""The upper half of the 32 bits that an error value has in COM; the lower half is its number"""

HELP_LENGTH: Final = 255
"""What Excel takes for a function's or an argument's help"""

RESERVED_BY_VBA: Final = frozenset(
    "abs addressof and any array as attribute boolean byref byte byval call case cbool cbyte ccur"
    " cdate cdbl cdec cdecl cint circle clng clnglng clngptr close const csng cstr currency cvar"
    " cverr date debug decimal declare defbool defbyte defcur defdate defdbl defdec defint deflng"
    " deflnglng deflngptr defobj defsng defstr defvar dim do doevents double each else elseif empty"
    " end endif enum eqv erase error event exit false fix for friend function get global gosub goto"
    " if imp implements in input inputb int integer is lbound len lenb let like lock long longlong"
    " longptr loop lset me mod new next not nothing null on open option optional or paramarray"
    " preserve print private pset public put raiseevent redim rem resume return rset scale seek"
    " select set sgn shared single spc static stop string sub tab then to true type typeof ubound"
    " unlock until variant wend while with withevents write xor"
    # these the wrappers themselves use
    " app argsarray failed k xlpy caller".split()
)
"""The reserved identifiers of VBA (MS-VBAL 3.3.5.2, from memory), in lower case"""


# From Excel and back ------------------------------------------------------------------------------


def serial(**fields: Any) -> float:
    """Return a date as the number that Excel holds for it: days since 1899-12-30."""
    passed = datetime(**fields) - datetime(1899, 12, 30)
    return passed.total_seconds() / 86400


CONVERSION: Final[dict[str, Any]] = {"ndim": 2, "dates": serial, "err_to_str": True}
"""How xlwings is to hand over an argument: always as rows, with a cell's error by its code"""


def from_excel(given: Any) -> Any:
    """Return an argument as `answer` takes it; a single cell comes as one row of one."""
    if given is None:
        return None
    rows = [[each if type(each) is float else _value(each) for each in row] for row in given]
    return rows[0][0] if len(rows) == 1 and len(rows[0]) == 1 else rows


def _value(given: Any) -> Any:
    if isinstance(given, str):
        return ErrorCell(given) if given in ERROR_NUMBERS else given
    if isinstance(given, int) and not isinstance(given, bool):
        # an error value that xlwings does not know comes as the integer that COM has for it
        return OTHER_ERROR if (given & 0xFFFFFFFF) >> 16 == ERROR_FACILITY else float(given)
    return float(given) if isinstance(given, Decimal) else given


def to_excel(result: Result | list[list[Result]]) -> Any:
    """Return a result as xlwings takes it, errors by their code."""
    if isinstance(result, list):
        return [[each if type(each) is float else _shown(each) for each in row] for row in result]
    return _shown(result)


def _shown(result: Result) -> float | str:
    return result.code if isinstance(result, ErrorCell) else result


# The functions ------------------------------------------------------------------------------------


def user_defined(made: Function) -> Callable[..., Any]:
    """Return the function that xlwings registers for one of the catalogue."""

    def called(*given: Any) -> Any:
        return to_excel(answer(made.name, [from_excel(each) for each in given]))

    called.__name__ = called.__qualname__ = made.name
    called.__doc__ = function_help(made)
    called.__annotations__ = {}
    # xlwings reads names and what may be left out off the signature
    called.__signature__ = inspect.Signature(  # type: ignore[attr-defined]
        [
            inspect.Parameter(
                vba_name(argument.name),
                inspect.Parameter.VAR_POSITIONAL
                if made.variadic and argument is made.arguments[-1]
                else inspect.Parameter.POSITIONAL_OR_KEYWORD,
                default=None if argument.optional else inspect.Parameter.empty,
            )
            for argument in made.arguments
        ]
    )
    for argument in made.arguments:
        help_and_conversion = {"doc": argument_help(argument), **CONVERSION}
        called = xlwings.arg(vba_name(argument.name), **help_and_conversion)(called)
    return xlwings.func(category=f"cellfuncs {made.family}")(called)


def vba_name(name: str) -> str:
    """Return an argument's name as VBA can have it."""
    return f"{name}_" if name.lower() in RESERVED_BY_VBA else name


def function_help(made: Function) -> str:
    """Return what the function wizard shows of a function."""
    caution = f" {made.caution}" if made.caution else ""
    return _short(f"{made.summary}{caution} Gives {result_phrase(made)}.")


def argument_help(argument: Argument) -> str:
    """Return what the function wizard shows of an argument."""
    unit = f" [{argument.unit}]" if isinstance(argument, Number) and argument.unit else ""
    left_out = f"; left out: {argument.default_text}" if argument.optional else ""
    return _short(f"{argument.meaning}{unit}; {argument.allowed}{left_out}")


def _short(words: str) -> str:
    return words if len(words) <= HELP_LENGTH else shorten(words, HELP_LENGTH, placeholder=" …")


globals().update({name: user_defined(made) for name, made in CATALOGUE.items()})


# The VBA ------------------------------------------------------------------------------------------

ERROR_LINES: Final = "\n".join(
    [
        "Private Function cellfuncs_result(ByVal given As Variant) As Variant",
        "    Dim i As Long, j As Long, last As Long",
        "    If Not IsArray(given) Then",
        "        cellfuncs_result = cellfuncs_value(given)",
        "        Exit Function",
        "    End If",
        "    last = -1",
        "    On Error Resume Next",
        "    last = UBound(given, 2)",
        "    On Error GoTo 0",
        "    For i = LBound(given) To UBound(given)",
        "        If last < 0 Then",
        "            given(i) = cellfuncs_value(given(i))",
        "        Else",
        "            For j = LBound(given, 2) To last",
        "                given(i, j) = cellfuncs_value(given(i, j))",
        "            Next j",
        "        End If",
        "    Next i",
        "    cellfuncs_result = given",
        "End Function",
        "",
        "Private Function cellfuncs_value(ByVal given As Variant) As Variant",
        "    cellfuncs_value = given",
        "    If VarType(given) <> vbString Then Exit Function",
        "    Select Case given",
        *(
            f'        Case "{code}": cellfuncs_value = CVErr({number})'
            for code, number in ERROR_NUMBERS.items()
        ),
        "    End Select",
        "End Function",
        "",
    ]
)
"""VBA that puts Excel's error values where their codes are, in a value, a row or a table"""

CALL: Final = re.compile(r"XLPy\.CallUDF\([^\n]*(?: _\n[^\n]*)*\)$", re.MULTILINE)
"""The call of Python in a wrapper, to the end of its line or lines"""

FAILURE: Final = re.compile(r"= Err\.Description$", re.MULTILINE)
"""What xlwings puts into a cell when Python does not answer: a text"""


def with_error_values(vba: str) -> str:
    """Return the wrappers that xlwings has written so that a cell gets Excel's error values.

    RuntimeError where they are not as this module knows them: better no functions than wrong ones.
    """
    count = len(re.findall(r"^Function ", vba, re.MULTILINE))
    vba, calls = CALL.subn(lambda found: f"cellfuncs_result({found[0]})", vba)
    vba, failures = FAILURE.subn(f"= CVErr({ERROR_NUMBERS['#VALUE!']})", vba)
    # one call for Excel, one for other programs of the Office
    if (calls, failures) != (2 * count, count):
        raise RuntimeError(
            f"xlwings {xlwings.__version__} writes its VBA otherwise than cellfuncs knows it;"
            " install the version that cellfuncs asks for"
        )
    return f"{vba}{ERROR_LINES}"


def refer_to_add_in(workbook: Any) -> None:
    """Let the workbook's VBA see that of xlwings' add-in, as Tools > References does."""
    try:
        references = workbook.VBProject.References
        if all(each.Name != "xlwings" for each in references):
            references.AddFromFile(workbook.Application.Workbooks("xlwings.xlam").FullName)
    except Exception:
        # the functions can still be imported, and the reference set by hand
        print("set a reference to xlwings by hand: Alt+F11, Tools > References, tick xlwings")


Generator = Callable[[str, Any, TextIO, Any], None]


def generator_for(generate: Generator) -> Generator:
    """Return xlwings' writer of VBA wrappers so that it completes those of this module."""

    def complete(module_name: str, module: Any, file: TextIO, workbook: Any) -> None:
        if module_name != __name__:
            generate(module_name, module, file, workbook)
            return
        written = StringIO()
        generate(module_name, module, written, workbook)
        file.write(with_error_values(written.getvalue()))
        refer_to_add_in(workbook)

    complete.completes_cellfuncs = True  # type: ignore[attr-defined]
    return complete


# xlwings imports this module before it writes the wrappers; without COM it has no such part
_udfs: Any = sys.modules.get("xlwings.udfs")
if _udfs is not None and not hasattr(_udfs.generate_vba_wrapper, "completes_cellfuncs"):
    _udfs.generate_vba_wrapper = generator_for(_udfs.generate_vba_wrapper)
