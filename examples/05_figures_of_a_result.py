"""
Figures of a result
===================

Two sites see a rupture run east: each one's back-azimuth turns the other way. A run leaves such a result as `result.nc`;
here one is put together by hand. Every figure is one call on it, and shows itself in Jupyter; here it is shown as an image.
"""

import io

import numpy as np
from matplotlib import pyplot as plt

from rupture.datasets import direction_dataset, site_dataset
from rupture.direction import DirectionSettings, estimate_direction
from rupture.earth import LayeredModel
from rupture.geodesy import destination
from rupture.pictures import directions_figure
from rupture.result import Result
from rupture.site import Site
from rupture.synthetic.engine import Receivers, Sampling
from rupture.synthetic.ray import ray_records
from rupture.synthetic.source import Arm, KinematicSource
from rupture.synthetic.sub_events import make_sub_events

layers = LayeredModel("crust", [0.0, 33.0], [6.0, 8.0], [3.46, 4.5], [2720.0, 3300.0], [600.0, 900.0], [300.0, 450.0])
source = KinematicSource(12.0, 40.0, 10.0, 7.2, (90.0, 90.0, 0.0), (Arm(90.0, 70.0, 2.8),), sub_events=400)
codes, azimuths, distance = ("QQ.NORTH", "QQ.SOUTH"), np.array([20.0, 160.0]), 80e3
longitude, latitude = destination(12.0, 40.0, np.radians(azimuths), distance)
sampling = Sampling(-60.0, 0.05, 3600, 3.0)
records = ray_records(make_sub_events(source, seed=2), Receivers(longitude, latitude), layers, sampling)
scale = np.repeat([1e-6, 1e-9], 3)[:, None]
records = records + scale * np.random.default_rng(3).normal(size=records.shape)

found, rows = [], []
for k, code in enumerate(codes):
    valid = np.ones(records[k].shape, bool)
    site = Site(code, longitude[k], latitude[k], 0.0, sampling.start_s, sampling.step_s, records[k], valid, (0.05, 5.0))
    found.append(estimate_direction(site, (-60.0, 10.0), DirectionSettings()))
    rows.append({
        "code": code, "longitude": longitude[k], "latitude": latitude[k], "elevation": 0.0, "used": True, "reason": "",
        "components": "6C", "distance": distance / 1e3, "azimuth": azimuths[k], "p_arrival": distance / 6e3,
        "s_arrival": distance / 3.46e3, "azimuth_correction": 0.0, "time_correction": 0.0,
    })  # fmt: skip
place = {"longitude_deg": 12.0, "latitude_deg": 40.0, "depth_km": 10.0}
event = {"origin_time": "2031-05-14T03:21:07Z", "name": "Invented"} | place
result = Result({"event": event}, site_dataset(rows), direction_dataset(found))

picture, image = directions_figure(result, columns=2), io.BytesIO()
picture.savefig(image, format="png", dpi=200)
image.seek(0)
axes = plt.figure(figsize=tuple(picture.get_size_inches())).add_axes((0, 0, 1, 1))
axes.imshow(plt.imread(image))
axes.set_axis_off()
plt.show()
