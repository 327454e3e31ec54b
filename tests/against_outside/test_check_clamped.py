"""`seamfold check` of planes that were clamped by mistake, and of those that only look so.

Oracle: sectors solved by `demo_cases.solver` (scikit-fem) with all three displacements held in the
plane. Then both words close by the values; but the slope of the exact solution across the plane of
a symmetric body has no tangential part and across that of an antisymmetric one no normal part
(common practice), and in a clamped one it has both.
"""

from __future__ import annotations

import numpy as np
import pytest

from demo_cases.solver import CutPlane, Fixed, Material, block, body_force, surface_load
from tests.against_outside.bodies import Model
from tests.against_outside.checked import (
    CELLS,
    SHAPES,
    Part,
    X,
    Y,
    Z,
    found_in,
    in_skew_system,
    sides,
    uneven,
    with_mirror,
)

WORDS = {1: "symmetric", -1: "antisymmetric"}


def clamped(shape: str, cells: str, count: int, parity: int, foot: bool = True) -> Part:
    """A half whose plane x = 0 was held in all directions, declared with a parity."""
    mesh = CELLS[cells](SHAPES[shape](count))
    load = body_force(mesh, uneven)
    supports = [Fixed(sides(mesh, X)), *([Fixed(sides(mesh, Z))] if foot else [])]
    solved = Part(mesh, load, supports)
    part = Part(mesh, load, planes=[CutPlane(X, parity=parity)])
    part.__dict__["solution"] = solved.solution
    return part


MESHES = [
    (cells, count)
    for cells in CELLS
    for count in ((3, 6, 10) if cells in ("hexa 8", "tetra 4") else (3, 5))
]


@pytest.mark.parametrize(("cells", "count"), MESHES, ids=str)
@pytest.mark.parametrize("shape", ["bulge", "graded"])
@pytest.mark.parametrize("parity", [1, -1])
def test_clamped_by_mistake(tmp_path, parity, shape, cells, count):
    """Three cells thick to fine: the plane looks clamped, whichever word is declared."""
    found = clamped(shape, cells, count, parity).found(tmp_path)
    load = found.load("p0")
    assert (load["verdict"], load["found"]) == ("open", "looks clamped")
    assert found.verdict == "failed"
    assert "held = true" in load["line"]


@pytest.mark.parametrize(("cells", "count"), MESHES, ids=str)
@pytest.mark.parametrize("parity", [1, -1])
def test_held_as_declared(tmp_path, parity, cells, count):
    """A body that is really held along the plane, and said to be: two independent halves."""
    model = clamped("bulge", cells, count, parity).model(tmp_path)
    found = found_in(with_mirror(model, 0, held=True).write())
    assert found.verdict == "passed", found.all_findings
    assert found.load("p0")["verdict"] == "closed"


def test_clamped_plane_beside_a_right_one(tmp_path):
    """Of two planes the clamped one is named, and the other is not doubted."""
    mesh = SHAPES["bulge"](10)
    load = body_force(mesh, uneven)
    solved = Part(mesh, load, [Fixed(sides(mesh, X))], [CutPlane(Y, parity=-1)])
    part = Part(mesh, load, planes=[CutPlane(X), CutPlane(Y, parity=-1)])
    part.__dict__["solution"] = solved.solution
    found = found_in(part.model(tmp_path).write())
    assert found.load("p1")["verdict"] == "closed"
    assert found.load("p0")["verdict"] == "open"
    assert found.load("p0")["found"] != "symmetric"
    assert found.verdict == "failed"


def test_held_says_nothing_where_the_plane_moves(tmp_path):
    """held = true is no licence: a wrong word on a plane that moves still fails."""
    mesh = SHAPES["bulge"](4)
    part = Part(mesh, body_force(mesh, uneven), [Fixed(sides(mesh, Z))], [CutPlane(X)])
    model = with_mirror(part.model(tmp_path), 0, load="antisymmetric", held=True)
    found = found_in(model.write())
    assert found.verdict == "failed"
    assert found.load("p0")["found"] == "symmetric"


# --- planes where the values vanish anyway --------------------------------------------------------

WITHOUT_POISSON = Material(young=200e3, poisson=0.0)


def quiet(cells: str, count: int, direction: np.ndarray, parity: int, body: bool) -> Part:
    """A bar along x that moves along one direction only, by a function of x alone.

    With nu = 0 tension along x makes no transverse strain, and shear u_z(x) needs no other
    displacement once its shear stress is put on the faces z = const; held so that u(0) = 0.
    """
    mesh = CELLS[cells](block(2 * count, count, count)).mapped(lambda u, v, w: (2 * u, v, w))
    end = mesh.points[:, 0] > 2 - 1e-9
    rest = np.eye(3) - np.outer(direction, direction)
    load = surface_load(mesh, end, direction)
    if body:  # a displacement that is a cubic of x
        load = load + body_force(mesh, lambda x: x[..., :1] * direction)
    everywhere = Fixed(np.arange(len(mesh.points)), rest[np.abs(rest).sum(axis=1) > 0])
    planes = [CutPlane(X, parity=parity)]
    return Part(mesh, load, [everywhere], planes, material=WITHOUT_POISSON)


@pytest.mark.parametrize("body", [False, True], ids=["end load", "and body force"])
@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_values_that_vanish_anyway(tmp_path, parity, cells, body):
    """Tension with nu = 0 is symmetric, simple shear antisymmetric: neither looks clamped."""
    part = quiet(cells, 3, X if parity == 1 else Z, parity, body)
    u = part.solution.displacement
    assert np.abs(u[sides(part.mesh, X)]).max() < 1e-12 * np.abs(u).max()
    found = in_skew_system(part).found(tmp_path, ("displacement", "stress", "cell_stress"))
    assert found.verdict == "passed", found.all_findings
    load = found.load("p0")
    assert (load["verdict"], load["found"]) == ("closed", WORDS[parity])


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_wrong_word_told_by_the_slope(tmp_path, parity, cells):
    """The same under the other word: the slope across the plane tells."""
    part = quiet(cells, 3, X if parity == 1 else Z, parity, body=True)
    model: Model = part.model(tmp_path, ("displacement", "stress"))
    found = found_in(with_mirror(model, 0, load=WORDS[-parity]).write())
    load = found.load("p0")
    assert (load["verdict"], load["found"]) == ("open", WORDS[parity])
    assert WORDS[parity] in load["line"]
    assert found.verdict == "failed"


@pytest.mark.parametrize("cells", list(CELLS))
@pytest.mark.parametrize("parity", [1, -1])
def test_plane_that_hardly_moves(tmp_path, parity, cells):
    """A long bar on its foot, loaded at its far end: at the plane less than 1e-4 of the largest
    displacement is left (Saint-Venant), so both words close by the values; it is not clamped."""
    mesh = CELLS[cells](block(20, 3, 3)).mapped(lambda u, v, w: (10 * u, v, w))
    load = surface_load(mesh, mesh.points[:, 0] > 10 - 1e-9, (0.3, 0.5, -1.0))
    part = Part(mesh, load, [Fixed(sides(mesh, Z))], [CutPlane(X, parity=parity)])
    u = np.linalg.norm(part.solution.displacement, axis=1)
    assert u[sides(mesh, X)].max() < 1e-4 * u.max()
    found = part.found(tmp_path)
    assert found.verdict == "passed", found.all_findings
    assert found.load("p0")["found"] == WORDS[parity]
