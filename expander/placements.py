"""Placements: the isometries ``x -> Q x + t`` that carry the sector to its copies."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike, NDArray

Floats = NDArray[np.float64]

# An entry this close to 0 or 1 is round-off of a right angle; no user means an angle of 1e-13.
_ROUND_OFF = 1e-13


def _snapped(Q: Floats) -> Floats:
    nearest = np.round(Q)
    return np.where(np.abs(Q - nearest) < _ROUND_OFF, nearest + 0.0, Q)


def unit(vector: ArrayLike) -> Floats:
    """The direction of a vector, (3,).

    >>> unit([0, 0, 4]).tolist()
    [0.0, 0.0, 1.0]
    """
    v = np.asarray(vector, dtype=float)
    largest = np.abs(v).max()
    v = v / largest  # so that neither squares nor tiny components are lost
    return _snapped(v / np.sqrt(v @ v))


@dataclass(frozen=True, eq=False)
class Placement:
    """An isometry ``x -> Q x + t``.

    Attributes
    ----------
    Q : (3, 3) orthogonal; ``det Q`` is +1 (turned) or -1 (mirrored).
    t : (3,) in the model's length unit.

    Examples
    --------
    >>> Placement.mirror(normal=[1, 0, 0], point=[2, 0, 0]).apply([[3.0, 5.0, 7.0]]).tolist()
    [[1.0, 5.0, 7.0]]
    """

    Q: Floats
    t: Floats

    @staticmethod
    def identity() -> Placement:
        """The modelled part itself."""
        return Placement(np.eye(3), np.zeros(3))

    @staticmethod
    def mirror(normal: ArrayLike, point: ArrayLike) -> Placement:
        """Reflection in the plane through `point` with the given `normal`, each (3,)."""
        n = unit(normal)
        Q = _snapped(np.eye(3) - 2.0 * np.outer(n, n))
        return Placement(Q, 2.0 * (n @ np.asarray(point, dtype=float)) * n)

    @staticmethod
    def turn(axis: ArrayLike, degrees: float, point: ArrayLike) -> Placement:
        """Right-handed turn about the axis through `point`, each (3,)."""
        a = unit(axis)
        angle = np.deg2rad(degrees)
        cross = np.array([[0.0, -a[2], a[1]], [a[2], 0.0, -a[0]], [-a[1], a[0], 0.0]])
        # Rodrigues' formula
        Q = _snapped(np.eye(3) + np.sin(angle) * cross + (1.0 - np.cos(angle)) * cross @ cross)
        p = np.asarray(point, dtype=float)
        return Placement(Q, p - Q @ p)

    def __matmul__(self, first: Placement) -> Placement:
        """`first`, then this one."""
        return Placement(_snapped(self.Q @ first.Q), self.Q @ first.t + self.t)

    def inverse(self) -> Placement:
        return Placement(self.Q.T, -self.Q.T @ self.t)

    @cached_property
    def det(self) -> int:
        """+1 for a turned copy, -1 for a mirrored one."""
        return 1 if np.linalg.det(self.Q) > 0 else -1

    @property
    def mirrored(self) -> bool:
        return self.det < 0

    @cached_property
    def is_identity(self) -> bool:
        return bool(np.array_equal(self.Q, np.eye(3)) and not self.t.any())

    def apply(self, points: ArrayLike) -> Floats:
        """Images of `points`, (n, 3)."""
        return np.asarray(points, dtype=float) @ self.Q.T + self.t

    def plane(self) -> tuple[Floats, float] | None:
        """``(n, d)`` if this is a reflection in the plane ``n . x = d``, otherwise None."""
        if self.det > 0 or abs(np.trace(self.Q) - 1.0) > 1e-9:
            return None
        outer = (np.eye(3) - self.Q) / 2.0  # n n^T
        row = int(np.argmax(np.diag(outer)))
        n = unit(outer[row])
        off_normal = self.t - (self.t @ n) * n
        if np.abs(off_normal).max() > 1e-9 * max(1.0, float(np.abs(self.t).max())):
            return None  # a glide reflection leaves no plane in place
        return n, float(self.t @ n) / 2.0

    def turning(self) -> tuple[Floats, float]:
        """Axis direction (3,) and angle in degrees, 0 to 180, of a turn; of ``-Q`` if mirrored.

        >>> axis, degrees = Placement.turn([0, 0, 1], 90, [0, 0, 0]).turning()
        >>> axis.tolist(), round(degrees, 9)
        ([0.0, 0.0, 1.0], 90.0)
        """
        R = self.Q * self.det
        twice = np.array([R[2, 1] - R[1, 2], R[0, 2] - R[2, 0], R[1, 0] - R[0, 1]])
        sine, cosine = np.sqrt(twice @ twice) / 2.0, (np.trace(R) - 1.0) / 2.0
        degrees = float(np.rad2deg(np.arctan2(sine, cosine)))
        if sine > 1e-6:
            return unit(twice), degrees
        outer = (R + R.T) / 2.0 + np.eye(3)  # 2 a a^T at 180 degrees
        row = int(np.argmax(np.diag(outer)))
        return (unit(outer[row]) if degrees > 90 else np.array([0.0, 0.0, 1.0])), degrees
