"""The vertical range, and how much signal there is over noise at each frequency."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np

from checks.directivity import USABLE_DB, signal_to_noise_db
from checks.finding import Change, Finding, Severity, Size
from checks.observation import Circumstances, Observation
from checks.standing import Standing
from checks.wording import mhz

POOR = 0.25
HALT_SHARE = 0.5  # of the points clipped: the scan is worthless
HALT_POINTS = 10
MUCH = 0.5


class RangeCheck:
    """`range.clipped` and `range.poor`.

    Clipping is a fact and needs no statistic: a sample at a rail is not known. Poor use: the largest excursion at
    the reference stays below a quarter of the range, which costs two bits of the digitiser.
    """

    def __init__(self) -> None:
        self._clipped = Standing(tally=True)
        self._poor = Standing()
        self._hopeless = self._upper = self._lower = False
        self._first = self._last = self._count = self._samples = self._seen = 0

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        self._seen += 1
        samples = seen.clipped_high + seen.clipped_low
        changes: list[Change] = []
        if samples:
            if not self._count:
                self._first = seen.index
            self._last, self._count = seen.index, self._count + 1
            self._samples = max(self._samples, samples)
            changes += self._clipped.now(self._say_clipped(seen), seen.index)
        if seen.reference:
            changes += self._poor.now(self._say_poor(seen), seen.index)
        return changes

    def finish(self) -> Iterable[Change]:
        """The last tally."""
        return [*self._clipped.last_word(), *self._poor.last_word()]

    def _say_clipped(self, seen: Observation) -> Finding:
        self._hopeless |= self._seen >= HALT_POINTS and self._count > HALT_SHARE * self._seen
        severity: Severity = "halt" if self._hopeless else "caution"
        self._upper |= seen.clipped_high > 0
        self._lower |= seen.clipped_low > 0
        rails = [name for name, touched in (("upper", self._upper), ("lower", self._lower)) if touched]
        return Finding(
            code="range.clipped",
            severity=severity,
            summary=f"{self._count} of {self._seen} points touch the {' and '.join(rails)} rail, with up to "
            f"{self._samples} samples",
            sizes=(Size("clipped samples", float(self._samples), 0.0, "1"),),
            points=(self._first, self._last, self._count),
            consequence="peaks of these points are larger than read, and harmonics are false",
            remedy="raise full_scale_v, or leave it out so that the range is found at the reference point",
        )

    def _say_poor(self, seen: Observation) -> Finding | None:
        if seen.range_use >= POOR / self._poor.ease:
            return None
        return Finding(
            code="range.poor",
            severity="note",
            summary=f"the largest excursion uses {100 * seen.range_use:.0f} % of the vertical range",
            sizes=(Size("use of range", seen.range_use, 0.0, "1"),),
            points=(seen.index, seen.index, 1),
            consequence="the digitiser's own noise is larger than it need be",
            remedy="lower full_scale_v, or leave it out so that the range is found at the reference point",
        )


class SignalCheck:
    """`noise.low-signal`.

    Statistic: signal over noise of each wanted line at the reference points, the noise's own share taken off.
    Threshold: 20 dB, below which a line is not used in the result. Asked at reference points only, where the signal
    is largest; a line within 3 dB of the threshold keeps the state that it had.
    """

    def __init__(self, circumstances: Circumstances) -> None:
        self._frequencies = circumstances.frequencies_hz
        self._usable = np.ones(self._frequencies.size, bool)
        self._standing = Standing()
        self._count = 0

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        if not seen.reference:
            return []
        self._count += 1
        level = signal_to_noise_db(seen)
        if self._count == 1:
            self._usable = level >= USABLE_DB
        self._usable = np.where(level >= USABLE_DB + 3, True, np.where(level < USABLE_DB - 3, False, self._usable))
        return self._standing.now(self._finding(seen.index), seen.index)

    def finish(self) -> Iterable[Change]:
        """Nothing more to say."""
        return []

    def _finding(self, at: int) -> Finding | None:
        bad = ~self._usable
        if not bad.any():
            return None
        share = float(bad.mean())
        severity: Severity = "caution" if share > MUCH else "note"
        lost = ", ".join(f"{f / 1e6:.4g}" for f in self._frequencies[bad][:6])
        more = f" and {int(bad.sum()) - 6} more" if bad.sum() > 6 else ""
        best = mhz(float(self._frequencies[self._usable].max())) if self._usable.any() else "no frequency"
        return Finding(
            code="noise.low-signal",
            severity=severity,
            summary=f"signal over noise is below {USABLE_DB:.0f} dB at {lost}{more} MHz",
            sizes=(Size("share of lines lost", share, 0.0, "1"),),
            points=(at, at, self._count),
            consequence=f"{100 * (1 - share):.0f} % of the wanted lines can be used, up to {best}",
            remedy="more averages (four times as many give 6 dB), more drive, or a shorter distance",
        )
