"""Self-energies on tori of any shape, against sums over images and Ewald's sums with other splittings."""

import math

import numpy as np
import pytest
from scipy import integrate
from scipy.special import erf, erfc, k0

from mcgeo.geometry.cell import Cell
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.dipole import Dipole
from mcgeo.problem.finite_width import FangHoward, GaussianWell, Softened, SquareWell
from mcgeo.problem.gaussian import Gaussian
from mcgeo.problem.pair_potential import PairPotential
from mcgeo.problem.screened import OneGate, TwoGates, Yukawa
from mcgeo.problem.self_energy import windowed_self_energy

CELLS = [
    Cell.from_tau(1j, 3),
    Cell.from_tau(complex(0.5, 0.8), 20),
    Cell.from_tau(complex(1.3, 0.3), 9),
    Cell.from_tau(complex(0.2, 6.0), 12),
]


def lattice(vectors, reach):
    n1, n2 = np.meshgrid(np.arange(-reach, reach + 1), np.arange(-reach, reach + 1))
    integers = np.stack([n1.ravel(), n2.ravel()], axis=1)
    return integers[np.any(integers != 0, axis=1)] @ vectors


def reduced_lattices(cell, reach=40):
    vectors = cell.reduced()[0].vectors
    return lattice(vectors, reach), lattice(2.0 * math.pi * np.linalg.inv(vectors).T, reach)


def layered_sum(cell, z, split):
    """Ewald's sum of 1/sqrt(R^2 + z^2) over images R, less the charge itself at R = 0.

    D. E. Parry, Surf. Sci. 49, 433 (1975); 54, 195 (1976); his term of q = 0 counts the field of charged planes,
    2 pi z/A, which is no part of a sum over q != 0.
    """
    images, waves = reduced_lattices(cell)
    distance, q = np.sqrt(np.sum(images**2, axis=-1) + z * z), np.hypot(*waves.T)
    near = np.sum(erfc(split * distance) / distance)
    up, down = q / (2.0 * split) + split * z, q / (2.0 * split) - split * z
    keep = q / (2.0 * split) < 7.0 + split * z
    far = np.sum(np.exp(q * z, where=keep, out=np.zeros_like(q)) * erfc(up) / q + np.exp(-q * z) * erfc(down) / q)
    uniform = math.exp(-((split * z) ** 2)) / split - math.sqrt(math.pi) * z * erfc(split * z)
    own = erf(split * z) / z if z > 0.0 else 2.0 * split / math.sqrt(math.pi)
    return near + math.pi / cell.area * far - 2.0 * math.sqrt(math.pi) * uniform / cell.area - own


def over_layers(cell, density, ends, split):
    """Mean of `layered_sum` over the distance z of two electrons across the layer, of the given density on z > 0."""
    nodes, weights = np.polynomial.legendre.leggauss(40)
    z = 0.5 * (ends[1] - ends[0]) * (nodes + 1.0) + ends[0]
    values = np.array([layered_sum(cell, float(x), split) for x in z])
    return 0.5 * (ends[1] - ends[0]) * np.sum(weights * values * np.array([density(float(x)) for x in z]))


@pytest.mark.parametrize("cell", CELLS)
@pytest.mark.parametrize("distance", [0.0, 0.05, 0.8, 4.0])
def test_softened_and_one_gate(cell, distance):
    for factor in (0.8, 1.3):
        split = factor * math.sqrt(math.pi / cell.area)
        exact = layered_sum(cell, distance, split)
        assert Softened(distance).self_energy(cell) == pytest.approx(exact, abs=1e-11)
        if distance > 0.0:
            gate = layered_sum(cell, 0.0, split) - layered_sum(cell, 2.0 * distance, split)
            assert OneGate(distance).self_energy(cell) == pytest.approx(gate, abs=1e-11)


def well_distances(z, w):
    """Density of |z - z'| in an infinite well, twice the correlation of (2/w) cos^2(pi z/w) with itself."""
    x = 2.0 * math.pi * z / w
    return 2.0 / w * ((1.0 - z / w) * (1.0 + 0.5 * math.cos(x)) + 3.0 / (4.0 * math.pi) * math.sin(x))


def gaussian_distances(z, s):
    return math.exp(-((z / (2.0 * s)) ** 2)) / (s * math.sqrt(math.pi))


def interface_distances(z, b):
    y = b * z
    return b * math.exp(-y) * (3.0 + 3.0 * y + y * y) / 8.0


LAYERS = [
    (SquareWell(1.5), lambda z: well_distances(z, 1.5), 1.5),
    (GaussianWell(0.5), lambda z: gaussian_distances(z, 0.5), 6.0),
    (FangHoward(3.0), lambda z: interface_distances(z, 3.0), 15.0),
]


@pytest.mark.parametrize(("interaction", "density", "last"), LAYERS)
@pytest.mark.parametrize("cell", CELLS)
def test_finite_width(cell, interaction, density, last):
    assert integrate.quad(density, 0.0, last)[0] == pytest.approx(1.0, abs=1e-9)
    exact = over_layers(cell, density, (0.0, last), 1.1 * math.sqrt(math.pi / cell.area))
    assert interaction.self_energy(cell) == pytest.approx(exact, abs=1e-9)


def between_gates(r, d):
    """V(r) of two gates by its modes, (2/d) sum_{k odd} K_0(pi k r/2d)."""
    return sum(2.0 / d * k0(math.pi * k * r / (2.0 * d)) for k in range(1, 61, 2))


@pytest.mark.parametrize("cell", CELLS)
@pytest.mark.parametrize("d", [0.5, 2.0, 10.0])
def test_two_gates(cell, d):
    images, _ = reduced_lattices(cell, 60)
    distances = np.hypot(*images.T)
    near = distances < 30.0 * d
    exact = np.sum(between_gates(distances[near], d)) - 2.0 * math.pi * d / cell.area
    assert TwoGates(d).self_energy(cell) == pytest.approx(exact, abs=1e-11)


@pytest.mark.parametrize("cell", CELLS)
@pytest.mark.parametrize("k", [0.3, 1.0, 4.0])
def test_yukawa(cell, k):
    images, _ = reduced_lattices(cell, 60)
    distances = np.hypot(*images.T)
    exact = np.sum(np.exp(-k * distances) / distances) - 2.0 * math.pi / (k * cell.area)
    assert Yukawa(k).self_energy(cell) == pytest.approx(exact, abs=1e-11)


@pytest.mark.parametrize("cell", CELLS)
@pytest.mark.parametrize(("tilt", "direction"), [(0.0, 0.0), (0.7, 0.4), (1.4, -1.0)])
def test_dipoles(cell, tilt, direction):
    """Sum over images of the interaction in space, far images in a soft circle, less V(q = 0)/A."""
    s = 0.2
    dipole = Dipole(s, tilt, direction)
    n = np.array(
        [math.sin(tilt) * math.cos(direction), math.sin(tilt) * math.sin(direction), math.cos(tilt)]
    )
    images, _ = reduced_lattices(cell, 400)
    distances = np.hypot(*images.T)
    radius = 120.0 * math.sqrt(cell.area) / math.sqrt(max(cell.reduced()[0].tau.imag, 1.0))
    end = 0.5 * erfc((distances - radius) / (0.1 * radius))
    z = np.linspace(-12.0 * s, 12.0 * s, 61)
    weight = np.exp(-((z / (2.0 * s)) ** 2)) / (2.0 * s * math.sqrt(math.pi)) * (z[1] - z[0])
    total = 0.0
    for height, part in zip(z, weight, strict=True):
        length = np.sqrt(distances**2 + height**2)
        cosine = (images @ n[:2] + height * n[2]) / length
        total += part * np.sum(end * (1.0 - 3.0 * cosine**2) / length**3)
    # What is beyond the circle: the mean over directions, int (1 - end) 2 pi dr/r^2.
    beyond = integrate.quad(lambda x: (1.0 - 0.5 * erfc(10.0 * (x - 1.0))) / x**2, 0.2, 2.0, epsabs=1e-12)[0] + 0.5
    total += 2.0 * math.pi / cell.area * (1.0 - 1.5 * math.sin(tilt) ** 2) * beyond / radius
    contact = 4.0 * math.pi * (math.cos(tilt) ** 2 - 1.0 / 3.0) / (2.0 * math.sqrt(math.pi) * s)
    assert dipole.self_energy(cell) == pytest.approx(total - contact / cell.area, abs=1e-8)


@pytest.mark.parametrize("cell", CELLS)
def test_the_window_against_closed_forms(cell):
    for interaction in (Coulomb(), Gaussian(0.4), Gaussian(3.0)):
        found = windowed_self_energy(interaction.potential, cell, 1)
        assert found == pytest.approx(interaction.self_energy(cell), abs=1e-12)
    # Of a dielectric the directions have to be resolved.
    dielectric = Coulomb(UnimodularMetric(1.0, 0.4))
    assert PairPotential.self_energy(dielectric, cell) == pytest.approx(dielectric.self_energy(cell), abs=1e-12)
    assert abs(windowed_self_energy(dielectric.potential, cell, 2) - dielectric.self_energy(cell)) > 1e-3


@pytest.mark.parametrize("interaction", [SquareWell(1e-9), GaussianWell(1e-9), FangHoward(1e10), TwoGates(1e9)])
def test_limits_are_coulomb(interaction):
    for cell in CELLS:
        assert interaction.self_energy(cell) == pytest.approx(Coulomb().self_energy(cell), abs=1e-7)
