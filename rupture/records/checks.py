"""Find what is wrong with raw samples: dead, flat, clipped, spiky or missing stretches."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.ndimage import median_filter, uniform_filter1d

from rupture.records.read import RawChannel, Segment
from rupture.records.report import UnusableError
from rupture.records.settings import RecordSettings

Array = NDArray[np.float64]
Span = tuple[float, float]

_CLIP_RUN = 3
"""Equal samples in a row at an extreme that count as clipping."""
_CLIP_STEPS = 4
"""A natural crest as flat as that leaves by about one count; a clipped one by at least this many."""
_CLIP_COUNT, _CLIP_SPAN = 4, 1000.0
"""So many samples at exactly the extreme of a record that spans so many counts are no chance."""
_CLIP_MARGIN = 1e-3
"""A clipped sensor may rest this share of its range inside the extreme."""
_CLIP_TOGETHER_S = 5.0
"""Clipped stretches closer than this are one: the sensor has not recovered in between."""
_SPIKE_RATIO = 15.0
"""A sample off its neighbours' median by this many typical second differences is not ground motion (own choice)."""


_BLOCK_S, _STEP_RATIO, _DRIFT_RATIO = 5.0, 10.0, 30.0
"""Blocks for the resting level; a step or drift worth a note, over the motion beside it (own choice)."""


@dataclass(frozen=True)
class Checked:
    """Samples that are fit for filtering and the stretches that are not to be believed.

    Attributes
    ----------
    pieces
        Segments with spikes and short gaps bridged.
    masked
        Stretches (start, end) in s after the origin time, without guard.
    clipped_share
        Share of the samples that are clipped.
    notes
        What was masked, in words.
    gaps, gap_s
        Number and total length of gaps between the segments as read.
    """

    pieces: tuple[Segment, ...]
    masked: tuple[Span, ...]
    clipped_share: float
    notes: tuple[str, ...]
    gaps: int
    gap_s: float


def check_channel(raw: RawChannel, settings: RecordSettings) -> Checked:
    """Look through the raw samples of one channel.

    Parameters
    ----------
    raw
        Its segments.
    settings
        Limits.

    Raises
    ------
    UnusableError
        When the channel is dead, holds nothing, or is clipped beyond the limit.
    """
    if not raw.segments:
        raise UnusableError("the record holds no sample that is a number")
    values = np.concatenate([s.samples for s in raw.segments])
    low, high = float(values.min()), float(values.max())
    if low == high:
        raise UnusableError(f"dead channel: every sample is {low:g}")
    notes = list(raw.notes)
    masked: list[Span] = []
    mended: list[Segment] = []
    clipped = spikes = 0
    flat_s = 0.0
    quantum = _quantum(raw.segments)
    levels = _clip_levels(raw.segments, low, high, quantum)
    for segment in raw.segments:
        flat = _equal_runs(segment.samples, max(2, round(settings.flat_s * segment.rate_hz)))
        clips = [r for r in _clipped_runs(segment.samples, levels, _CLIP_MARGIN * (high - low)) if r not in flat]
        clipped += sum(b - a for a, b in clips)
        flat_s += sum(b - a for a, b in flat) / segment.rate_hz
        masked += [_span(segment, a, b) for a, b in flat]
        masked += _together([_span(segment, a, b) for a, b in clips], _CLIP_TOGETHER_S)
        samples, where = _without_spikes(segment.samples, round(segment.rate_hz), quantum, clips)
        spikes += where.size
        masked += [_span(segment, int(i), int(i) + 1) for i in where]
        mended.append(Segment(segment.start_s, segment.rate_hz, samples))
    share = clipped / values.size
    if share > settings.clip_share:
        raise UnusableError(
            f"clipped: {100 * share:.0f} % of the samples stand at the limit of {max(abs(low), abs(high)):g}"
        )
    if flat_s > 0.9 * values.size / raw.segments[0].rate_hz:
        raise UnusableError(f"flat channel: constant over {flat_s:.0f} s of the record")
    if clipped:
        notes.append(f"{clipped} clipped samples masked with their surroundings")
    if flat_s:
        notes.append(f"{flat_s:.1f} s without any change of the signal masked")
    if spikes:
        notes.append(f"{spikes} spikes masked")
    notes += baseline_notes(raw.segments)
    holes = [(a.end_s, b.start_s) for a, b in itertools.pairwise(mended)]
    gap_s = sum(b - a - 1.0 / s.rate_hz for (a, b), s in zip(holes, mended, strict=False))
    if holes:
        notes.append(f"{len(holes)} gaps of {gap_s:.2f} s in all masked")
    pieces, bridged = _bridge(mended, settings.bridge_s)
    return Checked(tuple(pieces), tuple(sorted(masked + bridged)), share, tuple(notes), len(holes), gap_s)


def baseline_notes(segments: Sequence[Segment]) -> list[str]:
    """Return notes on steps and drift of the resting level; the pre-filter takes both away, the cause remains.

    Medians of blocks of 5 s are compared: a step lasts, and is large against the motion on both sides of it.
    """
    said = []
    for segment in segments:
        block = round(_BLOCK_S * segment.rate_hz)
        count = segment.samples.size // block
        if count < 8:
            continue
        blocks = segment.samples[: count * block].reshape(count, block)
        level = np.median(blocks, axis=1)
        motion = np.median(np.abs(blocks - level[:, None]), axis=1)
        for k in range(3, count - 3):
            before, after = np.median(level[k - 3 : k]), np.median(level[k + 1 : k + 4])
            around = max(np.ptp(level[k - 3 : k]), np.ptp(level[k + 1 : k + 4]), motion[k - 3 : k + 4].max())
            jump = abs(after - before)
            if jump > _STEP_RATIO * around and jump > 0:
                time = segment.start_s + k * block / segment.rate_hz
                said.append(
                    f"the resting level steps by {after - before:.3g} counts about {time:.0f} s after the origin"
                )
                break
        quiet = float(np.median(motion))
        slope = np.polyfit(np.arange(count), level, 1)[0]
        straight = np.abs(level - np.polyval(np.polyfit(np.arange(count), level, 1), np.arange(count)))
        if abs(slope) * count > _DRIFT_RATIO * max(quiet, float(np.median(straight))) and not said:
            said.append(f"the resting level drifts by {slope * count:.3g} counts over {count * _BLOCK_S:.0f} s")
    return said


def _span(segment: Segment, first: int, end: int) -> Span:
    return segment.start_s + first / segment.rate_hz, segment.start_s + (end - 1) / segment.rate_hz


def _quantum(segments: Sequence[Segment]) -> float:
    """Smallest step between neighbouring samples: one count, or next to nothing for floating-point records."""
    steps = np.concatenate([np.abs(np.diff(s.samples)) for s in segments])
    steps = steps[steps > 0]
    return float(steps.min()) if steps.size else 0.0


def _equal_runs(samples: Array, shortest: int) -> list[tuple[int, int]]:
    edges = np.flatnonzero(np.concatenate([[True], np.diff(samples) != 0, [True]]))
    long = np.flatnonzero(np.diff(edges) >= shortest)
    return [(int(edges[i]), int(edges[i + 1])) for i in long]


def _clip_levels(segments: Sequence[Segment], low: float, high: float, quantum: float) -> list[float]:
    """Return the extremes at which the record is cut off: entered by a jump, or reached too often."""
    levels = []
    for level in (low, high):
        count = sum(int(np.count_nonzero(s.samples == level)) for s in segments)
        often = count >= _CLIP_COUNT and high - low >= _CLIP_SPAN * quantum
        if often or any(_jumps_to(s.samples, level, quantum) for s in segments):
            levels.append(level)
    return levels


def _jumps_to(samples: Array, level: float, quantum: float) -> bool:
    for first, end in _equal_runs(samples, _CLIP_RUN):
        if samples[first] != level:
            continue
        before = abs(level - samples[first - 1]) if first else 0.0
        after = abs(level - samples[end]) if end < samples.size else 0.0
        if max(before, after) >= _CLIP_STEPS * quantum:
            return True
    return False


def _clipped_runs(samples: Array, levels: Sequence[float], margin: float) -> list[tuple[int, int]]:
    """Return stretches at a clip level, or resting within a small margin of it."""
    at = np.zeros(samples.size, bool)
    for level in levels:
        at |= samples == level
    for first, end in _equal_runs(samples, _CLIP_RUN) if levels else []:
        at[first:end] |= min(abs(samples[first] - level) for level in levels) <= margin
    edges = np.flatnonzero(np.diff(np.concatenate([[False], at, [False]]).astype(np.int8)))
    return [(int(a), int(b)) for a, b in edges.reshape(-1, 2)]


def _without_spikes(
    samples: Array, second: int, quantum: float, clips: Sequence[tuple[int, int]]
) -> tuple[Array, NDArray[np.intp]]:
    """Replace spikes of one or two samples by the median of their neighbours; return also where they were."""
    if samples.size < 32:
        return samples, np.empty(0, np.intp)
    middle = median_filter(samples, size=5, mode="nearest")
    bend = np.abs(np.diff(samples, 2, prepend=samples[:1], append=samples[-1:]))
    # A window's upper quartile, not its mean, so that the spike itself does not raise the measure it is held against.
    span = max(2 * second + 1, 31)
    typical = _running_quartile(bend, span)
    where = np.abs(samples - middle) > _SPIKE_RATIO * typical + 2.0 * quantum
    for first, end in clips:
        where[max(first - 2, 0) : end + 2] = False
    if not where.any():
        return samples, np.empty(0, np.intp)
    mended = samples.copy()
    mended[where] = middle[where]
    return mended, np.flatnonzero(where)


def _running_quartile(values: Array, span: int) -> Array:
    """Upper quartile in blocks of half a span, the larger of neighbours taken, smoothed to samples."""
    block = max(span // 2, 8)
    count = -(-values.size // block)
    padded = np.pad(values, (0, count * block - values.size), mode="edge").reshape(count, block)
    quartile = np.percentile(padded, 75, axis=1)
    wide = np.maximum(quartile, np.maximum(np.roll(quartile, 1), np.roll(quartile, -1)))
    return np.repeat(uniform_filter1d(wide, 3, mode="nearest"), block)[: values.size]


def _together(spans: list[Span], reach_s: float) -> list[Span]:
    merged: list[Span] = []
    for start, end in sorted(spans):
        if merged and start - merged[-1][1] <= reach_s:
            merged[-1] = (merged[-1][0], max(end, merged[-1][1]))
        else:
            merged.append((start, end))
    return merged


def _bridge(segments: Sequence[Segment], longest_s: float) -> tuple[list[Segment], list[Span]]:
    """Draw a line over short gaps so that filters see one piece; the gap is handed back to be masked."""
    pieces: list[Segment] = []
    bridged: list[Span] = []
    for segment in segments:
        last = pieces[-1] if pieces else None
        steps = (segment.start_s - last.end_s) * segment.rate_hz if last else 0.0
        if last is None or steps / segment.rate_hz > longest_s or abs(steps - round(steps)) > 0.05 or round(steps) < 1:
            pieces.append(segment)
            continue
        line = np.linspace(last.samples[-1], segment.samples[0], round(steps) + 1)[1:-1]
        bridged.append((last.end_s, segment.start_s))
        pieces[-1] = Segment(last.start_s, last.rate_hz, np.concatenate([last.samples, line, segment.samples]))
    return pieces, bridged


def mask_grid(
    pieces: Sequence[tuple[float, float, float]], masked: Sequence[Span], guard_s: float, times_s: Array
) -> NDArray[np.bool_]:
    """Return which samples of a time grid can be believed.

    Parameters
    ----------
    pieces
        (start, end, edge) of each filtered piece in s: the edge is tapered and does not count.
    masked
        Stretches not to be believed, in s.
    guard_s
        Added on both sides of those.
    times_s
        Grid, shape (samples,).

    Returns
    -------
    ndarray
        Bool, shape (samples,).
    """
    valid = np.zeros(times_s.size, bool)
    for start, end, edge in pieces:
        valid[np.searchsorted(times_s, start + edge) : np.searchsorted(times_s, end - edge, side="right")] = True
    for start, end in masked:
        valid[np.searchsorted(times_s, start - guard_s) : np.searchsorted(times_s, end + guard_s, side="right")] = False
    return valid
