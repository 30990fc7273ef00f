"""What a workbook says of how its numbers were made, held against how they would be made now."""

from collections.abc import Iterator
from functools import cached_property
from typing import Any, Final

from cellfuncs.families.workbook import provenance
from cellfuncs.physics.expansion import Cosmology
from workbooks.audit.findings import Finding, Spot
from workbooks.fill import COMPUTED_WITH, MADE_BY, trail
from workbooks.headings import Heading, Log, value_at
from workbooks.logbook import Logbook, cell_name
from workbooks.matching import folded

COMPUTE_OTHERWISE: Final = ("other constants", "other cosmology")
"""Findings that say why all numbers may differ from what they would be now"""


def _said(logbook: Logbook, key: str) -> tuple[str, str, str] | None:
    """Return sheet, cell and text of a named cell."""
    if key not in logbook.named_cells:
        return None
    name, row, column = logbook.named_cells[key]
    value = value_at(logbook.sheet(name), row, column)
    return (name, cell_name(row, column), value) if isinstance(value, str) else None


def of_template(logbook: Logbook) -> Iterator[Finding]:
    """What a template's Provenance sheet says of itself, against this program"""
    for key, kind, now in (
        ("template_version", "other version", provenance("version")),
        ("template_constants", "other constants", provenance("constants")),
    ):
        found = _said(logbook, key)
        if found and found[2] != now:
            sheet, cell, value = found
            yield Finding(sheet, cell, kind, f"the template has {value}, this program {now}")


def of_last_filling(logbook: Logbook, cosmology: Cosmology | None) -> Iterator[Finding]:
    """What a workbook's last filling left behind, against this program and its settings now"""
    found = _said(logbook, "last_filled")
    if found:
        sheet, cell, value = found
        for kind, sentence in differences(value.partition("; ")[2], cosmology):
            yield Finding(sheet, cell, kind, sentence)


def differences(made_with: str, cosmology: Cosmology | None) -> Iterator[tuple[str, str]]:
    """Yield kind and sentence of each part of a trail that is not what it would be now."""
    if not made_with.startswith(MADE_BY):
        return
    version, _, rest = made_with.partition("; ")
    constants, mark, used = rest.partition("; cosmology ")
    if version != provenance("version"):
        yield "other version", f"computed by {version}, this is {provenance('version')}"
    if constants and constants != provenance("constants"):
        yield (
            "other constants",
            f"computed with {constants}, this program has {provenance('constants')}",
        )
    if mark and cosmology is not None:
        now = trail(cosmology).rpartition("; cosmology ")[2]
        if used != now:
            yield (
                "other cosmology",
                f"computed with the cosmology {used}; the logbook now says {now}",
            )


class RowTrails:
    """What each row of a log says of how its numbers were made, in its column «Computed with»."""

    def __init__(self, log: Log, cosmology: Cosmology | None) -> None:
        self.log = log
        self.cosmology = cosmology
        self._known: dict[str, list[tuple[str, str]]] = {}

    def findings(self) -> Iterator[Spot]:
        """Yield what is not as it would be now."""
        if self._heading is not None:
            number = self._heading.number
            for row, value in self.log.below(number):
                for kind, sentence in self._differences(value):
                    yield row, number, kind, sentence

    def is_ours(self, row: int) -> bool:
        """Tell whether `fill` made this row's numbers, to their last digit."""
        value = self._value(row)
        return isinstance(value, str) and value.startswith(MADE_BY)

    def is_made_otherwise(self, row: int) -> bool:
        """Tell whether the row says itself that its numbers rest on something else."""
        return any(kind in COMPUTE_OTHERWISE for kind, _ in self._differences(self._value(row)))

    @cached_property
    def _heading(self) -> Heading | None:
        return next(
            (each for each in self.log.headings if folded(each.label) == folded(COMPUTED_WITH)),
            None,
        )

    def _value(self, row: int) -> Any:
        return None if self._heading is None else self.log.value(row, self._heading.number)

    def _differences(self, value: Any) -> list[tuple[str, str]]:
        if not isinstance(value, str):
            return []
        if value not in self._known:
            self._known[value] = list(differences(value, self.cosmology))
        return self._known[value]
