"""However a scan ends, the source is off; whatever is wrong is one clear line."""

import os
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import psutil
import pytest
import tomli_w

from acquire.bench_file import write_bench
from acquire.client import Client
from acquire.messages import StateChanged
from acquire.processes import daemon, simulated_bench
from acquire.store import open_stored
from profiles.load import find, load_bench
from tests.end_to_end.running import LONG_S, Running, command, request, running, source_is_on, wait_for_points


@pytest.fixture(scope="module")
def bench(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Running]:
    with running(tmp_path_factory.mktemp("safe"), speed="5") as on:
        yield on


def daemon_of(on: Running) -> psutil.Process:
    return next(
        p
        for p in psutil.process_iter(["cmdline"])
        if on.endpoint in (p.info["cmdline"] or []) and "serve" in p.info["cmdline"]
    )


def wait_until(condition: object, what: str) -> None:
    deadline = time.monotonic() + LONG_S
    while not condition():  # type: ignore[operator]
        assert time.monotonic() < deadline, what
        time.sleep(0.05)


def test_ctrl_c_in_the_client_stops_the_scan_and_the_source(bench: Running) -> None:
    store = bench.folder / "ctrl-c.zarr"
    client = subprocess.Popen(
        [
            sys.executable,
            "-m",
            "acquire.cli",
            "run",
            "demo-rotation",
            "--store",
            str(store),
            "--endpoint",
            bench.endpoint,
        ],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    with Client(bench.endpoint) as watching:
        wait_until(lambda: watching.status().state == "running", "the scan does not run")
        wait_for_points(watching, 3)
    assert source_is_on(bench.bench)
    client.send_signal(signal.SIGINT)
    out, err = client.communicate(timeout=LONG_S)
    assert client.returncode == 1
    assert "Traceback" not in err
    assert "what was stored" in out + err
    assert not source_is_on(bench.bench)
    assert len(open_stored(store).records) >= 3


def test_a_killed_client_leaves_the_scan_in_the_daemons_hands(bench: Running) -> None:
    store = bench.folder / "client-killed.zarr"
    client = subprocess.Popen(
        [
            sys.executable,
            "-m",
            "acquire.cli",
            "run",
            "demo-rotation-fast",
            "--store",
            str(store),
            "--endpoint",
            bench.endpoint,
        ],
        stdout=subprocess.DEVNULL,
    )
    with Client(bench.endpoint) as watching:
        wait_until(lambda: watching.status().state == "running", "the scan does not run")
        client.kill()
        client.wait()
        wait_until(lambda: watching.status().state == "sealed", "the scan does not end")
    assert not source_is_on(bench.bench)


@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_a_signal_to_the_daemon_leaves_the_bench_safe(tmp_path: Path, number: int) -> None:
    with simulated_bench(find("bench", "demo-tank"), tmp_path, "--speed", "5") as reached:
        endpoint = f"ipc://{tmp_path / 'd'}"
        with daemon(reached, endpoint), Client(endpoint) as client:
            store = tmp_path / "s.zarr"
            client.ask(request("demo-rotation", store))
            wait_for_points(client, 3)
            assert source_is_on(reached)
            process = daemon_of(Running(reached, endpoint, tmp_path))
            os.kill(process.pid, number)
            os.kill(process.pid, number)  # a second one does not skip anything
            wait_until(lambda: not process.is_running() or process.status() == psutil.STATUS_ZOMBIE, "it does not end")
        assert not source_is_on(reached)
        assert len(open_stored(store).records) >= 3


def test_after_a_killed_daemon_the_next_one_switches_the_source_off_and_the_scan_goes_on(tmp_path: Path) -> None:
    with simulated_bench(find("bench", "demo-tank"), tmp_path, "--speed", "20") as reached:
        endpoint, store = f"ipc://{tmp_path / 'd'}", tmp_path / "s.zarr"
        with daemon(reached, endpoint), Client(endpoint) as client:
            client.ask(request("demo-rotation-fast", store))
            wait_for_points(client, 20)
            daemon_of(Running(reached, endpoint, tmp_path)).kill()
        wait_until(lambda: store.with_suffix(".journal").exists(), "no journal")
        time.sleep(0.5)
        kept = len(open_stored(store).records)
        assert kept >= 15  # announced within 50 ms
        with daemon(reached, endpoint):
            assert not source_is_on(reached)
            done = command("run", str(store), "--continue", "--endpoint", endpoint)
            assert done.returncode == 0, done.stdout + done.stderr
        assert open_stored(store).sealed
        assert not source_is_on(reached)


def one_line(done: subprocess.CompletedProcess[str], code: int) -> str:
    assert done.returncode == code, done.stdout + done.stderr
    assert "Traceback" not in done.stderr
    lines = [line for line in done.stderr.splitlines() if line.startswith("truepivot: ")]
    assert len(lines) == 1, done.stderr
    return lines[0]


def test_a_bench_that_is_not_there(tmp_path: Path) -> None:
    assert "no bench is called 'nowhere'" in one_line(command("serve", "nowhere"), 2)


def test_a_wrong_profile_tells_every_problem(tmp_path: Path) -> None:
    bench = load_bench("demo-tank").model_dump(mode="json", exclude_none=True)
    bench["axes"]["x"]["speed_m_per_s"] = 3
    bench["axes"]["y"]["low_mm"] = 99
    (tmp_path / "b.toml").write_text(tomli_w.dumps(bench))
    done = command("serve", str(tmp_path / "b.toml"))
    assert done.returncode == 2
    assert "speed_m_per_s: unknown key; this quantity is given as speed_mm_per_s" in done.stderr
    assert "axes.y" in done.stderr
    assert "Traceback" not in done.stderr


def test_an_address_where_nothing_answers(tmp_path: Path) -> None:
    with socket.socket() as free:
        free.bind(("127.0.0.1", 0))
        port = free.getsockname()[1]
    bench = load_bench("demo-tank")
    lost = bench.instruments["generator"].model_copy(update={"address": f"tcp://127.0.0.1:{port}"})
    write_bench(bench.model_copy(update={"instruments": bench.instruments | {"generator": lost}}), tmp_path / "b.toml")
    line = one_line(command("serve", str(tmp_path / "b.toml"), "--endpoint", f"ipc://{tmp_path / 'd'}"), 1)
    assert f"nothing answers at tcp://127.0.0.1:{port}" in line


def test_an_instrument_of_another_identity(tmp_path: Path) -> None:
    with simulated_bench(find("bench", "demo-tank"), tmp_path, "--speed", "max") as reached:
        bench = load_bench(reached)
        address = {r: a.address for r, a in bench.instruments.items()}
        swapped = {
            "oscilloscope": bench.instruments["oscilloscope"].model_copy(update={"address": address["thermometer"]}),
            "thermometer": bench.instruments["thermometer"].model_copy(update={"address": address["oscilloscope"]}),
        }
        write_bench(bench.model_copy(update={"instruments": bench.instruments | swapped}), tmp_path / "b.toml")
        line = one_line(command("serve", str(tmp_path / "b.toml"), "--endpoint", f"ipc://{tmp_path / 'e'}"), 1)
    assert "the oscilloscope at" in line
    assert "THERMOMETER" in line


def test_no_daemon(tmp_path: Path) -> None:
    line = one_line(command("status", "--endpoint", f"ipc://{tmp_path / 'nobody'}"), 1)
    assert "truepivot serve" in line


def test_a_scan_outside_the_limits_is_refused_and_nothing_moves(bench: Running, tmp_path: Path) -> None:
    wanted = request("demo-rotation", tmp_path / "s.zarr", position={"z_mm": 500.0})
    with Client(bench.endpoint) as client:
        client.follow_from(client.status().last_event + 1)
        client.ask(wanted)
        ended = next(e for e in client.events() if isinstance(e, StateChanged) and e.state == "failed")
    assert ended.reason == "point 0 needs z = 500 mm; bench demo-tank allows 20 to 200 mm"
    assert not source_is_on(bench.bench)
    assert not (tmp_path / "s.zarr").exists()


def test_a_store_that_exists_is_refused(bench: Running, tmp_path: Path) -> None:
    (tmp_path / "s.zarr").mkdir()
    words = ("run", "demo-rotation", "--store", str(tmp_path / "s.zarr"), "--endpoint", bench.endpoint)
    assert "exists already" in one_line(command(*words), 2)


def test_a_second_daemon_on_the_same_endpoint_is_refused(bench: Running) -> None:
    line = one_line(command("serve", str(bench.bench), "--endpoint", bench.endpoint), 2)
    assert "answers at" in line
    with Client(bench.endpoint) as client:
        assert client.status().bench == "demo-tank"
