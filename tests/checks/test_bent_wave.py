"""The wave of a circular source beside its axis, and what a face hears of it, against sums of another kind."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.special import jv

from checks.bent_wave import Wave, face_delay, heard, plain, swing, wave_of
from checks.element import EDGES, Edge, jinc, obliquity, obliquity_slope
from tests.checks.synthetic import SPEED, Truth, rotation
from tests.fields import piston_pressure

THETA = np.radians(np.linspace(-50, 50, 21))
NOWHERE = np.zeros(21)
C, _ = rotation(Truth(), 1, step=10.0, lines=4)
FREQUENCIES = C.frequencies_hz
LINES = FREQUENCIES.size
FLAT = Wave(2 * np.pi * FREQUENCIES / SPEED, 0.0, np.zeros(LINES), np.ones(LINES), 0.0)


@pytest.mark.parametrize("edge", EDGES)
@pytest.mark.parametrize("radius", [0.05e-3, 0.3e-3, 1e-3])
def test_of_a_plane_wave_a_disc_hears_the_textbook_pattern(edge: Edge, radius: float) -> None:
    sizes = np.full(LINES, radius)
    assert heard(THETA, NOWHERE, FLAT, sizes, edge) == pytest.approx(plain(THETA, FLAT, sizes, edge), abs=1e-9)


@pytest.mark.parametrize("distance", [0.045, 0.08, 0.16])
def test_the_wave_is_that_of_the_rayleigh_integral_to_second_order(distance: float) -> None:
    c = replace(C, distance_m=distance)  # a²/lambda is 55 mm
    wave = wave_of(c, SPEED)
    k, h = float(wave.wavenumber[0]), 2e-4
    places = np.array([0, h, 0, 0]), distance + np.array([0, 0, h, -h])
    p = piston_pressure(*places, c.source_radius_m, c.drive_hz, SPEED)
    beside = np.log(p[1] / p[0])
    assert -beside.real / h**2 == pytest.approx(wave.taper[0], rel=0.03)
    assert -2 * beside.imag / (k * h**2) == pytest.approx(wave.bend, rel=0.03, abs=0.3)
    along = np.log(p[2] / p[3] * np.exp(2j * k * h))
    assert 1 - along.imag / (2 * k * h) == pytest.approx(wave.stretch[0], abs=2e-5)
    assert -along.real / (2 * h) == pytest.approx(wave.bend, rel=0.05, abs=0.3)


@pytest.mark.parametrize("edge", EDGES)
def test_a_small_bend_delays_a_turned_face_as_bessel_functions_say(edge: Edge) -> None:
    # first order in the bend, from <S²>, <V²> and <S> over the disc under exp(j x S); derived
    bend, radius = 0.5, 0.25e-3
    wave = replace(FLAT, bend=bend, facing=bend)
    k = float(wave.wavenumber[0])
    x = k * radius * np.sin(THETA)
    x = np.where(x == 0, 1e-9, x)
    along2, across2 = 2 * jv(1, x) / x - 6 * jv(2, x) / x**2, 2 * jv(2, x) / x**2
    leaning = np.sin(THETA) * bend - obliquity_slope(THETA, edge) / obliquity(THETA, edge) * np.cos(THETA) * bend
    curved = radius**2 * bend / 2 * (np.cos(THETA) ** 2 * along2 + across2)
    slanted = leaning * radius * (-2 * jv(2, x) / x) / k
    expected = (curved + slanted) / jinc(x) / SPEED - radius**2 * bend / 4 / SPEED
    found = face_delay(THETA, NOWHERE, wave, radius, edge, SPEED)
    small = np.abs(x) < 3e-9
    assert found[~small] == pytest.approx(expected[~small], abs=1e-3 * np.abs(expected[~small]).max())


def test_a_face_aside_hears_what_a_sum_over_a_spherical_wave_gives() -> None:
    distance, radius, aside, angle = 0.06, 0.4e-3, 0.3e-3, np.radians(25.0)
    wave = replace(FLAT, bend=1 / distance, facing=1 / distance)
    n = 600
    grid = (np.arange(n) + 0.5) / n * 2 - 1
    s, v = (g.ravel() for g in np.meshgrid(grid, grid))
    inside = s**2 + v**2 < 1
    s, v = radius * s[inside], radius * v[inside]
    x, y, z = aside + s * np.cos(angle), v, distance - s * np.sin(angle)
    far, middle = np.sqrt(x**2 + y**2 + z**2), np.hypot(aside, distance)
    for line, k in enumerate(wave.wavenumber):
        there = np.mean(np.exp(-1j * k * (far - middle)) * middle / far)
        here = heard(np.array([angle]), np.array([aside]), wave, np.full(LINES, radius), "rigid")[0, line]
        assert here == pytest.approx(there, abs=4e-3)


def test_the_turn_carries_an_element_off_the_axis_along_a_circle() -> None:
    aside, along = swing(THETA, 2e-4, -3e-4)
    assert np.hypot(aside + 2e-4, along - 3e-4) == pytest.approx(np.hypot(2e-4, 3e-4))
