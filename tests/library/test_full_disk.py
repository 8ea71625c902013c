"""A disk that takes no more: a clear error, exit code 4, and nothing lost."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest
from killing import ENVIRONMENT, assert_whole, content

from phasedb.library import Library

resource = pytest.importorskip("resource", reason="there is no limit on file sizes here")


def _limited(store: str, *words: str, size: int) -> subprocess.CompletedProcess[str]:
    """Run a command that may not write any file beyond `size` bytes."""
    code = (
        "import resource, signal, sys\n"
        "signal.signal(signal.SIGXFSZ, signal.SIG_IGN)\n"
        f"resource.setrlimit(resource.RLIMIT_FSIZE, ({size}, {size}))\n"
        "from phasedb.cli import main\n"
        "main(sys.argv[1:])\n"
    )
    return subprocess.run(
        [sys.executable, "-B", "-c", code, "--store", store, "--by", "Kim", *words],
        capture_output=True,
        text=True,
        env=ENVIRONMENT,
        check=False,
    )


def test_add_and_init_and_backup_on_a_full_disk(starter, tmp_path):
    before = content(starter)
    size = Path(starter).stat().st_size
    long_remark = "x" * 90_000
    done = _limited(
        starter, "add", "--name", "n", "--formula", "TiN", "--lattice", "F", "--a", "4.2312",
        "--remarks", long_remark, size=size + 8192,
    )  # fmt: skip
    assert (done.returncode, done.stdout) == (4, ""), done.stderr
    assert done.stderr.startswith("error: ")
    assert "Traceback" not in done.stderr
    assert content(starter) == before
    assert_whole(starter)

    done = _limited(starter, "backup", str(tmp_path / "copy.sqlite"), size=size // 2)
    assert done.returncode == 4, done.stderr
    assert not (tmp_path / "copy.sqlite").exists()
    assert content(starter) == before

    place = tmp_path / "new" / "library.sqlite"
    done = _limited(str(place), "init", size=size // 2)
    assert done.returncode == 4, done.stderr
    assert list(place.parent.iterdir()) == []

    done = _limited(starter, "restore", str(starter), "--replace", size=size // 2)
    assert done.returncode == 3
    other = tmp_path / "other.sqlite"
    Library.create(other, starter=False).close()
    there = content(other)
    done = _limited(str(other), "restore", starter, "--replace", size=size // 2)
    assert done.returncode == 4, done.stderr
    assert content(other) == there
    assert sorted(path.name for path in tmp_path.iterdir()) == ["new", "other.sqlite", "starter.sqlite"]
