"""How air shortens a wavelength: the refractive index of standard air.

Standard air is dry, at 15 °C and 101 325 Pa, with 450 ppm of carbon dioxide: Ciddor 1996,
Applied Optics 35, 1566, eq. 1. Wavelengths are in Angstrom.
"""

from cellfuncs.symbols import Real, within

SHORTEST = 2000.0
"""Vacuum wavelength below which the formula is not used: it nears its pole at 1833 Å."""

ALLOWED = (
    "{argument} is {{}} Å, below 2000 Å, where air wavelengths are not in use; take vacuum ones"
)


def index_of_air(vacuum: Real) -> Real:
    """Return the refractive index of standard air at a vacuum wavelength."""
    wavenumber_squared = (1e4 / vacuum) ** 2
    return 1 + 1e-8 * (
        5_792_105 / (238.0185 - wavenumber_squared) + 167_917 / (57.362 - wavenumber_squared)
    )


SHORTEST_IN_AIR = SHORTEST / index_of_air(SHORTEST)


def air_from_vacuum(vacuum: Real, argument: str = "vacuum") -> Real:
    """Return the wavelength in air of a vacuum wavelength; `argument` is its name in messages."""
    words = ALLOWED.format(argument=argument)
    return within(vacuum >= SHORTEST, vacuum, words, lambda: vacuum / index_of_air(vacuum))


def vacuum_from_air(air: Real, argument: str = "air") -> Real:
    """Return the vacuum wavelength of a wavelength in air, to 1e-13 relative.

    The index changes so slowly that each turn of the fixed-point iteration gains at least three
    digits; three turns after the first guess λ_vacuum = λ_air.
    """

    def iterated() -> Real:
        vacuum = air
        for _ in range(3):
            vacuum = air * index_of_air(vacuum)
        return vacuum

    return within(air >= SHORTEST_IN_AIR, air, ALLOWED.format(argument=argument), iterated)
