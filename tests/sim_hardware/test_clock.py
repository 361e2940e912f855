from __future__ import annotations

import pytest

from sim_hardware.clock import Timeline
from tests.sim_hardware.talking import HandClock


def test_time_runs_by_the_factor() -> None:
    clock = HandClock()
    timeline = Timeline(20.0, clock)
    clock.seconds = 0.5
    assert timeline.now() == pytest.approx(10.0)


def test_what_is_due_runs_in_order_and_sees_the_time_for_which_it_was_due() -> None:
    clock = HandClock()
    timeline = Timeline(1.0, clock)
    seen: list[tuple[str, float]] = []
    timeline.schedule(2.0, lambda: seen.append(("late", timeline.now())))
    timeline.schedule(1.0, lambda: seen.append(("early", timeline.now())))
    timeline.schedule(9.0, lambda: seen.append(("not yet", timeline.now())))
    cancelled = timeline.schedule(1.5, lambda: seen.append(("cancelled", 0.0)))
    cancelled.cancel()
    clock.seconds = 3.0
    assert timeline.run_due()
    assert seen == [("early", 1.0), ("late", 2.0)]
    assert timeline.now() == 3.0
    assert timeline.real_seconds_to_next() == pytest.approx(6.0)


def test_at_once_time_jumps_from_one_due_thing_to_the_next() -> None:
    timeline = Timeline(None)
    seen: list[float] = []

    def first() -> None:
        seen.append(timeline.now())
        timeline.schedule(timeline.now() + 5.0, lambda: seen.append(timeline.now()))

    timeline.schedule(100.0, first)
    assert timeline.now() == 0.0
    assert timeline.run_due()
    assert seen == [100.0, 105.0]
    assert timeline.now() == 105.0
    assert not timeline.run_due()


def test_a_speed_that_is_not_above_zero_is_refused() -> None:
    with pytest.raises(ValueError, match="above 0"):
        Timeline(0.0)
