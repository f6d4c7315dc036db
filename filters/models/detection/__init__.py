"""Detection laws: how probably a target is detected at a scan."""

from filters.models.detection.constant import ConstantDetection
from filters.models.detection.range_table import RangeTableDetection
from filters.models.detection.swerling import FluctuatingTargetDetection, SteadyTargetDetection

DETECTION_LAWS = (
    ConstantDetection,
    RangeTableDetection,
    SteadyTargetDetection,
    FluctuatingTargetDetection,
)
