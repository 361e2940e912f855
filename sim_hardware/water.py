"""Pure water at one atmosphere against temperature, from published fits. Temperatures in degrees Celsius."""

from __future__ import annotations

import math

# Marczak, J. Acoust. Soc. Am. 102 (1997) 2776: speed of sound in m/s, 0 to 95 C. The third coefficient is
# often misprinted as -5.779136e-2, which is 0.08 m/s too fast at 20 C.
_MARCZAK = (1.402385e3, 5.038813, -5.799136e-2, 3.287156e-4, -1.398845e-6, 2.787860e-9)
# Jones and Harris, J. Res. NIST 97 (1992) 335: density of air-saturated water in kg/m3, 5 to 40 C.
_JONES_HARRIS = (999.84847, 6.337563e-2, -8.523829e-3, 6.943248e-5, -3.821216e-7)
# Fit to Pinkerton, Proc. Phys. Soc. B 62 (1949) 129: alpha/f^2 in 1e-15 Np s^2/m, 0 to 60 C.
_PINKERTON = (
    56.723531840522710,
    -2.899633796917384,
    0.099253401567561,
    -0.002067402501557,
    2.189417428917596e-5,
    -6.210860973978427e-8,
    -6.402634551821596e-10,
    3.869387679459408e-12,
)
# Fit to Beyer, J. Acoust. Soc. Am. 32 (1960) 719: the parameter of nonlinearity B/A.
_BEYER = (
    4.186533937275504,
    5.380874771364909e-2,
    -9.355518377254833e-4,
    1.047843302423604e-5,
    -4.587913769504693e-8,
)


def _polynomial(coefficients: tuple[float, ...], x: float) -> float:
    total = 0.0
    for coefficient in reversed(coefficients):
        total = total * x + coefficient
    return total


def sound_speed(temperature_c: float) -> float:
    """Speed of sound in m/s."""
    return _polynomial(_MARCZAK, temperature_c)


def density(temperature_c: float) -> float:
    """Density in kg/m3."""
    return _polynomial(_JONES_HARRIS, temperature_c)


def absorption(temperature_c: float) -> float:
    """Amplitude absorption over the square of frequency, in Np s^2/m: alpha = absorption * f^2."""
    return 1e-15 * _polynomial(_PINKERTON, temperature_c)


def nonlinearity(temperature_c: float) -> float:
    """Coefficient of nonlinearity, 1 + B/(2A), without unit."""
    return 1 + _polynomial(_BEYER, temperature_c) / 2


def shock_distance(pressure_pa: float, frequency_hz: float, temperature_c: float) -> float:
    """Where a plane wave that starts as a sine of that amplitude first becomes steep without limit, in m.

    x_s = rho c^3 / (beta omega p0).
    """
    c = sound_speed(temperature_c)
    omega = 2 * math.pi * frequency_hz
    return density(temperature_c) * c**3 / (nonlinearity(temperature_c) * omega * pressure_pa)
