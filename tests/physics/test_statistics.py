"""What samples cannot give, and what no unit, order or shift may change."""

from math import sqrt

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from cellfuncs.errors import DomainError
from cellfuncs.physics import statistics

METHODS = ("biweight", "gapper", "standard")
every_method = pytest.mark.parametrize("method", METHODS)

velocities = st.lists(st.floats(-3e4, 3e4), min_size=3, max_size=40, unique=True).map(np.array)


@given(velocities, st.sampled_from(METHODS), st.floats(-1e5, 1e5), st.floats(0.01, 100.0))
def test_a_shift_changes_no_dispersion_and_a_factor_is_one(  # type: ignore[no-untyped-def]
    sample, method, shift, factor
) -> None:
    assume(np.median(abs(sample - np.median(sample))) > 1e-3)
    assume(np.unique(np.round(sample + shift, 9)).size == sample.size)
    dispersion = statistics.dispersion(sample, method)
    size = 1e-9 * (dispersion + abs(sample).max() + abs(shift))
    assert abs(statistics.dispersion(sample + shift, method) - dispersion) <= size
    scaled = statistics.dispersion(sample * factor, method)
    assert abs(scaled - factor * dispersion) <= 1e-9 * factor * dispersion
    center = statistics.center(sample, method)
    assert abs(statistics.center(sample + shift, method) - center - shift) <= size
    assert sample.min() - size <= center <= sample.max() + size


@given(velocities, st.sampled_from(METHODS), st.randoms())
def test_the_order_does_not_count(sample, method, random) -> None:  # type: ignore[no-untyped-def]
    assume(np.median(abs(sample - np.median(sample))) > 1e-100)
    mixed = sample.tolist()
    random.shuffle(mixed)
    assert statistics.dispersion(np.array(mixed), method) == pytest.approx(
        statistics.dispersion(sample, method), rel=1e-9
    )


def test_a_stray_velocity_moves_the_robust_ones_little() -> None:
    """Beers et al. 1990 choose them for that; the standard deviation follows the stray one."""
    rng = np.random.default_rng(7)
    sample = rng.normal(7000.0, 500.0, 40)
    stray = np.append(sample, 25_000.0)
    moved = {
        method: statistics.dispersion(stray, method) / statistics.dispersion(sample, method)
        for method in METHODS
    }
    assert abs(moved["biweight"] - 1) < 0.05
    assert moved["standard"] > 3
    assert moved["gapper"] < moved["standard"]


@every_method
def test_one_velocity_has_a_center_and_no_dispersion(method: str) -> None:
    alone = np.array([7012.0])
    assert statistics.center(alone, method) == 7012.0
    with pytest.raises(DomainError, match="2 velocities or more; there is 1"):
        statistics.dispersion(alone, method)


@every_method
def test_velocities_all_equal_have_a_center_and_no_dispersion(method: str) -> None:
    equal = np.full(5, 7012.0)
    assert statistics.center(equal, method) == 7012.0
    with pytest.raises(DomainError, match="all 5 velocities are 7012 km/s"):
        statistics.dispersion(equal, method)
    with pytest.raises(DomainError, match="all 5"):
        statistics.dispersion_error(equal, method)


def test_more_than_half_equal_is_too_much_for_the_biweight_alone() -> None:
    sample = np.array([7000.0, 7000.0, 7000.0, 7100.0, 7300.0])
    with pytest.raises(DomainError, match="more than half of the velocities are equal"):
        statistics.dispersion(sample, "biweight")
    assert statistics.center(sample, "biweight") == 7000.0
    assert statistics.dispersion(sample, "standard") == pytest.approx(np.std(sample, ddof=1))
    # by hand: gaps 0, 0, 100, 200 with weights 4, 6, 6, 4
    assert statistics.dispersion(sample, "gapper") == pytest.approx(sqrt(np.pi) / 20 * 1400)
    # without its last velocity but one: 0, 0, 300 weigh 3, 4, 3, and so on; they do differ
    assert statistics.dispersion_error(sample, "gapper") > 0


def test_two_velocities_have_no_jackknife() -> None:
    two = np.array([7000.0, 7100.0])
    for method in ("biweight", "gapper"):
        with pytest.raises(DomainError, match="3 velocities or more"):
            statistics.dispersion_error(two, method)
    assert statistics.dispersion_error(two, "standard") == pytest.approx(
        np.std(two, ddof=1) / sqrt(2)
    )


def test_a_jackknife_may_leave_equal_velocities_behind() -> None:
    """Of 7000, 7000, 7100 one leaves 7000, 7000, whose gapper is 0: a value like another."""
    sample = np.array([7000.0, 7000.0, 7100.0])
    without = [sqrt(np.pi) / 2 * 100, sqrt(np.pi) / 2 * 100, 0.0]
    wanted = sqrt(2 / 3 * ((np.array(without) - np.mean(without)) ** 2).sum())
    assert statistics.dispersion_error(sample, "gapper") == pytest.approx(wanted)


# Means --------------------------------------------------------------------------------------------


def test_a_mean_of_one_is_that_one() -> None:
    found = statistics.weighted_mean(np.array([0.05]), np.array([0.002]))
    assert (found.mean, found.sigma, found.chi2, found.count) == (0.05, 0.002, 0.0, 1)


def test_values_all_equal_have_no_chi2() -> None:
    found = statistics.weighted_mean(np.full(4, 0.05), np.full(4, 0.002))
    assert found.mean == 0.05
    assert found.sigma == pytest.approx(0.001)
    assert found.chi2 == 0.0


@pytest.mark.parametrize("size", [1e-170, 1e-300, 1e160, 1.0])
def test_errors_of_any_size(size: float) -> None:
    """1/σ² of the smallest is no float; the mean of two alike is their middle all the same."""
    with np.errstate(over="ignore"):  # χ² may be infinite
        found = statistics.weighted_mean(np.array([1.0, 2.0]), np.array([size, size]))
    assert found.mean == 1.5
    assert found.sigma == pytest.approx(size / sqrt(2))


@given(st.lists(st.floats(0.01, 10.0), min_size=1, max_size=10).map(np.array))
def test_digits_are_kept_beside_a_large_mean(sigmas) -> None:  # type: ignore[no-untyped-def]
    values = 1e9 + np.arange(len(sigmas))
    found = statistics.weighted_mean(values, sigmas)
    exact = (np.arange(len(sigmas)) / sigmas**2).sum() / (sigmas**-2).sum()
    assert abs(found.mean - 1e9 - exact) < 1e-6


# Lines --------------------------------------------------------------------------------------------

ONE, TWO = np.array([100.0]), np.array([100.0, 200.0])


def test_what_one_point_gives() -> None:
    found = statistics.linear_fit(ONE, 70 * ONE, None, True)
    assert found.slope == 70.0
    for part in ("slope_error", "scatter"):
        with pytest.raises(DomainError, match="2 distances with a velocity or more; there is 1"):
            getattr(found, part)
    with_error = statistics.linear_fit(ONE, 70 * ONE, np.array([200.0]), True)
    assert with_error.slope_error == pytest.approx(2.0)  # 200 km/s over 100 Mpc
    with pytest.raises(DomainError, match="2 distances"):
        statistics.linear_fit(ONE, 70 * ONE, None, False)


def test_what_two_points_give() -> None:
    found = statistics.linear_fit(TWO, np.array([7000.0, 14_500.0]), None, False)
    assert found.slope == pytest.approx(75.0)
    assert found.intercept == pytest.approx(-500.0)
    with pytest.raises(DomainError, match="3 distances with a velocity or more; there are 2"):
        _ = found.slope_error


def test_distances_that_bear_no_line() -> None:
    same = np.array([100.0, 100.0, 100.0])
    with pytest.raises(DomainError, match="all 3 distances are 100 Mpc"):
        statistics.linear_fit(same, same * 70, None, False)
    assert statistics.linear_fit(same, same * 70, None, True).slope == pytest.approx(70.0)
    with pytest.raises(DomainError, match="every distance is 0"):
        statistics.linear_fit(np.zeros(3), same, None, True)


def test_equal_errors_do_not_move_the_line() -> None:
    rng = np.random.default_rng(3)
    distances = rng.uniform(10.0, 100.0, 12)
    measured = 70 * distances + rng.normal(0.0, 300.0, 12)
    for through_origin in (True, False):
        free = statistics.linear_fit(distances, measured, None, through_origin)
        tied = statistics.linear_fit(distances, measured, np.full(12, 300.0), through_origin)
        assert tied.slope == pytest.approx(free.slope, rel=1e-12)
        assert tied.scatter == pytest.approx(free.scatter, rel=1e-12)
        assert tied.slope_error == pytest.approx(300.0 / free.scatter * free.slope_error)
