r"""Electrons of a parabolic well in a tilted field: two coupled oscillators, solved exactly.

Units: l_B and hbar omega_c of the field's component across the plane, B = B_z (tan theta u, 1) with u a direction in
the plane. In the gauge where the in-plane field enters through z, with P = l_B (p + e A_z)/hbar, [P_x, P_y] = -i,

    H = 1/2 (P + z t).g_m^-1.(P + z t) + p_z^2/(2 mu) + mu Omega^2 z^2/2,    t = tan theta (u_y, -u_x),

mu the mass across the plane over the cyclotron mass, Omega the confinement over the cyclotron frequency. H is
quadratic in xi = (P_x, P_y, z, p_z), so two normal modes xi = sum_k (u_k a_k + h.c.) diagonalise it (J. C. Maan, in
Two-Dimensional Systems, Heterostructures, and Superlattices (Springer, 1984); R. Merlin, Solid State Commun. 64, 99
(1987)), for any mass tensor of the plane. The guiding centre R commutes with all of xi, and r = R + (P_y, -P_x), so
the density of an electron in the state |n_1, n_2> carries the form factor

    F(q, q_z) = prod_k L_{n_k}(X_k) exp(-X_k/2),    X_k = |u_k.c|^2,    c = (-q_y, q_x, q_z, 0),

a quadratic form X_k of (q, q_z) for each mode, and guiding centres see

    v(q) = int dq_z/(2 pi) 4 pi/(|q|^2 + q_z^2) F(q, q_z)^2

(Z. Papic, Phys. Rev. B 87, 245315 (2013)). An anisotropic permittivity of the plane puts its own norm for |q|.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import UnimodularMetric
from mcgeo.kernels.tilted_orbit import coulomb_across
from mcgeo.problem.interaction import Coulomb, Interaction
from mcgeo.problem.landau_level import LOWEST, ORBIT_RANGE, laguerre

Array = NDArray[np.float64]

# [xi_i, xi_j] = i J_ij, and c = _WAVE.(q_x, q_y, q_z).
_COMMUTATOR = np.array([[0.0, -1.0, 0, 0], [1.0, 0, 0, 0], [0, 0, 0, 1.0], [0, 0, -1.0, 0]])
_WAVE = np.array([[0.0, -1.0, 0.0], [1.0, 0.0, 0.0], [0.0, 0.0, 1.0], [0.0, 0.0, 0.0]])


@dataclass(frozen=True)
class TiltedField:
    """A field tilted out of the normal, and the parabolic well it acts in.

    Parameters
    ----------
    angle : float
        theta from the normal of the plane, radians, 0 <= theta < pi/2.
    confinement : float
        Omega: hbar omega_0 of the well over hbar omega_c of the field's component across the plane.
    direction : float
        Direction of the field's in-plane component, radians.
    subband : int
        Quantum number of the well's oscillator.
    mass_across : float
        mu: mass across the plane over the cyclotron mass sqrt(det m).
    permittivity_across : float
        eps_z/sqrt(eps_x eps_y): the interaction is then 4 pi r/(|q|^2 + r^2 q_z^2), r^2 being this ratio.

    Raises
    ------
    GeometryError
        If a number is outside its range.
    """

    angle: float
    confinement: float
    direction: float = 0.0
    subband: int = 0
    mass_across: float = 1.0
    permittivity_across: float = 1.0

    def __post_init__(self) -> None:
        if not 0.0 <= self.angle < math.pi / 2:
            raise GeometryError(
                f"a field can be tilted by 0 to less than 90 degrees, not by {math.degrees(self.angle):g}"
            )
        positive = {
            "confinement": self.confinement,
            "mass across the plane": self.mass_across,
            "permittivity across the plane": self.permittivity_across,
        }
        for name, value in positive.items():
            if not (value > 0.0 and math.isfinite(value)):
                raise GeometryError(f"the {name} must be positive and finite, not {value}")

    @property
    def width(self) -> float:
        """Root of <z^2> doubled, l_0 = (mu Omega)^-1/2 in l_B: the well's density at zero tilt is exp(-z^2/l_0^2)."""
        return 1.0 / math.sqrt(self.mass_across * self.confinement)

    def hamiltonian(self, mass_metric: UnimodularMetric) -> Array:
        """K of H = xi.K.xi/2, shape (4, 4)."""
        tangent = math.tan(self.angle)
        shift = np.array([tangent * math.sin(self.direction), -tangent * math.cos(self.direction)])
        k = np.zeros((4, 4))
        k[:2, :2] = mass_metric.inverse_matrix
        k[:2, 2] = k[2, :2] = mass_metric.inverse_matrix @ shift
        k[2, 2] = shift @ mass_metric.inverse_matrix @ shift + self.mass_across * self.confinement**2
        k[3, 3] = 1.0 / self.mass_across
        return k


def normal_modes(hamiltonian: Array) -> tuple[Array, NDArray[np.complex128]]:
    """Frequencies and vectors u_k of xi = sum_k (u_k a_k + h.c.) for H = xi.K.xi/2, K positive definite.

    With K = L L^T the modes J K u = -i lambda u are eigenvectors w = L^T u of the Hermitian i L^T J L; u.K.u* = lambda.

    Returns
    -------
    frequencies : ndarray, shape (2,)
        In units of omega_c, ascending.
    vectors : ndarray, shape (2, 4)
    """
    lower = np.linalg.cholesky(hamiltonian)
    frequencies, w = np.linalg.eigh(1j * lower.T @ _COMMUTATOR @ lower)
    vectors = np.linalg.solve(lower.T, w[:, 2:]) * np.sqrt(frequencies[2:])
    return np.asarray(frequencies[2:]), np.asarray(vectors.T)


@dataclass(frozen=True)
class TiltedOrbit:
    """State |level, subband> of one electron in the well and the tilted field.

    Far from resonance the modes are those of the cyclotron motion and of the well, and they never cross: the lower mode
    is the cyclotron's where the confinement is the stronger of the two.

    Parameters
    ----------
    mass_metric : UnimodularMetric
    tilt : TiltedField
    level : int
        Quantum number of the mode that becomes the cyclotron motion at zero tilt.

    Attributes
    ----------
    frequencies : tuple of float
        Of the cyclotron's and the well's mode, in omega_c of the field's component across the plane.
    """

    mass_metric: UnimodularMetric
    tilt: TiltedField
    level: int = LOWEST
    frequencies: tuple[float, float] = field(init=False)
    _forms: Array = field(init=False, repr=False, compare=False)

    def __post_init__(self) -> None:
        frequencies, vectors = normal_modes(self.tilt.hamiltonian(self.mass_metric))
        order = [0, 1] if self.tilt.confinement >= 1.0 else [1, 0]
        waves = vectors[order] @ _WAVE
        object.__setattr__(self, "frequencies", (float(frequencies[order[0]]), float(frequencies[order[1]])))
        object.__setattr__(self, "_forms", np.einsum("ka,kb->kab", waves.conj(), waves).real)

    @property
    def metric(self) -> UnimodularMetric:
        """Shape of the orbit seen along the normal of the plane, that of F(q, 0)^2 in the lowest state."""
        return UnimodularMetric.from_matrix(np.linalg.inv(self._forms.sum(axis=0)[:2, :2]))

    @property
    def reach(self) -> float:
        """Norm |q| in the orbit's metric beyond which v(q) is negligible; q_z is free to make F largest."""
        total = self._forms.sum(axis=0)
        envelope = total[:2, :2] - np.outer(total[:2, 2], total[2, :2]) / total[2, 2]
        s = self.metric.linear_map
        return ORBIT_RANGE / math.sqrt(float(np.linalg.eigvalsh(2.0 * s @ envelope @ s)[0]))

    def form_factor_sq(self, wavevectors: Array) -> Array:
        """F(q, 0)^2, also of wavevectors of shape (..., 3) with their q_z."""
        n = wavevectors.shape[-1]
        forms = np.einsum("...a,kab,...b->k...", wavevectors, self._forms[:, :n, :n], wavevectors)
        polynomial = laguerre(self.level, forms[0]) * laguerre(self.tilt.subband, forms[1])
        return np.asarray(polynomial**2 * np.exp(-forms[0] - forms[1]))

    def effective_potential(self, wavevectors: Array, interaction: Interaction) -> Array:
        """v(q) of the Coulomb interaction, for wavevectors of shape (..., 2), none of them zero.

        Raises
        ------
        GeometryError
            If the interaction is not Coulomb: how another one falls off across the plane is not known.
        """
        if not isinstance(interaction, Coulomb):
            raise GeometryError(f"a tilted field needs the Coulomb interaction, not {interaction.name}")
        norms = 2.0 * math.pi / interaction.potential(wavevectors)
        # With q_z in units of 1/r the interaction is isotropic, and the form factor is stretched instead.
        unit = np.array([1.0, 1.0, 1.0 / math.sqrt(self.tilt.permittivity_across)])
        result = np.empty(norms.size)
        waves = np.ascontiguousarray(wavevectors, dtype=float).reshape(-1, 2)
        orders = np.array([self.level, self.tilt.subband])
        coulomb_across(waves, norms.ravel(), self._forms * unit * unit[:, None], orders, result)
        return result.reshape(norms.shape)
