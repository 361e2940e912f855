"""Bench profile: the instruments by role with their addresses, the axes, the geometry and the water."""

from __future__ import annotations

import re
from typing import Annotated, Any, Literal

from pydantic import Field, field_validator, model_validator

from profiles.instrument import Role
from profiles.model import AXES, LINEAR_AXES, Axis, Finite, Model, Name, NonNegative, Positive, Profile

ADDRESS = re.compile(r"^(tcp://[^:/]+:\d{1,5}|serial:///?[^?]+|visa://.+)$")


class Attached(Model):
    """An instrument of this bench and where it answers."""

    profile: Name
    address: str = Field(description="tcp://HOST:PORT, serial://DEVICE or visa://RESOURCE")
    channel: Annotated[int, Field(ge=1, le=16)] = 1
    baud_rate: Annotated[int, Field(ge=300)] = 115_200

    @field_validator("address")
    @classmethod
    def _known_scheme(cls, value: str) -> str:
        if not ADDRESS.match(value):
            raise ValueError(f"{value!r} is no address; allowed: tcp://HOST:PORT, serial:///dev/NAME, visa://RESOURCE")
        if value.startswith("tcp://") and not 0 <= int(value.rpartition(":")[2]) <= 65_535:
            raise ValueError(f"{value!r} has no such port; allowed: up to 65535")
        return value


class LinearAxis(Model):
    """Travel and speed of a linear axis."""

    low_mm: Finite
    high_mm: Finite
    speed_mm_per_s: Positive
    acceleration_mm_per_s2: Positive = 100.0
    backlash_mm: NonNegative = Field(default=0.0, description="overrun used to take up backlash; 0: none")

    @model_validator(mode="after")
    def _low_below_high(self) -> LinearAxis:
        if self.low_mm >= self.high_mm:
            raise ValueError(f"low_mm {self.low_mm} must be below high_mm {self.high_mm}")
        return self


class RotaryAxis(Model):
    """Travel and speed of a rotary axis."""

    low_deg: Annotated[float, Field(ge=-360, le=360)]
    high_deg: Annotated[float, Field(ge=-360, le=360)]
    speed_deg_per_s: Positive
    acceleration_deg_per_s2: Positive = 100.0
    backlash_deg: NonNegative = 0.0

    @model_validator(mode="after")
    def _low_below_high(self) -> RotaryAxis:
        if self.low_deg >= self.high_deg:
            raise ValueError(f"low_deg {self.low_deg} must be below high_deg {self.high_deg}")
        return self


class AxisTable(Model):
    """The axes that the stage has; one that is left out cannot move and stands at zero."""

    x: LinearAxis | None = None
    y: LinearAxis | None = None
    z: LinearAxis | None = None
    theta: RotaryAxis | None = Field(default=None, description="rotation about an axis nominally parallel to y")
    phi: RotaryAxis | None = Field(default=None, description="roll of the sensor about its own axis")

    def present(self) -> tuple[Axis, ...]:
        """Names of the axes that can move, in the order x, y, z, theta, phi."""
        return tuple(a for a in AXES if getattr(self, a) is not None)


class KeepOut(Model):
    """A box, in the coordinates of the element centre, that it must not enter."""

    name: str
    low_mm: tuple[Finite, Finite, Finite]
    high_mm: tuple[Finite, Finite, Finite]

    @model_validator(mode="after")
    def _low_below_high(self) -> KeepOut:
        bad = [a for a, lo, hi in zip(LINEAR_AXES, self.low_mm, self.high_mm, strict=True) if lo >= hi]
        if bad:
            raise ValueError(f"low_mm must be below high_mm along {', '.join(bad)}")
        return self


class Geometry(Model):
    """Where reflections come from."""

    reflector_distance_mm: Positive = Field(
        description="from the beam axis to the nearest wall, floor or water surface; sets the echo-free gate"
    )


class Water(Model):
    """What is known of the water besides what a thermometer says."""

    temperature_c: Annotated[float, Field(ge=5, le=40)] = Field(
        default=20.0, description="taken where no thermometer answers"
    )
    temperature_u_c: Annotated[float, Field(gt=0, le=5)] = Field(
        default=0.1, description="standard uncertainty of the temperature, whoever tells it"
    )


class Bench(Profile):
    """All that the daemon knows of a bench. `simulation` is the simulator's: the daemon does not read it."""

    kind: Literal["bench"]
    instruments: dict[Role, Attached]
    axes: AxisTable
    geometry: Geometry
    water: Water = Water()
    keep_out: tuple[KeepOut, ...] = ()
    simulation: dict[str, Any] | None = Field(default=None, exclude=True, repr=False)

    @model_validator(mode="after")
    def _complete(self) -> Bench:
        problems = [
            f"instruments.{role}: missing"
            for role in ("oscilloscope", "stage", "generator")
            if role not in self.instruments
        ]
        if not self.axes.present():
            problems.append("axes: at least one axis is needed")
        addresses = [a.address for a in self.instruments.values()]
        problems += [
            f"instruments: address {a} is given twice" for a in sorted({a for a in addresses if addresses.count(a) > 1})
        ]
        if problems:
            raise ValueError("; ".join(problems))
        return self
