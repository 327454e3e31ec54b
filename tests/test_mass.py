"""Shape functions against VTK's, quadrature against exact integrals, and mass carried around."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from math import factorial
from typing import Any

import numpy as np
import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st
from meshes import Sector, box, case_of, placed, quadratic, ring, somewhere, tetrahedra
from scipy.spatial.transform import Rotation
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonDataModel import vtkGenericCell
from vtkmodules.vtkFiltersVerdict import vtkCellSizeFilter

from expander.audit.mass import area_vectors, integrated, nodal, of_whole, properties
from expander.audit.quadrature import CORNERS, gauss, reference_nodes, rule, shape_functions
from expander.body import prepare
from expander.bodymesh import mirrored_connectivity
from expander.cells import CELL_TYPES
from expander.errors import InputError
from expander.model import Mesh
from expander.placements import Placement

FLAT_OR_SOLID = [t for t, c in CELL_TYPES.items() if c.dimension >= 2]
NODAL = [t for t, c in CELL_TYPES.items() if c.shape.name in CORNERS]
PRISMS = {15: 5, 16: 6}
# VTK's thirteen-node pyramid does not fit the faces of quadratic tetrahedra; see the next test.
OWN_TERMS = 27


def vtk_cell(vtk_id: int) -> vtkGenericCell:
    cell = vtkGenericCell()
    cell.SetCellType(vtk_id)
    return cell


def vtk_weights(cell, count: int, pcoords: np.ndarray) -> np.ndarray:
    """VTK's shape functions at its own parametric coordinates, (q, nodes)."""
    out = np.empty((len(pcoords), count))
    w = [0.0] * count
    for row, p in zip(out, pcoords, strict=True):
        cell.InterpolateFunctions(p, w)
        row[:] = w
    return out


@pytest.mark.parametrize("vtk_id", [t for t in NODAL if t != OWN_TERMS])
def test_shape_functions_are_those_of_vtk(vtk_id):
    cell = CELL_TYPES[vtk_id]
    pcoords = np.random.default_rng(1).uniform(0.05, 0.45, size=(40, 3))
    if cell.shape.name == "pyramid" and vtk_id == 37:  # its base lies at a height of one half
        pcoords = pcoords * [1.0, 1.0, 0.5] + [0.25, 0.25, 0.5]
    W = vtk_weights(vtk_cell(vtk_id), len(cell.nodes), pcoords)
    x = W @ reference_nodes(cell)  # where VTK's point lies on our reference cell
    assert np.abs(shape_functions(cell, x)[0] - W).max() < 5e-14
    assert np.ptp(x, axis=0).min() > 0.1


@pytest.mark.parametrize("vtk_id", [t for t in NODAL if CELL_TYPES[t].dimension == 3])
def test_faces_are_cells_of_vtk(vtk_id):
    """Cells that share the nodes of a face share the face: no gap, no overlap."""
    cell, solid = CELL_TYPES[vtk_id], vtk_cell(vtk_id)
    for i in range(len(cell.nodes)):
        solid.GetPointIds().SetId(i, i)
    pcoords = np.random.default_rng(2).uniform(0.05, 0.45, size=(20, 3))
    for k in range(solid.GetNumberOfFaces()):
        face = solid.GetFace(k)
        ids = [face.GetPointId(i) for i in range(face.GetNumberOfPoints())]
        W = np.zeros((len(pcoords), len(cell.nodes)))
        W[:, ids] = vtk_weights(face, len(ids), pcoords * [1.0, 1.0, 0.0])
        x = W @ reference_nodes(cell)
        assert np.abs(shape_functions(cell, x)[0] - W).max() < 5e-14


@pytest.mark.parametrize("vtk_id", NODAL)
def test_slopes_are_derivatives(vtk_id):
    cell = CELL_TYPES[vtk_id]
    x = gauss(cell.shape.name, 2)[0] if cell.dimension else np.zeros((1, 0))
    slopes = shape_functions(cell, x)[1]
    h = 1e-5
    for d in range(cell.dimension):
        step = h * np.eye(cell.dimension)[d]
        central = (shape_functions(cell, x + step)[0] - shape_functions(cell, x - step)[0]) / 2 / h
        assert np.abs(slopes[:, :, d] - central).max() < 1e-8


@pytest.mark.parametrize("vtk_id", PRISMS)
def test_prisms_over_polygons_have_the_volume_that_vtk_finds(vtk_id):
    cell = vtk_cell(vtk_id)
    count = 2 * PRISMS[vtk_id]
    nodes = np.array([cell.GetParametricCoords()[k] for k in range(3 * count)]).reshape(-1, 3)
    bent = nodes.copy()
    bent[:, :2] *= 1.0 + 0.4 * nodes[:, 2:]  # a frustum
    R, t = somewhere()
    for x in (nodes, bent @ (R * [1.0, 2.0, 0.7]).T + t):
        sector = Sector(x, [(vtk_id, list(range(count)))])
        sizes = vtkCellSizeFilter()
        sizes.SetInputData(sector.grid())
        sizes.Update()
        volume = vtk_to_numpy(sizes.GetOutput().GetCellData().GetArray("Volume"))[0]
        found = properties(sector.mesh())
        assert abs(found.volume - volume) < 1e-6 * volume  # VTK's corners have six digits
        assert not len(found.inverted)
    # linear fields are kept whatever the shape
    values = rule(vtk_id, count).values
    assert np.abs(values.sum(axis=1) - 1.0).max() < 1e-14


# --- quadrature ---------------------------------------------------------------------------------


@given(st.integers(0, 4), st.integers(0, 4), st.integers(0, 4))
def test_rules_are_exact_on_simplices(a, b, c):
    """Integrals of monomials over the simplex: a! b! c! / (a + b + c + d)! (standard)."""
    n = (a + b + c) // 2 + 1
    x, w = gauss("tetrahedron", n)
    exact = factorial(a) * factorial(b) * factorial(c) / factorial(a + b + c + 3)
    assert abs(w @ (x[:, 0] ** a * x[:, 1] ** b * x[:, 2] ** c) - exact) < 1e-15
    x, w = gauss("triangle", n)
    exact = factorial(a) * factorial(b) / factorial(a + b + 2)
    assert abs(w @ (x[:, 0] ** a * x[:, 1] ** b) - exact) < 1e-15


def second_moments(mesh: Mesh) -> np.ndarray:
    """(10,) volume, first and second moments about the origin from the properties."""
    p = properties(mesh)
    second = np.trace(p.inertia) / 2.0 * np.eye(3) - p.inertia
    second += p.mass * np.outer(p.centre, p.centre)
    return np.array([p.volume, *(p.mass * p.centre), *second[np.triu_indices(3)]])


@pytest.mark.parametrize("vtk_id", [10, 12, 13, 14])
def test_moments_of_skew_cells_are_exact(vtk_id):
    """Against sympy's integrals in rational numbers, of cells with warped faces."""
    cell = CELL_TYPES[vtk_id]
    rng = np.random.default_rng(4)
    corners = np.rint(
        10 * CORNERS[cell.shape.name] + rng.integers(-2, 3, size=(len(cell.nodes), 3))
    )
    r, s, t = sympy.symbols("r s t")
    limits = {
        12: [(r, -1, 1), (s, -1, 1), (t, -1, 1)],
        13: [(r, 0, 1 - s), (s, 0, 1), (t, -1, 1)],
        10: [(r, 0, 1 - s - t), (s, 0, 1 - t), (t, 0, 1)],
        14: [(r, -1, 1), (s, -1, 1), (t, 0, 1)],
    }[vtk_id]
    square = [(1 - r) * (1 - s) / 4, (1 + r) * (1 - s) / 4, (1 + r) * (1 + s) / 4,
              (1 - r) * (1 + s) / 4]  # fmt: skip
    ends = ((1 - t) / 2, (1 + t) / 2)
    shape = {
        12: [f * e for e in ends for f in square],
        13: [f * e for e in ends for f in (1 - r - s, r, s)],
        10: [1 - r - s - t, r, s, t],
        14: [*(f * (1 - t) for f in square), t],  # collapsed coordinates
    }[vtk_id]
    x = [sum(int(c) * f for c, f in zip(corners[:, i], shape, strict=True)) for i in range(3)]
    det = sympy.Matrix(x).jacobian([r, s, t]).det()
    wanted = [1, *x, *(x[i] * x[j] for i, j in zip(*np.triu_indices(3), strict=True))]
    exact = [float(sympy.integrate(sympy.expand(f * det), *limits)) for f in wanted]
    mesh = Sector(corners, [(vtk_id, list(range(len(corners))))]).mesh()
    assert np.abs(second_moments(mesh) - exact).max() < 1e-13 * np.abs(exact).max()


def curved(vtk_id: int, flat: bool = False, seed: int = 3) -> Mesh:
    """One cell of this type with every node a little off, in its plane if `flat`."""
    x = np.zeros((len(CELL_TYPES[vtk_id].nodes), 3))
    if vtk_id in PRISMS:
        cell = vtk_cell(vtk_id)
        x += np.array([cell.GetParametricCoords()[k] for k in range(x.size)]).reshape(-1, 3)
    else:
        reference = reference_nodes(CELL_TYPES[vtk_id])
        x[:, : reference.shape[1]] = reference
    off = np.random.default_rng(seed).uniform(-0.06, 0.06, size=x.shape)
    off[:, 2] *= not flat
    return Sector(x + off, [(vtk_id, list(range(len(x))))]).mesh()


@pytest.mark.parametrize("vtk_id", [t for t in FLAT_OR_SOLID if t in NODAL])
def test_more_points_change_nothing(vtk_id, monkeypatch):
    """Curved solids and curved cells in a plane are integrated exactly."""
    from expander.audit import quadrature

    mesh = curved(vtk_id, flat=CELL_TYPES[vtk_id].dimension == 2)
    found = properties(mesh)
    more = quadrature._points_each_way(CELL_TYPES[vtk_id]) + 3
    x, w = gauss(CELL_TYPES[vtk_id].shape.name, more)
    monkeypatch.setattr(
        "expander.audit.mass.rule",
        lambda t, size: quadrature.Rule(w, *shape_functions(CELL_TYPES[t], x)),
    )
    better = properties(mesh)
    assert abs(found.mass - better.mass) < 1e-14 * better.mass
    assert np.abs(found.centre - better.centre).max() < 1e-14
    assert np.abs(found.inertia - better.inertia).max() < 3e-14 * np.abs(better.inertia).max()


@pytest.mark.parametrize("vtk_id", FLAT_OR_SOLID)
def test_a_mirrored_cell_is_the_mirror_image(vtk_id):
    mesh = curved(vtk_id)
    g = Placement.mirror([0.3, -1.0, 0.4], [0.2, 0.1, 0.9])
    image = replace(mesh, points=g.apply(mesh.points), connectivity=mirrored_connectivity(mesh))
    expected, found = of_whole(properties(mesh), [g]), properties(image)
    assert abs(found.mass - expected.mass) < 1e-14 * expected.mass
    assert np.abs(found.centre - expected.centre).max() < 1e-14
    assert np.abs(found.inertia - expected.inertia).max() < 1e-14 * np.abs(found.inertia).max()
    assert not len(found.inverted)
    if CELL_TYPES[vtk_id].dimension == 3:  # left in its old order it is inside out
        wrong = properties(replace(mesh, points=g.apply(mesh.points)))
        assert wrong.inverted.tolist() == [0]
        assert wrong.volume < 0.0


# --- polygons, shells, lines --------------------------------------------------------------------

L_SHAPE = np.array([[0, 0, 0], [3, 0, 0], [3, 1, 0], [1, 1, 0], [1, 3, 0], [0, 3, 0]], dtype=float)


def test_polygons_that_are_not_convex():
    """An L of a 3 x 1 and a 1 x 2 rectangle: area 5, centre by hand."""
    p = properties(Sector(L_SHAPE, [(7, [0, 1, 2, 3, 4, 5])]).mesh(), 2.0, 0.5)
    assert abs(p.area - 5.0) < 1e-14
    assert abs(p.mass - 5.0) < 1e-14
    centre = (3 * np.array([1.5, 0.5]) + 2 * np.array([0.5, 2.0])) / 5
    assert np.abs(p.centre - [*centre, 0.0]).max() < 1e-14
    # rectangles about their own centres, and their distances (parallel axes)
    by_y = 1 * 27 / 12 + 3 * (1.5 - centre[0]) ** 2 + 2 * 1 / 12 + 2 * (0.5 - centre[0]) ** 2
    assert abs(p.inertia[1, 1] - by_y) < 1e-13


def test_quadratic_polygons_pass_through_their_mid_side_nodes():
    """A hexagon's corners, every second of them a mid-side node."""
    angles = np.arange(6) * np.pi / 3
    x = np.stack([np.cos(angles), np.sin(angles), 0 * angles], axis=1)
    order = [0, 2, 4, 1, 3, 5]
    p = properties(Sector(x[order], [(36, [0, 1, 2, 3, 4, 5])]).mesh())
    assert abs(p.area - 1.5 * np.sqrt(3.0)) < 1e-14


def test_lines_count_only_on_their_own():
    x = np.array([[0, 0, 0], [2, 0, 0], [2, 2, 0], [0, 2, 0]], dtype=float)
    line = Sector(x, [(3, [0, 1]), (1, [2])])
    p = properties(line.mesh(), 3.0)
    assert (p.length, p.mass, p.centre.tolist()) == (2.0, 6.0, [1.0, 0.0, 0.0])
    assert np.abs(p.inertia.diagonal() - [0.0, 2.0, 2.0]).max() < 1e-14  # m L^2 / 12
    both = properties(line.plus([(9, [0, 1, 2, 3])]).mesh(), 3.0, 0.5)
    assert abs(both.length - 2.0) < 1e-14
    assert abs(both.mass - 6.0) < 1e-14
    assert np.abs(both.centre - [1.0, 1.0, 0.0]).max() < 1e-14


def test_a_half_circle_of_quadratic_lines():
    """Length of a parabola through three points, to the fourth power of its angle."""
    errors = []
    for n in (4, 8):
        a = np.linspace(0.0, np.pi, 2 * n + 1)
        x = np.stack([np.cos(a), np.sin(a), 0 * a], axis=1)
        cells = [(21, [2 * k, 2 * k + 2, 2 * k + 1]) for k in range(n)]
        errors.append(abs(properties(Sector(x, cells).mesh()).length - np.pi))
    assert errors[1] < 1e-4
    assert errors[0] / errors[1] > 12.0


def test_no_mass_has_no_centre():
    p = properties(Sector(np.ones((1, 3)), [(1, [0])]).mesh())
    assert p.mass == 0.0
    assert np.isnan(p.centre).all()
    assert not p.inertia.any()


def test_area_vectors():
    R, _ = somewhere()
    sector = Sector(L_SHAPE @ R.T, [(7, [0, 1, 2, 3, 4, 5]), (5, [1, 0, 2]), (3, [0, 1])])
    found = area_vectors(sector.mesh())
    assert np.abs(found - np.outer([5.0, -1.5, 0.0], R[:, 2])).max() < 1e-14


# --- many cells ---------------------------------------------------------------------------------


def test_more_cells_than_one_block_far_from_the_origin():
    far = np.array([1e5, -2e5, 3e4])
    mesh = box((11, 12, 13), size=(2.0, 3.0, 5.0), corner=far).mesh()
    p = properties(mesh, 4.0)
    assert abs(p.mass - 120.0) < 1e-9
    assert np.abs(p.centre - far - [1.0, 1.5, 2.5]).max() < 1e-9
    assert np.abs(p.inertia - np.diag([340.0, 290.0, 130.0])).max() < 1e-7  # m (b^2 + c^2) / 12


def test_density_of_each_cell():
    sector = box((9, 9, 9))
    mesh = sector.mesh()
    rho = np.random.default_rng(1).uniform(1, 5, mesh.cell_count)
    singles = [properties(Sector(sector.points, [c]).mesh(), r) for c, r in
               zip(sector.cells, rho, strict=True)]  # fmt: skip
    p = properties(mesh, rho)
    assert abs(p.mass - sum(s.mass for s in singles)) < 1e-12 * p.mass
    centre = sum(s.mass * s.centre for s in singles) / p.mass
    assert np.abs(p.centre - centre).max() < 1e-13


@pytest.mark.parametrize("word", ["density", "thickness"])
def test_wrong_lengths_are_refused(word):
    with pytest.raises(InputError, match=rf"{word} has shape \(3,\), but the mesh has 8 cells"):
        properties(box((2, 2, 2)).mesh(), **{word: np.ones(3)})


def test_nodal_masses_have_to_fit():
    with pytest.raises(InputError, match="do not fit points"):
        nodal(np.zeros((4, 3)), np.zeros(3))


def test_inverted_cells_are_listed_with_their_numbers():
    sector = box((10, 10, 10))
    cells = [(t, n[4:] + n[:4]) if k in (3, 997) else (t, n) for k, (t, n) in
             enumerate(sector.cells)]  # fmt: skip
    p = properties(Sector(sector.points, cells).mesh())
    assert p.inverted.tolist() == [3, 997]


def test_a_cell_that_is_inside_out_in_one_corner():
    sector = box((1, 1, 1))
    points = sector.points.copy()
    points[7] = (0.3, 0.3, 0.3)  # the far corner, beyond the plane of its neighbours
    p = properties(Sector(points, sector.cells).mesh())
    assert p.inverted.tolist() == [0]
    assert p.volume > 0.0


# --- carried around -----------------------------------------------------------------------------

vectors = st.tuples(*[st.floats(-5, 5)] * 3).map(np.array)


@given(st.integers(0, 2**31), st.lists(st.tuples(vectors, st.booleans()), min_size=1, max_size=5))
def test_carried_masses_are_those_of_the_images(seed, isometries):
    rng = np.random.default_rng(seed)
    x, m = rng.uniform(-3, 3, size=(7, 3)), rng.uniform(0.1, 2.0, size=7)
    placements = [
        Placement(Rotation.random(rng=rng).as_matrix() * (-1 if odd else 1), t)
        for t, odd in isometries
    ]
    found = of_whole(nodal(x, m), placements)
    images = np.concatenate([g.apply(x) for g in placements])
    whole = nodal(images, np.tile(m, len(placements)))
    scale = m.sum() * len(placements) * 100.0
    assert abs(found.mass - whole.mass) < 1e-14 * scale
    assert np.abs(found.centre - whole.centre).max() < 1e-13
    assert np.abs(found.inertia - whole.inertia).max() < 1e-14 * scale
    # and against the definition, point by point
    r = images - whole.centre
    direct = sum(
        mi * (ri @ ri * np.eye(3) - np.outer(ri, ri))
        for mi, ri in zip(np.tile(m, len(placements)), r, strict=True)
    )
    assert np.abs(whole.inertia - direct).max() < 1e-14 * scale


MIRRORS = [{"normal": "x"}, {"normal": "y"}, {"normal": "z"}]
BLOCK = box((2, 2, 3), size=(1.0, 1.4, 0.6))
TETRAHEDRA = tetrahedra(box((2, 2, 2)))


def on_lower_face(sector: Sector) -> list[tuple[int, list[int]]]:
    """Quadrilaterals on the lower faces of the hexahedra that stand on z = 0."""
    return [(9, n[:4]) for t, n in sector.cells if np.abs(sector.points[n[:4], 2]).max() == 0.0]


CASES: dict[str, tuple[Sector, dict[str, Any]]] = {
    "half": (BLOCK, {"mirror": MIRRORS[:1]}),
    "quarter": (BLOCK, {"mirror": MIRRORS[:2]}),
    "eighth": (BLOCK, {"mirror": MIRRORS}),
    "ring": (ring(5, lean=0.3), {"cyclic": {"sectors": 5}}),
    "pie": (ring(6, inner=0.0), {"cyclic": {"sectors": 6}}),
    "half sectors, doubled": (ring(5, part=0.5), {
        "mirror": [{"normal": "y"}, {"normal": "z"}], "cyclic": {"sectors": 5}}),
    "quadratic": (quadratic(ring(5, lean=0.2)), {"cyclic": {"sectors": 5}}),
    "quadratic quarter": (quadratic(BLOCK), {"mirror": MIRRORS[:2]}),
    "quadratic tetrahedra": (quadratic(TETRAHEDRA), {"mirror": MIRRORS}),
    "tetrahedra": (TETRAHEDRA, {"mirror": MIRRORS[:2]}),
    "single precision": (BLOCK.as_type(np.float32), {"mirror": MIRRORS}),
    "shell in a cut plane": (BLOCK.plus(on_lower_face(BLOCK)), {"mirror": MIRRORS}),
    "shell first": (Sector(BLOCK.points, on_lower_face(BLOCK) + BLOCK.cells), {"mirror": MIRRORS}),
    "some copies": (BLOCK.plus(on_lower_face(BLOCK)), {
        "mirror": MIRRORS, "output": {"copies": [0, 3, 4]}}),
    "not merged": (BLOCK.plus(on_lower_face(BLOCK)), {
        "mirror": MIRRORS, "output": {"merge": False}}),
}  # fmt: skip


@pytest.mark.parametrize("skew", [False, True])
@pytest.mark.parametrize("name", CASES)
def test_carried_is_what_is_found_on_the_copies(tmp_path, name, skew):
    sector, tables = CASES[name]
    single = sector.points.dtype == np.float32
    if skew:
        R, t = somewhere()
        dtype = sector.points.dtype
        sector, tables = sector.moved(R, t).as_type(dtype), placed(tables, R, t)
    body = whole_body(tmp_path, sector, tables)
    rng = np.random.default_rng(3)
    count = body.mesh.cell_count
    rho, thick = rng.uniform(1, 3, count), rng.uniform(0.05, 0.2, count)
    carried = of_whole(
        properties(body.mesh, rho, thick), [body.group.placements[g] for g in body.copies]
    )
    found = integrated(body, rho, thick)
    tolerance = 5e-7 * 20 if single else 1e-12  # 20 is the farthest coordinate
    if not skew and single:
        tolerance = 1e-12  # mirrored coordinates lose nothing
    for a, b in (
        (found.mass, carried.mass), (found.volume, carried.volume), (found.area, carried.area)
    ):  # fmt: skip
        assert abs(a - b) <= tolerance * abs(b)
    assert np.abs(found.centre - carried.centre).max() < tolerance * body.mesh.size
    assert np.abs(found.inertia - carried.inertia).max() < tolerance * carried.inertia.max()
    assert not len(found.inverted)
    if "shell" in name:
        assert len(body.cells.items) == 4
        assert found.area == pytest.approx(8 * 1.4, rel=1e-12)


def whole_body(folder, sector: Sector, tables: Mapping[str, Any]):
    return prepare(case_of(folder, sector, tables))


def test_cells_that_are_inside_out_on_a_copy_show(tmp_path, monkeypatch):
    body = whole_body(tmp_path, BLOCK, {"mirror": MIRRORS[:1]})
    monkeypatch.setattr("expander.bodymesh.mirrored_connectivity", lambda m: m.connectivity)
    found = integrated(body)
    n = body.mesh.cell_count
    assert found.inverted.tolist() == list(range(n, 2 * n))
    assert abs(found.volume) < 1e-12
