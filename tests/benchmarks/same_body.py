"""Do two files hold the same whole body, whatever the order of its nodes and cells?

The number of points and cells must agree (and be those expected).  A random subset of points
is matched by coordinates and a random subset of cells by centres; then coordinates, point values
and corners are compared, and the cells of both files must have positive volume.  Sums over all
points guard against differences outside of the subset::

    python same_body.py A.vtu B.vtu [--points N] [--cells M]

Prints the largest relative differences as JSON; exit status 1 if the bodies differ.
"""

from __future__ import annotations

import argparse
import json
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import cKDTree
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

Floats = NDArray[np.float64]

FIELDS = ("displacement", "stress", "temperature")
LIMIT = 1e-10  # largest relative difference that round-off explains


class DifferentBodiesError(Exception):
    """The files do not hold the same body."""


@dataclass(frozen=True)
class Body:
    """A mesh of hexahedra and its point arrays."""

    points: Floats
    cells: NDArray[np.int64]
    fields: dict[str, Floats]

    @classmethod
    def read(cls, path: Path) -> Body:
        """Read a .vtu file with VTK."""
        reader = vtkXMLUnstructuredGridReader()
        reader.SetFileName(str(path))
        reader.Update()
        grid = reader.GetOutput()
        if grid.GetPoints() is None or grid.GetNumberOfCells() == 0:
            raise DifferentBodiesError(f"{path.name} holds no mesh")
        fields = {}
        for name in FIELDS:
            array = grid.GetPointData().GetArray(name)
            if array is None:
                raise DifferentBodiesError(f"{path.name} has no point array {name}")
            fields[name] = vtk_to_numpy(array)
        nodes = vtk_to_numpy(grid.GetCells().GetConnectivityArray())
        if len(nodes) != 8 * grid.GetNumberOfCells():
            raise DifferentBodiesError(f"{path.name} does not hold hexahedra only")
        return cls(vtk_to_numpy(grid.GetPoints().GetData()), nodes.reshape(-1, 8), fields)

    def centres(self) -> Floats:
        """Centres of all cells, without an array of all corners."""
        total = np.zeros((len(self.cells), 3))
        for corner in range(8):
            total += self.points[self.cells[:, corner]]
        return total / 8.0


def volumes(corners: Floats) -> Floats:
    """Signed volumes at the centre of hexahedra given as (n, 8, 3) corners."""
    faces = ((1, 2, 5, 6), (0, 3, 4, 7)), ((2, 3, 6, 7), (0, 1, 4, 5)), ((4, 5, 6, 7), (0, 1, 2, 3))
    edges = [corners[:, high].mean(axis=1) - corners[:, low].mean(axis=1) for high, low in faces]
    return np.linalg.det(np.stack(edges, axis=1))


def compare(a: Body, b: Body, subset: int = 2000, seed: int = 1) -> dict[str, float]:
    """Largest relative differences by what was compared.

    Lengths are relative to the body's size, values to the array's largest one.
    """
    if len(a.points) != len(b.points) or len(a.cells) != len(b.cells):
        raise DifferentBodiesError(
            f"{len(a.points)} points and {len(a.cells)} cells against "
            f"{len(b.points)} points and {len(b.cells)} cells"
        )
    rng = np.random.default_rng(seed)
    size = float(np.ptp(a.points, axis=0).max())
    differences = {}

    chosen = rng.choice(len(a.points), min(subset, len(a.points)), replace=False)
    distances, partners = cKDTree(b.points).query(a.points[chosen])
    if len(np.unique(partners)) != len(partners):
        raise DifferentBodiesError("two points of one file have the same partner in the other")
    differences["points"] = float(distances.max()) / size
    for name, values in a.fields.items():
        others = b.fields[name]
        if values.shape != others.shape:
            raise DifferentBodiesError(f"{name}: {values.shape} against {others.shape}")
        largest = float(np.abs(values).max())
        differences[name] = float(np.abs(values[chosen] - others[partners]).max()) / largest
        sums = np.abs(values.mean(axis=0) - others.mean(axis=0))
        differences[f"mean {name}"] = float(sums.max()) / largest

    chosen = rng.choice(len(a.cells), min(subset, len(a.cells)), replace=False)
    centres = a.points[a.cells[chosen]].mean(axis=1)
    distances, partners = cKDTree(b.centres()).query(centres)
    corners, others = a.points[a.cells[chosen]], b.points[b.cells[partners]]
    if min(volumes(corners).min(), volumes(others).min()) <= 0.0:
        raise DifferentBodiesError("a cell is inside out")
    gaps = np.linalg.norm(corners[:, :, None] - others[:, None, :], axis=3)
    differences["cells"] = float(max(distances.max(), gaps.min(axis=2).max())) / size
    return differences


def main() -> int:
    """Compare, print, and say by the exit status whether the bodies are the same."""
    parser = argparse.ArgumentParser(description="Do two files hold the same whole body?")
    parser.add_argument("a", type=Path)
    parser.add_argument("b", type=Path)
    parser.add_argument("--points", type=int, help="expected number of points")
    parser.add_argument("--cells", type=int, help="expected number of cells")
    parser.add_argument("--subset", type=int, default=2000, help="points and cells to compare")
    options = parser.parse_args()
    try:
        a, b = Body.read(options.a), Body.read(options.b)
        differences = compare(a, b, options.subset)
        found = {"points": len(a.points), "cells": len(a.cells)}
        for what, count in found.items():
            expected = getattr(options, what)
            if expected not in (None, count):
                raise DifferentBodiesError(f"{count} {what} where {expected} were expected")
        for what, difference in differences.items():
            if not difference <= LIMIT:  # also refuses a difference that is not a number
                raise DifferentBodiesError(f"{what}: relative difference {difference:.1e}")
    except DifferentBodiesError as problem:
        print(problem, file=sys.stderr)
        return 1
    print(json.dumps({"counts": found, "differences": differences}))
    return 0


if __name__ == "__main__":
    sys.exit(main())
