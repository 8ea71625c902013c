"""Several processes writing at once: nothing lost, nobody told of a lock, the chain whole."""

from __future__ import annotations

import json
import subprocess
import sys

import pytest
from killing import ENVIRONMENT, assert_whole

from phasedb.library import Library

WORKER = """
import json, sys, time
from phasedb.errors import RuleRefusedError
from phasedb.library import Draft, Library

store, number, seconds = sys.argv[1], int(sys.argv[2]), float(sys.argv[3])
who = f"worker {number}"
end = time.monotonic() + seconds
added = revised = stale = 0
while time.monotonic() < end:
    with Library.open(store, by=who, write=True) as library:
        library.add(
            Draft(f"phase {number}-{added}", "Fe", "I", 2.5 + number / 10 + added / 1e5), accept_warnings=True
        )
        added += 1
    with Library.open(store, by=who, write=True) as library:
        entry = library.get("counter")
        count = int(entry.content.remarks or 0)
        try:
            library.revise("counter", {"remarks": str(count + 1)}, expect_version=entry.version)
            revised += 1
        except RuleRefusedError as error:
            assert "is at version" in str(error)
            stale += 1
print(json.dumps([added, revised, stale]))
"""


@pytest.mark.parametrize(
    ("hands", "seconds"), [(4, 2.0), pytest.param(8, 60.0, marks=pytest.mark.long)], ids=["short", "long"]
)
def test_no_update_is_lost(empty, nitride, hands, seconds):
    from dataclasses import replace

    with Library.open(empty, by="Ann", write=True) as library:
        library.add(replace(nitride, name="counter"))
    workers = [
        subprocess.Popen(
            [sys.executable, "-c", WORKER, empty, str(number), str(seconds)],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            env=ENVIRONMENT,
        )
        for number in range(hands)
    ]
    results = []
    for worker in workers:
        out, err = worker.communicate()
        assert worker.returncode == 0, err.decode()
        results.append(json.loads(out))
    added, revised, _ = (sum(column) for column in zip(*results, strict=True))
    assert added >= hands
    assert revised >= 1
    with Library.open(empty) as library:
        counter = library.get("counter")
        assert counter.content.remarks == str(revised)
        assert counter.version == revised + 1
        assert library.phase_count == added + 1
        assert library.history_count == 2 + added + revised
        assert {row.who for row in library.history()} == {"Ann", *(f"worker {n}" for n in range(hands))}
    assert_whole(empty)
