"""A progress line for work that takes a while: on stderr, only when that is a terminal, never in a pipe."""

from __future__ import annotations

import sys
import time
from types import TracebackType
from typing import Final, Self

_EVERY_SECONDS: Final = 0.1
_BAR: Final = 24


def time_text(seconds: float) -> str:
    """Return a time as people read it.

    >>> time_text(8.4), time_text(75), time_text(3700)
    ('8 s', '1 min 15 s', '1 h 1 min')
    """
    whole = round(seconds)
    if whole < 60:
        return f"{whole} s"
    if whole < 3600:
        return f"{whole // 60} min {whole % 60} s"
    return f"{whole // 3600} h {whole % 3600 // 60} min"


class Progress:
    """Shows how far some work is, with its rate and the time left; it appears after the first second.

    Use it as a context manager and call `step` for each thing done.
    """

    def __init__(self, total: int, what: str) -> None:
        self.total = total
        self.done = 0
        self._what = what
        self._shows = sys.stderr.isatty()
        self._start = self._last = time.monotonic()
        self._width = 0

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._width:
            sys.stderr.write("\r" + " " * self._width + "\r")
            sys.stderr.flush()

    def step(self, count: int = 1) -> None:
        """Say that `count` more are done."""
        self.done += count
        now = time.monotonic()
        if not self._shows or now - self._start < 1.0 or now - self._last < _EVERY_SECONDS:
            return
        self._last = now
        text = self.text(now - self._start)
        sys.stderr.write("\r" + text + " " * max(0, self._width - len(text)))
        sys.stderr.flush()
        self._width = len(text)

    def text(self, elapsed: float) -> str:
        """Return the line for the state after `elapsed` seconds."""
        rate = self.done / elapsed
        filled = round(_BAR * self.done / max(1, self.total))
        left = time_text((self.total - self.done) / rate) if rate > 0 else "?"
        bar = "#" * filled + "." * (_BAR - filled)
        return f"[{bar}] {self.done}/{self.total} {self._what}, {rate:.1f}/s, {left} left"
