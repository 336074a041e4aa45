"""A small planned network and a study of a few ruptures, quick enough to be run several times."""

from dataclasses import replace
from datetime import UTC, datetime

import numpy as np
import pytest

from rupture.direction import DirectionSettings
from rupture.earth import build_earth
from rupture.event import Event
from rupture.front import FitSettings, prior_for
from rupture.geodesy import destination
from rupture.resolution.ensemble import Network
from rupture.resolution.planned import planned_sites
from rupture.resolution.settings import PlannedSite
from rupture.synthetic.coda import CodaSettings
from rupture.synthetic.responses import ray_responses

EVENT = Event(datetime(2030, 1, 1, tzinfo=UTC), 10.0, 40.0, 10.0, 6.9, None)


def build_network(distance_km, azimuth_deg, components="6C", particles=60):
    """Return sites at given places, as quick to fit as settings allow."""
    lon, lat = destination(10.0, 40.0, np.radians(azimuth_deg), 1e3 * np.asarray(distance_km, float))
    planned = [
        PlannedSite(f"S{k}", float(a), float(b), components) for k, (a, b) in enumerate(zip(lon, lat, strict=True))
    ]
    sites = planned_sites(planned, float(np.max(distance_km)), 3)
    earth = build_earth("ak135").layers
    return Network(
        EVENT, sites, tuple((s.start_s, 0.0) for s in sites), earth, ray_responses(earth, 10.0, 600.0),
        DirectionSettings(hop_s=2.0, back_azimuth_step_deg=6.0), FitSettings(particles=particles, moves=1, hop_s=2.0),
        prior_for(EVENT), CodaSettings(0.2, waves=20),
    )  # fmt: skip


@pytest.fixture(scope="session")
def network():
    """Two sites: answers do not matter, that they are the same does."""
    return build_network([80, 110], [20, 110], particles=50)


@pytest.fixture
def noisier(network):
    sites = tuple(replace(s, data=2 * s.data) for s in network.sites)
    return replace(network, sites=sites)


@pytest.fixture(scope="session")
def build():
    return build_network
