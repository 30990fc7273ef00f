"""Which redshift puts measured wavelengths on lines of the table, and whether that can be chance.

In x = ln(1+z) each measured line i and each table line l vote for one redshift, ln λᵢ − ln λₗ with
the error sᵢ = σᵢ/λᵢ: lines of one source vote for the same, within their errors. Every vote is a
first guess; each is refined by the weighted mean of the votes that agree with it.

The merit of a redshift is the logarithm of how much better it explains the wavelengths than chance
does. A line that falls on the table gains

    ln[(1−f)/f · W/(K·√(2π)·σ)] − d²/2

where W is the width of the spectrum, K how many table lines fall into it at that redshift, d the
distance from the line in σ, and f the share of lines that are false. One that gains nothing counts
as not identified. So a match means little where the table is dense and much where it is sparse.
All lines of the table are taken for equally likely; none is missed for not being there.

The chance is the expected number of redshifts of at least that merit among wavelengths that are
scattered over the spectrum without any order. For k of n lines it is

    C(n,k) ∫ μ(x)ᵏ Vₖ dx,  μ = Σ λₗeˣ/W over the lines in the spectrum,  Vₖ = √k s^(k−1) B(k−1, r)

with B(m, r) the volume of the m-dimensional ball of radius r, r² = 2(k·gain − merit): the votes of
k lines that agree so well. It sums over all of the redshifts searched, so the number of trials is
in it. Where another redshift is nearly as good, the weight of the others against the best one is a
chance too; the larger of the two is told.
"""

from dataclasses import dataclass
from functools import cache, lru_cache
from math import comb, expm1, gamma, log, log1p, pi, sqrt
from typing import Final

import numpy as np
from numpy.typing import NDArray

from cellfuncs.errors import NotFound
from cellfuncs.physics.lines import lines

Floats = NDArray[np.float64]

ASSUMED_ERROR: Final = 0.5
"""Angstrom: of a wavelength measured by eye in a spectrum of moderate resolution (common practice,
no source)"""

FALSE_SHARE: Final = 0.2
"""How many of the measured lines are expected to be something else: noise, sky, another source"""

LIKE_MERIT: Final = log(100)
"""A redshift is named beside the best one where it is less than a hundred times less likely"""

STRENGTHS: Final = (0.1, 10.0)
"""Beyond these a strength, over the usual one, tells no more"""

TURNS: Final = 4
"""Refinements of a first guess"""


def relative(strengths: Floats) -> Floats:
    """Return strengths over their median, whatever their sign; 1 where there is none (NaN)."""
    sizes = abs(strengths)
    known = sizes[~np.isnan(sizes)]
    usual = float(np.median(known)) if known.size else 1.0
    return np.clip(np.nan_to_num(sizes / (usual or 1.0), nan=1.0), *STRENGTHS)


@dataclass(frozen=True)
class Solution:
    """A redshift and the table line (None: not identified) of each measured line."""

    z: float
    sigma: float
    names: tuple[str | None, ...]
    merit: float

    @property
    def count(self) -> int:
        return sum(name is not None for name in self.names)


@dataclass(frozen=True)
class Identification:
    """The best solution, how likely it is by chance, and others of like merit, best first."""

    best: Solution
    chance: float
    rivals: tuple[Solution, ...]


@cache
def _table() -> tuple[Floats, Floats, tuple[str, ...]]:
    """Return the wavelengths' logarithms, the sums of wavelengths up to each, and the names."""
    wavelengths = np.array([line.vacuum for line in lines()])
    sums = np.concatenate([[0.0], np.cumsum(wavelengths)])
    return np.log(wavelengths), sums, tuple(line.name for line in lines())


class _Spectrum:
    """Measured lines as the search needs them, one element a line."""

    def __init__(self, wavelengths: Floats, errors: Floats, strengths: Floats) -> None:
        self.count = len(wavelengths)
        self.x = np.log(wavelengths)
        self.s = errors / wavelengths
        span = wavelengths.max() - wavelengths.min()
        margin = span / (self.count - 1)
        self.low, self.high = wavelengths.min() - margin, wavelengths.max() + margin
        self.low = max(self.low, wavelengths.min() / 2)
        self.width = self.high - self.low
        # a line twice as strong as the usual is half as likely to be false
        self.odds = (1 - FALSE_SHARE) / FALSE_SHARE * strengths
        self.gain = np.log(self.odds * self.width / (sqrt(2 * pi) * errors))
        self.usual_gain = float(self.gain.mean())
        self.usual_s = float(np.exp(np.log(self.s).mean()))

    def table_lines(self, x: Floats) -> tuple[Floats, Floats]:
        """Return K and μ at each redshift."""
        table, sums, _ = _table()
        first = np.searchsorted(table, log(self.low) - x)
        last = np.searchsorted(table, log(self.high) - x)
        return (last - first).astype(float), np.exp(x) * (sums[last] - sums[first]) / self.width

    def votes(self, low: float, high: float) -> Floats:
        table, _, _ = _table()
        all_votes = (self.x[:, None] - table).reshape(-1)
        return np.unique(all_votes[(all_votes >= low) & (all_votes <= high)])

    def nearest(self, x: Floats) -> tuple[NDArray[np.intp], Floats]:
        """Return the nearest table line of each measured line at each redshift, and its vote's
        distance from that redshift in x; shapes (redshifts, lines)."""
        table, _, _ = _table()
        rest = self.x - x[:, None]
        above = np.clip(np.searchsorted(table, rest), 1, len(table) - 1)
        nearest = np.where(rest - table[above - 1] < table[above] - rest, above - 1, above)
        return nearest, rest - table[nearest]

    def matched(
        self, x: Floats, error: Floats | float
    ) -> tuple[NDArray[np.intp], Floats, NDArray[np.bool_], Floats]:
        """Return the nearest lines, their distances, which count, and the merit of each redshift.

        `error` is that of the redshift itself, as long as it is a guess.
        """
        nearest, distances = self.nearest(x)
        there, _ = self.table_lines(x)
        gains = self.gain - np.log(np.maximum(there, 1.0))[:, None]
        gains = gains - distances**2 / (2 * (self.s**2 + np.square(error)))
        counts = gains > 0
        for one in range(self.count):
            for other in range(one):
                # a table line is one measured line, not two
                twice = counts[:, one] & counts[:, other] & (nearest[:, one] == nearest[:, other])
                if twice.any():
                    worse = gains[:, one] < gains[:, other]
                    counts[twice & worse, one] = False
                    counts[twice & ~worse, other] = False
        return nearest, distances, counts, np.where(counts, gains, 0.0).sum(axis=1)


def identify(
    wavelengths: Floats, errors: Floats, strengths: Floats, z_min: float, z_max: float
) -> Identification:
    """Return the redshift between the limits that explains the wavelengths best.

    wavelengths: in vacuum, Angstrom, two or more that differ
    errors: 1 σ, Angstrom
    strengths: as `relative` gives them
    Raises NotFound where no redshift puts two lines or more on the table.
    """
    columns = (tuple(each.tolist()) for each in (wavelengths, errors, strengths))
    return _identified(*columns, z_min, z_max)


# several cells ask for parts of one solution
@lru_cache(maxsize=128)
def _identified(
    wavelengths: tuple[float, ...],
    errors: tuple[float, ...],
    strengths: tuple[float, ...],
    z_min: float,
    z_max: float,
) -> Identification:
    spectrum = _Spectrum(np.array(wavelengths), np.array(errors), np.array(strengths))
    limits = log1p(z_min), log1p(z_max)
    x = spectrum.votes(*limits)
    weights = 1 / spectrum.s**2
    error: Floats | float = spectrum.usual_s
    for _ in range(TURNS):
        _, distances, counts, _ = spectrum.matched(x, error)
        weight = np.where(counts, weights, 0.0)
        total = np.maximum(weight.sum(axis=1), weights.min())
        x = x + (weight * distances).sum(axis=1) / total
        error = 0.0
    nearest, _, counts, merits = spectrum.matched(x, 0.0)
    slack = 3 * spectrum.usual_s
    good = (counts.sum(axis=1) >= 2) & (x >= limits[0] - slack) & (x <= limits[1] + slack)
    if not good.any():
        raise NotFound(
            f"no redshift from {z_min:g} to {z_max:g} puts two of the {spectrum.count} lines on"
            " lines of the table"
        )
    order = np.flatnonzero(good)
    order = order[np.argsort(-merits[order], kind="stable")]
    solutions = _distinct(spectrum, order, x, nearest, counts, merits)
    best, *others = solutions
    weight_of_others = sum(np.exp(other.merit - best.merit) for other in others)
    by_chance = -expm1(-_expected(spectrum, best.merit, *limits))
    return Identification(
        best=best,
        chance=float(max(by_chance, weight_of_others / (1 + weight_of_others))),
        rivals=tuple(other for other in others if best.merit - other.merit < LIKE_MERIT),
    )


def _distinct(
    spectrum: _Spectrum,
    order: NDArray[np.intp],
    x: Floats,
    nearest: NDArray[np.intp],
    counts: NDArray[np.bool_],
    merits: Floats,
) -> list[Solution]:
    """Return the solutions that are not one another's neighbours, the best first."""
    _, _, names = _table()
    found: list[Solution] = []
    taken: list[tuple[float, float]] = []
    for at in order.tolist():
        if found and merits[at] < found[0].merit - 2 * LIKE_MERIT:
            break
        error = 1 / sqrt((1 / spectrum.s[counts[at]] ** 2).sum())
        if any(abs(x[at] - other) < 4 * (error + others) for other, others in taken):
            continue
        taken.append((float(x[at]), error))
        z = float(np.expm1(x[at]))
        found.append(
            Solution(
                z=z,
                sigma=(1 + z) * error,
                names=tuple(
                    names[line] if counted else None
                    for line, counted in zip(nearest[at], counts[at], strict=True)
                ),
                merit=float(merits[at]),
            )
        )
    return found


def _expected(spectrum: _Spectrum, merit: float, low: float, high: float) -> float:
    """Return how many redshifts of that merit wavelengths without order are expected to have."""
    # fine enough for a line to be met on its way through a narrow spectrum
    steps = (high - low) / log(spectrum.high / spectrum.low) * 8
    x = np.linspace(low, high, int(min(max(steps, 512.0), 16_384.0)) + 1)
    there, density = spectrum.table_lines(x)
    gain = spectrum.usual_gain - np.log(np.maximum(there, 1.0))
    expected = 0.0
    for k in range(2, spectrum.count + 1):
        radius = np.sqrt(np.maximum(2 * (k * gain - merit), 0.0))
        ball = pi ** ((k - 1) / 2) / gamma((k + 1) / 2) * radius ** (k - 1)
        volume = sqrt(k) * spectrum.usual_s ** (k - 1) * ball
        expected += comb(spectrum.count, k) * float(np.trapezoid(density**k * volume, x))
    return expected
