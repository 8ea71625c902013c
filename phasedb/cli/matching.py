"""What `match`, `report` and `batch` share: the options of a match, and running one on the open library."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import wraps
from typing import TYPE_CHECKING, Any, TypeVar

import click

from phasedb.cli.completion import complete_phase
from phasedb.errors import InputError

if TYPE_CHECKING:
    import numpy as np
    from numpy.typing import NDArray

    from phasedb.crystal.lattice import LatticeType
    from phasedb.crystal.phases import PhaseTable
    from phasedb.identify.result import Match
    from phasedb.identify.settings import MatchSettings, ShiftPrior
    from phasedb.library import Library
    from phasedb.measured.peaklist import PeakList

_Command = TypeVar("_Command", bound=Callable[..., Any])

STARTER_CAUTION = (
    "starter entries are drafts: nobody here has checked them against their sources;"
    " 'phasedb show NAME' gives the source"
)


@dataclass(frozen=True, slots=True)
class MatchOptions:
    """What the options of a match said."""

    most_phases: int
    internal_standard: str | None
    foreign: str | None
    checked_only: bool
    as_of: str | None
    elements: str | None
    unseen: str | None
    excluding: str | None
    strict_chemistry: bool
    any_temperature: bool
    rank_by: str

    def settings(self, library: Library, prior: ShiftPrior | None) -> MatchSettings:
        """Return the settings, with every element and name checked (foreign lines come with the list).

        Raises
        ------
        UnknownNameError
            If an element or the internal standard is not known.
        """
        from phasedb.identify.settings import MatchSettings, ShiftPrior

        standard = None if self.internal_standard is None else library.get(self.internal_standard).name
        rank_by: Any = self.rank_by
        return MatchSettings(
            most_phases=self.most_phases,
            elements=None if self.elements is None else _symbols(self.elements, "--elements"),
            unseen=_symbols(self.unseen or "", "--unseen"),
            excluding=_symbols(self.excluding or "", "--excluding"),
            strict_chemistry=self.strict_chemistry,
            internal_standard=standard,
            any_temperature=self.any_temperature,
            checked_only=self.checked_only,
            rank_by=rank_by,
            shift_prior=prior or ShiftPrior(),
        )


def match_options(command: _Command) -> _Command:
    """Add the options of a match; the command receives them as one `MatchOptions` named ``asked``."""

    @wraps(command)
    def gathered(*args: Any, **values: Any) -> Any:
        names = MatchOptions.__dataclass_fields__
        return command(*args, asked=MatchOptions(**{name: values.pop(name) for name in names}), **values)

    options = (
        click.option(
            "--most-phases",
            type=click.IntRange(1, 8),
            default=4,
            show_default=True,
            help="Most phases in one answer.",
        ),
        click.option("--elements", metavar="Fe,Cr,..", help="What the specimen holds."),
        click.option("--unseen", metavar="C,N,..", help="Light elements that the analysis could not see."),
        click.option("--excluding", metavar="S,..", help="Elements known to be absent."),
        click.option("--strict-chemistry", is_flag=True, help="Make the elements a hard rule."),
        click.option(
            "--internal-standard",
            metavar="NAME",
            shell_complete=complete_phase,
            help="An entry that was mixed in, with its certified a.",
        ),
        click.option("--foreign", metavar="FILE", help="Lines of a holder or known non-cubic companion."),
        click.option("--checked-only", is_flag=True, help="Leave drafts out."),
        click.option(
            "--any-temperature", is_flag=True, help="Also entries recorded far from this temperature."
        ),
        click.option("--as-of", metavar="DATE", help="Use the library as it was then."),
        click.option(
            "--rank-by",
            type=click.Choice(["probability", "merit"]),
            default="probability",
            show_default=True,
            help="What the ranking goes by.",
        ),
    )
    decorated: Any = gathered
    for option in reversed(options):
        decorated = option(decorated)
    result: _Command = decorated
    return result


def _symbols(text: str, option: str) -> tuple[str, ...]:
    """Return the element symbols in a list such as ``Fe, Cr Ni``, each once, in the order given."""
    from phasedb.crystal.elements import element
    from phasedb.errors import UnknownNameError

    found = []
    for word in text.replace(",", " ").replace(";", " ").split():
        try:
            found.append(element(word).symbol)
        except UnknownNameError as error:
            raise UnknownNameError(error.what, where=option, hint=error.hint) from None
    return tuple(dict.fromkeys(found))


class TableOnce:
    """An open library whose phase table is read once, for many matches."""

    def __init__(self, library: Library) -> None:
        self.phase_count = library.phase_count
        self.fingerprint = library.fingerprint
        self.library = library
        self._tables: dict[bool, PhaseTable] = {}

    def table(self, *, checked_only: bool = False) -> PhaseTable:
        """Return the phases that can be matched."""
        if checked_only not in self._tables:
            self._tables[checked_only] = self.library.table(checked_only=checked_only)
        return self._tables[checked_only]

    def within(
        self,
        lattice: LatticeType,
        a_low: float,
        a_high: float,
        *,
        centre: float | None = None,
        limit: int,
        checked_only: bool = False,
    ) -> tuple[PhaseTable, int]:
        """Return the entries of one lattice type in a range of a (Å); see `Library.within`."""
        return self.library.within(
            lattice, a_low, a_high, centre=centre, limit=limit, checked_only=checked_only
        )


def run_match(peaks: PeakList, source: TableOnce, settings: MatchSettings) -> Match:
    """Return the match, with one caution if a phase worth naming is an unchecked starter entry."""
    from phasedb.identify import match

    found = match(peaks, source, settings)
    drafts = [p.name for p in found.phases if p.group_probability >= 0.05 and p.standing == "draft"]
    if any("starter" in source.library.get(name).content.tags for name in drafts):
        return replace(found, cautions=(*found.cautions, STARTER_CAUTION))
    return found


def foreign_positions(foreign: PeakList, peaks: PeakList) -> NDArray[np.float64]:
    """Return the lines of a foreign list in the unit of `peaks`.

    Raises
    ------
    InputError
        If one unit cannot be turned into the other.
    """
    from phasedb.crystal.radiation import q_from_d, two_theta_from_d

    if foreign.unit == peaks.unit:
        return foreign.position
    if peaks.unit == "d":
        return foreign.d_angstrom
    if peaks.unit == "q":
        return q_from_d(foreign.d_angstrom)
    if peaks.unit == "two-theta" and peaks.radiation is not None:
        return two_theta_from_d(foreign.d_angstrom, peaks.radiation.wavelength_angstrom)
    raise InputError(
        f"foreign lines in {foreign.unit} cannot be turned into {peaks.unit}",
        where=foreign.source,
        hint="give the foreign lines in the same unit as the peak list",
    )
