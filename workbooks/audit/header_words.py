"""What the words of a header say of the numbers below, and what a text was meant to be."""

import re
from collections.abc import Callable, Sequence
from typing import Any, Final

from cellfuncs import units
from cellfuncs.errors import CellError
from cellfuncs.physics import lines, refraction
from workbooks.audit.formula_units import Medium
from workbooks.headings import Heading, is_unit
from workbooks.matching import folded


def words(text: str) -> list[str]:
    return [word for word in re.split(r"[^a-z0-9λ]+", text.casefold()) if word]


_NUMBER: Final = re.compile(
    r"[+\-−–]?\s*(\d{1,3}(?:[ ,'\u00a0\u2009]\d{3})+(?:[.]\d+)?|\d+(?:[.,]\d*)?|[.,]\d+)"
    r"(?:[eE][+\-−]?\d+)?"
)


_UNIT: Final = re.compile(r"[^\W\d]\S*\Z|%\Z")


def number_in(text: str) -> str | None:
    """Return the number that a text was meant to be, as it should be typed; None if it is none.

    A unit, or a question mark, may have been typed along: "6586.1 A".
    """
    plain = text.strip().removeprefix("'")
    found = _NUMBER.match(plain)
    if not found:
        return None
    rest = plain[found.end() :].strip()
    if rest and not (rest in ("?", "A", "Å", ":", "*") or (_UNIT.match(rest) and is_unit(rest))):
        return None
    digits = found[0].replace("−", "-").replace("–", "-").replace(" ", "")
    digits = re.sub(r"(?<=\d)[ ,'\u00a0\u2009](?=\d{3}(?!\d))", "", digits)
    return digits.replace(",", ".")


_DATE: Final = re.compile(
    r"(?:\d{4}-\d{1,2}-\d{1,2}"
    r"|\d{1,2}([/.])\d{1,2}\1(?:\d{4}|\d\d)"
    r"|\d{1,2}-(?:jan|feb|mar|apr|may|jun|jul|aug|sep|oct|nov|dec)(?:-(?:\d{4}|\d\d))?"
    r"|(?:jan|feb|mar|apr|may|jun|jul|aug|sep|oct|nov|dec)-(?:\d{4}|\d\d))"
    r"(?:[ T]\d{1,2}:\d\d(?::\d\d(?:[.]\d+)?)?Z?)?",
    re.IGNORECASE,
)


def is_date(text: str) -> bool:
    """Tell whether a text is how spreadsheets write a date: 2031-05-03, 05/03/31, 3-May, May-31."""
    return bool(_DATE.fullmatch(text.strip()))


MEDIUM_LABELS: Final = (
    "medium", "air/vac", "air/vacuum", "air or vacuum", "wavelength scale", "vacuum or air",
)  # fmt: skip

_UNCERTAIN: Final = frozenset(
    "sigma error err errors uncertainty rms scatter std stddev width fwhm difference offset "
    "correction residual delta d".split()
)


def is_redshift(said: Sequence[str]) -> bool:
    return not _UNCERTAIN & set(said) and any(
        re.fullmatch(r"z\d*|redshifts?", word) for word in said
    )


def medium_named(said: Sequence[str]) -> Medium | None:
    air, vacuum = "air" in said, bool({"vacuum", "vac"} & set(said))
    return None if air == vacuum else "air" if air else "vacuum"


def _is_wavelength(heading: Heading) -> bool:
    unit = heading.unit
    return bool(unit) and units.same_kind(unit or "", "Angstrom")


def is_rest_wavelength(heading: Heading) -> bool:
    said = set(words(heading.label))
    return bool({"rest", "laboratory", "lab"} & said) and _is_wavelength(heading)


def is_measured_wavelength(heading: Heading) -> bool:
    said = set(words(heading.label))
    named = {"wavelength", "lambda", "λ", "observed", "obs", "measured", "centre", "center"}
    return (
        bool(named & said)
        and not _UNCERTAIN & said
        and not {"rest", "laboratory", "lab"} & said
        and _is_wavelength(heading)
    )


def is_line_name(heading: Heading) -> bool:
    if heading.column is not None:
        return heading.column.kind == "line"
    return folded(heading.label) in ("line", "line id", "line name", "transition", "feature")


def medium_of_line(name: str, rest: float) -> Medium | None:
    """Return the medium in which a line has this wavelength; None where that cannot be told."""
    try:
        vacuum = lines.find(name).vacuum
        air = refraction.air_from_vacuum(vacuum)
    except CellError:
        return None
    # rounded to 0.1 Å, or of another edition, it is still nearer to one than to the other
    to_vacuum, to_air = abs(rest - vacuum), abs(rest - air)
    nearer, other = sorted((to_vacuum, to_air))
    if nearer > other / 3:
        return None
    return "vacuum" if to_vacuum < to_air else "air"


_USUAL_UNITS: Final = (
    ({"wavelength", "lambda", "λ"}, "Angstrom"),
    ({"velocity", "cz", "vhelio", "vlsr"}, "km/s"),
    ({"frequency"}, "GHz"),
    ({"distance"}, "Mpc"),
    ({"exposure", "exptime"}, "s"),
    ({"temperature"}, "deg_C"),
    ({"fwhm", "seeing"}, "arcsec"),
    ({"declination", "dec", "ra"}, "deg"),
    ({"flux"}, "Jy"),
    ({"parallax"}, "mas"),
)
"""Words of a header that name a quantity with a unit, and a unit as an example"""


def usual_unit(label: str) -> str:
    said = set(words(label))
    if {"number", "count", "n", "no", "flag", "code", "id"} & said:
        return ""
    return next((unit for named, unit in _USUAL_UNITS if named & said), "")


_POSSIBLE: Final[
    Sequence[tuple[Callable[[Sequence[str]], Any], str, float, float, str]]
] = (
    (is_redshift, "", -1 + 1e-12, float("inf"), "a redshift is above -1"),
    (lambda said: {"wavelength", "lambda", "λ"} & set(said), "m", 1e-300, float("inf"),
     "a wavelength is above 0"),
    (lambda said: "frequency" in said, "Hz", 1e-300, float("inf"), "a frequency is above 0"),
    (lambda said: {"dec", "declination"} & set(said), "deg", -90, 90,
     "a declination lies between -90 and 90 deg"),
    (lambda said: {"ra", "ascension"} & set(said), "deg", 0, 360,
     "a right ascension lies between 0 and 360 deg"),
    (lambda said: "airmass" in said, "", 1, float("inf"), "an airmass is 1 or more"),
    (lambda said: "humidity" in said, "%", 0, 100, "a humidity lies between 0 and 100 %"),
    (lambda said: {"sigma", "error", "uncertainty"} & set(said), "any", 0, float("inf"),
     "an uncertainty is not negative"),
    (lambda said: {"exposure", "exptime"} & set(said), "s", 0, float("inf"),
     "an exposure is not negative"),
)  # fmt: skip
"""What no measurement can be, by the words of a header and the kind of its unit"""


def possible(heading: Heading) -> tuple[float, float, str] | None:
    said = words(heading.label)
    unit = heading.unit or ""
    for fits, kind, low, high, sentence in _POSSIBLE:
        if not fits(said):
            continue
        if kind == "any" or (kind == "" and not unit):
            return low, high, sentence
        if not unit and 0 <= low < 1e-9 and high == float("inf"):
            # what is not negative in one unit is not in another
            return low, high, sentence
        if kind and unit and units.same_kind(unit, kind):
            factor = units.factor(kind, unit)
            return low * factor, high * factor, sentence
    return None
