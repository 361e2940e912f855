"""The shipped profiles are right, fit each other, and the truth of each simulated bench can be read."""

from __future__ import annotations

from pathlib import Path

import pytest

from acquire.prepare import Job, circumstances_of, first_settings, plan_of, resolved
from profiles.load import Kind, load_any, load_bench, load_scan, load_sensor, load_source, read
from profiles.references import instruments_of, unmet, unmet_on
from profiles.units import MHZ
from sim_hardware.truth import read_truth
from tests.profiles.tables import all_shipped, models

SHIPPED = all_shipped()
BENCHES = {name: path for kind, name, path in SHIPPED if kind == "bench"}
SCANS = [name for kind, name, _ in SHIPPED if kind == "scan"]
# which benches have the source that each scan is for
BENCH_OF_SOURCE = {"plane-2p25": ["demo-tank", "quiet-tank", "curve-tank"], "focused-3": ["focus-tank"]}
PAIRS = [(scan, bench) for scan in SCANS for bench in BENCH_OF_SOURCE[load_scan(scan).source]]
WATER_C = 21.3


@pytest.mark.parametrize(("kind", "name", "path"), SHIPPED)
def test_every_shipped_profile_is_valid_bears_its_files_name_and_a_title(kind: Kind, name: str, path: Path) -> None:
    profile = load_any(path)
    assert profile.name == name
    assert profile.title
    assert unmet(profile) == []
    assert len(profile.title) < 80


def test_there_is_something_of_every_kind() -> None:
    assert {kind for kind, _, _ in SHIPPED} == set(models())
    assert set(BENCHES) == {bench for benches in BENCH_OF_SOURCE.values() for bench in benches}


@pytest.mark.parametrize("name", BENCHES)
def test_the_truth_of_every_simulated_bench_is_readable_and_withheld(name: str) -> None:
    truth = read_truth(BENCHES[name])
    assert truth.seed > 0
    assert load_bench(name).simulation is None
    assert "simulation" in read(BENCHES[name])


@pytest.mark.parametrize(("scan", "bench"), PAIRS)
def test_every_scan_can_be_done_on_the_benches_that_have_its_source(scan: str, bench: str) -> None:
    assert unmet_on(load_scan(scan), bench) == []


@pytest.mark.parametrize(("scan", "bench"), PAIRS)
def test_burst_record_and_echo_free_time_of_every_scan_fit_together(scan: str, bench: str) -> None:
    s = load_scan(scan)
    job = Job(load_bench(bench), load_sensor(s.sensor), load_source(s.source), s)
    job = resolved(job, WATER_C)
    plan = plan_of(job, WATER_C)
    settings = first_settings(job, plan, WATER_C, 40.0)
    around = circumstances_of(job, plan, WATER_C, 1 / settings.sample_rate_hz, settings.start_s)
    assert around.gate.stop - around.gate.start > s.capture.sample_rate_mhz * job.source.cycles / (
        job.source.frequency_mhz
    )
    assert around.frequencies_hz.max() <= job.highest_hz() * (1 + 1e-9)
    assert around.frequencies_hz.size >= 8
    assert len(plan) >= 50


@pytest.mark.parametrize(("scan", "bench"), PAIRS)
def test_the_simulated_source_is_the_source_of_the_profile(scan: str, bench: str) -> None:
    truth, source = read_truth(BENCHES[bench]).source, load_source(load_scan(scan).source)
    assert truth.radius_mm == source.radius_mm
    assert truth.focal_length_mm == source.focal_length_mm
    assert truth.harmonics >= source.highest_harmonic


@pytest.mark.parametrize(("scan", "bench"), PAIRS)
def test_the_oscilloscope_samples_the_highest_frequency_more_than_twice_a_cycle(scan: str, bench: str) -> None:
    s = load_scan(scan)
    scope = instruments_of(load_bench(bench))["oscilloscope"].scope
    assert scope is not None
    assert s.capture.sample_rate_mhz in scope.sample_rates_mhz
    assert s.highest_mhz is not None
    assert s.capture.sample_rate_mhz * MHZ > 2.5 * s.highest_mhz * MHZ


def test_benches_differ_in_what_they_are_there_to_show() -> None:
    truths = {name: read_truth(path) for name, path in BENCHES.items()}
    assert any(truths["demo-tank"].mechanics.pivot_offset_mm)
    assert not any(truths["quiet-tank"].mechanics.pivot_offset_mm)
    assert truths["curve-tank"].element.radius_mm != truths["demo-tank"].element.radius_mm
    families = {name: {i.family for i in instruments_of(load_bench(name)).values()} for name in BENCHES}
    assert families["curve-tank"] & {"preamble", "iso-words"} == set()
    assert families["demo-tank"] >= {"preamble", "iso-words"}
