"""The pictures of the report. Each function takes plain arrays, in the units of its axes, and gives a Figure.

Figures are made with the Agg canvas and never through pyplot, which would keep them alive.
"""

from __future__ import annotations

from collections.abc import Sequence
from io import BytesIO
from typing import Any

import numpy as np
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from numpy.typing import NDArray

Array = NDArray[np.float64]
CURVES = ("#1b4965", "#c8553d", "#588157", "#7d5ba6", "#b08900", "#5fa8d3")
FLOOR_DB = -36.0


def blank(width: float = 7.2, height: float = 4.2) -> Figure:
    """An empty figure, inches."""
    figure = Figure(figsize=(width, height), layout="constrained")
    FigureCanvasAgg(figure)
    return figure


def png(figure: Figure, dpi: int = 120) -> bytes:
    """The figure as a PNG file."""
    out = BytesIO()
    figure.savefig(out, format="png", dpi=dpi)
    return out.getvalue()


def response_against_angle(
    angle_deg: Array, frequency_mhz: Array, level_db: Array, fit_angle_deg: Array, fit_db: Array
) -> Figure:
    """Level (angle, frequency) as dots with the fitted pattern (fit_angle, frequency) as lines."""
    figure = blank()
    axes = figure.add_subplot()
    for column, (f, colour) in enumerate(zip(frequency_mhz, CURVES, strict=False)):
        axes.plot(angle_deg, level_db[:, column], ".", color=colour, markersize=4, label=f"{f:.4g} MHz")
        axes.plot(fit_angle_deg, fit_db[:, column], "-", color=colour, linewidth=0.9)
    for level in (-3, -6):
        axes.axhline(level, color="0.8", linewidth=0.8, zorder=0)
    axes.set(xlabel="angle / °", ylabel="level re angle zero / dB", ylim=(FLOOR_DB, 2))
    axes.legend(fontsize="small", ncols=5, loc="lower center", bbox_to_anchor=(0.5, 1.0), frameon=False)
    return figure


def response_surface(
    angle_deg: Array, frequency_mhz: Array, level_db: Array, null_loci: Sequence[tuple[Array, Array]]
) -> Figure:
    """Level (angle, frequency) as a surface seen from above; `null_loci` are (angle, frequency) curves."""
    figure = blank()
    axes = figure.add_subplot()
    mesh = axes.pcolormesh(
        angle_deg,
        frequency_mhz,
        level_db.T,
        vmin=FLOOR_DB,
        vmax=0,
        cmap="cividis",
        shading="nearest",
        rasterized=True,
    )
    for n, (at_deg, at_mhz) in enumerate(null_loci):
        axes.plot(at_deg, at_mhz, "w--", linewidth=1, label="nulls of the fitted element" if n == 0 else None)
    if null_loci:
        axes.legend(fontsize="small", loc="lower left", facecolor="0.35", labelcolor="white")
    axes.set(xlabel="angle / °", ylabel="frequency / MHz", xlim=(angle_deg.min(), angle_deg.max()))
    axes.set_ylim(frequency_mhz.min(), frequency_mhz.max())
    figure.colorbar(mesh, label="level re angle zero / dB")
    return figure


def peaks_against_angle(angle_deg: Array, positive: Array, negative: Array) -> Figure:
    """Positive and negative peak, each relative to its value at angle zero."""
    figure = blank()
    axes = figure.add_subplot()
    axes.plot(angle_deg, positive, ".-", color=CURVES[1], linewidth=0.7, label="positive peak")
    axes.plot(angle_deg, negative, ".-", color=CURVES[0], linewidth=0.7, label="negative peak")
    axes.set(xlabel="angle / °", ylabel="peak re angle zero", ylim=(0, None))
    axes.legend()
    return figure


def arrival_against_angle(angle_deg: Array, arrival_ns: Array, fit_angle_deg: Array, fit_ns: Array) -> Figure:
    """Arrival re angle zero with the curve that the fitted pivot offset gives."""
    figure = blank()
    axes = figure.add_subplot()
    axes.plot(angle_deg, arrival_ns, ".", color=CURVES[0], markersize=4, label="measured")
    axes.plot(fit_angle_deg, fit_ns, "-", color=CURVES[1], linewidth=1, label="fitted pivot offset")
    axes.set(xlabel="angle / °", ylabel="arrival re angle zero / ns")
    axes.legend()
    return figure


def radius_against_frequency(
    frequency_mhz: Array,
    by_fit: tuple[Array, Array],
    by_angles: tuple[Array, Array],
    nominal_mm: float,
    law: tuple[Array, Array, Array] | None,
) -> Figure:
    """Effective radius (mm) and its standard uncertainty by the two ways; `law` is (MHz, mm, u in mm)."""
    figure = blank()
    axes = figure.add_subplot()
    if law is not None:
        mhz, mm, u_mm = law
        axes.fill_between(mhz, mm - 2 * u_mm, mm + 2 * u_mm, color=CURVES[5], alpha=0.35, lw=0)
        axes.plot(mhz, mm, color=CURVES[0], linewidth=1, label="fitted law, band k = 2")
    style: dict[str, Any] = {"linestyle": "none", "markersize": 4, "elinewidth": 0.8, "capsize": 2}
    axes.errorbar(frequency_mhz, *by_fit, marker="o", color=CURVES[0], label="fit of the whole pattern", **style)
    axes.errorbar(
        frequency_mhz,
        *by_angles,
        marker="s",
        mfc="none",
        color=CURVES[1],
        label="from −3 and −6 dB angles",
        **style,
    )
    axes.axhline(nominal_mm, color="0.7", linewidth=0.8, linestyle=":", label="nominal")
    middle = float(np.nanmedian(by_fit[0]))
    reach = 1.3 * max(
        0.05 * middle, abs(nominal_mm - middle), float(np.nanmax(np.abs(by_angles[0] - middle), initial=0.0))
    )
    reach = min(reach, 0.6 * middle)
    axes.set(xlabel="frequency / MHz", ylabel="effective radius / mm", ylim=(middle - reach, middle + reach))
    axes.legend(fontsize="small")
    return figure


def waveform_and_spectrum(
    time_us: Array,
    volts: Array,
    gate_us: tuple[float, float],
    frequency_mhz: Array,
    spectrum_db: Array,
    usable_mhz: Array,
) -> Figure:
    """A reference waveform with its gate, and its spectrum with the usable comb lines marked."""
    figure = blank(7.2, 5.4)
    upper, lower = figure.subplots(2, 1)
    upper.plot(time_us, volts * 1e3, color=CURVES[0], linewidth=0.6)
    upper.axvspan(*gate_us, color=CURVES[5], alpha=0.2, lw=0, label="gate")
    upper.set(xlabel="time after the trigger / µs", ylabel="voltage / mV", xlim=(time_us[0], time_us[-1]))
    upper.legend(fontsize="small")
    lower.plot(frequency_mhz, spectrum_db, color=CURVES[0], linewidth=0.6)
    if usable_mhz.size:
        lower.plot(usable_mhz, np.full(usable_mhz.size, 3.0), "v", color=CURVES[1], markersize=4, label="usable lines")
        lower.legend(fontsize="small")
    lower.set(xlabel="frequency / MHz", ylabel="level re largest / dB", ylim=(-90, 8), xlim=(0, frequency_mhz[-1]))
    return figure


def beam_map(
    x_mm: Array, y_mm: Array, level_db: Array, peak_mm: tuple[float, float], labels: tuple[str, str]
) -> Figure:
    """Level (y, x) re its largest, with the −6 dB contour and the peak."""
    figure = blank(6.2, 5.0)
    axes = figure.add_subplot()
    mesh = axes.pcolormesh(x_mm, y_mm, level_db, vmin=-30, vmax=0, cmap="cividis", shading="nearest", rasterized=True)
    axes.contour(x_mm, y_mm, level_db, levels=[-6.0], colors="white", linewidths=1.2)
    axes.plot(*peak_mm, "+", color=CURVES[1], markersize=10)
    axes.set(xlabel=f"{labels[0]} / mm", ylabel=f"{labels[1]} / mm", aspect="equal")
    figure.colorbar(mesh, label="level re largest / dB (white: −6 dB)")
    return figure


def beam_profile(position_mm: Array, level_db: Array, edges_mm: tuple[float, float] | None, label: str) -> Figure:
    """Level along a line re its largest, with the −6 dB edges."""
    figure = blank()
    axes = figure.add_subplot()
    axes.plot(position_mm, level_db, ".-", color=CURVES[0], linewidth=0.7)
    axes.axhline(-6, color="0.8", linewidth=0.8)
    for edge in edges_mm or ():
        axes.axvline(edge, color=CURVES[1], linewidth=0.8, linestyle="--")
    axes.set(xlabel=f"{label} / mm", ylabel="level re largest / dB", ylim=(-40, 2))
    return figure
