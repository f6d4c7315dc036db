"""Where particles are drawn: from the motion, or from a mixture that looks at the detections.

A particle is expected at f with noise of covariance Q; at the first scan f and Q are the prior's.
By the motion it becomes f + e with e ~ N(0, Q). The mixture adds, for every detection j, what a
Kalman filter linearised at f makes of N(f, Q) given that detection, N_j:

    q(x) = s p(x) + (1 - s) [w_0 p(x) + sum over j of w_j N_j(x)]

with weights as in one update, w_0 ~ 1 - PD and w_j ~ PD N(z_j; h(f), S) / lambda(z_j). The share s
of the motion p bounds importance weights: none is above likelihood / s, however wrong the linear
model is. Dividing by the whole mixture, not by the chosen part, is what keeps the variance low.

Process noise is often singular, and its density exists on a subspace only. None is needed: a draw
from N_j is one from p corrected by a detection that was drawn too,

    e + K (z_j - h(f) - H e - v),    v ~ N(0, R),    K = Q H' S^-1,

which stays in the range of Q, and by Bayes' rule N_j(x) / p(x) is a ratio of likelihoods,

    N(z_j; h(f) + H (x - f), R) / N(z_j; h(f), S).

A particle takes n normal numbers, and with detections one uniform and perhaps m normal ones more.

Source: the mixture over associations is the optimal proposal of Doucet, Godsill and Andrieu (2000),
Statistics and Computing 10, linearised; the share of the motion is the defensive mixture of
Hesterberg (1995), Technometrics 37; draws by correction: Hoffman and Ribak (1991), Astrophysical
Journal 380 (all three from memory).
"""

from __future__ import annotations

import math
from typing import Any

from filters.cholesky import (
    factorise,
    factorise_semidefinite,
    inverse_root_determinant,
    squared_distance,
)
from filters.compiled import helper
from filters.detecting import log_or_minus_infinity
from filters.gaussian import gain, innovation_covariance
from filters.measurement_difference import difference
from filters.mixture import copy_gaussian
from filters.models.contract import Models, SensorModel
from filters.particles.cloud import DETECTIONS, Cloud
from filters.particles.weighing import NO_TRACE, fill_log_clutter
from filters.random_numbers import Numbers, fill_normals, normal, uniform
from filters.track import Scan, Start
from filters.update import HALF_LOG_TWO_PI

_MOTION_SHARE = 0.1
_LOG_MOTION_SHARE = math.log(_MOTION_SHARE)
_LOG_OTHER_SHARE = math.log(1.0 - _MOTION_SHARE)
_BY_MOTION = -1


@helper
def start_from(n: int, start: Start, cloud: Cloud) -> None:
    """Expect every particle at the start's mean, with the start's spread for noise."""
    step = cloud.step[0]
    for i in range(cloud.weights.shape[0]):
        copy_gaussian(n, start.mean, start.covariance, cloud.moved[i], step.disturbance)
    factorise_semidefinite(n, step.disturbance, step.root)
    step.filled_for = math.nan


@helper
def _draw_around(n: int, moved: Any, numbers: Numbers, step: Any, state: Any) -> None:
    """Write moved (n,) with noise of step.root added."""
    fill_normals(numbers, n, step.normals)
    for row in range(n):
        value = moved[row]
        for k in range(row + 1):
            value += step.root[row, k] * step.normals[k]
        state[row] = value


@helper
def draw_start(n: int, numbers: Numbers, cloud: Cloud) -> None:
    """Draw the particles from the start, where no scan is left to look at."""
    for i in range(cloud.weights.shape[0]):
        _draw_around(n, cloud.moved[i], numbers, cloud.step[0], cloud.states[i])


@helper
def propose(
    n: int,
    m: int,
    proposal: int,
    models: Models,
    scan: Scan,
    is_first: bool,
    numbers: Numbers,
    cloud: Cloud,
) -> None:
    """Move the particles, MOTION or DETECTIONS; the first scan has no motion before it."""
    motion, sensor, step = models.motion, models.sensor, cloud.step[0]
    same_noise = is_first or motion.linear
    same_gain = is_first or (motion.linear and sensor.linear and sensor.same_noise)
    no_clutter = proposal == DETECTIONS and fill_log_clutter(models, scan, cloud)
    for i in range(cloud.weights.shape[0]):
        state, moved = cloud.states[i], cloud.moved[i]
        if not is_first:
            if not same_noise or step.filled_for != scan.interval:
                motion.process_noise(motion.parameters, scan.interval, state, step.disturbance[:])
                factorise_semidefinite(n, step.disturbance, step.root)
                step.filled_for = scan.interval
            motion.transition(motion.parameters, scan.interval, state, moved)
        _draw_around(n, moved, numbers, step, state)
        if proposal == DETECTIONS:
            cloud.marks[i].log_ratio = 0.0
            if i == 0 or not same_gain:
                _prepare_gain(n, m, sensor, scan, moved, cloud)
            if step.usable:
                cloud.marks[i].log_ratio = _look_at_detections(
                    n, m, models, scan, no_clutter, moved, state, numbers, cloud
                )


@helper
def _prepare_gain(
    n: int, m: int, sensor: SensorModel, scan: Scan, moved: Any, cloud: Cloud
) -> None:
    """Linearise the sensor where a particle is expected."""
    step = cloud.step[0]
    sensor.jacobian(sensor.parameters, scan.site, moved, step.jacobian[:])
    sensor.noise(sensor.parameters, scan.site, moved, step.noise[:])
    innovation_covariance(
        n, m, step.jacobian, step.noise, step.disturbance, step.cross, step.innovation
    )
    step.usable = factorise(m, step.noise, step.noise_factor)
    step.usable = factorise(m, step.innovation, step.innovation_factor) and step.usable
    gain(n, m, step.cross, step.innovation_factor, step.gain)


@helper
def _look_at_detections(
    n: int,
    m: int,
    models: Models,
    scan: Scan,
    no_clutter: bool,
    moved: Any,
    state: Any,
    numbers: Numbers,
    cloud: Cloud,
) -> float:
    """Turn a draw from the motion into one from the mixture; return ln of q over p there."""
    sensor, detection, step = models.sensor, models.detection, cloud.step[0]
    sensor.measure(sensor.parameters, scan.site, moved, step.expected[:])
    detected = detection.probability(detection.parameters, scan.site, moved)
    log_detected = log_or_minus_infinity(detected) - m * HALF_LOG_TWO_PI
    log_missed = -math.inf if no_clutter else log_or_minus_infinity(1.0 - detected)

    innovation_peak = math.log(inverse_root_determinant(m, step.innovation_factor))
    count, top = _list_explaining(
        m, sensor, scan, log_missed, log_detected + innovation_peak, cloud
    )
    if top == -math.inf:
        return 0.0
    log_total = _log_sum(log_missed, count, cloud)
    chosen = _choose(log_missed, log_total, count, numbers, cloud)
    if chosen != _BY_MOTION:
        _correct(n, m, sensor, scan.detections[chosen], moved, state, numbers, cloud)

    noise_peak = math.log(inverse_root_determinant(m, step.noise_factor))
    _fill_given_state(n, m, sensor, scan, count, log_detected + noise_peak, moved, state, cloud)
    likelihood = _log_sum(log_missed, count, cloud)
    return _log_of_two(_LOG_MOTION_SHARE, _LOG_OTHER_SHARE + likelihood - log_total)


@helper
def _list_explaining(
    m: int,
    sensor: SensorModel,
    scan: Scan,
    log_missed: float,
    peak: float,
    cloud: Cloud,
) -> tuple[int, float]:
    """List the detections that matter to a particle's mixture, with ln of w_j in `log_term`.

    peak        ln of PD times the density of the innovation at zero
    returns     how many, and the greatest term
    """
    step, table = cloud.step[0], cloud.detections
    top = log_missed
    for j in range(scan.detections.shape[0]):
        difference(m, sensor.periods, scan.detections[j], step.expected, step.differences[0])
        half = 0.5 * squared_distance(
            m, step.innovation_factor, step.differences[0], step.differences[1]
        )
        table[j].log_term = peak - half - table[j].log_clutter
        top = max(top, table[j].log_term)
    count = 0
    for j in range(scan.detections.shape[0]):
        if table[j].log_term > top - NO_TRACE:
            table[count].listed = j
            table[count].log_term = table[j].log_term
            count += 1
    return count, top


@helper
def _fill_given_state(
    n: int,
    m: int,
    sensor: SensorModel,
    scan: Scan,
    count: int,
    peak: float,
    moved: Any,
    state: Any,
    cloud: Cloud,
) -> None:
    """Replace ln of w_j by ln of w_j N_j(x) / p(x), x being the state."""
    step = cloud.step[0]
    for place in range(count):
        j = cloud.detections[place].listed
        _innovation_left(n, m, sensor, scan.detections[j], moved, state, cloud)
        half = 0.5 * squared_distance(
            m, step.noise_factor, step.differences[0], step.differences[1]
        )
        cloud.detections[place].log_term = peak - half - cloud.detections[j].log_clutter


@helper
def _innovation_left(
    n: int, m: int, sensor: SensorModel, detection: Any, moved: Any, state: Any, cloud: Cloud
) -> None:
    """Write z - h(f) - H (x - f) into the first of `differences`."""
    step = cloud.step[0]
    left = step.differences[0]
    difference(m, sensor.periods, detection, step.expected, left)
    for a in range(m):
        for k in range(n):
            left[a] -= step.jacobian[a, k] * (state[k] - moved[k])


@helper
def _log_sum(log_missed: float, count: int, cloud: Cloud) -> float:
    """Logarithm of the sum of the first terms and the one for a missed target."""
    top = log_missed
    for place in range(count):
        top = max(top, cloud.detections[place].log_term)
    total = math.exp(log_missed - top)
    for place in range(count):
        total += math.exp(cloud.detections[place].log_term - top)
    return top + math.log(total)


@helper
def _choose(log_missed: float, log_total: float, count: int, numbers: Numbers, cloud: Cloud) -> int:
    """Return the detection to draw by, or _BY_MOTION."""
    place_left = uniform(numbers) - _MOTION_SHARE
    place_left -= (1.0 - _MOTION_SHARE) * math.exp(log_missed - log_total)
    chosen = _BY_MOTION
    for place in range(count):
        if place_left < 0.0:
            break
        chosen = cloud.detections[place].listed
        place_left -= (1.0 - _MOTION_SHARE) * math.exp(cloud.detections[place].log_term - log_total)
    return chosen


@helper
def _correct(
    n: int,
    m: int,
    sensor: SensorModel,
    detection: Any,
    moved: Any,
    state: Any,
    numbers: Numbers,
    cloud: Cloud,
) -> None:
    """Add K (z - h(f) - H e - v) to a draw f + e from the motion."""
    step = cloud.step[0]
    left, drawn = step.differences[0], step.differences[1]
    _innovation_left(n, m, sensor, detection, moved, state, cloud)
    for a in range(m):
        drawn[a] = normal(numbers)
        for b in range(a):  # v = L drawn, see cholesky for the diagonal
            left[a] -= step.noise_factor[a, b] * drawn[b]
        left[a] -= drawn[a] / step.noise_factor[a, a]
    for row in range(n):
        for a in range(m):
            state[row] += step.gain[row, a] * left[a]


@helper
def _log_of_two(a: float, b: float) -> float:
    """ln(exp(a) + exp(b)), safe at any magnitude; not both may be -inf."""
    top = max(a, b)
    return top + math.log(math.exp(a - top) + math.exp(b - top))
