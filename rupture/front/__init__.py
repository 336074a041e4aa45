"""Smoothing of the frames, line-source fit and resampling."""

from rupture.front.curves import front_positions, predicted_back_azimuths
from rupture.front.fit import FitSettings, RuptureFit, fit_rupture, fit_windows, interval, prior_for
from rupture.front.lines import KINDS, PARAMETERS, LinePrior
from rupture.front.smoothing import FrontTrack, SmoothSettings, smooth_front

__all__ = [
    "KINDS",
    "PARAMETERS",
    "FitSettings",
    "FrontTrack",
    "LinePrior",
    "RuptureFit",
    "SmoothSettings",
    "fit_rupture",
    "fit_windows",
    "front_positions",
    "interval",
    "predicted_back_azimuths",
    "prior_for",
    "smooth_front",
]
