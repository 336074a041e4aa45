"""
Phase velocity from one site
============================

Complete seismograms of a point source in a layered crust. Across the ray the ground accelerates by twice its rotation rate
about the vertical times the phase velocity (Aki & Richards 2002, chapter 5): the slope of one against the other is the speed
of the wave that is passing, S first, then Love waves.
"""

import numpy as np
from matplotlib import pyplot as plt

from rupture.earth import LayeredModel
from rupture.geodesy import destination, distance_azimuth
from rupture.synthetic.engine import Receivers, Sampling, SubEvents
from rupture.synthetic.wavefield import wavefield_records

crust = LayeredModel("crust", [0.0, 15.0], [5.5, 7.8], [3.2, 4.5], [2700.0, 3300.0], [400.0, 900.0], [200.0, 450.0])
one = np.ones(1)
source = SubEvents(
    12.0 * one,
    40.0 * one,
    8.0 * one,
    0.0 * one,
    1e18 * one,
    2.0 * one,
    np.radians(30.0) * one,
    np.radians(90.0) * one,
    0.0 * one,
)
longitude, latitude = destination(12.0, 40.0, np.radians(30.0), 150e3)
sampling = Sampling(0.0, 0.25, 400, 0.7)
record = wavefield_records(source, Receivers(longitude * one, latitude * one), crust, sampling)[0]
time = sampling.step_s * np.arange(sampling.samples)

_, _, back_azimuth = distance_azimuth(12.0, 40.0, longitude, latitude)
transverse = record[0] * np.cos(back_azimuth) - record[1] * np.sin(back_azimuth)
window = np.exp(-0.5 * (np.arange(-12, 13) / 6.0) ** 2)
smooth = lambda x: np.convolve(x, window, mode="same")  # noqa: E731
speed = -smooth(transverse * record[5]) / (2 * smooth(record[5] ** 2))
strong = smooth(record[5] ** 2) > 0.02 * smooth(record[5] ** 2).max()

figure, axes = plt.subplots(2, 1, figsize=(7, 4.6), sharex=True, layout="constrained")
axes[0].plot(time, 1e3 * transverse, color="#1d2126", label="acceleration across the ray")
axes[0].plot(time, -2 * 3.5e6 * record[5], color="#b3261e", linestyle="--", label="rotation rate times 2 x 3.5 km/s")
axes[0].set(ylabel="mm/s²", title="One site, 150 km away")
axes[0].legend(frameon=False)
axes[1].plot(time[strong], np.abs(speed[strong]) / 1e3, ".", color="#2f6f9f")
axes[1].axhline(3.2, color="#5f676f", linestyle=":", label="S speed of the crust")
axes[1].axhline(4.5, color="#5f676f", linestyle="--", label="S speed of the mantle")
axes[1].set(xlabel="time after origin (s)", ylabel="speed (km/s)", xlim=(25, 80), ylim=(2.5, 5.5))
axes[1].legend(frameon=False)
plt.show()
