"""What the simulator knows about the list it made."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.phases import PhaseTable
from phasedb.measured.peaklist import PeakList
from study.experiment import Experiment

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class TruePhase:
    """One phase of the sample. `share`: its strongest line over the strongest of the list, before texture."""

    name: str
    lattice_type: str
    a_stored: float
    a_true: float
    drift_class: str
    share: float
    removed: bool
    lines_seen: int

    @property
    def drift(self) -> float:
        return self.a_true / self.a_stored - 1.0


@dataclass(frozen=True, slots=True)
class Truth:
    """The sample and the experiment behind one list.

    `owners` has one tuple for each line of the list: phase names (``name|k_beta`` and the like for ghosts),
    empty for a line that nothing explains. `shift_at_lines_deg` is measured minus true 2theta, without noise.
    """

    seed: tuple[int, ...]
    phases: tuple[TruePhase, ...]
    setting: Experiment
    owners: tuple[tuple[str, ...], ...]
    shift_at_lines_deg: FloatArray
    note: str = ""


@dataclass(frozen=True, slots=True)
class Case:
    """One list of the study: what the matcher is given, and the truth."""

    peaks: PeakList
    table: PhaseTable
    truth: Truth
