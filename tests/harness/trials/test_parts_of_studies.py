"""Parts of a study run apart and brought together are the study."""

from pathlib import Path

import pandas as pd
import pytest

import trackassay
from harness.api import ChoiceError, join_stores, run_part
from harness.trials.store import StoreError, segments_in

STUDY = Path(__file__).parents[3] / "studies" / "smoke.toml"


@pytest.fixture(scope="module")
def study():
    return trackassay.load_study(STUDY).with_changes({"trials": 250})


@pytest.fixture(scope="module")
def parts(study, tmp_path_factory):
    """Three parts, each in a store of its own, of two conditions of three spans."""
    folders = [tmp_path_factory.mktemp(f"part{number}") for number in (1, 2, 3)]
    trials = [
        run_part(study, number, 3, store=folder / ".store", workers=1).trials
        for number, folder in enumerate(folders, start=1)
    ]
    assert trials == [200, 200, 100]
    return folders


def test_joined_parts_leave_nothing_to_run_and_give_the_results_of_the_whole(
    study, parts, tmp_path
):
    joined = join_stores(parts, tmp_path / "joined")
    assert joined.added == sum(len(segments_in(folder / ".store")) for folder in parts)
    again = join_stores(parts[:1], tmp_path / "joined")
    assert (again.added, again.there_already) == (0, len(segments_in(parts[0] / ".store")))

    said = []
    from_parts = trackassay.run_study(
        study, into=tmp_path / "a", store=tmp_path / "joined", workers=1, tell=said.append
    )
    assert said == ["nothing to run: every trial is in the store"]
    whole = trackassay.run_study(study, into=tmp_path / "b", store=tmp_path / "whole", workers=1)
    pd.testing.assert_frame_equal(
        from_parts.results.summary.drop(columns="us_per_scan"),
        whole.results.summary.drop(columns="us_per_scan"),
        check_exact=True,
    )


def test_a_damaged_segment_is_left_out_and_named(parts, tmp_path):
    copied = tmp_path / "copied"
    join_stores(parts[:1], copied)
    (first, *_) = segments_in(copied)
    first.write_bytes(first.read_bytes()[:-1])
    joined = join_stores([copied], tmp_path / "joined")
    assert joined.damaged == (first,)


def test_what_is_no_store_or_no_part_is_said(study, tmp_path):
    with pytest.raises(StoreError, match="holds no trials; name a store"):
        join_stores([tmp_path], tmp_path / "joined")
    with pytest.raises(ChoiceError, match="there is no part 4 of 3"):
        run_part(study, 4, 3, store=tmp_path / "joined")
