"""The experiment behind a list: radiation, range, shifts, noise, floor, and how the list is written."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from phasedb.crystal.radiation import (
    EMISSION_LINES,
    EmissionLines,
    Radiation,
    radiation_from_name,
    radiation_from_wavelength,
)
from study.physics import FloatArray, doublet_position, two_theta, width_deg

RANGES = {
    "Cu": ((20, 80), (20, 100), (10, 90), (30, 120), (15, 140), (25, 90), (10, 70), (20, 130)),
    "Co": ((20, 107), (30, 120), (25, 130), (20, 90)),
    "Mo": ((7, 58), (8, 75), (10, 50), (12, 65)),
    "Cr": ((35, 150), (50, 160), (30, 130)),
}
"""Usual ranges in degrees 2theta (common practice, no source)."""

OLD_WAVELENGTHS = {
    "Cu": (1.5406, 1.54056, 1.5418),
    "Co": (1.7889, 1.7903),
    "Mo": (0.7107, 0.70930),
    "Cr": (2.2897,),
}
"""Rounded or older values that analysts type in (Å): K-alpha1 or mean (common practice, no source)."""

AXES = ((1, 0, 0), (1, 1, 0), (1, 1, 1))


@dataclass(frozen=True, slots=True)
class Experiment:
    """Everything about the measurement that is not the sample.

    `physical_alpha1` (Å) is what the tube really gives; `declared` is what the list says. `floor` is the
    weakest line seen over the strongest; `lost` the chance that any line is missing all the same;
    `resolution` the distance, in widths, below which two lines are one.
    """

    emission: EmissionLines
    declared: Radiation
    monochromatic: bool
    centroids: bool
    low: float
    high: float
    gives_range: bool
    gives_fwhm: bool
    gives_radius: bool
    radius_mm: float
    zero_deg: float
    displacement_mm: float
    noise_deg: float
    fwhm_deg: float
    size_deg: float
    resolution: float
    floor: float
    lost: float
    n_spurious: int
    intensity_spread: float
    tilt: float
    monochromator_cos2: float
    texture_chance: float
    lists_alpha2: bool
    beta_ratio: float
    tungsten_ratio: float
    step_deg: float
    as_d: bool
    d_decimals: int

    @property
    def physical_alpha1(self) -> float:
        return self.emission.alpha1

    def maxima(self, d_angstrom: FloatArray) -> tuple[FloatArray, FloatArray, FloatArray]:
        """Return the main maximum and the K-alpha2 maximum of lines d (degrees 2theta), how resolved.

        Centroids lie at the weighted mean of the doublet, maxima where the width puts them.
        """
        first = two_theta(d_angstrom, self.emission.alpha1)
        if self.monochromatic:
            return first, np.full_like(first, np.nan), np.zeros_like(first)
        width = width_deg(first, self.fwhm_deg, self.size_deg)
        main, second, resolved = doublet_position(d_angstrom, self.emission, width)
        if self.centroids:
            return (2.0 * first + second) / 3.0, second, np.zeros_like(first)
        return main, second, resolved

    def draw_texture(self, rng: np.random.Generator) -> tuple[tuple[int, int, int], float]:
        """Return axis and March-Dollase r of one phase; r = 1 is a random powder."""
        axis = AXES[int(rng.integers(3))]
        if rng.random() > self.texture_chance:
            return axis, 1.0
        return axis, float(rng.uniform(0.25, 0.5) if rng.random() < 0.2 else rng.uniform(0.5, 0.95))

    @classmethod
    def draw(cls, rng: np.random.Generator) -> Experiment:
        """Return an experiment: usual laboratories, with tails to careless ones."""
        anode = str(rng.choice(["Cu", "Co", "Mo", "Cr"], p=[0.7, 0.12, 0.1, 0.08]))
        emission = EMISSION_LINES[anode]
        fwhm = float(np.clip(rng.lognormal(np.log(0.13), 0.5), 0.05, 0.6))
        size = float(rng.lognormal(np.log(0.3), 0.7)) if rng.random() < 0.2 else 0.0
        size = min(size, 2.0)
        kind = str(rng.choice(["doublet", "mean", "alpha1", "typed"], p=[0.6, 0.12, 0.13, 0.15]))
        centroids = kind == "mean" and rng.random() < 0.7
        declared = radiation_from_name(
            anode + {"doublet": "", "mean": "-mean", "alpha1": "-Ka1", "typed": ""}[kind]
        )
        if kind == "typed":
            typed = float(rng.choice(OLD_WAVELENGTHS[anode]))
            declared = radiation_from_wavelength(typed)
            centroids = abs(typed / emission.mean - 1.0) < abs(typed / emission.alpha1 - 1.0)
        limits = RANGES[anode]
        low, high = limits[int(rng.integers(len(limits)))]
        return cls(
            emission=emission,
            declared=declared,
            monochromatic=kind == "alpha1",
            centroids=centroids,
            low=float(low),
            high=float(high),
            gives_range=rng.random() < 0.75,
            gives_fwhm=rng.random() < 0.35,
            gives_radius=rng.random() < 0.3,
            radius_mm=float(rng.choice([150.0, 173.0, 185.0, 200.0, 217.5, 240.0, 300.0])),
            zero_deg=float(np.clip(0.02 * rng.standard_t(2.5), -0.2, 0.2)),
            displacement_mm=float(np.clip(0.04 * rng.standard_t(2.5), -0.3, 0.3)),
            noise_deg=draw_noise(rng, np.hypot(fwhm, size)),
            fwhm_deg=fwhm,
            size_deg=size,
            resolution=float(rng.uniform(0.5, 0.9)),
            floor=float(np.exp(rng.uniform(np.log(0.005), np.log(0.05)))),
            lost=0.02,
            n_spurious=int(min(rng.poisson(0.6), 3)),
            intensity_spread=float(rng.uniform(0.05, 0.35)),
            tilt=float(0.25 * rng.standard_normal()),
            monochromator_cos2=float(rng.choice([1.0, 0.8])),
            texture_chance=float(rng.choice([0.0, 0.3, 1.0], p=[0.5, 0.35, 0.15])),
            lists_alpha2=rng.random() < 0.15,
            beta_ratio=float(np.exp(rng.uniform(np.log(0.01), np.log(0.08)))) if rng.random() < 0.12 else 0.0,
            tungsten_ratio=float(np.exp(rng.uniform(np.log(0.01), np.log(0.04))))
            if rng.random() < 0.05
            else 0.0,
            step_deg=float(
                rng.choice([0.0, 0.001, 0.01, 0.02, 0.05, 0.1], p=[0.3, 0.2, 0.3, 0.1, 0.06, 0.04])
            ),
            as_d=rng.random() < 0.08,
            d_decimals=int(rng.choice([3, 4, 5], p=[0.3, 0.5, 0.2])),
        )


def draw_noise(rng: np.random.Generator, width_deg: float) -> float:
    """Return a list's noise scale in degrees: 0.005 to 0.1, a tail to 0.3, never below 2 % of the width."""
    if rng.random() < 0.06:
        noise = float(np.exp(rng.uniform(np.log(0.1), np.log(0.3))))
    else:
        noise = float(np.clip(rng.lognormal(np.log(0.015), 0.7), 0.005, 0.1))
    return min(max(noise, 0.02 * width_deg), 0.3)


def clean(anode: str = "Cu", low: float = 20.0, high: float = 100.0, **changes: object) -> Experiment:
    """Return a well-aligned measurement with K-alpha1 alone and nothing odd; `changes` make it odd."""
    plain = Experiment(
        emission=EMISSION_LINES[anode],
        declared=radiation_from_name(anode + "-Ka1"),
        monochromatic=True,
        centroids=False,
        low=low,
        high=high,
        gives_range=True,
        gives_fwhm=False,
        gives_radius=True,
        radius_mm=200.0,
        zero_deg=0.0,
        displacement_mm=0.0,
        noise_deg=0.01,
        fwhm_deg=0.08,
        size_deg=0.0,
        resolution=0.6,
        floor=0.01,
        lost=0.0,
        n_spurious=0,
        intensity_spread=0.05,
        tilt=0.0,
        monochromator_cos2=1.0,
        texture_chance=0.0,
        lists_alpha2=False,
        beta_ratio=0.0,
        tungsten_ratio=0.0,
        step_deg=0.0,
        as_d=False,
        d_decimals=4,
    )
    return replace(plain, **changes)  # type: ignore[arg-type]


def doublet(anode: str = "Cu", low: float = 20.0, high: float = 100.0, **changes: object) -> Experiment:
    """Return the same with the K-alpha doublet, as most laboratories have it."""
    return clean(anode, low, high, monochromatic=False, declared=radiation_from_name(anode), **changes)
