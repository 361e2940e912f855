"""A bank is served bit for bit, and nothing that is not in it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from profiles.bench import Bench
from profiles.load import load_instrument
from sim_hardware.bank import Bank, BankError
from sim_hardware.bench import SimulatedBench, bank_bench
from sim_hardware.clock import Timeline
from tests.sim_hardware.bench_files import a_bench
from tests.sim_hardware.talking import say

DEG = np.pi / 180


def arrays(dtype: str = "int16", strict: bool = True) -> dict[str, Any]:
    """Five points: poses A, B, A, C, B. Awkward numbers, so that a lost digit shows."""
    random = np.random.default_rng(5)
    place = {"A": (0.0, 0.1, 0.0), "B": (1.25e-3, 0.1, 10 * DEG), "C": (-2e-3, 0.12, -7.1234 * DEG)}
    carriage = np.array([(place[p][0], 0.0, place[p][1], place[p][2], 0.0) for p in "ABACB"])
    info = np.iinfo(dtype)
    mm = np.array([1e-3, 1e-3, 1e-3, DEG, DEG])
    return {
        "carriage": carriage,
        "reported_before": np.round(carriage / mm + random.normal(0, 1e-3, (5, 5)), 4) * mm,
        "reported_after": np.round(carriage / mm + random.normal(0, 1e-3, (5, 5)), 4) * mm,
        "counts": random.integers(info.min, info.max, (5, 300), dtype=dtype, endpoint=True),
        "volts_per_count": random.random(5) / 3e4,
        "volts_at_zero": random.normal(size=5),
        "interval_s": 1e-8 * (1 + random.random(5)),
        "start_s": random.random(5) * 1e-4,
        "full_scale_v": np.full(5, 0.8),
        "averages": np.arange(5) + 16,
        "lowest": np.int64(info.min),
        "highest": np.int64(info.max),
        "temperature_c": 20 + random.random(5),
        "strict": np.bool_(strict),
    }


def saved(tmp_path: Path, content: Mapping[str, Any]) -> Path:
    path = tmp_path / "bank.npz"
    np.savez(path, **content)
    return path


def bank_at(tmp_path: Path, **kind: Any) -> tuple[dict[str, Any], SimulatedBench]:
    content = arrays(**kind)
    return content, assembled(a_bench(), Bank.read(saved(tmp_path, content)))


def assembled(bench: Bench, bank: Bank) -> SimulatedBench:
    instruments = {role: load_instrument(a.profile) for role, a in bench.instruments.items()}
    simulated = bank_bench(bench, instruments, Timeline(None), bank)
    assert say(simulated.converse["stage"](), b"$H\n") == b"ok\n"
    assert say(simulated.converse["generator"](), b"BURS:STAT ON;:OUTP ON;*OPC?\n") == b"1\n"
    return simulated


def prefix_bench() -> Bench:
    bench = a_bench()
    stage = bench.instruments["stage"].model_copy(update={"profile": "stage-prefix"})
    return bench.model_copy(update={"instruments": {**bench.instruments, "stage": stage}})


def move_words(pose: np.ndarray[Any, Any]) -> bytes:
    x, _, z, theta, _ = pose
    return f"G90 G21 G0 X{x * 1e3:.4f} Z{z * 1e3:.4f} B{theta / DEG:.4f}\n".encode()


def report(simulated: SimulatedBench) -> list[float]:
    text = say(simulated.converse["stage"](), b"?").decode()
    return [float(v) for v in text.split("MPos:")[1].split("|")[0].split(",")]


@pytest.mark.parametrize("dtype", ["int16", "int8"])
def test_every_point_comes_back_bit_for_bit_with_its_scaling_reports_and_temperature(
    tmp_path: Path, dtype: str
) -> None:
    content, simulated = bank_at(tmp_path, dtype=dtype)
    stage, scope = simulated.converse["stage"](), simulated.converse["oscilloscope"]()
    thermometer = simulated.converse["thermometer"]()
    form = "WORD;UNS 0" if dtype == "int16" else "BYTE"
    say(scope, f":WAV:FORM {form}\n".encode())
    mm = np.array([1e-3, 1e-3, 1e-3, DEG, DEG])
    present = [0, 2, 3]
    for k in range(5):
        assert say(stage, move_words(content["carriage"][k])) == b"ok\n"
        assert say(thermometer, b"MEAS:TEMP?\n") == b"%s\n" % repr(float(content["temperature_c"][k])).encode()
        before = np.array(report(simulated))[present]
        np.testing.assert_allclose(before, (content["reported_before"][k] / mm)[present], atol=1e-9)
        assert say(scope, b":INIT;*OPC?\n") == b"1\n"
        after = np.array(report(simulated))[present]
        np.testing.assert_allclose(after, (content["reported_after"][k] / mm)[present], atol=1e-9)
        fields = say(scope, b":WAV:PRE?\n").decode().split(",")
        assert int(fields[3]) == content["averages"][k]
        x_increment, x_origin, x_reference, y_increment, y_origin, y_reference = map(float, fields[4:])
        assert x_reference == 0
        assert y_reference == (0 if dtype == "int16" else 128)
        assert (x_increment, x_origin) == (content["interval_s"][k], content["start_s"][k])
        assert (y_increment, y_origin) == (content["volts_per_count"][k], content["volts_at_zero"][k])
        data = say(scope, b":WAV:DATA?\n")
        if dtype == "int16":
            counts = np.frombuffer(data[5:-1], ">i2").astype(np.int16)
        else:
            counts = (np.frombuffer(data[5:-1], np.uint8).astype(np.int16) - 128).astype(np.int8)
        np.testing.assert_array_equal(counts, content["counts"][k])


def test_a_pose_that_was_never_visited_is_refused_by_the_stage(tmp_path: Path) -> None:
    content, simulated = bank_at(tmp_path)
    stage = simulated.converse["stage"]()
    assert say(stage, b"G90 G21 G0 X0.5 Z100 B0\n") == b"error:15\n"
    assert say(stage, move_words(content["carriage"][0])) == b"ok\n"


def test_after_its_last_visit_a_pose_is_refused(tmp_path: Path) -> None:
    content, simulated = bank_at(tmp_path)
    stage, scope = simulated.converse["stage"](), simulated.converse["oscilloscope"]()
    for _ in range(2):
        assert say(stage, move_words(content["carriage"][0])) == b"ok\n"
        assert say(scope, b":INIT;*OPC?\n") == b"1\n"
    assert say(stage, move_words(content["carriage"][0])) == b"error:15\n"
    assert say(stage, move_words(content["carriage"][1])) == b"ok\n"


def test_a_visit_serves_one_point_however_often_it_is_captured_and_none_when_it_is_not(tmp_path: Path) -> None:
    content, simulated = bank_at(tmp_path)
    stage, scope = simulated.converse["stage"](), simulated.converse["oscilloscope"]()
    say(scope, b":WAV:FORM WORD;UNS 0\n")

    def counts() -> Any:
        assert say(scope, b":INIT;*OPC?\n") == b"1\n"
        return np.frombuffer(say(scope, b":WAV:DATA?\n")[5:-1], ">i2")

    def report_x() -> float:
        return report(simulated)[0]

    before, after = (round(float(content[f"reported_{w}"][0, 0]) * 1e3, 4) for w in ("before", "after"))
    say(stage, move_words(content["carriage"][0]))
    assert report_x() == before
    np.testing.assert_array_equal(counts(), content["counts"][0])  # a trial, read before the point itself
    assert say(scope, b":INIT;*OPC?\n") == b"1\n"
    assert report_x() == after
    assert say(scope, b":WAV:COUN?\n") == b"16\n"
    np.testing.assert_array_equal(counts(), content["counts"][0])
    say(stage, move_words(content["carriage"][1]))
    say(stage, move_words(content["carriage"][0]))
    np.testing.assert_array_equal(counts(), content["counts"][2])
    say(stage, move_words(content["carriage"][1]))  # the visit before was without a capture
    np.testing.assert_array_equal(counts(), content["counts"][1])


def test_the_temperature_is_that_of_the_point_that_is_served_next(tmp_path: Path) -> None:
    content, simulated = bank_at(tmp_path)
    stage, scope = simulated.converse["stage"](), simulated.converse["oscilloscope"]()

    def temperature() -> float:
        return float(say(simulated.converse["thermometer"](), b"MEAS:TEMP?\n"))

    stored = content["temperature_c"].tolist()
    assert temperature() == stored[0]
    for k in range(5):
        say(stage, move_words(content["carriage"][k]))
        assert temperature() == stored[k]
        say(scope, b":INIT;*OPC?\n")
        assert temperature() == stored[min(k + 1, 4)]


def test_before_it_is_sent_anywhere_nothing_can_be_captured(tmp_path: Path) -> None:
    _, simulated = bank_at(tmp_path)
    assert say(simulated.converse["oscilloscope"](), b":INIT\nSYST:ERR?\n").startswith(b"-300,")


def test_a_stage_with_backlash_may_pass_below_its_targets_but_not_measure_there(tmp_path: Path) -> None:
    content = arrays()
    document = a_bench().model_dump(exclude_none=True)
    document["axes"]["x"]["backlash_mm"] = 0.1
    document["axes"]["theta"]["backlash_deg"] = 0.5
    simulated = assembled(Bench.model_validate(document), Bank.read(saved(tmp_path, content)))
    stage, scope = simulated.converse["stage"](), simulated.converse["oscilloscope"]()
    assert say(stage, b"G90 G21 G0 X1.15 Z100 B9.5\n") == b"ok\n"
    assert say(scope, b":INIT\nSYST:ERR?\n").startswith(b"-300,")
    assert say(stage, move_words(content["carriage"][1])) == b"ok\n"
    assert say(scope, b":INIT;*OPC?\n") == b"1\n"
    assert say(stage, b"G90 G21 G0 X1.05 Z100 B9.5\n") == b"error:15\n"


def test_the_prefix_family_refuses_with_its_own_error_and_takes_joined_moves(tmp_path: Path) -> None:
    content = arrays()
    bench = prefix_bench()
    instruments = {role: load_instrument(a.profile) for role, a in bench.instruments.items()}
    bank = Bank.read(saved(tmp_path, content))
    simulated = bank_bench(bench, instruments, Timeline(None), bank)
    stage = simulated.converse["stage"]()
    say(stage, b"1OR;3OR;4OR\r\n")
    assert say(stage, b"1PA0.5;3PA100;4PA0;TB?\r\n") == b"7, PARAMETER OUT OF RANGE\r\n"
    assert say(stage, b"1PA1.25;3PA100;4PA10;TB?\r\n") == b"0, NO ERROR\r\n"
    assert say(stage, b"1TP?\r\n") == f"{content['reported_before'][1][0] * 1e3:.4f}\r\n".encode()


def test_a_target_rounded_the_other_way_is_still_that_target(tmp_path: Path) -> None:
    content = arrays()
    content["carriage"][3, 0] = -2.00005e-3
    simulated = assembled(a_bench(), Bank.read(saved(tmp_path, content)))
    for text in (b"X-2.0000", b"X-2.0001"):
        words = b"G0 %s Z120 B-7.1234\n" % text
        assert say(simulated.converse["stage"](), words) == b"ok\n"


def test_a_bank_that_is_not_strict_serves_in_turn_whatever_the_pose(tmp_path: Path) -> None:
    content, simulated = bank_at(tmp_path, strict=False)
    stage, scope = simulated.converse["stage"](), simulated.converse["oscilloscope"]()
    say(scope, b":WAV:FORM WORD;UNS 0\n")
    for k in range(7):
        assert say(stage, b"G90 G21 G0 X%d Z100\n" % k) == b"ok\n"
        assert report(simulated)[0] == k
        assert say(scope, b":INIT;*OPC?\n") == b"1\n"
        counts = np.frombuffer(say(scope, b":WAV:DATA?\n")[5:-1], ">i2")
        np.testing.assert_array_equal(counts, content["counts"][k % 5])


def test_samples_too_narrow_for_the_bank_are_a_settings_conflict(tmp_path: Path) -> None:
    content, simulated = bank_at(tmp_path)
    scope = simulated.converse["oscilloscope"]()
    say(simulated.converse["stage"](), move_words(content["carriage"][0]))
    assert say(scope, b":WAV:FORM BYTE;:INIT;*OPC?\n") == b"1\n"
    assert say(scope, b":WAV:DATA?\nSYST:ERR?\n").startswith(b"-221,")


def test_without_the_generator_the_bank_is_not_served(tmp_path: Path) -> None:
    content, simulated = bank_at(tmp_path)
    say(simulated.converse["stage"](), move_words(content["carriage"][0]))
    say(simulated.converse["generator"](), b"OUTP OFF\n")
    scope = simulated.converse["oscilloscope"]()
    assert say(scope, b":INIT;*OPC?\n") == b""
    assert scope.waiting


def missing(content: dict[str, Any]) -> dict[str, Any]:
    return {k: v for k, v in content.items() if k != "averages"}


def misshapen(content: dict[str, Any]) -> dict[str, Any]:
    return content | {"start_s": content["start_s"][:3]}


def floating(content: dict[str, Any]) -> dict[str, Any]:
    return content | {"counts": content["counts"].astype(float)}


@pytest.mark.parametrize(
    ("spoil", "says"), [(missing, "averages"), (misshapen, "start_s"), (floating, "counts")], ids=lambda v: str(v)
)
def test_a_bank_that_does_not_fit_is_refused_in_one_line(tmp_path: Path, spoil: Any, says: str) -> None:
    path = saved(tmp_path, spoil(arrays()))
    with pytest.raises(BankError, match=says) as refusal:
        Bank.read(path)
    assert "\n" not in str(refusal.value)


def test_a_file_that_is_no_bank_is_refused(tmp_path: Path) -> None:
    path = tmp_path / "bank.npz"
    with pytest.raises(BankError, match="cannot be read"):
        Bank.read(path)
    path.write_bytes(b"PK\x03\x04 nothing")
    with pytest.raises(BankError, match="cannot be read"):
        Bank.read(path)


def test_counts_of_another_byte_order_are_the_same_counts(tmp_path: Path) -> None:
    content = arrays()
    bank = Bank.read(saved(tmp_path, content | {"counts": content["counts"].astype(">i2")}))
    np.testing.assert_array_equal(bank.counts, content["counts"])
    assert bank.counts.dtype.isnative
    assert len(replace(bank)) == 5
