"""Both oscilloscope families: transcripts, and samples back in volts against waveforms that are known."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.typing import NDArray

from profiles.instrument import ScopeLimits
from sim_hardware.acquired import LiveSource
from sim_hardware.clock import Timeline
from sim_hardware.digitise import quantise
from sim_hardware.generator import BurstGenerator
from sim_hardware.motion import AxisLimits, Motion
from sim_hardware.scope import Scope
from sim_hardware.scope_curve import CurveScope
from sim_hardware.scope_preamble import PreambleScope
from sim_hardware.scpi import ScpiSession
from sim_hardware.sync import SyncLine
from sim_hardware.truth import MechanicsTruth
from tests.sim_hardware.talking import HandClock, KnownTank, say

SCOPE = ScopeLimits(
    full_scales_v=(0.01, 0.1, 1.0, 8.0), sample_rates_mhz=(1.0, 50.0, 100.0), max_points=20_000, max_averages=1024
)
Volts = NDArray[np.floating]


def ramp(t: Volts) -> NDArray[np.float64]:
    """Not symmetrical in any way: a wrong sign, order of bytes or offset cannot hide."""
    seconds = t.astype(np.float64)
    return 0.02 + 0.3 * np.sin(2 * np.pi * 1.3e5 * seconds) + 1.1e4 * seconds


@dataclass
class Set:
    scope: ScpiSession
    generator: ScpiSession
    tank: KnownTank
    motion: Motion
    clock: HandClock
    instrument: Scope
    timeline: Timeline


def a_set(family: type[PreambleScope] | type[CurveScope], at_once: bool = True) -> Set:
    clock = HandClock()
    timeline = Timeline(None if at_once else 1.0, clock)
    tank, sync = KnownTank(ramp), SyncLine()
    motion = Motion({"x": AxisLimits(-0.1, 0.1, 0.02, 0.1)}, MechanicsTruth(), timeline)
    generator = BurstGenerator(timeline, sync)
    scope = family(SCOPE, timeline, sync, LiveSource(tank, motion, generator.drive, 1))
    made = Set(ScpiSession(scope), ScpiSession(generator), tank, motion, clock, scope, timeline)
    say(made.generator, b"FREQ 1E6;BURS:NCYC 5;INT:PER 1E-3;:BURS:STAT ON;:OUTP ON\n")
    return made


def poll(made: Set, at_s: float) -> bytes:
    made.clock.seconds = at_s
    made.timeline.run_due()
    return b"".join(bytes(p) for p in made.scope.poll())


def errors(session: ScpiSession) -> bytes:
    return say(session, b"SYST:ERR?\n")


NO_ERROR = b'0,"No error"\n'


def block(reply: bytes) -> bytes:
    """Content of a definite-length block (IEEE 488.2, 8.7.9) with its newline."""
    assert reply[:1] == b"#"
    digits = int(reply[1:2])
    length = int(reply[2 : 2 + digits])
    assert reply[2 + digits + length :] == b"\n"
    return reply[2 + digits : 2 + digits + length]


@pytest.mark.parametrize("offset", [0.0, 0.15])
@pytest.mark.parametrize(
    ("words", "dtype"),
    [
        (b"BYTE", "u1"),
        (b"WORD;BYT MSBF;UNS 0", ">i2"),
        (b"WORD;BYT LSBF;UNS 0", "<i2"),
        (b"WORD;BYT MSBF;UNS 1", ">u2"),
        (b"WORD;BYTEORDER LSBFIRST;UNSIGNED ON", "<u2"),
    ],
)
def test_preamble_family_gives_back_the_volts(words: bytes, dtype: str, offset: float) -> None:
    made = a_set(PreambleScope)
    say(made.scope, b":CHAN1:RANG 1;OFFS %g;:ACQ:SRAT 50MHZ;POIN 2000;:TIM:DEL 3E-6\n" % offset)
    assert say(made.scope, b":WAV:SOUR CHAN1;FORM %s;:INIT;*OPC?\n" % words) == b"1\n"
    fields = say(made.scope, b":WAV:PRE?\n").decode().split(",")
    form, kind, points, count = (int(v) for v in fields[:4])
    x_increment, x_origin, x_reference, y_increment, y_origin, y_reference = (float(v) for v in fields[4:])
    assert (form, kind, points, count) == (int(dtype[-1]) - 1, 0, 2000, 1)
    d = np.frombuffer(block(say(made.scope, b":WAV:DATA?\n")), dtype).astype(float)
    t = (np.arange(2000) - x_reference) * x_increment + x_origin
    np.testing.assert_allclose(t, 3e-6 + np.arange(2000) / 50e6, atol=1e-13)
    volts = (d - y_reference) * y_increment + y_origin
    expected = np.clip(ramp(t), offset - 0.5, offset + 0.5 - y_increment)
    np.testing.assert_allclose(volts, expected, atol=0.5001 * y_increment + 1e-7)
    assert errors(made.scope) == NO_ERROR


@pytest.mark.parametrize("offset", [0.0, 0.15])
@pytest.mark.parametrize(
    ("words", "dtype"),
    [(b"RIB;WID 1", "i1"), (b"SRI;WID 1", "i1"), (b"RIBINARY;WIDTH 2", ">i2"), (b"SRIBINARY;WIDTH 2", "<i2")],
)
def test_curve_family_gives_back_the_volts(words: bytes, dtype: str, offset: float) -> None:
    made = a_set(CurveScope)
    # 0.125 V per division and 8 divisions are 1 V in all
    say(made.scope, b"HEAD 0;:CH1:SCA 0.125;OFFS %g;:HOR:SAMPLER 50E6;RECO 2000;DEL:TIM 3E-6\n" % offset)
    say(made.scope, b"DAT:SOU CH1;ENC %s;STAR 101;STOP 1500\n" % words)
    assert say(made.scope, b"ACQ:STOPA SEQ;STATE RUN;*OPC?\n") == b"1\n"
    names = ("XIN", "XZE", "YMU", "YOF", "YZE")
    values = [float(say(made.scope, f"WFMO:{n}?\n".encode())) for n in names]
    x_increment, x_zero, y_multiplier, y_offset, y_zero = values
    assert y_offset != 0
    d = np.frombuffer(block(say(made.scope, b"CURV?\n")), dtype).astype(float)
    assert d.size == 1400
    t = np.arange(1400) * x_increment + x_zero
    np.testing.assert_allclose(t, 3e-6 + np.arange(100, 1500) / 50e6, atol=1e-13)
    volts = (d - y_offset) * y_multiplier + y_zero
    expected = np.clip(ramp(t), offset - 0.5, offset + 0.5 - y_multiplier)
    np.testing.assert_allclose(volts, expected, atol=0.5001 * y_multiplier + 1e-7)
    assert errors(made.scope) == NO_ERROR


@given(st.floats(-20, 20), st.floats(0.01, 10), st.floats(-5, 5), st.sampled_from([8, 16]))
def test_quantising_is_within_half_a_code_or_at_the_rail(
    volts: float, full_scale: float, offset: float, bits: int
) -> None:
    lsb = full_scale / 2**bits
    code = int(quantise(np.array([volts], np.float32), full_scale, offset, bits)[0])
    low, high = -(2 ** (bits - 1)), 2 ** (bits - 1) - 1
    back = code * lsb + offset
    rounding = 2e-6 * (abs(volts) + abs(offset))  # of single precision
    if back - volts > 0.5 * lsb + rounding:
        assert code == low
    elif volts - back > 0.5 * lsb + rounding:
        assert code == high


def test_beyond_the_range_codes_stay_at_the_rails() -> None:
    volts = np.array([-9.0, 9.0], np.float32)
    assert quantise(volts, 1.0, 0.0, 8).tolist() == [-128, 127]
    assert quantise(volts, 1.0, 0.0, 16).tolist() == [-32768, 32767]
    assert quantise(volts, 1.0, 0.0, 8).dtype == np.int8


PREAMBLE_TRANSCRIPT = [
    (b"*IDN?\n", b"QUIET BASIN,SCOPE-P,0001,1.0\n"),
    (b":CHANNEL2:RANGE 0.5;RANGE?\n", b"1.0\n"),
    (b":CHANNEL2:OFFSET -20 MV;OFFSET?\n", b"-0.02\n"),
    (b":ACQUIRE:SRATE 60 MHZ;SRATE?;POINTS 512;POINTS?\n", b"50000000.0;512\n"),
    (b":TIMEBASE:DELAY 12.5 US;DELAY?\n", b"1.25E-05\n"),
    (b":SENSE:AVERAGE:STATE 1;COUNT 64\n:SENS:AVER:STAT?;COUN?\n", b"1;64\n"),
    (b":TRIGGER:SOURCE EXTERNAL;LEVEL 0.5;SOURCE?;LEVEL?\n", b"EXT;0.5\n"),
    (b":WAV:SOUR CHAN2;SOUR?;FORM WORD;FORM?;BYT LSBF;BYT?;UNS ON;UNS?\n", b"CHAN2;WORD;LSBF;1\n"),
    (b":CHAN1:RANG 9\nSYST:ERR?\n", b'-222,"Data out of range"\n'),
    (b":ACQ:POIN 20001\nSYST:ERR?\n", b'-222,"Data out of range"\n'),
    (b":SENS:AVER:COUN 2000\nSYST:ERR?\n", b'-222,"Data out of range"\n'),
    (b":TRIG:SOUR LINE\nSYST:ERR?\n", b'-224,"Illegal parameter value"\n'),
    (b":WAV:PRE?\nSYST:ERR?\n", b'-230,"Data corrupt or stale"\n'),
    (b"*RST\n:ACQ:POIN?;:WAV:FORM?;:SENS:AVER?\n", b"1000;BYTE;0\n"),
]

CURVE_TRANSCRIPT = [
    (b"*IDN?\n", b"QUIET BASIN,SCOPE-C,0001,1.0\n"),
    (b"CH2:SCALE 0.05\nCH2:SCALE?\n", b":CH2:SCALE 0.125\n"),
    (b"HOR:RECO?;SAMPLERATE?\n", b":HORIZONTAL:RECORDLENGTH 1000;:HORIZONTAL:SAMPLERATE 100000000.0\n"),
    (b"DATA:ENCDG SRI;ENCDG?\n", b":DATA:ENCDG SRIBINARY\n"),
    (b"HEADER?\n", b":HEADER 1\n"),
    (b"HEADER OFF;HEADER?\n", b"0\n"),
    (b"CH2:SCALE?;OFFSET 0.1;OFFSET?\n", b"0.125;0.1\n"),
    (b"HORIZONTAL:DELAY:TIME 2E-6;TIME?\n", b"2E-06\n"),
    (b"ACQUIRE:MODE AVERAGE;NUMAVG 8;MODE?;NUMAVG?\n", b"AVERAGE;8\n"),
    (b"TRIGGER:A:EDGE:SOURCE EXT;:TRIG:A:LEV 0.5;LEV?\n", b"0.5\n"),
    (b"ACQUIRE:STOPAFTER SEQUENCE;STATE?\n", b"0\n"),
    (b"DATA:SOURCE CH2;SOURCE?;WIDTH 2;WIDTH?;START 5;START?;STOP 9;STOP?\n", b"CH2;2;5;9\n"),
    (b"DATA:WIDTH 3\nSYST:ERR?\n", b'-222,"Data out of range"\n'),
    (b"CURVE?\nSYST:ERR?\n", b'-230,"Data corrupt or stale"\n'),
]


@pytest.mark.parametrize(
    ("family", "transcript"),
    [(PreambleScope, PREAMBLE_TRANSCRIPT), (CurveScope, CURVE_TRANSCRIPT)],
    ids=["preamble", "curve"],
)
def test_transcript(family: type[PreambleScope] | type[CurveScope], transcript: list[tuple[bytes, bytes]]) -> None:
    made = a_set(family)
    for sent, back in transcript:
        assert say(made.scope, sent) == back, sent
    assert errors(made.scope) == NO_ERROR


def test_headers_stand_before_a_curve_until_they_are_switched_off() -> None:
    made = a_set(CurveScope)
    assert say(made.scope, b"HOR:RECO 20;:ACQ:STATE RUN;*OPC?\n") == b"1\n"
    reply = say(made.scope, b"CURV?\n")
    assert reply.startswith(b":CURVE #220")
    assert say(made.scope, b"WFMO:NR_P?;YMU?\n").startswith(b":WFMOUTPRE:NR_PT 20;:WFMOUTPRE:YMULT ")


def test_the_multiplier_changes_with_the_width() -> None:
    made = a_set(CurveScope)
    say(made.scope, b"HEAD 0;:ACQ:STATE RUN\n")
    one, two = (float(say(made.scope, b"DAT:WID %d;:WFMO:YMU?\n" % width)) for width in (1, 2))
    assert one / two == pytest.approx(256)


def test_without_the_generator_no_trigger_comes_and_abort_frees_the_oscilloscope() -> None:
    made = a_set(PreambleScope)
    say(made.generator, b"OUTP OFF\n")
    assert say(made.scope, b":INIT;*OPC?\n") == b""
    assert poll(made, 1000.0) == b""
    assert made.scope.waiting
    other = ScpiSession(made.instrument)
    say(other, b":ABOR\n")
    assert poll(made, 1000.0) == b"1\n"
    assert say(other, b":WAV:PRE?\nSYST:ERR?\n").startswith(b"-230")


def test_arming_twice_is_ignored_with_an_error() -> None:
    # SCPI-1999 volume 2, 24: INITiate while not idle is -213
    made = a_set(PreambleScope)
    say(made.generator, b"OUTP OFF\n")
    assert say(made.scope, b":INIT\n:INIT\nSYST:ERR?\n") == b'-213,"Init ignored"\n'


def test_the_capture_is_complete_when_the_last_average_has_passed_and_not_before() -> None:
    made = a_set(PreambleScope, at_once=False)
    made.clock.seconds = 0.0105  # pulses come at whole milliseconds: the first is at 11 ms
    say(made.scope, b":ACQ:SRAT 1MHZ;POIN 500;:SENS:AVER:STAT 1;COUN 10\n")
    assert say(made.scope, b":INIT;*OPC?\n") == b""
    assert poll(made, 0.0204) == b""
    assert poll(made, 0.0206) == b"1\n"
    assert say(made.scope, b":WAV:COUN?\n") == b"10\n"
    made.instrument.memory().codes(1, 16)
    request = made.tank.requests[-1]
    assert request.averages == 10
    assert request.time_s == pytest.approx(0.011)
    assert (request.drive.on, request.drive.cycles, request.drive.frequency_hz) == (True, 5, 1e6)


def test_pulses_during_a_record_do_not_trigger() -> None:
    made = a_set(PreambleScope, at_once=False)
    say(made.scope, b":ACQ:SRAT 1MHZ;POIN 1500;:SENS:AVER:STAT 1;COUN 3\n")
    say(made.scope, b":INIT;*OPC?\n")  # records of 1.5 ms, pulses at 0, 1, 2, ... ms: triggers at 0, 2, 4
    assert poll(made, 0.0054) == b""
    assert poll(made, 0.0056) == b"1\n"


def test_an_output_that_pauses_delays_the_averages_that_are_missing() -> None:
    made = a_set(PreambleScope, at_once=False)
    say(made.scope, b":ACQ:SRAT 1MHZ;POIN 100;:SENS:AVER:STAT 1;COUN 4\n:INIT;*OPC?\n")
    made.clock.seconds = 0.0015  # triggers at 0 and 1 ms have come
    say(made.generator, b"OUTP OFF\n")
    assert poll(made, 0.5) == b""
    say(made.generator, b"OUTP ON\n")  # at 0.5 and 0.501 s the other two
    assert poll(made, 0.50105) == b""
    assert poll(made, 0.50115) == b"1\n"
    assert made.instrument.memory().averages == 4


def test_a_carriage_that_moves_during_the_averages_is_seen_at_several_places() -> None:
    made = a_set(PreambleScope, at_once=False)
    made.motion.home()
    made.clock.seconds = start = made.motion.end_s() + 1.0
    made.timeline.run_due()
    say(made.scope, b":ACQ:SRAT 1MHZ;POIN 100;:SENS:AVER:STAT 1;COUN 64\n:INIT;*OPC?\n")
    made.motion.go_together({"x": 0.05}, None)
    assert poll(made, start + 1.0) == b"1\n"
    made.instrument.memory().codes(1, 16)
    places = [c.x for c in made.tank.requests[-1].carriages]
    assert len(places) == 8
    assert places == sorted(places)
    assert places[-1] > places[0]


def test_a_carriage_that_stands_is_seen_at_one_place() -> None:
    made = a_set(PreambleScope, at_once=False)
    say(made.scope, b":SENS:AVER:STAT 1;COUN 64\n:INIT;*OPC?\n")
    assert poll(made, 1.0) == b"1\n"
    made.instrument.memory().codes(1, 16)
    assert len(made.tank.requests[-1].carriages) == 1


def test_what_was_computed_ahead_is_used_only_when_nothing_changed() -> None:
    made = a_set(PreambleScope, at_once=False)
    for moves in (False, True):
        made.tank.requests.clear()
        began = made.clock.seconds
        say(made.scope, b":SENS:AVER:STAT 1;COUN 64\n:INIT;*OPC?\n")
        assert made.instrument.prepare()
        assert not made.instrument.prepare()
        if moves:
            made.motion.go_together({"x": 0.05}, None)
        assert poll(made, began + 1.0) == b"1\n"
        made.instrument.memory().codes(1, 16)
        assert len(made.tank.requests) == (2 if moves else 1)
        assert (len(made.tank.requests[-1].carriages) == 8) is moves


def test_a_channel_without_the_sensor_sees_nothing() -> None:
    made = a_set(PreambleScope)
    say(made.scope, b":CHAN3:OFFS 0;:WAV:FORM WORD;SOUR CHAN3;:INIT;*OPC?\n")
    assert set(block(say(made.scope, b":WAV:DATA?\n"))) == {0}
    assert made.tank.requests == []


def test_captures_are_numbered_and_settings_are_those_at_arming() -> None:
    made = a_set(PreambleScope, at_once=False)
    say(made.scope, b":ACQ:SRAT 1MHZ;POIN 100\n:INIT;:ACQ:POIN 200\n")
    poll(made, 1.0)
    assert say(made.scope, b":WAV:POIN?\n:INIT;*OPC?\n") == b"100\n"
    poll(made, 2.0)
    assert say(made.scope, b":WAV:POIN?\n") == b"200\n"
    made.instrument.memory().codes(1, 8)
    assert made.tank.requests[-1].number == 1
