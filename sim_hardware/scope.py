"""What both families of simulated oscilloscope share: settings, arming, triggers, and the capture in memory."""

from __future__ import annotations

from dataclasses import replace
from math import ceil

from profiles.instrument import ScopeLimits
from profiles.units import MHZ
from sim_hardware.acquired import CHANNELS, Acquired, CaptureSource, Range, Settings, Shot
from sim_hardware.clock import Due, Timeline
from sim_hardware.scpi import ScpiInstrument
from sim_hardware.scpi_data import Integer, Real
from sim_hardware.scpi_errors import ScpiError
from sim_hardware.sync import SyncLine

VOLTS, OFFSET = Real(1e-6, 1e4, "V"), Real(-1e3, 1e3, "V")
HERTZ, SECONDS = Real(1.0, 1e12, "HZ"), Real(-10.0, 10.0, "S")
COUNT = Integer(1, 2**31 - 1)


class Scope(ScpiInstrument):
    """State of an oscilloscope. A family adds its commands.

    Args:
        limits: what it can be set to; ranges go to the next that holds what was asked, rates to the nearest.
    """

    def __init__(
        self, identity: str, limits: ScopeLimits, timeline: Timeline, sync: SyncLine, source: CaptureSource
    ) -> None:
        super().__init__(identity, timeline.run_due)
        self._limits = limits
        self._timeline = timeline
        self._sync = sync
        self._source = source
        self._shots = 0
        self._shot: Shot | None = None  # armed
        self._due: Due | None = None
        self._memory: Acquired | None = None
        self.settings = self._defaults()
        sync.listen(self._sync_changed)

    def _defaults(self) -> Settings:
        widest = max(self._limits.full_scales_v)
        return Settings(
            sample_rate_hz=max(self._limits.sample_rates_mhz) * MHZ,
            points=min(1000, self._limits.max_points),
            start_s=0.0,
            averages=1,
            ranges={n: Range(widest) for n in range(1, CHANNELS + 1)},
        )

    def reset(self) -> None:
        """Settings as at power-on, nothing armed, memory empty."""
        self.abort()
        self._memory = None
        self.settings = self._defaults()

    def busy(self) -> bool:
        """Armed, and not all triggers have come."""
        return self._shot is not None

    # settings

    def set_full_scale(self, channel: int, volts: float) -> None:
        """To the next range that holds it; raises -222 above the widest."""
        fitting = [v for v in self._limits.full_scales_v if v >= volts * (1 - 1e-9)]
        if not fitting:
            raise ScpiError(-222)
        offset = self.settings.ranges[channel].offset_v
        self.settings = self.settings.with_range(channel, Range(min(fitting), offset))

    def set_offset(self, channel: int, volts: float) -> None:
        """Volts at the middle of the range."""
        full_scale = self.settings.ranges[channel].full_scale_v
        self.settings = self.settings.with_range(channel, Range(full_scale, volts))

    def set_rate(self, hertz: float) -> None:
        """To the nearest rate that there is."""
        rates = [r * MHZ for r in self._limits.sample_rates_mhz]
        self.settings = replace(self.settings, sample_rate_hz=min(rates, key=lambda r: abs(r - hertz)))

    def set_points(self, points: int) -> None:
        """Raises -222 above what the memory holds."""
        if points > self._limits.max_points:
            raise ScpiError(-222)
        self.settings = replace(self.settings, points=points)

    def set_start(self, seconds: float) -> None:
        """Time of the first sample after the trigger."""
        self.settings = replace(self.settings, start_s=seconds)

    def check_averages(self, count: int) -> int:
        """Raises -222 above what it can average."""
        if count > self._limits.max_averages:
            raise ScpiError(-222)
        return count

    # captures

    def arm(self) -> None:
        """Wait for triggers. Raises -213 when armed already."""
        if self._shot is not None:
            raise ScpiError(-213)
        self._source.arm()
        self._memory = None
        self._shot = Shot(self._shots, self.settings, ())
        self._shots += 1
        self._expect_triggers()

    def abort(self) -> None:
        """Give up an armed capture."""
        if self._due is not None:
            self._due.cancel()
        self._shot = self._due = None
        self.completed()

    def memory(self) -> Acquired:
        """The last complete capture; raises -230 when there is none."""
        if self._memory is None:
            raise ScpiError(-230)
        return self._memory

    def prepare(self) -> bool:
        """Work ahead of the transfer; False when nothing is left to do."""
        if self._memory is not None:
            return self._memory.prepare()
        return self._shot is not None and self._due is not None and self._source.foresee(self._shot)

    def _expect_triggers(self) -> None:
        shot, period = self._shot, self._sync.period_s
        if shot is None or period is None:
            return
        settings = shot.settings
        missing = settings.averages - sum(n for _, _, n in shot.runs)
        first = self._sync.next_pulse(self._timeline.now())
        if first is None:
            return
        # pulses during a record do not trigger
        step = period * max(1, ceil(settings.span_s / period - 1e-9))
        self._shot = replace(shot, runs=(*shot.runs, (first, step, missing)))
        end = first + (missing - 1) * step + settings.span_s
        self._due = self._timeline.schedule(end, self._complete)

    def _sync_changed(self) -> None:
        """Keep the triggers that have come; expect the others at the new times."""
        if self._shot is None:
            return
        if self._due is not None:
            *earlier, (first, step, count) = self._shot.runs
            come = sum(1 for k in range(count) if first + k * step < self._timeline.now())
            if come == count:
                return  # only the end of the last record is missing
            self._due.cancel()
            self._due = None
            self._shot = replace(self._shot, runs=(*earlier, *([(first, step, come)] if come else [])))
        self._expect_triggers()

    def _complete(self) -> None:
        assert self._shot is not None
        shot, self._shot, self._due = self._shot, None, None
        self._memory = self._source.take(shot)
        self.completed()
