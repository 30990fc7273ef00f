"""Velocities from redshifts, and from one another. Receding is positive; km/s throughout."""

from typing import Any

from cellfuncs.catalogue import Choice, Number, function
from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.physics import conventions
from cellfuncs.physics.expansion import DEFAULT, published
from cellfuncs.symbols import Real, sqrt

GREISEN = "Greisen et al. 2006, A&A 446, 747 (FITS WCS Paper III), Table 3"
EINSTEIN = "special relativity: Einstein 1905, Annalen der Physik 322, 891"
HUBBLE = "Hubble 1929, PNAS 15, 168"

CONVENTION = Choice(meaning="how a redshift becomes a velocity", choices=conventions.NAMES)
REDSHIFT = Number(meaning="redshift", above=-1.0)
SLOWER_THAN_LIGHT = Number(
    meaning="velocity, receding positive", unit="km/s", above=-LIGHT_SPEED, below=LIGHT_SPEED
)
HUBBLE_CONSTANT = Number(meaning="Hubble constant", unit="km.s-1.Mpc-1", above=0.0)
DEFAULT_H0: float = published(DEFAULT).h0


@function(
    z=REDSHIFT,
    convention=CONVENTION,
    unit="km/s",
    source=GREISEN,
    examples=("=VELOCITY_FROM_REDSHIFT(0.05)", '=VELOCITY_FROM_REDSHIFT(0.05, "optical")'),
)
def velocity_from_redshift(z: Real, convention: Any = "relativistic") -> Real:
    """Velocity that a redshift stands for, in one of the three conventions.

    relativistic: c((1+z)²−1)/((1+z)²+1), the velocity of a moving source; optical: cz; radio:
    cz/(1+z). Only at small z do the three agree.
    """
    return conventions.velocity_from_redshift(z, convention)


@function(
    velocity=Number(meaning="velocity, receding positive", unit="km/s"),
    from_convention=CONVENTION,
    to_convention=CONVENTION,
    unit="km/s",
    source=GREISEN,
    examples=('=VELOCITY_CONVERTED(1500, "radio", "optical")',),
)
def velocity_converted(velocity: Real, from_convention: Any, to_convention: Any) -> Real:
    """Velocity taken from one convention to another, through the redshift."""
    z = conventions.redshift_from_velocity(velocity, from_convention)
    return conventions.velocity_from_redshift(z, to_convention)


@function(
    v1=SLOWER_THAN_LIGHT,
    v2=SLOWER_THAN_LIGHT,
    unit="km/s",
    source=EINSTEIN,
    examples=("=VELOCITY_SUM(150000, 200000)",),
)
def velocity_sum(v1: Real, v2: Real) -> Real:
    """Sum of two velocities along one line, never faster than light."""
    return (v1 + v2) / (1 + (v1 / LIGHT_SPEED) * (v2 / LIGHT_SPEED))


@function(
    z=REDSHIFT,
    z_system=Number(meaning="redshift of the cluster or system", above=-1.0),
    unit="km/s",
    source="Danese, De Zotti & di Tullio 1980, A&A 82, 322",
    examples=("=VELOCITY_PECULIAR(0.0512, 0.05)",),
)
def velocity_peculiar(z: Real, z_system: Real) -> Real:
    """Velocity of a member in the rest frame of its cluster or system."""
    return LIGHT_SPEED * (z - z_system) / (1 + z_system)


@function(
    distance=Number(meaning="proper distance today", unit="Mpc", at_least=0.0),
    h0=HUBBLE_CONSTANT,
    unit="km/s",
    source=HUBBLE,
    examples=("=VELOCITY_HUBBLE(100)", "=VELOCITY_HUBBLE(100, 70)"),
)
def velocity_hubble(distance: Real, h0: Real = DEFAULT_H0) -> Real:
    """Velocity of recession today by Hubble's law."""
    return h0 * distance


@function(
    velocity=SLOWER_THAN_LIGHT,
    unit="",
    source=EINSTEIN,
    examples=("=DOPPLER_FACTOR(150000)",),
)
def doppler_factor(velocity: Real) -> Real:
    """Observed over emitted wavelength of a source that moves along the line of sight."""
    beta = velocity / LIGHT_SPEED
    return sqrt((1 + beta) / (1 - beta))
