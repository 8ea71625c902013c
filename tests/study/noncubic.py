"""Samples that hold no cubic phase: powder lines of published structures, by a small general calculator.

Cells and coordinates were read in the American Mineralogist Crystal Structure Database (through the data
file of the larixite 2026.1.0 package), whose own references stand beside each; the tetragonal zirconia is
from memory. Structure factors are summed with gemmi (form factors of International Tables C, neutral
atoms).
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache

import gemmi
import numpy as np

from phasedb.crystal.phases import PhaseTable
from study.experiment import Experiment
from study.physics import lorentz_polarisation, two_theta
from study.simulate import Lines, add_diffracted, finish_case, observe
from study.truth import Case, FloatArray

D_MIN = 0.6
"""Shortest d in Å that lines are summed for."""


@dataclass(frozen=True, slots=True)
class Crystal:
    """A crystal structure: cell (Å, degrees), space group with its setting, atoms, source."""

    name: str
    cell: tuple[float, float, float, float, float, float]
    space_group: str
    atoms: tuple[tuple[str, float, float, float], ...]
    source: str


def _hexagonal(a: float, c: float) -> tuple[float, float, float, float, float, float]:
    return a, a, c, 90.0, 90.0, 120.0


def _tetragonal(a: float, c: float) -> tuple[float, float, float, float, float, float]:
    return a, a, c, 90.0, 90.0, 90.0


THIRD, TWO_THIRDS = 1.0 / 3.0, 2.0 / 3.0
_WYCKOFF = "Wyckoff, Crystal Structures 2nd ed. vol. 1 (1963)"


def _close_packed(name: str, symbol: str, a: float, c: float, source: str) -> Crystal:
    return Crystal(name, _hexagonal(a, c), "P 63/m m c", ((symbol, THIRD, TWO_THIRDS, 0.25),), source)


CRYSTALS = (
    Crystal(
        "quartz", _hexagonal(4.913437, 5.405118), "P 32 2 1",
        (("Si", 0.4700, 0.0, TWO_THIRDS), ("O", 0.4146, 0.2678, 0.78543)),
        "Antao, Hassan, Wang, Lee & Toby, Can. Mineral. 46 (2008) 1501",
    ),
    Crystal(
        "corundum", _hexagonal(4.7602, 12.9933), "R -3 c:H",
        (("Al", 0.0, 0.0, 0.35216), ("O", 0.30624, 0.0, 0.25)),
        "Lewis, Schwarzenbach & Flack, Acta Cryst. A38 (1982) 733",
    ),
    Crystal(
        "zinc oxide", _hexagonal(3.2495, 5.2069), "P 63 m c",
        (("Zn", THIRD, TWO_THIRDS, 0.0), ("O", THIRD, TWO_THIRDS, 0.345)),
        _WYCKOFF,
    ),
    Crystal(
        "monoclinic zirconia", (5.145, 5.2075, 5.3107, 90.0, 99.23, 90.0), "P 1 21/c 1",
        (("Zr", 0.2758, 0.0411, 0.2082), ("O", 0.0703, 0.3359, 0.3406), ("O", 0.4423, 0.7549, 0.4789)),
        "Smith & Newkirk, Acta Cryst. 18 (1965) 983",
    ),
    Crystal(
        "tetragonal zirconia", _tetragonal(3.596, 5.184), "P 42/n m c:2",
        (("Zr", 0.75, 0.25, 0.75), ("O", 0.25, 0.25, 0.4551)),
        "from memory",
    ),
    Crystal(
        "rutile", _tetragonal(4.5922, 2.9574), "P 42/m n m",
        (("Ti", 0.0, 0.0, 0.0), ("O", 0.30496, 0.30496, 0.0)),
        "Swope, Smyth & Larson, Am. Mineral. 80 (1995) 448",
    ),
    Crystal(
        "anatase", _tetragonal(3.7842, 9.5146), "I 41/a m d:1",
        (("Ti", 0.0, 0.0, 0.0), ("O", 0.0, 0.0, 0.2081)),
        "Horn, Schwerdtfeger & Meagher, Z. Krist. 136 (1972) 273",
    ),
    Crystal(
        "calcite", _hexagonal(4.988, 17.061), "R -3 c:H",
        (("Ca", 0.0, 0.0, 0.0), ("C", 0.0, 0.0, 0.25), ("O", 0.2567, 0.0, 0.25)),
        "Markgraf & Reeder, Am. Mineral. 70 (1985) 590",
    ),
    Crystal(
        "magnesite", _hexagonal(4.633, 15.016), "R -3 c:H",
        (("Mg", 0.0, 0.0, 0.0), ("C", 0.0, 0.0, 0.25), ("O", 0.2776, 0.0, 0.25)),
        "Graf, Am. Mineral. 46 (1961) 1283",
    ),
    Crystal(
        "haematite", _hexagonal(5.038, 13.772), "R -3 c:H",
        (("Fe", 0.0, 0.0, 0.3553), ("O", 0.3059, 0.0, 0.25)),
        "Blake, Hessevick, Zoltai & Finger, Am. Mineral. 51 (1966) 123",
    ),
    Crystal(
        "cristobalite", _tetragonal(4.9717, 6.9223), "P 41 21 2",
        (("Si", 0.30028, 0.30028, 0.0), ("O", 0.2392, 0.1044, 0.1787)),
        "Downs & Palmer, Am. Mineral. 79 (1994) 9",
    ),
    Crystal(
        "cassiterite", _tetragonal(4.738, 3.1865), "P 42/m n m",
        (("Sn", 0.0, 0.0, 0.0), ("O", 0.3065, 0.3065, 0.0)),
        "Baur & Khan, Acta Cryst. B27 (1971) 2133",
    ),
    Crystal(
        "aragonite", (4.96062, 7.97006, 5.74181, 90.0, 90.0, 90.0), "P m c n",
        (("Ca", 0.25, 0.415, 0.7596), ("C", 0.25, 0.7619, -0.0849), ("O", 0.25, 0.9224, -0.0956),
         ("O", 0.4738, 0.6804, -0.0871)),
        "Antao & Hassan, Can. Mineral. 47 (2009) 1245",
    ),
    Crystal(
        "zircon", _tetragonal(6.6042, 5.9796), "I 41/a m d:2",
        (("Zr", 0.0, 0.75, 0.125), ("Si", 0.0, 0.25, 0.375), ("O", 0.0, 0.066, 0.1951)),
        "Hazen & Finger, Am. Mineral. 64 (1979) 196",
    ),
    Crystal(
        "molybdenite", _hexagonal(3.161, 12.295), "P 63/m m c",
        (("Mo", THIRD, TWO_THIRDS, 0.25), ("S", THIRD, TWO_THIRDS, 0.6275)),
        "Schönfeld, Huang & Moss, Acta Cryst. B39 (1983) 404",
    ),
    Crystal(
        "cementite", (5.092, 6.741, 4.527, 90.0, 90.0, 90.0), "P n m a",
        (("Fe", 0.1834, 0.0689, 0.3344), ("Fe", 0.0388, 0.25, 0.8422), ("C", 0.8764, 0.25, 0.4426)),
        "Fruchart, Chaudouet, Fruchart, Rouault & Senateur, J. Solid State Chem. 51 (1984) 246",
    ),
    Crystal("white tin", _tetragonal(5.8197, 3.17488), "I 41/a m d:1", (("Sn", 0.0, 0.0, 0.0),), _WYCKOFF),
    _close_packed("magnesium", "Mg", 3.20927, 5.21033, _WYCKOFF),
    _close_packed("zinc", "Zn", 2.6648, 4.9467, _WYCKOFF),
    _close_packed("titanium", "Ti", 2.950, 4.686, _WYCKOFF),
    _close_packed("cobalt", "Co", 2.5074, 4.0699, "Taylor & Floyd, Acta Cryst. 3 (1950) 285"),
)  # fmt: skip


@lru_cache(maxsize=64)
def powder_lines(name: str) -> tuple[FloatArray, FloatArray]:
    """Return d (Å, descending) and multiplicity times |F|² of every line of a crystal down to `D_MIN`."""
    crystal = next(one for one in CRYSTALS if one.name == name)
    small = gemmi.SmallStructure()
    small.cell = gemmi.UnitCell(*crystal.cell)
    group = gemmi.find_spacegroup_by_name(crystal.space_group)
    if group is None:
        raise ValueError(f"space group {crystal.space_group!r} of {name} is not known")
    small.spacegroup = group
    for row, (symbol, x, y, z) in enumerate(crystal.atoms):
        site = gemmi.SmallStructure.Site()
        site.label = f"{symbol}{row}"
        site.type_symbol = symbol
        site.element = gemmi.Element(symbol)
        site.fract = gemmi.Fractional(x, y, z)
        site.occ = 1.0
        site.u_iso = 0.006
        small.add_site(site)
    small.setup_cell_images()
    small.change_occupancies_to_crystallographic()
    calculator = gemmi.StructureFactorCalculatorX(small.cell)
    found: dict[int, list[float]] = {}
    operations = group.operations()
    for hkl in gemmi.make_miller_array(small.cell, group, D_MIN):
        index = [int(value) for value in hkl]
        d = small.cell.calculate_d(index)
        amplitude = calculator.calculate_sf_from_small_structure(small, index)
        planes = {tuple(operations.sym_ops[k].apply_to_hkl(index)) for k in range(len(operations.sym_ops))}
        planes |= {tuple(-value for value in plane) for plane in planes}
        key = round(d * 1e5)
        entry = found.setdefault(key, [d, 0.0])
        entry[1] += len(planes) * abs(amplitude) ** 2
    rows = np.array(sorted(found.values(), reverse=True))
    return rows[:, 0], rows[:, 1]


def noncubic_list(table: PhaseTable, seed: tuple[int, ...], *, with_intensity: bool = True) -> Case:
    """Return a list of a sample of one or two non-cubic phases; nothing cubic is in it."""
    rng = np.random.default_rng(seed)
    while True:
        setting = Experiment.draw(rng)
        count = 1 if rng.random() < 0.7 else 2
        picked = rng.choice(len(CRYSTALS), size=count, replace=False)
        lines = Lines(np.empty(0), np.empty(0))
        for order, row in enumerate(picked):
            crystal = CRYSTALS[int(row)]
            d, strength = powder_lines(crystal.name)
            d = d * (1.0 + 3e-4 * rng.standard_normal())
            share = 1.0 if order == 0 else float(np.exp(rng.uniform(np.log(0.1), 0.0)))
            _add(lines, d, strength, share, crystal.name, setting, rng)
        if not len(lines.intensity):
            continue
        measured = observe(lines, setting, rng, with_intensity=with_intensity, d_only=False)
        if measured is not None and len(measured[0]) >= 4:
            names = " + ".join(CRYSTALS[int(row)].name for row in picked)
            return finish_case(table, *measured, (), setting, seed, names)


def _add(
    lines: Lines, d: FloatArray, strength: FloatArray, share: float, name: str, setting: Experiment,
    rng: np.random.Generator,
) -> None:  # fmt: skip
    angle = two_theta(d, setting.physical_alpha1)
    keep = np.isfinite(angle) & (angle < 165.0)
    d, strength, angle = d[keep], strength[keep], angle[keep]
    intensity = strength * lorentz_polarisation(angle, setting.monochromator_cos2)
    window = (angle > setting.low) & (angle < setting.high)
    if not window.any():
        return
    intensity = share * intensity / intensity[window].max()
    texture = 0.3 + 0.7 * rng.random() if rng.random() < setting.texture_chance else 0.0
    intensity = intensity * np.exp(np.hypot(setting.intensity_spread, texture) * rng.standard_normal(len(d)))
    strong = intensity > 1e-4
    add_diffracted(lines, d[strong], intensity[strong], name, setting)
