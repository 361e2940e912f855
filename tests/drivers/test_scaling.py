"""A wrong scale is the worst fault: every family, width, byte order and sign against waveforms known in volts."""

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.errors import InstrumentError, InstrumentTimeout, ProtocolError, WrongIdentity
from drivers.roles import CaptureSettings
from drivers.scope import CurveScope, PreambleScope, ScpiScope, decode
from drivers.tcp_link import TcpLink
from profiles.bench import Attached
from profiles.instrument import Instrument, Transfer
from profiles.load import load_instrument
from tests.drivers.scripted import Script, tcp_server

CODES = np.array([0, 1, 2, 100, 127, 128, 200, 254, 255])


@given(
    codes=st.lists(st.integers(0, 65535), min_size=1, max_size=50),
    order=st.sampled_from(["msb_first", "lsb_first"]),
    signed=st.booleans(),
)
def test_sixteen_bit_codes_arrive_with_their_value(codes: list[int], order: Any, signed: bool) -> None:
    values = [c - 32768 for c in codes]
    on_wire = [v if signed else v + 32768 for v in values]
    big = order == "msb_first"
    block = bytearray(b"".join(v.to_bytes(2, "big" if big else "little", signed=signed) for v in on_wire))
    counts = decode(block, Transfer(bits=16, byte_order=order, signed=signed))
    assert counts.dtype == np.int16
    assert counts.dtype.isnative
    assert counts.tolist() == values


@given(codes=st.lists(st.integers(0, 255), min_size=1, max_size=50), signed=st.booleans())
def test_eight_bit_codes_arrive_with_their_value(codes: list[int], signed: bool) -> None:
    values = [c - 128 for c in codes]
    block = bytearray(b"".join((v if signed else v + 128).to_bytes(1, "big", signed=signed) for v in values))
    counts = decode(block, Transfer(bits=8, byte_order="msb_first", signed=signed))
    assert counts.dtype == np.int8
    assert counts.tolist() == values


def test_half_a_sample_is_refused() -> None:
    with pytest.raises(ProtocolError, match="no whole number of 16-bit samples"):
        decode(bytearray(3), Transfer(bits=16, byte_order="msb_first"))


def profile(name: str, bits: int, order: str, signed: bool) -> Instrument:
    tables = load_instrument(name).model_dump()
    tables["transfer"] = {"bits": bits, "byte_order": order, "signed": signed}
    tables["identity"] = "^A SCOPE"
    tables["timeout_s"] = 1.0
    return Instrument.model_validate(tables)


def scope_of(kind: type[ScpiScope], what: Instrument, port: int) -> ScpiScope:
    address = f"tcp://127.0.0.1:{port}"
    return kind(TcpLink(address, 1.0), what, Attached(profile=what.name, address=address))


def block(values: list[int], bits: int, order: str, signed: bool) -> bytes:
    """IEEE 488.2 definite-length block of samples."""
    size = bits // 8
    data = b"".join(v.to_bytes(size, "big" if order == "msb_first" else "little", signed=signed) for v in values)
    digits = str(len(data))
    return f"#{len(digits)}{digits}".encode() + data + b"\n"


COMMON: dict[bytes, Any] = {b"*IDN?": b"A SCOPE,1,2,3\n", b"SYSTem:ERRor?": b'0,"No error"\n'}
SETTINGS = CaptureSettings(100e6, 64, 1e-6, 1, 0.4)
WIDTHS = [(8, "msb_first", True), (8, "msb_first", False)] + [
    (16, order, signed) for order in ("msb_first", "lsb_first") for signed in (True, False)
]


@pytest.mark.parametrize(("bits", "order", "signed"), WIDTHS)
@pytest.mark.parametrize("reference", [0, 7, 128, -3])
def test_preamble_family_in_volts(bits: int, order: str, signed: bool, reference: int) -> None:
    """V = (D - yreference) yincrement + yorigin, t = (i - xreference) xincrement + xorigin."""
    codes = [(i * 37) % 200 - (100 if signed else 0) for i in range(64)]
    increment, origin = 2.5e-3, -0.31
    expected = [(d - reference) * increment + origin for d in codes]
    preamble = f"{1 if bits == 16 else 0},0,64,1,1E-8,1.5E-6,5,{increment!r},{origin!r},{reference}\n".encode()
    script = Script(
        COMMON
        | {
            b":WAVeform:PREamble?": preamble,
            b":WAVeform:DATA?": block(codes, bits, order, signed),
            b":INITiate;*OPC?": b"1\n",
        }
    )
    with tcp_server(script) as port:
        scope = scope_of(PreambleScope, profile("scope-preamble-16", bits, order, signed), port)
        scope.open()
        scope.configure(SETTINGS)
        scope.arm()
        scope.wait(1.0)
        trace = scope.read()
        scope.close()
    assert trace.volts() == pytest.approx(expected)
    assert trace.scaling.interval_s == pytest.approx(1e-8)
    assert trace.scaling.start_s == pytest.approx(1.5e-6 - 5e-8)
    half = 1 << (bits - 1)
    assert (trace.lowest, trace.highest) == (-half, half - 1)


@pytest.mark.parametrize(("bits", "order"), [(8, "msb_first"), (16, "msb_first"), (16, "lsb_first")])
@pytest.mark.parametrize("offset", [0.0, 12.5, -40.0])
def test_curve_family_in_volts(bits: int, order: str, offset: float) -> None:
    """V = (D - YOFf) YMUlt + YZEro, t = i XINcr + XZEro."""
    codes = [(i * 29) % 180 - 90 for i in range(64)]
    multiplier, zero = 1.25e-3, 0.07
    script = Script(
        COMMON
        | {
            b"WFMOutpre:XINcr?": b"4.0E-9\n",
            b"WFMOutpre:XZEro?": b"-2.0E-6\n",
            b"WFMOutpre:YMUlt?": f"{multiplier!r}\n".encode(),
            b"WFMOutpre:YOFf?": f"{offset!r}\n".encode(),
            b"WFMOutpre:YZEro?": f"{zero!r}\n".encode(),
            b"CURVe?": block(codes, bits, order, True),
        }
    )
    with tcp_server(script) as port:
        scope = scope_of(CurveScope, profile("scope-curve-16", bits, order, True), port)
        scope.open()
        scope.configure(SETTINGS)
        trace = scope.read()
        scope.close()
    assert trace.volts() == pytest.approx([(d - offset) * multiplier + zero for d in codes])
    assert trace.scaling.start_s == pytest.approx(-2e-6)
    assert trace.scaling.interval_s == pytest.approx(4e-9)


def preamble_scope(script: Script, port: int) -> ScpiScope:
    return scope_of(PreambleScope, profile("scope-preamble-16", 16, "msb_first", True), port)


def test_the_scaling_is_asked_again_after_every_change_of_settings_and_not_for_every_waveform() -> None:
    script = Script(
        COMMON
        | {
            b":WAVeform:PREamble?": b"1,0,64,1,1E-8,0,0,1E-3,0,0\n",
            b":WAVeform:DATA?": block([0] * 64, 16, "msb_first", True),
        }
    )
    with tcp_server(script) as port:
        scope = preamble_scope(script, port)
        scope.open()
        for _ in range(2):
            scope.configure(SETTINGS)
            scope.read()
            scope.read()
        scope.close()
    assert script.heard.count(b":WAVeform:PREamble?") == 2


def test_another_length_than_was_set_up_is_refused() -> None:
    script = Script(COMMON | {b":WAVeform:DATA?": block([0] * 63, 16, "msb_first", True)})
    with tcp_server(script) as port:
        scope = preamble_scope(script, port)
        scope.open()
        scope.configure(SETTINGS)
        with pytest.raises(ProtocolError, match="63 samples, 64 were set up"):
            scope.read()
        scope.close()


def test_without_a_trigger_it_is_said_what_is_missing_and_the_link_is_in_step_again() -> None:
    script = Script(COMMON)  # *OPC? is never answered
    with tcp_server(script) as port:
        scope = preamble_scope(script, port)
        scope.open()
        scope.configure(SETTINGS)
        scope.arm()
        with pytest.raises(InstrumentTimeout, match=r"waited 0\.2 s for its trigger.*output on, and its sync line"):
            scope.wait(0.2)
        assert scope.link.query("*IDN?") == "A SCOPE,1,2,3"
        assert script.heard[-2] == b":ABORt"
        scope.close()


def test_another_instrument_is_refused() -> None:
    with tcp_server(Script({b"*IDN?": b"A THERMOMETER\n"})) as port:
        scope = preamble_scope(Script(), port)
        with pytest.raises(WrongIdentity, match=r"says 'A THERMOMETER'.*check address and profile"):
            scope.open()


def test_an_error_of_the_instrument_is_told_with_number_and_text() -> None:
    # SCPI-1999 volume 2, 21.8 (from memory): the queue is read until it is empty
    queue = [b'-222,"Data out of range"\n', b'-113,"Undefined header"\n', b'0,"No error"\n']

    def errors(line: bytes) -> bytes:
        return queue.pop(0) if line == b"SYSTem:ERRor?" else b""

    with tcp_server(Script({b"*IDN?": b"A SCOPE\n"}, otherwise=errors)) as port:
        scope = preamble_scope(Script(), port)
        with pytest.raises(InstrumentError, match="reports -222, Data out of range and 1 more") as failure:
            scope.open()
    assert failure.value.code == -222


def test_the_smallest_range_that_holds_is_set_and_the_nearest_rate() -> None:
    script = Script(COMMON)
    with tcp_server(script) as port:
        scope = preamble_scope(script, port)
        scope.open()
        actual = scope.configure(CaptureSettings(240e6, 64, 0.0, 1, 0.3))
        scope.close()
    assert (actual.full_scale_v, actual.sample_rate_hz) == (0.4, 250e6)
    assert b":CHANnel1:RANGe 0.4" in script.heard
    assert b":ACQuire:SRATe 250000000" in script.heard
