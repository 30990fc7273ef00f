"""Makes the demo's logbook: a night at an observatory that does not exist, mess included.

Run by hand when the demo changes: `python -m workbooks.demo.make`. Every number is invented: lines
put at made-up redshifts, with a made-up measuring error. The sheets look the way such logs look:
the headers are the observatory's own, lines are spelt as they come to mind, the optical arm works
in air and Angstrom, the infrared arm in vacuum and nm, and hands slipped.
"""

from datetime import datetime
from pathlib import Path
from random import Random
from typing import Any

from openpyxl import Workbook
from openpyxl.styles import Font
from openpyxl.worksheet.properties import PageSetupProperties
from openpyxl.worksheet.worksheet import Worksheet

from cellfuncs.physics import lines, refraction

HERE = Path(__file__).parent

# target, invented redshift, lines as they were typed
OPTICAL = [
    ("TH 0412-17", 0.01873, "Halpha|H beta|[OIII]5007|[OIII] 4959|NII 6584|[SII] 6717|[SII]6731"),
    ("TH 0431+02", 0.04418, "H alpha|Hb|OIII 5007|[O II] 3727|[N II] 6584"),
    ("TH 0502-33", 0.00311, "Hα|Hβ|[O III] 5007|HeI 5876|[S III] 6312"),
    ("TH 0618+11", -0.00021, "CaII 8542|CaII 8662|Na D1|Na D2|Mg I b1"),
    ("TH 0733-05", 0.3127, "H-beta|[OIII]5007|Hγ|[O II] 3729|[NeIII] 3869"),
    ("TH 0950+28", 2.0914, "CIV 1549|C III] 1909|Lya|He II 1640"),
]
INFRARED = [
    ("TH 0733-05", 0.3127, "H alpha|[SIII] 9531|[S III]9069|He I 10830"),
    ("TH 0950+28", 2.0914, "H alpha|[O III]5007|[OIII]4959|Hbeta|MgII 2796|Mg II 2803"),
    ("TH 1102-09", 1.4471, "Halpha|NII 6584|[NII]6548|[OIII]5007|H beta"),
]


RESULTS = {
    "Redshift": "0.000000",
    "Velocity, optical [km/s]": "#,##0.0",
    "Offset at rest [km/s]": "+0.0;-0.0;0.0",
}
"""The columns that the observatory left for the results, with their number formats"""


def measured(line: str, redshift: float, dice: Random, error: float, air: bool) -> float:
    """Return an invented measurement in Angstrom."""
    observed = lines.find(line).vacuum * (1 + redshift)
    if air:
        observed = refraction.air_from_vacuum(observed)
    return round(observed + dice.gauss(0, error), 2)


def heading(sheet: Worksheet, title: str, headers: list[str]) -> None:
    sheet["A1"] = title
    sheet["A1"].font = Font(bold=True, size=13)
    sheet["A2"] = "Observers: night crew B. Seeing 1.1 arcsec, thin cirrus after 03:00."
    for place, header in enumerate(headers, 1):
        cell = sheet.cell(4, place, header)
        cell.font = Font(bold=True)
        sheet.column_dimensions[cell.column_letter].width = max(14, len(header) + 2)
        for row in range(5, 45):
            sheet.cell(row, place).number_format = RESULTS.get(header, "General")
    sheet.freeze_panes = "A5"
    sheet.page_setup.orientation = "landscape"
    sheet.page_setup.fitToHeight = 0
    sheet.sheet_properties.pageSetUpPr = PageSetupProperties(fitToPage=True)


def put(sheet: Worksheet, row: int, cells: list[Any]) -> None:
    for place, cell in enumerate(cells, 1):
        sheet.cell(row, place, cell)


def main() -> None:
    dice = Random(20261114)
    book = Workbook()
    optical = book.active
    assert isinstance(optical, Worksheet)
    optical.title = "Optical arm"
    heading(
        optical,
        "Tarn Hollow Observatory, optical arm, night of 2026-11-14",
        [
            "UT",
            "Object",
            "Line ID",
            "Centre (Angstrom)",
            "Air/vac",
            "z adopted",
            "Remarks",
            *RESULTS,
        ],
    )
    row, minute = 5, 0
    for target, redshift, names in OPTICAL:
        for line in names.split("|"):
            in_vacuum = lines.find(line).vacuum * (1 + redshift) < 3400
            value = measured(line, redshift, dice, 0.25, not in_vacuum)
            when = datetime(2026, 11, 14, 20 + minute // 60, minute % 60)
            medium = "vacuum" if in_vacuum else "air"
            cells = [when, target, line, value, medium, redshift, None]
            put(optical, row, cells)
            optical.cell(row, 1).number_format = "HH:MM"
            row, minute = row + 1, minute + 7
    slips(optical)
    optical.cell(row + 1, 2, "Dome closed 03:40, humidity 92 %.")

    infrared = book.create_sheet("Infrared arm")
    heading(
        infrared,
        "Tarn Hollow Observatory, infrared arm, night of 2026-11-14",
        ["Object", "Line ID", "Centre [nm]", "z adopted", "Remarks", *RESULTS],
    )
    row = 5
    for target, redshift, names in INFRARED:
        for line in names.split("|"):
            value = round(measured(line, redshift, dice, 0.4, False) / 10, 3)
            put(infrared, row, [target, line, value, redshift])
            row += 1
    infrared["B9"] = "OIII"  # which of them?
    infrared["C12"] = None
    infrared["E12"] = "lost to a cosmic ray"

    weather = book.create_sheet("Weather")
    put(weather, 1, ["UT", "Temperature (C)", "Humidity (%)"])
    put(weather, 2, ["20:00", 4.1, 61])
    put(weather, 3, ["02:00", 1.3, 88])
    book.properties.creator = "Tarn Hollow Observatory (invented)"
    book.properties.created = book.properties.modified = datetime(2026, 11, 15, 4, 0)
    book.save(HERE / "night.xlsx")


def slips(sheet: Worksheet) -> None:
    """What hands do at three in the morning."""
    sheet["D7"] = -abs(float(sheet["D7"].value or 0))  # a sign slipped in
    sheet["C10"] = "Halfa"  # no such line
    sheet["D13"] = "6586.1 A"  # the unit typed along
    sheet["D16"] = None
    sheet["G16"] = "too faint"
    sheet["E19"] = "ari"
    sheet["D24"] = 88.62  # two digits lost
    sheet["G24"] = "check!"


if __name__ == "__main__":
    main()
