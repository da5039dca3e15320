"""Powers of the distance against transforms and zeta functions."""

import math

import mpmath
import numpy as np
import pytest

from mcgeo.errors import GeometryError
from mcgeo.geometry.cell import SHAPES, Cell
from mcgeo.geometry.ewald import madelung_self_energy
from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.power_law import PowerLaw

EXPONENTS = [0.3, 0.7, 1.0, 1.4, 1.9]


@pytest.mark.parametrize("p", EXPONENTS)
@pytest.mark.parametrize("q", [0.3, 2.0])
def test_transform(p, q):
    """Between Gaussians int d^2r r^-p e^(-r^2/2) = int d^2q/(2 pi) V(q) e^(-q^2/2), and V(q) is a power of q."""

    def integral(power):
        """int_0^inf x^(power - 1) e^(-x^2/2) dx by t = x^power, without a singularity."""
        return float(mpmath.quad(lambda t: mpmath.exp(-(t ** (2 / power)) / 2), [0, 1, 12.0**power])) / power

    at_one = 2.0 * math.pi * integral(2.0 - p) / integral(p)
    assert PowerLaw(p).radial(np.array(q)) == pytest.approx(at_one * q ** (p - 2.0), rel=1e-10)


def test_one_over_r_is_coulomb():
    waves = np.array([[0.3, 0.1], [-2.0, 5.0]])
    np.testing.assert_allclose(PowerLaw(1.0).potential(waves), Coulomb().potential(waves), rtol=1e-14)
    cell = Cell.from_tau(complex(0.3, 1.2), 11)
    assert PowerLaw(1.0).self_energy(cell) == pytest.approx(madelung_self_energy(cell), abs=1e-13)


def square_zeta(s):
    """Sum over the square lattice of |n|^(-2s), continued: 4 zeta(s) beta(s)."""
    s = mpmath.mpf(s)
    beta = mpmath.mpf(4) ** -s * (mpmath.zeta(s, mpmath.mpf(1) / 4) - mpmath.zeta(s, mpmath.mpf(3) / 4))
    return 4 * mpmath.zeta(s) * beta


def hexagonal_zeta(s):
    """The same of the hexagonal lattice of unit area, 6 zeta(s) L(s, chi_-3) (sqrt(3)/2)^s."""
    s = mpmath.mpf(s)
    series = mpmath.mpf(3) ** -s * (mpmath.zeta(s, mpmath.mpf(1) / 3) - mpmath.zeta(s, mpmath.mpf(2) / 3))
    return 6 * mpmath.zeta(s) * series * mpmath.sqrt(3) ** s / mpmath.mpf(2) ** s


@pytest.mark.parametrize("p", EXPONENTS)
@pytest.mark.parametrize(("shape", "zeta"), [("square", square_zeta), ("hexagonal", hexagonal_zeta)])
def test_self_energy_is_a_zeta_function(shape, zeta, p):
    # Taking away the background is what analytic continuation in p does.
    cell = Cell.from_tau(SHAPES[shape], 9)
    exact = float(zeta(p / 2.0)) / cell.area ** (p / 2.0)
    assert PowerLaw(p).self_energy(cell) == pytest.approx(exact, abs=1e-13)
    assert abs(PowerLaw(p + 0.01).self_energy(cell) - exact) > 1e-4


@pytest.mark.parametrize("p", [0.0, 2.0, -1.0, math.nan])
def test_exponents_without_a_transform_are_refused(p):
    with pytest.raises(GeometryError, match="between 0 and 2"):
        PowerLaw(p)
