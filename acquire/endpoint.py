"""Where a daemon answers: one socket for requests, one beside it for events. Never beyond this machine by default."""

from __future__ import annotations

import warnings
from pathlib import Path
from urllib.parse import SplitResult, urlsplit

from platformdirs import user_runtime_path

from acquire.ownership import is_held

LONGEST_PATH = 90  # a local socket's path must fit into some 100 bytes
LOOPBACK = ("127.0.0.1", "localhost", "::1")


class NoEndpoint(Exception):
    """No daemon is known, or the endpoint cannot be used; one line with the cure."""


def runtime_folder() -> Path:
    """Where local sockets of this user live."""
    with warnings.catch_warnings():
        # without XDG_RUNTIME_DIR a folder of this user's under /tmp does as well
        warnings.simplefilter("ignore")
        return user_runtime_path("truepivot")


def default_endpoint(bench: str) -> str:
    """The local socket of a bench."""
    return f"ipc://{runtime_folder() / bench}.socket"


def events_endpoint(endpoint: str) -> str:
    """The socket for events that belongs to one for requests."""
    if endpoint.startswith("ipc://"):
        return endpoint + "-events"
    host, _, port = endpoint.rpartition(":")
    return f"{host}:{int(port) + 1}"


def lock_of(endpoint: str) -> Path | None:
    """The file that the daemon at a local socket holds; a port on this machine needs none."""
    return Path(endpoint.removeprefix("ipc://") + ".lock") if endpoint.startswith("ipc://") else None


def checked(endpoint: str) -> str:
    """The endpoint, if a daemon may be bound to it.

    Raises:
        NoEndpoint: it is neither local nor loopback, or its path is too long.
    """
    if endpoint.startswith("ipc://"):
        path = events_endpoint(endpoint).removeprefix("ipc://")
        if len(path) > LONGEST_PATH:
            raise NoEndpoint(f"{path} is too long for a socket ({len(path)} characters, {LONGEST_PATH} allowed)")
        Path(path).parent.mkdir(parents=True, exist_ok=True)
        return endpoint
    parts = urlsplit(endpoint)
    if parts.scheme != "tcp" or not _has_port(parts):
        raise NoEndpoint(f"{endpoint!r} is no endpoint; allowed: ipc://PATH or tcp://127.0.0.1:PORT")
    if parts.hostname not in LOOPBACK:
        raise NoEndpoint(f"{endpoint!r}: the daemon answers on this machine only (tcp://127.0.0.1:PORT)")
    return endpoint


def _has_port(parts: SplitResult) -> bool:
    """A port, with room for the next one, where the events are."""
    try:
        return parts.port is not None and 0 < parts.port < 65_535
    except ValueError:  # no number, or beyond 65535
        return False


def only_endpoint() -> str:
    """The one daemon's that runs here; a socket that a killed one left behind does not count.

    Raises:
        NoEndpoint: there is none, or more than one.
    """
    sockets = sorted(runtime_folder().glob("*.socket"))
    found = [socket for socket in sockets if is_held(socket.with_name(socket.name + ".lock"))]
    if not found:
        raise NoEndpoint("no daemon runs here; start one with: truepivot serve BENCH")
    if len(found) > 1:
        names = ", ".join(p.stem for p in found)
        raise NoEndpoint(f"more than one daemon runs here ({names}): choose with --endpoint ipc://PATH")
    return f"ipc://{found[0]}"
