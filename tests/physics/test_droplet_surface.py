"""Energy of a droplet over its metric, from exact occupations: no sampling, everything to rounding.

Held against tables of isotropic droplets, against plain quadrature in the lab, and, for an isotropic orbit, against
squeezed states expanded in angular momentum, which know nothing of the formula.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.integrate import quad
from scipy.linalg import expm
from scipy.special import eval_laguerre, gammaln, j1

from mcgeo.errors import GeometryError
from mcgeo.geometry.ellipse import NeutralisingEllipse, stretch_factor
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Gaussian, Interaction
from mcgeo.problem.power_law import PowerLaw
from mcgeo.problem.problem import Problem
from mcgeo.problem.screened import Yukawa
from mcgeo.variational.droplet_surface import DropletInteraction, DropletSurface, EnergyParts
from mcgeo.variational.energy_surface import DirectSurface
from mcgeo.variational.minimum import find_minimum
from tests.exact.droplet_values import ENERGIES, LAUGHLIN, MOORE_READ
from tests.physics.exact_droplets import Key, exact_occupations

Array = NDArray[np.float64]

SMALL = [key for key in ENERGIES if key[2] <= 4]
TILTED = UnimodularMetric(0.9, 0.4)
HOLE = UnimodularMetric(0.5, -0.7)


def parts_of(key: Key, problem: Problem, metric: UnimodularMetric) -> EnergyParts:
    return DropletInteraction(exact_occupations(key)).parts(problem, metric)


def values(parts: EnergyParts) -> list[float]:
    return [float(parts.electron_electron[0]), float(parts.electron_background[0]), parts.background_background]


@pytest.mark.parametrize("metric", [ISOTROPIC, TILTED, UnimodularMetric(3.0, 1.0)])
@pytest.mark.parametrize("key", SMALL, ids=str)
def test_product_wavefunctions(key: Key, metric: UnimodularMetric) -> None:
    # Orbit and hole alike, lowest level: the tables times the mean of |r'|/|r|.
    parts = parts_of(key, Problem(metric, Coulomb()), metric)
    expected = [stretch_factor(metric) * value for value in ENERGIES[key]]
    np.testing.assert_allclose([*values(parts), parts.total[0]], expected, atol=1e-11)


def by_quadrature(key: Key, problem: Problem, metric: UnimodularMetric) -> list[float]:
    """The three integrals in polar coordinates of the lab."""
    found = exact_occupations(key)
    n, radius = found.n_electrons, math.sqrt(2.0 * found.n_electrons / float(found.filling))
    w, l, orbitals = found.pair_samples[0], found.pair_momenta, found.orbital_samples[0]  # noqa: E741

    def integrand(q: float, angle: float, which: int) -> float:
        wave = q * np.array([math.cos(angle), math.sin(angle)])
        orbit = wave @ problem.mass_metric.inverse_matrix @ wave
        k_sq = wave @ metric.inverse_matrix @ wave
        x = math.sqrt(k_sq) * radius
        form_factor = eval_laguerre(problem.level, 0.5 * orbit) * math.exp(-0.25 * orbit)
        background = 2.0 * n * j1(x) / x
        if which == 0:
            pairs = (n - 1) * np.sum(w * eval_laguerre(l, k_sq)) * math.exp(-0.5 * k_sq)
            product = 0.5 * form_factor**2 * pairs
        elif which == 1:
            density = np.sum(orbitals * eval_laguerre(np.arange(len(orbitals)), 0.5 * k_sq)) * math.exp(-0.25 * k_sq)
            product = -form_factor * density * background / n
        else:
            product = 0.5 * background**2 / n
        return float(q * problem.interaction.potential(wave) * product) / (4.0 * math.pi**2)

    def inner(angle: float, which: int) -> float:
        return quad(integrand, 0.0, 15.0, args=(angle, which), epsabs=1e-11, limit=200)[0]

    # The mean over equidistant directions of half a turn converges as fast as any rule.
    angles = math.pi * np.arange(48) / 48
    return [2.0 * math.pi * np.mean([inner(angle, which) for angle in angles]) for which in range(3)]


@pytest.mark.parametrize(
    ("key", "interaction", "level"),
    [
        ((LAUGHLIN, 3, 2), Coulomb(), 0),
        ((LAUGHLIN, 3, 3), Coulomb(), 1),
        ((MOORE_READ, 2, 4), Gaussian(1.0), 1),
        ((LAUGHLIN, 2, 4), Coulomb(UnimodularMetric(0.4, 1.0)), 0),
    ],
)
def test_against_quadrature_in_the_lab(key: Key, interaction: Interaction, level: int) -> None:
    problem = Problem(TILTED, interaction, level)
    expected = by_quadrature(key, problem, HOLE)
    found = values(parts_of(key, problem, HOLE))
    # The transform of a background's Coulomb interaction with itself has a long tail; its closed form has its own test.
    n_compared = 2 if isinstance(interaction, Coulomb) else 3
    np.testing.assert_allclose(found[:n_compared], expected[:n_compared], atol=1e-8)
    for other in (Problem(HOLE, interaction, level), Problem(TILTED, interaction, 1 - level)):
        assert np.abs(np.subtract(values(parts_of(key, other, HOLE)), found)[:2]).max() > 1e-4


def squeezed(stretch: float, size: int = 160) -> Array:
    """<l'|S|l> of the squeezing by e^(-Q/2) along x and e^(Q/2) along y of one guiding centre, cut at ``size``."""
    lower = np.diag(np.sqrt(np.arange(1.0, size)), 1)
    return np.asarray(expm(0.25 * stretch * (lower @ lower - lower.T @ lower.T)))


@pytest.mark.parametrize("stretch", [0.0, 0.6, 1.2])
@pytest.mark.parametrize("key", SMALL, ids=str)
def test_pairs_as_squeezed_states(key: Key, stretch: float) -> None:
    # Isotropic orbits: a stretched pair is spread over other relative angular momenta, each of Coulomb energy
    # Gamma(l + 1/2)/(2 l!) (Haldane, Phys. Rev. Lett. 51, 605 (1983)).
    found = exact_occupations(key)
    probability = squeezed(stretch)[:, found.pair_momenta] ** 2 @ found.pair_samples[0]
    l = np.arange(len(probability))  # noqa: E741
    expected = 0.5 * (key[2] - 1) * np.sum(probability * 0.5 * np.exp(gammaln(l + 0.5) - gammaln(l + 1.0)))
    metric = UnimodularMetric(stretch)
    parts = parts_of(key, Problem(ISOTROPIC, Coulomb()), metric)
    assert parts.electron_electron[0] == pytest.approx(expected, abs=1e-9)


@pytest.mark.parametrize("key", [(LAUGHLIN, 3, 3), (MOORE_READ, 1, 4)], ids=str)
def test_electrons_in_the_ellipse_as_squeezed_states(key: Key) -> None:
    # The density of the squeezed droplet in space, in the field of the stretched ellipse.
    stretch, found = 0.8, exact_occupations(key)
    n_orbitals = found.orbital_samples.shape[1]
    amplitudes = squeezed(stretch)[:60, :n_orbitals]
    x, weights = np.polynomial.hermite.hermgauss(48)
    position = np.stack(np.meshgrid(x, x, indexing="ij"), axis=-1) * math.sqrt(2.0)
    z = (position[..., 0] + 1j * position[..., 1]) / math.sqrt(2.0)
    l = np.arange(60)  # noqa: E741
    # <r|l'> without its Gaussian: z'^l/sqrt(l!) of density exp(-|r|^2/2)/2 pi, z' = conj(z)/sqrt 2 or z/sqrt 2.
    orbitals = z[..., None] ** l * np.exp(-0.5 * gammaln(l + 1.0))
    density = np.abs(orbitals @ amplitudes) ** 2 @ found.orbital_samples[0]
    metric = UnimodularMetric(stretch)
    potential = NeutralisingEllipse(key[2], found.filling, metric).potential(position)
    measure = weights[:, None] * weights / math.pi
    assert np.sum(measure * density) == pytest.approx(key[2], abs=1e-9)
    energy = np.sum(measure * density * potential) / key[2]
    found_parts = parts_of(key, Problem(ISOTROPIC, Coulomb()), metric)
    # The potential is not smooth at the edge of the ellipse.
    assert found_parts.electron_background[0] == pytest.approx(energy, abs=2e-4)
    turned = parts_of(key, Problem(ISOTROPIC, Coulomb()), metric.inverse)
    assert turned.total[0] == pytest.approx(found_parts.total[0], abs=1e-12)
    assert abs(parts_of(key, Problem(metric, Coulomb()), metric).electron_background[0] - energy) > 2e-3


@pytest.mark.parametrize("metric", [ISOTROPIC, TILTED, UnimodularMetric(3.0, 1.0)])
def test_background_by_quadrature(metric: UnimodularMetric) -> None:
    # A Yukawa interaction without screening is Coulomb's, and is not known to be.
    interaction = DropletInteraction(exact_occupations((LAUGHLIN, 3, 4)))
    closed, numeric = (
        interaction.background_energy(Problem(metric, potential), metric) for potential in (Coulomb(), Yukawa(0.0))
    )
    assert numeric == pytest.approx(closed, abs=1e-10)
    assert interaction.background_energy(Problem(metric, Yukawa(0.1)), metric) < 0.9 * closed


@pytest.mark.parametrize("exponent", [0.4, 1.5])
def test_pairs_with_a_power_law(exponent: float) -> None:
    # V(q) has a singular power at small q. <r^-p> of a pair is 2^-p Gamma(l + 1 - p/2)/l!.
    key = (LAUGHLIN, 3, 3)
    found = exact_occupations(key)
    l = found.pair_momenta  # noqa: E741
    energies = np.exp(gammaln(l + 1.0 - 0.5 * exponent) - gammaln(l + 1.0)) / 2.0**exponent
    expected = 0.5 * (key[2] - 1) * float(found.pair_samples[0] @ energies)
    parts = parts_of(key, Problem(ISOTROPIC, PowerLaw(exponent)), ISOTROPIC)
    assert parts.electron_electron[0] == pytest.approx(expected, abs=1e-9)


@dataclass(frozen=True, eq=False)
class PairSurface(DirectSurface):
    """Electrons alone, without the background."""

    interaction: DropletInteraction
    problem: Problem

    def sample_energies(self, metric: UnimodularMetric) -> Array:
        energies = self.interaction.parts(self.problem, metric).electron_electron
        return np.repeat(energies, 2)


@pytest.mark.parametrize("width", [0.5, 1.0])
@pytest.mark.parametrize("ratio", [2.0, 4.0])
@pytest.mark.parametrize("key", [(LAUGHLIN, 3, 3), (LAUGHLIN, 2, 4)], ids=str)
def test_square_root_law_of_the_electrons_alone(key: Key, ratio: float, width: float) -> None:
    # V F^2 = 2 pi exp(-q.(s^2 + g_m^-1).q/2): in the frame of this form nothing prefers a direction, so that the hole
    # of the same shape is stationary.
    problem = Problem(UnimodularMetric(0.5 * math.log(ratio), 0.3), Gaussian(width))
    interaction = DropletInteraction(exact_occupations(key))
    a = math.sqrt(ratio)
    expected = 0.5 * math.log((a + width**2) / (1.0 / a + width**2))
    minimum = find_minimum(PairSurface(interaction, problem))
    assert minimum.interior
    assert minimum.metric.distance(UnimodularMetric(expected, 0.3)) < 1e-6
    # The background feels V with the form factor once, and with none: the law is not that of the whole.
    gradient = DropletSurface(interaction, problem).expansion_about(minimum.metric).gradient[0]
    assert np.hypot(*gradient) > 1e-5


def test_everything_turned() -> None:
    interaction = DropletInteraction(exact_occupations((MOORE_READ, 2, 4)))
    before = interaction.parts(Problem(TILTED, Coulomb(UnimodularMetric(0.4, 0.2)), 1), HOLE)
    turned = Problem(TILTED.turned(1.1), Coulomb(UnimodularMetric(0.4, 1.3)), 1)
    after = interaction.parts(turned, HOLE.turned(1.1))
    np.testing.assert_allclose(values(after), values(before), atol=1e-12)
    assert abs(interaction.mean(turned, HOLE) - before.total[0]) > 1e-3


def test_far_metrics_are_refused() -> None:
    surface = DropletSurface(DropletInteraction(exact_occupations((LAUGHLIN, 3, 2))), Problem(TILTED, Coulomb()))
    with pytest.raises(GeometryError, match="at most 4 works"):
        surface.energy(UnimodularMetric(4.0, 0.4 + math.pi / 2))
