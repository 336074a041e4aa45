"""The wavefield engine: six-component records of many sub-events at receivers on the free surface."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass, fields

import numpy as np
from numpy.typing import NDArray

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.synthetic.engine import Engine, Receivers, Sampling, SubEvents
from rupture.synthetic.wavefield.gather import NODES, add_block, lagrange
from rupture.synthetic.wavefield.integration import Block, Report, integrate
from rupture.synthetic.wavefield.mechanism import double_couple, element_weights
from rupture.synthetic.wavefield.sampling import FrequencyPlan, medium, wavenumber_counts
from rupture.synthetic.wavefield.store import GreensStore
from rupture.synthetic.wavefield.tables import Motion

TABLE_GAIN = 1.5
"""Distances are interpolated from a table when they outnumber its nodes by this factor."""

NODE_SHARE = 32
"""Tables start and end at multiples of this many nodes, so that another job of the same region finds them in the store."""

NODE_PHASE = 0.9
"""Largest phase in rad between neighbouring nodes of the distance table after the mean slowness is taken out:
eight-point interpolation is then good to 5e-4 for the shortest waves, much better for the rest."""


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
    return _records(
        sources, receivers, model, sampling, lambda job: integrate(model, job.depth_km, job.node_m, job.plan)
    )


def stored_wavefield(store: GreensStore, report: Report | None = None) -> Engine:
    """Return an engine like `wavefield_records` that keeps its Green's functions in a store and reuses them.

    Parameters
    ----------
    store
        Where Green's functions are kept.
    report
        Called with (done, total) source depths while they are fetched or built.
    """

    def engine(
        sources: SubEvents, receivers: Receivers, model: LayeredModel, sampling: Sampling
    ) -> NDArray[np.float64]:
        def blocks(job: _Job) -> Iterator[Block]:
            for d, depth in enumerate(job.depth_km):
                table = store.fetch(model, float(depth), job.node_m[d], job.plan)
                yield Block(d, slice(0, table.distance_m.size), slice(0, job.plan.omega.size), table.spectra)
                if report is not None:
                    report(d + 1, job.depth_km.size)

        return _records(sources, receivers, model, sampling, blocks)

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


@dataclass(frozen=True)
class _Job:
    """What the Green's functions must be known at: source depths and, for each, distances of nodes."""

    plan: FrequencyPlan
    depth_km: NDArray[np.float64]
    node_m: list[NDArray[np.float64]]


@dataclass(frozen=True)
class _Pairs:
    """Pairs of one depth, sorted by receiver, and how they hang on the nodes."""

    event: NDArray[np.int64]
    start: NDArray[np.int64]
    first_node: NDArray[np.int64]
    stencil: NDArray[np.float64]
    reduced_m: NDArray[np.float64]
    node_step_m: float
    slowness_s_m: float
    weights: NDArray[np.float64]
    onward_rad: NDArray[np.float64]


def _records(
    sources: SubEvents,
    receivers: Receivers,
    model: LayeredModel,
    sampling: Sampling,
    blocks_of: Callable[[_Job], Iterable[Block]],
) -> NDArray[np.float64]:
    _check(sources)
    origin = min(sampling.start_s, float(np.min(sources.time_s)))
    lead = int(np.ceil((sampling.start_s - origin) / sampling.step_s - 1e-9))
    origin = sampling.start_s - lead * sampling.step_s
    plan = FrequencyPlan(sampling.step_s, lead + sampling.samples, sampling.high_hz)
    end = sampling.start_s + sampling.samples * sampling.step_s
    events = np.flatnonzero(np.asarray(sources.time_s) < end)
    omega = plan.omega
    source = raised_cosine_spectrum(np.asarray(sources.rise_time_s, float), omega)
    source *= np.exp(-1j * omega * (np.asarray(sources.time_s, float)[:, None] - origin))
    depth_km, level = np.unique(np.round(np.asarray(sources.depth_km, float)[events], 6), return_inverse=True)
    shapes = [
        _pairs(sources, receivers, events[level == d], model, float(depth_km[d]), plan) for d in range(depth_km.size)
    ]
    job = _Job(plan, depth_km, [node for node, _ in shapes])
    spectra = np.zeros((np.size(receivers.longitude_deg), 6, omega.size), complex)
    translation, rotation = ((1j * omega) ** power for power in Motion.SENSORS.value)
    for block in blocks_of(job) if depth_km.size else ():
        some, pairs = block.frequencies, shapes[block.depth][1]
        add_block(
            block.spectra, block.distances.start, omega[some], source[:, some], pairs.event, pairs.start, pairs.first_node,
            pairs.stencil, pairs.reduced_m, pairs.node_step_m, pairs.slowness_s_m, pairs.weights,
            np.cos(pairs.onward_rad), np.sin(pairs.onward_rad), translation[some], rotation[some], some.start, spectra,
        )  # fmt: skip
    return plan.series(spectra)[..., lead:]


def _check(sources: SubEvents) -> None:
    """Raise InputError for arrays of unequal length, numbers that are not finite, or a negative rise time."""
    count = np.size(sources.time_s)
    if not count:
        raise InputError("A rupture needs at least one sub-event")
    for field in fields(sources):
        value = np.asarray(getattr(sources, field.name), float)
        if value.shape != (count,) or not np.isfinite(value).all():
            raise InputError(f"Sub-events: {field.name} must hold one finite number for each of the {count} sub-events")
    if (np.asarray(sources.rise_time_s) < 0).any():
        raise InputError("Sub-events: a rise time is negative; give 0 s or more")


def _pairs(
    sources: SubEvents,
    receivers: Receivers,
    events: NDArray[np.int64],
    model: LayeredModel,
    depth_km: float,
    plan: FrequencyPlan,
) -> tuple[NDArray[np.float64], _Pairs]:
    """Return the nodes of one depth and how each pair of receiver and sub-event is made from them."""
    longitude, latitude = (
        np.atleast_1d(np.asarray(v, float)) for v in (receivers.longitude_deg, receivers.latitude_deg)
    )
    distance, azimuth, back_azimuth = (
        a.ravel()
        for a in distance_azimuth(
            np.asarray(sources.longitude_deg)[None, events],
            np.asarray(sources.latitude_deg)[None, events],
            longitude[:, None],
            latitude[:, None],
        )
    )
    if not (distance > 0.01).all():
        receiver = int(np.argmin(distance)) // events.size
        raise InputError(
            f"Receiver {receiver + 1} at {longitude[receiver]:.5f}, {latitude[receiver]:.5f} lies at zero distance from a sub-event; "
            "move it by some metres"
        )
    event = np.tile(events, longitude.size)
    moment = np.asarray(sources.moment_nm, float)[event, None, None] * double_couple(
        *(np.asarray(angle, float)[event] for angle in (sources.strike_rad, sources.dip_rad, sources.rake_rad))
    )
    nodes, first, stencil, step, slowness = _nodes(distance, model, depth_km, plan)
    pairs = _Pairs(
        event=event,
        start=np.arange(longitude.size + 1) * events.size,
        first_node=first,
        stencil=stencil,
        reduced_m=nodes[first] - distance,
        node_step_m=step,
        slowness_s_m=slowness,
        weights=element_weights(moment, azimuth),
        onward_rad=back_azimuth + np.pi,
    )
    return nodes, pairs


def _nodes(
    distance_m: NDArray[np.float64], model: LayeredModel, depth_km: float, plan: FrequencyPlan
) -> tuple[NDArray[np.float64], NDArray[np.int64], NDArray[np.float64], float, float]:
    """Return nodes, first node and stencil of each pair, node step and the mean slowness that is taken out.

    All distances themselves when they are few; otherwise uniform nodes, at whole multiples of their step so that another
    job finds them in the store, and in front of them the distances that are too short for them.
    """
    omega = plan.omega[-1:]
    # A fine unit, so that the node step depends on model, depth and band alone.
    unit = 1e-8
    k_largest = float(wavenumber_counts(medium(model, np.array([depth_km]), omega), omega, unit)[0, 0] * unit)
    step = 2 * NODE_PHASE / k_largest
    own, place = np.unique(distance_m, return_inverse=True)
    lowest = max((int(own[0] / step) - NODES // 2) // NODE_SHARE * NODE_SHARE, 1)
    highest = -(-(int(own[-1] / step) + NODES // 2) // NODE_SHARE) * NODE_SHARE
    table = np.arange(lowest, highest + 1) * step
    stencil = np.zeros((distance_m.size, NODES))
    if own.size <= TABLE_GAIN * table.size:
        stencil[:, 0] = 1.0
        return own, place, stencil, 0.0, 0.0
    exact = own[own < table[NODES // 2 - 1]]
    nodes = np.concatenate([exact, table])
    first = np.searchsorted(table, distance_m, side="right") - NODES // 2
    near = distance_m < table[NODES // 2 - 1]
    first = np.where(near, np.minimum(place, exact.size - 1), first + exact.size)
    stencil[near, 0] = 1.0
    stencil[~near] = lagrange((distance_m[~near] - nodes[first[~near]]) / step)
    return nodes, first, stencil, step, 0.5 * k_largest / float(omega.real[0])
