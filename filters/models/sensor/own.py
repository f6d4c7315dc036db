"""A sensor of the user's own: what it measures is a function in a Python file of theirs."""

from __future__ import annotations

import math
from pathlib import Path
from typing import Annotated, Any, ClassVar, Literal, Self

import numpy as np
from pydantic import Field, PrivateAttr, ValidationInfo, model_validator

from filters.models.clutter.clutter_map import MeasurementSpace
from filters.models.ends import check_angles, check_ends
from filters.models.record import BadValue, Interval, NonNegative, Positive, Real
from filters.models.sensor.own_file import OwnSource, compiled, source_of, try_out
from filters.models.sensor.sensor import Sensor

OWN_KIND = r"^.+\.py:[A-Za-z_][A-Za-z0-9_]*$"
# What a study's records are checked with, so that they know the folder of its file.
FOLDER = "folder"


class OwnSensor(Sensor):
    """A sensor whose measurement is a function of the user's own.

    The function writes the expected measurement of a state into its last argument, SI and rad:
    `NAME(parameters, site, state, out)`. Noise, region and units are stated in the study, so that a
    study is checked without importing anything.
    """

    kind: Annotated[str, Field(strict=True, pattern=OWN_KIND)]
    """Which sensor: one of your own, FILE.py:NAME, the path taken from the study file's folder."""
    measurement_units: Annotated[
        tuple[Literal["m", "m/s", "deg", "s", "Hz", "other"], ...], Field(min_length=1)
    ]
    """Unit of each component of the measurement; deg is rad in the function, and wraps."""
    noise_sd: Annotated[tuple[Positive, ...], Field(min_length=1)]
    """Standard deviation of the noise of each component, in its unit."""
    measurement_region: Annotated[tuple[Interval, ...], Field(min_length=1)]
    """Where detections are reported: lower and upper end of each component, in its unit."""
    parameters: tuple[Real, ...] = ()
    """Numbers that the function is given."""
    clutter_density: NonNegative | None = None
    """Expected false detections per scan and unit of the measurement."""

    components: ClassVar = ()
    density_keys: ClassVar = ("clutter_density",)
    _folder: Path = PrivateAttr(default=Path())

    @property
    def source(self) -> OwnSource:
        """The file as it is now.

        raises      OwnFileError
        """
        path, _, name = self.kind.rpartition(":")
        return source_of((self._folder / path).resolve(), name)

    @property
    def axes(self) -> int:
        """As many as its first place has, two by default."""
        return self.axes_of_place()

    def region(self) -> np.ndarray:
        """Lower and upper end of each component of the measurement, (m, 2) SI and rad."""
        return np.array(self.measurement_region, float) * self.units()[:, np.newaxis]

    def units(self) -> np.ndarray:
        """SI units in one unit of the study file, for each component (m,)."""
        is_angle = [unit == "deg" for unit in self.measurement_units]
        return np.where(is_angle, math.radians(1.0), 1.0)

    def periods(self) -> np.ndarray:
        """2 pi for each angle, 0 for the others, (m,)."""
        return np.where([unit == "deg" for unit in self.measurement_units], 2 * math.pi, 0.0)

    def noise_deviations(self) -> np.ndarray:
        """Standard deviation of the noise of each component, (m,) SI and rad."""
        return np.array(self.noise_sd) * self.units()

    def measurement_space(self) -> MeasurementSpace:
        """Where the detections lie; no component is known to be the range."""
        return MeasurementSpace(self.region(), self.units(), self.periods(), None, False)

    def measured_units(self) -> tuple[str, ...]:
        """Unit of each component of the measurement in words."""
        return self.measurement_units

    def own_parameters(self) -> np.ndarray:
        """Numbers that the function is given."""
        return np.array(self.parameters, float)

    def functions(self) -> tuple[Any, Any]:
        """Measurement and Jacobian as kernels take them.

        raises      OwnFileError
        """
        return compiled(self.source, tuple(self.periods()))

    def code_digest(self) -> str:
        """Digest of the file.

        raises      OwnFileError
        """
        return self.source.digest

    def try_out(self, times: np.ndarray, state: np.ndarray) -> None:
        """Import the file and try its functions at the first scan.

        state       (n,) SI
        raises      OwnFileError
        """
        site = self.sites(self.axes, times)[0]
        try_out(self.source, tuple(self.periods()), self.model_parameters(), site, state)

    @model_validator(mode="after")
    def _knows_its_folder(self, info: ValidationInfo) -> Self:
        self._folder = (info.context or {}).get(FOLDER, Path())
        return self

    @model_validator(mode="after")
    def _components_agree(self) -> Self:
        size = len(self.measurement_units)
        for key in ("noise_sd", "measurement_region"):
            if len(getattr(self, key)) != size:
                raise BadValue(
                    key, f"must have {size} entries", "give one for each of measurement_units"
                )
        for place, ends in enumerate(self.measurement_region):
            key, unit = f"measurement_region[{place}]", self.measurement_units[place]
            if unit == "deg":
                check_angles(key, ends)
            else:
                check_ends(key, ends, "its unit")
        return self
