import pytest

from harness.study.mistakes import StudyError
from harness.study.study import load_study


@pytest.fixture
def study(study_file):
    return load_study(study_file())


def test_changes_make_another_study_and_leave_this_one(study):
    changed = study.with_changes(
        {"trials": 50, "scene.sensor.detection_probability": 0.5, "question": "Which holds?"}
    )
    assert (changed.trials, changed.question) == (50, "Which holds?")
    assert changed.record.scene.sensor.detection_probability == 0.5
    assert changed.conditions[0].rules.scene.sensor.detection_probability == 0.5
    assert changed.document["trials"] == 50
    assert (study.trials, study.question) == (100, "")
    assert study.document["scene"]["sensor"]["detection_probability"] == 0.9
    assert (changed.name, changed.path) == (study.name, study.path)


def test_no_changes_make_the_same_study(study):
    assert study.with_changes({}) == study


def test_sweeps_can_be_replaced_added_and_removed(study):
    replaced = study.with_changes({"sweep": {"gospa.order": [1, 2, 3]}})
    assert replaced.swept == ("gospa.order",)
    added = study.with_changes({"sweep.gospa.order": [1, 2, 3]})
    assert added.swept == ("scene.sensor.noise_sd_m", "gospa.order")
    fixed = study.with_changes(
        {"sweep.scene.sensor.noise_sd_m": None, "scene.sensor.noise_sd_m": 7.0}
    )
    assert fixed.swept == ()
    assert fixed.conditions[0].rules.scene.sensor.noise_sd_m == 7.0
    together = study.with_changes({"sweep_together": [{"gospa.order": [1, 2]}]})
    assert len(together.conditions) == 4


def test_whole_tables_and_strategies_can_be_given_and_removed(study):
    changed = study.with_changes(
        {"strategies.pda": None, "strategies.known": {"kind": "known-association"}}
    )
    assert changed.strategies == ("mixture", "known")


def test_one_way_of_stating_a_quantity_can_take_the_place_of_another(study):
    changed = study.with_changes(
        {"scene.sensor.clutter_density_per_m2": None, "scene.sensor.clutter_per_scan": 3.0}
    )
    assert changed.record.scene.sensor.clutter_per_scan == 3.0


def test_entries_of_lists_go_by_their_place(study):
    changed = study.with_changes({"scene.target.start_position_m.1": 5.0})
    assert changed.record.scene.target.start_position_m == (40.0, 5.0)


def test_what_is_given_is_not_followed_later(study):
    order = [1, 2]
    changed = study.with_changes({"sweep.gospa.order": order})
    order.append(3)
    assert changed.document["sweep"]["gospa.order"] == [1, 2]


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        (
            {"trials": 0},
            "trials = 0: must be at least 1; give a whole number",
        ),
        (
            {"scene.sensor.noise_km": 5.0},
            "scene.sensor.noise_km = 5.0: is no key of the study; "
            "did you mean scene.sensor.noise_sd_m?",
        ),
        (
            {"strategies.mixtures.max_components": 5},
            "strategies.mixtures.max_components = 5: is no key of the study; "
            "did you mean strategies.mixture.max_components?",
        ),
        (
            {"strategies.mixture.max_components": -5},
            "strategies.mixture.max_components = -5: must be at least 1; give a whole number",
        ),
        (
            {"scene.sensor.noise_sd_m": 5.0},
            "scene.sensor.noise_sd_m = 5.0: is swept, so this value would not be used; "
            'change "sweep.scene.sensor.noise_sd_m", or remove that by None',
        ),
        (
            {"sweep.scene.sensor.noise_sd": [5.0]},
            'sweep."scene.sensor.noise_sd": is no key of the study; '
            "did you mean scene.sensor.noise_sd_m?",
        ),
        (
            {"sweep_together.gospa.order": [1, 2]},
            "sweep_together.gospa.order = [1, 2]: is no key of the study; "
            'change "sweep_together" as a whole',
        ),
        (
            {"seed": None},
            "seed: is missing; add it: start of all random numbers",
        ),
        (
            {"strategies.own": {"kind": "pdas"}},
            'strategies.own.kind = "pdas": is unknown; did you mean pda? there are '
            "nearest-neighbour, most-probable-hypothesis, pda, gaussian-mixture, pruned-mixture, "
            "runnalls-mixture, n-scan-mixture, unreduced-mixture, point-mass-grid, "
            "particle-filter, rao-blackwellised-particle-filter, known-association",
        ),
    ],
)
def test_a_wrong_change_is_named_without_a_line_of_the_file(study, changes, message):
    with pytest.raises(StudyError) as raised:
        study.with_changes(changes)
    assert str(raised.value) == message
