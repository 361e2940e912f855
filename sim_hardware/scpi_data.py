"""Parameters of SCPI commands: what a data element may be, and the Python value it becomes."""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from math import isfinite
from typing import Any, Protocol

from sim_hardware.scpi_errors import ScpiError
from sim_hardware.scpi_syntax import Datum

# SCPI-1999 volume 1, 7.3 / IEEE 488.2, 7.7.3: multipliers; MHZ alone is mega, not milli
_MULTIPLIERS = {"": 0, "G": 9, "MA": 6, "K": 3, "M": -3, "U": -6, "N": -9, "P": -12}  # powers of ten
_NUMBER = re.compile(r"([+-]?(?:\d+\.?\d*|\.\d+))(?:[eE]([+-]?\d+))?(.*)")
_FORM = re.compile(r"([A-Z][A-Z0-9_]*)([a-z0-9_]*)")


class Param(Protocol):
    """Turns one data element into a value, or raises `ScpiError`."""

    def read(self, datum: Datum) -> Any:
        """The value."""
        ...


def forms(mnemonic: str) -> tuple[bytes, bytes]:
    """Short and long form, upper case, of a mnemonic written like `CHANnel`."""
    match = _FORM.fullmatch(mnemonic)
    if match is None:
        raise ValueError(f"{mnemonic!r} is no mnemonic")
    return match.group(1).encode(), mnemonic.upper().encode()


def numeric_suffix(digits: bytes, highest: int) -> int:
    """The number at the end of a mnemonic, 1 when there is none; raises -114 above `highest`."""
    number = int(digits or b"1") if len(digits) <= 4 else 0
    if not 1 <= number <= highest:
        raise ScpiError(-114)
    return number


def _unit_powers(unit: str) -> dict[str, int]:
    powers = {prefix + unit: power for prefix, power in _MULTIPLIERS.items()}
    if unit == "HZ":
        powers["MHZ"] = 6
    return powers


def _refuse(datum: Datum) -> ScpiError:
    numbers = {"word": -148, "string": -158, "block": -168, "expression": -178, "number": -128, "nondecimal": -128}
    return ScpiError(numbers[datum.kind])


def _number(datum: Datum, powers: Mapping[str, int]) -> float:
    if len(datum.value) > 255:
        raise ScpiError(-124)
    if datum.kind == "nondecimal":
        text = datum.value.decode("ascii")
        return float(int(text[2:], {"H": 16, "Q": 8, "B": 2}[text[1].upper()]))
    if datum.kind != "number":
        raise _refuse(datum)
    # a control character is white space as well as a blank is
    text = "".join(c for c in datum.value.decode("ascii") if c > " ")
    match = _NUMBER.fullmatch(text)
    if match is None:
        raise ScpiError(-121)
    mantissa, exponent, suffix = match.group(1), match.group(2) or "0", match.group(3).upper()
    if suffix and not powers:
        raise ScpiError(-138)
    if suffix and suffix not in powers:
        raise ScpiError(-131)
    # by the exponent and not by a factor: 12.5 US is then exactly 12.5E-6
    value = float(f"{mantissa}E{int(exponent) + (powers[suffix] if suffix else 0)}")
    if not isfinite(value):
        raise ScpiError(-123)
    return value


class Real:
    """A decimal number with an optional unit, within `low` to `high` in the base unit; MINimum and MAXimum."""

    def __init__(self, low: float, high: float, *units: str) -> None:
        self.low, self.high = low, high
        self._powers = {name: power for unit in units for name, power in _unit_powers(unit).items()}

    def read(self, datum: Datum) -> float:
        """Raises -222 outside the limits."""
        if datum.kind == "word" and datum.value in (b"MIN", b"MINIMUM"):
            return self.low
        if datum.kind == "word" and datum.value in (b"MAX", b"MAXIMUM"):
            return self.high
        value = _number(datum, self._powers)
        if not self.low <= value <= self.high:
            raise ScpiError(-222)
        return value


class Integer(Real):
    """A number that is rounded to a whole one (IEEE 488.2, 7.7.2.4)."""

    def __init__(self, low: int, high: int) -> None:
        super().__init__(low - 0.5, high + 0.499_999)
        self._ends = (low, high)

    def read(self, datum: Datum) -> int:
        """Raises -222 outside the limits."""
        low, high = self._ends
        return min(max(round(super().read(datum)), low), high)


class Boolean:
    """ON, OFF or a number, which is ON unless it rounds to zero (SCPI-1999 volume 1, 7.3)."""

    def read(self, datum: Datum) -> bool:
        """Raises -224 for another word."""
        if datum.kind == "word":
            if datum.value not in (b"ON", b"OFF"):
                raise ScpiError(-224)
            return datum.value == b"ON"
        return round(_number(datum, {})) != 0


class Choice:
    """One word of several, in long or short form. The value is the short form, as a query answers it."""

    def __init__(self, *words: str) -> None:
        self._words: dict[bytes, str] = {}
        for word in words:
            short, long = forms(word)
            self._words[short] = self._words[long] = short.decode()

    def read(self, datum: Datum) -> str:
        """Raises -224 for another word."""
        if datum.kind != "word":
            raise _refuse(datum)
        if datum.value not in self._words:
            raise ScpiError(-224)
        return self._words[datum.value]


@dataclass(frozen=True)
class Numbered:
    """A word with a number at its end, `CHANnel<n>`; the value is the number."""

    word: str
    highest: int

    def read(self, datum: Datum) -> int:
        """Raises -224 for another word, -114 for a number that is not there."""
        if datum.kind != "word":
            raise _refuse(datum)
        name = datum.value.rstrip(b"0123456789")
        if name not in forms(self.word):
            raise ScpiError(-224)
        return numeric_suffix(datum.value[len(name) :], self.highest)


def nr3(value: float) -> bytes:
    """The shortest text that reads back as the same float."""
    return repr(float(value)).upper().encode()
