"""Times, ages and the expansion itself."""

from typing import Any

from cellfuncs.catalogue import Number, function
from cellfuncs.families.distance import COSMOLOGY, HOGG, REDSHIFT
from cellfuncs.physics import expansion
from cellfuncs.physics.fate import fate
from cellfuncs.symbols import Real, log1p, sqrt, within

PAST_OR_FUTURE = Number(
    meaning="redshift; below 0 is the future", above=-1.0, at_most=expansion.HIGHEST_REDSHIFT
)
NEVER_THERE = "z is {}: this universe was never at that redshift"
CARROLL = "Carroll, Press & Turner 1992, ARA&A 30, 499"


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="Gyr",
    source=f"{HOGG}, eq. 30",
    examples=("=AGE_AT_REDSHIFT(2)", '=AGE_AT_REDSHIFT(2, "WMAP9")'),
)
def age_at_redshift(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Age of the universe when the light of redshift z set out."""
    return cosmology.hubble_time * cosmology.time.beyond(log1p(z))


@function(
    cosmology=COSMOLOGY,
    unit="Gyr",
    source=f"{HOGG}, eq. 30",
    examples=("=AGE_OF_UNIVERSE()", '=AGE_OF_UNIVERSE("WMAP7")'),
)
def age_of_universe(cosmology: Any = expansion.DEFAULT) -> Real:
    """Age of the universe today."""
    return cosmology.hubble_time * cosmology.age_in_hubble_times


@function(
    z=REDSHIFT,
    cosmology=COSMOLOGY,
    unit="Gyr",
    source=f"{HOGG}, eq. 30",
    examples=("=TIME_LOOKBACK(2)",),
)
def time_lookback(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Time that the light of redshift z has been under way."""
    return cosmology.hubble_time * cosmology.time.up_to(log1p(z))


@function(
    cosmology=COSMOLOGY,
    unit="Gyr",
    source=f"{HOGG}, eq. 3",
    examples=("=TIME_HUBBLE()",),
)
def time_hubble(cosmology: Any = expansion.DEFAULT) -> Real:
    """Hubble time, 1/H0."""
    return cosmology.hubble_time


@function(
    age=Number(meaning="age of the universe then", unit="Gyr", above=0.0),
    cosmology=COSMOLOGY,
    unit="",
    source=f"{HOGG}, eq. 30",
    traceable=False,
    examples=("=REDSHIFT_FROM_AGE(3.3)",),
)
def redshift_from_age(age: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Redshift of light that set out when the universe had that age."""
    today = cosmology.hubble_time * cosmology.time.beyond(0.0)
    return within(
        age <= today,
        age,
        f"age is {{}} Gyr; that universe is {today:.6g} Gyr old",
        lambda: expansion.redshift_of(cosmology.time.inverse_beyond(age / cosmology.hubble_time)),
    )


@function(
    time=Number(meaning="lookback time", unit="Gyr", at_least=0.0),
    cosmology=COSMOLOGY,
    unit="",
    source=f"{HOGG}, eq. 30",
    traceable=False,
    examples=("=REDSHIFT_FROM_LOOKBACK(10)",),
)
def redshift_from_lookback(time: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Redshift of light that has been under way for that time."""
    return expansion.redshift_of(cosmology.time.inverse_up_to(time / cosmology.hubble_time))


@function(
    z=PAST_OR_FUTURE,
    cosmology=COSMOLOGY,
    unit="km.s-1.Mpc-1",
    source=f"{HOGG}, eq. 14",
    examples=("=EXPANSION_RATE(1)",),
)
def expansion_rate(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Expansion rate H(z)."""
    return within(
        cosmology.existed(z),
        z,
        NEVER_THERE,
        lambda: cosmology.h0 * sqrt(cosmology.expansion_squared(1 + z)),
    )


@function(
    z=PAST_OR_FUTURE,
    cosmology=COSMOLOGY,
    unit="",
    source=f"{CARROLL}, eq. 17, with radiation and varying dark energy",
    examples=("=DECELERATION(0)",),
)
def deceleration(z: Real, cosmology: Any = expansion.DEFAULT) -> Real:
    """Deceleration parameter q(z); negative where the expansion accelerates."""
    u = 1 + z
    return within(
        cosmology.existed(z),
        z,
        NEVER_THERE,
        lambda: cosmology.expansion_squared_slope(u) / (2 * cosmology.expansion_squared(u)) - 1,
    )


@function(
    cosmology=COSMOLOGY,
    unit="text",
    source=CARROLL,
    traceable=False,
    examples=("=EXPANSION_FATE()",),
)
def expansion_fate(cosmology: Any = expansion.DEFAULT) -> Any:
    """How the expansion ends, or that this universe never had a beginning.

    "recollapses", "expands, coming to rest", "expands forever", "expands, accelerating" or
    "no big bang".
    """
    return fate(cosmology)
