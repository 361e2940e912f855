"""Water against IAPWS-95 (the iapws package) and published tables."""

import pytest
from iapws import IAPWS95

from sim_hardware import water


@pytest.mark.parametrize("temperature_c", [10.0, 15.0, 20.0, 25.0, 30.0, 40.0])
def test_speed_of_sound_agrees_with_the_international_formulation(temperature_c: float) -> None:
    reference = IAPWS95(T=temperature_c + 273.15, P=0.101325)
    # Marczak's fit and IAPWS-95 differ by up to 0.033 m/s; the misprinted coefficient is 0.08 m/s off at 20 C.
    assert water.sound_speed(temperature_c) == pytest.approx(reference.w, abs=0.04)


@pytest.mark.parametrize("temperature_c", [10.0, 20.0, 30.0, 40.0])
def test_density_agrees_with_the_international_formulation(temperature_c: float) -> None:
    reference = IAPWS95(T=temperature_c + 273.15, P=0.101325)
    # Air-saturated water is 0.006 to 0.007 kg/m3 lighter than the degassed water of IAPWS-95.
    assert water.density(temperature_c) == pytest.approx(reference.rho - 0.0065, abs=0.002)


def test_speed_of_sound_is_marczaks() -> None:
    # Marczak 1997, evaluated independently at 20 C.
    assert water.sound_speed(20.0) == pytest.approx(1482.380, abs=0.001)


@pytest.mark.parametrize(("temperature_c", "expected"), [(10, 35.797), (20, 25.161), (25, 21.776), (40, 14.930)])
def test_absorption_follows_pinkerton(temperature_c: float, expected: float) -> None:
    # Pinkerton 1949, by the 7th-order fit, evaluated independently; 1e-15 Np s^2/m.
    assert water.absorption(temperature_c) == pytest.approx(expected * 1e-15, rel=1e-4)


def test_shock_distance_of_a_plane_wave() -> None:
    # 1 MPa at 1 MHz with beta 3.5, rho 998.207 and c 1482.35: 147.8512 mm, computed independently.
    expected = 0.1478512 * 3.5 / water.nonlinearity(20.0)
    assert water.shock_distance(1e6, 1e6, 20.0) == pytest.approx(expected, rel=2e-4)
