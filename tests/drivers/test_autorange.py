import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from drivers.autorange import MOST, autorange
from drivers.roles import CaptureSettings
from drivers.trace import Scaling, Trace

SCALES = (0.008, 0.04, 0.08, 0.4, 0.8, 4.0, 8.0)
SETTINGS = CaptureSettings(100e6, 64, 0.0, 1, 1.0)


def digitised(peak_v: float, full_scale_v: float) -> Trace:
    """A waveform of that peak as 8 bits of that range see it."""
    per_count = full_scale_v / 256
    volts = peak_v * np.sin(np.linspace(0, 20, 64) + 1.0)
    volts[7] = peak_v
    counts = np.clip(np.round(volts / per_count), -128, 127).astype(np.int8)
    return Trace(counts, Scaling(per_count, 0.0, 1e-8, 0.0), -128, 127, 1, full_scale_v)


@given(peak_v=st.floats(1e-4, 3.2))
def test_the_range_that_is_found_is_never_clipped_and_the_next_smaller_would_be_too_tight(peak_v: float) -> None:
    found = autorange(SETTINGS, SCALES, lambda s: digitised(peak_v, s.full_scale_v)).full_scale_v
    trace = digitised(peak_v, found)
    assert trace.counts.max() < trace.highest
    smaller = [s for s in SCALES if s < found]
    if smaller:
        # one step of the digitiser at the range from which it came down may hide in the excursion
        assert 2 * peak_v / MOST > smaller[-1] * 0.97 - 2 * 8.0 / 256


@given(peak_v=st.floats(5.0, 50.0))
def test_what_is_too_large_for_every_range_gets_the_largest(peak_v: float) -> None:
    assert autorange(SETTINGS, SCALES, lambda s: digitised(peak_v, s.full_scale_v)).full_scale_v == SCALES[-1]
