"""Eight processes at once, each with the commands of its job: nothing lost, nobody told of a lock."""

from __future__ import annotations

import json
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import pytest
from killing import ENVIRONMENT, assert_whole
from running import run

from phasedb.library import Library
from phasedb.library.records import list_identifications

JOBS = ("add", "add", "add", "revise", "revise", "import", "save", "read")
PEAKS = (
    "# radiation: Cu\ntwo_theta_deg,intensity\n36.66,70\n42.59,100\n61.81,45\n74.07,19\n77.97,12\n93.78,6\n"
)

WORKER = """
import json, sys, time
from pathlib import Path
sys.path.insert(0, sys.argv[1])
from running import run

store, job, folder = sys.argv[2:5]
number, seconds = int(sys.argv[5]), float(sys.argv[6])
who = f"worker {number}"
peaks, table, out = Path(folder, "peaks.csv"), Path(folder, f"{number}.csv"), Path(folder, f"{number}.json")
done = stale = turn = 0
said = []


def command(*words):
    global done, stale
    ran = run(*words, store=store, by=who)
    done += ran.code == 0
    stale += ran.code == 3
    if ran.code not in (0, 3) or "lock" in ran.err or "writing to the store" in ran.err:
        said.append(ran.err)
    return ran


end = time.monotonic() + seconds
while time.monotonic() < end or turn == 0:
    turn += 1
    if job == "add":
        a = f"{2.5 + number / 10 + turn / 1e4:.4f}"
        words = ("--formula", "Fe", "--lattice", "I", "--a", a, "--accept-warning")
        command("add", "--name", f"{who}, {turn}", *words)
    elif job == "revise":
        entry = run("show", "counter", "--json", store=store).json["phase"]
        count = int(entry["remarks"] or 0) + 1
        command("revise", "counter", "--remarks", count, "--expect-version", entry["version"])
    elif job == "import":
        rows = [f"{who} {turn}.{n},Ni,F,{3.3 + turn / 1e3 + n / 1e5:.5f}" for n in range(20)]
        table.write_text("name,formula,lattice_type,a_angstrom\\n" + "\\n".join(rows))
        command("import", table)
    elif job == "save":
        command("match", peaks, "--save")
    else:
        command(*(("audit",), ("list",), ("export", out, "--with-history"), ("history", "counter"))[turn % 4])
print(json.dumps([done, stale, said]))
"""


@pytest.fixture
def folder(tmp_path: Path) -> Iterator[Path]:
    (tmp_path / "peaks.csv").write_text(PEAKS)
    yield tmp_path


@pytest.mark.parametrize("seconds", [3.0, pytest.param(60.0, marks=pytest.mark.long)], ids=["short", "long"])
def test_eight_jobs_at_once(folder: Path, seconds: float) -> None:
    store = folder / "lab.sqlite"
    assert run("init", "--empty", store=store).code == 0
    counter = (
        "add",
        "--name",
        "counter",
        "--formula",
        "TiN",
        "--lattice",
        "F",
        "--a",
        "4.2417",
        "--accept-warning",
    )
    assert run(*counter, store=store).code == 0
    here = str(Path(__file__).parent.parent)
    workers = [
        subprocess.Popen(
            [sys.executable, "-c", WORKER, here, str(store), job, str(folder), str(number), str(seconds)],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            env=ENVIRONMENT,
        )
        for number, job in enumerate(JOBS)
    ]
    done: dict[str, int] = dict.fromkeys(JOBS, 0)
    stale = 0
    for worker, job in zip(workers, JOBS, strict=True):
        out, err = worker.communicate()
        assert worker.returncode == 0, err.decode()
        count, refused, said = json.loads(out)
        assert said == []
        assert refused == 0 or job == "revise"
        done[job] += count
        stale += refused
    print(done, f"{stale} stale edits refused")
    assert all(done.values())
    with Library.open(store) as library:
        entry = library.get("counter")
        assert (entry.content.remarks, entry.version) == (str(done["revise"]), done["revise"] + 1)
        assert library.phase_count == 1 + done["add"] + 20 * done["import"]
        assert len(list_identifications(library)) == done["save"]
        changes = done["add"] + done["revise"] + 20 * done["import"] + 2 * done["save"]
        assert library.history_count == 2 + changes
    assert_whole(store)


def test_a_stale_edit_shows_both_versions(folder: Path) -> None:
    store = folder / "lab.sqlite"
    assert run("init", store=store).code == 0
    assert run("revise", "gold", "--remarks", "first", "--expect-version", "1", store=store).code == 0
    ran = run("revise", "gold", "--a", "4.0785", "--expect-version", "1", store=store, by="Bob")
    assert ran.code == 3
    assert "is at version 2, not 1: changed by A. First" in ran.err
    assert "first" in ran.err
    assert "4.0785" in ran.err
    assert "--expect-version 2" in ran.err
    assert run("show", "gold", "--json", store=store).json["phase"]["a_angstrom"] != 4.0785
