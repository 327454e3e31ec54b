"""Traction, flux and kink: jumps that are judged beside those between neighbouring cells.

The stress on a plane cut through a body is continuous across it, so ``sigma n`` must agree on both
sides of a seam; so must the normal derivative of a displacement, by which a plane that was clamped
by mistake shows: its values vanish and close under every word, its slope does not. Both are known
to a discretised solution only up to the jumps between its cells.

All of it is one thing, a value with one more index that is contracted with the seam's normal:
``T n`` of the sector against ``chi rho(Q) (T' Q^T n)`` of the copy, where ``T`` is the stress, the
flux, or the gradient of a field.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from expander.behaviours import Factors
from expander.checking.gradients import Gradients
from expander.checking.jumps import Jump, carried, quantity_of
from expander.checking.leaveout import standing_out, without_cells, without_nodes
from expander.checking.neighbours import Surroundings, surroundings
from expander.checking.seamlist import Seam
from expander.checking.verdicts import CLOSED, DOUBTFUL, OPEN, TOLD, Verdict, verdict_of
from expander.closing import largest_value
from expander.fields import Field
from expander.frames import Global
from expander.groups import Group
from expander.loadcases import LoadCase
from expander.model import Mesh
from expander.placements import Floats
from expander.quantities import Quantity, quantity
from expander.resolve import Numbers, product, to_global
from expander.sector import on_axis
from expander.topology import Ints

# A jump below this part of the body's largest value is of no account, whatever its neighbours do.
SMALL = 1e-3
# Two sides in one ratio that far from 1, and so nearly exactly, are not the mesh's scatter.
RATIO, EXACT = 1e-3, 0.1
_SMOOTH = np.cos(np.deg2rad(5.0))  # faces that meet at a larger angle are a fold


def is_stress(field: Field) -> bool:
    """Whether the field is a stress, whose traction must agree."""
    return field.kind == "symmetric tensor" and any("stress" in n.lower() for n in field.names)


@dataclass(frozen=True, eq=False)
class Near:
    """A seam and the cells around it.

    Attributes
    ----------
    parts : (m,) part that each cell belongs to; None if that is not known.
    """

    mesh: Mesh
    group: Group
    seam: Seam
    parts: Ints | None = None

    @cached_property
    def around(self) -> Surroundings:
        seam = self.seam
        nodes, directions = [seam.nodes], [seam.normal]
        if seam.kind != "cut plane":  # the other side is another face of the sector
            Q = np.stack([p.Q for p in self.group.placements])[seam.via]
            back = np.einsum("kij,ki->kj", Q, seam.normal)
            for m in range(seam.partners.shape[1]):
                used = seam.weights[:, m] != 0.0
                nodes.append(seam.partners[used, m])
                directions.append(back[used])
        return surroundings(self.mesh, np.concatenate(nodes), np.concatenate(directions))

    @cached_property
    def gradients(self) -> Gradients:
        return Gradients.within(self.mesh, self.around.cells)

    @cached_property
    def by_face(self) -> Seam:
        """The seam with a row for each pair of faces, which its first corner stands for."""
        faces = self.seam.faces
        corner = _joined([f.corners[:, 0] for f in faces], np.int64)
        count = len(corner)
        return replace(
            self.seam, nodes=corner, via=np.full(count, self.seam.copy),
            partners=np.zeros((count, 1), dtype=np.int64), weights=np.ones((count, 1)),
            distance=np.zeros(count),
            normal=_joined([f.normals for f in faces], np.float64).reshape(-1, 3),
            area=_joined([f.areas for f in faces], np.float64),
        )  # fmt: skip

    @cached_property
    def folded(self) -> NDArray[np.bool_]:
        """(f,) faces over which shells or beams fold."""
        seam = self.by_face
        Q = np.stack([p.Q for p in self.group.placements])[seam.via]
        across = _joined([f.normals_across for f in self.seam.faces], np.float64).reshape(-1, 3)
        facing = -np.einsum("ki,kij,kj->k", seam.normal, Q, across)
        return np.asarray(facing < _SMOOTH)

    @cached_property
    def interface(self) -> NDArray[np.bool_]:
        """(f,) faces where different parts meet."""
        if self.parts is None:
            return np.zeros(len(self.here), dtype=bool)
        part = self.parts[self.around.cells]
        return np.asarray(part[self.here] != part[self.across])

    def not_comparable(self, measure: str) -> NDArray[np.bool_]:
        """(f,) faces where a measure may jump by right: over a fold the normals differ, and
        between different parts all but the traction and the flux."""
        if measure in ("traction", "flux"):
            return self.folded
        return np.asarray(self.folded | self.interface)

    @cached_property
    def here(self) -> Ints:
        """(f,) the cell of each face, as a row of the cells around."""
        return self.around.rows(_joined([f.cells for f in self.seam.faces], np.int64))

    @cached_property
    def across(self) -> Ints:
        """(f,) the cell whose image lies on the other side."""
        return self.around.rows(_joined([f.across for f in self.seam.faces], np.int64))

    @cached_property
    def corners(self) -> Ints:
        """(f, c) corners of the faces, the first repeated where a face has fewer."""
        faces = [f.corners for f in self.seam.faces]
        wide = max((c.shape[1] for c in faces), default=1)
        filled = [c[:, [*range(c.shape[1]), *(0,) * (wide - c.shape[1])]] for c in faces]
        return _joined(filled, np.int64).reshape(-1, wide)

    @cached_property
    def nodes_by_face(self) -> tuple[Ints, Ints]:
        """Pairs of a row of the seam and a face that its node is a corner of, (e,) each."""
        row = np.full(self.mesh.point_count, -1, dtype=np.int64)
        row[self.seam.nodes[::-1]] = np.arange(len(self.seam.nodes))[::-1]
        at = row[self.corners].ravel()
        face = np.repeat(np.arange(len(self.corners)), self.corners.shape[1])
        return at[at >= 0], face[at >= 0]

    def face_yardstick(
        self, per_cell: Numbers, lengths: Floats
    ) -> tuple[Floats, NDArray[np.bool_]]:
        """(f,) yardstick of each face, the largest of its corners', and whether it is sure.

        Parameters
        ----------
        lengths : (f,) the jumps; those that stand out are measured without their own cells.
        """
        jumps, corners = self.around.jumps(per_cell), self.corners
        at, known = self.around.yardstick(jumps, corners.ravel())
        found = np.fmax.reduce(at.reshape(corners.shape), axis=1)
        sure = known.reshape(corners.shape).any(axis=1)
        each = np.repeat(np.arange(len(corners)), corners.shape[1])
        rows = standing_out(lengths, each, corners.ravel())
        if len(rows):
            own = np.stack([self.here[rows], self.across[rows]], axis=1)
            again = without_cells(self.around, jumps, corners[rows], own)
            found[rows] = np.fmin(found[rows], again)
        return found, np.asarray(sure)


def _joined(parts: list[NDArray[Any]], kind: type) -> NDArray[Any]:
    return np.concatenate(parts) if parts else np.empty(0, dtype=kind)


def kink(
    near: Near, field: Field, case: LoadCase, values: Numbers, chi: Factors, limit: float
) -> Verdict | None:
    """The jump of the normal derivative of a nodal field; None where no faces pair.

    Parameters
    ----------
    values : (n, c) at all nodes, in the field's own frame.
    limit : how many times the scatter of the cells around counts as closed.
    """
    if not near.seam.faces:
        return None
    gradients = near.gradients.of(_turned(near.mesh, field, values))
    scale = largest_value(gradients.reshape(len(gradients), -1))
    q = quantity_of(field)
    return _at_faces(near, field, case, gradients, q, chi, scale, "kink", limit)


def recovered(
    near: Near, field: Field, case: LoadCase, values: Numbers, chi: Factors, limit: float
) -> Verdict | None:
    """The jump of what is recovered from elements, at nodes or in cells.

    A stress by its traction, a vector by its normal part, anything else by all its components.
    """
    if not near.seam.faces:
        return None
    measure, contracted = _measure(field)
    full = _indexed if contracted is not None else _as_stored
    q = contracted if contracted is not None else quantity_of(field)
    mesh, cells, scale = near.mesh, near.around.cells, largest_value(values)
    if field.on == "cells":
        centres = near.around.means(mesh.points[near.around.nodes].astype(float))
        own = to_global(field, values[cells], centres, on_axis(mesh))
        return _at_faces(near, field, case, full(field, own), q, chi, scale, measure, limit)
    nodal = _turned(mesh, field, values)
    beside = full(field, nodal[near.around.nodes])
    per_cell = near.around.means(beside)
    seam = near.seam
    here = full(field, nodal[seam.nodes])
    there = np.zeros_like(here)
    for m in range(seam.partners.shape[1]):
        weight = seam.weights[:, m].reshape(-1, *(1,) * (here.ndim - 1))
        there += weight * full(field, nodal[seam.partners[:, m]])
    jump = _contracted(near.group, seam, field, case, here, there, q, chi)
    around = near.around
    yardstick = around.nodal_yardstick(beside, per_cell, seam.nodes)
    rows = standing_out(jump.lengths, *near.nodes_by_face)
    if len(rows):
        own = np.concatenate([seam.nodes[rows, None], seam.partners[rows]], axis=1)
        yardstick[rows] = np.fmin(yardstick[rows], without_nodes(around, beside, own))
    node_off = np.zeros(mesh.point_count, dtype=bool)
    node_off[near.corners[near.not_comparable(measure)]] = True
    return _where_comparable(
        jump, node_off[seam.nodes], mesh.points, yardstick, scale, measure, limit, None
    )


def _measure(field: Field) -> tuple[str, Quantity | None]:
    """What is compared, and as what it is carried: None where all components are."""
    if is_stress(field):
        return "traction", quantity("polar vector", 3)
    if field.kind == "polar vector":
        return "flux", quantity("scalar", 1)
    return "value", None


def _at_faces(
    near: Near,
    field: Field,
    case: LoadCase,
    per_cell: Numbers,
    q: Quantity,
    chi: Factors,
    scale: float,
    measure: str,
    limit: float,
) -> Verdict:
    seam = near.by_face
    jump = _contracted(near.group, seam, field, case, per_cell[near.here], per_cell[near.across],
                       q, chi)  # fmt: skip
    yardstick, sure = near.face_yardstick(per_cell, jump.lengths)
    return _where_comparable(
        jump, near.not_comparable(measure), near.mesh.points, yardstick, scale, measure, limit, sure
    )


def _where_comparable(
    jump: Jump,
    off: NDArray[np.bool_],
    points: NDArray[np.floating],
    yardstick: Floats,
    scale: float,
    measure: str,
    limit: float,
    sure: NDArray[np.bool_] | None,
) -> Verdict:
    """The verdict without the rows that may differ by right, (k,): folds and different parts."""
    if off.any():
        at_rest = np.zeros((), dtype=jump.own.dtype)
        jump = replace(jump, own=np.where(off[:, None], at_rest, jump.own),
                       other=np.where(off[:, None], at_rest, jump.other))  # fmt: skip
    found = judged(jump, points, yardstick, scale, measure, limit, sure)
    if off.all() and len(off):
        return replace(found, result=TOLD, words="shells fold here, or different parts meet")
    if not np.isfinite(jump.own).any() or not np.isfinite(jump.other).any() or scale == 0.0:
        return replace(found, result=TOLD, words="there is nothing to compare")
    return found


def _contracted(
    group: Group,
    seam: Seam,
    field: Field,
    case: LoadCase,
    here: Numbers,
    there: Numbers,
    q: Quantity,
    chi: Factors,
) -> Jump:
    """Both sides of ``T n``, with T of (k, c, 3); of all components where T is (k, c)."""
    if here.ndim == 3:
        Q = np.stack([p.Q for p in group.placements])[seam.via]
        here = np.einsum("kci,ki->kc", here, seam.normal)
        back = np.einsum("kij,ki->kj", Q, seam.normal)  # Q^T n
        there = np.einsum("kci,ki->kc", there, back)
    shown = replace(field, quantity=q, frame=Global())
    other = carried(group, seam, shown, there, chi)
    return Jump(seam, field, case, q, here, other, np.zeros(len(here)))


def judged(
    jump: Jump,
    points: NDArray[np.floating],
    yardstick: Floats,
    scale: float,
    measure: str,
    limit: float,
    sure: NDArray[np.bool_] | None = None,
) -> Verdict:
    """A jump beside the scatter around it.

    Parameters
    ----------
    yardstick : (k,) largest jump between neighbouring cells near each row; NaN if unknown.
    scale : the largest value over the body.
    limit : how many times the yardstick counts as closed.
    sure : (k,) whether more than that is open, and not only doubtful; None for nodal values.
    """
    lengths = jump.lengths
    known = np.isfinite(yardstick)
    least = max(SMALL * scale, np.finfo(float).tiny)
    times = np.where(known, lengths / np.maximum(np.nan_to_num(yardstick), least), 0.0)
    unknown = ~known & (lengths > limit * least)
    size = np.linalg.norm(np.maximum(yardstick[known], least))
    typical = float(np.linalg.norm(lengths[known]) / size) if 0.0 < size < np.inf else 0.0
    worst = int(np.argmax(times)) if times.max(initial=0.0) > 0.0 else None
    ratio = _ratio(jump, scale) if sure is None else None  # cells beside a seam differ by right
    result, words = CLOSED, ""
    beyond = times > limit
    if (beyond if sure is None else beyond & sure).any():
        result = OPEN
    elif beyond.any():
        result, words = DOUBTFUL, "one cell thick: there is no layer of cells to compare with"
    elif ratio is not None:
        result, words = DOUBTFUL, f"the two sides stand in the ratio {_number(ratio)}"
    elif unknown.any():
        result, words = DOUBTFUL, "there are no neighbouring cells to compare with"
    return verdict_of(
        jump, points, scale, limit, measure, result, times > limit, worst, words=words,
        times=float(times.max(initial=0.0)), typical=typical,
    )  # fmt: skip


def _ratio(jump: Jump, scale: float) -> complex | None:
    """The one factor between the sides, if there is one and it is not 1.

    In a cut plane both sides are the same values, which says nothing.
    """
    if jump.seam.kind != "sector faces":
        return None
    own, other = jump.own, jump.other
    if not np.isfinite(own).all() or not np.isfinite(other).all() or len(own) < 4:
        return None
    size = float(np.vdot(own, own).real)
    if size <= (SMALL * scale) ** 2 * len(own):
        return None  # both are as good as nothing
    a = complex(np.vdot(own, other)) / size
    rest = float(np.linalg.norm(other - a * own)) / np.sqrt(size)
    # Of a wave the mean of the cells on one side is ahead of that on the other, by the same phase
    # everywhere: only the magnitude tells.
    off = abs(abs(a) - 1.0)
    return a if off > RATIO and rest < EXACT * off else None


def _number(value: complex) -> str:
    if abs(value.imag) < 1e-6 * abs(value):
        return f"{value.real:.5g}"
    return f"{abs(value):.5g} at {np.rad2deg(np.angle(value)):.4g} degrees"


def _turned(mesh: Mesh, field: Field, values: Numbers) -> Numbers:
    """Nodal values in global directions at all nodes, (n, c)."""
    return to_global(field, values, mesh.points, on_axis(mesh))


def _as_stored(field: Field, values: Numbers) -> Numbers:
    return values


def _indexed(field: Field, values: Numbers) -> Numbers:
    """A stress as (k, 3, 3), a vector as (k, 1, 3), from stored components in global directions."""
    full = product(values, quantity_of(field).spread)
    return np.asarray(full.reshape(len(values), -1, 3))
