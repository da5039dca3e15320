"""Laguerre functions against scipy where it reaches and against mpmath at 400 digits."""

import mpmath
import numpy as np
from scipy.special import eval_laguerre

from mcgeo.estimate.laguerre_functions import laguerre_functions


def test_laguerre_functions():
    x = np.array([0.0, 0.3, 4.0, 50.0, 700.0, 2000.0, 3000.0])
    found = laguerre_functions(700, x)
    np.testing.assert_allclose(found[:4, :4], [eval_laguerre(n, x[:4]) * np.exp(-0.5 * x[:4]) for n in range(4)])
    with mpmath.workdps(400):
        for degree in (150, 500, 700):
            exact = [float(mpmath.laguerre(degree, 0, v) * mpmath.exp(-mpmath.mpf(v) / 2)) for v in x.tolist()]
            np.testing.assert_allclose(found[degree], exact, rtol=1e-10, atol=1e-13)
    assert np.isfinite(found).all() and np.abs(found).max() <= 1.0
