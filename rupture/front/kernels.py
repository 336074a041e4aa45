"""Likelihood of line sources: every window of every site as a mixture over the fronts that can be heard in it."""

from __future__ import annotations

import numba
import numpy as np

# Columns of a parameter table (the order of rupture.front.lines.PARAMETERS).
(
    EAST,
    NORTH,
    START,
    AZIMUTH,
    SPEED,
    LENGTH,
    AZIMUTH_2,
    SPEED_2,
    LENGTH_2,
    DURATION,
    CODA,
    CODA_TIME,
    STRAY,
    P_SHARE,
    RISE,
) = range(15)

NODES = 24
"""Points that stand for one arm: a front of 100 km is then sampled every 4 km, finer than any window resolves."""

CODA_STRIDE = 3
"""Scattered waves come from every third node: they are too diffuse to need more."""

ISOTROPIC_CODA, CODA_FOCUS = 0.4, 0.87
"""Scattered waves: this share comes from anywhere; the rest about the place that radiated them with 30 degrees of spread, so
that their mean direction keeps exp(-0.5 (30 deg)^2) of its length. Multiple forward scattering keeps early coda near the
direct path (common practice); both values are broad on purpose."""

POWER_FLOOR = 0.02
"""Window power counts down to this share of its peak."""


@numba.njit(cache=True)
def place_nodes(theta, east, north, time, weight):  # pragma: no cover - compiled
    """Fill the nodes of both arms; returns how many there are. Weights add up to one (power by arm length or time)."""
    x0, y0, t0 = theta[EAST], theta[NORTH], theta[START]
    if theta[LENGTH] <= 0.0:
        for j in range(NODES):
            east[j], north[j] = x0, y0
            time[j] = t0 + theta[DURATION] * (j + 0.5) / NODES
            weight[j] = 1.0 / NODES
        return NODES
    total = theta[LENGTH] + theta[LENGTH_2]
    count = 0
    for arm in range(2):
        length = theta[LENGTH] if arm == 0 else theta[LENGTH_2]
        if length <= 0.0:
            continue
        azimuth = theta[AZIMUTH] if arm == 0 else theta[AZIMUTH_2]
        speed = theta[SPEED] if arm == 0 else theta[SPEED_2]
        for j in range(NODES):
            reach = length * (j + 0.5) / NODES
            east[count] = x0 + reach * np.sin(azimuth)
            north[count] = y0 + reach * np.cos(azimuth)
            time[count] = t0 + reach / speed
            weight[count] = length / total / NODES
            count += 1
    return count


@numba.njit(cache=True)
def _taper(x):  # pragma: no cover - compiled
    """Weight of an arrival in a window of unit length; a biweight, within 4 % of a Hann window and free of cosines."""
    y = 1.0 - 4.0 * x * x
    return y * y if y > 0.0 else 0.0


@numba.njit(cache=True)
def _site_log_likelihood(
    theta,
    count,
    east,
    north,
    time,
    weight,
    ratio,
    log_power,
    window_time,
    window_s,
    share,
    place,
    tables,
    primary,
    grid,
    power,
    pull,
):  # pragma: no cover - compiled
    """One site. `ratio` is (A, P, T): contiguous in time, as arrivals are; `tables` is (W, 3, D): time, log slowness, energy.

    `power` (2, T) gathers what comes from one direction per arm and what comes from anywhere; `pull` (2, 4, T) gathers, per
    arm, weight, weighted sine, cosine and log slowness: a window shows one wave, the mean of all that an arm sends into it.
    """
    angles, nodes_p, windows = ratio.shape
    step_m, log_p0, log_step = grid
    hop = window_time[1] - window_time[0]
    # A place radiates while it slips: its energy is centred half a rise time after the front, and heard that much longer.
    span = window_s + theta[RISE]
    half = 0.5 * span
    late = 0.5 * theta[RISE]
    coda_time = theta[CODA_TIME]
    power[:, :windows] = 0.0
    pull[:, :, :windows] = 0.0
    from_s = 1e300
    for j in range(count):
        arm = 0 if j < NODES else 1
        de = east[j] - place[0]
        dn = north[j] - place[1]
        distance = np.sqrt(de * de + dn * dn)
        back = np.arctan2(de, dn) + place[2]
        sine, cosine = np.sin(back), np.cos(back)
        at = distance / step_m
        k = min(int(at), tables.shape[2] - 2)
        part = at - k
        scattered = 0.0
        loud = 0.0
        loud_arrival = 0.0
        loud_slow = 0.0
        for wave in range(tables.shape[0]):
            energy = (1.0 - part) * tables[wave, 2, k] + part * tables[wave, 2, k + 1]
            if energy <= 0.0:
                continue
            strength = weight[j] * energy * (theta[P_SHARE] if primary[wave] else 1.0)
            arrival = time[j] + late + (1.0 - part) * tables[wave, 0, k] + part * tables[wave, 0, k + 1]
            log_slow = (1.0 - part) * tables[wave, 1, k] + part * tables[wave, 1, k + 1]
            first = max(0, int(np.ceil((arrival - half - window_time[0]) / hop)))
            last = min(windows - 1, int(np.floor((arrival + half - window_time[0]) / hop)))
            for t in range(first, last + 1):
                g = strength * _taper((window_time[t] - arrival) / span) * 1.875 / span
                power[0, t] += g
                pull[arm, 0, t] += g
                pull[arm, 1, t] += g * sine
                pull[arm, 2, t] += g * cosine
                pull[arm, 3, t] += g * log_slow
            if not primary[wave]:
                from_s = min(from_s, arrival - half)
                scattered += strength
                if energy > loud:
                    loud, loud_arrival, loud_slow = energy, arrival, log_slow
        if j % CODA_STRIDE == 1 and scattered > 0.0:
            # Scattered waves follow the strongest S of the place with the energy of all of its S waves.
            begin = max(0, int(np.ceil((loud_arrival - window_time[0]) / hop)))
            if begin < windows:
                decay = np.exp(-hop / coda_time)
                g = CODA_STRIDE * theta[CODA] * scattered / coda_time
                g *= np.exp(-(window_time[begin] - loud_arrival) / coda_time)
                for t in range(begin, windows):
                    near = (1.0 - ISOTROPIC_CODA) * g
                    power[0, t] += near
                    power[1, t] += ISOTROPIC_CODA * g
                    pull[arm, 0, t] += near
                    pull[arm, 1, t] += near * CODA_FOCUS * sine
                    pull[arm, 2, t] += near * CODA_FOCUS * cosine
                    pull[arm, 3, t] += near * loud_slow
                    g *= decay
    peak = 0.0
    loudest = -1e300
    for t in range(windows):
        peak = max(peak, power[0, t] + power[1, t])
        if log_power[t] > loudest:
            loudest = log_power[t]
    floor = 1e-4 * peak
    total = 0.0
    number = 0.0
    mean = 0.0
    square = 0.0
    for t in range(windows):
        if np.isnan(log_power[t]):
            continue
        all_power = power[0, t] + power[1, t] + floor
        explained = power[1, t] + floor
        for arm in range(2):
            w = pull[arm, 0, t]
            if w > 0.0:
                back = np.arctan2(pull[arm, 1, t], pull[arm, 2, t])
                a = int(np.floor(back / (2.0 * np.pi) * angles + 0.5)) % angles
                b = int(np.floor((pull[arm, 3, t] / w - log_p0) / log_step + 0.5))
                explained += w * ratio[a, min(max(b, 0), nodes_p - 1), t]
        total += share * np.log((1.0 - theta[STRAY]) * explained / all_power + theta[STRAY])
        if window_time[t] < from_s:
            continue
        # Below a share of the peak the record is coda and noise, of which this model knows little.
        seen = np.log(np.exp(log_power[t] - loudest) + POWER_FLOOR)
        misfit = seen - np.log(all_power / peak + POWER_FLOOR)
        number += 1.0
        mean += misfit
        square += misfit * misfit
    return total, number, mean, square


@numba.njit(parallel=True, cache=True)
def log_likelihoods(
    particles,
    first,
    ratio,
    angles,
    nodes_p,
    log_power,
    window_time,
    window_s,
    share,
    places,
    tables,
    primary,
    grid,
    power_sigma,
    power_share,
):  # pragma: no cover - compiled
    """Return the log-likelihood of each row of a parameter table, shape (particles, sites).

    Parameters
    ----------
    particles
        Shape (N, 15), SI units.
    first
        First row of each site in the arrays over all windows, shape (sites + 1,).
    ratio
        Posterior ratios of all windows of all sites, slowness already blurred: per site (A, P, windows), end to end.
    angles, nodes_p
        A and P.
    log_power
        Natural log of window power, NaN where the window does not count, shape (windows,).
    window_time
        Window centres in s, shape (windows,).
    window_s, share
        Window length in s and share of an independent observation, shape (sites,).
    places
        East, north in m, turn from plane north to true north in rad: shape (sites, 3).
    tables, primary
        Time, log slowness and energy of each wave at equal distance steps, shape (waves, 3, D); which left as P.
    grid
        Distance step in m, log of the first slowness, step of its log.
    power_sigma
        Standard deviation of the log of window power about the model.
    power_share
        Weight of the power term.
    """
    count = particles.shape[0]
    sites = first.size - 1
    longest = 0
    for s in range(sites):
        longest = max(longest, first[s + 1] - first[s])
    out = np.zeros((count, sites))
    for i in numba.prange(count):
        east = np.empty(2 * NODES)
        north = np.empty(2 * NODES)
        time = np.empty(2 * NODES)
        weight = np.empty(2 * NODES)
        power = np.empty((2, longest))
        pull = np.empty((2, 4, longest))
        nodes = place_nodes(particles[i], east, north, time, weight)
        for s in range(sites):
            a, b = first[s], first[s + 1]
            total, number, mean, square = _site_log_likelihood(
                particles[i],
                nodes,
                east,
                north,
                time,
                weight,
                ratio[angles * nodes_p * a : angles * nodes_p * b].reshape(angles, nodes_p, b - a),
                log_power[a:b],
                window_time[a:b],
                window_s[s],
                share[s],
                places[s],
                tables,
                primary,
                grid,
                power,
                pull,
            )
            if number > 1.0:
                # The site's amplification is unknown: its mean misfit is free.
                spread = square - mean * mean / number
                total -= 0.5 * power_share * share[s] * spread / power_sigma**2
            out[i, s] = total
    return out
