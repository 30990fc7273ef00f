"""The reference says what the catalogue says, and its examples show what the functions give."""

import json
import re
from html import unescape
from math import isinf
from typing import Any

import pytest
from astropy import cosmology, units
from examples import arguments_in
from markdown_it import MarkdownIt

import cellfuncs
from cellfuncs import CATALOGUE, Function, reference
from cellfuncs.catalogue import Number

HEADS = ("Syntax", "Returns", "Constraints", "Semantics", "Examples")
"""What the open formula standard (OASIS ODF 1.3, part 4) says of every function, and our examples
(the list of heads is from memory)"""

every_function = pytest.mark.parametrize("made", CATALOGUE.values(), ids=lambda made: made.name)


@pytest.fixture(scope="module")
def page() -> str:
    return reference.PAGE.read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def rendered(page: str) -> str:
    return str(MarkdownIt("commonmark").enable("table").render(page))


def section(page: str, name: str) -> str:
    (found,) = re.findall(rf"^### {name}\n(.*?)(?=^##|\Z)", page, re.MULTILINE | re.DOTALL)
    return str(found)


def test_the_page_is_what_the_generator_makes(page: str) -> None:
    assert page == reference.page() + "\n", "run `python -m cellfuncs.reference`"


@every_function
def test_the_page_has_the_five_heads_in_order(page: str, made: Function) -> None:
    heads = re.findall(r"^\*\*(\w+)\*\*", section(page, made.name), re.MULTILINE)
    assert tuple(heads) == HEADS


@every_function
def test_the_terminal_shows_the_five_heads_and_the_source(made: Function) -> None:
    text = reference.help_text(made)
    assert tuple(re.findall(r"^[A-Z][a-z]+$", text, re.MULTILINE)) == (*HEADS, "Source")
    words = " ".join(text.split())
    assert made.summary in words
    assert " ".join(made.notes.split()) in words
    assert made.source in words
    for argument in made.arguments:
        assert argument.meaning in words


@every_function
def test_limits_units_and_defaults_are_shown(page: str, made: Function) -> None:
    lines = section(page, made.name).split("\n")
    for argument in made.arguments:
        (line,) = [line for line in lines if line.startswith(f"- `{argument.name}`: ")]
        assert ("Left out: " in line) == argument.optional
        if isinstance(argument, Number):
            for limit in (argument.above, argument.at_least, argument.below, argument.at_most):
                assert isinf(limit) or f"{limit:.10g}" in line
            assert argument.unit in line


# Examples -----------------------------------------------------------------------------------------

SHOWN = re.compile(r"^- `=([A-Z0-9_]+)\((.*)\)` → (.*)$", re.MULTILINE)


def examples() -> list[tuple[str, str, str]]:
    return SHOWN.findall(reference.PAGE.read_text(encoding="utf-8"))


def test_every_example_of_the_catalogue_is_on_the_page() -> None:
    shown = [f"={name}({arguments})" for name, arguments, _ in examples()]
    assert sorted(shown) == sorted(call for made in CATALOGUE.values() for call in made.examples)
    assert len(shown) >= len(CATALOGUE)


@pytest.mark.parametrize(("name", "arguments", "result"), examples())
def test_an_example_gives_the_number_shown(name: str, arguments: str, result: str) -> None:
    given = getattr(cellfuncs, name.lower())(*arguments_in(arguments))
    if isinstance(given, str):
        assert result.replace("\\", "") == f'"{given}"'
        return
    number, _, _ = result.partition(" ")
    assert float(number) == pytest.approx(given, rel=1e-9, abs=0)


@pytest.mark.parametrize(
    ("call", "expected", "unit"),
    [
        ("DISTANCE_LUMINOSITY(0.5)", lambda: cosmology.Planck18.luminosity_distance(0.5), "Mpc"),
        ("DISTANCE_ANGULAR(0.5)", lambda: cosmology.Planck18.angular_diameter_distance(0.5), "Mpc"),
        ("AGE_AT_REDSHIFT(2)", lambda: cosmology.Planck18.age(2), "Gyr"),
        ("TIME_LOOKBACK(2)", lambda: cosmology.Planck18.lookback_time(2), "Gyr"),
        ("EXPANSION_RATE(1)", lambda: cosmology.Planck18.H(1), "km.s-1.Mpc-1"),
        ("VOLUME_COMOVING(0.1)", lambda: cosmology.Planck18.comoving_volume(0.1), "Mpc3"),
        (
            "WAVELENGTH_FROM_FREQUENCY(115.2712018)",
            lambda: (115.2712018 * units.GHz).to("Angstrom", units.spectral()),
            "Angstrom",
        ),
        (
            "VELOCITY_CONVERTED(1500, &quot;radio&quot;, &quot;optical&quot;)",
            lambda: (
                (1500 * units.km / units.s)
                .to("GHz", units.doppler_radio(100 * units.GHz))
                .to("km/s", units.doppler_optical(100 * units.GHz))
            ),
            "km/s",
        ),
    ],
)
def test_numbers_and_units_on_the_page_are_those_of_astropy(
    rendered: str, call: str, expected: Any, unit: str
) -> None:
    (shown,) = re.findall(rf"<code>={re.escape(call)}</code> → (\S+ .*)</li>", rendered)
    number, _, named = shown.partition(" ")
    assert named == unit
    assert float(number) == pytest.approx(expected().to_value(units.Unit(unit)), rel=1e-9)


def test_a_result_has_ten_digits_and_the_unit_it_is_in() -> None:
    # IAU 2015 resolution B2: a parallax of 3 mas is 1000/3 pc
    assert reference.example("=DISTANCE_FROM_PARALLAX(3)").result == "333.3333333 pc"
    assert reference.example("=WAVELENGTH_OBSERVED(500, 1)").result == "1000 Angstrom"
    assert reference.example('=UNITS_CONVERTED(1, "km", "m")').result == "1000 m"
    assert reference.example("=REDSHIFT_COMBINED(-0.5, 1)").result == "0"
    assert reference.example('=LINE_NEAREST(6564.7, 0, "vacuum")').result == '"H alpha"'


def test_an_example_may_hold_a_call_or_end_in_an_error() -> None:
    assert reference.example("=REDSHIFT_COMBINED(REDSHIFT_RELATIVE(1, 1), 0.25)").result == "0.25"
    assert reference.example("=DISTANCE_LUMINOSITY(-0.1)").result == "#NUM!"
    assert reference.example('=REDSHIFT_FROM_LINE(6892, "Hx")').result == "#VALUE!"
    assert reference.example('=DISTANCE_LUMINOSITY("")').result == "#N/A"


def test_the_truth_values_are_those_of_a_cell() -> None:
    example = reference.example('=REASON("DISTANCE_LUMINOSITY", TRUE)')
    assert example.result == '"DISTANCE_LUMINOSITY: z is True, not a number"'


@pytest.mark.parametrize(
    "call",
    [
        "=",
        "=1",
        "=DISTANCE_LUMINOSITY(",
        "=DISTANCE_LUMINOSITI(0.5)",
        "=DISTANCE_LUMINOSITY(z)",
        "=DISTANCE_LUMINOSITY(z=0.5)",
        "=DISTANCE_LUMINOSITY(*[0.5])",
        "=DISTANCE_LUMINOSITY(0.25+0.25)",
        "=DISTANCE_LUMINOSITY(True)",
        "=DISTANCE_LUMINOSITY(None)",
        "=DISTANCE_LUMINOSITY(1j)",
        "=DISTANCE_LUMINOSITY(b'1')",
        "=DISTANCE_LUMINOSITY(f'{1}')",
        "=DISTANCE_LUMINOSITY([x for x in (1,)][0])",
        "=DISTANCE_LUMINOSITY((lambda: 1)())",
        "=DISTANCE_LUMINOSITY(open('x'))",
        "=__import__('os').getcwd()",
        "=DISTANCE_LUMINOSITY(0.5).real",
        "=DISTANCE_LUMINOSITY.body(0.5)",
    ],
)
def test_what_is_no_plain_call_is_not_run(call: str) -> None:
    with pytest.raises(ValueError, match="the example"):
        reference.example(call)


# The page -----------------------------------------------------------------------------------------


def test_every_link_leads_to_a_heading_and_every_function_has_one(rendered: str) -> None:
    headings = re.findall(r"<h[1-6]>(.*?)</h[1-6]>", rendered)
    # how GitHub makes an anchor of a heading: lower case, blanks to hyphens
    anchors = {unescape(heading).lower().replace(" ", "-") for heading in headings}
    links = re.findall(r'href="#(.*?)"', rendered)
    assert set(links) <= anchors
    assert {name.lower() for name in CATALOGUE} <= set(links)
    assert set(CATALOGUE) <= set(headings)


def test_markdown_shows_the_words_as_they_are(rendered: str) -> None:
    words = " ".join(unescape(re.sub(r"<[^>]+>", "", rendered)).split())
    for made in CATALOGUE.values():
        assert made.summary in words
        assert made.source in words
        assert " ".join(made.notes.split()) in words
    assert "\\" not in words


def test_the_error_table_is_that_of_the_functions(rendered: str) -> None:
    rows = re.findall(r"<tr>\s*<td><code>(#.*?)</code></td>(.*?)</tr>", rendered, re.DOTALL)
    shown = dict(rows)
    assert set(shown) == {"#NUM!", "#VALUE!", "#N/A"}
    assert "domain" in shown["#NUM!"]
    assert "Text" in shown["#VALUE!"]
    assert "empty" in shown["#N/A"]


def test_every_unit_of_the_table_is_a_vounit(rendered: str) -> None:
    table = rendered.partition("<table>")[2].partition("</table>")[0]
    shown = re.findall(r"<tr>\s*<td>(.*?)</td>", table)
    assert "pure number" in shown
    assert len(shown) == len(set(shown)) > 5
    for unit in shown:
        if unit != "pure number":
            units.Unit(unit, format="vounit")


def test_families_come_from_what_is_measured_to_what_follows() -> None:
    order = list(reference.in_reading_order())
    assert [order.index(family) for family in ("spectrum", "velocity", "distance", "age")] == [
        0,
        1,
        2,
        3,
    ]
    listed = [made.name for group in reference.in_reading_order().values() for made in group]
    assert sorted(listed) == sorted(CATALOGUE)


def test_the_list_names_every_function_once_with_its_summary() -> None:
    lines = reference.list_text().split("\n")
    for made in CATALOGUE.values():
        (line,) = [line for line in lines if line.split()[:1] == [made.name]]
        assert line.endswith(f"{made.summary} {made.caution}".rstrip())


# For scripts --------------------------------------------------------------------------------------


@every_function
def test_a_description_is_json_and_names_the_arguments(made: Function) -> None:
    described = json.loads(json.dumps(reference.description(made), allow_nan=False))
    assert [each["name"] for each in described["arguments"]] == [
        argument.name for argument in made.arguments
    ]
    for each, argument in zip(described["arguments"], made.arguments, strict=True):
        assert each["optional"] == argument.optional
        if isinstance(argument, Number):
            for limit in ("above", "at_least", "below", "at_most"):
                value = getattr(argument, limit)
                assert each[limit] == (None if isinf(value) else value)


def test_a_description_has_units_limits_and_defaults() -> None:
    described = reference.description(CATALOGUE["VOLUME_COMOVING"])
    z, area, cosmology_set = described["arguments"]
    assert described["unit"] == "Mpc3"
    assert (z["at_least"], z["above"], z["below"], z["optional"]) == (0.0, None, None, False)
    assert area["unit"] == "deg2"
    # 4π sr, the whole sky
    assert area["default"] == pytest.approx((4 * 180**2 / 3.141592653589793), rel=1e-14)
    assert (cosmology_set["kind"], cosmology_set["default"]) == ("cosmology", "Planck18")
    medium = reference.description(CATALOGUE["LINE_WAVELENGTH"])["arguments"][1]
    assert medium["choices"] == ["vacuum", "air"]
