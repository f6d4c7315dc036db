"""What nobody needs leaves the store, and nothing else does."""

import tomllib
from pathlib import Path

import pytest

import trackassay
from harness.api import reclaim_store
from harness.trials.store import Store, StoreError

STUDY = Path(__file__).parents[3] / "studies" / "smoke.toml"


@pytest.fixture
def runs(tmp_path):
    """Two studies that share a store; their cases differ but for one."""
    document = tomllib.loads(STUDY.read_text())
    del document["sweep"]
    strategies = document["strategies"]
    document["strategies"] = {name: strategies[name] for name in ("nearest", "pda")}
    first = trackassay.study_from(document, name="first")
    second = first.with_changes({"strategies.pda.gate_probability": 0.99})
    folders = []
    for name, study in (("first", first), ("second", second)):
        outcome = trackassay.run_study(study, into=tmp_path / name, workers=1)
        folders.append(outcome.folder)
    return tmp_path / ".store", folders


def keys_in(folder):
    store = Store(folder)
    store.look()
    return {key for key, _ in store._place_of}


def test_all_is_needed_while_both_results_are_there(runs):
    store, _ = runs
    before = keys_in(store)
    assert "needed by no study: 0 cases" in reclaim_store([], store, remove=True)
    assert keys_in(store) == before
    assert len(before) == 3


def test_what_only_a_removed_folder_needed_goes_and_what_it_shared_stays(runs):
    store, (_, second) = runs
    for path in sorted(second.rglob("*"), reverse=True):
        path.rmdir() if path.is_dir() else path.unlink()
    second.rmdir()
    before = keys_in(store)
    assert "needed by no study: 1 cases" in reclaim_store([], store)
    assert keys_in(store) == before  # nothing was asked to go
    assert "removed" in reclaim_store([], store, remove=True)
    assert len(keys_in(store)) == 2
    assert "needed by no study: 0 cases" in reclaim_store([], store)


def test_a_study_named_keeps_its_unfinished_trials(runs, tmp_path):
    store, folders = runs
    for folder in folders:
        (folder / "manifest.json").unlink()
    text = STUDY.read_text()
    kept = tmp_path / "kept.toml"
    kept.write_text(text[: text.index("[sweep]")] + text[text.index("[track_loss]") :])
    reclaim_store([kept], store, remove=True)
    assert len(keys_in(store)) == 2


def test_damaged_segments_go_too(runs):
    store, _ = runs
    (store / "segment-0-0.parquet").write_bytes(b"not a segment")
    assert "damaged: 1 segments" in reclaim_store([], store, remove=True)
    assert not (store / "segment-0-0.parquet").exists()


def test_no_store_is_said_so(tmp_path):
    with pytest.raises(StoreError, match="there is no store; name it with --store"):
        reclaim_store([], tmp_path / "none")
