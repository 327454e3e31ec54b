"""Parts of the check one by one: small cases whose numbers are worked out by hand."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from check_cases import clamped, even, half, open_seam, other_mesh, shells, wave
from hypothesis import given
from hypothesis import strategies as st
from meshes import LINE, QUAD, VERTEX, Sector, box, case_of, quadratic, ring, somewhere, tetrahedra

from expander import expand
from expander.audit.rigid import free_motions
from expander.audit.statics import global_vectors, multiplicity, plane_normal
from expander.auditing import audit
from expander.checking.continuity import Continuity, continuity, value_verdict
from expander.checking.declared import CLAMPED, NEITHER, UNTOLD, ZERO, Found
from expander.checking.findings import DOUBTS, FAILS, NOTE, Finding, findings, overall, summed
from expander.checking.gradients import cell_gradients, cell_means
from expander.checking.jumps import jump_at
from expander.checking.neighbours import surroundings
from expander.checking.seamlist import Seam, seams_of
from expander.checking.verdicts import (
    CLOSED,
    DOUBTFUL,
    OPEN,
    TOLD,
    Verdict,
    gravity,
    verdict_of,
    worst_of,
)
from expander.checkup import check
from expander.errors import CheckFailed, InputError
from expander.fields import Field
from expander.frames import Global
from expander.loadcases import Result
from expander.phases import decided
from expander.quantities import quantity
from expander.referencing import referenced
from expander.roles import ROLES, having, plays
from expander.sector import Sector as Read
from expander.sector import read_sector

HALF: dict[str, Any] = {"mirror": [{"name": "mid", "normal": "x"}]}
ODD: dict[str, Any] = {"mirror": [{"name": "mid", "normal": "x", "load": "antisymmetric"}]}


def bar(cells: int) -> Sector:
    """Unit cubes in a row along x from 0; node 4 i + 2 j + k is at (i, j, k)."""
    sector = box((cells, 1, 1))
    return replace(sector, points=np.rint(sector.points * [cells, 1, 1]))


def sector_of(
    folder: Path,
    sector: Sector,
    tables: Mapping[str, Any],
    points: Mapping[str, np.ndarray] | None = None,
    cells: Mapping[str, np.ndarray] | None = None,
    allow_nan: bool = False,
) -> Read:
    case = case_of(folder, sector, tables, points, cells)
    return read_sector(case, allow_nan=allow_nan)


def seen(*arguments: Any, **more: Any) -> Continuity:
    return continuity(sector_of(*arguments, **more))


def the(found: Continuity, measure: str, field: str | None = None) -> Verdict:
    (verdict,) = (
        v for v in found.verdicts if v.measure == measure and field in (None, v.field)
    )  # fmt: skip
    return verdict


def load(found: Continuity) -> Found:
    (told,) = found.found
    return told


# --- means and gradients --------------------------------------------------------------------------


@given(st.integers(0, 1000), st.booleans())
def test_gradient_of_a_linear_field_is_exact(seed: int, complex_: bool) -> None:
    """f = A x + b on hexahedra, tetrahedra, wedges and quadratic cells somewhere in space."""
    rng = np.random.default_rng(seed)
    A = rng.normal(size=(2, 3)) + (1j * rng.normal(size=(2, 3)) if complex_ else 0)
    R, t = somewhere(seed)
    for sector in (box((2, 2, 2)), tetrahedra(box((2, 1, 2))), ring(5, inner=0.0),
                   quadratic(box((1, 2, 1)))):  # fmt: skip
        mesh = sector.moved(R, t).mesh()
        some = np.arange(0, mesh.cell_count, 2)
        found = cell_gradients(mesh, some, mesh.points @ A.T + 3.0)
        assert np.iscomplexobj(found) is complex_
        np.testing.assert_allclose(found, np.broadcast_to(A, (len(some), 2, 3)), atol=1e-9)


def test_gradient_lies_in_the_shell_and_along_the_line() -> None:
    """f = 2 x + 3 y + 5 z: in a shell with normal z no z, on a line along y only 3, none at a
    point."""
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 4, 0]], dtype=float)
    sector = Sector(points, [(QUAD, [0, 1, 2, 3]), (LINE, [3, 4]), (VERTEX, [4])])
    found = cell_gradients(sector.mesh(), np.arange(3), (points @ [2.0, 3.0, 5.0])[:, None])
    np.testing.assert_allclose(found[:, 0], [[2, 3, 0], [0, 3, 0], [0, 0, 0]], atol=1e-12)


def test_gradient_of_a_skew_shell() -> None:
    """In a plane with normal n the gradient is g - (g . n) n."""
    R, t = somewhere(7)
    points = np.array([[0, 0, 0], [2, 0, 0], [2, 1, 0], [0, 1, 0]]) @ R.T + t
    g, n = np.array([1.0, -2.0, 0.5]), R[:, 2]
    found = cell_gradients(Sector(points, [(QUAD, [0, 1, 2, 3])]).mesh(), np.array([0]),
                           (points @ g)[:, None])  # fmt: skip
    np.testing.assert_allclose(found[0, 0], g - (g @ n) * n, atol=1e-12)


@pytest.mark.parametrize("scale", [1e-6, 1.0, 1e6])
def test_gradient_in_other_units(scale: float) -> None:
    mesh = replace(bar(2), points=scale * bar(2).points).mesh()
    found = cell_gradients(mesh, np.arange(2), mesh.points[:, :1] / scale)
    np.testing.assert_allclose(found[:, 0], [[1.0 / scale, 0, 0]] * 2, atol=1e-9 / scale)


def test_a_value_that_is_not_finite_spoils_its_own_cells_only() -> None:
    mesh = bar(3).mesh()
    values = mesh.points[:, :1].copy()
    values[-1] = np.nan  # at x = 3, in cell 2 alone
    assert np.isnan(cell_gradients(mesh, np.arange(3), values)[2, 0]).any()
    np.testing.assert_allclose(cell_gradients(mesh, np.arange(3), values)[:2, 0, 0], 1.0)
    np.testing.assert_array_equal(cell_means(mesh, np.arange(3), values)[:, 0], [0.5, 1.5, np.nan])


def test_no_cells() -> None:
    mesh, none = bar(1).mesh(), np.empty(0, dtype=np.int64)
    assert cell_gradients(mesh, none, np.ones((8, 2))).shape == (0, 2, 3)
    assert cell_means(mesh, none, np.ones((8, 2))).shape == (0, 2)


# --- the scatter of the cells around --------------------------------------------------------------


def around(sector: Sector) -> Any:
    """The cells near the plane x = 0."""
    mesh = sector.mesh()
    nodes = np.flatnonzero(mesh.points[:, 0] == 0.0)
    return surroundings(mesh, nodes, np.tile([-1.0, 0.0, 0.0], (len(nodes), 1))), nodes


def test_yardstick_is_the_jump_of_the_next_layer() -> None:
    """Two layers are near. Values 1, 4: the jump between them is 3 at each node of the seam; of
    the third layer's 100 nothing is seen."""
    near, nodes = around(bar(4))
    assert near.cells.tolist() == [0, 1]
    np.testing.assert_allclose(near.towards, [[-1, 0, 0]] * 2)
    assert near.rows(np.array([1, 0])).tolist() == [1, 0]
    np.testing.assert_allclose(near.yardstick(near.jumps(np.array([[1.0], [4.0]])), nodes)[0], 3.0)
    np.testing.assert_allclose(
        near.yardstick(near.jumps(np.array([[1.0], [4.0j]])), nodes)[0], np.sqrt(17.0)
    )


def test_yardstick_of_a_tensor_is_contracted_with_the_face() -> None:
    """Between cells along x only the column x of T counts: (3, 4, 0) -> 5."""
    near, nodes = around(bar(2))
    T = np.zeros((2, 3, 3))
    T[1, :, 0], T[1, :, 1] = [3.0, 4.0, 0.0], 100.0
    np.testing.assert_allclose(near.yardstick(near.jumps(T), nodes)[0], 5.0)


def test_faces_in_the_seam_do_not_count() -> None:
    """One layer of two cells: they share a face across the seam, which is all there is."""
    near, nodes = around(box((1, 2, 1)))
    np.testing.assert_allclose(near.yardstick(near.jumps(np.array([[1.0], [3.5]])), nodes)[0], 2.5)
    assert not near.faces[0].parallel.any()
    assert not near.yardstick(near.jumps(np.array([[1.0], [3.5]])), nodes)[1].any(), (
        "said to say less"
    )


def test_faces_parallel_to_the_seam_go_first() -> None:
    """Along x the cells differ by 1, along y by 50."""
    near, nodes = around(box((2, 2, 1)))
    centre = cell_means(near.mesh, near.cells, near.mesh.points)
    values = (centre[:, 0] > 0.5) + 50.0 * (centre[:, 1] > 0.5)
    found, sure = near.yardstick(near.jumps(values[:, None]), nodes)
    np.testing.assert_allclose(found, 1.0)
    assert sure.all()


def test_no_neighbour_no_yardstick() -> None:
    near, nodes = around(bar(1))
    assert np.isnan(near.yardstick(near.jumps(np.array([[1.0]])), nodes)[0]).all()


def test_nodal_yardstick_is_twice_the_deviation_within_a_cell() -> None:
    """Values x^2 = 0, 1, 4: means 0.5 and 2.5, deviations 0.5 and 1.5, so twice 1.5."""
    near, nodes = around(bar(2))
    nodal = near.mesh.points[:, :1] ** 2
    found = near.nodal_yardstick(nodal, cell_means(near.mesh, near.cells, nodal), nodes)
    np.testing.assert_allclose(found, 3.0)
    tensor = np.zeros((len(nodal), 1, 3))
    tensor[:, 0, 0], tensor[:, 0, 2] = nodal[:, 0], 1e6 * nodal[:, 0]
    means = cell_means(near.mesh, near.cells, tensor.reshape(-1, 3)).reshape(-1, 1, 3)
    np.testing.assert_allclose(near.nodal_yardstick(tensor, means, nodes), 3.0)


# --- traction, flux and kink ----------------------------------------------------------------------

# xx yy zz xy yz zx of three cells in a row
ROW = np.array([[1, 7, 0, 0.5, 3, 0], [3, 7, 0, 0.7, 3, 0], [9, 7, 0, 9, 3, 0]], dtype=float)


def test_traction_of_cells_by_hand(tmp_path: Path) -> None:
    """On the plane with n = -x the traction is (-1, -0.5, 0); the image's is (-1, 0.5, 0) under a
    symmetric load, (1, -0.5, 0) under an antisymmetric one: jumps of 1 and 2. The next two cells
    differ by (2, 0.2, 0)."""
    scatter = np.hypot(2.0, 0.2)
    scale = np.sqrt(81 + 49 + 81 + 9)
    for tables, jump, own, other in ((HALF, 1.0, [-1, -0.5, 0], [-1, 0.5, 0]),
                                     (ODD, 2.0, [-1, -0.5, 0], [1, -0.5, 0])):  # fmt: skip
        v = the(seen(tmp_path, bar(3), tables, cells={"stress": ROW}), "traction")
        assert (v.result, v.node in range(4)) == (CLOSED, True)
        assert v.jump == pytest.approx(jump)
        assert v.times == pytest.approx(jump / scatter)
        assert v.scale == pytest.approx(scale)
        assert v.relative == pytest.approx(jump / scale)
        assert v.own == pytest.approx(own)
        assert v.other == pytest.approx(other)


def test_traction_is_judged_by_the_scatter_allowed(tmp_path: Path) -> None:
    times = 1.0 / np.hypot(2.0, 0.2)
    for scatter, result in ((1.01 * times, CLOSED), (0.99 * times, OPEN)):
        tables = {**HALF, "seam": {"scatter": scatter}}
        v = the(seen(tmp_path, bar(3), tables, cells={"stress": ROW}), "traction")
        assert (v.result, v.limit) == (result, scatter)


def test_traction_at_nodes_by_hand(tmp_path: Path) -> None:
    """xy = 1 + x: at the plane (0, -1, 0) against (0, 1, 0), a jump of 2 at four nodes; within a
    cell the values differ by 0.5 from the mean, so the yardstick is 1."""
    sector = bar(3)
    stress = np.zeros((len(sector.points), 6))
    stress[:, 3] = 1.0 + sector.points[:, 0]
    v = the(seen(tmp_path, sector, HALF, {"stress": stress}), "traction")
    assert (v.jump, v.rms, v.times) == (pytest.approx(2.0), pytest.approx(2.0), pytest.approx(2.0))
    assert v.relative == pytest.approx(2.0 / 4.0)
    assert v.components == pytest.approx({"x": 0.0, "y": 2.0, "z": 0.0})


def test_flux_by_hand(tmp_path: Path) -> None:
    """The normal part of (1, 8, 8) is -1, that of its image +1; the next cell has 3, so 2 over 2.
    Under an antisymmetric load the normal parts agree."""
    q = np.array([[1, 8, 8], [3, 9, 9], [5, 1, 1]], dtype=float)
    tables = {"fields": {"heat_flux": {"kind": "polar vector", "seam": "recovered"}}}
    v = the(seen(tmp_path, bar(3), HALF | tables, cells={"heat_flux": q}), "flux")
    assert (v.jump, v.times) == (pytest.approx(2.0), pytest.approx(1.0))
    assert the(seen(tmp_path, bar(3), ODD | tables, cells={"heat_flux": q}), "flux").jump == 0.0


def test_axial_vector_is_compared_as_a_whole(tmp_path: Path) -> None:
    """(1, 2, 3) in a plane with normal x: det Q Q w = (1, -2, -3), so it jumps by (0, 4, 6)."""
    w = np.tile([1.0, 2.0, 3.0], (3, 1)) * [[1], [2], [3]]
    tables = {"fields": {"spin": {"kind": "axial vector", "seam": "recovered"}}}
    v = the(seen(tmp_path, bar(3), HALF | tables, cells={"spin": w}), "value")
    assert v.components == pytest.approx({"x": 0.0, "y": 4.0, "z": 6.0})
    assert v.times == pytest.approx(np.hypot(4, 6) / np.sqrt(14.0))


def test_invariant_and_body_follow_no_load(tmp_path: Path) -> None:
    """Both are the same on the image, whatever the load."""
    sector = bar(3)
    arrays = {"von_mises": 1.0 + sector.points[:, 0]}
    assert the(seen(tmp_path, sector, ODD, arrays), "value").jump == 0.0
    thick = {"fields": {"thickness": {"kind": "scalar", "follows": "body"}}}
    found = seen(tmp_path, sector, ODD | thick, {"thickness": arrays["von_mises"]})
    assert the(found, "value").jump == 0.0


def test_kink_by_hand(tmp_path: Path) -> None:
    """u_y = x^2 has the slopes 1, 3, 5 in the cells: across the plane from -1 to 1, a jump of 2 as
    between the cells, so once the scatter. u_y = 5 x + x^2 has 6, 8, 10: 12 over 2."""
    sector = bar(3)
    x = sector.points[:, 0]
    for u, times, result in ((x * x, 1.0, CLOSED), (5 * x + x * x, 6.0, CLOSED),
                             (5.1 * x + x * x, 6.1, OPEN)):  # fmt: skip
        v = the(seen(tmp_path, sector, HALF, {"displacement": np.outer(u, [0, 1, 0])}), "kink")
        assert v.times == pytest.approx(times, rel=1e-9)
        assert v.result == result or times == 6.0


def test_kink_of_a_field_of_one_layer_is_not_certain(tmp_path: Path) -> None:
    """u_y = x^2 is symmetric and smooth. With one layer of cells nothing beside it tells how the
    slope changes away from the plane, so it cannot be called open."""
    sector = box((1, 2, 2))
    u = np.outer(sector.points[:, 0] ** 2, [0.0, 1.0, 0.0])
    v = the(seen(tmp_path, sector, HALF, {"displacement": u}), "kink")
    assert v.result != OPEN


def test_no_neighbouring_cells_is_a_doubt(tmp_path: Path) -> None:
    sector = bar(1)
    u = np.outer(sector.points[:, 0] ** 2, [0.0, 1.0, 0.0])
    v = the(seen(tmp_path, sector, HALF, {"displacement": u}), "kink")
    assert (v.result, v.times) == (DOUBTFUL, 0.0)
    assert "no neighbouring cells" in v.words


def test_two_sides_in_one_ratio_are_a_doubt(tmp_path: Path) -> None:
    """The second face holds 1.25 times the first: the copy's side is 0.8 of the own one. The cells
    around scatter far more, so that no jump is large beside them."""
    sector = ring(5, (3, 4, 3))
    angle = np.arctan2(sector.points[:, 1], sector.points[:, 0])
    rng = np.random.default_rng(2)
    value = rng.uniform(-90.0, 90.0, len(angle))
    on_first, on_second = angle < 1e-9, angle > 2 * np.pi / 5 - 1e-9
    profile = np.hypot(*sector.points.T[:2]) + sector.points[:, 2]
    value[on_first], value[on_second] = profile[on_first], 1.25 * profile[on_second]
    tables = {
        "cyclic": {"sectors": 5}, "fields": {"warmth": {"kind": "scalar", "seam": "recovered"}},
    }  # fmt: skip
    v = the(seen(tmp_path, sector, tables, {"warmth": value}), "value")
    assert (v.result, v.words) == (DOUBTFUL, "the two sides stand in the ratio 0.8")
    value[on_second] = profile[on_second]
    assert the(seen(tmp_path, sector, tables, {"warmth": value}), "value").result == CLOSED


# --- seams ----------------------------------------------------------------------------------------


def test_the_seam_of_a_plane_by_hand(tmp_path: Path) -> None:
    (seam,) = seams_of(sector_of(tmp_path, bar(2), HALF))
    assert (seam.name, seam.kind, seam.copy, seam.plane) == ("plane 'mid'", "cut plane", 1, "mid")
    assert sorted(seam.nodes.tolist()) == [0, 1, 2, 3]
    np.testing.assert_array_equal(seam.partners[:, 0], seam.nodes)
    np.testing.assert_allclose(seam.normal, [[-1, 0, 0]] * 4)
    np.testing.assert_allclose(seam.area, 0.25)
    assert seam.measure == pytest.approx(1.0)
    assert (seam.pairing, seam.touches, seam.distance.max()) == ("node to node", True, 0.0)


def test_the_seam_of_a_sector_by_hand(tmp_path: Path) -> None:
    """A face of width 1 and height 0.8 that is turned by 72 degrees."""
    sector = ring(5)
    (seam,) = seams_of(sector_of(tmp_path, sector, {"cyclic": {"sectors": 5}}))
    assert (seam.name, seam.kind, seam.copy) == ("between sectors", "sector faces", 1)
    assert seam.measure == pytest.approx(0.8)
    angle = np.arctan2(*sector.points[seam.nodes].T[1::-1])
    np.testing.assert_allclose(angle, 2 * np.pi / 5, atol=1e-12)
    back = np.arctan2(*sector.points[seam.partners[:, 0]].T[1::-1])
    np.testing.assert_allclose(back, 0.0, atol=1e-12)
    assert seam.distance.max() < 1e-12


@pytest.mark.parametrize("sectors", [2, 3, 4, 7])
def test_the_axis_is_a_seam_of_lines(tmp_path: Path, sectors: int) -> None:
    """On the axis all N copies meet: one pair of neighbours is the faces', the other
    (N - 1) - 2 placements stand in pairs of inverses, or alone at half a turn."""
    sector = ring(sectors, inner=0.0)
    seams = seams_of(sector_of(tmp_path, sector, {"cyclic": {"sectors": sectors}}))
    on_axis = np.flatnonzero(np.hypot(*sector.points.T[:2]) == 0.0)
    lines = [s for s in seams if s.kind == "lines and points"]
    others = set(range(2, sectors - 1))
    assert len(lines) == (1 if others else 0)
    for s in lines:
        assert (s.copy, s.measure, s.against) == (0, 0.0, None)
        assert set(s.nodes.tolist()) == set(on_axis.tolist())
        pairs = {frozenset((v, sectors - v)) for v in s.via.tolist()}
        assert pairs == {frozenset((k, sectors - k)) for k in others}
        assert len(s.via) == len(on_axis) * len(pairs)


def test_a_node_on_the_axis_by_hand(tmp_path: Path) -> None:
    """(1, 0, 0) on the axis of four sectors: turned by 90 degrees it is (0, 1, 0), sqrt(2) away,
    by 180 degrees (-1, 0, 0), 2 away."""
    sector = ring(4, inner=0.0)
    u = np.zeros((len(sector.points), 3))
    u[np.hypot(*sector.points.T[:2]) == 0.0, 0] = 1.0
    found = seen(tmp_path, sector, {"cyclic": {"sectors": 4}}, {"displacement": u})
    jumps = {v.seam: v.jump for v in found.verdicts if v.measure == "value"}
    assert jumps["between sectors"] == pytest.approx(np.sqrt(2.0))
    (lines,) = (jump for seam, jump in jumps.items() if seam.startswith("lines"))
    assert lines == pytest.approx(2.0)


def test_the_edge_where_two_planes_meet(tmp_path: Path) -> None:
    """A quarter: two faces, and the edge where all four copies meet, by a half turn."""
    sector = bar(2)
    tables = {"mirror": [{"name": "a", "normal": "x"}, {"name": "b", "normal": "y"}]}
    seams = {s.kind + s.name: s for s in seams_of(sector_of(tmp_path, sector, tables))}
    assert len(seams) == 3
    assert seams["cut planeplane 'a'"].measure == pytest.approx(1.0)
    assert seams["cut planeplane 'b'"].measure == pytest.approx(2.0)
    lines = seams["lines and pointslines and points where more copies meet"]
    assert sorted(lines.nodes.tolist()) == [0, 1]


def test_half_sectors_have_an_implied_plane(tmp_path: Path) -> None:
    """45 degrees from the declared plane y = 0 of four sectors lies another one. A displacement
    along z is symmetric in both; with two nodal diameters the implied one would be
    antisymmetric, so it jumps there by 2."""
    sector = ring(4, part=0.5)
    u = np.tile([0.0, 0.0, 1.0], (len(sector.points), 1))
    for h, jump in ((0, 0.0), (2, 2.0)):
        tables = {"mirror": [{"name": "m", "normal": "y"}],
                  "cyclic": {"sectors": 4, "nodal_diameters": h}}  # fmt: skip
        found = seen(tmp_path, sector, tables, {"displacement": u})
        assert [s.kind for s in found.seams] == ["cut plane", "cut plane"]
        declared, implied = found.seams
        assert (declared.plane, implied.plane) == ("m", None)
        assert implied.name.startswith("implied plane")
        assert implied.measure == pytest.approx(0.8)
        normal = np.array([-1.0, 1.0, 0.0]) / np.sqrt(2.0)
        np.testing.assert_allclose(implied.normal, np.tile(normal, (len(implied.nodes), 1)),
                                   atol=1e-12)  # fmt: skip
        values = {v.seam: v for v in found.verdicts if v.measure == "value"}
        assert values["plane 'm'"].jump == 0.0
        assert values[implied.name].jump == pytest.approx(jump)
    (told,) = (f for f in found.found if f.seam == implied.name)
    assert (told.declared, told.found, told.result) == ("antisymmetric", "symmetric", OPEN)
    assert "must make this plane symmetric" in told.line


def test_a_web_in_the_plane_has_no_face_across_it(tmp_path: Path) -> None:
    sector = bar(2).plus([(QUAD, [0, 2, 3, 1])])
    (seam,) = seams_of(sector_of(tmp_path, sector, HALF))
    assert seam.measure == pytest.approx(1.0)
    assert [f.cells.tolist() for f in seam.faces] == [[0]]


def test_nothing_meets(tmp_path: Path) -> None:
    sector = bar(1).moved(np.eye(3), (5.0, 0.0, 0.0))
    found = seen(tmp_path, sector, HALF, {"displacement": np.ones((8, 3))})
    assert (found.seams, found.verdicts, found.found) == ((), (), ())


def test_seams_of_shells_and_lines(tmp_path: Path) -> None:
    """A plate 1 wide touches by an edge of length 1, a bar by a point: one node counts 1."""
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0, 3, 0], [2, 3, 0]], float)
    sector = Sector(points, [(QUAD, [0, 1, 2, 3]), (LINE, [4, 5])])
    (seam,) = seams_of(sector_of(tmp_path, sector, HALF))
    assert sorted(f.facets.dimension for f in seam.faces) == [0, 1]
    assert sorted(float(f.areas.sum()) for f in seam.faces) == pytest.approx([1.0, 1.0])
    assert sorted(seam.nodes.tolist()) == [0, 3, 4]


# --- jumps ----------------------------------------------------------------------------------------


def test_jump_of_a_wave_by_hand(tmp_path: Path) -> None:
    """Six sectors, one nodal diameter: the second face is exp(i 60 deg) times the turned first.
    With the other sign it is off by |1 - exp(i 120 deg)| = sqrt(3) of the value there."""
    given_ = wave()
    for phase, residual in (("+", 0.0), ("-", None)):
        tables = given_.tables | {"cyclic": given_.tables["cyclic"] | {"phase": phase}}
        sector = sector_of(tmp_path, given_.sector, tables, given_.points)
        seam = next(s for s in seams_of(sector) if s.kind == "sector faces")
        (field,), (case,) = sector.fields, sector.cases
        jump = jump_at(sector.mesh, sector.group, seam, field, case, field.values(case.model),
                       case.chi)  # fmt: skip
        off_axis = np.hypot(*sector.mesh.points[seam.nodes].T[:2]) > 1e-9
        expected = 0.0 if residual == 0.0 else np.sqrt(3.0) * np.linalg.norm(jump.own, axis=1)
        np.testing.assert_allclose(
            jump.lengths[off_axis], np.broadcast_to(expected, len(off_axis))[off_axis], atol=1e-15
        )
        assert np.iscomplexobj(jump.own)
        assert not jump.allowance.any()


@pytest.mark.parametrize("right", ["+", "-"])
def test_the_direction_of_a_wave_is_decided_by_the_seam(tmp_path: Path, right: str) -> None:
    given_ = wave()
    points = given_.points
    if right == "-":  # the conjugate field runs the other way, on a mirrored sector of its own
        points = {"u_re": points["u_re"], "u_im": -points["u_im"]}
    found = continuity(decided(sector_of(tmp_path, given_.sector, given_.tables, points)))
    (case,) = found.cases
    assert case.phase == right
    k = np.arange(6)
    sign = 1 if right == "+" else -1
    np.testing.assert_allclose(case.chi, np.exp(sign * 2j * np.pi * k / 6), atol=1e-15)
    assert {v.result for v in case.verdicts if v.measure == "value"} == {CLOSED}


def test_values_in_a_cylindrical_frame(tmp_path: Path) -> None:
    """Constant (r, theta, z) components close; 0.5 more around on the second face is a jump of 0.5
    along the hoop direction there, (-sin, cos, 0) of 60 degrees."""
    sector = ring(6)
    u = np.tile([1.0, 2.0, 3.0], (len(sector.points), 1))
    tables = {
        "cyclic": {"sectors": 6}, "frames": {"shaft": {"type": "cylindrical"}},
        "fields": {"displacement": {"kind": "polar vector", "frame": "shaft"}},
    }  # fmt: skip
    assert the(seen(tmp_path, sector, tables, {"displacement": u}), "value").jump < 1e-12
    angle = np.arctan2(*sector.points.T[1::-1])
    u[angle > np.pi / 3 - 1e-9, 1] += 0.5
    v = the(seen(tmp_path, sector, tables, {"displacement": u}), "value")
    assert v.jump == pytest.approx(0.5)
    wanted = {"x": 0.5 * np.sin(np.pi / 3), "y": 0.25, "z": 0.0}
    assert v.components == pytest.approx(wanted, abs=1e-12)
    assert v.scale == pytest.approx(np.sqrt(1 + 6.25 + 9))


def test_values_that_are_not_finite_show_no_jump(tmp_path: Path) -> None:
    u = even(bar(2).points)
    u[0], u[1, 0] = np.nan, 7.0
    v = the(seen(tmp_path, bar(2), HALF, {"displacement": u}, allow_nan=True), "value")
    assert (v.jump, v.node, v.worst_nodes) == (pytest.approx(14.0), 1, (1,))


def test_single_precision(tmp_path: Path) -> None:
    """A jump of one unit in the last place of 32 bits is closed."""
    sector = bar(2)
    u = even(sector.points).astype(np.float32)
    u[0, 0] = np.spacing(np.float32(np.abs(u).max()))
    v = the(seen(tmp_path, sector, HALF, {"displacement": u}), "value")
    assert 0.0 < v.relative < 1e-6
    assert v.result == CLOSED


# --- verdicts -------------------------------------------------------------------------------------


def made(own: Any, other: Any, allowance: float = 0.0) -> Any:
    """A jump between these rows, at nodes 10, 11, .."""
    from expander.checking.jumps import Jump

    own, other = np.array(own, dtype=float), np.array(other, dtype=float)
    rows = np.arange(len(own))
    seam = Seam("s", "cut plane", 1, 10 + rows, rows * 0 + 1, 10 + rows[:, None],
                np.ones((len(own), 1)), np.zeros(len(own)))  # fmt: skip
    q = quantity("polar vector", 3)
    field = Field("u", q, "load", "agree", Global(), "points", ("u",), None, "", "")
    case = type("Case", (), {"name": "c"})()
    return Jump(seam, field, case, q, own, other, np.full(len(own), allowance))


POINTS = np.arange(60.0).reshape(20, 3)


def test_numbers_of_a_verdict() -> None:
    """Jumps (3, 4, 0), 0 and (0, 0, 1): 5, 0, 1; rms sqrt(26 / 3); of a scale of 10: 0.5."""
    jump = made([[3, 4, 0], [1, 1, 1], [0, 0, 1]], [[0, 0, 0], [1, 1, 1], [0, 0, 0]])
    v = verdict_of(jump, POINTS, 10.0, 0.2)
    assert (v.seam, v.field, v.case, v.measure, v.result) == ("s", "u", "c", "value", OPEN)
    assert (v.jump, v.relative) == (5.0, 0.5)
    assert v.rms == pytest.approx(np.sqrt(26 / 3))
    assert v.relative_rms == pytest.approx(np.sqrt(26 / 3) / 10)
    assert v.components == {"x": 3.0, "y": 4.0, "z": 1.0}
    assert (v.node, v.position) == (10, (30.0, 31.0, 32.0))
    assert (v.own, v.other) == ((3.0, 4.0, 0.0), (0.0, 0.0, 0.0))
    assert (v.open_nodes, v.worst_nodes) == (1, (10,))
    assert verdict_of(jump, POINTS, 10.0, 0.5).result == CLOSED, "what is at the limit is closed"
    assert verdict_of(jump, POINTS, 10.0, 0.05).worst_nodes == (10, 12)
    assert verdict_of(jump, POINTS, 10.0, 0.2, worst=2).node == 12


def test_a_verdict_without_rows_or_scale() -> None:
    empty = verdict_of(made(np.empty((0, 3)), np.empty((0, 3))), POINTS, 1.0, 0.1)
    assert (empty.jump, empty.rms, empty.node, empty.position, empty.result) == (
        0.0, 0.0, -1, (), CLOSED,
    )  # fmt: skip
    assert (verdict_of(made([[1, 0, 0]], [[0, 0, 0]]), POINTS, 0.0, 0.1).relative) == 0.0


def test_at_most_twenty_worst_nodes() -> None:
    own = np.zeros((40, 3))
    own[:, 0] = np.arange(40) + 1.0
    v = verdict_of(made(own, np.zeros((40, 3))), np.zeros((60, 3)), 1.0, 0.1)
    assert v.open_nodes == 40
    assert v.worst_nodes == tuple(range(49, 29, -1))


@pytest.mark.parametrize(
    ("jump", "allowance", "result"),
    [(0.05, 0.0, CLOSED), (0.15, 0.0, OPEN), (0.15, 0.1, DOUBTFUL), (0.25, 0.1, OPEN)],
)
def test_interpolation_makes_a_doubt(jump: float, allowance: float, result: str) -> None:
    """The limit is 0.1 of 1; what interpolation may be wrong by is taken off before."""
    v = value_verdict(made([[jump, 0, 0]], [[0, 0, 0]], allowance), POINTS, 1.0, 0.1)
    assert v.result == result
    assert bool(v.words) == (result == DOUBTFUL)
    assert v.open_nodes == (0 if result == CLOSED else 1)


def test_a_field_of_zeros_is_not_judged() -> None:
    v = value_verdict(made([[0, 0, 0]], [[0, 0, 0]]), POINTS, 0.0, 0.1)
    assert (v.result, v.words) == (TOLD, "the field is zero")


def test_gravity() -> None:
    order = [TOLD, CLOSED, DOUBTFUL, OPEN]
    assert [gravity(r) for r in order] == [0, 1, 2, 3]
    assert worst_of([]) == TOLD
    for k, r in enumerate(order):
        assert worst_of(order[: k + 1][::-1]) == r


# --- declared against found -----------------------------------------------------------------------


def on_plane(*rows: Any) -> dict[str, np.ndarray]:
    """A displacement of length 5 far off, and these values at the nodes of the plane."""
    sector = bar(2)
    u = np.zeros((len(sector.points), 3))
    u[-1] = [0.0, 3.0, 4.0]
    u[: len(rows)] = rows
    return {"displacement": u}


def test_symmetric_or_antisymmetric(tmp_path: Path) -> None:
    """(0, 1, 0) in the plane: symmetric; as antisymmetric it jumps by 2 of 5. (1, 0, 0) the other
    way round."""
    for row, right in (([0, 1, 0], "symmetric"), ([1, 0, 0], "antisymmetric")):
        for tables, declared in ((HALF, "symmetric"), (ODD, "antisymmetric")):
            told = load(seen(tmp_path, bar(2), tables, on_plane(row, row)))
            assert (told.declared, told.found) == (declared, right)
            good = declared == right
            assert told.result == (CLOSED if good else OPEN)
            assert told.residual == pytest.approx(0.0 if good else 0.4)
            assert told.alternative_residual == pytest.approx(0.4 if good else 0.0)
            assert told.ratio == (0.0 if good else np.inf)
            assert told.nodes == (() if good else (0, 1))
            assert told.line == ("" if good else f"[[mirror]] 'mid': load = \"{right}\"")


def test_neither(tmp_path: Path) -> None:
    """(1, 2, 0): 2 across, 4 along; of 5."""
    told = load(seen(tmp_path, bar(2), HALF, on_plane(*[[1, 2, 0]] * 4)))
    assert (told.found, told.result, told.line) == (NEITHER, OPEN, "")
    assert told.residual == pytest.approx(0.4)
    assert told.alternative_residual == pytest.approx(0.8)
    assert told.ratio == pytest.approx(0.5)


def test_all_but_a_few_nodes(tmp_path: Path) -> None:
    """One of 25 nodes of the plane moves through it."""
    sector = box((2, 4, 4))
    u = even(sector.points)
    u[12] = [1e-3, 0.0, 0.0]
    told = load(seen(tmp_path, sector, HALF, {"displacement": u}))
    assert (told.found, told.result, told.nodes) == ("symmetric", OPEN, (12,))
    assert told.words == "but for 1 nodes"
    told = load(seen(tmp_path, sector, ODD, {"displacement": u}))
    assert (told.found, told.result) == ("symmetric", OPEN)


def test_zero_field(tmp_path: Path) -> None:
    told = load(seen(tmp_path, bar(2), HALF, {"displacement": np.zeros((12, 3))}))
    assert (told.found, told.result, told.residual) == (ZERO, TOLD, 0.0)


def test_the_slope_decides_where_the_values_vanish(tmp_path: Path) -> None:
    """u = (x, 0, 0) closes under both words: its slope across the plane is the same on both sides
    if symmetric, and jumps from 1 to -1 if not. u = (0, x, 0) the other way round."""
    sector = bar(4)
    x = sector.points[:, :1]
    for direction, right in (([1, 0, 0], "symmetric"), ([0, 1, 0], "antisymmetric")):
        for tables, declared in ((HALF, "symmetric"), (ODD, "antisymmetric")):
            told = load(seen(tmp_path, sector, tables, {"displacement": x * direction}))
            assert told.found == right
            assert told.result == (CLOSED if declared == right else OPEN)
            assert told.kink is not None
            assert told.alternative_kink is not None
            # Nothing scatters, so a thousandth of the largest slope is the yardstick.
            times = sorted([told.kink, told.alternative_kink])
            assert times == pytest.approx([0.0, 2000.0], abs=1e-6)


@pytest.mark.parametrize("held", [False, True])
def test_a_clamped_plane_and_one_that_is_held(tmp_path: Path, held: bool) -> None:
    """mirror.held says that the body is really held along the plane: then the kink is meant, and
    no measure of it fails the check."""
    given_ = clamped()
    tables = {"mirror": [{"name": "mid", "normal": "x", "held": held}]}
    found = seen(tmp_path, given_.sector, tables, given_.points)
    told = load(found)
    assert told.found == CLAMPED
    assert told.result == (CLOSED if held else OPEN)
    assert ("held = true" in told.line) is not held
    weights = {f.weight for f in findings(found, None)}
    assert weights == ({NOTE} if held else {FAILS})


@pytest.mark.parametrize("held", [False, True])
def test_a_held_plane_carries_a_traction(tmp_path: Path, held: bool) -> None:
    """What holds the plane pulls at it, so the shear on both sides differs by that force."""
    given_ = clamped()
    tables = {"mirror": [{"name": "mid", "normal": "x", "held": held}]}
    stress = np.tile([1.0, 0.0, 0.0, 2.0, 0.0, 3.0], (len(given_.sector.cells), 1))
    found = seen(tmp_path, given_.sector, tables, given_.points, {"stress": stress})
    v = the(found, "traction")
    assert v.jump == pytest.approx(2.0 * np.hypot(2.0, 3.0))
    assert (v.result == OPEN) is not held
    assert (FAILS in {f.weight for f in findings(found, None)}) is not held


def test_only_the_plane_that_is_held(tmp_path: Path) -> None:
    """Of two clamped planes the one that is declared as held is excused."""
    sector = box((3, 3, 2))
    x, y, _ = sector.points.T
    u = np.outer(x * y * 1e-3, [1.0, 2.0, 3.0])
    tables = {"mirror": [{"name": "a", "normal": "x"}, {"name": "b", "normal": "y", "held": True}]}
    found = {f.seam: f for f in seen(tmp_path, sector, tables, {"displacement": u}).found}
    assert [(f.found, f.result) for f in found.values()] == [(CLAMPED, OPEN), (CLAMPED, CLOSED)]


def test_no_faces_no_slope(tmp_path: Path) -> None:
    """Nodes of the plane that no face joins: the slope cannot be told, and it is said."""
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0]], dtype=float)
    sector = Sector(points, [(5, [0, 1, 2])])
    found = seen(tmp_path, sector, HALF, {"displacement": np.outer([0, 1, 1], [1.0, 2.0, 3.0])})
    for told in found.found:
        assert (told.found, told.result) == (UNTOLD, TOLD)
    assert "value" in {v.measure for v in found.verdicts}, "the node that meets its image is seen"


def turned(sectors: int, ratio: complex, complex_: bool) -> tuple[Sector, dict[str, np.ndarray]]:
    """A scalar on a ring whose second face holds `ratio` times the first."""
    sector = ring(sectors, (3, 3, 2))
    x, y, z = sector.points.T
    angle = np.arctan2(y, x) * sectors / (2 * np.pi)
    phase = np.angle(ratio) * angle
    value = (1.0 + np.hypot(x, y) + z) * (np.exp(1j * phase) if complex_ else np.cos(phase))
    return sector, {"re": value.real, "im": value.imag} if complex_ else {"re": value}


def ring_case(sectors: int, h: int, complex_: bool, phase: str = "+") -> dict[str, Any]:
    table = {"real": "re", "imaginary": "im"} if complex_ else {"arrays": "re"}
    return {"cyclic": {"sectors": sectors, "nodal_diameters": h, "phase": phase},
            "fields": {"potential": {"kind": "scalar", **table}}}  # fmt: skip


@pytest.mark.parametrize(
    ("sectors", "declared", "actual", "words"),
    [
        (6, 1, 2, 'nodal_diameters = 2, phase = "+"'),
        (6, 2, 1, 'nodal_diameters = 1, phase = "+"'),
        (6, 2, 0, "nodal_diameters = 0"),
        (6, 1, 3, "nodal_diameters = 3"),
        (6, 0, -2, 'nodal_diameters = 2, phase = "-"'),
        (5, 1, -2, 'nodal_diameters = 2, phase = "-"'),
        (6, 1, -1, 'nodal_diameters = 1, phase = "-"'),
    ],
)
def test_nodal_diameters_are_told(
    tmp_path: Path, sectors: int, declared: int, actual: int, words: str
) -> None:
    """The second face is exp(2 pi i h / N) times the first."""
    sector, arrays = turned(sectors, np.exp(2j * np.pi * actual / sectors), True)
    found = seen(tmp_path, sector, ring_case(sectors, declared, True), arrays)
    told = load(found)
    assert (told.declared, told.result) == (f"h = {declared}", OPEN)
    assert told.line == f"[cyclic]: {words}"
    assert ("conjugated" in told.found) is (actual == -declared)
    assert told.alternative_residual < 1e-12
    # The largest value is on the face of largest radius and height, where the jump is largest.
    gap = abs(np.exp(2j * np.pi * declared / sectors) - np.exp(2j * np.pi * actual / sectors))
    assert told.residual == pytest.approx(gap)
    right = ring_case(sectors, abs(actual), True, "-" if actual < 0 else "+")
    told = load(seen(tmp_path, sector, right, arrays))
    assert told.result == CLOSED


def test_nodal_diameters_of_real_fields(tmp_path: Path) -> None:
    """-1 from sector to sector is h = N/2; a ring of odd number has none such."""
    sector, arrays = turned(4, -1.0, False)
    told = load(seen(tmp_path, sector, ring_case(4, 0, False), arrays))
    assert (told.found, told.line) == ("h = 2", "[cyclic]: nodal_diameters = 2")
    assert told.residual == pytest.approx(2.0)
    assert load(seen(tmp_path, sector, ring_case(4, 2, False), arrays)).result == CLOSED
    sector, arrays = turned(5, -1.0, False)
    told = load(seen(tmp_path, sector, ring_case(5, 0, False), arrays))
    assert (told.found, told.result, told.alternative) == (NEITHER, OPEN, "")
    assert "1 times the turned first one, at 180 degrees" in told.words


def test_told_by_the_traction_alone(tmp_path: Path) -> None:
    """Without a displacement: shear on the plane alone says antisymmetric, tension symmetric."""
    for column, right in ((3, "antisymmetric"), (0, "symmetric")):
        stress = np.zeros((3, 6))
        stress[:, column] = 2.0
        for tables, declared in ((HALF, "symmetric"), (ODD, "antisymmetric")):
            told = load(seen(tmp_path, bar(3), tables, cells={"stress": stress}))
            assert (told.declared, told.found) == (declared, right)
            assert told.result == (CLOSED if right == declared else OPEN)
            assert np.isnan(told.residual)
    stress[:, 3] = 2.0
    told = load(seen(tmp_path, bar(3), HALF, cells={"stress": stress}))
    assert (told.found, told.result) == (UNTOLD, DOUBTFUL)


def test_the_line_of_several_cases(tmp_path: Path) -> None:
    tables = {**HALF, "case": [{"name": "wind"}]}
    told = load(seen(tmp_path, bar(2), tables, on_plane([1, 0, 0])))
    assert told.line == '[[case]] \'wind\': load = { "mid" = "antisymmetric" }'


# --- continuity -----------------------------------------------------------------------------------


def test_what_is_compared(tmp_path: Path) -> None:
    """Fields that must agree by value and slope, stress by traction, forces and labels not."""
    sector = bar(3)
    n = len(sector.points)
    found = seen(
        tmp_path, sector, {**HALF, "fields": {"force": {"kind": "polar vector", "seam": "sum"}}},
        {"displacement": even(sector.points), "stress": np.ones((n, 6)), "force": np.ones((n, 3)),
         "temperature": np.ones(n), "normal": np.ones((n, 3))},
        {"part": np.arange(3), "cell_stress": np.ones((3, 6))},
    )  # fmt: skip
    measured = {(v.field, v.measure) for v in found.verdicts}
    assert measured == {
        ("displacement", "value"), ("displacement", "kink"), ("stress", "traction"),
        ("temperature", "value"), ("temperature", "kink"), ("normal", "value"),
        ("cell_stress", "traction"),
    }  # fmt: skip


def test_limits_of_the_case(tmp_path: Path) -> None:
    """A jump of 2 e of a value 5 is relative 0.4 e."""
    arrays = on_plane([5e-4, 0, 0])
    for limit, result in ((1.9e-4, OPEN), (2.1e-4, CLOSED)):
        v = the(seen(tmp_path, bar(2), {**HALF, "seam": {"limit": limit}}, arrays), "value")
        assert (v.result, v.limit) == (result, limit)
        assert v.relative == pytest.approx(2e-4)


def test_a_case_of_round_off_is_told_by_the_others(tmp_path: Path) -> None:
    """In the second case nothing but round-off is left: it is small beside the first one."""
    sector = bar(2)
    rng = np.random.default_rng(1)
    case_of(tmp_path, sector, HALF, {"displacement": 1e-17 * rng.normal(size=(12, 3))}, name="b")
    tables = {**HALF, "case": [{"name": "a"}, {"name": "b", "file": "b.vtu"}]}
    found = seen(tmp_path, sector, tables, {"displacement": even(sector.points)})
    values = {v.case: v.result for v in found.verdicts if v.measure == "value"}
    assert values == {"a": CLOSED, "b": CLOSED}


def test_a_case_of_round_off_says_nothing_of_its_load(tmp_path: Path) -> None:
    sector = bar(2)
    rng = np.random.default_rng(1)
    case_of(tmp_path, sector, HALF, {"displacement": 1e-17 * rng.normal(size=(12, 3))}, name="b")
    tables = {**HALF, "case": [{"name": "a"}, {"name": "b", "file": "b.vtu"}]}
    found = seen(tmp_path, sector, tables, {"displacement": even(sector.points)})
    assert {f.case: f.result for f in found.found}["b"] != OPEN


def test_faces_with_other_meshes_are_compared_before_expanding(tmp_path: Path) -> None:
    """They are not merged, but a wrong load word shows there too; unless it is to be kept."""
    given_ = other_mesh()
    body = expand(given_.case(tmp_path))
    assert any("compared by interpolation" in n for n in body.field_data["assumptions"])
    outwards = given_.points["displacement"] * [1.0, -1.0, 1.0]
    case = case_of(tmp_path, given_.sector, given_.tables, {"displacement": outwards})
    with pytest.raises(CheckFailed, match="more than interpolation explains"):
        expand(case)
    assert check(case).verdict == "failed"
    apart = given_.tables | {"seam": {"open": "keep apart"}}
    body = expand(case_of(tmp_path, given_.sector, apart, {"displacement": outwards}))
    assert any("compared by interpolation" in n for n in body.field_data["assumptions"])


@pytest.mark.parametrize("h", range(4))
def test_waves_are_checked_and_expanded(tmp_path: Path, h: int) -> None:
    given_ = wave(h=h)
    case = given_.case(tmp_path)
    found = check(case, seams_only=True)
    assert {v.result for v in found.continuity.verdicts if v.measure == "value"} == {CLOSED}
    assert expand(case).n_points > len(given_.sector.points)


# --- findings -------------------------------------------------------------------------------------


def test_overall() -> None:
    fails, doubts, note = (Finding(w, "", "") for w in (FAILS, DOUBTS, NOTE))
    assert overall([]) == overall([note]) == "passed"
    assert overall([note, doubts]) == "doubtful"
    assert overall([doubts, fails, note]) == "failed"


def test_findings_of_an_open_seam(tmp_path: Path) -> None:
    """The gravest first; the field's own finding points to that of the load."""
    given_ = open_seam()
    found = findings(seen(tmp_path, given_.sector, HALF, given_.points), None)
    assert [f.weight for f in found] == sorted((f.weight for f in found),
                                               key=(FAILS, DOUBTS, NOTE).index)  # fmt: skip
    first, second = (f for f in found if f.weight == FAILS)
    assert first.about == second.about == "plane 'mid'"
    assert "worst at nodes 0, 4" in first.words
    assert "at node 0 (0, 0, 0), 2 nodes in all (see the load of this seam)" in second.words


def test_totals_of_a_sum_of_cases(tmp_path: Path) -> None:
    """Twice the first and minus the second; scales add up as magnitudes. A symmetric load of
    (1, 2, 3) on one node is (0, 4, 6) on the half body's both nodes."""
    sector = bar(2)
    load_ = np.zeros((12, 3))
    load_[-1] = [1.0, 2.0, 3.0]
    tables = {**HALF, "case": [{"name": "a"}, {"name": "b", "factor": 3.0}],
              "sum": [{"name": "s", "terms": {"a": 2.0, "b": -1.0}}]}  # fmt: skip
    read = sector_of(tmp_path, sector, tables,
                     {"displacement": even(sector.points), "applied_force": load_})  # fmt: skip
    found = audit(read, {c.name: c.chi for c in read.cases})
    (result,) = read.results
    assert result.terms == ((0, 2.0), (1, -3.0))
    total = summed(found, result, ("applied_force",))
    assert total is not None
    resultant, force, _ = total
    np.testing.assert_allclose(resultant.force, -1.0 * np.array([0.0, 4.0, 6.0]))
    assert force == pytest.approx(5.0 * 2.0 * np.sqrt(14.0))
    assert summed(found, Result("x", ((0, 1.0),)), ("reaction",)) is None


@pytest.mark.parametrize(
    ("size", "weight"), [(0.05, None), (0.3, DOUBTS), (2.5, FAILS)]
)  # of the whole body's length of 2: a tenth is large, all of it absurd
def test_magnitudes(tmp_path: Path, size: float, weight: str | None) -> None:
    sector = bar(1)
    u = np.outer(sector.points[:, 0] ** 2, [size, 0.0, 0.0])
    for more, expected in (({}, weight), ({"expect": {"mode_shape": True}}, None)):
        found = check(case_of(tmp_path, sector, {**HALF, **more}, {"displacement": u}))
        weights = [f.weight for f in found.findings if f.about == "magnitude"]
        assert weights == ([] if expected is None else [expected])


def test_expectations_of_one_result(tmp_path: Path) -> None:
    """They are for the result named, others are not asked."""
    sector = bar(2)
    load_ = np.zeros((12, 3))
    load_[-1, 1] = 2.0
    tables = {**HALF, "case": [{"name": "a"}, {"name": "b", "factor": 2.0}]}
    points = {"displacement": even(sector.points), "applied_force": load_}
    for result, force, ok in (("a", 4.0, True), ("b", 8.0, True), ("b", 4.0, False)):
        expect = {"expect": {"result": result, "force": [0.0, force, 0.0]}}
        found = check(case_of(tmp_path, sector, {**tables, **expect}, points))
        (told,) = (f for f in found.findings if f.about == "expected")
        assert told.weight == (NOTE if ok else FAILS)
        assert f"result {result!r}" in told.words


# --- the check as a whole -------------------------------------------------------------------------


def test_check_takes_a_case_or_its_path(tmp_path: Path) -> None:
    case = half().case(tmp_path)
    path = tmp_path / "case.toml"
    path.write_text('[model]\nfile = "sector.vtu"\n[[mirror]]\nname = "mid"\nnormal = "x"\n')
    steps: list[str] = []
    whole = check(case, step=steps.append)
    assert len(steps) == len(set(steps)) > 5
    assert all(steps)
    for given_ in (path, str(path)):
        found = check(given_)
        assert found.verdict == whole.verdict == "passed"
        assert [f.words for f in found.findings] == [f.words for f in whole.findings]
    seams = check(case, seams_only=True)
    assert seams.audit is None
    assert seams.continuity.verdicts == whole.continuity.verdicts


# --- roles ----------------------------------------------------------------------------------------


def field(name: str, kind: str, on: str = "points", seam: str = "agree", size: int = 3) -> Field:
    return Field(name, quantity(kind, size), "load", seam, Global(), on, (name,), None, "", "")


@pytest.mark.parametrize(
    ("given_", "role"),
    [
        (field("displacement", "polar vector"), "displacement"),
        (field("Displacement [mm]", "polar vector"), "displacement"),
        (field("displacement_polar", "polar vector"), "displacement"),
        (field("U", "polar vector"), "displacement"),
        (field("displacement", "polar vector", seam="recovered"), None),
        (field("displacement", "polar vector", on="cells"), None),
        (field("velocity", "polar vector"), None),
        (field("rotation", "axial vector"), "rotation"),
        (field("rotation", "axial vector", seam="recovered"), None),
        (field("rotational_speed", "axial vector"), None),
        (field("cell_stress", "symmetric tensor", on="cells", seam="recovered", size=6), "stress"),
        (field("strain", "symmetric tensor", seam="recovered", size=6), None),
        (field("distress", "symmetric tensor", seam="recovered", size=6), None),
        (field("applied_force", "polar vector", seam="sum"), "applied force"),
        (field("external_load", "polar vector", seam="sum"), "applied force"),
        (field("applied_moment", "axial vector", seam="sum"), "applied moment"),
        (field("Reaction Force", "polar vector", seam="sum"), "reaction"),
        (field("RF", "polar vector", seam="sum"), "reaction"),
        (field("reaction_moment", "axial vector", seam="sum"), "reaction moment"),
        (field("contact_force", "polar vector", seam="sum"), "other force"),
        (field("spring_force", "polar vector", seam="sum"), "nodal force"),
        (field("nodal_moment", "axial vector", seam="sum"), "nodal moment"),
        (field("applied_force", "polar vector"), None),
        (field("density", "scalar", on="cells", size=1), "density"),
        (field("shell_thickness", "scalar", on="cells", size=1), "thickness"),
        (field("nodal_mass", "scalar", seam="sum", size=1), "lumped mass"),
        (field("material_id", "label", on="cells", seam="lowest copy", size=1), "part"),
        (field("bolts", "label", seam="lowest copy", size=1), "set"),
    ],
    ids=lambda v: v.name if isinstance(v, Field) else str(v),
)  # fmt: skip
def test_roles(given_: Field, role: str | None) -> None:
    assert [r for r in ROLES if plays(given_, r)] == ([] if role is None else [role])


def test_a_role_by_the_name_of_the_array() -> None:
    renamed = replace(field("mine", "polar vector"), arrays=("Displacement",))
    other = field("velocity", "polar vector")
    assert having([other, renamed, field("u", "polar vector")], "displacement")[0] is renamed


# --- statics --------------------------------------------------------------------------------------


def test_multiplicity(tmp_path: Path) -> None:
    """A quarter: 2 on each plane, 4 on their edge. A pie of five: 2 on the faces, 5 on the axis."""
    sector = bar(2)
    tables = {"mirror": [{"normal": "x"}, {"normal": "y"}]}
    found = multiplicity(sector_of(tmp_path, sector, tables))
    x, y, _ = sector.points.T
    np.testing.assert_array_equal(found, np.where(x == 0, 2, 1) * np.where(y == 0, 2, 1))
    sector = ring(5, inner=0.0)
    found = multiplicity(sector_of(tmp_path, sector, {"cyclic": {"sectors": 5}}))
    r, angle = np.hypot(*sector.points.T[:2]), np.arctan2(*sector.points.T[1::-1])
    face = (angle < 1e-9) | (angle > 2 * np.pi / 5 - 1e-9)
    np.testing.assert_array_equal(found, np.where(r == 0.0, 5, np.where(face, 2, 1)))


def test_vectors_in_global_directions(tmp_path: Path) -> None:
    """(r, theta, z) = (1, 2, 3) at 90 degrees is (-2, 1, 3); of (u, v) alone w is zero; what is
    not finite counts as nothing."""
    sector = ring(4)
    u = np.tile([1.0, 2.0, 3.0], (len(sector.points), 1))
    flat = u[:, :2].copy()
    flat[0] = [np.nan, np.inf]
    tables = {
        "cyclic": {"sectors": 4}, "frames": {"f": {"type": "cylindrical"}},
        "fields": {"displacement": {"kind": "polar vector", "frame": "f"},
                   "applied_force": {"kind": "polar vector", "seam": "sum"}},
    }  # fmt: skip
    read = sector_of(tmp_path, sector, tables, {"displacement": u, "applied_force": flat},
                     allow_nan=True)  # fmt: skip
    by_name = {f.name: global_vectors(read, f, read.cases[0]) for f in read.fields}
    angle = np.arctan2(*sector.points.T[1::-1])
    np.testing.assert_allclose(by_name["displacement"][angle > np.pi / 2 - 1e-9][0], [-2, 1, 3])
    np.testing.assert_array_equal(by_name["applied_force"][0], [0.0, 0.0, 0.0])
    np.testing.assert_array_equal(by_name["applied_force"][1], [1.0, 2.0, 0.0])


def test_plane_models(tmp_path: Path) -> None:
    """Quads in a plane that move in it; not if they bend, nor if there is a solid."""
    sector = Sector(
        np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], dtype=float),
        [(QUAD, [0, 1, 2, 3])],
    )
    flat = {"displacement": np.array([[0, 1, 0], [1, 1, 0], [1, 0, 0], [0, 0, 0]], dtype=float)}
    normal = plane_normal(sector_of(tmp_path, sector, HALF, flat))
    assert normal is not None
    np.testing.assert_allclose(np.abs(normal), [0, 0, 1])
    bent = {"displacement": np.tile([0.0, 1.0, 0.1], (4, 1))}
    assert plane_normal(sector_of(tmp_path, sector, HALF, bent)) is None
    assert plane_normal(sector_of(tmp_path, sector, HALF)) is None
    solid = sector_of(tmp_path, bar(1), HALF, {"displacement": np.zeros((8, 3))})
    assert plane_normal(solid) is None


def test_reactions_of_the_plane_are_no_support(tmp_path: Path) -> None:
    """Node 0 of the plane is held along z by 3, as its own share of the 6 in the whole body; the
    plane's own 7 along x cancels with the image's. Node 11 is held by (1, 0, 2)."""
    sector = bar(2)
    reaction = np.zeros((12, 3))
    reaction[0], reaction[1], reaction[11] = [7, 0, 3], [5, 0, 0], [1, 0, 2]
    read = sector_of(tmp_path, sector, HALF,
                     {"displacement": even(sector.points), "reaction": reaction})  # fmt: skip
    found = audit(read, {c.name: c.chi for c in read.cases})
    (total,) = found.cases[0].totals
    assert total.role == "reaction"
    np.testing.assert_allclose(total.body.force, [0, 0, 10])
    by_node = {int(s.nodes[0]): (own.force, whole.force) for s, own, whole in total.supports}
    assert by_node.keys() == {0, 11}
    np.testing.assert_allclose(by_node[0], [[0, 0, 3], [0, 0, 6]], atol=1e-12)
    np.testing.assert_allclose(by_node[11], [[1, 0, 2], [0, 0, 4]], atol=1e-12)
    assert found.cases[0].held is not None
    words = dict(zip(found.cases[0].motions.words, found.cases[0].held.tolist(), strict=True))
    assert words["translation along y"] == 0.0
    assert words["translation along z"] == pytest.approx(5.0 / (3.0 + np.sqrt(5.0)))


def test_balance_by_hand(tmp_path: Path) -> None:
    """A load of 2 against a reaction of 1: 1 too much on each half, 2 of 4 altogether."""
    sector = bar(2)
    load_, reaction = np.zeros((2, 12, 3))
    load_[11, 1], reaction[11, 1] = 2.0, -1.0
    read = sector_of(
        tmp_path, sector, HALF,
        {"displacement": even(sector.points), "applied_force": load_, "reaction": reaction},
    )  # fmt: skip
    (case,) = audit(read, {c.name: c.chi for c in read.cases}).cases
    assert case.balanced is not None
    fields, balance = case.balanced
    assert fields == ("applied_force", "reaction")
    np.testing.assert_allclose(balance.force, [0, 2, 0])
    assert balance.relative == pytest.approx(0.5)
    assert balance.ratio == pytest.approx(2.0)


# --- re-reference ---------------------------------------------------------------------------------

SQUARES: dict[str, Any] = {"re_reference": {"method": "least squares"}}


def motion(points: np.ndarray, t: Any, omega: Any) -> np.ndarray:
    return np.asarray(t) + np.cross(omega, points)


def test_a_motion_of_half_a_body_is_taken_out(tmp_path: Path) -> None:
    """Along y and z and about x is free; displacement and rotation follow, the stress stays."""
    sector = box((2, 2, 2))
    u = motion(sector.points, [0.0, 0.1, -0.2], [0.03, 0.0, 0.0])
    n = len(u)
    arrays = {"displacement": u, "rotation": np.tile([0.03, 0.0, 0.0], (n, 1)),
              "stress": np.ones((n, 6))}  # fmt: skip
    read = sector_of(tmp_path, sector, HALF | SQUARES, arrays)
    found = referenced(read)
    data = found.model.point_data
    np.testing.assert_allclose(data["displacement"], 0.0, atol=1e-14)
    np.testing.assert_allclose(data["rotation"], 0.0, atol=1e-14)
    np.testing.assert_array_equal(data["stress"], 1.0)
    np.testing.assert_array_equal(read.model.point_data["displacement"], u)  # as it was read
    (note,) = set(found.notes) - set(read.notes)
    assert "case 'result': re-referenced by least squares: taken out" in note
    assert "rotation about x" in note
    assert "0.03 rad" in note
    assert found.model is found.cases[0].model


def test_without_the_table_nothing_is_done(tmp_path: Path) -> None:
    read = sector_of(tmp_path, bar(2), HALF, {"displacement": even(bar(2).points)})
    assert referenced(read) is read


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
@pytest.mark.parametrize("apart", [False, True])
def test_arrays_keep_their_type_and_shape(tmp_path: Path, dtype: type, apart: bool) -> None:
    """One array of three components, or three arrays of one."""
    sector = box((2, 2, 2))
    u = motion(sector.points, [0.0, 0.1, -0.2], [0.03, 0.0, 0.0]) + even(sector.points)
    u = u.astype(dtype)
    names = ["UX", "UY", "UZ"] if apart else ["displacement"]
    arrays = dict(zip(names, u.T, strict=True)) if apart else {"displacement": u}
    tables = HALF | SQUARES | {"fields": {"displacement": {"kind": "polar vector",
                                                           "arrays": names}}}  # fmt: skip
    found = referenced(sector_of(tmp_path, sector, tables, arrays))
    data = found.model.point_data
    for name in names:
        assert data[name].dtype == dtype
        assert data[name].shape == arrays[name].shape
    rest = np.stack([data[n] for n in names], axis=1) if apart else data["displacement"]
    # What is left has no motion in it: its least-squares fit over the whole body is zero.
    weights = 1.0 / multiplicity(found)
    columns = [motion(sector.points, t, w) for t, w in (([0, 1, 0], [0, 0, 0]),
               ([0, 0, 1], [0, 0, 0]), ([0, 0, 0], [1, 0, 0]))]  # fmt: skip
    work = [float((weights[:, None] * c * rest).sum()) for c in columns]
    eps = float(np.finfo(dtype).eps)
    assert np.abs(work).max() < 100 * eps * np.abs(u).sum()
    # And it differs from what was there by such a motion only.
    taken = (u.astype(float) - rest).ravel()
    fitted = np.linalg.lstsq(np.stack([c.ravel() for c in columns], axis=1), taken, rcond=None)[0]
    residual = taken - np.stack([c.ravel() for c in columns], axis=1) @ fitted
    assert np.abs(residual).max() < 4 * eps * np.abs(u).max()


def test_integers_become_numbers(tmp_path: Path) -> None:
    u = np.tile([0, 1, 2], (12, 1)).astype(np.int32)
    data = referenced(sector_of(tmp_path, bar(2), HALF | SQUARES, {"displacement": u}))
    rest = data.model.point_data["displacement"]
    assert rest.dtype == np.float64
    np.testing.assert_allclose(rest, 0.0, atol=1e-14)


def test_columns_of_an_array(tmp_path: Path) -> None:
    """Displacement and rotation in one array of six columns."""
    sector = box((2, 2, 2))
    u = motion(sector.points, [0.0, 0.1, -0.2], [0.03, 0.0, 0.0])
    both = np.hstack([u, np.tile([0.03, 0.0, 0.0], (len(u), 1))])
    fields = {
        "displacement": {"kind": "polar vector", "arrays": "dofs", "columns": [1, 2, 3]},
        "rotation": {"kind": "axial vector", "arrays": "dofs", "columns": [4, 5, 6]},
    }
    found = referenced(sector_of(tmp_path, sector, HALF | SQUARES | {"fields": fields},
                                 {"dofs": both}))  # fmt: skip
    np.testing.assert_allclose(found.model.point_data["dofs"], 0.0, atol=1e-14)


def test_a_plane_model_has_two_components(tmp_path: Path) -> None:
    """(u, v) of quads: along y, and no turn, since the plane x = 0 forbids it."""
    sector = Sector(
        np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], dtype=float),
        [(QUAD, [0, 1, 2, 3])],
    )
    u = np.array([[0, 2.0], [0.1, 2.0], [0.1, 2.0], [0, 2.0]])
    found = referenced(sector_of(tmp_path, sector, HALF | SQUARES, {"displacement": u}))
    rest = found.model.point_data["displacement"]
    assert rest.shape == (4, 2)
    np.testing.assert_allclose(rest, u - [0.0, 2.0], atol=1e-14)


def test_two_displacements_in_two_frames(tmp_path: Path) -> None:
    """A ring that slides along its axis by 0.3 and turns by 0.02: (0, 0.02 r, 0.3) in its own
    directions. Both fields hold it, and both lose it."""
    sector = ring(6)
    u = motion(sector.points, [0.0, 0.0, 0.3], [0.0, 0.0, 0.02])
    r = np.hypot(*sector.points.T[:2])
    own = np.stack([0 * r, 0.02 * r, 0.3 + 0 * r], axis=1)
    tables = {
        "cyclic": {"sectors": 6}, "frames": {"shaft": {"type": "cylindrical"}}, **SQUARES,
        "fields": {"displacement": {"kind": "polar vector"},
                   "displacement_polar": {"kind": "polar vector", "frame": "shaft"}},
    }  # fmt: skip
    read = sector_of(tmp_path, sector, tables, {"displacement": u, "displacement_polar": own})
    data = referenced(read).model.point_data
    np.testing.assert_allclose(data["displacement"], 0.0, atol=1e-13)
    np.testing.assert_allclose(data["displacement_polar"], 0.0, atol=1e-13)


@pytest.mark.parametrize("polar", [False, True])
def test_a_wave_loses_its_translation_across_the_axis(tmp_path: Path, polar: bool) -> None:
    """With one nodal diameter (1, i, 0) is free: x + i y times any complex number."""
    sector = ring(6)
    group_case = sector_of(tmp_path, ring(6), {"cyclic": {"sectors": 6, "nodal_diameters": 1,
                           "phase": "+"}})  # fmt: skip
    motions = free_motions(group_case.group, group_case.cases[0].chi)
    assert motions.count == 2
    t = (0.2 - 0.1j) * motions.basis[0, :3]
    u = np.tile(t, (len(sector.points), 1))
    first, second = (np.abs(u), np.rad2deg(np.angle(u))) if polar else (u.real, u.imag)
    words = ("amplitude", "phase_degrees") if polar else ("real", "imaginary")
    tables = {
        "cyclic": {"sectors": 6, "nodal_diameters": 1, "phase": "+"}, **SQUARES,
        "fields": {"displacement": {"kind": "polar vector", words[0]: "a", words[1]: "b"}},
    }  # fmt: skip
    read = sector_of(tmp_path, sector, tables, {"a": first, "b": second})
    found = referenced(read)
    np.testing.assert_allclose(found.fields[0].values(found.model), 0.0, atol=1e-14)
    auto = tables | {"cyclic": {"sectors": 6, "nodal_diameters": 1}}
    found = referenced(decided(sector_of(tmp_path, sector, auto, {"a": first, "b": second})))
    np.testing.assert_allclose(found.fields[0].values(found.model), 0.0, atol=1e-14)


def test_each_case_has_its_own_motion(tmp_path: Path) -> None:
    """Symmetric: along y and z and about x. Antisymmetric: along x and about y and z."""
    sector = box((2, 2, 2))
    even_motion = motion(sector.points, [0.0, 0.1, -0.2], [0.3, 0.0, 0.0])
    odd_motion = motion(sector.points, [0.5, 0.0, 0.0], [0.0, 0.3, -0.4])
    case_of(tmp_path, sector, HALF, {"displacement": odd_motion}, name="odd")
    tables = {**HALF, **SQUARES, "case": [
        {"name": "a"}, {"name": "b", "file": "odd.vtu", "load": "antisymmetric"},
        {"name": "c", "load": "antisymmetric"},
    ]}  # fmt: skip
    found = referenced(sector_of(tmp_path, sector, tables, {"displacement": even_motion}))
    first, second, third = (c.model.point_data["displacement"] for c in found.cases)
    np.testing.assert_allclose(first, 0.0, atol=1e-14)
    np.testing.assert_allclose(second, 0.0, atol=1e-14)
    assert np.abs(third).max() > 0.01, "the file of the first case under another load"
    assert sum("re-referenced" in n for n in found.notes) == 3


def test_three_points_are_at_rest(tmp_path: Path) -> None:
    """Nodes of the plane: the first at rest, the second along their line, the third in the plane
    of the three; all motion is free, since the plane leaves it so."""
    sector = box((2, 2, 2))
    u = motion(sector.points, [0.0, 0.1, -0.2], [0.03, 0.0, 0.0]) + even(sector.points)
    nodes = [0, 2, 6]
    tables = HALF | {"re_reference": {"method": "three points", "nodes": nodes}}
    found = referenced(sector_of(tmp_path, sector, tables, {"displacement": u}))
    rest, x = found.model.point_data["displacement"], sector.points
    np.testing.assert_allclose(rest[nodes[0]], 0.0, atol=1e-15)
    along = x[nodes[1]] - x[nodes[0]]
    np.testing.assert_allclose(np.cross(rest[nodes[1]], along), 0.0, atol=1e-15)
    assert any("three points" in n for n in found.notes)


@pytest.mark.parametrize("value", [np.nan, np.inf])
def test_values_that_are_not_finite_stay_as_they_are(tmp_path: Path, value: float) -> None:
    """They are counted and stay: a node without a displacement gets none."""
    sector = box((2, 2, 2))
    u = motion(sector.points, [0.0, 0.1, -0.2], [0.0, 0.0, 0.0])
    u[5] = u[7, 1] = value
    found = referenced(
        sector_of(tmp_path, sector, HALF | SQUARES, {"displacement": u}, allow_nan=True)
    )
    rest = found.model.point_data["displacement"]
    others = np.delete(np.arange(27), [5, 7])
    np.testing.assert_allclose(rest[others], 0.0, atol=1e-14)
    np.testing.assert_array_equal(rest[5], [value] * 3)
    np.testing.assert_array_equal(rest[7, 1], value)


@pytest.mark.parametrize(
    ("tables", "arrays", "said"),
    [
        (HALF, {"temperature": np.ones(12)}, "no displacement"),
        ({"mirror": [{"normal": n} for n in "xyz"]}, None, "nothing to remove"),
        (HALF | {"re_reference": {"method": "three points", "nodes": [0, 1]}}, None,
         r"case 'result'.*\[0, 1\]"),
        (HALF | {"re_reference": {"method": "three points", "nodes": [0, 4, 8]}}, None, "one line"),
        (HALF | {"re_reference": {"method": "three points", "nodes": [4, 5, 10]}}, None,
         "plane 'mid' under symmetric load forbids"),
        (HALF | {"re_reference": {"method": "three points", "nodes": [0, 1, 99]}}, None, "99"),
    ],
)  # fmt: skip
def test_what_cannot_be_re_referenced(
    tmp_path: Path, tables: dict[str, Any], arrays: dict[str, np.ndarray] | None, said: str
) -> None:
    arrays = {"displacement": even(bar(2).points)} if arrays is None else arrays
    fields = {"fields": {"temperature": {"kind": "scalar"}}} if "temperature" in arrays else {}
    read = sector_of(tmp_path, bar(2), SQUARES | tables | fields, arrays)
    with pytest.raises(InputError, match=said) as caught:
        referenced(read)
    assert caught.value.remedy


def test_expand_takes_it_out_too_and_records_it(tmp_path: Path) -> None:
    """The whole body holds what the check saw, and its field data say what was taken out."""
    sector = box((2, 2, 2))
    u = motion(sector.points, [0.0, 0.1, -0.2], [0.03, 0.0, 0.0]) + even(sector.points)
    case = case_of(tmp_path, sector, HALF | SQUARES, {"displacement": u.astype(np.float32)})
    body = expand(case)
    values = body.point_data["displacement"]
    assert values.dtype == np.float32
    own = referenced(read_sector(case)).model.point_data["displacement"]
    first = np.asarray(body.point_data["sector_point"])[: len(own)]
    np.testing.assert_allclose(values[: len(own)], own[first], atol=1e-7)
    (note,) = (n for n in body.field_data["assumptions"] if "re-referenced" in n)
    assert "least squares" in note
    assert "rotation about x" in note
    found = check(case)
    assert note in found.continuity.sector.notes
    assert not [f for f in found.findings if f.about == "rigid body" and f.weight != NOTE]
    # The mean over the whole body's nodes, each once, is the motion that is gone.
    np.testing.assert_allclose(np.asarray(values)[:, 1:].mean(axis=0), 0.0, atol=1e-8)


def test_expand_of_a_body_that_does_not_close_is_refused(tmp_path: Path) -> None:
    """Taking a motion out closes no seam."""
    given_ = open_seam()
    case = case_of(tmp_path, given_.sector, HALF | SQUARES, given_.points)
    with pytest.raises(CheckFailed, match="does not close"):
        expand(case)
    assert check(case).verdict == "failed"


def test_shells_are_re_referenced(tmp_path: Path) -> None:
    """A bending plate of two planes slides along z only: its mean deflection goes, not its
    rotation."""
    given_ = shells()
    read = sector_of(tmp_path, given_.sector, given_.tables | SQUARES, given_.points, given_.cells)
    found = referenced(read)
    before, after = (s.model.point_data["displacement"] for s in (read, found))
    taken = before - after
    np.testing.assert_allclose(taken, np.broadcast_to(taken[0], taken.shape), atol=1e-15)
    np.testing.assert_array_equal(found.model.point_data["rotation"], given_.points["rotation"])
