"""A recipe that does not hold is refused with file, line and near matches; nothing in it runs.

Outside checks: TOML 1.0 says what a well-formed file is; ECMA-376 part 1, 18.2.5 what a name of a
cell cannot be; astropy which units are of one kind.
"""

import subprocess
import sys
from pathlib import Path

import pytest

from workbooks.recipe import RecipeError, built_in, load, read

SOUND = """\
title = "Night log"
purpose = "One row a line."
cosmology = "Planck18"

[[settings]]
key = "reddest"
label = "Reddest"
group = "Instrument"
unit = "nm"
value = 900

[[settings]]
key = "site"
label = "Site"
group = "Site"
kind = "text"

[[sheets]]
name = "Lines"
rows = 10

[[sheets.columns]]
key = "wavelength"
label = "Wavelength"
unit = "Angstrom"
role = "input"
at_most = "reddest"

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"

[[sheets.columns]]
key = "redshift"
label = "Redshift"
role = "computed"
formula = "redshift_from_line(wavelength, line)"

[[sheets.columns]]
key = "velocity"
label = "Velocity"
unit = "km/s"
role = "computed"
formula = "velocity_from_redshift(redshift)"

[[sheets.charts]]
title = "Redshift of each line"
x = "wavelength"
y = ["redshift"]
"""


def line_of(text: str, part: str) -> int:
    """Return the line on which a part of the text stands; it must stand there once."""
    assert text.count(part) == 1, part
    return text[: text.index(part)].count("\n") + 1


def refusal(text: str | bytes) -> str:
    content = text if isinstance(text, bytes) else text.encode()
    with pytest.raises(RecipeError) as caught:
        read(content, "night.toml", "night")
    return str(caught.value)


def changed(old: str, new: str) -> str:
    assert SOUND.count(old) == 1, old
    return SOUND.replace(old, new)


def test_the_sound_recipe_is_read() -> None:
    recipe = read(SOUND.encode(), "night.toml", "night")
    (table,) = recipe.tables
    assert list(table.nodes) == ["redshift", "velocity"]
    assert table.required == {"wavelength", "line"}
    assert recipe.settings["reddest"].value == 900


@pytest.mark.parametrize("recipe_name", built_in())
def test_built_in_recipes_are_read(recipe_name: str) -> None:
    assert load(recipe_name).name == recipe_name


# What is wrong, where, and what the sentence must say beside the file and the line.
MISTAKES: dict[str, tuple[str, str, list[str]]] = {
    "unknown function": (
        'formula = "redshift_from_line(wavelength, line)"',
        'formula = "redshift_from_lines(wavelength, line)"',
        ["redshift_from_lines", "redshift_from_line"],
    ),
    "unknown key in a formula": (
        "redshift_from_line(wavelength, line)",
        "redshift_from_line(wavelenght, line)",
        ["wavelenght", "near matches: wavelength"],
    ),
    "unknown key of a column": ('role = "input"\nat_most', 'rolle = "input"\nat_most', ["rolle", "role"]),  # noqa: E501
    "unknown key at the top": ('purpose = "One', 'purpos = "One', ["purpos", "purpose"]),
    "unknown key of a setting": ("value = 900", "vallue = 900", ["vallue", "value"]),
    "unknown key of a chart": ('y = ["redshift"]', 'yy = ["redshift"]', ["yy"]),
    "unknown unit": ('unit = "Angstrom"', 'unit = "Angstroem"', ["Angstroem", "Angstrom"]),
    "unknown unit of a setting": ('unit = "nm"', 'unit = "nmm"', ["nmm", "nm"]),
    "result of another kind": ('unit = "km/s"', 'unit = "km"', ["km/s", "km"]),
    "argument of another kind": (
        "velocity_from_redshift(redshift)",
        "velocity_from_redshift(wavelength)",
        ["z of VELOCITY_FROM_REDSHIFT", "Angstrom"],
    ),
    "sum of two kinds": (
        "velocity_from_redshift(redshift)",
        "velocity_from_redshift(redshift) + wavelength",
        ["Angstrom", "km/s"],
    ),
    "limit names no setting": ('at_most = "reddest"', 'at_most = "redest"', ["redest", "reddest"]),
    "limit names a text": ('at_most = "reddest"', 'at_most = "site"', ["site"]),
    "limit of another kind": ('unit = "nm"\nvalue', 'unit = "s"\nvalue', ["reddest", "wavelength"]),
    "chart names no column": ('x = "wavelength"', 'x = "wavelenth"', ["wavelenth", "wavelength"]),
    "chart names a text": ('y = ["redshift"]', 'y = ["line"]', ["line"]),
    "two kinds on an axis": ('y = ["redshift"]', 'y = ["redshift", "velocity"]', ["velocity", "redshift"]),  # noqa: E501
    "nothing to draw": ('y = ["redshift"]', "y = []", ["y"]),
    "unknown set": ('cosmology = "Planck18"', 'cosmology = "Plank18"', ["Plank18", "Planck18"]),
    "formula of an input": ('kind = "line"', 'kind = "line"\nformula = "wavelength"', ["line"]),
    "computed without formula": (
        'formula = "velocity_from_redshift(redshift)"\n', "", ["velocity", "formula"],
    ),
    "role is no role": ('role = "input"\nkind', 'role = "inptu"\nkind', ["role", "input", "computed"]),  # noqa: E501
    "kind is no kind": ('kind = "line"', 'kind = "lines"', ["kind", "line"]),
    "rows is text": ("rows = 10", 'rows = "many"', ["rows"]),
    "rows is a logical": ("rows = 10", "rows = true", ["rows"]),
    "no rows": ("rows = 10", "rows = 0", ["rows"]),
    "rows below nothing": ("rows = 10", "rows = -5", ["rows"]),
    "more rows than a sheet has": ("rows = 10", "rows = 2000000", ["rows"]),
    "unit is a number": ('unit = "Angstrom"', "unit = 5", ["unit"]),
    "limit is a list": ('at_most = "reddest"', "at_most = [1]", ["at_most"]),
    "limit is no number": ('at_most = "reddest"', "at_most = nan", ["at_most"]),
    "limit is infinite": ('at_most = "reddest"', "at_most = inf", ["at_most"]),
    "value of a number is text": ("value = 900", 'value = "red"', ["value"]),
    "key has a blank": ('key = "velocity"', 'key = "the velocity"', ["the velocity"]),
    "key has a capital": ('key = "velocity"', 'key = "Velocity"', ["Velocity"]),
    "key twice": ('key = "velocity"', 'key = "redshift"', ["redshift", "taken"]),
    "key of the cosmology": ('key = "velocity"', 'key = "omega_matter"', ["omega_matter", "taken"]),
    "label twice": ('label = "Velocity"', 'label = " redshift "', ["redshift", "velocity"]),
    "sheet name": ('name = "Lines"', 'name = "Lines [1]"', ["Lines [1]"]),
    "long sheet name": ('name = "Lines"', f'name = "{"L" * 32}"', ["31"]),
    "leads back to itself": (
        "velocity_from_redshift(redshift)", "velocity * 2", ["velocity", "back to"],
    ),
    "too long": ("velocity_from_redshift(redshift)", "+".join(["redshift"] * 300), ["2000"]),
    "too many arguments": (
        "velocity_from_redshift(redshift)", "velocity_from_redshift(redshift, 'radio', 3)", ["2"],
    ),
    "argument missing": ("redshift_from_line(wavelength, line)", "redshift_from_line(wavelength)", ["line"]),  # noqa: E501
    "argument twice": (
        "velocity_from_redshift(redshift)",
        "velocity_from_redshift(redshift, z=redshift)",
        ["twice"],
    ),
    "argument unknown": (
        "velocity_from_redshift(redshift)",
        "velocity_from_redshift(redshift, konvention='radio')",
        ["konvention", "convention"],
    ),
    "convention unknown": (
        "velocity_from_redshift(redshift)", "velocity_from_redshift(redshift, 'rado')", ["radio"],
    ),
    "number out of its domain": ("velocity_from_redshift(redshift)", "velocity_from_redshift(-2)", ["-1"]),  # noqa: E501
    "text for a number": ("velocity_from_redshift(redshift)", "velocity_from_redshift('0.1')", ["number"]),  # noqa: E501
    "column of texts for a number": ("velocity_from_redshift(redshift)", "velocity_from_redshift(line)", ["number"]),  # noqa: E501
    "text plus number": ("velocity_from_redshift(redshift)", "redshift + 'a'", ["text"]),
    "number for a text": (
        "redshift_from_line(wavelength, line)", "redshift_from_line(wavelength, 5)", ["text"],
    ),
}  # fmt: skip


@pytest.mark.parametrize("what", MISTAKES)
def test_a_mistake_is_told_with_file_and_line(what: str) -> None:
    old, new, words = MISTAKES[what]
    text = changed(old, new)
    sentence = refusal(text)
    file, _, rest = sentence.partition(", line ")
    assert file == "night.toml"
    number, _, said = rest.partition(": ")
    for word in words:
        assert word in said
    assert 1 <= int(number) <= len(text.splitlines())


@pytest.mark.parametrize(
    ("what", "part"),
    [
        ("unknown function", "redshift_from_lines("),
        ("unknown key in a formula", "wavelenght"),
        ("unknown key of a column", "rolle"),
        ("unknown key of a setting", "vallue"),
        ("unknown unit", "Angstroem"),
        ("result of another kind", 'formula = "velocity_from'),
        ("role is no role", "inptu"),
        ("rows is text", "many"),
        ("limit is a list", "[1]"),
        ("key has a blank", "the velocity"),
        ("sheet name", "Lines [1]"),
        ("unknown set", "Plank18"),
        ("limit names no setting", "redest"),
        ("chart names no column", "wavelenth"),
    ],
)
def test_the_line_is_the_very_one(what: str, part: str) -> None:
    old, new, _ = MISTAKES[what]
    text = changed(old, new)
    assert f"night.toml, line {line_of(text, part)}: " in refusal(text)


def test_a_wrong_item_of_a_list_is_told_by_its_list() -> None:
    text = changed('kind = "line"', 'kind = "line"\naliases = ["Feature", 5]')
    sentence = refusal(text)
    assert f"line {line_of(text, 'aliases')}: " in sentence
    assert "aliases" in sentence
    assert "line 2: " in refusal("title = 'x'\nsteps = [1]\npurpose = 'y'\nsheets = []\n")


@pytest.mark.parametrize("line_break", ["\n", "\r\n"])
def test_lines_are_counted_whatever_ends_them(line_break: str) -> None:
    text = changed('unit = "Angstrom"', 'unit = "Angstroem"')
    sentence = refusal(text.replace("\n", line_break))
    assert f", line {line_of(text, 'Angstroem')}: " in sentence


# ---- nothing runs ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    "formula",
    [
        "redshift.real",
        "redshift.__class__.__bases__",
        "__import__('os').system('true')",
        "(lambda: redshift)()",
        "[redshift for redshift in (1, 2)]",
        "{redshift}",
        "{'a': redshift}",
        "redshift[0]",
        "redshift if redshift else 1",
        "redshift > 1",
        "redshift and 1",
        "not redshift",
        "~1 + redshift",
        "+redshift",
        "redshift // 2",
        "redshift % 2",
        "redshift @ redshift",
        "redshift | 1",
        "(z := redshift)",
        "f'{redshift}'",
        "velocity_from_redshift(*redshift)",
        "velocity_from_redshift(**redshift)",
        "eval('1')",
        "open('/etc/passwd')",
        "True",
        "None",
        "...",
        "b'1'",
        "1j",
        "redshift; redshift",
        "redshift = 1",
        "import os",
        "await redshift",
        "",
        "(",
        "redshift +",
        "redshift\\u0000",
    ],
)
def test_what_is_no_formula_is_refused(formula: str) -> None:
    text = changed('"velocity_from_redshift(redshift)"', f'"{formula}"')
    unit_line = line_of(text, 'unit = "km/s"')
    # an empty formula is none: then the column is named
    expected = unit_line + 2 if formula else unit_line - 3
    assert f"night.toml, line {expected}: " in refusal(text)


@pytest.mark.parametrize(
    "formula",
    [
        "-" * 1500 + "redshift",
        "(" * 900 + "redshift" + ")" * 900,
        "redshift" + "**2" * 600,
        "10**" * 400 + "redshift",
        "redshift * (1 / 0)",
        "redshift * 10.0**400",
        "redshift * 1" + "0" * 400,
        "redshift * 1e999",
        "redshift * (-8.0)**0.5",
        "redshift * 0.0**-1",
    ],
)
def test_a_formula_that_cannot_be_computed_is_refused(formula: str) -> None:
    assert "night.toml, line " in refusal(
        changed('unit = "km/s"\n', "").replace("velocity_from_redshift(redshift)", formula)
    )


def test_a_formula_that_doubles_itself_is_refused_at_once() -> None:
    """Each call names its argument twice: sixty of them would fill every memory."""
    formula = "redshift"
    for _ in range(60):
        formula = f"redshift_combined({formula}, redshift)"
    text = changed('unit = "km/s"\n', "").replace("velocity_from_redshift(redshift)", formula)
    ran = subprocess.run(
        [
            sys.executable,
            "-c",
            "import sys, workbooks.recipe as r; r.read(sys.stdin.buffer.read(), 'n', 'n')",
        ],
        input=text.encode(),
        capture_output=True,
        timeout=10,
        check=False,
    )
    assert b"RecipeError" in ran.stderr


def test_a_plain_formula_longer_than_excel_takes_is_refused() -> None:
    """Excel takes 8192 characters in a formula (Microsoft, Excel specifications and limits)."""
    formula = "redshift_from_line(wavelength, line)"
    for _ in range(8):
        formula = f"redshift_combined({formula}, redshift_from_line(wavelength, line))"
    sentence = refusal(changed("redshift_from_line(wavelength, line)", formula))
    assert "8192" in sentence
    formula_line = line_of(SOUND, 'formula = "redshift_from_line')
    assert f", line {formula_line}: " in sentence


# ---- keys --------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "key",
    ["h0", "om0", "a1", "r1c1", "r", "c", "rc", "r2", "c3", "r1c", "xfd1048576", "zz9", "true"],
)
@pytest.mark.parametrize("kind", ["setting", "column"])
def test_a_key_that_looks_like_a_cell_is_refused(key: str, kind: str) -> None:
    old = 'key = "site"' if kind == "setting" else 'key = "velocity"'
    text = changed(old, f'key = "{key}"')
    sentence = refusal(text)
    assert repr(key) in sentence
    key_line = line_of(text, f'key = "{key}"')
    assert f", line {key_line}: " in sentence


@pytest.mark.parametrize(
    "key",
    [
        "recipe_name",
        "last_filled",
        "template_version",
        "cosmology_set",
        "cosmology_in_use",
        "published_set",
        "published_hubble_constant",
        "line_name",
        "line_key",
        "gauss_node",
        "gauss_weight",
        "omega_photon",
        "omega_curvature",
        "neutrino_ratio_1",
    ],
)
def test_a_setting_cannot_take_a_name_that_the_workbook_needs(key: str) -> None:
    """Two cells of one name would make the formulas take one for the other."""
    text = changed('key = "site"', f'key = "{key}"')
    sentence = refusal(text)
    assert repr(key) in sentence
    key_line = line_of(text, f'key = "{key}"')
    assert f", line {key_line}: " in sentence


def test_a_label_with_brackets_is_refused() -> None:
    """Label [unit] is how a header says its unit: `fill` would look for a label without them."""
    for label in ("Flux [raw]", "Wavelength (fitted)"):
        text = changed('label = "Velocity"', f'label = "{label}"')
        assert f", line {line_of(text, label)}: " in refusal(text)


@pytest.mark.parametrize("choice", ["a,b", 'say \\"air\\"', "x" * 300])
def test_a_choice_that_no_list_can_offer_is_refused(choice: str) -> None:
    """A list in a validation is one text of at most 255 characters, parted by commas."""
    text = changed('kind = "line"', f'choices = ["vacuum", "{choice}"]').replace(
        "redshift_from_line(wavelength, line)", "wavelength / wavelength"
    )
    assert f", line {line_of(text, 'choices')}: " in refusal(text)


def test_a_label_that_no_cell_can_hold_is_refused() -> None:
    text = changed('label = "Velocity"', 'label = "Velo\\u0001city"')
    assert ", line " in refusal(text)


def test_a_cycle_of_three_names_its_members() -> None:
    text = SOUND.replace("redshift_from_line(wavelength, line)", "velocity / drift").replace(
        "velocity_from_redshift(redshift)", "drift * redshift"
    )
    text = text.replace(
        "[[sheets.charts]]",
        '[[sheets.columns]]\nkey = "drift"\nlabel = "Drift"\nunit = "km/s"\nrole = "computed"\n'
        'formula = "velocity * redshift"\n\n[[sheets.charts]]',
    )
    sentence = refusal(text)
    assert all(repr(key) in sentence for key in ("redshift", "velocity", "drift"))
    assert "night.toml, line " in sentence


# ---- files -------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "line"),
    [
        ('title = "x"\npurpose = \n', 2),
        ('title = "x"\npurpose = "y\n', 2),
        ('title = "x"\n\n[[sheets]\n', 3),
        ('title = "x"\ntitle = "y"\n', 2),
    ],
)
def test_bad_toml_is_told_with_its_line(text: str, line: int) -> None:
    sentence = refusal(text)
    assert sentence.startswith("night.toml")
    assert f"line {line}" in sentence


@pytest.mark.parametrize("content", [b"", b"title = 'only'\n", b"\xef\xbb\xbftitle = 'mark'\n"])
def test_a_recipe_that_lacks_its_parts_says_which(content: bytes) -> None:
    assert "is missing" in refusal(content)


def test_a_recipe_without_sheets_or_columns_is_refused() -> None:
    assert "sheet" in refusal('title = "x"\npurpose = "y"\nsheets = []\n')
    assert "column" in refusal('title = "x"\npurpose = "y"\n[[sheets]]\nname = "A"\ncolumns = []\n')


def test_what_is_not_utf8_is_refused() -> None:
    assert refusal(SOUND.replace("Night", "Nächte").encode("latin-1")).startswith("night.toml")
    assert "UTF-8" in refusal(SOUND.encode("utf-16"))


def test_deep_toml_is_refused() -> None:
    assert "night.toml" in refusal("title = " + "[" * 5000 + "]" * 5000)


def test_a_missing_recipe_names_the_near_ones(tmp_path: Path) -> None:
    with pytest.raises(RecipeError, match="line-log"):
        load("line-logg")
    with pytest.raises(RecipeError, match=r"gone\.toml: No such file"):
        load(str(tmp_path / "gone.toml"))
    (tmp_path / "folder.toml").mkdir()
    with pytest.raises(RecipeError, match=r"folder\.toml"):
        load(str(tmp_path / "folder.toml"))


def test_a_recipe_is_loaded_from_a_file(tmp_path: Path) -> None:
    path = tmp_path / "my night.toml"
    path.write_text(SOUND)
    recipe = load(str(path))
    assert recipe.name == "my night"
    path.write_text(SOUND.replace("Angstrom", "Angstroem"))
    with pytest.raises(RecipeError) as caught:
        load(str(path))
    where = line_of(SOUND, 'unit = "Angstrom"')
    assert str(caught.value).startswith(f"{path}, line {where}: ")


# Errors, results, groups and histograms -----------------------------------------------------------

SAMPLED = """\
title = "Means"
purpose = "One row a line."

[[settings]]
key = "medium"
label = "Medium"
group = "Instrument"
kind = "text"
value = "air"
choices = ["vacuum", "air"]

[[sheets]]
name = "Lines"
rows = 10

[[sheets.columns]]
key = "spectrum"
label = "Spectrum"
role = "input"
kind = "text"

[[sheets.columns]]
key = "line"
label = "Line"
role = "input"
kind = "line"

[[sheets.columns]]
key = "wavelength"
label = "Wavelength"
unit = "Angstrom"
role = "input"
sigma = "error"

[[sheets.columns]]
key = "error"
label = "Error"
unit = "nm"
role = "input"

[[sheets.columns]]
key = "guess"
label = "Guess"
role = "computed"
kind = "text"
formula = "line_nearest(wavelength, 0, medium)"

[[sheets.columns]]
key = "redshift"
label = "Redshift"
role = "computed"
sigma = true
formula = "redshift_from_line(wavelength, line or guess, medium)"

[[sheets.columns]]
key = "good"
label = "Good"
role = "computed"
formula = "membership(redshift, all_mean, 0.1)"

[[sheets.columns]]
key = "mean"
label = "Mean"
role = "computed"
formula = "mean_weighted(redshift, redshift_sigma, by=spectrum, where=good)"

[[sheets.results]]
key = "all_mean"
label = "Mean of all"
formula = "mean_weighted(redshift, redshift_sigma)"

[[sheets.histograms]]
title = "Redshifts"
of = "redshift"
where = "good"
bins = 5

[[sheets]]
name = "Spectra"
rows = 4
gathers = "Lines"
by = "spectrum"

[[sheets.columns]]
key = "name"
label = "Spectrum"
role = "computed"
kind = "text"
formula = "spectrum"

[[sheets.columns]]
key = "z"
label = "Redshift"
role = "computed"
formula = "mean"
"""


def test_the_recipe_with_samples_is_read() -> None:
    recipe = read(SAMPLED.encode(), "means.toml", "means")
    (table,), (summary,) = recipe.tables, recipe.summaries
    assert [*table.nodes] == ["guess", "redshift", "redshift_sigma", "good", "mean"]
    assert [*table.results] == ["all_mean"]
    assert table.order.index("all_mean") < table.order.index("good")
    assert summary.gathers is table
    # beside its column, in the same unit
    labels = [column.label for column in table.sheet.columns]
    assert labels[labels.index("Redshift") + 1] == "± Redshift"


# What is changed, into what, the line that is named, and what the sentence says.
SAMPLED_MISTAKES: dict[str, tuple[str, str, str, list[str]]] = {
    "sigma names no input": (
        'sigma = "error"', 'sigma = "eror"', "eror", ["eror", "error", "input"],
    ),
    "sigma names a computed column": (
        'sigma = "error"', 'sigma = "redshift"', 'sigma = "redshift"', ["redshift", "input"],
    ),
    "sigma names a text": ('sigma = "error"', 'sigma = "line"', 'sigma = "line"', ["number"]),
    "sigma names itself": (
        'sigma = "error"', 'sigma = "wavelength"', 'sigma = "wavelength"', ["wavelength"],
    ),
    "sigma of another kind": ('unit = "nm"', 'unit = "km/s"', 'sigma = "error"', ["km"]),
    "sigma of an input is true": (
        'sigma = "error"', "sigma = true", 'sigma = true\n\n[[sheets.columns]]\nkey = "error"',
        ["input"],
    ),
    "sigma of a computed column is named": (
        "sigma = true", 'sigma = "error"\n', 'sigma = "error"\n\nformula', ["true"],
    ),
    "sigma of a text": (
        'kind = "text"\nformula = "line_nearest',
        'kind = "text"\nsigma = true\nformula = "line_nearest',
        "sigma = true\nformula = \"line_nearest", ["guess"],
    ),
    "sigma is a number": ("sigma = true", "sigma = 1", "sigma = 1", ["sigma"]),
    "by names a number": ("by=spectrum", "by=wavelength", "by=wavelength", ["by=", "texts"]),
    "by names a setting": ("by=spectrum", "by=medium", "by=medium", ["by=", "column"]),
    "by names nothing": ("by=spectrum", "by=spectra", "by=spectra", ["spectra", "spectrum"]),
    "by is a text": ("by=spectrum", "by='a'", "by='a'", ["by=", "column"]),
    "by of a function without samples": (
        "membership(redshift, all_mean, 0.1)", "membership(redshift, all_mean, 0.1, by=spectrum)",
        "0.1, by=", ["MEMBERSHIP", "by"],
    ),
    "where names a text": ("where=good", "where=line", "where=line", ["where=", "numbers"]),
    "where names a number with a unit": (
        "where=good", "where=wavelength", "where=wavelength", ["where=", "without a unit"],
    ),
    "a result of a row": (
        "mean_weighted(redshift, redshift_sigma)", "redshift * 2", "redshift * 2",
        ["redshift", "column", "one number"],
    ),
    "a result by groups": (
        "mean_weighted(redshift, redshift_sigma)",
        "mean_weighted(redshift, redshift_sigma, by=spectrum)",
        'sigma, by=spectrum)"', ["spectrum", "column", "one number"],
    ),
    "a result named as a column": ('key = "all_mean"', 'key = "good"', 'label = "Mean of all"',
        ["good", "taken"]),
    "a result of another kind": (
        'label = "Mean of all"', 'label = "Mean of all"\nunit = "km/s"', "membership(redshift",
        ["km/s"],
    ),
    "samples of two kinds": (
        "redshift_sigma, by", "wavelength, by", "wavelength, by", ["Angstrom"],
    ),
    "a sample that is an expression": (
        "(redshift, redshift_sigma, by", "(redshift + 1, redshift_sigma, by", "redshift + 1",
        ["values of MEAN_WEIGHTED", "column"],
    ),
    "a sample of texts": (
        "(redshift, redshift_sigma, by", "(line, redshift_sigma, by", "(line, redshift_sigma",
        ["number"],
    ),
    "part from a column": (
        "redshift_sigma, by", "redshift_sigma, line, by", "redshift_sigma, line", ["part"],
    ),
    "part from a setting": (
        "redshift_sigma, by", "redshift_sigma, medium, by", "redshift_sigma, medium",
        ["part", "written"],
    ),
    "no such part": (
        "redshift_sigma, by", "redshift_sigma, 'meen', by", "meen", ["meen", "mean"],
    ),
    "or before a computed column": (
        "line or guess", "guess or line", "guess or line", ["guess", "computed", "or"],
    ),
    "or after nothing that can be empty": (
        "line or guess", "'H alpha' or guess", "'H alpha' or", ["or", "empty"],
    ),
    "or between kinds": (
        "line or guess", "line or wavelength", "line or wavelength", ["text"],
    ),
    "and": ("line or guess", "line and guess", "line and guess", ["not allowed"]),
    "gathers no sheet": (
        'gathers = "Lines"', 'gathers = "Line"', 'gathers = "Line"', ["Line", "Lines"],
    ),
    "gathers itself": (
        'gathers = "Lines"', 'gathers = "Spectra"', 'gathers = "Spectra"', ["Spectra"],
    ),
    "gathers by no column": (
        'by = "spectrum"', 'by = "spectra"', 'by = "spectra"', ["spectra", "spectrum"],
    ),
    "gathers by a number": (
        'by = "spectrum"', 'by = "redshift"', 'by = "redshift"', ["redshift", "text"],
    ),
    "gathers without by": ('by = "spectrum"\n', "", 'name = "Spectra"', ["by"]),
    "by without gathers": ('gathers = "Lines"\n', "", 'name = "Spectra"', ["gathers"]),
    "a summary with something to type": (
        'role = "computed"\nkind = "text"\nformula = "spectrum"', 'role = "input"\nkind = "text"',
        'key = "name"', ["Spectra", "computed"],
    ),
    "a summary of a key that is not there": (
        'formula = "mean"', 'formula = "maen"', "maen", ["maen", "mean"],
    ),
    "histogram of nothing": (
        'of = "redshift"', 'of = "redshft"', "redshft", ["redshft", "redshift"],
    ),
    "histogram of a text": ('of = "redshift"', 'of = "line"', 'of = "line"', ["line"]),
    "histogram where nothing": (
        'where = "good"', 'where = "god"', 'where = "god"', ["god", "good"],
    ),
    "histogram without bins": ("bins = 5", "bins = 1", "bins = 1", ["bins"]),
    "histogram with half a bin": ("bins = 5", "bins = 5.5", "bins = 5.5", ["bins"]),
    "key of a histogram": ("bins = 5", "bin = 5", "bin = 5", ["bin", "bins"]),
    "key of a result": (
        'label = "Mean of all"', 'label = "Mean of all"\nlable = "M"', "lable", ["lable", "label"],
    ),
    "round in a circle by a result": (
        "mean_weighted(redshift, redshift_sigma)",
        "mean_weighted(redshift, redshift_sigma, where=good)",
        "membership(redshift", ["good", "all_mean", "back to"],
    ),
}  # fmt: skip


@pytest.mark.parametrize("what", SAMPLED_MISTAKES)
def test_a_mistake_with_samples_is_told_with_its_line(what: str) -> None:
    old, new, part, words = SAMPLED_MISTAKES[what]
    assert SAMPLED.count(old) == 1, old
    text = SAMPLED.replace(old, new)
    with pytest.raises(RecipeError) as caught:
        read(text.encode(), "means.toml", "means")
    file, _, rest = str(caught.value).partition(", line ")
    number, _, said = rest.partition(": ")
    assert file == "means.toml"
    for word in words:
        assert word in said
    # the line itself, or the head of the part of the file in which it stands
    wanted = line_of(text, part)
    head = text.split("\n")[:wanted]
    first = max(at for at, line in enumerate(head, 1) if line.startswith("[["))
    assert first <= int(number) <= wanted
