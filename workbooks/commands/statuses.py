"""How a command ends, and words that several commands use."""

from typing import Final

DONE: Final = 0
DATA_PROBLEMS: Final = 1
"""The data have problems, which were listed"""

WRONG_CALL: Final = 2


def rows_told(count: int) -> str:
    """Return a number of rows in words."""
    return f"{count} row" if count == 1 else f"{count} rows"
