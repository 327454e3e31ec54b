"""Written files: read back by VTK's own reader, the same bytes on every run, in little memory."""

from __future__ import annotations

import hashlib
import json
import os
import stat
import tracemalloc
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from scipy.spatial.transform import Rotation
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonCore import vtkOutputWindow, vtkStringOutputWindow
from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

import expander.writers.vtu
from expander import expand, plan, read_case
from expander.body import prepare
from expander.casefile import CaseFile, validate_case
from expander.expansion import field_data
from expander.images import arrays_of
from expander.writers.newfiles import NewFiles
from expander.writers.vtu import write_vtu

DTYPES = [np.int8, np.uint8, np.int16, np.uint16, np.int32, np.uint32, np.int64, np.uint64,
          np.float32, np.float64]  # fmt: skip
RANDOM = np.random.default_rng(11)


def read(path: Path) -> vtkUnstructuredGrid:
    """The file through VTK's own reader, which must not complain."""
    window, before = vtkStringOutputWindow(), vtkOutputWindow.GetInstance()
    vtkOutputWindow.SetInstance(window)
    try:
        reader = vtkXMLUnstructuredGridReader()
        assert reader.CanReadFile(str(path))
        reader.SetFileName(str(path))
        reader.Update()
        assert reader.GetErrorCode() == 0
    finally:
        vtkOutputWindow.SetInstance(before)
    assert window.GetOutput() == ""
    return reader.GetOutput()


def numbers(data: Any, name: str) -> np.ndarray:
    return vtk_to_numpy(data.GetArray(name))


def texts(grid: vtkUnstructuredGrid, name: str) -> list[str]:
    array = grid.GetFieldData().GetAbstractArray(name)
    return [array.GetValue(k) for k in range(array.GetNumberOfValues())]


def names_of(data: Any) -> list[str]:
    return [data.GetArrayName(k) for k in range(data.GetNumberOfArrays())]


def box(n: int = 2) -> pyvista.UnstructuredGrid:
    """Hexahedra in 0 .. n along each axis."""
    grid = pyvista.ImageData(dimensions=(n + 1,) * 3).cast_to_structured_grid()
    return grid.cast_to_unstructured_grid()


def wedge(sectors: int, counts: tuple[int, int, int] = (3, 4, 3)) -> pyvista.UnstructuredGrid:
    """One of `sectors` about z: hexahedra between radii 1 and 2, height 0 to 1."""
    r, angle, z = np.meshgrid(
        np.linspace(1.0, 2.0, counts[0]), np.linspace(0.0, 2.0 * np.pi / sectors, counts[1]),
        np.linspace(0.0, 1.0, counts[2]), indexing="ij",
    )  # fmt: skip
    grid = pyvista.StructuredGrid(r * np.cos(angle), r * np.sin(angle), z)
    grid = grid.cast_to_unstructured_grid()
    grid.point_data["displacement"] = 0.01 * grid.points
    grid.point_data["stress"] = RANDOM.normal(size=(grid.n_points, 6))
    grid.cell_data["temperature"] = RANDOM.random(grid.n_cells)
    return grid


def half_case(folder: Path, grid: pyvista.UnstructuredGrid, **tables: Any) -> CaseFile:
    grid.save(folder / "half.vtu")
    tables.setdefault("model", {"file": "half.vtu"})
    tables.setdefault("mirror", [{"name": "mid", "normal": "x"}])
    tables.setdefault("output", {"file": "whole.vtu"})
    return validate_case(tables, folder)


def ring_case(folder: Path, sectors: int, counts: tuple[int, int, int] = (3, 4, 3),
              **tables: Any) -> CaseFile:  # fmt: skip
    wedge(sectors, counts).save(folder / "sector.vtu")
    tables.setdefault("output", {"file": "ring.vtu"})
    return validate_case(
        {"model": {"file": "sector.vtu"}, "cyclic": {"sectors": sectors}, **tables}, folder
    )


# What the file holds


@pytest.mark.parametrize("dtype", DTYPES, ids=lambda d: d.__name__)
def test_number_types_are_kept(tmp_path: Path, dtype: type) -> None:
    """Values too, bit by bit: the largest 64-bit integers do not fit a floating-point number."""
    grid = box()
    if np.issubdtype(dtype, np.integer):
        limits = np.iinfo(dtype)
        values = np.array([limits.min, limits.max, 0, 1, 2, limits.max - 1, 3, 4], dtype=dtype)
        kind = "label"
    else:
        tiny = np.finfo(dtype)
        values = np.array([tiny.max, tiny.tiny, -0.0, 1 / 3, -tiny.eps, 5e-324, 1.0, -1.0],
                          dtype=dtype)  # fmt: skip
        kind = "invariant"
    grid.cell_data["one"] = values
    grid.cell_data["three"] = np.arange(24).reshape(8, 3).astype(dtype)
    grid.point_data["nodal"] = np.resize(values, 27) if kind == "label" else np.arange(27.0)
    grid.point_data["nodal"] = grid.point_data["nodal"].astype(dtype)
    three = "label" if kind == "label" else "principal values"
    plan(half_case(tmp_path, grid, fields={
        "one": {"kind": kind}, "three": {"kind": three}, "nodal": {"kind": kind},
    })).write()  # fmt: skip
    back = read(tmp_path / "whole.vtu")
    cell = numbers(back.GetCellData(), "sector_cell")
    point = numbers(back.GetPointData(), "sector_point")
    for data, name, own in (
        (back.GetCellData(), "one", grid.cell_data["one"][cell]),
        (back.GetCellData(), "three", grid.cell_data["three"][cell]),
        (back.GetPointData(), "nodal", grid.point_data["nodal"][point]),
    ):
        assert numbers(data, name).dtype == dtype
        assert numbers(data, name).tobytes() == np.ascontiguousarray(own).tobytes(), name


@pytest.mark.parametrize("dtype", [np.float32, np.float64])
def test_precision_of_points_and_fields_is_kept(tmp_path: Path, dtype: type) -> None:
    grid = wedge(12)
    grid.points = grid.points.astype(dtype)
    for name in ("displacement", "stress"):
        grid.point_data[name] = grid.point_data[name].astype(dtype)
    grid.save(tmp_path / "sector.vtu")
    case = validate_case({"model": {"file": "sector.vtu"}, "cyclic": {"sectors": 12}}, tmp_path)
    plan(case).write()
    back = read(tmp_path / "sector_full.vtu")
    assert vtk_to_numpy(back.GetPoints().GetData()).dtype == dtype
    assert numbers(back.GetPointData(), "displacement").dtype == dtype
    assert numbers(back.GetPointData(), "stress").dtype == dtype
    assert numbers(back.GetCellData(), "temperature").dtype == np.float64
    copy = numbers(back.GetCellData(), "copy")
    first = numbers(back.GetCellData(), "temperature")[copy == 0]
    np.testing.assert_array_equal(first, grid.cell_data["temperature"])


def test_added_arrays(tmp_path: Path) -> None:
    """Every node and cell of the body can be traced to the sector and its copy."""
    case = ring_case(tmp_path, 5, mirror=[{"normal": "z"}])
    plan(case).write()
    back = read(tmp_path / "ring.vtu")
    sector = pyvista.read(tmp_path / "sector.vtu")
    placements = numbers(back.GetFieldData(), "placements").reshape(-1, 4, 4)
    copy = numbers(back.GetCellData(), "copy")
    cell = numbers(back.GetCellData(), "sector_cell")
    point = numbers(back.GetPointData(), "sector_point")
    assert copy.dtype == cell.dtype == point.dtype == np.int32
    assert len(placements) == 10
    np.testing.assert_array_equal(np.unique(copy), np.arange(10))
    whole = pyvista.wrap(back)
    own = sector.cell_centers().points[cell]
    moved = np.einsum("nij,nj->ni", placements[copy, :3, :3], own) + placements[copy, :3, 3]
    np.testing.assert_allclose(whole.cell_centers().points, moved, atol=1e-14)
    corners = whole.cell_connectivity.reshape(-1, 8)
    own = sector.points[point[corners]]
    moved = np.einsum("nij,nkj->nki", placements[copy, :3, :3], own)
    moved += placements[copy, None, :3, 3]
    on_face = np.isin(point[corners], np.flatnonzero(np.isclose(sector.points[:, 1], 0.0) | (
        np.isclose(np.arctan2(sector.points[:, 1], sector.points[:, 0]), 2 * np.pi / 5))
    ))  # fmt: skip
    far = np.linalg.norm(moved - whole.points[corners], axis=2)
    assert far[~on_face].max() < 1e-14
    volume = whole.compute_cell_sizes(length=False, area=False)["Volume"]
    assert volume.min() > 0.0
    own_volume = sector.compute_cell_sizes(length=False, area=False)["Volume"]
    np.testing.assert_allclose(volume, own_volume[cell], rtol=1e-12)


def test_placements_are_the_isometries_of_the_case(tmp_path: Path) -> None:
    """Turns about an axis off the origin and a mirror plane, against formulas of their own."""
    grid = wedge(4)
    grid.translate((3.0, -1.0, 0.5), inplace=True)
    grid.point_data.clear()
    grid.save(tmp_path / "sector.vtu")
    case = validate_case({
        "model": {"file": "sector.vtu"},
        "cyclic": {"sectors": 4, "axis": "z", "point": [3.0, -1.0, 9.0]},
        "mirror": [{"normal": "z", "point": [0.0, 0.0, 0.5]}],
    }, tmp_path)  # fmt: skip
    plan(case).write()
    back = read(tmp_path / "sector_full.vtu")
    placements = numbers(back.GetFieldData(), "placements")
    assert placements.shape == (8, 16)
    expected = []
    for mirrored in (False, True):
        for k in range(4):
            M = np.eye(4)
            M[:3, :3] = Rotation.from_euler("z", 90 * k, degrees=True).as_matrix()
            if mirrored:
                M[:3, :3] = M[:3, :3] @ np.diag([1.0, 1.0, -1.0])
            centre = np.array([3.0, -1.0, 0.5])  # stays where it is
            M[:3, 3] = centre - M[:3, :3] @ centre
            expected.append(M.ravel())
    left = list(expected)
    for row in placements:
        distances = [np.abs(row - e).max() for e in left]
        assert min(distances) < 1e-14
        left.pop(int(np.argmin(distances)))
    np.testing.assert_array_equal(placements[0], np.eye(4).ravel())
    assert not left
    words = texts(back, "copy_words")
    assert len(words) == 8
    assert words[0] == "as modelled"
    assert len(set(words)) == 8
    np.testing.assert_array_equal(numbers(back.GetFieldData(), "copies"), np.arange(8))


def test_placements_of_some_copies(tmp_path: Path) -> None:
    case = ring_case(tmp_path, 8, output={"file": "some.vtu", "copies": [6, 2]})
    plan(case).write()
    fields = read(tmp_path / "some.vtu").GetFieldData()
    np.testing.assert_array_equal(numbers(fields, "copies"), [2, 6])
    quarter = numbers(fields, "placements")[0].reshape(4, 4)
    np.testing.assert_allclose(quarter[:3, :3], [[0, -1, 0], [1, 0, 0], [0, 0, 1]], atol=1e-15)
    assert numbers(fields, "factors").size == 2


def two_results(folder: Path) -> dict[str, Any]:
    for name in ("even", "odd"):
        grid = box()
        grid.point_data["displacement"] = grid.points.prod(axis=1)[:, None] * [1.0, 2.0, 3.0]
        grid.save(folder / f"{name}.vtu")
    return {
        "mirror": [{"name": "mid", "normal": "x"}],
        "case": [
            {"name": "even", "file": "even.vtu"},
            {"name": "odd", "file": "odd.vtu", "load": {"mid": "antisymmetric"}, "factor": 3.0},
        ],
        "output": {"file": "whole.pvd"},
    }


def test_factors_are_recorded(tmp_path: Path) -> None:
    tables = two_results(tmp_path)
    plan(validate_case(tables, tmp_path)).write()
    even, odd = (read(tmp_path / f"whole_{n}.vtu") for n in ("even", "odd"))
    np.testing.assert_array_equal(numbers(even.GetFieldData(), "factors"), [1.0, 1.0])
    np.testing.assert_array_equal(numbers(odd.GetFieldData(), "factors"), [3.0, -3.0])
    assert texts(odd, "terms") == ["3 * odd: mid antisymmetric"]
    tables["sum"] = [{"name": "both", "terms": {"even": 0.1, "odd": 0.5}}]
    tables["output"] = {"file": "sum.vtu"}
    plan(validate_case(tables, tmp_path)).write()
    both = read(tmp_path / "sum.vtu")
    assert texts(both, "result") == ["both"]
    found = numbers(both.GetFieldData(), "factors")
    np.testing.assert_array_equal(found, [[0.1, 1.5], [0.1, -1.5]])
    assert [t.split(" * ")[1] for t in texts(both, "terms")] == [
        "even: mid symmetric", "odd: mid antisymmetric"
    ]  # fmt: skip
    assert [float(t.split(" * ")[0]) for t in texts(both, "terms")] == [0.1, 1.5]


def test_digests_of_the_inputs(tmp_path: Path) -> None:
    tables = two_results(tmp_path)
    tables.pop("output")
    source = tmp_path / "case.toml"
    lines = [f"case = {json.dumps(tables['case']).replace(': ', ' = ')}"]
    lines.append('mirror = [{ name = "mid", normal = "x" }]\n[[sum]]\nname = "both"')
    lines.append("terms = { even = 1.0, odd = 1.0 }")
    text = "\n".join(lines)
    for key in ("name", "file", "load", "mid", "factor"):
        text = text.replace(f'"{key}" =', f"{key} =")
    source.write_text(text, encoding="utf-8")
    plan(read_case(source)).write()
    recorded = texts(read(tmp_path / "case_full.vtu"), "input_sha256")
    expected = [
        f"{path.name} {hashlib.sha256(path.read_bytes()).hexdigest()}"
        for path in (tmp_path / "even.vtu", tmp_path / "odd.vtu", source)
    ]
    assert recorded == expected


def test_component_names(tmp_path: Path) -> None:
    grid = box()
    sizes = {"v": 3, "s": 6, "t": 9, "p": 3, "a": 1}
    for name, size in sizes.items():
        grid.cell_data[name] = np.zeros((8, size)) if size > 1 else np.zeros(8)
    kinds = {
        "v": {"kind": "polar vector"},
        "s": {"kind": "symmetric tensor", "components": "xx xy xz yy yz zz"},
        "t": {"kind": "tensor"},
        "p": {"kind": "principal values"},
        "a": {"kind": "scalar"},
    }
    plan(half_case(tmp_path, grid, fields=kinds)).write()
    data = read(tmp_path / "whole.vtu").GetCellData()

    def components(name: str) -> list[str | None]:
        array = data.GetArray(name)
        return [array.GetComponentName(k) for k in range(array.GetNumberOfComponents())]

    assert components("v") == ["x", "y", "z"]
    assert components("s") == ["xx", "xy", "xz", "yy", "yz", "zz"]
    assert components("t") == ["xx", "xy", "xz", "yx", "yy", "yz", "zx", "zy", "zz"]
    assert components("p") == ["largest", "middle", "smallest"]
    assert components("a") == [None]
    assert names_of(data) == ["v", "s", "t", "p", "a", "sector_cell", "copy"]


def test_text_is_utf_8(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["σ"] = np.zeros((8, 6))
    grid.save(tmp_path / "Träger ½.vtu")
    plane = "Mitte – середина 中"
    case = validate_case({
        "mirror": [{"name": plane, "normal": "x"}],
        "case": [{"name": "Fall ä", "file": "Träger ½.vtu"}],
        "fields": {"σ": {"kind": "symmetric tensor", "unit": "N/mm²"}},
        "output": {"file": "Körper.vtu"},
    }, tmp_path)  # fmt: skip
    plan(case).write()
    back = read(tmp_path / "Körper.vtu")
    assert names_of(back.GetCellData())[0] == "σ"
    assert texts(back, "result") == ["Fall ä"]
    assert texts(back, "terms") == [f"1 * Fall ä: {plane} symmetric"]
    assert texts(back, "copy_words") == ["as modelled", f"mirrored in {plane!r}"]
    assert texts(back, "fields")[0].startswith("σ: symmetric tensor on cells (declared)")
    assert texts(back, "fields")[0].endswith("N/mm²")
    assert texts(back, "input_sha256")[0].startswith("Träger ½.vtu ")


def test_what_was_assumed_is_recorded(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["q"] = np.zeros((8, 5))
    case = half_case(tmp_path, grid)
    plan(case, skip_undeclared=True).write()
    back = read(tmp_path / "whole.vtu")
    assert "array 'q' on cells is undeclared and was left out" in texts(back, "assumptions")
    assert texts(back, "program")[0].startswith("seamfold ")
    assert any("share the symmetry" in caution for caution in texts(back, "cautions"))


def test_cells_of_many_types(tmp_path: Path) -> None:
    """Solids, shells in the cut plane (kept once), a polygon, a line and a vertex."""
    grid = box()
    on_plane = np.flatnonzero(grid.points[:, 0] == 0.0)
    square = [int(grid.find_closest_point(p)) for p in
              ((0, 0, 0), (0, 1, 0), (0, 1, 1), (0, 0, 1))]  # fmt: skip
    five = [int(grid.find_closest_point(p)) for p in
            ((0, 0, 2), (1, 0, 2), (2, 1, 2), (1, 2, 2), (0, 2, 2))]  # fmt: skip
    cells = [(12, c.tolist()) for c in grid.cell_connectivity.reshape(-1, 8)]
    cells += [(9, square), (7, five), (3, [square[0], five[2]]), (1, [five[2]])]
    cells += [(1, [int(on_plane[4])])]
    flat = [n for _, nodes in cells for n in (len(nodes), *nodes)]
    mixed = pyvista.UnstructuredGrid(
        np.array(flat), np.array([t for t, _ in cells], dtype=np.uint8), grid.points
    )
    mixed.cell_data["part"] = np.arange(mixed.n_cells)
    plan(half_case(tmp_path, mixed)).write()
    whole = pyvista.wrap(read(tmp_path / "whole.vtu"))
    types = whole.celltypes
    expected = {12: 16, 9: 1, 7: 2, 3: 2, 1: 3}
    assert {t: int((types == t).sum()) for t in expected} == expected
    assert len(types) == 24
    np.testing.assert_array_equal(whole.cell_data["part"], whole.cell_data["sector_cell"])
    np.testing.assert_array_equal(types, mixed.celltypes[whole.cell_data["sector_cell"]])
    sizes = whole.compute_cell_sizes()
    assert sizes["Volume"].sum() == pytest.approx(16.0)
    assert sizes["Volume"][types == 12].min() > 0.99
    assert sizes["Area"].sum() == pytest.approx(1.0 + 2 * 3.0)
    for k in range(whole.n_cells):
        image = whole.get_cell(k).points * np.where(whole.cell_data["copy"][k], [-1, 1, 1], 1)
        own = mixed.get_cell(int(whole.cell_data["sector_cell"][k])).points
        assert {tuple(p) for p in image.tolist()} == {tuple(p) for p in own.tolist()}


# The same bytes


def write_with(path: Path, case: CaseFile, workers: int | None) -> int:
    body = prepare(case)
    (result,) = body.results
    with NewFiles() as files:
        return write_vtu(files, path, arrays_of(body, result), field_data(body, result, {}),
                         workers=workers)  # fmt: skip


def written(folder: Path, case: CaseFile, workers: int | None) -> bytes:
    size = write_with(folder / "once.vtu", case, workers)
    content = (folder / "once.vtu").read_bytes()
    assert len(content) == size
    return content


@pytest.mark.parametrize("small", [False, True], ids=["whole pieces", "small pieces"])
def test_workers_write_the_same_bytes(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, small: bool
) -> None:
    tables = {"output": {"derived": ["von mises", "principal stresses", "magnitude"]}}
    case = ring_case(tmp_path, 24, (4, 5, 6), **tables)
    alone = written(tmp_path, case, 1)
    if small:
        monkeypatch.setattr(expander.writers.vtu, "_PIECE", 2000)
    for workers in (1, 2, 4, None):
        for _ in range(2):
            assert written(tmp_path, case, workers) == alone


def test_runs_write_the_same_bytes(tmp_path: Path) -> None:
    case = validate_case(two_results(tmp_path), tmp_path)
    contents = []
    for _ in range(3):
        plan(case).write()
        contents.append({p.name: p.read_bytes() for p in tmp_path.glob("whole*")})
    assert sorted(contents[0]) == ["whole.pvd", "whole_even.vtu", "whole_odd.vtu"]
    assert contents[0] == contents[1] == contents[2]


def test_the_folder_does_not_change_the_bytes(tmp_path: Path) -> None:
    """No dates, machine names or paths."""
    contents = []
    for name in ("here", "there"):
        (tmp_path / name).mkdir()
        grid = box()
        grid.point_data["displacement"] = 0.01 * grid.points
        case = half_case(tmp_path / name, grid)
        os.utime(tmp_path / name / "half.vtu", (1e9, 1e9))
        plan(case).write()
        contents.append((tmp_path / name / "whole.vtu").read_bytes())
    assert contents[0] == contents[1]
    assert str(tmp_path).encode() not in contents[0]


# Several results


def test_index_of_several_results(tmp_path: Path) -> None:
    tables = two_results(tmp_path)
    tables["case"].append({"name": 'Fall <ä> & "b"', "file": "even.vtu"})
    expansion = plan(validate_case(tables, tmp_path))
    expansion.write()
    reader = pyvista.PVDReader(tmp_path / "whole.pvd")
    assert list(reader.time_values) == [0.0, 1.0, 2.0]
    assert [d.group for d in reader.datasets] == ["even", "odd", 'Fall <ä> & "b"']
    for k, name in enumerate(("even", "odd", 'Fall <ä> & "b"')):
        reader.set_active_time_value(float(k))
        (block,) = reader.read()
        direct = read(tmp_path / reader.active_datasets[0].path)
        assert texts(direct, "result") == [name]
        assert block.n_cells == 16
        np.testing.assert_array_equal(
            block.point_data["displacement"], numbers(direct.GetPointData(), "displacement")
        )
    listed = [Path(r["file"]) for r in expansion.summary()["results"]]
    assert [p.name for p in listed] == [Path(d.path).name for d in reader.datasets]


def test_one_result_asked_for_gives_one_file(tmp_path: Path) -> None:
    tables = two_results(tmp_path)
    tables["output"] = {"file": "one.vtu", "results": ["odd"]}
    plan(validate_case(tables, tmp_path)).write()
    assert [p.name for p in tmp_path.glob("one*")] == ["one.vtu"]
    assert texts(read(tmp_path / "one.vtu"), "result") == ["odd"]


# In memory


@pytest.mark.parametrize("which", ["half", "ring", "sum", "some"])
def test_grid_in_memory_is_the_file(tmp_path: Path, which: str) -> None:
    if which == "half":
        grid = box()
        grid.point_data["displacement"] = (0.01 * grid.points).astype(np.float32)
        grid.point_data["ids"] = np.arange(27, dtype=np.uint16)
        grid.cell_data["stress"] = RANDOM.normal(size=(8, 6))
        case = half_case(tmp_path, grid)
    elif which == "sum":
        tables = two_results(tmp_path)
        tables["sum"] = [{"name": "both", "terms": {"even": 1.0, "odd": -2.0}}]
        tables["output"] = {"file": "whole.vtu", "derived": ["magnitude"]}
        case = validate_case(tables, tmp_path)
    else:
        copies = {"copies": [0, 3, 4]} if which == "some" else {}
        case = ring_case(tmp_path, 12, mirror=[{"normal": "z"}],
                         output={"file": "whole.vtu", **copies})  # fmt: skip
    plan(case).write()
    file, memory = read(tmp_path / "whole.vtu"), expand(case)
    np.testing.assert_array_equal(vtk_to_numpy(file.GetPoints().GetData()), memory.points)
    assert vtk_to_numpy(file.GetPoints().GetData()).dtype == memory.points.dtype
    whole = pyvista.wrap(file)
    np.testing.assert_array_equal(whole.celltypes, memory.celltypes)
    np.testing.assert_array_equal(whole.cell_connectivity, memory.cell_connectivity)
    np.testing.assert_array_equal(whole.cell_offsets, memory.cell_offsets)
    for a, b in ((file.GetPointData(), memory.GetPointData()),
                 (file.GetCellData(), memory.GetCellData())):  # fmt: skip
        assert names_of(a) == names_of(b)
        for name in names_of(a):
            first, second = numbers(a, name), numbers(b, name)
            assert first.dtype == second.dtype
            assert first.tobytes() == second.tobytes(), name
            one, other = a.GetArray(name), b.GetArray(name)
            for k in range(one.GetNumberOfComponents()):
                assert one.GetComponentName(k) == other.GetComponentName(k)
    fields, others = file.GetFieldData(), memory.GetFieldData()
    assert names_of(fields) == names_of(others)
    for name in names_of(fields):
        if fields.GetArray(name) is None:
            assert texts(file, name) == texts(memory, name)
        else:
            np.testing.assert_array_equal(numbers(fields, name), numbers(others, name))


def test_grid_in_memory_holds_text_in_any_language(tmp_path: Path) -> None:
    grid = box()
    grid.cell_data["σ"] = np.zeros((8, 6))
    case = half_case(
        tmp_path, grid, mirror=[{"name": "Mitte ½", "normal": "x"}],
        fields={"σ": {"kind": "symmetric tensor", "unit": "N/mm²"}},
    )  # fmt: skip
    memory = expand(case)
    assert "σ" in memory.cell_data
    assert texts(memory, "copy_words")[1] == "mirrored in 'Mitte ½'"


def test_cases_from_a_file_and_from_tables_give_the_same_grid(tmp_path: Path) -> None:
    case = half_case(tmp_path, box())
    (tmp_path / "case.toml").write_text(
        '[model]\nfile = "half.vtu"\n[[mirror]]\nname = "mid"\nnormal = "x"\n', encoding="utf-8"
    )
    a = expand(case)
    for given in (tmp_path / "case.toml", str(tmp_path / "case.toml")):
        b = expand(given)
        np.testing.assert_array_equal(a.points, b.points)
        np.testing.assert_array_equal(a.cells, b.cells)


# Memory and files


def peak_of_writing(folder: Path, sectors: int, counts: tuple[int, int, int]) -> tuple[int, int]:
    """Largest memory while planning and writing, and the size of the file, in bytes."""
    folder.mkdir()
    case = ring_case(folder, sectors, counts)
    tracemalloc.start()
    try:
        # One worker, so that the peak does not depend on which blocks meet.
        size = write_with(folder / "ring.vtu", case, 1)
        return tracemalloc.get_traced_memory()[1], size
    finally:
        tracemalloc.stop()


def test_memory_does_not_grow_with_the_copies(tmp_path: Path) -> None:
    """Four times the copies: a far larger file, about the same memory."""
    counts = (10, 10, 60)
    peak_of_writing(tmp_path / "first", 6, (3, 4, 3))  # imports and caches
    few, small = peak_of_writing(tmp_path / "few", 24, counts)
    many, large = peak_of_writing(tmp_path / "many", 96, counts)
    assert large > 3.9 * small
    assert many - few < 0.05 * (large - small)
    assert many < large / 10


def test_size_is_known_before_and_progress_adds_up(tmp_path: Path) -> None:
    expansion = plan(ring_case(tmp_path, 12))
    steps: list[int] = []
    seen: list[list[str]] = []

    def advance(done: int) -> None:
        steps.append(done)
        seen.append([p.name for p in tmp_path.glob("ring*")])

    expansion.write(advance)
    assert len(steps) > 5
    assert min(steps) > 0
    assert sum(steps) == expansion.size()
    assert (tmp_path / "ring.vtu").stat().st_size > expansion.size()
    assert all(names == [] for names in seen), "the file appears only when it is whole"


def test_planning_writes_nothing(tmp_path: Path) -> None:
    case = ring_case(tmp_path, 12)
    before = sorted(tmp_path.iterdir())
    expansion = plan(case)
    assert expansion.size() > 0
    assert expansion.summary()["points"]["body"] > 0
    expand(case)
    assert sorted(tmp_path.iterdir()) == before


def test_a_file_from_before_is_replaced(tmp_path: Path) -> None:
    case = ring_case(tmp_path, 12)
    (tmp_path / "ring.vtu").write_bytes(b"x" * 10_000_000)
    plan(case).write()
    assert read(tmp_path / "ring.vtu").GetNumberOfCells() == 12 * 12


def test_files_have_the_usual_permissions(tmp_path: Path) -> None:
    plan(ring_case(tmp_path, 12)).write()
    (tmp_path / "usual").write_bytes(b"")
    usual = stat.S_IMODE((tmp_path / "usual").stat().st_mode)
    assert stat.S_IMODE((tmp_path / "ring.vtu").stat().st_mode) == usual


def test_nothing_appears_before_all_files_are_whole(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """The second of two results fails: the first does not appear either."""
    case = validate_case(two_results(tmp_path), tmp_path)
    before = sorted(tmp_path.iterdir())
    expansion = plan(case)
    real, count = expander.expansion.arrays_of, [0]

    def second_fails(*arguments: Any) -> Any:
        count[0] += 1
        if count[0] == 2:
            raise RuntimeError("stop")
        return real(*arguments)

    monkeypatch.setattr(expander.expansion, "arrays_of", second_fails)
    with pytest.raises(RuntimeError, match="stop"):
        expansion.write()
    assert count[0] == 2
    assert sorted(tmp_path.iterdir()) == before
