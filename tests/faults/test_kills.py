"""Import, merge, adopt, saving and signing killed at random moments: all or none, and the audit passes."""

from __future__ import annotations

import random
import shutil
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
from killing import assert_whole, content, kill_at_random, start, usual_time
from running import run

from phasedb.library import Library
from phasedb.library.records import list_identifications

pytestmark = pytest.mark.skipif(sys.platform == "win32", reason="there is no SIGKILL on Windows")

PEAKS = (
    "# radiation: Cu\ntwo_theta_deg,intensity\n36.66,70\n42.59,100\n61.81,45\n74.07,19\n77.97,12\n93.78,6\n"
)
ROWS = 1500
ROUNDS = pytest.mark.parametrize(
    "rounds", [pytest.param(2, id="short"), pytest.param(40, id="long", marks=pytest.mark.long)]
)


def kill_often(
    rounds: int, fresh: Path, store: Path, words: tuple[object, ...], judge: Callable[[], None]
) -> None:
    """Kill the command `rounds` times, each time on a new copy of `fresh`, and judge what is left."""

    def prepare() -> None:
        for leftover in store.parent.glob(f"*{store.name}*"):
            leftover.unlink()
        shutil.copyfile(fresh, store)

    def command():
        return start(str(store), *map(str, words))

    prepare()
    limit = usual_time(command)
    rng = random.Random(f"{words[0]} {rounds}")
    killed = 0
    for _ in range(rounds):
        prepare()
        killed += kill_at_random(command(), limit, rng)
        assert_whole(store)
        judge()
        assert {path.name for path in store.parent.iterdir()} <= {store.name, f"{store.name}-journal"}
    assert killed or rounds < 3  # the moments do hit the command


@pytest.fixture
def peaks(tmp_path: Path) -> Path:
    path = tmp_path / "peaks.csv"
    path.write_text(PEAKS)
    return path


@pytest.fixture
def store(tmp_path: Path) -> Path:
    folder = tmp_path / "store"
    folder.mkdir()
    return folder / "lab.sqlite"


@pytest.fixture(scope="module")
def exported(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """Another library of made-up entries, and its export with history."""
    folder = tmp_path_factory.mktemp("other")
    table, other, out = folder / "table.csv", folder / "other.sqlite", folder / "other.json"
    rows = [f"row {n},{'TiN' if n % 2 else 'Ni3Al'},F,{3.5 + n / 1e3:.3f}" for n in range(ROWS)]
    table.write_text("name,formula,lattice_type,a_angstrom\n" + "\n".join(rows))
    run("init", "--empty", store=other)
    assert run("import", table, store=other).code == 0
    assert run("export", out, "--with-history", store=other).code == 0
    return other, out


@ROUNDS
@pytest.mark.parametrize("command", ["import", "merge"])
def test_bringing_many_in(
    starter_once: Path, store: Path, exported: tuple[Path, Path], command: str, rounds: int
) -> None:
    words = ("merge", exported[0]) if command == "merge" else ("import", exported[1])
    before = content(starter_once)

    def judge() -> None:
        with Library.open(store) as library:
            found = (library.phase_count, library.history_count)
        assert found in ((364, before[1]), (364 + ROWS, before[1] + 2 * ROWS))

    kill_often(rounds, starter_once, store, words, judge)


@ROUNDS
def test_adopting(starter_once: Path, store: Path, peaks: Path, rounds: int) -> None:
    words = (
        "adopt",
        peaks,
        "--name",
        "ours",
        "--formula",
        "TiN",
        "--lattice",
        "F",
        "--a",
        "4.24",
        "--accept-warning",
    )
    before = content(starter_once)

    def judge() -> None:
        """The entry and its measurement come together."""
        with Library.open(store) as library:
            assert (library.phase_count, library.history_count - before[1]) in ((364, 0), (365, 2))

    kill_often(rounds, starter_once, store, words, judge)


@ROUNDS
def test_saving_and_signing(
    starter_once: Path, store: Path, peaks: Path, tmp_path: Path, rounds: int
) -> None:
    before = content(starter_once)

    def judge_saved() -> None:
        with Library.open(store) as library:
            saved = len(list_identifications(library))
            assert (saved, library.history_count - before[1]) in ((0, 0), (1, 2))

    kill_often(rounds, starter_once, store, ("match", peaks, "--save"), judge_saved)

    with_one = tmp_path / "with one.sqlite"
    shutil.copyfile(starter_once, with_one)
    assert run("match", peaks, "--save", store=with_one).code == 0

    def judge_signed() -> None:
        with Library.open(store) as library:
            signatures = list_identifications(library)[0].signatures
            assert (len(signatures), library.history_count - before[1]) in ((0, 2), (1, 3))

    kill_often(max(1, rounds // 2), with_one, store, ("sign", "1"), judge_signed)
