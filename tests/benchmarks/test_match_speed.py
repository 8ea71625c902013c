"""Speed of whole commands against the imports they cannot do without (ratios, medians, one run)."""

from __future__ import annotations

from pathlib import Path

import pytest
from benchmarks.timing import median_ratio, phasedb, python, seconds, write_two_phase_list

from phasedb.cli import COMMANDS

pytestmark = pytest.mark.benchmark


def test_whole_match_command(tmp_path: Path) -> None:
    store = str(tmp_path / "library.sqlite")
    seconds(phasedb("--store", store, "init"))
    peaks = str(write_two_phase_list(tmp_path / "sample.csv"))
    ratio = median_ratio(
        phasedb("--store", store, "match", peaks, "--json"),
        python("import numpy, scipy.optimize, sqlalchemy, click"),
    )
    print(f"match / imports = {ratio:.2f}")
    assert ratio < 2.5


@pytest.mark.parametrize("command", ["", *COMMANDS])
def test_help_is_light(command: str) -> None:
    arguments = [command, "--help"] if command else ["--help"]
    ratio = median_ratio(phasedb(*arguments), python("import click"), rounds=7)
    print(f"{command or 'phasedb'} --help / import click = {ratio:.2f}")
    assert ratio < 3.0
