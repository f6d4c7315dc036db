"""Probabilities of one scan in closed form, against many simulated updates.

beta = lambda |S|^(1/2) is the clutter density in units of the innovation's spread, g the gate's
radius in standard deviations. Sources: the closed forms follow from the Poisson process (derived
below); the information reduction factor is that of Fortmann, Bar-Shalom, Scheffe and Gelfand
(1985).
"""

import numpy as np
import pytest
from scipy.stats import chi2, norm
from small_worlds import (
    as_scans,
    constant_velocity_world,
    draw_scenes_of,
    look_inside,
    nearest_neighbour,
    pda,
    run_on,
)

from filters.reductions.match_moments import match_moments as matching

# beta, PD, g, axes, P(nearest is the target's), P(nothing in the gate)
CASES = [
    (0.01, 0.9, 4, 2, 0.846623, 0.060675),
    (0.05, 0.9, 4, 2, 0.684830, 0.008125),
    (0.1, 0.9, 4, 2, 0.552716, 0.000658),
    (0.05, 1.0, 5, 2, 0.760943, 0.0),
    (0.05, 0.9, 4, 1, 0.832424, 0.067070),
    (0.2, 0.8, 3, 1, 0.596659, 0.060889),
]
TRIALS = 20_000


def first_scans(beta, detection_probability, g, axes, trials, seed):
    """Many first scans: the prior, R and hence S are the same in all of them."""
    S = 4.0 + 1.5**2
    world = constant_velocity_world(
        axes,
        noise_sd=1.5,
        detection_probability=detection_probability,
        clutter=beta / S ** (axes / 2),
    )
    # The box of clutter lies around the truth and must hold the whole gate wherever that is.
    half_width = (g + 6.0) * np.sqrt(S)
    drawn = draw_scenes_of(world, np.random.default_rng(seed), trials, 1, half_width)
    return world, drawn, as_scans(drawn.trials, axes)


def in_closed_form(beta, PD, g, axes):
    """The target's detection at radius r is the nearest if no clutter lies within r.

    Its squared radius is chi-square with `axes` degrees, and the clutter within r is Poisson with
    mean beta c r^axes, c = 2 or pi; the integral over r up to g gives the first, r = g the second.
    """
    if axes == 2:
        nearest = PD * (1 - np.exp(-(g**2) * (0.5 + np.pi * beta))) / (1 + 2 * np.pi * beta)
        volume = np.pi * g**2
    else:
        nearest = PD * 2 * np.exp(2 * beta**2) * (norm.cdf(g + 2 * beta) - norm.cdf(2 * beta))
        volume = 2 * g
    empty = (1 - PD * chi2.cdf(g**2, axes)) * np.exp(-beta * volume)
    return nearest, empty


@pytest.mark.parametrize("case", CASES)
def test_the_nearest_detection_is_the_targets_as_often_as_the_closed_form_says(case):
    """Twelve shares of 20,000 trials within 4 binomial standard errors: by chance once in 1,300."""
    beta, PD, g, axes, *stated = case
    expected = in_closed_form(beta, PD, g, axes)
    np.testing.assert_allclose(expected, stated, rtol=0, atol=1e-6)

    world, drawn, scans = first_scans(beta, PD, g, axes, TRIALS, seed=int(1000 * beta) + axes)
    gate_probability = float(chi2.cdf(g**2, axes))
    tracks = run_on(world, nearest_neighbour(gate_probability=gate_probability), scans)
    plain = world.plain
    gain = plain.covariance[0, 0] / (plain.covariance[0, 0] + plain.R[0, 0])
    own = np.array([scan[0] if len(scan) else np.full(axes, np.nan) for (scan,) in drawn.trials])
    took_own = np.all(np.abs(tracks.means[:, 0, :axes] - gain * own) < 1e-9, axis=1)
    took_own &= drawn.origins[:, 0] == 0
    empty = tracks.hypotheses == 1
    for found, probability in ((took_own, expected[0]), (empty, expected[1])):
        standard_error = np.sqrt(probability * (1 - probability) / TRIALS)
        assert abs(found.mean() - probability) <= 4 * standard_error


@pytest.mark.parametrize(("beta", "PD", "g", "axes"), [(0.05, 0.9, 3, 1), (0.02, 0.7, 4, 2)])
def test_the_weight_of_not_detected_is_on_average_the_rate_of_target_free_gates(beta, PD, g, axes):
    """E[beta0] = 1 - PD PG wherever model and world agree: beta0 is then a posterior probability.

    3,000 first scans, 4 standard errors; by chance once in 8,000 for the two.
    """
    world, drawn, _ = first_scans(beta, PD, g, axes, 3000, seed=9)
    gate_probability = float(chi2.cdf(g**2, axes))
    missed = np.array(
        [
            look_inside(
                world,
                as_scans([scans], axes),
                gate_probability,
                matching(),
            ).table["weight"][0]
            for scans in drawn.trials
        ]
    )
    standard_error = missed.std(ddof=1) / np.sqrt(len(missed))
    assert abs(missed.mean() - (1 - PD * gate_probability)) < 4 * standard_error


# lambda V, PD, axes, g, q2; V is the gate's volume.
REDUCTION_FACTORS = [
    (0.5, 0.9, 2, 4, 0.72274),
    (2.0, 0.9, 2, 4, 0.47688),
    (5.0, 0.7, 2, 4, 0.16130),
    (1.0, 1.0, 2, 4, 0.77202),
    (1.0, 0.9, 1, 3, 0.47315),
    (1.0, 0.8, 2, 3, 0.39646),
]


@pytest.mark.parametrize(("clutter_in_gate", "PD", "axes", "g", "q2"), REDUCTION_FACTORS)
def test_the_combined_innovation_of_pda_spreads_by_the_published_factor(
    clutter_in_gate, PD, axes, g, q2
):
    """E[nu nu'] = q2 S, the definition of the factor in Fortmann et al. (1985).

    The values of q2 come from an integral that equals their sum over the number of detections.
    20,000 first scans, 4 standard errors; by chance once in 2,600 for the six.
    """
    volume = np.pi * g**2 if axes == 2 else 2 * g
    world, _, scans = first_scans(clutter_in_gate / volume, PD, g, axes, TRIALS, seed=31)
    tracks = run_on(world, pda(gate_probability=float(chi2.cdf(g**2, axes))), scans)
    P, R = world.plain.covariance[0, 0], world.plain.R[0, 0]
    innovations = tracks.means[:, 0, :axes] * (P + R) / P
    factors = np.mean(innovations**2, axis=1) / (P + R)
    assert abs(factors.mean() - q2) < 4 * factors.std(ddof=1) / np.sqrt(TRIALS)
