"""A study's numbers depend on its seed alone: not on workers, order, or how often it was killed."""

import json
import os
import pickle
import random
import signal
import subprocess
import sys
import time
from dataclasses import replace

import pytest

from rupture.errors import InputError
from rupture.resolution.null_tests import make_trials
from rupture.resolution.settings import StudySettings
from rupture.resolution.study import TRIALS_NAME, make_cases, run_study

RUN = """
import pickle, sys
from pathlib import Path
from rupture.resolution.study import run_study
network, cases = pickle.loads(Path(sys.argv[1]).read_bytes())
print("ready", flush=True)
run_study(network, cases, Path(sys.argv[2]), 1)
"""


@pytest.fixture(scope="module")
def cases(network):
    return make_cases(network, StudySettings(ruptures=9), 5)


@pytest.fixture(scope="module")
def rows(network, cases, tmp_path_factory):
    return run_study(network, cases, tmp_path_factory.mktemp("whole"), workers=1)


def test_rows_are_those_of_the_cases(cases, rows):
    assert [r["key"] for r in rows] == [c.key for c in cases]
    assert [r["true_kind"] for r in rows] == 3 * ["stationary", "unilateral", "bilateral"]
    assert len({r["azimuth_deg"] for r in rows}) == len(rows)


def test_two_workers_give_the_numbers_of_one(network, cases, rows, tmp_path):
    assert run_study(network, cases[:5], tmp_path, workers=2) == rows[:5]


def test_another_seed_gives_other_numbers(network, rows, tmp_path):
    other = run_study(network, make_cases(network, StudySettings(ruptures=3), 6), tmp_path, workers=1)
    assert all(a["true_azimuth_deg"] != b["true_azimuth_deg"] for a, b in zip(other, rows, strict=False))


def test_a_longer_study_begins_with_the_shorter_one():
    assert make_trials(9, 40.0, 5)[:4] == make_trials(4, 40.0, 5)


def test_a_study_killed_twice_goes_on_to_the_same_numbers(network, cases, rows, tmp_path):
    given, folder = tmp_path / "given.pkl", tmp_path / "out"
    given.write_bytes(pickle.dumps((network, cases)))
    moments = random.Random(8)
    done = [0]
    for _ in range(2):
        process = subprocess.Popen(
            [sys.executable, "-c", RUN, str(given), str(folder)], stdout=subprocess.PIPE, text=True
        )
        with process:
            assert process.stdout.readline() == "ready\n"
            # Once it has got further than the last time, at any moment.
            deadline = time.monotonic() + 60
            while _count(folder) <= done[-1]:
                assert time.monotonic() < deadline
                assert process.poll() is None
                time.sleep(0.01)
            time.sleep(moments.uniform(0.0, 0.4))
            os.kill(process.pid, signal.SIGKILL)
        assert process.returncode == -signal.SIGKILL
        done.append(_count(folder))
    assert 0 < done[1] < done[2] < len(cases)
    seen = []
    assert run_study(network, cases, folder, 1, progress=lambda k, n: seen.append(k)) == rows
    # What was done before was not done again.
    assert len(seen) <= len(cases) - done[2]


def _count(folder):
    path = folder / TRIALS_NAME
    return max(0, path.read_text(encoding="utf-8").count("\n") - 1) if path.is_file() else 0


def test_a_torn_line_is_run_again(network, cases, rows, tmp_path):
    run_study(network, cases[:3], tmp_path, workers=1)
    path = tmp_path / TRIALS_NAME
    path.write_bytes(path.read_bytes()[:-40])
    assert run_study(network, cases[:3], tmp_path, workers=1) == rows[:3]
    assert [json.loads(line)["key"] for line in path.read_text().splitlines()[1:]] == [c.key for c in cases[:3]]


def test_a_folder_of_another_study_is_refused(network, noisier, cases, tmp_path):
    run_study(network, cases[:1], tmp_path, workers=1)
    with pytest.raises(InputError, match="holds trials of another study; give another --out"):
        run_study(noisier, cases[:1], tmp_path, workers=1)


def test_without_leaves_each_site_out(network):
    found = make_cases(network, StudySettings(ruptures=3, without=True, noise_factors=(1.0, 4.0)), 5)
    assert len(found) == 3 * 2 * 3
    assert {c.without for c in found} == {"", "S0", "S1"}
    # The same ruptures every time, so that differences are those of the network.
    assert len({c.trial for c in found}) == 3


def test_a_study_needs_a_magnitude(network):
    nameless = replace(network, event=replace(network.event, magnitude=None))
    with pytest.raises(InputError, match="give one with --magnitude"):
        make_cases(nameless, StudySettings(ruptures=3), 5)
