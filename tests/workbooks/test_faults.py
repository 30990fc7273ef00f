"""Whatever goes wrong while a logbook is filled in place, it is whole: the old one or the new one.

Outside checks: the kernel kills, fills up and write-protects for real; files are compared by byte.
"""

import fcntl
import os
import random
import shutil
import signal
import subprocess
import sys
import textwrap
import time
import zipfile
from contextlib import suppress
from pathlib import Path

import pytest

sys.path.insert(0, str(Path(__file__).parent))

from logs import RECIPE, REPOSITORY, ROWS, recipe, run, write_xlsx

from workbooks.fill import fill
from workbooks.logbook import LogbookError

MANY_ROWS = [ROWS[at % 2] for at in range(4000)]


def one_sentence(ran: subprocess.CompletedProcess[str]) -> str:
    assert ran.returncode == 2
    assert ran.stdout == ""
    assert ran.stderr.startswith("cellfuncs: ")
    assert ran.stderr.count("\n") == 1
    return ran.stderr


@pytest.fixture
def night(tmp_path: Path) -> Path:
    folder = tmp_path / "nights"
    folder.mkdir()
    (tmp_path / "own.toml").write_text(RECIPE)
    return write_xlsx(folder / "night.xlsx")


def files(folder: Path) -> list[str]:
    return sorted(each.name for each in folder.iterdir())


# ---- killed

SERVER = """
import os, sys
from pathlib import Path
from workbooks.fill import fill
from workbooks.recipe import load

own, path = load(sys.argv[1]), Path(sys.argv[2])
fill(path, path.with_name("whole.xlsx"), own)
print("ready", flush=True)
for _ in sys.stdin:
    child = os.fork()
    if child == 0:
        fill(path, path, own, overwrite=True, backup=True)
        os._exit(0)
    print(child, flush=True)
    print(os.waitstatus_to_exitcode(os.waitpid(child, 0)[1]), flush=True)
"""


def test_killed_at_fifty_moments(night: Path, tmp_path: Path) -> None:
    """Each time a process of its own fills the log in place and gets SIGKILL on the way."""
    write_xlsx(night, MANY_ROWS)
    before = night.read_bytes()
    server = subprocess.Popen(
        [sys.executable, "-c", textwrap.dedent(SERVER), tmp_path / "own.toml", night],
        env={**os.environ, "PYTHONPATH": str(REPOSITORY)},
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    )
    assert server.stdin
    assert server.stdout

    def begin() -> int:
        server.stdin.write("\n")
        server.stdin.flush()
        return int(server.stdout.readline())

    assert server.stdout.readline() == "ready\n"
    after = night.with_name("whole.xlsx").read_bytes()
    assert after != before
    night.with_name("whole.xlsx").unlink()
    started = time.perf_counter()
    begin()
    assert server.stdout.readline() == "0\n"
    duration = time.perf_counter() - started
    assert night.read_bytes() == after
    chance = random.Random(20310314)
    killed = 0
    for _ in range(50):
        for each in night.parent.glob("*.before-fill*"):
            assert each.read_bytes() == before
            each.unlink()
        night.write_bytes(before)
        child = begin()
        time.sleep(chance.uniform(0, duration))
        with suppress(ProcessLookupError):
            os.kill(child, signal.SIGKILL)
        killed += server.stdout.readline() == f"{-signal.SIGKILL}\n"
        found = night.read_bytes()
        assert found in (before, after)
        if found == after:
            assert night.with_name("night.before-fill.xlsx").read_bytes() == before
    assert killed >= 25
    # what the killed ones left is swept up by the next one that is not
    night.write_bytes(before)
    begin()
    assert server.stdout.readline() == "0\n"
    server.stdin.close()
    assert server.wait(timeout=30) == 0
    assert night.read_bytes() == after
    assert not [name for name in files(night.parent) if name.endswith(".new")]


def test_a_run_that_still_writes_keeps_its_new_file(night: Path) -> None:
    """The leftovers of dead runs go, and nothing else."""
    dead = night.with_name(".night.xlsx.0123abcd.new")
    alive = night.with_name(".night.xlsx.89abcdef.new")
    others = [
        night.with_name(name)
        for name in (".night.xlsx.mine.new", ".other.xlsx.0123abcd.new", "night.xlsx.0123abcd.new")
    ]
    for each in (dead, alive, *others):
        each.write_bytes(b"half")
    with alive.open("rb") as held:
        fcntl.flock(held, fcntl.LOCK_EX)
        fill(night, night, recipe(), overwrite=True)
    assert not dead.exists()
    assert all(each.read_bytes() == b"half" for each in (alive, *others))


# ---- no room, no right


SMALL_DISK = """
    mount -t tmpfs -o size=$4 none "$2" || exit 99
    cp "$1" "$2/night.xlsx"
    "$5" -m workbooks.cli fill "$2/night.xlsx" --in-place -r "$3"
    ended=$?
    cmp "$1" "$2/night.xlsx" || exit 98
    [ "$(ls -A "$2")" = night.xlsx ] || exit 97
    exit $ended
"""
LIMITED = """
    ulimit -f $4
    trap '' XFSZ
    exec "$5" -m workbooks.cli fill "$1" --in-place -r "$3"
"""


def shell(script: str, *arguments: object, alone: bool = False) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*(["unshare", "--mount"] if alone else []), "bash", "-c", script, "-"]
        + [str(each) for each in arguments],
        env={**os.environ, "PYTHONPATH": str(REPOSITORY), "PYTHONDONTWRITEBYTECODE": "1"},
        capture_output=True,
        text=True,
        timeout=60,
        check=False,
    )


def filled_under_a_limit(night: Path, own: Path) -> str:
    """Return what is said where the kernel lets no file become as long as the new one."""
    blocks = night.stat().st_size // 1024
    return one_sentence(shell(LIMITED, night, "", own, blocks, sys.executable))


def test_a_full_disk(night: Path, tmp_path: Path) -> None:
    """A tmpfs that the new file does not fit in; in a container that may not mount, a limit."""
    write_xlsx(night, MANY_ROWS)
    before = night.read_bytes()
    disk, own = tmp_path / "disk", tmp_path / "own.toml"
    disk.mkdir()
    size = (len(before) // 4096 + 2) * 4096
    ran = shell(SMALL_DISK, night, disk, own, size, sys.executable, alone=True)
    if ran.returncode == 99 or ran.stderr.startswith("unshare"):
        assert "was not written: File too large" in filled_under_a_limit(night, own)
    else:
        assert "was not written: No space left on device" in one_sentence(ran)
    assert night.read_bytes() == before
    assert files(night.parent) == ["night.xlsx"]


def test_a_file_that_may_not_become_as_long(night: Path, tmp_path: Path) -> None:
    write_xlsx(night, MANY_ROWS)
    before = night.read_bytes()
    sentence = filled_under_a_limit(night, tmp_path / "own.toml")
    assert "was not written: File too large" in sentence
    assert night.read_bytes() == before
    assert files(night.parent) == ["night.xlsx"]


NOBODY = """
import os, sys
from pathlib import Path
from workbooks.fill import fill
from workbooks.recipe import load

own, path = load(sys.argv[1]), Path(sys.argv[2])
# the first filling imports what it needs, which nobody may not read
fill(path, Path(sys.argv[3]), own)
if os.getuid() == 0:
    os.setgroups([])
    os.setgid(65534)
    os.setuid(65534)
try:
    fill(path, path, own, overwrite=True, backup=True)
except ValueError as error:
    sys.exit(str(error))
"""


def test_a_read_only_folder(
    night: Path, tmp_path: Path, tmp_path_factory: pytest.TempPathFactory
) -> None:
    """Root may write anywhere, so that the one who tries is not root."""
    before = night.read_bytes()
    night.chmod(0o666)
    night.parent.chmod(0o555)
    # pytest's own folders are closed to others, and this one is to be refused by its own mode
    own = tmp_path_factory.getbasetemp()
    for folder in (tmp_path, *tmp_path.parents):
        if folder.is_relative_to(own) or folder.name.startswith("pytest-"):
            folder.chmod(0o755)
    try:
        ran = subprocess.run(
            [sys.executable, "-c", NOBODY, tmp_path / "own.toml", night, tmp_path / "first.xlsx"],
            env={**os.environ, "PYTHONPATH": str(REPOSITORY)},
            capture_output=True,
            text=True,
            timeout=60,
            check=False,
        )
        assert ran.returncode == 1
        assert ran.stderr.count("\n") == 1
        assert "night.xlsx was not written: Permission denied" in ran.stderr
    finally:
        night.parent.chmod(0o755)
    assert night.read_bytes() == before
    assert files(night.parent) == ["night.xlsx"]


def test_a_read_only_file(night: Path, tmp_path: Path) -> None:
    before = night.read_bytes()
    night.chmod(0o444)
    ran = run(tmp_path, "fill", str(night), "--in-place", "-r", "own.toml")
    assert "read-only" in one_sentence(ran)
    assert night.read_bytes() == before
    assert files(night.parent) == ["night.xlsx"]


# ---- somebody else

WRITER = """
import sys, time
from pathlib import Path

path, versions = Path(sys.argv[1]), [Path(name).read_bytes() for name in sys.argv[2:]]
print("ready", flush=True)
while True:
    for version in versions:
        with path.open("r+b") as file:
            file.truncate(0)
            for start in range(0, len(version), 50_000):
                file.write(version[start : start + 50_000])
                file.flush()
                time.sleep(0.0005)
        time.sleep(0.002)
"""


def test_a_file_that_changes_while_it_is_read(night: Path, tmp_path: Path) -> None:
    """Another program writes the file over and over, as one does that does not swap it in whole."""
    versions, whole = [], []
    for at in range(2):
        versions.append(write_xlsx(tmp_path / f"{at}.xlsx", MANY_ROWS[at : 1500 * (at + 1)]))
        fill(versions[-1], tmp_path / f"whole{at}.xlsx", recipe())
        whole.append((tmp_path / f"whole{at}.xlsx").read_bytes())
    shutil.copy(versions[0], night)
    writer = subprocess.Popen(
        [sys.executable, "-c", WRITER, night, *versions], stdout=subprocess.PIPE, text=True
    )
    output = tmp_path / "filled.xlsx"
    sentences = []
    filled = 0
    try:
        assert writer.stdout
        assert writer.stdout.readline() == "ready\n"
        deadline = time.monotonic() + 8
        while time.monotonic() < deadline and not (filled >= 3 and len(sentences) >= 20):
            output.unlink(missing_ok=True)
            try:
                fill(night, output, recipe())
            except LogbookError as error:
                sentences.append(str(error))
                assert not output.exists()
            else:
                filled += 1
                assert output.read_bytes() in whole
    finally:
        writer.kill()
        writer.wait()
    assert sentences
    assert all("night.xlsx" in sentence and "\n" not in sentence for sentence in sentences)


TOUCHER = """
import sys, time
from pathlib import Path

with Path(sys.argv[1]).open("r+b", buffering=0) as file:
    print("ready", flush=True)
    while True:
        byte = file.read(1)
        file.seek(-1, 1)
        file.write(byte)
        time.sleep(0.0005)
"""


def test_a_file_that_is_written_while_it_is_read(night: Path, tmp_path: Path) -> None:
    """With a picture of 32 MB in it reading takes so long that another program's write falls in."""
    with zipfile.ZipFile(night, "a") as archive:
        archive.writestr("xl/media/allsky.png", random.Random(1).randbytes(32 << 20))
    before = night.read_bytes()
    writer = subprocess.Popen(
        [sys.executable, "-c", TOUCHER, night], stdout=subprocess.PIPE, text=True
    )
    try:
        assert writer.stdout
        assert writer.stdout.readline() == "ready\n"
        ran = run(tmp_path, "fill", str(night), "--in-place", "-r", "own.toml")
    finally:
        writer.kill()
        writer.wait()
    assert "being written by another program" in one_sentence(ran)
    assert night.read_bytes() == before
    assert files(night.parent) == ["night.xlsx"]


def test_a_file_that_changed_before_it_is_written(
    night: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Somebody saves the log while the new one is being made; theirs stays."""
    other = write_xlsx(night.parent.parent / "other.xlsx", ROWS[:2]).read_bytes()
    sync = os.fsync

    def saved_meanwhile(descriptor: int) -> None:
        sync(descriptor)
        night.write_bytes(other)

    monkeypatch.setattr(os, "fsync", saved_meanwhile)
    with pytest.raises(LogbookError, match="changed by someone else"):
        fill(night, night, recipe(), overwrite=True, backup=True)
    assert night.read_bytes() == other
    assert files(night.parent) == ["night.xlsx"]


@pytest.mark.parametrize(
    ("lock", "program"), [(".~lock.night.xlsx#", "LibreOffice"), ("~$night.xlsx", "Excel")]
)
def test_a_file_that_is_open_elsewhere(
    night: Path, tmp_path: Path, lock: str, program: str
) -> None:
    before = night.read_bytes()
    (night.parent / lock).write_text(",crew,observatory,14.03.2031 22:10,file:///home/crew;")
    ran = run(tmp_path, "fill", str(night), "--in-place", "-r", "own.toml")
    sentence = one_sentence(ran)
    assert program in sentence
    assert lock in sentence
    assert night.read_bytes() == before
    assert files(night.parent) == sorted([lock, "night.xlsx"])
    # it may be read, and a copy filled
    ran = run(tmp_path, "fill", str(night), "-o", "copy.xlsx", "-r", "own.toml")
    assert ran.returncode == 1
    assert (tmp_path / "copy.xlsx").exists()


# ---- backups


def test_backups_are_kept_and_never_overwritten(night: Path, tmp_path: Path) -> None:
    states = []
    for _ in range(3):
        states.append(night.read_bytes())
        fill(night, night, recipe(), overwrite=True, backup=True)
        write_xlsx(night, ROWS[: len(states)])
    kept = ["night.before-fill.xlsx", "night.before-fill-2.xlsx", "night.before-fill-3.xlsx"]
    assert files(night.parent) == sorted([*kept, "night.xlsx"])
    assert [(night.parent / name).read_bytes() for name in kept] == states


def test_a_backup_where_files_have_one_name_only(
    night: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """As on exFAT, which has no links; there the backup is a copy."""

    def no_links(*_: object) -> None:
        raise PermissionError(1, "Operation not permitted")

    monkeypatch.setattr(os, "link", no_links)
    first = night.read_bytes()
    fill(night, night, recipe(), overwrite=True, backup=True)
    second = night.read_bytes()
    fill(night, night, recipe(), overwrite=True, backup=True)
    assert night.with_name("night.before-fill.xlsx").read_bytes() == first
    assert night.with_name("night.before-fill-2.xlsx").read_bytes() == second


def test_a_backup_of_a_link_lies_beside_the_file(night: Path, tmp_path: Path) -> None:
    link = tmp_path / "tonight.xlsx"
    link.symlink_to(night)
    before = night.read_bytes()
    report = fill(link, link, recipe(), overwrite=True, backup=True)
    assert link.is_symlink()
    assert report.backup == str(night.with_name("night.before-fill.xlsx"))
    assert Path(report.backup).read_bytes() == before


def test_the_command_keeps_a_backup_unless_told(night: Path, tmp_path: Path) -> None:
    before = night.read_bytes()
    ran = run(tmp_path, "fill", str(night), "--in-place", "-r", "own.toml")
    assert ran.returncode == 1
    assert "kept as" in ran.stdout
    assert night.with_name("night.before-fill.xlsx").read_bytes() == before
    night.with_name("night.before-fill.xlsx").unlink()
    ran = run(tmp_path, "fill", str(night), "--in-place", "--no-backup", "-r", "own.toml")
    assert ran.returncode == 1
    assert files(night.parent) == ["night.xlsx"]


def test_a_failing_swap_leaves_no_backup(night: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    before = night.read_bytes()

    def refused(*_: object) -> None:
        raise OSError(5, "Input/output error")

    monkeypatch.setattr(os, "replace", refused)
    with pytest.raises(LogbookError, match="was not written: Input/output error"):
        fill(night, night, recipe(), overwrite=True, backup=True)
    assert night.read_bytes() == before
    assert files(night.parent) == ["night.xlsx"]
