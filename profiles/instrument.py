"""Instrument profile: a command family, its words, its limits. A new instrument of a known family is a file.

`commands` maps an action of the family to the text that is sent, as a `str.format` template. Which actions
a family needs, and which fields each template may use, stands in `ACTIONS`; a profile that lacks one, has
one too many, or uses another field is refused.
"""

from __future__ import annotations

from string import Formatter
from typing import Annotated, Literal

from pydantic import Field, model_validator

from profiles.model import Axis, Model, NonNegative, Positive, Profile

Role = Literal["oscilloscope", "generator", "stage", "thermometer"]
Family = Literal["preamble", "curve", "burst", "iso-words", "axis-prefix", "query"]

# role -> family -> action -> fields the template may use
ACTIONS: dict[Role, dict[Family, dict[str, tuple[str, ...]]]] = {
    "oscilloscope": {
        "preamble": {
            "vertical_full_scale": ("channel", "volts", "per_division"),
            "vertical_offset": ("channel", "volts"),
            "sample_rate": ("hertz",),
            "record_points": ("points",),
            "record_start": ("seconds",),
            "averaging": ("on", "count"),
            "trigger": ("volts",),
            "transfer": ("channel", "bits", "byte_order"),
            "arm": (),
            "stop": (),
            "preamble": (),
            "samples": (),
            "averages_taken": (),
        },
        "curve": {
            "vertical_full_scale": ("channel", "volts", "per_division"),
            "vertical_offset": ("channel", "volts"),
            "sample_rate": ("hertz",),
            "record_points": ("points",),
            "record_start": ("seconds",),
            "averaging": ("on", "count"),
            "trigger": ("volts",),
            "transfer": ("channel", "bits", "byte_order", "points"),
            "arm": (),
            "stop": (),
            "x_increment": (),
            "x_zero": (),
            "y_multiplier": (),
            "y_offset": (),
            "y_zero": (),
            "samples": (),
            "averages_taken": (),
        },
    },
    "generator": {
        "burst": {
            "frequency": ("hertz",),
            "amplitude": ("volts",),
            "cycles": ("cycles",),
            "repetition": ("seconds",),
            "burst_mode": ("on",),
            "output": ("on",),
            "output_state": (),
        },
    },
    "stage": {
        "iso-words": {},
        "axis-prefix": {},
    },
    "thermometer": {
        "query": {"temperature": ()},
    },
}


class ScopeLimits(Model):
    """What the oscilloscope can be set to."""

    full_scales_v: Annotated[tuple[Positive, ...], Field(min_length=1)]
    sample_rates_mhz: Annotated[tuple[Positive, ...], Field(min_length=1)]
    max_points: Annotated[int, Field(ge=16)]
    max_averages: Annotated[int, Field(ge=1)]
    divisions: Annotated[int, Field(ge=1)] = Field(default=8, description="full scale over volts per division")


class Transfer(Model):
    """How samples cross the wire."""

    bits: Literal[8, 16]
    byte_order: Literal["msb_first", "lsb_first"]
    signed: bool = True


class Instrument(Profile):
    """A command family as one instrument speaks it."""

    kind: Literal["instrument"]
    role: Role
    family: Family
    identity: str = Field(description="regular expression that the reply to the identity question must match")
    identify: str = Field(default="*IDN?", description="the identity question")
    timeout_s: Positive = 5.0
    terminator: Literal["\n", "\r\n", "\r"] = "\n"
    panel: str | None = Field(
        default=None, description="sent last, so that the front panel can be used again; left out: nothing is"
    )
    has_error_queue: bool = Field(default=True, description="answers SYSTem:ERRor?")
    commands: dict[str, str] = Field(default_factory=dict)
    scope: ScopeLimits | None = None
    transfer: Transfer | None = None
    axis_words: dict[Axis, str] | None = Field(
        default=None, description="stage only: the letter or number by which the controller names each axis"
    )
    settle_ms: NonNegative = Field(default=0.0, description="stage only: time it needs to come to rest")
    still_tolerance_um: Positive = Field(default=2.0, description="stage only: two reports this close are 'still'")
    still_tolerance_mdeg: Positive = 2.0

    @model_validator(mode="after")
    def _commands_fit_the_family(self) -> Instrument:
        families = ACTIONS[self.role]
        if self.family not in families:
            raise ValueError(f"family: {self.family!r} is not one for role {self.role}; allowed: {', '.join(families)}")
        wanted = families[self.family]
        problems = [f"commands.{a}: missing" for a in wanted if a not in self.commands]
        problems += [
            f"commands.{a}: unknown; allowed: {', '.join(wanted) or 'none'}" for a in self.commands if a not in wanted
        ]
        for action, template in self.commands.items():
            if action not in wanted:
                continue
            allowed = wanted[action]
            for _, field, _, _ in Formatter().parse(template):
                if field is not None and field not in allowed:
                    problems.append(f"commands.{action}: {{{field}}} unknown; allowed: {', '.join(allowed) or 'none'}")
        is_scope = self.role == "oscilloscope"
        problems += [
            f"{key}: {'missing, an oscilloscope needs it' if is_scope else 'only for an oscilloscope'}"
            for key, value in (("scope", self.scope), ("transfer", self.transfer))
            if (value is not None) != is_scope
        ]
        if (self.axis_words is not None) != (self.role == "stage"):
            problems.append("axis_words: a stage needs it, nothing else may have it")
        if problems:
            raise ValueError("; ".join(problems))
        return self
