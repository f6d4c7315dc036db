"""Sensors: what is measured of a target, with what noise, in which region."""

from filters.models.sensor.bearing import BearingSensor
from filters.models.sensor.own import OwnSensor
from filters.models.sensor.position import PositionSensor
from filters.models.sensor.range import RangeSensor
from filters.models.sensor.range_azimuth_elevation import RangeAzimuthElevationSensor
from filters.models.sensor.range_bearing import RangeBearingSensor
from filters.models.sensor.range_bearing_range_rate import RangeBearingRangeRateSensor

__all__ = ["SENSORS", "OwnSensor"]

SENSORS = (
    PositionSensor,
    RangeSensor,
    BearingSensor,
    RangeBearingSensor,
    RangeBearingRangeRateSensor,
    RangeAzimuthElevationSensor,
)
