"""Samples of measurements: weighted means, dispersions of velocities, the linear law's fit.

Each function takes one-dimensional arrays of numbers, without gaps, and says in a DomainError what
cannot be had from so few. Sums come first and differences from a mean second, so that a velocity
of 30 000 km/s with a dispersion of 30 keeps its digits.
"""

from collections.abc import Callable
from dataclasses import dataclass
from math import pi
from typing import Final

import numpy as np
from numpy import sqrt
from numpy.typing import NDArray

from cellfuncs.errors import DomainError

Floats = NDArray[np.float64]

LOCATION_TUNING: Final = 6.0
SCALE_TUNING: Final = 9.0
"""Median absolute deviations at which a value counts for nothing: Beers et al. 1990, after eqs. 5
and 9"""


def enough(count: int, needed: int, what: str, each: str) -> None:
    """Raise where there are fewer than needed."""
    if count < needed:
        raise DomainError(f"{what} needs {needed} {each} or more; there {_are(count)}")


def _are(count: int) -> str:
    return f"is {count}" if count == 1 else f"are {count}"


# Weighted mean ------------------------------------------------------------------------------------


@dataclass(frozen=True)
class WeightedMean:
    """A mean with weights 1/σ²: Bevington & Robinson 2003, eqs. 4.17 and 4.19."""

    mean: float
    sigma: float
    chi2: float
    count: int


def weighted_mean(values: Floats, sigmas: Floats) -> WeightedMean:
    """Return the mean of values with errors, its error, and χ² about it (n − 1 free)."""
    # the smallest error as unit: its square would not be a float where it is below 1e-154
    smallest = sigmas.min()
    weights = (smallest / sigmas) ** 2
    weight = weights.sum()
    start = values[0]
    mean = start + (weights * (values - start)).sum() / weight
    return WeightedMean(
        mean=float(mean),
        sigma=float(smallest / sqrt(weight)),
        chi2=float((((values - mean) / sigmas) ** 2).sum()),
        count=len(values),
    )


# Location and scale -------------------------------------------------------------------------------


def _biweight_weights(velocities: Floats, tuning: float) -> tuple[Floats, Floats, Floats]:
    """Return the distances d from the median, 1 − u² and u², with u = 1 for all that is beyond."""
    distances = velocities - np.median(velocities)
    spread = np.median(abs(distances))
    if not spread > 0:
        raise DomainError(
            "more than half of the velocities are equal, which the biweight cannot weigh;"
            ' "gapper" and "standard" can'
        )
    u_squared = np.minimum(abs(distances / (tuning * spread)), 1.0) ** 2
    return distances, 1 - u_squared, u_squared


def biweight_center(velocities: Floats) -> float:
    """Return the biweight location: Beers et al. 1990, eq. 5."""
    median = float(np.median(velocities))
    if (abs(velocities - median) == 0).sum() * 2 > len(velocities):
        # whatever the others are, the weights of these tend to all there is
        return median
    distances, inside, _ = _biweight_weights(velocities, LOCATION_TUNING)
    weights = inside**2
    return median + float((weights * distances).sum() / weights.sum())


def biweight_dispersion(velocities: Floats) -> float:
    """Return the biweight scale: Beers et al. 1990, eq. 9."""
    distances, inside, u_squared = _biweight_weights(velocities, SCALE_TUNING)
    above = (distances**2 * inside**4).sum()
    below = (inside * (1 - 5 * u_squared)).sum()
    return float(sqrt(len(velocities) * above) / abs(below))


def gapper_dispersion(velocities: Floats) -> float:
    """Return the scale by weighted gaps: Wainer & Thissen 1976; Beers et al. 1990, eq. 8."""
    count = len(velocities)
    gaps = np.diff(np.sort(velocities))
    rank = np.arange(1, count)
    return float(sqrt(pi) / (count * (count - 1)) * (rank * (count - rank) * gaps).sum())


def standard_dispersion(velocities: Floats) -> float:
    """Return the standard deviation with n − 1."""
    return float(np.std(velocities, ddof=1))


DISPERSIONS: Final[dict[str, Callable[[Floats], float]]] = {
    "biweight": biweight_dispersion,
    "gapper": gapper_dispersion,
    "standard": standard_dispersion,
}


def center(velocities: Floats, method: str) -> float:
    """Return the mean for "standard", the biweight location for the robust methods."""
    if method == "standard":
        return float(np.mean(velocities))
    return biweight_center(velocities)


def dispersion(velocities: Floats, method: str) -> float:
    """Return the dispersion of two velocities or more that are not all equal."""
    enough(len(velocities), 2, "a dispersion", "velocities")
    if (velocities == velocities[0]).all():
        raise DomainError(
            f"all {len(velocities)} velocities are {velocities[0]:.10g} km/s: there is no spread"
            " to measure"
        )
    return DISPERSIONS[method](velocities)


def dispersion_error(velocities: Floats, method: str) -> float:
    """Return the 1-σ error of the dispersion.

    For "standard" that of a normal sample, σ/√(2(n−1)). For the robust methods the jackknife:
    Beers et al. 1990, sect. 2.3; Efron & Tibshirani 1993, eq. 11.5.
    """
    count = len(velocities)
    scale = dispersion(velocities, method)
    if method == "standard":
        return float(scale / sqrt(2 * (count - 1)))
    enough(count, 3, "the error of a dispersion", "velocities")
    scale_of = DISPERSIONS[method]
    without = np.array([scale_of(np.delete(velocities, at)) for at in range(count)])
    return float(sqrt((count - 1) * np.var(without)))


# The linear law -----------------------------------------------------------------------------------


@dataclass(frozen=True)
class LinearFit:
    """v = intercept + slope·d by least squares; `errors_known` tells that sigmas were given."""

    slope: float
    intercept: float
    count: int
    free: int
    squares: float
    weighted_squares: float
    weight: float
    curvature: float
    errors_known: bool

    @property
    def slope_error(self) -> float:
        """From the errors given; without any, from the scatter about the line."""
        if self.errors_known:
            return float(1 / sqrt(self.curvature))
        self._enough("the error of a slope without sigmas")
        return float(sqrt(self.weighted_squares / self.free / self.curvature))

    @property
    def scatter(self) -> float:
        """The rms of the residuals with as many degrees of freedom as are left, unweighted."""
        self._enough("the scatter about a line")
        return float(sqrt(self.squares / self.free))

    def _enough(self, what: str) -> None:
        enough(self.count, self.count - self.free + 1, what, "distances with a velocity")


def linear_fit(
    distances: Floats, velocities: Floats, sigmas: Floats | None, through_origin: bool
) -> LinearFit:
    """Return the straight line: Bevington & Robinson 2003, eqs. 6.12 and 6.21 to 6.23."""
    count = len(distances)
    if through_origin:
        if not distances.any():
            raise DomainError("every distance is 0: a line through the origin has no slope there")
    else:
        enough(count, 2, "a line that need not go through the origin", "distances with a velocity")
        if (distances == distances[0]).all():
            raise DomainError(
                f"all {count} distances are {distances[0]:.10g} Mpc: a line that need not go"
                " through the origin has no slope there"
            )
    unit = 1.0 if sigmas is None else sigmas.min()
    weights = np.ones(count) if sigmas is None else (unit / sigmas) ** 2
    weight = weights.sum()
    middle = height = 0.0
    if not through_origin:
        middle = (weights * distances).sum() / weight
        height = (weights * velocities).sum() / weight
    along = distances - middle
    curvature = (weights * along**2).sum()
    slope = (weights * along * (velocities - height)).sum() / curvature
    intercept = height - slope * middle
    residuals = velocities - height - slope * along
    return LinearFit(
        slope=float(slope),
        intercept=float(intercept),
        count=count,
        free=count - (1 if through_origin else 2),
        squares=float((residuals**2).sum()),
        weighted_squares=float((weights * residuals**2).sum()),
        weight=float(weight),
        curvature=float(curvature / unit**2),
        errors_known=sigmas is not None,
    )
