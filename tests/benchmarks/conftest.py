"""What the benchmarks print, past pytest's catching of output."""

from collections.abc import Callable

import pytest


@pytest.fixture
def show(capsys: pytest.CaptureFixture[str]) -> Callable[[str], None]:
    def printed(line: str) -> None:
        with capsys.disabled():
            print(f"\n  {line}")

    return printed
