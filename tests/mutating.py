"""Broken files out of good ones: random edits of texts that a reader takes, the same for the same seed."""

from __future__ import annotations

import random
from collections.abc import Sequence

TOKENS = (
    b"", b"\0", b"\xff", b"\xfe\xff", b"\xef\xbb\xbf", b"\r", b"\n", b"\r\n", b"\t", b" ", b",",
    b";", b'"', b"'", b"\\", b"{", b"}", b"[", b"]", b":", b"null", b"true", b"NaN", b"Infinity",
    b"-Infinity", b"1e400", b"-0.0", b"1e-400", b"9" * 400, b"0x10", b"1_000", b"1,5", b"4.2417(2)",
    b"0.42417 nm", b"\xc3\x85", b"\xe2\x80\xae", b"\xf0\x9f\x98\x80", b"\\ud800", b"\\u0000",
    b"=1+1", b"@x", b"../../x", b"%s%n", b"<script>", b"loop_", b"data_", b"data_x", b"save_",
    b"global_", b"stop_", b"_cell_length_a", b"_atom_site_label", b"?", b".", b"#",
    b"# radiation: Cu", b"\n;\n", b"F m -3 m", b"Fm-3m", b"P 1", b"x,y,z", b"1/0", b"-x,y+1/2",
    b"TiN", b"Xx", b"(", b")", b"((((((((((", b"F", b"nan", b"inf", b"two_theta_deg", b"d_angstrom",
    b"180", b"-5", b"0", b"298", b"withdrawn", b"checked", b"e", b"E+", b"\x1b[31m",
)  # fmt: skip


def mutated(seed: bytes, others: Sequence[bytes], rng: random.Random) -> bytes:
    """Return `seed` after one to several random edits; parts of `others` may come in."""
    data = bytearray(seed)
    for _ in range(1 + int(rng.expovariate(0.5))):
        edit = rng.randrange(9)
        size = len(data)
        at = rng.randrange(size + 1)
        end = min(size, at + 1 + int(rng.expovariate(0.05)))
        if edit == 0 and size:
            data[rng.randrange(size)] = rng.randrange(256)
        elif edit == 1:
            data[at:at] = rng.choice(TOKENS)
        elif edit == 2:
            data[at:end] = rng.choice(TOKENS)
        elif edit == 3:
            del data[at:end]
        elif edit == 4:
            data[at:at] = data[at:end] * rng.choice((1, 2, 50))
        elif edit == 5:
            del data[at:]
        elif edit == 6:
            other = rng.choice(others)
            start = rng.randrange(len(other) + 1)
            data[at:end] = other[start : start + 1 + int(rng.expovariate(0.02))]
        elif edit == 7 and size:
            where = rng.randrange(size)
            data[where] = rng.choice(b"0123456789.,-+eE'\"{}[]:;#_ \n")
        elif size:
            lines = bytes(data).split(b"\n")
            rng.shuffle(lines)
            data = bytearray(b"\n".join(lines[: rng.randrange(1, len(lines) + 1)]))
    if rng.random() < 0.02:
        return (
            bytes(data)
            .decode("utf-8", "replace")
            .encode(rng.choice(["utf-16", "utf-8-sig", "latin-1"]), "replace")
        )
    return bytes(data[:200_000])
