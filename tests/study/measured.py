"""Measured lists from other laboratories, and published line tables: how an answer is judged.

``python -m study.measured`` (from ``tests/``) prints the answer to every list, with and without its
elements.

The rule is the design's: right if every name in `listed` (or an `acceptable` one, or their group) is
claimed and nothing wrong is; an unlisted claim is right if its lattice type agrees with a true phase and a
lies within 0.5 % of it, or within the list's own tolerance where that is wider; where the source gives no
lattice constant, within the range that `expected` states (`STATED_RANGE`). Where the sample's phase is in
no library, the best answer is an unlisted claim; no claim at all is an honest answer too and counts as
right, since nothing wrong was said; `is_named` tells the two apart, and the tests ask for the claim itself
where the list is good enough.
"""

from __future__ import annotations

import csv
import json
import sys
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from phasedb.crystal.radiation import radiation_from_name, radiation_from_wavelength
from phasedb.identify.result import Match
from phasedb.measured.building import build_peak_list
from phasedb.measured.peaklist import PeakList

DATA = Path(__file__).resolve().parents[1] / "outside" / "data"
CLAIM = 0.5

STATED_RANGE = {"rhea_nbmotatiw_co": ("I", 3.21, 3.26), "ru_pt_pd_ir_cu": ("F", 3.83, 3.90)}
"""Lattice constants (Å) that `expected` gives as a range, where `truth_lattice` has none."""


@dataclass(frozen=True, slots=True)
class Judgement:
    """Right or not, and why: names not claimed, claims that are wrong, claims that are right."""

    missing: tuple[str, ...]
    wrong: tuple[str, ...]
    right: tuple[str, ...]

    @property
    def is_right(self) -> bool:
        return not self.missing and not self.wrong

    @property
    def is_named(self) -> bool:
        return self.is_right and bool(self.right)


def measured_records() -> list[dict[str, Any]]:
    """Return the measured lists, one dict each, in the file's order."""
    text = (DATA / "measured_lists.jsonl").read_text(encoding="utf-8")
    return [json.loads(line) for line in text.splitlines() if line.strip()]


def measured_peaks(record: dict[str, Any], *, named: bool = False) -> PeakList:
    """Return a record as a peak list: its wavelength typed in, or its radiation by name (`named`)."""
    rows = record["peaks"]
    unit = {"two_theta_deg": "two-theta", "d_angstrom": "d"}[record["unit"]]
    radiation = radiation_from_wavelength(record["wavelength"])
    if record["radiation"] is None:
        radiation = None
    elif named:
        by_name = radiation_from_name(record["radiation"])
        mean = radiation_from_name(record["radiation"] + "-mean")
        for candidate in (by_name, mean):
            if abs(candidate.wavelength_angstrom / radiation.wavelength_angstrom - 1.0) < 1e-4:
                radiation = candidate
    fwhm = record.get("fwhm")
    return build_peak_list(
        [row[0] for row in rows],
        unit=unit,
        intensity=[row[1] for row in rows] if len(rows[0]) > 1 else None,
        fwhm=fwhm if unit == "two-theta" else None,
        radiation=radiation,
        measured_range=tuple(record["range"]),
        source=record["id"],
    )


def measured_elements(record: dict[str, Any]) -> tuple[str, ...] | None:
    """Return the elements of the specimen, as its source says; None if it does not."""
    text = record["elements"]
    return None if text is None else tuple(part.strip() for part in text.split(","))


def judge_measured(record: dict[str, Any], match: Match) -> Judgement:
    """Return the judgement of a match of a measured list."""
    names = [*record["listed"], *record["acceptable"]]
    groups = set(names)
    for result in match.phases:
        members = {result.name, *result.look_alikes}
        if members & set(names):
            groups |= members
    right, wrong = [], []
    claimed: set[str] = set()
    for result in match.phases:
        if result.probability > CLAIM or (result.group_probability > CLAIM and result.name in names):
            claimed |= {result.name, *result.look_alikes}
        if result.probability > CLAIM:
            (right if result.name in groups else wrong).append(f"{result.name} {result.probability:.2f}")
    unlisted = match.unlisted
    if unlisted.best is not None and unlisted.probability > CLAIM:
        fits = agrees(record, unlisted.best.lattice_type, unlisted.best.a_angstrom)
        label = (
            f"unlisted {unlisted.best.lattice_type} {unlisted.best.a_angstrom:.4f} {unlisted.probability:.2f}"
        )
        (right if fits else wrong).append(label)
    missing = tuple(name for name in record["listed"] if name not in claimed)
    if missing and claimed & set(record["acceptable"]):
        missing = ()
    return Judgement(missing, tuple(wrong), tuple(right))


def agrees(record: dict[str, Any], lattice: str, a: float) -> bool:
    """Return whether an unlisted claim agrees with a phase that the sample holds."""
    tolerance = max(0.005, record["a_tolerance_relative"])
    for true_lattice, true_a in record["truth_lattice"]:
        if true_a is not None and lattice == true_lattice and abs(a / true_a - 1.0) <= tolerance:
            return True
    stated = STATED_RANGE.get(record["id"])
    return stated is not None and lattice == stated[0] and stated[1] * 0.995 <= a <= stated[2] * 1.005


# --- published line tables ------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class LineTable:
    """One published table: what was printed, and where."""

    name: str
    peaks: PeakList
    source: str
    formula: str


RIGHT = {
    "calibration_ceo2_srm674_d": "cerium dioxide",
    "calibration_si_codata2010_d": "silicon",
    "handbook_of_mineralogy_altaite": "lead telluride",
    "handbook_of_mineralogy_periclase": "magnesium oxide",
    "handbook_of_mineralogy_platinum": "platinum",
    "handbook_of_mineralogy_sylvite": "potassium chloride",
    "library_lab6_d_3decimals": "lanthanum hexaboride",
    "library_ni_d": "nickel",
    "library_rounded_ceo2_2theta": "cerium dioxide",
    "neutron_calc_cu": "copper",
    "neutron_calc_na2ca3al2f14": "NAC line-profile standard",
    "neutron_calc_uo2": "uranium dioxide",
    "neutron_calc_y2o3": "yttrium oxide",
    "nist_srm640d_peak_positions": "silicon",
    "nist_srm640e_peak_positions": "silicon",
    "pyfai_al": "aluminium",
    "pyfai_au": "gold",
    "pyfai_ceo2": "cerium dioxide",
    "pyfai_lab6_srm660a": "lanthanum hexaboride",
    "pyfai_lab6_srm660c": "lanthanum hexaboride",
    "pyfai_ni": "nickel",
    "pyfai_si_srm640": "silicon",
    "pyfai_si_srm640a": "silicon",
    "pyfai_si_srm640b": "silicon",
    "pyfai_si_srm640c": "silicon",
    "pyfai_si_srm640e": "silicon",
    "worked_example_bcc_tungsten": "tungsten",
    "worked_example_fcc_aluminium": "aluminium",
    "worked_example_fcc_indexing": "copper",
}
"""The starter entry that each published table belongs to."""


def published_tables() -> list[LineTable]:
    """Return the published tables of four lines or more, a wavelength only where the source prints one."""
    tables: dict[str, list[dict[str, str]]] = {}
    with (DATA / "published_line_tables.csv").open(encoding="utf-8") as file:
        for row in csv.DictReader(file):
            tables.setdefault(row["table"], []).append(row)
    return [_table(name, rows) for name, rows in tables.items()]


def _table(name: str, rows: list[dict[str, str]]) -> LineTable:
    in_angle = bool(rows[0]["two_theta_deg"])
    column = "two_theta_deg" if in_angle else "d_angstrom"
    lines: dict[float, float] = {}
    for row in rows:
        position = float(row[column])
        lines[position] = lines.get(position, 0.0) + float(row["relative_intensity"] or 0.0)
    heights = np.array(list(lines.values()))
    peaks = build_peak_list(
        list(lines),
        unit="two-theta" if in_angle else "d",
        intensity=heights if (heights > 0.0).all() else None,
        radiation=radiation_from_wavelength(float(rows[0]["wavelength_angstrom"])) if in_angle else None,
        source=name,
    )
    return LineTable(name, peaks, rows[0]["source"], rows[0]["formula"])


def main() -> int:
    """Print what the matcher makes of every measured list."""
    from phasedb.identify import match
    from phasedb.identify.settings import MatchSettings
    from study.library import starter_table

    table = starter_table()
    for named in (False, True):
        for with_elements in (True, False):
            good = 0
            for record in measured_records():
                elements = measured_elements(record) if with_elements else None
                found = match(measured_peaks(record, named=named), table, MatchSettings(elements=elements))
                verdict = judge_measured(record, found)
                good += verdict.is_right
                state = "named" if verdict.is_named else "right" if verdict.is_right else "WRONG"
                print(f"{state:6s} {record['id']:26s} {describe(found)}")
                for label, values in (("missing", verdict.missing), ("wrong", verdict.wrong)):
                    if values:
                        print(f"       {label}: {', '.join(values)}")
            how = "radiation named" if named else "wavelength typed"
            print(f"== {good} of 15 right, {'with' if with_elements else 'without'} elements, {how}\n")
    print("== published tables")
    for one in published_tables():
        found = match(one.peaks, table, MatchSettings())
        print(f"{one.name:34s} {one.formula:14s} {describe(found)}")
    return 0


def describe(match: Match, most: int = 4) -> str:
    """Return the leading results of a match on one line."""
    parts = [
        f"{result.name} {result.probability:.3f}"
        + (f" (group {result.group_probability:.2f})" if result.look_alikes else "")
        for result in match.phases[:most]
    ]
    best = match.unlisted.best
    place = f" {best.lattice_type} {best.a_angstrom:.4f}" if best else ""
    parts.append(f"unlisted{place} {match.unlisted.probability:.3f}")
    parts.append(f"nothing {match.nothing_cubic:.3f}")
    return ", ".join(parts)


def names_of(results: Sequence[Any]) -> set[str]:
    """Return the names of results and of their look-alikes."""
    return {name for result in results for name in (result.name, *result.look_alikes)}


if __name__ == "__main__":
    sys.exit(main())
