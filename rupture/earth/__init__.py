"""Earth models and travel-time tables."""

from rupture.earth.layers import LayeredModel
from rupture.earth.model import Earth, build_earth
from rupture.earth.tables import TravelTimeTable

__all__ = ["Earth", "LayeredModel", "TravelTimeTable", "build_earth"]
