"""What every profile has in common: strict keys, finite numbers, a kind, a format version and a name."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import BaseModel, ConfigDict, Field

Name = Annotated[str, Field(pattern=r"^[a-z0-9][a-z0-9-]{0,63}$", description="lower case, digits and hyphens")]
Positive = Annotated[float, Field(gt=0, allow_inf_nan=False)]
NonNegative = Annotated[float, Field(ge=0, allow_inf_nan=False)]
Finite = Annotated[float, Field(allow_inf_nan=False)]
Axis = Literal["x", "y", "z", "theta", "phi"]
AXES: tuple[Axis, ...] = ("x", "y", "z", "theta", "phi")
LINEAR_AXES: tuple[Axis, ...] = ("x", "y", "z")


class Model(BaseModel):
    """A table of a profile: unknown keys are refused and values do not change after reading."""

    model_config = ConfigDict(extra="forbid", frozen=True)


class Profile(Model):
    """The head of every profile file."""

    format_version: Literal[1] = Field(description="version of the profile format")
    name: Name
    title: str = Field(default="", description="one line for people")
