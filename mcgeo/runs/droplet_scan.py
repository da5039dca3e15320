"""What a droplet and its background cannot answer."""

from __future__ import annotations

import numpy as np

from mcgeo.errors import ConfigError
from mcgeo.problem.problem import Problem
from mcgeo.variational.variation import PROJECTED, Variation

_ANY_WAVE = np.array([[0.7, 0.4]])


def require_droplet_problem(problem: Problem, variation: Variation) -> None:
    """Refuse what a droplet and its background cannot answer.

    Raises
    ------
    ConfigError
        With one line per key.
    """
    faults = []
    if variation.kind != PROJECTED:
        faults.append(f"problem.variation: must be {PROJECTED} for a droplet, not {variation.kind}")
    if problem.tilt is not None:
        faults.append("problem.tilt: must be null for a droplet, whose background lies in the plane")
    # An interaction of electrons' positions reaches guiding centres through the form factor of their orbit only.
    elif np.any(problem.interaction.guiding_centre_potential(_ANY_WAVE, np.zeros(1)) != 0.0):
        faults.append(
            "problem.interaction: must be an interaction V(r) for a droplet: pseudopotentials act on guiding "
            "centres, which a background has none of"
        )
    if faults:
        raise ConfigError(faults)
