"""One scan of one Gaussian through the compiled filter: rows of the table, nothing reduced."""

from typing import NamedTuple

import numpy as np
from small_worlds import AT_MEAN, BY_JACOBIAN, World, as_scans, look_inside, models_of

from filters.compiled import model_function
from filters.models.contract import SCALAR_OF, DetectionModel
from filters.models.motion import NearlyConstantVelocity
from filters.strategies.strategy import Assumptions
from filters.track import Prior


class Rows(NamedTuple):
    """Hypotheses of one scan: 'not detected' first, then each detection in the gate."""

    log_weights: np.ndarray  # (rows,) not normalised
    weights: np.ndarray  # (rows,) normalised
    distances: np.ndarray  # (rows,)
    means: np.ndarray  # (rows, n)
    covariances: np.ndarray  # (rows, n, n)


def world_of(sensor, mean, covariance, detection=None):
    """A sensor, and a prior of position and velocity along its axes; PD may be any function."""
    axes = sensor.axes
    target = NearlyConstantVelocity(
        motion="nearly-constant-velocity",
        acceleration_psd_m2_per_s3=0.1,
        start_position_m=(0.0,) * axes,
        start_velocity_m_per_s=(0.0,) * axes,
        start_position_sd_m=(1.0,) * axes,
        start_velocity_sd_m_per_s=(1.0,) * axes,
    )
    models = models_of(target.motion_model(), sensor)
    if detection is not None:
        models = models._replace(detection=detection)
    prior = Prior(np.array(mean, float), np.array(covariance, float))
    return World(Assumptions(models, prior, axes), None)


def rows_of(world, detections, *, linearisation=BY_JACOBIAN, detecting=AT_MEAN, gate=1.0):
    """The table after a scan of detections (M, m), which holds at the prior's time."""
    m = len(world.assumptions.models.sensor.periods)
    scans = as_scans([[detections]], m)
    seen = look_inside(world, scans, gate, linearisation=linearisation, detecting=detecting)
    table = seen.table
    return Rows(
        table["log_weight"], table["weight"], table["distance"], seen.means, seen.covariances
    )


@model_function(SCALAR_OF)
def constant_probability(parameters, site, state):
    return parameters[0]


@model_function(SCALAR_OF)
def falling_probability(parameters, site, state):
    """A logistic fall of PD along the first axis: its height, place and width."""
    return parameters[0] / (1.0 + np.exp((state[0] - parameters[1]) / parameters[2]))


@model_function(SCALAR_OF)
def seen_within(parameters, site, state):
    """1 within a distance of the site, 0 beyond."""
    square = 0.0
    for axis in range(site.shape[0] // 2):
        square += (state[axis] - site[axis]) ** 2
    return 1.0 if square < parameters[0] ** 2 else 0.0


def detection_by(function, *parameters):
    return DetectionModel(function.compiled, np.array(parameters, float))
