"""Cubic lattice types: which N = h²+k²+l² they allow, hkl families, multiplicities, d-spacings."""

from __future__ import annotations

from functools import lru_cache
from typing import Final, Literal, get_args

import numpy as np
from numpy.typing import ArrayLike, NDArray

from phasedb.errors import InputError

LatticeType = Literal["P", "I", "F"]
LATTICE_TYPES: Final[tuple[LatticeType, ...]] = get_args(LatticeType)

ATOMS_PER_CELL: Final[dict[LatticeType, int]] = {"P": 1, "I": 2, "F": 4}
"""Lattice points in the cubic cell (also atoms, for one atom a point)."""

Hkl = tuple[int, int, int]


def check_lattice_type(text: str) -> LatticeType:
    """Return `text` as a lattice type.

    Raises
    ------
    InputError
        If it is not P, I or F (case does not matter).
    """
    found = text.strip().upper()
    for lattice in LATTICE_TYPES:
        if found == lattice:
            return lattice
    raise InputError(
        f"lattice type {text!r} is not known: expected P, I or F",
        hint="P is primitive, I body-centred, F face-centred",
    )


def is_allowed(lattice: LatticeType, h: int, k: int, l: int) -> bool:
    """Return whether the lattice centring allows the reflection hkl.

    References
    ----------
    International Tables for Crystallography Vol. A (2016), table 2.1.3.6 (integral reflection conditions).
    """
    if lattice == "I":
        return (h + k + l) % 2 == 0
    if lattice == "F":
        return h % 2 == k % 2 == l % 2
    return True


@lru_cache(maxsize=64)
def _families_up_to(n_max: int) -> dict[int, tuple[Hkl, ...]]:
    top = int(np.sqrt(n_max))
    found: dict[int, list[Hkl]] = {}
    for h in range(1, top + 1):
        for k in range(h + 1):
            for l in range(k + 1):
                n = h * h + k * k + l * l
                if n <= n_max:
                    found.setdefault(n, []).append((h, k, l))
    return {n: tuple(sorted(found[n])) for n in sorted(found)}


def families(n: int, lattice: LatticeType = "P") -> tuple[Hkl, ...]:
    """Return the families {hkl} (h >= k >= l >= 0) with h²+k²+l² = n that the lattice allows, sorted by h."""
    bound = max(64, 1 << (int(n) - 1).bit_length())
    return tuple(hkl for hkl in _families_up_to(bound).get(int(n), ()) if is_allowed(lattice, *hkl))


def family_multiplicity(h: int, k: int, l: int) -> int:
    """Return the number of symmetry-equivalent planes of {hkl} in the holohedry m-3m (6, 8, 12, 24 or 48)."""
    values = sorted((abs(h), abs(k), abs(l)))
    signs = 2 ** sum(value != 0 for value in values)
    distinct = len(set(values))
    orders = {1: 1, 2: 3, 3: 6}[distinct]
    return int(signs * orders)


@lru_cache(maxsize=64)
def allowed_n(lattice: LatticeType, n_max: int) -> NDArray[np.int64]:
    """Return all N = h²+k²+l² <= n_max that the lattice allows, each once.

    Returns
    -------
    NDArray[np.int64]
        Ascending, shape (n_lines,), read-only.
    """
    values = [n for n in _families_up_to(max(n_max, 1)) if n <= n_max and families(n, lattice)]
    result = np.array(values, dtype=np.int64)
    result.flags.writeable = False
    return result


def multiplicity(lattice: LatticeType, n: int) -> int:
    """Return the multiplicity of the powder line N: the sum over its families."""
    return sum(family_multiplicity(*hkl) for hkl in families(n, lattice))


def hkl_text(n: int, lattice: LatticeType = "P") -> str:
    """Return the families of N as text, highest h last: ``311``, ``333/511``; indices over 9 are spaced."""
    parts = []
    for hkl in families(n, lattice):
        joiner = " " if max(hkl) > 9 else ""
        parts.append(joiner.join(str(index) for index in hkl))
    return "/".join(parts)


def d_spacing(a_angstrom: ArrayLike, n: ArrayLike) -> NDArray[np.float64]:
    """Return d = a / sqrt(N) in Å; `a_angstrom` (Å) and `n` broadcast against each other."""
    return np.asarray(a_angstrom, dtype=np.float64) / np.sqrt(np.asarray(n, dtype=np.float64))


def n_possible(lattice: LatticeType, n_low: int, n_high: int) -> int:
    """Return how many distinct allowed N lie in [n_low, n_high]."""
    values = allowed_n(lattice, n_high)
    return int(np.count_nonzero(values >= n_low))
