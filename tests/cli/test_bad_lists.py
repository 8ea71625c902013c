"""Every way a list can be wrong, as a user meets it: one line on stderr, exit code 2, nothing on stdout."""

import os
import subprocess
import sys

import pytest
from running import run

GOOD = b"# radiation: Cu\ntwo_theta_deg,intensity\n38.47,100\n44.72,47\n65.10,22\n78.23,24\n"

BAD = {
    "empty": (b"", "empty"),
    "header only": (b"# radiation: Cu\ntwo_theta_deg,intensity\n", "header row but no lines"),
    "text in a number column": (GOOD.replace(b"44.72", b"4x.72"), "list.csv:4:1"),
    "NaN": (GOOD.replace(b"44.72", b"nan"), "list.csv:4:1"),
    "infinity": (GOOD.replace(b"47\n", b"inf\n"), "list.csv:4:7"),
    "negative position": (GOOD.replace(b"44.72", b"-44.72"), "list.csv:4:1"),
    "zero position": (GOOD.replace(b"44.72", b"0"), "list.csv:4:1"),
    "2theta of 180": (GOOD.replace(b"78.23", b"180"), "below 180"),
    "d below half the wavelength": (b"# radiation: Cu\nd_angstrom\n2.1\n0.77\n", "half the wavelength"),
    "no wavelength": (GOOD.replace(b"# radiation: Cu\n", b""), "--radiation or --wavelength"),
    "two position columns": (
        b"# radiation: Cu\ntwo_theta_deg,d_angstrom\n38.47,2.338\n",
        "two position columns",
    ),
    "100,000 lines": (
        b"# radiation: Cu\n" + b"".join(b"%.4f\n" % (10 + i * 1e-3) for i in range(100_000)),
        "phasedb peaks",
    ),
    "a binary file": (bytes(range(256)) * 64, "binary"),
    "outside the range": (b"# range: 40 90\n" + GOOD, "outside the stated range"),
}


@pytest.fixture
def listed(tmp_path):
    path = tmp_path / "list.csv"
    path.write_bytes(GOOD)
    return path


@pytest.mark.parametrize("kind", BAD)
@pytest.mark.parametrize("command", [("match",), ("index",), ("refine", "--lattice", "F", "--a", "4.05")])
def test_a_bad_list_is_one_line_of_error(kind, command, starter_store, tmp_path):
    content, says = BAD[kind]
    path = tmp_path / "list.csv"
    path.write_bytes(content)
    ran = run(command[0], path, *command[1:], store=starter_store)
    assert (ran.code, ran.out) == (2, "")
    assert ran.err.startswith("error: ") and ran.err.count("\n") == 1
    assert "list.csv" in ran.err and says in ran.err


@pytest.mark.parametrize("command", ["match", "index", "peaks"])
def test_a_folder_or_nothing_in_place_of_a_file(command, starter_store, tmp_path):
    for path, says in ((tmp_path, "folder"), (tmp_path / "none.csv", "no such file")):
        ran = run(command, path, store=starter_store)
        assert ran.code == 2 and says in ran.err


@pytest.mark.parametrize(
    ("options", "says"),
    [
        (("--radiation", "Zz"), "'Zz' is not known"),
        (("--wavelength", "1540"), "wavelength"),
        (("--wavelength", "abc"), "--wavelength"),
        (("--range", "90", "20"), "lower first"),
        (("--range", "20"), "--range"),
        (("--unit", "furlong"), "--unit"),
        (("--unit", "d"), "unit d is asked for"),
        (("--temperature", "-3"), "temperature"),
        (("--goniometer-radius", "0"), "goniometer radius"),
        (("--radiation", "electron"), "electron energy"),
        (("--instrument", "nobody"), "no instrument"),
        (("--calibration-rings", "x.csv"), "--calibration-phase together"),
    ],
)
def test_bad_options_are_errors_too(options, says, listed, starter_store):
    ran = run("match", listed, *options, store=starter_store)
    assert (ran.code, ran.out) == (2, "")
    assert says in ran.err


@pytest.mark.parametrize(
    "content",
    [
        GOOD.replace(b"\n", b"\r\n"),
        b"\xef\xbb\xbf" + GOOD,
        GOOD.decode().encode("utf-16"),
        GOOD.replace(b",", b";").replace(b".", b","),
        b"# radiation: Cu\ntwo_theta_deg,intensity\n78.23,24\n38.47,60\n38.47,40\n65.10,22\n44.72,47\n",
        b'{"schema":"phasedb.peaks/1","unit":"two-theta","radiation":"Cu","peaks":[{"position":38.47,"intensity":100},'
        b'{"position":44.72,"intensity":47},{"position":65.1,"intensity":22},{"position":78.23,"intensity":24}]}',
        b"data_x\n_diffrn_radiation_type 'Cu K\\a'\nloop_\n_pd_peak_2theta_maximum\n_pd_peak_intensity\n"
        b"38.47 100\n44.72 47\n65.10 22\n78.23 24\n",
    ],
)
def test_odd_but_honest_lists_give_the_same_answer(content, tmp_path):
    path = tmp_path / "list.csv"
    path.write_bytes(content)
    found = run("refine", path, "--lattice", "F", "--a", "4.05", "--json").json
    assert found["a_angstrom"] == pytest.approx(4.0493, abs=2e-3)
    assert len(found["lines"]) == 4


def test_a_list_on_standard_input(listed):
    command = [sys.executable, "-m", "phasedb", "refine", "-", "--lattice", "F", "--a", "4.05"]
    with listed.open("rb") as stream:
        ran = subprocess.run(command, stdin=stream, capture_output=True, check=False, env={**os.environ})
    assert ran.returncode == 0, ran.stderr
    assert ran.stdout.decode().startswith("a = 4.0")
