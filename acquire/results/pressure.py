"""Pressure at the reference point of a rotation, or at the strongest point of a raster: what the pulse is."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import asdict, dataclass
from math import isfinite, sqrt

import numpy as np
from numpy.typing import NDArray

from acquire.record import volts_of
from acquire.results.quantity import Quantity
from acquire.store import StoredScan
from checks.deconvolution import LowPass, Pressure, clear_up_to, deconvolve, monte_carlo
from checks.errors import MeasurementError
from checks.observation import Observation
from checks.pulse import Medium, pulse_of, pulse_uncertainty
from checks.sensitivity import Loading, Sensitivity, loaded, sensitivity_of, volts_per_pascal
from checks.water import density, speed_of_sound
from profiles.sensor import Sensor
from profiles.units import MHZ

Array = NDArray[np.float64]
DRAWS, SEED = 200, 1
CORNER = 2.0  # over the highest clear frequency: what lies above is all noise
COMMON = 0.5  # of the variance of a table, for all its rows alike; common practice, no source
MOST_OUTSIDE = 0.05
PF, KOHM, NV = 1e-12, 1e3, 1e-9

# field of a pulse, name of the quantity, unit
TOLD = (
    ("positive_peak_pa", "positive peak pressure", "Pa"),
    ("negative_peak_pa", "negative peak pressure", "Pa"),
    ("square_integral_pa2s", "pulse-pressure-squared integral", "Pa2 s"),
    ("duration_s", "pulse duration", "s"),
    ("working_hz", "acoustic-working frequency", "Hz"),
    ("crossing_hz", "acoustic-working frequency by zero crossings", "Hz"),
    ("pulse_intensity_integral_j_m2", "pulse-intensity integral", "J/m2"),
    ("pulse_average_w_m2", "pulse-average intensity", "W/m2"),
    ("temporal_average_w_m2", "temporal-average intensity", "W/m2"),
    ("mechanical_index", "mechanical index, not derated", "1"),
)


def table_of(sensor: Sensor) -> Sensitivity:
    """The sensitivity of the whole chain as the profile has it."""
    rows = sensor.sensitivity
    frequency = np.array([row.frequency_mhz for row in rows]) * MHZ
    if rows[0].sensitivity_db is not None:
        magnitude = volts_per_pascal(np.array([row.sensitivity_db for row in rows]))
    else:
        magnitude = np.array([row.sensitivity_nv_per_pa for row in rows]) * NV
    phase = None if rows[0].phase_deg is None else np.radians([row.phase_deg or 0.0 for row in rows])
    relative = np.array([(row.uncertainty_percent or 0.0) / 100 for row in rows])
    turned = np.radians([row.phase_uncertainty_deg or 0.0 for row in rows])
    table = sensitivity_of(frequency, magnitude, phase, relative, turned, COMMON)
    if sensor.loading is None:
        return table
    load = sensor.loading
    ohm = np.inf if load.preamplifier_input_kohm is None else load.preamplifier_input_kohm * KOHM
    gain = 10 ** (load.preamplifier_gain_db / 20)
    return loaded(table, Loading(load.element_pf * PF, load.cable_pf * PF, load.preamplifier_input_pf * PF, ohm, gain))


@dataclass(frozen=True)
class Heard:
    """The voltage of one place.

    Attributes:
        volts: shape (n,), offset removed, the mean of `count` captures. noise_v: standard deviation in a sample.
        where: in words.
    """

    volts: Array
    interval_s: float
    noise_v: float
    count: int
    temperature_c: float
    where: str


def heard_by(stored: StoredScan, seen: Sequence[Observation]) -> Heard:
    """All visits of the reference pose of a rotation, averaged, or the strongest point of a raster."""
    strongest = max(seen, key=lambda o: o.square_integral_v2s)
    chosen = [o for o in seen if o.reference] if stored.circumstances.scan_type == "rotation" else []
    where = "mean of all visits of angle zero" if chosen else "the strongest point"
    chosen = chosen or [strongest]
    gate = stored.circumstances.gate
    waves = []
    for o in chosen:
        volts = volts_of(stored.records[o.index], stored.counts(o.index), o.offset_v)
        waves.append(volts[gate.start : gate.stop])
    noise = float(np.mean([o.noise_rms_v for o in chosen])) / sqrt(len(chosen))
    warmth = float(np.mean([o.temperature_c for o in chosen]))
    interval = stored.records[chosen[0].index].interval_s
    return Heard(np.mean(waves, axis=0), interval, noise, len(chosen), warmth, where)


def pressure_of(heard: Heard, table: Sensitivity) -> tuple[Pressure, Array]:
    """The pressure and draws of it, shape (draws, n).

    Raises:
        MeasurementError: nothing is clear of the noise within the sensitivity table, or much lies outside.
    """
    corner = CORNER * clear_up_to(heard.volts, heard.interval_s, heard.noise_v, table)
    low_pass = LowPass(corner, zero_phase=True)
    found = deconvolve(heard.volts, heard.interval_s, heard.noise_v, table, low_pass)
    if found.outside_share > MOST_OUTSIDE:
        raise MeasurementError(
            f"{found.outside_share:.0%} of the sound lies outside the sensitivity table of the sensor: extend it"
        )
    random = np.random.default_rng(SEED)
    draws = monte_carlo(heard.volts, heard.interval_s, heard.noise_v, table, low_pass, DRAWS, random)
    return found, draws


def quantities(stored: StoredScan, seen: Sequence[Observation]) -> list[Quantity]:
    """What the pulse is, each with its uncertainty from noise and sensitivity; one line says why where it cannot be."""
    try:
        return _quantities(stored, heard_by(stored, seen))
    except MeasurementError as error:
        return [Quantity(name, None, unit, None, {}, str(error)) for _, name, unit in TOLD[:2]]


def _quantities(stored: StoredScan, heard: Heard) -> list[Quantity]:
    table = table_of(stored.job.sensor)
    pressure, draws = pressure_of(heard, table)
    source = stored.job.source
    medium = Medium(density(heard.temperature_c), speed_of_sound(heard.temperature_c), source.repetition_hz)
    value = asdict(pulse_of(pressure.pressure_pa, heard.interval_s, medium))
    u = asdict(pulse_uncertainty(draws, heard.interval_s, medium))
    method = (
        f"{heard.where}; voltage over the sensitivity of the profile, zero-phase low-pass of second order at "
        f"{pressure.low_pass.corner_hz / MHZ:.3g} MHz"
    )
    if not pressure.phase_known:
        method += "; the profile has no phases, so the shape is not corrected for the sensor's"
    if not table.relative_u.any():
        method += "; the profile states no uncertainty of the sensitivity, so it is not in"
    found = []
    for field, name, unit in TOLD:
        there = isfinite(value[field])
        spread = float(u[field]) if isfinite(u[field]) else None
        found.append(Quantity(name, value[field] if there else None, unit, spread if there else None, {}, method))
    return found
