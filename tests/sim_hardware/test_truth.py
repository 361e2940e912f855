"""Reading the [simulation] table."""

from pathlib import Path

import pytest

from sim_hardware.truth import Bubble, Truth, TruthError, read_truth


def written(folder: Path, text: str) -> Path:
    path = folder / "bench.toml"
    path.write_text(text, encoding="utf-8")
    return path


def test_an_empty_table_means_an_ideal_bench(tmp_path: Path) -> None:
    assert read_truth(written(tmp_path, "[simulation]\n")) == Truth()


def test_a_full_table_is_read(tmp_path: Path) -> None:
    text = """
    [simulation]
    seed = 7
    [simulation.element]
    edge = "soft"
    [simulation.mechanics]
    pivot_offset_mm = [0.1, 0, -0.2]
    lost_steps = [{axis = "theta", onset_move = 3, size_deg = 0.5}]
    [simulation.tank]
    echoes = [{extra_path_mm = 20, level = -0.1}]
    [[simulation.faults]]
    kind = "bubble"
    radius_mm = 0.1
    onset_s = 30
    """
    truth = read_truth(written(tmp_path, text))
    assert (truth.seed, truth.element.edge) == (7, "soft")
    assert list(truth.mechanics.pivot_offset_mm) == [0.1, 0, -0.2]
    assert truth.tank.echoes[0].level == -0.1
    assert isinstance(truth.faults[0], Bubble)


def test_all_problems_stand_in_one_line_with_their_keys(tmp_path: Path) -> None:
    text = "[simulation]\nspeed = 1\n[simulation.source]\nradius_mm = -1\n[simulation.element]\nedge = 'hard'\n"
    with pytest.raises(TruthError) as caught:
        read_truth(written(tmp_path, text))
    message = str(caught.value)
    assert "\n" not in message
    for part in ("simulation.speed", "simulation.source.radius_mm", "-1", "simulation.element.edge", "'hard'"):
        assert part in message


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("[simulation", "no valid TOML"),
        ("name = 'x'\n", "no [simulation] table"),
        ("[[simulation.faults]]\nkind = 'flood'\nonset_s = 1\n", "flood"),
        ("[[simulation.faults]]\nkind = 'drive-step'\npercent = 5\n", "exactly one of onset_s and onset_capture"),
        ("[simulation.source]\nfocal_length_mm = 2\n", "focal_length_mm 2.0 is below radius_mm"),
        ("[simulation.mechanics]\nlost_steps = [{axis = 'x', onset_move = 1, size_deg = 1}]\n", "takes size_mm"),
    ],
)
def test_a_wrong_table_is_refused_with_the_reason(tmp_path: Path, text: str, expected: str) -> None:
    with pytest.raises(TruthError) as caught:
        read_truth(written(tmp_path, text))
    assert expected in str(caught.value)
    assert "\n" not in str(caught.value)


def test_a_missing_file_is_named(tmp_path: Path) -> None:
    with pytest.raises(TruthError, match=r"nowhere\.toml: cannot be read"):
        read_truth(tmp_path / "nowhere.toml")


def test_faults_begin_and_end_when_they_say() -> None:
    passing = Bubble(kind="bubble", radius_mm=1, onset_s=10, duration_s=5)
    assert [passing.active(t, 0) for t in (9.9, 10, 14.9, 15)] == [False, True, True, False]
    lasting = Bubble(kind="bubble", radius_mm=1, onset_capture=3)
    assert [lasting.active(0, n) for n in (2, 3, 1000)] == [False, True, True]
