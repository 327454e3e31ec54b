"""Facets: VTK's own faces and edges, closed surfaces, collapsed cells, shells and beams."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from meshes import (
    LINE,
    QUAD,
    VERTEX,
    Sector,
    box,
    collapsed,
    quadratic,
    ring,
    somewhere,
    tetrahedra,
)
from vtkmodules.vtkCommonDataModel import vtkGenericCell

from expander.cells import CELL_TYPES
from expander.checking.facets import (
    Facets,
    areas,
    facets_of,
    normals,
    outer_facets,
    pairs,
    shares,
    subset,
)
from expander.checking.reference import reference_nodes
from expander.topology import boundary_nodes

WITH_FACETS = sorted(vtk_id for vtk_id, cell in CELL_TYPES.items() if cell.dimension > 0)


def reference_cell(vtk_id: int, seed: int = 1) -> Sector:
    """One cell with straight edges, its corners where VTK has them, sheared and turned."""
    cell = CELL_TYPES[vtk_id]
    theirs = vtkGenericCell.InstantiateCell(vtk_id)
    corners = len(cell.shape.mirrored)
    at = np.array(theirs.GetParametricCoords()[: 3 * corners]).reshape(corners, 3)
    if cell.shape.name == "pyramid":
        at[4] = [0.5, 0.5, 1.0]  # VTK's apex of the quadratic one is no point of the cell
    where = np.array([at[list(node)].mean(axis=0) for node in cell.nodes])
    R, t = somewhere(seed)
    shear = np.eye(3) + 0.3 * np.random.default_rng(seed).uniform(-1.0, 1.0, size=(3, 3))
    return Sector(where @ shear.T @ R.T + t, [(vtk_id, list(range(len(where))))])


def named(facets: list[Facets]) -> set[tuple[int, frozenset[int]]]:
    return {(f.vtk_type, frozenset(row)) for f in facets for row in f.nodes.tolist()}


def count_of(facets: list[Facets]) -> int:
    return sum(len(f) for f in facets)


@pytest.mark.parametrize("vtk_id", WITH_FACETS)
def test_facets_are_those_of_vtk(vtk_id: int) -> None:
    grid = reference_cell(vtk_id).grid()
    cell = grid.GetCell(0)
    number, theirs = {
        3: (cell.GetNumberOfFaces(), cell.GetFace),
        2: (cell.GetNumberOfEdges(), cell.GetEdge),
        1: (0, None),
    }[cell.GetCellDimension()]
    expected = {(VERTEX, frozenset([0])), (VERTEX, frozenset([1]))} if theirs is None else set()
    for i in range(number):
        f = theirs(i)  # VTK hands out the same object each time
        nodes = frozenset(f.GetPointId(j) for j in range(f.GetNumberOfPoints()))
        expected.add((f.GetCellType(), nodes))
    mesh = reference_cell(vtk_id).mesh()
    assert named(facets_of(mesh)) == expected
    assert named(outer_facets(mesh)) == expected


@pytest.mark.parametrize("vtk_id", WITH_FACETS)
def test_nodes_of_facets_are_in_the_order_of_their_type(vtk_id: int) -> None:
    # On a sheared reference cell every node lies at the mean of the corners that name it.
    mesh = reference_cell(vtk_id).mesh()
    for f in facets_of(mesh):
        if f.vtk_type == 7:
            continue
        at = mesh.points[f.nodes]
        for column, name in enumerate(CELL_TYPES[f.vtk_type].nodes):
            np.testing.assert_allclose(at[:, column], at[:, list(name)].mean(axis=1), atol=1e-12)


@pytest.mark.parametrize("vtk_id", [v for v in WITH_FACETS if CELL_TYPES[v].dimension > 1])
@pytest.mark.parametrize("seed", [1, 2])
def test_the_surface_is_closed_and_encloses_the_cell(vtk_id: int, seed: int) -> None:
    # Gauss: the area vectors sum to zero, and a third of their moment is the volume.
    sector = reference_cell(vtk_id, seed)
    mesh, d = sector.mesh(), CELL_TYPES[vtk_id].dimension
    inner = mesh.points.mean(axis=0)
    total, moment = np.zeros(3), 0.0
    for f in facets_of(mesh):
        vector = normals(mesh, f) * areas(mesh, f)[:, None]
        total += vector.sum(axis=0)
        centre = mesh.points[f.nodes[:, : f.corners]].mean(axis=1) - inner
        moment += float((vector * centre).sum())
    np.testing.assert_allclose(total, 0.0, atol=1e-12)
    sizes = sector.grid().compute_cell_sizes()
    expected = abs(sizes["Volume" if d == 3 else "Area"][0])
    assert moment / d == pytest.approx(expected, rel=1e-6)


def test_ends_of_lines_point_away_from_the_line() -> None:
    R, t = somewhere()
    line = Sector(np.array([[0.0, 0, 0], [0, 0, 2], [0, 0, 1]]), [(21, [0, 1, 2])]).moved(R, t)
    (ends,) = outer_facets(line.mesh())
    assert (ends.vtk_type, ends.dimension, ends.nodes.tolist()) == (VERTEX, 0, [[0], [1]])
    np.testing.assert_allclose(normals(line.mesh(), ends), [-R[:, 2], R[:, 2]], atol=1e-14)
    assert areas(line.mesh(), ends).tolist() == [1.0, 1.0]


@pytest.mark.parametrize("vtk_id", [22, 23, 28, 34])
def test_areas_of_curved_facets(vtk_id: int) -> None:
    # A patch of the paraboloid z = c (x^2 + y^2) / 2 over a square or triangle; quadratic shape
    # functions hold it exactly. Area: integral of sqrt(1 + c^2 (x^2 + y^2)), by scipy.
    from scipy.integrate import dblquad

    c = 0.4
    xy = reference_nodes(vtk_id)
    z = c * (xy**2).sum(axis=1, keepdims=True) / 2.0
    solid = Sector(np.hstack([xy, z]), [(vtk_id, list(range(len(xy))))])
    facet = Facets(np.arange(len(xy))[None], vtk_id, np.array([0]))
    top = (lambda x: 1.0 - x) if len(xy) in (6, 7) else (lambda x: 1.0)
    exact, _ = dblquad(lambda y, x: np.sqrt(1 + c * c * (x * x + y * y)), 0, 1, 0, top)
    assert areas(solid.mesh(), facet)[0] == pytest.approx(exact, rel=1e-6)


def test_length_of_a_parabolic_edge() -> None:
    # Arc of a parabola with base b and height h, from memory of any handbook of mathematics:
    # sqrt(b^2 + 16 h^2) / 2 + b^2 / (8 h) ln((4 h + sqrt(b^2 + 16 h^2)) / b)
    b, h = 2.0, 0.1
    root = np.sqrt(b * b + 16 * h * h)
    length = root / 2 + b * b / (8 * h) * np.log((4 * h + root) / b)
    plate = Sector(np.array([[0.0, 0, 0], [b, 0, 0], [b / 2, h, 0]]), [(21, [0, 1, 2])])
    edge = Facets(np.array([[0, 1, 2]]), 21, np.array([0]))
    assert areas(plate.mesh(), edge)[0] == pytest.approx(length, rel=1e-7)
    assert length > b * 1.005  # so that a chord would not pass


def test_shares_give_the_area_to_the_corners() -> None:
    mesh = quadratic(box((2, 1, 1))).mesh()
    (f,) = outer_facets(mesh)
    part = shares(mesh, f)
    assert part.shape == (10, 8)
    np.testing.assert_allclose(part.sum(axis=1), areas(mesh, f), rtol=1e-13)
    assert (part[:, :4] > 0).all()
    assert not part[:, 4:].any()


@pytest.mark.parametrize("make", [lambda s: s, tetrahedra, quadratic])
def test_outer_facets_enclose_a_mesh(make) -> None:  # type: ignore[no-untyped-def]
    R, t = somewhere()
    sector = make(box((3, 2, 4), (1.0, 2.0, 0.5))).moved(R, t)
    mesh = sector.mesh()
    outer = outer_facets(mesh)
    assert sum(areas(mesh, f).sum() for f in outer) == pytest.approx(2 * (2 + 0.5 + 1), rel=1e-12)
    for f in outer:
        inside = mesh.points[f.nodes].mean(axis=1) - 1e-3 * normals(mesh, f)
        local = (inside - t) @ R
        assert ((local > 0) & (local < [1.0, 2.0, 0.5])).all()
    on = np.unique(np.concatenate([f.nodes.ravel() for f in outer]))
    np.testing.assert_array_equal(on, boundary_nodes(mesh))


def test_cells_given_as_hexahedra_with_collapsed_edges() -> None:
    wedges = ring(6, (3, 2, 2), inner=0.0)
    for plain in (wedges, quadratic(wedges)):
        hexahedra = collapsed(plain) if plain is wedges else _collapsed_quadratic(plain)
        assert {t for t, _ in hexahedra.cells} <= {12, 25}
        ours, theirs = (named(outer_facets(s.mesh())) for s in (hexahedra, plain))
        assert ours == theirs
        ours, theirs = (pairs(s.mesh(), facets_of(s.mesh())) for s in (hexahedra, plain))
        assert [len(p.first) for p in ours] == [len(p.first) for p in theirs]


def _collapsed_quadratic(sector: Sector) -> Sector:
    """Quadratic wedges as quadratic hexahedra: nodes 3 and 7 repeat 0 and 4."""
    order = (0, 1, 2, 0, 3, 4, 5, 3, 6, 7, 8, 0, 9, 10, 11, 3, 12, 13, 14, 12)
    return Sector(
        sector.points,
        [(25, [n[k] for k in order]) if t == 26 else (t, n) for t, n in sector.cells],
    )


def test_a_hexahedron_collapsed_to_a_pyramid() -> None:
    points = np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0.5, 0.5, 1]])
    pyramid = Sector(points, [(14, [0, 1, 2, 3, 4])])
    folded = Sector(points, [(12, [0, 1, 2, 3, 4, 4, 4, 4])])
    assert named(outer_facets(folded.mesh())) == named(outer_facets(pyramid.mesh()))


@given(st.tuples(*[st.integers(1, 3)] * 3))
def test_pairs_are_the_inner_faces(counts: tuple[int, int, int]) -> None:
    a, b, c = counts
    mesh = box(counts).mesh()
    shared = pairs(mesh, facets_of(mesh))
    inner = (a - 1) * b * c + a * (b - 1) * c + a * b * (c - 1)
    assert sum(len(p.first) for p in shared) == inner
    centre = np.array([mesh.points[n].mean(axis=0) for n in mesh.connectivity.reshape(-1, 8)])
    for p in shared:
        for cells in (p.first, p.second):
            nodes = mesh.connectivity.reshape(-1, 8)[cells]
            assert (nodes[:, :, None] == p.corners[:, None]).any(axis=1).all()
        towards = centre[p.second] - centre[p.first]
        towards /= np.linalg.norm(towards, axis=1)[:, None]
        side = np.einsum("ki,ki->k", p.normals, towards)  # to either side
        np.testing.assert_allclose(np.abs(side), 1.0, atol=1e-12)


def test_pairs_join_linear_and_quadratic_cells_and_t_joints() -> None:
    edge, y, z = np.array([[0.0, 0, 0], [1, 0, 0]]), np.eye(3)[1], np.eye(3)[2]
    middles = [[0.5, 0, 0], [0.5, -1, 0]]
    points = np.concatenate([edge, edge + y, edge + z, edge - y, middles])
    joint = Sector(points, [(QUAD, [0, 1, 3, 2]), (QUAD, [0, 1, 5, 4]), (QUAD, [0, 1, 7, 6])])
    (p,) = pairs(joint.mesh(), facets_of(joint.mesh()))
    assert len(p.first) == 2
    assert set(p.first.tolist()) | set(p.second.tolist()) == {0, 1, 2}
    assert (LINE, frozenset((0, 1))) not in named(outer_facets(joint.mesh()))
    mixed = Sector(points, [(QUAD, [0, 1, 3, 2]), (30, [0, 1, 7, 6, 8, 9])])
    (p,) = pairs(mixed.mesh(), facets_of(mixed.mesh()))
    assert sorted(p.corners[0].tolist()) == [0, 1]


def test_what_stands_on_a_solid_or_shell_has_no_outer_facet_there() -> None:
    block = box((1, 1, 1))
    top = [n for n in range(8) if block.points[n, 2] > 0.9]
    a, b = [n for n in top if block.points[n, 0] < 0.1]
    points = np.concatenate([block.points, [[0, 0, 2.0], [0, 1, 2.0], [0, 0, 3.0]]])
    mesh = Sector(points, [*block.cells, (QUAD, [a, b, 9, 8]), (LINE, [8, 10])]).mesh()
    outer = outer_facets(mesh)
    edges = {frozenset(r) for f in outer if f.dimension == 1 for r in f.nodes.tolist()}
    assert edges == {frozenset(e) for e in ((b, 9), (9, 8), (8, a))}
    assert [f.nodes.tolist() for f in outer if f.dimension == 0] == [[[10]]]
    assert sum(len(f) for f in outer if f.dimension == 2) == 6


def test_facets_of_some_cells_only() -> None:
    mesh = box((3, 1, 1)).mesh()
    chosen = np.array([0, 2])
    assert count_of(outer_facets(mesh)) == 14
    assert count_of(outer_facets(mesh, chosen)) == 12
    assert {int(c) for f in outer_facets(mesh, chosen) for c in f.cells} == {0, 2}
    assert count_of(facets_of(mesh, np.array([1]))) == 6


def test_polygons_have_edges() -> None:
    angle = 2 * np.pi * np.arange(5) / 5
    corners = np.stack([np.cos(angle), np.sin(angle), 0 * angle], axis=1)
    middles = (corners + np.roll(corners, -1, axis=0)) / 2
    for vtk_id, points in ((7, corners), (36, np.concatenate([corners, middles]))):
        mesh = Sector(points, [(vtk_id, list(range(len(points))))]).mesh()
        (edges,) = outer_facets(mesh)
        assert edges.vtk_type == (LINE if vtk_id == 7 else 21)
        np.testing.assert_allclose(areas(mesh, edges), 2 * np.sin(np.pi / 5), rtol=1e-12)
        half = angle + np.pi / 5
        np.testing.assert_allclose(normals(mesh, edges)[:, :2].T, [np.cos(half), np.sin(half)],
                                   atol=1e-12)  # fmt: skip


def test_subset_counts_through_the_blocks() -> None:
    mesh = ring(6, (2, 1, 1), inner=0.0).mesh()
    outer = outer_facets(mesh)
    assert [f.corners for f in outer] == [3, 4]
    triangles = len(outer[0])
    first, second = subset(outer, np.array([0, triangles + 1]))
    assert first.nodes.tolist() == outer[0].nodes[:1].tolist()
    assert second.nodes.tolist() == outer[1].nodes[1:2].tolist()
    assert second.cells.tolist() == outer[1].cells[1:2].tolist()
    assert [f.corners for f in subset(outer, np.array([triangles]))] == [4]
