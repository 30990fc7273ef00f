"""How fast a long log is filled and in how much memory, as ratios to openpyxl and numpy in one run.

Each side works in processes of its own, in turns, and the best of its rounds counts: the seconds
that its user waits, imports included, and the most memory that the kernel saw it use. Only ratios
are asserted; each is printed.
"""

import csv
import random
from collections.abc import Callable
from datetime import datetime, timedelta
from pathlib import Path

import numpy as np
import openpyxl
import pytest
from pytest_benchmark.fixture import BenchmarkFixture
from turns import of_process

import cellfuncs as cf

RECIPE = """
title = "Long log"
purpose = "Six computed columns."
cosmology = "Planck18"

[[sheets]]
name = "Lines"

[[sheets.columns]]
key = "wavelength"
label = "Wavelength"
unit = "Angstrom"
role = "input"
at_least = 3000
"""
LINE = """
[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"
"""
COMPUTED = {
    "Redshift": ("", "redshift_from_line(wavelength, line)"),
    "Velocity": ("km/s", "velocity_from_redshift(redshift, 'optical')"),
    "Distance": ("Mpc", "distance_luminosity(redshift)"),
    "Modulus": ("mag", "distance_modulus(redshift)"),
    "Age": ("Gyr", "age_at_redshift(redshift)"),
    "Scale": ("kpc/arcsec", "scale_transverse(redshift)"),
}
LINES = {"H alpha": 6564.61, "H beta": 4862.68, "[O III] 5007": 5008.24}


def recipe(folder: Path, *, with_line: bool) -> Path:
    text = RECIPE + (LINE if with_line else "")
    for label, (unit, formula) in COMPUTED.items():
        if not with_line:
            formula = formula.replace(
                "redshift_from_line(wavelength, line)",
                "redshift_from_wavelength(wavelength, 6564.61)",
            )
        text += (
            f'\n[[sheets.columns]]\nkey = "{label.lower()}"\nlabel = "{label}"\n'
            f'unit = "{unit}"\nrole = "computed"\nformula = "{formula}"\n'
        )
    path = folder / "long.toml"
    path.write_text(text)
    return path


def in_turns(
    ours: Callable[[], tuple[float, int]], theirs: Callable[[], tuple[float, int]], rounds: int
) -> tuple[float, float, int, int]:
    """Return the best seconds of each and the most bytes of each."""
    turns = [(ours(), theirs()) for _ in range(rounds)]
    return (
        min(one[0] for one, _ in turns),
        min(other[0] for _, other in turns),
        max(one[1] for one, _ in turns),
        min(other[1] for _, other in turns),
    )


def test_a_hundred_thousand_rows_of_xlsx(
    tmp_path: Path, benchmark: BenchmarkFixture, show: Callable[[str], None]
) -> None:
    chance = random.Random(1)
    book = openpyxl.Workbook(write_only=True)
    sheet = book.create_sheet("Log")
    header = "UTC, Object, Exposure, Line, Wavelength [Angstrom], Error [Angstrom], Medium, Airmass"
    sheet.append([*header.split(", "), "Seeing [arcsec]", "Flux", "S/N", "Remarks"])
    first = datetime(2031, 3, 14, 20)
    rows = 100_000
    for number in range(rows):
        line, rest = chance.choice(list(LINES.items()))
        row = (
            first + timedelta(seconds=90 * number),
            f"TH {number % 1000:04d}",
            number,
            line,
            round(rest * (1 + chance.uniform(0.01, 1.5)), 3),
            round(chance.uniform(0.05, 0.5), 4),
            chance.choice(("air", "vacuum")),
            round(chance.uniform(1, 2), 3),
            round(chance.uniform(0.6, 2.2), 2),
            chance.uniform(1e-17, 1e-15),
            round(chance.uniform(3, 200), 1),
            chance.choice((None, "cloud", "ok")),
        )
        sheet.append(row)
    log, output = tmp_path / "long.xlsx", tmp_path / "filled.xlsx"
    book.save(log)
    own = recipe(tmp_path, with_line=True)

    def ours() -> tuple[float, int]:
        command = ("-m", "workbooks.cli", "fill", log, "-o", output, "-r", own, "--overwrite")
        return of_process(*command)

    def theirs() -> tuple[float, int]:
        code = f"import openpyxl; openpyxl.load_workbook({str(log)!r}).save({str(output)!r}[:-5] + '-2.xlsx')"  # noqa: E501
        return of_process("-c", code)

    benchmark.pedantic(ours, rounds=1)
    fast, slow, small, large = in_turns(ours, theirs, 2)
    show(
        f"100 000 × 12 of .xlsx, six columns computed: {fast:.1f} s and {small >> 20} MiB;"
        f" openpyxl loads and saves in {slow:.1f} s and {large >> 20} MiB:"
        f" {slow / fast:.1f} times as fast (6 wanted),"
        f" {small / large:.2f} of its memory (0.33 at most)"
    )
    benchmark.extra_info["times as fast as openpyxl"] = slow / fast
    benchmark.extra_info["share of openpyxl's memory"] = small / large
    filled = openpyxl.load_workbook(output, read_only=True)["Log"]
    last = next(filled.iter_rows(min_row=rows + 1, max_row=rows + 1, values_only=True))
    assert last[12] == pytest.approx(cf.redshift_from_line(last[4], last[3]), rel=1e-12)
    assert last[14] == pytest.approx(cf.distance_luminosity(last[12]), rel=1e-9)
    assert slow / fast >= 6
    assert small / large <= 1 / 3


def test_a_million_rows_of_csv(
    tmp_path: Path, benchmark: BenchmarkFixture, show: Callable[[str], None]
) -> None:
    """numpy parses the numbers of the log and writes them again, and computes nothing."""
    chance = np.random.default_rng(1)
    rows = 1_000_000
    values = np.round(chance.uniform(1, 9, (rows, 12)), 4)
    values[:, 4] = np.round(6564.61 * (1 + chance.uniform(0.01, 2, rows)), 4)
    names = [f"Column {number}" for number in range(12)]
    names[4] = "Wavelength [Angstrom]"
    log, output = tmp_path / "long.csv", tmp_path / "filled.csv"
    np.savetxt(log, values, "%.10g", ",", header=",".join(names), comments="")
    own = recipe(tmp_path, with_line=False)

    def ours() -> tuple[float, int]:
        command = ("-m", "workbooks.cli", "fill", log, "-o", output, "-r", own, "--overwrite")
        return of_process(*command)

    def theirs() -> tuple[float, int]:
        return of_process(
            "-c",
            f"import numpy; numpy.savetxt({str(tmp_path / 'numpy.csv')!r}, "
            f"numpy.loadtxt({str(log)!r}, delimiter=',', skiprows=1), delimiter=',')",
        )

    benchmark.pedantic(ours, rounds=1)
    fast, slow, small, large = in_turns(ours, theirs, 1)
    show(
        f"1 000 000 × 12 of .csv, six columns computed: {fast:.1f} s and {small >> 20} MiB;"
        f" numpy parses and writes in {slow:.1f} s and {large >> 20} MiB:"
        f" {fast / slow:.2f} times as long (3 at most)"
    )
    benchmark.extra_info["times as long as numpy"] = fast / slow
    with output.open() as file:
        lines = csv.reader(file)
        header = next(lines)
        assert header[12:14] == ["Redshift", "Velocity [km/s]"]
        for row in lines:
            last = row
    assert float(last[12]) == pytest.approx(float(last[4]) / 6564.61 - 1, rel=1e-12)
    assert fast / slow <= 3
