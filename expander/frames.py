"""Frames: the directions in which the components of a field are given.

A frame gives, at each point, the local base vectors as the columns of ``E`` (3, 3). A value is
turned to global with ``A(E)``, copied there, and turned back with the transpose of the base at the
image point. Global Cartesian and cylindrical are rules of position; a frame that is carried by
the body (shell, beam and ply triads) will be one more class with the same two methods.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from expander.placements import Floats, Placement, unit


@dataclass(frozen=True)
class Global:
    """Cartesian components along x, y, z everywhere."""

    name: str = "global"
    letters: str = "x y z"


@dataclass(frozen=True, eq=False)
class Cylindrical:
    """Components along the radial, hoop and axial directions of an axis.

    On the axis itself the radial direction is that of angle zero, `reference`.
    """

    name: str
    axis: Floats
    point: Floats
    letters: str = "r theta z"

    @property
    def reference(self) -> Floats:
        """Radial direction at angle zero: the next of x, y, z after the one nearest the axis."""
        nearest = int(np.argmax(np.abs(self.axis)))
        e = np.eye(3)[(nearest + 1) % 3]
        return unit(e - (e @ self.axis) * self.axis)

    def radius(self, points: Floats) -> Floats:
        """Distance from the axis, (n,)."""
        d = points - self.point
        return np.asarray(np.linalg.norm(d - np.outer(d @ self.axis, self.axis), axis=1))

    def bases(self, points: Floats, on_axis: float) -> Floats:
        """Local base vectors as columns, (n, 3, 3); nearer the axis than `on_axis`: reference.

        Examples
        --------
        >>> frame = Cylindrical("F", np.array([0.0, 0.0, 1.0]), np.zeros(3))
        >>> frame.bases(np.array([[0.0, 2.0, 0.0]]), 1e-9)[0].T.tolist()  # r, theta, z
        [[0.0, 1.0, 0.0], [-1.0, 0.0, 0.0], [0.0, 0.0, 1.0]]
        """
        d = points - self.point
        radial = d - np.outer(d @ self.axis, self.axis)
        length = np.linalg.norm(radial, axis=1)
        centre = length <= on_axis
        radial[centre] = self.reference
        radial /= np.where(centre, 1.0, length)[:, None]
        axial = np.broadcast_to(self.axis, radial.shape)
        return np.stack([radial, np.cross(axial, radial) + 0.0, axial], axis=2)

    def local_action(self, g: Placement) -> Floats | None:
        """The one (3, 3) action on local components everywhere off the axis, if there is one.

        A placement that keeps the axis line in place acts on (r, theta, z) by signs only.
        """
        along = float(self.axis @ g.Q @ self.axis)
        moved = g.apply(self.point[None])[0] - self.point
        off = moved - (moved @ self.axis) * self.axis
        # Round-off of points, as in groups: below this, a distance is none in any length unit.
        allowed = 1e-12 * max(1.0, float(np.abs(self.point).max()), float(np.abs(g.t).max()))
        if abs(abs(along) - 1.0) > 1e-12 or np.abs(off).max() > allowed:
            return None
        sz = float(np.sign(along))
        return np.diag([1.0, g.det * sz, sz])


Frame = Global | Cylindrical
