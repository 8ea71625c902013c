"""A library of a thousand to a million entries: time and memory of one whole match, and the index in use."""

from __future__ import annotations

import statistics
from pathlib import Path

import pytest
import sqlalchemy as sa
from benchmarks.synthetic import build_library
from benchmarks.timing import cost, write_two_phase_list

from phasedb.identify import match
from phasedb.identify.settings import MatchSettings
from phasedb.library import Library
from phasedb.measured.reading import read_peak_list

pytestmark = pytest.mark.benchmark

SIZES = (1_000, 10_000, 100_000, 1_000_000)
ROUNDS = 5


def test_time_and_memory_hardly_grow(tmp_path: Path) -> None:
    peaks = str(write_two_phase_list(tmp_path / "sample.csv"))
    stores = {size: str(build_library(tmp_path / f"{size}.sqlite", size)) for size in SIZES}
    costs: dict[int, list[dict[str, float]]] = {size: [] for size in SIZES}
    for _ in range(ROUNDS + 1):
        for size, store in stores.items():
            costs[size].append(cost("--store", store, "match", peaks, "--json"))
    time_s = {size: statistics.median(one["seconds"] for one in costs[size][1:]) for size in SIZES}
    peak_mb = {size: max(one["peak_mb"] for one in costs[size]) for size in SIZES}
    for size in SIZES:
        print(f"{size:>9,d} entries: {time_s[size]:.3f} s, peak {peak_mb[size]:.0f} MB")
    assert time_s[SIZES[-1]] <= 3.0 * time_s[SIZES[0]]
    assert peak_mb[SIZES[-1]] - peak_mb[SIZES[0]] <= 150.0


def test_large_library_is_asked_through_the_index(tmp_path: Path) -> None:
    """Every statement that a match sends about phases uses the index on (lattice type, a), and none scans."""
    store = build_library(tmp_path / "library.sqlite", 100_000)
    peaks = read_peak_list(write_two_phase_list(tmp_path / "sample.csv"))
    with Library.open(str(store), by="benchmark") as library:
        sent: list[tuple[str, object]] = []
        engine = library._engine
        sa.event.listen(engine, "before_cursor_execute", lambda *args: sent.append((args[2], args[3])))
        match(peaks, library, MatchSettings())
        asked = [
            (text, values) for text, values in sent if " phase" in text and text.lstrip().startswith("SELECT")
        ]
        assert asked
        with engine.connect() as connection:
            for text, values in asked:
                plan = connection.exec_driver_sql(f"EXPLAIN QUERY PLAN {text}", values).all()
                steps = [row[-1] for row in plan]
                assert not any(step.startswith("SCAN phase") for step in steps), steps


def test_a_thousand_look_alikes_are_counted_not_listed(tmp_path: Path) -> None:
    peaks = read_peak_list(write_two_phase_list(tmp_path / "sample.csv"))
    store = build_library(tmp_path / "library.sqlite", 1_000_000)
    with Library.open(str(store), by="benchmark") as library:
        found = match(peaks, library, MatchSettings())
    crowded = max(found.phases, key=lambda one: one.look_alike_count)
    print(f"largest group: {crowded.look_alike_count} look-alikes, {len(crowded.look_alikes)} named")
    assert crowded.look_alike_count > 20
    assert len(crowded.look_alikes) <= 20
    assert len(found.phases) <= 200
