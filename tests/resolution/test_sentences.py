"""What people are told of a geometry: of real ones, and at the edges of the wording."""

import numpy as np
import pytest

from rupture.resolution.ensemble import outcome
from rupture.resolution.null_tests import in_short, make_trials, summarise

CAUTION, HOPELESS = "take the direction with caution.", "this geometry cannot tell a direction."


def summary_of(network, count):
    trials = make_trials(count, 40.0, 4)
    return summarise([outcome(t, network.track(network.records(t, 6.9), t.seed)) for t in trials])


def test_sites_all_around_tell_directions(build):
    found = summary_of(build([60, 90, 70, 110, 80], [15, 90, 160, 230, 300]), 9)
    assert found["confusion"]["stationary"]["unilateral"] == 0
    assert found["direction_error_deg_p90"] < 20
    assert found["sentence"].endswith("were named one-way.")
    assert found["sentence"].startswith("Of 3 synthetic ruptures that never moved, these sites called 0 a moving one;")


def test_two_sites_on_one_side_call_for_caution(build):
    found = summary_of(build([120, 130], [90, 110]), 9)
    assert found["sentence"].endswith(CAUTION)


def test_one_site_with_vertical_rotation_alone_is_hopeless(build):
    found = summary_of(build([120], [90], "3C+rotZ"), 6)
    assert found["sentence"].endswith(HOPELESS)
    # It must say that it does not know, rather than name something wrong.
    assert all(sum(v for k, v in row.items() if k != "undetermined") == 0 for row in found["confusion"].values())


def rows(stationary, moving, error_deg):
    """Rows whose one-way ruptures are off by `error_deg`, with the kinds named."""
    base = {"true_speed_km_s": 2.0, "true_length_km": 40.0, "speed_km_s": 2.2, "length_km": 30.0}
    return [
        base | {"true_kind": "stationary", "kind": kind, "azimuth_deg": 0.0, "true_azimuth_deg": 0.0} for kind in stationary
    ] + [
        # Across north, where a plain difference would be 360 degrees off.
        base | {"true_kind": "unilateral", "kind": kind, "azimuth_deg": (355.0 + error_deg) % 360, "true_azimuth_deg": 355.0}
        for kind in moving
    ]  # fmt: skip


@pytest.mark.parametrize(
    ("stationary", "moving", "error_deg", "end"),
    [
        (10 * ["stationary"], 10 * ["unilateral"], 10, "within 10 degrees and 10 were named one-way."),
        (10 * ["stationary"], 10 * ["unilateral"], 30, CAUTION),
        (8 * ["stationary"] + 2 * ["unilateral"], 10 * ["unilateral"], 10, CAUTION),
        (10 * ["stationary"], 5 * ["unilateral"] + 5 * ["undetermined"], 10, CAUTION),
        (10 * ["stationary"], 10 * ["unilateral"], 70, HOPELESS),
        (10 * ["stationary"], 2 * ["unilateral"] + 8 * ["undetermined"], 10, HOPELESS),
    ],
)
def test_where_the_wording_turns(stationary, moving, error_deg, end):
    assert summarise(rows(stationary, moving, error_deg))["sentence"].endswith(end)


def test_rates_and_errors_are_counted_rightly():
    some = rows(["stationary", "bilateral", "undetermined", "unilateral"], ["unilateral", "bilateral"], 12)
    found = summarise(some)
    assert found["false_direction_probability"] == 0.5
    # Five are named, of which the two false ones and the two-way answer are wrong.
    assert found["wrong_kind_probability"] == pytest.approx(3 / 5)
    assert found["direction_error_deg_p50"] == 12
    assert found["speed_error_share_p50"] == pytest.approx(0.1)
    assert found["length_error_share_p90"] == pytest.approx(0.25)


def test_too_few_to_say():
    found = summarise(rows(["stationary"], [], 0))
    assert "too few" in found["sentence"]
    assert found["direction_error_deg_p50"] is None


def test_trials_cover_what_they_say():
    trials = make_trials(300, 40.0, 1)
    assert {t.kind for t in trials[:3]} == {"stationary", "unilateral", "bilateral"}
    moving = [t for t in trials if t.kind != "stationary"]
    assert all(1.8 <= t.speed_km_s <= 4.5 for t in moving)
    total = np.log([t.length_km + t.second_length_km for t in moving])
    # 20 % of scatter about 40 km: the mean of 200 is within four standard errors.
    assert abs(total.mean() - np.log(40)) < 4 * 0.2 / np.sqrt(len(moving))
    assert abs(total.std() - 0.2) < 0.05
    assert all(t.length_km >= t.second_length_km for t in moving)
    # All round: no quadrant is left out.
    assert min(np.histogram([t.azimuth_deg for t in moving], 4, (0, 360))[0]) > 25


def test_trials_keep_to_a_known_fault():
    azimuths = {round(t.azimuth_deg, 6) for t in make_trials(60, 40.0, 1, azimuth_deg=250.0)}
    assert azimuths == {70.0, 250.0}


def test_in_short_never_asks_for_more_than_the_run(network):
    direction, fit = in_short(network.direction, network.fit)
    assert fit.particles == network.fit.particles
    assert fit.hop_s == direction.hop_s == 2.0
