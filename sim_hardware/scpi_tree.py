"""Headers of SCPI commands: the tree of mnemonics, long and short forms, numeric suffixes, and the path rules."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Any

from sim_hardware.scpi_data import Param, forms, numeric_suffix
from sim_hardware.scpi_errors import ScpiError
from sim_hardware.scpi_syntax import Unit

_OPTIONAL = re.compile(r"\[([^\]]*)\]")
_NUMBERED = re.compile(r"(\w+)<(\d+)>")


@dataclass(frozen=True)
class Command:
    """What one header does.

    Args:
        pattern: header like `SYSTem:ERRor[:NEXT]?` or `CHANnel<4>:RANGe`: `<4>` takes a numeric suffix of 1 to 4,
            brackets may be left out, a question mark makes it a query.
        call: gets the numeric suffixes and then the parameters.
    """

    pattern: str
    call: Callable[..., Any]
    params: tuple[Param, ...] = ()

    def values(self, unit: Unit) -> list[Any]:
        """The parameters of a unit; raises -108 or -109 for too many or too few, or what a parameter raises."""
        if len(unit.data) != len(self.params):
            raise ScpiError(-108 if len(unit.data) > len(self.params) else -109)
        return [param.read(datum) for param, datum in zip(self.params, unit.data, strict=True)]


@dataclass
class Node:
    """A place in the tree."""

    plain: dict[bytes, Node] = field(default_factory=dict)
    numbered: dict[bytes, tuple[Node, int]] = field(default_factory=dict)
    command: Command | None = None
    query: Command | None = None

    def grow(self, mnemonic: str) -> Node:
        """The child of this name, made when it is not there."""
        match = _NUMBERED.fullmatch(mnemonic)
        short, long = forms(match.group(1) if match else mnemonic)
        if match:
            entry = self.numbered.get(long) or (Node(), int(match.group(2)))
            self.numbered[short] = self.numbered[long] = entry
            return entry[0]
        node = self.plain.get(long) or Node()
        self.plain[short] = self.plain[long] = node
        return node

    def step(self, mnemonic: bytes) -> tuple[Node, tuple[int, ...]]:
        """The child of this name and its numeric suffix, if it takes one; raises -113 or -114."""
        node = self.plain.get(mnemonic)
        if node is not None:
            return node, ()
        name = mnemonic.rstrip(b"0123456789")
        entry = self.numbered.get(name)
        if entry is None:
            raise ScpiError(-113)
        return entry[0], (numeric_suffix(mnemonic[len(name) :], entry[1]),)


@dataclass(frozen=True)
class Path:
    """Where a header without leading colon is looked up."""

    node: Node
    suffixes: tuple[int, ...] = ()


class Tree:
    """All headers of an instrument."""

    def __init__(self) -> None:
        self._root = Node()
        self._common: dict[bytes, Command] = {}

    @property
    def top(self) -> Path:
        """Where every message begins."""
        return Path(self._root)

    def add(self, command: Command) -> None:
        """Make a command known, in all its forms."""
        if command.pattern.startswith("*"):
            self._common[command.pattern.encode()] = command
            return
        for header in _spellings(command.pattern.rstrip("?")):
            node = self._root
            for mnemonic in header.strip(":").split(":"):
                node = node.grow(mnemonic)
            if command.pattern.endswith("?"):
                node.query = command
            else:
                node.command = command

    def find(self, unit: Unit, path: Path) -> tuple[Command, tuple[int, ...], Path]:
        """The command of a unit, its numeric suffixes, and the path for the unit after it.

        SCPI-1999 volume 1, 6.2.4: the path is that of the last header without its last mnemonic; a leading colon
        starts at the root; common commands leave the path alone. Raises -113 or -114.
        """
        if unit.header.startswith(b"*"):
            command = self._common.get(unit.header + (b"?" if unit.query else b""))
            if command is None:
                raise ScpiError(-113)
            return command, (), path
        if unit.header.startswith(b":"):
            path = self.top
        mnemonics = unit.header.strip(b":").split(b":")
        for mnemonic in mnemonics[:-1]:
            node, suffix = path.node.step(mnemonic)
            path = Path(node, path.suffixes + suffix)
        node, suffix = path.node.step(mnemonics[-1])
        command = node.query if unit.query else node.command
        if command is None:
            raise ScpiError(-113)
        return command, path.suffixes + suffix, path


def _spellings(pattern: str) -> Iterator[str]:
    """The header with and without each part in brackets."""
    match = _OPTIONAL.search(pattern)
    if match is None:
        yield pattern
        return
    for middle in ("", match.group(1)):
        yield from _spellings(pattern[: match.start()] + middle + pattern[match.end() :])
