"""The contract of a sensor: its place, noise, detection, clutter and the region it reports from."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING, Annotated, Any, ClassVar, Self, Union

import numpy as np
from pydantic import Field, model_validator

from filters.compiled import ModelFunction
from filters.models.clutter import CLUTTER_MAPS
from filters.models.clutter.clutter_map import ClutterMap, MeasurementSpace
from filters.models.clutter.uniform import uniform_clutter
from filters.models.contract import ClutterModel, DetectionModel, SensorModel
from filters.models.detection import DETECTION_LAWS
from filters.models.detection.constant import constant_detection
from filters.models.detection.law import DetectionLaw
from filters.models.ends import check_angles, check_ends
from filters.models.over_range import FactorOverRange, check_over_range
from filters.models.record import BadValue, NonNegative, Probability, Ways, within
from filters.models.sensor.noise import independent_noise, noise_over_range, noise_parameters
from filters.models.sensor.place import Place
from filters.models.sensor.position_of import no_position

if TYPE_CHECKING:
    AnyDetection = DetectionLaw
    AnyClutter = ClutterMap
else:  # unions over whatever the catalogues hold
    AnyDetection = Annotated[Union[DETECTION_LAWS], Field(discriminator="kind")]  # noqa: UP007
    AnyClutter = Annotated[Union[CLUTTER_MAPS], Field(discriminator="kind")]  # noqa: UP007


class Sensor(Place):
    """What all sensors share; a kind names its components and their functions.

    A component such as range_m has the keys noise_sd_range_m and region_range_m; one in degrees is
    in radians inside. The clutter is stated as a density in the units of the measurement (a key of
    the kind's own), as a number per scan, as a map, or by the false alarms of the detection law.
    """

    noise_factor_over_range: FactorOverRange | None = None
    """Rows of range in m and the factor by which the noise is larger there; linear between, held
    beyond the ends."""
    detection_probability: Probability | None = None
    """Probability that the target is detected at a scan, in [0, 1], the same everywhere."""
    detection: AnyDetection | None = None
    """How probably the target is detected, where that is not one number."""
    clutter_per_scan: NonNegative | None = None
    """Expected number of false detections in the region per scan, in place of a density."""
    clutter: AnyClutter | None = None
    """Where false detections come from, in place of one density."""

    measure: ClassVar[ModelFunction]  # MEASUREMENT_OF
    jacobian: ClassVar[ModelFunction]  # MEASUREMENT_MATRIX
    convert: ClassVar[ModelFunction] = no_position  # CONVERSION
    linear: ClassVar[bool] = False  # the Jacobian depends neither on the state nor on the site
    components: ClassVar[tuple[str, ...]]  # with their units: range_m, bearing_deg, ...
    wrapping: ClassVar[tuple[str, ...]] = ("bearing_deg", "azimuth_deg")
    # Keys of this kind that state a clutter density.
    density_keys: ClassVar[tuple[str, ...]] = ()

    @classmethod
    def alternatives(cls) -> tuple[Ways, ...]:
        """Detection and clutter are each stated in one of several ways."""
        detection: Ways = (("detection_probability",), ("detection",))
        clutter = tuple((key,) for key in (*cls.density_keys, "clutter_per_scan", "clutter"))
        return (*super().alternatives(), detection, clutter)

    @property
    def axes(self) -> int:
        """Number of spatial axes that the sensor works in."""
        raise NotImplementedError

    def region(self) -> np.ndarray:
        """Lower and upper end of each component of the measurement, (m, 2) SI and rad."""
        ends = [getattr(self, f"region_{component}") for component in self.components]
        return np.array(ends, float) * self.units()[:, np.newaxis]

    def units(self) -> np.ndarray:
        """SI units in one unit of the study file, for each component of the measurement (m,)."""
        degree = math.radians(1.0)
        return np.array([degree if name.endswith("_deg") else 1.0 for name in self.components])

    def periods(self) -> np.ndarray:
        """2 pi for each component that wraps, 0 for the others, (m,)."""
        return np.array([2 * math.pi * (name in self.wrapping) for name in self.components])

    def noise_deviations(self) -> np.ndarray:
        """Standard deviation of the noise of each component, (m,) SI and rad."""
        stated = [getattr(self, f"noise_sd_{component}") for component in self.components]
        return np.array(stated, float) * self.units()

    def measured_units(self) -> tuple[str, ...]:
        """Unit of each component of the measurement in words."""
        return tuple(map(_unit, self.components))

    def measurement_space(self) -> MeasurementSpace:
        """Where the detections lie."""
        names = self.components
        return MeasurementSpace(
            self.region(),
            self.units(),
            self.periods(),
            range_component=names.index("range_m") if "range_m" in names else None,
            is_position=False,
        )

    def own_parameters(self) -> np.ndarray:
        """Numbers that the measurement itself needs, behind those of the noise."""
        return np.empty(0)

    def model_parameters(self) -> np.ndarray:
        """Parameters of all functions of the sensor."""
        noise = noise_parameters(self.noise_deviations(), self.noise_factor_over_range)
        return np.concatenate([noise, self.own_parameters()])

    @classmethod
    def fixes_position(cls) -> bool:
        """Whether a detection is converted into a position."""
        return cls.convert is not no_position

    def functions(self) -> tuple[Any, Any]:
        """Measurement and Jacobian as kernels take them."""
        return self.measure.compiled, self.jacobian.compiled

    def code_digest(self) -> str:
        """Digest of code that is no part of the project; empty without any."""
        return ""

    @property
    def measurement_size(self) -> int:
        """Length of a measurement."""
        return len(self.region())

    def region_volume(self) -> float:
        """Extent of the region in SI units of the measurement."""
        return self.measurement_space().volume

    def sensor_model(self, times: np.ndarray) -> SensorModel:
        """Functions and parameters for the kernels.

        times   (scans,) s, of the scans at which the sensor works
        """
        is_growing = self.noise_factor_over_range is not None
        noise = noise_over_range if is_growing else independent_noise
        centre, half_width = np.split(self.measurement_space().box, 2)
        return SensorModel(
            *self.functions(),
            noise.compiled,
            self.convert.compiled,
            not is_growing,
            self.model_parameters(),
            self.sites(self.axes, times),
            self.periods(),
            centre,
            half_width,
            self.linear,
        )

    def detection_model(self) -> DetectionModel:
        """How probably a target is detected."""
        if self.detection is not None:
            return self.detection.model()
        assert self.detection_probability is not None
        return constant_detection(self.detection_probability)

    def clutter_model(self, times: np.ndarray) -> ClutterModel:
        """Intensity of false detections; times as for `sensor_model`."""
        space = self.measurement_space()
        if self.clutter is not None:
            return self.clutter.model(space, self.sites(self.axes, times))
        return uniform_clutter(self.clutter_intensity(), space)

    def clutter_intensity(self) -> float:
        """False detections per scan and SI unit of the measurement, where the map is uniform."""
        if self.clutter_per_scan is not None:
            return self.clutter_per_scan / self.region_volume()
        if self.detection is not None and self.detection.sets_clutter:
            return self.detection.clutter_intensity(self.units())
        (key,) = self._clutter_keys()
        return float(getattr(self, key) * self.measurement_space().density_unit)

    def _clutter_keys(self) -> list[str]:
        """Keys by which the clutter is stated, but for the detection law's false alarms."""
        keys = (*self.density_keys, "clutter_per_scan", "clutter")
        return [key for key in keys if getattr(self, key) is not None]

    @model_validator(mode="after")
    def _region_has_extent(self) -> Self:
        for name in self.components:
            key, ends = f"region_{name}", getattr(self, f"region_{name}")
            if name in self.wrapping:
                check_angles(key, ends)
            else:
                check_ends(key, ends, _unit(name))
        return self

    @model_validator(mode="after")
    def _place_has_its_axes(self) -> Self:
        for key, place in self.stated_places().items():
            if len(place) != self.axes:
                raise BadValue(
                    key,
                    f"has {len(place)} entries but the sensor works along {self.axes} axes",
                    "give one for each axis",
                )
        return self

    @model_validator(mode="after")
    def _noise_grows_by_a_table(self) -> Self:
        check_over_range("noise_factor_over_range", self.noise_factor_over_range or ())
        return self

    @model_validator(mode="after")
    def _detection_is_stated(self) -> Self:
        if self.detection_probability is None and self.detection is None:
            raise BadValue("detection_probability", "is missing", "give it or the table detection")
        if self.detection is not None:
            with within("detection"):
                self.detection.check(self.axes, self.measurement_size)
        return self

    @model_validator(mode="after")
    def _clutter_is_stated_once(self) -> Self:
        given = self._clutter_keys()
        by_false_alarms = self.detection is not None and self.detection.sets_clutter
        if given and by_false_alarms:
            raise BadValue(
                given[0],
                "stands beside detection.false_alarm_probability, which sets the clutter too",
                "remove it",
            )
        if not given and not by_false_alarms:
            keys = ", ".join((*self.density_keys, "clutter_per_scan"))
            raise BadValue(
                "clutter_per_scan", "is missing", f"give one of {keys}, or the table clutter"
            )
        if self.clutter is not None:
            with within("clutter"):
                self.clutter.check(self.measurement_space())
        return self


def _unit(component: str) -> str:
    """Unit of a component in words."""
    words = {"_deg": "deg", "_m_per_s": "m/s", "_m": "m"}
    return next(unit for ending, unit in words.items() if component.endswith(ending))
