"""Properties of water at atmospheric pressure against temperature (ITS-90, degrees Celsius)."""

from __future__ import annotations

from math import hypot

import numpy as np
from numpy.polynomial.polynomial import polyder, polyval

from checks.errors import MeasurementError

LOW_C, HIGH_C = 0.0, 60.0

# W. Marczak, J. Acoust. Soc. Am. 102, 2776 (1997), pure water, 0 to 95 °C. A misprint of the third coefficient
# (5.779e-2) is in circulation; IAPWS-95 decides for the one used here.
FORMULA_U = 0.03  # m/s, its greatest difference from IAPWS-95
SPEED = (1.402385e3, 5.038813, -5.799136e-2, 3.287156e-4, -1.398845e-6, 2.787860e-9)
# F. E. Jones, G. L. Harris, J. Res. NIST 97, 335 (1992), air-saturated water, 5 to 40 °C
DENSITY = (999.84847, 6.337563e-2, -8.523829e-3, 6.943248e-5, -3.821216e-7)
# seventh-order fit to J. M. M. Pinkerton, Proc. Phys. Soc. B 62, 129 (1949), 0 to 60 °C, 1e-15 Np m^-1 Hz^-2
ABSORPTION = (
    56.723531840522710,
    -2.899633796917384,
    0.099253401567561,
    -0.002067402501557,
    2.189417428917596e-5,
    -6.210860973978427e-8,
    -6.402634551821596e-10,
    3.869387679459408e-12,
)


def _within(temperature_c: float) -> float:
    if not LOW_C <= temperature_c <= HIGH_C:
        raise MeasurementError(f"water at {temperature_c:g} °C: allowed are {LOW_C:g} to {HIGH_C:g} °C")
    return temperature_c


def speed_of_sound(temperature_c: float) -> float:
    """Speed of sound, m/s (Marczak 1997; within 0.04 m/s of IAPWS-95).

    Raises:
        MeasurementError: outside 0 to 60 °C.
    """
    return float(polyval(_within(temperature_c), np.array(SPEED)))


def speed_u(temperature_c: float, temperature_u_c: float) -> float:
    """Relative standard uncertainty of the speed of sound from that of the temperature, and of the formula itself."""
    slope = float(polyval(_within(temperature_c), polyder(np.array(SPEED))))
    return hypot(slope * temperature_u_c, FORMULA_U) / speed_of_sound(temperature_c)


def speed_or(temperature_c: float, otherwise: float) -> float:
    """Speed of sound, m/s; `otherwise` where the reading is no temperature of water: a check must go on."""
    return speed_of_sound(temperature_c) if LOW_C <= temperature_c <= HIGH_C else otherwise


def density(temperature_c: float) -> float:
    """Density of air-saturated water, kg/m³ (Jones and Harris 1992)."""
    return float(polyval(_within(temperature_c), np.array(DENSITY)))


def absorption(temperature_c: float, frequency_hz: float) -> float:
    """Amplitude absorption, Np/m (fit to Pinkerton 1949; model uncertainty about 2 %)."""
    return float(polyval(_within(temperature_c), np.array(ABSORPTION))) * 1e-15 * frequency_hz**2
