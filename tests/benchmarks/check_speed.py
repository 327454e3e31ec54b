"""Speed and memory of the seam search and continuity of ``seamfold check`` beyond reading the file.

A cyclic sector and a half model of up to a million nodes, a tenth of them on the boundary and
40,000 on each seam face, with five fields: displacement, rotation and temperature at nodes, stress
recovered at nodes, and stress in cells. Each run is a fresh process, all sizes interleaved; medians
are shown. Time counts from the end of reading to the end of `continuity`; memory is the process's
peak less what it held when the file was read, as a multiple of the file's size. CPU seconds are
shown too: on a busy machine they scatter less.

Usage::

    python check_speed.py                # sizes over a factor of 64, some minutes, 1 GB of disk
    python check_speed.py --quick        # small models, to see that everything runs
    python check_speed.py --profile      # where the time of the largest models goes
"""

from __future__ import annotations

import argparse
import cProfile
import json
import os
import pstats
import resource
import shutil
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from statistics import median

import numpy as np
from models import Floats, SectorModel, block_fields, half_block, ring_fields, ring_sector
from numpy.typing import NDArray
from speed_table import judged
from vtk_ways import write_grid
from vtkmodules.util.numpy_support import numpy_to_vtk
from vtkmodules.vtkCommonCore import vtkPoints
from vtkmodules.vtkCommonDataModel import VTK_HEXAHEDRON, vtkCellArray, vtkUnstructuredGrid
from whole_process import CommandFailedError

HERE = Path(__file__).resolve().parent
SECTORS = 24
SECONDS, MEMORY = 2.0, 3.0  # goals for the largest models: beyond reading; times the file's size
# Cells along the seam, across it, along it: a thin slab, so that a tenth of the nodes are outside.
SIZES = ((49, 5, 49), (78, 9, 78), (125, 15, 125), (199, 24, 199))
QUICK_SIZES = ((12, 3, 12), (24, 4, 24))

Made = tuple[Path, int, int]  # case file, nodes, nodes on the boundary


# --- models ---------------------------------------------------------------------------------------


def ring(counts: tuple[int, int, int]) -> tuple[SectorModel, Floats]:
    """A cyclic sector with the fields of `models`, a rotation, and stresses of cells (m, 6)."""
    model = ring_sector(SECTORS, counts)
    steps = np.arange(counts[1] + 1)
    r, step, z = mesh_of(np.linspace(1.0, 2.0, counts[0] + 1), steps,
                         np.linspace(0.0, 1.0, counts[2] + 1))  # fmt: skip
    pitch = 2.0 * np.pi / counts[1]
    theta, phase = step * pitch / SECTORS, (step % counts[1]) * pitch
    c, s, wave = np.cos(theta), np.sin(theta), np.cos(phase)
    w_r, w_t = 1e-3 * (wave * z + 0.2), 1e-3 * (np.sin(phase) + r)
    model.fields["rotation"] = np.stack([c * w_r - s * w_t, s * w_r + c * w_t, 2e-3 * r * wave], 1)
    model.fields["temperature"] += 25.0 * np.sin(phase) * z
    r, step, z = (middles(a.reshape([n + 1 for n in counts])) for a in (r, step, z))
    return model, ring_fields(r, step * pitch / SECTORS, step * pitch, z)["stress"]


def half(counts: tuple[int, int, int]) -> tuple[SectorModel, Floats]:
    """A half block with the cut plane x = 0; of the rotation only x is even in x."""
    model = half_block((counts[1], counts[0], counts[2]))
    x, y, z = model.points.T
    odd, even = np.sin(2.0 * x), np.cos(2.0 * x)
    model.fields["rotation"] = 1e-3 * np.stack([even * y, odd * (1.0 + z), odd * (y - 2.0)], 1)
    shape = [counts[1] + 1, counts[0] + 1, counts[2] + 1]
    return model, block_fields(*(middles(a.reshape(shape)) for a in (x, y, z)))["stress"]


def mesh_of(*lines: NDArray[np.generic]) -> list[NDArray[np.generic]]:
    return [grid.ravel() for grid in np.meshgrid(*lines, indexing="ij")]


def middles(values: Floats) -> Floats:
    """Mean of the corners of each cell of a structured block."""
    for axis in range(3):
        moved = np.moveaxis(values.astype(float), axis, 0)
        values = np.moveaxis((moved[1:] + moved[:-1]) / 2.0, 0, axis)
    return values.ravel()


LOADS = {
    "ring": f'[cyclic]\nsectors = {SECTORS}\naxis = "z"\n',
    "half": '[[mirror]]\nname = "mid"\nnormal = "x"\n',
}
FIELDS = """
[fields.displacement]
kind = "polar vector"

[fields.rotation]
kind = "axial vector"

[fields.temperature]
kind = "scalar"

[fields.stress]
kind = "symmetric tensor"
components = "xx yy zz xy yz zx"
seam = "recovered"

[fields.cell_stress]
kind = "symmetric tensor"
components = "xx yy zz xy yz zx"
"""


def write_model(folder: Path, name: str, counts: tuple[int, int, int]) -> Made:
    """Write the model and its case file."""
    model, cell_stress = (ring if name == "ring" else half)(counts)
    stem = f"{name}_{len(model.points)}"
    grid = vtkUnstructuredGrid()
    points = vtkPoints()
    points.SetData(numpy_to_vtk(model.points))
    grid.SetPoints(points)
    cells = vtkCellArray()
    flat = np.ascontiguousarray(model.cells).ravel()
    cells.SetData(numpy_to_vtk(np.arange(0, flat.size + 1, 8)), numpy_to_vtk(flat))
    grid.SetCells(VTK_HEXAHEDRON, cells)
    kept = []
    for data, arrays in ((grid.GetPointData(), model.fields),
                         (grid.GetCellData(), {"cell_stress": cell_stress})):  # fmt: skip
        for key, values in arrays.items():
            kept.append(np.ascontiguousarray(values))
            array = numpy_to_vtk(kept[-1])
            array.SetName(key)
            data.AddArray(array)
    write_grid(grid, folder / f"{stem}.vtu")
    case = folder / f"{stem}.toml"
    case.write_text(f'[model]\nfile = "{stem}.vtu"\n\n{LOADS[name]}{FIELDS}', encoding="utf-8")
    inner = int(np.prod([n - 1 for n in counts]))
    return case, len(model.points), len(model.points) - inner


# --- one run, in a process of its own -------------------------------------------------------------


def run_once(case_file: Path, profile: bool) -> dict[str, float]:
    """Read, find seams, compare; seconds, and bytes of memory."""
    import expander.sector
    from expander.casefile import read_case
    from expander.checking.continuity import continuity
    from expander.checking.verdicts import CLOSED

    marks = {}
    read_models = expander.sector.read_models

    def timed(*arguments: object) -> object:
        start, cpu = time.perf_counter(), time.process_time()
        models = read_models(*arguments)
        marks["reading"] = time.perf_counter() - start
        marks["reading_cpu"] = time.process_time() - cpu
        marks["held"], marks["peak_reading"] = resident(), peak()
        return models

    expander.sector.read_models = timed
    case = read_case(case_file)
    profiler = cProfile.Profile()
    if profile:
        profiler.enable()
    start, cpu = time.perf_counter(), time.process_time()
    sector = expander.sector.read_sector(case)
    found = time.perf_counter()
    seams = continuity(sector)
    end, cpu = time.perf_counter(), time.process_time() - cpu
    profiler.disable()
    # One wave of a sector over a handful of cells: slopes are too coarse to be judged by.
    results = [v.result for v in seams.verdicts if v.measure == "value"]
    if results != [CLOSED] * 3 or len(seams.verdicts) != 8:
        raise SystemExit(f"{case_file.name}: {len(seams.verdicts)} verdicts: {results}")
    if profile:
        print(f"\n{case_file.name}", file=sys.stderr)
        table = pstats.Stats(profiler, stream=sys.stderr).strip_dirs()
        table.sort_stats("tottime").print_stats(25)
        table.sort_stats("cumulative").print_stats(45)
    return {
        **marks, "search": found - start - marks["reading"], "continuity": end - found,
        "beyond": end - start - marks["reading"], "cpu": cpu - marks["reading_cpu"],
        "peak": peak(),
    }  # fmt: skip


def peak() -> float:
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024.0


def resident() -> float:
    pages = int(Path("/proc/self/statm").read_text().split()[1])
    return float(pages * resource.getpagesize())


# --- all runs -------------------------------------------------------------------------------------


def child(case: Path, *options: str) -> dict[str, float]:
    """`run_once` in a fresh process."""
    command = [sys.executable, str(Path(__file__).resolve()), "--case", str(case), *options]
    paths = [str(HERE.parents[1]), os.environ.get("PYTHONPATH", "")]
    environment = os.environ | {"PYTHONPATH": os.pathsep.join(filter(None, paths))}
    ran = subprocess.run(command, env=environment, capture_output=True, text=True)
    if ran.returncode:
        raise CommandFailedError(ran.stderr.strip())
    if "--profile" in options:
        print(ran.stderr)
    return json.loads(ran.stdout)


def built(folder: Path, name: str, counts: tuple[int, int, int]) -> Made:
    """A model written by a process of its own: the peak of a child is at least its parent's."""
    command = [sys.executable, str(Path(__file__).resolve()), "--build", str(folder), name]
    ran = subprocess.run([*command, *map(str, counts)], capture_output=True, text=True)
    if ran.returncode:
        raise CommandFailedError(ran.stderr.strip())
    case, nodes, boundary = json.loads(ran.stdout)
    return Path(case), nodes, boundary


def measure(made: list[Made], runs: int) -> list[dict[str, float]]:
    """Median of each figure for each model, all models in turn."""
    child(made[0][0])  # fills the caches
    figures: list[list[dict[str, float]]] = [[] for _ in made]
    for _ in range(runs):
        for (case, _, _), found in zip(made, figures, strict=True):
            found.append(child(case))
    return [{key: median(run[key] for run in found) for key in found[0]} for found in figures]


def print_table(name: str, made: list[Made], found: list[dict[str, float]], quick: bool) -> None:
    print(f"\n{name}")
    heads = ("nodes", "boundary", "file MB", "reading s", "search s", "continuity s", "beyond s",
             "CPU s", "x nodes", "x time", "peak MB", "beyond/file", "peak/file")  # fmt: skip
    print("".join(f"{head:>13}" for head in heads))
    before = None
    for (case, nodes, boundary), run in zip(made, found, strict=True):
        size = case.with_suffix(".vtu").stat().st_size
        more = (run["peak"] - run["held"]) / size
        grown = ("-", "-")
        if before is not None:
            grown = (f"{nodes / before[0]:.2f}", f"{run['beyond'] / before[1]:.2f}")
        parts = [f"{run[key]:.2f}" for key in ("reading", "search", "continuity", "beyond", "cpu")]
        row = (f"{nodes:,}", f"{boundary:,}", f"{size / 1e6:.1f}", *parts, *grown,
               f"{run['peak'] / 1e6:.0f}", f"{more:.2f}", f"{run['peak'] / size:.2f}")  # fmt: skip
        print("".join(f"{value:>13}" for value in row))
        before = nodes, run["beyond"]
    (_, few, _), (_, many, _) = made[0], made[-1]
    times = found[-1]["beyond"] / found[0]["beyond"]
    power = np.log(times) / np.log(many / few)
    print(f"  {many / few:.0f} times the nodes take {times:.0f} times as long: power {power:.2f}")
    beyond = found[-1]["beyond"]
    print(f"  seconds beyond reading  {beyond:6.2f} {judged(beyond, SECONDS, False, quick)}")
    print(f"  memory beyond / file    {more:6.2f} {judged(more, MEMORY, False, quick)}")


def main() -> int:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--only", choices=("ring", "half"))
    parser.add_argument("--runs", type=int, default=5, help="runs of each model; medians are shown")
    parser.add_argument("--quick", action="store_true", help="small models of the same make")
    parser.add_argument("--profile", action="store_true", help="profile the largest models instead")
    parser.add_argument("--folder", type=Path, help="work folder; default: a temporary one")
    parser.add_argument("--json", type=Path, help="write all figures to this file")
    parser.add_argument("--case", type=Path, help=argparse.SUPPRESS)
    parser.add_argument("--build", nargs=5, help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.case is not None:
        print(json.dumps(run_once(options.case, options.profile)))
        return 0
    if options.build is not None:
        folder, name, *counts = options.build
        case, *sizes = write_model(Path(folder), name, tuple(map(int, counts)))
        print(json.dumps([str(case), *sizes]))
        return 0
    if options.runs < 1:
        parser.error("--runs must be at least 1")
    work = Path(tempfile.mkdtemp(prefix="check_speed_", dir=options.folder)).resolve()
    try:
        results = run_all(work, options)
    except CommandFailedError as problem:
        print(problem, file=sys.stderr)
        return 1
    finally:
        shutil.rmtree(work, ignore_errors=True)
    if options.json is not None:
        options.json.write_text(json.dumps(results, indent=1) + "\n", encoding="utf-8")
    return 0


def run_all(folder: Path, options: argparse.Namespace) -> dict[str, object]:
    cores, load = os.cpu_count() or 1, os.getloadavg()[0]
    print(f"{cores} cores, load average {load:.1f} at the start, medians of {options.runs} runs")
    sizes = QUICK_SIZES if options.quick else SIZES
    if options.profile:
        sizes = sizes[-1:]
    names = [options.only] if options.only else ["ring", "half"]
    made = {name: [built(folder, name, counts) for counts in sizes] for name in names}
    if options.profile:
        for models in made.values():
            child(models[0][0], "--profile")
        return {}
    every = measure([m for models in made.values() for m in models], options.runs)
    results: dict[str, object] = {"cores": cores, "load": load, "runs": options.runs}
    for k, (name, models) in enumerate(made.items()):
        found = every[k * len(sizes) : (k + 1) * len(sizes)]
        print_table(name, models, found, options.quick)
        results[name] = [{"nodes": n, **run} for (_, n, _), run in zip(models, found, strict=True)]
    print(f"\nload average {os.getloadavg()[0]:.1f} at the end, this run's own included")
    return results


if __name__ == "__main__":
    sys.exit(main())
