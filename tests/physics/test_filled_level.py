"""The filled level, where everything is known.

Ginibre, J. Math. Phys. 6, 440 (1965); Jancovici, Phys. Rev. Lett. 46, 386 (1981).
"""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray

from mcgeo.estimate.pair_correlation import (
    bulk_radial_pair_correlation,
    counted_pair_correlation,
    radial_pair_correlation,
    torus_pair_correlation,
)
from mcgeo.estimate.statistics import mean_estimate
from mcgeo.estimate.structure_factor import Curve, shell_means
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.sampling.measurement import BIN_WIDTH, PAIRS
from mcgeo.variational.energy_surface import EnergySurface
from tests.physics.checks import Sampler, mean_probability, require_agreement, require_unit_pulls
from tests.physics.closed_forms import (
    FILLED_LEVEL_ENERGY,
    filled_correlation_in_bins,
    filled_structure,
    finite_size_energy,
)


def counted(liquid: Liquid) -> tuple[Curve, NDArray[np.float64]]:
    """Direct histogram of pair distances and its bin edges, bins with hardly a pair left out."""
    first = 8
    counts = liquid.independent(liquid.blocks.counts[PAIRS].astype(float))
    configurations = liquid.configurations_per_count
    curve = counted_pair_correlation(liquid.frame, liquid.n_electrons, BIN_WIDTH, counts, configurations)
    edges = BIN_WIDTH * np.arange(counts.shape[1] + 1)
    return Curve(curve.x[first:], curve.value[first:], curve.error[first:]), edges[first:]


def test_structure_factor_shell_by_shell(filled: Liquid) -> None:
    # On a torus S(q) of the filled level is that of the plane on every wave.
    curve = shell_means(filled.norm, filled.structure_samples, 0.0)
    inside = curve.x < 4.0
    require_agreement(curve.value[inside], curve.error[inside], filled_structure(curve.x[inside]))


def test_structure_factor_with_correlations_between_waves(filled: Liquid) -> None:
    samples = filled.structure_samples[:, :40]
    exact = filled_structure(filled.norm[:40])
    assert 1e-4 < mean_probability(samples, exact) < 1.0 - 1e-4
    # An error of one percent in the metric's scale must not pass.
    assert mean_probability(samples, filled_structure(1.01 * filled.norm[:40])) < 1e-4


def test_pair_correlation_from_waves(filled: Liquid) -> None:
    # Summed over waves S(q) - 1 = -exp(-q^2/2) gives g = 1 - sum over images of exp(-r^2/2).
    r = np.array([[0.3, 0.4], [1.0, 0.0], [0.0, -1.5], [1.5, 1.5], [-3.0, 1.0], [7.0, 0.0]])
    cell = filled.frame.lab.vectors
    images = np.array([(i, j) for i in (-1, 0, 1) for j in (-1, 0, 1)]) @ cell
    exact = 1.0 - np.exp(-0.5 * np.sum((r[:, None] + images) ** 2, axis=-1)).sum(axis=1)
    value, error = torus_pair_correlation(filled.frame, filled.q_max, 30, filled.structure_samples, r)
    require_agreement(value, error, exact)
    assert np.all(error < 0.02)


def test_pair_correlation_counted_and_from_waves(filled: Liquid) -> None:
    curve, edges = counted(filled)
    require_agreement(curve.value, curve.error, filled_correlation_in_bins(edges))
    # Neighbouring bins share pairs only through the smooth g(r): their deviations are nearly independent.
    require_unit_pulls((curve.value - filled_correlation_in_bins(edges)) / curve.error)
    with pytest.raises(AssertionError):
        require_unit_pulls((curve.value - filled_correlation_in_bins(edges, 1.03)) / curve.error)
    radii = np.array([0.5, 1.0, 2.0, 4.0, 6.0])
    waves = radial_pair_correlation(filled.frame, filled.q_max, 30, filled.structure_samples, radii)
    require_agreement(waves.value, waves.error, -np.expm1(-0.5 * radii**2))
    plane = bulk_radial_pair_correlation(filled.occupations, radii)
    require_agreement(plane.value, plane.error, -np.expm1(-0.5 * radii**2))


def test_pair_occupations_are_those_of_uncorrelated_pairs(filled: Liquid) -> None:
    # g = 1 - exp(-r^2/2) is the sum with every n_m = 1 (Girvin, Phys. Rev. B 30, 558 (1984)).
    occupations = [filled.occupations.occupation(index) for index in range(len(filled.occupations.m))]
    require_agreement([n.value for n in occupations], [n.error for n in occupations], 1.0)


def plane_energy(liquid: Liquid, metric: UnimodularMetric, level: int = 0) -> tuple[float, float]:
    surface = EnergySurface(liquid.occupations, Problem(ISOTROPIC, Coulomb(), level))
    energy = mean_estimate(surface.sample_energies(metric))
    return energy.value, energy.error


def test_energy_on_the_plane(filled: Liquid) -> None:
    value, error = plane_energy(filled, ISOTROPIC)
    require_agreement(value, error, FILLED_LEVEL_ENERGY)
    assert error < 2e-4


def test_energy_on_the_plane_in_the_next_level(filled: Liquid) -> None:
    # The mean of L_1(q^2/2)^2 = (1 - q^2/2)^2 over exp(-q^2/2) dq is 3/4.
    require_agreement(*plane_energy(filled, ISOTROPIC, 1), 0.75 * FILLED_LEVEL_ENERGY)


def test_filled_level_has_no_hole_metric(filled: Liquid) -> None:
    # One state only: guiding centres fill the level whatever metric they are said to have.
    for stretch in (0.3, 0.8):
        require_agreement(*plane_energy(filled, UnimodularMetric(stretch, 0.4)), FILLED_LEVEL_ENERGY)


def require_torus_energy(liquid: Liquid, infinite: float, shape: str) -> None:
    energy = liquid.torus_energy(Coulomb())
    exponent, electrons = liquid.states[0].exponent, liquid.states[0].n_electrons
    require_agreement(energy.value, energy.error, infinite + finite_size_energy(exponent, electrons, shape))


@pytest.mark.parametrize(
    ("shape", "electrons"), [("square", 4), ("square", 9), ("hexagonal", 7), ("hexagonal", 16)]
)
def test_torus_energy_with_its_finite_size_law(sampled: Sampler, shape: str, electrons: int) -> None:
    require_torus_energy(sampled(1, electrons, shape=shape, sweeps=4000), FILLED_LEVEL_ENERGY, shape)


def test_torus_energy_of_the_large_cell(filled: Liquid) -> None:
    require_torus_energy(filled, FILLED_LEVEL_ENERGY, "hexagonal")
