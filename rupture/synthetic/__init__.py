"""Kinematic sources, two engines, noise and scenarios."""
