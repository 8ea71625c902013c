"""Times and memory of whole commands, as ratios inside one run: medians, the two sides interleaved."""

from __future__ import annotations

import json
import os
import statistics
import subprocess
import sys
import time
from collections.abc import Sequence
from pathlib import Path

import numpy as np
from study.experiment import doublet
from study.library import starter_table
from study.simulate import sample

ROUNDS = 9

_PEAK = """
import json, resource, sys, time
sys.argv = ["phasedb", *sys.argv[1:]]
from phasedb.cli import main
start = time.perf_counter()
try:
    main()
except SystemExit as end:
    code = int(end.code or 0)
peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024.0
print(json.dumps({"code": code, "seconds": time.perf_counter() - start, "peak_mb": peak}), file=sys.stderr)
"""


def environment() -> dict[str, str]:
    """Return the environment of a timed process: one thread, no byte code written."""
    return {**os.environ, "OPENBLAS_NUM_THREADS": "1", "PYTHONDONTWRITEBYTECODE": ""}


def seconds(command: Sequence[str], codes: Sequence[int] = (0,)) -> float:
    """Return the wall time of a command, which must end with one of `codes`."""
    start = time.perf_counter()
    done = subprocess.run(command, capture_output=True, env=environment(), check=False)
    elapsed = time.perf_counter() - start
    assert done.returncode in codes, done.stderr.decode()
    return elapsed


def median_ratio(command: Sequence[str], baseline: Sequence[str], rounds: int = ROUNDS) -> float:
    """Return the median time of `command` over that of `baseline`; a first, untimed run of each warms up."""
    pairs = [(seconds(command), seconds(baseline)) for _ in range(rounds + 1)][1:]
    return statistics.median(a for a, _ in pairs) / statistics.median(b for _, b in pairs)


def python(code: str) -> list[str]:
    """Return the command that runs a line of Python."""
    return [sys.executable, "-c", code]


def phasedb(*arguments: str) -> list[str]:
    """Return the command that runs phasedb."""
    return [sys.executable, "-m", "phasedb", *arguments]


def cost(*arguments: str) -> dict[str, float]:
    """Return seconds and peak memory (MB) of a phasedb command run in a process of its own."""
    done = subprocess.run(
        [sys.executable, "-c", _PEAK, *arguments], capture_output=True, env=environment(), check=False
    )
    report = json.loads(done.stderr.decode().strip().splitlines()[-1])
    assert report["code"] == 0, done.stderr.decode()
    return report


def write_two_phase_list(path: Path) -> Path:
    """Write the list of a two-phase sample of the starter library as an analyst would."""
    contents = {"titanium nitride": (None, 1.0), "iron (alpha, ferrite)": (None, 0.6)}
    peaks = sample(starter_table(), contents, doublet(high=110.0, zero_deg=0.03), seed=41).peaks
    assert peaks.intensity is not None
    rows = np.column_stack([peaks.position, peaks.intensity])
    lines = ["# radiation: Cu", f"# range: {peaks.range_low} {peaks.range_high}", "two_theta_deg,intensity"]
    lines += [f"{position:.3f},{intensity:.1f}" for position, intensity in rows]
    path.write_text("\n".join(lines) + "\n", encoding="utf-8")
    return path
