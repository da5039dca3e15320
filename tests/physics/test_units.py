"""Physical units of a sample, against values computed from the CODATA 2022 constants independently of this package."""

import math

import numpy as np
import pytest
from scipy import integrate

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.problem.mass import mass_metric_from_ratio
from mcgeo.problem.material import (
    Material,
    Sample,
    density_of_field,
    energies_in,
    field_of_density,
    magnetic_length_nm,
    material_summary,
)

# CODATA 2022: e and h are exact, the others measured.
CHARGE, PLANCK, BOLTZMANN = 1.602176634e-19, 6.62607015e-34, 1.380649e-23
ELECTRON_MASS, VACUUM_PERMITTIVITY = 9.1093837139e-31, 8.8541878188e-12


def plain(mass, permittivity, field=1.0):
    """Isotropic sample."""
    tensor = mass * np.eye(2)
    return Sample(Material.of("plain", tensor, permittivity * np.eye(2), permittivity), field)


@pytest.mark.parametrize("field", [1.0, 4.0, 10.0])
def test_magnetic_length_and_flux_density(field):
    assert magnetic_length_nm(field) == pytest.approx(25.6556418 / math.sqrt(field), rel=2e-9)
    assert density_of_field(field, 1.0) == pytest.approx(2.41798924e10 * field, rel=2e-9)
    assert field_of_density(density_of_field(field, 1.0 / 3.0), 1.0 / 3.0) == pytest.approx(field, rel=1e-14)
    # One electron of a filled level on 2 pi l_B^2.
    area = 2.0 * math.pi * (1e-7 * magnetic_length_nm(field)) ** 2
    assert density_of_field(field, 1.0) * area == pytest.approx(1.0, rel=1e-14)


@pytest.mark.parametrize("field", [1.0, 9.0])
def test_coulomb_energy_in_vacuum(field):
    sample = plain(1.0, 1.0, field)
    assert sample.coulomb_energy_mev == pytest.approx(56.1266234 * math.sqrt(field), rel=2e-9)
    assert sample.coulomb_energy_kelvin == pytest.approx(651.32242 * math.sqrt(field), rel=1e-8)
    length = math.sqrt(PLANCK / (2.0 * math.pi * CHARGE * field))
    joule = CHARGE**2 / (4.0 * math.pi * VACUUM_PERMITTIVITY * length)
    assert sample.coulomb_energy_mev == pytest.approx(1e3 * joule / CHARGE, rel=1e-10)
    assert sample.coulomb_energy_kelvin == pytest.approx(joule / BOLTZMANN, rel=1e-10)


@pytest.mark.parametrize(
    ("permittivity", "kelvin", "mev"),
    [
        (12.9, 50.4901, 4.35090),
        (13.0, 50.1017, 4.31743),
        (10.0, 65.1322, 5.61266),
        (11.7, 55.6686, 4.79715),
        (16.2, 40.2051, 3.46461),
    ],
)
def test_coulomb_energy_in_a_semiconductor(permittivity, kelvin, mev):
    sample = plain(0.1, permittivity)
    assert sample.coulomb_energy_kelvin == pytest.approx(kelvin, abs=6e-5)
    assert sample.coulomb_energy_mev == pytest.approx(mev, abs=6e-6)


def test_cyclotron_energy():
    assert plain(1.0, 1.0).cyclotron_energy_mev == pytest.approx(0.115767636, rel=5e-9)
    gallium_arsenide = plain(0.067, 12.9)
    assert gallium_arsenide.cyclotron_energy_mev == pytest.approx(1.727875, abs=6e-7)
    kelvin = gallium_arsenide.cyclotron_energy_mev * 1e-3 * CHARGE / BOLTZMANN
    assert kelvin == pytest.approx(20.0512, abs=6e-5)
    joule = PLANCK / (2.0 * math.pi) * CHARGE * 3.0 / (0.2 * ELECTRON_MASS)
    assert plain(0.2, 1.0, 3.0).cyclotron_energy_mev == pytest.approx(1e3 * joule / CHARGE, rel=1e-9)


@pytest.mark.parametrize("field", [1.0, 16.0])
def test_level_mixing(field):
    assert plain(0.067, 12.9, field).level_mixing == pytest.approx(2.51806 / math.sqrt(field), rel=3e-6)
    aluminium_arsenide = Sample(Material.of("x", np.diag([1.1, 0.20]), 10.0 * np.eye(2), 10.0), field)
    assert aluminium_arsenide.level_mixing == pytest.approx(22.7401 / math.sqrt(field), rel=3e-6)
    assert aluminium_arsenide.material.cyclotron_mass == pytest.approx(0.46904, abs=6e-6)


def poisson_potential(in_plane, across, q):
    """V(q) in a plane in units of e^2/eps_0: int dq_z/(2 pi) 1/(q.eps.q + eps_z q_z^2)."""
    planar = q @ in_plane @ q
    value, _ = integrate.quad(lambda z: 1.0 / (planar + across * z * z), -math.inf, math.inf, epsabs=0.0, epsrel=1e-11)
    return value / (2.0 * math.pi)


@pytest.mark.parametrize(("values", "across", "angle"), [((16.5, 13.0), 8.3, 0.0), ((10.0, 14.0), 11.0, 0.7)])
def test_anisotropic_permittivity(values, across, angle):
    turn = np.array([[math.cos(angle), -math.sin(angle)], [math.sin(angle), math.cos(angle)]])
    in_plane = turn @ np.diag(values) @ turn.T
    material = Material.of("dielectric", np.eye(2), in_plane, across)
    for q in np.array([[0.4, 0.1], [-0.3, 1.2], [2.0, 0.5]]):
        # 1/(2 eps |q|_g): the transform of 1/(4 pi eps sqrt(r.g.r)).
        found = 0.5 / (material.permittivity * math.sqrt(float(material.dielectric_metric.wavevector_norm_sq(q))))
        assert found == pytest.approx(poisson_potential(in_plane, across, q), rel=1e-9)
    ratio = math.sqrt(values[1] / values[0])
    expected = UnimodularMetric.from_matrix(turn @ np.diag([ratio, 1.0 / ratio]) @ turn.T)
    assert material.dielectric_metric.distance(expected) < 1e-7


def test_lengths_across_the_plane():
    # Potential of a sheet wave cos(qx) at z obeys eps_z V'' = eps_x q^2 V: it falls as exp(-q z sqrt(eps_x/eps_z)).
    sample = Sample(Material.of("layers", np.eye(2), 12.0 * np.eye(2), 3.0), 5.0)
    z_nm, q = 4.0, 0.7
    fall = math.exp(-q / sample.magnetic_length_nm * z_nm * math.sqrt(12.0 / 3.0))
    assert math.exp(-q * z_nm / sample.across_nm) == pytest.approx(fall, rel=1e-12)


def test_conversions_and_summary():
    material = Material.of("made up", np.diag([0.9, 0.1]), np.diag([12.0, 8.0]), 10.0, 0.3)
    sample = Sample(material, 8.0)
    assert sample.mev(-0.41) == pytest.approx(-0.41 * sample.coulomb_energy_mev)
    assert sample.nanometres(2.0) == pytest.approx(2.0 * 25.6556418 / math.sqrt(8.0), rel=2e-9)
    assert sample.confinement_ratio(3.0 * sample.cyclotron_energy_mev) == pytest.approx(3.0)
    energies = energies_in(sample, {"gain": 0.003})
    assert energies == {"gain_mev": sample.mev(0.003), "gain_kelvin": sample.kelvin(0.003)}
    # 1 meV is 11.6045 K.
    assert energies["gain_kelvin"] / energies["gain_mev"] == pytest.approx(11.6045, abs=1e-4)
    summary = material_summary(sample, 1.0 / 3.0)
    assert summary["mass_stretch"] == pytest.approx(mass_metric_from_ratio(9.0).stretch)
    assert summary["dielectric_stretch"] == pytest.approx(0.5 * math.log(1.5))
    assert summary["dielectric_angle_degrees"] == pytest.approx(90.0)
    assert summary["density_per_cm2"] == pytest.approx(8.0 * 2.41798924e10 / 3.0, rel=2e-9)
    assert summary["effective_permittivity"] == pytest.approx(math.sqrt(10.0 * math.sqrt(96.0)))
    assert summary["level_mixing"] == pytest.approx(summary["coulomb_energy_mev"] / summary["cyclotron_energy_mev"])


@pytest.mark.parametrize("wrong", [0.0, -1.0, math.inf, math.nan])
def test_what_is_refused(wrong):
    tensor = [[wrong, 0.0], [0.0, wrong]]
    calls = [
        lambda: magnetic_length_nm(wrong),
        lambda: density_of_field(wrong, 1.0),
        lambda: field_of_density(wrong, 1.0),
        lambda: Material.of("x", np.eye(2), np.eye(2), wrong),
        lambda: Material.of("x", np.eye(2), tensor, 1.0),
        lambda: Material.of("x", tensor, np.eye(2), 1.0),
    ]
    for call in calls:
        with pytest.raises(GeometryError):
            call()
