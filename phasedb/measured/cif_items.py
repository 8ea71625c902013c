"""Values of CIF items (core and powder dictionaries), by the older and the dotted names."""

from __future__ import annotations

import math
import re
from typing import Any, Final

from phasedb.crystal.radiation import EMISSION_LINES
from phasedb.errors import InputError, at
from phasedb.measured.options import ReadOptions

_NUMBER: Final = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+))(?:\((\d+)\))?((?:[eE][+-]?\d+)?)\Z")


def blocks_of(text: str, source: str) -> list[Any]:
    """Return the data blocks of a CIF.

    Raises
    ------
    InputError
        With the line, for a text that is not CIF.
    """
    from gemmi import cif

    try:
        return list(cif.read_string(text))
    except (ValueError, RuntimeError) as error:
        found = re.match(r"(?:string)?:(\d+)(?::(\d+))?(?:\(\d+\))?:?\s*(.*)", str(error), re.DOTALL)
        place = at(source, int(found[1]), int(found[2] or 0) or None) if found else source
        reason = (found[3] if found else str(error)).strip().splitlines()
        raise InputError(f"not valid CIF: {reason[0] if reason else error}", where=place) from None


def column(block: Any, *names: str) -> list[str] | None:
    """Return the raw values of the first of `names` (older or dotted) that the block holds, else None."""
    for name in names:
        values = [str(value) for value in block.find_values(name)]
        if values:
            return values
    return None


def number(text: str) -> tuple[float, float]:
    """Return value and standard uncertainty of a CIF number such as ``28.442(3)``; NaN for unknown.

    Raises
    ------
    ValueError
        If it is text.
    """
    bare = text.strip().strip("'\"")
    if bare in ("?", "."):
        return math.nan, math.nan
    found = _NUMBER.match(bare)
    if found is None:
        raise ValueError(text)
    value = float(found[1] + found[3])
    if not found[2]:
        return value, math.nan
    decimals = len(found[1].partition(".")[2])
    return value, float(found[2]) * 10.0**-decimals * float("1" + found[3])


def numbers(block: Any, source: str, *names: str) -> tuple[list[float], list[float]] | None:
    """Return values and uncertainties of the first of `names` present, else None.

    Raises
    ------
    InputError
        Naming item and row, for text where a number belongs.
    """
    raw = column(block, *names)
    if raw is None:
        return None
    pairs = []
    for row, text in enumerate(raw, start=1):
        try:
            pairs.append(number(text))
        except ValueError:
            raise InputError(
                f"read {text!r}, expected a number",
                where=f"{source}, block {block.name}, {names[0]}, row {row}",
                hint="correct the value",
            ) from None
    return [value for value, _ in pairs], [esd for _, esd in pairs]


def single(block: Any, source: str, *names: str) -> float | None:
    """Return the first finite value of the first of `names` present, else None."""
    found = numbers(block, source, *names)
    values = [value for value in found[0] if math.isfinite(value)] if found else []
    return values[0] if values else None


def facts_of(block: Any, source: str) -> ReadOptions:
    """Return radiation, temperature, radius and sample as far as the block states them."""
    wavelengths = numbers(block, source, "_diffrn_radiation_wavelength", "_diffrn_radiation_wavelength.value")
    known = [value for value in wavelengths[0] if value > 0] if wavelengths else []
    radiation = _doublet_anode(known)
    kind = column(block, "_diffrn_radiation_type", "_diffrn_radiation.type")
    if not known and kind:
        radiation = _anode_in(kind[0])
    names = column(block, "_pd_block_id", "_chemical_name_common", "_chemical_formula_sum")
    sample = names[0].strip("'\"") if names and names[0] not in ("?", ".") else None
    return ReadOptions(
        radiation=radiation,
        wavelength_angstrom=known[0] if known and radiation is None else None,
        goniometer_radius_mm=single(block, source, "_pd_instr_dist_spec/detc", "_pd_instr.dist_spec_detc"),
        temperature_k=single(block, source, "_diffrn_ambient_temperature", "_diffrn.ambient_temperature"),
        sample=sample,
    )


def _doublet_anode(wavelengths: list[float]) -> str | None:
    """Return the anode whose K-alpha doublet the first two wavelengths are (within 2e-4), else None."""
    if len(wavelengths) < 2:
        return None
    for lines in EMISSION_LINES.values():
        pairs = zip(wavelengths, (lines.alpha1, lines.alpha2), strict=False)
        if all(abs(given / true - 1.0) < 2e-4 for given, true in pairs):
            return lines.anode
    return None


def _anode_in(text: str) -> str | None:
    found = re.match(r"['\"]?\s*([A-Z][a-z]?)[\s_-]*K[\\\s]*a(?:lpha)?[\s~_]*(1?)", text)
    if found is None or found[1] not in EMISSION_LINES:
        return None
    return f"{found[1]}-Ka1" if found[2] else found[1]
