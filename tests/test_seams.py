"""Seams: which nodes and cells of the copies are one, their numbers, and their values.

Oracle for the mesh: every copy is made by plain 4 x 4 matrices and all their nodes are merged by
nearest neighbours over the whole body. Oracle for the values: all copies scattered to the merged
nodes with np.add.at. Both work on the whole body, which the program never does; common practice.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from meshes import (
    HEXAHEDRON,
    LINE,
    POLYGON,
    QUAD,
    TETRA,
    TRIANGLE,
    VERTEX,
    WEDGE,
    Sector,
    box,
    case_of,
    cell_nodes,
    collapsed,
    copies_of,
    placed,
    quadratic,
    ring,
    somewhere,
    tetrahedra,
)
from scipy.sparse import coo_matrix
from scipy.sparse.csgraph import connected_components
from scipy.spatial import cKDTree

from expander import expand
from expander.body import prepare
from expander.errors import CheckFailed, InputError

Tables = Mapping[str, Any]
SOLIDS = (HEXAHEDRON, TETRA, WEDGE)
HALF: Tables = {"mirror": [{"normal": "x"}]}
QUARTER: Tables = {"mirror": [{"normal": "x"}, {"normal": "y"}]}
EIGHTH: Tables = {"mirror": [{"normal": "x"}, {"normal": "y"}, {"normal": "z"}]}


def cyclic(sectors: int, **more) -> Tables:
    return {"cyclic": {"sectors": sectors, **more}}


def with_planes(tables: Tables, *normals) -> Tables:
    return {**tables, "mirror": [{"normal": n} for n in normals]}


def wedge_planes(degrees: float) -> Tables:
    """Two planes through z, the model between angle zero and this angle."""
    a = np.deg2rad(degrees)
    return {"mirror": [{"normal": "y"}, {"normal": [-np.sin(a), np.cos(a), 0.0]}]}


# --- the oracle ---------------------------------------------------------------------------------


@dataclass
class Whole:
    """The whole body, every node of every copy with its number after merging.

    Attributes
    ----------
    ids : (copies, n) merged number of each node of each copy.
    points : (merged, 3).
    """

    matrices: np.ndarray
    chi: np.ndarray
    ids: np.ndarray
    points: np.ndarray


def whole_body(sector: Sector, tables: Tables, tolerance: float, part=None, chosen=None) -> Whole:
    """All copies merged where they are nearer than `tolerance`.

    Parameters
    ----------
    part : (n,) nodes of different parts stay two, however near they are.
    chosen : copies to merge, as matrices.
    """
    M, chi = copies_of(tables)
    if chosen is not None:
        order = [int(np.abs(M - c).max(axis=(1, 2)).argmin()) for c in chosen]
        M, chi = M[order], chi[order]
    x = sector.points.astype(float)
    everything = np.concatenate([x @ m[:3, :3].T + m[:3, 3] for m in M])
    label = np.tile(np.zeros(len(x)) if part is None else part, len(M))
    apart = np.hstack([everything, 1e3 * label[:, None] * np.ptp(everything)])
    pairs = cKDTree(apart).query_pairs(tolerance, output_type="ndarray")
    size = len(everything)
    graph = coo_matrix((np.ones(len(pairs)), (pairs[:, 0], pairs[:, 1])), shape=(size, size))
    ids = connected_components(graph, directed=False)[1]
    points = np.empty((ids.max() + 1, 3))
    points[ids[::-1]] = everything[::-1]
    return Whole(M, chi, ids.reshape(len(M), len(x)), points)


def cells_of(whole: Whole, sector: Sector) -> Counter:
    """Cells of all copies as (type, set of merged numbers), coinciding ones once."""
    seen = {
        (vtk_id, frozenset(ids[nodes].tolist()))
        for ids in whole.ids
        for vtk_id, nodes in sector.cells
    }
    return Counter(seen)


def numbers_in(whole: Whole, body: pyvista.UnstructuredGrid, part=None) -> np.ndarray:
    """Merged number of each point of the program's whole body, (points,)."""
    if part is None:
        distance, found = cKDTree(whole.points).query(body.points)
        assert distance.max() < 1e-3
        return found
    label = np.empty(len(whole.points))
    label[whole.ids] = part
    far = 1e3 * np.ptp(whole.points)
    there = np.hstack([whole.points, far * label[:, None]])
    here = np.hstack([body.points, far * part[body.point_data["sector_point"]][:, None]])
    distance, found = cKDTree(there).query(here)
    assert distance.max() < 1e-3
    return found


def check_same_mesh(body, whole: Whole, sector: Sector, part=None) -> np.ndarray:
    """The same number of points, and the same cells as sets of merged nodes."""
    number = numbers_in(whole, body, part)
    assert body.n_points == len(whole.points)
    np.testing.assert_array_equal(np.sort(number), np.arange(len(whole.points)))
    nodes = cell_nodes(body)
    found = Counter(
        (int(t), frozenset(number[n].tolist())) for t, n in zip(body.celltypes, nodes, strict=True)
    )
    assert found == cells_of(whole, sector)
    return number


# --- counts and meshes --------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("tables", "doubled"), [(HALF, (2, 1, 1)), (QUARTER, (2, 2, 1)), (EIGHTH, (2, 2, 2))]
)
def test_box_has_the_nodes_of_the_whole_box(tables: Tables, doubled, tmp_path: Path) -> None:
    """A regular grid of nx x ny x nz cells has (nx + 1)(ny + 1)(nz + 1) nodes."""
    counts = np.array([2, 3, 4])
    body = expand(case_of(tmp_path, box(counts), tables))
    assert body.n_points == np.prod(counts * doubled + 1)
    assert body.n_cells == np.prod(counts * doubled)
    assert len(np.unique(np.round(body.points, 9), axis=0)) == body.n_points
    for k, twice in enumerate(doubled):
        assert body.points[:, k].min() == pytest.approx(-1.0 if twice == 2 else 0.0)


def leaning_pie(sectors: int) -> Sector:
    return ring(sectors, inner=0.0, lean=0.4)


CASES: dict[str, tuple[Sector, Tables]] = {
    "half box": (box((2, 2, 2)), HALF),
    "eighth box": (box((2, 1, 2)), EIGHTH),
    "box off all planes but one": (box((1, 2, 1), corner=(0, 3, 5)), EIGHTH),
    "60 degrees between two planes": (ring(6), wedge_planes(60)),
    "36 degrees to the axis": (ring(10, inner=0.0), wedge_planes(36)),
    "ring": (ring(7), cyclic(7)),
    "ring whose seams wind round": (ring(12, (4, 3, 2), lean=2.0), cyclic(12)),
    "ring of tetrahedra": (tetrahedra(ring(5, lean=0.4)), cyclic(5)),
    "quadratic ring": (quadratic(ring(5, (1, 2, 1), lean=0.4)), cyclic(5)),
    "quadratic tetrahedra": (quadratic(tetrahedra(box((1, 2, 1)))), EIGHTH),
    "quadratic pie": (quadratic(ring(5, inner=0.0)), cyclic(5)),
    "pie of collapsed hexahedra": (collapsed(ring(5, inner=0.0)), cyclic(5)),
    "on the negative side": (box((2, 2, 1), corner=(-1, -1, 0)), QUARTER),
    "planes and axis say the same": (ring(4, part=0.5), {**cyclic(4), **wedge_planes(45)}),
    "ring with curved seams": (ring(5, lean=0.6), cyclic(5)),
    "ring of two": (ring(2, (2, 4, 1)), cyclic(2)),
    "pie": (ring(6, inner=0.0), cyclic(6)),
    "pie with curved seams": (leaning_pie(5), cyclic(5)),
    "pie of two": (ring(2, (2, 4, 1), inner=0.0), cyclic(2)),
    "pie of three": (ring(3, inner=0.0), cyclic(3)),
    "half sectors": (ring(5, part=0.5), with_planes(cyclic(5), "y")),
    "half sectors to the axis": (ring(4, inner=0.0, part=0.5), with_planes(cyclic(4), "y")),
    "half height": (ring(5, lean=0.0), with_planes(cyclic(5), "z")),
    "half height to the axis": (ring(4, inner=0.0), with_planes(cyclic(4), "z")),
    "quarter of a sector": (ring(3, inner=0.0, part=0.5), with_planes(cyclic(3), "z", "y")),
}  # fmt: skip


@pytest.mark.parametrize("put", ["as built", "anywhere"])
@pytest.mark.parametrize("name", CASES)
def test_whole_mesh(name: str, put: str, tmp_path: Path) -> None:
    sector, tables = CASES[name]
    if put == "anywhere":
        R, t = somewhere()
        sector, tables = sector.moved(R, t), placed(tables, R, t)
    body = expand(case_of(tmp_path, sector, tables))
    whole = whole_body(sector, tables, 1e-6)
    assert len(whole.points) < whole.ids.size, "this case is to have seams"
    check_same_mesh(body, whole, sector)
    # Every cell is where its recorded copy puts the sector's cell.
    M = body.field_data["placements"].reshape(-1, 4, 4)
    assert len(M) == len(whole.matrices)
    for cell in range(0, body.n_cells, 7):
        m = M[list(body.field_data["copies"]).index(body.cell_data["copy"][cell])]
        own = sector.points[sector.cells[body.cell_data["sector_cell"][cell]][1]]
        here = body.points[body.get_cell(cell).point_ids]
        distance, _ = cKDTree(own @ m[:3, :3].T + m[:3, 3]).query(here)
        assert distance.max() < 1e-9


@pytest.mark.parametrize("name", ["pie", "half sectors to the axis", "half height to the axis"])
def test_classes_of_nodes(name: str, tmp_path: Path) -> None:
    """A node on the axis belongs to all copies (half of them, with a plane across, above the
    plane), one on a face to two: the orbit and the stabiliser, any book of algebra."""
    sector, tables = CASES[name]
    seams = prepare(case_of(tmp_path, sector, tables)).seams
    whole = whole_body(sector, tables, 1e-6)
    times = np.bincount(whole.ids.ravel())
    want = {node: int(times[i]) for node, i in enumerate(whole.ids[0]) if times[i] > 1}
    found = Counter(seams.nodes.item.tolist())
    assert found == want
    on_axis = np.flatnonzero(np.linalg.norm(sector.points[:, :2], axis=1) == 0.0)
    copies = len(whole.matrices)
    in_plane = "height" in name
    for node in on_axis.tolist():
        above = in_plane and sector.points[node, 2] > 0
        assert found[node] == (copies // 2 if above else copies)
    assert seams.worst_distance < 1e-12


@pytest.mark.parametrize("name", ["ring with curved seams", "pie", "quarter of a sector"])
def test_the_lowest_copy_writes_a_shared_node(name: str, tmp_path: Path) -> None:
    sector, tables = CASES[name]
    body = expand(case_of(tmp_path, sector, tables))
    M = body.field_data["placements"].reshape(-1, 4, 4)
    images = np.concatenate([sector.points @ m[:3, :3].T + m[:3, 3] for m in M])
    owners = cKDTree(images).query_ball_point(body.points, 1e-8)
    lowest = np.array([min(o) for o in owners])
    np.testing.assert_array_equal(body.point_data["sector_point"], lowest % len(sector.points))
    assert (np.diff(lowest) > 0).all(), "copy after copy, each in the sector's order"


@pytest.mark.parametrize(
    ("name", "copies"),
    [
        ("half box", [1]),
        ("eighth box", [0, 3, 5, 6]),
        ("ring", [0, 1, 2]),
        ("ring with curved seams", [1, 3, 4]),
        ("pie", [5, 2]),
        ("pie with curved seams", [0]),
        ("half sectors to the axis", [1, 2, 3]),
        ("quarter of a sector", [2, 3, 7, 11]),
    ],
)
def test_partial_bodies(name: str, copies: list[int], tmp_path: Path) -> None:
    """The copies that are built are merged among themselves, and only they."""
    sector, tables = CASES[name]
    everything = expand(case_of(tmp_path, sector, tables)).field_data["placements"]
    some = {**tables, "output": {"copies": copies}}
    body = expand(case_of(tmp_path, sector, some))
    chosen = everything.reshape(-1, 4, 4)[sorted(copies)]
    np.testing.assert_array_equal(body.field_data["placements"].reshape(-1, 4, 4), chosen)
    np.testing.assert_array_equal(body.field_data["copies"], sorted(copies))
    check_same_mesh(body, whole_body(sector, tables, 1e-6, chosen=chosen), sector)
    assert set(body.cell_data["copy"]) == set(copies)


@pytest.mark.parametrize("copies", [[0, 12], [-1], []])
def test_copies_that_are_not_there(copies: list[int], tmp_path: Path) -> None:
    tables = {**cyclic(7), "output": {"copies": copies}}
    with pytest.raises(InputError, match=r"output\.copies") as caught:
        expand(case_of(tmp_path, ring(7), tables))
    assert "0 (the modelled part) to 6" in str(caught.value)


@pytest.mark.parametrize("name", ["half box", "pie with curved seams", "half sectors"])
def test_not_merged(name: str, tmp_path: Path) -> None:
    """merge = false: copy after copy, every node and cell of each, values of the sector."""
    sector, tables = CASES[name]
    temperature = np.arange(len(sector.points), dtype=float)  # closes nowhere
    tables = {**tables, "output": {"merge": False}, "seam": {"limit": 10.0}}
    body = expand(case_of(tmp_path, sector, tables, {"temperature": temperature}))
    M = body.field_data["placements"].reshape(-1, 4, 4)
    n = len(sector.points)
    assert body.n_points == len(M) * n
    assert body.n_cells == len(M) * len(sector.cells)
    for k, m in enumerate(M):
        block = slice(k * n, (k + 1) * n)
        want = sector.points @ m[:3, :3].T + m[:3, 3]
        np.testing.assert_allclose(body.points[block], want, atol=1e-12)
        np.testing.assert_array_equal(body.point_data["sector_point"][block], np.arange(n))
        np.testing.assert_array_equal(body.point_data["temperature"][block], temperature)
    assert "not merged" in " ".join(body.field_data["assumptions"])


# --- cells in the cut plane ---------------------------------------------------------------------


def with_web() -> Sector:
    """A box with shells, beams and masses in, on and across its planes x = 0 and y = 0."""
    sector = box((2, 2, 2))
    at = {tuple(np.round(p * 20).astype(int)): k for k, p in enumerate(sector.points)}
    x, y, z = (np.unique(np.round(sector.points[:, k] * 20).astype(int)) for k in range(3))

    def node(i: int, j: int, k: int) -> int:
        return at[int(x[i]), int(y[j]), int(z[k])]

    return sector.plus(
        [
            (QUAD, [node(0, 0, 0), node(0, 1, 0), node(0, 1, 1), node(0, 0, 1)]),  # in x = 0
            (QUAD, [node(0, 1, 0), node(0, 2, 0), node(0, 2, 1), node(0, 1, 1)]),
            (QUAD, [node(0, 0, 1), node(1, 0, 1), node(1, 0, 2), node(0, 0, 2)]),  # in y = 0
            (TRIANGLE, [node(0, 0, 1), node(0, 1, 1), node(0, 1, 2)]),
            (POLYGON, [node(0, 1, 1), node(0, 2, 1), node(0, 2, 2), node(0, 1, 2)]),
            (QUAD, [node(0, 1, 1), node(1, 1, 1), node(1, 2, 1), node(0, 2, 1)]),  # across
            (LINE, [node(0, 0, 0), node(0, 0, 1)]),  # where the planes meet
            (LINE, [node(0, 1, 0), node(0, 1, 1)]),  # in x = 0
            (LINE, [node(0, 1, 0), node(1, 1, 0)]),  # from x = 0 inwards
            (LINE, [node(1, 1, 0), node(1, 1, 1)]),  # inside
            (VERTEX, [node(0, 0, 2)]),
            (VERTEX, [node(0, 1, 2)]),
            (VERTEX, [node(1, 1, 1)]),
        ]
    )


# Copies in the body of each of the thirteen cells above, counted by hand.
WEB_TIMES = {
    "half": [1, 1, 2, 1, 1, 2, 1, 1, 2, 2, 1, 1, 2],
    "quarter": [2, 2, 2, 2, 2, 4, 1, 2, 4, 4, 1, 2, 4],
}


@pytest.mark.parametrize(("name", "tables"), [("half", HALF), ("quarter", QUARTER)])
@pytest.mark.parametrize("put", ["as built", "anywhere"])
def test_cells_in_a_cut_plane_are_kept_once(name: str, tables, put, tmp_path: Path) -> None:
    sector = with_web()
    if put == "anywhere":
        R, t = somewhere()
        sector, tables = sector.moved(R, t), placed(tables, R, t)
    body = expand(case_of(tmp_path, sector, tables))
    check_same_mesh(body, whole_body(sector, tables, 1e-6), sector)
    times = np.bincount(body.cell_data["sector_cell"], minlength=len(sector.cells))
    np.testing.assert_array_equal(times[:8], 2 if name == "half" else 4)
    np.testing.assert_array_equal(times[8:], WEB_TIMES[name])
    # Kept as modelled: the copy that comes first, here the modelled part where it has the cell.
    single = np.flatnonzero(times[body.cell_data["sector_cell"]] == 1)
    assert (body.cell_data["copy"][single] == 0).all()
    note = next(n for n in body.field_data["assumptions"] if "coincide" in n)
    doubled = [8 + k for k, n in enumerate(WEB_TIMES[name]) if n < max(WEB_TIMES[name])]
    assert note.startswith(f"{len(doubled)} cells")
    for cell in doubled[:8]:
        assert f"{cell}" in note


def test_shells_and_masses_on_the_axis_of_a_pie(tmp_path: Path) -> None:
    """On the axis: N beams are one, N masses are one; on one seam face of a ring a shell has no
    image in the model, and all copies of it stay."""
    sector = ring(6, inner=0.0)
    axis = np.flatnonzero(np.linalg.norm(sector.points[:, :2], axis=1) == 0.0).tolist()
    face = np.flatnonzero((np.abs(sector.points[:, 1]) < 1e-12)
                          & (sector.points[:, 0] > 0)).tolist()  # fmt: skip
    web = [axis[0], face[0], face[1], axis[1]]
    sector = sector.plus([(LINE, axis[:2]), (VERTEX, [axis[0]]), (QUAD, web), (VERTEX, [face[0]])])
    body = expand(case_of(tmp_path, sector, cyclic(6)))
    check_same_mesh(body, whole_body(sector, cyclic(6), 1e-6), sector)
    times = np.bincount(body.cell_data["sector_cell"])
    np.testing.assert_array_equal(times[-4:], [1, 1, 6, 6])


def test_a_web_modelled_on_both_faces_of_a_seam_is_one(tmp_path: Path) -> None:
    """The second face's shell is the turned first face's: N remain of 2 N."""
    sector = ring(6, (1, 1, 1))
    angle = np.round(np.rad2deg(np.arctan2(sector.points[:, 1], sector.points[:, 0])))
    webs = [(QUAD, (f := np.flatnonzero(angle == a).tolist())[:2] + f[:1:-1]) for a in (0.0, 60.0)]
    sector = sector.plus(webs)
    body = expand(case_of(tmp_path, sector, cyclic(6)))
    check_same_mesh(body, whole_body(sector, cyclic(6), 1e-6), sector)
    assert (body.celltypes == QUAD).sum() == 6


def test_values_of_cells_in_the_cut_plane(tmp_path: Path) -> None:
    """Resultants of the two halves add, thickness does not, since half the web is modelled; the
    normal component of a polar vector cancels."""
    sector = with_web()
    m = len(sector.cells)
    force = np.random.default_rng(3).normal(size=(m, 3))
    tables = {
        **HALF,
        "fields": {
            "force": {"kind": "polar vector", "seam": "sum"},
            "thickness": {"kind": "scalar", "follows": "body"},
        },
    }
    thickness = np.arange(1.0, m + 1)
    data = {"force": force, "thickness": thickness}
    body = expand(case_of(tmp_path, sector, tables, cell_data=data))
    which, copy = body.cell_data["sector_cell"], body.cell_data["copy"]
    np.testing.assert_array_equal(body.cell_data["thickness"], thickness[which])
    once = np.bincount(which)[which] == 1
    want = np.where(once[:, None], [0.0, 2.0, 2.0], 1.0) * force[which]
    want[~once & (copy == 1), 0] *= -1
    np.testing.assert_allclose(body.cell_data["force"], want, atol=1e-15)


def test_two_springs_between_the_same_nodes(tmp_path: Path) -> None:
    """Two cells on the same nodes of the cut plane: each is one with its own image."""
    sector = box((1, 1, 1))
    ends = np.flatnonzero(sector.points[:, 0] == 0.0)[:2].tolist()
    sector = sector.plus([(LINE, ends), (LINE, ends)])
    force = np.zeros((3, 3))
    force[1:] = [[0, 1, 0], [0, 0, 5]]
    tables = {**HALF, "fields": {"force": {"kind": "polar vector", "seam": "sum"}}}
    body = expand(case_of(tmp_path, sector, tables, cell_data={"force": force}))
    springs = body.celltypes == LINE
    np.testing.assert_array_equal(body.cell_data["sector_cell"][springs], [1, 2])
    np.testing.assert_array_equal(body.cell_data["force"][springs], [[0, 2, 0], [0, 0, 10]])


def test_loose_nodes(tmp_path: Path) -> None:
    """A node that no cell uses (a remote point) is copied, and merged where it is on a seam."""
    sector = ring(5, inner=0.0)
    extra = np.array([[0.0, 0.0, 5.0], [3.0, 1.0, 0.0]])
    sector = Sector(np.vstack([sector.points, extra]), sector.cells)
    body = expand(case_of(tmp_path, sector, cyclic(5)))
    check_same_mesh(body, whole_body(sector, cyclic(5), 1e-6), sector)
    times = np.bincount(body.point_data["sector_point"])
    np.testing.assert_array_equal(times[-2:], [1, 5])


# --- where recovered values are not averaged ----------------------------------------------------


def test_recovered_values_are_not_averaged_across_parts(tmp_path: Path) -> None:
    """Where copies join different parts nothing is averaged (solvers average within a part only,
    common practice), and the mesh is joined all the same; an interface that runs through the seam
    does not hinder."""
    sector = ring(5, (2, 2, 1))
    centres = np.array([sector.points[n].mean(axis=0) for _, n in sector.cells])
    hoop = np.arctan2(centres[:, 1], centres[:, 0]) > np.pi / 5
    radial = np.hypot(centres[:, 0], centres[:, 1]) > 1.4
    rng = np.random.default_rng(1)
    stress = rng.normal(size=(len(sector.points), 6))
    for number, (parts, merged) in enumerate(((hoop, False), (radial, True))):
        body = expand(
            case_of(tmp_path, sector, cyclic(5), {"stress": stress}, {"part": parts.astype(int)},
                    name=f"sector{number}")
        )  # fmt: skip
        own = body.point_data["stress"][: len(sector.points)]
        check_same_mesh(body, whole_body(sector, cyclic(5), 1e-6), sector)
        if merged:
            assert (own != stress).any()
        else:
            np.testing.assert_array_equal(own, stress)
            assert "'part'" in " ".join(body.field_data["assumptions"])


@pytest.mark.parametrize(("slope", "merged"), [(0.0, True), (0.1, True), (1.0, False)])
def test_recovered_values_are_not_averaged_over_a_fold(slope, merged, tmp_path: Path) -> None:
    """A roof of shells whose ridge is in the cut plane; almost flat it is averaged."""
    points = [[x, y, -slope * x] for x in (0.0, 1.0, 2.0) for y in (0.0, 1.0)]
    sector = Sector(np.array(points), [(QUAD, [0, 2, 3, 1]), (QUAD, [2, 4, 5, 3])])
    stress = np.random.default_rng(1).normal(size=(6, 6))
    body = expand(case_of(tmp_path, sector, HALF, {"stress": stress}))
    assert body.n_points == 10
    own = body.point_data["stress"][:6]
    if merged:
        signs = np.array([1, 1, 1, 0, 1, 0])  # xy and zx cancel in the plane x = 0
        np.testing.assert_allclose(own[:2], stress[:2] * signs, atol=1e-15)
    else:
        np.testing.assert_array_equal(own, stress)
        assert "fold" in " ".join(body.field_data["assumptions"])


def test_a_web_under_a_skin_is_joined_whatever_else_is_in_the_file(tmp_path: Path) -> None:
    """A T section of shells, its web in the cut plane: the web stands there once and forces add up,
    with and without a recovered stress beside them."""
    points = [[x, y, 0.0] for x in (0.0, 1.0) for y in (0.0, 1.0)]
    points += [[0.0, 0.0, -1.0], [0.0, 1.0, -1.0]]
    sector = Sector(np.array(points), [(QUAD, [0, 2, 3, 1]), (QUAD, [0, 1, 5, 4])])
    reaction = {"reaction": np.tile([0.0, 0.0, 1.0], (6, 1))}
    for data in (reaction, {**reaction, "stress": np.ones((6, 6))}):
        body = expand(case_of(tmp_path, sector, HALF, data))
        assert (body.n_points, body.n_cells) == (8, 3)
        np.testing.assert_array_equal(body.point_data["reaction"][:2, 2], [2.0, 2.0])


# --- coincident nodes ---------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("tables", "inner", "outer"),
    [
        (cyclic(5), ring(5, inner=1.0, outer=1.5, lean=0.2), ring(5, inner=1.5, lean=0.2)),
        (cyclic(5), ring(5, inner=0.0, outer=1.5), ring(5, inner=1.5)),
        (with_planes(cyclic(4), "y"), ring(4, outer=1.5, part=0.5), ring(4, inner=1.5, part=0.5)),
        (HALF, box((2, 1, 1)), box((2, 1, 1), corner=(0, 1, 0))),
        (with_planes(cyclic(3), "z"), ring(3, outer=1.5), ring(3, inner=1.5)),
    ],
    ids=["ring in ring", "pie in ring", "half sectors", "boxes", "half height"],
)
def test_contact_pairs_stay_two(tables: Tables, inner, outer, tmp_path: Path) -> None:
    """Two pieces that touch with coincident nodes are merged each with its own copies."""
    sector = inner.beside(outer)
    part = np.r_[np.zeros(len(inner.points)), np.ones(len(outer.points))]
    body = expand(case_of(tmp_path, sector, tables))
    whole = whole_body(sector, tables, 1e-6, part)
    check_same_mesh(body, whole, sector, part)
    merged = len(np.unique(np.round(body.points, 6), axis=0))
    assert merged < body.n_points, "the pair is there, and it is two"


def test_a_slit_on_the_seam_cannot_be_told(tmp_path: Path) -> None:
    """Coincident nodes of one connected piece on a seam: which continues in the next copy?"""
    inner, outer = ring(5, (1, 3, 1), outer=1.5), ring(5, (1, 3, 1), inner=1.5)
    sector = inner.beside(outer)
    x = sector.points
    angle = np.arctan2(x[:, 1], x[:, 0])
    middle = np.flatnonzero(np.isclose(np.hypot(x[:, 0], x[:, 1]), 1.5) & (angle > 0.2)
                            & (angle < 1.0))  # fmt: skip
    first = {tuple(np.round(x[n], 9)): int(n) for n in middle[::-1]}
    join = {int(n): first[tuple(np.round(x[n], 9))] for n in middle}
    cells = [(t, [join.get(n, n) for n in nodes]) for t, nodes in sector.cells]
    with pytest.raises(InputError, match="cannot be told") as caught:
        expand(case_of(tmp_path, Sector(x, cells), cyclic(5)))
    assert "same connected piece" in str(caught.value)
    assert "output.merge = false" in str(caught.value)


# --- tolerance ----------------------------------------------------------------------------------


@pytest.mark.parametrize("tables", [HALF, QUARTER, cyclic(12)], ids=["half", "quarter", "ring"])
def test_single_precision_far_from_the_origin(tables: Tables, tmp_path: Path) -> None:
    """float32 at 1000: neighbouring numbers are 6e-5 apart, the seam is found all the same."""
    sector = ring(12, (2, 2, 2)) if "cyclic" in tables else box((2, 2, 2))
    R, _ = somewhere()
    t = np.array([1000.0, -600.0, 350.0])
    moved, moved_tables = sector.moved(R, t), placed(tables, R, t)
    body = expand(case_of(tmp_path, moved.as_type(np.float32), moved_tables))
    assert body.points.dtype == np.float32
    whole = whole_body(moved, moved_tables, 1e-6)
    number = check_same_mesh(body, whole, moved)
    assert np.abs(body.points - whole.points[number]).max() < 5e-4


def test_coordinates_that_are_too_coarse(tmp_path: Path) -> None:
    t = np.array([1e6, 0.0, 0.0])
    sector = box((4, 2, 2)).moved(np.eye(3), t).as_type(np.float32)
    with pytest.raises(InputError, match="too coarse") as caught:
        expand(case_of(tmp_path, sector, placed(HALF, np.eye(3), t)))
    assert "float32" in str(caught.value)
    assert "double precision" in str(caught.value)


def shaken(sector: Sector, nodes: np.ndarray, by: float, way=None) -> Sector:
    """These nodes moved by a distance, along `way` or in random directions."""
    rng = np.random.default_rng(17)
    v = rng.normal(size=(len(nodes), 3)) if way is None else np.tile(way, (len(nodes), 1))
    v = v / np.linalg.norm(v, axis=1)[:, None]
    points = sector.points.copy()
    points[nodes] += by * v
    return Sector(points, sector.cells)


def shortest_edge(sector: Sector) -> float:
    tree = cKDTree(sector.points)
    return float(tree.query(sector.points, k=2)[0][:, 1].min())


def second_face(sector: Sector, sectors: int) -> np.ndarray:
    x = sector.points
    angle = np.arctan2(x[:, 1], x[:, 0])
    return np.flatnonzero(np.isclose(angle, 2 * np.pi / sectors) & (np.hypot(*x[:, :2].T) > 1e-9))


@pytest.mark.parametrize("part", [0.0, 1e-7, 1e-6, 1e-5])
@pytest.mark.parametrize("name", ["ring", "pie"])
def test_nodes_a_little_off_are_merged(name: str, part: float, tmp_path: Path) -> None:
    """Up to 1e-4 of the local edge, by default; the worst distance is told."""
    sector, tables = CASES[name]
    by = part * shortest_edge(sector)
    off = shaken(sector, second_face(sector, tables["cyclic"]["sectors"]), by)
    plan = prepare(case_of(tmp_path, off, tables))
    assert plan.point_numbering.total == len(whole_body(sector, tables, 1e-6).points)
    assert plan.seams.worst_distance == pytest.approx(by, rel=1e-3, abs=1e-12)
    assert plan.seams.worst_distance <= plan.seams.tolerance[1]


@pytest.mark.parametrize("part", [1e-3, 1e-2])
@pytest.mark.parametrize("name", ["half box", "ring", "pie"])
def test_nodes_farther_off_are_merged_on_request(name: str, part: float, tmp_path: Path) -> None:
    """Ten to a hundred times the default tolerance: kept apart and said, or merged if asked."""
    sector, tables = CASES[name]
    edge = shortest_edge(sector)
    if name == "half box":
        nodes, way = np.flatnonzero(sector.points[:, 0] == 0.0), [1.0, 0.0, 0.0]
    else:
        nodes, way = second_face(sector, tables["cyclic"]["sectors"]), None
    nodes = nodes[1::2]
    off = shaken(sector, nodes, part * edge, way)
    whole = whole_body(sector, tables, 1e-6)
    plan = prepare(case_of(tmp_path, off, tables))
    assert plan.point_numbering.total == len(whole.points) + len(nodes) * (
        1 if name == "half box" else tables["cyclic"]["sectors"]
    )
    told = [n for n in plan.notes if "not merged" in n]
    assert told, "an open seam must be told"
    assert "seam.tolerance" in told[0]
    asked = {**tables, "seam": {"tolerance": 3.0 * part * edge}}
    plan = prepare(case_of(tmp_path, off, asked))
    assert plan.point_numbering.total == len(whole.points)
    assert plan.seams.worst_distance == pytest.approx(
        part * edge * (2.0 if name == "half box" else 1.0), rel=1e-3
    )


def test_the_tolerance_is_that_of_the_local_edge(tmp_path: Path) -> None:
    """2e-5 off the plane is nothing to edges of 1, and far to edges of 0.01 in the same model."""
    coarse, fine = box((1, 1, 1)), box((1, 1, 1), (0.01, 0.01, 0.01), corner=(0, 5, 0))
    sector = coarse.beside(fine)
    nodes = np.flatnonzero(sector.points[:, 0] == 0.0)
    plan = prepare(case_of(tmp_path, shaken(sector, nodes, 2e-5, [1.0, 0.0, 0.0]), HALF))
    assert plan.point_numbering.merged == 4
    assert set(plan.seams.nodes.items.tolist()) == set(nodes[:4].tolist())
    assert plan.seams.worst_distance == pytest.approx(4e-5, rel=1e-6)
    assert any("4 nodes lie close to" in n and "not merged" in n for n in plan.notes)


@pytest.mark.parametrize("part", [1e-6, 1e-3, 1e-2])
def test_nodes_a_little_beyond_the_plane(part: float, tmp_path: Path) -> None:
    """On the wrong side of the plane: merged within the tolerance, else refused with the node."""
    sector, tables = CASES["half box"]
    edge = shortest_edge(sector)
    nodes = np.flatnonzero(sector.points[:, 0] == 0.0)[1::2]
    off = shaken(sector, nodes, part * edge, [-1.0, 0.0, 0.0])
    total = len(whole_body(sector, tables, 1e-6).points)
    if part > 1e-4:
        with pytest.raises(InputError, match="both sides of plane 'plane 1'") as caught:
            prepare(case_of(tmp_path, off, tables))
        assert f"{len(nodes)} of {len(sector.points)} nodes" in str(caught.value)
        assert "seam.tolerance" in str(caught.value)
        tables = {**tables, "seam": {"tolerance": 3.0 * part * edge}}
    plan = prepare(case_of(tmp_path, off, tables))
    assert plan.point_numbering.total == total
    assert plan.seams.worst_distance == pytest.approx(2.0 * part * edge, rel=1e-6)


@pytest.mark.parametrize("name", ["half box", "ring"])
def test_tolerance_above_a_tenth_of_the_edge(name: str, tmp_path: Path) -> None:
    sector, tables = CASES[name]
    edge = shortest_edge(sector)
    with pytest.raises(InputError, match="more than a tenth of the shortest edge") as caught:
        prepare(case_of(tmp_path, sector, {**tables, "seam": {"tolerance": 0.12 * edge}}))
    assert "seam.tolerance" in str(caught.value)
    prepare(case_of(tmp_path, sector, {**tables, "seam": {"tolerance": 0.08 * edge}}))


def test_720_sectors(tmp_path: Path) -> None:
    """A ring of 720: radial and axial nodes of the ring times sectors, and it closes."""
    sector = ring(720, (2, 1, 1), inner=1.0, outer=1.02, height=0.01)
    body = expand(case_of(tmp_path, sector, cyclic(720)))
    assert body.n_points == 720 * 3 * 2
    assert body.n_cells == 720 * 2
    radius = np.hypot(body.points[:, 0], body.points[:, 1])
    assert set(np.round(radius, 6)) == set(np.round(np.hypot(*sector.points[:, :2].T), 6))
    surface = body.extract_surface(algorithm=None)
    assert surface.n_open_edges == 0
    assert surface.split_bodies().n_blocks == 1


def test_720_sectors_to_the_axis(tmp_path: Path) -> None:
    sector = ring(720, (3, 1, 1), inner=0.0, outer=1.0, height=0.1)
    body = expand(case_of(tmp_path, sector, cyclic(720)))
    assert body.n_points == 2 * (1 + 720 * 3)
    assert (np.hypot(body.points[:, 0], body.points[:, 1]) == 0.0).sum() == 2


# --- sectors that do not tile -------------------------------------------------------------------


@pytest.mark.parametrize(
    ("sector", "tables", "words"),
    [
        (box((2, 1, 1), corner=(-0.3, 0, 0)), HALF, ["both sides of plane 'plane 1'", "node"]),
        (box((2, 2, 1), corner=(0, -0.2, 0)), QUARTER, ["both sides of plane 'plane 2'"]),
        (
            ring(360, (1, 1, 1), part=72),
            wedge_planes(72),
            ["'plane 1' and 'plane 2' meet at 72 degrees", "more than once"],
        ),
        (
            ring(360, (1, 6, 1), part=120),
            wedge_planes(120),
            ["120", "more than once"],
        ),
        (ring(8), cyclic(7), ["45 degrees apart", "51.4286 degrees", "sectors = 8 would fit"]),
        (ring(8, inner=0.0), cyclic(7), ["45 degrees apart", "sectors = 8 would fit"]),
        (ring(5, inner=0.0), cyclic(6), ["72 degrees apart", "sectors = 5 would fit"]),
        (ring(8), with_planes(cyclic(8), "y"), ["mirror plane", "half a sector, 22.5 degrees"]),
        (
            ring(8, part=0.5), with_planes(cyclic(4), "y"),
            ["22.5 degrees apart", "45 degrees", "sectors = 8 would fit"],
        ),
        (box((2, 2, 2), corner=(0.1, 0, 0)), HALF, ["No node lies on plane 'plane 1'", "0.1 away"]),
    ],
    ids=["one side", "second plane", "72 degrees", "120 degrees", "wrong N", "wrong N, pie",
         "N too large, pie", "whole sector with a plane", "half sectors, wrong N", "plane beside"],
)  # fmt: skip
def test_models_that_do_not_tile(sector: Sector, tables, words, tmp_path: Path) -> None:
    with pytest.raises(InputError) as caught:
        prepare(case_of(tmp_path, sector, tables))
    for word in words:
        assert word in str(caught.value)


def test_a_model_that_stands_clear(tmp_path: Path) -> None:
    """Parts that do not touch their copies are allowed, and that is said; a point mass between
    them has no edge that a distance could be compared with."""
    sector = box((4, 1, 1), corner=(3, 0, 0))
    body = expand(case_of(tmp_path, sector, HALF))
    assert body.n_points == 2 * len(sector.points)
    assert "stays clear of plane 'plane 1'" in " ".join(body.field_data["assumptions"])
    mass = Sector(np.array([[1.0, 0.0, 0.0]]), [(VERTEX, [0])])
    body = expand(case_of(tmp_path, sector.beside(mass), HALF))
    assert body.n_points == 2 * len(sector.points) + 2
    assert "stays clear of plane 'plane 1'" in " ".join(body.field_data["assumptions"])


# --- values at seams ----------------------------------------------------------------------------

KIND_SIZES = {"scalar": 1, "pseudoscalar": 1, "polar vector": 3, "axial vector": 3, "tensor": 9}
SIX = ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0))


def full(kind: str, values: np.ndarray, engineering: bool = False) -> np.ndarray:
    """Stored components to the full array of each row."""
    if kind in ("scalar", "pseudoscalar"):
        return values.reshape(len(values))
    if kind == "symmetric tensor":
        out = np.empty((len(values), 3, 3))
        for (i, j), column in zip(SIX, values.T, strict=True):
            half = 0.5 if engineering and i != j else 1.0
            out[:, i, j] = out[:, j, i] = half * column
        return out
    return values.reshape((len(values),) + ((3, 3) if kind == "tensor" else (3,)))


def stored(kind: str, T: np.ndarray, engineering: bool = False) -> np.ndarray:
    if kind == "symmetric tensor":
        return np.stack([T[:, i, j] * (2.0 if engineering and i != j else 1.0) for i, j in SIX], 1)
    return T.reshape(len(T), -1)


def carried(kind: str, M: np.ndarray, T: np.ndarray) -> np.ndarray:
    """A full array turned by the matrix of a copy; M (3, 3) or (n, 3, 3)."""
    M = np.broadcast_to(M, (len(T), 3, 3))
    odd = kind in ("pseudoscalar", "axial vector")
    sign = np.sign(np.linalg.det(M)) if odd else np.ones(len(T))
    if T.ndim == 1:
        return sign * T
    if T.ndim == 2:
        return sign[:, None] * np.einsum("nij,nj->ni", M, T)
    return np.einsum("nia,njb,nab->nij", M, M, T)


def scattered(whole: Whole, kind: str, T: np.ndarray, weights=None) -> tuple[np.ndarray, ...]:
    """Sum of the copies' values, and of their weights, at every merged node: np.add.at."""
    total = np.zeros((len(whole.points), *T.shape[1:]))
    count = np.zeros(len(whole.points))
    w = np.ones(len(T)) if weights is None else weights
    for M, chi, ids in zip(whole.matrices, whole.chi, whole.ids, strict=True):
        moved = chi * carried(kind, M[:3, :3], T)
        np.add.at(total, ids, moved * w.reshape((-1,) + (1,) * (T.ndim - 1)))
        np.add.at(count, ids, w)
    return total, count.reshape((-1,) + (1,) * (T.ndim - 1))


def antisymmetric(tables: Tables) -> Tables:
    """The first plane antisymmetric, or N/2 nodal diameters."""
    if tables.get("mirror"):
        first, *others = tables["mirror"]
        return {**tables, "mirror": [{**first, "load": "antisymmetric"}, *others]}
    N = tables["cyclic"]["sectors"]
    return {"cyclic": {**tables["cyclic"], "nodal_diameters": N // 2}}


DIMENSION = {VERTEX: 0, LINE: 1, TRIANGLE: 2, QUAD: 2, POLYGON: 2} | dict.fromkeys(SOLIDS, 3)


def elements_at(sector: Sector) -> np.ndarray:
    """Elements that a nodal mean is taken over: those of the highest dimension at each node."""
    counts = np.zeros((4, len(sector.points)))
    for vtk_id, nodes in sector.cells:
        counts[DIMENSION[vtk_id], nodes] += 1
    highest = [np.flatnonzero(c)[-1] for c in counts.T]
    return counts[highest, np.arange(len(sector.points))]


def disc() -> Sector:
    """Shells alone: a plane ring sector of triangles, other numbers of them at its two faces."""
    sector = ring(5, (2, 2, 1), lean=0.3)
    at = np.flatnonzero(sector.points[:, 2] == 0.0)
    new = {int(k): i for i, k in enumerate(at)}
    quads = [[new[k] for k in nodes[:4]] for _, nodes in sector.cells]
    cells = [(TRIANGLE, [q[a] for a in t]) for q in quads for t in ((0, 1, 2), (0, 2, 3))]
    return Sector(sector.points[at] * [1, 1, 0], cells)


def skinned() -> Sector:
    """Tetrahedra with shells and beams on some of them, more of them at one face."""
    hexahedra = ring(5, lean=0.4)
    first, last = hexahedra.cells[0][1], hexahedra.cells[-1][1]
    return tetrahedra(hexahedra).plus(
        [(QUAD, first[:4]), (TRIANGLE, first[4:7]), (LINE, first[:2]), (QUAD, last[4:])]
    )


LOADED: dict[str, tuple[Sector, Tables]] = {
    name: CASES[name]
    for name in ("half box", "eighth box", "ring of tetrahedra", "pie", "half height",
                 "half sectors to the axis", "quarter of a sector")
} | {
    "half box, odd": (CASES["half box"][0], antisymmetric(CASES["half box"][1])),
    "pie, h = 3": (CASES["pie"][0], antisymmetric(CASES["pie"][1])),
    "pie of two, h = 1": (CASES["pie of two"][0], antisymmetric(CASES["pie of two"][1])),
    "half height, odd": (CASES["half height"][0], antisymmetric(CASES["half height"][1])),
    "web": (with_web(), QUARTER),
    "disc of triangles": (disc(), cyclic(5)),
    "tetrahedra with a skin": (skinned(), cyclic(5)),
}  # fmt: skip

FIELDS = [
    ("scalar", False), ("pseudoscalar", False), ("polar vector", False), ("axial vector", False),
    ("tensor", False), ("symmetric tensor", False), ("symmetric tensor", True),
]  # fmt: skip


@pytest.mark.parametrize("put", ["as built", "anywhere"])
@pytest.mark.parametrize("name", LOADED)
def test_values_against_a_scatter_over_the_whole_body(name: str, put: str, tmp_path: Path) -> None:
    """Forces add, primary values agree (their mean), recovered values are means weighted by the
    number of elements: random values of every kind, at every merged node."""
    sector, tables = LOADED[name]
    if put == "anywhere":
        R, t = somewhere()
        sector, tables = sector.moved(R, t), placed(tables, R, t)
    rng = np.random.default_rng(4)
    n = len(sector.points)
    declared: dict[str, Any] = {}
    data: dict[str, np.ndarray] = {}
    for number, (kind, engineering) in enumerate(FIELDS):
        for seam in ("sum", "agree", "recovered"):
            key = f"f{number}_{seam}"
            declared[key] = {"kind": kind, "seam": seam}
            if engineering:
                declared[key]["shear"] = "engineering"
            size = KIND_SIZES.get(kind, 6)
            data[key] = rng.normal(size=(n, size) if size > 1 else n)
    case = {**tables, "fields": declared, "seam": {"limit": 100.0}}
    body = expand(case_of(tmp_path, sector, case, data))
    whole = whole_body(sector, tables, 1e-6)
    number_of = numbers_in(whole, body)
    weights = elements_at(sector)
    for number, (kind, engineering) in enumerate(FIELDS):
        for seam in ("sum", "agree", "recovered"):
            key = f"f{number}_{seam}"
            T = full(kind, data[key], engineering)
            total, count = scattered(whole, kind, T, weights if seam == "recovered" else None)
            want = stored(kind, total if seam == "sum" else total / count, engineering)
            found = body.point_data[key].reshape(body.n_points, -1)
            np.testing.assert_allclose(found, want[number_of], atol=1e-12, err_msg=key)


@pytest.mark.parametrize("name", ["eighth box", "ring of tetrahedra", "pie, h = 3", "pie"])
def test_recovered_stress_is_the_nodal_mean_of_the_whole_body(name: str, tmp_path: Path) -> None:
    """Each element has its own value at its corners; the whole body's nodal mean over all
    elements is what a solver would print (common practice); the unweighted mean misses it."""
    sector, tables = LOADED[name]
    rng = np.random.default_rng(9)
    corner = [full("symmetric tensor", rng.normal(size=(len(n), 6))) for _, n in sector.cells]
    n = len(sector.points)
    own = np.zeros((n, 3, 3))
    for (_, nodes), T in zip(sector.cells, corner, strict=True):
        np.add.at(own, nodes, T)
    own /= sector.cells_at_nodes()[:, None, None]
    body = expand(case_of(tmp_path, sector, tables, {"stress": stored("symmetric tensor", own)}))
    whole = whole_body(sector, tables, 1e-6)
    total = np.zeros((len(whole.points), 3, 3))
    count = np.zeros(len(whole.points))
    for M, chi, ids in zip(whole.matrices, whole.chi, whole.ids, strict=True):
        for (_, nodes), T in zip(sector.cells, corner, strict=True):
            np.add.at(total, ids[nodes], chi * carried("symmetric tensor", M[:3, :3], T))
            np.add.at(count, ids[nodes], 1)
    want = stored("symmetric tensor", total / count[:, None, None])
    np.testing.assert_allclose(body.point_data["stress"], want[numbers_in(whole, body)], atol=1e-13)
    plain = np.divide(*scattered(whole, "symmetric tensor", own))
    missed = np.abs(plain - total / count[:, None, None]).max() / np.abs(own).max()
    assert (missed > 0.05) == (name == "ring of tetrahedra"), "the two faces have other elements"


def bases(points: np.ndarray, point, axis, at_zero) -> np.ndarray:
    """Radial, hoop and axial directions as columns; on the axis the radial one is `at_zero`."""
    d = points - point
    radial = d - np.outer(d @ axis, axis)
    length = np.linalg.norm(radial, axis=1)
    radial[length < 1e-9] = at_zero
    radial /= np.where(length < 1e-9, 1.0, length)[:, None]
    axial = np.tile(axis, (len(points), 1))
    return np.stack([radial, np.cross(axial, radial), axial], axis=2)


@pytest.mark.parametrize("axis", ["z", "x"], ids=["its own axis", "another axis"])
@pytest.mark.parametrize("name", LOADED)
def test_values_in_a_cylindrical_frame(name: str, axis: str, tmp_path: Path) -> None:
    """To global at the point, on to the copies, added or averaged there, and back at the image:
    each step written out here; also on the axis, where the radial direction is that of angle 0."""
    sector, tables = LOADED[name]
    rng = np.random.default_rng(6)
    n = len(sector.points)
    a = np.eye(3)["xyz".index(axis)]
    at_zero = np.eye(3)[("xyz".index(axis) + 1) % 3]
    declared, data = {}, {}
    for kind, size in (("polar vector", 3), ("axial vector", 3), ("symmetric tensor", 6)):
        for seam in ("sum", "recovered"):
            key = f"{kind} {seam}"
            declared[key] = {"kind": kind, "seam": seam, "frame": "local"}
            data[key] = rng.normal(size=(n, size))
    frames = {"local": {"type": "cylindrical", "axis": axis}}
    body = expand(case_of(tmp_path, sector, {**tables, "fields": declared, "frames": frames}, data))
    whole = whole_body(sector, tables, 1e-6)
    number = numbers_in(whole, body)
    weights = elements_at(sector)
    here = bases(sector.points, np.zeros(3), a, at_zero)
    there = bases(whole.points, np.zeros(3), a, at_zero)
    for key, values in data.items():
        kind, seam = key.rsplit(" ", 1)
        T = carried(kind, here, full(kind, values))
        total, count = scattered(whole, kind, T, weights if seam == "recovered" else None)
        T = total if seam == "sum" else total / count
        want = stored(kind, carried(kind, there.transpose(0, 2, 1), T))
        np.testing.assert_allclose(body.point_data[key], want[number], atol=1e-11, err_msg=key)


def test_axisymmetric_storage_in_a_cylindrical_frame(tmp_path: Path) -> None:
    """Radial, hoop, axial and r-z shear stress: a plane through the axis leaves all four alone.
    Four stored components cannot hold the global tensor at every angle, so the way there must
    not lose what they have no place for."""
    sector = box((2, 1, 1), corner=(0, 1, 0))
    stress = np.random.default_rng(7).normal(size=(len(sector.points), 4))
    tables = {
        **HALF,
        "frames": {"local": {"type": "cylindrical"}},
        "fields": {
            "stress": {"kind": "symmetric tensor", "components": "rr tt zz rz", "frame": "local"}
        },
    }
    body = expand(case_of(tmp_path, sector, tables, {"stress": stress}))
    which = body.point_data["sector_point"]
    np.testing.assert_allclose(body.point_data["stress"], stress[which], atol=1e-14)


def test_point_forces_on_the_axis(tmp_path: Path) -> None:
    """Statics: N turned copies of a force on the axis add to N times its axial part; at N = 2
    with h = 1 the lateral parts add and the axial ones cancel; a moment does the opposite of a
    force under a plane across the axis."""
    sector = ring(6, inner=0.0)
    centre = int(np.flatnonzero(np.linalg.norm(sector.points, axis=1) == 0.0)[0])
    force = np.zeros((len(sector.points), 3))
    force[centre] = [3.0, 5.0, 7.0]
    fields = {"force": {"kind": "polar vector", "seam": "sum"}}
    body = expand(case_of(tmp_path, sector, {**cyclic(6), "fields": fields}, {"force": force}))
    at = int(np.flatnonzero(np.linalg.norm(body.points, axis=1) == 0.0)[0])
    np.testing.assert_allclose(body.point_data["force"][at], [0, 0, 42], atol=1e-13)
    np.testing.assert_allclose(body.point_data["force"].sum(axis=0), [0, 0, 42], atol=1e-13)

    two = ring(2, (2, 4, 1), inner=0.0)
    force = np.zeros((len(two.points), 3))
    force[np.linalg.norm(two.points, axis=1) == 0.0] = [3.0, 5.0, 7.0]
    tables = {**cyclic(2, nodal_diameters=1), "fields": fields}
    body = expand(case_of(tmp_path, two, tables, {"force": force}))
    at = int(np.flatnonzero(np.linalg.norm(body.points, axis=1) == 0.0)[0])
    np.testing.assert_allclose(body.point_data["force"][at], [6, 10, 0], atol=1e-14)

    tables = {**with_planes(cyclic(6), "z"), "fields": {
        **fields, "moment": {"kind": "axial vector", "seam": "sum"}}}  # fmt: skip
    both = np.zeros((len(sector.points), 3))
    both[centre] = [3.0, 5.0, 7.0]
    body = expand(case_of(tmp_path, sector, tables, {"force": both, "moment": both}))
    at = int(np.flatnonzero(np.linalg.norm(body.points, axis=1) == 0.0)[0])
    np.testing.assert_allclose(body.point_data["force"][at], [0, 0, 0], atol=1e-13)
    np.testing.assert_allclose(body.point_data["moment"][at], [0, 0, 84], atol=1e-13)


def test_a_mass_is_that_of_all_its_shares(tmp_path: Path) -> None:
    """Lumped mass: half on a plane, 1/N on the axis; the body's total is copies times the
    sector's, whatever the load does."""
    sector, tables = LOADED["pie, h = 3"]
    mass = np.random.default_rng(2).uniform(1, 2, size=len(sector.points))
    fields = {"mass": {"kind": "scalar", "seam": "sum", "follows": "body"}}
    body = expand(case_of(tmp_path, sector, {**tables, "fields": fields}, {"mass": mass}))
    assert body.point_data["mass"].sum() == pytest.approx(6 * mass.sum(), rel=1e-13)
    assert body.point_data["mass"].min() > 0


def test_sums_of_cases_are_resolved_case_by_case(tmp_path: Path) -> None:
    """even + 0.5 odd at the plane: each with its own behaviour, then added (linearity)."""
    sector = box((2, 2, 1))
    rng = np.random.default_rng(12)
    loads = {"even": rng.normal(size=(len(sector.points), 3)),
             "odd": rng.normal(size=(len(sector.points), 3))}  # fmt: skip
    for name, force in loads.items():
        case_of(tmp_path, sector, {}, {"reaction": force}, name=name)
    tables = {
        **HALF,
        "case": [{"name": "even", "file": "even.vtu"},
                 {"name": "odd", "file": "odd.vtu", "load": "antisymmetric"}],
        "sum": [{"name": "wind", "terms": {"even": 1.0, "odd": 0.5}}],
    }  # fmt: skip
    body = expand(case_of(tmp_path, sector, tables), "wind")
    want = 0.0
    for name, factor, word in (("even", 1.0, "symmetric"), ("odd", 0.5, "antisymmetric")):
        whole = whole_body(sector, {"mirror": [{"normal": "x", "load": word}]}, 1e-6)
        want = want + factor * scattered(whole, "polar vector", loads[name])[0]
    number = numbers_in(whole, body)
    np.testing.assert_allclose(body.point_data["reaction"], want[number], atol=1e-14)


def test_open_seam_is_refused_with_node_and_values(tmp_path: Path) -> None:
    """A primary field that does not vanish where it must: told with node, values and remedy."""
    sector = box((2, 2, 2))
    u = np.zeros((len(sector.points), 3))
    u[:, 1] = 1.0
    plane = np.flatnonzero(sector.points[:, 0] == 0.0)
    u[plane[3]] = [0.25, 1.0, 0.0]  # moves off the plane
    with pytest.raises(CheckFailed, match="'displacement' does not close") as caught:
        expand(case_of(tmp_path, sector, HALF, {"displacement": u}))
    message = str(caught.value)
    for word in (f"node {plane[3]} ", "(0.25, 1, 0)", "(-0.25, 1, 0)", "1 of 9 seam nodes"):
        assert word in message
    kept = {**HALF, "seam": {"open": "keep apart"}}
    body = expand(case_of(tmp_path, sector, kept, {"displacement": u}))
    assert body.n_points == 2 * len(sector.points) - (len(plane) - 1)
    wide = np.abs(body.point_data["displacement"][:, 0]) == 0.25
    np.testing.assert_allclose(np.sort(body.point_data["displacement"][wide, 0]), [-0.25, 0.25])
