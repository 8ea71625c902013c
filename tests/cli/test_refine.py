"""The refine command: from a phase or from values, documents, figures, rings, errors."""

import json

import numpy as np
import pytest
from running import run

from phasedb.crystal.radiation import electron_wavelength, ring_radius_from_d

ALUMINIUM = "38.47,100\n44.72,47\n65.10,22\n78.23,24\n82.43,7\n99.08,2\n112.05,8\n116.57,8\n"


@pytest.fixture
def listed(tmp_path):
    path = tmp_path / "foil.csv"
    path.write_text("# radiation: Cu-Ka1\n# range: 20 120\n# temperature_K: 300\n" + ALUMINIUM)
    return path


def test_a_stored_phase_is_refined(listed, starter_store):
    found = run("refine", listed, "--phase", "aluminium", "--json", store=starter_store).json
    assert found["schema"] == "phasedb.refine/1"
    assert found["a_angstrom"] == pytest.approx(4.0494, abs=1e-3)
    assert [line["n"] for line in found["lines"]] == [3, 4, 8, 11, 12, 16, 19, 20]
    assert found["lines"][0]["hkl"] == [[1, 1, 1]] and found["lines_not_used"] == []
    assert set(found["extrapolations"]) == {"nelson_riley", "cohen"}
    parts = found["a_esd_parts"]
    total = np.sqrt(sum(part**2 for part in parts.values() if part is not None))
    assert found["a_esd_angstrom"] == pytest.approx(total, rel=1e-5)


def test_values_do_without_a_store(listed, tmp_path):
    found = run(
        "refine", listed, "--lattice", "f", "--a", "0.405 nm", "--json", store=tmp_path / "none.sqlite"
    ).json
    assert found["a_start_angstrom"] == 4.05 and found["lattice_type"] == "F"


def test_the_text_says_what_the_document_says(listed):
    text = run("refine", listed, "--lattice", "F", "--a", "4.05").out
    found = run("refine", listed, "--lattice", "F", "--a", "4.05", "--json").json
    assert text.startswith("a = 4.0") and "lattice type F, from 8 of 8 lines" in text
    for words in ("Uncertainty (standard)", "Zero error", "Nelson-Riley", "Cohen", "Lines", "Cautions"):
        assert words in text
    assert f"{found['lines'][0]['residual_deg']:+.4f}" in text
    for caution in found["cautions"]:
        assert caution[:20] in " ".join(text.split())


@pytest.mark.parametrize("kind", ["svg", "png", "pdf"])
def test_a_residual_figure(kind, listed, tmp_path):
    path = tmp_path / f"residuals.{kind}"
    ran = run("refine", listed, "--lattice", "F", "--a", "4.05", "--figure", path)
    assert ran.code == 0 and path.stat().st_size > 2000
    assert str(path) in ran.err and "a = 4.0" in ran.out


@pytest.mark.parametrize(
    ("options", "says"),
    [
        ((), "which phase to refine is not said"),
        (("--lattice", "F"), "which phase to refine is not said"),
        (("--phase", "aluminium", "--a", "4"), "--phase already says"),
        (("--phase", "unobtainium"), "unobtainium"),
        (("--lattice", "Q", "--a", "4.05"), "'Q'"),
        (("--lattice", "F", "--a", "0.405"), "nm typed by mistake"),
        (("--lattice", "F", "--a", "4000"), "4000"),
        (("--lattice", "I", "--a", "1.52"), "no line of the list"),
        (("--lattice", "F", "--a", "4.05", "--figure", "x.bmp"), "x.bmp"),
    ],
)
def test_what_cannot_be_refined(options, says, listed, starter_store):
    ran = run("refine", listed, *options, store=starter_store)
    assert (ran.code, ran.out) == (2, "") and says in ran.err


def test_rings_with_a_camera_calibrated_in_the_same_command(tmp_path, starter_store):
    rng = np.random.default_rng(1)
    wavelength = electron_wavelength(200.0)

    def rings(a, n):
        radius = ring_radius_from_d(a / np.sqrt(np.array(n)), wavelength, 700.0)
        return radius * (1 + 1e-3 * rng.normal(size=len(n)))

    film, unknown = tmp_path / "gold.csv", tmp_path / "unknown.csv"
    diameters = "\n".join(f"{2 * r:.4f}" for r in rings(4.0786, [3, 4, 8, 11, 12]))
    film.write_text(f"# energy_kV: 200\nring_diameter_mm\n{diameters}\n")
    unknown.write_text("ring_radius_mm\n" + "\n".join(f"{r:.4f}" for r in rings(4.2112, [3, 4, 8, 11, 12])))
    words = (
        "refine",
        unknown,
        "--calibration-rings",
        film,
        "--calibration-phase",
        "gold",
        "--lattice",
        "F",
        "--a",
        "4.2",
    )
    found = run(*words, "--json", store=starter_store).json
    assert abs(found["a_angstrom"] - 4.2112) < 3 * found["a_esd_angstrom"] < 0.06
    assert 0.9e-3 < found["a_esd_parts"]["scale"] / found["a_angstrom"] < 3e-3
    assert any("rings of gold" in caution for caution in found["cautions"])


def test_numbers_in_the_document_are_finite_or_null(listed):
    text = run("refine", listed, "--lattice", "F", "--a", "4.05", "--json").out
    assert "NaN" not in text and "Infinity" not in text
    assert json.loads(text)["a_esd_parts"]["scale"] is None
