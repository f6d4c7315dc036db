"""A point-mass filter: the exact posterior of a state of one or two numbers, on a grid.

No association is chosen, nothing is linearised and there is no gate: a scan multiplies the density
at every grid point by

    1 - PD(x) + sum over detections j of PD(x) g(z_j | x) / lambda(z_j)

A reference for other filters, slow and as exact as its grid is fine. The grid moves and changes
with the posterior: after every scan it is cut to the points that hold all but `tail` of the mass,
and its steps follow the narrowest density that the scans so far allow (that of a target detected
at every scan with a detection, by the information form of the Kalman filter at the mean).

Source: Bucy and Senne (1971), Automatica 7, Digital synthesis of non-linear filters (from memory).
"""

from __future__ import annotations

import math
from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from filters.grid_prediction import Prediction, gaussian_prediction, moved_prediction
from filters.lattice import GridDensity, Resolution, cover, cut, edge_of_spectrum, moments
from filters.models.contract import Models
from filters.tabulate import clutter_at, see
from filters.track import Prior, Scans

# More than this of a posterior may not hang on what was cut off.
_MOST_CUT_OFF = 1e-3
# Points looked at in one go.
_BLOCK = 1 << 16


class PointMassPosterior(NamedTuple):
    """What the scans up to one say of the state."""

    grid: GridDensity  # integrates to one
    mean: np.ndarray  # (n,)
    covariance: np.ndarray  # (n, n)
    narrowest: np.ndarray  # (n, n) covariance of the narrowest density that the scans allow
    log_evidence: float  # ln of the integral of predicted density times the factor above
    impossible: bool  # the scan is impossible under the model; the prediction is kept
    cut_off: float  # bound on the posterior mass that cutting the prediction's tail cost
    unresolved: float  # spectrum at the edge of the resolved band over its peak; 0 is good


def point_mass_posteriors(
    models: Models,
    prior: Prior,
    scans: Scans,
    trial: int = 0,
    resolution: Resolution | None = None,
) -> Iterator[PointMassPosterior]:
    """Yield the posterior after every scan of one trial.

    With the default resolution moments are good to some 1e-8 for smooth densities. Where PD or the
    noise jump, or a site of bearings lies amid the density, `unresolved` stays well above 1e-10,
    and a finer grid is the only measure of the error. Position and velocity of one axis take some
    0.1 s a scan on a grid of 50,000 points.

    raises          ValueError: the state has more than two numbers, the prior's covariance is not
                    positive definite, a grid would need too many points, process noise is singular
                    where that can't be done, or a scan lies in the tail that was cut off
    """
    resolution = resolution or Resolution()
    n = len(prior.mean)
    if n > 2:
        raise ValueError(
            f"the point-mass filter is for states of one or two numbers, got {n}: its grid grows "
            "with their power; take fewer axes or a simpler motion, or a mixture or particles"
        )
    resolution.check()
    last = None
    for k, interval in enumerate(scans.intervals):
        site = models.sensor.sites[k if len(models.sensor.sites) > 1 else 0]
        detections = scans.detections[scans.offsets[trial, k] : scans.offsets[trial, k + 1]]
        try:
            if last is None:
                prediction = gaussian_prediction(prior, resolution)
            else:
                prediction = moved_prediction(
                    models.motion, interval, last.grid, last.mean, last.narrowest, resolution
                )
            last = _update(models, site, detections, prediction, resolution)
        except ValueError as error:
            raise ValueError(f"trial {trial}, scan {k + 1}: {error}") from error
        yield last


def _update(
    models: Models,
    site: np.ndarray,
    detections: np.ndarray,
    prediction: Prediction,
    resolution: Resolution,
) -> PointMassPosterior:
    information = np.linalg.inv(prediction.narrowest)
    if len(detections):
        information = information + _information(models, site, prediction.mean)
    step = 1 / (resolution.steps_per_sd * np.sqrt(np.diag(information)))
    lattice = cover(prediction.box, step, resolution.most_points)
    density = prediction.density(lattice)

    log_likelihood = _log_likelihood(models, site, detections, lattice.states())
    log_likelihood = log_likelihood.reshape(lattice.counts)
    highest = float(log_likelihood[density > 0].max())
    impossible = highest == -math.inf
    if impossible:
        highest, log_likelihood = 0.0, np.zeros(lattice.counts)
    values = density * np.exp(np.minimum(log_likelihood - highest, 0.0))
    evidence = lattice.cell * float(values.sum())  # over exp(highest)
    cut_off = resolution.tail / evidence
    if cut_off > _MOST_CUT_OFF:
        raise ValueError(
            "the detections lie in the tail of the prediction that the point-mass grid cuts off; "
            f"take a lower tail than {resolution.tail:g}, or leave the trial out"
        )
    grid = cut(GridDensity(lattice, values / evidence), resolution.tail)
    return PointMassPosterior(
        grid,
        *moments(grid),
        np.linalg.inv(information),
        -math.inf if impossible else math.log(evidence) + highest,
        impossible,
        cut_off,
        edge_of_spectrum(grid),
    )


def _information(models: Models, site: np.ndarray, state: np.ndarray) -> np.ndarray:
    """H' R^-1 H of one detection at a state; nothing where the sensor has no Jacobian."""
    seen = see(models.sensor, models.detection, site, state[np.newaxis])
    H = seen.jacobian[0]
    if not np.isfinite(H).all():
        return np.zeros((len(state), len(state)))
    return H.T @ np.linalg.solve(seen.noise[0], H)


def _log_likelihood(
    models: Models, site: np.ndarray, detections: np.ndarray, states: np.ndarray
) -> np.ndarray:
    """ln of 1 - PD + sum PD g / lambda at states (K, n), (K,).

    Detections where there is no clutter, if they can be the target's, outweigh all else: only
    their PD g is left, as in the limit from above.
    """
    clutter = clutter_at(models.clutter, site, detections)
    no_clutter = clutter == 0.0
    log_clutter = np.log(np.where(no_clutter, 1.0, clutter))
    total, certain = np.full((2, len(states)), -np.inf)
    for start in range(0, len(states), _BLOCK):
        block = slice(start, start + _BLOCK)
        seen = see(models.sensor, models.detection, site, states[block])
        with np.errstate(divide="ignore"):
            log_detected, total[block] = np.log(seen.detected), np.log(1 - seen.detected)
        noise = seen.noise[:1] if models.sensor.same_noise else seen.noise
        whiteners = np.linalg.inv(np.linalg.cholesky(noise))
        heights = np.log(np.diagonal(whiteners, axis1=1, axis2=2)).sum(axis=1)
        heights = heights + log_detected - noise.shape[-1] / 2 * math.log(2 * math.pi)
        for j, detection in enumerate(detections):
            offset = _short_way(detection - seen.measurements, models.sensor.periods)
            whitened = (whiteners @ offset[:, :, np.newaxis])[:, :, 0]
            term = heights - 0.5 * np.sum(whitened**2, axis=1) - log_clutter[j]
            sums = certain if no_clutter[j] else total
            sums[block] = np.logaddexp(sums[block], term)
    return certain if certain.max() > -np.inf else total


def _short_way(difference: np.ndarray, periods: np.ndarray) -> np.ndarray:
    turns = np.where(periods > 0, periods, np.inf)
    return difference - np.where(periods > 0, periods, 0.0) * np.round(difference / turns)
