"""The integrals of the expansion against quadrature with mpmath, and their inverses.

The reference is written from the papers alone: Hogg 1999 (astro-ph/9905116) for the distances,
Komatsu et al. 2011 (ApJS 192, 18, eq. 26) for neutrinos, CODATA 2018 and the IAU for constants.
"""

from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import pytest
from mpmath import MPContext
from numpy.typing import NDArray

from cellfuncs import (
    Function,
    age_at_redshift,
    age_of_universe,
    deceleration,
    distance_angular,
    distance_comoving,
    distance_from_modulus,
    distance_from_parallax,
    distance_light_travel,
    distance_luminosity,
    distance_modulus,
    distance_transverse,
    expansion_rate,
    frequency_from_wavelength,
    modulus_from_distance,
    redshift_combined,
    redshift_from_age,
    redshift_from_distance,
    redshift_from_lookback,
    redshift_from_velocity,
    redshift_relative,
    scale_transverse,
    time_lookback,
    velocity_from_redshift,
    volume_comoving,
    wavelength_emitted,
    wavelength_from_frequency,
    wavelength_observed,
)

mp = MPContext()
mp.dps = 40
mpf = mp.mpf

Floats = NDArray[np.float64]
Real = Any
"""An mpf, which mpmath does not type"""

C = mpf(299_792_458)
G = mpf("6.67430e-11")
H = mpf("6.62607015e-34")
K = mpf("1.380649e-23")
EV = mpf("1.602176634e-19")
MPC = mpf(149_597_870_700) * 648_000 / mp.pi * 10**6
GYR = mpf(31_557_600) * 10**9
SIGMA = 2 * mp.pi**5 * K**4 / (15 * H**3 * C**2)

SCALE_FACTORS = [mpf(10) ** -power for power in (6, 4, 3, 2, 1)]
"""Where a quadrature in a = 1/(1+z) is cut: in a piece one kind of density rules"""


def integral(f: Callable[[Real], Real], start: Real, end: Real) -> Real:
    """∫ f(a) da by tanh-sinh quadrature (a root at a = 0 does not hurt it), to 18 digits."""
    cuts = [a for a in SCALE_FACTORS if start < a < end]
    with mp.workdps(18):
        return mp.quad(f, [start, *cuts, end])


@dataclass(frozen=True)
class Friedmann:
    """A universe by its Friedmann equation; parameters as decimal texts.

    Komatsu et al. 2011, eq. 26, for the neutrinos: each adds (1 + (A·m/T)^p)^(1/p) massless ones,
    A = 0.3173, p = 1.83.
    """

    h0: str
    om0: str
    ode0: str | None = None
    w0: str = "-1"
    wa: str = "0"
    tcmb0: str = "0"
    neff: str = "3.04"
    m_nu: tuple[str, ...] = ("0", "0", "0")

    @cached_property
    def ogamma0(self) -> Real:
        critical = 3 * (mpf(self.h0) * 1000 / MPC) ** 2 / (8 * mp.pi * G)
        return 4 * SIGMA * mpf(self.tcmb0) ** 4 / C**3 / critical

    @cached_property
    def one_neutrino(self) -> Real:
        """A massless kind's energy density over the photons'"""
        return mpf(7) / 8 * (mpf(4) / 11) ** (mpf(4) / 3) * mpf(self.neff) / len(self.m_nu)

    @cached_property
    def warmth(self) -> list[Real]:
        """A·m/T today of each massive kind"""
        thermal = K / EV * (mpf(4) / 11) ** (mpf(1) / 3) * mpf(self.tcmb0)
        return [mpf("0.3173") * mpf(mass) / thermal for mass in self.m_nu if mpf(mass)]

    def radiation(self, u: Real) -> Real:
        """Photons and neutrinos at u = 1+z, over u⁴."""
        if not self.ogamma0:
            return mpf(0)
        p = mpf("1.83")
        massive = sum((1 + (each / u) ** p) ** (1 / p) for each in self.warmth)
        massless = len(self.m_nu) - len(self.warmth)
        return self.ogamma0 * (1 + self.one_neutrino * (massless + massive))

    @cached_property
    def dark(self) -> Real:
        if self.ode0 is None:
            return 1 - mpf(self.om0) - self.radiation(mpf(1))
        return mpf(self.ode0)

    @cached_property
    def curvature(self) -> Real:
        if self.ode0 is None:
            return mpf(0)
        return 1 - mpf(self.om0) - self.radiation(mpf(1)) - self.dark

    @cached_property
    def numbers(self) -> tuple[Real, Real, Real]:
        return mpf(self.om0), mpf(self.w0), mpf(self.wa)

    def squared(self, u: Real) -> Real:
        """E² at u = 1+z."""
        om0, w0, wa = self.numbers
        dark = self.dark
        if w0 != -1 or wa:
            dark *= u ** (3 * (1 + w0 + wa)) * mp.exp(-3 * wa * (1 - 1 / u))
        return self.radiation(u) * u**4 + om0 * u**3 + self.curvature * u**2 + dark

    @property
    def hubble_distance(self) -> Real:
        """Mpc"""
        return C / 1000 / mpf(self.h0)

    @property
    def hubble_time(self) -> Real:
        """Gyr"""
        return MPC / (mpf(self.h0) * 1000) / GYR

    def comoving(self, z: float) -> Real:
        """Mpc: ∫ da/(a²E) from 1/(1+z) to 1, Hogg 1999, eq. 15."""
        return self.hubble_distance * integral(
            lambda a: 1 / (a * a * mp.sqrt(self.squared(1 / a))), 1 / (1 + mpf(z)), mpf(1)
        )

    def age(self, z: float) -> Real:
        """Gyr: ∫ da/(aE) from 0 to 1/(1+z), Hogg 1999, eq. 30."""
        return self.hubble_time * integral(
            lambda a: 1 / (a * mp.sqrt(self.squared(1 / a))), mpf(0), 1 / (1 + mpf(z))
        )

    def lookback(self, z: float) -> Real:
        """Gyr: the same from 1/(1+z) to 1."""
        return self.hubble_time * integral(
            lambda a: 1 / (a * mp.sqrt(self.squared(1 / a))), 1 / (1 + mpf(z)), mpf(1)
        )

    def transverse(self, z: float) -> Real:
        """Mpc: Hogg 1999, eq. 16."""
        d, k = self.comoving(z) / self.hubble_distance, self.curvature
        root = mp.sqrt(abs(k))
        across = mp.sinh(root * d) / root if k > 0 else mp.sin(root * d) / root if k < 0 else d
        return self.hubble_distance * across

    def volume(self, z: float) -> Real:
        """Mpc³ over the whole sky: ∫ 4πD_M² dD, Hogg 1999, eq. 28.

        Nearly flat space takes thirteen digits in the difference; there are forty.
        """
        d, k = self.comoving(z) / self.hubble_distance, self.curvature
        if k == 0:
            shape = d**3 / 3
        elif k > 0:
            shape = (mp.sinh(2 * mp.sqrt(k) * d) / 2 / mp.sqrt(k) - d) / (2 * k)
        else:
            shape = (d - mp.sin(2 * mp.sqrt(-k) * d) / 2 / mp.sqrt(-k)) / (-2 * k)
        return 4 * mp.pi * self.hubble_distance**3 * shape

    def deceleration(self, z: float) -> Real:
        """−ä a/ȧ² = d ln E/d ln(1+z) − 1."""
        return mp.diff(lambda x: mp.log(self.squared(mp.exp(x))) / 2, mp.log1p(mpf(z))) - 1

    @property
    def as_argument(self) -> dict[str, Any]:
        """The same parameters as a cell's two columns would give them"""
        given: dict[str, Any] = {
            "H0": float(self.h0),
            "Om0": float(self.om0),
            "w0": float(self.w0),
            "wa": float(self.wa),
            "Tcmb0": float(self.tcmb0),
            "Neff": float(self.neff),
            "m_nu": [float(mass) for mass in self.m_nu],
        }
        return given if self.ode0 is None else given | {"Ode0": float(self.ode0)}


PLANCK = Friedmann("67.66", "0.30966", None, "-1", "0", "2.7255", "3.046", ("0", "0", "0.06"))
OTHERS = {
    "flat": Friedmann("70", "0.3"),
    "open": Friedmann("70", "0.3", "0.6"),
    "closed": Friedmann("65", "0.4", "0.8", tcmb0="2.7255", neff="3.046", m_nu=("0", "0", "0.06")),
    "nearly flat": Friedmann("72", "0.28", "0.72", "-0.9", "0.3", "2.725"),
    "quintessence": Friedmann("68", "0.3", None, "-0.8", "-0.4"),
    "heavy neutrinos": Friedmann(
        "68", "0.3", "0.65", "-1.1", "-0.4", "2.7255", "3.046", ("0.1", "0.2", "0.3")
    ),
    "four neutrinos": Friedmann(
        "73", "0.25", "0.70", "-0.8", "0.1", "2.7255", "4.2", ("0", "0.05", "0.05", "1.0")
    ),
}
UNIVERSES = {"Planck18": PLANCK, **OTHERS}

EVERY_UNIVERSE = pytest.mark.parametrize("name", UNIVERSES)
POINTS = (1e-4, 3e-3, 0.05, 0.3, 0.8, 1.5, 3.0, 6.0, 12.0, 20.0, 180.0, 1100.0)
FEW_POINTS = (1e-4, 0.3, 3.0, 1100.0)


def ours(name: str) -> Any:
    return name if name == "Planck18" else UNIVERSES[name].as_argument


def points_of(name: str) -> tuple[float, ...]:
    return POINTS if name in ("Planck18", "closed", "heavy neutrinos") else FEW_POINTS


REL = 1e-11
"""Ten times closer than what is promised up to z = 20, a thousand times up to z = 1100"""


@EVERY_UNIVERSE
@pytest.mark.parametrize(
    ("function", "reference"),
    [
        (distance_comoving, Friedmann.comoving),
        (distance_transverse, Friedmann.transverse),
        (age_at_redshift, Friedmann.age),
        (time_lookback, Friedmann.lookback),
        (volume_comoving, Friedmann.volume),
    ],
    ids=lambda value: value.name if isinstance(value, Function) else "",
)
def test_integrals(
    name: str, function: Function, reference: Callable[[Friedmann, float], Real]
) -> None:
    universe = UNIVERSES[name]
    for z in points_of(name):
        expected = float(reference(universe, z))
        assert function(z, cosmology=ours(name)) == pytest.approx(expected, rel=REL, abs=0), z


def test_integrals_of_a_universe_that_loitered() -> None:
    """A little less Λ than would have had it bounce (Carroll, Press & Turner 1992, eq. 12): near
    z = 1.2 it all but stood still, and both integrands have a sharp peak there."""
    loitering = Friedmann("70", "0.3", "1.70")
    for z in (0.5, 1.3, 1.5, 3.0, 100.0):
        for function, reference in [
            (distance_comoving, Friedmann.comoving),
            (age_at_redshift, Friedmann.age),
            (time_lookback, Friedmann.lookback),
        ]:
            expected = float(reference(loitering, z))
            assert function(z, loitering.as_argument) == pytest.approx(expected, rel=1e-10, abs=0)


@EVERY_UNIVERSE
def test_age_and_rate_today(name: str) -> None:
    universe = UNIVERSES[name]
    assert age_of_universe(ours(name)) == pytest.approx(float(universe.age(0.0)), rel=REL)
    for z in POINTS:
        rate = float(mpf(universe.h0) * mp.sqrt(universe.squared(1 + mpf(z))))
        assert expansion_rate(z, ours(name)) == pytest.approx(rate, rel=1e-12)


@EVERY_UNIVERSE
def test_the_deceleration_past_and_future(name: str) -> None:
    """It is of the order of one and goes through zero. Below z = 0 there are no distances, but the
    expansion goes on."""
    for z in (-0.99, -0.7, -0.2, 0.0, *POINTS):
        expected = float(UNIVERSES[name].deceleration(z))
        assert deceleration(z, ours(name)) == pytest.approx(expected, rel=REL, abs=REL), z


@pytest.mark.parametrize("z", [1e-12, 1e-9, 1e-6])
def test_next_to_nothing_keeps_its_digits(z: float) -> None:
    """Hogg 1999, sec. 4: to first order every distance is c·z/H0; the second order is z/2 of it."""
    first = float(PLANCK.hubble_distance * mpf(z))
    for function in (distance_comoving, distance_luminosity, distance_light_travel):
        assert function(z) == pytest.approx(first, rel=2 * z + 1e-12)


# --------------------------------------------------------------------- one call and a column


@pytest.mark.parametrize(
    "function",
    [
        distance_comoving,
        distance_transverse,
        distance_luminosity,
        distance_angular,
        distance_light_travel,
        distance_modulus,
        scale_transverse,
        volume_comoving,
        age_at_redshift,
        time_lookback,
        expansion_rate,
        deceleration,
    ],
    ids=lambda function: function.name,
)
@EVERY_UNIVERSE
def test_a_column_is_what_single_calls_are(name: str, function: Function) -> None:
    z = np.concatenate([[1e-9], np.geomspace(1e-4, 1100, 97), [1e5]])
    column = function(z, cosmology=ours(name))
    single = np.array([function(float(each), cosmology=ours(name)) for each in z])
    np.testing.assert_allclose(column, single, rtol=2e-14, atol=1e-14)
    square = z[:96].reshape(8, 12)
    np.testing.assert_array_equal(
        function(square, cosmology=ours(name)), column[:96].reshape(8, 12)
    )


# ------------------------------------------------------------------------------ the inverses

BACK = 1e-9
"""Relative. Rounding alone takes 1e-11: of an age near today at z = 1e-4, and of a lookback time
at z = 1000, where its last 3e-5 hold all higher redshifts."""

RANGE = np.geomspace(1e-4, 1000, 141)
INVERSES: dict[str, tuple[Callable[[Any, Any], Any], Callable[[Any, Any], Any]]] = {
    "comoving": (distance_comoving, lambda d, c: redshift_from_distance(d, "comoving", c)),
    "luminosity": (distance_luminosity, lambda d, c: redshift_from_distance(d, "luminosity", c)),
    "light-travel": (
        distance_light_travel,
        lambda d, c: redshift_from_distance(d, "light-travel", c),
    ),
    "age": (age_at_redshift, redshift_from_age),
    "lookback": (time_lookback, redshift_from_lookback),
    "modulus": (
        distance_modulus,
        lambda m, c: redshift_from_distance(distance_from_modulus(m), "luminosity", c),
    ),
}


@EVERY_UNIVERSE
@pytest.mark.parametrize("kind", INVERSES)
def test_inverses_of_columns(name: str, kind: str) -> None:
    forward, backward = INVERSES[kind]
    back = backward(forward(RANGE, ours(name)), ours(name))
    np.testing.assert_allclose(back, RANGE, rtol=BACK)


@EVERY_UNIVERSE
@pytest.mark.parametrize("kind", INVERSES)
def test_inverses_of_single_numbers(name: str, kind: str) -> None:
    forward, backward = INVERSES[kind]
    for z in RANGE[::10].tolist():
        back = backward(forward(z, ours(name)), ours(name))
        assert isinstance(back, float)
        assert back == pytest.approx(z, rel=BACK)


@pytest.mark.parametrize("kind", ["comoving", "luminosity", "light-travel", "lookback"])
def test_inverses_of_next_to_nothing(kind: str) -> None:
    """These begin in proportion to z and lose nothing."""
    forward, backward = INVERSES[kind]
    z = np.geomspace(1e-9, 1e-4, 26)
    np.testing.assert_allclose(backward(forward(z, "Planck18"), "Planck18"), z, rtol=BACK)
    assert backward(0.0, "Planck18") == 0


def test_the_linear_laws_inverse() -> None:
    z = RANGE
    np.testing.assert_allclose(
        redshift_from_distance(float(PLANCK.hubble_distance) * z, "hubble"), z, rtol=1e-14
    )


@pytest.mark.parametrize("convention", ["relativistic", "optical", "radio"])
def test_inverses_of_the_velocities(convention: str) -> None:
    """A radio or relativistic velocity nears c as 1 − 1/z or 1 − 2/z²: rounding takes z²/2 (z for
    radio) steps of a float, 1e-10 at z = 1000."""
    z = np.concatenate([-np.geomspace(1e-12, 0.99, 40), np.geomspace(1e-12, 1000, 80)])
    back = redshift_from_velocity(velocity_from_redshift(z, convention), convention)
    np.testing.assert_allclose(back, z, rtol=BACK)
    for each in z[::7].tolist():
        velocity = velocity_from_redshift(each, convention)
        assert redshift_from_velocity(velocity, convention) == pytest.approx(each, rel=BACK)


def test_inverses_of_plain_conversions() -> None:
    numbers = np.geomspace(1e-3, 1e6, 37)
    np.testing.assert_allclose(
        distance_from_modulus(modulus_from_distance(numbers)), numbers, rtol=1e-13
    )
    np.testing.assert_allclose(
        wavelength_from_frequency(frequency_from_wavelength(numbers)), numbers, rtol=1e-15
    )
    np.testing.assert_allclose(
        wavelength_emitted(wavelength_observed(numbers, 0.7), 0.7), numbers, rtol=1e-15
    )
    np.testing.assert_allclose(
        distance_from_parallax(distance_from_parallax(numbers)), numbers, rtol=1e-15
    )
    z = np.geomspace(1e-6, 1000, 37)
    np.testing.assert_allclose(redshift_relative(redshift_combined(z, 0.3), 0.3), z, rtol=BACK)


def test_an_age_or_a_way_that_no_redshift_has() -> None:
    oldest = age_of_universe()
    ages = redshift_from_age(np.array([oldest * (1 + 1e-6), oldest / 2]))
    assert np.isnan(ages).tolist() == [True, False]
    assert redshift_from_age(oldest) == pytest.approx(0, abs=1e-12)
    times = redshift_from_lookback(np.array([oldest * 1.001, oldest / 2]))
    assert np.isnan(times).tolist() == [True, False]
    # light from the beginning has come 14 Gpc, comoving, in our universe
    ways = redshift_from_distance(np.array([2e4, 1e4]), "comoving")
    assert np.isnan(ways).tolist() == [True, False]


# ---------------------------------------------------------------------- what closed space does


def test_the_antipode_of_a_closed_space() -> None:
    """Hogg 1999, eq. 16 with Ok < 0: at √|Ok|·D/D_H = π all ways meet again, and beyond it a
    transverse distance has no meaning."""
    closed = {"H0": 70.0, "Om0": 1.5, "Ode0": 2.2}
    z = np.linspace(0.1, 20, 400)
    angle = np.sqrt(2.7) * distance_comoving(z, closed) / (299_792.458 / 70)
    across = distance_transverse(z, closed)
    assert angle[-1] > np.pi
    np.testing.assert_array_equal(np.isnan(across), angle > np.pi)
    near = angle < np.pi
    np.testing.assert_allclose(
        across[near], np.sin(angle[near]) * (299_792.458 / 70) / np.sqrt(2.7), rtol=1e-9, atol=1e-9
    )


def test_nearly_flat_space_joins_flat_space() -> None:
    """From Ok = −1e-12 through 0 to 1e-12 distance and volume do not jump."""
    flat = {"H0": 70.0, "Om0": 0.3, "Ode0": 0.7}
    for z in (0.01, 1.0, 10.0):
        for function in (distance_transverse, volume_comoving):
            here = function(z, cosmology=flat)
            for off in (-1e-12, -1e-15, 1e-15, 1e-12):
                there = function(z, cosmology=flat | {"Ode0": 0.7 + off})
                assert there == pytest.approx(here, rel=3e-11)


def test_the_reference_itself() -> None:
    """Peebles 1993: the flat universe's age, 2/(3√ΩΛ)·asinh√(ΩΛ/Ωm), tests the reference."""
    age = 2 / (3 * mp.sqrt(mpf("0.7"))) * mp.asinh(mp.sqrt(mpf("0.7") / mpf("0.3")))
    flat = UNIVERSES["flat"]
    assert abs(flat.age(0.0) / flat.hubble_time / age - 1) < 1e-16
    assert abs((flat.age(3.0) + flat.lookback(3.0)) / flat.age(0.0) - 1) < 1e-16
