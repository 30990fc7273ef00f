"""The line table is whole, and every spelling names one line or is refused with its candidates."""

import re
from itertools import pairwise

import formualizer
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from cellfuncs.constants import LIGHT_SPEED
from cellfuncs.errors import InputError
from cellfuncs.physics.lines import (
    KEY_SUBSTITUTIONS,
    Line,
    ambiguous,
    find,
    keys,
    lines,
    nearest,
    nearest_names,
    spelling_key,
)

EVERY_LINE = pytest.mark.parametrize("line", lines(), ids=lambda line: line.name)

SPECIES = re.compile(r"(H|He|C|N|O|Ne|Na|Mg|Al|Si|S|Ar|K|Ca|Fe) (I|II|III|IV|V|VI)|CO")


def test_lines_are_ordered_by_wavelength_and_no_two_share_one() -> None:
    assert all(left.vacuum < right.vacuum for left, right in pairwise(lines()))


def test_names_are_plain_ascii_and_unique() -> None:
    names = [line.name for line in lines()]
    assert len(set(names)) == len(names)
    assert all(name.isascii() for name in names)


@EVERY_LINE
def test_a_row_says_what_it_is_and_where_it_comes_from(line: Line) -> None:
    assert SPECIES.fullmatch(line.species)
    assert re.search(r"\b(19[67]\d|20\d\d)\b|NIST Atomic Spectra Database", line.source)
    assert len(line.obtained) > 20


@EVERY_LINE
def test_the_number_in_a_name_is_the_wavelength_in_air_or_vacuum(line: Line) -> None:
    number = re.search(r" (\d{3,5})$", line.name)
    if number is None:
        assert re.search(
            r"alpha|beta|gamma|delta|epsilon|H\d|Ca II|Na I|Mg I b|CO|21 cm", line.name
        )
    else:
        # Air is 0.03 % shorter; [O II] 3727, named from the plain mean in air, is cut, not rounded.
        assert -0.6 < line.vacuum - float(number[1]) < 3e-4 * line.vacuum + 1


def test_blends_lie_between_two_lines_of_their_species() -> None:
    blends = [line for line in lines() if line.obtained.startswith("blend")]
    assert {line.name for line in blends} == {
        "C IV 1549",
        "Mg II 2799",
        "N V 1240",
        "Na I 5893",
        "Si IV 1397",
        "[O II] 3727",
    }
    for blend in blends:
        at = lines().index(blend)
        assert lines()[at - 1].species == blend.species == lines()[at + 1].species


def test_a_ritz_wavelength_is_the_inverse_of_the_level_difference_it_names() -> None:
    counted = 0
    for line in lines():
        levels = re.search(r"level ([\d.]+) less level ([\d.]+) cm-1", line.obtained)
        if levels:
            counted += 1
            upper, lower = map(float, levels.groups())
            assert line.vacuum == pytest.approx(1e8 / (upper - lower), abs=0.0051)
    assert counted > 40


def test_a_radio_wavelength_is_light_speed_over_the_frequency_it_names() -> None:
    radio = [line for line in lines() if line.vacuum > 1e6]
    assert len(radio) == 4
    for line in radio:
        megahertz = re.search(r"rest frequency ([\d.]+) MHz", line.obtained)
        assert megahertz
        assert line.vacuum == pytest.approx(LIGHT_SPEED * 1e7 / float(megahertz[1]), rel=1e-9)


@EVERY_LINE
def test_a_line_is_found_by_its_name_and_by_each_spelling(line: Line) -> None:
    assert find(line.name) is line
    for spelling in line.spellings:
        key = spelling_key(spelling)
        assert keys().get(key) is line or line in ambiguous()[key]


def test_no_key_is_both_accepted_and_ambiguous() -> None:
    assert not keys().keys() & ambiguous().keys()
    assert all(len(candidates) > 1 for candidates in ambiguous().values())


def test_every_key_is_its_own_key_and_finds_its_line() -> None:
    for key, line in keys().items():
        assert spelling_key(key) == key
        assert find(key) is line


@pytest.mark.parametrize(
    ("typed", "name"),
    [
        ("Halpha", "H alpha"),
        ("H alpha", "H alpha"),
        ("Hα", "H alpha"),
        ("Ha", "H alpha"),
        ("H-alpha", "H alpha"),
        ("Hα λ6563", "H alpha"),
        ("Hβ", "H beta"),
        ("H7", "H epsilon"),
        ("Hε", "H epsilon"),
        ("H 8", "H8"),
        ("[OIII]5007", "[O III] 5007"),
        ("OIII 5007", "[O III] 5007"),
        ("O III 5007", "[O III] 5007"),
        ("[O III] λ5007", "[O III] 5007"),
        ("[O III] 5007 Å", "[O III] 5007"),
        ("OIII5007", "[O III] 5007"),
        ("OIII_5007", "[O III] 5007"),
        ("[OIII]5006.8", "[O III] 5007"),
        ("[O III] 5008", "[O III] 5007"),
        ("[OII]3727", "[O II] 3727"),
        ("[SII] 6717", "[S II] 6716"),
        ("[N II] 6584", "[N II] 6583"),
        ("CaK", "Ca II K"),
        ("Ca II K", "Ca II K"),
        ("CaII K", "Ca II K"),
        ("CaH", "Ca II H"),
        ("CaII 8542", "Ca II 8542"),
        ("NaD1", "Na I D1"),
        ("Na I D1", "Na I D1"),
        ("Na D 5893", "Na I 5893"),
        ("Mg b2", "Mg I b2"),
        ("Lya", "Ly alpha"),
        ("Lyα", "Ly alpha"),
        ("Ly-α", "Ly alpha"),
        ("Lyman alpha", "Ly alpha"),
        ("Pa beta", "Pa beta"),
        ("Paβ", "Pa beta"),
        ("HI", "H I 21 cm"),
        ("HI 21cm", "H I 21 cm"),
        ("21-cm", "H I 21 cm"),
        ("CO(1-0)", "CO 1-0"),
        ("CO 1–0", "CO 1-0"),  # an en dash, as autocorrection writes it
        ("CO J=2−1", "CO 2-1"),  # a minus sign
        ("CIV1548", "C IV 1548"),
        ("CIII]1909", "C III] 1909"),
        ("MgII 2796", "Mg II 2796"),
        ("Mg II k", "Mg II 2796"),
        ("\u00a0He\u00a0II 4686 ", "He II 4686"),
    ],
)
def test_spellings_that_staff_type(typed: str, name: str) -> None:
    """Common practice, no source."""
    assert find(typed).name == name


@pytest.mark.parametrize(
    ("typed", "candidates"),
    [
        ("[OIII]", ["[O III] 4959", "[O III] 5007"]),
        ("[O II] doublet", ["[O II] 3726", "[O II] 3727", "[O II] 3729"]),
        ("[O II] 3728", ["[O II] 3727", "[O II] 3729"]),
        ("Mg b", ["Mg I b1", "Mg I b2", "Mg I b4"]),
        ("NaD", ["Na I D1", "Na I D2", "Na I 5893"]),
        ("Ca II", ["Ca II K", "Ca II H", "Ca II 8542"]),
        ("Ca T", ["Ca II 8498", "Ca II 8542", "Ca II 8662"]),
        ("C IV", ["C IV 1548", "C IV 1549", "C IV 1551"]),
        ("CO", ["CO 1-0", "CO 2-1", "CO 3-2"]),
        # In small letters Si II and S III are one word; only a number tells them apart.
        ("S III", ["Si II 1260", "[S III] 9531"]),
    ],
)
def test_a_name_that_lines_share_is_refused_with_them(typed: str, candidates: list[str]) -> None:
    with pytest.raises(InputError, match="may be any of") as refused:
        find(typed)
    assert typed in str(refused.value)
    for name in candidates:
        assert name in str(refused.value)


def test_an_unknown_name_is_refused_with_near_matches_each_time() -> None:
    for _ in range(2):
        with pytest.raises(InputError, match=r"'Halfa' is not in the table.*H alpha"):
            find(" Halfa ")


def test_a_bare_wavelength_is_refused_with_an_example() -> None:
    with pytest.raises(InputError, match=r"'5007' is a number only.*'\[O III\] 5007'"):
        find("5007")


@pytest.mark.parametrize("typed", ["", " ", "[]", "λ", "nan", "-", "He"])
def test_what_names_no_line_is_refused(typed: str) -> None:
    with pytest.raises(InputError, match="is not in the table"):
        find(typed)


NOISE = st.sampled_from(["", " ", "  ", "\u00a0", "-", "_", "\u2011"])


@given(line=st.sampled_from(lines()), data=st.data())
def test_case_blanks_and_hyphens_do_not_change_what_a_name_means(
    line: Line, data: st.DataObject
) -> None:
    letters = [
        data.draw(NOISE) + (letter.upper() if data.draw(st.booleans()) else letter.lower())
        for letter in line.name
    ]
    assert find("".join(letters)) is line


@given(st.text())
def test_any_text_is_answered_or_refused_and_never_breaks(text: str) -> None:
    try:
        line = find(text)
    except InputError:
        assert spelling_key(text) not in keys()
    else:
        assert line in lines()


def test_a_spreadsheet_makes_the_same_key() -> None:
    # Excel nests 64 calls; what stands around the key needs some of them.
    assert len(KEY_SUBSTITUTIONS) <= 26
    typed = [
        *(spelling for line in lines() for spelling in (line.name, *line.spellings[:2])),
        "  [O III]  λ5007 Å ",
        "Ly‑α",  # a non-breaking hyphen
        "CO (1–0)",  # an en dash
        "\u00a0Hγ",  # Greek
        "H_δ",
        "He II 4686 \u212b",
        "H*",
        "~?alpha",
    ]
    formula = "LOWER(TRIM(A{row}))"
    for old, new in KEY_SUBSTITUTIONS:
        formula = f'SUBSTITUTE({formula},"{old}","{new}")'
    book = formualizer.Workbook()
    book.add_sheet("lines")
    for row, text in enumerate(typed, start=1):
        book.set_value("lines", row, 1, text)
        book.set_formula("lines", row, 2, "=" + formula.format(row=row))
    for row, text in enumerate(typed, start=1):
        assert book.evaluate_cell("lines", row, 2) == spelling_key(text), text


WILDCARDS = "*?~"
"""What MATCH reads as a pattern: ODF 1.3 part 4, HOST-USE-WILDCARDS (section from memory: 3.4)."""


def matched(patterns: list[str]) -> list[object]:
    """Give what MATCH(pattern, every key, 0) answers in a spreadsheet engine."""
    book = formualizer.Workbook()
    book.add_sheet("lines")
    for row, key in enumerate(keys(), start=1):
        book.set_value("lines", row, 1, key)
    table = f"$A$1:$A${len(keys())}"
    for row, pattern in enumerate(patterns, start=1):
        book.set_value("lines", row, 2, pattern)
        book.set_formula("lines", row, 3, f"=IFERROR(MATCH(B{row},{table},0),0)")
    return [book.evaluate_cell("lines", row, 3) for row in range(1, len(patterns) + 1)]


def test_a_spelling_with_a_wildcard_matches_nothing_in_a_spreadsheet() -> None:
    typed = "H*, ?alpha, H alph?, [O III] 500?, *, H~alpha, H alpha*, ~*, H alpha~".split(", ")
    # The engine does take wildcards, or else this test would prove nothing.
    assert all(matched(["h*", "?alpha", "halph?", "oiii500?", "*", "halpha*"]))
    assert matched([spelling_key(text) for text in typed]) == [0] * len(typed)


@given(line=st.sampled_from(lines()), wildcard=st.sampled_from(WILDCARDS), data=st.data())
def test_a_name_with_a_wildcard_anywhere_is_refused(
    line: Line, wildcard: str, data: st.DataObject
) -> None:
    spelling = data.draw(st.sampled_from((line.name, *line.spellings)))
    at = data.draw(st.integers(0, len(spelling)))
    typed = spelling[:at] + wildcard + spelling[at + data.draw(st.integers(0, 1)) :]
    assert not set(WILDCARDS) & set(spelling_key(typed))
    with pytest.raises(InputError, match="is not in the table"):
        find(typed)


def test_no_key_holds_what_stands_for_a_wildcard() -> None:
    assert not any("/" in key for key in (*keys(), *ambiguous()))


@given(st.floats(min_value=1, max_value=1e11))
def test_the_nearest_line_is_nearer_than_any_other(wavelength: float) -> None:
    closest = min(abs(line.vacuum - wavelength) for line in lines())
    assert abs(nearest(wavelength).vacuum - wavelength) == closest


def test_the_nearest_line_at_the_ends_and_between() -> None:
    assert nearest(0.1) is lines()[0]
    assert nearest(1e15) is lines()[-1]
    assert nearest(5008).name == "[O III] 5007"
    assert nearest(6564).name == "H alpha"


def test_nearest_takes_the_shorter_of_two_equally_near() -> None:
    left, right = find("CO 3-2"), find("CO 2-1")
    middle = (left.vacuum + right.vacuum) / 2
    assert middle - left.vacuum == right.vacuum - middle
    assert nearest(middle) is left


MIDWAY = [(left.vacuum + right.vacuum) / 2 for left, right in pairwise(lines())]
WAVELENGTHS = st.one_of(
    st.floats(min_value=900, max_value=20_000),
    st.floats(),
    st.sampled_from([line.vacuum for line in lines()]),
    st.sampled_from(MIDWAY),
)
WINDOWS = st.one_of(st.floats(min_value=0, max_value=100), st.just(np.nan), st.just(np.inf))


def name_within(wavelength: float, window: float) -> str | None:
    if np.isnan(wavelength):
        return None
    line = nearest(wavelength)
    return line.name if abs(line.vacuum - wavelength) <= window else None


@given(
    rest=arrays(np.float64, st.integers(0, 30), elements=WAVELENGTHS),
    data=st.data(),
)
def test_nearest_names_are_those_of_nearest(
    rest: np.ndarray[tuple[int], np.dtype[np.float64]], data: st.DataObject
) -> None:
    window = data.draw(WINDOWS | arrays(np.float64, rest.shape, elements=WINDOWS))
    names = nearest_names(rest, window)
    assert names.shape == rest.shape
    assert names.dtype == object
    expected = map(name_within, rest.tolist(), np.broadcast_to(window, rest.shape).tolist())
    assert names.tolist() == list(expected)


def test_nearest_names_of_a_column() -> None:
    rest = np.array([6564.7, 5008.0, np.nan, 5500.0, 1.0, 1e15])
    assert nearest_names(rest, 10.0).tolist() == [
        "H alpha",
        "[O III] 5007",
        None,
        None,
        None,
        None,
    ]
    windows = np.array([0.05, 0.3, 10.0, np.nan, 1e3, 1e3])
    within = [None, "[O III] 5007", None, None, "Ly delta", None]
    assert nearest_names(rest, windows).tolist() == within


def test_nearest_names_broadcast_rest_with_window() -> None:
    rest, window = np.array([[6564.0], [5006.0]]), np.array([0.1, 1.0, 5.0])
    assert nearest_names(rest, window).tolist() == [
        [None, "H alpha", "H alpha"],
        [None, None, "[O III] 5007"],
    ]


def test_nearest_names_take_the_shorter_of_two_equally_near() -> None:
    left, right = find("CO 3-2"), find("CO 2-1")
    middle = np.array([(left.vacuum + right.vacuum) / 2])
    assert nearest_names(middle, np.inf).tolist() == ["CO 3-2"]
