"""Scenes drawn from a study's scene: truth first, then detections of whatever truth there is.

Numbers are shared and nested between conditions: the same trial draws the same numbers whatever is
swept, and a denser or easier condition contains a sparser or harder one.
"""

from __future__ import annotations

from filters.random_numbers import Numbers
from harness.scene.batch import SceneBatch, Truth
from harness.scene.detections import draw_detections
from harness.scene.truth import draw_truth
from harness.study.schema import Scene


def draw_scenes(scene: Scene, numbers: Numbers, first_trial: int, trials: int) -> SceneBatch:
    """Scenes of consecutive trials."""
    states = draw_truth(scene, numbers, first_trial, trials)
    scans, outside = draw_detections(scene, states, numbers, first_trial)
    axes = scene.target.axes
    return SceneBatch(first_trial, Truth(states, outside, axes), scans)
