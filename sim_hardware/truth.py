"""The truth of a simulated bench: the `[simulation]` table of a bench file, which only the simulator reads."""

from __future__ import annotations

import tomllib
from pathlib import Path
from typing import Annotated, Literal

from pydantic import Field, ValidationError, model_validator

from profiles.model import Axis, Finite, Model, NonNegative, Positive

Vector = tuple[Finite, Finite, Finite]
SmallAngle = Annotated[float, Field(ge=-30, le=30)]


class TruthError(ValueError):
    """The `[simulation]` table is missing or wrong; the message is one line."""


class SpectralNull(Model):
    """A dip in what the source can put out."""

    frequency_mhz: Positive
    width_mhz: Positive = Field(default=0.2, description="standard deviation of the dip along frequency")
    depth_db: Positive = 40.0


class SourceTruth(Model):
    """The source and the pressure it makes in the water.

    `reference_pressure_kpa` is the amplitude that the wave had before it steepened, on the beam axis at
    `reference_distance_mm`, at `reference_drive_v` peak to peak; it grows in proportion to the drive.
    """

    radius_mm: Positive = 6.0
    focal_length_mm: Positive | None = Field(default=None, description="radius of curvature; left out: plane")
    reference_distance_mm: Positive = 120.0
    reference_drive_v: Positive = 10.0
    reference_pressure_kpa: Positive = 1000.0
    shock_parameter: NonNegative | None = Field(
        default=None,
        description="at reference_drive_v; left out: worked out for a plane wave over the reference distance",
    )
    harmonic_phase_deg: Annotated[float, Field(ge=-90, le=90)] = Field(
        default=-30.0, description="psi of p = sum B_n cos(n tau + psi); -90: positive and negative peak equal"
    )
    harmonics: Annotated[int, Field(ge=1, le=40)] = 18
    beam_exponent: Annotated[float, Field(ge=0.5, le=1)] = Field(
        default=0.75, description="the width of harmonic n goes as n to the minus this"
    )
    rise_cycles: Annotated[float, Field(ge=0, le=20)] = Field(
        default=1.0, description="cycles in which the burst rises and, after its end, falls"
    )
    nulls: tuple[SpectralNull, ...] = ()

    @model_validator(mode="after")
    def _bowl_is_possible(self) -> SourceTruth:
        if self.focal_length_mm is not None and self.focal_length_mm < self.radius_mm:
            raise ValueError(f"focal_length_mm {self.focal_length_mm} is below radius_mm {self.radius_mm}")
        return self


class ElementTruth(Model):
    """The sensitive element, its edge behaviour and its preamplifier.

    The effective radius in mm at f in MHz is sqrt(radius_mm^2 + (radius_term_mm_mhz / f)^2).
    """

    radius_mm: Positive = 0.2
    edge: Literal["rigid", "soft", "unbaffled"] = "rigid"
    radius_term_mm_mhz: NonNegative = 0.0
    sensitivity_nv_per_pa: Positive = 50.0
    corner_mhz: Positive = Field(default=60.0, description="-3 dB corner of the preamplifier")


class LostSteps(Model):
    """From the given move of one axis on, the stage stands off by a fixed amount and does not know it."""

    axis: Axis
    onset_move: Annotated[int, Field(ge=1)] = Field(description="counts the moves of that axis from 1")
    size_mm: Finite | None = None
    size_deg: Finite | None = None

    @model_validator(mode="after")
    def _size_fits_axis(self) -> LostSteps:
        wanted, other = ("size_deg", "size_mm") if self.axis in ("theta", "phi") else ("size_mm", "size_deg")
        if getattr(self, wanted) is None or getattr(self, other) is not None:
            raise ValueError(f"axis {self.axis} takes {wanted} and not {other}")
        return self


class MechanicsTruth(Model):
    """Where the element really sits on the stage, and how the stage moves.

    `pivot_offset_mm` is the element centre seen from the axis of rotation at angle zero. A positive
    `axis_tilt_x_deg` leans the axis, nominally along y, towards z (a turn about x); a positive
    `axis_tilt_z_deg` leans it towards minus x (a turn about z). `angle_zero_deg` is the true angle between beam
    and face when the stage says zero.
    """

    pivot_offset_mm: Vector = (0.0, 0.0, 0.0)
    axis_tilt_x_deg: SmallAngle = 0.0
    axis_tilt_z_deg: SmallAngle = 0.0
    angle_zero_deg: SmallAngle = 0.0
    backlash_mm: NonNegative = 0.0
    backlash_deg: NonNegative = 0.0
    readback_sigma_um: NonNegative = 0.0
    readback_sigma_mdeg: NonNegative = 0.0
    settle_time_ms: NonNegative = Field(default=0.0, description="time constant of the ringing after a move")
    settle_amplitude_um: NonNegative = Field(default=0.0, description="ringing at the moment of arrival")
    lost_steps: tuple[LostSteps, ...] = ()


class Echo(Model):
    """A reflection: the direct wave once more, later and weaker; a negative level turns it over."""

    extra_path_mm: Positive
    level: Annotated[float, Field(ge=-1, le=1)]


class Reverberation(Model):
    """Sound of earlier bursts that has not died away when the next one starts."""

    level: Annotated[float, Field(ge=0, le=1)] = Field(
        description="rms just after a burst, over the amplitude of the direct wave at the reference point"
    )
    decay_ms: Positive


class TankTruth(Model):
    """The water and what reflects in it."""

    temperature_c: Annotated[float, Field(ge=5, le=40)] = 20.0
    temperature_drift_c_per_h: Finite = 0.0
    thermometer_error_c: Annotated[float, Field(ge=-5, le=5)] = Field(
        default=0.0, description="what the thermometer says less what is true"
    )
    echoes: tuple[Echo, ...] = ()
    reverberation: Reverberation | None = None


class ElectronicsTruth(Model):
    """Noise, drifts and pick-up; voltages are at the oscilloscope's input."""

    noise_uv: NonNegative = Field(default=100.0, description="rms of a single capture without averaging")
    offset_mv: Finite = 0.0
    jitter_ns: NonNegative = Field(default=0.0, description="standard deviation of the trigger of one burst")
    pickup_mv: NonNegative = Field(default=0.0, description="amplitude at reference_drive_v, from time zero on")
    pickup_us: Positive = Field(default=2.0, description="duration of the pick-up")
    drive_drift_percent_per_h: Finite = 0.0
    saturation_v: Positive | None = Field(default=None, description="the preamplifier gives no more than this")


class Fault(Model):
    """Something that happens during the scan: from a time or from a capture on, for good or for a while."""

    onset_s: NonNegative | None = None
    onset_capture: Annotated[int, Field(ge=0)] | None = None
    duration_s: Positive | None = Field(default=None, description="left out: it stays; needs onset_s")

    @model_validator(mode="after")
    def _one_onset(self) -> Fault:
        if (self.onset_s is None) == (self.onset_capture is None):
            raise ValueError("exactly one of onset_s and onset_capture is needed")
        if self.duration_s is not None and self.onset_s is None:
            raise ValueError("duration_s needs onset_s")
        return self

    def active(self, time_s: float, capture: int) -> bool:
        """Whether the fault is there at that simulated time and capture number."""
        if self.onset_capture is not None:
            return capture >= self.onset_capture
        onset = self.onset_s or 0.0
        return onset <= time_s and (self.duration_s is None or time_s < onset + self.duration_s)


class Bubble(Fault):
    """A bubble on the face: what it covers feels no pressure."""

    kind: Literal["bubble"]
    radius_mm: Positive
    centre_mm: tuple[Finite, Finite] = Field(default=(0.0, 0.0), description="on the face, from its centre")


class DriveStep(Fault):
    """The output of the source changes suddenly."""

    kind: Literal["drive-step"]
    percent: Annotated[float, Field(gt=-100, le=1000)]


class SensorShift(Fault):
    """The sensor slips in its holder: the pivot offset changes."""

    kind: Literal["sensor-shift"]
    shift_mm: Vector


AnyFault = Annotated[Bubble | DriveStep | SensorShift, Field(discriminator="kind")]


class Truth(Model):
    """All of a `[simulation]` table."""

    seed: Annotated[int, Field(ge=0, lt=2**63)] = 0
    source: SourceTruth = SourceTruth()
    element: ElementTruth = ElementTruth()
    mechanics: MechanicsTruth = MechanicsTruth()
    tank: TankTruth = TankTruth()
    electronics: ElectronicsTruth = ElectronicsTruth()
    faults: tuple[AnyFault, ...] = ()


def read_truth(path: Path) -> Truth:
    """The `[simulation]` table of a bench file.

    Raises:
        TruthError: the file cannot be read, is no TOML, has no such table, or the table is wrong; all problems
            stand in one line.
    """
    try:
        document = tomllib.loads(path.read_text(encoding="utf-8"))
    except OSError as exc:
        raise TruthError(f"{path}: cannot be read: {exc.strerror or exc}") from exc
    except (tomllib.TOMLDecodeError, UnicodeDecodeError) as exc:
        raise TruthError(f"{path}: no valid TOML: {' '.join(str(exc).split())}") from exc
    table = document.get("simulation")
    if not isinstance(table, dict):
        raise TruthError(f"{path}: no [simulation] table; a simulated bench needs one")
    try:
        return Truth.model_validate(table)
    except ValidationError as exc:
        problems = "; ".join(_problem(dict(e)) for e in exc.errors(include_url=False))
        raise TruthError(f"{path}: {problems}") from exc


def _problem(error: dict[str, object]) -> str:
    """One problem as words: key, what is allowed, what was given."""
    location = error["loc"]
    keys = [str(k) for k in location] if isinstance(location, tuple) else []
    message = str(error["msg"]).removeprefix("Value error, ")
    given = error["input"]
    shown = "" if isinstance(given, dict) else f", given {given!r}"
    return f"simulation.{'.'.join(keys)}: {message}{shown}"
