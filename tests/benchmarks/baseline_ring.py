"""Baseline: a whole ring from one cyclic sector with pyvista and VTK alone.

Reads the sector, turns a copy of it for every sector, appends the copies with coincident points
merged, and writes a raw VTU file.  It is what an able user would write by hand, and it is
measured as a whole process::

    python baseline_ring.py SECTOR.vtu RING.vtu --sectors 96

``--turn pyvista`` turns points and vectors by ``pyvista.DataObjectFilters.transform`` and the
stress by numpy, since VTK's transform leaves 6-component tensors alone.  ``--turn numpy`` turns
everything by numpy and shares the cells between the copies, which is faster and needs less
memory, but takes more knowledge of VTK's data model.
"""

from __future__ import annotations

import numpy as np
from vtk_ways import (
    MERGES,
    common_arguments,
    coordinates,
    merged,
    point_values,
    read_grid,
    set_coordinates,
    set_point_values,
    stress_matrix,
    use_threads,
    write_grid,
)
from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid


def rotation(k: int, sectors: int) -> np.ndarray:
    """Turn about z by ``k`` of ``sectors`` sectors."""
    angle = 2.0 * np.pi * k / sectors
    c, s = np.cos(angle), np.sin(angle)
    return np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])


def copies_by_pyvista(sector: vtkUnstructuredGrid, sectors: int) -> list[vtkUnstructuredGrid]:
    """Every copy by pyvista's transform, its stress turned by numpy."""
    import pyvista  # only this way pays for the import

    grid = pyvista.wrap(sector)
    stress = np.asarray(grid.point_data["stress"])
    copies = []
    for k in range(sectors):
        Q = rotation(k, sectors)
        placement = np.eye(4)
        placement[:3, :3] = Q
        copy = grid.transform(placement, transform_all_input_vectors=True, inplace=False)
        copy.point_data["stress"] = stress @ stress_matrix(Q).T
        copies.append(copy)
    return copies


def copies_by_numpy(sector: vtkUnstructuredGrid, sectors: int) -> list[vtkUnstructuredGrid]:
    """Every copy by numpy; cells and temperature are shared with the sector."""
    points = coordinates(sector)
    displacement = point_values(sector, "displacement")
    stress = point_values(sector, "stress")
    copies = []
    for k in range(sectors):
        Q = rotation(k, sectors)
        copy = vtkUnstructuredGrid()
        copy.ShallowCopy(sector)
        set_coordinates(copy, points @ Q.T)
        set_point_values(copy, "displacement", displacement @ Q.T)
        set_point_values(copy, "stress", stress @ stress_matrix(Q).T)
        copies.append(copy)
    return copies


TURNS = {"pyvista": copies_by_pyvista, "numpy": copies_by_numpy}


def main() -> None:
    """Read, turn, merge, write."""
    parser = common_arguments("Whole ring from one sector with pyvista and VTK.")
    parser.add_argument("--sectors", type=int, required=True, help="number of sectors of the ring")
    parser.add_argument("--turn", choices=tuple(TURNS), default="pyvista")
    parser.add_argument("--merge", choices=MERGES, default="append")
    options = parser.parse_args()
    use_threads(options.threads)
    copies = TURNS[options.turn](read_grid(options.model), options.sectors)
    write_grid(merged(copies, options.merge, options.tolerance), options.output)


if __name__ == "__main__":
    main()
