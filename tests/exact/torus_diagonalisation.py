"""Exact diagonalisation of guiding centres on a torus: a check on the sampling that shares no code with it.

The torus is spanned by L1, L2 (rows of ``lattice``, lengths in l_B), its area is A = 2 pi N_phi. Wavevectors
q = m1 b1 + m2 b2 with b_i.L_j = 2 pi delta_ij move guiding centres through exp(iq.R). In the N_phi states |k>
of one electron, with w = exp(2 pi i/N_phi), X|k> = |k+1> and Z|k> = w^k |k>,

    exp(iq.R) = w^(m1 m2/2) X^m1 Z^m2,        exp(iq.(R_i - R_j)) = w^(m1 m2) (X^m1 Z^m2)_i (X^-m1 Z^-m2)_j,

so a pair operator depends on m1, m2 modulo N_phi only, and

    H = sum_{i<j} (1/A) sum_q v(q) exp(iq.(R_i - R_j)):  |a, b> -> sum_d W[d, a-b] |a+d, b-d>,
    W[d, s] = (1/A) sum_m2 v(d, m2) w^(m2 (d+s)),  v folded modulo N_phi.

H conserves the sum of all k modulo N_phi. Metrics are position metrics g of unit determinant; wavevectors are
measured with the inverse, |q|_g^2 = q.g^-1.q. Energies are in e^2/(4 pi eps l_B).

Sources: Yoshioka, Halperin, Lee, Phys. Rev. Lett. 50, 1219 (1983); Haldane, Phys. Rev. Lett. 55, 2095 (1985).
Zero modes: Haldane, Phys. Rev. Lett. 51, 605 (1983); their metric: Haldane, Phys. Rev. Lett. 107, 116801
(2011).
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.linalg import eigh
from scipy.sparse import csr_matrix
from scipy.sparse.linalg import eigsh
from scipy.special import erfc, eval_laguerre

from tests.exact.momentum_sector import MomentumSector, momentum_sector, uniform_momentum

Interaction = Callable[[NDArray[np.float64], NDArray[np.float64]], NDArray[np.float64]]

DENSE_LIMIT = 600


@dataclass(frozen=True, eq=False)
class TorusState:
    """An eigenstate: ``energy`` of the whole system, ``vector`` of amplitudes in ``sector``."""

    lattice: NDArray[np.float64]
    sector: MomentumSector
    vector: NDArray[np.complex128]
    energy: float

    def structure_table(self) -> NDArray[np.float64]:
        """Sbar(m1, m2) for m1, m2 = 0 ... N_phi - 1, shape (N_phi, N_phi)."""
        sector, size = self.sector, self.sector.n_flux
        amplitude = sector.weight * self.vector[sector.row].conj() * self.vector[sector.column]
        phase_index = (sector.shift + sector.separation) % size
        pairs = np.zeros((size, size), dtype=complex)
        np.add.at(pairs, (sector.shift, phase_index), amplitude)
        one_way = size * np.fft.ifft(pairs, axis=1)
        minus = -np.arange(size) % size
        return 1.0 + (one_way + one_way[np.ix_(minus, minus)]).real / sector.n_electrons

    def structure_factor(self, wavevectors: ArrayLike) -> NDArray[np.float64]:
        """Guiding-centre structure factor Sbar(q) = (1/N) <sum_ij exp(iq.(R_i - R_j))>, terms i = j included.

        Sbar(q) - 1 = (2/N) <sum_{i<j} cos q.(R_i - R_j)>. Its mean over the N_phi^2 - 1 nonzero residues of
        q is -(N-1)/(N_phi-1) for fermions and (N-1)/(N_phi+1) for bosons, because the operators of one pair
        add up to N_phi times its exchange. Where both m1 and m2 are multiples of N_phi the operators are
        phases and Sbar = N.

        Parameters
        ----------
        wavevectors : array_like, shape (n, 2)
            q in 1/l_B.

        Raises
        ------
        ValueError
            If a wavevector does not belong to the torus.
        """
        turns = np.atleast_2d(np.asarray(wavevectors, dtype=float)) @ self.lattice.T / (2.0 * math.pi)
        integers = np.rint(turns).astype(np.int64)
        if np.max(np.abs(turns - integers)) > 1e-6:
            raise ValueError(f"q.L1 and q.L2 must be multiples of 2 pi: {(2.0 * math.pi * turns).tolist()}")
        m = integers % self.sector.n_flux
        return np.asarray(self.structure_table()[m[:, 0], m[:, 1]])

    def energy_per_electron(self, interaction: Interaction) -> float:
        """(1/2A) sum_{q != 0} v(q) (Sbar(q) - 1): no self-energy of the cell."""
        folded = _folded(self.lattice, self.sector.n_flux, interaction)
        area = 2.0 * math.pi * self.sector.n_flux
        return float(np.sum(folded * (self.structure_table() - 1.0)) / (2.0 * area))


def _folded(
    lattice: NDArray[np.float64], n_flux: int, interaction: Interaction, background: bool = True
) -> NDArray[np.float64]:
    """v summed over m1, m2 modulo N_phi; with a ``background`` q = 0 is left out."""
    reciprocal = 2.0 * math.pi * np.linalg.inv(lattice).T
    for reach in range(2 * n_flux, 40 * n_flux, 2 * n_flux):
        m1, m2 = (m.ravel() for m in np.meshgrid(*[np.arange(-reach, reach + 1)] * 2, indexing="ij"))
        if background:
            m1, m2 = np.delete(m1, len(m1) // 2), np.delete(m2, len(m2) // 2)
        q = np.stack([m1, m2], axis=1) @ reciprocal
        values = interaction(q[:, 0], q[:, 1])
        edge = np.maximum(np.abs(m1), np.abs(m2)) > reach - n_flux
        if np.max(np.abs(values[edge])) <= 1e-17 * np.max(np.abs(values)):
            folded = np.zeros((n_flux, n_flux))
            np.add.at(folded, (m1 % n_flux, m2 % n_flux), values)
            return folded
    raise ValueError("the interaction must fall off like a Gaussian in q: form factors belong to it")


def _checked_lattice(lattice: ArrayLike, n_flux: int) -> NDArray[np.float64]:
    vectors = np.array(lattice, dtype=float)
    area = abs(float(np.linalg.det(vectors)))
    if not math.isclose(area, 2.0 * math.pi * n_flux, rel_tol=1e-9):
        raise ValueError(f"the cell has area {area}, {n_flux} flux quanta need {2.0 * math.pi * n_flux}")
    return vectors


def lowest_states(
    lattice: ArrayLike,
    n_flux: int,
    n_electrons: int,
    interaction: Interaction,
    *,
    n_states: int = 1,
    momentum: int | None = None,
    bosons: bool = False,
    background: bool = True,
) -> list[TorusState]:
    """Lowest eigenstates of H in one momentum sector, by default that of the uniform liquid.

    Parameters
    ----------
    lattice : array_like, shape (2, 2)
        Rows L1, L2 in l_B.
    interaction : callable
        v(q_x, q_y), even in q, form factors included.
    background : bool
        Leave out q = 0, as a neutralising background does.

    Raises
    ------
    ValueError
        If the area is not 2 pi N_phi, the sector is empty, or v does not fall off in q.
    """
    vectors = _checked_lattice(lattice, n_flux)
    chosen = uniform_momentum(n_electrons, n_flux) if momentum is None else momentum
    sector = momentum_sector(n_electrons, n_flux, chosen, bosons)
    folded = _folded(vectors, n_flux, interaction, background)
    # Element [d, d + s] of the transform is W[d, s].
    table = n_flux * np.fft.ifft(folded, axis=1) / (2.0 * math.pi * n_flux)
    elements = sector.weight * table[sector.shift, (sector.shift + sector.separation) % n_flux]
    size = len(sector.orbitals)
    matrix = csr_matrix((elements, (sector.row, sector.column)), shape=(size, size))
    if size <= DENSE_LIMIT:
        energies, states = eigh(matrix.toarray(), subset_by_index=(0, min(n_states, size) - 1))
    else:
        start = np.random.default_rng(size).standard_normal(size)
        energies, states = eigsh(matrix, k=n_states, which="SA", v0=start)
    order = np.argsort(energies)
    return [TorusState(vectors, sector, states[:, n].astype(complex), float(energies[n])) for n in order]


def metric_norm_sq(metric: ArrayLike, qx: ArrayLike, qy: ArrayLike) -> NDArray[np.float64]:
    """|q|_g^2 = q.g^-1.q."""
    q = np.stack(np.broadcast_arrays(qx, qy), axis=-1)
    return np.asarray(np.einsum("...a,ab,...b->...", q, np.linalg.inv(np.asarray(metric, dtype=float)), q))


def pseudopotential(metric: ArrayLike, *relative_momenta: int) -> Interaction:
    """v(q) = sum_m L_m(|q|_g^2) exp(-|q|_g^2/2), a positive multiple of the projector on pairs of those m."""

    def interaction(qx: NDArray[np.float64], qy: NDArray[np.float64]) -> NDArray[np.float64]:
        norm_sq = metric_norm_sq(metric, qx, qy)
        laguerre = sum((eval_laguerre(m, norm_sq) for m in relative_momenta), np.zeros_like(norm_sq))
        return np.asarray(laguerre * np.exp(-norm_sq / 2.0))

    return interaction


def coulomb(orbit_metric: ArrayLike, level: int = 0) -> Interaction:
    """v(q) = (2 pi/|q|) L_n(|q|_L^2/2)^2 exp(-|q|_L^2/2)."""

    def interaction(qx: NDArray[np.float64], qy: NDArray[np.float64]) -> NDArray[np.float64]:
        norm_sq = metric_norm_sq(orbit_metric, qx, qy)
        orbit = eval_laguerre(level, norm_sq / 2.0) ** 2 * np.exp(-norm_sq / 2.0)
        return np.asarray(2.0 * math.pi / np.hypot(qx, qy) * orbit)

    return interaction


def zero_mode(
    lattice: ArrayLike,
    n_flux: int,
    n_electrons: int,
    metric: ArrayLike,
    *,
    bosons: bool = False,
    n_states: int = 1,
) -> list[TorusState]:
    """Laughlin state of metric g at N_phi = m N, then the states above it.

    The Hamiltonian penalises pairs of relative momentum below m of the allowed parity (V_1 for fermions at
    1/3, V_0 for bosons at 1/2), q = 0 included, so that the Laughlin state has energy zero.

    Raises
    ------
    ValueError
        If N_phi/N is not an integer m, odd for fermions and even for bosons.
    """
    exponent, rest = divmod(n_flux, n_electrons)
    if rest or exponent % 2 == int(bosons):
        particles = "bosons" if bosons else "fermions"
        raise ValueError(f"no Laughlin state of {n_electrons} {particles} on {n_flux} flux quanta")
    hamiltonian = pseudopotential(metric, *range(0 if bosons else 1, exponent, 2))
    return lowest_states(
        lattice, n_flux, n_electrons, hamiltonian, n_states=n_states, bosons=bosons, background=False
    )


def madelung_energy(lattice: ArrayLike) -> float:
    """Half the potential of a charge in its own periodic images and background, in e^2/(4 pi eps l_B).

    xi = sum'_R erfc(sqrt(pi) R/a)/R + (2 pi/A) sum'_G erfc(a G/(2 sqrt(pi)))/G - 4/a with a = sqrt(A): the
    splitting at which real and reciprocal sums fall off alike. Bonsall, Maradudin, Phys. Rev. B 15, 1959
    (1977).
    """
    vectors = np.asarray(lattice, dtype=float)
    side = math.sqrt(abs(float(np.linalg.det(vectors))))
    m = np.stack(np.meshgrid(*[np.arange(-30, 31)] * 2, indexing="ij"), axis=-1).reshape(-1, 2)
    m = np.delete(m, len(m) // 2, axis=0)
    real = np.linalg.norm(m @ vectors, axis=1) / side
    reciprocal = np.linalg.norm(m @ np.linalg.inv(vectors).T, axis=1) * side
    lengths = np.concatenate([real, reciprocal])
    return float((np.sum(erfc(math.sqrt(math.pi) * lengths) / lengths) - 4.0) / (2.0 * side))


def projected_coulomb_energy(
    lattice: ArrayLike,
    n_flux: int,
    n_electrons: int,
    hole_metric: ArrayLike,
    orbit_metric: ArrayLike,
    level: int = 0,
    *,
    bosons: bool = False,
    madelung: float | None = None,
) -> float:
    """Coulomb energy per electron of the Laughlin state of ``hole_metric`` in orbits of ``orbit_metric``.

    ``madelung`` replaces the self-energy of the cell, xi/2, computed here.
    """
    state = zero_mode(lattice, n_flux, n_electrons, hole_metric, bosons=bosons)[0]
    self_energy = madelung_energy(lattice) if madelung is None else madelung
    return state.energy_per_electron(coulomb(orbit_metric, level)) + self_energy


def conjugate_state(state: TorusState) -> TorusState:
    """Holes for electrons: c_k <-> c^+_k, antiunitary, so that rho_q -> -rho_-q for every q != 0.

    N Sbar(q) = <rho_q rho_-q> is therefore common to a state and its conjugate, that is
    nu_e Sbar_e(q) = nu_h Sbar_h(q), except where m1 and m2 are both multiples of N_phi. Acting on the full
    level, c_k1 ... c_kN leaves the sign (-1)^(k1 + ... + kN). The conjugate is given no energy (nan): that
    depends on the interaction.

    Raises
    ------
    ValueError
        For bosons.
    """
    sector = state.sector
    if sector.bosons:
        raise ValueError("only fermions have a particle-hole conjugate")
    n_flux = sector.n_flux
    everything = n_flux * (n_flux - 1) // 2
    target = momentum_sector(n_flux - sector.n_electrons, n_flux, (everything - sector.momentum) % n_flux)
    rank = {tuple(occupied): index for index, occupied in enumerate(target.orbitals.tolist())}
    vector = np.zeros(len(target.orbitals), dtype=complex)
    for occupied, amplitude in zip(sector.orbitals.tolist(), state.vector, strict=True):
        empty = tuple(k for k in range(n_flux) if k not in occupied)
        vector[rank[empty]] = (-1.0) ** sum(occupied) * np.conj(amplitude)
    return TorusState(state.lattice, target, vector, math.nan)
