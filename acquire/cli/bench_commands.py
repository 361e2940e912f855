"""Commands that run the bench: the daemon, its clients, and the simulator."""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Callable
from datetime import datetime
from pathlib import Path
from typing import Annotated

import typer

CAUTIONS = """\
Drive amplifiers carry hazardous voltages, and there is water beside them: use residual-current protection.
Stages pinch and crush: keep hands out while a scan runs. Strong or focused ultrasound can injure: no hand in the beam.
A transducer driven dry can fail. Local codes, the manuals of the equipment and licensed practice come first."""

Endpoint = Annotated[str | None, typer.Option(help="where the daemon answers: ipc://PATH or tcp://127.0.0.1:PORT")]


class ScanFailed(Exception):
    """A scan that was followed did not end sealed."""


def add_to(app: typer.Typer) -> None:
    """Register the commands."""
    app.command()(serve)
    app.command()(run)
    app.command()(watch)
    for command in (hold, resume, stop, status, shutdown):
        app.command()(command)
    app.command(context_settings={"ignore_unknown_options": True, "allow_extra_args": True})(simulate)


def serve(
    bench: Annotated[str, typer.Argument(help="name of a bench profile, or its file")], endpoint: Endpoint = None
) -> None:
    """Own the instruments of a bench and answer clients until ended with Ctrl-C."""
    from acquire.daemon import serve as serve_bench
    from acquire.endpoint import default_endpoint
    from profiles.load import load_bench

    profile = load_bench(bench)
    where = endpoint or default_endpoint(profile.name)
    sys.stderr.write(CAUTIONS + "\n\n")

    def ready(identities: dict[str, str]) -> None:
        for role, identity in identities.items():
            sys.stderr.write(f"{role}: {identity}\n")
        sys.stdout.write(json.dumps({"ready": True, "endpoint": where}) + "\n")
        sys.stdout.flush()

    serve_bench(profile, where, ready)


def run(
    scan: Annotated[str, typer.Argument(help="name of a scan profile, its file, or with --continue a store")],
    store: Annotated[Path | None, typer.Option(help="where to store; left out: NAME-TIME.zarr here")] = None,
    continue_store: Annotated[bool, typer.Option("--continue", help="go on with a store that was broken off")] = False,
    endpoint: Endpoint = None,
) -> None:
    """Start a scan and follow it to its end. Ctrl-C asks the daemon to stop; what was stored stays."""
    from acquire.client import Client
    from acquire.endpoint import only_endpoint
    from acquire.follow import end_of, start

    where = endpoint or only_endpoint()
    with Client(where) as client:
        if continue_store:
            from acquire.follow import continue_request

            request = continue_request(Path(scan))
        else:
            from acquire.follow import new_request

            request = new_request(scan, store or Path(f"{Path(scan).stem}-{datetime.now():%Y%m%d-%H%M%S}.zarr"))
        start(client, request)
        state = end_of(client, live=False)
    if state.state != "sealed":
        raise ScanFailed(f"the scan ended {state.state}: {state.reason}")


def watch(endpoint: Endpoint = None) -> None:
    """Watch the scan that runs: progress, waveform, spectrum, pattern or map, findings. Ctrl-C leaves it running."""
    from acquire.client import Client
    from acquire.endpoint import only_endpoint
    from acquire.follow import look

    with Client(endpoint or only_endpoint()) as client:
        look(client)


def _simple(request_name: str, endpoint: str | None) -> None:
    from acquire import messages
    from acquire.client import Client
    from acquire.endpoint import only_endpoint

    make: Callable[[], messages.Request] = getattr(messages, request_name)
    with Client(endpoint or only_endpoint()) as client:
        sys.stdout.write(client.do(make()) + "\n")


def hold(endpoint: Endpoint = None) -> None:
    """Wait after the point in hand; the source is switched off."""
    _simple("Hold", endpoint)


def resume(endpoint: Endpoint = None) -> None:
    """Go on after a hold."""
    _simple("Resume", endpoint)


def stop(endpoint: Endpoint = None) -> None:
    """Break the scan off; what was stored stays and can be continued."""
    _simple("Stop", endpoint)


def shutdown(endpoint: Endpoint = None) -> None:
    """End the daemon; the bench is left safe."""
    _simple("Shutdown", endpoint)


def status(
    endpoint: Endpoint = None, as_json: Annotated[bool, typer.Option("--json", help="for programs")] = False
) -> None:
    """Say how things stand."""
    from acquire.client import Client
    from acquire.endpoint import only_endpoint

    with Client(endpoint or only_endpoint()) as client:
        s = client.status()
    fields = {name: getattr(s, name) for name in s.__struct_fields__}
    if as_json:
        sys.stdout.write(json.dumps(fields) + "\n")
        return
    source = "on" if s.source_on else "off"
    sys.stdout.write(f"bench {s.bench}: {s.state}, source {source}\n")
    if s.scan:
        sys.stdout.write(f"scan {s.scan}: {s.done} of {s.planned} points, in {s.store}\n")
    for role, identity in s.identities.items():
        sys.stdout.write(f"{role}: {identity}\n")


def simulate(
    context: typer.Context, bench: Annotated[str, typer.Argument(help="name of a bench profile, or its file")]
) -> None:
    """Run a simulated bench at the addresses of a bench file; --help after BENCH shows all options."""
    sys.stdout.flush()
    os.execv(sys.executable, [sys.executable, "-m", "sim_hardware", bench, *context.args])
