"""Space in a store that no study needs any more: found first, and freed where asked for."""

from __future__ import annotations

import io
from collections.abc import Set
from dataclasses import dataclass

import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq

from harness.trials.store import Store, segments_in


@dataclass(frozen=True)
class Reclaimable:
    """What a store holds, and how much of it nobody needs."""

    segments: int
    size: int  # bytes, of all segments
    cases: int  # with results in the store
    cases_unneeded: int
    size_unneeded: int  # bytes, by their share of each segment; damaged ones count whole
    damaged: int  # segments


def look_over(store: Store, needed: Set[str]) -> Reclaimable:
    """See what a store could do without; needed: keys of cases."""
    size = unneeded = 0.0
    cases: set[str] = set()
    for path in segments_in(store.folder):
        size += path.stat().st_size
        if path in store.damaged:
            unneeded += path.stat().st_size
            continue
        keys = pq.read_table(path, columns=["case"])["case"].to_pylist()
        cases |= set(keys)
        share = sum(key not in needed for key in keys) / max(1, len(keys))
        unneeded += share * path.stat().st_size
    return Reclaimable(
        len(segments_in(store.folder)),
        int(size),
        len(cases),
        len(cases - needed),
        int(unneeded),
        len(store.damaged),
    )


def reclaim(store: Store, needed: Set[str]) -> None:
    """Remove all that is not needed; a segment that is needed in part is written anew first.

    A crash in between leaves some results twice, which does no harm.

    raises      OSError: the disk is full, or the store can't be written
    """
    for path in segments_in(store.folder):
        if path in store.damaged:
            path.unlink()
            continue
        table = pq.read_table(path)
        kept = table.filter(pc.is_in(table["case"], pa.array(sorted(needed), pa.string())))
        if kept.num_rows == table.num_rows:
            continue
        if kept.num_rows:
            content = io.BytesIO()
            pq.write_table(kept, content, compression="zstd")
            store.write_segment(content.getvalue())
        path.unlink()
