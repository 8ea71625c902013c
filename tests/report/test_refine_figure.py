"""Figures of a refinement and of a scan."""

from __future__ import annotations

import re

import numpy as np
import pytest

import phasedb
from phasedb.errors import InputError
from phasedb.report.refine_figure import refine_figure

LINES = [38.11, 44.30, 64.43, 77.39, 81.53, 97.87]


def peaks(tmp_path, *, unit="two_theta_deg"):
    if unit == "two_theta_deg":
        rows, head = LINES, "# radiation: Cu\n"
    else:
        rows, head = (1.5405929 / 2 / np.sin(np.radians(LINES) / 2)).tolist(), ""
    path = tmp_path / "list.csv"
    path.write_text(head + unit + "\n" + "\n".join(f"{x:.5f}" for x in rows) + "\n")
    return phasedb.PeakList.read(path)


@pytest.mark.parametrize("unit", ["two_theta_deg", "d_angstrom"])
def test_residuals_and_extrapolation_with_units(tmp_path, unit):
    read = peaks(tmp_path, unit=unit)
    refined = phasedb.refine(read, lattice="F", a="4.09")
    refine_figure(refined, read, tmp_path / "r.svg")
    text = (tmp_path / "r.svg").read_text()
    assert "a from one line alone, Å" in text
    assert re.search(r"a = 4\.08\d+\(\d+\) Å, from 6 lines", text)
    assert ("Nelson-Riley, 4.08" in text) == (unit == "two_theta_deg")
    assert ("Cohen, 4.08" in text) == (unit == "two_theta_deg")
    for hkl in ("111", "311", "400"):
        assert f">{hkl}<" in text


def test_the_same_bytes_each_time_and_each_kind(tmp_path):
    read = peaks(tmp_path)
    refined = phasedb.refine(read, lattice="F", a="4.09")
    for kind in ("svg", "png", "pdf"):
        for name in "ab":
            refine_figure(refined, read, tmp_path / f"{name}.{kind}")
        assert (tmp_path / f"a.{kind}").read_bytes() == (tmp_path / f"b.{kind}").read_bytes()
    with pytest.raises(InputError):
        refine_figure(refined, read, tmp_path / "a.jpeg")
