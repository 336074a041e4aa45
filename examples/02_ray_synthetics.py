"""
A one-way rupture seen from two sides
=====================================

The ray engine makes six-component records of a line source. Toward the rupture the shaking is short and strong, away from it
long and weak (Ben-Menahem 1961; Haskell 1964).
"""

import numpy as np
from matplotlib import pyplot as plt

from rupture.earth import LayeredModel
from rupture.geodesy import destination
from rupture.synthetic.engine import Receivers, Sampling
from rupture.synthetic.ray import ray_records
from rupture.synthetic.source import Arm, KinematicSource
from rupture.synthetic.sub_events import make_sub_events

layers = LayeredModel("crust", [0.0, 33.0], [6.0, 8.0], [3.46, 4.5], [2720.0, 3300.0], [600.0, 900.0], [300.0, 450.0])
rupture = KinematicSource(12.0, 40.0, 10.0, 7.0, (90.0, 90.0, 0.0), (Arm(90.0, 50.0, 2.8),), sub_events=300)
azimuths = np.radians([70.0, 250.0])
longitude, latitude = destination(12.0, 40.0, azimuths, 130e3)
sampling = Sampling(0.0, 0.05, 2400, 2.0)
records = ray_records(make_sub_events(rupture, seed=4), Receivers(longitude, latitude), layers, sampling)
time = sampling.step_s * np.arange(sampling.samples)

figure, axes = plt.subplots(2, 1, figsize=(7, 4), sharex=True, sharey=True, layout="constrained")
for ax, record, name in zip(axes, records, ("rupture comes nearer", "rupture runs away"), strict=True):
    ax.plot(time, 1e6 * record[5], linewidth=0.6, color="#1d2126")
    ax.set(title=name, ylabel="vertical rotation\nrate (µrad/s)")
axes[1].set(xlabel="time after origin (s)", xlim=(15, 100))
plt.show()
