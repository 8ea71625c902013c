"""Disks that are full or read-only: a clear error, exit code 4, nothing lost, and all is well afterwards."""

from __future__ import annotations

import json
import shutil
import sqlite3
import subprocess
import sys
from collections.abc import Callable
from pathlib import Path

import pytest
from running import Ran, run
from small_disk import Disk

from phasedb.library import Library

PEAKS = "# radiation: Cu\ntwo_theta_deg,intensity\n38.18,100\n44.39,46\n64.58,24\n77.55,26\n81.72,8\n"
MEGABYTE = 1 << 20


@pytest.fixture
def peaks(tmp_path: Path) -> Path:
    path = tmp_path / "peaks.csv"
    path.write_text(PEAKS)
    return path


def table_of(rows: int, path: Path) -> Path:
    lines = ["name,formula,lattice_type,a_angstrom,remarks"]
    lines += [f"row {n},Fe,I,{2.5 + n / 1e4:.4f},{'made up ' * 120}" for n in range(rows)]
    path.write_text("\n".join(lines))
    return path


def refused(ran: Ran, *said: str) -> None:
    assert ran.code == 4, ran.err
    assert ran.out == ""
    last = ran.err.splitlines()[-1]
    assert last.startswith("error: ")
    for part in said:
        assert part in last


def whole(store: Path) -> bool:
    return bool(json.loads(run("audit", "--json", store=store).out)["whole"])


def test_writes_that_find_the_disk_full(
    disk: Callable[[int], Disk], starter_once: Path, peaks: Path, tmp_path: Path
) -> None:
    small = disk(starter_once.stat().st_size + MEGABYTE)
    store = small.folder / "lab.sqlite"
    shutil.copyfile(starter_once, store)
    before = store.read_bytes()
    other = tmp_path / "other.sqlite"
    run("init", "--empty", store=other)
    table = table_of(1500, tmp_path / "table.csv")
    assert run("import", table, store=other).code == 0

    refused(run("import", table, store=store), "no space is left", "nothing was changed")
    assert store.read_bytes() == before
    refused(run("merge", other, store=store), "no space is left")
    assert store.read_bytes() == before
    refused(run("backup", small.folder / "copy.sqlite", store=store))
    small.fill()
    for words in (
        ("match", peaks, "--save"),
        ("add", "--name", "n", "--formula", "TiN", "--lattice", "F", "--a", "4.2417", "--accept-warning"),
        (
            "adopt",
            peaks,
            "--name",
            "n",
            "--formula",
            "Au",
            "--lattice",
            "F",
            "--a",
            "4.08",
            "--accept-warning",
        ),
        ("withdraw", "gold", "--reason", "x"),
    ):
        refused(run(*words, store=store), "no space is left")
        assert store.read_bytes() == before
    assert sorted(path.name for path in small.folder.iterdir()) == ["filler", "lab.sqlite"]
    assert run("match", peaks, store=store).code == 0  # reading needs no space
    small.free()
    assert whole(store)
    assert run("match", peaks, "--save", store=store).code == 0
    assert whole(store)


@pytest.mark.skipif(sys.platform == "win32", reason="there is no limit on file sizes here")
def test_a_limit_on_file_sizes(starter_once: Path, tmp_path: Path) -> None:
    """The same without mounting anything: no file may grow beyond what the store has."""
    store = tmp_path / "lab.sqlite"
    shutil.copyfile(starter_once, store)
    before = store.read_bytes()
    code = (
        "import resource, signal, sys\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        f"resource.setrlimit(resource.RLIMIT_FSIZE, ({len(before) + 4096},) * 2)\n"
        "from phasedb.cli import main\n"
        "main(sys.argv[1:])\n"
    )
    words = ("--store", store, "import", table_of(500, tmp_path / "table.csv"))
    done = subprocess.run(
        [sys.executable, "-B", "-c", code, *map(str, words)], capture_output=True, text=True, check=False
    )
    refused(Ran(done.returncode, done.stdout, done.stderr))
    assert store.read_bytes() == before
    assert whole(store)


def test_an_export_that_finds_the_disk_full_leaves_the_old_file(
    disk: Callable[[int], Disk], starter_once: Path
) -> None:
    small = disk(MEGABYTE // 4)
    out = small.folder / "out.json"
    out.write_text("old")
    ran = run("export", out, store=starter_once)
    assert ran.code == 2
    assert "No space left on device" in ran.err
    assert out.read_text() == "old"
    assert [path.name for path in small.folder.iterdir()] == ["out.json"]


def test_making_a_store_on_a_disk_that_is_too_small(disk: Callable[[int], Disk]) -> None:
    small = disk(MEGABYTE // 4)
    refused(run("init", store=small.folder / "lab.sqlite"))
    assert list(small.folder.iterdir()) == []


def test_a_read_only_disk_is_read_and_refuses_writes(
    disk: Callable[[int], Disk], starter_once: Path, peaks: Path, tmp_path: Path
) -> None:
    small = disk(8 * MEGABYTE)
    store = small.folder / "lab.sqlite"
    shutil.copyfile(starter_once, store)
    assert run("match", peaks, "--save", store=store).code == 0
    small.make_read_only()
    for words in (
        ("list",),
        ("match", peaks),
        ("match", peaks, "--as-of", "2100-01-01"),
        ("identifications", "1"),
        ("rerun", "1"),
        ("audit",),
        ("export", tmp_path / "out.json", "--with-history"),
        ("backup", tmp_path / "copy.sqlite"),
    ):
        ran = run(*words, store=store)
        assert ran.code == 0, ran.err
    for words in (
        ("match", peaks, "--save"),
        ("add", "--name", "n", "--formula", "TiN", "--lattice", "F", "--a", "4.2417", "--accept-warning"),
        ("import", tmp_path / "out.json"),
        ("merge", tmp_path / "copy.sqlite"),
        ("sign", "1"),
        ("check", "gold"),
        ("backup", small.folder / "copy.sqlite"),
        ("restore", tmp_path / "copy.sqlite", "--replace"),
        ("--store", small.folder / "new.sqlite", "init"),
    ):
        ran = run(*words, store=store, by="Bob")
        if words[0] in ("import", "merge") and ran.code == 0:
            assert "0 entries brought in" in ran.out  # nothing was new, so nothing had to be written
        else:
            refused(ran)
            said = ran.err.casefold()
            assert "read-only" in said or "may be written" in said, (words, ran.err)


def test_a_cut_off_write_on_a_read_only_disk_is_said(
    disk: Callable[[int], Disk], starter_once: Path, tmp_path: Path
) -> None:
    """Its journal must be played back before anything is read, and that cannot be done there."""
    copy = tmp_path / "copy.sqlite"
    shutil.copyfile(starter_once, copy)
    writer = sqlite3.connect(copy, isolation_level=None)
    writer.execute("PRAGMA cache_size=1")
    writer.execute("BEGIN")
    writer.execute("UPDATE phase SET remarks = 'torn' || hex(randomblob(400))")
    small = disk(16 * MEGABYTE)
    for name in ("copy.sqlite", "copy.sqlite-journal"):
        shutil.copyfile(tmp_path / name, small.folder / name)
    writer.execute("ROLLBACK")
    writer.close()
    torn = disk(16 * MEGABYTE)
    for name in ("copy.sqlite", "copy.sqlite-journal"):
        shutil.copyfile(small.folder / name, torn.folder / name)
    small.make_read_only()
    for words in (("list",), ("audit",), ("show", "gold")):
        refused(run(*words, store=small.folder / "copy.sqlite"))
    assert run("list", store=torn.folder / "copy.sqlite").code == 0  # where it can be written, it is mended
    assert whole(torn.folder / "copy.sqlite")
    with Library.open(torn.folder / "copy.sqlite") as library:
        assert "torn" not in library.get("gold").content.remarks
