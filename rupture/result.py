"""What a run finds, in one container that is stored as NetCDF and drawn from."""

from __future__ import annotations

import json
import os
import tempfile
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rupture.errors import InputError

if TYPE_CHECKING:
    import xarray as xr

    from rupture.site import Site

GROUPS = ("sites", "direction", "map", "energy", "track")
CONVENTIONS = "CF-1.11"


@dataclass(frozen=True)
class Result:
    """Everything that a run leaves, ready to be stored, drawn or looked at in a notebook.

    Datasets carry units in their attributes; a stage that did not run leaves None.

    Attributes
    ----------
    summary
        The content of summary.json.
    sites
        Dimension `site` (coordinate: code). longitude, latitude (degrees), elevation (m), used (bool),
        reason, components, distance (km from the epicentre), azimuth (degrees, at the epicentre toward the
        site), p_arrival and s_arrival (s after the origin time, from the hypocentre).
    direction
        Dimensions `site`, `band`, `time` (window centre, s after origin), `back_azimuth` (degrees).
        probability(site, time, back_azimuth): share of the posterior in each bin, all bands, NaN where there
        is no window. back_azimuth_best, back_azimuth_p05, back_azimuth_p95 (degrees), apparent_velocity_best,
        apparent_velocity_p05, apparent_velocity_p95 (km/s), probability_coherent: each (site, band, time).
        power(site, time) in (m/s^2)^2. band_low, band_high (Hz), window (s): each (band,).
    map
        Dimensions `source_time` and either (`northing`, `easting`) in km from the epicentre or `cell` (a fault
        trace; coordinate along in km). location_probability, smoothed_probability, energy_proxy, the scalar
        series no_source_probability(source_time); longitude and latitude of the cells in degrees.
    energy
        The energy inversion on the same kind of grid: energy(source_time, ...), objective(iteration), and
        observed_power, predicted_power (site, time).
    track
        Dimension `source_time`: longitude, latitude (degrees), east, north (km from the epicentre),
        covariance_ee, covariance_nn, covariance_en (km^2), active_probability of the smoothed front. Dimension
        `arm`: front_longitude, front_latitude, front_distance (km from the hypocentre), each (arm, source_time),
        of the best line source, NaN while an arm is not active; predicted_back_azimuth(arm, site, time) in
        degrees. along_probability(source_time, along): location probability against km along the best
        direction. sample(draw, parameter) with kind(draw): the posterior of the line-source fit in the units
        that parameter names carry (azimuth_deg, speed_km_s, length_km, second_length_km, ...).
    quality
        One dictionary per channel: site, channel, found, done, missing, used, reason.
    settings
        The resolved job, as written to job.toml.
    records
        The corrected records, while the run that read them lasts; they are not stored.
    """

    summary: dict[str, Any]
    sites: xr.Dataset
    direction: xr.Dataset
    map: xr.Dataset | None = None
    energy: xr.Dataset | None = None
    track: xr.Dataset | None = None
    quality: list[dict[str, Any]] = field(default_factory=list)
    settings: dict[str, Any] = field(default_factory=dict)
    records: tuple[Site, ...] = field(default=(), repr=False, compare=False)

    def save(self, path: str | Path) -> Path:
        """Write NetCDF-4 beside the target and move it into place; return the path."""
        import xarray as xr

        path = Path(path)
        handle, name = tempfile.mkstemp(suffix=".nc.part", dir=path.parent)
        os.close(handle)
        part = Path(name)
        try:
            root = xr.Dataset(attrs={"Conventions": CONVENTIONS, "title": "Rupture back-tracking result"})
            root.to_netcdf(part, mode="w", engine="h5netcdf")
            for group in GROUPS:
                dataset = getattr(self, group)
                if dataset is not None:
                    dataset.to_netcdf(part, mode="a", group=group, engine="h5netcdf", encoding=_packing(dataset))
            texts = {"summary": self.summary, "quality": self.quality, "settings": self.settings}
            provenance = xr.Dataset(attrs={key: json.dumps(value, allow_nan=False) for key, value in texts.items()})
            provenance.to_netcdf(part, mode="a", group="provenance", engine="h5netcdf")
            part.replace(path)
        finally:
            part.unlink(missing_ok=True)
        return path

    @classmethod
    def load(cls, path: str | Path) -> Result:
        """Read a result that `save` wrote.

        Raises
        ------
        InputError
            When the file is missing or is not such a result.
        """
        import xarray as xr

        path = Path(path)
        if not path.is_file():
            raise InputError(f"{path}: no such result file")
        try:
            with xr.open_datatree(path, engine="h5netcdf", decode_timedelta=False) as tree:
                found = dict(tree.children)
                groups: dict[str, Any] = {g: found[g].to_dataset(inherit=False).load() for g in GROUPS if g in found}
                attributes = dict(tree["provenance"].attrs)
            texts: dict[str, Any] = {key: json.loads(attributes[key]) for key in ("summary", "quality", "settings")}
        except (OSError, KeyError, ValueError) as error:
            raise InputError(f"{path}: not a result of this program ({error}); give the result.nc of a run") from error
        missing = [g for g in ("sites", "direction") if g not in groups]
        if missing:
            raise InputError(f"{path}: the group '{missing[0]}' is missing; the file is not a whole result")
        return cls(**groups, **texts)

    def _repr_html_(self) -> str:
        from html import escape

        from rupture.wording import answer_sentences

        lines = "".join(f"<li>{escape(sentence)}</li>" for sentence in answer_sentences(self.summary))
        return f"<ul>{lines}</ul>"


def _packing(dataset: xr.Dataset) -> dict[str, dict[str, Any]]:
    """Compression for the large arrays only: small ones cost more than they save."""
    return {
        str(name): {"zlib": True, "complevel": 4, "shuffle": True}
        for name, variable in dataset.data_vars.items()
        if variable.size > 10_000 and variable.dtype.kind == "f"
    }
