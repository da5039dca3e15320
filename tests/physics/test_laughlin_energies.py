"""Coulomb energies and structure factors of Laughlin liquids on small tori, and their energies on the plane.

Tables: energies of the zero modes of Haldane's pseudopotentials (Phys. Rev. Lett. 51, 605 (1983)), exact, by
diagonalisation in second quantisation computed independently of this package.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pytest

from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.estimate.torus_energy import torus_energy
from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.interaction import Coulomb, Interaction
from mcgeo.problem.problem import Problem
from mcgeo.runs.liquid import Liquid
from mcgeo.variational.energy_surface import EnergySurface
from tests.exact.torus_diagonalisation import projected_coulomb_energy, zero_mode
from tests.exact.torus_shapes import TAU, cell, stretched
from tests.physics.checks import Sampler, mean_probability, require_agreement, require_unit_pulls
from tests.physics.closed_forms import finite_size_energy

# Laughlin 1/3, isotropic: N, square, hexagonal.
ONE_THIRD = [
    (4, -0.4141710479, -0.4142226439),
    (5, -0.4123992273, -0.4120638905),
    (6, -0.4115825593, -0.4113987749),
    (7, -0.4111001575, -0.4111678418),
    (8, -0.4109153977, -0.4109575768),
]
# Laughlin 1/3 of metric diag(gamma, 1/gamma) on the square cell: gamma, energies for N = 4, 5, 6, 7.
STRETCHED = [
    (1.25, (-0.4124468515, -0.4112376285, -0.4105543880, -0.4099371533)),
    (1.5, (-0.4084735598, -0.4084265072, -0.4080919658, -0.4073343644)),
    (2.0, (-0.3978874107, -0.3995624714, -0.4005633044, -0.4003474030)),
    (3.0, (-0.3818747827, -0.3780381498, -0.3796446995, -0.3819555009)),
    (4.0, (-0.3773538335, -0.3654403401, -0.3611506764, -0.3616780203)),
]
# Bosons at 1/2: N, square, hexagonal, square at gamma = 1.5, 2, 4.
BOSONS = [
    (4, -0.4910551304, -0.4911460384, -0.4855544368, -0.4759097096, -0.4572304908),
    (5, -0.4892169792, -0.4890830609, -0.4844014738, -0.4747372423, -0.4425402660),
    (6, -0.4880392103, -0.4879321056, -0.4834992349, -0.4744322339, -0.4357386759),
]


def pull(liquid: Liquid, exact: float, interaction: Interaction | None = None) -> float:
    energy = liquid.torus_energy(interaction or Coulomb())
    assert energy.error < 5e-4
    return (energy.value - exact) / energy.error


@pytest.mark.parametrize(("column", "shape"), [(1, "square"), (2, "hexagonal")])
def test_one_third(sampled: Sampler, column: int, shape: str) -> None:
    require_unit_pulls(
        [pull(sampled(3, row[0], shape=shape, seed=31 + column), row[column]) for row in ONE_THIRD]
    )


@pytest.mark.parametrize(("gamma", "exact"), STRETCHED)
def test_stretched_one_third_on_the_square(sampled: Sampler, gamma: float, exact: tuple[float, ...]) -> None:
    liquids = [sampled(3, n, shape="square", stretch=math.log(gamma), seed=41) for n in (4, 5, 6, 7)]
    require_unit_pulls([pull(liquid, energy) for liquid, energy in zip(liquids, exact, strict=True)])


@pytest.mark.parametrize(
    ("electrons", "angle_degrees", "exact"),
    [(4, 0.0, -0.4030650004), (4, 90.0, -0.3997977359), (6, 0.0, -0.4000339787), (6, 90.0, -0.4008826934)],
)
def test_hexagonal_cell_tells_a_metric_from_its_inverse(
    sampled: Sampler, electrons: int, angle_degrees: float, exact: float
) -> None:
    liquid = sampled(3, electrons, stretch=math.log(2.0), angle_degrees=angle_degrees, sweeps=4000, seed=43)
    require_unit_pulls([pull(liquid, exact)])


@pytest.mark.parametrize(("stretch", "angle_degrees"), [(0.6, 25.0), (1.0, 35.0)])
def test_metric_at_an_angle_in_an_oblique_cell(
    sampled: Sampler, stretch: float, angle_degrees: float
) -> None:
    tau = complex(-0.4, 0.7)
    metric = stretched(math.exp(stretch), math.radians(angle_degrees))
    exact = projected_coulomb_energy(cell(tau, 12), 12, 4, metric, metric)
    liquid = sampled(3, 4, tau=tau, stretch=stretch, angle_degrees=angle_degrees, sweeps=4000, seed=44)
    require_unit_pulls([pull(liquid, exact)])
    turned_wrongly = stretched(math.exp(stretch), math.radians(-angle_degrees))
    mirrored = projected_coulomb_energy(cell(tau, 12), 12, 4, turned_wrongly, turned_wrongly)
    with pytest.raises(AssertionError):
        require_unit_pulls([pull(liquid, mirrored)])


def test_bosons_at_one_half(sampled: Sampler) -> None:
    pulls = []
    for n, *energies in BOSONS:
        shapes = ["square", "hexagonal", "square", "square", "square"]
        for shape, gamma, exact in zip(shapes, (1.0, 1.0, 1.5, 2.0, 4.0), energies, strict=True):
            liquid = sampled(2, n, shape=shape, stretch=math.log(gamma), sweeps=4000, seed=51)
            pulls.append(pull(liquid, exact))
    require_unit_pulls(pulls)


@pytest.mark.parametrize(("electrons", "gamma"), [(4, 1.0), (4, 2.0), (6, 2.0)])
def test_structure_factor_wave_by_wave(sampled: Sampler, electrons: int, gamma: float) -> None:
    liquid = sampled(3, electrons, shape="square", stretch=math.log(gamma), seed=41)
    waves = liquid.frame.waves(liquid.q_max).vectors
    lattice = cell(TAU["square"], 3 * electrons)
    exact_state = zero_mode(lattice, 3 * electrons, electrons, stretched(gamma))[0]
    # Guiding centres are dressed with the orbit, of the same metric here.
    exact = 1.0 + np.exp(-0.5 * liquid.norm**2) * (exact_state.structure_factor(waves) - 1.0)
    error = liquid.structure_samples.std(axis=0, ddof=1) / math.sqrt(len(liquid.structure_samples))
    require_agreement(liquid.structure_samples.mean(axis=0), error, exact)
    few = slice(0, 30)
    samples = liquid.structure_samples[:, few]
    assert 1e-4 < mean_probability(samples, exact[few]) < 1.0 - 1e-4
    # The waves turned by a right angle, that is gamma -> 1/gamma, are another state unless gamma = 1.
    if gamma != 1.0:
        quarter_turn = waves[few] @ np.array([[0.0, 1.0], [-1.0, 0.0]])
        turned = exact_state.structure_factor(quarter_turn) - 1.0
        assert mean_probability(samples, 1.0 + np.exp(-0.5 * liquid.norm[few] ** 2) * turned) < 1e-6


@dataclass(frozen=True)
class WrongCell(Coulomb):
    """Coulomb with the self-energy of the hexagonal cell whatever the cell."""

    def self_energy(self, cell: Cell) -> float:
        return super().self_energy(Cell.from_shape("hexagonal", cell.n_flux))


@dataclass(frozen=True)
class WithoutLongestWaves(Coulomb):
    """Coulomb that loses the waves below 0.6, as a wrong cut at small q would."""

    def potential(self, wavevectors: np.ndarray) -> np.ndarray:
        return super().potential(wavevectors) * (np.hypot(wavevectors[..., 0], wavevectors[..., 1]) > 0.6)


@pytest.mark.parametrize("interaction", [WrongCell(), WithoutLongestWaves()])
def test_wrong_sums_are_seen(sampled: Sampler, interaction: Interaction) -> None:
    with pytest.raises(AssertionError):
        require_unit_pulls(
            [pull(sampled(3, n, shape="square", seed=32), exact, interaction) for n, exact, _ in ONE_THIRD]
        )


def plane_energy(liquid: Liquid) -> Estimate:
    surface = EnergySurface(liquid.occupations, Problem(ISOTROPIC, Coulomb()))
    return mean_estimate(surface.sample_energies(ISOTROPIC))


def torus_energy_extrapolated(liquid: Liquid) -> Estimate:
    energy = liquid.torus_energy(Coulomb())
    state = liquid.states[0]
    law = finite_size_energy(state.exponent, state.n_electrons, "hexagonal")
    return Estimate(energy.value - law, energy.error)


# Levesque, Weis and MacDonald, Phys. Rev. B 30, 1056 (1984): -0.4100(1) and -0.3277(2); Kamilla and Jain,
# Phys. Rev. B 55, R4895 (1997): -0.409828(27) and -0.327499(5); all from memory. Spheres of 10 to 60
# electrons, computed independently of this package, give -0.40976(2) and -0.32750(1), and -0.48459(3) for
# bosons at 1/2.
PLANE = [("third", -0.4098, 1e-4), ("fifth", -0.32750, 2e-5), ("bosons", -0.48459, 6e-5)]


@pytest.mark.parametrize(("name", "exact", "tolerance"), PLANE)
def test_energy_on_the_plane(
    request: pytest.FixtureRequest, name: str, exact: float, tolerance: float
) -> None:
    liquid = request.getfixturevalue(name)
    for energy in (plane_energy(liquid), torus_energy_extrapolated(liquid)):
        assert energy.error < 8e-5
        require_agreement(energy.value, energy.error, exact, tolerance)


@pytest.mark.parametrize("name", ["filled", "third", "fifth", "bosons"])
def test_two_roads_to_the_energy_of_the_plane(request: pytest.FixtureRequest, name: str) -> None:
    liquid = request.getfixturevalue(name)
    # Both come from one set of samples, so their difference has its own, smaller error.
    state = liquid.states[0]
    plane = EnergySurface(liquid.occupations, Problem(ISOTROPIC, Coulomb())).sample_energies(ISOTROPIC)
    torus = torus_energy(liquid.frame, liquid.q_max, Coulomb()).of(liquid.structure_samples)
    difference = mean_estimate(torus - plane)
    law = finite_size_energy(state.exponent, state.n_electrons, "hexagonal")
    require_agreement(difference.value, difference.error, law)
    if state.exponent > 1:
        # At m = 1 statistics do not yet tell the law's sign from none; elsewhere they must.
        with pytest.raises(AssertionError):
            require_agreement(difference.value, difference.error, -law)


def test_finite_size_law_is_needed(sampled: Sampler) -> None:
    # At N = 8 the law is 1.2e-3: the plane's energy follows from a torus of eight electrons only with it.
    liquid = sampled(3, 8, seed=33, sweeps=4000)
    energy = torus_energy_extrapolated(liquid)
    require_agreement(energy.value, energy.error, -0.4098, 1e-4)
    with pytest.raises(AssertionError):
        raw = liquid.torus_energy(Coulomb())
        require_agreement(raw.value, raw.error, -0.4098, 1e-4)
