"""Talking to a conversation without a transport, and a tank whose voltage is known."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from sim_hardware.capture import CaptureRequest
from sim_hardware.clock import Timeline
from sim_hardware.conversation import Conversation


def say(conversation: Conversation, *chunks: bytes) -> bytes:
    """All that is sent back for these chunks."""
    return b"".join(bytes(piece) for chunk in chunks for piece in conversation.feed(chunk))


def byte_by_byte(conversation: Conversation, message: bytes) -> bytes:
    return say(conversation, *(message[i : i + 1] for i in range(len(message))))


class HandClock:
    """Real time that a test sets."""

    def __init__(self) -> None:
        self.seconds = 0.0

    def __call__(self) -> float:
        return self.seconds

    def timeline(self) -> Timeline:
        return Timeline(1.0, self)


class KnownTank:
    """Gives the voltage of a function of time after the trigger, and keeps what it was asked."""

    def __init__(self, voltage: Callable[[NDArray[np.float64]], NDArray[np.float64]]) -> None:
        self._voltage = voltage
        self.requests: list[CaptureRequest] = []

    def voltage(self, request: CaptureRequest) -> NDArray[np.float32]:
        self.requests.append(request)
        t = request.start_s + np.arange(request.points) / request.sample_rate_hz
        return self._voltage(t).astype(np.float32)

    def thermometer_c(self, time_s: float) -> float:
        return 20.0 + time_s / 1000
