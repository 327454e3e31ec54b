"""Rules that no other test holds, each found by breaking it (mutants.toml)."""

from __future__ import annotations

import ast
from pathlib import Path

import numpy as np
import pytest
from meshes import QUAD, Sector, box, case_of, centres, ring

import expander
from expander import expand
from expander.body import prepare
from expander.errors import InputError
from expander.placements import Placement
from expander.tradewords import trade_word

HALF = {"mirror": [{"normal": "x"}]}
ODD_HALF = {"mirror": [{"normal": "x", "load": "antisymmetric"}]}
RANDOM = np.random.default_rng(31)


# --- placements and behaviours ------------------------------------------------------------------


@pytest.mark.parametrize(
    "placement",
    [
        Placement.mirror([1, 2, -2], [3, 1, 4]),
        Placement.turn([1, 2, -2], 72, [3, 1, 4]),
        Placement.turn([0, 0, 1], 50, [3, 1, 4]) @ Placement.mirror([1, 0, 0], [2, 0, 0]),
    ],
    ids=["mirror", "turn", "turn after mirror"],
)
def test_there_and_back(placement: Placement) -> None:
    """The inverse is that of the matrix [Q t; 0 1], by numpy."""
    matrix = np.eye(4)
    matrix[:3, :3], matrix[:3, 3] = placement.Q, placement.t
    back = np.linalg.inv(matrix)
    found = placement.inverse()
    np.testing.assert_allclose(found.Q, back[:3, :3], atol=1e-14)
    np.testing.assert_allclose(found.t, back[:3, 3], atol=1e-14)


def test_nodal_diameters_of_a_case(tmp_path: Path) -> None:
    """A case's own h goes before that of [cyclic]: sector k takes (-1)^k at N/2 (D. L. Thomas,
    Journal of Sound and Vibration 66, 1979: the phase from sector to sector is 2 pi h / N)."""
    sector = ring(4)
    tables = {
        "cyclic": {"sectors": 4},
        "case": [{"name": "mean"}, {"name": "wave", "nodal_diameters": 2}],
        "fields": {"v": {"kind": "scalar"}},
    }
    case = case_of(tmp_path, sector, tables, cell_data={"v": np.ones(len(sector.cells))})
    for result, factor in (("mean", 1.0), ("wave", -1.0)):
        body = expand(case, result)
        angle = np.degrees(np.arctan2(*body.cell_centers().points.T[1::-1])) % 360.0
        np.testing.assert_array_equal(body.cell_data["v"], factor ** (angle // 90.0))


# --- seams --------------------------------------------------------------------------------------


@pytest.mark.parametrize(("part", "merged"), [(0.4e-4, True), (0.7e-4, False)])
def test_tolerance_is_between_a_node_and_its_image(
    part: float, merged: bool, tmp_path: Path
) -> None:
    """A node off the plane by d is 2 d from its image (Euclid), and that is what the tolerance of
    1e-4 of the local edge bounds: 0.8e-4 is within, 1.4e-4 is not."""
    sector = Sector(
        np.array([[x, y, z] for x in (0.0, 1.0) for y in (0.0, 1.0) for z in (0.0, 1.0)]),
        [(12, [0, 4, 6, 2, 1, 5, 7, 3])],
    )
    sector.points[0, 0] = part  # every edge has the length 1, but for the fourth digit
    plan = prepare(case_of(tmp_path, sector, HALF))
    assert plan.point_numbering.total == (12 if merged else 13)
    assert any("not merged" in note for note in plan.notes) is not merged


def test_stress_of_a_web_stays_its_own(tmp_path: Path) -> None:
    """An element's value is that of the element: one in the cut plane is kept as modelled, not
    averaged with its image (common practice)."""
    sector = box((2, 2, 2))
    plane = np.flatnonzero(sector.points[:, 0] == 0.0)[[0, 1, 4, 3]].tolist()
    sector = sector.plus([(QUAD, plane)])
    stress = RANDOM.normal(size=(len(sector.cells), 6))
    body = expand(case_of(tmp_path, sector, HALF, cell_data={"stress": stress}))
    web = body.celltypes == QUAD
    assert web.sum() == 1
    np.testing.assert_array_equal(body.cell_data["stress"][web], stress[-1:])


@pytest.mark.parametrize("seam", ["agree", "recovered"])
def test_declared_labels_are_not_averaged(seam: str, tmp_path: Path) -> None:
    """The mean of two part numbers is the number of no part."""
    sector = ring(5)
    number = np.arange(len(sector.points), dtype=float)
    tables = {"cyclic": {"sectors": 5}, "fields": {"id": {"kind": "label", "seam": seam}}}
    body = expand(case_of(tmp_path, sector, tables, {"id": number}))
    np.testing.assert_array_equal(body.point_data["id"], body.point_data["sector_point"])


# --- local frames -------------------------------------------------------------------------------


def polar_bases(points: np.ndarray, axis: str, point: np.ndarray) -> np.ndarray:
    """Radial, hoop and axial directions as rows, (n, 3, 3)."""
    a = np.eye(3)["xyz".index(axis)]
    radial = (points - point) * (1.0 - a)
    radial /= np.linalg.norm(radial, axis=1)[:, None]
    return np.stack([radial, np.cross(a, radial), np.broadcast_to(a, radial.shape)], axis=1)


def test_frame_beside_the_axis_of_the_group(tmp_path: Path) -> None:
    """A frame about a parallel axis is not turned with the copies: each step written out, to
    global at the centre, turned, and to the frame at the image of the centre."""
    sector = ring(5)
    point = np.array([4.0, 1.0, 0.0])
    velocity = RANDOM.normal(size=(len(sector.cells), 3))
    tables = {
        "cyclic": {"sectors": 5},
        "frames": {"shaft": {"type": "cylindrical", "axis": "z", "point": point.tolist()}},
        "fields": {"velocity": {"kind": "polar vector", "frame": "shaft"}},
    }
    body = expand(case_of(tmp_path, sector, tables, cell_data={"velocity": velocity}))
    own = centres(sector.points, [nodes for _, nodes in sector.cells])
    whole = np.einsum("nji,nj->ni", polar_bases(own, "z", point), velocity)
    Q = body.field_data["placements"].reshape(-1, 4, 4)[body.cell_data["copy"], :3, :3]
    cell = body.cell_data["sector_cell"]
    there = polar_bases(np.einsum("nij,nj->ni", Q, own[cell]), "z", point)
    want = np.einsum("nij,njk,nk->ni", there, Q, whole[cell])
    np.testing.assert_allclose(body.cell_data["velocity"], want, atol=1e-12)


def test_plane_storage_in_a_frame_that_moves(tmp_path: Path) -> None:
    """rr, tt, xx and rt about x hold no shear with x; turning about z brings such shear in."""
    sector = ring(5)
    tables = {
        "cyclic": {"sectors": 5},
        "frames": {"shaft": {"type": "cylindrical", "axis": "x", "point": [0.0, 9.0, 0.0]}},
        "fields": {
            "stress": {"kind": "symmetric tensor", "components": "rr tt zz rt", "frame": "shaft"}
        },
    }
    stress = RANDOM.normal(size=(len(sector.cells), 4))
    with pytest.raises(InputError, match="'stress'") as caught:
        expand(case_of(tmp_path, sector, tables, cell_data={"stress": stress}))
    assert "'shaft'" in str(caught.value)


# --- sums ---------------------------------------------------------------------------------------


def summed(folder: Path, data: dict[str, np.ndarray], fields: dict, factor: float = 1.0):
    """A sum of twice the same symmetric case on one hexahedron."""
    tables = {
        **HALF,
        "fields": fields,
        "case": [{"name": "a"}, {"name": "b"}],
        "sum": [{"name": "both", "terms": {"a": factor, "b": factor}}],
    }
    return case_of(folder, box((1, 1, 1)), tables, cell_data=data)


def test_what_is_not_linear_is_left_out_of_a_sum(tmp_path: Path) -> None:
    """|a + b| is not |a| + |b|, whatever sign is put before it; F = 1 + grad u, and two of them
    would count the 1 twice (P. Chadwick, Continuum Mechanics, chapter 2)."""
    data = {
        "signed_von_mises": np.ones(1),
        "deformation_gradient": np.eye(3).reshape(1, 9),
        "displacement_gradient": np.ones((1, 9)),
    }
    case = summed(tmp_path, data, {"deformation_gradient": {"kind": "tensor"}})
    assert set(expand(case).cell_data) == {"displacement_gradient", "sector_cell", "copy"}


def test_sum_of_integers_that_is_no_integer(tmp_path: Path) -> None:
    """3/4 + 3/4 does not fit an integer; twice 3 does."""
    data = {"charge": np.array([3], dtype=np.int16)}
    fields = {"charge": {"kind": "scalar"}}
    body = expand(summed(tmp_path, data, fields))
    assert body.cell_data["charge"].dtype == np.int16
    np.testing.assert_array_equal(body.cell_data["charge"], [6, 6])
    with pytest.raises(InputError, match="'charge'"):
        expand(summed(tmp_path, data, fields, 0.25))


# --- what a field is ----------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["signed_von_mises", "von_mises_signed", "SignedTresca"])
def test_signed_measures_are_no_invariants(name: str) -> None:
    """They take the sign of the stress; the unsigned ones never do (common practice)."""
    word = trade_word(name, 1)
    assert word is not None
    assert word.kind == "scalar"


@pytest.mark.parametrize("name", ["temperature", "pressure", "electric_potential"])
def test_scalars_by_name_must_be_declared_under_an_antisymmetric_load(
    name: str, tmp_path: Path
) -> None:
    """A temperature may be part of the response or given with the body: its sign is not guessed."""
    data = {name: np.ones(1)}
    body = expand(case_of(tmp_path, box((1, 1, 1)), HALF, cell_data=data))
    np.testing.assert_array_equal(body.cell_data[name], [1.0, 1.0])
    with pytest.raises(InputError, match=f"'{name}'"):
        expand(case_of(tmp_path, box((1, 1, 1)), ODD_HALF, cell_data=data))
    for follows, sign in (("load", -1.0), ("body", 1.0)):
        tables = {**ODD_HALF, "fields": {name: {"kind": "scalar", "follows": follows}}}
        body = expand(case_of(tmp_path, box((1, 1, 1)), tables, cell_data=data))
        np.testing.assert_array_equal(body.cell_data[name], [1.0, sign])


@pytest.mark.parametrize("kind", ["tensor", "axial tensor"])
def test_deformation_gradient_in_an_antisymmetric_case(kind: str, tmp_path: Path) -> None:
    """F = 1 + grad u: the load turns the sign of grad u alone, so no factor for F is right."""
    data = {"deformation_gradient": np.eye(3).reshape(1, 9)}
    tables = {**ODD_HALF, "fields": {"deformation_gradient": {"kind": kind}}}
    with pytest.raises(InputError, match="'deformation_gradient'") as caught:
        expand(case_of(tmp_path, box((1, 1, 1)), tables, cell_data=data))
    assert "not linear" in str(caught.value)


# --- structure ----------------------------------------------------------------------------------


def test_the_expander_does_not_know_the_viewer() -> None:
    """The viewer builds on the expander, never the reverse (DEVELOPERS.md)."""
    files = sorted(Path(expander.__file__).parent.rglob("*.py"))
    assert len(files) > 40
    for file in files:
        for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
            names = [a.name for a in node.names] if isinstance(node, ast.Import) else []
            if isinstance(node, ast.ImportFrom):
                names = [node.module or ""]
            for name in names:
                assert name.partition(".")[0] not in ("viewer", "demo_cases"), file
