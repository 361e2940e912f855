"""Choosing the vertical range: the excursion uses most of it and is never clipped."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

from drivers.roles import CaptureSettings
from drivers.trace import Trace

MOST = 0.85  # of half the range, so that a somewhat larger waveform still fits
TRIES = 12


def next_scale(trace: Trace, scales_v: Sequence[float], offset_v: float) -> float:
    """The range to try after `trace`: one up when it clipped, else the smallest that holds its excursion.

    `scales_v` ascends. The same range as that of the trace means: stay.
    """
    counts = trace.counts
    if counts.min() <= trace.lowest or counts.max() >= trace.highest:
        larger = [s for s in scales_v if s > trace.full_scale_v]
        return larger[0] if larger else scales_v[-1]
    volts = trace.volts() - offset_v
    needed = 2 * max(abs(float(volts.min())), abs(float(volts.max()))) / MOST
    return next((s for s in scales_v if s >= needed), scales_v[-1])


def autorange(
    settings: CaptureSettings, scales_v: Sequence[float], capture: Callable[[CaptureSettings], Trace]
) -> CaptureSettings:
    """Capture and change the range until it stays; `capture` sets the oscilloscope up and fetches one waveform.

    Starts at the largest range, so that the first answer is not clipped, and ends when a range is asked for that
    was tried already: between two neighbours it takes the larger.
    """
    scale = scales_v[-1]
    tried: set[float] = set()
    for _ in range(TRIES):
        tried.add(scale)
        wanted = next_scale(capture(replace(settings, full_scale_v=scale)), scales_v, settings.offset_v)
        if wanted in tried:
            scale = max(scale, wanted)
            break
        scale = wanted
    return replace(settings, full_scale_v=scale)
