"""Templates that call the add-in's functions, computed by a real Calc that has the extension.

Outside: LibreOffice Calc for the calls; the numbers themselves are checked in tests/published.
"""

import sys
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import openpyxl
import pytest

from cellfuncs.bridges.calc.extension import Extension, build
from cellfuncs.catalogue import CATALOGUE
from cellfuncs.families.distance import distance_luminosity, magnitude_absolute
from cellfuncs.families.spectrum import redshift_from_line
from workbooks.build import FIRST_ROW
from workbooks.build import build as build_template
from workbooks.recipe import load

sys.path.insert(0, str(Path(__file__).parent))

from calc_office import Office

READ = """
document = opened(address)
document.calculateAll()
sheet = document.Sheets.getByName(name)
result = [[shown(sheet.getCellByPosition(column, row)) for column in range(width)]
          for row in range(first, last)]
document.close(True)
"""


@pytest.fixture(scope="module")
def office(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Office]:
    folder = tmp_path_factory.mktemp("office")
    build(Extension(), folder / "functions.oxt")
    made = Office(folder, folder / "functions.oxt")
    yield made
    made.close()


def computed(
    office: Office, folder: Path, recipe: str, rows: list[list[Any]], settings: dict[str, Any]
) -> list[dict[str, Any]]:
    """Give what Calc shows in the rows of a template, by header."""
    path = folder / f"{recipe}.xlsx"
    build_template(load(recipe), path, formulas="calc", rows=len(rows) + 1)
    book = openpyxl.load_workbook(path)
    sheet = book[load(recipe).tables[0].sheet.name]
    for row, values in enumerate(rows, FIRST_ROW):
        for column, value in enumerate(values, 1):
            sheet.cell(row, column).value = value
    for key, value in settings.items():
        place = book.defined_names[key].attr_text.rpartition("!")[2].replace("$", "")
        book["Settings"][place].value = value
    book.save(path)
    headers = [cell.value for cell in sheet[FIRST_ROW - 1]]
    shown = office.run(
        READ,
        address=path.as_uri(),
        name=sheet.title,
        width=len(headers),
        first=FIRST_ROW - 1,
        last=FIRST_ROW + len(rows),
    )
    return [dict(zip(headers, values, strict=True)) for values in shown]


TARGETS = [
    ["A", 0.003, 12.1, 0.1, None],
    ["B", 0.5, 21.3, None, 0.2],
    ["C", 2.4, None, None, None],
    ["D", -0.001, 12.0, None, None],
    ["E", "n/a", None, None, None],
]


@pytest.mark.parametrize(
    ("settings", "cosmology"),
    [
        ({}, "Planck18"),
        ({"cosmology_set": "WMAP9"}, "WMAP9"),
        (
            {
                "cosmology_set": "own",
                "hubble_constant_typed": 70,
                "omega_matter_typed": 0.3,
                "omega_dark_energy_typed": 0.6,
                "dark_energy_w_typed": -0.9,
                "background_temperature_typed": 2.7255,
                "neutrino_kinds_typed": 3.046,
                "neutrino_mass_3_typed": 0.06,
            },
            {
                "H0": 70,
                "Om0": 0.3,
                "Ode0": 0.6,
                "w0": -0.9,
                "Tcmb0": 2.7255,
                "Neff": 3.046,
                "m_nu": (0, 0, 0.06),
            },
        ),
    ],
)
def test_distance_sheet_calls_give_what_python_gives(
    office: Office, tmp_path: Path, settings: dict[str, Any], cosmology: Any
) -> None:
    rows = computed(office, tmp_path, "distance-sheet", TARGETS, settings)
    for row, (_, z, magnitude, extinction, k) in zip(rows[:3], TARGETS[:3], strict=True):
        wanted = distance_luminosity(z, cosmology)
        assert row["Distance, luminosity [Mpc]"] == pytest.approx(wanted, rel=1e-12)
        if magnitude is None:
            assert row["Absolute magnitude [mag]"] == ""
        else:
            wanted = magnitude_absolute(magnitude, z, extinction, k, cosmology)
            assert row["Absolute magnitude [mag]"] == pytest.approx(wanted, rel=1e-12)
        assert row["Status"] == "ok"
    assert rows[3]["Distance, luminosity [Mpc]"]["error"] == 503  # #NUM!
    assert rows[3]["Status"] == "Redshift must be above 0"
    assert rows[4]["Age then [Gyr]"]["error"] == 519  # #VALUE!
    assert set(rows[5].values()) == {""}


def test_line_log_calls_give_what_python_gives(office: Office, tmp_path: Path) -> None:
    measured: list[list[Any]] = [
        ["a", "[OIII]5007", 5035.2, "air", 0.0056],
        ["b", "Lya", 4860.1, None, None],
        ["c", "Hx", 5000.0, "air", None],
    ]
    rows = computed(office, tmp_path, "line-log", measured, {})
    for row, (_, line, wavelength, medium, _) in zip(rows[:2], measured[:2], strict=True):
        wanted = redshift_from_line(wavelength, line, medium)
        assert row["Redshift"] == pytest.approx(wanted, rel=1e-12)
    assert rows[1]["Offset at rest [km/s]"] == ""
    assert rows[2]["Redshift"]["error"] == 519


@pytest.mark.parametrize("recipe", ["line-log", "distance-sheet"])
def test_excel_gets_the_functions_by_their_names(tmp_path: Path, recipe: str) -> None:
    """Excel calls a user's function by its bare name; no other program's prefix may be left."""
    path = tmp_path / "excel.xlsx"
    build_template(load(recipe), path, formulas="excel", rows=1)
    sheet = openpyxl.load_workbook(path)[load(recipe).tables[0].sheet.name]
    formulas = [cell.value for cell in sheet[FIRST_ROW] if cell.value]
    assert not [text for text in formulas if "ORG." in text]
    called = [name for name in CATALOGUE if any(f"{name}(" in text for text in formulas)]
    assert len(called) >= 4
