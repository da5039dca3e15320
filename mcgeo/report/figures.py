"""All figures: each function takes data and, optionally, axes, and returns the axes."""

from mcgeo.report.energy_figure import energy_curve
from mcgeo.report.hole_figure import MeasuredShape, hole_map
from mcgeo.report.liquid_figures import (
    block_trace,
    occupations,
    radial_density,
    radial_pair_correlation,
    structure_factor,
)
from mcgeo.report.saving import save_figure
from mcgeo.report.style import new_axes, new_panels

__all__ = [
    "MeasuredShape",
    "block_trace",
    "energy_curve",
    "hole_map",
    "new_axes",
    "new_panels",
    "occupations",
    "radial_density",
    "radial_pair_correlation",
    "save_figure",
    "structure_factor",
]
