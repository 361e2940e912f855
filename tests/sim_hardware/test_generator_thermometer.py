from __future__ import annotations

import pytest

from sim_hardware.capture import DriveState
from sim_hardware.generator import BurstGenerator
from sim_hardware.scpi import ScpiSession
from sim_hardware.sync import SyncLine
from sim_hardware.thermometer import Thermometer
from tests.sim_hardware.talking import HandClock, say


def a_generator() -> tuple[HandClock, SyncLine, BurstGenerator, ScpiSession]:
    clock, sync = HandClock(), SyncLine()
    generator = BurstGenerator(clock.timeline(), sync)
    return clock, sync, generator, ScpiSession(generator)


TRANSCRIPT = [
    (b"*IDN?\n", b"QUIET BASIN,GENERATOR,0001,1.0\n"),
    (b"OUTPUT:STATE?\n", b"0\n"),
    (b"SOURCE:FREQUENCY 2.25 MHZ;FREQUENCY?\n", b"2250000.0\n"),
    (b"SOURCE:VOLTAGE 12 VPP;VOLTAGE?\n", b"12.0\n"),
    (b"SOUR:BURS:NCYC 8;NCYC?;INT:PER 2 MS;PER?\n", b"8;0.002\n"),
    (b"SOUR:BURS:STAT ON;STAT?\n", b"1\n"),
    (b"OUTP ON;OUTP:STAT?\n", b"1\n"),
    (b"SOUR:VOLT 501\nSYST:ERR?\n", b'-222,"Data out of range"\n'),
    (b"SOUR:FREQ 0\nSYST:ERR?\n", b'-222,"Data out of range"\n'),
    (b"SOUR:BURS:NCYC 100000\nSYST:ERR?\n", b'-221,"Settings conflict;burst longer than its period"\n'),
    (b"SOUR:BURS:NCYC?\n", b"8\n"),
    (b"*RST;OUTP?\n", b"0\n"),
    (b"SYST:ERR?\n", b'0,"No error"\n'),
]


def test_generator_transcript() -> None:
    *_, session = a_generator()
    for sent, back in TRANSCRIPT:
        assert say(session, sent) == back, sent


def test_pulses_come_from_switching_on_and_only_while_the_output_is_on() -> None:
    clock, sync, generator, session = a_generator()
    assert sync.next_pulse(0.0) is None
    say(session, b"BURS:INT:PER 0.01;:BURS:STAT 1\n")
    assert sync.next_pulse(0.0) is None
    clock.seconds = 2.0
    say(session, b"OUTP 1\n")
    assert sync.next_pulse(0.0) == 2.0
    assert sync.next_pulse(2.001) == pytest.approx(2.01)
    assert sync.next_pulse(2.01) == pytest.approx(2.01)
    assert generator.drive() == DriveState(True, 1e6, 0.1, 1, 0.01)
    say(session, b"BURS:STAT 0\n")
    assert sync.next_pulse(3.0) is None
    assert not generator.drive().on


def test_a_pulse_is_found_though_its_time_is_rounded() -> None:
    sync = SyncLine()
    sync.set(0.1, 1e-3)
    for k in range(5000):
        assert sync.next_pulse(0.1 + k * 1e-3) == pytest.approx(0.1 + k * 1e-3, abs=1e-9)


def test_thermometer_transcript() -> None:
    readings = iter(("21.043", "21.044", "21.045"))
    session = ScpiSession(Thermometer(lambda: next(readings), lambda: None), b"\r\n")
    assert say(session, b"*IDN?\r\n") == b"QUIET BASIN,THERMOMETER,0001,1.0\r\n"
    assert say(session, b"MEASURE:TEMPERATURE?\n") == b"21.043\r\n"
    assert say(session, b"meas:temp?\r\n") == b"21.044\r\n"
    assert say(session, b"MEAS?\n") == b"21.045\r\n"
