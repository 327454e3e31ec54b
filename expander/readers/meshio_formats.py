"""What meshio leaves out or mixes up in single formats, found in the file itself.

Each format has a function that may refuse a file before meshio reads it, and one that adds
to what meshio read: the numbers of nodes and cells, sets, and what is to be left out.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, field
from importlib import import_module
from itertools import dropwhile
from pathlib import Path
from typing import Any
from xml.etree import ElementTree

import numpy as np
from numpy.typing import NDArray

from expander.errors import InputError, NotYetError
from expander.readers import inp_numbers, msh_numbers

Array = NDArray[np.generic]
_LATER = "The steps of a series come later; write one step per file."

# Cells that meshio's readers make and its mesh does not know: dimension, number of nodes.
_FORGOTTEN = {
    "wedge15": (3, 15), "pyramid13": (3, 13), "tetra4": (3, 4), "tetra8": (3, 8),
    "tetra14": (3, 14), "hexahedron9": (3, 9), "hexahedron24": (3, 24), "wedge12": (3, 12),
    "quad5": (2, 5), "quad6": (2, 6), "triangle7": (2, 7), "penta_prism": (3, 10),
    "hexa_prism": (3, 12),
}  # fmt: skip


@dataclass
class Extra:
    """Additions to a mesh that meshio read.

    Attributes
    ----------
    point_arrays, cell_arrays : arrays to add, by name.
    cell_sets : sets to use in place of meshio's, by name; one list of cells per block.
    left_out : names of meshio's arrays and sets that are not to be used.
    notes : what the user should know.
    """

    point_arrays: dict[str, Array] = field(default_factory=dict)
    cell_arrays: dict[str, Array] = field(default_factory=dict)
    cell_sets: dict[str, list[Array]] = field(default_factory=dict)
    left_out: list[str] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)


def refuse_early(path: Path, formats: Sequence[str]) -> None:
    """Refuse files that meshio would read wrongly without saying so."""
    if "abaqus" in formats:
        inp_numbers.refuse(path)


def read(path: Path, formats: Sequence[str]) -> Any:
    """meshio's mesh; prints and raises as meshio does."""
    import meshio
    from meshio import _common, _mesh

    for name, (dimension, nodes) in _FORGOTTEN.items():
        _mesh.topological_dimension.setdefault(name, dimension)
        _common.num_nodes_per_cell.setdefault(name, nodes)
    if "xdmf" in formats:
        steps = _temporal_steps(path)
        if steps > 1:
            raise NotYetError(f"{path} holds {steps} steps", _LATER)
        if steps == 1:
            with meshio.xdmf.TimeSeriesReader(path) as series:
                points, cells = series.read_points_cells()
                _, point_data, cell_data = series.read_data(0)
            return meshio.Mesh(points, cells, point_data=point_data, cell_data=cell_data)
    if "gmsh" in formats and len(formats) > 1:
        # meshio would try one after the other, and stop at the first that breaks
        with path.open("rb") as file:
            gmsh = b"$MeshFormat" in file.read(4096)
        return meshio.read(path, "gmsh" if gmsh else next(f for f in formats if f != "gmsh"))
    return meshio.read(path)


def _temporal_steps(path: Path) -> int:
    """Steps of the time series in the file; 0 if it holds a single grid."""
    for grid in ElementTree.parse(path).iter("Grid"):
        if grid.get("CollectionType", "").lower() == "temporal":
            return len(grid.findall("Grid"))
    return 0


def extra(path: Path, formats: Sequence[str], mesh: Any, printed: str) -> Extra:
    """What to add to a mesh that meshio has read, and what to leave out of it."""
    for name, function in (
        ("abaqus", _inp),
        ("gmsh", _msh),
        ("nastran", _bulk_data),
        ("exodus", _exodus),
        ("med", _med),
    ):
        if name in formats:
            return function(path, mesh, printed)
    return Extra()


def _inp(path: Path, mesh: Any, _: str) -> Extra:
    found = inp_numbers.numbers(path, [block.data.shape[1] for block in mesh.cells])
    added = Extra(notes=found.notes, left_out=found.unclear_sets, cell_sets=found.cell_sets)
    _add_numbers(added, mesh, found.nodes, found.cells)
    return added


def _msh(path: Path, mesh: Any, _: str) -> Extra:
    added = Extra(left_out=["gmsh:dim_tags", "gmsh:bounding_entities"])
    found = msh_numbers.numbers(path, [block.data.shape[1] for block in mesh.cells])
    if found.repeated:
        raise NotYetError(f"{path} holds '{found.repeated}' more than once, in steps", _LATER)
    _add_numbers(added, mesh, found.nodes, found.cells)
    for data, numbers, listed, place in (
        (mesh.point_data, found.nodes, found.node_data, "node"),
        (mesh.cell_data, found.cells, found.cell_data, "cell"),
    ):
        for name, keys in listed.items():
            if name not in data or (numbers is not None and np.array_equal(numbers, keys)):
                continue
            if numbers is not None:
                raise InputError(
                    f"{path}: '{name}' lists other {place}s than the mesh, or in another order",
                    f"Write a value for every {place}, in the order of the mesh.",
                )
            added.left_out.append(name)
            added.notes.append(
                f"The {place} array '{name}' was left out: which value belongs to which "
                f"{place} cannot be told in this variant of the format."
            )
    return added


def _bulk_data(path: Path, mesh: Any, _: str) -> Extra:
    added = Extra(left_out=["nastran:ref"])
    reference = mesh.point_data.get("nastran:ref")
    if reference is not None and np.any(reference):
        raise InputError(
            f"{path}: points are given in coordinate system {np.max(reference)}",
            "Give all points in the basic coordinate system.",
        )
    if "nastran:ref" in mesh.cell_data:
        added.cell_arrays["property"] = np.concatenate(mesh.cell_data["nastran:ref"])
    from meshio.nastran import _nastran

    known = _nastran.nastran_to_meshio_type
    skipped: dict[str, int] = {}
    with path.open(errors="replace") as file:
        for line in dropwhile(lambda line: not line.strip().startswith("BEGIN BULK"), file):
            card = re.match(r"(C[A-Z0-9]+|INCLUDE)(\*?)", line, re.IGNORECASE)
            if not card or card[0] in known or card[0].upper().startswith("CORD"):
                continue
            if card[1].upper() in (*known, "INCLUDE"):
                raise InputError(
                    f"{path}: meshio passes over '{card[0]}' cards written like this",
                    "Write all cells in this file, in capitals, in the narrow or free layout.",
                )
            skipped[card[1]] = skipped.get(card[1], 0) + 1
    if skipped:
        listed = ", ".join(f"{name} ({count})" for name, count in sorted(skipped.items()))
        added.notes.append(f"Cards that are no cells of the mesh were left out: {listed}.")
    cells = np.concatenate(mesh.cells_id) if mesh.cells_id else None
    _add_numbers(added, mesh, mesh.points_id, cells)
    return added


def _exodus(path: Path, mesh: Any, printed: str) -> Extra:
    if "time data" in " ".join(printed.split()):
        raise NotYetError(f"{path} holds several steps", _LATER)
    added = Extra()
    with import_module("netCDF4").Dataset(path) as file:
        found = [file.variables.get(name) for name in ("node_num_map", "elem_num_map")]
        nodes, cells = (None if v is None else np.ma.getdata(v[:]) for v in found)
    _add_numbers(added, mesh, nodes, cells)
    return added


def _med(path: Path, mesh: Any, _: str) -> Extra:
    for name in (*mesh.point_data, *mesh.cell_data):
        if re.search(r"\[\d+\] - ", name):
            raise NotYetError(f"{path} holds several steps of '{name.split('[')[0]}'", _LATER)
    return Extra()


def _add_numbers(added: Extra, mesh: Any, nodes: Array | None, cells: Array | None) -> None:
    """Node and cell numbers as arrays, where they are there for all."""
    if nodes is not None and len(nodes) == len(mesh.points):
        added.point_arrays["node_number"] = np.asarray(nodes, np.int64)
    if cells is not None and len(cells) == sum(len(block) for block in mesh.cells):
        added.cell_arrays["element_number"] = np.asarray(cells, np.int64)
