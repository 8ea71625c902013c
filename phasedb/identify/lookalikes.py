"""Entries whose lines this measurement cannot tell apart, and what would tell them apart."""

from __future__ import annotations

from collections.abc import Set
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType, hkl_text
from phasedb.identify.axis import KIND_LINE, Axis
from phasedb.identify.entries import Entries
from phasedb.identify.likelihood import DETECTION_SLOPE, ln_floor
from phasedb.identify.lines import LineTable, make_lines

FloatArray = NDArray[np.float64]

AGREE: Final = 2.5  # standard uncertainties within which two predicted lines agree
DRIFT_REACH: Final = 3.0  # drift scales within which an entry's a may be moved to agree
BESIDE: Final = 0.006  # ln a: farther apart, a shift cannot make up for it
VISIBLE: Final = 0.5
UNSEEN: Final = 0.12  # a line less likely than this need not be there


@dataclass(frozen=True, slots=True)
class Reading:
    """How the measurement reads one phase: a, noise, share and the shift."""

    ln_a: float
    ln_a_esd: float
    sigma: float
    ln_share: float


def find_look_alikes(
    axis: Axis, entries: Entries, index: int, reading: Reading, rivals: Set[int]
) -> list[int]:
    """Return the entries (by index, in name order) that this reading of entry `index` cannot be told from.

    Both need the same visible lines at the same places, each entry's a being free within its drift, whatever
    the lattice type. The a of `rivals`, entries that explain this list about as well with another shift, was
    not told from this one's: they need the same lines only.
    """
    near = {
        *_near(entries, index, reading),
        *(other for other in rivals if _is_beside(entries, other, reading)),
    }
    places = {
        other: place
        for other in sorted(near)
        if other != index and (place := _place_of(entries, other, reading, other in rivals)) is not None
    }
    if not places:
        return []
    first = make_lines(axis, np.array([reading.ln_a]), [entries.pattern(index)], with_ghosts=False)
    others = make_lines(
        axis, np.array(list(places.values())), [entries.pattern(other) for other in places], with_ghosts=False
    )
    own = _Seen(axis, first, 0, reading.ln_a, reading)
    found = []
    for row, (other, place) in enumerate(places.items()):
        seen = _Seen(axis, others, row, place, reading)
        if own.is_covered_by(seen) and seen.is_covered_by(own):
            found.append(other)
    return found


def _near(entries: Entries, index: int, reading: Reading) -> list[int]:
    """Return entries that could agree: same lattice type and a, or a combination that shares a line
    sequence.
    """
    lattice = LATTICE_TYPES[int(entries.lattice[index])]
    # F without odd lines is P(a/2), and I(a) shares its first lines with P(a/sqrt 2)
    double, diagonal = float(np.log(2.0)), 0.5 * float(np.log(2.0))
    relatives: dict[LatticeType, list[tuple[LatticeType, float]]] = {
        "F": [("F", 0.0), ("P", 0.0), ("P", -double), ("I", -diagonal)],
        "P": [("P", 0.0), ("I", 0.0), ("F", 0.0), ("F", double), ("I", diagonal)],
        "I": [("I", 0.0), ("P", 0.0), ("P", -diagonal), ("F", diagonal)],
    }
    near = np.zeros(len(entries), dtype=bool)
    for name, offset in relatives[lattice]:
        target = reading.ln_a + offset
        drift = target - np.clip(target, entries.ln_a_low, entries.ln_a_high)
        reach = DRIFT_REACH * entries.drift_scale + AGREE * reading.ln_a_esd
        near |= (entries.lattice == LATTICE_TYPES.index(name)) & (np.abs(drift) < reach)
    return [int(value) for value in np.flatnonzero(near)]


def _lines_at(axis: Axis, entries: Entries, index: int, ln_a: float) -> LineTable:
    return make_lines(axis, np.array([ln_a]), [entries.pattern(index)], with_ghosts=False)


def _is_beside(entries: Entries, other: int, reading: Reading) -> bool:
    return bool(abs(float(entries.ln_a[other]) - reading.ln_a) < BESIDE)


def _place_of(entries: Entries, other: int, reading: Reading, is_rival: bool) -> float | None:
    """Return ln a at which another entry would have the lines of a reading; None if its drift forbids it."""
    if is_rival and _is_beside(entries, other, reading):
        return reading.ln_a
    reach = DRIFT_REACH * entries.drift_scale[other] + AGREE * reading.ln_a_esd
    for offset in (0.0, np.log(2.0), -np.log(2.0), 0.5 * np.log(2.0), -0.5 * np.log(2.0)):
        target = reading.ln_a + float(offset)
        if abs(target - np.clip(target, entries.ln_a_low[other], entries.ln_a_high[other])) < reach:
            return target
    return None


class _Seen:
    """The lines of one entry at one place: those that must be seen, and those that may be."""

    def __init__(self, axis: Axis, lines: LineTable, row: int, ln_a: float, reading: Reading) -> None:
        x = axis.positions(lines.half_ln_n[row], np.array(ln_a))
        ratio = DETECTION_SLOPE * (reading.ln_share + lines.ln_height[row] - ln_floor(axis))
        chance = 1.0 / (1.0 + np.exp(np.clip(-ratio, -40.0, 40.0)))
        with np.errstate(invalid="ignore"):
            inside = (x >= axis.low) & (x <= axis.high)
        self.must = x[inside & (chance > VISIBLE)]
        self.may = x[np.isfinite(x) & (chance > UNSEEN)]
        self.tolerance = AGREE * reading.sigma + 0.5 * axis.resolution

    def is_covered_by(self, other: _Seen) -> bool:
        """Return whether each line that this entry must show is one that the other may show."""
        if len(self.must) == 0:
            return True
        if len(other.may) == 0:
            return False
        gap = np.abs(self.must[:, None] - other.may[None, :])
        return bool((gap.min(axis=1) < self.tolerance).all())


def what_separates(axis: Axis, entries: Entries, one: int, other: int, reading: Reading) -> list[str]:
    """Return what would tell two look-alikes apart: a line, an element, a wider range."""
    texts = []
    table = entries.table
    first, second = int(entries.rows[one]), int(entries.rows[other])
    only_one = sorted(set(table.elements[first]) - set(table.elements[second]))
    only_other = sorted(set(table.elements[second]) - set(table.elements[first]))
    parts = []
    if only_one:
        parts.append(f"{', '.join(only_one)} only in {table.name[first]}")
    if only_other:
        parts.append(f"{', '.join(only_other)} only in {table.name[second]}")
    if parts:
        texts.append("an element analysis: " + "; ".join(parts))
    line = _separating_line(axis, entries, one, other, reading)
    if line:
        texts.append(line)
    return texts


def _separating_line(axis: Axis, entries: Entries, one: int, other: int, reading: Reading) -> str | None:
    """Return the line that best separates two entries at their stored a, up to 2theta = 150 degrees."""
    lattice = LATTICE_TYPES[int(entries.lattice[one])]
    if entries.lattice[one] != entries.lattice[other]:
        return _extra_line(axis, entries, one, other, reading)
    gap = abs(float(entries.ln_a[one] - entries.ln_a[other]))
    n, strength = entries.pattern(one)
    half = 0.5 * np.log(n)
    x = axis.positions(half, np.array(float(entries.ln_a[one])))
    top = 150.0 if axis.is_angle else axis.high
    usable = (x < top) & (strength > 0.02 * strength.max())
    if not usable.any() or gap < 1e-5:
        return None
    best = int(np.flatnonzero(usable)[np.argmax(x[usable])])
    apart = gap * abs(float(axis.slope(x[best : best + 1])[0]))
    name = hkl_text(int(n[best]), lattice)
    if axis.is_angle:
        wider = " (needs a wider range)" if x[best] > axis.high else ""
        return f"line {name} near {x[best]:.2f}° 2theta, where the two lie {apart:.3f}° apart{wider}"
    return f"line {name} near d = {np.exp(-x[best]):.4f} Å, where the two lie {100 * gap:.2f} % apart"


def _extra_line(axis: Axis, entries: Entries, one: int, other: int, reading: Reading) -> str | None:
    """Return the strongest line that only one of two entries of different lattice types has."""
    best: tuple[float, str] | None = None
    # both where they would have the lines of the reading: a small difference of a is not a line of its own
    elsewhere = _place_of(entries, other, reading, True)
    place_of = {one: reading.ln_a, other: float(entries.ln_a[other]) if elsewhere is None else elsewhere}
    for mine, yours in ((one, other), (other, one)):
        lines = _lines_at(axis, entries, mine, place_of[mine])
        theirs = _lines_at(axis, entries, yours, place_of[yours])
        x = axis.positions(lines.half_ln_n[0], np.array(place_of[mine]))
        y = axis.positions(theirs.half_ln_n[0], np.array(place_of[yours]))
        y = y[np.isfinite(y) & (theirs.ln_height[0] > np.log(2e-3))]
        for place, height, n, kind in zip(x, lines.ln_height[0], lines.n[0], lines.kind[0], strict=True):
            if not np.isfinite(place) or kind != KIND_LINE or not axis.low <= place <= axis.high:
                continue
            if len(y) and np.abs(y - place).min() < 4 * axis.resolution:
                continue
            if best is None or height > best[0]:
                name = hkl_text(int(n), LATTICE_TYPES[int(entries.lattice[mine])])
                owner = entries.table.name[int(entries.rows[mine])]
                where = f"{place:.2f}° 2theta" if axis.is_angle else f"d = {np.exp(-place):.4f} Å"
                best = (
                    height,
                    f"line {name} near {where}, which only {owner} has "
                    f"({100 * np.exp(height):.1f} % of its strongest)",
                )
    return best[1] if best else None
