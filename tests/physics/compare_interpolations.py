"""Compare node spacings and numbers of points for the Earth's motion and orientation; run by hand.

    python tests/physics/compare_interpolations.py

For each spacing in days and each number of points the table shows the worst error over ten years
of what a column of moments gets, against the series themselves at each moment: of the Earth's
velocity and of how the pole's wandering moves an observer, of the light's delay, of sidereal time
and of TDB. The last columns are the nodes and the time for 10 000 moments spread over two years.
`STEP` and `POINTS` in cellfuncs/physics/earth.py were chosen from it.
"""

from collections.abc import Callable
from time import perf_counter
from typing import Any

import numpy as np
from numpy.typing import NDArray

from cellfuncs.physics import earth

STEPS = (0.5, 1.0, 2.0, 4.0)
POINTS = (4, 6, 8, 10, 12, 14, 16, 18)

DRAW = np.random.default_rng(1)
MOMENTS = np.sort(DRAW.uniform(7000.0, 7000.0 + 3653, 60_000))
SEASON = DRAW.uniform(9000.0, 9000.0 + 731, 10_000)


def worst(found: tuple[Any, ...], truth: tuple[Any, ...], parts: slice) -> float:
    """Return the largest length of the vector of errors."""
    errors = np.subtract(found[parts], truth[parts])
    return float(np.sqrt((errors**2).sum(axis=0)).max())


def errors(truth: dict[Callable[..., Any], tuple[Any, ...]]) -> list[float]:
    motion, orientation, tdb = (earth.interpolated(of, MOMENTS) for of in truth)
    true_motion, true_orientation, true_tdb = truth.values()
    turn = 86_400 / (2 * np.pi) * 1e9  # ns of sidereal time
    return [
        worst(motion, true_motion, slice(0, 3)) * 1e6,
        worst(orientation, true_orientation, slice(0, 2)) * earth.SPIN * 6378e6,
        worst(motion, true_motion, slice(3, 6)) * 1e9,
        worst(orientation, true_orientation, slice(3, 4)) * turn,
        worst(tdb, true_tdb, slice(0, 1)) * 1e9,
    ]


def seconds(work: Callable[[], Any]) -> float:
    start = perf_counter()
    work()
    return perf_counter() - start


def nodes(step: float, points: int) -> int:
    reach = np.arange(1 - points // 2, 1 + points // 2)
    return np.unique(np.floor(SEASON / step)[:, None] + reach).size


def interpolate_all(moments: NDArray[np.float64]) -> None:
    for of in (earth.motion, earth.orientation, earth.tdb_minus_tt):
        earth.interpolated(of, moments)


def main() -> None:
    truth = {of: of(MOMENTS) for of in (earth.motion, earth.orientation, earth.tdb_minus_tt)}
    heads = (
        *("velocity [mm/s]", "pole [mm/s]", "delay [ns]", "sidereal [ns]"),
        *("TDB [ns]", "nodes", "time [ms]"),
    )
    print(f"{'days':>6}{'points':>8}" + "".join(f"{head:>17}" for head in heads))
    for step in STEPS:
        for points in POINTS:
            # what the module reads when it interpolates
            earth.STEP, earth.POINTS = step, points  # type: ignore[misc]
            line = "".join(f"{each:17.1e}" for each in errors(truth))
            cost = min(seconds(lambda: interpolate_all(SEASON)) for _ in range(3)) * 1e3
            print(f"{step:6}{points:8}{line}{nodes(step, points):17}{cost:17.1f}")


if __name__ == "__main__":
    main()
