"""The simulated tank: water, source, sensor and preamplifier, up to the oscilloscope's input."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from sim_hardware import disturbance, water
from sim_hardware.burst import make_burst, null_factor, shock_parameter, source_shape
from sim_hardware.capture import CaptureRequest, Carriage
from sim_hardware.element import Element
from sim_hardware.field_grid import FieldGrid
from sim_hardware.geometry import Mount
from sim_hardware.record import Record, coarse_grid
from sim_hardware.truth import AnyFault, Bubble, DriveStep, SensorShift, Truth

Real = NDArray[np.float64]
Single = NDArray[np.float32]
Complex = NDArray[np.complex64]
Kept = TypeVar("Kept")

_NEAREST_M = 1e-3
_WIDEST = 0.5  # r/z beyond which nothing of the beam is left to be heard
_KEPT = 8


@dataclass(frozen=True)
class _Receiver:
    """Element and field on one coarse grid of frequencies."""

    coarse: Real
    highest_hz: float
    field: FieldGrid
    element: Element


@dataclass(frozen=True)
class _Setting:
    """A drive and a way of recording it, worked out once."""

    receiver: _Receiver
    record: Record
    transfer: Complex
    echoes: tuple[tuple[float, Complex], ...]
    steady: Single


class SimulatedTank:
    """Computes what the oscilloscope would see; the same seed and requests give the same voltages.

    The field's shape is worked out for the temperature at time zero; a drift changes arrival and absorption.
    """

    def __init__(self, truth: Truth) -> None:
        self._truth = truth
        self._mount = Mount(truth.mechanics)
        self._receivers: dict[object, _Receiver] = {}
        self._settings: dict[object, _Setting] = {}

    def temperature_c(self, time_s: float) -> float:
        """Water temperature at a simulated time."""
        tank = self._truth.tank
        return tank.temperature_c + tank.temperature_drift_c_per_h * time_s / 3600

    def thermometer_c(self, time_s: float) -> float:
        """What a thermometer in the water says."""
        return self.temperature_c(time_s) + self._truth.tank.thermometer_error_c

    def voltage(self, request: CaptureRequest) -> Single:
        """Shape (points,), volts at the input, averaged, noise included; not yet clipped or quantised."""
        electronics = self._truth.electronics
        random = disturbance.generator(self._truth.seed, request.number)
        jitter_s = disturbance.mean_jitter(random, electronics.jitter_ns * 1e-9, request.averages)
        sigma = electronics.noise_uv * 1e-6 / math.sqrt(request.averages)
        wave = disturbance.noise(random, request.points, sigma)
        wave += np.float32(electronics.offset_mv * 1e-3)
        if disturbance.is_driven(request.drive):
            wave += self._signal(request, jitter_s)
        if electronics.saturation_v is not None:
            np.clip(wave, -electronics.saturation_v, electronics.saturation_v, out=wave)
        return wave

    def _signal(self, request: CaptureRequest, jitter_s: float) -> Single:
        setting = self._setting(request)
        faults = [f for f in self._truth.faults if f.active(request.time_s, request.number)]
        total: Complex | None = None
        for carriage in request.carriages:
            heard = self._heard(setting, carriage, request.time_s, jitter_s, faults)
            if heard is not None:
                total = heard if total is None else total + heard
        if total is None:
            return setting.steady
        total *= np.float32(self._gain(request.time_s, faults) / len(request.carriages))
        return setting.record.samples(total) + setting.steady

    def _heard(
        self, setting: _Setting, carriage: Carriage, time_s: float, jitter_s: float, faults: list[AnyFault]
    ) -> Complex | None:
        """Spectrum of the burst and its echoes for one place of the carriage; None where nothing is heard."""
        temperature = self.temperature_c(time_s)
        speed = water.sound_speed(temperature)
        shift = np.zeros(3)
        for fault in faults:
            if isinstance(fault, SensorShift):
                shift = shift + np.array(fault.shift_mm) * 1e-3
        placement = self._mount.place(carriage, shift)
        x, y, z = placement.centre
        if z < _NEAREST_M or math.hypot(x, y) > _WIDEST * z:
            return None
        delay = float(np.linalg.norm(placement.centre)) / speed + jitter_s
        paths = [factor for extra_s, factor in setting.echoes if setting.record.holds(delay + extra_s)]
        if not paths:
            return None
        receiver = setting.receiver
        bubbles = tuple(f for f in faults if isinstance(f, Bubble))
        face = receiver.element.response(placement, receiver.field, speed, bubbles)
        loss = np.exp(-water.absorption(temperature) * receiver.coarse**2 * face.distance_m)
        spectrum = setting.record.spectrum(face.spectrum * loss.astype(np.float32), delay)
        spectrum *= setting.transfer
        return spectrum * sum(paths[1:], paths[0]) if len(paths) > 1 else spectrum * paths[0]

    def _gain(self, time_s: float, faults: list[AnyFault]) -> float:
        """Output of the source over what the drive asks for."""
        gain = 1 + self._truth.electronics.drive_drift_percent_per_h / 100 * time_s / 3600
        for fault in faults:
            if isinstance(fault, DriveStep):
                gain *= 1 + fault.percent / 100
        return gain

    def _setting(self, request: CaptureRequest) -> _Setting:
        drive = request.drive
        key = (drive, request.sample_rate_hz, request.points, request.start_s, request.averages)
        return _keep(self._settings, key, lambda: self._work_out(request))

    def _work_out(self, request: CaptureRequest) -> _Setting:
        truth, drive = self._truth, request.drive
        temperature = self.temperature_c(0)
        speed = water.sound_speed(temperature)
        nyquist = request.sample_rate_hz / 2
        highest = min(max(truth.source.harmonics + 0.6, 3.0) * drive.frequency_hz, nyquist)
        steepens = truth.source.harmonics > 1 and shock_parameter(truth.source, drive, temperature) > 0
        receiver = _keep(
            self._receivers,
            (drive.frequency_hz, highest, steepens),
            lambda: self._receiver(drive.frequency_hz, highest, speed, steepens),
        )
        burst = make_burst(truth.source, drive, temperature)
        record = Record(request, burst, receiver.coarse, highest)
        f = record.frequencies
        volts = truth.element.sensitivity_nv_per_pa * 1e-9 / (1 + 1j * f * 1e-6 / truth.element.corner_mhz)
        jitter = truth.electronics.jitter_ns * 1e-9
        loss = disturbance.jitter_loss(f, jitter, request.averages)
        echoes = [(0.0, np.ones(f.size, np.complex64))]
        for echo in truth.tank.echoes:
            extra = echo.extra_path_mm * 1e-3
            faded = echo.level * np.exp(-water.absorption(temperature) * f**2 * extra)
            echoes.append((extra / speed, record.shift(extra / speed) * faded.astype(np.float32)))
        transfer = (record.burst * volts * null_factor(truth.source, f) * loss).astype(np.complex64)
        return _Setting(
            receiver=receiver,
            record=record,
            transfer=transfer,
            echoes=tuple(echoes),
            steady=self._steady(request),
        )

    def _receiver(self, drive_hz: float, highest_hz: float, speed: float, steepens: bool) -> _Receiver:
        truth = self._truth
        coarse = coarse_grid(drive_hz, highest_hz, truth.element.radius_mm * 1e-3 / speed)
        field = FieldGrid(source_shape(truth.source), coarse, speed, drive_hz, virtual=steepens)
        return _Receiver(coarse, highest_hz, field, Element(truth.element, coarse))

    def _steady(self, request: CaptureRequest) -> Single:
        """What every record with this setting contains alike: pick-up and sound of earlier bursts."""
        truth = self._truth
        wave = disturbance.pickup(request, truth.electronics, truth.source.reference_drive_v)
        if truth.tank.reverberation is not None:
            pressure = truth.source.reference_pressure_kpa * 1e3
            volts = pressure * truth.element.sensitivity_nv_per_pa * 1e-9
            volts *= request.drive.amplitude_v / truth.source.reference_drive_v
            wave += disturbance.reverberation(request, truth.tank.reverberation, volts, truth.seed)
        return wave


def _keep(kept: dict[object, Kept], key: object, make: Callable[[], Kept]) -> Kept:
    """What was made for a key before, or a new one; only the latest few are held."""
    if key not in kept:
        while len(kept) >= _KEPT:
            kept.pop(next(iter(kept)))
        kept[key] = make()
    return kept[key]
