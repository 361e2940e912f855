"""The oscilloscope: settings, arming, waiting, and counts that are never silently turned into floats."""

from __future__ import annotations

from abc import abstractmethod
from dataclasses import replace

import numpy as np

from drivers.errors import InstrumentTimeout, LinkTimeout, ProtocolError
from drivers.link import Link, StopAsked
from drivers.roles import CaptureSettings
from drivers.scpi import ScpiInstrument
from drivers.trace import Counts, Scaling, Trace
from profiles.bench import Attached
from profiles.instrument import Instrument, ScopeLimits, Transfer

TRIGGER_LEVEL_V = 1.0
SLACK = 1 + 1e-9


class ScpiScope(ScpiInstrument):
    """What both waveform families share. A family says how its scaling is asked for."""

    role = "oscilloscope"

    def __init__(self, link: Link, profile: Instrument, attached: Attached) -> None:
        super().__init__(link, profile)
        if profile.scope is None or profile.transfer is None:
            raise ValueError("an oscilloscope profile has [scope] and [transfer]")
        self._limits: ScopeLimits = profile.scope
        self._transfer: Transfer = profile.transfer
        self._channel = attached.channel
        self._settings: CaptureSettings | None = None
        self._scaling: Scaling | None = None

    @abstractmethod
    def _ask_scaling(self) -> Scaling:
        """Ask for the scaling of the waveform that was captured last."""

    def make_safe(self) -> None:
        """Stop whatever was going on."""
        self.send("stop")

    def full_scales_v(self) -> tuple[float, ...]:
        """Ranges that can be set, ascending, volts."""
        return tuple(sorted(self._limits.full_scales_v))

    def configure(self, settings: CaptureSettings) -> CaptureSettings:
        """Set up captures with the smallest range that holds, and the nearest rate; returns what was set.

        Raises:
            InstrumentError: the instrument refused a setting.
        """
        scales = self.full_scales_v()
        scale = next((s for s in scales if s * SLACK >= settings.full_scale_v), scales[-1])
        rate = min(self._limits.sample_rates_mhz, key=lambda r: abs(r * 1e6 - settings.sample_rate_hz)) * 1e6
        actual = replace(
            settings,
            full_scale_v=scale,
            sample_rate_hz=rate,
            points=min(settings.points, self._limits.max_points),
            averages=min(settings.averages, self._limits.max_averages),
        )
        channel, transfer = self._channel, self._transfer
        self.send("stop")
        self.send("vertical_full_scale", channel=channel, volts=scale, per_division=scale / self._limits.divisions)
        self.send("vertical_offset", channel=channel, volts=actual.offset_v)
        self.send("sample_rate", hertz=actual.sample_rate_hz)
        self.send("record_points", points=actual.points)
        self.send("record_start", seconds=actual.start_s)
        self.send("averaging", on=actual.averages > 1, count=actual.averages)
        self.send("trigger", volts=TRIGGER_LEVEL_V)
        fields = {"channel": channel, "bits": transfer.bits, "byte_order": transfer.byte_order}
        if self.profile.family == "curve":
            fields["points"] = actual.points
        self.send("transfer", **fields)
        self.check_errors("while captures were set up")
        self._settings, self._scaling = actual, None
        return actual

    def recover(self) -> None:
        """As for every instrument; then the captures are set up as they were."""
        super().recover()
        if self._settings is not None:
            self.configure(self._settings)

    def arm(self) -> None:
        """Start one capture; its completion answers a question sent along."""
        self.link.write(f"{self.profile.commands['arm']};*OPC?")

    def wait(self, timeout_s: float, cancelled: StopAsked | None = None) -> None:
        """Until the capture is complete.

        Raises:
            InstrumentTimeout: it does not complete, so no trigger comes.
            Cancelled: the operator asked to stop.
        """
        try:
            self.link.read_line(timeout_s, cancelled)
        except LinkTimeout as error:
            self.link.reconnect()
            self.link.write("*CLS")
            self.send("stop")
            raise InstrumentTimeout(
                f"the oscilloscope at {self.link.address} waited {timeout_s:.3g} s for its trigger: is the "
                "generator's output on, and its sync line connected?"
            ) from error

    def ask_samples(self) -> None:
        """Send the question for the samples only, so that another instrument can be asked meanwhile."""
        self.send("samples")

    def read(self) -> Trace:
        """Fetch the capture: counts shape (points,), int8 or int16."""
        self.ask_samples()
        return self.read_samples()

    def read_samples(self) -> Trace:
        """The answer to `ask_samples`.

        Raises:
            ProtocolError: length or scaling are not what was set up.
        """
        if self._settings is None:
            raise ProtocolError("the oscilloscope was not set up before it was read")
        counts = decode(self.link.read_block(), self._transfer)
        if counts.size != self._settings.points:
            raise ProtocolError(
                f"the oscilloscope sent {counts.size} samples, {self._settings.points} were set up: "
                "has somebody changed its settings at the panel?"
            )
        if self._scaling is None:
            self._scaling = self._ask_scaling()
        averages = int(self.ask_number("averages_taken")) if self._settings.averages > 1 else 1
        half = 1 << (self._transfer.bits - 1)
        return Trace(counts, self._scaling, -half, half - 1, averages, self._settings.full_scale_v)

    def _zero_code(self) -> int:
        """What was taken from the codes on the wire to make them signed."""
        return 0 if self._transfer.signed else 1 << (self._transfer.bits - 1)


class PreambleScope(ScpiScope):
    """One preamble: format, type, points, count, xincrement, xorigin, xreference, yincrement, yorigin, yreference.

    V = (D - yreference) yincrement + yorigin, t = (i - xreference) xincrement + xorigin.
    """

    def _ask_scaling(self) -> Scaling:
        reply = self.ask("preamble")
        try:
            numbers = [float(part) for part in reply.split(",")]
            _, _, _, _, x_increment, x_origin, x_reference, y_increment, y_origin, y_reference = numbers
        except ValueError as error:
            raise ProtocolError(f"the oscilloscope's preamble is {reply!r}; ten numbers were expected") from error
        return Scaling(
            volts_per_count=y_increment,
            volts_at_zero=y_origin + (self._zero_code() - y_reference) * y_increment,
            interval_s=x_increment,
            start_s=x_origin - x_reference * x_increment,
        )


class CurveScope(ScpiScope):
    """Separate questions for increments, zero, offset and multiplier.

    V = (D - offset) multiplier + zero, t = i x_increment + x_zero. The multiplier depends on the width.
    """

    def _ask_scaling(self) -> Scaling:
        multiplier = self.ask_number("y_multiplier")
        offset = self.ask_number("y_offset")
        return Scaling(
            volts_per_count=multiplier,
            volts_at_zero=self.ask_number("y_zero") + (self._zero_code() - offset) * multiplier,
            interval_s=self.ask_number("x_increment"),
            start_s=self.ask_number("x_zero"),
        )


def decode(block: bytearray, transfer: Transfer) -> Counts:
    """Bytes off the wire as signed counts in native order, shape (n,); the block's memory is used, not copied.

    Raises:
        ProtocolError: an odd number of bytes where there are two for each sample.
    """
    if transfer.bits == 8:
        raw8 = np.frombuffer(block, np.uint8)
        if not transfer.signed:
            np.bitwise_xor(raw8, np.uint8(0x80), out=raw8)
        return raw8.view(np.int8)
    if len(block) % 2:
        raise ProtocolError(f"the oscilloscope sent {len(block)} bytes, which is no whole number of 16-bit samples")
    wire = np.dtype(np.uint16).newbyteorder(">" if transfer.byte_order == "msb_first" else "<")
    raw16 = np.frombuffer(block, wire)
    if not wire.isnative:
        raw16 = raw16.byteswap(inplace=True).view(np.uint16)
    if not transfer.signed:
        np.bitwise_xor(raw16, np.uint16(0x8000), out=raw16)
    return raw16.view(np.int16)
