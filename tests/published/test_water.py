"""Water against formulations that share no data with the one used."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from iapws import IAPWS95

from checks.errors import MeasurementError
from checks.water import absorption, density, speed_of_sound, speed_or

# Values of W. Marczak, J. Acoust. Soc. Am. 102, 2776 (1997), computed with another program from its coefficients;
# beside them N. Bilaniuk and G. Wong, J. Acoust. Soc. Am. 93, 1609 (1993), 148 points, with its erratum of 1996.
TABLE = [
    (10, 1447.289, 1447.279),
    (15, 1465.960, 1465.943),
    (20, 1482.380, 1482.358),
    (22, 1488.358, 1488.335),
    (25, 1496.728, 1496.704),
    (30, 1509.167, 1509.144),
    (35, 1519.845, 1519.825),
    (40, 1528.894, 1528.880),
]
PRESSURE_MPA = 0.101325


@pytest.mark.parametrize(("celsius", "marczak", "bilaniuk_wong"), TABLE)
def test_speed_of_sound_agrees_with_two_published_polynomials(
    celsius: float, marczak: float, bilaniuk_wong: float
) -> None:
    assert speed_of_sound(celsius) == pytest.approx(marczak, abs=1e-3)
    assert speed_of_sound(celsius) == pytest.approx(bilaniuk_wong, abs=0.03)


@pytest.mark.parametrize("celsius", range(5, 61, 5))
def test_speed_and_density_agree_with_iapws_95(celsius: float) -> None:
    # IAPWS-95 (release R6-95) through the iapws package: an equation of state, no polynomial of sound speeds
    water = IAPWS95(T=celsius + 273.15, P=PRESSURE_MPA)
    assert speed_of_sound(celsius) == pytest.approx(water.w, abs=0.04)
    if celsius <= 40:  # Jones and Harris hold from 5 to 40 °C, and for air-saturated water: 0.007 kg/m³ lighter
        assert density(celsius) == pytest.approx(water.rho - 0.006, abs=0.003)


# F. E. Jones and G. L. Harris, J. Res. NIST 97, 335 (1992), table values for air-saturated water
@pytest.mark.parametrize(
    ("celsius", "kg_per_m3"), [(10, 999.6955), (15, 999.0962), (20, 998.2008), (25, 997.0411), (40, 992.2108)]
)
def test_density_of_air_saturated_water(celsius: float, kg_per_m3: float) -> None:
    assert density(celsius) == pytest.approx(kg_per_m3, abs=2e-4)


# Fit to J. M. M. Pinkerton, Proc. Phys. Soc. B 62, 129 (1949), in 1e-3 dB/cm/MHz²; the second row is a polynomial
# remembered from F. A. Duck 1990 (from memory, unverified), which bounds the model to about 2 %
@pytest.mark.parametrize(
    ("celsius", "pinkerton", "from_memory"),
    [(10, 35.797, 35.761), (20, 25.161, 25.352), (30, 19.086, 19.024), (40, 14.930, 14.637)],
)
def test_absorption_agrees_with_measurements_of_1949(celsius: float, pinkerton: float, from_memory: float) -> None:
    per_square = absorption(celsius, 1e6) / 1e12
    assert per_square == pytest.approx(pinkerton * 1e-15, rel=1e-4)
    assert per_square == pytest.approx(from_memory * 1e-15, rel=0.021)


def test_absorption_at_20_degrees_is_2_17e_3_db_per_cm_and_mhz2() -> None:
    # T. L. Szabo, Diagnostic Ultrasound Imaging (2004), as quoted in documentation of a toolbox: 2.17e-3
    assert absorption(20.0, 1e6) / 100 * 20 / np.log(10) == pytest.approx(2.17e-3, rel=0.01)
    assert absorption(20.0, 3e6) == pytest.approx(9 * absorption(20.0, 1e6))


@given(st.one_of(st.floats(max_value=-1e-9), st.floats(min_value=60.0, exclude_min=True), st.just(float("nan"))))
def test_a_reading_that_is_no_water_is_refused_in_one_line_and_a_check_goes_on(celsius: float) -> None:
    with pytest.raises(MeasurementError, match="allowed are 0 to 60") as refused:
        speed_of_sound(celsius)
    assert "\n" not in str(refused.value)
    assert speed_or(celsius, 1480.0) == 1480.0
