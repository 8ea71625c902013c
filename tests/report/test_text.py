"""What a match says in a terminal: the verdict first, then the ranking, then every line."""

from __future__ import annotations

import dataclasses
import re

import pytest
from report.samples import (
    d_only_match,
    foreign_script_match,
    hostile_match,
    nothing_match,
    phase_result,
    two_phase_match,
    unlisted_match,
)

from phasedb.report import wording
from phasedb.report.table import display_width
from phasedb.report.text import match_text
from phasedb.report.verdict import verdict

MAKERS = [two_phase_match, d_only_match, unlisted_match, nothing_match, hostile_match, foreign_script_match]


@pytest.mark.parametrize("make", MAKERS)
@pytest.mark.parametrize("width", [80, 100, 160])
def test_it_fits_the_width_and_has_no_escapes(make, width):
    text = match_text(make(), width=width)
    assert max(display_width(line) for line in text.splitlines()) <= width
    assert "\x1b" not in text


def test_a_wider_terminal_is_used():
    assert max(map(len, match_text(two_phase_match(), width=150).splitlines())) > 100


@pytest.mark.parametrize("make", MAKERS)
def test_verdict_then_ranking_then_ledger(make):
    text = match_text(make())
    places = [text.index(word) for word in ("\nRanking\n", "\nLedger\n", "\nShift and noise\n")]
    assert places == sorted(places)
    assert places[0] > 40


def test_the_ledger_accounts_for_every_line():
    match = two_phase_match()
    ledger = match_text(match, width=100).split("\nLedger\n")[1].split("\n\n")[0].splitlines()[1:]
    rows = {int(row.split()[0]): row for row in ledger if re.match(r" *\d+ ", row)}
    assert sorted(rows) == list(range(1, len(match.ledger) + 1))
    for line in match.ledger:
        assert f"{line.position:.3f}" in rows[line.line]
        assert f"{line.d_angstrom:.4f}" in rows[line.line]
        if line.claims:
            claim = line.claims[0]
            assert claim.name in rows[line.line]
            assert wording.hkl_text(claim.hkl) in rows[line.line]
            assert f"{claim.delta_two_theta_deg:+.3f}" in rows[line.line]
        else:
            assert "unexplained" in rows[line.line]


def test_a_ghost_is_said_to_be_one():
    assert "K-beta of alpha iron" in " ".join(match_text(two_phase_match(), width=100).split())


def test_merit_is_written_as_published():
    assert "F9 = 35.7 (0.0210, 12)" in match_text(two_phase_match(), width=120)


def test_uncertainties_are_in_the_short_form():
    text = match_text(two_phase_match())
    assert "4.2422(2)" in text
    assert "0.021(14)" in text


def test_a_list_without_wavelength_has_no_degrees():
    text = match_text(d_only_match())
    assert "2theta, deg" not in text
    assert "zero error" not in text.lower()
    assert "percent of d" in " ".join(text.split())


def test_the_verdict_names_what_is_claimed_and_counts_what_is_not_explained():
    said = " ".join(verdict(two_phase_match()))
    assert said.startswith("This list holds titanium nitride (TiN): probability 0.998")
    assert "It also holds alpha iron (Fe)" in said
    assert "2 of 16 lines are unexplained" in said
    assert "iron-chromium (10 % Cr) 0.031" not in said


def test_the_verdict_of_an_unlisted_phase_names_its_place_and_neighbours():
    said = verdict(unlisted_match())[0]
    assert "a cubic phase that the library lacks" in said
    assert "F, a near 4.3871(4) Å" in said
    assert "titanium carbide (+1.38 %)" in said


def test_the_verdict_of_nothing_says_so():
    assert verdict(nothing_match())[0].startswith("No cubic phase is seen")


def test_a_group_is_claimed_without_a_name():
    pair = (
        phase_result("niobium", "Nb", "I", 3.3, probability=0.48, group_probability=0.95,
                     look_alikes=("tantalum",), look_alike_count=1, separated_by=("the element Ta",)),
        phase_result("tantalum", "Ta", "I", 3.303, probability=0.47, group_probability=0.95,
                     look_alikes=("niobium",), look_alike_count=1),
    )  # fmt: skip
    said = verdict(dataclasses.replace(two_phase_match(), phases=pair))[0]
    assert "one of a group of look-alikes, probability 0.950" in said
    assert "niobium (Nb) 0.480 or tantalum (Ta) 0.470" in said
    assert "the element Ta" in said


def test_nothing_certain_is_not_dressed_up():
    weak = (phase_result("silver", "Ag", "F", 4.086, probability=0.31, group_probability=0.31),)
    said = verdict(dataclasses.replace(two_phase_match(), phases=weak))
    assert said[0].startswith("No phase is certain enough to be named")
    assert "silver (Ag) 0.310" in said[1]


def test_luck_is_mentioned_when_it_matters():
    lucky = phase_result("silver", "Ag", "F", 4.086, expected_by_chance=1.7)
    assert "1.7 times by luck" in verdict(dataclasses.replace(two_phase_match(), phases=(lucky,)))[0]
    assert "by luck" not in verdict(two_phase_match())[0]


def test_probability_is_never_written_as_certain():
    assert wording.probability(1.0) == "> 0.999"
    assert wording.probability(0.0) == "< 0.001"


def test_styles_change_no_width():
    plain_text = match_text(two_phase_match())
    styled = match_text(two_phase_match(), style=lambda text, role: f"\x1b[1m{text}\x1b[0m")
    assert styled != plain_text
    assert re.sub(r"\x1b\[\dm", "", styled) == plain_text
