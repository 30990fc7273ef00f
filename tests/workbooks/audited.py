"""Makes logbooks with mistakes put in by hand, and clean ones beside them, the same each time.

Nothing here knows how mistakes are found: files are written with zipfile and plain XML, so that a
cell can hold a formula with any stored result. Numbers are invented; what a log computes is worked
out by `fill` (its own tests hold it to the outside) or by the few lines below.

A mistake is told as (sheet, cell, kind). What it brings along elsewhere in its row is told too, so
that nothing but what was put in may be found.
"""

import re
import zipfile
from collections.abc import Callable
from dataclasses import dataclass, field
from datetime import datetime, timedelta
from pathlib import Path
from random import Random
from typing import Any
from xml.sax.saxutils import escape

import openpyxl

from workbooks.build import build
from workbooks.fill import fill
from workbooks.recipe import Recipe, load, read

C = 299792.458

# Wavelengths in air and in vacuum, Angstrom: handbook values, from memory.
LINES = {
    "H alpha": (6562.79, 6564.61),
    "H beta": (4861.33, 4862.68),
    "[O III] 5007": (5006.84, 5008.24),
    "[N II] 6584": (6583.45, 6585.27),
    "[S II] 6731": (6730.82, 6732.67),
    "Ca II 8542": (8542.09, 8544.44),
}

Place = tuple[str, str, str]
"""Sheet, cell, kind of the mistake"""


@dataclass(frozen=True)
class Formula:
    text: str
    result: Any


@dataclass(frozen=True)
class Error:
    text: str


@dataclass
class Audited:
    """A logbook, the recipe to check it by, and every mistake in it."""

    path: Path
    recipe: Recipe | None
    mistakes: set[Place] = field(default_factory=set)
    rows: int = 0


# ---- writing a workbook ---------------------------------------------------------------------

MAIN = "http://schemas.openxmlformats.org/spreadsheetml/2006/main"
OFFICE = "http://schemas.openxmlformats.org/officeDocument/2006/relationships"
PACKAGE = "http://schemas.openxmlformats.org/package/2006"
DAY_ZERO = datetime(1899, 12, 30)


def letters(number: int) -> str:
    return (
        chr(64 + number)
        if number <= 26
        else letters((number - 1) // 26) + letters((number - 1) % 26 + 1)
    )


def cell_xml(place: str, value: Any, style: str = "") -> str:
    """Return a cell's XML; a date has the workbook's second style."""
    inside, kind = "", ""
    formula = ""
    if isinstance(value, Formula):
        formula, value = f"<f>{escape(value.text)}</f>", value.result
    if isinstance(value, datetime):
        style = ' s="1"'
        days = (value - DAY_ZERO) / timedelta(days=1)
        inside = f"<v>{days!r}</v>"
    elif isinstance(value, bool):
        kind, inside = ' t="b"', f"<v>{value:d}</v>"
    elif isinstance(value, (int, float)):
        inside = f"<v>{value!r}</v>"
    elif isinstance(value, Error):
        kind, inside = ' t="e"', f"<v>{value.text}</v>"
    elif isinstance(value, str) and formula:
        kind, inside = ' t="str"', f"<v>{escape(value)}</v>"
    elif isinstance(value, str):
        kind = ' t="inlineStr"'
        inside = f'<is><t xml:space="preserve">{escape(value)}</t></is>'
    return f'<c r="{place}"{style}{kind}>{formula}{inside}</c>'


def write(path: Path, sheets: dict[str, list[list[Any]]]) -> Path:
    """Write a workbook of these rows."""
    names = "".join(
        f'<sheet name="{escape(name)}" sheetId="{n}" r:id="r{n}"/>'
        for n, name in enumerate(sheets, 1)
    )
    links = "".join(
        f'<Relationship Id="r{n}" Type="{OFFICE}/worksheet" Target="worksheets/sheet{n}.xml"/>'
        for n in range(1, len(sheets) + 1)
    )
    types = "".join(
        f'<Override PartName="/xl/worksheets/sheet{n}.xml" ContentType="application/vnd.'
        'openxmlformats-officedocument.spreadsheetml.worksheet+xml"/>'
        for n in range(1, len(sheets) + 1)
    )
    kind = "application/vnd.openxmlformats-officedocument.spreadsheetml"
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        archive.writestr(
            "[Content_Types].xml",
            f'<Types xmlns="{PACKAGE}/content-types"><Default Extension="rels" '
            'ContentType="application/vnd.openxmlformats-package.relationships+xml"/>'
            f'<Override PartName="/xl/workbook.xml" ContentType="{kind}.sheet.main+xml"/>'
            f'<Override PartName="/xl/styles.xml" ContentType="{kind}.styles+xml"/>{types}</Types>',
        )
        archive.writestr(
            "_rels/.rels",
            f'<Relationships xmlns="{PACKAGE}/relationships"><Relationship Id="r1" '
            f'Type="{OFFICE}/officeDocument" Target="xl/workbook.xml"/></Relationships>',
        )
        archive.writestr(
            "xl/workbook.xml",
            f'<workbook xmlns="{MAIN}" xmlns:r="{OFFICE}"><sheets>{names}</sheets></workbook>',
        )
        archive.writestr(
            "xl/_rels/workbook.xml.rels",
            f'<Relationships xmlns="{PACKAGE}/relationships">{links}<Relationship Id="s" '
            f'Type="{OFFICE}/styles" Target="styles.xml"/></Relationships>',
        )
        archive.writestr(
            "xl/styles.xml",
            f'<styleSheet xmlns="{MAIN}"><fonts count="1"><font/></fonts><fills count="1"><fill>'
            '<patternFill patternType="none"/></fill></fills><borders count="1"><border/></borders>'
            '<cellStyleXfs count="1"><xf/></cellStyleXfs><cellXfs count="2"><xf numFmtId="0"/>'
            '<xf numFmtId="22" applyNumberFormat="1"/></cellXfs></styleSheet>',
        )
        for n, rows in enumerate(sheets.values(), 1):
            body = "".join(
                f'<row r="{r}">'
                + "".join(
                    cell_xml(f"{letters(c)}{r}", value)
                    for c, value in enumerate(row, 1)
                    if value is not None
                )
                + "</row>"
                for r, row in enumerate(rows, 1)
            )
            archive.writestr(
                f"xl/worksheets/sheet{n}.xml",
                f'<worksheet xmlns="{MAIN}"><sheetData>{body}</sheetData></worksheet>',
            )
    return path


def overwrite_cells(path: Path, sheet: str, cells: dict[str, Any]) -> None:
    """Put values into cells of a file as another program would, all else left as it is."""
    book = openpyxl.load_workbook(path, read_only=True)
    part = f"xl/worksheets/sheet{book.sheetnames.index(sheet) + 1}.xml"
    book.close()
    with zipfile.ZipFile(path) as archive:
        parts = {info.filename: archive.read(info) for info in archive.infolist()}
    text = parts[part].decode()
    for place, value in cells.items():
        found = re.search(rf'<c r="{place}"((?: s="\d+")?)[^>]*?(?:/>|>.*?</c>)', text, re.S)
        assert found, f"{sheet}!{place} is not in the file"
        text = text[: found.start()] + cell_xml(place, value, found[1]) + text[found.end() :]
    parts[part] = text.encode()
    with zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as archive:
        for name, content in parts.items():
            archive.writestr(name, content)


# ---- a log of an observatory's own, filled by the recipe -------------------------------------

OWN_RECIPE = """
title = "Tarn Hollow night log"
purpose = "An invented observatory's own log."
cosmology = "Planck18"

[[settings]]
key = "shortest"
label = "Shortest wavelength"
group = "Instrument"
unit = "nm"
value = 330

[[sheets]]
name = "Lines"

[[sheets.columns]]
key = "target"
label = "Target"
role = "input"
kind = "text"

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"

[[sheets.columns]]
key = "observed"
label = "Centre"
unit = "Angstrom"
role = "input"
at_least = "shortest"

[[sheets.columns]]
key = "medium"
label = "Air/vac"
role = "input"
choices = ["vacuum", "air"]

[[sheets.columns]]
key = "adopted"
label = "z adopted"
role = "input"
required = false

[[sheets.columns]]
key = "redshift"
label = "Redshift"
role = "computed"
formula = "redshift_from_line(observed, line, medium)"

[[sheets.columns]]
key = "offset"
label = "Offset at rest"
unit = "km/s"
role = "computed"
formula = "velocity_peculiar(redshift, adopted)"

[[sheets.columns]]
key = "distance"
label = "Luminosity distance"
unit = "Mpc"
role = "computed"
formula = "distance_luminosity(redshift)"
"""

FILLED_HEADERS = [
    "UT", "Target", "Line", "Centre [nm]", "Air/vac", "z adopted", "Exposure [s]",
    "Seeing [arcsec]", "Remark", "Redshift", "Offset at rest [km/s]", "Luminosity distance [Mpc]",
]  # fmt: skip
NIGHT = "Night"
HEADER = 3
RESULTS = ("J", "K", "L")
"""The computed columns of this log; M is «Computed with»"""


def filled_log(folder: Path, number: int, rows: int, mistakes: tuple[str, ...]) -> Audited:
    dice = Random(f"filled {number}")
    table: list[list[Any]] = []
    started = datetime(2031, 3, 14, 19, 0) + timedelta(days=number)
    for n in range(rows):
        line = dice.choice(sorted(LINES))
        medium = dice.choice(["air", "vacuum"])
        redshift = dice.uniform(0.01, 0.3)
        rest = LINES[line][medium == "vacuum"]
        table.append(
            [
                started + timedelta(minutes=7 * n),
                f"TH {dice.randrange(10000):04d}-{n % 90:02d}",
                line,
                round(rest * (1 + redshift) / 10 + dice.gauss(0, 0.02), 3),
                medium,
                round(redshift, 4),
                dice.choice([300.0, 600.0, 900.0]),
                round(dice.uniform(0.7, 1.9), 1),
                dice.choice([None, None, "thin cirrus"]),
            ]
        )
    headers = list(FILLED_HEADERS)
    found: set[Place] = set()
    first = HEADER + 1

    def note(column: str, row: int, kind: str) -> None:
        found.add((NIGHT, f"{column}{row}", kind))

    def spoilt(row: int, columns: tuple[str, ...] = RESULTS) -> None:
        for column in columns:
            note(column, row, "error value")

    def row_of(share: float) -> int:
        return first + int(share * rows)

    if "number as text" in mistakes:
        row = row_of(0.1)
        table[row - first][3] = f"{table[row - first][3]} nm"
        note("D", row, "number as text")
        spoilt(row)
        row = row_of(0.15)
        table[row - first][6] = "1,200"
        note("G", row, "number as text")
    if "turned into a date" in mistakes:
        row = row_of(0.2)
        table[row - first][5] = datetime(2031, 5, 3)
        note("F", row, "turned into a date")
        spoilt(row, ("K",))
        row = row_of(0.25)
        table[row - first][1] = datetime(2031, 9, 2)
        note("B", row, "turned into a date")
        row = row_of(0.27)
        table[row - first][7] = datetime(2031, 4, 1)
        note("H", row, "turned into a date")
    if "not a number" in mistakes:
        row = row_of(0.3)
        table[row - first][3] = "too faint"
        note("D", row, "not a number")
        spoilt(row)
    if "unknown word" in mistakes:
        row = row_of(0.35)
        table[row - first][4] = "ari"
        note("E", row, "unknown word")
        spoilt(row)
        row = row_of(0.4)
        table[row - first][2] = "Halfa"
        note("C", row, "unknown word")
        spoilt(row)
    if "out of range" in mistakes:
        row = row_of(0.45)
        table[row - first][3:6] = [312.0, "vacuum", None]
        table[row - first][2] = "C IV 1548"
        note("D", row, "out of range")
        row = row_of(0.5)
        table[row - first][3] = -table[row - first][3]
        note("D", row, "out of range")
        spoilt(row)
        row = row_of(0.52)
        table[row - first][6] = -300.0
        note("G", row, "out of range")
    if "error value" in mistakes:
        row = row_of(0.55)
        table[row - first][3] = Error("#DIV/0!")
        note("D", row, "error value")
        spoilt(row)
    if "repeated row" in mistakes:
        table[row_of(0.6) - first] = list(table[row_of(0.02) - first])
        note("A", row_of(0.6), "repeated row")
    if "repeated header" in mistakes:
        headers[7] = headers[6]
        note("H", HEADER, "repeated header")
    if "no unit" in mistakes:
        headers[6] = "Exposure"
        note("G", HEADER, "no unit")
    if "unknown unit" in mistakes:
        headers[7] = "Seeing [arcsecs]"
        note("H", HEADER, "unknown unit")
    if "misread unit" in mistakes:
        headers[7] = "Dome temperature (C)"
        note("H", HEADER, "unknown unit")
    recipe = read(OWN_RECIPE.encode(), "own.toml", "own")
    path = folder / f"filled-{number}.xlsx"
    weather = [
        ["UT", "Humidity [%]"],
        *[[started + timedelta(hours=h), 60.0 + h] for h in range(5)],
    ]
    source = write(
        folder / f"source-{number}.xlsx",
        {NIGHT: [["Tarn Hollow Observatory"], [], headers, *table], "Weather": weather},
    )
    fill(source, path, recipe, overwrite=True)
    source.unlink()
    after: dict[str, Any] = {}
    written = openpyxl.load_workbook(path)[NIGHT]
    if "differs" in mistakes:
        row = row_of(0.7)
        after[f"J{row}"] = 0.05
        note("J", row, "differs")
        row = row_of(0.75)
        after[f"D{row}"] = written[f"D{row}"].value + 0.4
        for column in RESULTS:
            note(column, row, "differs")
        row = row_of(0.77)
        # one digit, in the ninth place
        after[f"L{row}"] = written[f"L{row}"].value * (1 + 3e-9)
        note("L", row, "differs")
    for kind, share, old, new in (
        ("other version", 0.8, "cellfuncs ", "cellfuncs 0.0."),
        ("other constants", 0.85, "CODATA 2018", "CODATA 2014"),
        ("other cosmology", 0.9, "Planck18", "WMAP7"),
    ):
        if kind in mistakes:
            row = row_of(share)
            said = str(written[f"M{row}"].value)
            assert old in said
            after[f"M{row}"] = said.replace(old, new)
            note("M", row, kind)
    if after:
        overwrite_cells(path, NIGHT, after)
    return Audited(path, recipe, found, rows)


# ---- a log of an observatory's own, with its own formulas, no recipe -----------------------------

FORMULA_HEADERS = [
    "Target", "Line", "Observed wavelength, air [Angstrom]", "Rest wavelength, air [Angstrom]",
    "Reference z", "Earth's velocity [km/s]", "z measured", "z barycentric", "Velocity [km/s]",
    "Shift [Angstrom]", "Mean z", "Note",
]  # fmt: skip
ADDIN = "ORG.CELLFUNCS.CALC."
LOG = "Log & notes"


def formula_log(folder: Path, number: int, rows: int, mistakes: tuple[str, ...]) -> Audited:
    dice = Random(f"formulas {number}")
    before = ADDIN if number % 2 else ""
    found: set[Place] = set()
    headers = list(FORMULA_HEADERS)
    table: list[list[Any]] = []
    for n in range(rows):
        row = n + 2
        line = dice.choice(sorted(LINES))
        rest = LINES[line][0]
        reference = round(dice.uniform(0.01, 0.2), 4)
        observed = round(rest * (1 + reference) + dice.gauss(0, 0.2), 2)
        speed = round(dice.uniform(-29, 29), 2)
        z = observed / rest - 1
        beta = speed / C
        combined = (1 + z) * ((1 + beta) / (1 - beta)) ** 0.5 - 1
        table.append(
            [
                f"TH {dice.randrange(10000):04d}",
                line,
                observed,
                rest,
                reference,
                speed,
                Formula(f"{before}REDSHIFT_FROM_WAVELENGTH(C{row},D{row})", z),
                Formula(
                    f"{before}REDSHIFT_COMBINED(G{row},{before}REDSHIFT_FROM_VELOCITY(F{row}))",
                    combined,
                ),
                Formula(f'{before}VELOCITY_FROM_REDSHIFT(H{row},"optical")', C * combined),
                Formula(f"C{row}-D{row}", observed - rest),
                Formula(f"(E{row}+G{row})/2", (reference + z) / 2),
                f"spectrum {n}",
            ]
        )

    def put(column: str, row: int, value: Any, *kinds: str) -> None:
        table[row - 2][ord(column) - 65] = value
        for kind in kinds:
            found.add((LOG, f"{column}{row}", kind))

    def note(column: str, row: int, kind: str) -> None:
        found.add((LOG, f"{column}{row}", kind))

    def row_of(share: float) -> int:
        return 2 + int(share * rows)

    if "wrong unit" in mistakes:
        row = row_of(0.1)
        formula = Formula(f'{before}VELOCITY_FROM_REDSHIFT(F{row},"optical")', 1234.5)
        put("I", row, formula, "wrong unit", "formula changed")
        row = row_of(0.15)
        formula = Formula(f"{before}REDSHIFT_FROM_LINE(J{row}*1,F{row})", 0.1)
        put("G", row, formula, "formula changed")
        row = row_of(0.16)
        formula = Formula(f"{before}WAVELENGTH_EMITTED(C{row},I{row})/D{row}-1", 0.1)
        put("G", row, formula, "wrong unit", "formula changed")
    if "column in another unit" in mistakes:
        headers[2] = "Observed wavelength, air [nm]"
        for n, cells in enumerate(table):
            cells[2] = cells[2] / 10
            note("G", n + 2, "wrong unit")
            note("J", n + 2, "units mixed")
    if "units mixed" in mistakes:
        row = row_of(0.2)
        formula = Formula(f"C{row}-D{row}+F{row}", 300.1)
        put("J", row, formula, "units mixed", "formula changed")
        row = row_of(0.22)
        formula = Formula(f"IF(C{row}>0,I{row}+G{row},0)", 300.1)
        put("I", row, formula, "units mixed", "formula changed")
    if "media mixed" in mistakes:
        headers[3] = "Rest wavelength, vacuum [Angstrom]"
        for n, cells in enumerate(table):
            cells[3] = LINES[cells[1]][1]
            note("G", n + 2, "media mixed")
            note("J", n + 2, "media mixed")
            # and the typed value is that of a vacuum line beside a measurement in air
            note("D", n + 2, "media mixed")
    if "media mixed by call" in mistakes:
        row = row_of(0.25)
        formula = Formula(f"{before}REDSHIFT_FROM_LINE(C{row},B{row})", 0.1)
        put("G", row, formula, "media mixed", "formula changed")
        row = row_of(0.27)
        formula = Formula(f"C{row}/{before}LINE_WAVELENGTH(B{row})-1", 0.1)
        put("G", row, formula, "media mixed", "formula changed")
        row = row_of(0.29)
        put("D", row, LINES[table[row - 2][1]][1], "media mixed")
    if "redshifts added" in mistakes:
        row = row_of(0.3)
        formula = Formula(f"G{row}+F{row}/299792.458", 0.1)
        put("H", row, formula, "redshifts added", "formula changed")
        row = row_of(0.35)
        formula = Formula(f"G{row}+E{row}", 0.1)
        put("H", row, formula, "redshifts added", "formula changed")
        row = row_of(0.37)
        formula = Formula(f"G{row}+{before}REDSHIFT_FROM_VELOCITY(F{row})", 0.1)
        put("H", row, formula, "redshifts added", "formula changed")
        # these two are right
        row = row_of(0.38)
        formula = Formula(f"G{row}+E{row}+G{row}*E{row}", 0.1)
        put("H", row, formula, "formula changed")
        row = row_of(0.39)
        formula = Formula(f"(1+G{row})*(1+F{row}/299792.458)-1", 0.1)
        put("H", row, formula, "formula changed")
    if "typed over" in mistakes:
        put("G", row_of(0.4), 0.0512, "typed over")
        put("I", row_of(0.42), "see notes", "typed over")
        put("J", row_of(0.44), 321.0, "typed over")
    if "formula changed" in mistakes:
        row = row_of(0.45)
        formula = Formula(f"{before}REDSHIFT_FROM_WAVELENGTH(C{row - 1},D{row})", 0.1)
        put("G", row, formula, "formula changed")
    if "out of range" in mistakes:
        row = row_of(0.5)
        put("C", row, -table[row - 2][2], "out of range")
        put("G", row, Formula(table[row - 2][6].text, Error("#NUM!")), "error value")
        put("H", row, Formula(table[row - 2][7].text, Error("#NUM!")), "error value")
        put("I", row, Formula(table[row - 2][8].text, Error("#NUM!")), "error value")
        put("E", row_of(0.52), -1.5, "out of range")
    if "error value" in mistakes:
        row = row_of(0.55)
        put("D", row, None)
        put("G", row, Formula(table[row - 2][6].text, Error("#N/A")), "error value")
        row = row_of(0.57)
        put("H", row, Formula(f"G{row}/D{row + rows}", Error("#DIV/0!")), "error value",
            "formula changed")  # fmt: skip
        row = row_of(0.58)
        put("H", row, Formula(f"REDSHFT(G{row})", Error("#NAME?")), "error value",
            "formula changed")  # fmt: skip
    if "number as text" in mistakes:
        row = row_of(0.6)
        put("D", row, f"{table[row - 2][3]} A", "number as text")
        put("G", row, Formula(table[row - 2][6].text, Error("#VALUE!")), "error value")
        put("J", row, Formula(table[row - 2][9].text, Error("#VALUE!")), "error value")
        put("F", row_of(0.62), "−12.5", "number as text")
    if "turned into a date" in mistakes:
        put("F", row_of(0.65), datetime(2031, 5, 12), "turned into a date")
        put("A", row_of(0.67), datetime(2031, 3, 1), "turned into a date")
    if "repeated row" in mistakes:
        row = row_of(0.7)
        # the formulas move along with the row
        for place in (0, 1, 2, 3, 4, 5, 11):
            table[row - 2][place] = table[3][place]
        for place in range(6, 11):
            was = table[row - 2][place]
            table[row - 2][place] = Formula(was.text, table[3][place].result)
        note("A", row, "repeated row")
    if "repeated header" in mistakes:
        headers[11] = "Target"
        note("L", 1, "repeated header")
    if "no unit" in mistakes:
        headers[5] = "Earth's velocity"
        note("F", 1, "no unit")
    if "unknown unit" in mistakes:
        headers[8] = "Velocity [kms]"
        note("I", 1, "unknown unit")
        headers[9] = "Shift [A]"
        note("J", 1, "unknown unit")
    path = write(folder / f"formulas-{number}.xlsx", {LOG: [headers, *table]})
    return Audited(path, None, found, rows)


# ---- templates --------------------------------------------------------------------------------


def line_template(
    folder: Path, number: int, rows: int, mistakes: tuple[str, ...], formulas: str = "plain"
) -> Audited:
    dice = Random(f"{formulas} {number}")
    path = folder / f"{formulas}-{number}.xlsx"
    recipe = load("line-log")
    build(recipe, path, formulas=formulas, rows=rows + 8, overwrite=True)
    book = openpyxl.load_workbook(path)
    sheet = book["Lines"]
    found: set[Place] = set()
    at = {
        re.sub(r" \[.*", "", str(cell.value)): cell.column_letter for cell in sheet[4] if cell.value
    }
    results = [
        letter for label, letter in at.items()
        if label in ("Redshift", "Velocity, relativistic", "Velocity, optical", "Velocity, radio",
                     "Wavelength at rest", "Offset at rest")
    ]  # fmt: skip
    for row in range(5, 5 + rows):
        line = dice.choice(sorted(LINES))
        medium = dice.choice(["air", "vacuum", None])
        redshift = dice.uniform(0.001, 0.4)
        rest = LINES[line][medium != "air"]
        values: dict[str, Any] = {
            "Spectrum": f"th{row:04d}.fits",
            "Line": line,
            "Observed wavelength": round(rest * (1 + redshift) + dice.gauss(0, 0.2), 2),
            "Medium": medium,
            "Adopted redshift": dice.choice([None, round(redshift, 4)]),
        }
        for label, value in values.items():
            sheet[f"{at[label]}{row}"] = value

    def note(label: str, row: int, kind: str) -> None:
        found.add(("Lines", f"{at[label]}{row}", kind))

    def row_of(share: float) -> int:
        return 5 + int(share * rows)

    if "number as text" in mistakes:
        place = f"{at['Observed wavelength']}{row_of(0.1)}"
        sheet[place] = f"{sheet[place].value}Å"
        note("Observed wavelength", row_of(0.1), "number as text")
        sheet[f"{at['Adopted redshift']}{row_of(0.1)}"] = 0.1
        found |= {("Lines", f"{each}{row_of(0.1)}", "error value") for each in results}
    if "out of range" in mistakes:
        row = row_of(0.2)
        sheet[f"{at['Observed wavelength']}{row}"] = 31000.0
        note("Observed wavelength", row, "out of range")
    if "unknown word" in mistakes:
        row = row_of(0.3)
        sheet[f"{at['Line']}{row}"] = "[O III]"
        sheet[f"{at['Adopted redshift']}{row}"] = 0.1
        note("Line", row, "unknown word")
        found |= {("Lines", f"{each}{row}", "error value") for each in results}
    if "repeated row" in mistakes:
        for label in ("Spectrum", "Line", "Observed wavelength", "Medium", "Adopted redshift"):
            sheet[f"{at[label]}{row_of(0.4)}"] = sheet[f"{at[label]}{row_of(0.01)}"].value
        note("Spectrum", row_of(0.4), "repeated row")
    if "turned into a date" in mistakes:
        sheet[f"{at['Spectrum']}{row_of(0.45)}"] = datetime(2031, 12, 3)
        note("Spectrum", row_of(0.45), "turned into a date")
    book.save(path)
    fill(path, path, overwrite=True)
    after: dict[str, Any] = {}
    if "typed over" in mistakes:
        for label, share, value in (
            ("Redshift", 0.5, 0.0512), ("Velocity, optical", 0.55, 15000.0),
        ):  # fmt: skip
            after[f"{at[label]}{row_of(share)}"] = value
            note(label, row_of(share), "typed over" if formulas == "plain" else "differs")
    if "formula changed" in mistakes:
        row = row_of(0.6)
        was = openpyxl.load_workbook(path, data_only=True)["Lines"]
        place = f"{at['Velocity, optical']}{row}"
        formula = f"299792.458*{at['Redshift']}{row}"
        after[place] = Formula(formula, was[place].value)
        note("Velocity, optical", row, "formula changed")
    if "differs" in mistakes:
        row = row_of(0.65)
        place = f"{at['Redshift']}{row}"
        formula = str(openpyxl.load_workbook(path)["Lines"][place].value).removeprefix("=")
        was = openpyxl.load_workbook(path, data_only=True)["Lines"]
        after[place] = Formula(formula, was[place].value + 1e-4)
        note("Redshift", row, "differs")
    if "no unit" in mistakes:
        after[f"{at['Observed wavelength']}4"] = "Observed wavelength"
        note("Observed wavelength", 4, "no unit")
    if "unknown unit" in mistakes:
        after[f"{at['Velocity, optical']}4"] = "Velocity, optical [km/sec]"
        note("Velocity, optical", 4, "unknown unit")
    overwrite_cells(path, "Lines", after)
    _other_provenance(path, mistakes, found)
    if "bad setting" in mistakes:
        sheet_name, place = _named(path, "shortest_wavelength")
        overwrite_cells(path, sheet_name, {place: "3000 Angstrom"})
        found.add((sheet_name, place, "bad setting"))
    return Audited(path, None, found, rows)


def distance_template(folder: Path, number: int, rows: int, mistakes: tuple[str, ...]) -> Audited:
    dice = Random(f"distance {number}")
    path = folder / f"distance-{number}.xlsx"
    formulas = "none" if "other cosmology" in mistakes or number % 2 else "plain"
    build(load("distance-sheet"), path, formulas=formulas, rows=rows + 8, overwrite=True)
    book = openpyxl.load_workbook(path)
    sheet = book["Distances"]
    found: set[Place] = set()
    at = {
        re.sub(r" \[.*", "", str(cell.value)): cell.column_letter for cell in sheet[4] if cell.value
    }
    for row in range(5, 5 + rows):
        sheet[f"{at['Target']}{row}"] = f"TH {dice.randrange(10000):04d}{row % 9}"
        sheet[f"{at['Redshift']}{row}"] = round(dice.uniform(0.01, 3.0), 4)
        sheet[f"{at['Magnitude']}{row}"] = dice.choice([None, round(dice.uniform(14, 22), 2)])

    def row_of(share: float) -> int:
        return 5 + int(share * rows)

    if "number as text" in mistakes:
        place = f"{at['Magnitude']}{row_of(0.1)}"
        sheet[place] = "18,25"
        found.add(("Distances", place, "number as text"))
        found.add(("Distances", f"{at['Absolute magnitude']}{row_of(0.1)}", "error value"))
    if "turned into a date" in mistakes:
        place = f"{at['Target']}{row_of(0.2)}"
        sheet[place] = datetime(2031, 3, 1)
        found.add(("Distances", place, "turned into a date"))
    book.save(path)
    fill(path, path, overwrite=True)
    after: dict[str, Any] = {}
    if "typed over" in mistakes:
        place = f"{at['Lookback time']}{row_of(0.5)}"
        after[place] = 9.9
        found.add(("Distances", place, "typed over" if formulas == "plain" else "differs"))
    if "repeated header" in mistakes:
        after[f"{at['Scale']}4"] = "Lookback time [Gyr]"
        # two columns of one name: the recipe fits no more, the second of them is told
        found.add(("Distances", f"{at['Lookback time']}4", "repeated header"))
    overwrite_cells(path, "Distances", after)
    if "other cosmology" in mistakes:
        sheet_name, place = _named(path, "cosmology_set")
        overwrite_cells(path, sheet_name, {place: "WMAP7"})
        found.add((*_named(path, "last_filled"), "other cosmology"))
    _other_provenance(path, mistakes, found)
    return Audited(path, None, found, rows)


def _other_provenance(path: Path, mistakes: tuple[str, ...], found: set[Place]) -> None:
    for kind, name, value in (
        ("other version", "template_version", "cellfuncs 0.0.3"),
        ("other constants", "template_constants", "CODATA 2014, IAU 2012 B2"),
    ):
        if kind in mistakes:
            sheet, place = _named(path, name)
            overwrite_cells(path, sheet, {place: value})
            found.add((sheet, place, kind))


def _named(path: Path, name: str) -> tuple[str, str]:
    book = openpyxl.load_workbook(path, read_only=True)
    sheet, _, place = str(book.defined_names[name].attr_text).partition("!")
    book.close()
    return sheet.strip("'"), place.replace("$", "")


# ---- the twenty and the twenty ---------------------------------------------------------------

Maker = Callable[[Path, int, int, tuple[str, ...]], Audited]


def _unconnected(folder: Path, number: int, rows: int, mistakes: tuple[str, ...]) -> Audited:
    return line_template(folder, number, rows, mistakes, "none")


SEEDED: list[tuple[Maker, int, tuple[str, ...]]] = [
    (filled_log, 60, ("number as text", "turned into a date", "repeated row")),
    (filled_log, 80, ("not a number", "unknown word", "out of range", "no unit")),
    (filled_log, 120, ("differs", "other version", "other constants", "other cosmology")),
    (filled_log, 60, ("error value", "repeated header", "out of range", "differs")),
    (filled_log, 200, ("unknown unit", "number as text", "turned into a date", "not a number",
                       "unknown word", "out of range", "error value", "repeated row", "differs",
                       "other version", "other constants", "other cosmology", "no unit")),
    (filled_log, 60, ("misread unit", "other version")),
    (formula_log, 100, ("wrong unit", "units mixed", "redshifts added", "typed over")),
    (formula_log, 100, ("media mixed by call", "redshifts added", "formula changed")),
    (formula_log, 60, ("column in another unit",)),
    (formula_log, 60, ("media mixed",)),
    (formula_log, 100, ("out of range", "error value", "number as text", "turned into a date")),
    (formula_log, 100, ("repeated row", "repeated header", "no unit", "unknown unit")),
    (formula_log, 200, ("wrong unit", "units mixed", "media mixed by call", "redshifts added",
                        "typed over", "formula changed", "out of range", "error value",
                        "number as text", "turned into a date", "repeated row")),
    (line_template, 40, ("typed over", "formula changed", "differs", "out of range")),
    (line_template, 40, ("number as text", "unknown word", "repeated row", "turned into a date",
                         "no unit")),
    (line_template, 30, ("other version", "other constants", "unknown unit")),
    (_unconnected, 50, ("typed over", "number as text", "unknown word", "repeated row")),
    (_unconnected, 30, ("bad setting", "other version")),
    (distance_template, 30, ("typed over", "turned into a date", "repeated header",
                             "other constants")),
    (distance_template, 40, ("other cosmology", "number as text")),
]  # fmt: skip
"""Twenty logbooks: who makes each, its rows, its mistakes"""

CLEAN: list[tuple[Maker, int]] = [
    *[(filled_log, rows) for rows in (40, 75, 150, 3000, 20)],
    *[(formula_log, rows) for rows in (40, 90, 150, 5000, 25)],
    *[(line_template, rows) for rows in (25, 60, 100)],
    *[(_unconnected, rows) for rows in (30, 60)],
    *[(distance_template, rows) for rows in (20, 45, 70, 30)],
    (line_template, 1),
]
"""Twenty clean ones, two of them with thousands of rows"""


def seeded(number: int, folder: Path) -> Audited:
    maker, rows, mistakes = SEEDED[number]
    return maker(folder, number, rows, mistakes)


def clean(number: int, folder: Path) -> Audited:
    maker, rows = CLEAN[number]
    return maker(folder, 100 + number, rows, ())
