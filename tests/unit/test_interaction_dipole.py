"""Dipoles: the average over the layer against quadrature, and the far field against the interaction in space."""

import math

import numpy as np
import pytest
from scipy import integrate
from scipy.special import erfc, jv

from mcgeo.geometry.metric import ISOTROPIC
from mcgeo.problem.dipole import Dipole

TILTS = [(0.0, 0.0), (0.6, 0.3), (math.pi / 2, -1.0), (1.1, 2.0)]


def direction_of(dipole):
    s, c = math.sin(dipole.tilt), math.cos(dipole.tilt)
    return np.array([s * math.cos(dipole.direction), s * math.sin(dipole.direction), c])


@pytest.mark.parametrize(("tilt", "direction"), TILTS)
@pytest.mark.parametrize("q", [(0.3, 0.1), (-1.0, 0.7), (0.0, 3.0)])
def test_potential_is_the_average_over_the_layer(q, tilt, direction):
    dipole = Dipole(0.4, tilt, direction, strength=1.7)
    n = direction_of(dipole)

    def integrand(k):
        wave = np.array([*q, k])
        in_space = 4.0 * math.pi * 1.7 * ((n @ wave) ** 2 / (wave @ wave) - 1.0 / 3.0)
        return in_space * math.exp(-((0.4 * k) ** 2)) / (2.0 * math.pi)

    exact = integrate.quad(integrand, -20.0, 20.0, epsabs=1e-12, limit=400, points=[0.0])[0]
    found = dipole.potential(np.array(q))
    assert found == pytest.approx(exact, abs=1e-10)
    turned = Dipole(0.4, tilt, direction + 0.1, strength=1.7).potential(np.array(q))
    assert (abs(turned - found) > 1e-4) == (tilt != 0.0)


def in_plane(dipole, r):
    """V(r) of two layers of Gaussian density, from the interaction in space."""
    n, width = direction_of(dipole), math.sqrt(2.0) * dipole.thickness

    def integrand(z):
        apart = np.array([*r, z])
        length = math.sqrt(apart @ apart)
        weight = math.exp(-0.5 * (z / width) ** 2) / (math.sqrt(2.0 * math.pi) * width)
        return weight * (1.0 - 3.0 * (n @ apart / length) ** 2) / length**3

    return dipole.strength * integrate.quad(integrand, -8.0 * width, 8.0 * width, epsabs=1e-13, points=[0.0])[0]


@pytest.mark.parametrize(("tilt", "direction"), TILTS)
@pytest.mark.parametrize("r", [(1.3, 0.4), (-0.5, 2.0)])
def test_potential_is_the_transform_of_the_interaction_in_space(r, tilt, direction):
    """V(q) = V_0(q) + V_2(q) cos 2(phi - d) has V(r) = int q dq/(2 pi) [V_0 J_0(qr) - V_2 J_2(qr) cos 2(phi_r - d)]."""
    dipole = Dipole(0.3, tilt, direction)
    axis, across = ((math.cos(direction + t), math.sin(direction + t)) for t in (0.0, math.pi / 2))
    length, angle = math.hypot(*r), math.atan2(r[1], r[0]) - direction
    # What is left at large q is a constant in every direction; a soft end takes it away from V(r) at r > 0.
    q = np.linspace(1e-12, 120.0, 240001)
    along, sideways = (dipole.potential(q[:, None] * np.array(u)) for u in (axis, across))
    mean, second = 0.5 * (along + sideways), 0.5 * (along - sideways)
    end = 0.5 * erfc((q - 60.0) / 10.0)
    integrand = q * end * (mean * jv(0, q * length) - second * jv(2, q * length) * math.cos(2.0 * angle))
    found = integrate.simpson(integrand, q) / (2.0 * math.pi)
    assert found == pytest.approx(in_plane(dipole, r), abs=1e-8)


def test_far_away_the_layer_does_not_matter():
    for tilt, direction in TILTS:
        dipole = Dipole(1e-3, tilt, direction, strength=2.0)
        angle = 0.4
        r = (3.0 * math.cos(angle), 3.0 * math.sin(angle))
        exact = 2.0 * (1.0 - 3.0 * (math.sin(tilt) * math.cos(angle - direction)) ** 2) / 27.0
        assert in_plane(dipole, r) == pytest.approx(exact, rel=1e-5)


def test_thin_layer_at_small_q():
    # 2 pi D q (sin^2 T cos^2 phi - cos^2 T) beside the contact term.
    for tilt, direction in TILTS:
        dipole, q = Dipole(1e-7, tilt, direction), np.array([0.6, 0.2])
        along = q @ np.array([math.cos(direction), math.sin(direction)])
        contact = 4.0 * math.pi * (math.cos(tilt) ** 2 - 1.0 / 3.0) / (2.0 * math.sqrt(math.pi) * 1e-7)
        length = math.hypot(*q)
        exact = 2.0 * math.pi * (math.sin(tilt) ** 2 * along**2 / length - math.cos(tilt) ** 2 * length)
        assert dipole.potential(q) - contact == pytest.approx(exact, abs=2e-6)


def test_only_a_tilt_breaks_the_symmetry():
    assert Dipole(0.3).symmetry == ISOTROPIC
    assert Dipole(0.3, 0.2).symmetry is None
    assert Dipole(0.3, 0.2).metrics == (ISOTROPIC,)
