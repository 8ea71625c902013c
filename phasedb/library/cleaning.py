"""Names, free text and numbers from outside, made clean or refused."""

from __future__ import annotations

import math
import unicodedata
from typing import Final

from phasedb.errors import InputError

NAME_LIMIT: Final = 200
TEXT_LIMIT: Final = 100_000

# Marks that change how a line reads or that nobody sees: in a name they make two entries look alike.
_UNSEEN_IN_NAMES: Final = frozenset(
    chr(code)
    for code in (
        *range(0x200B, 0x2010),
        *range(0x202A, 0x202F),
        *range(0x2060, 0x2070),
        0xFEFF,
        0x2028,
        0x2029,
    )
    if code != 0x200D  # the joiner inside emoji
)


def clean_name(text: str, *, what: str = "name") -> str:
    """Return a name with runs of spaces made one, in Unicode NFC.

    Raises
    ------
    InputError
        If it is empty, too long, or holds control characters or invisible marks.
    """
    name = unicodedata.normalize("NFC", " ".join(text.split()))
    if not name:
        raise InputError(f"the {what} is empty", hint=f"give a {what}")
    if len(name) > NAME_LIMIT:
        raise InputError(
            f"the {what} {name[:30]!r}... has {len(name)} characters: expected at most {NAME_LIMIT}"
        )
    if name.isascii() and name.isprintable():
        return name
    for character in name:
        if unicodedata.category(character) in ("Cc", "Cs", "Co", "Cn") or character in _UNSEEN_IN_NAMES:
            raise InputError(
                f"the {what} {name[:60]!a} holds a character that cannot be seen ({character!a})",
                hint="leave it out",
            )
    return name


def clean_text(text: str, *, what: str) -> str:
    """Return free text; line breaks stay, other control characters are refused."""
    if text.isascii() and text.isprintable() and len(text) <= TEXT_LIMIT:
        return text.strip()
    if len(text) > TEXT_LIMIT:
        raise InputError(f"the {what} has {len(text)} characters: expected at most {TEXT_LIMIT}")
    text = unicodedata.normalize("NFC", text.replace("\r\n", "\n").replace("\r", "\n")).strip()
    for character in text:
        if character not in "\n\t" and unicodedata.category(character) in ("Cc", "Cs"):
            raise InputError(f"the {what} holds a control character ({character!a})", hint="leave it out")
    return text


def within(value: float | None, low: float, high: float, *, what: str, unit: str) -> float | None:
    if value is None:
        return None
    if isinstance(value, bool) or not isinstance(value, (int, float)) or not math.isfinite(value):
        raise InputError(f"{what} {value!r} is not a number")
    if not low <= value <= high:
        raise InputError(f"{what} {value:g} {unit} is not possible: expected {low:g} to {high:g}".rstrip())
    return float(value)
