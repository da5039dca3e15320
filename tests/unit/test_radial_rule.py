"""Radial integrals of smooth times oscillating functions against closed forms."""

import math

import numpy as np
import pytest
from scipy.special import jv

from mcgeo.variational.radial_rule import radial_rule


@pytest.mark.parametrize("length", [0.5, 60.0])
@pytest.mark.parametrize("width", [0.5, 3.0, 60.0])
def test_radial_rule(width, length):
    # Weber's integral, DLMF 10.22.51: int exp(-a^2 k^2) J_0(b k) k dk = exp(-b^2/4a^2)/(2 a^2).
    rule = radial_rule(30.0, length)
    found = (rule.nodes * np.exp(-((width * rule.nodes) ** 2))) @ (jv(0, length * rule.fine) @ rule.projection)
    assert found == pytest.approx(math.exp(-(length**2) / (4.0 * width**2)) / (2.0 * width**2), abs=1e-12)


@pytest.mark.parametrize("power", [-0.6, 0.3])
def test_radial_rule_with_a_singular_power(power):
    rule = radial_rule(40.0, 5.0)
    # int_0^40 k^p e^-k dk, the rest being 1e-17.
    found = (rule.nodes**power * np.exp(-rule.nodes)) @ (np.ones_like(rule.fine) @ rule.projection)
    assert found == pytest.approx(math.gamma(power + 1.0), rel=1e-7)
