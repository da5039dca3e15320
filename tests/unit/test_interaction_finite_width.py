"""Layers of finite width: form factors against their densities, at all sizes of q against 40 digits, and limits."""

import math

import mpmath
import numpy as np
import pytest
from scipy import integrate

from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.finite_width import FangHoward, FiniteWidth, GaussianWell, Softened, SquareWell

Q = [1e-12, 1e-7, 1e-4, 0.01, 0.2, 0.249, 0.251, 1.0, 3.0, 20.0, 300.0]


def well_density(z, w):
    return 2.0 / w * math.cos(math.pi * z / w) ** 2 if abs(z) < w / 2.0 else 0.0


def interface_density(z, b):
    return 0.5 * b**3 * z * z * math.exp(-b * z) if z > 0.0 else 0.0


def gaussian_density(z, s):
    return math.exp(-z * z / (2.0 * s * s)) / math.sqrt(2.0 * math.pi * s * s)


DENSITIES = [
    (SquareWell(2.3), lambda z: well_density(z, 2.3), (-1.15, 1.15)),
    (FangHoward(1.7), lambda z: interface_density(z, 1.7), (0.0, 25.0)),
    (GaussianWell(0.8), lambda z: gaussian_density(z, 0.8), (-7.0, 7.0)),
]


@pytest.mark.parametrize(("interaction", "density", "ends"), DENSITIES)
@pytest.mark.parametrize("q", [0.1, 1.0, 4.0])
def test_form_factor_is_the_average_over_two_electrons(q, interaction, density, ends):
    # Half the double integral: z' below z.
    def inner(z):
        return integrate.quad(lambda y: density(y) * math.exp(q * (y - z)), ends[0], z, epsabs=1e-12, limit=200)[0]

    exact = 2.0 * integrate.quad(lambda z: density(z) * inner(z), *ends, epsabs=1e-11, limit=200)[0]
    found = interaction.form_factor(np.array(q))
    assert found == pytest.approx(exact, abs=1e-9)
    assert abs(interaction.form_factor(np.array(1.01 * q)) - exact) > 1e-5


def square_well(q, w):
    """The form in which it is printed, which loses all digits at small q w."""
    x, pi = mpmath.mpf(q) * mpmath.mpf(w), mpmath.pi
    bracket = 3 * x + 8 * pi**2 / x - 32 * pi**4 * (1 - mpmath.exp(-x)) / (x**2 * (x**2 + 4 * pi**2))
    return bracket / (x**2 + 4 * pi**2)


def gaussian_well(q, s):
    x = mpmath.mpf(q) * mpmath.mpf(s)
    return mpmath.exp(x**2) * mpmath.erfc(x)


def fang_howard(q, b):
    x = mpmath.mpf(q) / mpmath.mpf(b)
    return (8 + 9 * x + 3 * x**2) / (8 * (1 + x) ** 3)


def softened(q, d):
    return mpmath.exp(-mpmath.mpf(q) * mpmath.mpf(d))


@pytest.mark.parametrize("q", Q)
@pytest.mark.parametrize(
    ("interaction", "exact"),
    [
        (SquareWell(2.0), lambda q: square_well(q, 2.0)),
        (SquareWell(0.03), lambda q: square_well(q, 0.03)),
        (GaussianWell(0.7), lambda q: gaussian_well(q, 0.7)),
        (FangHoward(2.5), lambda q: fang_howard(q, 2.5)),
        (Softened(0.4), lambda q: softened(q, 0.4)),
    ],
)
def test_every_digit_at_every_q(interaction, exact, q):
    with mpmath.workdps(60):
        reference = exact(q)
    assert interaction.form_factor(np.array(q)) == pytest.approx(float(reference), rel=1e-13)
    assert interaction.radial(np.array(q)) == pytest.approx(2.0 * math.pi / q * float(reference), rel=1e-13)


def test_softened_is_the_transform_of_its_profile():
    # int_0^inf r J_0(qr)/sqrt(r^2 + d^2) dr over the zeros of J_0.
    for q, d in [(0.7, 0.5), (1.5, 2.0)]:
        exact = mpmath.quadosc(
            lambda r, q=q, d=d: r * mpmath.besselj(0, q * r) / mpmath.sqrt(r * r + d * d), [0, mpmath.inf], omega=q
        )
        assert Softened(d).radial(np.array(q)) == pytest.approx(2.0 * math.pi * float(exact), rel=1e-10)


@pytest.mark.parametrize("kind", [SquareWell, GaussianWell, Softened])
def test_no_width_is_coulomb(kind):
    waves = np.array([[0.3, 0.1], [-2.0, 5.0], [20.0, 1.0]])
    np.testing.assert_allclose(kind(0.0).potential(waves), Coulomb().potential(waves), rtol=1e-15)
    np.testing.assert_allclose(FangHoward(1e15).potential(waves), Coulomb().potential(waves), rtol=1e-13)
    assert np.all(kind(0.1).potential(waves) < Coulomb().potential(waves))


@pytest.mark.parametrize(
    ("interaction", "mean_distance"),
    # <|z - z'|>: w (1/3 - 5/(4 pi^2)), 15/(8 b), 2 s/sqrt(pi), d.
    [
        (SquareWell(2.0), 2.0 * (1.0 / 3.0 - 5.0 / (4.0 * math.pi**2))),
        (FangHoward(2.0), 15.0 / 16.0),
        (GaussianWell(2.0), 4.0 / math.sqrt(math.pi)),
        (Softened(2.0), 2.0),
    ],
)
def test_the_first_loss_at_small_q_is_the_mean_distance(interaction, mean_distance):
    q = 1e-5
    loss = (1.0 - interaction.form_factor(np.array(q))) / q
    assert loss == pytest.approx(mean_distance, rel=1e-4)
    assert isinstance(interaction, FiniteWidth)
