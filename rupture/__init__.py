"""Follow an earthquake rupture from the records of a few six-component sites."""

__version__ = "0.1.0"
