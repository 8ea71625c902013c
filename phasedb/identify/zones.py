"""Lines of one zone of a lattice that is not cubic, which look like part of a cubic sequence.

The hk0 lines of a tetragonal lattice lie at d = a/sqrt(h² + k²), those of a hexagonal one at
d = b/sqrt(h² + hk + k²) with b = (sqrt 3/2) a (International Tables for Crystallography Vol. A, table 1.5.1.1
gives the metric). Both are sums that cubic lattices have too, so a list of a non-cubic phase agrees with some
cubic entry far more often than lines thrown at random. Zones compete for such lines; what they claim counts
as unexplained.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]

ZONES: Final = ("square", "hexagonal")
EXPECTED: Final = 1.0  # zones of each kind expected in a list (tuned)
A_SMALLEST: Final = 2.3
A_LARGEST: Final = 9.0
SCATTER: Final = 2.2  # heights of zone lines follow no pattern known here
FIRST_CHANCE: Final = (0.5, 12.0)  # chance that the first line is seen, and the ranks over which it falls


@lru_cache(maxsize=16)
def zone_n(zone: str, n_max: int) -> NDArray[np.int64]:
    """Return the sums h² + k² (square) or h² + hk + k² (hexagonal) up to `n_max`, each once, ascending."""
    top = int(np.sqrt(n_max)) + 1
    h, k = np.meshgrid(np.arange(1, top + 1), np.arange(top + 1))
    sums = h * h + k * k + (h * k if zone == "hexagonal" else 0)
    found = np.unique(sums[sums <= n_max]).astype(np.int64)
    found.flags.writeable = False
    return found


def zone_pattern(zone: str) -> tuple[NDArray[np.int64], FloatArray]:
    """Return N and strengths of a zone: falling with N, nothing else being known."""
    n = zone_n(zone, 120)
    return n, np.exp(-0.05 * n)
