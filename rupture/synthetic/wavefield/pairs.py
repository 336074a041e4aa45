"""Pairs of receiver and sub-event: distances at which Green's functions are needed, and how each pair is made from them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import distance_azimuth
from rupture.synthetic.engine import Receivers, SubEvents
from rupture.synthetic.wavefield.gather import NODES, lagrange
from rupture.synthetic.wavefield.mechanism import double_couple, element_weights
from rupture.synthetic.wavefield.sampling import FrequencyPlan, medium, wavenumber_counts

TABLE_GAIN = 1.5
"""Distances are interpolated from a table when they outnumber its nodes by this factor."""

NODE_SHARE = 32
"""Tables start and end at multiples of this many nodes, so that another job of the same region finds them in the store."""

NODE_PHASE = 0.9
"""Largest phase in rad between neighbouring nodes of the distance table after the mean slowness is taken out:
eight-point interpolation is then good to 5e-4 for the shortest waves, much better for the rest."""


@dataclass(frozen=True)
class Nodes:
    """Distances of one source depth and how wanted distances hang on them.

    Attributes
    ----------
    distance_m
        Where Green's functions are computed, shape (nodes,).
    first, weight
        First node and weights of NODES nodes for each wanted distance, shapes (wanted,) and (wanted, NODES).
    step_m, slowness_s_m
        Step of the nodes, and the mean slowness that is taken out before interpolation; both 0 without interpolation.
    """

    distance_m: NDArray[np.float64]
    first: NDArray[np.int64]
    weight: NDArray[np.float64]
    step_m: float
    slowness_s_m: float


@dataclass(frozen=True)
class Pairs:
    """All pairs, sorted by receiver and then sub-event; arrays of shape (receivers, events) unless said otherwise.

    Attributes
    ----------
    depth_km
        Distinct source depths, ascending, shape (depths,).
    nodes
        Nodes of each depth; rows of all depths are numbered through.
    level
        Index of each sub-event's depth, shape (events,).
    first_row, stencil, reduced_m
        First node's row, node weights (receivers, events, NODES), first node's distance less the pair's.
    weights
        Multipliers of the elementary Green's functions, shape (receivers, events, 18).
    onward_rad
        Azimuth at the receiver away from the source.
    """

    depth_km: NDArray[np.float64]
    nodes: tuple[Nodes, ...]
    level: NDArray[np.int64]
    first_row: NDArray[np.int64]
    stencil: NDArray[np.float64]
    reduced_m: NDArray[np.float64]
    weights: NDArray[np.float64]
    onward_rad: NDArray[np.float64]


def find_pairs(
    sources: SubEvents, receivers: Receivers, model: LayeredModel, plan: FrequencyPlan, whole: SubEvents | None = None
) -> Pairs:
    """Return the pairs of checked sub-events and receivers.

    Parameters
    ----------
    sources, receivers, model, plan
        As they are.
    whole
        A rupture of which `sources` are a part: its nodes are taken, the same for all of its parts.

    Raises
    ------
    InputError
        When a receiver is right above a sub-event, or a sub-event is not below the surface or lies on an interface.
    """
    place = receivers.longitude_deg[:, None], receivers.latitude_deg[:, None]
    distance, azimuth, back_azimuth = distance_azimuth(sources.longitude_deg, sources.latitude_deg, *place)
    whole_distance, whole_depth = distance, np.round(sources.depth_km, 6)
    if whole is not None:
        whole_distance, _, _ = distance_azimuth(whole.longitude_deg, whole.latitude_deg, *place)
        whole_depth = np.round(whole.depth_km, 6)
    if not (distance > 0.01).all():
        worst = int(np.argmin(distance.min(axis=1)))
        raise InputError(
            f"Receiver {worst + 1} at {receivers.longitude_deg[worst]:.5f}, {receivers.latitude_deg[worst]:.5f} lies at zero "
            "distance from a sub-event; move it by some metres"
        )
    # A rounded millimetre keeps the rows of a dipping plane from falling apart into depths that differ by rounding.
    depth_km, level = np.unique(np.round(sources.depth_km, 6), return_inverse=True)
    shape = distance.shape
    nodes, first_row = [], np.empty(shape, np.int64)
    stencil, reduced = np.empty((*shape, NODES)), np.empty(shape)
    rows = 0
    for d, depth in enumerate(depth_km):
        own = level == d
        wanted = distance[:, own]
        all_there = whole_distance[:, whole_depth == depth]
        found = find_nodes(wanted.ravel(), model, float(depth), plan, all_there.ravel())
        first_row[:, own] = rows + found.first.reshape(wanted.shape)
        stencil[:, own] = found.weight.reshape(*wanted.shape, NODES)
        reduced[:, own] = found.distance_m[found.first].reshape(wanted.shape) - wanted
        nodes.append(found)
        rows += found.distance_m.size
    moment = sources.moment_nm[:, None, None] * double_couple(sources.strike_rad, sources.dip_rad, sources.rake_rad)
    weights = element_weights(np.broadcast_to(moment, (*shape, 3, 3)), azimuth)
    return Pairs(depth_km, tuple(nodes), level, first_row, stencil, reduced, weights, back_azimuth + np.pi)


def find_nodes(
    distance_m: NDArray[np.float64],
    model: LayeredModel,
    depth_km: float,
    plan: FrequencyPlan,
    among_m: NDArray[np.float64] | None = None,
) -> Nodes:
    """Return the nodes for the wanted distances (wanted,) of one depth.

    The distances themselves when they are few; otherwise uniform nodes at whole multiples of their step, after the few
    distances that are too short to have nodes on both sides. Where the wanted distances are some among others, nodes
    are made for all of these.
    """
    omega = plan.omega[-1:]
    # A fine unit, so that the node step depends on model, depth and band alone.
    unit = 1e-8
    k_largest = float(wavenumber_counts(medium(model, np.array([depth_km]), omega), omega, unit)[0, 0] * unit)
    step = 2 * NODE_PHASE / k_largest
    own = np.unique(distance_m if among_m is None else among_m)
    place = np.searchsorted(own, distance_m)
    half = NODES // 2
    lowest = max((int(own[0] / step) - half) // NODE_SHARE * NODE_SHARE, 1)
    highest = -(-(int(own[-1] / step) + half) // NODE_SHARE) * NODE_SHARE
    table = np.arange(lowest, highest + 1) * step
    weight = np.zeros((distance_m.size, NODES))
    if own.size <= TABLE_GAIN * table.size:
        weight[:, 0] = 1.0
        return Nodes(own, place, weight, 0.0, 0.0)
    exact = own[own < table[half - 1]]
    near = distance_m < table[half - 1]
    first = np.where(near, place, exact.size + np.searchsorted(table, distance_m, side="right") - half)
    nodes = np.concatenate([exact, table])
    weight[near, 0] = 1.0
    weight[~near] = lagrange((distance_m[~near] - nodes[first[~near]]) / step)
    return Nodes(nodes, first, weight, step, 0.5 * k_largest / float(omega.real[0]))
