"""`seamfold check` of a plate with a round hole: a quarter as a cyclic sector and as mirrored.

Source: Timoshenko and Goodier, Theory of Elasticity, 3rd ed., section 35 (Kirsch); the field under
tension along x is the sum of an equibiaxial part, the same in every quarter turned by 90 degrees
(h = 0), and of a shear part that changes its sign (h = 2 of N = 4).
"""

from __future__ import annotations

import numpy as np
import pytest

from demo_cases.solver import Mesh, block, quadratic
from tests.against_outside.bodies import SHIFT, SIX, SKEW, Floats, Model, mirrors, stored
from tests.against_outside.checked import Found, found_in, in_skew, skewed
from tests.against_outside.test_kirsch import A, motion, tension

RIGHT = np.pi / 2


def plate(count: int, make=lambda mesh: mesh) -> Mesh:
    """A quarter of the plate, from the hole to four radii, thin, cells growing outwards."""
    return make(block(count, count, 1)).mapped(
        lambda u, v, w: (
            A * 4**u * np.cos(RIGHT * v),
            A * 4**u * np.sin(RIGHT * v),
            0.2 * A * (w - 0.5),
        )
    )


def part(points: Floats, h: int) -> tuple[Floats, Floats]:
    """Displacement and stress (n, 3, 3) of the equibiaxial part (h = 0) or the shear part (2)."""
    sign = 1.0 if h == 0 else -1.0
    return (
        (motion(points) + sign * motion(points, RIGHT)) / 2,
        (tension(points) + sign * tension(points, RIGHT)) / 2,
    )


def case(
    tmp_path, mesh: Mesh, u: Floats, stress: Floats, skew: bool = False, rule: str = "recovered",
    **tables: object,
) -> Found:  # fmt: skip
    moved = in_skew(mesh) if skew else mesh
    if skew:
        u, stress = u @ SKEW.T, SKEW @ stress @ SKEW.T
    model = Model(tmp_path, moved.points, {mesh.shape.vtk_type: mesh.cells})
    model.field("displacement", "polar vector")
    model.field("stress", "symmetric tensor", components=SIX, seam=rule)
    model.values(points={"displacement": u, "stress": stored(stress)})
    return found_in(model.table(**tables).write())


def sector(h: int, skew: bool) -> dict[str, object]:
    place = {"axis": SKEW[:, 2], "point": SHIFT} if skew else {}
    return {"cyclic": {"sectors": 4, "nodal_diameters": h, **place}}


MESHES = {"8": plate(8), "16": plate(16), "20 nodes": plate(8, quadratic)}


@pytest.mark.parametrize("mesh", list(MESHES.values()), ids=list(MESHES))
@pytest.mark.parametrize("rule", ["recovered", "agree"])
@pytest.mark.parametrize("skew", [False, True])
@pytest.mark.parametrize("h", [0, 2])
def test_right_sector(tmp_path, h, skew, rule, mesh):
    """Both parts close under their h; as fields that must agree to round-off."""
    u, stress = part(mesh.points, h)
    found = case(tmp_path, mesh, u, stress, skew, rule, **sector(h, skew))
    assert found.verdict == "passed", found.all_findings
    assert found.load("between")["found"] == f"h = {h}"
    for measure in found.measures():
        assert measure["verdict"] == "closed"
        if measure["measure"] == "value":
            assert measure["relative"] < 1e-12
    wrong = case(tmp_path, mesh, u, stress, skew, rule, **sector(2 - h, skew))
    assert wrong.verdict == "failed"
    assert wrong.load("between")["found"] == f"h = {h}"


@pytest.mark.parametrize("skew", [False, True])
@pytest.mark.parametrize("h", [0, 2])
@pytest.mark.parametrize("ratio", [1.01, 0.99, 1.1])
def test_one_face_scaled(tmp_path, ratio, h, skew):
    """The second face's stress times 1.01: within the mesh's scatter, but a ratio all the same."""
    mesh = MESHES["16"]
    u, stress = part(mesh.points, h)
    stress[np.abs(mesh.points[:, 0]) < 1e-9] *= ratio
    found = case(tmp_path, mesh, u, stress, skew, **sector(h, skew))
    seen = [m for m in found.measures("stress") if m["seam"] == "between sectors"]
    assert {m["verdict"] for m in seen} <= {"doubtful", "open"}
    assert found.verdict != "passed"
    # Told as the one side over the other, whichever the program takes as its own.
    told = float(seen[0]["words"].split("ratio ")[1].split()[0])
    assert min(abs(told - ratio), abs(told - 1 / ratio)) < 1e-4
    # As a field that must agree it is open.
    found = case(tmp_path, mesh, u, stress, skew, "agree", **sector(h, skew))
    (seen,) = [m for m in found.measures("stress") if m["measure"] == "value"]
    assert seen["verdict"] == "open"
    assert found.verdict == "failed"


def test_part_of_one_face_wrong(tmp_path):
    """A tenth more stress at one node of a face is a jump there, and located."""
    mesh = MESHES["16"]
    u, stress = part(mesh.points, 0)
    face = np.flatnonzero(np.abs(mesh.points[:, 0]) < 1e-9)
    node = face[len(face) // 2]
    stress[node] *= 1.1
    found = case(tmp_path, mesh, u, stress, rule="agree", **sector(0, False))
    (seen,) = [m for m in found.measures("stress") if m["measure"] == "value"]
    assert seen["verdict"] == "open"
    x, y, z = mesh.points[node]
    twin = int(np.argmin(np.linalg.norm(mesh.points - [y, -x, z], axis=1)))  # on the first face
    assert set(seen["worst_nodes"]) <= {int(node), twin}


@pytest.mark.parametrize("mesh", list(MESHES.values()), ids=list(MESHES))
@pytest.mark.parametrize("skew", [False, True])
def test_mirrored_quarter(tmp_path, skew, mesh):
    """Tension along x is symmetric in both planes; each wrong word fails and is named."""
    u, stress = motion(mesh.points), tension(mesh.points)

    def planes(*words: str) -> dict[str, object]:
        normals = SKEW.T[:2] if skew else np.eye(3)[:2]
        point = skewed(np.zeros(3)) if skew else np.zeros(3)
        return {"mirror": mirrors(*((f"p{i}", normals[i], point, w) for i, w in enumerate(words)))}

    both = "symmetric", "antisymmetric"
    found = case(tmp_path, mesh, u, stress, skew, **planes(both[0], both[0]))
    assert found.verdict == "passed", found.all_findings
    assert {f["verdict"] for f in found.facts["fields"]} == {"closed"}
    for words in ((0, 1), (1, 0), (1, 1)):
        found = case(tmp_path, mesh, u, stress, skew, **planes(*(both[w] for w in words)))
        assert found.verdict == "failed"
        for i, w in enumerate(words):
            load = found.load(f"p{i}")
            assert load["found"] == "symmetric"
            assert load["verdict"] == ("open" if w else "closed")


def test_shear_part_as_mirrored_quarter(tmp_path):
    """The shear part referred to its diagonals is antisymmetric in both planes x and y."""
    mesh = MESHES["16"]
    u = (motion(mesh.points, RIGHT / 2) - motion(mesh.points, -RIGHT / 2)) / 2
    stress = (tension(mesh.points, RIGHT / 2) - tension(mesh.points, -RIGHT / 2)) / 2
    planes = [(f"p{i}", "xy"[i], [0, 0, 0], "antisymmetric") for i in range(2)]
    found = case(tmp_path, mesh, u, stress, mirror=mirrors(*planes))
    assert found.verdict == "passed", found.all_findings
    assert {f["found"] for f in found.loads if "p" in f["seam"]} == {"antisymmetric"}
