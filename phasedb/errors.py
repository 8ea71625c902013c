"""Every error the program means to raise, and the exit code each one leads to.

::

    PhasedbError                      exit 1 only if raised bare (never done on purpose)
    ├── InputError       (ValueError)  exit 2: bad usage or bad input
    │   └── UnknownNameError (LookupError)
    ├── RuleRefusedError               exit 3: refused by a library rule
    └── StoreError       (OSError)     exit 4: the store cannot be used

A message has three parts, printed as ``error: what; where; what to do``.
"""

from __future__ import annotations

from enum import IntEnum


class ExitCode(IntEnum):
    """Process exit codes, as documented in the README."""

    DONE = 0
    FAULT = 1
    INPUT = 2
    REFUSED = 3
    STORE = 4
    INTERRUPTED = 130


class PhasedbError(Exception):
    """Root of all errors raised on purpose.

    Parameters
    ----------
    what : str
        What was wrong, with the value that was read and what was expected.
    where : str
        File, line and column, option, or entry name; empty if there is none.
    hint : str
        What to do next; empty if there is nothing to say.
    """

    exit_code = ExitCode.FAULT

    def __init__(self, what: str, *, where: str = "", hint: str = "") -> None:
        super().__init__(what)
        self.what = what
        self.where = where
        self.hint = hint

    def __str__(self) -> str:
        return "; ".join(part for part in (self.what, self.where, self.hint) if part)


class InputError(PhasedbError, ValueError):
    """Bad usage or bad input: a file, an option, a value."""

    exit_code = ExitCode.INPUT


class UnknownNameError(InputError, LookupError):
    """A phase, element, instrument or record of that name does not exist."""


class RuleRefusedError(PhasedbError):
    """A rule of the library refuses the step; nothing was written."""

    exit_code = ExitCode.REFUSED


class StoreError(PhasedbError, OSError):
    """The store is absent, damaged, locked, read-only, older or newer than the program."""

    exit_code = ExitCode.STORE

    def __str__(self) -> str:
        return PhasedbError.__str__(self)


def at(path: object, line: int | None = None, column: int | None = None) -> str:
    """Return a place in a file as ``path:line:column`` (parts not known are left out)."""
    place = str(path)
    if line is not None:
        place += f":{line}"
        if column is not None:
            place += f":{column}"
    return place
