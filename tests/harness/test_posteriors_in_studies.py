"""Studies that ask for calibration and for the gap to an exact posterior. All data are invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import multivariate_normal, norm

from filters.random_numbers import numbers_of
from harness import api
from harness.evidence.outlook import look_ahead
from harness.evidence.plans import FixedCount, keyed_conditions
from harness.report.folder import load_results
from harness.scene.simulate import draw_scenes
from harness.study.mistakes import StudyError
from harness.study.study import study_from
from harness.trials.posterior_scores import (
    BINS,
    POSTERIOR_SCAN_COLUMNS,
    POSTERIOR_TABLE_COLUMNS,
    POSTERIOR_TRIAL_COLUMNS,
)
from harness.trials.store import locked_store
from harness.trials.task import assumptions_of, run_task, spans_of

COLUMNS = (*POSTERIOR_TRIAL_COLUMNS, *POSTERIOR_TABLE_COLUMNS, *POSTERIOR_SCAN_COLUMNS)
DOCUMENT = {
    "title": "A skiff in a small window",
    "seed": 31,
    "trials": 150,
    "scene": {
        "scans": 5,
        "scan_interval_s": 1.0,
        "target": {
            "motion": "nearly-constant-velocity",
            "acceleration_psd_m2_per_s3": 0.5,
            "start_position_m": [0.0, 0.0],
            "start_velocity_m_per_s": [6.0, 2.0],
            "start_position_sd_m": [12.0, 12.0],
            "start_velocity_sd_m_per_s": [2.0, 2.0],
        },
        "sensor": {
            "kind": "position",
            "noise_sd_m": 8.0,
            "detection_probability": 0.75,
            "clutter_density_per_m2": 6e-5,
            "region_m": [[-60.0, 90.0], [-70.0, 80.0]],
        },
    },
    "strategies": {
        "exact": {"kind": "unreduced-mixture"},
        "pda": {"kind": "pda", "gate_probability": 1.0},
        "mixture": {"kind": "gaussian-mixture", "gate_probability": 1.0},
        "nearest": {"kind": "nearest-neighbour"},
        "cocky": {"kind": "pda", "assumes": {"sensor": {"noise_sd_m": {"factor": 0.5}}}},
        "particles": {"kind": "particle-filter", "particles": 60},
    },
    "track_loss": {"error_above_m": 60.0, "for_scans": 3},
    "gospa": {"cutoff_m": 40.0},
    "scoring": {"from_scan": 2},
    "calibration": {"levels": [0.5, 0.9], "samples": 100},
    "posterior_gap": {"reference": "exact", "samples": 60},
}
STUDY = study_from(DOCUMENT, "skiff")
EASY = {"scene.sensor.detection_probability": 1.0, "scene.sensor.clutter_density_per_m2": 0.0}


def tasks_of(study, trials=None):
    plan = FixedCount(keyed_conditions(study), study.seed, trials or study.trials, 1)
    return plan.next_tasks(lambda key, span: False)


@pytest.fixture(scope="module")
def outcome(tmp_path_factory):
    return api.run_study(STUDY, into=tmp_path_factory.mktemp("skiff") / "results", workers=1)


@pytest.fixture(scope="module")
def stored(outcome):
    """What the store holds of each strategy, span by span."""
    condition = keyed_conditions(STUDY)[0]
    keys = {
        case.name: task_case.key
        for case, task_case in zip(condition.condition.cases, condition.cases, strict=True)
    }
    with locked_store(outcome.folder.parent / ".store") as store:
        found = store.read({key: spans_of(STUDY.trials) for key in keys.values()})
    return {name: found[key] for name, key in keys.items()}


@pytest.fixture(scope="module")
def by_name(outcome):
    return outcome.results.summary.set_index("strategy")


# --- what the numbers are -------------------------------------------------------------------------


def recorded_mixtures(name, batch):
    """A strategy's posteriors: trial -> scan -> (weights, means, covariances or None)."""
    case = next(case for case in STUDY.conditions[0].cases if case.name == name)
    scene, numbers = STUDY.conditions[0].rules.scene, numbers_of(STUDY.seed)
    assumptions = assumptions_of(case.assumed, scene, batch, numbers)
    kept = case.strategy.run(
        assumptions, batch.scans_without_origins, numbers, batch.first_trial, record=True
    ).posteriors
    ends = np.cumsum(kept.counts.ravel()).reshape(kept.counts.shape)
    assert kept.used[0] == ends[-1, -1]
    return [
        [
            (
                kept.weights[end - count : end],
                kept.means[end - count : end],
                kept.covariances[end - count : end] if len(kept.covariances) else None,
            )
            for count, end in zip(counts, last, strict=True)
        ]
        for counts, last in zip(kept.counts, ends, strict=True)
    ]


def density(mixture, point):
    return sum(w * multivariate_normal.pdf(point, m, P) for w, m, P in zip(*mixture, strict=True))


def overlap(first, second):
    """Double sum of w v N(mu; nu, P + Q)."""
    total = 0.0
    for w, m, P in zip(*first, strict=True):
        weights, means, covariances = (part[second[0] * w > 1e-11] for part in second)
        if len(weights):
            S, offset = covariances + P, means - m
            squares = np.einsum("ci,ci->c", offset, np.linalg.solve(S, offset[..., None])[..., 0])
            heights = 1 / np.sqrt(np.linalg.det(2 * np.pi * S))
            total += w * np.sum(weights * heights * np.exp(-squares / 2))
    return total


def transform(mixture, point, axis):
    weights, means, covariances = mixture
    return weights @ norm.cdf(point[axis], means[:, axis], np.sqrt(covariances[:, axis, axis]))


def test_scores_are_those_recomputed_from_the_recorded_posteriors_in_plain_python():
    """Log score, transforms and squared error of 4 trials, by SciPy's densities and double sums.

    Lighter components than 1e-9 in all are left out there, pairs of less than 1e-11 here.
    """
    trials, window = 4, slice(1, None)
    condition = STUDY.conditions[0]
    batch = draw_scenes(condition.rules.scene, numbers_of(STUDY.seed), 0, trials)
    exact = recorded_mixtures("exact", batch)
    results = run_task(tasks_of(STUDY, trials)[0])
    names = [case.name for case in condition.cases]
    for name in ("exact", "pda", "cocky"):
        scores = results[names.index(name)].scores.posterior
        mixtures = recorded_mixtures(name, batch)
        bins = np.zeros((trials, BINS))
        score, gap = np.zeros((2, trials, 5))
        for i in range(trials):
            for k in range(5):
                mixture, state = mixtures[i][k], batch.truth.states[i, k]
                score[i, k] = -np.log(density(mixture, state))
                own = overlap(mixture, mixture) + overlap(exact[i][k], exact[i][k])
                gap[i, k] = 1 - 2 * overlap(mixture, exact[i][k]) / own
                for axis in range(2) if k in range(5)[window] else ():
                    bins[i, int(BINS * transform(mixture, state, axis))] += 1
        np.testing.assert_allclose(scores.log_score, score[:, window].mean(axis=1), rtol=1e-7)
        np.testing.assert_allclose(scores.gap_ise, gap[:, window].mean(axis=1), atol=1e-7)
        np.testing.assert_array_equal(scores.transform_bins, bins)
        held = results[names.index(name)].scores.lost_at < 0
        np.testing.assert_allclose(scores.scan_log_score, score[held].sum(axis=0), rtol=1e-7)
        np.testing.assert_allclose(scores.scan_gap_ise, gap.sum(axis=0), atol=1e-7)


def test_what_is_recorded_has_the_mean_and_covariance_of_the_estimate():
    batch = draw_scenes(STUDY.conditions[0].rules.scene, numbers_of(STUDY.seed), 0, 3)
    for case in STUDY.conditions[0].cases:
        assumptions = assumptions_of(
            case.assumed, STUDY.conditions[0].rules.scene, batch, numbers_of(STUDY.seed)
        )
        scans = batch.scans_without_origins
        tracks = case.strategy.run(assumptions, scans, numbers_of(STUDY.seed), 0, record=True)
        for i, scans_of_trial in enumerate(recorded_mixtures(case.name, batch)):
            for k, (weights, means, covariances) in enumerate(scans_of_trial):
                mean = weights @ means
                spread = np.einsum("c,ci,cj->ij", weights, means - mean, means - mean)
                if covariances is not None:
                    spread = spread + np.einsum("c,cij->ij", weights, covariances)
                np.testing.assert_allclose(mean, tracks.means[i, k], rtol=1e-9)
                np.testing.assert_allclose(spread, tracks.covariances[i, k], rtol=1e-7, atol=1e-9)


def test_summary_has_its_new_columns_at_the_end_and_only_where_asked(outcome):
    asked = [
        name
        for metric in (
            "log_score", "region_level", "central_level", "coverage_50", "coverage_90",
            "posterior_gap_ise", "posterior_gap_kl",
        )
        for name in (metric, f"{metric}_low", f"{metric}_high")
    ]  # fmt: skip
    columns = list(outcome.results.summary.columns)
    assert columns[-len(asked) :] == asked
    assert list(outcome.results.scans.columns)[-3:] == [
        "log_score", "posterior_gap_ise", "posterior_gap_kl",
    ]  # fmt: skip
    plain = run_task(
        tasks_of(STUDY.with_changes({"calibration": None, "posterior_gap": None}), 1)[0]
    )
    assert plain[0].scores.posterior is None


# --- what they say --------------------------------------------------------------------------------


def test_an_exact_posterior_is_calibrated_and_one_told_half_the_noise_is_visibly_not(
    outcome, by_name
):
    """Intervals of 95 % hold what is expected of the exact posterior (by chance one of four would
    not in 1 of 7 fresh seeds), 16 or more of its 20 bins hold 5 %; the cocky one fails everywhere.
    """
    exact, cocky = by_name.loc["exact"], by_name.loc["cocky"]
    for metric, expected in (
        ("region_level", 0.5), ("central_level", 0.5), ("coverage_50", 0.5), ("coverage_90", 0.9),
    ):  # fmt: skip
        assert exact[f"{metric}_low"] <= expected <= exact[f"{metric}_high"], metric
    assert cocky["region_level_low"] > 0.5
    assert cocky["central_level_low"] > 0.5
    assert cocky["coverage_50_high"] < 0.5
    assert cocky["coverage_90_high"] < 0.9
    rows = outcome.results.calibration.groupby("strategy")
    honest, wrong = rows.get_group("exact"), rows.get_group("cocky")
    low, high = honest["transform_share_low"], honest["transform_share_high"]
    assert np.sum((low <= 0.05) & (high >= 0.05)) >= 16
    assert wrong["transform_share_low"].iloc[0] > 0.05
    assert wrong["transform_share_low"].iloc[-1] > 0.05
    assert np.all(honest["coverage_low"].iloc[:-1] <= honest["level"].iloc[:-1])
    assert honest["coverage"].iloc[-1] == 1.0
    assert wrong["coverage_high"].iloc[9] < 0.5


def test_without_clutter_and_misses_all_without_a_gate_are_the_kalman_filter_and_calibrated():
    """Levels are then chi-square's. Trials are independent, scans are not: 4.5 standard errors of
    the trials' means, by chance beyond that once in 150,000 seeds."""
    task = tasks_of(STUDY.with_changes({**EASY, "strategies.cocky": None, "trials": 100}))[0]
    scores = [result.scores.posterior for result in run_task(task)]
    for other in scores[1:3]:
        np.testing.assert_allclose(other.log_score, scores[0].log_score, rtol=1e-9)
        assert np.all(other.gap_ise < 1e-12)
        assert np.all(np.abs(other.gap_kl) < 1e-9)
    for mean, expected in (
        (scores[0].region_level, 0.5),
        (scores[0].central_level, 0.5),
        (scores[0].inside[:, 1] / scores[0].posteriors, 0.9),
    ):
        assert abs(mean.mean() - expected) < 4.5 * mean.std(ddof=1) / np.sqrt(len(mean))


def test_the_exact_posterior_is_no_way_from_itself_and_pda_farther_than_the_mixture(by_name):
    gap = by_name["posterior_gap_ise"]
    assert gap["exact"] == pytest.approx(0.0, abs=1e-12)
    assert by_name["posterior_gap_kl"]["exact"] == 0.0
    assert gap["exact"] < gap["mixture"] < gap["pda"] < gap["nearest"]
    assert by_name["posterior_gap_ise_high"]["mixture"] < by_name["posterior_gap_ise_low"]["pda"]


def test_a_worse_log_score_is_the_divergence_from_the_exact_posterior(stored):
    """E[ln p(x) - ln q(x)] is the divergence, the truth being drawn from the exact posterior p.

    Paired by trial, over all trials; 4.5 standard errors of the trials' differences.
    """

    def column(name, field):
        return np.concatenate([getattr(one.scores.posterior, field) for one in stored[name]])

    for name in ("pda", "cocky"):
        worse = column(name, "log_score") - column("exact", "log_score")
        difference = worse - column(name, "gap_kl")
        error = difference.std(ddof=1) / np.sqrt(len(difference))
        assert abs(difference.mean()) < 4.5 * error, name


# --- that they never vary -------------------------------------------------------------------------


def assert_same_posteriors(first, second):
    assert (first.key, first.span) == (second.key, second.span)
    for name in COLUMNS:
        ours, theirs = (getattr(one.scores.posterior, name) for one in (first, second))
        assert ours.dtype.kind == theirs.dtype.kind
        assert ours.astype(theirs.dtype).tobytes() == theirs.tobytes(), name


def test_scores_do_not_depend_on_tasks_nor_on_which_strategies_are_missing(stored):
    """The second span of one case alone still gets its reference, and the bits that are stored."""
    task = tasks_of(STUDY)[-1]
    assert task.spans == (spans_of(STUDY.trials)[1],)
    for name in ("pda", "particles"):
        case = task.cases[STUDY.strategies.index(name)]
        (alone,) = run_task(replace(task, cases=(case,)))
        assert_same_posteriors(alone, stored[name][1])


def test_keys_of_results_change_only_for_what_a_study_asks():
    def keys(**changes):
        study = STUDY.with_changes(changes) if changes else STUDY
        return [case.key for case in keyed_conditions(study)[0].cases]

    base = keys()
    for change in (
        {"calibration": None},
        {"calibration.samples": 101},
        {"calibration.levels": [0.5]},
        {"posterior_gap": None},
        {"posterior_gap.samples": 61},
        {"posterior_gap.reference": "mixture"},
    ):
        assert not set(keys(**change)) & set(base), change
    without = keys(**{"strategies.nearest": None})
    assert set(without) < set(base)


def test_results_come_back_from_their_folder(outcome):
    loaded = load_results(outcome.folder)
    for name in ("summary", "scans", "calibration"):
        assert getattr(loaded, name).shape == getattr(outcome.results, name).shape
    assert set(loaded.calibration["strategy"]) == set(STUDY.strategies)


# --- what can be wrong ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        (
            {"posterior_gap.reference": "exect"},
            "posterior_gap.reference = \"exect\": names 'exect', which is no strategy of the study;"
            " did you mean exact? there are exact, pda, mixture, nearest, cocky, particles",
        ),
        (
            {"posterior_gap.reference": "known", "strategies.known": {"kind": "known-association"}},
            "posterior_gap.reference = \"known\": names 'known', which is told the origins: its "
            "posterior is not the scans'; name a strategy that sees what the others see, best an "
            "unreduced-mixture",
        ),
        (
            {"posterior_gap": {"samples": 10}},
            "posterior_gap.reference: is missing; add it: name of the strategy whose posterior the "
            "others are compared with, best an exact one",
        ),
        (
            {"posterior_gap.samples": 1},
            "posterior_gap.samples = 1: must be at least 2; give a whole number",
        ),
        (
            {"calibration.levels": [0.5, 1.0]},
            "calibration.levels[1] = 1.0: must lie in (0, 1); give a number",
        ),
        (
            {"calibration.levels": [0.5, 0.5]},
            "calibration.levels = [0.5, 0.5]: names a level twice; give each level once",
        ),
        (
            {"calibration": {"level": [0.5]}},
            "calibration.level = [0.5]: is unknown; did you mean levels?",
        ),
    ],
)
def test_a_mistake_is_named_with_its_remedy(changes, message):
    with pytest.raises(StudyError) as raised:
        STUDY.with_changes(changes)
    assert str(raised.value) == message


def test_a_scene_too_long_is_warned_of_and_its_trial_named_at_run_time():
    """Some 2 detections a scan are expected, 3^30 components."""
    long = STUDY.with_changes(
        {"scene.scans": 30, "strategies.particles": None, "strategies.nearest": None}
    )
    (warning,) = [one for one in look_ahead(long).warnings if "components" in one]
    assert warning.startswith("exact would keep ")
    assert "100% of these scenes need more" in warning
    assert not [one for one in look_ahead(STUDY).warnings if "components" in one]
    task = tasks_of(long, 1)[0]
    with pytest.raises(ValueError, match=r"trial 0 would need .* components unreduced"):
        run_task(task)


def test_a_strategy_without_posteriors_gets_empty_columns():
    class Mute(type(STUDY.record.strategies["pda"])):
        has_posteriors = False

    task = tasks_of(STUDY, 3)[0]
    mute = replace(task.cases[1], strategy=Mute(kind="pda"))
    (result,) = run_task(replace(task, cases=(mute,)))
    scores = result.scores.posterior
    assert np.all(np.isnan(scores.log_score))
    assert np.all(np.isnan(scores.gap_ise))
    assert not scores.posteriors.any()
    assert not scores.region_bins.any()
    assert not np.isnan(result.scores.position_square).any()
