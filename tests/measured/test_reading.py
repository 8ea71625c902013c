"""Peak lists from text, JSON and CIF: what is read, and where a wrong list is wrong."""

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.crystal.radiation import EMISSION_LINES
from phasedb.errors import InputError
from phasedb.measured.options import ReadOptions
from phasedb.measured.peaklist import PeakList
from phasedb.measured.reading import peak_list_from_text, read_peak_list
from phasedb.measured.textfile import SourceText

CU = "# radiation: Cu\n"


@pytest.fixture
def read(tmp_path):
    def reader(content, **options):
        path = tmp_path / "list.csv"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return PeakList.read(path, **options)

    return reader


@pytest.fixture
def error_of(read):
    def failing(content, **options):
        with pytest.raises(InputError) as caught:
            read(content, **options)
        return caught.value

    return failing


# --- text: what is read ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    "text",
    [
        "two_theta_deg,intensity\n28.44,100\n47.30,55.5\n",
        "28.44,100\n47.30,55.5\n",
        "28.44;100\n47.30;55.5\n",
        "28,44;100\n47,30;55,5\n",
        "28,44 100\n47,30 55,5\n",
        "28,44\t100\n47,30\t55,5\n",
        "28.44\t100\n47.30\t55.5\n",
        "  28.44   100\n\n 47.30   55.5  \n",
        '"28.44","100"\n"47.30","55.5"\n',
        '"28,44","100"\n"47,30","55,5"\n',
        "28.44, 100\n47.30, 55.5\n",
        "28.44;100;\n47.30;55.5;\n",
        "TWO_THETA_DEG;Intensity\n2.844e1;1e2\n47.30;55.5\n",
        "47.30 55.5\n28.44 100\n",
    ],
)
@pytest.mark.parametrize("ending", ["\n", "\r\n", "\r"])
@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be"])
def test_one_list_in_many_spellings(text, ending, encoding, read):
    peaks = read((CU + text).replace("\n", ending).encode(encoding))
    assert peaks.position.tolist() == [28.44, 47.30]
    assert peaks.intensity.tolist() == [100.0, 55.5]
    assert peaks.unit == "two-theta" and peaks.radiation.name == "Cu"


def test_the_header_sets_every_fact(read):
    peaks = read(
        "# a free remark: with a colon\n# wavelength_angstrom: 1,5406\n# range: 20 to 80\n"
        "# goniometer_radius_mm: 217.5\n# temperature_K: 295\n# sample: blade 17\n28.44\n"
    )
    assert peaks.radiation.wavelength_angstrom == 1.5406 and peaks.radiation.anode == "Cu"
    assert (peaks.range_low, peaks.range_high, peaks.range_assumed) == (20, 80, False)
    assert (peaks.goniometer_radius_mm, peaks.temperature_k, peaks.sample) == (217.5, 295, "blade 17")


@pytest.mark.parametrize("text", ["20 80", "20,80", "20, 80", "20;80", "20 to 80", "20,0 80,0"])
def test_a_range_in_many_spellings(text, read):
    peaks = read(f"{CU}# range: {text}\n28.44\n")
    assert (peaks.range_low, peaks.range_high) == (20, 80)


def test_options_stand_above_the_header(read):
    text = "# radiation: Co\n# range: 10 90\n# temperature_K: 300\n30.0\n"
    peaks = read(text, radiation="Mo", measured_range=(5.0, 60.0), temperature_k=77.0)
    assert peaks.radiation.name == "Mo"
    assert (peaks.range_low, peaks.range_high, peaks.temperature_k) == (5, 60, 77)


def test_an_option_for_the_wavelength_hides_the_header_s_radiation(read):
    assert read("# radiation: Co\n30.0\n", wavelength_angstrom=1.5406).radiation.anode == "Cu"
    assert read("# wavelength_angstrom: 1.54\n30.0\n", radiation="Co").radiation.anode == "Co"


def test_columns_are_found_by_name(read):
    peaks = read(CU + "remark,fwhm_deg,intensity,two_theta_deg,esd\nweak,0.1,7,30.0,0.01\n,0.2,9,40.0,\n")
    assert peaks.position.tolist() == [30, 40] and peaks.intensity.tolist() == [7, 9]
    assert peaks.fwhm.tolist() == [0.1, 0.2]
    assert peaks.esd[0] == 0.01 and np.isnan(peaks.esd[1])
    assert "columns ignored: remark" in peaks.notes


def test_without_names_the_columns_are_position_intensity_esd_fwhm(read):
    peaks = read(CU + "30.0 7 0.01 0.1\n")
    assert (peaks.intensity[0], peaks.esd[0], peaks.fwhm[0]) == (7, 0.01, 0.1)


@pytest.mark.parametrize(
    ("column", "unit"),
    [
        ("d_angstrom", "d"),
        ("q_per_angstrom", "q"),
        ("two_theta_deg", "two-theta"),
        ("ring_radius_mm", "ring"),
    ],
)
def test_the_column_name_tells_the_unit(column, unit, read):
    facts = "# camera_constant_mm_angstrom: 20\n" if unit == "ring" else ""
    assert read(f"{CU}{facts}{column}\n3.0\n").unit == unit


def test_a_width_in_degrees_stays_in_degrees_beside_d(read):
    assert read(CU + "d_angstrom,fwhm_deg\n3.0,0.1\n").fwhm.tolist() == [0.1]
    bare = read("d_angstrom,fwhm_deg\n3.0,0.1\n")
    assert bare.fwhm is None and any("widths are in degrees" in note for note in bare.notes)


def test_ring_diameters_are_halved_with_their_esds_and_range(read):
    text = "# camera_constant_mm_angstrom: 20\n# range: 10 60\nring_diameter_mm,esd\n20.0,0.2\n"
    peaks = read(text)
    assert (peaks.position[0], peaks.d_angstrom[0]) == (10.0, 2.0)
    assert peaks.esd[0] == pytest.approx(0.01)
    assert (peaks.range_low, peaks.range_high) == (5, 30)


def test_two_position_columns_can_be_chosen_from(read):
    text = CU + "two_theta_deg,d_angstrom\n30.0,2.9763\n"
    assert read(text, unit="d").unit == "d"
    assert read(text, unit="two-theta").position[0] == 30.0


def test_a_list_without_names_needs_a_unit_unless_there_is_a_wavelength(read, error_of):
    assert "unit of the positions" in error_of("2.5 100\n").what
    assert read("2.5 100\n", unit="d").unit == "d"
    assert read("25 100\n", radiation="Cu").unit == "two-theta"


def test_latin_1_is_read_with_a_note(read):
    peaks = read(b"# radiation: Cu\n# sample: \xc9tain\n30.0\n")
    assert peaks.sample == "Étain"
    assert any("Latin-1" in note for note in peaks.notes)


def test_electrons_need_only_their_energy(read):
    peaks = read("# energy_kV: 200\n# camera_length_mm: 700\nring_radius_mm\n10\n")
    assert peaks.radiation.name == "electron"
    assert peaks.radiation.wavelength_angstrom == pytest.approx(0.025079, abs=1e-6)


def test_a_list_keeps_the_hash_of_its_bytes(tmp_path):
    import hashlib

    path = tmp_path / "list.txt"
    path.write_bytes(b"# radiation: Cu\r\n30\r\n")
    assert read_peak_list(path).sha256 == hashlib.sha256(path.read_bytes()).hexdigest()


@given(
    st.lists(
        st.tuples(st.floats(5, 170), st.floats(1e-3, 1e6)),
        min_size=1,
        max_size=40,
        unique_by=lambda p: round(p[0], 1),
    ),
    st.sampled_from([",", ";", "\t", " "]),
    st.booleans(),
)
def test_what_is_written_is_read(rows, delimiter, comma):
    comma = comma and delimiter != ","
    lines = [f"{x!r}{delimiter}{y!r}" for x, y in rows]
    body = "\n".join(line.replace(".", ",") if comma else line for line in lines)
    text = f"two_theta_deg{delimiter}intensity\n{body}\n"
    peaks = peak_list_from_text(SourceText(text, "x", ""), ReadOptions(radiation="Cu"))
    expected = sorted(rows)
    assert peaks.position.tolist() == [x for x, _ in expected]
    assert peaks.intensity.tolist() == [y for _, y in expected]


# --- text: what is wrong ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("body", "place", "says"),
    [
        ("two_theta_deg,intensity\n28.4,100\n47.x,20\n", ":4:1", "read '47.x', expected a finite number"),
        ("28.4 100\n47.3 strong\n", ":3:6", "read 'strong'"),
        ("28.4 100\nnan 4\n", ":3:1", "read 'nan'"),
        ("28.4 100\n47.3 inf\n", ":3:6", "read 'inf'"),
        ("28.4 100\n47.3 -4\n", ":3:6", "0 or above"),
        ("28.4;100\n-47.3;4\n", ":3:1", "above 0"),
        ("28.4,100\n0,4\n", ":3:1", "above 0"),
        ("28.4,100\n180,4\n", ":3:1", "below 180"),
        ("28.4 1 2 3 4\n", ":2:12", "'4' the first too many"),
        ("two_theta_deg,intensity\n28.4,1,9\n", ":3:8", "'9' the first too many"),
        ("two_theta_deg,intensity\n,5\n", ":3:1", "no position"),
        ("angle,counts\n28.4,100\n", ":2:1", "read 'angle'"),
        ("two_theta_deg,d_angstrom\n28.4,3.1\n", ":2:15", "two position columns"),
        ("two_theta_deg,intensity,intensity\n28.4,3,4\n", ":2:25", "two columns are called"),
        ("28,44\n47,30\n", ":2:3", "the comma may be"),
        ("28,44, 100,5\n47,30, 50,0\n", ":2:3", "the comma may be"),
        ("28.44;1,000\n", ":2:7", "decimal sign"),
        ("# range: 90 20\n28.4\n", ":2", "two numbers"),
        ("# range: 20\n28.4\n", ":2", "two numbers"),
        ("# range: 40 90\n28.4\n", ":3:1", "outside the stated range"),
        ("# radiation: Co\n28.4\n", ":2", "given twice"),
        ("# temperature_K: warm\n28.4\n", ":2", "read 'warm'"),
        ("# temperature_K: -5\n28.4\n", ":2", "above 0"),
        ("# goniometer_radius_mm: 0\n28.4\n", ":2", "above 0"),
        ("d_angstrom\n0.77\n", ":3:1", "half the wavelength"),
    ],
)
def test_errors_say_where_and_what(body, place, says, error_of):
    error = error_of(CU + body)
    assert error.where.endswith("list.csv" + place)
    assert says in error.what
    assert error.hint


@pytest.mark.parametrize(
    ("content", "says"),
    [
        (b"", "empty"),
        (b" \n\t\n", "empty"),
        (b"two_theta_deg,intensity\n", "header row but no lines"),
        (b"# radiation: Cu\n", "comments but no lines"),
        (bytes(range(256)) * 20, "binary"),
        (b"\x89PNG\r\n\x1a\n\0\0\0\rIHDR", "binary"),
        (b"two_theta_deg\n30\n", "need a wavelength"),
        (b"# radiation: Zz\n30\n", "'Zz' is not known"),
        (b"# radiation: electron\nring_radius_mm\n10\n", "electron energy"),
        (b"# radiation: Co\n# wavelength_angstrom: 1.5406\n30\n", "does not belong"),
        (b"# wavelength_angstrom: 0.0015\n30\n", "wavelength 0.0015"),
        (
            b"# radiation: Cu\n" + b"".join(b"%.4f 1\n" % (10 + i * 1e-3) for i in range(100_000)),
            "100000 lines",
        ),
    ],
)
def test_what_is_no_list(content, says, error_of):
    assert says in error_of(content).what


def test_a_long_list_is_a_scan(error_of):
    error = error_of(CU + "".join(f"{10 + i * 0.01:.2f} 5\n" for i in range(2001)))
    assert "phasedb peaks" in error.hint


@pytest.mark.parametrize("path", ["missing.csv", ".", "a\0b"])
def test_what_cannot_be_opened(path, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(InputError) as caught:
        PeakList.read(path)
    assert caught.value.exit_code == 2


@pytest.mark.parametrize(
    ("options", "says"),
    [
        ({"goniometer_radius_mm": -1.0}, "goniometer radius"),
        ({"temperature_k": float("nan")}, "temperature"),
        ({"measured_range": (90.0, 20.0)}, "lower first"),
        ({"unit": "parsec"}, "'parsec'"),
        ({"radiation": "Xx"}, "'Xx'"),
        ({"wavelength_angstrom": 99.0}, "wavelength"),
    ],
)
def test_bad_options_are_errors(options, says, error_of):
    assert says in error_of(CU + "30\n", **options).what


@given(st.binary(max_size=300))
def test_any_bytes_give_a_list_or_our_own_error(content):
    import tempfile
    from pathlib import Path

    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder) / "x"
        path.write_bytes(content)
        try:
            assert len(PeakList.read(path, radiation="Cu")) > 0
        except InputError as error:
            assert error.what


@given(st.text(alphabet="0123456789.,;\t -+e#:\ndtwo_hangsrmi{}[]\"'", max_size=120))
def test_any_text_gives_a_list_or_our_own_error(text):
    try:
        peaks = peak_list_from_text(SourceText(text, "x", ""), ReadOptions(radiation="Cu"))
    except InputError:
        return
    assert np.isfinite(peaks.d_angstrom).all() and np.all(np.diff(peaks.d_angstrom) < 0)


# --- JSON ------------------------------------------------------------------------------------------


def document(**changes):
    return json.dumps(
        {
            "schema": "phasedb.peaks/1",
            "unit": "two-theta",
            "wavelength_angstrom": 1.5406,
            "range": [20, 80],
            "peaks": [
                {"position": 28.44, "intensity": 100, "esd": 0.01, "fwhm": 0.1},
                {"position": 47.3, "intensity": 55.5, "esd": None},
            ],
            **changes,
        }
    )


def test_a_json_list(read):
    peaks = read(document(sample="x", temperature_K=295))
    assert peaks.position.tolist() == [28.44, 47.3] and peaks.intensity.tolist() == [100, 55.5]
    assert peaks.esd[0] == 0.01 and np.isnan(peaks.esd[1])
    assert (peaks.range_low, peaks.range_high) == (20, 80)
    assert (peaks.sample, peaks.temperature_k) == ("x", 295)
    assert peaks.notes == ()


def test_json_is_overridden_like_text(read):
    assert read(document(), radiation="Co").radiation.name == "Co"


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ('{"schema":', "not valid JSON"),
        ("[1, 2]", "one JSON object"),
        (document(schema="other/2"), "schema 'other/2'"),
        (document(unit="parsec"), "unit 'parsec'"),
        (document(peaks=[]), "no lines"),
        (document(peaks=[5]), "expected an object"),
        (document(peaks=[{"intensity": 5}]), "position"),
        (document(peaks=[{"position": "28.4"}]), "'28.4'"),
        (document(peaks=[{"position": True}]), "True"),
        (document(peaks=[{"position": 28.4, "esd": [1]}]), "esd"),
        (document(range=[80, 20]), "two numbers"),
        (document(wavelength_angstrom="red"), "red"),
        ('{"schema":"phasedb.peaks/1","unit":"d","peaks":[{"position":NaN}]}', "NaN"),
        ('{"schema":"phasedb.peaks/1","unit":"d","peaks":[{"position":1e999}]}', "inf"),
        ("[" * 100_000, "not usable JSON"),
        ('{"schema":"phasedb.peaks/1","unit":"d","peaks":[{"position":1' + "0" * 5000 + "}]}", "not usable"),
    ],
)
def test_bad_json(text, says, error_of):
    assert says in error_of(text).what


def test_json_errors_name_line_and_column(error_of):
    assert error_of('{"schema": "phasedb.peaks/1",\n "unit": }').where.endswith("list.csv:2:10")


# --- CIF -------------------------------------------------------------------------------------------

CIF = """data_silicon
_diffrn_radiation_wavelength 1.5406
_pd_meas_2theta_range_min 20
_pd_meas_2theta_range_max 80
_diffrn_ambient_temperature 295
loop_
_pd_peak_2theta_centroid
_pd_peak_intensity
_pd_peak_width_2theta
28.442(3) 100 0.1
47.30 55 .
"""


def test_a_cif_list(read):
    peaks = read(CIF)
    assert peaks.position.tolist() == [28.442, 47.3] and peaks.intensity.tolist() == [100, 55]
    assert peaks.esd[0] == pytest.approx(0.003) and np.isnan(peaks.esd[1])
    assert (peaks.range_low, peaks.range_high, peaks.temperature_k) == (20, 80, 295)


def test_the_dotted_names_of_the_newer_dictionary(read):
    text = CIF.replace("_pd_peak_", "_pd_peak.").replace("_pd_peak.2theta_c", "_pd_peak.2theta_c")
    assert read(text).position.tolist() == [28.442, 47.3]


def test_d_spacings_in_a_cif(read):
    peaks = read("data_x\nloop_\n_pd_peak_d_spacing\n3.1355(2)\n1.9201\n")
    assert peaks.unit == "d" and peaks.esd[0] == pytest.approx(0.0002 / 3.1355)


def test_a_cif_that_lists_both_lines_of_the_doublet_is_a_doublet(read):
    lines = EMISSION_LINES["Cu"]
    loop = f"loop_\n_diffrn_radiation_wavelength\n{lines.alpha1}\n{lines.alpha2}\n"
    peaks = read(CIF.replace("_diffrn_radiation_wavelength 1.5406\n", loop))
    assert (peaks.radiation.name, peaks.radiation.convention) == ("Cu", "doublet")


@pytest.mark.parametrize(
    ("text", "says"),
    [
        ("data_x\n_cell_length_a 5.43\n", "no data block lists peaks"),
        ("data_x\nloop_\n_pd_peak_d_spacing\n_pd_peak_intensity\n3.1\n", "not valid CIF"),
        ("data_x\nloop_\n_pd_peak_d_spacing\nabc\n", "read 'abc'"),
        ("data_x\nloop_\n_pd_peak_d_spacing\n?\n", "finite"),
    ],
)
def test_bad_cif(text, says, error_of):
    error = error_of(text)
    assert says in error.what and "list.csv" in error.where
