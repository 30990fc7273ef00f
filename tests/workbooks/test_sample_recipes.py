"""Spectrum summary, cluster members and Hubble diagram, from typed rows to results.

Outside: the three spreadsheet engines of recalculate.py, and numpy's own mean and standard
deviation in a loop that knows nothing of the recipes. The functions in Python that are called here
tests/published/ holds to scipy, astropy and printed tables.
"""

import random
import re
from collections.abc import Callable
from dataclasses import dataclass
from functools import cached_property
from math import isclose, isnan
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from openpyxl import load_workbook
from published.test_samples import NEBULAE
from recalculate import ENGINES, ErrorCell, Sheets, Value, recalculated, save

import cellfuncs as cf
from workbooks.build import build
from workbooks.fill import Report, fill
from workbooks.recipe import Table, load
from workbooks.template.sheets import FIRST_ROW, letters_of

RECIPES = ("spectrum-summary", "cluster-members", "hubble-diagram")
C = 299_792.458  # km/s, exact in the SI

every_engine = pytest.mark.parametrize("engine", ENGINES)
every_recipe = pytest.mark.parametrize("name", RECIPES)

# Spectra -----------------------------------------------------------------------------------------

LINES = ("H alpha", "H beta", "[O III] 5007", "[O III] 4959", "[N II] 6584", "[S II] 6716")
# Name as typed in turn, redshift, whether the lines are named by the observer.
SPECTRA: list[tuple[tuple[Any, ...], float, bool]] = [
    (("NGC 1234", " ngc 1234", "Ngc  1234 "), 0.0123, True),
    (("field*",), 0.3, True),
    (("field", "FIELD"), 0.05, True),
    (("field?",), 0.071, True),
    (('the "red" one', 'THE "RED" ONE'), 0.11, True),
    ((12, "12"), 0.021, True),
    (("unknown A",), 0.1534, False),
    (("unknown B", "Unknown b"), 0.0471, False),
]


def lines_measured() -> list[tuple[Any, ...]]:
    some = random.Random(5)
    rows: list[tuple[Any, ...]] = []
    for names, z, named in SPECTRA:
        for at, line in enumerate(LINES):
            error = 0.2 + 0.05 * at
            seen = cf.wavelength_observed(cf.line_wavelength(line), z) + some.gauss(0, error)
            rows.append((names[at % len(names)], line if named else None, seen, error))
    some.shuffle(rows)
    # a line 40 σ off
    spoilt = next(at for at, row in enumerate(rows) if row[:2] == ("field*", "H beta"))
    name, line, seen, error = rows[spoilt]
    rows[spoilt] = (name, line, seen + 40 * error, error)
    rows[20:20] = [
        (None, None, None, None),
        ("field?", "H alfa", 7030.0, 0.3),
        ("field?", "H gamma", "blend", 0.3),
        ("field?", "H gamma", 4650.0, None),
        ("field?", "H gamma", 4650.0, "small"),
        ("field?", "H gamma", -4650.0, 0.3),
        (None, "H gamma", 4650.0, 0.3),
        ("alone", "Ca II K", 3990.0, 0.4),
        ("zero error", "Ca II K", 3990.0, 0.0),
        ("zero error", "Ca II H", 4025.0, 0.4),
        ("no line", None, 4000.0, 0.4),
    ]
    return rows


# Galaxies ----------------------------------------------------------------------------------------


def field_of_galaxies() -> list[tuple[Any, ...]]:
    some = random.Random(11)
    velocities = [some.gauss(9000, 700) for _ in range(30)]
    velocities += [some.uniform(2000, 22000) for _ in range(8)]
    some.shuffle(velocities)
    rows: list[tuple[Any, ...]] = [
        (f"g{at}", v, some.choice([None, 25.0, 60.0])) for at, v in enumerate(velocities)
    ]
    rows[10:10] = [
        ("star", "no emission", 30.0),
        (None, None, None),
        ("nameless", 9100.0, "poor"),
        ("backwards", -3e5, 30.0),
        ("ionised", 9200.0, -10.0),
    ]
    return rows


def distances_and_velocities() -> list[tuple[Any, ...]]:
    rows: list[tuple[Any, ...]] = [
        (name, d, v, 20.0 if at % 3 else None)
        for at, (name, (d, v, _, _)) in enumerate(NEBULAE.items())
    ]
    rows[5:5] = [
        (None, None, None, None),
        ("no distance", None, 900.0, 20.0),
        ("no velocity", 1.3, None, None),
        ("remark", "far", 900.0, 20.0),
    ]
    return rows


# What is typed, on which sheet, and which sheets show results.
TYPED: dict[str, tuple[Callable[[], list[tuple[Any, ...]]], str, tuple[str, ...]]] = {
    "spectrum-summary": (lines_measured, "Lines", ("Lines", "Spectra")),
    "cluster-members": (field_of_galaxies, "Galaxies", ("Galaxies", "Results")),
    "hubble-diagram": (distances_and_velocities, "Galaxies", ("Galaxies", "Results")),
}


@dataclass
class Night:
    """A template with rows typed in, and the same filled."""

    name: str
    rows: list[tuple[Any, ...]]
    template: Path
    report: Report

    @cached_property
    def values(self) -> Sheets:
        workbook = load_workbook(self.report.output, data_only=True)
        return {
            sheet.title: {
                cell.coordinate: _value(cell.value) for row in sheet.iter_rows() for cell in row
            }
            for sheet in workbook.worksheets
        }

    @cached_property
    def tables(self) -> list[Table]:
        recipe = load(self.name)
        return [*recipe.tables, *recipe.summaries]

    def column(self, key: str, sheet: int = 0) -> list[Any]:
        table = self.tables[sheet]
        letter = letters_of(table)[key]
        cells = self.values[table.sheet.name]
        return [cells.get(f"{letter}{FIRST_ROW + at}") for at in range(len(self.rows))]

    @cached_property
    def status(self) -> list[Any]:
        table = self.tables[0]
        letter = chr(ord("A") + len(table.sheet.columns))
        cells = self.values[table.sheet.name]
        return [cells.get(f"{letter}{FIRST_ROW + at}") for at in range(len(self.rows))]

    @cached_property
    def results(self) -> dict[str, Any]:
        workbook = load_workbook(self.report.output, data_only=True)
        return {
            key: _value(workbook["Results"][place.attr_text.rpartition("!")[2]].value)
            for key, place in workbook.defined_names.items()
            if place.attr_text.startswith("'Results'")
        }


def _value(found: Any) -> Value:
    if isinstance(found, str) and found.startswith("#"):
        return ErrorCell(found)
    if found == "" or found is None:
        return None
    return float(found) if type(found) is int else found


def typed_into(path: Path, sheet_name: str, rows: list[tuple[Any, ...]]) -> Path:
    workbook = load_workbook(path)
    sheet = workbook[sheet_name]
    for row, values in enumerate(rows, FIRST_ROW):
        for place, value in enumerate(values, 1):
            cell = sheet.cell(row, place)
            cell.value = value
            if isinstance(value, str):
                cell.data_type = "s"
    return save(workbook, path)


def made(name: str, typed: list[tuple[Any, ...]], folder: Path, **how: Any) -> Night:
    path = folder / f"{name}.xlsx"
    build(load(name), path, **{"rows": len(typed) + 2, **how})
    typed_into(path, TYPED[name][1], typed)
    return Night(name, typed, path, fill(path, path.with_stem(f"{name}-filled")))


@pytest.fixture(scope="module")
def nights(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Night]:
    folder = tmp_path_factory.mktemp("recipes")
    return {name: made(name, rows(), folder) for name, (rows, _, _) in TYPED.items()}


def agree(found: Value, expected: Value) -> bool:
    if isinstance(found, float) and isinstance(expected, float):
        return isclose(found, expected, rel_tol=1e-9, abs_tol=1e-12)
    return (None if found == "" else found) == expected


@every_engine
@every_recipe
def test_the_filled_workbook_recalculated_is_what_fill_wrote(
    nights: dict[str, Night], name: str, engine: str
) -> None:
    night = nights[name]
    found = recalculated(Path(night.report.output), engine)
    wrong = [
        (title, place, value, expected)
        for title in TYPED[name][2]
        for place, expected in night.values[title].items()
        if int(place.lstrip("ABCDEFGHIJKLMNOPQRSTUVWXYZ")) >= FIRST_ROW
        if not agree(value := found[title].get(place), expected)
    ]
    assert not wrong, "\n".join(map(str, wrong))


@every_recipe
def test_there_is_an_answer_for_every_row(nights: dict[str, Night], name: str) -> None:
    night = nights[name]
    for row, status in zip(night.rows, night.status, strict=True):
        assert (status is None) == (not any(each is not None for each in row)), row


# Spectrum summary ---------------------------------------------------------------------------------


def group(name: Any) -> str:
    """Return a spectrum's name as a person tells it from others."""
    return " ".join(str(name).lower().split())


def found_by_hand() -> dict[str, dict[str, Any]]:
    """Return what each spectrum's typed rows give, by calls of the functions one by one."""
    spectra: dict[str, dict[str, Any]] = {}
    seen: Any
    for name, line, seen, error in lines_measured():
        if name is None or not isinstance(seen, float):
            continue
        spectrum = spectra.setdefault(group(name), {"name": name, "all": [], "lines": []})
        spectrum["all"].append(seen)
        try:
            z = cf.redshift_from_line(seen, line)
            sigma = cf.uncertainty("REDSHIFT_FROM_LINE", [seen, line], [error])
        except cf.CellError:
            continue
        if isinstance(error, float):
            spectrum["lines"].append((z, sigma))
    return spectra


def test_each_spectrum_has_the_weighted_mean_of_its_lines(nights: dict[str, Night]) -> None:
    night = nights["spectrum-summary"]
    by_hand = found_by_hand()
    names = night.column("name", sheet=1)
    known = [group(name) for name in names if name is not None]
    # in the order in which they first occur, each once
    firsts = [
        group(int(row[0]) if isinstance(row[0], float) else row[0]) for row in night.rows if row[0]
    ]
    assert [each.removesuffix(".0") for each in known] == list(dict.fromkeys(firsts))
    for at, name in enumerate(known):
        spectrum = by_hand[name.removesuffix(".0")]
        shown = [
            night.column(key, sheet=1)[at]
            for key in ("lines_used", "weighted", "weighted_error", "chi_squared")
        ]
        named = next(
            (each[2] for each in SPECTRA if group(each[0][0]) == name.removesuffix(".0")), True
        )
        if not named or name == "no line":
            continue
        if name == "zero error":
            assert shown == [ErrorCell("#NUM!")] * 4
            continue
        values, sigmas = zip(*spectrum["lines"], strict=True)
        parts = ("count", "mean", "sigma", "chi2")
        expected = [cf.mean_weighted(values, sigmas, part) for part in parts]
        assert shown == pytest.approx(expected, rel=1e-9, abs=1e-12), name


def test_unnamed_lines_are_named_at_the_redshift_that_was_found(nights: dict[str, Night]) -> None:
    night = nights["spectrum-summary"]
    by_hand = found_by_hand()
    for name, z, named in SPECTRA:
        if named:
            continue
        key = group(name[0])
        rows = [at for at, row in enumerate(night.rows) if group(row[0]) == key]
        solved = cf.redshift_solved(by_hand[key]["all"])
        assert abs(solved - z) < 2e-4
        for at in rows:
            assert night.column("solved")[at] == pytest.approx(solved, rel=1e-12)
            assert night.column("chance")[at] < 0.01
            seen = night.rows[at][2]
            line = night.column("found")[at]
            assert line == cf.line_nearest(seen, solved, "vacuum", 15.0)
            assert line in {cf.physics.lines.find(each).name for each in LINES}
            assert night.column("redshift")[at] == pytest.approx(
                cf.redshift_from_line(seen, line), rel=1e-12
            )
        at = [group(each) for each in night.column("name", sheet=1) if each].index(key)
        assert night.column("lines_used", sheet=1)[at] == len(LINES)
        mean = night.column("weighted", sheet=1)[at]
        assert abs(mean - z) < 4 * night.column("weighted_error", sheet=1)[at]
        assert night.column("search", sheet=1)[at] == pytest.approx(solved, rel=1e-12)


def test_a_line_that_does_not_fit_is_pointed_out(nights: dict[str, Night]) -> None:
    night = nights["spectrum-summary"]
    spoilt = next(at for at, row in enumerate(night.rows) if row[:2] == ("field*", "H beta"))
    assert night.column("deviation")[spoilt] > 25
    # the mean it draws to itself leaves other lines of that spectrum beyond as well
    others = {at for at, words in enumerate(night.status) if "Deviation" in str(words)}
    assert spoilt in others
    assert {night.rows[at][0] for at in others} == {"field*"}
    assert night.status[spoilt] == "Deviation in σ is above 3"
    doubts = [str(each) for each in night.report.sheets[0].doubts]
    assert any(f"O{FIRST_ROW + spoilt}: " in each and "it is" in each for each in doubts)


def test_lines_found_by_chance_are_pointed_out(tmp_path: Path) -> None:
    some = random.Random(3)
    rows: list[tuple[Any, ...]] = [("noise", None, some.uniform(4000, 9000), 0.3) for _ in range(4)]
    rows += [("typed", line, cf.line_wavelength(line) * 1.1, 0.3) for line in LINES[:2]]
    night = made("spectrum-summary", rows, tmp_path)
    assert cf.redshift_solved([row[2] for row in rows[:4]], part="chance") > 0.01
    words = "Chance coincidence of the lines found is above 0.01"
    assert night.status == [words] * 4 + ["ok"] * 2


def test_bad_rows_are_told_and_spoil_no_other_spectrum(nights: dict[str, Night]) -> None:
    night = nights["spectrum-summary"]
    status = dict(zip(night.rows, night.status, strict=True))
    expected = {
        ("field?", "H alfa", 7030.0, 0.3): "Line: no such name, or one of several lines; "
        "see the sheet Line names",
        ("field?", "H gamma", "blend", 0.3): "Observed wavelength is not a number",
        ("field?", "H gamma", 4650.0, "small"): "Error is not a number",
        ("field?", "H gamma", -4650.0, 0.3): "Observed wavelength must be above 0 Angstrom",
        (None, "H gamma", 4650.0, 0.3): "Spectrum is missing",
        ("zero error", "Ca II K", 3990.0, 0.0): "Error must be above 0 Angstrom",
        ("zero error", "Ca II H", 4025.0, 0.4): "Redshift of the spectrum: no result; look at all "
        "rows of this Spectrum",
    }
    for row, words in expected.items():
        assert status[row] == words
    assert status[("alone", "Ca II K", 3990.0, 0.4)] == "ok"


@every_engine
def test_names_typed_are_enough_without_fill(nights: dict[str, Night], engine: str) -> None:
    """The template alone, nothing filled: spectra whose lines are named have all their results."""
    night = nights["spectrum-summary"]
    found = recalculated(night.template, engine)["Spectra"]
    letters = letters_of(load("spectrum-summary").summaries[0])
    complete = {group(names[0]) for names, _, named in SPECTRA if named} | {"alone", "zero error"}
    for at, name in enumerate(night.column("name", sheet=1)):
        for key in ("name", "lines_used", "weighted", "weighted_error", "chi_squared"):
            here = found[f"{letters[key]}{FIRST_ROW + at}"]
            if name is None:
                assert here == ""
            elif group(name).removesuffix(".0") in complete or key == "name":
                assert agree(here, night.column(key, sheet=1)[at]), (name, key)


def test_no_spectrum_is_lost_where_there_are_more_than_rows(tmp_path: Path) -> None:
    rows: list[tuple[Any, ...]] = [
        (f"s{at}", "H alpha", 6564.61 * (1 + at / 100), 0.5) for at in range(47)
    ]
    night = made("spectrum-summary", rows, tmp_path, rows=None)
    sheet = night.values["Spectra"]
    assert [sheet.get(f"A{FIRST_ROW + at}") for at in range(47)] == [f"s{at}" for at in range(47)]
    for at in (0, 39, 40, 46):
        assert sheet[f"C{FIRST_ROW + at}"] == pytest.approx(
            cf.redshift_from_line(rows[at][2], "H alpha"), abs=1e-12
        )
    for engine in ENGINES:
        words = "This sheet has rows for 40 of 47; «cellfuncs fill» writes them all."
        assert recalculated(night.template, engine)["Spectra"]["A2"] == words


# Cluster members ----------------------------------------------------------------------------------


def clipped(velocities: list[float], times: float = 3.0) -> list[float]:
    """Return what a 3-σ rule leaves, repeated until nothing changes."""
    left = np.array(velocities)
    while True:
        inside = abs(np.array(velocities) - left.mean()) <= times * left.std(ddof=1)
        if len(left) == inside.sum() and set(left) == set(np.array(velocities)[inside]):
            return [float(each) for each in left]
        left = np.array(velocities)[inside]


def test_members_are_those_of_the_rule_repeated(nights: dict[str, Night]) -> None:
    night = nights["cluster-members"]
    velocities = [row[1] for row in night.rows if isinstance(row[1], float)]
    members = clipped(velocities)
    assert 25 <= len(members) < len(velocities) - 4
    for row, member, status in zip(night.rows, night.column("member"), night.status, strict=True):
        if not isinstance(row[1], float):
            assert member is None or isinstance(member, ErrorCell)
        else:
            assert member == float(row[1] in members), row
            assert status == "ok" or row[0] in ("backwards", "nameless", "ionised")
    results = night.results
    assert results["members"] == len(members)
    assert results["last_change"] == 0
    assert results["mean_velocity"] == pytest.approx(np.mean(members), rel=1e-12)
    z = np.mean(members) / C
    assert results["cluster_redshift"] == pytest.approx(z, rel=1e-12)
    assert results["dispersion"] == pytest.approx(np.std(members, ddof=1) / (1 + z), rel=1e-12)
    for key, method, part in (
        ("dispersion_error", "standard", "error"),
        ("robust_dispersion", "biweight", "sigma"),
        ("robust_error", "biweight", "error"),
    ):
        assert results[key] == pytest.approx(
            cf.velocity_dispersion(members, z, method, part), rel=1e-9
        )


def test_peculiar_velocities_are_those_in_the_clusters_frame(nights: dict[str, Night]) -> None:
    night = nights["cluster-members"]
    z_cluster = night.results["cluster_redshift"]
    for row, peculiar, error in zip(
        night.rows, night.column("peculiar"), night.column("peculiar_sigma"), strict=True
    ):
        if isinstance(row[1], float) and row[0] != "backwards":
            z = row[1] / C
            assert peculiar == pytest.approx(cf.velocity_peculiar(z, z_cluster), rel=1e-9)
            if isinstance(row[2], float) and row[2] > 0:
                # d(peculiar)/d(cz) is 1/(1 + z of the cluster)
                assert error == pytest.approx(row[2] / (1 + z_cluster), rel=1e-9)


@every_engine
def test_the_histogram_counts_every_member_once(nights: dict[str, Night], engine: str) -> None:
    night = nights["cluster-members"]
    points = recalculated(Path(night.report.output), engine)["Galaxies points"]
    heads = {str(value): place.rstrip("1") for place, value in points.items() if place[-1:] == "1"}
    counts = [points[f"{heads['peculiar: n']}{FIRST_ROW + at}"] for at in range(11)]
    middles = [points[f"{heads['peculiar: middle']}{FIRST_ROW + at}"] for at in range(11)]
    inside = [
        each
        for each, member in zip(night.column("peculiar"), night.column("member"), strict=True)
        if member == 1.0
    ]
    expected, edges = np.histogram(inside, bins=11)
    assert counts == expected.tolist()
    assert middles == pytest.approx((edges[:-1] + edges[1:]) / 2, rel=1e-9, abs=1e-9)


# Hubble diagram -----------------------------------------------------------------------------------


def test_hubbles_nebulae_have_the_published_slope(nights: dict[str, Night]) -> None:
    """Outside: numpy's least squares; 424 and 454: see tests/published/test_samples.py."""
    night = nights["hubble-diagram"]
    pairs = [
        (d, v) for _, d, v, _ in night.rows if isinstance(d, float) and isinstance(v, (int, float))
    ]
    d, v = np.array(pairs).T
    results = night.results
    assert results["galaxies"] == 24
    assert results["slope"] == pytest.approx((d @ v) / (d @ d), rel=1e-12)
    slope, intercept = np.polyfit(d, v, 1)
    assert results["free_slope"] == pytest.approx(slope, rel=1e-10)
    assert results["intercept"] == pytest.approx(intercept, rel=1e-9)
    assert round(results["slope"]) == 424
    assert round(results["free_slope"]) == 454
    # Gyr: 1/H0 of 423.9 km/s/Mpc
    assert results["expansion_age"] == pytest.approx(977.792 / results["slope"], rel=1e-5)


def test_a_galaxy_that_approaches_has_no_distance_and_counts_in_the_fit(
    nights: dict[str, Night],
) -> None:
    night = nights["hubble-diagram"]
    for at, row in enumerate(night.rows):
        if isinstance(row[1], float) and isinstance(row[2], (int, float)):
            fitted = night.results["slope"] * row[1]
            assert night.column("residual")[at] == pytest.approx(row[2] - fitted, rel=1e-9)
            assert isinstance(night.column("linear")[at], ErrorCell) == (row[2] < 0)
            assert isinstance(night.column("full")[at], ErrorCell) == (row[2] < 0)
            assert (night.status[at] == "ok") == (row[2] > 0)


def test_the_linear_law_and_the_full_expansion_part_with_distance(
    nights: dict[str, Night],
) -> None:
    """To first order in z they part by (1 − q0)/2·z: Hogg 1999; q0 = −0.53 for Planck18."""
    q0 = cf.deceleration(0.0)
    for z in (0.01, 0.03):
        linear = cf.distance_hubble(cf.velocity_from_redshift(z, "optical"))
        full = cf.distance_luminosity(z)
        assert full / linear - 1 == pytest.approx((1 - q0) / 2 * z, rel=0.03)


# The templates ------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def templates(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Path]:
    folder = tmp_path_factory.mktemp("templates")
    for name in RECIPES:
        build(load(name), folder / f"{name}.xlsx")
    return {name: folder / f"{name}.xlsx" for name in RECIPES}


SHEETS = {
    "spectrum-summary": ["Lines", "Spectra", "Lines chart", "Settings", "Line names"],
    "cluster-members": ["Galaxies", "Results", "Chart", "Settings"],
    "hubble-diagram": ["Galaxies", "Results", "Chart", "Settings"],
}


@every_recipe
def test_a_template_is_small_and_has_its_sheets_in_order(
    templates: dict[str, Path], name: str
) -> None:
    assert templates[name].stat().st_size < 2_000_000
    visible = [
        sheet.title for sheet in load_workbook(templates[name]) if sheet.sheet_state == "visible"
    ]
    assert visible == [*SHEETS[name], "How to use", "Provenance"]


@every_engine
@every_recipe
def test_an_empty_template_shows_no_error(tmp_path: Path, name: str, engine: str) -> None:
    path = tmp_path / "empty.xlsx"
    build(load(name), path, rows=12)
    found = recalculated(path, engine)
    errors = [
        (sheet.title, place, value)
        for sheet in load_workbook(path)
        if sheet.sheet_state == "visible"
        for place, value in found[sheet.title].items()
        if isinstance(value, ErrorCell) or (isinstance(value, float) and isnan(value))
    ]
    assert not errors


@every_recipe
def test_every_visible_column_and_result_is_explained_with_its_source(
    templates: dict[str, Path], name: str
) -> None:
    workbook = load_workbook(templates[name])
    how_to = {
        row[0]: row[2] for row in workbook["How to use"].iter_rows(values_only=True) if row[0]
    }
    sources = {row[0]: row[1] for row in workbook["Provenance"].iter_rows(values_only=True)}
    recipe = load(name)
    for table in (*recipe.tables, *recipe.summaries):
        for column in table.sheet.columns:
            assert how_to.get(column.label) or column.hidden, column.label
        of = f"{table.sheet.name}: " if table.gathers else ""
        computed: list[tuple[str, Any]] = [(f"{of}{each.header}", each) for each in table.computed]
        results = [(each.label, each) for each in table.sheet.results]
        for label, each in (*computed, *results):
            if (
                (re.search(r"[a-z]\(", each.formula) or (of and each.key != "name"))
                and not each.hidden
                and not each.key.endswith("_sigma")
            ):
                assert re.match(r"[A-Z_]{9,}: \S", str(sources[label])), label
        for result in table.sheet.results:
            assert bool(how_to.get(result.label)) == (not result.hidden), result.label
            place = workbook.defined_names[result.key].attr_text
            assert place.startswith("'Results'!")


def shown(value: Value) -> Value:
    """Return a value, None where an input lacks: a cell without a formula then says #N/A."""
    return None if value == ErrorCell("#N/A") else value


@every_recipe
@pytest.mark.parametrize("formulas", ["none", "calc", "excel"])
def test_fill_gives_the_same_in_every_kind_of_template(
    nights: dict[str, Night], tmp_path: Path, name: str, formulas: str
) -> None:
    night = made(name, nights[name].rows, tmp_path, formulas=formulas)
    for title in TYPED[name][2]:
        plain = nights[name].values[title]
        wrong = [
            (title, place, value, plain.get(place))
            for place, value in night.values[title].items()
            if int(place.lstrip("ABCDEFGHIJKLMNOPQRSTUVWXYZ")) >= FIRST_ROW
            if shown(value) != shown(plain.get(place))
        ]
        assert not wrong
