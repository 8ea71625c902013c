"""The life of an entry: draft, checked, withdrawn, and who may do what."""

from __future__ import annotations

from dataclasses import replace

import pytest

from phasedb.errors import ExitCode, InputError, RuleRefusedError, UnknownNameError
from phasedb.library import Library, Source
from phasedb.library.audit import audit


@pytest.fixture
def with_nitride(empty, nitride):
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(nitride)
    return empty


def _as(store: str, who: str) -> Library:
    return Library.open(store, by=who, write=True)


def test_a_second_person_checks_and_both_are_kept(with_nitride):
    with _as(with_nitride, "Bob") as library:
        entry = library.check("OUR nitride", remark="against the card")
        assert (entry.standing, entry.version) == ("checked", 2)
        assert (entry.entered_by, entry.checked_by) == ("Ann", "Bob")
        assert entry.checked_at.endswith("Z")
        assert library.get("our nitride") == entry
        assert library.history("our nitride")[-1].remark == "against the card"
        assert not audit(library).faults


@pytest.mark.parametrize("who", ["Ann", " ann ", "ANN"])
def test_the_author_cannot_check(with_nitride, who):
    with _as(with_nitride, who) as library:
        with pytest.raises(RuleRefusedError, match="cannot check") as error:
            library.check("our nitride")
        assert error.value.exit_code is ExitCode.REFUSED
        assert library.get("our nitride").standing == "draft"
        assert library.history_count == 2


def test_who_last_changed_it_cannot_check_either(with_nitride):
    with _as(with_nitride, "Bob") as library:
        library.revise("our nitride", {"remarks": "seen"})
        with pytest.raises(RuleRefusedError, match="last changed"):
            library.check("our nitride")
    with _as(with_nitride, "Cy") as library:
        assert library.check("our nitride").standing == "checked"
        with pytest.raises(RuleRefusedError, match="only a draft"):
            library.check("our nitride")


@pytest.mark.parametrize(
    ("change", "standing"),
    [
        ({"a_angstrom": 4.2313}, "draft"),
        ({"lattice_type": "P"}, "draft"),
        ({"structure_type": "B3"}, "draft"),
        ({"sources": (Source("another paper"),)}, "draft"),
        ({"formula": "TiN0.9"}, "draft"),
        ({"temperature_k": 300.0}, "draft"),
        ({"remarks": "looks fine"}, "checked"),
        ({"tags": ("nitrides",)}, "checked"),
        ({"aliases": ("TiN coating",)}, "checked"),
        ({"expansion_per_k": 9.4e-6}, "checked"),
        ({"drift_class": "solid solution"}, "checked"),
        ({"name": "titanium nitride, ours"}, "checked"),
    ],
)
def test_what_a_check_vouches_for(with_nitride, change, standing):
    with _as(with_nitride, "Bob") as library:
        library.check("our nitride")
    with _as(with_nitride, "Cy") as library:
        entry = library.revise("our nitride", change, accept_warnings=True).entry
        assert entry.standing == standing
        assert (entry.checked_by is None) == (standing == "draft")
        assert (entry.version, entry.changed_by) == (3, "Cy")
        assert library.get(entry.name) == entry
        assert not audit(library).faults


def test_withdrawn_entries_are_kept_but_never_matched(with_nitride, nitride):
    other = replace(nitride, name="better nitride", a_angstrom=4.2417, aliases=("TiN",))
    with _as(with_nitride, "Bob") as library:
        library.add(other, accept_warnings=True)
        entry = library.withdraw("our nitride", reason="was in kX", replaced_by="TiN")
        assert (entry.standing, entry.withdrawn_reason) == ("withdrawn", "was in kX")
        assert library.by_uid(entry.replaced_by).name == "better nitride"
        assert library.phase_count == 1
        assert library.table().name == ("better nitride",)
        assert library.within("F", 4.0, 4.5, limit=9)[1] == 1
        assert [e.name for e in library.list()] == ["better nitride"]
        assert [e.name for e in library.list(withdrawn=True)] == ["our nitride"]
        with pytest.raises(InputError, match="is taken"):
            library.add(nitride, accept_warnings=True)
        with pytest.raises(RuleRefusedError, match="restore-entry"):
            library.revise("our nitride", {"remarks": "x"})
        with pytest.raises(RuleRefusedError, match="withdrawn already"):
            library.withdraw("our nitride", reason="again")
        with pytest.raises(RuleRefusedError, match="only a draft"):
            library.check("our nitride")
        with pytest.raises(RuleRefusedError, match="cannot replace"):
            library.withdraw("better nitride", reason="x", replaced_by="our nitride")
        back = library.restore_entry("our nitride", reason="it was Å after all")
        assert (back.standing, back.withdrawn_reason, back.replaced_by) == ("draft", None, None)
        assert library.phase_count == 2
        with pytest.raises(RuleRefusedError, match="not withdrawn"):
            library.restore_entry("our nitride", reason="x")
        assert [row.action for row in library.history("our nitride")] == ["entered", "withdrawn", "restored"]
        assert not audit(library).faults


def test_a_checked_entry_that_was_withdrawn_comes_back_as_a_draft(with_nitride):
    with _as(with_nitride, "Bob") as library:
        library.check("our nitride")
        library.withdraw("our nitride", reason="doubt")
        assert library.restore_entry("our nitride", reason="no doubt").checked_by is None


@pytest.mark.parametrize("reason", ["", "  \n "])
def test_withdrawing_needs_a_reason(with_nitride, reason):
    with _as(with_nitride, "Bob") as library, pytest.raises(InputError, match="reason"):
        library.withdraw("our nitride", reason=reason)


def test_an_entry_cannot_replace_itself_nor_be_replaced_by_nothing(with_nitride):
    with _as(with_nitride, "Bob") as library:
        with pytest.raises(InputError, match="itself"):
            library.withdraw("our nitride", reason="x", replaced_by="our nitride")
        with pytest.raises(UnknownNameError):
            library.withdraw("our nitride", reason="x", replaced_by="no such")
        assert library.get("our nitride").standing == "draft"


def test_the_second_of_two_editors_is_told_with_both_versions(with_nitride):
    with _as(with_nitride, "Bob") as first, _as(with_nitride, "Cy") as second:
        seen = second.get("our nitride").version
        first.revise("our nitride", {"a_angstrom": 4.2401, "a_text": "4.2401"})
        with pytest.raises(RuleRefusedError) as error:
            second.revise("our nitride", {"a_angstrom": 4.2409}, expect_version=seen)
        for part in ("version 2", "not 1", "changed by Bob", "4.2312 -> 4.2401", "4.2409"):
            assert part in str(error.value)
        assert second.get("our nitride").content.a_angstrom == 4.2401
        for call in (
            lambda: second.check("our nitride", expect_version=1),
            lambda: second.withdraw("our nitride", reason="x", expect_version=1),
            lambda: second.revise("our nitride", {"remarks": "x"}, expect_version=99),
        ):
            with pytest.raises(RuleRefusedError, match="version"):
                call()
        second.revise("our nitride", {"a_angstrom": 4.2409}, expect_version=2)


def test_a_revision_that_changes_nothing_is_said_and_not_recorded(with_nitride):
    with _as(with_nitride, "Bob") as library:
        with pytest.raises(InputError, match="already has"):
            library.revise("our nitride", {"a_angstrom": 4.2312})
        assert library.history_count == 2


def test_names_and_aliases_are_unique_together(with_nitride, nitride):
    with _as(with_nitride, "Bob") as library:
        library.revise("our nitride", {"aliases": ("gold-coloured", "coating 3")})
        for name in ("Our  NITRIDE", "Gold-Coloured"):
            with pytest.raises(InputError, match="is taken"):
                library.add(replace(nitride, name=name), accept_warnings=True)
        with pytest.raises(InputError, match="is taken"):
            library.add(replace(nitride, name="x", aliases=("COATING 3",)), accept_warnings=True)
        library.add(replace(nitride, name="x"), accept_warnings=True)
        with pytest.raises(InputError, match="is taken"):
            library.revise("x", {"name": "coating 3"})
        assert library.get("coating 3").name == "our nitride"
        renamed = library.revise("our nitride", {"name": "coating 3", "aliases": ("gold-coloured",)}).entry
        assert library.get("coating 3").uid == renamed.uid


def test_unknown_names_come_with_a_guess(starter):
    with Library.open(starter) as library:
        with pytest.raises(UnknownNameError, match="did you mean 'silicon'"):
            library.get("slicon")
        with pytest.raises(UnknownNameError, match="'sodium chloride'"):
            library.get("NaCl")
        with pytest.raises(UnknownNameError):
            library.get("")
        assert library.get("halite").name == "sodium chloride"


@pytest.mark.parametrize(
    "name",
    ["", "  ", "a\x00b", "tab\x07", "\u202eevil", "zero\u200bwidth", "x" * 201, "\ud800"],
)
def test_names_that_nobody_could_read_are_refused(empty, nitride, name):
    with Library.open(empty, by="Ann", write=True) as library:
        with pytest.raises(InputError):
            library.add(replace(nitride, name=name))
        assert library.phase_count == 0


@pytest.mark.parametrize(
    "name",
    [
        'O\'Neil "quoted"; DROP TABLE phase;--',
        "=1+1",
        "../../etc/passwd",
        "Фаза β‑Fe",
        "相",
        "🧪 sample",
        "100 % a_b",
    ],
)
def test_unusual_names_are_kept_as_they_are(empty, nitride, name):
    with Library.open(empty, by="Ann", write=True) as library:
        library.add(replace(nitride, name=name, remarks=name * 100))
        assert library.get(name).name == name
        assert [e.name for e in library.list(text=name)] == [name]
        assert library.list(text="%_") == ([] if "%" not in name else library.list(text="%_"))
        assert not audit(library).faults
