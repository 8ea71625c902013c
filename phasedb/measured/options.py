"""What is known of a measurement beside its lines: from a file's header, options, or an instrument."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Final, Self, get_args

import numpy as np

from phasedb.crystal.radiation import Radiation, radiation_from_name, radiation_from_wavelength
from phasedb.errors import InputError
from phasedb.measured.peaklist import PositionUnit

POSITION_UNITS: Final[tuple[PositionUnit, ...]] = get_args(PositionUnit)
_POSITIVE: Final = {
    "wavelength_angstrom": "wavelength (Å)",
    "goniometer_radius_mm": "goniometer radius (mm)",
    "temperature_k": "temperature (K)",
    "energy_kev": "electron energy (keV)",
    "camera_length_mm": "camera length (mm)",
    "camera_constant_mm_angstrom": "camera constant (mm Å)",
}


@dataclass(frozen=True, slots=True)
class ReadOptions:
    """Facts of a measurement; None where nothing is said. Each value is checked (`InputError`).

    Attributes
    ----------
    unit : ``two-theta``, ``d``, ``q`` or ``ring``
    radiation : str, as for `radiation_from_name`
    wavelength_angstrom : float, Å, used literally
    measured_range : (low, high) in the list's unit
    goniometer_radius_mm, temperature_k, energy_kev, camera_length_mm, camera_constant_mm_angstrom : float
    sample : str
    """

    unit: PositionUnit | None = None
    radiation: str | None = None
    wavelength_angstrom: float | None = None
    measured_range: tuple[float, float] | None = None
    goniometer_radius_mm: float | None = None
    temperature_k: float | None = None
    energy_kev: float | None = None
    camera_length_mm: float | None = None
    camera_constant_mm_angstrom: float | None = None
    sample: str | None = None

    def __post_init__(self) -> None:
        for column in fields(self):
            value = getattr(self, column.name)
            if value is not None and column.name in _POSITIVE:
                check_positive(value, _POSITIVE[column.name])
        if self.unit is not None and self.unit not in POSITION_UNITS:
            check_unit(self.unit)
        if self.measured_range is not None:
            low, high = self.measured_range
            if not 0 <= low < high < np.inf:
                raise InputError(
                    f"range {low:g} to {high:g}: expected two numbers, the lower first, 0 or above",
                    hint="give the range that was measured, for example --range 20 100",
                )

    def over(self, other: Self) -> Self:
        """Return these facts, with those of `other` where this has none.

        Radiation, wavelength and energy belong together: one of them here hides all three of `other`,
        except that an energy completes a radiation ``electron`` said elsewhere; so do the two camera facts.
        """
        merged = {
            column.name: getattr(self, column.name)
            if getattr(self, column.name) is not None
            else getattr(other, column.name)
            for column in fields(self)
        }
        if self.radiation is not None or self.wavelength_angstrom is not None:
            merged["radiation"], merged["wavelength_angstrom"] = self.radiation, self.wavelength_angstrom
        elif self.energy_kev is not None:
            merged["radiation"], merged["wavelength_angstrom"] = "electron", None
        if self.camera_constant_mm_angstrom is None and self.camera_length_mm is not None:
            merged["camera_constant_mm_angstrom"] = None
        return type(self)(**merged)

    def resolved_radiation(self, where: str = "") -> Radiation | None:
        """Return the radiation that these facts name; None if they name none.

        Raises
        ------
        InputError
            For an unknown name, or a wavelength that does not belong to the radiation named with it.
        """
        try:
            return self._radiation()
        except InputError as error:
            raise InputError(error.what, where=error.where or where, hint=error.hint) from None

    def _radiation(self) -> Radiation | None:
        name = self.radiation
        if name is None and self.wavelength_angstrom is None and self.energy_kev is not None:
            name = "electron"
        named = None
        if name is not None and not (name.strip().casefold() == "electron" and self.energy_kev is None):
            named = radiation_from_name(name, energy_kev=self.energy_kev)
        if self.wavelength_angstrom is None:
            if named is None and name is not None:
                return radiation_from_name(name)
            return named
        literal = radiation_from_wavelength(self.wavelength_angstrom)
        if name is None:
            return literal
        if named is None:
            return Radiation("electron", literal.wavelength_angstrom, "electron", None)
        if abs(literal.wavelength_angstrom / named.wavelength_angstrom - 1.0) > 2e-3:
            raise InputError(
                f"wavelength {literal.wavelength_angstrom:g} Å does not belong to radiation {name!r} "
                f"({named.wavelength_angstrom:g} Å)",
                hint="give the one that holds",
            )
        return named if named.convention == "electron" else literal


def check_positive(value: float, name: str, *, where: str = "") -> float:
    """Return `value` if it is finite and above 0.

    Raises
    ------
    InputError
        If it is not.
    """
    if not (np.isfinite(value) and value > 0):
        raise InputError(
            f"{name} {value:g}: expected a finite number above 0",
            where=where,
            hint="correct it or leave it out",
        )
    return float(value)


def check_unit(text: str, *, where: str = "") -> PositionUnit:
    """Return `text` as a unit of positions.

    Raises
    ------
    InputError
        If it is not one.
    """
    found = text.strip().casefold().replace("_", "-")
    for unit in POSITION_UNITS:
        if found == unit:
            return unit
    raise InputError(
        f"unit {text!r} is not known",
        where=where,
        hint="expected " + ", ".join(POSITION_UNITS[:-1]) + f" or {POSITION_UNITS[-1]}",
    )
