"""The panels of the live view, each a pure function from the state to something rich can draw."""

from __future__ import annotations

from math import degrees, isfinite, log10

from rich.align import Align
from rich.console import Group, RenderableType
from rich.panel import Panel
from rich.progress_bar import ProgressBar
from rich.table import Table
from rich.text import Text

from acquire.live.canvas import Canvas, framed
from acquire.live.state import ViewState

CURVE_STYLES = ("bright_white", "cyan", "yellow", "magenta")
SEVERITY_STYLES = {"note": "cyan", "caution": "bold yellow", "halt": "bold red"}
DEPTH_DB = 30.0
SHADES = " ·:-=+*#%@"


def clock(seconds: float) -> str:
    """Minutes and seconds, or a dash when it cannot be told."""
    if not isfinite(seconds) or seconds < 0:
        return "–"
    minutes, rest = divmod(round(seconds), 60)
    return f"{minutes}:{rest:02d}"


def head(state: ViewState) -> RenderableType:
    """Name, state, progress and time left."""
    p = state.progress
    name = state.started.name if state.started else "no scan yet"
    line = Table.grid(expand=True, padding=(0, 1))
    line.add_column(no_wrap=True)
    line.add_column(ratio=1)
    line.add_column(no_wrap=True, justify="right")
    counted = f"{p.done} of {p.planned} points · {clock(p.elapsed_s)} gone, {clock(p.left_s)} left"
    line.add_row(
        Text.assemble((name, "bold"), "  ", (state.state, "reverse")),
        ProgressBar(total=max(p.planned, 1), completed=p.done, width=None),
        counted,
    )
    return line


def waveform(state: ViewState, width: int, height: int) -> RenderableType:
    """Latest waveform in volts against time after the trigger."""
    w = state.waveform
    if w is None or not w.low_v:
        return Panel(Align.center("waiting for the first waveform"), title="latest waveform")
    times = [(w.start_s + i * w.interval_s) * 1e6 for i in range(len(w.low_v))]
    top = max(max(map(abs, w.high_v)), max(map(abs, w.low_v)), 1e-9)
    canvas = Canvas(width, height, times[0], times[-1], -top, top)
    canvas.bars(times, w.low_v, w.high_v, "green")
    middle = "µs after the trigger"
    body = framed(
        canvas, (f"{top * 1e3:+.3g} mV", f"{-top * 1e3:+.3g} mV"), (f"{times[0]:.1f}", middle, f"{times[-1]:.1f}")
    )
    return Panel(body, title=f"latest waveform, point {w.index}")


def spectrum(state: ViewState, width: int, height: int) -> RenderableType:
    """Spectrum of the latest waveform in dB re its largest component."""
    w = state.waveform
    if w is None or not w.spectrum_db:
        return Panel(Align.center("waiting for the first spectrum"), title="spectrum")
    analysed = state.started.frequencies_hz[-1] if state.started else float("inf")
    shown = [db for i, db in enumerate(w.spectrum_db) if i * w.spectrum_step_hz <= 1.2 * analysed]
    frequencies = [i * w.spectrum_step_hz / 1e6 for i in range(len(shown))]
    canvas = Canvas(width, height, 0.0, max(frequencies[-1], 1e-9), -80.0, 0.0)
    canvas.bars(frequencies, [-80.0] * len(shown), shown, "green")
    return Panel(framed(canvas, ("0 dB", "-80 dB"), ("0", "MHz", f"{frequencies[-1]:.0f}")), title="spectrum")


def lines_shown(state: ViewState) -> list[int]:
    """Up to four comb lines spread over those that stand out at the reference points."""
    reference = state.reference_amplitudes()
    if not reference:
        return []
    strong = [i for i, a in enumerate(reference) if a > 0 and a > 1e-3 * max(reference)]
    step = max(1, (len(strong) - 1) // 3) if len(strong) > 1 else 1
    return strong[::step][: len(CURVE_STYLES)]


def pattern(state: ViewState, width: int, height: int) -> RenderableType:
    """Directional response as it grows: level against angle at up to four frequencies."""
    if state.started is None:
        return Panel(Align.center("waiting for points"), title="directional response")
    reach = max((abs(degrees(p.pose[3])) for p in state.shown()), default=0.0)
    reach = max(10.0, reach * 1.02)
    canvas = Canvas(width, height, -reach, reach, -DEPTH_DB, 3.0)
    legend = Text()
    for line, style in zip(lines_shown(state), CURVE_STYLES, strict=False):
        angles, levels = state.pattern(line)
        canvas.points([degrees(a) for a in angles], levels, style)
        legend.append(f" ●{state.started.frequencies_hz[line] / 1e6:.4g} MHz", style)
    body = framed(canvas, ("+3 dB", f"-{DEPTH_DB:.0f} dB"), (f"{-reach:.0f}°", "angle", f"{reach:.0f}°"))
    return Panel(Group(body, legend), title="directional response, dB re angle zero")


def raster_map(state: ViewState, width: int, height: int) -> RenderableType:
    """Peak pressure over the raster as it fills, in steps of 3 dB below the largest so far; or a profile."""
    points = [p for p in state.shown() if not p.reference]
    spans = (
        [(max(c) - min(c), i) for i, c in enumerate(zip(*(p.pose[:3] for p in points), strict=True))] if points else []
    )
    moving = [i for span, i in spans if span > 0]
    if not moving:
        return Panel(Align.center("waiting for points"), title="beam")
    largest = max(p.peak_v for p in points) or 1.0
    across = moving[0]
    xs = [p.pose[across] * 1e3 for p in points]
    if len(moving) == 1:
        canvas = Canvas(width, height, min(xs), max(xs), 0.0, 1.0)
        canvas.points(xs, [p.peak_v / largest for p in points], "bright_white")
        body: Text = framed(canvas, ("peak", "0"), (f"{min(xs):.2f}", f"{'xyz'[across]} / mm", f"{max(xs):.2f}"))
        return Panel(body, title="beam profile")
    ys = [p.pose[moving[1]] * 1e3 for p in points]
    grid = [[" "] * width for _ in range(height)]
    for x, y, p in zip(xs, ys, points, strict=True):
        column = round((x - min(xs)) / (max(xs) - min(xs)) * (width - 1))
        row = round((max(ys) - y) / (max(ys) - min(ys)) * (height - 1))
        level = 20 * log10(max(p.peak_v, 1e-12) / largest)
        grid[row][column] = SHADES[max(0, len(SHADES) - 1 + int(level // 3))]
    body = Text("\n".join("".join(r) for r in grid), no_wrap=True)
    spans_mm = (f"{'xyz'[a]} {min(v):.2f} to {max(v):.2f} mm" for a, v in ((across, xs), (moving[1], ys)))
    title = "beam: " + ", ".join(spans_mm)
    return Panel(body, title=title, subtitle="3 dB a shade")


def findings(state: ViewState) -> RenderableType:
    """Open findings, worst first, with what to do; then the latest notices."""
    order = {"halt": 0, "caution": 1, "note": 2}
    parts: list[RenderableType] = []
    for f in sorted(state.findings.values(), key=lambda f: (order[f["severity"]], f["code"])):
        parts.append(
            Text.assemble(
                (f"{f['severity']} ", SEVERITY_STYLES[f["severity"]]), (f["code"], "bold"), f"  {f['summary']}"
            )
        )
        if f["severity"] != "note":
            parts += [Text(f"  so:  {f['consequence']}"), Text(f"  do:  {f['remedy']}", style="green")]
    if not parts:
        parts.append(Text("nothing found so far", style="dim"))
    parts += [Text(n, style="dim") for n in state.notices]
    return Panel(Group(*parts), title="findings")
