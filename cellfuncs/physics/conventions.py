"""The three conventions that turn a redshift into a velocity and back.

Greisen et al. 2006, A&A 446, 747 (FITS WCS Paper III), Table 3. Velocities are in km/s, receding
positive. Each convention reaches as far as z > -1 does.
"""

from typing import Any, Final

from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.symbols import Real, choose, sqrt, within

NAMES: Final = ("relativistic", "optical", "radio")


def velocity_from_redshift(z: Real, convention: Any) -> Real:
    """Return the velocity of a redshift z > -1."""

    def relativistic() -> Real:
        # c((1+z)²−1)/((1+z)²+1) without the difference, which would lose a small z, and divided by
        # (1+z)², which would overflow
        shrink = 1 / (1 + z)
        return LIGHT_SPEED * (z * shrink) * (1 + shrink) / (1 + shrink**2)

    return choose(
        convention,
        relativistic=relativistic,
        optical=lambda: LIGHT_SPEED * z,
        radio=lambda: LIGHT_SPEED * (z / (1 + z)),
    )


def redshift_from_velocity(velocity: Real, convention: Any) -> Real:
    """Return the redshift of a velocity; a float outside the convention's reach raises."""

    def relativistic() -> Real:
        # √((1+β)/(1−β)) − 1 without the difference, which would lose a small β
        beta = velocity / LIGHT_SPEED
        root = sqrt((1 - beta) * (1 + beta))
        return beta * (1 + beta / (1 + root)) / root

    return choose(
        convention,
        relativistic=lambda: within(
            abs(velocity) < LIGHT_SPEED,
            velocity,
            f"velocity is {{}}; it must be between -{LIGHT_SPEED} and {LIGHT_SPEED} km/s",
            relativistic,
        ),
        optical=lambda: within(
            velocity > -LIGHT_SPEED,
            velocity,
            f"velocity is {{}}; an optical velocity must be above -{LIGHT_SPEED} km/s",
            lambda: velocity / LIGHT_SPEED,
        ),
        radio=lambda: within(
            velocity < LIGHT_SPEED,
            velocity,
            f"velocity is {{}}; a radio velocity must be below {LIGHT_SPEED} km/s",
            lambda: velocity / (LIGHT_SPEED - velocity),
        ),
    )
