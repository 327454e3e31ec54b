"""`seamfold check` of solved sectors: right ones pass, a wrong word or constraint is named.

Oracle: sectors solved with the right seam conditions by `demo_cases.solver` (scikit-fem). That a
symmetric plane holds the normal and an antisymmetric one the tangential displacement, and that the
traction and the slope of the exact solution are continuous there: common practice; the parities of
vectors and tensors under reflection: Nye, Physical Properties of Crystals, chapter 1.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from demo_cases.solver import CutPlane, Cyclic, Fixed, Material, body_force, point_load
from tests.against_outside.checked import (
    CELLS,
    SHAPES,
    Found,
    Part,
    X,
    Y,
    Z,
    bore,
    found_in,
    in_skew_system,
    ring,
    sides,
    uneven,
    with_mirror,
)

# Largest jump of traction or slope that a right solution may show, as part of the default limit.
WELL_UNDER = 0.75


def right(found: Found, at_most: float = WELL_UNDER) -> None:
    """Nothing contradicts the case: not one field, load or total."""
    assert found.verdict == "passed", found.all_findings
    assert {f["verdict"] for f in found.facts["fields"]} == {"closed"}
    for load in found.loads:
        assert load["verdict"] == "closed"
        assert load["found"] in (load["declared"], "zero field")
        assert load["residual"] < 1e-9  # the constraint was kept by elimination, to round-off
    for measure in ("traction", "kink", "value"):
        assert found.times(measure) < at_most * found.facts["limits"]["scatter"], measure


# --- right solutions ------------------------------------------------------------------------------


def quarter(shape: str, cells: str, count: int, parities: tuple[int, int]) -> Part:
    mesh = CELLS[cells](SHAPES[shape](count))
    planes = [CutPlane(n, parity=p) for n, p in zip((X, Y), parities, strict=True)]
    return Part(mesh, body_force(mesh, uneven), [Fixed(sides(mesh, Z))], planes)


@pytest.mark.parametrize("parities", list(itertools.product((1, -1), repeat=2)), ids=str)
@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("shape", list(SHAPES))
def test_right_quarter(tmp_path, shape, cells, parities):
    """Coarse and fine, with notches and re-entrant edges in the seam, the foot clamped up to it."""
    for count in (4, 8) if cells in ("hexa 8", "tetra 4") else (4,):
        right(quarter(shape, cells, count, parities).found(tmp_path))


@pytest.mark.parametrize("parities", list(itertools.product((1, -1), repeat=2)), ids=str)
@pytest.mark.parametrize("cells", ["hexa 8", "hexa 20"])
def test_right_quarter_one_cell_thick(tmp_path, cells, parities):
    """Ligaments of a single cell beside a re-entrant edge, steep loads: coarse, but right."""
    part = quarter("elbow along y", cells, 2, parities)
    right(replace(part, load=body_force(part.mesh, steep)).found(tmp_path), at_most=1.0)


def steep(x):
    """A force per volume that varies more."""
    return np.stack([1 + x[..., 1], -0.5 + x[..., 2] ** 2, 0.3 - x[..., 0]], axis=-1)


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_right_half(tmp_path, parity, cells):
    """Skewed and shifted, of cells with uneven stiffness."""
    mesh = CELLS[cells](SHAPES["bulge"](5))
    material = Material(young=200e3 * (1 + 0.4 * np.sin(7.0 * np.arange(len(mesh.cells)))))
    planes = [CutPlane(X, parity=parity)]
    part = Part(mesh, body_force(mesh, uneven), [Fixed(sides(mesh, Z))], planes, material=material)
    right(in_skew_system(part).found(tmp_path))


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parities", list(itertools.product((1, -1), repeat=3)), ids=str)
def test_right_eighth(tmp_path, parities, cells):
    """All eight words of an eighth, skewed and shifted, held at a face away from the planes."""
    mesh = CELLS[cells](SHAPES["bulge"](3))
    far = mesh.points[:, 2] > 1.3 * 0.7  # the uppermost cells
    planes = [CutPlane(n, parity=p) for n, p in zip((X, Y, Z), parities, strict=True)]
    right(
        in_skew_system(Part(mesh, body_force(mesh, uneven), [Fixed(far)], planes)).found(tmp_path)
    )


SIXTY = np.deg2rad(60)


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_right_sixth(tmp_path, parity, cells):
    """Planes at 60 degrees, both of one parity, as an odd m demands."""
    mesh = CELLS[cells](ring(6, (3, 4, 3)))
    planes = [
        CutPlane(Y, parity=parity),
        CutPlane((np.sin(SIXTY), -np.cos(SIXTY), 0), parity=parity),
    ]
    part = Part(mesh, body_force(mesh, uneven), [Fixed(bore(mesh))], planes)
    right(in_skew_system(part).found(tmp_path))


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("sectors", [2, 3, 4, 7, 12])
def test_right_cyclic(tmp_path, sectors, cells):
    """h = 0 and h = N/2, plane and curved seams, skewed and shifted; with a plane normal to the
    axis; and half-sectors."""
    around = 6 if sectors == 2 else 3
    for parity in (1, -1) if sectors % 2 == 0 else (1,):
        axis = Cyclic(sectors, Z, parity=parity)
        for lean in (0.0, 0.25):
            mesh = CELLS[cells](ring(sectors, (3, around, 3), lean))
            part = Part(mesh, body_force(mesh, uneven), [Fixed(bore(mesh))], cyclic=axis)
            right(in_skew_system(part).found(tmp_path))
        mesh = CELLS[cells](ring(sectors, (3, around, 3)))
        for q in (1, -1):
            plane = CutPlane(Z, parity=q)
            part = Part(mesh, body_force(mesh, uneven), [Fixed(bore(mesh))], [plane], axis)
            right(in_skew_system(part).found(tmp_path))
        if sectors > 2:
            half = CELLS[cells](ring(sectors, (3, 3, 3), part=0.5))
            a = np.pi / sectors
            for q in (1, -1):
                planes = [CutPlane(Y, parity=q),
                          CutPlane((np.sin(a), -np.cos(a), 0), parity=q * parity)]  # fmt: skip
                part = Part(half, body_force(half, uneven), [Fixed(bore(half))], planes, axis,
                            halves=True)  # fmt: skip
                right(in_skew_system(part).found(tmp_path))


def loaded_at_a_node(cells: str, parity: int, foot: str) -> Part:
    """A half with a force at one node of its plane, by half, on its foot or on lines of it."""
    mesh = CELLS[cells](SHAPES["bulge"](6))
    top = np.argmin(np.linalg.norm(mesh.points - [0, 0.4, 1.3], axis=1))
    force = [0, 0.5, -1] if parity == 1 else [-1.0, 0, 0]
    held = sides(mesh, Z)
    if foot == "lines":
        x, y, _ = mesh.points[held].T
        held = held[(x < 1e-9) | (y < 1e-9)]
    return Part(mesh, point_load(mesh, top, force), [Fixed(held)], [CutPlane(X, parity=parity)])


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_right_with_a_point_load_in_the_plane(tmp_path, parity, cells):
    """A force at one node of the seam."""
    right(loaded_at_a_node(cells, parity, "whole").found(tmp_path))


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_right_with_line_supports_in_the_plane(tmp_path, parity, cells):
    """Supports along lines of nodes, one within the seam: singular there, but right."""
    found = loaded_at_a_node(cells, parity, "lines").found(tmp_path)
    assert {f["verdict"] for f in found.facts["fields"]} == {"closed"}
    assert found.load("p0")["verdict"] == "closed"
    assert not found.says(weight="fails"), found.all_findings


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_tipping_on_its_supports_is_no_free_motion(tmp_path, parity, cells):
    """The same body tips on its line supports, nearly as if rigid, but reactions hold it."""
    found = loaded_at_a_node(cells, parity, "lines").found(tmp_path)
    assert "held by reactions" in found.says("rigid body")
    assert not found.says("rigid body", weight="doubts")


# --- a wrong word ---------------------------------------------------------------------------------

WORDS = {1: "symmetric", -1: "antisymmetric"}


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_wrong_word(tmp_path, parity, cells):
    """The solution of one parity under the other word: the right word and its line are told."""
    mesh = CELLS[cells](SHAPES["bulge"](3))
    part = Part(mesh, body_force(mesh, uneven), [Fixed(sides(mesh, Z))],
                [CutPlane(X, parity=parity), CutPlane(Y, parity=-1)])  # fmt: skip
    model = with_mirror(in_skew_system(part).model(tmp_path), 0, load=WORDS[-parity])
    found = found_in(model.write())
    assert found.verdict == "failed"
    load = found.load("p0")
    assert (load["verdict"], load["declared"], load["found"]) == (
        "open", WORDS[-parity], WORDS[parity])  # fmt: skip
    assert load["line"] == f"[[mirror]] 'p0': load = \"{WORDS[parity]}\""
    assert load["best_other_residual"] < 1e-9 < 1e-2 < load["residual"]
    # The word is wrong by twice the component that the right word leaves free: the worst node by
    # hand.
    u = part.solution.displacement
    held = np.array([1, 0, 0]) if parity == 1 else np.array([0, 1, 1])
    free = np.linalg.norm(u * (1 - held), axis=1)
    free[mesh.points[:, 0] > 1e-9] = 0.0
    worst = int(np.argmax(free))
    assert load["nodes"][0] == worst
    assert load["residual"] == pytest.approx(
        2 * free[worst] / np.linalg.norm(u, axis=1).max(), rel=1e-6
    )
    assert found.load("p1")["verdict"] == "closed"
    assert f"node {worst}" in found.says("p0", weight="fails") or f"nodes {worst}" in found.says(
        "p0", weight="fails"
    )
    assert found.says("load = ", WORDS[parity], weight="fails")


@pytest.mark.parametrize("parity", [1, -1])
def test_wrong_nodal_diameters(tmp_path, parity):
    """h = 0 against h = N/2 of a real solution."""
    mesh = ring(6, (3, 3, 3), lean=0.25)
    part = in_skew_system(
        Part(mesh, body_force(mesh, uneven), [Fixed(bore(mesh))], cyclic=Cyclic(6, parity=parity))
    )
    model = part.model(tmp_path)
    model.tables["cyclic"]["nodal_diameters"] = 3 if parity == 1 else 0
    found = found_in(model.write())
    true = 0 if parity == 1 else 3
    assert found.verdict == "failed"
    (load,) = found.loads
    assert (load["verdict"], load["found"]) == ("open", f"h = {true}")
    assert f"nodal_diameters = {true}" in load["line"]


def test_wrong_word_of_one_case(tmp_path):
    """Of two cases on one mesh the wrong one is named."""
    mesh = SHAPES["bulge"](3)
    parts = {
        name: Part(mesh, body_force(mesh, uneven), [Fixed(sides(mesh, Z))], [CutPlane(X, parity=p)])
        for name, p in (("even", 1), ("odd", -1))
    }
    model = parts["even"].model(tmp_path)
    for name, part in parts.items():
        other = part.model(tmp_path)
        model.values(name, points=other.data["result"][0], cells=other.data["result"][1])
    model.table(case=[{"name": "even"}, {"name": "odd", "load": {"p0": "symmetric"}}])
    found = found_in(model.write())
    assert found.verdict == "failed"
    even, odd = (next(f for f in found.loads if f["case"] == c) for c in ("even", "odd"))
    assert even["verdict"] == "closed"
    assert (odd["verdict"], odd["found"]) == ("open", "antisymmetric")
    assert "'odd'" in odd["line"]
    assert '"antisymmetric"' in odd["line"]


# --- a constraint forgotten at one node -----------------------------------------------------------


def forgetful(mesh, parity: int, node: int, load: np.ndarray) -> Part:
    """A half whose plane x = 0 is held by supports at every node but one."""
    on = sides(mesh, X)
    rows: Callable = (X,) if parity == 1 else (Y, Z)
    held = Fixed(on[on != node], rows)
    part = Part(mesh, load, [Fixed(sides(mesh, Z)), held])
    solved = part.solution
    declared = Part(mesh, load, planes=[CutPlane(X, parity=parity)])
    declared.__dict__["solution"] = solved
    return declared


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_constraint_forgotten_at_one_node(tmp_path, parity, cells):
    """That node is named, and named first; the word itself is not doubted."""
    mesh = CELLS[cells](SHAPES["bulge"](4))
    node = int(np.argmin(np.linalg.norm(mesh.points - [0, 0.4, 0.9], axis=1)))
    assert mesh.points[node, 0] == 0.0
    found = forgetful(mesh, parity, node, body_force(mesh, uneven)).found(tmp_path)
    assert found.verdict == "failed"
    load = found.load("p0")
    assert (load["verdict"], load["found"]) == ("open", WORDS[parity])
    assert load["nodes"] == [node]
    value = next(m for m in found.measures("displacement") if m["measure"] == "value")
    assert (value["node"], value["worst_nodes"], value["open_nodes"]) == (node, [node], 1)
    assert f"node {node}" in found.says("p0", weight="fails")


def test_constraint_forgotten_at_one_cyclic_pair(tmp_path):
    """One pair of nodes that does not follow: both are named, before all others."""
    mesh = ring(5, (3, 3, 3))
    part = Part(mesh, body_force(mesh, uneven), [Fixed(bore(mesh))], cyclic=Cyclic(5))
    u = part.solution.displacement.copy()
    far = np.argmax(np.where(np.abs(mesh.points[:, 1]) < 1e-9, mesh.points[:, 0], 0.0))
    u[far] += 0.01 * np.abs(u).max()
    found = part.found(tmp_path, displacement=u)
    assert found.verdict == "failed"
    (load,) = found.loads
    assert (load["verdict"], load["found"]) == ("open", "h = 0")
    turned = part.cyclic.placement[0] @ mesh.points[far]
    partner = int(np.argmin(np.linalg.norm(mesh.points - turned, axis=1)))
    assert set(load["nodes"]) <= {int(far), partner}
    assert load["nodes"]
