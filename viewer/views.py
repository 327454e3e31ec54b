"""Views: from where one looks at the body, and what is right and up in the picture."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from expander.groups import Group
from expander.placements import Floats, unit

_OFF_AXIS = 36.0  # degrees between the line of sight and the axis of a cyclic body


@dataclass(frozen=True, eq=False)
class View:
    """A parallel projection.

    Attributes
    ----------
    towards : from the body to the eye, (3,), a unit vector.
    right, up : directions of the picture, (3,) unit vectors normal to `towards`.

    Examples
    --------
    >>> front = View.looking_from([0, -1, 0])
    >>> front.right.tolist(), front.up.tolist()
    ([1.0, 0.0, 0.0], [0.0, 0.0, 1.0])
    """

    towards: Floats
    right: Floats
    up: Floats

    @staticmethod
    def looking_from(direction: ArrayLike) -> View:
        """The view from a direction, z upwards; y upwards when one looks along z."""
        towards = unit(direction)
        vertical = np.array([0.0, 1.0, 0.0] if abs(towards[2]) > 0.97 else [0.0, 0.0, 1.0])
        right = unit(np.cross(vertical, towards))
        return View(towards, right, unit(np.cross(towards, right)))

    def flat(self, points: Floats) -> Floats:
        """Places in the picture plane, (n, 2)."""
        return np.asarray(points @ np.stack([self.right, self.up], axis=1))


def automatic(body: Floats, sector: Floats, group: Group | None) -> View:
    """A pleasant oblique view that shows the modelled sector.

    Bodies that turns of 120 degrees or less carry into themselves are seen obliquely along their
    axis, others from the octant in which the sector lies, the more from a side the larger it is.

    Parameters
    ----------
    body, sector : points of the whole body and of the modelled sector, (n, 3).
    """
    low, high = body.min(axis=0), body.max(axis=0)
    middle, size = (low + high) / 2.0, np.maximum(high - low, 1e-12 * np.ptp(body))
    # Where the sector lies, in parts of the body's half size
    lies = (sector.mean(axis=0) - middle) / (size / 2.0)
    axis = turning_axis(group) if group is not None else None
    if axis is not None:
        return View.looking_from(_along(axis, body, sector.mean(axis=0) - middle))
    signs = np.where(np.abs(lies) > 0.05, np.sign(lies), [1.0, -1.0, 1.0])
    sides = np.prod(size) / size
    weights = np.clip(np.sqrt(sides / sides.max()), 0.42, 1.0) * [0.72, 1.0, 0.8]
    if size[2] > 0.5 * size[:2].max():
        signs[2] = 1.0  # one looks at a body from below only if it is flat
    return View.looking_from(signs * weights)


def turning_axis(group: Group) -> Floats | None:
    """Direction of the axis about which the copies are turned most finely, if by 120 or less."""
    finest, found = 120.0 + 1e-6, None
    for placement in group.placements[1:]:
        if not placement.mirrored:
            axis, degrees = placement.turning()
            if 1e-6 < degrees < finest - 1e-9:
                finest, found = degrees, axis
    return found


def _along(axis: Floats, body: Floats, sector: Floats) -> Floats:
    """Oblique to the axis, from the end that is thinner (a neck before its disc, not behind it),
    leaning to the side of the sector and upwards."""
    along = body @ axis
    skew = (along.max() + along.min()) / 2.0 - along.mean()
    upwards = axis[np.argmax(np.abs(axis))]
    if abs(skew) > 0.02 * np.ptp(along):
        axis = axis * np.sign(skew)
    elif upwards < 0:
        axis = -axis
    out = sector - (sector @ axis) * axis
    out = out / max(float(np.linalg.norm(out)), 1e-30)
    vertical = np.array([0.0, 0.0, 1.0])
    rise = vertical - (vertical @ axis) * axis
    side = np.cross(axis, out)
    # A little to the side of the sector, so that nothing lines up with the frame of the picture
    lean = unit(out + 0.5 * side + 0.8 * rise)
    angle = np.deg2rad(_OFF_AXIS)
    return np.asarray(np.cos(angle) * axis + np.sin(angle) * lean)
