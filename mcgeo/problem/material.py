"""From a material and a field to physical units: magnetic length, energies, level mixing.

With the cyclotron mass m_c = sqrt(det m) and the permittivity eps that the two-dimensional interaction sees,

    l_B = sqrt(hbar/(e B)),  E_C = e^2/(4 pi eps_0 eps l_B),  hbar omega_c = hbar e B/m_c,  kappa = E_C/(hbar omega_c),

B being the field's component across the plane. Constants are those of CODATA as SciPy carries them.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike
from scipy import constants

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

_CHARGE: float = constants.e
_HBAR: float = constants.hbar
_FREE_MASS: float = constants.m_e
_COULOMB_CONSTANT: float = constants.e**2 / (4.0 * math.pi * constants.epsilon_0)
_FLUX_QUANTUM: float = constants.h / constants.e

_NANOMETRE = 1e-9
_MEV = 1e-3 * _CHARGE
_KELVIN: float = constants.k
_PER_CM2 = 1e4


def magnetic_length_nm(field_tesla: float) -> float:
    """l_B = sqrt(hbar/(e B)) in nm of the field's component across the plane in T.

    Raises
    ------
    GeometryError
        If the field is not positive and finite.
    """
    _check("field", field_tesla)
    return math.sqrt(_HBAR / (_CHARGE * field_tesla)) / _NANOMETRE


def field_of_density(density_per_cm2: float, filling: float) -> float:
    """B = (n/nu) h/e in T, of a density in 1/cm^2.

    Raises
    ------
    GeometryError
        If the density is not positive and finite.
    """
    _check("density", density_per_cm2)
    return density_per_cm2 * _PER_CM2 * _FLUX_QUANTUM / filling


def density_of_field(field_tesla: float, filling: float) -> float:
    """n = nu B e/h in 1/cm^2, of a field in T.

    Raises
    ------
    GeometryError
        If the field is not positive and finite.
    """
    _check("field", field_tesla)
    return filling * field_tesla / _FLUX_QUANTUM / _PER_CM2


def _check(name: str, value: float) -> None:
    if not (value > 0.0 and math.isfinite(value)):
        raise GeometryError(f"a {name} must be positive and finite, not {value}")


def tensor_along_axes(values: tuple[float, float], angle: float = 0.0) -> tuple[tuple[float, float], ...]:
    """Symmetric tensor with the given values along perpendicular axes, the first at ``angle`` (radians)."""
    mean, half = 0.5 * (values[0] + values[1]), 0.5 * (values[0] - values[1])
    c, s = half * math.cos(2.0 * angle), half * math.sin(2.0 * angle)
    return (mean + c, s), (s, mean - c)


@dataclass(frozen=True)
class Material:
    """What of a material enters the two-dimensional problem.

    Parameters
    ----------
    label : str
    mass_metric : UnimodularMetric
        g_m.
    cyclotron_mass : float
        sqrt(det m) in free-electron masses.
    permittivity : float
        Effective eps of the two-dimensional interaction, relative to vacuum.
    dielectric_metric : UnimodularMetric
        g_eps: the interaction is 1/sqrt(r.g_eps.r).
    permittivity_across : float
        eps_z/sqrt(eps_x eps_y).
    mass_across : float or None
        Mass across the plane in free-electron masses, where known.
    """

    label: str
    mass_metric: UnimodularMetric
    cyclotron_mass: float
    permittivity: float
    dielectric_metric: UnimodularMetric = ISOTROPIC
    permittivity_across: float = 1.0
    mass_across: float | None = None

    @classmethod
    def of(
        cls, label: str, mass: ArrayLike, in_plane: ArrayLike, across: float, mass_across: float | None = None
    ) -> Material:
        """Material of tensors.

        A bulk permittivity diag(eps_x, eps_y, eps_z) gives electrons of one plane V(q) = e^2/(2 eps_0 sqrt(eps_z (eps_x
        q_x^2 + eps_y q_y^2))), so eps = sqrt(eps_z sqrt(eps_x eps_y)) and g_eps = diag(sqrt(eps_y/eps_x),
        sqrt(eps_x/eps_y)): the inverse of the tensor in the plane, of determinant 1.

        Parameters
        ----------
        mass : array_like, shape (2, 2)
            Mass tensor of the plane in free-electron masses.
        in_plane : array_like, shape (2, 2)
            Relative permittivity of the plane.
        across : float
            Relative permittivity across the plane.

        Raises
        ------
        GeometryError
            If a tensor is not symmetric and positive definite, or ``across`` not positive.
        """
        mass_metric = UnimodularMetric.from_mass_tensor(mass)
        dielectric = UnimodularMetric.from_matrix(UnimodularMetric.from_matrix(in_plane).inverse_matrix)
        _check("permittivity", across)
        mean = math.sqrt(float(np.linalg.det(np.asarray(in_plane, dtype=float))))
        mass_mean = math.sqrt(float(np.linalg.det(np.asarray(mass, dtype=float))))
        return cls(label, mass_metric, mass_mean, math.sqrt(across * mean), dielectric, across / mean, mass_across)


@dataclass(frozen=True)
class Sample:
    """A material in a field.

    Parameters
    ----------
    material : Material
    field_tesla : float
        Component across the plane in T.
    """

    material: Material
    field_tesla: float

    @property
    def magnetic_length_nm(self) -> float:
        """l_B in nm."""
        return magnetic_length_nm(self.field_tesla)

    @property
    def coulomb_energy_mev(self) -> float:
        """e^2/(4 pi eps_0 eps l_B) in meV, the unit of all energies."""
        length = self.magnetic_length_nm * _NANOMETRE
        return _COULOMB_CONSTANT / (self.material.permittivity * length) / _MEV

    @property
    def coulomb_energy_kelvin(self) -> float:
        """The same over the Boltzmann constant in K."""
        return self.kelvin(1.0)

    @property
    def cyclotron_energy_mev(self) -> float:
        """hbar omega_c = hbar e B/sqrt(det m) in meV."""
        return _HBAR * _CHARGE * self.field_tesla / (self.material.cyclotron_mass * _FREE_MASS) / _MEV

    @property
    def level_mixing(self) -> float:
        """kappa = E_C/(hbar omega_c)."""
        return self.coulomb_energy_mev / self.cyclotron_energy_mev

    def density_per_cm2(self, filling: float) -> float:
        """Density of electrons at this filling in 1/cm^2."""
        return density_of_field(self.field_tesla, filling)

    def mev(self, energy: float) -> float:
        """An energy in e^2/(4 pi eps l_B), in meV."""
        return energy * self.coulomb_energy_mev

    def kelvin(self, energy: float) -> float:
        """An energy in e^2/(4 pi eps l_B), in K."""
        return energy * self.coulomb_energy_mev * _MEV / _KELVIN

    def nanometres(self, length: float) -> float:
        """A length in l_B, in nm."""
        return length * self.magnetic_length_nm

    @property
    def across_nm(self) -> float:
        """Length across the plane, in nm, that counts as one l_B in V(q, z) = (2 pi/q) exp(-qz).

        Between charges z apart V falls as exp(-q z sqrt(sqrt(eps_x eps_y)/eps_z)), as Poisson's equation says.
        """
        return self.magnetic_length_nm * math.sqrt(self.material.permittivity_across)

    def confinement_ratio(self, energy_mev: float) -> float:
        """hbar omega_0 of a parabolic well in meV, over the cyclotron energy."""
        return energy_mev / self.cyclotron_energy_mev


def material_summary(sample: Sample, filling: float) -> dict[str, Any]:
    """``units`` of the JSON output."""
    material = sample.material
    return {
        "material": material.label,
        "magnetic_length_nm": sample.magnetic_length_nm,
        "coulomb_energy_mev": sample.coulomb_energy_mev,
        "coulomb_energy_kelvin": sample.coulomb_energy_kelvin,
        "cyclotron_energy_mev": sample.cyclotron_energy_mev,
        "level_mixing": sample.level_mixing,
        "field_tesla": sample.field_tesla,
        "density_per_cm2": sample.density_per_cm2(filling),
        "effective_permittivity": material.permittivity,
        "cyclotron_mass": material.cyclotron_mass,
        "mass_stretch": material.mass_metric.stretch,
        "mass_angle_degrees": material.mass_metric.angle_degrees,
        "dielectric_stretch": material.dielectric_metric.stretch,
        "dielectric_angle_degrees": material.dielectric_metric.angle_degrees,
    }


def energies_in(sample: Sample, energies: Mapping[str, float]) -> dict[str, float]:
    """Energies in e^2/(4 pi eps l_B) by name, each as ``NAME_mev`` and ``NAME_kelvin``."""
    return {
        key: value
        for name, energy in energies.items()
        for key, value in ((f"{name}_mev", sample.mev(energy)), (f"{name}_kelvin", sample.kelvin(energy)))
    }
