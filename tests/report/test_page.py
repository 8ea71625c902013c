"""The report page as text: its order, what it holds, and that nothing a user names gets out of its place."""

from __future__ import annotations

import base64
import hashlib
import re
from functools import cache
from html.parser import HTMLParser

import pytest
from report.samples import (
    HOSTILE,
    d_only_match,
    foreign_script_match,
    hostile_match,
    nothing_match,
    two_phase_match,
    unlisted_match,
)

from phasedb.report.axis_figure import Entry
from phasedb.report.document import match_document
from phasedb.report.page import PageFacts, ReportDetails, report_page
from phasedb.report.stored import match_from_document
from phasedb.report.table import printable

MAKERS = [two_phase_match, d_only_match, unlisted_match, nothing_match, hostile_match, foreign_script_match]
FACTS = PageFacts("2026-12-01", [Entry("x", "F", 4.0)], history_head="ab" * 32)


def page(match, details=None, facts=FACTS):
    return report_page(match, details or ReportDetails(), facts)


@cache
def made(make):
    return page(make())


class Outline(HTMLParser):
    """Tags, attributes and visible text."""

    def __init__(self, text):
        super().__init__()
        self.tags, self.attributes, self.text, self.headings, self.inside = [], [], [], [], ""
        self.feed(text)

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.attributes.extend((tag, name, value or "") for name, value in attrs)
        self.inside = tag
        if tag == "h2":
            self.headings.append("")

    def handle_data(self, data):
        if self.inside == "h2":
            self.headings[-1] += data.strip()
        if self.inside not in ("script", "style"):
            self.text.append(data)


@pytest.mark.parametrize("make", MAKERS)
def test_sections_come_in_the_promised_order(make):
    assert Outline(made(make)).headings == [
        "Verdict",
        "Ledger",
        "Lattice-constant axis",
        "Lines",
        "Phases",
        "Settings and versions",
        "The test",
        "Cautions",
    ]


@pytest.mark.parametrize("make", MAKERS)
def test_nothing_is_fetched_and_the_page_is_small(make):
    text = made(make)
    assert len(text.encode()) < 2_000_000
    outside = set(re.findall(r"(?:https?:)?//[a-z0-9.-]+\.[a-z]+[^\"' >]*", text))
    assert outside <= {"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"}
    outline = Outline(text)
    assert not {"link", "img", "iframe", "object", "embed", "base", "form"} & set(outline.tags)
    assert not [a for a in outline.attributes if a[1] in ("src", "action", "srcset", "background")]
    assert all(a[2].startswith("#") for a in outline.attributes if a[1] in ("href", "xlink:href"))


def test_the_policy_lets_only_our_own_script_and_style_run():
    text = made(two_phase_match)
    policy = re.search(r'Content-Security-Policy" content="([^"]*)"', text)[1].replace("&#39;", "'")
    assert policy.startswith("default-src 'none'")
    scripts = re.findall(r"<script>(.*?)</script>", text, re.DOTALL)
    styles = re.findall(r"<style>(.*?)</style>", text, re.DOTALL)
    assert len(scripts) == len(styles) == 1
    for body, directive in ((scripts[0], "script-src"), (styles[0], "style-src-elem")):
        digest = base64.b64encode(hashlib.sha256(body.encode()).digest()).decode()
        assert f"{directive} 'sha256-{digest}'" in policy
    assert "unsafe-inline" not in policy.split("style-src-attr")[0]


def test_hostile_names_stay_text():
    outline = Outline(page(hostile_match(), ReportDetails(customer=HOSTILE, sample=HOSTILE)))
    assert outline.tags.count("script") == outline.tags.count("style") == 1
    assert "img" not in outline.tags
    assert not [a for a in outline.attributes if a[1].startswith("on")]
    shown = "".join(outline.text)
    assert shown.count(printable(HOSTILE)) > 10
    assert "{{7*7}}" in shown
    assert "49" not in re.findall(r"alert\(1\)</script>\"'&(\S{2})", shown)
    assert "\x1b" not in made(hostile_match)


def test_every_line_and_phase_has_its_numbers():
    match = two_phase_match()
    outline = Outline(made(two_phase_match))
    said = [value for tag, name, value in outline.attributes if name == "data-say"]
    for line in match.ledger:
        assert any(text.startswith(f"Line {line.line}: {line.position:.3f}°") for text in said)
    for phase in match.phases:
        assert any(f" {phase.name}, {phase.lattice_type}: probability" in text for text in said)


def test_what_a_test_report_needs_is_shown_and_what_is_blank_is_named():
    text = " ".join(
        " ".join(Outline(page(two_phase_match(), ReportDetails(customer="Nordkai"))).text).split()
    )
    assert "Customer Nordkai" in text
    named = text.split("usually needed in a test report: ")[1].split(".")[0]
    assert "customer" not in named
    for word in ("laboratory", "sample", "received on", "measured on", "instrument", "authorised by"):
        assert word in named


def test_fingerprints_versions_and_the_history_head_are_there():
    match = two_phase_match()
    text = "".join(Outline(made(two_phase_match)).text)
    for value in (
        match.library_fingerprint,
        match.measurement.sha256,
        "ab" * 32,
        "phasedb 0.1.0",
        "1.5405929 Å",
    ):
        assert value in text


def test_the_same_report_has_the_same_bytes_and_another_another_number():
    one, same = made(two_phase_match), page(two_phase_match())
    assert one == same
    number = re.compile(r"Report ([0-9a-f-]{14})")
    other = page(two_phase_match(), ReportDetails(customer="someone"))
    assert number.search(one)[1] != number.search(other)[1]
    assert one.count(number.search(one)[1]) == 2  # at the head and at the marked end


def test_a_saved_match_gives_the_same_page():
    match = two_phase_match()
    kept = match_from_document(match_document(match, with_axis=True))
    again = match_from_document(match_document(kept, with_axis=True))
    first = page(kept)
    assert first == page(again)
    ledger = re.compile(r'<table class="ledger">.*?</table>', re.DOTALL)
    assert ledger.search(first)[0] == ledger.search(made(two_phase_match))[0]


def test_without_its_axis_the_page_says_so():
    kept = match_from_document(match_document(two_phase_match()))
    assert "The curve was not kept" in page(kept)


def test_cautions_of_the_match_come_with_the_standing_ones():
    text = "".join(Outline(made(two_phase_match)).text)
    assert "Starter entries are drafts" in text
    assert "not proof" in text
    assert "local radiation rules" in text
