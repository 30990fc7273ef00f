"""The cosmology block of a Settings sheet: its named cells, and the set that they stand for."""

from dataclasses import dataclass
from typing import Final

from cellfuncs.bridges.formula import HIDDEN_TABLES, derived_settings
from cellfuncs.physics.earth import SEASON_TABLE
from cellfuncs.physics.expansion import PARAMETERS
from workbooks.expression import COSMOLOGY_RANGE

OWN: Final = "own"
"""The choice in place of a published set's name that puts the user's own values in use"""

SET_CELL: Final = "cosmology_set"


@dataclass(frozen=True)
class CosmologyCell:
    """A named cell of the block, and the parameter of the set that it holds.

    `kind` counts the neutrinos, which have a mass each.
    """

    cell: str
    parameter: str
    kind: int = 0

    @property
    def own_cell(self) -> str:
        """The cell where a user types an own value"""
        return f"{self.cell}_typed"

    @property
    def unit(self) -> str:
        return PARAMETERS[self.parameter].unit

    @property
    def meaning(self) -> str:
        if self.kind:
            return f"mass of the neutrinos of kind {self.kind}"
        return PARAMETERS[self.parameter].meaning


COSMOLOGY_CELLS: Final = (
    CosmologyCell("hubble_constant", "H0"),
    CosmologyCell("omega_matter", "Om0"),
    CosmologyCell("omega_dark_energy", "Ode0"),
    CosmologyCell("dark_energy_w", "w0"),
    CosmologyCell("dark_energy_wa", "wa"),
    CosmologyCell("background_temperature", "Tcmb0"),
    CosmologyCell("neutrino_kinds", "Neff"),
    CosmologyCell("neutrino_mass_1", "m_nu", 1),
    CosmologyCell("neutrino_mass_2", "m_nu", 2),
    CosmologyCell("neutrino_mass_3", "m_nu", 3),
)
"""The names are those of bridges.formula.SETTINGS_COSMOLOGY"""


def reserved_names() -> set[str]:
    """Return the names of cells that every workbook needs for itself."""
    own = {cell.own_cell for cell in COSMOLOGY_CELLS} | {cell.cell for cell in COSMOLOGY_CELLS}
    published = {f"published_{cell.cell}" for cell in COSMOLOGY_CELLS}
    return (
        {SET_CELL, "published_set", "line_name", "omega_dark_energy_own", COSMOLOGY_RANGE}
        | set(PROVENANCE_CELLS)
        | own
        | published
        | set(HIDDEN_TABLES)
        | {f"season_{column}" for column in SEASON_TABLE}
        | set(derived_settings())
    )


PROVENANCE_CELLS: Final = (
    "recipe_name",
    "template_version",
    "template_made",
    "template_constants",
    "cosmology_in_use",
    "template_ephemeris",
    "template_earth_orientation",
    "last_filled",
)

COSMOLOGY_KEYS: Final = {cell.cell: cell.unit for cell in COSMOLOGY_CELLS}
"""What a recipe's formulas may name of the cosmology, with units"""
