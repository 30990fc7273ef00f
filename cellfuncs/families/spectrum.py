"""Wavelengths, frequencies and the redshifts that follow from them."""

from dataclasses import dataclass
from typing import Any

import numpy as np

from cellfuncs.arguments import Measured, MeasuredLines, part_of
from cellfuncs.catalogue import Choice, Number, Word, function
from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.errors import CellError, DomainError, InputError, NotFound
from cellfuncs.families.velocity import CONVENTION
from cellfuncs.physics import conventions, identification, lines, refraction
from cellfuncs.symbols import Expr, Real, choose, looked_up

CIDDOR = "Ciddor 1996, Applied Optics 35, 1566"
GREISEN = "Greisen et al. 2006, A&A 446, 747 (FITS WCS Paper III)"
DEFINITION = "definition of the redshift: Hogg 1999, astro-ph/9905116"
LINE_TABLE = "the line table; each line names its source"

ANGSTROM_GHZ = LIGHT_SPEED * 1e4
"""c in Angstrom times GHz"""

REDSHIFT = Number(meaning="redshift", above=-1.0)
WAVELENGTH = Number(meaning="wavelength", unit="Angstrom", above=0.0)
ANY_WAVELENGTH = Number(meaning="wavelength", unit="Angstrom", like="wavelength", above=0.0)
ANY_FREQUENCY = Number(meaning="frequency", unit="GHz", like="frequency", above=0.0)
FREQUENCY = Number(meaning="frequency", unit="GHz", above=0.0)
MEDIUM = Choice(meaning="what the wavelength was measured in", choices=("vacuum", "air"))


@dataclass(frozen=True, kw_only=True)
class LineName(Word):
    """A line of the table in any common spelling; the formula takes its vacuum wavelength."""

    @property
    def allowed(self) -> str:
        return "a line of the table"

    def resolved(self, text: str) -> float:
        return lines.find(text).vacuum


LINE = LineName(meaning="the line's name")


def rest_wavelength(line: Real) -> Real:
    if isinstance(line, Expr):
        return looked_up(line, "line_key", "line_vacuum")
    return line


def in_vacuum(wavelength: Real, medium: Any, argument: str) -> Real:
    return choose(
        medium,
        vacuum=lambda: wavelength,
        air=lambda: refraction.vacuum_from_air(wavelength, argument),
    )


@function(
    line=LINE,
    medium=MEDIUM,
    unit="Angstrom",
    source=LINE_TABLE,
    examples=('=LINE_WAVELENGTH("H alpha")', '=LINE_WAVELENGTH("[OIII]5007", "air")'),
)
def line_wavelength(line: Any, medium: Any = "vacuum") -> Real:
    """Rest wavelength of a spectral line."""
    rest = rest_wavelength(line)
    return choose(
        medium, vacuum=lambda: rest, air=lambda: refraction.air_from_vacuum(rest, "the line")
    )


@function(
    wavelength=WAVELENGTH,
    z=REDSHIFT,
    medium=MEDIUM,
    window=Number(meaning="how far away the line may be", unit="Angstrom", above=0.0),
    unit="text",
    source=LINE_TABLE,
    traceable=False,
    examples=("=LINE_NEAREST(6564.7)", "=LINE_NEAREST(6890, 0.0497)"),
)
def line_nearest(
    wavelength: Real, z: Real = 0.0, medium: Any = "vacuum", window: Real = 10.0
) -> Any:
    """Name of the table's line nearest to a measured wavelength taken to rest.

    Without a line inside the window there is no answer (#N/A).
    """
    rest = in_vacuum(wavelength, medium, "wavelength") / (1 + z)
    if isinstance(rest, np.ndarray) or isinstance(window, np.ndarray):
        return lines.nearest_names(rest, window)
    line = lines.nearest(rest)
    if not abs(line.vacuum - rest) <= window:
        raise NotFound(
            f"no line of the table lies within {window:g} Å of {rest:.2f} Å; the nearest is "
            f"{line.name} at {line.vacuum:.2f} Å"
        )
    return line.name


@function(
    rest=ANY_WAVELENGTH,
    z=REDSHIFT,
    unit="as rest",
    source=DEFINITION,
    examples=("=WAVELENGTH_OBSERVED(6564.61, 0.05)",),
)
def wavelength_observed(rest: Real, z: Real) -> Real:
    """Where a line of a known rest wavelength is seen at redshift z."""
    return rest * (1 + z)


@function(
    observed=ANY_WAVELENGTH,
    z=REDSHIFT,
    unit="as observed",
    source=DEFINITION,
    examples=("=WAVELENGTH_EMITTED(6892.84, 0.05)",),
)
def wavelength_emitted(observed: Real, z: Real) -> Real:
    """The rest wavelength of what is observed at redshift z."""
    return observed / (1 + z)


@function(
    air=WAVELENGTH,
    unit="Angstrom",
    source=CIDDOR,
    examples=("=WAVELENGTH_VACUUM(5006.84)",),
)
def wavelength_vacuum(air: Real) -> Real:
    """Vacuum wavelength of a wavelength measured in standard air, 2000 Å and longer."""
    return refraction.vacuum_from_air(air, "air")


@function(
    vacuum=WAVELENGTH,
    unit="Angstrom",
    source=CIDDOR,
    examples=("=WAVELENGTH_AIR(5008.24)",),
)
def wavelength_air(vacuum: Real) -> Real:
    """Wavelength in standard air of a vacuum wavelength, 2000 Å and longer."""
    return refraction.air_from_vacuum(vacuum, "vacuum")


@function(
    frequency=FREQUENCY,
    unit="Angstrom",
    source=GREISEN,
    examples=("=WAVELENGTH_FROM_FREQUENCY(115.2712018)",),
)
def wavelength_from_frequency(frequency: Real) -> Real:
    """Vacuum wavelength of a frequency."""
    return ANGSTROM_GHZ / frequency


@function(
    wavelength=WAVELENGTH,
    unit="GHz",
    source=GREISEN,
    examples=("=FREQUENCY_FROM_WAVELENGTH(2110611400)",),
)
def frequency_from_wavelength(wavelength: Real) -> Real:
    """Frequency of a vacuum wavelength."""
    return ANGSTROM_GHZ / wavelength


@function(
    observed=ANY_WAVELENGTH,
    rest=ANY_WAVELENGTH,
    unit="",
    source=DEFINITION,
    examples=("=REDSHIFT_FROM_WAVELENGTH(6892.84, 6564.61)",),
)
def redshift_from_wavelength(observed: Real, rest: Real) -> Real:
    """Redshift from a measured and a rest wavelength, both in one unit and one medium."""
    return observed / rest - 1


@function(
    observed=ANY_FREQUENCY,
    rest=ANY_FREQUENCY,
    unit="",
    source=GREISEN,
    examples=("=REDSHIFT_FROM_FREQUENCY(109.78, 115.2712018)",),
)
def redshift_from_frequency(observed: Real, rest: Real) -> Real:
    """Redshift from a measured and a rest frequency, both in one unit."""
    return rest / observed - 1


@function(
    observed=WAVELENGTH,
    line=LINE,
    medium=MEDIUM,
    unit="",
    source=DEFINITION,
    examples=(
        '=REDSHIFT_FROM_LINE(6892.84, "H alpha")',
        '=REDSHIFT_FROM_LINE(5257.2, "[OIII]5007", "air")',
    ),
)
def redshift_from_line(observed: Real, line: Any, medium: Any = "vacuum") -> Real:
    """Redshift from a measured wavelength and the name of its line.

    A wavelength in air is taken to vacuum first; the table's rest wavelengths are vacuum ones.
    """
    return in_vacuum(observed, medium, "observed") / rest_wavelength(line) - 1


@function(
    velocity=Number(meaning="velocity, receding positive", unit="km/s"),
    convention=CONVENTION,
    unit="",
    source=GREISEN,
    examples=("=REDSHIFT_FROM_VELOCITY(14636.5)", '=REDSHIFT_FROM_VELOCITY(1500, "radio")'),
)
def redshift_from_velocity(velocity: Real, convention: Any = "relativistic") -> Real:
    """Redshift from a velocity in one of the three conventions."""
    return conventions.redshift_from_velocity(velocity, convention)


@function(
    z1=REDSHIFT,
    z2=REDSHIFT,
    unit="",
    source="Davis & Scrimgeour 2014, MNRAS 442, 1117",
    examples=("=REDSHIFT_COMBINED(0.05, 0.0001)",),
)
def redshift_combined(z1: Real, z2: Real) -> Real:
    """Redshift of two shifts one after the other: the factors 1+z multiply."""
    return z1 + z2 + z1 * z2


@function(
    z=REDSHIFT,
    z_reference=REDSHIFT,
    unit="",
    source="Davis & Scrimgeour 2014, MNRAS 442, 1117",
    examples=("=REDSHIFT_RELATIVE(0.0512, 0.05)",),
)
def redshift_relative(z: Real, z_reference: Real) -> Real:
    """Redshift as seen from a frame that is itself at z_reference."""
    return (z - z_reference) / (1 + z_reference)


@function(
    wavelengths=MeasuredLines(
        meaning="measured wavelengths, two or more",
        wavelength=WAVELENGTH,
        error=Number(meaning="error", unit="Angstrom", above=0.0),
        strength=Number(meaning="strength"),
    ),
    medium=MEDIUM,
    z_min=Number(meaning="lowest redshift searched", above=-1.0),
    z_max=Number(meaning="highest redshift searched", above=-1.0),
    part=part_of(z="", sigma="", lines="text", count="", chance=""),
    unit="as part",
    source=f"{LINE_TABLE}; the search and its chance are this project's own",
    traceable=False,
    examples=(
        "=REDSHIFT_SOLVED({6892.84;5105.8;5258.65;5208.31})",
        '=REDSHIFT_SOLVED({6892.84;5105.8;5258.65;5208.31}, "vacuum", 0, 7, "lines")',
    ),
)
def redshift_solved(
    wavelengths: Any,
    medium: Any = "vacuum",
    z_min: Real = 0.0,
    z_max: Real = 7.0,
    part: Any = "z",
) -> Any:
    """Redshift at which the measured wavelengths fall on lines of the table.

    "lines" names the line of each wavelength, and other redshifts that are nearly as good; "count"
    is how many have one. "chance" is the probability that wavelengths without any order would do
    as well somewhere between z_min and z_max, or that another redshift is the true one, if that is
    more: believe no redshift whose chance is above 0.01. A wavelength without an error counts as
    good to 0.5 Å. Of a line twice as strong as the usual it is half as likely that it is false;
    the sign of a strength, of emission or absorption, does not count. All lines of the table are
    taken for equally likely.
    """
    if not isinstance(z_min, np.ndarray) and not isinstance(z_max, np.ndarray):
        return _solved(wavelengths, medium, z_min, z_max, part)
    limits = np.broadcast(z_min, z_max)
    found = np.full(limits.shape, None, dtype=object)
    for at, (low, high) in zip(np.ndindex(limits.shape), limits, strict=True):
        try:
            found[at] = _solved(wavelengths, medium, float(low), float(high), part)
        except InputError:
            raise
        except CellError:
            continue
    return found


def _solved(measured: Measured, medium: str, z_min: float, z_max: float, part: str) -> Any:
    if not z_max > z_min:
        raise DomainError(f"z_max is {z_max:.10g}; it must be above z_min, {z_min:.10g}")
    seen = measured.wavelengths
    if np.unique(seen).size < 2:
        raise NotFound(f"one wavelength, {seen[0]:.10g} Å, tells no redshift: any line may be it")
    found = identification.identify(
        np.array([in_vacuum(each, medium, "a wavelength") for each in seen.tolist()]),
        np.where(np.isnan(measured.errors), identification.ASSUMED_ERROR, measured.errors),
        identification.relative(measured.strengths),
        z_min,
        z_max,
    )
    best = found.best
    if part == "lines":
        words = [
            f"{wavelength:.2f} {name or 'not identified'}"
            for wavelength, name in zip(seen.tolist(), best.names, strict=True)
        ]
        words += [f"or z = {each.z:.5f} with {each.count} lines" for each in found.rivals[:3]]
        if len(found.rivals) > 3:
            words.append(f"or one of {len(found.rivals) - 3} more")
        return "; ".join(words)
    if part == "chance":
        return found.chance
    return float(getattr(best, part))
