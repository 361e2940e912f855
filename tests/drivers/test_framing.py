from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from drivers.errors import ProtocolError
from drivers.framing import LONGEST_LINE, Inbox


def taken(pieces: list[bytes]) -> list[str]:
    inbox, lines = Inbox(), []
    for piece in pieces:
        inbox.feed(piece)
        while (line := inbox.line()) is not None:
            lines.append(line)
    return lines


def split(data: bytes, cuts: list[int]) -> list[bytes]:
    edges = [0, *sorted(c % (len(data) + 1) for c in cuts), len(data)]
    return [data[a:b] for a, b in pairwise(edges)]


@given(
    lines=st.lists(st.text(st.characters(min_codepoint=32, max_codepoint=126)), max_size=8),
    cuts=st.lists(st.integers(0, 500), max_size=12),
    end=st.sampled_from(["\n", "\r\n"]),
)
def test_however_the_bytes_are_split_the_lines_are_the_same(lines: list[str], cuts: list[int], end: str) -> None:
    data = "".join(line + end for line in lines).encode()
    assert taken(split(data, cuts)) == lines
    assert taken([bytes([b]) for b in data]) == lines


@given(body=st.binary(max_size=300), cuts=st.lists(st.integers(0, 400), max_size=6))
def test_however_a_block_is_split_its_length_is_read_once_and_its_body_left(body: bytes, cuts: list[int]) -> None:
    digits = str(len(body))
    data = f"#{len(digits)}{digits}".encode() + body + b"\n"  # IEEE 488.2, 8.7.9 (clause from memory)
    inbox = Inbox()
    lengths: list[int] = []
    for piece in split(data, cuts):
        inbox.feed(piece)
        if not lengths and (n := inbox.block_length()) is not None:
            lengths.append(n)
    assert lengths == [len(body)]
    assert inbox.take(len(body)) == body
    assert inbox.line() == ""


def test_what_is_not_whole_is_not_taken() -> None:
    inbox = Inbox()
    inbox.feed(b"half a li")
    assert inbox.line() is None
    inbox.clear()
    inbox.feed(b"#4100")
    assert inbox.block_length() is None


@pytest.mark.parametrize(
    ("head", "words"),
    [
        (b'-113,"no"\n', "begins with"),
        (b"#0abc", "indefinite length"),
        (b"#x12", "cannot begin"),
        (b"#3a1b", "no number"),
    ],
)
def test_what_is_no_definite_block_is_said(head: bytes, words: str) -> None:
    inbox = Inbox()
    inbox.feed(head)
    with pytest.raises(ProtocolError, match=words):
        inbox.block_length()


def test_a_flood_without_an_end_of_line_is_refused() -> None:
    inbox = Inbox()
    inbox.feed(b"x" * (LONGEST_LINE + 1))
    with pytest.raises(ProtocolError, match="without an end of line"):
        inbox.line()
