"""Smoothing of the frames, line-source fit and resampling."""
