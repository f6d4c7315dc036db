"""What is true of scenes and told to no strategy: bias, runs of misses, clutter that comes back."""

import itertools
import math

import numpy as np
import pytest
from scipy.stats import chisquare, geom, kstest, nbinom, poisson

from filters.hypotheses import NOT_DETECTED
from filters.random_numbers import numbers_of
from harness.scene.models import models_of
from harness.scene.simulate import draw_scenes
from harness.scene.truth import prior_of
from harness.study.schema import Scene

SEED = 20260404


def scene(scans=40, *, unmodelled=None, **sensor):
    return Scene(
        scans=scans,
        scan_interval_s=2.0,
        target={
            "motion": "nearly-constant-velocity",
            "acceleration_psd_m2_per_s3": 0.01,
            "start_position_m": (10.0, 5.0),
            "start_velocity_m_per_s": (0.3, -0.2),
            "start_position_sd_m": (8.0, 5.0),
            "start_velocity_sd_m_per_s": (0.05, 0.1),
        },
        sensor={
            "kind": "position",
            "noise_sd_m": 4.0,
            "detection_probability": 0.7,
            "clutter_per_scan": 5.0,
            "region_m": ((-200.0, 200.0), (-200.0, 200.0)),
        }
        | sensor,
        unmodelled=unmodelled or {},
    )


def drawn(stated, trials=200):
    return draw_scenes(stated, numbers_of(SEED), 0, trials)


def scans_of(batch):
    """Detections of each trial and scan, and the false ones among them."""
    rows = []
    for trial in range(len(batch.scans.origins)):
        row = []
        for k, origin in enumerate(batch.scans.origins[trial]):
            first, end = batch.scans.offsets[trial, k : k + 2]
            scan = batch.scans.detections[first:end]
            row.append(np.delete(scan, origin, axis=0) if origin != NOT_DETECTED else scan)
        rows.append(row)
    return rows


def as_set(points):
    return {tuple(point) for point in points}


# Strategies see none of it


def test_models_and_prior_know_nothing_of_it():
    plain = scene()
    hidden = scene(
        unmodelled={
            "measurement_bias": (30.0, -20.0),
            "detection_persistence": 0.9,
            "clutter_factor_sd": 2.0,
            "persistent_clutter": {
                "expected_number": 4.0,
                "shown_probability": 0.5,
                "mean_lifetime_s": 30.0,
            },
        }
    )
    for ours, theirs in zip(models_of(plain), models_of(hidden), strict=True):
        for one, other in zip(ours, theirs, strict=True):
            np.testing.assert_array_equal(one, other)
    for one, other in zip(prior_of(plain), prior_of(hidden), strict=True):
        np.testing.assert_array_equal(one, other)


# Bias


def test_a_bias_moves_every_measurement_of_the_target_and_nothing_else():
    plain, biased = (
        drawn(scene(unmodelled={"measurement_bias": bias}), 10) for bias in (None, (7.0, -3.0))
    )
    np.testing.assert_array_equal(plain.truth.states, biased.truth.states)
    np.testing.assert_array_equal(plain.scans.origins, biased.scans.origins)
    own = plain.scans.offsets[:, :-1] + plain.scans.origins
    own = own[plain.scans.origins >= 0]
    moved = biased.scans.detections - plain.scans.detections
    np.testing.assert_allclose(moved[own], np.tile([7.0, -3.0], (len(own), 1)), atol=1e-12)
    np.testing.assert_array_equal(np.delete(moved, own, axis=0), 0.0)


def test_a_bias_of_an_angle_is_in_degrees():
    polar = {
        "kind": "range-bearing",
        "noise_sd_m": None,
        "region_m": None,
        "noise_sd_range_m": 1e-6,
        "noise_sd_bearing_deg": 1e-6,
        "region_range_m": (0.0, 500.0),
        "detection_probability": 1.0,
        "clutter_per_scan": 0.0,
    }
    keys = scene().model_dump()
    keys["sensor"] = {key: value for key, value in polar.items() if value is not None}
    keys["unmodelled"] = {"measurement_bias": (2.0, 3.0)}
    batch = drawn(Scene(**keys), 5)
    east, north = np.moveaxis(batch.truth.position, -1, 0)
    found = batch.scans.detections.reshape(5, 40, 2)
    np.testing.assert_allclose(found[..., 0], np.hypot(east, north) + 2.0, atol=1e-4)
    turned = np.degrees(found[..., 1] - np.arctan2(north, east))
    np.testing.assert_allclose((turned + 180) % 360 - 180, 3.0, atol=1e-4)


# Misses in runs


def detected_in(persistence, probability=0.7, trials=400, scans=40):
    batch = drawn(
        scene(
            scans,
            unmodelled={"detection_persistence": persistence},
            detection_probability=probability,
            clutter_per_scan=0.0,
        ),
        trials,
    )
    return batch.scans.origins >= 0


@pytest.mark.parametrize("persistence", [0.0, 0.5, 0.9])
def test_the_detection_probability_is_met_at_every_scan(persistence):
    """400 independent trials: the share detected at each of 40 scans, within 4.5 deviations."""
    detected = detected_in(persistence)
    deviation = math.sqrt(0.7 * 0.3 / len(detected))
    assert np.abs(detected.mean(axis=0) - 0.7).max() < 4.5 * deviation


@pytest.mark.parametrize("persistence", [0.0, 0.5, 0.9])
def test_detection_is_a_two_state_chain_of_the_stated_correlation(persistence):
    """P(detected | detected) = r + (1 - r) PD, P(missed | missed) = r + (1 - r)(1 - PD).

    Also two scans apart, where the correlation is r^2; 4.5 standard errors, over 15,600 steps.
    """
    detected = detected_in(persistence)
    for steps, kept in ((1, persistence), (2, persistence**2)):
        before, after = detected[:, :-steps], detected[:, steps:]
        for state, probability in ((True, 0.7), (False, 0.3)):
            expected = kept + (1 - kept) * probability
            found = np.mean(after[before == state] == state)
            # Steps two apart overlap once.
            count = np.sum(before == state) / steps
            assert abs(found - expected) < 4.5 * math.sqrt(expected * (1 - expected) / count)


@pytest.mark.parametrize("persistence", [0.0, 0.8])
def test_runs_of_misses_have_a_geometric_length(persistence):
    """Runs that begin in the first 200 of 300 scans against P(length = n), at level 1e-5."""
    detected = detected_in(persistence, trials=200, scans=300)
    lengths = []
    for row in detected:
        ends = np.flatnonzero(np.diff(row)) + 1
        lengths += [
            end - start for start, end in itertools.pairwise(ends) if not row[start] and start < 200
        ]
    lengths = np.array(lengths)
    law = geom((1 - persistence) * 0.7)
    edges = np.unique(law.ppf(np.linspace(0.1, 0.95, 10)))
    expected = np.diff(law.cdf(edges), prepend=0.0, append=1.0)
    expected[-1] = law.sf(edges[-1])
    observed = np.histogram(lengths, np.concatenate([[0], edges + 0.5, [np.inf]]))[0]
    assert chisquare(observed, expected * len(lengths)).pvalue > 1e-5
    assert abs(lengths.mean() - law.mean()) < 4.5 * lengths.std() / math.sqrt(len(lengths))


def test_a_higher_detection_probability_contains_a_lower_one_with_runs_too():
    low, high = (detected_in(0.8, probability) for probability in (0.5, 0.6))
    assert np.all(high[low])
    assert high.sum() > low.sum()


def test_runs_are_of_detection_and_change_neither_truth_nor_clutter():
    one, other = (drawn(scene(unmodelled={"detection_persistence": r}), 10) for r in (0.0, 0.8))
    np.testing.assert_array_equal(one.truth.states, other.truth.states)
    for few, many in zip(scans_of(one), scans_of(other), strict=True):
        for ours, theirs in zip(few, many, strict=True):
            assert as_set(ours) == as_set(theirs)


# Overdispersed counts


@pytest.mark.parametrize("sd", [0.3, 1.0, 2.5])
def test_counts_under_a_gamma_factor_are_negative_binomial(sd):
    """8,000 scans of 5 on average: mean, variance 5 + sd^2 25, and the law at level 1e-5."""
    counts = np.array([len(s) for row in scans_of(drawn(scene(
        unmodelled={"clutter_factor_sd": sd}))) for s in row])  # fmt: skip
    shape = 1 / sd**2
    law = nbinom(shape, shape / (shape + 5.0))
    assert abs(counts.mean() - 5.0) < 4.5 * math.sqrt(law.var() / len(counts))
    edges = np.unique(law.ppf(np.linspace(0.05, 0.97, 12)))
    expected = np.diff(law.cdf(edges), prepend=0.0, append=1.0)
    expected[-1] = law.sf(edges[-1])
    observed = np.histogram(counts, np.concatenate([[-1], edges + 0.5, [np.inf]]))[0]
    keep = expected * len(counts) > 5
    assert (
        chisquare(
            [*observed[keep], observed[~keep].sum() + 1e-9],
            [*(expected[keep] * len(counts)), expected[~keep].sum() * len(counts) + 1e-9],
            sum_check=False,
        ).pvalue
        > 1e-5
    )


def test_denser_overdispersed_clutter_contains_sparser():
    few, many = (
        scans_of(drawn(scene(unmodelled={"clutter_factor_sd": 1.5}, clutter_per_scan=rate), 10))
        for rate in (2.0, 9.0)
    )
    for sparse, dense in zip(few, many, strict=True):
        for ours, theirs in zip(sparse, dense, strict=True):
            assert as_set(ours) <= as_set(theirs)


# Points that come back


def persistent(number=6.0, shown=0.6, lifetime=20.0, spread=None, scans=40, **keys):
    return scene(
        scans,
        unmodelled={
            "persistent_clutter": {
                "expected_number": number,
                "shown_probability": shown,
                "mean_lifetime_s": lifetime,
                "spread": spread,
            }
        },
        **{"clutter_per_scan": 0.0, "detection_probability": 0.0} | keys,
    )


def test_as_many_points_show_at_every_scan():
    """400 trials: Poisson of mean 6 x 0.6 at each scan, the first and the last alike."""
    counts = np.array([[len(s) for s in row] for row in scans_of(drawn(persistent(), 400))])
    assert np.abs(counts.mean(axis=0) - 3.6).max() < 4.5 * math.sqrt(3.6 / 400)
    for k in (0, 20, 39):
        edges = np.arange(8)
        expected = np.diff(poisson.cdf(edges, 3.6), prepend=0.0, append=1.0)
        expected[-1] = poisson.sf(edges[-1], 3.6)
        observed = np.histogram(counts[:, k], [-1, *(edges + 0.5), np.inf])[0]
        assert chisquare(observed, expected * 400).pvalue > 1e-5


def test_points_lie_evenly_over_the_region():
    points = np.concatenate([s for row in scans_of(drawn(persistent(shown=1.0), 100)) for s in row])
    places = np.array(sorted(as_set(points)))
    for column in places.T:
        assert kstest(column, "uniform", args=(-200.0, 400.0)).pvalue > 1e-5


def sightings(stated, trials):
    """The scans at which each place was seen, by trial and place."""
    seen = {}
    for trial, row in enumerate(scans_of(drawn(stated, trials))):
        for k, scan in enumerate(row):
            for place in as_set(scan):
                seen.setdefault((trial, place), []).append(k)
    return seen


def test_a_point_shows_while_it_lives_and_lives_exponentially():
    """Always shown: runs without gaps; of points that come later, the law of their lifetime.

    A mean lifetime of 20 s is 10 scans: a point that was seen at one scan is seen at the next with
    probability exp(-2/20); 4.5 standard errors.
    """
    seen = sightings(persistent(shown=1.0), 200)
    assert all(np.diff(scans).tolist() == [1] * (len(scans) - 1) for scans in seen.values())
    stayed = sum(len(scans) - 1 for scans in seen.values())
    could_stay = sum(sum(k < 39 for k in scans) for scans in seen.values())
    kept = math.exp(-2 / 20)
    deviation = math.sqrt(kept * (1 - kept) / could_stay)
    assert abs(stayed / could_stay - kept) < 4.5 * deviation


def test_a_point_shows_at_a_scan_with_its_probability():
    """Between its first and last sighting a point shows with probability 0.6 at each scan."""
    seen = sightings(persistent(lifetime=60.0), 200)
    inner = sum(len(scans) - 2 for scans in seen.values() if len(scans) > 1)
    between = sum(scans[-1] - scans[0] - 1 for scans in seen.values() if len(scans) > 1)
    assert between > 10_000
    assert abs(inner / between - 0.6) < 4.5 * math.sqrt(0.24 / between)


def test_irregular_scans_leave_the_number_in_balance():
    """Gaps from 0.1 to 60 s against a lifetime of 20 s."""
    keys = persistent().model_dump()
    keys |= {"scans": None, "scan_interval_s": None}
    keys["scan_times_s"] = tuple(np.cumsum([0, 0.1, 60, 3, 0.5, 25, 7.0]))
    counts = [[len(s) for s in row] for row in scans_of(drawn(Scene(**keys), 500))]
    assert np.abs(np.mean(counts, axis=0) - 3.6).max() < 4.5 * math.sqrt(3.6 / 500)


def test_a_spread_scatters_detections_about_their_point():
    """The scatter of each sighting about the exact place: normal, at level 1e-5."""
    exact, scattered = (
        np.concatenate([s[np.lexsort(s.T)] for row in scans_of(drawn(one, 60)) for s in row])
        for one in (persistent(number=0.5), persistent(number=0.5, spread=(0.01, 0.02)))
    )
    # So little scatter leaves the order of a scan's few points as it is.
    assert len(exact) == len(scattered)
    offsets = (scattered - exact) / [0.01, 0.02]
    for column in offsets.T:
        assert kstest(column, "norm").pvalue > 1e-5


@pytest.mark.parametrize(
    ("fewer", "more"),
    [({"number": 3.0}, {"number": 8.0}), ({"shown": 0.3}, {"shown": 0.8})],
)
def test_more_persistent_clutter_contains_less(fewer, more):
    few, many = (scans_of(drawn(persistent(**keys), 20)) for keys in (fewer, more))
    assert sum(len(s) for row in few for s in row) < sum(len(s) for row in many for s in row)
    for sparse, dense in zip(few, many, strict=True):
        for ours, theirs in zip(sparse, dense, strict=True):
            assert as_set(ours) <= as_set(theirs)


def test_persistent_clutter_adds_to_what_was_there():
    plain, added = (
        drawn(one, 10)
        for one in (
            scene(),
            persistent(clutter_per_scan=5.0, detection_probability=0.7),
        )
    )
    np.testing.assert_array_equal(plain.scans.origins >= 0, added.scans.origins >= 0)
    for few, many in zip(scans_of(plain), scans_of(added), strict=True):
        for ours, theirs in zip(few, many, strict=True):
            assert as_set(ours) <= as_set(theirs)


def test_a_trial_drawn_alone_is_the_same_with_all_of_it():
    stated = persistent(spread=(1.0, 1.0), clutter_per_scan=3.0, detection_probability=0.8)
    keys = stated.model_dump()
    keys["unmodelled"] |= {"clutter_factor_sd": 0.7, "detection_persistence": 0.5}
    batch, alone = (
        draw_scenes(Scene(**keys), numbers_of(SEED), first, count)
        for first, count in ((7, 6), (10, 1))
    )
    first, end = batch.scans.offsets[3, [0, -1]]
    np.testing.assert_array_equal(alone.scans.detections, batch.scans.detections[first:end])
    np.testing.assert_array_equal(alone.scans.origins[0], batch.scans.origins[3])


def test_persistent_clutter_hides_no_origin_and_shows_none():
    """Own detections are at every place of their scan equally often, in scans of 3."""
    batch = drawn(persistent(number=4.0, shown=0.5, detection_probability=1.0), 400)
    counts = np.diff(batch.scans.offsets, axis=1)
    places = batch.scans.origins[(counts == 3) & (batch.scans.origins >= 0)]
    assert chisquare(np.bincount(places, minlength=3)).pvalue > 1e-5
