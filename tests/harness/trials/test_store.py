from __future__ import annotations

import pytest

from harness.trials.files import write_text_whole, write_whole
from harness.trials.score import SCAN_COLUMNS, TRIAL_COLUMNS
from harness.trials.store import StoreError, locked_store
from harness.trials.task import Span, run_task, spans_of


@pytest.fixture
def results(make_task):
    return run_task(make_task(130, ["pda", "known"]))


def test_what_was_stored_comes_back_to_the_bit(tmp_path, results):
    with locked_store(tmp_path) as store:
        store.add(results)
    with locked_store(tmp_path) as store:
        assert ("pda", Span(0, 100)) not in store  # never flushed
        store.add(results)
        store.flush()
    with locked_store(tmp_path) as store:
        assert ("pda", Span(1, 30)) in store
        assert ("pda", Span(1, 100)) not in store
        found = store.read({"pda": spans_of(130), "known": spans_of(130), "none": spans_of(130)})
    assert found["none"] == []
    stored = {(one.key, one.span): one for one in results}
    for one in found["pda"] + found["known"]:
        original = stored.pop((one.key, one.span))
        assert one.us_per_scan == original.us_per_scan
        for name in (*TRIAL_COLUMNS, *SCAN_COLUMNS):
            ours, theirs = getattr(one.scores, name), getattr(original.scores, name)
            assert ours.astype(theirs.dtype).tobytes() == theirs.tobytes(), name
        assert one.scores.posterior is None
    assert not stored


@pytest.mark.parametrize(
    "harm",
    [
        lambda whole: whole[: len(whole) // 2],
        lambda whole: b"",
        lambda whole: b"a foreign file" * 100,
        lambda whole: whole[:700] + bytes([whole[700] ^ 0x10]) + whole[701:],
    ],
    ids=["truncated", "empty", "foreign", "one bit flipped"],
)
def test_a_damaged_segment_is_named_and_counts_as_absent(harm, tmp_path, results):
    with locked_store(tmp_path) as store:
        store.add(results[:2])
        store.flush()
        store.add(results[2:])
        store.flush()
    first, second = sorted(tmp_path.glob("segment-*.parquet"))
    first.write_bytes(harm(first.read_bytes()))
    with locked_store(tmp_path) as store:
        assert store.damaged == [first]
        assert (results[0].key, results[0].span) not in store
        assert (results[2].key, results[2].span) in store
        assert second not in store.damaged


def test_a_second_run_on_the_same_store_gets_a_clear_message(tmp_path):
    with (
        locked_store(tmp_path),
        pytest.raises(StoreError, match="another run is using this store"),
        locked_store(tmp_path),
    ):
        pass
    with locked_store(tmp_path):
        pass  # the lock is free again


def test_a_store_that_is_a_file_is_refused(tmp_path):
    (tmp_path / "store").write_text("not a folder")
    with (
        pytest.raises(StoreError, match="can't be used as a store"),
        locked_store(tmp_path / "store"),
    ):
        pass


def test_a_file_is_written_whole_or_not_at_all(tmp_path):
    path = tmp_path / "table.csv"
    write_text_whole(path, "before")

    def breaks_off(beside):
        beside.write_text("half of")
        raise OSError(28, "No space left on device")

    with pytest.raises(OSError, match="No space left"):
        write_whole(path, breaks_off)
    assert path.read_text() == "before"
    assert [entry.name for entry in tmp_path.iterdir()] == ["table.csv"]
