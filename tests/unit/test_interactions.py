"""Interactions, Landau orbits and masses against Fourier integrals and oscillator states."""

import math

import mpmath
import numpy as np
import pytest
from numpy.polynomial.hermite import hermval
from scipy import integrate
from scipy.special import j0

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import INTERACTIONS, Coulomb, Gaussian
from mcgeo.problem.landau_level import form_factor_sq
from mcgeo.problem.mass import mass_metric_from_axes, mass_metric_from_ratio, mass_metric_from_tensor
from mcgeo.problem.problem import Problem

WAVEVECTORS = np.array([[0.3, 0.0], [0.0, -1.1], [1.4, 0.8], [-2.0, 1.7]])


@pytest.mark.parametrize("q", WAVEVECTORS[1:3])
def test_coulomb_is_the_transform_of_one_over_r(q):
    length = mpmath.mpf(math.hypot(*q))
    exact = mpmath.quadosc(lambda r: mpmath.besselj(0, length * r), [0, mpmath.inf], omega=length)
    assert Coulomb().potential(q) == pytest.approx(2.0 * math.pi * float(exact), rel=1e-12)


@pytest.mark.parametrize("q", WAVEVECTORS)
@pytest.mark.parametrize("width", [0.4, 1.0, 2.5])
def test_gaussian_is_the_transform_of_its_profile(width, q):
    interaction, length = Gaussian(width), math.hypot(*q)

    def integrand(r):
        return 2.0 * math.pi * r * math.exp(-(r**2) / (2.0 * width**2)) / width**2 * j0(length * r)

    exact, _ = integrate.quad(integrand, 0.0, 12.0 * width, epsabs=1e-13, epsrel=1e-13, limit=200)
    assert interaction.potential(q) == pytest.approx(exact, abs=1e-11)
    assert f"{width:g}" in interaction.name


def test_interactions_take_stacks_of_wavevectors():
    stack = np.stack([WAVEVECTORS, 2.0 * WAVEVECTORS])
    for made in (INTERACTIONS["coulomb"](), INTERACTIONS["gaussian"](range=1.5)):
        assert made.potential(stack).shape == (2, 4)
        assert made.potential(stack)[1, 2] == made.potential(2.0 * WAVEVECTORS[2])
        assert made.symmetry == ISOTROPIC


def oscillator_form_factor(level, q):
    """<n| exp(i q x) |n> of the harmonic oscillator, from its wavefunction (x in units of l_B)."""
    norm = 2.0**level * math.factorial(level) * math.sqrt(math.pi)
    coefficients = np.eye(level + 1)[level]

    def density(x):
        return hermval(x, coefficients) ** 2 * math.exp(-(x**2)) / norm * math.cos(q * x)

    return integrate.quad(density, -12.0, 12.0, epsabs=1e-13, epsrel=1e-13, limit=300)[0]


@pytest.mark.parametrize("level", [0, 1, 2])
@pytest.mark.parametrize("q", [0.2, 1.0, 2.4, 4.0])
def test_form_factor_is_that_of_an_oscillator(q, level):
    # Kinetic momenta pi_x, pi_y are one oscillator; exp(iq.r) splits into it and the guiding centre.
    expected = oscillator_form_factor(level, q) ** 2
    assert form_factor_sq(np.array([0.0, q]), level, ISOTROPIC) == pytest.approx(expected, abs=1e-12)


@pytest.mark.parametrize(("ratio", "angle"), [(4.0, 0.0), (9.0, 0.6), (0.3, -1.0)])
def test_orbit_of_a_mass(ratio, angle):
    """F_0^2 is the transform of the density exp(-r.g.r/2)/2 pi of the orbit centred at the origin.

    In a field m_x v_x = -eB y and m_y v_y = eB x about the centre, so a classical orbit of fixed energy is the ellipse
    x^2/m_y + y^2/m_x = const: narrow along the heavy axis, g = diag(a, 1/a) with a^2 = m_x/m_y.
    """
    a = math.sqrt(ratio)
    metric = mass_metric_from_ratio(ratio, angle)
    c, s = math.cos(angle), math.sin(angle)

    for q in WAVEVECTORS:
        along, across = c * q[0] + s * q[1], -s * q[0] + c * q[1]

        def part(k, stiffness):
            return integrate.quad(
                lambda x: math.exp(-0.5 * stiffness * x**2) * math.cos(k * x) / math.sqrt(2.0 * math.pi / stiffness),
                -20.0, 20.0, epsabs=1e-13, limit=300,
            )[0]  # fmt: skip

        expected = part(along, a) * part(across, 1.0 / a)
        assert form_factor_sq(q, 0, metric) == pytest.approx(expected, abs=1e-11)


def test_effective_potential_is_the_product():
    metric, interaction = UnimodularMetric(0.8, 0.3), Gaussian(1.2)
    problem = Problem(metric, interaction, 1)
    for q in WAVEVECTORS:
        square = q @ np.linalg.inv(metric.matrix) @ q
        expected = 2.0 * math.pi * math.exp(-0.72 * (q @ q)) * (1.0 - square / 2.0) ** 2 * math.exp(-square / 2.0)
        assert problem.effective_potential(q) == pytest.approx(expected, rel=1e-12)
    assert not problem.is_symmetric
    assert problem.with_mass(ISOTROPIC).is_symmetric


@pytest.mark.parametrize(("first", "second", "angle"), [(0.2, 1.0, 0.0), (3.0, 0.5, 0.7), (1.0, 5.0, -1.3)])
def test_three_ways_to_write_a_mass(first, second, angle):
    axes = np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]])
    tensor = axes @ np.diag([first, second]) @ axes.T
    expected = tensor / math.sqrt(np.linalg.det(tensor))
    ways = [
        mass_metric_from_ratio(first / second, angle),
        mass_metric_from_axes((first, second), angle),
        mass_metric_from_tensor(0.5 * (tensor + tensor.T)),
    ]
    for metric in ways:
        np.testing.assert_allclose(metric.matrix, expected, atol=1e-13)
        assert math.exp(2.0 * metric.stretch) == pytest.approx(max(first / second, second / first), rel=1e-12)


@pytest.mark.parametrize("ratio", [0.0, -1.0, math.inf, math.nan])
def test_mass_ratios_refused(ratio):
    with pytest.raises(GeometryError, match="positive and finite"):
        mass_metric_from_ratio(ratio)


@pytest.mark.parametrize("masses", [(0.0, 1.0), (1.0, -1.0), (math.nan, 1.0), (math.inf, 1.0)])
def test_masses_refused(masses):
    with pytest.raises(GeometryError, match="positive"):
        mass_metric_from_axes(masses)


def test_mass_tensors_refused():
    with pytest.raises(GeometryError, match="positive definite"):
        mass_metric_from_tensor([[1.0, 2.0], [2.0, 1.0]])
