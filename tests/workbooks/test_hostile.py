"""Files that mean harm, or were harmed: one sentence, little memory, nothing done besides.

Each lot is opened and filled in a process of its own, whose audit hook (PEP 578) sees every file
that is opened for writing, every program that is started and every connection.
"""

import io
import os
import random
import re
import resource
import sys
import tempfile
import time
import zipfile
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest
from astropy.table import Table

sys.path.insert(0, str(Path(__file__).parent))

from logs import ROWS, by_libreoffice, in_child, recipe, write_xlsx

from workbooks.fill import fill
from workbooks.logbook import Logbook, LogbookError

FORBIDDEN = (
    "os.system",
    "subprocess.",
    "os.exec",
    "os.posix_spawn",
    "os.fork",
    "socket.",
    "ctypes.",
)
MEGABYTE = 1 << 20
WORDS = (b"999999999", b"-1", b'"', b"<", b"&#0;", b"1e999", b"\xff", b"]]>")


@pytest.fixture(scope="module")
def logs(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    """A small log in each format, most of them written by LibreOffice."""
    folder = tmp_path_factory.mktemp("logs")
    xlsx = write_xlsx(folder / "night.xlsx")
    found = {".xlsx": xlsx}
    for kind in ("ods", "xlsm:Calc MS Excel 2007 VBA XML", "csv"):
        path = by_libreoffice(xlsx, kind, folder)
        found[path.suffix] = path
    tsv = folder / "night.tsv"
    tsv.write_bytes(found[".csv"].read_bytes().replace(b",", b"\t"))
    table = Table(
        {"Target": ["a", "b"], "Line": ["H alpha"] * 2, "Wavelength": np.array([6e3, 7e3])}
    )
    table["Wavelength"].unit = "Angstrom"
    table.write(folder / "night.ecsv", format="ascii.ecsv")
    return found | {".tsv": tsv, ".ecsv": folder / "night.ecsv"}


def damaged(chance: random.Random, log: Path) -> bytes:
    """Cut a file short, flip bits in it, or garble a part of it."""
    content = log.read_bytes()
    kind = chance.random()
    if kind < 0.15:
        return content[: chance.randrange(len(content))]
    if kind < 0.5 or not content.startswith(b"PK"):
        spoilt = bytearray(content)
        for _ in range(chance.choice((1, 1, 2, 5, 20))):
            spoilt[chance.randrange(len(spoilt))] ^= 1 << chance.randrange(8)
        return bytes(spoilt)
    packed = io.BytesIO()
    with zipfile.ZipFile(log) as old, zipfile.ZipFile(packed, "w") as new:
        names = [name for name in old.namelist() if name.endswith((".xml", ".rels"))]
        victim = chance.choice(names)
        for name in old.namelist():
            part = old.read(name)
            new.writestr(name, garbled(chance, part) if name == victim else part)
    return packed.getvalue()


def garbled(chance: random.Random, part: bytes) -> bytes:
    for _ in range(chance.choice((1, 2, 5))):
        at = chance.randrange(len(part) or 1)
        end = at + chance.randrange(1, 100)
        part = (
            chance.choice(
                (
                    lambda part, at, end: part[:at] + bytes([part[at] ^ 32]) + part[at + 1 :],
                    lambda part, at, end: part[:at] + part[end:],
                    lambda part, at, end: part[:end] + part[at:],
                    lambda part, at, _: (
                        part[:at]
                        + chance.choice(
                            (b"999999999", b"-1", b'"', b"<", b"&#0;", b"1e999", b"\xff", b"]]>")
                        )
                        + part[at:]
                    ),
                )
            )(part, at, end)
            or b" "
        )
    return part


def watched(folder: Path, work: Callable[[], None], most: int = 400 * MEGABYTE) -> None:
    """Work in a child that may do nothing but write into a folder, in a bounded space."""

    def hook(event: str, arguments: tuple[object, ...]) -> None:
        wrong = event.startswith(FORBIDDEN)
        if event == "open" and isinstance(arguments[0], (str, bytes)):
            flags = arguments[2]
            writes = isinstance(flags, int) and flags & (os.O_WRONLY | os.O_RDWR | os.O_CREAT)
            wrong = bool(writes) and not os.path.realpath(os.fsdecode(arguments[0])).startswith(
                str(folder)
            )
        if event in ("os.rename", "os.remove", "os.link", "os.mkdir", "os.symlink", "os.truncate"):
            wrong = not os.path.realpath(os.fsdecode(arguments[0])).startswith(str(folder))  # type: ignore[arg-type]
        if wrong:
            os.write(2, f"{event} {arguments}\n".encode())
            os._exit(3)

    def child() -> None:
        with Path("/proc/self/statm").open() as statm:
            in_use = int(statm.read().split()[0]) * resource.getpagesize()
        resource.setrlimit(resource.RLIMIT_AS, (in_use + most, in_use + most))
        sys.addaudithook(hook)
        try:
            work()
        except BaseException:
            import traceback

            traceback.print_exc()
            raise

    assert in_child(child) == 0


@pytest.fixture(scope="module")
def warm(logs: dict[str, Path], tmp_path_factory: pytest.TempPathFactory) -> None:
    """Everything that is imported on first use is here before a child may open nothing."""
    folder = tmp_path_factory.mktemp("warm")
    for suffix, log in logs.items():
        fill(log, folder / f"filled{suffix}", recipe())


def attempt(path: Path) -> str | None:
    """Fill a log; return the sentence that refuses it, None if it was filled and reads again."""
    output = path.with_name(f"filled{path.suffix}")
    output.unlink(missing_ok=True)
    try:
        fill(path, output, recipe())
    except LogbookError as error:
        sentence = str(error)
        assert not output.exists()
        assert path.name in sentence
        assert "\n" not in sentence
        assert len(sentence) < 500
        return sentence
    again = Logbook.open(output)
    assert all(again.sheet(name).height >= 0 for name in again.sheet_names)
    return None


def test_two_thousand_damaged_files(logs: dict[str, Path], warm: None, tmp_path: Path) -> None:
    folder = tmp_path / "in"
    folder.mkdir()
    begun = time.monotonic()

    def work() -> None:
        # Whether a file is on the disk for good is not asked here, and asking is slow.
        os.fsync = lambda _: None  # type: ignore[assignment]
        chance = random.Random(20310314)
        count = {"filled": 0, "refused": 0}
        for number in range(2000):
            suffix = chance.choice(list(logs))
            path = folder / f"damaged{suffix}"
            path.write_bytes(damaged(chance, logs[suffix]))
            try:
                count["refused" if attempt(path) else "filled"] += 1
            except BaseException:
                print(f"\nnumber {number}, {suffix}", file=sys.stderr)
                raise
        assert min(count.values()) > 200, count

    watched(folder, work)
    print(f"2000 damaged files in {time.monotonic() - begun:.0f} s")


# ---- archives and XML that mean harm


def rewritten(log: Path, target: Path, changes: dict[str, bytes]) -> Path:
    with zipfile.ZipFile(log) as old, zipfile.ZipFile(target, "w", zipfile.ZIP_DEFLATED) as new:
        for name in {**dict.fromkeys(old.namelist()), **changes}:
            new.writestr(name, changes[name] if name in changes else old.read(name))
    return target


def cells_part(log: Path) -> str:
    return "content.xml" if log.suffix == ".ods" else "xl/worksheets/sheet1.xml"


def part_of(log: Path, name: str) -> bytes:
    with zipfile.ZipFile(log) as archive:
        return archive.read(name)


def bombs(logs: dict[str, Path], folder: Path) -> Iterator[tuple[Path, str]]:
    laughs = b"".join(
        b'<!ENTITY %c "%b">' % (98 + level, b"&%c;" % (97 + level) * 20) for level in range(9)
    )
    for suffix in (".xlsx", ".xlsm", ".ods"):
        log, name = logs[suffix], cells_part(logs[suffix])
        content = part_of(log, name)
        root = re.search(rb"<[A-Za-z]", content)
        assert root
        at = root.start()
        for doctype in (
            b'<!DOCTYPE w [<!ENTITY a "ha">' + laughs + b"]>",
            b'<!DOCTYPE w [<!ENTITY j SYSTEM "file:///etc/hostname">]>',
            b'<!DOCTYPE w SYSTEM "http://127.0.0.1:9/x.dtd">',
            b'<!DOCTYPE w [<!ENTITY % p SYSTEM "http://127.0.0.1:9/x"> %p;]>',
        ):
            changed = content[:at] + doctype + content[at:].replace(b"</", b"&j;</", 1)
            yield rewritten(log, folder / f"entity{suffix}", {name: changed}), "document type"
        zeros = content[:-20] + bytes(100 * MEGABYTE)
        yield rewritten(log, folder / f"bomb{suffix}", {name: zeros}), "would unpack"
        for bad in ("../../outside.txt", "/tmp/outside.txt", "a\\..\\b", "C:/x", "a//b"):
            yield rewritten(log, folder / f"name{suffix}", {bad: b"x"}), "bad name"
        deep = content.replace(b"</", b"<x>" * 100_000 + b"</x>" * 100_000 + b"</", 1)
        yield rewritten(log, folder / f"deep{suffix}", {name: deep}), ""


def test_bombs_and_tricks(logs: dict[str, Path], warm: None, tmp_path: Path) -> None:
    made, folder = tmp_path / "made", tmp_path / "in"
    made.mkdir()
    folder.mkdir()
    for path, words in bombs(logs, made):
        target = Path(path.rename(folder / path.name))

        def work(target: Path = target, words: str = words) -> None:
            sentence = attempt(target)
            assert (not words and sentence is None) or (sentence and words in sentence), sentence
            assert set(os.listdir(folder)) <= {f"filled{target.suffix}", target.name}

        watched(folder, work, 150 * MEGABYTE)
        for each in folder.iterdir():
            each.unlink()


def test_long_rows_and_far_cells_take_little_memory(
    logs: dict[str, Path], warm: None, tmp_path: Path
) -> None:
    """calamine lays out the rectangle around all cells; here that would be terabytes."""
    folder = tmp_path / "in"
    folder.mkdir()
    name = cells_part(logs[".xlsx"])
    content = part_of(logs[".xlsx"], name)
    head, tail = content.split(b"</sheetData>")
    count = 800
    pairs = b"".join(
        b'<row r="%d"><c r="A%d"><v>1</v></c><c r="XFD%d"><v>2</v></c></row>' % (row, row, row)
        for row in range(1000, 1000 + count)
    )
    far = b'<row r="1048576"><c r="XFD1048576"><v>3</v></c></row>'
    path = rewritten(
        logs[".xlsx"], folder / "far.xlsx", {name: head + pairs + far + b"</sheetData>" + tail}
    )

    more = b"".join(
        b'<row r="%d"><c r="A%d"><v>1</v></c><c r="XFD%d"><v>2</v></c></row>' % (row, row, row)
        for row in range(4000, 11_000)
    )
    farther = rewritten(
        logs[".xlsx"], folder / "farther.xlsx", {name: head + more + b"</sheetData>" + tail}
    )

    def work() -> None:
        with pytest.raises(LogbookError, match="so far apart"):
            Logbook.open(farther).sheet("Night").columns({1})
        sheet = Logbook.open(path).sheet("Night")
        columns = sheet.columns({1, 16_384})
        assert sum(value is not None for value in columns[1]) == count + 7
        assert columns[16_384][-1] == 3.0
        with pytest.raises(LogbookError, match="more than the 40,000,000 cells"):
            _ = sheet.rows

    watched(folder, work)


# ---- names that look like formulas


@pytest.mark.parametrize("suffix", [".xlsx", ".xlsm", ".ods", ".csv", ".tsv", ".ecsv"])
def test_a_target_that_looks_like_a_formula_stays_text(
    logs: dict[str, Path], tmp_path: Path, suffix: str
) -> None:
    output = tmp_path / f"filled{suffix}"
    log = logs[suffix]
    fill(log, output, recipe())
    before, after = (Logbook.open(path) for path in (log, output))
    name = before.sheet_names[0]
    old = [row[0] for row in before.sheet(name).rows]
    new = [row[0] for row in after.sheet(after.sheet_names[0]).rows]
    assert old == new
    if suffix != ".ecsv":
        assert [row[0] for row in ROWS] == old[1:]
        assert not any(after.sheet(after.sheet_names[0]).has_formula(row, 1) for row in range(1, 9))


def test_what_fill_copies_of_such_a_name_is_text(tmp_path: Path) -> None:
    """A column may repeat another; what LibreOffice then finds in the new cell is no formula."""
    from logs import RECIPE

    from workbooks.recipe import read

    own = read(
        (
            RECIPE + '\n[[sheets.columns]]\nkey = "again"\nlabel = "Again"\nrole = "computed"\n'
            'kind = "text"\nformula = "target"\n'
        ).encode(),
        "own.toml",
        "own",
    )
    log = write_xlsx(tmp_path / "night.xlsx")
    for source in (log, by_libreoffice(log, "ods", tmp_path), by_libreoffice(log, "csv", tmp_path)):
        output = source.with_name(f"filled{source.suffix}")
        fill(source, output, own)
        with tempfile.TemporaryDirectory(dir=tmp_path) as place:
            shown = by_libreoffice(output, "csv", Path(place)).read_text("latin-1")
        if source.suffix == ".csv":
            # LibreOffice works out the cell that was there, which is the log's own; ours has a mark
            assert shown.count("'=1+1") == shown.count("=1+1") == 1
            assert shown.count("'@dome") == 1
        else:
            assert shown.count("=1+1") == shown.count("@dome") == 2
