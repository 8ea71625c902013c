"""Entering a characterised unknown: the entry and its measurement in one transaction."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from phasedb.library import door
from phasedb.library.entering import add, refuse_taken_names
from phasedb.library.finding import id_of_name
from phasedb.library.preparing import prepare
from phasedb.library.records import save_measurement

if TYPE_CHECKING:
    from phasedb.library.door import Warned
    from phasedb.library.entering import Outcome
    from phasedb.library.entry import Draft
    from phasedb.library.store import Library


def adopt(library: Library, draft: Draft, peaks: dict[str, Any], *, accept_warnings: bool = False) -> Outcome:
    """Enter `draft` with the list that it was measured from (as `phasedb.measured.kept` gives it).

    Raises
    ------
    InputError, WarningsRefusedError
        As `phasedb.library.entering.add`; neither entry nor measurement is written.
    """
    with library.begin_write() as writing:
        outcome = add(library, draft, accept_warnings=accept_warnings)
        save_measurement(writing, peaks, phase_id=id_of_name(writing.connection, outcome.entry.name))
    return outcome


def warnings_before(library: Library, draft: Draft) -> tuple[Draft, tuple[Warned, ...]]:
    """Return the draft as it would be entered and what the door would warn of; nothing is written.

    Raises
    ------
    InputError
        If a value is impossible or the name is taken.
    """
    prepared = prepare(draft)
    with library.reading() as connection:
        refuse_taken_names(connection, prepared.content)
        return prepared.content, door.warnings_for(connection, prepared)
