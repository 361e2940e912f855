"""One suite for every kind of link."""

import socket
from collections.abc import Iterator
from contextlib import contextmanager

import pytest

from drivers.errors import Cancelled, CannotConnect, LinkError, LinkLost, LinkTimeout, ProtocolError
from drivers.link import Link
from drivers.serial_link import SerialLink
from drivers.tcp_link import TcpLink
from drivers.visa_link import VisaLink
from tests.drivers.scripted import Script, tcp_server, terminal_server

BODY = bytes(range(256)) * 40  # with every byte value in it, 0x0A and 0x0D too
BLOCK = b"#510240" + BODY + b"\n"


class LinkSuite:
    """Inherited by the tests of each link; `link` gives an open one on the script."""

    fast_timeout_s = 0.3

    @contextmanager
    def link(self, script: Script) -> Iterator[Link]:
        raise NotImplementedError

    @contextmanager
    def opened(self, link: Link) -> Iterator[Link]:
        link.open()
        try:
            yield link
        finally:
            link.close()
            link.close()  # twice does no harm

    def test_a_question_is_answered(self) -> None:
        script = Script({b"*IDN?": b"ONE,TWO,3,4\n"})
        with self.link(script) as link:
            assert link.query("*IDN?") == "ONE,TWO,3,4"
            assert link.query("*IDN?") == "ONE,TWO,3,4"
        assert script.heard == [b"*IDN?"] * 2

    def test_a_reply_in_pieces_is_put_together(self) -> None:
        with self.link(Script({b"A?": [b"1.2", b"5E", b"-3\n"]})) as link:
            assert link.query("A?") == "1.25E-3"

    def test_two_replies_to_one_line_are_two_lines(self) -> None:
        with self.link(Script({b"A?;B?": b"1\n2\n"})) as link:
            link.write("A?;B?")
            assert [link.read_line(), link.read_line()] == ["1", "2"]

    def test_a_block_holds_every_byte_value(self) -> None:
        with self.link(Script({b"DATA?": BLOCK, b"*OPC?": b"1\n"})) as link:
            for _ in range(3):
                link.write("DATA?")
                assert bytes(link.read_block()) == BODY
            assert link.query("*OPC?") == "1"  # and the next reply is in step

    def test_a_block_in_pieces_is_put_together(self) -> None:
        with self.link(Script({b"DATA?": [BLOCK[:1], BLOCK[1:5], BLOCK[5:900], BLOCK[900:]]})) as link:
            link.write("DATA?")
            assert bytes(link.read_block()) == BODY

    def test_what_is_no_block_is_said(self) -> None:
        with self.link(Script({b"DATA?": b"-113,nothing\n"})) as link:
            link.write("DATA?")
            with pytest.raises(ProtocolError, match="a block was expected"):
                link.read_block()
            assert not link.in_step  # what else comes of that reply must not answer the next question

    def test_a_block_may_end_with_two_characters(self) -> None:
        with self.link(Script({b"DATA?": b"#13abc\r\n", b"A?": b"7\n"})) as link:
            for _ in range(2):
                link.write("DATA?")
                assert bytes(link.read_block()) == b"abc"
            assert link.query("A?") == "7"

    def test_a_block_that_comes_byte_by_byte_is_put_together(self) -> None:
        with self.link(Script({b"DATA?": [bytes([b]) for b in b"#15a\nb\r#\n"]})) as link:
            link.write("DATA?")
            assert bytes(link.read_block()) == b"a\nb\r#"

    @pytest.mark.parametrize("head", [b"#", b"#2", b"#25", b"#210", b"#210abc", b"#13abc"])
    def test_a_block_that_stops_anywhere_is_a_reply_that_did_not_come(self, head: bytes) -> None:
        with self.link(Script({b"DATA?": head, b"*IDN?": b"me\n"})) as link:
            link.write("DATA?")
            with pytest.raises(LinkTimeout, match="did not reply in time"):
                link.read_block(self.fast_timeout_s)
            assert not link.in_step
            link.reconnect()
            assert link.query("*IDN?") == "me"

    def test_a_block_longer_than_it_says_is_not_cut_off_in_silence(self) -> None:
        with self.link(Script({b"DATA?": b"#13abcdef\n"})) as link:
            link.write("DATA?")
            with pytest.raises(ProtocolError, match="longer than it says"):
                link.read_block()
            assert not link.in_step

    def test_a_reply_that_does_not_come_puts_the_link_out_of_step_until_reconnected(self) -> None:
        with self.link(Script({b"*IDN?": b"me\n"})) as link:
            with pytest.raises(LinkTimeout, match="did not reply in time"):
                link.query("SILENT?", self.fast_timeout_s)
            assert not link.in_step
            with pytest.raises(LinkTimeout, match="reconnect first"):
                link.query("*IDN?")
            link.reconnect()
            assert link.query("*IDN?") == "me"

    def test_a_wait_can_be_cancelled(self) -> None:
        asked = []

        def stop() -> bool:
            asked.append(1)
            return len(asked) > 2

        with self.link(Script()) as link:
            link.write("SILENT?")
            with pytest.raises(Cancelled):
                link.read_line(30.0, stop)
            assert not link.in_step

    def test_looking_for_a_line_breaks_nothing(self) -> None:
        with self.link(Script({b"A?": b"7\n"})) as link:
            assert not link.line_ready(0.01)
            link.write("A?")
            assert link.line_ready(5.0)
            assert link.read_line() == "7"

    def test_what_is_written_together_is_answered_in_order(self) -> None:
        with self.link(Script({b"A?": b"1\n", b"B?": b"2\n"})) as link:
            with link.together():
                link.write("A?")
                link.write("B?")
            assert [link.read_line(), link.read_line()] == ["1", "2"]

    def test_the_transcript_tells_what_passed(self) -> None:
        with self.link(Script({b"A?": b"7\n"})) as link:
            link.query("A?")
            told = link.transcript.lines()
        assert any("> b'A?\\n'" in line for line in told)
        assert any("< b'7'" in line for line in told)


class TestTcpLink(LinkSuite):
    @contextmanager
    def link(self, script: Script) -> Iterator[Link]:
        with tcp_server(script) as port, self.opened(TcpLink(f"tcp://127.0.0.1:{port}")) as link:
            yield link

    def test_a_peer_that_goes_in_the_middle_of_a_block_is_lost_at_once(self) -> None:
        def cut(line: bytes) -> list[bytes] | None:
            return None if line == b"GO" else [BLOCK[:200]]

        with self.link(Script(otherwise=cut)) as link:
            link.write("DATA?")
            link.write("GO")
            with pytest.raises(LinkLost, match="closed the connection"):
                link.read_block()


class TestVisaLink(LinkSuite):
    @contextmanager
    def link(self, script: Script) -> Iterator[Link]:
        with (
            tcp_server(script) as port,
            self.opened(VisaLink(f"visa://TCPIP::127.0.0.1::{port}::SOCKET")) as link,
        ):
            yield link


class TestSerialLink(LinkSuite):
    @contextmanager
    def link(self, script: Script) -> Iterator[Link]:
        with terminal_server(script) as device, self.opened(SerialLink(f"serial://{device}")) as link:
            yield link


@pytest.mark.parametrize("scheme", ["tcp", "visa"])
def test_a_port_where_nothing_answers_is_one_clear_line_at_once(scheme: str) -> None:
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    link: Link = (
        TcpLink(f"tcp://127.0.0.1:{port}") if scheme == "tcp" else VisaLink(f"visa://TCPIP::127.0.0.1::{port}::SOCKET")
    )
    with pytest.raises(CannotConnect, match="nothing answers at") as failure:
        link.open()
    assert "\n" not in str(failure.value)
    link.close()


def test_a_device_that_is_not_there_is_one_clear_line() -> None:
    with pytest.raises(CannotConnect, match="cannot open /dev/none-such"):
        SerialLink("serial:///dev/none-such").open()


def test_a_link_that_was_never_opened_says_so() -> None:
    with pytest.raises(LinkError, match="is not connected"):
        TcpLink("tcp://127.0.0.1:9").write("A")
