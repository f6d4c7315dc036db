"""Files that are complete or absent: written beside their place, then moved there."""

from __future__ import annotations

import os
import uuid
from collections.abc import Callable
from pathlib import Path


def write_whole(path: Path, write: Callable[[Path], object]) -> None:
    """Let `write` fill a file beside `path`, then move it there in one step.

    A crash or a full disk leaves the file as it was, and no half of a new one.

    raises      OSError as writing does; the file beside is removed
    """
    beside = path.with_name(f".{path.name}.{uuid.uuid4().hex[:8]}")
    try:
        write(beside)
        with open(beside, "rb+") as handle:
            os.fsync(handle.fileno())
        os.replace(beside, path)
    finally:
        beside.unlink(missing_ok=True)
    _sync_folder(path.parent)


def write_text_whole(path: Path, text: str) -> None:
    """Write a text file, complete or not at all."""
    write_whole(path, lambda beside: beside.write_text(text, encoding="utf-8"))


def _sync_folder(folder: Path) -> None:
    """Make the move itself last through a power cut, where the system can."""
    try:
        handle = os.open(folder, os.O_RDONLY)
    except OSError:  # Windows opens no folders
        return
    try:
        os.fsync(handle)
    finally:
        os.close(handle)
