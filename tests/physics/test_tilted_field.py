"""Tilted field in a parabolic well: frequencies, form factors and interactions against other roads to them."""

import itertools
import math
from fractions import Fraction

import numpy as np
import pytest
from scipy import integrate
from scipy.special import erfcx, wofz

from mcgeo.errors import GeometryError
from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.finite_width import GaussianWell
from mcgeo.problem.interaction import Coulomb, Gaussian
from mcgeo.problem.landau_level import LandauOrbit
from mcgeo.problem.problem import Problem
from mcgeo.problem.tilted_field import TiltedField, TiltedOrbit
from mcgeo.variational.energy_surface import EnergySurface
from mcgeo.variational.minimum import find_minimum
from tests.exact.coupled_oscillators import CoupledOscillators

WAVES = np.array([[0.3, 0.0], [0.0, -1.1], [1.4, 0.8], [-2.0, 1.7], [4.0, 3.0]])
# c_m of nu = 1/3 from Girvin, MacDonald and Platzman, Phys. Rev. B 33, 2481 (1986), table I, from memory.
THIRD = [-1.0, 0.51053, -0.02056, 0.31003, -0.4905, 0.20102, -0.00904, -0.00148]
_STATES = 20


def liquid():
    return PairOccupations("1/3", Fraction(1, 3), "fermions", np.arange(1, 16, 2), np.array([THIRD, THIRD]))


@pytest.mark.parametrize("confinement", [0.4, 1.0, 2.5])
@pytest.mark.parametrize("angle", [0.0, 0.5, 1.2])
def test_frequencies(angle, confinement):
    # J. C. Maan (1984); R. Merlin, Solid State Commun. 64, 99 (1987), from memory, in units of the component across the
    # plane: 2 w^2 = w_t^2 + w_0^2 +- sqrt((w_t^2 + w_0^2)^2 - 4 w_0^2), w_t = 1/cos of the whole field.
    total = 1.0 / math.cos(angle) ** 2 + confinement**2
    root = math.sqrt(total**2 - 4.0 * confinement**2)
    modes = [math.sqrt((total - root) / 2.0), math.sqrt((total + root) / 2.0)]
    orbit = TiltedOrbit(ISOTROPIC, TiltedField(angle, confinement, 0.7))
    np.testing.assert_allclose(sorted(orbit.frequencies), modes, rtol=1e-12)
    # The cyclotron's mode is the lower one of the two where the well is stiff.
    assert orbit.frequencies[0] == pytest.approx(modes[0 if confinement >= 1.0 else 1], rel=1e-12)


CASES = [
    (ISOTROPIC, TiltedField(0.6, 2.0), 0),
    (UnimodularMetric(0.5, 0.3), TiltedField(0.8, 1.7, -0.4, 0, 1.3), 0),
    (UnimodularMetric(0.4, 1.0), TiltedField(0.5, 0.6, 0.9, 0, 0.8), 1),
    (UnimodularMetric(0.3, -0.2), TiltedField(0.7, 2.3, 0.5, 1, 1.2), 1),
    (ISOTROPIC, TiltedField(0.5, 2.6, 1.1, 1), 2),
]


def require_form_factor(orbit, coupled):
    """The orbit's form factor is that of the same state found by diagonalisation."""
    energy = sum(
        w * (n + 0.5) for w, n in zip(orbit.frequencies, (orbit.level, orbit.tilt.subband), strict=True)
    )
    state = coupled.state_of_energy(energy, 2e-3)
    waves = np.array([[0.4, 0.2, 0.0], [0.9, -0.5, 0.7], [-0.3, 1.1, -1.2], [0.0, 0.0, 0.8], [1.5, 0.6, -0.5]])
    expected = [coupled.form_factor_sq(state, tuple(q)) for q in waves]
    np.testing.assert_allclose(orbit.form_factor_sq(waves), expected, atol=2e-7)


@pytest.mark.parametrize(("mass", "tilt", "level"), CASES)
def test_form_factor_is_that_of_the_diagonalised_state(mass, tilt, level):
    field = math.tan(tilt.angle) * np.array([math.cos(tilt.direction), math.sin(tilt.direction)])

    def coupled(x, y):
        return CoupledOscillators(mass.inverse_matrix, (x, y), tilt.confinement, tilt.mass_across, _STATES)

    require_form_factor(TiltedOrbit(mass, tilt, level), coupled(*field))
    # A field that leans the other way makes another state of the same energy.
    with pytest.raises(AssertionError):
        require_form_factor(TiltedOrbit(mass, tilt, level), coupled(*-field))


def potential_by_quadrature(orbit, q, ratio=1.0):
    """int dq_z/(2 pi) 4 pi r/(q^2 + r^2 q_z^2) F^2 with q_z = q sinh u, in pieces about the top of F^2."""
    length = math.hypot(*q)
    r = math.sqrt(ratio)

    def integrand(u):
        z = length * math.sinh(u)
        factor = float(orbit.form_factor_sq(np.array([q[0], q[1], z])))
        return 2.0 * r * factor * length * math.cosh(u) / (length**2 + (r * z) ** 2)

    edges = np.linspace(-math.asinh(60.0 / length), math.asinh(60.0 / length), 61)
    return sum(
        integrate.quad(integrand, a, b, epsabs=1e-16, epsrel=1e-12)[0]
        for a, b in itertools.pairwise(edges)
    )


@pytest.mark.parametrize(("mass", "tilt", "level"), [*CASES, (ISOTROPIC, TiltedField(1.2, 0.4, 0.2, 1), 2)])
def test_effective_potential_is_the_integral_across_the_plane(mass, tilt, level):
    orbit = TiltedOrbit(mass, tilt, level)
    found = orbit.effective_potential(WAVES, Coulomb())
    exact = [potential_by_quadrature(orbit, q) for q in WAVES]
    np.testing.assert_allclose(found, exact, rtol=1e-9, atol=1e-15)
    assert orbit.effective_potential(np.stack([WAVES, -WAVES]), Coulomb()).shape == (2, 5)


def test_permittivity_across_the_plane():
    tilt = TiltedField(0.8, 1.3, 0.4, 1, 1.2, 0.6)
    orbit = TiltedOrbit(ISOTROPIC, tilt, 1)
    found = orbit.effective_potential(WAVES, Coulomb())
    exact = [potential_by_quadrature(orbit, q, 0.6) for q in WAVES]
    np.testing.assert_allclose(found, exact, rtol=1e-9, atol=1e-15)
    assert np.all(np.abs(found[:3] / [potential_by_quadrature(orbit, q) for q in WAVES[:3]] - 1.0) > 1e-3)


@pytest.mark.parametrize("scale", [1e-7, 1e-3, 1.0])
def test_lowest_state_in_closed_form(scale):
    # F^2 = exp(-(A z^2 + 2 B z + C)): int e^(-A (z + B/A)^2)/(z^2 + q^2) dz = (pi/q) Re w(sqrt(A) (B/A + iq)) with the
    # complex error function w of SciPy. The forms of the modes are read off the form factor itself.
    orbit = TiltedOrbit(UnimodularMetric(0.5, 0.3), TiltedField(1.0, 0.8, -0.4))

    def exponent(q):
        return -math.log(float(orbit.form_factor_sq(np.array(q))))

    a = exponent([0.0, 0.0, 1.0])
    for q in scale * WAVES:
        unit = q / scale
        c = exponent([*unit, 0.0]) * scale**2
        b = 0.5 * (exponent([*unit, 1.0]) - exponent([*unit, 0.0]) - a) * scale
        length = math.hypot(*q)
        expected = 2.0 * math.pi / length * math.exp(b * b / a - c) * wofz(math.sqrt(a) * complex(b / a, length)).real
        assert orbit.effective_potential(q, Coulomb()) == pytest.approx(expected, rel=1e-11)


@pytest.mark.parametrize("level", [0, 1, 2])
def test_no_tilt_is_a_layer_of_gaussian_density(level):
    metric, tilt = UnimodularMetric(0.6, 0.4), TiltedField(0.0, 1.7, 0.3, 0, 0.9)
    found = TiltedOrbit(metric, tilt, level).effective_potential(WAVES, Coulomb())
    q, width = np.hypot(*WAVES.T), tilt.width / math.sqrt(2.0)
    thin = LandauOrbit(metric, level).form_factor_sq(WAVES)
    np.testing.assert_allclose(found, 2.0 * math.pi / q * erfcx(q * width) * thin, rtol=1e-11)
    np.testing.assert_allclose(found, LandauOrbit(metric, level).effective_potential(WAVES, GaussianWell(width)))


def test_no_tilt_in_the_second_subband():
    # Density (2 z^2/l^2) exp(-z^2/l^2)/(l sqrt(pi)); int rho rho' exp(-q|z - z'|) by plain double quadrature.
    tilt, q = TiltedField(0.0, 1.7, 0.0, 1), np.array([0.6, 0.9])
    length, wave = tilt.width, math.hypot(*q)

    def density(z):
        return 2.0 * z * z / length**3 * math.exp(-((z / length) ** 2)) / math.sqrt(math.pi)

    half, _ = integrate.dblquad(
        lambda z, w: density(z) * density(w) * math.exp(-wave * (w - z)), -7.0, 7.0, -7.0, lambda w: w, epsabs=1e-10
    )
    expected = 2.0 * math.pi / wave * 2.0 * half * math.exp(-wave * wave / 2.0)
    assert TiltedOrbit(ISOTROPIC, tilt).effective_potential(q, Coulomb()) == pytest.approx(expected, rel=1e-8)


@pytest.mark.parametrize("level", [0, 1, 2])
def test_no_width_and_no_tilt_is_the_thin_layer(level):
    metric = UnimodularMetric(0.7, -0.5)
    thin = LandauOrbit(metric, level)
    tilted = TiltedOrbit(metric, TiltedField(0.0, 1e16), level)
    np.testing.assert_allclose(
        tilted.effective_potential(WAVES, Coulomb()), thin.effective_potential(WAVES, Coulomb()), rtol=1e-6, atol=1e-30
    )
    assert tilted.metric.distance(metric) < 1e-9
    assert tilted.reach == pytest.approx(thin.reach)


@pytest.mark.parametrize("ratio", [0.3, 1.0, 2.0])
def test_stiff_well_makes_the_mass_heavier_across_the_in_plane_field(ratio):
    # A stiff well keeps z where H is least at the given P: P_perp^2/2 becomes P_perp^2/(2 (1 + w_par^2/w_0^2)), w_par
    # the cyclotron frequency of the in-plane field.
    confinement = 3e4
    orbit = TiltedOrbit(ISOTROPIC, TiltedField(math.atan(ratio * confinement), confinement, 0.4))
    expected = UnimodularMetric(0.5 * math.log(1.0 + ratio**2), 0.4 + math.pi / 2)
    assert orbit.metric.distance(expected) < 1e-4
    assert orbit.frequencies[0] == pytest.approx(1.0 / math.sqrt(1.0 + ratio**2), rel=1e-6)
    np.testing.assert_allclose(
        orbit.effective_potential(WAVES, Coulomb()) / LandauOrbit(expected).effective_potential(WAVES, Coulomb()),
        1.0, atol=0.2,
    )  # fmt: skip


def test_energies_of_an_untilted_well_are_those_of_the_gaussian_layer():
    tilt = TiltedField(0.0, 2.2)
    well = GaussianWell(tilt.width / math.sqrt(2.0))
    metric = UnimodularMetric(0.4, 0.2)
    for level in (0, 1):
        energies = [
            EnergySurface(liquid(), problem).energy(metric)
            for problem in (Problem(ISOTROPIC, Coulomb(), level, tilt), Problem(ISOTROPIC, well, level))
        ]
        assert energies[0] == pytest.approx(energies[1], abs=1e-12)


def test_the_hole_follows_the_field():
    tilt = TiltedField(1.1, 0.7)
    found = find_minimum(EnergySurface(liquid(), Problem(ISOTROPIC, Coulomb(), 0, tilt)))
    orbit = TiltedOrbit(ISOTROPIC, tilt).metric
    # Heavy, hence short, across the in-plane field, which lies along x; the hole less so than the orbit.
    assert abs(abs(orbit.angle) - math.pi / 2) < 1e-9
    assert found.metric.angle == pytest.approx(orbit.angle, abs=1e-9)
    assert 0.02 < found.metric.stretch < 0.6 * orbit.stretch
    turned = TiltedField(tilt.angle, tilt.confinement, 0.5)
    again = find_minimum(EnergySurface(liquid(), Problem(ISOTROPIC, Coulomb(), 0, turned)))
    assert again.metric.distance(found.metric.turned(0.5)) < 1e-7
    assert again.energy.value == pytest.approx(found.energy.value, abs=1e-11)


def test_mass_and_dielectric_in_a_tilted_field_are_a_change_of_frame():
    # Where mass and dielectric have one metric S^T S, both are isotropic in the coordinates S r, and the in-plane field
    # is S times what it was: an isotropic problem with another tilt.
    metric, tilt = UnimodularMetric(0.6, 0.3), TiltedField(0.9, 1.6, 0.8)
    field = math.tan(tilt.angle) * np.array([math.cos(tilt.direction), math.sin(tilt.direction)])
    seen = metric.linear_map @ field
    other = TiltedField(math.atan(math.hypot(*seen)), tilt.confinement, math.atan2(seen[1], seen[0]))
    anisotropic = EnergySurface(liquid(), Problem(metric, Coulomb(metric), 0, tilt))
    isotropic = EnergySurface(liquid(), Problem(ISOTROPIC, Coulomb(), 0, other))
    hole = UnimodularMetric(0.4, -0.7)
    assert anisotropic.energy(metric.composed_with(hole)) == pytest.approx(isotropic.energy(hole), abs=1e-9)


def test_what_is_refused():
    for arguments in ((math.pi / 2, 1.0), (-0.1, 1.0), (0.3, 0.0), (0.3, math.inf), (0.3, 1.0, 0.0, 0, -1.0)):
        with pytest.raises(GeometryError, match=r"tilted by|must be positive"):
            TiltedField(*arguments)
    with pytest.raises(GeometryError, match="Coulomb"):
        TiltedOrbit(ISOTROPIC, TiltedField(0.3, 1.0)).effective_potential(WAVES, Gaussian(1.0))
