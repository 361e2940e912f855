"""The benches that `tests/end_to_end/test_truth.py` scans once or twice, with many seeds of noise."""

from __future__ import annotations

from math import degrees, sqrt

import pytest

from acquire.prepare import Job
from profiles.load import find, load_bench, load_scan, load_sensor, load_source
from profiles.scan import Scan
from sim_hardware.truth import Truth, read_truth
from tests.end_to_end.test_truth import BENCHES, put_into, scan_of
from tests.faults.drawn import Drawn
from tests.faults.in_hand import scanned

pytestmark = [pytest.mark.slow, pytest.mark.timeout(600)]
SEEDS = 40


def bench_of(name: str, seed: int) -> Drawn:
    wanted = BENCHES[name]
    truth = read_truth(find("bench", "demo-tank")).model_dump() | {"seed": seed}
    put_into(truth, wanted)
    scan = load_scan("demo-rotation-fast").model_dump(mode="json") | scan_of(wanted)
    job = Job(load_bench("demo-tank"), load_sensor(wanted.sensor), load_source("plane-2p25"), Scan.model_validate(scan))
    return Drawn(seed, job, Truth.model_validate(truth), seed)


@pytest.mark.parametrize("name", BENCHES)
def test_the_truth_lies_within_twice_the_stated_uncertainty_for_nine_seeds_in_ten(name: str) -> None:
    wanted = BENCHES[name]
    inside = dict.fromkeys(("radius", "x", "z", "zero"), 0)
    for seed in range(SEEDS):
        scan = scanned(bench_of(name, seed))
        result = scan.results[0]
        pivot, radius = result.pivot, scan.one("mean effective radius")
        assert result.best.edge == wanted.edge
        assert pivot is not None
        assert radius.value is not None
        assert radius.standard_uncertainty is not None
        found = {
            "radius": (radius.value - wanted.radius_mm * 1e-3, radius.standard_uncertainty),
            "x": (pivot.x_m - wanted.offset_mm[0] * 1e-3, sqrt(pivot.covariance[0, 0])),
            "z": (pivot.z_m - wanted.offset_mm[1] * 1e-3, sqrt(pivot.covariance[1, 1])),
            "zero": (degrees(result.best.angle_zero) + wanted.zero_deg, degrees(result.best.angle_zero_u)),
        }
        for key, (error, u) in found.items():
            inside[key] += abs(error) <= 2 * u
    assert min(inside.values()) >= 0.9 * SEEDS, inside
