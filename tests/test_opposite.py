"""What lies opposite: shape functions, feet on facets, and surfaces that match, touch or gape."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from meshes import LINE, QUAD, TETRA, TRIANGLE, Sector, box, quadratic, ring, somewhere, tetrahedra
from vtkmodules.vtkCommonCore import mutable
from vtkmodules.vtkCommonDataModel import vtkGenericCell

from expander.cells import CELL_TYPES
from expander.checking.facets import Facets, areas, normals, outer_facets, subset
from expander.checking.nearest import nearest_on
from expander.checking.opposite import classify, error_bound, interpolate, opposite
from expander.checking.reference import reference_nodes, shape_functions
from expander.placements import Placement

SHAPES = (1, 3, 5, 9, 21, 22, 23, 28, 30, 34)
QUADS = (9, 23, 28, 30)
SEEDS = st.integers(0, 10**6)


def shift(x: float, y: float = 0.0, z: float = 0.0) -> Placement:
    return Placement(np.eye(3), np.array([x, y, z]))


def inner_points(vtk_type: int, count: int, rng: np.random.Generator) -> np.ndarray:
    """Parametric points within the reference facet."""
    corners = len(CELL_TYPES[vtk_type].shape.mirrored)
    weights = rng.dirichlet(np.ones(corners), size=count)
    return weights @ reference_nodes(vtk_type)[:corners]


def straight(vtk_type: int, rng: np.random.Generator, parallel: bool = False) -> np.ndarray:
    """Nodes of a random plane facet with straight sides, somewhere in space."""
    xi = reference_nodes(vtk_type)
    corners = len(CELL_TYPES[vtk_type].shape.mirrored)
    plane = np.zeros((corners, 2))
    plane[:, : xi.shape[1]] = xi[:corners]
    if not parallel:
        plane += rng.uniform(-0.15, 0.15, size=plane.shape)
    plane = plane @ (np.eye(2) + rng.uniform(-0.3, 0.3, size=(2, 2)))
    at = np.stack([plane[list(node)].mean(axis=0) for node in CELL_TYPES[vtk_type].nodes])
    R, t = somewhere(int(rng.integers(1000)))
    return np.hstack([at, np.zeros((len(at), 1))]) @ R.T + t


def vtk_cell_at(vtk_type: int, points: np.ndarray) -> object:
    cell = vtkGenericCell.InstantiateCell(vtk_type)
    if vtk_type == 7:
        cell.GetPointIds().SetNumberOfIds(len(points))
        cell.GetPoints().SetNumberOfPoints(len(points))
    for i, p in enumerate(points):
        cell.GetPointIds().SetId(i, i)
        cell.GetPoints().SetPoint(i, p)
    return cell


def vtk_foot(vtk_type: int, points: np.ndarray, x: np.ndarray) -> tuple[float, np.ndarray, int]:
    """Distance, weights, and whether the foot is inside (1), by VTK."""
    closest, pcoords, weights = [0.0] * 3, [0.0] * 3, [0.0] * len(points)
    sub, square = mutable(0), mutable(0.0)
    status = vtk_cell_at(vtk_type, points).EvaluatePosition(  # type: ignore[attr-defined]
        x, closest, sub, pcoords, square, weights
    )
    return float(np.sqrt(float(square))), np.array(weights), status


# --- shape functions


@pytest.mark.parametrize("vtk_type", [t for t in SHAPES if t != 1])
def test_shape_functions_are_those_of_vtk(vtk_type: int) -> None:
    rng = np.random.default_rng(vtk_type)
    xi = inner_points(vtk_type, 20, rng)
    ours, slopes = shape_functions(vtk_type, xi)
    cell, d = vtkGenericCell.InstantiateCell(vtk_type), xi.shape[1]
    for row, point in enumerate(xi):
        theirs = [0.0] * ours.shape[1]
        pcoords = [*point, *[0.0] * (3 - d)]
        cell.InterpolateFunctions(pcoords, theirs)
        np.testing.assert_allclose(ours[row], theirs, atol=1e-13)
        derivatives = [0.0] * (d * len(theirs))
        cell.InterpolateDerivs(pcoords, derivatives)
        np.testing.assert_allclose(slopes[row], np.reshape(derivatives, (d, -1)).T, atol=1e-12)


@pytest.mark.parametrize("vtk_type", SHAPES)
@given(seed=SEEDS)
def test_shape_functions_are_a_partition_of_unity(vtk_type: int, seed: int) -> None:
    xi = inner_points(vtk_type, 5, np.random.default_rng(seed))
    value, slope = shape_functions(vtk_type, xi)
    np.testing.assert_allclose(value.sum(axis=1), 1.0, atol=1e-13)
    np.testing.assert_allclose(slope.sum(axis=1), 0.0, atol=1e-12)


@pytest.mark.parametrize("vtk_type", SHAPES[1:])
def test_each_shape_function_is_one_at_its_node(vtk_type: int) -> None:
    value, _ = shape_functions(vtk_type, reference_nodes(vtk_type))
    np.testing.assert_allclose(value, np.eye(len(value)), atol=1e-13)


# --- feet on one facet


@pytest.mark.parametrize("vtk_type", SHAPES)
@given(seed=SEEDS)
def test_feet_are_those_of_vtk(vtk_type: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    at = straight(vtk_type, rng)
    around = at.mean(axis=0) + rng.normal(0.0, 0.8, size=(6, 3))
    weights = nearest_on(around, np.repeat(at[None], 6, axis=0), vtk_type)
    # VTK ends its iteration on a quadrilateral at steps of 1e-4, this one at 1e-12.
    accuracy = 1e-6 if vtk_type in QUADS else 1e-12
    for x, w in zip(around, weights, strict=True):
        distance, theirs, status = vtk_foot(vtk_type, at, x)
        ours = np.linalg.norm(x - w @ at)
        if status == 1 or vtk_type not in QUADS:
            assert ours == pytest.approx(distance, abs=accuracy)
        elif status == 0:  # beside a skew quadrilateral VTK takes a corner where an edge is nearer
            assert ours <= distance + 1e-9
        if status == 1:
            np.testing.assert_allclose(w, theirs, atol=accuracy)


@given(seed=SEEDS, sides=st.integers(5, 8))
def test_feet_on_polygons_are_those_of_vtk(seed: int, sides: int) -> None:
    rng = np.random.default_rng(seed)
    angle = 2 * np.pi * (np.arange(sides) + rng.uniform(-0.2, 0.2, sides)) / sides
    flat = np.stack([np.cos(angle), np.sin(angle), 0 * angle], axis=1)
    R, t = somewhere(seed)
    at = flat @ R.T + t
    around = t + rng.normal(0.0, 1.0, size=(6, 3))
    weights = nearest_on(around, np.repeat(at[None], 6, axis=0), 7)
    np.testing.assert_allclose(weights.sum(axis=1), 1.0, atol=1e-13)
    for x, w in zip(around, weights, strict=True):
        assert np.linalg.norm(x - w @ at) == pytest.approx(vtk_foot(7, at, x)[0], abs=1e-9)


@pytest.mark.parametrize("vtk_type", [9, 21, 22, 23, 28, 34])
@given(seed=SEEDS)
def test_no_point_of_a_curved_facet_is_nearer(vtk_type: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    at = straight(vtk_type, rng)
    at = at + rng.normal(0.0, 0.02, size=at.shape)
    on = shape_functions(vtk_type, inner_points(vtk_type, 1, rng))[0][0] @ at
    x = on + rng.uniform(-0.1, 0.1, size=3)
    w = nearest_on(x[None], at[None], vtk_type)[0]
    trial = shape_functions(vtk_type, inner_points(vtk_type, 500, rng))[0] @ at
    assert np.linalg.norm(x - w @ at) <= np.linalg.norm(x - trial, axis=1).min() + 1e-6


@pytest.mark.parametrize(("vtk_type", "seed"), [(22, 287), (23, 214), (34, 177)])
def test_a_step_that_leads_away_is_shortened(vtk_type: int, seed: int) -> None:
    # Wrinkled facets and points far off, at which plain Gauss-Newton jumps to and fro.
    rng = np.random.default_rng(seed)
    at = straight(vtk_type, rng)
    at = at + rng.normal(0.0, 0.05, size=at.shape)
    x = at.mean(axis=0) + rng.normal(0.0, 0.3, size=3)
    w = nearest_on(x[None], at[None], vtk_type)[0]
    trial = shape_functions(vtk_type, inner_points(vtk_type, 20_000, rng))[0] @ at
    assert np.linalg.norm(x - w @ at) <= np.linalg.norm(x - trial, axis=1).min() + 1e-6


@pytest.mark.parametrize("vtk_type", SHAPES[1:])
@given(seed=SEEDS)
def test_linear_fields_are_exact_on_straight_facets(vtk_type: int, seed: int) -> None:
    rng = np.random.default_rng(seed)
    at, slope = straight(vtk_type, rng), rng.normal(size=3)
    x = shape_functions(vtk_type, inner_points(vtk_type, 8, rng))[0] @ at
    w = nearest_on(x, np.repeat(at[None], 8, axis=0), vtk_type)
    np.testing.assert_allclose(w @ (at @ slope), x @ slope, atol=1e-12 * np.abs(at).max())


@pytest.mark.parametrize("vtk_type", [21, 22, 23, 28, 34])
@given(seed=SEEDS)
def test_quadratic_fields_are_exact_on_quadratic_facets(vtk_type: int, seed: int) -> None:
    # The eight-node quadrilateral holds all quadratic fields only if it is a parallelogram.
    rng = np.random.default_rng(seed)
    at = straight(vtk_type, rng, parallel=vtk_type == 23)
    centre, H = at.mean(axis=0), rng.normal(size=(3, 3))

    def field(x: np.ndarray) -> np.ndarray:
        return np.einsum("ki,ij,kj->k", x - centre, H, x - centre)

    x = shape_functions(vtk_type, inner_points(vtk_type, 8, rng))[0] @ at
    w = nearest_on(x, np.repeat(at[None], 8, axis=0), vtk_type)
    np.testing.assert_allclose(w @ field(at), field(x), atol=1e-11)


# --- the search


@given(seed=SEEDS)
def test_the_search_finds_what_trying_all_facets_finds(seed: int) -> None:
    # Facets of very different sizes and shapes: slivers, specks and large ones.
    rng = np.random.default_rng(seed)
    size = 10.0 ** rng.uniform(-2.0, 0.5, size=(30, 1, 1))
    stretch = 10.0 ** rng.uniform(-1.5, 0.0, size=(30, 1, 3))
    points = rng.uniform(-2, 2, size=(30, 1, 3)) + size * stretch * rng.normal(size=(30, 3, 3))
    nodes = np.arange(90).reshape(30, 3)
    sector = Sector(points.reshape(-1, 3), [(TRIANGLE, row) for row in nodes.tolist()])
    facets = [Facets(nodes[:20], TRIANGLE, np.arange(20)), Facets(nodes[20:], 5, np.arange(10))]
    R, t = somewhere(seed)
    copy = Placement(R, t)
    x = rng.uniform(-3, 3, size=(25, 3))
    found = opposite(copy.apply(x), sector.mesh(), facets, copy, reach=0.7)
    every = nearest_on(np.repeat(x, 30, axis=0), np.tile(points, (25, 1, 1)), TRIANGLE)
    feet = np.einsum("ks,ksi->ki", every, np.tile(points, (25, 1, 1))).reshape(25, 30, 3)
    least = np.linalg.norm(feet - x[:, None], axis=2)
    np.testing.assert_array_equal(found.found, least.min(axis=1) <= 0.7)
    got = found.found
    np.testing.assert_allclose(found.gap[got], least.min(axis=1)[got], atol=1e-9)
    np.testing.assert_array_equal(found.facet[got], least.argmin(axis=1)[got])
    np.testing.assert_array_equal(found.partners[got], nodes[found.facet[got]])
    np.testing.assert_allclose(np.linalg.norm(found.offset, axis=1)[got], found.gap[got])
    assert (found.facet[~got] == -1).all()
    assert np.isinf(found.gap[~got]).all()
    assert not found.weights[~got].any()


def test_a_long_facet_is_found_behind_many_nearer_centres() -> None:
    # Six triangles hang with their centres over the end of a sliver, on which the point lies.
    angle = 2 * np.pi * np.arange(3) / 3
    over = [[1.2 * np.cos(a + turn), 1.2 * np.sin(a + turn), 0.05]
            for turn in np.arange(6) / 3 for a in angle]  # fmt: skip
    points = np.array([*over, [0, 0.01, 0], [0, -0.01, 0], [3.9, 0, 0]])
    nodes = np.arange(21).reshape(7, 3)
    mesh = Sector(points, [(TRIANGLE, row) for row in nodes.tolist()]).mesh()
    facets = [Facets(nodes, TRIANGLE, np.arange(7))]
    found = opposite(np.array([[1e-3, 0, 0]]), mesh, facets, Placement.identity(), 1.0)
    assert (found.facet[0], found.gap[0]) == (6, pytest.approx(0.0, abs=1e-12))


def test_a_curved_facet_bulges_out_of_the_box_of_its_nodes() -> None:
    # y = 0.9 t - 0.6 t^2 is highest at t = 0.75, above all three nodes.
    mesh = Sector(np.array([[0.0, 0, 0], [1, 0.3, 0], [0.5, 0.3, 0]]), [(21, [0, 1, 2])]).mesh()
    facets = [Facets(np.array([[0, 1, 2]]), 21, np.array([0]))]
    found = opposite(np.array([[0.75, 0.3375, 0]]), mesh, facets, Placement.identity(), 1e-3)
    assert found.found[0]
    assert found.gap[0] < 1e-12


def test_only_facets_that_face_the_point_are_taken() -> None:
    mesh = box((2, 2, 1), (1.0, 1.0, 0.01)).mesh()
    outer = outer_facets(mesh)
    x = np.array([[0.3, 0.3, 0.012]])  # nearest is the top; the bottom faces downward
    for out, height in ((-1.0, 0.002), (1.0, 0.012)):
        facing = np.array([[0.0, 0.0, out]])
        found = opposite(x, mesh, outer, Placement.identity(), 0.1, facing)
        assert found.gap[0] == pytest.approx(height, rel=1e-12)
    sideways = np.array([[0.8, 0.6, 0.0]])
    assert opposite(x, mesh, outer, Placement.identity(), 0.25, sideways).found[0] == np.False_


def test_nodes_of_weight_zero_do_not_count() -> None:
    mesh = box((2, 1, 1)).mesh()
    outer = outer_facets(mesh)
    values = mesh.points[:, :2] * (1.0 + 2.0j)
    corner = int(np.argmin(mesh.points.sum(axis=1)))
    spoilt = np.full_like(values, np.nan)
    spoilt[corner] = values[corner]
    found = opposite(
        np.array([mesh.points[corner], [99.0, 0, 0]]), mesh, outer, Placement.identity(), 0.1
    )
    value = interpolate(found, spoilt)
    np.testing.assert_allclose(value[0], values[corner])
    assert np.isnan(value[1]).all()


def test_nothing_to_look_for_and_nothing_to_find() -> None:
    mesh = box((1, 1, 1)).mesh()
    outer = outer_facets(mesh)
    none = opposite(np.zeros((0, 3)), mesh, outer, shift(1.0), 0.1)
    assert interpolate(none, mesh.points).shape == (0, 3)
    nowhere = classify(mesh, [], shift(1.0), np.full(8, -1), 1e-6, 0.1)
    assert nowhere.matched_area == nowhere.against_area == nowhere.apart_area == 0.0
    empty = opposite(np.zeros((2, 3)), mesh, [], shift(1.0), 0.1)
    assert not empty.found.any()
    assert np.isnan(error_bound(mesh, [], empty, mesh.points)).all()


# --- two meshes of one face


def two_meshes(lean: float, make=lambda s: s) -> Sector:  # type: ignore[no-untyped-def]
    """A twelfth of a ring whose two faces about the axis have different meshes."""
    half = Placement.turn([0, 0, 1], 15.0, [0, 0, 0])
    first = ring(12, (3, 2, 4), lean=lean, part=0.5)
    second = make(ring(12, (5, 2, 3), lean=lean, part=0.5)).moved(half.Q)
    return first.beside(second)


def faces_about_the_axis(sector: Sector, lean: float) -> tuple[list[Facets], list[Facets]]:
    """Facets on the low and on the high face of a twelfth of a ring."""
    mesh, sides = sector.mesh(), []
    outer = outer_facets(mesh)
    for angle in (0.0, np.pi / 6):
        on = []
        for f in outer:
            p = mesh.points[f.nodes]
            r, theta = np.hypot(p[..., 0], p[..., 1]), np.arctan2(p[..., 1], p[..., 0])
            seam = angle + lean * (np.sin(3.0 * r) + p[..., 2] ** 2)
            on.append((np.abs(theta - seam) < 1e-9).all(axis=1))
        sides.append(subset(outer, np.flatnonzero(np.concatenate(on))))
    return sides[0], sides[1]


@pytest.mark.parametrize("make", [lambda s: s, tetrahedra, lambda s: quadratic(tetrahedra(s))])
def test_a_linear_field_is_exact_over_two_meshes_of_a_flat_face(make) -> None:  # type: ignore[no-untyped-def]
    sector = two_meshes(0.0, make)
    mesh = sector.mesh()
    low, high = faces_about_the_axis(sector, 0.0)
    copy = Placement.turn([0, 0, 1], 30.0, [0, 0, 0])
    assert {f.vtk_type for f in low} != {f.vtk_type for f in high} or make(sector) is sector
    slope = np.random.default_rng(3).normal(size=(3, 2))
    for here, there, g in ((high, low, copy), (low, high, copy.inverse())):
        nodes = np.unique(np.concatenate([f.nodes.ravel() for f in here]))
        found = opposite(mesh.points[nodes], mesh, there, g, reach=1e-6)
        assert found.found.all()
        assert found.gap.max() < 1e-14
        np.testing.assert_allclose(found.weights.sum(axis=1), 1.0, atol=1e-13)
        values = mesh.points @ slope  # the copy carries the field with it
        exact = g.inverse().apply(mesh.points[nodes]) @ slope
        np.testing.assert_allclose(interpolate(found, values), exact, atol=1e-13)
        assert error_bound(mesh, there, found, values).max() < 1e-12


@pytest.mark.parametrize("make", [lambda s: s, tetrahedra])
def test_two_meshes_of_a_curved_face_touch(make) -> None:  # type: ignore[no-untyped-def]
    lean = 0.06
    sector = two_meshes(lean, make)
    mesh = sector.mesh()
    low, high = faces_about_the_axis(sector, lean)
    copy = Placement.turn([0, 0, 1], 30.0, [0, 0, 0])
    nodes = np.unique(np.concatenate([f.nodes.ravel() for f in high]))
    found = opposite(mesh.points[nodes], mesh, low, copy, reach=0.1)
    assert found.found.all()
    assert 1e-3 < found.gap.max() < 0.02  # arcs over chords
    # The coordinates themselves are a linear field: what is missed is the height of the arc.
    missed = np.linalg.norm(
        interpolate(found, mesh.points) - copy.inverse().apply(mesh.points[nodes]), axis=1
    )
    np.testing.assert_allclose(missed, found.gap, atol=1e-13)
    estimate = error_bound(mesh, low, found, mesh.points)
    assert (missed <= estimate).all()
    assert estimate.max() < 6.0 * missed.max()
    against = classify(mesh, outer_facets(mesh), copy, np.full(mesh.point_count, -1), 1e-6, 0.05)
    face = sum(areas(mesh, f).sum() for f in high)
    assert against.against_area == pytest.approx(face, rel=1e-12)
    assert against.apart_area == against.matched_area == 0.0
    assert sum(len(f) for f in against.facets_here) == sum(len(f) for f in high)
    np.testing.assert_array_equal(against.nodes_here, nodes)
    below = np.unique(np.concatenate([f.nodes.ravel() for f in low]))
    np.testing.assert_array_equal(against.nodes_there, below)
    assert against.largest_gap[0] == pytest.approx(found.gap.max(), rel=0.2)


# --- error estimate


@pytest.mark.parametrize("make", [lambda s: s, tetrahedra])
def test_the_estimate_covers_the_error_of_a_smooth_field(make) -> None:  # type: ignore[no-untyped-def]
    rng = np.random.default_rng(5)
    worst = []
    for n in (6, 12):
        mesh = make(box((1, n, n))).mesh()
        outer = outer_facets(mesh)
        x = np.column_stack([np.ones(400), rng.uniform(0, 1, (400, 2))])
        found = opposite(x, mesh, outer, Placement.identity(), 1e-9)

        def field(p: np.ndarray) -> np.ndarray:
            return np.sin(3 * p[:, 1:2]) * np.cos(2 * p[:, 2:])

        error = np.abs(interpolate(found, field(mesh.points)) - field(x))[:, 0]
        estimate = error_bound(mesh, outer, found, field(mesh.points))
        assert (error <= 1.2 * estimate).mean() > 0.99
        assert estimate.max() < 6.0 * error.max()
        worst.append(estimate.max())
    assert worst[0] / worst[1] == pytest.approx(4.0, rel=0.25)  # second order


def test_the_estimate_on_quadratic_facets_is_of_third_order() -> None:
    rng = np.random.default_rng(6)
    worst = []
    for n in (4, 8):
        mesh = quadratic(tetrahedra(box((1, n, n)))).mesh()
        outer = outer_facets(mesh)
        x = np.column_stack([np.ones(400), rng.uniform(0, 1, (400, 2))])
        found = opposite(x, mesh, outer, Placement.identity(), 1e-9)
        square = (mesh.points @ [0.0, 1.0, -2.0])[:, None] ** 2
        assert error_bound(mesh, outer, found, square).max() < 1e-9

        def field(p: np.ndarray) -> np.ndarray:
            return np.sin(3 * p[:, 1:2]) * np.cos(2 * p[:, 2:])

        error = np.abs(interpolate(found, field(mesh.points)) - field(x))[:, 0]
        estimate = error_bound(mesh, outer, found, field(mesh.points))
        assert (error <= 1.2 * estimate).mean() > 0.95
        assert estimate.max() < 10.0 * error.max()
        worst.append(estimate.max())
    assert worst[0] / worst[1] == pytest.approx(8.0, rel=0.25)


# --- surfaces that match, touch or gape


def unpaired(sector: Sector) -> np.ndarray:
    return np.full(len(sector.points), -1)


def high_x(sector: Sector) -> float:
    """Number of facets of a box at its largest x."""
    mesh = sector.mesh()
    return sum(int((normals(mesh, f)[:, 0] > 0.9).sum()) for f in outer_facets(mesh))


@pytest.mark.parametrize("make", [lambda s: s, tetrahedra, quadratic])
@pytest.mark.parametrize("gap", [0.3, -0.3])
def test_a_gap_of_three_tenths(make, gap: float) -> None:  # type: ignore[no-untyped-def]
    R, t = somewhere(8)
    sector = make(box((4, 5, 6), (40.0, 50.0, 60.0))).moved(R, t)
    step = Placement(np.eye(3), R @ np.array([40.0 + gap, 0.0, 0.0]))
    mesh = sector.mesh()
    against = classify(mesh, outer_facets(mesh), step, unpaired(sector), 1e-3, 1.0)
    assert against.apart_area == pytest.approx(50.0 * 60.0, rel=1e-9)
    assert against.against_area == against.matched_area == 0.0
    assert against.largest_gap[0] == pytest.approx(0.3, rel=1e-9)
    node = against.largest_gap[1]
    assert ((mesh.points[node] - t) @ R)[0] == pytest.approx(40.0)
    assert len(against.there.apart) == len(against.here.apart)
    near = classify(mesh, outer_facets(mesh), step, unpaired(sector), 0.31, 1.0)
    assert near.against_area == pytest.approx(50.0 * 60.0, rel=1e-9)
    far = classify(mesh, outer_facets(mesh), step, unpaired(sector), 1e-3, 0.29)
    assert far.apart_area == far.against_area == 0.0
    assert far.largest_gap == (0.0, -1)


def paired(sector: Sector, g: Placement) -> np.ndarray:
    """The node where the image of each node lies, by distance."""
    apart = np.linalg.norm(g.apply(sector.points)[:, None] - sector.points[None], axis=2)
    return np.where(apart.min(axis=1) < 1e-9, apart.argmin(axis=1), -1)


def test_faces_that_match() -> None:
    sector = box((2, 3, 4))
    g = shift(1.0)
    mesh = sector.mesh()
    against = classify(mesh, outer_facets(mesh), g, paired(sector, g), 1e-6, 0.1)
    assert against.matched_area == pytest.approx(1.0)
    assert against.against_area == against.apart_area == 0.0
    assert len(against.here.matched) == len(against.there.matched) == 12
    out = np.concatenate([normals(mesh, f) for f in outer_facets(mesh)])
    np.testing.assert_allclose(out[against.here.matched][:, 0], 1.0)
    np.testing.assert_allclose(out[against.there.matched][:, 0], -1.0)
    assert against.facets_here == against.facets_there == []
    assert len(against.nodes_here) == 0


def test_normals_are_turned_with_the_copy() -> None:
    # A quarter: the normals of both faces are square to each other before the turn.
    g = Placement.turn([0, 0, 1], 90.0, [0, 0, 0])
    sector = ring(4, (2, 3, 2))
    mesh = sector.mesh()
    matching = classify(mesh, outer_facets(mesh), g, paired(sector, g), 1e-6, 0.1)
    assert matching.matched_area == pytest.approx(0.8)
    assert len(matching.here.matched) == len(matching.there.matched) == 4
    unlike = classify(mesh, outer_facets(mesh), g, unpaired(sector), 1e-6, 0.1)
    assert unlike.against_area == pytest.approx(0.8)
    assert len(unlike.here.against) == len(unlike.there.against) == 4


def test_faces_of_which_a_part_matches() -> None:
    # Two bricks over each other: the lower one meets itself, the upper one another mesh.
    lower, left = box((2, 3, 2)), box((1, 3, 2), (0.5, 1, 1), (0, 0, 1))
    right = box((1, 5, 3), (0.5, 1, 1), (0.5, 0, 1))
    sector, g = lower.beside(left).beside(right), shift(1.0)
    mesh = sector.mesh()
    against = classify(mesh, outer_facets(mesh), g, paired(sector, g), 1e-6, 0.1)
    assert against.matched_area == pytest.approx(1.0)
    assert against.against_area == pytest.approx(1.0)
    assert against.apart_area == 0.0
    assert len(against.here.matched) == 6
    assert len(against.here.against) == 15
    assert len(against.there.against) == 6
    assert against.largest_gap[0] < 1e-12


def test_hanging_nodes_beside_matched_faces() -> None:
    # The right-hand face has one quadrilateral divided into four; the others match.
    sector = box((1, 2, 2), (1.0, 1.0, 1.0))
    whole = sector.mesh()
    ends = outer_facets(whole)[0]
    high = [r for r, n in zip(ends.nodes.tolist(), normals(whole, ends), strict=True) if n[0] > 0.9]
    a, b, c, d = (sector.points[n] for n in high[0])
    m = [(a + b) / 2, (b + c) / 2, (c + d) / 2, (d + a) / 2, (a + b + c + d) / 4]
    n = len(sector.points)
    cell = next(i for i, (_, nodes) in enumerate(sector.cells) if set(high[0]) <= set(nodes))
    rest = [k for k in sector.cells[cell][1] if k not in high[0]]
    base = np.array([sector.points[k] for k in rest])
    under = [rest[int(np.linalg.norm(base - (p - [1.0, 0, 0]), axis=1).argmin())]
             for p in (a, b, c, d)]  # fmt: skip
    p0, p1, p2, p3 = high[0]
    ab, bc, cd, da, mid = range(n, n + 5)
    # Pyramids from a point within fill the cell, with four of them on the divided face.
    quads = [(p0, ab, mid, da), (ab, p1, bc, mid), (mid, bc, p2, cd), (da, mid, cd, p3),
             tuple(under), *((p, q, v, u) for (p, q), (u, v) in zip(
                 ((p0, p1), (p1, p2), (p2, p3), (p3, p0)),
                 zip(under, under[1:] + under[:1], strict=True), strict=True))]  # fmt: skip
    inside = n + 5
    points = np.concatenate([sector.points, m, [(a + c) / 2 - [0.5, 0, 0]]])
    cells = [x for i, x in enumerate(sector.cells) if i != cell]
    divided = Sector(points, cells + [(14, [*q, inside]) for q in quads])
    g, mesh = shift(1.0), divided.mesh()
    against = classify(mesh, outer_facets(mesh), g, paired(divided, g), 1e-6, 0.1)
    assert len(against.here.matched) == 3
    assert len(against.here.against) == 4
    assert len(against.there.against) == 1
    assert against.matched_area + against.against_area == pytest.approx(1.0)
    assert set(range(n, n + 5)) <= set(against.nodes_here.tolist())
    found = opposite(mesh.points[[ab, mid]], mesh, against.facets_there, g, 0.1)
    np.testing.assert_allclose(np.sort(found.weights, axis=1), [[0, 0, 0.5, 0.5], [0.25] * 4],
                               atol=0.06)  # fmt: skip


def test_faces_that_merely_pass_near_do_not_count() -> None:
    # Plates side by side: tops and bottoms are within reach, but do not face each other.
    sector = box((4, 4, 1), (1.0, 1.0, 0.05))
    g, mesh = shift(0.0, 1.02), sector.mesh()
    against = classify(mesh, outer_facets(mesh), g, unpaired(sector), 1e-3, 0.2)
    assert against.apart_area == pytest.approx(0.05)
    assert len(against.here.apart) == len(against.there.apart) == 4
    assert against.largest_gap[0] == pytest.approx(0.02)


def test_the_same_side_of_coincident_faces_is_no_match() -> None:
    sector = box((1, 1, 1))
    mesh = sector.mesh()
    itself = Placement.identity()
    against = classify(mesh, outer_facets(mesh), itself, np.arange(8), 1e-6, 0.1)
    assert against.matched_area == against.against_area == against.apart_area == 0.0


@pytest.mark.parametrize("shell", [False, True])
def test_edges_of_plane_models_and_shells(shell: bool) -> None:
    angle = np.pi / 4
    parts = []
    for start, rows in ((0.0, 3), (angle / 2, 5)):
        r = np.linspace(1.0, 2.0, rows)
        theta = start + angle / 2 * np.linspace(0, 1, 4)
        number = np.arange(rows * 4).reshape(rows, 4)
        rr, tt = np.meshgrid(r, theta, indexing="ij")
        height = 0.7 * rr if shell else 0.0 * rr  # a cone
        points = np.stack([rr * np.cos(tt), rr * np.sin(tt), height], axis=2).reshape(-1, 3)
        cells = [(QUAD, number[[i, i + 1, i + 1, i], [j, j, j + 1, j + 1]].tolist())
                 for i in range(rows - 1) for j in range(3)]  # fmt: skip
        parts.append(Sector(points, cells))
    sector = parts[0].beside(parts[1])
    mesh, g = sector.mesh(), Placement.turn([0, 0, 1], 45.0, [0, 0, 0])
    against = classify(mesh, outer_facets(mesh), g, paired(sector, g), 1e-9, 0.1)
    length = np.hypot(1.0, 0.7) if shell else 1.0
    assert against.against_area == pytest.approx(length)
    assert against.matched_area == against.apart_area == 0.0
    assert (len(against.here.against), len(against.there.against)) == (4, 2)
    (there,) = against.facets_there
    assert there.vtk_type == LINE
    nodes = against.nodes_here
    found = opposite(mesh.points[nodes], mesh, [there], g, 1e-9)
    assert found.found.all()
    field = mesh.points @ np.array([[1.0], [-2.0], [0.5]])
    exact = g.inverse().apply(mesh.points[nodes]) @ np.array([[1.0], [-2.0], [0.5]])
    np.testing.assert_allclose(interpolate(found, field), exact, atol=1e-14)
    assert error_bound(mesh, [there], found, field).max() < 1e-13


def test_shells_at_different_heights_are_apart() -> None:
    # The edges meet in plan, but one shell lies 0.2 above the other.
    points = np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 0.0], [0, 1, 0]])
    sector = Sector(points, [(QUAD, [0, 1, 2, 3])])
    mesh = sector.mesh()
    against = classify(mesh, outer_facets(mesh), shift(1, 0, 0.2), unpaired(sector), 1e-6, 0.5)
    assert against.apart_area == pytest.approx(1.0)
    assert against.largest_gap[0] == pytest.approx(0.2)


def test_ends_of_lines_match_or_stand_apart() -> None:
    sector = Sector(np.array([[0.0, 0, 0], [1, 0, 0]]), [(LINE, [0, 1])])
    mesh = sector.mesh()
    joined = classify(mesh, outer_facets(mesh), shift(1.0), np.array([1, -1]), 1e-6, 0.1)
    assert (joined.matched_area, joined.here.matched.tolist()) == (1.0, [1])
    assert joined.there.matched.tolist() == [0]
    apart = classify(mesh, outer_facets(mesh), shift(1, 0.03), unpaired(sector), 1e-6, 0.1)
    assert apart.apart_area == 1.0
    assert apart.largest_gap == (pytest.approx(0.03), 1)


def test_tetrahedra_against_hexahedra_on_one_face() -> None:
    left = box((1, 2, 2), (0.5, 1, 1))
    right = tetrahedra(box((1, 2, 2), (0.5, 1, 1), (0.5, 0, 0)))
    sector, g = left.beside(right), shift(1.0)
    mesh = sector.mesh()
    assert {t for t, _ in sector.cells} == {12, TETRA}
    against = classify(mesh, outer_facets(mesh), g, paired(sector, g), 1e-6, 0.1)
    # All nodes pair, but no triangle has the corners of a quadrilateral.
    assert against.matched_area == 0.0
    assert against.against_area == pytest.approx(1.0)
    assert (len(against.here.against), len(against.there.against)) == (8, 4)
