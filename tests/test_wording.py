from rupture.wording import answer_sentences


def _interval(best, low, high):
    return {"best": best, "p05": low, "p95": high}


SITES = [{"code": "A", "used": True}, {"code": "B", "used": False}]


def test_bilateral_answer_names_both_arms():
    rupture = {
        "kind": "bilateral", "kind_probability": {"stationary": 0.0, "unilateral": 0.1, "bilateral": 0.9},
        "direction_deg": _interval(90, 85, 95), "speed_km_s": _interval(2.8, 2.6, 3.0), "length_km": _interval(60, 50, 70),
        "duration_s": _interval(22, 20, 24),
        "second_arm": {"direction_deg": _interval(270, 260, 280), "speed_km_s": _interval(2.5, 2.2, 2.9), "length_km": _interval(30, 20, 40)},
    }  # fmt: skip
    text = " ".join(answer_sentences({"rupture": rupture, "sites": SITES}))
    assert "Bilateral rupture (90%, 1 site) toward E: direction 90 deg (85 to 95)" in text
    assert "Second arm toward W" in text


def test_undetermined_says_why():
    rupture = {
        "kind": "undetermined",
        "kind_probability": {"unilateral": 0.6, "bilateral": 0.4},
        "reason": "two kinds fit as well",
    }
    assert answer_sentences({"rupture": rupture, "sites": SITES})[0].startswith(
        "Undetermined from 1 site: two kinds fit as well (unilateral 60%"
    )


def test_reliability_and_disagreement_are_said():
    rupture = {
        "kind": "stationary",
        "kind_probability": {"stationary": 0.95},
        "duration_s": _interval(20, 18, 22),
    }
    summary = {
        "rupture": rupture,
        "sites": SITES,
        "reliability": {"sentence": "These sites would have told."},
        "agreement": {"differ": True, "reason": "directions are 40 deg apart"},
    }
    text = answer_sentences(summary)
    assert text[-2:] == [
        "These sites would have told.",
        "Ray stack and energy inversion differ: directions are 40 deg apart.",
    ]


def test_a_direction_that_hangs_on_one_site_is_said():
    rupture = {
        "kind": "unilateral", "kind_probability": {"unilateral": 0.99}, "direction_deg": _interval(5, 358, 12),
        "speed_km_s": _interval(2.8, 2.6, 3.0), "length_km": _interval(60, 50, 70), "duration_s": _interval(22, 20, 24),
    }  # fmt: skip
    without = {"most_decisive_site": "QQ.A", "change_without_it": -31.2}
    summary = {"rupture": rupture, "sites": SITES, "resampling": {"direction_deg": without}}
    assert answer_sentences(summary)[-1] == "The direction hangs on site QQ.A: without it, it turns by 31 degrees."
    summary["resampling"]["direction_deg"]["change_without_it"] = 6.9
    assert not any("hangs" in sentence for sentence in answer_sentences(summary))
