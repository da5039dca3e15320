"""Pair occupations: the one object that sampling hands to variation.

In its own metric a lowest-level liquid of filling nu has, with e = -1 and odd m for fermions, e = +1 and even m for
bosons,

    S(q) - 1 = e nu exp(-q^2/2) + 4 nu sum_m c_m L_m(q^2) exp(-q^2),
    g(r) = sum_m (2/m!) (r^2/4)^m exp(-r^2/4) n_m,      n_m = 1 + c_m >= 0, n_m -> 1 at large m

(Girvin, Phys. Rev. B 30, 558 (1984); Girvin, MacDonald and Platzman, Phys. Rev. B 33, 2481 (1986), section IV; the
boson form by the same steps). S(q) = q^2/2 + (s - 2) q^4/8 + ..., with the shift s of an incompressible liquid, gives
term by term

    sum c = -(1/nu + e)/4,   sum (m+1) c = -(1/nu + e)/8,   sum (m+1)(m+2) c = (s - 2)/(8 nu) - e/8.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.special import eval_laguerre

from mcgeo.estimate.statistics import Estimate, mean_estimate
from mcgeo.states.base import FERMIONS, TrialState

Array = NDArray[np.float64]

_FIT_RANGE = 6.0
_ERROR_FLOOR = 0.02
_LARGEST_M = 45
_LARGEST_M_TIMES_FILLING = 15.0
_LARGEST_M_TIMES_FILLING_SQ = 3.0
# Weight of the sum rules against the data while the bounds in force are looked for; they hold exactly afterwards.
_RULE_WEIGHT = 1e5


def sum_rules(filling: Fraction, statistics: str, shift: int | None) -> tuple[NDArray[np.intp], Array]:
    """Powers and values of the sum rules.

    Returns
    -------
    order : ndarray of int, shape (n_rules,)
        0, 1 (and 2 when the shift is known) for the weights 1, (m+1), (m+1)(m+2).
    value : ndarray, shape (n_rules,)
    """
    nu = float(filling)
    e = -1.0 if statistics == FERMIONS else 1.0
    values = [-(1.0 / nu + e) / 4.0, -(1.0 / nu + e) / 8.0]
    if shift is not None:
        values.append((shift - 2.0) / (8.0 * nu) - e / 8.0)
    return np.arange(len(values)), np.array(values)


def rule_matrix(order: NDArray[np.intp], m: NDArray[np.int64]) -> Array:
    """Weights of the rules, 1, (m+1) or (m+1)(m+2) by ``order``, shape (n_rules, n_m)."""
    weights = np.stack([np.ones(len(m)), m + 1.0, (m + 1.0) * (m + 2.0)])
    return np.asarray(weights[order])


@dataclass(frozen=True, eq=False)
class PairOccupations:
    """c_m of a liquid with their block samples.

    Attributes
    ----------
    label : str
    filling : Fraction
    statistics : str
    m : ndarray of int64, shape (n_m,)
        Relative angular momenta of one parity, from the lowest.
    samples : ndarray, shape (n_samples, n_m)
        Independent samples of c_m; every one obeys the sum rules. Errors of all that follows come from them.
    free_errors : ndarray, shape (n_m,), optional
        Standard errors of single c_m by a fit without the bounds n_m >= 0: where one is in force samples stand still,
        and their neighbours, tied to them by the rules, scatter too little. What is smooth in m does not notice.
    """

    label: str
    filling: Fraction
    statistics: str
    m: NDArray[np.int64]
    samples: Array
    free_errors: Array | None = None

    @property
    def coefficients(self) -> Array:
        """Mean c_m, shape (n_m,)."""
        return np.asarray(self.samples.mean(axis=0))

    @property
    def statistics_sign(self) -> float:
        """e: -1 for fermions, +1 for bosons."""
        return -1.0 if self.statistics == FERMIONS else 1.0

    def occupation(self, index: int) -> Estimate:
        """n_m = 1 + c_m; the error is of either sign, also where n_m is held at its bound."""
        c = mean_estimate(self.samples[:, index])
        error = c.error if self.free_errors is None else float(self.free_errors[index])
        return Estimate(1.0 + c.value, error, c.autocorrelation_time, c.effective_samples)

    def basis(self, norm: Array) -> Array:
        """4 nu L_m(q^2) exp(-q^2/2) for |q| of shape (n_q,): shape (n_m, n_q)."""
        x = np.asarray(norm, dtype=float) ** 2
        return np.asarray(4.0 * float(self.filling) * eval_laguerre(self.m[:, None], x) * np.exp(-0.5 * x))

    def guiding_centre_structure(self, norm: Array) -> Array:
        """Mean Sbar(q) for |q| (in the liquid's metric) of shape (n_q,)."""
        limit = 1.0 + self.statistics_sign * float(self.filling)
        return np.asarray(limit + self.coefficients @ self.basis(norm))


def largest_m(state: TrialState) -> int:
    """Largest relative angular momentum fitted.

    45, or 15/nu at low filling, where the correlations reach farther, or 3/nu^2 near the crystal (at 1/7 an end at
    15/nu raises the energy by 6e-6); but no pair distance 2 sqrt(m) beyond about 1.4 times what folding in the cell
    resolves: there the sum rules and the penalty decide.
    """
    start = state.first_occupied
    resolved = (state.frame.isotropic.largest_radius) ** 2 / 4.0
    nu = float(state.filling)
    wanted = max(_LARGEST_M, round(_LARGEST_M_TIMES_FILLING / nu), round(_LARGEST_M_TIMES_FILLING_SQ / nu**2))
    m = min(wanted, max(int(2.0 * resolved), start + 8))
    return m - (m - start) % 2


def fit_occupations(state: TrialState, norm: Array, samples: Array) -> PairOccupations:
    """Constrained weighted least squares of S(q) on |q| < 6.

    Minimises sum_q [(S - fit)/sigma]^2 + sum_m (0.3 (m/10)^1.5 c_m)^2 under the sum rules and n_m >= 0, with c_m = -1
    below the state's first occupied m. sigma is (S + 0.02)/sqrt(n_eff): |rho_q|^2 is nearly exponentially
    distributed. The penalty reads as a prior of width 3 at m = 10 and 0.4 at m = 40 and fixes what data in a finite
    cell leave open. Once it is known which bounds are in force the solution is linear in S(q), and the samples of c_m
    are that linear map of the samples of S(q).

    Parameters
    ----------
    state : TrialState
    norm : ndarray, shape (n_waves,)
        |q| in the state's metric.
    samples : ndarray, shape (n_samples, n_waves)
        Independent samples of S(q).
    """
    fit = occupation_fit(state, norm, samples)
    order, values = sum_rules(state.filling, state.statistics, state.shift)
    rules = rule_matrix(order, fit.m)
    absent = fit.m < state.first_occupied
    target = (fit.data.mean(axis=0) - fit.offset) * fit.weight
    bound = _bounds_in_force(fit.basis * fit.weight[:, None], target, rules, values, fit.penalty, absent)
    response, constant = _linear_solution(fit.basis, fit.weight, rules, values, fit.penalty, absent | bound)
    coefficients = (fit.data - fit.offset) @ response.T + constant
    free, _ = _linear_solution(fit.basis, fit.weight, rules, values, fit.penalty, absent)
    errors = (fit.data @ free.T).std(axis=0, ddof=1) / np.sqrt(len(fit.data))
    return PairOccupations(state.label, state.filling, state.statistics, fit.m, coefficients, errors)


class OccupationFit(NamedTuple):
    """Least squares for c_m: S(q) = offset + basis @ c within 1/weight, c_m = 0 within 1/penalty.

    Attributes
    ----------
    m : ndarray of int64, shape (n_m,)
    basis : ndarray, shape (n_waves, n_m)
    data : ndarray, shape (n_samples, n_waves)
    offset, weight : ndarray, shape (n_waves,)
    penalty : ndarray, shape (n_m,)
    """

    m: NDArray[np.int64]
    basis: Array
    data: Array
    offset: Array
    weight: Array
    penalty: Array


def occupation_fit(state: TrialState, norm: Array, samples: Array) -> OccupationFit:
    """What `fit_occupations` minimises, without rules and bounds."""
    parity = 1 if state.statistics == FERMIONS else 0
    m = np.arange(parity, largest_m(state) + 1, 2)
    empty = PairOccupations(state.label, state.filling, state.statistics, m, np.zeros((1, len(m))))
    inside = norm < _FIT_RANGE
    q, data = norm[inside], samples[:, inside]
    mean = data.mean(axis=0)
    scatter = data.std(axis=0, ddof=1) / np.sqrt(len(data))
    n_eff = 1.0 / np.median((scatter / (mean + _ERROR_FLOOR)) ** 2)
    return OccupationFit(
        m,
        empty.basis(q).T * np.exp(-0.5 * q**2)[:, None],
        data,
        1.0 + empty.statistics_sign * float(state.filling) * np.exp(-0.5 * q**2),
        np.sqrt(n_eff) / (mean + _ERROR_FLOOR),
        0.3 * (m / 10.0) ** 1.5,
    )


def _bounds_in_force(
    design: Array, target: Array, rules: Array, values: Array, penalty: Array, pinned: NDArray[np.bool_]
) -> NDArray[np.bool_]:
    """Which n_m >= 0 are met with equality; a bounded fit with the rules as heavy rows."""
    # Here, since it takes as long to load as a small run takes.
    from scipy.optimize import lsq_linear

    free = ~pinned
    scale = _RULE_WEIGHT / np.linalg.norm(rules, axis=1)
    rows = np.concatenate([design[:, free], np.diag(penalty[free]), rules[:, free] * scale[:, None]])
    right = np.concatenate(
        [target + design[:, pinned].sum(axis=1), np.zeros(free.sum()), (values + rules[:, pinned].sum(axis=1)) * scale]
    )
    solution = lsq_linear(rows, right, bounds=(-1.0, np.inf), method="bvls", tol=1e-14)
    result = np.zeros(len(pinned), dtype=bool)
    result[np.flatnonzero(free)[solution.active_mask < 0]] = True
    return result


def _linear_solution(
    basis: Array, weight: Array, rules: Array, values: Array, penalty: Array, pinned: NDArray[np.bool_]
) -> tuple[Array, Array]:
    """c = response @ (S - offset) + constant with c_m = -1 where pinned and the rules exact.

    By orthogonal factors in the null space of the rules: normal equations would square the condition of a matrix that
    spans many decades, and leave the rules wrong by 1e-7 where S(q) is known to 1e-6.
    """
    free = ~pinned
    n_waves = len(weight)
    design = np.concatenate([basis[:, free] * weight[:, None], np.diag(penalty[free])])
    scale = 1.0 / np.linalg.norm(design, axis=0)
    design = design * scale
    obeyed = rules[:, free] * scale
    factors, triangle = np.linalg.qr(obeyed.T, mode="complete")
    n_rules = len(values)
    along, null = factors[:, :n_rules], factors[:, n_rules:]
    start = along @ np.linalg.solve(triangle[:n_rules].T, values + rules[:, pinned].sum(axis=1))
    orthogonal, upper = np.linalg.qr(design @ null)
    solve = null @ np.linalg.solve(upper, orthogonal.T)
    on_data = scale[:, None] * solve[:, :n_waves] * weight
    response = np.zeros((len(pinned), n_waves))
    response[free] = on_data
    constant = np.where(pinned, -1.0, 0.0)
    fixed = -basis[:, pinned].sum(axis=1)
    constant[free] = scale * (start - solve @ (design @ start)) - on_data @ fixed
    return response, constant
