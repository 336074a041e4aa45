"""Injected faults: the table must say what was noticed, and the records must come out right again.

The records are plane waves with scattered directions and slownesses; nothing is shared with the estimators.
"""

from dataclasses import replace

import numpy as np
import pytest

from rupture.records import CorrectionSettings, RecordSettings, read_sites
from rupture.records.wiring import wiring_faults

NONE = CorrectionSettings(*(False,) * 6)


def turn(e, n, angle_deg):
    """What axes that stand so much clockwise record: east axis at 90 + angle, north axis at angle."""
    a = np.radians(angle_deg)
    return np.cos(a) * e - np.sin(a) * n, np.sin(a) * e + np.cos(a) * n


@pytest.fixture
def rough(kit, tmp_path, six, event):
    """Write records of one site with a fault in the counts; return what the reader makes of them."""

    def make(spoil=lambda rows: None, seed=1, late=(0.0, 0.0), settings=None, **extra):
        world = kit.World(tmp_path, kit.rough_waves(seed), length=180.0)
        instruments = [replace(i, rate=25.0) for i in six]
        stream = world.records(instruments)
        rows = {t.stats.channel: t.data for t in stream}
        spoil(rows)
        for trace in stream:
            trace.data = rows[trace.stats.channel]
            trace.stats.starttime += late[trace.stats.channel[1] == "J"]
        data, metadata = world.write(instruments, stream)
        found = read_sites(
            [data], [metadata], event, replace(settings or RecordSettings(), before_s=60.0, after_s=110.0), **extra
        )
        return world, found.sites[0], found.verdicts[0]

    return make


def finding(verdict, kind):
    return next((c for c in verdict.corrections if c.kind == kind), None)


def error_of(world, site):
    """Largest share by which a component misses the truth."""
    t = site.times_s
    truth = np.vstack([sum(w.translation(t, 2) for w in world.waves), sum(w.rotation(t, 1) for w in world.waves)])
    scale = np.repeat([np.abs(truth[:3]).max(), np.abs(truth[3:]).max()], 3)[:, None]
    return float((np.abs(site.data - truth) * site.valid / scale).max())


@pytest.mark.parametrize("seed", range(1, 4))
def test_healthy_site(rough, seed):
    world, site, verdict = rough(seed=seed)
    assert [c.kind for c in verdict.corrections if c.noticed] == []
    assert "no fault of the installation noticed" in verdict.summary
    assert verdict.coherence > 0.8
    assert error_of(world, site) < 0.01
    assert 0 < site.azimuth_error_rad < np.radians(5.0)


@pytest.mark.parametrize("angle", [-25.0, 12.0])
@pytest.mark.parametrize("codes", [("HHE", "HHN"), ("HJE", "HJN")], ids=["translation", "rotation"])
def test_one_sensor_turned(rough, angle, codes):
    def spoil(rows):
        rows[codes[0]], rows[codes[1]] = turn(rows[codes[0]], rows[codes[1]], angle)

    world, site, verdict = rough(spoil)
    found = finding(verdict, "relative turn")
    assert found.noticed
    expected = angle if codes[0][1] == "J" else -angle
    assert found.value == pytest.approx(expected, abs=max(3.0, 2.5 * found.uncertainty))
    assert "deg" in found.note
    if found.applied:
        _, _, before = rough(spoil, settings=RecordSettings(corrections=NONE))
        assert not any(c.applied for c in before.corrections)
        assert error_of(world, site) < 0.35 * abs(np.sin(np.radians(angle))) + 0.05


@pytest.mark.parametrize("angle", [-20.0, 12.0])
def test_whole_site_turned(rough, angle):
    def spoil(rows):
        for a, b in (("HHE", "HHN"), ("HJE", "HJN")):
            rows[a], rows[b] = turn(rows[a], rows[b], angle)

    _, site, verdict = rough(spoil)
    found = finding(verdict, "azimuth")
    assert found.noticed
    assert found.value == pytest.approx(-angle, abs=5.0)
    assert not finding(verdict, "relative turn").noticed
    assert site.azimuth_error_rad > np.radians(2.0)


@pytest.mark.parametrize(
    ("codes", "name"),
    [
        (("HHE",), "acc_E reversed"), (("HHN",), "acc_N reversed"), (("HHZ",), "acc_Z reversed"),
        (("HJE",), "rot_E reversed"), (("HJN",), "rot_N reversed"), (("HJZ",), "rot_Z reversed"),
        (("HHE", "HHN"), "acc_E and acc_N reversed"), (("HJE", "HJN"), "rot_E and rot_N reversed"),
    ],
)  # fmt: skip
def test_reversed(rough, codes, name):
    def spoil(rows):
        for code in codes:
            rows[code] = -rows[code]

    world, site, verdict = rough(spoil)
    found = finding(verdict, "polarity")
    assert found.note == name
    assert found.applied
    assert error_of(world, site) < 0.02


@pytest.mark.parametrize(
    ("pair", "name"),
    [
        (("HHE", "HHN"), "acc_E and acc_N swapped"), (("HJE", "HJN"), "rot_E and rot_N swapped"),
        (("HJN", "HJZ"), "rot_N and rot_Z swapped"), (("HHE", "HHZ"), "acc_E and acc_Z swapped"),
    ],
)  # fmt: skip
def test_swapped(rough, pair, name):
    def spoil(rows):
        rows[pair[0]], rows[pair[1]] = rows[pair[1]], rows[pair[0]]

    _, _, verdict = rough(spoil)
    found = finding(verdict, "polarity")
    assert found is not None or finding(verdict, "relative turn").noticed
    if found is not None:
        assert found.note == name


@pytest.mark.parametrize("seconds", [-0.7, 0.05, 0.2, 0.5, 2.0])
def test_rotation_sensor_late(rough, seconds):
    world, site, verdict = rough(late=(0.0, seconds))
    found = finding(verdict, "time shift")
    assert found.noticed
    assert found.value == pytest.approx(seconds, abs=0.02)
    assert error_of(world, site) < 0.05


@pytest.mark.parametrize("factor", [0.1, 10.0, 1e9])
def test_wrong_sensitivity(rough, factor):
    def spoil(rows):
        for code in ("HJE", "HJN", "HJZ"):
            rows[code] = rows[code] * factor

    _, _, verdict = rough(spoil)
    for kind in ("gain of horizontal rotation", "gain of vertical rotation"):
        found = finding(verdict, kind)
        assert found.noticed
        assert found.value == pytest.approx(np.log10(factor), abs=0.25)


def test_faults_in_pairs(rough):
    def spoil(rows):
        rows["HHZ"] = -rows["HHZ"]
        rows["HJE"], rows["HJN"] = turn(rows["HJE"], rows["HJN"], 15.0)

    _, _, verdict = rough(spoil, late=(0.0, 0.5))
    noticed = {c.kind for c in verdict.corrections if c.noticed}
    assert {"polarity", "relative turn", "time shift"} <= noticed
    assert finding(verdict, "polarity").note == "acc_Z reversed"


def test_corrections_can_be_switched_off(rough):
    def spoil(rows):
        rows["HHZ"] = -rows["HHZ"]

    _, site, verdict = rough(spoil, settings=RecordSettings(corrections=replace(CorrectionSettings(), polarity=False)))
    assert finding(verdict, "polarity").noticed
    assert not finding(verdict, "polarity").applied
    assert "not corrected" in verdict.summary
    _, healthy, _ = rough()
    assert np.sign(site.data[2] @ healthy.data[2]) == -1


def test_every_wiring_fault_is_its_own_repair(rough):
    _, site, _ = rough()
    for fault in wiring_faults():
        np.testing.assert_array_equal(fault.repair(fault.repair(site)).data, site.data)


def test_site_on_the_epicentre_is_not_held_against_a_direction(kit, tmp_path, six, event):
    world = kit.World(tmp_path, kit.rough_waves(1, p_time=2.2, s_time=3.6), length=260.0)
    world.places["AAA"] = (20.0, 35.0, 0.0)
    data, metadata = world.write(six)
    (verdict,) = read_sites([data], [metadata], event).verdicts
    assert verdict.used
    assert finding(verdict, "azimuth") is None
