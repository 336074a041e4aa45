"""Likelihood of line sources: every window of every site as a mixture over the fronts that can be heard in it."""

from __future__ import annotations

import numba
import numpy as np

# Columns of a parameter table (the order of rupture.front.lines.PARAMETERS).
(
    EAST, NORTH, START, AZIMUTH, SPEED, LENGTH, AZIMUTH_2, SPEED_2, LENGTH_2,
    DURATION, CODA, CODA_TIME, STRAY, P_SHARE, SURFACE, RISE, SHARE_2, STRENGTH,
) = range(18)  # fmt: skip

KNOTS = 4
"""Log-strengths at equal steps along an arm (in time, for a stationary source): columns STRENGTH to STRENGTH + KNOTS - 1 for the first
arm, and as many after them for the second. Ruptures shine unevenly, and a bright place drowns what comes soon after it."""

COLUMNS = STRENGTH + 2 * KNOTS

PIECES = 20
"""Pieces of one arm: a front of 100 km then moves 5 km in a piece, less than any window resolves, and the energy of a piece is
spread over all of its arrival time, so that long ruptures stay smooth."""

LONGEST_RISE_S = 30.0
"""Windows are widened by the rise time up to this."""

TIME, SLOWNESS, ENERGY = range(3)
"""Columns of a wave's table."""

S_WAVE, P_WAVE, SURFACE_WAVE = range(3)
"""Sorts of waves."""

WEIGHT, PULL_EAST, PULL_NORTH = range(3)
"""Rows that an arm fills: energy, and energy times the east and north slowness toward the source."""

ISOTROPIC_CODA, CODA_FOCUS = 0.4, 0.87
"""Scattered waves: this share comes from anywhere; the rest about the place that radiated them with 30 degrees of spread, so
that their mean slowness keeps exp(-0.5 (30 deg)^2) of its length. Multiple forward scattering keeps early coda near the
direct path (common practice); both values are broad on purpose."""

SLOW_CODA, SLOW_CODA_TIMES = 0.25, 4.0
"""This share of the scattered energy dies away so many times as slowly: coda decays fast at first and ever slower (Aki & Chouet
1975), and late reverberations are not a rupture that goes on."""

POWER_FLOOR = 0.02
"""Window power counts down to this share of its peak."""

_REACH = 1.7320508075688772
"""Three-point Gauss-Hermite rule: nodes at 0 and +-sqrt(3) standard deviations, weights 2/3 and 1/6."""


@numba.njit(cache=True)
def strengths(theta, arm, out):  # pragma: no cover - compiled
    """Fill the relative strength of each piece of an arm: log-linear between knots, the middle of a piece standing for it."""
    for j in range(PIECES):
        at = (j + 0.5) / PIECES * (KNOTS - 1)
        k = min(int(at), KNOTS - 2)
        low, high = theta[STRENGTH + KNOTS * arm + k], theta[STRENGTH + KNOTS * arm + k + 1]
        out[j] = np.exp(low + (at - k) * (high - low))


@numba.njit(cache=True)
def place_pieces(theta, east, north, time, weight):  # pragma: no cover - compiled
    """Fill the ends of the pieces of each arm, shape (2, PIECES + 1), and their shares of the energy, shape (2, PIECES).

    Return the number of arms. A stationary source is one arm whose pieces all lie in the same place.
    """
    arms = 2 if theta[LENGTH_2] > 0.0 else 1
    total = 0.0
    for arm in range(arms):
        azimuth, speed, length = theta[AZIMUTH], theta[SPEED], theta[LENGTH]
        if arm == 1:
            azimuth, speed, length = theta[AZIMUTH_2], theta[SPEED_2], theta[LENGTH_2]
        sine, cosine = np.sin(azimuth), np.cos(azimuth)
        for j in range(PIECES + 1):
            reach = length * j / PIECES
            east[arm, j] = theta[EAST] + reach * sine
            north[arm, j] = theta[NORTH] + reach * cosine
            time[arm, j] = theta[START] + (reach / speed if length > 0.0 else theta[DURATION] * j / PIECES)
        strengths(theta, arm, weight[arm])
        for j in range(PIECES):
            # Strength is energy per length, so that long arms radiate more.
            weight[arm, j] *= max(length, 1.0) / PIECES
            total += weight[arm, j]
    weight[:arms] /= total
    return arms


@numba.njit(cache=True)
def _spread_box(out, begin, end, energy, pull_east, pull_north):  # pragma: no cover - compiled
    """Add an arrival that lasts from begin to end (in bins) to rows of bins; bin b covers b - 0.5 to b + 0.5."""
    if end - begin < 1.0:
        # Shorter than a bin: split between two bins so that the centre stays where it is.
        middle = 0.5 * (begin + end)
        begin, end = middle - 0.5, middle + 0.5
    low = int(np.floor(begin + 0.5))
    high = int(np.floor(end + 0.5))
    if high < 0 or low >= out.shape[1]:
        return
    density = energy / (end - begin)
    for b in range(max(low, 0), min(high, out.shape[1] - 1) + 1):
        g = density * (min(end, b + 0.5) - max(begin, b - 0.5))
        out[WEIGHT, b] += g
        out[PULL_EAST, b] += g * pull_east
        out[PULL_NORTH, b] += g * pull_north


@numba.njit(cache=True)
def _arrivals(
    theta, arms, east, north, time, weight, place, tables, sort, step_m, start_s, bin_s, direct, scattered
):  # pragma: no cover - compiled
    """Lay the arrivals of all waves of all pieces into bins; return when the first S wave comes.

    `direct` and `scattered` have shape (2, 3, bins): what comes straight, and what is fed into the coda. `tables` is (D, W, 3).
    """
    waves = tables.shape[1]
    last_row = tables.shape[0] - 2
    late = 0.5 * theta[RISE]
    first_s = 1e300
    before = np.zeros((waves, 3))
    now = np.zeros((waves, 3))
    old_e = old_n = 0.0
    for arm in range(arms):
        for j in range(PIECES + 1):
            de = east[arm, j] - place[0]
            dn = north[arm, j] - place[1]
            # The site's north is not the plane's: meridians converge.
            de, dn = place[2] * de + place[3] * dn, place[2] * dn - place[3] * de
            distance = np.sqrt(de * de + dn * dn) + 1.0
            at = distance / step_m
            k = min(int(at), last_row)
            part = min(at - k, 1.0)
            fed, loud, loud_at = 0.0, 0.0, 0
            for w in range(waves):
                now[w, ENERGY] = (1.0 - part) * tables[k, w, ENERGY] + part * tables[k + 1, w, ENERGY]
                if now[w, ENERGY] <= 0.0:
                    continue
                now[w, TIME] = (
                    time[arm, j] + late + (1.0 - part) * tables[k, w, TIME] + part * tables[k + 1, w, TIME] - start_s
                ) / bin_s
                now[w, SLOWNESS] = (1.0 - part) * tables[k, w, SLOWNESS] + part * tables[k + 1, w, SLOWNESS]
            if j > 0:
                # Halfway between the ends of the piece stands for its direction.
                back_e = 0.5 * (de / distance + old_e)
                back_n = 0.5 * (dn / distance + old_n)
                for w in range(waves):
                    if now[w, ENERGY] <= 0.0 or before[w, ENERGY] <= 0.0:
                        continue
                    energy = weight[arm, j - 1] * 0.5 * (now[w, ENERGY] + before[w, ENERGY])
                    if sort[w] == P_WAVE:
                        energy *= theta[P_SHARE]
                    elif sort[w] == SURFACE_WAVE:
                        energy *= theta[SURFACE]
                    begin, end = min(before[w, TIME], now[w, TIME]), max(before[w, TIME], now[w, TIME])
                    slow = 0.5 * (before[w, SLOWNESS] + now[w, SLOWNESS])
                    _spread_box(direct[arm], begin, end, energy, slow * back_e, slow * back_n)
                    if sort[w] == S_WAVE:
                        fed += energy
                        first_s = min(first_s, begin)
                        if energy > loud:
                            loud, loud_at = energy, w
                if fed > 0.0:
                    # Scattered waves follow the strongest S of the place with the energy of all of its S waves.
                    begin = min(before[loud_at, TIME], now[loud_at, TIME])
                    end = max(before[loud_at, TIME], now[loud_at, TIME])
                    slow = 0.5 * (before[loud_at, SLOWNESS] + now[loud_at, SLOWNESS])
                    _spread_box(scattered[arm], begin, end, theta[CODA] * fed, slow * back_e, slow * back_n)
            old_e, old_n = de / distance, dn / distance
            before, now = now, before
    # Without any S all windows count.
    return start_s + bin_s * first_s if first_s < 1e300 else -1e300


@numba.njit(cache=True)
def _add_coda(theta, arms, bin_s, direct, scattered, isotropic):  # pragma: no cover - compiled
    """Let what was scattered die away, part of it slowly; a share keeps about its direction, the rest comes from anywhere."""
    for lasting in range(2):
        times, share = (SLOW_CODA_TIMES, SLOW_CODA) if lasting else (1.0, 1.0 - SLOW_CODA)
        keep = np.exp(-bin_s / (times * theta[CODA_TIME]))
        gain = share * (1.0 - keep)
        for arm in range(arms):
            weight = pull_east = pull_north = 0.0
            for b in range(isotropic.size):
                weight = keep * weight + gain * scattered[arm, WEIGHT, b]
                pull_east = keep * pull_east + gain * scattered[arm, PULL_EAST, b]
                pull_north = keep * pull_north + gain * scattered[arm, PULL_NORTH, b]
                direct[arm, WEIGHT, b] += (1.0 - ISOTROPIC_CODA) * weight
                direct[arm, PULL_EAST, b] += (1.0 - ISOTROPIC_CODA) * CODA_FOCUS * pull_east
                direct[arm, PULL_NORTH, b] += (1.0 - ISOTROPIC_CODA) * CODA_FOCUS * pull_north
                isotropic[b] += ISOTROPIC_CODA * weight


@numba.njit(cache=True)
def _windowed(bins, stride, pad, half_bins, out):  # pragma: no cover - compiled
    """Weigh bins by a window's taper: a biweight, within 4 % of a Hann window and free of cosines."""
    reach = int(np.floor(half_bins))
    total = 0.0
    for k in range(-reach, reach + 1):
        y = 1.0 - (k / half_bins) ** 2
        total += y * y
    out[:] = 0.0
    for k in range(-reach, reach + 1):
        y = 1.0 - (k / half_bins) ** 2
        g = y * y / total
        first = pad + k
        if stride == 1:
            # The compiler works on several windows at once when they lie side by side.
            part = bins[first : first + out.size]
            for t in range(out.size):
                out[t] += g * part[t]
        else:
            for t in range(out.size):
                out[t] += g * bins[first + t * stride]


@numba.njit(cache=True)
def _ratio_at(table, value, t, pull_east, pull_north, cell_s_m):  # pragma: no cover - compiled
    """Posterior ratio of window t at a slowness vector toward the source; the table's middle cell is zero slowness."""
    half = table.shape[0] // 2
    e = min(max(int(np.floor(pull_east / cell_s_m + 0.5)), -half), half) + half
    n = min(max(int(np.floor(pull_north / cell_s_m + 0.5)), -half), half) + half
    return value[table[e, n, t]]


@numba.njit(cache=True)
def _direction_term(table, value, t, arms, seen, anywhere, stray, odds, cell_s_m):  # pragma: no cover - compiled
    """Log-likelihood of one window in one band: `seen` (2, 3, T) by arm, `anywhere` (T,) from no direction."""
    one, two = seen[0, WEIGHT, t], seen[1, WEIGHT, t] if arms == 2 else 0.0
    direct = one + two
    if direct <= 0.0:
        return 0.0
    if two <= 0.02 * one or one <= 0.02 * two:
        a = 0 if one >= two else 1
        w = seen[a, WEIGHT, t]
        ratio = _ratio_at(table, value, t, seen[a, PULL_EAST, t] / w, seen[a, PULL_NORTH, t] / w, cell_s_m)
    else:
        # Two fronts in one window look like one in between: the mean slowness, weighted by the power of each. How much of each there
        # happens to be scatters from window to window.
        e1, n1 = seen[0, PULL_EAST, t] / one, seen[0, PULL_NORTH, t] / one
        e2, n2 = seen[1, PULL_EAST, t] / two, seen[1, PULL_NORTH, t] / two
        ratio = 0.0
        for k in range(3):
            g = one * (odds if k == 2 else (1.0 / odds if k == 1 else 1.0))
            u = g / (g + two)
            chance = 2.0 / 3.0 if k == 0 else 1.0 / 6.0
            ratio += chance * _ratio_at(table, value, t, u * e1 + (1.0 - u) * e2, u * n1 + (1.0 - u) * n2, cell_s_m)
    explained = (direct * ratio + anywhere[t]) / (direct + anywhere[t])
    return np.log((1.0 - stray) * explained + stray)


@numba.njit(parallel=True, cache=True)
def log_likelihoods(
    particles,
    first,
    view_first,
    table_first,
    window_s,
    overlap,
    codes,
    value,
    telling,
    cells,
    cell_s_m,
    level,
    multiple,
    start_s,
    stride,
    bin_s,
    pad,
    places,
    tables,
    sort,
    step_m,
    power_sigma,
    power_share,
):  # pragma: no cover - compiled
    """Return the log-likelihood of each row of a parameter table, shape (particles, sites, countings).

    Parameters
    ----------
    particles
        Shape (N, COLUMNS), SI units.
    first
        First window of each site in arrays over all windows, shape (sites + 1,).
    view_first
        First view (a band at a site, the one of the shortest windows first) of each site, shape (sites + 1,).
    table_first, window_s, overlap
        Per view: its first element in `codes`, window length in s, share of an independent observation that a window stands for.
    codes, value
        Posterior over prior at trial slowness vectors toward the source, slowness and direction already blurred: (cells, cells,
        windows) per view, end to end, as one-byte codes of equal steps of the logarithm, and what each code stands for.
    telling
        Whether a window tells a direction at all, per view and window, end to end: those of view v start at table_first[v] / cells^2.
    cells, cell_s_m
        Cells along each axis (odd) and their size.
    level
        Natural log of window power relative to the site's largest, plus the floor; NaN where a window does not count, shape (windows,).
    multiple
        How many times a window counts: 1, and other numbers in resampling; one or more such countings, shape (countings, windows).
    start_s, stride, bin_s, pad
        Time of each site's first window, shape (sites,); bins between windows; their length; bins before the first window.
    places
        East, north in m, cosine and sine of the turn from plane north to true north: shape (sites, 4).
    tables, sort, step_m
        Time, slowness and energy of each wave at equal distance steps, shape (D, waves, 3); S_WAVE, P_WAVE or SURFACE_WAVE of
        each; the step.
    power_sigma, power_share
        Standard deviation of the log of window power about the model; weight of the power term.
    """
    count, sites = particles.shape[0], first.size - 1
    # Each arm's power scatters on its own, so their ratio scatters by root two more.
    odds = np.exp(_REACH * np.sqrt(2.0) * power_sigma)
    countings = multiple.shape[0]
    out = np.zeros((count, sites, countings))
    for i in numba.prange(count):
        theta = particles[i]
        east = np.empty((2, PIECES + 1))
        north = np.empty((2, PIECES + 1))
        time = np.empty((2, PIECES + 1))
        weight = np.empty((2, PIECES))
        arms = place_pieces(theta, east, north, time, weight)
        for s in range(sites):
            windows = first[s + 1] - first[s]
            if windows == 0:
                continue
            bins = 2 * pad + (windows - 1) * stride + 1
            direct = np.zeros((arms, 3, bins))
            scattered = np.zeros((arms, 3, bins))
            isotropic = np.zeros(bins)
            from_s = _arrivals(
                theta, arms, east, north, time, weight, places[s], tables, sort, step_m,
                start_s[s] - pad * bin_s, bin_s, direct, scattered,
            )  # fmt: skip
            _add_coda(theta, arms, bin_s, direct, scattered, isotropic)
            seen = np.zeros((arms, 3, windows))
            anywhere = np.empty(windows)
            for v in range(view_first[s], view_first[s + 1]):
                # A place radiates while it slips: it is heard that much longer.
                half_bins = 0.5 * (window_s[v] + min(theta[RISE], LONGEST_RISE_S)) / bin_s
                for arm in range(arms):
                    for row in range(3):
                        _windowed(direct[arm, row], stride, pad, half_bins, seen[arm, row])
                _windowed(isotropic, stride, pad, half_bins, anywhere)
                peak = 0.0
                for t in range(windows):
                    heard = anywhere[t] + seen[0, WEIGHT, t]
                    if arms == 2:
                        heard += seen[1, WEIGHT, t]
                    peak = max(peak, heard)
                size = cells * cells * windows
                table = codes[table_first[v] : table_first[v] + size].reshape(cells, cells, windows)
                tells = telling[table_first[v] // (cells * cells) :]
                for t in range(windows):
                    anywhere[t] += 1e-4 * peak
                    if not tells[t]:
                        continue
                    term = _direction_term(table, value, t, arms, seen, anywhere, theta[STRAY], odds, cell_s_m)
                    for c in range(countings):
                        out[i, s, c] += overlap[v] * multiple[c, first[s] + t] * term
                if v == view_first[s]:
                    _add_power_term(
                        level[first[s] : first[s + 1]], multiple[:, first[s] : first[s + 1]], seen, anywhere, arms, peak,
                        start_s[s], stride * bin_s, from_s, overlap[v] * power_share / power_sigma**2, out[i, s],
                    )  # fmt: skip
    return out


@numba.njit(cache=True)
def _add_power_term(
    level, multiple, seen, anywhere, arms, peak, start_s, hop_s, from_s, precision, out
):  # pragma: no cover - compiled
    """Add the log-likelihood of the powers of one site, shape (countings,); its amplification is unknown, so its mean misfit is free."""
    sums = np.zeros((multiple.shape[0], 3))
    scale = 1.0 / peak if peak > 0.0 else 0.0
    for t in range(level.size):
        if np.isnan(level[t]) or start_s + t * hop_s < from_s:
            continue
        heard = anywhere[t] + seen[0, WEIGHT, t]
        if arms == 2:
            heard += seen[1, WEIGHT, t]
        # Below a share of the peak the record is coda and noise, of which this model knows little.
        misfit = level[t] - np.log(heard * scale + POWER_FLOOR)
        for c in range(multiple.shape[0]):
            sums[c, 0] += multiple[c, t]
            sums[c, 1] += multiple[c, t] * misfit
            sums[c, 2] += multiple[c, t] * misfit * misfit
    for c in range(multiple.shape[0]):
        if sums[c, 0] > 0.0:
            out[c] -= 0.5 * precision * (sums[c, 2] - sums[c, 1] ** 2 / sums[c, 0])
