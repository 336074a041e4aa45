"""What the pictures show, as plain arrays taken out of a result: one reading for figures, movie and page."""

from __future__ import annotations

from dataclasses import dataclass
from datetime import datetime, timedelta
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.errors import InputError
from rupture.geodesy import LocalPlane, distance_azimuth
from rupture.pictures.fields import Field, field_of
from rupture.result import Result

Array = NDArray[np.float64]

RAY_PROBABILITY = 2 / 3
"""A site's ray is drawn where a coherent wave is twice as likely as none: noise alone says one half."""

_LONGEST_LAG_S = 120.0

RAY_WIDTH = 0.68
"""Share of a site's direction posterior within the width that its ray is drawn with."""


@dataclass(frozen=True)
class Scene:
    """One result, ready to draw: places in km east and north of the epicentre, times in s after origin.

    Attributes
    ----------
    result
        The result.
    plane
        Plane around the epicentre.
    field
        What is shown per cell, on its own grid and frames; None where nothing was mapped.
    """

    result: Result
    plane: LocalPlane
    field: Field | None

    @classmethod
    def of(cls, result: Result, field: str = "location") -> Scene:
        """Read a result.

        Parameters
        ----------
        result
            The result.
        field
            'location' or 'energy': what the frames and cells are those of.

        Raises
        ------
        InputError
            When the summary has no event, or the field is unknown or not there.
        """
        event = result.summary.get("event")
        if not event:
            raise InputError("this result has no event in its summary; it cannot be drawn on a map")
        plane = LocalPlane(event["longitude_deg"], event["latitude_deg"])
        return cls(result, plane, field_of(result, plane, field))

    @property
    def event(self) -> dict[str, Any]:
        """The event of summary.json."""
        return self.result.summary["event"]

    @cached_property
    def origin(self) -> datetime:
        """Origin time in UTC."""
        return datetime.fromisoformat(str(self.event["origin_time"]).replace("Z", "+00:00"))

    def utc(self, seconds: float) -> str:
        """Return the UTC clock time `seconds` after the origin, to a tenth of a second."""
        moment = self.origin + timedelta(seconds=round(float(seconds), 1))
        return f"{moment:%Y-%m-%d %H:%M:%S}.{moment.microsecond // 100_000}"

    @property
    def title(self) -> str:
        """Name, magnitude and origin time on one line."""
        magnitude = self.event.get("magnitude")
        parts = [self.event.get("name") or "", f"M {magnitude:.1f}" if magnitude is not None else ""]
        parts += [f"{self.origin:%Y-%m-%d %H:%M:%S} UTC", f"depth {self.event['depth_km']:.0f} km"]
        return ", ".join(part for part in parts if part)

    @cached_property
    def codes(self) -> list[str]:
        """Site codes."""
        return [str(code) for code in self.result.sites["site"].values]

    @cached_property
    def direction(self) -> Any:
        """The direction group in the order of the sites; sites without directions hold NaN."""
        return self.result.direction.reindex(site=self.result.sites["site"].values)

    @cached_property
    def used(self) -> NDArray[np.bool_]:
        """Shape (sites,): which sites took part."""
        return self.result.sites["used"].values.astype(bool)

    @cached_property
    def components(self) -> list[str]:
        """What each site has."""
        return [str(text) for text in self.result.sites["components"].values]

    @cached_property
    def site_km(self) -> Array:
        """Shape (sites, 2): east and north."""
        return self.to_km(self.result.sites["longitude"].values, self.result.sites["latitude"].values)

    def to_km(self, longitude_deg: Any, latitude_deg: Any) -> Array:
        """Return (..., 2) east and north in km; NaN where a place is NaN."""
        lon, lat = np.broadcast_arrays(np.asarray(longitude_deg, float), np.asarray(latitude_deg, float))
        known = np.isfinite(lon) & np.isfinite(lat)
        out = np.full((*lon.shape, 2), np.nan)
        out[known] = np.stack(self.plane.to_plane(lon[known], lat[known]), axis=-1) / 1e3
        return out

    def to_degrees(self, km: Array) -> tuple[Array, Array]:
        """Return longitude and latitude of (..., 2) km."""
        return self.plane.to_geographic(km[..., 0] * 1e3, km[..., 1] * 1e3)

    @property
    def lagged(self) -> bool:
        """Whether only directions are known: frames then count time after S from the hypocentre at each site."""
        return self.field is None and self.result.track is None

    @cached_property
    def source_time(self) -> Array:
        """Frame times in s: source time, or time after S where nothing was mapped (see `lagged`)."""
        if self.field is not None:
            return self.field.source_time
        if self.result.track is not None:
            return self.result.track["source_time"].values.astype(float)
        time = self.direction["time"].values.astype(float)
        coherent = np.nan_to_num(self.direction["probability_coherent"].values).max(axis=1) >= RAY_PROBABILITY
        lag = np.where(coherent & self.used[:, None], time - self.result.sites["s_arrival"].values[:, None], 0.0)
        step = time[1] - time[0] if time.size > 1 else 1.0
        return np.arange(0.0, np.clip(np.nanmax(lag, initial=0.0), 5.0, _LONGEST_LAG_S) + step / 2, step)

    @property
    def cells(self) -> Field:
        """The field.

        Raises
        ------
        InputError
            When nothing was mapped.
        """
        if self.field is None:
            raise InputError("this result holds no map: only directions were estimated")
        return self.field

    def _on_frames(self, name: str) -> Array:
        """Return a variable of the track, (..., frames), at the frames of this scene: interpolated where they differ."""
        track = self.result.track
        assert track is not None
        values = np.asarray(track[name].values, float)
        time = track["source_time"].values.astype(float)
        if values.shape[-1] == self.source_time.size and np.allclose(time, self.source_time):
            return values
        rows = [
            np.interp(self.source_time, time, row, left=np.nan, right=np.nan) for row in values.reshape(-1, time.size)
        ]
        return np.array(rows).reshape(*values.shape[:-1], self.source_time.size)

    @cached_property
    def active(self) -> NDArray[np.bool_]:
        """Shape (frames,): frames in which a source is more likely than none, or a site has a ray where none was sought."""
        if self.lagged:
            return np.any(np.nan_to_num(self.rays[self.used, :, 3]) >= RAY_PROBABILITY, axis=0)
        track = self.result.track
        if track is not None and "active_probability" in track:
            return np.nan_to_num(self._on_frames("active_probability")) >= 0.5
        return self.cells.present >= 0.5

    @cached_property
    def total(self) -> Array:
        """Whole-rupture share per cell of the field, sum 1 (0 when never)."""
        return self.cells.total(self.active)

    @cached_property
    def track_km(self) -> Array:
        """Shape (frames, 2): mean of the smoothed front; NaN where there is no front."""
        if self.result.track is None:
            return np.full((self.source_time.size, 2), np.nan)
        place = np.stack([self._on_frames("east"), self._on_frames("north")], axis=-1)
        place[~self.active] = np.nan
        return place

    @cached_property
    def track_covariance_km2(self) -> Array:
        """Shape (frames, 2, 2): covariance of the smoothed front, east before north; NaN where it has none."""
        if self.result.track is None:
            return np.full((self.source_time.size, 2, 2), np.nan)
        ee, nn, en = (self._on_frames(f"covariance_{name}") for name in ("ee", "nn", "en"))
        return np.stack([np.stack([ee, en], axis=-1), np.stack([en, nn], axis=-1)], axis=-1)

    @cached_property
    def front_km(self) -> Array:
        """Shape (arms, frames, 2): the best line source; no arm when none was fitted."""
        if self.result.track is None or "front_longitude" not in self.result.track:
            return np.empty((0, self.source_time.size, 2))
        track = self.result.track
        places = self.to_km(track["front_longitude"].values, track["front_latitude"].values)
        time = track["source_time"].values.astype(float)
        if places.shape[1] == self.source_time.size and np.allclose(time, self.source_time):
            return places
        # Between frames in km, never in degrees, where the date line would be in the way.
        rows = [
            [np.interp(self.source_time, time, arm[:, k], left=np.nan, right=np.nan) for k in (0, 1)] for arm in places
        ]
        return np.moveaxis(np.array(rows).reshape(len(places), 2, self.source_time.size), 1, 2)

    @cached_property
    def source_km(self) -> Array:
        """Shape (frames, 2): where the source is taken to be when rays are chosen; the epicentre before it moves."""
        place = self.track_km.copy()
        if self.front_km.shape[0]:
            gap = np.isnan(place[:, 0])
            place[gap] = self.front_km[0][gap]
        known = np.isfinite(place[:, 0])
        if not known.any():
            return np.zeros_like(place)
        index = np.arange(place.shape[0])
        filled = np.stack([np.interp(index, index[known], place[known, k]) for k in (0, 1)], axis=-1)
        filled[index < index[known][0]] = 0.0
        return filled

    @cached_property
    def s_arrival(self) -> Array:
        """Shape (sites, frames): when S from the source of each frame reaches each site.

        The hypocentre's S time scaled by hypocentral distance: for choosing a window that is close enough.
        """
        depth = float(self.event["depth_km"])
        away = np.hypot(*np.moveaxis(self.site_km[:, None] - self.source_km[None], -1, 0))
        home = np.hypot(np.hypot(*self.site_km.T), depth)
        travel = (
            self.result.sites["s_arrival"].values[:, None] * np.hypot(away, depth) / np.maximum(home, 1e-3)[:, None]
        )
        return travel + self.source_time[None]

    @cached_property
    def rays(self) -> Array:
        """Shape (sites, frames, 4): best back-azimuth, both edges of the ray and the probability of a wave.

        Degrees, unwrapped so that low <= best <= high; NaN where the site has no window then, and before the origin,
        when nothing had been sent yet and the windows hold P.
        """
        direction = self.direction
        time = direction["time"].values.astype(float)
        axis = direction["back_azimuth"].values.astype(float)
        share = np.asarray(direction["probability"].values, float)
        out = np.full((len(self.codes), self.source_time.size, 4), np.nan)
        if time.size == 0:
            return out
        step = time[1] - time[0] if time.size > 1 else 1.0
        for s in range(len(self.codes)):
            at = np.round((self.s_arrival[s] - time[0]) / step)
            for f, index in enumerate(at):
                if self.source_time[f] >= -step and np.isfinite(index) and 0 <= index < time.size:
                    t = int(index)
                    interval = circular_interval(axis, share[s, t], RAY_WIDTH)
                    if interval is not None:
                        out[s, f, :3] = interval
                        out[s, f, 3] = np.nanmax(direction["probability_coherent"].values[s, :, t], initial=0.0)
        return out

    @cached_property
    def home_back_azimuth(self) -> Array:
        """Shape (sites,): degrees from each site toward the epicentre."""
        _, _, back = distance_azimuth(
            self.event["longitude_deg"],
            self.event["latitude_deg"],
            self.result.sites["longitude"].values,
            self.result.sites["latitude"].values,
        )
        return np.degrees(back)

    @cached_property
    def convergence(self) -> Array:
        """Shape (sites,): angle in rad that turns north at the site into north on the map."""
        east, north = self.site_km.T
        on_map = np.arctan2(-east, -north)
        return np.where(np.hypot(east, north) < 1e-6, 0.0, on_map - np.radians(self.home_back_azimuth))

    def ray_frames(self, count: int = 3) -> list[int]:
        """Frames at which rays are shown: spread over the time with a source, its ends left out a little."""
        frames = np.flatnonzero(self.active)
        if frames.size == 0:
            return []
        share = np.linspace(0.1, 0.9, count)
        return sorted({int(frames[round(q * (frames.size - 1))]) for q in share})


def circular_interval(axis_deg: Array, share: Array, inside: float = 0.9) -> tuple[float, float, float] | None:
    """Return best, low and high angle of a circular distribution, unwrapped so that low <= best <= high.

    The interval is counted from the opposite of the best angle, with equal shares left out on both sides.

    Parameters
    ----------
    axis_deg
        Bin centres over the circle in degrees, uniform.
    share
        Probability in each bin.
    inside
        Share within the interval.

    Returns
    -------
    tuple of float or None
        None where the distribution is missing.

    Examples
    --------
    >>> import numpy as np
    >>> axis = np.arange(0.0, 360.0, 10.0)
    >>> circular_interval(axis, np.where(axis == 0, 1.0, 0.0))
    (0.0, -4.5, 4.5)
    """
    total = share.sum()
    if not np.isfinite(total) or total <= 0:
        return None
    count = axis_deg.size
    peak = int(np.argmax(share))
    order = (peak + np.arange(count) - count // 2) % count
    step = 360.0 / count
    edges = axis_deg[peak] + (np.arange(count + 1) - count // 2 - 0.5) * step
    cumulative = np.concatenate([[0.0], np.cumsum(share[order] / total)])
    low, high = np.interp([(1 - inside) / 2, (1 + inside) / 2], cumulative, edges)
    best = float(axis_deg[peak])
    return best, float(min(low, best)), float(max(high, best))


def credible_level(probability: Array, share: float) -> float:
    """Return the density above which cells together hold `share` of the probability (highest-density area).

    Examples
    --------
    >>> import numpy as np
    >>> credible_level(np.array([0.5, 0.3, 0.2]), 0.68)
    0.3
    """
    ordered = np.sort(probability.ravel())[::-1]
    total = ordered.sum()
    if not total > 0:
        return float("inf")
    index = int(np.searchsorted(np.cumsum(ordered), share * total * (1 - 1e-12)))
    return float(ordered[min(index, ordered.size - 1)])
