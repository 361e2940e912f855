"""The source's field on a grid that grows where it is used, and its interpolation at the nodes of an element.

The grid runs in (r/z, 1/z): in these the field has fixed bandwidths, k a and k a^2/2, near and far. It is made in
tiles of fixed position, so that a value does not depend on the order in which places were visited.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from sim_hardware.field import SourceShape, relative_pressure
from sim_hardware.interpolation import stencil

Real = NDArray[np.float64]
Single = NDArray[np.float32]
Index = NDArray[np.intp]

FAN_POINTS = 6
REACH_POINTS = 4
_TILE_FAN = 8
_TILE_REACH = 4
STEP = 0.6  # radians of phase, at the edge of the band, from one grid line to the next
_NEAREST_M = 1e-4


@dataclass(frozen=True)
class Patch:
    """The part of the grid that an element needs.

    Attributes:
        real, imaginary: shape (grid points, frequencies), p exp(+j k D) over the reference pressure.
        weights: shape (nodes, grid points).
    """

    real: Single
    imaginary: Single
    weights: Single


class FieldGrid:
    """Field of one source at a set of frequencies, wherever it is asked for."""

    def __init__(
        self, shape: SourceShape, frequencies: Real, speed: float, drive_hz: float, virtual: bool = True
    ) -> None:
        """A grid without any value yet.

        Values are over the pressure at the reference point. Where harmonics have virtual sources that is the
        pressure of each frequency, so that the burst is what passes the reference point; otherwise it is the
        pressure at the drive's frequency, so that the burst is what the face does.

        Args:
            shape: the source.
            frequencies: shape (F,), Hz.
            speed: speed of sound in m/s.
            drive_hz: frequency of the drive, one of `frequencies`.
            virtual: give each harmonic its own virtual source; otherwise every frequency comes from the face.
        """
        self._shape = shape
        self._wavenumbers = 2 * np.pi * frequencies / speed
        self._wavenumbers[0] = max(self._wavenumbers[0], 1e-3 * self._wavenumbers[1])
        self._orders = harmonic_orders(frequencies / drive_hz) if virtual else np.ones_like(frequencies)
        radii = np.array([shape.radius(o) for o in self._orders])
        self.fan_step = STEP / float(np.max(self._wavenumbers * radii))
        reach = 2 * STEP / float(np.max(self._wavenumbers * radii**2))
        self.reach_step = min(reach, 1 / (8 * shape.reference_m))
        reference = self._at_reference()
        drive = reference[np.argmin(np.abs(frequencies - drive_hz))]
        self._scale = 1 / reference if virtual else np.full_like(reference, 1 / drive)
        self._tiles: set[tuple[int, int]] = set()
        self._reach_low = 0
        self._field = np.empty((0, 0, 2, frequencies.size), np.float32)

    def at(self, r: Real, z: Real) -> NDArray[np.complex64]:
        """Pressure p exp(+j k D) over the reference pressure, shape (points, frequencies), interpolated."""
        patch = self.patch(r, z)
        values = np.empty((r.size, patch.real.shape[1]), np.complex64)
        values.real = patch.weights @ patch.real
        values.imag = patch.weights @ patch.imaginary
        return values

    def patch(self, r: Real, z: Real) -> Patch:
        """What is needed to interpolate at nodes `r` from the axis and `z` along it, shape (nodes,), in m."""
        depth = np.maximum(z, _NEAREST_M)
        fan, fan_weight = stencil(r / depth / self.fan_step, FAN_POINTS)
        reach, reach_weight = stencil(1 / depth / self.reach_step, REACH_POINTS, lowest=1)
        fan_low, fan_high = int(fan.min()), int(fan.max()) + 1
        reach_low, reach_high = int(reach.min()), int(reach.max()) + 1
        rows = np.abs(np.arange(fan_low, fan_high))
        self._cover(int(rows.min()), int(rows.max()), reach_low, reach_high)
        columns = slice(reach_low - self._reach_low, reach_high - self._reach_low)
        by_fan = _scatter(fan - fan_low, fan_weight, rows.size)
        by_reach = _scatter(reach - reach_low, reach_weight, reach_high - reach_low)
        weights = (by_fan[:, :, None] * by_reach[:, None, :]).reshape(r.size, -1)
        field = self._field[rows, columns].reshape(weights.shape[1], 2, -1)
        return Patch(real=field[:, 0], imaginary=field[:, 1], weights=weights)

    def _at_reference(self) -> NDArray[np.complex128]:
        axis, place = np.zeros(1), np.array([self._shape.reference_m])
        values = [
            relative_pressure(self._shape, float(k), float(order), axis, place)[0]
            for k, order in zip(self._wavenumbers, self._orders, strict=True)
        ]
        return np.array(values, np.complex128)

    def _cover(self, fan_low: int, fan_high: int, reach_low: int, reach_high: int) -> None:
        """Make whatever tiles are still missing."""
        across = range(fan_low // _TILE_FAN, fan_high // _TILE_FAN + 1)
        along = range(reach_low // _TILE_REACH, (reach_high - 1) // _TILE_REACH + 1)
        missing = [(i, j) for i in across for j in along if (i, j) not in self._tiles]
        if not missing:
            return
        self._enlarge(missing)
        for i, j in missing:
            self._make(i, j)

    def _enlarge(self, missing: list[tuple[int, int]]) -> None:
        old = self._field
        everywhere = list(self._tiles) + missing
        fan_count = (max(i for i, _ in everywhere) + 1) * _TILE_FAN
        low = min(j for _, j in everywhere) * _TILE_REACH
        high = (max(j for _, j in everywhere) + 1) * _TILE_REACH
        # Tiles of this rectangle that nobody asked for stay zero, and are made when somebody does.
        self._field = np.zeros((fan_count, high - low, 2, old.shape[3]), np.float32)
        shift = self._reach_low - low
        if old.size:
            self._field[: old.shape[0], shift : shift + old.shape[1]] = old
        self._reach_low = low

    def _make(self, i: int, j: int) -> None:
        fan = np.arange(i * _TILE_FAN, (i + 1) * _TILE_FAN)
        reach = np.arange(j * _TILE_REACH, (j + 1) * _TILE_REACH)
        z = np.broadcast_to(1 / (np.maximum(reach, 0.25) * self.reach_step), (fan.size, reach.size))
        r = z * (fan * self.fan_step)[:, None]
        columns = slice(reach[0] - self._reach_low, reach[-1] + 1 - self._reach_low)
        for index, (wavenumber, order) in enumerate(zip(self._wavenumbers, self._orders, strict=True)):
            pressure = relative_pressure(self._shape, float(wavenumber), float(order), r, z) * self._scale[index]
            self._field[fan[0] : fan[-1] + 1, columns, 0, index] = pressure.real
            self._field[fan[0] : fan[-1] + 1, columns, 1, index] = pressure.imag
        self._tiles.add((i, j))


def harmonic_orders(multiples: Real) -> Real:
    """Which harmonic's virtual source each frequency takes, from frequencies over the drive's.

    Whole numbers around each harmonic, where a burst has its energy, and a smooth passage between them: a
    dispersion there would let sound arrive before its time.
    """
    lower = np.floor(multiples)
    u = np.clip((multiples - lower - 0.25) / 0.5, 0.0, 1.0)
    orders: Real = np.maximum(lower + u**3 * (10 - 15 * u + 6 * u**2), 1.0)
    return orders


def _scatter(lines: Index, weights: Real, count: int) -> Single:
    """Weights on all `count` lines of a patch, shape (positions, count)."""
    full = np.zeros((lines.shape[0], count), np.float32)
    np.put_along_axis(full, lines, weights.astype(np.float32), axis=1)
    return full
