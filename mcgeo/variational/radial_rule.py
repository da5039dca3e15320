"""Integrals over |k| of a smooth function times one that oscillates."""

from __future__ import annotations

import math
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.polynomial.legendre import leggauss, legvander
from numpy.typing import NDArray

Array = NDArray[np.float64]

# Panels double in width, so that any scale of the smooth function between the first and the last is resolved.
_FIRST_PANEL = 1.0 / 128.0
_NODES = 20
# On the first panel k = width t^8: where V falls as a power of k, so that h is singular at 0, it is smooth in t.
_POWER = 8


@dataclass(frozen=True, eq=False)
class RadialRule:
    """int dk h(k) phi(k) = sum_j h(nodes_j) phi_j, phi_j = phi(fine) @ projection.

    On every panel h is a polynomial of degree below 20 through its nodes; phi enters through its integrals with such
    polynomials, taken on the fine nodes. So h, which has to be evaluated anew for every metric, needs a few hundred
    nodes however fast phi oscillates.

    Attributes
    ----------
    nodes : ndarray, shape (n_nodes,)
    fine : ndarray, shape (n_fine,)
    projection : ndarray, shape (n_fine, n_nodes)
    """

    nodes: Array
    fine: Array
    projection: Array


def radial_rule(largest: float, length: float) -> RadialRule:
    """Rule on (0, ``largest``) for functions phi that vary like cos(k ``length``) or slower."""
    n_panels = math.ceil(math.log2(max(1.0, largest / _FIRST_PANEL)))
    edges = np.concatenate([[0.0], largest * 2.0 ** np.arange(-n_panels, 1)])
    coarse, weights = leggauss(_NODES)
    degrees = np.arange(_NODES)
    # Values at the nodes to Legendre coefficients, and these to values: phi_j = w_j sum_p (p + 1/2) P_p(x_j) <P_p phi>.
    at_nodes = legvander(coarse, _NODES - 1) * (degrees + 0.5) * weights[:, None]
    t = 0.5 * (coarse + 1.0)
    nodes, fine = [edges[1] * t**_POWER], [edges[1] * t**_POWER]
    blocks = [np.diag(edges[1] * _POWER * t ** (_POWER - 1) * 0.5 * weights)]
    for start, stop in pairwise(edges[1:]):
        half, middle = 0.5 * (stop - start), 0.5 * (stop + start)
        phase = half * length
        # A rule of n nodes is exact up to degree 2n - 1; cos(phase x) ends a little above degree ``phase``.
        x, w = leggauss(math.ceil(0.5 * phase + 5.0 * phase ** (1.0 / 3.0)) + _NODES)
        nodes.append(middle + half * coarse)
        fine.append(middle + half * x)
        blocks.append(half * w[:, None] * (legvander(x, _NODES - 1) @ at_nodes.T))
    projection = np.zeros((sum(map(len, fine)), sum(map(len, nodes))))
    row = 0
    for panel, block in enumerate(blocks):
        projection[row : row + len(block), panel * _NODES : (panel + 1) * _NODES] = block
        row += len(block)
    return RadialRule(np.concatenate(nodes), np.concatenate(fine), projection)
