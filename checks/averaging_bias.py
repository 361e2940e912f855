"""By how much an element reads a measured beam low and wide, said plainly; a correction only for who asks for it.

Two routes: the true profile fitted to the measured one (`checks.beam_profile`), and a Gaussian beam that would be
measured as wide. What they differ by is doubt of the model.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import hypot, inf, isfinite, log10, sqrt

import numpy as np
from numpy.typing import NDArray

from checks.averaging import averaged_share, widened
from checks.beam import Width
from checks.beam_profile import fit_profile
from checks.errors import MeasurementError

Vector = NDArray[np.float64]
MOST = 0.8405  # element over measured width: beyond, the beam is hidden by the element; 1 of the true width
HIDDEN = 1.19  # measured over true width there
CORRECTABLE = 0.5  # of the measured width; beyond, a correction is a guess
ONE_ROUTE = 0.2  # of the loss, where only the Gaussian route goes through; of the widening three times that


@dataclass(frozen=True)
class Bias:
    """What an element does to the peak and the -6 dB width of a beam.

    Attributes:
        radius_m: effective radius of the element. width6_m: as measured.
        share: of the true peak that is read; standard uncertainty `share_u`.
        widening: measured over true width; standard uncertainty `widening_u`.
        resolved: False where the element hides the beam: `share` is then the most that it can be, `widening` the least.
    """

    radius_m: float
    width6_m: float
    share: float
    share_u: float
    widening: float
    widening_u: float
    resolved: bool = True

    @property
    def low_db(self) -> float:
        """By how much the peak is read low, dB."""
        return -20 * log10(self.share)


def gaussian_bias(radius_m: float, width6_m: float) -> tuple[float, float]:
    """Share of the peak that is read, and measured over true width, for a Gaussian beam measured as that wide.

    Raises:
        MeasurementError: an element that hides the beam.
    """
    from scipy.optimize import brentq

    if not (width6_m > 0 and radius_m >= 0):
        raise MeasurementError(f"radius {radius_m:g} m and width {width6_m:g} m: give a width above 0, a radius from 0")
    if 2 * radius_m > MOST * width6_m:
        raise MeasurementError(
            f"an element of {2e3 * radius_m:.3g} mm diameter hides a beam that it measures {1e3 * width6_m:.3g} mm wide"
        )
    if radius_m < 1e-6 * width6_m:
        return 1.0, 1.0
    most = 2 * radius_m * 0.99  # at 1 the widening is 1.19, and the measured width 0.84 of the element's
    true = float(brentq(lambda w: widened(radius_m, w) - width6_m, min(most, width6_m / 2), width6_m, xtol=1e-12))
    return averaged_share(radius_m, true), width6_m / true


def bias_of(
    position_m: Vector, amplitude: Vector, sigma: Vector, width: Width, radius_m: float, radius_u_m: float = 0.0
) -> Bias:
    """Bias along a measured profile, each of shape (n,), whose -6 dB width is `width`.

    `sigma` is the standard uncertainty of the amplitudes, `radius_u_m` that of the element's effective radius.

    Raises:
        MeasurementError: a radius that is none.
    """
    if not (isfinite(radius_m) and radius_m > 0 and radius_u_m >= 0):
        raise MeasurementError(f"effective radius {radius_m:g} m with uncertainty {radius_u_m:g} m: give one above 0")
    wide, wide_u = width.width_m, width.standard_uncertainty_m
    try:
        share, widening = gaussian_bias(radius_m, wide)
    except MeasurementError:
        share, widening = averaged_share(MOST * wide / 2, wide / HIDDEN), HIDDEN
        return Bias(radius_m, wide, share, inf, widening, inf, resolved=False)
    # both go as (a/w)² to first order
    known = 2 * hypot(radius_u_m / radius_m, wide_u / wide)
    share_u, widening_u = ONE_ROUTE * (1 - share), ONE_ROUTE * 3 * (widening - 1)
    try:
        fitted = fit_profile(position_m, amplitude, sigma, radius_m)
    except MeasurementError:
        fitted = None
    if fitted is not None and fitted.share_u < share_u:
        share_u = hypot(fitted.share_u, abs(share - fitted.share) / sqrt(3))
        widening_u = hypot(fitted.widening_u, abs(widening - fitted.widening) / sqrt(3))
        share, widening = fitted.share, fitted.widening
        known = 2 * radius_u_m / radius_m  # the fit has its own idea of the width
    share_u, widening_u = hypot(share_u, known * (1 - share)), hypot(widening_u, known * abs(widening - 1))
    return Bias(radius_m, wide, share, share_u, widening, widening_u)


def statement(bias: Bias, harmonic: int, frequency_hz: float, largest_radius_m: float) -> str:
    """One sentence: what this element does to this harmonic, and what would do."""
    element = f"an element of {_mm(bias.radius_m)} mm diameter"
    what = (
        f"the {_ordinal(harmonic)} harmonic ({frequency_hz / 1e6:.4g} MHz)"
        if harmonic > 1
        else (f"the fundamental ({frequency_hz / 1e6:.4g} MHz)")
    )
    least = "" if bias.resolved else "at least "
    read = f"{element} reads {what} {least}{bias.low_db:.2g} dB low and its width {least}{_percent(bias)} % wide"
    if bias.radius_m <= largest_radius_m:
        return f"{read}; it is small enough by the criterion, which allows {_mm(largest_radius_m)} mm"
    return f"{read}; use {_mm(largest_radius_m)} mm diameter or less"


def _mm(radius_m: float) -> str:
    return f"{2e3 * radius_m:.2g}"


def _percent(bias: Bias) -> str:
    return f"{100 * (bias.widening - 1):.2g}"


def _ordinal(n: int) -> str:
    ending = {1: "st", 2: "nd", 3: "rd"}.get(n % 10, "th") if n % 100 not in (11, 12, 13) else "th"
    return f"{n}{ending}"


@dataclass(frozen=True)
class Corrected:
    """A value put right for averaging, because somebody asked for it."""

    value: float
    standard_uncertainty: float
    label: str


def corrected_peak(value: float, standard_uncertainty: float, bias: Bias) -> Corrected:
    """A peak of one harmonic as a point would have read it; the trade's rule is a smaller element instead.

    Raises:
        MeasurementError: the element is more than half as large as the beam, or the beam is not known.
    """
    _correctable(bias)
    u = hypot(standard_uncertainty, value * bias.share_u / bias.share) / bias.share
    label = f"corrected for averaging: divided by {bias.share:.4f}; {_assumed(bias)}"
    return Corrected(value / bias.share, u, label)


def corrected_width(standard_uncertainty: float, bias: Bias) -> Corrected:
    """The -6 dB width of one harmonic as a point would have measured it, m.

    Raises:
        MeasurementError: as `corrected_peak`.
    """
    _correctable(bias)
    u = hypot(standard_uncertainty, bias.width6_m * bias.widening_u / bias.widening) / bias.widening
    label = f"corrected for averaging: divided by {bias.widening:.4f}; {_assumed(bias)}"
    return Corrected(bias.width6_m / bias.widening, u, label)


def _correctable(bias: Bias) -> None:
    if not bias.resolved or 2 * bias.radius_m > CORRECTABLE * bias.width6_m:
        raise MeasurementError(
            f"no correction for averaging: the element ({_mm(bias.radius_m)} mm diameter) is more than "
            f"{CORRECTABLE:g} of the beam's width ({1e3 * bias.width6_m:.2g} mm); measure with a smaller one"
        )


def _assumed(bias: Bias) -> str:
    return (
        f"assumes a disc of radius {bias.radius_m * 1e3:.4g} mm that adds up the pressure over its face, and a beam "
        "that is the same all round, with one phase over the face"
    )


@dataclass(frozen=True)
class TwoSensors:
    """Peaks of one beam by two sensors, in dB, first over second.

    Attributes:
        measured_db: as read. explained_db: what averaging makes of it. left_db: the rest, with standard uncertainty.
        e_n: of what is left; within -1 and 1 the two agree.
    """

    measured_db: float
    explained_db: float
    left_db: float
    left_u_db: float

    @property
    def e_n(self) -> float:
        """With expanded uncertainties, k = 2."""
        return self.left_db / (2 * self.left_u_db)


def compare(first: tuple[float, float, Bias], second: tuple[float, float, Bias]) -> TwoSensors:
    """Compare two peaks, each with its standard uncertainty and bias.

    Raises:
        MeasurementError: a beam that is hidden, a peak that is none, or no uncertainty at all.
    """
    logs, variances = [], []
    for value, u, bias in (first, second):
        if not bias.resolved:
            raise MeasurementError("one of the elements hides the beam: what averaging explains is not known")
        if not (value > 0 and u >= 0):
            raise MeasurementError(f"peak {value:g} with standard uncertainty {u:g}: give a peak above 0")
        logs.append((log10(value), log10(bias.share)))
        variances.append((u / value) ** 2 + (bias.share_u / bias.share) ** 2)
    measured, explained = (20 * (logs[0][i] - logs[1][i]) for i in (0, 1))
    left_u = 20 / np.log(10) * sqrt(sum(variances))
    if not left_u > 0:
        raise MeasurementError("a comparison needs the uncertainty of at least one of the two")
    return TwoSensors(measured, explained, measured - explained, float(left_u))
