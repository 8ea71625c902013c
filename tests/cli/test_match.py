"""The match command: its answer, its options, its errors."""

from __future__ import annotations

import json

import pytest
from running import run

from phasedb.report.document import match_document
from phasedb.report.stored import match_from_document

KNIFE_ELEMENTS = ("--elements", "Ti,N,Fe,C")


@pytest.fixture(scope="module")
def answer(starter_store):
    from cli.conftest_paths import DEMO

    return run("match", DEMO / "bread_knife_17.csv", *KNIFE_ELEMENTS, "--json", store=starter_store).json


def test_a_two_phase_sample_is_named(answer):
    claimed = {phase["name"] for phase in answer["phases"] if phase["probability"] > 0.5}
    assert claimed == {"titanium nitride", "iron (alpha, ferrite)"}


def test_the_document_is_the_promised_one(answer):
    assert answer["schema"] == "phasedb.match/1"
    assert match_document(match_from_document(answer)) == answer
    assert [line["line"] for line in answer["ledger"]] == list(range(1, len(answer["ledger"]) + 1))
    assert answer["library"]["phase_count"] >= 300
    assert answer["settings"]["elements"] == ["Ti", "N", "Fe", "C"]


def test_text_and_document_say_the_same(answer, starter_store, knife):
    text = run("match", knife, *KNIFE_ELEMENTS, store=starter_store).out
    assert text.startswith("This list holds ")
    for phase in answer["phases"]:
        if phase["probability"] > 0.5:
            assert phase["name"] in " ".join(text.split())
    assert text.count("starter entries are drafts") == 1


def test_the_same_command_gives_the_same_bytes(small_store, knife):
    runs = [run("match", knife, "--json", store=small_store).out for _ in range(2)]
    assert runs[0] == runs[1]


def test_everything_but_the_result_goes_to_stderr(small_store, knife, tmp_path):
    ran = run("match", knife, "--json", "--figure", tmp_path / "f.svg", store=small_store)
    json.loads(ran.out)
    assert "figure written" in ran.err
    assert (tmp_path / "f.svg").stat().st_size > 5000


def test_a_figure_that_cannot_be_written_is_refused_before_the_match(small_store):
    ran = run("match", "absent.csv", "--figure", "lines.gif", store=small_store)
    assert ran.code == 2
    assert ".svg" in ran.err


@pytest.mark.parametrize(
    ("options", "said"),
    [
        (["--elements", "Fe,Xx"], "'Xx'"),
        (["--elements", "fe"], "did you mean Fe"),
        (["--excluding", "Qq"], "--excluding"),
        (["--internal-standard", "titanium nitrid"], "titanium nitride"),
        (["--most-phases", "0"], "--most-phases"),
        (["--rank-by", "luck"], "--rank-by"),
        (["--foreign", "absent.csv"], "absent.csv"),
    ],
)
def test_bad_options_are_bad_input_with_a_hint(small_store, knife, options, said):
    ran = run("match", knife, *options, store=small_store)
    assert ran.code == 2
    assert ran.err.startswith("error: ")
    assert said in ran.err
    assert ran.out == ""


def test_no_store_is_exit_4_and_says_how_to_make_one(tmp_path, knife):
    ran = run("match", knife, store=tmp_path / "absent.sqlite")
    assert ran.code == 4
    assert "phasedb init" in ran.err


def test_an_empty_store_still_answers(tmp_path, knife):
    run("init", "--empty", store=tmp_path / "e.sqlite")
    ran = run("match", knife, "--json", store=tmp_path / "e.sqlite")
    assert ran.json["phases"] == []
    assert any("no phase" in caution for caution in ran.json["cautions"])


def test_excluding_an_element_takes_its_phases_out(small_store, knife):
    document = run(
        "match", knife, "--excluding", "Ti", "--strict-chemistry", "--json", store=small_store
    ).json
    assert all("Ti" not in phase["formula"] for phase in document["phases"])


def test_merit_can_rank(small_store, knife):
    document = run("match", knife, *KNIFE_ELEMENTS, "--rank-by", "merit", "--json", store=small_store).json
    values = [(phase["merit"]["F"] or {"value": 0})["value"] for phase in document["phases"]]
    assert values == sorted(values, reverse=True)


def test_foreign_lines_are_claimed_first(small_store, knife, tmp_path):
    holder = tmp_path / "holder.csv"
    holder.write_text("# radiation: Cu\ntwo_theta_deg\n33.159\n")
    document = run("match", knife, *KNIFE_ELEMENTS, "--foreign", holder, "--json", store=small_store).json
    kinds = {line["line"]: [claim["kind"] for claim in line["claims"]] for line in document["ledger"]}
    assert kinds[1] == ["foreign"]


def test_foreign_lines_in_another_unit_mean_the_same(small_store, knife, tmp_path):
    holder = tmp_path / "holder.csv"
    holder.write_text("d_angstrom\n2.6995\n")
    document = run("match", knife, *KNIFE_ELEMENTS, "--foreign", holder, "--json", store=small_store).json
    assert [claim["kind"] for claim in document["ledger"][0]["claims"]] == ["foreign"]


def test_a_saved_match_is_kept_and_numbered(store, knife):
    ran = run("match", knife, *KNIFE_ELEMENTS, "--save", "--json", store=store)
    assert ran.code == 0
    assert "saved as identification 1" in ran.err


def test_another_day_s_library_cannot_be_saved_against(small_store, knife):
    ran = run("match", knife, "--save", "--as-of", "2026-01-01", store=small_store)
    assert ran.code == 2


def test_reading_from_standard_input(small_store, knife):
    import subprocess
    import sys

    command = [sys.executable, "-m", "phasedb", "--store", str(small_store), "match", "-", "--json"]
    done = subprocess.run(command, input=knife.read_bytes(), capture_output=True, check=False)
    assert done.returncode == 0, done.stderr.decode()
    assert json.loads(done.stdout)["measurement"]["line_count"] == 15
