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
from expander.casefile import validate_case
from expander.errors import CheckFailed, InputError
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


# --- tiling and seams ---------------------------------------------------------------------------


def turned(sector: Sector, degrees: float) -> Sector:
    """The sector turned about z."""
    c, s = np.cos(np.deg2rad(degrees)), np.sin(np.deg2rad(degrees))
    return sector.moved(np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]]))


@pytest.mark.parametrize("sectors", [2, 3, 7])
def test_model_round_the_axis(sectors: int, tmp_path: Path) -> None:
    """A block with the axis in its inside: every copy holds the axis, so all of them overlap."""
    sector = box((2, 3, 1), size=(1.0, 1.3, 1.0), corner=(-0.33, -0.21, 0.0))
    with pytest.raises(InputError, match="overlap") as caught:
        prepare(case_of(tmp_path, sector, {"cyclic": {"sectors": sectors}}))
    assert "cyclic" in caught.value.remedy


def test_faces_with_different_meshes_are_not_merged(tmp_path: Path) -> None:
    """Nodes within the second face lie elsewhere than in the first: only its corners meet, and a
    seam that is joined there and gapes between them is none (common practice)."""
    sector = ring(4, (2, 4, 2))
    x, y, z = sector.points.T
    radius, part = np.hypot(x, y), np.arctan2(y, x) / (np.pi / 2)
    further = 1.0 + 0.2 * part * ((radius > 1.01) & (radius < 1.99)) / radius
    higher = 0.15 * part * ((z > 0.01) & (z < 0.79))
    sector = Sector(np.stack([x * further, y * further, z + higher], axis=1), sector.cells)
    body = expand(case_of(tmp_path, sector, {"cyclic": {"sectors": 4}}))
    assert body.n_points == 4 * len(sector.points)
    assert "different meshes" in " ".join(body.field_data["assumptions"])


def test_tied_pieces_on_the_seam_cannot_be_told(tmp_path: Path) -> None:
    """Two pieces lie on each other at one face, two others at the other face: which of them goes
    on in which is not in the mesh."""
    inner, outer = ring(8, (1, 2, 1), outer=1.5), ring(8, (1, 2, 1), inner=1.5)
    first = inner.beside(outer)
    sector = first.beside(turned(first, 45.0))
    with pytest.raises(InputError, match="cannot be told") as caught:
        prepare(case_of(tmp_path, sector, {"cyclic": {"sectors": 4}}))
    assert "several connected pieces" in str(caught.value)


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


# --- closing ------------------------------------------------------------------------------------


def two_cases(
    folder: Path, first: np.ndarray, second: np.ndarray, word: str = "symmetric", **tables
):
    """Two cases of displacements on half a box."""
    sector = box((1, 1, 1))
    for name, values in (("a", first), ("b", second)):
        case_of(folder, sector, HALF, {"displacement": values}, name=name)
    return validate_case(
        {
            "mirror": [{"name": "mid", "normal": "x"}],
            "case": [{"name": "a", "file": "a.vtu"},
                     {"name": "b", "file": "b.vtu", "load": {"mid": word}}],
            **tables,
        },
        folder,
    )  # fmt: skip


def closed_and_open(folder: Path) -> tuple[np.ndarray, np.ndarray]:
    """A displacement that closes in x = 0 under a symmetric load, and one that does not."""
    points = box((1, 1, 1)).points
    stretched = points * [1.0, 0.3, 0.2]
    return stretched, stretched + np.array([0.5, 0.0, 0.0])


def test_round_off_of_an_idle_case_need_not_close(tmp_path: Path) -> None:
    """A solver leaves 1e-16 of the loaded case where the answer is nothing (common practice)."""
    closed, opened = closed_and_open(tmp_path)
    prepare(two_cases(tmp_path, closed, 1e-15 * opened))
    with pytest.raises(CheckFailed, match="'displacement'"):
        prepare(two_cases(tmp_path, 1e-15 * closed, 1e-15 * opened))


def test_a_small_case_has_to_close_by_its_own_measure(tmp_path: Path) -> None:
    """A unit load may move the body by far less than another case does: the gap of half of that
    is as wrong as in the other."""
    closed, opened = closed_and_open(tmp_path)
    with pytest.raises(CheckFailed, match="case 'b'"):
        prepare(two_cases(tmp_path, closed, 1e-6 * opened))


def test_a_wrong_load_word_is_no_open_seam(tmp_path: Path) -> None:
    """What closes with the opposite sign at every node is a wrong word and no crack, so asking to
    keep open nodes apart does not let it pass; a real gap does."""
    closed, opened = closed_and_open(tmp_path)
    keep = {"seam": {"open": "keep apart"}}
    assert prepare(two_cases(tmp_path, closed, opened, **keep)).openings
    points = box((1, 1, 1)).points
    sideways = np.stack([1.0 + points[:, 1], points[:, 0], 0.0 * points[:, 0]], axis=1)
    prepare(two_cases(tmp_path, closed, sideways, "antisymmetric", **keep))
    with pytest.raises(CheckFailed, match="antisymmetric"):
        prepare(two_cases(tmp_path, closed, sideways, **keep))


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


def test_declared_labels_are_kept_in_a_sum(tmp_path: Path) -> None:
    """Zone 3 is zone 3 in both cases and in their sum."""
    case = summed(tmp_path, {"zone": np.array([3.0])}, {"zone": {"kind": "label"}})
    np.testing.assert_array_equal(expand(case).cell_data["zone"], [3.0, 3.0])


@pytest.mark.parametrize(
    ("first", "second", "want"),
    [("f4", "f4", "f4"), ("f4", "f8", "f8"), ("f8", "f4", "f8"), ("i2", "f4", "f8")],
)
def test_number_type_of_a_sum(first: str, second: str, want: str, tmp_path: Path) -> None:
    """1 + 2^-40 is not a single-precision number: a sum is as precise as its most precise term."""
    small = 2.0**-40 if second == "f8" else 0.5
    values = {"a": np.array([1], dtype=first), "b": np.array([small], dtype=second)}
    for name, array in values.items():
        case_of(tmp_path, box((1, 1, 1)), HALF, cell_data={"charge": array}, name=name)
    tables = {
        **HALF,
        "fields": {"charge": {"kind": "scalar"}},
        "case": [{"name": n, "file": f"{n}.vtu"} for n in values],
        "sum": [{"name": "both", "terms": {"a": 1.0, "b": 1.0}}],
    }
    body = expand(validate_case(tables, tmp_path))
    assert body.cell_data["charge"].dtype == np.dtype(want)
    if want == "f8" and first != "f8":
        assert body.cell_data["charge"][0] == 1.0 + small


def test_infinity_spoils_only_what_depends_on_it(tmp_path: Path) -> None:
    """A turn about z leaves z alone, whatever x is; zero times infinity is no contribution."""
    sector = ring(5)
    velocity = np.tile([1.0, 2.0, 3.0], (len(sector.cells), 1))
    velocity[4, 0] = np.inf
    case = case_of(tmp_path, sector, {"cyclic": {"sectors": 5}}, cell_data={"velocity": velocity})
    body = expand(case, allow_nan=True)
    np.testing.assert_array_equal(body.cell_data["velocity"][:, 2], 3.0)
    bad = ~np.isfinite(body.cell_data["velocity"]).all(axis=1)
    np.testing.assert_array_equal(bad, body.cell_data["sector_cell"] == 4)


# --- several models -----------------------------------------------------------------------------


def test_arrays_of_a_later_case_alone(tmp_path: Path) -> None:
    """A result that one case has and the others have not is not dropped without a word."""
    tables = {**HALF, "case": [{"name": n, "file": f"{n}.vtu"} for n in "ab"]}
    velocity = {"velocity": np.ones((1, 3))}
    case_of(tmp_path, box((1, 1, 1)), HALF, cell_data=velocity, name="a")
    more = {**velocity, "stress": np.ones((1, 6))}
    case_of(tmp_path, box((1, 1, 1)), HALF, cell_data=more, name="b")
    case = validate_case(tables, tmp_path)
    with pytest.raises(InputError, match="'stress'") as caught:
        prepare(case)
    assert "case 'b'" in str(caught.value)
    assert any("'stress'" in note for note in prepare(case, skip_undeclared=True).notes)


def test_components_in_another_order_in_a_later_case(tmp_path: Path) -> None:
    """The second file stores xz before yz: its columns are not those of the first."""
    for name, order in (("a", "XX YY ZZ XY YZ XZ"), ("b", "XX YY ZZ XY XZ YZ")):
        grid = box((1, 1, 1)).grid()
        grid.cell_data["stress"] = np.arange(6.0)[None]
        array = grid.GetCellData().GetArray("stress")
        for k, component in enumerate(order.split()):
            array.SetComponentName(k, component)
        grid.save(tmp_path / f"{name}.vtu")
    tables = {**HALF, "case": [{"name": n, "file": f"{n}.vtu"} for n in "ab"]}
    with pytest.raises(InputError, match="'stress'") as caught:
        prepare(validate_case(tables, tmp_path))
    assert "case 'b'" in str(caught.value)


# --- what a field is ----------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("array", "kind", "word"),
    [("max_principal_stress", "scalar", "principal"), ("von_mises", "scalar", "invariant")],
)
def test_a_measure_under_another_name_is_the_same(
    array: str, kind: str, word: str, tmp_path: Path
) -> None:
    """A new key for an array does not change what is in it."""
    tables = {**ODD_HALF, "fields": {"q": {"kind": kind, "arrays": array}}}
    case = case_of(tmp_path, box((1, 1, 1)), tables, cell_data={array: np.ones(1)})
    with pytest.raises(InputError, match="'q'") as caught:
        prepare(case)
    assert word in str(caught.value)


@pytest.mark.parametrize("name", ["force", "reaction", "nodal_force", "reaction_moment"])
def test_forces_on_cells_are_not_told_by_name(name: str, tmp_path: Path) -> None:
    """On nodes a force adds up at a seam; on cells the word mostly means the resultant of a
    section, whose three numbers are no vector (N, Vy, Vz)."""
    sector = box((1, 1, 1))
    prepare(case_of(tmp_path, sector, HALF, {name: np.zeros((8, 3))}))
    with pytest.raises(InputError, match=f"'{name}'"):
        prepare(case_of(tmp_path, sector, HALF, cell_data={name: np.zeros((1, 3))}))


def test_declared_thickness_follows_the_body(tmp_path: Path) -> None:
    """No load turns a thickness negative; only a word of the case would say so."""
    for more, sign in (({}, 1.0), ({"follows": "load"}, -1.0)):
        tables = {**ODD_HALF, "fields": {"thickness": {"kind": "scalar", **more}}}
        body = expand(
            case_of(tmp_path, box((1, 1, 1)), tables, cell_data={"thickness": np.ones(1)})
        )
        np.testing.assert_array_equal(body.cell_data["thickness"], [1.0, sign])


def test_single_numbers_must_be_declared_in_a_sum(tmp_path: Path) -> None:
    """The quality of a cell is no response, a charge is: only one of them adds up."""
    data = {"quality": np.ones(1)}
    prepare(case_of(tmp_path, box((1, 1, 1)), HALF, cell_data=data))
    with pytest.raises(InputError, match="'quality'"):
        prepare(summed(tmp_path, data, {}))
    body = expand(summed(tmp_path, data, {"quality": {"kind": "scalar", "follows": "body"}}))
    np.testing.assert_array_equal(body.cell_data["quality"], [1.0, 1.0])
    body = expand(summed(tmp_path, data, {"quality": {"kind": "scalar"}}))
    np.testing.assert_array_equal(body.cell_data["quality"], [2.0, 2.0])


@pytest.mark.parametrize("names", [["UX", "UY", "UZ"], ["S11", "S22", "S12"]])
def test_single_arrays_that_look_like_components(names: list[str], tmp_path: Path) -> None:
    """As scalars they would keep their sign in a mirror, which UX does not."""
    data = dict.fromkeys(names, np.ones(1))
    with pytest.raises(InputError, match="components of one field") as caught:
        prepare(case_of(tmp_path, box((1, 1, 1)), HALF, cell_data=data))
    assert f'"{names[0]}", "{names[1]}"' in str(caught.value)


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


# --- what is said of values that were averaged ----------------------------------------------------


@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_averaging_very_different_values_is_said(sign: float, tmp_path: Path) -> None:
    """A normal traction free stress xy across a symmetric plane vanishes there (J. F. Nye); one
    that does not differs from its image by twice itself."""
    sector = box((1, 1, 1))
    stress = np.zeros((len(sector.points), 6))
    stress[:, 0 if sign > 0 else 3] = 1.0
    body = expand(case_of(tmp_path, sector, {"mirror": [{"normal": "x"}]}, {"stress": stress}))
    told = "differ by up to 200 %" in " ".join(body.field_data["assumptions"])
    assert told == (sign < 0)


def test_assumed_order_is_said_and_a_declared_one_is_not(tmp_path: Path) -> None:
    sector = box((1, 1, 1))
    zero = {"stress": np.zeros((len(sector.points), 6))}
    tables = {"mirror": [{"normal": "x"}]}
    declared = {"stress": {"kind": "symmetric tensor", "components": "xx yy zz xy yz zx"}}
    for fields, expected in (({}, True), (declared, False)):
        body = expand(case_of(tmp_path, sector, {**tables, "fields": fields}, zero))
        assert ("stored in the order" in " ".join(body.field_data["assumptions"])) == expected


def test_wrong_kind_is_told_from_a_wrong_load_word(tmp_path: Path) -> None:
    """Half the curl of a symmetric displacement (y z, ..), declared polar: the displacement closes,
    so the load word is right and the kind is not."""
    sector = box((2, 2, 2))
    x, y, z = sector.points.T
    data = {"displacement": np.c_[x * y, x * x + z, y], "turning": np.c_[0 * x, 0 * x + z, x + y]}
    data["turning"][:, 0] = 0.0
    fields = {"turning": {"kind": "axial vector"}}
    with pytest.raises(CheckFailed, match="kind looks wrong"):
        expand(case_of(tmp_path, sector, {"mirror": [{"normal": "x"}], "fields": fields}, data))
