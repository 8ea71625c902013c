"""What is known of the specimen's elements, as a weight for each phase."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from phasedb.identify.settings import MatchSettings

OUTSIDE_WEIGHT = 5e-4  # of a phase for each element that the specimen is not known to hold
EXCLUDED_WEIGHT = 1e-4  # of a phase with an element that is known to be absent


def chemistry_weights(elements: Sequence[tuple[str, ...]], settings: MatchSettings) -> NDArray[np.float64]:
    """Return a weight between 0 and 1 for each phase, from its elements (n_phases,)."""
    allowed = None if settings.elements is None else set(settings.elements) | set(settings.unseen)
    excluded = set(settings.excluding)
    weight = np.ones(len(elements))
    for row, symbols in enumerate(elements):
        present = set(symbols)
        outside = len(present - allowed) if allowed is not None else 0
        bad = len(present & excluded)
        if settings.strict_chemistry and (outside or bad):
            weight[row] = 0.0
        else:
            weight[row] = OUTSIDE_WEIGHT ** min(outside, 3) * EXCLUDED_WEIGHT ** min(bad, 2)
    return weight
