import os
import signal
import subprocess
import sys
import threading
from pathlib import Path

import psutil
import pytest

from acquire.hold import StoreHold
from acquire.recorder import Recorder
from tests.acquire.making import SAMPLES, circumstances, header


def test_a_store_that_is_being_recorded_cannot_be_held_by_another(tmp_path: Path) -> None:
    store = tmp_path / "a.zarr"
    with Recorder(store, header(), circumstances(3), "int16", SAMPLES, 3):
        with pytest.raises(ValueError, match="being recorded by another daemon"):
            StoreHold(store, wait_s=0.1)
        os.kill(psutil.Process().children()[0].pid, signal.SIGKILL)
        StoreHold(store).close()  # it fell with the process


def test_it_is_waited_for(tmp_path: Path) -> None:
    first = StoreHold(tmp_path)
    letting_go = threading.Timer(0.2, first.close)
    letting_go.start()
    StoreHold(tmp_path, wait_s=20.0).close()
    letting_go.join()


def test_it_is_not_passed_to_other_processes(tmp_path: Path) -> None:
    hold = StoreHold(tmp_path)
    with subprocess.Popen([sys.executable, "-c", "input()"], stdin=subprocess.PIPE, close_fds=False) as other:
        hold.close()
        StoreHold(tmp_path, wait_s=20.0).close()  # while the other process still runs
        other.communicate(b"\n")
