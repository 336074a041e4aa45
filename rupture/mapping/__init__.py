"""Grid, geometry and ray stack."""

from rupture.mapping.geometry import Geometry, site_geometry
from rupture.mapping.grid import Grid, map_grid, read_trace, trace_grid
from rupture.mapping.stack import Stack, StackSettings, stack_rays

__all__ = [
    "Geometry",
    "Grid",
    "Stack",
    "StackSettings",
    "map_grid",
    "read_trace",
    "site_geometry",
    "stack_rays",
    "trace_grid",
]
