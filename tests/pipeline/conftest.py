"""A small invented earthquake as files, shared by all pipeline tests."""

import shutil
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path

import pytest

from rupture.cli import main
from rupture.synthetic.scenario import scenario_from_table
from rupture.synthetic.simulate import simulate

LAYERS = [
    {"top_km": 0.0, "vp_km_s": 6.0, "vs_km_s": 3.46, "density_kg_m3": 2720.0, "qp": 600.0, "qs": 300.0},
    {"top_km": 33.0, "vp_km_s": 8.0, "vs_km_s": 4.5, "density_kg_m3": 3300.0, "qp": 900.0, "qs": 450.0},
]


def scenario(longitude=12.0, latitude=40.0, sites=((70, 20), (80, 140), (75, 250))):
    return scenario_from_table(
        {
            "name": "small",
            "seed": 3,
            "network": "ZZ",
            "event": {
                "origin_time": datetime(2031, 5, 14, 3, 21, 7, tzinfo=UTC), "longitude_deg": longitude, "latitude_deg": latitude, "depth_km": 10.0,
                "magnitude": 6.5, "strike_deg": 60.0, "dip_deg": 90.0, "rake_deg": 0.0,
            },
            "rupture": {"arm": [{"length_km": 28.0, "speed_km_s": 2.8}], "sub_events": 80},
            "record": {"before_s": 60.0, "rate_hz": 10.0, "high_hz": 3.0},
            "coda": {"energy_ratio": 0.0},
            "layer": LAYERS,
            "site": [
                {"code": f"S{k + 1}", "distance_km": float(d), "azimuth_deg": float(a), "components": "6C"}
                for k, (d, a) in enumerate(sites)
            ],
        }
    )  # fmt: skip


@dataclass(frozen=True)
class Given:
    """Files of an earthquake, and the command-line arguments that name them."""

    folder: Path

    @property
    def arguments(self):
        f = self.folder
        return [
            "--records",
            str(f / "records"),
            "--inventory",
            str(f / "inventory.xml"),
            "--event",
            str(f / "event.xml"),
        ]


@pytest.fixture(scope="session")
def made(tmp_path_factory):
    folder = tmp_path_factory.mktemp("small") / "input"
    simulate(scenario(), folder)
    return Given(folder)


@pytest.fixture
def given(made, tmp_path):
    """A copy that a test may spoil."""
    shutil.copytree(made.folder, tmp_path / "input")
    return Given(tmp_path / "input")


@pytest.fixture
def run(capsys):
    """Run the command line; returns exit status, stdout and stderr."""

    def call(*arguments):
        try:
            status = main([str(a) for a in arguments])
        except SystemExit as stop:
            status = stop.code
        out, err = capsys.readouterr()
        assert "Traceback" not in err
        return status, out, err

    return call
