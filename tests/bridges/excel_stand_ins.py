"""Stand-ins for what xlwings needs of Windows, so that its own code runs without Excel.

Only COM is stood in for: the modules of pywin32 that xlwings imports, and the few objects of Excel
that it touches. What xlwings itself does stays its own: decorators, conversion, the call of a
user-defined function, the VBA that it writes, the help that it hands to Excel. Its folder `pro`,
which is under another licence, cannot be imported here.

`in_basic` runs the VBA in LibreOffice's Basic, which takes VBA with `Option VBASupport 1`.

`variant` does what pywin32 does with a result on its way back: the cases that can come up, as they
stand in `PyCom_VariantFromPyObject` (pywin32's com/win32com/src/oleargs.cpp).
"""

import asyncio
import atexit
import concurrent.futures
import ctypes
import importlib
import json
import os
import re
import signal
import subprocess
import sys
import tempfile
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from datetime import datetime
from types import ModuleType, SimpleNamespace
from typing import Any

# Loaded before the platform is said to be Windows: they would else load what only Windows has
LOADED_BEFORE = (asyncio, concurrent.futures, subprocess, tempfile)

RANGE_IID = "{00020846-0000-0000-C000-000000000046}"
MISSING = -2147352572
"""DISP_E_PARAMNOTFOUND: how an argument that a formula leaves out arrives in Python"""

VT_ARRAY, VT_VARIANT = 0x2000, 12
VT_NULL, VT_I4, VT_R8, VT_BSTR, VT_BOOL = 1, 3, 5, 8, 11


class ComError(Exception):
    hresult = 0


class ComTime(datetime):
    """pywin32's time type is a datetime"""


def variant(result: Any) -> tuple[int, Any]:
    """Return the type and value of the VARIANT that pywin32 makes of a result."""
    if isinstance(result, str):
        return VT_BSTR, result
    if isinstance(result, bool):
        return VT_BOOL, result
    if isinstance(result, int):
        return VT_I4, result
    if isinstance(result, float):
        return VT_R8, float(result)
    if result is None:
        return VT_NULL, None
    if isinstance(result, (list, tuple)):
        return VT_ARRAY | VT_VARIANT, [variant(each) for each in result]
    raise TypeError(f"Objects of type '{type(result).__name__}' can not be converted")


# Excel's objects ----------------------------------------------------------------------------------


class CellRange:
    """Excel's Range: a block of cells, with its values as pywin32 hands them over."""

    def __init__(self, rows: Sequence[Sequence[Any]], workbook: "Workbook") -> None:
        self.rows = rows
        attributes = SimpleNamespace(iid=RANGE_IID)
        info = SimpleNamespace(GetTypeAttr=lambda: attributes)
        self._oleobj_ = SimpleNamespace(GetTypeInfo=lambda: info)
        self.Worksheet = workbook.sheet
        self.Row = self.Column = 1
        self.Rows = SimpleNamespace(Count=len(rows))
        self.Columns = SimpleNamespace(Count=len(rows[0]))
        self.reads = 0

    @property
    def Value(self) -> Any:  # noqa: N802 - Excel's name
        self.reads += 1
        if len(self.rows) == len(self.rows[0]) == 1:
            return self.rows[0][0]
        return tuple(tuple(row) for row in self.rows)


class Worksheets(list[Any]):
    @property
    def Count(self) -> int:  # noqa: N802 - Excel's name
        return len(self)


class Components:
    """The modules of a workbook's VBA project."""

    def __init__(self) -> None:
        self.imported: list[str] = []

    def __call__(self, name: str) -> Any:
        if not self.imported:
            raise ComError(name)
        return name

    def Remove(self, component: Any) -> None:  # noqa: N802 - Excel's name
        self.imported.clear()

    def Import(self, path: str) -> None:  # noqa: N802 - Excel's name
        with open(path) as file:
            self.imported.append(file.read())


class References(list[Any]):
    def AddFromFile(self, path: str) -> None:  # noqa: N802 - the VBA editor's name
        self.append(SimpleNamespace(Name="xlwings", FullPath=path))


class Workbook:
    """An Excel workbook that keeps what xlwings writes into it."""

    def __init__(self, name: str = "night.xlsm", references: Sequence[str] = ("VBA",)) -> None:
        self.Name = name
        self.macro_options: dict[str, dict[str, Any]] = {}
        add_in = SimpleNamespace(FullName=r"C:\XLSTART\xlwings.xlam")
        self.Application = SimpleNamespace(
            Version="16.0",
            Hwnd=1,
            MacroOptions=self._keep_options,
            Workbooks={"xlwings.xlam": add_in}.__getitem__,
        )
        self.VBProject = SimpleNamespace(
            VBComponents=Components(),
            References=References(SimpleNamespace(Name=each) for each in references),
        )
        self.Worksheets = Worksheets()
        self.sheet = SimpleNamespace(Name="Night", Parent=self, Application=self.Application)

    def _keep_options(self, name: str, **options: Any) -> None:
        self.macro_options[name] = options

    @property
    def vba(self) -> str:
        (text,) = self.VBProject.VBComponents.imported
        return str(text)


# pywin32 ------------------------------------------------------------------------------------------


def _modules() -> dict[str, ModuleType]:
    class Dispatched:
        pass

    def made(name: str, **contents: Any) -> ModuleType:
        module = ModuleType(name)
        module.__dict__.update(contents)
        return module

    def not_wrapped(given: Any) -> Any:
        raise ComError("argument is not a COM object")

    client = made(
        "win32com.client",
        CDispatch=Dispatched,
        CoClassBaseClass=Dispatched,
        DispatchBaseClass=Dispatched,
        Dispatch=lambda given, **_: given,
        DispatchEx=lambda given: given,
        gencache=SimpleNamespace(EnsureModule=lambda *_, **__: None),
    )
    util = made("win32com.server.util", unwrap=not_wrapped, wrap=lambda given, *_: given)
    policy = made("win32com.server.policy", DefaultPolicy=object)
    dispatcher = made("win32com.server.dispatcher")
    server = made("win32com.server", util=util, policy=policy, dispatcher=dispatcher)
    return {
        "pywintypes": made(
            "pywintypes", com_error=ComError, error=ComError, TimeType=ComTime, IID=str
        ),
        "pythoncom": made(
            "pythoncom",
            __file__="pythoncom",
            com_error=ComError,
            ole_error=ComError,
            CoInitialize=lambda: None,
            IID_IDispatch="IDispatch",
            TypeIIDs={"IDispatch": Dispatched},
        ),
        "win32api": made("win32api"),
        "win32con": made("win32con"),
        "win32event": made("win32event"),
        "win32gui": made("win32gui"),
        "win32process": made("win32process", GetWindowThreadProcessId=lambda window: (1, 1)),
        "win32timezone": made("win32timezone"),
        "win32com": made("win32com", client=client, server=server),
        "win32com.client": client,
        "win32com.server": server,
        "win32com.server.util": util,
        "win32com.server.policy": policy,
        "win32com.server.dispatcher": dispatcher,
    }


class _AnyLibrary:
    """A DLL of which xlwings looks up functions when it is loaded, and calls one."""

    def __getattr__(self, name: str) -> Any:
        if name.startswith("__"):
            raise AttributeError(name)
        found = SimpleNamespace() if name.startswith("PyCom") else _AnyLibrary()
        setattr(self, name, found)
        return found

    def __call__(self, *given: Any) -> int:
        return 0


OURS = "cellfuncs.bridges.excel"


def _is_replaced(name: str) -> bool:
    return name == OURS or name.partition(".")[0] == "xlwings"


@contextmanager
def windows_with_excel() -> Iterator[SimpleNamespace]:
    """Give xlwings, its COM server's object and our module, as they are on Windows."""
    stand_ins = _modules()
    before = {
        name: module
        for name, module in sys.modules.items()
        if _is_replaced(name) or name in stand_ins
    }
    for name in before:
        del sys.modules[name]
    sys.modules.update(stand_ins)
    sys.modules["xlwings.pro"] = None  # type: ignore[assignment]
    library = _AnyLibrary()
    borrowed = {"oledll": library, "windll": library, "PyDLL": lambda path: library}
    lent = {name: getattr(ctypes, name) for name in borrowed if hasattr(ctypes, name)}
    platform = sys.platform
    try:
        sys.platform = "win32"
        ctypes.__dict__.update(borrowed)
        xlwings = importlib.import_module("xlwings")
        com_server = importlib.import_module("xlwings.com_server")
    finally:
        sys.platform = platform
        for name in borrowed:
            if name in lent:
                setattr(ctypes, name, lent[name])
            else:
                delattr(ctypes, name)
    try:
        ours = importlib.import_module(OURS)
        yield SimpleNamespace(
            xlwings=xlwings,
            udfs=sys.modules["xlwings.udfs"],
            python=com_server.XLPython(),
            ours=ours,
        )
    finally:
        atexit.unregister(sys.modules["xlwings._xlwindows"].cleanup)
        for name in [name for name in sys.modules if _is_replaced(name) or name in stand_ins]:
            del sys.modules[name]
        sys.modules.update(before)


# VBA ----------------------------------------------------------------------------------------------

CALLED = """
Option VBASupport 1
Global reply As Variant
Global asked As String

Function python_called(module_name, function_name, given) As Variant
    Dim i As Long
    asked = module_name & "|" & function_name
    For i = LBound(given) To UBound(given)
        asked = asked & "|" & given(i)
    Next i
    python_called = reply
End Function

Function told(value) As String
    If IsError(value) Then
        told = "error " & CLng(value)
    Else
        told = TypeName(value) & " " & value
    End If
End Function

Function outcome(result) As String
    Dim i As Long, j As Long, last As Long
    If Not IsArray(result) Then
        outcome = told(result)
        Exit Function
    End If
    last = -1
    On Error Resume Next
    last = UBound(result, 2)
    On Error GoTo 0
    For i = LBound(result) To UBound(result)
        If last < 0 Then
            outcome = outcome & told(result(i)) & ";"
        Else
            For j = LBound(result, 2) To last
                outcome = outcome & told(result(i, j)) & ";"
            Next j
            outcome = outcome & "/"
        End If
    Next i
End Function
"""
"""What stands in for Python on the other side of COM: it notes what it is asked, and replies"""


def in_basic(vba: str, calls: Sequence[tuple[str, Sequence[str]]]) -> list[tuple[str, str]]:
    """Run the wrappers of a module that xlwings has written, in LibreOffice's Basic.

    Each call is what Python replies, and the wrapper's name with its arguments, all as VBA. What
    comes back is what Python was asked, and what the wrapper gave. The branch of a wrapper that is
    taken is the one for other programs than Excel: Basic has no Application.Caller.
    """
    text = re.sub(r"^\s*#If .*?^\s*#Else\n(.*?)^\s*#End If\n", r"\1", vba, flags=re.M | re.S)
    text = re.sub(r"^(#Const|Attribute) .*\n", "", text, flags=re.M)
    text = text.replace("XLPy.CallUDF(", "python_called(")
    steps = []
    for number, (reply, call) in enumerate(calls):
        steps.append(
            f"Function step_{number}() As String\n"
            f"    reply = {reply}\n"
            f"    step_{number} = outcome({call[0]}({', '.join(call[1:])}))\n"
            f"    step_{number} = asked & Chr(10) & step_{number}\n"
            "End Function\n"
        )
    source = "\n".join([CALLED, text, *steps])
    done = subprocess.run(
        ["/usr/bin/python3", __file__],
        input=json.dumps({"source": source, "steps": len(calls)}),
        capture_output=True,
        text=True,
        timeout=180,
        check=False,
    )
    assert done.returncode == 0, done.stderr
    return [(each[0], each[1]) for each in json.loads(done.stdout)]


def _run_basic() -> None:
    """Read a Basic module and a number of steps from standard input; write what the steps give."""
    import uno  # type: ignore[import-not-found]
    from com.sun.star.beans import PropertyValue  # type: ignore[import-not-found]

    wanted = json.load(sys.stdin)
    with tempfile.TemporaryDirectory(prefix="basic-", ignore_cleanup_errors=True) as folder:
        pipe = os.path.basename(folder)
        office = subprocess.Popen(
            [
                "soffice",
                "--headless",
                "--norestore",
                "--nologo",
                "--nodefault",
                f"-env:UserInstallation=file://{folder}/profile",
                f"--accept=pipe,name={pipe};urp;",
            ],
            stdin=subprocess.DEVNULL,
            stdout=subprocess.DEVNULL,
            stderr=subprocess.DEVNULL,
            start_new_session=True,
        )
        try:
            context = uno.getComponentContext()
            resolver = context.ServiceManager.createInstance("com.sun.star.bridge.UnoUrlResolver")
            deadline = time.monotonic() + 60
            while True:
                try:
                    remote = resolver.resolve(
                        f"uno:pipe,name={pipe};urp;StarOffice.ComponentContext"
                    )
                    break
                except Exception:
                    if time.monotonic() > deadline:
                        raise
                    time.sleep(0.1)
            desktop = remote.ServiceManager.createInstanceWithContext(
                "com.sun.star.frame.Desktop", remote
            )
            document = desktop.loadComponentFromURL(
                "private:factory/scalc",
                "_blank",
                0,
                (
                    PropertyValue(Name="Hidden", Value=True),
                    PropertyValue(Name="MacroExecutionMode", Value=4),
                ),
            )
            document.BasicLibraries.VBACompatibilityMode = True
            library = document.BasicLibraries.getByName("Standard")
            library.insertByName("Wrappers", wanted["source"])
            scripts = document.getScriptProvider()
            given = []
            for number in range(wanted["steps"]):
                script = scripts.getScript(
                    f"vnd.sun.star.script:Standard.Wrappers.step_{number}"
                    "?language=Basic&location=document"
                )
                given.append(script.invoke((), (), ())[0].split("\n", 1))
            print(json.dumps(given))
            document.close(True)
        finally:
            os.killpg(office.pid, signal.SIGKILL)
            office.wait()


if __name__ == "__main__":
    _run_basic()
