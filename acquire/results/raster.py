"""Results of a raster: maps of the peaks and of the pulse-pressure-squared integral, peak position, -6 dB widths."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from acquire.results.averaging import Averaging, Line, averaging_of, averaging_quantities
from acquire.results.quantity import Quantity
from checks.averaging import averaged_share
from checks.beam import Peak, Width, peak_of, steps_u, width_of
from checks.beam_axis import focus_of
from checks.beam_plane import measured_shape
from checks.errors import MeasurementError
from checks.observation import Circumstances, Observation

Array = NDArray[np.float64]
AXES = "xyz"
FOCUS = "largest pulse-pressure-squared integral"
SEED = 20  # of the draws that make an uncertainty: the same scan gives the same numbers
BEAMWIDTH = "-6 dB on the pulse-pressure-squared integral (IEC 61828)"


@dataclass(frozen=True)
class RasterResult:
    """A line or a plane; `axes` are the numbers of the axes that move, fastest first.

    Attributes:
        places: shape (n, 3), metres. peak_v, trough_v, integral_v2s, noise_v: shape (n,), noise taken off the integral.
        amplitude: root of the integral, V s^½, and its standard uncertainty `sigma`, each shape (n,).
        widths: by axis name, along the line through the point nearest to the peak; or why there is none.
        averaging: what the element does to each harmonic along each axis.
        scatter_m: shape (3,), rms difference of reported and commanded positions.
    """

    axes: tuple[int, ...]
    places: Array
    peak_v: Array
    trough_v: Array
    integral_v2s: Array
    noise_v: Array
    amplitude: Array
    sigma: Array
    peak: Peak | None
    widths: dict[str, Width | str]
    steps: tuple[float, ...]
    averaging: Averaging
    scatter_m: Array


def raster_result(seen: Sequence[Observation], circumstances: Circumstances) -> RasterResult:
    """Result of a raster; of several visits to a place the first one counts.

    Raises:
        MeasurementError: nothing moved.
    """
    first: dict[tuple[float, ...], Observation] = {}
    for o in seen:
        first.setdefault(tuple(round(v, 9) for v in (o.commanded.x, o.commanded.y, o.commanded.z)), o)
    points = list(first.values())
    places = np.array([(o.commanded.x, o.commanded.y, o.commanded.z) for o in points])
    moving = [i for i in range(3) if np.ptp(places[:, i]) > 1e-9]
    if not moving:
        raise MeasurementError("nothing moved in this raster: there is no beam to measure")
    gate_s = (circumstances.gate.stop - circumstances.gate.start) * circumstances.sample_interval_s
    noise = np.array([o.noise_rms_v for o in points])
    integral = np.array([o.square_integral_v2s for o in points]) - noise**2 * gate_s
    integral = np.maximum(integral, 1e-6 * integral.max())
    amplitude = np.sqrt(integral)
    # the integral of (s + n)^2 scatters by 2 sigma sqrt(integral dt), so its root by sigma sqrt(dt)
    sigma = noise * np.sqrt(circumstances.sample_interval_s)
    peak = _peak(places, amplitude, moving)
    reported = np.array([(o.reported_before.x, o.reported_before.y, o.reported_before.z) for o in points])
    scatter = np.sqrt(np.mean((reported - places) ** 2, axis=0))
    widths = {AXES[i]: _width(places, amplitude, sigma, i, moving, float(scatter[i])) for i in moving}
    steps = tuple(float(np.median(np.diff(np.unique(np.round(places[:, i], 9))))) for i in moving)
    return RasterResult(
        axes=tuple(moving),
        places=places,
        peak_v=np.array([o.peak_v for o in points]),
        trough_v=np.array([-o.trough_v for o in points]),
        integral_v2s=integral,
        noise_v=noise,
        amplitude=amplitude,
        sigma=sigma,
        peak=peak,
        widths=widths,
        steps=steps,
        averaging=averaging_of(points, _lines_through(places, amplitude, moving, scatter), circumstances),
        scatter_m=scatter,
    )


def _lines_through(places: Array, amplitude: Array, moving: list[int], scatter_m: Array) -> dict[str, Line]:
    """Lines across the beam through the largest level, by name of their axis."""
    found = {}
    for axis in (i for i in moving if AXES[i] != "z"):
        rows = np.nonzero(_level_with_the_peak(places, amplitude, [i for i in moving if i != axis]))[0]
        found[AXES[axis]] = Line(rows, places[rows, axis], float(scatter_m[axis]))
    return found


def _peak(places: Array, amplitude: Array, moving: list[int]) -> Peak | None:
    if len(moving) < 2:
        return None
    rows = _level_with_the_peak(places, amplitude, moving[2:])
    try:
        return peak_of(places[rows, moving[0]], places[rows, moving[1]], amplitude[rows])
    except MeasurementError:
        return None


def _level_with_the_peak(places: Array, amplitude: Array, axes: Sequence[int]) -> NDArray[np.bool_]:
    """Points that share these coordinates with the point of the largest level; all of them for no axes."""
    at = places[np.argmax(amplitude)]
    return np.asarray(np.all(np.abs(places[:, list(axes)] - at[list(axes)]) < 1e-9, axis=1))


def _width(
    places: Array, amplitude: Array, sigma: Array, axis: int, moving: list[int], scatter_m: float
) -> Width | str:
    """Along the line of points that runs in `axis` through the place of the largest level.

    Its uncertainty holds the noise, the scatter of the stage, and what the spline makes of the steps.
    """
    rows = _level_with_the_peak(places, amplitude, [i for i in moving if i != axis])
    order = np.argsort(places[rows, axis])
    x, y, s = places[rows, axis][order], amplitude[rows][order], sigma[rows][order]
    try:
        width = width_of(x, y, s)
    except MeasurementError as error:
        return str(error)
    steps = steps_u(x, y, s, width)
    if steps is None:
        steps = width.width_m / 15
    u = np.sqrt(width.standard_uncertainty_m**2 + 2 * scatter_m**2 + steps**2)
    return replace(width, standard_uncertainty_m=float(u))


def quantities(result: RasterResult, circumstances: Circumstances) -> list[Quantity]:
    """Every result as a quantity."""
    found = []
    for axis, width in result.widths.items():
        if isinstance(width, str):
            found.append(Quantity("beamwidth", None, "m", None, {"axis": axis}, width))
            continue
        found.append(Quantity("beamwidth", width.width_m, "m", width.standard_uncertainty_m, {"axis": axis}, BEAMWIDTH))
        share = averaged_share(circumstances.nominal_radius_m, width.width_m)
        method = "Gaussian beam of the measured width, nominal radius; an estimate, nothing was corrected"
        found.append(Quantity("share of the peak read", share, "1", None, {"axis": axis}, method))
    if result.peak is not None:
        values = ((result.peak.x_m, result.peak.x_u_m), (result.peak.y_m, result.peak.y_u_m))
        for axis_number, (value, u) in zip(result.axes[:2], values, strict=True):
            conditions = {"axis": AXES[axis_number]}
            found.append(Quantity("beam peak", value, "m", u, conditions, "quadratic of the level about the largest"))
    for axis, width in result.widths.items():
        if result.peak is None and not isinstance(width, str):
            found.append(Quantity("beam peak", width.peak_m, "m", None, {"axis": axis}, "top of the spline"))
    at = int(np.argmax(result.amplitude))
    found += averaging_quantities(result.averaging) + beam_quantities(result)
    for name, heights in (("positive peak", result.peak_v), ("negative peak", result.trough_v)):
        method = "at the point with the largest pulse-pressure-squared integral; uncertainty from noise alone"
        found.append(Quantity(name, float(heights[at]), "V", float(result.noise_v[at]), {}, method))
    return found


def beam_quantities(result: RasterResult) -> list[Quantity]:
    """Area and shape of a plane across the beam; focal distance and depth of a line or plane along it."""
    found = []
    if result.axes[:2] == (0, 1):
        x, y, grid = on_grid(result, result.amplitude)
        try:
            found += _shape(x, y, grid, on_grid(result, result.sigma)[2], result.scatter_m)
        except MeasurementError as error:
            found.append(Quantity("beam area", None, "m2", None, {}, str(error)))
    if 2 in result.axes:
        rows = _level_with_the_peak(result.places, result.amplitude, [i for i in result.axes if i != 2])
        try:
            focus = focus_of(result.places[rows, 2], result.amplitude[rows], result.sigma[rows])
        except MeasurementError as error:
            return [*found, Quantity("focal distance", None, "m", None, {}, str(error))]
        u = float(np.hypot(focus.distance_u_m, result.scatter_m[2]))
        found.append(Quantity("focal distance", focus.distance_m, "m", u, {}, FOCUS))
        u = float(np.hypot(focus.depth_u_m, np.sqrt(2) * result.scatter_m[2]))
        found.append(Quantity("depth of focus", focus.depth_m, "m", u, {}, BEAMWIDTH))
    return found


def _shape(x: Array, y: Array, grid: Array, sigma: Array, scatter_m: Array) -> list[Quantity]:
    down, along = np.gradient(grid, y, x)
    # a point that stands off by so much reads another level
    sigma = np.sqrt(sigma**2 + (along * scatter_m[0]) ** 2 + (down * scatter_m[1]) ** 2)
    m = measured_shape(x, y, grid, sigma, np.random.default_rng(SEED))
    s = m.shape
    turn, turn_u = float(np.degrees(s.orientation)), float(np.degrees(m.orientation_u))
    rows: list[tuple[str, float, str, float, dict[str, float | str]]] = [
        ("beam area", s.area_m2, "m2", m.area_u_m2, {}),
        ("beam centroid", s.centroid_m[0], "m", m.centroid_u_m[0], {"axis": "x"}),
        ("beam centroid", s.centroid_m[1], "m", m.centroid_u_m[1], {"axis": "y"}),
        ("ellipticity", s.ellipticity, "1", m.ellipticity_u, {}),
        ("direction of the major axis", turn, "deg", turn_u, {}),
    ]
    return [Quantity(name, value, unit, u, where, BEAMWIDTH) for name, value, unit, u, where in rows]


def on_grid(result: RasterResult, values: Array) -> tuple[Array, Array, Array]:
    """Coordinates of the two fastest axes and the values on their grid, (y, x); NaN where no point was taken.

    Of a volume it is the plane through the largest level.
    """
    a, b = result.axes[0], result.axes[1]
    rows = _level_with_the_peak(result.places, result.amplitude, result.axes[2:])
    x, column = np.unique(np.round(result.places[rows, a], 9), return_inverse=True)
    y, row = np.unique(np.round(result.places[rows, b], 9), return_inverse=True)
    grid = np.full((y.size, x.size), np.nan)
    grid[row, column] = values[rows]
    return x, y, grid
