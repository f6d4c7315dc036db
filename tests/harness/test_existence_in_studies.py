"""Existence through whole studies: from tracks that begin on nothing to the summary."""

import tomllib
from pathlib import Path

import numpy as np
import pytest

import trackassay

STUDIES = Path(__file__).parents[2] / "studies"


@pytest.fixture(scope="module")
def summary(tmp_path_factory):
    """The smoke study; PDA doubts its target, which cannot be seen in the second condition."""
    place = tmp_path_factory.mktemp("existence")
    document = tomllib.loads((STUDIES / "smoke.toml").read_text())
    document["strategies"] = {
        "doubting": {
            "kind": "pda",
            "assumes": {"sensor": {"detection_probability": 0.8}},
            "existence": {"start": 0.5, "survival": 0.99, "end_below": 0.001},
        },
        "sure": {"kind": "pda"},
    }
    document["sweep"] = {"scene.sensor.detection_probability": [0.8, 0.0]}
    outcome = trackassay.run_study(
        trackassay.study_from(document), into=place / "out", store=place / "store", workers=1
    )
    return outcome.results.summary.set_index(["scene.sensor.detection_probability", "strategy"])


def test_a_followed_target_is_believed_in_and_clutter_is_not(summary):
    seen, unseen = summary.loc[(0.8, "doubting")], summary.loc[(0.0, "doubting")]
    assert seen.existence_on > 0.9
    assert unseen.existence_off < 0.5
    assert seen.existence_error < 0.1
    assert seen.existence_error_low < seen.existence_error < seen.existence_error_high


def test_tracks_of_what_is_not_there_end_and_stay_without_a_false_track(summary):
    seen, unseen = summary.loc[(0.8, "doubting")], summary.loc[(0.0, "doubting")]
    assert unseen.no_estimate > 0.5
    assert seen.no_estimate < 0.05
    assert unseen.gospa_false < summary.loc[(0.0, "sure")].gospa_false


def test_who_does_not_doubt_has_no_such_columns(summary):
    assert np.isnan(summary.loc[(0.8, "sure")].existence_error)
