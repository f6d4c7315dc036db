"""The store: scores of every case and span ever run, in files that are complete or absent.

Only the driver writes. Each segment is a Parquet file with one row a case and span, whose columns
hold lists: one value a trial, or one sum a scan. Segments are never changed, only added, and each
has a digest of its content in its name.
"""

from __future__ import annotations

import hashlib
import io
import time
from collections.abc import Iterable, Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pyarrow as pa
import pyarrow.parquet as pq
from filelock import FileLock, Timeout

from harness.trials.files import write_whole
from harness.trials.posterior_scores import (
    POSTERIOR_SCAN_COLUMNS,
    POSTERIOR_TABLE_COLUMNS,
    POSTERIOR_TRIAL_COLUMNS,
    PosteriorScores,
)
from harness.trials.score import SCAN_COLUMNS, TRIAL_COLUMNS, SpanScores
from harness.trials.task import Span, SpanResult

_COUNTS_OF_POSTERIORS = {"posteriors", "gaps", "scan_posteriors", "scan_gaps", "scan_gaps_held"}
_INTEGERS = {"lost_at", "estimates", "impossible", "outside", "on_target", "scan_estimates"}
_INTEGERS |= _COUNTS_OF_POSTERIORS | set(POSTERIOR_TABLE_COLUMNS)
_FLAGS = {"failed"}
# Null where posteriors were not asked for; tables lie trial by trial in one list.
_POSTERIOR = (*POSTERIOR_TRIAL_COLUMNS, *POSTERIOR_TABLE_COLUMNS, *POSTERIOR_SCAN_COLUMNS)


def _list_type(column: str) -> pa.DataType:
    if column in _INTEGERS:
        return pa.list_(pa.int32())
    return pa.list_(pa.bool_() if column in _FLAGS else pa.float64())


_SCHEMA = pa.schema(
    [
        ("case", pa.string()),
        ("span", pa.int32()),
        ("trials", pa.int32()),
        ("us_per_scan", pa.float64()),
        *((column, _list_type(column)) for column in (*TRIAL_COLUMNS, *SCAN_COLUMNS)),
        *((column, _list_type(column)) for column in _POSTERIOR),
    ],
    metadata={"trackassay": "segment 1"},
)

SECONDS_BETWEEN_SEGMENTS = 2.0


class StoreError(Exception):
    """A store that can't be used; the message says why and what to do."""


@dataclass
class Store:
    """An open store; `damaged` names the segments that can't be read, whose trials are run anew."""

    folder: Path
    damaged: list[Path] = field(default_factory=list)
    _place_of: dict[tuple[str, Span], Path | None] = field(default_factory=dict)
    _pending: list[SpanResult] = field(default_factory=list)  # their place is None
    _last_written: float = field(default_factory=time.monotonic)

    def __contains__(self, case_and_span: tuple[str, Span]) -> bool:
        return case_and_span in self._place_of

    def add(self, results: Iterable[SpanResult]) -> None:
        """Keep results; they reach the disk with the first that come two seconds after the last."""
        for result in results:
            self._pending.append(result)
            self._place_of[result.key, result.span] = None
        if time.monotonic() - self._last_written >= SECONDS_BETWEEN_SEGMENTS:
            self.flush()

    def flush(self) -> None:
        """Write what is pending as one segment."""
        self._last_written = time.monotonic()
        if not self._pending:
            return
        table = pa.Table.from_pylist([_row(result) for result in self._pending], schema=_SCHEMA)
        content = io.BytesIO()
        pq.write_table(table, content, compression="zstd")
        path = self.write_segment(content.getvalue())
        self._place_of |= {(result.key, result.span): path for result in self._pending}
        self._pending.clear()

    def write_segment(self, content: bytes) -> Path:
        """Write a segment, complete or not at all; its name tells its digest."""
        path = self.folder / f"segment-{time.time_ns():020d}-{_digest(content)}.parquet"
        write_whole(path, lambda beside: beside.write_bytes(content))
        return path

    def read(self, wanted: dict[str, list[Span]]) -> dict[str, list[SpanResult]]:
        """Results of the cases and spans wanted, in the spans' order; absent ones are left out."""
        self.flush()
        asked = [(key, span) for key, spans in wanted.items() for span in spans]
        places = {self._place_of[one] for one in asked if one in self._place_of}
        found = {
            (result.key, result.span): result
            for place in sorted(place for place in places if place is not None)
            for result in _results(place, list(wanted))
        }
        return {
            key: [found[key, span] for span in spans if (key, span) in found]
            for key, spans in wanted.items()
        }

    def look(self) -> None:
        """See what the segments on disk hold; those that can't be read are named in `damaged`."""
        for path in segments_in(self.folder):
            try:
                self._place_of |= dict.fromkeys(_contents(path), path)
            except (OSError, ValueError, pa.ArrowException):
                self.damaged.append(path)


@contextmanager
def locked_store(folder: Path) -> Iterator[Store]:
    """Open a store, made if absent, for one run at a time; a crash leaves no lock behind.

    raises      StoreError: another run uses it, or the folder can't be made, read or written
    """
    with ExitStack() as stack:
        try:
            folder.mkdir(parents=True, exist_ok=True)
            stack.enter_context(FileLock(folder / "lock", timeout=0))
            store = Store(folder)
            store.look()
        except Timeout as error:
            raise StoreError(
                f"{folder}: another run is using this store; wait for it, or name another "
                "with --store"
            ) from error
        except OSError as error:
            raise StoreError(
                f"{folder}: can't be used as a store ({error.strerror}); name another with --store"
            ) from error
        yield store


def _row(result: SpanResult) -> dict[str, object]:
    scores = result.scores
    return {
        "case": result.key,
        "span": result.span.number,
        "trials": result.span.trials,
        "us_per_scan": result.us_per_scan,
        **{column: getattr(scores, column) for column in (*TRIAL_COLUMNS, *SCAN_COLUMNS)},
        **{
            column: None if scores.posterior is None else getattr(scores.posterior, column).ravel()
            for column in _POSTERIOR
        },
    }


def _digest(content: bytes) -> str:
    return hashlib.sha256(content).hexdigest()[:32]


def segments_in(folder: Path) -> list[Path]:
    """The segments in a folder, in the order of their names."""
    return sorted(folder.glob("segment-*.parquet"))


def segment_is_whole(path: Path, content: bytes) -> bool:
    """Whether a segment is as it was written, which the digest in its name tells."""
    return path.stem.endswith(_digest(content))


def _contents(path: Path) -> Iterator[tuple[str, Span]]:
    """What a segment holds.

    raises      ValueError: it is not as it was written
    """
    content = path.read_bytes()
    if not segment_is_whole(path, content):
        raise ValueError(f"{path} is damaged")
    table = pq.read_table(io.BytesIO(content), columns=["case", "span", "trials"])
    columns = [table[name].to_pylist() for name in table.column_names]
    for key, number, trials in zip(*columns, strict=True):
        yield key, Span(number, trials)


def _results(path: Path, keys: list[str]) -> Iterator[SpanResult]:
    table = pq.read_table(path, schema=_SCHEMA, filters=[("case", "in", keys)])
    columns = {name: table[name] for name in _SCHEMA.names}

    def values(names: Iterable[str], row: int) -> dict[str, np.ndarray]:
        return {
            name: np.array(columns[name][row].values.to_numpy(zero_copy_only=False))
            for name in names
        }

    for i in range(table.num_rows):
        span = Span(columns["span"][i].as_py(), columns["trials"][i].as_py())
        posterior = None
        if columns["posteriors"][i].is_valid:
            found = values(_POSTERIOR, i)
            for name in POSTERIOR_TABLE_COLUMNS:
                found[name] = found[name].reshape(span.trials, -1)
            posterior = PosteriorScores(**found)
        scores = SpanScores(**values((*TRIAL_COLUMNS, *SCAN_COLUMNS), i), posterior=posterior)
        yield SpanResult(
            columns["case"][i].as_py(), span, scores, columns["us_per_scan"][i].as_py()
        )
