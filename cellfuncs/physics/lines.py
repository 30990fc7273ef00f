"""The spectral lines that a logbook names: rest wavelengths, and the spellings of their names.

The table is `lines.csv` beside this file, one row a line, with how each value was obtained and
where it was published. Wavelengths are in vacuum, in Angstrom.

Where the values come from. Lyman and ultraviolet resonance lines, Mg I 2852, Na I, K I and the
blends of such doublets: table 2 of Morton 2003, read from the copy that the package linetools
0.3.2 carries. Other lines: the difference of two energy levels of the NIST Atomic Spectra Database
(the Ritz wavelength), read from the copy that PyNeb 1.1.32 carries; a level known to 0.1 cm⁻¹
leaves 0.02 Å at 4700 Å and 0.09 Å at 9500 Å, and for [S III] 9069 and 9531 printed nebular tables
differ by 0.3 Å (10 km/s). Balmer, Paschen and He II lines: computed, as said below. Where a row
says "value from memory", no copy was at hand.

A line of hydrogen or He II is its whole multiplet, unresolved: the mean of the components weighted
by gA, as if the sublevels of the upper n were populated by their 2J+1. Lyman lines are Morton's
means of that kind. For the others the levels are Dirac's with the reduced mass, the recoil and the
leading terms of the Lamb shift (Bethe & Salpeter 1957), and the strengths are the squares of the
radial integrals of the hydrogen atom, shared out in a doublet by 6j symbols. The Lamb shift moves
H alpha by 0.0025 Å; hyperfine structure all but cancels in the mean. NIST's averaged level of each
n, whose average is not weighted by gA, would make H alpha longer by 0.024 Å (1.1 km/s), the other
Balmer lines longer by 0.5 to 0.6 km/s and Paschen alpha shorter by 0.6 km/s.

A blend is listed only with a published wavelength and says "blend" in `obtained`. The name of a
doublet without a number ("Mg II", "[O II]") is refused all the same: the blend and its members
differ by hundreds of km/s.
"""

import csv
from bisect import bisect_left
from collections.abc import Mapping
from dataclasses import dataclass
from functools import cache, lru_cache
from importlib.resources import files
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from cellfuncs.errors import InputError, near_matches

KEY_SUBSTITUTIONS: tuple[tuple[str, str], ...] = (
    (" ", ""),
    ("\u00a0", ""),  # no-break space
    ("[", ""),
    ("]", ""),
    ("(", ""),
    (")", ""),
    ("_", ""),
    ("-", ""),
    ("\u2011", ""),  # non-breaking hyphen
    ("\u2013", ""),  # en dash
    ("\u2212", ""),  # minus sign
    ("\u00e5", ""),  # å, the unit
    ("\u00c5", ""),  # Å, which the LOWER of some programs leaves as it is
    ("\u212b", ""),  # the Angstrom sign, likewise
    ("\u03bb", ""),  # λ
    ("\u03b1", "alpha"),
    ("\u03b2", "beta"),
    ("\u03b3", "gamma"),
    ("\u03b4", "delta"),
    ("\u03b5", "epsilon"),
    # MATCH takes these three for wildcards, so a key must not hold them; no line's key has a slash.
    ("*", "/"),
    ("?", "/"),
    ("~", "/"),
)
"""What a spelling's key replaces, in order, after the letters are made small."""


@dataclass(frozen=True, slots=True)
class Line:
    """One spectral line: `vacuum` is its rest wavelength in Angstrom."""

    name: str
    species: str
    vacuum: float
    obtained: str
    source: str
    spellings: tuple[str, ...]


@cache
def lines() -> tuple[Line, ...]:
    """Return every line of the table, by increasing wavelength."""
    text = files("cellfuncs.physics").joinpath("lines.csv").read_text(encoding="utf-8")
    rows = csv.DictReader(text.splitlines())
    table = [
        Line(
            row["name"],
            row["species"],
            float(row["vacuum"]),
            row["obtained"],
            row["source"],
            tuple(row["spellings"].split("; ")) if row["spellings"] else (),
        )
        for row in rows
    ]
    return tuple(sorted(table, key=lambda line: line.vacuum))


def spelling_key(text: str) -> str:
    """Return what all spellings of one name have in common.

    LOWER, TRIM and nested SUBSTITUTE make the same key in a cell, so a template can look a line
    up in a table of keys. TRIM takes away blanks only, so a tab or a line break stays and counts.
    """
    key = text.strip(" ").lower()
    for old, new in KEY_SUBSTITUTIONS:
        key = key.replace(old, new)
    return key


@cache
def _owners() -> dict[str, tuple[Line, ...]]:
    """Return every key with the lines that it may mean."""
    spelt: dict[str, list[Line]] = {}
    for line in lines():
        for key in {spelling_key(text) for text in (line.name, *line.spellings)}:
            spelt.setdefault(key, []).append(line)
    # A species alone means its lines only where the table gives it to none ("H I" is 21 cm).
    species: dict[str, list[Line]] = {}
    for line in lines():
        species.setdefault(spelling_key(line.species), []).append(line)
    return {key: tuple(owners) for key, owners in (species | spelt).items()}


@cache
def keys() -> Mapping[str, Line]:
    """Return every key that means one line, with that line."""
    return MappingProxyType(
        {key: owners[0] for key, owners in _owners().items() if len(owners) == 1}
    )


@cache
def ambiguous() -> Mapping[str, tuple[Line, ...]]:
    """Return every key that several lines share, with those lines by increasing wavelength."""
    return MappingProxyType({key: owners for key, owners in _owners().items() if len(owners) > 1})


def find(text: str) -> Line:
    """Return the line that a spelling names.

    `text` is a name as staff type it, such as "Halpha", "[OIII]5007" or "Ca K". InputError is
    raised for a name that is not in the table, with the nearest names, and for one that several
    lines share, with those lines.
    """
    found = _found(text)
    if isinstance(found, str):
        raise InputError(found)
    return found


@lru_cache(maxsize=4096)
def _found(text: str) -> Line | str:
    """Return the line, or the sentence that says why there is none."""
    # The refusals are kept as well: a column of one wrong name searches for near matches once.
    key = spelling_key(text)
    line = keys().get(key)
    if line is not None:
        return line
    shown = text.strip()
    candidates = ambiguous().get(key)
    if candidates is not None:
        names = ", ".join(candidate.name for candidate in candidates)
        return f"the line {shown!r} may be any of {names}: write which"
    if key.replace(".", "", 1).isdecimal():
        example = nearest(float(key)).name
        return f"the line {shown!r} is a number only; write the species with it, as in {example!r}"
    known = near_matches(shown, [line.name for line in lines()])
    return f"the line {shown!r} is not in the table; {known}"


def nearest(wavelength: float) -> Line:
    """Return the line whose vacuum wavelength is nearest; of two equally near, the shorter.

    `wavelength` is in vacuum, at rest, in Angstrom.
    """
    table = lines()
    above = bisect_left(_wavelengths(), wavelength)
    around = table[max(above - 1, 0) : above + 1]
    return min(around, key=lambda line: abs(line.vacuum - wavelength))


def nearest_names(
    rest: NDArray[np.float64], window: float | NDArray[np.float64]
) -> NDArray[np.object_]:
    """Return the names of the lines nearest to many wavelengths, None where none is near enough.

    `rest` is in vacuum, at rest, in Angstrom; a line may be as far away as `window`, in Angstrom,
    which broadcasts with it. NaN in either gives None.
    """
    wavelengths, names = _columns()
    above = np.searchsorted(wavelengths, rest)
    left = np.maximum(above - 1, 0)
    right = np.minimum(above, len(wavelengths) - 1)
    to_left = np.abs(wavelengths[left] - rest)
    to_right = np.abs(wavelengths[right] - rest)
    nearer = np.where(to_left <= to_right, left, right)
    nobody = len(wavelengths)
    return names[np.where(np.minimum(to_left, to_right) <= window, nearer, nobody)]


@cache
def _wavelengths() -> tuple[float, ...]:
    return tuple(line.vacuum for line in lines())


@cache
def _columns() -> tuple[NDArray[np.float64], NDArray[np.object_]]:
    names: list[str | None] = [line.name for line in lines()]
    return np.array(_wavelengths()), np.array([*names, None], dtype=object)
