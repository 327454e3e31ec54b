"""Cells: node orders, mirrored cells, and the volume of the whole body.

Oracles: VTK's own cells (number of nodes, parametric coordinates, shape functions and their
derivatives), vtkReflectionFilter, vtkAxisAlignedReflectionFilter and vtkCellSizeFilter.
"""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path

import numpy as np
import pytest
import pyvista
from meshes import Sector, box, case_of, placed, ring, somewhere
from scipy.spatial.transform import Rotation
from vtkmodules.vtkCommonDataModel import vtkGenericCell, vtkPlane
from vtkmodules.vtkFiltersGeneral import vtkAxisAlignedReflectionFilter, vtkReflectionFilter
from vtkmodules.vtkFiltersVerdict import vtkCellSizeFilter

from expander import expand
from expander.bodymesh import mirrored_polygon
from expander.cells import (
    CELL_TYPES,
    POLYGON,
    POLYGONS,
    QUADRATIC_POLYGON,
    cell_name,
    dimensions,
    require_known,
)
from expander.errors import NotYetError

# The linear cell with the same corners: its shape functions place the nodes of a straight cell.
STRAIGHT = {
    1: 1, 3: 3, 5: 5, 9: 9, 10: 10, 12: 12, 13: 13, 14: 14, 15: 15, 16: 16, 21: 3, 22: 5, 23: 9,
    24: 10, 25: 12, 26: 13, 27: 14, 28: 9, 29: 12, 30: 9, 31: 13, 32: 13, 33: 12, 34: 5,
}  # fmt: skip
# VTK parametrises these pyramids as a hexahedron whose top face is one point.
TOP_IS_A_POINT = (14, 27)
SINGLE_PRECISION = {15: 1e-5}  # VTK's own coefficients of the pentagonal prism have six digits

TYPES = [pytest.param(t, id=c.name) for t, c in CELL_TYPES.items()]
SOLIDS = [pytest.param(t, id=c.name) for t, c in CELL_TYPES.items() if c.dimension == 3]
FACES = [pytest.param(t, id=c.name) for t, c in CELL_TYPES.items() if c.dimension == 2]


def vtk_cell(vtk_id: int):
    return vtkGenericCell.InstantiateCell(vtk_id)


def parametric(vtk_id: int) -> np.ndarray:
    return np.array(vtk_cell(vtk_id).GetParametricCoords()).reshape(-1, 3)


def shape_functions(vtk_id: int, places: np.ndarray) -> np.ndarray:
    """(points, nodes), by VTK."""
    cell = vtk_cell(vtk_id)
    out = []
    for place in places:
        weights = [0.0] * cell.GetNumberOfPoints()
        cell.InterpolateFunctions(list(place), weights)
        out.append(weights)
    return np.array(out)


def derivatives(vtk_id: int, places: np.ndarray) -> np.ndarray:
    """(points, dimension, nodes), by VTK."""
    cell = vtk_cell(vtk_id)
    shape = (cell.GetCellDimension(), cell.GetNumberOfPoints())
    out = []
    for place in places:
        flat = [0.0] * (shape[0] * shape[1])
        cell.InterpolateDerivs(list(place), flat)
        out.append(np.array(flat).reshape(shape))
    return np.array(out)


def straight_cell(vtk_id: int) -> np.ndarray:
    """Node positions of an undistorted cell, (nodes, 3)."""
    at = parametric(vtk_id)
    if vtk_id not in STRAIGHT:
        return at
    corners = parametric(STRAIGHT[vtk_id])
    if vtk_id in TOP_IS_A_POINT:
        corners[4] = [0.5, 0.5, 1.0]
    return shape_functions(STRAIGHT[vtk_id], at) @ corners


def distorted_cell(vtk_id: int, seed: int = 3) -> np.ndarray:
    """Every node moved a little, the whole sheared and turned: volume still positive."""
    rng = np.random.default_rng([seed, vtk_id])
    x = straight_cell(vtk_id)
    x = x + 0.04 * rng.uniform(-1, 1, size=x.shape)
    shear = np.eye(3) + 0.3 * rng.uniform(-1, 1, size=(3, 3))
    return x @ shear.T @ Rotation.random(rng=rng).as_matrix().T + [3.0, 0.0, 1.0]


def interior(vtk_id: int, count: int = 20) -> np.ndarray:
    """Parametric coordinates of random points inside."""
    rng = np.random.default_rng(vtk_id)
    corners = parametric(STRAIGHT.get(vtk_id, vtk_id))[: len(CELL_TYPES[vtk_id].shape.mirrored)]
    if vtk_id in TOP_IS_A_POINT:
        corners[4] = [0.5, 0.5, 1.0]
    weights = rng.dirichlet(np.ones(len(corners)), size=count)
    return 0.9 * weights @ corners + 0.1 * corners.mean(axis=0)


def some_mirror(seed: int = 11) -> np.ndarray:
    n = Rotation.random(rng=np.random.default_rng(seed)).as_matrix()[0]
    return np.eye(3) - 2.0 * np.outer(n, n)


def reference_map(vtk_id: int) -> tuple[np.ndarray, np.ndarray]:
    """The affine map s of the reference cell with s(corner i) = corner mirrored[i].

    That it exists says that the order is a symmetry of the cell and no scrambled order.
    """
    corners = len(CELL_TYPES[vtk_id].shape.mirrored)
    p = parametric(vtk_id)[:corners]
    if vtk_id in TOP_IS_A_POINT:
        p[4] = [0.5, 0.5, 1.0]
    image = p[list(CELL_TYPES[vtk_id].mirrored[:corners])]
    padded = np.hstack([p, np.ones((corners, 1))])
    M = np.linalg.lstsq(padded, image, rcond=None)[0]
    np.testing.assert_allclose(padded @ M, image, atol=1e-6)
    return M[:3].T, M[3]


# --- one cell -----------------------------------------------------------------------------------


@pytest.mark.parametrize("vtk_id", TYPES)
def test_nodes_are_where_vtk_has_them(vtk_id: int) -> None:
    """Number of nodes, dimension, edges, and each node at the mean of the corners named for it."""
    ours, theirs = CELL_TYPES[vtk_id], vtk_cell(vtk_id)
    assert theirs.GetCellType() == vtk_id
    assert len(ours.nodes) == theirs.GetNumberOfPoints()
    assert ours.dimension == theirs.GetCellDimension()
    x = straight_cell(vtk_id)
    means = np.array([x[list(corners)].mean(axis=0) for corners in ours.nodes])
    # VTK puts the middle of the triquadratic pyramid a little higher than the corners' mean.
    far = np.linalg.norm(means[:, None] - x[None], axis=2)
    assert (far.argmin(axis=1) == np.arange(len(x))).all()
    assert np.diag(far).max() < (0.03 if vtk_id == 37 else 1e-12)
    for k in range(len(ours.shape.mirrored)):
        assert ours.nodes[k] == (k,)


@pytest.mark.parametrize("vtk_id", SOLIDS + FACES)
def test_edges_and_faces_are_those_of_vtk(vtk_id: int) -> None:
    shape, cell = CELL_TYPES[vtk_id].shape, vtk_cell(vtk_id)
    for k in range(cell.GetNumberOfPoints()):
        cell.GetPointIds().SetId(k, k)
    corners = len(shape.mirrored)

    def corner_sets(count: int, get) -> set[frozenset[int]]:
        found = set()
        for k in range(count):
            part = get(k).GetPointIds()  # VTK hands out one object again and again
            found.add(frozenset(part.GetId(i) for i in range(part.GetNumberOfIds())))
        return {frozenset(i for i in part if i < corners) for part in found}

    assert {frozenset(e) for e in shape.edges} == corner_sets(cell.GetNumberOfEdges(), cell.GetEdge)
    assert {frozenset(f) for f in shape.faces} == corner_sets(cell.GetNumberOfFaces(), cell.GetFace)
    for face in shape.faces:  # cycles: neighbours are joined by an edge
        around = [*face, face[0]]
        assert all(frozenset(pair) in map(frozenset, shape.edges) for pair in pairwise(around))


@pytest.mark.parametrize("vtk_id", TYPES)
def test_mirrored_order_is_an_involution(vtk_id: int) -> None:
    order = np.array(CELL_TYPES[vtk_id].mirrored)
    assert sorted(order) == list(range(len(order)))
    np.testing.assert_array_equal(order[order], np.arange(len(order)))
    changed = (order != np.arange(len(order))).any()
    assert changed == (CELL_TYPES[vtk_id].dimension >= 2), "lines keep their direction"


@pytest.mark.parametrize("vtk_id", TYPES)
def test_mirrored_cell_is_the_mirrored_geometry(vtk_id: int) -> None:
    """VTK's shape functions at 20 interior points: the image cell at xi is Q x(s xi)."""
    x, Q = distorted_cell(vtk_id), some_mirror()
    image = (x @ Q.T)[list(CELL_TYPES[vtk_id].mirrored)]
    xi = interior(vtk_id)
    M, m = reference_map(vtk_id) if CELL_TYPES[vtk_id].dimension > 1 else (np.eye(3), 0.0)
    there = shape_functions(vtk_id, xi) @ image
    here = shape_functions(vtk_id, xi @ M.T + m) @ x
    np.testing.assert_allclose(there, here @ Q.T, atol=SINGLE_PRECISION.get(vtk_id, 1e-12))


@pytest.mark.parametrize("vtk_id", SOLIDS)
def test_mirrored_solid_has_positive_jacobian(vtk_id: int) -> None:
    x, Q = distorted_cell(vtk_id), some_mirror()
    image = (x @ Q.T)[list(CELL_TYPES[vtk_id].mirrored)]
    xi = interior(vtk_id)
    M, m = reference_map(vtk_id)
    before = np.linalg.det(derivatives(vtk_id, xi @ M.T + m) @ x)
    after = np.linalg.det(derivatives(vtk_id, xi) @ image)
    assert before.min() > 0.0
    assert after.min() > 0.0
    np.testing.assert_allclose(after, before, atol=SINGLE_PRECISION.get(vtk_id, 1e-12))
    unchanged_order = np.linalg.det(derivatives(vtk_id, xi) @ x @ Q.T)
    assert unchanged_order.max() < 0.0, "a mirror without a new order turns it inside out"


@pytest.mark.parametrize("vtk_id", FACES)
def test_normal_of_the_mirrored_face_is_the_mirrored_normal(vtk_id: int) -> None:
    x, Q = distorted_cell(vtk_id), some_mirror()
    image = (x @ Q.T)[list(CELL_TYPES[vtk_id].mirrored)]
    xi = interior(vtk_id)
    M, m = reference_map(vtk_id)

    def normals(places, nodes):
        along = derivatives(vtk_id, places) @ nodes
        return np.cross(along[:, 0], along[:, 1])

    before, after = normals(xi @ M.T + m, x), normals(xi, image)
    assert np.linalg.norm(before, axis=1).min() > 0.1
    np.testing.assert_allclose(after, before @ Q.T, atol=1e-12)


@pytest.mark.parametrize("sides", [3, 4, 5, 8, 11])
def test_polygons(sides: int) -> None:
    """A polygon and its image have the same sides, and the normal goes along (Newell's formula)."""
    order = mirrored_polygon(POLYGON, sides)
    np.testing.assert_array_equal(order[order], np.arange(sides))
    angle = 2 * np.pi * np.arange(sides) / sides
    x = np.stack([np.cos(angle), 1.5 * np.sin(angle), 0.2 * np.cos(2 * angle)], axis=1)
    Q = some_mirror()
    image = (x @ Q.T)[order]

    def newell(nodes):
        return 0.5 * np.cross(nodes, np.roll(nodes, -1, axis=0)).sum(axis=0)

    np.testing.assert_allclose(newell(image), Q @ newell(x), atol=1e-12)
    joined = {frozenset(p) for p in zip(range(sides), np.roll(range(sides), -1), strict=True)}
    assert {frozenset(p) for p in zip(order, np.roll(order, -1), strict=True)} == joined
    vtk_normal = [0.0, 0.0, 0.0]
    cell = pyvista.UnstructuredGrid([sides, *range(sides)], [POLYGON], image).GetCell(0)
    cell.ComputeNormal(cell.GetPoints(), vtk_normal)
    assert vtk_normal @ Q @ newell(x) > 0


@pytest.mark.parametrize("corners", [3, 4, 6, 7])
def test_quadratic_polygons(corners: int) -> None:
    """VTK lists the corners, then the node between corner i and i + 1."""
    order = mirrored_polygon(QUADRATIC_POLYGON, 2 * corners)
    np.testing.assert_array_equal(order[order], np.arange(2 * corners))
    between = {k + corners: {k, (k + 1) % corners} for k in range(corners)}
    for k in range(corners):
        ends = {int(order[k]), int(order[(k + 1) % corners])}
        assert between[int(order[k + corners])] == ends
    np.testing.assert_array_equal(order[:corners], mirrored_polygon(POLYGON, corners))


@pytest.mark.parametrize("vtk_id", [2, 4, 6, 8, 11, 35, 41, 42, 68, 72, 75, 79])
def test_unknown_types_are_refused_by_name(vtk_id: int) -> None:
    names = {2: "poly-vertex", 4: "poly-line", 6: "triangle strip", 8: "pixel", 11: "voxel",
             35: "cubic line", 41: "convex point set", 42: "polyhedron", 68: "Lagrange curve",
             72: "Lagrange hexahedron", 75: "Bezier curve", 79: "Bezier hexahedron"}  # fmt: skip
    types = np.array([12, 12, vtk_id, 12], dtype=np.uint8)
    with pytest.raises(NotYetError) as caught:
        require_known(types, "part.vtu")
    for word in (names[vtk_id], "cell 2", f"type {vtk_id}", "part.vtu"):
        assert word in str(caught.value)


def test_known_types() -> None:
    types = np.array([*CELL_TYPES, *POLYGONS], dtype=np.uint8)
    assert set(require_known(types, "part.vtu")) == set(types.tolist())
    assert cell_name(POLYGON) == "polygon"
    for vtk_id, dim in zip(types.tolist(), dimensions(types).tolist(), strict=True):
        assert dim == vtk_cell(vtk_id).GetCellDimension()


# --- against VTK's filters ----------------------------------------------------------------------


def one_of_each(without: tuple[int, ...] = ()) -> Sector:
    """Every cell type once, side by side at x > 0, and two polygons."""
    points, cells, start = [], [], 0
    for number, vtk_id in enumerate(t for t in CELL_TYPES if t not in without):
        x = distorted_cell(vtk_id)
        x = x - x.min(axis=0) + [17.0 - 4.0 * (number % 5), 4.0 * (number // 5), 0.0]
        points.append(x)
        cells.append((vtk_id, list(range(start, start + len(x)))))
        start += len(x)
    angle = 2 * np.pi * np.arange(7) / 7
    middles = (angle + np.pi / 7)[:, None]
    heptagon = np.stack([np.cos(angle), np.sin(angle), 0 * angle], axis=1)
    rounded = np.hstack([np.cos(middles), np.sin(middles), 0 * middles])
    here, there = np.array([3.0, -4.0, 0.0]), np.array([7.0, -4.0, 0.5])
    points += [heptagon + here, heptagon + there, rounded + there]
    cells.append((POLYGON, list(range(start, start + 7))))
    cells.append((QUADRATIC_POLYGON, list(range(start + 7, start + 21))))
    return Sector(np.concatenate(points), cells)


def reflected_by_vtk(grid: pyvista.UnstructuredGrid, which: str) -> pyvista.UnstructuredGrid:
    """The image in the plane x = 0 alone."""
    if which == "vtkReflectionFilter":
        plain = vtkReflectionFilter()
        plain.SetPlaneToX()
        plain.FlipAllInputArraysOn()
        plain.CopyInputOff()
        plain.SetInputData(grid)
        plain.Update()
        return pyvista.wrap(plain.GetOutput())
    plane = vtkPlane()
    plane.SetNormal(1.0, 0.0, 0.0)
    plane.SetAxisAligned(True)
    aligned = vtkAxisAlignedReflectionFilter()
    aligned.SetPlaneMode(vtkAxisAlignedReflectionFilter.PLANE)
    aligned.SetReflectionPlane(plane)
    aligned.ReflectAllInputArraysOn()
    aligned.CopyInputOff()
    aligned.SetInputData(grid)
    aligned.Update()
    return pyvista.wrap(aligned.GetOutput().GetPartition(0, 0))


FILTERS = ["vtkReflectionFilter", "vtkAxisAlignedReflectionFilter"]
# VTK itself warns that it inverts type 34 and polygons are left as they are.
NOT_IN_VTK = (34,)


def cell_sizes(grid: pyvista.UnstructuredGrid) -> np.ndarray:
    """Signed volume, area or length of each cell, 1 for a vertex, by vtkCellSizeFilter."""
    sizes = vtkCellSizeFilter()
    sizes.SetInputData(grid)
    sizes.Update()
    data = pyvista.wrap(sizes.GetOutput()).cell_data
    return data["VertexCount"] + data["Length"] + data["Area"] + data["Volume"]


def parts(cell, count: int, get, start: int = 0) -> set[frozenset[int]]:
    """Node sets of edges or faces, numbered from `start`."""
    found = set()
    for k in range(count):
        part = get(cell, k).GetPointIds()  # VTK hands out one object again and again
        found.add(frozenset(part.GetId(i) - start for i in range(part.GetNumberOfIds())))
    return found


def edges_and_faces(cell, start: int = 0):
    return (
        parts(cell, cell.GetNumberOfEdges(), lambda c, k: c.GetEdge(k), start),
        parts(cell, cell.GetNumberOfFaces(), lambda c, k: c.GetFace(k), start),
    )


@pytest.fixture(scope="module")
def zoo(tmp_path_factory) -> tuple[pyvista.UnstructuredGrid, pyvista.UnstructuredGrid]:
    """One cell of each type with fields, as the model and as the whole body of two copies."""
    rng = np.random.default_rng(8)
    sector = one_of_each()
    n, m = len(sector.points), len(sector.cells)
    symmetric = rng.normal(size=(n, 3, 3))
    symmetric += symmetric.transpose(0, 2, 1)
    points = {"displacement": rng.normal(size=(n, 3)), "stress": symmetric.reshape(n, 9),
              "six": rng.normal(size=(n, 6)), "temperature": rng.normal(size=n)}  # fmt: skip
    cells = {"flux": rng.normal(size=(m, 3))}
    tables = {
        "mirror": [{"normal": "x"}],
        "fields": {
            "displacement": {"kind": "polar vector"}, "stress": {"kind": "symmetric tensor"},
            "six": {"kind": "symmetric tensor", "components": "xx yy zz xy yz xz"},
            "flux": {"kind": "polar vector"},
        },
    }  # fmt: skip
    case = case_of(tmp_path_factory.mktemp("zoo"), sector, tables, points, cells)
    return pyvista.read(case.folder / "sector.vtu"), expand(case)


def second_copy(body: pyvista.UnstructuredGrid) -> pyvista.UnstructuredGrid:
    return body.extract_cells(np.flatnonzero(body.cell_data["copy"] == 1))


def test_every_type_goes_through_a_file(zoo) -> None:
    model, body = zoo
    assert body.n_cells == 2 * model.n_cells
    np.testing.assert_array_equal(body.celltypes, np.tile(model.celltypes, 2))
    np.testing.assert_array_equal(body.cell_data["sector_cell"], np.tile(range(model.n_cells), 2))


@pytest.mark.parametrize("which", FILTERS)
def test_node_order_is_as_good_as_vtks(zoo, which: str) -> None:
    """Orders may differ by a turn of the cell: the edges, faces and sizes must not."""
    model, body = zoo
    theirs = reflected_by_vtk(model, which)
    start = body.n_points // 2
    compared = 0
    for k, vtk_id in enumerate(model.celltypes.tolist()):
        if vtk_id in NOT_IN_VTK or vtk_id in POLYGONS:
            continue
        mine = edges_and_faces(body.GetCell(model.n_cells + k), start)
        assert mine == edges_and_faces(theirs.GetCell(k)), vtk_id
        assert mine == edges_and_faces(model.GetCell(k)), vtk_id
        compared += 1
    assert compared == len(CELL_TYPES) - len(NOT_IN_VTK)
    np.testing.assert_allclose(body.points[start:], theirs.points, atol=1e-14)


@pytest.mark.parametrize("which", FILTERS)
def test_vectors_and_tensors_are_those_of_vtk(zoo, which: str) -> None:
    """Polar vectors, symmetric tensors of 9 and of 6 components, vectors on cells."""
    model, body = zoo
    theirs = reflected_by_vtk(model, which)
    start = model.n_points
    for name in ("displacement", "stress", "six", "temperature"):
        np.testing.assert_array_equal(body.point_data[name][start:], theirs.point_data[name])
    np.testing.assert_array_equal(body.cell_data["flux"][model.n_cells :], theirs.cell_data["flux"])
    assert (body.point_data["displacement"][start:] != model.point_data["displacement"]).any()


def test_sizes_are_kept_and_positive(zoo) -> None:
    model, body = zoo
    sizes = cell_sizes(body)
    assert sizes.min() > 0
    # VTK cuts a warped cell into tetrahedra, differently in another node order.
    np.testing.assert_allclose(sizes[model.n_cells :], sizes[: model.n_cells], rtol=0.1)
    inside_out = model.copy()
    inside_out.points[:, 0] *= -1
    solid = dimensions(model.celltypes) == 3
    assert (cell_sizes(inside_out)[solid] < 0).all(), "else the filter would see nothing"


# --- the whole body -----------------------------------------------------------------------------

BODIES = {
    "half": (box((2, 2, 2)), {"mirror": [{"normal": "x"}]}, 2),
    "eighth": (box((2, 1, 3)), {"mirror": [{"normal": n} for n in "xyz"]}, 8),
    "ring": (ring(7, lean=0.3), {"cyclic": {"sectors": 7}}, 7),
    "pie": (ring(5, inner=0.0), {"cyclic": {"sectors": 5}}, 5),
    "half sectors": (
        ring(6, part=0.5), {"cyclic": {"sectors": 6}, "mirror": [{"normal": "y"}]}, 12,
    ),
    "half pie of half height": (
        ring(4, inner=0.0, part=0.5),
        {"cyclic": {"sectors": 4}, "mirror": [{"normal": "y"}, {"normal": "z"}]},
        16,
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", BODIES)
def test_volume_of_the_whole_body(name: str, tmp_path: Path) -> None:
    """vtkCellSizeFilter: copies times the sector, no cell negative, anywhere in space."""
    sector, tables, copies = BODIES[name]
    R, t = somewhere()
    body = expand(case_of(tmp_path, sector.moved(R, t), placed(tables, R, t)))
    own = cell_sizes(sector.grid())
    assert own.min() > 0
    sizes = cell_sizes(body)
    assert body.n_cells == copies * len(sector.cells)
    np.testing.assert_allclose(sizes, own[body.cell_data["sector_cell"]], rtol=1e-9)
    np.testing.assert_allclose(sizes.sum(), copies * own.sum(), rtol=1e-12)
    if "pie" in name:  # a closed body's surface must be the right one, so nothing is inside out
        surface = body.extract_surface(algorithm=None).triangulate()
        assert surface.n_open_edges == 0
        np.testing.assert_allclose(surface.volume, sizes.sum(), rtol=1e-6)
