"""The torus: a parallelogram with periodic sides that encloses a whole number of flux quanta.

The cell of N_phi flux quanta has area 2 pi N_phi (lengths in l_B). It is spanned by L1 and L2; its modulus
tau = L2 / L1 as complex numbers has Im tau > 0.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from mcgeo.errors import GeometryError
from mcgeo.geometry.metric import ISOTROPIC, UnimodularMetric

SHAPES = {"square": 1j, "hexagonal": complex(0.5, math.sqrt(3.0) / 2.0)}


@dataclass(frozen=True)
class Waves:
    """Wavevectors of a half-plane.

    Attributes
    ----------
    integers : ndarray of int64, shape (n_waves, 2)
        (n1, n2) with q.L1 = 2 pi n1, q.L2 = 2 pi n2; n1 > 0, or n1 = 0 and n2 > 0.
    vectors : ndarray, shape (n_waves, 2)
        q in 1/l_B.
    """

    integers: NDArray[np.int64]
    vectors: NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Cell:
    """A torus.

    Parameters
    ----------
    vectors : ndarray, shape (2, 2)
        Rows L1 and L2 in l_B, L2 counter-clockwise from L1.

    Raises
    ------
    GeometryError
        If the vectors are not finite or L2 is not counter-clockwise from L1.
    """

    vectors: NDArray[np.float64]

    def __post_init__(self) -> None:
        v = np.array(self.vectors, dtype=float)
        if v.shape != (2, 2) or not np.all(np.isfinite(v)) or np.linalg.det(v) <= 0.0:
            raise GeometryError(f"a cell needs two vectors, the second counter-clockwise from the first: {v.tolist()}")
        v.setflags(write=False)
        object.__setattr__(self, "vectors", v)

    @classmethod
    def from_tau(cls, tau: complex, n_flux: int) -> Cell:
        """Cell of modulus tau that encloses ``n_flux`` flux quanta, L1 along x.

        Raises
        ------
        GeometryError
            If Im tau is not positive or ``n_flux`` is below 1.
        """
        if not (tau.imag > 0.0 and n_flux >= 1):
            raise GeometryError(f"a cell needs Im(tau) > 0 and at least one flux quantum, not {tau} and {n_flux}")
        side = math.sqrt(2.0 * math.pi * n_flux / tau.imag)
        return cls(np.array([[side, 0.0], [side * tau.real, side * tau.imag]]))

    @classmethod
    def from_shape(cls, shape: str, n_flux: int) -> Cell:
        """The ``square`` or ``hexagonal`` cell.

        Raises
        ------
        GeometryError
            For another name.
        """
        if shape not in SHAPES:
            raise GeometryError(f"a cell is {' or '.join(sorted(SHAPES))}, not {shape!r}")
        return cls.from_tau(SHAPES[shape], n_flux)

    @property
    def area(self) -> float:
        """|L1 x L2| in l_B^2."""
        return float(np.linalg.det(self.vectors))

    @property
    def n_flux(self) -> int:
        """Number of flux quanta, area / 2 pi."""
        return round(self.area / (2.0 * math.pi))

    @property
    def tau(self) -> complex:
        """L2 / L1."""
        first, second = (complex(*row) for row in self.vectors)
        return second / first

    @property
    def side(self) -> float:
        """|L1| in l_B."""
        return float(np.hypot(*self.vectors[0]))

    @property
    def largest_radius(self) -> float:
        """Radius below which every pair is found by folding: half the lesser of the side and the height."""
        return 0.5 * self.side * min(1.0, self.tau.imag)

    def mapped(self, linear_map: NDArray[np.float64]) -> Cell:
        """The cell with vectors S L1, S L2."""
        return Cell(self.vectors @ np.asarray(linear_map).T)

    def reduced(self) -> tuple[Cell, NDArray[np.int64]]:
        """The same lattice with tau in the fundamental domain |Re tau| <= 1/2, |tau| >= 1.

        Returns
        -------
        cell : Cell
        transformation : ndarray of int64, shape (2, 2)
            M of determinant 1 with ``cell.vectors = M @ self.vectors``.
        """
        m = np.eye(2, dtype=np.int64)
        tau = self.tau
        while True:
            shift = round(tau.real)
            m[1] -= shift * m[0]
            tau -= shift
            # The margin keeps a tau on the arc from being turned for ever by rounding.
            if abs(tau) >= 1.0 - 1e-12:
                return Cell(m @ self.vectors), m
            m = np.array([m[1], -m[0]])
            tau = -1.0 / tau

    def waves(self, q_max: float, metric: UnimodularMetric = ISOTROPIC) -> Waves:
        """All wavevectors of the half-plane with q.g^-1.q < q_max^2, in the order of that norm."""
        reciprocal = 2.0 * math.pi * np.linalg.inv(self.vectors)  # columns: dual vectors
        # |n_i| = |q.L_i| / 2 pi is at most q_max times the metric length of L_i.
        reach = np.floor(q_max * np.sqrt(metric.position_norm_sq(self.vectors)) / (2.0 * math.pi)).astype(int)
        n1, n2 = np.meshgrid(np.arange(reach[0] + 1), np.arange(-reach[1], reach[1] + 1), indexing="ij")
        integers = np.stack([n1.ravel(), n2.ravel()], axis=1)
        vectors = integers @ reciprocal.T
        norm_sq = metric.wavevector_norm_sq(vectors)
        half = (integers[:, 0] > 0) | (integers[:, 1] > 0)
        keep = np.flatnonzero(half & (norm_sq < q_max**2))
        # Rounding keeps symmetric partners together in one fixed order.
        keep = keep[np.lexsort((integers[keep, 1], integers[keep, 0], np.round(norm_sq[keep], 9)))]
        return Waves(integers[keep].astype(np.int64), vectors[keep])

    def minimum_image(self, displacement: NDArray[np.float64]) -> NDArray[np.float64]:
        """The shortest of all periodic images of displacements of shape (..., 2)."""
        reduced, _ = self.reduced()
        fractions = np.asarray(displacement, dtype=float) @ np.linalg.inv(reduced.vectors)
        folded = (fractions - np.rint(fractions)) @ reduced.vectors
        # In a reduced cell the nearest image is the folded one or one of its eight neighbours.
        shifts = np.array([(i, j) for i in (-1, 0, 1) for j in (-1, 0, 1)]) @ reduced.vectors
        images = folded[..., None, :] + shifts
        nearest = np.argmin(np.sum(images**2, axis=-1), axis=-1)
        return np.asarray(np.take_along_axis(images, nearest[..., None, None], axis=-2)[..., 0, :])


def lattice_points(vectors: NDArray[np.float64], largest: float) -> NDArray[np.float64]:
    """All non-zero points, up to the length ``largest``, of the lattice spanned by the rows of ``vectors``."""
    area = abs(np.linalg.det(vectors))
    # The distance between lattice lines spanned by one vector is the area over its length.
    reach = [math.ceil(largest * np.hypot(*vectors[1 - k]) / area) for k in (0, 1)]
    n1, n2 = np.meshgrid(np.arange(-reach[0], reach[0] + 1), np.arange(-reach[1], reach[1] + 1))
    integers = np.stack([n1.ravel(), n2.ravel()], axis=1)
    points = integers[np.any(integers != 0, axis=1)] @ vectors
    return np.asarray(points[np.sum(points**2, axis=-1) <= largest**2])
