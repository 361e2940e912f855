import math
from collections.abc import Iterator

import pytest
from msgspec.structs import replace
from rich.console import Console

from acquire.live.canvas import Canvas
from acquire.live.lines import told
from acquire.live.screen import whole
from acquire.live.state import POINTS_DRAWN, ViewState
from acquire.messages import (
    Event,
    FindingChanged,
    PointSeen,
    Progress,
    ScanStarted,
    StateChanged,
    WaveformSeen,
)

STARTED = ScanStarted(
    name="a-scan",
    scan_type="rotation",
    store="a.zarr",
    planned_points=4,
    frequencies_hz=[1e6, 2e6],
    axes_shown=["theta"],
    sensor="s",
    source="t",
)


def point(index: int, theta_deg: float, amplitudes: list[float], reference: bool = False, x: float = 0.0) -> PointSeen:
    return PointSeen(
        index=index,
        reference=reference,
        plane=0,
        pose=(x, 0.0, 0.1, math.radians(theta_deg), 0.0),
        time_s=float(index),
        temperature_c=20.0,
        amplitudes_v=amplitudes,
        peak_v=amplitudes[0],
        trough_v=-amplitudes[0],
        square_integral_v2s=1.0,
        range_use=0.7,
    )


def finding(action: str, severity: str = "caution") -> FindingChanged:
    return FindingChanged(
        action=action,  # type: ignore[arg-type]
        at_point=3,
        finding={
            "code": "pivot.offset",
            "severity": severity,
            "summary": "off by 0.3 mm",
            "consequence": "reads 0.9 dB low",
            "remedy": "move it 0.3 mm",
        },
    )


def drawn(state: ViewState, width: int = 120, height: int = 40) -> str:
    console = Console(width=width, height=height, record=True, file=None, force_terminal=False, quiet=False)
    with console.capture() as captured:
        console.print(whole(state, width, height), height=height)
    return captured.get()


def test_a_rising_line_fills_the_diagonal_of_the_canvas() -> None:
    canvas = Canvas(width=2, height=1, x_low=0, x_high=3, y_low=0, y_high=3)
    canvas.points([0, 1, 2, 3], [0, 1, 2, 3], "")
    # dots (column, row from below): braille bits 7, 3 | 5, 4 by the block's own numbering
    assert canvas.lines()[0].plain == chr(0x2800 + 0x40 + 0x20) + chr(0x2800 + 0x02 + 0x08)


def test_points_outside_the_box_stand_on_its_edge_and_nan_is_left_out() -> None:
    canvas = Canvas(width=1, height=1, x_low=0, x_high=1, y_low=0, y_high=1)
    canvas.points([0.0, 1.0], [99.0, math.nan], "")
    assert canvas.lines()[0].plain == chr(0x2800 + 0x01)


def test_pattern_is_in_db_against_the_reference_points() -> None:
    state = ViewState()
    for event in (STARTED, point(0, 0, [2.0, 1.0], reference=True), point(1, 30, [1.0, 0.1])):
        state.take(event)
    angles, levels = state.pattern(1)
    assert angles == pytest.approx([0.0, math.radians(30)])
    assert levels == pytest.approx([0.0, -20.0])


def test_a_cleared_finding_disappears_and_a_new_scan_starts_from_nothing() -> None:
    state = ViewState()
    for event in (STARTED, finding("raised"), point(0, 0, [1.0, 1.0])):
        state.take(event)
    assert "pivot.offset" in state.findings
    state.take(finding("cleared"))
    assert state.findings == {}
    state.take(STARTED)
    assert state.points == []


def test_drawing_thins_a_long_scan() -> None:
    state = ViewState()
    state.take(STARTED)
    for i in range(3 * POINTS_DRAWN):
        state.take(point(i, 0, [1.0, 1.0]))
    assert len(state.shown()) <= POINTS_DRAWN


@pytest.mark.parametrize("size", [(80, 24), (120, 40), (200, 60)])
def test_the_screen_shows_what_is_known_and_fits(size: tuple[int, int]) -> None:
    state = ViewState()
    waveform = WaveformSeen(
        index=1,
        start_s=1e-6,
        interval_s=1e-7,
        low_v=[-1.0, 0.0],
        high_v=[0.0, 1.0],
        spectrum_step_hz=1e6,
        spectrum_db=[-60.0, 0.0, -30.0],
    )
    for event in (
        STARTED,
        StateChanged(state="running"),
        point(0, 0, [2.0, 1.0], reference=True),
        point(1, 30, [1.0, 0.1]),
        waveform,
        finding("raised"),
        Progress(done=2, planned=4, elapsed_s=61.0, left_s=59.6),
    ):
        state.take(event)
    text = drawn(state, *size)
    assert len(text.splitlines()) <= size[1]
    for piece in ("a-scan", "2 of 4 points", "1:01 gone", "1:00 left", "pivot.offset", "MHz"):
        assert piece in text


def test_an_empty_view_can_be_drawn() -> None:
    assert "no scan yet" in drawn(ViewState())


def test_a_raster_is_drawn_as_a_map_with_its_extent() -> None:
    state = ViewState()
    state.take(
        STARTED.__class__(**{**{f: getattr(STARTED, f) for f in STARTED.__struct_fields__}, "scan_type": "raster"})
    )
    for i in range(9):
        at = point(i, 0, [1.0, 1.0], x=(i % 3 - 1) * 1e-3)
        state.take(replace(at, pose=(at.pose[0], (i // 3) * 1e-3, 0.1, 0.0, 0.0)))
    assert "x -1.00 to 1.00 mm, y 0.00 to 2.00 mm" in drawn(state)


def story() -> Iterator[Event]:
    yield STARTED
    yield StateChanged(state="running")
    for i in range(4):
        yield Progress(done=i + 1, planned=4, elapsed_s=i, left_s=3 - i)
    yield finding("raised")
    yield StateChanged(state="sealed", reason="all points stored")
    raise AssertionError("read past the end of the scan")


def test_plain_lines_tell_the_same_story_and_end_with_the_scan() -> None:
    lines = list(told(story()))
    assert lines[0] == "a-scan: 4 points, stored in a.zarr"
    assert lines[-1] == "sealed: all points stored"
    assert any("pivot.offset raised at point 3: off by 0.3 mm" in line for line in lines)
    assert any("do: move it 0.3 mm" in line for line in lines)
