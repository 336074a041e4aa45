"""What came of the records: one row per channel, one verdict per site."""

from __future__ import annotations

from dataclasses import dataclass, field

from rupture.site import Site


class UnusableError(Exception):
    """A channel or sensor that cannot be used; the message is the reason in the quality table."""


@dataclass(frozen=True)
class ChannelFound:
    """What the files say about one channel.

    Attributes
    ----------
    unit
        Input unit as the metadata spell it; empty when unknown.
    rate_hz
        Sampling rate in Hz, or None when there is no record.
    start_s, end_s
        First and last sample read, s after the origin time.
    azimuth_deg, dip_deg
        Orientation as the metadata give it (SEED: dip positive down), None when absent.
    sensor
        Description of the sensor in the metadata.
    gaps, gap_s
        Number of gaps and their total length in s inside the span read.
    timing_quality_percent
        Lowest timing quality in the miniSEED headers, None where the files carry none.
    """

    unit: str = ""
    rate_hz: float | None = None
    start_s: float | None = None
    end_s: float | None = None
    azimuth_deg: float | None = None
    dip_deg: float | None = None
    sensor: str = ""
    gaps: int = 0
    gap_s: float = 0.0
    timing_quality_percent: float | None = None


@dataclass(frozen=True)
class ChannelReport:
    """One row of the quality table.

    Attributes
    ----------
    site
        Code of the site that the channel belongs to.
    channel
        NET.STA.LOC.CHA; empty for a row about the site as a whole.
    found
        What the files say.
    done
        Steps carried out, in order, in words.
    missing
        What is absent or had to be masked, in words.
    snr
        Amplitude ratio of the signal window to the record before P; None where it cannot be measured.
    snr_bands
        (lowest Hz, highest Hz, ratio) per octave inside the usable band.
    used
        Whether the channel is part of a site.
    reason
        Why not, when it is not.
    """

    site: str
    channel: str
    found: ChannelFound = field(default_factory=ChannelFound)
    done: tuple[str, ...] = ()
    missing: tuple[str, ...] = ()
    snr: float | None = None
    snr_bands: tuple[tuple[float, float, float], ...] = ()
    used: bool = False
    reason: str = ""


@dataclass(frozen=True)
class Correction:
    """Something that the data say about how a site is installed.

    Attributes
    ----------
    kind
        What was looked at: relative turn, polarity, order of components, time shift, azimuth, travel time, ...
    value, uncertainty
        Estimate and standard deviation in `unit`; NaN where the data do not say.
    unit
        deg, s or 1.
    noticed
        Whether the estimate differs from a healthy site by more than its uncertainty explains.
    applied
        Whether the records were changed by it.
    note
        The finding in words.
    """

    kind: str
    value: float
    uncertainty: float
    unit: str
    noticed: bool
    applied: bool
    note: str


@dataclass(frozen=True)
class Calibration:
    """What other earthquakes have said about one site: (value, standard deviation), None where they did not.

    Attributes
    ----------
    turn_deg
        By how much the rotation sensor stands clockwise of the translation sensor.
    azimuth_deg
        By how much the first waves come in clockwise of the geodesic.
    time_shift_s
        By how much the rotation sensor's clock is later than the translation sensor's.
    travel_time_s
        By how much P comes late against the other sites.
    events
        Number of events.
    """

    turn_deg: tuple[float, float] | None = None
    azimuth_deg: tuple[float, float] | None = None
    time_shift_s: tuple[float, float] | None = None
    travel_time_s: tuple[float, float] | None = None
    events: int = 0


@dataclass(frozen=True)
class SiteVerdict:
    """The verdict on one site.

    Attributes
    ----------
    code, longitude_deg, latitude_deg, elevation_m
        Name and place.
    components
        6C, 3C+rotZ, Z+rotH, ... as `rupture.site.Site.kind`.
    used, reason
        Whether it takes part, and why not.
    summary
        The state of the site in one sentence.
    coherence
        Share of the variance of the rotation that the matching accelerations explain (0-1), NaN when unknown.
    corrections
        What the data say about orientation, polarity and clocks.
    """

    code: str
    longitude_deg: float
    latitude_deg: float
    elevation_m: float
    components: str
    used: bool
    reason: str = ""
    summary: str = ""
    coherence: float = float("nan")
    corrections: tuple[Correction, ...] = ()


@dataclass(frozen=True)
class SiteSet:
    """All sites of a run and what was found on the way.

    Attributes
    ----------
    sites
        Sites that take part, sorted by code.
    rejected
        Sites that have records but do not take part.
    quality
        The quality table.
    verdicts
        One per site, used or not.
    """

    sites: tuple[Site, ...]
    rejected: tuple[Site, ...]
    quality: tuple[ChannelReport, ...]
    verdicts: tuple[SiteVerdict, ...]
