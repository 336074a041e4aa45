"""
Direction from one six-component site
=====================================

A shear wave from back-azimuth 70 degrees crosses one site. Translation and rotation together give the direction without
the 180-degree ambiguity.
"""

import numpy as np
from matplotlib import pyplot as plt
from scipy.signal import butter, sosfiltfilt

from rupture.conventions import slowness_vector
from rupture.direction import DirectionSettings, estimate_direction
from rupture.site import Site

rng = np.random.default_rng(1)
step, samples = 0.05, 3000
time = step * np.arange(samples) - 60.0
wave = sosfiltfilt(butter(4, [0.2, 1.2], "band", fs=1 / step, output="sos"), rng.normal(size=(3, samples)))
wave *= 0.05 * np.exp(-0.5 * ((time - 30) / 12) ** 2)
p_east, p_north = slowness_vector(np.radians(70.0), 1 / 3500.0)
acc_e, acc_n, acc_z = wave
rotation = [-p_north * acc_z, p_east * acc_z, -(p_east * acc_n - p_north * acc_e) / 2]
data = np.vstack([wave, rotation])
data[:3] += 1e-5 * rng.normal(size=(3, samples))
data[3:] += 2e-8 * rng.normal(size=(3, samples))
site = Site("QQ.ONE", 0.0, 0.0, 0.0, time[0], step, data, np.ones(data.shape, bool), (0.05, 5.0))

direction = estimate_direction(site, (-55.0, -25.0), DirectionSettings())
share = np.exp(direction.log_ratio).mean(axis=1)
share /= share.sum(axis=0)

figure, axes = plt.subplots(figsize=(7, 3), layout="constrained")
image = axes.pcolormesh(direction.time_s, np.degrees(direction.back_azimuth_rad), share, cmap="cividis", vmax=0.3)
axes.axhline(70.0, color="white", linestyle=":", linewidth=1)
axes.set(xlabel="time (s)", ylabel="back-azimuth (deg)", title="Posterior of the back-azimuth; truth dotted")
figure.colorbar(image, label="share of the posterior per 3 deg")
plt.show()
