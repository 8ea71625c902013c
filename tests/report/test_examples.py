"""The examples in the docstrings of what is read and looked at."""

from __future__ import annotations

import doctest
import importlib
import pkgutil

import pytest

import phasedb.report

NAMES = [f"phasedb.report.{module.name}" for module in pkgutil.iter_modules(phasedb.report.__path__)]
NAMES += ["phasedb.cli.completion", "phasedb.cli.progress"]


@pytest.mark.parametrize("name", NAMES)
def test_examples_of(name):
    assert doctest.testmod(importlib.import_module(name)).failed == 0
