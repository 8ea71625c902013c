"""The public names: the list is sorted, complete, and everything in it loads."""

from __future__ import annotations

import inspect
import tomllib
from pathlib import Path

import pytest

import phasedb


def test_the_list_is_sorted_and_is_what_the_package_shows():
    assert phasedb.__all__ == sorted(phasedb.__all__)
    assert set(dir(phasedb)) == {*phasedb.__all__, "__version__"}


@pytest.mark.parametrize("name", phasedb.__all__)
def test_every_public_name_loads_and_says_what_it_is(name):
    assert inspect.getdoc(getattr(phasedb, name))


def test_other_names_are_an_attribute_error():
    with pytest.raises(AttributeError, match="no attribute 'Librarian'"):
        phasedb.Librarian  # noqa: B018


def test_the_version_is_said_once_for_all():
    project = tomllib.loads((Path(__file__).parents[1] / "pyproject.toml").read_text(encoding="utf-8"))
    assert project["project"]["version"] == phasedb.__version__


@pytest.mark.parametrize("name", ["index", "lines", "match", "refine"])
def test_arguments_after_the_first_two_are_keywords(name):
    parameters = list(inspect.signature(getattr(phasedb, name)).parameters.values())
    positional = [p for p in parameters if p.kind is not inspect.Parameter.KEYWORD_ONLY]
    assert len(positional) <= 3
