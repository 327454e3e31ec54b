"""Absurd magnitudes: displacements and rotations that no such body can have."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from expander.audit.rigid import Numbers
from expander.groups import Group
from expander.placements import Floats

# Displacement as part of the body's size, rotation in radians. Small-displacement theory puts
# sin(a) = a, wrong by 4 % at 0.5 rad: common practice. More than a full turn, or the body's own
# size, is a mechanism or a wrong unit.
LARGE = {"displacement": 0.1, "rotation": 0.5}
ABSURD = {"displacement": 1.0, "rotation": 2.0 * np.pi}


@dataclass(frozen=True)
class Magnitude:
    """The largest displacement or rotation of a case.

    Attributes
    ----------
    field : "displacement" or "rotation".
    largest : its largest length (of a complex amplitude: over the cycle), and the `node` of it.
    limit : the limit that it passes, or the lowest one if it passes none; in the same unit.
    verdict : "plausible", "large" (linear theory is doubtful) or "absurd".
    """

    field: str
    largest: float
    node: int
    limit: float
    verdict: str


def magnitudes(
    size: float, displacement: ArrayLike | None = None, rotation: ArrayLike | None = None
) -> tuple[Magnitude, ...]:
    """Whether displacement (n, 3) and rotation (n, 3), in radians, can be true of this body.

    Says nothing of mode shapes, whose scale is free.

    Parameters
    ----------
    size : of the whole body, see `body_size`.

    Examples
    --------
    >>> [m.verdict for m in magnitudes(2.0, [[0.0, 0, 0.1]], [[0.0, 0, 7.0]])]
    ['plausible', 'absurd']
    """
    found = []
    for name, values in (("displacement", displacement), ("rotation", rotation)):
        if values is None or not len(np.asarray(values)):
            continue
        scale = size if name == "displacement" else 1.0
        lengths = np.nan_to_num(_largest_over_cycle(np.asarray(values)), posinf=np.inf)
        node = int(np.argmax(lengths))
        largest = float(lengths[node])
        passed, limit = "plausible", LARGE[name] * scale
        for verdict, limits in (("large", LARGE), ("absurd", ABSURD)):
            if largest > limits[name] * scale:
                passed, limit = verdict, limits[name] * scale
        found.append(Magnitude(name, largest, node, limit, passed))
    return tuple(found)


def body_box(group: Group, points: ArrayLike) -> Floats:
    """(2, 3) lowest and highest coordinates of the whole body: of the box around the sector,
    carried by every placement. It may be somewhat larger than the body."""
    x = np.asarray(points, dtype=float)
    ends = np.stack([x.min(axis=0), x.max(axis=0)])
    corners = np.stack([a.ravel() for a in np.meshgrid(*ends.T, indexing="ij")], axis=1)
    images = np.concatenate([p.apply(corners) for p in group.placements])
    return np.stack([images.min(axis=0), images.max(axis=0)])


def body_size(group: Group, points: ArrayLike) -> float:
    """Longest side of the box around the whole body, as `Mesh.size` is that of the sector."""
    return float(np.ptp(body_box(group, points), axis=0).max())


def _largest_over_cycle(values: Numbers) -> Floats:
    """(n,) lengths; of complex amplitudes the semi-major axis of the ellipse that they run on."""
    square = np.einsum("ni,ni->n", values, values.conj()).real
    return np.asarray(np.sqrt((square + np.abs(np.einsum("ni,ni->n", values, values))) / 2.0))
