"""What a cell gets, in this process and from a worker over a pipe: the same, whatever happens.

The functions' own numbers are checked in tests/published; here they are compared with a call of
the Python function, which raises where a cell shows an error value (FUNCTIONS.md, «Bad input»).
"""

import ast
import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

import cellfuncs
from cellfuncs.bridges import worker
from cellfuncs.bridges.calc.extension import environment
from cellfuncs.bridges.cell import ErrorCell, answer
from cellfuncs.bridges.worker import Unanswered, Worker

MODULE = "cellfuncs.bridges.cell"
Ask = Callable[[str, list[Any]], Any]

NUM, VALUE, NOT_AVAILABLE = ErrorCell("#NUM!"), ErrorCell("#VALUE!"), ErrorCell("#N/A")


@pytest.fixture
def served() -> Iterator[Worker]:
    made = Worker(sys.executable, environment(), MODULE)
    yield made
    made.close()


@pytest.fixture(params=["in process", "worker"])
def ask(request: pytest.FixtureRequest, served: Worker) -> Ask:
    if request.param == "in process":
        return answer

    def asked(name: str, arguments: list[Any]) -> Any:
        result = served.answer(name, arguments)
        return _plain(result)

    return asked


def _plain(result: Any) -> Any:
    if isinstance(result, list):
        return [[_plain(each) for each in row] for row in result]
    return ErrorCell(result.code) if hasattr(result, "code") else result


def column(*values: Any) -> tuple[tuple[Any, ...], ...]:
    return tuple((value,) for value in values)


@pytest.mark.parametrize(
    ("arguments", "shown"),
    [
        ([-0.1], NUM),
        ([1e300], NUM),
        (["far"], VALUE),
        ([True], VALUE),
        ([0.5, "Planck81"], VALUE),
        ([None], NOT_AVAILABLE),
        ([" "], NOT_AVAILABLE),
        ([], NOT_AVAILABLE),
        ([ErrorCell("#DIV/0!")], ErrorCell("#DIV/0!")),
        ([0.5, ErrorCell("#REF!")], ErrorCell("#REF!")),
        ([0.5, None, 1.0], VALUE),
    ],
)
def test_a_bad_argument_shows_its_own_error_value(
    ask: Ask, arguments: list[Any], shown: ErrorCell
) -> None:
    assert ask("DISTANCE_LUMINOSITY", arguments) == shown


def test_an_unknown_function_is_a_name_error(ask: Ask) -> None:
    assert ask("DISTANCE_GUESSED", [0.5]) == ErrorCell("#NAME?")


def test_one_bad_row_leaves_the_others_alone(ask: Ask) -> None:
    given = column(0.5, -1.0, "far", None, "", True, ErrorCell("#REF!"), 1.0)
    expected = [
        cellfuncs.distance_luminosity(0.5),
        NUM,
        VALUE,
        NOT_AVAILABLE,
        NOT_AVAILABLE,
        VALUE,
        ErrorCell("#REF!"),
        cellfuncs.distance_luminosity(1.0),
    ]
    assert ask("DISTANCE_LUMINOSITY", [given]) == [
        [pytest.approx(each, rel=1e-12) if isinstance(each, float) else each] for each in expected
    ]


def test_a_row_against_a_column_fills_a_table(ask: Ask) -> None:
    table = ask("VELOCITY_SUM", [column(0.0, 1e5, 2e5), ((0.0, 1e4),)])
    expected = [[cellfuncs.velocity_sum(a, b) for b in (0.0, 1e4)] for a in (0.0, 1e5, 2e5)]
    assert table == [pytest.approx(row, rel=1e-12) for row in expected]


def test_beyond_the_shorter_range_is_not_available(ask: Ask) -> None:
    """As in a spreadsheet's own array formulas (ODF 1.3 part 4, section 3.3)."""
    table = ask("VELOCITY_SUM", [column(1.0, 2.0, 3.0), column(0.0, 0.0)])
    assert table == [[pytest.approx(1.0)], [pytest.approx(2.0)], [NOT_AVAILABLE]]


def test_words_in_a_column_each_have_their_own_error(ask: Ask) -> None:
    lines = column("H alpha", "no such line", None, 5.0, "H beta")
    waves = column(6892.84, 6892.84, 6892.84, 6892.84, 5000.0)
    (first,), *between, (last,) = ask("REDSHIFT_FROM_LINE", [waves, lines])
    assert first == pytest.approx(cellfuncs.redshift_from_line(6892.84, "H alpha"), rel=1e-12)
    assert between == [[VALUE], [NOT_AVAILABLE], [VALUE]]
    assert last == pytest.approx(cellfuncs.redshift_from_line(5000.0, "H beta"), rel=1e-12)


@pytest.mark.parametrize("empty", [None, column(None, None)])
def test_a_left_out_cosmology_is_the_default(ask: Ask, empty: Any) -> None:
    expected = [[pytest.approx(cellfuncs.distance_comoving(z), rel=1e-12)] for z in (0.5, 1.0)]
    assert ask("DISTANCE_COMOVING", [column(0.5, 1.0), empty]) == expected


def test_two_columns_are_a_cosmology_and_one_is_a_name_a_row(ask: Ask) -> None:
    own = (("H0", 70.0), ("Om0", 0.3), (None, None))
    expected = cellfuncs.distance_comoving(0.5, {"H0": 70.0, "Om0": 0.3})
    assert ask("DISTANCE_COMOVING", [0.5, own]) == pytest.approx(expected, rel=1e-12)
    named = ask("AGE_OF_UNIVERSE", [column("WMAP9", 5.0, None, "Planck15")])
    assert named == [
        [pytest.approx(cellfuncs.age_of_universe("WMAP9"), rel=1e-12)],
        [VALUE],
        [pytest.approx(cellfuncs.age_of_universe(), rel=1e-12)],
        [pytest.approx(cellfuncs.age_of_universe("Planck15"), rel=1e-12)],
    ]


def test_text_comes_back_as_text(ask: Ask) -> None:
    names = ask("LINE_NEAREST", [column(6564.6, 1.0, None)])
    assert names == [["H alpha"], [NOT_AVAILABLE], [NOT_AVAILABLE]]


def test_the_reason_is_given_row_by_row(ask: Ask) -> None:
    said = ask("REASON", ["DISTANCE_LUMINOSITY", column(-0.5, None, 1.0, ErrorCell("#REF!"))])
    assert "z is -0.5" in said[0][0]
    assert "z is empty" in said[1][0]
    assert said[2] == ["ok"]
    assert "#REF!" in said[3][0]


def test_a_wrong_name_in_every_row_is_searched_for_once() -> None:
    rows = column(*(5000.0 + index for index in range(20_000)))
    answer("REDSHIFT_FROM_LINE", [column(5000.0), "no such line"])
    start = time.perf_counter()
    assert answer("REDSHIFT_FROM_LINE", [rows, "no such line"]) == [[VALUE]] * 20_000
    # a search for near matches takes milliseconds: 20 000 of them would take a minute
    assert time.perf_counter() - start < 10


def test_the_worker_is_started_again_when_it_has_been_killed(served: Worker) -> None:
    expected = cellfuncs.distance_luminosity(0.5)
    assert served.answer("DISTANCE_LUMINOSITY", [0.5]) == expected
    for _ in range(2):
        first = served._process
        assert first is not None
        os.kill(first.pid, signal.SIGKILL)
        assert served.answer("DISTANCE_LUMINOSITY", [0.5]) == expected
        assert served._process is not first


def test_the_worker_ends_when_the_program_does() -> None:
    source = (
        "import sys\n"
        "from cellfuncs.bridges.worker import Worker\n"
        f"asked = Worker(sys.executable, {list(environment())!r}, {MODULE!r})\n"
        "asked.answer('PROVENANCE', [])\n"
        "print(asked._process.pid, flush=True)\n"
        "sys.stdin.read()\n"
    )
    program = subprocess.Popen(
        [sys.executable, "-c", source], stdin=subprocess.PIPE, stdout=subprocess.PIPE, text=True
    )
    assert program.stdout is not None
    pid = int(program.stdout.readline())
    assert running(pid)
    program.kill()
    program.communicate()
    deadline = time.monotonic() + 10
    while running(pid) and time.monotonic() < deadline:
        time.sleep(0.05)
    assert not running(pid)


def running(pid: int) -> bool:
    try:
        return Path(f"/proc/{pid}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except OSError:
        return False


def test_no_python_there_is_said_at_once_and_not_tried_at_every_cell(tmp_path: Path) -> None:
    nowhere = Worker(str(tmp_path / "python"), [], MODULE)
    with pytest.raises(Unanswered, match="could not be started"):
        nowhere.answer("PROVENANCE", [])
    start = time.perf_counter()
    for _ in range(1000):
        with pytest.raises(Unanswered):
            nowhere.answer("PROVENANCE", [])
    assert time.perf_counter() - start < 1


def test_an_environment_without_the_functions_is_said_too(tmp_path: Path) -> None:
    empty = Worker(sys.executable, [str(tmp_path)], "no_such_module")
    with pytest.raises(Unanswered, match="died"):
        empty.answer("PROVENANCE", [])
    empty.close()


def test_what_a_library_prints_does_not_come_between(tmp_path: Path) -> None:
    (tmp_path / "noisy.py").write_text(
        "import os, sys\n"
        "def answer(name, arguments):\n"
        "    print('warning'); os.write(1, b'more\\n'); sys.stdout.flush()\n"
        "    return arguments\n"
    )
    noisy = Worker(sys.executable, [*environment(), str(tmp_path)], "noisy")
    assert noisy.answer("ANY", [1.5, "é", None]) == [1.5, "é", None]
    noisy.close()


def test_the_program_s_own_python_settings_do_not_reach_the_worker(
    monkeypatch: pytest.MonkeyPatch, tmp_path: Path, served: Worker
) -> None:
    # LibreOffice's bundled Python sets PYTHONHOME; another Python cannot start with it
    monkeypatch.setenv("PYTHONHOME", str(tmp_path))
    (tmp_path / "json.py").write_text("raise SystemExit('the wrong module')")
    monkeypatch.chdir(tmp_path)
    assert served.answer("DISTANCE_LUMINOSITY", [0.5]) == cellfuncs.distance_luminosity(0.5)


@pytest.mark.parametrize("name", ["worker.py", "calc/component.py", "calc/emptiness.py"])
def test_what_runs_in_libreoffice_is_python_3_8(name: str) -> None:
    source = (Path(worker.__file__).parent / name).read_text(encoding="utf-8")
    tree = ast.parse(source, feature_version=(3, 8))
    # what 3.8 would evaluate when it loads the module: annotations stay text with this import
    first = next(node for node in tree.body if isinstance(node, ast.ImportFrom))
    assert first.module == "__future__"
    assert [each.name for each in first.names] == ["annotations"]
