"""Both stage families against transcripts written by hand (ISO 6983 words; two-letter commands)."""

from collections.abc import Iterator
from contextlib import contextmanager
from math import radians

import pytest

from drivers.errors import Cancelled, InstrumentError, InstrumentTimeout, OutOfLimits, ProtocolError, WrongIdentity
from drivers.stage import MotionStage
from drivers.stage_iso import IsoStage
from drivers.stage_prefix import PrefixStage
from drivers.tcp_link import TcpLink
from profiles.bench import AxisTable
from profiles.load import load_instrument
from tests.drivers.scripted import Script, tcp_server

AXES = AxisTable.model_validate(
    {
        "x": {"low_mm": -10, "high_mm": 10, "speed_mm_per_s": 20},
        "theta": {"low_deg": -90, "high_deg": 90, "speed_deg_per_s": 40},
    }
)
IDLE = b"<Idle|MPos:1.5000,0.0000,0.0000,30.0000,0.0000|FS:0,0>\n"
RUN = b"<Run|MPos:0.5000,0.0000,0.0000,10.0000,0.0000|FS:0,0>\n"
ALARM = b"<Alarm|MPos:0.0000,0.0000,0.0000,0.0000,0.0000>\n"


class Reports:
    """Answers `?` with one report after another; the last one stays."""

    def __init__(self, *reports: bytes) -> None:
        self.left = list(reports)

    def __call__(self) -> bytes:
        return self.left.pop(0) if len(self.left) > 1 else self.left[0]


class IsoScript(Script):
    """A controller of the family: ok to every line but the given ones."""

    def __init__(self, *reports: bytes, **lines: bytes) -> None:
        super().__init__({b"?": b""})
        self.reports = Reports(*reports)
        self.lines = lines
        self.identity = b"[VER:QUIET BASIN STAGE-ISO 1.0]\nok\n"

    def answer(self, line: bytes) -> bytes:
        self.heard.append(line)
        if line == b"?":
            return self.reports()
        if line in (b"!", b"\x18"):
            return b""
        if line == b"$I":
            return self.identity
        return self.lines.get(line.decode().split(" ")[0], b"ok\n")


@contextmanager
def stage_on(kind: type[MotionStage], name: str, script: Script) -> Iterator[MotionStage]:
    tables = load_instrument(name).model_copy(update={"settle_ms": 0.0, "terminator": "\n"})
    with tcp_server(script) as port:
        stage = kind(TcpLink(f"tcp://127.0.0.1:{port}", 1.0), tables, AXES)
        stage.open()
        try:
            yield stage
        finally:
            stage.close()


def iso(script: Script) -> object:
    return stage_on(IsoStage, "stage-iso", script)


def test_iso_a_move_carries_its_whole_modal_state_and_ends_when_the_stage_stands_still() -> None:
    script = IsoScript(IDLE, RUN, RUN, IDLE)
    with stage_on(IsoStage, "stage-iso", script) as stage:
        stage.start_move({"x": 1.5e-3, "theta": radians(30)})
        position = stage.finish_move(5.0)
    assert position["x"] == pytest.approx(1.5e-3)
    assert position["theta"] == pytest.approx(radians(30))
    assert b"G90 G21 G0 X1.5000 B30.0000" in script.heard
    assert script.heard.count(b"?") >= 1 + 2 + 3  # opening, twice on the way, three alike


def test_iso_one_idle_report_is_no_proof_of_rest() -> None:
    elsewhere = IDLE.replace(b"1.5000", b"1.4000")
    script = IsoScript(IDLE, elsewhere, IDLE, IDLE, IDLE, IDLE)
    with stage_on(IsoStage, "stage-iso", script) as stage:
        stage.start_move({"x": 1.5e-3})
        assert stage.finish_move(5.0)["x"] == pytest.approx(1.5e-3)


def test_iso_a_refused_move_is_told_in_words() -> None:
    with stage_on(IsoStage, "stage-iso", IsoScript(IDLE, G90=b"error:15\n")) as stage:
        stage.start_move({"x": 1e-3})
        with pytest.raises(InstrumentError, match="error:15: the target lies beyond its travel"):
            stage.finish_move(5.0)


def test_iso_an_alarm_asks_to_be_homed() -> None:
    with stage_on(IsoStage, "stage-iso", IsoScript(IDLE, ALARM)) as stage:
        with pytest.raises(InstrumentError, match="in alarm, its position may be lost: home it"):
            stage.position()
        assert not stage.referenced()


def test_iso_homing_waits_for_its_ok() -> None:
    script = IsoScript(ALARM, IDLE)
    with stage_on(IsoStage, "stage-iso", script) as stage:
        stage.home(5.0)
        assert stage.referenced()
    assert b"$H" in script.heard


@pytest.mark.parametrize(
    ("target", "words"),
    [
        ({"x": 10.001e-3}, "x = 10.0010 mm leaves the travel of -10 to 10 mm; nothing was moved"),
        ({"theta": radians(-90.1)}, "theta = -90.1000 deg leaves the travel"),
        ({"z": 1e-3}, "the stage has no axis z"),
    ],
)
def test_a_target_outside_the_travel_is_refused_before_a_byte_is_sent(target: dict, words: str) -> None:  # type: ignore[type-arg]
    script = IsoScript(IDLE)
    with stage_on(IsoStage, "stage-iso", script) as stage:
        before = len(script.heard)
        with pytest.raises(OutOfLimits, match=words):
            stage.start_move(target)
        assert len(script.heard) == before


def test_a_stage_that_never_arrives_is_said_to_move_still() -> None:
    with stage_on(IsoStage, "stage-iso", IsoScript(IDLE, RUN)) as stage:
        stage.start_move({"x": 1e-3})
        with pytest.raises(InstrumentTimeout, match=r"still moves after 0\.2 s"):
            stage.finish_move(0.2)


def test_a_stop_while_moving_holds_and_resets() -> None:
    script = IsoScript(IDLE, RUN, RUN, IDLE)
    with stage_on(IsoStage, "stage-iso", script) as stage:
        stage.start_move({"x": 1e-3})
        with pytest.raises(Cancelled):
            stage.finish_move(5.0, lambda: True)
        told = " ".join(stage.link.transcript.lines())
    assert "b'!'" in told
    assert "b'\\x18'" in told


def test_iso_a_stop_takes_the_answer_to_a_move_that_nobody_has_read() -> None:
    with stage_on(IsoStage, "stage-iso", IsoScript(IDLE)) as stage:
        stage.start_move({"x": 1.5e-3})
        stage.stop()
        assert stage.position()["x"] == pytest.approx(1.5e-3)  # and no stale ok in its place


def test_another_controller_is_refused() -> None:
    script = IsoScript(IDLE)
    script.identity = b"[VER:SOMETHING ELSE]\nok\n"
    with pytest.raises(WrongIdentity, match="SOMETHING ELSE"), stage_on(IsoStage, "stage-iso", script):
        pass


class PrefixScript(Script):
    """A controller of the other family: position, done and error as set."""

    def __init__(self) -> None:
        super().__init__()
        self.position = {b"1": 1.5, b"4": 30.0}
        self.done = {b"1": [1], b"4": [1]}
        self.errors = [b"0, NO ERROR"]
        self.homed = 1

    def answer(self, line: bytes) -> bytes:
        self.heard.append(line)
        said = []
        for part in line.split(b";"):
            if part == b"VE?":
                said.append(b"QUIET BASIN STAGE-PREFIX 1.0")
            elif part == b"TB?":
                said.append(self.errors.pop(0) if len(self.errors) > 1 else self.errors[0])
            elif part.endswith(b"TP?"):
                said.append(f"{self.position[part[:1]]:.4f}".encode())
            elif part.endswith(b"MD?"):
                left = self.done[part[:1]]
                said.append(str(left.pop(0) if len(left) > 1 else left[0]).encode())
            elif part.endswith(b"OR?"):
                said.append(str(self.homed).encode())
        return b"".join(s + b"\r\n" for s in said)


def test_prefix_a_move_and_its_end() -> None:
    script = PrefixScript()
    script.done[b"4"] = [1, 0, 0, 1]
    with stage_on(PrefixStage, "stage-prefix", script) as stage:
        stage.start_move({"x": 1.5e-3, "theta": radians(30)})
        position = stage.finish_move(5.0)
    assert position["theta"] == pytest.approx(radians(30))
    assert b"1PA1.5000;4PA30.0000;TB?" in script.heard


def test_prefix_an_error_is_told_with_its_number() -> None:
    script = PrefixScript()
    script.errors = [b"7, PARAMETER OUT OF RANGE", b"0, NO ERROR"]
    with stage_on(PrefixStage, "stage-prefix", script) as stage:
        stage.start_move({"x": 1e-3})
        with pytest.raises(InstrumentError, match="reports 7, PARAMETER OUT OF RANGE"):
            stage.finish_move(5.0)


def test_prefix_homing_goes_on_until_every_axis_is_referenced() -> None:
    script = PrefixScript()
    with stage_on(PrefixStage, "stage-prefix", script) as stage:
        stage.home(5.0)
    assert b"1OR;4OR" in script.heard


def test_prefix_a_stop_takes_the_answer_to_a_move_that_nobody_has_read() -> None:
    script = PrefixScript()
    with stage_on(PrefixStage, "stage-prefix", script) as stage:
        stage.start_move({"x": 1.5e-3})
        stage.stop()
        assert stage.position()["x"] == pytest.approx(1.5e-3)
        stage.stop()  # nothing is owed any more, so nothing is waited for
        assert stage.referenced()
    assert script.heard.count(b"ST") == 2


@pytest.mark.parametrize("family", ["iso", "prefix"])
def test_a_stage_is_stopped_on_closing_where_a_move_was_sent_off(family: str) -> None:
    script = IsoScript(IDLE) if family == "iso" else PrefixScript()
    kind, name = (IsoStage, "stage-iso") if family == "iso" else (PrefixStage, "stage-prefix")
    with stage_on(kind, name, script) as stage:
        stage.start_move({"x": 1.5e-3})
    assert (b"!" if family == "iso" else b"ST") in b" ".join(script.heard)


@pytest.mark.parametrize("report", [b"<Idle|MPos:1.5|FS:0,0>\n", b"<Idle|MPos:1.2.3,-,.|FS:0>\n", b"what?\n"])
def test_iso_a_report_that_is_garbled_is_said(report: bytes) -> None:
    script = IsoScript(IDLE, report)
    with (
        stage_on(IsoStage, "stage-iso", script) as stage,
        pytest.raises(ProtocolError, match="to a request for its report"),
    ):
        stage.position()
