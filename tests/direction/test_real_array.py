"""A real array of verticals: Yellowknife, Mw 7.7 of 2012-08-14 (shared/real with its README).

Expected there: back-azimuth 305.7 deg by the geodesic, P slowness 0.0646 s/km in ak135, P at 493.0 s.
"""

from pathlib import Path

import numpy as np
import pytest

from rupture.direction import DirectionSettings, estimate_direction, intervals
from rupture.records import RecordSettings, read_event, read_sites

REAL = Path(__file__).resolve().parents[3] / "shared" / "real"
NAME = "yellowknife_2012-08-14"
P_S = 493.0
QUIET_S = (60.0, 478.0)
WINDOW_S, LOW_HZ = 5.0, 0.3

pytestmark = pytest.mark.skipif(
    not REAL.is_dir(), reason="the folder with real records does not lie beside the checkout"
)


@pytest.fixture(scope="module")
def found():
    event = read_event(REAL / f"{NAME}_event.xml")
    settings = RecordSettings(arrays=(("CN.YKR7", "YKR8", "YKR9", "YKB4", "YKB6"),), automatic_arrays=False)
    sites = read_sites([REAL / f"{NAME}.mseed"], [REAL / f"{NAME}_stations.xml"], event, settings).sites
    (site,) = [s for s in sites if s.present[3]]
    wish = DirectionSettings(
        bands_hz=((LOW_HZ, 1.2),), window_s=WINDOW_S, slowest_km_s=2.0, fastest_km_s=40.0, slowness_count=40
    )
    return estimate_direction(site, QUIET_S, wish)


def test_first_eight_seconds_of_p(found):
    answer = intervals(found)
    use = (found.time_s >= P_S + 1.5) & (found.time_s <= P_S + 8.0)
    assert (found.coherent[0, use] > 0.95).all()
    np.testing.assert_allclose(np.degrees(answer.back_azimuth_best_rad[0, use]), 305.7, atol=4.0)
    slowness = 1e3 / answer.apparent_velocity_best_m_s[0, use]
    np.testing.assert_allclose(slowness, 0.0646, rtol=0.15)
    low, high = (np.degrees(getattr(answer, f"back_azimuth_{p}_rad")[0, use]) for p in ("p05", "p95"))
    assert ((low < 305.7) & (high > 305.7)).mean() >= 0.9


def test_no_confident_direction_before_p(found):
    """To within half a window and one and a half of the longest period, which a zero-phase filter reaches ahead."""
    before = (found.time_s > QUIET_S[0]) & (found.time_s < P_S - 0.5 * WINDOW_S - 1.5 / LOW_HZ)
    assert before.sum() > 800
    sure = found.coherent[0, before]
    print(f"largest probability of a coherent wave before P: {sure.max():.2f}")
    assert sure.max() < 0.9
    peak = np.exp(found.log_ratio[..., before]).mean(axis=1).max(axis=0)
    print(f"largest peak of the density over back-azimuth: {peak.max():.1f} times even")
    assert np.median(peak) < 2
