"""Sensor profile: the hydrophone as its data sheet states it. What it really is, is found by measuring."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Literal

from pydantic import Field, model_validator

from profiles.model import Model, Positive, Profile


class SensitivityRow(Model):
    """One line of a sensitivity table."""

    frequency_mhz: Positive
    sensitivity_nv_per_pa: Positive


class Sensor(Profile):
    """A hydrophone with a circular element."""

    kind: Literal["sensor"]
    nominal_radius_mm: Positive
    highest_mhz: Positive = Field(description="upper end of the useful band")
    sensitivity: Annotated[tuple[SensitivityRow, ...], Field(min_length=1)]

    @model_validator(mode="after")
    def _table_ascends(self) -> Sensor:
        f = [row.frequency_mhz for row in self.sensitivity]
        if any(b <= a for a, b in pairwise(f)):
            raise ValueError("sensitivity: frequency_mhz must ascend from row to row")
        return self
