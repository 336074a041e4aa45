"""An invented result, made from plain kinematics: a front that runs, rays that follow it, blobs of probability."""

from __future__ import annotations

from datetime import UTC, datetime

import numpy as np
import xarray as xr

from rupture.geodesy import LocalPlane, destination, distance_azimuth
from rupture.result import Result

S_SPEED = 3.5
P_SPEED = 6.06


def fabricated_result(
    longitude_deg: float = 31.2,
    latitude_deg: float = 38.4,
    azimuth_deg: float = 70.0,
    speed_km_s: float = 2.8,
    length_km: float = 80.0,
    second_km: float = 0.0,
    sites: int = 8,
    cells: int = 51,
    spacing_km: float = 5.0,
    step_s: float = 1.0,
    trace: bool = False,
    energy: bool = True,
    site_radius_km: float = 130.0,
    names: list[str] | None = None,
    seed: int = 5,
) -> Result:
    """Build a result as a run on an invented rupture could have left it."""
    rng = np.random.default_rng(seed)
    plane = LocalPlane(longitude_deg, latitude_deg)
    depth = 12.0
    duration = length_km / speed_km_s
    tau = np.arange(-4.0, duration + 8.0, step_s)
    heading = np.radians(azimuth_deg)
    unit = np.array([np.sin(heading), np.cos(heading)])

    where = np.radians(np.linspace(0, 360, sites, endpoint=False) + rng.uniform(-18, 18, sites))
    radius = site_radius_km * rng.uniform(0.6, 1.4, sites)
    site_lon, site_lat = destination(longitude_deg, latitude_deg, where, radius * 1e3)
    codes = names or [f"ZX.R{n + 1:02d}" for n in range(sites)]
    kinds = [("6C", "6C", "3C+rotZ", "Z+rotH")[n % 4] for n in range(sites)]
    used = np.array([n != 5 for n in range(sites)])
    hypo = np.hypot(radius, depth)
    site_e, site_n = (v / 1e3 for v in plane.to_plane(site_lon, site_lat))
    sites_ds = xr.Dataset(
        {
            "longitude": ("site", site_lon, {"units": "degrees_east"}),
            "latitude": ("site", site_lat, {"units": "degrees_north"}),
            "elevation": ("site", rng.uniform(100, 900, sites), {"units": "m"}),
            "used": ("site", used),
            "reason": ("site", ["" if u else "horizontal channels clipped" for u in used]),
            "components": ("site", kinds),
            "distance": ("site", radius, {"units": "km"}),
            "azimuth": ("site", np.degrees(where) % 360, {"units": "degrees"}),
            "p_arrival": ("site", hypo / P_SPEED, {"units": "s"}),
            "s_arrival": ("site", hypo / S_SPEED, {"units": "s"}),
        },
        coords={"site": codes},
    )

    arms = [(1.0, length_km)] + ([(-1.0, second_km)] if second_km else [])
    front = np.full((len(arms), tau.size), np.nan)
    for a, (_, length) in enumerate(arms):
        reach = speed_km_s * tau
        front[a] = np.where((tau >= 0) & (reach <= length), reach, np.nan)
    signed = front * np.array([sign for sign, _ in arms])[:, None]
    front_e, front_n = signed * unit[0], signed * unit[1]
    front_lon, front_lat = plane.to_geographic(front_e * 1e3, front_n * 1e3)

    # Back-azimuth against window time: the front at source time tau is seen at tau + T.
    time = np.arange(-10.0, hypo.max() / S_SPEED + duration + 25, 0.5)
    predicted = np.full((len(arms), sites, time.size), np.nan)
    for a in range(len(arms)):
        ok = np.isfinite(front_e[a])
        for s in range(sites):
            d = np.hypot(site_e[s] - front_e[a, ok], site_n[s] - front_n[a, ok])
            seen = tau[ok] + np.hypot(d, depth) / S_SPEED
            _, _, baz = distance_azimuth(front_lon[a, ok], front_lat[a, ok], site_lon[s], site_lat[s])
            order = np.argsort(seen)
            angle = np.unwrap(baz[order])
            predicted[a, s] = np.degrees(np.interp(time, seen[order], angle, left=np.nan, right=np.nan)) % 360
    baz_axis = np.arange(0.0, 360.0, 3.0)
    bands = np.array([[0.1, 0.4], [0.4, 1.2]])
    probability = np.full((sites, time.size, baz_axis.size), np.nan, np.float32)
    best, low, high = (np.full((sites, 2, time.size), np.nan) for _ in range(3))
    coherent = np.full((sites, 2, time.size), np.nan)
    power = np.zeros((sites, time.size))
    for s in range(sites):
        _, _, home = distance_azimuth(longitude_deg, latitude_deg, site_lon[s], site_lat[s])
        centre = np.where(np.isnan(predicted[0, s]), np.nan, predicted[0, s])
        p_at, s_at = hypo[s] / P_SPEED, hypo[s] / S_SPEED
        in_p = (time >= p_at) & (time < s_at) & np.isnan(centre)
        centre = np.where(in_p, np.degrees(home), centre)
        share = np.where(np.isfinite(centre), 0.93, 0.04)
        noisy = np.nan_to_num(centre) + rng.normal(0, 3.0, time.size)
        spread = 7.0 + 5.0 * rng.random(time.size)
        away = (baz_axis[None] - noisy[:, None] + 180) % 360 - 180
        bump = np.exp(-0.5 * (away / spread[:, None]) ** 2)
        bump /= bump.sum(axis=1, keepdims=True)
        probability[s] = share[:, None] * bump + (1 - share[:, None]) / baz_axis.size
        start_of_gap = time.size - 30
        probability[s, start_of_gap : start_of_gap + 8] = np.nan
        for b in range(2):
            best[s, b] = np.where(share > 0.5, noisy % 360, rng.uniform(0, 360, time.size))
            half = np.where(share > 0.5, 1.64 * spread, 160.0)
            low[s, b], high[s, b] = (best[s, b] - half) % 360, (best[s, b] + half) % 360
            coherent[s, b] = np.clip(share + rng.normal(0, 0.02, time.size), 0, 1)
        power[s] = 1e-6 * (1 + 40 * share * np.exp(-np.maximum(time - s_at, 0) / 15)) / hypo[s] ** 2 * 1e4
    speed = np.full_like(best, 3.4) + rng.normal(0, 0.2, best.shape)
    deg, kms = {"units": "degrees"}, {"units": "km/s"}
    sbt = ("site", "band", "time")
    direction = xr.Dataset(
        {
            "probability": (("site", "time", "back_azimuth"), probability, {"units": "1"}),
            "back_azimuth_best": (sbt, best, deg),
            "back_azimuth_p05": (sbt, low, deg),
            "back_azimuth_p95": (sbt, high, deg),
            "apparent_velocity_best": (sbt, speed, kms),
            "apparent_velocity_p05": (sbt, speed * 0.85, kms),
            "apparent_velocity_p95": (sbt, speed * 1.2, kms),
            "probability_coherent": (sbt, coherent, {"units": "1"}),
            "power": (("site", "time"), power, {"units": "m2 s-4"}),
            "band_low": ("band", bands[:, 0], {"units": "Hz"}),
            "band_high": ("band", bands[:, 1], {"units": "Hz"}),
            "window": ("band", [8.0, 4.0], {"units": "s"}),
        },
        coords={
            "site": codes, "band": [0, 1], "time": ("time", time, {"units": "s"}),
            "back_azimuth": ("back_azimuth", baz_axis, deg),
        },
    )  # fmt: skip

    active = (tau >= 0) & (tau <= duration)
    along_axis = np.arange(-second_km - 40.0, length_km + 42.0, 2.0)
    if trace:
        cell_e, cell_n = along_axis * unit[0], along_axis * unit[1]
        cell_dims: tuple[str, ...] = ("cell",)
        coords = {"along": ("cell", along_axis, {"units": "km"})}
    else:
        axis = (np.arange(cells) - cells // 2) * spacing_km
        cell_e, cell_n = np.meshgrid(axis, axis)
        cell_dims = ("northing", "easting")
        coords = {"northing": ("northing", axis, {"units": "km"}), "easting": ("easting", axis, {"units": "km"})}
    cell_lon, cell_lat = plane.to_geographic(cell_e * 1e3, cell_n * 1e3)
    blob = np.zeros((tau.size, *cell_e.shape), np.float32)
    along_probability = np.zeros((tau.size, along_axis.size))
    track_along = np.full(tau.size, np.nan)
    width = np.where(active, 9.0, 45.0)
    for f in range(tau.size):
        for a in range(len(arms)):
            where_now = signed[a, f] if np.isfinite(signed[a, f]) else 0.0
            e, n = where_now * unit + rng.normal(0, 1.5, 2)
            blob[f] += np.exp(-0.5 * ((cell_e - e) ** 2 + (cell_n - n) ** 2) / width[f] ** 2)
            along_probability[f] += np.exp(-0.5 * ((along_axis - where_now) / width[f]) ** 2)
        blob[f] /= blob[f].sum()
        track_along[f] = signed[0, f]
    nothing = np.where(active, 0.05, 0.9)
    location = blob * (1 - nothing).reshape(-1, *[1] * cell_e.ndim)
    rate = np.where(active, np.sin(np.pi * np.clip(tau / duration, 0, 1)) + 0.3, 0.02)
    dims = ("source_time", *cell_dims)
    coords_all = {
        "source_time": ("source_time", tau, {"units": "s"}),
        **coords,
        "longitude": (cell_dims, cell_lon, {"units": "degrees_east"}),
        "latitude": (cell_dims, cell_lat, {"units": "degrees_north"}),
    }
    shape = (-1, *[1] * cell_e.ndim)
    map_ds = xr.Dataset(
        {
            "location_probability": (dims, location.astype("f4"), {"units": "1"}),
            "smoothed_probability": (dims, blob, {"units": "1"}),
            "energy_proxy": (dims, (blob * rate.reshape(shape)).astype("f4"), {"units": "m2 s-4 km2"}),
            "no_source_probability": ("source_time", nothing, {"units": "1"}),
        },
        coords=coords_all,
    )
    energy_ds = None
    if energy:
        # The inversion has its own, coarser grid and fewer frames.
        sharp = blob**2 / (blob**2).sum(axis=tuple(range(1, blob.ndim)), keepdims=True) * rate.reshape(shape)
        own = map_ds.coords.to_dataset()
        own["energy"] = (dims, sharp.astype("f4"), {"units": "1"})
        own = own.isel(source_time=slice(0, None, 2))
        if not trace:
            own = own.isel(northing=slice(0, None, 2), easting=slice(0, None, 2))
        energy_ds = own.assign_coords(site=codes, time=time)
        energy_ds["objective"] = ("iteration", 100 * np.exp(-np.arange(120) / 25.0))
        energy_ds["observed_power"] = (("site", "time"), power, {"units": "m2 s-4"})
        energy_ds["predicted_power"] = (("site", "time"), power * 1.1, {"units": "m2 s-4"})
    draws = 400
    kinds_drawn = rng.choice(
        ["unilateral", "bilateral", "stationary"], draws, p=[0.2, 0.78, 0.02] if second_km else [0.93, 0.06, 0.01]
    )
    parameters = ["azimuth_deg", "speed_km_s", "length_km", "duration_s", "second_length_km"]
    sample = np.stack(
        [
            rng.normal(azimuth_deg, 4, draws) % 360, rng.normal(speed_km_s, 0.15, draws),
            rng.normal(length_km, 5, draws), rng.normal(duration, 1.5, draws), rng.normal(max(second_km, 1), 1, draws),
        ],
        axis=1,
    )  # fmt: skip
    along_now = np.where(np.isfinite(track_along), track_along, np.nan)
    track_e = np.where(active, np.nan_to_num(along_now) * unit[0] + rng.normal(0, 1, tau.size), np.nan)
    track_n = np.where(active, np.nan_to_num(along_now) * unit[1] + rng.normal(0, 1, tau.size), np.nan)
    track_lon, track_lat = plane.to_geographic(track_e * 1e3, track_n * 1e3)
    km2 = {"units": "km2"}
    track = xr.Dataset(
        {
            "longitude": ("source_time", track_lon, {"units": "degrees_east"}),
            "latitude": ("source_time", track_lat, {"units": "degrees_north"}),
            "east": ("source_time", track_e, {"units": "km"}),
            "north": ("source_time", track_n, {"units": "km"}),
            "covariance_ee": ("source_time", width**2, km2),
            "covariance_nn": ("source_time", (0.6 * width) ** 2, km2),
            "covariance_en": ("source_time", 0.2 * width**2, km2),
            "active_probability": ("source_time", np.where(active, 0.95, 0.05), {"units": "1"}),
            "front_longitude": (("arm", "source_time"), front_lon, {"units": "degrees_east"}),
            "front_latitude": (("arm", "source_time"), front_lat, {"units": "degrees_north"}),
            "front_distance": (("arm", "source_time"), front, {"units": "km"}),
            "predicted_back_azimuth": (("arm", "site", "time"), predicted, deg),
            "along_probability": (
                ("source_time", "along"),
                along_probability / along_probability.sum(axis=1, keepdims=True),
                {"units": "1"},
            ),
            "sample": (("draw", "parameter"), sample),
            "kind": ("draw", kinds_drawn),
        },
        coords={
            "source_time": ("source_time", tau, {"units": "s"}), "site": codes, "time": time, "parameter": parameters,
            "along": ("along", along_axis, {"units": "km"}), "arm": [0, 1][: len(arms)],
        },
    )  # fmt: skip

    def interval(name: str) -> dict[str, float]:
        column = sample[:, parameters.index(name)]
        if name == "azimuth_deg":
            # On the circle, as a real summary states it.
            column = azimuth_deg + (column - azimuth_deg + 180) % 360 - 180
            low_, best_, high_ = np.percentile(column, [5, 50, 95]) % 360
        else:
            low_, best_, high_ = np.percentile(column, [5, 50, 95])
        return {"best": float(best_), "p05": float(low_), "p95": float(high_)}

    kind = "bilateral" if second_km else "unilateral"
    shares = {k: float(np.mean(kinds_drawn == k)) for k in ("unilateral", "bilateral", "stationary")}
    second = None
    if second_km:
        back = {k: (v + 180) % 360 for k, v in interval("azimuth_deg").items()}
        second = {
            "direction_deg": back,
            "speed_km_s": interval("speed_km_s"),
            "length_km": interval("second_length_km"),
        }
    summary = {
        "event": {
            "origin_time": datetime(2031, 4, 5, 10, 20, 30, tzinfo=UTC).isoformat().replace("+00:00", "Z"),
            "longitude_deg": longitude_deg, "latitude_deg": latitude_deg, "depth_km": depth, "magnitude": 7.1,
            "mechanism_deg": [azimuth_deg, 85.0, 5.0], "name": "Invented earthquake",
        },
        "sites": [
            {
                "code": c, "used": bool(u), "reason": "" if u else "horizontal channels clipped", "components": k,
                "distance_km": float(r), "azimuth_deg": float(np.degrees(w) % 360), "azimuth_correction_deg": 0.0,
                "time_correction_s": 0.0,
            }
            for c, u, k, r, w in zip(codes, used, kinds, radius, where, strict=True)
        ],
        "rupture": {
            "kind": kind, "kind_probability": shares, "direction_deg": interval("azimuth_deg"),
            "speed_km_s": interval("speed_km_s"), "length_km": interval("length_km"), "duration_s": interval("duration_s"),
            "second_arm": second,
        },
        "reliability": {
            "false_direction_probability": 0.03, "direction_error_deg_p90": 7.5, "wrong_kind_probability": 0.06,
            "sentence": "On 60 null tests with these sites a stationary source looked like a running one in 3 %.",
        },
        "agreement": {
            "ray_stack": {"direction_deg": {"best": azimuth_deg}},
            "energy_inversion": {
                "direction_deg": {"best": azimuth_deg + 3}, "speed_km_s": {"best": speed_km_s}, "length_km": {"best": length_km},
                "second_arm": second,
            },
            "differ": False,
        },
        "provenance": {
            "versions": {"rupture-backtrack": "0.1.0", "numpy": np.__version__},
            "inputs": {"records/ZX.R01.mseed": "0" * 64}, "settings": {}, "seed": 7, "seconds": {"direction": 3.2, "stack": 4.1},
        },
    }  # fmt: skip
    quality = [
        {
            "site": c, "channel": f"{c}..HJ{o}", "found": "rad/s, 50 Hz, 0-300 s", "done": "sensitivity, turned to ENZ",
            "missing": "", "used": bool(u), "reason": "" if u else "clipped",
        }
        for c, u in zip(codes, used, strict=True)
        for o in "ENZ"
    ]  # fmt: skip
    settings = {"earth": {"model": "uniform:3.5"}, "mapping": {"spacing_km": spacing_km}, "seed": 7}
    return Result(summary, sites_ds, direction, map_ds, energy_ds, track, quality, settings)
