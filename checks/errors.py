"""Errors of the measurement science."""

from __future__ import annotations


class MeasurementError(ValueError):
    """The data or the geometry do not allow what was asked; the message is one line with the cure."""
