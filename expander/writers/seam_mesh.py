"""The seams as a mesh with the jumps of every field on it, a .vtu file."""

from __future__ import annotations

import re
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any
from xml.sax.saxutils import quoteattr

import numpy as np
from numpy.typing import NDArray

from expander.checking.along import comparable, field_jump, row_facets, scale_of_jump
from expander.checking.continuity import Continuity
from expander.checking.facets import Facets
from expander.checking.jumps import Jump
from expander.errors import InputError
from expander.writers.newfiles import NewFiles
from expander.writers.seam_tables import known_difference, write_all
from expander.writers.vtu import FieldData

_VERTEX = 1
_MARK = "array-%d-of-seams"  # no base64 looks like it
Named = tuple[str, NDArray[np.generic], tuple[str, ...]]


def write_seam_mesh(
    files: NewFiles,
    path: Path,
    continuity: Continuity,
    fields: Sequence[str] | None = None,
    program: str = "",
) -> None:
    """The faces of all seams, with the jumps at their nodes; rows without a face are vertices.

    A point stands for a row of a seam: a node on two seams is written for each of them. Point
    arrays: ``sector_point`` (node number), ``copy`` (placement of the other side), ``distance`` to
    what lies opposite, ``normal`` out of the sector, and for each field ``jump_FIELD`` (own minus
    other, global directions; complex as ``_real`` and ``_imag``), ``jump_FIELD_length`` and
    ``jump_FIELD_relative`` (part of the field's largest value); with several cases each ends in
    ``[CASE]``. Cell array: ``seam``, the number of its name in the field data ``seams``. A jump
    from or to a value that is not finite is NaN.

    Parameters
    ----------
    fields : names; all nodal fields that can be compared if None.
    program : name and version, for the field data.

    Raises
    ------
    InputError
        For an unknown field, names that would make two arrays one, or a file that cannot be
        written.
    """
    cells = [
        (number, facets, start)
        for number, (start, parts) in enumerate(_cells(continuity))
        for facets in parts
    ]
    arrays = list(_point_arrays(continuity, fields))
    _check_names([name for name, _, _ in arrays])
    sector = continuity.sector
    words: FieldData = {
        "seams": [s.name for s in continuity.seams],
        "kinds": [s.kind for s in continuity.seams],
        "cases": [f"{c.case.name}: {c.case.behaviour.words()}" for c in continuity.cases],
        "unit": [sector.case.model.unit or ""],
        "program": [program or "seamfold"],
    }
    nodes = _every(continuity, "nodes", np.int64)
    write_all(files, path, _vtu(sector.mesh.points[nodes], cells, arrays, words))


def _every(continuity: Continuity, key: str, kind: type) -> NDArray[Any]:
    """An array of all seams, one after the other."""
    found = [getattr(s, key) for s in continuity.seams if s.touches]
    return np.concatenate([*found, np.empty(0, dtype=kind)]).astype(kind)


def _cells(continuity: Continuity) -> Iterator[tuple[int, list[Facets]]]:
    """For each seam the number of its first point, and its faces and lone rows."""
    sector, start = continuity.sector, 0
    for seam in continuity.seams:
        faces = row_facets(seam, sector.mesh, sector.group) if seam.touches else []
        lone = np.ones(len(seam.nodes), dtype=bool)
        for f in faces:
            lone[f.nodes.ravel()] = False
        rest = np.flatnonzero(lone)
        yield start, [*faces, Facets(rest[:, None], _VERTEX, rest)]
        start += len(seam.nodes)


def _point_arrays(continuity: Continuity, fields: Sequence[str] | None) -> Iterator[Named]:
    seams = [s for s in continuity.seams if s.touches]
    yield "sector_point", _every(continuity, "nodes", np.int64), ()
    yield "copy", _every(continuity, "via", np.int64), ()
    yield "distance", _every(continuity, "distance", np.float64), ()
    normals = [s.normal if len(s.normal) else np.zeros((len(s.nodes), 3)) for s in seams]
    yield "normal", np.concatenate(normals or [np.empty((0, 3))]), ("x", "y", "z")
    names = [f.name for f in comparable(continuity)] if fields is None else fields
    for case in continuity.cases:
        tail = f" [{case.case.name}]" if len(continuity.cases) > 1 else ""
        for name in names if seams else []:
            jumps = [field_jump(continuity, s, name, case.case.name) for s in seams]
            yield from _of_field(name, tail, jumps, scale_of_jump(continuity, jumps[0]))


def _of_field(name: str, tail: str, jumps: list[Jump], scale: float) -> Iterator[Named]:
    """The arrays of a field's jumps at all seams; `scale` is its largest value."""
    every = np.concatenate([known_difference(j) for j in jumps])
    components = jumps[0].components
    columns = components if len(components) > 1 else ()
    if np.iscomplexobj(every):
        yield f"jump_{name}_real{tail}", every.real, columns
        yield f"jump_{name}_imag{tail}", every.imag, columns
    else:
        yield f"jump_{name}{tail}", every, columns
    length = np.linalg.norm(every, axis=1)
    yield f"jump_{name}_length{tail}", length, ()
    yield f"jump_{name}_relative{tail}", length / scale if scale else length, ()


def _check_names(names: list[str]) -> None:
    twice = sorted({n for n in names if names.count(n) > 1})
    if twice:
        raise InputError(
            f"Two arrays of the seams would both be called {twice[0]!r}: one field is called as "
            "another with an ending.",
            "Rename one of the two fields in the case file: [fields.NEW] with arrays = [\"OLD\"].",
        )  # fmt: skip


def _vtu(
    points: NDArray[np.floating],
    cells: list[tuple[int, Facets, int]],
    arrays: list[Named],
    words: FieldData,
) -> bytes:
    """A .vtu file by VTK's own writer; `cells` are (seam, faces by row, first point)."""
    from vtkmodules.util.numpy_support import numpy_to_vtk, numpy_to_vtkIdTypeArray
    from vtkmodules.vtkCommonCore import vtkPoints, vtkStringArray
    from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkUnstructuredGrid
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

    names: list[str] = []

    def named(name: str, values: NDArray[np.generic], components: tuple[str, ...] = ()) -> Any:
        flat = values[:, 0] if values.ndim == 2 and values.shape[1] == 1 else values
        array = numpy_to_vtk(np.ascontiguousarray(flat), deep=True)
        array.SetName(_MARK % len(names))
        names.append(name)
        for k, component in enumerate(components):
            array.SetComponentName(k, component)
        return array

    grid = vtkUnstructuredGrid()
    place = vtkPoints()
    place.SetData(numpy_to_vtk(np.ascontiguousarray(points), deep=True))
    grid.SetPoints(place)
    none = [np.empty(0, dtype=np.int64)]
    sizes = np.concatenate([np.full(len(f), f.nodes.shape[1]) for _, f, _ in cells] or none)
    flat = np.concatenate([(f.nodes + start).ravel() for _, f, start in cells] or none)
    kinds = np.concatenate([np.full(len(f), f.vtk_type) for _, f, _ in cells] or none)
    seam = np.concatenate([np.full(len(f), number) for number, f, _ in cells] or none)
    offsets = np.concatenate([[0], np.cumsum(sizes)])
    faces = vtkCellArray()
    faces.SetData(
        numpy_to_vtkIdTypeArray(offsets.astype(np.int64), deep=True),
        numpy_to_vtkIdTypeArray(flat.astype(np.int64), deep=True),
    )
    grid.SetCells(numpy_to_vtk(kinds.astype(np.uint8), deep=True), faces)
    grid.GetCellData().AddArray(named("seam", seam.astype(np.int32)))
    for name, values, components in arrays:
        grid.GetPointData().AddArray(named(name, values, components))
    for name, texts in words.items():
        listed = vtkStringArray()
        listed.SetName(name)
        for text in texts:
            listed.InsertNextValue(_text(str(text)))
        grid.GetFieldData().AddArray(listed)
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetInputData(grid)
    writer.WriteToOutputStringOn()  # base64 throughout: the string holds no raw bytes
    if not writer.Write():
        raise InputError("The mesh of the seams could not be written.", "Free some memory.")
    return _renamed(str(writer.GetOutputString()), names).encode()


def _renamed(text: str, names: list[str]) -> str:
    """VTK's writer puts names into the file as they are, whatever they do to XML; here they are
    quoted in place of the marks it was given."""

    def name(found: re.Match[str]) -> str:
        return f"Name={_quoted(_text(names[int(found[1])]))}"

    return re.sub('Name="' + _MARK.replace("%d", "([0-9]+)") + '"', name, text)


def _text(text: str) -> str:
    """UTF-8; a name that is not Unicode keeps a question mark for what cannot be said."""
    return text.encode("utf-8", "replace").decode()


def _quoted(text: str) -> str:
    return quoteattr(text, {"\n": "&#10;", "\t": "&#9;", "\r": "&#13;"})
