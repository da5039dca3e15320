"""The finite-size law: what a torus adds to the energy of the infinite liquid.

On the torus the integral over q of the plane becomes a sum over q != 0 and the cell's Madelung energy joins,

    E_torus - E_plane = [ (1/2A) sum_{q != 0} - 1/2 int d^2q/(2 pi)^2 ] v(q) (Sbar(|q|_g) - 1) + xi/2,

with the structure of the infinite liquid, which a torus changes by an exponentially small amount only. The
non-analytic 1/q at small q leaves powers: N^(-3/2) for Coulomb, from S = q^2/2 + ... and an Epstein zeta function of
the cell. The sum contains all of them, for any cell, metric and interaction.
"""

from __future__ import annotations

import numpy as np

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.frame import TorusFrame
from mcgeo.problem.problem import Problem


def torus_energy_of_bulk(occupations: PairOccupations, frame: TorusFrame, problem: Problem) -> float:
    """Energy per electron on a cell if S(q) were that of the infinite liquid of metric ``frame.metric``."""
    waves = frame.lab.waves(problem.reach, problem.orbit.metric)
    norm = np.sqrt(frame.metric.wavevector_norm_sq(waves.vectors))
    structure = occupations.guiding_centre_structure(norm)
    total = np.sum(problem.effective_potential(waves.vectors) * (structure - 1.0)) / frame.lab.area
    return float(total) + 0.5 * problem.interaction.self_energy(frame.lab)
