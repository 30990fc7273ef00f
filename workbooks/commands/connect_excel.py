"""`cellfuncs connect excel`: tells Excel on Windows, through xlwings, where the functions are.

Two files are touched, both by xlwings' own documentation («Add-in & Settings»): its settings,
`.xlwings\\xlwings.conf` in the user's folder, a line `"KEY","value"` for each; and its add-in,
copied into the folder from which Excel starts add-ins. Nothing in Excel itself is changed.
"""

import locale
import os
import sys
from importlib.util import find_spec
from pathlib import Path
from typing import Annotated, Final

import typer

from cellfuncs.errors import InputError

MODULE: Final = "cellfuncs.bridges.excel"
INTERPRETER_KEY: Final = "INTERPRETER_WIN"
MODULES_KEY: Final = "UDF MODULES"
FORMER_KEY: Final = "CELLFUNCS FORMER INTERPRETER"
"""Ours; xlwings leaves alone what it does not know. It keeps what --remove puts back"""

STEPS: Final = """\
Two clicks remain, in Excel:
1. once: File > Options > Trust Center > Trust Center Settings > Macro Settings, tick
   "Trust access to the VBA project object model";
2. in each workbook that is to use the functions, saved as .xlsm: tab xlwings > Import Functions.
Then type =DISTANCE_LUMINOSITY(0.5) into a cell."""


def connect_excel(
    remove: Annotated[bool, typer.Option("--remove", help="Undo it.")] = False,
) -> None:
    """Connect the functions to Excel on Windows (needs cellfuncs[excel])."""
    if sys.platform != "win32":
        raise InputError(
            "the functions can be connected only to Excel on Windows, and this is another system;"
            " a template with plain formulas needs no connection"
        )
    settings = settings_file()
    if remove:
        lines = read_settings(settings)
        if disconnected(lines) == lines:
            print(f"{settings}: cellfuncs is not connected")
            return
        write_settings(settings, disconnected(lines))
        print(f"{settings}: cellfuncs taken out; `xlwings addin remove` takes out the xlwings tab")
        return
    found = find_spec("xlwings")
    if found is None or found.origin is None:
        raise InputError(
            "xlwings, which connects Python to Excel, is not installed here;"
            " run: pip install cellfuncs[excel]"
        )
    write_settings(settings, connected(read_settings(settings), sys.executable))
    print(f"{settings}: Excel will ask {sys.executable}")
    add_in = install_add_in(Path(found.origin).parent)
    print(f"{add_in}: the xlwings tab, when Excel starts next")
    print(STEPS)


# Settings -----------------------------------------------------------------------------------------


def settings_file() -> Path:
    """Return where xlwings keeps the user's settings."""
    return Path.home() / ".xlwings" / "xlwings.conf"


def read_settings(path: Path) -> list[str]:
    """Return the lines of a settings file; none where there is no file yet."""
    try:
        text = path.read_text(encoding=encoding())
    except FileNotFoundError:
        return []
    except UnicodeDecodeError:
        raise InputError(f"{path} cannot be read as text; mend or rename it") from None
    return [line for line in text.splitlines() if line.strip()]


def write_settings(path: Path, lines: list[str]) -> None:
    """Write the file whole, beside the old one, and swap it in; no settings, no file."""
    if not lines:
        path.unlink(missing_ok=True)
        return
    text = "".join(f"{line}\n" for line in lines)
    try:
        content = text.encode(encoding())
    except UnicodeEncodeError as error:
        raise InputError(
            f"the path of this Python holds {error.object[error.start : error.end]!r}, which Excel"
            " cannot read in xlwings' settings; install Python in another folder"
        ) from None
    path.parent.mkdir(parents=True, exist_ok=True)
    beside = path.with_name(f"{path.name}.new")
    try:
        beside.write_bytes(content.replace(b"\n", b"\r\n"))
        beside.replace(path)
    finally:
        beside.unlink(missing_ok=True)


def encoding() -> str:
    """Return the encoding in which Excel's VBA reads a text file: that of the system's language"""
    return locale.getencoding()


def connected(lines: list[str], interpreter: str) -> list[str]:
    """Return the settings with this interpreter and our module in them, all others kept."""
    modules = _modules(lines)
    if MODULE in modules:
        former = _value(lines, FORMER_KEY)
    else:
        former = _value(lines, INTERPRETER_KEY)
        modules.append(MODULE)
    return [
        *_without(lines, INTERPRETER_KEY, MODULES_KEY, FORMER_KEY),
        _line(INTERPRETER_KEY, interpreter),
        _line(MODULES_KEY, ";".join(modules)),
        _line(FORMER_KEY, former),
    ]


def disconnected(lines: list[str]) -> list[str]:
    """Return the settings without our module, the interpreter that was there before put back."""
    modules = _modules(lines)
    if MODULE not in modules:
        return lines
    modules.remove(MODULE)
    former = _value(lines, FORMER_KEY)
    return [
        *_without(lines, INTERPRETER_KEY, MODULES_KEY, FORMER_KEY),
        *([_line(INTERPRETER_KEY, former)] if former else []),
        *([_line(MODULES_KEY, ";".join(modules))] if modules else []),
    ]


def _line(key: str, value: str) -> str:
    return f'"{key}","{value}"'


def _key(line: str) -> str:
    return line.partition(",")[0].strip().strip('"').upper()


def _value(lines: list[str], key: str) -> str:
    for line in lines:
        if _key(line) == key:
            return line.partition(",")[2].strip().strip('"')
    return ""


def _without(lines: list[str], *keys: str) -> list[str]:
    return [line for line in lines if _key(line) not in keys]


def _modules(lines: list[str]) -> list[str]:
    return [each.strip() for each in _value(lines, MODULES_KEY).split(";") if each.strip()]


# The add-in ---------------------------------------------------------------------------------------


def install_add_in(xlwings: Path) -> Path:
    """Copy xlwings' add-in to where Excel starts add-ins, as `xlwings addin install` does."""
    roaming = os.environ.get("APPDATA")
    if not roaming:
        raise InputError("Windows does not say where programs keep their data: APPDATA is not set")
    target = Path(roaming) / "Microsoft" / "Excel" / "XLSTART" / "xlwings.xlam"
    content = (xlwings / "addin" / "xlwings.xlam").read_bytes()
    if target.exists() and target.read_bytes() == content:
        return target
    target.parent.mkdir(parents=True, exist_ok=True)
    try:
        target.write_bytes(content)
    except PermissionError:
        raise InputError(f"{target} is in use; close Excel and run this again") from None
    return target
