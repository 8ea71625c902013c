"""The peaks command: from a scan to a list that match reads."""

import json
import os
import subprocess
import sys

import numpy as np
import pytest
from running import run

from phasedb.crystal.radiation import radiation_from_name
from phasedb.measured.line_fit import model_of
from phasedb.measured.profile import Doublet

CENTRES = np.array([38.47, 44.72, 65.10, 78.23, 82.43])


@pytest.fixture
def scan(tmp_path):
    rng = np.random.default_rng(1)
    x = np.arange(20, 100, 0.02)
    area = np.array([900, 420, 220, 240, 70.0])
    ratio, shape = np.full(5, 0.5), np.full(5, 0.5)
    lines = model_of(x, CENTRES, area, np.full(5, 0.12), shape, Doublet.of(radiation_from_name("Cu")), ratio)
    y = rng.poisson(60 + lines)
    path = tmp_path / "foil.xy"
    path.write_text("\n".join(f"{a:.2f} {b}" for a, b in zip(x, y, strict=True)))
    return path


def test_the_list_goes_to_stdout_and_remarks_to_stderr(scan):
    ran = run("peaks", scan, "--radiation", "Cu")
    assert ran.code == 0
    body = [line for line in ran.out.splitlines() if not line.startswith("#")]
    assert body[0] == "two_theta_deg,intensity,esd,fwhm_deg" and len(body) == 6
    assert [float(line.split(",")[0]) for line in body[1:]] == pytest.approx(CENTRES, abs=0.01)
    assert "5 lines in 4000 points" in ran.err and "0.1 expected from noise" in ran.err


def test_the_written_list_is_matched(scan, starter_store, tmp_path):
    path = tmp_path / "found.csv"
    ran = run("peaks", scan, "--radiation", "Cu", "-o", path)
    assert (ran.code, ran.out) == (0, "")
    found = run("match", path, "--elements", "Al", "--json", store=starter_store).json
    assert found["phases"][0]["name"] == "aluminium" and found["phases"][0]["probability"] > 0.9
    assert found["measurement"]["range_assumed"] is False


def test_a_pipe_from_scan_to_index(scan):
    phasedb = f"{sys.executable} -m phasedb"
    command = f"{phasedb} peaks {scan} --radiation Cu --json | {phasedb} index - --json"
    ran = subprocess.run(["sh", "-c", command], capture_output=True, check=False, env={**os.environ})
    assert ran.returncode == 0, ran.stderr
    best = json.loads(ran.stdout)["solutions"][0]
    assert (best["lattice_type"], best["a_angstrom"]) == ("F", pytest.approx(4.0496, abs=5e-3))


def test_the_document_tells_of_each_line_and_of_the_scan(scan):
    found = run("peaks", scan, "--radiation", "Cu", "--false-lines", "0.01", "--json").json
    assert found["schema"] == "phasedb.peaks/1"
    assert found["scan"]["false_lines_expected"] == 0.01
    assert found["scan"]["doublet_ratio"] == pytest.approx(0.5, abs=0.1)
    line = found["peaks"][0]
    assert line["intensity"] == 100.0
    assert line["area"] == pytest.approx(900, abs=4 * line["area_esd"])
    assert line["fwhm"] == pytest.approx(0.12, abs=4 * line["fwhm_esd"])


@pytest.mark.parametrize("kind", ["svg", "png"])
def test_a_figure(kind, scan, tmp_path):
    path = tmp_path / f"scan.{kind}"
    ran = run("peaks", scan, "--radiation", "Cu", "--figure", path)
    assert ran.code == 0 and path.stat().st_size > 5000
    if kind == "svg":
        text = path.read_text()
        assert all(f'id="line-{number}"' in text for number in range(1, 6))


def test_a_part_of_the_scan(scan):
    found = run("peaks", scan, "--radiation", "Cu", "--range", "40", "70", "--json").json
    assert [peak["position"] for peak in found["peaks"]] == pytest.approx([44.72, 65.10], abs=0.01)
    assert found["range"] == [40.0, 70.0]


def test_a_scan_without_lines_says_so(tmp_path):
    rng = np.random.default_rng(2)
    path = tmp_path / "glass.xy"
    path.write_text("\n".join(f"{20 + 0.02 * i:.2f} {c}" for i, c in enumerate(rng.poisson(50, 2000))))
    ran = run("peaks", path, "--radiation", "Cu")
    assert ran.code == 0 and "no line stands above the noise" in ran.err
    assert ran.out.endswith("two_theta_deg,intensity,esd,fwhm_deg\n")


@pytest.mark.parametrize(
    ("content", "says"),
    [
        ("20.0\n" * 50, "scan.xy:1"),
        ("".join(f"{20 + 0.02 * i:.2f} 7\n" for i in range(50)), "no signal"),
        ("".join(f"{20 + 0.02 * i:.2f} 7\n" for i in range(5)), "at least 30"),
        ("".join(f"{20 + 0.02 * i:.2f} {i}\n" for i in range(50)) + "21.0 many\n", "scan.xy:51:6"),
    ],
)
def test_what_is_no_scan(content, says, tmp_path):
    path = tmp_path / "scan.xy"
    path.write_text(content)
    ran = run("peaks", path)
    assert (ran.code, ran.out) == (2, "") and says in ran.err


def test_an_output_that_cannot_be_written(scan, tmp_path):
    ran = run("peaks", scan, "-o", tmp_path / "no" / "such" / "folder.csv")
    assert ran.code == 2 and "folder.csv" in ran.err
