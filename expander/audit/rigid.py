"""Rigid-body motions of the whole body that a load case leaves free.

A motion ``t + omega x (x - p)``, with ``p`` a point that every placement leaves in place, belongs
to a case if it is carried from copy to copy as its displacement is, ``u(g x) = chi(g) Q u(x)``.
The translation is a polar vector and the rotation an axial one, so that is

    t = chi(g) Q t,    omega = chi(g) det(Q) Q omega    for every placement g,

and the mean of ``chi(g) D(g)``, ``D = diag(Q, det(Q) Q)``, is the projector onto such motions. Its
trace counts them (J.-P. Serre, Linear Representations of Finite Groups, section 2.6: the conjugate
of a character stands there, and a field pushed forward by g takes the conjugate of our chi).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

from expander.errors import InputError
from expander.groups import Group, direction_words
from expander.placements import Floats, unit

Numbers = NDArray[np.inexact]  # real, or complex amplitudes

# A plane typed with six digits is accepted by `groups`, so directions agree no better than this.
_SAME = 1e-5
_EXACT = 1e-9  # a preferred direction this close to a free one is that direction
_ON_AXIS = 1e-6  # a node where a motion is this small beside its largest is at rest in it


@dataclass(frozen=True, eq=False)
class Motions:
    """The rigid-body motions that a case leaves free.

    Attributes
    ----------
    basis : (k, 6) translation at `point` and rotation about it (radians per unit). Real motions
        are orthonormal; a complex one is ``e1 +- i e2`` of two orthogonal unit vectors, so that
        the modulus of its coefficient is the amplitude of each.
    point : (3,) left in place by every placement.
    words : what each motion is.
    group, chi : the case, chi of every copy (copies,).
    normal : (3,) of the plane of a plane model, otherwise None.
    """

    basis: Numbers
    point: Floats
    words: tuple[str, ...]
    group: Group
    chi: Numbers
    normal: Floats | None = None

    @property
    def count(self) -> int:
        return len(self.basis)

    @property
    def complex(self) -> bool:
        """Whether the motions themselves have a phase that differs from component to component."""
        return np.iscomplexobj(self.basis)


def free_motions(
    group: Group,
    chi: ArrayLike,
    plane_model: bool | ArrayLike | None = None,
    near: ArrayLike = (0.0, 0.0, 0.0),
) -> Motions:
    """The rigid-body motions of the whole body compatible with a case.

    Parameters
    ----------
    chi : (copies,) factor of the load on each copy, real or complex.
    plane_model : True for a model in a plane with normal z, or that plane's normal (3,): motions
        in the plane only.
    near : (3,) the point of the motions is the common point of the placements nearest to this,
        for example the middle of the model.

    Raises
    ------
    InputError
        If chi is no character of the group, or a placement leaves the plane of the model.

    Examples
    --------
    >>> from expander.groups import CutPlane, CyclicAxis, make_group
    >>> from expander.placements import unit
    >>> half = make_group([CutPlane("mid", unit([1, 0, 0]), np.zeros(3))], None)
    >>> free_motions(half, [1.0, 1.0]).words
    ('translation along y', 'translation along z', 'rotation about x through (0, 0, 0)')
    >>> free_motions(half, [1.0, -1.0], plane_model=True).words
    ('translation along x', 'rotation about z through (0, 0, 0)')
    >>> wheel = make_group([], CyclicAxis(3, unit([0, 0, 1]), np.zeros(3)))
    >>> free_motions(wheel, np.exp(2j * np.pi / 3 * np.arange(3))).words[0]
    'translation across the axis z (complex: x + i y)'
    """
    factors = np.asarray(chi)
    if factors.shape != (len(group),):
        raise InputError(f"chi has {factors.size} values for {len(group)} copies.",
                         "Expected one factor for each placement of the group.")  # fmt: skip
    if np.iscomplexobj(factors) and np.abs(factors.imag).max() < _EXACT:
        factors = factors.real
    factors = factors.astype(np.result_type(factors, float))
    Q = np.stack([p.Q for p in group.placements])
    det = np.array([p.det for p in group.placements])
    polar = np.einsum("g,gij->ij", factors, Q) / len(group)
    axial = np.einsum("g,gij->ij", factors * det, Q) / len(group)
    if max(float(np.abs(P @ P - P).max()) for P in (polar, axial)) > _SAME:
        raise InputError(
            "The factors of the load contradict each other: chi(g1 g2) is not chi(g1) chi(g2).",
            "Expected a character of the group, as `behaviours.factors` makes.",
        )
    normal = _plane_normal(plane_model)
    if normal is not None:
        if np.abs(np.abs(Q @ normal @ normal) - 1.0).max() > _SAME:
            raise InputError(
                f"The model lies in a plane with normal {direction_words(normal)}, but a plane or "
                "turn of the group carries it out of that plane.",
                "A plane model is mirrored in planes whose normal lies in its plane, and turned "
                "about the axis normal to it.",
            )
        across = np.outer(normal, normal)
        polar, axial = polar - across @ polar, across @ axial
    preferred = _preferred(group)
    translations, rotations = (_directions(P, preferred) for P in (polar, axial))
    point = common_point(group, near)
    at = "(" + ", ".join(f"{c + 0.0:.4g}" for c in point) + ")"
    words = [_words("translation", d, "") for d in translations]
    words += [_words("rotation", d, f" through {at}") for d in rotations]
    basis = np.zeros((len(words), 6), dtype=polar.dtype)
    basis[: len(translations), :3] = translations
    basis[len(translations) :, 3:] = rotations
    return Motions(basis, point, tuple(words), group, factors, normal)


def common_point(group: Group, near: ArrayLike = (0.0, 0.0, 0.0)) -> Floats:
    """The point that every placement leaves in place and that is nearest to `near`, (3,).

    It is the mean of all images of `near`: the mean of all Q is the orthogonal projector onto the
    directions that no placement turns.

    >>> from expander.groups import CutPlane, make_group
    >>> plane = CutPlane("mid", np.array([0.0, 0.0, 1.0]), np.array([0.0, 0.0, 2.0]))
    >>> common_point(make_group([plane], None), [5, 6, 7]).tolist()
    [5.0, 6.0, 2.0]
    """
    start = np.asarray(near, dtype=float)
    images = np.stack([p.Q @ start + p.t for p in group.placements])
    point = images.mean(axis=0)
    scale = float(np.abs(images).max())
    return np.where(np.abs(point) < 1e-12 * scale, 0.0, point)


def displacement(motions: Motions, points: ArrayLike) -> Numbers:
    """(k, n, 3) displacement of each motion at `points` (n, 3), per unit coefficient."""
    t, omega = np.split(motions.basis[:, None], 2, axis=2)
    return np.asarray(t + np.cross(omega, np.asarray(points, dtype=float) - motions.point))


def field_of(motion: Numbers, point: Floats, points: ArrayLike) -> Numbers:
    """(n, 3) displacement ``t + omega x (x - p)`` of one motion (6,) at `points` (n, 3).

    >>> field_of(np.array([0, 0, 0, 0, 0, 1.0]), np.zeros(3), [[2.0, 0, 0]]).tolist()
    [[0.0, 2.0, 0.0]]
    """
    away = np.asarray(points, dtype=float) - point
    return np.asarray(motion[:3] + np.cross(motion[3:], away))


def share(
    motions: Motions, points: ArrayLike, u: ArrayLike, weights: ArrayLike | None = None
) -> tuple[float, Numbers]:
    """How much of a displacement is motion of the whole body as a rigid body.

    A displacement of the case and its motions are both carried by ``chi(g) Q``, so every copy
    adds the same to each product of the two: the least-squares projection over the whole body is
    that over the sector, if a node that m copies share counts there with weight 1/m.

    Parameters
    ----------
    u : (n, 3) displacement at `points` (n, 3), real or complex; nodes where it is not finite are
        left out.
    weights : (n,) of the nodes; all alike if None.

    Returns
    -------
    The share of the root mean square displacement, 0 to 1, and the coefficients (k,) of the
    motions: lengths, and radians.

    Examples
    --------
    >>> from expander.groups import CutPlane, make_group
    >>> half = make_group([CutPlane("mid", np.array([1.0, 0, 0]), np.zeros(3))], None)
    >>> part, c = share(free_motions(half, [1, 1]), [[1.0, 0, 0]], [[3.0, 4.0, 0]])
    >>> round(part, 12), c.round(12).tolist()
    (0.8, [4.0, 0.0, 0.0])
    """
    x, values = np.asarray(points, dtype=float), np.asarray(u)
    w = np.ones(len(x)) if weights is None else np.asarray(weights, dtype=float)
    kept = np.isfinite(values).all(axis=1)
    if not kept.all():
        x, values, w = x[kept], values[kept], w[kept]
    root = np.sqrt(w)[:, None]
    target = (root * values).ravel()
    columns = (root * displacement(motions, x)).reshape(motions.count, target.size).T
    total = float(np.linalg.norm(target))
    # Lengths and radians have no common scale, so each motion is taken by its own size; one that
    # leaves all nodes at rest (a turn about the line they lie on) gets no part.
    reach = float(np.linalg.norm(x - motions.point, axis=1).max(initial=0.0))
    t, omega = (np.linalg.norm(part, axis=1) for part in np.split(motions.basis, 2, axis=1))
    sizes = np.linalg.norm(columns, axis=0)
    moving = sizes > _ON_AXIS * (t + omega * reach) * np.sqrt(w.sum())
    columns = columns[:, moving] / sizes[moving]
    coefficients = np.zeros(motions.count, dtype=np.result_type(columns, target))
    if total == 0.0 or not columns.size:
        return 0.0, coefficients
    fitted = np.linalg.lstsq(columns, target, rcond=1e-10)[0]
    coefficients[moving] = fitted / sizes[moving]
    return min(1.0, float(np.linalg.norm(columns @ fitted)) / total), coefficients


def holding(motions: Motions, points: ArrayLike, force: ArrayLike, loads: float = 0.0) -> Numbers:
    """Force that holds each motion: zero if what holds it was added for that purpose only.

    Parameters
    ----------
    force : (n, 3) reactions at `points` (n, 3), at nodes of a seam the sector's own share.
    loads : sum of the magnitudes of applied nodal forces. Reactions that are only round-off
        beside them count as none.

    Returns
    -------
    (k,) work of the forces in each motion, over the sum of ``|force| |motion|``: -1 to 1, or
    complex. The work in the whole body is that of the sector times the number of copies.

    Examples
    --------
    >>> from expander.groups import CutPlane, make_group
    >>> half = make_group([CutPlane("mid", np.array([1.0, 0, 0]), np.zeros(3))], None)
    >>> motions = free_motions(half, [1, 1])  # along y, along z, about x
    >>> holding(motions, [[1.0, 1, 0], [1.0, -1, 0]], [[0.0, 0, 2], [0.0, 0, -2]]).tolist()
    [0.0, 0.0, 1.0]
    """
    phi = displacement(motions, points)
    f = np.nan_to_num(np.asarray(force), posinf=0.0, neginf=0.0)
    lengths = np.linalg.norm(phi, axis=2)
    largest = lengths.max(axis=1, initial=0.0)
    at_rest = lengths <= _ON_AXIS * largest[:, None]
    phi[at_rest], lengths[at_rest] = 0.0, 0.0
    work = np.einsum("kni,ni->k", phi.conj(), f)
    most = np.maximum(lengths @ np.linalg.norm(f, axis=1), loads * largest)
    return np.asarray(np.divide(work, most, out=np.zeros_like(work), where=most > 0.0))


# --- directions that people use -----------------------------------------------------------------


def _plane_normal(plane_model: bool | ArrayLike | None) -> Floats | None:
    if plane_model is None or plane_model is False:
        return None
    return unit([0.0, 0.0, 1.0] if plane_model is True else plane_model)


def _preferred(group: Group) -> list[Floats]:
    """x, y, z, the axis, normals, and the lines in which planes normal to these meet the
    coordinate planes."""
    axes = list(np.eye(3))
    own = [group.axis.axis] if group.axis is not None else []
    own += [p.normal for p in group.planes]
    lines = [np.cross(e, n) for n in own for e in reversed(axes)]
    return axes + own + [_forward(unit(v)) for v in lines if v @ v > 1e-6]


def _forward(d: Floats) -> Floats:
    """The same line, its largest component positive: the first of them, but for round-off."""
    first = int(np.argmax(np.abs(d) > np.abs(d).max() - _EXACT))
    return np.asarray(d * np.sign(d[first]) + 0.0)


def _directions(P: Numbers, preferred: Sequence[Floats]) -> Numbers:
    """(k, 3) basis of the image of a projector, along preferred directions where it can be."""
    u, s, _ = np.linalg.svd(P)
    span = u[:, s > 0.5]
    if np.iscomplexobj(P):
        return _complex_direction(span, preferred)
    left = span @ span.T
    found: list[Floats] = []
    while len(found) < span.shape[1]:
        images = [left @ c for c in preferred]
        kept = [c for c, v in zip(preferred, images, strict=True) if np.abs(v - c).max() < _EXACT]
        d = kept[0] if kept else _forward(unit(max(images, key=np.linalg.norm)))
        found.append(d)
        left = left - np.outer(d, d)
    return np.array(found).reshape(-1, 3)


def _complex_direction(span: Numbers, preferred: Sequence[Floats]) -> Numbers:
    """``e1 +- i e2`` with e1 a preferred direction.

    At most one: it is orthogonal to its conjugate, which belongs to the other character conj(chi),
    and both kinds of them share three dimensions.
    """
    if not span.shape[1]:
        return np.zeros((0, 3), dtype=complex)
    v = np.sqrt(2.0) * span[:, 0]
    along = [complex(c @ v) for c in preferred]
    best = next((a for a in along if abs(abs(a) - 1.0) < _EXACT), max(along, key=abs))
    v = v * np.conj(best) / abs(best)
    return np.array([unit(v.real) + 1j * unit(v.imag)])


def _words(what: str, d: Numbers, through: str) -> str:
    along = "along" if what == "translation" else "about"
    first, second = np.asarray(d.real), np.asarray(d.imag)
    if not second.any():
        return f"{what} {along} {direction_words(first)}{through}"
    axis = _forward(unit(np.cross(first, second)))
    name = direction_words(second)
    pair = f"{direction_words(first)} {'-' if name[0] == '-' else '+'} i {name.lstrip('-')}"
    lines = "" if what == "translation" else "about lines "
    return f"{what} {lines}across the axis {direction_words(axis)}{through} (complex: {pair})"
