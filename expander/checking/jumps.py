"""Jumps: the two sides of a seam, before anything is merged.

Own values stand against ``chi(s) rho(s) f(s^-1 x)``, what the copy made by ``s`` has at the same
place; both in global directions.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from expander.behaviours import Factors
from expander.checking.opposite import error_bound
from expander.checking.seamlist import Seam
from expander.fields import Field
from expander.frames import Cylindrical
from expander.groups import Group
from expander.loadcases import LoadCase
from expander.model import Mesh
from expander.placements import Floats
from expander.quantities import Quantity
from expander.resolve import Numbers, acting, product, to_global
from expander.sector import on_axis


@dataclass(frozen=True, eq=False)
class Jump:
    """One field of one case at one seam.

    Attributes
    ----------
    quantity : of the values below: that of the field, all components if its frame is local.
    own, other : (k, c) values of the sector and of the copy at each row of the seam.
    allowance : (k,) what interpolation between nodes may be wrong by; 0 where nodes pair.
    """

    seam: Seam
    field: Field
    case: LoadCase
    quantity: Quantity
    own: Numbers
    other: Numbers
    allowance: Floats

    @cached_property
    def difference(self) -> Numbers:
        """(k, c) own minus other; zero where one of them is not finite, which is counted."""
        with np.errstate(invalid="ignore"):
            found = self.own - self.other
        found[~np.isfinite(found)] = 0.0
        return found

    @cached_property
    def lengths(self) -> Floats:
        """(k,) length of the jump over all components."""
        d = self.difference
        return np.asarray(np.sqrt(np.einsum("kc,kc->k", d, d.conj()).real))

    @property
    def components(self) -> tuple[str, ...]:
        return self.quantity.components


def quantity_of(field: Field) -> Quantity:
    """The quantity of a field's values in global directions."""
    return field.quantity if field.frame.letters == "x y z" else field.quantity.complete


def turned_values(mesh: Mesh, field: Field, values: Numbers, nodes: NDArray[np.int64]) -> Numbers:
    """Values of `nodes`, (k, c), in global directions; `values` is (n, c) at all nodes."""
    picked = values[nodes]
    if not isinstance(field.frame, Cylindrical):
        return to_global(field, picked, mesh.points[:0], 0.0)
    return to_global(field, picked, mesh.points[nodes], on_axis(mesh))


def jump_at(
    mesh: Mesh,
    group: Group,
    seam: Seam,
    field: Field,
    case: LoadCase,
    values: Numbers,
    chi: Factors,
) -> Jump:
    """Both sides of a seam for nodal `values` (n, c) in the field's own frame."""
    own = turned_values(mesh, field, values, seam.nodes)
    brought = np.zeros(own.shape, dtype=own.dtype)
    for m in range(seam.partners.shape[1]):
        weight = seam.weights[:, m]
        rows = np.flatnonzero(weight)
        if len(rows):
            there = turned_values(mesh, field, values, seam.partners[rows, m])
            if m == 0 and seam.paired[rows].all():
                brought[rows] = there  # not 0 * inf beside it
            else:
                brought[rows] += weight[rows, None] * there
    allowance = np.zeros(len(own))
    for part in seam.interpolated:
        every = turned_values(mesh, field, values, np.arange(mesh.point_count))
        bound = error_bound(mesh, part.facets, part.opposite, every)
        allowance[part.start : part.start + len(part.kept)] = bound[part.kept]
    other = carried(group, seam, field, brought, chi)
    return Jump(seam, field, case, quantity_of(field), own, other, allowance)


def carried(group: Group, seam: Seam, field: Field, brought: Numbers, chi: Factors) -> Numbers:
    """``chi(s) rho(s)`` on rows of values (k, c), each with the placement of its row."""
    q = quantity_of(field)
    out = np.empty(brought.shape, dtype=np.result_type(brought, chi))
    for s in np.unique(seam.via).tolist():
        rows = np.flatnonzero(seam.via == s)
        A = acting(q, group.placements[s].Q, chi[s].item(), field.follows)
        out[rows] = product(brought[rows], A)
    return out
