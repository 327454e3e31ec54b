"""Tiling: the copies must fill the body once, with nothing twice and nothing left out.

No mirror plane of the closed group may cut the model, and the sector's angle must be 360/N.
"""

from __future__ import annotations

from typing import Any, cast

import numpy as np

from expander.cells import dimensions
from expander.errors import InputError
from expander.groups import Group, direction_words
from expander.model import Mesh
from expander.placements import Floats, Placement
from expander.seams import Seams, Tolerance, match
from expander.topology import (
    Ints,
    boundary_faces,
    boundary_nodes,
    cell_centres,
    faces_met,
    local_edges,
    pieces,
)

_SAMPLES = 400
_ANGLES_TRIED = 12


def check_sides(mesh: Mesh, group: Group, given_tolerance: float | None) -> None:
    """Refuse a model with nodes on both sides of any mirror plane of the closed group."""
    tolerance = Tolerance(mesh, given_tolerance)
    for g, normal, level in group.mirrors:
        side = mesh.points @ normal - level
        low, high = float(side.min()), float(side.max())
        if -low > high:
            side, low, high = -side, -high, -low
        if low >= -0.5 * tolerance.spacing:
            continue
        wrong = np.flatnonzero(side < 0.0)
        sure = -low > 0.1 * tolerance.size
        if not sure:
            wrong = wrong[-2.0 * side[wrong] > tolerance.at(wrong)]
        if len(wrong):
            raise _cut(mesh, group, g, side, wrong)


def _cut(mesh: Mesh, group: Group, g: int, side: Floats, wrong: Ints) -> InputError:
    worst = int(wrong[np.argmin(side[wrong])])
    found = (
        f"{len(wrong)} of {mesh.point_count} nodes lie on the other side; the farthest is node "
        f"{worst} at ({_at(mesh, worst)}), {-side[worst]:.6g} beyond the plane."
    )
    name = _plane_words(group, g)
    if name.startswith("plane"):
        return InputError(
            f"The model has nodes on both sides of {name}. {found}",
            "Expected the model on one side of each cut plane; check mirror.normal and "
            "mirror.point, or cut the model; nodes that are only slightly off are taken as on "
            "the plane with a larger seam.tolerance.",
        )
    names = [p.name for p in group.planes]
    normal = direction_words(next(n for k, n, _ in group.mirrors if k == g))
    angle = ""
    if len(group.planes) >= 2 and group.axis is None:
        a, b = group.planes[:2]
        degrees = np.rad2deg(np.arccos(np.clip(abs(a.normal @ b.normal), 0.0, 1.0)))
        angle = (
            f" Planes {a.name!r} and {b.name!r} meet at {degrees:.6g} degrees (or "
            f"{180 - degrees:.6g} on the other side), which makes {len(group)} copies: together "
            f"they have room for {360 / len(group) * (2 if len(group.planes) > 2 else 1):.6g} "
            "degrees each, so space would be covered more than once."
        )
    elif group.axis is not None and any(
        abs(float(p.normal @ group.axis.axis)) < 1e-6 for p in group.planes
    ):
        angle = (
            f" With {group.axis.sectors} sectors and a plane through the axis the model is half a "
            f"sector, {group.axis.degrees / 2:.6g} degrees."
        )
    return InputError(
        f"The model reaches across a mirror plane (normal {normal}) that the declared planes "
        f"({', '.join(names)}) make together.{angle} {found}",
        "Expected planes that bound the model at 180/m degrees; check mirror.normal and "
        "cyclic.sectors.",
    )


def _at(mesh: Mesh, node: int) -> str:
    return ", ".join(f"{c:.6g}" for c in mesh.points[node])


def check_touch(mesh: Mesh, group: Group, seams: Seams, keep_apart: bool) -> list[str]:
    """Refuse a model that almost touches a cut plane; notes on planes that it stays clear of.

    With `keep_apart` a small clearance is taken as meant.

    The planes are those that bound the copies next to the model, declared or implied.
    """
    notes = []
    walls = _walls(group, mesh)
    for g in walls:
        if seams.pairs.get(g):
            continue
        normal, level = next((n, d) for k, n, d in group.mirrors if k == g)
        off = np.abs(mesh.points @ normal - level)
        node = int(np.argmin(off))
        edge = float(local_edges(mesh, np.array([node]))[0])
        name = _plane_words(group, g)
        if off[node] < edge < np.inf and not keep_apart:  # a lone mass has no edge to compare
            raise InputError(
                f"No node lies on {name}: the nearest is node {node} at "
                f"({_at(mesh, node)}), {off[node]:.6g} away, less than its edge of {edge:.6g}.",
                f"Move the plane (mirror.point), or give a seam.tolerance over "
                f"{2 * off[node]:.3g} if the nodes are off; if the clearance is meant, "
                'seam.open = "keep apart".',
            )
        for other in walls:
            if other != g:
                _check_span(mesh, group, g, other)
        notes.append(
            f"the model stays clear of {name} (nearest: node {node}, "
            f"{off[node]:.6g} away): its copies do not touch there"
        )
    if seams.near_misses:
        nodes = {n for n, _ in seams.near_misses}
        node, distance = max(seams.near_misses, key=lambda m: m[1])
        notes.append(
            f"{len(nodes)} nodes lie close to a seam but outside the tolerance and were not "
            f"merged (farthest: node {node}, {distance:.3g} from its partner); to merge them give "
            f"seam.tolerance = {1.05 * distance:.2g}"
        )
    return notes


def _walls(group: Group, mesh: Mesh) -> list[int]:
    """Mirrors (copy numbers) that bound the region of the model: the first that rays from it hit.

    A ray that leaves the region crosses one of its walls first; enough rays meet every wall.
    """
    if not group.mirrors:
        return []
    normals = np.array([n for _, n, _ in group.mirrors])
    levels = np.array([d for _, _, d in group.mirrors])
    start = mesh.points[np.linspace(0, mesh.point_count - 1, 500).astype(np.int64)].mean(axis=0)
    rays = np.random.default_rng(23).normal(size=(4096, 3))
    with np.errstate(divide="ignore", invalid="ignore"):
        ahead = (levels - normals @ start)[:, None] / (normals @ rays.T)
    ahead[~(ahead > 0.0)] = np.inf
    first = np.unique(np.argmin(ahead, axis=0)[np.isfinite(ahead.min(axis=0))])
    return [group.mirrors[k][0] for k in first.tolist()]


def _plane_words(group: Group, g: int) -> str:
    normal = next(n for k, n, _ in group.mirrors if k == g)
    for plane in group.planes:
        own = plane.placement.plane()
        if own is not None and _parallel(own[0], normal):
            return f"plane {plane.name!r}"
    return f"the implied cut plane with normal {direction_words(normal)}"


def _check_span(mesh: Mesh, group: Group, g: int, other: int) -> None:
    """Refuse a model between two plane faces that meet at a smaller angle than their planes."""
    (n, level), (m, other_level) = (
        next((n, d) for k, n, d in group.mirrors if k == copy) for copy in (g, other)
    )
    line = np.cross(n, m)
    if np.linalg.norm(line) < 1e-6:
        return
    axis = line / np.linalg.norm(line)
    point = np.linalg.solve(np.stack([n, m, axis]), [level, other_level, 0.0])
    points = mesh.points.astype(float) - point
    radial = points - np.outer(points @ axis, axis)
    radius = np.linalg.norm(radial, axis=1)
    off_axis = radius > 1e-6 * radius.max()
    middle = radial[off_axis].mean(axis=0)
    middle /= np.linalg.norm(middle)
    across = np.cross(axis, middle)
    theta = np.rad2deg(np.arctan2(radial[off_axis] @ across, radial[off_axis] @ middle))
    low, high = float(theta.min()), float(theta.max())
    for end in (low, high):  # a face spans radii, the edge of a block does not
        face = np.abs(theta - end) < 1e-6
        if face.sum() < 3 or np.ptp(radius[off_axis][face]) < 1e-3 * radius.max():
            return
    a, b = (float(np.rad2deg(np.arccos(np.clip(abs(v @ across), 0, 1)))) for v in (n, m))
    span, expected = high - low, a + b
    if abs(span - expected) < 1e-4 * expected:
        return
    fit = 180.0 / span
    advice = f" sectors = {round(fit)} would fit." if group.axis is not None and abs(
        fit - round(fit)) < 1e-3 * fit else ""  # fmt: skip
    raise InputError(
        f"The model lies between two planes {span:.6g} degrees apart, but "
        f"{_plane_words(group, g)} and {_plane_words(group, other)} ask for "
        f"{expected:.6g} degrees.{advice}",
        "Correct mirror.normal" + (", or cyclic.sectors." if group.axis is not None else "."),
    )


def _parallel(a: Floats, b: Floats) -> bool:
    return bool(np.abs(np.outer(a, a) - np.outer(b, b)).max() < 1e-9)


def check_turns(mesh: Mesh, group: Group, seams: Seams, given: float | None) -> list[str]:
    """Refuse a sector whose angle is not 360/N, or whose copies overlap.

    Nothing to do where mirror planes alone make the group: `check_sides` is exact there.
    """
    if group.is_reflection_group:
        return []
    turned = [g for g in range(1, len(group)) if not group.placements[g].mirrored]
    nodes = seams.nodes
    by_turn = np.array([not p.mirrored for p in group.placements])[nodes.via]
    if group.axis is not None:
        by_turn &= nodes.via == 1  # the next sector; a wrong N may meet a later one by chance
    touching = bool((by_turn & (nodes.item != nodes.source)).any())  # on the axis says nothing
    notes = [
        f"the faces towards the copy {group.words(g)} lie against each other with different "
        f"meshes ({count} nodes happen to coincide): they do not pair and were not merged"
        for g, count in seams.unmatched
    ]
    solid = bool((dimensions(mesh.types) == 3).any())
    copy: int | None = seams.overlapping[0] if seams.overlapping else None
    if copy is None and (not touching or not solid):
        copy = _overlap(mesh, group, turned, nodes.items)
    if group.axis is not None and (copy is not None or not (touching or seams.unmatched)):
        angle = _face_angle(mesh, group, given)
        if angle is not None and abs(angle - group.axis.degrees) > 1e-4 * group.axis.degrees:
            raise _wrong_angle(group, angle)
    if copy is not None:
        raise InputError(
            f"Copies overlap: part of the model, {group.words(copy)}, lies inside the model.",
            "Expected a sector of 360/N degrees about cyclic.axis through cyclic.point, and each "
            "part on one side of the seam only; check cyclic.sectors, axis and point.",
        )
    if not touching and not notes:
        notes.append("no node of one sector meets a node of another: the turned copies do not "
                     "touch, nothing was merged between them")  # fmt: skip
    return notes


def _wrong_angle(group: Group, angle: float) -> InputError:
    assert group.axis is not None
    n = 360.0 / angle
    fit = f" sectors = {round(n)} would fit." if abs(n - round(n)) < 1e-3 * n else ""
    return InputError(
        f"The sector's matching faces lie {angle:.6g} degrees apart, but cyclic.sectors = "
        f"{group.axis.sectors} asks for {group.axis.degrees:.6g} degrees.{fit}",
        "Correct cyclic.sectors; if the model is a part that stands clear of its copies, check "
        "cyclic.axis and cyclic.point first.",
    )


def _face_angle(mesh: Mesh, group: Group, given: float | None) -> float | None:
    """Angle by which the sector must be turned so that one of its faces meets another, in degrees.

    Nodes of the second face have the radius and height of nodes of the first, so the angles
    between such nodes are tried, the most frequent first: faces must meet faces, since single
    rows of nodes meet at other angles too. None if there is no such angle.
    """
    from scipy.spatial import cKDTree

    axis = group.axis
    assert axis is not None
    nodes = boundary_nodes(mesh)
    faces = boundary_faces(mesh)
    points = mesh.points[nodes].astype(float) - axis.point
    height = points @ axis.axis
    radial = points - np.outer(height, axis.axis)
    radius = np.linalg.norm(radial, axis=1)
    size = float(radius.max())
    off = radius > 1e-6 * size
    if not off.any():
        return None
    e1 = radial[np.argmax(radius)] / size
    e2 = np.cross(axis.axis, e1)
    theta = np.rad2deg(np.arctan2(radial @ e2, radial @ e1))[off]
    ring = np.stack([radius, height], axis=1)[off]
    tolerance = Tolerance(mesh, given)
    if len(ring) > 20_000:  # a sample of rings is enough to read an angle
        order = np.lexsort(np.round(ring / max(tolerance.reach, 1e-12)).T)
        ring, theta = ring[order[:20_000]], theta[order[:20_000]]
    pairs = cKDTree(ring).query_pairs(max(tolerance.reach * 0.1, tolerance.spacing),
                                      output_type="ndarray")  # fmt: skip
    apart = np.abs(theta[pairs[:, 0]] - theta[pairs[:, 1]]) if len(pairs) else np.empty(0)
    apart = np.minimum(apart, 360.0 - apart)
    apart = apart[apart > 1e-6]
    grain = 1e-5 * axis.degrees
    bins, which, counts = np.unique(
        np.round(apart / grain), return_inverse=True, return_counts=True
    )
    likely = np.argsort(-counts, kind="stable")[:_ANGLES_TRIED]
    for k in likely[np.argsort(-bins[likely])].tolist():  # a face within the body meets none
        angle = float(apart[which == k].mean())
        turn = Placement.turn(axis.axis, angle, axis.point)
        i, j, distance = match(mesh.points, nodes, nodes, turn, tolerance.reach)
        fits = (distance <= np.minimum(tolerance.at(i), tolerance.at(j))) & (i != j)
        _, met, same = faces_met(mesh, faces, i[fits], j[fits], turn)
        met = met - same if faces else int(fits.sum()) // 2
        if met:
            return angle
    return None


def _overlap(mesh: Mesh, group: Group, copies: list[int], shared: Ints) -> int | None:
    """A copy of which the centre of some cell lies inside the model, from a sample of cells.

    Cells all of whose nodes are `shared` may lie in a seam and coincide with others there.
    """
    from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
    from vtkmodules.vtkCommonCore import mutable, vtkPoints
    from vtkmodules.vtkCommonDataModel import (
        vtkCellArray,
        vtkGenericCell,
        vtkStaticCellLocator,
        vtkUnstructuredGrid,
    )

    points = vtkPoints()
    points.SetData(numpy_to_vtk(mesh.points.astype(float)))
    cells = vtkCellArray()
    offsets = numpy_to_vtkIdTypeArray(mesh.offsets)
    connectivity = numpy_to_vtkIdTypeArray(np.ascontiguousarray(mesh.connectivity))
    cells.SetData(offsets, connectivity)
    grid = vtkUnstructuredGrid()
    grid.SetPoints(points)
    types = numpy_to_vtk(mesh.types)
    grid.SetCells(types, cells)
    locator = vtkStaticCellLocator()
    locator.SetDataSet(grid)
    locator.BuildLocator()
    sample = np.linspace(0, mesh.cell_count - 1, _SAMPLES).astype(np.int64)
    first_of_piece = np.unique(
        pieces(mesh)[mesh.connectivity[mesh.offsets[:-1]]], return_index=True
    )[1]
    sample = np.unique(np.concatenate([sample, first_of_piece[:_SAMPLES]]))
    own = np.ones(mesh.point_count, dtype=bool)
    own[shared] = False
    sample = sample[np.logical_or.reduceat(own[mesh.connectivity], mesh.offsets[:-1])[sample]]
    centres = cell_centres(mesh)[sample]
    inside = 0.02 * local_edges(mesh, mesh.connectivity[mesh.offsets[:-1][sample]])
    inside[~np.isfinite(inside)] = 0.0  # a point mass has no inside
    middle = mesh.bounds.mean(axis=0)
    reach = float(np.linalg.norm(mesh.points - middle, axis=1).max())
    generic = vtkGenericCell()
    cell_id, sub_id, d2 = (cast(Any, mutable(start)) for start in (0, 0, 0.0))
    closest = [0.0, 0.0, 0.0]
    for g in copies:
        placement = group.placements[g]
        images = placement.apply(centres)
        near = np.flatnonzero(np.linalg.norm(images - middle, axis=1) <= reach)
        for k in near.tolist():  # a bounded sample, not all cells
            locator.FindClosestPoint(images[k], closest, generic, cell_id, sub_id, d2)
            if float(d2) ** 0.5 < inside[k]:
                return g
    return None
