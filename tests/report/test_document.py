"""The JSON document of a match: the promised fields, rounding, and the way back."""

from __future__ import annotations

import dataclasses
import json

import pytest
from hypothesis import given
from hypothesis import strategies as st
from report.samples import (
    d_only_match,
    foreign_script_match,
    hostile_match,
    nothing_match,
    two_phase_match,
    unlisted_match,
)

from phasedb.errors import InputError
from phasedb.report.document import AXIS_STEPS, DIGITS, document_bytes, match_document, rounded
from phasedb.report.stored import match_from_document

MAKERS = [two_phase_match, d_only_match, unlisted_match, nothing_match, hostile_match, foreign_script_match]

# The fields that other programs rely on, as dotted paths ([] for each element).
PROMISED = [
    "schema",
    "program_version",
    "settings",
    "measurement.source",
    "measurement.sha256",
    "measurement.wavelength_angstrom",
    "measurement.line_count",
    "measurement.range",
    "measurement.range_assumed",
    "measurement.position_unit",
    "library.phase_count",
    "library.fingerprint",
    "phases[].name",
    "phases[].formula",
    "phases[].lattice_type",
    "phases[].structure_type",
    "phases[].standing",
    "phases[].probability",
    "phases[].group_probability",
    "phases[].look_alikes",
    "phases[].separated_by",
    "phases[].expected_by_chance",
    "phases[].share",
    "phases[].log10_odds",
    "phases[].a_stored_angstrom",
    "phases[].a_fitted_angstrom",
    "phases[].a_fitted_esd_angstrom",
    "phases[].relative_shift",
    "phases[].lines_claimed",
    "phases[].lines_expected",
    "phases[].absences",
    "phases[].merit.F",
    "phases[].merit.M",
    "unlisted.probability",
    "unlisted.lattice_type",
    "unlisted.a_angstrom",
    "unlisted.nearest",
    "unlisted.others",
    "nothing_cubic",
    "shift.zero_deg",
    "shift.zero_esd_deg",
    "shift.displacement_mm",
    "shift.displacement_esd_mm",
    "shift.noise_deg",
    "ledger[].line",
    "ledger[].position",
    "ledger[].corrected_position",
    "ledger[].d_angstrom",
    "ledger[].intensity",
    "ledger[].claims",
    "ledger[].unexplained",
    "cautions",
]


def reach(value, path):
    for part in path.replace("[]", ".[]").split("."):
        if part == "[]":
            value = value[0] if value else None
            if value is None:
                return
        else:
            assert part in value, path
            value = value[part]


@pytest.mark.parametrize("make", MAKERS)
def test_every_promised_field_is_there(make):
    document = match_document(make())
    for path in PROMISED:
        reach(document, path)
    assert document["schema"] == "phasedb.match/1"
    for line in document["ledger"]:
        for claim in line["claims"]:
            assert {"name", "hkl", "kind", "delta_two_theta_deg", "probability"} <= set(claim)
            assert all(len(hkl) == 3 for hkl in claim["hkl"])


def test_merit_fields_are_the_promised_ones():
    merit = match_document(two_phase_match())["phases"][0]["merit"]
    assert merit["F"] == {
        "value": 35.71,
        "n": 9,
        "mean_abs_delta_two_theta_deg": 0.021,
        "n_possible": 12,
        "n_possible_in_range": 9,
    }
    assert merit["M"] == {"value": 88.2, "n": 9, "n_possible": 12}


@pytest.mark.parametrize("make", MAKERS)
def test_the_bytes_are_the_same_each_time_and_pure_json(make):
    first, second = document_bytes(match_document(make())), document_bytes(match_document(make()))
    assert first == second
    assert json.loads(first) == match_document(make())


@pytest.mark.parametrize("make", MAKERS)
@pytest.mark.parametrize("with_axis", [False, True])
def test_the_way_there_and_back_changes_nothing(make, with_axis):
    document = match_document(make(), with_axis=with_axis)
    again = match_document(match_from_document(json.loads(document_bytes(document))), with_axis=with_axis)
    assert again == document


def test_numbers_that_are_not_finite_become_null():
    match = two_phase_match()
    odd = dataclasses.replace(match.phases[0], relative_shift=float("nan"), expected_by_chance=float("inf"))
    document = match_document(dataclasses.replace(match, phases=(odd,), settings={"x": float("nan")}))
    assert document["phases"][0]["relative_shift"] is None
    assert document["phases"][0]["expected_by_chance"] is None
    assert document["settings"] == {"x": None}


@given(st.floats(-1e6, 1e6), st.sampled_from(sorted(DIGITS)))
def test_rounding_keeps_the_stated_digits_and_has_no_negative_zero(value, kind):
    result = rounded(value, kind)
    assert abs(result - value) <= 0.5 * 10 ** -DIGITS[kind] * (1 + 1e-6) + abs(value) * 1e-15
    assert str(result) != "-0.0"


def test_the_kept_axis_is_thin_and_loses_no_peak():
    match = two_phase_match()
    kept = match_document(match, with_axis=True)["axis"]
    for curve, original in zip(kept, match.axis, strict=True):
        assert len(curve["ln_a"]) <= AXIS_STEPS
        assert max(curve["log_evidence"]) == pytest.approx(max(original.log_evidence), abs=0.005)


@pytest.mark.parametrize(
    "damage",
    [
        lambda d: d.update(schema="phasedb.match/99"),
        lambda d: d.pop("shift"),
        lambda d: d["phases"][0].pop("name"),
        lambda d: d["measurement"].update(range=[1.0]),
        lambda d: d["ledger"][0].update(claims=None),
    ],
)
def test_a_damaged_document_is_bad_input(damage):
    document = match_document(two_phase_match())
    damage(document)
    with pytest.raises(InputError):
        match_from_document(document)
