"""The part of the report that shows a raster."""

from __future__ import annotations

from html import escape

import numpy as np

from acquire.report import figures
from acquire.report.page import Picture, picture, section, table
from acquire.results.averaging import averaging_statement
from acquire.results.raster import AXES, RasterResult, on_grid
from checks.beam import Width

AVERAGING = "Averaging over the face"


def sections(result: RasterResult) -> list[str]:
    """Maps (planes), and profiles along each direction."""
    pictures = []
    if len(result.axes) >= 2:
        pictures += [_map(result, which) for which in ("integral", "positive", "negative")]
    pictures += [_profile(result, axis, width) for axis, width in result.widths.items()]
    return [section("Beam", *(picture(p) for p in pictures)), *_averaging(result)]


def _averaging(result: RasterResult) -> list[str]:
    """What the size of the element does to each harmonic, in a sentence and a table."""
    told = f"<p>{escape(averaging_statement(result.averaging))}</p>"
    if not result.averaging.biases:
        return [section(AVERAGING, told)]
    head = ("harmonic", "frequency", "axis", "width measured", "peak read low", "width read wide", "largest diameter")
    rows = []
    for h in result.averaging.biases:
        least = "" if h.bias.resolved else "at least "
        rows.append(
            (
                str(h.harmonic),
                f"{h.frequency_hz / 1e6:.4g} MHz",
                h.axis,
                f"{h.bias.width6_m * 1e3:.3f} mm",
                f"{least}{h.bias.low_db:.2f} dB",
                f"{least}{100 * (h.bias.widening - 1):.1f} %",
                f"{2e3 * h.largest_radius_m:.3f} mm",
            )
        )
    return [section(AVERAGING, told, table(head, rows))]


def _map(result: RasterResult, which: str) -> Picture:
    values = {"integral": result.amplitude, "positive": result.peak_v, "negative": result.trough_v}[which]
    words = {
        "integral": "Pulse-pressure-squared integral",
        "positive": "Positive peak",
        "negative": "Negative peak",
    }[which]
    x, y, grid = on_grid(result, values)
    level = 20 * np.log10(np.maximum(grid, 1e-12 * np.nanmax(grid)) / np.nanmax(grid))
    row, column = np.unravel_index(np.nanargmax(level), level.shape)
    peak = (x[column] * 1e3, y[row] * 1e3)
    if which == "integral" and result.peak is not None:
        peak = (result.peak.x_m * 1e3, result.peak.y_m * 1e3)
    labels = (AXES[result.axes[0]], AXES[result.axes[1]])
    figure = figures.beam_map(x * 1e3, y * 1e3, level, (float(peak[0]), float(peak[1])), labels)
    return Picture(f"{words} over the raster, with its −6 dB contour and its peak.", figures.png(figure))


def _profile(result: RasterResult, axis: str, width: Width | str) -> Picture:
    """Level along the line through the largest point."""
    number = AXES.index(axis)
    at = result.places[np.argmax(result.amplitude)]
    others = [i for i in result.axes if i != number]
    rows = np.all(np.abs(result.places[:, others] - at[others]) < 1e-9, axis=1)
    order = np.argsort(result.places[rows, number])
    position = result.places[rows, number][order] * 1e3
    level = 20 * np.log10(result.amplitude[rows][order] / result.amplitude.max())
    edges = None if isinstance(width, str) else (width.left_m * 1e3, width.right_m * 1e3)
    told = f"no −6 dB width: {width}" if isinstance(width, str) else f"−6 dB width {width.width_m * 1e3:.3f} mm"
    figure = figures.beam_profile(position, level, edges, axis)
    return Picture(f"Root of the pulse-pressure-squared integral along {axis}; {told}.", figures.png(figure))
