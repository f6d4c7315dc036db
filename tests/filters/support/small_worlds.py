"""Targets and sensors for tests: the package's models and, beside them, the same as matrices."""

from typing import NamedTuple

import numpy as np
from plain_filters import Plain, chain, van_loan

from filters.compiled import model_function
from filters.detecting import AtMean
from filters.existence import CERTAIN
from filters.hypothesis_filter import (
    ESTIMATE_MEAN,
    HypothesisStrategy,
    Room,
    compiled_filter,
    room_for,
)
from filters.interacting import OneMode
from filters.linearisation.first_order import ByJacobian
from filters.models.contract import STATE_AFTER, STATE_MATRIX, Models, MotionModel
from filters.models.motion import (
    NearlyConstantAcceleration,
    NearlyConstantVelocity,
    PiecewiseConstantAcceleration,
)
from filters.models.sensor import PositionSensor
from filters.particle_filter import ParticleStrategy, compiled_particle_filter
from filters.particles.cloud import MOTION, cloud_for
from filters.particles.resampling import SYSTEMATIC
from filters.random_numbers import numbers_of
from filters.reductions.prune_merge_cap import prune_merge_cap
from filters.strategies import (
    GaussianMixture,
    KnownAssociation,
    MostProbableHypothesis,
    NearestNeighbour,
    NScanMixture,
    ParticleFilter,
    ProbabilisticDataAssociation,
    PrunedMixture,
    RaoBlackwellisedParticleFilter,
    RunnallsMixture,
)
from filters.strategies.gate import gate_of
from filters.strategies.strategy import Assumptions
from filters.track import ORIGIN_UNKNOWN, Ending, Prior, Scans, room_for_tracks
from filters.update import UpdateRules

DENSITY_KEYS = ("clutter_density_per_m", "clutter_density_per_m2", "clutter_density_per_m3")
NEVER = Ending(0, np.inf, 1)
NO_REDUCTION = prune_merge_cap(0.0, 0.0, 500)
BY_JACOBIAN, AT_MEAN = ByJacobian(), AtMean()


class World(NamedTuple):
    assumptions: Assumptions
    plain: Plain


def nearest_neighbour(**settings):
    return NearestNeighbour(kind="nearest-neighbour", **settings)


def most_probable_hypothesis(**settings):
    return MostProbableHypothesis(kind="most-probable-hypothesis", **settings)


def pda(**settings):
    return ProbabilisticDataAssociation(kind="pda", **settings)


def gaussian_mixture(**settings):
    return GaussianMixture(kind="gaussian-mixture", **settings)


def pruned_mixture(**settings):
    return PrunedMixture(kind="pruned-mixture", **settings)


def runnalls_mixture(**settings):
    return RunnallsMixture(kind="runnalls-mixture", **settings)


def n_scan_mixture(**settings):
    return NScanMixture(kind="n-scan-mixture", **settings)


def exact_mixture(max_components=10_000, **settings):
    """The mixture without any reduction, as long as the cap is not reached."""
    return gaussian_mixture(
        prune_below=0.0,
        merge_below=0.0,
        max_components=max_components,
        gate_probability=1.0,
        **settings,
    )


def particle_filter(**settings):
    return ParticleFilter(kind="particle-filter", **settings)


def rao_blackwellised(**settings):
    return RaoBlackwellisedParticleFilter(kind="rao-blackwellised-particle-filter", **settings)


def known_association(**settings):
    return KnownAssociation(kind="known-association", **settings)


def position_sensor(axes, noise_sd, detection_probability, clutter):
    return PositionSensor(
        kind="position",
        noise_sd_m=noise_sd,
        detection_probability=detection_probability,
        region_m=((-1e4, 1e4),) * axes,
        **{DENSITY_KEYS[axes - 1]: clutter},
    )


def models_of(motion, sensor):
    times = np.zeros(1)
    return Models(
        motion, sensor.sensor_model(times), sensor.detection_model(), sensor.clutter_model(times)
    )


def _start(axes, orders, mean, covariance):
    """Keys of a target's start; by default at rest in the origin, within some metres."""
    mean = np.zeros(axes * orders) if mean is None else np.asarray(mean, float)
    if covariance is None:
        covariance = np.diag(np.repeat([4.0, 1.0, 0.25][:orders], axes))
    keys = ("start_position_m", "start_velocity_m_per_s", "start_acceleration_m_per_s2")
    start = {
        key: tuple(mean[order * axes : (order + 1) * axes])
        for order, key in enumerate(keys[:orders])
    }
    return start | {"start_covariance": tuple(map(tuple, np.asarray(covariance, float)))}


def _world(target, F, Q, noise_sd, detection_probability, clutter):
    axes = target.axes
    sensor = position_sensor(axes, noise_sd, detection_probability, clutter)
    prior = Prior(target.start_mean(), target.start_spread())
    plain = Plain(
        F,
        Q,
        np.eye(axes, len(F)),
        noise_sd**2 * np.eye(axes),
        detection_probability,
        clutter,
        prior.mean,
        prior.covariance,
    )
    return World(Assumptions(models_of(target.motion_model(), sensor), prior, axes), plain)


def constant_velocity_world(
    axes=1,
    *,
    psd=0.1,
    noise_sd=1.0,
    detection_probability=0.9,
    clutter=0.05,
    interval=1.0,
    mean=None,
    covariance=None,
):
    """White-noise acceleration, position measured; its plain matrices by Van Loan's method."""
    target = NearlyConstantVelocity(
        motion="nearly-constant-velocity",
        acceleration_psd_m2_per_s3=psd,
        **_start(axes, 2, mean, covariance),
    )
    diffusion = np.diag([0.0] * axes + [psd] * axes)
    F, Q = van_loan(chain(axes, 2), diffusion, interval)
    return _world(target, F, Q, noise_sd, detection_probability, clutter)


def constant_acceleration_world(
    axes=1, *, psd=0.1, noise_sd=1.0, detection_probability=0.9, clutter=0.05, interval=1.0
):
    """White-noise jerk; otherwise as above."""
    target = NearlyConstantAcceleration(
        motion="nearly-constant-acceleration",
        jerk_psd_m2_per_s5=psd,
        **_start(axes, 3, None, None),
    )
    diffusion = np.diag([0.0] * (2 * axes) + [psd] * axes)
    F, Q = van_loan(chain(axes, 3), diffusion, interval)
    return _world(target, F, Q, noise_sd, detection_probability, clutter)


def held_acceleration_world(
    axes=1,
    *,
    acceleration_sd=0.3,
    noise_sd=1.0,
    detection_probability=0.9,
    clutter=0.05,
    interval=1.0,
):
    """An acceleration held over each interval: Q = sd^2 g g' with g = (T^2 / 2, T)."""
    target = PiecewiseConstantAcceleration(
        motion="piecewise-constant-acceleration",
        acceleration_sd_m_per_s2=acceleration_sd,
        **_start(axes, 2, None, None),
    )
    F = np.kron([[1.0, interval], [0.0, 1.0]], np.eye(axes))
    g = np.kron([[interval**2 / 2], [interval]], np.eye(axes))
    Q = acceleration_sd**2 * g @ g.T
    return _world(target, F, Q, noise_sd, detection_probability, clutter)


def skipping_nothing(world):
    """The same world, its noise said to vary with the state: no detection can then be left out."""
    models = world.assumptions.models
    models = models._replace(sensor=models.sensor._replace(same_noise=False))
    return world._replace(assumptions=world.assumptions._replace(models=models))


@model_function(STATE_AFTER)
def stand_still(parameters, interval, state, out):
    for i in range(state.shape[0]):
        out[i] = state[i]


@model_function(STATE_MATRIX)
def identity_matrix(parameters, interval, state, out):
    out[:] = 0.0
    for i in range(state.shape[0]):
        out[i, i] = 1.0


@model_function(STATE_MATRIX)
def random_walk_noise(parameters, interval, state, out):
    out[:] = 0.0
    for i in range(state.shape[0]):
        out[i, i] = parameters[0]


def random_walk_world(
    *,
    variance=1.0,
    noise_variance=1.0,
    prior_variance=2.0,
    prior_mean=0.0,
    detection_probability=0.9,
    clutter=0.1,
):
    """A scalar random walk; a second entry of the state, unmeasured, makes up the size of two."""
    motion = MotionModel(
        stand_still.compiled,
        identity_matrix.compiled,
        random_walk_noise.compiled,
        np.array([variance], float),
        linear=True,
    )
    sensor = position_sensor(1, float(noise_variance) ** 0.5, detection_probability, clutter)
    prior = Prior(np.array([prior_mean, 0.0]), prior_variance * np.eye(2))
    plain = Plain(
        np.eye(2),
        variance * np.eye(2),
        np.eye(1, 2),
        noise_variance * np.eye(1),
        detection_probability,
        clutter,
        prior.mean,
        prior.covariance,
    )
    return World(Assumptions(models_of(motion, sensor), prior, 1), plain)


def as_scans(trials, m, *, interval=1.0, origins=None):
    """Scans of a list of trials, each a list of arrays of detections (M, m)."""
    trials = [[np.asarray(scan, float).reshape(-1, m) for scan in scans] for scans in trials]
    counts = np.array([[len(scan) for scan in scans] for scans in trials])
    ends = np.cumsum(counts).reshape(counts.shape)
    intervals = np.full(counts.shape[1], float(interval))
    intervals[0] = 0.0
    if origins is None:
        origins = np.full(counts.shape, ORIGIN_UNKNOWN)
    return Scans(
        intervals,
        np.concatenate([scan for scans in trials for scan in scans]).reshape(-1, m),
        np.column_stack([ends[:, 0] - counts[:, 0], ends]).astype(np.int64),
        np.array(origins, np.int64),
        int(counts.max()),
    )


def run_on(world, strategy, scans, first_trial=0, seed=1):
    return strategy.run(world.assumptions, scans, numbers_of(seed), first_trial)


class Drawn(NamedTuple):
    """Scenes of a world, drawn by NumPy; the target's own detection, if any, comes first."""

    states: np.ndarray  # (trials, scans, n)
    trials: list  # of scans for each trial
    origins: np.ndarray  # (trials, scans) 0 or -1


def draw_scenes_of(world, rng, trials, scans, clutter_half_width=0.0):
    """Truth and detections; clutter is drawn in a box around the truth, as far as stated."""
    plain = world.plain
    n, m = len(plain.F), len(plain.H)
    states = np.empty((trials, scans, n))
    states[:, 0] = rng.multivariate_normal(plain.mean, plain.covariance, trials)
    for k in range(1, scans):
        disturbance = rng.multivariate_normal(np.zeros(n), plain.Q, trials)
        states[:, k] = states[:, k - 1] @ plain.F.T + disturbance
    places = states @ plain.H.T
    noise = rng.multivariate_normal(np.zeros(m), plain.R, (trials, scans))
    measured = places + noise.reshape(places.shape)
    detected = rng.random((trials, scans)) < plain.detection_probability
    counts = rng.poisson(plain.clutter * (2 * clutter_half_width) ** m, (trials, scans))
    drawn = []
    for trial in range(trials):
        drawn.append([])
        for k in range(scans):
            offsets = rng.uniform(-1, 1, (counts[trial, k], m)) * clutter_half_width
            own = measured[trial, k : k + 1] if detected[trial, k] else measured[trial, :0]
            drawn[-1].append(np.concatenate([own.reshape(-1, m), places[trial, k] + offsets]))
    return Drawn(states, drawn, np.where(detected, 0, -1))


class LookInside(NamedTuple):
    """Working memory of the filter's kernel after the last scan of one trial."""

    table: np.ndarray  # the hypotheses of that scan, if it was the first
    means: np.ndarray  # (rows, n) likewise
    covariances: np.ndarray  # (rows, n, n) likewise
    room: Room

    def mixture(self, count):
        """The first components that the reduction left, as (weight, mean, covariance)."""
        return list(zip(*(part[:count] for part in self.room.mixture[:3]), strict=True))


def look_inside(
    world,
    scans,
    gate_probability=1.0,
    reduction=NO_REDUCTION,
    *,
    linearisation=BY_JACOBIAN,
    detecting=AT_MEAN,
):
    """Run the kernel on one trial, by default without reducing anything, and look inside."""
    prior = world.assumptions.prior
    n, m = len(prior.mean), scans.detections.shape[1]
    strategy = HypothesisStrategy(
        reduction.compiled(n),
        reduction.settings,
        UpdateRules(gate_of(gate_probability, m), linearisation, detecting),
        OneMode(world.assumptions.models.motion),
        CERTAIN,
        NEVER,
        ESTIMATE_MEAN,
    )
    tracks = room_for_tracks(scans, n)
    room = room_for(n, m, strategy.rules, strategy.modes, reduction, scans.most_detections)
    kernel = compiled_filter(n, m)
    kernel(world.assumptions.models, strategy, prior, scans, tracks, room)
    rows = min(tracks.hypotheses[0], len(room.hypotheses.table))
    table = room.hypotheses.table[:rows]
    covariances = room.hypotheses.covariances[table["covariance"]]
    return LookInside(table, room.hypotheses.means[:rows], covariances, room)


def run_particles(
    world,
    scans,
    particles=400,
    *,
    proposal=MOTION,
    resample_below=0.0,
    resampling=SYSTEMATIC,
    roughening=0.0,
    first_trial=0,
):
    """Run the particle filter's kernel; return tracks and the cloud after the last scan."""
    n, m = len(world.assumptions.prior.mean), scans.detections.shape[1]
    gate = gate_of(1.0, m)
    settings = ParticleStrategy(resample_below, resampling, roughening, gate, NEVER)
    tracks = room_for_tracks(scans, n)
    cloud = cloud_for(n, m, particles, scans.most_detections)
    compiled_particle_filter(n, m, proposal)(
        world.assumptions.models,
        settings,
        world.assumptions.prior,
        scans,
        first_trial,
        numbers_of(3),
        tracks,
        cloud,
    )
    return tracks, cloud
