"""What a rotation's fit takes off the data: what is left is a plane wave through the centre."""

from __future__ import annotations

import numpy as np
import pytest

from checks.element import response
from checks.water import speed_of_sound
from tests.faults.drawn import drawn
from tests.faults.in_hand import Scanned, scanned

STRONG_DB = -12.0
CLEAR = 200.0  # of the noise: what it leaves of a level is then nothing here


@pytest.fixture(scope="module", params=range(3))
def scan(request: pytest.FixtureRequest) -> Scanned:
    bench = drawn(request.param, family=2)
    far = bench.altered(mechanics={"pivot_offset_mm": [0.3, 0.0, -0.4]}, electronics={"noise_uv": 20.0})
    return scanned(far)


def off_db(scan: Scanned, fitted: bool) -> float:
    """Rms difference between the levels and the true pattern, where that is strong."""
    r, truth = scan.results[0], scan.bench.truth
    plane = r.fitted if fitted else r.response
    speed = speed_of_sound(truth.tank.temperature_c)
    theta = plane.theta + np.radians(truth.mechanics.angle_zero_deg)
    off = []
    clear = np.abs(plane.reference) > CLEAR * np.median(plane.noise_v, axis=0)
    for line in np.nonzero(clear)[0]:
        ka = 2 * np.pi * float(plane.frequencies_hz[line]) / speed * truth.element.radius_mm * 1e-3
        zero = np.radians([truth.mechanics.angle_zero_deg])
        true = np.abs(response(theta, ka, truth.element.edge) / response(zero, ka, truth.element.edge))
        level = 20 * np.log10(true)
        strong = level > STRONG_DB
        off.append(np.abs(plane.level_db()[strong, line] - level[strong]))
    return float(np.sqrt(np.mean(np.concatenate(off) ** 2)))


def test_the_levels_are_those_of_a_plane_wave(scan: Scanned) -> None:
    assert off_db(scan, fitted=True) < 0.1
    assert off_db(scan, fitted=True) < 0.5 * off_db(scan, fitted=False)


def test_the_arrivals_are_those_of_the_centre(scan: Scanned) -> None:
    r, truth = scan.results[0], scan.bench.truth
    x, _, z = truth.mechanics.pivot_offset_mm
    theta, believed = r.response.theta, r.response.arrival_usable
    centre = 1e-3 * (z * (np.cos(theta) - 1) - x * np.sin(theta)) / speed_of_sound(truth.tank.temperature_c)
    left = (r.centre_s - centre)[believed]
    jitter = truth.electronics.jitter_ns * 1e-9 / 4
    assert np.std(left) < 2 * jitter + 1e-10
    assert abs(np.mean(left)) < 1e-10


def test_what_was_measured_is_not_touched(scan: Scanned) -> None:
    r = scan.results[0]
    order = np.argsort(r.response.order)
    seen = np.array([o.components for o in scan.seen])
    assert np.array_equal(r.response.components[order], seen)
