"""Self-energies of a charge on a torus against closed forms and against other ways to sum."""

import math

import mpmath
import numpy as np
import pytest
from scipy.special import erfc

from mcgeo.geometry.cell import SHAPES, Cell
from mcgeo.geometry.ewald import madelung_self_energy
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb, Gaussian


def square_constant():
    """4 zeta(1/2) beta(1/2), beta(s) = 4^-s [zeta(s, 1/4) - zeta(s, 3/4)]."""
    s = mpmath.mpf(1) / 2
    beta = mpmath.mpf(4) ** -s * (mpmath.zeta(s, mpmath.mpf(1) / 4) - mpmath.zeta(s, mpmath.mpf(3) / 4))
    return 4 * mpmath.zeta(s) * beta


def hexagonal_constant():
    """6 zeta(1/2) L(1/2, chi_-3) (sqrt(3)/2)^(1/2), L(s, chi_-3) = 3^-s [zeta(s, 1/3) - zeta(s, 2/3)]."""
    s = mpmath.mpf(1) / 2
    series = mpmath.mpf(3) ** -s * (mpmath.zeta(s, mpmath.mpf(1) / 3) - mpmath.zeta(s, mpmath.mpf(2) / 3))
    return 6 * mpmath.zeta(s) * series * mpmath.sqrt(mpmath.sqrt(3) / 2)


def madelung_constant(tau):
    """xi sqrt(A) of any lattice: its Epstein zeta function at 1/2 by the formula of Chowla and Selberg.

    With y = Im tau, sqrt(y) {2 [gamma + log(y/4 pi)] + 8 sum_n d(n) K_0(2 pi n y) cos(2 pi n Re tau)}, d(n) the number
    of divisors (Selberg and Chowla, J. reine angew. Math. 227, 86 (1967), at s -> 1/2, where two poles cancel).
    """
    x, y = mpmath.mpf(tau.real), mpmath.mpf(tau.imag)
    total = 2 * (mpmath.euler + mpmath.log(y / (4 * mpmath.pi)))
    for n in range(1, 1 + math.ceil(8 / tau.imag)):
        divisors = sum(1 for d in range(1, n + 1) if n % d == 0)
        total += 8 * divisors * mpmath.besselk(0, 2 * mpmath.pi * n * y) * mpmath.cos(2 * mpmath.pi * n * x)
    return mpmath.sqrt(y) * total


def has_constant(cell, metric, constant):
    """xi of the cell times the root of its area, to 12 digits."""
    assert madelung_self_energy(cell, metric) * math.sqrt(cell.area) == pytest.approx(float(constant), abs=1e-12)


def test_square_and_hexagonal_lattice():
    # Bonsall and Maradudin, Phys. Rev. B 15, 1959 (1977), give half of them: -1.950132 and -1.960515.
    has_constant(Cell.from_tau(1j, 7), ISOTROPIC, square_constant())
    has_constant(Cell.from_tau(SHAPES["hexagonal"], 20), ISOTROPIC, hexagonal_constant())
    assert float(hexagonal_constant()) / 2 == pytest.approx(-1.960515789, abs=1e-9)
    with pytest.raises(AssertionError):
        has_constant(Cell.from_tau(1j, 7), ISOTROPIC, square_constant() + 1e-11)
    with pytest.raises(AssertionError):
        has_constant(Cell.from_tau(1j, 7), UnimodularMetric(1e-4), square_constant())


@pytest.mark.parametrize(
    ("ratio", "half_constant"),
    # Exact values computed independently of this package.
    [
        (1.5, -1.89616633662781465),
        (2.0, -1.78283754335690133),
        (3.0, -1.48124341767187487),
        (4.0, -1.13502844187152989),
    ],
)
def test_rectangles(ratio, half_constant):
    for tau in (complex(0.0, ratio), complex(0.0, 1.0 / ratio)):
        has_constant(Cell.from_tau(tau, 12), ISOTROPIC, 2.0 * half_constant)
    assert float(madelung_constant(complex(0.0, ratio))) == pytest.approx(2.0 * half_constant, abs=1e-14)


@pytest.mark.parametrize("tau", [complex(0.31, 0.97), complex(-0.5, 2.0), complex(0.2, 9.0), complex(1.7, 0.6)])
def test_any_lattice_against_its_zeta_function(tau):
    has_constant(Cell.from_tau(tau, 33), ISOTROPIC, madelung_constant(tau))


@pytest.mark.parametrize("m", [[[1, 1], [0, 1]], [[0, 1], [-1, 0]], [[2, 1], [5, 3]], [[-1, 0], [3, -1]]])
def test_any_basis_of_the_lattice(m):
    cell, metric = Cell.from_tau(complex(0.2, 1.3), 10), UnimodularMetric(0.8, 0.5)
    other = Cell(np.array(m) @ cell.vectors)
    for interaction in (Coulomb(), Gaussian(1.3), Gaussian(6.0)):
        assert interaction.self_energy(other) == pytest.approx(interaction.self_energy(cell), abs=1e-13)
    assert madelung_self_energy(other, metric) == pytest.approx(madelung_self_energy(cell, metric), abs=1e-13)


def lattice_sum(vectors, reach, function):
    n1, n2 = np.meshgrid(np.arange(-reach, reach + 1), np.arange(-reach, reach + 1))
    integers = np.stack([n1.ravel(), n2.ravel()], axis=1)
    return function(integers[np.any(integers != 0, axis=1)] @ vectors).sum()


def anisotropic_ewald_sum(cell, g, split):
    """Ewald's sum for 1/sqrt(r.g.r) in the lab: screening clouds with the symmetry of g and width 1/split."""
    inverse = np.linalg.inv(g)

    def near(r):
        length = np.sqrt(np.einsum("na,ab,nb->n", r, g, r))
        return erfc(split * length) / length

    def far(q):
        length = np.sqrt(np.einsum("na,ab,nb->n", q, inverse, q))
        return erfc(length / (2.0 * split)) / length

    area = abs(np.linalg.det(cell.vectors))
    dual = 2.0 * math.pi * np.linalg.inv(cell.vectors).T
    return (
        lattice_sum(cell.vectors, 40, near)
        + 2.0 * math.pi / area * lattice_sum(dual, 40, far)
        - 2.0 * split / math.sqrt(math.pi)
        - 2.0 * math.sqrt(math.pi) / (split * area)
    )


@pytest.mark.parametrize("metric", [UnimodularMetric(0.7, 0.3), UnimodularMetric(2.0, -1.0), UnimodularMetric(1.1)])
@pytest.mark.parametrize("tau", [1j, complex(0.3, 1.4)])
def test_dielectric_metric(tau, metric):
    cell = Cell.from_tau(tau, 8)
    found = madelung_self_energy(cell, metric)
    for factor in (0.7, 1.6):
        split = factor * math.sqrt(math.pi / cell.area)
        assert found == pytest.approx(anisotropic_ewald_sum(cell, metric.matrix, split), abs=1e-12)
        if tau.real:
            # A square cannot tell a metric from its inverse, an oblique cell must.
            assert abs(found - anisotropic_ewald_sum(cell, metric.inverse_matrix, split)) > 1e-3
    # A metric is a change of the lattice, whose zeta function is known.
    (x1, y1), (x2, y2) = cell.vectors @ metric.linear_map.T
    has_constant(cell, metric, madelung_constant(complex(x2, y2) / complex(x1, y1)))


def gaussian_by_images(cell, width):
    """sum over images of exp(-R^2/2 s^2)/s^2, less the background 2 pi/A."""

    def image(r):
        return np.exp(-np.sum(r**2, axis=-1) / (2.0 * width**2)) / width**2

    return lattice_sum(cell.vectors, 60, image) - 2.0 * math.pi / cell.area


@pytest.mark.parametrize("tau", [1j, complex(0.5, 0.9), complex(1.2, 2.5)])
@pytest.mark.parametrize("width", [0.3, 1.0, 3.0, 3.6, 8.0, 20.0])
def test_gaussian(tau, width):
    cell = Cell.from_tau(tau, 6)
    assert Gaussian(width).self_energy(cell) == pytest.approx(gaussian_by_images(cell, width), abs=1e-14)


def test_self_energy_is_the_limit_of_a_potential():
    # Potential of all images at a point near the charge, less 1/r; what is left is of the order r^2.
    cell = Cell.from_tau(complex(0.3, 1.1), 5)
    xi = Coulomb().self_energy(cell)
    split = 1.3 * math.sqrt(math.pi / cell.area)

    def difference(r):
        near = lattice_sum(
            cell.vectors, 12, lambda R: erfc(split * np.hypot(*(R - r).T)) / np.hypot(*(R - r).T)
        )
        waves = 2.0 * math.pi * np.linalg.inv(cell.vectors).T
        far = lattice_sum(
            waves, 20, lambda q: np.cos(q @ r) * erfc(np.hypot(*q.T) / (2.0 * split)) / np.hypot(*q.T)
        )
        length = math.hypot(*r)
        smooth = -math.erf(split * length) / length - 2.0 * math.sqrt(math.pi) / (split * cell.area)
        return near + 2.0 * math.pi / cell.area * far + smooth - xi

    near, far = difference(np.array([1e-3, 5e-4])), difference(np.array([2e-3, 1e-3]))
    assert abs(near) < 1e-6
    assert far / near == pytest.approx(4.0, rel=1e-2)
