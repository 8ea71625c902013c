"""The batch command: one row for each list, errors as rows, resumed after a kill, whatever the workers."""

from __future__ import annotations

import csv
import json
import os
import signal
import subprocess
import sys
import time

import pytest
from running import run

from phasedb.cli.progress import Progress


def write_list(path, positions):
    rows = "\n".join(f"{x:.3f},{100 - i}" for i, x in enumerate(positions))
    path.write_text(f"# radiation: Cu\n# range: 30 100\ntwo_theta_deg,intensity\n{rows}\n")


@pytest.fixture
def folder(tmp_path):
    """Two good lists, one deeper, and three that cannot be read."""
    place = tmp_path / "lists"
    (place / "deeper").mkdir(parents=True)
    write_list(place / "silver.csv", [38.10, 44.28, 64.42, 77.37, 81.51, 97.85])
    write_list(place / "deeper" / "iron.csv", [44.66, 64.99, 82.30, 98.90])
    (place / "empty.csv").write_text("")
    (place / "words.csv").write_text("two_theta_deg\nabc\n")
    (place / "picture.png").write_bytes(bytes(range(256)))
    (place / ".hidden").write_text("x")
    return place


def rows_of(path):
    with path.open(newline="", encoding="utf-8") as stream:
        return list(csv.DictReader(stream))


@pytest.mark.parametrize("workers", [1, 2])
def test_each_list_is_a_row_in_order_and_bad_ones_say_why(small_store, folder, tmp_path, workers):
    out = tmp_path / "results.csv"
    ran = run("batch", folder, "-o", out, "--workers", workers, store=small_store)
    assert ran.code == 0, ran.err
    assert ran.out == ""
    assert "5 lists: 2 matched, 3 failed" in ran.err
    rows = rows_of(out)
    names = ["deeper/iron.csv", "empty.csv", "picture.png", "silver.csv", "words.csv"]
    assert [row["file"] for row in rows] == names
    assert [row["status"] for row in rows] == ["matched", "failed", "failed", "matched", "failed"]
    assert rows[3]["phases"] == "silver"
    assert "words.csv" in rows[4]["error"]


def test_csv_and_json_lines_agree_with_match(small_store, folder, tmp_path):
    run("batch", folder, "-o", tmp_path / "r.csv", "--workers", 1, store=small_store)
    run("batch", folder, "-o", tmp_path / "r.jsonl", "--workers", 1, store=small_store)
    documents = [json.loads(line) for line in (tmp_path / "r.jsonl").read_text().splitlines()]
    rows = rows_of(tmp_path / "r.csv")
    assert [d["file"] for d in documents] == [row["file"] for row in rows]
    alone = run("match", folder / "silver.csv", "--json", store=small_store).json
    assert documents[3]["match"] == alone
    assert documents[1]["match"] is None
    assert documents[1]["error"]["what"]


def test_the_summary_as_json(small_store, folder, tmp_path):
    ran = run("batch", folder, "-o", tmp_path / "r.csv", "--workers", 1, "--json", store=small_store)
    assert ran.json | {"output": ""} == {
        "schema": "phasedb.batch/1",
        "output": "",
        "lists": 5,
        "taken_up": 0,
        "matched": 2,
        "failed": 3,
    }


def test_again_it_only_does_what_is_new_or_changed(small_store, folder, tmp_path):
    out = tmp_path / "r.csv"
    run("batch", folder, "-o", out, "--workers", 1, store=small_store)
    first = out.read_bytes()
    ran = run("batch", folder, "-o", out, "--workers", 1, "--json", store=small_store)
    assert ran.json["taken_up"] == 5
    assert out.read_bytes() == first
    write_list(folder / "new.csv", [44.66, 64.99, 82.30])
    write_list(folder / "words.csv", [38.10, 44.28, 64.42])
    ran = run("batch", folder, "-o", out, "--workers", 1, "--json", store=small_store)
    assert (ran.json["lists"], ran.json["taken_up"], ran.json["failed"]) == (6, 4, 2)
    (folder / "new.csv").unlink()
    run("batch", folder, "-o", out, "--workers", 1, store=small_store)
    assert [row["file"] for row in rows_of(out)][-1] == "words.csv"


def test_other_settings_are_other_work(small_store, folder, tmp_path):
    out = tmp_path / "r.csv"
    run("batch", folder, "-o", out, "--workers", 1, store=small_store)
    again = run("batch", folder, "-o", out, "--workers", 1, "--elements", "Ag", "--json", store=small_store)
    assert again.json["taken_up"] == 0


def test_the_outputs_may_lie_in_the_folder_itself(small_store, folder):
    out = folder / "results.csv"
    for _ in range(2):
        ran = run("batch", folder, "-o", out, "--figure", folder / "m.svg", "--workers", 1, store=small_store)
        assert ran.code == 0, ran.err
        assert len(rows_of(out)) == 5


@pytest.mark.parametrize("ending", ["svg", "png", "pdf"])
def test_a_matrix_of_samples_against_phases(small_store, folder, tmp_path, ending):
    figure = tmp_path / f"m.{ending}"
    run("batch", folder, "-o", tmp_path / "r.csv", "--figure", figure, "--workers", 1, store=small_store)
    assert figure.stat().st_size > 3000


def test_exit_2_only_when_every_file_failed(small_store, folder, tmp_path):
    for name in ("silver.csv", "deeper/iron.csv"):
        (folder / name).unlink()
    ran = run("batch", folder, "-o", tmp_path / "r.csv", "--workers", 1, store=small_store)
    assert ran.code == 2
    assert "none of the 3 lists" in ran.err
    assert len(rows_of(tmp_path / "r.csv")) == 3


@pytest.mark.parametrize(
    ("words", "code", "said"),
    [
        (["absent", "-o", "r.csv"], 2, "no such folder"),
        (["{folder}/silver.csv", "-o", "r.csv"], 2, "not a folder"),
        (["{folder}/deeper/..", "-o", "r.txt"], 2, ".csv or .jsonl"),
        (["{folder}", "-o", "absent/r.csv"], 2, "choose another -o"),
        (["{folder}", "-o", "r.csv", "--figure", "f.gif"], 2, ".svg"),
        (["{folder}", "-o", "r.csv", "--workers", "0"], 2, "--workers"),
        (["{folder}"], 2, "-o"),
    ],
)
def test_bad_usage(small_store, folder, tmp_path, monkeypatch, words, code, said):
    monkeypatch.chdir(tmp_path)
    ran = run("batch", *(word.format(folder=folder) for word in words), store=small_store)
    assert ran.code == code
    assert said in ran.err


def test_an_empty_folder_is_bad_input(small_store, tmp_path):
    (tmp_path / "none").mkdir()
    assert run("batch", tmp_path / "none", "-o", tmp_path / "r.csv", store=small_store).code == 2


def start(store, folder, out, *words):
    command = [
        sys.executable,
        "-m",
        "phasedb",
        "--store",
        str(store),
        "batch",
        str(folder),
        "-o",
        str(out),
        *words,
    ]
    return subprocess.Popen(command, stderr=subprocess.PIPE, start_new_session=True)


def journal_keys(path):
    records = [json.loads(line) for line in path.read_bytes().split(b"\n")[:-1]]
    return [(r["file"], r["sha256"]) for r in records if "file" in r]


@pytest.mark.parametrize("workers", ["1", pytest.param("2", marks=pytest.mark.long)])
def test_killed_at_any_moment_it_goes_on_without_losing_or_repeating(small_store, tmp_path, workers):
    folder = tmp_path / "lists"
    folder.mkdir()
    for i in range(12):
        write_list(folder / f"{i:02}.csv", [38.10 + 0.001 * i, 44.28, 64.42, 77.37, 81.51, 97.85])
    out, journal = tmp_path / "r.csv", tmp_path / "r.csv.journal"
    for goal in (2, 5, 9):
        process = start(small_store, folder, out, "--workers", workers)
        while process.poll() is None and (not journal.exists() or len(journal_keys(journal)) < goal):
            time.sleep(0.01)
        os.kill(process.pid, signal.SIGKILL)
        process.wait()
        process.stderr.close()
        assert not out.exists()
    ran = run("batch", folder, "-o", out, "--workers", 1, "--json", store=small_store)
    assert ran.json["taken_up"] >= 9
    keys = journal_keys(journal)
    assert len(keys) == len(set(keys)) == 12
    run("batch", folder, "-o", tmp_path / "whole.csv", "--workers", 1, store=small_store)
    assert out.read_bytes() == (tmp_path / "whole.csv").read_bytes()


def test_workers_leave_with_a_killed_parent(small_store, tmp_path):
    folder = tmp_path / "lists"
    folder.mkdir()
    for i in range(40):
        write_list(folder / f"{i:02}.csv", [38.10 + 0.001 * i, 44.28, 64.42, 77.37, 81.51, 97.85])
    journal = tmp_path / "r.csv.journal"
    process = start(small_store, folder, tmp_path / "r.csv", "--workers", "2")
    while not journal.exists() or not journal_keys(journal):
        time.sleep(0.02)
    group = os.getpgid(process.pid)
    os.kill(process.pid, signal.SIGKILL)
    process.wait()
    process.stderr.close()
    for _ in range(500):
        try:
            os.killpg(group, 0)
        except ProcessLookupError:
            return
        time.sleep(0.02)
    os.killpg(group, signal.SIGKILL)
    raise AssertionError("workers outlived their parent by ten seconds")


@pytest.mark.long
def test_interrupted_it_says_so_and_exits_130(small_store, tmp_path):
    folder = tmp_path / "lists"
    folder.mkdir()
    for i in range(60):
        write_list(folder / f"{i:02}.csv", [38.10 + 0.001 * i, 44.28, 64.42, 77.37, 81.51, 97.85])
    journal = tmp_path / "r.csv.journal"
    process = start(small_store, folder, tmp_path / "r.csv", "--workers", "2")
    while not journal.exists() or not journal_keys(journal):
        time.sleep(0.02)
    os.killpg(process.pid, signal.SIGINT)
    _, said = process.communicate(timeout=60)
    assert process.returncode == 130
    assert said.decode().strip().splitlines()[-1] == "error: interrupted"
    assert "Traceback" not in said.decode()


@pytest.mark.long
def test_a_list_that_kills_its_worker_is_one_row(small_store, folder, tmp_path):
    """A worker that dies (out of memory, say) costs only the list it died on."""
    script = tmp_path / "run.py"
    script.write_text(
        "import os, sys\n"
        "import phasedb.measured.reading as reading\n"
        "plain = reading.read_peak_list\n"
        "def read(path, *more):\n"
        "    if path.endswith('words.csv'):\n"
        "        os._exit(9)\n"
        "    return plain(path, *more)\n"
        "reading.read_peak_list = read\n"
        "if __name__ == '__main__':\n"
        "    from phasedb.cli import main\n"
        "    main(sys.argv[1:])\n"
    )
    out = tmp_path / "r.csv"
    command = [sys.executable, script, "--store", small_store, "batch", folder, "-o", out, "--workers", "2"]
    done = subprocess.run(list(map(str, command)), capture_output=True, check=False)
    assert done.returncode == 0, done.stderr.decode()
    rows = rows_of(out)
    assert [row["status"] for row in rows] == ["matched", "failed", "failed", "matched", "failed"]
    assert "died on this list" in rows[4]["error"]


def test_progress_is_silent_in_a_pipe(small_store, folder, tmp_path):
    process = start(small_store, folder, tmp_path / "r.csv", "--workers", "1")
    _, said = process.communicate(timeout=60)
    assert b"\r" not in said
    assert b"/s" not in said


def test_the_progress_line_tells_rate_and_time_left():
    progress = Progress(200, "lists")
    progress.done = 50
    assert progress.text(10.0) == "[######..................] 50/200 lists, 5.0/s, 30 s left"
