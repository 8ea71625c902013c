"""The instrument commands, and what --instrument does."""

import numpy as np
import pytest
from running import run

from phasedb.crystal.lattice import allowed_n
from phasedb.crystal.radiation import radiation_from_name


def silicon_list(path, zero):
    rng = np.random.default_rng(1)
    wavelength = radiation_from_name("Cu-Ka1").wavelength_angstrom
    n = np.array([n for n in allowed_n("F", 60) if n % 8 in (0, 3)])
    sine = wavelength * np.sqrt(n) / (2 * 5.43094)
    x = 2 * np.degrees(np.arcsin(sine[sine < 0.95])) + zero
    rows = "\n".join(f"{value:.4f},50,0.005,0.09" for value in x + 0.004 * rng.normal(size=len(x)))
    path.write_text(f"two_theta_deg,intensity,esd,fwhm_deg\n{rows}\n")
    return path


def test_an_instrument_learns_its_zero_from_a_standard(store, tmp_path):
    standard = silicon_list(tmp_path / "si.csv", 0.12)
    words = (
        "--radiation",
        "Cu-Ka1",
        "--goniometer-radius",
        "240",
        "--standard-list",
        standard,
        "--standard",
        "silicon",
    )
    found = run("instrument", "add", "D1", *words, "--json", store=store).json["instrument"]
    assert abs(found["zero_deg"] - 0.12) < 2.5 * found["zero_scale_deg"] < 0.1
    assert (found["goniometer_radius_mm"], found["line_width_deg"]) == (240, pytest.approx(0.09))
    assert found["standard"] == "silicon" and found["calibrated_on"]
    assert run("instrument", "show", "d1", "--json", store=store).json["instrument"] == found
    assert "silicon" in run("instrument", "list", store=store).out
    assert run("audit", store=store).code == 0


def test_the_instrument_fills_the_peak_options_and_the_shift(store, tmp_path):
    standard = silicon_list(tmp_path / "si.csv", 0.12)
    words = (
        "--radiation",
        "Cu-Ka1",
        "--goniometer-radius",
        "240",
        "--standard-list",
        standard,
        "--standard",
        "silicon",
    )
    run("instrument", "add", "D1", *words, store=store)
    refined = ("refine", standard, "--lattice", "F", "--a", "5.43", "--instrument", "D1", "--json")
    knowing = run(*refined, store=store).json
    blind = run(
        *refined[:-3], "--radiation", "Cu-Ka1", "--goniometer-radius", "240", "--json", store=store
    ).json
    assert knowing["goniometer_radius_mm"] == 240 and not knowing["radius_assumed"]
    assert knowing["a_esd_angstrom"] < blind["a_esd_angstrom"]
    assert abs(knowing["a_angstrom"] - 5.43094) < 2.5 * knowing["a_esd_angstrom"]
    matched = run("match", standard, "--instrument", "D1", "--json", store=store).json
    assert matched["shift"]["zero_deg"] == pytest.approx(0.12, abs=0.03)
    other = run(
        "refine",
        standard,
        "--lattice",
        "F",
        "--a",
        "5.43",
        "--instrument",
        "D1",
        "--radiation",
        "Cu-mean",
        "--json",
        store=store,
    )
    assert other.json["wavelength_angstrom"] == pytest.approx(1.541871, abs=1e-6)  # an option stands above it


def test_a_name_is_taken_once_and_entered_anew_on_request(store):
    assert run("instrument", "add", "D1", "--radiation", "Cu", store=store).code == 0
    again = run("instrument", "add", "d1", "--radiation", "Co", store=store)
    assert again.code == 2 and "--replace" in again.err
    found = run("instrument", "add", "D1", "--radiation", "Co", "--replace", "--json", store=store).json[
        "instrument"
    ]
    assert (found["radiation"], found["version"]) == ("Co", 2)
    assert run("audit", store=store).code == 0


def test_a_wavelength_may_stand_for_the_radiation(store, tmp_path):
    run("instrument", "add", "beamline", "--wavelength", "0.6199", "--geometry", "transmission", store=store)
    path = tmp_path / "list.csv"
    path.write_text("20.1\n23.2\n33.1\n")
    ran = run("match", path, "--instrument", "beamline", "--json", store=store)
    assert ran.json["measurement"]["wavelength_angstrom"] == 0.6199


@pytest.mark.parametrize(
    ("words", "says"),
    [
        (("D1",), "--radiation or --wavelength"),
        (("D1", "--radiation", "Cu", "--wavelength", "1.54"), "--radiation or --wavelength"),
        (("D1", "--radiation", "Zz"), "'Zz'"),
        (("D1", "--radiation", "Cu", "--goniometer-radius", "-4"), "goniometer radius"),
        (("D1", "--radiation", "Cu", "--standard", "silicon"), "--standard-list and --standard"),
        (("D1", "--radiation", "Cu", "--standard", "silicon", "--standard-list", "none.csv"), "no such file"),
        (("", "--radiation", "Cu"), "name"),
    ],
)
def test_what_is_no_instrument(words, says, store):
    ran = run("instrument", "add", *words, store=store)
    assert ran.code == 2 and says in ran.err
    assert run("instrument", "list", "--json", store=store).json["instruments"] == []


def test_an_unknown_instrument_is_named(store):
    ran = run("instrument", "show", "D9", store=store)
    assert ran.code == 2 and "'D9'" in ran.err
