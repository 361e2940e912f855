"""Simulated oscilloscope whose scaling is asked for piece by piece, and whose samples come as a curve.

V = (D - YOFf) * YMUlt + YZEro and t = i * XINcr + XZEro, i = 0 at the first sample sent. Samples are signed.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import partial

from profiles.instrument import ScopeLimits
from sim_hardware.acquired import CHANNELS, CaptureSource, Settings
from sim_hardware.clock import Timeline
from sim_hardware.digitise import on_the_wire
from sim_hardware.scope import COUNT, HERTZ, OFFSET, SECONDS, VOLTS, Scope
from sim_hardware.scpi import Block
from sim_hardware.scpi_data import Boolean, Choice, Integer, Numbered, nr3
from sim_hardware.scpi_errors import ScpiError
from sim_hardware.scpi_syntax import Datum
from sim_hardware.scpi_tree import Command
from sim_hardware.sync import SyncLine

DIVISIONS = 8


class RunStop:
    """RUN, STOP, ON, OFF or a number."""

    def read(self, datum: Datum) -> bool:
        """True to run."""
        if datum.kind == "word" and datum.value in (b"RUN", b"STOP"):
            return datum.value == b"RUN"
        return Boolean().read(datum)


class CurveScope(Scope):
    """At power-on replies carry their headers."""

    def __init__(
        self,
        limits: ScopeLimits,
        timeline: Timeline,
        sync: SyncLine,
        source: CaptureSource,
        identity: str = "QUIET BASIN,SCOPE-C,0001,1.0",
    ) -> None:
        super().__init__(identity, limits, timeline, sync, source)
        self._headers = True
        self._transfer_defaults()
        self.add(self._setting_commands())
        self.add(self._transfer_commands())

    def _transfer_defaults(self) -> None:
        self._mode, self._average_count = "SAM", 16
        self._level_v = 1.0
        self._channel, self._encoding, self._width = 1, "RIB", 1
        self._first, self._last = 1, self._limits.max_points

    def reset(self) -> None:
        """Also the transfer settings; headers stay as they are."""
        super().reset()
        self._transfer_defaults()

    def _ask(self, pattern: str, value: Callable[..., bytes]) -> Command:
        """A query whose reply carries its header in long form when headers are on."""
        name, _, numbered = pattern.partition("<")
        rest = numbered.partition(">")[2]

        def reply(*suffix: int) -> bytes:
            text = value(*suffix)
            if not self._headers:
                return text
            header = f":{name}{suffix[0]}{rest}" if suffix else f":{pattern}"
            return b"%s %s" % (header.upper().encode(), text)

        return Command(f"{pattern}?", reply)

    def _setting_commands(self) -> list[Command]:
        ask, channel = self._ask, f"CH<{CHANNELS}>"
        settings = self._settings_now
        return [
            Command("HEADer", partial(setattr, self, "_headers"), (Boolean(),)),
            ask("HEADer", lambda: b"%d" % self._headers),
            Command(f"{channel}:SCAle", lambda n, v: self.set_full_scale(n, DIVISIONS * v), (VOLTS,)),
            ask(f"{channel}:SCAle", lambda n: nr3(settings().ranges[n].full_scale_v / DIVISIONS)),
            Command(f"{channel}:OFFSet", self.set_offset, (OFFSET,)),
            ask(f"{channel}:OFFSet", lambda n: nr3(settings().ranges[n].offset_v)),
            Command("HORizontal:SAMPLERate", self.set_rate, (HERTZ,)),
            ask("HORizontal:SAMPLERate", lambda: nr3(settings().sample_rate_hz)),
            Command("HORizontal:RECOrdlength", self.set_points, (COUNT,)),
            ask("HORizontal:RECOrdlength", lambda: b"%d" % settings().points),
            Command("HORizontal:DELay:TIMe", self.set_start, (SECONDS,)),
            ask("HORizontal:DELay:TIMe", lambda: nr3(settings().start_s)),
            Command("ACQuire:MODe", self._set_mode, (Choice("SAMple", "AVErage"),)),
            ask("ACQuire:MODe", lambda: b"SAMPLE" if self._mode == "SAM" else b"AVERAGE"),
            Command("ACQuire:NUMAVg", self._set_average_count, (COUNT,)),
            ask("ACQuire:NUMAVg", lambda: b"%d" % self._average_count),
            ask("ACQuire:NUMACq", lambda: b"%d" % self.memory().averages),
            Command("ACQuire:STOPAfter", lambda _: None, (Choice("SEQuence"),)),
            ask("ACQuire:STOPAfter", lambda: b"SEQUENCE"),
            Command("ACQuire:STATE", self._run_or_stop, (RunStop(),)),
            ask("ACQuire:STATE", lambda: b"%d" % self.busy()),
            Command("TRIGger:A:EDGE:SOUrce", lambda _: None, (Choice("EXTernal"),)),
            ask("TRIGger:A:EDGE:SOUrce", lambda: b"EXT"),
            Command("TRIGger:A:LEVel", partial(setattr, self, "_level_v"), (OFFSET,)),
            ask("TRIGger:A:LEVel", lambda: nr3(self._level_v)),
        ]

    def _transfer_commands(self) -> list[Command]:
        def keep(name: str) -> partial[None]:
            return partial(setattr, self, name)

        ask = self._ask
        return [
            Command("DATa:SOUrce", keep("_channel"), (Numbered("CH", CHANNELS),)),
            ask("DATa:SOUrce", lambda: b"CH%d" % self._channel),
            Command("DATa:ENCdg", keep("_encoding"), (Choice("RIBinary", "SRIbinary"),)),
            ask("DATa:ENCdg", lambda: b"RIBINARY" if self._encoding == "RIB" else b"SRIBINARY"),
            Command("DATa:WIDth", keep("_width"), (Integer(1, 2),)),
            ask("DATa:WIDth", lambda: b"%d" % self._width),
            Command("DATa:STARt", keep("_first"), (COUNT,)),
            ask("DATa:STARt", lambda: b"%d" % self._first),
            Command("DATa:STOP", keep("_last"), (COUNT,)),
            ask("DATa:STOP", lambda: b"%d" % self._last),
            ask("WFMOutpre:NR_Pt", lambda: b"%d" % len(range(*self._sent().indices(self.memory().points)))),
            ask("WFMOutpre:XINcr", lambda: nr3(self.memory().interval_s)),
            ask("WFMOutpre:XZEro", self._x_zero),
            ask("WFMOutpre:YMUlt", lambda: nr3(self._scale()[0])),
            ask("WFMOutpre:YOFf", lambda: nr3(self.memory().y_reference(self._bits()))),
            ask("WFMOutpre:YZEro", self._y_zero),
            Command("CURVe?", self._curve),
        ]

    def _settings_now(self) -> Settings:
        return self.settings

    def _set_mode(self, mode: str) -> None:
        self._mode = mode
        self.settings = replace(self.settings, averages=self._average_count if mode == "AVE" else 1)

    def _set_average_count(self, count: int) -> None:
        self._average_count = self.check_averages(count)
        self._set_mode(self._mode)

    def _run_or_stop(self, run: bool) -> None:
        self.abort()
        if run:
            self.arm()

    def _bits(self) -> int:
        return 8 * self._width

    def _sent(self) -> slice:
        if self._first > self._last:
            raise ScpiError(-221, "DATA:START is beyond DATA:STOP")
        return slice(self._first - 1, self._last)

    def _scale(self) -> tuple[float, float]:
        self.memory().codes(self._channel, self._bits())
        return self.memory().scale(self._channel, self._bits())

    def _x_zero(self) -> bytes:
        memory = self.memory()
        return nr3(memory.start_s + (self._first - 1) * memory.interval_s)

    def _y_zero(self) -> bytes:
        per_count, at_zero = self._scale()
        return nr3(at_zero + self.memory().y_reference(self._bits()) * per_count)

    def _curve(self) -> Block:
        codes = self.memory().codes(self._channel, self._bits())[self._sent()]
        wire = on_the_wire(codes, msb_first=self._encoding == "RIB", unsigned=False)
        return Block.of(wire, b":CURVE " if self._headers else b"")
