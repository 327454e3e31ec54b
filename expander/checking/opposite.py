"""Where faces of two copies do not pair node to node: what lies opposite, how well it is known
and whether the surfaces touch.

`opposite` drops points on a copy's facets, `interpolate` takes values there, `error_bound` says how
far such a value may be off, and `classify` tells facets that match, touch and stand apart.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from expander.checking.facets import (
    Facets,
    areas,
    facet_keys,
    normals,
    subset,
    unit_rows,
)
from expander.checking.feet import FACING, Opposite, interpolate, opposite
from expander.checking.roughness import roughness, surface_slopes
from expander.model import Mesh
from expander.placements import Floats, Placement
from expander.topology import Ints, tokens

__all__ = ["Against", "Opposite", "Side", "classify", "error_bound", "interpolate", "opposite"]

# Of a facet's inner radius: a foot farther aside than this is beside the other surface.
_BESIDE = 0.25


def error_bound(
    mesh: Mesh, facets: list[Facets], opposite: Opposite, values: NDArray[np.inexact]
) -> Floats:
    """Estimate of the error of interpolating a smooth field at each foot, (k,); NaN if not found.

    What `roughness` says of the facet found there: an estimate, not a strict bound.

    Parameters
    ----------
    facets : those that `opposite` was made with.
    values : (n, c) nodal values; components are taken together by their root of squares.
    """
    estimate = np.concatenate([np.zeros(0), roughness(mesh, facets, values), [np.nan]])
    # Beside the facet the value goes on with its slope, which the foot on the rim does not know.
    slopes = surface_slopes(mesh, facets, values)
    aside = np.zeros(len(opposite.facet))
    there = np.flatnonzero(opposite.found)
    change = np.einsum("kci,ki->kc", slopes[opposite.facet[there]], opposite.offset[there])
    aside[there] = np.linalg.norm(change, axis=1)
    return np.asarray(estimate[opposite.facet] + aside)


@dataclass(frozen=True, eq=False)
class Side:
    """Facets of one side of a seam, by how they meet the other: numbers counted through the blocks.

    Attributes
    ----------
    matched : all corners pair with those of one facet.
    against : on the other surface within the tolerance, with another mesh.
    apart : opposite the other surface, but farther off.
    gap : (f,) distance between each facet and the other surface, the largest of its corners, along
        the other surface's normal; 0 if matched, NaN where nothing lies opposite.
    node : (f,) the corner at which it is largest; -1 if matched or where nothing lies opposite.
    """

    matched: Ints
    against: Ints
    apart: Ints
    gap: Floats
    node: Ints


@dataclass(frozen=True, eq=False)
class Against:
    """How the sector's outer facets meet the copy made by one placement.

    Attributes
    ----------
    facets, areas : the sector's outer facets, and their areas through the blocks.
    here : facets of the sector that meet the copy.
    there : facets of the sector whose images meet the sector.
    """

    facets: list[Facets]
    areas: Floats
    here: Side
    there: Side

    @property
    def matched_area(self) -> float:
        return float(self.areas[self.here.matched].sum())

    @property
    def against_area(self) -> float:
        return float(self.areas[self.here.against].sum())

    @property
    def apart_area(self) -> float:
        return float(self.areas[self.here.apart].sum())

    @property
    def facets_here(self) -> list[Facets]:
        """Facets of the sector against the copy's surface, with another mesh."""
        return subset(self.facets, self.here.against)

    @property
    def facets_there(self) -> list[Facets]:
        """Facets whose images lie against the sector's surface, with another mesh."""
        return subset(self.facets, self.there.against)

    @property
    def nodes_here(self) -> Ints:
        """Nodes of `facets_here`, sorted."""
        return _nodes(self.facets_here)

    @property
    def nodes_there(self) -> Ints:
        """Nodes of `facets_there`, sorted."""
        return _nodes(self.facets_there)

    @property
    def largest_gap(self) -> tuple[float, int]:
        """Largest gap of facets of the sector that do not match, and its node; (0, -1) if none."""
        rows = np.concatenate([self.here.against, self.here.apart])
        if not len(rows):
            return 0.0, -1
        row = rows[np.argmax(self.here.gap[rows])]
        return float(self.here.gap[row]), int(self.here.node[row])


def _nodes(facets: list[Facets]) -> Ints:
    return np.unique(np.concatenate([np.zeros(0, np.int64), *(f.nodes.ravel() for f in facets)]))


def classify(
    mesh: Mesh,
    outer: list[Facets],
    placement: Placement,
    paired_nodes: Ints,
    tolerance: float,
    reach: float,
) -> Against:
    """Tell apart how outer facets meet the copy made by `placement`.

    Faces count only if they face each other: the scalar product of their outward normals is below
    -0.5. On a curved surface two meshes differ by the height of an arc over its chord, which is
    estimated (`roughness` of the coordinates) and added to the tolerance.

    Parameters
    ----------
    outer : the sector's outer facets.
    paired_nodes : (n,) the node where the image of each node lies, -1 if at none.
    tolerance : distance within which surfaces touch. reach : largest gap that still counts.
    """
    surface = _Surface.of(mesh, outer)
    there, here = _matched(mesh, surface, placement, paired_nodes)
    return Against(
        outer,
        np.concatenate([np.zeros(0), *(areas(mesh, f) for f in outer)]),
        _side(mesh, surface, placement, here, tolerance, reach),
        _side(mesh, surface, placement.inverse(), there, tolerance, reach),
    )


@dataclass(frozen=True, eq=False)
class _Surface:
    """Outer facets; of each, counted through the blocks: dimension, normal, axis and arc.

    `axis` is the normal of a face and the direction of an edge; `arc` the height of the curved
    surface over the facet.
    """

    facets: list[Facets]
    dimension: Ints
    out: Floats
    axis: Floats
    arc: Floats

    @staticmethod
    def of(mesh: Mesh, facets: list[Facets]) -> _Surface:
        out = [normals(mesh, f) for f in facets]
        axis = [
            unit_rows(np.subtract(*mesh.points[f.nodes[:, 1::-1].T].astype(float)))
            if f.dimension == 1
            else n
            for f, n in zip(facets, out, strict=True)
        ]
        return _Surface(
            facets,
            np.concatenate(
                [np.zeros(0, np.int64), *(np.full(len(f), f.dimension) for f in facets)]
            ),
            np.concatenate([np.zeros((0, 3)), *out]),
            np.concatenate([np.zeros((0, 3)), *axis]),
            roughness(mesh, facets, mesh.points.astype(float)),
        )

    def split(self, found: Opposite) -> tuple[Floats, Floats]:
        """Distance off the facet's surface, and beside the facet along its surface, (k,) each."""
        along = np.abs(np.einsum("ki,ki->k", found.offset, self.axis[found.facet]))
        rest = np.sqrt(np.maximum(found.gap**2 - along**2, 0.0))
        dimension = self.dimension[found.facet]
        off = np.choose(dimension, [found.gap, rest, along])
        beside = np.choose(dimension, [np.zeros_like(rest), along, rest])
        return np.where(found.found, off, np.inf), np.where(found.found, beside, np.inf)


def _matched(
    mesh: Mesh, surface: _Surface, placement: Placement, partner: Ints
) -> tuple[Ints, Ints]:
    """Facets whose images are facets of the sector, and those facets; numbers, each ascending."""
    token = tokens(mesh.point_count)
    mine, images = [np.zeros(0, dtype=np.uint64)], [np.zeros(0, dtype=np.uint64)]
    whole = [np.zeros(0, dtype=bool)]
    for f in surface.facets:
        corners = f.nodes[:, : f.corners]
        mine.append(facet_keys(token, corners))
        images.append(facet_keys(token, partner[corners]))
        whole.append(np.asarray((partner[corners] >= 0).all(axis=1)))
    keys = np.concatenate(mine)
    order = np.argsort(keys, kind="stable")
    there = np.flatnonzero(np.concatenate(whole))
    wanted = np.concatenate(images)[there]
    here = order[np.minimum(np.searchsorted(keys[order], wanted), len(keys) - 1)]
    turned = surface.out[there] @ placement.Q.T
    met = (keys[here] == wanted) & (np.einsum("ki,ki->k", turned, surface.out[here]) < FACING)
    return there[met], np.unique(here[met])


def _inner_radius(corners: Floats) -> Floats:
    """(f,) distance from the centre to the nearest side, corners (f, c, 3) relative to it.

    Not the distance to the corners: a slender facet would reach over to what lies beside it.
    """
    if corners.shape[1] < 3:
        return np.asarray(np.linalg.norm(corners, axis=2).min(axis=1))
    after = np.roll(corners, -1, axis=1)
    length = np.linalg.norm(after - corners, axis=2)
    twice_area = np.linalg.norm(np.cross(corners, after), axis=2)
    away = np.divide(twice_area, length, out=np.full_like(length, np.inf), where=length > 0.0)
    return np.asarray(away.min(axis=1))


def _side(
    mesh: Mesh,
    surface: _Surface,
    placement: Placement,
    matched: Ints,
    tolerance: float,
    reach: float,
) -> Side:
    """How the other facets lie opposite the copy: those whose centre lies over it count."""
    count = len(surface.out)
    gap, node = np.full(count, np.nan), np.full(count, -1, dtype=np.int64)
    touches, rest = np.zeros(count, dtype=bool), np.ones(count, dtype=bool)
    rest[matched], gap[matched], start = False, 0.0, 0
    for f in surface.facets:
        rows = np.flatnonzero(rest[start : start + len(f)])
        nodes = f.nodes[rows, : f.corners]
        p = mesh.points[nodes].astype(float)
        centre = p.mean(axis=1)
        aside = _BESIDE * _inner_radius(p - centre[:, None])
        rows += start
        start += len(f)
        out = surface.out[rows]
        at_centre = opposite(centre, mesh, surface.facets, placement, reach, out)
        high, beside = surface.split(at_centre)
        over = np.flatnonzero(beside <= aside)
        if not len(over):
            continue
        # Each node once: where faces fold, the mean normal still faces what either of them faces.
        own, which = np.unique(nodes[over], return_inverse=True)
        which = which.reshape(-1, f.corners)
        mean = np.zeros((len(own), 3))
        np.add.at(mean, which, out[over][:, None])
        where = mesh.points[own].astype(float)
        found = opposite(where, mesh, surface.facets, placement, reach, unit_rows(mean))
        off, beside = (part[which] for part in surface.split(found))
        # A corner beside the other surface says nothing of the distance between the surfaces.
        off = np.where(beside <= aside[over][:, None], off, -1.0)
        arc = np.where(found.found, surface.arc[found.facet], 0.0)[which]
        worst = off.argmax(axis=1)
        most = off.max(axis=1)
        rows = rows[over]
        gap[rows] = np.where(most < 0.0, high[over], most)
        node[rows] = nodes[over, worst]
        touches[rows] = gap[rows] <= tolerance + arc.max(axis=1)
    apart = ~touches & ~np.isnan(gap)
    apart[matched] = False
    return Side(matched, np.flatnonzero(touches), np.flatnonzero(apart), gap, node)
