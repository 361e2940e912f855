"""Source profile: the transducer and the drive that it is given."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from profiles.model import Positive, Profile


class Source(Profile):
    """A circular source driven by a tone burst."""

    kind: Literal["source"]
    radius_mm: Positive
    focal_length_mm: Positive | None = Field(default=None, description="radius of curvature; left out: a plane source")
    frequency_mhz: Positive
    cycles: Annotated[int, Field(ge=1, le=100_000)]
    drive_v: Positive = Field(description="peak-to-peak amplitude asked of the generator")
    max_drive_v: Positive
    repetition_hz: Positive
    highest_harmonic: Annotated[int, Field(ge=1, le=100)] = 1

    @model_validator(mode="after")
    def _consistent(self) -> Source:
        problems = []
        if self.drive_v > self.max_drive_v:
            problems.append(f"drive_v {self.drive_v} is above max_drive_v {self.max_drive_v}")
        burst_s = self.cycles / (self.frequency_mhz * 1e6)
        if burst_s * self.repetition_hz > 0.5:
            problems.append(
                f"repetition_hz {self.repetition_hz}: the burst lasts {burst_s * 1e6:.3g} us, "
                f"so at most {0.5 / burst_s:.4g} Hz is allowed"
            )
        if self.focal_length_mm is not None and self.focal_length_mm < self.radius_mm:
            problems.append(f"focal_length_mm {self.focal_length_mm} is below radius_mm {self.radius_mm}")
        if problems:
            raise ValueError("; ".join(problems))
        return self
