"""Clutter maps: intensity of the Poisson process of false detections."""

from filters.models.clutter.patches import PatchyClutter
from filters.models.clutter.range_table import RangeTableClutter
from filters.models.clutter.uniform import UniformClutter

CLUTTER_MAPS = (UniformClutter, RangeTableClutter, PatchyClutter)
