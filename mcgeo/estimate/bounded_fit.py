"""Least squares under equalities and bounds, as a linear map of the data.

Minimises sum_i [weight_i (X c - y)_i]^2 + |P c|^2 under A c = b and 0 <= c <= c_max. Once it is known which bounds are
in force the solution is linear in y, so that samples of y give samples of c by that one map.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# Weight of the rules against the data while the bounds in force are looked for; they hold exactly afterwards.
_RULE_WEIGHT = 1e4


@dataclass(frozen=True, eq=False)
class LinearFit:
    """c = response @ y + constant, response of shape (n_unknowns, n_data)."""

    response: Array
    constant: Array

    def of(self, data: Array) -> Array:
        """c of samples of y, shape (n_samples, n_data): shape (n_samples, n_unknowns)."""
        return np.asarray(data @ self.response.T + self.constant)


@dataclass(frozen=True, eq=False)
class BoundedFit:
    """The problem.

    Parameters
    ----------
    basis : ndarray, shape (n_data, n_unknowns)
        X.
    weight : ndarray, shape (n_data,)
        Inverse standard errors of y.
    penalty : ndarray, shape (n_rows, n_unknowns)
        P.
    rules, values : ndarray, shapes (n_rules, n_unknowns) and (n_rules,)
        A and b; rules may repeat one another.
    largest : float
        c_max, infinite where there is none.
    """

    basis: Array
    weight: Array
    penalty: Array
    rules: Array
    values: Array
    largest: float

    def linear_fit(self, mean: Array) -> LinearFit:
        """The linear solution with the bounds that are in force at y = ``mean``."""
        return self._with_bounds(self._bounds_in_force(mean))

    def free_fit(self) -> LinearFit:
        """The linear solution without bounds."""
        return self._with_bounds(np.zeros(self.basis.shape[1], dtype=int))

    def _with_bounds(self, bounds: NDArray[np.int_]) -> LinearFit:
        held = np.where(bounds > 0, self.largest, 0.0)
        free = bounds == 0
        weighted = self.basis.T * self.weight**2
        normal = weighted @ self.basis + self.penalty.T @ self.penalty
        response, constant = np.zeros_like(weighted), np.where(free, 0.0, held)
        if np.any(free):
            rules = self.rules[:, free]
            constant[free] = np.linalg.lstsq(rules, self.values - self.rules @ constant)[0]
            # Whatever the data add lies in the null space of the rules.
            from scipy.linalg import null_space

            inside = null_space(rules)
            inverse = inside @ np.linalg.solve(inside.T @ normal[np.ix_(free, free)] @ inside, inside.T)
            response[free] = inverse @ weighted[free]
            constant[free] -= inverse @ (normal[free] @ constant)
        return LinearFit(response, constant)

    def _bounds_in_force(self, mean: Array) -> NDArray[np.int_]:
        """-1 where c = 0, 1 where c = c_max, 0 elsewhere; a bounded fit with the rules as heavy rows."""
        # Here, since it takes as long to load as a small run takes.
        from scipy.optimize import lsq_linear

        rows = np.concatenate([self.basis * self.weight[:, None], self.penalty])
        right = np.concatenate([mean * self.weight, np.zeros(len(self.penalty))])
        scale = _RULE_WEIGHT * np.linalg.norm(rows, axis=0).max() / np.linalg.norm(self.rules, axis=1)
        rows = np.concatenate([rows, self.rules * scale[:, None]])
        right = np.concatenate([right, self.values * scale])
        # The triangle has the same least squares and far fewer rows.
        turn, triangle = np.linalg.qr(rows)
        solution = lsq_linear(
            triangle, turn.T @ right, bounds=(0.0, self.largest), method="bvls", tol=1e-14, max_iter=10 * rows.shape[1]
        )
        return np.asarray(solution.active_mask, dtype=int)
