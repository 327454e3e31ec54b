"""`seamfold check` where nodes of a seam do not meet: moved nodes, other meshes, gaps.

Oracle: displacements linear in space that follow the group exactly, for which interpolation on flat
linear faces is exact (common practice), and the distances by which the test itself moved nodes.
Fields under a turn by 90 degrees: u = (x, y, z) keeps, u = (x, -y, 0) changes its sign (h = 2), and
a constant u = (1, i, 0) takes exp(i pi/2) (h = 1), each by multiplying out R u(R^-1 x).
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from demo_cases.solver import Mesh, block, quadratic, tetrahedra
from expander.errors import InputError
from tests.against_outside.bodies import SKEW, Floats, Model, mirrors, miss
from tests.against_outside.checked import CELLS, Found, found_in, in_skew, skewed

SMALL = 1e-3  # so that displacements are those of a linear analysis

# --- nodes moved off the seam ---------------------------------------------------------------------

EDGE = 0.25  # of the meshes below at the seam
MOVES = [1e-7, 1e-6, 1e-5, 4e-5, 2e-4, 1e-3, 1e-2]  # of an edge
TOLERANCE = 1e-4  # of an edge, by the contract: of the distance between a node and its image


def half_box(move, nodes) -> tuple[Mesh, np.ndarray]:
    """A box beside the plane x = 0 with some of its nodes there moved by a vector."""
    mesh = block(4, 4, 4)
    on = np.flatnonzero(mesh.points[:, 0] == 0.0)
    chosen = on if nodes == "all" else on[[12]]  # the middle of the plane
    points = mesh.points.copy()
    points[chosen] += move
    return Mesh(points, mesh.cells, mesh.part), chosen


def symmetric_field(points: Floats) -> Floats:
    """Linear, its normal part odd in x."""
    x, y, z = points.T
    return SMALL * np.stack([0.3 * x, 0.1 + 0.2 * y - 0.4 * z, 0.5 * z + 0.1 * y], axis=1)


def moved_half(tmp_path: Path, move, nodes) -> tuple[Found, np.ndarray]:
    mesh, chosen = half_box(move, nodes)
    model = Model(tmp_path, mesh.points, {12: mesh.cells}).field("displacement", "polar vector")
    model.values(points={"displacement": symmetric_field(mesh.points)})
    return found_in(model.table(mirror=mirrors(("mid", "x", [0, 0, 0]))).write()), chosen


@pytest.mark.parametrize("size", MOVES)
@pytest.mark.parametrize("nodes", ["one", "all"])
def test_nodes_moved_off_a_plane(tmp_path, nodes, size):
    """Inwards along the normal: merged within the tolerance, else told with number and distance."""
    apart = 2 * size * EDGE  # from its image
    if nodes == "all" and apart > TOLERANCE * EDGE:
        # No node is left on the plane: the case cannot be what was meant.
        with pytest.raises(InputError) as refusal:
            moved_half(tmp_path, [size * EDGE, 0, 0], nodes)
        assert "No node lies on plane 'mid'" in str(refusal.value)
        return
    found, chosen = moved_half(tmp_path, [size * EDGE, 0, 0], nodes)
    (seam,) = [s for s in found.facts["seams"] if "mid" in s["name"]]
    if apart <= TOLERANCE * EDGE:
        assert seam["nodes"] == 25
        assert seam["worst_distance"] == pytest.approx(apart, rel=1e-6)
        assert found.verdict == "passed", found.all_findings
        assert found.facts["audit"]["pieces"]["after"] == 1
    else:
        assert seam["nodes"] == 24
        words = found.says("seam nodes")
        assert "1 nodes" in words or "1 node " in words
        assert f"node {chosen[0]}" in words
        assert f"{apart:.3g}" in words
        assert "seam.tolerance" in words
        assert found.verdict != "passed"  # a slit is no small thing


@pytest.mark.parametrize("size", MOVES)
def test_node_moved_across_a_plane(tmp_path, size):
    """Outwards: merged within the tolerance, else refused as a node on the other side."""
    if 2 * size <= TOLERANCE:
        found, _ = moved_half(tmp_path, [-size * EDGE, 0, 0], "one")
        assert found.verdict == "passed", found.all_findings
        return
    with pytest.raises(InputError) as refusal:
        moved_half(tmp_path, [-size * EDGE, 0, 0], "one")
    assert "both sides" in str(refusal.value)
    assert "plane 'mid'" in str(refusal.value)


@pytest.mark.parametrize("size", MOVES)
@pytest.mark.parametrize("nodes", ["one", "all"])
def test_nodes_moved_within_a_plane(tmp_path, nodes, size):
    """Along the plane a node stays its own image: nothing to report."""
    found, _ = moved_half(tmp_path, [0, 0.6 * size * EDGE, 0.8 * size * EDGE], nodes)
    (seam,) = [s for s in found.facts["seams"] if "mid" in s["name"]]
    assert seam["nodes"] == 25
    assert seam["worst_distance"] == 0.0
    assert found.verdict == "passed", found.all_findings


TURN = np.array([[0.0, -1, 0], [1, 0, 0], [0, 0, 1]])


def quarter_ring(u, v, w):
    r, angle = 1 + u, np.pi / 2 * v
    return r * np.cos(angle), r * np.sin(angle), w


def turned_field(points: Floats) -> Floats:
    """Linear, and the same in every quarter: a twist, a growth and a stretch."""
    x, y, z = points.T
    return SMALL * np.stack([0.2 * x - 0.1 * y, 0.1 * x + 0.2 * y, 0.3 + 0.5 * z], axis=1)


@pytest.mark.parametrize("size", MOVES)
@pytest.mark.parametrize("direction", ["normal", "tangential"])
@pytest.mark.parametrize("nodes", ["one", "all"])
def test_nodes_moved_on_a_cyclic_face(tmp_path, nodes, direction, size):
    """Of the second face of four sectors: every node of it is compared or told to be off."""
    mesh = block(4, 4, 4).mapped(quarter_ring)
    on = np.flatnonzero(mesh.points[:, 0] < 1e-9)
    chosen = on if nodes == "all" else on[[12]]
    points = mesh.points.copy()
    points[chosen] += (
        size * EDGE * np.array([1.0, 0, 0] if direction == "normal" else [0, 0.6, 0.8])
    )
    model = Model(tmp_path, points, {12: mesh.cells}).field("displacement", "polar vector")
    model.values(points={"displacement": turned_field(points)})
    model.table(cyclic={"sectors": 4})
    found = found_in(model.write())
    (seam,) = [s for s in found.facts["seams"] if s["kind"] == "sector faces"]
    if size <= TOLERANCE:
        assert (seam["nodes"], seam["pairing"]) == (25, "node to node")
        assert seam["worst_distance"] == pytest.approx(size * EDGE, rel=1e-5)
        assert found.verdict == "passed", found.all_findings
        return
    # Nothing contradicts the case, but the body is not joined, which must be told.
    assert found.verdict != "failed", found.all_findings
    assert all(m["verdict"] in ("closed", "doubtful") for m in found.measures())
    if nodes == "one" or direction == "normal":
        assert found.verdict == "doubtful", found.all_findings
    else:
        assert found.says("another mesh", "not merged")
    assert seam["area"] + seam["area_other_mesh"] + seam["area_apart"] == pytest.approx(1, rel=1e-3)
    if direction == "normal":
        assert f"{size * EDGE:.4g}" in found.says("stands off")
    if nodes == "one":
        words = found.says("seam nodes")
        assert f"{size * EDGE:.3g}" in words
        partner = int(
            np.argmin(np.linalg.norm(mesh.points - mesh.points[chosen[0]] @ TURN, axis=1))
        )
        assert any(f"node {n})" in words for n in (chosen[0], partner))


# --- faces with other meshes ----------------------------------------------------------------------


def unlike(cells: str = "hexa 8", gap: float = 0.0, from_radius: float = 2.0) -> Mesh:
    """A quarter of a ring, radii 1 to 2, height 1, flat faces, whose second face has its nodes at
    other radii and heights than the first, inside `from_radius`.

    Parameters
    ----------
    gap : by which the second face stands back outside `from_radius`, along its normal.
    """

    def place(u, v, w):
        inside = np.clip((from_radius - 1 - u) / 0.25, 0, 1)
        u2 = u + 0.12 * v * np.sin(np.pi * u) * inside
        w2 = w + 0.10 * v * np.sin(np.pi * w) * inside
        x, y, z = quarter_ring(u2, v, w2)
        return x + gap * v * np.clip((u - (from_radius - 1)) / 0.25, 0, 1), y, z

    mesh = block(8, 4, 4).mapped(place)
    return (
        CELLS[cells](mesh)
        if cells in ("hexa 8", "tetra 4")
        else quadratic(mesh if cells == "hexa 20" else tetrahedra(mesh))
    )


def field(h: int, points: Floats) -> np.ndarray:
    x, y, z = points.T
    if h == 0:
        return turned_field(points)
    if h == 2:
        return SMALL * np.stack([x, -y, 0 * z], axis=1)
    return SMALL * np.stack([1 + 0 * x, 1j + 0 * x, 0j * x], axis=1)


def cyclic_case(tmp_path, mesh: Mesh, u: np.ndarray, h: int, skew: bool = False) -> Found:
    moved = in_skew(mesh) if skew else mesh
    u = u @ SKEW.T if skew else u
    model = Model(tmp_path, moved.points, {mesh.shape.vtk_type: mesh.cells})
    if np.iscomplexobj(u):
        model.field("displacement", "polar vector", real="a", imaginary="b")
        model.values(points={"a": u.real, "b": u.imag})
    else:
        model.field("displacement", "polar vector")
        model.values(points={"displacement": u})
    axis = {"axis": SKEW[:, 2], "point": skewed(np.zeros(3))} if skew else {}
    return found_in(model.table(cyclic={"sectors": 4, "nodal_diameters": h, **axis}).write())


def between(found: Found) -> dict:
    (seam,) = [s for s in found.facts["seams"] if s["name"] == "between sectors"]
    return seam


def value(found: Found) -> dict:
    (one,) = [
        m for m in found.measures("displacement")
        if m["measure"] == "value" and m["seam"] == "between sectors"
    ]  # fmt: skip
    return one


def test_fields_follow_the_group():
    """The fields of this test under a turn by a quarter, multiplied out."""
    points = np.random.default_rng(1).normal(size=(20, 3))
    for h in (0, 1, 2):
        carried = field(h, points @ TURN) @ TURN.T  # R f(R^-1 x)
        assert miss(np.abs(np.exp(1j * np.pi / 2 * h) * carried - field(h, points)), 0 * points,
                    1.0) < 1e-12  # fmt: skip


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("skew", [False, True])
@pytest.mark.parametrize("h", [0, 1, 2])
def test_linear_field_closes(tmp_path, h, skew, cells):
    """Interpolation of a linear field on flat faces is exact: closed at round-off."""
    mesh = unlike(cells)
    found = cyclic_case(tmp_path, mesh, field(h, mesh.points), h, skew)
    seam = between(found)
    assert "interpolation" in seam["pairing"]
    assert value(found)["verdict"] == "closed"
    assert value(found)["relative"] < 1e-12
    assert found.load("between")["verdict"] == "closed"
    # The whole face of 1 x 1 either pairs or lies against another mesh; none of it is lost.
    assert seam["area"] + seam["area_other_mesh"] == pytest.approx(1.0, rel=1e-9)
    assert seam["area_apart"] == 0.0
    assert found.says("another mesh")
    assert found.verdict != "failed"


@pytest.mark.parametrize("h", [0, 1, 2])
def test_wrong_h_across_other_meshes(tmp_path, h):
    mesh = unlike()
    for declared in {0, 1, 2} - {h}:
        u = field(h, mesh.points).astype(complex)  # real ones cannot be declared h = 1
        found = cyclic_case(tmp_path, mesh, u, declared)
        assert found.verdict == "failed"
        assert found.load("between")["found"].startswith(f"h = {h}")


@pytest.mark.parametrize("cells", ["hexa 8", "tetra 4"])
@pytest.mark.parametrize("where", ["face", "node"])
def test_jump_is_located(tmp_path, where, cells):
    """A jump of 1e-3 of the largest value, of the second face or of one node in it."""
    mesh = unlike(cells)
    u = field(0, mesh.points)
    size = np.linalg.norm(u, axis=1).max()
    face = np.flatnonzero(np.abs(mesh.points[:, 0]) < 1e-9)
    inside = (np.abs(mesh.points[face, 1] - 1.5) < 0.3) & (np.abs(mesh.points[face, 2] - 0.5) < 0.3)
    chosen = face if where == "face" else face[inside][:1]
    u[chosen, 2] += 1e-3 * size
    found = cyclic_case(tmp_path, mesh, u, 0)
    seen = value(found)
    assert seen["verdict"] == "open"
    assert found.verdict == "failed"
    assert 0.5e-3 < seen["relative"] < 1.1e-3
    if where == "node":  # at the node, or opposite it: no farther than a cell
        at = np.array(seen["position"])
        here = mesh.points[chosen[0]]
        assert min(np.linalg.norm(at - here), np.linalg.norm(TURN @ at - here)) < 0.3
    else:
        assert seen["open_nodes"] > 10


def test_faces_that_match_in_part(tmp_path):
    """The outer half of the face pairs node to node, the inner one does not: both areas."""
    mesh = unlike(from_radius=1.5)
    found = cyclic_case(tmp_path, mesh, field(0, mesh.points), 0)
    seam = between(found)
    assert seam["pairing"] == "node to node and by interpolation"
    assert seam["area"] == pytest.approx(0.5, rel=1e-9)
    assert seam["area_other_mesh"] == pytest.approx(0.5, rel=1e-9)
    assert value(found)["relative"] < 1e-12
    assert "50 %" in found.says("another mesh")


@pytest.mark.parametrize("gap", [0.002, 0.02])
def test_gap(tmp_path, gap):
    """The outer half stands back by a gap: its area and the gap are told, and it is not joined."""
    mesh = unlike(gap=gap, from_radius=1.5)
    found = cyclic_case(tmp_path, mesh, field(0, mesh.points), 0)
    seam = between(found)
    # Cells between the radii 1.5 and 2 (four of eight) have nodes that stand off.
    assert seam["area_apart"] == pytest.approx(0.5, rel=0.01)
    assert seam["area"] + seam["area_other_mesh"] == pytest.approx(0.5, rel=0.01)
    words = found.says("stands off")
    assert f"{gap:.4g}" in words
    assert value(found)["verdict"] == "closed"
