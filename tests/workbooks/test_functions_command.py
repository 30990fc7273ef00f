"""`cellfuncs functions`, called as a person calls it."""

import json
import re
import sys
from collections.abc import Callable

import pytest

from cellfuncs import CATALOGUE
from workbooks import cli

Run = Callable[..., tuple[int, str, str]]


@pytest.fixture
def run(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> Run:
    def run(*words: str) -> tuple[int, str, str]:
        monkeypatch.setattr(sys, "argv", ["cellfuncs", *words])
        with pytest.raises(SystemExit) as stop:
            cli.main()
        shown = capsys.readouterr()
        assert isinstance(stop.value.code, int)
        return stop.value.code, shown.out, shown.err

    return run


def test_it_lists_every_function_under_its_family(run: Run) -> None:
    status, out, err = run("functions")
    assert (status, err) == (0, "")
    family = ""
    found = {}
    for line in out.split("\n"):
        if line.startswith("  "):
            found[line.split()[0]] = family
        elif ":" in line:
            family = line.partition(":")[0]
    assert found == {made.name: made.family for made in CATALOGUE.values()}


def test_it_shows_one_function_in_full_whatever_the_case(run: Run) -> None:
    status, out, err = run("functions", "distance_Luminosity")
    assert (status, err) == (0, "")
    for head in ("Syntax", "Returns", "Constraints", "Semantics", "Examples", "Source"):
        assert f"\n{head}\n" in out
    assert "DISTANCE_LUMINOSITY(z, [cosmology])" in out
    # 2919.6249521807 Mpc by astropy 8.0.2, cosmology.Planck18.luminosity_distance(0.5)
    assert re.search(r"=DISTANCE_LUMINOSITY\(0\.5\) +2919\.624952 Mpc", out)


def test_an_unknown_name_gets_the_near_ones_in_one_sentence(run: Run) -> None:
    status, out, err = run("functions", "DISTANCE_LUMINOSTY")
    assert (status, out) == (2, "")
    assert err.count("\n") == 1
    assert "'DISTANCE_LUMINOSTY'" in err
    assert "DISTANCE_LUMINOSITY" in err


def test_json_is_a_list_of_all_and_an_object_for_one(run: Run) -> None:
    status, out, _ = run("functions", "--json")
    assert status == 0
    assert {each["name"] for each in json.loads(out)} == set(CATALOGUE)
    status, out, _ = run("functions", "age_of_universe", "--json")
    assert status == 0
    assert json.loads(out)["arguments"][0]["default"] == "Planck18"
