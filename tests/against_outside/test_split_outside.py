"""Whole bodies under a load of no symmetry, solved directly, against the cases of a split.

Source: the finite element method on scikit-fem's reference shapes (`demo_cases.solver`). The whole
body is solved without any symmetry. The sector is solved once for each table of loads that
`seamfold split` writes, and the results are added by its split.toml. Complex waves are solved here
with the condition u(next face) = exp(i h alpha) Q u(first face) (D. L. Thomas, International
Journal for Numerical Methods in Engineering 14, 1979).

Tolerance: 1e-9 of the largest displacement; two direct solutions of the same equations differ by
round-off times the condition of the stiffness matrix (1e3 to 1e5 here).
"""

from __future__ import annotations

import csv
import tomllib
from pathlib import Path

import numpy as np
import pytest
from scipy.sparse import csc_matrix, eye_array
from scipy.sparse.linalg import splu

from demo_cases.solver import (
    CutPlane,
    Cyclic,
    Fixed,
    Material,
    Mesh,
    block,
    cyclic_pairs,
    merge_copies,
    placements,
    solve,
    stiffness,
    surface_load,
    write_vtu,
)
from expander import expand
from expander.casefile import read_case
from expander.splitting import split_loads
from expander.waves.splitfiles import write
from tests.against_outside.elastic import Body, rows

CLOSE = 1e-9
X, Y, Z = np.eye(3)


def written_loads(path: Path, count: int) -> np.ndarray:
    """(n, 3) nodal forces of one table, complex where it is."""
    with path.open(newline="") as file:
        head, *lines = list(csv.reader(file))
    data = dict(zip(head, np.array(lines, dtype=float).T, strict=True))
    complex_ = "fx_real" in data
    load = np.zeros((count, 3), dtype=complex if complex_ else float)
    for c, name in enumerate(("fx", "fy", "fz")):
        f = data[f"{name}_real"] + 1j * data[f"{name}_imag"] if complex_ else data[name]
        load[data["node"].astype(int), c] = f
    return load


def some_load(mesh: Mesh, seed: int = 4) -> np.ndarray:
    """Forces of no symmetry on a whole body: everywhere, seams too, and a few large ones."""
    random = np.random.default_rng(seed)
    load = random.normal(size=mesh.points.shape)
    load[random.integers(0, len(load), 3)] *= 50.0
    return load


def split_files(folder: Path, case: Path, whole: Mesh, load: np.ndarray) -> dict:
    """Write the load on the whole body, split it, and read split.toml."""
    np.savez(folder / "wind.npz", points=whole.points, force=load)
    read = read_case(case)
    write(read, split_loads(read, folder / "wind.npz"), folder)
    return tomllib.loads((folder / "split.toml").read_text())


def brick() -> Mesh:
    """Unequal brick in the corner of the planes x = 0 and z = 0, which stay plane."""
    return block(3, 3, 2).mapped(
        lambda u, v, w: (1.3 * u * (1 + 0.2 * v), v * (1 - 0.2 * u * w), 0.8 * w * (1 + 0.1 * u))
    )


@pytest.mark.parametrize("normals", [[X], [X, Z]], ids=["half", "quarter"])
def test_even_and_odd_make_the_whole_body(normals, tmp_path):
    """The parts' results, expanded and added by split.toml, are those of the whole body."""
    mesh = brick()
    body = Body(mesh, np.flatnonzero(mesh.points[:, 1] == 0.0), [CutPlane(n) for n in normals])
    merged = body.whole()
    load = some_load(merged.mesh)
    oracle = body.solve_whole(merged, load)
    write_vtu(tmp_path / "brick.vtu", mesh, {}, {}, bits=None)
    planes = "".join(f'[[mirror]]\nname = "p{i}"\nnormal = {n.tolist()}\n'
                     for i, n in enumerate(normals))  # fmt: skip
    case = tmp_path / "case.toml"
    case.write_text('[model]\nfile = "brick.vtu"\n' + planes)
    raw = split_files(tmp_path, case, merged.mesh, load)
    assert len(raw["case"]) == 2 ** len(normals)
    for entry in raw["case"]:
        parities = [1 if entry["load"][f"p{i}"] == "symmetric" else -1 for i in range(len(normals))]
        part = body.with_parities(*parities).solve(
            written_loads(tmp_path / f"{entry['name']}.csv", len(mesh.points))
        )
        write_vtu(tmp_path / entry["file"], mesh, {"displacement": part.displacement}, {}, None)
    case.write_text(case.read_text() + (tmp_path / "split.toml").read_text())
    grid = expand(read_case(case), raw["sum"][0]["name"])
    node, _ = rows(grid, merged)
    off = np.abs(grid["displacement"] - oracle.displacement[node]).max()
    assert off < CLOSE * np.abs(oracle.displacement).max()


def wedge(sectors: int) -> Mesh:
    """One sector of a ring between curved seams."""
    alpha = 2 * np.pi / sectors

    def place(u, v, w):
        r, t = 1.0 + u, alpha * v + 0.2 * u * u + 0.1 * w
        return r * np.cos(t), r * np.sin(t), 0.6 * w

    return block(3, 3, 2).mapped(place)


def solve_wave(mesh: Mesh, material: Material, axis: Cyclic, h: int, load, held) -> np.ndarray:
    """(n, 3) complex displacement of the sector whose next one takes exp(i h alpha) Q."""
    count = len(mesh.points)
    first, second = cyclic_pairs(mesh, axis)
    chi = np.exp(2j * np.pi * h / axis.sectors)
    T = eye_array(3 * count, dtype=complex, format="lil")
    for a, b in zip(first, second, strict=True):
        T[3 * b : 3 * b + 3, 3 * b : 3 * b + 3] = 0.0
        T[3 * b : 3 * b + 3, 3 * a : 3 * a + 3] = chi * axis.placement[0]
    gone = np.zeros(count, dtype=bool)
    gone[second] = gone[held] = True
    T = csc_matrix(T)[:, np.repeat(~gone, 3)]
    K = csc_matrix(T.conj().T @ stiffness(mesh, material) @ T)
    return (T @ splu(K).solve(T.conj().T @ load.ravel().astype(complex))).reshape(-1, 3)


@pytest.mark.parametrize("sectors", [5, 6])
@pytest.mark.parametrize("kind", ["everywhere", "off centre"])
def test_waves_make_the_whole_ring(sectors, kind, tmp_path):
    """Any static load on a ring from its cases of h = 0 .. N/2: twice the real part for
    0 < h < N/2."""
    mesh, axis = wedge(sectors), Cyclic(sectors)
    material = Material(young=200e3 * (1 + 0.4 * np.sin(7.0 * np.arange(len(mesh.cells)))))
    held = np.flatnonzero(np.hypot(*mesh.points.T[:2]) < 1.0 + 1e-9)
    copies = placements((), axis)
    merged = merge_copies(mesh.points, mesh.cells, copies, mesh.part)
    load = some_load(merged.mesh)
    if kind == "off centre":  # pressure on the rim of one sector only
        rim = np.hypot(*mesh.points.T[:2]) > 2.0 - 1e-9
        load = np.zeros_like(merged.mesh.points)
        load[merged.node[2]] = surface_load(mesh, rim, lambda x, n: -n) @ copies[2][0].T
    everywhere = Material(young=np.tile(material.young, sectors))
    oracle = solve(merged.mesh, everywhere, load, fixed=[Fixed(np.unique(merged.node[:, held]))])
    write_vtu(tmp_path / "ring.vtu", mesh, {}, {}, bits=None)
    case = tmp_path / "case.toml"
    case.write_text(f'[model]\nfile = "ring.vtu"\n[cyclic]\nsectors = {sectors}\n')
    raw = split_files(tmp_path, case, merged.mesh, load)
    terms = raw["sum"][0]["terms"]
    total = np.zeros((sectors, len(mesh.points), 3))
    for entry in raw["case"]:
        h = entry["nodal_diameters"]
        part = written_loads(tmp_path / f"{entry['name']}.csv", len(mesh.points))
        u = solve_wave(mesh, material, axis, h, part, held)
        for k, (Q, _, _) in enumerate(copies):
            wave = np.exp(2j * np.pi * h * k / sectors) * u
            total[k] += terms[entry["name"]] * wave.real @ Q.T
    assert len(raw["case"]) == sectors // 2 + 1
    off = np.abs(total - oracle.displacement[merged.node]).max()
    assert off < CLOSE * np.abs(oracle.displacement).max()
