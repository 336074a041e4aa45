"""The store of Green's functions: keys, reuse, other processes, killed processes, damage, size limit."""

import os
import subprocess
import sys
import time
from pathlib import Path

import numpy as np
import pytest

from rupture.earth.layers import LayeredModel
from rupture.errors import InputError
from rupture.synthetic.wavefield import store as module
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.store import GreensStore, default_folder, greens_key

ROCK = LayeredModel("rock", [0.0, 20.0], [6.0, 7.0], [3.46, 4.0], [2700.0, 3000.0], [500.0, 600.0], [250.0, 300.0])
PLAN = FrequencyPlan(step_s=0.5, samples=64, high_hz=0.5)
DISTANCE = np.array([10e3, 20e3])
REPOSITORY = Path(__file__).parents[3]

SETTING = """
import sys, time
from pathlib import Path
import numpy as np
from rupture.earth.layers import LayeredModel
from rupture.synthetic.wavefield.sampling import FrequencyPlan
from rupture.synthetic.wavefield.store import GreensStore
rock = LayeredModel("rock", [0.0, 20.0], [6.0, 7.0], [3.46, 4.0], [2700.0, 3000.0], [500.0, 600.0], [250.0, 300.0])
plan = FrequencyPlan(step_s=0.5, samples=64, high_hz=0.5)
store = GreensStore(Path(sys.argv[1]))
def fetch(report=None):
    return store.fetch(rock, 10.0, np.array([10e3, 20e3]), plan, report)
"""


def process(folder, body):
    return subprocess.Popen(
        [sys.executable, "-c", SETTING + body, str(folder)], cwd=REPOSITORY, stdout=subprocess.PIPE, text=True,
        env={**os.environ, "NUMBA_NUM_THREADS": "1"},
    )  # fmt: skip


def count_builds(monkeypatch):
    builds = []
    original = module.greens
    monkeypatch.setattr(module, "greens", lambda *a: builds.append(a[1]) or original(*a))
    return builds


def test_built_once_and_read_back_the_same(tmp_path, monkeypatch):
    builds = count_builds(monkeypatch)
    store, seen = GreensStore(tmp_path), []
    first = store.fetch(ROCK, 10.0, DISTANCE, PLAN, lambda done, total: seen.append((done, total)))
    again = GreensStore(tmp_path).fetch(ROCK, 10.0, DISTANCE, PLAN, lambda done, total: seen.append("no"))
    assert builds == [10.0]
    assert seen[-1][0] == seen[-1][1]
    assert "no" not in seen
    assert np.array_equal(first.spectra, again.spectra)
    assert (again.depth_km, again.plan) == (10.0, PLAN)
    assert not list(tmp_path.glob("*.part"))


def test_key_knows_all_that_matters_and_nothing_else(monkeypatch):
    def key(model=ROCK, depth=10.0, distance=DISTANCE, plan=PLAN):
        return greens_key(model, depth, distance, plan)

    def changed(**what):
        return LayeredModel(**{**ROCK.__dict__, **what})

    others = [
        *(key(model=changed(**{f: getattr(ROCK, f) * 1.001})) for f in ("vp_km_s", "vs_km_s", "density_kg_m3", "qp", "qs", "top_km")),
        key(depth=10.001), key(distance=DISTANCE[:1]), key(distance=DISTANCE + 0.1),
        key(plan=FrequencyPlan(0.5, 65, 0.5)), key(plan=FrequencyPlan(0.4, 64, 0.5)), key(plan=FrequencyPlan(0.5, 64, 0.4)),
    ]  # fmt: skip
    assert len({key(), *others}) == 13
    assert key(model=changed(name="another name")) == key()
    before = key()
    monkeypatch.setattr(module, "CODE_VERSION", module.CODE_VERSION + 1)
    assert key() != before


def test_two_processes_that_want_the_same_build_it_once(tmp_path):
    body = "built = []\nt = fetch(lambda done, total: (built.append(1), time.sleep(0.3)))\nprint(len(built) > 0, abs(t.spectra).sum())"
    pair = [process(tmp_path, body) for _ in range(2)]
    output = [p.communicate(timeout=120)[0].split() for p in pair]
    assert all(p.returncode == 0 for p in pair)
    assert sorted(line[0] for line in output) == ["False", "True"]
    assert output[0][1] == output[1][1]
    assert len(list(tmp_path.glob("*.h5"))) == 1


def test_a_killed_writer_leaves_no_broken_file_and_is_cleared_away(tmp_path, monkeypatch):
    body = """
def hang(self, target):
    print("written", flush=True)
    time.sleep(60)
Path.replace = hang
fetch()
"""
    writer = process(tmp_path, body)
    try:
        assert writer.stdout.readline().strip() == "written"
        GreensStore(tmp_path).evict()
        assert len(list(tmp_path.glob("*.part"))) == 1  # its writer is alive
    finally:
        writer.kill()
        writer.communicate()
    assert len(list(tmp_path.glob("*.part"))) == 1
    assert not list(tmp_path.glob("*.h5"))
    builds = count_builds(monkeypatch)
    GreensStore(tmp_path).fetch(ROCK, 10.0, DISTANCE, PLAN)
    assert builds == [10.0]
    assert len(list(tmp_path.glob("*.h5"))) == 1
    assert not list(tmp_path.glob("*.part"))


@pytest.mark.parametrize("damage", ["cut", "text", "empty"])
def test_a_damaged_file_is_built_again(tmp_path, monkeypatch, damage):
    store = GreensStore(tmp_path)
    whole = store.fetch(ROCK, 10.0, DISTANCE, PLAN)
    (path,) = tmp_path.glob("*.h5")
    data = path.read_bytes()
    path.write_bytes({"cut": data[: len(data) // 2], "text": b"not HDF5", "empty": b""}[damage])
    builds = count_builds(monkeypatch)
    assert np.array_equal(store.fetch(ROCK, 10.0, DISTANCE, PLAN).spectra, whole.spectra)
    assert builds == [10.0]


def test_size_limit_removes_what_was_not_used_for_longest(tmp_path):
    big = GreensStore(tmp_path)
    for depth in (5.0, 6.0, 7.0):
        big.fetch(ROCK, depth, DISTANCE, PLAN)
    for age, depth in ((300, 5.0), (200, 6.0), (100, 7.0)):
        path = tmp_path / f"{greens_key(ROCK, depth, DISTANCE, PLAN)}.h5"
        os.utime(path, (time.time() - age, time.time() - age))
    one = big.size_bytes() / 3
    big.fetch(ROCK, 5.0, DISTANCE, PLAN)  # used just now: no longer the oldest
    small = GreensStore(tmp_path, limit_bytes=int(3.5 * one))
    small.fetch(ROCK, 8.0, DISTANCE, PLAN)
    left = {
        depth for depth in (5.0, 6.0, 7.0, 8.0) if (tmp_path / f"{greens_key(ROCK, depth, DISTANCE, PLAN)}.h5").exists()
    }
    assert left == {5.0, 7.0, 8.0}
    assert small.size_bytes() <= small.limit_bytes
    GreensStore(tmp_path, limit_bytes=1).fetch(ROCK, 9.0, DISTANCE, PLAN)
    assert [p.stem for p in tmp_path.glob("*.h5")] == [greens_key(ROCK, 9.0, DISTANCE, PLAN)]


def test_folder_follows_the_environment(monkeypatch, tmp_path):
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    assert default_folder() == tmp_path / "rupture-backtrack" / "greens"
    assert GreensStore().folder == default_folder()
    monkeypatch.delenv("XDG_CACHE_HOME")
    monkeypatch.setattr(sys, "platform", "linux")
    assert default_folder() == Path.home() / ".cache" / "rupture-backtrack" / "greens"


def test_bad_folder_and_bad_limit(tmp_path):
    (tmp_path / "file").write_text("")
    with pytest.raises(InputError, match="cannot be made"):
        GreensStore(tmp_path / "file" / "below")
    with pytest.raises(InputError, match="positive size limit"):
        GreensStore(tmp_path, limit_bytes=0)
