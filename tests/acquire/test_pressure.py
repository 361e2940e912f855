"""From the sensor's profile and stored counts to the pressure of the pulse."""

from __future__ import annotations

from types import SimpleNamespace
from typing import Any, cast

import numpy as np
import pytest

from acquire.results.pressure import TOLD, Heard, heard_by, pressure_of, quantities, table_of
from checks.errors import MeasurementError
from checks.observation import Gate
from checks.sensitivity import at
from profiles.load import load_sensor, load_source
from profiles.sensor import Sensor

STEP = 4e-9
T = np.arange(1500) * STEP
PULSE = 1e6 * np.exp(-(((T - 3e-6) / 0.6e-6) ** 2)) * np.cos(2 * np.pi * 3e6 * (T - 3e-6))


def sensor(rows: list[dict[str, float]], **more: Any) -> Sensor:
    plain = load_sensor("needle-0p4").model_dump()
    return Sensor.model_validate(plain | {"sensitivity": rows} | more)


FLAT = [{"frequency_mhz": f, "sensitivity_nv_per_pa": 50.0, "uncertainty_percent": 4.0} for f in (0.5, 40.0)]
LEVEL_DB = 20 * np.log10(50e-9 * 1e-6)  # the same, dB re 1 V/uPa


def test_the_two_units_of_a_sensitivity_are_the_same_table() -> None:
    levels = [{"frequency_mhz": f, "sensitivity_db": LEVEL_DB, "uncertainty_percent": 4.0} for f in (0.5, 40.0)]
    first, second = table_of(sensor(FLAT)), table_of(sensor(levels))
    assert second.magnitude_v_per_pa == pytest.approx(first.magnitude_v_per_pa)
    assert first.magnitude_v_per_pa == pytest.approx([50e-9, 50e-9])
    assert first.relative_u == pytest.approx([0.04, 0.04])


def test_a_cable_as_large_as_the_element_halves_the_sensitivity() -> None:
    table = table_of(sensor(FLAT, loading={"element_pf": 30.0, "cable_pf": 30.0}))
    assert table.magnitude_v_per_pa == pytest.approx([25e-9, 25e-9])


def test_phases_come_from_degrees() -> None:
    rows = [row | {"phase_deg": 90.0, "phase_uncertainty_deg": 2.0} for row in FLAT]
    table = table_of(sensor(rows))
    assert np.angle(at(table, np.array([5e6])).value) == pytest.approx([np.pi / 2])
    assert table.phase_u_rad == pytest.approx(np.radians([2.0, 2.0]))


class Stored:
    """As much of a store as the pressure needs: ten points, every other one at the reference pose."""

    def __init__(self, profile: Sensor, noise_v: float, scan_type: str = "rotation") -> None:
        self.noise_v, self.volts_per_count = noise_v, 2e-6
        self.job = SimpleNamespace(sensor=profile, source=load_source("plane-2p25"))
        self.circumstances = SimpleNamespace(scan_type=scan_type, gate=Gate(0, T.size, 0, 0))
        record = SimpleNamespace(volts_per_count=self.volts_per_count, volts_at_zero=1e-3, interval_s=STEP)
        self.records = [record] * 10

    def counts(self, index: int) -> Any:
        size = 1.0 if index % 2 == 0 else 0.3
        random = np.random.default_rng(index)
        volts = 50e-9 * PULSE * size + self.noise_v * random.standard_normal(T.size)
        return np.rint(volts / self.volts_per_count).astype(np.int16)

    def seen(self) -> Any:
        return [
            SimpleNamespace(
                index=i,
                reference=i % 2 == 0,
                offset_v=1e-3,
                noise_rms_v=self.noise_v,
                temperature_c=20.0,
                square_integral_v2s=float(i % 2 == 0),
            )
            for i in range(10)
        ]


def test_the_reference_visits_are_averaged_and_the_noise_falls() -> None:
    stored = Stored(sensor(FLAT), 5e-4)
    heard = heard_by(cast(Any, stored), stored.seen())
    assert heard.count == 5
    assert heard.noise_v == pytest.approx(5e-4 / np.sqrt(5))
    assert np.std(heard.volts - 50e-9 * PULSE) == pytest.approx(heard.noise_v, rel=0.1)


def test_of_a_raster_the_strongest_point_is_taken() -> None:
    stored = Stored(sensor(FLAT), 1e-4, "raster")
    assert heard_by(cast(Any, stored), stored.seen()).count == 1


@pytest.mark.parametrize("noise_v", [1e-5, 5e-4])
def test_peaks_come_out_within_what_they_state(noise_v: float) -> None:
    stored = Stored(sensor(FLAT), noise_v)
    found = {q.name: q for q in quantities(cast(Any, stored), stored.seen())}
    assert set(found) == {name for _, name, _ in TOLD}
    for name, true in (("positive peak pressure", PULSE.max()), ("negative peak pressure", -PULSE.min())):
        q = found[name]
        assert q.value is not None
        assert q.standard_uncertainty is not None
        # the low-pass stands at twice what is clear of the noise: it takes some per cent of a peak
        assert abs(q.value - true) < 2 * q.standard_uncertainty + 0.05 * true
        assert 0.02 < q.standard_uncertainty / true < 0.1  # 4 % of the table
        assert "low-pass of second order at" in q.method
        assert "the profile has no phases" in q.method


def test_a_sensitivity_without_uncertainty_is_said() -> None:
    rows = [{"frequency_mhz": row["frequency_mhz"], "sensitivity_nv_per_pa": 50.0} for row in FLAT]
    stored = Stored(sensor(rows), 1e-4)
    assert "states no uncertainty" in quantities(cast(Any, stored), stored.seen())[0].method


def test_a_table_that_does_not_hold_the_sound_gives_no_number_but_the_reason() -> None:
    rows = [row | {"frequency_mhz": f} for row, f in zip(FLAT, (5.0, 40.0), strict=True)]
    stored = Stored(sensor(rows), 1e-4)
    first = quantities(cast(Any, stored), stored.seen())[0]
    assert first.value is None
    assert "outside the sensitivity table" in first.method


def test_silence_is_no_pressure() -> None:
    silent = Heard(np.zeros(500), STEP, 1e-4, 1, 20.0, "nowhere")
    with pytest.raises(MeasurementError, match="clear of the noise"):
        pressure_of(silent, table_of(sensor(FLAT)))
