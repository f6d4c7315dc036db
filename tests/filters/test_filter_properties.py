"""What holds for every strategy on any scans: order, shifts, soundness at the edges of numbers."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from small_worlds import (
    as_scans,
    constant_acceleration_world,
    constant_velocity_world,
    gaussian_mixture,
    held_acceleration_world,
    known_association,
    look_inside,
    most_probable_hypothesis,
    n_scan_mixture,
    nearest_neighbour,
    particle_filter,
    pda,
    pruned_mixture,
    rao_blackwellised,
    run_on,
    runnalls_mixture,
)

GAUSSIAN = {
    "nearest neighbour": nearest_neighbour(),
    "most probable hypothesis": most_probable_hypothesis(),
    "pda": pda(),
    "pda without a gate": pda(gate_probability=1.0),
    "mixture": gaussian_mixture(max_components=6),
    "mixture without a gate": gaussian_mixture(max_components=4, gate_probability=1.0),
    "pruned mixture": pruned_mixture(max_components=6),
    "Runnalls' mixture": runnalls_mixture(max_components=4, merge_among=12),
    "N-scan mixture": n_scan_mixture(max_components=6, scans_back=2),
}
ALL = GAUSSIAN | {"particles": particle_filter(particles=64)}

numbers = st.floats(-12, 12).map(lambda x: round(x, 4))
detections_1d = st.lists(st.lists(numbers, max_size=6, unique_by=abs), min_size=1, max_size=5)
probabilities = st.sampled_from([0.0, 0.3, 0.9, 1.0])
densities = st.sampled_from([0.0, 1e-300, 1e-3, 0.1, 10.0, 1e30])


@settings(derandomize=True, deadline=None, max_examples=150)
@given(st.lists(numbers, max_size=12), probabilities, densities, st.sampled_from([0.9, 1.0]))
def test_weights_are_a_distribution(scan, PD, clutter, gate_probability):
    world = constant_velocity_world(detection_probability=PD, clutter=clutter)
    scans = as_scans([[np.reshape(scan, (-1, 1))]], 1)
    found = look_inside(world, scans, gate_probability)
    weights = found.table["weight"]
    assert np.all((weights >= 0) & (weights <= 1))
    np.testing.assert_allclose(weights.sum(), 1.0, rtol=1e-14)
    assert 1 <= len(weights) <= 1 + len(scan)


@settings(derandomize=True, deadline=None, max_examples=60)
@given(detections_1d, st.integers(0, 2**32 - 1), probabilities, densities)
def test_the_order_of_detections_changes_nothing(trial, seed, PD, clutter):
    """But for rounding in sums over them; nothing here is equally near or equally probable."""
    world = constant_velocity_world(detection_probability=PD, clutter=clutter)
    shuffle = np.random.default_rng(seed).permutation
    scans = as_scans([[np.reshape(scan, (-1, 1)) for scan in trial]], 1)
    shuffled = as_scans([[np.reshape(shuffle(scan), (-1, 1)) for scan in trial]], 1)
    for name, strategy in ALL.items():
        found, expected = run_on(world, strategy, shuffled), run_on(world, strategy, scans)
        np.testing.assert_allclose(found.means, expected.means, atol=1e-9, err_msg=name)
        np.testing.assert_allclose(found.covariances, expected.covariances, atol=1e-9, err_msg=name)
        np.testing.assert_array_equal(found.hypotheses, expected.hypotheses)
        np.testing.assert_array_equal(found.impossible, expected.impossible)


@settings(derandomize=True, deadline=None, max_examples=60)
@given(detections_1d, st.floats(-1e4, 1e4), st.floats(-100, 100), probabilities, densities)
def test_moving_the_origin_moves_estimates_alone(trial, shift, speed, PD, clutter):
    """Another origin, itself moving at some speed: positions and velocities shift with it."""
    keys = {"detection_probability": PD, "clutter": clutter}
    world = constant_velocity_world(**keys)
    moved = constant_velocity_world(mean=[shift, speed], **keys)
    scans = [np.reshape(scan, (-1, 1)) for scan in trial]
    shifted = [scan + shift + speed * k for k, scan in enumerate(scans)]
    offset = np.array([[shift + speed * k, speed] for k in range(len(scans))])
    for name, strategy in ALL.items():
        expected = run_on(world, strategy, as_scans([scans], 1))
        found = run_on(moved, strategy, as_scans([shifted], 1))
        np.testing.assert_allclose(
            found.means[0] - offset, expected.means[0], atol=1e-6, err_msg=name
        )
        np.testing.assert_allclose(found.covariances, expected.covariances, atol=1e-6, err_msg=name)


def assert_sound(tracks, name, positive=True):
    """Finite, symmetric to the bit, and positive definite on the scale of its own deviations."""
    assert tracks.present.all(), name
    assert np.isfinite(tracks.means).all(), name
    covariances = tracks.covariances
    assert np.isfinite(covariances).all(), name
    np.testing.assert_array_equal(covariances, covariances.swapaxes(-1, -2), err_msg=name)
    variances = np.diagonal(covariances, axis1=-2, axis2=-1)
    if positive:
        deviations = np.sqrt(variances)
        scaled = covariances / (deviations[..., :, None] * deviations[..., None, :])
        assert np.linalg.eigvalsh(scaled)[..., 0].min() > 0, name
    else:
        least = np.linalg.eigvalsh(covariances)[..., 0]
        assert np.all(least >= -1e-12 * variances.max(axis=-1)), name


LONG = 10_000
# world, detections a scan
LONG_RUNS = {
    "usual": (constant_velocity_world, {}, 3),
    "no detections": (constant_velocity_world, {}, 0),
    "never detected": (constant_velocity_world, {"detection_probability": 0.0}, 2),
    "always detected": (constant_velocity_world, {"detection_probability": 1.0}, 2),
    "no clutter": (constant_velocity_world, {"clutter": 0.0}, 2),
    "hardly any clutter": (constant_velocity_world, {"clutter": 1e-300}, 2),
    "nothing but clutter": (constant_velocity_world, {"clutter": 1e30}, 2),
    "no process noise": (constant_velocity_world, {"psd": 0.0}, 2),
    "hardly any process noise": (constant_velocity_world, {"psd": 1e-12}, 2),
    "precise sensor, vague start": (
        constant_velocity_world,
        {"noise_sd": 1e-4, "covariance": np.diag([1e6, 1e6])},
        2,
    ),
    "poor sensor, precise start": (
        constant_velocity_world,
        {"noise_sd": 1e6, "covariance": np.diag([1e-8, 1e-8])},
        2,
    ),
    "held acceleration": (held_acceleration_world, {}, 2),
    "white jerk": (constant_acceleration_world, {}, 2),
}


@pytest.mark.parametrize("name", LONG_RUNS)
def test_covariances_stay_sound_over_ten_thousand_scans(name):
    """One detection near the origin within the noise, the others uniform around it."""
    make_world, keys, count = LONG_RUNS[name]
    world = make_world(1, **keys)
    rng = np.random.default_rng(99)
    scale = float(np.sqrt(world.plain.R[0, 0]))
    detections = rng.uniform(-20, 20, (LONG, count, 1)) * scale
    detections[:, :1] = rng.normal(0, scale, (LONG, min(count, 1), 1))
    scans = as_scans([list(detections)], 1)
    for strategy_name, strategy in GAUSSIAN.items():
        assert_sound(run_on(world, strategy, scans), strategy_name)
    if len(world.plain.F) == 2:
        tracks = run_on(world, particle_filter(particles=50), scans)
        assert_sound(tracks, "particles", positive=False)
    origins = np.full((1, LONG), 0 if count else -1)
    told = as_scans([list(detections)], 1, origins=origins)
    assert_sound(run_on(world, known_association(), told), "known association")


@pytest.mark.parametrize("axes", [1, 2])
@pytest.mark.parametrize("clutter", [0.0, 1e-300, 1e-2, 1e30])
@pytest.mark.parametrize("PD", [0.0, 0.5, 1.0])
@pytest.mark.parametrize(("noise_sd", "start_sd"), [(1e-3, 1e4), (1.0, 1.0), (1e4, 1e-3)])
def test_hundreds_of_detections_and_none_keep_everything_finite(
    axes, clutter, PD, noise_sd, start_sd
):
    world = constant_velocity_world(
        axes,
        noise_sd=noise_sd,
        detection_probability=PD,
        clutter=clutter,
        covariance=start_sd**2 * np.eye(2 * axes),
    )
    rng = np.random.default_rng(4)
    wide = rng.uniform(-1, 1, (3, 300, axes)) * 30 * max(noise_sd, start_sd)
    same = np.full((300, axes), 0.3 * noise_sd)
    scans = as_scans([[*wide, same, same[:0], wide[0], same[:1]]], axes)
    for name, strategy in GAUSSIAN.items():
        assert_sound(run_on(world, strategy, scans), name)
    for strategy in (ALL["particles"], particle_filter(particles=64, proposal="detections")):
        assert_sound(run_on(world, strategy, scans), "particles", positive=False)
    assert_sound(run_on(world, rao_blackwellised(particles=8), scans), "histories")


def test_priors_may_be_ten_million_times_vaguer_than_the_sensor():
    """The second scan leaves the covariance of the two-point start, R [[1, 1/T], [1/T, 2/T^2]].

    Source: two-point differencing, Bar-Shalom, Li and Kirubarajan (2001), section 5.5.3. A variance
    of 1e14 keeps a measurement's 1 to 1.6 %; from 1e16 on double precision loses it in the prior.
    """
    world = constant_velocity_world(
        psd=0.0, detection_probability=1.0, clutter=0.0, covariance=1e14 * np.eye(2)
    )
    tracks = run_on(world, nearest_neighbour(), as_scans([[[[1.0]], [[3.0]], [[5.0]]]], 1))
    np.testing.assert_allclose(tracks.covariances[0, 1], [[1, 1], [1, 2]], rtol=0.03)
    np.testing.assert_allclose(tracks.means[0, 1], [3.0, 2.0], rtol=1e-6)
    np.testing.assert_allclose(tracks.means[0, 2], [5.0, 2.0], rtol=1e-6)
    assert_sound(tracks, "nearest neighbour")
