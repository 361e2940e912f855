"""Numbers as findings say them: two digits of the uncertainty, and units that people use at a bench."""

from __future__ import annotations

from math import degrees, floor, isfinite, log10


def rounded(value: float, uncertainty: float) -> str:
    """`value ± uncertainty`, both to two digits of the uncertainty."""
    if not isfinite(uncertainty) or uncertainty <= 0:
        return f"{value:.3g}"
    places = max(0, min(9, 1 - floor(log10(uncertainty))))
    return f"{value:.{places}f} ± {uncertainty:.{places}f}"


def mm(value_m: float, uncertainty_m: float) -> str:
    """Millimetres."""
    return f"{rounded(value_m * 1e3, uncertainty_m * 1e3)} mm"


def deg(value_rad: float, uncertainty_rad: float) -> str:
    """Degrees."""
    return f"{rounded(degrees(value_rad), degrees(uncertainty_rad))}°"


def decibel(value: float) -> str:
    """Decibels to a tenth, or to two digits when small."""
    return f"{value:.1f} dB" if abs(value) >= 1 else f"{value:.2g} dB"


def mhz(value_hz: float) -> str:
    """Megahertz."""
    return f"{value_hz / 1e6:.4g} MHz"
