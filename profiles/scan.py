"""Scan profile: what to visit, in which order, and what to capture at each point."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from profiles.model import AXES, LINEAR_AXES, Axis, Finite, Model, Name, NonNegative, Positive, Profile

RotationOrder = Literal["interleaved", "out-and-back", "one-way", "as-listed"]
RasterOrder = Literal["serpentine", "one-way"]


class Position(Model):
    """Where the element centre stands at angle zero (rotation), or the middle of the raster."""

    x_mm: Finite = 0.0
    y_mm: Finite = 0.0
    z_mm: Positive


class Capture(Model):
    """What the oscilloscope records at each point."""

    averages: Annotated[int, Field(ge=1, le=65_536)] = 1
    sample_rate_mhz: Positive
    points: Annotated[int, Field(ge=64, le=10_000_000)]
    lead_us: NonNegative = Field(default=4.0, description="recorded before the expected arrival")
    start_us: NonNegative | None = Field(
        default=None, description="start of the record after the trigger; left out: lead_us before the expected arrival"
    )
    full_scale_v: Positive | None = Field(default=None, description="left out: found by autorange at the reference")
    dwell_ms: NonNegative = Field(default=0.0, description="extra wait after the stage is still")


class Rotation(Model):
    """Angles: a span with a step, a list, or a step chosen from the highest wanted frequency."""

    span_deg: Annotated[float, Field(gt=0, le=180)] | None = Field(
        default=None, description="full span, centred on zero"
    )
    step_deg: Annotated[float, Field(gt=0, le=90)] | None = None
    angles_deg: Annotated[tuple[Annotated[float, Field(ge=-90, le=90)], ...], Field(min_length=3)] | None = None
    highest_mhz: Positive | None = Field(default=None, description="choose the step so that this frequency is resolved")
    planes_deg: Annotated[tuple[Annotated[float, Field(ge=-180, le=180)], ...], Field(min_length=1)] = (0.0,)
    order: RotationOrder = "interleaved"
    repeats: Annotated[int, Field(ge=1, le=1000)] = 1

    @model_validator(mode="after")
    def _one_way_to_say_it(self) -> Rotation:
        problems = []
        if self.angles_deg is not None:
            problems += [
                f"{k}: contradicts angles_deg; give one"
                for k in ("span_deg", "step_deg", "highest_mhz")
                if getattr(self, k) is not None
            ]
            if len(set(self.angles_deg)) != len(self.angles_deg):
                problems.append("angles_deg: an angle is given twice; use repeats")
        else:
            if self.span_deg is None:
                problems.append("span_deg: missing; give span_deg or angles_deg")
            if (self.step_deg is None) == (self.highest_mhz is None):
                problems.append("give exactly one of step_deg and highest_mhz")
            if self.order == "as-listed":
                problems.append("order: as-listed needs angles_deg")
            if self.step_deg is not None and self.span_deg is not None and self.step_deg > self.span_deg / 2:
                problems.append(f"step_deg: {self.step_deg} is above half the span, {self.span_deg / 2}")
        if len(set(self.planes_deg)) != len(self.planes_deg):
            problems.append("planes_deg: a plane is given twice")
        if problems:
            raise ValueError("; ".join(problems))
        return self


class RasterAxis(Model):
    """One direction of a raster."""

    axis: Literal["x", "y", "z"]
    span_mm: Positive
    step_mm: Positive

    @model_validator(mode="after")
    def _at_least_two_steps(self) -> RasterAxis:
        if self.step_mm > self.span_mm / 2:
            raise ValueError(f"step_mm: {self.step_mm} is above half the span, {self.span_mm / 2}")
        return self


class Raster(Model):
    """A line (one direction), a plane (two) or a volume (three); the first direction is the fastest."""

    directions: Annotated[tuple[RasterAxis, ...], Field(min_length=1, max_length=3)]
    order: RasterOrder = "serpentine"

    @model_validator(mode="after")
    def _distinct(self) -> Raster:
        axes = [d.axis for d in self.directions]
        if len(set(axes)) != len(axes):
            raise ValueError(f"directions: an axis is given twice: {', '.join(axes)}")
        return self


class PivotCorrection(Model):
    """Element centre seen from the rotation axis at angle zero, and the tilt of that axis, to make good."""

    x_mm: Finite = 0.0
    y_mm: Finite = 0.0
    z_mm: Finite = 0.0
    tilt_x_deg: Annotated[float, Field(ge=-30, le=30)] = Field(
        default=0.0, description="the axis leans in the y-z plane"
    )
    tilt_z_deg: Annotated[float, Field(ge=-30, le=30)] = Field(
        default=0.0, description="the axis leans in the x-y plane"
    )


class Scan(Profile):
    """A rotation or a raster."""

    kind: Literal["scan"]
    sensor: Name
    source: Name
    position: Position
    capture: Capture
    rotation: Rotation | None = None
    raster: Raster | None = None
    revisit_every: Annotated[int, Field(ge=0)] = Field(
        default=10, description="go back to the reference point after this many points; 0: never"
    )
    highest_mhz: Positive | None = Field(default=None, description="highest frequency wanted in the result")
    pivot: PivotCorrection = PivotCorrection()
    hold_on: tuple[Literal["caution", "halt"], ...] = Field(
        default=("halt",), description="severities of findings at which the scan waits for the operator"
    )

    @model_validator(mode="after")
    def _one_geometry(self) -> Scan:
        if (self.rotation is None) == (self.raster is None):
            raise ValueError("give exactly one of [rotation] and [raster]")
        nyquist = self.capture.sample_rate_mhz / 2
        if self.highest_mhz is not None and self.highest_mhz >= nyquist:
            raise ValueError(f"highest_mhz: {self.highest_mhz} must be below half the sample rate, {nyquist}")
        return self


__all__ = [
    "AXES",
    "LINEAR_AXES",
    "Axis",
    "Capture",
    "PivotCorrection",
    "Position",
    "Raster",
    "RasterAxis",
    "Rotation",
    "Scan",
]
