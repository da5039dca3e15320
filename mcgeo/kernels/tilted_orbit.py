"""Coulomb interaction of guiding centres whose orbits extend across the plane: one integral over q_z per wavevector."""

from __future__ import annotations

import math

import numpy as np

from mcgeo.kernels._jit import kernel

# Step of the trapezoidal rule in units of the Gaussian's 1/e half-width, and nodes on either side of its centre: what
# lies beyond, exp(-57), and the rule's error, exp(-(pi/step)^2) = exp(-61), leave room for the polynomials.
_STEP = 0.4
_SIDE = 19
_GAUSSIAN = np.exp(-((_STEP * np.arange(-_SIDE, _SIDE + 1)) ** 2))


@kernel
def _laguerre_sq(order, x):  # type: ignore[no-untyped-def]
    """L_n(x)^2 for real or complex x."""
    before, value = 0.0 * x, 1.0 + 0.0 * x
    for n in range(order):
        before, value = value, ((2 * n + 1 - x) * value - n * before) * (1.0 / (n + 1))
    return value * value


@kernel
def _form(form, x, y):  # type: ignore[no-untyped-def]
    """Coefficients of 1, 2 z and z^2 in a quadratic form of (x, y, z)."""
    constant = (form[0, 0] * x + 2.0 * form[0, 1] * y) * x + form[1, 1] * y * y
    return constant, form[0, 2] * x + form[1, 2] * y, form[2, 2]


@kernel
def _polynomial(n_1, n_2, first, second, z):  # type: ignore[no-untyped-def]
    """L_{n_1}(X_1)^2 L_{n_2}(X_2)^2 at z, real or complex."""
    x_1 = first[0] + (2.0 * first[1] + first[2] * z) * z
    x_2 = second[0] + (2.0 * second[1] + second[2] * z) * z
    return _laguerre_sq(n_1, x_1) * _laguerre_sq(n_2, x_2)


@kernel
def coulomb_across(
    waves: np.ndarray, norms: np.ndarray, forms: np.ndarray, orders: np.ndarray, out: np.ndarray
) -> None:
    """int dq_z/(2 pi) 4 pi/(k^2 + q_z^2) f(q_z), f = prod_k L_{n_k}(X_k)^2 exp(-X_k), X_k quadratic forms of (q, q_z).

    The trapezoidal rule at q_z = (j + 1/2) d, with the poles q_z = +-ik put right by their residues,

        int f(z)/(z^2 + k^2) dz = d sum_j f(z_j)/(z_j^2 + k^2) + (2 pi/k) Re f(ik)/(1 + exp(2 pi k/d)),

    converges as exp(-const/d^2) at any k (F. Matta and A. Reichel, Math. Comp. 25, 339 (1971), for the error function),
    and with nodes on either side of zero no term of it is large at small k.

    Parameters
    ----------
    waves : ndarray, shape (n, 2)
        q.
    norms : ndarray, shape (n,)
        k > 0, the norm of q in the interaction's metric.
    forms : ndarray, shape (2, 3, 3)
        Symmetric matrices of X_1 and X_2; their sum is positive definite.
    orders : ndarray of int64, shape (2,)
        n_1 and n_2.
    out : ndarray, shape (n,)
        Written.
    """
    steepness = forms[0, 2, 2] + forms[1, 2, 2]
    root = math.sqrt(steepness)
    spacing = _STEP / root
    n_1, n_2 = orders[0], orders[1]
    lowest = n_1 == 0 and n_2 == 0
    for i in range(waves.shape[0]):
        k = norms[i]
        first, second = _form(forms[0], waves[i, 0], waves[i, 1]), _form(forms[1], waves[i, 0], waves[i, 1])
        in_plane, coupling = first[0] + second[0], first[1] + second[1]
        centre = math.floor(-coupling / (steepness * spacing)) + 0.5
        # The Gaussian at the nodes is exp(-(offset + step j)^2): a table, times powers of one number.
        offset = _STEP * centre + coupling / root
        ratio = math.exp(-2.0 * _STEP * offset)
        power = math.exp(coupling * coupling / steepness - in_plane - offset * offset + 2.0 * _STEP * offset * _SIDE)
        result = 0.0
        for j in range(2 * _SIDE + 1):
            z = (centre + (j - _SIDE)) * spacing
            term = _GAUSSIAN[j] * power / (z * z + k * k)
            result += term if lowest else term * _polynomial(n_1, n_2, first, second, z)
            power *= ratio
        result *= spacing
        # Farther out the poles are outside the strip in which the rule is exact, and f(ik) would overflow.
        if k * root * _STEP < math.pi:
            phase = 2.0 * coupling * k
            pole = math.exp(steepness * k * k - in_plane) * complex(math.cos(phase), -math.sin(phase))
            if not lowest:
                pole *= _polynomial(n_1, n_2, first, second, complex(0.0, k))
            result += 2.0 * math.pi / k * pole.real / (1.0 + math.exp(2.0 * math.pi * k / spacing))
        out[i] = 2.0 * result
