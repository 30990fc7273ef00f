"""How the universe expands: E(z), its integrals and inverses, and the published parameter sets.

Definitions follow Hogg 1999 (astro-ph/9905116). Radiation counts, and so do massive neutrinos, by
the fit of Komatsu et al. 2011 (ApJS 192, 18, eq. 26). The variable is x = ln(1+z), u = 1+z = eˣ:
in x every integrand is smooth from today to the time of the last scattering and long before.
"""

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cache, cached_property, lru_cache
from math import factorial, floor, inf, isfinite, log1p, pi
from typing import Any, Final

import numpy as np
from numpy import cos, cosh
from numpy.typing import NDArray

from cellfuncs import constants
from cellfuncs.errors import DomainError, InputError, MissingInput, near_matches
from cellfuncs.symbols import (
    Expr,
    Real,
    either,
    exp,
    log,
    name,
    node,
    number_of,
    polynomial,
    sin,
    sinh,
    sqrt,
    total,
    within,
)

Floats = NDArray[np.float64]

HIGHEST_REDSHIFT: Final = 1e6
"""The radiation counted here (photons, three kinds of neutrino) holds after electrons and
positrons have annihilated, z ≈ 1e9; tables are kept up to here."""

GAUSS_ORDER: Final = 48
"""Nodes of the Gauss-Legendre sums: comoving distance to 2e-14 and age to 2e-12 for every z up to
100 000 (measured by tests/physics/compare_quadratures.py)."""

AGE_REACH: Final = 26.0
"""An age integral sums this far in x before its redshift; before that a power law is exact."""

# Komatsu et al. 2011, eq. 26, with the exponents astropy uses.
NEUTRINO_PREFACTOR: Final = 0.22710731766  # 7/8 (4/11)^(4/3)
NEUTRINO_TEMPERATURE: Final = 0.7137658555036082  # (4/11)^(1/3)
NEUTRINO_EXPONENT: Final = 1.83
NEUTRINO_INVERSE_EXPONENT: Final = 0.54644808743  # 1/1.83 as rounded there
NEUTRINO_SCALE: Final = 0.3173


@cache
def gauss_legendre(order: int = GAUSS_ORDER) -> tuple[Floats, Floats]:
    """Return nodes and weights, shape (order,) each, for the interval from 0 to 1."""
    nodes, weights = np.polynomial.legendre.leggauss(order)
    return (nodes + 1) / 2, weights / 2


def gauss_sum(f: Callable[[Real], Real]) -> Real:
    """Return ∫ f(t) dt from 0 to 1 by Gauss-Legendre nodes; of symbols where f gives symbols.

    Symbols sum over the hidden table `gauss_node`, `gauss_weight`.
    """
    nodes, weights = gauss_legendre()
    result = weights[0] * f(float(nodes[0]))
    if isinstance(result, Expr):
        return total(name("gauss_weight") * f(name("gauss_node")))
    for t, weight in zip(nodes[1:].tolist(), weights[1:].tolist(), strict=True):
        result = result + weight * f(t)
    return result


SERIES_ORDER: Final = 48
"""Terms of the series in q = Ok·(D/D_H)² for a volume; they hold every q that z ≤ 1e6 can reach,
the empty universe's 190 included."""

SMALLEST_BASE: Final = 1e-6
"""A power of a smaller q underflows, which some spreadsheet programs call an error."""


@cache
def volume_series() -> tuple[float, ...]:
    """Return the factors of q², q³, … in (sinh 2s − 2s)/4s³ with q = s²."""
    return tuple(2.0 ** (2 * n + 1) / float(factorial(2 * n + 3)) for n in range(2, SERIES_ORDER))


def volume_factor(q: Real) -> Real:
    """Return the volume within a comoving distance D over 4πD³.

    It is Hogg's eq. 29 without the differences, in which a nearly flat space loses all digits. One
    series serves all three spaces: q > 0 open, q < 0 closed, q = 0 flat. Symbols sum it over the
    hidden table `series_power`, `series_volume`; there the terms from q² on, below 1e-13 of the
    whole for a small q, take a base that does not underflow.
    """
    if isinstance(q, Expr):
        base = either(abs(q) < SMALLEST_BASE, lambda: SMALLEST_BASE, lambda: q)
        series = total(name("series_volume") * base ** name("series_power"))
        return 1 / 3 + q / 15 + series
    return polynomial(q, (1 / 3, 1 / 15, *volume_series()))


class Integral:
    """∫ f(x) dx of a smooth positive f, from 0 up to x and from x on to infinity.

    A symbol gives a Gauss-Legendre sum over the hidden table `gauss_node`, `gauss_weight`. Numbers
    are answered from piecewise polynomials that are made once, on first use; a call then costs a
    microsecond (tests/benchmarks/ compares it with quadrature at every call).
    """

    DEGREE = 6
    TOP = log1p(HIGHEST_REDSHIFT)
    COARSEST, FINEST = 32, 1024  # pieces per unit of x
    CHUNK = 8192  # elements that are worked on while they are in the processor's cache

    def __init__(self, integrand: Callable[[Real], Real]) -> None:
        self.integrand = integrand

    def up_to(self, x: Real) -> Real:
        """Return the integral from 0 to x."""
        if isinstance(x, float):
            return self._scalar(x, self._rows)
        if isinstance(x, Expr):
            return x * gauss_sum(lambda t: self.integrand(x * t))
        return self._column(x, self._pieces[0], 1.0)

    def beyond(self, x: Real) -> Real:
        """Return the integral from x to infinity."""
        if isinstance(x, float):
            return self._scalar(x, self._rows_beyond)
        if isinstance(x, Expr):
            return self.tail(x)
        return self._column(x, self._remainders, -1.0)

    def between(self, start: float, end: float) -> Real:
        """Return the integral over an interval by one Gauss-Legendre sum."""
        width = end - start
        return width * gauss_sum(lambda t: self.integrand(start + width * t))

    def tail(self, x: Real) -> Real:
        """Return the integral from x on by one sum and what a power law leaves beyond its reach."""
        end = x + AGE_REACH
        last = self.integrand(end)
        fall = log(last / self.integrand(end + 1))

        def summed() -> Real:
            # x + reach·t²: the nodes crowd where the integrand is large
            near = gauss_sum(lambda t: t * self.integrand(x + AGE_REACH * t**2))
            return 2 * AGE_REACH * near + last / fall

        return within(
            fall > 1e-6, fall, "this universe had no beginning: its past goes on for ever", summed
        )

    def inverse_up_to(self, value: Real) -> Real:
        """Return the x at which the integral from 0 equals `value`; NaN where there is none."""
        return self._solve(value, self._pieces[0])

    def inverse_beyond(self, value: Real) -> Real:
        """Return the x from which on the integral equals `value`; NaN where there is none."""
        return self._solve(-np.asarray(value), -self._remainders)

    def _fitted(self, per_unit: int) -> tuple[Floats, float]:
        """Return the pieces' coefficients, shape (pieces, DEGREE + 1), and their worst error."""
        count = int(self.TOP * per_unit) + 1
        spots = (1 - np.cos(pi * (np.arange(self.DEGREE + 1) + 0.5) / (self.DEGREE + 1))) / 2
        between = np.array([0.0, 0.5 * (spots[0] + spots[1]), 1.0])
        edges = np.arange(count)[:, None]
        with np.errstate(all="ignore"):
            values = self.integrand((edges + spots) / per_unit)
            truth = self.integrand((edges + between) / per_unit)
        fit = values @ np.linalg.inv(np.vander(spots, increasing=True)).T
        error = np.abs(fit @ np.vander(between, self.DEGREE + 1, increasing=True).T / truth - 1)
        # a piece that no polynomial fits holds a zero of E(z): nothing from there on is real
        fit[np.nanmax(np.nan_to_num(error, nan=np.inf), axis=1) > 1e-9] = np.nan
        return fit, float(np.nanmax(error, initial=0.0))

    @cached_property
    def _pieces(self) -> tuple[Floats, Floats, int]:
        """The integral from 0 at each piece's left edge, the local coefficients, pieces per unit.

        In a piece, with t from 0 to 1, the integral grows by c₀t + c₁t² + …
        """
        per_unit = self.COARSEST
        fit, error = self._fitted(per_unit)
        while error > 1e-12 and per_unit < self.FINEST:
            per_unit *= 2
            fit, error = self._fitted(per_unit)
        growth = fit / np.arange(1, self.DEGREE + 2) / per_unit
        left = np.concatenate([[0.0], np.cumsum(growth.sum(axis=1))[:-1]])
        return left, growth, per_unit

    @cached_property
    def _remainders(self) -> Floats:
        """The integral from each piece's left edge to infinity, summed from the far end."""
        _, growth, per_unit = self._pieces
        with np.errstate(all="ignore"):
            far = self.tail(len(growth) / per_unit)
        remainders: Floats = far + np.cumsum(growth.sum(axis=1)[::-1])[::-1]
        return remainders

    @cached_property
    def _rows(self) -> list[tuple[float, ...]]:
        left, growth, _ = self._pieces
        return [tuple(row) for row in np.column_stack([left, growth]).tolist()]

    @cached_property
    def _rows_beyond(self) -> list[tuple[float, ...]]:
        return [
            tuple(row) for row in np.column_stack([self._remainders, -self._pieces[1]]).tolist()
        ]

    @cached_property
    def _per_unit(self) -> int:
        return self._pieces[2]

    @cached_property
    def _terms(self) -> list[Floats]:
        return [np.ascontiguousarray(column) for column in self._pieces[1].T]

    def _scalar(self, x: float, rows: list[tuple[float, ...]]) -> float:
        t = float(x) * self._per_unit
        k = int(t)
        t -= k
        left, c0, c1, c2, c3, c4, c5, c6 = rows[k]
        return left + t * (c0 + t * (c1 + t * (c2 + t * (c3 + t * (c4 + t * (c5 + t * c6))))))

    def _column(self, x: Real, left: Floats, sign: float) -> Real:
        x = np.asarray(x, dtype=np.float64)
        result = np.empty(x.shape)
        flat, out = x.reshape(-1), result.reshape(-1)
        terms, per_unit = self._terms, self._per_unit
        for start in range(0, flat.size, self.CHUNK):
            t = flat[start : start + self.CHUNK] * per_unit
            with np.errstate(invalid="ignore"):
                k = t.astype(np.intp)
            t -= k
            piece = terms[-1].take(k, mode="clip")
            for term in terms[-2::-1]:
                piece *= t
                piece += term.take(k, mode="clip")
            piece *= sign * t
            piece += left.take(k, mode="clip")
            out[start : start + self.CHUNK] = piece
        return result

    def _solve(self, value: Real, left: Floats) -> Real:
        """Find the piece by its edges, then its t by Newton's method; the slope is the integrand"""
        with np.errstate(all="ignore"):
            return self._solved(np.asarray(value, dtype=np.float64), left)

    def _solved(self, value: Floats, left: Floats) -> Real:
        _, growth, per_unit = self._pieces
        real = int(np.argmax(~np.isfinite(left))) if not np.isfinite(left).all() else len(left)
        if real == 0:
            return np.full(value.shape, np.nan)
        k = np.clip(np.searchsorted(left[:real], value, side="right") - 1, 0, real - 1)
        rows, rest = growth[k], value - left[k]
        t = np.clip(rest / rows.sum(axis=-1), 0.0, 1.0)
        for _ in range(5):
            height = np.zeros_like(t)
            slope = np.zeros_like(t)
            for power in range(self.DEGREE, -1, -1):
                height = (height + rows[..., power]) * t
                slope = slope * t + (power + 1) * rows[..., power]
            t = t - (height - rest) / slope
        outside = (t < -1e-9) | (t > 1 + 1e-9) | (value < left[0])
        return np.where(outside, np.nan, (k + t) / per_unit)


@dataclass(frozen=True, eq=False)
class Cosmology:
    """A set of parameters, as numbers or as symbols, and what follows from it."""

    name: str
    h0: Real
    om0: Real
    ode0: Real
    w0: Real
    wa: Real
    tcmb0: Real
    neff: Real
    m_nu: tuple[Real, ...]
    ogamma0: Real
    onu0: Real
    ok0: Real
    neutrino_ratios: tuple[Real, ...]
    """Rest energy of each massive kind of neutrino over its thermal energy today."""

    def neutrino_factor(self, u: Real) -> Real:
        """Return the energy density of the neutrinos over that of the photons."""
        if not self.neutrino_ratios:
            return NEUTRINO_PREFACTOR * self.neff
        each = sum(
            (1 + (NEUTRINO_SCALE * ratio / u) ** NEUTRINO_EXPONENT) ** NEUTRINO_INVERSE_EXPONENT
            for ratio in self.neutrino_ratios
        )
        massless = len(self.m_nu) - len(self.neutrino_ratios)
        return NEUTRINO_PREFACTOR * self.neff / len(self.m_nu) * (massless + each)

    def dark_energy_factor(self, u: Real) -> Real:
        """Return the dark energy density over today's, w = w0 + wa·z/(1+z)."""
        power = 3 * (1 + self.w0 + self.wa)
        if not isinstance(power, Expr) and power == 0 and self.wa == 0:
            return 1.0
        factor = u**power
        if isinstance(self.wa, Expr) or self.wa != 0:
            factor = factor * exp(-3 * self.wa * (1 - 1 / u))
        return factor

    def expansion_squared(self, u: Real) -> Real:
        """Return E² = (H/H0)² at u = 1+z."""
        return (
            self.ogamma0 * (1 + self.neutrino_factor(u)) * u**4
            + self.om0 * u**3
            + self.ok0 * u**2
            + self.ode0 * self.dark_energy_factor(u)
        )

    def expansion_squared_slope(self, u: Real) -> Real:
        """Return dE²/dx at u = 1+z."""
        losses: Real = 0.0
        for ratio in self.neutrino_ratios:
            cold = (NEUTRINO_SCALE * ratio / u) ** NEUTRINO_EXPONENT
            losses = losses + cold * (1 + cold) ** (NEUTRINO_INVERSE_EXPONENT - 1)
        if self.neutrino_ratios:
            losses = NEUTRINO_PREFACTOR * self.neff / len(self.m_nu) * losses
        return (
            self.ogamma0 * (4 * (1 + self.neutrino_factor(u)) - losses) * u**4
            + 3 * self.om0 * u**3
            + 2 * self.ok0 * u**2
            + 3 * (1 + self.w0 + self.wa * (1 - 1 / u)) * self.ode0 * self.dark_energy_factor(u)
        )

    @cached_property
    def path(self) -> Integral:
        """∫ dz/E, the comoving distance in Hubble distances."""

        def integrand(x: Real) -> Real:
            u = exp(x)
            return u / sqrt(self.expansion_squared(u))

        return Integral(integrand)

    @cached_property
    def time(self) -> Integral:
        """∫ dz/((1+z)E), the time in Hubble times."""
        return Integral(lambda x: 1 / sqrt(self.expansion_squared(exp(x))))

    @property
    def age_in_hubble_times(self) -> Real:
        return self.time.beyond(node(0.0) if is_symbolic(self) else 0.0)

    def existed(self, z: Real) -> Real:
        """Tell whether this universe was, or will be, at redshift z: E² > 0 all the way there.

        For symbols only E² at z itself is looked at; a plain formula asks `sums_errors` besides.
        """
        real = self.expansion_squared(1 + z) > 0
        if isinstance(real, Expr):
            return real
        x = np.log1p(np.maximum(z, 0.0))
        return real & np.isfinite(self.path.up_to(x if isinstance(z, np.ndarray) else float(x)))

    @property
    def hubble_distance(self) -> Real:
        """Mpc"""
        return constants.LIGHT_SPEED / self.h0

    @property
    def hubble_time(self) -> Real:
        """Gyr"""
        return constants.HUBBLE_GYR / self.h0

    def transverse(self, comoving: Real) -> Real:
        """Return the transverse comoving distance for a line-of-sight one, in Mpc (Hogg eq. 16)."""
        if type(self.ok0) is float and self.ok0 == 0:
            return comoving

        def open_space() -> Real:
            scale = self.hubble_distance / sqrt(self.ok0)
            return scale * sinh(comoving / scale)

        def closed_space() -> Real:
            scale = self.hubble_distance / sqrt(-self.ok0)
            return within(
                comoving / scale <= pi,
                comoving / scale,
                "the distance, {} radians of a closed space, is beyond the antipode",
                lambda: scale * sin(comoving / scale),
            )

        return either(
            self.ok0 > 0,
            open_space,
            lambda: either(self.ok0 < 0, closed_space, lambda: comoving),
        )

    def sums_compared(self) -> dict[str, tuple[Real, Real]]:
        """Return each integral as one Gauss-Legendre sum and as several.

        A universe that nearly stood still, or never began, has an E(z) that one sum over a fixed
        table cannot follow: the two then differ. Only a plain formula needs to ask. The age as
        several sums lacks the lookback time, the sum that `time` has.
        """
        top = Integral.TOP
        pieces = ((0.0, 1.0), (1.0, 2.5), (2.5, top))
        path, time = (
            sum(integral.between(*piece) for piece in pieces) for integral in (self.path, self.time)
        )
        return {
            "path": (self.path.between(0.0, top), path),
            "time": (self.time.between(0.0, top), time),
            "age": (self.time.tail(node(0.0)), self.time.tail(node(top))),
        }

    def curvature(self, comoving: Real) -> Real:
        """Return Ok·(D/D_H)² of a comoving distance in Mpc."""
        return self.ok0 * (comoving / self.hubble_distance) ** 2

    def redshift_at_luminosity_distance(self, distance: Real) -> Real:
        """Return z for a luminosity distance in Mpc, the lowest where there are several."""
        left, _, per_unit = self.path._pieces
        edges = np.arange(len(left)) / per_unit

        def reached(x: Real, comoving: Real) -> Real:
            return exp(x) * self.transverse(comoving * self.hubble_distance)

        with np.errstate(all="ignore"):
            heights = reached(edges, left)
            real = int(np.argmax(~np.isfinite(heights))) if np.isnan(heights).any() else len(edges)
            value = np.asarray(distance, dtype=np.float64)
            climbing = np.maximum.accumulate(heights[:real])
            k = np.clip(np.searchsorted(climbing, value, side="left") - 1, 0, real - 2)
            low, high = edges[k], edges[k + 1]
            x = low + (high - low) * np.clip(
                (value - heights[k]) / (heights[k + 1] - heights[k]), 0, 1
            )
            for _ in range(6):
                along = self.path.up_to(np.asarray(x))
                comoving = along * self.hubble_distance
                across = self.transverse(comoving)
                turn = 1.0
                if self.ok0 > 0:
                    turn = cosh(comoving * sqrt(self.ok0) / self.hubble_distance)
                elif self.ok0 < 0:
                    turn = cos(comoving * sqrt(-self.ok0) / self.hubble_distance)
                slope = exp(x) * (across + turn * self.hubble_distance * self.path.integrand(x))
                x = np.clip(x - (exp(x) * across - value) / slope, low, high)
        return np.where((value < 0) | (value > climbing[-1]), np.nan, np.expm1(x))


def derived(
    name: str,
    h0: Real,
    om0: Real,
    ode0: Real | None,
    w0: Real,
    wa: Real,
    tcmb0: Real,
    neff: Real,
    m_nu: tuple[Real, ...],
) -> Cosmology:
    """Return the set with the densities that follow from its parameters.

    Arguments are numbers or symbols. `ode0` None stands for a flat universe; `m_nu` is in eV, one a
    kind of neutrino.
    """
    critical = 3 * (h0 * 1e3 / (constants.KM_PER_MPC * 1e3)) ** 2 / (8 * pi * constants.GRAVITATION)
    light = (constants.LIGHT_SPEED * 1e3) ** 3
    ogamma0 = 4 * constants.STEFAN_BOLTZMANN / light * tcmb0**4 / critical
    thermal = constants.BOLTZMANN / constants.ELECTRON_VOLT * NEUTRINO_TEMPERATURE * tcmb0
    warm = tcmb0 > 0
    ratios = tuple(
        either(warm, lambda mass=mass: mass / thermal, lambda: 0.0)  # type: ignore[misc]
        for mass in m_nu
        if isinstance(mass, Expr) or mass > 0
    )
    if warm is False:
        ratios = ()
    seed = Cosmology(name, h0, om0, 0.0, w0, wa, tcmb0, neff, m_nu, ogamma0, 0.0, 0.0, ratios)
    onu0 = ogamma0 * seed.neutrino_factor(1.0)
    rest = 1 - om0 - ogamma0 - onu0
    return Cosmology(
        name=name,
        h0=h0,
        om0=om0,
        ode0=rest if ode0 is None else ode0,
        w0=w0,
        wa=wa,
        tcmb0=tcmb0,
        neff=neff,
        m_nu=m_nu,
        ogamma0=ogamma0,
        onu0=onu0,
        ok0=0.0 if ode0 is None else rest - ode0,
        neutrino_ratios=ratios,
    )


@dataclass(frozen=True)
class Parameter:
    """What a parameter of a set is called, its unit, its meaning, and its default."""

    unit: str
    meaning: str
    default: float | None
    at_least: float | None = None
    above: float | None = None


PARAMETERS: Final[Mapping[str, Parameter]] = {
    "H0": Parameter("km.s-1.Mpc-1", "Hubble constant", None, above=0.0),
    "Om0": Parameter("", "matter density over the critical one", None, at_least=0.0),
    "Ode0": Parameter("", "dark energy density over the critical one; left out: flat", None),
    "w0": Parameter("", "dark energy's equation of state today", -1.0),
    "wa": Parameter("", "change of dark energy: w = w0 + wa·z/(1+z)", 0.0),
    "Tcmb0": Parameter("K", "temperature of the microwave background", 0.0, at_least=0.0),
    "Neff": Parameter("", "effective number of neutrino kinds", 3.04, at_least=0.0),
    "m_nu": Parameter("eV", "mass of the neutrinos: one for all kinds, or one each", 0.0, 0.0),
}
"""The parameters that a user may give; defaults are astropy's."""

PUBLISHED: Final[Mapping[str, tuple[str, dict[str, Any]]]] = {
    "Planck18": (
        "Planck Collaboration 2020, A&A 641, A6, Table 2 (TT, TE, EE + lowE + lensing + BAO)",
        {"H0": 67.66, "Om0": 0.30966, "Tcmb0": 2.7255, "Neff": 3.046, "m_nu": (0.0, 0.0, 0.06)},
    ),
    "Planck15": (
        "Planck Collaboration 2016, A&A 594, A13, Table 4 (TT, TE, EE + lowP + lensing + ext)",
        {"H0": 67.74, "Om0": 0.3075, "Tcmb0": 2.7255, "Neff": 3.046, "m_nu": (0.0, 0.0, 0.06)},
    ),
    "Planck13": (
        "Planck Collaboration 2014, A&A 571, A16, Table 5 (Planck + WP + highL + BAO)",
        {"H0": 67.77, "Om0": 0.30712, "Tcmb0": 2.7255, "Neff": 3.046, "m_nu": (0.0, 0.0, 0.06)},
    ),
    "WMAP9": (
        "Hinshaw et al. 2013, ApJS 208, 19, Table 4 (WMAP9 + eCMB + BAO + H0)",
        {"H0": 69.32, "Om0": 0.2865, "Tcmb0": 2.725, "Neff": 3.04, "m_nu": (0.0, 0.0, 0.0)},
    ),
    "WMAP7": (
        "Komatsu et al. 2011, ApJS 192, 18, Table 1 (WMAP + BAO + H0 ML)",
        {"H0": 70.4, "Om0": 0.272, "Tcmb0": 2.725, "Neff": 3.04, "m_nu": (0.0, 0.0, 0.0)},
    ),
    "WMAP5": (
        "Komatsu et al. 2009, ApJS 180, 330, Table 1 (WMAP + BAO + SN ML)",
        {"H0": 70.2, "Om0": 0.277, "Tcmb0": 2.725, "Neff": 3.04, "m_nu": (0.0, 0.0, 0.0)},
    ),
}
"""Name, source and parameters of each published set, as astropy realises it (all flat)."""

DEFAULT: Final = "Planck18"


def _parameter(key: str, value: Any) -> float:
    if isinstance(value, (bool, str, bytes)) or value is None:
        raise InputError(f"cosmology: {key} is {value!r}, not a number")
    try:
        number = float(value)
    except (TypeError, ValueError):
        raise InputError(f"cosmology: {key} is {value!r}, not a number") from None
    except OverflowError:
        raise DomainError(f"cosmology: {key} is too large") from None
    limits = PARAMETERS[key]
    if not isfinite(number) or abs(number) > 1e6:
        raise DomainError(f"cosmology: {key} is {number:g}; it must be between -1e6 and 1e6")
    if limits.above is not None and not number > limits.above:
        raise DomainError(f"cosmology: {key} is {number:g}; it must be above {limits.above:g}")
    if limits.at_least is not None and not number >= limits.at_least:
        raise DomainError(f"cosmology: {key} is {number:g}; it must be {limits.at_least:g} or more")
    return number


def _masses(value: Any, kinds: int) -> tuple[float, ...]:
    if isinstance(value, str):
        try:
            value = [float(part) for part in value.split(",")]
        except ValueError:
            raise InputError(
                f"cosmology: m_nu is {value!r}; give one mass in eV, or one a kind: 0, 0, 0.06"
            ) from None
    if np.ndim(value) == 0:
        return (_parameter("m_nu", value),) * kinds
    masses = tuple(_parameter("m_nu", mass) for mass in value)
    if len(masses) != kinds:
        raise InputError(
            f"cosmology: m_nu names {len(masses)} masses, but Neff allows {kinds} kinds of neutrino"
        )
    return masses


@lru_cache(maxsize=256)
def _own(items: tuple[tuple[str, Any], ...], label: str) -> Cosmology:
    given = dict(items)
    for key in ("H0", "Om0"):
        if key not in given:
            raise MissingInput(f"cosmology: {key} is missing; H0 and Om0 must be given")
    number = {
        key: _parameter(key, given.get(key, parameter.default))
        for key, parameter in PARAMETERS.items()
        if key not in ("Ode0", "m_nu")
    }
    if number["Neff"] >= 1000:
        raise DomainError(f"cosmology: Neff is {number['Neff']:g}; it must be below 1000")
    kinds = floor(number["Neff"])
    dark_energy = _parameter("Ode0", given["Ode0"]) if "Ode0" in given else None
    masses = _masses(given.get("m_nu", 0.0), kinds)
    with np.errstate(all="ignore"):
        return derived(
            label,
            number["H0"],
            number["Om0"],
            dark_energy,
            number["w0"],
            number["wa"],
            number["Tcmb0"],
            number["Neff"],
            masses,
        )


@cache
def published(set_name: str) -> Cosmology:
    """Return a published set by its exact name."""
    return _own(tuple(PUBLISHED[set_name][1].items()), set_name)


_BY_FOLDED_NAME = {set_name.casefold(): set_name for set_name in PUBLISHED}
_BY_FOLDED_PARAMETER = {key.casefold(): key for key in PARAMETERS}


def _plain(value: Any) -> Any:
    """Return a parameter's value in a form that can be compared and kept."""
    if isinstance(value, np.ndarray):
        value = value.tolist()
    if isinstance(value, (list, tuple)):
        return tuple(_plain(each) for each in value)
    if isinstance(value, (str, bool)) or value is None:
        return value
    try:
        return float(value)
    except OverflowError:
        return inf
    except (TypeError, ValueError, ArithmeticError):
        return repr(value)


def cosmology_from(given: Any) -> Cosmology:
    """Return the set that a name, a mapping or a two-column range stands for.

    Raises InputError for an unknown name or parameter, DomainError for a value out of its range,
    MissingInput where H0 or Om0 is missing.
    """
    if isinstance(given, Cosmology):
        return given
    if isinstance(given, str):
        found = _BY_FOLDED_NAME.get(given.strip().casefold())
        if found is None:
            raise InputError(
                f"cosmology: {given!r} is not a published set ({near_matches(given, PUBLISHED)})"
            )
        return published(found)
    items = list(given.items()) if isinstance(given, Mapping) else _rows_of(given)
    own: dict[str, Any] = {}
    for key, value in items:
        if not isinstance(key, str):
            if _is_blank(key) and _is_blank(value):
                continue
            raise InputError(f"cosmology: {key!r} stands where a parameter's name belongs")
        if not key.strip() and _is_blank(value):
            continue
        known = _BY_FOLDED_PARAMETER.get(key.strip().casefold())
        if known is None:
            raise InputError(
                f"cosmology: {key!r} is not a parameter ({near_matches(key, PARAMETERS)})"
            )
        if known in own and known != "m_nu":
            raise InputError(f"cosmology: {known} is given twice")
        if known in own:
            # a range has a row for the mass of each kind of neutrino
            masses = own[known] if isinstance(own[known], tuple) else (own[known],)
            own[known] = (*masses, _plain(value))
        elif not _is_blank(value):
            own[known] = _plain(value)
    return _own(tuple(sorted(own.items())), "own")


def _is_blank(value: Any) -> bool:
    if isinstance(value, str):
        return not value.strip()
    return value is None or (isinstance(value, float) and value != value)


def _rows_of(given: Any) -> list[tuple[Any, Any]]:
    shape_needed = "cosmology: give a set's name, or two columns: parameter and value"
    if not isinstance(given, (list, tuple, np.ndarray)):
        raise InputError(shape_needed)
    rows = []
    for row in given:
        if not isinstance(row, (list, tuple, np.ndarray)) or len(row) != 2:
            raise InputError(shape_needed)
        rows.append((row[0], row[1]))
    return rows


def redshift_of(x: Real) -> Real:
    """Return z of x = ln(1+z)."""
    return np.expm1(x)


def is_symbolic(cosmology: Cosmology) -> bool:
    """Tell whether the set stands for cells rather than numbers."""
    return isinstance(cosmology.h0, Expr) and number_of(cosmology.h0) is None
