"""Fields: what an array is, by its name or as declared, and what is computed from it."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from scipy.spatial.transform import Rotation

from expander import expand, plan
from expander.casefile import CaseFile, validate_case
from expander.errors import InputError
from expander.tradewords import trade_word

MIRROR_X = np.diag([-1.0, 1.0, 1.0])
XX, YY, ZZ, XY, YZ, ZX = (0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0)
USUAL = "xx yy zz xy yz zx"


def box() -> pyvista.UnstructuredGrid:
    """Hexahedra in 0 .. 2 along each axis."""
    grid = pyvista.ImageData(dimensions=(3, 3, 3)).cast_to_structured_grid()
    return grid.cast_to_unstructured_grid()


def wedge(degrees: float) -> pyvista.UnstructuredGrid:
    """Hexahedra between radii 1 and 2, from the angle 0 to `degrees` about z."""
    r, angle, z = np.meshgrid(
        np.linspace(1.0, 2.0, 3), np.deg2rad(np.linspace(0.0, degrees, 3)),
        np.linspace(0.0, 1.0, 3), indexing="ij",
    )  # fmt: skip
    grid = pyvista.StructuredGrid(r * np.cos(angle), r * np.sin(angle), z)
    return grid.cast_to_unstructured_grid()


def case_of(folder: Path, grid: pyvista.UnstructuredGrid, **tables: Any) -> CaseFile:
    """A case on one model; half a model cut at x = 0 unless the tables say otherwise."""
    grid.save(folder / "model.vtu")
    tables.setdefault("model", {"file": "model.vtu"})
    if "mirror" not in tables and "cyclic" not in tables:
        tables["mirror"] = [{"name": "mid", "normal": "x"}]
    return validate_case(tables, folder)


def decided(case: CaseFile, skip_undeclared: bool = False) -> dict[str, dict[str, Any]]:
    return {f["name"]: f for f in plan(case, skip_undeclared).summary()["fields"]}


def tensors(values: np.ndarray, components: str) -> np.ndarray:
    """Stored components of symmetric tensors as (n, 3, 3)."""
    full = np.zeros((len(values), 3, 3))
    for column, name in enumerate(components.split()):
        i, j = ("xyz".index(letter) for letter in name)
        full[:, i, j] = full[:, j, i] = values[:, column]
    return full


def turns(body: pyvista.UnstructuredGrid) -> np.ndarray:
    """Q of the copy that each cell belongs to, (cells, 3, 3)."""
    placements = np.asarray(body.field_data["placements"]).reshape(-1, 4, 4)
    return placements[body.cell_data["copy"], :3, :3]


RANDOM = np.random.default_rng(7)


# Trade words

# Name, components, kind, seam, follows: written by hand from what the names mean in the trade.
BY_NAME = [
    ("displacement", 3, "polar vector", "agree", "load"),
    ("Displacements", 3, "polar vector", "agree", "load"),
    ("total displacement", 3, "polar vector", "agree", "load"),
    ("Displacement (mm)", 3, "polar vector", "agree", "load"),
    ("disp", 3, "polar vector", "agree", "load"),
    ("u", 3, "polar vector", "agree", "load"),
    ("U", 2, "polar vector", "agree", "load"),
    ("translation", 3, "polar vector", "agree", "load"),
    ("rotation", 3, "axial vector", "agree", "load"),
    ("rotations", 1, "axial vector", "agree", "load"),
    ("angular_velocity", 3, "axial vector", "agree", "load"),
    ("AngularAcceleration", 3, "axial vector", "agree", "load"),
    ("velocity", 3, "polar vector", "agree", "load"),
    ("acceleration", 3, "polar vector", "agree", "load"),
    ("temperature", 1, "scalar", "agree", "load"),
    ("electric_potential", 1, "scalar", "agree", "load"),
    ("pressure", 1, "scalar", "agree", "load"),
    ("nodal_force", 3, "polar vector", "sum", "load"),
    ("NodalForce [N]", 3, "polar vector", "sum", "load"),
    ("force", 3, "polar vector", "sum", "load"),
    ("Reaction Force", 3, "polar vector", "sum", "load"),
    ("reactions", 2, "polar vector", "sum", "load"),
    ("reaction_moment", 3, "axial vector", "sum", "load"),
    ("moment_of_force", 3, "axial vector", "sum", "load"),
    ("heat_flow", 1, "scalar", "sum", "load"),
    ("lumped_mass", 1, "scalar", "sum", "body"),
    ("stress", 6, "symmetric tensor", "recovered", "load"),
    ("Cauchy Stress [MPa]", 6, "symmetric tensor", "recovered", "load"),
    ("stress", 3, "symmetric tensor", "recovered", "load"),
    ("stress", 4, "symmetric tensor", "recovered", "load"),
    ("plastic_strain", 6, "symmetric tensor", "recovered", "load"),
    ("heat_flux", 3, "polar vector", "recovered", "load"),
    ("temperature_gradient", 3, "polar vector", "recovered", "load"),
    ("vorticity", 3, "axial vector", "recovered", "load"),
    ("magnetic_flux_density", 3, "axial vector", "recovered", "load"),
    ("displacement_gradient", 9, "tensor", "recovered", "load"),
    ("von_mises", 1, "invariant", "recovered", "load"),
    ("vonMisesStress", 1, "invariant", "recovered", "load"),
    ("von Mises stress [Pa]", 1, "invariant", "recovered", "load"),
    ("tresca", 1, "invariant", "recovered", "load"),
    ("equivalent_plastic_strain", 1, "invariant", "recovered", "load"),
    ("strain_energy_density", 1, "invariant", "recovered", "load"),
    ("displacement_magnitude", 1, "invariant", "recovered", "load"),
    ("principal_stress", 3, "principal values", "recovered", "load"),
    ("thickness", 1, "scalar", "agree", "body"),
    ("density", 1, "scalar", "agree", "body"),
    ("Normals", 3, "polar vector", "agree", "body"),
    ("part_id", 1, "label", "agree", "body"),
    ("material", 1, "label", "agree", "body"),
]
# Names that decide nothing, for these numbers of components.
NOT_BY_NAME = [
    ("moment", 3), ("Moments", 3), ("bending_moment", 3), ("shell_moment", 3), ("Mx_My_Mxy", 3),
    ("moment", 1), ("moment", 6), ("displacement", 6), ("displacement", 4), ("stress", 5),
    ("stress", 2), ("displacement", 1), ("rotation", 2), ("temperature", 3), ("von_mises", 3),
    ("membrane_force", 3), ("shell_force", 3), ("curvature", 3), ("field", 3), ("F", 3),
    ("part", 3), ("couple_stress", 9), ("", 3),
]  # fmt: skip


@pytest.mark.parametrize(
    ("name", "size", "kind", "seam", "follows"), BY_NAME, ids=[f"{r[0]}/{r[1]}" for r in BY_NAME]
)
def test_trade_word(name: str, size: int, kind: str, seam: str, follows: str) -> None:
    word = trade_word(name, size)
    assert word is not None
    assert (word.kind, word.seam, word.follows) == (kind, seam, follows)


@pytest.mark.parametrize(("name", "size"), NOT_BY_NAME, ids=[f"{n}/{k}" for n, k in NOT_BY_NAME])
def test_name_that_decides_nothing(name: str, size: int) -> None:
    assert trade_word(name, size) is None


def extensive(name: str, size: int) -> bool:
    """Forces and their moments, which add up at nodes."""
    word = trade_word(name, size)
    return word is not None and word.seam == "sum" and word.kind.endswith("vector")


@pytest.mark.parametrize("plane", [False, True])
def test_trade_words_in_a_model(tmp_path: Path, plane: bool) -> None:
    """What a name decides reaches the summary, with the reason."""
    grid = box()
    if plane:
        grid = pyvista.Plane(center=(1, 1, 0), i_size=2, j_size=2, i_resolution=4, j_resolution=2)
        grid = grid.cast_to_unstructured_grid()
        grid.clear_data()
    chosen: dict[str, tuple[int, str, str, str]] = {}
    for name, size, kind, seam, follows in BY_NAME:
        only_plane = (kind, size) in (("polar vector", 2), ("axial vector", 1)) or (
            kind == "symmetric tensor" and size < 6
        )
        if only_plane == plane:
            chosen[name] = (size, kind, seam, follows)
    for name, (size, *_) in chosen.items():
        # Forces and moments on cells are mostly resultants of sections: nothing by name there.
        place = grid.point_data if extensive(name, size) else grid.cell_data
        count = grid.n_points if extensive(name, size) else 8
        place[name] = np.zeros((count, size)) if size > 1 else np.zeros(count)
    found = decided(case_of(tmp_path, grid))
    assert found.keys() == chosen.keys()
    for name, (_, kind, seam, follows) in chosen.items():
        f = found[name]
        on = "points" if extensive(name, chosen[name][0]) else "cells"
        assert (f["kind"], f["decided"], f["on"]) == (kind, "by name", on), name
        own = follows == "body" and seam != "sum"
        assert f["seam"] == ("lowest copy" if own else seam), name
        expected = {"body": "body", "load": "nothing" if kind == "invariant" else "load"}
        assert f["follows"] == expected[follows], name


@pytest.mark.parametrize(("name", "size"), [("displacement", 2), ("rotation", 1), ("stress", 3)])
def test_plane_storage_on_solids_must_be_declared(tmp_path: Path, name: str, size: int) -> None:
    """Three components called stress may be a traction, two of a displacement a mode's pair."""
    grid = box()
    grid.cell_data[name] = np.zeros((8, size)) if size > 1 else np.zeros(8)
    with pytest.raises(InputError, match=name):
        plan(case_of(tmp_path, grid, mirror=[{"normal": "x", "load": "antisymmetric"}]))


@pytest.mark.parametrize("name", ["moment", "shell_moment", "bending_moment"])
def test_the_word_moment_alone_is_an_error(tmp_path: Path, name: str) -> None:
    grid = box()
    grid.cell_data[name] = np.zeros((8, 3))
    with pytest.raises(InputError, match=name):
        plan(case_of(tmp_path, grid))


def test_couple_stress_is_no_ordinary_tensor(tmp_path: Path) -> None:
    """An axial tensor; the word stress in its name must not decide otherwise."""
    grid = box()
    grid.cell_data["couple_stress"] = np.ones((8, 9))
    case = case_of(tmp_path, grid)
    try:
        kind = decided(case)["couple_stress"]["kind"]
    except InputError:
        return
    assert kind == "axial tensor"


def test_deformation_gradient_is_not_linear(tmp_path: Path) -> None:
    """Of a body that does not move it is the unit tensor everywhere, whatever the load word."""
    grid = box()
    grid.cell_data["deformation_gradient"] = np.tile(np.eye(3).ravel(), (8, 1))
    case = case_of(tmp_path, grid, mirror=[{"normal": "x", "load": "antisymmetric"}])
    try:
        body = expand(case)
    except InputError:
        return
    right = np.tile(np.eye(3).ravel(), (16, 1))
    np.testing.assert_array_equal(body.cell_data["deformation_gradient"], right)


def test_declared_wins_over_the_name(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["rotation"] = np.ones((8, 3))
    grid.cell_data["force"] = np.ones((8, 3))
    case = case_of(tmp_path, grid, fields={
        "rotation": {"kind": "polar vector"},
        "force": {"kind": "polar vector", "seam": "agree"},
    })  # fmt: skip
    found = decided(case)
    assert found["rotation"]["kind"] == "polar vector"
    assert found["rotation"]["decided"].startswith("declared (by name it would be a")
    assert "axial vector" in found["rotation"]["decided"]
    assert found["force"]["decided"] == "declared"
    assert found["force"]["seam"] == "agree"
    body = expand(case)
    mirrored = body.cell_data["rotation"][body.cell_data["copy"] == 1]
    np.testing.assert_array_equal(mirrored, np.tile([-1.0, 1.0, 1.0], (8, 1)))


def test_what_is_not_declared_still_comes_from_the_name(tmp_path: Path) -> None:
    """A kind alone leaves the seam of the trade word in place."""
    grid = box()
    grid.point_data["nodal_force"] = np.ones((27, 3))
    case = case_of(tmp_path, grid, fields={"nodal_force": {"kind": "polar vector"}})
    assert decided(case)["nodal_force"]["seam"] == "sum"
    body = expand(case)
    on_plane = body.points[:, 0] == 0.0
    # The other half brings (-1, 1, 1) to the same node.
    np.testing.assert_array_equal(body.point_data["nodal_force"][on_plane], [[0, 2, 2]] * 9)


# Every kind on the mirrored copy, by numbers

KINDS: list[tuple[str, int, list[float], list[float]]] = [
    # kind, components, value on the sector, value on the copy mirrored in x = 0
    ("scalar", 1, [3.0], [3.0]),
    ("invariant", 1, [3.0], [3.0]),
    ("pseudoscalar", 1, [3.0], [-3.0]),
    ("polar vector", 3, [1, 2, 3], [-1, 2, 3]),
    ("polar vector", 2, [1, 2], [-1, 2]),
    ("axial vector", 3, [1, 2, 3], [1, -2, -3]),
    ("axial vector", 1, [3], [-3]),
    ("symmetric tensor", 6, [1, 2, 3, 4, 5, 6], [1, 2, 3, -4, 5, -6]),
    ("symmetric tensor", 4, [1, 2, 3, 4], [1, 2, 3, -4]),
    ("symmetric tensor", 3, [1, 2, 3], [1, 2, -3]),
    ("tensor", 9, [1, 2, 3, 4, 5, 6, 7, 8, 9], [1, -2, -3, -4, 5, 6, -7, 8, 9]),
    ("axial tensor", 9, [1, 2, 3, 4, 5, 6, 7, 8, 9], [-1, 2, 3, 4, -5, -6, 7, -8, -9]),
    ("principal values", 3, [3, 1, -2], [3, 1, -2]),
    ("label", 1, [3], [3]),
]
# Under an antisymmetric load these change their sign as well.
LINEAR = {"scalar", "pseudoscalar", "polar vector", "axial vector", "symmetric tensor", "tensor",
          "axial tensor"}  # fmt: skip


@pytest.mark.parametrize(("kind", "size", "own", "image"), KINDS,
                         ids=[f"{k}/{n}" for k, n, *_ in KINDS])  # fmt: skip
@pytest.mark.parametrize("load", ["symmetric", "antisymmetric"])
@pytest.mark.parametrize("follows", ["load", "body"])
def test_kind_on_the_mirrored_copy(
    tmp_path: Path, kind: str, size: int, own: list[float], image: list[float], load: str,
    follows: str,
) -> None:  # fmt: skip
    grid = box()
    grid.cell_data["q"] = np.tile(np.array(own, dtype=float), (8, 1)).squeeze()
    case = case_of(
        tmp_path, grid, mirror=[{"normal": "x", "load": load}],
        fields={"q": {"kind": kind, "follows": follows}},
    )  # fmt: skip
    body = expand(case)
    expected = np.array(image, dtype=float)
    if load == "antisymmetric" and follows == "load":
        if kind in LINEAR:
            expected = -expected
        elif kind == "principal values":
            expected = np.array([2.0, -1.0, -3.0])  # minus smallest, middle, largest
    copy = body.cell_data["copy"]
    values = body.cell_data["q"].reshape(16, size)
    np.testing.assert_array_equal(values[copy == 0], [own] * 8)
    np.testing.assert_array_equal(values[copy == 1], [expected] * 8)


# Components and arrays


@pytest.mark.parametrize("order", [USUAL, "xx xy xz yy yz zz", "ZZ, YY, XX, YX, ZY, ZX"])
@pytest.mark.parametrize("separate", [False, True])
def test_order_of_components(tmp_path: Path, order: str, separate: bool) -> None:
    """A turn by 40 degrees about a skew axis, against Q T Q^T on the full tensor."""
    axis = np.array([1.0, 2.0, 2.0]) / 3.0
    R = (
        Rotation.from_rotvec(axis * 0.3).as_matrix()
        @ Rotation.align_vectors([axis], [[0.0, 0.0, 1.0]])[0].as_matrix()
    )
    grid = wedge(40.0)
    grid.points[:] = grid.points @ R.T
    letters = order.lower().replace(",", "")
    values = RANDOM.normal(size=(grid.n_cells, 6))
    names = [f"S{k}" for k in range(6)]
    if separate:
        for name, column in zip(names, values.T, strict=True):
            grid.cell_data[name] = column
    else:
        grid.cell_data["stored"] = values
    case = case_of(
        tmp_path, grid,
        cyclic={"sectors": 9, "axis": axis.tolist()},
        fields={"q": {"kind": "symmetric tensor", "components": order,
                      "arrays": names if separate else "stored"}},
    )  # fmt: skip
    body = expand(case)
    assert "stored" not in body.cell_data
    assert "S0" not in body.cell_data
    Q = turns(body)
    own = tensors(values, letters)[body.cell_data["sector_cell"]]
    right = np.einsum("nij,njk,nlk->nil", Q, own, Q)
    np.testing.assert_allclose(tensors(body.cell_data["q"], letters), right, atol=1e-12)
    array = body.GetCellData().GetArray("q")
    assert [array.GetComponentName(k) for k in range(6)] == letters.split()


def test_one_array_per_component_of_a_vector(tmp_path: Path) -> None:
    grid = box()
    for k, name in enumerate(("UX", "UY", "UZ")):
        grid.point_data[name] = grid.points[:, 0] * (k + 1.0)
    case = case_of(
        tmp_path, grid, fields={"displacement": {"kind": "polar vector",
                                                 "arrays": ["UX", "UY", "UZ"]}}
    )  # fmt: skip
    body = expand(case)
    x = body.points[:, 0]
    right = np.c_[x, 2 * np.abs(x), 3 * np.abs(x)]
    np.testing.assert_array_equal(body.point_data["displacement"], right)
    assert set(body.point_data.keys()) == {"displacement", "sector_point"}


def test_order_of_single_arrays(tmp_path: Path) -> None:
    grid = box()
    for name in ("a", "b", "c"):
        grid.cell_data[name] = np.full(8, "abc".index(name) + 1.0)
    case = case_of(tmp_path, grid, fields={
        "q": {"kind": "polar vector", "arrays": ["c", "a", "b"], "components": "z x y"}
    })  # fmt: skip
    body = expand(case)
    one = body.cell_data["q"][body.cell_data["copy"] == 1]
    np.testing.assert_array_equal(one, [[3.0, -1.0, 2.0]] * 8)


def test_columns_of_one_array(tmp_path: Path) -> None:
    """Translations and rotations of one array, as two fields."""
    grid = box()
    grid.cell_data["motion"] = np.tile(np.arange(1.0, 7.0), (8, 1))
    case = case_of(tmp_path, grid, fields={
        "moving": {"kind": "polar vector", "arrays": "motion", "columns": [1, 2, 3]},
        "turning": {"kind": "axial vector", "arrays": "motion", "columns": [4, 5, 6]},
    })  # fmt: skip
    body = expand(case)
    one = body.cell_data["copy"] == 1
    np.testing.assert_array_equal(body.cell_data["moving"][one], [[-1, 2, 3]] * 8)
    np.testing.assert_array_equal(body.cell_data["turning"][one], [[4, -5, -6]] * 8)
    assert "motion" not in body.cell_data


def test_columns_in_another_order(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["a"] = np.tile([3.0, 1.0, 2.0, 9.0], (8, 1))
    case = case_of(tmp_path, grid, fields={
        "q": {"kind": "polar vector", "arrays": "a", "columns": [2, 3, 1]}
    })  # fmt: skip
    body = expand(case)
    np.testing.assert_array_equal(
        body.cell_data["q"][body.cell_data["copy"] == 1], [[-1.0, 2.0, 3.0]] * 8
    )


def named(grid: pyvista.UnstructuredGrid, array: str, components: str) -> None:
    """Give the components of a cell array their names in the file."""
    for k, name in enumerate(components.split()):
        grid.GetCellData().GetArray(array).SetComponentName(k, name)


@pytest.mark.parametrize("components", ["S11 S22 S33 S12 S13 S23", "XX YY ZZ XY XZ YZ"])
@pytest.mark.parametrize("declared", [False, True])
def test_order_that_the_file_names(tmp_path: Path, components: str, declared: bool) -> None:
    """Another order than the usual one, told by the file: used, or refused, never passed over."""
    grid = box()
    grid.cell_data["stress"] = np.tile(np.arange(1.0, 7.0), (8, 1))
    named(grid, "stress", components)
    fields = {"stress": {"kind": "symmetric tensor"}} if declared else {}
    case = case_of(tmp_path, grid, fields=fields)
    try:
        body = expand(case)
    except InputError as error:
        assert "stress" in str(error)  # noqa: PT017  one of two right outcomes
        return
    one = body.cell_data["stress"][body.cell_data["copy"] == 1]
    np.testing.assert_array_equal(one, [[1, 2, 3, -4, -5, 6]] * 8)


@pytest.mark.parametrize(("name", "components"), [
    ("stress", "rr tt zz rt tz zr"), ("displacement", "r t z"), ("displacement", "r theta z"),
])  # fmt: skip
def test_cylindrical_components_that_the_file_names(
    tmp_path: Path, name: str, components: str
) -> None:
    """As this program writes them itself; by the name alone they would be taken for global."""
    grid = box()
    grid.cell_data[name] = np.zeros((8, len(components.split())))
    named(grid, name, components)
    with pytest.raises(InputError, match=name) as caught:
        plan(case_of(tmp_path, grid))
    assert "frame" in str(caught.value)


def test_engineering_shear(tmp_path: Path) -> None:
    grid = wedge(30.0)
    epsilon = RANDOM.normal(size=(grid.n_cells, 6))
    gamma = epsilon * [1, 1, 1, 2, 2, 2]
    grid.cell_data["e"], grid.cell_data["g"] = epsilon, gamma
    case = case_of(tmp_path, grid, cyclic={"sectors": 12}, fields={
        "e": {"kind": "symmetric tensor", "shear": "tensor"},
        "g": {"kind": "symmetric tensor", "shear": "engineering"},
    })  # fmt: skip
    body = expand(case)
    Q, own = turns(body), tensors(epsilon, USUAL)[body.cell_data["sector_cell"]]
    right = np.einsum("nij,njk,nlk->nil", Q, own, Q)
    np.testing.assert_allclose(tensors(body.cell_data["e"], USUAL), right, atol=1e-12)
    half = body.cell_data["g"] / [1, 1, 1, 2, 2, 2]
    np.testing.assert_allclose(tensors(half, USUAL), right, atol=1e-12)


def test_one_name_on_points_and_on_cells(tmp_path: Path) -> None:
    grid = box()
    grid.point_data["stress"] = np.zeros((27, 6))
    grid.cell_data["stress"] = np.ones((8, 6))
    kind = "symmetric tensor"
    case = case_of(tmp_path, grid, fields={
        "stress": {"kind": kind, "on": "cells"},
        "nodal": {"kind": kind, "on": "points", "arrays": "stress", "seam": "recovered"},
    })  # fmt: skip
    body = expand(case)
    assert body.cell_data["stress"].shape == (16, 6)
    assert np.abs(body.cell_data["stress"]).min() == 1.0
    assert body.point_data["nodal"].shape == (45, 6)
    assert "stress" not in body.point_data
    both = {"stress": {"kind": kind, "on": "cells"}}
    with pytest.raises(InputError, match="stress"):
        plan(case_of(tmp_path, grid, fields=both))
    found = decided(case_of(tmp_path, grid, fields=both), skip_undeclared=True)
    assert list(found) == ["stress"]


def test_unit_is_recorded(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["stress"] = np.zeros((8, 6))
    case = case_of(tmp_path, grid, fields={
        "stress": {"kind": "symmetric tensor", "unit": "N/mm²"}
    })  # fmt: skip
    assert decided(case)["stress"]["unit"] == "N/mm²"
    recorded = expand(case).field_data["fields"]
    assert [text for text in recorded if text.startswith("stress:") and text.endswith("N/mm²")]


def test_unit_of_the_model_is_recorded(tmp_path: Path) -> None:
    case = case_of(tmp_path, box(), model={"file": "model.vtu", "unit": "furlong"})
    assert "furlong" in str(plan(case).summary())


# Integers and properties


@pytest.mark.parametrize("dtype", [np.int8, np.uint8, np.int16, np.int32, np.int64, np.uint64])
@pytest.mark.parametrize("load", ["symmetric", "antisymmetric"])
def test_integers_are_labels(tmp_path: Path, dtype: type, load: str) -> None:
    grid = box()
    colour = "colour" if load == "symmetric" else "colour_number"
    grid.cell_data[colour] = np.arange(8, dtype=dtype)
    grid.point_data["number"] = np.arange(100, 127, dtype=dtype)
    case = case_of(tmp_path, grid, mirror=[{"normal": "x", "load": load}])
    found = decided(case)
    assert found[colour]["kind"] == found["number"]["kind"] == "label"
    assert found[colour]["follows"] == "body"
    body = expand(case)
    assert body.cell_data[colour].dtype == dtype
    np.testing.assert_array_equal(body.cell_data[colour], body.cell_data["sector_cell"])
    np.testing.assert_array_equal(body.point_data["number"], 100 + body.point_data["sector_point"])


@pytest.mark.parametrize("name", ["colour", "temperature"])
def test_integers_that_nothing_explains_are_refused_where_signs_matter(
    tmp_path: Path, name: str
) -> None:
    """A temperature may well be stored in whole degrees; with an antisymmetric load it changes
    sign, a label does not."""
    grid = box()
    grid.cell_data[name] = np.arange(8, dtype=np.int32)
    case = case_of(tmp_path, grid, mirror=[{"normal": "x", "load": "antisymmetric"}])
    with pytest.raises(InputError, match=name):
        plan(case)


def test_members_of_a_set_are_a_label_under_any_load(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["upper"] = np.arange(8, dtype=np.int8) % 2
    case = case_of(tmp_path, grid, mirror=[{"normal": "x", "load": "antisymmetric"}])
    assert decided(case)["upper"]["kind"] == "label"


def test_label_of_several_components(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["ids"] = np.arange(40).reshape(8, 5)
    case = case_of(tmp_path, grid, fields={"ids": {"kind": "label"}})
    body = expand(case)
    whole = body.cell_data["ids"]
    np.testing.assert_array_equal(whole, grid.cell_data["ids"][body.cell_data["sector_cell"]])


def test_label_at_the_seam_is_that_of_the_lowest_copy(tmp_path: Path) -> None:
    """Numbers of nodes are not averaged, even where the two faces differ."""
    grid = wedge(30.0)
    grid.point_data["number"] = np.arange(grid.n_points)
    body = expand(case_of(tmp_path, grid, cyclic={"sectors": 12}))
    np.testing.assert_array_equal(body.point_data["number"], body.point_data["sector_point"])


def test_properties_of_the_body_take_no_sign_from_the_load(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["normals"] = np.tile([1.0, 2.0, 3.0], (8, 1))
    grid.cell_data["thickness"] = np.full(8, 5.0)
    grid.cell_data["q"] = np.full(8, 5.0)
    case = case_of(
        tmp_path, grid, mirror=[{"normal": "x", "load": "antisymmetric"}],
        fields={"q": {"kind": "pseudoscalar", "follows": "body"}},
    )  # fmt: skip
    body = expand(case)
    one = body.cell_data["copy"] == 1
    np.testing.assert_array_equal(body.cell_data["normals"][one], [[-1, 2, 3]] * 8)
    np.testing.assert_array_equal(body.cell_data["thickness"], np.full(16, 5.0))
    np.testing.assert_array_equal(body.cell_data["q"], np.where(one, -5.0, 5.0))


# Frames


def local_bases(points: np.ndarray) -> np.ndarray:
    """Radial, hoop and axial directions about z as columns, (n, 3, 3)."""
    angle = np.arctan2(points[:, 1], points[:, 0])
    c, s, o, e = np.cos(angle), np.sin(angle), 0 * angle, 1 + 0 * angle
    return np.stack([np.c_[c, s, o], np.c_[-s, c, o], np.c_[o, o, e]], axis=2)


@pytest.mark.parametrize(
    "planes",
    [[], [[0.0, 1.0, 0.0]], [[0.0, 0.0, 1.0]]],
    ids=["turns", "plane through the axis", "plane normal to the axis"],
)
@pytest.mark.parametrize("kind", ["polar vector", "axial vector", "symmetric tensor", "tensor",
                                  "axial tensor"])  # fmt: skip
def test_cylindrical_components_against_global_ones(
    tmp_path: Path, kind: str, planes: list[list[float]]
) -> None:
    """The same field, stored both ways, is the same field on the whole body."""
    through = planes == [[0.0, 1.0, 0.0]]
    grid = wedge(15.0 if through else 30.0)
    centres = grid.cell_centers().points
    E = local_bases(centres)
    if "vector" in kind:
        local = RANDOM.normal(size=(8, 3))
        stored_local, stored_global = local, np.einsum("nij,nj->ni", E, local)
    else:
        local = RANDOM.normal(size=(8, 3, 3))
        local = local + local.transpose(0, 2, 1) if kind == "symmetric tensor" else local
        turned = np.einsum("nij,njk,nlk->nil", E, local, E)
        pairs = [XX, YY, ZZ, XY, YZ, ZX] if kind == "symmetric tensor" else [
            (i, j) for i in range(3) for j in range(3)]  # fmt: skip
        stored_local = np.stack([local[:, i, j] for i, j in pairs], axis=1)
        stored_global = np.stack([turned[:, i, j] for i, j in pairs], axis=1)
    grid.cell_data["local"], grid.cell_data["whole"] = stored_local, stored_global
    case = case_of(
        tmp_path, grid, cyclic={"sectors": 12}, mirror=[{"normal": n} for n in planes],
        frames={"shaft": {"type": "cylindrical", "axis": "z"}},
        fields={"local": {"kind": kind, "frame": "shaft"}, "whole": {"kind": kind}},
    )  # fmt: skip
    body = expand(case)
    assert body.n_cells == 8 * 12 * (1 + len(planes))
    E = local_bases(body.cell_centers().points)
    if "vector" in kind:
        back = np.einsum("nij,nj->ni", E, body.cell_data["local"])
    else:
        size = len(pairs)
        full = np.zeros((body.n_cells, 3, 3))
        for column, (i, j) in enumerate(pairs):
            full[:, i, j] = body.cell_data["local"][:, column]
            if size == 6:
                full[:, j, i] = full[:, i, j]
        full = np.einsum("nij,njk,nlk->nil", E, full, E)
        back = np.stack([full[:, i, j] for i, j in pairs], axis=1)
    np.testing.assert_allclose(back, body.cell_data["whole"], atol=1e-12)
    if not planes:  # turning about its own axis leaves local components alone
        np.testing.assert_array_equal(
            body.cell_data["local"], stored_local[body.cell_data["sector_cell"]]
        )


def test_names_of_cylindrical_components(tmp_path: Path) -> None:
    grid = wedge(30.0)
    grid.cell_data["v"] = np.zeros((8, 3))
    grid.cell_data["s"] = np.zeros((8, 6))
    case = case_of(
        tmp_path, grid, cyclic={"sectors": 12},
        frames={"shaft": {"type": "cylindrical"}},
        fields={
            "v": {"kind": "polar vector", "frame": "shaft", "components": "r theta z"},
            "s": {"kind": "symmetric tensor", "frame": "shaft", "components": "rr tt zz rt tz zr"},
        },
    )  # fmt: skip
    data = expand(case).GetCellData()
    assert [data.GetArray("v").GetComponentName(k) for k in range(3)] == ["r", "t", "z"]
    names = [data.GetArray("s").GetComponentName(k) for k in range(6)]
    assert names == ["rr", "tt", "zz", "rt", "tz", "zr"]


def test_local_values_are_compared_in_global_directions(tmp_path: Path) -> None:
    """In the plane x = 0 the frame about z at (0, -1, 0) is the same on both sides; a vector that
    is radial there is tangential to the plane, so it closes."""
    grid = box()
    below = np.array([0.0, -1.0, 0.0])
    E = local_bases(grid.points - below)
    outwards = np.einsum("nji,j->ni", E, [0.0, 1.0, 0.0])
    grid.point_data["displacement"] = outwards
    case = case_of(
        tmp_path, grid,
        frames={"here": {"type": "cylindrical", "axis": "z", "point": below.tolist()}},
        fields={"displacement": {"kind": "polar vector", "frame": "here"}},
    )  # fmt: skip
    body = expand(case)
    back = np.einsum("nij,nj->ni", local_bases(body.points - below),
                     body.point_data["displacement"])  # fmt: skip
    np.testing.assert_allclose(back, np.tile([0.0, 1.0, 0.0], (45, 1)), atol=1e-14)


# Derived measures


def von_mises(values: np.ndarray, components: str) -> np.ndarray:
    T = tensors(values, components)
    xx, yy, zz = T[:, 0, 0], T[:, 1, 1], T[:, 2, 2]
    shear = T[:, 0, 1] ** 2 + T[:, 1, 2] ** 2 + T[:, 2, 0] ** 2
    return np.sqrt(0.5 * ((xx - yy) ** 2 + (yy - zz) ** 2 + (zz - xx) ** 2) + 3.0 * shear)


def principal(values: np.ndarray, components: str) -> np.ndarray:
    return np.sort(np.linalg.eigvalsh(tensors(values, components)), axis=1)[:, ::-1]


DERIVED = {"derived": ["von mises", "principal stresses", "magnitude"]}


@pytest.mark.parametrize("components", [USUAL, "zz xy xx yz zx yy", "xx yy zz xy", "xx yy xy",
                                        "xx xy xz yx yy yz zx zy zz"])  # fmt: skip
@pytest.mark.parametrize("load", ["symmetric", "antisymmetric"])
@pytest.mark.parametrize("on", ["points", "cells"])
def test_derived_measures(tmp_path: Path, components: str, load: str, on: str) -> None:
    grid = box()
    count = 27 if on == "points" else 8
    data = grid.point_data if on == "points" else grid.cell_data
    T = RANDOM.normal(size=(count, 3, 3))
    T += T.transpose(0, 2, 1)
    data["stress"] = np.stack(
        [T[:, "xyz".index(i), "xyz".index(j)] for i, j in components.split()], axis=1
    )
    data["velocity"] = (1.0 if on == "cells" else grid.points.prod(axis=1)[:, None]) * (
        RANDOM.normal(size=(count, 3))
    )
    case = case_of(
        tmp_path, grid, mirror=[{"normal": "x", "load": load}], output=DERIVED,
        fields={"stress": {"kind": "symmetric tensor", "components": components,
                           "seam": "recovered"}},
    )  # fmt: skip
    body = expand(case)
    data = body.point_data if on == "points" else body.cell_data
    whole = data["stress"]
    np.testing.assert_allclose(data["stress_von_mises"], von_mises(whole, components), atol=1e-12)
    np.testing.assert_allclose(data["stress_principal"], principal(whole, components), atol=1e-12)
    length = np.sqrt((data["velocity"] ** 2).sum(axis=1))
    np.testing.assert_allclose(data["velocity_magnitude"], length, atol=1e-12)
    raw = body.GetPointData() if on == "points" else body.GetCellData()
    names = [raw.GetArray("stress_principal").GetComponentName(k) for k in range(3)]
    assert names == ["largest", "middle", "smallest"]


def test_derived_measures_on_turned_copies(tmp_path: Path) -> None:
    grid = wedge(30.0)
    grid.point_data["stress"] = RANDOM.normal(size=(27, 6))
    grid.cell_data["heat_flux"] = RANDOM.normal(size=(8, 3))
    case = case_of(tmp_path, grid, cyclic={"sectors": 12, "nodal_diameters": 6}, output=DERIVED)
    body = expand(case)
    whole = body.point_data["stress"]
    np.testing.assert_allclose(
        body.point_data["stress_von_mises"], von_mises(whole, USUAL), atol=1e-12
    )
    np.testing.assert_allclose(
        body.point_data["stress_principal"], principal(whole, USUAL), atol=1e-12
    )
    length = np.linalg.norm(body.cell_data["heat_flux"], axis=1)
    np.testing.assert_allclose(body.cell_data["heat_flux_magnitude"], length, atol=1e-12)


def test_derived_measures_in_a_cylindrical_frame(tmp_path: Path) -> None:
    grid = wedge(30.0)
    grid.cell_data["stress"] = RANDOM.normal(size=(8, 6))
    case = case_of(
        tmp_path, grid, cyclic={"sectors": 12}, output=DERIVED,
        frames={"shaft": {"type": "cylindrical"}},
        fields={"stress": {"kind": "symmetric tensor", "frame": "shaft"}},
    )  # fmt: skip
    body = expand(case)
    right = von_mises(body.cell_data["stress"], USUAL)
    np.testing.assert_allclose(body.cell_data["stress_von_mises"], right, atol=1e-12)


def test_derived_measures_keep_the_precision(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["stress"] = RANDOM.normal(size=(8, 6)).astype(np.float32)
    grid.cell_data["velocity"] = np.ones((8, 3), dtype=np.int32)
    case = case_of(tmp_path, grid, output=DERIVED)
    body = expand(case)
    assert body.cell_data["stress_von_mises"].dtype == np.float32
    assert body.cell_data["velocity_magnitude"].dtype == np.float64
    np.testing.assert_array_equal(body.cell_data["velocity_magnitude"], np.full(16, np.sqrt(3.0)))


def test_only_what_was_asked_for_is_derived(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["stress"] = np.zeros((8, 6))
    grid.cell_data["plastic_strain"] = np.zeros((8, 6))
    grid.cell_data["velocity"] = np.zeros((8, 3))
    grid.cell_data["normals"] = np.zeros((8, 3))
    for wanted, added in (
        ([], set()),
        (["von mises"], {"stress_von_mises"}),
        (["principal stresses"], {"stress_principal"}),
        (["magnitude"], {"velocity_magnitude"}),
    ):
        body = expand(case_of(tmp_path, grid, output={"derived": wanted}))
        known = {"stress", "plastic_strain", "velocity", "normals", "sector_cell", "copy"}
        assert set(body.cell_data.keys()) == known | added


def test_measure_asked_for_that_no_field_has_is_not_passed_over(tmp_path: Path) -> None:
    """Stress under a name without the word: it is computed, said, or refused."""
    grid = box()
    grid.cell_data["sigma"] = RANDOM.normal(size=(8, 6))
    case = case_of(tmp_path, grid, output={"derived": ["von mises"]},
                   fields={"sigma": {"kind": "symmetric tensor"}})  # fmt: skip
    try:
        planned = plan(case)
    except InputError as error:
        assert "von mises" in str(error)  # noqa: PT017  one of three right outcomes
        return
    told = " ".join(planned.summary()["notes"])
    assert "von mises" in told or "sigma_von_mises" in expand(case).cell_data


def test_derived_measure_beside_an_array_of_that_name(tmp_path: Path) -> None:
    """Two arrays of one name cannot be told apart by a reader."""
    grid = box()
    grid.cell_data["stress"] = RANDOM.normal(size=(8, 6))
    grid.cell_data["stress_von_mises"] = np.ones(8)
    case = case_of(tmp_path, grid, output={"derived": ["von mises"], "file": "whole.vtu"})
    try:
        plan(case).write()
    except InputError as error:
        assert "stress_von_mises" in str(error)  # noqa: PT017  refused, or one array
        return
    header = (tmp_path / "whole.vtu").read_bytes()
    assert header.count(b'Name="stress_von_mises"') == 1


# Sums


def two_cases(folder: Path) -> dict[str, Any]:
    """Two results of half a model: one symmetric, one antisymmetric about x = 0."""
    for name in ("even", "odd"):
        grid = box()
        inside = grid.points.prod(axis=1)[:, None]
        grid.point_data["displacement"] = inside * RANDOM.normal(size=3)
        grid.point_data["stress"] = RANDOM.normal(size=(27, 6))
        grid.cell_data["cell_stress"] = RANDOM.normal(size=(8, 6))
        grid.cell_data["von_mises"] = von_mises(grid.cell_data["cell_stress"], USUAL)
        grid.cell_data["energy_density"] = RANDOM.random(8)
        grid.cell_data["principal_stress"] = principal(grid.cell_data["cell_stress"], USUAL)
        grid.cell_data["part"] = np.arange(8)
        grid.cell_data["thickness"] = np.arange(8.0)
        grid.save(folder / f"{name}.vtu")
    return {
        "mirror": [{"name": "mid", "normal": "x"}],
        "case": [
            {"name": "even", "file": "even.vtu"},
            {"name": "odd", "file": "odd.vtu", "load": {"mid": "antisymmetric"}},
        ],
    }


@pytest.mark.parametrize("factors", [(1.0, 1.0), (0.5, -2.0), (-1.0, 0.0)])
def test_sum_of_cases(tmp_path: Path, factors: tuple[float, float]) -> None:
    tables = two_cases(tmp_path)
    tables["sum"] = [{"name": "both", "terms": dict(zip(("even", "odd"), factors, strict=True))}]
    tables["output"] = {**DERIVED, "results": ["both", "even", "odd"]}
    case = validate_case(tables, tmp_path)
    both, even, odd = (expand(case, result=name) for name in ("both", "even", "odd"))
    for data, name in (("point_data", "displacement"), ("point_data", "stress"),
                       ("cell_data", "cell_stress")):  # fmt: skip
        a, b = (getattr(body, data)[name] for body in (even, odd))
        right = factors[0] * a + factors[1] * b
        np.testing.assert_allclose(getattr(both, data)[name], right, atol=1e-12)
    # Properties of the body are neither added nor scaled.
    for name in ("part", "thickness"):
        np.testing.assert_array_equal(both.cell_data[name], both.cell_data["sector_cell"])
    # Measures that do not add up are left out, and computed again from the summed tensor.
    for name in ("von_mises", "energy_density", "principal_stress"):
        assert name in even.cell_data
        assert name not in both.cell_data
    for data, name in (("point_data", "stress"), ("cell_data", "cell_stress")):
        whole = getattr(both, data)
        np.testing.assert_allclose(
            whole[f"{name}_von_mises"], von_mises(whole[name], USUAL), atol=1e-12
        )
        np.testing.assert_allclose(
            whole[f"{name}_principal"], principal(whole[name], USUAL), atol=1e-12
        )
    length = np.linalg.norm(both.point_data["displacement"], axis=1)
    np.testing.assert_allclose(both.point_data["displacement_magnitude"], length, atol=1e-12)


def test_sum_says_what_it_left_out(tmp_path: Path) -> None:
    tables = two_cases(tmp_path)
    tables["sum"] = [{"name": "both", "terms": {"even": 1.0, "odd": 1.0}}]
    (result,) = plan(validate_case(tables, tmp_path)).summary()["results"]
    left_out = {"von_mises", "energy_density", "principal_stress"}
    assert set(result["left_out"]) == left_out
    assert result["terms"] == {"even": 1.0, "odd": 1.0}


def test_factor_of_a_case(tmp_path: Path) -> None:
    """A scaled case is a sum of one term; what does not scale is left out."""
    tables = two_cases(tmp_path)
    tables["output"] = DERIVED
    plain = expand(validate_case(tables, tmp_path), result="odd")
    tables["case"][1]["factor"] = -3.0
    scaled = expand(validate_case(tables, tmp_path), result="odd")
    for name in ("displacement", "stress"):
        np.testing.assert_allclose(scaled.point_data[name], -3.0 * plain.point_data[name],
                                   atol=1e-12)  # fmt: skip
    np.testing.assert_array_equal(scaled.cell_data["thickness"], plain.cell_data["thickness"])
    assert "von_mises" not in scaled.cell_data
    assert "energy_density" not in scaled.cell_data
    right = 3.0 * plain.cell_data["cell_stress_von_mises"]
    np.testing.assert_allclose(scaled.cell_data["cell_stress_von_mises"], right, atol=1e-12)
    tables["sum"] = [{"name": "s", "terms": {"odd": 0.5}}]
    summed = expand(validate_case(tables, tmp_path))
    np.testing.assert_allclose(summed.point_data["stress"], -1.5 * plain.point_data["stress"],
                               atol=1e-12)  # fmt: skip


def test_sum_of_one_whole_case_keeps_everything(tmp_path: Path) -> None:
    tables = two_cases(tmp_path)
    tables["sum"] = [{"name": "same", "terms": {"odd": 1.0}}]
    case = validate_case(tables, tmp_path)
    same = expand(case)
    tables.pop("sum")
    odd = expand(validate_case(tables, tmp_path), result="odd")
    assert set(same.cell_data.keys()) == set(odd.cell_data.keys())
    for name in ("von_mises", "cell_stress", "principal_stress"):
        np.testing.assert_array_equal(same.cell_data[name], odd.cell_data[name])


def test_cases_alone_keep_their_own_measures(tmp_path: Path) -> None:
    """Read from the files, not computed: the principal values of an antisymmetric case turn
    round, von Mises stays."""
    tables = two_cases(tmp_path)
    odd = expand(validate_case(tables, tmp_path), result="odd")
    own = principal(odd.cell_data["cell_stress"], USUAL)
    np.testing.assert_allclose(odd.cell_data["principal_stress"], own, atol=1e-12)
    own = von_mises(odd.cell_data["cell_stress"], USUAL)
    np.testing.assert_allclose(odd.cell_data["von_mises"], own, atol=1e-12)
