"""Unimodular metrics: the shapes of orbits, correlation holes, masses and interactions.

A unimodular metric is a symmetric positive matrix g_ab of determinant 1. Its stretch Q >= 0 and angle theta (period pi)
are g = R(theta) diag(e^Q, e^-Q) R(theta)^T. Lengths of positions are r.g.r, those of wavevectors q.g^-1.q. The curve
r.g.r = const is an ellipse of aspect ratio e^Q, long perpendicular to theta. Unimodular metrics form
a hyperbolic plane; (Q cos 2 theta, Q sin 2 theta) are its flat coordinates at the isotropic point.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from mcgeo.errors import GeometryError

Matrix = NDArray[np.float64]


@dataclass(frozen=True)
class UnimodularMetric:
    """A metric of determinant 1.

    Parameters
    ----------
    stretch : float
        Q; a negative one is turned into a positive one at theta + pi/2.
    angle : float
        theta in radians; brought into (-pi/2, pi/2], and to 0 when Q = 0.

    Raises
    ------
    GeometryError
        If either is not finite.
    """

    stretch: float = 0.0
    angle: float = 0.0

    def __post_init__(self) -> None:
        stretch, angle = float(self.stretch), float(self.angle)
        if not (math.isfinite(stretch) and math.isfinite(angle)):
            raise GeometryError(f"a metric needs a finite stretch and angle, not {self.stretch} and {self.angle}")
        if stretch < 0.0:
            stretch, angle = -stretch, angle + math.pi / 2
        angle = math.remainder(angle, math.pi) if stretch > 0.0 else 0.0
        if angle <= -math.pi / 2:
            angle += math.pi
        object.__setattr__(self, "stretch", stretch)
        object.__setattr__(self, "angle", angle)

    @classmethod
    def from_matrix(cls, matrix: ArrayLike) -> UnimodularMetric:
        """Metric of a symmetric positive 2x2 matrix, divided by the root of its determinant.

        Raises
        ------
        GeometryError
            If the matrix is not symmetric and positive definite.
        """
        m = np.asarray(matrix, dtype=float)
        if m.shape != (2, 2) or not np.all(np.isfinite(m)) or abs(m[0, 1] - m[1, 0]) > 1e-9 * np.abs(m).max():
            raise GeometryError(f"a metric needs a symmetric 2x2 matrix of finite numbers, not {m.tolist()}")
        determinant = m[0, 0] * m[1, 1] - m[0, 1] * m[1, 0]
        if not (determinant > 0.0 and m[0, 0] > 0.0):
            raise GeometryError(f"a metric needs a positive definite matrix, not {m.tolist()}")
        m = m / math.sqrt(determinant)
        # cosh Q = Tr g / 2; the traceless part is sinh Q (cos 2 theta, sin 2 theta).
        along, across = 0.5 * (m[0, 0] - m[1, 1]), 0.5 * (m[0, 1] + m[1, 0])
        return cls(math.asinh(math.hypot(along, across)), 0.5 * math.atan2(across, along))

    @classmethod
    def from_mass_tensor(cls, tensor: ArrayLike) -> UnimodularMetric:
        """Mass metric m_ab / sqrt(det m) of an effective-mass tensor (heavy axis: short orbit)."""
        return cls.from_matrix(tensor)

    @classmethod
    def from_aspect_ratio(cls, aspect_ratio: float, angle: float = 0.0) -> UnimodularMetric:
        """Metric whose ellipse has the given ratio of axes, short along ``angle`` (radians) when above 1.

        Raises
        ------
        GeometryError
            If the ratio is not positive.
        """
        if not aspect_ratio > 0.0:
            raise GeometryError(f"an aspect ratio must be positive, not {aspect_ratio}")
        return cls(math.log(aspect_ratio), angle)

    @classmethod
    def from_flat_coordinates(cls, along: float, across: float) -> UnimodularMetric:
        """Metric at (Q cos 2 theta, Q sin 2 theta)."""
        return cls(math.hypot(along, across), 0.5 * math.atan2(across, along))

    @property
    def flat_coordinates(self) -> tuple[float, float]:
        """(Q cos 2 theta, Q sin 2 theta)."""
        return self.stretch * math.cos(2 * self.angle), self.stretch * math.sin(2 * self.angle)

    @property
    def angle_degrees(self) -> float:
        """theta in degrees."""
        return math.degrees(self.angle)

    @property
    def aspect_ratio(self) -> float:
        """e^Q: long axis over short axis of r.g.r = const."""
        return math.exp(self.stretch)

    def _power(self, exponent: float) -> Matrix:
        c, s = math.cos(2 * self.angle), math.sin(2 * self.angle)
        ch, sh = math.cosh(exponent * self.stretch), math.sinh(exponent * self.stretch)
        return np.array([[ch + sh * c, sh * s], [sh * s, ch - sh * c]])

    @property
    def matrix(self) -> Matrix:
        """g_ab, shape (2, 2)."""
        return self._power(1.0)

    @property
    def inverse_matrix(self) -> Matrix:
        """g^ab, shape (2, 2)."""
        return self._power(-1.0)

    @property
    def linear_map(self) -> Matrix:
        """The symmetric S with S^T S = g: takes lab positions to the metric's isotropic coordinates."""
        return self._power(0.5)

    @property
    def inverse_linear_map(self) -> Matrix:
        """S^-1."""
        return self._power(-0.5)

    @property
    def inverse(self) -> UnimodularMetric:
        """The metric with matrix g^-1."""
        return UnimodularMetric(-self.stretch, self.angle)

    def composed_with(self, other: UnimodularMetric) -> UnimodularMetric:
        """S^T h S with S of this metric: ``other`` h, given in this metric's isotropic coordinates, in the lab."""
        s = self.linear_map
        return UnimodularMetric.from_matrix(s.T @ other.matrix @ s)

    def relative_to(self, frame: UnimodularMetric) -> UnimodularMetric:
        """This metric in the isotropic coordinates of ``frame``: S^-T g S^-1; undoes `composed_with`."""
        s = frame.inverse_linear_map
        return UnimodularMetric.from_matrix(s.T @ self.matrix @ s)

    def displaced(self, along: float, across: float) -> UnimodularMetric:
        """The metric at the flat (normal) coordinates (along, across) about this one, in the lab's directions.

        g^(1/2) exp(along sigma_z + across sigma_x) g^(1/2): at the isotropic point the coordinates are
        (Q cos 2 theta, Q sin 2 theta), elsewhere they measure geodesic distance in the same two directions.
        """
        return self.composed_with(UnimodularMetric.from_flat_coordinates(along, across))

    def turned(self, angle: float) -> UnimodularMetric:
        """The metric rotated by ``angle`` radians."""
        return UnimodularMetric(self.stretch, self.angle + angle)

    def distance(self, other: UnimodularMetric) -> float:
        """Geodesic distance d = arccosh(Tr(g1^-1 g2) / 2); equals |Q1 - Q2| for metrics of one angle.

        As sinh^2(d/2) = sinh^2((Q1 - Q2)/2) + sinh Q1 sinh Q2 sin^2(theta1 - theta2), which neither cancels for
        neighbours nor fails where the matrices' entries are too far apart to be added.
        """
        radial = math.sinh(0.5 * (self.stretch - other.stretch))
        turned = math.sqrt(math.sinh(self.stretch)) * math.sqrt(math.sinh(other.stretch))
        return 2.0 * math.asinh(math.hypot(radial, turned * math.sin(self.angle - other.angle)))

    def position_norm_sq(self, positions: ArrayLike) -> Matrix:
        """r.g.r for positions of shape (..., 2)."""
        return _quadratic_form(self.matrix, np.asarray(positions, dtype=float))

    def wavevector_norm_sq(self, wavevectors: ArrayLike) -> Matrix:
        """q.g^-1.q for wavevectors of shape (..., 2)."""
        return _quadratic_form(self.inverse_matrix, np.asarray(wavevectors, dtype=float))


def _quadratic_form(matrix: Matrix, vectors: Matrix) -> Matrix:
    """v.m.v written out: several times faster than a contraction, and this is most of a scan's time."""
    x, y = vectors[..., 0], vectors[..., 1]
    return np.asarray((matrix[0, 0] * x + (2.0 * matrix[0, 1]) * y) * x + matrix[1, 1] * y * y)


ISOTROPIC = UnimodularMetric()
