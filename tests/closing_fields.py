"""Random sectors with random fields that close at every seam, for tests.

Any smooth function, averaged over the group with the signs of its kind, closes. Nothing of the
program takes part: copies are multiplied by hand, parities typed, seam nodes searched for.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from meshes import (
    QUAD,
    TRIANGLE,
    Sector,
    box,
    copies_of,
    placed,
    quadratic,
    ring,
    somewhere,
    tetrahedra,
)
from scipy.spatial import cKDTree

Array = np.ndarray
SIX = ((0, 0), (1, 1), (2, 2), (0, 1), (1, 2), (2, 0))
ORDER = "xx yy zz xy yz zx"
RANK = {"scalar": 0, "pseudoscalar": 0, "polar vector": 1, "axial vector": 1, "symmetric tensor": 2}
AXIAL = {"pseudoscalar", "axial vector"}  # these take det Q as well


# --- sectors --------------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Face:
    """A face of a sector, on which it meets a copy.

    Attributes
    ----------
    depth : of local points (n, 3): 0 on the face, rising into the sector to 1 at its far end.
    normal : (n, 3) of local points: the gradient of the depth.
    twin : whether the copy's side is another face of the sector.
    """

    depth: Callable[[Array], Array]
    normal: Callable[[Array], Array]
    twin: bool


@dataclass(frozen=True, eq=False)
class Setting:
    """A sector with its copies.

    Attributes
    ----------
    local : (n, 3) points before the sector was placed by x -> R x + t.
    copies, chi : (k, 4, 4) and (k,), by plain multiplication.
    pairs : (p, 3) node i where copy g has node j.
    """

    name: str
    sector: Sector
    local: Array
    R: Array
    t: Array
    tables: dict[str, Any]
    copies: Array
    chi: Array
    faces: tuple[Face, ...]
    pairs: Array

    @property
    def waves(self) -> bool:
        return bool(np.iscomplexobj(self.chi))

    def to_local(self, points: Array) -> Array:
        return (points - self.t) @ self.R


def setting(rng: np.random.Generator) -> Setting:
    """A random sector: its shape, load, cells, placement and precision."""
    makers = (half, wedge, eighth, cyclic, half_sector, shell)
    maker = makers[rng.choice(len(makers), p=[0.15, 0.15, 0.1, 0.3, 0.1, 0.2])]
    name, sector, tables, faces = maker(rng)
    if maker is not shell:
        cells = str(rng.choice(["linear", "linear", "tetrahedra", "quadratic"]))
        if cells == "tetrahedra" and maker is not eighth and set(sector.types) == {12}:
            sector = tetrahedra(sector)
            name += " tetrahedra"
            if rng.random() < 0.3:
                sector, name = quadratic(sector), name + " quadratic"
        elif cells == "quadratic":
            sector, name = quadratic(sector), name + " quadratic"
    local = sector.points
    R, t = somewhere(int(rng.integers(10**6))) if rng.random() < 0.7 else (np.eye(3), np.zeros(3))
    tables, sector = placed(tables, R, t), sector.moved(R, t)
    if rng.random() < 0.3:
        sector, name = sector.as_type(np.float32), name + " float32"
    copies, chi = copies_of(tables)
    h = tables.get("cyclic", {}).get("nodal_diameters", 0)
    if "cyclic" in tables and 0 < 2 * h < tables["cyclic"]["sectors"]:
        sign = -1 if tables["cyclic"]["phase"] == "-" else 1  # "auto" must find +
        steps = np.arange(len(copies))  # powers of the turn, in their order
        chi = np.exp(2j * np.pi * sign * h * steps / tables["cyclic"]["sectors"])
    return Setting(name, sector, local, R, t, tables, copies, chi, faces,
                   pairs_of(sector.points.astype(float), copies))  # fmt: skip


def pairs_of(points: Array, copies: Array) -> Array:
    """(p, 3) i, g, j: the image of node j by copy g is where node i is."""
    tree, found = cKDTree(points), []
    for g, M in enumerate(copies[1:], 1):
        distance, i = tree.query(points @ M[:3, :3].T + M[:3, 3])
        j = np.flatnonzero(distance < 1e-4)
        found.append(np.stack([i[j], np.full(len(j), g), j], axis=1))
    return np.concatenate(found)


Made = tuple[str, Sector, dict[str, Any], tuple[Face, ...]]


def flat(normal: Sequence[float], far: float) -> Face:
    """A cut plane through the origin; the sector lies on the normal's side, up to `far`."""
    n = np.array(normal, dtype=float)
    return Face(lambda x: x @ n / far, lambda x: np.broadcast_to(n / far, x.shape), False)


def word(rng: np.random.Generator) -> str:
    return str(rng.choice(["symmetric", "antisymmetric"]))


def half(rng: np.random.Generator) -> Made:
    mirror = {"name": "mid", "normal": "x", "load": word(rng)}
    sector = box((int(rng.integers(8, 12)), 3, 2), (2.0, 1.0, 0.8))
    return "half", sector, {"mirror": [mirror]}, (flat((1, 0, 0), 2.0),)


def eighth(rng: np.random.Generator) -> Made:
    mirror = [{"name": n, "normal": n, "load": word(rng)} for n in "xyz"]
    faces = tuple(flat(n, 1.0) for n in np.eye(3))
    return "eighth", box((8, 8, 8), (1.0, 1.0, 1.0)), {"mirror": mirror}, faces


def sides(angle: float) -> tuple[Face, Face]:
    """Planes about z at angle zero and at `angle`, seen from between them."""
    far = 2.0 * np.sin(min(angle, np.pi / 2))
    return (flat((0, 1, 0), far), flat((np.sin(angle), -np.cos(angle), 0), far))


def wedge(rng: np.random.Generator) -> Made:
    """Two planes at 90 degrees or at an odd part of 180."""
    m = int(rng.choice([2, 2, 3, 5, 7]))
    angle = np.pi / m
    one = word(rng)
    two = one if m % 2 else word(rng)
    mirror = [{"name": "a", "normal": [0, 1, 0], "load": one},
              {"name": "b", "normal": [np.sin(angle), -np.cos(angle), 0], "load": two}]  # fmt: skip
    inner = float(rng.choice([0.0, 1.0]))
    sector = ring(2 * m, (4, 9, 2), inner=inner)
    name = f"wedge of {180 / m:.4g} degrees" + (" with its tip" if not inner else "")
    return name, sector, {"mirror": mirror}, sides(angle)


def around(N: int, lean: float) -> tuple[Face, ...]:
    """The two faces of a cyclic sector."""
    angle = 2.0 * np.pi / N

    def turned(x: Array) -> tuple[Array, Array]:
        r, theta = np.hypot(x[:, 0], x[:, 1]), np.arctan2(x[:, 1], x[:, 0])
        theta = theta - lean * (np.sin(3.0 * r) + x[:, 2] ** 2)
        return (theta + np.pi / N) % (2 * np.pi) - np.pi / N, r

    def depth(x: Array) -> Array:
        return turned(x)[0] / angle  # between -1/2 and N - 1/2: 0 and 1 on the faces

    def normal(x: Array) -> Array:
        r = np.maximum(np.hypot(x[:, 0], x[:, 1]), 1e-9)
        hoop = np.stack([-x[:, 1], x[:, 0], 0 * r], axis=1) / r[:, None] ** 2
        radial = np.stack([x[:, 0], x[:, 1], 0 * r], axis=1) / r[:, None]
        slope = hoop - lean * 3.0 * np.cos(3.0 * r)[:, None] * radial
        slope[:, 2] -= lean * 2.0 * x[:, 2]
        return slope / angle

    return (Face(depth, normal, True),
            Face(lambda x: 1.0 - depth(x), lambda x: -normal(x), True))  # fmt: skip


def axis_of(rng: np.random.Generator, N: int, real: bool = False) -> dict[str, Any]:
    h = int(rng.integers(0, N // 2 + 1))
    if real:
        h = int(rng.choice([0, N // 2])) if N % 2 == 0 else 0
    table: dict[str, Any] = {"sectors": N, "axis": "z", "nodal_diameters": h}
    if 0 < 2 * h < N:
        table["phase"] = str(rng.choice(["+", "-", "auto"]))
    return table


def cyclic(rng: np.random.Generator) -> Made:
    N = int(rng.integers(2, 10))
    lean = float(rng.choice([0.0, 0.0, 0.15, 0.3]))
    inner = 0.0 if lean == 0.0 and N > 2 and rng.random() < 0.2 else 1.0
    table = axis_of(rng, N)
    sector = ring(N, (4, 9 if N > 3 else 12, 2), inner=inner, lean=lean)
    name = f"ring N={N} h={table['nodal_diameters']} lean={lean:g}" + (
        "" if inner else " with its axis"
    )
    return name, sector, {"cyclic": table}, around(N, lean)


def half_sector(rng: np.random.Generator) -> Made:
    """A plane through the axis: the other face lies on a plane that nobody declared."""
    N = int(rng.integers(2, 10))
    table = axis_of(rng, N, real=True)
    mirror = {"name": "M", "normal": [0, 1, 0], "load": word(rng)}
    sector = ring(N, (4, 9, 2), part=0.5)
    name = f"half-sector N={N} h={table['nodal_diameters']}"
    return name, sector, {"cyclic": table, "mirror": [mirror]}, sides(np.pi / N)


def shell(rng: np.random.Generator) -> Made:
    """A plane annulus or a cone of quadrilaterals or triangles."""
    N = int(rng.integers(3, 10))
    solid = ring(N, (5, 10, 1))
    cells = [(QUAD, nodes[:4]) for _, nodes in solid.cells]
    if rng.random() < 0.5:
        cells = [(TRIANGLE, [n[0], n[a], n[b]]) for _, n in cells for a, b in ((1, 2), (2, 3))]
    used, new = np.unique([n for _, nodes in cells for n in nodes], return_inverse=True)
    cuts = np.cumsum([len(nodes) for _, nodes in cells])[:-1]
    renumbered = [part.tolist() for part in np.split(new, cuts)]
    points = solid.points[used]
    slope = float(rng.choice([0.0, 0.6]))
    points[:, 2] = slope * np.hypot(points[:, 0], points[:, 1])
    sector = Sector(points, [(t, n) for (t, _), n in zip(cells, renumbered, strict=True)])
    table = axis_of(rng, N)
    name = f"{'cone' if slope else 'plate'} N={N} h={table['nodal_diameters']}"
    return name, sector, {"cyclic": table}, around(N, 0.0)


# --- fields ---------------------------------------------------------------------------------------


def turned(kind: str, Q: Array, values: Array) -> Array:
    """Full values (n), (n, 3) or (n, 3, 3) of a kind under Q."""
    sign = float(np.linalg.det(Q).round()) if kind in AXIAL else 1.0
    if RANK[kind] == 0:
        return sign * values
    return sign * (values @ Q.T if RANK[kind] == 1 else Q @ values @ Q.T)


def stored(kind: str, full: Array, bases: Array | None = None) -> Array:
    """(n, c) components, along the rows of `bases` (n, 3, 3) if given."""
    if RANK[kind] == 0:
        return full[:, None]
    if bases is not None:
        full = (np.einsum("nij,nj->ni", bases, full) if RANK[kind] == 1
                else bases @ full @ bases.transpose(0, 2, 1))  # fmt: skip
    return full if RANK[kind] == 1 else np.stack([full[:, a, b] for a, b in SIX], axis=1)


def unstored(kind: str, values: Array, bases: Array | None = None) -> Array:
    """The reverse of `stored`."""
    if RANK[kind] == 0:
        return values[:, 0]
    full = values
    if RANK[kind] == 2:
        full = np.zeros((len(values), 3, 3), dtype=values.dtype)
        for column, (a, b) in enumerate(SIX):
            full[:, a, b] = full[:, b, a] = values[:, column]
    if bases is None:
        return full
    back = bases.transpose(0, 2, 1)
    return np.einsum("nij,nj->ni", back, full) if RANK[kind] == 1 else back @ full @ bases


@dataclass(frozen=True, eq=False)
class Probe:
    """A field on a sector: stored values (n, c) at nodes or in cells, the frame's base vectors."""

    name: str
    kind: str
    on: str
    seam: str
    values: Array
    bases: Array | None = None

    @property
    def scale(self) -> float:
        return float(np.linalg.norm(self.values, axis=1).max())

    def plus(self, delta: Array) -> Probe:
        return replace(self, values=self.values + delta)

    def table(self, waves: bool) -> dict[str, Any]:
        out: dict[str, Any] = {"kind": self.kind, "on": self.on}
        if RANK[self.kind] == 2:
            out["components"] = ORDER if self.bases is None else "rr tt zz rt tz zr"
        if self.on == "points":
            out["seam"] = self.seam
        if self.bases is not None:
            out["frame"] = "around"
        if waves:
            out |= {"real": f"{self.name}_re", "imaginary": f"{self.name}_im"}
        return out

    def arrays(self, waves: bool) -> dict[str, Array]:
        if not waves:
            return {self.name: self.values}
        parts = {"re": self.values.real, "im": self.values.imag}
        return {f"{self.name}_{part}": values.copy() for part, values in parts.items()}


def smooth(rng: np.random.Generator, kind: str, centre: Array, waves: bool) -> Callable[..., Array]:
    """A smooth random function of points, of the shape of a kind."""
    shape = (3,) * RANK[kind]
    K = rng.normal(0.0, 0.8, size=(5, 3))
    phase = rng.uniform(0.0, 2 * np.pi, size=5)
    A = rng.normal(size=(5, *shape)) + (1j * rng.normal(size=(5, *shape)) if waves else 0.0)
    if RANK[kind] == 2:
        A = A + A.transpose(0, 2, 1)

    def function(x: Array) -> Array:
        return np.tensordot(np.cos((x - centre) @ K.T + phase), A, axes=(1, 0))

    return function


def closing(rng: np.random.Generator, s: Setting, kind: str) -> Callable[[Array], Array]:
    """A random function with ``f(g x) = chi(g) rho(Q) f(x)``: any F, as the mean over g of
    ``chi(g)^-1 rho(Q)^-1 F(g x)``."""
    F = smooth(rng, kind, s.t, s.waves)

    def function(x: Array) -> Array:
        terms = [turned(kind, M[:3, :3].T, F(x @ M[:3, :3].T + M[:3, 3])) / chi
                 for M, chi in zip(s.copies, s.chi, strict=True)]  # fmt: skip
        return np.mean(terms, axis=0)

    return function


def bases_at(points: Array, axis: Array, point: Array) -> Array:
    """(n, 3, 3) radial, hoop and axial unit vectors as rows."""
    away = points - point
    away = away - np.outer(away @ axis, axis)
    radial = away / np.linalg.norm(away, axis=1, keepdims=True)
    return np.stack([radial, np.cross(axis, radial), np.broadcast_to(axis, radial.shape)], axis=1)


def probes(rng: np.random.Generator, s: Setting) -> tuple[list[Probe], dict[str, Any]]:
    """A displacement, another primary field, and a stress at nodes and in cells; frames."""
    points = s.sector.points.astype(float)
    other = str(rng.choice(["scalar", "axial vector", "symmetric tensor", "pseudoscalar"]))
    centres = np.array([points[nodes].mean(axis=0) for _, nodes in s.sector.cells])
    frames: dict[str, Any] = {}
    bases = None
    if rng.random() < 0.4:
        axis, point = s.R @ [0.0, 0.0, 1.0], s.t
        if rng.random() < 0.3 or np.linalg.norm(s.local[:, :2], axis=1).min() < 1e-6:
            # An axis that has nothing to do with the group.
            axis, point = s.R @ [0.6, 0.0, 0.8], s.t + s.R @ [-1.0, -9.0, 0.5]
        frames = {"around": {"type": "cylindrical", "axis": axis.tolist(), "point": point.tolist()}}
        bases = bases_at(points, axis, point)
    found = []
    names = {"scalar": "temperature", "axial vector": "rotation", "symmetric tensor": "couple",
             "pseudoscalar": "twist"}  # fmt: skip
    for name, kind, on, seam, local in (
        ("displacement", "polar vector", "points", "agree", rng.random() < 0.5),
        (names[other], other, "points", "agree", RANK[other] > 0 and rng.random() < 0.5),
        ("stress", "symmetric tensor", "points", "recovered", rng.random() < 0.5),
        ("cell_stress", "symmetric tensor", "cells", "", False),
    ):
        f = closing(rng, s, kind)
        full = f(points if on == "points" else centres)
        size = 10.0 ** rng.uniform(-4, -2) / np.abs(full).max()
        found.append(
            Probe(name, kind, on, seam, stored(kind, full * size, bases if local else None),
                  bases if local else None)
        )  # fmt: skip
    return found, frames
