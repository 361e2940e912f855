"""Simulated oscilloscope whose scaling comes as one list: the preamble.

V = (D - yreference) * yincrement + yorigin and t = (i - xreference) * xincrement + xorigin.
"""

from __future__ import annotations

from dataclasses import replace
from functools import partial

from profiles.instrument import ScopeLimits
from sim_hardware.acquired import CHANNELS, CaptureSource
from sim_hardware.clock import Timeline
from sim_hardware.digitise import on_the_wire
from sim_hardware.scope import COUNT, HERTZ, OFFSET, SECONDS, VOLTS, Scope
from sim_hardware.scpi import Block
from sim_hardware.scpi_data import Boolean, Choice, Numbered, nr3
from sim_hardware.scpi_tree import Command
from sim_hardware.sync import SyncLine


class PreambleScope(Scope):
    """BYTE samples are unsigned, WORD samples are what UNSigned says."""

    def __init__(
        self,
        limits: ScopeLimits,
        timeline: Timeline,
        sync: SyncLine,
        source: CaptureSource,
        identity: str = "QUIET BASIN,SCOPE-P,0001,1.0",
    ) -> None:
        super().__init__(identity, limits, timeline, sync, source)
        self._transfer_defaults()
        self.add(self._setting_commands())
        self.add(self._transfer_commands())

    def _transfer_defaults(self) -> None:
        self._averaging, self._average_count = False, 16
        self._level_v = 1.0
        self._channel, self._format, self._order, self._unsigned = 1, "BYTE", "MSBF", False

    def reset(self) -> None:
        """Also the transfer settings."""
        super().reset()
        self._transfer_defaults()

    def _setting_commands(self) -> list[Command]:
        channel = f":CHANnel<{CHANNELS}>"
        return [
            Command(f"{channel}:RANGe", self.set_full_scale, (VOLTS,)),
            Command(f"{channel}:RANGe?", lambda n: nr3(self.settings.ranges[n].full_scale_v)),
            Command(f"{channel}:OFFSet", self.set_offset, (OFFSET,)),
            Command(f"{channel}:OFFSet?", lambda n: nr3(self.settings.ranges[n].offset_v)),
            Command(":ACQuire:SRATe", self.set_rate, (HERTZ,)),
            Command(":ACQuire:SRATe?", lambda: nr3(self.settings.sample_rate_hz)),
            Command(":ACQuire:POINts", self.set_points, (COUNT,)),
            Command(":ACQuire:POINts?", lambda: b"%d" % self.settings.points),
            Command(":TIMebase:DELay", self.set_start, (SECONDS,)),
            Command(":TIMebase:DELay?", lambda: nr3(self.settings.start_s)),
            Command(":SENSe:AVERage[:STATe]", self._set_averaging, (Boolean(),)),
            Command(":SENSe:AVERage[:STATe]?", lambda: b"%d" % self._averaging),
            Command(":SENSe:AVERage:COUNt", self._set_average_count, (COUNT,)),
            Command(":SENSe:AVERage:COUNt?", lambda: b"%d" % self._average_count),
            Command(":TRIGger:SOURce", lambda _: None, (Choice("EXTernal"),)),
            Command(":TRIGger:SOURce?", lambda: b"EXT"),
            Command(":TRIGger:LEVel", partial(setattr, self, "_level_v"), (OFFSET,)),
            Command(":TRIGger:LEVel?", lambda: nr3(self._level_v)),
            Command(":INITiate[:IMMediate]", self.arm),
            Command(":ABORt", self.abort),
        ]

    def _transfer_commands(self) -> list[Command]:
        def keep(name: str) -> partial[None]:
            return partial(setattr, self, name)

        return [
            Command(":WAVeform:SOURce", keep("_channel"), (Numbered("CHANnel", CHANNELS),)),
            Command(":WAVeform:SOURce?", lambda: b"CHAN%d" % self._channel),
            Command(":WAVeform:FORMat", keep("_format"), (Choice("BYTE", "WORD"),)),
            Command(":WAVeform:FORMat?", lambda: self._format.encode()),
            Command(":WAVeform:BYTeorder", keep("_order"), (Choice("MSBFirst", "LSBFirst"),)),
            Command(":WAVeform:BYTeorder?", lambda: self._order.encode()),
            Command(":WAVeform:UNSigned", keep("_unsigned"), (Boolean(),)),
            Command(":WAVeform:UNSigned?", lambda: b"%d" % self._unsigned),
            Command(":WAVeform:PREamble?", self._preamble),
            Command(":WAVeform:POINts?", lambda: b"%d" % self.memory().points),
            Command(":WAVeform:COUNt?", lambda: b"%d" % self.memory().averages),
            Command(":WAVeform:DATA?", self._data),
        ]

    def _set_averaging(self, on: bool) -> None:
        self._averaging = on
        self.settings = replace(self.settings, averages=self._average_count if on else 1)

    def _set_average_count(self, count: int) -> None:
        self._average_count = self.check_averages(count)
        self._set_averaging(self._averaging)

    def _counted_from_below(self) -> bool:
        return self._format == "BYTE" or self._unsigned

    def _preamble(self) -> bytes:
        memory, bits = self.memory(), 8 if self._format == "BYTE" else 16
        memory.codes(self._channel, bits)
        per_count, at_zero = memory.scale(self._channel, bits)
        reference = memory.y_reference(bits)
        y_reference = reference + (2 ** (bits - 1) if self._counted_from_below() else 0)
        fields = (
            b"%d" % (bits == 16),
            b"%d" % (2 if memory.averages > 1 else 0),
            b"%d" % memory.points,
            b"%d" % memory.averages,
            nr3(memory.interval_s),
            nr3(memory.start_s + memory.x_reference * memory.interval_s),
            b"%d" % memory.x_reference,
            nr3(per_count),
            nr3(at_zero + reference * per_count),
            b"%d" % y_reference,
        )
        return b",".join(fields)

    def _data(self) -> Block:
        codes = self.memory().codes(self._channel, 8 if self._format == "BYTE" else 16)
        wire = on_the_wire(codes, msb_first=self._order == "MSBF", unsigned=self._counted_from_below())
        return Block.of(wire)
