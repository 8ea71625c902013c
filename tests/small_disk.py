"""A small file system in memory, mounted by the fixture ``disk`` of the fault tests."""

from __future__ import annotations

import contextlib
import subprocess
from pathlib import Path


class Disk:
    """A file system in memory."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder

    def fill(self) -> None:
        """Leave no free byte."""
        with (self.folder / "filler").open("wb", buffering=0) as stream, contextlib.suppress(OSError):
            while True:
                stream.write(b"x" * 4096)

    def free(self) -> None:
        (self.folder / "filler").unlink()

    def make_read_only(self) -> None:
        subprocess.run(["mount", "-o", "remount,ro", self.folder], check=True, capture_output=True)
