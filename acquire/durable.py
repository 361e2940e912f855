"""Making files and names survive the death of the machine."""

from __future__ import annotations

import os
from pathlib import Path


def sync_folder(folder: Path) -> None:
    """Make the names in a folder durable."""
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        os.fsync(descriptor)
    finally:
        os.close(descriptor)


def sync_file(file: Path) -> None:
    """Make the contents of a file durable."""
    with file.open("rb") as opened:
        os.fsync(opened.fileno())


def sync_below(top: Path, file: Path) -> None:
    """Make a file durable, and the names of the folders on the way to it from `top`, which may be new."""
    sync_file(file)
    for folder in file.parents:
        if folder == top:
            return
        sync_folder(folder)


def sync_tree(top: Path) -> None:
    """Make a folder with all that is in it durable."""
    for folder, _, files in os.walk(top):
        for name in files:
            sync_file(Path(folder, name))
        sync_folder(Path(folder))
    sync_folder(top.parent)
