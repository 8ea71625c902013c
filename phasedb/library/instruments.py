"""Instruments of the lab: radiation, geometry, and the shift prior learned from a standard."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import TYPE_CHECKING, Any, Final, Literal, get_args

import sqlalchemy as sa

from phasedb.errors import InputError, UnknownNameError
from phasedb.identify.settings import ShiftPrior
from phasedb.library import tables
from phasedb.library.cleaning import clean_name, clean_text
from phasedb.library.documents import insert_record, update_record
from phasedb.library.entry import key_of
from phasedb.measured.options import ReadOptions, check_positive

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library

Geometry = Literal["reflection", "transmission"]
GEOMETRIES: Final[tuple[Geometry, ...]] = get_args(Geometry)
_T: Final = tables.instrument


@dataclass(frozen=True, slots=True)
class Instrument:
    """One instrument.

    Attributes
    ----------
    name : str
    radiation : str
        A name, as for ``--radiation``, or a wavelength as ``1.5406 A``.
    goniometer_radius_mm : float or None
    geometry : str, ``reflection`` or ``transmission``
    zero_deg, zero_scale_deg, displacement_mm, displacement_scale_mm : float or None
        The shift prior; None where no standard was measured.
    line_width_deg : float or None
        Median full width of the standard's lines.
    standard : str
        What it was learned from; empty if nothing was.
    calibrated_on : str or None, date (UTC)
    remarks : str
    version : int, counts from 1
    entered_by, entered_at : str
    """

    name: str
    radiation: str
    goniometer_radius_mm: float | None = None
    geometry: Geometry = "reflection"
    zero_deg: float | None = None
    zero_scale_deg: float | None = None
    displacement_mm: float | None = None
    displacement_scale_mm: float | None = None
    line_width_deg: float | None = None
    standard: str = ""
    calibrated_on: str | None = None
    remarks: str = ""
    version: int = 1
    entered_by: str = ""
    entered_at: str = ""

    @property
    def shift_prior(self) -> ShiftPrior | None:
        """The shift prior, or None where no standard was measured."""
        if self.zero_deg is None or self.zero_scale_deg is None:
            return None
        scale = self.displacement_scale_mm
        return ShiftPrior(
            zero_deg=self.zero_deg,
            zero_scale_deg=self.zero_scale_deg,
            displacement_mm=self.displacement_mm or 0.0,
            displacement_scale_mm=ShiftPrior().displacement_scale_mm if scale is None else scale,
        )

    def read_options(self) -> ReadOptions:
        """Return what this instrument says of a list measured on it."""
        number = self.radiation.removesuffix(" A") if self.radiation.endswith(" A") else None
        return ReadOptions(
            radiation=None if number is not None else self.radiation,
            wavelength_angstrom=None if number is None else float(number),
            goniometer_radius_mm=self.goniometer_radius_mm,
        )


def save_instrument(library: Library, instrument: Instrument, *, replace_old: bool = False) -> Instrument:
    """Enter an instrument, or with `replace_old` a new version of one that is there; return it as stored.

    Raises
    ------
    InputError
        If the name is taken (without `replace_old`), or a value cannot be.
    """
    name = clean_name(instrument.name, what="instrument name")
    if instrument.goniometer_radius_mm is not None:
        check_positive(instrument.goniometer_radius_mm, "goniometer radius (mm)")
    with library.begin_write() as writing:
        old = _row(writing.connection, name)
        if old is not None and not replace_old:
            raise InputError(
                f"there is an instrument {old['name']!r} already",
                hint="give another name, or --replace to enter it anew",
            )
        values: dict[str, Any] = {
            column.name: getattr(instrument, column.name) for column in fields(Instrument)
        }
        values |= {
            "name": name,
            "name_key": key_of(name),
            "remarks": clean_text(instrument.remarks, what="remarks"),
            "version": 1 if old is None else int(old["version"]) + 1,
            "entered_by": writing.person.who,
            "entered_at": writing.at,
            "calibrated_on": writing.at[:10] if instrument.standard else None,
        }
        if old is None:
            row = insert_record(writing, _T, values)
        else:
            row = update_record(writing, _T, old["uid"], values)
    return _instrument(row)


def get_instrument(library: Library, name: str) -> Instrument:
    """Return the instrument of that name (case does not matter).

    Raises
    ------
    UnknownNameError
    """
    with library.reading() as connection:
        row = _row(connection, name)
        if row is not None:
            return _instrument(row)
        known = connection.execute(sa.select(_T.c.name).order_by(_T.c.name_key)).scalars().all()
    said = "known are " + ", ".join(repr(other) for other in known) if known else "none is stored yet"
    raise UnknownNameError(
        f"no instrument is called {name!r}", hint=f"{said}; enter one with: phasedb instrument add"
    )


def list_instruments(library: Library) -> Sequence[Instrument]:
    """Return all instruments by name key."""
    with library.reading() as connection:
        rows = connection.execute(sa.select(_T).order_by(_T.c.name_key)).mappings().all()
    return [_instrument(row) for row in rows]


def _row(connection: Connection, name: str) -> Any:
    return connection.execute(sa.select(_T).where(_T.c.name_key == key_of(name))).mappings().one_or_none()


def _instrument(row: Any) -> Instrument:
    return Instrument(**{column.name: row[column.name] for column in fields(Instrument)})
