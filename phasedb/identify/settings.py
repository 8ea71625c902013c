"""What a user may set about a match."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class ShiftPrior:
    """What an instrument's record says of its shifts: means and scales, learned from a standard."""

    zero_deg: float = 0.0
    zero_scale_deg: float = 0.05
    displacement_mm: float = 0.0
    displacement_scale_mm: float = 0.08


@dataclass(frozen=True, slots=True)
class MatchSettings:
    """Options of `match`.

    Attributes
    ----------
    most_phases : int
        The largest number of phases (listed or not) in one set.
    elements : tuple of str or None
        What the specimen is known to hold; None when nothing is known.
    unseen : tuple of str
        Light elements that the analysis could not see; they may be present.
    excluding : tuple of str
        Elements known to be absent.
    strict_chemistry : bool
        Make the chemistry a hard rule.
    internal_standard : str or None
        Name of an entry that is present, with its certified a.
    foreign_positions : (n_foreign,) float64 or None
        Lines of a holder or non-cubic companion, in the peak list's own unit.
    any_temperature : bool
    checked_only : bool
        Only recorded here; the library leaves the drafts out.
    rank_by : ``probability`` or ``merit``
    shift_prior : ShiftPrior
    """

    most_phases: int = 4
    elements: tuple[str, ...] | None = None
    unseen: tuple[str, ...] = ()
    excluding: tuple[str, ...] = ()
    strict_chemistry: bool = False
    internal_standard: str | None = None
    foreign_positions: NDArray[np.float64] | None = None
    any_temperature: bool = False
    checked_only: bool = False
    rank_by: Literal["probability", "merit"] = "probability"
    shift_prior: ShiftPrior = ShiftPrior()
