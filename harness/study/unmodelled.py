"""What is true of a scene and told to no strategy: its models know nothing of it."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field

from filters.models.record import BadValue, NonNegative, Positive, Probability, Real, Record

Persistence = Annotated[float, Field(strict=True, allow_inf_nan=False, ge=0.0, lt=1.0)]


class PersistentClutter(Record):
    """False detections that come back: points that stay for a time and show at some scans.

    A point keeps its place in the measurement, so one seen from a moving sensor moves with it.
    """

    expected_number: NonNegative
    """Expected number of such points in the region at any time, spread evenly over it."""
    shown_probability: Probability
    """Probability that a point gives a detection at a scan, in [0, 1]."""
    mean_lifetime_s: Positive
    """Mean time for which a point stays, s; lifetimes are exponential."""
    spread: Annotated[tuple[NonNegative, ...], Field(min_length=1)] | None = None
    """Standard deviations by which a point's detections scatter about it: one number for each
    component of the measurement, in the units of the sensor's region; by default none."""


class Unmodelled(Record):
    """What is true of the scene but told to no strategy, whatever it assumes."""

    measurement_bias: Annotated[tuple[Real, ...], Field(min_length=1)] | None = None
    """Added to every measurement of the target: one number for each component, in the units of the
    sensor's region."""
    detection_persistence: Persistence = 0.0
    """Correlation of being detected from one scan to the next, in [0, 1): misses come in runs, with
    the detection probability over all scans as stated."""
    clutter_factor_sd: NonNegative = 0.0
    """Standard deviation of a factor of mean 1 by which the clutter of each scan is multiplied;
    counts are then negative binomial instead of Poisson."""
    persistent_clutter: PersistentClutter | None = None
    """False detections that come back from scan to scan, beside all other clutter."""

    def check(self, measurement_size: int) -> None:
        """Check that it fits a sensor.

        raises      BadValue
        """
        spread = None if self.persistent_clutter is None else self.persistent_clutter.spread
        for key, numbers in (
            ("measurement_bias", self.measurement_bias),
            ("persistent_clutter.spread", spread),
        ):
            if numbers is not None and len(numbers) != measurement_size:
                raise BadValue(
                    key,
                    f"must have {measurement_size} entries",
                    "give one for each component of the measurement",
                )
