"""Small file systems of our own, where the tests may mount them."""

from __future__ import annotations

import shutil
import subprocess
from collections.abc import Callable, Iterator
from pathlib import Path

import pytest
from running import run
from small_disk import Disk


@pytest.fixture(scope="session")
def starter_once(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("starter") / "starter.sqlite"
    assert run("init", store=path).code == 0
    return path


@pytest.fixture
def disk(tmp_path: Path) -> Iterator[Callable[[int], Disk]]:
    """Mount a disk of so many bytes; skipped where that is not allowed."""
    mounted: list[Path] = []

    def make(size: int) -> Disk:
        folder = tmp_path / f"disk {len(mounted)}"
        folder.mkdir()
        if shutil.which("mount") is None:
            pytest.skip("there is no mount command here")
        done = subprocess.run(
            ["mount", "-t", "tmpfs", "-o", f"size={size}", "tmpfs", folder], capture_output=True, check=False
        )
        if done.returncode:
            pytest.skip("mounting a file system is not allowed here")
        mounted.append(folder)
        return Disk(folder)

    yield make
    for folder in mounted:
        subprocess.run(["umount", "-l", folder], check=False, capture_output=True)


@pytest.fixture
def empty(tmp_path: Path) -> str:
    """The path of a library without entries."""
    path = tmp_path / "empty.sqlite"
    assert run("init", "--empty", store=path).code == 0
    return str(path)
