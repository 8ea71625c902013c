"""What must hold of every match: order, unit, rows and entries that match nothing do not change the
answer.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from study.library import starter_phases, starter_table, table_of, take

from phasedb.crystal.phases import Phase
from phasedb.crystal.radiation import d_from_two_theta, q_from_d, radiation_from_name, two_theta_from_d
from phasedb.errors import InputError, UnknownNameError
from phasedb.identify import match
from phasedb.identify.result import Match
from phasedb.identify.settings import MatchSettings
from phasedb.measured.building import build_peak_list
from phasedb.report.document import match_document

CU = radiation_from_name("Cu-Ka1")
# lines of MgO (a = 4.2112 Å) and of copper (3.61496 Å), with invented deviations of about 0.01 degrees
MGO = [(3, 10.0), (4, 100.0), (8, 52.0), (11, 6.0), (12, 14.0), (16, 6.0), (20, 14.0)]
COPPER = [(3, 38.0), (4, 17.0), (8, 8.0), (11, 8.0), (12, 3.0)]
_D = np.array([4.2112 / np.sqrt(n) for n, _ in MGO] + [3.61496 / np.sqrt(n) for n, _ in COPPER])
_ORDER = np.argsort(-_D)
_NOISE = 0.01 * np.array([1, -1, 0.5, -0.5, 1.5, -1, 0.2, -0.8, 0.9, -1.2, 0.4, 0.1])
POSITIONS = two_theta_from_d(_D, CU.wavelength_angstrom)[_ORDER] + _NOISE
_COPPER_LINES = two_theta_from_d(_D[len(MGO) :], CU.wavelength_angstrom)
HEIGHTS = np.array([height for _, height in [*MGO, *COPPER]])[_ORDER]


def listed(positions: np.ndarray = POSITIONS, heights: np.ndarray | None = HEIGHTS) -> Match:
    peaks = build_peak_list(
        positions, unit="two-theta", intensity=heights, radiation=CU, measured_range=(30.0, 115.0)
    )
    return match(peaks, starter_table(), MatchSettings())


def probabilities(found: Match) -> dict[str, float]:
    return {phase.name: phase.probability for phase in found.phases}


def test_two_phases_are_named_and_every_line_has_an_owner() -> None:
    found = listed()
    assert {p.name for p in found.phases if p.probability > 0.5} >= {"magnesium oxide"}
    copper = next(p for p in found.phases if p.name == "copper")
    assert copper.probability > 0.5
    assert all(line.unexplained < 0.5 for line in found.ledger)
    strongest = max(found.ledger, key=lambda line: line.intensity or 0.0)
    assert (strongest.claims[0].name, strongest.claims[0].hkl) == ("magnesium oxide", ((2, 0, 0),))
    assert found.shift.zero_deg is not None
    assert abs(found.shift.zero_deg) < 0.05


def test_order_of_lines_and_rows_gives_the_same_bytes() -> None:
    table = starter_table()
    rng = np.random.default_rng(3)
    order = rng.permutation(len(POSITIONS))
    shuffled = take(table, rng.permutation(len(table)).tolist())
    peaks = build_peak_list(
        POSITIONS[order],
        unit="two-theta",
        intensity=HEIGHTS[order],
        radiation=CU,
        measured_range=(30.0, 115.0),
    )
    assert match_document(match(peaks, shuffled, MatchSettings())) == match_document(listed())


@pytest.mark.parametrize("unit", ["d", "q"])
def test_unit_of_the_list_does_not_matter(unit: str) -> None:
    d = d_from_two_theta(np.r_[POSITIONS, 30.0, 115.0], CU.wavelength_angstrom)
    values = d if unit == "d" else q_from_d(d)
    low, high = sorted(values[-2:].tolist())
    peaks = build_peak_list(
        values[:-2],
        unit=unit,
        intensity=HEIGHTS,
        radiation=CU,
        measured_range=(low, high),  # type: ignore[arg-type]
    )
    other, first = match(peaks, starter_table(), MatchSettings()), listed()
    assert probabilities(other) == pytest.approx(probabilities(first), abs=1e-6)
    assert other.unlisted.probability == pytest.approx(first.unlisted.probability, abs=1e-6)


def test_an_entry_that_matches_nothing_takes_no_more_than_its_prior_share() -> None:
    extra = Phase("nothing like it", "Xe", "P", 2.45, elements=("Xe",))
    table = table_of([*starter_phases(), extra])
    peaks = build_peak_list(
        POSITIONS, unit="two-theta", intensity=HEIGHTS, radiation=CU, measured_range=(30.0, 115.0)
    )
    before, after = probabilities(listed()), probabilities(match(peaks, table, MatchSettings()))
    for name, value in before.items():
        assert after.get(name, 0.0) == pytest.approx(value, abs=1.5 / 364 + 0.01)
    assert after.get("nothing like it", 0.0) < 0.02


class TestHostileLists:
    @pytest.mark.parametrize("place", [20.0, 43.3, 99.9])
    def test_one_line_names_nothing_with_confidence(self, place: float) -> None:
        peaks = build_peak_list([place], unit="two-theta", radiation=CU, measured_range=(20.0, 100.0))
        found = match(peaks, starter_table(), MatchSettings())
        assert all(phase.probability < 0.5 for phase in found.phases)
        assert found.unlisted.probability < 0.5

    def test_one_giant_line_names_nothing_with_confidence(self) -> None:
        peaks = build_peak_list(
            [38.47, 51.2, 63.9], unit="two-theta", intensity=[1e6, 30.0, 12.0], radiation=CU,
            measured_range=(20.0, 120.0),
        )  # fmt: skip
        found = match(peaks, starter_table(), MatchSettings())
        assert all(phase.probability < 0.6 for phase in found.phases)

    def test_equal_lines_are_one_line(self) -> None:
        peaks = build_peak_list([43.3] * 40, unit="two-theta", radiation=CU, measured_range=(20.0, 100.0))
        found = match(peaks, starter_table(), MatchSettings())
        assert len(found.ledger) == 1
        assert all(phase.probability < 0.5 for phase in found.phases)

    def test_an_empty_library_leaves_only_the_unlisted(self) -> None:
        peaks = build_peak_list(
            POSITIONS, unit="two-theta", intensity=HEIGHTS, radiation=CU, measured_range=(30.0, 115.0)
        )
        found = match(peaks, take(starter_table(), []), MatchSettings())
        assert found.phases == ()
        assert any("no phase" in text for text in found.cautions)
        assert found.unlisted.probability > 0.5

    @pytest.mark.long
    def test_two_thousand_lines_end(self) -> None:
        rng = np.random.default_rng(8)
        peaks = build_peak_list(
            np.sort(rng.uniform(10.0, 150.0, 2000)),
            unit="two-theta",
            radiation=CU,
            measured_range=(10.0, 150.0),
        )
        found = match(peaks, starter_table(), MatchSettings())
        assert len(found.ledger) > 1500


class TestSettings:
    def peaks(self):
        return build_peak_list(
            POSITIONS, unit="two-theta", intensity=HEIGHTS, radiation=CU, measured_range=(30.0, 115.0)
        )

    def test_strict_chemistry_leaves_the_impossible_out(self) -> None:
        found = match(self.peaks(), starter_table(), MatchSettings(elements=("Cu",), strict_chemistry=True))
        assert "magnesium oxide" not in probabilities(found)
        assert probabilities(found)["copper"] > 0.5

    def test_excluded_elements_sink(self) -> None:
        plain, without = listed(), match(self.peaks(), starter_table(), MatchSettings(excluding=("Mg",)))
        assert (
            probabilities(without).get("magnesium oxide", 0.0) < 0.5 < probabilities(plain)["magnesium oxide"]
        )

    def test_unknown_internal_standard_is_an_error(self) -> None:
        with pytest.raises(UnknownNameError):
            match(self.peaks(), starter_table(), MatchSettings(internal_standard="no such thing"))

    def test_foreign_lines_are_claimed_first(self) -> None:
        settings = MatchSettings(foreign_positions=_COPPER_LINES)
        found = match(self.peaks(), starter_table(), settings)
        kinds = {line.line: line.claims[0].kind for line in found.ledger if line.claims}
        assert list(kinds.values()).count("foreign") == len(_COPPER_LINES)
        assert probabilities(found)["magnesium oxide"] > 0.5
        with pytest.raises(InputError):
            match(self.peaks(), starter_table(), replace(settings, foreign_positions=POSITIONS))
