"""Static loads of no symmetry as sums of load behaviours, against the whole body solved directly.

Source: the finite element method on scikit-fem's reference shapes. The whole body is solved under
the load as it is. The sector is solved once for each h = 0 .. N/2 (and each parity) with its part
of the load, and the expander adds: F_h = 1/N sum f_k exp(-i h k alpha) in turned components, each h
once with weights 1, 2 (0 < h < N/2), 1, the real part. Tolerance: 1e-9 of the largest value.
"""

from __future__ import annotations

import csv
import tomllib
from pathlib import Path

import numpy as np
import pytest
from scipy.sparse import csc_matrix
from scipy.sparse.linalg import splu

from demo_cases.solver import CutPlane, Fixed, Material, block, elimination, stiffness
from expander import expand
from expander.casefile import read_case
from expander.splitting import split_loads
from expander.waves.fourier import amplitudes
from expander.waves.splitfiles import write
from tests.against_outside.bodies import Floats
from tests.against_outside.elastic import Body, compare, declare, fields_of, rows, seam_nodes, word
from tests.against_outside.waves_bodies import (
    CLOSE,
    KINDS,
    Complex,
    Ring,
    amplitude,
    mass,
    off,
    stored,
    wedge,
)

FORCE = np.array([1.0, -2.0, 0.7])


def expected_of(ring: Ring, load: Floats) -> dict[str, Complex]:
    """All fields of the whole ring under a load on it."""
    x = ring.respond_whole(load.astype(complex), ring.KW)
    return ring.harmonic(0, x, load, ring.KW, whole=True)


def agrees(ring: Ring, grid, expected, suffix: str = "") -> None:
    """Every field, on and off the seams."""
    node, cell = rows(grid, ring.body)
    on_seam = np.isin(node, seam_nodes(ring.body))
    for name, values in expected.items():
        assert not np.abs(values.imag).any()
        found, known = np.asarray(grid[name + suffix]), values.real
        if len(known) == len(node):
            size = float(np.abs(known).max())
            assert off(found[on_seam], known[node][on_seam], size) < CLOSE, name
            assert off(found[~on_seam], known[node][~on_seam], size) < CLOSE, name
        else:
            assert off(found, known[cell]) < CLOSE, name


@pytest.mark.parametrize("at", ["inside", "on a seam", "everywhere"])
@pytest.mark.parametrize("N", [2, 3, 4, 5, 6, 7, 8])
def test_point_load_on_one_sector(tmp_path, N, at):
    """A force on sector 2 (or on its seam, or other forces on all) from the cases h = 0 .. N/2."""
    ring = wedge(N, (2, 4, 1) if N < 4 else (2, 3, 2))
    turned = np.zeros((N, len(ring.mesh.points), 3))  # each sector's own load, turned back
    if at == "everywhere":
        turned += np.random.default_rng(N).normal(size=turned.shape)
    else:
        pairs = np.flatnonzero(np.isin(ring.body.node[0], seam_nodes(ring.body)))
        node = ring.somewhere[0] if at == "inside" else np.setdiff1d(pairs, ring.held)[0]
        turned[2 % N, node] = FORCE
    load = np.zeros((len(ring.body.mesh.points), 3))
    for (Q, _, _), f, node in zip(ring.copies(0), turned, ring.body.node, strict=True):
        np.add.at(load, node, f @ Q.T)
    parts = amplitudes(turned)
    # Not from the code: the weights and the transform are those of the docstring above.
    alpha, k = 2 * np.pi / N, np.arange(N)
    for h, part in enumerate(parts):
        direct = np.einsum("k,knc->nc", np.exp(-1j * h * k * alpha), turned) / N
        assert off(part, direct, float(np.abs(turned).max())) < 1e-14
    model = ring.model(tmp_path, names=tuple(KINDS))
    for h, part in enumerate(parts):
        u = ring.respond(h, part, ring.K)
        points, cells = stored(ring.harmonic(h, u, part, ring.K))
        model.values(f"h{h}", points=points, cells=cells)
    weights = {f"h{h}": 1.0 if 2 * h in (0, N) else 2.0 for h in range(N // 2 + 1)}
    model.table(
        case=[
            {"name": f"h{h}", "nodal_diameters": h, **({} if 2 * h in (0, N) else {"phase": "+"})}
            for h in range(N // 2 + 1)
        ],
        sum=[
            {"name": "point load", "terms": weights, "part": "real"},
            {"name": "amplitudes", "terms": weights},
        ],
    )
    case = model.write()
    expected = expected_of(ring, load)
    grid = expand(case, "point load")
    agrees(ring, grid, expected)
    assert not any(name.endswith(("_real", "_imag")) for name in grid.point_data)
    agrees(ring, expand(case, "amplitudes"), expected, "_real")


def table_of_loads(path: Path, count: int) -> Complex:
    """(n, 3) nodal forces of one table of `seamfold split`."""
    with path.open(newline="") as file:
        lines = list(csv.DictReader(file))
    load = np.zeros((count, 3), dtype=complex)
    for line in lines:
        for c, name in enumerate(("fx", "fy", "fz")):
            part = (name, None) if name in line else (f"{name}_real", f"{name}_imag")
            load[int(line["node"]), c] = float(line[part[0]]) + 1j * float(line.get(part[1], 0))
    return load


@pytest.mark.parametrize("plane", [None, 1], ids=["no plane", "plane normal to the axis"])
@pytest.mark.parametrize("N", [5, 6])
def test_split_and_added(tmp_path, N, plane):
    """A load written for the whole ring, split into files, solved, expanded and added again by the
    tables that the split wrote, which hold every h and every parity of a plane."""
    ring = wedge(N, plane=plane)
    load = 0.1 * np.random.default_rng(N).normal(size=ring.body.mesh.points.shape)
    load[ring.body.node[1, ring.somewhere[0]]] += 20.0 * FORCE
    load[ring.body.node[0, ring.somewhere[1]]] += 10.0 * FORCE[::-1]
    np.savez(tmp_path / "load.npz", points=ring.body.mesh.points, force=load)
    model = ring.model(tmp_path, names=tuple(KINDS))
    read = read_case(model.write("ring.toml"))  # with a model file that has no results yet
    write(read, split_loads(read, tmp_path / "load.npz"), tmp_path)
    raw = tomllib.loads((tmp_path / "split.toml").read_text())
    assert len(raw["case"]) == (N // 2 + 1) * (1 if plane is None else 2)
    for entry in raw["case"]:
        h, name = entry["nodal_diameters"], entry["name"]
        part = table_of_loads(tmp_path / f"{name}.csv", len(ring.mesh.points))
        parity = 1
        if plane is not None:
            parity = 1 if entry["load"]["p0"] == "symmetric" else -1
        solved = ring.parity(parity)
        u = solved.respond(h, part, ring.K)
        points, cells = stored(solved.harmonic(h, u, part, ring.K))
        model.values(name, points=points, cells=cells)
        entry["file"] = f"{name}.vtu"
    (total,) = raw["sum"]
    model.table(case=raw["case"], sum=[{**total, "part": "real"}])
    agrees(ring, expand(model.write(), total["name"]), expected_of(ring, load))


# --- even and odd ---------------------------------------------------------------------------------


def brick(normals) -> Body:
    """Unequal brick in the corner of the planes x = 0 and z = 0, held at y = 0."""
    mesh = block(3, 3, 2).mapped(
        lambda u, v, w: (1.3 * u * (1 + 0.2 * v), v * (1 - 0.2 * u * w), 0.8 * w * (1 + 0.1 * u))
    )
    return Body(mesh, np.flatnonzero(mesh.points[:, 1] == 0.0), [CutPlane(n) for n in normals])


@pytest.mark.parametrize("normals", ["x", "xz"])
def test_even_and_odd_parts(tmp_path, normals):
    """Half and quarter: a load on the first copy alone, f/2 under both words (f/4 under four)."""
    body = brick([np.eye(3)["xyz".index(n)] for n in normals])
    merged = body.whole()
    count = 2 ** len(normals)
    force = np.zeros_like(body.mesh.points)
    inside = np.flatnonzero((body.mesh.points > 0.1).all(axis=1))
    force[inside] = np.random.default_rng(3).normal(size=(len(inside), 3))
    load = np.zeros_like(merged.mesh.points)
    load[merged.node[0]] = force
    oracle = body.solve_whole(merged, load)
    model = declare(body.model(tmp_path))
    names = [n for n in model.fields if n not in ("von_mises", "energy_density")]
    model.fields = {n: model.fields[n] for n in names}
    cases, terms = [], {}
    for parities in np.ndindex(*[2] * len(normals)):
        signs = [1 - 2 * p for p in parities]
        part = body.with_parities(*signs)
        points, cells = fields_of(part.solve(force / count), np.zeros(3))
        name = "_".join(word(s) for s in signs)
        model.values(
            name,
            points={n: a for n, a in points.items() if n in names},
            cells={n: a for n, a in cells.items() if n in names},
        )
        cases.append({"name": name, "load": {f"p{i}": word(s) for i, s in enumerate(signs)}})
        terms[name] = 1.0
    model.table(case=cases, sum=[{"name": "all", "terms": terms}])
    compare(model.expand("all"), merged, oracle, np.zeros(3), names=names)


def test_complex_even_and_odd_parts(tmp_path):
    """A damped half model: the even and the odd part are complex on the cut plane too, and their
    sum is the whole body's, solved directly."""
    body = brick([np.eye(3)[0]])
    merged = body.whole()
    young = body.material.young
    eta = 0.05 + 0.1 * np.linspace(0, 1, len(young))  # uneven damping: no real modes

    def dynamic(mesh, copies):
        lossy = stiffness(mesh, Material(young=np.tile(young * eta, copies)))
        stiff = stiffness(mesh, Material(young=np.tile(young, copies)))
        return csc_matrix(stiff + 1j * lossy - 3e13 * mass(mesh, 7.8e-9))

    def solved(D, T, f):
        T = csc_matrix(T)
        return (T @ splu(csc_matrix(T.T @ D @ T)).solve(T.T @ f.ravel())).reshape(-1, 3)

    force = np.zeros(body.mesh.points.shape, dtype=complex)
    inside = np.flatnonzero((body.mesh.points > 0.1).all(axis=1))
    random = np.random.default_rng(8)
    force[inside] = random.normal(size=(len(inside), 3)) + 1j * random.normal(size=(1, 3))
    load = np.zeros(merged.mesh.points.shape, dtype=complex)
    load[merged.node[0]] = force
    held = np.unique(merged.node[:, body.fixed])
    x = solved(dynamic(merged.mesh, 2), elimination(merged.mesh, [Fixed(held)])[0], load)
    model = body.model(tmp_path)
    model.field("displacement", "polar vector", real="displacement_re", imaginary="displacement_im")
    for parity in (1, -1):
        T, _ = elimination(body.mesh, [Fixed(body.fixed)], body.with_parities(parity).planes)
        u = solved(dynamic(body.mesh, 1), T, force / 2)
        cut = body.mesh.points[:, 0] == 0.0
        assert np.abs(u[cut].imag).max() > 0.01 * np.abs(u[cut].real).max()
        points, cells = stored({"displacement": u})
        model.values(word(parity), points=points, cells=cells)
    model.table(
        case=[{"name": w, "load": {"p0": w}} for w in ("symmetric", "antisymmetric")],
        sum=[{"name": "all", "terms": {"symmetric": 1.0, "antisymmetric": 1.0}}],
    )
    case = model.write()
    grid = expand(case, "all")
    node, _ = rows(grid, merged)
    assert off(amplitude(grid), x[node]) < CLOSE
    for at in (45.0, 170.0):
        found = np.asarray(expand(case, "all", moment=at)["displacement"])
        now = (x[node] * np.exp(1j * np.radians(at))).real
        assert off(found, now, float(np.abs(x).max())) < CLOSE
