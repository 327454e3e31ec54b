"""Benchmark inputs: a cyclic sector, a half block, and one-cell models for start-up times.

Every field closes across its seams to round-off, because it is sampled from an expression that
has the symmetry of the whole body.  Each model is one raw appended VTU file in double precision
with the point arrays ``displacement`` (3), ``stress`` (6, order xx yy zz xy yz zx) and
``temperature`` (1), and a case file beside it.

Run as a script to write all models into a folder and print what they are as JSON::

    python models.py FOLDER [--quick]
"""

from __future__ import annotations

import argparse
import json
from dataclasses import asdict, dataclass, replace
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util.numpy_support import numpy_to_vtk
from vtkmodules.vtkCommonCore import vtkPoints
from vtkmodules.vtkCommonDataModel import VTK_HEXAHEDRON, vtkCellArray, vtkUnstructuredGrid
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

Floats = NDArray[np.float64]

RING_CELLS = (40, 26, 40)  # radius, angle, height: 41,600 hexahedra, 4.0 million in 96 sectors
HALF_CELLS = (100, 100, 100)  # one million hexahedra
QUICK_RING_CELLS = (6, 4, 6)
QUICK_HALF_CELLS = (12, 12, 12)
ONE_CELL = (1, 1, 1)


@dataclass(frozen=True)
class SectorModel:
    """A modelled part: hexahedra and the three point arrays.

    Attributes
    ----------
    points : (n, 3) coordinates.
    cells : (m, 8) node numbers of hexahedra in VTK's order.
    fields : point arrays by name.
    """

    points: Floats
    cells: NDArray[np.int64]
    fields: dict[str, Floats]


@dataclass(frozen=True)
class BenchmarkCase:
    """The files of one benchmark model, and what the whole body made from it must hold.

    Attributes
    ----------
    model : the sector's VTU file.
    case : the case file beside it.
    full : where the case file puts the whole body.
    points, cells : of the whole body, nodes on seams counted once.
    sectors : of the ring; 0 for a half model.
    """

    model: Path
    case: Path
    full: Path
    points: int
    cells: int
    sectors: int = 0


def block_cells(counts: tuple[int, int, int]) -> NDArray[np.int64]:
    """Node numbers of the hexahedra of a structured block whose last index runs fastest."""
    numbers = np.arange(np.prod([n + 1 for n in counts])).reshape([n + 1 for n in counts])
    low, high = slice(None, -1), slice(1, None)
    corners = [
        (low, low, low), (high, low, low), (high, high, low), (low, high, low),
        (low, low, high), (high, low, high), (high, high, high), (low, high, high),
    ]  # fmt: skip
    return np.stack([numbers[corner].ravel() for corner in corners], axis=1)


def ring_sector(sectors: int, counts: tuple[int, int, int] = RING_CELLS) -> SectorModel:
    """Sector of ``360 / sectors`` degrees about z, between radii 1 and 2, of height 1."""
    steps = np.arange(counts[1] + 1)
    theta_line = 2.0 * np.pi / sectors * steps / counts[1]
    phase_line = 2.0 * np.pi * (steps % counts[1]) / counts[1]  # the same number on both faces
    axes = np.linspace(1.0, 2.0, counts[0] + 1), steps, np.linspace(0.0, 1.0, counts[2] + 1)
    r, step, z = (grid.ravel() for grid in np.meshgrid(*axes, indexing="ij"))
    theta = theta_line[step]
    points = np.stack([r * np.cos(theta), r * np.sin(theta), z], axis=1)
    return SectorModel(points, block_cells(counts), ring_fields(r, theta, phase_line[step], z))


def ring_fields(r: Floats, theta: Floats, phase: Floats, z: Floats) -> dict[str, Floats]:
    """The ring's fields in Cartesian components; ``phase`` is ``sectors * theta``.

    The cylindrical components depend on (r, phase, z) only, so they have the sector's period.
    """
    c, s = np.cos(theta), np.sin(theta)
    wave, slope = np.cos(phase), np.sin(phase)
    u_r = 1e-3 * (r + 0.3 * wave * (1.0 + z))
    u_t = 1e-3 * (0.4 * r + 0.2 * slope * z)
    u_z = 1e-3 * (z * r + 0.1 * wave)
    s_rr = 100.0 / r**2 + 20.0 * wave * z
    s_tt = 150.0 / r + 30.0 * slope
    s_zz = 40.0 * (1.0 + z**2) - 10.0 * wave * r
    s_rt = 15.0 * r * slope + 5.0
    s_tz = 12.0 * z + 8.0 * wave
    s_zr = 9.0 * z * r + 4.0 * slope
    displacement = np.stack([c * u_r - s * u_t, s * u_r + c * u_t, u_z], axis=1)
    stress = np.stack(
        [
            c * c * s_rr - 2.0 * c * s * s_rt + s * s * s_tt,
            s * s * s_rr + 2.0 * c * s * s_rt + c * c * s_tt,
            s_zz,
            c * s * (s_rr - s_tt) + (c * c - s * s) * s_rt,
            s * s_zr + c * s_tz,
            c * s_zr - s * s_tz,
        ],
        axis=1,
    )
    temperature = 20.0 + 300.0 / r + 25.0 * wave * (1.0 + z)
    return {"displacement": displacement, "stress": stress, "temperature": temperature}


def half_block(counts: tuple[int, int, int] = HALF_CELLS) -> SectorModel:
    """Half ``0 <= x <= 1`` of a block, symmetric about the cut plane x = 0."""
    axes = [np.linspace(0.0, 1.0, n + 1) for n in counts]
    x, y, z = (grid.ravel() for grid in np.meshgrid(*axes, indexing="ij"))
    return SectorModel(np.stack([x, y, z], axis=1), block_cells(counts), block_fields(x, y, z))


def block_fields(x: Floats, y: Floats, z: Floats) -> dict[str, Floats]:
    """The block's fields: u_x and the stresses xy and zx are odd in x, all others are even."""
    even, odd = np.cos(2.0 * x), np.sin(2.0 * x)
    displacement = 1e-3 * np.stack([odd * (1.0 + y), even * z - 0.3 * y, even * (y + z)], axis=1)
    stress = np.stack(
        [
            100.0 * even + 10.0 * y,
            80.0 * even * z - 20.0,
            60.0 * y * z + 5.0 * even,
            30.0 * odd * (1.0 + z),
            25.0 * even * (y - z),
            15.0 * odd * (2.0 - y),
        ],
        axis=1,
    )
    temperature = 20.0 + 100.0 * even * (1.0 + y * z)
    return {"displacement": displacement, "stress": stress, "temperature": temperature}


def write_vtu(model: SectorModel, path: Path) -> None:
    """Write the model as a raw appended VTU file without compression."""
    points = vtkPoints()
    points.SetData(numpy_to_vtk(model.points))
    cells = vtkCellArray()
    offsets = np.arange(0, model.cells.size + 1, 8)
    connectivity = np.ascontiguousarray(model.cells).ravel()
    cells.SetData(numpy_to_vtk(offsets), numpy_to_vtk(connectivity))
    grid = vtkUnstructuredGrid()
    grid.SetPoints(points)
    grid.SetCells(VTK_HEXAHEDRON, cells)
    for name, values in model.fields.items():
        array = numpy_to_vtk(np.ascontiguousarray(values))
        array.SetName(name)
        grid.GetPointData().AddArray(array)

    writer = vtkXMLUnstructuredGridWriter()
    writer.SetInputData(grid)
    writer.SetFileName(str(path))
    writer.SetDataModeToAppended()
    writer.EncodeAppendedDataOff()
    writer.SetCompressorTypeToNone()
    writer.SetHeaderTypeToUInt64()
    if writer.Write() != 1:
        raise OSError(f"could not write {path}")


FIELD_TABLES = """\
[fields.displacement]
kind = "polar vector"

[fields.stress]
kind = "symmetric tensor"
components = "xx yy zz xy yz zx"
seam = "recovered"

[fields.temperature]
kind = "scalar"
"""


def case_text(model_file: str, load_table: str, output_file: str) -> str:
    """The case file of a benchmark model."""
    return (
        f'[model]\nfile = "{model_file}"\n\n{load_table}\n{FIELD_TABLES}\n'
        f'[output]\nfile = "{output_file}"\n'
    )


def write_ring(
    folder: Path, name: str, sectors: int, counts: tuple[int, int, int]
) -> BenchmarkCase:
    """Write a cyclic sector and its case file."""
    load = f'[cyclic]\nsectors = {sectors}\naxis = "z"\nnodal_diameters = 0\n'
    radial, around, high = counts
    points = (radial + 1) * (high + 1) * around * sectors
    cells = radial * around * high * sectors
    model = ring_sector(sectors, counts)
    return replace(_write(folder, name, model, load, points, cells), sectors=sectors)


def write_half(folder: Path, name: str, counts: tuple[int, int, int]) -> BenchmarkCase:
    """Write a half block and its case file."""
    load = '[[mirror]]\nnormal = "x"\npoint = [0.0, 0.0, 0.0]\nload = "symmetric"\n'
    along, *across = counts
    points = (2 * along + 1) * (across[0] + 1) * (across[1] + 1)
    cells = 2 * along * across[0] * across[1]
    return _write(folder, name, half_block(counts), load, points, cells)


def _write(
    folder: Path, name: str, model: SectorModel, load: str, points: int, cells: int
) -> BenchmarkCase:
    model_file = folder / f"{name}.vtu"
    case_file = folder / f"{name}.toml"
    full_file = folder / f"{name}_full.vtu"
    write_vtu(model, model_file)
    case_file.write_text(case_text(model_file.name, load, full_file.name), encoding="utf-8")
    return BenchmarkCase(model_file, case_file, full_file, points, cells)


def write_all(folder: Path, quick: bool = False) -> dict[str, BenchmarkCase]:
    """Write every benchmark model; ``quick`` takes small ones of the same make."""
    ring_cells = QUICK_RING_CELLS if quick else RING_CELLS
    half_cells = QUICK_HALF_CELLS if quick else HALF_CELLS
    cases = {"half": write_half(folder, "half", half_cells)}
    cases["half_cell"] = write_half(folder, "half_cell", ONE_CELL)
    cases["ring_4_cell"] = write_ring(folder, "ring_4_cell", 4, ONE_CELL)
    for sectors in (24, 96):
        ring = f"ring_{sectors}"
        cases[ring] = write_ring(folder, ring, sectors, ring_cells)
        cases[f"{ring}_cell"] = write_ring(folder, f"{ring}_cell", sectors, ONE_CELL)
    return cases


def main() -> None:
    """Write all models into a folder."""
    parser = argparse.ArgumentParser(description="Write the benchmark models and case files.")
    parser.add_argument("folder", type=Path)
    parser.add_argument("--quick", action="store_true", help="small models of the same make")
    options = parser.parse_args()
    options.folder.mkdir(parents=True, exist_ok=True)
    cases = write_all(options.folder, options.quick)
    print(json.dumps({name: asdict(case) for name, case in cases.items()}, default=str, indent=1))


if __name__ == "__main__":
    main()
