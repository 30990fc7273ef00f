"""Compare node counts and mappings for the two integrals of the expansion; run by hand.

    python tests/physics/compare_quadratures.py

For each count of Gauss-Legendre nodes and each mapping the tables show the worst relative error
over the universes of test_expansion.py, against its mpmath reference, at redshifts up to 100 000.
`GAUSS_ORDER` and the mapping in cellfuncs/physics/expansion.py were chosen from it. Distances are
integrated over x = ln(1+z) or over z; ages from x = ln(1+z) on to x + reach, with nodes at
t, t² or t³ of the way, or over the scale factor a = 1/(1+z).
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from test_expansion import UNIVERSES, Friedmann

from cellfuncs.physics.expansion import Cosmology, cosmology_from, gauss_legendre

Floats = NDArray[np.float64]
Rule = Callable[[Cosmology, float, Floats, Floats], float]

COUNTS = (24, 32, 48, 64)
REDSHIFTS = (0.01, 1.0, 20.0, 1100.0, 1e5)


def distance_over_x(cosmology: Cosmology, z: float, t: Floats, weight: Floats) -> float:
    x = np.log1p(z)
    return float(x * (weight * cosmology.path.integrand(x * t)).sum())


def distance_over_z(cosmology: Cosmology, z: float, t: Floats, weight: Floats) -> float:
    return float(z * (weight / np.sqrt(cosmology.expansion_squared(1 + z * t))).sum())


def age_over_x(reach: float, power: int) -> Rule:
    def rule(cosmology: Cosmology, z: float, t: Floats, weight: Floats) -> float:
        heights = cosmology.time.integrand(np.log1p(z) + reach * t**power)
        return float(reach * power * (weight * t ** (power - 1) * heights).sum())

    return rule


def age_over_a(cosmology: Cosmology, z: float, t: Floats, weight: Floats) -> float:
    heights = 1 / (t * np.sqrt(cosmology.expansion_squared((1 + z) / t)))
    return float((weight * heights).sum())


DISTANCES: dict[str, Rule] = {
    "distance over x": distance_over_x,
    "distance over z": distance_over_z,
}
AGES: dict[str, Rule] = {
    "age over a": age_over_a,
    **{
        f"age, reach {reach}, t^{power}": age_over_x(reach, power)
        for reach, power in [(18, 1), (18, 2), (20, 1), (20, 2), (20, 3), (24, 2), (26, 2), (30, 2)]
    },
}


def errors(
    rules: dict[str, Rule], universes: dict[str, Friedmann], counts: tuple[int, ...] = COUNTS
) -> None:
    """Print a line for each rule and count: the worst relative error at each redshift."""
    print("worst relative error over", ", ".join(universes))
    print(f"{'':26}{'nodes':>6}" + "".join(f"{f'z = {z:g}':>12}" for z in REDSHIFTS))
    truth = {
        (name, z): float(
            universe.comoving(z) / universe.hubble_distance
            if rules is DISTANCES
            else universe.age(z) / universe.hubble_time
        )
        for name, universe in universes.items()
        for z in REDSHIFTS
    }
    cosmologies = {name: cosmology_from(each.as_argument) for name, each in universes.items()}
    for label, rule in rules.items():
        for count in counts:
            t, weight = gauss_legendre(count)
            line = ""
            for z in REDSHIFTS:
                ratios = [
                    rule(each, z, t, weight) / truth[name, z] for name, each in cosmologies.items()
                ]
                line += f"{max(abs(ratio - 1) for ratio in ratios):12.0e}"
            print(f"{label:26}{count:>6}{line}")
    print()


def main() -> None:
    # Heavy neutrinos are left out: there the reference's exponent 1/1.83, which the papers give,
    # and the rounded one of astropy part by 4e-13, and that is not the quadrature's doing.
    usual = {name: each for name, each in UNIVERSES.items() if "neutrinos" not in name}
    errors(DISTANCES, usual)
    errors(AGES, usual)
    # The emptier, the longer ago the beginning in x: here a short reach shows.
    errors(AGES, {"the empty universe": Friedmann("70", "0", "0")}, counts=(48,))


if __name__ == "__main__":
    main()
