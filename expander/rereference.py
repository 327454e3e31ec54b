"""Re-reference: the same result seen from another place of the body.

The rigid-body motion that a case leaves free says where a support happened to be, not how the body
deforms. It is removed from displacement (a polar vector) and rotation (an axial one) on the sector.
Only motions compatible with the case are removed, so what remains is still carried by
``chi(g) rho(Q)`` and closes at the seams.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import ArrayLike

from expander.audit.magnitudes import body_box
from expander.audit.rigid import Motions, Numbers, field_of, share
from expander.errors import InputError
from expander.groups import Group, direction_words
from expander.placements import unit

METHODS = ("least squares", "three points")
_COLLINEAR = 1e-6  # height of the triangle of three points, as part of its longest side
_COMPATIBLE = 1e-6  # of the motion's displacement over the body, or of the field's largest


@dataclass(frozen=True, eq=False)
class Rereference:
    """A rigid-body motion taken out of a case.

    Attributes
    ----------
    method : "least squares" or "three points".
    coefficients : (k,) of the free motions: lengths, and radians.
    """

    motions: Motions
    method: str
    coefficients: Numbers

    @cached_property
    def motion(self) -> Numbers:
        """(6,) translation at `motions.point` and rotation that were taken out."""
        return np.asarray(self.coefficients @ self.motions.basis)

    @property
    def words(self) -> str:
        """What was removed: ``translation along z 0.0123, rotation about z .. 0.00045 rad``."""
        return ", ".join(
            f"{what} {_amount(complex(c))}{' rad' if what.startswith('rotation') else ''}"
            for what, c in zip(self.motions.words, self.coefficients, strict=True)
        )

    def displacement(self, points: ArrayLike) -> Numbers:
        """(n, 3) the displacement that was taken out, at `points` (n, 3)."""
        return field_of(self.motion, self.motions.point, points)

    def of_displacement(self, points: ArrayLike, u: ArrayLike) -> Numbers:
        """(n, 3) what remains of the displacement `u` (n, 3)."""
        return np.asarray(np.asarray(u) - self.displacement(points))

    def of_rotation(self, rotation: ArrayLike) -> Numbers:
        """(n, 3) what remains of rotations (n, 3) in radians."""
        return np.asarray(np.asarray(rotation) - self.motion[3:])


def remove(
    motions: Motions,
    points: ArrayLike,
    u: ArrayLike,
    method: str = "least squares",
    weights: ArrayLike | None = None,
    nodes: Sequence[int] | None = None,
) -> Rereference:
    """The free rigid-body motion in a displacement.

    Parameters
    ----------
    u : (n, 3) displacement at `points` (n, 3), real or complex.
    method : "least squares": what remains is smallest in the root mean square.
        "three points": the rule of `three_points`.
    weights : (n,) for least squares; 1/m at a node that m copies share makes it that of the whole
        body.
    nodes : the three nodes of "three points".

    Raises
    ------
    InputError
        If no motion is free; if three points move in a way that the load behaviour forbids to the
        whole body; for nodes that are no three points.

    Examples
    --------
    >>> from expander.audit.rigid import free_motions
    >>> from expander.groups import CutPlane, make_group
    >>> x, y = (CutPlane(n, v, np.zeros(3)) for n, v in zip("xy", np.eye(3)))
    >>> motions = free_motions(make_group([x, y], None), [1, 1, 1, 1])
    >>> points = np.array([[1.0, 0, 0], [0, 2, 0], [0, 0, 0]])
    >>> found = remove(motions, points, [[0, 0, 0.1], [0, 0, 0.2], [0, 0, 0.3]])
    >>> found.words
    'translation along z 0.2'
    """
    if not motions.count:
        raise InputError(
            "There is nothing to remove: the load behaviour of the case leaves no rigid-body "
            "motion of the whole body free.",
            "Leave out the re-reference of this case.",
        )
    if method == "least squares":
        return Rereference(motions, method, least_squares(motions, points, u, weights))
    if method != "three points":
        raise InputError(f"method = {method!r} is unknown.", f"Expected one of: {METHODS}.")
    x, values = np.asarray(points, dtype=float), np.asarray(u)
    chosen = _three(nodes, len(x))
    t, omega = three_points(x[chosen], values[chosen])
    motion = np.concatenate([t + np.cross(omega, motions.point - x[chosen[0]]), omega])
    box = body_box(motions.group, x)
    corners = np.stack([a.ravel() for a in np.meshgrid(*box.T, indexing="ij")], axis=1)
    lengths = np.einsum("ki,ki->k", motions.basis, motions.basis.conj()).real
    coefficients = motions.basis.conj() @ motion / lengths
    outside = motion - coefficients @ motions.basis

    def size(m: Numbers) -> float:
        """Largest displacement over the body; it is largest at a corner of a box around it."""
        return float(np.linalg.norm(field_of(m, motions.point, corners), axis=1).max())

    finite = values[np.isfinite(values).all(axis=1)]
    largest = float(np.linalg.norm(finite, axis=1).max(initial=0.0))
    if size(outside) > _COMPATIBLE * max(size(motion), largest):
        raise _forbidden(motions, outside, size)
    return Rereference(motions, method, coefficients)


def least_squares(
    motions: Motions, points: ArrayLike, u: ArrayLike, weights: ArrayLike | None = None
) -> Numbers:
    """(k,) coefficients of the motions nearest to `u`; parameters as for `rigid.share`."""
    return share(motions, points, u, weights)[1]


def three_points(points: ArrayLike, u: ArrayLike) -> tuple[Numbers, Numbers]:
    """The small rigid-body motion that three points make: the 3-2-1 rule of datum points.

    Without it the first point is at rest, the second moves only along its direction from the
    first, and the third only in the plane of the three (common practice in measuring parts).

    Parameters
    ----------
    points, u : (3, 3) three points and their displacements, each a row.

    Returns
    -------
    Translation (3,) at the first point and rotation (3,) in radians.

    Raises
    ------
    InputError
        If the points lie on one line.

    Examples
    --------
    >>> t, omega = three_points(np.array([[0.0, 0, 0], [2, 0, 0], [0, 1, 0]]),
    ...                         np.array([[5.0, 0, 0], [5, 0.2, 0], [5, 0, 0.3]]))
    >>> t.tolist(), omega.tolist()
    ([5.0, 0.0, 0.0], [0.3, 0.0, 0.1])
    """
    x, v = np.asarray(points, dtype=float), np.asarray(u)
    along, third = x[1] - x[0], x[2] - x[0]
    across = np.cross(along, third)
    longest = float(max(np.linalg.norm(d) for d in (along, third, third - along)))
    if float(np.linalg.norm(across)) <= _COLLINEAR * longest**2:
        at = ", ".join("(" + ", ".join(f"{c:.6g}" for c in p) + ")" for p in x)
        raise InputError(
            f"The three points {at} lie on one line or coincide: a turn about it would go unseen.",
            "Choose three nodes that span a triangle.",
        )
    omega = np.cross(along, v[1] - v[0]) / (along @ along)
    lift = (v[2] - v[0] - np.cross(omega, third)) @ across / (across @ across)
    return np.asarray(v[0] + 0.0), np.asarray(omega + lift * along)


def _three(nodes: Sequence[int] | None, count: int) -> list[int]:
    chosen = [] if nodes is None else [int(n) for n in nodes]
    if len(chosen) != 3 or min(chosen) < 0 or max(chosen) >= count:
        raise InputError(
            f"Three points were asked for, but the nodes are {chosen or 'not given'}.",
            f"Give three node numbers from 0 to {count - 1}, on no common line.",
        )
    return chosen


def _amount(c: complex) -> str:
    if abs(c.imag) <= 1e-12 * abs(c):
        return f"{c.real:.4g}"
    return f"{abs(c):.4g} (phase {np.rad2deg(np.angle(c)):.4g} degrees)"


# --- what forbids a motion ----------------------------------------------------------------------


def _forbidden(motions: Motions, outside: Numbers, size: Callable[[Numbers], float]) -> InputError:
    """The generator that forbids most of a motion (6,), and which motion that is."""
    by = dict(_forbidden_parts(motions, outside))
    why = max(by, key=lambda w: size(by[w]))
    halves = {
        "translation along": by[why] * np.repeat([1.0, 0.0], 3),
        "rotation about": by[why] * np.repeat([0.0, 1.0], 3),
    }
    what = max(halves, key=lambda w: size(halves[w]))
    v = halves[what][:3] + halves[what][3:]
    amount = np.linalg.norm(v) * v[np.argmax(np.abs(v))] / np.abs(v).max()
    direction = unit((v / amount).real)
    rad = " rad" if what.startswith("rotation") else ""
    return InputError(
        f"The three points move with a {what} {direction_words(direction)} of "
        f"{_amount(complex(amount))}{rad}, which {why} forbids to the whole body: taken out, the "
        "copies would no longer close.",
        f'Choose other nodes, or method = "{METHODS[0]}"; free here: {", ".join(motions.words)}.',
    )


def _forbidden_parts(motions: Motions, motion: Numbers) -> Iterator[tuple[str, Numbers]]:
    """What forbids, in words, and the part of the motion (6,) that it does."""
    group, chi = motions.group, motions.chi
    for k in range(group.times.shape[1]):
        powers = [0]  # of the generator: those of a plane are two, of a turn all sectors
        while (following := int(group.times[powers[-1], k])) != 0:
            powers.append(following)
        images = [
            chi[g] * np.concatenate([p.Q @ motion[:3], p.det * p.Q @ motion[3:]])
            for g, p in ((g, group.placements[g]) for g in powers)
        ]
        yield _generator_words(group, k, chi[powers[1]]), motion - np.mean(images, axis=0)
    if motions.normal is not None:
        n, t, omega = motions.normal, motion[:3], motion[3:]
        out = np.concatenate([(t @ n) * n, omega - (omega @ n) * n])
        yield "the plane of the plane model", out


def _generator_words(group: Group, k: int, chi: complex) -> str:
    if k < len(group.planes):
        word = "symmetric" if chi.real > 0 else "antisymmetric"
        return f"the plane {group.planes[k].name!r} under {word} load"
    sectors = len(group) if group.axis is None else group.axis.sectors
    h = round(abs(float(np.angle(chi))) * sectors / (2.0 * np.pi))
    return f"the load of {h} nodal diameters on {sectors} sectors"
