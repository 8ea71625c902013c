"""The README keeps its word: its commands run, its output is real, its lists are complete."""

from __future__ import annotations

import doctest
import json
import re
import tomllib

import pytest
import readme

from phasedb.cli import COMMANDS
from phasedb.errors import ExitCode

TEXT = readme.README.read_text(encoding="utf-8")
DEVELOPERS = (readme.ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
_NUMBER = re.compile(r"[-+]?\d+(?:\.\d+)?(?:e-?\d+)?")
# What differs between any two runs: hashes, times, who and where.
_VOLATILE = re.compile(r"\b[0-9a-f]{12,64}\b|\d{4}-\d\d-\d\d[T ]\d\d:\d\d:\d\d(?:\.\d+Z| UTC)")
# A settled digit of a fit or a probability may move with a library's version; a changed answer may not.
_CLOSE = 0.05


def words(printed: str) -> list[str]:
    """Split output into words and numbers, whatever its line breaks."""
    return re.findall(r"[-+]?\d+(?:\.\d+)?(?:e-?\d+)?|[^\W\d]+|[^\w\s]", _VOLATILE.sub("~", printed))


def same(said: str, found: str) -> bool:
    """Tell whether two outputs say the same: equal words, numbers equal within 5 % or 0.05."""
    one, other = words(said), words(found)
    if len(one) != len(other):
        return False
    for a, b in zip(one, other, strict=True):
        if a != b and not (
            _NUMBER.fullmatch(a)
            and _NUMBER.fullmatch(b)
            and abs(float(a) - float(b)) <= _CLOSE * max(1.0, abs(float(a)))
        ):
            return False
    return True


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    place = tmp_path_factory.mktemp("newcomer")
    readme.lay_out(place)
    return place


@pytest.fixture(scope="module")
def played(folder):
    """What the README's console blocks print, played in order in a fresh folder."""
    return list(readme.play(TEXT, folder))


def test_the_readme_prints_what_its_commands_print(played):
    stale = [
        f"$ {step.command}\nREADME says:\n{step.printed}\nnow:\n{printed}"
        for block, outputs in played
        for step, printed in zip(block.steps, outputs, strict=True)
        if not same(step.printed, printed)
    ]
    assert not stale, "\n\n".join(["python tests/readme.py writes it anew", *stale])


def test_a_scan_leads_to_a_named_phase(played):
    steps = [
        (step.command, printed)
        for block, outputs in played
        if block.needs
        for step, printed in zip(block.steps, outputs, strict=True)
    ]
    if not steps:
        pytest.skip("the measured scan is not here: the README's second half was not played")
    before, after = [" ".join(out.split()) for command, out in steps if command.startswith("phasedb match")]
    assert before.startswith("This list holds a cubic phase that the library lacks")
    assert "P, a near 4.15" in before
    assert "This list holds our hexaboride (LaB6)" in after


def test_python_examples_run(played, folder, monkeypatch):
    monkeypatch.chdir(folder)
    [block] = [block for block in readme.blocks(TEXT) if block.kind == "python"]
    found = doctest.DocTestParser().get_doctest(block.body, {}, "README", "README.md", 0)
    assert found.examples
    assert doctest.DocTestRunner().run(found).failed == 0


def test_the_figure_of_the_readme_is_the_one_its_command_draws(played, folder):
    drawn = (folder / "knife.svg").read_text(encoding="utf-8")
    kept = readme.FIGURE.read_text(encoding="utf-8")
    assert "tests/readme_figure.svg" in TEXT
    labels = re.compile(r"<!-- (.*?) -->")
    assert same(" ".join(labels.findall(kept)), " ".join(labels.findall(drawn)))


def test_the_command_reference_is_fresh():
    assert readme.between(TEXT, "commands").split() == readme.reference().split(), (
        "run python tests/readme.py"
    )


@pytest.fixture(scope="module")
def documents(tmp_path_factory):
    return readme.documents(tmp_path_factory.mktemp("documents"))


def test_every_json_document_is_described_with_its_fields(documents):
    described = readme.between(TEXT, "schemas")
    for schema, (command, document) in documents.items():
        [line] = [line for line in described.splitlines() if line.startswith(f"* `{schema}` ({command})")]
        for field in document:
            assert field == "schema" or f'"{field}"' in line, (schema, field)


def test_every_schema_that_a_command_prints_is_run_here(documents):
    # Files of their own, read again by the program: not what a command prints.
    inner = {"phasedb.kept_peaks/1", "phasedb.journal/1", "phasedb.library/1"}
    written = {
        name
        for path in (readme.ROOT / "phasedb").rglob("*.py")
        for name in re.findall(r"phasedb\.[a-z_]+/\d+", path.read_text(encoding="utf-8"))
    }
    assert written - inner <= set(documents)


def test_no_document_holds_a_number_that_json_lacks(documents):
    for _, document in documents.values():
        json.dumps(document, allow_nan=False)


def test_every_exit_code_is_in_the_readme():
    codes = re.findall(r"^\| (\d+) \|", TEXT, re.MULTILINE)
    assert [int(code) for code in codes] == [int(code) for code in ExitCode]


def test_every_command_is_in_the_reference():
    described = readme.between(TEXT, "commands")
    for name in COMMANDS:
        assert f"Usage: phasedb {name} " in described


def test_the_readme_opens_with_the_job_and_two_commands():
    job, _, rest = TEXT.partition("\n\n")
    assert "\n" not in job
    assert len(job) > 300
    assert not job.startswith("#")
    run, test = [block for block in readme.blocks(TEXT) if block.kind == "sh"]
    assert rest.index(run.body) < rest.index(test.body) < rest.index("\n## ")
    assert run.body.strip().count("\n") == test.body.strip().count("\n") == 0
    assert run.body.strip().endswith("phasedb demo")
    assert test.body.strip().endswith("pytest")


@pytest.mark.parametrize("page", [TEXT, DEVELOPERS], ids=["README.md", "DEVELOPERS.md"])
def test_what_a_page_points_at_is_there(page):
    for target in re.findall(r"\]\(([^)#]+)\)", page):
        assert (readme.ROOT / target).exists(), target
    for path in re.findall(r"`((?:phasedb|tests|migrations|seed_data)/[\w/.]+)`", page):
        assert (readme.ROOT / path).exists(), path


def test_every_room_is_on_the_map():
    for room in (readme.ROOT / "phasedb").iterdir():
        if (room / "__init__.py").exists():
            assert f"`phasedb/{room.name}/`" in DEVELOPERS, room.name


def test_every_dependency_says_what_would_be_lost_without_it():
    project = tomllib.loads((readme.ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]
    wanted = [
        *project["dependencies"],
        *(name for extra in project["optional-dependencies"].values() for name in extra),
    ]
    for requirement in wanted:
        name = re.split(r"[\[><=~!]", requirement)[0]
        assert re.search(rf"^\| {re.escape(name)} \|", DEVELOPERS, re.MULTILINE | re.IGNORECASE), name


def test_every_marker_has_its_command():
    settings = tomllib.loads((readme.ROOT / "pyproject.toml").read_text(encoding="utf-8"))["tool"]["pytest"]
    for marker in settings["ini_options"]["markers"]:
        assert f"-m {marker.partition(':')[0]}" in DEVELOPERS
