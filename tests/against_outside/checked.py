"""Shared by the tests of `seamfold check`: solved sectors written to a case, and what is found.

The solutions come from `demo_cases.solver` (scikit-fem), complex ones from scipy with the cyclic
condition written out by hand; nothing here knows how the check looks at a seam.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from demo_cases.solver import (
    CutPlane,
    Cyclic,
    Fixed,
    Material,
    Mesh,
    Solution,
    block,
    on_plane,
    quadratic,
    solve,
    tetrahedra,
)
from expander.checking.report import CheckUp, report
from expander.checkup import check
from tests.against_outside.bodies import SHIFT, SIX, SKEW, Floats, Ints, Model, mirrors
from tests.against_outside.elastic import word

STEEL = Material(young=200e3, poisson=0.3)

KINDS: dict[str, Mapping[str, object]] = {
    "displacement": {"kind": "polar vector"},
    "stress": {"kind": "symmetric tensor", "components": SIX, "seam": "recovered"},
    "cell_stress": {"kind": "symmetric tensor", "components": SIX},
    "rotation": {"kind": "axial vector", "seam": "recovered"},
    "applied_force": {"kind": "polar vector", "seam": "sum"},
    "reaction": {"kind": "polar vector", "seam": "sum"},
}


@dataclass(frozen=True)
class Found:
    """What `seamfold check` found, as an object and as the plain data of its report."""

    checkup: CheckUp

    @cached_property
    def facts(self) -> dict[str, Any]:
        return report(self.checkup, "test")

    @property
    def verdict(self) -> str:
        return self.checkup.verdict

    @property
    def loads(self) -> list[dict[str, Any]]:
        return list(self.facts["loads"])

    def load(self, seam: str) -> dict[str, Any]:
        """What was found of the load on the seam whose name contains the word."""
        (one,) = [f for f in self.loads if seam in f["seam"]]
        return one

    def measures(self, name: str | None = None) -> list[dict[str, Any]]:
        """Every measure of a field at a seam, or of all fields."""
        return [
            {"field": f["field"], **s}
            for f in self.facts["fields"]
            if name in (None, f["field"])
            for s in f["seams"]
        ]

    def results(self, name: str) -> set[str]:
        """The verdicts on a field at all seams."""
        return {s["verdict"] for s in self.measures(name)}

    def times(self, measure: str) -> float:
        """Largest jump by a measure in multiples of the cells' scatter."""
        return max((s["times_scatter"] or 0.0 for s in self.measures() if s["measure"] == measure),
                   default=0.0)  # fmt: skip

    def says(self, *words: str, weight: str | None = None) -> str:
        """All findings that contain each of the words, one to a line; "" if there are none."""
        return "\n".join(
            f"{f.weight}: {f.about}: {f.words} {f.line}"
            for f in self.checkup.findings
            if weight in (None, f.weight)
            and all(w in f"{f.about}: {f.words} {f.line}" for w in words)
        )

    @property
    def all_findings(self) -> str:
        return self.says()


def found_in(case: Path) -> Found:
    return Found(check(case))


@dataclass(frozen=True)
class Part:
    """The modelled part of an elastic body with everything that its solver was told.

    Attributes
    ----------
    planes, cyclic : its seam conditions.
    halves : `planes[1]` follows from the axis and `planes[0]`, and is not declared.
    """

    mesh: Mesh
    load: Floats
    fixed: Sequence[Fixed] = ()
    planes: Sequence[CutPlane] = ()
    cyclic: Cyclic | None = None
    material: Material = STEEL
    halves: bool = False

    @cached_property
    def solution(self) -> Solution:
        cyclic = None if self.halves else self.cyclic
        return solve(self.mesh, self.material, self.load, fixed=self.fixed, planes=self.planes,
                     cyclic=cyclic)  # fmt: skip

    def tables(self) -> dict[str, object]:
        """[[mirror]] and [cyclic] as they are."""
        declared = self.planes[:1] if self.halves else self.planes
        tables: dict[str, object] = {
            "mirror": mirrors(*((f"p{i}", p.unit, np.asarray(p.point, dtype=float), word(p.parity))
                                for i, p in enumerate(declared)))
        }  # fmt: skip
        if self.cyclic is not None:
            N = self.cyclic.sectors
            tables["cyclic"] = {
                "sectors": N,
                "axis": np.asarray(self.cyclic.axis, dtype=float),
                "point": np.asarray(self.cyclic.point, dtype=float),
                "nodal_diameters": 0 if self.cyclic.parity == 1 else N // 2,
            }
        return tables

    def model(self, folder: Path, names: Sequence[str] = tuple(KINDS), **values: Floats) -> Model:
        """The case with these fields of the solution, some of them given other values."""
        s = self.solution
        points = {"displacement": s.displacement, "stress": s.nodal_stress, "rotation": s.rotation,
                  "applied_force": s.external_force, "reaction": s.reaction}  # fmt: skip
        cells = {"cell_stress": s.cell_stress}
        mesh = self.mesh
        model = Model(folder, mesh.points, {mesh.shape.vtk_type: mesh.cells})
        for name in names:
            model.field(name, **KINDS[name])  # type: ignore[arg-type]
        model.values(
            points={n: values.get(n, v) for n, v in points.items() if n in names},
            cells={n: values.get(n, v) for n, v in cells.items() if n in names},
        )
        return model.table(**self.tables())

    def found(self, folder: Path, names: Sequence[str] = tuple(KINDS), **values: Floats) -> Found:
        return found_in(self.model(folder, names, **values).write())


def with_mirror(model: Model, number: int, **words: object) -> Model:
    """The case with other words for one of its planes."""
    table = [dict(m) for m in model.tables["mirror"]]  # type: ignore[attr-defined]
    table[number].update(words)
    return model.table(mirror=table)


def skewed(points: ArrayLike) -> Floats:
    """Points moved to a system aligned with nothing, off the origin."""
    return np.asarray(np.asarray(points) @ SKEW.T + SHIFT)


def in_skew(mesh: Mesh) -> Mesh:
    return mesh.mapped(lambda *x: list(skewed(np.stack(x, axis=1)).T))


def sides(mesh: Mesh, normal: ArrayLike, point: ArrayLike = (0.0, 0.0, 0.0)) -> Ints:
    """Numbers of the nodes in a plane."""
    return np.flatnonzero(on_plane(mesh, normal, point))


# --- bodies -------------------------------------------------------------------------------------

X, Y, Z = np.eye(3)

CELLS: dict[str, Callable[[Mesh], Mesh]] = {
    "hexa 8": lambda mesh: mesh,
    "tetra 4": tetrahedra,
    "hexa 20": quadratic,
    "tetra 10": lambda mesh: quadratic(tetrahedra(mesh)),
}


def bulge(u: Floats, v: Floats, w: Floats) -> Sequence[ArrayLike]:
    """A cube made uneven; its faces in u = 0, v = 0 and w = 0 stay plane."""
    return u * (1 + 0.2 * v * w), 0.8 * v * (1 + 0.3 * u), 1.3 * w * (1 - 0.2 * u * v)


def graded(u: Floats, v: Floats, w: Floats) -> Sequence[ArrayLike]:
    """The same with cells that grow away from the planes."""
    return bulge(u**2, v**1.5, w**2)


def v_notch(u: Floats, v: Floats, w: Floats) -> Sequence[ArrayLike]:
    """A notch across the top whose sharp tip lies in the plane u = 0."""
    return u, 0.8 * v, w * (0.55 + 0.45 * np.minimum(u / 0.4, 1.0))


def elbow(count: int, across: int) -> Mesh:
    """A cube less a quarter of it: a re-entrant edge at half the height, along y (across = 0),
    which ends in the plane y = 0, or along x (across = 1), which ends in the plane x = 0."""
    mesh = block(count, count, count)
    centre = mesh.centroids()
    return mesh.keep(~((centre[:, across] < 0.5) & (centre[:, 2] > 0.5)))


SHAPES: dict[str, Callable[[int], Mesh]] = {
    "bulge": lambda n: block(n, n, n).mapped(bulge),
    "graded": lambda n: block(n, n, n).mapped(graded),
    "notch": lambda n: block(2 * n, n, n).mapped(v_notch),
    "elbow along y": lambda n: elbow(n, 0),
    "elbow along x": lambda n: elbow(n, 1),
}


def ring(sectors: int, counts: Sequence[int], lean: float = 0.0, part: float = 1.0) -> Mesh:
    """A sector of a ring about z, radii 1 to 2, between z = 0 and an uneven top.

    Seams curved by `lean` radians; `part` is the modelled part of the sector's angle.
    """

    def place(u: Floats, v: Floats, w: Floats) -> Sequence[ArrayLike]:
        r = 1 + u * (1 + 0.2 * w)
        angle = 2 * np.pi / sectors * part * v + lean * (u + w * w)
        return r * np.cos(angle), r * np.sin(angle), 0.8 * w * (1 + 0.1 * u)

    return block(*counts).mapped(place)


def bore(mesh: Mesh) -> Ints:
    """Nodes of `ring` at the inner radius."""
    return np.flatnonzero(np.hypot(*mesh.points[:, :2].T) < 1 + 1e-3)


def uneven(x: Floats) -> Floats:
    """A force per volume along all directions, different everywhere."""
    return np.stack(
        [1 + 0.3 * x[..., 1], -0.5 + 0.1 * x[..., 2] ** 2, 0.3 - 0.2 * x[..., 0]], axis=-1
    )


def in_skew_system(part: Part) -> Part:
    """The same body, moved: its mesh, planes, axis, supports and load."""
    planes = [
        CutPlane(SKEW @ p.unit, skewed(np.asarray(p.point, dtype=float)), p.parity)
        for p in part.planes
    ]
    axis = part.cyclic and Cyclic(
        part.cyclic.sectors, SKEW @ part.cyclic.axis, skewed(np.zeros(3)), part.cyclic.parity
    )
    fixed = [replace(f, directions=np.asarray(f.directions) @ SKEW.T) for f in part.fixed]
    return replace(part, mesh=in_skew(part.mesh), load=part.load @ SKEW.T, fixed=fixed,
                   planes=planes, cyclic=axis)  # fmt: skip
