"""From a site's records to the posterior of the slowness vector through time."""

from rupture.direction.estimate import DirectionSettings, SiteDirection, default_bands, estimate_direction
from rupture.direction.intervals import DirectionIntervals, intervals

__all__ = [
    "DirectionIntervals",
    "DirectionSettings",
    "SiteDirection",
    "default_bands",
    "estimate_direction",
    "intervals",
]
