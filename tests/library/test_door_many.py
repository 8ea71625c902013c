"""The warnings of many new entries at once agree with those of the door, one entry after the other."""

from __future__ import annotations

import random

from phasedb.library import Draft, Library
from phasedb.library.door import warnings_for
from phasedb.library.door_many import warnings_for_many
from phasedb.library.preparing import prepare


def drafts(count: int, seed: int, *, prefix: str) -> list[Draft]:
    rng = random.Random(seed)
    found = []
    for number in range(count):
        a = round(rng.uniform(3.0, 3.2) * rng.choice([1.0, 1.0, 1.00202]), 5)
        esd = rng.choice([None, None, 0.0001, 0.002])
        formula = rng.choice(["TiN", "VN", "NiO"])
        lattice = rng.choice(["P", "F"])
        found.append(Draft(f"{prefix} {number}", formula, lattice, a, a_esd_angstrom=esd))  # type: ignore[arg-type]
    return found


def test_stored_neighbours_are_those_of_the_door(empty: str) -> None:
    with Library.open(empty, by="Ann", write=True) as library:
        library.add_many(drafts(40, 1, prefix="stored"))
        fresh = [prepare(draft) for draft in drafts(60, 2, prefix="fresh")]
        with library.reading() as connection:
            alone = [
                [warning for batch in [warnings_for_many(connection, [one])] for warning in batch[0]]
                for one in fresh
            ]
            expected = [list(warnings_for(connection, one)) for one in fresh]
    assert any(expected)
    for one, other in zip(alone, expected, strict=True):
        assert sorted(w.text for w in one) == sorted(w.text for w in other)


def test_rows_before_count_as_neighbours_and_rows_after_do_not(empty: str) -> None:
    first = prepare(Draft("first", "TiN", "F", 4.2417))
    second = prepare(Draft("second", "VN", "F", 4.2419))
    other_lattice = prepare(Draft("third", "VN", "P", 4.2419))
    with Library.open(empty) as library, library.reading() as connection:
        found = warnings_for_many(connection, [first, second, other_lattice])
    kinds = [[warning.kind for warning in warnings if warning.kind in ("near", "kx")] for warnings in found]
    assert kinds == [[], ["near"], []]
    assert "'first'" in found[1][0].text


def test_ten_thousand_alike_are_counted_not_listed(empty: str) -> None:
    alike = [prepare(Draft(f"row {number}", "TiN", "F", 4.2417)) for number in range(10_000)]
    with Library.open(empty) as library, library.reading() as connection:
        found = warnings_for_many(connection, alike)
    near = [[warning for warning in warnings if warning.kind == "near"] for warnings in found]
    assert near[0] == []
    assert all(1 <= len(warnings) <= 4 for warnings in near[1:])
