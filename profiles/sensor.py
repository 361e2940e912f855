"""Sensor profile: the hydrophone as its data sheet states it. What it really is, is found by measuring."""

from __future__ import annotations

from itertools import pairwise
from typing import Annotated, Literal

from pydantic import Field, model_validator

from profiles.model import Finite, Model, NonNegative, Positive, Profile


class SensitivityRow(Model):
    """One line of a sensitivity table; the sensitivity in one of two units, uncertainties standard (k = 1)."""

    frequency_mhz: Positive
    sensitivity_nv_per_pa: Positive | None = None
    sensitivity_db: Annotated[float, Field(lt=0, allow_inf_nan=False)] | None = Field(
        default=None, description="dB re 1 V/µPa"
    )
    phase_deg: Finite | None = None
    uncertainty_percent: NonNegative | None = Field(default=None, description="of the magnitude, standard")
    phase_uncertainty_deg: NonNegative | None = None

    @model_validator(mode="after")
    def _one_unit(self) -> SensitivityRow:
        if (self.sensitivity_nv_per_pa is None) == (self.sensitivity_db is None):
            raise ValueError("sensitivity_nv_per_pa: give exactly one of sensitivity_nv_per_pa and sensitivity_db")
        if self.phase_uncertainty_deg is not None and self.phase_deg is None:
            raise ValueError("phase_uncertainty_deg: needs phase_deg")
        return self


class Loading(Model):
    """What the element drives, where the table is of its open circuit."""

    element_pf: Positive
    cable_pf: NonNegative = 0.0
    preamplifier_input_pf: NonNegative = 0.0
    preamplifier_input_kohm: Positive | None = Field(default=None, description="none: no resistance")
    preamplifier_gain_db: Finite = 0.0


class Sensor(Profile):
    """A hydrophone with a circular element."""

    kind: Literal["sensor"]
    nominal_radius_mm: Positive
    highest_mhz: Positive = Field(description="upper end of the useful band")
    sensitivity: Annotated[tuple[SensitivityRow, ...], Field(min_length=1)]
    loading: Loading | None = Field(default=None, description="none: the table is of the whole chain")

    @model_validator(mode="after")
    def _table_ascends(self) -> Sensor:
        f = [row.frequency_mhz for row in self.sensitivity]
        if any(b <= a for a, b in pairwise(f)):
            raise ValueError("sensitivity: frequency_mhz must ascend from row to row")
        return self

    @model_validator(mode="after")
    def _columns_are_whole(self) -> Sensor:
        for key in ("sensitivity_db", "phase_deg", "uncertainty_percent", "phase_uncertainty_deg"):
            if len({getattr(row, key) is None for row in self.sensitivity}) > 1:
                raise ValueError(f"sensitivity: {key} must be in every row or in none")
        return self
