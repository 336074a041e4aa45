"""Settings of resolution studies and planned networks; light, since every job file is read through them."""

from __future__ import annotations

from dataclasses import dataclass

from rupture.errors import InputError

ROTATION_SENSORS = ("portable-fibre-optic", "portable-fibre-optic-early", "large-ring-laser", "array-derived")
TRANSLATION_SENSORS = ("accelerometer", "broadband", "low-gain-broadband")
"""Names of the sensor classes of `rupture.synthetic.noise`; a test holds the two together."""


@dataclass(frozen=True)
class PlannedSite:
    """A site of a planned network.

    Attributes
    ----------
    code
        A name.
    longitude_deg, latitude_deg
        Place.
    components
        6C, 3C+rotZ, Z+rotH or 3C.
    rotation
        Sensor class: portable-fibre-optic, portable-fibre-optic-early, large-ring-laser, array-derived.
    translation
        Sensor class: accelerometer, broadband, low-gain-broadband.
    ground_level
        0 is Peterson's (1993) low noise model, 1 the high one.
    """

    code: str
    longitude_deg: float
    latitude_deg: float
    components: str = "6C"
    rotation: str = "portable-fibre-optic"
    translation: str = "accelerometer"
    ground_level: float = 0.6

    def __post_init__(self) -> None:
        known = {"6C", "3C+rotZ", "Z+rotH", "3C"}
        if self.components not in known:
            raise InputError(
                f"planned site {self.code}: components '{self.components}' (known: {', '.join(sorted(known))})"
            )
        for value, classes in ((self.rotation, ROTATION_SENSORS), (self.translation, TRANSLATION_SENSORS)):
            if value not in classes:
                raise InputError(
                    f"planned site {self.code}: unknown sensor class '{value}' (known: {', '.join(classes)})"
                )
        if not (-90 <= self.latitude_deg <= 90 and -360 <= self.longitude_deg <= 360 and 0 <= self.ground_level <= 1):
            raise InputError(f"planned site {self.code}: place or ground_level out of range")


@dataclass(frozen=True)
class StudySettings:
    """What a resolution study covers.

    Attributes
    ----------
    ruptures
        Per magnitude and noise factor; a third each stationary, unilateral and bilateral.
    magnitudes
        Empty: the event's.
    noise_factors
        Amplitude of rotation noise relative to that measured or planned.
    without
        True: the whole study again with each site left out in turn.
    workers
        Processes on this machine.
    """

    ruptures: int = 60
    magnitudes: tuple[float, ...] = ()
    noise_factors: tuple[float, ...] = (1.0,)
    without: bool = False
    workers: int = 2

    def __post_init__(self) -> None:
        if self.ruptures < 3 or self.workers < 1:
            raise InputError("a study needs at least 3 ruptures and 1 worker")
        if not all(4 <= m <= 9.6 for m in self.magnitudes) or not all(f >= 0 for f in self.noise_factors):
            raise InputError("magnitudes must lie between 4 and 9.6, noise factors not be negative")
