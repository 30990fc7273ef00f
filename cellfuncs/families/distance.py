"""Distances, and what follows from them: scales, volumes, magnitudes."""

from math import pi
from typing import Any

from cellfuncs.catalogue import Choice, CosmologySet, Number, function
from cellfuncs.constants import (
    ARCSEC_PER_RADIAN,
    SQUARE_DEGREES_OF_SKY,
)
from cellfuncs.families.velocity import DEFAULT_H0, HUBBLE, HUBBLE_CONSTANT
from cellfuncs.physics import expansion
from cellfuncs.physics.expansion import Cosmology
from cellfuncs.symbols import Real, choose, log1p, log10

HOGG = "Hogg 1999, astro-ph/9905116"

REDSHIFT = Number(meaning="cosmological redshift", at_least=0.0, at_most=expansion.HIGHEST_REDSHIFT)
REDSHIFT_ABOVE_ZERO = Number(
    meaning="cosmological redshift; at 0 there is no distance modulus",
    above=0.0,
    at_most=expansion.HIGHEST_REDSHIFT,
)
COSMOLOGY = CosmologySet(meaning="the cosmology")
MAGNITUDE = Number(meaning="magnitude", unit="mag")
MODULUS = Number(meaning="distance modulus", unit="mag", at_least=-1000.0, at_most=1000.0)


def modulus(distance: Real) -> Real:
    """5 log10(d / 10 pc) of a distance in Mpc"""
    return 5 * log10(distance) + 25


def comoving(z: Real, cosmology: Cosmology) -> Real:
    """Mpc along the line of sight"""
    return cosmology.hubble_distance * cosmology.path.up_to(log1p(z))


def transverse(z: Real, cosmology: Cosmology) -> Real:
    """Mpc across it"""
    return cosmology.transverse(comoving(z, cosmology))


@function(
    velocity=Number(meaning="velocity of recession", unit="km/s", at_least=0.0),
    h0=HUBBLE_CONSTANT,
    unit="Mpc",
    source=HUBBLE,
    examples=("=DISTANCE_HUBBLE(7000)", "=DISTANCE_HUBBLE(7000, 70)"),
)
def distance_hubble(velocity: Real, h0: Real = DEFAULT_H0) -> Real:
    """Distance by the linear law v = H0·d, good to about 1 % only below z of about 0.01."""
    return velocity / h0


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="Mpc",
    source=f"{HOGG}, eq. 15",
    examples=("=DISTANCE_COMOVING(0.5)", '=DISTANCE_COMOVING(0.5, "WMAP9")'),
)
def distance_comoving(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Comoving distance along the line of sight."""
    return comoving(z, cosmology)


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="Mpc",
    source=f"{HOGG}, eq. 16",
    examples=("=DISTANCE_TRANSVERSE(0.5)",),
)
def distance_transverse(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Transverse comoving distance; in a flat universe it equals the line-of-sight one."""
    return transverse(z, cosmology)


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="Mpc",
    source=f"{HOGG}, eq. 21",
    examples=("=DISTANCE_LUMINOSITY(0.5)", '=DISTANCE_LUMINOSITY(0.5, "Planck15")'),
)
def distance_luminosity(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Luminosity distance: what turns a flux into a luminosity."""
    return (1 + z) * transverse(z, cosmology)


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="Mpc",
    source=f"{HOGG}, eq. 18",
    examples=("=DISTANCE_ANGULAR(0.5)",),
)
def distance_angular(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Angular diameter distance: what turns an angle into a size."""
    return transverse(z, cosmology) / (1 + z)


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="Mpc",
    source=f"{HOGG}, eq. 30",
    examples=("=DISTANCE_LIGHT_TRAVEL(0.5)",),
)
def distance_light_travel(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """The way that light has come: c times the lookback time."""
    return cosmology.hubble_distance * cosmology.time.up_to(log1p(z))


@function(
    z=REDSHIFT_ABOVE_ZERO,
    cosmology=COSMOLOGY,
    unit="mag",
    source=f"{HOGG}, eq. 25",
    examples=("=DISTANCE_MODULUS(0.5)",),
)
def distance_modulus(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Distance modulus, apparent minus absolute magnitude of what has no extinction."""
    return modulus((1 + z) * transverse(z, cosmology))


@function(
    modulus=MODULUS,
    unit="Mpc",
    source=f"{HOGG}, eq. 25",
    examples=("=DISTANCE_FROM_MODULUS(31.1)",),
)
def distance_from_modulus(modulus: Real) -> Real:
    """Distance of a distance modulus."""
    return 10 ** ((modulus - 25) / 5)


@function(
    distance=Number(meaning="luminosity distance", unit="Mpc", above=0.0),
    unit="mag",
    source=f"{HOGG}, eq. 25",
    examples=("=MODULUS_FROM_DISTANCE(16.5)",),
)
def modulus_from_distance(distance: Real) -> Real:
    """Distance modulus of a distance."""
    return modulus(distance)


@function(
    parallax=Number(meaning="annual parallax", unit="mas", above=0.0),
    unit="pc",
    source="definition of the parsec: IAU 2015 resolution B2",
    examples=("=DISTANCE_FROM_PARALLAX(768.07)",),
)
def distance_from_parallax(parallax: Real) -> Real:
    """Distance of a star from its parallax, without any prior: poor where the error is large."""
    return 1000 / parallax


@function(
    distance=Number(meaning="distance", unit="Mpc", at_least=0.0),
    kind=Choice(
        meaning="which distance it is", choices=("comoving", "luminosity", "light-travel", "hubble")
    ),
    cosmology=COSMOLOGY,
    unit="",
    source=HOGG,
    traceable=False,
    examples=("=REDSHIFT_FROM_DISTANCE(100)", '=REDSHIFT_FROM_DISTANCE(100, "comoving")'),
)
def redshift_from_distance(
    distance: Real, kind: Any = "luminosity", cosmology: Any = expansion.DEFAULT
) -> Real:
    """Redshift at which a distance is reached.

    "hubble" is the linear law, z = H0·d/c. A distance beyond what light can have come has none.
    """
    hubble_distances = distance / cosmology.hubble_distance
    return choose(
        kind,
        comoving=lambda: expansion.redshift_of(cosmology.path.inverse_up_to(hubble_distances)),
        luminosity=lambda: cosmology.redshift_at_luminosity_distance(distance),
        hubble=lambda: hubble_distances,
        **{
            "light-travel": lambda: expansion.redshift_of(
                cosmology.time.inverse_up_to(hubble_distances)
            )
        },
    )


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="kpc/arcsec",
    source=f"{HOGG}, eq. 18",
    examples=("=SCALE_TRANSVERSE(0.5)",),
)
def scale_transverse(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Proper size that one arcsecond spans at redshift z."""
    return transverse(z, cosmology) / (1 + z) * (1000 / ARCSEC_PER_RADIAN)


@function(
    z=REDSHIFT,
    area=Number(
        meaning="area of the survey on the sky",
        unit="deg2",
        above=0.0,
        at_most=SQUARE_DEGREES_OF_SKY,
    ),
    cosmology=COSMOLOGY,
    unit="Mpc3",
    source=f"{HOGG}, eq. 29",
    examples=("=VOLUME_COMOVING(0.1)", "=VOLUME_COMOVING(0.1, 100)"),
)
def volume_comoving(
    z: Real, area: Real = SQUARE_DEGREES_OF_SKY, cosmology: Any = expansion.DEFAULT
) -> Real:
    """Comoving volume within redshift z over an area of the sky; left out, the whole sky."""
    reach = comoving(z, cosmology)
    whole_sky = 4 * pi * reach**3 * expansion.volume_factor(cosmology.curvature(reach))
    return area / SQUARE_DEGREES_OF_SKY * whole_sky


@function(
    magnitude=MAGNITUDE,
    z=REDSHIFT_ABOVE_ZERO,
    extinction=Number(meaning="extinction in the band", unit="mag"),
    k_correction=Number(meaning="K correction", unit="mag"),
    cosmology=COSMOLOGY,
    unit="mag",
    source=f"{HOGG}, eq. 26",
    examples=("=MAGNITUDE_ABSOLUTE(17.5, 0.05)", "=MAGNITUDE_ABSOLUTE(17.5, 0.05, 0.12, 0.03)"),
)
def magnitude_absolute(
    magnitude: Real,
    z: Real,
    extinction: Real = 0.0,
    k_correction: Real = 0.0,
    cosmology: Any = expansion.DEFAULT,
) -> Real:
    """Absolute magnitude of what is seen at redshift z."""
    return magnitude - modulus((1 + z) * transverse(z, cosmology)) - extinction - k_correction
