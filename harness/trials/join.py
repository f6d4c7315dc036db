"""Stores brought together: what the parts of a study stored elsewhere becomes one store."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path

from harness.trials.files import write_whole
from harness.trials.store import Store, StoreError, segment_is_whole, segments_in


@dataclass(frozen=True)
class Joined:
    """What came of it."""

    added: int  # segments
    there_already: int
    damaged: tuple[Path, ...]  # segments that were left out


def store_at(folder: Path) -> Path:
    """The store that a folder is, or holds.

    raises      StoreError: it is none
    """
    for place in (folder, folder / ".store"):
        if segments_in(place):
            return place
    raise StoreError(f"{folder}: holds no trials; name a store, or the folder that .store lies in")


def join(store: Store, others: Sequence[Path]) -> Joined:
    """Copy the segments of other stores into one; each is complete there or absent.

    raises      StoreError: one is no store; OSError: a segment can't be read or written
    """
    places = [store_at(folder) for folder in others]
    added = there_already = 0
    damaged = []
    for path in (path for place in places for path in segments_in(place)):
        content = path.read_bytes()
        if (store.folder / path.name).exists():
            there_already += 1
        elif not segment_is_whole(path, content):
            damaged.append(path)
        else:
            write_whole(store.folder / path.name, partial(Path.write_bytes, data=content))
            added += 1
    return Joined(added, there_already, tuple(damaged))
