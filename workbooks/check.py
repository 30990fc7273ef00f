"""A logbook looked through for what hands and programs did to it; nothing is changed."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, Final

from cellfuncs.physics.expansion import Cosmology
from workbooks.audit import (
    difference_findings,
    error_findings,
    formula_findings,
    header_findings,
    trails,
    value_findings,
)
from workbooks.audit.examined import Examined
from workbooks.audit.findings import Finding, Spot, in_runs
from workbooks.fill import recipe_of, settings_of
from workbooks.headings import logs_of
from workbooks.logbook import Logbook, LogbookError
from workbooks.recipe import Recipe

LOOKS: Final[tuple[Callable[[Examined], Iterator[Spot]], ...]] = (
    header_findings.of_headers,
    value_findings.of_dates,
    value_findings.of_texts,
    formula_findings.of_columns,
    formula_findings.of_units,
    value_findings.of_rest_wavelengths,
    value_findings.of_limits,
    error_findings.of_error_values,
    difference_findings.of_results,
    lambda sheet: sheet.trails.findings(),
    value_findings.of_repeated_rows,
)
"""What a sheet is looked through for; later ones pass over cells that earlier ones explain"""


@dataclass
class CheckReport:
    """What was found in a logbook."""

    logbook: str
    recipe: str
    sheets: list[str] = field(default_factory=list)
    findings: list[Finding] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)

    @property
    def has_problems(self) -> bool:
        return bool(self.findings)


def check(path: Path, recipe: Recipe | None = None) -> CheckReport:
    """Look a logbook through and report, by sheet and cell, what a person should look at.

    path: the logbook
    recipe: left out, the one that the logbook was made from, if any; without one, what needs no
        recipe is looked for
    Raises LogbookError where the file cannot be read, RecipeError where the recipe cannot be used.
    """
    logbook = Logbook.open(path)
    report = CheckReport(str(path), "")
    if recipe is None and "recipe_name" in logbook.named_cells:
        try:
            recipe = recipe_of(logbook)
        except LogbookError as error:
            report.notes.append(f"{error}; its computed columns were not computed again")
    report.recipe = recipe.name if recipe else ""
    settings: dict[str, Any] = {}
    cosmology: Cosmology | None = None
    if recipe is not None:
        try:
            settings, cosmology = settings_of(logbook, recipe)
        except LogbookError as error:
            report.findings.append(_of_setting(str(error)))
    sheets = [
        Examined(logbook, log, recipe, settings, cosmology) for log in logs_of(logbook, recipe)
    ]
    # what formulas compute follows the settings, whenever the logbook was last filled
    follows = any(sheet.formulas.groups for sheet in sheets)
    stale = list(trails.of_template(logbook))
    if not follows:
        stale += trails.of_last_filling(logbook, cosmology)
    report.findings += stale
    made_otherwise = any(finding.kind in trails.COMPUTE_OTHERWISE for finding in stale)
    for sheet in sheets:
        log = sheet.log
        report.sheets.append(log.sheet.name)
        sheet.made_otherwise = made_otherwise
        report.findings += in_runs(sheet.name, [spot for look in LOOKS for spot in look(sheet)])
        if recipe is not None and log.match is None:
            report.notes.append(
                f"{log.sheet.name}: the recipe does not fit, only what needs none was looked for"
                + (f" ({log.obstacle})" if log.obstacle else "")
            )
    if recipe is None:
        report.notes.append("no recipe: computed columns were not computed again")
    if not report.sheets:
        report.notes.append("no sheet has a table with headers")
    return report


def _of_setting(message: str) -> Finding:
    place, _, sentence = message.partition(": ")
    sheet, mark, cell = place.rpartition("!")
    return (
        Finding(sheet, cell, "bad setting", sentence)
        if mark
        else Finding("", "", "bad setting", message)
    )
