"""The integral across the plane on a few waves against the complex error function; also without the compiler."""

import math

import numpy as np
import pytest
from scipy.special import wofz

from mcgeo.kernels.tilted_orbit import coulomb_across

FIRST = np.array([[0.5, 0.1, 0.2], [0.1, 0.4, 0.0], [0.2, 0.0, 0.3]])
SECOND = np.array([[0.2, 0.0, -0.3], [0.0, 0.1, 0.1], [-0.3, 0.1, 0.9]])


def lowest(forms, q, k):
    """(2 pi/k) exp(B^2/A - C) Re w(sqrt(A) (B/A + ik)) of exp(-(A z^2 + 2 B z + C))."""
    total = forms.sum(axis=0)
    a, b, c = total[2, 2], total[:2, 2] @ q, q @ total[:2, :2] @ q
    return 2.0 * math.pi / k * math.exp(b * b / a - c) * wofz(math.sqrt(a) * complex(b / a, k)).real


def integrals(waves, norms, forms, orders):
    out = np.empty(len(waves))
    coulomb_across(waves, norms, forms, np.array(orders), out)
    return out


@pytest.mark.parametrize("scale", [1e-6, 1e-2, 1.0, 6.0])
def test_lowest_state(scale):
    waves = scale * np.array([[1.0, 0.3], [-0.2, 0.9]])
    norms, forms = np.hypot(*waves.T) * 1.2, np.stack([FIRST, SECOND])
    expected = [lowest(forms, q, k) for q, k in zip(waves, norms, strict=True)]
    np.testing.assert_allclose(integrals(waves, norms, forms, [0, 0]), expected, rtol=1e-11)


@pytest.mark.parametrize("orders", [(1, 0), (0, 1)])
def test_excited_states_from_derivatives_of_the_lowest(orders):
    # (1 - X)^2 e^(-X) = (1 + 2 d/ds + d^2/ds^2) e^(-sX) at s = 1, by central differences.
    q, k, h = np.array([0.7, -0.4]), 0.9, 1e-3
    forms = np.stack([FIRST, SECOND])

    def scaled(s):
        factors = [s if order else 1.0 for order in orders]
        return lowest(forms * np.array(factors)[:, None, None], q, k)

    below, middle, above = scaled(1.0 - h), scaled(1.0), scaled(1.0 + h)
    expected = middle + (above - below) / h + (above - 2.0 * middle + below) / h**2
    assert integrals(q[None], np.array([k]), forms, orders)[0] == pytest.approx(expected, rel=1e-5)
