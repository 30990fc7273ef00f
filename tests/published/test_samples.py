"""Samples that were published, and the statistics of other libraries over them."""

from collections.abc import Callable
from itertools import combinations
from math import cos, radians, sin, sqrt
from typing import Any

import numpy as np
import pytest
import scipy.stats
from astropy.stats import biweight_location, biweight_scale, jackknife_stats
from numpy.typing import NDArray
from scipy.optimize import curve_fit

from cellfuncs import hubble_fit, mean_weighted, velocity_dispersion

Floats = NDArray[np.float64]

# Hubble's table of 24 nebulae ---------------------------------------------------------------------

# Outside: Hubble 1929, PNAS 15, 168, table 1: distance in Mpc, velocity in km/s (read from the text
# of the printed page that the package gemini-ocr 0.4.0 carries). Right ascension in hours and
# declination in degrees, J2000: values from memory.
NEBULAE: dict[str, tuple[float, float, float, float]] = {
    "S. Mag.": (0.032, 170, 0.88, -72.8),
    "L. Mag.": (0.034, 290, 5.39, -69.8),
    "6822": (0.214, -130, 19.75, -14.8),
    "598": (0.263, -70, 1.56, 30.7),
    "221": (0.275, -185, 0.71, 40.9),
    "224": (0.275, -220, 0.71, 41.3),
    "5457": (0.45, 200, 14.05, 54.3),
    "4736": (0.5, 290, 12.85, 41.1),
    "5194": (0.5, 270, 13.50, 47.2),
    "4449": (0.63, 200, 12.47, 44.1),
    "4214": (0.8, 300, 12.26, 36.3),
    "3031": (0.9, -30, 9.93, 69.1),
    "3627": (0.9, 650, 11.34, 13.0),
    "4826": (0.9, 150, 12.95, 21.7),
    "5236": (0.9, 500, 13.62, -29.9),
    "1068": (1.0, 920, 2.71, 0.0),
    "5055": (1.1, 450, 13.26, 42.0),
    "7331": (1.1, 500, 22.62, 34.4),
    "4258": (1.4, 500, 12.32, 47.3),
    "4151": (1.7, 960, 12.18, 39.4),
    "4382": (2.0, 500, 12.42, 18.2),
    "4472": (2.0, 850, 12.50, 8.0),
    "4486": (2.0, 800, 12.51, 12.4),
    "4649": (2.0, 1090, 12.73, 11.6),
}
DISTANCES = np.array([distance for distance, _, _, _ in NEBULAE.values()])
VELOCITIES = np.array([velocity for _, velocity, _, _ in NEBULAE.values()])


def close(found: float, wanted: float) -> bool:
    return bool(abs(found - wanted) <= 1e-10 * abs(wanted))


def test_the_ordinary_line_is_that_of_scipy() -> None:
    theirs = scipy.stats.linregress(DISTANCES, VELOCITIES)

    def ours(part: str) -> Any:
        return hubble_fit(DISTANCES, VELOCITIES, None, part, False)

    assert close(ours("slope"), theirs.slope)
    assert close(ours("slope_error"), theirs.stderr)
    assert close(ours("intercept"), theirs.intercept)
    residuals = VELOCITIES - theirs.intercept - theirs.slope * DISTANCES
    assert close(ours("scatter"), sqrt((residuals**2).sum() / (24 - 2)))
    assert ours("count") == 24
    # often quoted for this table: v = 454 d − 41 (common practice, no source)
    assert round(ours("slope")) == 454
    assert round(ours("intercept")) == -41


def test_the_line_through_the_origin_is_that_of_numpy_and_scipy() -> None:
    (slope,), (squares,), _, _ = np.linalg.lstsq(DISTANCES[:, None], VELOCITIES, rcond=None)
    assert close(hubble_fit(DISTANCES, VELOCITIES), slope)
    assert close(hubble_fit(DISTANCES, VELOCITIES, None, "scatter"), sqrt(squares / 23))
    _, ((variance,),) = curve_fit(lambda d, h0: h0 * d, DISTANCES, VELOCITIES, p0=[500.0])
    assert hubble_fit(DISTANCES, VELOCITIES, None, "slope_error") == pytest.approx(
        sqrt(variance), rel=1e-7
    )
    assert hubble_fit(DISTANCES, VELOCITIES, None, "intercept") == 0.0


def test_hubbles_own_constant_differs_because_he_solved_for_the_suns_motion_too() -> None:
    """His K = 465 ± 50 km/s/Mpc is no slope of v over r.

    His equations of condition (page 170) are rK + X cos α cos δ + Y sin α cos δ + Z sin δ = v: the
    components of the Sun's motion are solved for beside K. The velocities of the table are as
    measured, the Sun's motion among them, so a slope fitted to the table alone takes what the
    motion does in those directions for expansion: through the origin 424, with an intercept 454.
    """
    through_origin = hubble_fit(DISTANCES, VELOCITIES)
    assert abs(through_origin - 424) < 0.5
    directions = [
        (
            cos(radians(15 * ra)) * cos(radians(dec)),
            sin(radians(15 * ra)) * cos(radians(dec)),
            sin(radians(dec)),
        )
        for _, _, ra, dec in NEBULAE.values()
    ]
    conditions = np.column_stack([DISTANCES, directions])
    (k, x, y, z), *_ = np.linalg.lstsq(conditions, VELOCITIES, rcond=None)
    # his probable errors are 50, 50, 95 and 40; his positions are those of 1900
    assert abs(k - 465) < 5
    assert abs(x - -65) < 15
    assert abs(y - 226) < 15
    assert abs(z - -195) < 15
    # what the motion adds, taken away, leaves a table whose slope is his constant
    still = VELOCITIES - conditions[:, 1:] @ [x, y, z]
    assert hubble_fit(DISTANCES, still) == pytest.approx(k, rel=1e-12)


@pytest.mark.parametrize("through_origin", [True, False])
def test_a_line_with_errors_is_that_of_scipy(through_origin: bool) -> None:
    rng = np.random.default_rng(1929)
    sigmas = rng.uniform(20.0, 300.0, 24)
    line: Callable[..., Floats] = (
        (lambda d, slope: slope * d)
        if through_origin
        else (lambda d, slope, intercept: slope * d + intercept)
    )
    start = [400.0] if through_origin else [400.0, 0.0]
    found, covariance = curve_fit(
        line, DISTANCES, VELOCITIES, start, sigma=sigmas, absolute_sigma=True
    )
    parts = {
        part: hubble_fit(DISTANCES, VELOCITIES, sigmas, part, through_origin)
        for part in ("slope", "slope_error", "intercept")
    }
    assert parts["slope"] == pytest.approx(found[0], rel=1e-7)
    assert parts["slope_error"] == pytest.approx(sqrt(covariance[0, 0]), rel=1e-7)
    if not through_origin:
        assert parts["intercept"] == pytest.approx(found[1], rel=1e-6)
    design = np.column_stack([DISTANCES] if through_origin else [DISTANCES, np.ones(24)])
    exact, *_ = np.linalg.lstsq(design / sigmas[:, None], VELOCITIES / sigmas, rcond=None)
    assert close(parts["slope"], exact[0])


# The galaxies of the Corona Borealis region -------------------------------------------------------

# Outside: velocities in km/s of 82 galaxies, Postman, Huchra & Geller 1986, AJ 92, 1238, as Roeder
# 1990 (JASA 85, 617) took them; the data set `galaxies` of R's package MASS, read from the copy in
# the package pydataset 0.2.0, whose note says that the 78th should be 26960. It stays as it is.
GALAXIES = [
    *(9172, 9350, 9483, 9558, 9775, 10227, 10406, 16084, 16170, 18419, 18552, 18600, 18927),
    *(19052, 19070, 19330, 19343, 19349, 19440, 19473, 19529, 19541, 19547, 19663, 19846),
    *(19856, 19863, 19914, 19918, 19973, 19989, 20166, 20175, 20179, 20196, 20215, 20221),
    *(20415, 20629, 20795, 20821, 20846, 20875, 20986, 21137, 21492, 21701, 21814, 21921),
    *(21960, 22185, 22209, 22242, 22249, 22314, 22374, 22495, 22746, 22747, 22888, 22914),
    *(23206, 23241, 23263, 23484, 23538, 23542, 23666, 23706, 23711, 24129, 24285, 24289),
    *(24366, 24717, 24990, 25633, 26690, 26995, 32065, 32789, 34279),
]
SAMPLES = {
    "galaxies": np.array(GALAXIES, dtype=float),
    "the middle of them": np.array([v for v in GALAXIES if 18_000 < v < 24_000], dtype=float),
    "ten": np.array(GALAXIES[30:40], dtype=float),
    "seven with a stray one": np.array([7012.0, 6891.0, 7203.0, 6950.0, 7101.0, 6820.0, 12_450.0]),
    "three": np.array([19_052.0, 19_330.0, 19_863.0]),
    "two": np.array([19_052.0, 19_330.0]),
}
every_sample = pytest.mark.parametrize("sample", SAMPLES.values(), ids=SAMPLES)


def gini(sample: Floats) -> float:
    """√π/2 times the mean difference of all pairs, which Σ i(n−i)gᵢ is but for its order."""
    pairs = [abs(one - other) for one, other in combinations(sample.tolist(), 2)]
    return float(np.mean(pairs) * sqrt(np.pi) / 2)


def test_the_sample_is_whole() -> None:
    assert len(GALAXIES) == 82


@every_sample
def test_biweight_is_that_of_astropy(sample: Floats) -> None:
    """astropy.stats.biweight_location and biweight_scale: Beers et al. 1990, eqs. 5 and 9."""
    assert close(velocity_dispersion(sample), biweight_scale(sample))
    assert close(velocity_dispersion(sample, 0, "biweight", "center"), biweight_location(sample))


@every_sample
def test_gapper_is_the_mean_difference_of_all_pairs(sample: Floats) -> None:
    """Of a normal sample the mean difference is 2σ/√π: Wainer & Thissen 1976, eq. 8 of Beers."""
    assert close(velocity_dispersion(sample, 0, "gapper"), gini(sample))


@every_sample
def test_standard_is_that_of_scipy(sample: Floats) -> None:
    assert close(velocity_dispersion(sample, 0, "standard"), scipy.stats.tstd(sample))
    assert close(velocity_dispersion(sample, 0, "standard", "center"), scipy.stats.tmean(sample))
    # a normal sample's σ has the error σ/√(2(n−1))
    error = velocity_dispersion(sample, 0, "standard", "error")
    assert close(error, scipy.stats.tstd(sample) / sqrt(2 * (len(sample) - 1)))


@pytest.mark.parametrize(("method", "statistic"), [("biweight", biweight_scale), ("gapper", gini)])
@pytest.mark.parametrize("name", ["galaxies", "ten", "seven with a stray one"])
def test_the_error_is_that_of_astropys_jackknife(
    name: str, method: str, statistic: Callable[[Floats], float]
) -> None:
    sample = SAMPLES[name]
    _, _, theirs, _ = jackknife_stats(sample, statistic, 0.95)
    assert close(velocity_dispersion(sample, 0, method, "error"), theirs)


def test_the_jackknife_is_about_as_large_as_the_scatter_of_dispersions() -> None:
    rng = np.random.default_rng(1990)
    samples = rng.normal(7000.0, 800.0, (300, 40))
    for method in ("biweight", "gapper", "standard"):
        found = [velocity_dispersion(each, 0, method) for each in samples]
        told = [velocity_dispersion(each, 0, method, "error") for each in samples]
        assert np.std(found) == pytest.approx(np.mean(told), rel=0.15)
        assert np.mean(found) == pytest.approx(800.0, rel=0.02)


def test_a_clusters_dispersion_is_smaller_in_its_rest_frame() -> None:
    """By 1+z: Danese, De Zotti & di Tullio 1980, A&A 82, 322; Harrison 1974, ApJ 191, L51."""
    for part in ("sigma", "error"):
        seen = velocity_dispersion(GALAXIES, 0, "gapper", part)
        assert velocity_dispersion(GALAXIES, 0.07, "gapper", part) == pytest.approx(seen / 1.07)
    center = velocity_dispersion(GALAXIES, 0.07, "gapper", "center")
    assert center == velocity_dispersion(GALAXIES, 0, "gapper", "center")


# Weighted means -----------------------------------------------------------------------------------


def test_a_weighted_mean_is_that_of_numpy_and_scipy() -> None:
    rng = np.random.default_rng(417)
    sigmas = rng.uniform(1e-5, 5e-4, 30)
    values = rng.normal(0.0503, sigmas)
    assert close(mean_weighted(values, sigmas), np.average(values, weights=sigmas**-2))
    (mean,), (chi2,), _, _ = np.linalg.lstsq(1 / sigmas[:, None], values / sigmas, rcond=None)
    assert close(mean_weighted(values, sigmas), mean)
    assert close(mean_weighted(values, sigmas, "chi2"), chi2)
    _, ((variance,),) = curve_fit(
        lambda x, level: level + 0 * x, values, values, [0.05], sigma=sigmas, absolute_sigma=True
    )
    assert mean_weighted(values, sigmas, "sigma") == pytest.approx(sqrt(variance), rel=1e-7)
    assert mean_weighted(values, sigmas, "count") == 30


def test_chi2_has_the_distribution_of_chi2() -> None:
    """Of values with true errors, χ² about their mean follows χ² with n − 1 degrees of freedom."""
    rng = np.random.default_rng(42)
    sigmas = rng.uniform(0.5, 5.0, 8)
    found = [mean_weighted(each, sigmas, "chi2") for each in rng.normal(3.0, sigmas, (3000, 8))]
    assert scipy.stats.kstest(found, scipy.stats.chi2(7).cdf).pvalue > 0.01
    means = [mean_weighted(each, sigmas) for each in rng.normal(3.0, sigmas, (3000, 8))]
    pulls = (np.array(means) - 3.0) / mean_weighted(sigmas, sigmas, "sigma")
    assert scipy.stats.kstest(pulls, scipy.stats.norm.cdf).pvalue > 0.01


def test_a_worked_example() -> None:
    """By hand: 10 ± 1 and 12 ± 2 have weights 4 and 1: 10.4 ± √(4/5), χ² = 0.16 + 0.64."""
    assert close(mean_weighted([10, 12], [1, 2]), 10.4)
    assert close(mean_weighted([10, 12], [1, 2], "sigma"), sqrt(0.8))
    assert close(mean_weighted([10, 12], [1, 2], "chi2"), 0.8)
