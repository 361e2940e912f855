"""Curves on a character grid: each cell holds 2 x 4 dots of the Unicode braille patterns."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from math import isfinite

from rich.text import Text

# bit of the dot in column c (0, 1) and row r (0 to 3) of a braille cell (Unicode block U+2800)
DOT = ((0x01, 0x02, 0x04, 0x40), (0x08, 0x10, 0x20, 0x80))


@dataclass
class Canvas:
    """A plot area of `width` x `height` characters over the box `x_low..x_high`, `y_low..y_high`."""

    width: int
    height: int
    x_low: float
    x_high: float
    y_low: float
    y_high: float
    cells: dict[tuple[int, int], tuple[int, str]] = field(default_factory=dict)

    def _dot(self, column: int, row: int, style: str) -> None:
        if 0 <= column < 2 * self.width and 0 <= row < 4 * self.height:
            key = (row // 4, column // 2)
            bits, _ = self.cells.get(key, (0, style))
            self.cells[key] = (bits | DOT[column % 2][row % 4], style)

    def _place(self, x: float, y: float) -> tuple[int, int]:
        column = (x - self.x_low) / (self.x_high - self.x_low) * (2 * self.width - 1)
        row = (self.y_high - y) / (self.y_high - self.y_low) * (4 * self.height - 1)
        return round(column), round(row)

    def points(self, xs: Sequence[float], ys: Sequence[float], style: str) -> None:
        """Single dots; what lies above or below the box stands on its edge, what is not a number is left out."""
        for x, y in zip(xs, ys, strict=True):
            if isfinite(x) and isfinite(y):
                self._dot(*self._place(x, min(max(y, self.y_low), self.y_high)), style)

    def bars(self, xs: Sequence[float], lows: Sequence[float], highs: Sequence[float], style: str) -> None:
        """A vertical stroke from low to high at each x, so that a thinned waveform keeps its peaks."""
        for x, low, high in zip(xs, lows, highs, strict=True):
            if not (isfinite(low) and isfinite(high)):
                continue
            column, top = self._place(x, min(high, self.y_high))
            _, bottom = self._place(x, max(low, self.y_low))
            for row in range(top, bottom + 1):
                self._dot(column, row, style)

    def lines(self) -> list[Text]:
        """The rows of the picture, top first."""
        rows = []
        for r in range(self.height):
            line = Text(no_wrap=True)
            for c in range(self.width):
                bits, style = self.cells.get((r, c), (0, ""))
                line.append(chr(0x2800 + bits) if bits else " ", style)
            rows.append(line)
        return rows


def framed(canvas: Canvas, y_labels: tuple[str, str], x_labels: tuple[str, str, str]) -> Text:
    """The canvas with labels: top and bottom of the y axis, left, middle and right of the x axis."""
    margin = max(len(label) for label in y_labels)
    rows = canvas.lines()
    out = Text(no_wrap=True)
    for i, row in enumerate(rows):
        label = y_labels[0] if i == 0 else y_labels[1] if i == len(rows) - 1 else ""
        out.append(f"{label:>{margin}} ", "dim")
        out.append("│", "dim")
        out.append_text(row)
        out.append("\n")
    left, middle, right = x_labels
    free = canvas.width - len(left) - len(middle) - len(right)
    gap = " " * max(1, free // 2)
    rest = " " * max(1, free - len(gap))
    out.append(" " * (margin + 2) + left + gap + middle + rest + right, "dim")
    return out
