"""Findings written into a copy of a workbook as cell comments, every other byte kept."""

import re
from collections.abc import Collection, Iterable
from pathlib import Path
from typing import Final

from workbooks.audit.findings import KINDS, Finding
from workbooks.files import ods_comments, xlsx_comments
from workbooks.files.opendocument import OdsLogbook
from workbooks.files.package import Package
from workbooks.files.saving import check_target, write_whole
from workbooks.logbook import LogbookError

AUTHOR: Final = "cellfuncs check"

Comments = dict[str, dict[str, str]]
"""A comment's text by the name of its sheet and of its cell"""


def annotate(
    path: Path, output: Path, findings: Iterable[Finding], *, overwrite: bool = False
) -> int:
    """Write a copy of a workbook with a comment on each cell that something was found at.

    Returns the number of cells. Raises LogbookError where the file cannot hold comments or the
    copy cannot be written; `output` may not be the logbook itself.
    """
    suffix = path.suffix.lower()
    if suffix not in (".xlsx", ".xlsm", ".ods"):
        raise LogbookError(
            f"{path}: comments can be written into .xlsx, .xlsm and .ods only; use --json, or save "
            "the logbook as .xlsx or .ods first"
        )
    if output.suffix.lower() != suffix:
        raise LogbookError(f"{output}: a copy of {path.name} must end in {suffix}")
    if output.resolve() == path.resolve():
        raise LogbookError(f"{output} is the logbook itself; name another file for the copy")
    check_target(output, overwrite=overwrite)
    if suffix == ".ods":
        logbook = OdsLogbook(path)
        comments = _by_cell(findings, logbook.sheet_names)
        ods_comments.save(logbook, output, comments, AUTHOR, overwrite=overwrite)
    else:
        package = Package(path)
        comments = _by_cell(findings, package.sheets)
        content = xlsx_comments.commented(package, comments, AUTHOR)
        write_whole(output, content, overwrite=overwrite)
    return sum(len(cells) for cells in comments.values())


def _by_cell(findings: Iterable[Finding], sheets: Collection[str]) -> Comments:
    comments: Comments = {}
    for finding in findings:
        if finding.sheet in sheets and finding.cell:
            cells = comments.setdefault(finding.sheet, {})
            text = _text(finding)
            before = cells.get(finding.cell)
            cells[finding.cell] = f"{before}\n\n{text}" if before else text
    return comments


def _text(finding: Finding) -> str:
    kind = KINDS[finding.kind]
    run = f" ({finding.cell} to {finding.last_cell})" if finding.last_cell else ""
    text = f"{kind[:1].upper()}{kind[1:]}{run}: {finding.sentence}."
    # neither format can hold these, and a sentence may quote a cell
    return re.sub(r"[\x00-\x08\x0b-\x1f\ud800-\udfff\ufffe\uffff]", " ", text)
