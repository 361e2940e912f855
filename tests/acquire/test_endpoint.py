"""Where a daemon answers, and how clients find it."""

from __future__ import annotations

from pathlib import Path

import pytest

from acquire.endpoint import NoEndpoint, checked, default_endpoint, events_endpoint, runtime_folder


def test_a_machine_without_a_runtime_folder_is_no_reason_to_warn(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.delenv("XDG_RUNTIME_DIR", raising=False)
    assert runtime_folder().is_absolute()  # warnings are errors here
    assert default_endpoint("demo-tank").endswith("/demo-tank.socket")


def test_the_users_runtime_folder_is_used(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.setenv("XDG_RUNTIME_DIR", str(tmp_path))
    assert runtime_folder() == tmp_path / "truepivot"


@pytest.mark.parametrize("endpoint", ["tcp://127.0.0.1:5555", "tcp://localhost:5555", "ipc:///tmp/x"])
def test_the_events_have_a_socket_of_their_own(endpoint: str) -> None:
    assert events_endpoint(endpoint) != endpoint
    assert checked(endpoint) == endpoint


@pytest.mark.parametrize(
    ("endpoint", "told"),
    [
        ("tcp://0.0.0.0:5555", "this machine only"),
        ("tcp://192.0.2.1:5555", "this machine only"),  # an address of documentation, RFC 5737
        ("tcp://127.0.0.1", "is no endpoint; allowed: ipc://PATH or tcp://127.0.0.1:PORT"),
        ("tcp://127.0.0.1:abc", "is no endpoint"),
        ("tcp://127.0.0.1:70000", "is no endpoint"),
        ("tcp://127.0.0.1:65535", "is no endpoint"),  # the events would have no port
        ("udp://127.0.0.1:5", "is no endpoint"),
        ("demo-tank", "is no endpoint"),
        ("ipc:///tmp/" + "x" * 90, "too long for a socket"),
    ],
)
def test_an_endpoint_that_cannot_be_used_or_is_open_to_others_is_refused(endpoint: str, told: str) -> None:
    with pytest.raises(NoEndpoint, match=told):
        checked(endpoint)
