"""Texts spelt in ASCII, which is all that FITS holds."""

import re
import unicodedata
from typing import Final

_GREEK: Final = dict(
    zip(
        "αβγδεζηθικλμνξοπρστυφχψω",
        "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi omicron pi rho "
        "sigma tau upsilon phi chi psi omega".split(),
        strict=True,
    )
)
_SIGNS: Final = {
    "–": "-", "—": "-", "−": "-", "‑": "-", "×": "x", "·": ".", "…": "...", "°": " deg",
    "’": "'", "‘": "'", "“": '"', "”": '"', "«": '"', "»": '"', "±": "+/-", "≤": "<=", "≥": ">=",
    "→": "->", "Å": "Angstrom", "\u212b": "Angstrom", "µ": "u", "ς": "sigma", "ß": "ss", "æ": "ae",
    "ø": "o", "ł": "l", "Æ": "AE", "Ø": "O", "Ł": "L", "☉": "sun", "′": "'", "″": '"',
}  # fmt: skip
_CONTROL: Final = re.compile(r"[\x00-\x1f\x7f]+")


def ascii_of(text: str) -> tuple[str, bool]:
    """Return a text in ASCII letters, and whether every letter could be told in them.

    Greek letters are spelt, accents dropped; "?" stands for the rest.
    """
    if text.isascii():
        return _CONTROL.sub(" ", text), True
    known = True
    letters = []
    for letter in text:
        if letter.isascii():
            letters.append(letter)
        elif letter in _SIGNS:
            letters.append(_SIGNS[letter])
        elif letter.lower() in _GREEK:
            word = _GREEK[letter.lower()]
            letters.append(word if letter.islower() else word.capitalize())
        else:
            plain = "".join(
                part for part in unicodedata.normalize("NFKD", letter) if part.isascii()
            )
            combining = unicodedata.combining(letter)
            known &= bool(plain or combining)
            letters.append(plain or ("" if combining else "?"))
    return _CONTROL.sub(" ", "".join(letters)), known
