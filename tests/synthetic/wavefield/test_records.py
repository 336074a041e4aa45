"""The engine: sums over sub-events, time shifts, interpolation over distance, bad input."""

import numpy as np
import pytest

import rupture.synthetic.wavefield.integration as integration
import rupture.synthetic.wavefield.pairs as module
from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.geodesy import destination, distance_azimuth
from rupture.synthetic.engine import Receivers, Sampling, SubEvents
from rupture.synthetic.wavefield.mechanism import double_couple
from rupture.synthetic.wavefield.records import raised_cosine_spectrum, stored_wavefield, wavefield_records
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.store import GreensStore
from rupture.synthetic.wavefield.tables import Motion, greens

CRUST = LayeredModel(
    "crust", [0.0, 3.0, 15.0, 33.0], [5.0, 6.0, 6.6, 8.0], [2.8, 3.46, 3.8, 4.5], [2500.0, 2700.0, 2900.0, 3300.0],
    [200.0, 500.0, 600.0, 800.0], [100.0, 250.0, 300.0, 400.0],
)  # fmt: skip
SITES = Receivers(np.array([10.4, 9.8, 179.99]), np.array([45.1, 45.6, -10.0]))
SAMPLING = Sampling(start_s=0.0, step_s=0.25, samples=240, high_hz=0.8)


def line(n, depth_km=10.0, longitude=10.0, latitude=45.2, seed=3):
    rng = np.random.default_rng(seed)
    lon, lat = destination(longitude, latitude, np.radians(60.0), np.linspace(0, 40e3, n))
    same = np.full(n, 1.0)
    return SubEvents(
        lon, lat, same * depth_km, np.linspace(0, 15.0, n), rng.uniform(0.5, 2, n) * 1e16, rng.uniform(1.5, 3.0, n),
        same * np.radians(60.0), same * np.radians(85.0), same * np.radians(10.0),
    )  # fmt: skip


def near(sites):
    return Receivers(sites.longitude_deg[:2], sites.latitude_deg[:2])


def test_one_sub_event_is_the_table_with_its_own_azimuths_and_delay():
    event = line(1)
    event = SubEvents(**{**event.__dict__, "time_s": np.array([3.0])})
    records = wavefield_records(event, near(SITES), CRUST, SAMPLING)
    distance, azimuth, back = distance_azimuth(event.longitude_deg, event.latitude_deg, *near(SITES).__dict__.values())
    plan = FrequencyPlan(SAMPLING.step_s, SAMPLING.samples, SAMPLING.high_hz)
    table = greens(CRUST, 10.0, distance, plan)
    moment = event.moment_nm[0] * double_couple(event.strike_rad, event.dip_rad, event.rake_rad)[0]
    delayed = raised_cosine_spectrum(event.rise_time_s, plan.omega)[0] * np.exp(-3j * plan.omega)
    expected = table.records(moment, azimuth, Motion.SENSORS, back, delayed)
    assert np.allclose(records, expected, atol=2e-4 * np.abs(expected).max(axis=-1, keepdims=True))


def test_raised_cosine_spectrum_is_the_integral_over_the_slip():
    omega = FrequencyPlan(0.25, 240, 1.5).omega
    rise = np.array([2.0, 0.7])
    for row, duration in zip(raised_cosine_spectrum(rise, omega), rise, strict=True):
        t = (np.arange(20000) + 0.5) * duration / 20000
        rate = (1 - np.cos(2 * np.pi * t / duration)) / duration
        assert np.allclose(row, (rate * np.exp(-1j * omega[:, None] * t)).sum(axis=1) * duration / 20000, atol=1e-7)
    assert np.allclose(raised_cosine_spectrum(np.array([0.0]), omega), 1.0)


@pytest.mark.parametrize("start_s", [-5.0, 12.0, 12.1])
def test_a_later_or_earlier_window_shows_the_same_ground_motion(start_s):
    events = line(3)
    whole = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    other = wavefield_records(events, near(SITES), CRUST, Sampling(start_s, 0.25, 160, 0.8))
    shift = start_s / 0.25
    if shift == int(shift):
        first = max(0, int(shift))
        reference = whole[..., first : first + 120]
        again = other[..., first - int(shift) :][..., :120]
        assert np.abs(reference - again).max() < 1e-3 * np.abs(whole).max()
    else:
        # Band-limited: a shift by part of a sample is a phase ramp; compare through a fine time axis.
        fine = wavefield_records(events, near(SITES), CRUST, Sampling(0.0, 0.05, 1200, 0.8))
        at = np.round((start_s + 0.25 * np.arange(160)) / 0.05).astype(int)
        assert np.abs(fine[..., at] - other).max() < 1e-3 * np.abs(fine).max()


def test_sub_events_add_up_and_those_after_the_window_are_silent():
    events = line(4)
    alone = [
        wavefield_records(
            SubEvents(**{k: v[i : i + 1] for k, v in events.__dict__.items()}), near(SITES), CRUST, SAMPLING
        )
        for i in range(4)
    ]
    together = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    assert np.allclose(sum(alone), together, atol=5e-4 * np.abs(together).max(axis=-1, keepdims=True))
    late = SubEvents(**{**events.__dict__, "time_s": np.array([60.0, 61.0, 75.0, 1e4])})
    assert not wavefield_records(late, near(SITES), CRUST, SAMPLING).any()


def test_interpolation_over_distance_is_exact_enough(monkeypatch):
    events = line(400, longitude=10.35, latitude=45.15)  # passes within some kilometres of a site
    calls = []
    lagrange = module.lagrange
    monkeypatch.setattr(module, "lagrange", lambda x: calls.append(x.size) or lagrange(x))
    table = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    assert sum(calls) > 700
    monkeypatch.setattr(module, "TABLE_GAIN", np.inf)
    calls.clear()
    exact = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    assert not calls
    misfit = ((table - exact) ** 2).sum(axis=-1) / (exact**2).sum(axis=-1)
    assert misfit.max() < 1e-6


def test_memory_limits_change_nothing(monkeypatch):
    events = line(400, longitude=10.35, latitude=45.15)
    events = SubEvents(**{**events.__dict__, "depth_km": np.where(np.arange(400) % 100 == 0, 8.0, 10.0)})
    reference = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    # Batches of a few dozen distances: stencils reach over their borders, depths share batches.
    monkeypatch.setattr(integration, "TABLE_BYTES", 24 * 60 * 500)
    monkeypatch.setattr(integration, "BLOCK_BYTES", 288 * 7 * 500)
    records = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    assert np.allclose(records, reference, atol=1e-9 * np.abs(reference).max())


def test_several_depths_and_the_date_line():
    events = line(3, depth_km=8.0, longitude=-179.95, latitude=-10.1)
    events = SubEvents(**{**events.__dict__, "depth_km": np.array([8.0, 12.0, 8.0])})
    site = Receivers(SITES.longitude_deg[2:], SITES.latitude_deg[2:])
    a = wavefield_records(events, site, CRUST, SAMPLING)
    moved = SubEvents(**{**events.__dict__, "longitude_deg": np.asarray(events.longitude_deg) - 100.0})
    b = wavefield_records(moved, Receivers(site.longitude_deg - 100.0, site.latitude_deg), CRUST, SAMPLING)
    assert np.isfinite(a).all()
    assert a.any()
    assert np.allclose(a, b, atol=1e-8 * np.abs(a).max())


def test_an_engine_with_a_store_gives_the_same_records(tmp_path):
    events = line(3)
    seen = []
    store = GreensStore(tmp_path)
    engine = stored_wavefield(store, lambda done, total: seen.append((done, total)))
    reference = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    for _ in range(2):
        records = engine(events, near(SITES), CRUST, SAMPLING)
        assert np.allclose(records, reference, atol=1e-9 * np.abs(reference).max())
    assert seen == [(1, 1), (1, 1)]
    assert len(list(tmp_path.glob("*.h5"))) == 1


def test_parts_of_a_rupture_share_green_s_functions_and_add_up(tmp_path):
    """A part alone has few distances, which would be computed one by one; as a part of the whole it takes the whole's."""
    events = line(160)
    engine = stored_wavefield(GreensStore(tmp_path), whole=events)
    pieces = np.array_split(np.arange(160), 4)
    parts = [SubEvents(**{k: v[piece] for k, v in events.__dict__.items()}) for piece in pieces]
    total = sum(engine(part, near(SITES), CRUST, SAMPLING) for part in parts)
    assert len(list(tmp_path.glob("*.h5"))) == 1
    reference = wavefield_records(events, near(SITES), CRUST, SAMPLING)
    assert np.allclose(total, reference, atol=1e-9 * np.abs(reference).max())


@pytest.mark.parametrize(
    ("change", "match"),
    [
        ({"depth_km": np.array([10.0, 15.0, 10.0])}, "interface"),
        ({"depth_km": np.array([10.0, -1.0, 10.0])}, "below the surface"),
        ({"moment_nm": np.array([1e16, np.nan, 1e16])}, "moment_nm"),
        ({"rise_time_s": np.array([1.0, 1.0])}, "rise_time_s"),
        ({"rise_time_s": np.array([1.0, -1.0, 1.0])}, "rise time"),
    ],
)
def test_bad_sub_events_are_said_in_a_sentence(change, match):
    with pytest.raises(InputError, match=match):
        wavefield_records(SubEvents(**{**line(3).__dict__, **change}), near(SITES), CRUST, SAMPLING)


def test_receiver_on_top_of_a_sub_event_and_band_above_nyquist():
    events = line(2)
    above = Receivers(np.asarray(events.longitude_deg[1:]), np.asarray(events.latitude_deg[1:]))
    with pytest.raises(InputError, match="zero distance"):
        wavefield_records(events, above, CRUST, SAMPLING)
    with pytest.raises(InputError, match="half the sampling rate"):
        wavefield_records(events, near(SITES), CRUST, Sampling(0.0, 0.25, 240, 2.0))
    with pytest.raises(InputError, match="Receivers"):
        wavefield_records(events, Receivers(np.array([np.nan]), np.array([45.0])), CRUST, SAMPLING)
    empty = SubEvents(**{k: v[:0] for k, v in events.__dict__.items()})
    with pytest.raises(InputError, match="at least one sub-event"):
        wavefield_records(empty, near(SITES), CRUST, SAMPLING)
