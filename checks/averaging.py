"""What averaging over the face of the element does to a beam that is Gaussian across: the trade's first estimate.

p = p0 exp(-r²/w²) averaged over a centred disc of radius a is p0 (w²/a²)(1 - exp(-a²/w²)) (derived).
"""

from __future__ import annotations

from math import exp, expm1, log, sqrt

W6_TO_W = 1 / (2 * sqrt(0.3 * log(10)))  # w from the full -6 dB width


def averaged_share(radius_m: float, width6_m: float) -> float:
    """Share of the true peak that an element of that radius reads in a Gaussian beam of that -6 dB width."""
    s = (radius_m / (width6_m * W6_TO_W)) ** 2
    return -expm1(-s) / s if s > 1e-12 else 1.0


def true_width6(measured_width6_m: float, radius_m: float) -> float:
    """-6 dB width of the beam before averaging widened it, by second moments: w_m² = w² + a²/2."""
    w = measured_width6_m * W6_TO_W
    square = w**2 - radius_m**2 / 2
    return sqrt(max(square, (0.1 * w) ** 2)) / W6_TO_W


def largest_radius(width6_m: float, loss: float) -> float:
    """Largest radius (m) at which the peak is read low by no more than `loss` (as a share, 0.01 is 1 %)."""
    low, high = 0.0, 10.0
    for _ in range(80):  # bisection of a falling function of s = (a/w)^2
        middle = (low + high) / 2
        share = (1 - exp(-middle)) / middle if middle > 0 else 1.0
        low, high = (middle, high) if 1 - share < loss else (low, middle)
    return sqrt(low) * width6_m * W6_TO_W
