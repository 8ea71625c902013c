"""The public API, and how its results show themselves in a notebook."""

from __future__ import annotations

import subprocess
import sys
from html.parser import HTMLParser

import pytest
from report.samples import (
    HOSTILE,
    d_only_match,
    hostile_match,
    nothing_match,
    two_phase_match,
    unlisted_match,
)

import phasedb
from phasedb.errors import InputError
from phasedb.report.notebook import match_html


class Tags(HTMLParser):
    def __init__(self, text):
        super().__init__()
        self.tags = []
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        assert attrs == []


ALLOWED = {"p", "table", "thead", "tbody", "tr", "th", "td"}


def test_all_names_import_and_are_sorted():
    assert phasedb.__all__ == sorted(phasedb.__all__)
    for name in phasedb.__all__:
        assert getattr(phasedb, name) is not None
    with pytest.raises(AttributeError):
        phasedb.no_such_name  # noqa: B018
    assert {"Library", "PeakList", "match", "index", "refine", "lines"} <= set(phasedb.__all__)


def test_importing_the_package_is_light():
    code = (
        "import sys, phasedb; print(sorted({m.partition('.')[0] for m in sys.modules} & {'numpy', 'click'}))"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"


@pytest.mark.parametrize(
    "make", [two_phase_match, d_only_match, unlisted_match, nothing_match, hostile_match]
)
def test_a_match_shows_as_plain_tables(make):
    assert set(Tags(match_html(make())).tags) <= ALLOWED


def test_results_show_themselves():
    assert phasedb.Match is not None
    assert "titanium nitride" in two_phase_match()._repr_html_()


def peaks(tmp_path, name="silver.csv"):
    path = tmp_path / name
    path.write_text(
        "# radiation: Cu\n# range: 30 100\ntwo_theta_deg,intensity\n"
        "38.11,100\n44.30,47\n64.43,24\n77.39,26\n81.53,8\n97.87,4\n"
    )
    return phasedb.PeakList.read(path)


def test_peaks_index_refine_and_lines_show_themselves(tmp_path):
    read = peaks(tmp_path)
    phase = phasedb.Phase("silver", "Ag", "F", 4.0862)
    shown = [
        read._repr_html_(),
        phasedb.index(read)._repr_html_(),
        phasedb.refine(read, phase)._repr_html_(),
        phasedb.lines(phase)._repr_html_(),
    ]
    for html in shown:
        assert set(Tags(html).tags) <= ALLOWED
        assert html.count("<tr>") > 1
    assert "silver.csv" in shown[0]
    assert "a = 4.08" in shown[2]


def test_refine_takes_a_phase_or_a_cell_but_not_both(tmp_path):
    read = peaks(tmp_path)
    phase = phasedb.Phase("silver", "Ag", "F", 4.0862)
    from_cell = phasedb.refine(read, lattice="F", a="0.409 nm")
    assert from_cell.a_angstrom == pytest.approx(phasedb.refine(read, phase).a_angstrom, abs=1e-4)
    for wrong in ({}, {"lattice": "F"}, {"phase": phase, "lattice": "F", "a": "4.1"}):
        with pytest.raises(InputError):
            phasedb.refine(read, **wrong)


def test_names_are_escaped():
    html = match_html(hostile_match())
    assert HOSTILE not in html
    assert "&lt;script&gt;" in html
