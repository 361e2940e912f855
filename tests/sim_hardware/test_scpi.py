"""SCPI transcripts written by hand from IEEE 488.2-1992 and SCPI-1999; clause numbers from memory."""

from __future__ import annotations

from collections.abc import Sequence

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_hardware.scpi import Block, ScpiInstrument, ScpiSession
from sim_hardware.scpi_data import Boolean, Choice, Integer, Numbered, Real, nr3
from sim_hardware.scpi_syntax import INPUT_LIMIT
from sim_hardware.scpi_tree import Command
from tests.sim_hardware.talking import byte_by_byte, say


class Bench(ScpiInstrument):
    """An instrument with one command of each sort."""

    def __init__(self) -> None:
        super().__init__("QUIET BASIN,TEST,0001,1.0")
        self.volts: dict[int, float] = {}
        self.rate, self.count, self.on, self.mode, self.source = 1.0, 1, False, "SLOW", 1
        self.running = False
        self.text: list[bytes] = []
        self.add(
            [
                Command("CHANnel<4>:RANGe", self._set_range, (Real(0.001, 100, "V"),)),
                Command("CHANnel<4>:RANGe?", lambda n: nr3(self.volts.get(n, 0.0))),
                Command("CHANnel<4>:OFFSet?", lambda n: b"%d" % -n),
                Command("[SOURce]:FREQuency", lambda v: setattr(self, "rate", v), (Real(1, 1e9, "HZ"),)),
                Command("[SOURce]:FREQuency?", lambda: nr3(self.rate)),
                Command("[SOURce]:BURSt:COUNt", lambda v: setattr(self, "count", v), (Integer(1, 1000),)),
                Command("[SOURce]:BURSt:COUNt?", lambda: b"%d" % self.count),
                Command("OUTPut[:STATe]", lambda v: setattr(self, "on", v), (Boolean(),)),
                Command("OUTPut[:STATe]?", lambda: b"%d" % self.on),
                Command("MODE", lambda v: setattr(self, "mode", v), (Choice("SLOW", "FASTer"),)),
                Command("MODE?", lambda: self.mode.encode()),
                Command("DATA:SOURce", lambda v: setattr(self, "source", v), (Numbered("CHANnel", 4),)),
                Command("DATA?", lambda: Block.of(memoryview(b"a;b\n#c"))),
                Command("RUN", lambda: setattr(self, "running", True)),
            ]
        )

    def _set_range(self, channel: int, volts: float) -> None:
        self.volts[channel] = volts

    def busy(self) -> bool:
        return self.running

    def reset(self) -> None:
        self.running = False

    def finish(self) -> None:
        self.running = False
        self.completed()


def fresh() -> tuple[Bench, ScpiSession]:
    bench = Bench()
    session = ScpiSession(bench)
    assert say(session, b"*ESR?\n") == b"128\n"
    return bench, session


NO_ERROR = b'0,"No error"\n'

# what is sent, what comes back; the errors are asked for at the end of each
TRANSCRIPTS: list[tuple[str, bytes, bytes, Sequence[bytes]]] = [
    ("four fields of identity (488.2, 10.14)", b"*IDN?\n", b"QUIET BASIN,TEST,0001,1.0\n", ()),
    ("any case (488.2, 7.6.1.4)", b"*idn?\n", b"QUIET BASIN,TEST,0001,1.0\n", ()),
    ("short form, long form (SCPI-1999 vol. 1, 6.2.1)", b"CHAN2:RANG 3\nchannel2:range?\n", b"3.0\n", ()),
    ("nothing between short and long", b"CHANN2:RANG?\n", b"", (b"-113",)),
    ("suffix 1 when there is none (6.2.5.2)", b"CHAN:RANG 4;:CHANNEL1:RANG?\n", b"4.0\n", ()),
    ("suffix out of range", b"CHAN5:RANG?\n", b"", (b"-114",)),
    ("suffix of a mnemonic without one", b"MODE2?\n", b"", (b"-113",)),
    ("path kept after a semicolon (6.2.4)", b"CHAN3:RANG 2;OFFS?;RANG?\n", b"-3;2.0\n", ()),
    ("a leading colon starts at the root", b"CHAN3:RANG 2;:FREQ 5;:FREQ?\n", b"5.0\n", ()),
    ("common commands leave the path", b"CHAN3:RANG 2;*ESE 4;RANG?;*ESE?\n", b"2.0;4\n", ()),
    ("the path is not the root's", b"CHAN3:RANG 2;FREQ?\n", b"", (b"-113",)),
    ("each message begins at the root", b"CHAN3:RANG 2\nRANG?\n", b"", (b"-113",)),
    ("nodes that may be left out", b"SOUR:FREQ 7;:FREQ?;:OUTP ON;:OUTPUT:STATE?\n", b"7.0;1\n", ()),
    ("units (7.7.3)",
     b"FREQ 2.5 MHZ;FREQ?\nFREQ 3KHZ;FREQ?\nCHAN1:RANG 50 MV;RANG?\n", b"2500000.0\n3000.0\n0.05\n", ()),
    ("unit of another quantity", b"FREQ 3 V\n", b"", (b"-131",)),
    ("unit where none is taken", b"BURS:COUN 3 S\n", b"", (b"-138",)),
    ("flexible numbers (7.7.2.4)",
     b"FREQ +1.5e2;FREQ?;FREQ .5E+3;FREQ?;FREQ 2.;FREQ?\n", b"150.0;500.0;2.0\n", ()),
    ("whole numbers are rounded", b"BURS:COUN 2.6;COUN?\n", b"3\n", ()),
    ("nondecimal numbers (7.7.4)", b"BURS:COUN #H1F;COUN?;COUN #Q17;COUN?;COUN #B101;COUN?\n", b"31;15;5\n", ()),
    ("limits by name", b"FREQ MAX;FREQ?;FREQ MINIMUM;FREQ?\n", b"1000000000.0;1.0\n", ()),
    ("out of range: refused, what follows is done", b"FREQ 2E9;BURS:COUN 9;COUN?\n", b"9\n", (b"-222",)),
    ("after a command error the rest is not trusted", b"FREQ 4;BOGUS;FREQ 5\nFREQ?\n", b"4.0\n", (b"-113",)),
    ("switches (SCPI-1999 vol. 1, 7.3)",
     b"OUTP ON;OUTP?;OUTP 0;OUTP?;OUTP 2;OUTP?;OUTP OFF;OUTP?\n", b"1;0;1;0\n", ()),
    ("words in both forms", b"MODE FASTER;MODE?;MODE SLOW;MODE?;MODE FAST;MODE?\n", b"FAST;SLOW;FAST\n", ()),
    ("another word", b"MODE QUICK\n", b"", (b"-224",)),
    ("a number for a word", b"MODE 3\n", b"", (b"-128",)),
    ("a word for a number", b"FREQ FAST\n", b"", (b"-148",)),
    ("a string for a number", b'FREQ "3"\n', b"", (b"-158",)),
    ("a block for a number", b"FREQ #13abc\n", b"", (b"-168",)),
    ("words with a number", b"DATA:SOUR CHAN3\nDATA:SOUR CHAN7\n", b"", (b"-114",)),
    ("missing parameter", b"FREQ\n", b"", (b"-109",)),
    ("parameter too many", b"FREQ 1,2\n", b"", (b"-108",)),
    ("a query that is none, a command that is none", b"RUN?\nDATA 3\n", b"", (b"-113", b"-113")),
    ("too long a mnemonic", b"EXTRAORDINARILY 3\n", b"", (b"-112",)),
    ("no blank before the data", b"FREQ,3\n", b"", (b"-103",)),
    ("not ASCII", b"\xff\xfe\n", b"", (b"-101",)),
    ("nothing after the semicolon", b"FREQ 3;\n", b"", (b"-102",)),
    ("empty lines and white space", b"\n \t \n\r\n  FREQ   3  ;  FREQ?  \r\n", b"3.0\n", ()),
    ("an unfinished string ends with its line", b'MODE "SLOW\nMODE?\n', b"SLOW\n", (b"-151",)),
    ("a newline inside a block is data", b"MODE #15a\nb;c\nMODE?\n", b"SLOW\n", (b"-168",)),
    ("no query after an indefinite reply (488.2, 6.3.7)",
     b"*IDN?;*ESE?\n", b"QUIET BASIN,TEST,0001,1.0\n", (b"-440",)),
    ("a definite-length block among replies", b"*ESE?;DATA?;*ESE?\n", b"0;#16a;b\n#c;0\n", ()),
    ("version", b"SYSTEM:VERSION?\n", b"1999.0\n", ()),
    ("panel", b"SYST:LOC;:SYSTEM:ERROR?\n", b'0,"No error"\n', ()),
    ("self-test", b"*TST?\n", b"0\n", ()),
]  # fmt: skip


def errors(session: ScpiSession) -> list[bytes]:
    found: list[bytes] = []
    while (entry := say(session, b"SYST:ERR?\n")) != NO_ERROR:
        found.append(entry.split(b",")[0])
    return found


@pytest.mark.parametrize(("name", "sent", "back", "expected"), TRANSCRIPTS, ids=[t[0] for t in TRANSCRIPTS])
@pytest.mark.parametrize("speak", [say, byte_by_byte])
def test_transcript(name: str, sent: bytes, back: bytes, expected: Sequence[bytes], speak: object) -> None:
    _, session = fresh()
    assert callable(speak)
    assert speak(session, sent) == back
    assert errors(session) == list(expected)


def test_the_error_queue_is_read_oldest_first_and_overflows_with_minus_350() -> None:
    # SCPI-1999 vol. 2, 21.8.1: the last entry is replaced
    _, session = fresh()
    say(session, b"FREQ 0\n", *([b"BOGUS\n"] * 40))
    found = errors(session)
    assert found[0] == b"-222"
    assert found[-1] == b"-350"
    assert len(found) == 30
    assert say(session, b"SYST:ERR:NEXT?\n") == NO_ERROR


def test_error_entries_carry_the_standard_text_in_quotes() -> None:
    _, session = fresh()
    assert say(session, b"BOGUS\nSYST:ERR?\n") == b'-113,"Undefined header"\n'
    assert say(session, b"BOGUS\nFREQ 0\nSYST:ERR:COUN?\n*CLS;SYST:ERR:COUN?\n") == b"2\n0\n"


@pytest.mark.parametrize(
    ("message", "bit"),
    [(b"BOGUS\n", 32), (b"FREQ 0\n", 16), (b"*IDN?;*ESE?\n", 4), (b"*OPC\n", 1)],
    ids=["command error", "execution error", "query error", "operation complete"],
)
def test_events_set_their_bits_and_reading_clears_them(message: bytes, bit: int) -> None:
    # IEEE 488.2, 11.5.1.1
    _, session = fresh()
    say(session, message)
    assert say(session, b"*ESR?\n*ESR?\n") == b"%d\n0\n" % bit


def test_the_status_byte_sums_up() -> None:
    # IEEE 488.2, 11.2: summary of events in bit 5, message available in 4, master summary in 6; SCPI: errors in 2
    _, session = fresh()
    assert say(session, b"*STB?\n") == b"0\n"
    assert say(session, b"*ESE 32;*SRE 32\nBOGUS\n*STB?\n") == b"100\n"
    assert say(session, b"SYST:ERR?;*ESR?;*ESR?;*STB?\n").endswith(b";32;0;16\n")
    assert say(session, b"*SRE 255;*SRE?;*SRE 256\n") == b"191\n"
    assert errors(session) == [b"-222"]


def test_clear_does_not_touch_the_enable_registers_and_reset_not_the_queue() -> None:
    # IEEE 488.2, 10.3 and 10.32
    _, session = fresh()
    assert say(session, b"*ESE 60;*SRE 4;*CLS;*ESE?;*SRE?\n") == b"60;4\n"
    say(session, b"BOGUS\n*RST\n")
    assert errors(session) == [b"-113"]


def test_operation_complete_comes_when_the_work_is_done() -> None:
    bench, session = fresh()
    assert say(session, b"RUN;*OPC?;*ESE?\n") == b""
    assert session.waiting
    assert session.poll() == []
    bench.finish()
    assert b"".join(bytes(p) for p in session.poll()) == b"1;0\n"
    say(session, b"RUN;*OPC\n")
    assert say(session, b"*ESR?\n") == b"0\n"
    bench.finish()
    assert say(session, b"*ESR?\n") == b"1\n"


def test_a_message_before_the_reply_has_come_interrupts_the_query() -> None:
    # IEEE 488.2, 6.3.2.3
    bench, session = fresh()
    say(session, b"RUN;*OPC?\n")
    assert say(session, b"*ESE?\n") == b"0\n"
    bench.finish()
    assert not session.waiting
    assert errors(session) == [b"-410"]


def test_wait_to_continue_holds_up_what_follows_in_this_message_and_the_next() -> None:
    # IEEE 488.2, 12.5.1
    bench, session = fresh()
    assert say(session, b"RUN;*WAI;*ESE?\n*SRE?\n") == b""
    bench.finish()
    assert b"".join(bytes(p) for p in session.poll()) == b"0\n0\n"
    assert errors(session) == []


def test_a_client_that_leaves_in_the_middle_of_a_query_left_it_unterminated() -> None:
    # IEEE 488.2, 6.3.2.2
    bench, session = fresh()
    say(session, b"*IDN?")
    session.end()
    assert errors(ScpiSession(bench)) == [b"-420"]


def test_a_message_beyond_the_input_buffer_is_dropped_and_the_next_is_heard() -> None:
    for chunk in (INPUT_LIMIT * 2, 1000):
        _, session = fresh()
        message = b"FREQ 3" + b" " * INPUT_LIMIT + b"\nFREQ?\n"
        assert say(session, *(message[i : i + chunk] for i in range(0, len(message), chunk))) == b"1.0\n"
        assert errors(session) == [b"-363"]


def test_a_block_that_claims_to_be_endless_does_not_swallow_what_follows() -> None:
    _, session = fresh()
    assert say(session, b"MODE #9999999999abc\nMODE?\n") == b"SLOW\n"
    assert errors(session) == [b"-161"]


def test_two_clients_share_the_instrument_but_not_the_conversation() -> None:
    bench, one = fresh()
    two = ScpiSession(bench)
    assert say(one, b"FREQ 12;FR") == b""
    assert say(two, b"FREQ 9;FREQ?\n") == b"9.0\n"
    assert say(one, b"EQ?\n") == b"12.0\n"


PIECES = st.sampled_from(
    [b"*IDN?", b";", b"\n", b":", b"CHAN2:RANG ", b"3", b"?", b"FREQ", b" ", b",", b"#", b"15", b'"', b"'", b"a",
     b"DATA?", b"*OPC?", b"RUN", b"*WAI", b"*RST", b"\r", b"(", b")", b"-", b"1E", b"MV", b"\x00",
     b"#3300", b"\xff"]
)  # fmt: skip
GARBAGE = st.one_of(st.binary(max_size=60), st.lists(PIECES, max_size=25).map(b"".join))


@given(GARBAGE, st.data())
def test_however_the_bytes_are_split_the_replies_are_the_same(message: bytes, data: st.DataObject) -> None:
    whole_bench, whole = fresh()
    split_bench, split = fresh()
    cuts = sorted(data.draw(st.lists(st.integers(0, len(message)), max_size=8)))
    chunks = [message[a:b] for a, b in zip([0, *cuts], [*cuts, len(message)], strict=True)]
    assert say(whole, message) == say(split, *filter(None, chunks))
    assert whole.waiting == split.waiting
    whole_bench.finish()
    split_bench.finish()
    assert [bytes(p) for p in whole.poll()] == [bytes(p) for p in split.poll()]
    whole.end()
    split.end()
    assert errors(ScpiSession(whole_bench)) == errors(ScpiSession(split_bench))
    assert whole_bench.rate == split_bench.rate


@given(st.lists(GARBAGE, max_size=5))
def test_garbage_never_takes_the_instrument_down(chunks: list[bytes]) -> None:
    bench, session = fresh()
    say(session, *chunks)
    session.end()
    assert say(ScpiSession(bench), b"*CLS\n*RST\n*IDN?\n") == b"QUIET BASIN,TEST,0001,1.0\n"


@given(st.floats(1, 1e9))
def test_a_number_comes_back_as_it_was_sent(value: float) -> None:
    _, session = fresh()
    assert float(say(session, b"FREQ %s;FREQ?\n" % repr(value).encode())) == value
