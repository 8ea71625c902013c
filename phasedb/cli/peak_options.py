"""The options that say how a peak list was measured, shared by all commands that read one."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import wraps
from typing import TYPE_CHECKING, Any, TypeVar

import click

from phasedb.cli.common import open_library

if TYPE_CHECKING:
    from phasedb.identify.settings import ShiftPrior
    from phasedb.measured.options import ReadOptions
    from phasedb.measured.peaklist import PeakList

_Command = TypeVar("_Command", bound=Callable[..., Any])
_UNITS = ("two-theta", "d", "q", "ring")


@dataclass(frozen=True, slots=True)
class PeakOptions:
    """What the shared options said, before an instrument's record fills the gaps."""

    unit: str | None
    radiation: str | None
    wavelength: float | None
    range: tuple[float, float] | None
    goniometer_radius: float | None
    temperature: float | None
    energy_kv: float | None
    camera_length: float | None
    camera_constant: float | None
    instrument: str | None
    calibration_rings: str | None
    calibration_phase: str | None

    def read_options(self, ctx: click.Context) -> ReadOptions:
        """Return what to read a list with: the options, then the instrument's record."""
        from phasedb.measured.options import ReadOptions

        unit: Any = self.unit
        options = ReadOptions(
            unit=unit,
            radiation=self.radiation,
            wavelength_angstrom=self.wavelength,
            measured_range=self.range,
            goniometer_radius_mm=self.goniometer_radius,
            temperature_k=self.temperature,
            energy_kev=self.energy_kv,
            camera_length_mm=self.camera_length,
            camera_constant_mm_angstrom=self.camera_constant,
        )
        if self.instrument is None:
            return options
        from phasedb.cli.instruments import instrument_record

        return options.over(instrument_record(ctx, self.instrument).read_options())

    def shift_prior(self, ctx: click.Context) -> ShiftPrior | None:
        """Return the shift prior of the named instrument; None if none is named or it has none."""
        if self.instrument is None:
            return None
        from phasedb.cli.instruments import instrument_record

        return instrument_record(ctx, self.instrument).shift_prior

    def read(self, ctx: click.Context, path: str) -> PeakList:
        """Return the peak list at `path` (``-`` is standard input)."""
        return self.reading(ctx).read(path)

    def reading(self, ctx: click.Context) -> Reading:
        """Return how to read any list measured so, the camera calibrated if a standard's rings are given."""
        options = self.read_options(ctx)
        if self.calibration_rings is None and self.calibration_phase is None:
            return Reading(options)
        return self._calibrated(ctx, options)

    def _calibrated(self, ctx: click.Context, options: ReadOptions) -> Reading:
        """Return the reading of ring lists with the camera calibrated from a standard film's rings."""
        from phasedb.characterise.camera import calibrate_camera
        from phasedb.characterise.cells import cell_from_phase
        from phasedb.errors import InputError
        from phasedb.measured.reading import read_ring_radii

        if self.calibration_rings is None or self.calibration_phase is None:
            raise InputError(
                "a calibration needs the standard's rings and its name",
                hint="give --calibration-rings and --calibration-phase together",
            )
        radii, facts = read_ring_radii(self.calibration_rings)
        known = options.over(facts)
        radiation = known.resolved_radiation(self.calibration_rings)
        found = calibrate_camera(
            radii,
            cell_from_phase(open_library(ctx).get(self.calibration_phase).phase(), known.temperature_k),
            name=self.calibration_phase,
            wavelength_angstrom=None if radiation is None else radiation.wavelength_angstrom,
            near=known.camera_constant_mm_angstrom if radiation is None else known.camera_length_mm,
            source=self.calibration_rings,
        )
        calibrated = replace(
            options,
            energy_kev=known.energy_kev,
            camera_length_mm=found.camera_length_mm,
            camera_constant_mm_angstrom=found.camera_constant_mm_angstrom,
        )
        return Reading(calibrated, found.esd_relative, found.text)


@dataclass(frozen=True, slots=True)
class Reading:
    """How the lists of one set-up are read; it can be handed to another process.

    Attributes
    ----------
    options : ReadOptions
    scale_esd_relative : float or None
        Of a calibrated camera.
    remark : str
        What the calibration said; empty without one.
    """

    options: ReadOptions
    scale_esd_relative: float | None = None
    remark: str = ""

    def read(self, path: str) -> PeakList:
        """Return the peak list at `path` (``-`` is standard input)."""
        from phasedb.measured.reading import read_peak_list

        peaks = read_peak_list(path, self.options)
        if self.scale_esd_relative is None:
            return peaks
        return replace(peaks, scale_esd_relative=self.scale_esd_relative, notes=(*peaks.notes, self.remark))


def peak_options(command: _Command) -> _Command:
    """Add the peak-list options; the command receives them as one `PeakOptions` named ``measured``."""

    @wraps(command)
    def gathered(*args: Any, **values: Any) -> Any:
        names = PeakOptions.__dataclass_fields__
        return command(*args, measured=PeakOptions(**{name: values.pop(name) for name in names}), **values)

    options = (
        click.option("--unit", type=click.Choice(_UNITS), help="What the positions are."),
        click.option(
            "--radiation", metavar="NAME", help="Cu, Co, Mo, Cr, Fe, Ag, Cu-Ka1, Cu-mean, electron."
        ),
        click.option("--wavelength", type=float, metavar="A", help="Wavelength in Å, used literally."),
        click.option(
            "--range",
            type=(float, float),
            default=None,
            metavar="LO HI",
            help="The measured range, in the list's unit.",
        ),
        click.option("--goniometer-radius", type=float, metavar="MM", help="Goniometer radius in mm."),
        click.option("--temperature", type=float, metavar="K", help="Measuring temperature in K."),
        click.option("--energy-kv", type=float, metavar="KV", help="Electron energy in kV."),
        click.option("--camera-length", type=float, metavar="MM", help="Camera length in mm."),
        click.option("--camera-constant", type=float, metavar="MM*A", help="Camera constant in mm Å."),
        click.option("--instrument", metavar="NAME", help="A stored instrument that fills the rest."),
        click.option(
            "--calibration-rings", metavar="FILE", help="Rings of a standard film, to calibrate the camera."
        ),
        click.option("--calibration-phase", metavar="NAME", help="The entry that the standard film is."),
    )
    decorated: Any = gathered
    for option in reversed(options):
        decorated = option(decorated)
    result: _Command = decorated
    return result
