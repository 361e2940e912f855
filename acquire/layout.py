"""What a store is made of: arrays with names, dimensions and units, and attributes."""

from __future__ import annotations

import json
import os
import warnings
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import zarr
from numpy.typing import NDArray
from zarr.codecs import BloscCodec, Crc32cCodec

from acquire.durable import sync_folder, sync_tree
from acquire.record import PointRecord
from checks.observation import Circumstances, Observation

MOST_POINTS = 64  # in a chunk of counts
CHUNK_BYTES = 8 << 20  # long records make a chunk of fewer points
WIDE_CHUNK = 4096  # points in a chunk of everything else


@dataclass(frozen=True)
class Column:
    """An array with one row a point. `of` takes its row from record and observation."""

    name: str
    dtype: str
    dimensions: tuple[str, ...]
    units: str
    long_name: str
    of: Callable[[PointRecord, Observation], Any]


POSE_UNITS = "m (x, y, z), rad (theta, phi)"
COLUMNS: tuple[Column, ...] = (
    Column("commanded", "f8", ("axis",), POSE_UNITS, "pose asked of the element centre", lambda r, _: r.commanded),
    Column("reported_before", "f8", ("axis",), POSE_UNITS, "pose reported before the capture", lambda r, _: r.before),
    Column("reported_after", "f8", ("axis",), POSE_UNITS, "pose reported after the capture", lambda r, _: r.after),
    Column(
        "carriage_commanded",
        "f8",
        ("axis",),
        POSE_UNITS,
        "stage position asked for",
        lambda r, _: r.carriage_commanded,
    ),
    Column("carriage_before", "f8", ("axis",), POSE_UNITS, "stage position before", lambda r, _: r.carriage_before),
    Column("carriage_after", "f8", ("axis",), POSE_UNITS, "stage position after", lambda r, _: r.carriage_after),
    Column("plan_index", "i8", (), "1", "place in the plan", lambda r, _: r.plan_index),
    Column("reference", "bool", (), "1", "point is a revisit of the reference pose", lambda r, _: r.reference),
    Column("plane", "i8", (), "1", "plane of rotation", lambda r, _: r.plane),
    Column("time", "f8", (), "s", "time since the scan began", lambda r, _: r.time_s),
    Column("temperature", "f8", (), "degC", "water temperature", lambda r, _: r.temperature_c),
    Column("volts_per_count", "f8", (), "V", "voltage of one count", lambda r, _: r.volts_per_count),
    Column("volts_at_zero", "f8", (), "V", "voltage at count zero", lambda r, _: r.volts_at_zero),
    Column("full_scale", "f8", (), "V", "vertical range", lambda r, _: r.full_scale_v),
    Column("averages", "i8", (), "1", "triggers averaged", lambda r, _: r.averages),
    Column("lowest", "i8", (), "1", "count at the lower rail", lambda r, _: r.lowest),
    Column("highest", "i8", (), "1", "count at the upper rail", lambda r, _: r.highest),
    Column("components", "c16", ("frequency",), "V", "Fourier components in the gate", lambda _, o: o.components),
    Column(
        "side_components",
        "c16",
        ("side_line",),
        "V",
        "components beside the drive",
        lambda _, o: o.side_components,
    ),
    Column(
        "component_noise",
        "f8",
        ("frequency",),
        "V",
        "noise of each component's parts",
        lambda _, o: o.component_noise_v,
    ),
    Column("peak", "f8", (), "V", "largest voltage in the gate", lambda _, o: o.peak_v),
    Column("trough", "f8", (), "V", "smallest voltage in the gate", lambda _, o: o.trough_v),
    Column("square_integral", "f8", (), "V2 s", "integral of the squared voltage", lambda _, o: o.square_integral_v2s),
    Column("noise_rms", "f8", (), "V", "noise before the arrival", lambda _, o: o.noise_rms_v),
    Column("offset", "f8", (), "V", "mean before the arrival", lambda _, o: o.offset_v),
    Column("clipped_high", "i8", (), "1", "samples at the upper rail", lambda _, o: o.clipped_high),
    Column("clipped_low", "i8", (), "1", "samples at the lower rail", lambda _, o: o.clipped_low),
    Column("range_use", "f8", (), "1", "largest excursion over half the range", lambda _, o: o.range_use),
    Column("committed", "bool", (), "1", "point is present", lambda _, __: True),
)


def create(
    path: Path, attributes: dict[str, Any], circumstances: Circumstances, dtype: str, shape: tuple[int, int]
) -> None:
    """Make an empty store of `shape` (points, samples), all arrays at their final size."""
    points, samples = shape
    in_chunk = MOST_POINTS
    while in_chunk > 1 and in_chunk * samples * np.dtype(dtype).itemsize > CHUNK_BYTES:
        in_chunk //= 2  # so that chunks end where wide chunks end
    group = zarr.create_group(path, attributes=attributes)
    lengths = {"axis": 5, "frequency": circumstances.frequencies_hz.size, "side_line": 2}
    group.create_array(
        "counts",
        shape=shape,
        chunks=(min(in_chunk, points), samples),
        dtype=dtype,
        compressors=[BloscCodec(cname="lz4", clevel=1, shuffle="bitshuffle"), Crc32cCodec()],
        dimension_names=("point", "sample"),
        attributes={"units": "1", "long_name": "raw counts of the digitiser"},
        config={"write_empty_chunks": True},
    )
    for column in COLUMNS:
        inner = tuple(lengths[d] for d in column.dimensions)
        group.create_array(
            column.name,
            shape=(points, *inner),
            chunks=(min(WIDE_CHUNK, points), *inner),
            dtype=column.dtype,
            compressors=[BloscCodec(cname="zstd", clevel=1), Crc32cCodec()],
            dimension_names=("point", *column.dimensions),
            attributes={"units": column.units, "long_name": column.long_name},
        )
    c = circumstances
    _coordinate(group, "sample", c.record_start_s + np.arange(samples) * c.sample_interval_s, "s", "time after trigger")
    _coordinate(group, "frequency", c.frequencies_hz, "Hz", "comb lines")
    _coordinate(group, "side_line", c.side_lines_hz, "Hz", "lines beside the drive frequency")
    _coordinate(group, "point", np.arange(points), "1", "order of capture")
    consolidate(path)
    sync_tree(path)


def _coordinate(group: zarr.Group, name: str, values: NDArray[Any], units: str, long_name: str) -> None:
    array = group.create_array(
        name,
        shape=values.shape,
        dtype=values.dtype,
        dimension_names=(name,),
        attributes={"units": units, "long_name": long_name},
    )
    array[:] = values


def consolidate(path: Path) -> None:
    """Gather the metadata of the arrays, so that readers need not list the folder; their shapes never change."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # zarr: consolidated metadata is not yet part of the format 3 standard
        zarr.consolidate_metadata(path, zarr_format=3)


def put_attributes(path: Path, changes: dict[str, Any], dropped: Sequence[str] = ()) -> None:
    """Change attributes of the group: all of them or none, durable, whatever happens meanwhile."""
    file = path / "zarr.json"
    document = json.loads(file.read_text("utf-8"))
    kept = {key: value for key, value in document["attributes"].items() if key not in dropped}
    document["attributes"] = kept | changes
    written = file.with_name("zarr.json.partial")
    with written.open("w", encoding="utf-8") as new:
        json.dump(document, new)
        new.flush()
        os.fsync(new.fileno())
    written.replace(file)
    sync_folder(path)


def points_in_chunk(path: Path) -> int:
    """How many points a chunk of counts holds."""
    return zarr.open_array(path / "counts", mode="r").chunks[0]


def chunk_file(path: Path, number: int) -> Path:
    """Where a chunk of counts is kept."""
    return path / "counts" / "c" / str(number) / "0"
