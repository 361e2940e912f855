"""SCPI-1999 volume 2, chapter 21.8: the error numbers that the simulated instruments use, and their texts."""

from __future__ import annotations

TEXTS: dict[int, str] = {
    0: "No error",
    -101: "Invalid character",
    -102: "Syntax error",
    -103: "Invalid separator",
    -104: "Data type error",
    -108: "Parameter not allowed",
    -109: "Missing parameter",
    -112: "Program mnemonic too long",
    -113: "Undefined header",
    -114: "Header suffix out of range",
    -121: "Invalid character in number",
    -123: "Exponent too large",
    -124: "Too many digits",
    -128: "Numeric data not allowed",
    -131: "Invalid suffix",
    -138: "Suffix not allowed",
    -141: "Invalid character data",
    -148: "Character data not allowed",
    -151: "Invalid string data",
    -158: "String data not allowed",
    -161: "Invalid block data",
    -168: "Block data not allowed",
    -171: "Invalid expression",
    -178: "Expression data not allowed",
    -200: "Execution error",
    -213: "Init ignored",
    -221: "Settings conflict",
    -222: "Data out of range",
    -224: "Illegal parameter value",
    -230: "Data corrupt or stale",
    -300: "Device-specific error",
    -350: "Queue overflow",
    -363: "Input buffer overrun",
    -410: "Query INTERRUPTED",
    -420: "Query UNTERMINATED",
    -440: "Query UNTERMINATED after indefinite response",
}


class ScpiError(Exception):
    """Goes on the error queue of the instrument; never leaves the process.

    Attributes:
        number: one of `TEXTS`.
    """

    def __init__(self, number: int, detail: str = "") -> None:
        super().__init__(f"{number} {TEXTS[number]} {detail}".rstrip())
        self.number = number
        self.detail = detail

    @property
    def is_command_error(self) -> bool:
        """The message itself was wrong (-1xx): what follows in it is not trusted."""
        return -199 <= self.number <= -100

    def entry(self) -> bytes:
        """As `SYSTem:ERRor?` answers it: number, text in quotes, device-dependent detail after a semicolon."""
        text = TEXTS[self.number] + (f";{self.detail}" if self.detail else "")
        printable = "".join(c if " " <= c <= "~" else "." for c in text)[:255]
        return b'%d,"%s"' % (self.number, printable.replace('"', '""').encode("ascii"))
