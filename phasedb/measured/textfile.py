"""Bytes of a measured file to text: encodings, and what is plainly not text."""

from __future__ import annotations

import sys
from dataclasses import dataclass
from hashlib import sha256
from pathlib import Path
from typing import Final

from phasedb.errors import InputError

MOST_BYTES: Final = 300_000_000
STANDARD_INPUT: Final = "standard input"
_MARKS: Final = (
    (b"\xef\xbb\xbf", "utf-8-sig"),
    (b"\xff\xfe", "utf-16"),
    (b"\xfe\xff", "utf-16"),
)


@dataclass(frozen=True, slots=True)
class SourceText:
    """The text of a file, where it came from, the hash of its bytes, and a remark about its encoding."""

    text: str
    source: str
    sha256: str
    notes: tuple[str, ...] = ()


def read_source(path: str | Path) -> SourceText:
    """Return the text of `path` (``-`` is standard input), UTF-8 or UTF-16, else Latin-1 with a note.

    Raises
    ------
    InputError
        If it cannot be read, is a folder, empty, too large or binary.
    """
    source = STANDARD_INPUT if str(path) == "-" else str(path)
    data = _bytes_of(path, source)
    if not data.strip():
        raise InputError("the file is empty", where=source, hint="give a file with at least one line")
    text, notes = _decoded(data, source)
    return SourceText(text, source, sha256(data).hexdigest(), notes)


def _bytes_of(path: str | Path, source: str) -> bytes:
    try:
        if str(path) == "-":
            data = sys.stdin.buffer.read(MOST_BYTES + 1)
        else:
            place = Path(path)
            if place.is_dir():
                raise InputError(
                    "this is a folder, expected a file", where=source, hint="name one of the files in it"
                )
            with place.open("rb") as stream:
                data = stream.read(MOST_BYTES + 1)
    except InputError:
        raise
    except FileNotFoundError:
        raise InputError("no such file", where=source, hint="check the path") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or error
        raise InputError(f"the file cannot be read: {reason}", where=source) from None
    if len(data) > MOST_BYTES:
        raise InputError(
            f"the file is larger than {MOST_BYTES // 1_000_000} MB", where=source, hint="give a smaller one"
        )
    return data


def _decoded(data: bytes, source: str) -> tuple[str, tuple[str, ...]]:
    encoding = next((name for mark, name in _MARKS if data.startswith(mark)), "")
    if not encoding and b"\0" in data[:4096]:
        # UTF-16 without its mark: every other byte of plain text is zero.
        head = data[:400]
        if len(head) >= 4 and not any(head[1::2]) and all(head[0::2]):
            encoding = "utf-16-le"
        elif len(head) >= 4 and not any(head[0::2]) and all(head[1::2]):
            encoding = "utf-16-be"
    notes: tuple[str, ...] = ()
    try:
        text = data.decode(encoding or "utf-8")
    except UnicodeDecodeError:
        if encoding:
            raise _not_text(source) from None
        text = data.decode("latin-1")
        notes = ("the file is not UTF-8: read as Latin-1",)
    sample = text[:4096]
    strange = sum(1 for sign in sample if sign < " " and sign not in "\t\n\r\f\v") + sample.count("\x7f")
    if strange:
        raise _not_text(source)
    return text, notes


def _not_text(source: str) -> InputError:
    return InputError(
        "this is a binary file, expected text",
        where=source,
        hint="export the data as text (columns), JSON or CIF and give that file",
    )
