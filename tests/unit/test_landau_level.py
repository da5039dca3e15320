"""Levels 0, 1 and 2: polynomials, pair energies and the filled level's energy against SciPy and mpmath."""

import math
from fractions import Fraction

import mpmath
import numpy as np
import pytest
from scipy.special import eval_laguerre

from mcgeo.estimate.occupations import PairOccupations
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric
from mcgeo.problem.interaction import Coulomb
from mcgeo.problem.landau_level import LARGEST_LEVEL, ORBIT_RANGE, LandauOrbit, laguerre
from mcgeo.problem.problem import Problem
from mcgeo.problem.tilted_field import TiltedField
from mcgeo.variational.energy_surface import EnergySurface

LEVELS = range(LARGEST_LEVEL + 1)


@pytest.mark.parametrize("level", range(6))
def test_laguerre_polynomials(level):
    x = np.linspace(-1.0, 30.0, 63)
    np.testing.assert_allclose(laguerre(level, x), eval_laguerre(level, x), rtol=1e-12, atol=1e-12)


@pytest.mark.parametrize("level", LEVELS)
def test_beyond_its_reach_an_orbit_is_not_seen(level):
    orbit = LandauOrbit(UnimodularMetric(0.8, 0.4), level)
    directions = np.stack([np.cos([0.1, 1.0, 2.5]), np.sin([0.1, 1.0, 2.5])], axis=-1)
    edge = orbit.reach * directions @ orbit.metric.linear_map.T
    assert np.all(orbit.form_factor_sq(edge) < 1e-11)
    np.testing.assert_allclose(np.sqrt(orbit.metric.wavevector_norm_sq(edge)), ORBIT_RANGE)


def coulomb_pair_energy(level, m):
    """V_m = int dq L_n(q^2/2)^2 L_m(q^2) exp(-q^2) at 30 digits."""
    with mpmath.workdps(30):
        return float(
            mpmath.quad(
                lambda q: mpmath.laguerre(level, 0, q**2 / 2) ** 2 * mpmath.laguerre(m, 0, q**2) * mpmath.exp(-(q**2)),
                [0, 1, 2, 3, 5, 9],
            )
        )


def surface(level, momenta, samples, metric=ISOTROPIC):
    occupations = PairOccupations("pairs", Fraction(1, 3), "fermions", np.array(momenta), np.array(samples))
    return EnergySurface(occupations, Problem(metric, Coulomb(), level))


@pytest.mark.parametrize("level", LEVELS)
def test_coulomb_pair_energies(level):
    momenta = [1, 3, 5, 7, 9]
    energies = surface(level, momenta, np.concatenate([np.zeros((1, 5)), np.eye(5)])).sample_energies(ISOTROPIC)
    found = (energies[1:] - energies[0]) * 1.5
    np.testing.assert_allclose(found, [coulomb_pair_energy(level, m) for m in momenta], atol=1e-12)


@pytest.mark.parametrize("stretch", [0.0, math.log(2.0)])
def test_filled_levels(stretch):
    # -sqrt(pi/8) int dq L_n(q^2/2)^2 exp(-q^2/2)/int dq exp(-q^2/2), times 1/AGM of the orbit's stretch.
    stretched = float(mpmath.agm(math.exp(stretch / 2.0), math.exp(-stretch / 2.0)))
    for level in LEVELS:
        share = mpmath.quad(
            lambda q, n=level: mpmath.laguerre(n, 0, q**2 / 2) ** 2 * mpmath.exp(-(q**2) / 2), [0, 2, 5, 14]
        ) / mpmath.sqrt(mpmath.pi / 2)
        expected = -math.sqrt(math.pi / 8.0) * float(share) / stretched
        filled = surface(level, [1, 3], np.zeros((1, 2)), UnimodularMetric(stretch))
        assert 3.0 * filled.energy(ISOTROPIC) == pytest.approx(expected, abs=1e-11)


def test_problems_and_their_relatives():
    tilt = TiltedField(0.5, 2.0)
    tilted = Problem(ISOTROPIC, Coulomb(), 1, tilt)
    assert not tilted.is_symmetric
    upright = tilted.untilted()
    assert upright.is_symmetric
    assert (upright.tilt.angle, upright.tilt.confinement, upright.level) == (0.0, 2.0, 1)
    heavy = tilted.with_mass(UnimodularMetric(0.4))
    assert heavy.tilt == tilt
    assert heavy.orbit.metric.distance(tilted.orbit.metric) > 0.2
    thin = Problem(ISOTROPIC, Coulomb(), 2)
    assert thin.untilted() is thin
    assert thin.orbit == LandauOrbit(ISOTROPIC, 2)
