"""Invented results in the form that a study leaves behind."""

import itertools
from dataclasses import replace

import numpy as np
import pandas as pd
import pytest

from harness.evidence.results import Results
from metrics.consistency import chi_square_mean_bounds
from metrics.intervals import wilson_interval

DENSITY = "scene.sensor.clutter_density_per_m2"
DETECTION = "scene.sensor.detection_probability"
NOISE = "scene.sensor.noise_sd_m"
SWEEP = {
    DENSITY: list(np.geomspace(1e-5, 3e-4, 3)),
    DETECTION: [0.6, 0.8, 0.95],
    NOISE: [5.0, 10.0, 20.0],
}
# name: kind, factor on the odds of a loss, on the error, on the NEES, hypotheses and us a scan
STRATEGIES = {
    "nearest": ("nearest-neighbour", 9.0, 1.3, 2.6, 4.0, 0.33),
    "probable": ("most-probable-hypothesis", 5.0, 1.2, 1.9, 4.1, 0.36),
    "pda": ("pda", 2.2, 1.1, 1.15, 4.3, 0.41),
    "mixture": ("gaussian-mixture", 1.0, 1.0, 1.02, 46.0, 17.2),
    "particles": ("particle-filter", 1.06, 1.01, 1.04, np.nan, 210.0),
    "known": ("known-association", 0.0, 0.8, 1.0, 1.0, 0.21),
}


def invented_results(sweep=None, strategies=tuple(STRATEGIES), trials=400, scans=40, seed=3):
    """Results whose losses, errors and NEES grow with clutter, noise and missed detections."""
    rng = np.random.default_rng(seed)
    sweep = SWEEP if sweep is None else sweep
    summary, scan_rows = [], []
    for levels in itertools.product(*sweep.values()):
        setting = dict(zip(sweep, levels, strict=True))
        hardness = _hardness(setting)
        rows = [_case(rng, setting, name, hardness, trials) for name in strategies]
        _mark_best(rows)
        summary += rows
        scan_rows += [_scan_rows(rng, setting, row, trials, scans) for row in rows]
    document = {
        "title": "An invented harbour approach",
        "question": "Which strategy holds a small craft through sea clutter?",
        "trials": trials,
        "scene": {
            "scans": scans,
            "scan_interval_s": 1.0,
            "sensor": {
                "kind": "position",
                "noise_sd_m": 10.0,
                "detection_probability": 0.85,
                "clutter_density_per_m2": 1e-4,
                "region_m": [[-500.0, 500.0], [-500.0, 500.0]],
            },
        },
        "strategies": {name: {"kind": STRATEGIES[name][0]} for name in strategies},
        "sweep": dict(sweep),
        "gospa": {"cutoff_m": 50.0, "order": 2},
        "scoring": {"from_scan": 5},
    }
    return Results(pd.DataFrame(summary), pd.concat(scan_rows, ignore_index=True), document, {})


def _hardness(setting):
    density = setting.get(DENSITY, 1e-4)
    detection = setting.get(DETECTION, 0.85)
    noise = setting.get(NOISE, 10.0)
    noise = noise if isinstance(noise, float) else 10.0
    return density * noise**2 * (1.4 - detection) * 8.0, noise, detection


def _case(rng, setting, name, hardness, trials):
    _, loss, error, nees, hypotheses, cost = STRATEGIES[name]
    clutter, noise, detection = hardness
    odds = loss * 0.6 * clutter**1.5
    lost = int(rng.binomial(trials, odds / (1 + odds)))
    held = trials - lost
    low, high = wilson_interval(lost, trials)
    rmse = noise * error * (0.55 + 0.8 * (1 - detection) + 0.5 * loss**0.3 * clutter)
    rmse *= np.exp(rng.normal(0, 0.01))
    half = 2 / np.sqrt(held) * 0.35 if held > 1 else np.nan
    anees = 1 + (nees - 1) * (0.3 + clutter) + rng.normal(0, 0.01)
    if held == 0:
        rmse = anees = np.nan
    return {
        **setting,
        "strategy": name,
        "trials": trials,
        "lost": lost,
        "failed": 0,
        "track_loss_rate": lost / trials,
        "track_loss_rate_low": low,
        "track_loss_rate_high": high,
        **_with_interval("rmse_position", rmse, half),
        **_with_interval("rmse_velocity", 0.12 * rmse, half),
        **_with_interval("anees", anees, half / 2),
        **_with_interval("gospa", rmse + 20 * lost / trials, half),
        "nees_inside": min(1.0, 0.95 / anees),
        "rmse_position_all": rmse + 60 * lost / trials,
        "effective_trials": 0.8 * held if held else np.nan,
        "no_estimate": 0.0,
        "anis": 1.0,
        "gospa_localisation": rmse**2,
        "gospa_missed": 0.0,
        "gospa_false": 0.0,
        "hypotheses_per_scan": hypotheses * (1 + 5 * clutter),
        "us_per_scan": cost * (1 + clutter),
        "outside": 0.0,
        "impossible_scans": 0,
        "trials_chosen_by": "fixed",
        "best_in": "",
    }


def _with_interval(name, value, half):
    return {name: value, f"{name}_low": value * np.exp(-half), f"{name}_high": value * np.exp(half)}


def _mark_best(rows):
    """Mark candidates whose interval reaches that of the lowest: enough for an invented study."""
    rivals = [row for row in rows if row["strategy"] != "known"]
    for metric in ("track_loss_rate", "rmse_position"):
        known = [row for row in rivals if np.isfinite(row[metric])]
        reach = min((row[f"{metric}_high"] for row in known), default=np.nan)
        for row in known:
            if row[f"{metric}_low"] <= reach:
                row["best_in"] = f"{row['best_in']} {metric}".strip()


def _scan_rows(rng, setting, row, trials, scans):
    scan = np.arange(1, scans + 1)
    lost = row["track_loss_rate"] * (1 - np.exp(-3 * scan / scans)) / (1 - np.exp(-3))
    held = np.full(scans, trials - row["lost"])
    settling = 1 + 0.6 * np.exp(-scan / 4)
    noise = np.exp(rng.normal(0, 0.02, scans))
    low, high = chi_square_mean_bounds(4, held)
    return pd.DataFrame(
        {
            **{key: [level] * scans for key, level in setting.items()},
            "strategy": row["strategy"],
            "scan": scan,
            "time_s": scan - 1.0,
            "held": held,
            "rmse_position": np.where(held > 0, row["rmse_position"] * settling * noise, np.nan),
            "rmse_velocity": np.where(held > 0, row["rmse_velocity"] * settling * noise, np.nan),
            "nees": 4 * row["anees"] * np.exp(rng.normal(0, 0.03, scans)),
            "nees_low": low,
            "nees_high": high,
            "dimension": 4,
            "lost": lost,
        }
    )


@pytest.fixture(scope="session")
def invent():
    return invented_results


@pytest.fixture(scope="session")
def study():
    """Three swept keys of three levels, six strategies."""
    return invented_results()


@pytest.fixture(scope="session")
def no_sweep():
    return invented_results(sweep={})


@pytest.fixture(scope="session")
def one_key():
    return invented_results(sweep={DENSITY: list(np.geomspace(1e-5, 1e-3, 5))})


@pytest.fixture(scope="session")
def not_a_number():
    return invented_results(
        sweep={"scene.target.motion": ["nearly-constant-velocity", "coordinated-turn"]}
    )


@pytest.fixture(scope="session")
def one_strategy():
    return invented_results(strategies=("mixture",))


@pytest.fixture(scope="session")
def all_lost(one_key):
    """No trial holds track, so errors and NEES have no value."""
    summary, scans = one_key.summary.copy(), one_key.scans.copy()
    summary["lost"] = summary["trials"]
    summary[["track_loss_rate", "track_loss_rate_high"]] = 1.0
    summary["track_loss_rate_low"] = wilson_interval(400, 400).low
    without = [c for c in summary if c.startswith(("rmse", "anees", "nees"))]
    summary[without] = np.nan
    scans["held"] = 0
    scans[["rmse_position", "rmse_velocity", "nees", "nees_low", "nees_high"]] = np.nan
    scans["lost"] = 1.0
    return replace(one_key, summary=summary, scans=scans)


@pytest.fixture(scope="session")
def with_failures(study):
    summary = study.summary.copy()
    summary.loc[summary["strategy"] == "pda", "failed"] = 3
    return replace(study, summary=summary)


@pytest.fixture(scope="session")
def thousand_cases():
    return invented_results(
        sweep={
            DENSITY: list(np.geomspace(1e-6, 1e-3, 12)),
            DETECTION: [0.5, 0.6, 0.7, 0.8, 0.9, 0.95, 0.99],
            NOISE: [5.0, 10.0],
        },
        trials=100,
        scans=5,
    )
