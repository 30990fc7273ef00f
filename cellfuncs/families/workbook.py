"""What a workbook needs to know of its own numbers: units, constants, reasons, provenance."""

from typing import Any

from cellfuncs import units
from cellfuncs.catalogue import Anything, Choice, Number, Word, find, function
from cellfuncs.constants import EDITION
from cellfuncs.errors import CellError
from cellfuncs.families.distance import COSMOLOGY
from cellfuncs.physics import earth, expansion
from cellfuncs.symbols import Real, choose
from cellfuncs.version import __version__

UNIT = Word(meaning="unit in VOUnit or FITS spelling")
VOUNITS = "IVOA VOUnits 1.0 (Derriere et al. 2014); FITS standard 4.0 (Pence et al. 2010)"

COSMOLOGY_VALUES = (
    "H0",
    "Om0",
    "Ode0",
    "Ok0",
    "Ogamma0",
    "Onu0",
    "w0",
    "wa",
    "Tcmb0",
    "Neff",
    "m_nu",
)


@function(
    value=Number(meaning="what to convert", like="value"),
    from_unit=UNIT,
    to_unit=UNIT,
    unit="as to_unit",
    source=VOUNITS,
    examples=('=UNITS_CONVERTED(500.7, "nm", "Angstrom")',),
)
def units_converted(value: Real, from_unit: Any, to_unit: Any) -> Real:
    """A value in another unit of the same kind."""
    return units.converted(value, from_unit, to_unit)


@function(
    parameter=Choice(meaning="which parameter", choices=COSMOLOGY_VALUES),
    cosmology=COSMOLOGY,
    unit="as parameter",
    source="the sets as astropy realises them",
    examples=('=COSMOLOGY_VALUE("H0")', '=COSMOLOGY_VALUE("Om0", "WMAP9")'),
)
def cosmology_value(parameter: Any, cosmology: Any = expansion.DEFAULT) -> Real:
    """The number that a cosmology uses: H0 in km/s/Mpc, Tcmb0 in K, m_nu (the sum) in eV."""
    return choose(
        parameter,
        **{
            key: (lambda key=key: getattr(cosmology, key.lower()))
            for key in COSMOLOGY_VALUES
            if key != "m_nu"
        },
        m_nu=lambda: sum(cosmology.m_nu),
    )


@function(
    function=Word(meaning="a function's name"),
    arguments=Anything(meaning="its arguments"),
    unit="text",
    source="this reference",
    traceable=False,
    variadic=True,
    examples=('=REASON("DISTANCE_LUMINOSITY", -0.1)', '=REASON("REDSHIFT_FROM_LINE", 6892, "Hx")'),
)
def reason(function: Any, *arguments: Any) -> Any:
    """Why a function gives an error value for these arguments, in words; "ok" where it does not."""
    called = find(function)
    try:
        called.explain(*arguments)
    except (CellError, TypeError) as error:
        return str(error)
    return "ok"


@function(
    what=Choice(
        meaning="which part",
        choices=("version", "constants", "cosmology", "ephemeris", "earth-orientation"),
    ),
    unit="text",
    source="this project",
    traceable=False,
    examples=("=PROVENANCE()", '=PROVENANCE("cosmology")'),
)
def provenance(what: Any = "version") -> Any:
    """What made the numbers: the program's version, its constants, its data."""
    return choose(
        what,
        version=lambda: f"cellfuncs {__version__}",
        constants=lambda: EDITION,
        cosmology=lambda: f"{expansion.DEFAULT}: {expansion.PUBLISHED[expansion.DEFAULT][0]}",
        ephemeris=earth.ephemeris_in_words,
        **{"earth-orientation": earth.orientation_in_words},
    )
