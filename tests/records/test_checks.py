import numpy as np
import pytest

from rupture.records.checks import check_channel, mask_grid
from rupture.records.read import RawChannel, Segment
from rupture.records.report import UnusableError
from rupture.records.settings import RecordSettings

RATE = 50.0
SETTINGS = RecordSettings()


def wave(seconds=120.0, amplitude=5e4, seed=3):
    """A band-limited tremor in whole counts with an impulsive onset at 40 s."""
    t = np.arange(round(seconds * RATE)) / RATE
    rng = np.random.default_rng(seed)
    shape = np.where(t > 40.0, np.exp(-(t - 40.0) / 20.0), 0.0)
    tone = sum(
        np.sin(2 * np.pi * f * t + p) for f, p in zip(rng.uniform(0.2, 8.0, 20), rng.uniform(0, 6, 20), strict=True)
    )
    return np.round(amplitude * shape * tone / 4.0 + 20.0 * rng.standard_normal(t.size))


def raw(*parts):
    return RawChannel("XX.AAA..HHZ", tuple(Segment(start, RATE, np.asarray(x, float)) for start, x in parts))


def test_good_record_passes_untouched():
    x = wave()
    found = check_channel(raw((0.0, x)), SETTINGS)
    assert found.masked == ()
    assert found.notes == ()
    np.testing.assert_array_equal(found.pieces[0].samples, x)


@pytest.mark.parametrize("seed", range(6))
def test_onsets_and_crests_are_no_faults(seed):
    """Natural records: impulsive onsets, small counts, slow crests that stay on one count for several samples."""
    for amplitude in (3.0, 100.0, 1e6):
        found = check_channel(raw((0.0, wave(amplitude=amplitude, seed=seed))), SETTINGS)
        assert found.masked == ()
    slow = np.round(40.0 * np.sin(2 * np.pi * 0.3 * np.arange(6000) / RATE))
    assert check_channel(raw((0.0, slow)), SETTINGS).clipped_share == 0.0


def test_dead_channel():
    with pytest.raises(UnusableError, match="dead channel: every sample is 17"):
        check_channel(raw((0.0, np.full(5000, 17.0))), SETTINGS)


def test_flat_channel():
    x = np.full(6000, 17.0)
    x[:100] = wave()[:100]
    with pytest.raises(UnusableError, match="flat channel"):
        check_channel(raw((0.0, x)), SETTINGS)


def test_flat_stretch_is_masked():
    x = wave()
    x[3000:3500] = x[3000]
    found = check_channel(raw((0.0, x)), SETTINGS)
    (a, b), *rest = found.masked
    assert not rest
    assert (a, b) == pytest.approx((60.0, 70.0), abs=0.05)
    assert "without any change" in found.notes[0]


@pytest.mark.parametrize("limit", [0.3, 0.6, 0.8])
def test_clipped_stretch_is_masked(limit):
    x = wave()
    top = round(limit * np.abs(x).max())
    found = check_channel(raw((0.0, np.clip(x, -top, top))), SETTINGS)
    assert found.clipped_share > 0
    lost = np.flatnonzero(np.abs(x) > top) / RATE
    covered = mask_grid([(0.0, 120.0, 0.0)], found.masked, 1.0, lost)
    assert covered.mean() < 0.02  # nearly all of what the limit took away is masked


def test_clipped_channel_is_left_out():
    x = np.clip(wave() - 10.0, -30.0, 30.0) * 1000
    with pytest.raises(UnusableError, match=r"clipped: .* of the samples stand at the limit of 30000"):
        check_channel(raw((0.0, x)), RecordSettings(clip_share=0.1))


@pytest.mark.parametrize("width", [1, 2])
def test_spike_is_bridged_and_masked(width):
    x = wave()
    x[1000 : 1000 + width] += 3e4
    found = check_channel(raw((0.0, x)), SETTINGS)
    assert f"{width} spikes masked" in found.notes
    assert np.abs(found.pieces[0].samples[1000 : 1000 + width]).max() < 200
    assert all(19.9 < a < 20.2 for a, _ in found.masked)


def test_short_gap_is_bridged_and_masked_long_gap_splits():
    x = wave()
    short = check_channel(raw((0.0, x[:3000]), (61.0, x[3050:])), SETTINGS)
    assert len(short.pieces) == 1
    assert short.pieces[0].samples.size == x.size
    assert short.masked == ((59.98, 61.0),)
    assert short.gaps == 1
    assert short.gap_s == pytest.approx(1.0)
    long = check_channel(raw((0.0, x[:2000]), (60.0, x[3000:])), SETTINGS)
    assert len(long.pieces) == 2
    assert "1 gaps of 20.00 s" in long.notes[0]


def test_mask_grid_guards_what_is_masked_and_what_is_tapered():
    t = np.arange(0.0, 20.0, 0.5)
    valid = mask_grid([(0.0, 19.5, 2.0)], [(10.0, 11.0)], 1.0, t)
    np.testing.assert_array_equal(t[valid], np.r_[2.0:9.0:0.5, 12.5:18.0:0.5])


def test_step_and_drift_of_the_resting_level_are_told():
    x = wave()
    assert check_channel(raw((0.0, x)), SETTINGS).notes == ()
    stepped = x.copy()
    stepped[1000:] += 5e3
    (note,) = check_channel(raw((0.0, stepped)), SETTINGS).notes
    assert note.startswith("the resting level steps by")
    assert "about 20 s" in note or "about 15 s" in note
    (note,) = check_channel(
        raw((0.0, 20 * np.random.default_rng(1).standard_normal(6000).round() + np.arange(6000))), SETTINGS
    ).notes
    assert note.startswith("the resting level drifts by 6e+03 counts") or "drifts by 5." in note
