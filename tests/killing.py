"""Killing real commands at random moments, and what must hold afterwards."""

from __future__ import annotations

import os
import random
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

from phasedb.library import Library
from phasedb.library.audit import audit

ENVIRONMENT = {**os.environ, "OPENBLAS_NUM_THREADS": "1"}


def start(store: str, *words: str, by: str = "Kim") -> subprocess.Popen[bytes]:
    """Start a command in a process of its own."""
    return subprocess.Popen(
        [sys.executable, "-m", "phasedb", "--store", store, "--by", by, *words],
        stdout=subprocess.DEVNULL,
        stderr=subprocess.PIPE,
        env=ENVIRONMENT,
    )


def usual_time(run: Callable[[], subprocess.Popen[bytes]]) -> float:
    """Return how long the command takes when nobody kills it, in seconds."""
    began = time.monotonic()
    process = run()
    _, said = process.communicate()
    assert process.returncode == 0, said
    return time.monotonic() - began


def kill_at_random(process: subprocess.Popen[bytes], within: float, rng: random.Random) -> bool:
    """Kill the process after a random part of `within` seconds; return whether it was still running.

    Half of the moments lie in the last third, where the writing is.
    """
    part = rng.uniform(0.6, 1.05) if rng.random() < 0.7 else rng.random()
    try:
        process.wait(part * within)
    except subprocess.TimeoutExpired:
        process.send_signal(signal.SIGKILL)
    process.communicate()
    return process.returncode == -signal.SIGKILL


def assert_whole(store: str | Path) -> None:
    """Assert that the audit passes."""
    with Library.open(store) as library:
        assert audit(library).faults == []


def content(store: str | Path) -> tuple[str, int, str]:
    """Return what a library holds: fingerprint, number of history rows, head."""
    with Library.open(store) as library:
        return library.fingerprint, library.history_count, library.history_head
