"""Perturbations of fields that close, each sized so that its largest jump is just one limit.

Jumps are worked out by hand, from the copies and pairs of nodes of `closing_fields`. Only the
yardsticks of traction and slope, which belong to the mesh and the field before it is perturbed, are
asked of the program.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from closing_fields import Array, Face, Probe, Setting, stored, turned, unstored

from expander.checking.gradients import cell_gradients, cell_means
from expander.checking.report import CheckUp
from expander.checking.seamlist import Seam
from expander.checking.smoothness import Near

LIMIT, SCATTER = 1e-4, 6.0  # the case file's defaults
LEAST = 1e-3  # yardsticks below this part of the field's largest value count as that


@dataclass(frozen=True, eq=False)
class Opened:
    """A perturbation, sized so that its largest jump is one limit.

    Attributes
    ----------
    delta : (n, c) added to the stored values of the field.
    jumps : (copies,) largest jump over its limit at the seam of each copy.
    nodes : those that may be named first; empty if a whole face is perturbed.
    """

    probe: Probe
    measure: str
    where: str
    component: str
    delta: Array
    jumps: Array
    nodes: frozenset[int]


@dataclass(frozen=True, eq=False)
class Base:
    """A sector, its fields that close, and the check of them."""

    setting: Setting
    probes: list[Probe]
    frames: dict[str, Any]
    check: CheckUp

    def near(self, seam: Seam) -> Near:
        sector = self.check.continuity.sector
        return Near(sector.mesh, sector.group, seam)

    def copies_at(self, seam: Seam) -> list[int]:
        """The copies, counted by hand, that a seam of the program leads to."""
        if seam.kind == "lines and points":
            others = [s for s in self.check.continuity.seams if s is not seam]
            taken = {g for s in others for g in self.copies_at(s)}
            return [g for g in range(1, len(self.setting.copies)) if g not in taken]
        Q = self.check.continuity.sector.group.placements[seam.copy].Q
        both = (np.abs(self.setting.copies[:, :3, :3] - q).max(axis=(1, 2)) for q in (Q, Q.T))
        return np.flatnonzero(np.min(list(both), axis=0) < 1e-6).tolist()

    def seam_of(self, face: Face) -> tuple[int, Seam] | None:
        """The copy that most of the nodes of a face meet, and the program's seam towards it; None
        if the face is curved and has mid-side nodes beside it, where nothing can fade from."""
        nodes = nodes_on(self.setting, face)
        pairs = self.setting.pairs
        copies, counts = np.unique(pairs[np.isin(pairs[:, 0], nodes), 1], return_counts=True)
        g = int(copies[np.argmax(counts)])
        meet = pairs[pairs[:, 0] != pairs[:, 2], 0]
        on_faces = np.concatenate([nodes_on(self.setting, f) for f in self.setting.faces])
        if face.twin and not np.isin(meet, on_faces).all():
            return None
        seams = [s for s in self.check.continuity.seams if s.faces and g in self.copies_at(s)]
        return g, seams[0]


def direction_of(rng: np.random.Generator, size: int) -> tuple[str, Array]:
    """One component or all of them, with its name."""
    if size > 1 and rng.random() < 0.5:
        return "all", rng.choice([-1.0, 1.0], size) * rng.uniform(0.5, 1.0, size)
    k = int(rng.integers(size))
    return str(k + 1), rng.choice([-1.0, 1.0]) * np.eye(size)[k]


def nodes_on(s: Setting, face: Face) -> Array:
    return np.flatnonzero(np.abs(face.depth(s.local)) < 1e-6)


def picked(rng: np.random.Generator, s: Setting) -> Face:
    return s.faces[int(rng.integers(len(s.faces)))]


def spared(s: Setting, face: Face, points: Array) -> Array:
    """1 far from the other cut planes of a sector, 0 with slope 0 on them, at local points."""
    out = np.ones(len(points))
    for other in s.faces:
        if other is not face and not face.twin:
            depth = np.clip(other.depth(points), 0.0, 1.0)
            out *= depth**2 * (3.0 - 2.0 * depth)
    return out


def alone(s: Setting, face: Face, nodes: Array) -> Array:
    """Those of the nodes of a face that no other face has."""
    others = [nodes_on(s, other) for other in s.faces if other is not face]
    return np.setdiff1d(nodes, np.concatenate(others)) if others else nodes


def face_places(s: Setting, seam: Seam) -> Array:
    """Local centres of the faces of a seam, in the order of its rows by face."""
    return np.concatenate([s.local[f.corners].mean(axis=1) for f in seam.faces])


def meeting(s: Setting, nodes: Sequence[int]) -> frozenset[int]:
    """These nodes and those whose images lie there."""
    return frozenset(nodes) | frozenset(s.pairs[np.isin(s.pairs[:, 2], nodes), 0].tolist())


def value_opened(rng: np.random.Generator, base: Base) -> Opened | None:
    """A field that must agree, opened at one seam node or on a whole face."""
    s, p = base.setting, base.probes[int(rng.integers(2))]
    component, d = direction_of(rng, p.values.shape[1])
    single = rng.random() < 0.6
    rows = [int(rng.choice(s.pairs[:, 0]))] if single else nodes_on(s, picked(rng, s)).tolist()
    delta = np.zeros_like(p.values)
    delta[rows] = d * (np.exp(2j * np.pi * rng.random()) if s.waves else 1.0)
    full = unstored(p.kind, delta, p.bases)
    lengths = np.zeros(len(s.pairs))
    for g in np.unique(s.pairs[:, 1]):
        at = np.flatnonzero(s.pairs[:, 1] == g)
        brought = s.chi[g] * turned(p.kind, s.copies[g, :3, :3], full[s.pairs[at, 2]])
        lengths[at] = np.linalg.norm(stored(p.kind, full[s.pairs[at, 0]] - brought), axis=1)
    if lengths.max() < 0.2:
        return None  # it keeps to the symmetry, as a scalar does in a symmetric plane
    jumps = np.zeros(len(s.copies))
    np.maximum.at(jumps, s.pairs[:, 1], lengths / lengths.max())
    where = f"node {rows[0]}" if single else "face"
    return Opened(p, "value", where, component, delta * (LIMIT * p.scale / lengths.max()), jumps,
                  meeting(s, rows) if single else frozenset())  # fmt: skip


def kink_opened(rng: np.random.Generator, base: Base) -> Opened | None:
    """A displacement that closes but has another slope at a face, fading into the sector.

    ``d w(depth)`` with w = 0 on the face and slope 1, both falling steadily; on the other face of
    a cyclic sector w = 0 again. The copy's slope through the face has the other sign.
    """
    s, p, face = base.setting, base.probes[0], picked(rng, base.setting)
    met = base.seam_of(face)
    if met is None:
        return None
    g, seam = met
    component, d = direction_of(rng, 3)
    depth = np.clip(face.depth(s.local), 0.0, 1.0)
    w = depth * (1.0 - depth) if face.twin else depth * (1.0 - depth / 2.0)
    jump = float(np.linalg.norm(d + s.chi[g] * (s.copies[g, :3, :3] @ d)))
    if jump < 0.5:
        return None  # the slope that the symmetry asks for
    near, places = base.near(seam), face_places(s, seam)
    shape = stored(p.kind, np.outer(w * spared(s, face, s.local), d), p.bases)

    def gradients(values: Array) -> Array:
        return cell_gradients(near.mesh, near.around.cells, unstored(p.kind, values, p.bases))

    # The slope that the first cell has on average, on whichever side it was opened.
    G, n = gradients(shape), near.by_face.normal
    sides = (G[near.here], n), (G[near.across], n @ s.copies[near.seam.copy, :3, :3])
    slopes = np.max([np.linalg.norm(np.einsum("fci,fi->fc", g, m), axis=1) for g, m in sides], 0)
    slopes *= spared(s, face, places)
    delta = sized(
        shape, p.values, jump * slopes,
        lambda values: around_faces(near, gradients(values)),
        float(np.linalg.norm(gradients(p.values), axis=(1, 2)).max()), fading=True,
    )  # fmt: skip
    if delta is None:
        return None
    return Opened(p, "kink", "face", component, delta, one_copy(s, g), frozenset())


def traction_opened(rng: np.random.Generator, base: Base) -> Opened | None:
    """A stress at nodes or in cells that is opened at one of them, or along a face, fading
    steadily into the sector."""
    s, p, face = base.setting, base.probes[2 + int(rng.integers(2))], picked(rng, base.setting)
    met = base.seam_of(face)
    if met is None:
        return None
    g, seam = met
    on = nodes_on(s, face)
    component, d = direction_of(rng, 6)
    tensor, Q = unstored(p.kind, d[None])[0], s.copies[g, :3, :3]
    single = rng.random() < 0.5
    items = alone(s, face, on) if p.on == "points" else cells_alone(s, face, on)
    if not len(items):
        return None
    item = int(rng.choice(items))
    normals = face.normal(s.local[on])
    length = np.linalg.norm(normals, axis=1)  # 0 on the axis
    normals = (normals[length > 0.0] / length[length > 0.0, None]) @ s.R.T
    jump = tensor if face.twin else tensor - s.chi[g] * (Q @ tensor @ Q.T)
    tractions = np.linalg.norm(normals @ jump, axis=1)
    traction = float(tractions.min())
    if traction < 0.3 or tractions.max() > 2.5 * traction:
        return None
    near = base.near(seam)
    if single:
        weight = (np.arange(len(p.values)) == item).astype(float)
        share = rows_of(near, p, item).astype(float)
        if not share.any():
            return None  # a node that no face of the seam has
    else:
        places = s.local if p.on == "points" else s.to_local(centres(s))
        weight = (1.0 - np.clip(face.depth(places), 0.0, 1.0)) * spared(s, face, places)
        places = s.local[seam.nodes] if p.on == "points" else face_places(s, seam)
        share = spared(s, face, places)
    delta = sized(
        stored(p.kind, weight[:, None, None] * tensor, p.bases), p.values, traction * share,
        lambda values: stress_yardstick(near, p, values), p.scale, fading=not single,
    )  # fmt: skip
    if delta is None:
        return None
    named = [item] if p.on == "points" else s.sector.cells[item][1]
    return Opened(p, "traction", f"{p.on[:-1]} {item}" if single else "face", component, delta,
                  one_copy(s, g), meeting(s, named) if single else frozenset())  # fmt: skip


def sized(
    delta: Array,
    values: Array,
    jumps: Array,
    yardstick: Callable[[Array], Array],
    scale: float,
    fading: bool,
) -> Array | None:
    """A perturbation, scaled so that its largest jump beside the scatter is one limit.

    Parameters
    ----------
    jumps : (k,) its jump at each row of the seam.
    yardstick : of stored values, the scatter beside each row.
    scale : what the least scatter that counts is a part of.
    fading : it has a scatter of its own, which raises the limit; then None where the mesh is too
        coarse for ten limits to stand out.
    """
    scatter = np.maximum(yardstick(values), LEAST * scale)
    factor = SCATTER / float((jumps / scatter).max())
    if fading:
        own = yardstick(10.0 * factor * delta)
        if (10.0 * factor * jumps / (scatter + own)).max() < 2.0 * SCATTER:
            return None
    return np.asarray(factor * delta)


def one_copy(s: Setting, g: int) -> Array:
    return (np.arange(len(s.copies)) == g).astype(float)


def centres(s: Setting) -> Array:
    points = s.sector.points.astype(float)
    return np.array([points[nodes].mean(axis=0) for _, nodes in s.sector.cells])


def cells_on(s: Setting, nodes: Array) -> Array:
    """Cells with all corners of a face (or of an edge, for a shell) among these nodes."""
    on = set(nodes.tolist())
    corners = {5: 3, 9: 4, 10: 4, 24: 4, 12: 8, 25: 8, 13: 6, 26: 6}
    least = {5: 2, 9: 2, 10: 3, 24: 3, 12: 4, 25: 4, 13: 4, 26: 4}
    return np.array(
        [k for k, (t, n) in enumerate(s.sector.cells) if len(on & set(n[: corners[t]])) >= least[t]]
    )


def cells_alone(s: Setting, face: Face, nodes: Array) -> Array:
    """Cells on a face that are on no other."""
    others = [cells_on(s, nodes_on(s, other)) for other in s.faces if other is not face]
    return (
        np.setdiff1d(cells_on(s, nodes), np.concatenate(others)) if others else cells_on(s, nodes)
    )


def stress_yardstick(near: Near, p: Probe, values: Array) -> Array:
    """The scatter beside each row of a seam, of stored values of a stress."""
    full, cells = unstored(p.kind, values, p.bases), near.around.cells
    if p.on == "cells":
        return around_faces(near, full[cells])
    means = cell_means(near.mesh, cells, full.reshape(len(full), 9)).reshape(-1, 3, 3)
    return near.around.nodal_yardstick(full[near.around.nodes], means, near.seam.nodes)


def around_faces(near: Near, per_cell: Array) -> Array:
    """The scatter beside each face, its own cells counted in, since none stands out yet."""
    return near.face_yardstick(per_cell, np.zeros(len(near.here)))[0]


def rows_of(near: Near, p: Probe, item: int) -> Array:
    """(k,) which rows of a seam have this node or cell on one of their sides."""
    if p.on == "cells":
        cells = near.around.cells
        return np.asarray((cells[near.here] == item) | (cells[near.across] == item))
    seam = near.seam
    at = (seam.nodes == item) | (seam.partners[:, 0] == item)
    return np.asarray(at & (seam.normal != 0.0).any(axis=1))


MAKERS = {"value": value_opened, "traction": traction_opened, "kink": kink_opened}
