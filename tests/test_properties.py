"""Properties of the expansion that need no reference program: what calculus and groups demand.

Random polynomials are averaged over the group, so that they satisfy the seam conditions::

    f(x) = 1/|G| * sum over g of  chi(g) * rho(Q) * p(g^-1 x)

Their derivatives follow by the chain rule. A sector that carries such values must expand to the
same polynomials over the whole body, whatever is asked: curl, divergence, gradient, principal
values. Everything on the right-hand sides is written here with numpy's einsum.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from itertools import product
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import pyvista
from hypothesis import given, settings
from hypothesis import strategies as st
from meshes import Sector, box, case_of, cell_nodes, centres, copies_of, placed, ring, somewhere
from scipy.spatial import cKDTree

from expander import expand

Tables = Mapping[str, Any]
LEVI_CIVITA = np.zeros((3, 3, 3))
LEVI_CIVITA[[0, 1, 2], [1, 2, 0], [2, 0, 1]] = 1.0
LEVI_CIVITA[[0, 2, 1], [2, 1, 0], [1, 0, 2]] = -1.0
SIX = ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0))
# Degree 5, so that no field of a case below is zero everywhere by its symmetry.
POWERS = np.array([p for p in product(range(6), repeat=3) if sum(p) <= 5])


def mirror(normal, load: str = "symmetric") -> dict[str, Any]:
    return {"normal": normal, "load": load}


def plane_at(degrees: float, load: str) -> dict[str, Any]:
    a = np.deg2rad(degrees)
    return mirror([-np.sin(a), np.cos(a), 0.0], load)


S, A = "symmetric", "antisymmetric"
BODIES: dict[str, tuple[Sector, Tables]] = {
    "half, S": (box((2, 2, 2)), {"mirror": [mirror("x", S)]}),
    "half, A": (box((2, 2, 2)), {"mirror": [mirror("z", A)]}),
    "quarter, S A": (box((2, 1, 2)), {"mirror": [mirror("x", S), mirror("y", A)]}),
    "eighth, A S A": (
        box((2, 1, 1)), {"mirror": [mirror("x", A), mirror("y", S), mirror("z", A)]}),
    "planes at 60 degrees, A A": (ring(6), {"mirror": [mirror("y", A), plane_at(60, A)]}),
    "planes at 45 degrees, A S": (ring(8), {"mirror": [mirror("y", A), plane_at(45, S)]}),
    "5 sectors": (ring(5, lean=0.4), {"cyclic": {"sectors": 5}}),
    "6 sectors to the axis, h = 3": (
        ring(6, inner=0.0, part=1.0), {"cyclic": {"sectors": 6, "nodal_diameters": 3}}),
    "2 sectors, h = 1": (
        ring(2, (2, 4, 1)), {"cyclic": {"sectors": 2, "nodal_diameters": 1}}),
    "4 sectors of half height, h = 2, A": (
        ring(4, inner=0.0, lean=0.0),
        {"mirror": [mirror("z", A)], "cyclic": {"sectors": 4, "nodal_diameters": 2}}),
    "3 half sectors, A": (
        ring(3, part=0.5), {"mirror": [mirror("y", A)], "cyclic": {"sectors": 3}}),
    "4 half sectors, S, h = 2": (
        ring(4, inner=0.0, part=0.5),
        {"mirror": [mirror("y", S)], "cyclic": {"sectors": 4, "nodal_diameters": 2}}),
}  # fmt: skip


# --- polynomials averaged over a group ----------------------------------------------------------


@dataclass
class Polynomial:
    """Random polynomials of degree 5 in x - centre, one for each index of `shape`."""

    coefficients: np.ndarray
    centre: np.ndarray

    @staticmethod
    def random(shape: tuple[int, ...], centre: np.ndarray, seed: int) -> Polynomial:
        c = np.random.default_rng(seed).normal(size=(*shape, len(POWERS)))
        if len(shape) == 2:
            c = c + c.transpose(1, 0, 2)
        return Polynomial(c, centre)

    def __call__(self, x: np.ndarray) -> np.ndarray:
        """(n, *shape)"""
        d = x - self.centre
        return np.moveaxis(self.coefficients @ self._monomials(d, POWERS).T, -1, 0)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        """(n, *shape, 3), the last index that of the derivative."""
        d = x - self.centre
        parts = []
        for k in range(3):
            lowered = POWERS - np.eye(3, dtype=int)[k]
            terms = POWERS[:, k] * self._monomials(d, np.maximum(lowered, 0))
            parts.append(np.moveaxis(self.coefficients @ terms.T, -1, 0))
        return np.stack(parts, axis=-1)

    @staticmethod
    def _monomials(d: np.ndarray, powers: np.ndarray) -> np.ndarray:
        return np.prod(d[:, None, :] ** powers[None], axis=2)


def turned(Q: np.ndarray, T: np.ndarray) -> np.ndarray:
    """Every index of T, after the first, that of the points, turned by Q."""
    letters, new = "abc"[: T.ndim - 1], "ijk"[: T.ndim - 1]
    matrices = [f"{i}{a}" for i, a in zip(new, letters, strict=True)]
    return np.einsum(",".join([*matrices, "n" + letters]) + "->n" + new, *[Q] * len(new), T)


@dataclass
class Averaged:
    """A polynomial averaged over the group, and its gradient, anywhere in space."""

    polynomial: Polynomial
    matrices: np.ndarray
    chi: np.ndarray
    axial: bool = False

    def _sum(self, x: np.ndarray, what) -> np.ndarray:
        total = 0.0
        for M, chi in zip(self.matrices, self.chi, strict=True):
            Q, t = M[:3, :3], M[:3, 3]
            sign = chi * (np.sign(np.linalg.det(Q)) if self.axial else 1.0)
            total = total + sign * turned(Q, what((x - t) @ Q))
        return total / len(self.matrices)

    def __call__(self, x: np.ndarray) -> np.ndarray:
        return self._sum(x, self.polynomial)

    def gradient(self, x: np.ndarray) -> np.ndarray:
        return self._sum(x, self.polynomial.gradient)


def curl(gradient: np.ndarray) -> np.ndarray:
    return np.einsum("ijk,nkj->ni", LEVI_CIVITA, gradient)


def six(T: np.ndarray, shear: float = 1.0) -> np.ndarray:
    return np.stack([T[:, i, j] * (1.0 if i == j else shear) for i, j in SIX], axis=1)


def analytic(tables: Tables, centre: np.ndarray):
    """All fields as functions of the place: name -> (declaration, function)."""
    M, chi = copies_of(tables)
    body = np.ones_like(chi)

    def averaged(shape, seed, signs=chi, axial=False) -> Averaged:
        return Averaged(Polynomial.random(shape, centre, seed), M, signs, axial)

    u, w, sigma = averaged((3,), 1), averaged((3,), 2, axial=True), averaged((3, 3), 3)
    p, pseudo = averaged((), 4), averaged((), 5, axial=True)
    normal, thickness = averaged((3,), 6, body), averaged((), 7, body)

    def strain(x):
        G = u.gradient(x)
        return (G + G.transpose(0, 2, 1)) / 2.0

    def von_mises(x):
        s = sigma(x)
        s = s - np.trace(s, axis1=1, axis2=2)[:, None, None] / 3.0 * np.eye(3)
        return np.sqrt(1.5 * np.einsum("nij,nij->n", s, s))

    def divergence(x):
        return np.einsum("nijj->ni", sigma.gradient(x))

    return {
        "displacement": ({"kind": "polar vector"}, u),
        "vorticity": ({"kind": "axial vector"}, lambda x: curl(u.gradient(x))),
        "gradient": ({"kind": "tensor"}, lambda x: u.gradient(x).reshape(len(x), 9)),
        "dilatation": ({"kind": "scalar"}, lambda x: np.einsum("nii->n", u.gradient(x))),
        "strain": (
            {"kind": "symmetric tensor", "shear": "engineering"}, lambda x: six(strain(x), 2.0)),
        "stress": (
            {"kind": "symmetric tensor", "components": "yy xx zz yz xy xz"},
            lambda x: six(sigma(x))[:, [1, 0, 2, 4, 3, 5]]),
        "body_force": ({"kind": "polar vector"}, divergence),
        "potential": ({"kind": "scalar"}, p),
        "flux": ({"kind": "polar vector"}, p.gradient),
        "pseudo": ({"kind": "pseudoscalar"}, pseudo),
        "pseudo_flux": ({"kind": "axial vector"}, pseudo.gradient),
        "rotation": ({"kind": "axial vector"}, w),
        "curl_of_rotation": ({"kind": "polar vector"}, lambda x: curl(w.gradient(x))),
        "couple": ({"kind": "axial tensor"}, lambda x: w.gradient(x).reshape(len(x), 9)),
        "divergence_of_rotation": (
            {"kind": "pseudoscalar"}, lambda x: np.einsum("nii->n", w.gradient(x))),
        "principal": (
            {"kind": "principal values"}, lambda x: np.linalg.eigvalsh(sigma(x))[:, ::-1]),
        "von_mises_stress": ({"kind": "invariant"}, von_mises),
        "work": (
            {"kind": "invariant"}, lambda x: np.einsum("nij,nij->n", sigma(x), strain(x)) / 2),
        "helicity": (
            {"kind": "pseudoscalar", "follows": "body"},
            lambda x: np.einsum("ni,ni->n", u(x), curl(u.gradient(x)))),
        "normal": ({"kind": "polar vector", "follows": "body"}, normal),
        "thickness": ({"kind": "scalar", "follows": "body"}, thickness),
    }  # fmt: skip


@dataclass
class Expanded:
    sector: Sector
    tables: Tables
    fields: dict
    body: pyvista.UnstructuredGrid


@pytest.fixture(scope="module")
def expanded(tmp_path_factory):
    """Each body of the table with all analytic fields, anywhere in space, made once."""
    made: dict[str, Expanded] = {}

    def get(name: str) -> Expanded:
        if name not in made:
            sector, tables = BODIES[name]
            R, t = somewhere(sum(map(ord, name)))
            sector, tables = sector.moved(R, t), placed(tables, R, t)
            fields = analytic(tables, t + 0.3)
            points = {k: f(sector.points) for k, (_, f) in fields.items()}
            middle = centres(sector.points, [n for _, n in sector.cells])
            cells = {f"{k}_on_cells": f(middle) for k, (_, f) in fields.items()}
            declared = {k: d for k, (d, _) in fields.items()}
            declared |= {f"{k}_on_cells": d for k, (d, _) in fields.items()}
            case = {
                **tables,
                "fields": declared,
                "output": {"derived": ["von mises", "principal stresses", "magnitude"]},
            }
            folder = tmp_path_factory.mktemp("body")
            made[name] = Expanded(
                sector, tables, fields, expand(case_of(folder, sector, case, points, cells))
            )
        return made[name]

    return get


def scale(values: np.ndarray) -> float:
    return float(np.abs(values).max()) + 1e-300


# --- the expansion commutes with everything -----------------------------------------------------


@pytest.mark.parametrize("name", BODIES)
def test_the_averages_are_what_they_should_be(name: str) -> None:
    """The oracle itself: f(g x) = chi(g) rho(Q) f(x), by random points; and its gradient, by
    central differences."""
    tables = BODIES[name][1]
    M, chi = copies_of(tables)
    x = np.random.default_rng(0).uniform(-1, 1, size=(4, 3))
    f = Averaged(Polynomial.random((3,), np.full(3, 0.3), 1), M, chi)
    for m, factor in zip(M, chi, strict=True):
        np.testing.assert_allclose(
            f(x @ m[:3, :3].T + m[:3, 3]), factor * f(x) @ m[:3, :3].T, atol=1e-12
        )
    for k, step in enumerate(1e-5 * np.eye(3)):
        slope = (f(x + step) - f(x - step)) / 2e-5
        np.testing.assert_allclose(f.gradient(x)[:, :, k], slope, atol=1e-7)
    assert scale(f(x)) > 1e-2


@pytest.mark.parametrize("name", BODIES)
def test_fields_are_the_analytic_ones_everywhere(name: str, expanded) -> None:
    """Curl, gradient and divergence of the expanded displacement and stress are the expansions of
    theirs, as axial vector, tensor and polar vector; invariants and properties are carried."""
    e = expanded(name)
    for key, (_, f) in e.fields.items():
        want = f(e.body.points)
        assert scale(want) > 1e-2, "a field of zeros tests nothing"
        np.testing.assert_allclose(
            e.body.point_data[key], want, rtol=0, atol=1e-11 * scale(want), err_msg=key
        )


@pytest.mark.parametrize("name", BODIES)
def test_fields_on_cells(name: str, expanded) -> None:
    e = expanded(name)
    middle = centres(e.body.points, cell_nodes(e.body))
    for key, (_, f) in e.fields.items():
        want = f(middle)
        np.testing.assert_allclose(
            e.body.cell_data[f"{key}_on_cells"], want, rtol=0, atol=1e-11 * scale(want), err_msg=key
        )


@pytest.mark.parametrize("name", BODIES)
def test_derived_measures_of_the_whole_body(name: str, expanded) -> None:
    """Recomputed from components: eigenvalues, von Mises and lengths of what is in the file."""
    e = expanded(name)
    data = e.body.point_data
    x = e.body.points
    close = {"rtol": 0, "atol": 1e-10}
    np.testing.assert_allclose(
        data["stress_von_mises"], e.fields["von_mises_stress"][1](x), **close
    )
    np.testing.assert_allclose(data["stress_principal"], e.fields["principal"][1](x), **close)
    for key in ("displacement", "rotation"):
        want = np.sqrt((e.fields[key][1](x) ** 2).sum(axis=1))
        np.testing.assert_allclose(data[f"{key}_magnitude"], want, **close)
    assert "normal_magnitude" not in data, "a property of the body is no result"


@pytest.mark.parametrize("name", BODIES)
def test_pushing_the_body_forward_permutes_the_copies(name: str, expanded) -> None:
    """rho(Q) F(g^-1 y) = conj(chi(g)) F(y) at every node of the whole body, chi real here."""
    e = expanded(name)
    x = e.body.points
    tree = cKDTree(x)
    M, chi = copies_of(e.tables)
    assert len(M) == len(np.unique(e.body.cell_data["copy"]))
    for m, factor in zip(M, chi, strict=True):
        Q, t = m[:3, :3], m[:3, 3]
        distance, from_node = tree.query((x - t) @ Q)
        assert distance.max() < 1e-9
        assert (np.sort(from_node) == np.arange(len(x))).all()
        det = np.sign(np.linalg.det(Q))
        for key, rank, sign in (
            ("displacement", 1, factor), ("vorticity", 1, factor * det), ("gradient", 2, factor),
            ("couple", 2, factor * det), ("potential", 0, factor), ("pseudo", 0, factor * det),
            ("von_mises_stress", 0, 1.0), ("helicity", 0, det), ("normal", 1, 1.0),
        ):  # fmt: skip
            F = e.body.point_data[key].reshape((len(x),) + (3,) * rank)
            np.testing.assert_allclose(
                sign * turned(Q, F[from_node]), F, rtol=0, atol=1e-11 * scale(F), err_msg=key
            )


@pytest.mark.parametrize("name", BODIES)
def test_copy_0_is_the_input(name: str, expanded) -> None:
    """Coordinates and cells as they were; values bit by bit away from the seams, and to round-off
    on them."""
    e = expanded(name)
    n, m = len(e.sector.points), len(e.sector.cells)
    np.testing.assert_array_equal(e.body.points[:n], e.sector.points)
    np.testing.assert_array_equal(e.body.point_data["sector_point"][:n], np.arange(n))
    np.testing.assert_array_equal(e.body.cell_data["copy"][:m], 0)
    assert [n.tolist() for n in cell_nodes(e.body)[:m]] == [n for _, n in e.sector.cells]
    times = np.bincount(e.body.point_data["sector_point"], minlength=n)
    inside = times == len(np.unique(e.body.cell_data["copy"]))
    assert inside.any()
    assert not inside.all()
    for key, (_, f) in e.fields.items():
        want, found = f(e.sector.points), np.asarray(e.body.point_data[key][:n])
        np.testing.assert_array_equal(found[inside], want[inside], err_msg=key)
        np.testing.assert_allclose(found, want, rtol=0, atol=1e-11 * scale(want), err_msg=key)
        middle = centres(e.sector.points, [n for _, n in e.sector.cells])
        np.testing.assert_array_equal(e.body.cell_data[f"{key}_on_cells"][:m], f(middle))


# --- acting twice, acting in steps --------------------------------------------------------------

KINDS = {
    "u": ("polar vector", 3), "w": ("axial vector", 3), "T": ("tensor", 9),
    "M": ("axial tensor", 9), "S": ("symmetric tensor", 6), "p": ("scalar", 1),
    "q": ("pseudoscalar", 1), "v": ("invariant", 1), "principal": ("principal values", 3),
}  # fmt: skip


def as_model(body: pyvista.UnstructuredGrid, copy: int | None = None) -> Sector:
    """The cells of a body, or of one copy of it when nothing was merged, as a sector."""
    nodes = [n.tolist() for n in cell_nodes(body)]
    cells = list(zip(body.celltypes.tolist(), nodes, strict=True))
    if copy is None:
        return Sector(np.array(body.points), cells)
    n = body.n_points // len(np.unique(body.cell_data["copy"]))
    mine = [c for c, k in zip(cells, body.cell_data["copy"], strict=True) if k == copy]
    block = np.array(body.points[copy * n : (copy + 1) * n])
    return Sector(block, [(t, [k - copy * n for k in nodes]) for t, nodes in mine])


@pytest.mark.parametrize(
    "name",
    ["half, S", "half, A", "eighth, A S A", "planes at 60 degrees, A A", "5 sectors",
     "6 sectors to the axis, h = 3", "4 sectors of half height, h = 2, A", "3 half sectors, A"],
)  # fmt: skip
@settings(max_examples=3)
@given(seed=st.integers(0, 2**31))
def test_there_and_back_again(name: str, seed: int, tmp_path_factory) -> None:
    """Each copy taken as the model: the copy made by g^-1 is the first model again, with its node
    orders; for planes along x, y, z to the last bit."""
    rng = np.random.default_rng(seed)
    sector, tables = BODIES[name]
    n = len(sector.points)
    data = {k: rng.normal(size=(n, size) if size > 1 else n) for k, (_, size) in KINDS.items()}
    data["principal"] = np.sort(data["principal"])[:, ::-1]
    case = {
        **tables,
        "fields": {k: {"kind": kind} for k, (kind, _) in KINDS.items()},
        "seam": {"limit": 1e3},
        "output": {"merge": False},
    }
    folder = tmp_path_factory.mktemp("there")
    body = expand(case_of(folder, sector, case, data))
    M = body.field_data["placements"].reshape(-1, 4, 4)
    copy = int(rng.integers(1, len(M)))
    there = {k: np.array(body.point_data[k][copy * n : (copy + 1) * n]) for k in KINDS}
    again = expand(case_of(folder, as_model(body, copy), case, there, name="again"))
    N = again.field_data["placements"].reshape(-1, 4, 4)
    back = int(np.abs(N - np.linalg.inv(M[copy])).max(axis=(1, 2)).argmin())
    home = as_model(again, back)
    exact = "half" in name.split(",")[0].split() or "eighth" in name
    tolerance = 0.0 if exact and "cyclic" not in tables else 1e-12
    np.testing.assert_allclose(home.points, sector.points, rtol=0, atol=tolerance)
    assert home.cells == sector.cells
    for key, values in data.items():
        found = again.point_data[key][back * n : (back + 1) * n]
        np.testing.assert_allclose(found, values, rtol=0, atol=10 * tolerance, err_msg=key)


def same_body(one: pyvista.UnstructuredGrid, other: pyvista.UnstructuredGrid, keys) -> None:
    """The same points, cells and values, in whatever order."""
    distance, at = cKDTree(other.points).query(one.points)
    assert one.n_points == other.n_points
    assert distance.max() < 1e-9
    assert (np.sort(at) == np.arange(other.n_points)).all()

    def cells(grid, number):
        nodes = [sorted(number[n].tolist()) for n in cell_nodes(grid)]
        return sorted(zip(grid.celltypes.tolist(), nodes, strict=True))

    assert cells(one, at) == cells(other, np.arange(other.n_points))
    for key in keys:
        np.testing.assert_allclose(one.point_data[key], other.point_data[key][at], atol=1e-10)


STEPS = {
    "quarter by way of a half": ("quarter, S A", [
        {"mirror": [mirror("y", A)]}, {"mirror": [mirror("x", S)]}]),
    "eighth by way of a half": ("eighth, A S A", [
        {"mirror": [mirror("z", A)]}, {"mirror": [mirror("x", A), mirror("y", S)]}]),
    "six sectors by way of three": ("6 sectors to the axis, h = 3", [
        {"cyclic": {"sectors": 6, "nodal_diameters": 3}, "output": {"copies": [0, 1, 2]}},
        {"cyclic": {"sectors": 2, "nodal_diameters": 1}}]),
    "six sectors by way of two": ("6 sectors to the axis, h = 3", [
        {"cyclic": {"sectors": 6, "nodal_diameters": 3}, "output": {"copies": [0, 1]}},
        {"cyclic": {"sectors": 3}}]),
    "half sectors by way of sectors": ("4 half sectors, S, h = 2", [
        {"mirror": [mirror("y", S)]}, {"cyclic": {"sectors": 4, "nodal_diameters": 2}}]),
    "half height by way of sectors": ("4 sectors of half height, h = 2, A", [
        {"mirror": [mirror("z", A)]}, {"cyclic": {"sectors": 4, "nodal_diameters": 2}}]),
}  # fmt: skip


@pytest.mark.parametrize("name", STEPS)
def test_in_steps_or_at_once(name: str, tmp_path: Path) -> None:
    """A subgroup first and its cosets after gives the body of the whole group."""
    body_name, steps = STEPS[name]
    sector, tables = BODIES[body_name]
    fields = analytic(tables, np.full(3, 0.3))
    declared = {"fields": {k: d for k, (d, _) in fields.items()}}
    data = {k: f(sector.points) for k, (_, f) in fields.items()}
    at_once = expand(case_of(tmp_path, sector, {**tables, **declared}, data))
    for number, step in enumerate(steps):
        part = expand(case_of(tmp_path, sector, {**step, **declared}, data, name=f"step{number}"))
        sector = as_model(part)
        data = {k: np.array(part.point_data[k]) for k in fields}
    same_body(part, at_once, fields)


# --- sums of cases ------------------------------------------------------------------------------

SUMS = {
    "half": (box((2, 2, 2)), ["x"], 0),
    "quarter": (box((2, 2, 1)), ["x", "y"], 0),
    "eighth": (box((2, 1, 1)), ["x", "y", "z"], 0),
    "two sectors": (ring(2, (2, 4, 1)), [], 2),
    "two half sectors": (ring(2, (1, 2, 1), inner=0.0, part=0.5), ["y"], 2),
}


@pytest.mark.parametrize("where", ["as built", "anywhere"])
@pytest.mark.parametrize("name", SUMS)
def test_any_field_is_the_sum_of_its_cases(name: str, where: str, tmp_path: Path) -> None:
    """Projection on all characters of a group of signs is complete (J.-P. Serre, Linear
    Representations of Finite Groups, 2.6): the cases, each on the sector alone, add up to a
    polynomial without any symmetry, over the whole body."""
    sector, normals, sectors = SUMS[name]
    base: dict[str, Any] = {"mirror": [{"normal": n, "name": n} for n in normals]}
    if sectors:
        base["cyclic"] = {"sectors": sectors}
    t = np.zeros(3)
    if where == "anywhere":
        R, t = somewhere(31)
        sector, base = sector.moved(R, t), placed(base, R, t)
    u, w = (Polynomial.random((3,), t + 0.3, seed) for seed in (1, 2))
    sigma = Polynomial.random((3, 3), t + 0.3, 3)
    terms, cases = {}, []
    for words in product((S, A), repeat=len(normals)):
        for h in range(2 if sectors else 1):
            case = f"case{len(cases)}"
            load = dict(zip(normals, words, strict=True))
            tables = {**base, "mirror": [{**m, "load": load[m["name"]]} for m in base["mirror"]]}
            entry = {"name": case, "file": f"{case}.vtu", "load": load}
            if sectors:
                tables["cyclic"] = {**base["cyclic"], "nodal_diameters": h}
                entry["nodal_diameters"] = h
            M, chi = copies_of(tables)
            data = {
                "displacement": Averaged(u, M, chi)(sector.points),
                "rotation": Averaged(w, M, chi, axial=True)(sector.points),
                "stress": six(Averaged(sigma, M, chi)(sector.points)),
                "von_mises": np.ones(len(sector.points)),
            }
            # Half of it in the file, the factor of the case and that of the sum give the rest.
            case_of(tmp_path, sector, {}, {k: v / 6 for k, v in data.items()}, name=case)
            cases.append({**entry, "factor": 2.0})
            terms[case] = 3.0
    case = {**base, "case": cases, "sum": [{"name": "all", "terms": terms}]}
    body = expand(case_of(tmp_path, sector, case))
    x = body.points
    for key, want in (("displacement", u(x)), ("rotation", w(x)), ("stress", six(sigma(x)))):
        np.testing.assert_allclose(
            body.point_data[key], want, rtol=0, atol=1e-11 * scale(want), err_msg=key
        )
    assert "von_mises" not in body.point_data, "invariants do not add"


# --- number types -------------------------------------------------------------------------------


@pytest.mark.parametrize("name", ["half, A", "5 sectors"])
def test_single_precision_stays_single(name: str, tmp_path: Path) -> None:
    sector, tables = BODIES[name]
    fields = analytic(tables, np.full(3, 0.3))
    keys = ("displacement", "vorticity", "stress", "potential")
    declared = {k: fields[k][0] for k in keys}
    data = {k: fields[k][1](sector.points).astype(np.float32) for k in keys}
    case = {**tables, "fields": declared}
    body = expand(case_of(tmp_path, sector.as_type(np.float32), case, data))
    assert body.points.dtype == np.float32
    for key in keys:
        want = fields[key][1](body.points.astype(float))
        assert body.point_data[key].dtype == np.float32
        np.testing.assert_allclose(body.point_data[key], want, rtol=0, atol=3e-6 * scale(want))
