"""Phase velocities read off amplitude ratios of surface waves, against disba's mode solver (Luu 2021; Herrmann 2013).

For a single plane wave |a_T| = 2 c |rot_Z| (Love) and |a_Z| = c |rot_T| (Rayleigh), design of six-component analysis.
"""

import disba
import numpy as np
import pytest

from rupture.earth.layers import LayeredModel
from rupture.synthetic.wavefield.mechanism import double_couple
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.tables import Motion, greens

THICKNESS = np.array([1.5, 4.0, 14.0, 15.0, 10.0])
VP = np.array([3.9, 5.4, 6.1, 6.7, 8.0])
VS = np.array([2.2, 3.1, 3.5, 3.85, 4.5])
DENSITY = np.array([2300.0, 2550.0, 2750.0, 2950.0, 3320.0])
DISTANCE = 800e3
# Lower than that, three cycles around the fundamental mode reach into S.
FREQUENCIES_HZ = [0.08, 0.12, 0.2, 0.3, 0.4]


@pytest.fixture(scope="module")
def records():
    """Six components due north of two shallow sources: strike-slip for Love waves, and for Rayleigh waves an explosion,
    which unlike strike-slip has no spectral node in the band."""
    lossless = np.full(5, np.inf)
    model = LayeredModel(
        "crust", np.concatenate([[0.0], np.cumsum(THICKNESS[:-1])]), VP, VS, DENSITY, lossless, lossless
    )
    plan = FrequencyPlan(step_s=0.5, samples=840, high_hz=0.6)
    table = greens(model, 2.0, [DISTANCE], plan)
    slip = double_couple(np.radians(25.0), np.radians(80.0), np.radians(20.0))
    return plan, *(table.records(1e17 * moment, 0.0, Motion.SENSORS)[0] for moment in (slip, np.eye(3)))


def speed(plan, translation, rotation, frequency_hz, group_km_s):
    """Ratio of the two at one frequency, in a window of three cycles (s.d.) around the fundamental mode's arrival; km/s."""
    time = np.arange(plan.samples) * plan.step_s
    window = np.exp(-0.5 * ((time - DISTANCE / 1e3 / group_km_s) / (3 / frequency_hz)) ** 2)
    window = window * np.exp(-2j * np.pi * frequency_hz * time)
    return abs(translation @ window) / abs(rotation @ window) / 1e3


def mode(wave, frequency_hz):
    """Phase and group speed of the fundamental mode, km/s."""
    arguments = (THICKNESS, VP, VS, DENSITY / 1e3)
    period = np.array([1 / frequency_hz])
    phase = disba.PhaseDispersion(*arguments)(period, mode=0, wave=wave).velocity[0]
    group = disba.GroupDispersion(*arguments)(period, mode=0, wave=wave).velocity[0]
    return phase, group


@pytest.mark.parametrize("frequency_hz", FREQUENCIES_HZ)
def test_love_phase_velocity_from_transverse_over_vertical_rotation(records, frequency_hz):
    plan, six, _ = records
    phase, group = mode("love", frequency_hz)
    measured = speed(plan, six[0], 2 * six[5], frequency_hz, group)
    assert measured == pytest.approx(phase, rel=0.01)


@pytest.mark.parametrize("frequency_hz", FREQUENCIES_HZ)
def test_rayleigh_phase_velocity_from_vertical_over_transverse_rotation(records, frequency_hz):
    plan, _, six = records
    phase, group = mode("rayleigh", frequency_hz)
    measured = speed(plan, six[2], six[3], frequency_hz, group)
    assert measured == pytest.approx(phase, rel=0.01)
