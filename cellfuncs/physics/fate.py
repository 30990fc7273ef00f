"""How an expansion ends: read off E² and the expansion speed ȧ² = a²E² far in the future.

Carroll, Press & Turner 1992 (ARA&A 30, 499) for matter, curvature and a cosmological constant; the
same reading holds for dark energy that varies.
"""

from functools import lru_cache
from typing import Final

import numpy as np
from numpy import exp

from cellfuncs.physics.expansion import Cosmology

FUTURE: Final = 60.0
"""x is followed from 0 to -60: by then one term has won, unless two are balanced to 1e-20"""

PAST: Final = 60.0


@lru_cache(maxsize=256)
def fate(cosmology: Cosmology) -> str:
    """Return one of the five endings; the universe is expanding today."""
    with np.errstate(all="ignore"):
        if _stops(cosmology, np.linspace(0.0, PAST, 60_001)):
            return "no big bang"
        if _stops(cosmology, np.linspace(0.0, -FUTURE, 60_001)):
            return "recollapses"
        before, at_end = (_log_speed_squared(cosmology, x) for x in (1.0 - FUTURE, -FUTURE))
    growth = at_end - before
    if growth > 1e-6 or at_end == np.inf:
        return "expands, accelerating"
    if growth < -1e-6:
        return "expands, coming to rest"
    return "expands forever"


def _stops(cosmology: Cosmology, x: np.ndarray[tuple[int], np.dtype[np.float64]]) -> bool:
    squared = cosmology.expansion_squared(exp(x))
    # a touch of zero may fall between two steps: look closer where E²/u² is least
    least = x[int(np.nanargmin(squared * exp(-2 * x)))]
    step = abs(x[1] - x[0])
    near = np.clip(np.linspace(least - step, least + step, 4001), x.min(), x.max())
    return bool((squared <= 0).any() or (cosmology.expansion_squared(exp(near)) <= 0).any())


def _log_speed_squared(cosmology: Cosmology, x: float) -> float:
    u = exp(x)
    return float(np.log(cosmology.expansion_squared(u) / u**2))
