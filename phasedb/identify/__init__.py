"""The matcher: which phases of a library a measured list holds, and how sure that is.

Nothing here knows of files or databases: a `PeakList` and a `PhaseTable` go in, a `Match` comes out.
"""

from __future__ import annotations

from dataclasses import replace
from hashlib import sha256
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.phases import PhaseTable
from phasedb.errors import InputError, UnknownNameError
from phasedb.identify.assemble import Assembler
from phasedb.identify.axis import make_axis
from phasedb.identify.entries import Entries, prepare
from phasedb.identify.foreign import keep_lines, set_aside
from phasedb.identify.gather import Gathered, PhaseSource, gather
from phasedb.identify.posterior import make_posterior
from phasedb.identify.result import Match
from phasedb.identify.search import Search
from phasedb.identify.settings import MatchSettings, ShiftPrior
from phasedb.measured.peaklist import PeakList

__all__ = ["Match", "MatchSettings", "PhaseSource", "ShiftPrior", "match"]

FloatArray = NDArray[np.float64]

TEMPERATURE: Final = 1.4
STANDARD_DRIFT: Final = 2e-5  # ln a: certificates' relative expanded uncertainties are about 1.5e-5 to 2e-5


def match(peaks: PeakList, library: PhaseTable | PhaseSource, settings: MatchSettings | None = None) -> Match:
    """Say which phases of `library` a measured list holds, how probable each is, and what stays unexplained.

    Parameters
    ----------
    peaks : PeakList
    library : PhaseTable or an open library
    settings : MatchSettings, optional

    Raises
    ------
    UnknownNameError
        If the internal standard is not in the library.
    InputError
        If foreign lines take every line of the list.
    """
    settings = settings or MatchSettings()
    whole = make_axis(peaks, settings.shift_prior)
    foreign_x = None
    if settings.foreign_positions is not None:
        foreign_x = _on_axis(peaks, settings.foreign_positions, settings.shift_prior)
    foreign = set_aside(peaks, whole.x, foreign_x, whole.is_angle)
    if len(foreign.kept) == 0:
        raise InputError("every line of the list is a foreign line: nothing is left to match")
    left = keep_lines(peaks, foreign.kept) if len(foreign.taken) else peaks
    axis = replace(make_axis(left, settings.shift_prior), blocked=foreign.blocked)
    if isinstance(library, PhaseTable):
        gathered = Gathered(library, np.ones(len(library)))
        count, fingerprint = len(library), table_fingerprint(library)
    else:
        gathered = gather(axis, library, settings, peaks.temperature_k)
        count, fingerprint = library.phase_count, library.fingerprint
    entries = prepare(gathered.table, settings, peaks.temperature_k, phase_count=count, crowd=gathered.crowd)
    entries, always = _with_standard(entries, settings)
    search = Search(axis, entries, settings.most_phases, always=always)
    search.run()
    posterior = make_posterior(search, TEMPERATURE)
    cautions = _cautions(peaks, entries, settings, count)
    return Assembler(
        peaks,
        settings,
        search,
        posterior,
        foreign,
        phase_count=count,
        fingerprint=fingerprint,
        cautions=cautions,
    ).match()


def _on_axis(peaks: PeakList, positions: FloatArray, prior: ShiftPrior) -> FloatArray:
    """Return positions in the list's unit on the scoring coordinate."""
    axis = make_axis(peaks, prior)
    order = np.argsort(peaks.position)
    # foreign lines come in the unit of the list: the same monotonic relation carries them over
    if peaks.unit == "two-theta" and axis.is_angle:
        return np.asarray(positions, dtype=np.float64)
    ln_position = np.log(np.asarray(positions, dtype=np.float64))
    known = np.log(peaks.position[order])
    if len(known) < 2:
        return np.asarray(axis.x[:1] + 0.0 * ln_position)
    return np.asarray(np.interp(ln_position, known, axis.x[order]))


def _with_standard(entries: Entries, settings: MatchSettings) -> tuple[Entries, tuple[int, ...]]:
    """Make the internal standard certain and its a as good as its certificate."""
    if settings.internal_standard is None:
        return entries, ()
    wanted = settings.internal_standard.casefold()
    names = [entries.table.name[int(row)].casefold() for row in entries.rows]
    if wanted not in names:
        raise UnknownNameError(
            f"internal standard {settings.internal_standard!r} is not among the phases that may match",
            hint="see phasedb list; a certified entry is needed",
        )
    index = names.index(wanted)
    odds, scale = entries.ln_odds.copy(), entries.drift_scale.copy()
    low, high = entries.ln_a_low.copy(), entries.ln_a_high.copy()
    odds[index], scale[index] = 0.0, STANDARD_DRIFT
    low[index] = high[index] = entries.ln_a[index]
    changed = replace(entries, ln_odds=odds, drift_scale=scale, ln_a_low=low, ln_a_high=high)
    return changed, (index,)


def table_fingerprint(table: PhaseTable) -> str:
    """Return a fingerprint of a table that does not depend on the order of its rows."""
    total = 0
    for row in range(len(table)):
        text = "\x1f".join(
            [
                table.name[row],
                table.formula[row],
                str(int(table.lattice[row])),
                repr(float(table.a_angstrom[row])),
                table.structure_type[row],
                table.standing[row],
            ]
        )
        total += int.from_bytes(sha256(text.encode()).digest(), "big")
    return f"{total % 2**256:064x}"


def _cautions(peaks: PeakList, entries: Entries, settings: MatchSettings, count: int) -> list[str]:
    found = list(peaks.notes)
    if count == 0:
        found.append("the library holds no phase: only unlisted phases could be considered")
    if len(peaks) < 4:
        found.append(
            f"only {len(peaks)} line{'s' if len(peaks) != 1 else ''}: many cubic cells fit so few lines by "
            f"luck; "
            "measure a wider range or with better accuracy"
        )
    if entries.left_out_for_temperature:
        number = len(entries.left_out_for_temperature)
        found.append(
            f"{number} entr{'y' if number == 1 else 'ies'} recorded far from the measuring temperature left "
            f"out "
            "(their expansion is not known); --any-temperature brings them in"
        )
    if peaks.intensity is None:
        found.append("no intensities given: phases with the same line positions cannot be told apart by them")
    if settings.elements is None:
        found.append("no elements given: say what the specimen holds with --elements to sharpen the answer")
    return found
