"""The studies that ship can be read, and say that their data are invented."""

from pathlib import Path

import pytest

import trackassay

STUDIES = sorted((Path(__file__).parents[3] / "studies").glob("*.toml"))


@pytest.mark.parametrize("path", STUDIES, ids=lambda path: path.stem)
def test_a_study_that_ships_has_a_question_and_conditions_that_can_be_run(path):
    study = trackassay.load_study(path)
    assert study.document["question"].endswith("?")
    assert len(study.conditions) >= 1
    assert all(condition.rules.strategies for condition in study.conditions)


@pytest.mark.parametrize("path", STUDIES, ids=lambda path: path.stem)
def test_a_study_that_ships_says_that_its_data_are_invented(path):
    assert "nvented" in path.read_text().split("title =")[0]
