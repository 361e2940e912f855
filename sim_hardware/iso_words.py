"""Words of ISO 6983: letters with numbers."""

from __future__ import annotations

import re

BAD_WORD, BAD_NUMBER, LOCKED, BEYOND_TRAVEL, UNSUPPORTED = 1, 2, 9, 15, 20

_WORD = re.compile(r"([A-Z])([+-]?(?:\d+\.?\d*|\.\d+))?")
_COMMENT = re.compile(r"\([^)]*\)")


class Refused(Exception):
    """The line is answered with `error:<number>`."""

    def __init__(self, number: int) -> None:
        super().__init__(str(number))
        self.number = number


def words_of(line: str) -> dict[str, list[float]]:
    """Letters and their numbers; ISO 6983 lets blanks stand anywhere and comments stand in parentheses.

    Raises `Refused` for what is no word, or has no number.
    """
    text = "".join(_COMMENT.sub("", line).upper().split()).removeprefix("%")
    words: dict[str, list[float]] = {}
    at = 0
    while at < len(text):
        match = _WORD.match(text, at)
        if match is None:
            raise Refused(BAD_WORD)
        if match.group(2) is None or (match.end() < len(text) and text[match.end()] in "+-."):
            raise Refused(BAD_NUMBER)
        words.setdefault(match.group(1), []).append(float(match.group(2)))
        at = match.end()
    if any(len(numbers) > 1 for letter, numbers in words.items() if letter != "G"):
        raise Refused(BAD_WORD)
    words.pop("N", None)  # line numbers are for people
    return words
