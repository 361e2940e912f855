"""Both stage families: transcripts by hand. ISO 6983-1 words and their letters are from memory."""

from __future__ import annotations

from collections.abc import Callable

import pytest
from hypothesis import given
from hypothesis import strategies as st

from profiles.model import Axis
from profiles.units import DEG, MM
from sim_hardware.clock import Timeline
from sim_hardware.conversation import Conversation
from sim_hardware.motion import AxisLimits, Motion
from sim_hardware.stage_iso import GREETING, IsoSession, IsoStage
from sim_hardware.stage_prefix import PrefixSession, PrefixStage
from sim_hardware.truth import MechanicsTruth
from tests.sim_hardware.talking import HandClock, byte_by_byte, say

LIMITS: dict[Axis, AxisLimits] = {
    "x": AxisLimits(-50 * MM, 50 * MM, 20 * MM, 100 * MM),
    "z": AxisLimits(20 * MM, 300 * MM, 20 * MM, 100 * MM),
    "theta": AxisLimits(-90 * DEG, 90 * DEG, 30 * DEG, 100 * DEG),
}
Speak = Callable[[Conversation, bytes], bytes]


class Stand:
    """A stage at real time with a clock set by hand, or at once."""

    def __init__(self, family: str, at_once: bool = True, homed: bool = True) -> None:
        self.clock = HandClock()
        self.timeline = Timeline(None if at_once else 1.0, self.clock)
        self.motion = Motion(LIMITS, MechanicsTruth(), self.timeline)
        self.session: Conversation
        if family == "iso":
            self.iso = IsoStage(self.motion, self.timeline)
            self.session = IsoSession(self.iso, self.timeline)
        else:
            self.session = PrefixSession(PrefixStage(self.motion, self.timeline), self.timeline)
        if homed:
            self.say(b"$H\n" if family == "iso" else b"1OR;3OR;4OR\n")
            self.wait(1000.0)

    def say(self, message: bytes) -> bytes:
        return say(self.session, message)

    def wait(self, seconds: float) -> bytes:
        self.clock.seconds += seconds
        self.timeline.run_due()
        return b"".join(bytes(p) for p in self.session.poll())


ISO_TRANSCRIPT = [
    (b"$I\n", b"[VER:QUIET BASIN STAGE-ISO 1.0]\nok\n"),
    (b"?", b"<Idle|MPos:0.0000,0.0000,20.0000,0.0000,0.0000|Bf:16>\n"),
    (b"G90 G21 G1 X12.5 Z120 B-30.25 F1200\n", b"ok\n"),
    (b"G4 P0\n?", b"ok\n<Idle|MPos:12.5000,0.0000,120.0000,-30.2500,0.0000|Bf:16>\n"),
    (b"G90G21G0X1.Z+20.5B.5\r\n", b"ok\n"),
    (b"G4 P0.1\r\n?", b"ok\n<Idle|MPos:1.0000,0.0000,20.5000,0.5000,0.0000|Bf:16>\n"),
    (b"g91 g1 x-2\nG90\nG4 P0\n?", b"ok\nok\nok\n<Idle|MPos:-1.0000,0.0000,20.5000,0.5000,0.0000|Bf:16>\n"),
    (b"G20 G0 X1\nG21\nG4 P0\n?", b"ok\nok\nok\n<Idle|MPos:25.4000,0.0000,20.5000,0.5000,0.0000|Bf:16>\n"),
    (b"N10 (to the side) G0 X 3 (and stay)\nG4 P0\n?",
     b"ok\nok\n<Idle|MPos:3.0000,0.0000,20.5000,0.5000,0.0000|Bf:16>\n"),
    (b"G0 X50.01\n", b"error:15\n"),
    (b"G91 G0 X47.5\nG90\n", b"error:15\nok\n"),
    (b"G0 X\n", b"error:2\n"),
    (b"G0 X1.2.3\n", b"error:2\n"),
    (b"G1 X1 F0\n", b"error:2\n"),
    (b"G0 %3\n", b"error:1\n"),
    (b"G0 X1 X2\n", b"error:1\n"),
    (b"G4\n", b"error:1\n"),
    (b"G4 P-1\n", b"error:2\n"),
    (b"G4 P4000\n", b"error:2\n"),
    (b"\xff\n", b"error:1\n"),
    (b"G2 X1\n", b"error:20\n"),
    (b"M3\n", b"error:20\n"),
    (b"G0 Y1\n", b"error:20\n"),  # this stage has no y axis
    (b"$Q\n", b"error:20\n"),
    (b"G0 " + b"X" * 300 + b"\n", b"error:1\n"),
    (b"\n\r\n", b""),
    (b"G4 P0\n?", b"ok\n<Idle|MPos:3.0000,0.0000,20.5000,0.5000,0.0000|Bf:16>\n"),
]  # fmt: skip


@pytest.mark.parametrize("speak", [say, byte_by_byte])
def test_iso_transcript(speak: Speak) -> None:
    stand = Stand("iso")
    for sent, back in ISO_TRANSCRIPT:
        assert speak(stand.session, sent) == back, sent


def test_iso_is_locked_until_it_has_homed() -> None:
    stand = Stand("iso", at_once=False, homed=False)
    assert stand.say(b"?").startswith(b"<Alarm|")
    assert stand.say(b"G0 X1\n") == b"error:9\n"
    assert stand.say(b"$H\n") == b""
    assert stand.session.waiting
    assert stand.say(b"?").startswith(b"<Home|")
    assert stand.wait(1000.0) == b"ok\n"
    assert stand.say(b"?").startswith(b"<Idle|MPos:0.0000,0.0000,20.0000,")


def test_ok_comes_when_a_move_is_taken_and_that_of_a_dwell_when_it_is_over() -> None:
    stand = Stand("iso", at_once=False)
    # 40 mm at 20 mm/s with a ramp of 0.2 s: 2.2 s
    assert stand.say(b"G90 G21 G1 X40 F1200\nG4 P0.5\n") == b"ok\n"
    assert stand.say(b"?").startswith(b"<Run|MPos:0.0000,")
    assert stand.wait(2.15) == b""
    assert stand.wait(0.1) == b""
    assert stand.say(b"?").startswith(b"<Idle|MPos:40.0000,")
    assert stand.wait(0.4) == b""
    assert stand.wait(0.1) == b"ok\n"


def test_lines_after_a_dwell_wait_for_it() -> None:
    stand = Stand("iso", at_once=False)
    assert stand.say(b"G0 X40\nG4 P0\nG0 X0\n") == b"ok\n"
    assert stand.wait(2.3) == b"ok\nok\n"
    assert stand.say(b"?").startswith(b"<Run|")


def test_feed_is_in_units_per_minute_and_rotary_when_only_a_rotary_axis_moves() -> None:
    stand = Stand("iso", at_once=False)
    began = stand.clock.seconds
    stand.say(b"G1 B60 F600\n")  # 10 degrees a second, ramp 0.1 s
    assert stand.motion.end_s() - began == pytest.approx(6.1)
    stand.wait(7.0)
    began = stand.clock.seconds
    stand.say(b"G1 X10 F60\n")  # 1 mm/s, ramp 0.01 s
    assert stand.motion.end_s() - began == pytest.approx(10.01)


def test_hold_stops_on_the_way_and_resume_goes_on_to_the_end_of_the_queue() -> None:
    stand = Stand("iso", at_once=False)
    stand.say(b"G0 X40\nG0 X10\nG4 P0\n")
    stand.wait(1.0)
    assert stand.say(b"!") == b""
    stand.wait(50.0)
    report = stand.say(b"?")
    assert report.startswith(b"<Hold|MPos:20.0000,")  # 18 mm in the first second, 2 mm braking
    assert stand.say(b"~") == b""
    assert stand.wait(100.0) == b"ok\n"
    assert stand.say(b"?").startswith(b"<Idle|MPos:10.0000,")


def test_a_move_given_during_a_hold_waits_for_resume() -> None:
    stand = Stand("iso", at_once=False)
    stand.say(b"G0 X40\n!")
    assert stand.say(b"G0 X5\n") == b"ok\n"
    stand.wait(50.0)
    assert stand.say(b"?").startswith(b"<Hold|MPos:0.0000,")
    stand.say(b"~")
    stand.wait(100.0)
    assert stand.say(b"?").startswith(b"<Idle|MPos:5.0000,")


def test_reset_while_moving_loses_the_position_and_at_rest_does_not() -> None:
    stand = Stand("iso", at_once=False)
    assert stand.say(b"G0 X1\n") == b"ok\n"
    stand.wait(0.1)
    assert stand.say(b"\x18") == GREETING
    assert stand.say(b"?").startswith(b"<Alarm|")
    assert stand.say(b"G0 X1\n") == b"error:9\n"
    assert stand.say(b"$H\n") == b""
    assert stand.wait(1000.0) == b"ok\n"
    assert stand.say(b"\x18") == GREETING
    assert stand.say(b"?").startswith(b"<Idle|")


def test_the_queue_fills_and_the_next_ok_waits_for_room() -> None:
    stand = Stand("iso", at_once=False)
    lines = b"".join(b"G0 X%d\n" % (10 * (i % 2) + 10) for i in range(18))
    assert stand.say(lines) == b"ok\n" * 16
    assert stand.wait(1000.0) == b"ok\n" * 2


def test_hold_during_homing_leaves_it_locked() -> None:
    stand = Stand("iso", at_once=False, homed=False)
    stand.say(b"$H\n")
    stand.wait(0.1)
    stand.say(b"!")
    stand.wait(1000.0)
    assert stand.say(b"?").startswith(b"<Alarm|")


PREFIX_TRANSCRIPT = [
    (b"VE?\r\n", b"QUIET BASIN STAGE-PREFIX 1.0\r\n"),
    (b"TB?\r\n", b"0, NO ERROR\r\n"),
    (b"1PA12.5\r\n", b""),
    (b"1TP?\r\n", b"12.5000\r\n"),
    (b"1MD?;1TS?\r\n", b"1\r\n0\r\n"),
    (b"1PA-3.25;3PA120;4PA+45.5\r\n", b""),
    (b"1TP?;3TP?;4TP?\r\n", b"-3.2500\r\n120.0000\r\n45.5000\r\n"),
    (b"1tp?\n", b"-3.2500\r\n"),
    (b"1OR?;1PA?\r\n", b"1\r\n-3.2500\r\n"),
    (b"1VA5;1VA?;1AC50;1AC?\r\n", b"5.0000\r\n50.0000\r\n"),
    (b"1VA21\r\nTB?\r\nTB?\r\n", b"7, PARAMETER OUT OF RANGE\r\n0, NO ERROR\r\n"),
    (b"1PA50.1\r\nTB?\r\n", b"7, PARAMETER OUT OF RANGE\r\n"),
    (b"1PA10;3PA301\r\n1TP?;TB?\r\n", b"-3.2500\r\n7, PARAMETER OUT OF RANGE\r\n"),
    (b"1PA10;1XX3\r\nTB?;1TP?\r\n", b"6, COMMAND DOES NOT EXIST\r\n10.0000\r\n"),
    (b"hello\r\nTB?\r\n", b"6, COMMAND DOES NOT EXIST\r\n"),
    (b"1PAabc\r\nTB?\r\n", b"7, PARAMETER OUT OF RANGE\r\n"),
    (b"PA3\r\nTB?\r\n", b"7, PARAMETER OUT OF RANGE\r\n"),
    (b"2PA3\r\nTB?\r\n", b"7, PARAMETER OUT OF RANGE\r\n"),  # this stage has no y axis
    (b"9PA3\r\nTB?\r\n", b"7, PARAMETER OUT OF RANGE\r\n"),
    (b"\xff\xfe\r\nTB?\r\n", b"6, COMMAND DOES NOT EXIST\r\n"),
    (b"1" * 500 + b"\r\nTB?\r\n", b"6, COMMAND DOES NOT EXIST\r\n"),
    (b";;\r\n\r\n", b""),
    (b"TB?\r\n", b"0, NO ERROR\r\n"),
]


@pytest.mark.parametrize("speak", [say, byte_by_byte])
def test_prefix_transcript(speak: Speak) -> None:
    stand = Stand("prefix")
    for sent, back in PREFIX_TRANSCRIPT:
        assert speak(stand.session, sent) == back, sent


def test_prefix_refuses_to_move_an_axis_that_has_not_homed() -> None:
    stand = Stand("prefix", at_once=False, homed=False)
    assert stand.say(b"1OR?;1PA3\r\nTB?\r\n") == b"0\r\n10, NOT HOMED\r\n"
    stand.say(b"1OR\r\n")
    assert stand.say(b"1MD?;1OR?\r\n") == b"0\r\n0\r\n"
    stand.wait(1000.0)
    assert stand.say(b"1MD?;1OR?;3OR?\r\n") == b"1\r\n1\r\n0\r\n"
    assert stand.say(b"1PA3;1TS?\r\n") == b"1\r\n"


def test_joined_moves_start_together_and_each_takes_its_own_time() -> None:
    stand = Stand("prefix", at_once=False)
    stand.say(b"1PA2;4PA60\r\n")
    assert stand.say(b"1TS?;4TS?\r\n") == b"1\r\n1\r\n"
    stand.wait(0.5)  # 2 mm: 0.28 s; 60 degrees at 30 a second: 2.3 s
    assert stand.say(b"1TS?;4TS?\r\n") == b"0\r\n1\r\n"
    stand.wait(2.0)
    assert stand.say(b"4MD?;4TP?\r\n") == b"1\r\n60.0000\r\n"


def test_stop_ends_one_axis_or_all() -> None:
    stand = Stand("prefix", at_once=False)
    stand.say(b"1PA40;4PA80\r\n")
    stand.wait(1.0)
    stand.say(b"1ST\r\n")
    stand.wait(0.3)
    assert stand.say(b"1MD?;4MD?;1TP?\r\n") == b"1\r\n0\r\n20.0000\r\n"
    stand.say(b"ST\r\n")
    stand.wait(0.4)
    assert stand.say(b"4MD?\r\n") == b"1\r\n"
    assert float(stand.say(b"4TP?\r\n")) < 80


WORDS = st.sampled_from(
    [b"G0", b"G1", b"G90", b"X1", b"X", b"B2.5", b"F100", b"?", b"!", b"~", b"\x18", b"\n", b"\r\n", b"$H", b"$I",
     b"G4", b"P1", b"(", b")", b"1PA3", b";", b"4OR", b"ST", b"TB?", b"1TP?", b"-", b".", b"\xff", b"1VA", b" "]
)  # fmt: skip


@pytest.mark.parametrize("family", ["iso", "prefix"])
@given(
    words=st.lists(st.one_of(WORDS, st.binary(max_size=4)), max_size=25),
    cuts=st.lists(st.integers(0, 60), max_size=6),
    homed=st.booleans(),
)
def test_however_the_bytes_are_split_the_replies_are_the_same(
    family: str, words: list[bytes], cuts: list[int], homed: bool
) -> None:
    message = b"".join(words)
    whole, split = Stand(family, homed=homed), Stand(family, homed=homed)
    edges = sorted(min(c, len(message)) for c in cuts)
    chunks = [message[a:b] for a, b in zip([0, *edges], [*edges, len(message)], strict=True)]
    assert whole.say(message) == say(split.session, *filter(None, chunks))
    assert whole.motion.reported() == split.motion.reported()
