"""What can be wrong with an input, each with the error value that a cell shows for it."""

from collections.abc import Iterable
from difflib import get_close_matches
from typing import Any

import numpy as np


class CellError(ValueError):
    """An input that gives no result; the message is the sentence that a person reads."""

    shown = "#VALUE!"


class DomainError(CellError):
    """A number outside the function's domain."""

    shown = "#NUM!"


class InputError(CellError):
    """Text where a number belongs, or a name that is not known."""

    shown = "#VALUE!"


class MissingInput(CellError):
    """A required argument is empty."""

    shown = "#N/A"


class NotFound(MissingInput):
    """Nothing in a table answers the question."""


def is_empty(value: Any) -> bool:
    """Tell whether a value is what an empty cell gives: None, NaN or blank text."""
    if value is None or (isinstance(value, str) and not value.strip()):
        return True
    if value is np.ma.masked:
        return True
    try:
        return bool(value != value)
    except (TypeError, ValueError, ArithmeticError):
        return False


def near_matches(text: str, known: Iterable[str], most: int = 4) -> str:
    """Return a phrase that names the known words nearest to `text`, or all of a short list."""
    words = list(known)
    folded = {word.casefold(): word for word in words}
    near = [folded[word] for word in get_close_matches(text.casefold(), folded, n=most, cutoff=0.5)]
    if near:
        return "near matches: " + ", ".join(near)
    if len(words) <= 12:
        return "known: " + ", ".join(words)
    return "nothing is spelt like it"
