"""
What sites know about the place of a front
==========================================

Each site sees a front under a bearing: it knows much across the ray and nothing along it. Rays that cross at right angles
locate best (Bishop et al. 2010).
"""

import numpy as np
from matplotlib import pyplot as plt
from matplotlib.patches import Ellipse

from rupture.resolution.information import position_information

figure, axes = plt.subplots(1, 3, figsize=(9, 3.2), sharex=True, sharey=True, layout="constrained")
for ax, crossing in zip(axes, (90, 45, 15), strict=True):
    angles = np.radians([-crossing / 2, crossing / 2])
    sites = 100e3 * np.stack([np.sin(angles), np.cos(angles)], axis=1)
    information = position_information(np.zeros((1, 2)), sites, np.radians([5.0, 5.0])).sum(axis=1)[0]
    values, vectors = np.linalg.eigh(np.linalg.inv(information))
    tilt = np.degrees(np.arctan2(vectors[1, 1], vectors[0, 1]))
    width, height = 2 * np.sqrt(values[::-1]) / 1e3
    ax.add_patch(Ellipse((0, 0), width, height, angle=tilt, color="#2f6f9f", alpha=0.5))
    ax.plot(*sites.T / 1e3, linestyle="none", marker="^", color="#1d2126")
    for east, north in sites / 1e3:
        ax.plot([east, 0], [north, 0], color="#b9bfc5", linewidth=0.8)
    ax.set(title=f"rays cross at {crossing} deg", xlabel="east (km)", aspect="equal", xlim=(-90, 90), ylim=(-60, 110))
axes[0].set_ylabel("north (km)")
plt.show()
