"""What happens at a seam: values there are resolved once, on the sector.

For a shared node the terms are ``chi(s) rho(s) f(s^-1 x)`` over its class; they are added, found
to agree, or averaged with the number of elements as weights. Afterwards every copy is the plain
formula. The same terms are the jumps that show whether the seam closes.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from expander.fields import Field
from expander.frames import Cylindrical
from expander.groups import Group
from expander.placements import Floats
from expander.quantities import Quantity
from expander.seams import Classes


def turn_each(q: Quantity, values: Floats, bases: Floats) -> Floats:
    """``A(E)`` with another matrix at each row: values (n, k), bases (n, 3, 3)."""
    if q.kind.rank == 0:
        return values
    full = values @ q.spread.T
    if q.kind.rank == 1:
        moved = np.einsum("nij,nj->ni", bases, full)
    else:
        moved = np.einsum("nij,njk,nlk->nil", bases, full.reshape(-1, 3, 3), bases, optimize=True)
    return np.asarray(moved.reshape(len(values), -1) @ q.gather.T)


def acting(q: Quantity, Q: Floats, chi: float, follows: str) -> Floats:
    """``chi(g) * rho(Q)`` on stored components, (k, k)."""
    A = q.matrix(Q)
    return q.odd @ A if chi < 0 and follows == "load" else A


@dataclass(frozen=True, eq=False)
class Resolved:
    """One field of one case at the shared items of the sector.

    Attributes
    ----------
    patch : (s, k) resolved values in the field's own frame, or None where the sector's stay.
    own : (s, k) the sector's values, in global directions.
    other_side : (s, k) the term of the class farthest from the own value.
    jumps : (s,) distance between the two.
    through : (s,) number of the placement that brings the farthest term.
    """

    patch: Floats | None
    own: Floats
    other_side: Floats
    jumps: Floats
    through: NDArray[np.int64]


def resolve(
    field: Field,
    values: NDArray[np.generic],
    places: NDArray[np.floating],
    classes: Classes,
    group: Group,
    chi: Floats,
    weights: NDArray[np.int64] | None,
    on_axis: float,
) -> Resolved:
    """Resolve one field at the shared items.

    Parameters
    ----------
    values : (s, k) the field at the shared items.
    places : (s, 3) where these values belong (nodes or cell centres).
    chi : (copies,) of the case.
    weights : (s,) elements at each shared node, for "recovered".
    on_axis : distance within which a node counts as on the axis of a cylindrical frame.
    """
    q = field.quantity if field.frame.letters == "x y z" else field.quantity.complete
    if not len(classes.item):
        none = np.empty((0, q.size))
        return Resolved(None, none, none, np.empty(0), np.empty(0, dtype=np.int64))
    own = to_global(field, values, places, on_axis)
    source = np.searchsorted(classes.items, classes.source)  # sources are shared items too
    terms = np.empty((len(classes.item), q.size))
    order = np.argsort(classes.via, kind="stable")
    vias, first = np.unique(classes.via[order], return_index=True)
    for s, rows in zip(vias.tolist(), np.split(order, first[1:]), strict=True):
        A = acting(q, group.placements[s].Q, float(chi[s]), field.follows)
        with np.errstate(invalid="ignore"):  # values that are not finite were accepted before
            terms[rows] = own[source[rows]] @ A.T
    apart = np.linalg.norm(terms - own[classes.row], axis=1)
    farthest = _largest(apart, classes)
    # Values that are not finite were accepted and counted before; they show no jump.
    jumps = np.nan_to_num(apart[farthest], nan=0.0, posinf=0.0)
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
        patch = from_global(field, patch, places, on_axis)
    return Resolved(patch, own, terms[farthest], jumps, classes.via[farthest])


def _largest(apart: Floats, classes: Classes) -> NDArray[np.int64]:
    """Entry with the largest distance of each class, (s,)."""
    key = np.nan_to_num(apart, nan=-1.0, posinf=-1.0)
    order = np.lexsort((key, classes.row))
    last = np.append(classes.starts[1:], len(apart)) - 1
    return np.asarray(order[last])


def to_global(
    field: Field, values: NDArray[np.generic], places: NDArray[np.floating], on_axis: float
) -> Floats:
    """Components in the field's frame turned to global directions.

    (n, k) stored components; in a local frame (n, all components), since a storage that is enough
    there, such as that of an axisymmetric stress, need not be enough in global directions.
    """
    numbers = values.astype(float)
    if isinstance(field.frame, Cylindrical):
        bases = field.frame.bases(places.astype(float), on_axis)
        return turn_each(field.quantity.complete, numbers @ field.quantity.completion.T, bases)
    return numbers


def from_global(
    field: Field, values: Floats, places: NDArray[np.floating], on_axis: float
) -> Floats:
    """The reverse of `to_global` at `places`: (n, k) stored components."""
    if isinstance(field.frame, Cylindrical):
        bases = field.frame.bases(places.astype(float), on_axis).transpose(0, 2, 1)
        return turn_each(field.quantity.complete, values, bases) @ field.quantity.reduction.T
    return values
