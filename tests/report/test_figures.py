"""Figures: every line drawn and findable, the same bytes each time, marks that differ without colour."""

from __future__ import annotations

import itertools
import re
import struct
from xml.etree import ElementTree

import numpy as np
import pytest
from report.samples import (
    d_only_match,
    foreign_script_match,
    hostile_match,
    nothing_match,
    two_phase_match,
    unlisted_match,
)

from phasedb.errors import InputError
from phasedb.report import drawing
from phasedb.report.axis_figure import Entry, axis_figure
from phasedb.report.drawing import NARROW, WIDE
from phasedb.report.figures import (
    leading_claim,
    lines_figure,
    match_figure,
    named_places,
    phase_marks,
)
from phasedb.report.inline_svg import inline_svg
from phasedb.report.matrix import matrix_figure

MAKERS = [two_phase_match, d_only_match, unlisted_match, nothing_match, hostile_match, foreign_script_match]


@pytest.mark.parametrize("make", MAKERS)
@pytest.mark.parametrize("size", [WIDE, NARROW])
def test_every_line_has_a_stick_and_every_claimed_one_a_mark_and_a_deviation(make, size):
    match = make()
    with drawing.look():
        root = ElementTree.fromstring(inline_svg(lines_figure(match, size), "x", "t"))
    handles = [group.get("data-line") for group in root.iter() if group.get("data-line")]
    for line in match.ledger:
        claimed = leading_claim(line) is not None
        assert handles.count(str(line.line)) >= (3 if claimed else 1)


@pytest.mark.parametrize("kind", ["svg", "png", "pdf"])
def test_files_are_of_their_kind_and_the_same_each_time(tmp_path, kind):
    paths = [tmp_path / f"{name}.{kind}" for name in "ab"]
    for path in paths:
        match_figure(two_phase_match(), path)
    first, second = (path.read_bytes() for path in paths)
    assert first == second
    start = {"svg": b"<?xml", "png": b"\x89PNG", "pdf": b"%PDF"}[kind]
    assert first.startswith(start)
    assert b"matplotlib" not in first.replace(b"fontfamily", b"").lower() or kind != "png"
    if kind == "png":
        width, height = struct.unpack(">II", first[16:24])
        assert width > 1500
        assert height > 900


def test_an_unknown_ending_is_refused_before_anything_is_drawn(tmp_path):
    with pytest.raises(InputError, match="figure"):
        match_figure(two_phase_match(), tmp_path / "lines.bmp")
    assert list(tmp_path.iterdir()) == []


def test_a_place_that_cannot_be_written_is_bad_input(tmp_path):
    with pytest.raises(InputError, match="cannot write"):
        match_figure(two_phase_match(), tmp_path / "absent" / "lines.svg")


def test_axis_labels_have_units(tmp_path):
    match_figure(two_phase_match(), tmp_path / "a.svg")
    match_figure(d_only_match(), tmp_path / "d.svg")
    assert "2θ, degrees" in (tmp_path / "a.svg").read_text()
    assert "d, Å" in (tmp_path / "d.svg").read_text()


def test_the_axis_shows_each_lattice_type_the_entries_and_the_named_places():
    match = two_phase_match()
    entries = [Entry("a", "F", 4.0), Entry("b", "F", 5.0), Entry("c", "I", 3.0)]
    with drawing.look():
        svg = inline_svg(axis_figure(match.axis, entries, named_places(match)), "x", "t")
    root = ElementTree.fromstring(svg)
    text = " ".join("".join(node.itertext()) for node in root.iter() if node.tag.endswith("text"))
    for word in ("P, primitive", "I, body-centred", "F, face-centred", "titanium nitride", "alpha iron", "Å"):
        assert word in text
    ids = {node.get("id") for node in root.iter()}
    assert {"x-curve-P", "x-curve-I", "x-curve-F", "x-entries-F"} <= ids


def test_ids_are_unique_and_belong_to_the_page():
    match = two_phase_match()
    with drawing.look():
        parts = [inline_svg(lines_figure(match), "one", "t"), inline_svg(lines_figure(match), "two", "t")]
    ids = re.findall(r'\bid="([^"]*)"', "".join(parts))
    assert len(ids) == len(set(ids))
    for svg, prefix in zip(parts, ("one", "two"), strict=True):
        for target in re.findall(r'(?:href="#|url\(#)([^")]*)', svg):
            assert f'id="{target}"' in svg
            assert target.startswith(prefix)


def test_nothing_outside_is_named_but_namespaces():
    with drawing.look():
        svg = inline_svg(lines_figure(hostile_match()), "x", "t")
    outside = set(re.findall(r"https?://[^\"' >]*", svg))
    assert outside <= {"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"}
    assert "<script" not in svg


# Severe colour vision deficiencies as linear maps of linear RGB: Machado, Oliveira & Fernandes, IEEE Trans.
# Vis. Comput. Graph. 15 (2009) 1291, severity 1.0 (from memory).
MACHADO = {
    "protan": [[0.1523, 1.0526, -0.2049], [0.1145, 0.7863, 0.0992], [-0.0039, -0.0481, 1.0520]],
    "deutan": [[0.3673, 0.8606, -0.2280], [0.2801, 0.6725, 0.0474], [-0.0118, 0.0429, 0.9689]],
    "tritan": [[1.2555, -0.0767, -0.1788], [-0.0784, 0.9308, 0.1476], [0.0047, 0.6914, 0.3039]],
}  # fmt: skip


def _linear(colour):
    value = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255
    return np.where(value <= 0.04045, value / 12.92, ((value + 0.055) / 1.055) ** 2.4)


def _lab(linear):
    """CIE L*a*b* (D65) of linear sRGB: IEC 61966-2-1 matrix (from memory)."""
    matrix = [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]
    xyz = np.clip(np.array(matrix) @ np.clip(linear, 0, 1), 1e-6, None) / np.array([0.9505, 1.0, 1.089])
    f = np.where(xyz > 0.008856, np.cbrt(xyz), 7.787 * xyz + 16 / 116)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


@pytest.mark.parametrize("kind", ["normal", *MACHADO])
def test_colours_differ_for_every_kind_of_eye(kind):
    matrix = np.eye(3) if kind == "normal" else np.array(MACHADO[kind])
    seen = [_lab(matrix @ _linear(mark.colour)) for mark in drawing.MARKS]
    least = min(np.linalg.norm(a - b) for a, b in itertools.combinations(seen[:4], 2))
    assert least > 12  # five times what is just noticeable (2.3): common practice, no source


def test_marks_differ_without_colour():
    marks = [drawing.mark_for(index) for index in range(20)]
    assert len({mark.letter for mark in marks}) == 20
    assert len({mark.shape for mark in drawing.MARKS}) == len(drawing.MARKS)


def test_each_name_has_one_mark_and_the_unlisted_has_its_own():
    marks = phase_marks(unlisted_match())
    assert [mark.letter for mark in marks.values()] == ["U"]
    letters = [mark.letter for mark in phase_marks(two_phase_match()).values()]
    assert letters == ["A", "B"]


def test_a_users_own_settings_do_not_show(tmp_path):
    import matplotlib as mpl

    match_figure(two_phase_match(), tmp_path / "a.svg")
    with mpl.rc_context({"lines.linewidth": 9, "font.size": 30, "svg.fonttype": "path"}):
        match_figure(two_phase_match(), tmp_path / "b.svg")
        assert mpl.rcParams["lines.linewidth"] == 9
    assert (tmp_path / "a.svg").read_bytes() == (tmp_path / "b.svg").read_bytes()


@pytest.mark.parametrize("count", [1, 5, 300])
def test_the_matrix_of_samples_against_phases(tmp_path, count):
    cells = [(f"list {i}.csv", {"silver": 0.9, f"phase {i % 60}": 0.4}) for i in range(count)]
    matrix_figure(cells, tmp_path / "m.svg")
    text = (tmp_path / "m.svg").read_text()
    assert "silver" in text
    assert "probability" in text
