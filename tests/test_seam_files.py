"""Tables, meshes and plots of the seams: read back, in order, and honest about jumps."""

from __future__ import annotations

import csv
import io
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from hypothesis import given
from hypothesis import strategies as st
from meshes import QUAD, Sector, box, case_of, quadratic, ring
from PIL import Image
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

from expander.checking.along import along, comparable, field_jump, places
from expander.checking.continuity import CaseContinuity, Continuity, continuity
from expander.checking.seamlist import seams_of
from expander.errors import InputError
from expander.sector import read_sector
from expander.writers.newfiles import NewFiles
from expander.writers.seam_mesh import write_seam_mesh
from expander.writers.seam_plot import plot
from expander.writers.seam_tables import write_csv

FOOT = {"name": "foot", "normal": "y"}


def checked(
    folder: Path, sector: Sector, tables: Mapping[str, Any], **point_data: np.ndarray
) -> Continuity:
    """The seams of a case on this sector."""
    case = case_of(folder, sector, {"model": {"linear": True}, **tables}, point_data)
    return continuity(read_sector(case))


def plate(nx: int = 10, ny: int = 4, hole: tuple[int, ...] = (), bend: float = 0.0) -> Sector:
    """Quadrilaterals on 0..2 x 0..1, without the cells `hole` of the lowest row; nodes shuffled."""
    number = np.arange((nx + 1) * (ny + 1)).reshape(nx + 1, ny + 1)
    x, y = np.meshgrid(np.linspace(0, 2, nx + 1), np.linspace(0, 1, ny + 1), indexing="ij")
    points = np.stack([x.ravel(), y.ravel(), bend * x.ravel() ** 2], axis=1)
    cells = [
        [number[i, j], number[i + 1, j], number[i + 1, j + 1], number[i, j + 1]]
        for i in range(nx)
        for j in range(ny)
        if j or i not in hole
    ]
    used, nodes = np.unique(cells, return_inverse=True)
    place = np.random.default_rng(3).permutation(len(used))
    moved = np.empty((len(used), 3))
    moved[place] = points[used]
    return Sector(moved, [(QUAD, row) for row in place[nodes.reshape(-1, 4)].tolist()])


def vector(points: np.ndarray) -> np.ndarray:
    """A displacement whose normal part vanishes on y = 0."""
    x, y, z = points.T
    return np.stack([np.sin(3 * x) + z, y * np.cos(x), x * z + 0.3], axis=1)


def wave(h: int, sectors: int = 9) -> tuple[Sector, np.ndarray]:
    """A ring's sector and a complex displacement that closes with h nodal diameters."""
    sector = ring(sectors, (3, 2, 2))
    x, y, z = sector.points.T
    r, t = np.hypot(x, y), np.arctan2(y, x)
    out, around = (np.stack([c, s, 0 * t], axis=1) for c, s in
                   ((np.cos(t), np.sin(t)), (-np.sin(t), np.cos(t))))  # fmt: skip
    shape = out * (r**2)[:, None] + 1j * around * (r + z)[:, None]
    return sector, shape * np.exp(1j * h * t)[:, None]


def ring_case(folder: Path, h: int = 2) -> Continuity:
    sector, shape = wave(h)
    tables = {
        "cyclic": {"sectors": 9, "nodal_diameters": h},
        "fields": {"shape": {"kind": "polar vector", "real": "re", "imaginary": "im"}},
    }
    return checked(folder, sector, tables, re=shape.real.copy(), im=shape.imag.copy())


def corner_case(folder: Path, name: str = "displacement") -> Continuity:
    """An eighth of a block: three planes and the lines where they meet; the seam y is open."""
    sector = box((3, 2, 2))
    u = sector.points * [1.0, 2.0, 3.0]
    u[:, 1] += 0.01 * (sector.points[:, 1] == 0.0) * sector.points[:, 0]
    tables = {
        "mirror": [{"normal": n} for n in "xyz"],
        "fields": {name: {"kind": "polar vector", "unit": "mm"}},
        "seam": {"open": "keep apart"},
    }
    return checked(folder, sector, tables, **{name: u})


def rows_of(path: Path) -> tuple[list[str], np.ndarray]:
    with path.open(encoding="utf-8", newline="") as file:
        head, *body = list(csv.reader(file))
    return head, np.array(body, dtype=float)


def pixels(png: bytes) -> np.ndarray:
    return np.asarray(Image.open(io.BytesIO(png)).convert("RGB")).astype(int)


# Order


@pytest.mark.parametrize("hole", [(), (3, 4), (0,), (2, 5, 6)])
def test_a_curve_is_told_by_its_arc_length(tmp_path: Path, hole: tuple[int, ...]) -> None:
    sector = plate(hole=hole)
    made = checked(tmp_path, sector, {"mirror": [FOOT]}, displacement=vector(sector.points))
    line = along(made.seams[0], made.sector.mesh, made.sector.group)
    on = line.rows >= 0
    assert line.connected
    assert sorted(line.rows[on]) == list(range(len(made.seams[0].nodes)))
    # On a straight seam, gaps and all, the arc length is the coordinate.
    x = sector.points[made.seams[0].nodes[line.rows[on]], 0]
    np.testing.assert_allclose(line.position[on], x - x[0], atol=1e-12)
    holes = np.diff(sorted(hole)).tolist()
    inner = len(hole) - holes.count(1) - (0 in hole)
    assert int((~on).sum()) == inner
    assert np.isnan(line.position[~on]).all()
    assert line.piece.max() == inner


def test_arc_length_of_a_curved_shell(tmp_path: Path) -> None:
    sector = plate(nx=200, bend=0.4)
    made = checked(tmp_path, sector, {"mirror": [FOOT]}, displacement=vector(sector.points))
    line = along(made.seams[0], made.sector.mesh, made.sector.group)
    # Length of z = a x^2 from 0 to b (handbook formula of the parabola's arc), with k = 2 a b.
    a, b = 0.4, 2.0
    k = 2 * a * b
    exact = (k * np.sqrt(1 + k * k) + np.arcsinh(k)) / (4 * a)
    assert (np.diff(line.position) > 0).all()
    assert line.position[-1] == pytest.approx(exact, rel=1e-5)


@pytest.mark.parametrize("finer", [lambda s: s, quadratic])
def test_outline_of_a_surface(tmp_path: Path, finer: Any) -> None:
    sector = finer(box((4, 3, 2), size=(3.0, 1.0, 2.0)))
    made = checked(tmp_path, sector, {"mirror": [FOOT]}, displacement=vector(sector.points))
    seam, mesh, group = made.seams[0], made.sector.mesh, made.sector.group
    line = along(seam, mesh, group, "arc")
    assert line.connected
    assert "outline" in line.label
    assert line.rows[0] == line.rows[-1]
    assert line.position[-1] == pytest.approx(2 * (3.0 + 2.0))
    where = sector.points[seam.nodes]
    edge = np.isin(where[:, 0], [0.0, 3.0]) | np.isin(where[:, 2], [0.0, 2.0])
    assert sorted(set(line.rows.tolist())) == np.flatnonzero(edge).tolist()


@given(by=st.sampled_from(["auto", "x", "y", "z", "radius"]))
def test_a_surface_keeps_all_its_nodes(tmp_path_factory: pytest.TempPathFactory, by: str) -> None:
    made = ring_case(tmp_path_factory.mktemp("ring"))
    seam = made.seams[0]
    line = along(seam, made.sector.mesh, made.sector.group, by)
    assert sorted(line.rows) == list(range(len(seam.nodes)))
    assert (np.diff(line.position) >= 0.0).all()
    assert not line.connected
    where = places(seam, made.sector.mesh, made.sector.group)[line.rows]
    expected = where[:, "xyz".index(by)] if by in "xyz" else np.hypot(where[:, 0], where[:, 1])
    np.testing.assert_allclose(line.position, expected, atol=1e-12)


def test_lines_and_points_go_by_the_largest_extent(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    seam = made.seams[-1]
    assert seam.kind == "lines and points"
    line = along(seam, made.sector.mesh, made.sector.group)
    assert not line.connected
    assert len(line.rows) == len(seam.nodes)
    with pytest.raises(InputError, match="no edges to go along"):
        along(seam, made.sector.mesh, made.sector.group, "arc")


def test_orders_that_do_not_exist(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    mesh, group = made.sector.mesh, made.sector.group
    with pytest.raises(InputError, match="no cyclic axis"):
        along(made.seams[0], mesh, group, "radius")
    with pytest.raises(InputError, match="'angle' along a seam is unknown"):
        along(made.seams[0], mesh, group, "angle")


def test_other_meshes_stand_on_one_face(tmp_path: Path) -> None:
    made = other_mesh(tmp_path)
    seam = made.seams[0]
    assert seam.pairing != "node to node"
    where = places(seam, made.sector.mesh, made.sector.group)
    # All rows on the half-plane of the face at 30 degrees or at 0, one of them only.
    angle = np.rad2deg(np.arctan2(where[:, 1], where[:, 0]))
    assert np.ptp(angle) < 1e-9


def other_mesh(folder: Path) -> Continuity:
    """A sector of 30 degrees whose two faces have different meshes."""
    N = 12
    halves = []
    for counts, first in (((6, 2, 3), 0.0), ((9, 2, 4), np.pi / N)):
        part = ring(N, counts, part=0.5)
        c, s = np.cos(first), np.sin(first)
        halves.append(part.moved(np.array([[c, -s, 0], [s, c, 0], [0, 0, 1.0]])))
    sector = halves[0].beside(halves[1])
    x, y, z = sector.points.T
    r = np.hypot(x, y)
    u = np.stack([x / r, y / r, 0 * r], axis=1) * (np.sin(3 * r) + z)[:, None]
    tables = {"cyclic": {"sectors": N}, "seam": {"open": "keep apart"}}
    return checked(folder, sector, tables, displacement=u)


# Tables


def test_table_holds_both_sides_to_the_last_digit(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    for seam in made.seams:
        with NewFiles() as files:
            write_csv(files, tmp_path / "seam.csv", made, seam)
        head, table = rows_of(tmp_path / "seam.csv")
        assert head[:8] == ["row", "position", "piece", "node", "x", "y", "z", "copy"]
        line = along(seam, made.sector.mesh, made.sector.group)
        jump = field_jump(made, seam, "displacement", "result")
        at = {h: table[:, k] for k, h in enumerate(head)}
        np.testing.assert_array_equal(at["row"], np.arange(len(table)))
        np.testing.assert_array_equal(at["position"], line.position)
        np.testing.assert_array_equal(at["node"], seam.nodes[line.rows])
        np.testing.assert_array_equal(at["copy"], seam.via[line.rows])
        np.testing.assert_array_equal(
            np.stack([at[c] for c in "xyz"], axis=1),
            made.sector.mesh.points[seam.nodes[line.rows]],
        )
        for word, values in (("own", jump.own), ("copy", jump.other), ("jump", jump.difference)):
            for k, c in enumerate("xyz"):
                column = at[f"result: displacement: {word}_{c}"]
                np.testing.assert_array_equal(column, values[line.rows, k])


def test_table_of_a_wave_has_two_parts(tmp_path: Path) -> None:
    made = ring_case(tmp_path)
    with NewFiles() as files:
        write_csv(files, tmp_path / "seam.csv", made, made.seams[0], "shape", "radius")
    head, table = rows_of(tmp_path / "seam.csv")
    line = along(made.seams[0], made.sector.mesh, made.sector.group, "radius")
    jump = field_jump(made, made.seams[0], "shape", "result")
    assert np.abs(jump.difference).max() < 1e-12  # the wave closes: the factor was taken
    real, imag = (table[:, head.index(f"result: shape: copy_y_{p}")] for p in ("real", "imag"))
    np.testing.assert_array_equal(real + 1j * imag, jump.other[line.rows, 1])
    assert "result: shape: copy_y" not in head


def test_table_goes_piece_by_piece(tmp_path: Path) -> None:
    sector = plate(hole=(3,))
    made = checked(tmp_path, sector, {"mirror": [FOOT]}, displacement=vector(sector.points))
    with NewFiles() as files:
        write_csv(files, tmp_path / "seam.csv", made, made.seams[0])
    head, table = rows_of(tmp_path / "seam.csv")
    assert len(table) == len(made.seams[0].nodes)
    piece = table[:, head.index("piece")]
    assert piece.tolist() == [0] * 4 + [1] * 7


def test_values_that_are_not_numbers_have_no_jump(tmp_path: Path) -> None:
    sector = box((2, 2, 2))
    u = vector(sector.points)
    bad = int(np.flatnonzero(sector.points[:, 1] == 0.0)[2])
    u[bad, 0] = np.nan
    case = case_of(tmp_path, sector, {"model": {"linear": True}, "mirror": [FOOT]},
                   {"displacement": u})  # fmt: skip
    read = read_sector(case, allow_nan=True)
    only = CaseContinuity(read.cases[0], read.cases[0].chi, "", (), ())
    made = Continuity(read, tuple(seams_of(read)), (only,))
    with NewFiles() as files:
        write_csv(files, tmp_path / "seam.csv", made, made.seams[0])
        write_seam_mesh(files, tmp_path / "seam.vtu", made)
    head, table = rows_of(tmp_path / "seam.csv")
    missing = np.isnan(table[:, head.index("result: displacement: jump_x")])
    assert table[missing, head.index("node")].tolist() == [bad]
    grid = pyvista.read(tmp_path / "seam.vtu")
    length = np.asarray(grid.point_data["jump_displacement_length"])
    assert np.asarray(grid.point_data["sector_point"])[np.isnan(length)].tolist() == [bad]
    png = plot(made, made.seams[0], "displacement", "result")
    assert pixels(png).shape == (900, 1600, 3)


# Meshes


def test_mesh_read_back(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    with NewFiles() as files:
        write_seam_mesh(files, tmp_path / "seams.vtu", made, program="seamfold 0")
    reader = vtkXMLUnstructuredGridReader()
    reader.SetFileName(str(tmp_path / "seams.vtu"))
    reader.Update()
    grid = pyvista.wrap(reader.GetOutput())
    nodes = np.concatenate([s.nodes for s in made.seams])
    np.testing.assert_array_equal(grid.point_data["sector_point"], nodes)
    np.testing.assert_array_equal(grid.points, made.sector.mesh.points[nodes])
    jumps = [field_jump(made, s, "displacement", "result") for s in made.seams]
    difference = np.concatenate([j.difference for j in jumps])
    np.testing.assert_array_equal(grid.point_data["jump_displacement"], difference)
    length = np.linalg.norm(difference, axis=1)
    np.testing.assert_array_equal(grid.point_data["jump_displacement_length"], length)
    largest = np.linalg.norm(made.sector.model.point_data["displacement"], axis=1).max()
    np.testing.assert_allclose(
        grid.point_data["jump_displacement_relative"], length / largest, rtol=1e-14
    )
    # Twice 0.01 x at the node farthest out: the seam was opened by that.
    assert length.max() == pytest.approx(0.02)
    assert grid.field_data["seams"].tolist() == [s.name for s in made.seams]
    assert grid.field_data["program"].tolist() == ["seamfold 0"]
    flat = grid.compute_cell_sizes()
    for number, seam in enumerate(made.seams):
        own = np.asarray(grid.cell_data["seam"]) == number
        assert flat.cell_data["Area"][own].sum() == pytest.approx(seam.measure)
        if seam.kind == "cut plane":
            axis = "xyz".index(made.sector.case.mirror[number].normal)
            points = np.unique(np.concatenate([grid.get_cell(int(c)).point_ids
                                               for c in np.flatnonzero(own)]))  # fmt: skip
            assert (grid.points[points, axis] == 0.0).all()
            np.testing.assert_array_equal(grid.point_data["normal"][points], -np.eye(3)[[axis]]
                                          .repeat(len(points), axis=0))  # fmt: skip
        else:
            assert (grid.celltypes[own] == 1).all()
            assert own.sum() == len(seam.nodes)


def test_mesh_of_a_wave_and_of_several_cases(tmp_path: Path) -> None:
    made = ring_case(tmp_path)
    with NewFiles() as files:
        write_seam_mesh(files, tmp_path / "wave.vtu", made)
    grid = pyvista.read(tmp_path / "wave.vtu")
    jump = field_jump(made, made.seams[0], "shape", "result")
    parts = [np.asarray(grid.point_data[f"jump_shape_{p}"]) for p in ("real", "imag")]
    np.testing.assert_array_equal(parts[0] + 1j * parts[1], jump.difference)

    sector = box((2, 2, 2))
    even, odd = vector(sector.points), np.roll(vector(sector.points), 1, axis=1)
    for name, u in (("even", even), ("odd", odd)):
        grid = sector.grid()
        grid.point_data["displacement"] = u
        grid.save(tmp_path / f"{name}.vtu")
    cases = [{"name": n, "file": f"{n}.vtu"} for n in ("even", "odd")]
    made = checked(tmp_path, sector, {"mirror": [FOOT], "case": cases}, displacement=even)
    with NewFiles() as files:
        write_seam_mesh(files, tmp_path / "cases.vtu", made)
    grid = pyvista.read(tmp_path / "cases.vtu")
    for name in ("even", "odd"):
        jump = field_jump(made, made.seams[0], "displacement", name)
        np.testing.assert_array_equal(grid.point_data[f"jump_displacement [{name}]"],
                                      jump.difference)  # fmt: skip


def test_mesh_where_faces_do_not_pair(tmp_path: Path) -> None:
    made = other_mesh(tmp_path)
    with NewFiles() as files:
        write_seam_mesh(files, tmp_path / "seams.vtu", made)
    grid = pyvista.read(tmp_path / "seams.vtu")
    assert grid.n_points == len(made.seams[0].nodes)
    # Every row is a corner of some cell, be it a face or a vertex.
    assert sorted(set(grid.cell_connectivity.tolist())) == list(range(grid.n_points))
    both = made.seams[0].against
    assert both is not None
    faces = sum(map(len, both.facets_here)) + sum(map(len, both.facets_there))
    assert 0 < (grid.celltypes == QUAD).sum() <= faces


def test_the_same_case_gives_the_same_bytes(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    for k in (1, 2):
        with NewFiles() as files:
            write_seam_mesh(files, tmp_path / f"{k}.vtu", made)
            write_csv(files, tmp_path / f"{k}.csv", made, made.seams[0])
    for kind in ("vtu", "csv"):
        first, second = ((tmp_path / f"{k}.{kind}").read_bytes() for k in (1, 2))
        assert first == second
    once, again = (plot(made, made.seams[1], "displacement", "result", "y") for _ in range(2))
    assert once == again


# Plots


def test_plot_shows_a_jump(tmp_path: Path) -> None:
    sector = plate()
    u = vector(sector.points)
    node = int(np.flatnonzero((sector.points[:, 1] == 0.0) & (sector.points[:, 0] == 1.0))[0])
    shown = []
    for jump in (0.0, 0.05):
        u[node, 1] = jump
        tables = {"mirror": [FOOT], "fields": {"displacement": {"kind": "polar vector"}}}
        made = checked(tmp_path, sector, tables, displacement=u)
        shown.append(pixels(plot(made, made.seams[0], "displacement", "result", "y")))
    assert shown[0].shape == shown[1].shape == (900, 1600, 3)
    upper, lower = slice(150, 500), slice(560, 810)
    for panel in (upper, lower):
        assert (shown[0][panel] != shown[1][panel]).any(axis=2).sum() > 500
    # Within the limit the allowed band fills the lower panel; beyond it hardly shows.
    green = [_coloured(p[lower], (0, 158, 115), 0.16).mean() for p in shown]
    assert green[0] > 0.5
    assert green[1] < 0.02


def _coloured(part: np.ndarray, colour: tuple[int, int, int], alpha: float) -> np.ndarray:
    wanted = 255.0 + alpha * (np.array(colour) - 255.0)
    return np.abs(part - wanted).max(axis=2) < 3


def test_the_worst_node_is_marked_where_it_is(tmp_path: Path) -> None:
    sector = plate(nx=8)
    rings = []
    for where in (0.5, 1.5):
        u = vector(sector.points)
        u[(sector.points[:, 1] == 0.0) & (sector.points[:, 0] == where), 1] = 0.05
        made = checked(tmp_path, sector, {"mirror": [FOOT]}, displacement=u)
        dark = pixels(plot(made, made.seams[0], "displacement", "result", "y")).max(axis=2) < 90
        lower = dark[575:800, 150:1550]
        rings.append(float(np.flatnonzero(lower[:100].any(axis=0)).mean()) / 1400)
    assert rings[0] < 0.45 < 0.55 < rings[1]


def test_sides_differ_without_colour(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    seam = made.seams[1]
    image = pixels(plot(made, seam, "displacement", "result", "y", by="arc"))
    upper = image[150:500, 150:1550]
    blue, orange = (np.abs(upper - np.array(c)).max(axis=2) < 12
                    for c in ((0, 114, 178), (213, 94, 0)))  # fmt: skip
    # Filled discs against hollow squares: the discs have pixels all around them of their colour.
    assert _inside(blue) > 20 * max(_inside(orange), 1)
    assert orange.sum() > 300


def _inside(mask: np.ndarray) -> int:
    """Pixels all of whose neighbours within two pixels are of the colour."""
    full = mask
    for axis in (0, 1):
        full = np.all([np.roll(full, k, axis=axis) for k in range(-2, 3)], axis=0)
    return int(full.sum())


def test_recovered_values_have_no_band(tmp_path: Path) -> None:
    sector = box((2, 2, 2))
    stress = np.tile([1.0, 2, 3, 0.5, 0.4, 0.3], (len(sector.points), 1))
    bands = []
    for rule in ("agree", "recovered"):
        tables = {
            "mirror": [FOOT],
            "fields": {"stress": {"kind": "symmetric tensor", "seam": rule,
                                  "components": "xx yy zz xy yz zx"}},
        }  # fmt: skip
        made = checked(tmp_path, sector, tables, stress=stress)
        lower = pixels(plot(made, made.seams[0], "stress", "result", "xx"))[560:810]
        bands.append(_coloured(lower, (0, 158, 115), 0.16).mean())
    assert bands[0] > 0.5
    assert bands[1] == 0.0


def test_real_and_imaginary_part_have_panels(tmp_path: Path) -> None:
    made = ring_case(tmp_path)
    seam = made.seams[0]
    parts = pixels(plot(made, seam, "shape", "result", "x"))
    length = pixels(plot(made, seam, "shape", "result"))
    blue = [(np.abs(p - np.array([0, 114, 178])).max(axis=2) < 12)[130:] for p in (parts, length)]
    rows = [np.flatnonzero(b.any(axis=1)) + 130 for b in blue]
    assert rows[0].max() > 400  # a second panel where the length has its jumps
    assert rows[1].max() < 520


@pytest.mark.parametrize("size", [(1600, 900), (800, 600), (1001, 567)])
def test_plot_has_the_size_asked_for(tmp_path: Path, size: tuple[int, int]) -> None:
    made = corner_case(tmp_path)
    png = plot(made, made.seams[0], "displacement", "result", size=size)
    assert Image.open(io.BytesIO(png)).size == size


def test_plot_refuses_what_it_cannot_draw(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    seam = made.seams[0]
    with pytest.raises(InputError, match=r"(?s)no component 'w'.*x, y, z, length"):
        plot(made, seam, "displacement", "result", "w")
    with pytest.raises(InputError, match="no field 'velocity'"):
        plot(made, seam, "velocity", "result")
    with pytest.raises(InputError, match=r"(?s)no case 'wind'.*result"):
        plot(made, seam, "displacement", "wind")
    with pytest.raises(InputError, match="10 x 900 pixels"):
        plot(made, seam, "displacement", "result", size=(10, 900))


# Names and failures

HOSTILE = [
    "a/b\\c", 'say "x", y', "Verschiebung größer", "変位", "$\\frac{1}{0}$", "$", "<u>&amp;",
    "=1+1", "u\tv\nw", "x" * 300, "_length",
]  # fmt: skip


@pytest.mark.parametrize("name", HOSTILE)
def test_names_may_be_anything(tmp_path: Path, name: str) -> None:
    sector = box((2, 1, 1))
    u = sector.points * [1.0, 2.0, 3.0]
    tables = {
        "mirror": [{"name": name, "normal": "x"}],
        "fields": {name: {"kind": "polar vector", "arrays": ["u"], "unit": name}},
    }
    made = checked(tmp_path, sector, tables, u=u)
    with NewFiles() as files:
        write_csv(files, tmp_path / "seam.csv", made, made.seams[0])
        write_seam_mesh(files, tmp_path / "seam.vtu", made)
    head, _ = rows_of(tmp_path / "seam.csv")
    assert f"result: {name}: own_x" in head
    grid = pyvista.read(tmp_path / "seam.vtu")
    assert f"jump_{name}" in grid.point_data
    assert pixels(plot(made, made.seams[0], name, "result")).shape == (900, 1600, 3)


def test_two_fields_must_not_become_one_array(tmp_path: Path) -> None:
    sector = box((2, 1, 1))
    tables = {
        "mirror": [{"normal": "x"}],
        "fields": {"u": {"kind": "polar vector"}, "u_length": {"kind": "scalar"}},
    }
    made = checked(tmp_path, sector, tables, u=sector.points * 1.0, u_length=sector.points[:, 0])
    with pytest.raises(InputError, match="'jump_u_length'"), NewFiles() as files:
        write_seam_mesh(files, tmp_path / "seam.vtu", made)
    assert not (tmp_path / "seam.vtu").exists()


def test_nothing_is_left_behind(tmp_path: Path) -> None:
    made = corner_case(tmp_path)
    before = sorted(p.name for p in tmp_path.iterdir())

    def several(last: Path, fields: list[str]) -> None:
        with NewFiles() as files:
            write_seam_mesh(files, tmp_path / "seam.vtu", made)
            write_csv(files, tmp_path / "one.csv", made, made.seams[0])
            write_csv(files, last, made, made.seams[0], fields)

    with pytest.raises(InputError, match="no field"):
        several(tmp_path / "two.csv", ["velocity"])
    assert sorted(p.name for p in tmp_path.iterdir()) == before
    with pytest.raises(InputError, match="does not exist"):
        several(tmp_path / "none" / "two.csv", ["displacement"])
    assert sorted(p.name for p in tmp_path.iterdir()) == before
    several(tmp_path / "two.csv", ["displacement"])
    assert len(list(tmp_path.iterdir())) == len(before) + 3


def test_forces_and_cell_values_are_not_compared(tmp_path: Path) -> None:
    sector = box((2, 1, 1))
    tables = {
        "mirror": [{"normal": "x"}],
        "fields": {"force": {"kind": "polar vector", "seam": "sum"}, "p": {"kind": "label"}},
    }
    part = np.ones(len(sector.points), dtype=np.int32)
    made = checked(tmp_path, sector, tables, force=sector.points * 1.0,
                   displacement=sector.points * 1.0, p=part)  # fmt: skip
    assert [f.name for f in comparable(made)] == ["displacement"]
    with pytest.raises(InputError, match="'p' has no nodal numbers"):
        field_jump(made, made.seams[0], "p", "result")
