"""`cellfuncs connect calc`: puts the functions into LibreOffice Calc, and tries one there.

LibreOffice's own tools do it: `unopkg` installs the extension, and `soffice`, started once without
a window, computes a workbook of two cells. No port is opened.
"""

import csv
import os
import re
import shutil
import signal
import subprocess
import sys
import tempfile
from dataclasses import dataclass
from math import isclose
from pathlib import Path
from typing import Annotated, Final

import typer

from cellfuncs.bridges.calc.extension import IDENTIFIER, VERSION, Extension, build
from cellfuncs.catalogue import CATALOGUE
from cellfuncs.errors import InputError

PATIENCE: Final = 180
"""Seconds that LibreOffice may take: its first start on a slow machine takes half a minute"""

TRIED: Final = "DISTANCE_LUMINOSITY"
TRIED_AT: Final = 0.5
SPELLING: Final = IDENTIFIER.upper() + "."
"""What stands before a function's name in a file that Calc is to compute"""


def connect_calc(
    remove: Annotated[bool, typer.Option("--remove", help="Undo it.")] = False,
    build_only: Annotated[
        Path | None,
        typer.Option("--build", metavar="FILE", help="Only write the extension, .oxt."),
    ] = None,
) -> None:
    """Put the functions into LibreOffice Calc and try them there."""
    if remove and build_only is not None:
        raise typer.BadParameter("give --remove or --build, not both")
    if build_only is not None:
        write_extension(build_only)
        return
    office = find_office()
    if remove:
        take_out(office)
    else:
        put_in(office)


def write_extension(path: Path) -> None:
    if path.suffix.lower() != ".oxt":
        raise InputError(f"{path} must end in .oxt; LibreOffice knows an extension by that")
    if path.exists():
        raise InputError(f"{path} exists; delete it or give another name")
    if not path.parent.is_dir():
        raise InputError(f"{path.parent} is not a folder")
    build(Extension(), path)
    print(f"{path}: {len(CATALOGUE)} functions for Calc, answered by {sys.executable}")


@dataclass(frozen=True)
class Office:
    """LibreOffice's two programs, and for whom they install."""

    soffice: str
    unopkg: str
    everyone: bool

    @property
    def whom(self) -> str:
        return "for all users" if self.everyone else "for this user"


def usual_folders() -> list[Path]:
    """Return where LibreOffice lies when it is not on the PATH."""
    windows = (os.environ.get("PROGRAMFILES"), os.environ.get("PROGRAMFILES(X86)"))
    return [
        Path("/usr/lib/libreoffice/program"),
        Path("/opt/libreoffice/program"),
        Path("/Applications/LibreOffice.app/Contents/MacOS"),
        *(Path(folder) / "LibreOffice" / "program" for folder in windows if folder),
    ]


def find_office() -> Office:
    """Return the LibreOffice of this machine; raise InputError where there is none."""
    on_path = shutil.which("soffice") or shutil.which("libreoffice")
    elsewhere = os.pathsep.join(map(str, usual_folders()))
    soffice = on_path or shutil.which("soffice", path=elsewhere)
    if soffice is None:
        raise InputError(
            "no LibreOffice was found on this machine; install LibreOffice Calc, or put the folder"
            " of its program soffice on the PATH (a template with plain formulas needs neither)"
        )
    beside = str(Path(soffice).resolve().parent)
    unopkg = (on_path and shutil.which("unopkg")) or shutil.which("unopkg", path=beside)
    if unopkg is None:
        raise InputError(
            f"{soffice} has no unopkg, LibreOffice's installer of extensions, beside it;"
            " install LibreOffice in full"
        )
    return Office(soffice, unopkg, everyone=getattr(os, "geteuid", lambda: 1)() == 0)


def put_in(office: Office) -> None:
    """Install, start Calc, compute; say how it went."""
    before = installed(office)
    with tempfile.TemporaryDirectory(prefix="cellfuncs-") as name:
        folder = Path(name)
        extension = folder / "cellfuncs.oxt"
        build(Extension(), extension)
        status, output = ran(unopkg(office, "add", "--force", str(extension)))
        if status != 0:
            raise InputError(f"LibreOffice did not take the extension: {why(output)}")
        shown = tried(office, folder)
    instead = f" in place of {before}" if before and before != VERSION else ""
    print(
        f"cellfuncs {VERSION} is installed in LibreOffice {office.whom}{instead}:"
        f" {len(CATALOGUE)} functions."
    )
    expected = CATALOGUE[TRIED](TRIED_AT)
    if not _is_number(shown[0]) or not isclose(float(shown[0]), expected, rel_tol=1e-9):
        raise InputError(doubt(shown))
    print(f"Tried in Calc: ={TRIED}({TRIED_AT:g}) gives {shown[0]}. It works.")


def take_out(office: Office) -> None:
    """Remove the extension and say so; nothing to remove is no mistake."""
    version = installed(office)
    if version is None:
        if not office.everyone and installed(office, everyone=True):
            raise InputError(
                "cellfuncs is installed in LibreOffice for all users; only root can take it out:"
                " run the same command as root"
            )
        print(f"cellfuncs is not installed in LibreOffice {office.whom}: nothing to remove.")
        return
    status, output = ran(unopkg(office, "remove", IDENTIFIER))
    if status != 0:
        raise InputError(f"LibreOffice did not give the extension up: {why(output)}")
    print(f"cellfuncs {version} is no longer in LibreOffice {office.whom}.")


def unopkg(office: Office, command: str, *arguments: str) -> list[str]:
    return [office.unopkg, command, *(["--shared"] if office.everyone else []), *arguments]


def installed(office: Office, everyone: bool | None = None) -> str | None:
    """Return the version that LibreOffice has of the extension, None where it has none."""
    shared = office.everyone if everyone is None else everyone
    status, output = ran([office.unopkg, "list", *(["--shared"] if shared else [])])
    if status != 0:
        raise InputError(f"LibreOffice could not list its extensions: {why(output)}")
    found = re.search(
        rf"^Identifier: {re.escape(IDENTIFIER)}\s+Version: (\S+)", output, re.MULTILINE
    )
    return found[1] if found else None


def why(output: str) -> str:
    """Return what to do about unopkg's complaint, or the complaint itself on one line."""
    folded = output.casefold()
    if "lock file" in folded or "already running" in folded:
        return "close all its windows first, then run this again"
    if "pythonloader" in folded or "loader.python" in folded:
        return (
            "it cannot run Python; install its Python part"
            " (the package python3-uno or libreoffice-pyuno), then run this again"
        )
    if "permission" in folded or "denied" in folded or "read-only" in folded:
        return "this user may not write where it keeps extensions"
    lines = [line.strip() for line in output.splitlines() if "javaldx" not in line]
    return " ".join(" ".join(lines).split())[:300] or "it gave no reason"


def tried(office: Office, folder: Path) -> list[str]:
    """Return what two cells show that Calc computed: the number, and who made it."""
    # it takes a while to import, and the command line has other commands
    from openpyxl import Workbook

    book = folder / "tried.xlsx"
    workbook = Workbook()
    sheet = workbook.active
    assert sheet is not None
    sheet["A1"] = f"={SPELLING}{TRIED}({TRIED_AT!r})"
    sheet["A2"] = f"={SPELLING}PROVENANCE()"
    workbook.save(book)
    options = ["--headless", "--norestore", "--nologo", "--convert-to", "csv"]
    _, output = ran([office.soffice, *options, "--outdir", str(folder), str(book)])
    try:
        with book.with_suffix(".csv").open(encoding="utf-8", errors="replace", newline="") as file:
            rows = list(csv.reader(file))
    except FileNotFoundError:
        raise InputError(
            f"the extension is installed, but Calc could not be tried: {why(output)}"
        ) from None
    return [row[0] if row else "" for row in [*rows, [], []][:2]]


def doubt(shown: list[str]) -> str:
    """Return why Calc does not show the right number, and what to do."""
    if shown[0] == "#NAME?":
        return (
            "Calc does not know the functions yet; close all windows of LibreOffice, then run this"
            " again (if it goes on, install LibreOffice's Python part, the package python3-uno)"
        )
    return (
        f"Calc shows {shown[0] or 'nothing'} for ={TRIED}({TRIED_AT:g}): the functions of"
        f" {sys.executable} cannot be reached from it; run this again from the environment in which"
        " cellfuncs is installed, and leave that environment where it is"
    )


def ran(command: list[str]) -> tuple[int, str]:
    """Run one of LibreOffice's programs; return its status and all that it printed."""
    try:
        process = subprocess.Popen(
            command,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            text=True,
            errors="replace",
            start_new_session=True,
        )
    except OSError as error:
        raise InputError(f"{command[0]} could not be started: {error.strerror}") from None
    try:
        output, _ = process.communicate(timeout=PATIENCE)
    except BaseException as error:
        # soffice is a chain of processes, and what is left of it would hold its profile
        if hasattr(os, "killpg"):
            os.killpg(process.pid, signal.SIGKILL)
        process.kill()
        process.wait()
        if isinstance(error, subprocess.TimeoutExpired):
            raise InputError(
                f"{Path(command[0]).name} did not answer within {PATIENCE} s; close all windows of"
                " LibreOffice, then run this again"
            ) from None
        raise
    return process.returncode, output


def _is_number(text: str) -> bool:
    try:
        float(text)
    except ValueError:
        return False
    return True
