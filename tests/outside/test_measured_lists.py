"""The matcher on lists measured in other laboratories (data/measured_lists.jsonl: each row names its source).

The rule by which an answer counts as right is in `study.measured`.
"""

from __future__ import annotations

from functools import lru_cache

import pytest
from study.library import starter_table
from study.measured import Judgement, judge_measured, measured_elements, measured_peaks, measured_records

from phasedb.identify import match
from phasedb.identify.result import Match
from phasedb.identify.settings import MatchSettings

RECORDS = {record["id"]: record for record in measured_records()}
NO_CUBIC = [key for key, record in RECORDS.items() if record["set"] == "measured_no_cubic"]


@lru_cache(maxsize=64)
def answer(key: str, with_elements: bool, named: bool) -> Match:
    record = RECORDS[key]
    elements = measured_elements(record) if with_elements else None
    return match(measured_peaks(record, named=named), starter_table(), MatchSettings(elements=elements))


def judged(key: str, with_elements: bool, named: bool = False) -> Judgement:
    return judge_measured(RECORDS[key], answer(key, with_elements, named))


@pytest.mark.parametrize("named", [False, True], ids=["wavelength typed", "radiation named"])
@pytest.mark.parametrize(
    ("with_elements", "least"), [(True, 14), (False, 11)], ids=["elements", "no elements"]
)
def test_enough_lists_are_right(with_elements: bool, least: int, named: bool) -> None:
    verdicts = {key: judged(key, with_elements, named) for key in RECORDS}
    wrong = {key: verdict for key, verdict in verdicts.items() if not verdict.is_right}
    assert len(RECORDS) == 15
    assert len(RECORDS) - len(wrong) >= least, wrong


@pytest.mark.parametrize("with_elements", [True, False], ids=["elements", "no elements"])
@pytest.mark.parametrize("key", NO_CUBIC)
def test_negative_controls_claim_nothing(key: str, with_elements: bool) -> None:
    found = answer(key, with_elements, named=False)
    assert [result.name for result in found.phases if result.probability > 0.5] == []
    assert found.unlisted.probability <= 0.5


@pytest.mark.parametrize("with_elements", [True, False], ids=["elements", "no elements"])
@pytest.mark.parametrize("key", ["lab6_lab_cu", "ceo2_capillary_mo", "ag_al2o3_mixture_cu"])
def test_clean_patterns_are_named_with_confidence(key: str, with_elements: bool) -> None:
    found = answer(key, with_elements, named=False)
    expected = RECORDS[key]["listed"][0]
    leader = found.phases[0]
    assert expected in {leader.name, *leader.look_alikes}
    assert leader.group_probability > 0.9


def test_pyrochlore_that_the_library_lacks_is_found_as_unlisted() -> None:
    """RbNb2O5F: F, a = 10.4956 Å (Zakary et al., Inorg. Chem. 2025, 64, 5764)."""
    best = answer("rbnb2o5f_pyrochlore_cu", with_elements=True, named=False).unlisted.best
    assert best is not None
    assert best.probability > 0.5
    assert best.lattice_type == "F"
    assert best.a_angstrom == pytest.approx(10.49561, rel=1e-3)


def test_two_phase_alloy_names_both_lattices() -> None:
    """An I solid solution near 3.226 Å that no entry names, and a minor F phase near titanium nitride."""
    verdict = judged("rhea_nbmotatiw_co", with_elements=True)
    assert verdict.is_right, verdict
    assert any(claim.startswith("titanium nitride") or "F 4.2" in claim for claim in verdict.right)


def test_lattice_constant_of_line_standard_lies_within_two_esd() -> None:
    """LaB6 of the measured scan: 4.1569 Å (the example model of the data's own source)."""
    found = answer("lab6_lab_cu", with_elements=False, named=True)
    result = next(one for one in found.phases if one.name == "lanthanum hexaboride")
    assert result.a_fitted_angstrom is not None
    assert result.a_fitted_esd_angstrom is not None
    assert abs(result.a_fitted_angstrom - 4.1569) <= 2.0 * result.a_fitted_esd_angstrom
    assert result.a_fitted_esd_angstrom < 2e-3


def test_rough_and_shifted_lists_state_less_than_certainty() -> None:
    """Tungsten by a rate meter, and lines 2 to 4 degrees wide: an honest answer is not 0.999."""
    for key in ("w_rough_cu", "duplex_steel_tilted_cu"):
        found = answer(key, with_elements=False, named=False)
        assert max((result.probability for result in found.phases), default=0.0) < 0.99, key
