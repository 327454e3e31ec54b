"""Sections found on the sector against the same plane through the whole body, built by hand."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from meshes import Sector, box, quadratic, ring, somewhere, tetrahedra

from expander.audit.section import Section, across
from expander.bodymesh import mirrored_connectivity
from expander.cells import CELL_TYPES
from expander.errors import InputError
from expander.groups import CutPlane, CyclicAxis, Group, make_group
from expander.model import Mesh
from expander.placements import Placement

Z = np.array([0.0, 0.0, 1.0])
PAIRS = ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0))


def planes(*normals: np.ndarray) -> list[CutPlane]:
    return [CutPlane(f"plane {k}", np.asarray(n), np.zeros(3)) for k, n in enumerate(normals)]


def cyclic(sectors: int) -> Group:
    return make_group([], CyclicAxis(sectors, Z, np.zeros(3)))


def full(values: np.ndarray) -> np.ndarray:
    """Stored components (..., 6) to (..., 3, 3)."""
    T = np.zeros((*values.shape[:-1], 3, 3), dtype=values.dtype)
    for k, (i, j) in enumerate(PAIRS):
        T[..., i, j] = T[..., j, i] = values[..., k]
    return T


def six(T: np.ndarray) -> np.ndarray:
    return np.stack([T[..., i, j] for i, j in PAIRS], axis=-1)


def whole(mesh: Mesh, group: Group, chi, stress) -> tuple[Mesh, np.ndarray]:
    """All copies in one mesh, not merged, and their stress."""
    order = mirrored_connectivity(mesh)
    points, nodes, values = [], [], []
    for k, g in enumerate(group.placements):
        points.append(mesh.points @ g.Q.T + g.t)
        nodes.append((order if g.mirrored else mesh.connectivity) + k * mesh.point_count)
        values.append(six(chi[k] * (g.Q @ full(stress) @ g.Q.T)))
    n, sizes = len(group), np.diff(mesh.offsets)
    offsets = np.concatenate([[0], np.cumsum(np.tile(sizes, n))])
    return Mesh(np.concatenate(points), np.concatenate(nodes), offsets,
                np.tile(mesh.types, n)), np.concatenate(values)  # fmt: skip


# No copies: the whole body as it is.
ALONE = Group((Placement.identity(),), (), None, (0,), (0,), np.zeros((1, 0), dtype=np.int64))


def close(a: Section, b: Section, tolerance: float = 1e-12) -> None:
    size = np.abs(b.force).max() + np.abs(b.moment).max()
    assert np.abs(a.force - b.force).max() < tolerance * size
    assert np.abs(a.moment - b.moment).max() < tolerance * size * 3
    assert np.abs(a.centroid - b.centroid).max() < tolerance * 10
    assert abs(a.area - b.area) < tolerance * b.area * 10


BLOCK = box((2, 3, 2), size=(1.0, 1.4, 0.6))
MIDDLE = np.array([0.5, 0.6, 0.3])
WAVE = np.exp(2j * np.pi / 5 * np.arange(5))
BODIES = {
    "half": (BLOCK, make_group(planes(Z), None), [1, -1]),
    "quarter": (BLOCK, make_group(planes(np.eye(3)[0], Z), None), [1, -1, 1, -1]),
    "eighth": (tetrahedra(BLOCK), make_group(planes(*np.eye(3)), None), [1] * 8),
    "ring": (ring(5, lean=0.3), cyclic(5), [1] * 5),
    "ring, one nodal diameter": (ring(5, lean=0.3), cyclic(5), WAVE),
    "quadratic": (quadratic(ring(5)), cyclic(5), [1] * 5),
    "half sectors": (
        ring(4, part=0.5),
        make_group(planes(np.eye(3)[1]), CyclicAxis(4, Z, np.zeros(3))),
        [1] * 8,
    ),
}


def linear_stress(mesh: Mesh, rng: np.random.Generator) -> np.ndarray:
    """(n, 6): then it does not matter how a cut through a cell is split into triangles."""
    return rng.normal(size=6) + mesh.points @ rng.normal(size=(3, 6))


@pytest.mark.parametrize("seed", range(4))
@pytest.mark.parametrize("on", ["points", "cells"])
@pytest.mark.parametrize("name", BODIES)
def test_the_sector_tells_what_the_whole_body_would(name, on, seed, monkeypatch):
    monkeypatch.setattr("expander.audit.section._SHIFT", 0.0)  # of the size, which differs
    sector, group, chi = BODIES[name]
    mesh, chi = sector.mesh(), np.array(chi)
    rng = np.random.default_rng(seed)

    def some() -> np.ndarray:
        if on == "points":
            return linear_stress(mesh, rng)
        return rng.normal(size=(mesh.cell_count, 6))

    stress = some() + 1j * some() if seed % 2 else some()
    middle = np.mean([g.apply(mesh.points).mean(axis=0) for g in group.placements], axis=0)
    normal, point = rng.normal(size=3), middle + rng.uniform(-0.1, 0.1, size=3)
    about = None if seed < 2 else rng.normal(size=3)
    found = across(mesh, group, chi, stress, on, normal, point, about)
    body, values = whole(mesh, group, chi, stress)
    expected = across(body, ALONE, [1], values, on, normal, point, about)
    close(found, expected)
    assert len(found.copies) > 1
    assert np.iscomplexobj(found.force) == (seed % 2 == 1 or np.iscomplexobj(chi))


def one_cell(vtk_id: int) -> Sector:
    from vtkmodules.vtkCommonDataModel import vtkGenericCell

    cell = vtkGenericCell()
    cell.SetCellType(vtk_id)
    n = cell.GetNumberOfPoints()
    corners = len(CELL_TYPES[vtk_id].shape.mirrored)
    x = np.array([cell.GetParametricCoords()[k] for k in range(3 * n)]).reshape(n, 3)
    if vtk_id in (14, 27):
        x[4] = (0.5, 0.5, 1.0)
        x = np.array([x[:corners][list(c)].mean(axis=0) for c in CELL_TYPES[vtk_id].nodes])
    return Sector(x, [(vtk_id, list(range(n)))])


@pytest.mark.parametrize("vtk_id", [t for t, c in CELL_TYPES.items() if c.dimension >= 2])
def test_constant_and_linear_stress_through_every_cell_type(vtk_id):
    """Force is stress times area; the moment of p(x) = p0 + g x is that of a plane figure.

    The oracle is VTK's outline of the cut: a polygon's area, centre and second moments.
    """
    from scipy.spatial import ConvexHull

    sector = one_cell(vtk_id)
    mesh = sector.mesh()
    normal, point = np.array([1.0, 0.0, 0.0]), np.array([0.3, 0.4, 0.3])
    T = np.array([2.0, -1.0, 0.5, 0.7, 0.3, -0.4])
    found = across(mesh, ALONE, [1], np.tile(T, (1, 1)), "cells", normal, point)
    force = full(T) @ normal * found.area
    assert np.abs(found.force - force).max() < 1e-12
    assert np.abs(found.moment).max() < 1e-12  # about the centroid
    by_points = across(mesh, ALONE, [1], np.tile(T, (mesh.point_count, 1)), "points", normal, point)
    close(by_points, found)
    if CELL_TYPES[vtk_id].dimension == 3:
        x = mesh.points
        pairs = [(a, b) for a in range(len(x)) for b in range(a) if (x[a, 0] - 0.3) *
                 (x[b, 0] - 0.3) < 0]  # fmt: skip
        hull = [x[a] + (0.3 - x[a, 0]) / (x[b, 0] - x[a, 0]) * (x[b] - x[a]) for a, b in pairs]
        area = ConvexHull(np.array(hull)[:, 1:]).volume
        assert abs(found.area - area) < 1e-9 * area
    else:
        assert (
            abs(found.area - (0.7 if CELL_TYPES[vtk_id].shape.name == "triangle" else 1.0)) < 1e-9
        )


@pytest.mark.parametrize("kind", [box, lambda c: tetrahedra(box(c)), lambda c: quadratic(box(c))])
@pytest.mark.parametrize("direction", [1.0, -1.0])
def test_a_plane_in_faces_belongs_to_the_cells_behind_it(kind, direction):
    """A stress that jumps at the plane tells which side was taken, and that it was taken once."""
    sector = kind((4, 2, 2))
    mesh = sector.mesh()
    middle = np.unique(mesh.points[:, 0].round(12))
    at = middle[len(middle) // 2]
    centre = np.array([mesh.points[n].mean(axis=0)[0] for _, n in sector.cells])
    stress = np.zeros((mesh.cell_count, 6))
    stress[:, 0] = np.where(centre < at, 3.0, 7.0)
    s = across(mesh, ALONE, [1], stress, "cells", [direction, 0, 0], [at, 0, 0])
    behind = 3.0 if direction > 0 else 7.0
    assert np.abs(s.force - [direction * behind, 0.0, 0.0]).max() < 1e-9
    assert abs(s.area - 1.0) < 1e-9


@pytest.mark.parametrize("direction", [1.0, -1.0])
@pytest.mark.parametrize("skew", [False, True])
@pytest.mark.parametrize("dtype", [np.float64, np.float32])
def test_a_cut_plane_counts_once(direction, skew, dtype):
    R, t = somewhere() if skew else (np.eye(3), np.zeros(3))
    sector = BLOCK.moved(R, t).as_type(dtype)
    group = make_group([CutPlane("mid", R[:, 2], t)], None)
    sigma = six(R @ np.diag([0.0, 0.0, 5.0]) @ R.T)
    mesh = sector.mesh()
    s = across(mesh, group, [1, 1], np.tile(sigma, (mesh.cell_count, 1)), "cells",
               direction * R[:, 2], t)  # fmt: skip
    assert s.copies == ((1,) if direction > 0 else (0,))
    loss = 1e-5 if dtype == np.float32 else 1e-9
    assert abs(s.area - 1.4) < loss
    assert np.abs(s.force - direction * 7.0 * R[:, 2]).max() < 5 * loss
    assert np.abs(s.centroid - t - R @ [0.5, 0.7, 0.0]).max() < 10 * loss


def test_nodes_off_their_cut_plane_need_a_larger_shift():
    """A gap of 2e-6 between the copies: a plane in it meets neither, one moved out of it does."""
    mesh, group = BLOCK.moved(np.eye(3), [0, 0, 1e-6]).mesh(), make_group(planes(Z), None)
    pull = np.tile([0, 0, 5.0, 0, 0, 0], (mesh.cell_count, 1))
    with pytest.raises(InputError, match="does not cut the body"):
        across(mesh, group, [1, 1], pull, "cells", Z, [0, 0, 0])
    s = across(mesh, group, [1, 1], pull, "cells", Z, [0, 0, 0], shift=1e-5)
    assert s.copies == (1,)
    assert np.abs(s.force - 7.0 * Z).max() < 1e-9


def test_a_body_of_beams_has_no_stress_to_integrate():
    mesh = Sector(np.array([[0, 0, 0.1], [0, 0, 1.0]]), [(3, [0, 1])]).mesh()
    with pytest.raises(InputError, match="no solid or 2D cells"):
        across(mesh, make_group(planes(Z), None), [1, 1], np.zeros((1, 6)), "cells", Z, 0.5 * Z)


def test_a_plane_in_a_seam_of_a_ring_counts_each_wall_once():
    """The plane y = 0 holds a seam and meets the opposite wall: two walls of one ring."""
    mesh = ring(4, inner=1.0, outer=2.0, height=0.8).mesh()
    pull = np.zeros((mesh.cell_count, 6))
    pull[:, 2] = 1.0
    s = across(mesh, cyclic(4), np.ones(4), pull, "cells", [0, 1, 0], [0, 0, 0])
    assert abs(s.area - 2 * 1.0 * 0.8) < 1e-9
    assert s.copies == (2, 3)  # those behind it, with y < 0
    turned = across(mesh, cyclic(4), np.ones(4), pull, "cells", [0, -1, 0], [0, 0, 0])
    assert turned.copies == (0, 1)


def test_end_faces():
    mesh = box((2, 2, 2)).mesh()
    pull = np.tile([4.0, 0, 0, 0, 0, 0], (8, 1))
    s = across(mesh, ALONE, [1], pull, "cells", [1, 0, 0], [1, 0, 0])
    assert abs(s.force[0] - 4.0) < 1e-9
    with pytest.raises(InputError, match=r"plane at 0 .* does not cut the body, .* 0 to 1 there"):
        across(mesh, ALONE, [1], pull, "cells", [1, 0, 0], [0, 0, 0])


@pytest.mark.parametrize("level", [-1.01, 1.01])
def test_a_plane_beside_the_body_is_refused(level):
    mesh, group = box((2, 2, 2)).mesh(), make_group(planes(Z), None)
    with pytest.raises(InputError, match="reaches from -1 to 1"):
        across(mesh, group, [1, 1], np.zeros((8, 6)), "cells", Z, level * Z)


@pytest.mark.parametrize(
    ("change", "words"),
    [
        ({"on": "corners"}, "on = 'corners'"),
        ({"stress": np.zeros((5, 6))}, r"stress has shape \(5, 6\), but the sector has 8 cells"),
        ({"on": "points"}, r"stress has shape \(8, 6\), but the sector has 27 points"),
        ({"chi": [1.0]}, r"chi has shape \(1,\), but there are 2 copies"),
        ({"thickness": [1.0, 2.0]}, r"thickness has shape \(2,\)"),
    ],
)
def test_what_does_not_fit_is_refused(change, words):
    given = {"chi": [1, 1], "stress": np.zeros((8, 6)), "on": "cells", "normal": Z,
             "point": 0.5 * Z} | change  # fmt: skip
    with pytest.raises(InputError, match=words):
        across(box((2, 2, 2)).mesh(), make_group(planes(Z), None), **given)


# --- shells and plane models --------------------------------------------------------------------


def plate(n: int = 3) -> Sector:
    """A unit square of quadrilaterals in z = 0."""
    u, v = np.meshgrid(*[np.linspace(0, 1, n + 1)] * 2, indexing="ij")
    k = np.arange((n + 1) ** 2).reshape(n + 1, n + 1)
    cells = [(9, [int(k[i + a, j + b]) for a, b in ((0, 0), (1, 0), (1, 1), (0, 1))])
             for i in range(n) for j in range(n)]  # fmt: skip
    return Sector(np.stack([u.ravel(), v.ravel(), 0 * u.ravel()], axis=1), cells)


def test_a_plane_model_with_linear_stress():
    """Half a strip 0 < x < 1, 0 < y < 1 in bending: sigma_xx = y, over y from -1 to 1.

    N = 0, M_z = -t int y^2 dy = -2 t / 3 for the traction sigma_xx e_x at y.
    """
    mesh = plate().mesh()
    group = make_group(planes(np.array([0.0, 1.0, 0.0])), None)
    stress = np.zeros((mesh.point_count, 6))
    stress[:, 0] = mesh.points[:, 1]
    s = across(mesh, group, [1, -1], stress, "points", [1, 0, 0], [0.4, 0, 0], thickness=0.3)
    assert np.abs(s.force).max() < 1e-12
    assert np.abs(s.moment - [0, 0, -0.2]).max() < 1e-12
    assert np.abs(s.centroid - [0.4, 0, 0]).max() < 1e-9
    assert abs(s.area - 0.6) < 1e-12
    same = across(mesh, group, [1, 1], stress, "points", [1, 0, 0], [0.4, 0, 0], thickness=0.3)
    assert abs(same.force[0] - 0.3) < 1e-12
    assert np.abs(same.moment).max() < 1e-12


@pytest.mark.parametrize("angle", [0.0, 0.4, 1.2])
def test_a_slanting_cut_through_a_shell_carries_the_same_force(angle):
    """The membrane force per length does not know how the plane leans through the thickness."""
    mesh = plate().mesh()
    stress = np.tile([3.0, 0, 0, 0.5, 0, 0], (mesh.cell_count, 1))
    thickness = np.full(mesh.cell_count, 0.02)
    normal = [np.cos(angle), 0.0, np.sin(angle)]
    s = across(mesh, ALONE, [1], stress, "cells", normal, [0.5, 0, 0], thickness=thickness)
    assert np.abs(s.force - [0.06, 0.01, 0.0]).max() < 1e-12
    assert abs(s.area - 0.02 / np.cos(angle)) < 1e-12


def test_a_shell_in_a_cut_plane_carries_half_on_each_side():
    """A web of half thickness in z = 0, as the half model has it."""
    mesh = plate().mesh()
    group = make_group(planes(Z), None)
    stress = np.tile([4.0, 0, 0, 0, 0, 0], (mesh.cell_count, 1))
    s = across(mesh, group, [1, 1], stress, "cells", [1, 0, 0], [0.4, 0, 0], thickness=0.5 * 0.1)
    assert abs(s.force[0] - 0.4) < 1e-12


def test_solids_with_a_skin_and_a_beam():
    """Skin cells of no thickness are not cut; beams are left out."""
    sector = box((2, 2, 2)).plus([(9, [0, 3, 12, 9]), (3, [0, 26])])
    mesh = sector.mesh()
    stress = np.tile([2.0, 0, 0, 0, 0, 0], (mesh.cell_count, 1))
    stress[8:] = np.nan
    thickness = np.zeros(mesh.cell_count)
    s = across(mesh, ALONE, [1], stress, "cells", [1, 0, 0], [0.3, 0, 0], thickness=thickness)
    assert abs(s.force[0] - 2.0) < 1e-12


def test_far_from_the_origin():
    far = np.array([3e6, -2e6, 5e6])
    mesh = BLOCK.mesh()
    stress = np.random.default_rng(2).normal(size=(mesh.point_count, 6))
    here = across(mesh, ALONE, [1], stress, "points", [1, 2, 3], MIDDLE)
    away = replace(mesh, points=mesh.points + far)
    there = across(away, ALONE, [1], stress, "points", [1, 2, 3], far + MIDDLE)
    # coordinates of 5e6 are known to 1e-9; the plane is moved by 32 of these
    assert np.abs(there.force - here.force).max() < 1e-6
    assert np.abs(there.moment - here.moment).max() < 1e-6
    assert np.abs(there.centroid - far - here.centroid).max() < 1e-7
