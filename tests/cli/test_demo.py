"""The demo: the main job from end to end, in a library that leaves nothing behind."""

from __future__ import annotations

import os
import re
import tempfile

import pytest
from running import run


@pytest.fixture(scope="module")
def steps():
    return run("demo", "--json").json["steps"]


def claimed(result):
    return {phase["name"] for phase in result["phases"] if phase["probability"] > 0.5}


def test_a_two_phase_sample_is_matched_and_every_line_accounted_for(steps):
    result = steps[1]["result"]
    assert claimed(result) == {"titanium nitride", "iron (alpha, ferrite)"}
    assert len(result["ledger"]) == result["measurement"]["line_count"] == 15
    assert result["ledger"][0]["unexplained"] > 0.5


def test_one_sample_holds_a_phase_that_the_library_lacks(steps):
    result = steps[2]["result"]
    assert claimed(result) == {"magnesium oxide"}
    assert result["unlisted"]["probability"] > 0.5
    assert result["unlisted"]["lattice_type"] == "F"
    assert result["unlisted"]["a_angstrom"] == pytest.approx(9.035, rel=5e-4)


def test_it_is_added_and_named_the_next_time(steps):
    result = steps[4]["result"]
    assert claimed(result) == {"magnesium oxide", "workshop green (magnesium indium stannate)"}
    assert result["unlisted"]["probability"] < 0.5
    assert result["library"]["phase_count"] == steps[2]["result"]["library"]["phase_count"] + 1


def test_the_text_shows_each_command_as_a_user_would_type_it(steps):
    before = set(os.listdir(tempfile.gettempdir())), os.getcwd()
    ran = run("demo")
    assert ran.code == 0, ran.err
    assert re.findall(r"^\$ (.*)$", ran.out, re.MULTILINE) == [step["command"] for step in steps]
    assert "invented" in ran.out.split("Step 1")[0]
    assert "local radiation rules" in " ".join(ran.out.split())
    new = set(os.listdir(tempfile.gettempdir())) - before[0]
    assert [name for name in new if name.startswith("phasedb-demo")] == []
    assert os.getcwd() == before[1]


def test_the_samples_say_that_they_are_invented():
    from cli.conftest_paths import DEMO

    lists = sorted(DEMO.glob("*.csv"))
    assert len(lists) == 3
    assert all("Invented for the demonstration" in path.read_text().splitlines()[0] for path in lists)
