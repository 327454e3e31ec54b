"""Rules of the check that only small cases made for them can tell: numbers worked out by hand."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner
from meshes import Sector, box, case_of, ring

from expander.audit.equilibrium import in_plane_share
from expander.audit.overlap import Overlap, Overlaps, overlaps
from expander.audit.statics import plane_normal
from expander.audit.totals import Resultant
from expander.auditing import Audit, audit
from expander.behaviours import Behaviour, factors
from expander.casefile import validate_case
from expander.checking.continuity import Continuity, continuity
from expander.checking.declared import UNTOLD, _Sides, face_ratio, primary
from expander.checking.facets import normals, outer_facets, subset
from expander.checking.feet import opposite
from expander.checking.findings import DOUBTS, FAILS, NOTE, _of_declared, _of_seam, findings
from expander.checking.jumps import Jump
from expander.checking.leaveout import standing_out, without_cells, without_nodes
from expander.checking.neighbours import surroundings
from expander.checking.opposite import Against, Side, error_bound
from expander.checking.roughness import roughness
from expander.checking.seamlist import Seam, seams_of
from expander.checking.smoothness import Near, judged
from expander.checking.verdicts import CLOSED, DOUBTFUL, OPEN, Verdict
from expander.checkup import check
from expander.commandline.check import check as check_command
from expander.errors import InputError
from expander.fields import Field
from expander.frames import Global
from expander.groups import CutPlane, CyclicAxis, make_group
from expander.images import fields_in
from expander.loadcases import LoadCase, Result, _wave, direction_words, results_of
from expander.model import Mesh
from expander.phases import _telling
from expander.placements import Placement
from expander.quantities import quantity
from expander.referencing import _with_values
from expander.sector import read_sector

HALF: dict[str, Any] = {"mirror": [{"name": "mid", "normal": "x"}]}


def bricks(*counts: int) -> Sector:
    """Unit cubes, so many along x, y and z from 0."""
    sector = box(counts)
    return replace(sector, points=np.rint(sector.points * counts))


def seen(folder: Path, sector: Sector, tables: dict[str, Any], **arrays: Any) -> Continuity:
    case = case_of(folder, sector, tables, arrays.get("points"), arrays.get("cells"))
    return continuity(read_sector(case))


def the(found: Continuity, measure: str) -> Verdict:
    (verdict,) = (v for v in found.verdicts if v.measure == measure)
    return verdict


def near_plane(sector: Sector, x: float = 0.0) -> tuple[Any, np.ndarray]:
    """The cells near a plane across x, and its nodes."""
    mesh = sector.mesh()
    nodes = np.flatnonzero(np.abs(mesh.points[:, 0] - x) < 1e-9)
    return surroundings(mesh, nodes, np.tile([-1.0, 0.0, 0.0], (len(nodes), 1))), nodes


# --- two sides in one ratio -----------------------------------------------------------------------


def sides(own: Any, other: Any, kind: str = "sector faces") -> Jump:
    rows = np.arange(len(own))
    seam = Seam("s", kind, 1, rows, rows * 0 + 1, rows[:, None], np.ones((len(own), 1)),
                np.zeros(len(own)))  # fmt: skip
    q = quantity("polar vector", 3)
    field = Field("q", q, "load", "recovered", Global(), "points", ("q",), None, "", "")
    case: Any = type("Case", (), {"name": "c"})()
    return Jump(seam, field, case, q, own, other, np.zeros(len(own)))


@pytest.mark.parametrize(
    ("factor", "noise", "kind", "result"),
    [
        (0.8, 0.0, "sector faces", DOUBTFUL),
        (-1.5, 0.0, "sector faces", DOUBTFUL),
        (0.8, 0.0, "cut plane", CLOSED),
        (0.8, 0.5, "sector faces", CLOSED),
        (1.0005, 0.0, "sector faces", CLOSED),
        (np.exp(0.3j), 0.0, "sector faces", CLOSED),
        (1.2 * np.exp(0.3j), 0.0, "sector faces", DOUBTFUL),
    ],
)
def test_one_ratio(factor: complex, noise: float, kind: str, result: str) -> None:
    """A ratio other than 1 in size, near to exact, at turned faces; beside a large scatter."""
    rng = np.random.default_rng(1)
    own = rng.normal(size=(50, 3)) + 1j * rng.normal(size=(50, 3))
    jump = sides(own, factor * own + noise * rng.normal(size=own.shape), kind)
    v = judged(jump, np.zeros((50, 3)), np.full(50, 1e3), 5.0, "value", 4.0)
    assert v.result == result


def test_a_strain_is_compared_as_a_whole(tmp_path: Path) -> None:
    """No equilibrium makes the normal part of a strain continuous, so all of it is shown."""
    strain = np.tile([1.0, 2.0, 3.0, 4.0, 0.0, 0.0], (3, 1)) * [[1], [2], [3]]
    words = {"kind": "symmetric tensor", "shear": "tensor", "seam": "recovered"}
    found = seen(tmp_path, bricks(3, 1, 1), HALF | {"fields": {"strain": words}},
                 cells={"strain": strain})  # fmt: skip
    v = the(found, "value")
    assert v.components == pytest.approx({"xx": 0, "yy": 0, "zz": 0, "xy": 8, "yz": 0, "zx": 0})


# --- yardsticks -----------------------------------------------------------------------------------


def test_a_face_in_the_seam_is_no_neighbour() -> None:
    near, _ = near_plane(bricks(2, 1, 1), 1.0)
    assert near.cells.tolist() == [0, 1]
    assert sum(len(f.first) for f in near.faces) == 0


def test_jumps_between_cells_are_taken_along_their_face() -> None:
    """Between cells along y the column y of T counts: (0, 3, 4) -> 5."""
    near, _ = near_plane(bricks(1, 2, 1))
    T = np.zeros((2, 3, 3))
    T[1, :, 1], T[1, :, 0], T[1, :, 2] = [0.0, 3.0, 4.0], 70.0, 70.0
    np.testing.assert_allclose(near.jumps(T)[0], 5.0)


@pytest.mark.parametrize(("middle", "found"), [(2.9, []), (3.1, [1])])
def test_what_stands_out(middle: float, found: list[int]) -> None:
    """More than three times the largest jump beside it."""
    lengths = np.array([0.2, middle, 1.0])
    rows, keys = np.array([0, 1, 1, 2]), np.array([0, 0, 1, 1])
    assert standing_out(lengths, rows, keys).tolist() == found


def test_a_face_is_measured_without_its_own_cells() -> None:
    """Three cells along the seam with a second layer: jumps 1, 50, 2 between the layers. The
    middle face is left with 2, the others see the 50."""
    near, _ = near_plane(bricks(2, 3, 1))
    y = near.mesh.points[near.mesh.connectivity.reshape(-1, 8)].mean(axis=1)
    value = np.where(y[:, 0] > 1.0, np.choose(y[:, 1].astype(int), [1.0, 50.0, 2.0]), 0.0)
    jumps = near.jumps(value[near.cells][:, None])
    first = np.flatnonzero(y[:, 0] < 1.0)
    first = first[np.argsort(y[first, 1])]
    corners = [c[near.mesh.points[c][:, 0] == 0.0]
               for c in near.mesh.connectivity.reshape(-1, 8)[first]]  # fmt: skip
    own = np.stack([first, first], axis=1)
    found = without_cells(near, jumps, np.array(corners), own)
    np.testing.assert_allclose(found, [50.0, 2.0, 50.0])


def test_a_node_is_measured_without_its_own_value() -> None:
    """Of the seven other nodes of its cell three have 0, four have 1: 4/7 off the mean, twice."""
    near, nodes = near_plane(bricks(2, 1, 1))
    nodal = near.mesh.points[near.nodes][:, :1]
    nodal[np.searchsorted(near.nodes, nodes[0])] = 100.0
    np.testing.assert_allclose(without_nodes(near, nodal, nodes[:1, None]), 8.0 / 7.0)


def test_a_face_takes_the_largest_of_its_corners(tmp_path: Path) -> None:
    """The layers differ at y = 0 alone, which two cells reach to the fourth row of nodes: the
    fourth face has one corner within."""
    sector = read_sector(case_of(tmp_path, bricks(3, 8, 1), HALF, {"warmth": np.ones(72)}))
    (seam,) = seams_of(sector)
    near = Near(sector.mesh, sector.group, seam)
    centre = near.around.means(sector.mesh.points[near.around.nodes].astype(float))
    values = ((centre[:, 0] > 1.0) & (centre[:, 1] < 1.0)).astype(float)
    faces = centre[near.here][:, 1]
    found, sure = near.face_yardstick(values[:, None], np.zeros(len(faces)))
    assert sure.all()
    np.testing.assert_allclose(found, (faces < 4.0).astype(float))


@pytest.mark.parametrize("on", ["cells", "points"])
def test_one_odd_value_is_not_its_own_measure(tmp_path: Path, on: str) -> None:
    """A shear of 1 in one cell, or at one node, of a seam without any: the jump of 2 is twice what
    that cell (8/7 what that node) differs from its neighbours by, and all the same no scatter."""
    sector = bricks(3, 5, 5)
    mesh = sector.mesh()
    count = len(sector.cells) if on == "cells" else len(sector.points)
    where = mesh.points
    if on == "cells":
        where = mesh.points[mesh.connectivity.reshape(-1, 8)].mean(axis=1)
    stress = np.zeros((count, 6))
    stress[:, 0] = 1.0
    odd = int(np.argmin(np.linalg.norm(where - [0.0, 2.4, 2.4], axis=1)))
    stress[odd, 3] = 1.0
    v = the(seen(tmp_path, sector, HALF, **{on: {"stress": stress}}), "traction")
    assert (v.result, v.jump) == (OPEN, pytest.approx(2.0))
    assert v.times is not None
    assert v.times > 100.0


# --- declared against found -----------------------------------------------------------------------


def test_rows_that_look_the_other_way_take_the_inverse() -> None:
    """At the first face stands the second one of the copy before: its factor is the conjugate."""
    rng = np.random.default_rng(3)
    there = rng.normal(size=(4, 3)) + 1j * rng.normal(size=(4, 3))
    chi = np.exp(0.4j * np.pi)
    factor = np.array([chi, chi, chi.conjugate(), chi.conjugate()])[:, None]
    jump = sides(factor * there, there)
    jump = replace(jump, seam=replace(jump.seam, via=np.array([1, 1, 4, 4])))
    both = _Sides(jump.field, jump, 1.0)
    np.testing.assert_allclose(both.relative(chi), 0.0, atol=1e-15)
    assert both.relative(chi.conjugate()).min() > 0.1


def test_the_error_of_interpolation_is_taken_off() -> None:
    """(3, 4, 0) against 0 of 10, 2 of it by interpolation: 0.3; not below 0."""
    jump = sides(np.array([[3.0, 4.0, 0.0], [1.0, 0.0, 0.0]]), np.zeros((2, 3)))
    jump = replace(jump, allowance=np.array([2.0, 2.0]))
    np.testing.assert_allclose(_Sides(jump.field, jump, 10.0).relative(1.0), [0.3, 0.0])


def test_nodes_of_the_axis_tell_no_ratio() -> None:
    """A node on the axis is its own partner, whatever the wave."""
    there = np.array([[1.0, 2.0, 0.0], [0.0, 1.0, 1.0], [50.0, 60.0, 70.0]]) + 0j
    own = there * np.array([1j, 1j, 1.0])[:, None]
    jump = sides(own, there)
    seam = replace(jump.seam, partners=np.array([[5], [6], [2]]))
    both = _Sides(jump.field, replace(jump, seam=seam), 1.0)
    assert face_ratio([both]) == pytest.approx(1j)


@pytest.mark.parametrize(
    ("change", "told"),
    [({}, True), ({"follows": "body"}, False), ({"on": "cells"}, False),
     ({"seam": "recovered"}, False), ({"quantity": quantity("invariant", 1)}, False)],
)  # fmt: skip
def test_what_tells_a_load(change: dict[str, Any], told: bool) -> None:
    q = quantity("polar vector", 3)
    f = Field("u", q, "load", "agree", Global(), "points", ("u",), None, "", "")
    assert primary(replace(f, **change)) is told


def on_plane(*row: float) -> np.ndarray:
    """A displacement of length 5 at one node and this one at all nodes of the plane x = 0."""
    u = np.zeros((12, 3))
    u[-1], u[:4] = [0.0, 3.0, 4.0], row
    return u


@pytest.mark.parametrize(("limit", "result"), [(0.39, OPEN), (0.41, CLOSED)])
def test_a_load_word_is_judged_by_the_limit(tmp_path: Path, limit: float, result: str) -> None:
    """(1, 2, 0): 2 of 5 across, 4 of 5 along."""
    found = seen(tmp_path, bricks(2, 1, 1), HALF | {"seam": {"limit": limit}},
                 points={"displacement": on_plane(1, 2, 0)})  # fmt: skip
    assert [f.result for f in found.found] == [result]


def test_one_layer_cannot_tell_what_is_clamped(tmp_path: Path) -> None:
    sector = bricks(1, 2, 2)
    y = sector.points[:, 1:2]
    u = sector.points[:, :1] * (1.0 + 0.1 * y) * [1.0, 2.0, 3.0]
    (told,) = seen(tmp_path, sector, HALF, points={"displacement": u}).found
    assert (told.result, told.found) == (DOUBTFUL, UNTOLD)


def test_properties_in_cells_are_no_field_of_the_load(tmp_path: Path) -> None:
    words = {"density": {"kind": "scalar", "follows": "body"}}
    found = seen(tmp_path, bricks(3, 1, 1), HALF | {"fields": words},
                 cells={"density": np.array([1.0, 5.0, 2.0])})  # fmt: skip
    assert found.verdicts == ()


# --- findings -------------------------------------------------------------------------------------


def test_a_doubtful_field_is_a_doubt(tmp_path: Path) -> None:
    sector = bricks(1, 1, 1)
    u = np.outer(sector.points[:, 0] ** 2, [0.0, 1.0, 0.0])
    u[:, 2] = 1.0
    found = seen(tmp_path, sector, HALF, points={"displacement": u})
    assert DOUBTFUL in {v.result for v in found.verdicts}
    assert {f.weight for f in findings(found, None)} == {DOUBTS}


def test_a_near_miss_is_a_doubt(tmp_path: Path) -> None:
    """A node of the plane a fiftieth of an edge beside it: a slit, or an inaccurate node."""
    sector = bricks(2, 2, 2)
    points = sector.points.copy()
    points[4, 0] = 0.02
    found = seen(tmp_path, replace(sector, points=points), HALF,
                 points={"displacement": np.outer(points[:, 0], [1e-3, 0, 0])})  # fmt: skip
    (finding,) = (f for f in findings(found, None) if f.about == "seam nodes")
    assert finding.weight == DOUBTS
    assert "node 4" in finding.words


def audited(folder: Path, **tables: Any) -> tuple[Continuity, Audit]:
    """Half of a bar of two cubes, under a force along y at its far end, which y = 3 carries."""
    sector = bricks(2, 1, 1)
    u = 1e-4 * np.outer(sector.points[:, 0] ** 2, [0.0, 1.0, 0.0])
    force, reaction = np.zeros((12, 3)), np.zeros((12, 3))
    force[-1], reaction[-2] = [0.0, 2.0, 0.0], [0.0, -2.0, 0.0]
    points = {"displacement": u, "applied_force": force, "reaction": reaction}
    cells = {"density": np.ones(2)}
    read = read_sector(case_of(folder, sector, HALF | tables, points, cells))
    return continuity(read), audit(read, {c.name: c.chi for c in read.cases})


def weights(found: Continuity, body: Audit, about: str) -> list[str]:
    return [f.weight for f in findings(found, body) if f.about == about]


def test_a_wrong_volume_fails(tmp_path: Path) -> None:
    found, body = audited(tmp_path)
    assert weights(found, body, "volume") == []
    for name in ("volume", "area", "length"):
        value = 1.0 if name != "volume" else body.body_mass.volume * (1.0 + 1e-6)
        wrong = replace(body, body_mass=replace(body.body_mass, **{name: value}))
        assert weights(found, wrong, "volume") == [FAILS]


def test_cells_inside_out_are_a_doubt(tmp_path: Path) -> None:
    found, body = audited(tmp_path)
    assert weights(found, body, "cells") == []
    wrong = replace(body, sector_mass=replace(body.sector_mass, inverted=np.array([1])))
    assert weights(found, wrong, "cells") == [DOUBTS]


def test_an_overlap_fails(tmp_path: Path) -> None:
    found, body = audited(tmp_path)
    one = Overlap(1, 3, 4, np.zeros(3), 0.1, "it overlaps")
    assert weights(found, body, "overlap") == []
    assert weights(found, replace(body, overlaps=Overlaps((one,), 1, "")), "overlap") == [FAILS]


@pytest.mark.parametrize(
    ("expect", "about", "weight"),
    [
        ({"pieces": 1}, "pieces", []),
        ({"pieces": 2}, "pieces", [FAILS]),
        ({"mass": 4.0}, "mass", [NOTE]),
        ({"mass": 4.1}, "mass", [FAILS]),
        ({"mass": 4.1, "tolerance": 0.1}, "mass", [NOTE]),
        ({"force": [0.0, 4.0, 0.0]}, "expected", [NOTE]),
        ({"force": [0.0, 2.0, 0.0]}, "expected", [FAILS]),
        ({"force": [0.0, -4.0, 0.0], "field": "reaction"}, "expected", [NOTE]),
        ({"moment": [-4.0, 0.0, 0.0]}, "expected", [NOTE]),
        ({"moment": [0.0, 0.0, -20.0], "about": [5.0, 0.0, 1.0]}, "expected", [NOTE]),
    ],
)
def test_what_is_expected(
    tmp_path: Path, expect: dict[str, Any], about: str, weight: list[str]
) -> None:
    """Twice a force of 2 along y at (2, 1, 1) and its image: a moment of -4 about x, none about
    z but for the arm of another point. The cubes weigh 1."""
    found, body = audited(tmp_path, expect=expect)
    assert weights(found, body, about) == weight


def test_each_expectation_has_its_own_point(tmp_path: Path) -> None:
    """The moments of a case are kept about the first point named."""
    points = [[0.0, 0.0, 1.0], [0.0, 0.0, 0.0], [0.0, 0.0, 3.0]]
    expect = [{"moment": [4.0 * (z - 1.0), 0.0, 0.0], "about": [x, y, z]} for x, y, z in points]
    found, body = audited(tmp_path, expect=expect)
    assert weights(found, body, "expected") == [NOTE] * 3


def test_reactions_alone_stand_for_the_loads(tmp_path: Path) -> None:
    reaction = np.zeros((12, 3))
    reaction[-1] = [0.0, -2.0, 0.0]
    for force, weight in (([0.0, 4.0, 0.0], NOTE), ([0.0, -4.0, 0.0], FAILS)):
        tables = HALF | {"expect": {"force": force}}
        case = case_of(tmp_path, bricks(2, 1, 1), tables, {"reaction": reaction})
        assert [f.weight for f in check(case).findings if f.about == "expected"] == [weight]


def test_a_total_that_is_not_there_fails(tmp_path: Path) -> None:
    u = {"displacement": np.outer(np.ones(12), [0.0, 1e-3, 0.0])}
    case = case_of(tmp_path, bricks(2, 1, 1), HALF | {"expect": {"force": [0, 4.0, 0]}}, u)
    assert [f.weight for f in check(case).findings if f.about == "expected"] == [FAILS]


@pytest.mark.parametrize(
    ("reaction", "balance", "weight"),
    [(-2.0, True, []), (-1.0, True, [FAILS]), (-1.0, False, [NOTE])],
)
def test_balance(tmp_path: Path, reaction: float, balance: bool, weight: list[str]) -> None:
    load, held = np.zeros((12, 3)), np.zeros((12, 3))
    load[-1], held[-1] = [0.0, 2.0, 0.0], [0.0, reaction, 0.0]
    case = case_of(tmp_path, bricks(2, 1, 1), HALF | {"expect": {"balance": balance}},
                   {"applied_force": load, "reaction": held})  # fmt: skip
    assert [f.weight for f in check(case).findings if f.about == "balance"] == weight


@pytest.mark.parametrize(("held", "weight"), [(False, [NOTE, DOUBTS]), (True, [NOTE])])
def test_a_body_that_moves_as_one(tmp_path: Path, held: bool, weight: list[str]) -> None:
    """It is a doubt unless reactions work in the motion, as of a body that rests on springs."""
    points = {"displacement": np.outer(np.ones(12), [0.0, 1e-3, 0.0])}
    if held:
        points["reaction"] = np.zeros((12, 3))
        points["reaction"][-1] = [0.0, -2.0, 0.0]
    found = check(case_of(tmp_path, bricks(2, 1, 1), HALF, points)).findings
    assert sorted(f.weight for f in found if f.about == "rigid body") == sorted(weight)


@pytest.mark.parametrize(("apart", "weight"), [(False, FAILS), (True, DOUBTS)])
def test_seams_kept_apart(tmp_path: Path, apart: bool, weight: str) -> None:
    """Nodes that open are a doubt where the case says so; a wrong word is none of that."""
    sector = bricks(2, 4, 4)
    u = np.outer(1.0 + sector.points[:, 1], [0.0, 1e-3, 0.0])
    for load, open_, expected in (("symmetric", True, weight), ("antisymmetric", False, FAILS)):
        v = u.copy()
        v[12, 0] = 1e-3 * open_
        tables = {"mirror": [{"name": "mid", "normal": "x", "load": load}],
                  "seam": {"open": "keep apart" if apart else "refuse"}}  # fmt: skip
        found = findings(seen(tmp_path, sector, tables, points={"displacement": v}), None)
        assert found[0].weight == expected


NONE = np.zeros(0, dtype=np.int64)


@pytest.mark.parametrize("matching", [True, False])
@pytest.mark.parametrize("where", ["against", "apart"])
@pytest.mark.parametrize("gap", [0.01, 0.3])
def test_faces_that_do_not_pair(tmp_path: Path, matching: bool, where: str, gap: float) -> None:
    """Another mesh beside faces that match is a doubt, and so is a seam that altogether stands off
    by less than a tenth of an edge; what is meant as a gap or as another mesh is a note."""
    sector = read_sector(case_of(tmp_path, bricks(2, 1, 1), HALF, {"warmth": np.ones(12)}))
    (seam,) = seams_of(sector)
    one = np.array([0])
    here = Side(NONE, NONE, NONE, np.array([gap]), np.array([0]))
    here = replace(here, **{where: one})
    rest = {} if matching else {"faces": ()}
    seam = replace(seam, against=Against([], np.array([1.0]), here, here), **rest)
    (found,) = _of_seam(sector, seam)
    doubt = matching if where == "against" else not matching and gap < 0.1
    assert found.weight == (DOUBTS if doubt else NOTE)
    assert found.words.startswith("50 %" if matching else "100 %")


def test_values_that_are_not_finite_are_a_note(tmp_path: Path) -> None:
    u = np.outer(np.ones(12), [0.0, 1e-3, 0.0])
    u[7] = np.nan
    case = case_of(tmp_path, bricks(2, 1, 1), HALF, {"displacement": u})
    found = findings(continuity(read_sector(case, allow_nan=True)), None)
    assert [f.weight for f in found if "not finite" in f.words] == [NOTE]


# --- faces ----------------------------------------------------------------------------------------


def leaning() -> Mesh:
    """A parallelogram with the sides (2, 0) and (1, 1)."""
    points = np.array([[0.0, 0, 0], [2, 0, 0], [3, 1, 0], [1, 1, 0]])
    return Mesh(points, np.arange(4), np.array([0, 4]), np.array([9], dtype=np.uint8))


def test_the_normal_of_an_edge_stands_on_it() -> None:
    (edges,) = outer_facets(leaning())
    half = np.sqrt(0.5)
    expected = [[0, -1, 0], [half, -half, 0], [0, 1, 0], [-half, half, 0]]
    np.testing.assert_allclose(normals(leaning(), edges), expected, atol=1e-15)


def test_beside_a_facet_the_field_goes_on() -> None:
    """The foot is on the rim, 0.1 off along the edge, where 5 x has changed by 0.5."""
    mesh = leaning()
    (edges,) = outer_facets(mesh)
    bottom = subset([edges], np.array([0]))
    still = Placement(np.eye(3), np.zeros(3))
    found = opposite(np.array([[2.1, 0.0, 0.0], [1.0, 0.0, 0.0]]), mesh, bottom, still, 0.5)
    np.testing.assert_allclose(error_bound(mesh, bottom, found, 5.0 * mesh.points[:, :1]),
                               [0.5, 0.0], atol=1e-12)  # fmt: skip


def test_facets_across_an_edge_tell_nothing() -> None:
    """Slopes along the six sides of a cube differ, and a linear field is linear all the same."""
    mesh = bricks(1, 1, 1).mesh()
    values = mesh.points @ np.array([[1.0], [2.0], [4.0]])
    np.testing.assert_allclose(roughness(mesh, outer_facets(mesh), values), 0.0, atol=1e-12)


# --- loads at seams -------------------------------------------------------------------------------


def test_a_load_given_in_full_where_four_copies_meet() -> None:
    """6 of the whole body at the edge of two planes, given to the quarter: a quarter of it is 1.5.
    Halved it would still be twice too much."""
    planes = [CutPlane(n, v, np.zeros(3)) for n, v in zip("xy", np.eye(3), strict=False)]
    up = Resultant(np.array([0.0, 0.0, 6.0]), np.zeros(3), np.zeros(3))
    found = in_plane_share(np.zeros((1, 3)), np.array([[0.0, 0.0, -6.0]]), np.array([4]),
                           make_group(planes, None), np.ones(4), up)  # fmt: skip
    assert found.balances
    assert "divided by up to 4" in found.words


@pytest.mark.parametrize(("reaction", "balanced"), [(-2.0, True), (-1.9999, True), (-1.99, False)])
def test_a_thousandth_is_no_balance(tmp_path: Path, reaction: float, balanced: bool) -> None:
    load, held = np.zeros((12, 3)), np.zeros((12, 3))
    load[-1], held[-1] = [0.0, 2.0, 0.0], [0.0, reaction, 0.0]
    case = case_of(tmp_path, bricks(2, 1, 1), HALF, {"applied_force": load, "reaction": held})
    assert ([f for f in check(case).findings if f.about == "balance"] == []) is balanced


def test_a_couple_alone_is_no_balance(tmp_path: Path) -> None:
    """Load and reaction are opposite and stand at different nodes."""
    load, held = np.zeros((12, 3)), np.zeros((12, 3))
    load[-1], held[-2] = [0.0, 2.0, 0.0], [0.0, -2.0, 0.0]
    case = case_of(tmp_path, bricks(2, 1, 1), HALF, {"applied_force": load, "reaction": held})
    assert [f.weight for f in check(case).findings if f.about == "balance"] == [FAILS]


# --- waves ----------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("wave", "parts"),
    [
        ("as given", [("_real", 1.0), ("_imag", -1j)]),
        ("reversed", [("_real", 1.0), ("_imag", 1j)]),
        ("standing", [("_real", 1.0), ("_imag", 0.0)]),
    ],
)
def test_parts_of_an_amplitude(wave: str, parts: list[tuple[str, complex]]) -> None:
    """Re(-i f) = Im f; the wave that runs the other way round has the conjugate amplitude."""
    assert Result("r", ((0, 1.0),), wave).parts(None) == parts


@pytest.mark.parametrize(
    ("phase", "sign", "given"),
    [("+", 1, "backward"), ("-", 1, "forward"), ("+", -1, "forward"), ("-", -1, "backward")],
)
def test_which_way_a_given_wave_runs(phase: str, sign: int, given: str) -> None:
    """cos(h k alpha + omega t) is the same at k + 1 as at k a little later: it comes from there."""
    group = make_group([], CyclicAxis(5, np.array([0.0, 0.0, 1.0]), np.zeros(3)))
    behaviour = Behaviour({}, 1, phase)
    model: Any = None
    case = LoadCase("c", model, behaviour, factors(group, behaviour), 1.0)
    for word in ("forward", "backward"):
        assert _wave(word, True, case, sign) == ("as given" if word == given else "reversed")
        result = Result("r", ((0, 1.0),), _wave(word, True, case, sign), sign)
        assert word in direction_words(result, (case,))
    with pytest.raises(InputError, match="gyroscopic"):
        _wave("forward", False, case, sign)


def test_what_tells_the_direction_of_a_wave() -> None:
    """Fields that must agree; where there are none, recovered ones."""
    q = quantity("polar vector", 3)
    f = Field("u", q, "load", "agree", Global(), "points", ("u",), None, "", "", second=("v",))
    recovered = replace(f, seam="recovered")
    sector: Any = type("Sector", (), {"fields": (f, recovered, replace(f, second=()))})()
    assert _telling(sector) == ([f], [recovered])


# --- the audit ------------------------------------------------------------------------------------


def audit_of(folder: Path, sector: Sector, tables: dict[str, Any], **points: np.ndarray) -> Audit:
    read = read_sector(case_of(folder, sector, tables, points))
    return audit(read, {c.name: c.chi for c in read.cases})


def test_supports_on_a_turned_seam_make_the_whole_reaction(tmp_path: Path) -> None:
    """One node of the first face reacts; the node that it meets has the same reaction, turned.
    The torque of both halves around the ring is that of the whole."""
    sector = ring(5)
    reaction = np.zeros((len(sector.points), 3))
    reaction[np.argmax(sector.points[:, 0])] = [3.0, 4.0, 5.0]
    body = audit_of(tmp_path, sector, {"cyclic": {"sectors": 5}}, reaction=reaction)
    (total,) = (t for t in body.cases[0].totals if t.role == "reaction")
    assert len(total.supports) == 2
    torque = sum(s.moment[2] for _, _, s in total.supports)
    assert torque == pytest.approx(total.body.moment[2])
    assert torque == pytest.approx(5 * 2.0 * 4.0)


def test_the_share_of_a_motion_is_that_of_the_whole_body(tmp_path: Path) -> None:
    """u_y = 1 + x^2 at x = -2 .. 2 of the whole bar: 5, 2, 1, 2, 5, whose mean is 3."""
    sector = bricks(2, 1, 1)
    u = np.outer(1.0 + sector.points[:, 0] ** 2, [0.0, 1e-3, 0.0])
    body = audit_of(tmp_path, sector, HALF, displacement=u)
    assert body.cases[0].share == pytest.approx(3.0 * np.sqrt(5.0 / 59.0))


def test_large_reactions_balance_as_they_are_printed(tmp_path: Path) -> None:
    """Two reactions of 100 against each other, as under temperature, leave 1e-5 over beside a load
    of 1e-3."""
    load, held = np.zeros((12, 3)), np.zeros((12, 3))
    load[11, 1], held[11, 1] = 1e-3, -1e-3 + 1e-5
    held[8, 2], held[9, 2] = -100.0, 100.0
    case = case_of(tmp_path, bricks(2, 1, 1), HALF, {"applied_force": load, "reaction": held})
    assert [f for f in check(case).findings if f.about == "balance"] == []


def test_a_curved_shell_is_no_plane_model(tmp_path: Path) -> None:
    ticks = np.arange(3.0)
    points = np.array([[x, y, 0.2 * (y - 1.0) ** 2] for x in ticks for y in ticks])
    cells = [(9, [3 * i + j, 3 * i + 3 + j, 3 * i + 4 + j, 3 * i + 1 + j])
             for i in range(2) for j in range(2)]  # fmt: skip
    for height, plane in ((1.0, False), (0.0, True)):
        sector = Sector(points * [1.0, 1.0, height], cells)
        u = {"displacement": np.outer(points[:, 0], [1e-3, 0.0, 0.0])}
        read = read_sector(case_of(tmp_path, sector, HALF, u))
        assert (plane_normal(read) is not None) is plane


def test_a_copy_without_nodes_inside_overlaps() -> None:
    """A cube about the axis lies on its copy node by node: only its middle is inside."""
    cube = bricks(1, 1, 1)
    mesh = replace(cube, points=2.0 * cube.points - 1.0).mesh()
    group = make_group([], CyclicAxis(2, np.array([0.0, 0.0, 1.0]), np.zeros(3)))
    (found,) = overlaps(mesh, group).found
    assert (found.copy, found.nodes, found.node) == (1, 0, -1)
    assert found.depth == pytest.approx(1.0)


def test_a_skin_without_thickness_weighs_nothing(tmp_path: Path) -> None:
    """Beside solids; a plate alone is taken as one thick."""
    block = bricks(1, 1, 1)
    skin = (9, [4, 6, 7, 5])
    for cells, mass in (([*block.cells, skin], 2.0), ([*block.cells], 2.0)):
        body = audit_of(tmp_path, replace(block, cells=cells), HALF)
        assert body.carried_mass.mass == pytest.approx(mass)
    plate = Sector(np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]]), [(9, [0, 1, 2, 3])])
    assert audit_of(tmp_path, plate, HALF).carried_mass.mass == pytest.approx(2.0)


def test_what_a_result_holds() -> None:
    """An invariant of one case as it is; not of a case with a mean, or at a moment of the cycle."""
    q = quantity("invariant", 1)
    f = Field("von_mises", q, "load", "agree", Global(), "points", ("v",), None, "", "")
    case = type("Case", (), {"complex_factors": False})()
    body: Any = type("Body", (), {"fields": [f], "cases": (case, case)})()
    plain = Result("r", ((0, 1.0),))
    assert fields_in(body, plain) == [f]
    assert fields_in(body, replace(plain, mean=1)) == []
    assert fields_in(body, replace(plain, terms=((0, 2.0),))) == []
    assert fields_in(body, plain, moment=30.0) == []


@pytest.mark.parametrize("words", [("real", "imaginary"), ("amplitude", "phase_degrees")])
def test_complex_values_are_stored_as_they_came(tmp_path: Path, words: tuple[str, str]) -> None:
    sector = ring(5)
    n = len(sector.points)
    names = dict(zip(words, ("first", "second"), strict=True))
    tables = {"cyclic": {"sectors": 5, "nodal_diameters": 1},
              "fields": {"displacement": {"kind": "polar vector", **names}}}  # fmt: skip
    read = read_sector(case_of(tmp_path, sector, tables,
                               {"first": np.ones((n, 3)), "second": np.ones((n, 3))}))  # fmt: skip
    rng = np.random.default_rng(8)
    values = rng.normal(size=(n, 3)) + 1j * rng.normal(size=(n, 3))
    (f,) = read.fields
    stored = _with_values(read, read.model, f, values)
    np.testing.assert_allclose(f.values(stored), values, atol=1e-12)


def test_waves_that_run_both_ways_are_not_added(tmp_path: Path) -> None:
    """One is taken as it was solved, the other one turned round."""
    group = make_group([], CyclicAxis(5, np.array([0.0, 0.0, 1.0]), np.zeros(3)))
    model: Any = None
    behaviour = Behaviour({}, 1, "+")
    cases = tuple(LoadCase(n, model, behaviour, factors(group, behaviour), 1.0) for n in ("a", "b"))
    tables = {
        "cyclic": {"sectors": 5, "nodal_diameters": 1, "phase": "+"},
        "case": [{"name": "a", "wave": "forward", "undamped": True}, {"name": "b"}],
        "sum": [{"name": "s", "terms": {"a": 1.0, "b": 1.0}}],
    }
    with pytest.raises(InputError, match="adds waves taken differently"):
        results_of(validate_case(tables, tmp_path), cases)


def test_nodal_masses_are_the_mass_where_no_density_is_known(tmp_path: Path) -> None:
    mass = np.arange(12.0)
    tables = HALF | {"fields": {"nodal_mass": {"kind": "scalar", "seam": "sum"}}}
    body = audit_of(tmp_path, bricks(2, 1, 1), tables, nodal_mass=mass)
    assert body.carried_mass.mass == pytest.approx(2.0 * mass.sum())
    assert "nodal_mass" in body.mass_from


def test_vectors_are_stored_in_their_frame(tmp_path: Path) -> None:
    sector = ring(5)
    n = len(sector.points)
    tables = {
        "cyclic": {"sectors": 5},
        "frames": {"hub": {"type": "cylindrical", "axis": "z"}},
        "fields": {"displacement": {"kind": "polar vector", "frame": "hub"}},
    }
    read = read_sector(case_of(tmp_path, sector, tables, {"displacement": np.zeros((n, 3))}))
    radius = np.hypot(*sector.points.T[:2])
    outwards = sector.points * [1.0, 1.0, 0.0]
    stored = _with_values(read, read.model, read.fields[0], outwards)
    found = np.asarray(stored.point_data["displacement"])
    np.testing.assert_allclose(found, np.outer(radius, [1.0, 0.0, 0.0]), atol=1e-12)


@pytest.mark.parametrize("words", [[], ["--seams-only"]])
def test_the_seams_alone_on_the_command_line(tmp_path: Path, words: list[str]) -> None:
    u = np.outer(np.arange(12.0), [0.0, 1e-6, 0.0])
    case_of(tmp_path, bricks(2, 1, 1), HALF, {"displacement": u})
    path = str(tmp_path / "sector.vtu")
    ran = CliRunner().invoke(check_command, [path, "--mirror", "x", "--json", *words])
    assert (json.loads(ran.stdout)["audit"] is None) is bool(words)


def test_a_wrong_word_is_none_of_what_is_kept_apart(tmp_path: Path) -> None:
    sector = bricks(2, 4, 4)
    u = np.outer(1.0 + sector.points[:, 1], [0.0, 1e-3, 0.0])
    tables = {"mirror": [{"name": "mid", "normal": "x", "load": "antisymmetric"}]}
    (told,) = seen(tmp_path, sector, tables, points={"displacement": u}).found
    for apart in (False, True):
        assert [f.weight for f in _of_declared(told, apart)] == [FAILS]


def test_totals_are_about_the_point_of_what_is_expected(tmp_path: Path) -> None:
    about = [1.0, 2.0, 3.0]
    _, body = audited(tmp_path, expect={"force": [0.0, 4.0, 0.0], "about": about})
    for total in body.cases[0].totals:
        assert total.sector.about.tolist() == total.body.about.tolist() == about


def test_sections_of_a_sum_of_cases(tmp_path: Path) -> None:
    """A stress of 5 on an area of 1, once and twice, the second from a case of factor 2."""
    stress = np.zeros((2, 6))
    stress[:, 0] = 5.0
    tables = HALF | {
        "case": [{"name": "a"}, {"name": "b", "factor": 2.0}],
        "sum": [{"name": "s", "terms": {"a": 1.0, "b": 2.0}}],
        "section": [{"name": "cut", "normal": "x", "point": [0.5, 0.0, 0.0]}],
    }
    u = np.zeros((12, 3))
    case = case_of(tmp_path, bricks(2, 1, 1), tables, {"displacement": u}, {"stress": stress})
    read = read_sector(case)
    ((name, result, section),) = audit(read, {c.name: c.chi for c in read.cases}).sections
    assert (name, result) == ("cut", "s")
    np.testing.assert_allclose(section.force, [25.0, 0.0, 0.0], atol=1e-12)
