"""How much signal is left at the largest angles: at which frequencies the far part of the pattern is noise."""

from __future__ import annotations

from collections.abc import Iterable
from math import degrees

import numpy as np
from numpy.typing import NDArray

from checks.directivity import USABLE_DB
from checks.finding import Change, Finding, Size
from checks.observation import Circumstances, Observation
from checks.standing import Standing
from checks.wording import mhz

OUTER = 0.85  # of the largest angle so far: beyond it the outer zone begins
WIDER = 1.02  # the zone begins anew when the scan has gone so much further
CLEAR_DB = 6.0  # signal over noise that a level needs to be told from none
SLACK_DB = 3.0  # a line within so much of the threshold keeps the state that it had
FEWEST = 6


class ReachCheck:
    """`noise.at-angle`.

    Model: in the outer zone of angles the power of a component is that of the response plus 2 sigma² of noise. The
    mean over the zone evens out side lobes and nulls. Statistic: mean power, the noise's share taken off, over that
    share; with n points noise alone is chi-squared with 2 n degrees of freedom over 2 n, less one: its standard
    deviation is n^(-1/2), so that 6 dB (a ratio of 4) lies 9 standard deviations above none at 6 points, and no
    threshold for false alarms is needed. Only lines that are usable at angle zero are judged (20 dB there).
    A note: half-angles come from the main lobe and stand; levels far out do not.
    """

    def __init__(self, circumstances: Circumstances) -> None:
        self._frequencies = circumstances.frequencies_hz
        lines = self._frequencies.size
        self._zero_power, self._zero_noise = np.zeros(lines), np.zeros(lines)
        self._lost = np.zeros(lines, bool)
        self._largest = 0.0
        self._standing = Standing()
        self._begin(0)

    def _begin(self, at: int) -> None:
        self._power = np.zeros(self._frequencies.size)
        self._noise = np.zeros(self._frequencies.size)
        self._count, self._first = 0, at

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        power, noise = np.abs(seen.components) ** 2, 2 * seen.component_noise_v**2
        if seen.reference:
            self._zero_power += power
            self._zero_noise += noise
            return []
        angle = abs(seen.commanded.theta)
        if angle > self._largest * WIDER:
            self._begin(seen.index)
        self._largest = max(self._largest, angle)
        if angle < OUTER * self._largest or angle <= 0:
            return []
        self._power += power
        self._noise += noise
        self._count += 1
        if self._count < FEWEST:
            return []
        return self._standing.now(self._finding(seen.index), seen.index)

    def finish(self) -> Iterable[Change]:
        """The last share."""
        return self._standing.last_word()

    def _levels_db(self) -> NDArray[np.float64]:
        """Signal over noise in the outer zone, shape (K,), at least -20 dB."""
        noise = np.maximum(self._noise, 1e-300)
        return np.asarray(10 * np.log10(np.maximum((self._power - self._noise) / noise, 0.01)))

    def _finding(self, at: int) -> Finding | None:
        level = self._levels_db()
        kept = np.where(level < CLEAR_DB - SLACK_DB, True, np.where(level > CLEAR_DB + SLACK_DB, False, self._lost))
        strong = self._zero_power - self._zero_noise > 10 ** (USABLE_DB / 10) * self._zero_noise
        self._lost = kept & strong
        if not self._lost.any():
            return None
        share = float(self._lost.sum() / strong.sum())
        lowest = float(self._frequencies[self._lost].min())
        return Finding(
            code="noise.at-angle",
            severity="note",
            summary=f"beyond {degrees(OUTER * self._largest):.0f}° {int(self._lost.sum())} of "
            f"{int(strong.sum())} usable frequencies, from {mhz(lowest)} on, are not clear of the noise",
            sizes=(Size("share of lines lost at the largest angles", share, 0.0, "1"),),
            points=(self._first, at, self._count),
            consequence="levels out there are upper bounds; half-angles down to -10 dB are not touched",
            remedy="more averages (four times as many give 6 dB) or more drive, if the far response is wanted",
        )
