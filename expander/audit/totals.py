"""Totals: resultant force and moment of nodal forces, and what they must be in the whole body.

Nodal forces are extensive: the sector holds its own share (half in a cut plane, 1/N on the axis),
and where copies share a node their shares add. So the total of the whole body is the sum over the
copies of the sector's own total, and no seam need be found for it.

For the copy made by ``x -> Q x + t`` a force is polar and a moment axial::

    F' = chi Q F        M' about g(p) = chi det(Q) Q M about p
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.groups import Group, direction_words
from expander.model import Mesh
from expander.placements import Floats, Placement
from expander.topology import Ints

Numbers = NDArray[Any]  # float or complex

_ROUND_OFF = 1e-9


@dataclass(frozen=True, eq=False)
class Resultant:
    """A force and its moment about a point.

    Attributes
    ----------
    force : (3,) real or complex, in the model's force unit.
    moment : (3,) about `about`, force times length.
    about : (3,) in the model's length unit.
    """

    force: Numbers
    moment: Numbers
    about: Floats

    def at(self, about: ArrayLike) -> Resultant:
        """The same forces, with their moment about another point.

        >>> load = Resultant(np.array([0.0, 2.0, 0.0]), np.zeros(3), np.array([3.0, 0.0, 0.0]))
        >>> load.at([0.0, 0.0, 0.0]).moment.tolist()
        [0.0, 0.0, 6.0]
        """
        point = np.asarray(about, dtype=float)
        return Resultant(self.force, self.moment + np.cross(self.about - point, self.force), point)

    def __add__(self, other: Resultant) -> Resultant:
        """Both, about the point of the first."""
        moved = other.at(self.about)
        return Resultant(self.force + moved.force, self.moment + moved.moment, self.about)


def of_sector(
    points: NDArray[np.floating], forces: Numbers, moments: Numbers | None, about: ArrayLike
) -> Resultant:
    """Resultant of the sector's own shares.

    Parameters
    ----------
    points : (n, 3). forces : (n, 3) in global components, before any seam is resolved.
    moments : (n, 3) nodal moments, or None.

    Examples
    --------
    >>> total = of_sector(np.array([[2.0, 0.0, 0.0]]), np.array([[0.0, 0.0, 5.0]]), None, [0, 0, 0])
    >>> total.force.tolist(), total.moment.tolist()
    ([0.0, 0.0, 5.0], [0.0, -10.0, 0.0])
    """
    point = np.asarray(about, dtype=float)
    moment = np.cross(points.astype(float) - point, forces).sum(axis=0)
    if moments is not None:
        moment = moment + moments.sum(axis=0)
    return Resultant(forces.sum(axis=0), moment, point)


def scale_of(
    points: NDArray[np.floating], forces: Numbers, moments: Numbers | None, about: ArrayLike
) -> tuple[float, float]:
    """Sums of the magnitudes of nodal forces and of their moments: what a residual is small to.

    Arguments as for `of_sector`. A total that cancels says nothing about its own round-off.
    """
    arms = points.astype(float) - np.asarray(about, dtype=float)
    force = np.linalg.norm(forces, axis=1)
    moment = float((np.linalg.norm(arms, axis=1) * force).sum())
    if moments is not None:
        moment += float(np.linalg.norm(moments, axis=1).sum())
    return float(force.sum()), moment


def _carried(
    resultant: Resultant, placements: Sequence[Placement], chi: Numbers
) -> tuple[Numbers, Numbers]:
    """Forces and moments (copies, 3) of the copies, all about the resultant's own point."""
    Q = np.stack([p.Q for p in placements])
    det = np.array([p.det for p in placements])
    origin = np.stack([p.apply(resultant.about[None])[0] for p in placements])
    force = np.asarray(chi)[:, None] * (Q @ resultant.force)
    moment = (chi * det)[:, None] * (Q @ resultant.moment)
    return force, moment + np.cross(origin - resultant.about, force)


def carried(resultant: Resultant, placement: Placement, chi: complex) -> Resultant:
    """The sector's resultant on one copy, with the moment about the same point as before.

    >>> pull = Resultant(np.array([1.0, 5.0, 0.0]), np.array([0.0, 0.0, 7.0]), np.zeros(3))
    >>> image = carried(pull, Placement.mirror([1, 0, 0], [2, 0, 0]), 1.0)
    >>> image.force.tolist(), (image.moment + 0.0).tolist()  # 7 turns into -7, and 5 acts at x = 4
    ([-1.0, 5.0, 0.0], [0.0, 0.0, 13.0])
    """
    force, moment = _carried(resultant, [placement], np.array([chi]))
    return Resultant(force[0], moment[0], resultant.about)


def per_copy(resultant: Resultant, group: Group, chi: Numbers) -> list[Resultant]:
    """The resultant of every copy, about the same point; `chi` is (copies,)."""
    forces, moments = _carried(resultant, group.placements, chi)
    return [Resultant(f, m, resultant.about) for f, m in zip(forces, moments, strict=True)]


def whole(resultant: Resultant, group: Group, chi: Numbers) -> Resultant:
    """The resultant of the whole body, about the same point; `chi` is (copies,).

    A single copy need not be in equilibrium: its neighbours pull at its seams. Only this sum must.
    """
    forces, moments = _carried(resultant, group.placements, chi)
    return Resultant(forces.sum(axis=0), moments.sum(axis=0), resultant.about)


# --- what vanishes by symmetry --------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Vanishing:
    """Which components of the whole body's resultant vanish whatever the load is.

    Attributes
    ----------
    about : (3,) the point, fixed by every placement, about which moments are meant.
    projector : (6, 6) on (force, moment about `about`): what the group leaves of any load.
    rank : number of independent components that remain free, 0 to 6.
    words : one sentence.
    """

    about: Floats
    projector: Numbers
    rank: int
    words: str


def fixed_point(group: Group, near: ArrayLike) -> Floats:
    """The point nearest to `near`, (3,), that every placement leaves where it is: the mean of its
    images."""
    images = [p.apply(np.asarray(near, dtype=float)[None])[0] for p in group.placements]
    return np.asarray(np.mean(images, axis=0))


def vanishing(group: Group, chi: Numbers, about: ArrayLike) -> Vanishing:
    """What symmetry alone says of the whole body's force and moment.

    The whole body has ``sum_g chi(g) diag(Q, det(Q) Q)`` times the sector's force and moment, which
    is ``|G|`` times the projector on what transforms that way (Serre, Linear Representations of
    Finite Groups, 2.6, theorem 8).

    Parameters
    ----------
    chi : (copies,) real or complex. about : (3,), moved to the nearest point fixed by the group.

    Examples
    --------
    >>> from expander.groups import CutPlane, make_group
    >>> mid = make_group([CutPlane("mid", np.array([1.0, 0.0, 0.0]), np.zeros(3))], None)
    >>> vanishing(mid, np.array([1.0, 1.0]), [0, 0, 0]).words
    'force along x, moment about y and z vanish by symmetry'
    """
    Q = np.stack([p.Q for p in group.placements])
    det = np.array([p.det for p in group.placements])
    weights = np.asarray(chi) / len(group)
    projector = np.zeros((6, 6), dtype=np.result_type(weights, float))
    projector[:3, :3] = np.einsum("g,gij->ij", weights, Q)
    projector[3:, 3:] = np.einsum("g,gij->ij", weights * det, Q)
    rank = round(float(np.trace(projector).real))
    force, one = _lost_words(projector[:3, :3], "force", "along")
    moment, other = _lost_words(projector[3:, 3:], "moment", "about")
    if rank == 0:
        words = "every force and moment vanishes by symmetry"
    elif not force and not moment:
        words = "no force or moment vanishes by symmetry"
    else:
        verb = "vanishes" if one + other == 1 else "vanish"
        words = ", ".join(w for w in (force, moment) if w) + f" {verb} by symmetry"
    return Vanishing(fixed_point(group, about), projector, rank, words)


def _lost_words(projector: Numbers, name: str, along: str) -> tuple[str, int]:
    """The real directions that the projector (3, 3) sends to zero, in words, and how many things
    the words name (for the verb)."""
    both = np.concatenate([projector.real, projector.imag])
    _, size, rows = np.linalg.svd(both)
    lost = rows[size < _ROUND_OFF]
    inside = lost.T @ lost
    axes = [n for n, d in zip("xyz", np.diag(inside), strict=True) if d > 1.0 - _ROUND_OFF]
    if len(lost) == 0:
        return "", 0
    if len(lost) == 3:
        return f"every {name}", 1
    if len(axes) == len(lost):
        return f"{name} {along} {' and '.join(axes)}", len(axes)
    single = lost if len(lost) == 1 else np.linalg.svd(np.eye(3) - inside)[2][:1]
    direction = single[0] * np.sign(single[0][np.argmax(np.abs(single[0]))])
    if len(lost) == 1:
        return f"{name} {along} {direction_words(direction)}", 1
    return f"{name} {along} every direction normal to {direction_words(direction)}", 2


# --- supports -------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class SupportSet:
    """Nodes of the sector that carry a reaction together.

    Attributes
    ----------
    name : of the set, or its place in words. nodes : (k,) ascending.
    """

    name: str
    nodes: Ints


def support_sets(
    mesh: Mesh,
    reaction: Numbers,
    sets: Mapping[str, NDArray[np.bool_]] | None = None,
    least: float = 1e-9,
) -> list[SupportSet]:
    """Supports: named sets of nodes, and connected groups of other nodes that carry a reaction.

    Parameters
    ----------
    reaction : (n, 3), with the shares of all copies added at seam nodes: the sector's own shares
        hold the reactions of the seam conditions too, and these are no supports.
    sets : (n,) membership by name; sets that carry nothing are kept.
    least : of the largest reaction; a node below it carries none. Single precision needs 1e-6.

    Returns
    -------
    The sets in their order, then the groups, each connected through cells, by their first node.
    """
    size = np.linalg.norm(reaction, axis=1)
    carries = size > least * size.max(initial=0.0)
    found = []
    for name, members in (sets or {}).items():
        inside = np.asarray(members, dtype=bool)
        found.append(SupportSet(name, np.flatnonzero(inside)))
        carries = carries & ~inside
    nodes = np.flatnonzero(carries)
    group = _groups_through_cells(mesh, carries)
    order = np.argsort(group, kind="stable")
    for part in np.split(nodes[order], np.flatnonzero(np.diff(group[order])) + 1):
        if len(part):
            at = ", ".join(f"{c:.4g}" for c in mesh.points[part].astype(float).mean(axis=0) + 0.0)
            words = (
                f"{len(part)} nodes around ({at})" if len(part) > 1 else f"node {part[0]} at ({at})"
            )
            found.append(SupportSet(words, part))
    return found


def _groups_through_cells(mesh: Mesh, chosen: NDArray[np.bool_]) -> Ints:
    """Number of the group of each chosen node, (k,): nodes of one cell are in one group."""
    from scipy.sparse import coo_matrix
    from scipy.sparse.csgraph import connected_components

    number = np.cumsum(chosen) - 1
    count = int(chosen.sum())
    entries = np.flatnonzero(chosen[mesh.connectivity])
    cells = np.searchsorted(mesh.offsets, entries, side="right") - 1
    _, cells = np.unique(cells, return_inverse=True)
    total = count + (int(cells.max()) + 1 if len(cells) else 0)
    rows, columns = number[mesh.connectivity[entries]], count + cells
    graph = coo_matrix((np.ones(len(rows), dtype=np.int8), (rows, columns)), shape=(total, total))
    label = np.asarray(connected_components(graph, directed=False)[1][:count], dtype=np.int64)
    _, first, which = np.unique(label, return_index=True, return_inverse=True)
    return np.asarray(np.argsort(np.argsort(first))[which], dtype=np.int64)
