"""Generated spectra: what is solved, how often, and how honest the chance is.

The generator knows the line table's wavelengths and nothing else of the package. It is what the
solver has to stand: lines of the table chosen at random, errors, false lines, lines that are not
there, and spectra without any source at all.
"""

from dataclasses import dataclass
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

import cellfuncs as cf
from cellfuncs.errors import DomainError, NotFound
from cellfuncs.physics.lines import lines

Floats = NDArray[np.float64]

TABLE = np.array([line.vacuum for line in lines()])
FIRST, LAST = 3600.0, 9800.0
"""Angstrom: what a spectrograph reaches"""
ERROR = 0.5
COUNT = 2000


@dataclass(frozen=True)
class Spectrum:
    z: float
    true: int
    wavelengths: Floats


@cache
def spectra() -> list[Spectrum]:
    """3 to 8 lines of one source, z from 0 to 6, and up to two that are none of its."""
    rng = np.random.default_rng(20260505)
    made: list[Spectrum] = []
    while len(made) < COUNT:
        z = rng.uniform(0.0, 6.0)
        seen = TABLE * (1 + z)
        inside = seen[(seen > FIRST) & (seen < LAST)]
        wanted = int(rng.integers(3, 9))
        # one line more than are measured must be there: it is missing
        if len(inside) < wanted + 1:
            continue
        measured = rng.choice(inside, wanted, replace=False) + rng.normal(0.0, ERROR, wanted)
        false = rng.uniform(FIRST, LAST, rng.integers(0, 3))
        made.append(Spectrum(z, wanted, rng.permutation(np.concatenate([measured, false]))))
    return made


def solved(wavelengths: Floats, part: str) -> float:
    rows = np.column_stack([wavelengths, np.full(len(wavelengths), ERROR)])
    return float(cf.redshift_solved(rows, None, None, None, part))


@cache
def pulls() -> list[float]:
    """(z found − z)/σ of each spectrum; infinite where nothing is found."""
    found = []
    for spectrum in spectra():
        z, sigma = (solved(spectrum.wavelengths, part) for part in ("z", "sigma"))
        found.append((z - spectrum.z) / sigma)
    return found


def test_the_generator_makes_what_it_says() -> None:
    assert len(spectra()) == COUNT
    assert {spectrum.true for spectrum in spectra()} == set(range(3, 9))
    assert {len(each.wavelengths) - each.true for each in spectra()} == {0, 1, 2}
    assert min(each.z for each in spectra()) < 0.05
    assert max(each.z for each in spectra()) > 5.95


def test_spectra_with_four_lines_or_more_are_solved() -> None:
    right = [
        abs(pull) <= 3
        for spectrum, pull in zip(spectra(), pulls(), strict=True)
        if spectrum.true >= 4
    ]
    assert len(right) > 1500
    assert np.mean(right) >= 0.95


def test_the_error_of_the_redshift_is_what_it_says() -> None:
    """Of a normal error 68.3 % lie within 1 σ."""
    near = np.array([pull for pull in pulls() if abs(pull) < 6])
    assert np.std(near) == pytest.approx(1.0, abs=0.06)
    assert np.mean(abs(near) < 1) == pytest.approx(0.683, abs=0.03)


def test_what_is_claimed_is_right() -> None:
    claims = [
        abs(pull) <= 4
        for spectrum, pull in zip(spectra(), pulls(), strict=True)
        if solved(spectrum.wavelengths, "chance") < 0.01
    ]
    assert len(claims) > 1200
    assert np.mean(claims) >= 0.99


@cache
def chances_of_nothing() -> Floats:
    """The chance told of wavelengths without any order, 1 where nothing is found."""
    rng = np.random.default_rng(1911)
    told = []
    for _ in range(COUNT):
        wavelengths = rng.uniform(FIRST, LAST, rng.integers(3, 11))
        try:
            told.append(solved(wavelengths, "chance"))
        except NotFound:
            told.append(1.0)
    return np.array(told)


def test_random_wavelengths_are_not_claimed_to_be_a_source() -> None:
    assert np.mean(chances_of_nothing() < 0.01) <= 0.02


@pytest.mark.parametrize("chance", [0.01, 0.03, 0.1, 0.3])
def test_a_chance_is_not_told_smaller_than_it_is(chance: float) -> None:
    """As a p-value: among random spectra no more than that share may be told less."""
    share = np.mean(chances_of_nothing() <= chance)
    assert share <= chance + 3 * np.sqrt(chance / COUNT)


def test_a_chance_is_not_told_needlessly_large() -> None:
    """Four lines of four are no coincidence on this table, nor are five of seven."""
    clear = [
        solved(spectrum.wavelengths, "chance") < 0.01
        for spectrum in spectra()
        if spectrum.true >= 5 or len(spectrum.wavelengths) == spectrum.true == 4
    ]
    assert np.mean(clear) > 0.95


# One by one ---------------------------------------------------------------------------------------

# NIST Atomic Spectra Database: vacuum wavelengths of Hα, Hβ, [O III] 4959, 5007, [N II] 6583
GALAXY = [6564.61, 4862.68, 4960.30, 5008.24, 6585.27]


def at(z: float, rest: list[float]) -> list[float]:
    return [wavelength * (1 + z) for wavelength in rest]


def test_a_galaxy_line_by_line() -> None:
    seen = [*at(0.05, GALAXY), 7123.4]
    assert abs(cf.redshift_solved(seen) - 0.05) < 3 * cf.redshift_solved(seen, part="sigma")
    assert cf.redshift_solved(seen, part="count") == 5.0
    assert cf.redshift_solved(seen, part="chance") < 1e-4
    words = cf.redshift_solved(seen, part="lines").split("; ")
    assert words == [
        "6892.84 H alpha",
        "5105.81 H beta",
        "5208.32 [O III] 4959",
        "5258.65 [O III] 5007",
        "6914.53 [N II] 6583",
        "7123.40 not identified",
    ]


def test_the_first_quasars() -> None:
    """Outside: 3C 273, Schmidt 1963, Nature 197, 1040: lines in air at 5632, 5032, 4753 and 4595 Å
    (Hβ, Hγ, Hδ, Hε), 3239 Å (Mg II) and z = 0.158; good to a few Å."""
    measured = [[wavelength, 4.0] for wavelength in (5632.0, 5032.0, 4753.0, 4595.0, 3239.0)]
    assert abs(cf.redshift_solved(measured, "air") - 0.158) < 0.002
    named = cf.redshift_solved(measured, "air", part="lines")
    for line in ("5632.00 H beta", "5032.00 H gamma", "4753.00 H delta", "3239.00 Mg II"):
        assert line in named


def test_air_and_vacuum_are_not_mixed_up() -> None:
    in_air = [cf.wavelength_air(wavelength) for wavelength in at(0.05, GALAXY)]
    assert cf.redshift_solved(in_air, "air") == pytest.approx(
        cf.redshift_solved(at(0.05, GALAXY)), abs=1e-7
    )
    # 80 km/s
    assert cf.redshift_solved(in_air) == pytest.approx(0.05 - 1.05 * 2.8e-4, abs=2e-5)


def test_two_solutions_of_like_merit_are_both_told() -> None:
    """Two lines whose ratio two pairs of the table share: nobody can tell which."""
    seen = at(1.0, [2796.354, 3728.48])
    told = cf.redshift_solved(seen, part="lines")
    assert "or z = " in told
    assert cf.redshift_solved(seen, part="chance") > 0.3


def test_limits_leave_out_what_is_beyond() -> None:
    seen = at(0.05, GALAXY)
    assert cf.redshift_solved(seen, None, 0.04, 0.06) == cf.redshift_solved(seen)
    assert cf.redshift_solved(seen, None, 0.04, 0.06, "chance") < cf.redshift_solved(
        seen, None, 0.0, 7.0, "chance"
    )
    # two or three of the five fall on lines there too, as they would without any order
    assert 1.0 < cf.redshift_solved(seen, None, 1.0, 2.0) < 2.0
    assert cf.redshift_solved(seen, None, 1.0, 2.0, "chance") > 0.05


def test_blueshifts() -> None:
    seen = at(-0.001, GALAXY)
    assert abs(cf.redshift_solved(seen, None, -0.01, 1.0) + 0.001) < 1e-4


def test_the_order_and_the_strengths_sign_do_not_count() -> None:
    rows = [
        [wavelength, 0.4, strength]
        for wavelength, strength in zip(
            [*at(0.05, GALAXY), 7000.0], (50.0, 17.0, 20.0, 60.0, 20.0, 2.0), strict=True
        )
    ]
    turned = [[wavelength, error, -strength] for wavelength, error, strength in rows[::-1]]
    for part in ("z", "sigma", "count", "chance"):
        assert cf.redshift_solved(rows, part=part) == pytest.approx(
            cf.redshift_solved(turned, part=part), rel=1e-9
        )


def test_a_weak_line_is_more_likely_false_than_a_strong_one() -> None:
    """Two redshifts are in these lines, three each; the stronger three decide."""
    one, other = at(0.05, [6564.61, 4862.68, 5008.24]), at(0.31, [6564.61, 4862.68, 5008.24])
    for strong, weak, z in ((one, other, 0.05), (other, one, 0.31)):
        rows = [[wavelength, 0.5, 30.0] for wavelength in strong]
        rows += [[wavelength, 0.5, 3.0] for wavelength in weak]
        assert abs(cf.redshift_solved(rows) - z) < 2e-4


def test_smaller_errors_make_a_surer_redshift() -> None:
    seen = at(0.05, GALAXY)
    told = [
        [cf.redshift_solved([[wave, error] for wave in seen], part=part) for error in (0.1, 0.5, 2)]
        for part in ("sigma", "chance")
    ]
    assert told[0][0] < told[0][1] < told[0][2]
    assert told[1][0] < told[1][1] < told[1][2]
    # a row without an error counts as good to 0.5 Å
    assert cf.redshift_solved([[wave, None] for wave in seen]) == pytest.approx(
        cf.redshift_solved([[wave, 0.5] for wave in seen]), rel=1e-12
    )


@pytest.mark.parametrize(
    ("arguments", "error", "words"),
    [
        (([6892.84],), NotFound, "one wavelength, 6892.84 Å, tells no redshift"),
        (([6892.84, 6892.84],), NotFound, "tells no redshift"),
        (([5100.0, 5300.0], None, 0.0, 0.001), NotFound, "no redshift from 0 to 0.001 puts two"),
        (([6892.84, -1.0],), DomainError, "wavelengths, cell 2, is -1"),
        (([[6892.84, 0.5], [5105.8, 0.0]],), DomainError, "column 2, cell 2, is 0"),
        (
            ([6892.84, 5105.8], "vacuum", 2.0, 1.0),
            DomainError,
            "z_max is 1; it must be above z_min",
        ),
        (([6892.84, 1500.0], "air"), DomainError, "1500 Å, below 2000 Å"),
    ],
)
def test_what_cannot_be_solved(
    arguments: tuple[object, ...], error: type[Exception], words: str
) -> None:
    with pytest.raises(error, match=words):
        cf.redshift_solved(*arguments)
