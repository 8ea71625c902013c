"""The sets of the study, and the seeds: what is tuned on is never reported on."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np

from study.experiment import Experiment
from study.library import starter_table
from study.noncubic import noncubic_list
from study.simulate import random_list, simulate
from study.truth import Case

SEED = {"tuning": 11, "reporting": 29}


@dataclass(frozen=True, slots=True)
class StudySet:
    """A named kind of list; `make` takes a seed and gives the case."""

    name: str
    what: str
    make: Callable[[tuple[int, ...]], Case]


def _listed(n_phases: int, *, with_intensity: bool = True) -> Callable[[tuple[int, ...]], Case]:
    return lambda seed: simulate(starter_table(), n_phases, seed, with_intensity=with_intensity)


def _removed(seed: tuple[int, ...]) -> Case:
    return simulate(starter_table(), 1 + seed[-1] % 3, seed, remove=1)


def _d_only(seed: tuple[int, ...]) -> Case:
    return simulate(starter_table(), 1 + seed[-1] % 2, seed, d_only=True)


def _shifted(seed: tuple[int, ...]) -> Case:
    """Zero error up to 0.2° or displacement up to 0.3 mm, evenly, noise as in an aligned laboratory."""
    rng = np.random.default_rng((*seed, 7))
    setting = Experiment.draw(rng)
    zero, displacement = float(rng.uniform(-0.2, 0.2)), 0.0
    if rng.random() < 0.5:
        zero, displacement = 0.0, float(rng.uniform(-0.3, 0.3))
    setting = replace(
        setting, zero_deg=zero, displacement_mm=displacement, noise_deg=min(setting.noise_deg, 0.03),
        gives_radius=True, as_d=False,
    )  # fmt: skip
    return simulate(starter_table(), 1 + seed[-1] % 3, seed, experiment=setting)


def _random(seed: tuple[int, ...]) -> Case:
    return random_list(starter_table(), seed, with_intensity=seed[-1] % 3 > 0)


def _noncubic(seed: tuple[int, ...]) -> Case:
    return noncubic_list(starter_table(), seed, with_intensity=seed[-1] % 3 > 0)


SETS = (
    StudySet("one", "1 phase, intensities", _listed(1)),
    StudySet("two", "2 phases, intensities", _listed(2)),
    StudySet("three", "3 phases, intensities", _listed(3)),
    StudySet("four", "4 phases, intensities", _listed(4)),
    StudySet("one-bare", "1 phase, no intensities", _listed(1, with_intensity=False)),
    StudySet("two-bare", "2 phases, no intensities", _listed(2, with_intensity=False)),
    StudySet("three-bare", "3 phases, no intensities", _listed(3, with_intensity=False)),
    StudySet("d-only", "1 or 2 phases, d without wavelength", _d_only),
    StudySet("removed", "1 to 3 phases, one not in the library", _removed),
    StudySet("shifted", "1 to 3 phases, large zero or displacement", _shifted),
    StudySet("random", "random lines", _random),
    StudySet("noncubic", "non-cubic samples", _noncubic),
)


def make_case(set_name: str, kind: str, number: int) -> Case:
    """Return list `number` of a set; `kind` is ``tuning`` or ``reporting``."""
    order = [one.name for one in SETS].index(set_name)
    return SETS[order].make((SEED[kind], order, number))
