"""Neutralising background and Coulomb sums of droplets against closed forms and plain quadrature."""

import math
from fractions import Fraction

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.special import ellipe, ellipk

from mcgeo.geometry.ellipse import NeutralisingEllipse, stretch_factor
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.kernels._jit import kernel
from mcgeo.kernels.droplet_counts import disk_profile, smoothed_coulomb
from mcgeo.kernels.lanes import LANES, load, store
from tests.exact.droplet_values import ENERGIES

# <1/|r|> over the metric circle by quadrature in 30 digits, computed independently of this package.
STRETCH_FACTORS = {
    1.1: 0.999432543406,
    1.5: 0.989820627712,
    2.0: 0.970773111746,
    4.0: 0.891651589987,
    9.0: 0.762149520073,
}
STRETCHED = NeutralisingEllipse(6, Fraction(1, 3), UnimodularMetric(math.log(3.0), 0.4))
# Inside, on both sides of the edge and outside; in units of the radius.
RADII = [0.0, 0.3, 0.9, 0.9999, 1.0, 1.0001, 1.2, 3.0]


def disk_potential(r, radius, density):
    """Uniform disk in its own plane; complete elliptic integrals of parameter k^2."""
    if r <= radius:
        return -4.0 * density * radius * ellipe((r / radius) ** 2)
    m = (radius / r) ** 2
    return -4.0 * density * r * (ellipe(m) - (1.0 - m) * ellipk(m))


def potential_by_chords(ellipse, position):
    """-rho times the length of ellipse seen along every direction, integrated over the directions."""
    metric = ellipse.metric.matrix

    def length(angle):
        n = np.array([math.cos(angle), math.sin(angle)])
        a, b = n @ metric @ n, position @ metric @ n
        root_sq = b * b - a * (position @ metric @ position - ellipse.radius**2)
        if root_sq <= 0.0:
            return 0.0
        root = math.sqrt(root_sq)
        return (max(root - b, 0.0) - max(-root - b, 0.0)) / a

    return -ellipse.density * quad(length, 0.0, 2.0 * math.pi, limit=2000, epsabs=1e-12, epsrel=1e-12)[0]


def on_circle(ellipse, u, angles):
    """Lab positions with r' = u R."""
    circle = u * ellipse.radius * np.stack([np.cos(angles), np.sin(angles)], axis=-1)
    return circle @ ellipse.metric.inverse_linear_map


@pytest.mark.parametrize(("aspect_ratio", "factor"), STRETCH_FACTORS.items())
def test_stretch_factor(aspect_ratio, factor):
    assert stretch_factor(UnimodularMetric.from_aspect_ratio(aspect_ratio, 0.2)) == pytest.approx(factor, abs=1e-12)


@pytest.mark.parametrize(("droplet", "energies"), ENERGIES.items())
def test_self_energy_of_the_disk(droplet, energies):
    _, exponent, n_electrons = droplet
    ellipse = NeutralisingEllipse(n_electrons, Fraction(1, exponent))
    assert ellipse.self_energy / n_electrons == pytest.approx(energies[2], abs=1e-10)


def test_self_energy_of_the_ellipse():
    # Half the charge times the mean potential; r' = R sqrt(s) with s uniform covers the ellipse evenly.
    nodes, weights = np.polynomial.legendre.leggauss(40)
    u = np.sqrt(1.0 - (0.5 - 0.5 * nodes) ** 4)
    measure = 2.0 * (0.5 - 0.5 * nodes) ** 3 * weights
    angles = 2.0 * math.pi * (np.arange(64) + 0.5) / 64
    mean = STRETCHED.potential(np.array([on_circle(STRETCHED, radius, angles) for radius in u])).mean(axis=1)
    assert STRETCHED.self_energy == pytest.approx(-0.5 * STRETCHED.n_electrons * measure @ mean, rel=1e-7)


@pytest.mark.parametrize("u", RADII)
def test_potential_of_the_disk(u):
    disk = NeutralisingEllipse(5, Fraction(1, 2))
    found = disk.potential(on_circle(disk, u, np.linspace(0.0, 6.0, 5)))
    expected = disk_potential(u * disk.radius, disk.radius, 1.0 / (4.0 * math.pi))
    np.testing.assert_allclose(found, expected, rtol=1e-12)


@pytest.mark.parametrize("u", RADII)
def test_potential_of_the_ellipse(u):
    position = on_circle(STRETCHED, u, np.array(1.1))
    assert STRETCHED.potential(position) == pytest.approx(potential_by_chords(STRETCHED, position), rel=1e-10)


@pytest.mark.parametrize("u", [0.4, 0.95, 1.3])
def test_mean_potential_over_directions(u):
    # What the energy of a rotation symmetric density in the ellipse's field rests on.
    angles = 2.0 * math.pi * np.arange(400) / 400
    potential = STRETCHED.potential(on_circle(STRETCHED, u, angles))
    disk = disk_potential(u * STRETCHED.radius, STRETCHED.radius, STRETCHED.density)
    assert potential.mean() == pytest.approx(stretch_factor(STRETCHED.metric) * disk, rel=1e-9)
    assert np.ptp(potential) > 0.02 * abs(disk)
    assert STRETCHED.potential_scale * ellipe(0.0) == pytest.approx(float(STRETCHED.potential([0.0, 0.0])), rel=1e-12)


@kernel
def on_lanes(value, close, out):
    store(out, 0, disk_profile(load(value, 0)))
    store(out, 1, smoothed_coulomb(load(value, 0), close))


def profile(u):
    out = np.empty((2, LANES))
    on_lanes(np.full((1, LANES), u * u), 0.5, out)
    return out[0, 0]


@pytest.mark.parametrize("u", [*RADII, 1.0 - 1e-9, 1.0 + 1e-9, 20.0])
def test_profile_in_the_kernel(u):
    assert profile(u) == pytest.approx(-disk_potential(u, 1.0, 0.25), rel=1e-12)


def smoothed(r, close):
    out = np.empty((2, LANES))
    on_lanes(np.full((1, LANES), r * r), close, out)
    return out[1, 0]


@pytest.mark.parametrize("close", [0.5, 0.3])
@pytest.mark.parametrize("power", [0, 1, 2])
def test_smoothed_coulomb_keeps_the_low_moments(close, power):
    nodes, weights = np.polynomial.legendre.leggauss(8)
    r = 0.5 * close * (nodes + 1.0)
    moment = 0.5 * close * sum(w * smoothed(x, close) * x ** (2 * power + 1) for w, x in zip(weights, r, strict=True))
    assert moment == pytest.approx(close ** (2 * power + 1) / (2 * power + 1), rel=1e-12)
    assert smoothed(1.001 * close, close) == pytest.approx(1.0 / (1.001 * close), rel=1e-13)


@pytest.mark.parametrize("angular_momentum", range(6))
def test_smoothed_coulomb_keeps_pair_energies(angular_momentum):
    # Pairs of relative angular momentum m: density r^(2m) exp(-r^2/4), V_m = Gamma(m + 1/2)/(2 m!) (Haldane 1983).
    m = angular_momentum
    exact = math.gamma(m + 0.5) / (2.0 * math.factorial(m))

    def integrand(r):
        return smoothed(r, 0.5) * r ** (2 * m + 1) * math.exp(-0.25 * r * r) / (2.0 * 4.0**m * math.factorial(m))

    found = quad(integrand, 0.0, 0.5, epsabs=1e-12)[0] + quad(integrand, 0.5, 20.0, epsabs=1e-12, limit=200)[0]
    assert found == pytest.approx(exact, abs=1e-6)
