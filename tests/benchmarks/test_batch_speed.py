"""What a list costs in a batch, what a second worker brings, and that memory stays flat."""

from __future__ import annotations

import json
import os
import statistics
import subprocess
import sys
from pathlib import Path

import pytest
from benchmarks.timing import phasedb, seconds, write_two_phase_list

pytestmark = pytest.mark.benchmark

MANY = 2000
CHEAP = ("--most-phases", "1")
ROUNDS = 3


@pytest.fixture(scope="module")
def store(tmp_path_factory: pytest.TempPathFactory) -> str:
    path = str(tmp_path_factory.mktemp("store") / "library.sqlite")
    seconds(phasedb("--store", path, "init"))
    return path


@pytest.fixture(scope="module")
def empty_store(tmp_path_factory: pytest.TempPathFactory) -> str:
    """Without phases a list costs least: the hardest case for what the batch itself adds."""
    path = str(tmp_path_factory.mktemp("empty") / "library.sqlite")
    seconds(phasedb("--store", path, "init", "--empty"))
    return path


def fill(folder: Path, count: int, *, short: bool) -> Path:
    """Fill a folder with lists that differ a little, so that none is a copy; short ones have two lines."""
    folder.mkdir()
    if short:
        head, rows = (
            ["# radiation: Cu", "# range: 30 60", "two_theta_deg,intensity"],
            [[38.1, 100.0], [44.3, 47.0]],
        )
    else:
        first = write_two_phase_list(folder / "0.csv").read_text(encoding="utf-8").splitlines()
        head, rows = first[:3], [[float(cell) for cell in row.split(",")] for row in first[3:]]
    for number in range(count):
        shift = 0.02 * number / count
        moved = [f"{position + shift:.5f},{intensity:.1f}" for position, intensity in rows]
        (folder / f"{number}.csv").write_text("\n".join([*head, *moved]) + "\n", encoding="utf-8")
    return folder


def batch_seconds(store: str, folder: Path, out: Path, workers: int, *more: str) -> float:
    for old in (out, out.with_name(out.name + ".journal")):
        old.unlink(missing_ok=True)
    words = ["batch", str(folder), "-o", str(out), "--workers", str(workers), *more]
    return seconds(phasedb("--store", store, *words))


def test_a_list_costs_at_most_a_fifth_of_a_match_command(store: str, tmp_path: Path) -> None:
    folder = fill(tmp_path / "lists", 60, short=False)
    one = [seconds(phasedb("--store", store, "match", str(folder / "0.csv"))) for _ in range(6)][1:]
    spent = [batch_seconds(store, folder, tmp_path / "r.csv", len(os.sched_getaffinity(0))) for _ in range(4)]
    ratio = statistics.median(spent[1:]) / 60 / statistics.median(one)
    print(f"a list in a batch / a match command = {ratio:.3f}")
    assert ratio <= 0.2


@pytest.mark.skipif(len(os.sched_getaffinity(0)) < 2, reason="needs two cores")
def test_two_workers_are_faster_than_one(empty_store: str, tmp_path: Path) -> None:
    folder = fill(tmp_path / "lists", MANY, short=True)
    pairs = [
        (
            batch_seconds(empty_store, folder, tmp_path / "one.csv", 1, *CHEAP),
            batch_seconds(empty_store, folder, tmp_path / "two.csv", 2, *CHEAP),
        )
        for _ in range(ROUNDS)
    ]
    ratio = statistics.median(one / two for one, two in pairs)
    print(f"one worker / two workers over {MANY} lists = {ratio:.2f}")
    assert (tmp_path / "one.csv").read_bytes() == (tmp_path / "two.csv").read_bytes()
    assert ratio >= 1.5


_PEAK = """
import json, resource, sys
from phasedb.cli import main
try:
    main(sys.argv[1:])
except SystemExit as end:
    own = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024
    workers = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024
    print(json.dumps({"own": own, "workers": workers}), file=sys.stderr)
"""


def peak_mb(store: str, folder: Path, out: Path) -> dict[str, float]:
    command = [
        sys.executable,
        "-c",
        _PEAK,
        "--store",
        store,
        "batch",
        str(folder),
        "-o",
        str(out),
        "--workers",
        "2",
    ]
    done = subprocess.run(command, capture_output=True, check=True)
    peak: dict[str, float] = json.loads(done.stderr.decode().strip().splitlines()[-1])
    return peak


def test_memory_is_flat_over_ten_thousand_lists(empty_store: str, tmp_path: Path) -> None:
    few = peak_mb(empty_store, fill(tmp_path / "few", 100, short=True), tmp_path / "few.jsonl")
    many = peak_mb(empty_store, fill(tmp_path / "many", 10_000, short=True), tmp_path / "many.jsonl")
    print(f"peak memory, MB: {few} for 100 lists, {many} for 10,000")
    assert many["own"] - few["own"] < 30
    assert many["workers"] - few["workers"] < 30
