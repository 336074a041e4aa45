"""What miniSEED headers say about clock and digitiser, read without decoding the samples."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

_TIMING_BLOCKETTE = 1001
_HEAD = 80
"""Bytes of a data record that hold the fixed header and the first blockettes."""
_LONGEST_RECORD_S = 600.0
_SATURATED, _UNSURE_TIME = 0x01, 0x80
"""Bits of the data quality flags: amplifier saturation (or digitiser clipping 0x02), time tag questionable."""
_CLIPPED = 0x02
_POOR_TIMING = 60
"""Timing quality in per cent below which the clock is worth a note (common practice; its meaning is the vendor's)."""


@dataclass(frozen=True)
class HeaderNotes:
    """What the headers of one channel say.

    Attributes
    ----------
    timing_quality_percent
        Lowest timing quality (blockette 1001), None where no data record carries it.
    clipped, unsure_time, records
        Number of data records with the flag, and of all in the stretch.
    """

    timing_quality_percent: float | None
    clipped: int
    unsure_time: int
    records: int

    @property
    def words(self) -> tuple[str, ...]:
        """The notes for the quality table."""
        said = []
        if self.clipped:
            said.append(f"the digitiser marks {self.clipped} of {self.records} data records as clipped or saturated")
        if self.unsure_time:
            said.append(
                f"the digitiser marks the time of {self.unsure_time} of {self.records} data records as questionable"
            )
        if self.timing_quality_percent is not None and self.timing_quality_percent < _POOR_TIMING:
            said.append(f"timing quality falls to {self.timing_quality_percent:.0f} %")
        return tuple(said)


def read_headers(path: Path, record_length: int, big_endian: bool, start: float, end: float) -> dict[str, HeaderNotes]:
    """Read the fixed headers of a miniSEED 2 file whose data records have one length.

    Parameters
    ----------
    path
        File.
    record_length
        Bytes per data record.
    big_endian
        Byte order of the headers.
    start, end
        Stretch of interest, POSIX time in s.

    Returns
    -------
    dict
        By NET.STA.LOC.CHA. Empty when the file does not hold such records.
    """
    count = path.stat().st_size // record_length
    if count == 0:
        return {}
    raw = np.memmap(path, np.uint8, "r", shape=(count, record_length))
    head = np.array(raw[:, :_HEAD])
    del raw
    year, day = _pairs(head, np.full(count, 20), big_endian), _pairs(head, np.full(count, 22), big_endian)
    if not ((year > 1900) & (year < 2500) & (day > 0) & (day < 367)).all():
        return {}
    days = (year - 1970) * 365 + (year - 1969) // 4 - (year - 1901) // 100 + (year - 1601) // 400 + day - 1
    time = days * 86400.0 + head[:, 24] * 3600.0 + head[:, 25] * 60.0 + head[:, 26]
    # A data record reaches past its start: those that begin a while before the stretch count, too.
    inside = (time >= start - _LONGEST_RECORD_S) & (time <= end)
    quality = _timing(head, big_endian)
    keys, which = np.unique(head[:, 8:20], axis=0, return_inverse=True)
    found = {}
    for index, key in enumerate(keys):
        mine = inside & (which.ravel() == index)
        if not mine.any():
            continue
        station, location, channel, network = (
            bytes(key[a:b]).decode("ascii", "replace").strip() for a, b in ((0, 5), (5, 7), (7, 10), (10, 12))
        )
        known = quality[mine & (quality >= 0)]
        flags = head[mine, 38]
        found[f"{network}.{station}.{location}.{channel}"] = HeaderNotes(
            float(known.min()) if known.size else None,
            int(np.count_nonzero(flags & (_SATURATED | _CLIPPED))),
            int(np.count_nonzero(flags & _UNSURE_TIME)),
            int(mine.sum()),
        )
    return found


def _pairs(head: NDArray[np.uint8], at: NDArray[np.int64], big_endian: bool) -> NDArray[np.int64]:
    """Read a 16-bit number of each header at a place of its own."""
    rows = np.arange(len(head))
    first, second = head[rows, at].astype(np.int64), head[rows, at + 1].astype(np.int64)
    return first * 256 + second if big_endian else second * 256 + first


def _timing(head: NDArray[np.uint8], big_endian: bool) -> NDArray[np.int64]:
    """Return the timing quality of each data record, -1 where it carries none; two blockettes are followed."""
    rows = np.arange(len(head))
    quality = np.full(len(head), -1, np.int64)
    place = _pairs(head, np.full(len(head), 46), big_endian)
    for _ in range(2):
        here = (place >= 48) & (place <= _HEAD - 8)
        at = np.where(here, place, 48)
        kind = _pairs(head, at, big_endian)
        timed = here & (kind == _TIMING_BLOCKETTE)
        quality[timed] = head[rows, at + 4][timed]
        place = np.where(here, _pairs(head, at + 2, big_endian), 0)
    return quality
