"""phasedb: a lab's own library of cubic phases.

The names in ``__all__`` are the public API; they load on first use, so that importing the package stays
light. `phasedb.report.notebook` shows how they are used.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_HOMES = {
    "Library": "phasedb.library",
    "Match": "phasedb.identify.result",
    "MatchSettings": "phasedb.identify.settings",
    "PeakList": "phasedb.measured.peaklist",
    "Phase": "phasedb.crystal.phases",
    "PhaseTable": "phasedb.crystal.phases",
    "PhasedbError": "phasedb.errors",
    "index": "phasedb.report.notebook",
    "lines": "phasedb.report.notebook",
    "match": "phasedb.identify",
    "refine": "phasedb.report.notebook",
}
_SHOWN = {
    "Match",
    "PeakList",
    "index",
    "lines",
    "match",
    "refine",
}  # what leads to results that a notebook shows

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> Any:
    if name in _SHOWN:
        import_module("phasedb.report.notebook").show_in_notebooks()
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'phasedb' has no attribute {name!r}")


def __dir__() -> list[str]:
    return [*__all__, "__version__"]
