"""The figures that the design asks for, on reporting seeds (`-m study`; about 100 lists of each set)."""

from __future__ import annotations

from functools import lru_cache

import pytest

from study.metrics import bootstrap, calibration_error, pooled, share, wrong_per_list
from study.run import Row, run
from study.tables import GROUPS, by_set

pytestmark = pytest.mark.study

LISTS = 100


@lru_cache(maxsize=1)
def rows() -> tuple[Row, ...]:
    return tuple(run("reporting", LISTS, jobs=2, with_rivals=True))


def scores(name: str) -> list:
    return [row.score for row in by_set(rows())[name]]


def test_no_list_ends_in_an_error() -> None:
    assert [row.score.fault for row in rows() if row.score.fault] == []


@pytest.mark.parametrize(("group", "least"), [("1 to 3, intensities", 0.985), ("1 to 3, bare", 0.97)])
def test_phases_are_found_counting_look_alikes(group: str, least: float) -> None:
    _, _, high = bootstrap(scores(group), lambda some: share(some, "found_alike"))
    assert high >= least


@pytest.mark.parametrize("group", sorted(GROUPS))
def test_strict_naming_is_near_its_ceiling(group: str) -> None:
    """Within 2 points of what an oracle given the true shift, noise and drift class names."""
    _, low, _ = bootstrap(scores(group), lambda some: share(some, "ceiling") - share(some, "found_strict"))
    assert low <= 0.02


@pytest.mark.parametrize(("name", "most"), [("removed", 0.10), ("random", 0.02), ("noncubic", 0.05)])
def test_wrong_claims_are_rare(name: str, most: float) -> None:
    _, low, _ = bootstrap(scores(name), wrong_per_list)
    assert low <= most


def test_probabilities_are_honest() -> None:
    everything = [row.score for row in rows()]
    _, low, _ = bootstrap(everything, lambda some: calibration_error(*pooled(some, "entry")))
    assert low <= 0.03


@pytest.mark.parametrize("group", sorted(GROUPS))
def test_usual_practice_is_clearly_behind(group: str) -> None:
    members = by_set(rows())[group]
    total = sum(row.score.n_listed for row in members)
    ours = sum(row.score.found_alike for row in members) / total
    for rival in members[0].rivals:
        theirs = sum(row.rivals[rival].found_alike for row in members) / total
        assert ours > theirs + 0.1, rival
