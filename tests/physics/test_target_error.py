"""The error at which a run with a target ends is an error: energies of many such runs scatter by it about the truth."""

from __future__ import annotations

import math

import numpy as np
import pytest

from mcgeo.runs.config import config_from_resolved
from mcgeo.runs.sample import sample

# Filled lowest level, Coulomb energy per electron of the infinite liquid: g = 1 - exp(-r^2/2) (Jancovici, Phys. Rev.
# Lett. 46, 386 (1981)) gives (1/2) 2 pi rho int dr (g - 1) = -sqrt(pi/8), rho = 1/(2 pi).
EXACT = -math.sqrt(math.pi / 8.0)
TARGET, RUNS = 4e-5, 32


@pytest.fixture(scope="module")
def runs(tmp_path_factory: pytest.TempPathFactory) -> list[tuple[float, float, int]]:
    """Energy, error and number of blocks of independent runs."""
    found = []
    for seed in range(RUNS):
        keys = {
            "state": {"kind": "laughlin", "exponent": 1, "electrons": 30},
            "sampling": {
                "walkers": 16, "sweeps": 1600, "blocks": 8, "equilibration": 200, "seed": 700 + seed, "threads": 1,
                "target_error": TARGET,
            },
        }  # fmt: skip
        liquid = sample(config_from_resolved(keys), tmp_path_factory.mktemp("open"), quiet=True)
        found.append((liquid.energy.value, liquid.energy.error, liquid.n_blocks))
    return found


def chi_square_z(deviations: np.ndarray) -> float:
    """Sum of squares of standard normal deviates, as a normal deviate (Wilson and Hilferty, PNAS 17, 684 (1931))."""
    n = len(deviations)
    return float((np.cbrt(np.sum(deviations**2) / n) - (1.0 - 2.0 / (9.0 * n))) / math.sqrt(2.0 / (9.0 * n)))


@pytest.mark.long
def test_runs_end_early_and_at_their_target(runs: list[tuple[float, float, int]]) -> None:
    values, errors, n_blocks = map(np.array, zip(*runs, strict=True))
    assert np.all(errors <= TARGET)
    assert 8 < np.median(n_blocks) < 200
    z = (values - EXACT) / errors
    print(np.median(n_blocks), chi_square_z(z), z.mean() * math.sqrt(RUNS))
    assert abs(z.mean()) * math.sqrt(RUNS) < 4.0
    assert abs(chi_square_z(z)) < 4.0
    # Errors half as large would be noticed.
    assert chi_square_z(2.0 * z) > 4.0
