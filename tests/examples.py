"""The calls in the functions' documentation, read by themselves: what a cell holds, as values."""

import json
import re
from typing import Any

CALL = re.compile(r"=([A-Z0-9_]+)\((.*)\)")
OUTSIDE_TEXT = re.compile(r'("[^"]*")|(TRUE|FALSE)|([{;}])')


def call_in(example: str) -> tuple[str, list[Any]]:
    """Give the name and the arguments; a range written out between braces is a list."""
    whole = CALL.fullmatch(example)
    assert whole, example
    return whole[1], arguments_in(whole[2])


def arguments_in(text: str) -> list[Any]:
    """Give what stands between a call's brackets; it is JSON but for truths and braces."""

    def as_json(found: re.Match[str]) -> str:
        quoted, truth, brace = found.groups()
        return quoted or (truth or "").lower() or {"{": "[", ";": ",", "}": "]"}[brace]

    made: list[Any] = json.loads(f"[{OUTSIDE_TEXT.sub(as_json, text)}]", parse_int=float)
    return made
