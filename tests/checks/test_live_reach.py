"""Where the far part of the pattern is noise, and what is not said about it."""

from dataclasses import replace

import numpy as np
import pytest
from scipy import stats

from checks.live_reach import CLEAR_DB, FEWEST, ReachCheck
from tests.checks.synthetic import Truth, comb, pattern, rotation, run, standing

NOISY = Truth(noise_v=1e-4)


def lost_by_the_truth(truth: Truth, frequencies_hz: np.ndarray, largest_deg: float) -> np.ndarray:
    """Signal over noise in dB of each line, mean over the outer 15 % of the angles on both sides."""
    theta = np.radians(np.linspace(0.85 * largest_deg, largest_deg, 400))
    response = pattern(theta, frequencies_hz, truth.radius_m, truth.edge)
    power = (truth.strength_v * comb(frequencies_hz / frequencies_hz[0])) ** 2 * (response**2).mean(axis=0)
    return np.asarray(10 * np.log10(power / (2 * truth.noise_v**2)))


@pytest.mark.parametrize("seed", range(6))
def test_lines_that_are_noise_at_the_largest_angles_are_counted(seed: int) -> None:
    c, seen = rotation(NOISY, seed)
    finding = standing(run(c, seen))["noise.at-angle"].finding
    level = lost_by_the_truth(NOISY, c.frequencies_hz, 40)
    least, most = int((level < CLEAR_DB - 3).sum()), int((level < CLEAR_DB + 3).sum())
    assert 0 < least <= round(finding.sizes[0].value * 16) <= most
    assert finding.severity == "note"
    assert finding.summary.startswith("beyond 34°")


def test_a_quiet_bench_is_told_nothing() -> None:
    c, seen = rotation(Truth(noise_v=2e-7), 1)
    assert "noise.at-angle" not in {x.finding.code for x in run(c, seen)}


def test_a_line_without_signal_at_angle_zero_is_not_told_twice() -> None:
    c, seen = rotation(Truth(noise_v=2e-7), 1)
    deaf = np.full(16, 2e-7)
    deaf[-3:] = 1e-2
    codes = {x.finding.code for x in run(c, [replace(o, component_noise_v=deaf) for o in seen])}
    assert "noise.low-signal" in codes
    assert "noise.at-angle" not in codes


def test_it_is_cleared_when_the_signal_comes_back() -> None:
    c, seen = rotation(NOISY, 2, step=0.5)
    quiet = [o for o in rotation(replace(NOISY, noise_v=1e-8), 2, step=0.5)[1] if not o.reference]
    check = ReachCheck(c)
    said = [x.action for o in seen for x in check.update(o)]
    # far more signal, at the same angles and for long, and the mean of the zone rises above the noise
    loud = [replace(o, components=1e3 * o.components) for o in quiet]
    said += [x.action for o in loud for x in check.update(o)]
    assert said[0] == "raised"
    assert said[-1] == "cleared"


def test_noise_alone_never_reads_as_signal_by_the_threshold() -> None:
    """Mean power of n noise components is chi-squared with 2 n degrees of freedom over 2 n (scipy.stats.chi2)."""
    ratio = 10 ** (CLEAR_DB / 10) + 1
    assert stats.chi2.sf(2 * FEWEST * ratio, 2 * FEWEST) < 1e-6
