"""IEEE 488.2 chapter 7, listening: where a program message ends, its units, and their data elements.

Pure functions of bytes. A message ends at a newline that is not inside a definite-length block; so a stray
quotation mark cannot swallow the messages after it.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from typing import Literal

from sim_hardware.scpi_errors import ScpiError

INPUT_LIMIT = 65_536  # longest message, in bytes
SPACE = bytes(i for i in range(0x21) if i != 0x0A)  # IEEE 488.2, 7.4.1.2: white space

Kind = Literal["number", "word", "string", "block", "nondecimal", "expression"]


@dataclass(frozen=True)
class Datum:
    """One data element of a program message: text as sent, or the content of a string or block."""

    kind: Kind
    value: bytes


@dataclass(frozen=True)
class Unit:
    """One program message unit: header as sent (upper case, question mark apart) and its data."""

    header: bytes
    query: bool
    data: tuple[Datum, ...]


def block_end(text: bytes | bytearray, at: int) -> int | None:
    """Index after the definite-length block whose `#` stands at `at`.

    None: more bytes are needed to say. -1: this is no such block (7.7.6.2), or one longer than the input buffer.
    """
    if at + 1 >= len(text):
        return None
    digits = text[at + 1] - 0x30
    if not 1 <= digits <= 9:
        return -1
    length = bytes(text[at + 2 : at + 2 + digits])
    if length and not length.isdigit():
        return -1
    if len(length) < digits:
        return None
    end = at + 2 + digits + int(length)
    return end if end - at <= INPUT_LIMIT else -1


def message_end(text: bytes | bytearray) -> int | None:
    """Index of the newline that ends the first program message in `text`, or None when it is not there yet."""
    newline = text.find(b"\n")
    if newline < 0 or text.find(b"#", 0, newline) < 0:
        return newline if newline >= 0 else None
    at, quote = 0, 0
    while at < len(text):
        c = text[at]
        if c == 0x0A:
            return at
        if quote:
            quote = 0 if c == quote else quote
        elif c in b"\"'":
            quote = c
        elif c == 0x23 and _data_may_start(text, at):
            end = block_end(text, at)
            if end is None or end > len(text):
                return None
            if end > 0:
                at = end
                continue
        at += 1
    return None


def _data_may_start(text: bytes | bytearray, at: int) -> bool:
    return at > 0 and (text[at - 1] == 0x2C or text[at - 1] in SPACE)


_HEADER = re.compile(rb"(\*[A-Za-z][A-Za-z0-9_]*|:?[A-Za-z][A-Za-z0-9_]*(?::[A-Za-z][A-Za-z0-9_]*)*)(\?)?")
_NUMBER = re.compile(
    rb"[+-]?(?:\d+\.?\d*|\.\d+)(?:[\x00-\x09\x0b-\x20]*[Ee][\x00-\x09\x0b-\x20]*[+-]?\d+)?"
    rb"(?:[\x00-\x09\x0b-\x20]*/?[A-Za-z][A-Za-z0-9./-]*)?"
)
_WORD = re.compile(rb"[A-Za-z][A-Za-z0-9_]*")
_NONDECIMAL = re.compile(rb"#(?:[Hh][0-9A-Fa-f]+|[Qq][0-7]+|[Bb][01]+)")
_STRING = re.compile(rb"\"(?:[^\"]|\"\")*\"|'(?:[^']|'')*'")


def split(message: bytes) -> list[Unit | ScpiError]:
    """The units of one message without its newline. The first error ends the list: what follows is not trusted."""
    units: list[Unit | ScpiError] = []
    at = 0
    try:
        while True:
            at = _skip(message, at)
            if at >= len(message) and not units:
                return units  # an empty message is allowed
            unit, at = _unit(message, at)
            units.append(unit)
            if at >= len(message):
                return units
            at += 1  # the semicolon
    except ScpiError as error:
        units.append(error)
        return units


def _skip(text: bytes, at: int) -> int:
    while at < len(text) and text[at] in SPACE:
        at += 1
    return at


def _unit(text: bytes, at: int) -> tuple[Unit, int]:
    match = _HEADER.match(text, at)
    if match is None:
        raise ScpiError(-101 if at < len(text) and not 0x20 <= text[at] < 0x7F else -102)
    header, query = match.group(1).upper(), match.group(2) is not None
    if any(len(mnemonic) > 12 for mnemonic in header.strip(b":*").split(b":")):
        raise ScpiError(-112)
    after = match.end()
    at = _skip(text, after)
    data: list[Datum] = []
    if at < len(text) and text[at] != 0x3B:
        if at == after:
            raise ScpiError(-103 if 0x20 <= text[at] < 0x7F else -101)
        while True:
            datum, at = _datum(text, at)
            data.append(datum)
            at = _skip(text, at)
            if at >= len(text) or text[at] == 0x3B:
                break
            if text[at] != 0x2C:
                raise ScpiError(-103)
            at = _skip(text, at + 1)
    return Unit(header, query, tuple(data)), at


def _datum(text: bytes, at: int) -> tuple[Datum, int]:
    if at >= len(text):
        raise ScpiError(-109)
    first = text[at : at + 1]
    if first in (b'"', b"'"):
        match = _STRING.match(text, at)
        if match is None:
            raise ScpiError(-151)
        return Datum("string", match.group()[1:-1].replace(first * 2, first)), match.end()
    if first == b"#":
        return _hash_datum(text, at)
    if first == b"(":
        end = text.find(b")", at)
        if end < 0:
            raise ScpiError(-171)
        return Datum("expression", text[at + 1 : end]), end + 1
    match = _NUMBER.match(text, at)
    if match is not None:
        return Datum("number", match.group()), match.end()
    match = _WORD.match(text, at)
    if match is not None:
        return Datum("word", match.group().upper()), match.end()
    if first in b"+-." or first.isdigit():
        raise ScpiError(-121)
    raise ScpiError(-102 if 0x20 <= first[0] < 0x7F else -101)


def _hash_datum(text: bytes, at: int) -> tuple[Datum, int]:
    match = _NONDECIMAL.match(text, at)
    if match is not None:
        return Datum("nondecimal", match.group()), match.end()
    end = block_end(text, at)
    if end is None or not at < end <= len(text):
        raise ScpiError(-161)
    return Datum("block", text[at + 2 + text[at + 1] - 0x30 : end]), end
