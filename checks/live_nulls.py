"""Frequencies without energy, and why: the source has none there, an echo takes it away, or the element cannot hear it.

A null of the source stands at one frequency at every angle and on one line alone; an echo makes a ripple over all
lines; a null of the element moves with angle so that f sin(theta) stays the same.
"""

from __future__ import annotations

from collections.abc import Iterable
from math import log, log10, pi, sin

import numpy as np
from numpy.typing import NDArray

from checks.arrival import SharedTracker
from checks.finding import Change, Finding, Size
from checks.observation import Circumstances, Observation
from checks.standing import Standing
from checks.water import speed_of_sound, speed_or
from checks.wording import decibel, mhz, rounded

FIRST_NULL = 3.8317059702  # first zero of J1
DIP_DB = 10.0
RIPPLE_DB = 1.0
RIPPLE_LINES = 8
RIPPLE_EXPLAINS = 0.8
SMOOTH_TERMS = 4  # 1, ln n (a steep wave falls as 1/n), n (preamplifier), n² (absorption)
SLOWEST = 11  # of 64 delays: slower ripples cannot be told from the shape of the comb
DELAYS = 64
CLEAR = 3.0
STRONG = 10.0  # standard deviations at angle zero, for a line whose sign is believed
LEAST_U = 0.02
NARROW = 0.15  # the null is told once it is bracketed within this share of itself


class SpectrumCheck:
    """`null.source` and `null.echo`, from the mean spectrum of the reference points.

    Model: the level of harmonic n in dB is smooth, a sum of 1, ln n, n and n². A source's null: one line lies 10 dB
    or more below the line through its neighbours. An echo of delay tau: ripple g cos(2 pi n f tau) on top of it; lines
    are f apart, so tau is known up to whole cycles of f. Statistic: share of the residual sum of squares that the best
    of the delays explains; threshold 0.8 with an amplitude of 1 dB or more (common practice, no source).
    """

    def __init__(self, circumstances: Circumstances) -> None:
        self._frequencies = circumstances.frequencies_hz
        self._drive_hz = circumstances.drive_hz
        self._power = np.zeros(self._frequencies.size)
        self._noise = np.zeros(self._frequencies.size)
        self._count = 0
        self._ripples: _Ripples | None = None
        self._source = Standing()
        self._echo = Standing()

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point; only reference points count."""
        if not seen.reference:
            return []
        self._count += 1
        self._power += np.abs(seen.components) ** 2
        self._noise += 2 * seen.component_noise_v**2
        clean = (self._power - self._noise) / self._count
        floor = np.maximum(self._noise / self._count, 1e-300)
        level = 10 * np.log10(np.maximum(clean, floor))
        strong = clean > 100 * floor
        ripple = self._ripple(level, strong)
        changes = self._echo.now(self._say_echo(ripple, seen.index) if ripple else None, seen.index)
        dips = [] if ripple else self._dips(level, strong)
        return [*changes, *self._source.now(self._say_source(dips, seen.index) if dips else None, seen.index)]

    def finish(self) -> Iterable[Change]:
        """The last sizes."""
        return [*self._echo.last_word(), *self._source.last_word()]

    def _dips(self, level: NDArray[np.float64], strong: NDArray[np.bool_]) -> list[tuple[int, float]]:
        """Lines that lie far below the straight line between their neighbours, where those are strong."""
        found = []
        for i in range(1, level.size - 1):
            depth = (level[i - 1] + level[i + 1]) / 2 - level[i]
            if strong[i - 1] and strong[i + 1] and depth > DIP_DB:
                found.append((i, float(depth)))
        return found

    def _ripple(self, level: NDArray[np.float64], strong: NDArray[np.bool_]) -> tuple[float, float] | None:
        """Amplitude in dB and delay in s (up to whole cycles) of a ripple over the strong lines, or None."""
        if np.count_nonzero(strong) < RIPPLE_LINES:
            return None
        if self._ripples is None or not np.array_equal(self._ripples.strong, strong):
            self._ripples = _Ripples(strong)
        explained, amplitude, cycles = self._ripples.best(level)
        freedom = np.count_nonzero(strong) - SMOOTH_TERMS - 2
        needed = 1 - (1 - RIPPLE_EXPLAINS) * min(1.0, freedom / RIPPLE_LINES)
        ease = self._echo.ease
        return (amplitude, cycles / self._drive_hz) if explained >= needed and amplitude >= RIPPLE_DB * ease else None

    def _say_source(self, dips: list[tuple[int, float]], at: int) -> Finding:
        names = ", ".join(mhz(float(self._frequencies[i])) for i, _ in dips)
        depth = max(d for _, d in dips)
        return Finding(
            code="null.source",
            severity="caution",
            summary=f"the source has next to no energy at {names}, {depth:.0f} dB below its neighbours",
            sizes=tuple(Size("frequency", float(self._frequencies[i]), self._drive_hz / 2, "Hz") for i, _ in dips),
            points=(0, at, self._count),
            consequence="the response at this frequency is a ratio of small numbers at every angle",
            remedy="leave this frequency out, or shift the drive frequency by a few percent",
        )

    def _say_echo(self, ripple: tuple[float, float], at: int) -> Finding:
        amplitude, delay = ripple  # the level alone does not tell a delay from its complement to a whole cycle
        other = 1 / self._drive_hz - delay
        level = 20 * log10(amplitude * log(10) / 20)  # ln|1 + r exp(i a)| = r cos a - ..., exactly r for r < 1
        return Finding(
            code="null.echo",
            severity="caution",
            summary=f"the spectrum ripples by ±{decibel(amplitude)}: an echo {delay * 1e6:.2f} or {other * 1e6:.2f} us "
            f"(and whole cycles of {1e6 / self._drive_hz:.2f} us) after the burst lies in the gate",
            sizes=(Size("ripple", amplitude, amplitude / 10, "dB"),),
            points=(0, at, self._count),
            consequence=f"an echo of about {level:.0f} dB interferes, and differently at every angle",
            remedy="find the reflector, lengthen the way around it, or shorten burst and gate",
        )


class _Ripples:
    """Least squares of all delays at once, for one choice of lines; K lines, D delays.

    What the smooth terms cannot say is left (`plain`); the cosine and sine of each delay, the smooth terms taken off
    them, span a plane each. The share that a delay explains is the squared length of `plain` within its plane.
    """

    def __init__(self, strong: NDArray[np.bool_]) -> None:
        self.strong = strong
        self._lines = np.nonzero(strong)[0]
        n = self._lines + 1.0
        smooth = np.stack([np.ones_like(n), np.log(n), n / n.size, (n / n.size) ** 2], axis=1)
        self._smooth = np.linalg.qr(smooth)[0]
        self._cycles = np.arange(SLOWEST, DELAYS // 2 + 1) / DELAYS
        turn = 2 * pi * self._cycles[:, None] * n
        self._waves = np.stack([np.cos(turn), np.sin(turn)], axis=2)  # (D, K, 2)
        rest = self._waves - self._smooth @ (self._smooth.T @ self._waves)
        # at a delay of half a cycle the sine is zero on every line, so a pseudo-inverse
        self._inverse = np.linalg.pinv(rest, rcond=1e-6)  # (D, 2, K)
        self._rest = rest

    def best(self, level: NDArray[np.float64]) -> tuple[float, float, float]:
        """Largest share explained (0 to 1), its amplitude in dB, its delay in cycles of the drive.

        The amplitude is the largest ripple on any line: near half a cycle the lines do not tell amplitude from phase.
        """
        y = level[self._lines]
        plain = y - self._smooth @ (self._smooth.T @ y)
        parts = self._inverse @ plain
        said = (self._rest @ parts[:, :, None])[:, :, 0]
        explained = (said**2).sum(axis=1) / max(float(plain @ plain), 1e-30)
        i = int(np.argmax(explained))
        return float(explained[i]), float(np.abs(self._waves[i] @ parts[i]).max()), float(self._cycles[i])


class ElementNullCheck:
    """`null.element`: where the element does not hear, by its own size.

    Model: the signed response crosses zero where f sin(theta) = 3.8317 c/(2 pi a). Statistic: over all lines that are
    ten standard deviations clear of noise at angle zero, the largest f sin(theta) with a positive and the smallest
    with a negative response, each three clear of zero, and the mean of both sides. It is told once the two lie
    close together. A note: the response is measured there, and it is none.
    """

    def __init__(self, circumstances: Circumstances, tracker: SharedTracker | None = None) -> None:
        self._frequencies = circumstances.frequencies_hz
        self._tracker = tracker or SharedTracker(circumstances)
        self._phase: NDArray[np.complex128] | None = None
        self._low, self._high = 0.0, np.inf
        self._strong = np.zeros(circumstances.frequencies_hz.size, bool)
        shape = (circumstances.frequencies_hz.size, 2)  # lines, sides
        self._positive, self._negative = np.zeros(shape), np.full(shape, np.inf)
        self._speed = speed_of_sound(20.0)
        self._limit = 1.4 * FIRST_NULL * 1500 / (2 * pi * circumstances.nominal_radius_m)
        self._standing = Standing()
        self._points = 0

    def update(self, seen: Observation) -> Iterable[Change]:
        """One more point."""
        arrival = self._tracker.update(seen)
        if not arrival.usable:
            return []
        turned = seen.components * np.exp(2j * pi * self._frequencies * arrival.time_s)
        if self._phase is None:
            if not seen.reference and abs(seen.commanded.theta) > 1e-3:
                return []
            self._phase = np.exp(-1j * np.angle(turned))
            self._strong = np.abs(turned) > STRONG * seen.component_noise_v
        self._points += 1
        signed = (turned * self._phase).real
        product = self._frequencies * abs(sin(seen.commanded.theta))
        clear = self._strong & (np.abs(signed) > CLEAR * seen.component_noise_v) & (product < self._limit)
        side = int(seen.commanded.theta > 0)
        low, high = self._positive[:, side], self._negative[:, side]
        up, down = clear & (signed > 0) & (product > low), clear & (signed < 0) & (product < high)
        if not (up.any() or down.any()):
            return []
        low[up], high[down] = product[up], product[down]
        # an error of angle zero moves the null outwards on one side and inwards on the other: the mean is free of it
        low, high = self._positive.mean(axis=1), self._negative.mean(axis=1)
        self._low, self._high = float(low[self._positive.min(axis=1) > 0].max(initial=0.0)), float(high.min())
        if abs(self._high - self._low) > NARROW * self._low:
            return []
        return self._standing.now(self._finding(seen), seen.index)

    def finish(self) -> Iterable[Change]:
        """The last size."""
        return self._standing.last_word()

    def _finding(self, seen: Observation) -> Finding:
        middle = (self._low + self._high) / 2
        u = max(abs(self._high - self._low) / (2 * 3**0.5), LEAST_U * middle)
        self._speed = speed_or(seen.temperature_c, self._speed)
        radius = FIRST_NULL * self._speed / (2 * pi * middle)
        top = float(self._frequencies[-1])
        at = np.degrees(np.arcsin(min(1.0, middle / top)))
        return Finding(
            code="null.element",
            severity="note",
            summary=f"the element's first null lies at f sin(theta) = {rounded(middle / 1e6, u / 1e6)} MHz, as for a "
            f"radius of {radius * 1e3:.3g} mm",
            sizes=(Size("f sin(theta)", middle, u, "Hz"),),
            points=(0, seen.index, self._points),
            consequence=f"at {mhz(top)} the response has its first null near {at:.1f}°: levels about it are noise",
            remedy="none is needed: it is a property of the element",
        )
