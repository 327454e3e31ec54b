"""What an XML file of VTK promises, compared with what it holds, before VTK reads it.

VTK believes the counts in such a file: a wrong one makes it allocate without limit, end
the program, or quietly return part of an array. Only the XML header and the few bytes
that precede each array are read here, except that text (ascii) numbers have to be counted.
"""

from __future__ import annotations

import math
from pathlib import Path
from typing import Any, BinaryIO
from xml.parsers import expat

from expander.errors import InputError, NotYetError
from expander.readers.assemble import AGAIN
from expander.readers.vtk_declared import Bad, Declared
from expander.readers.vtk_xml_store import BYTES, Array, Header, Store, whole_number

_OTHER_TYPES = ("String", "Bit")
# Number of tuples of each section's arrays: the attributes of the piece that add up to it.
_POLY = ("NumberOfVerts", "NumberOfLines", "NumberOfPolys", "NumberOfStrips")
_TUPLES: dict[str, dict[str, tuple[str, ...]]] = {
    "UnstructuredGrid": {
        "PointData": ("NumberOfPoints",),
        "Points": ("NumberOfPoints",),
        "CellData": ("NumberOfCells",),
        "Cells": ("NumberOfCells",),
    },
    "PolyData": {
        "PointData": ("NumberOfPoints",),
        "Points": ("NumberOfPoints",),
        "CellData": _POLY,
        **{name.removeprefix("NumberOf"): (name,) for name in _POLY},
    },
}
_PLACES = {"PointData": "point", "CellData": "cell"}
_TOPOLOGY = ("Cells", "Verts", "Lines", "Polys", "Strips")
# arrays that must be there if the section has anything
_NEEDED: dict[str, tuple[str, ...]] = {"Cells": ("connectivity", "offsets", "types")}
_NEEDED |= dict.fromkeys(_TOPOLOGY[1:], ("connectivity", "offsets"))
_CHUNK = 1 << 20
_MOST_COMPONENTS = 100_000


class _AppendedReached(Exception):
    """Not an error: the XML part has been read."""


def check(path: Path, kind: str) -> Declared:
    """Declarations of the file, after all that can be checked about them has been.

    Parameters
    ----------
    path : the file.
    kind : the data set it must hold, "UnstructuredGrid" or "PolyData".

    Raises
    ------
    InputError
        If the file is not such a file, or promises what it does not hold.
    """
    with path.open("rb") as file:
        header = _parse(path, file, kind)
        try:
            _check_pieces(header)
            store = Store(file, header)
            for array in header.arrays:
                _check_array(store, header, array)
            return _declared(header)
        except Bad as bad:
            raise InputError(f"{path}: {bad}", AGAIN) from None
        except NotYetError as later:
            raise NotYetError(f"{path}: {later.found}", later.remedy) from None


def _parse(path: Path, file: BinaryIO, kind: str) -> Header:
    """Read the XML part; stops where appended binary data begin."""
    header = Header(kind)
    parser = expat.ParserCreate()
    elements: list[str] = []
    reading: list[Array] = []  # the array whose text is being passed, if any

    def end_of_text() -> None:
        while reading:
            reading.pop().stop = parser.CurrentByteIndex

    def begin(name: str, attributes: dict[str, str]) -> None:
        end_of_text()
        elements.append(name)
        if len(elements) == 1:
            if name != "VTKFile" or attributes.get("type") != kind:
                raise InputError(
                    f"{path}: the file holds {attributes.get('type', name)}, not {kind}",
                    "The extension .vtu is for UnstructuredGrid, .vtp for PolyData.",
                )
            header.root = attributes
        elif name == "AppendedData":
            header.appended_encoding = attributes.get("encoding", "base64")
            header.appended_start = parser.CurrentByteIndex
            raise _AppendedReached
        elif name == "Piece":
            header.pieces.append(attributes)
        elif len(elements) == 2:
            header.dataset = attributes
        elif name in ("DataArray", "Array"):
            piece = header.pieces[-1] if "Piece" in elements else {}
            array = Array(elements[-2], piece, attributes, parser.CurrentByteIndex)
            header.arrays.append(array)
            reading.append(array)

    def end(name: str) -> None:
        end_of_text()
        elements.pop()

    def refuse(*_: Any) -> None:
        raise InputError(f"{path}: the file defines XML entities", "Write it without a DOCTYPE.")

    parser.StartElementHandler, parser.EndElementHandler = begin, end
    parser.StartDoctypeDeclHandler = refuse
    try:
        while chunk := file.read(_CHUNK):
            parser.Parse(chunk, False)
        parser.Parse(b"", True)
    except _AppendedReached:
        pass
    except (expat.ExpatError, ValueError, LookupError) as problem:
        raise InputError(
            f"{path} is no complete XML file of VTK: {problem}",
            "Check that the extension fits the contents; if it does, write the file again.",
        ) from None
    return header


def _check_pieces(header: Header) -> None:
    if len(header.dataset.get("TimeValues", "").split()) > 1:
        raise NotYetError(
            f"the file holds {len(header.dataset['TimeValues'].split())} steps",
            "The steps of a series come later; write one step per file.",
        )
    declared: dict[str, set[tuple[str, str, str]]] = {}
    for piece in header.pieces:
        for section, keys in _TUPLES[header.kind].items():
            if section in _PLACES or sum(whole_number(piece, key, 0) for key in keys) == 0:
                continue
            there = [a.name for a in header.arrays if a.piece is piece and a.section == section]
            missing = [name for name in _NEEDED.get(section, ()) if name not in there]
            if missing or not there:
                raise Bad(f"{section} has no array {''.join(missing[:1])}".rstrip())
        for section in _PLACES:
            if sum(whole_number(piece, key, 0) for key in _TUPLES[header.kind][section]) == 0:
                continue
            arrays = {
                (a.name, a.type, a.attributes.get("NumberOfComponents", "1"))
                for a in header.arrays
                if a.piece is piece and a.section == section
            }
            differ = declared.setdefault(section, arrays) ^ arrays
            if differ:
                raise Bad(f"array '{min(differ)[0]}' is not in every piece in the same form")


def _declared(header: Header) -> Declared:
    """The names of the first piece with arrays, which every piece shares."""
    declared = Declared(header.kind)
    for section, place in _PLACES.items():
        arrays = [a for a in header.arrays if a.section == section]
        for array in arrays:
            if array.piece is arrays[0].piece:
                if not array.name:
                    raise Bad(f"a {place} array has no name")
                declared.declare(place, array.name, array.type == "String")
    return declared


def _check_array(store: Store, header: Header, array: Array) -> None:
    if array.format not in ("ascii", "binary", "appended"):
        raise Bad(f"{array} has format '{array.format}'")
    if ("offset" in array.attributes) != (array.format == "appended"):
        raise Bad(f"{array} is not clear about where its values are")
    integer = array.type in BYTES and not array.type.startswith("Float")
    if not integer and (
        (array.type not in BYTES and array.type not in _OTHER_TYPES)
        or array.section in _TOPOLOGY
        or (array.section == "Points" and array.type in _OTHER_TYPES)
    ):
        raise Bad(f"{array} has number type '{array.type}'")
    if array.section in _TOPOLOGY and array.name == "connectivity":
        return  # with its offsets
    values = _tuples(header, array) * _components(array)
    if array.section in _TOPOLOGY and array.name not in ("offsets", "types"):
        if store.count(array):
            raise NotYetError("the mesh has polyhedra", "Cells given by faces come later.")
    elif array.type == "String":
        if array.section == "FieldData" and store.whole(array).count(0) != values:
            raise Bad(f"{array} does not hold {values} texts")
    else:
        bits = array.type == "Bit" and array.format != "ascii"
        found, expected = store.count(array), math.ceil(values / 8) if bits else values
        if found != expected:
            raise Bad(f"{array} holds {found} values, not {expected}")
        if array.section in _TOPOLOGY and array.name == "offsets":
            _check_connectivity(store, header, array, values)


def _tuples(header: Header, array: Array) -> int:
    if array.section == "FieldData":
        return whole_number(array.attributes, "NumberOfTuples")
    if array.section not in _TUPLES[header.kind]:
        raise Bad(f"{array} has no place in {header.kind}")
    # a grid must say how many, polygonal data need not name the kinds that it lacks
    default = None if header.kind == "UnstructuredGrid" else 0
    keys = _TUPLES[header.kind][array.section]
    return sum(whole_number(array.piece, key, default) for key in keys)


def _components(array: Array) -> int:
    points = array.section == "Points"
    components = whole_number(array.attributes, "NumberOfComponents", 3 if points else 1)
    if components > _MOST_COMPONENTS or (points and components != 3):
        raise Bad(f"{array} has {components} components")
    return max(components, 1)


def _check_connectivity(store: Store, header: Header, offsets: Array, cells: int) -> None:
    """The last offset is the number of node numbers: VTK makes room for that many."""
    promised = store.last(offsets) if cells else 0
    for array in header.arrays:
        same = array.piece is offsets.piece and array.section == offsets.section
        if same and array.name == "connectivity" and store.count(array) != promised:
            raise Bad(
                f"the cells have {store.count(array)} node numbers, "
                f"but their offsets end at {promised}"
            )
