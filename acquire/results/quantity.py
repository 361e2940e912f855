"""A measured quantity, and how it is written for people and for programs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field
from math import floor, isfinite, log10
from typing import Any


@dataclass(frozen=True)
class Quantity:
    """A value in the stated unit.

    `None` stands for a value that does not exist, such as an angle at which a level is never reached.
    """

    name: str
    value: float | None
    unit: str
    standard_uncertainty: float | None
    conditions: Mapping[str, float | str] = field(default_factory=dict)
    method: str = ""

    def as_mapping(self) -> dict[str, Any]:
        """For JSON: numbers that are not finite become null."""
        out = asdict(self)
        for key in ("value", "standard_uncertainty"):
            if out[key] is not None and not isfinite(out[key]):
                out[key] = None
        return out


def written(value: float | None, uncertainty: float | None, factor: float = 1.0) -> str:
    """Value and standard uncertainty to two digits of the uncertainty, as in `0.2013 ± 0.0012`.

    >>> written(0.00020134, 0.00000123, 1e3)
    '0.2013 ± 0.0012'
    >>> written(None, None)
    'none'
    """
    if value is None or not isfinite(value):
        return "none"
    if uncertainty is None or not isfinite(uncertainty) or uncertainty <= 0:
        return f"{value * factor:.4g}"
    u = uncertainty * factor
    places = max(0, 1 - floor(log10(u)))
    return f"{value * factor:.{places}f} ± {u:.{places}f}"
