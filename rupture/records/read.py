"""Find record files and metadata, and read them with sentences instead of tracebacks."""

from __future__ import annotations

import warnings
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rupture.errors import DataError, InputError, RecordWarning
from rupture.event import Event
from rupture.records.headers import HeaderNotes, read_headers

_NOT_RECORDS = {".xml", ".json", ".toml", ".txt", ".md", ".csv", ".pdf", ".png", ".html", ".nc", ".gz", ".zip", ".py"}


@dataclass(frozen=True)
class Segment:
    """Evenly sampled samples of one channel without a hole.

    Attributes
    ----------
    start_s
        Time of the first sample, s after the origin time.
    rate_hz
        Sampling rate.
    samples
        Raw counts, shape (samples,), finite.
    """

    start_s: float
    rate_hz: float
    samples: NDArray[np.float64]

    @property
    def end_s(self) -> float:
        """Time of the last sample."""
        return self.start_s + (self.samples.size - 1) / self.rate_hz


@dataclass(frozen=True)
class RawChannel:
    """All segments of one channel in order of time, with what had to be left out on the way.

    Attributes
    ----------
    segments
        Without overlap, sorted.
    notes
        What was masked, in words.
    timing_quality_percent
        Lowest timing quality of the miniSEED records, None where not given.
    """

    channel: str
    segments: tuple[Segment, ...]
    notes: tuple[str, ...] = ()
    timing_quality_percent: float | None = None


def record_files(patterns: Iterable[str | Path]) -> list[tuple[Path, bool]]:
    """Return the files that patterns stand for, and whether each was named by the user (not found in a folder).

    Raises
    ------
    InputError
        When a pattern matches nothing.
    """
    files: dict[Path, bool] = {}
    for pattern in patterns:
        path = Path(pattern)
        if path.is_dir():
            inside = sorted(p for p in path.rglob("*") if p.is_file() and p.suffix.lower() not in _NOT_RECORDS)
            if not inside:
                raise InputError(f"{path}: the folder holds no record files")
            for file in inside:
                files.setdefault(file, False)
        elif path.is_file():
            files[path] = True
        else:
            found = [p for p in _matches(path) if p.is_file()]
            if not found:
                raise InputError(f"{pattern}: no such record file, and nothing matches it as a pattern")
            files |= dict.fromkeys(found, True)
    if not files:
        raise InputError("no record files were given")
    return sorted(files.items())


def _matches(pattern: Path) -> list[Path]:
    """Return what a pattern stands for; `**` reaches into folders."""
    fixed = pattern.parent
    while any(sign in str(fixed) for sign in "*?["):
        fixed = fixed.parent
    relative = pattern.relative_to(fixed)
    return sorted(fixed.glob(str(relative))) if str(relative) != "." else []


def read_inventories(paths: Sequence[str | Path]) -> Any:
    """Read station metadata (StationXML, or what else ObsPy reads) into one inventory.

    Raises
    ------
    InputError
        When there is none, or a file cannot be read.
    """
    import obspy

    whole = None
    for path in (Path(p) for p in paths):
        if not path.is_file():
            raise InputError(f"{path}: no such station metadata file")
        try:
            with warnings.catch_warnings():
                # Comments of ObsPy on versions and odd fields; what matters is checked channel by channel.
                warnings.simplefilter("ignore")
                found = obspy.read_inventory(str(path))
        except Exception as error:
            raise InputError(f"{path}: ObsPy cannot read this as station metadata (StationXML): {error}") from error
        whole = found if whole is None else whole + found
    if whole is None:
        raise InputError("no station metadata were given; name a StationXML file")
    return whole


def read_channels(
    files: Sequence[tuple[Path, bool]], event: Event, before_s: float, after_s: float
) -> dict[str, RawChannel]:
    """Read what the files hold between two times.

    Parameters
    ----------
    files
        From `record_files`.
    event
        Its origin time is the zero of all times.
    before_s, after_s
        Stretch to read around the origin time, in s.

    Returns
    -------
    dict
        Channels by NET.STA.LOC.CHA, sorted.

    Raises
    ------
    InputError
        When a file that was named cannot be read, or no file can.
    DataError
        When the files can be read but hold nothing of the wanted time.
    """
    import obspy

    origin = obspy.UTCDateTime(event.origin_time)
    traces: dict[str, list[Any]] = {}
    notes: dict[str, list[str]] = {}
    timing: dict[str, float] = {}
    spans, unread = [], []
    for path, named in files:
        try:
            stream, cut = _read_file(path, origin - before_s, origin + after_s)
        except InputError as error:
            if named:
                raise
            unread.append(str(error))
            continue
        for name, said in _headers(path, stream, origin - before_s, origin + after_s).items():
            notes.setdefault(name, []).extend(said.words)
            if said.timing_quality_percent is not None:
                timing[name] = min(timing.get(name, 100.0), said.timing_quality_percent)
        for trace in stream:
            spans.append((trace.stats.starttime, trace.stats.endtime))
            outside = trace.stats.endtime < origin - before_s or trace.stats.starttime > origin + after_s
            if outside or not len(trace.data):
                continue
            traces.setdefault(trace.id, []).append(trace)
            if cut:
                notes.setdefault(trace.id, []).append(f"{path.name} is cut off in its last data record")
    if unread:
        listed = "; ".join(unread[:3]) + (f"; and {len(unread) - 3} more" if len(unread) > 3 else "")
        if not spans:
            raise InputError(f"no file in the folder could be read as records: {listed}")
        warnings.warn(f"{len(unread)} files of the folder were left out: {listed}", RecordWarning, 3)
    if not traces:
        first, last = min(s for s, _ in spans), max(e for _, e in spans)
        raise DataError(
            f"the records cover {first} to {last}, but the event is of {origin}: no sample lies between {before_s:.0f} s"
            f" before and {after_s:.0f} s after it"
        )
    return {
        name: _channel(name, traces[name], origin, notes.get(name, []), timing.get(name)) for name in sorted(traces)
    }


def _headers(path: Path, stream: Any, start: Any, end: Any) -> dict[str, HeaderNotes]:
    kinds = {(t.stats.mseed.record_length, t.stats.mseed.byteorder) for t in stream if "mseed" in t.stats}
    if len(kinds) != 1:
        return {}
    length, order = kinds.pop()
    return read_headers(path, length, order == ">", start.timestamp, end.timestamp)


def _read_file(path: Path, start: Any, end: Any) -> tuple[Any, bool]:
    import obspy

    with warnings.catch_warnings(record=True) as said:
        warnings.simplefilter("always")
        try:
            stream = obspy.read(str(path), starttime=start, endtime=end)
            if not any(trace.stats.npts for trace in stream):
                stream = obspy.read(str(path), headonly=True)
        except Exception as error:
            raise InputError(_why_unread(path, error)) from error
    cut = any("incomplete" in str(w.message).lower() or "truncated" in str(w.message).lower() for w in said)
    return stream, cut or _odd_length(path, stream)


def _odd_length(path: Path, stream: Any) -> bool:
    """Whether a miniSEED file ends in the middle of a data record, which ObsPy passes over in silence."""
    lengths = {trace.stats.mseed.record_length for trace in stream if "mseed" in trace.stats}
    return len(lengths) == 1 and path.stat().st_size % lengths.pop() != 0


def _why_unread(path: Path, error: Exception) -> str:
    head = path.read_bytes()[:512]
    if not head:
        return f"{path}: the file is empty"
    if head[:3] == b"MS\x03":
        return f"{path}: this is miniSEED version 3, but the installed ObsPy reads version 2; convert the file"
    looks_seed = head[:6].strip(b" 0123456789") == b"" and head[6:7] in (b"D", b"R", b"Q", b"M")
    if looks_seed:
        return f"{path}: the miniSEED data are damaged or cut off before the first whole data record ({error})"
    if head.lstrip()[:1] == b"<":
        return f"{path}: this is an XML file, not records; station metadata belong to --inventory, events to --event"
    if b"\0" not in head:
        return f"{path}: this is a text file, not miniSEED or another record format that ObsPy reads"
    return f"{path}: not a record format that ObsPy reads ({error})"


def _channel(name: str, traces: list[Any], origin: Any, notes: list[str], timing: float | None) -> RawChannel:
    pieces: list[Segment] = []
    bad = 0
    for trace in traces:
        found, lost = _split(trace, origin)
        pieces += found
        bad += lost
    if bad:
        notes = [*notes, f"{bad} samples that are not numbers masked"]
    rates = {round(p.rate_hz, 6) for p in pieces}
    if len(rates) > 1:
        # One channel that changes its rate: the longer part is kept, mixing would need two responses.
        length = {
            rate: sum(p.samples.size / p.rate_hz for p in pieces if round(p.rate_hz, 6) == rate) for rate in rates
        }
        best = max(length, key=lambda rate: length[rate])
        notes = [*notes, f"the sampling rate changes; only the part at {best:g} Hz is used"]
        pieces = [p for p in pieces if round(p.rate_hz, 6) == best]
    joined, conflict = _join(pieces)
    if conflict:
        notes = [*notes, f"{conflict:.2f} s of overlapping records that contradict each other masked"]
    return RawChannel(name, tuple(joined), tuple(dict.fromkeys(notes)), timing)


def _split(trace: Any, origin: Any) -> tuple[list[Segment], int]:
    """Cut a trace at masked samples, NaN and infinity."""
    rate, start = float(trace.stats.sampling_rate), float(trace.stats.starttime - origin)
    values = np.ma.getdata(trace.data).astype(float)
    hidden = np.ma.getmaskarray(trace.data)
    good = np.isfinite(values) & ~hidden
    edges = np.flatnonzero(np.diff(np.concatenate([[False], good, [False]]).astype(np.int8)))
    pieces = [Segment(start + a / rate, rate, values[a:b]) for a, b in edges.reshape(-1, 2)]
    return pieces, int(np.count_nonzero(~good & ~hidden))


def _join(pieces: list[Segment]) -> tuple[list[Segment], float]:
    """Put segments in order, join what is contiguous, drop overlaps that agree, mask those that do not."""
    joined: list[Segment] = []
    conflict = 0.0
    for piece in sorted(pieces, key=lambda p: (p.start_s, -p.samples.size)):
        if not joined:
            joined.append(piece)
            continue
        last, rate = joined[-1], piece.rate_hz
        offset = (piece.start_s - last.start_s) * rate
        index = round(offset)
        on_grid = abs(offset - index) < 0.05
        shared = last.samples.size - index
        if shared < 0 or (shared == 0 and not on_grid):
            joined.append(piece)
            continue
        overlap = min(shared, piece.samples.size)
        same = on_grid and np.array_equal(last.samples[index : index + overlap], piece.samples[:overlap])
        if same:
            if piece.samples.size > overlap:
                joined[-1] = Segment(last.start_s, rate, np.concatenate([last.samples, piece.samples[overlap:]]))
            continue
        conflict += overlap / rate
        first = [Segment(last.start_s, rate, last.samples[:index])] if index > 0 else []
        rest = last.samples[index + overlap :] if shared > overlap else piece.samples[overlap:]
        base = last.start_s + (index + overlap) / rate if shared > overlap else piece.start_s + overlap / rate
        joined[-1:] = [*first, *([Segment(base, rate, rest)] if rest.size else [])]
    return joined, conflict
