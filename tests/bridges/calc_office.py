"""A real headless Calc with extensions in it, in a profile of its own, asked over a pipe.

`Office(folder, extensions)` starts it; `office.run(source)` executes Python source in LibreOffice's
own interpreter, connected to that Calc, and returns what the source leaves in `result` (as JSON).
No port is opened. Run as root, unopkg installs for all users only: the place where it does that is
moved into the folder too, so the machine's own installation stays as it was.
"""

from __future__ import annotations

import json
import os
import shutil
import signal
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

SYSTEM_PYTHON = "/usr/bin/python3"
BEGINNING = """
import time
import uno
from com.sun.star.beans import PropertyValue
def options(**given):
    return tuple(PropertyValue(Name=key, Value=value) for key, value in given.items())
def opened(address="private:factory/scalc"):
    return desktop.loadComponentFromURL(address, "_blank", 0, options(Hidden=True))
def put(cell, value):
    # not setDataArray: Calc 7.4 ends in it when texts, numbers and nothing stand together
    if isinstance(value, str):
        cell.String = value
    elif value is not None:
        cell.Value = value
def shown(cell):
    if cell.getError():
        return {"error": cell.getError(), "shown": cell.String}
    return cell.Value if cell.FormulaResultType2 == 1 else cell.String
"""


def places(folder: Path) -> list[str]:
    """Give the options that keep an office and its extensions inside the folder."""
    return [
        f"-env:UserInstallation={(folder / 'profile').as_uri()}",
        f"-env:UNO_SHARED_PACKAGES_CACHE={(folder / 'shared').as_uri()}",
    ]


def unopkg(folder: Path, command: str, *arguments: str) -> subprocess.CompletedProcess[str]:
    everyone = ["--shared"] if os.geteuid() == 0 else []
    return subprocess.run(
        ["unopkg", command, *everyone, *places(folder), *arguments],
        stdin=subprocess.DEVNULL,
        capture_output=True,
        text=True,
        timeout=120,
    )


class Office:
    def __init__(self, folder: Path, *extensions: Path) -> None:
        for extension in extensions:
            done = unopkg(folder, "add", str(extension))
            assert done.returncode == 0, done.stdout + done.stderr
        self.helper = subprocess.Popen(
            [SYSTEM_PYTHON, __file__, str(folder)],
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            text=True,
            start_new_session=True,
        )

    def run(self, source: str, **given: Any) -> Any:
        assert self.helper.stdin is not None
        assert self.helper.stdout is not None
        self.helper.stdin.write(json.dumps([source, given]) + "\n")
        self.helper.stdin.flush()
        answer = json.loads(self.helper.stdout.readline() or '{"failed": "the office ended"}')
        if "failed" in answer:
            raise RuntimeError(answer["failed"])
        return answer["result"]

    def processes(self, words: str) -> list[int]:
        """Give the running processes below this office whose command line holds the words."""
        parents, lines = {}, {}
        for entry in Path("/proc").iterdir():
            if entry.name.isdigit():
                try:
                    parents[int(entry.name)] = int(
                        (entry / "stat").read_text().rpartition(")")[2].split()[1]
                    )
                    lines[int(entry.name)] = (entry / "cmdline").read_bytes().decode()
                except OSError:
                    continue
        found = []
        for pid, line in lines.items():
            ancestor = pid
            while ancestor > 1 and ancestor != self.helper.pid:
                ancestor = parents.get(ancestor, 0)
            if ancestor == self.helper.pid and words in line.replace("\0", " "):
                found.append(pid)
        return found

    def cpu_seconds(self) -> float:
        """Give the processor time that the office has used: other programs' load is not in it."""
        (pid,) = self.processes("soffice.bin")
        fields = Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()
        return (int(fields[11]) + int(fields[12])) / os.sysconf("SC_CLK_TCK")

    def close(self) -> None:
        assert self.helper.stdin is not None
        assert self.helper.stdout is not None
        self.helper.stdin.close()
        self.helper.wait(timeout=30)
        self.helper.stdout.close()


def _serve(folder: Path) -> None:
    # a pipe is named once a machine, whatever folder it serves
    pipe = os.path.basename(tempfile.mktemp(prefix="cellfuncs-"))
    office = subprocess.Popen(
        [
            "soffice",
            "--headless",
            "--norestore",
            "--nologo",
            "--nodefault",
            "--nofirststartwizard",
            *places(folder),
            f"--accept=pipe,name={pipe};urp;",
        ],
        stdin=subprocess.DEVNULL,
        stdout=subprocess.DEVNULL,
        stderr=subprocess.DEVNULL,
        start_new_session=True,
    )
    try:
        remote = _connected(pipe)
        desktop = remote.ServiceManager.createInstanceWithContext(
            "com.sun.star.frame.Desktop", remote
        )
        names: dict[str, Any] = {"desktop": desktop, "remote": remote}
        exec(BEGINNING, names)
        for line in sys.stdin:
            source, given = json.loads(line)
            try:
                scope = {**names, **given}
                exec(source, scope)
                answer = {"result": scope.get("result")}
            except Exception as problem:
                answer = {"failed": repr(problem)}
            print(json.dumps(answer), flush=True)
        try:
            desktop.terminate()
            office.wait(timeout=10)
        except Exception:
            pass
    finally:
        if office.poll() is None:
            os.killpg(office.pid, signal.SIGKILL)
            office.wait()
        shutil.rmtree(folder / "profile", ignore_errors=True)


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
            return remote


if __name__ == "__main__":
    _serve(Path(sys.argv[1]))
