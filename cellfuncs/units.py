"""Units by name, in VOUnit or FITS spelling, as astropy reads them."""

import warnings
from functools import lru_cache
from typing import TYPE_CHECKING, Any

from cellfuncs.errors import InputError, near_matches
from cellfuncs.symbols import Expr, NotTraceable, Real

if TYPE_CHECKING:
    from astropy.units import UnitBase

COMMON = (
    "Angstrom nm um mm cm m km au pc kpc Mpc Gpc lyr s min h d yr Myr Gyr deg arcmin arcsec mas rad"
    " Hz kHz MHz GHz THz m.s-1 km.s-1 km.s-1.Mpc-1 mag K eV J erg W Jy mJy deg2 arcsec2 Mpc3"
    " kpc/arcsec cm-1 % count adu electron"
).split()
"""Offered as near matches; every unit that astropy knows is accepted."""


@lru_cache(maxsize=1024)
def unit_of(text: str) -> "UnitBase":
    """Return the unit that a text names; "" and "1" are the pure number.

    Raises InputError with near matches where it cannot be read.
    """
    # astropy takes a second to import; only what has units to read should pay for it
    from astropy import units

    spelling = text.strip()
    if spelling in ("", "1", "-"):
        return units.dimensionless_unscaled
    with warnings.catch_warnings():
        # VOUnit calls Angstrom deprecated; astronomers do not
        warnings.simplefilter("ignore", units.UnitsWarning)
        for style in ("vounit", "fits", "generic"):
            try:
                return units.Unit(spelling, format=style, parse_strict="raise")
            except (ValueError, TypeError):
                continue
    raise InputError(f"{text!r} is not a unit ({near_matches(spelling, COMMON)})")


@lru_cache(maxsize=1024)
def _converter(from_unit: str, to_unit: str) -> Any:
    from astropy import units

    start, end = unit_of(from_unit), unit_of(to_unit)
    if start == end:
        return float
    try:
        return start.get_converter(end)
    # a logarithmic unit, such as mag(AB), has no converter
    except (units.UnitConversionError, AttributeError, TypeError):
        raise InputError(f"{from_unit!r} and {to_unit!r} are units of different kinds") from None


@lru_cache(maxsize=1024)
def factor(from_unit: str, to_unit: str) -> float:
    """Return what to multiply by; InputError where the units are of different kinds."""
    converter = _converter(from_unit, to_unit)
    # astropy multiplies powers of ten as floats: nm to Angstrom comes as 9.999999999999998
    return float(f"{float(converter(1.0)):.15g}")


def same_kind(one: str, other: str) -> bool:
    """Tell whether one unit can be converted to the other."""
    try:
        factor(one, other)
    except InputError:
        return False
    return True


def converted(value: Real, from_unit: str, to_unit: str) -> Real:
    """Return a value in another unit."""
    if isinstance(from_unit, Expr) or isinstance(to_unit, Expr):
        raise NotTraceable("units in cells: a plain formula needs them as text")
    return value * factor(from_unit, to_unit)
