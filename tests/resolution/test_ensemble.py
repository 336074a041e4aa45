"""Synthetic records at the sites of a run: noise as measured, gaps as they are, and the rupture asked for."""

from dataclasses import replace

import numpy as np

from rupture.resolution.ensemble import Trial, noise_like, outcome
from rupture.resolution.null_tests import make_trials


def test_noise_has_the_power_that_was_measured(network):
    site, window = network.sites[0], network.noise_window_s[0]
    rng = np.random.default_rng(1)
    many = np.stack([noise_like(site, window, 600, rng) for _ in range(20)])
    stretch = site.data[:, :600]
    frequency = np.fft.rfftfreq(600, site.step_s)
    band = (frequency > 0.2) & (frequency < 1.2)

    def power(data):
        return (np.abs(np.fft.rfft(data * np.hanning(600))) ** 2)[..., band].mean(axis=-1)

    # 59 frequencies of 20 realisations: 4 % of scatter, and the measured spectrum is smoothed across the ends of the band.
    np.testing.assert_allclose(power(many).mean(axis=0), power(stretch), rtol=0.15)
    assert not np.allclose(many[0], many[1])


def test_gaps_stay_gaps(network):
    valid = network.sites[0].valid.copy()
    valid[:, 700:720] = False
    gappy = replace(network, sites=(replace(network.sites[0], valid=valid), *network.sites[1:]))
    records = gappy.records(make_trials(2, 40.0, 1)[1], 6.9)
    assert not records[0].data[:, 700:720].any()
    assert records[0].data[:, 720:].any(axis=1).all()


def test_records_are_those_of_the_seed(network):
    trial = make_trials(2, 40.0, 1)[1]
    a, b = (network.records(trial, 6.9)[0].data for _ in range(2))
    other = network.records(replace(trial, seed=trial.seed + 1), 6.9)[0].data
    np.testing.assert_array_equal(a, b)
    assert not np.array_equal(a, other)


def test_a_source_is_what_the_trial_says(network):
    source = Trial("bilateral", 200.0, 3.0, 30.0, 20.0, 5.0, 1).source(network.event, 6.9, 50)
    assert [(a.azimuth_deg, a.length_km, a.speed_km_s) for a in source.arms] == [(200.0, 30.0, 3.0), (20.0, 20.0, 3.0)]
    assert not Trial("stationary", 200.0, 3.0, 0.0, 0.0, 5.0, 1).source(network.event, 6.9, 50).arms


def test_a_network_that_tells_nothing_is_undetermined(network):
    # No stretch of noise before the first arrival: no site can give a direction.
    blind = replace(network, noise_window_s=tuple((s.start_s, s.start_s + 0.5) for s in network.sites))
    trial = make_trials(2, 40.0, 1)[1]
    row = outcome(trial, blind.track(blind.records(trial, 6.9), 1))
    assert row["kind"] == "undetermined"
    assert row["azimuth_deg"] is None
    assert row["true_azimuth_deg"] == trial.azimuth_deg
