"""What changed between two versions of a thing, line by line."""

from __future__ import annotations

from typing import Any, Final

_BOOKKEEPING: Final = frozenset({"uid", "version", "changed_by", "changed_at", "entered_at", "entered_by"})


def changed_fields(before: dict[str, Any], after: dict[str, Any]) -> dict[str, tuple[Any, Any]]:
    """Return each field that differs, with both values (None: not there); bookkeeping is left out."""
    names = [*before, *(name for name in after if name not in before)]
    return {
        name: (before.get(name), after.get(name))
        for name in names
        if name not in _BOOKKEEPING and before.get(name) != after.get(name)
    }


def shown(value: Any) -> str:
    """Return a stored value as text for people."""
    if value is None or value in ("", []):
        return "(none)"
    if isinstance(value, float):
        return f"{value:.10g}"
    if isinstance(value, dict):
        return ", ".join(f"{name} {shown(part)}" for name, part in value.items())
    if isinstance(value, list):
        return "; ".join(shown(part) for part in value)
    return " ".join(str(value).split())


def changed_lines(before: dict[str, Any], after: dict[str, Any]) -> list[str]:
    """Return one line for each changed field: ``a_angstrom: 4.24 -> 4.2417``."""
    return [
        f"{name}: {shown(old)} -> {shown(new)}" for name, (old, new) in changed_fields(before, after).items()
    ]
