"""A cell's XML in a worksheet."""

import re
from functools import cache, lru_cache
from typing import TypeGuard

from workbooks.files.cells import ErrorValue, Value, column_letters
from workbooks.files.edits import UNSET, Unset

# Excel's writing of characters that XML cannot carry (ST_Xstring, ECMA-376 part 1, 22.9.2.19);
# text that happens to look like one has its underscore written that way.
_UNWRITABLE = re.compile("[\x00-\x08\x0b-\x1f\ufffe\uffff]|_(?=x[0-9A-Fa-f]{4}_)")
_SPANS = re.compile(rb"""\sspans\s*=\s*["']([0-9: ]+)["']""")


@cache
def letters_of(column: int) -> bytes:
    return column_letters(column).encode()


def _text(value: str) -> bytes:
    escaped = _UNWRITABLE.sub(lambda found: f"_x{ord(found[0]):04X}_", value)
    escaped = escaped.replace("&", "&amp;").replace("<", "&lt;").replace(">", "&gt;")
    return escaped.encode()


def _number(value: float) -> bytes:
    # float() first: a numpy number's own repr is not a number's text.
    return repr(float(value)).removesuffix(".0").encode()


def stored_as(value: Value, calculated: bool, prefix: bytes) -> tuple[bytes, bytes]:
    """Return the cell's `t` attribute and the elements that hold the value."""
    if type(value) is float:
        return b"", b"<%bv>%b</%bv>" % (prefix, _number(value), prefix)
    match value:
        case None:
            return b"", b""
        case bool():
            kind, text = b' t="b"', b"1" if value else b"0"
        case ErrorValue():
            kind, text = b' t="e"', value.text.encode()
        case str() if calculated:
            kind, text = b' t="str"', _text(value)
        case str():
            return b' t="inlineStr"', _inline(value, prefix)
        case _:
            kind, text = b"", _number(value)
    return kind, b"<%bv>%b</%bv>" % (prefix, text, prefix)


def is_something(value: "Value | Unset") -> "TypeGuard[float | int | str | ErrorValue]":
    return value is not None and value is not UNSET


def held_pattern(value: Value, prefix: bytes) -> bytes:
    """Return the pattern of what follows a new cell's style, for values of this one's type."""
    if type(value) is float:
        return b"><%bv>%%a</%bv>" % (prefix, prefix)
    return stored_as(value, False, prefix)[0] + b">%b"


@lru_cache(maxsize=256)
def _inline(value: str, prefix: bytes) -> bytes:
    return b'<%bis><%bt xml:space="preserve">%b</%bt></%bis>' % (
        prefix,
        prefix,
        _text(value),
        prefix,
        prefix,
    )


def widened_spans(tag: bytes, inserted: list[int]) -> bytes:
    found = _SPANS.search(tag) if b"spans" in tag and inserted else None
    if not found:
        return tag
    spans = [tuple(map(int, span.split(b":"))) for span in found[1].split()]
    if all(any(span[0] <= column <= span[-1] for span in spans) for column in inserted):
        return tag
    first = min(inserted[0], *(span[0] for span in spans))
    last = max(inserted[-1], *(span[-1] for span in spans))
    return tag[: found.start(1)] + b"%d:%d" % (first, last) + tag[found.end(1) :]
