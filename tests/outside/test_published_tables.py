"""The matcher on published line tables (data/published_line_tables.csv: the source stands in each row)."""

from __future__ import annotations

from functools import lru_cache

import pytest
from study.library import starter_table
from study.measured import RIGHT, published_tables

from phasedb.identify import match
from phasedb.identify.result import Match
from phasedb.identify.settings import MatchSettings

TABLES = {one.name: one for one in published_tables()}


@lru_cache(maxsize=64)
def answer(name: str) -> Match:
    return match(TABLES[name].peaks, starter_table(), MatchSettings())


def test_every_table_is_judged() -> None:
    assert set(TABLES) == set(RIGHT)


@pytest.mark.parametrize("name", sorted(RIGHT))
def test_right_phase_is_named(name: str) -> None:
    """First in the ranking, by itself or as a member of the group that cannot be told apart, and claimed."""
    found = answer(name)
    leader = found.phases[0]
    assert RIGHT[name] in {leader.name, *leader.look_alikes}, found.phases[:3]
    assert leader.group_probability > 0.5


@pytest.mark.parametrize("name", sorted(RIGHT))
def test_nothing_else_is_claimed(name: str) -> None:
    found = answer(name)
    leader = found.phases[0]
    group = {RIGHT[name], leader.name, *leader.look_alikes}
    assert [one.name for one in found.phases if one.probability > 0.5 and one.name not in group] == []
    best = found.unlisted.best
    assert (
        best is None
        or found.unlisted.probability <= 0.5
        or best.a_angstrom == pytest.approx(leader.a_stored_angstrom, rel=0.01)
    )


@pytest.mark.parametrize(
    ("name", "certified", "expanded"),
    [
        # certified a and its expanded uncertainty (k = 2) in Å: NIST certificates of SRM 640d and 640e
        ("nist_srm640d_peak_positions", 5.43123, 0.00008),
        ("nist_srm640e_peak_positions", 5.431179, 0.00008),
    ],
)
def test_certified_silicon_positions_give_the_certified_lattice_constant(
    name: str, certified: float, expanded: float
) -> None:
    result = next(one for one in answer(name).phases if one.name == "silicon")
    assert result.a_fitted_angstrom == pytest.approx(certified, abs=max(expanded, 2e-5))
