"""How records are read: distances, filters, limits of the quality checks."""

from __future__ import annotations

from dataclasses import dataclass

from rupture.errors import InputError


@dataclass(frozen=True)
class CorrectionSettings:
    """Which findings about an installation are applied to the records; all are looked for and reported.

    Attributes
    ----------
    polarity
        Reversed and swapped components.
    turn
        One sensor turned about the vertical against the other.
    time_shift
        The rotation sensor's clock against the translation sensor's.
    azimuth
        Both sensors turned, from the direction of the first P against the geodesic.
    travel_time
        A site's clock against those of the other sites, from the onsets of P.
    gain
        Sensitivities that are off by a factor.
    """

    polarity: bool = True
    turn: bool = True
    time_shift: bool = True
    azimuth: bool = True
    travel_time: bool = True
    gain: bool = True


@dataclass(frozen=True)
class RecordSettings:
    """Settings of `read_sites`; the defaults suit regional and local earthquakes.

    Attributes
    ----------
    site_distance_m
        A rotation sensor and a translation sensor closer than this are one site.
    before_s, after_s
        Stretch of record that is read, before and after the origin time. `after_s` None: until surface waves at
        2 km/s have passed the farthest site, and five minutes more.
    rate_hz
        Common sampling rate. None: the highest rate of the sensors chosen, at most 20 Hz; slower ones are
        interpolated, and their usable band ends below their own Nyquist frequency.
    low_hz
        Lowest frequency kept. None: 0.02 Hz, or what the length of the record or the instrument allows.
    response
        "full": poles, zeros and filters are removed; "sensitivity": one number only.
    water_level_db
        The response is taken as at least this far below its maximum, so that noise is not magnified without bound.
    response_floor_db
        Frequencies at which the instrument answers less than this below its maximum are left out.
    bridge_s
        Gaps and spikes up to this long are bridged by a line while filtering; they stay masked.
    guard_s
        Masked on both sides of a gap, clipped stretch or spike, where filtering smears what is missing.
    flat_s
        A constant stretch of this length is masked.
    clip_share
        A sensor with more than this share of clipped samples is left out as a whole.
    arrays
        Groups of stations (NET.STA or STA), each of which together makes one site.
    automatic_arrays
        Stations without rotation sensors that stand close enough are grouped into array sites.
    array_reach_hz
        An automatic array is made only where its rotation is right up to this frequency.
    array_error_share
        Largest error of array-derived rotation, as a share of its amplitude, that non-uniform strain may bring:
        it sets the highest usable frequency of an array site.
    array_velocity_km_s
        Slowest apparent velocity for which that holds. None: 3 km/s up to 1,500 km from the event, beyond it the
        apparent velocity of the first P wave.
    corrections
        Which findings about orientation, polarity, clocks and gains are applied.
    need_rotation
        Raise an error when no site at all has rotation; False only to look at the quality table.
    """

    site_distance_m: float = 200.0
    before_s: float = 120.0
    after_s: float | None = None
    rate_hz: float | None = None
    low_hz: float | None = None
    response: str = "full"
    water_level_db: float = 60.0
    response_floor_db: float = 40.0
    bridge_s: float = 2.0
    guard_s: float = 1.0
    flat_s: float = 2.0
    clip_share: float = 0.2
    arrays: tuple[tuple[str, ...], ...] = ()
    automatic_arrays: bool = True
    array_reach_hz: float = 0.5
    array_error_share: float = 0.1
    array_velocity_km_s: float | None = None
    corrections: CorrectionSettings = CorrectionSettings()
    need_rotation: bool = True

    def __post_init__(self) -> None:
        positive = (
            "site_distance_m", "before_s", "after_s", "rate_hz", "low_hz", "water_level_db", "response_floor_db",
            "flat_s", "clip_share", "array_reach_hz", "array_error_share", "array_velocity_km_s",
        )  # fmt: skip
        for name in positive:
            value = getattr(self, name)
            if value is not None and not value > 0:
                raise InputError(f"records: {name} = {value} must be positive")
        for name in ("bridge_s", "guard_s"):
            if not getattr(self, name) >= 0:
                raise InputError(f"records: {name} = {getattr(self, name)} must not be negative")
        if self.response not in ("full", "sensitivity"):
            raise InputError(f"records: response = '{self.response}'; it is 'full' or 'sensitivity'")
        for group in self.arrays:
            if len(set(group)) < 3:
                raise InputError(f"records: an array needs three stations or more, not {', '.join(group) or 'none'}")
