"""`cellfuncs connect calc` on this machine's LibreOffice, in folders of its own.

Programs named soffice and unopkg, first on the PATH, send LibreOffice's real ones to those folders:
the machine's own installation is not touched, by root either.
"""

import functools
import os
import re
import shutil
import stat
import subprocess
import sys
import tempfile
import zipfile
from collections.abc import Iterator
from pathlib import Path

import pytest
import typer

import cellfuncs
from cellfuncs.bridges.calc.extension import Extension, build, environment
from cellfuncs.errors import InputError
from workbooks.commands import connect
from workbooks.commands.connect import connect_calc

sys.path.insert(0, str(Path(__file__).parent))

from calc_office import SYSTEM_PYTHON, places, unopkg

COUNT = len(cellfuncs.CATALOGUE)
WHOM = "for all users" if os.geteuid() == 0 else "for this user"
NOBODY = 65534


def program(folder: Path, name: str, script: str) -> None:
    path = folder / name
    path.write_text(f"#!/bin/sh\n{script}\n")
    path.chmod(path.stat().st_mode | stat.S_IXUSR)


REAL = {name: shutil.which(name) for name in ("soffice", "unopkg")}


def redirected(name: str, folder: Path) -> str:
    return f'exec {REAL[name]} {" ".join(places(folder))} "$@"'


@pytest.fixture
def programs(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """Where soffice and unopkg lie; the office itself lives in `tmp_path`."""
    folder = tmp_path / "programs"
    folder.mkdir()
    for name in ("soffice", "unopkg"):
        program(folder, name, redirected(name, tmp_path))
    monkeypatch.setenv("PATH", f"{folder}{os.pathsep}{os.environ['PATH']}")
    return folder


def said(capsys: pytest.CaptureFixture[str], remove: bool = False) -> str:
    connect_calc(remove=remove, build_only=None)
    printed = capsys.readouterr()
    assert printed.err == ""
    return printed.out


def test_installed_twice_and_removed_twice(
    programs: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    works = re.compile(
        rf"cellfuncs \S+ is installed in LibreOffice {WHOM}: {COUNT} functions\.\n"
        r"Tried in Calc: =DISTANCE_LUMINOSITY\(0\.5\) gives ([0-9.]+)\. It works\.\n"
    )
    for _ in range(2):
        found = works.fullmatch(said(capsys))
        assert found
        assert float(found[1]) == pytest.approx(cellfuncs.distance_luminosity(0.5), rel=1e-12)
    assert "is no longer in LibreOffice" in said(capsys, remove=True)
    assert f"is not installed in LibreOffice {WHOM}: nothing to remove" in said(capsys, remove=True)


def test_an_older_version_is_replaced(
    programs: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    build(Extension(version="0.0.1"), tmp_path / "older.oxt")
    assert unopkg(tmp_path, "add", str(tmp_path / "older.oxt")).returncode == 0
    assert f"{WHOM} in place of 0.0.1: {COUNT} functions" in said(capsys)
    listed = unopkg(tmp_path, "list").stdout
    assert listed.count("Identifier: org.cellfuncs.calc") == 1
    assert "0.0.1" not in listed


@pytest.fixture
def home() -> Iterator[Path]:
    """A home folder for a user who is not root: the tests' own folders are closed to others."""
    folder = Path(tempfile.mkdtemp(prefix="cellfuncs-home-"))
    if os.geteuid() == 0:
        os.chown(folder, NOBODY, NOBODY)
    yield folder
    shutil.rmtree(folder)


def test_a_user_installs_for_themselves(home: Path) -> None:
    """Run as root, this is a user without rights and LibreOffice's own Python."""
    root = os.geteuid() == 0
    environ = {
        "HOME": str(home),
        "PATH": os.environ["PATH"],
        "PYTHONPATH": os.pathsep.join([*environment(), str(Path(connect.__file__).parents[1])]),
        "PYTHONDONTWRITEBYTECODE": "1",
    }
    call = "from workbooks.commands.connect import connect_calc; connect_calc({}, None)"
    outputs = []
    for remove in (False, False, True, True):
        done = subprocess.run(
            [SYSTEM_PYTHON if root else sys.executable, "-c", call.format(remove)],
            env=environ,
            cwd=home,
            capture_output=True,
            text=True,
            timeout=150,
            user=NOBODY if root else None,
            group=NOBODY if root else None,
            extra_groups=[] if root else None,
        )
        assert done.stderr == ""
        assert done.returncode == 0
        outputs.append(done.stdout)
    for installed in outputs[:2]:
        assert f"in LibreOffice for this user: {COUNT} functions" in installed
        assert "It works." in installed
    assert "is no longer in LibreOffice for this user" in outputs[2]
    assert "is not installed in LibreOffice for this user" in outputs[3]


def test_no_libreoffice_on_the_machine(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("PATH", str(tmp_path))
    monkeypatch.setattr(connect, "usual_folders", lambda: [tmp_path / "nowhere"])
    for remove in (False, True):
        with pytest.raises(InputError, match=r"no LibreOffice was found.*install LibreOffice Calc"):
            connect_calc(remove=remove, build_only=None)


def test_a_libreoffice_without_its_installer(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    program(tmp_path, "soffice", "exit 0")
    monkeypatch.setenv("PATH", str(tmp_path))
    with pytest.raises(InputError, match="no unopkg"):
        connect_calc(remove=False, build_only=None)


def test_an_office_that_does_not_know_the_functions(programs: Path, tmp_path: Path) -> None:
    """What Calc shows when it runs with another user's settings than unopkg installed into."""
    (tmp_path / "other").mkdir()
    program(programs, "soffice", redirected("soffice", tmp_path / "other"))
    with pytest.raises(InputError, match="does not know the functions yet; close all windows"):
        connect_calc(remove=False, build_only=None)


def test_an_environment_that_calc_cannot_reach(
    programs: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    gone = functools.partial(Extension, in_process=False, python=str(tmp_path / "gone"))
    monkeypatch.setattr(connect, "Extension", gone)
    with pytest.raises(InputError, match="cannot be reached from it; run this again from"):
        connect_calc(remove=False, build_only=None)


@pytest.mark.parametrize(
    ("complaint", "advice"),
    [
        # from memory of what LibreOffice prints
        ("ERROR: unopkg cannot be started. The lock file indicates", "close all its windows"),
        ("ERROR: Cannot load pythonloader", "install its Python part"),
        ("ERROR: Permission denied", "may not write"),
        ("ERROR: something\n  else", "ERROR: something else"),
        ("", "no reason"),
    ],
)
def test_a_refusal_is_one_sentence_with_advice(programs: Path, complaint: str, advice: str) -> None:
    program(programs, "unopkg", f'[ "$1" = list ] && exit 0\necho "{complaint}" >&2\nexit 1')
    with pytest.raises(InputError, match=advice) as refused:
        connect_calc(remove=False, build_only=None)
    assert "\n" not in str(refused.value)


def test_an_office_that_never_answers_is_given_up(
    programs: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(connect, "PATIENCE", 1)
    program(programs, "unopkg", "sleep 60")
    with pytest.raises(InputError, match="did not answer within 1 s"):
        connect_calc(remove=False, build_only=None)


def test_the_extension_alone_is_written(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "functions.oxt"
    connect_calc(remove=False, build_only=path)
    assert f"{COUNT} functions for Calc" in capsys.readouterr().out
    parts = zipfile.ZipFile(path).namelist()
    assert "META-INF/manifest.xml" in parts
    assert {Path(part).suffix for part in parts} == {".xml", ".idl", ".xcu", ".json", ".py"}


@pytest.mark.parametrize(
    ("name", "sentence"),
    [
        ("functions.zip", "must end in .oxt"),
        ("there.oxt", "exists; delete it or give another name"),
        ("no/such/folder.oxt", "is not a folder"),
    ],
)
def test_where_the_extension_cannot_go(tmp_path: Path, name: str, sentence: str) -> None:
    (tmp_path / "there.oxt").write_text("kept")
    with pytest.raises(InputError, match=sentence):
        connect_calc(remove=False, build_only=tmp_path / name)
    assert (tmp_path / "there.oxt").read_text() == "kept"


def test_remove_and_build_together_are_refused(tmp_path: Path) -> None:
    with pytest.raises(typer.BadParameter, match="not both"):
        connect_calc(remove=True, build_only=tmp_path / "functions.oxt")
