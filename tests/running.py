"""Running commands in this process, as a user types them, with what they print and their exit code."""

from __future__ import annotations

import io
import json
import os
from contextlib import redirect_stderr, redirect_stdout
from dataclasses import dataclass
from typing import Any
from unittest.mock import patch

from phasedb.cli import main


@dataclass(frozen=True)
class Ran:
    """What a command printed, and its exit code."""

    code: int
    out: str
    err: str

    @property
    def json(self) -> Any:
        """The document on stdout, of a command that succeeded."""
        assert self.code == 0, self.err
        return json.loads(self.out)


def run(*words: object, store: object = None, by: str = "A. First") -> Ran:
    """Run ``phasedb`` with these words; the user's own environment does not matter."""
    argv = ["--by", by, *([] if store is None else ["--store", str(store)]), *map(str, words)]
    out, err = io.StringIO(), io.StringIO()
    clean = {name: value for name, value in os.environ.items() if not name.startswith("PHASEDB_")}
    with patch.dict(os.environ, clean, clear=True), redirect_stdout(out), redirect_stderr(err):
        try:
            main(argv)
        except SystemExit as stop:
            code = int(stop.code or 0)
    assert "Traceback" not in err.getvalue()
    return Ran(code, out.getvalue(), err.getvalue())
