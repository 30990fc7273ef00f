"""Both ends of the pipe to a worker process, for a program whose own Python lacks the functions.

A request and its answer are one line of JSON each, on the worker's standard input and output: no
port is opened, nobody else can ask, and the worker ends when its input does, with the program.

The asking end (`Worker`) is copied into the Calc extension as it stands: it needs the standard
library alone and must run under every Python that LibreOffice is shipped with (3.8 and later).
"""

from __future__ import annotations

import importlib
import json
import os
import signal
import subprocess
import sys
import threading
import time
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from collections.abc import Callable, Sequence

PAUSE = 5.0
"""Seconds after which a worker that could not be started is tried again"""


class Unanswered(Exception):
    """No worker could be started, or it died twice over one question."""


class Failed:
    """An error value that came over the pipe, by the code that a person sees."""

    __slots__ = ("code",)

    def __init__(self, code: str) -> None:
        self.code = code


class Worker:
    """A worker process: started on the first question, started again when it has died."""

    def __init__(self, python: str, paths: Sequence[str], module: str) -> None:
        self.python = python
        self.paths = list(paths)
        self.module = module
        self._process: subprocess.Popen[bytes] | None = None
        self._not_before = 0.0
        # Calc may ask from the thread that loads a document and from the one that shows another
        self._one_at_a_time = threading.Lock()

    def answer(self, name: str, arguments: Sequence[Any]) -> Any:
        """Return the answer; raise Unanswered where no worker gives one."""
        question = (json.dumps([name, list(arguments)], default=_packed) + "\n").encode("ascii")
        with self._one_at_a_time:
            for _ in range(2):
                process = self._running()
                assert process.stdin is not None
                assert process.stdout is not None
                try:
                    process.stdin.write(question)
                    process.stdin.flush()
                    line = process.stdout.readline()
                except (OSError, ValueError):
                    line = b""
                if line.endswith(b"\n"):
                    return json.loads(line, object_hook=_unpacked)
                self._end()
            self._not_before = time.monotonic() + PAUSE
            raise Unanswered(f"the worker died over {name}")

    def _running(self) -> subprocess.Popen[bytes]:
        if self._process is None:
            if time.monotonic() < self._not_before:
                raise Unanswered("the worker could not be started a moment ago")
            # LibreOffice sets PYTHONHOME and PYTHONPATH for its own Python
            environment = {
                key: value for key, value in os.environ.items() if not key.startswith("PYTHON")
            }
            environment["PYTHONPATH"] = os.pathsep.join(self.paths)
            # without a console window (CREATE_NO_WINDOW), and out of reach of the terminal's Ctrl-C
            apart: dict[str, Any] = (
                {"creationflags": 0x08000000} if os.name == "nt" else {"start_new_session": True}
            )
            try:
                # -P: no module of the folder that the program was started in
                self._process = subprocess.Popen(
                    [self.python, "-P", "-m", "cellfuncs.bridges.worker", self.module],
                    stdin=subprocess.PIPE,
                    stdout=subprocess.PIPE,
                    stderr=subprocess.DEVNULL,
                    env=environment,
                    **apart,
                )
            except OSError as error:
                self._not_before = time.monotonic() + PAUSE
                raise Unanswered(f"{self.python} could not be started: {error}") from None
        return self._process

    def close(self) -> None:
        """End the worker; the next question starts another."""
        with self._one_at_a_time:
            self._end()

    def _end(self) -> None:
        process, self._process = self._process, None
        if process is None:
            return
        for stream in (process.stdin, process.stdout):
            try:
                if stream is not None:
                    stream.close()
            except OSError:
                pass
        try:
            process.wait(timeout=2)
        except subprocess.TimeoutExpired:
            process.kill()
            process.wait()


def _packed(value: Any) -> Any:
    """Return an error value as JSON has it."""
    return {"error": value.code}


def _unpacked(found: dict[str, Any]) -> Any:
    return Failed(found["error"])


def serve(
    answer: Callable[[str, list[Any]], Any],
    error_cell: Callable[[str], Any],
    questions: Any,
    answers: Any,
) -> None:
    """Answer questions, a line each, until there are no more."""

    def unpacked(found: dict[str, Any]) -> Any:
        return error_cell(found["error"])

    for line in questions:
        name, arguments = json.loads(line, object_hook=unpacked)
        answers.write((json.dumps(answer(name, arguments), default=_packed) + "\n").encode("ascii"))
        answers.flush()


def main() -> None:
    """Serve on standard input and output with the module that the command line names."""
    from cellfuncs.bridges.cell import ErrorCell

    signal.signal(signal.SIGINT, signal.SIG_IGN)
    answers = os.fdopen(os.dup(sys.stdout.fileno()), "wb")
    # whatever a library prints must not come between the answers
    os.dup2(sys.stderr.fileno(), sys.stdout.fileno())
    serve(importlib.import_module(sys.argv[1]).answer, ErrorCell, sys.stdin.buffer, answers)


if __name__ == "__main__":
    main()
