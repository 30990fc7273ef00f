"""The cosmology block of a Settings sheet: its named cells, and the set that they stand for."""

from dataclasses import dataclass
from typing import Final

from cellfuncs.physics.expansion import PARAMETERS

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

COSMOLOGY_KEYS: Final = {cell.cell: cell.unit for cell in COSMOLOGY_CELLS}
"""What a recipe's formulas may name of the cosmology, with units"""
