"""Occupations of a droplet's orbitals and of its relative angular momenta: what its sampling hands to variation.

In the isotropic coordinates a lowest-level droplet of definite angular momentum holds n_l electrons in the orbital z^l,
and a pair has the relative angular momentum l with probability w_l. With P the regularised incomplete gamma function
(DLMF 8.2.4)

    <number of electrons within r> = sum_l n_l P(l + 1, r^2/2),    Prob(|r_ij| < r) = sum_l w_l P(l + 1, r^2/4),

and guiding centres see

    n(k) = <sum_i exp(ik.R_i)> = sum_l n_l L_l(k^2/2) exp(-k^2/4),
    G(k) = (1/N) <sum_{i != j} exp(ik.(R_i - R_j))> = (N - 1) sum_l w_l L_l(k^2) exp(-k^2/2)

(Girvin and Jach, Phys. Rev. B 29, 5617 (1984)). Exactly

    sum n = N,    sum l n = L,    sum w = 1,    sum l w = L/(N - 1),

L the total angular momentum; the last one because the centre of mass of a polynomial of differences is in its lowest
orbital. The transform of the pair distances, mean J_0(k r) times exp(k^2/2), would need no fit, but on an orbit of
another metric this factor outgrows the form factor along one axis, and errors with it; occupations that obey n, w >= 0
and end where the polynomial ends have G(k) under control at all k.
"""

from __future__ import annotations

import dataclasses
import math
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from numpy.typing import NDArray
from scipy.special import gammainc, j1

from mcgeo.estimate.bounded_fit import BoundedFit
from mcgeo.estimate.laguerre_functions import laguerre_functions
from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.states.base import FERMIONS
from mcgeo.states.droplet import DropletState

Array = NDArray[np.float64]

# Prior widths of the second derivatives of n_l and w_l along the radius, in units of a uniform droplet's occupation per
# l_B^2. Exact droplets of up to six electrons reach 9, at their edges, and 0.5.
_ORBITAL_CURVATURE, _PAIR_CURVATURE = 8.0, 2.0
# Counts that are low by chance would weigh more than those high by chance, and bins near the centre hold few: the
# second pass takes its weights from the first one's fit.
_PASSES = 2


@dataclass(frozen=True, eq=False)
class DropletOccupations:
    """n_l and w_l of a droplet with their block samples.

    Attributes
    ----------
    n_electrons : int
    filling : Fraction
    pair_momenta : ndarray of int64, shape (n_momenta,)
        l of the pairs, of one parity.
    orbital_samples : ndarray, shape (n_samples, n_orbitals)
        Independent samples of n_l, l = 0, 1, ...; every one obeys the rules.
    pair_samples : ndarray, shape (n_samples, n_momenta)
        Of w_l, from the same blocks.
    orbital_errors, pair_errors : ndarray, optional
        Standard errors of single n_l and w_l by a fit without the bounds, at which samples stand still.
    """

    n_electrons: int
    filling: Fraction
    pair_momenta: NDArray[np.int64]
    orbital_samples: Array
    pair_samples: Array
    orbital_errors: Array | None = None
    pair_errors: Array | None = None

    @property
    def radius(self) -> float:
        """R of the background, sqrt(2N/nu)."""
        return math.sqrt(2.0 * self.n_electrons / float(self.filling))

    def orbital(self, index: int) -> Estimate:
        """n_l of the orbital z^index."""
        return _single(self.orbital_samples[:, index], self.orbital_errors, index)

    def pair(self, index: int) -> Estimate:
        """w_l of ``pair_momenta[index]``."""
        return _single(self.pair_samples[:, index], self.pair_errors, index)

    def pair_basis(self, norm: Array) -> Array:
        """(N - 1) L_l(k^2) exp(-k^2/2) for |k| of shape (n,): shape (n_momenta, n)."""
        functions = laguerre_functions(int(self.pair_momenta[-1]), np.asarray(norm, dtype=float) ** 2)
        return np.asarray((self.n_electrons - 1.0) * functions[self.pair_momenta])

    def density_basis(self, norm: Array) -> Array:
        """L_l(k^2/2) exp(-k^2/4) for |k| of shape (n,): shape (n_orbitals, n)."""
        return laguerre_functions(self.orbital_samples.shape[1] - 1, 0.5 * np.asarray(norm, dtype=float) ** 2)

    def background(self, norm: Array) -> Array:
        """n_b(k) = 2N J_1(kR)/(kR) of the neutralising charge for |k| > 0."""
        x = self.radius * np.asarray(norm, dtype=float)
        return np.asarray(2.0 * self.n_electrons * j1(x) / x)


def _single(samples: Array, errors: Array | None, index: int) -> Estimate:
    found = mean_estimate(samples)
    return found if errors is None else dataclasses.replace(found, error=float(errors[index]))


def fit_droplet_occupations(
    state: DropletState, radial: Array, pairs: Array, widths: tuple[float, float]
) -> DropletOccupations:
    """Constrained weighted least squares of both histograms.

    The errors of the counts are taken as those of independent counts as many as were expected, their number from the
    scatter of the samples. A
    penalty on second differences reads as a prior on the curvature of an occupation along the radius, wider than
    that of any droplet known exactly; it fixes what histograms leave open, the alternation between neighbours far out,
    on which no energy depends: without it energies stay the same within half their errors.

    Parameters
    ----------
    state : DropletState
    radial : ndarray, shape (n_samples, n_bins)
        Independent samples of the number of electrons in bins of r', the last one without an upper edge.
    pairs : ndarray, shape (n_samples, n_pair_bins)
        Likewise of the probability that a pair is in a bin of |r'_ij|.
    widths : tuple of float
        Widths of the two kinds of bins in l_B.
    """
    n, filling = state.n_electrons, state.filling
    orbitals = np.arange(state.largest_orbital + 1)
    momenta = np.array(state.pair_momenta)
    # Fermions fill an orbital once. A radius r belongs to l = r^2/2, a distance to l = r^2/4; uniform droplets have nu
    # and 4 nu/N there.
    most = 1.0 if state.statistics == FERMIONS else math.inf
    orbital_samples, orbital_errors = _fitted(
        _bin_probabilities(orbitals, radial.shape[1], widths[0], 2.0), radial, orbitals,
        _second_differences(orbitals, 2.0 / (_ORBITAL_CURVATURE * float(filling))), (n, state.angular_momentum), most,
    )  # fmt: skip
    pair_samples, pair_errors = _fitted(
        _bin_probabilities(momenta, pairs.shape[1], widths[1], 4.0), pairs, momenta,
        _second_differences(momenta, 0.25 / (_PAIR_CURVATURE * 4.0 * float(filling) / n)),
        (1.0, state.angular_momentum / (n - 1)), 1.0,
    )  # fmt: skip
    return DropletOccupations(n, filling, momenta, orbital_samples, pair_samples, orbital_errors, pair_errors)


def _bin_probabilities(momenta: NDArray[np.int64], n_bins: int, width: float, scale: float) -> Array:
    """Differences of P(l + 1, r^2/scale) over the bins, shape (n_bins, n_momenta)."""
    edges = width * np.arange(n_bins)
    inside = gammainc(momenta + 1.0, edges[:, None] ** 2 / scale)
    return np.asarray(np.diff(inside, axis=0, append=1.0))


def _second_differences(momenta: NDArray[np.int64], scale: float) -> Array:
    """Rows scale l_j (c_{j-1} - 2 c_j + c_{j+1}) for all j with two neighbours."""
    return np.asarray(np.diff(np.eye(len(momenta)), 2, axis=0) * (scale * momenta[1:-1, None]))


def _fitted(
    basis: Array, samples: Array, momenta: NDArray[np.int64], penalty: Array, totals: tuple[float, float], most: float
) -> tuple[Array, Array]:
    """Samples under the rules and bounds, and standard errors without the bounds."""
    mean = samples.mean(axis=0)
    variance = samples.var(axis=0, ddof=1) / len(samples)
    known = variance > 0.0
    counts = float(np.median(mean[known] / variance[known]))
    rules = np.stack([np.ones(len(momenta)), momenta.astype(float)])
    expected = mean
    for _ in range(_PASSES):
        # One count more than there is: an empty bin says no more than that it holds less than about one.
        weight = np.sqrt(counts / (np.maximum(expected, 0.0) + 1.0 / counts))
        problem = BoundedFit(basis, weight, penalty, rules, np.array(totals), most)
        fit = problem.linear_fit(mean)
        expected = basis @ fit.of(mean[None, :])[0]
    scatter = problem.free_fit().of(samples).std(axis=0, ddof=1)
    return fit.of(samples), np.asarray(scatter / math.sqrt(len(samples)))
