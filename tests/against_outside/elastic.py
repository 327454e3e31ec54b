"""Shared by the tests here: solved sectors, solved whole bodies, and all their fields.

The sector is solved with its seam conditions and the whole body without any, on the same merged
mesh and with the same solver (`demo_cases.solver`); the expander sees the sector only.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
import pyvista as pv
from numpy.typing import ArrayLike
from scipy.spatial import cKDTree

from demo_cases.solver import (
    CutPlane,
    Cyclic,
    Fixed,
    Material,
    Mesh,
    Solution,
    WholeBody,
    merge_copies,
    moment,
    placements,
    solve,
    volume,
)
from tests.against_outside.bodies import SIX, Floats, Ints, Model, miss

# Two direct solutions of the same equations, refined until their residual is round-off, differ
# by about 1e-16 times the condition of the stiffness matrix, which is 1e3 to 1e5 for these meshes.
SOLVED = 1e-10

KINDS: dict[str, Mapping[str, object]] = {
    "displacement": {"kind": "polar vector"},
    "rotation": {"kind": "axial vector", "seam": "recovered"},
    "stress": {"kind": "symmetric tensor", "components": SIX, "seam": "recovered"},
    "strain": {
        "kind": "symmetric tensor",
        "components": SIX,
        "shear": "engineering",
        "seam": "recovered",
    },
    "von_mises": {"kind": "invariant", "seam": "recovered"},
    "nodal_force": {"kind": "polar vector", "seam": "sum"},
    "reaction": {"kind": "polar vector", "seam": "sum"},
    "moment_of_force": {"kind": "axial vector", "seam": "sum"},
    "cell_stress": {"kind": "symmetric tensor", "components": SIX},
    "cell_strain": {"kind": "symmetric tensor", "components": SIX, "shear": "engineering"},
    "cell_rotation": {"kind": "axial vector"},
    "gradient": {"kind": "tensor"},
    "energy_density": {"kind": "invariant"},
}


def fields_of(solution: Solution, about: ArrayLike) -> tuple[dict[str, Floats], dict[str, Floats]]:
    """All fields of a solution on points and on cells; moments about a point."""
    density = 0.5 * np.sum(solution.cell_stress * solution.cell_strain, axis=1)
    return {
        "displacement": solution.displacement,
        "rotation": solution.rotation,
        "stress": solution.nodal_stress,
        "strain": solution.nodal_strain,
        "von_mises": solution.nodal_von_mises,
        "nodal_force": solution.external_force,
        "reaction": solution.reaction,
        "moment_of_force": moment(solution.mesh.points, solution.external_force, about),
    }, {
        "cell_stress": solution.cell_stress,
        "cell_strain": solution.cell_strain,
        "cell_rotation": solution.cell_rotation,
        "gradient": solution.cell_gradient.reshape(-1, 9),
        "energy_density": density,
    }


@dataclass
class Body:
    """A sector of an elastic body with its planes and axis.

    Attributes
    ----------
    mesh : the sector.
    fixed : its nodes that are clamped; their images are too.
    planes, cyclic : seam conditions of the sector, with their parities.
    young : Young's modulus of each cell; uneven, so that no cell is like another.
    about : a point that every placement leaves where it is; moments are taken about it.
    halves : the plane `planes[1]` follows from the axis and `planes[0]`: half-sectors.
    """

    mesh: Mesh
    fixed: Ints
    planes: Sequence[CutPlane] = ()
    cyclic: Cyclic | None = None
    about: Floats = field(default_factory=lambda: np.zeros(3))
    halves: bool = False

    def __post_init__(self) -> None:
        young = 200e3 * (1 + 0.4 * np.sin(7.0 * np.arange(len(self.mesh.cells))))
        self.material = Material(young=young, poisson=0.3)

    def with_parities(self, *planes: int, cyclic: int = 1) -> Body:
        """The same body under another load."""
        new = [CutPlane(p.normal, p.point, s) for p, s in zip(self.planes, planes, strict=True)]
        axis = self.cyclic and Cyclic(
            self.cyclic.sectors, self.cyclic.axis, self.cyclic.point, cyclic
        )
        return Body(self.mesh, self.fixed, new, axis, self.about, self.halves)

    @property
    def copies(self) -> list:
        return placements(self.planes, self.cyclic)

    def solve(self, load: Floats, temperature: Floats | None = None) -> Solution:
        """The sector; half-sectors are held by their two planes, not by the cyclic condition."""
        cyclic = None if self.halves else self.cyclic
        return solve(
            self.mesh,
            self.material,
            load,
            fixed=[Fixed(self.fixed)],
            planes=self.planes,
            cyclic=cyclic,
            temperature=temperature,
        )

    def whole(self) -> WholeBody:
        body = merge_copies(self.mesh.points, self.mesh.cells, self.copies, self.mesh.part)
        body.mesh.check()
        return body

    def whole_load(self, body: WholeBody, load: Floats) -> Floats:
        """The sector's load on every copy, turned and with the sign of its parity."""
        total = np.zeros_like(body.mesh.points)
        for (Q, _, chi), node in zip(self.copies, body.node, strict=True):
            np.add.at(total, node, chi * load @ Q.T)
        return total

    def solve_whole(
        self, body: WholeBody, load: Floats, temperature: Floats | None = None
    ) -> Solution:
        """The whole body, held by its supports alone."""
        material = Material(
            np.tile(self.material.young, len(self.copies)), 0.3, self.material.expansion
        )
        return solve(
            body.mesh,
            material,
            load,
            fixed=[Fixed(body.node[:, self.fixed].ravel())],
            temperature=temperature,
        )

    def tables(self) -> dict[str, object]:
        """Planes and axis for the case file; of half-sectors only the first plane."""
        tables: dict[str, object] = {
            "mirror": [
                {
                    "name": f"p{i}",
                    "normal": p.unit,
                    "point": np.asarray(p.point, dtype=float),
                    "load": word(p.parity),
                }
                for i, p in enumerate(self.planes)
                if not (self.halves and i == 1)
            ]
        }
        if self.cyclic is not None:
            N = self.cyclic.sectors
            tables["cyclic"] = {
                "sectors": N,
                "axis": np.asarray(self.cyclic.axis, dtype=float),
                "point": np.asarray(self.cyclic.point, dtype=float),
                "nodal_diameters": 0 if self.cyclic.parity == 1 else N // 2,
            }
        return tables

    def loads(self) -> dict[str, str]:
        """The load words of a case."""
        return {f"p{i}": word(p.parity) for i, p in enumerate(self.planes)}

    def model(self, folder: Path) -> Model:
        """The sector, its planes and axis; no fields yet."""
        model = Model(folder, self.mesh.points, {self.mesh.shape.vtk_type: self.mesh.cells})
        return model.table(**self.tables())


def word(parity: int) -> str:
    return "symmetric" if parity == 1 else "antisymmetric"


def declare(model: Model) -> Model:
    """All fields of `fields_of`."""
    for name, words in KINDS.items():
        model.field(name, **words)  # type: ignore[arg-type]
    return model


def rows(grid: pv.UnstructuredGrid, body: WholeBody) -> tuple[Ints, Ints]:
    """The node and the cell of the solved body for each of the expanded body, one to one."""
    pairs = []
    (nodes,) = grid.cells_dict.values()
    for found, known in (
        (grid.points, body.mesh.points),
        (grid.points[nodes].mean(axis=1), body.mesh.points[body.mesh.cells].mean(axis=1)),
    ):
        assert len(found) == len(known)
        distance, row = cKDTree(known).query(found)
        assert distance.max() < 1e-5 * body.mesh.edge_length()
        assert len(np.unique(row)) == len(row)
        pairs.append(row)
    return pairs[0], pairs[1]


def seam_nodes(body: WholeBody) -> Ints:
    """Nodes of the whole body that belong to more than one copy."""
    count = np.bincount(body.node.ravel(), minlength=len(body.mesh.points))
    return np.flatnonzero(count > 1)


def compare(
    grid: pv.UnstructuredGrid,
    body: WholeBody,
    oracle: Solution,
    about: ArrayLike,
    tolerance: float = SOLVED,
    names: Sequence[str] | None = None,
) -> None:
    """Every field of the expanded body against the solved one, away from the seams and at them."""
    points, cells = fields_of(oracle, about)
    node, cell = rows(grid, body)
    # Every cell is the right way out, its mid-side nodes where the solved body has them.
    (nodes,) = grid.cells_dict.values()
    found = Mesh(grid.points.astype(float), nodes, np.zeros(len(nodes), dtype=int))
    found.check()
    # Coordinates are known to their spacing, which for a volume counts against the edge.
    spacing = float(np.spacing(np.abs(grid.points).max()))
    assert miss(volume(found), volume(body.mesh)[cell]) < max(
        SOLVED, 8 * spacing / body.mesh.edge_length()
    )
    on_seam = np.isin(node, seam_nodes(body))
    assert 0 < on_seam.sum() < len(node)
    for name in names or KINDS:
        if name in points:
            expected = points[name][node]
            size = np.abs(expected).max()
            assert miss(grid[name][~on_seam], expected[~on_seam], size) < tolerance, name
            assert miss(grid[name][on_seam], expected[on_seam], size) < tolerance, name
        else:
            assert miss(grid[name], cells[name][cell]) < tolerance, name
