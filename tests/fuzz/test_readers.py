"""Readers of all that comes from outside, on good files broken at random: an answer or a clear error."""

from __future__ import annotations

import random
import signal
import warnings
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path
from types import FrameType

import pytest
from mutating import mutated
from running import run

from phasedb.errors import PhasedbError
from phasedb.library import Draft, Library, Source
from phasedb.library.exchange_cif import read_cif_rows
from phasedb.library.exchange_csv import read_csv
from phasedb.library.exchange_history import read_history
from phasedb.library.exchange_json import parse_document, read_phases
from phasedb.library.exchange_measurements import read_measurements
from phasedb.library.exchange_rows import BadRow, Candidate
from phasedb.measured.options import ReadOptions
from phasedb.measured.reading import read_peak_list
from phasedb.measured.scan import read_scan
from phasedb.measured.textfile import read_source

HANG_SECONDS = 30
"""Ten thousand times what a case takes: only a reader that never ends gets there."""

TEXT_PEAKS = b"""# radiation: Cu
# range: 20 100
# goniometer_radius_mm: 173
two_theta_deg,intensity,esd,fwhm_deg
28.442,100,0.003,0.09
47.303;55;0.004;0.1
56.123 30 0.01 0.11
"""
PLAIN_PEAKS = b"3.1355 100\n1.9201 55\n1.6375 30\n"
JSON_PEAKS = b"""{"schema": "phasedb.peaks/1", "unit": "two-theta", "wavelength_angstrom": 1.5406,
"range": [20, 90], "sample": "s",
"peaks": [{"position": 28.442, "intensity": 100, "esd": 0.003, "fwhm": 0.1}, {"position": 47.303}]}"""
CIF_PEAKS = b"""data_silicon
_diffrn_radiation_wavelength 1.5406
_pd_meas_2theta_range_min 20
_pd_meas_2theta_range_max 80
loop_
_pd_peak_2theta_centroid
_pd_peak_intensity
_pd_peak_width_2theta
28.442(3) 100 0.1
47.30 55 .
"""
TEXT_SCAN = b"# radiation: Cu\n" + b"".join(b"%.2f %d\n" % (20 + n / 20, 50 + n % 7) for n in range(120))
CIF_SCAN = (
    b"data_x\n_diffrn_radiation_wavelength 1.5406\nloop_\n_pd_meas_2theta_scan\n_pd_meas_counts_total\n"
    + b"".join(b"%.2f %d\n" % (20 + n / 20, 50 + n % 7) for n in range(80))
)
OPTIONS = (
    ReadOptions(),
    ReadOptions(unit="d"),
    ReadOptions(unit="q", wavelength_angstrom=0.2),
    ReadOptions(unit="ring", radiation="electron", energy_kev=200.0, camera_length_mm=680.0),
    ReadOptions(radiation="Co", measured_range=(20.0, 120.0)),
)
CASES = pytest.mark.parametrize(
    "cases", [pytest.param(700, id="short"), pytest.param(25_000, id="long", marks=pytest.mark.long)]
)


@pytest.fixture(scope="module")
def exports(tmp_path_factory: pytest.TempPathFactory) -> dict[str, bytes]:
    """A small library in all formats that the program writes."""
    folder = tmp_path_factory.mktemp("seeds")
    store = folder / "seed.sqlite"
    with Library.create(store, by="Ann", starter=False) as library:
        source = Source("Acta X (1990) 5", doi="10.1000/182", year=1990, a_angstrom=4.2)
        library.add(
            Draft(
                "our nitride", "TiN", "F", 4.2417, a_esd_angstrom=2e-4, structure_type="B1", sources=(source,)
            ),
            accept_warnings=True,
        )
        library.add(
            Draft(
                "=magnetite",
                "Fe3O4",
                "F",
                8.3958,
                structure_type="H1_1",
                temperature_k=298.0,
                remarks="'x\ny",
            ),
            accept_warnings=True,
        )
        library.add(Draft("Eisen \u03b1 \U0001f600", "Fe0.7Cr0.3", "I", 2.87, tags=("t",), aliases=("b",)))
        library.withdraw("=magnetite", reason="kX", replaced_by="our nitride")
    with Library.open(store, by="Bob", write=True) as library:
        library.check("our nitride")
    found = {}
    for suffix, words in (("csv", ()), ("cif", ()), ("json", ("--with-history",))):
        assert run("export", folder / f"seed.{suffix}", *words, store=store).code == 0
        found[suffix] = (folder / f"seed.{suffix}").read_bytes()
    return found


@contextmanager
def no_hang() -> Iterator[None]:
    def stop(number: int, frame: FrameType | None) -> None:
        raise TimeoutError("the reader hangs")

    if not hasattr(signal, "SIGALRM"):  # not on Windows
        yield
        return
    before = signal.signal(signal.SIGALRM, stop)
    signal.alarm(HANG_SECONDS)
    try:
        yield
    finally:
        signal.alarm(0)
        signal.signal(signal.SIGALRM, before)


def fuzz(
    seeds: list[bytes], others: list[bytes], cases: int, path: Path, read: Callable[[random.Random], None]
) -> None:
    """Read `cases` broken files; a failure says which case, and leaves its file in place."""
    answered = 0
    for case in range(cases):
        rng = random.Random(f"{path.suffix} {case}")
        path.write_bytes(mutated(rng.choice(seeds), others, rng))
        try:
            with no_hang():
                read(rng)
            answered += 1
        except PhasedbError as error:
            assert error.what, case
            assert "\x1b" not in str(error), case
        except BaseException as error:
            raise AssertionError(f"case {case} ({path}): {type(error).__name__}: {error}") from error
    assert 0.02 * cases < answered < cases  # neither all broken nor all whole


def judge(rows: Iterator[Candidate | BadRow]) -> None:
    for row in rows:
        assert isinstance(row, (Candidate, BadRow))
        if isinstance(row, BadRow):
            assert row.reason
        else:
            row.project(row.prepared.content)


@CASES
def test_tables(tmp_path: Path, exports: dict[str, bytes], cases: int) -> None:
    path = tmp_path / "case.csv"

    def read(rng: random.Random) -> None:
        judge(read_csv(read_source(path).text, "case.csv", []))

    fuzz([exports["csv"]], list(exports.values()), cases, path, read)


@CASES
def test_json(tmp_path: Path, exports: dict[str, bytes], cases: int) -> None:
    path = tmp_path / "case.json"
    start = exports["json"].index(b',\n"measurements"')
    short = exports["json"][:start] + b"}"

    def read(rng: random.Random) -> None:
        document = parse_document(read_source(path).text, "case.json")
        rows = list(read_phases(document, "case.json", []))
        judge(iter(rows))
        read_measurements(document, "case.json")
        if not any(isinstance(row, BadRow) for row in rows):
            read_history(document, "case.json", [row.entry for row in rows if row.entry is not None])

    fuzz([exports["json"], short, short], list(exports.values()), cases, path, read)


@CASES
def test_cif(tmp_path: Path, exports: dict[str, bytes], cases: int) -> None:
    path = tmp_path / "case.cif"
    blocks = [b"data_" + block for block in exports["cif"].split(b"data_") if block.strip()]

    def read(rng: random.Random) -> None:
        judge(read_cif_rows(read_source(path).text, "case.cif", []))

    fuzz([exports["cif"], *blocks], [exports["cif"], CIF_PEAKS], cases, path, read)


@CASES
def test_peak_lists(tmp_path: Path, exports: dict[str, bytes], cases: int) -> None:
    path = tmp_path / "case.txt"
    seeds = [TEXT_PEAKS, PLAIN_PEAKS, JSON_PEAKS, CIF_PEAKS]

    def read(rng: random.Random) -> None:
        peaks = read_peak_list(path, rng.choice(OPTIONS))
        assert 0 < len(peaks) <= 2000
        assert (peaks.d_angstrom > 0).all()

    fuzz(seeds, [*seeds, exports["csv"]], cases, path, read)


@CASES
def test_scans(tmp_path: Path, cases: int) -> None:
    path = tmp_path / "case.xy"
    seeds = [TEXT_SCAN, CIF_SCAN]

    def read(rng: random.Random) -> None:
        assert len(read_scan(path, rng.choice((OPTIONS[0], OPTIONS[4])))) > 0

    fuzz(seeds, [*seeds, TEXT_PEAKS], cases // 2, path, read)


def test_cases_that_were_found_once(tmp_path: Path, exports: dict[str, bytes]) -> None:
    """Blank lines before data cost a time exponential in their number; an endless number in a history."""
    path = tmp_path / "case.txt"
    for ending in (b"x", b"data_", b"28.4 100\n47.3 50\n"):
        path.write_bytes(b" \n\t\n# c\n" * 5000 + ending)
        for read in (lambda: read_peak_list(path, OPTIONS[4]), lambda: read_scan(path)):
            with no_hang(), suppress(PhasedbError):
                read()
    path = tmp_path / "case.json"
    path.write_bytes(exports["json"].replace(b'"a_angstrom":4.2417', b'"a_angstrom":1e400'))
    with pytest.raises(PhasedbError, match="smaller number"):
        parse_document(read_source(path).text, "case.json")


@pytest.mark.parametrize(
    "cases", [pytest.param(40, id="short"), pytest.param(1500, id="long", marks=pytest.mark.long)]
)
def test_whole_imports(tmp_path: Path, exports: dict[str, bytes], cases: int) -> None:
    """What a reader lets through, the store takes or refuses cleanly, and stays whole."""
    store = tmp_path / "lab.sqlite"
    assert run("init", "--empty", store=store).code == 0
    for case in range(cases):
        rng = random.Random(f"import {case}")
        suffix = rng.choice(list(exports))
        path = tmp_path / f"case.{suffix}"
        path.write_bytes(mutated(exports[suffix], list(exports.values()), rng))
        with no_hang(), warnings.catch_warnings():
            warnings.simplefilter("error")
            ran = run("import", path, "--skip-bad", "--json", store=store)
        assert ran.code in (0, 2), (case, path, ran.err)
        assert "unexpected fault" not in ran.err
        if case % 20 == 19:
            assert run("audit", store=store).code == 0, case
            out = tmp_path / "out.csv"
            assert run("export", out, store=store).code == 0, case
            with Library.open(store) as library:
                library.table()
