from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest
import xarray as xr

from acquire.client import Client
from acquire.messages import Hold, Resume, Stop
from acquire.replay import replay
from acquire.results.summary import quantities_of
from acquire.store import open_stored
from tests.end_to_end.running import (
    SHORT_CAPTURE,
    SMALL,
    Running,
    command,
    request,
    running,
    scanned,
    source_is_on,
    wait_for_end,
    wait_for_points,
)


@pytest.fixture(scope="module")
def bench(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Running]:
    with running(tmp_path_factory.mktemp("demo")) as on:
        yield on


@pytest.fixture(scope="module")
def stored(bench: Running) -> Path:
    """A small rotation on the demonstration's bench."""
    store = bench.folder / "rotation.zarr"
    assert scanned(bench, request("demo-rotation-fast", store, **SMALL)).state == "sealed"
    return store


def test_a_rotation_is_sealed_and_the_source_is_off(bench: Running, stored: Path) -> None:
    assert not source_is_on(bench.bench)
    with xr.open_zarr(stored) as data:
        assert data.attrs["sealed"]
        assert np.degrees(data["commanded"][:, 3].values).max() == pytest.approx(28)


def test_the_pivot_offset_is_found_live_and_its_size_is_right(stored: Path) -> None:
    finding = next(f for f in open_stored(stored).findings() if f["code"] == "pivot.offset")
    x, z = finding["sizes"]
    # the truth of this bench: 0.18 mm and 0.35 mm
    assert abs(x["value"] - 0.18e-3) < 3 * x["standard_uncertainty"] + 2e-6
    assert abs(z["value"] - 0.35e-3) < 3 * z["standard_uncertainty"] + 5e-6


def test_the_checks_say_the_same_of_the_stored_counts_to_the_letter(stored: Path) -> None:
    scan = open_stored(stored)
    assert scan.judged()[1] == scan.changes
    done = command("check", str(stored))
    assert done.returncode == 0
    assert done.stdout.rstrip().endswith("as the live checks said")


def test_a_replay_of_a_rotation_is_identical(stored: Path, tmp_path: Path) -> None:
    comparison = replay(open_stored(stored), tmp_path / "again.zarr", lambda _: None)
    assert comparison.identical, comparison
    first, again = open_stored(stored), open_stored(tmp_path / "again.zarr")
    assert [r.temperature_c for r in first.records] == [r.temperature_c for r in again.records]
    assert [r.after for r in first.records] == [r.after for r in again.records]


def test_a_raster_is_sealed_and_its_replay_is_identical(tmp_path: Path) -> None:
    raster = {
        "directions": [
            {"axis": "x", "span_mm": 2.0, "step_mm": 0.5},
            {"axis": "y", "span_mm": 2.0, "step_mm": 0.5},
        ],
        "order": "serpentine",
    }
    store = tmp_path / "raster.zarr"
    with running(tmp_path / "bench", "focus-tank") as on:
        ended = scanned(on, request("demo-raster", store, raster=raster, revisit_every=8, capture=SHORT_CAPTURE))
    assert ended.state == "sealed"
    assert replay(open_stored(store), tmp_path / "again.zarr", lambda _: None).identical
    widths = [q for q in quantities_of(open_stored(store)) if q.name == "beamwidth"]
    assert len(widths) == 2
    assert all(q.value is not None and 0.5e-3 < q.value < 2e-3 for q in widths)
    # two points and a half within the width are too few to tell of averaging, and that is said
    told = next(q for q in quantities_of(open_stored(store)) if q.name == "averaging")
    assert told.value is None
    assert "steps of 0.5 mm are too large" in told.method


def test_a_line_tells_plainly_what_averaging_does_to_each_harmonic(tmp_path: Path) -> None:
    raster = {"directions": [{"axis": "x", "span_mm": 3.0, "step_mm": 0.06}], "order": "serpentine"}
    store = tmp_path / "line.zarr"
    with running(tmp_path / "bench", "focus-tank") as on:
        ended = scanned(on, request("line-x", store, raster=raster, capture=SHORT_CAPTURE))
    assert ended.state == "sealed"
    assert " of 0.1 mm diameter reads the " in command("results", str(store)).stdout
    found = quantities_of(open_stored(store))
    losses = [q for q in found if q.name == "peak read low by averaging"]
    assert len(losses) >= 5
    values = [q.value or 0.0 for q in losses]
    # the element is small beside the beam of the fundamental, and less so beside each harmonic's
    assert 0 < values[0] < 0.1
    assert all(
        b > a - 2 * (q.standard_uncertainty or 0) for a, b, q in zip(values, values[1:], losses[1:], strict=False)
    )
    assert values[-1] > 2 * values[0]
    assert next(q for q in found if q.name == "averaging").value in values
    assert command("report", str(store), "--out", str(tmp_path / "line.html")).returncode == 0
    assert "Averaging over the face" in (tmp_path / "line.html").read_text()


def test_a_second_scan_is_refused_while_one_runs_and_a_stop_keeps_what_was_stored(bench: Running) -> None:
    store = bench.folder / "stopped.zarr"
    with Client(bench.endpoint) as client:
        client.ask(request("demo-rotation", store))
        wait_for_points(client, 10)
        with pytest.raises(Exception, match="a scan is running"):
            client.ask(request("demo-rotation", bench.folder / "other.zarr"))
        client.ask(Stop())
        assert wait_for_end(client).state == "broken-off"
    assert not source_is_on(bench.bench)
    kept = len(open_stored(store).records)
    assert kept >= 10
    done = command("run", str(store), "--continue", "--endpoint", bench.endpoint)
    assert done.returncode == 0, done.stderr
    assert open_stored(store).sealed
    assert len(open_stored(store).records) > kept


def test_a_hold_switches_the_source_off_and_a_resume_goes_on(bench: Running) -> None:
    with Client(bench.endpoint) as client:
        client.ask(request("demo-rotation", bench.folder / "held.zarr"))
        wait_for_points(client, 5)
        client.ask(Hold())
        for event in client.events():
            if client.status().state == "held" and event is None:
                break
        assert not source_is_on(bench.bench)
        done = client.status().done
        client.ask(Resume())
        wait_for_points(client, done + 3)
        client.ask(Stop())
        wait_for_end(client)


def test_a_client_that_comes_late_still_gets_every_event(bench: Running) -> None:
    with Client(bench.endpoint) as client:
        last = client.status().last_event
        client.follow_from(1)
        seen = 0
        for event in client.events():
            if event is not None:
                seen += 1
            if seen >= last:
                break
    assert seen == last


def test_results_and_report_of_the_command_line(stored: Path, tmp_path: Path) -> None:
    import json

    done = command("results", str(stored), "--json")
    document = json.loads(done.stdout)
    for q in document["quantities"]:
        assert {"name", "value", "unit", "standard_uncertainty", "conditions", "method"} <= set(q)
    names = {q["name"] for q in document["quantities"]}
    assert {"directional response", "half-angle", "effective radius", "angle zero", "pivot offset"} <= names
    radius = next(q for q in document["quantities"] if q["name"] == "mean effective radius")
    square = sum(row["contribution"] ** 2 for row in radius["budget"])
    assert square == pytest.approx(radius["standard_uncertainty"] ** 2)
    assert radius["expanded_uncertainty"] == pytest.approx(radius["coverage_factor"] * radius["standard_uncertainty"])
    assert {"positive peak pressure", "pulse duration", "acoustic-working frequency"} <= names
    assert "pivot.offset" in {f["code"] for f in document["findings"]}
    assert command("report", str(stored), "--out", str(tmp_path / "r.html")).returncode == 0
    page = (tmp_path / "r.html").read_text()
    assert page.count("data:image/png;base64,") >= 6
    assert "http" not in page.replace("http-equiv", "")
    assert "pivot.offset" in page


def test_the_truth_is_not_used(tmp_path: Path) -> None:
    """The daemon's result is the same whether or not the bench file that it reads holds the truth."""
    import tomllib

    import tomli_w

    from profiles.load import find

    stores = []
    for withheld in (True, False):
        folder = tmp_path / f"withheld-{withheld}"
        folder.mkdir()
        from acquire.processes import daemon, simulated_bench

        with simulated_bench(find("bench", "demo-tank"), folder, "--speed", "max") as reached:
            assert "simulation" not in tomllib.loads(reached.read_text())
            if not withheld:
                truth = tomllib.loads(find("bench", "demo-tank").read_text())["simulation"]
                tables = tomllib.loads(reached.read_text()) | {"simulation": truth}
                reached.write_text(tomli_w.dumps(tables))
            endpoint = f"ipc://{folder / 'd'}"
            with daemon(reached, endpoint):
                store = folder / "s.zarr"
                wanted = request("demo-rotation-fast", store, **SMALL)
                assert scanned(Running(reached, endpoint, folder), wanted).state == "sealed"
        stores.append(open_stored(store))
    one, other = stores
    assert one.changes == other.changes
    assert all(np.array_equal(one.counts(r.index), other.counts(r.index)) for r in one.records)
    assert [q.as_mapping() for q in quantities_of(one)] == [q.as_mapping() for q in quantities_of(other)]
