"""From an Earth model to a kernel table, by complete seismograms or by rays."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from rupture.conventions import KM
from rupture.earth.layers import LayeredModel
from rupture.energy.settings import EnergySettings
from rupture.energy.table import (
    BASIS_DEG,
    MECHANISM_ORDER,
    KernelTable,
    averaged_harmonics,
    averaged_kernel,
    covariances,
    finished,
    harmonics_of,
    lag_grid,
)
from rupture.errors import InputError

Array = NDArray[np.float64]

STEP_KM = 4.0
"""Distances of the table; the S wave moves by a second or so from one to the next, less than any window."""

SLOWEST_M_S = 2200.0
"""Kernels end when waves of this speed have passed: surface waves of the bands are faster in all but deep basins."""

MECHANISM_AZIMUTHS = 16

HIGHEST_SHARE = 1.17 / 0.8
"""Green's functions reach this far above the highest corner: the band's own edge and the taper of the engine."""


def build_kernels(
    model: LayeredModel,
    depth_km: float,
    longest_km: float,
    settings: EnergySettings,
    mechanism_deg: tuple[float, float, float] | None = None,
    report: Callable[[int, int], None] | None = None,
) -> KernelTable:
    """Return the kernels of a depth up to a distance.

    Parameters
    ----------
    model
        The Earth.
    depth_km
        Of the source; moved by 10 m where it lies on an interface.
    longest_km
        Farthest distance between a cell and a site.
    settings
        Bands, window, hop and the kind of waves.
    mechanism_deg
        Strike, dip, rake; all double couples alike when not given. Radiation takes the azimuth at the cell as that of a
        flat Earth: off by the convergence of meridians between cell and site, 2 degrees at most for 200 km at 45 degrees.
    report
        Called with (done, total).

    Raises
    ------
    InputError
        When the mechanism, depth or distance cannot be taken.

    Notes
    -----
    Green's functions of the wavefield engine are kept in the user's store (HDF5, named by content).
    """
    if not 0 < longest_km <= 1000:
        raise InputError(f"kernels up to {longest_km:g} km: the distance must lie between 0 and 1000 km")
    if mechanism_deg is not None:
        checked_mechanism(mechanism_deg)
    count = int(np.ceil(max(longest_km, 6.0) / STEP_KM)) + 1
    distance = np.asarray(KM * (2.0 + STEP_KM * np.arange(count)), np.float64)
    depth = depth_km + 0.01 if np.any(np.abs(model.top_km - depth_km) < 0.005) else depth_km
    step = 0.4 / (max(high for _, high in settings.bands_hz) * HIGHEST_SHARE)
    step = settings.hop_s / np.ceil(settings.hop_s / step)
    # The time axis grows with distance; whole minutes let maps of like size share stored Green's functions.
    last_s = 60.0 * np.ceil((distance[-1] / SLOWEST_M_S + settings.window_s + 10.0) / 60.0)
    lag = lag_grid(last_s, settings.window_s, settings.hop_s)
    make = _ray_records if settings.waves == "ray" else _wavefield_records
    mechanisms = BASIS_DEG if mechanism_deg is None else (mechanism_deg,)
    turns = 1 if mechanism_deg is None else MECHANISM_AZIMUTHS
    records = make(
        model, depth, distance, step, last_s, settings, mechanisms, 2 * np.pi * np.arange(turns) / turns, report
    )
    harmonics = (
        _averaged(records[:, 0], step, settings, lag) if turns == 1 else _turned(records[0], step, settings, lag)
    )
    return finished(depth, distance, settings.bands_hz, settings.window_s, settings.hop_s, lag, harmonics)


def checked_mechanism(mechanism_deg: tuple[float, float, float]) -> None:
    """Raise InputError when strike, dip, rake are out of range."""
    strike, dip, rake = mechanism_deg
    if not (np.isfinite([strike, dip, rake]).all() and -360 <= strike <= 360 and 0 < dip <= 90 and -180 <= rake <= 180):
        raise InputError(
            f"mechanism {strike:g} {dip:g} {rake:g}: strike must lie in -360 to 360, dip in 0 to 90, rake in -180 to 180 degrees"
        )


def _averaged(records: Array, step: float, settings: EnergySettings, lag: Array) -> Array:
    """Harmonics from records at azimuth 0 of the five double couples, shape (5, D, 6, samples)."""
    # Due north of the source the radial axis is north and the transverse one east.
    radial = records[:, :, [1, 0, 2, 4, 3, 5]]
    kernels = [averaged_kernel(radial, step, band, settings.window_s, lag) for band in settings.bands_hz]
    return np.stack([[averaged_harmonics(k) for k in kernel] for kernel in kernels])


def _turned(records: Array, step: float, settings: EnergySettings, lag: Array) -> Array:
    """Harmonics from records of one mechanism at uniform azimuths, shape (azimuths, D, 6, samples)."""
    out = []
    for band in settings.bands_hz:
        samples = np.stack([covariances(one, step, band, settings.window_s, lag) for one in records])
        # Azimuths at the source; the back-azimuth is half a turn on.
        half = records.shape[0] // 2
        out.append(harmonics_of(np.roll(samples, half, axis=0), MECHANISM_ORDER).swapaxes(0, 1))
    return np.stack(out)


def _wavefield_records(
    model: LayeredModel, depth: float, distance: Array, step: float, last_s: float, settings: EnergySettings,
    mechanisms: Sequence[tuple[float, float, float]], azimuth: Array, report: Callable[[int, int], None] | None,
) -> Array:  # fmt: skip
    """Return records of unit moment steps, shape (mechanisms, azimuths, D, 6, samples), by wavenumber integration."""
    from rupture.synthetic.wavefield import FrequencyPlan, GreensStore, Motion, double_couple

    high = max(high for _, high in settings.bands_hz) * HIGHEST_SHARE
    plan = FrequencyPlan(step, round((last_s + settings.window_s) / step), high)
    table = GreensStore().fetch(model, depth, distance, plan, report)
    moments = [double_couple(*np.radians(m)) for m in mechanisms]
    return np.stack([[table.records(m, a, Motion.SENSORS) for a in azimuth] for m in moments])


def _ray_records(
    model: LayeredModel, depth: float, distance: Array, step: float, last_s: float, settings: EnergySettings,
    mechanisms: Sequence[tuple[float, float, float]], azimuth: Array, report: Callable[[int, int], None] | None,
) -> Array:  # fmt: skip
    """Return the same by rays."""
    from rupture.geodesy import destination
    from rupture.synthetic.engine import Receivers, Sampling, SubEvents
    from rupture.synthetic.ray import RayEngine

    # On the equator meridians run parallel: within 300 km directions are off by less than a tenth of a degree.
    place = [destination(np.zeros(distance.size), np.zeros(distance.size), a, distance) for a in azimuth]
    receivers = Receivers(*(np.concatenate([p[k] for p in place]) for k in (0, 1)))
    high = max(high for _, high in settings.bands_hz) * HIGHEST_SHARE
    sampling = Sampling(0.0, step, round((last_s + settings.window_s) / step), high)
    out = []
    for number, (strike, dip, rake) in enumerate(np.radians(mechanisms)):
        one = [np.array([v]) for v in (0.0, 0.0, depth, 0.0, 1.0, 0.5 / high, strike, dip, rake)]
        records = RayEngine()(SubEvents(*one), receivers, model, sampling)
        out.append(records.reshape(azimuth.size, distance.size, 6, -1))
        if report is not None:
            report(number + 1, len(mechanisms))
    return np.stack(out)
