"""The wavefield engine: six-component records of many sub-events at receivers on the free surface."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import fields

import numpy as np
from numpy.typing import NDArray

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.synthetic.engine import Engine, Receivers, Sampling, SubEvents
from rupture.synthetic.wavefield.gather import add_block
from rupture.synthetic.wavefield.integration import Block, Report, integrate
from rupture.synthetic.wavefield.pairs import Pairs, find_pairs
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.store import GreensStore
from rupture.synthetic.wavefield.tables import Motion


def wavefield_records(
    sources: SubEvents, receivers: Receivers, model: LayeredModel, sampling: Sampling
) -> NDArray[np.float64]:
    """Return acceleration (m/s^2) and rotation rate (rad/s) of a rupture, shape (receivers, 6, samples).

    Complete wavefield of a layered anelastic half-space (all body and surface waves, near field, both with Q), with
    distances and azimuths from the ellipsoid. Distances are computed one by one when they are few; otherwise from a table
    so fine that interpolation errs by less than 0.1 %.

    Parameters
    ----------
    sources
        Sub-events; slip starts at `time_s` and lasts `rise_time_s` with a raised-cosine moment rate.
    receivers
        Places on the free surface.
    model
        Layered half-space; no sub-event may lie on one of its interfaces.
    sampling
        Time axis; the response is flat to 0.8 high_hz and falls to nothing at high_hz.

    Raises
    ------
    InputError
        When a sub-event is not below the surface, lies on an interface or right below a receiver, or the band
        reaches half the sampling rate.
    """

    def blocks(pairs: Pairs, plan: FrequencyPlan) -> Iterator[Block]:
        return integrate(model, pairs.depth_km, [nodes.distance_m for nodes in pairs.nodes], plan)

    return _records(sources, receivers, model, sampling, blocks)


def stored_wavefield(store: GreensStore, report: Report | None = None, whole: SubEvents | None = None) -> Engine:
    """Return an engine like `wavefield_records` that keeps its Green's functions in a store and reuses them.

    Parameters
    ----------
    store
        Where Green's functions are kept.
    report
        Called with (done, total) source depths while they are fetched or built.
    whole
        The rupture of which the engine will be given parts: all parts then share one set of Green's functions.
    """
    whole = None if whole is None else _checked_events(whole)

    def engine(
        sources: SubEvents, receivers: Receivers, model: LayeredModel, sampling: Sampling
    ) -> NDArray[np.float64]:
        def blocks(pairs: Pairs, plan: FrequencyPlan) -> Iterator[Block]:
            first = 0
            for d, (depth, nodes) in enumerate(zip(pairs.depth_km, pairs.nodes, strict=True)):
                table = store.fetch(model, float(depth), nodes.distance_m, plan)
                yield Block(first, slice(0, plan.omega.size), table.spectra)
                first += nodes.distance_m.size
                if report is not None:
                    report(d + 1, pairs.depth_km.size)

        return _records(sources, receivers, model, sampling, blocks, whole)

    return engine


def raised_cosine_spectrum(rise_time_s: NDArray[np.float64], omega: NDArray[np.complex128]) -> NDArray[np.complex128]:
    """Return the spectrum of the unit-area moment rate (1 - cos(2 pi t / rise)) / rise, shape (events, frequencies).

    Parameters
    ----------
    rise_time_s
        Durations in s, shape (events,); zero for a step of moment.
    omega
        Complex angular frequencies, shape (frequencies,).
    """
    s = 1j * omega[None, :] * np.maximum(np.asarray(rise_time_s, float), 1e-9)[:, None]
    return -np.expm1(-s) / s * (4 * np.pi**2 / (4 * np.pi**2 + s * s))


def _records(
    sources: SubEvents,
    receivers: Receivers,
    model: LayeredModel,
    sampling: Sampling,
    blocks_of: Callable[[Pairs, FrequencyPlan], Iterable[Block]],
    whole: SubEvents | None = None,
) -> NDArray[np.float64]:
    sources, receivers = _checked(sources, receivers)
    # Parts of a rupture share one time axis, so that they share their Green's functions.
    origin = min(sampling.start_s, float((sources if whole is None else whole).time_s.min()))
    lead = int(np.ceil((sampling.start_s - origin) / sampling.step_s - 1e-9))
    origin = sampling.start_s - lead * sampling.step_s
    plan = FrequencyPlan(sampling.step_s, lead + sampling.samples, sampling.high_hz)
    omega = plan.omega
    pairs = find_pairs(sources, receivers, model, plan, whole)
    source = raised_cosine_spectrum(sources.rise_time_s, omega)
    source *= np.exp(-1j * omega * (sources.time_s[:, None] - origin))
    # On a periodic time axis what starts after the window would come back at its start.
    source[sources.time_s >= sampling.start_s + sampling.samples * sampling.step_s] = 0.0
    spectra = np.zeros((receivers.longitude_deg.size, 6, omega.size), complex)
    translation, rotation = ((1j * omega) ** power for power in Motion.SENSORS.value)
    node_step = np.array([nodes.step_m for nodes in pairs.nodes])
    slowness = np.array([nodes.slowness_s_m for nodes in pairs.nodes])
    for block in blocks_of(pairs, plan):
        some = block.frequencies
        add_block(
            block.spectra, block.first, omega[some], source[:, some], pairs.level, pairs.first_row, pairs.stencil,
            pairs.reduced_m, node_step, slowness, pairs.weights, pairs.onward_rad, translation[some], rotation[some],
            some.start, spectra,
        )  # fmt: skip
    return plan.series(spectra)[..., lead:]


def _checked_events(sources: SubEvents) -> SubEvents:
    """Return sub-events as arrays of floats; raise InputError for unequal lengths, numbers not finite, a negative rise time."""
    count = np.size(sources.time_s)
    if not count:
        raise InputError("A rupture needs at least one sub-event")
    values = {field.name: np.asarray(getattr(sources, field.name), float) for field in fields(sources)}
    for name, value in values.items():
        if value.shape != (count,) or not np.isfinite(value).all():
            raise InputError(f"Sub-events: {name} must hold one finite number for each of the {count} sub-events")
    if (values["rise_time_s"] < 0).any():
        raise InputError("Sub-events: a rise time is negative; give 0 s or more")
    return SubEvents(**values)


def _checked(sources: SubEvents, receivers: Receivers) -> tuple[SubEvents, Receivers]:
    """Return both as arrays of floats; errors as `_checked_events`, and for receivers that are not finite."""
    longitude, latitude = np.asarray(receivers.longitude_deg, float), np.asarray(receivers.latitude_deg, float)
    if longitude.ndim != 1 or longitude.shape != latitude.shape or not np.isfinite([longitude, latitude]).all():
        raise InputError("Receivers: longitude_deg and latitude_deg must be lists of finite numbers of the same length")
    return _checked_events(sources), Receivers(longitude, latitude)
