"""A measured quantity, and how it is written for people and for programs."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, replace
from math import floor, isfinite, log10
from typing import Any

from checks.uncertainty import Budget


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
    budget: Budget | None = None

    def as_mapping(self) -> dict[str, Any]:
        """For JSON: numbers that are not finite become null; with the budget as rows where there is one."""
        out = asdict(replace(self, budget=None))
        out.pop("budget")
        if self.budget is not None:
            out |= {"budget": budget_rows(self.budget)} | expanded(self.budget)
        for key in ("value", "standard_uncertainty"):
            if out[key] is not None and not isfinite(out[key]):
                out[key] = None
        return out


def budget_rows(budget: Budget) -> list[dict[str, Any]]:
    """A budget as rows of JSON; degrees of freedom without end become null."""
    return [
        {
            "source": row.source,
            "value": row.given.value,
            "unit": row.unit,
            "standard_uncertainty": row.given.u,
            "distribution": row.given.distribution,
            "degrees_of_freedom": row.given.freedom if isfinite(row.given.freedom) else None,
            "sensitivity_coefficient": row.sensitivity,
            "contribution": row.u,
        }
        for row in budget.rows
    ]


def expanded(budget: Budget) -> dict[str, Any]:
    """What a certificate states besides: expanded uncertainty for 95 %, its factor, effective degrees of freedom."""
    return {
        "expanded_uncertainty": budget.expanded(),
        "coverage_factor": budget.coverage_factor(),
        "coverage_probability": 0.95,
        "effective_degrees_of_freedom": budget.freedom if isfinite(budget.freedom) else None,
    }


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
