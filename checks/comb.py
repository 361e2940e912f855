"""At which frequencies a burst is analysed: the teeth of its comb, and two lines beside the first one."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from checks.errors import MeasurementError

HIGHEST_SHARE = 0.45  # of the sample rate


def comb_lines(drive_hz: float, highest_hz: float, sample_rate_hz: float) -> NDArray[np.float64]:
    """Drive frequency and its multiples up to `highest_hz`, shape (K,).

    Raises:
        MeasurementError: not even the drive frequency can be analysed.
    """
    top = min(highest_hz * (1 + 1e-9), HIGHEST_SHARE * sample_rate_hz)
    count = int(top / drive_hz)
    if count < 1:
        raise MeasurementError(
            f"the drive frequency of {drive_hz / 1e6:g} MHz lies above the highest that can be analysed, "
            f"{top / 1e6:g} MHz: a higher sample rate, or a higher highest_mhz"
        )
    return drive_hz * np.arange(1, count + 1, dtype=np.float64)


def side_lines(drive_hz: float, cycles: int) -> NDArray[np.float64]:
    """Two lines within the main lobe of an n-cycle burst, a quarter of its bandwidth f/n to either side."""
    aside = drive_hz / (4 * cycles)
    return np.array([drive_hz - aside, drive_hz + aside])
