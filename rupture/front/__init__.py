"""Smoothing of the frames, line-source fit and resampling."""

from rupture.front.curves import front_positions, predicted_back_azimuths
from rupture.front.directivity import DirectivityCheck, apparent_duration, directivity_durations
from rupture.front.envelopes import SiteDuration
from rupture.front.fit import FitSettings, RuptureFit, fit_rupture, fit_windows, prior_for
from rupture.front.intervals import interval
from rupture.front.lines import KINDS, PARAMETERS, LinePrior
from rupture.front.resample import Resampling, resample_fit
from rupture.front.smoothing import FrontTrack, SmoothSettings, smooth_front

__all__ = [
    "KINDS",
    "PARAMETERS",
    "DirectivityCheck",
    "FitSettings",
    "FrontTrack",
    "LinePrior",
    "Resampling",
    "RuptureFit",
    "SiteDuration",
    "SmoothSettings",
    "apparent_duration",
    "directivity_durations",
    "fit_rupture",
    "fit_windows",
    "front_positions",
    "interval",
    "predicted_back_azimuths",
    "prior_for",
    "resample_fit",
    "smooth_front",
]
