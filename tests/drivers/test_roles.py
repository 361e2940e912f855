"""Every role against the simulator as a process: each family, sample width and byte order that is shipped."""

from collections.abc import Iterator
from dataclasses import replace
from math import radians

import numpy as np
import pytest

from drivers.bench import BenchInstruments
from drivers.errors import InstrumentError, InstrumentTimeout, LinkTimeout, OutOfLimits
from drivers.roles import CaptureSettings, Drive
from profiles.instrument import Role
from profiles.load import find, load_bench, load_instrument
from tests.drivers.simulated import opened, simulated

LEVEL_V, TEMPERATURE_C = 0.0437, 21.3
# nothing but a constant level reaches the channel: no noise, no pick-up, and the record ends before sound arrives
TRUTH = {
    "electronics": {"offset_mv": LEVEL_V * 1e3, "noise_uv": 0.0, "pickup_mv": 0.0},
    "tank": {"temperature_c": TEMPERATURE_C, "temperature_drift_c_per_h": 0.0},
}
DRIVE = Drive(frequency_hz=2.25e6, amplitude_v=10.0, cycles=8, repetition_s=2e-3)
CAPTURE = CaptureSettings(sample_rate_hz=125e6, points=512, start_s=4e-6, averages=1, full_scale_v=0.4)
BENCHES: dict[str, tuple[str, dict[Role, str]]] = {
    "demo-tank": ("demo-tank", {}),
    "curve-tank": ("curve-tank", {}),
    "preamble, lsb first": ("demo-tank", {"oscilloscope": "scope-preamble-16-lsb"}),
    "preamble, 8 bit": ("demo-tank", {"oscilloscope": "scope-preamble-8"}),
    "curve, lsb first": ("curve-tank", {"oscilloscope": "scope-curve-16-lsb"}),
    "curve, 8 bit": ("curve-tank", {"oscilloscope": "scope-curve-8"}),
}


@pytest.fixture(scope="module", params=BENCHES)
def on(request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory) -> Iterator[BenchInstruments]:
    shipped, profiles = BENCHES[request.param]
    with simulated(tmp_path_factory.mktemp("bench"), shipped, profiles, truth=TRUTH) as bench, opened(bench) as i:
        if not i.stage.referenced():
            i.stage.home(20.0)
        i.generator.configure(DRIVE)
        yield i


def captured(i: BenchInstruments, settings: CaptureSettings) -> tuple[CaptureSettings, np.ndarray, float]:
    """What was set, the samples in volts, and volts of a count."""
    actual = i.scope.configure(settings)
    i.generator.output(True)
    i.scope.arm()
    i.scope.wait(20.0)
    trace = i.scope.read()
    i.generator.output(False)
    assert trace.scaling.start_s == pytest.approx(actual.start_s, abs=1e-12)
    assert trace.scaling.interval_s == pytest.approx(1 / actual.sample_rate_hz)
    assert trace.averages == actual.averages
    return actual, trace.volts(), abs(trace.scaling.volts_per_count)


def test_every_shipped_family_width_and_order_is_among_the_benches() -> None:
    """A bench or profile that is shipped later and differs belongs into the table above."""

    def kinds(profile: str) -> tuple[object, ...]:
        p = load_instrument(profile)
        return p.role, p.family, p.transfer and (p.transfer.bits, p.transfer.byte_order)

    tried = set()
    for shipped, profiles in BENCHES.values():
        for role, attached in load_bench(shipped).instruments.items():
            tried.add(kinds(profiles.get(role, attached.profile)))
    benches = list(find("bench", "demo-tank").parent.glob("*.toml"))
    scopes = [p.stem for p in find("instrument", "scope-curve-8").parent.glob("scope-*.toml")]
    named = [a.profile for b in benches for a in load_bench(b).instruments.values()]
    assert len(benches) >= 2
    assert {kinds(name) for name in named + scopes} <= tried


@pytest.mark.parametrize("full_scale_v", [0.16, 0.4, 1.6])
@pytest.mark.parametrize("offset_v", [0.0, 0.03])
def test_a_level_known_in_volts_is_read_in_volts(on: BenchInstruments, full_scale_v: float, offset_v: float) -> None:
    _, volts, step_v = captured(on, replace(CAPTURE, full_scale_v=full_scale_v, offset_v=offset_v))
    assert volts.size == CAPTURE.points
    # half a step, as an ideal digitiser rounds; single precision of the simulator beside it
    np.testing.assert_allclose(volts, LEVEL_V, atol=0.5001 * step_v + 1e-7)


def test_a_level_that_is_averaged_is_the_same_level(on: BenchInstruments) -> None:
    _, volts, step_v = captured(on, replace(CAPTURE, averages=16))
    np.testing.assert_allclose(volts, LEVEL_V, atol=0.5001 * step_v + 1e-7)


def test_a_range_and_a_rate_between_those_that_there_are_is_told_as_it_was_set(on: BenchInstruments) -> None:
    actual, volts, _ = captured(on, replace(CAPTURE, full_scale_v=0.3, sample_rate_hz=120e6))
    assert (actual.full_scale_v, actual.sample_rate_hz) == (0.4, 125e6)
    assert volts.mean() == pytest.approx(LEVEL_V, abs=0.4 / 256)


def test_without_a_trigger_the_capture_is_told_to_wait_for_one(on: BenchInstruments) -> None:
    on.scope.configure(CAPTURE)
    on.generator.output(False)
    on.scope.arm()
    with pytest.raises(InstrumentTimeout, match=r"waited 0\.3 s for its trigger"):
        on.scope.wait(0.3)
    captured(on, CAPTURE)


def test_the_stage_goes_where_it_is_told_and_says_so(on: BenchInstruments) -> None:
    target = {"x": 1.25e-3, "y": -0.5e-3, "z": 121e-3, "theta": radians(12.5), "phi": radians(-7)}
    on.stage.start_move(target)  # type: ignore[arg-type]
    reached = on.stage.finish_move(20.0)
    said = "\n".join(on.stage.link.transcript.lines())
    for axis, number in {"x": "1.2500", "z": "121.0000", "theta": "12.5000"}.items():
        word = (on.stage.profile.axis_words or {})[axis]  # type: ignore[index]
        # millimetres and degrees on the wire, in both families
        assert f"{word}{'PA' if on.stage.profile.family == 'axis-prefix' else ''}{number}" in said
    later = on.stage.position()
    for axis, value in target.items():
        # readback noise of the simulated encoders: 0.3 um and 0.3 mdeg; ten times that
        assert reached[axis] == pytest.approx(value, abs=5e-6 if axis in "xyz" else 5e-5)  # type: ignore[index]
        assert later[axis] == pytest.approx(value, abs=5e-6 if axis in "xyz" else 5e-5)  # type: ignore[index]


@pytest.mark.parametrize(("axis", "beyond"), [("x", 31e-3), ("z", 10e-3), ("theta", radians(96))])
def test_a_target_beyond_the_travel_is_refused_and_nothing_moves(
    on: BenchInstruments, axis: str, beyond: float
) -> None:
    before = on.stage.position()
    with pytest.raises(OutOfLimits, match="nothing was moved"):
        on.stage.start_move({axis: beyond})  # type: ignore[dict-item]
    after = on.stage.position()
    assert all(after[a] == pytest.approx(before[a], abs=5e-5) for a in on.stage.axes)


def test_a_stop_ends_the_move_and_the_next_one_goes(on: BenchInstruments) -> None:
    on.stage.start_move({"x": 0.0})
    on.stage.finish_move(20.0)
    on.stage.start_move({"x": 20e-3})
    on.stage.stop()
    if not on.stage.referenced():
        on.stage.home(20.0)  # a controller that was moving asks for it
    on.stage.start_move({"x": 2e-3})
    assert on.stage.finish_move(20.0)["x"] == pytest.approx(2e-3, abs=5e-6)


def test_the_burst_is_set_as_the_generator_reads_it_back(on: BenchInstruments) -> None:
    drive = Drive(frequency_hz=1.234e6, amplitude_v=3.25, cycles=11, repetition_s=1.5e-3)
    on.generator.configure(drive)
    questions = ("FREQuency", "VOLTage", "BURSt:NCYCles", "BURSt:INTernal:PERiod", "BURSt:STATe")
    read = [float(on.generator.link.query(f"SOURce:{q}?")) for q in questions]
    on.generator.configure(DRIVE)
    assert read == pytest.approx([1.234e6, 3.25, 11, 1.5e-3, 1])


def test_a_burst_that_is_refused_is_told_with_the_instruments_own_words(on: BenchInstruments) -> None:
    with pytest.raises(InstrumentError, match="-222"):
        on.generator.configure(replace(DRIVE, frequency_hz=1e9))
    on.generator.recover()


def test_the_output_follows(on: BenchInstruments) -> None:
    for wanted in (True, False):
        on.generator.output(wanted)
        assert on.generator.link.query("OUTPut:STATe?") == f"{wanted:d}"


def test_the_temperature_is_that_of_the_tank(on: BenchInstruments) -> None:
    assert on.thermometer is not None
    on.thermometer.ask_temperature()
    assert on.thermometer.answer_ready(5.0)
    assert on.thermometer.answer() == pytest.approx(TEMPERATURE_C, abs=0.05)
    with pytest.raises(LinkTimeout):
        on.thermometer.link.read_line(0.1)  # one answer to one question
    on.thermometer.recover()
