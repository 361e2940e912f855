"""Simulated benches whose truth is known, through the whole chain: what comes out.

How often the truth lies within what is stated is counted without sockets, on these benches with many seeds and on
benches drawn at random, in `tests/faults`.
"""

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import tomli_w

from acquire.client import Client
from acquire.results.quantity import Quantity
from acquire.results.summary import quantities_of
from acquire.store import open_stored
from profiles.load import find, read
from tests.end_to_end.running import SHORT_CAPTURE, request, running, wait_for_end
from tests.fields import piston_pressure

SEEDS = 2
FAR = 4.0  # standard uncertainties


@dataclass(frozen=True)
class Truth:
    radius_mm: float
    edge: str
    offset_mm: tuple[float, float]
    zero_deg: float
    nominal_mm: float
    sensor: str


BENCHES = {
    "small-soft": Truth(0.21, "soft", (0.18, 0.35), 0.4, 0.2, "needle-0p4"),
    "large-rigid": Truth(0.52, "rigid", (-0.12, 0.2), -0.3, 0.5, "needle-1p0"),
    "small-unbaffled": Truth(0.19, "unbaffled", (0.05, -0.4), 0.15, 0.2, "needle-0p4"),
}


def put_into(simulation: dict[str, Any], truth: Truth) -> None:
    """The truth, in the table that the simulator reads."""
    simulation["element"] |= {
        "radius_mm": truth.radius_mm,
        "edge": truth.edge,
        "sensitivity_nv_per_pa": 50 if truth.radius_mm < 0.3 else 200,
    }
    simulation["mechanics"] |= {
        "pivot_offset_mm": [truth.offset_mm[0], 0.0, truth.offset_mm[1]],
        "angle_zero_deg": truth.zero_deg,
    }


def scan_of(truth: Truth) -> dict[str, Any]:
    """What of the demonstration's fast scan is another."""
    return {
        "sensor": truth.sensor,
        "highest_mhz": 27.0,
        "rotation": {"span_deg": 80.0, "step_deg": 2.0},
        "capture": SHORT_CAPTURE | {"averages": 16},
    }


def bench_file(truth: Truth, path: Path) -> Path:
    """The demonstration's bench with another truth."""
    tables = read(find("bench", "demo-tank"))
    put_into(tables["simulation"], truth)
    path.write_text(tomli_w.dumps(tables))
    return path


def one(quantities: list[Quantity], name: str, **conditions: str) -> Quantity:
    return next(q for q in quantities if q.name == name and conditions.items() <= q.conditions.items())


@pytest.mark.slow
@pytest.mark.timeout(400)
@pytest.mark.parametrize("name", BENCHES)
def test_rotations_find_the_truth_within_what_they_state(name: str, tmp_path: Path) -> None:
    truth = BENCHES[name]
    bench = bench_file(truth, tmp_path / "bench.toml")
    for seed in range(SEEDS):
        store = tmp_path / f"{seed}.zarr"
        with running(tmp_path / f"run-{seed}", str(bench), seed=seed) as on, Client(on.endpoint) as client:
            client.ask(request("demo-rotation-fast", store, **scan_of(truth)))
            assert wait_for_end(client).state == "sealed"
        found = quantities_of(open_stored(store))
        radius = one(found, "mean effective radius")
        x, z = (one(found, "pivot offset", axis=a) for a in ("x", "z"))
        zero = one(found, "angle zero")
        wanted = {
            "radius": (radius, truth.radius_mm * 1e-3, 0.02 * truth.radius_mm * 1e-3),
            "x": (x, truth.offset_mm[0] * 1e-3, 20e-6),
            "z": (z, truth.offset_mm[1] * 1e-3, 20e-6),
            "zero": (zero, -truth.zero_deg, 0.1),
        }
        assert radius.conditions["edge"] == truth.edge
        for key, (quantity, true, allowed) in wanted.items():
            assert quantity.value is not None
            assert quantity.standard_uncertainty is not None
            error = quantity.value - true
            assert abs(error) <= allowed, f"seed {seed}: {key} off by {error:.3g}, allowed {allowed:.3g}"
            assert abs(error) <= FAR * quantity.standard_uncertainty, f"seed {seed}: {key}"


def bowl_amplitude(x: np.ndarray, z: float, radius: float, focus: float, frequency: float, speed: float) -> np.ndarray:
    """The same for a spherically curved source with its vertex at the origin."""
    k = 2 * np.pi * frequency / speed
    top = np.arcsin(radius / focus)
    t, wt = np.polynomial.legendre.leggauss(200)
    t, wt = top * (t + 1) / 2, wt * top / 2
    phi = (np.arange(400) + 0.5) * 2 * np.pi / 400
    rho, sz = focus * np.sin(t), focus * (1 - np.cos(t))
    sx, sy = np.outer(rho, np.cos(phi)), np.outer(rho, np.sin(phi))
    weight = np.outer(wt * focus**2 * np.sin(t), np.full(phi.size, 2 * np.pi / 400))
    values = []
    for at in x:
        d = np.sqrt((sx - at) ** 2 + sy**2 + (z - sz[:, None]) ** 2)
        values.append(abs(np.sum(weight * np.exp(-1j * k * d) / d)))
    return np.array(values)


def width6(x: np.ndarray, amplitude: np.ndarray) -> float:
    """Full -6 dB width of a symmetric profile given on one side."""
    level = amplitude / amplitude[0] - 10 ** (-6 / 20)
    i = int(np.argmax(level < 0))
    return 2 * float(x[i - 1] + (x[i] - x[i - 1]) * level[i - 1] / (level[i - 1] - level[i]))


CASES = {
    # source radius, focal length, frequency, place, raster span and step, all in mm and MHz
    "plane": (6.0, None, 2.25, 120.0, 14.0, 1.0),
    "focused": (10.0, 40.0, 3.0, 39.0, 2.4, 0.2),
}


@pytest.mark.slow
@pytest.mark.timeout(300)
@pytest.mark.parametrize("kind", CASES)
def test_rasters_find_width_and_peak_of_a_field_computed_apart(kind: str, tmp_path: Path) -> None:
    radius, focus, frequency, z, span, step = CASES[kind]
    tables = read(find("bench", "focus-tank" if focus else "demo-tank"))
    simulation = tables["simulation"]
    # a linear wave, so that the field at the drive frequency is the whole of it, and a long burst, so that it is steady
    simulation["source"] |= {"shock_parameter": 0.0, "harmonics": 1, "reference_distance_mm": z}
    simulation["element"] = {"radius_mm": 0.05, "edge": "rigid", "sensitivity_nv_per_pa": 50}
    simulation["mechanics"] = {"readback_sigma_um": 0.3, "readback_sigma_mdeg": 0.3}
    (tmp_path / "bench.toml").write_text(tomli_w.dumps(tables))
    directions = [{"axis": a, "span_mm": span, "step_mm": step} for a in ("x", "y")]
    store = tmp_path / "s.zarr"
    with running(tmp_path / "run", str(tmp_path / "bench.toml")) as on, Client(on.endpoint) as client:
        wanted = request(
            "demo-raster",
            store,
            source="focused-3" if focus else "plane-2p25",
            highest_mhz=None,
            position={"z_mm": z},
            raster={"directions": directions, "order": "serpentine"},
            capture=SHORT_CAPTURE | {"points": 4000, "averages": 16},
            revisit_every=0,
        )
        wanted.source["cycles"] = 24
        client.ask(wanted)
        ended = wait_for_end(client)
    assert ended.state == "sealed"
    found = quantities_of(open_stored(store))
    c = 1486.3  # m/s near 21.3 °C; the width goes as c, so 0.1 % of it is nothing here
    x = np.linspace(0, span / 2 * 1e-3, 200)
    if focus:
        expected = width6(x, bowl_amplitude(x, z * 1e-3, radius * 1e-3, focus * 1e-3, frequency * 1e6, c))
    else:
        there = piston_pressure(x, np.full(x.size, z * 1e-3), radius * 1e-3, frequency * 1e6, c)
        expected = width6(x, np.abs(there))
    for axis in ("x", "y"):
        width = one(found, "beamwidth", axis=axis)
        assert width.value == pytest.approx(expected, rel=0.02)
        peak = one(found, "beam peak", axis=axis)
        assert peak.value == pytest.approx(0.0, abs=20e-6)
