"""Gates and screening: V(q) against V(r), limits, and the value at q = 0."""

import math

import mpmath
import numpy as np
import pytest

from mcgeo.problem.coulomb import Coulomb
from mcgeo.problem.screened import OneGate, TwoGates, Yukawa

WAVES = np.array([[0.3, 0.1], [-2.0, 5.0], [0.02, 0.0]])


def hankel(profile, q):
    """2 pi int_0^inf r J_0(qr) V(r) dr between the zeros of J_0."""
    return 2.0 * math.pi * float(
        mpmath.quadosc(lambda r: r * mpmath.besselj(0, q * r) * profile(r), [0, mpmath.inf], omega=q)
    )  # fmt: skip


def between_planes(r, d):
    """V(r) of a charge halfway between grounded planes, from the images: their sum by Euler's transformation."""
    return mpmath.nsum(
        lambda n: (-1) ** int(n) * (1 if n == 0 else 2) / mpmath.sqrt(r * r + (2 * n * d) ** 2),
        [0, mpmath.inf], method="alternating",
    )  # fmt: skip


@pytest.mark.parametrize(("q", "d"), [(0.4, 1.0), (1.5, 2.0)])
def test_one_gate_is_one_image(q, d):
    exact = hankel(lambda r: 1 / r - 1 / mpmath.sqrt(r * r + 4 * d * d), q)
    assert OneGate(d).radial(np.array(q)) == pytest.approx(exact, rel=1e-10)


@pytest.mark.parametrize(("q", "k"), [(0.4, 1.0), (1.5, 0.3)])
def test_yukawa_is_its_transform(q, k):
    exact = hankel(lambda r: mpmath.exp(-k * r) / r, q)
    assert Yukawa(k).radial(np.array(q)) == pytest.approx(exact, rel=1e-10)


@pytest.mark.parametrize(("r", "d"), [(1.0, 1.0), (0.5, 2.0)])
def test_two_gates_are_all_images(r, d):
    """V(r) - 1/r = int dq J_0(qr) (tanh(qd) - 1), whose integrand falls as exp(-2qd)."""
    interaction = TwoGates(d)

    def integrand(q):
        return mpmath.besselj(0, q * r) * (q * float(interaction.radial(np.array(float(q)))) / (2 * mpmath.pi) - 1)

    found = mpmath.quad(integrand, [0, 1, 3, 20 / d])
    assert float(found) == pytest.approx(float(between_planes(r, d)) - 1.0 / r, abs=1e-10)


@pytest.mark.parametrize("q", [1e-300, 1e-12, 1e-6, 1e-3, 0.1, 3.0, 400.0])
def test_every_digit_at_every_q(q):
    q_exact = mpmath.mpf(q)
    with mpmath.workdps(330):
        one, two = -mpmath.expm1(-2 * q_exact * 2) / q_exact, mpmath.tanh(q_exact * 2) / q_exact
    assert OneGate(2.0).radial(np.array(q)) == pytest.approx(2.0 * math.pi * float(one), rel=1e-14)
    assert TwoGates(2.0).radial(np.array(q)) == pytest.approx(2.0 * math.pi * float(two), rel=1e-14)


def test_values_at_zero():
    zero = np.zeros(1)
    assert OneGate(3.0).radial(zero) == pytest.approx(12.0 * math.pi, rel=1e-15)
    assert TwoGates(3.0).radial(zero) == pytest.approx(6.0 * math.pi, rel=1e-15)
    assert Yukawa(0.5).radial(zero) == pytest.approx(4.0 * math.pi, rel=1e-15)


def test_far_gates_and_no_screening_are_coulomb():
    coulomb = Coulomb().potential(WAVES)
    np.testing.assert_allclose(OneGate(1e4).potential(WAVES), coulomb, rtol=1e-15)
    np.testing.assert_allclose(TwoGates(1e4).potential(WAVES), coulomb, rtol=1e-15)
    np.testing.assert_allclose(Yukawa(0.0).potential(WAVES), coulomb, rtol=1e-15)
    # Screening always weakens, two gates more than one.
    assert np.all(TwoGates(1.0).potential(WAVES) < OneGate(1.0).potential(WAVES))
    assert np.all(OneGate(1.0).potential(WAVES) < coulomb)
