"""The filters once more in plain NumPy and scipy, written from the formulas, not from the kernels.

A mixture is a list of (weight, mean, covariance); a hypothesis adds the squared distance and the
index of its detection (None for 'not detected').
"""

import itertools
from typing import NamedTuple

import numpy as np
from scipy.linalg import expm
from scipy.special import logsumexp
from scipy.stats import chi2


class Plain(NamedTuple):
    """A linear Gaussian target and sensor as matrices."""

    F: np.ndarray
    Q: np.ndarray
    H: np.ndarray
    R: np.ndarray
    detection_probability: float
    clutter: float  # intensity per scan and unit of the measurement
    mean: np.ndarray  # of the prior, which holds at the first scan
    covariance: np.ndarray


class Hypothesis(NamedTuple):
    weight: float
    mean: np.ndarray
    covariance: np.ndarray
    distance: float
    detection: int | None
    parent: int = 0


def van_loan(drift, diffusion, interval):
    """Transition and noise of dx = A x dt + dw over an interval, by one matrix exponential.

    Source: Van Loan (1978), IEEE Transactions on Automatic Control 23, Computing integrals
    involving the matrix exponential.
    """
    n = len(drift)
    block = np.block([[-drift, diffusion], [np.zeros((n, n)), drift.T]]) * interval
    exponential = expm(block)
    transition = exponential[n:, n:].T
    return transition, transition @ exponential[:n, n:]


def chain(axes, orders):
    """Drift of positions, velocities, ...: each the next's integral; states grouped by order."""
    return np.kron(np.eye(orders, k=1), np.eye(axes))


def predict(plain, mixture):
    F, Q = plain.F, plain.Q
    return [(weight, F @ mean, F @ spread @ F.T + Q) for weight, mean, spread in mixture]


def update_by_one(plain, mean, covariance, detection):
    """Textbook Kalman update; also the squared distance and the log density of the detection."""
    H, R = plain.H, plain.R
    S = H @ covariance @ H.T + R
    K = covariance @ H.T @ np.linalg.inv(S)
    innovation = detection - H @ mean
    distance = float(innovation @ np.linalg.solve(S, innovation))
    log_density = -0.5 * (distance + np.linalg.slogdet(2 * np.pi * S)[1])
    return mean + K @ innovation, covariance - K @ S @ K.T, distance, log_density


def hypotheses_of(plain, mixture, detections, gate_probability=1.0):
    """All ways to explain a scan by a predicted mixture, with normalised weights."""
    limit = chi2.ppf(gate_probability, len(plain.H)) if gate_probability < 1 else np.inf
    PD = plain.detection_probability
    rows, logs = [], []
    with np.errstate(divide="ignore"):
        log_missed, log_detected = np.log(1 - PD * gate_probability), np.log(PD)
        log_clutter = np.log(plain.clutter)
        for parent, (weight, mean, covariance) in enumerate(mixture):
            rows.append((mean, covariance, 0.0, None, parent))
            logs.append(np.log(weight) + log_missed)
            for j, detection in enumerate(detections):
                updated = update_by_one(plain, mean, covariance, detection)
                if updated[2] < limit:
                    rows.append((*updated[:3], j, parent))
                    logs.append(np.log(weight) + log_detected + updated[3])
    logs = np.array(logs)
    explained = np.array([row[3] is not None for row in rows])
    if plain.clutter > 0:
        logs[explained] -= log_clutter
    elif np.any(logs[explained] > -np.inf):  # the limit from above: they outweigh all else
        logs[~explained] = -np.inf
    if np.all(logs == -np.inf):  # impossible: the prediction is kept
        logs[~explained] = np.log([weight for weight, _, _ in mixture])
    weights = np.exp(logs - logsumexp(logs))
    return [Hypothesis(weight, *row) for weight, row in zip(weights, rows, strict=True)]


def moments(mixture):
    """Mean and covariance of a mixture whose weights need not add up to one."""
    weights = np.array([part[0] for part in mixture])
    weights = weights / weights.sum()
    means = np.array([part[1] for part in mixture])
    mean = weights @ means
    offsets = means - mean
    spreads = np.array([part[2] for part in mixture])
    covariance = np.einsum("i,ijk->jk", weights, spreads)
    return mean, covariance + np.einsum("i,ij,ik->jk", weights, offsets, offsets)


def keep_nearest(rows):
    detected = [row for row in rows if row.detection is not None]
    kept = min(detected, key=lambda row: row.distance) if detected else rows[0]
    return [(1.0, kept.mean, kept.covariance)]


def keep_heaviest(rows):
    kept = max(rows, key=lambda row: row.weight)
    return [(1.0, kept.mean, kept.covariance)]


def match_moments(rows):
    return [(1.0, *moments(rows))]


def keep_all(rows):
    return [row[:3] for row in rows]


def prune_merge_cap(prune_below, merge_below, max_components):
    """The mixture's reduction, step by step as it is defined."""

    def reduce(rows):
        kept = [row[:3] for row in rows if row.weight >= prune_below and row.weight > 0]
        kept = kept or [max(rows, key=lambda row: row.weight)[:3]]
        merged = []
        while kept:
            head = max(range(len(kept)), key=lambda i: kept[i][0])
            _, mean, covariance = kept[head]
            near = [
                i == head or (mean - mu) @ np.linalg.solve(covariance, mean - mu) < merge_below
                for i, (_, mu, _) in enumerate(kept)
            ]
            group = [part for part, is_near in zip(kept, near, strict=True) if is_near]
            merged.append((sum(part[0] for part in group), *moments(group)))
            kept = [part for part, is_near in zip(kept, near, strict=True) if not is_near]
        merged.sort(key=lambda part: -part[0])
        merged = merged[:max_components]
        total = sum(part[0] for part in merged)
        return [(weight / total, mean, covariance) for weight, mean, covariance in merged]

    return reduce


def rescaled(parts):
    """The parts (weight, ...) with weights that sum to one."""
    total = sum(part[0] for part in parts)
    return [(part[0] / total, *part[1:]) for part in parts]


def heaviest(parts, most):
    return sorted(parts, key=lambda part: -part[0])[:most]


def prune_and_cap(prune_below, max_components):
    """The heaviest of those that are not too light."""

    def reduce(rows):
        kept = [row[:3] for row in rows if row.weight >= prune_below]
        return rescaled(heaviest(kept or [row[:3] for row in rows], max_components if kept else 1))

    return reduce


def bound_of_merging(first, second):
    """Runnalls' bound B(i, j) of two parts (weight, mean, covariance)."""
    parts = [first, second, (first[0] + second[0], *moments([first, second]))]
    of_first, of_second, of_both = (part[0] * np.linalg.slogdet(part[2])[1] for part in parts)
    return 0.5 * (of_both - of_first - of_second)


def merge_by_bound(prune_below, merge_among, max_components):
    """Every pair anew before every merge, the pair of least bound merged; one mode for all rows."""

    def reduce(rows):
        parts = prune_and_cap(prune_below, merge_among)(rows)
        while len(parts) > max_components:
            pairs = itertools.combinations(range(len(parts)), 2)
            i, j = min(pairs, key=lambda pair: bound_of_merging(parts[pair[0]], parts[pair[1]]))
            second, first = parts.pop(j), parts.pop(i)
            parts.append((first[0] + second[0], *moments([first, second])))
        return parts

    return reduce


def n_scan_mixtures(plain, scans, scans_back, prune_below, max_components, gate_probability=1.0):
    """N-scan pruning by whole histories: for each scan, parts (weight, mean, covariance, history).

    A history holds the associations of all scans so far, oldest first, None for 'not detected'.
    """
    mixture = [(1.0, plain.mean, plain.covariance, ())]
    mixtures = []
    for k, detections in enumerate(scans):
        bare = [part[:3] for part in mixture]
        rows = hypotheses_of(
            plain, predict(plain, bare) if k else bare, detections, gate_probability
        )
        parts = [(*row[:3], (*mixture[row.parent][3], row.detection)) for row in rows]
        best = max(parts, key=lambda part: part[0])
        settled = max(k + 1 - scans_back, 0)  # scans that all must share
        parts = rescaled([part for part in parts if part[3][:settled] == best[3][:settled]])
        kept = [part for part in parts if part[0] >= prune_below] or heaviest(parts, 1)
        mixture = rescaled(heaviest(kept, max_components))
        mixtures.append(mixture)
    return mixtures


def run(plain, scans, reduce, gate_probability=1.0):
    """Mean and covariance after every scan; the prior holds at the first."""
    mixture = [(1.0, plain.mean, plain.covariance)]
    estimates = []
    for k, detections in enumerate(scans):
        if k > 0:
            mixture = predict(plain, mixture)
        mixture = reduce(hypotheses_of(plain, mixture, detections, gate_probability))
        estimates.append(moments(mixture))
    return tuple(np.array(part) for part in zip(*estimates, strict=True))
