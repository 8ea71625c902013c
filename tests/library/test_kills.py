"""Real commands killed with SIGKILL at random moments: all of the step or none, and the audit passes."""

from __future__ import annotations

import random
import shutil
import sqlite3
import sys
from pathlib import Path

import pytest
from killing import assert_whole, content, kill_at_random, start, usual_time

from phasedb.library import Library

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="there is no SIGKILL on Windows")

DUMP = Path(__file__).parent / "data" / "store_0001.sql"
ADD = ("add", "--name", "our nitride", "--formula", "TiN", "--lattice", "F", "--a", "4.2312(2)")
REVISE = ("revise", "gold", "--a", "4.0785", "--accept-warning", "--reason", "own powder")


_SHORT = pytest.param(5, id="short")
_LONG = pytest.param(48, id="long", marks=pytest.mark.long)
_BOTH = pytest.mark.parametrize("rounds", [_SHORT, _LONG])


def _kill_often(rounds, prepare, run, judge):
    """`prepare` lays the scene, `run` starts the command, `judge` looks at what is left."""
    prepare()
    limit = usual_time(run)
    rng = random.Random(20261201)
    killed = 0
    for _ in range(rounds):
        prepare()
        killed += kill_at_random(run(), limit, rng)
        judge()
    assert killed >= 1  # the moments do hit the command


@_BOTH
@pytest.mark.parametrize("words", [ADD, REVISE], ids=["add", "revise"])
def test_add_and_revise(starter, made_once, rounds, words):
    before = content(made_once)

    def judge():
        assert_whole(starter)
        after = content(starter)
        assert after[1] - before[1] in (0, 1)
        if after[1] == before[1]:
            assert after == before

    _kill_often(
        max(2, rounds // 2),
        lambda: shutil.copyfile(made_once, starter),
        lambda: start(starter, *words),
        judge,
    )


@_BOTH
def test_many_rows_at_once(tmp_path, rounds, nitride):
    store = str(tmp_path / "many.sqlite")
    drafts = "replace(nitride, name=f'row {i}', a_angstrom=3 + i / 1000) for i in range(3000)"
    code = (
        "import sys\nfrom dataclasses import replace\nfrom phasedb.library import Draft, Library\n"
        f"nitride = Draft({nitride.name!r}, 'TiN', 'F', 4.2)\n"
        "with Library.open(sys.argv[1], by='Kim', write=True) as library:\n"
        f"    library.add_many({drafts})\n"
    )
    import subprocess

    def prepare():
        Path(store).unlink(missing_ok=True)
        Path(f"{store}-journal").unlink(missing_ok=True)
        Library.create(store, by="Ann", starter=False).close()

    def judge():
        assert_whole(store)
        with Library.open(store) as library:
            assert library.phase_count in (0, 3000)

    _kill_often(
        rounds,
        prepare,
        lambda: subprocess.Popen([sys.executable, "-c", code, store], stderr=subprocess.PIPE),
        judge,
    )


@_BOTH
def test_init(tmp_path, rounds):
    store = tmp_path / "library.sqlite"

    def judge():
        if store.exists():
            assert_whole(store)
            with Library.open(store) as library:
                assert library.phase_count == 364

    _kill_often(
        max(2, rounds // 2), lambda: store.unlink(missing_ok=True), lambda: start(str(store), "init"), judge
    )


@_BOTH
def test_upgrade(tmp_path, rounds):
    store = tmp_path / "old.sqlite"

    def prepare():
        for path in tmp_path.glob("*old.sqlite*"):
            path.unlink()
        connection = sqlite3.connect(store)
        connection.executescript(DUMP.read_text(encoding="utf-8"))
        connection.close()

    def judge():
        from phasedb.library.upgrading import upgrade

        upgrade(str(store), by="Lee")  # the older store still upgrades, a new one needs nothing
        assert_whole(store)
        with Library.open(store) as library:
            assert [row.action for row in library.history()].count("upgraded") == 1
            assert library.get("our nitride").content.a_angstrom == 4.2421

    _kill_often(rounds, prepare, lambda: start(str(store), "upgrade"), judge)


@_BOTH
def test_backup_and_restore(starter, made_once, tmp_path, rounds):
    copy = tmp_path / "copies" / "copy.sqlite"
    before = content(made_once)

    def prepare_backup():
        shutil.rmtree(copy.parent, ignore_errors=True)

    def judge_backup():
        assert content(starter) == before
        if copy.exists():
            assert content(copy) == before
            assert_whole(copy)

    _kill_often(
        max(2, rounds // 2), prepare_backup, lambda: start(starter, "backup", str(copy)), judge_backup
    )

    other = str(tmp_path / "other.sqlite")
    shutil.copyfile(made_once, other)
    with Library.open(other, by="Bob", write=True) as library:
        library.withdraw("gold", reason="x")
    changed = content(other)
    place = tmp_path / "place" / "library.sqlite"

    def prepare_restore():
        shutil.rmtree(place.parent, ignore_errors=True)
        place.parent.mkdir()
        shutil.copyfile(other, place)

    def judge_restore():
        assert_whole(place)
        assert content(place) in (before, changed)
        kept = list(place.parent.glob("*.replaced"))
        if content(place) == before:
            assert [content(path) for path in kept] == [changed]

    _kill_often(
        max(2, rounds // 2),
        prepare_restore,
        lambda: start(str(place), "restore", str(made_once), "--replace"),
        judge_restore,
    )
