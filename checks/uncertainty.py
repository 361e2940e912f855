"""Uncertainty budgets: the GUM (JCGM 100:2008), its Monte Carlo supplement (JCGM 101:2008), and E_n between results."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from math import floor, hypot, inf, isfinite, log10, sqrt
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from checks.errors import MeasurementError

Vector = NDArray[np.float64]
Distribution = Literal["normal", "rectangular", "triangular", "arcsine", "t"]
HALF_WIDTHS: dict[Distribution, float] = {"rectangular": sqrt(3), "triangular": sqrt(6), "arcsine": sqrt(2)}
STEP = 1e-3  # of a standard uncertainty, to either side: for partial derivatives


@dataclass(frozen=True)
class Input:
    """What a result depends on: value, standard uncertainty, distribution, degrees of freedom."""

    value: float
    u: float
    distribution: Distribution = "normal"
    freedom: float = inf

    def __post_init__(self) -> None:
        if not (isfinite(self.value) and isfinite(self.u) and self.u >= 0 and self.freedom > 0):
            raise MeasurementError("an input needs a finite value, an uncertainty of 0 or more, and degrees of freedom")
        if self.distribution == "t" and not 2 < self.freedom < inf:
            raise MeasurementError(
                "Student's t as a distribution needs more than 2 degrees of freedom, and not infinite"
            )

    @classmethod
    def within(
        cls, value: float, half_width: float, distribution: Distribution = "rectangular", freedom: float = inf
    ) -> Input:
        """From limits (JCGM 100, 4.3.7 and 4.3.9)."""
        if distribution not in HALF_WIDTHS:
            raise MeasurementError(f"{distribution} has no limits; allowed: {', '.join(HALF_WIDTHS)}")
        return cls(value, half_width / HALF_WIDTHS[distribution], distribution, freedom)

    def drawn(self, random: np.random.Generator, count: int) -> Vector:
        """Values by chance, shape (count,) (JCGM 101, 6.4)."""
        half = self.u * HALF_WIDTHS.get(self.distribution, 1.0)
        match self.distribution:
            case "rectangular":
                unit = random.uniform(-1, 1, count)
            case "triangular":
                unit = random.triangular(-1, 0, 1, count)
            case "arcsine":
                unit = np.sin(random.uniform(-np.pi, np.pi, count))
            case "t":
                unit = random.standard_t(self.freedom, count) / sqrt(self.freedom / (self.freedom - 2))
            case _:
                unit = random.standard_normal(count)
        return np.asarray(self.value + half * unit)


@dataclass(frozen=True)
class Contribution:
    """A row of a budget: an input, how the result follows it, and what it contributes."""

    source: str
    unit: str
    given: Input
    sensitivity: float

    @property
    def u(self) -> float:
        """Contribution to the standard uncertainty, in the unit of the result."""
        return abs(self.sensitivity) * self.given.u


@dataclass(frozen=True)
class Budget:
    """A result with all that makes it uncertain.

    `correlations` has coefficients between pairs of sources; what is not there is independent.
    """

    name: str
    unit: str
    value: float
    rows: tuple[Contribution, ...]
    correlations: Mapping[tuple[str, str], float] | None = None

    @property
    def u(self) -> float:
        """Combined standard uncertainty (JCGM 100, equations 10 and 16)."""
        square = sum(row.u**2 for row in self.rows)
        of = {row.source: row.sensitivity * row.given.u for row in self.rows}
        for (a, b), r in (self.correlations or {}).items():
            square += 2 * r * of[a] * of[b]
        return sqrt(max(square, 0.0))

    @property
    def freedom(self) -> float:
        """Effective degrees of freedom by Welch and Satterthwaite (JCGM 100, equation G.2b)."""
        below = sum(row.u**4 / row.given.freedom for row in self.rows)
        return self.u**4 / below if below > 0 else inf

    def coverage_factor(self, level: float = 0.95) -> float:
        """Student's t for the truncated degrees of freedom (JCGM 100, G.4)."""
        from scipy.stats import norm, t

        freedom = self.freedom
        half = (1 + level) / 2
        if freedom > 1e6:
            return float(norm.ppf(half))
        return float(t.ppf(half, max(1, floor(freedom))))

    def expanded(self, level: float = 0.95) -> float:
        """Expanded uncertainty."""
        return self.coverage_factor(level) * self.u


Function = Callable[..., float]


def budget_of(
    name: str, unit: str, function: Function, inputs: Mapping[str, Input], units: Mapping[str, str] | None = None
) -> Budget:
    """The budget of a function of named inputs, by numerical partial derivatives (JCGM 100, 5.1.3 note 2)."""
    at = {key: given.value for key, given in inputs.items()}
    rows = []
    for key, given in inputs.items():
        step = STEP * given.u
        slope = 0.0
        if step > 0:
            above, below = function(**at | {key: given.value + step}), function(**at | {key: given.value - step})
            slope = (above - below) / (2 * step)
        rows.append(Contribution(key, (units or {}).get(key, ""), given, slope))
    return Budget(name, unit, function(**at), tuple(rows))


@dataclass(frozen=True)
class Drawn:
    """A result by drawing its inputs: mean, standard deviation, shortest interval of the level."""

    mean: float
    u: float
    low: float
    high: float


def drawn(
    function: Callable[..., Vector], inputs: Mapping[str, Input], count: int, seed: int, level: float = 0.95
) -> Drawn:
    """Propagation of distributions (JCGM 101, clause 7); `function` takes arrays of shape (count,)."""
    random = np.random.default_rng(seed)
    values = np.sort(function(**{key: given.drawn(random, count) for key, given in inputs.items()}))
    held = max(1, round(level * count))
    if held >= count:
        raise MeasurementError(f"{count} draws are too few for an interval of {level:.0%}")
    widths = values[held:] - values[: count - held]
    first = int(np.argmin(widths))
    return Drawn(float(values.mean()), float(values.std(ddof=1)), float(values[first]), float(values[first + held]))


def tolerance(u: float, digits: int = 2) -> float:
    """Half a unit of the last of so many meaningful digits of a standard uncertainty (JCGM 101, 7.9.2)."""
    if not (isfinite(u) and u > 0):
        return 0.0
    places = floor(log10(u)) - digits + 1
    if round(u / 10.0**places) >= 10**digits:  # rounding carries: 0.0996 to two digits is 0.10
        places += 1
    return 0.5 * 10.0**places


def validated(budget: Budget, found: Drawn, level: float = 0.95, digits: int = 2) -> bool:
    """Whether both ends of the GUM's interval lie within the tolerance of the drawn one's (JCGM 101, 8.1.3)."""
    half = budget.expanded(level)
    apart = max(abs(budget.value - half - found.low), abs(budget.value + half - found.high))
    return apart <= tolerance(budget.u, digits)


def e_n(value: float, expanded_u: float, reference: float, reference_expanded_u: float) -> float:
    """Difference of two results over their expanded uncertainties (k = 2); they agree where its size is 1 or less.

    (value - reference) / sqrt(U² + U_ref²), ISO 13528 and ISO/IEC Guide 43-1 (seen quoted).
    """
    return (value - reference) / hypot(expanded_u, reference_expanded_u)
