"""What happens at a seam: values there are resolved once, on the sector.

For a shared node the terms are ``chi(s) rho(s) f(s^-1 x)`` over its class; they are added, found
to agree, or averaged with the number of elements as weights. Afterwards every copy is the plain
formula. The same terms are the jumps that show whether the seam closes.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from expander.behaviours import Factors
from expander.fields import Field
from expander.frames import Cylindrical
from expander.groups import Group
from expander.placements import Floats
from expander.quantities import Quantity
from expander.seams import Classes

Numbers = NDArray[Any]  # floats, or complex where a field or a factor is


def turn_each(q: Quantity, values: Numbers, bases: Floats) -> Numbers:
    """``A(E)`` with another matrix at each row: values (n, k), bases (n, 3, 3)."""
    if q.kind.rank == 0:
        return values
    full = values @ q.spread.T
    if q.kind.rank == 1:
        moved = np.einsum("nij,nj->ni", bases, full)
    else:
        moved = np.einsum("nij,njk,nlk->nil", bases, full.reshape(-1, 3, 3), bases, optimize=True)
    return np.asarray(moved.reshape(len(values), -1) @ q.gather.T)


# Multiplications of one product: below this BLAS starts no threads of its own, which would wait
# for the threads that write.
_BLAS_ALONE = 200_000


def product(values: Numbers, A: Numbers) -> Numbers:
    """``values @ A.T`` for rows of components, (n, k), in pieces that stay in the cache.

    A value that is not finite spoils only components that depend on it: zero times infinity
    would make NaN of the others.
    """
    out = np.empty((len(values), len(A)), dtype=np.result_type(values, A))
    step = max(1, _BLAS_ALONE // A.size)
    with np.errstate(invalid="ignore", over="ignore"):
        for row in range(0, len(values), step):
            np.matmul(values[row : row + step], A.T, out=out[row : row + step])
        if np.isfinite(out.sum()):
            return out
        bad = np.flatnonzero(~np.isfinite(values).all(axis=1))
        for i, weights in enumerate(A):
            used = np.flatnonzero(weights)
            out[bad, i] = (values[bad][:, used] * weights[used]).sum(axis=1)
    return out


def acting(q: Quantity, Q: Floats, chi: float | complex, follows: str) -> Numbers:
    """``chi(g) * rho(Q)`` on stored components, (k, k); complex if chi is.

    Only a linear quantity takes a complex factor; the fields of a case are checked before.
    """
    A = q.matrix(Q)
    if follows != "load" or chi == 1.0:
        return A
    if isinstance(chi, complex):
        return np.asarray(chi * A) if q.linear else A
    return q.odd @ A


@dataclass(frozen=True, eq=False)
class Resolved:
    """One field of one case at the shared items of the sector.

    Attributes
    ----------
    patch : (s, k) resolved values in the field's own frame, or None where the sector's stay.
    own : (s, k) the sector's values, in global directions.
    other_side : (s, k) the term of the class farthest from the own value.
    jumps : (s,) distance between the two, over the components that are finite on both sides.
    apart : (entries,) the same for each entry of the classes.
    through : (s,) number of the placement that brings the farthest term.
    """

    patch: Numbers | None
    own: Numbers
    other_side: Numbers
    jumps: Floats
    apart: Floats
    through: NDArray[np.int64]


def resolve(
    field: Field,
    values: NDArray[np.generic],
    places: NDArray[np.floating],
    classes: Classes,
    group: Group,
    chi: Factors,
    weights: NDArray[np.int64] | None,
    on_axis: float,
    not_averaged: NDArray[np.bool_] | None = None,
) -> Resolved:
    """Resolve one field at the shared items.

    Parameters
    ----------
    values : (s, k) the field at the shared items.
    places : (s, 3) where these values belong (nodes or cell centres).
    chi : (copies,) of the case.
    weights : (s,) elements at each shared node, for "recovered".
    on_axis : distance within which a node counts as on the axis of a cylindrical frame.
    not_averaged : (s,) shared nodes where recovered values stay the sector's own.
    """
    q = field.quantity if field.frame.letters == "x y z" else field.quantity.complete
    if not len(classes.item):
        none = np.empty((0, q.size))
        return Resolved(None, none, none, np.empty(0), np.empty(0), np.empty(0, dtype=np.int64))
    own = to_global(field, values, places, on_axis)
    source = np.searchsorted(classes.items, classes.source)  # sources are shared items too
    terms = np.empty((len(classes.item), q.size), dtype=np.result_type(own, chi))
    order = np.argsort(classes.via, kind="stable")
    vias, first = np.unique(classes.via[order], return_index=True)
    for s, rows in zip(vias.tolist(), np.split(order, first[1:]), strict=True):
        A = acting(q, group.placements[s].Q, chi[s].item(), field.follows)
        terms[rows] = product(own[source[rows]], A)
    with np.errstate(invalid="ignore"):
        difference = terms - own[classes.row]
    # Components that are not finite were accepted and counted before; they show no jump.
    difference[~np.isfinite(difference)] = 0.0
    apart = np.linalg.norm(difference, axis=1)
    farthest = _largest(apart, classes)
    jumps = apart[farthest]
    patch = None
    if field.seam == "sum":
        patch = np.add.reduceat(terms, classes.starts, axis=0)
    elif field.seam != "lowest copy":
        w = np.ones(len(terms))
        if field.seam == "recovered" and weights is not None:
            w = weights[source].astype(float)
        total = np.add.reduceat(w, classes.starts)
        patch = np.add.reduceat(terms * w[:, None], classes.starts, axis=0) / total[:, None]
    if patch is not None:
        if field.seam == "recovered" and not_averaged is not None:
            patch[not_averaged] = own[not_averaged]
        patch = from_global(field, patch, places, on_axis)
    return Resolved(patch, own, terms[farthest], jumps, apart, classes.via[farthest])


def _largest(apart: Floats, classes: Classes) -> NDArray[np.int64]:
    """Entry with the largest distance of each class, (s,)."""
    order = np.lexsort((apart, classes.row))
    last = np.append(classes.starts[1:], len(apart)) - 1
    return np.asarray(order[last])


def to_global(
    field: Field, values: NDArray[np.generic], places: NDArray[np.floating], on_axis: float
) -> Numbers:
    """Components in the field's frame turned to global directions.

    (n, k) stored components; in a local frame (n, all components), since a storage that is enough
    there, such as that of an axisymmetric stress, need not be enough in global directions.
    """
    kind = np.complex128 if np.iscomplexobj(values) else np.float64
    numbers: Numbers = values.astype(kind, copy=False)
    if isinstance(field.frame, Cylindrical):
        bases = field.frame.bases(places.astype(float), on_axis)
        return turn_each(field.quantity.complete, numbers @ field.quantity.completion.T, bases)
    return numbers


def from_global(
    field: Field, values: Numbers, places: NDArray[np.floating], on_axis: float
) -> Numbers:
    """The reverse of `to_global` at `places`: (n, k) stored components."""
    if isinstance(field.frame, Cylindrical):
        bases = field.frame.bases(places.astype(float), on_axis).transpose(0, 2, 1)
        return turn_each(field.quantity.complete, values, bases) @ field.quantity.reduction.T
    return values
