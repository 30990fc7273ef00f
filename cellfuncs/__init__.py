"""Quantities that an observatory computes from its measurements, each defined once.

Every function of the catalogue is here by its name in lower case:
`from cellfuncs import distance_luminosity`.
"""

from typing import TYPE_CHECKING

from cellfuncs.catalogue import CATALOGUE, Function
from cellfuncs.errors import CellError, DomainError, InputError, MissingInput
from cellfuncs.families import age, distance, sample, sky, spectrum, velocity, workbook
from cellfuncs.version import __version__

__all__ = [
    "CATALOGUE",
    "CellError",
    "DomainError",
    "Function",
    "InputError",
    "MissingInput",
    "__version__",
    "age",
    "distance",
    "sample",
    "sky",
    "spectrum",
    "velocity",
    "workbook",
]

globals().update({name.lower(): function for name, function in CATALOGUE.items()})
__all__ += [name.lower() for name in CATALOGUE]

if TYPE_CHECKING:

    def __getattr__(name: str) -> Function: ...
