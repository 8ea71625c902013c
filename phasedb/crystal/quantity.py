"""Numbers as people write them: ``4.2417(2)``, ``0.42417 nm``, ``4.2332 kX``; and back to text."""

from __future__ import annotations

import math
import re
from dataclasses import dataclass
from decimal import Decimal
from typing import Final

from phasedb.errors import InputError

KX_IN_ANGSTROM: Final = 1.00202
"""1 kX = 1.00202 Å, the factor agreed in 1947: Bragg, J. Sci. Instrum. 24 (1947) 27 (from memory)."""

KX_RELATIVE_ESD: Final = 6e-5
"""Least relative esd of a value converted from kX: today's factor for copper is 1.00208, 6e-5 away."""

LEAST_A_ANGSTROM: Final = 1.5
MOST_A_ANGSTROM: Final = 150.0
"""A bare lattice constant lies between these; no cubic phase under normal pressure is known outside."""

WIDEST_A_ANGSTROM: Final = (0.1, 250.0)
"""What is taken when the unit is written out: the warnings at the door judge the rest."""

_NUMBER = re.compile(
    r"""\s*(?P<value>[+-]?(?:\d+(?:\.\d*)?|\.\d+))
        (?:\s?\((?P<esd>\d+)\))?
        (?:[eE](?P<exponent>[+-]?\d{1,3}))?
        \s*(?P<unit>\D[^\d()]*)?\s*""",
    re.VERBOSE | re.ASCII,
)
_ANGSTROM_PER_UNIT: Final[dict[str, float]] = {
    "å": 1.0,
    "a": 1.0,
    "angstrom": 1.0,
    "ångström": 1.0,
    "nm": 10.0,
    "pm": 0.01,
    "kx": KX_IN_ANGSTROM,
}


@dataclass(frozen=True, slots=True)
class Measured:
    """A number with its standard uncertainty (None: not stated) and the unit that stood beside it."""

    value: float
    esd: float | None
    unit: str


@dataclass(frozen=True, slots=True)
class Length:
    """A lattice constant in Å, its esd in Å, and the text that was read."""

    angstrom: float
    esd_angstrom: float | None
    text: str


def parse_measured(text: str, *, what: str = "number") -> Measured:
    """Return `text` (``5.43102(5)``, ``2.5e-6``, ``0.54 nm``) as value, esd and unit.

    Raises
    ------
    InputError
        If it is not a finite number, or the esd is empty, zero or not in digits.
    """
    match = _NUMBER.fullmatch(text)
    if match is None:
        hint = "write it like 4.2417 or 4.2417(2), with a unit if it is not the usual one"
        if re.fullmatch(r"\s*[+-]?\d+,\d+.*", text):
            hint = "use a decimal point, not a comma"
        elif "(" in text:
            hint = "the brackets hold the uncertainty of the last digits, as whole digits: 4.2417(2)"
        raise InputError(f"{what} {text!r} is not a number", hint=hint)
    exponent = int(match["exponent"] or 0)
    value = float(f"{match['value']}e{exponent}")
    if not math.isfinite(value):
        raise InputError(f"{what} {text!r} is too large")
    esd = None
    if match["esd"] is not None:
        decimals = len(match["value"].partition(".")[2])
        esd = float(f"{match['esd']}e{exponent - decimals}")
        if esd == 0.0:
            raise InputError(
                f"{what} {text!r}: an uncertainty of 0 means nothing",
                hint="leave the brackets out if the uncertainty is not known",
            )
    return Measured(value, esd, (match["unit"] or "").strip())


def parse_lattice_constant(text: str, *, what: str = "lattice constant") -> Length:
    """Return a lattice constant in Å from text in Å (no unit), nm, pm or kX.

    A bare number that looks like nm (0.2 to 1.5) or pm (150 to 2500) is refused with the converted value.
    A value from kX carries a relative esd of at least 6e-5.

    Raises
    ------
    InputError
    """
    read = parse_measured(text, what=what)
    unit = read.unit.casefold().replace("å", "å")
    shown = text.strip()
    if unit and unit not in _ANGSTROM_PER_UNIT:
        raise InputError(
            f"{what} {shown!r}: the unit {read.unit!r} is not known",
            hint="expected Å (or no unit), nm, pm or kX",
        )
    if not unit:
        _refuse_likely_slips(read.value, shown, what)
    factor = _ANGSTROM_PER_UNIT.get(unit, 1.0)
    angstrom = _scaled(read.value, factor)
    low, high = WIDEST_A_ANGSTROM
    if not low <= angstrom <= high:
        raise InputError(
            f"{what} {shown!r} is not possible: expected {LEAST_A_ANGSTROM:g} to {MOST_A_ANGSTROM:g} Å"
        )
    esd = None if read.esd is None else _scaled(read.esd, factor)
    if unit == "kx":
        esd = max(esd or 0.0, KX_RELATIVE_ESD * angstrom)
    return Length(angstrom, esd, shown)


def _scaled(value: float, factor: float) -> float:
    """Multiply in decimal, so that 0.42417 nm is 4.2417 Å and not 4.241700000000001."""
    return float(Decimal(repr(value)) * Decimal(repr(factor)))


def _refuse_likely_slips(value: float, shown: str, what: str) -> None:
    if 0.2 <= value <= 1.5:
        raise InputError(
            f"{what} {shown!r} without a unit reads as nm typed by mistake",
            hint=f"write {_plain(_scaled(value, 10.0))} (Å), or {shown} nm",
        )
    if 150.0 <= value <= 2500.0:
        raise InputError(
            f"{what} {shown!r} without a unit reads as pm typed by mistake",
            hint=f"write {_plain(_scaled(value, 0.01))} (Å), or {shown} pm",
        )
    if not LEAST_A_ANGSTROM <= value <= MOST_A_ANGSTROM:
        raise InputError(
            f"{what} {shown!r} is not possible: expected {LEAST_A_ANGSTROM:g} to {MOST_A_ANGSTROM:g} Å",
            hint="write the unit if it is not Å: nm, pm or kX",
        )


def _plain(value: float) -> str:
    """Return the shortest text that reads back as `value`, without an exponent."""
    return format(Decimal(repr(float(value))).normalize(), "f")


def format_measured(value: float, esd: float | None) -> str:
    """Return ``5.43102(5)``: the esd in one or two digits, 2 to 19, as is usual in crystallography.

    Without an esd every digit that the number needs is written.

    References
    ----------
    Acta Crystallographica, notes for authors: the "rule of 19" (common practice).
    """
    if esd is None or not math.isfinite(esd) or esd <= 0:
        return _plain(value)
    place = math.floor(math.log10(esd))
    if round(esd / 10.0**place, 9) < 1.95:
        place -= 1
    unit = Decimal(1).scaleb(place)
    rounded = Decimal(repr(float(value))).quantize(unit)
    digits = (Decimal(repr(float(esd))) / unit).quantize(Decimal(1))
    if place > 0:
        return f"{int(rounded)}({int(digits * unit)})"
    return f"{rounded:f}({int(digits)})"
